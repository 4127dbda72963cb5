//! Report `twin`: where a photon's partner goes.

use crate::frame::Direction;
use crate::job::Setup;
use crate::matching::{Emission, Opinion, Twin};

use super::angles::{fixed, grid, rounded, signed};
use super::spread;
use super::table::{Cell, Column, Rows, Table, column};

/// Columns, without the two that end every table.
pub const COLUMNS: [Column; 11] = [
    column("process", "", "pump -> signal + idler, the given photon as signal"),
    column("polarization", "", "of the given photon"),
    column("h_deg", "deg", "horizontal angle of the given photon, outside"),
    column("v_deg", "deg", "vertical angle of the given photon, outside"),
    column("wavelength_nm", "nm", "of the given photon"),
    column("partner_polarization", "", "of its partner"),
    column("partner_h_deg", "deg", "horizontal angle of the partner, outside"),
    column("partner_v_deg", "deg", "vertical angle of the partner, outside"),
    column("partner_wavelength_nm", "nm", "of the partner"),
    column("mismatch_rad_per_mm", "rad/mm", "Delta_k along the face normal"),
    column("phase_matching_factor", "", "sinc^2(Delta_k L/2)"),
];

/// One row per process.
#[must_use]
pub fn table(setup: &Setup, emission: &Emission, photon: Direction, twins: &[Twin]) -> Table {
    let mut table = Table::new("twin", &COLUMNS);
    let extrapolated = [emission.photons.pump, emission.photons.signal, emission.photons.idler]
        .iter()
        .any(|w| setup.crystals[0].extrapolates(*w));
    for Twin { process, pairing, status, .. } in twins {
        let partner = pairing.as_ref().and_then(|p| p.idler_outside);
        let cells = vec![
            process.to_string().into(),
            process.signal.to_string().into(),
            Cell::degrees(photon.h_deg()),
            Cell::degrees(photon.v_deg()),
            emission.photons.signal.nm().into(),
            process.idler.to_string().into(),
            partner.map_or(Cell::Empty, |d| Cell::degrees(d.h_deg())),
            partner.map_or(Cell::Empty, |d| Cell::degrees(d.v_deg())),
            emission.photons.idler.nm().into(),
            pairing.as_ref().map(|p| p.mismatch * 1e-3).into(),
            Cell::from(pairing.as_ref().map(|p| p.phase_matching_factor(emission.length))),
        ];
        table.push(&cells, extrapolated, *status);
    }
    table
}

/// The line about the other data sets: how well the first process is matched there. Where the partner goes does not
/// depend on the indices at all.
#[must_use]
pub fn spread_line(own: &[Twin], length: f64, opinions: &[Opinion<Option<f64>>]) -> String {
    let first = own.first().and_then(|t| t.pairing.as_ref()).map(|p| p.phase_matching_factor(length));
    spread::line("sinc^2 of the first process", first, &spread::numbers(opinions, |value| *value), 3)
}

/// For people.
#[must_use]
pub fn text(setup: &Setup, emission: &Emission, photon: Direction, twins: &[Twin]) -> String {
    let mut out = format!(
        "A {} nm photon at h {} deg, v {} deg; its partner has {} nm; {} mm of {}\n\n",
        rounded(emission.photons.signal.nm(), 3),
        signed(photon.h_deg(), 3),
        signed(photon.v_deg(), 3),
        rounded(emission.photons.idler.nm(), 3),
        rounded(setup.crystals[0].length.mm(), 3),
        setup.crystals[0].material.id,
    );
    let header = [
        "process",
        "photon",
        "partner",
        "partner h",
        "partner v",
        "x mm",
        "y mm",
        "Delta k rad/mm",
        "sinc^2",
    ];
    let rows: Vec<Vec<String>> = twins
        .iter()
        .map(|Twin { process, pairing, .. }| {
            let mut cells = vec![process.to_string(), process.signal.to_string(), process.idler.to_string()];
            match pairing.as_ref().and_then(|p| p.idler_outside.map(|d| (p, d))) {
                Some((p, d)) => {
                    let (x, y) = d.on_screen_mm(setup.screen);
                    cells.extend([
                        signed(d.h_deg(), 3),
                        signed(d.v_deg(), 3),
                        signed(x, 2),
                        signed(y, 2),
                        fixed(p.mismatch * 1e-3, 3),
                        fixed(p.phase_matching_factor(emission.length), 3),
                    ]);
                }
                None => cells.push("totally reflected".into()),
            }
            cells
        })
        .collect();
    out.push_str(&grid(&header, &rows));
    out
}

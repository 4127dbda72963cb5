//! Report `index`: what each wave sees.

use crate::matching::Status;
use crate::material::MaterialError;
use crate::optics::{Crystal, IndexRow, index_rows};

use super::angles::{fixed, grid, or_dash, rounded};
use super::spread;
use super::table::{Cell, Column, Rows, Table, column};

/// Columns, without the two that end every table.
pub const COLUMNS: [Column; 10] = [
    column("material", "", "crystal id"),
    column("dataset", "", "data set id"),
    column("wavelength_nm", "nm", "in vacuum"),
    column("temperature_degc", "degC", "of the crystal"),
    column("polarization", "", "o, e, fast, slow, or the principal axis x, y, z"),
    column("n", "", "phase index"),
    column("group_index", "", "c dk/domega at fixed direction of the wave vector"),
    column("gvd_fs2_per_mm", "fs^2/mm", "d2k/domega2 at fixed direction of the wave vector"),
    column("walkoff_deg", "deg", "wave vector to ray"),
    column("dn_dt_per_k", "1/K", "temperature derivative of the phase index; empty where not known"),
];

/// The line about the other data sets: the index of the first row's wave there.
#[must_use]
pub fn spread_line(crystal: &Crystal, own: &[IndexRow], directed: bool) -> String {
    let Some(first) = own.first() else { return String::new() };
    let opinions: Vec<(String, Result<Option<f64>, String>)> = (0..crystal.material.sets().len())
        .filter(|index| *index != crystal.dataset)
        .map(|index| {
            let other = crystal.with_dataset(index);
            let answer = index_rows(&other, first.wavelength, directed);
            let n = answer.map(|all| all.first().and_then(|row| row.along.as_ref()).map(|a| a.n));
            (other.set().id.clone(), n.map_err(|e| spread::reason(&e)))
        })
        .collect();
    let what = format!("n of {} at {:.3}", first.polarization, first.wavelength);
    spread::line(&what, first.along.as_ref().map(|a| a.n), &opinions, 6)
}

/// All rows as a table.
#[must_use]
pub fn table(rows: &[IndexRow]) -> Table {
    let mut table = Table::new("index", &COLUMNS);
    for row in rows {
        let along = row.along.as_ref();
        let polarization = Some(row.polarization.as_str()).filter(|p| !p.is_empty());
        let cells = vec![
            row.material.as_str().into(),
            row.dataset.as_str().into(),
            row.wavelength.nm().into(),
            row.temperature.degc().into(),
            polarization.into(),
            along.map(|a| a.n).into(),
            along.map(|a| a.group_index).into(),
            along.map(|a| a.dispersion * 1e27).into(),
            along.map_or(Cell::Empty, |a| Cell::degrees(a.walkoff.to_degrees())),
            Cell::from(row.dn_dt),
        ];
        table.push(&cells, row.extrapolated, status(row));
    }
    table
}

/// For people.
#[must_use]
pub fn text(rows: &[IndexRow]) -> String {
    let header = [
        "crystal",
        "nm",
        "degC",
        "wave",
        "n",
        "group index",
        "GVD fs^2/mm",
        "walk-off deg",
        "dn/dT 1e-6/K",
        "status",
    ];
    let cells: Vec<Vec<String>> = rows
        .iter()
        .map(|row| {
            let along = row.along.as_ref();
            vec![
                format!("{}:{}", row.material, row.dataset),
                rounded(row.wavelength.nm(), 3),
                rounded(row.temperature.degc(), 2),
                row.polarization.clone(),
                or_dash(along.map(|a| a.n), 6),
                or_dash(along.map(|a| a.group_index), 6),
                or_dash(along.map(|a| a.dispersion * 1e27), 2),
                or_dash(along.map(|a| a.walkoff.to_degrees()), 3),
                row.dn_dt.map_or_else(|| "-".into(), |d| fixed(d * 1e6, 2)),
                if row.extrapolated {
                    format!("{} (extrapolated)", status(row))
                } else {
                    status(row).to_string()
                },
            ]
        })
        .collect();
    grid(&header, &cells)
}

fn status(row: &IndexRow) -> Status {
    match (&row.fault, &row.along) {
        (Some(MaterialError::NoIndex { .. }), _) => Status::Opaque,
        (Some(_), _) => Status::OutOfRange,
        (None, Some(along)) if along.on_optic_axis => Status::OpticAxis,
        (None, _) => Status::Ok,
    }
}

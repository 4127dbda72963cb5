//! Report `cones`: rings and their crossings.

use crate::frame::Direction;
use crate::job::Setup;
use crate::matching::{
    Actuator, Cones, CrossingRow, GapKind, HistoryName, Landing, Opinion, RingRow, Status,
    phase_matching_factor,
};
use crate::quantity::{Angle, Length};

use super::angles::{degrees, fixed, grid, or_dash, prose, rounded, signed};
use super::conventions::room_words;
use super::darkness::{Advice, Opening, turn_advice};
use super::spread;
use super::table::{Column, Rows, Table, column};

/// Columns of the rings, without the two that end every table.
pub const RINGS: [Column; 16] = [
    column("crystal", "", "number of the crystal from 1"),
    column("process", "", "pump -> signal + idler"),
    column("photon", "", "signal or idler"),
    column("wavelength_nm", "nm", "of the photon, in vacuum"),
    column("polarization", "", "o, e, fast or slow"),
    column(
        "field_azimuth_deg",
        "deg",
        "of the photon's electric field, from +x towards +y, at the ring's axis",
    ),
    column("axis_h_deg", "deg", "horizontal angle of the axis of the cone that fits best, outside"),
    column("axis_v_deg", "deg", "vertical angle of that axis, outside"),
    column("half_angle_deg", "deg", "half angle of that cone, outside"),
    column("half_angle_min_deg", "deg", "least angle between axis and ring, outside"),
    column("half_angle_max_deg", "deg", "largest angle between axis and ring, outside"),
    column("thickness_deg", "deg", "mean width at half maximum of sinc^2; empty where the inside is filled"),
    column("internal_half_angle_deg", "deg", "half angle of the cone of wave vectors inside the crystal"),
    column("x_mm", "mm", "centre of the circle that fits the ring on the screen"),
    column("y_mm", "mm", "centre of the circle that fits the ring on the screen"),
    column("radius_mm", "mm", "radius of that circle"),
];

/// Columns of the crossings, without the two that end every table.
pub const CROSSINGS: [Column; 24] = [
    column("pair", "", "number of the pair of directions, from 1; arms 1a and 1b"),
    column("first_crystal", "", "crystal of the first history"),
    column("first_process", "", "process of the first history, photon a as signal"),
    column("second_crystal", "", "crystal of the second history"),
    column("second_process", "", "process of the second history, photon a as signal"),
    column("a_wavelength_nm", "nm", "of the photon of a listed signal wavelength"),
    column("b_wavelength_nm", "nm", "of its partner"),
    column("a_h_deg", "deg", "horizontal angle, outside"),
    column("a_v_deg", "deg", "vertical angle, outside"),
    column("a_polar_deg", "deg", "angle from the pump, outside"),
    column("a_azimuth_deg", "deg", "azimuth about the pump, from +x towards +y"),
    column("a_x_mm", "mm", "on the screen"),
    column("a_y_mm", "mm", "on the screen"),
    column("b_h_deg", "deg", "horizontal angle, outside"),
    column("b_v_deg", "deg", "vertical angle, outside"),
    column("b_polar_deg", "deg", "angle from the pump, outside"),
    column("b_azimuth_deg", "deg", "azimuth about the pump, from +x towards +y"),
    column("b_x_mm", "mm", "on the screen"),
    column("b_y_mm", "mm", "on the screen"),
    column("separation_deg", "deg", "angle between a and b, outside"),
    column("intersection_angle_deg", "deg", "between the curves on the screen, 0 to 90"),
    column("gap_deg", "deg", "least angle between the rings where they miss"),
    column("gap_kind", "", "outside or inside"),
    column("tilt_to_touch_deg", "deg", "setting of the tuning turn at which the rings touch"),
];

/// One row for each distinct ring.
#[must_use]
pub fn rings_table(setup: &Setup, cones: &Cones) -> Table {
    let mut table = Table::new("rings", &RINGS);
    cones.rings.iter().for_each(|row| ring_row(row, setup.screen, &mut table));
    table
}

/// A row of [`RINGS`].
pub fn ring_row(row: &RingRow, screen: Length, out: &mut impl Rows) {
    out.count(row.crystal + 1);
    out.words(row.process);
    out.words(landing(row.photon));
    out.number(row.wavelength.nm());
    out.words(row.polarization);
    out.maybe(row.field_azimuth);
    match &row.ring {
        Ok(ring) => {
            let (centre, radius) = ring.circle();
            let mm = screen.mm();
            out.clean(ring.axis.h_deg());
            out.clean(ring.axis.v_deg());
            out.number(ring.half_angle.to_degrees());
            out.number(ring.least.to_degrees());
            out.number(ring.largest.to_degrees());
            out.maybe(ring.thickness.map(f64::to_degrees));
            out.number(ring.internal_half_angle.to_degrees());
            out.clean(centre.x * mm);
            out.clean(centre.y * mm);
            out.number(radius * mm);
        }
        Err(_) => out.blank(10),
    }
    out.end(row.extrapolated, row.status);
}

fn landing(photon: Landing) -> &'static str {
    match photon {
        Landing::Signal => "signal",
        Landing::Idler => "idler",
    }
}

/// One row for each pair of directions, or for each two histories that miss.
#[must_use]
pub fn crossings_table(setup: &Setup, cones: &Cones) -> Table {
    let mut table = Table::new("crossings", &CROSSINGS);
    cones.crossings.iter().for_each(|row| crossing_row(row, setup.screen, &mut table));
    table
}

/// A row of [`CROSSINGS`].
pub fn crossing_row(row: &CrossingRow, screen: Length, out: &mut impl Rows) {
    match row.pair {
        Some(number) => out.count(number),
        None => out.empty(),
    }
    for history in [row.first, row.second] {
        out.count(history.crystal + 1);
        out.words(history.process);
    }
    out.number(row.a_wavelength.nm());
    out.number(row.b_wavelength.nm());
    let a = row.crossing.as_ref().map(|c| c.direction);
    let b = row.crossing.as_ref().and_then(|c| c.partner);
    place(a, screen, out);
    place(b, screen, out);
    out.maybe(a.zip(b).map(|(a, b)| a.angle_to(b).to_degrees()));
    out.maybe(row.crossing.as_ref().map(|c| c.angle.to_degrees()));
    out.maybe(row.contact.map(|c| c.gap.to_degrees()));
    match row.contact {
        Some(contact) => out.words(contact.kind.name()),
        None => out.empty(),
    }
    out.maybe(row.tilt_to_touch.map(|t| Angle::radians(t).degrees()));
    out.end(row.extrapolated, row.status);
}

fn place(direction: Option<Direction>, screen: Length, out: &mut impl Rows) {
    let Some(d) = direction else { return out.blank(6) };
    let (x, y) = d.on_screen_mm(screen);
    [d.h_deg(), d.v_deg(), d.polar_deg(), d.azimuth_deg(), x, y]
        .into_iter()
        .for_each(|value| out.clean(value));
}

/// For people; `advice` has an entry for each ring.
#[must_use]
pub fn text(setup: &Setup, cones: &Cones, advice: &[Advice]) -> String {
    let mut out = prose(&heading(setup));
    out.push_str(&format!(
        "\nRings (degrees outside the crystal; x, y, r: circle that fits best on the screen at {} m)\n",
        rounded(setup.screen.si(), 3)
    ));
    let header = [
        "ring",
        "process",
        "axis h",
        "axis v",
        "half angle",
        "least",
        "largest",
        "thickness",
        "inside",
        "x mm",
        "y mm",
        "r mm",
    ];
    let rows: Vec<Vec<String>> = cones.rings.iter().map(|row| ring_cells(setup, row)).collect();
    out.push_str(&grid(&header, &rows));
    for (row, advice) in cones.rings.iter().zip(advice) {
        out.push_str(&prose(&ring_words(setup, row, advice)));
    }
    out.push('\n');
    if cones.crossings.is_empty() {
        out.push_str(
            "Crossings: none is to be expected, since no two rings here have opposite polarization.\n",
        );
    } else {
        out.push_str("Crossings\n");
        for row in &cones.crossings {
            out.push_str(&prose(&crossing_words(setup, row)));
        }
    }
    out.push_str(&prose(&reflections(setup)));
    out
}

fn heading(setup: &Setup) -> String {
    let mut out = format!("Pump {} nm", rounded(setup.pump().nm(), 3));
    for crystal in &setup.crystals {
        let turn = &crystal.orientation;
        out.push_str(&format!(
            "; {}:{} cut theta {} deg, phi {} deg, {} mm{}, tilt {} deg, roll {} deg",
            crystal.material.id,
            crystal.set().id,
            rounded(crystal.cut.theta.degrees(), 3),
            rounded(crystal.cut.phi.degrees(), 3),
            rounded(crystal.length.mm(), 3),
            if setup.length_given { "" } else { " (default length)" },
            rounded(turn.tilt.degrees(), 3),
            rounded(turn.roll.degrees(), 3),
        ));
        if turn.cross_tilt.si() != 0.0 {
            out.push_str(&format!(", cross tilt {} deg", rounded(turn.cross_tilt.degrees(), 3)));
        }
    }
    out.push_str(&format!("; {}\n", setup.interaction));
    out
}

fn ring_cells(setup: &Setup, row: &RingRow) -> Vec<String> {
    let mut cells = vec![
        format!("{} {} {} nm", row.polarization, landing(row.photon), rounded(row.wavelength.nm(), 2)),
        if setup.crystals.len() > 1 {
            format!("{}: {}", row.crystal + 1, row.process)
        } else {
            row.process.to_string()
        },
    ];
    match &row.ring {
        Ok(ring) => {
            let (centre, radius) = ring.circle();
            let mm = setup.screen.mm();
            cells.extend([
                signed(ring.axis.h_deg(), 3),
                signed(ring.axis.v_deg(), 3),
                degrees(ring.half_angle),
                degrees(ring.least),
                degrees(ring.largest),
                ring.thickness
                    .map_or_else(|| if ring.filled { "filled".into() } else { "-".into() }, degrees),
                degrees(ring.internal_half_angle),
                signed(centre.x * mm, 2),
                signed(centre.y * mm, 2),
                fixed(radius * mm, 2),
            ]);
        }
        Err(_) => cells.extend([row.status.to_string()]),
    }
    cells
}

/// On which side a ring lies and how its light is polarized; or what to do where there is none.
pub(super) fn ring_words(setup: &Setup, row: &RingRow, advice: &[Opening]) -> String {
    let name = ring_name(setup, row);
    match &row.ring {
        Ok(ring) => {
            let (h, v) = (ring.axis.h_deg(), ring.axis.v_deg());
            let sideways = if h.abs() < 0.01 {
                ""
            } else if h > 0.0 {
                "to +x (left, looking along the beam)"
            } else {
                "to -x (right, looking along the beam)"
            };
            let upright = if v.abs() < 0.01 {
                ""
            } else if v > 0.0 {
                "up"
            } else {
                "down"
            };
            let side =
                [sideways, upright].into_iter().filter(|s| !s.is_empty()).collect::<Vec<_>>().join(" and ");
            let centred = side.is_empty();
            let field = row.field_azimuth.map_or(String::new(), |a| {
                let word = if !(0.5..=179.5).contains(&a) {
                    ", polarized horizontally"
                } else if (a - 90.0).abs() < 0.5 {
                    ", polarized vertically"
                } else {
                    ""
                };
                if word.is_empty() {
                    format!(", polarized at {} deg from +x towards +y", fixed(a, 1))
                } else {
                    word.into()
                }
            });
            let note = match row.status {
                Status::NoNonlinearity => "; but symmetry forbids these pairs (d_eff is zero)",
                Status::TotalReflection => "; some partners are totally reflected inside the crystal",
                _ => "",
            };
            format!(
                "  The {name} is {}{field}{note}.\n",
                if centred { "centred on the pump".into() } else { format!("off the pump {side}") }
            )
        }
        Err(fault) => match (row.status, fault.shortfall) {
            (Status::NoPhaseMatching, shortfall) => {
                let length = setup.crystals[row.crystal].hot_length().si();
                let off = shortfall.map_or(String::new(), |s| {
                    let factor = phase_matching_factor(s, length);
                    let light = if factor > 0.1 {
                        format!(", where sinc^2 is {}: there is light without a ring", fixed(factor, 2))
                    } else {
                        String::new()
                    };
                    format!(": the best direction misses by {} rad/mm{light}", fixed(s * 1e-3, 2))
                });
                let advice = turn_advice(setup, row.crystal, advice);
                format!("  No direction is phase matched for the {name}{off}. {advice}\n")
            }
            (Status::OpenRing, _) => {
                format!("  The {name} leaves the search region, 60 deg about the pump.\n")
            }
            (Status::TotalReflection, _) => {
                format!("  The {name} is cut by total reflection at the exit face.\n")
            }
            (status, _) => format!("  The {name}: {status}.\n"),
        },
    }
}

fn crossing_words(setup: &Setup, row: &CrossingRow) -> String {
    let history = |h: &HistoryName| {
        if setup.crystals.len() > 1 {
            format!("{}: {}", h.crystal + 1, h.process)
        } else {
            h.process.to_string()
        }
    };
    let both = format!("{} with {}", history(&row.first), history(&row.second));
    let Some(crossing) = &row.crossing else { return missing_words(setup, row, &both) };
    let mut out = format!(
        "  Pair {}{}: {both}; separation {} deg, curves meet at {} deg\n",
        row.pair.unwrap_or(0),
        match row.status {
            Status::Touching => " (the rings touch)",
            Status::Coincident => " (the rings lie on each other; the point straight up from the axis)",
            Status::NoNonlinearity => " (symmetry forbids these pairs)",
            _ => "",
        },
        or_dash(crossing.partner.map(|b| crossing.direction.angle_to(b).to_degrees()), 3),
        fixed(crossing.angle.to_degrees(), 1),
    );
    let mut photon = |name: &str, wavelength: f64, direction: Option<Direction>| {
        let place = direction.map_or_else(
            || "totally reflected inside the crystal".into(),
            |d| {
                let (x, y) = d.on_screen_mm(setup.screen);
                format!(
                    "h {} deg, v {} deg ({} deg from the pump); x {} mm, y {} mm",
                    signed(d.h_deg(), 3),
                    signed(d.v_deg(), 3),
                    fixed(d.polar_deg(), 3),
                    signed(x, 2),
                    signed(y, 2)
                )
            },
        );
        out.push_str(&format!("    {name} {} nm: {place}\n", rounded(wavelength, 2)));
    };
    let arm = |photon: char| row.arm(photon).unwrap_or_default();
    photon(&arm('a'), row.a_wavelength.nm(), Some(crossing.direction));
    photon(&arm('b'), row.b_wavelength.nm(), crossing.partner);
    out
}

fn missing_words(setup: &Setup, row: &CrossingRow, both: &str) -> String {
    let Some(contact) = row.contact else {
        return format!("  {both}: no crossing, because a ring is missing ({}).\n", row.status);
    };
    let how = match contact.kind {
        GapKind::Outside => "lie apart",
        GapKind::Inside => "lie one inside the other",
    };
    let touch = match (row.tilt_to_touch, row.turn) {
        (Some(setting), Some(actuator)) => {
            let crystal = &setup.crystals[row.first.crystal];
            let cross = actuator == Actuator::CrossTilt;
            let now = if cross { crystal.orientation.cross_tilt } else { crystal.orientation.tilt };
            let turn = Angle::radians(setting - now.si());
            format!(
                "they touch at {} {} deg: {}",
                if cross { "cross tilt" } else { "tilt" },
                signed(setting.to_degrees(), 3),
                room_words(crystal, actuator, turn)
            )
        }
        _ if row.first.crystal != row.second.crystal => {
            "turn one of the two crystals to make them touch".into()
        }
        _ => "no turn within 30 deg makes them touch".into(),
    };
    format!("  {both}: the rings {how}, gap {} deg; {touch}.\n", degrees(contact.gap))
}

fn reflections(setup: &Setup) -> String {
    let mut out = String::new();
    for (index, crystal) in setup.crystals.iter().enumerate() {
        let face = match setup.crystals.len() {
            1 => "The entrance face".into(),
            _ => format!("The entrance face of crystal {}", index + 1),
        };
        let r = crystal.reflection();
        let (x, y) = (-r.x / r.z * setup.screen.mm(), -r.y / r.z * setup.screen.mm());
        if x.hypot(y) <= 0.5 {
            out.push_str(&format!("  {face} reflects pump light straight back into the laser.\n"));
        } else {
            out.push_str(&format!(
                "  {face} reflects pump light back: x {} mm, y {} mm at {} m towards the laser.\n",
                signed(x, 1),
                signed(y, 1),
                rounded(setup.screen.si(), 3)
            ));
        }
    }
    out
}

/// The lines about the other data sets: half angle of each ring, and the crossings.
#[must_use]
pub fn spread_lines(setup: &Setup, own: &Cones, opinions: &[Opinion<Option<Cones>>]) -> Vec<String> {
    let crossing = |cones: &Cones| {
        let polar =
            cones.crossings.iter().filter_map(|c| c.crossing.as_ref()).map(|c| c.direction.polar_deg());
        polar.reduce(f64::max)
    };
    let mut lines = Vec::new();
    if !own.crossings.is_empty() {
        let numbers = spread::numbers(opinions, |c| c.as_ref().and_then(crossing));
        lines.push(spread::line("the crossings' angle from the pump in deg", crossing(own), &numbers, 3));
    }
    for row in &own.rings {
        // the ring that corresponds: same crystal, process, photon and wavelength
        let half_angle = |cones: &Cones| {
            let key = |r: &RingRow| (r.crystal, r.process, r.photon, r.wavelength);
            let alike = |r: &&RingRow| key(r) == key(row);
            let ring = cones.rings.iter().find(alike)?.ring.as_ref().ok()?;
            Some(ring.half_angle.to_degrees())
        };
        let numbers = spread::numbers(opinions, |c| c.as_ref().and_then(half_angle));
        let what = format!("the half angle of the {} in deg", ring_name(setup, row));
        lines.push(spread::line(&what, half_angle(own), &numbers, 3));
    }
    lines
}

/// "o ring (810 nm)", with the crystal's number where there are several.
fn ring_name(setup: &Setup, row: &RingRow) -> String {
    let of =
        if setup.crystals.len() > 1 { format!(" of crystal {}", row.crystal + 1) } else { String::new() };
    format!("{} ring{of} ({} nm)", row.polarization, rounded(row.wavelength.nm(), 2))
}

//! Report `tilt`: how far to turn for a target.

use crate::frame::full_circle_deg;
use crate::job::Setup;
use crate::matching::{Actuator, Opinion, Status, Target, Turn};
use crate::optics::Crystal;
use crate::quantity::Angle;

use super::angles::{fixed, grid, or_dash, prose, rounded, signed};
use super::conventions::room_words;
use super::cut::target_words;
use super::spread;
use super::table::{Cell, Column, Rows, Table, column};

/// Columns, without the two that end every table.
pub const COLUMNS: [Column; 11] = [
    column("solution", "", "from 1, nearest to the present setting first"),
    column("crystal_tilt_deg", "deg", "setting of the tilt"),
    column("crystal_cross_tilt_deg", "deg", "setting of the cross tilt"),
    column("turn_deg", "deg", "from where the mount stands now"),
    column("theta_inside_deg", "deg", "pump inside the crystal to Z"),
    column("phi_inside_deg", "deg", "azimuth of the pump inside the crystal from X"),
    column("half_angle_deg", "deg", "of the cone that fits the signal's ring, outside"),
    column("crossing_deg", "deg", "signal at its crossings to the pump, outside"),
    column("separation_deg", "deg", "between the photons at the crossings, outside"),
    column("stage_reading_deg", "deg", "what the scale of the tilt shows; empty for other handles"),
    column("stage_turns", "", "turns of the tilt's screw from now, positive where the reading rises"),
];

/// Columns where a given actuator is set: that of temperature or pump leads.
#[must_use]
pub fn columns(actuator: Option<Actuator>) -> Vec<Column> {
    let lead = match actuator {
        Some(Actuator::Temperature) => {
            Some(column("crystal_temperature_degc", "degC", "setting of the temperature"))
        }
        Some(Actuator::Pump) => Some(column("pump_wavelength_nm", "nm", "setting of the pump")),
        Some(Actuator::Tilt | Actuator::CrossTilt) | None => None,
    };
    lead.into_iter().chain(COLUMNS).collect()
}

/// Rows of all solutions as a table.
#[must_use]
pub fn table(setup: &Setup, actuator: Actuator, turns: &[Turn]) -> Table {
    let mut table = Table::new("tilt", &columns(Some(actuator)));
    rows(setup, actuator, turns, &mut table);
    table
}

/// A row for each solution, or one that says that there is none.
pub fn rows(setup: &Setup, actuator: Actuator, turns: &[Turn], out: &mut impl Rows) {
    for (index, turn) in turns.iter().enumerate() {
        match actuator {
            Actuator::Temperature => out.number(turn.crystal.temperature.degc()),
            Actuator::Pump => out.number(turn.photons.pump.nm()),
            Actuator::Tilt | Actuator::CrossTilt => {}
        }
        let wavelengths = [turn.photons.pump, turn.photons.signal, turn.photons.idler];
        let extrapolated = wavelengths.iter().any(|w| turn.crystal.extrapolates(*w));
        out.push(&row(setup, actuator, index, turn), extrapolated, turn.status);
    }
    if turns.is_empty() {
        let now = &setup.crystals[0].orientation;
        if matches!(actuator, Actuator::Temperature | Actuator::Pump) {
            out.empty();
        }
        let mut blank = vec![Cell::Empty; COLUMNS.len()];
        (blank[1], blank[2]) = (now.tilt.degrees().into(), now.cross_tilt.degrees().into());
        out.push(&blank, false, Status::NoPhaseMatching);
    }
}

fn row(setup: &Setup, actuator: Actuator, index: usize, turn: &Turn) -> [Cell; COLUMNS.len()] {
    let to = &turn.crystal.orientation;
    let change = change(&setup.crystals[0], actuator, turn);
    let stage = setup.stage.as_ref().filter(|_| actuator == Actuator::Tilt);
    let reading = stage.and_then(|s| s.reading(to.tilt));
    let measure = &turn.measure;
    [
        (index + 1).into(),
        to.tilt.degrees().into(),
        to.cross_tilt.degrees().into(),
        change.map(Angle::degrees).into(),
        turn.theta_inside.to_degrees().into(),
        full_circle_deg(turn.phi_inside).into(),
        measure.half_angle.map(f64::to_degrees).into(),
        measure.crossing.map(f64::to_degrees).into(),
        measure.separation.map(f64::to_degrees).into(),
        reading.map(Angle::degrees).into(),
        change.and_then(|c| stage.and_then(|s| s.turns(c))).into(),
    ]
}

/// Change of the turn from where the mount stands; `None` where something else is set.
fn change(now: &Crystal, actuator: Actuator, turn: &Turn) -> Option<Angle> {
    let now = match actuator {
        Actuator::Tilt => now.orientation.tilt,
        Actuator::CrossTilt => now.orientation.cross_tilt,
        Actuator::Temperature | Actuator::Pump => return None,
    };
    Some(Angle::radians(turn.setting - now.si()))
}

/// For people.
#[must_use]
pub fn text(setup: &Setup, target: Target, actuator: Actuator, chosen: bool, turns: &[Turn]) -> String {
    let crystal = &setup.crystals[0];
    let turn = &crystal.orientation;
    let mut out = format!(
        "{}:{} cut theta {} deg, phi {} deg, pump {} nm, {}; now at tilt {} deg, cross tilt {} deg\nWanted: {}; turned: {}{}\n\n",
        crystal.material.id,
        crystal.set().id,
        rounded(crystal.cut.theta.degrees(), 3),
        rounded(crystal.cut.phi.degrees(), 3),
        rounded(setup.pump().nm(), 3),
        setup.interaction,
        rounded(turn.tilt.degrees(), 3),
        rounded(turn.cross_tilt.degrees(), 3),
        target_words(target),
        name(actuator),
        if chosen && actuator == Actuator::CrossTilt {
            " (chosen, because tilt changes nothing here in first order)"
        } else {
            ""
        },
    );
    let header = [
        "solution",
        "process",
        name(actuator),
        "turn",
        "theta inside",
        "phi inside",
        "half angle",
        "crossing",
        "separation",
        "stage",
    ];
    let rows: Vec<Vec<String>> =
        turns.iter().enumerate().map(|(n, t)| cells(setup, actuator, n, t)).collect();
    out.push_str(&grid(&header, &rows));
    for (index, turn) in turns.iter().enumerate() {
        out.push_str(&prose(&words(setup, actuator, index, turn)));
    }
    out
}

fn cells(setup: &Setup, actuator: Actuator, index: usize, turn: &Turn) -> Vec<String> {
    let change = change(&setup.crystals[0], actuator, turn);
    let to = &turn.crystal.orientation;
    let reading = setup.stage.and_then(|s| s.reading(to.tilt));
    let measure = &turn.measure;
    vec![
        (index + 1).to_string(),
        turn.process.to_string(),
        setting(actuator, turn),
        change.map_or_else(|| "-".into(), |c| signed(c.degrees(), 3)),
        fixed(turn.theta_inside.to_degrees(), 3),
        fixed(full_circle_deg(turn.phi_inside), 3),
        or_dash(measure.half_angle.map(f64::to_degrees), 3),
        or_dash(measure.crossing.map(f64::to_degrees), 3),
        or_dash(measure.separation.map(f64::to_degrees), 3),
        or_dash(reading.map(Angle::degrees), 3),
    ]
}

fn name(actuator: Actuator) -> &'static str {
    match actuator {
        Actuator::Tilt => "tilt",
        Actuator::CrossTilt => "cross tilt",
        Actuator::Temperature => "temperature",
        Actuator::Pump => "pump",
    }
}

fn setting(actuator: Actuator, turn: &Turn) -> String {
    match actuator {
        Actuator::Tilt | Actuator::CrossTilt => signed(turn.setting.to_degrees(), 3),
        Actuator::Temperature => fixed(turn.setting, 2),
        Actuator::Pump => fixed(turn.photons.pump.nm(), 3),
    }
}

/// The turn in the room's words, and on the mount's scale.
fn words(setup: &Setup, actuator: Actuator, index: usize, turn: &Turn) -> String {
    let crystal = &setup.crystals[0];
    let Some(change) = change(crystal, actuator, turn) else {
        let unit = if actuator == Actuator::Temperature { "degC" } else { "nm" };
        return format!(
            "  {}: set the {} to {} {unit}\n",
            index + 1,
            name(actuator),
            setting(actuator, turn)
        );
    };
    let turns = setup.stage.filter(|_| actuator == Actuator::Tilt).and_then(|s| s.turns(change));
    let screw = turns.map_or(String::new(), |t| format!(", screw {} turns", signed(t, 2)));
    format!("  {}: {}{screw}\n", index + 1, room_words(crystal, actuator, change))
}

/// The line about the other data sets.
#[must_use]
pub fn spread_line(actuator: Actuator, own: &[Turn], opinions: &[Opinion<Vec<Turn>>]) -> String {
    let value = |t: &Turn| match actuator {
        Actuator::Tilt | Actuator::CrossTilt => t.setting.to_degrees(),
        Actuator::Temperature => t.setting,
        Actuator::Pump => t.setting * 1e9,
    };
    let first = own.first().map(value);
    // of several settings the one that corresponds: nearest to the first of this set
    let number = |turns: &[Turn]| {
        let away = |v: &f64| first.map_or(0.0, |own| (v - own).abs());
        turns.iter().map(value).min_by(|a, b| away(a).total_cmp(&away(b)))
    };
    let what = match actuator {
        Actuator::Tilt => "the tilt in deg",
        Actuator::CrossTilt => "the cross tilt in deg",
        Actuator::Temperature => "the temperature in degC",
        Actuator::Pump => "the pump in nm",
    };
    spread::line(what, first, &spread::numbers(opinions, |turns| number(turns)), 3)
}

//! The steps of the bench sheet about one crystal in its mount: each number with what to dial and what to see.

use nalgebra::Vector3;

use super::facts::{Facts, capital, deg, field_words, lean_words, mm, nm, ring_name, rings, side_words};
use super::page::{Block, Page};
use crate::frame::{Mount, Orientation};
use crate::job::{Setup, setup::Stage};
use crate::matching::{Actuator, Cones, ConesError, RingRow};
use crate::optics::{Crystal, retardation};
use crate::picture::{gap_words, reversed, taken};
use crate::quantity::{Angle, Length, Temperature};
use crate::report::angles::{fixed, signed};
use crate::report::{axis_words, room_words};

/// Where the entrance face's reflection hits a card at `distance` back towards the laser, mm.
pub(super) fn reflection(crystal: &Crystal, distance: Length) -> (f64, f64) {
    let r = crystal.reflection();
    (-r.x / r.z * distance.mm() + 0.0, -r.y / r.z * distance.mm() + 0.0)
}

/// "25.49 mm to the right (-x)", or that it goes straight back.
pub(super) fn spot_words(crystal: &Crystal, distance: Length) -> String {
    let (x, y) = reflection(crystal, distance);
    if x.hypot(y) < 0.005 {
        return "on the incoming beam".into();
    }
    let part = |size: f64, side: Vector3<f64>| {
        (size.abs() >= 0.005).then(|| format!("{} mm {}", fixed(size.abs(), 2), side_words(side)))
    };
    let parts = [part(x, Vector3::new(x, 0.0, 0.0)), part(y, Vector3::new(0.0, y, 0.0))];
    parts.into_iter().flatten().collect::<Vec<_>>().join(" and ")
}

/// All steps about a crystal.
pub(super) fn mount_steps(page: &mut Page, facts: &Facts<'_>, index: usize) {
    let setup = facts.setup;
    let which = which(setup, index);
    let crystal = &setup.crystals[index];
    put_in(page, facts, index, &which);
    let (tilt, cross) = (crystal.orientation.tilt, crystal.orientation.cross_tilt);
    let stage = setup.stage.filter(|_| index == 0);
    let see = match stage.and_then(|s| s.zero) {
        Some(zero) => format!(
            "Stage reading there: {} deg. If yours differs, correct [stage] zero in the job and print again.",
            fixed(zero.degrees(), 3)
        ),
        None if index == 0 && tilt.si() == 0.0 && cross.si() != 0.0 => {
            "No reading is asked for: a stage's scale in the job reads tilt, and cross tilt is set by the reflected spot.".into()
        }
        None if index == 0 => "Write the reading down: ________ deg. Print this sheet again with your reading, \
                               `--set stage.zero=3.2deg`, and it names the readings to set; without a scale the \
                               reflected spot does."
            .into(),
        None => "There is no scale to read: the turns below count from here.".into(),
    };
    page.step(
        format!("Turn {which} until the reflection of its face goes back into the laser: tilt and cross tilt zero."),
        vec![see],
    );
    let mut stands = Crystal {
        orientation: Orientation { roll: crystal.orientation.roll, ..Orientation::default() },
        ..crystal.clone()
    };
    if tilt.si() == 0.0 && cross.si() == 0.0 {
        page.step(format!("Leave {which} there: tilt and cross tilt are 0."), Vec::new());
    }
    for (actuator, turn) in [(Actuator::Tilt, tilt), (Actuator::CrossTilt, cross)] {
        if turn.si() == 0.0 {
            continue;
        }
        let key = if actuator == Actuator::Tilt { "Tilt" } else { "Cross tilt" };
        let mut see = vec![format!("In words: {}.", room_words(&stands, actuator, turn))];
        see.extend(
            stage.filter(|_| actuator == Actuator::Tilt).map(|s| stage_words(s, turn)).unwrap_or_default(),
        );
        if stage.is_some() && actuator == Actuator::CrossTilt {
            see.push("The job's stage reads tilt, not this turn: set it by the spot.".into());
        }
        match actuator {
            Actuator::Tilt => stands.orientation.tilt = turn,
            _ => stands.orientation.cross_tilt = turn,
        }
        let from = if actuator == Actuator::Tilt || tilt.si() == 0.0 {
            "from back-reflection"
        } else {
            "more, about the other axis"
        };
        page.step(format!("{key} {which} by {} {from}.", deg(turn.si(), 3)), see);
        spots(page, &stands, &which, key);
    }
}

/// "crystal 2 (second)"
pub(super) fn which(setup: &Setup, index: usize) -> String {
    let name = &setup.crystals[index].name;
    match setup.crystals.len() {
        1 => "the crystal".into(),
        _ if name.parse::<usize>().is_ok() => format!("crystal {}", index + 1),
        _ => format!("crystal {} ({name})", index + 1),
    }
}

fn put_in(page: &mut Page, facts: &Facts<'_>, index: usize, which: &str) {
    let setup = facts.setup;
    let crystal = &setup.crystals[index];
    let roll = crystal.orientation.roll;
    let upright = Crystal { orientation: Orientation { roll, ..Orientation::default() }, ..crystal.clone() };
    let placement = upright.placement();
    let z = placement.to_lab(Mount(placement.dielectric_axes().column(2).into_owned())).0;
    let lean = if z.z < -1e-9 { -z } else { z };
    let across = Vector3::new(lean.x, lean.y, 0.0);
    let mut see = Vec::new();
    if index > 0 {
        see.push(match setup.bench.gaps.get(index).filter(|gap| gap.si() > 0.0) {
            Some(_) => format!("Between crystal {index} and this one: {}.", gap_words(setup, index)),
            None => format!("It touches crystal {index}."),
        });
    }
    if let Some(words) = reversed(crystal) {
        see.push(format!("Put it in {words} against the drawing of the order."));
    }
    let plane = across.y.atan2(across.x).to_degrees().rem_euclid(180.0);
    if across.norm() > 0.01 {
        see.extend(lean_words(&upright).iter().map(|words| format!("{}.", capital(words))));
        see.push(format!(
            "The line of the mark on its side face lies in the plane at {} deg from +x towards +y.",
            fixed(if plane > 179.95 { 0.0 } else { plane }, 1)
        ));
    }
    see.push(format!(
        "Roll right, or a quarter or half turn off: between crossed polarizers, one of them {}, and without tilt, the pump is \
         extinguished.",
        field_words(if plane > 179.95 { 0.0 } else { plane })
    ));
    if setup.crystals.len() > 1 {
        see.push("For the checks of its roll leave this crystal alone in the beam.".into());
    }
    see.extend(quarter_turn(facts, &upright));
    page.step(
        format!(
            "Mount {which} ({}, {} long), roll {} deg.",
            Facts::id(crystal),
            crystal.length,
            signed(roll.degrees(), 1)
        ),
        see,
    );
}

/// What tells a crystal at its roll from one a quarter turn off.
fn quarter_turn(facts: &Facts<'_>, upright: &Crystal) -> Vec<String> {
    const TURN: f64 = 2.0;
    let pump = facts.photons.pump;
    let waves = |crystal: &Crystal| retardation(crystal, pump).ok().flatten();
    let passed = |actuator: Actuator| {
        let mut turned = upright.clone();
        let turn = Angle::from_degrees(TURN);
        match actuator {
            Actuator::Tilt => turned.orientation.tilt = turn,
            _ => turned.orientation.cross_tilt = turn,
        }
        Some((waves(&turned)? - waves(upright)?).abs())
    };
    let mut all = Vec::new();
    if let Some((tilt, cross)) = passed(Actuator::Tilt).zip(passed(Actuator::CrossTilt)) {
        let (many, few) = (tilt.max(cross), tilt.min(cross));
        if many > 1.0 && many > 3.0 * few {
            let words = |actuator| {
                room_words(upright, actuator, Angle::from_degrees(TURN))
                    .replace(&format!(" by {TURN} deg"), "")
            };
            all.push(format!(
                "A quarter turn off? Turn both polarizers by 45 deg, still crossed, and turn the crystal by {TURN} deg from \
                 back-reflection (the reflected spot moves by {} mm 1000 mm before it). When you {} the light passes {} times from dark to dark; when you {}, {} times. The other way \
                 round: the crystal is rolled by a quarter turn too much.",
                fixed(spot_per_turn(TURN), 1),
                words(Actuator::Tilt),
                fixed(tilt, 1),
                words(Actuator::CrossTilt),
                fixed(cross, 1)
            ));
        }
    }
    if let Some(taken) = taken(facts.setup, upright) {
        let degrees = taken.to_degrees();
        let against = (degrees + 90.0).rem_euclid(180.0);
        all.push(format!(
            "With its ring in sight: it is brightest with the pump {}, and gone with it {}; the other way round the crystal is \
             rolled by a quarter turn too much.",
            field_words(if degrees > 179.95 { 0.0 } else { degrees }),
            field_words(if against > 179.95 { 0.0 } else { against })
        ));
    }
    all
}

/// How far the reflected spot moves on a card 1000 mm before a crystal that is turned by so many degrees, mm: by twice the
/// turn.
pub(super) fn spot_per_turn(degrees: f64) -> f64 {
    1000.0 * (2.0 * degrees.to_radians()).tan()
}

fn stage_words(stage: Stage, turn: Angle) -> Vec<String> {
    let mut see = Vec::new();
    if let Some(reading) = stage.reading(turn) {
        see.push(format!("Stage reading to set: {} deg.", fixed(reading.degrees(), 3)));
    }
    if let Some(turns) = stage.turns(turn) {
        let sense = if turns < 0.0 { "falls" } else { "rises" };
        see.push(format!("Screw: {} turns, so that the reading {sense}.", fixed(turns.abs(), 2)));
    }
    see
}

/// Where the reflected spot stands once a turn is set.
fn spots(page: &mut Page, crystal: &Crystal, which: &str, key: &str) {
    let places = [0.1, 0.2, 0.3, 0.5, 1.0].map(Length::metres);
    let rows = places
        .into_iter()
        .map(|distance| {
            let (x, y) = reflection(crystal, distance);
            vec![distance.to_string(), mm(x, 2), mm(y, 2), spot_words(crystal, distance)]
        })
        .collect();
    page.text(format!(
        "Set by the spot: with that {} the reflection of {which} lands here, on a card beside the incoming pump (sides as seen \
         looking along the beam, from the laser to the crystal):",
        key.to_lowercase()
    ));
    page.table(&["card before the crystal", "x", "y", "from the incoming beam"], rows);
}

/// Turns of a mount that holds all crystals.
pub(super) fn common_mount(page: &mut Page, setup: &Setup) {
    let orientation = &setup.crystals[0].orientation;
    let turns = [(Vector3::x(), orientation.about_x), (Vector3::y(), orientation.about_y)];
    let see: Vec<String> = turns
        .into_iter()
        .filter(|(_, turn)| turn.si() != 0.0)
        .map(|(axis, turn)| format!("{}.", axis_words(axis, turn)))
        .collect();
    if see.is_empty() {
        return;
    }
    page.step("Then turn the common mount, all crystals together, in this order.", see);
    let rows = setup
        .crystals
        .iter()
        .enumerate()
        .map(|(index, crystal)| vec![which(setup, index), spot_words(crystal, Length::metres(1.0))])
        .collect();
    page.table(&["reflection of", "on a card 1000 mm before it, from the incoming beam"], rows);
}

/// The temperature to set, and what a kelvin does.
pub(super) fn temperature_steps(page: &mut Page, facts: &Facts<'_>) {
    let setup = facts.setup;
    for (index, crystal) in setup.crystals.iter().enumerate() {
        let which = which(setup, index);
        let set = crystal.temperature;
        let room = (18.0..=25.0).contains(&set.degc());
        let mut see = Vec::new();
        if room && crystal.poling.is_none() {
            see.push("That is room temperature: no oven is needed, but let it settle.".into());
        }
        if crystal.set().has_thermo_optics() {
            see.extend(per_kelvin(facts, index));
        } else {
            see.push(format!(
                "How its indices change with temperature is not in {}: what a kelvin does is not known here.",
                Facts::id(crystal)
            ));
        }
        let how = if room && crystal.poling.is_none() { "Let" } else { "Set the oven so that" };
        let verb = if how == "Let" { "be" } else { "is" };
        page.step(format!("{how} {which} {verb} at {}.", set), see);
    }
}

/// Radius of each ring of a crystal one kelvin up and down.
fn per_kelvin(facts: &Facts<'_>, index: usize) -> Vec<String> {
    let setup = facts.setup;
    let at = |off: f64| {
        let mut crystals = setup.crystals.clone();
        let warmer = crystals[index].temperature.degc() + off;
        crystals[index].temperature = Temperature::celsius(warmer);
        rings(setup, &crystals).ok()
    };
    let radius = |cones: &Cones, n: usize| {
        let ring = cones.rings.get(n)?.ring.as_ref().ok()?;
        Some(ring.circle().1 * setup.screen.mm())
    };
    let Some((up, down)) = at(1.0).zip(at(-1.0)) else { return Vec::new() };
    let rows = facts.cones.rings.iter().enumerate().filter(|(_, row)| row.crystal == index);
    rows.map(|(n, row)| {
        let name = ring_name(setup, row);
        match (radius(&up, n), radius(&down, n)) {
            (Some(up), Some(down)) => {
                let rate = 0.5 * (up - down);
                format!(
                    "{name}: radius {} mm per K at {} ({}).",
                    signed(rate, if rate.abs() < 0.1 { 3 } else { 2 }),
                    setup.screen,
                    if rate >= 0.0 { "warmer is larger" } else { "warmer is smaller" }
                )
            }
            (Some(up), None) => format!("{name}: a kelvin warmer gives a ring of {} mm.", fixed(up, 1)),
            (None, Some(down)) => format!("{name}: a kelvin colder gives a ring of {} mm.", fixed(down, 1)),
            (None, None) => format!("{name}: no ring from one kelvin colder to one warmer."),
        }
    })
    .collect()
}

/// Rings against the turn that tunes, and against temperature where that does: what to compare a measured ring with, and
/// where to set each line.
pub(super) fn tuning_tables(page: &mut Page, facts: &Facts<'_>, index: usize) -> Result<(), ConesError> {
    let crystal = &facts.setup.crystals[index];
    let openings = facts.openings(index);
    let opening = |heat: bool| openings.iter().find(|o| (o.actuator == Actuator::Temperature) == heat);
    let turn = opening(false);
    let actuator = turn.map_or_else(|| facts.tuning(crystal), |o| o.actuator);
    if turn.is_some() || openings.is_empty() {
        // without a ring the table reaches twice as far as the first one
        let step = turn.map_or(0.25, |o| round_up(0.25 * o.change.to_degrees().abs()).max(0.25));
        turn_table(page, facts, (index, actuator), step)?;
    }
    let heat = opening(true);
    if heat.is_some() || (crystal.poling.is_some() && crystal.set().has_thermo_optics()) {
        let step = heat.map_or(2.0, |o| round_up(0.25 * o.change.abs()));
        temperature_table(page, facts, index, step)?;
    }
    Ok(())
}

/// The next of 1, 2, 5 times a power of ten.
fn round_up(value: f64) -> f64 {
    let power = 10f64.powf(value.max(1e-6).log10().floor());
    power * [1.0, 2.0, 5.0, 10.0].into_iter().find(|nice| nice * power >= value - 1e-12).unwrap_or(10.0)
}

fn turn_table(
    page: &mut Page,
    facts: &Facts<'_>,
    (index, actuator): (usize, Actuator),
    step: f64,
) -> Result<(), ConesError> {
    let setup = facts.setup;
    let crystal = &setup.crystals[index];
    let cross = actuator == Actuator::CrossTilt;
    let key = if cross { "cross tilt" } else { "tilt" };
    let now = if cross { crystal.orientation.cross_tilt } else { crystal.orientation.tilt }.degrees();
    let stage = setup.stage.filter(|_| index == 0 && !cross);
    let (scale, screw) = (stage.filter(|s| s.zero.is_some()), stage.filter(|s| s.per_turn.is_some()));
    let which = which(setup, index);
    let mut header = vec![format!("{key} of {which}")];
    if scale.is_some() {
        header.push("stage reading".into());
    }
    if screw.is_some() {
        header.push("screw from back-reflection".into());
    }
    header.push("reflected spot 1000 mm before it".into());
    header.extend(radius_names(facts, index));
    let mut rows = Vec::new();
    for n in -4..=4 {
        let turn = Angle::from_degrees(now + step * f64::from(n));
        let mut crystals = setup.crystals.clone();
        match cross {
            true => crystals[index].orientation.cross_tilt = turn,
            false => crystals[index].orientation.tilt = turn,
        }
        let mut row = vec![deg(turn.si(), 2)];
        if let Some(reading) = scale.and_then(|s| s.reading(turn)) {
            row.push(format!("{} deg", fixed(reading.degrees(), 2)));
        }
        if let Some(turns) = screw.and_then(|s| s.turns(turn)) {
            row.push(format!("{} turns", signed(turns, 2)));
        }
        row.push(spot_words(&crystals[index], Length::metres(1.0)));
        row.extend(radii(facts, &crystals, index)?);
        rows.push(row);
    }
    page.text(format!(
        "Rings against {key} of {which} (more {key}: {}). A ring that fits another line tells by how much {key}, cut or \
         wavelength ({}) are off.",
        room_words(crystal, actuator, Angle::from_degrees(1.0)).replace(" by 1 deg", ""),
        nm(facts.photons.pump)
    ));
    page.blocks.push(Block::Table(header, rows));
    Ok(())
}

fn temperature_table(page: &mut Page, facts: &Facts<'_>, index: usize, step: f64) -> Result<(), ConesError> {
    let setup = facts.setup;
    let which = which(setup, index);
    let mut header = vec![format!("temperature of {which}")];
    header.extend(radius_names(facts, index));
    let mut rows = Vec::new();
    for n in -4..=4 {
        let mut crystals = setup.crystals.clone();
        let set = Temperature::celsius(crystals[index].temperature.degc() + step * f64::from(n));
        crystals[index].temperature = set;
        // beyond the range of the indices there is no line
        let Ok(radii) = radii(facts, &crystals, index) else { continue };
        rows.push(std::iter::once(set.to_string()).chain(radii).collect());
    }
    page.text(format!("Rings against the temperature of {which}, which tunes it too."));
    page.blocks.push(Block::Table(header, rows));
    Ok(())
}

fn radius_names(facts: &Facts<'_>, index: usize) -> Vec<String> {
    let own = facts.cones.rings.iter().filter(|row| row.crystal == index);
    own.map(|row| format!("{}: radius in mm", ring_name(facts.setup, row))).collect()
}

/// Of the rings of one crystal, mm.
fn radii(facts: &Facts<'_>, crystals: &[Crystal], index: usize) -> Result<Vec<String>, ConesError> {
    let found = rings(facts.setup, crystals)?;
    let own = found.rings.iter().filter(|row| row.crystal == index);
    let radius = |row: &RingRow| match &row.ring {
        Ok(ring) => fixed(ring.circle().1 * facts.setup.screen.mm(), 1),
        Err(_) => "none".into(),
    };
    Ok(own.map(radius).collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn steps_of_tables_are_round() {
        for (value, round) in [(0.25, 0.5), (0.994, 1.0), (3.1, 5.0), (12.5, 20.0), (1.0, 1.0)] {
            assert!((round_up(value) - round).abs() < 1e-9, "{value}");
        }
    }
}

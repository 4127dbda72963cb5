//! Settings without a ring: what begins to give one.

use crate::job::Setup;
use crate::matching::{Actuator, Cones, RingRow, Status, Target, Tuning, opening_turn, tune};
use crate::optics::Crystal;
use crate::quantity::Angle;

use super::angles::{fixed, signed};
use super::cones::ring_words;
use super::conventions::room_words;

/// What begins to give a ring.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Opening {
    /// What is changed.
    pub actuator: Actuator,
    /// To this: radians or degrees Celsius.
    pub setting: f64,
    /// From the present setting, in the same unit.
    pub change: f64,
}

/// For each ring; empty where there is a ring or nothing gives one.
pub type Advice = Vec<Opening>;

/// The smallest changes at which each missing ring begins as a point: of the tuning turn, else of the other one, and of the
/// temperature where no turn serves or the crystal is poled.
#[must_use]
pub fn advice(setup: &Setup, cones: &Cones) -> Vec<Advice> {
    let of = |row: &RingRow| {
        if row.status != Status::NoPhaseMatching {
            return Vec::new();
        }
        let crystal = &setup.crystals[row.crystal];
        let orientation = &crystal.orientation;
        let first = opening_turn(crystal, row.photons, row.roles).ok().flatten().map(|(actuator, change)| {
            let cross = actuator == Actuator::CrossTilt;
            let now = if cross { orientation.cross_tilt } else { orientation.tilt };
            Opening { actuator, setting: now.si() + change, change }
        });
        let asked = |actuator: Actuator, now: f64| {
            let setting = nearest(setup, crystal, row, actuator)?;
            Some(Opening { actuator, setting, change: setting - now })
        };
        let turn = first
            .or_else(|| asked(Actuator::CrossTilt, orientation.cross_tilt.si()))
            .or_else(|| asked(Actuator::Tilt, orientation.tilt.si()));
        let heats = (turn.is_none() || crystal.poling.is_some()) && crystal.set().has_thermo_optics();
        let heat = heats.then(|| asked(Actuator::Temperature, crystal.temperature.degc())).flatten();
        turn.into_iter().chain(heat).collect()
    };
    cones.rings.iter().map(of).collect()
}

/// The setting nearest the present one at which the ring is a point.
fn nearest(setup: &Setup, crystal: &Crystal, row: &RingRow, actuator: Actuator) -> Option<f64> {
    let question = Tuning {
        crystal: crystal.clone(),
        photons: row.photons,
        fixed_signal: setup.signals.fixed(),
        interaction: setup.interaction,
        target: Target::Beamlike,
        actuator: Some(actuator),
    };
    Some(tune(&question).ok()?.turns.first()?.setting)
}

/// What a picture or sheet says where no ring is to be seen: by how much the best direction misses, whether there is light
/// all the same, and what gives a ring. `None` where there is one.
#[must_use]
pub fn darkness(setup: &Setup, cones: &Cones) -> Option<String> {
    if cones.rings.is_empty() || cones.rings.iter().any(|row| row.ring.is_ok()) {
        return None;
    }
    let mut said: Vec<(usize, String)> = Vec::new();
    for (row, advice) in cones.rings.iter().zip(advice(setup, cones)) {
        let sentence = ring_words(setup, row, &advice).split_whitespace().collect::<Vec<_>>().join(" ");
        // the rings of one crystal mostly miss alike: once is enough
        let tail = sentence.split_once(')').map_or("", |(_, tail)| tail).to_string();
        if !said.iter().any(|(crystal, s)| *crystal == row.crystal && s.ends_with(&tail)) {
            said.push((row.crystal, sentence));
        }
    }
    let all: Vec<String> = said.into_iter().map(|(_, sentence)| sentence).collect();
    Some(format!("There is no ring at this setting. {}", all.join(" ")))
}

/// Which way to turn, or how warm to make it, where there is no ring.
pub(super) fn turn_advice(setup: &Setup, index: usize, advice: &[Opening]) -> String {
    let words = |opening: &Opening| {
        let key = match opening.actuator {
            Actuator::Temperature => {
                return format!(
                    "A temperature of {} degC ({} K from now) begins to give a ring.",
                    fixed(opening.setting, 1),
                    signed(opening.change, 1)
                );
            }
            Actuator::CrossTilt => "cross tilt",
            _ => "tilt",
        };
        let turn = Angle::radians(opening.change);
        let words = room_words(&setup.crystals[index], opening.actuator, turn);
        format!("A {key} changed by {} deg begins to give a ring: {words}.", signed(turn.degrees(), 3))
    };
    let mut all: Vec<String> = advice.iter().map(words).collect();
    if advice.iter().all(|opening| opening.actuator == Actuator::Temperature) {
        all.insert(0, "No turn within 30 deg gives a ring.".into());
    }
    all.join(" ")
}

//! How far to turn (or heat, or tune the pump) to reach a target.

use super::Status;
use super::cones::ConesError;
use super::emission::{Emission, Photons, Triplet};
use super::interaction::{Interaction, Process, Roles};
use super::rig::{Knob, Rig};
use super::root::{Scan, roots};
use super::target::{Measure, Target, touching_reach};
use crate::frame::Direction;
use crate::material::MaterialError;
use crate::optics::Crystal;
use crate::quantity::Wavelength;

/// What is changed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Actuator {
    /// `crystal.tilt`.
    Tilt,
    /// `crystal.cross_tilt`.
    CrossTilt,
    /// `crystal.temperature`.
    Temperature,
    /// `pump.wavelength`.
    Pump,
}

/// A setting that meets the target.
#[derive(Debug, Clone)]
pub struct Turn {
    /// The setting in SI: radians, degrees Celsius or metres.
    pub setting: f64,
    /// The process whose signal the target is about.
    pub process: Process,
    /// Crystal at the setting.
    pub crystal: Crystal,
    /// Wavelengths at the setting.
    pub photons: Photons,
    /// Angle between the pump inside the crystal and Z, radians.
    pub theta_inside: f64,
    /// Azimuth of the pump inside the crystal, radians.
    pub phi_inside: f64,
    /// Geometry at the setting.
    pub measure: Measure,
    /// `Ok`, `Touching` or `NoNonlinearity`.
    pub status: Status,
}

/// Search half range of a turn, radians.
const TURN_RANGE: f64 = 30.0 * std::f64::consts::PI / 180.0;
/// Sampling interval of a turn, radians.
const TURN_STEP: f64 = 0.25 * std::f64::consts::PI / 180.0;

impl Actuator {
    fn knob(self) -> Knob {
        match self {
            Self::Tilt => Knob::Tilt,
            Self::CrossTilt => Knob::CrossTilt,
            Self::Temperature => Knob::Temperature,
            Self::Pump => Knob::Pump,
        }
    }

    /// The setting as it is now, in the unit of the knob.
    fn now(self, crystal: &Crystal, photons: &Photons) -> f64 {
        match self {
            Self::Tilt => crystal.orientation.tilt.si(),
            Self::CrossTilt => crystal.orientation.cross_tilt.si(),
            Self::Temperature => crystal.temperature.degc(),
            Self::Pump => photons.pump.si(),
        }
    }
}

/// A rig whose knob is an actuator, and where that stands now.
struct Bench {
    rig: Rig,
    actuator: Actuator,
    now: f64,
}

impl Bench {
    fn new(crystal: &Crystal, photons: Photons, triplet: Triplet, actuator: Actuator) -> Self {
        let now = actuator.now(crystal, &photons);
        let rig =
            Rig { crystal: crystal.clone(), photons, fixed_signal: None, triplet, knob: actuator.knob() };
        Self { rig, actuator, now }
    }

    fn scan(&self) -> Scan {
        match self.actuator {
            Actuator::Tilt | Actuator::CrossTilt => {
                let intervals = (2.0 * TURN_RANGE / TURN_STEP).round() as usize;
                Scan { from: self.now - TURN_RANGE, to: self.now + TURN_RANGE, intervals }
            }
            Actuator::Temperature => Scan { from: -50.0, to: 300.0, intervals: 175 },
            Actuator::Pump => Scan { from: 0.8 * self.now, to: 1.25 * self.now, intervals: 225 },
        }
    }

    /// Settings of all roots, nearest to the present one first.
    fn settings(&self, target: Target, roles: Roles) -> Vec<f64> {
        let mut found = match target {
            Target::Touching => [0, 1]
                .into_iter()
                .flat_map(|which| {
                    let mut reach = self.rig.along(move |e| touching_reach(e, roles).map(|r| r[which]));
                    roots(&mut reach, self.scan())
                })
                .collect(),
            _ => roots(&mut self.rig.along(|e| target.residual(e, roles)), self.scan()),
        };
        found.sort_by(|a, b| (a.x - self.now).abs().total_cmp(&(b.x - self.now).abs()));
        found.into_iter().map(|root| root.x).collect()
    }
}

/// The question of [`tune`].
#[derive(Debug, Clone)]
pub struct Tuning {
    /// The crystal as it stands now.
    pub crystal: Crystal,
    /// Wavelengths.
    pub photons: Photons,
    /// A signal wavelength that stays when the pump changes; else both photons keep their frequency ratio.
    pub fixed_signal: Option<Wavelength>,
    /// Polarizations.
    pub interaction: Interaction,
    /// Wanted emission.
    pub target: Target,
    /// What to change; `None` for the turn with the larger effect.
    pub actuator: Option<Actuator>,
}

/// The answer of [`tune`].
#[derive(Debug, Clone)]
pub struct Tuned {
    /// What was changed.
    pub actuator: Actuator,
    /// Settings that meet the target, nearest to the present one first.
    pub turns: Vec<Turn>,
    /// Geometry as the crystal stands now, of the first process.
    pub now: Measure,
}

/// All settings that meet the target, for every process of the interaction, nearest to the present one first.
///
/// # Errors
/// A wavelength or temperature outside the data set's range; an interaction that does not fit crystal or target.
pub fn tune(question: &Tuning) -> Result<Tuned, ConesError> {
    let Tuning { crystal, photons, fixed_signal, target, actuator, .. } = question;
    let triplet = Triplet::new(crystal, photons)?;
    let emission = Emission::new(crystal, *photons, &triplet);
    let processes = processes(&emission, question)?;
    let actuator = actuator.unwrap_or_else(|| tuning_turn(crystal, *photons, &triplet, processes[0]));
    let mut bench = Bench::new(crystal, *photons, triplet, actuator);
    bench.rig.fixed_signal = *fixed_signal;
    let mut turns = Vec::new();
    for roles in &processes {
        turns.extend(bench.settings(*target, *roles).into_iter().filter_map(|setting| {
            let (crystal, photons, emission) = bench.rig.at(setting)?;
            let (theta_inside, phi_inside) = emission.pump_inside(*roles)?;
            let measure = Measure::of(&emission, *roles);
            let process = emission.process(*roles);
            let dark =
                target.direction(&emission, *roles).and_then(|d| emission.is_dark(&crystal, *roles, d));
            let status = match dark {
                Some(true) => Status::NoNonlinearity,
                _ if measure.touching => Status::Touching,
                _ => Status::Ok,
            };
            Some(Turn { setting, process, crystal, photons, theta_inside, phi_inside, measure, status })
        }));
    }
    let now = bench.now;
    turns.sort_by(|a, b| (a.setting - now).abs().total_cmp(&(b.setting - now).abs()));
    Ok(Tuned { actuator, turns, now: Measure::of(&emission, processes[0]) })
}

/// One process of each two that are the same pair with the photons exchanged, or that meet in the same crossings.
fn processes(emission: &Emission, question: &Tuning) -> Result<Vec<Roles>, ConesError> {
    let all = emission.wanted(&question.crystal, question.interaction).map_err(ConesError::Description)?;
    let mut distinct: Vec<Roles> = Vec::new();
    for roles in all {
        let twice = distinct.contains(&roles.exchanged());
        let alike = question.photons.degenerate() || question.target.needs_two_rings();
        if !(twice && alike) {
            distinct.push(roles);
        }
    }
    if question.target.needs_two_rings() {
        distinct.retain(|roles| roles.signal != roles.idler);
        if distinct.is_empty() {
            return Err(ConesError::Description(
                "crossings need two photons of opposite polarization: use --type II, or ask for --half-angle"
                    .into(),
            ));
        }
    }
    Ok(distinct)
}

/// The setting of `actuator` nearest the present one at which the rings of `roles` and of the exchanged process touch:
/// steps outwards on both sides until the least or largest reach of one ring into the other changes sign.
#[must_use]
pub fn nearest_touch(
    crystal: &Crystal,
    photons: Photons,
    triplet: Triplet,
    roles: Roles,
    actuator: Actuator,
) -> Option<f64> {
    let bench = Bench::new(crystal, photons, triplet, actuator);
    let reach = bench.rig.along(|emission| touching_reach(emission, roles));
    let now = bench.now;
    let here = reach(now);
    let mut before = [here, here];
    let mut at = [now, now];
    while (at[0] - now).abs() < TURN_RANGE {
        let mut found: Option<f64> = None;
        for (side, step) in [TURN_STEP, -TURN_STEP].into_iter().enumerate() {
            let (from, to) = (at[side], at[side] + step);
            let there = reach(to);
            for which in 0..2 {
                let Some((a, b)) = before[side].zip(there).map(|(a, b)| (a[which], b[which])) else {
                    continue;
                };
                if a.is_sign_negative() != b.is_sign_negative() {
                    let touch = super::root::bracketed(|x| reach(x).map(|r| r[which]), from, to, a);
                    let nearer = |x: &f64| found.is_none_or(|best| (x - now).abs() < (best - now).abs());
                    found = touch.filter(nearer).or(found);
                }
            }
            (at[side], before[side]) = (to, there);
        }
        if found.is_some() {
            return found;
        }
    }
    None
}

/// The smallest change of the tuning turn at which a ring that is missing begins as a point: turn and change in radians.
///
/// # Errors
/// A wavelength or temperature outside the data set's range.
pub fn opening_turn(
    crystal: &Crystal,
    photons: Photons,
    roles: Roles,
) -> Result<Option<(Actuator, f64)>, MaterialError> {
    let triplet = Triplet::new(crystal, &photons)?;
    let actuator = tuning_turn(crystal, photons, &triplet, roles);
    let bench = Bench::new(crystal, photons, triplet, actuator);
    let nearest = bench.settings(Target::Beamlike, roles).first().copied();
    Ok(nearest.map(|setting| (actuator, setting - bench.now)))
}

/// The turn with the larger first-order effect on the mismatch of a pair along the pump: tilt, but in XY-plane cuts.
#[must_use]
pub fn tuning_turn(crystal: &Crystal, photons: Photons, triplet: &Triplet, roles: Roles) -> Actuator {
    const STEP: f64 = 1e-3;
    let effect = |actuator: Actuator| {
        let bench = Bench::new(crystal, photons, *triplet, actuator);
        let value = |setting: f64| {
            let (_, _, emission) = bench.rig.at(setting)?;
            let mismatch = emission.mismatch(roles)?;
            mismatch.at(mismatch.tangential(Direction::forward())).map(|s| s.value)
        };
        let now = bench.now;
        value(now + STEP).zip(value(now - STEP)).map_or(0.0, |(up, down)| (up - down).abs())
    };
    let (tilt, cross) = (effect(Actuator::Tilt), effect(Actuator::CrossTilt));
    // where neither tunes in first order rounding must not decide
    let noise = 1e-12 * photons.pump.wavenumber();
    if cross > tilt && cross > noise { Actuator::CrossTilt } else { Actuator::Tilt }
}

/// Why no setting meets the target, in a sentence.
#[must_use]
pub fn shortage(target: Target, actuator: Actuator, now: &Measure) -> String {
    let range = match actuator {
        Actuator::Tilt => "no tilt within 30 deg of the present one",
        Actuator::CrossTilt => "no cross tilt within 30 deg of the present one",
        Actuator::Temperature => "no temperature from -50 degC to 300 degC",
        Actuator::Pump => "no pump within 0.8 to 1.25 times the present one",
    };
    let value =
        |angle: Option<f64>| angle.map_or("not there".into(), |a| format!("{:.3} deg", a.to_degrees()));
    let now = match target {
        Target::HalfAngle(_) => format!("the half angle is {} now", value(now.half_angle)),
        Target::Crossing(_) => format!("the crossing is {} now", value(now.crossing)),
        Target::Separation(_) => format!("the separation is {} now", value(now.separation)),
        Target::Collinear | Target::Beamlike | Target::Touching => {
            format!("half angle and crossing are {} and {} now", value(now.half_angle), value(now.crossing))
        }
    };
    format!("{range} meets the target; {now}; try --by with another handle, or another cut (`twincone cut`)")
}

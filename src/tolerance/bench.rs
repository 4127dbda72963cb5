//! A crystal with deviations: what it shows, and the turn that brings the target back.

use nalgebra::{Rotation3, Vector2, Vector3};

use super::errors::Errors;
use crate::frame::{Direction, Lab};
use crate::matching::{
    Actuator, ConesError, Emission, Measure, Mismatch, Photons, Roles, Status, Target, Tuned, Tuning, curves,
    half_angle, meet, rings, tune,
};
use crate::matching::{Meeting, Traced, Triplet};
use crate::material::MaterialError;
use crate::optics::{Crystal, Indices, Polarization};
use crate::quantity::{Angle, Length, Wavelength};

/// A ring on the screen, in units of the distance, from where the pump should hit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RingPlace {
    /// Half angle of the cone, radians.
    pub half_angle: f64,
    /// Axis of the cone.
    pub axis: Direction,
    /// Centre of the circle that fits it best.
    pub centre: Vector2<f64>,
    /// Radius of that circle.
    pub radius: f64,
}

/// What can be seen of one geometry.
#[derive(Debug, Clone, PartialEq)]
pub struct Seen {
    /// The signal's ring, then that of the exchanged process where it differs.
    pub rings: Vec<Option<RingPlace>>,
    /// Mean polar angle of the crossings from the pump, radians.
    pub crossing: Option<f64>,
    /// Where the rings cross, seen from the screen's middle.
    pub points: Vec<Direction>,
    /// `Ok`, or why something is missing.
    pub status: Status,
}

/// The question, with what does not change from one deviation to the next.
#[derive(Debug, Clone)]
pub struct Bench {
    /// As it was ordered and set.
    pub crystal: Crystal,
    /// Wavelengths as stated.
    pub photons: Photons,
    /// A signal that stays when the pump changes.
    pub fixed_signal: Option<Wavelength>,
    /// The process whose signal the target is about.
    pub roles: Roles,
    /// Wanted emission.
    pub target: Target,
    /// The turn that repairs.
    pub actuator: Actuator,
    /// Distance of the screen.
    pub screen: Length,
    /// Turn that takes the crystal as ordered to the target, radians; `None` where none does.
    pub turn: Option<f64>,
    /// Directions at which the process should be matched.
    aims: Vec<Direction>,
    /// Axis of the target's ring, seen from the pump.
    axis: Direction,
    /// Slope of the mean mismatch at `aims` with the turn, rad/m per rad; and of the target's own residual.
    slopes: [f64; 2],
    tuning: Tuning,
}

/// A crystal with deviations, indices known.
pub(super) struct Stand {
    crystal: Crystal,
    photons: Photons,
    triplet: Triplet,
    actuator: Actuator,
    aim: [f64; 2],
}

impl Stand {
    /// The crystal turned from its setting by so much, radians.
    pub fn turned(&self, by: f64) -> Emission {
        let mut crystal = self.crystal.clone();
        let turn = match self.actuator {
            Actuator::CrossTilt => &mut crystal.orientation.cross_tilt,
            _ => &mut crystal.orientation.tilt,
        };
        *turn = Angle::radians(turn.si() + by);
        Emission::new(&crystal, self.photons, &self.triplet)
    }

    /// A direction seen from the pump, as it is seen from the screen's middle.
    fn seen_from_screen(&self, direction: Direction) -> Direction {
        let [h, v] = self.aim;
        if h == 0.0 && v == 0.0 {
            return direction;
        }
        let turn = Rotation3::from_axis_angle(&Vector3::y_axis(), h)
            * Rotation3::from_axis_angle(&Vector3::x_axis(), -v);
        let Lab(d) = direction.lab();
        Direction::new(Lab(turn * d))
    }
}

impl Bench {
    /// The same question about a crystal whose theta (radians) was ordered otherwise.
    ///
    /// # Errors
    /// As [`Self::new`].
    pub fn with_theta(&self, theta: f64) -> Result<Self, ConesError> {
        let mut question = self.tuning.clone();
        question.crystal.cut.theta = Angle::radians(theta);
        Self::new(&question, self.screen)
    }

    /// Data sets that a sample may follow, by index: the crystal's own and those that reach these wavelengths.
    #[must_use]
    pub fn datasets(&self) -> Vec<usize> {
        let own = self.crystal.dataset;
        let serves = |index: &usize| {
            *index == own || Triplet::new(&self.crystal.with_dataset(*index), &self.photons).is_ok()
        };
        (0..self.crystal.material.sets().len()).filter(serves).collect()
    }

    /// Of a question as [`tune`] takes it.
    ///
    /// # Errors
    /// What [`tune`] says; a target that is no geometry to keep.
    pub fn new(question: &Tuning, screen: Length) -> Result<Self, ConesError> {
        if matches!(question.target, Target::Beamlike | Target::Touching) {
            return Err(ConesError::Description(
                "tolerances are those of crossings, a separation, a half angle or pairs along the pump: pass --crossing, \
                 --separation, --half-angle or --collinear"
                    .into(),
            ));
        }
        let Tuned { actuator, turns, .. } = tune(question)?;
        let Tuning { crystal, photons, fixed_signal, target, .. } = question.clone();
        let emission = Emission::of(&crystal, photons)?;
        let mut wanted = emission.wanted(&crystal, question.interaction).map_err(ConesError::Description)?;
        if target.needs_two_rings() {
            wanted.retain(|roles| roles.signal != roles.idler);
        }
        let roles = *wanted.first().ok_or_else(|| {
            ConesError::Description(
                "crossings need two photons of opposite polarization: use --type II".into(),
            )
        })?;
        let now = |turn: &crate::matching::Turn| match actuator {
            Actuator::CrossTilt => turn.setting - crystal.orientation.cross_tilt.si(),
            _ => turn.setting - crystal.orientation.tilt.si(),
        };
        let turn = turns.iter().find(|t| t.process == emission.process(roles)).or(turns.first()).map(now);
        let tuning = Tuning { actuator: Some(actuator), ..question.clone() };
        let mut bench = Self {
            crystal,
            photons,
            fixed_signal,
            roles,
            target,
            actuator,
            screen,
            turn,
            aims: Vec::new(),
            axis: Direction::forward(),
            slopes: [0.0; 2],
            tuning,
        };
        bench.take_aim()?;
        Ok(bench)
    }

    /// Notes where the target's light goes, and how its conditions change with the turn there.
    fn take_aim(&mut self) -> Result<(), ConesError> {
        const STEP: f64 = 1e-4;
        let stand = self.stand(&Errors::default(), self.crystal.dataset, &mut Indices::default())?;
        let Some((stand, turn)) = stand.zip(self.turn) else { return Ok(()) };
        let emission = stand.turned(turn);
        let Some(mismatch) = emission.mismatch(self.roles) else { return Ok(()) };
        self.aims = match self.target {
            Target::Crossing(_) | Target::Separation(_) => crossing_points(&emission, self.roles),
            Target::HalfAngle(_) => {
                let ring = rings(&mismatch, emission.length).ok().and_then(|all| all.into_iter().next());
                self.axis = ring.as_ref().map_or(self.axis, |ring| ring.axis);
                ring.map(|ring| ring.curve.quarters().collect()).unwrap_or_default()
            }
            _ => vec![Direction::forward()],
        };
        let (above, below) = (stand.turned(turn + STEP), stand.turned(turn - STEP));
        let slope = |f: &dyn Fn(&Emission) -> Option<f64>| {
            f(&above).zip(f(&below)).map_or(0.0, |(a, b)| (a - b) / (2.0 * STEP))
        };
        self.slopes = [slope(&|e| self.mean_mismatch(e)), slope(&|e| self.target.residual(e, self.roles))];
        Ok(())
    }

    /// The crystal with deviations and its indices; `None` where photons do not fit the pump.
    pub(super) fn stand(
        &self,
        off: &Errors,
        dataset: usize,
        indices: &mut Indices,
    ) -> Result<Option<Stand>, MaterialError> {
        let crystal = match dataset == self.crystal.dataset {
            true => self.crystal.clone(),
            false => self.crystal.with_dataset(dataset),
        };
        // a set without thermo-optic terms has one temperature
        let off = match dataset != self.crystal.dataset && !crystal.set().has_thermo_optics() {
            true => off.with(super::Cause::Temperature, 0.0),
            false => *off,
        };
        let Some((crystal, photons)) = off.applied(&crystal, self.photons, self.fixed_signal) else {
            return Ok(None);
        };
        let triplet = Triplet::remembered(indices, &crystal, &photons)?;
        Ok(Some(Stand { crystal, photons, triplet, actuator: self.actuator, aim: off.aim() }))
    }

    /// Mean mismatch at the directions where the target's light should go: smooth in the turn also where there is no
    /// light, and zero near the turn that brings it.
    fn mean_mismatch(&self, emission: &Emission) -> Option<f64> {
        let mismatch = emission.mismatch(self.roles)?;
        let all: Option<Vec<f64>> =
            self.aims.iter().map(|d| mismatch.at(mismatch.tangential(*d)).map(|s| s.value)).collect();
        all.filter(|values| !values.is_empty()).map(|values| values.iter().sum::<f64>() / values.len() as f64)
    }

    /// The turn from the setting that brings the target back, radians: from the turn at which its directions are
    /// matched, by secants on the target itself; by a search over all turns where that fails.
    pub(super) fn repair(&self, stand: &Stand) -> Option<f64> {
        self.quick_repair(stand).or_else(|| {
            let tuning =
                Tuning { crystal: stand.crystal.clone(), photons: stand.photons, ..self.tuning.clone() };
            let turn = tune(&tuning).ok()?.turns.into_iter().next()?;
            let now = &stand.crystal.orientation;
            let now = if self.actuator == Actuator::CrossTilt { now.cross_tilt } else { now.tilt };
            Some(turn.setting - now.si())
        })
    }

    fn quick_repair(&self, stand: &Stand) -> Option<f64> {
        /// Beyond this another branch may be nearer, radians.
        const FAR: f64 = 0.35;
        /// A turn that changes by less is found, radians: where it begins, and at last.
        const ROUGH: f64 = 1e-5;
        const FINE: f64 = 1e-8;
        let matched = |x: f64| self.mean_mismatch(&stand.turned(x));
        let start = secant(matched, self.turn?, self.slopes[0], ROUGH)?;
        let found = match self.target {
            Target::Collinear => secant(matched, start, self.slopes[0], FINE)?,
            _ => {
                let residual = |x: f64| self.target.residual(&stand.turned(x), self.roles);
                secant(residual, start, self.slopes[1], FINE)?
            }
        };
        (found.abs() < FAR).then_some(found)
    }

    /// What is seen after a turn of so much from the setting, radians.
    pub(super) fn seen(&self, stand: &Stand, by: f64) -> Seen {
        let emission = stand.turned(by);
        let mut status = Status::Ok;
        let mut all = Vec::new();
        for roles in self.seen_roles() {
            match emission.mismatch(roles).map(|m| rings(&m, emission.length)) {
                Some(Ok(found)) => all.push(found.first().map(|ring| self.placed(stand, ring))),
                Some(Err(fault)) => {
                    status = fault.status;
                    all.push(None);
                }
                None => {
                    status = Status::TotalReflection;
                    all.push(None);
                }
            }
        }
        let crossing = Measure::of(&emission, self.roles).crossing;
        if status == Status::Ok && crossing.is_none() && self.target.needs_two_rings() {
            status = Status::Apart;
        }
        let points = crossing_points(&emission, self.roles);
        Seen {
            rings: all,
            crossing,
            points: points.into_iter().map(|d| stand.seen_from_screen(d)).collect(),
            status,
        }
    }

    fn placed(&self, stand: &Stand, ring: &crate::matching::Ring) -> RingPlace {
        let (centre, radius) = ring.circle();
        let axis = stand.seen_from_screen(ring.axis);
        let middle =
            stand.seen_from_screen(Direction::new(Lab(Vector3::new(centre.x, centre.y, 1.0)))).lab().0;
        let centre = Vector2::new(middle.x / middle.z, middle.y / middle.z);
        RingPlace { half_angle: ring.half_angle, axis, centre, radius }
    }

    /// The angle that the target is about, as it is now, radians.
    pub(super) fn angle(&self, emission: &Emission) -> Option<f64> {
        match self.target {
            Target::Collinear => half_angle(&emission.mismatch(self.roles)?),
            target => target.angle(emission, self.roles),
        }
    }

    /// Least Delta_k in any direction of either process, rad/m: positive where there is no light.
    pub(super) fn shortfall(&self, emission: &Emission) -> Option<f64> {
        let least = |roles: Roles| emission.mismatch(roles).as_ref().and_then(Mismatch::least);
        let own = least(self.roles);
        match self.roles.signal == self.roles.idler {
            true => own,
            false => own.into_iter().chain(least(self.roles.exchanged())).reduce(f64::min),
        }
    }

    /// Polarizations of the rings that [`Seen`] speaks of.
    ///
    /// # Errors
    /// Indices that are not to be had.
    pub fn ring_polarizations(&self) -> Result<Vec<Polarization>, MaterialError> {
        let signal = Emission::of(&self.crystal, self.photons)?.media.signal;
        Ok(self.seen_roles().map(|roles| signal.polarization(roles.signal)).collect())
    }

    /// The process of the target, and the exchanged one where it differs.
    fn seen_roles(&self) -> impl Iterator<Item = Roles> {
        let exchanged = (self.roles.signal != self.roles.idler).then(|| self.roles.exchanged());
        std::iter::once(self.roles).chain(exchanged)
    }

    /// Axis that the target's ring should have, seen from the pump.
    #[must_use]
    pub fn axis(&self) -> Direction {
        self.axis
    }

    /// Where the target's light should go, seen from the pump.
    #[must_use]
    pub fn aims(&self) -> &[Direction] {
        &self.aims
    }
}

/// Where the rings of a process and its exchanged one cross or touch.
fn crossing_points(emission: &Emission, roles: Roles) -> Vec<Direction> {
    if roles.signal == roles.idler {
        return Vec::new();
    }
    let met = || {
        let (one, two) = (emission.mismatch(roles)?, emission.mismatch(roles.exchanged())?);
        curves(&two).ok()?;
        let curve = curves(&one).ok()?.into_iter().next()?;
        Some(meet(Traced { mismatch: &one, curve: &curve }, &two))
    };
    let all = met().unwrap_or_default();
    all.into_iter().filter(|(_, how)| *how != Meeting::Coincide).map(|(c, _)| c.direction).collect()
}

/// A root by secants from a point and the slope there; `None` where it leaves the domain or does not settle.
fn secant(f: impl Fn(f64) -> Option<f64>, start: f64, slope: f64, near: f64) -> Option<f64> {
    const STEPS: usize = 12;
    let (mut x, mut slope) = (start, slope);
    let mut value = f(x)?;
    for _ in 0..STEPS {
        let step = -value / slope;
        // also where the slope is zero or the value is not a number
        if step.is_nan() || step.abs() > 1.0 {
            return None;
        }
        let next = x + step;
        if step.abs() <= near {
            return Some(next);
        }
        let there = f(next)?;
        slope = (there - value) / step;
        (x, value) = (next, there);
    }
    None
}

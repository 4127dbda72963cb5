//! Closed curves of phase-matched directions, traced about an axis inside them by azimuth: on each meridian the polar
//! angle psi where Delta_k = 0.
//!
//! A meridian is followed by t = tan(psi/2), in which directions are rational. One Newton step is taken on all
//! meridians at a time until none moves; what does not settle is searched for inside a bracket, from the neighbour.

use std::f64::consts::TAU;
use std::sync::LazyLock;

use nalgebra::Vector3;

use super::Status;
use super::count;
use super::mismatch::{Field, Mismatch, Stationary};
use super::seed::seeds;
use crate::frame::{Direction, Lab, Tangential};

/// Samples on a ring, equally spaced in azimuth about its axis.
pub const SAMPLES: usize = 72;

/// Samples on a convex curve where a ring is not known yet, or is only asked where another meets it: between them slopes
/// at both ends tell whether the other ring comes and goes.
pub(super) const FEW_SAMPLES: usize = SAMPLES / 3;

/// Cosine of the search region's half angle about the pump, 60 deg.
pub(super) const REGION: f64 = 0.5;

/// Relative steps of [`Curve::trace`] after which what is left is rounding, and after which it does not matter yet.
pub(super) const FINE: f64 = 1e-6;
pub(super) const ROUGH: f64 = 1e-3;

/// Why there is no ring.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RingFault {
    /// `NoPhaseMatching`, `OpenRing`, `TotalReflection` or `NotConverged`.
    pub status: Status,
    /// Least |Delta_k| of any direction where nothing matches, rad/m.
    pub shortfall: Option<f64>,
}

impl RingFault {
    pub(super) fn new(status: Status) -> Self {
        Self { status, shortfall: None }
    }
}

/// A closed curve of directions, traced by azimuth about an axis inside it.
#[derive(Debug, Clone)]
pub struct Curve {
    pub(super) frame: Meridians,
    /// t = tan(psi/2) at equally spaced azimuths, the first `count` of them.
    samples: [f64; SAMPLES],
    /// (d psi/d phi)/sin psi there: the tangent of the angle between the curve and a circle about the axis.
    turns: [f64; SAMPLES],
    count: usize,
}

/// Cosines and sines of equally spaced azimuths.
struct Azimuths<const N: usize> {
    cos: [f64; N],
    sin: [f64; N],
}

impl<const N: usize> Azimuths<N> {
    fn new() -> Self {
        let azimuth = |j: usize| TAU * j as f64 / N as f64;
        Self {
            cos: std::array::from_fn(|j| azimuth(j).cos()),
            sin: std::array::from_fn(|j| azimuth(j).sin()),
        }
    }
}

static ALL: LazyLock<Azimuths<SAMPLES>> = LazyLock::new(Azimuths::new);
static FEW: LazyLock<Azimuths<FEW_SAMPLES>> = LazyLock::new(Azimuths::new);

/// Cosines and sines of `count` azimuths, [`SAMPLES`] or [`FEW_SAMPLES`].
fn azimuths(count: usize) -> (&'static [f64], &'static [f64]) {
    if count == SAMPLES { (&ALL.cos, &ALL.sin) } else { (&FEW.cos, &FEW.sin) }
}

/// Axis and two directions across it: polar coordinates (psi, phi) of directions.
#[derive(Debug, Clone, Copy)]
pub(super) struct Meridians {
    pub axis: Vector3<f64>,
    pub across: [Vector3<f64>; 2],
}

impl Meridians {
    /// Azimuth 0 lies towards lab +x as seen from the axis, 90 deg towards +y.
    fn about(axis: Vector3<f64>) -> Self {
        let first = (Vector3::x() - axis * axis.x).normalize();
        Self { axis, across: [first, axis.cross(&first)] }
    }

    /// As the face of a crystal sees them.
    fn on_face(&self, mismatch: &Mismatch) -> Fan {
        let [first, second] = &self.across;
        Fan {
            axis: mismatch.on_face(&self.axis),
            across: [mismatch.on_face(first), mismatch.on_face(second)],
        }
    }

    fn point(&self, t: f64, (cos, sin): (f64, f64)) -> Vector3<f64> {
        let (along, out) = polar(t);
        self.axis * along + (self.across[0] * cos + self.across[1] * sin) * out
    }
}

/// cos psi and sin psi of t = tan(psi/2).
#[inline(always)]
fn polar(t: f64) -> (f64, f64) {
    let w = 2.0 / (1.0 + t * t);
    (w - 1.0, t * w)
}

/// Meridians on a face: tangential wave vectors of the signal (rad/m) and the component along the normal.
#[derive(Debug, Clone, Copy)]
struct Fan {
    axis: Vector3<f64>,
    across: [Vector3<f64>; 2],
}

/// A place on a meridian.
struct Place {
    q: Tangential,
    /// dq/dpsi
    out: Tangential,
    /// dq/dphi divided by sin psi
    round: Tangential,
    sin: f64,
    /// Component of the direction along the exit normal.
    forward: f64,
}

impl Fan {
    #[inline(always)]
    fn place(&self, t: f64, (cos, sin): (f64, f64)) -> Place {
        let ([a, b], axis) = (&self.across, &self.axis);
        let (along, out) = polar(t);
        // the direction across the axis, towards the azimuth
        let (u, v, w) = (a.x * cos + b.x * sin, a.y * cos + b.y * sin, a.z * cos + b.z * sin);
        Place {
            q: Tangential { u: axis.x * along + u * out, v: axis.y * along + v * out },
            out: Tangential { u: u * along - axis.x * out, v: v * along - axis.y * out },
            round: Tangential { u: b.x * cos - a.x * sin, v: b.y * cos - a.y * sin },
            sin: out,
            forward: axis.z * along + w * out,
        }
    }

    /// One step towards Delta_k = `level` on each meridian, where Delta_k = `middle` on the axis. Steps are relative,
    /// and not a number where the way out does not lead upwards.
    #[inline(always)]
    fn step(&self, field: &impl Field, [level, middle]: [f64; 2], curve: Advance<'_>) {
        let count = curve.t.len();
        let (cos, sin) = azimuths(count);
        let (cos, sin, turns, steps) =
            (&cos[..count], &sin[..count], &mut curve.turns[..count], &mut curve.steps[..count]);
        for j in 0..count {
            let t = curve.t[j];
            let place = self.place(t, (cos[j], sin[j]));
            let here = field.sample(place.q);
            let rise = here.slope[0] * place.out.u + here.slope[1] * place.out.v;
            let swing = here.slope[0] * place.round.u + here.slope[1] * place.round.v;
            // t f' = sin psi df/dpsi
            let inverse = 1.0 / (rise * place.sin);
            // Newton with the bend of the parabola through the value on the axis, t -> t - (f/f')(1 + f f''/(2 f'^2)):
            // with y = f/(t f') and y_0 = (f(0) - f)/(t f'),  f f''/(2 f'^2) = y (1 + y_0)
            let y = (here.value - level) * inverse;
            let y0 = (middle - here.value) * inverse;
            let step = y * (1.0 + y * (1.0 + y0));
            let upwards = rise > 0.0 && place.forward > 0.0;
            steps[j] = if upwards { step } else { f64::NAN };
            curve.t[j] = t - t * step;
            // Delta_k stays: psi' = -(dDelta_k/dphi)/(dDelta_k/dpsi)
            turns[j] = -swing * place.sin * inverse;
        }
        count::add(count);
    }
}

/// What [`Fan::step`] moves.
struct Advance<'a> {
    t: &'a mut [f64],
    turns: &'a mut [f64],
    steps: &'a mut [f64],
}

/// Where a meridian meets Delta_k = level.
#[derive(Debug, Clone, Copy)]
enum Hit {
    At {
        t: f64,
        turn: f64,
    },
    /// At this t the exit face, or the angle at which the partner is evanescent, comes first.
    Face(f64),
    Lost,
}

impl Mismatch {
    /// Where a meridian meets Delta_k = `level`, from a guess; Delta_k must be below it at psi = 0.
    fn meet(&self, fan: &Fan, azimuth: (f64, f64), level: f64, guess: f64) -> Hit {
        const STEPS: usize = 80;
        let (mut low, mut high) = (0.0, f64::INFINITY);
        let mut t = if guess.is_finite() && guess > 0.0 { guess } else { 1e-3 };
        let (mut blocked, mut turn) = (false, 0.0);
        for _ in 0..STEPS {
            let place = fan.place(t, azimuth);
            let mut next = f64::NAN;
            match (place.forward > 0.0).then(|| self.at(place.q)).flatten() {
                Some(here) => {
                    let value = here.value - level;
                    if value >= 0.0 {
                        (high, blocked) = (t, false);
                    } else {
                        low = t;
                    }
                    let rise = here.slope[0] * place.out.u + here.slope[1] * place.out.v;
                    turn = -(here.slope[0] * place.round.u + here.slope[1] * place.round.v) / rise;
                    // dpsi/dt = sin psi/t
                    next = t - value * t / (rise * place.sin);
                    // Newton squares the relative error: after a step this small the next would be below rounding
                    if (next - t).abs() <= 1e-8 * t {
                        return Hit::At { t: next, turn };
                    }
                }
                None => (high, blocked) = (t, true),
            }
            if !(next > low && next < high) {
                next = if high.is_finite() { 0.5 * (low + high) } else { 2.0 * t };
            }
            if (next - t).abs() <= 2.0 * f64::EPSILON * t {
                return if blocked { Hit::Face(high) } else { Hit::At { t: next, turn } };
            }
            t = next;
        }
        if blocked {
            Hit::Face(high)
        } else if high - low < 1e-9 {
            Hit::At { t, turn }
        } else {
            Hit::Lost
        }
    }
}

/// The curves of all rings, each traced about the direction where its mismatch is least: all that crossings need.
///
/// # Errors
/// As [`rings`](super::rings).
pub fn curves(mismatch: &Mismatch) -> Result<Vec<Curve>, RingFault> {
    all(&seeds(mismatch)?, |seed| Curve::about(mismatch, seed, FINE)?.within_region())
}

/// What can be made of the seeds; the fault of one where there is nothing.
pub(super) fn all<T>(
    seeds: &[Stationary],
    mut make: impl FnMut(&Stationary) -> Result<T, RingFault>,
) -> Result<Vec<T>, RingFault> {
    let mut found = Vec::with_capacity(seeds.len());
    let mut fault = None;
    for seed in seeds {
        match make(seed) {
            Ok(ring) => found.push(ring),
            Err(why) => fault = Some(why),
        }
    }
    match fault {
        Some(why) if found.is_empty() => Err(why),
        _ => Ok(found),
    }
}

impl Curve {
    /// The curve about a seed, traced from there; a point where the mismatch is zero at the seed itself.
    pub(super) fn about(mismatch: &Mismatch, seed: &Stationary, tolerance: f64) -> Result<Self, RingFault> {
        let count = if mismatch.is_convex() { FEW_SAMPLES } else { SAMPLES };
        let Some(start) = mismatch.direction(seed.q) else {
            return Err(RingFault::new(Status::TotalReflection));
        };
        let frame = Meridians::about(start.lab().0);
        let mut curve = Self { frame, samples: [0.0; SAMPLES], turns: [0.0; SAMPLES], count };
        if seed.value.abs() > mismatch.rounding() {
            curve.guess(mismatch, seed);
            curve.trace(mismatch, tolerance)?;
        }
        Ok(curve)
    }

    /// The ellipse of the mismatch's curvature at the seed: Delta_0 + q.H q/2 = 0 with q = psi dq/dpsi.
    fn guess(&mut self, mismatch: &Mismatch, seed: &Stationary) {
        let fan = self.frame.on_face(mismatch);
        let [uu, uv, vv] = seed.hessian;
        let (cos, sin) = azimuths(self.count);
        for (j, t) in self.samples[..self.count].iter_mut().enumerate() {
            let Tangential { u, v } = fan.place(0.0, (cos[j], sin[j])).out;
            let bend = uu * u * u + 2.0 * uv * u * v + vv * v * v;
            *t = 0.5 * (-2.0 * seed.value / bend).sqrt();
        }
    }

    /// Finds the curve on all meridians; the samples are guesses on entry. `tolerance` is [`FINE`] or [`ROUGH`].
    pub(super) fn trace(&mut self, mismatch: &Mismatch, tolerance: f64) -> Result<(), RingFault> {
        if mismatch.is_convex() {
            let guesses = self.samples;
            let fan = self.frame.on_face(mismatch);
            let t = &mut self.samples[..self.count];
            if settle(mismatch, &fan, 0.0, t, &mut self.turns[..self.count], tolerance) {
                return Ok(());
            }
            self.samples = guesses;
        }
        self.search(mismatch)
    }

    /// Meridian by meridian inside a bracket.
    fn search(&mut self, mismatch: &Mismatch) -> Result<(), RingFault> {
        let fan = self.frame.on_face(mismatch);
        // how far the last guess was off, to correct the next one
        let mut correction = 0.0;
        for j in 0..self.count {
            let guess = self.samples[j] + correction;
            match mismatch.meet(&fan, self.azimuth_cos_sin(j), 0.0, guess) {
                Hit::At { t, turn } => {
                    correction = t - self.samples[j];
                    (self.samples[j], self.turns[j]) = (t, turn);
                }
                Hit::Face(t) => {
                    // a ring that has left the search region is open, whatever it meets further out
                    let outside = self.frame.point(t, self.azimuth_cos_sin(j)).z < REGION;
                    let status = if outside { Status::OpenRing } else { Status::TotalReflection };
                    return Err(RingFault::new(status));
                }
                Hit::Lost => return Err(RingFault::new(Status::NotConverged)),
            }
        }
        Ok(())
    }

    /// The same curve traced about another axis, given by its components along the meridians' own axes.
    pub(super) fn recentred(
        &mut self,
        mismatch: &Mismatch,
        axis: &Vector3<f64>,
        tolerance: f64,
    ) -> Result<(), RingFault> {
        let Meridians { axis: old, across: [first, second] } = &self.frame;
        self.frame = Meridians::about((first * axis.x + second * axis.y + old * axis.z).normalize());
        let (cos, sin) = azimuths(self.count);
        for j in 0..self.count {
            // the old axis as seen from the new one: along the meridian, and across it
            let along = -(axis.x * cos[j] + axis.y * sin[j]);
            let across = axis.x * sin[j] - axis.y * cos[j];
            let t = self.samples[j];
            let (_, radius) = polar(t);
            // the point seen here was seen at phi - across/radius, and sqrt(radius^2 - across^2) away
            let turned = t * (1.0 - self.turns[j] * across / radius);
            self.samples[j] = turned + (along - 0.5 * across * across / radius) * t / radius;
        }
        self.trace(mismatch, tolerance)
    }

    /// Three samples for each one, by cubic interpolation, then traced.
    pub(super) fn refined(&mut self, mismatch: &Mismatch) -> Result<(), RingFault> {
        const STEP: f64 = TAU / FEW_SAMPLES as f64;
        let (few, turns) = (self.samples, self.turns);
        self.count = SAMPLES;
        for j in 0..FEW_SAMPLES {
            let next = (j + 1) % FEW_SAMPLES;
            let ends = [[few[j], few[j] * turns[j]], [few[next], few[next] * turns[next]]];
            self.samples[3 * j] = few[j];
            self.samples[3 * j + 1] = cubic(ends, STEP, 1.0 / 3.0);
            self.samples[3 * j + 2] = cubic(ends, STEP, 2.0 / 3.0);
        }
        self.trace(mismatch, FINE)
    }

    /// The curve, if all of it lies in the search region.
    pub(super) fn within_region(self) -> Result<Self, RingFault> {
        let outside = (0..self.count).any(|j| self.vector(j).z < REGION);
        if outside { Err(RingFault::new(Status::OpenRing)) } else { Ok(self) }
    }

    /// Whether it is a point, traced as such.
    pub(super) fn is_point(&self) -> bool {
        self.samples[0] == 0.0
    }

    /// Number of samples.
    pub(super) fn count(&self) -> usize {
        self.count
    }

    /// tan(psi/2) at the samples.
    pub(super) fn half_tangents(&self) -> &[f64] {
        &self.samples[..self.count]
    }

    /// (d psi/d phi)/sin psi at the samples.
    pub(super) fn turns(&self) -> &[f64] {
        &self.turns[..self.count]
    }

    /// Components (sin psi cos phi, sin psi sin phi, 1 - cos psi) of the samples.
    pub(super) fn local(&self) -> impl Iterator<Item = Vector3<f64>> + Clone {
        let (cos, sin) = azimuths(self.count);
        self.half_tangents().iter().zip(cos.iter().zip(sin)).map(|(t, (cos, sin))| {
            let out = 2.0 * t / (1.0 + t * t);
            Vector3::new(out * cos, out * sin, out * t)
        })
    }

    /// Four directions a quarter turn apart, off the planes of symmetry.
    pub(super) fn quarters(&self) -> impl Iterator<Item = Direction> {
        let quarter = self.count / 4;
        (0..4).map(move |n| self.direction(quarter * n + quarter / 3))
    }

    /// Azimuth of sample j, radians.
    pub(super) fn azimuth(&self, j: usize) -> f64 {
        TAU * j as f64 / self.count as f64
    }

    fn azimuth_cos_sin(&self, j: usize) -> (f64, f64) {
        let (cos, sin) = azimuths(self.count);
        (cos[j % self.count], sin[j % self.count])
    }

    /// Direction of the sample at azimuth 360 deg j/72 (of a ring) about the axis, from +x towards +y.
    #[must_use]
    pub fn direction(&self, j: usize) -> Direction {
        Direction::new(Lab(self.vector(j)))
    }

    pub(super) fn vector(&self, j: usize) -> Vector3<f64> {
        self.frame.point(self.samples[j % self.count], self.azimuth_cos_sin(j))
    }

    /// The signal's tangential wave vector at the samples, rad/m.
    pub(super) fn tangential(&self, mismatch: &Mismatch) -> impl Iterator<Item = Tangential> {
        let fan = self.frame.on_face(mismatch);
        (0..self.count).map(move |j| fan.place(self.samples[j], self.azimuth_cos_sin(j)).q)
    }

    /// The point of the curve at an azimuth about its axis (radians); `mismatch` must be the one it was traced with.
    #[must_use]
    pub fn at(&self, mismatch: &Mismatch, phi: f64) -> Option<Direction> {
        self.radius(mismatch, phi).map(|(t, _)| Direction::new(Lab(self.frame.point(t, cos_sin(phi)))))
    }

    /// tan(psi/2) and (d psi/d phi)/sin psi at an azimuth.
    pub(super) fn radius(&self, mismatch: &Mismatch, phi: f64) -> Option<(f64, f64)> {
        let fan = self.frame.on_face(mismatch);
        match mismatch.meet(&fan, cos_sin(phi), 0.0, self.between(phi)) {
            Hit::At { t, turn } => Some((t, turn)),
            Hit::Face(_) | Hit::Lost => None,
        }
    }

    /// tan(psi/2) at an azimuth between samples, by interpolation.
    fn between(&self, phi: f64) -> f64 {
        let place = (phi / TAU).rem_euclid(1.0) * self.count as f64;
        let (j, share) = (place as usize % self.count, place.fract());
        let next = (j + 1) % self.count;
        let (a, b) = (self.samples[j], self.samples[next]);
        let step = TAU / self.count as f64;
        cubic([[a, a * self.turns[j]], [b, b * self.turns[next]]], step, share)
    }

    /// Point and tangent (d point/d phi) at an azimuth about the axis.
    pub(super) fn point_and_tangent(
        &self,
        mismatch: &Mismatch,
        phi: f64,
    ) -> Option<(Vector3<f64>, Vector3<f64>)> {
        let (t, turn) = self.radius(mismatch, phi)?;
        Some((self.frame.point(t, cos_sin(phi)), self.tangent(t, turn, cos_sin(phi))))
    }

    /// Point and tangent at a sample.
    pub(super) fn sample(&self, j: usize) -> (Vector3<f64>, Vector3<f64>) {
        let j = j % self.count;
        (self.vector(j), self.tangent(self.samples[j], self.turns[j], self.azimuth_cos_sin(j)))
    }

    /// d point/d phi = sin psi (round + turn d point/d psi).
    fn tangent(&self, t: f64, turn: f64, (cos, sin): (f64, f64)) -> Vector3<f64> {
        let Meridians { axis, across: [first, second] } = &self.frame;
        let (along, out) = polar(t);
        let outward = first * cos + second * sin;
        let round = second * cos - first * sin;
        (round + (outward * along - axis * out) * turn) * out
    }

    /// tan(psi/2) on the meridians of `stride` samples where Delta_k = `level`, given Delta_k on the axis; `None` where
    /// one of them does not get there.
    pub(super) fn level(
        &self,
        mismatch: &Mismatch,
        [level, middle]: [f64; 2],
        stride: usize,
    ) -> Option<Level> {
        let fan = self.frame.on_face(mismatch);
        let count = self.count / stride;
        let mut level_curve = Level { t: [0.0; SAMPLES], count };
        let guesses = |level_curve: &mut Level| {
            for (k, t) in level_curve.t[..count].iter_mut().enumerate() {
                // the parabola about the axis: f = f_0 (1 - (t/t_0)^2)
                *t = self.samples[k * stride] * (1.0 - level / middle).sqrt();
            }
        };
        guesses(&mut level_curve);
        let mut turns = [0.0; SAMPLES];
        let smooth = mismatch.is_convex()
            && settle(mismatch, &fan, level, &mut level_curve.t[..count], &mut turns[..count], FINE);
        if !smooth {
            guesses(&mut level_curve);
            for (k, t) in level_curve.t[..count].iter_mut().enumerate() {
                match mismatch.meet(&fan, self.azimuth_cos_sin(k * stride), level, *t) {
                    Hit::At { t: found, .. } => *t = found,
                    Hit::Face(_) | Hit::Lost => return None,
                }
            }
        }
        Some(level_curve)
    }
}

/// Where meridians meet another level than a curve's.
pub(super) struct Level {
    t: [f64; SAMPLES],
    count: usize,
}

impl Level {
    /// tan(psi/2).
    pub fn half_tangents(&self) -> &[f64] {
        &self.t[..self.count]
    }
}

/// Steps on all meridians until none moves by more than `tolerance`; false where that does not come about at once.
fn settle(
    mismatch: &Mismatch,
    fan: &Fan,
    level: f64,
    t: &mut [f64],
    turns: &mut [f64],
    tolerance: f64,
) -> bool {
    const STEPS: usize = 8;
    // relative steps that need a bracket
    const TOO_FAR: f64 = 0.5;
    let axis = Tangential { u: fan.axis.x, v: fan.axis.y };
    let Some(middle) = mismatch.at(axis).map(|at| at.value) else { return false };
    let mut steps = [0.0; SAMPLES];
    let steps = &mut steps[..t.len()];
    for _ in 0..STEPS {
        let advance = Advance { t: &mut *t, turns: &mut *turns, steps: &mut *steps };
        match mismatch.quadrics() {
            Some(quadrics) => fan.step(&quadrics, [level, middle], advance),
            None => fan.step(mismatch, [level, middle], advance),
        }
        // written so that what is not a number is neither
        let within = |limit: f64| steps.iter().all(|step| step.abs() <= limit);
        if within(tolerance) {
            return t.iter().all(|t| *t > 0.0);
        }
        if !within(TOO_FAR) {
            return false;
        }
    }
    false
}

/// Cubic through values and slopes [f, f'] at both ends of a step, at a share of it.
fn cubic([[a, da], [b, db]]: [[f64; 2]; 2], step: f64, x: f64) -> f64 {
    let y = 1.0 - x;
    a * y * y * (1.0 + 2.0 * x) + b * x * x * (1.0 + 2.0 * y) + step * x * y * (da * y - db * x)
}

fn cos_sin(phi: f64) -> (f64, f64) {
    let (sin, cos) = phi.sin_cos();
    (cos, sin)
}

//! Closed curves of phase-matched directions, traced about an axis inside them by azimuth: on each meridian the polar
//! angle psi where Delta_k = 0.
//!
//! One Newton step is taken on all meridians at a time until none moves; what does not settle is searched for inside a
//! bracket, from the neighbour.

use std::f64::consts::TAU;

use fearless_simd::dispatch;
use fearless_simd::prelude::*;
use nalgebra::Vector3;

use super::Status;
use super::fit::Moments;
use super::meridian::{FEW_SAMPLES, Fan, Hit, Meridians, SAMPLES, azimuths, cos_sin, polar, settle};
use super::mismatch::{Mismatch, Sample, Stationary};
use super::seed::seeds;
use crate::frame::{Direction, Lab, Tangential};
use crate::number::{self, LANES, Number, Wide, strided, wide};

/// Cosine of the search region's half angle about the pump, 60 deg.
pub(super) const REGION: f64 = 0.5;

/// Relative steps of [`Curve::trace`] after which what is left is rounding, and after which it does not matter yet. What
/// is left of a step d is about d^2 psi^2: the parabola that steps assume is off by psi^2.
pub(super) const FINE: f64 = 1e-6;
pub(super) const ROUGH: f64 = 1e-2;
/// For the width of a ring, which is told to 1e-8 of it.
const CLOSE: f64 = 3e-4;

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
    pub(super) samples: [f64; SAMPLES],
    /// (d psi/d phi)/sin psi there: the tangent of the angle between the curve and a circle about the axis.
    pub(super) turns: [f64; SAMPLES],
    count: usize,
}

/// The curves of all rings, each traced about the direction where its mismatch is least: all that crossings need.
///
/// # Errors
/// As [`rings`](super::rings).
pub fn curves(mismatch: &Mismatch) -> Result<Vec<Curve>, RingFault> {
    all(&seeds(mismatch)?, |seed| {
        let curve = Curve::about(mismatch, seed, FINE)?;
        curve.demand_region().map(|()| curve)
    })
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
    /// The curve of the partners of another one's photons, roughly, as a process has them with its photons exchanged:
    /// q_p - q lies opposite. `None` where it is not found from there.
    pub(super) fn of_partners(&self, mismatch: &Mismatch, exchanged: &Mismatch) -> Option<Self> {
        const EVERY: usize = SAMPLES / FEW_SAMPLES;
        if !mismatch.is_convex() || self.is_point() || self.is_coarse() {
            return None;
        }
        let axis = mismatch.partner(Direction::new(Lab(self.frame.axis)))?;
        let frame = Meridians::about(axis.lab().0);
        let scale = mismatch.k0_signal() / mismatch.k0_idler();
        let mut samples = [0.0; SAMPLES];
        for (j, t) in samples[..FEW_SAMPLES].iter_mut().enumerate() {
            *t = scale * self.samples[(j * EVERY + SAMPLES / 2) % SAMPLES];
        }
        let mut curve = Self { frame, samples, turns: [0.0; SAMPLES], count: FEW_SAMPLES };
        curve.trace(exchanged, ROUGH).ok()?;
        Some(curve)
    }

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
            let (t, turns) = (&mut self.samples[..self.count], &mut self.turns[..self.count]);
            let middle = mismatch.at(Tangential { u: fan.axis.x, v: fan.axis.y });
            if middle.is_some_and(|at| settle(mismatch, &fan, [0.0, at.value], t, turns, tolerance)) {
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

    /// The same curve traced about another axis, given by its components along the meridians' own axes; with all
    /// samples, or roughly with few.
    pub(super) fn recentred(
        &mut self,
        mismatch: &Mismatch,
        axis: &Vector3<f64>,
        all: bool,
    ) -> Result<(), RingFault> {
        self.shift(axis);
        match (self.is_coarse(), all) {
            (true, true) => self.refined(mismatch),
            (true, false) => self.trace(mismatch, ROUGH),
            (false, _) => self.trace(mismatch, FINE),
        }
    }

    /// The same curve about another axis, to second order in its distance.
    pub(super) fn shift(&mut self, axis: &Vector3<f64>) {
        self.frame = Meridians::about(self.frame.turned(axis));
        dispatch!(number::level(), simd => self.shift_wide(simd, axis));
    }

    #[inline(always)]
    fn shift_wide<S: Simd>(&mut self, simd: S, axis: &Vector3<f64>) {
        let (cos, sin) = azimuths(self.count);
        let (samples, turns) = (self.samples.as_chunks_mut::<LANES>().0, self.turns.as_chunks::<LANES>().0);
        let (cos, sin) = (cos.as_chunks::<LANES>().0, sin.as_chunks::<LANES>().0);
        for (((samples, turn), cos), sin) in samples.iter_mut().zip(turns).zip(cos).zip(sin) {
            let [t, turn, cos, sin] = [samples, turn, cos, sin].map(
                #[inline(always)]
                |from| Wide::simd_from(simd, *from),
            );
            // the old axis as seen from the new one: along the meridian, and across it
            let along = -(cos * axis.x + sin * axis.y);
            let across = sin * axis.x - cos * axis.y;
            // 1/sin psi and dt/dpsi
            let rate = (t * t + 1.0) * 0.5;
            let inverse = rate / t;
            // the point seen here was seen at phi - across/sin psi, and sqrt(sin^2 psi - across^2) away
            let turned = t * (-(turn * across * inverse) + 1.0);
            *samples = (turned + (along - across * across * inverse * 0.5) * rate).into();
        }
    }

    /// Whether it has fewer samples than a ring.
    pub(super) fn is_coarse(&self) -> bool {
        self.count < SAMPLES
    }

    /// Three samples for each one, by interpolation, then traced.
    fn refined(&mut self, mismatch: &Mismatch) -> Result<(), RingFault> {
        let mut around = [0.0; FEW_SAMPLES + 7];
        let few = &self.samples[..FEW_SAMPLES];
        around[..3].copy_from_slice(&few[FEW_SAMPLES - 3..]);
        around[3..FEW_SAMPLES + 3].copy_from_slice(few);
        around[FEW_SAMPLES + 3..].copy_from_slice(&few[..4]);
        self.count = SAMPLES;
        dispatch!(number::level(), simd => thirds(simd, &around, &mut self.samples));
        self.trace(mismatch, FINE)
    }

    /// Refuses a curve of which not all lies in the search region.
    pub(super) fn demand_region(&self) -> Result<(), RingFault> {
        // cos(theta + psi), with the axis at theta and the largest psi, bounds them all
        let [_, widest] = self.range();
        let (along, out) = polar(widest);
        let axis = &self.frame.axis;
        let far = axis.z * along - (axis.x * axis.x + axis.y * axis.y).sqrt() * out < REGION;
        let outside = far && (0..self.count).any(|j| self.vector(j).z < REGION);
        if outside { Err(RingFault::new(Status::OpenRing)) } else { Ok(()) }
    }

    /// Least and largest tan(psi/2) of the samples.
    pub(super) fn range(&self) -> [f64; 2] {
        number::range(self.half_tangents())
    }

    /// Samples after which, before the next, the curve turns in or out.
    pub(super) fn turning_samples(&self) -> impl Iterator<Item = usize> {
        let sign = |j: usize| self.turns[j].is_sign_negative();
        (0..self.count).filter(move |j| sign(*j) != sign(if j + 1 < self.count { j + 1 } else { 0 }))
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

    /// Of the samples' components (sin psi cos phi, sin psi sin phi, 1 - cos psi).
    pub(super) fn moments(&self) -> Moments {
        let (cos, sin) = azimuths(self.count);
        dispatch!(number::level(), simd => Moments::new(simd, self.count, #[inline(always)] |j| {
            let t = wide(simd, &self.samples, j);
            let out = (t * t + 1.0).reciprocal() * t * 2.0;
            [out * wide(simd, cos, j), out * wide(simd, sin, j), out * t]
        }))
    }

    /// The first so many samples, every `stride`-th, as points (x/z, y/z) on a screen across the pump.
    pub(super) fn on_screen(&self, stride: usize, x: &mut [f64; SAMPLES], y: &mut [f64; SAMPLES]) {
        dispatch!(number::level(), simd => self.on_screen_wide(simd, stride, x, y));
    }

    #[inline(always)]
    fn on_screen_wide<S: Simd>(
        &self,
        simd: S,
        stride: usize,
        x: &mut [f64; SAMPLES],
        y: &mut [f64; SAMPLES],
    ) {
        let Meridians { axis, across: [first, second] } = &self.frame;
        let (cos, sin) = azimuths(self.count);
        for j in (0..self.count / stride).step_by(LANES) {
            let [t, cos, sin] = [&self.samples[..], cos, sin].map(
                #[inline(always)]
                |from| strided(simd, from, j, stride),
            );
            let (along, out) = polar(t);
            let (cos, sin) = (cos * out, sin * out);
            let [dx, dy, dz] = [0, 1, 2].map(
                #[inline(always)]
                |i| along * axis[i] + cos * first[i] + sin * second[i],
            );
            let inverse = dz.reciprocal();
            (dx * inverse).store_slice(&mut x[j..j + LANES]);
            (dy * inverse).store_slice(&mut y[j..j + LANES]);
        }
    }

    /// Of the unit wave vectors inside at every `stride`-th sample, from that of the axis; that one.
    pub(super) fn inside(&self, mismatch: &Mismatch, stride: usize) -> (Moments, Vector3<f64>) {
        let fan = self.frame.on_face(mismatch);
        let (cos, sin) = azimuths(self.count);
        let unit = |q| mismatch.inside(q).map_or(Vector3::z(), |k| k.normalize());
        let middle = unit(Tangential { u: fan.axis.x, v: fan.axis.y });
        let count = self.count / stride;
        let moments = match mismatch.quadrics() {
            Some(field) => dispatch!(number::level(), simd => {
                Moments::new(simd, count, #[inline(always)] |j| {
                    let [t, cos, sin] = [&self.samples[..], cos, sin].map(
                        #[inline(always)]
                        |from| strided(simd, from, j, stride),
                    );
                    let q = fan.place(t, (cos, sin)).q;
                    let k_w = field.signal_height(q);
                    let inverse = (q.u * q.u + q.v * q.v + k_w * k_w).sqrt().reciprocal();
                    [q.u * inverse - middle.x, q.v * inverse - middle.y, k_w * inverse - middle.z]
                })
            }),
            None => {
                let mut off = [[0.0; SAMPLES]; 3];
                for j in 0..count {
                    let azimuth = (cos[j * stride], sin[j * stride]);
                    let from = unit(fan.place(self.samples[j * stride], azimuth).q) - middle;
                    (0..3).for_each(|i| off[i][j] = from[i]);
                }
                dispatch!(number::level(), simd => Moments::new(simd, count, #[inline(always)] |j| {
                    [wide(simd, &off[0], j), wide(simd, &off[1], j), wide(simd, &off[2], j)]
                }))
            }
        };
        (moments, middle)
    }

    /// Four directions a quarter turn apart, off the planes of symmetry.
    pub(crate) fn quarters(&self) -> impl Iterator<Item = Direction> {
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

    /// Whether every partner can leave the crystal.
    pub(super) fn partners_leave(&self, mismatch: &Mismatch) -> bool {
        self.partners_reach(mismatch) < 1.0 || self.tangential(mismatch).all(|q| mismatch.idler_leaves(q))
    }

    /// Whether every partner leaves within the search region, as far as a bound tells.
    pub(super) fn partners_stay_near(&self, mismatch: &Mismatch) -> bool {
        // 60 deg about the pump hold all that is 60 deg less the tilt about the normal
        let normal = mismatch.on_face(&Vector3::z()).z.min(1.0);
        let limit = (1.0 - REGION * REGION).sqrt() * normal - REGION * (1.0 - normal * normal).sqrt();
        self.partners_reach(mismatch) < limit
    }

    /// A bound of the sine of the angle between partners and the exit normal.
    fn partners_reach(&self, mismatch: &Mismatch) -> f64 {
        // no tangential wave vector is further from the axis' own than k0 times the chord 2 sin(psi/2)
        let [_, widest] = self.range();
        let chord = 2.0 * widest / (1.0 + widest * widest).sqrt();
        let axis = mismatch.on_face(&self.frame.axis);
        let idler = mismatch.pump() - Tangential { u: axis.x, v: axis.y };
        (idler.u.hypot(idler.v) + mismatch.k0_signal() * chord) / mismatch.k0_idler()
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

    /// Direction at an azimuth, by interpolation between samples.
    pub(super) fn between_samples(&self, phi: f64) -> Vector3<f64> {
        self.frame.point(self.between(phi), cos_sin(phi))
    }

    /// Azimuth of a direction about the axis, in [0, 2 pi), and the sine of its angle to the axis.
    pub(super) fn azimuth_of(&self, d: &Vector3<f64>) -> (f64, f64) {
        let [x, y] = self.frame.across.map(|across| across.dot(d));
        (y.atan2(x).rem_euclid(TAU), x.hypot(y))
    }

    /// Sine of the first sample's angle to the axis.
    pub(super) fn size(&self) -> f64 {
        polar(self.samples[0]).1
    }

    /// tan(psi/2) at an azimuth between samples, by interpolation.
    fn between(&self, phi: f64) -> f64 {
        let place = (phi / TAU).rem_euclid(1.0) * self.count as f64;
        let (j, share) = (place as usize % self.count, place.fract());
        let next = (j + 1) % self.count;
        let (a, b) = (self.samples[j], self.samples[next]);
        let step = TAU / self.count as f64;
        // near both, should the curve jump between them
        let guess = cubic([[a, a * self.turns[j]], [b, b * self.turns[next]]], step, share);
        guess.max(0.9 * a.min(b)).min(1.1 * a.max(b))
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
        level: f64,
        middle: &Sample,
        stride: usize,
    ) -> Option<Level> {
        let fan = self.frame.on_face(mismatch);
        let count = self.count / stride;
        let mut level_curve = Level { t: [0.0; SAMPLES], count };
        let t = &mut level_curve.t[..count];
        let guesses = |t: &mut [f64]| {
            dispatch!(number::level(), simd => self.guess_level(simd, &fan, level, middle, stride, t));
        };
        guesses(t);
        let mut turns = [0.0; SAMPLES];
        let smooth = mismatch.is_convex()
            && settle(mismatch, &fan, [level, middle.value], t, &mut turns[..count], CLOSE);
        if !smooth {
            guesses(t);
            for (k, t) in t.iter_mut().enumerate() {
                match mismatch.meet(&fan, self.azimuth_cos_sin(k * stride), level, *t) {
                    Hit::At { t: found, .. } => *t = found,
                    Hit::Face(_) | Hit::Lost => return None,
                }
            }
        }
        Some(level_curve)
    }

    /// The parabola through value and slope on the axis and the curve at t_0: with s = t/t_0 and G = t_0 df/dt,
    /// f_0 + G s - (f_0 + G) s^2 = level.
    #[inline(always)]
    fn guess_level<S: Simd>(
        &self,
        simd: S,
        fan: &Fan,
        level: f64,
        middle: &Sample,
        stride: usize,
        guesses: &mut [f64],
    ) {
        let (cos, sin) = azimuths(self.count);
        let [a, b] = fan.across.map(|across| middle.slope[0] * across.x + middle.slope[1] * across.y);
        for (n, guesses) in guesses.as_chunks_mut::<LANES>().0.iter_mut().enumerate() {
            let [t, cos, sin] = [&self.samples[..], cos, sin].map(
                #[inline(always)]
                |from| strided(simd, from, n * LANES, stride),
            );
            // dpsi = 2 dt at t = 0
            let rise = (cos * a + sin * b) * t * 2.0;
            let down = rise + middle.value;
            let root = (rise * rise + down * (4.0 * (middle.value - level))).sqrt();
            *guesses = (t * (rise - root) / (down * 2.0)).into();
        }
    }

    /// Stationary value of tan(psi/2) between samples j and j + 1, at which the curve turns in and out; for a curve that
    /// a third of the samples would hold as well, by interpolation.
    pub(super) fn turning_value(&self, j: usize) -> f64 {
        let (here, next) = (j % self.count, (j + 1) % self.count);
        let x = self.turns[here] / (self.turns[here] - self.turns[next]);
        let Some(weights) = weights_at(x) else { return self.samples[if x < 0.5 { here } else { next }] };
        let (mut t, mut turn, mut all) = (0.0, 0.0, 0.0);
        for (k, weight) in weights.iter().enumerate() {
            let sample = (j + self.count + k - 5) % self.count;
            all += weight;
            t += weight * self.samples[sample];
            turn += weight * self.turns[sample];
        }
        let (t, turn) = (t / all, turn / all);
        // t' = t turn is nearly linear: up to x + d, where it is zero, t grows by half of t' d
        let step = TAU / self.count as f64;
        t + 0.5 * t * turn * step * turn / (self.turns[here] - self.turns[next])
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

/// Values at thirds between [`FEW_SAMPLES`] that have three neighbours before and four after them.
#[inline(always)]
fn thirds<S: Simd>(simd: S, around: &[f64; FEW_SAMPLES + 7], all: &mut [f64; SAMPLES]) {
    // Lagrange's weights of eight neighbours at a third of the way between the fourth and the fifth; those at two thirds
    // are the same from behind
    const WEIGHTS: [f64; 8] = weights(1.0 / 3.0);
    for j in (0..FEW_SAMPLES).step_by(LANES) {
        let mut between = [Wide::splat(simd, 0.0); 2];
        for k in 0..8 {
            let value = wide(simd, around, j + k);
            between[0] += value * WEIGHTS[k];
            between[1] += value * WEIGHTS[7 - k];
        }
        for l in 0..LANES {
            let three = &mut all[3 * (j + l)..][..3];
            three.copy_from_slice(&[around[j + l + 3], between[0][l], between[1][l]]);
        }
    }
}

/// Barycentric weights of values at -5, -4, ... 6 in the polynomial through them at x, up to a factor: (-1)^k (11 over k)
/// divided by the distance; `None` at 0 and 1.
fn weights_at(x: f64) -> Option<[f64; 12]> {
    const BINOMIALS: [f64; 12] =
        [1.0, -11.0, 55.0, -165.0, 330.0, -462.0, 462.0, -330.0, 165.0, -55.0, 11.0, -1.0];
    let on_sample = x.abs() < 1e-9 || (x - 1.0).abs() < 1e-9;
    (!on_sample).then(|| std::array::from_fn(|k| BINOMIALS[k] / (x + 5.0 - k as f64)))
}

/// Weights of values at -3, -2, ... 4 in the polynomial through them, at x.
const fn weights(x: f64) -> [f64; 8] {
    let mut all = [1.0; 8];
    let mut k = 0;
    while k < 8 {
        let mut m = 0;
        while m < 8 {
            if m != k {
                all[k] *= (x - (m as f64 - 3.0)) / (k as f64 - m as f64);
            }
            m += 1;
        }
        k += 1;
    }
    all
}

/// Cubic through values and slopes [f, f'] at both ends of a step, at a share of it.
pub(super) fn cubic([[a, da], [b, db]]: [[f64; 2]; 2], step: f64, x: f64) -> f64 {
    let y = 1.0 - x;
    a * y * y * (1.0 + 2.0 * x) + b * x * x * (1.0 + 2.0 * y) + step * x * y * (da * y - db * x)
}

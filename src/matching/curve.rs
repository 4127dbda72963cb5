//! Closed curves of phase-matched directions, traced about an axis inside them by azimuth: on each meridian the polar
//! angle psi where Delta_k = 0.
//!
//! One Newton step is taken on all meridians at a time until none moves; what does not settle is searched for inside a
//! bracket, from the neighbour.

use std::f64::consts::TAU;

use nalgebra::Vector3;

use super::Status;
use super::count;
use super::meridian::{FEW_SAMPLES, Hit, Meridians, SAMPLES, azimuths, cos_sin, polar, settle};
use super::mismatch::{Field, Mismatch, Stationary};
use super::seed::seeds;
use crate::frame::{Direction, Lab, Tangential};

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
        for (j, t) in self.samples[..self.count].iter_mut().enumerate() {
            // the old axis as seen from the new one: along the meridian, and across it
            let along = -(axis.x * cos[j] + axis.y * sin[j]);
            let across = axis.x * sin[j] - axis.y * cos[j];
            // 1/sin psi and dt/dpsi
            let rate = 0.5 * (1.0 + *t * *t);
            let inverse = rate / *t;
            // the point seen here was seen at phi - across/sin psi, and sqrt(sin^2 psi - across^2) away
            let turned = *t * (1.0 - self.turns[j] * across * inverse);
            *t = turned + (along - 0.5 * across * across * inverse) * rate;
        }
        self.trace(mismatch, tolerance)
    }

    /// Three samples for each one, by interpolation, then traced.
    pub(super) fn refined(&mut self, mismatch: &Mismatch) -> Result<(), RingFault> {
        // Lagrange's weights of eight neighbours at a third of the way between the fourth and the fifth; those at two
        // thirds are the same from behind
        const WEIGHTS: [f64; 8] = weights(1.0 / 3.0);
        let few = self.samples;
        let around = |j: usize, k: usize| few[(j + FEW_SAMPLES + k - 3) % FEW_SAMPLES];
        self.count = SAMPLES;
        for (j, t) in few[..FEW_SAMPLES].iter().enumerate() {
            self.samples[3 * j] = *t;
            self.samples[3 * j + 1] = (0..8).map(|k| WEIGHTS[k] * around(j, k)).sum();
            self.samples[3 * j + 2] = (0..8).map(|k| WEIGHTS[7 - k] * around(j, k)).sum();
        }
        self.trace(mismatch, FINE)
    }

    /// The curve, if all of it lies in the search region.
    pub(super) fn within_region(self) -> Result<Self, RingFault> {
        // cos(theta + psi), with the axis at theta and the largest psi, bounds them all
        let (along, out) = polar(self.half_tangents().iter().copied().fold(0.0, f64::max));
        let axis = &self.frame.axis;
        let far = axis.z * along - axis.x.hypot(axis.y) * out < REGION;
        let outside = far && (0..self.count).any(|j| self.vector(j).z < REGION);
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
        // no tangential wave vector is further from the axis' own than k0 times the chord 2 sin(psi/2)
        let widest = self.half_tangents().iter().copied().fold(0.0, f64::max);
        let chord = 2.0 * widest / (1.0 + widest * widest).sqrt();
        let axis = mismatch.on_face(&self.frame.axis);
        let idler = mismatch.pump() - Tangential { u: axis.x, v: axis.y };
        let far = idler.u.hypot(idler.v) + mismatch.k0_signal() * chord;
        far < mismatch.k0_idler() || self.tangential(mismatch).all(|q| mismatch.idler_leaves(q))
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

    /// What another mismatch is at the samples.
    pub(super) fn survey(&self, other: &Mismatch) -> [Along; SAMPLES] {
        let mut all = [Along::default(); SAMPLES];
        match other.quadrics() {
            Some(quadrics) => self.look(&quadrics, other, &mut all),
            None => self.look(other, other, &mut all),
        }
        all
    }

    #[inline(always)]
    fn look(&self, field: &impl Field, other: &Mismatch, all: &mut [Along; SAMPLES]) {
        let fan = self.frame.on_face(other);
        let (cos, sin) = azimuths(self.count);
        let square = other.k0_signal() * other.k0_signal();
        for (j, slot) in all[..self.count].iter_mut().enumerate() {
            let place = fan.place(self.samples[j], (cos[j], sin[j]));
            let here = field.sample(place.q);
            let [gu, gv] = here.slope;
            let swing = gu * place.round.u + gv * place.round.v;
            let rise = gu * place.out.u + gv * place.out.v;
            // the gradient k0 (g_u u + g_v v) less its part along the direction, d.gradient = g.q
            let inward = gu * place.q.u + gv * place.q.v;
            let across = square * (gu * gu + gv * gv) - inward * inward;
            *slot = Along {
                value: if place.forward > 0.0 { here.value } else { f64::NAN },
                slope: (swing + self.turns[j] * rise) * place.sin,
                scale: across.sqrt(),
            };
        }
        count::add(self.count);
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

/// Another mismatch along a curve.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Along {
    /// Delta_k of the other process, rad/m: negative inside the other ring.
    pub value: f64,
    /// Its change per radian of azimuth.
    pub slope: f64,
    /// Size of its gradient, rad/m per radian of direction: near the other ring, value/scale is the angle off it.
    pub scale: f64,
}

impl Along {
    /// Whether the other ring is nearer than an angle (radians).
    pub fn within(&self, angle: f64) -> bool {
        self.value.abs() < angle * self.scale
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

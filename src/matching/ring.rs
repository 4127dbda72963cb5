//! Rings: the closed curves of external directions on which a photon is phase matched.
//!
//! A ring is traced about an axis a by azimuth: on each meridian the polar angle psi where Delta_k = 0, by Newton from
//! the neighbour inside a bracket. The axis is that of the circular cone that fits best, min sum (d.a - cos alpha)^2,
//! and the samples are taken again at equal azimuths about it until it stays.

use std::f64::consts::{PI, TAU};

use nalgebra::{Matrix3, Vector2, Vector3};

use super::Status;
use super::mismatch::{Mismatch, Stationary};
use super::partner::HALF_MAXIMUM;
use crate::frame::{Direction, Lab, Tangential};

/// Samples on a ring, equally spaced in azimuth about its axis.
pub const SAMPLES: usize = 72;

/// Samples on a convex curve that is only asked where another ring meets it: between them slopes at both ends tell
/// whether the other ring comes and goes.
const FEW_SAMPLES: usize = 24;

/// Cosine of the search region's half angle about the pump, 60 deg.
const REGION: f64 = 0.5;

/// A closed curve of directions, traced by azimuth about an axis inside it.
#[derive(Debug, Clone)]
pub struct Curve {
    frame: Meridians,
    /// Polar angles at equally spaced azimuths, the first `count` of them.
    samples: [f64; SAMPLES],
    count: usize,
}

/// A ring and the cone that fits it.
#[derive(Debug, Clone)]
pub struct Ring {
    /// The curve, traced about the axis of the cone that fits it.
    pub curve: Curve,
    /// Axis of the best-fitting circular cone, outside.
    pub axis: Direction,
    /// Half angle of that cone, outside, radians.
    pub half_angle: f64,
    /// Least angle between axis and ring, outside, radians.
    pub least: f64,
    /// Largest angle between axis and ring, outside, radians.
    pub largest: f64,
    /// Half angle of the cone that fits the photon's wave vectors inside the crystal, radians.
    pub internal_half_angle: f64,
    /// Mean radial distance between the half-maximum points of sinc^2 at the crystal's length, radians; `None` where
    /// the inside is filled, or where a half-maximum point is beyond reach.
    pub thickness: Option<f64>,
    /// Whether sinc^2 stays above one half all the way to the axis.
    pub filled: bool,
    /// `Ok`, or `TotalReflection` where some partners cannot leave the crystal.
    pub status: Status,
}

/// Why there is no ring.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RingFault {
    /// `NoPhaseMatching`, `OpenRing`, `TotalReflection` or `NotConverged`.
    pub status: Status,
    /// Least |Delta_k| of any direction where nothing matches, rad/m.
    pub shortfall: Option<f64>,
}

impl RingFault {
    fn new(status: Status) -> Self {
        Self { status, shortfall: None }
    }
}

/// Axis and two directions across it: polar coordinates (psi, phi) of directions.
#[derive(Debug, Clone, Copy)]
struct Meridians {
    axis: Vector3<f64>,
    across: [Vector3<f64>; 2],
}

impl Meridians {
    /// Azimuth 0 lies towards lab +x as seen from the axis, 90 deg towards +y.
    fn about(axis: Vector3<f64>) -> Self {
        let first = (Vector3::x() - axis * axis.x).normalize();
        Self { axis, across: [first, axis.cross(&first)] }
    }

    fn outward(&self, phi: f64) -> Vector3<f64> {
        let (s, c) = phi.sin_cos();
        self.across[0] * c + self.across[1] * s
    }

    fn meridian(&self, phi: f64) -> Meridian {
        Meridian { axis: self.axis, outward: self.outward(phi) }
    }

    fn point(&self, psi: f64, phi: f64) -> Vector3<f64> {
        let (s, c) = psi.sin_cos();
        self.axis * c + self.outward(phi) * s
    }
}

/// A meridian on which a sheet of zeros is sought: direction as a function of psi.
struct Meridian {
    axis: Vector3<f64>,
    outward: Vector3<f64>,
}

/// Where a meridian meets Delta_k = level.
enum Hit {
    At(f64),
    /// At this polar angle the exit face, or the angle at which the partner is evanescent, comes first.
    Face(f64),
    Lost,
}

impl Mismatch {
    /// The polar angle on a meridian at which Delta_k = `level`, from a guess; Delta_k must be below it at psi = 0.
    fn meet(&self, meridian: &Meridian, level: f64, guess: f64) -> Hit {
        const STEPS: usize = 80;
        let (mut low, mut high) = (0.0, f64::INFINITY);
        let mut psi = if guess.is_finite() && guess > 0.0 { guess } else { 1e-3 };
        let mut blocked = false;
        for _ in 0..STEPS {
            let (sin, cos) = psi.sin_cos();
            let d = meridian.axis * cos + meridian.outward * sin;
            let mut next = f64::NAN;
            match self.towards(d) {
                Some(here) => {
                    let value = here.value - level;
                    if value >= 0.0 {
                        (high, blocked) = (psi, false);
                    } else {
                        low = psi;
                    }
                    let slope = here.gradient.dot(&(meridian.outward * cos - meridian.axis * sin));
                    next = psi - value / slope;
                    // Newton squares the relative error: after a step this small the next would be below rounding
                    if (next - psi).abs() <= 1e-8 * psi {
                        return Hit::At(next);
                    }
                }
                None => (high, blocked) = (psi, true),
            }
            if !(next > low && next < high) {
                next = if high.is_finite() { 0.5 * (low + high) } else { (2.0 * psi).min(PI) };
            }
            if (next - psi).abs() <= 2.0 * f64::EPSILON * psi {
                return if blocked { Hit::Face(high) } else { Hit::At(next) };
            }
            psi = next;
        }
        if blocked {
            Hit::Face(high)
        } else if high - low < 1e-9 {
            Hit::At(psi)
        } else {
            Hit::Lost
        }
    }
}

/// All rings of the signal of a process, for a crystal of `length` (m).
///
/// # Errors
/// The fault of the one ring that is not there, where there is none at all.
pub fn rings(mismatch: &Mismatch, length: f64) -> Result<Vec<Ring>, RingFault> {
    all(seeds(mismatch)?, |seed| Ring::fit(Curve::about(mismatch, &seed, SAMPLES)?, mismatch, length))
}

/// The curves of all rings, each traced about the direction where its mismatch is least: all that crossings need.
///
/// # Errors
/// As [`rings`].
pub fn curves(mismatch: &Mismatch) -> Result<Vec<Curve>, RingFault> {
    let count = if mismatch.is_convex() { FEW_SAMPLES } else { SAMPLES };
    all(seeds(mismatch)?, |seed| Curve::about(mismatch, &seed, count)?.within_region())
}

/// What can be made of the seeds; the fault of one where there is nothing.
fn all<T>(
    seeds: Vec<Stationary>,
    mut make: impl FnMut(Stationary) -> Result<T, RingFault>,
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

/// Minima of the mismatch with Delta_k < 0 about which rings lie: one where the mismatch is convex, else one for
/// each connected region of Delta_k < 0 on a grid over the search region.
fn seeds(mismatch: &Mismatch) -> Result<Vec<Stationary>, RingFault> {
    let central = mismatch.stationary(mismatch.along_pump());
    if mismatch.is_convex() {
        return match central {
            Some(seed) if seed.value < mismatch.rounding() => Ok(vec![seed]),
            Some(seed) if seed.smooth => {
                Err(RingFault { status: Status::NoPhaseMatching, shortfall: Some(seed.value) })
            }
            Some(_) | None => Err(RingFault::new(Status::NotConverged)),
        };
    }
    let mut seeds: Vec<Stationary> = Vec::new();
    for start in lowest_of_each_region(mismatch) {
        let Some(seed) = mismatch.stationary(start).filter(|s| s.value < mismatch.rounding()) else {
            continue;
        };
        let apart = |other: &Stationary| {
            (other.q.u - seed.q.u).hypot(other.q.v - seed.q.v) > 1e-6 * mismatch.k0_signal()
        };
        if seeds.iter().all(apart) {
            seeds.push(seed);
        }
    }
    if let Some(seed) = central.filter(|s| s.value < mismatch.rounding() && seeds.is_empty()) {
        seeds.push(seed);
    }
    if seeds.is_empty() {
        return Err(RingFault { status: Status::NoPhaseMatching, shortfall: central.map(|s| s.value) });
    }
    // the one nearest the pump first
    let pump = mismatch.along_pump();
    let away = |s: &Stationary| (s.q.u - pump.u).hypot(s.q.v - pump.v);
    seeds.sort_by(|a, b| away(a).total_cmp(&away(b)));
    Ok(seeds)
}

/// Grid points with the least Delta_k in each connected region of Delta_k < 0 (flood fill over four neighbours).
fn lowest_of_each_region(mismatch: &Mismatch) -> Vec<Tangential> {
    const SIDE: usize = 41;
    let place = |i: usize| 2.0 * i as f64 / (SIDE - 1) as f64 - 1.0;
    let k0 = mismatch.k0_signal();
    let at = |n: usize| Tangential { u: k0 * place(n % SIDE), v: k0 * place(n / SIDE) };
    let value = |n: usize| {
        let q = at(n);
        let inside = mismatch.direction(q).is_some_and(|d| d.lab().0.z >= REGION);
        inside.then(|| mismatch.at(q)).flatten().map(|s| s.value).filter(|v| *v < 0.0)
    };
    let mut below: Vec<Option<f64>> = (0..SIDE * SIDE).map(value).collect();
    let mut lowest = Vec::new();
    let mut queue = Vec::new();
    for start in 0..below.len() {
        let Some(first) = below[start].take() else { continue };
        let mut best = (first, start);
        queue.push(start);
        while let Some(n) = queue.pop() {
            let (column, row) = (n % SIDE, n / SIDE);
            let neighbours = [
                (column > 0).then(|| n - 1),
                (column + 1 < SIDE).then_some(n + 1),
                (row > 0).then(|| n - SIDE),
                (row + 1 < SIDE).then_some(n + SIDE),
            ];
            for m in neighbours.into_iter().flatten() {
                if let Some(value) = below[m].take() {
                    best = if value < best.0 { (value, m) } else { best };
                    queue.push(m);
                }
            }
        }
        lowest.push(at(best.1));
    }
    lowest
}

impl Curve {
    /// The curve about a seed, traced from there; a point where the mismatch is zero at the seed itself.
    fn about(mismatch: &Mismatch, seed: &Stationary, count: usize) -> Result<Self, RingFault> {
        let Some(start) = mismatch.direction(seed.q) else {
            return Err(RingFault::new(Status::TotalReflection));
        };
        if seed.value.abs() <= mismatch.rounding() {
            return Ok(Self { frame: Meridians::about(start.lab().0), samples: [0.0; SAMPLES], count });
        }
        // Delta_k ~ Delta_0 + curvature q^2/2 gives the first radius
        let radius = (-2.0 * seed.value / seed.curvature).sqrt() / mismatch.k0_signal();
        let mut curve = Self { frame: Meridians::about(start.lab().0), samples: [radius; SAMPLES], count };
        curve.trace(mismatch)?;
        Ok(curve)
    }

    /// The curve, if all of it lies in the search region.
    fn within_region(self) -> Result<Self, RingFault> {
        let outside = (0..self.count).any(|j| self.vector(j).z < REGION);
        if outside { Err(RingFault::new(Status::OpenRing)) } else { Ok(self) }
    }

    /// Traces again about the axis of the cone that fits best, until the axis stays.
    fn centred(mut self, mismatch: &Mismatch) -> Result<Self, RingFault> {
        const PASSES: usize = 20;
        if self.is_point() {
            return Ok(self);
        }
        for _ in 0..PASSES {
            let axis = axis_of(|j| self.vector(j), &self.frame.axis);
            if axis.cross(&self.frame.axis).norm() < 1e-9_f64.to_radians() {
                return Ok(self);
            }
            // radii about the old axis, corrected for its shift, are a good guess about the new one
            let shift = self.frame.axis - axis;
            self.frame = Meridians::about(axis);
            for j in 0..self.count {
                self.samples[j] += self.frame.outward(self.azimuth(j)).dot(&shift);
            }
            self.trace(mismatch)?;
        }
        Err(RingFault::new(Status::NotConverged))
    }

    fn is_point(&self) -> bool {
        self.samples[0] == 0.0
    }

    /// Polar angles at all azimuths; those there are guesses on entry.
    fn trace(&mut self, mismatch: &Mismatch) -> Result<(), RingFault> {
        // how far the last guess was off, to correct the next one
        let mut correction = 0.0;
        for j in 0..self.count {
            let guess = self.samples[j] + correction;
            match mismatch.meet(&self.frame.meridian(self.azimuth(j)), 0.0, guess) {
                Hit::At(psi) => {
                    correction = psi - self.samples[j];
                    self.samples[j] = psi;
                }
                Hit::Face(psi) => {
                    // a ring that has left the search region is open, whatever it meets further out
                    let outside = self.frame.point(psi, self.azimuth(j)).z < REGION;
                    let status = if outside { Status::OpenRing } else { Status::TotalReflection };
                    return Err(RingFault::new(status));
                }
                Hit::Lost => return Err(RingFault::new(Status::NotConverged)),
            }
        }
        Ok(())
    }

    /// Number of samples.
    pub(super) fn count(&self) -> usize {
        self.count
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

    /// Direction of the sample at azimuth 360 deg j/72 (of a ring) about the axis, from +x towards +y.
    #[must_use]
    pub fn direction(&self, j: usize) -> Direction {
        Direction::new(Lab(self.vector(j)))
    }

    pub(super) fn vector(&self, j: usize) -> Vector3<f64> {
        self.frame.point(self.samples[j % self.count], self.azimuth(j))
    }

    /// The point of the curve at an azimuth about its axis (radians); `mismatch` must be the one it was traced with.
    #[must_use]
    pub fn at(&self, mismatch: &Mismatch, phi: f64) -> Option<Direction> {
        self.radius(mismatch, phi).map(|psi| Direction::new(Lab(self.frame.point(psi, phi))))
    }

    fn radius(&self, mismatch: &Mismatch, phi: f64) -> Option<f64> {
        let nearest =
            (phi / TAU * self.count as f64).round().rem_euclid(self.count as f64) as usize % self.count;
        match mismatch.meet(&self.frame.meridian(phi), 0.0, self.samples[nearest]) {
            Hit::At(psi) => Some(psi),
            Hit::Face(_) | Hit::Lost => None,
        }
    }

    /// Point and tangent (d point/d phi) at an azimuth about the axis.
    pub(super) fn point_and_tangent(
        &self,
        mismatch: &Mismatch,
        phi: f64,
    ) -> Option<(Vector3<f64>, Vector3<f64>)> {
        let psi = self.radius(mismatch, phi)?;
        self.tangent(mismatch, psi, phi).map(|tangent| (self.frame.point(psi, phi), tangent))
    }

    /// Point and tangent at a sample.
    pub(super) fn sample(&self, mismatch: &Mismatch, j: usize) -> Option<(Vector3<f64>, Vector3<f64>)> {
        self.tangent(mismatch, self.samples[j], self.azimuth(j)).map(|tangent| (self.vector(j), tangent))
    }

    fn tangent(&self, mismatch: &Mismatch, psi: f64, phi: f64) -> Option<Vector3<f64>> {
        let gradient = mismatch.towards(self.frame.point(psi, phi))?.gradient;
        let (sin, cos) = psi.sin_cos();
        let outward = self.frame.outward(phi);
        let along_psi = outward * cos - self.frame.axis * sin;
        let along_phi = self.frame.axis.cross(&outward) * sin;
        // Delta_k stays zero: psi' = -(g.d_phi)/(g.d_psi)
        let psi_slope = -gradient.dot(&along_phi) / gradient.dot(&along_psi);
        Some(along_phi + along_psi * psi_slope)
    }
}

impl Ring {
    /// Fits the cone and looks at the details.
    fn fit(curve: Curve, mismatch: &Mismatch, length: f64) -> Result<Self, RingFault> {
        let curve = curve.centred(mismatch)?.within_region()?;
        let (least, largest) = if curve.is_point() { (0.0, 0.0) } else { extremes(mismatch, &curve) };
        // half of the maximum is not passed on the way in: Delta_k stays above it at the axis
        let half_width = 2.0 * HALF_MAXIMUM / length;
        let filled = mismatch.towards(curve.frame.axis).is_none_or(|at| at.value >= -half_width);
        let point = |j: usize| curve.vector(j);
        let inside = |j: usize| mismatch.inside(curve.direction(j)).map_or(Vector3::z(), |k| k.normalize());
        let internal_axis = axis_of(inside, &Vector3::z());
        let partners_leave = (0..SAMPLES).all(|j| mismatch.partner(curve.direction(j)).is_some());
        Ok(Self {
            axis: Direction::new(Lab(curve.frame.axis)),
            half_angle: cone_angle(point, &curve.frame.axis),
            least,
            largest,
            internal_half_angle: if curve.is_point() { 0.0 } else { cone_angle(inside, &internal_axis) },
            thickness: (!filled).then(|| thickness(mismatch, &curve, half_width)).flatten(),
            filled,
            status: if partners_leave { Status::Ok } else { Status::TotalReflection },
            curve,
        })
    }

    /// The circle that fits the ring best on a screen across the pump: centre and radius in units of the distance.
    #[must_use]
    pub fn circle(&self) -> (Vector2<f64>, f64) {
        let points: [Vector2<f64>; SAMPLES] = std::array::from_fn(|j| {
            let d = self.curve.vector(j);
            Vector2::new(d.x / d.z, d.y / d.z)
        });
        fit_circle(&points)
    }
}

/// Half angle of the cone that fits the first ring of a process best, radians; `None` where there is no ring.
#[must_use]
pub fn half_angle(mismatch: &Mismatch) -> Option<f64> {
    let seed = seeds(mismatch).ok()?.into_iter().next()?;
    let curve = Curve::about(mismatch, &seed, SAMPLES).ok()?.centred(mismatch).ok()?.within_region().ok()?;
    Some(cone_angle(|j| curve.vector(j), &curve.frame.axis))
}

/// Azimuth of sample j, radians.
fn azimuth(j: usize) -> f64 {
    TAU * j as f64 / SAMPLES as f64
}

/// Normal of the plane that fits the points best: smallest eigenvector of their covariance, on the side of `towards`.
fn axis_of(point: impl Fn(usize) -> Vector3<f64>, towards: &Vector3<f64>) -> Vector3<f64> {
    let mean = (0..SAMPLES).map(&point).sum::<Vector3<f64>>() / SAMPLES as f64;
    let covariance = (0..SAMPLES).fold(Matrix3::zeros(), |sum, j| {
        let from_mean = point(j) - mean;
        sum + from_mean * from_mean.transpose()
    });
    let eigen = covariance.symmetric_eigen();
    let axis = eigen.eigenvectors.column(eigen.eigenvalues.imin()).normalize();
    if axis.dot(towards) < 0.0 { -axis } else { axis }
}

/// alpha with cos alpha = mean of d.a, accurate for narrow cones: 1 - cos alpha = mean |d - a|^2 / 2.
fn cone_angle(point: impl Fn(usize) -> Vector3<f64>, axis: &Vector3<f64>) -> f64 {
    let versine = (0..SAMPLES).map(|j| (point(j) - axis).norm_squared()).sum::<f64>() / (2 * SAMPLES) as f64;
    2.0 * (0.5 * versine).sqrt().asin()
}

/// Least and largest stationary values of the radius, found where its slope changes sign between samples.
fn extremes(mismatch: &Mismatch, curve: &Curve) -> (f64, f64) {
    let Curve { frame, samples, .. } = curve;
    let slope_at = |psi: f64, phi: f64| {
        let gradient = mismatch.towards(frame.point(psi, phi)).map_or(Vector3::zeros(), |t| t.gradient);
        let (sin, cos) = psi.sin_cos();
        let outward = frame.outward(phi);
        -gradient.dot(&(frame.axis.cross(&outward) * sin)) / gradient.dot(&(outward * cos - frame.axis * sin))
    };
    let slopes: [f64; SAMPLES] = std::array::from_fn(|j| slope_at(samples[j], azimuth(j)));
    let mut least = samples.iter().copied().fold(f64::INFINITY, f64::min);
    let mut largest = samples.iter().copied().fold(0.0, f64::max);
    // a ring that is round to rounding error has no extremes worth looking for
    if largest - least < 1e-13 {
        return (least, largest);
    }
    for j in 0..SAMPLES {
        if slopes[j].is_sign_negative() == slopes[(j + 1) % SAMPLES].is_sign_negative() {
            continue;
        }
        let slope = |phi: f64| curve.radius(mismatch, phi).map(|psi| slope_at(psi, phi));
        let Some(phi) = super::root::bracketed(slope, azimuth(j), azimuth(j + 1), slopes[j]) else {
            continue;
        };
        if let Some(psi) = curve.radius(mismatch, phi) {
            (least, largest) = (least.min(psi), largest.max(psi));
        }
    }
    (least, largest)
}

/// Mean radial width between Delta_k L/2 = -1.39 and +1.39; `None` where one of them cannot be reached.
fn thickness(mismatch: &Mismatch, curve: &Curve, half_width: f64) -> Option<f64> {
    let Curve { frame, samples, .. } = curve;
    let mut sum = 0.0;
    for (j, psi) in samples.iter().enumerate() {
        let meridian = frame.meridian(azimuth(j));
        let (sin, cos) = psi.sin_cos();
        let gradient = mismatch.towards(frame.point(*psi, azimuth(j)))?.gradient;
        let slope = gradient.dot(&(meridian.outward * cos - meridian.axis * sin));
        let edge = |level: f64| match mismatch.meet(&meridian, level, psi + level / slope) {
            Hit::At(psi) => Some(psi),
            Hit::Face(_) | Hit::Lost => None,
        };
        sum += edge(half_width)? - edge(-half_width)?;
    }
    Some(sum / SAMPLES as f64)
}

/// Circle with the least sum of squared distances to the points: algebraic start, then Gauss-Newton.
fn fit_circle(points: &[Vector2<f64>; SAMPLES]) -> (Vector2<f64>, f64) {
    let mut centre = points.iter().sum::<Vector2<f64>>() / SAMPLES as f64;
    let mut radius = points.iter().map(|p| (p - centre).norm()).sum::<f64>() / SAMPLES as f64;
    for _ in 0..50 {
        // residual r_i = |p_i - c| - R, with d r/d c = -(p - c)/|p - c|, d r/d R = -1
        let mut normal = Matrix3::zeros();
        let mut right = Vector3::zeros();
        for p in points {
            let from = p - centre;
            let distance = from.norm().max(f64::MIN_POSITIVE);
            let row = Vector3::new(-from.x / distance, -from.y / distance, -1.0);
            normal += row * row.transpose();
            right -= row * (distance - radius);
        }
        let Some(step) = normal.cholesky().map(|c| c.solve(&right)) else { break };
        centre += Vector2::new(step.x, step.y);
        radius += step.z;
        if step.norm() <= 1e-15 {
            break;
        }
    }
    (centre, radius)
}

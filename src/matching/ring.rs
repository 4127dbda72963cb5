//! Rings: the closed curves of external directions on which a photon is phase matched, and the cones that fit them.
//!
//! The axis is that of the circular cone that fits best, min sum (d.a - cos alpha)^2, over samples at equal azimuths
//! about it: the curve is traced again until the axis stays. Sums over equal azimuths of a smooth closed curve converge
//! with every sample, so a convex curve is centred with few of them, and the full number confirms it.

use std::f64::consts::TAU;

use nalgebra::{Vector2, Vector3};

use super::Status;
use super::curve::{Curve, FINE, ROUGH, RingFault, all};
use super::fit;
use super::meridian::{FEW_SAMPLES, SAMPLES};
use super::mismatch::Mismatch;
use super::partner::HALF_MAXIMUM;
use super::seed::seeds;
use crate::frame::{Direction, Lab};

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
    /// Every how many samples means over the azimuth need.
    stride: usize,
}

/// All rings of the signal of a process, for a crystal of `length` (m).
///
/// # Errors
/// The fault of the one ring that is not there, where there is none at all.
pub fn rings(mismatch: &Mismatch, length: f64) -> Result<Vec<Ring>, RingFault> {
    all(&seeds(mismatch)?, |seed| {
        Ring::fit(centred(Curve::about(mismatch, seed, ROUGH)?, mismatch)?, mismatch, length)
    })
}

/// Half angle of the cone that fits the first ring of a process best, radians; `None` where there is no ring.
#[must_use]
pub fn half_angle(mismatch: &Mismatch) -> Option<f64> {
    let seed = *seeds(mismatch).ok()?.first()?;
    let curve = centred(Curve::about(mismatch, &seed, ROUGH).ok()?, mismatch).ok()?;
    Some(cone_angle(&curve.within_region().ok()?))
}

/// Traces a curve again about the axis of the cone that fits best, until the axis stays.
fn centred(mut curve: Curve, mismatch: &Mismatch) -> Result<Curve, RingFault> {
    const PASSES: usize = 20;
    const STAYS: f64 = 1e-9 * std::f64::consts::PI / 180.0;
    if curve.is_point() {
        return Ok(curve);
    }
    let mut before = f64::INFINITY;
    for _ in 0..PASSES {
        let few = curve.count() == FEW_SAMPLES;
        let mut axis = local_axis(&curve);
        let moved = axis.x.hypot(axis.y);
        let shrink = moved / before;
        if !few && moved < STAYS {
            return Ok(curve);
        }
        // with a margin, so that more samples do not move it again; where rounding moves it there is none
        if few && (moved < 1e-3 * STAYS || moved < STAYS && shrink > 0.5) {
            curve.refined(mismatch)?;
            continue;
        }
        // moves shrink by one factor: sum of the geometric series, 1 + r + r^2 + ...
        if shrink < 0.1 {
            axis += Vector3::new(axis.x, axis.y, 0.0) * (shrink / (1.0 - shrink));
        }
        curve.recentred(mismatch, &axis, if few { ROUGH } else { FINE })?;
        before = moved;
    }
    Err(RingFault::new(Status::NotConverged))
}

/// Axis of the cone that fits a curve best, by components along its meridians' own axes.
fn local_axis(curve: &Curve) -> Vector3<f64> {
    // 1 - cos psi instead of cos psi keeps small rings accurate, and turns the sign
    let normal = fit::normal(curve.local(), &-Vector3::z());
    Vector3::new(normal.x, normal.y, -normal.z)
}

/// alpha with cos alpha = mean cos psi: sin^2(alpha/2) = mean t^2/(1 + t^2) is accurate for narrow cones.
fn cone_angle(curve: &Curve) -> f64 {
    let t = curve.half_tangents();
    let mean = t.iter().map(|t| t * t / (1.0 + t * t)).sum::<f64>() / t.len() as f64;
    2.0 * mean.sqrt().asin()
}

impl Ring {
    /// Looks at the details of a curve about its cone's axis.
    fn fit(curve: Curve, mismatch: &Mismatch, length: f64) -> Result<Self, RingFault> {
        let curve = curve.within_region()?;
        let (least, largest) = if curve.is_point() { (0.0, 0.0) } else { extremes(mismatch, &curve) };
        // half of the maximum is not passed on the way in: Delta_k stays above it at the axis
        let half_width = 2.0 * HALF_MAXIMUM / length;
        let middle = mismatch.towards(curve.frame.axis).map(|at| at.value);
        let filled = middle.is_none_or(|value| value >= -half_width);
        let partners_leave = curve.partners_leave(mismatch);
        let stride = stride(&curve);
        Ok(Self {
            axis: Direction::new(Lab(curve.frame.axis)),
            half_angle: cone_angle(&curve),
            least,
            largest,
            internal_half_angle: internal_half_angle(mismatch, &curve, stride),
            thickness: middle
                .filter(|_| !filled)
                .and_then(|middle| thickness(mismatch, &curve, [half_width, middle], stride)),
            filled,
            status: if partners_leave { Status::Ok } else { Status::TotalReflection },
            stride,
            curve,
        })
    }

    /// The circle that fits the ring best on a screen across the pump: centre and radius in units of the distance.
    #[must_use]
    pub fn circle(&self) -> (Vector2<f64>, f64) {
        let mut points = [Vector2::zeros(); SAMPLES];
        let points = &mut points[..SAMPLES / self.stride];
        for (k, point) in points.iter_mut().enumerate() {
            let d = self.curve.vector(k * self.stride);
            *point = d.xy() / d.z;
        }
        fit::circle(points)
    }
}

/// Every how many samples means over the azimuth need: where all three thirds of them have one mean, any will do.
fn stride(curve: &Curve) -> usize {
    let mut sums = [0.0; 3];
    for three in curve.half_tangents().chunks_exact(3) {
        (0..3).for_each(|k| sums[k] += three[k] * three[k]);
    }
    let [a, b, c] = sums;
    let spread = a.max(b).max(c) - a.min(b).min(c);
    if spread <= 1e-12 * a { 3 } else { 1 }
}

/// Half angle of the cone that fits the wave vectors inside, radians.
fn internal_half_angle(mismatch: &Mismatch, curve: &Curve, stride: usize) -> f64 {
    if curve.is_point() {
        return 0.0;
    }
    let mut inside = [Vector3::z(); SAMPLES];
    let mut count = 0;
    for q in curve.tangential(mismatch).step_by(stride) {
        inside[count] = mismatch.inside(q).map_or(Vector3::z(), |k| k.normalize());
        count += 1;
    }
    let inside = &inside[..count];
    let mean = inside.iter().sum::<Vector3<f64>>() / count as f64;
    let axis = fit::normal(inside.iter().map(|k| k - mean), &mean.normalize());
    // 1 - cos alpha = mean |d - a|^2/2
    let versine = inside.iter().map(|d| (d - axis).norm_squared()).sum::<f64>() / (2 * count) as f64;
    2.0 * (0.5 * versine).sqrt().asin()
}

/// Least and largest stationary values of the radius, found where its slope changes sign between samples.
fn extremes(mismatch: &Mismatch, curve: &Curve) -> (f64, f64) {
    let (samples, turns) = (curve.half_tangents(), curve.turns());
    let mut least = samples.iter().copied().fold(f64::INFINITY, f64::min);
    let mut largest = samples.iter().copied().fold(0.0, f64::max);
    // a ring that is round to rounding error has no extremes worth looking for
    if largest - least >= 0.5e-13 {
        for j in 0..SAMPLES {
            let ends = [turns[j], turns[(j + 1) % SAMPLES]];
            if ends[0].is_sign_negative() != ends[1].is_sign_negative()
                && let Some(t) = stationary(mismatch, curve, j, ends)
            {
                (least, largest) = (least.min(t), largest.max(t));
            }
        }
    }
    (2.0 * least.atan(), 2.0 * largest.atan())
}

/// Stationary value of tan(psi/2) between samples j and j + 1, at which the curve turns in and out.
fn stationary(mismatch: &Mismatch, curve: &Curve, j: usize, [mut fa, mut fb]: [f64; 2]) -> Option<f64> {
    const STEPS: usize = 50;
    let (mut a, mut b) = (curve.azimuth(j), TAU * (j + 1) as f64 / SAMPLES as f64);
    let mut x = a + (b - a) * fa / (fa - fb);
    let mut found = None;
    for _ in 0..STEPS {
        let (t, f) = curve.radius(mismatch, x)?;
        if f.is_sign_negative() == fa.is_sign_negative() {
            (a, fa) = (x, f)
        } else {
            (b, fb) = (x, f)
        }
        let next = a + (b - a) * fa / (fa - fb);
        // t'= t f is nearly linear: up to x + d, where it is zero, t grows by half of t f d
        let gain = 0.5 * t * f * (next - x);
        found = Some(t + gain);
        // the next gain is smaller by the square of what is left of d
        if gain.abs() <= 1e-11 * t || next == x {
            break;
        }
        x = next;
    }
    found
}

/// Mean radial width between Delta_k L/2 = -1.39 and +1.39; `None` where one of them cannot be reached.
fn thickness(
    mismatch: &Mismatch,
    curve: &Curve,
    [half_width, middle]: [f64; 2],
    stride: usize,
) -> Option<f64> {
    let inner = curve.level(mismatch, [-half_width, middle], stride)?;
    let outer = curve.level(mismatch, [half_width, middle], stride)?;
    let (inner, outer) = (inner.half_tangents(), outer.half_tangents());
    // psi_2 - psi_1 = 2 atan((t_2 - t_1)/(1 + t_1 t_2))
    let widths = inner.iter().zip(outer).map(|(a, b)| 2.0 * ((b - a) / (1.0 + a * b)).atan());
    Some(widths.sum::<f64>() / inner.len() as f64)
}

//! Rings: the closed curves of external directions on which a photon is phase matched, and the cones that fit them.
//!
//! The axis is that of the circular cone that fits best, min sum (d.a - cos alpha)^2, over samples at equal azimuths
//! about it: the curve is traced again until the axis stays. Sums over equal azimuths of a smooth closed curve converge
//! with every sample, so a convex curve is centred with few of them, and the full number confirms it.

use std::f64::consts::TAU;

use fearless_simd::dispatch;
use nalgebra::{Vector2, Vector3};

use super::Status;
use super::curve::{Curve, ROUGH, RingFault, all};
use super::fit;
use super::meridian::SAMPLES;
use super::mismatch::{Mismatch, Sample};
use super::partner::HALF_MAXIMUM;
use super::seed::seeds;
use crate::frame::{Direction, Lab};
use crate::number::{self, Number, sums, wide};

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
        let mut curve = Curve::about(mismatch, seed, ROUGH)?;
        centre(&mut curve, mismatch)?;
        Ok(Ring::fit(curve, mismatch, length))
    })
}

/// All rings of the idler of a process, given the only one of its signal, or none where that is not known.
///
/// # Errors
/// As [`rings`].
pub fn partner_rings(mismatch: &Mismatch, only: Option<&Ring>, length: f64) -> Result<Vec<Ring>, RingFault> {
    let exchanged = mismatch.exchanged();
    if let Some(ring) = only
        && let Some(mut curve) = ring.curve.of_partners(mismatch, &exchanged)
        && centre(&mut curve, &exchanged).is_ok()
    {
        return Ok(vec![Ring::fit(curve, &exchanged, length)]);
    }
    rings(&exchanged, length)
}

/// Half angle of the cone that fits the first ring of a process best, radians; `None` where there is no ring.
#[must_use]
pub fn half_angle(mismatch: &Mismatch) -> Option<f64> {
    let seed = *seeds(mismatch).ok()?.first()?;
    let mut curve = Curve::about(mismatch, &seed, ROUGH).ok()?;
    centre(&mut curve, mismatch).ok()?;
    Some(cone_angle(&curve))
}

/// Traces a curve again about the axis of the cone that fits best until the axis stays.
fn centre(curve: &mut Curve, mismatch: &Mismatch) -> Result<(), RingFault> {
    const PASSES: usize = 20;
    // a last move of this much leaves the axis off by r of it, 1e-10 deg or so, and the samples to rounding
    const STAYS: f64 = 2e-8 * std::f64::consts::PI / 180.0;
    if curve.is_point() {
        return curve.demand_region();
    }
    let mut before = None;
    for _ in 0..PASSES {
        let (few, mut axis) = (curve.is_coarse(), local_axis(curve));
        let moved = (axis.x * axis.x + axis.y * axis.y).sqrt();
        if !few && moved < STAYS {
            curve.shift(&axis);
            return curve.demand_region();
        }
        // moves shrink by one factor: sum of the geometric series, 1 + r + r^2 + ...
        let shrink = before.map_or(1.0, |before| moved / before);
        if shrink < 0.1 {
            axis += Vector3::new(axis.x, axis.y, 0.0) * (shrink / (1.0 - shrink));
        }
        // what is left then is about r^2 of the move, and all samples will do
        let last = moved * shrink * shrink < 0.5 * STAYS;
        curve.recentred(mismatch, &axis, last)?;
        before = Some(moved);
    }
    Err(RingFault::new(Status::NotConverged))
}

/// Axis of the cone that fits a curve best, by components along its meridians' own axes.
fn local_axis(curve: &Curve) -> Vector3<f64> {
    // 1 - cos psi instead of cos psi keeps small rings accurate, and turns the sign
    let normal = curve.moments().normal(&-Vector3::z());
    Vector3::new(normal.x, normal.y, -normal.z)
}

/// alpha with cos alpha = mean cos psi: sin^2(alpha/2) = mean t^2/(1 + t^2) is accurate for narrow cones.
fn cone_angle(curve: &Curve) -> f64 {
    let t = curve.half_tangents();
    let [sum] = dispatch!(number::level(), simd => sums(simd, t.len(), #[inline(always)] |j| {
        let square = wide(simd, t, j) * wide(simd, t, j);
        [square / (square + 1.0)]
    }));
    2.0 * (sum / t.len() as f64).sqrt().asin()
}

impl Ring {
    /// Looks at the details of a curve about its cone's axis.
    fn fit(curve: Curve, mismatch: &Mismatch, length: f64) -> Self {
        let stride = stride(&curve);
        let (least, largest) = if curve.is_point() { (0.0, 0.0) } else { extremes(mismatch, &curve, stride) };
        // half of the maximum is not passed on the way in: Delta_k stays above it at the axis
        let half_width = 2.0 * HALF_MAXIMUM / length;
        let middle = mismatch.along(curve.frame.axis);
        let filled = middle.is_none_or(|at| at.value >= -half_width);
        let partners_leave = curve.partners_leave(mismatch);
        Self {
            axis: Direction::new(Lab(curve.frame.axis)),
            half_angle: cone_angle(&curve),
            least,
            largest,
            internal_half_angle: internal_half_angle(mismatch, &curve, stride),
            thickness: middle
                .filter(|_| !filled)
                .and_then(|middle| thickness(mismatch, &curve, half_width, &middle, stride)),
            filled,
            status: if partners_leave { Status::Ok } else { Status::TotalReflection },
            stride,
            curve,
        }
    }

    /// The circle that fits the ring best on a screen across the pump: centre and radius in units of the distance.
    #[must_use]
    pub fn circle(&self) -> (Vector2<f64>, f64) {
        let (mut x, mut y) = ([0.0; SAMPLES], [0.0; SAMPLES]);
        self.curve.on_screen(self.stride, &mut x, &mut y);
        let count = SAMPLES / self.stride;
        fit::circle(&x[..count], &y[..count])
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
    let (moments, middle) = curve.inside(mismatch, stride);
    // 1 - cos alpha = mean |k - a|^2/2
    let versine = 0.5 * moments.square_from(&(moments.normal(&middle) - middle));
    2.0 * (0.5 * versine).sqrt().asin()
}

/// Least and largest stationary values of the radius, found where its slope changes sign between samples.
fn extremes(mismatch: &Mismatch, curve: &Curve, stride: usize) -> (f64, f64) {
    let [mut least, mut largest] = curve.range();
    // a ring that is round to rounding error has no extremes worth looking for
    if largest - least >= 0.5e-13 {
        // the polynomial through twelve neighbours is off by 4e-14 of the second harmonic's amplitude
        let smooth = stride > 1 && largest - least < 0.1 * least;
        for j in curve.turning_samples() {
            let exact = || stationary(mismatch, curve, j);
            if let Some(t) = smooth.then(|| curve.turning_value(j)).or_else(exact) {
                (least, largest) = (least.min(t), largest.max(t));
            }
        }
    }
    (2.0 * least.atan(), 2.0 * largest.atan())
}

/// Stationary value of tan(psi/2) between samples j and j + 1, at which the curve turns in and out.
fn stationary(mismatch: &Mismatch, curve: &Curve, j: usize) -> Option<f64> {
    const STEPS: usize = 50;
    let (mut fa, mut fb) = (curve.turns()[j], curve.turns()[(j + 1) % SAMPLES]);
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
    half_width: f64,
    middle: &Sample,
    stride: usize,
) -> Option<f64> {
    let inner = curve.level(mismatch, -half_width, middle, stride)?;
    let outer = curve.level(mismatch, half_width, middle, stride)?;
    let (inner, outer) = (inner.half_tangents(), outer.half_tangents());
    // psi_2 - psi_1 = 2 atan((t_2 - t_1)/(1 + t_1 t_2))
    let [sum, widest] = dispatch!(number::level(), simd => sums(simd, inner.len(), #[inline(always)] |j| {
        let (a, b) = (wide(simd, inner, j), wide(simd, outer, j));
        let x = (b - a) / (a * b + 1.0);
        let square = x * x;
        [narrow_atan(x), square * square]
    }));
    // the sum of fourth powers bounds each of them
    let sum = if widest < NARROW.powi(4) {
        sum
    } else {
        inner.iter().zip(outer).map(|(a, b)| ((b - a) / (1.0 + a * b)).atan()).sum()
    };
    Some(2.0 * sum / inner.len() as f64)
}

/// Below this [`narrow_atan`] is exact to rounding.
const NARROW: f64 = 0.08;

/// atan x = x - x^3/3 + x^5/5 - ... to x^13.
#[inline(always)]
fn narrow_atan<T: Number>(x: T) -> T {
    let square = x * x;
    let mut series = square * (1.0 / 13.0) - 1.0 / 11.0;
    for c in [1.0 / 9.0, -1.0 / 7.0, 1.0 / 5.0, -1.0 / 3.0, 1.0] {
        series = series * square + c;
    }
    series * x
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use super::*;
    use crate::matching::{Emission, Interaction, Photons};
    use crate::material::Catalogue;
    use crate::optics::Crystal;
    use crate::quantity::{Angle, Wavelength};

    #[test]
    fn narrow_atan_is_exact_to_rounding() {
        for n in 1..=800 {
            let x = NARROW * f64::from(n) / 800.0;
            assert!((narrow_atan(x) / x.atan() - 1.0).abs() < 5e-16, "{x}");
        }
    }

    /// Rings of idlers from those of signals are what a search from their own minimum finds.
    #[test]
    fn rings_of_partners_are_those_of_the_exchanged_process() {
        let bbo = Arc::new(Catalogue::default().get("bbo").expect("a compiled-in crystal"));
        let mut crystal = Crystal::new(bbo, Some("kato-1986")).expect("a data set").with_cut(42.541, 0.0);
        let pump = Wavelength::from_nm(405.0);
        let (mut compared, mut worst) = (0, [0.0f64; 2]);
        for (signal, tilt, cross) in
            [(810.0, 0.0, 0.0), (810.0, 1.3, -0.4), (780.0, 0.8, 0.3), (850.0, -0.5, 2.0), (810.0, -1.7, 0.0)]
        {
            crystal.orientation.tilt = Angle::from_degrees(tilt);
            crystal.orientation.cross_tilt = Angle::from_degrees(cross);
            let photons = Photons::new(pump, Wavelength::from_nm(signal)).expect("longer than the pump");
            let emission = Emission::of(&crystal, photons).expect("indices");
            for roles in emission.roles(Interaction::Two).expect("two processes") {
                let mismatch = emission.mismatch(roles).expect("the pump enters");
                let Ok(own) = rings(&mismatch, 2e-3) else { continue };
                assert!(own[0].curve.of_partners(&mismatch, &mismatch.exchanged()).is_some());
                let partners = partner_rings(&mismatch, own.first(), 2e-3).expect("a ring");
                let searched = rings(&mismatch.exchanged(), 2e-3).expect("a ring");
                assert_eq!([own.len(), partners.len(), searched.len()], [1; 3]);
                let (a, b) = (&partners[0], &searched[0]);
                worst[0] = worst[0].max(a.axis.angle_to(b.axis));
                for (a, b) in [
                    (a.half_angle, b.half_angle),
                    (a.least, b.least),
                    (a.largest, b.largest),
                    (a.internal_half_angle, b.internal_half_angle),
                ] {
                    worst[1] = worst[1].max((a - b).abs());
                }
                compared += 1;
            }
        }
        assert!(compared >= 8, "{compared} rings");
        // 1e-9 deg
        assert!(worst.iter().all(|w| *w < 1.7e-11), "{worst:?}");
    }
}

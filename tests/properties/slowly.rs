//! Rings and crossings against an evaluation that takes its time: ten times as many samples, bisection, and nothing but
//! the mismatch at a direction.

use super::crystals::*;
use nalgebra::{Matrix3, SymmetricEigen, Vector3};
use proptest::prelude::*;
use std::f64::consts::TAU;
use twincone::frame::{Direction, Lab};
use twincone::matching::*;
use twincone::quantity::Angle;

const FINE: usize = 720;

/// A ring about an axis, found again on each meridian by bisection.
struct Slow<'a> {
    mismatch: &'a Mismatch,
    ring: &'a Ring,
    axis: Vector3<f64>,
    across: [Vector3<f64>; 2],
}

impl<'a> Slow<'a> {
    fn about(mismatch: &'a Mismatch, ring: &'a Ring) -> Self {
        let Lab(axis) = ring.axis.lab();
        let first = (Vector3::x() - axis * axis.x).normalize();
        Self { mismatch, ring, axis, across: [first, axis.cross(&first)] }
    }

    fn point(&self, psi: f64, phi: f64) -> Direction {
        let outward = self.across[0] * phi.cos() + self.across[1] * phi.sin();
        Direction::new(Lab(self.axis * psi.cos() + outward * psi.sin()))
    }

    /// Polar angle at an azimuth; `None` where the way out meets another curve too.
    fn radius(&self, phi: f64) -> Option<f64> {
        let value = |psi: f64| value(self.mismatch, self.point(psi, phi));
        bisected(value, 0.8 * self.ring.least, 1.2 * self.ring.largest)
    }

    /// Directions at equally spaced azimuths.
    fn points(&self) -> Option<Vec<Direction>> {
        (0..FINE).map(|n| TAU * n as f64 / FINE as f64).map(|phi| self.at(phi)).collect()
    }

    fn at(&self, phi: f64) -> Option<Direction> {
        self.radius(phi).map(|psi| self.point(psi, phi))
    }
}

fn value(mismatch: &Mismatch, d: Direction) -> Option<f64> {
    mismatch.at(mismatch.tangential(d)).map(|at| at.value)
}

/// Where a function that changes sign once does.
fn bisected(f: impl Fn(f64) -> Option<f64>, mut a: f64, mut b: f64) -> Option<f64> {
    let negative = f(a)? < 0.0;
    if (f(b)? < 0.0) == negative {
        return None;
    }
    for _ in 0..60 {
        let middle = 0.5 * (a + b);
        if (f(middle)? < 0.0) == negative { a = middle } else { b = middle }
    }
    Some(0.5 * (a + b))
}

#[test]
fn cones_fitted_to_many_samples_are_the_same() {
    every(80, 70, &setups(BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        for ring in &rings {
            let slow = Slow::about(&mismatch, ring);
            let Some(points) = slow.points() else { return Ok(Case::Void) };
            fits(ring, &points)?;
        }
        Ok(Case::Shown)
    });
}

/// Axis and angles of a ring against those of many points at equal azimuths about the axis.
fn fits(ring: &Ring, points: &[Direction]) -> Result<(), TestCaseError> {
    let points: Vec<Vector3<f64>> = points.iter().map(|d| d.lab().0).collect();
    let mean = points.iter().sum::<Vector3<f64>>() / FINE as f64;
    let spread = points.iter().map(|d| (d - mean) * (d - mean).transpose()).sum::<Matrix3<f64>>();
    let eigen = SymmetricEigen::new(spread);
    let axis = eigen.eigenvectors.column(eigen.eigenvalues.imin()).into_owned();
    let Lab(own) = ring.axis.lab();
    // rounding errors of points, 1e-16, over the sine of the half angle, 1e-2 or more; and where a curve is bent so
    // much that 72 samples are not yet many, what they miss
    within(axis.cross(&own).norm().to_degrees(), 2e-9, "axis, deg")?;
    let half_angle = (points.iter().map(|d| d.dot(&own)).sum::<f64>() / FINE as f64).acos();
    within((half_angle - ring.half_angle).abs().to_degrees(), 1e-9, "half angle, deg")?;
    let radii: Vec<f64> = points.iter().map(|d| d.cross(&own).norm().asin()).collect();
    let turned = |n: usize, sign: f64| {
        let [a, b, c] = [n + FINE - 1, n, n + 1].map(|n| sign * radii[n % FINE]);
        // the vertex of the parabola through three samples, where the middle one is the largest
        (b >= a && b >= c && a + c < 2.0 * b).then(|| b - (c - a).powi(2) / (8.0 * (a - 2.0 * b + c)))
    };
    let largest = |sign: f64| (0..FINE).filter_map(|n| turned(n, sign)).fold(f64::NEG_INFINITY, f64::max);
    // parabolas of 0.5 deg of azimuth are right to some 1e-6 of how much the radius varies
    let limit = 1e-6 * (ring.largest - ring.least) + 1e-12;
    within((largest(1.0) - ring.largest).abs(), limit, "largest angle")?;
    within((largest(-1.0) + ring.least).abs(), limit, "least angle")
}

#[test]
fn no_crossing_is_lost() {
    // shifts of the cut in degrees, so that some pairs of rings part or hardly cross
    every(120, 90, &(setups(CROSSED), -1.5..1.5), |(setup, shift_deg)| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let source = source.with(|crystal| {
            let theta = crystal.cut.theta.si() + f64::to_radians(shift_deg);
            crystal.cut.theta = Angle::radians(theta);
        });
        let exchanged = source.roles.exchanged();
        let (Some((first, rings)), Some((second, others)), Some((_, curves))) =
            (source.traced(source.roles), source.traced(exchanged), source.curves(source.roles))
        else {
            return Ok(Case::Void);
        };
        if rings.len() != curves.len() || others.is_empty() {
            return Ok(Case::Void);
        }
        let met = curves.iter().flat_map(|curve| meet(Traced { mismatch: &first, curve }, &second));
        let met: Vec<Crossing> = met.map(|(crossing, _)| crossing).collect();
        let mut count = 0;
        for ring in &rings {
            let Some(found) = crossings(&Slow::about(&first, ring), &second) else { return Ok(Case::Void) };
            count += found.len();
            for crossing in found {
                let off = least(met.iter().map(|m| m.direction.angle_to(crossing).to_degrees()));
                // bisection in azimuth is as good as rounding lets the mismatches be zero, divided by the angle
                within(off, 1e-9, "a crossing that is missing, deg")?;
            }
        }
        // what is found besides are pairs of crossings between two of the many samples
        prop_assert!(
            met.len() >= count && (met.len() - count).is_multiple_of(2),
            "{} for {count}",
            met.len()
        );
        for crossing in &met {
            for mismatch in [&first, &second] {
                let off = value(mismatch, crossing.direction).expect("a pair").abs();
                // radians over the length of 1 mm
                within(off * 1e-3, 1e-9, "Delta_k L")?;
            }
        }
        Ok(Case::Shown)
    });
}

/// Sign changes of the other mismatch along a ring, by bisection in azimuth.
fn crossings(slow: &Slow<'_>, other: &Mismatch) -> Option<Vec<Direction>> {
    let along = |phi: f64| value(other, slow.at(phi)?);
    let azimuth = |n: usize| TAU * (n as f64 + 0.123) / FINE as f64;
    let mut found = Vec::new();
    let mut before = along(azimuth(0))?;
    for n in 1..=FINE {
        let here = along(azimuth(n))?;
        if (here < 0.0) != (before < 0.0) {
            found.push(slow.at(bisected(along, azimuth(n - 1), azimuth(n))?)?);
        }
        before = here;
    }
    Some(found)
}

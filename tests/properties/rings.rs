//! Rings: matched, closed, fitted.

use super::crystals::*;
use nalgebra::{Rotation3, Vector2, Vector3};
use proptest::prelude::*;
use std::f64::consts::TAU;
use twincone::frame::{Direction, Lab};
use twincone::matching::*;
use twincone::quantity::Length;

#[test]
fn ring_points_are_phase_matched() {
    every(200, 190, &setups(BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        for ring in &rings {
            matched(&source, &mismatch, ring)?;
        }
        Ok(Case::Shown)
    });
}

/// |Delta_k| L is negligible at the samples and between them.
fn matched(source: &Source, mismatch: &Mismatch, ring: &Ring) -> Result<(), TestCaseError> {
    let emission = source.emission();
    let grating = emission.grating_sign(source.roles).map_or(0.0, |sign| sign * emission.grating);
    let grating = Vector3::z() * grating;
    let between = (0..SAMPLES).map(|j| TAU * (j as f64 + 0.37) / SAMPLES as f64);
    let between = between.map(|phi| ring.curve.at(mismatch, phi).expect("a point at every azimuth"));
    for direction in (0..SAMPLES).map(|j| ring.curve.direction(j)).chain(between) {
        let pair = emission.pairing(source.roles, direction).expect("three waves");
        let left = pair.pump.k.0 - pair.signal.k.0 - pair.idler.k.0 - grating;
        // radians over the length of 1 mm; sinc^2 then differs from 1 by less than 1e-18
        within(left.norm() * emission.length, 1e-9, "Delta_k L, rad")?;
    }
    Ok(())
}

/// A direction that is more than matched (Delta_k < 0) lies within a ring. Rings about an optic axis of a poled
/// biaxial crystal are the hard ones: there the fast sheet has a peak that is not smooth.
#[test]
fn rings_about_optic_axes_of_poled_crystals_are_found() {
    every(300, 290, &poled(), |poled| {
        let Some(source) = poled.source() else { return Ok(Case::Void) };
        let emission = source.emission();
        let mismatch = emission.mismatch(source.roles).expect("a pump");
        match rings(&mismatch, emission.length) {
            Ok(rings) => rings.iter().try_for_each(|ring| matched(&source, &mismatch, ring))?,
            Err(fault) => {
                prop_assert!(false, "pairs along the pump are more than matched, but: {}", fault.status)
            }
        }
        Ok(Case::Shown)
    });
}

/// Mean distance between the points at which sinc^2(Delta_k L/2) is one half, wherever there are such points inside.
#[test]
fn thickness_is_the_width_at_half_maximum() {
    // sinc^2(x) = 1/2
    const HALF_MAXIMUM: f64 = 1.391_557_378_251_51;
    every(400, 385, &(setups(BOTH), 1.0..20.0), |(setup, length_mm)| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let source = source.with(|crystal| crystal.length = Length::metres(length_mm * 1e-3));
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        let edge = 2.0 * HALF_MAXIMUM / source.crystal.length.si();
        let value = |d: Direction| mismatch.at(mismatch.tangential(d)).expect("a pair inside").value;
        let mut case = Case::Void;
        for ring in rings.iter().filter(|ring| value(ring.axis) < -edge) {
            let width = |j: usize| {
                let to = |level: f64| radius_at(ring, j, |d| value(d) - level);
                to(edge) - to(-edge)
            };
            let mean = (0..SAMPLES).map(width).sum::<f64>() / SAMPLES as f64;
            let thickness = ring.thickness;
            prop_assert!(thickness.is_some(), "no thickness though the inside is dark");
            within((thickness.expect("just tested") - mean).abs().to_degrees(), 1e-9, "thickness, deg")?;
            case = Case::Shown;
        }
        Ok(case)
    });
}

/// Angle from the axis, towards sample `j`, at which an increasing function is zero: by bisection to rounding error.
fn radius_at(ring: &Ring, j: usize, value: impl Fn(Direction) -> f64) -> f64 {
    let axis = ring.axis.lab().0;
    let sample = ring.curve.direction(j).lab().0;
    let outward = (sample - axis * axis.dot(&sample)).normalize();
    let at = |psi: f64| value(Direction::new(Lab(axis * psi.cos() + outward * psi.sin())));
    let (mut low, mut high) = (0.0, 2.0 * ring.largest);
    assert!(at(low) < 0.0 && at(high) > 0.0, "no zero within twice the ring");
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if at(middle) < 0.0 { low = middle } else { high = middle }
    }
    0.5 * (low + high)
}

#[test]
fn rings_are_closed_curves_about_the_axis_that_fits_best() {
    every(200, 190, &setups(BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        for ring in &rings {
            closed(ring, &mismatch)?;
            fits_best(ring)?;
            bounded(ring, &mismatch)?;
        }
        Ok(Case::Shown)
    });
}

/// Samples go round the axis once in equal steps and end where they began.
fn closed(ring: &Ring, mismatch: &Mismatch) -> Result<(), TestCaseError> {
    let axis = ring.axis.lab().0;
    for j in 0..SAMPLES {
        let (a, b) = (ring.curve.direction(j), ring.curve.direction(j + 1));
        let across = |d: Direction| d.lab().0 - axis * axis.dot(&d.lab().0);
        let (p, r) = (across(a), across(b));
        let step = p.cross(&r).dot(&axis).atan2(p.dot(&r)).to_degrees();
        within((step - 360.0 / SAMPLES as f64).abs(), 1e-9, "step in azimuth, deg")?;
        // 5 deg of azimuth change the radius by a fraction of itself
        within((p.norm() - r.norm()).abs() / ring.half_angle.sin(), 0.1, "jump of the radius")?;
    }
    let ends = [0.0, TAU].map(|phi| ring.curve.at(mismatch, phi).expect("a point"));
    within(ends[0].angle_to(ends[1]), 1e-12, "gap between the ends")
}

/// No other circular cone has a smaller sum of (d.a - cos alpha)^2.
fn fits_best(ring: &Ring) -> Result<(), TestCaseError> {
    let samples: Vec<Vector3<f64>> = (0..SAMPLES).map(|j| ring.curve.direction(j).lab().0).collect();
    let misfit = |axis: &Vector3<f64>, alpha: f64| {
        samples.iter().map(|d| (d.dot(axis) - alpha.cos()).powi(2)).sum::<f64>()
    };
    let axis = ring.axis.lab().0;
    let best = misfit(&axis, ring.half_angle);
    let first = axis.cross(&Vector3::y()).normalize();
    for turn in [first, -first, axis.cross(&first), -axis.cross(&first)] {
        let other = Rotation3::new(turn * 1e-4) * axis;
        prop_assert!(misfit(&other, ring.half_angle) > best, "a better axis");
    }
    for change in [-1e-4, 1e-4] {
        prop_assert!(misfit(&axis, ring.half_angle + change) > best, "a better half angle");
    }
    best_circle(ring)
}

/// Nor has another circle on the screen a smaller sum of squared distances.
fn best_circle(ring: &Ring) -> Result<(), TestCaseError> {
    let on_screen = |j: usize| {
        let Lab(d) = ring.curve.direction(j).lab();
        Vector2::new(d.x / d.z, d.y / d.z)
    };
    let misfit = |centre: Vector2<f64>, radius: f64| {
        (0..SAMPLES).map(|j| ((on_screen(j) - centre).norm() - radius).powi(2)).sum::<f64>()
    };
    let (centre, radius) = ring.circle();
    let best = misfit(centre, radius);
    for [x, y, r] in [[1e-4, 0.0, 0.0], [0.0, 1e-4, 0.0], [0.0, 0.0, 1e-4]] {
        for sign in [-1.0, 1.0] {
            let other = misfit(centre + Vector2::new(x, y) * sign, radius + sign * r);
            prop_assert!(other > best, "a better circle");
        }
    }
    Ok(())
}

/// Least and largest radius bound the curve between samples too, and are reached.
fn bounded(ring: &Ring, mismatch: &Mismatch) -> Result<(), TestCaseError> {
    const FINE: usize = 360;
    let radius = |n: usize| {
        let point = ring.curve.at(mismatch, TAU * n as f64 / FINE as f64).expect("a point at every azimuth");
        point.angle_to(ring.axis)
    };
    let (mut low, mut high) = (f64::INFINITY, 0.0_f64);
    for psi in (0..FINE).map(radius) {
        (low, high) = (low.min(psi), high.max(psi));
    }
    within(ring.least - low, 1e-12, "a point inside the least radius")?;
    within(high - ring.largest, 1e-12, "a point outside the largest radius")?;
    // half a step of 1 deg from an extremum of a radius that varies by its own size at most a few times round
    within((low - ring.least).max(ring.largest - high), 2e-3 * ring.half_angle, "an extreme not reached")
}

//! Crossings and partners.

use super::crystals::*;
use nalgebra::{Vector2, Vector3};
use proptest::prelude::*;
use std::f64::consts::TAU;
use twincone::frame::{Direction, Lab};
use twincone::matching::*;
use twincone::quantity::Angle;

#[test]
fn exchanging_signal_and_idler_maps_a_crossing_to_its_partner() {
    every(60, 50, &(setups(CROSSED), 0.485..0.499), |(setup, share)| {
        let Some(source) = (Setup { share, ..setup }).source() else { return Ok(Case::Void) };
        if source.crossings().is_empty() {
            return Ok(Case::Void);
        }
        let other = Source { photons: source.photons.exchanged(), ..source.clone() };
        let pairs = |cones: &Cones| -> Vec<[Direction; 2]> {
            let crossings = cones.crossings.iter().filter_map(|row| row.crossing);
            crossings.map(|c| [c.direction, c.partner.expect("a partner")]).collect()
        };
        let (cones, others) = (source.cones(), other.cones());
        all_rings(&cones).same_as(&all_rings(&others), 1e-9)?;
        let (here, there) = (pairs(&cones), pairs(&others));
        prop_assert_eq!(here.len(), there.len(), "number of crossings");
        for [a, b] in &here {
            let off = |[c, d]: &[Direction; 2]| a.angle_to(*d).max(b.angle_to(*c)).to_degrees();
            within(least(there.iter().map(off)), 1e-9, "crossing and partner, deg")?;
        }
        Ok(Case::Shown)
    });
}

/// Rings of both photons.
pub fn all_rings(cones: &Cones) -> Pattern {
    let rings = cones.rings.iter().filter_map(|row| row.ring.as_ref().ok());
    Pattern { rings: rings.map(|ring| (ring.axis, ring.half_angle)).collect(), crossings: Vec::new() }
}

/// Crossings are where the other process changes sign along a ring, and which ring comes first does not matter.
#[test]
fn rings_cross_where_the_other_mismatch_changes_sign() {
    // shifts of the cut in degrees, so that some pairs of rings part
    every(150, 135, &(setups(CROSSED), -1.5..1.5), |(setup, shift_deg)| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let source = source.with(|crystal| {
            let theta = crystal.cut.theta.si() + f64::to_radians(shift_deg);
            crystal.cut.theta = Angle::radians(theta);
        });
        let (Some((m1, ones)), Some((m2, twos))) =
            (source.curves(source.roles), source.curves(source.roles.exchanged()))
        else {
            return Ok(Case::Void);
        };
        let one = Traced { mismatch: &m1, curve: &ones[0] };
        let two = Traced { mismatch: &m2, curve: &twos[0] };
        let (here, there) = (meet(one, &m2), meet(two, &m1));
        let changes = sign_changes(one, &m2);
        prop_assert_eq!(changes, sign_changes(two, &m1), "sign changes along either ring");
        prop_assert_eq!((here.len(), there.len()), (changes, changes), "crossings and sign changes");
        let pattern = |met: &[(Crossing, Meeting)]| Pattern {
            rings: Vec::new(),
            crossings: met.iter().map(|(crossing, _)| crossing.direction).collect(),
        };
        pattern(&here).same_as(&pattern(&there), 1e-9)?;
        for (crossing, _) in &here {
            // differences of a step of 1e-5 are right to some 1e-9 of the gradient
            let angle = angle_on_screen(crossing.direction, &m1, &m2);
            within((crossing.angle - angle).abs(), 1e-7, "angle on the screen, rad")?;
        }
        if here.is_empty() {
            let [Miss::By(a), Miss::By(b)] =
                [miss(one, two), miss(two, one)].map(|miss| miss.expect("curves that can be followed"))
            else {
                return Err(TestCaseError::fail("rings that touch where none changes sign"));
            };
            prop_assert_eq!(a.kind, b.kind, "which way they miss");
            within((a.gap - b.gap).abs().to_degrees(), 1e-9, "gap, deg")?;
        }
        Ok(Case::Shown)
    });
}

/// Angle between the curves of two mismatches on a screen, 0 to pi/2: that between their gradients.
fn angle_on_screen(direction: Direction, one: &Mismatch, two: &Mismatch) -> f64 {
    const STEP: f64 = 1e-5;
    let Lab(d) = direction.lab();
    let gradient = |mismatch: &Mismatch| {
        let value = |x: f64, y: f64| {
            let beside = Direction::new(Lab(Vector3::new(d.x / d.z + x, d.y / d.z + y, 1.0)));
            mismatch.at(mismatch.tangential(beside)).expect("a pair beside").value
        };
        Vector2::new(value(STEP, 0.0) - value(-STEP, 0.0), value(0.0, STEP) - value(0.0, -STEP)).normalize()
    };
    let (a, b) = (gradient(one), gradient(two));
    a.perp(&b).abs().atan2(a.dot(&b).abs())
}

/// Of the other mismatch along a ring, at 1 deg of azimuth.
fn sign_changes(ring: Traced<'_>, other: &Mismatch) -> usize {
    const FINE: usize = 360;
    let inside = |n: usize| {
        let phi = TAU * n as f64 / FINE as f64;
        let point = ring.curve.at(ring.mismatch, phi).expect("a point at every azimuth");
        other.at(other.tangential(point)).is_some_and(|at| at.value < 0.0)
    };
    let inside: Vec<bool> = (0..FINE).map(inside).collect();
    (0..FINE).filter(|n| inside[*n] != inside[(n + 1) % FINE]).count()
}

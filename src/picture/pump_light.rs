//! How the pump is polarized before it meets the crystals: as the job gives it, else as it drives them most evenly.

use nalgebra::Vector3;

use crate::frame::{Direction, Lab};
use crate::job::Setup;
use crate::matching::{Cones, Emission};
use crate::optics::Crystal;
use crate::pairs::{Pair, PumpPolarization, Stack, most_even};

/// E = (cos angle, e^(i phase) sin angle) along lab x, y; radians.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PumpLight {
    /// From +x towards +y.
    pub angle: f64,
    /// Of the vertical component ahead of the horizontal one.
    pub phase: f64,
    /// Whether the job says so.
    pub given: bool,
}

/// Azimuth of the pump's field that a crystal's process takes, radians in [0, pi).
#[must_use]
pub fn taken(setup: &Setup, crystal: &Crystal) -> Option<f64> {
    let emission = Emission::of(crystal, setup.photons()).ok()?;
    let roles = *emission.wanted(crystal, setup.interaction).ok()?.first()?;
    let pairing = emission.pairing(roles, Direction::forward())?;
    let Lab(field) = crystal.placement().to_lab(pairing.pump.field);
    Some(axis(field.y.atan2(field.x)))
}

/// An axis has no head: folded into [0, pi), with rounding next to pi taken as 0.
fn axis(angle: f64) -> f64 {
    let folded = angle.rem_euclid(std::f64::consts::PI);
    if folded > std::f64::consts::PI - 2e-8 { 0.0 } else { folded }
}

impl PumpLight {
    /// As given; else the field that one crystal takes, or for several that of `state`: the azimuth at which the product of
    /// what they take is largest. `None` where no crystal takes any.
    #[must_use]
    pub fn of(setup: &Setup, cones: &Cones) -> Option<Self> {
        if let PumpPolarization::Given { angle, phase } = setup.bench.polarization {
            return Some(Self { angle: angle.si(), phase: phase.si(), given: true });
        }
        let matched = |angle: f64| Self { angle: axis(angle), phase: 0.0, given: false };
        let fields: Vec<f64> = setup.crystals.iter().filter_map(|c| taken(setup, c)).collect();
        match fields.as_slice() {
            [] => None,
            [first, rest @ ..] if rest.iter().all(|f| apart(*first, *f) < 1e-3) => Some(matched(*first)),
            all => Some(matched(as_the_pairs(setup, cones).unwrap_or_else(|| between(all)))),
        }
    }

    /// Azimuth of a linear polarization, radians in [0, pi); `None` for an elliptical one.
    #[must_use]
    pub fn linear(&self) -> Option<f64> {
        let (sin, cos) = self.angle.sin_cos();
        let (quadrature, in_phase) = self.phase.sin_cos();
        ((sin * cos * quadrature).abs() < 1e-6).then(|| axis((sin * in_phase.signum()).atan2(cos)))
    }

    /// Share of the power along an axis across the beam at this azimuth:
    /// |cos a cos A + e^(i d) sin a sin A|^2.
    #[must_use]
    pub fn share(&self, azimuth: f64) -> f64 {
        let (sin, cos) = self.angle.sin_cos();
        let (s, c) = azimuth.sin_cos();
        (c * cos).powi(2) + (s * sin).powi(2) + 2.0 * c * s * cos * sin * self.phase.cos()
    }

    /// The field at a moment, as a vector across the beam; `turn` runs through 2 pi in a period.
    #[must_use]
    pub fn field(&self, turn: f64) -> Vector3<f64> {
        let (sin, cos) = self.angle.sin_cos();
        Vector3::new(cos * turn.cos(), sin * (turn - self.phase).cos(), 0.0)
    }
}

/// Angle between two axes, radians in [0, pi/2].
fn apart(a: f64, b: f64) -> f64 {
    let quarter = std::f64::consts::FRAC_PI_2;
    ((a - b + quarter).rem_euclid(2.0 * quarter) - quarter).abs()
}

/// The azimuth at which the product of the shares cos^2 of these axes is largest.
fn between(axes: &[f64]) -> f64 {
    let share = |at: f64, axis: &f64| (at - axis).cos().powi(2);
    most_even(|at| axes.iter().map(|axis| share(at, axis)).product())
}

/// The azimuth that `state` takes, with all that the pump meets before each crystal; `None` where there is no pair.
fn as_the_pairs(setup: &Setup, cones: &Cones) -> Option<f64> {
    let pair = cones.crossings.iter().find_map(|row| Pair::at(row, setup.pump()))?;
    let stack = Stack::new(&setup.crystals, &setup.bench, &pair, setup.interaction).ok()?;
    Some(stack.polarization.y.re.atan2(stack.polarization.x.re))
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn given(angle: f64, phase: f64) -> PumpLight {
        PumpLight { angle: angle.to_radians(), phase: phase.to_radians(), given: true }
    }

    #[test]
    fn polarizations_are_axes() {
        let between = |axes: [f64; 2]| axis(between(&axes.map(f64::to_radians))).to_degrees();
        // the middle of 0 deg and 179.4 deg is 179.7 deg, not 89.7 deg
        assert_abs_diff_eq!(between([0.0, 179.4]), 179.7, epsilon = 1e-6);
        assert_abs_diff_eq!(between([10.0, 30.0]), 20.0, epsilon = 1e-6);
        // of two that are as good, the smaller
        assert_abs_diff_eq!(between([90.0, 0.0]), 45.0, epsilon = 1e-6);
        assert_abs_diff_eq!(
            apart(0.02f64.to_radians(), 179.99f64.to_radians()).to_degrees(),
            0.03,
            epsilon = 1e-9
        );
    }

    #[test]
    fn shares_of_linear_and_circular_light() {
        let share = |light: PumpLight, azimuth: f64| light.share(azimuth.to_radians());
        // Malus: cos^2 of the angle between
        assert_abs_diff_eq!(share(given(30.0, 0.0), 90.0), 0.25, epsilon = 1e-12);
        assert_abs_diff_eq!(share(given(30.0, 180.0), 150.0), 1.0, epsilon = 1e-12);
        for azimuth in [0.0, 33.0, 90.0, 135.0] {
            assert_abs_diff_eq!(share(given(45.0, 90.0), azimuth), 0.5, epsilon = 1e-12);
        }
        assert_abs_diff_eq!(given(30.0, 180.0).linear().expect("linear").to_degrees(), 150.0, epsilon = 1e-9);
        assert!(given(45.0, 90.0).linear().is_none());
        assert_abs_diff_eq!(given(45.0, 90.0).field(1.0).norm(), 0.5f64.sqrt(), epsilon = 1e-12);
    }
}

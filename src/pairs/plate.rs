//! What a candidate plate does to the phase between the two histories, per metre of its thickness.

use nalgebra::{Vector2, Vector3};

use super::mixture::Sample;
use super::slab::{Ray, Slab};
use super::stack::{PUMP, Stack, wavelength};
use super::state::Amplitude;
use super::{HistoryBasis, PairsError, Place};
use crate::optics::{Crystal, Medium, Sheet};
use crate::quantity::{Angle, SPEED_OF_LIGHT};

/// A pair that stands for others: where it goes and with which phase and weight.
#[derive(Debug, Clone, Copy)]
pub struct Point {
    pub k0: [f64; 3],
    pub directions: [Vector3<f64>; 2],
    /// Product of the first history's amplitude and the conjugate of the second's, weighed.
    pub value: Amplitude,
}

impl Point {
    pub fn new(sample: &Sample, basis: &HistoryBasis) -> Self {
        let amplitude = |history: usize| {
            let born = &sample.born[history];
            let along = |arm: usize| {
                let axes = if arm == 0 { &basis.a } else { &basis.b };
                axes.column(history).dotc(&born.fields[arm])
            };
            born.phi * along(0) * along(1)
        };
        let value = amplitude(0) * amplitude(1).conj() * sample.weight;
        Self { k0: sample.k0, directions: sample.directions, value }
    }
}

/// The fields between which a plate makes a phase: those of the first and the second history where it stands.
#[derive(Debug, Clone, Copy)]
pub struct Site {
    pub place: Place,
    fields: [Vector2<f64>; 2],
    /// Nominal direction.
    nominal: Vector3<f64>,
    /// Index in arrays of a, b, pump.
    wave: usize,
}

impl Site {
    /// In arm 0 (a) or 1 (b), by itself or behind a half-wave plate that exchanges H and V.
    pub fn in_arm(stack: &Stack, basis: &HistoryBasis, arm: usize, half_wave: bool) -> Self {
        let axes = if arm == 0 { &basis.a } else { &basis.b };
        let [h, v] = if half_wave { [1, 0] } else { [0, 1] };
        let field = |j: usize| Vector2::new(axes[(h, j)].re, axes[(v, j)].re);
        let place = if arm == 0 { Place::A } else { Place::B };
        Self { place, fields: [field(0), field(1)], nominal: stack.arms[arm], wave: arm }
    }

    /// In the pump; `None` where one polarization drives both histories.
    pub fn in_pump(stack: &Stack) -> Result<Option<Self>, PairsError> {
        let tuned = stack.tuned()?;
        let ray = Ray::new(tuned.k0[PUMP], Vector3::z());
        let row = |index: usize| {
            let history = &stack.histories[stack.named[index]];
            let row = stack.pump_row(&tuned, history.crystal, history.roles.pump, &ray);
            // the polarization that drives this history alone most, made real
            row.map(|row| {
                let larger = if row.x.norm() > row.y.norm() { row.x } else { row.y };
                (row * nalgebra::Complex::cis(-larger.arg())).map(|c| c.re).normalize()
            })
        };
        let (Some(first), Some(second)) = (row(0), row(1)) else { return Ok(None) };
        let across = first.dot(&second).abs() < 0.5;
        let site = Self { place: Place::Pump, fields: [first, second], nominal: Vector3::z(), wave: PUMP };
        Ok(across.then_some(site))
    }

    /// Roll that lays u along the first history's field, turned by quarter turns.
    pub fn roll(&self, quarters: usize) -> Angle {
        let azimuth = self.fields[0].y.atan2(self.fields[0].x).to_degrees() + 90.0 * quarters as f64;
        Angle::from_degrees((azimuth + 180.0).rem_euclid(360.0) - 180.0)
    }

    /// The plate with a face across the arm's nominal direction.
    pub fn slab(&self, plate: &Crystal) -> Slab {
        Slab::in_arm(plate, &Ray::new(1.0, self.nominal))
    }

    /// Phase of the first history minus that of the second per metre of plate at each point, rad/m. `head_on`: every photon
    /// goes along the nominal direction.
    pub fn rates(&self, plate: &Crystal, points: &[Point], head_on: bool) -> Result<Vec<f64>, PairsError> {
        let slab = self.slab(plate);
        let mut known: Option<(f64, Medium)> = None;
        let mut rates = Vec::with_capacity(points.len());
        for point in points {
            let k0 = point.k0[self.wave];
            let medium = match known {
                Some((at, medium)) if at == k0 => medium,
                _ => slab.medium(wavelength(k0 * SPEED_OF_LIGHT))?,
            };
            known = Some((k0, medium));
            let direction =
                if head_on || self.wave == PUMP { self.nominal } else { point.directions[self.wave] };
            rates.push(self.rate(&slab, &medium, &Ray::new(k0, direction)).unwrap_or(0.0));
        }
        Ok(rates)
    }

    fn rate(&self, slab: &Slab, medium: &Medium, ray: &Ray) -> Option<f64> {
        let modes = slab.modes(medium, ray)?;
        let along = |mode: usize| modes.fields.column(mode).dot(&self.fields[0]).abs();
        let [fast, slow] = modes.k_w;
        Some(if along(0) >= along(1) { fast - slow } else { slow - fast })
    }

    /// Group delay of the first history's wave minus that of the second's, s per metre of plate.
    pub fn delay(&self, plate: &Crystal, k0: f64) -> Result<f64, PairsError> {
        let slab = self.slab(plate);
        let medium = slab.medium(wavelength(k0 * SPEED_OF_LIGHT))?;
        let ray = Ray::new(k0, self.nominal);
        let waves = [Sheet::Fast, Sheet::Slow].map(|sheet| slab.wave(&medium, sheet, &ray));
        let ([Some(fast), Some(slow)], Some(rate)) = (waves, self.rate(&slab, &medium, &ray)) else {
            return Ok(0.0);
        };
        // the first history is the fast wave where its phase is the smaller
        Ok((fast.delay - slow.delay) * if rate < 0.0 { 1.0 } else { -1.0 })
    }
}

//! The crystals one behind the other, with the plates that follow, as seen by one pair of directions.

use nalgebra::{Complex, Matrix2, Vector2, Vector3};

use super::bench::{Bench, Place, PumpPolarization};
use super::slab::{Ray, Slab};
use super::state::Amplitude;
use super::{Pair, PairsError};
use crate::matching::{Emission, HistoryName, Interaction, Photons, Roles};
use crate::material::{MaterialError, tensor::Tensor};
use crate::optics::{Crystal, Medium, Sheet};
use crate::quantity::{SPEED_OF_LIGHT, Wavelength};

/// One way a pair can be made.
#[derive(Debug, Clone, Copy)]
pub struct History {
    /// Index of the crystal, from 0.
    pub crystal: usize,
    /// Photon a as signal.
    pub roles: Roles,
    /// In words.
    pub name: HistoryName,
    /// Term of the grating in Delta_k, with its sign, rad/m.
    pub grating: f64,
}

/// Crystals and plates, with the two arms.
#[derive(Debug, Clone)]
pub struct Stack {
    /// Photon a as signal, b as idler.
    pub photons: Photons,
    /// In pump order, with the material's tensor.
    pub(super) crystals: Vec<(Slab, Tensor)>,
    /// From where a wave straight across a crystal leaves it to where the beam enters the next, through air, m; after the
    /// last one back to the middle of the stack as it appears from outside.
    pub(super) air: Vec<Vector3<f64>>,
    /// Before the crystals.
    pub(super) pump_plates: Vec<Slab>,
    /// In arm a and b.
    pub(super) arm_plates: [Vec<Slab>; 2],
    /// Nominal directions of a and b.
    pub arms: [Vector3<f64>; 2],
    /// All that take part.
    pub histories: Vec<History>,
    /// Indices in `histories` of the two that meet here.
    pub named: [usize; 2],
    /// Of the pump in air, along H and V.
    pub polarization: Vector2<Amplitude>,
}

/// Pump, a and b: their place in arrays of three.
pub const PUMP: usize = 2;

/// All media at one set of frequencies.
#[derive(Debug, Clone, Default)]
pub struct Tuned {
    /// Vacuum wavenumbers of a, b and the pump, rad/m.
    pub k0: [f64; 3],
    pub crystals: Vec<[Medium; 3]>,
    pub pump_plates: Vec<Medium>,
    pub arm_plates: [Vec<Medium>; 2],
}

/// Vacuum wavelength of an angular frequency in rad/s.
pub fn wavelength(omega: f64) -> Wavelength {
    Wavelength::metres(2.0 * std::f64::consts::PI * SPEED_OF_LIGHT / omega)
}

/// Half angle up to which a pump is a beam, radians: beyond, sums over its directions would reach far beyond the rings.
const WIDEST: f64 = 0.05;

impl Stack {
    /// For a pair of directions; all histories that the interaction allows in each crystal take part.
    ///
    /// # Errors
    /// Indices that are not to be had, a crystal whose nonlinear tensor is not known, histories that do not exist.
    pub fn new(
        crystals: &[Crystal],
        bench: &Bench,
        pair: &Pair,
        interaction: Interaction,
    ) -> Result<Self, PairsError> {
        // lambda/(pi w), the 1/e^2 half angle of a Gaussian beam
        let spread = |waist: f64| pair.photons.pump.si() / (std::f64::consts::PI * waist);
        if let Some(waist) = bench.waist
            && spread(waist.si()) > WIDEST
        {
            let spread_deg = spread(waist.si()).to_degrees();
            return Err(PairsError::TightWaist { waist, spread_deg, least_um: 1e6 * spread(WIDEST) });
        }
        let mut slabs = Vec::with_capacity(crystals.len());
        let mut histories = Vec::new();
        for (index, crystal) in crystals.iter().enumerate() {
            let tensor = crystal
                .material
                .tensor
                .clone()
                .ok_or_else(|| PairsError::NoTensor { material: crystal.material.id.clone() })?;
            slabs.push((Slab::new(crystal), tensor));
            histories_of(crystal, index, pair, interaction, &mut histories)?;
        }
        let place = |name: &HistoryName| histories.iter().position(|h| h.name == *name);
        let named = place(&pair.first).zip(place(&pair.second)).ok_or(PairsError::NoHistories)?;
        let arms = [pair.a, pair.b].map(|d| d.lab().0);
        let rays = [(pair.photons.signal, arms[0]), (pair.photons.idler, arms[1])]
            .map(|(w, d)| Ray::new(w.wavenumber(), d));
        let plates = |arm: usize| -> Vec<Slab> {
            let own = bench.compensators.iter().filter(|c| c.place.is_in(arm));
            own.map(|c| Slab { exchanged: c.half_wave, ..Slab::in_arm(&c.plate, &rays[arm]) }).collect()
        };
        let in_pump = bench.compensators.iter().filter(|c| c.place == Place::Pump);
        let mut stack = Self {
            photons: pair.photons,
            air: air(&slabs, bench),
            crystals: slabs,
            pump_plates: in_pump.map(|c| Slab::new(&c.plate)).collect(),
            arm_plates: [plates(0), plates(1)],
            arms,
            histories,
            named: [named.0, named.1],
            polarization: Vector2::new(Complex::from(1.0), Complex::from(0.0)),
        };
        stack.polarization = match bench.polarization {
            PumpPolarization::Given { angle, phase } => {
                let (sin, cos) = angle.si().sin_cos();
                Vector2::new(Complex::from(cos), Complex::from_polar(sin, phase.si()))
            }
            PumpPolarization::Matched => stack.matched()?,
        };
        Ok(stack)
    }

    /// Angular frequencies of a, b and the pump at the nominal wavelengths, rad/s.
    pub fn nominal(&self) -> [f64; 3] {
        let Photons { pump, signal, idler } = self.photons;
        [signal, idler, pump].map(Wavelength::angular_frequency)
    }

    /// Fills in all media for the given frequencies of a and the pump.
    pub fn tune(&self, tuned: &mut Tuned, a: f64, pump: f64) -> Result<(), MaterialError> {
        let waves = [a, pump - a, pump].map(wavelength);
        tuned.k0 = waves.map(Wavelength::wavenumber);
        tuned.crystals.clear();
        for (slab, _) in &self.crystals {
            let [a, b, pump] = waves.map(|w| slab.medium(w));
            tuned.crystals.push([a?, b?, pump?]);
        }
        let fill = |media: &mut Vec<Medium>, slabs: &[Slab], wave: Wavelength| -> Result<(), MaterialError> {
            media.clear();
            for slab in slabs {
                media.push(slab.medium(wave)?);
            }
            Ok(())
        };
        fill(&mut tuned.pump_plates, &self.pump_plates, waves[PUMP])?;
        for ((media, plates), wave) in tuned.arm_plates.iter_mut().zip(&self.arm_plates).zip(waves) {
            fill(media, plates, wave)?;
        }
        Ok(())
    }

    /// Everything at the nominal frequencies.
    pub fn tuned(&self) -> Result<Tuned, MaterialError> {
        let mut tuned = Tuned::default();
        let [a, _, pump] = self.nominal();
        self.tune(&mut tuned, a, pump)?;
        Ok(tuned)
    }

    /// Where b goes when a and the pump photon go as given: their tangential wave vectors are those at the face of the
    /// crystal of the first history.
    pub fn follow(&self, pump: &Vector3<f64>, a: &Vector3<f64>, k0: &[f64; 3]) -> Option<Vector3<f64>> {
        let (slab, _) = &self.crystals[self.histories[self.named[0]].crystal];
        slab.outside(slab.tangential(&(pump * k0[PUMP] - a * k0[0])), k0[1])
    }

    /// The linear polarization that drives all crystals as evenly as can be: largest product of the pump's intensities in
    /// the waves that pump each, at the smallest azimuth of several.
    fn matched(&self) -> Result<Vector2<Amplitude>, PairsError> {
        let tuned = self.tuned()?;
        let pump = Ray::new(tuned.k0[PUMP], Vector3::z());
        let mut rows = Vec::with_capacity(self.crystals.len());
        for (index, _) in self.crystals.iter().enumerate() {
            let Some(history) = self.histories.iter().find(|h| h.crystal == index) else { continue };
            let row =
                self.pump_row(&tuned, index, history.roles.pump, &pump).ok_or(PairsError::NoHistories)?;
            rows.push(row);
        }
        let linear = |angle: f64| Vector2::new(angle.cos(), angle.sin()).map(Complex::from);
        let driven = |row: &Vector2<Amplitude>, angle: f64| (row.transpose() * linear(angle))[0].norm_sqr();
        Ok(linear(most_even(|angle| rows.iter().map(|row| driven(row, angle)).product())))
    }

    /// Amplitude of the wave that pumps a crystal, as a row to be multiplied with the polarization before everything.
    pub fn pump_row(
        &self,
        tuned: &Tuned,
        crystal: usize,
        sheet: Sheet,
        ray: &Ray,
    ) -> Option<Vector2<Amplitude>> {
        let mut matrix = Matrix2::identity();
        for (plate, medium) in self.pump_plates.iter().zip(&tuned.pump_plates) {
            matrix = plate.transfer(medium, ray)? * matrix;
        }
        for (index, (slab, _)) in self.crystals[..crystal].iter().enumerate() {
            let across = slab.transfer(&tuned.crystals[index][PUMP], ray)?;
            matrix = across * matrix * ray.phase(&self.air[index]);
        }
        let inverse =
            self.crystals[crystal].0.modes(&tuned.crystals[crystal][PUMP], ray)?.fields.try_inverse()?;
        let row = inverse.row(usize::from(sheet == Sheet::Slow)).map(Complex::from);
        Some((row * matrix).transpose())
    }
}

/// The azimuth from 0 to pi, but for rounding, at which the product of the crystals' intensities is largest, the smallest of several.
#[must_use]
pub fn most_even(evenness: impl Fn(f64) -> f64) -> f64 {
    let mut best = (0.0, evenness(0.0));
    let mut step = 1f64.to_radians();
    for degree in 1..180 {
        let angle = f64::from(degree) * step;
        let value = evenness(angle);
        // one of equals is taken, whatever rounding says
        if value > best.1 * (1.0 + 1e-6) + 1e-12 {
            best = (angle, value);
        }
    }
    while step > 1e-10 {
        let sides = [best.0 - step, best.0 + step].map(|angle| (angle, evenness(angle)));
        match sides.iter().find(|side| side.1 > best.1) {
            Some(side) => best = *side,
            None => step *= 0.5,
        }
    }
    best.0
}

fn histories_of(
    crystal: &Crystal,
    index: usize,
    pair: &Pair,
    interaction: Interaction,
    histories: &mut Vec<History>,
) -> Result<(), PairsError> {
    let emission = Emission::of(crystal, pair.photons)?;
    let all = emission.wanted(crystal, interaction).map_err(PairsError::Description)?;
    for roles in all {
        let sign = if emission.grating == 0.0 { 1.0 } else { emission.grating_sign(roles).unwrap_or(1.0) };
        let name = HistoryName { crystal: index, process: emission.process(roles) };
        histories.push(History { crystal: index, roles, name, grating: sign * emission.grating });
    }
    Ok(())
}

/// Ways through air behind each crystal: the beam enters each crystal on the z axis.
fn air(slabs: &[(Slab, Tensor)], bench: &Bench) -> Vec<Vector3<f64>> {
    let mut ways = Vec::with_capacity(slabs.len());
    let mut seen = 0.0;
    for (index, (slab, _)) in slabs.iter().enumerate() {
        let normal = slab.normal();
        let along = slab.length / normal.z;
        let gap = bench.gaps.get(index + 1).map_or(0.0, |gap| gap.si());
        let last = index + 1 == slabs.len();
        // seen from outside, a plate of index 1.6 is that much thinner
        seen += along / 1.6;
        let next = if last { along - 0.5 * seen } else { along + gap };
        seen += gap;
        ways.push(Vector3::z() * next - normal * slab.length);
    }
    ways
}

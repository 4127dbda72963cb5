//! The amplitude of a pair and its polarization behind everything.
//!
//! A wave e^(i(k.r - omega t)) advances by k_w L straight across a slab. The pump reaches depth w with the phase k_p w, the
//! pair made there leaves with (k_a + k_b)(L - w), all of them normal components; with Delta_k = k_p - k_a - k_b - K
//! (K the grating)
//!
//! integral_0^L e^(i [(k_p - K) w + (k_a + k_b)(L - w)]) dw = L sinc(Delta_k L/2) e^(i (k_p + k_a + k_b - K) L/2),
//!
//! so that Phi = d_eff A_p L sinc(Delta_k L/2) e^(i (k_p + k_a + k_b - K) L/2) with A_p the pump's amplitude, phase
//! included, in its wave at the crystal's entrance. The pair's field is Phi e_a (x) e_b; later slabs act on each photon as
//! matrices between transverse fields, so that arbitrary signs of the unit fields cancel.

use nalgebra::{Complex, Matrix2, Vector2, Vector4};

use super::slab::{Ray, Slab};
use super::stack::{History, PUMP, Stack, Tuned};
use super::state::Amplitude;
use crate::optics::Medium;

/// A pair of one history behind everything.
#[derive(Debug, Clone, Copy)]
pub struct Born {
    /// Phi, pm/V times m.
    pub phi: Amplitude,
    /// Field of photon a and of photon b in H and V of its own direction.
    pub fields: [Vector2<Amplitude>; 2],
    /// Delta_k L/2.
    pub detuning: f64,
}

impl Born {
    /// The two-photon field in HH, HV, VH, VV.
    pub fn field(&self) -> Vector4<Amplitude> {
        self.fields[0].kronecker(&self.fields[1]) * self.phi
    }
}

/// How far a pair is followed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Behind {
    /// Behind the last crystal.
    Crystals,
    /// Behind the plates in the arms too, at the direction the photon has.
    Plates,
    /// Behind the plates in the arms, which every photon passes along the nominal direction of its arm.
    PlatesHeadOn,
}

impl Stack {
    /// Pairs of all histories towards two directions, in the order of `histories`; `None` where a wave does not exist.
    pub fn born(&self, tuned: &Tuned, a: &Ray, b: &Ray, behind: Behind, out: &mut Vec<Born>) -> Option<()> {
        out.clear();
        for history in &self.histories {
            let mut born = self.made(tuned, history, [a, b])?;
            for (arm, ray) in [a, b].into_iter().enumerate() {
                born.fields[arm] = self.leave(tuned, history.crystal, arm, ray, behind)? * born.fields[arm];
            }
            out.push(born);
        }
        Some(())
    }

    /// The pair as it leaves the crystal it was made in.
    fn made(&self, tuned: &Tuned, history: &History, [a, b]: [&Ray; 2]) -> Option<Born> {
        let crystal = history.crystal;
        let (slab, tensor) = &self.crystals[crystal];
        let media = &tuned.crystals[crystal];
        // the pump wave that this pair takes its tangential wave vector from
        let q_pump = slab.tangential(&(a.d * a.k0 + b.d * b.k0));
        let pump = Ray::new(tuned.k0[PUMP], slab.outside(q_pump, tuned.k0[PUMP])?);
        let waves = [
            slab.wave(&media[0], history.roles.signal, a)?,
            slab.wave(&media[1], history.roles.idler, b)?,
            media[PUMP].wave(history.roles.pump, q_pump)?,
        ];
        let [ka, kb, kp] = [0, 1, PUMP].map(|i| waves[i].k.0.z);
        let half = 0.5 * slab.length;
        let detuning = (kp - ka - kb - history.grating) * half;
        let [ea, eb, ep] = [0, 1, PUMP].map(|i| slab.dielectric(&waves[i]));
        let row = self.pump_row(tuned, crystal, history.roles.pump, &pump)?;
        let driven = (row.transpose() * self.polarization)[0];
        let size = tensor.contract(ep, ea, eb) * slab.length * sinc(detuning);
        let phi = driven * Complex::from_polar(1.0, (kp + ka + kb - history.grating) * half) * size;
        let fields = [
            a.transverse(&slab.field(&waves[0])).map(Complex::from),
            b.transverse(&slab.field(&waves[1])).map(Complex::from),
        ];
        Some(Born { phi, fields, detuning })
    }

    /// What a photon's field meets behind the crystal it was made in.
    fn leave(
        &self,
        tuned: &Tuned,
        crystal: usize,
        arm: usize,
        ray: &Ray,
        behind: Behind,
    ) -> Option<Matrix2<Amplitude>> {
        let mut matrix = Matrix2::identity() * ray.phase(&self.air[crystal]);
        for (index, (slab, _)) in self.crystals.iter().enumerate().skip(crystal + 1) {
            let across = slab.transfer(&tuned.crystals[index][arm], ray)?;
            matrix = across * matrix * ray.phase(&self.air[index]);
        }
        let through = match behind {
            Behind::Crystals => return Some(matrix),
            Behind::Plates => *ray,
            Behind::PlatesHeadOn => Ray::new(ray.k0, self.arms[arm]),
        };
        for (plate, medium) in self.arm_plates[arm].iter().zip(&tuned.arm_plates[arm]) {
            matrix = beyond_air(plate, medium, &through)? * matrix;
        }
        Some(matrix)
    }
}

/// A plate's matrix without the phase of the air it displaces.
fn beyond_air(plate: &Slab, medium: &Medium, ray: &Ray) -> Option<Matrix2<Amplitude>> {
    let air = ray.phase(&(plate.normal() * plate.length)).conj();
    let matrix = plate.transfer(medium, ray)? * air;
    // a half-wave plate at 45 deg exchanges H and V
    Some(if plate.exchanged {
        Matrix2::new(matrix[(1, 1)], matrix[(1, 0)], matrix[(0, 1)], matrix[(0, 0)])
    } else {
        matrix
    })
}

/// sin(x)/x.
fn sinc(x: f64) -> f64 {
    if x.abs() < 1e-8 { 1.0 } else { x.sin() / x }
}

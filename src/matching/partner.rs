//! A pump photon and its pair as waves: fields, rays, delays, effective nonlinearity.

use super::Status;
use super::emission::Emission;
use super::interaction::{Interaction, Process, Roles};
use super::mismatch::Mismatch;
use crate::frame::{Direction, Tangential};
use crate::material::tensor::Tensor;
use crate::optics::{Crystal, Wave};

/// Three waves of one process; the signal's direction is given.
#[derive(Debug, Clone, Copy)]
pub struct Pairing {
    /// Pump in the crystal.
    pub pump: Wave,
    /// Signal in the crystal.
    pub signal: Wave,
    /// Idler in the crystal.
    pub idler: Wave,
    /// Delta_k with the grating, rad/m.
    pub mismatch: f64,
    /// The idler outside; `None` where it is totally reflected.
    pub idler_outside: Option<Direction>,
}

impl Pairing {
    pub(super) fn new(emission: &Emission, roles: Roles, direction: Direction) -> Option<Self> {
        Self::of(emission, roles, &emission.mismatch(roles)?, direction)
    }

    /// The same where the mismatch is known.
    pub(super) fn of(
        emission: &Emission,
        roles: Roles,
        mismatch: &Mismatch,
        direction: Direction,
    ) -> Option<Self> {
        // behind the exit face there is no such direction
        let sample = mismatch.along(direction.lab().0)?;
        let q = mismatch.tangential(direction);
        let q_idler: Tangential = mismatch.pump() - q;
        Some(Self {
            pump: emission.media.pump.wave(roles.pump, mismatch.pump())?,
            signal: emission.media.signal.wave(roles.signal, q)?,
            idler: emission.media.idler.wave(roles.idler, q_idler)?,
            mismatch: sample.value,
            idler_outside: mismatch.partner(direction),
        })
    }

    /// |d_eff| in pm/V, with the unit electric fields of the three waves, walk-off included.
    #[must_use]
    pub fn d_eff(&self, emission: &Emission, tensor: &Tensor) -> f64 {
        let dielectric = |wave: &Wave| emission.placement.to_dielectric(wave.field);
        tensor.contract(dielectric(&self.pump), dielectric(&self.signal), dielectric(&self.idler)).abs()
    }

    /// Group delay of the signal minus that of the idler, s/m of crystal.
    #[must_use]
    pub fn delay(&self) -> f64 {
        self.signal.delay - self.idler.delay
    }

    /// sinc^2(Delta_k L/2) for a crystal of this length (m).
    #[must_use]
    pub fn phase_matching_factor(&self, length: f64) -> f64 {
        phase_matching_factor(self.mismatch, length)
    }

    /// Whether one of the waves travels along an optic axis.
    #[must_use]
    pub fn on_optic_axis(&self) -> bool {
        [&self.pump, &self.signal, &self.idler].iter().any(|w| w.on_optic_axis)
    }
}

/// A process in which a photon can have been made, with the pair's waves where they exist.
#[derive(Debug, Clone, Copy)]
pub struct Twin {
    /// Sheets of the three waves, the given photon as signal.
    pub roles: Roles,
    /// In words.
    pub process: Process,
    /// The waves; `None` where one of them does not exist.
    pub pairing: Option<Pairing>,
    /// `Ok`, `TotalReflection`, `OpticAxis` or `NoNonlinearity`.
    pub status: Status,
}

/// The partners of a photon that leaves towards `direction`, one for each process that can have made it.
///
/// # Errors
/// o and e asked of a biaxial crystal.
pub fn twins(
    crystal: &Crystal,
    emission: &Emission,
    interaction: Interaction,
    direction: Direction,
) -> Result<Vec<Twin>, String> {
    let all = emission.wanted(crystal, interaction)?;
    Ok(all
        .into_iter()
        .map(|roles| {
            let pairing = emission.pairing(roles, direction);
            let status = match &pairing {
                None => Status::TotalReflection,
                Some(p) if p.idler_outside.is_none() => Status::TotalReflection,
                Some(p) if p.on_optic_axis() => Status::OpticAxis,
                _ if emission.is_dark(crystal, roles, direction) == Some(true) => Status::NoNonlinearity,
                _ => Status::Ok,
            };
            Twin { roles, process: emission.process(roles), pairing, status }
        })
        .collect())
}

/// sinc^2(Delta_k L/2) for a mismatch in rad/m and a crystal length in m.
#[must_use]
pub fn phase_matching_factor(mismatch: f64, length: f64) -> f64 {
    sinc(0.5 * mismatch * length).powi(2)
}

/// sin(x)/x.
fn sinc(x: f64) -> f64 {
    if x.abs() < 1e-8 { 1.0 } else { x.sin() / x }
}

/// The argument at which sinc^2 has fallen to one half: sin(x)/x = 1/sqrt(2).
pub(crate) const HALF_MAXIMUM: f64 = 1.391_557_378_251_510_2;

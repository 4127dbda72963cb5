//! How far a condition may stray before the pairs are gone: full widths at half maximum of sinc^2(Delta_k L/2), found
//! on the real function, so that they are right where the first derivative vanishes.

use super::emission::{Emission, Photons, Triplet};
use super::interaction::Roles;
use super::partner::HALF_MAXIMUM;
use super::rig::retuned;
use super::root::bracketed;
use crate::frame::Direction;
use crate::material::Reach;
use crate::optics::Crystal;
use crate::quantity::{Angle, Temperature, Wavelength};

/// Full widths; `None` where the half-maximum points are not within reach.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Acceptance {
    /// Turn of the crystal about v while pump and photons keep their directions; radians, outside.
    pub pump_angle: Option<f64>,
    /// Pump wavelength, with the photons' frequencies scaled alike and their directions kept; m.
    pub pump_wavelength: Option<f64>,
    /// Signal wavelength at a given pump and signal direction; the idler adapts; m.
    pub signal: Option<f64>,
    /// Temperature alone; K.
    pub temperature: Option<f64>,
}

/// Acceptances of a process about a signal direction.
#[must_use]
pub fn acceptances(crystal: &Crystal, photons: Photons, roles: Roles, signal: Direction) -> Acceptance {
    let Ok(triplet) = Triplet::new(crystal, &photons) else { return Acceptance::default() };
    let sign = Emission::new(crystal, photons, &triplet).grating_sign(roles).unwrap_or(1.0);
    let mismatch = |emission: &Emission| {
        // the grating keeps the sign it has at the design point
        let grating = sign * emission.grating;
        let m = super::mismatch::Mismatch::new(&emission.media, roles, &emission.placement, grating)?;
        m.at(m.tangential(signal)).map(|s| s.value)
    };
    let edge = 2.0 * HALF_MAXIMUM / crystal.hot_length().si();
    let tilted = |turn: f64| {
        let mut crystal = crystal.clone();
        crystal.orientation.tilt = Angle::radians(crystal.orientation.tilt.si() + turn);
        mismatch(&Emission::new(&crystal, photons, &triplet))
    };
    let pumped = |shift: f64| {
        let photons = retuned(&photons, Wavelength::metres(photons.pump.si() + shift), None)?;
        mismatch(&Emission::of(crystal, photons).ok()?)
    };
    let signalled = |shift: f64| {
        let photons = Photons::new(photons.pump, Wavelength::metres(photons.signal.si() + shift))?;
        mismatch(&Emission::of(crystal, photons).ok()?)
    };
    let heated = |shift: f64| {
        let temperature = Temperature::celsius(crystal.temperature.degc() + shift);
        // a width may reach beyond the range that the thermo-optic terms were measured in
        let hot = Crystal { temperature, reach: Reach::Extrapolate, ..crystal.clone() };
        mismatch(&Emission::of(&hot, photons).ok()?)
    };
    Acceptance {
        pump_angle: full_width(tilted, edge, 1e-6, 0.5),
        pump_wavelength: full_width(pumped, edge, 1e-14, 0.2 * photons.pump.si()),
        signal: full_width(signalled, edge, 1e-13, 0.6 * photons.signal.si()),
        temperature: crystal.set().has_thermo_optics().then(|| full_width(heated, edge, 1e-3, 1e3)).flatten(),
    }
}

/// Distance between the first points on either side of 0 at which |f| reaches `edge`.
fn full_width(f: impl Fn(f64) -> Option<f64>, edge: f64, first: f64, limit: f64) -> Option<f64> {
    let side = |sign: f64| {
        let beyond = |x: f64| f(sign * x).map(|value| value.abs() - edge);
        let at_zero = beyond(0.0).filter(|v| *v < 0.0)?;
        let (mut inside, mut inside_value, mut step) = (0.0, at_zero, first);
        while inside < limit {
            let x = inside + step;
            let value = beyond(x)?;
            if value >= 0.0 {
                return bracketed(beyond, inside, x, inside_value);
            }
            (inside, inside_value) = (x, value);
            step *= 1.25;
        }
        None
    };
    Some(side(1.0)? + side(-1.0)?)
}

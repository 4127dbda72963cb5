//! What numbers a description may hold: the same for values that are read from a file and for those a sweep sets.

use std::fmt::Display;

use nalgebra::Vector3;

use crate::frame::Orientation;
use crate::quantity::{Angle, Length, Temperature, Wavelength};

/// A sentence that says which values would do.
pub type Limit = Result<(), String>;

/// The beam would miss a face that stands further off than this, degrees.
const EDGE_ON: f64 = 80.0;

fn all_right(fine: bool, otherwise: impl FnOnce() -> String) -> Limit {
    if fine { Ok(()) } else { Err(otherwise()) }
}

/// `shown` is the value as it was typed.
pub(super) fn positive(length: Length, what: &str, shown: &dyn Display) -> Limit {
    all_right(length.si() > 0.0, || format!("{what} must be positive, not {shown}"))
}

/// Lengths far outside any crystal's transparency are slips of the unit; they would also make wavenumbers infinite.
pub(super) fn wavelength(wavelength: Wavelength, what: &str, shown: &dyn Display) -> Limit {
    all_right(wavelength.si() > 0.0, || format!("{what} must be positive, not {shown}"))?;
    all_right((1e-8..=1e-2).contains(&wavelength.si()), || {
        format!("{what}, {shown}, is not a wavelength of light: look at the unit")
    })
}

/// A photon of a pair, and its partner, for a pump.
pub(super) fn photon(photon: Wavelength, pump: Wavelength) -> Limit {
    let Some(partner) = photon.partner(pump) else {
        return Err(format!(
            "{photon} is not longer than the pump, {pump}: a photon of a pair has less energy than the pump"
        ));
    };
    all_right(partner.si() <= 1e-2, || {
        format!("{photon} is so near the pump, {pump}, that its partner is no light any more")
    })
}

pub(super) fn temperature(temperature: Temperature) -> Limit {
    all_right(temperature.degc() >= -273.15, || "a temperature cannot lie below absolute zero".into())
}

pub(super) fn theta(theta: Angle) -> Limit {
    all_right((0.0..=180f64.to_radians()).contains(&theta.si()), || {
        format!("theta must lie within 0 deg to 180 deg, not {theta}")
    })
}

pub(super) fn turn(angle: Angle, what: &str) -> Limit {
    all_right(angle.si().abs() <= EDGE_ON.to_radians(), || {
        format!("{what} must lie within -80 deg to 80 deg, not {angle}: the beam would miss the face")
    })
}

/// All turns of a crystal together.
pub(super) fn facing(orientation: &Orientation) -> Limit {
    let normal = orientation.rotation() * Vector3::z();
    all_right(normal.z >= EDGE_ON.to_radians().cos(), || {
        "tilt, cross tilt and the mount's turns together put the face more than 80 deg off the beam; make them \
         smaller"
            .into()
    })
}

/// An angle that a target may have: above 0 and below `most` degrees.
pub(super) fn target(angle: Angle, most: f64) -> Limit {
    all_right(angle.si() > 0.0 && angle.si() < most.to_radians(), || {
        format!("the angle must lie between 0 deg and {most} deg, not {angle}")
    })
}

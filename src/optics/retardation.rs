//! How far the two waves of a beam straight along the lab's z come apart in a crystal.

use nalgebra::Vector3;

use super::{Crystal, Medium, Sheet};
use crate::frame::Tangential;
use crate::material::MaterialError;
use crate::quantity::Wavelength;

/// Phase of the slow wave behind the fast one, in waves: (k_w,slow - k_w,fast) L / 2 pi at the beam's tangential wave
/// vector. Between crossed polarizers each whole wave is dark. `None` where a wave is evanescent.
///
/// # Errors
/// Outside the data set's range.
pub fn retardation(crystal: &Crystal, wavelength: Wavelength) -> Result<Option<f64>, MaterialError> {
    let placement = crystal.placement();
    let medium = Medium::new(&crystal.principal(wavelength)?, placement.dielectric_axes());
    let [u, v] = placement.face_axes().map(|axis| medium.k0() * axis.dot(&Vector3::z()));
    let along = |sheet: Sheet| medium.wave(sheet, Tangential { u, v }).map(|wave| wave.k.0.z);
    let waves = |rate: f64| rate * crystal.hot_length().si() / std::f64::consts::TAU;
    Ok(along(Sheet::Slow).zip(along(Sheet::Fast)).map(|(slow, fast)| waves(slow - fast)))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::material::Catalogue;
    use crate::quantity::Angle;
    use approx::assert_abs_diff_eq;
    use std::sync::Arc;

    fn bbo(theta: f64) -> Crystal {
        let material = Arc::new(Catalogue::default().get("bbo").expect("bbo"));
        let mut crystal = Crystal::new(material, Some("kato-1986")).expect("a set").with_cut(theta, 0.0);
        crystal.expands = false;
        crystal
    }

    fn waves(crystal: &Crystal) -> f64 {
        retardation(crystal, Wavelength::from_nm(405.0)).expect("indices").expect("two waves")
    }

    #[test]
    fn a_plate_with_its_axis_in_the_face_shows_the_difference_of_its_indices() {
        let crystal = bbo(90.0);
        let n = crystal.principal(Wavelength::from_nm(405.0)).expect("indices").axes.map(|index| index.n);
        // (n_o - n_e) L / lambda
        assert_abs_diff_eq!(waves(&crystal), (n[0] - n[2]) * 1e-3 / 405e-9, epsilon = 1e-9);
    }

    /// Tilt moves the beam towards or away from Z, which counts in first order; cross tilt does not.
    #[test]
    fn tilt_passes_fringes_and_cross_tilt_hardly_any() {
        let upright = bbo(42.0);
        let [mut tilted, mut crossed] = [upright.clone(), upright.clone()];
        tilted.orientation.tilt = Angle::from_degrees(1.0);
        crossed.orientation.cross_tilt = Angle::from_degrees(1.0);
        let passed = |turned: &Crystal| waves(turned) - waves(&upright);
        assert!(passed(&tilted) > 2.0, "{}", passed(&tilted));
        assert!(passed(&crossed).abs() < 0.1, "{}", passed(&crossed));
    }
}

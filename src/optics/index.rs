//! What each wave of a crystal sees, along its face normal or along the principal axes.

use super::along::{Along, along_axes, along_direction};
use super::crystal::Crystal;
use crate::material::{MaterialError, Optic};
use crate::quantity::{Temperature, Wavelength};

/// One wave at one wavelength.
#[derive(Debug, Clone)]
pub struct IndexRow {
    /// Crystal id.
    pub material: String,
    /// Data set id.
    pub dataset: String,
    /// In vacuum.
    pub wavelength: Wavelength,
    /// Of the crystal.
    pub temperature: Temperature,
    /// o, e, fast, slow, or the principal axis x, y, z; empty where there is no wave.
    pub polarization: String,
    /// What the wave sees.
    pub along: Option<Along>,
    /// dn/dT, 1/K.
    pub dn_dt: Option<f64>,
    /// Whether the wavelength is outside the data set's range.
    pub extrapolated: bool,
    /// Why there is no wave; `None` where there is one.
    pub fault: Option<MaterialError>,
}

/// The waves of a crystal at one wavelength: along its face normal where `directed`, else along the principal axes.
///
/// # Errors
/// A wavelength or temperature outside the data set's range.
pub fn index_rows(
    crystal: &Crystal,
    wavelength: Wavelength,
    directed: bool,
) -> Result<Vec<IndexRow>, MaterialError> {
    let principal = crystal.principal(wavelength)?;
    let waves: Vec<(String, Along)> = if directed {
        let [_, _, normal] = crystal.cut.axes();
        along_direction(&principal, normal.0).into_iter().map(|(p, along)| (p.to_string(), along)).collect()
    } else {
        let axes = along_axes(&principal);
        match principal.optic {
            Optic::Uniaxial => vec![("o".into(), axes[0]), ("e".into(), axes[2])],
            Optic::Biaxial => {
                ["x", "y", "z"].iter().zip(axes).map(|(n, along)| ((*n).into(), along)).collect()
            }
        }
    };
    let slopes: [Option<f64>; 3] =
        std::array::from_fn(|axis| crystal.set().thermo_slope(axis, wavelength, crystal.temperature));
    Ok(waves
        .into_iter()
        .map(|(polarization, along)| IndexRow {
            material: crystal.material.id.clone(),
            dataset: crystal.set().id.clone(),
            wavelength,
            temperature: crystal.temperature,
            polarization,
            dn_dt: along.thermo_slope(&principal, slopes),
            extrapolated: crystal.extrapolates(wavelength),
            fault: None,
            along: Some(along),
        })
        .collect())
}

/// A row for a data set that has no index there, where several are asked.
#[must_use]
pub fn missing(crystal: &Crystal, wavelength: Wavelength, fault: MaterialError) -> IndexRow {
    IndexRow {
        material: crystal.material.id.clone(),
        dataset: crystal.set().id.clone(),
        wavelength,
        temperature: crystal.temperature,
        polarization: String::new(),
        along: None,
        dn_dt: None,
        extrapolated: false,
        fault: Some(fault),
    }
}

//! Why a material cannot be had or used.

use thiserror::Error;

use crate::quantity::{Temperature, Wavelength};

/// Why a material cannot be had or used.
#[derive(Debug, Clone, Error)]
pub enum MaterialError {
    /// No crystal of this id.
    #[error("unknown crystal `{id}`{hint}; `twincone materials` lists them")]
    Unknown {
        /// As asked for.
        id: String,
        /// ", did you mean ...", or nothing.
        hint: String,
    },
    /// No such data set of this crystal.
    #[error("{material} has no data set `{dataset}`; it has {available}")]
    UnknownDataset {
        /// Crystal id.
        material: String,
        /// As asked for.
        dataset: String,
        /// Ids of those it has.
        available: String,
    },
    /// A wavelength that the data set does not cover.
    #[error(
        "{whose}{wavelength:.3} is outside {from} to {to}, where {material}:{dataset} is valid; {remedy}"
    )]
    OutOfRange {
        /// "the idler, ", or nothing.
        whose: &'static str,
        /// The wavelength asked for.
        wavelength: Wavelength,
        /// Shortest wavelength of the set.
        from: Wavelength,
        /// Longest wavelength of the set.
        to: Wavelength,
        /// Crystal id.
        material: String,
        /// Data set id.
        dataset: String,
        /// The sets that do cover it, and how to go on.
        remedy: String,
    },
    /// A temperature for a set that has no thermo-optic terms.
    #[error(
        "{material}:{dataset} holds at {own} only, it has no thermo-optic terms (asked for {asked}); {remedy}"
    )]
    NoThermoOptics {
        /// Crystal id.
        material: String,
        /// Data set id.
        dataset: String,
        /// The set's own temperature.
        own: Temperature,
        /// The temperature asked for.
        asked: Temperature,
        /// The sets that have terms.
        remedy: String,
    },
    /// A temperature outside the range of the thermo-optic terms.
    #[error(
        "{asked} is outside {from} to {to}, where the thermo-optic terms of {material}:{dataset} are valid; choose a temperature inside or pass --extrapolate"
    )]
    TemperatureOutOfRange {
        /// The temperature asked for.
        asked: Temperature,
        /// Lowest temperature.
        from: Temperature,
        /// Highest temperature.
        to: Temperature,
        /// Crystal id.
        material: String,
        /// Data set id.
        dataset: String,
    },
    /// The formula gives no index there (a pole nearby).
    #[error(
        "{material}:{dataset} gives no index at {wavelength:.3} and {temperature}: too far outside its range"
    )]
    NoIndex {
        /// The wavelength asked for.
        wavelength: Wavelength,
        /// The temperature asked for.
        temperature: Temperature,
        /// Crystal id.
        material: String,
        /// Data set id.
        dataset: String,
    },
    /// A material file that cannot be read.
    #[error("{0}")]
    File(String),
}

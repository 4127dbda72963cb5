//! A material file as it is written: TOML, every number with its source. Validation is in [`super::Material`].

use std::collections::BTreeMap;

use serde::Deserialize;
use toml::Spanned;

use super::dispersion::{Axis, TemperatureFactor, ThermoAxis};

/// How a number is known.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Deserialize)]
pub enum Known {
    /// Read in a published text or an open data base.
    #[serde(rename = "seen")]
    Seen,
    /// Read where somebody else quotes it.
    #[serde(rename = "seen second-hand")]
    SeenSecondHand,
    /// Written down from memory; to be confirmed in the paper.
    #[serde(rename = "from memory")]
    FromMemory,
    /// A habit of the trade with no source.
    #[serde(rename = "common practice")]
    CommonPractice,
}

impl std::fmt::Display for Known {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(match self {
            Self::Seen => "seen",
            Self::SeenSecondHand => "seen second-hand",
            Self::FromMemory => "from memory",
            Self::CommonPractice => "common practice",
        })
    }
}

/// One crystal.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct File {
    pub id: Spanned<String>,
    pub name: String,
    pub formula: String,
    pub point_group: Spanned<String>,
    pub optic: Optic,
    pub default_dataset: Spanned<String>,
    pub transparency: Option<Window>,
    pub nonlinearity: Option<Spanned<Nonlinearity>>,
    pub thermal_expansion: Option<Expansion>,
    #[serde(default)]
    pub note: Vec<Note>,
    pub dataset: Vec<Spanned<Dataset>>,
}

/// Number of optic axes, as declared.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Optic {
    /// One optic axis, along Z.
    Uniaxial,
    /// Two optic axes; n_X < n_Y < n_Z.
    Biaxial,
}

/// Where the crystal transmits.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Window {
    pub from: Spanned<String>,
    pub to: Spanned<String>,
    pub known: Known,
    pub source: String,
}

/// Published elements of the nonlinear tensor.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Nonlinearity {
    pub elements_pm_per_v: BTreeMap<String, f64>,
    pub kleinman: bool,
    pub wavelength: Option<String>,
    pub frame: Frame,
    pub unique_axis: Option<String>,
    pub convention: Option<String>,
    pub other_convention: Option<OtherConvention>,
    pub known: Known,
    pub source: String,
}

/// Another choice of crystal axes in use, in which the same cut has another phi.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct OtherConvention {
    /// phi there minus phi here.
    pub phi_shift: Spanned<String>,
    /// |d_eff| repeats after this turn.
    pub phi_period: Spanned<String>,
    /// How to tell it.
    pub text: String,
}

/// Along which of the tensor's axes each dielectric axis lies: `"x"`, `"-y"`, ...
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Frame {
    pub x: String,
    pub y: String,
    pub z: String,
}

/// Relative length change along each axis.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Expansion {
    pub reference: Spanned<String>,
    pub o: Option<ExpansionAxis>,
    pub e: Option<ExpansionAxis>,
    pub x: Option<ExpansionAxis>,
    pub y: Option<ExpansionAxis>,
    pub z: Option<ExpansionAxis>,
    pub known: Known,
    pub source: String,
}

/// dl/l = linear t + quadratic t^2.
#[derive(Debug, Clone, Copy, Default, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ExpansionAxis {
    #[serde(default)]
    pub linear_per_k: f64,
    #[serde(default)]
    pub quadratic_per_k2: f64,
}

/// Something a buyer should know.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Note {
    pub text: String,
    pub known: Known,
    pub source: String,
}

/// One publication's indices.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Dataset {
    pub id: Spanned<String>,
    pub citation: String,
    pub known: Known,
    pub seen_in: Option<String>,
    pub range: Range,
    pub temperature: Option<Spanned<String>>,
    pub medium: Relative,
    pub warning: Option<String>,
    pub remark: Option<String>,
    pub form: Spanned<Form>,
    pub thermo: Option<Spanned<Thermo>>,
    #[serde(default)]
    pub check: Vec<Check>,
    #[serde(default)]
    pub independent: Vec<Independent>,
}

/// What the indices are relative to.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Relative {
    /// Vacuum.
    Absolute,
    /// Air.
    Air,
    /// The source does not say.
    #[serde(rename = "not stated")]
    NotStated,
}

impl std::fmt::Display for Relative {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(match self {
            Self::Absolute => "absolute",
            Self::Air => "relative to air",
            Self::NotStated => "not stated whether absolute or relative to air",
        })
    }
}

/// Two quantities.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Range {
    pub from: Spanned<String>,
    pub to: Spanned<String>,
}

/// Coefficients per axis; `o`, `e` or `x`, `y`, `z`.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Form {
    pub kind: FormKind,
    pub temperature_factor: Option<TemperatureFactor>,
    pub o: Option<Axis>,
    pub e: Option<Axis>,
    pub x: Option<Axis>,
    pub y: Option<Axis>,
    pub z: Option<Axis>,
}

/// Name of the formula, in words.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Deserialize)]
pub enum FormKind {
    /// See [`super::dispersion`].
    #[serde(rename = "resonances and powers")]
    ResonancesAndPowers,
}

/// Thermo-optic terms, with their own source.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Thermo {
    pub reference: Spanned<String>,
    pub range: Option<Range>,
    pub known: Known,
    pub source: String,
    pub o: Option<ThermoAxis>,
    pub e: Option<ThermoAxis>,
    pub x: Option<ThermoAxis>,
    pub y: Option<ThermoAxis>,
    pub z: Option<ThermoAxis>,
}

/// An index value that the set must reproduce.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Check {
    pub axis: String,
    pub wavelength_um: f64,
    pub n: f64,
    pub source: String,
}

/// A published number that the set meets and that did not come from its coefficients.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Independent {
    pub what: String,
    pub source: String,
    pub known: Known,
}

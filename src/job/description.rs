//! The job file as it is written. Every quantity is a text with a unit; every value keeps its place.
//!
//! Meaning, defaults and limits are in [`super::setup`], which turns this into SI.

use std::fmt;
use std::ops::Deref;

use serde::de::{Deserializer, Error, Visitor};
use serde::{Deserialize, Serialize, Serializer};
use toml::Spanned;

/// A text and its place.
pub type Text = Spanned<Written>;

/// A value as it was written. A bare number is kept, so that what it lacks can be said where its meaning is known.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Written {
    text: String,
    bare: bool,
}

impl Written {
    /// Whether a number stood there without quotes.
    #[must_use]
    pub fn is_bare(&self) -> bool {
        self.bare
    }
}

impl Serialize for Written {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.serialize_str(&self.text)
    }
}

impl Deref for Written {
    type Target = str;

    fn deref(&self) -> &str {
        &self.text
    }
}

impl fmt::Display for Written {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(&self.text)
    }
}

impl<'de> Deserialize<'de> for Written {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        deserializer.deserialize_any(WrittenVisitor)
    }
}

struct WrittenVisitor;

impl Visitor<'_> for WrittenVisitor {
    type Value = Written;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a string")
    }

    fn visit_str<E: Error>(self, text: &str) -> Result<Written, E> {
        Ok(Written { text: text.into(), bare: false })
    }

    fn visit_bool<E: Error>(self, flag: bool) -> Result<Written, E> {
        Ok(Written { text: flag.to_string(), bare: true })
    }

    fn visit_i64<E: Error>(self, number: i64) -> Result<Written, E> {
        Ok(Written { text: number.to_string(), bare: true })
    }

    fn visit_f64<E: Error>(self, number: f64) -> Result<Written, E> {
        Ok(Written { text: number.to_string(), bare: true })
    }
}

/// A whole job.
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
pub struct Description {
    /// What the experiment is called.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub title: Option<String>,
    /// The pump.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub pump: Option<Spanned<Pump>>,
    /// Crystals, in the order in which the pump meets them.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub crystal: Vec<Spanned<Crystal>>,
    /// The common mount.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub mount: Option<Mount>,
    /// Which pairs.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub emission: Option<Spanned<Emission>>,
    /// The screen.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub screen: Option<Screen>,
    /// What the mount's scale shows.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub stage: Option<Stage>,
    /// How the photons are collected.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub collection: Vec<Collection>,
    /// Filters before the detectors.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub filter: Vec<Filter>,
    /// Compensators in the arms or the pump.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub compensator: Vec<Compensator>,
    /// What is swept.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub sweep: Option<Sweep>,
}

impl Description {
    /// All materials that are named, in crystals and in the axes of a sweep.
    #[must_use]
    pub fn materials(&self) -> Vec<&str> {
        let crystals = self.crystal.iter().filter_map(|c| c.get_ref().material.as_ref());
        let compensators = self.compensator.iter().filter_map(|c| c.material.as_ref());
        let swept = self.swept(|key| key.ends_with(".material"));
        crystals.chain(compensators).chain(swept).map(|text| &**text.get_ref()).collect()
    }

    /// Files with curves over wavelength that are named: traces of filters, spectra of the pump.
    #[must_use]
    pub fn curves(&self) -> Vec<&str> {
        let spectrum = self.pump.as_ref().and_then(|pump| pump.get_ref().spectrum.as_ref());
        let filters = self.filter.iter().filter_map(|filter| filter.file.as_ref());
        let is_curve =
            |key: &str| key == "pump.spectrum" || key.starts_with("filter.") && key.ends_with(".file");
        filters.chain(spectrum).chain(self.swept(is_curve)).map(|text| &**text.get_ref()).collect()
    }

    /// Values that sweeps give to keys.
    fn swept(&self, is_wanted: impl Fn(&str) -> bool) -> impl Iterator<Item = &Text> {
        let axes = self.sweep.iter().flat_map(|s| &s.axes).map(Spanned::get_ref);
        let axes = axes.flat_map(|a| std::iter::once(a).chain(a.together.iter().map(Spanned::get_ref)));
        let wanted = move |a: &&Axis| a.key.as_ref().is_some_and(|k| is_wanted(k.get_ref().trim()));
        axes.filter(wanted).flat_map(|a| &a.values)
    }
}

/// `[pump]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Pump {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub wavelength: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub waist: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub power: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub linewidth: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub pulse: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub spectrum: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub polarization: Option<Spanned<toml::Value>>,
}

/// `[crystal]` or `[[crystal]]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Crystal {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub name: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub material: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub dataset: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub cut: Option<Spanned<Cut>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub length: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub temperature: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub reference_temperature: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub tilt: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub cross_tilt: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub roll: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub reversed: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub poling: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub gap_before: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub thermal_expansion: Option<bool>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub extrapolate: Option<bool>,
}

/// `cut = { theta, phi }`, or a target that is solved first.
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields, rename_all = "kebab-case")]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Cut {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub theta: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub phi: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub crossing: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub half_angle: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub separation: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub collinear: Option<bool>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub beamlike: Option<bool>,
}

impl Cut {
    /// Whether theta or a target is given.
    #[must_use]
    pub fn is_decided(&self) -> bool {
        let angles = [&self.theta, &self.crossing, &self.half_angle, &self.separation];
        angles.iter().any(|a| a.is_some()) || self.collinear == Some(true) || self.beamlike == Some(true)
    }
}

/// `[mount]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Mount {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub about_x: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub about_y: Option<Text>,
}

/// `[emission]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Emission {
    #[serde(rename = "type", skip_serializing_if = "Option::is_none")]
    pub kind: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub process: Option<Text>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub signal: Vec<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub idler: Option<Text>,
}

/// `[screen]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Screen {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub distance: Option<Text>,
}

/// `[stage]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Stage {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub zero: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub per_turn: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub reversed: Option<bool>,
}

/// `[[collection]]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Collection {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub arm: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub iris: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub fibre: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub direction: Option<Towards>,
}

/// `direction = { h, v }`
#[derive(Debug, Clone, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Towards {
    pub h: Text,
    pub v: Text,
}

/// `[[filter]]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Filter {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub arm: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub shape: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub file: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub width: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub centre: Option<Text>,
}

/// `[[compensator]]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Compensator {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub arm: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub material: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub dataset: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub cut: Option<Cut>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub length: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub roll: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub tilt: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub half_wave: Option<bool>,
}

/// `[sweep]`
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Sweep {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub report: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub target: Option<Spanned<Wanted>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub by: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub find: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub pair: Option<Spanned<u64>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub basis: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub half_wave: Option<bool>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub axes: Vec<Spanned<Axis>>,
}

/// `target = { crossing = "3 deg" }`: what the reports `cut` and `tilt` look for.
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields, rename_all = "kebab-case")]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Wanted {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub crossing: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub half_angle: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub separation: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub collinear: Option<bool>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub beamlike: Option<bool>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub touching: Option<bool>,
}

/// One axis: a range, a list, or several axes that run together.
#[derive(Debug, Clone, Default, Deserialize, Serialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, reason = "one field per key, explained where it is read")]
pub struct Axis {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub key: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub from: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub to: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub points: Option<Spanned<u64>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub step: Option<Text>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub values: Vec<Text>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub together: Vec<Spanned<Axis>>,
}

//! Every key of a job file: what it holds, in which unit a column shows it, and what it means.
//!
//! One table serves the columns of sweeps, the schema of the job file and whatever else goes by key. The unit of a column
//! is the unit of its numbers; a key that holds words has none.

use crate::places::nearest;
use crate::quantity::{Angle, Duration, Frequency, Length, Power, Temperature, Wavelength};

/// Unit of the numbers in a column.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Unit {
    /// Degrees.
    Deg,
    /// Millimetres.
    Mm,
    /// Micrometres.
    Um,
    /// Nanometres.
    Nm,
    /// Degrees Celsius.
    DegC,
    /// Femtoseconds.
    Fs,
    /// Milliwatts.
    Mw,
    /// Gigahertz.
    Ghz,
}

/// What a key holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Holds {
    /// An angle.
    Angle,
    /// A length, shown in this unit.
    Length(Unit),
    /// A wavelength; `"405 nm air"` converts.
    Wavelength,
    /// A temperature.
    Temperature,
    /// A duration.
    Duration,
    /// A power.
    Power,
    /// A width in wavelength or in frequency.
    Linewidth,
    /// A full angle, or a diameter on the screen.
    Iris,
    /// One of these words, or any where none are listed.
    Word(&'static [&'static str]),
    /// true or false.
    Flag,
    /// A whole number from 1.
    Number,
}

/// One key.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Key {
    /// Path without the number of an item, such as `crystal.cut.theta`.
    pub path: &'static str,
    /// What it holds.
    pub holds: Holds,
    /// What it means.
    pub meaning: &'static str,
}

/// Sections of which there may be several, told apart by number, name or `*`.
pub const LISTS: [&str; 4] = ["crystal", "compensator", "filter", "collection"];

const fn key(path: &'static str, holds: Holds, meaning: &'static str) -> Key {
    Key { path, holds, meaning }
}

const ANY: Holds = Holds::Word(&[]);
const ARM: Holds = Holds::Word(&["a", "b", "both"]);

/// All keys but those that lay out a sweep.
pub const KEYS: &[Key] = &[
    key("title", ANY, "what you call the experiment"),
    key("pump.wavelength", Holds::Wavelength, "vacuum wavelength of the pump"),
    key("pump.waist", Holds::Length(Unit::Um), "1/e^2 radius in the crystal; without it a plane wave"),
    key("pump.power", Holds::Power, "pump power"),
    key("pump.linewidth", Holds::Linewidth, "FWHM of the pump's line; without it monochromatic"),
    key("pump.pulse", Holds::Duration, "FWHM of the pump's pulses"),
    key("pump.spectrum", ANY, "file with the pump's spectrum"),
    key("pump.polarization", Holds::Word(&["matched"]), "matched to the crystals, or angle and phase"),
    key("pump.polarization.angle", Holds::Angle, "of the pump's electric field, from +x towards +y"),
    key("pump.polarization.phase", Holds::Angle, "of the field along y against that along x"),
    key("crystal.name", ANY, "what the crystal is called in keys and reports"),
    key("crystal.material", ANY, "crystal id, optionally with :DATASET, or a material file ./mine.toml"),
    key("crystal.dataset", ANY, "whose refractive indices"),
    key("crystal.cut.theta", Holds::Angle, "cut: angle between face normal and Z"),
    key("crystal.cut.phi", Holds::Angle, "cut: azimuth of the face normal from X"),
    key(
        "crystal.cut.crossing",
        Holds::Angle,
        "cut solved so that the cones cross at this angle from the pump",
    ),
    key("crystal.cut.half-angle", Holds::Angle, "cut solved for this half angle of the signal's cone"),
    key(
        "crystal.cut.separation",
        Holds::Angle,
        "cut solved for this angle between the photons at the crossings",
    ),
    key("crystal.cut.collinear", Holds::Flag, "cut solved for pairs along the pump"),
    key("crystal.cut.beamlike", Holds::Flag, "cut solved for a signal cone that is a beam"),
    key("crystal.length", Holds::Length(Unit::Mm), "length along the face normal"),
    key("crystal.temperature", Holds::Temperature, "temperature of the crystal"),
    key(
        "crystal.reference_temperature",
        Holds::Temperature,
        "temperature at which length and poling are stated",
    ),
    key("crystal.tilt", Holds::Angle, "turn that increases theta"),
    key("crystal.cross_tilt", Holds::Angle, "turn that increases phi"),
    key("crystal.roll", Holds::Angle, "turn about the face normal; 90 deg lets Z lean up"),
    key(
        "crystal.reversed",
        Holds::Word(&["about-beam", "about-vertical", "about-horizontal"]),
        "half a turn before everything else",
    ),
    key("crystal.poling", Holds::Length(Unit::Um), "poling period along the face normal"),
    key("crystal.gap_before", Holds::Length(Unit::Mm), "air before the crystal"),
    key("crystal.thermal_expansion", Holds::Flag, "whether length and poling grow with temperature"),
    key("crystal.extrapolate", Holds::Flag, "whether the data set may be used outside its range"),
    key("mount.about_x", Holds::Angle, "turn of the common mount about lab x"),
    key("mount.about_y", Holds::Angle, "turn of the common mount about lab y"),
    key("emission.type", Holds::Word(&["0", "I", "II"]), "interaction type"),
    key("emission.process", ANY, "polarizations, pump -> signal + idler, such as e -> o + e"),
    key("emission.signal", Holds::Wavelength, "vacuum wavelength of the signal"),
    key("emission.idler", Holds::Wavelength, "vacuum wavelength of the idler, instead of the signal's"),
    key("screen.distance", Holds::Length(Unit::Mm), "from the crystal to the screen, across the pump"),
    key("stage.zero", Holds::Angle, "reading of the mount's scale at back-reflection"),
    key("stage.per_turn", Holds::Angle, "turn of the crystal per turn of the screw"),
    key("stage.reversed", Holds::Flag, "whether readings fall when the tilt rises"),
    key("collection.arm", ARM, "which photons"),
    key("collection.iris", Holds::Iris, "full angle seen from the crystal, or diameter on the screen"),
    key("collection.fibre", Holds::Length(Unit::Um), "1/e^2 radius of the fibre's mode at the crystal"),
    key("collection.direction.h", Holds::Angle, "fixed direction: horizontal angle"),
    key("collection.direction.v", Holds::Angle, "fixed direction: vertical angle"),
    key("filter.arm", ARM, "which photons"),
    key("filter.shape", Holds::Word(&["gaussian", "rectangular"]), "transmission over wavelength"),
    key("filter.file", ANY, "file with the filter's transmission"),
    key("filter.width", Holds::Length(Unit::Nm), "FWHM of the intensity transmission"),
    key(
        "filter.centre",
        Holds::Wavelength,
        "middle of the transmission; the photon's wavelength where left out",
    ),
    key("compensator.arm", Holds::Word(&["a", "b", "both", "pump"]), "which light passes it"),
    key("compensator.material", ANY, "crystal id"),
    key("compensator.dataset", ANY, "whose refractive indices"),
    key("compensator.cut.theta", Holds::Angle, "cut: angle between face normal and Z"),
    key("compensator.cut.phi", Holds::Angle, "cut: azimuth of the face normal from X"),
    key("compensator.length", Holds::Length(Unit::Mm), "length along the face normal"),
    key("compensator.roll", Holds::Angle, "turn about the arm"),
    key("compensator.tilt", Holds::Angle, "turn that increases theta"),
    key("compensator.half_wave", Holds::Flag, "whether the plate stands between half-wave plates at 45 deg"),
    key(
        "sweep.report",
        Holds::Word(&["cut", "rings", "crossings", "tilt", "state", "compensate"]),
        "which rows a sweep writes",
    ),
    key(
        "sweep.target.crossing",
        Holds::Angle,
        "wanted by reports cut and tilt: crossings at this angle from the pump",
    ),
    key(
        "sweep.target.half-angle",
        Holds::Angle,
        "wanted by reports cut and tilt: half angle of the signal's cone",
    ),
    key(
        "sweep.target.separation",
        Holds::Angle,
        "wanted by reports cut and tilt: angle between the photons at the crossings",
    ),
    key("sweep.target.collinear", Holds::Flag, "wanted by reports cut and tilt: pairs along the pump"),
    key("sweep.target.beamlike", Holds::Flag, "wanted by reports cut and tilt: a signal cone that is a beam"),
    key("sweep.target.touching", Holds::Flag, "wanted by report tilt: rings that touch"),
    key(
        "sweep.by",
        Holds::Word(&["tilt", "cross-tilt", "temperature", "pump"]),
        "what report tilt changes; the turn with the larger effect where left out",
    ),
    key(
        "sweep.find",
        Holds::Word(&["theta", "phi", "poling", "temperature", "pump"]),
        "what report cut solves for; theta where left out",
    ),
    key(
        "sweep.pair",
        Holds::Number,
        "which pair of crossings reports state and compensate are about; the first where left out",
    ),
    key("sweep.basis", Holds::Word(&["oe", "lab"]), "basis of report state; both where left out"),
    key(
        "sweep.half_wave",
        Holds::Flag,
        "whether report compensate puts plates between half-wave plates at 45 deg",
    ),
];

impl Unit {
    /// As a column's name ends.
    #[must_use]
    pub fn suffix(self) -> &'static str {
        match self {
            Self::Deg => "deg",
            Self::Mm => "mm",
            Self::Um => "um",
            Self::Nm => "nm",
            Self::DegC => "degc",
            Self::Fs => "fs",
            Self::Mw => "mw",
            Self::Ghz => "ghz",
        }
    }

    /// As a job file writes it.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::DegC => "degC",
            Self::Mw => "mW",
            Self::Ghz => "GHz",
            other => other.suffix(),
        }
    }
}

impl Holds {
    /// A quantity in the unit of its column.
    ///
    /// # Errors
    /// What the text lacks; that it is no quantity at all where the key holds words.
    pub fn read(self, text: &str) -> Result<(f64, Unit), String> {
        let length = |text: &str| text.parse::<Length>().map_err(|e| e.to_string());
        match self {
            Self::Angle => text.parse().map(|a: Angle| (a.degrees(), Unit::Deg)).map_err(|e| e.to_string()),
            Self::Length(unit) => length(text).map(|l| (in_unit(l, unit), unit)),
            Self::Wavelength => {
                text.parse().map(|w: Wavelength| (w.nm(), Unit::Nm)).map_err(|e| e.to_string())
            }
            Self::Temperature => {
                text.parse().map(|t: Temperature| (t.degc(), Unit::DegC)).map_err(|e| e.to_string())
            }
            Self::Duration => text.parse().map(|d: Duration| (d.fs(), Unit::Fs)).map_err(|e| e.to_string()),
            Self::Power => text.parse().map(|p: Power| (p.mw(), Unit::Mw)).map_err(|e| e.to_string()),
            Self::Linewidth => match text.parse::<Frequency>() {
                Ok(frequency) => Ok((frequency.ghz(), Unit::Ghz)),
                Err(_) => length(text).map(|l| (in_unit(l, Unit::Nm), Unit::Nm)),
            },
            Self::Iris => match text.parse::<Length>() {
                Ok(length) => Ok((length.mm(), Unit::Mm)),
                Err(_) => Self::Angle.read(text),
            },
            Self::Word(_) | Self::Flag | Self::Number => Err("the key holds no quantity".into()),
        }
    }

    /// The units that its quantities are read in; none for words.
    #[must_use]
    pub fn units(self) -> Vec<&'static str> {
        match self {
            Self::Angle => Angle::units().collect(),
            Self::Length(_) => Length::units().collect(),
            Self::Wavelength => Wavelength::units().collect(),
            Self::Temperature => Temperature::units().collect(),
            Self::Duration => Duration::units().collect(),
            Self::Power => Power::units().collect(),
            Self::Linewidth => Length::units().chain(Frequency::units()).collect(),
            Self::Iris => Angle::units().chain(Length::units()).collect(),
            Self::Word(_) | Self::Flag | Self::Number => Vec::new(),
        }
    }

    /// Whether values are numbers.
    #[must_use]
    pub fn is_quantity(self) -> bool {
        !matches!(self, Self::Word(_) | Self::Flag | Self::Number)
    }
}

fn in_unit(length: Length, unit: Unit) -> f64 {
    match unit {
        Unit::Um => length.um(),
        Unit::Nm => crate::quantity::tidy(length.si() * 1e9),
        _ => length.mm(),
    }
}

impl Key {
    /// Whether a sweep can run over it: not over names, nor over what lays out the sweep itself but for the angle that
    /// a report looks for.
    #[must_use]
    pub fn can_be_swept(&self) -> bool {
        match self.path {
            "title" | "crystal.name" => false,
            path => !path.starts_with("sweep.") || self.holds == Holds::Angle,
        }
    }

    /// Keys that exclude one another have one group.
    fn group(&self) -> &'static str {
        match self.path {
            "crystal.cut.theta"
            | "crystal.cut.crossing"
            | "crystal.cut.half-angle"
            | "crystal.cut.separation"
            | "crystal.cut.collinear"
            | "crystal.cut.beamlike" => "crystal.cut",
            "emission.type" | "emission.process" => "emission.process",
            "emission.signal" | "emission.idler" => "emission.signal",
            "pump.linewidth" | "pump.pulse" | "pump.spectrum" => "pump.linewidth",
            "collection.iris" | "collection.fibre" => "collection.iris",
            path if path.starts_with("sweep.target.") => "sweep.target",
            path => path,
        }
    }
}

/// A key as it was typed, with the item of a list that it names.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct KeyPath {
    /// As typed.
    pub typed: String,
    /// What it stands for.
    pub key: &'static Key,
    /// Number, name or `*` of the item, where one is named.
    pub item: Option<String>,
}

impl KeyPath {
    /// Looks a key up.
    ///
    /// # Errors
    /// An unknown key, with the nearest one.
    pub fn find(typed: &str) -> Result<Self, String> {
        let typed = typed.trim();
        if let Some(key) = KEYS.iter().find(|key| key.path == typed) {
            return Ok(Self { typed: typed.into(), key, item: None });
        }
        if let Some((section, rest)) = typed.split_once('.')
            && LISTS.contains(&section)
            && let Some((item, rest)) = rest.split_once('.')
        {
            let path = format!("{section}.{rest}");
            if let Some(key) = KEYS.iter().find(|key| key.path == path) {
                return Ok(Self { typed: typed.into(), key, item: Some(item.into()) });
            }
        }
        let near = nearest(typed, KEYS.iter().map(|key| key.path));
        let hint = near.map_or(String::new(), |near| format!(", did you mean `{near}`?"));
        Err(format!("`{typed}` is no key of a job{hint}"))
    }

    /// Whether setting one key undoes the other: the same or an excluding one, of the same item. `names` are those of
    /// the crystals.
    #[must_use]
    pub fn overrides(&self, other: &Self, names: &[Option<&str>]) -> bool {
        let number = |item: &Option<String>| {
            let item = item.as_deref()?;
            let named = names.iter().position(|name| *name == Some(item)).map(|at| (at + 1).to_string());
            Some(named.unwrap_or_else(|| item.into()))
        };
        let same_item = match (number(&self.item), number(&other.item)) {
            (Some(own), Some(other)) => own == other || own == "*" || other == "*",
            // without a number there is only one item
            _ => true,
        };
        self.key.group() == other.key.group() && same_item
    }

    /// Name of the column that shows the key's values.
    #[must_use]
    pub fn column(&self, unit: Option<Unit>) -> String {
        let bare: String = self
            .typed
            .replace('*', "all")
            .chars()
            .map(|c| if c.is_alphanumeric() { c } else { '_' })
            .collect();
        unit.map_or(bare.clone(), |unit| format!("{bare}_{}", unit.suffix()))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn column(typed: &str, value: &str) -> String {
        let path = KeyPath::find(typed).unwrap_or_else(|why| panic!("{why}"));
        path.column(path.key.holds.read(value).ok().map(|(_, unit)| unit))
    }

    #[test]
    fn columns_are_named_by_key_and_unit() {
        assert_eq!(column("crystal.tilt", "17 mrad"), "crystal_tilt_deg");
        assert_eq!(column("crystal.2.tilt", "1 deg"), "crystal_2_tilt_deg");
        assert_eq!(column("crystal.*.tilt", "1 deg"), "crystal_all_tilt_deg");
        assert_eq!(column("crystal.cut.half-angle", "1 deg"), "crystal_cut_half_angle_deg");
        assert_eq!(column("crystal.temperature", "300 K"), "crystal_temperature_degc");
        assert_eq!(column("crystal.poling", "9 um"), "crystal_poling_um");
        assert_eq!(column("pump.power", "1 W"), "pump_power_mw");
        assert_eq!(column("pump.linewidth", "0.1 nm"), "pump_linewidth_nm");
        assert_eq!(column("filter.width", "3 nm"), "filter_width_nm");
        assert_eq!(column("collection.iris", "0.2 deg"), "collection_iris_deg");
        assert_eq!(column("compensator.1.length", "1 mm"), "compensator_1_length_mm");
        assert_eq!(column("mount.about_x", "1 deg"), "mount_about_x_deg");
        assert_eq!(column("crystal.dataset", "x"), "crystal_dataset");
        assert_eq!(column("emission.signal", "800 nm"), "emission_signal_nm");
    }

    #[test]
    fn unknown_keys_get_a_suggestion() {
        let why = KeyPath::find("crystal.titl").expect_err("unknown");
        assert!(why.contains("did you mean `crystal.tilt`"), "{why}");
    }
}

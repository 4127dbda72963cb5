//! Quantities with units: `"405 nm"` to SI and back. The only place where units are converted.
//!
//! Inside the program lengths are metres, angles radians, temperatures degrees Celsius, times
//! seconds, powers watts, frequencies hertz. A number without a unit is never a quantity.

use std::f64::consts::PI;
use std::fmt;
use std::str::FromStr;

use thiserror::Error;

/// Why a text is not a quantity; the message says what would be.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum QuantityError {
    /// Nothing that looks like a number at the start.
    #[error("`{text}` does not start with a number; write {kind} such as `{example}`")]
    NoNumber {
        /// As written.
        text: String,
        /// "a length", "an angle", ...
        kind: &'static str,
        /// A valid one.
        example: &'static str,
    },
    /// A comma where a decimal point is due.
    #[error("`{text}` has a decimal comma; use a point: `{suggestion}`")]
    DecimalComma {
        /// As written.
        text: String,
        /// With a point.
        suggestion: String,
    },
    /// A bare number.
    #[error("`{text}` has no unit; {kind} needs one of {units}, for example `{text} {first}`")]
    NoUnit {
        /// As written.
        text: String,
        /// "a length", "an angle", ...
        kind: &'static str,
        /// Units that would do.
        units: String,
        /// The most usual of them.
        first: &'static str,
    },
    /// A unit of another dimension, or none at all.
    #[error("`{text}`: `{unit}` is not a unit of {kind}; use one of {units}{hint}")]
    WrongUnit {
        /// As written.
        text: String,
        /// The unit found.
        unit: String,
        /// "a length", "an angle", ...
        kind: &'static str,
        /// Units that would do.
        units: String,
        /// ", did you mean ...", or nothing.
        hint: String,
    },
    /// Too large for a number.
    #[error("`{text}` is not a finite number; write {kind} such as `{example}`")]
    NotFinite {
        /// As written.
        text: String,
        /// "a length", "an angle", ...
        kind: &'static str,
        /// A valid one.
        example: &'static str,
    },
}

/// One accepted spelling of a unit.
struct Unit {
    name: &'static str,
    /// SI value is number x 10^`exponent` x `factor`.
    exponent: i32,
    factor: f64,
    offset: f64,
}

const fn decimal(name: &'static str, exponent: i32) -> Unit {
    Unit { name, exponent, factor: 1.0, offset: 0.0 }
}

const fn scaled(name: &'static str, factor: f64) -> Unit {
    Unit { name, exponent: 0, factor, offset: 0.0 }
}

const LENGTHS: &[Unit] = &[
    decimal("mm", -3),
    decimal("um", -6),
    decimal("nm", -9),
    decimal("cm", -2),
    decimal("m", 0),
    decimal("pm", -12),
    decimal("\u{b5}m", -6),
    decimal("\u{3bc}m", -6),
];
const WAVELENGTHS: &[Unit] = &[
    decimal("nm", -9),
    decimal("um", -6),
    decimal("mm", -3),
    decimal("cm", -2),
    decimal("m", 0),
    decimal("pm", -12),
    decimal("\u{b5}m", -6),
    decimal("\u{3bc}m", -6),
];
const ANGLES: &[Unit] = &[
    scaled("deg", PI / 180.0),
    scaled("arcmin", PI / 10_800.0),
    scaled("arcsec", PI / 648_000.0),
    decimal("rad", 0),
    decimal("mrad", -3),
    decimal("urad", -6),
    scaled("\u{b0}", PI / 180.0),
];
const TEMPERATURES: &[Unit] = &[
    decimal("degC", 0),
    Unit { name: "K", exponent: 0, factor: 1.0, offset: -273.15 },
    decimal("\u{b0}C", 0),
    decimal("C", 0),
];
const DURATIONS: &[Unit] = &[decimal("fs", -15), decimal("ps", -12), decimal("ns", -9)];
const POWERS: &[Unit] =
    &[decimal("mW", -3), decimal("uW", -6), decimal("W", 0), decimal("\u{b5}W", -6), decimal("\u{3bc}W", -6)];
const FREQUENCIES: &[Unit] = &[decimal("GHz", 9), decimal("THz", 12)];

/// What a kind of quantity is called and which units it takes.
struct Kind {
    article: &'static str,
    example: &'static str,
    units: &'static [Unit],
}

const LENGTH: Kind = Kind { article: "a length", example: "2 mm", units: LENGTHS };
const WAVELENGTH: Kind = Kind { article: "a wavelength", example: "405 nm", units: WAVELENGTHS };
const ANGLE: Kind = Kind { article: "an angle", example: "0.5 deg", units: ANGLES };
const TEMPERATURE: Kind = Kind { article: "a temperature", example: "22 degC", units: TEMPERATURES };
const DURATION: Kind = Kind { article: "a time", example: "150 fs", units: DURATIONS };
const POWER: Kind = Kind { article: "a power", example: "40 mW", units: POWERS };
const FREQUENCY: Kind = Kind { article: "a frequency", example: "200 GHz", units: FREQUENCIES };

impl Kind {
    fn unit_names(&self) -> String {
        let ascii: Vec<_> = self.units.iter().map(|u| u.name).filter(|n| n.is_ascii()).collect();
        ascii.join(", ")
    }

    /// Number and unit of `text` to SI.
    fn parse(&self, text: &str) -> Result<f64, QuantityError> {
        let (number, unit) = self.split(text)?;
        if unit.is_empty() {
            return Err(QuantityError::NoUnit {
                text: text.trim().into(),
                kind: self.article,
                units: self.unit_names(),
                first: self.units[0].name,
            });
        }
        let known = self.units.iter().find(|u| u.name == unit).ok_or_else(|| self.wrong_unit(text, unit))?;
        // 10^exponent goes into the text, so that "405 nm" is the double nearest 405e-9
        let value: f64 = scaled_text(&number, known.exponent).parse().unwrap_or(f64::NAN);
        let si = value * known.factor + known.offset;
        if si.is_finite() {
            Ok(si)
        } else {
            Err(QuantityError::NotFinite {
                text: text.trim().into(),
                kind: self.article,
                example: self.example,
            })
        }
    }

    fn split<'t>(&self, text: &'t str) -> Result<(String, &'t str), QuantityError> {
        let trimmed = text.trim();
        let end = number_end(trimmed);
        let rest = &trimmed[end..];
        if end == 0 {
            return Err(QuantityError::NoNumber {
                text: trimmed.into(),
                kind: self.article,
                example: self.example,
            });
        }
        if rest.starts_with(',') && rest[1..].starts_with(|c: char| c.is_ascii_digit()) {
            return Err(QuantityError::DecimalComma {
                text: trimmed.into(),
                suggestion: trimmed.replacen(',', ".", 1),
            });
        }
        Ok((trimmed[..end].replace('\u{2212}', "-"), rest.trim()))
    }

    fn wrong_unit(&self, text: &str, unit: &str) -> QuantityError {
        let alike =
            |u: &&Unit| u.name.eq_ignore_ascii_case(unit) || (u.name.len() > 2 && unit.starts_with(u.name));
        let near = self.units.iter().find(alike);
        QuantityError::WrongUnit {
            text: text.trim().into(),
            unit: unit.into(),
            kind: self.article,
            units: self.unit_names(),
            hint: near.map_or(String::new(), |u| format!("; did you mean `{}`?", u.name)),
        }
    }
}

/// Length in bytes of the decimal number that `text` starts with; 0 where there is none.
fn number_end(text: &str) -> usize {
    let bytes = text.as_bytes();
    let sign = if text.starts_with('\u{2212}') {
        '\u{2212}'.len_utf8()
    } else {
        usize::from(matches!(bytes.first(), Some(b'+' | b'-')))
    };
    let digits = |from: usize| bytes[from..].iter().take_while(|b| b.is_ascii_digit()).count();
    let whole = digits(sign);
    let mut end = sign + whole;
    let mut any = whole;
    if bytes.get(end) == Some(&b'.') {
        let fraction = digits(end + 1);
        any += fraction;
        end += 1 + fraction;
    }
    if any == 0 {
        return 0;
    }
    if matches!(bytes.get(end), Some(b'e' | b'E')) {
        let sign = usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
        let exponent = digits((end + 1 + sign).min(bytes.len()));
        if exponent > 0 {
            end += 1 + sign + exponent;
        }
    }
    end
}

fn scaled_text(number: &str, exponent: i32) -> String {
    match number.find(['e', 'E']) {
        Some(at) => {
            let own: i32 = number[at + 1..].parse().unwrap_or(i32::MAX / 2);
            format!("{}e{}", &number[..at], own.saturating_add(exponent))
        }
        None => format!("{number}e{exponent}"),
    }
}

/// `x` without the last-bit noise of a unit conversion: the shorter decimal where one lies within 4 units in the last place.
///
/// 22 degC stored as 295.15 K and read back is 22, not 21.999999999999943.
#[must_use]
pub fn tidy(x: f64) -> f64 {
    if x == 0.0 || !x.is_finite() {
        return if x == 0.0 { 0.0 } else { x };
    }
    // most numbers have few decimals, and need no logarithm to be recognised
    if (1e-3..1e6).contains(&x.abs()) {
        let rounded = (x * 1e6).round() / 1e6;
        if (rounded - x).abs() <= 4.0 * f64::EPSILON * x.abs() {
            return rounded;
        }
    }
    let digits = 13 - x.abs().log10().floor() as i32;
    if !(-300..=22).contains(&digits) {
        return x;
    }
    let scale = 10f64.powi(digits.abs());
    let rounded = if digits >= 0 { (x * scale).round() / scale } else { (x / scale).round() * scale };
    if (rounded - x).abs() <= 4.0 * f64::EPSILON * x.abs() { rounded } else { x }
}

macro_rules! quantity {
    ($(#[$doc:meta])* $name:ident, $kind:expr, $si:ident: $si_doc:literal, $show:ident * $factor:expr, $suffix:literal: $show_doc:literal) => {
        $(#[$doc])*
        #[derive(Debug, Clone, Copy, PartialEq, PartialOrd, Default)]
        pub struct $name(f64);

        impl $name {
            #[doc = concat!("From a number of ", $si_doc, ".")]
            #[must_use]
            pub const fn $si(value: f64) -> Self {
                Self(value)
            }

            #[doc = concat!("In ", $si_doc, ".")]
            #[must_use]
            pub const fn si(self) -> f64 {
                self.0
            }

            #[doc = concat!("In ", $show_doc, ", free of conversion noise.")]
            #[must_use]
            pub fn $show(self) -> f64 {
                tidy(self.0 * $factor)
            }

            /// The units it is read in, the most usual one first.
            pub fn units() -> impl Iterator<Item = &'static str> {
                $kind.units.iter().map(|unit| unit.name)
            }
        }

        impl FromStr for $name {
            type Err = QuantityError;

            fn from_str(text: &str) -> Result<Self, QuantityError> {
                $kind.parse(text).map(Self)
            }
        }

        impl fmt::Display for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                write!(f, concat!("{} ", $suffix), self.$show())
            }
        }
    };
}

quantity!(
    /// A length.
    Length, LENGTH, metres: "metres", mm * 1e3, "mm": "millimetres"
);
quantity!(
    /// A plane angle.
    Angle, ANGLE, radians: "radians", degrees * (180.0 / PI), "deg": "degrees"
);
quantity!(
    /// A temperature.
    Temperature, TEMPERATURE, celsius: "degrees Celsius", degc * 1.0, "degC": "degrees Celsius"
);
quantity!(
    /// A duration.
    Duration, DURATION, seconds: "seconds", fs * 1e15, "fs": "femtoseconds"
);
quantity!(
    /// An optical power.
    Power, POWER, watts: "watts", mw * 1e3, "mW": "milliwatts"
);
quantity!(
    /// A frequency.
    Frequency, FREQUENCY, hertz: "hertz", ghz * 1e-9, "GHz": "gigahertz"
);

impl Length {
    /// In micrometres.
    #[must_use]
    pub fn um(self) -> f64 {
        tidy(self.0 * 1e6)
    }
}

impl Temperature {
    /// A difference of temperatures in kelvins, such as `0.5 K` or `0.5 degC`, which are alike.
    ///
    /// # Errors
    /// A text that is none, with one that is.
    pub fn difference(text: &str) -> Result<f64, String> {
        let trimmed = text.trim();
        let number = Self::units().find_map(|unit| trimmed.strip_suffix(unit));
        let value = number.and_then(|number| number.trim().parse::<f64>().ok()).filter(|v| v.is_finite());
        value.ok_or_else(|| format!("`{trimmed}` is no difference of temperatures; write 2K, for example"))
    }
}

impl Angle {
    /// From a number of degrees.
    #[must_use]
    pub fn from_degrees(value: f64) -> Self {
        Self(value.to_radians())
    }
}

/// A vacuum wavelength.
#[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
pub struct Wavelength(f64);

impl Wavelength {
    /// From metres in vacuum.
    #[must_use]
    pub const fn metres(value: f64) -> Self {
        Self(value)
    }

    /// From nanometres in vacuum.
    #[must_use]
    pub fn from_nm(value: f64) -> Self {
        Self(value * 1e-9)
    }

    /// The units it is read in, the most usual one first.
    pub fn units() -> impl Iterator<Item = &'static str> {
        WAVELENGTH.units.iter().map(|unit| unit.name)
    }

    /// In metres.
    #[must_use]
    pub const fn si(self) -> f64 {
        self.0
    }

    /// In nanometres.
    #[must_use]
    pub fn nm(self) -> f64 {
        tidy(self.0 * 1e9)
    }

    /// In micrometres, as dispersion formulas want it.
    #[must_use]
    pub fn um(self) -> f64 {
        self.0 * 1e6
    }

    /// Vacuum wavenumber 2 pi / lambda in rad/m.
    #[must_use]
    pub fn wavenumber(self) -> f64 {
        2.0 * PI / self.0
    }

    /// Angular frequency in rad/s.
    #[must_use]
    pub fn angular_frequency(self) -> f64 {
        SPEED_OF_LIGHT * self.wavenumber()
    }

    /// The wavelength that shares a pump photon's energy with `self`: 1/idler = 1/pump - 1/self.
    /// `None` where `self` is not longer than the pump.
    #[must_use]
    pub fn partner(self, pump: Self) -> Option<Self> {
        let inverse = 1.0 / pump.0 - 1.0 / self.0;
        (self.0 > pump.0 && inverse > 0.0).then(|| Self(1.0 / inverse))
    }

    /// Twice the wavelength: the degenerate photon of a pump.
    #[must_use]
    pub fn doubled(self) -> Self {
        Self(2.0 * self.0)
    }
}

impl FromStr for Wavelength {
    type Err = QuantityError;

    /// `"405 nm"`, or `"405 nm air"` for a wavelength measured in standard air.
    fn from_str(text: &str) -> Result<Self, QuantityError> {
        let trimmed = text.trim();
        match trimmed.strip_suffix("air") {
            Some(length) => WAVELENGTH.parse(length).map(vacuum_from_air).map(Self),
            None => WAVELENGTH.parse(trimmed).map(Self),
        }
    }
}

impl fmt::Display for Wavelength {
    /// `405 nm`, exactly; with a precision, at most so many decimals.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match f.precision() {
            Some(digits) => {
                let text = format!("{:.digits$}", self.nm());
                let short = if digits > 0 { text.trim_end_matches('0').trim_end_matches('.') } else { &text };
                write!(f, "{short} nm")
            }
            None => write!(f, "{} nm", self.nm()),
        }
    }
}

/// Speed of light in m/s, exact by definition of the metre.
pub const SPEED_OF_LIGHT: f64 = 299_792_458.0;

/// Vacuum wavelength in m of a wavelength in m measured in standard air (15 degC, 101325 Pa, dry, 450 ppm CO2).
///
/// P. E. Ciddor, Appl. Opt. 35, 1566 (1996), eq. 1, constants from memory; valid 230 nm to 1690 nm, 1e-8 or better.
fn vacuum_from_air(air: f64) -> f64 {
    let mut vacuum = air;
    for _ in 0..6 {
        // 10^8 (n - 1) = 5792105 / (238.0185 - s^2) + 167917 / (57.362 - s^2),   s = 1/lambda in 1/um
        let s2 = (1e-6 / vacuum).powi(2);
        vacuum = air * (1.0 + 1e-8 * (5_792_105.0 / (238.0185 - s2) + 167_917.0 / (57.362 - s2)));
    }
    vacuum
}

#[cfg(test)]
mod tests {
    use super::*;

    fn message<T: FromStr<Err = QuantityError> + fmt::Debug>(text: &str) -> String {
        text.parse::<T>().expect_err("must be refused").to_string()
    }

    #[test]
    fn every_unit_converts() {
        let metres = |t: &str| t.parse::<Length>().expect(t).si();
        for (text, si) in [
            ("405 nm", 405e-9),
            ("405nm", 405e-9),
            ("1 m", 1.0),
            ("2.5 mm", 2.5e-3),
            ("3 cm", 0.03),
            ("9.55 um", 9.55e-6),
            ("9.55 \u{b5}m", 9.55e-6),
            ("9.55 \u{3bc}m", 9.55e-6),
            ("12 pm", 12e-12),
            ("-1e-3 m", -1e-3),
            ("1.5e2 nm", 1.5e-7),
        ] {
            assert_eq!(metres(text), si, "{text}");
        }
        let degrees = |t: &str| t.parse::<Angle>().expect(t).degrees();
        for (text, deg) in [
            ("0.5 deg", 0.5),
            ("-0.5deg", -0.5),
            ("30 arcmin", 0.5),
            ("1800 arcsec", 0.5),
            ("0.5\u{b0}", 0.5),
            ("\u{2212}2 deg", -2.0),
        ] {
            assert_eq!(degrees(text), deg, "{text}");
        }
        assert_eq!("5 mrad".parse::<Angle>().expect("mrad").si(), 5e-3);
        let celsius = |t: &str| t.parse::<Temperature>().expect(t).degc();
        for text in ["22 degC", "22 \u{b0}C", "22 C", "295.15 K"] {
            assert_eq!(celsius(text), 22.0, "{text}");
        }
        assert_eq!("150 fs".parse::<Duration>().expect("fs").fs(), 150.0);
        assert_eq!("40 mW".parse::<Power>().expect("mW").mw(), 40.0);
        assert_eq!("2 THz".parse::<Frequency>().expect("THz").ghz(), 2000.0);
    }

    #[test]
    fn refusals_say_what_would_do() {
        assert_eq!(message::<Angle>("0,5 deg"), "`0,5 deg` has a decimal comma; use a point: `0.5 deg`");
        assert!(message::<Angle>("0.5").starts_with("`0.5` has no unit; an angle needs one of deg, arcmin"));
        assert!(message::<Length>("5 kg").contains("`kg` is not a unit of a length; use one of mm, um, nm"));
        assert!(message::<Length>("405 NM").contains("did you mean `nm`?"));
        assert!(message::<Wavelength>("NaN nm").contains("does not start with a number"));
        assert!(message::<Wavelength>("").contains("does not start with a number"));
        assert!(message::<Length>("1e400 m").contains("not a finite number"));
        assert!(message::<Length>("-").contains("does not start with a number"));
        assert!(message::<Length>("1e99999999999 m").contains("not a finite number"));
    }

    #[test]
    fn air_wavelengths_become_vacuum_wavelengths() {
        // helium-neon laser: 632.816 nm in air is 632.991 nm in vacuum (common practice, no source)
        let vacuum = "632.816 nm air".parse::<Wavelength>().expect("air").nm();
        assert!((vacuum - 632.991).abs() < 0.001, "{vacuum}");
    }

    #[test]
    fn partners_share_the_energy() {
        let pump = Wavelength::from_nm(405.0);
        let idler = Wavelength::from_nm(800.0).partner(pump).expect("longer than the pump");
        assert!((1.0 / idler.nm() + 1.0 / 800.0 - 1.0 / 405.0).abs() < 1e-15);
        assert_eq!(Wavelength::from_nm(400.0).partner(pump), None);
    }

    #[test]
    fn differences_of_temperatures_have_no_zero() {
        for text in ["0.5 K", "0.5degC", " 0.5 \u{b0}C", "0.5 C"] {
            assert_eq!(Temperature::difference(text), Ok(0.5));
        }
        for text in ["0.5", "0.5 KK", "K", "0.5 nm", ""] {
            assert!(Temperature::difference(text).is_err(), "{text}");
        }
    }

    #[test]
    fn tidy_removes_noise_and_nothing_else() {
        assert_eq!(tidy(404.99999999999994), 405.0);
        assert_eq!(tidy(-0.0).to_bits(), 0.0f64.to_bits());
        assert_eq!(tidy(0.123_456_789_012_345_6), 0.123_456_789_012_345_6);
        assert_eq!(tidy(1.0 / 3.0), 1.0 / 3.0);
    }
}

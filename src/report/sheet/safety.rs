//! Laser class of the pump and the cautions that go with it.

use crate::quantity::Wavelength;

/// Class of a laser product.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Class {
    /// Safe when used as intended.
    One,
    /// Visible; the blink protects.
    Two,
    /// Five times the limit of class 2 (visible) or 1 (else).
    ThreeR,
    /// Direct beams and mirror reflections harm the eye.
    ThreeB,
    /// Diffuse reflections harm too; skin and fire.
    Four,
}

impl Class {
    /// As the standard writes it.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::One => "1",
            Self::Two => "2",
            Self::ThreeR => "3R",
            Self::ThreeB => "3B",
            Self::Four => "4",
        }
    }
}

/// Highest power (W) of classes 1, 2, 3R and 3B for a continuous, collimated beam from a small source (C6 = 1) all of
/// which enters the standard's aperture, in the form of IEC 60825-1:2014 (edition 3), tables 3 to 8; from memory.
/// Class 2 exists between 400 and 700 nm. `None` outside 315 to 4000 nm.
///
/// Class 1 at the longest exposure times: 315-400 nm 7.9 uW; 400-500 nm the photochemical limit 39 uW C3,
/// C3 = 1 to 450 nm and 10^(0.02 (l - 450)) beyond, but not above the thermal 0.39 mW; 500-700 nm 0.39 mW;
/// 700-1050 nm 0.39 mW 10^(0.002 (l - 700)); 1050-1400 nm 1.95 mW C7; beyond 10 mW. Class 3R is five times class 2 where that
/// exists, else five times class 1; class 3B ends at 0.5 W.
#[must_use]
pub fn limits(wavelength: Wavelength) -> Option<[(Class, f64); 4]> {
    let l = wavelength.nm();
    let one = match l {
        _ if !(315.0..=4000.0).contains(&l) => return None,
        _ if l < 400.0 => 7.9e-6,
        _ if l < 450.0 => 3.9e-5,
        _ if l < 500.0 => (3.9e-5 * 10f64.powf(0.02 * (l - 450.0))).min(3.9e-4),
        _ if l < 700.0 => 3.9e-4,
        _ if l < 1050.0 => 3.9e-4 * 10f64.powf(0.002 * (l - 700.0)),
        _ if l < 1150.0 => 1.95e-3,
        _ if l < 1200.0 => 1.95e-3 * 10f64.powf(0.018 * (l - 1150.0)),
        _ if l < 1400.0 => 1.95e-3 * (8.0 + 10f64.powf(0.04 * (l - 1250.0))),
        _ => 1e-2,
    };
    let visible = (400.0..=700.0).contains(&l);
    let two = if visible { 1e-3 } else { one };
    let three_r = 5.0 * if visible { 1e-3 } else { one };
    // beyond 1200 nm five times class 1 would pass the end of class 3B
    Some([(Class::One, one), (Class::Two, two), (Class::ThreeR, three_r.min(0.5)), (Class::ThreeB, 0.5)])
}

/// The class of a continuous beam of this power (W).
#[must_use]
pub fn class(wavelength: Wavelength, power: f64) -> Option<Class> {
    let limits = limits(wavelength)?;
    Some(limits.into_iter().find(|(_, limit)| power <= *limit).map_or(Class::Four, |(class, _)| class))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The classes of visible continuous lasers that every table of the standard gives: 1 mW, 5 mW, 500 mW (from memory).
    #[test]
    fn classes_of_a_violet_diode() {
        let violet = Wavelength::from_nm(405.0);
        for (mw, name) in [(0.03, "1"), (0.9, "2"), (4.0, "3R"), (40.0, "3B"), (499.0, "3B"), (600.0, "4")] {
            assert_eq!(class(violet, mw * 1e-3).map(Class::name), Some(name), "{mw} mW");
        }
    }

    #[test]
    fn there_is_no_class_2_outside_the_visible() {
        for (nm, mw, name) in
            [(351.1, 0.02, "3R"), (351.1, 1.0, "3B"), (775.0, 2.0, "3R"), (775.0, 100.0, "3B")]
        {
            assert_eq!(class(Wavelength::from_nm(nm), mw * 1e-3).map(Class::name), Some(name), "{nm} nm");
        }
        assert_eq!(class(Wavelength::from_nm(266.0), 1.0), None);
    }
}

//! What stands on the table beside the crystals: the pump beam's spread, filters, irises, fibres and compensators.
//!
//! Arrays of two hold arm a first, then arm b.

use std::f64::consts::{LN_2, PI};
use std::sync::Arc;

use super::trace::Trace;
use crate::frame::Direction;
use crate::optics::Crystal;
use crate::quantity::{Angle, Duration, Frequency, Length, SPEED_OF_LIGHT, Wavelength};

/// Everything a pair meets beside the crystals, validated.
#[derive(Debug, Clone, Default)]
pub struct Bench {
    /// 1/e^2 radius of the pump in the crystals; `None` is a plane wave.
    pub waist: Option<Length>,
    /// Spectrum of the pump.
    pub line: Line,
    /// Polarization of the pump.
    pub polarization: PumpPolarization,
    /// Air before each crystal, along the beam; missing entries are contact.
    pub gaps: Vec<Length>,
    /// What collects each arm.
    pub collection: [Collection; 2],
    /// Filters of each arm, one behind the other.
    pub filters: [Vec<Filter>; 2],
    /// Birefringent plates, in the order in which light meets them.
    pub compensators: Vec<Compensator>,
}

/// Spectrum of the pump, a Gaussian about its wavelength unless it was measured.
#[derive(Debug, Clone, PartialEq, Default)]
pub enum Line {
    /// One frequency.
    #[default]
    Monochromatic,
    /// Continuous, of this FWHM in wavelength.
    Width(Length),
    /// Continuous, of this FWHM in frequency.
    Band(Frequency),
    /// Transform-limited Gaussian pulses of this FWHM of intensity.
    Pulse(Duration),
    /// Continuous, of this intensity per wavelength.
    Measured(Arc<Trace>),
}

impl Line {
    /// FWHM of the intensity spectrum in angular frequency, rad/s; 0 for one frequency.
    ///
    /// Gaussian pulse: FWHM of frequency times FWHM of duration = 2 ln 2 / pi.
    #[must_use]
    pub fn width(&self, pump: Wavelength) -> f64 {
        match self {
            Self::Monochromatic => 0.0,
            // d omega = 2 pi c d lambda / lambda^2
            Self::Width(width) => 2.0 * PI * SPEED_OF_LIGHT * width.si() / pump.si().powi(2),
            Self::Band(width) => 2.0 * PI * width.si(),
            Self::Pulse(duration) => 4.0 * LN_2 / duration.si(),
            Self::Measured(trace) => 2.0 * PI * SPEED_OF_LIGHT * trace.width() / trace.middle().powi(2),
        }
    }
}

/// Polarization of the pump in air.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub enum PumpPolarization {
    /// Linear, at the azimuth that drives all crystals as evenly as can be.
    #[default]
    Matched,
    /// E = (cos angle, e^(i phase) sin angle) along lab x, y.
    Given {
        /// From +x towards +y.
        angle: Angle,
        /// Of the vertical component ahead of the horizontal one.
        phase: Angle,
    },
}

/// How an arm is collected.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Collection {
    /// Through what.
    pub opening: Opening,
    /// A direction of its own; `None` follows the crossing.
    pub direction: Option<Direction>,
}

/// What an arm lets through.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub enum Opening {
    /// Whatever goes with the other arm.
    #[default]
    All,
    /// Directions within a circular disc of this full angle.
    Iris(Angle),
    /// One Gaussian mode of this 1/e^2 radius at the crystals.
    Fibre(Length),
}

/// Transmission of intensity against wavelength.
#[derive(Debug, Clone, PartialEq)]
pub struct Filter {
    /// Gaussian, rectangular or measured.
    pub shape: Shape,
    /// FWHM of the intensity transmission.
    pub width: Length,
    /// Where its middle stands; `None` is the photon's nominal wavelength.
    pub centre: Option<Wavelength>,
}

/// Shape of a filter.
#[derive(Debug, Clone, PartialEq, Default)]
pub enum Shape {
    /// exp(-4 ln 2 x^2) with x in widths.
    #[default]
    Gaussian,
    /// 1 within the width, 0 outside.
    Rectangular,
    /// As measured, moved so that its middle stands at the centre.
    Measured(Arc<Trace>),
}

/// Beyond this many FWHM from its centre a Gaussian (1e-7 there) counts as nothing.
pub(super) const REACH: f64 = 2.4;

impl Filter {
    /// Transmission at a wavelength, for a photon of this nominal wavelength.
    #[must_use]
    pub fn transmission(&self, wavelength: Wavelength, nominal: Wavelength) -> f64 {
        let off = wavelength.si() - self.centre.unwrap_or(nominal).si();
        let x = off / self.width.si();
        match &self.shape {
            Shape::Gaussian => (-4.0 * LN_2 * x * x).exp(),
            Shape::Rectangular => f64::from(x.abs() <= 0.5),
            Shape::Measured(trace) => trace.at(trace.middle() + off),
        }
    }

    /// As measured, where it was measured.
    #[must_use]
    pub fn measured(trace: Arc<Trace>) -> Self {
        let width = Length::metres(trace.width());
        let centre = Some(Wavelength::metres(trace.middle()));
        Self { shape: Shape::Measured(trace), width, centre }
    }

    /// Shortest and longest wavelength of a filter centred here, m: so many widths off the centre of a Gaussian, and as far as
    /// a measured one is above that share of its best.
    pub(crate) fn open(&self, centre: f64, widths: f64, share: f64) -> [f64; 2] {
        let half = match &self.shape {
            Shape::Gaussian => widths * self.width.si(),
            Shape::Rectangular => 0.5 * self.width.si(),
            Shape::Measured(trace) => return trace.above(share).map(|w| w - trace.middle() + centre),
        };
        [centre - half, centre + half]
    }

    /// Wavelengths between which a measured one is smooth, m.
    pub(super) fn joints(&self, nominal: Wavelength) -> impl Iterator<Item = f64> {
        let moved = self.centre.unwrap_or(nominal).si();
        let trace = match &self.shape {
            Shape::Measured(trace) => Some(trace),
            _ => None,
        };
        trace.into_iter().flat_map(move |trace| trace.wavelengths().map(move |w| w - trace.middle() + moved))
    }

    /// What it is, in a word.
    #[must_use]
    pub fn kind(&self) -> &'static str {
        match self.shape {
            Shape::Gaussian => "Gaussian",
            Shape::Rectangular => "rectangular",
            Shape::Measured(_) => "as measured",
        }
    }

    /// Shortest and longest wavelength that matter, m.
    pub(super) fn window(&self, nominal: Wavelength) -> [f64; 2] {
        let centre = self.centre.unwrap_or(nominal).si();
        self.open(centre, REACH, 0.0)
    }
}

/// Where a compensator stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Place {
    /// In arm a.
    A,
    /// In arm b.
    B,
    /// One in each arm.
    Both,
    /// In the pump, before all crystals.
    Pump,
}

impl Place {
    /// Whether a plate here stands in arm 0 (a) or 1 (b).
    #[must_use]
    pub fn is_in(self, arm: usize) -> bool {
        matches!((self, arm), (Self::Both, _) | (Self::A, 0) | (Self::B, 1))
    }
}

impl std::fmt::Display for Place {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.pad(match self {
            Self::A => "a",
            Self::B => "b",
            Self::Both => "both",
            Self::Pump => "pump",
        })
    }
}

/// A birefringent plate. Its mount frame refers to the arm: w along the arm at normal incidence, u at roll 0 along lab x
/// made perpendicular to the arm.
#[derive(Debug, Clone)]
pub struct Compensator {
    /// Where it stands.
    pub place: Place,
    /// Material, cut, length and turns.
    pub plate: Crystal,
    /// Whether the plate stands between two half-wave plates at 45 deg, which exchange H and V before it and back behind
    /// it (the second one is as good as calling H what was V). In the pump they do nothing.
    pub half_wave: bool,
}

impl Compensator {
    /// A plate by itself.
    #[must_use]
    pub fn new(place: Place, plate: Crystal) -> Self {
        Self { place, plate, half_wave: false }
    }
}

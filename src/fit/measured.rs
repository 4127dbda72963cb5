//! What was measured, as numbers with uncertainties.

use nalgebra::Vector2;

use crate::matching::Landing;
use crate::optics::Polarization;
use crate::quantity::Wavelength;

/// How the mount stood, as its scales were read.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Settings {
    /// Tilt from where the scale is believed to be zero, degrees; `None` for the job's own tilt.
    pub tilt: Option<f64>,
    /// What the tilt's scale showed, degrees, counted as `stage.zero` is; goes before `tilt`.
    pub reading: Option<f64>,
    /// Cross tilt, degrees; `None` for the job's own.
    pub cross_tilt: Option<f64>,
    /// Temperature, degrees Celsius; `None` for the job's own.
    pub temperature: Option<f64>,
}

/// Which ring a measurement belongs to, as far as it is known.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Label {
    /// The crystal that shines, from 0; `None` where nothing is said.
    pub crystal: Option<usize>,
    /// Signal or idler.
    pub photon: Option<Landing>,
    /// Of the photon.
    pub polarization: Option<Polarization>,
    /// Of the photon.
    pub wavelength: Option<Wavelength>,
}

/// What was seen; lengths in mm on the screen, angles in degrees outside.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Seen {
    /// Centre and radius of a ring on the screen; either may be missing.
    Ring {
        /// Of the circle, mm.
        centre: Option<Vector2<f64>>,
        /// Of the circle, mm.
        radius: Option<f64>,
    },
    /// Axis and half angle of a cone; either may be missing.
    Cone {
        /// Horizontal and vertical angle of the axis, degrees.
        axis: Option<Vector2<f64>>,
        /// Half angle, degrees.
        half_angle: Option<f64>,
    },
    /// A point on a ring, mm.
    Edge(Vector2<f64>),
    /// A point where two rings cross, mm.
    Crossing(Vector2<f64>),
    /// The same by horizontal and vertical angle, degrees.
    CrossingAngles(Vector2<f64>),
}

/// One measurement.
#[derive(Debug, Clone, PartialEq)]
pub struct Measurement {
    /// Line of the file, from 1.
    pub line: usize,
    /// How the mount stood.
    pub settings: Settings,
    /// Which ring.
    pub label: Label,
    /// What was seen.
    pub seen: Seen,
    /// Standard deviation of each of its numbers, in their unit; `None` where none was stated.
    pub sigma: Option<f64>,
}

impl Seen {
    /// How many numbers it holds.
    #[must_use]
    pub fn count(&self) -> usize {
        match self {
            Self::Ring { centre: place, radius: size } | Self::Cone { axis: place, half_angle: size } => {
                2 * usize::from(place.is_some()) + usize::from(size.is_some())
            }
            Self::Edge(_) => 1,
            Self::Crossing(_) | Self::CrossingAngles(_) => 2,
        }
    }

    /// Whether it says where something is, and not only how large.
    #[must_use]
    pub fn has_place(&self) -> bool {
        !matches!(self, Self::Ring { centre: None, .. } | Self::Cone { axis: None, .. })
    }

    /// Whether its numbers are angles.
    #[must_use]
    pub fn is_angle(&self) -> bool {
        matches!(self, Self::Cone { .. } | Self::CrossingAngles(_))
    }
}

/// How a picture stands to the screen as it is seen from downstream.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct View {
    /// By half a turn.
    pub turned: bool,
    /// Left and right exchanged.
    pub mirrored: bool,
}

impl View {
    /// All four.
    pub const ALL: [Self; 4] = [
        Self { turned: false, mirrored: false },
        Self { turned: true, mirrored: false },
        Self { turned: false, mirrored: true },
        Self { turned: true, mirrored: true },
    ];

    /// From places in the picture to places on the screen, and back.
    #[must_use]
    pub fn signs(self) -> Vector2<f64> {
        let turn = if self.turned { -1.0 } else { 1.0 };
        Vector2::new(if self.mirrored { -turn } else { turn }, turn)
    }
}

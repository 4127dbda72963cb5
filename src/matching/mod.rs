//! Phase matching: which directions, cuts and turns let a pump photon become a pair.

mod acceptance;
mod cones;
mod count;
mod crossing;
mod curve;
mod cut;
mod emission;
mod fit;
mod interaction;
mod meridian;
mod mismatch;
mod partner;
mod response;
mod rig;
mod ring;
mod root;
mod seed;
mod spread;
mod survey;
mod target;
mod tuning;

pub use acceptance::{Acceptance, acceptances};
pub use cones::{Cones, ConesError, CrossingRow, HistoryName, Landing, RingRow, Want, cones, cones_with};
#[cfg(feature = "count")]
pub use count::evaluations;
pub use crossing::{Contact, Crossing, GapKind, Meeting, Miss, Traced, meet, miss};
pub use curve::{Curve, RingFault, curves};
pub use cut::{
    Brightness, CutSolution, Design, Find, Plane, Shortfall, alternatives, best_phi, brightness, design,
    shortfall, unmatched,
};
pub use emission::{Emission, Media, Photons, Triplet};
pub use interaction::{Interaction, Process, ProcessError, Roles};
pub use meridian::SAMPLES;
pub use mismatch::{Mismatch, Sample};
pub use partner::{Pairing, Twin, phase_matching_factor, twins};
pub(crate) use response::crossing_changes;
pub use response::{Change, Foot, Response, RingChange};
pub use ring::{Ring, half_angle, rings};
pub use root::{Root, Scan, roots};
pub use spread::{Opinion, opinions};
pub use target::{Measure, Target};
pub use tuning::{Actuator, Tuned, Tuning, Turn, nearest_touch, opening_turn, shortage, tune, tuning_turn};

use std::fmt;

use crate::material::MaterialError;

/// What a row says about itself instead of a number that does not exist.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Status {
    /// Everything asked for is there.
    Ok,
    /// Two rings touch in a point (within 1e-6 deg).
    Touching,
    /// Two rings lie on each other all the way round.
    Coincident,
    /// Two rings miss each other.
    Apart,
    /// No direction is phase matched.
    NoPhaseMatching,
    /// d_eff is zero by symmetry; the geometry holds.
    NoNonlinearity,
    /// A wavelength or temperature is outside the data set's range.
    OutOfRange,
    /// The material absorbs.
    Opaque,
    /// A photon cannot leave through the face.
    TotalReflection,
    /// The ring leaves the search region.
    OpenRing,
    /// A wave travels along an optic axis, where fast and slow are the same.
    OpticAxis,
    /// An impossible description.
    Invalid,
    /// The solver gave up.
    NotConverged,
}

impl Status {
    /// As it stands in tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Ok => "ok",
            Self::Touching => "touching",
            Self::Coincident => "coincident",
            Self::Apart => "apart",
            Self::NoPhaseMatching => "no_phase_matching",
            Self::NoNonlinearity => "no_nonlinearity",
            Self::OutOfRange => "out_of_range",
            Self::Opaque => "opaque",
            Self::TotalReflection => "total_reflection",
            Self::OpenRing => "open_ring",
            Self::OpticAxis => "optic_axis",
            Self::Invalid => "invalid",
            Self::NotConverged => "not_converged",
        }
    }
}

impl fmt::Display for Status {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.name())
    }
}

impl From<&MaterialError> for Status {
    fn from(error: &MaterialError) -> Self {
        match error {
            MaterialError::NoIndex { .. } => Self::Opaque,
            MaterialError::Unknown { .. } | MaterialError::UnknownDataset { .. } | MaterialError::File(_) => {
                Self::Invalid
            }
            MaterialError::OutOfRange { .. }
            | MaterialError::NoThermoOptics { .. }
            | MaterialError::TemperatureOutOfRange { .. } => Self::OutOfRange,
        }
    }
}

impl From<&ConesError> for Status {
    fn from(error: &ConesError) -> Self {
        match error {
            ConesError::Material(error) => error.into(),
            ConesError::Description(_) => Self::Invalid,
        }
    }
}

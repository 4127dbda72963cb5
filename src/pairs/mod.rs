//! Pairs: the amplitude of each history, the polarization state that is collected, what spoils it, and the plates that
//! mend it.
//!
//! A pair can have been made in several ways (*histories*): other crystals, other processes. [`Stack`] gives the amplitude
//! of each towards two directions, [`Mixture`] sums over what filters, irises and fibres let through, [`State`] is what is
//! asked of the result.

mod amplitude;
mod band;
mod basis;
mod bench;
mod budget;
mod compensation;
mod disc;
mod fibre;
mod mixture;
mod plate;
mod quadrature;
mod slab;
mod solve;
mod stack;
mod state;
mod trace;

pub use basis::HistoryBasis;
pub use bench::{Bench, Collection, Compensator, Filter, Line, Opening, Place, PumpPolarization, Shape};
pub use budget::{Cause, Loss};
pub use compensation::{Answers, Designed, Proposal, compensate, half_length};
pub use mixture::{Estimate, Mixture};
pub use quadrature::Rule;
pub use solve::{Question, State};
pub use stack::{Stack, most_even};
pub use state::{Amplitude, Basis, DensityMatrix, Nearest};
pub use trace::Trace;

use crate::frame::Direction;
use crate::matching::{ConesError, CrossingRow, HistoryName, Photons, Status};
use crate::material::MaterialError;
use crate::quantity::{Length, Wavelength};

use thiserror::Error;

/// Two directions in which two histories meet.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pair {
    /// Of photon a.
    pub a: Direction,
    /// Of photon b.
    pub b: Direction,
    /// Photon a as signal, b as idler.
    pub photons: Photons,
    /// One history.
    pub first: HistoryName,
    /// The other.
    pub second: HistoryName,
}

impl Pair {
    /// At a crossing; `None` where the histories do not meet or a photon cannot leave.
    #[must_use]
    pub fn at(row: &CrossingRow, pump: Wavelength) -> Option<Self> {
        let crossing = row.crossing.as_ref()?;
        let usable = matches!(row.status, Status::Ok | Status::Touching | Status::Coincident);
        let photons = Photons { pump, signal: row.a_wavelength, idler: row.b_wavelength };
        let (first, second) = (row.first, row.second);
        usable.then_some(Self { a: crossing.direction, b: crossing.partner?, photons, first, second })
    }

    /// What the first and the second history leave in arm a and in arm b: o and e in one crystal, the crystal's number in
    /// several.
    #[must_use]
    pub fn polarizations(&self) -> [[String; 2]; 2] {
        let (one, two) = (&self.first, &self.second);
        if one.crystal == two.crystal {
            let (p, q) = (&one.process, &two.process);
            return [
                [p.signal.to_string(), q.signal.to_string()],
                [p.idler.to_string(), q.idler.to_string()],
            ];
        }
        let numbers = [one, two].map(|name| (name.crystal + 1).to_string());
        [numbers.clone(), numbers]
    }

    /// The same pair with the arms exchanged.
    #[must_use]
    pub fn swapped(&self) -> Self {
        let twin = |name: HistoryName| {
            let process = crate::matching::Process {
                pump: name.process.pump,
                signal: name.process.idler,
                idler: name.process.signal,
            };
            HistoryName { process, ..name }
        };
        Self {
            a: self.b,
            b: self.a,
            photons: self.photons.exchanged(),
            first: twin(self.first),
            second: twin(self.second),
        }
    }
}

/// What varies among the pairs that are collected; the rest stands at its nominal value.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Vary {
    /// Frequencies of the photons.
    pub frequency: bool,
    /// Directions, of the photons within irises and fibres and of the pump within its waist.
    pub direction: bool,
    /// Frequency of the pump.
    pub line: bool,
    /// Whether filters stand at the photons' nominal wavelengths whatever their own centre.
    pub recentred: bool,
    /// Whether every sample counts alike, however bright its pairs are.
    pub even: bool,
}

impl Vary {
    /// Everything, as it is.
    pub const ALL: Self =
        Self { frequency: true, direction: true, line: true, recentred: false, even: false };
    /// Nothing at all.
    pub const NOTHING: Self =
        Self { frequency: false, direction: false, line: false, recentred: false, even: false };
}

/// Why there is no state.
#[derive(Debug, Clone, Error)]
pub enum PairsError {
    /// Indices are not to be had.
    #[error(transparent)]
    Material(#[from] MaterialError),
    /// The interaction does not fit a crystal.
    #[error("{0}")]
    Description(String),
    /// A pump that spreads too far to be a beam.
    #[error(
        "a waist of {} um spreads the pump over {spread_deg:.1} deg to either side, too far for a beam along z: phases and rings would not be those of these crystals; take {least_um:.1} um or more",
        waist.um()
    )]
    TightWaist {
        /// 1/e^2 radius.
        waist: Length,
        /// Half angle of the beam.
        spread_deg: f64,
        /// That would do.
        least_um: f64,
    },
    /// No nonlinear tensor.
    #[error(
        "the nonlinear tensor of {material} is not known, so that the amplitudes of its pairs are not known either; add `nonlinearity` to a material file of your own"
    )]
    NoTensor {
        /// Of the crystal.
        material: String,
    },
    /// No pair of this number.
    #[error("{}", no_pair(*number, *count, *status))]
    NoPair {
        /// Asked for.
        number: usize,
        /// How many there are.
        count: usize,
        /// Of the first two histories, where there is none.
        status: Status,
    },
    /// All pairs have photons of the same polarizations.
    #[error("{}", one_polarization(*crystals))]
    OnePolarization {
        /// How many crystals there are.
        crystals: usize,
    },
    /// A pair is asked for by its number, and the directions are given.
    #[error(
        "pair {number} is asked for, but collection.direction fixes the directions, whichever pair is meant: leave out one of the two"
    )]
    FixedDirections {
        /// Asked for.
        number: usize,
    },
    /// The histories of the pair are not among those of the interaction.
    #[error(
        "the two histories do not exist in these crystals with this interaction; look at `twincone cones`"
    )]
    NoHistories,
    /// Filters and irises leave nothing.
    #[error(
        "no pair passes: the filters of the two arms do not transmit a pair of one pump photon, or the irises do not see one; leave out their centre or direction to let them follow the crossing"
    )]
    NothingCollected,
    /// The pump's polarization makes no pairs.
    #[error(
        "this pump polarization drives none of the histories: no pairs are made; leave it out, or write polarization = \"matched\", for the one that drives all crystals as evenly as can be"
    )]
    NotDriven,
    /// Both histories have amplitude zero, or are not orthogonal.
    #[error("the two histories leave the same polarization in an arm: there is nothing to entangle")]
    Alike,
}

impl From<ConesError> for PairsError {
    fn from(error: ConesError) -> Self {
        match error {
            ConesError::Material(error) => Self::Material(error),
            ConesError::Description(text) => Self::Description(text),
        }
    }
}

impl From<&PairsError> for Status {
    fn from(error: &PairsError) -> Self {
        match error {
            PairsError::Material(error) => error.into(),
            // of the histories that were looked at; that there are fewer pairs than the number is no status of theirs
            PairsError::NoPair { count: 0, status, .. } => *status,
            PairsError::NotDriven => Self::NoNonlinearity,
            PairsError::NoPair { .. }
            | PairsError::Description(_)
            | PairsError::NoTensor { .. }
            | PairsError::TightWaist { .. }
            | PairsError::NoHistories
            | PairsError::OnePolarization { .. }
            | PairsError::FixedDirections { .. }
            | PairsError::NothingCollected
            | PairsError::Alike => Self::Invalid,
        }
    }
}

fn one_polarization(crystals: usize) -> String {
    let which = if crystals == 1 {
        "one crystal of this type makes all its pairs in one way"
    } else {
        "these crystals make all their pairs alike"
    };
    format!(
        "{which}, so that each photon has one polarization and nothing is entangled; add a second equal [[crystal]] with \
         roll = \"90 deg\", or take type II"
    )
}

fn no_pair(number: usize, count: usize, status: Status) -> String {
    match (count, status) {
        (0, Status::Apart) => {
            "the rings miss each other, so there is no direction to collect both histories in; `twincone tilt` says how \
             far to turn, or fix the directions with collection.direction"
                .into()
        }
        (0, status) => {
            format!("there is no pair of directions with two histories ({status}); look at `twincone cones`")
        }
        (count, status) if number <= count => {
            format!("pair {number} has no state ({status}); look at `twincone cones`")
        }
        (1, _) => format!("there is no pair {number}: the rings cross in one pair of directions, number 1"),
        _ => format!("there is no pair {number}: pairs are numbered 1 to {count}"),
    }
}

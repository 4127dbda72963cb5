//! What each cause alone takes from the visibility between diagonal polarizers.
//!
//! One thing varies at a time, the rest stands at its nominal value; the loss is 1 - |rho_12| / sqrt(rho_11 rho_22) in the
//! basis of the two histories, so that unequal amplitudes are counted by themselves. Losses add up only where they are
//! small and independent.

use super::bench::{Bench, Line};
use super::solve::State;
use super::{DensityMatrix, HistoryBasis, Mixture, PairsError, Stack, Vary};

/// What spoils a state.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Cause {
    /// The phase between the histories changes with the photons' frequency.
    Delay,
    /// It changes with direction within the irises.
    SpatialPhase,
    /// One history is brighter than the other.
    UnequalAmplitudes,
    /// It changes with the pump's frequency.
    PumpBandwidth,
    /// Filters that do not stand where the pair does.
    FilterMismatch,
    /// Fields that leave their axes: polarizations of photons, plates and later crystals not along one another.
    TurnedFields,
}

impl std::fmt::Display for Cause {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.pad(match self {
            Self::Delay => "delay",
            Self::SpatialPhase => "spatial phase",
            Self::UnequalAmplitudes => "unequal amplitudes",
            Self::PumpBandwidth => "pump bandwidth",
            Self::FilterMismatch => "filter mismatch",
            Self::TurnedFields => "turned fields",
        })
    }
}

/// One line of the budget.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Loss {
    /// What.
    pub cause: Cause,
    /// Of visibility, 0 to 1.
    pub loss: f64,
}

/// Error of a loss.
pub const ERROR: f64 = 5e-4;

/// The budget of a state, largest loss first.
pub(super) fn budget(stack: &Stack, bench: &Bench, state: &State) -> Result<Vec<Loss>, PairsError> {
    let contrast = |vary: Vary| -> Result<f64, PairsError> {
        let found = Mixture::new(stack, bench, vary).estimate(ERROR)?;
        Ok(balanced(&found.lab, &state.basis))
    };
    let alone = |vary: Vary| contrast(vary).map(|contrast| 1.0 - contrast);
    let delay = Vary { frequency: true, recentred: true, ..Vary::NOTHING };
    let as_filtered = match contrast(Vary { recentred: false, ..delay }) {
        Err(PairsError::NothingCollected) => Ok(0.0),
        other => other,
    };
    let recentred = contrast(delay)?;
    let shifted = bench.filters.iter().flatten().any(|filter| filter.centre.is_some());
    let (p, q) = (state.histories.0[(0, 0)].re, state.histories.0[(3, 3)].re);
    let spread = if state.points && bench.waist.is_none() {
        0.0
    } else {
        alone(Vary { direction: true, ..Vary::NOTHING })?
    };
    let line = if bench.line == Line::Monochromatic {
        0.0
    } else {
        alone(Vary { line: true, even: true, ..Vary::NOTHING })?
    };
    let mut all = vec![
        (Cause::Delay, 1.0 - recentred),
        (Cause::SpatialPhase, spread),
        (Cause::UnequalAmplitudes, 1.0 - 2.0 * (p * q).max(0.0).sqrt() / (p + q)),
        (Cause::PumpBandwidth, line),
        (Cause::FilterMismatch, if shifted { recentred - as_filtered? } else { 0.0 }),
        (Cause::TurnedFields, 1.0 - (p + q)),
    ];
    all.sort_by(|a, b| b.1.total_cmp(&a.1));
    Ok(all.into_iter().map(|(cause, loss)| Loss { cause, loss: loss.max(0.0) }).collect())
}

/// |rho_12| / sqrt(rho_11 rho_22) of the two histories.
fn balanced(lab: &DensityMatrix, basis: &HistoryBasis) -> f64 {
    let rho = lab.in_basis(&basis.a, &basis.b).0;
    let both = (rho[(0, 0)].re * rho[(3, 3)].re).max(0.0).sqrt();
    if both > 0.0 { (rho[(0, 3)].norm() / both).min(1.0) } else { 0.0 }
}

//! The state of one pair of directions, with what spoils it.

use super::bench::{Bench, PumpPolarization};
use super::budget::{Loss, budget};
use super::{DensityMatrix, Estimate, HistoryBasis, Mixture, Pair, PairsError, Stack, Vary};
use crate::frame::Direction;
use crate::matching::{Cones, CrossingRow, Emission, Interaction, Photons, Status, Want, cones};
use crate::optics::Crystal;
use crate::quantity::Wavelength;

/// What is asked.
#[derive(Debug, Clone, Copy)]
pub struct Question<'a> {
    /// In pump order.
    pub crystals: &'a [Crystal],
    /// Of the pump.
    pub pump: Wavelength,
    /// Of photon a.
    pub signals: &'a [Wavelength],
    /// Polarizations.
    pub interaction: Interaction,
    /// What the pairs meet beside the crystals.
    pub bench: &'a Bench,
    /// Number of the pair from 1, as `cones` counts them; the first where left open.
    pub number: Option<usize>,
    /// Error of a visibility that will do.
    pub wanted: f64,
}

/// A state with what belongs to it.
#[derive(Debug, Clone)]
pub struct State {
    /// Number of the pair, where its directions follow a crossing.
    pub number: Option<usize>,
    /// Its directions.
    pub pair: Pair,
    /// In H and V of each arm.
    pub lab: DensityMatrix,
    /// In the basis of the two histories: the first makes 00, the second 11.
    pub histories: DensityMatrix,
    /// That basis.
    pub basis: HistoryBasis,
    /// Error of a visibility by the quadratures.
    pub error: f64,
    /// Shortest and longest wavelength of a that were counted, m.
    pub band: [f64; 2],
    /// Whether directions are points.
    pub points: bool,
    /// Whether an index was taken from outside the data set's range.
    pub extrapolated: bool,
    /// `NotConverged` where the error is far above what was asked for, else of the crossing.
    pub status: Status,
}

impl Question<'_> {
    /// Rings and crossings, to choose a pair from.
    ///
    /// # Errors
    /// As [`cones`].
    pub fn crossings(&self) -> Result<Cones, PairsError> {
        Ok(cones(self.crystals, self.pump, self.signals, self.interaction, Want::Crossings)?)
    }

    /// The pair that is asked about: that of the number, or in directions of its own.
    ///
    /// # Errors
    /// There is none, with what there is.
    pub fn pair(&self) -> Result<(Option<usize>, Pair, CrossingRow), PairsError> {
        let found = self.crossings()?;
        if found.crossings.is_empty() {
            return Err(PairsError::OnePolarization { crystals: self.crystals.len() });
        }
        let fixed = [0, 1].map(|arm| self.bench.collection[arm].direction);
        if fixed.iter().any(Option::is_some) {
            if let Some(number) = self.number {
                return Err(PairsError::FixedDirections { number });
            }
            let row = found.crossings.first().ok_or(PairsError::NoHistories)?;
            return Ok((None, self.fixed_pair(row, fixed)?, row.clone()));
        }
        let number = self.number.unwrap_or(1);
        let row = found.crossings.iter().find(|row| row.pair == Some(number));
        match row.and_then(|row| Some((row, Pair::at(row, self.pump)?))) {
            Some((row, pair)) => Ok((Some(number), pair, row.clone())),
            None => Err(PairsError::NoPair {
                number,
                count: found.crossings.iter().filter_map(|row| row.pair).max().unwrap_or(0),
                status: row.or(found.crossings.first()).map_or(Status::NoPhaseMatching, |row| row.status),
            }),
        }
    }

    /// Directions that do not follow the crossing; the one that is left open follows the other.
    fn fixed_pair(&self, row: &CrossingRow, fixed: [Option<Direction>; 2]) -> Result<Pair, PairsError> {
        let photons = Photons { pump: self.pump, signal: row.a_wavelength, idler: row.b_wavelength };
        let emission = Emission::of(&self.crystals[row.first.crystal], photons)?;
        let roles = emission.wanted(&self.crystals[row.first.crystal], self.interaction);
        let roles = roles.map_err(PairsError::Description)?;
        let mismatch = roles.first().and_then(|r| emission.mismatch(*r)).ok_or(PairsError::NoHistories)?;
        let partner = |d: Direction, back: bool| {
            let seen = if back { mismatch.exchanged() } else { mismatch };
            seen.partner(d).ok_or(PairsError::NoHistories)
        };
        let (a, b) = match fixed {
            [Some(a), Some(b)] => (a, b),
            [Some(a), None] => (a, partner(a, false)?),
            [None, Some(b)] => (partner(b, true)?, b),
            [None, None] => return Err(PairsError::NoHistories),
        };
        Ok(Pair { a, b, photons, first: row.first, second: row.second })
    }

    /// The state behind everything.
    ///
    /// # Errors
    /// No such pair, indices that are not to be had, nothing collected.
    pub fn state(&self) -> Result<State, PairsError> {
        let (number, pair, row) = self.pair()?;
        let stack = Stack::new(self.crystals, self.bench, &pair, self.interaction)?;
        self.demand_drive(&stack, &pair)?;
        let mixture = Mixture::new(&stack, self.bench, Vary::ALL);
        let Estimate { lab, error, band } = mixture.estimate(self.wanted)?;
        let basis = stack.history_basis()?;
        let plates = self.bench.compensators.iter().map(|c| &c.plate);
        let own = [pair.photons.signal, pair.photons.idler];
        let beyond = plates.filter(|plate| own.iter().any(|w| plate.extrapolates(*w))).count() > 0;
        Ok(State {
            number,
            pair,
            lab,
            histories: lab.in_basis(&basis.a, &basis.b),
            basis,
            error,
            band: [band[1], band[0]].map(|omega| super::stack::wavelength(omega).si()),
            points: mixture.is_of_points(),
            extrapolated: row.extrapolated || beyond,
            status: match number {
                _ if missed(error, self.wanted) => Status::NotConverged,
                Some(_) => row.status,
                None => Status::Ok,
            },
        })
    }

    /// Refuses a pump polarization that makes no pairs: a normalised state would show nothing of it.
    pub(super) fn demand_drive(&self, stack: &Stack, pair: &Pair) -> Result<(), PairsError> {
        // rounding leaves some 1e-33 of the intensity
        const FAINTEST: f64 = 1e-10;
        if self.bench.polarization == PumpPolarization::Matched {
            return Ok(());
        }
        let bench = Bench { polarization: PumpPolarization::Matched, ..self.bench.clone() };
        let matched = Stack::new(self.crystals, &bench, pair, self.interaction)?;
        let given = Mixture::new(stack, &bench, Vary::ALL).brightness()?;
        let most = Mixture::new(&matched, &bench, Vary::ALL).brightness()?;
        if given < FAINTEST * most { Err(PairsError::NotDriven) } else { Ok(()) }
    }

    /// What each cause alone costs, largest first.
    ///
    /// # Errors
    /// As [`Self::state`].
    pub fn budget(&self, state: &State) -> Result<Vec<Loss>, PairsError> {
        let stack = Stack::new(self.crystals, self.bench, &state.pair, self.interaction)?;
        budget(&stack, self.bench, state)
    }
}

/// Whether a quadrature ended far from its aim.
fn missed(error: f64, wanted: f64) -> bool {
    error > 10.0 * wanted || error > wanted.max(0.01)
}

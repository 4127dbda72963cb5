//! Sweeps: one report at every point of a grid of settings, as lines of CSV.
//!
//! [`Sweep::new`] reads the `[sweep]` of a job and finds out which keys can be set in a setup directly; the others go
//! through text once for each of their combinations. A [`Worker`] then turns points into lines. A point's lines depend on
//! nothing but its number, so pieces may be computed anywhere in any order.

mod meta;
mod rows;
mod setups;
mod slice;
mod worker;

pub use meta::meta;
pub use slice::Slice;
pub use worker::{Piece, Tally, Worker};

use std::fmt;

use crate::job::axes::Grid;
use crate::job::plan::{Plan, Report};
use crate::job::setup::SetupError;
use crate::job::{Document, JobError, Setup};
use crate::matching::{ConesError, Status};
use crate::material::Catalogue;
use crate::pairs::PairsError;
use crate::report::table::{EXTRAPOLATED, STATUS};
use setups::Setups;

/// Why a point has no answer.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Fault {
    /// As its row says.
    pub status: Status,
    /// In a sentence.
    pub message: String,
}

impl Fault {
    fn invalid(message: impl fmt::Display) -> Self {
        Self { status: Status::Invalid, message: message.to_string() }
    }
}

impl From<&SetupError> for Fault {
    fn from(error: &SetupError) -> Self {
        let status = match error {
            SetupError::Job(_) => Status::Invalid,
            SetupError::Material(error) => error.into(),
            SetupError::NoCut(_) => Status::NoPhaseMatching,
        };
        Self { status, message: error.to_string() }
    }
}

impl From<SetupError> for Fault {
    fn from(error: SetupError) -> Self {
        Self::from(&error)
    }
}

impl From<JobError> for Fault {
    fn from(error: JobError) -> Self {
        Self::invalid(error)
    }
}

impl From<ConesError> for Fault {
    fn from(error: ConesError) -> Self {
        Self { status: Status::from(&error), message: error.to_string() }
    }
}

impl From<PairsError> for Fault {
    fn from(error: PairsError) -> Self {
        Self { status: Status::from(&error), message: error.to_string() }
    }
}

/// A column of a sweep.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct SweepColumn {
    /// Name with its unit as a suffix.
    pub name: String,
    /// Unit, or empty.
    pub unit: &'static str,
    /// What stands in it.
    pub meaning: &'static str,
}

/// A sweep that is ready to run.
#[derive(Debug)]
pub struct Sweep<'a> {
    plan: Plan,
    setups: Setups<'a>,
    columns: Vec<SweepColumn>,
}

impl<'a> Sweep<'a> {
    /// Reads the sweep of a document and tries a few of its points.
    ///
    /// # Errors
    /// What is wrong with the job or its axes; that no point which was tried can be.
    pub fn new(document: &'a Document, catalogue: &'a Catalogue) -> Result<Self, SetupError> {
        let description = document.describe()?;
        let plan = Plan::read(document, &description)?;
        let columns = columns(&plan)?;
        let setups = Setups::new(document, catalogue, &plan)?;
        Ok(Self { plan, setups, columns })
    }

    /// Number of points.
    #[must_use]
    pub fn count(&self) -> u64 {
        self.plan.grid.count()
    }

    /// The report that is written.
    #[must_use]
    pub fn report(&self) -> Report {
        self.plan.report
    }

    /// Columns, in order.
    #[must_use]
    pub fn columns(&self) -> &[SweepColumn] {
        &self.columns
    }

    /// The setup of the first combination of words, with the numbers of some point.
    #[must_use]
    pub fn first_setup(&self) -> Option<Setup> {
        self.setups.base(&self.plan, 0).ok()
    }

    /// What a person may not expect of this sweep.
    #[must_use]
    pub fn warnings(&self) -> Vec<String> {
        self.setups.warnings(&self.plan)
    }

    fn grid(&self) -> &Grid {
        &self.plan.grid
    }
}

fn columns(plan: &Plan) -> Result<Vec<SweepColumn>, JobError> {
    let point = SweepColumn { name: "point".into(), unit: "", meaning: "number of the point, from 0" };
    let axes = plan.grid.axes().map(|axis| SweepColumn {
        name: axis.column(),
        unit: axis.unit.map_or("", |unit| unit.name()),
        meaning: axis.path.key.meaning,
    });
    let mut columns: Vec<SweepColumn> = std::iter::once(point).chain(axes).collect();
    for (n, column) in columns.iter().enumerate() {
        if columns[..n].iter().any(|before| before.name == column.name) {
            let message = format!(
                "two axes would name a column {}; give the crystals names that differ more",
                column.name
            );
            return Err(JobError(message));
        }
    }
    let own = rows::columns(plan.report, &plan.search).into_iter().chain([EXTRAPOLATED, STATUS]);
    for column in own {
        if let Some(axis) = columns.iter().position(|c| c.name == column.name) {
            return Err(JobError(format!(
                "the axis `{}` is what report {} finds, and would name two columns alike; leave that axis out",
                plan.grid.axes().nth(axis - 1).map_or("", |axis| axis.path.typed.as_str()),
                plan.report.name()
            )));
        }
        columns.push(SweepColumn { name: column.name.into(), unit: column.unit, meaning: column.meaning });
    }
    Ok(columns)
}

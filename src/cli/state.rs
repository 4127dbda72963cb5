//! `state`: which entangled state comes out?

use clap::Args as ClapArgs;
use twincone::job::setup::Needs;
use twincone::pairs::Basis;
use twincone::report::state::{tables, text};
use twincone::report::{Answer, Conventions, resolved_job};

use super::failure::Failure;
use super::options::ExperimentArgs;
use super::output::{Outcome, OutputArgs};

/// Options of `state`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// Which pair of crossings, as `cones` numbers them [default: 1]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..))]
    pair: Option<u16>,
    /// oe: the two histories; lab: H and V of each arm [default: both]
    #[arg(long, value_enum)]
    basis: Option<Choice>,
    /// Error of a visibility to go for: less takes longer
    #[arg(long, value_name = "ERROR", default_value = "1e-3", value_parser = precision)]
    precision: f64,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

#[derive(Debug, Clone, Copy, clap::ValueEnum)]
pub enum Choice {
    /// The two histories
    Oe,
    /// H and V of each arm
    Lab,
}

impl Choice {
    /// As a job names it.
    pub fn name(self) -> &'static str {
        match self {
            Self::Oe => Basis::Histories.name(),
            Self::Lab => Basis::Lab.name(),
        }
    }
}

/// An error between 1e-9 and 0.1.
pub fn precision(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if (1e-9..=0.1).contains(&value) => Ok(value),
        _ => Err("write a number from 1e-9 to 0.1, such as 1e-4".into()),
    }
}

/// State and budget.
///
/// # Errors
/// What is missing, wrong or outside a data set's range; no pair, or none that passes.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let setup = args.experiment.setup(output, Needs::ALL)?;
    setup.demand_length("state")?;
    let signals = setup.signals();
    let question = setup.pairs(&signals, args.pair.map(usize::from), args.precision);
    let state = question.state()?;
    let budget = question.budget(&state)?;
    let bases: &[Basis] = match args.basis {
        Some(Choice::Oe) => &[Basis::Histories],
        Some(Choice::Lab) => &[Basis::Lab],
        None => &Basis::ALL,
    };
    let mut conventions = Conventions::of_pairs(&setup);
    conventions.warn_of_dim_phi(&setup);
    let answer = Answer {
        command: "state",
        tables: tables(&state, &budget, bases),
        text: text(&setup, &state, &budget, bases),
        conventions,
        job: resolved_job(&setup),
        solved: true,
    };
    output.outcome(&answer, Some("state"))
}

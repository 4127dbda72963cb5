//! `cones`: where does the light go?

use clap::{Args as ClapArgs, ValueEnum};
use twincone::job::setup::{Needs, Setup};
use twincone::matching::{Cones, Want, cones, opinions};
use twincone::optics::Crystal;
use twincone::report::cones::{crossings_table, rings_table, spread_lines, text};
use twincone::report::{Answer, Conventions, advice, resolved_job};

use super::failure::Failure;
use super::options::ExperimentArgs;
use super::output::{Outcome, OutputArgs};

/// Options of `cones`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// Which table csv takes
    #[arg(long, value_enum, default_value = "rings")]
    rows: Rows,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
enum Rows {
    /// One row per ring
    Rings,
    /// One row per pair of crossings
    Crossings,
}

/// Rings and crossings of the experiment.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let setup = args.experiment.setup(output, Needs::ALL)?;
    let found = solve(&setup, &setup.crystals)?;
    let advice = advice(&setup, &found);
    let others = opinions(&setup.crystals[0], &setup.photons(), |other| {
        let crystals: Vec<Crystal> = setup.crystals.iter().map(|c| alike(c, other)).collect();
        solve(&setup, &crystals).ok()
    });
    let mut conventions = Conventions::of(&setup);
    conventions.warn_of_dim_phi(&setup);
    conventions.lines.splice(0..0, spread_lines(&setup, &found, &others));
    let answer = Answer {
        command: "cones",
        tables: vec![rings_table(&setup, &found), crossings_table(&setup, &found)],
        text: text(&setup, &found, &advice),
        conventions,
        job: resolved_job(&setup),
        solved: true,
    };
    let table = match args.rows {
        Rows::Rings => "rings",
        Rows::Crossings => "crossings",
    };
    output.outcome(&answer, Some(table))
}

fn solve(setup: &Setup, crystals: &[Crystal]) -> Result<Cones, Failure> {
    Ok(cones(crystals, setup.pump(), &setup.signals(), setup.interaction, Want::Both)?)
}

/// Every crystal of the same material takes the other data set.
fn alike(crystal: &Crystal, other: &Crystal) -> Crystal {
    if crystal.material.id == other.material.id {
        crystal.with_dataset(other.dataset)
    } else {
        crystal.clone()
    }
}

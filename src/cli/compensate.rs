//! `compensate`: which plates, how thick, which way round?

use clap::Args as ClapArgs;
use twincone::job::setup::Needs;
use twincone::pairs::{compensate, half_length};
use twincone::report::compensate::{table, text};
use twincone::report::{Answer, Conventions, resolved_job};

use super::failure::Failure;
use super::options::{ExperimentArgs, add_file, catalogue};
use super::output::{Outcome, OutputArgs};
use super::state::precision;

/// Options of `compensate`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// Material that plates may be made of, repeatable [default: that of the crystal, and quartz]
    #[arg(long, value_name = "ID[:DATASET]")]
    allow: Vec<String>,
    /// Plates in the arms stand behind half-wave plates at 45 deg, which exchange H and V
    #[arg(long)]
    half_wave: bool,
    /// Which pair of crossings, as `cones` numbers them [default: 1]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..))]
    pair: Option<u16>,
    /// Error of a visibility to go for: less takes longer
    #[arg(long, value_name = "ERROR", default_value = "1e-3", value_parser = precision)]
    precision: f64,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

/// The best plates of each material.
///
/// # Errors
/// What is missing, wrong or outside a data set's range; no pair, or none that passes.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let setup = args.experiment.setup(output, Needs::ALL)?;
    setup.demand_length("compensate")?;
    let mut catalogue = catalogue(output, &args.experiment.document()?)?;
    args.allow.iter().try_for_each(|name| add_file(&mut catalogue, name))?;
    let materials = setup.plates(&catalogue, &args.allow)?;
    let signals = setup.signals();
    let question = setup.pairs(&signals, args.pair.map(usize::from), args.precision);
    let answers = compensate(&question, &materials, args.half_wave)?;
    let rules = half_length(&question)?;
    let mut conventions = Conventions::of_pairs(&setup);
    conventions.warn_of_dim_phi(&setup);
    for proposal in &answers.proposals {
        proposal.plates.iter().for_each(|designed| conventions.add_dataset(&designed.plate.plate));
    }
    let answer = Answer {
        command: "compensate",
        tables: vec![table(&answers)],
        text: text(&answers, &rules),
        conventions,
        job: resolved_job(&setup),
        solved: !answers.proposals.is_empty(),
    };
    output.outcome(&answer, None)
}

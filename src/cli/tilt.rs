//! `tilt`: how far do I turn?

use clap::{Args as ClapArgs, ValueEnum};
use twincone::job::setup::Needs;
use twincone::matching::{Actuator, Target, Tuned, Tuning, opinions, shortage, tune};
use twincone::report::tilt::{spread_line, table, text};
use twincone::report::{Answer, Conventions, resolved_job};

use super::cut::TargetArgs;
use super::failure::Failure;
use super::options::ExperimentArgs;
use super::output::{Outcome, OutputArgs};

/// Options of `tilt`; `--tilt` says where the mount stands now.
#[derive(Debug, ClapArgs)]
pub struct Args {
    #[command(flatten)]
    target: TargetArgs,
    /// The rings touch
    #[arg(long, conflicts_with = "TargetArgs")]
    touching: bool,
    /// What to change [default: the turn with the larger effect]
    #[arg(long, value_enum)]
    by: Option<By>,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub enum By {
    /// The turn that increases theta
    Tilt,
    /// The turn that increases phi
    CrossTilt,
    /// The crystal's temperature
    Temperature,
    /// The pump's wavelength
    Pump,
}

impl By {
    /// As a job names it.
    pub fn name(self) -> &'static str {
        match self {
            Self::Tilt => "tilt",
            Self::CrossTilt => "cross-tilt",
            Self::Temperature => "temperature",
            Self::Pump => "pump",
        }
    }

    fn actuator(self) -> Actuator {
        match self {
            Self::Tilt => Actuator::Tilt,
            Self::CrossTilt => Actuator::CrossTilt,
            Self::Temperature => Actuator::Temperature,
            Self::Pump => Actuator::Pump,
        }
    }
}

/// All settings that meet the target.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let mut setup = args.experiment.setup(output, Needs::ALL)?;
    let target = if args.touching { Some(Target::Touching) } else { args.target.target()? };
    let target = target.ok_or_else(|| {
        Failure::usage("no target: pass --crossing, --separation, --half-angle, --collinear, --beamlike or --touching, for example --crossing 3deg")
    })?;
    let question = setup.tuning(target, args.by.map(By::actuator))?;
    let Tuned { actuator, turns, now } = tune(&question)?;
    let others = opinions(&question.crystal, &question.photons, |other| {
        let again = Tuning { crystal: other.clone(), actuator: Some(actuator), ..question.clone() };
        tune(&again).map(|tuned| tuned.turns).unwrap_or_default()
    });
    let mut conventions = Conventions::of(&setup);
    conventions.warn_of_dim_phi(&setup);
    conventions.lines.insert(0, spread_line(actuator, &turns, &others));
    let words = match turns.is_empty() {
        true => format!("{}\n", shortage(target, actuator, &now)),
        false => text(&setup, target, actuator, args.by.is_none(), &turns),
    };
    let answer = Answer {
        command: "tilt",
        tables: vec![table(&setup, actuator, &turns)],
        text: words,
        conventions,
        job: resolved_job(&setup),
        solved: !turns.is_empty(),
    };
    output.outcome(&answer, None)
}

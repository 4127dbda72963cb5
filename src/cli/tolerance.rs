//! `tolerance`: what do errors do to my geometry, and how much can turning repair?

use std::path::PathBuf;

use clap::{Args as ClapArgs, ValueEnum};
use twincone::job::resolve;
use twincone::job::setup::{Needs, Setup};
use twincone::quantity::{Angle, Length, Temperature};
use twincone::report::tolerance::{Finding, samples_table, tables, text};
use twincone::report::{Answer, Conventions, csv, resolved_job};
use twincone::tolerance::{Bench, Cause, Draw, Errors, Spread};
use twincone::tolerance::{advise, chances, contributions, ordered_otherwise, sample};

use super::cut::TargetArgs;
use super::failure::Failure;
use super::options::{ExperimentArgs, catalogue};
use super::output::{Outcome, OutputArgs, write_whole};

/// Options of `tolerance`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    #[command(flatten)]
    target: TargetArgs,
    #[command(flatten)]
    errors: ErrorArgs,
    /// How errors are meant when they are combined
    #[arg(long, value_enum, default_value = "limits")]
    errors_are: Meant,
    /// Random combinations of all errors
    #[arg(long, value_name = "N", default_value = "10000", value_parser = clap::value_parser!(u32).range(1..=10_000_000))]
    samples: u32,
    /// Of the random numbers: the same seed gives the same numbers
    #[arg(long, value_name = "S", default_value = "1")]
    seed: u64,
    /// Furthest turn of the mount from its setting
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true, default_value = "3deg")]
    tilt_limit: String,
    /// Combine errors with the crystal's own data set alone
    #[arg(long)]
    one_dataset: bool,
    /// Write every sample to this CSV file
    #[arg(long, value_name = "FILE")]
    write_samples: Option<PathBuf>,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
enum Meant {
    /// Nothing lies further off, everything nearer is as likely
    Limits,
    /// One standard deviation of a normal distribution
    Deviations,
}

/// Stated errors, each to both sides.
#[derive(Debug, ClapArgs)]
#[command(next_help_heading = "Errors, to both sides")]
pub struct ErrorArgs {
    /// Of the cut's theta [default: 0.5 deg]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    theta_error: Option<String>,
    /// Of the cut's phi [default: 0.5 deg]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    phi_error: Option<String>,
    /// Of the pump's wavelength [default: 2 nm]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    pump_error: Option<String>,
    /// Of the crystal's temperature, such as 2K [default: 2 K, 0 where the data set has one temperature]
    #[arg(long, value_name = "KELVIN", allow_hyphen_values = true)]
    temperature_error: Option<String>,
    /// Of the tilt's setting [default: 0.1 deg]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    tilt_error: Option<String>,
    /// Of the crystal's roll [default: 1 deg]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    roll_error: Option<String>,
    /// Of the crystal's length [default: 0.1 mm]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    length_error: Option<String>,
    /// Of the pump's direction, horizontally and vertically [default: 0.05 deg]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    pump_direction_error: Option<String>,
}

impl ErrorArgs {
    /// The stated errors in SI, usual ones where none is stated.
    ///
    /// # Errors
    /// A value without a unit, or a negative one.
    pub fn errors(&self, setup: &Setup) -> Result<Errors, Failure> {
        let mut errors = Errors::usual();
        if !setup.crystals[0].set().has_thermo_optics() {
            errors = errors.with(Cause::Temperature, 0.0);
        }
        let angle = |option: &str, text: &str| {
            let angle: Angle = text.parse().map_err(|e| Failure::usage(format!("{option}: {e}")))?;
            size(option, angle.si(), 20f64.to_radians(), "20 deg")
        };
        let length = |option: &str, text: &str, most: f64, words: &str| {
            let length: Length = text.parse().map_err(|e| Failure::usage(format!("{option}: {e}")))?;
            size(option, length.si(), most, words)
        };
        let angles = [
            ("--theta-error", &self.theta_error, Cause::Theta),
            ("--phi-error", &self.phi_error, Cause::Phi),
            ("--tilt-error", &self.tilt_error, Cause::Tilt),
            ("--roll-error", &self.roll_error, Cause::Roll),
            ("--pump-direction-error", &self.pump_direction_error, Cause::PumpHorizontal),
            ("--pump-direction-error", &self.pump_direction_error, Cause::PumpVertical),
        ];
        for (option, text, cause) in angles {
            if let Some(text) = text {
                errors = errors.with(cause, angle(option, text)?);
            }
        }
        if let Some(text) = &self.pump_error {
            errors = errors.with(Cause::Pump, length("--pump-error", text, 50e-9, "50 nm")?);
        }
        if let Some(text) = &self.length_error {
            let whole = setup.crystals[0].length.si();
            errors = errors.with(
                Cause::Length,
                length("--length-error", text, 0.9 * whole, "nine tenths of the length")?,
            );
        }
        if let Some(text) = &self.temperature_error {
            let kelvins = Temperature::difference(text)
                .map_err(|why| Failure::usage(format!("--temperature-error: {why}")))?;
            let kelvins = size("--temperature-error", kelvins, 200.0, "200 K")?;
            errors = errors.with(Cause::Temperature, kelvins);
        }
        Ok(errors)
    }
}

fn size(option: &str, value: f64, most: f64, words: &str) -> Result<f64, Failure> {
    if (0.0..=most).contains(&value) {
        return Ok(value);
    }
    Err(Failure::usage(format!("{option}: an error is a size from 0 to {words}; it acts to both sides")))
}

/// Contributions one by one, all together, and what follows.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let mut setup = setup(args, output)?;
    let target = args.target.target()?.or(setup.cut[0].target).ok_or_else(|| {
        Failure::usage("no target: pass --crossing, --half-angle, --separation or --collinear, for example --crossing 3deg")
    })?;
    setup.demand_length("tolerance")?;
    setup.only_crystal("tolerance").map_err(Failure::usage)?;
    setup.only_photons("tolerance").map_err(Failure::usage)?;
    let question = setup.tuning(target, None)?;
    args.experiment.write_job(&setup)?;
    let errors = args.errors.errors(&setup)?;
    let limit: Angle = args.tilt_limit.parse().map_err(|e| Failure::usage(format!("--tilt-limit: {e}")))?;
    if limit.si() < 0.0 {
        return Err(Failure::usage("--tilt-limit: a limit is a size from 0 up; it acts to both sides"));
    }
    let bench = Bench::new(&question, setup.screen)?;
    let parts = contributions(&bench, &errors)?;
    let draw = Draw {
        errors,
        spread: match args.errors_are {
            Meant::Limits => Spread::Limit,
            Meant::Deviations => Spread::Deviation,
        },
        count: args.samples as usize,
        seed: args.seed,
        datasets: if args.one_dataset { vec![bench.crystal.dataset] } else { bench.datasets() },
    };
    let samples = output.on_threads(|| sample(&bench, &draw))?.map_err(Failure::from)?;
    if let Some(path) = &args.write_samples {
        write_whole(path, csv(&samples_table(&bench, &samples)).as_bytes())
            .map_err(|e| Failure::file("write", &path.display().to_string(), &e))?;
    }
    let advice = advise(&bench, &parts, &samples)?;
    let all = chances(&samples, limit.si());
    let shifted = output.on_threads(|| ordered_otherwise(&bench, &draw, &advice, &all, limit.si()))?;
    let finding = Finding {
        bench: &bench,
        errors: &errors,
        spread: draw.spread,
        contributions: &parts,
        chances: &all,
        advice,
        limit: limit.si(),
        seed: args.seed,
        shifted,
    };
    let mut conventions = Conventions::of(&setup);
    conventions.warn_of_dim_phi(&setup);
    conventions.lines.insert(0, set_line(&bench, &draw));
    let answer = Answer {
        command: "tolerance",
        tables: tables(&finding),
        text: text(&setup, &finding),
        conventions,
        job: resolved_job(&setup),
        solved: bench.turn.is_some(),
    };
    output.outcome(&answer, None)
}

/// The experiment; a cut that is not given is the one that meets the target.
fn setup(args: &Args, output: &OutputArgs) -> Result<Setup, Failure> {
    let document = args.experiment.document()?;
    let mut setup = resolve(&document, &catalogue(output, &document)?, Needs { cut: false, pump: true })?;
    let given = setup.cut.first().copied().unwrap_or_default();
    if !given.theta && given.target.is_none() {
        setup.cut[0].target = args.target.target()?;
    }
    setup.settle(Needs::ALL)?;
    Ok(setup)
}

fn set_line(bench: &Bench, draw: &Draw) -> String {
    let sets = bench.crystal.material.sets();
    let ids: Vec<&str> = draw.datasets.iter().map(|i| sets[*i].id.as_str()).collect();
    match ids.as_slice() {
        [only] => format!("Samples follow {only} alone."),
        _ => format!("Samples follow each as often: {}.", ids.join(", ")),
    }
}

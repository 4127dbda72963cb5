//! `job`: writes out a job file with comments, or checks one.

use std::path::PathBuf;
use std::sync::atomic::AtomicBool;
use std::time::{Duration, Instant};

use clap::{Args as ClapArgs, Subcommand};
use twincone::job::setup::{Needs, Setup, SetupError};
use twincone::job::{Document, resolve, template};
use twincone::material::Catalogue;
use twincone::sweep::Sweep;

use super::failure::Failure;
use super::options::{ExperimentArgs, attach_curves, catalogue, name_of, read_text};
use super::output::{Outcome, OutputArgs};

/// Options of `job`.
#[derive(Debug, ClapArgs)]
#[command(args_conflicts_with_subcommands = true)]
pub struct Args {
    #[command(subcommand)]
    check: Option<Action>,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

#[derive(Debug, Subcommand)]
enum Action {
    /// Read a job file and say what it describes, or what is wrong with it
    Check {
        /// The job file, or - for standard input
        file: PathBuf,
    },
}

/// What stands where nothing was said: a violet pump and a crossed-cone crystal.
const DEFAULTS: [(&str, &str); 3] =
    [("crystal.material", "bbo"), ("pump.wavelength", "405 nm"), ("crystal.cut.crossing", "3 deg")];

/// Prints a job, or checks one.
///
/// # Errors
/// What is missing or wrong.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    if let Some(Action::Check { file }) = &args.check {
        return check(file, output);
    }
    let mut document = Document::default();
    let typed = args.experiment.document()?;
    let said = typed.describe()?;
    if args.experiment.has_job() {
        document = typed;
    } else {
        for (key, value) in DEFAULTS {
            let missing = match key {
                "crystal.material" => said.crystal.is_empty() || said.crystal[0].get_ref().material.is_none(),
                "pump.wavelength" => said.pump.as_ref().is_none_or(|p| p.get_ref().wavelength.is_none()),
                _ => !said
                    .crystal
                    .iter()
                    .any(|c| c.get_ref().cut.as_ref().is_some_and(|cut| cut.get_ref().is_decided())),
            };
            if missing {
                let one = said.emission.as_ref().and_then(|e| e.get_ref().kind.as_ref());
                let cone =
                    key.contains("cut") && one.is_some_and(|kind| matches!(&**kind.get_ref(), "I" | "1"));
                document.set("the default", if cone { "crystal.cut.half-angle" } else { key }, value);
            }
        }
        document.append(&typed);
    }
    // a target is written down, not solved: a crystal that cannot meet it still gets its job
    let catalogue = catalogue(output, &document)?;
    let setup = match resolve(&document, &catalogue, Needs::ALL) {
        Err(SetupError::NoCut(_)) => resolve(&document, &catalogue, Needs { cut: false, pump: true })?,
        other => other?,
    };
    args.experiment.write_job(&setup)?;
    output.plain(template(&setup))
}

fn check(file: &std::path::Path, output: &OutputArgs) -> Result<Outcome, Failure> {
    let name = name_of(file);
    let mut document = Document::from_file(&name, &read_text(file)?);
    attach_curves(&mut document, Some(file))?;
    let named = |failure: Failure| match failure.message.starts_with(&name) {
        true => failure,
        false => Failure { message: format!("{name}: {}", failure.message), ..failure },
    };
    let catalogue = catalogue(output, &document)?;
    let setup = described(&document, &catalogue).map_err(&named)?;
    let sweep = match &setup.written.sweep {
        Some(_) => sweep(&document, &catalogue, output).map_err(named)?,
        None => "; without a [sweep] it is 1 point\n".into(),
    };
    let mut text = format!("{name}: a valid job{sweep}  pump {}, {}\n", setup.pump(), setup.interaction);
    for crystal in &setup.crystals {
        text.push_str(&format!(
            "  crystal {}: {}:{}, theta {:.3} deg, phi {} deg, {}, tilt {}, cross tilt {}, roll {}\n",
            crystal.name,
            crystal.material.id,
            crystal.set().id,
            crystal.cut.theta.degrees(),
            crystal.cut.phi.degrees(),
            crystal.length,
            crystal.orientation.tilt,
            crystal.orientation.cross_tilt,
            crystal.orientation.roll
        ));
    }
    let signals: Vec<String> = setup.signals().iter().map(|w| format!("{w:.3}")).collect();
    text.push_str(&format!("  signal {}\n", signals.join(", ")));
    output.plain(text)
}

/// The experiment; of a sweep, whose axes may hold what the job leaves open, that of some point.
fn described(document: &Document, catalogue: &Catalogue) -> Result<Setup, Failure> {
    if document.describe()?.sweep.is_some()
        && let Some(setup) = Sweep::new(document, catalogue)?.first_setup()
    {
        return Ok(setup);
    }
    Ok(resolve(document, catalogue, Needs::ALL)?)
}

/// Points, rows and time of a sweep, from a few points that are tried.
fn sweep(document: &Document, catalogue: &Catalogue, output: &OutputArgs) -> Result<String, Failure> {
    const TRIED: u64 = 64;
    const PATIENCE: Duration = Duration::from_millis(500);
    let sweep = Sweep::new(document, catalogue)?;
    let count = sweep.count();
    let mut worker = sweep.worker();
    let never = AtomicBool::new(false);
    let started = Instant::now();
    let (mut tried, mut rows) = (0, 0);
    while tried < TRIED.min(count) && started.elapsed() < PATIENCE {
        let point = (u128::from(count) * u128::from(tried) / u128::from(TRIED.min(count))) as u64;
        let piece = worker.piece(point..point + 1, Vec::new(), &never).unwrap_or_default();
        rows += piece.bytes.iter().filter(|b| **b == b'\n').count() as u64;
        tried += 1;
    }
    let threads = output
        .threads
        .map_or_else(|| std::thread::available_parallelism().map_or(1, usize::from), usize::from);
    let seconds = started.elapsed().as_secs_f64() / tried as f64 * count as f64 / threads as f64;
    let about = if tried < count { "about " } else { "" };
    let rows = (rows as f64 / tried as f64 * count as f64).round();
    Ok(format!(
        "; report {}: {count} points, {about}{rows} rows, about {} on {threads} threads\n",
        sweep.report().name(),
        duration(seconds)
    ))
}

fn duration(seconds: f64) -> String {
    match seconds {
        s if s < 1.0 => "a second".into(),
        s if s < 120.0 => format!("{s:.0} s"),
        s if s < 7200.0 => format!("{:.0} min", s / 60.0),
        s => format!("{:.0} h", s / 3600.0),
    }
}

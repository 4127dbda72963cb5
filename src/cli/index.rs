//! `index`: what does each wave see?

use clap::Args as ClapArgs;
use twincone::job::setup::{Needs, Setup};
use twincone::optics::{Crystal, IndexRow, index_rows, missing};
use twincone::quantity::Wavelength;
use twincone::report::index::{spread_line, table, text};
use twincone::report::{Answer, Conventions, resolved_job};

use super::failure::Failure;
use super::options::ExperimentArgs;
use super::output::{Outcome, OutputArgs};

/// Options of `index`; with `--theta` the waves along the face normal, else along the principal axes.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// Wavelength, repeatable [default: pump, signal, idler]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    wavelength: Vec<String>,
    /// A curve from this wavelength
    #[arg(long, value_name = "LENGTH", requires = "to", conflicts_with = "wavelength")]
    from: Option<String>,
    /// A curve to this wavelength
    #[arg(long, value_name = "LENGTH", requires = "from")]
    to: Option<String>,
    /// Points of the curve
    #[arg(long, value_name = "N", default_value = "101", value_parser = clap::value_parser!(u32).range(2..=1_000_000))]
    points: u32,
    /// One set of rows per data set
    #[arg(long)]
    all_datasets: bool,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

/// Rows for each crystal, data set and wavelength.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let pump = args.wavelength.is_empty() && args.from.is_none();
    let setups = args.experiment.setups(output, Needs { cut: false, pump }, false)?;
    if let [setup] = setups.as_slice() {
        args.experiment.write_job(setup)?;
    }
    let mut all: Vec<IndexRow> = Vec::new();
    let mut conventions = Conventions::of(&setups[0]);
    let mut spreads = Vec::new();
    for setup in &setups {
        let crystal = &setup.crystals[0];
        let wavelengths = wavelengths(args, setup)?;
        let directed = setup.cut[0].theta;
        let mut own = Vec::new();
        for wavelength in &wavelengths {
            own.extend(index_rows(crystal, *wavelength, directed)?);
        }
        spreads.push(spread_line(crystal, &own, directed));
        all.append(&mut own);
        conventions.add_dataset(crystal);
        if args.all_datasets {
            for other in others(crystal) {
                for wavelength in &wavelengths {
                    let found = index_rows(&other, *wavelength, directed);
                    all.extend(found.unwrap_or_else(|fault| vec![missing(&other, *wavelength, fault)]));
                }
                conventions.add_dataset(&other);
            }
        }
    }
    conventions.lines.splice(0..0, spreads);
    let answer = Answer {
        command: "index",
        tables: vec![table(&all)],
        text: text(&all),
        conventions,
        job: resolved_job(&setups[0]),
        solved: true,
    };
    output.outcome(&answer, None)
}

fn others(crystal: &Crystal) -> impl Iterator<Item = Crystal> {
    let count = crystal.material.sets().len();
    (0..count).filter(|index| *index != crystal.dataset).map(|index| crystal.with_dataset(index))
}

fn wavelengths(args: &Args, setup: &Setup) -> Result<Vec<Wavelength>, Failure> {
    let read = |option: &str, text: &str| -> Result<Wavelength, Failure> {
        let wavelength: Wavelength = text.parse().map_err(|e| Failure::usage(format!("{option}: {e}")))?;
        if wavelength.si() > 0.0 {
            Ok(wavelength)
        } else {
            Err(Failure::usage(format!("{option}: a wavelength must be positive, not {wavelength}")))
        }
    };
    if let (Some(from), Some(to)) = (&args.from, &args.to) {
        let (from, to) = (read("--from", from)?.si(), read("--to", to)?.si());
        let step = (to - from) / f64::from(args.points - 1);
        return Ok((0..args.points).map(|n| Wavelength::metres(from + step * f64::from(n))).collect());
    }
    if !args.wavelength.is_empty() {
        return args.wavelength.iter().map(|w| read("--wavelength", w)).collect();
    }
    let photons = setup.photons();
    let mut all = vec![photons.pump, photons.signal];
    if !photons.degenerate() {
        all.push(photons.idler);
    }
    Ok(all)
}

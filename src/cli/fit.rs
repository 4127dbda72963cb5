//! `fit`: what are the real cut, tilt zero, roll and pump?

use std::path::{Path, PathBuf};

use clap::{Args as ClapArgs, ValueEnum};
use twincone::fit::{
    Exposure, Fitted, Frame, Known, Measurement, Question, Settings, TEMPLATE, View, doubts, fit, fit_frames,
    kept, other_datasets, other_views, read, setting_for, unknowns,
};
use twincone::job::setup::{Needs, Setup};
use twincone::job::{resolve, setup::SetupError};
use twincone::matching::Target;
use twincone::quantity::{Angle, Length};
use twincone::report::fit::{Finding, tables, text};
use twincone::report::{Answer, Conventions, resolved_job};

use super::cut::TargetArgs;
use super::failure::Failure;
use super::options::{ExperimentArgs, catalogue, name_of, read_text};
use super::output::{Outcome, OutputArgs, write_whole};

/// Options of `fit`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// CSV file of measurements, or - for standard input
    #[arg(value_name = "FILE", required_unless_present_any = ["template", "image"])]
    file: Option<PathBuf>,
    #[command(flatten)]
    image: ImageArgs,
    /// Print a table to fill in
    #[arg(long)]
    template: bool,
    /// What may differ from the job: keys, or their last words
    #[arg(long, value_name = "KEYS", value_delimiter = ',', default_value = "theta,zero,roll,pump")]
    free: Vec<String>,
    /// Within which limits a free key is believed to lie, or none, e.g. --prior theta=0.25deg
    #[arg(long, value_name = "KEY=LIMIT")]
    prior: Vec<String>,
    /// Standard deviation of measurements whose line states none, in mm or deg
    #[arg(long, value_name = "SIZE", allow_hyphen_values = true)]
    sigma: Option<String>,
    /// By how much the picture is turned
    #[arg(long, value_enum, value_name = "DEG")]
    view_turn: Option<ViewTurn>,
    /// Whether left and right are exchanged in the picture
    #[arg(long, value_enum, num_args = 0..=1, default_missing_value = "yes")]
    mirror: Option<YesNo>,
    /// Let far-off measurements weigh less
    #[arg(long)]
    robust: bool,
    /// Fit with every published data set
    #[arg(long)]
    all_datasets: bool,
    #[command(flatten)]
    target: TargetArgs,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

/// Frames of a camera instead of a table.
#[derive(Debug, ClapArgs)]
#[command(next_help_heading = "Frames")]
struct ImageArgs {
    /// Grey PNG of 8 or 16 bits in which the rings are found; repeat it for several tilts
    #[arg(long, value_name = "FRAME", conflicts_with = "file")]
    image: Vec<PathBuf>,
    /// What the mount showed for each frame [default: the job's tilt]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true, requires = "image")]
    image_tilt: Vec<String>,
    /// Side of a pixel on the sensor, or on the screen that the camera looks at
    #[arg(long, value_name = "LENGTH", requires = "image")]
    pixel_pitch: Option<String>,
    /// Focal length of the lens whose focal plane the sensor is in [default: a sensor at --distance]
    #[arg(long, value_name = "LENGTH", requires = "image")]
    focal_length: Option<String>,
    /// Where the undeviated pump is, pixels from the upper left corner [default: the frame's middle]
    #[arg(long, value_name = "X,Y", requires = "image")]
    beam_centre: Option<String>,
    /// Write the first frame with the fitted rings over it, the others beside it with their numbers
    #[arg(long, value_name = "FILE", requires = "image")]
    write_frame: Option<PathBuf>,
}

#[derive(Debug, Clone, Copy, PartialEq, ValueEnum)]
enum ViewTurn {
    /// Upright
    #[value(name = "0")]
    None,
    /// By half a turn
    #[value(name = "180")]
    Half,
}

#[derive(Debug, Clone, Copy, PartialEq, ValueEnum)]
enum YesNo {
    /// They are
    Yes,
    /// They are not
    No,
}

/// Fits the job to the measurements.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    if args.template {
        return output.plain(TEMPLATE.into());
    }
    if !args.image.image.is_empty() {
        return run_frames(args, output);
    }
    let path = args.file.as_ref().ok_or_else(|| Failure::usage("no file of measurements"))?;
    let text = read_text(path)?;
    let setup = setup(args, output)?;
    let crystals: Vec<String> = setup.crystals.iter().map(|c| c.name.clone()).collect();
    let data = read(&text, &crystals).map_err(|e| Failure::usage(format!("{}: {e}", name_of(path))))?;
    let question = question(args, setup, with_sigma(args, data)?)?;
    let fitted = fit(&question).map_err(|e| Failure::usage(e.to_string()))?;
    answer(args, output, &question, &fitted)
}

/// Fits the job to the rings in frames.
fn run_frames(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let mut setup = setup(args, output)?;
    if let Some(text) = &args.image.focal_length {
        setup.screen = length("--focal-length", text)?;
    }
    let exposures = exposures(&args.image)?;
    let question = question(args, setup, Vec::new())?;
    let found = fit_frames(&question, &exposures).map_err(|e| Failure::usage(e.to_string()))?;
    if let Some(path) = &args.image.write_frame {
        for (number, (exposure, outlines)) in exposures.iter().zip(&found.outlines).enumerate() {
            let bytes = exposure.frame.with_outlines(outlines).map_err(|e| Failure::usage(e.to_string()))?;
            let path = numbered(path, number);
            write_whole(&path, &bytes)
                .map_err(|e| Failure::file("write", &path.display().to_string(), &e))?;
        }
    }
    answer(args, output, &found.question, &found.fitted)
}

/// frame.png, frame.2.png, ...
fn numbered(path: &Path, number: usize) -> PathBuf {
    if number == 0 {
        return path.to_path_buf();
    }
    let extension = path.extension().and_then(|e| e.to_str()).unwrap_or("png");
    path.with_extension(format!("{}.{extension}", number + 1))
}

fn length(option: &str, text: &str) -> Result<Length, Failure> {
    let length: Length = text.parse().map_err(|e| Failure::usage(format!("{option}: {e}")))?;
    if length.si() > 0.0 {
        Ok(length)
    } else {
        Err(Failure::usage(format!("{option} must be above 0, not {text}")))
    }
}

fn exposures(args: &ImageArgs) -> Result<Vec<Exposure>, Failure> {
    let pitch = args.pixel_pitch.as_ref().ok_or_else(|| {
        Failure::usage("--image needs --pixel-pitch, the side of a pixel, for example --pixel-pitch 5um")
    })?;
    let pitch = length("--pixel-pitch", pitch)?.mm();
    if !args.image_tilt.is_empty() && args.image_tilt.len() != args.image.len() {
        return Err(Failure::usage("--image-tilt: give one for each --image, in the same order, or none"));
    }
    let centre = args.beam_centre.as_ref().map(|text| pixels(text)).transpose()?;
    let each = args.image.iter().enumerate().map(|(n, path)| {
        let shown = path.display().to_string();
        let bytes = std::fs::read(path).map_err(|e| Failure::file("read", &shown, &e))?;
        let frame =
            Frame::read(&bytes, pitch, centre).map_err(|e| Failure::usage(format!("{shown}: {e}")))?;
        let tilt = args.image_tilt.get(n).map(|text| {
            text.parse::<Angle>()
                .map(Angle::degrees)
                .map_err(|e| Failure::usage(format!("--image-tilt: {e}")))
        });
        Ok(Exposure { frame, settings: Settings { tilt: tilt.transpose()?, ..Settings::default() } })
    });
    each.collect()
}

fn pixels(text: &str) -> Result<[f64; 2], Failure> {
    let fault =
        || Failure::usage(format!("--beam-centre {text}: write two numbers of pixels, such as 320.5,240"));
    let (x, y) = text.split_once(',').ok_or_else(fault)?;
    let number = |t: &str| t.trim().parse::<f64>().ok().filter(|v| v.is_finite()).ok_or_else(fault);
    Ok([number(x)?, number(y)?])
}

/// The experiment as it is believed to be.
fn setup(args: &Args, output: &OutputArgs) -> Result<Setup, Failure> {
    let document = args.experiment.document()?;
    let mut setup = resolve(&document, &catalogue(output, &document)?, Needs::ALL)?;
    if let (Some(target @ Target::HalfAngle(_)), false) = (args.target.target()?, setup.interaction_given) {
        // settles on type I, as other commands do
        setup.tuning(target, None).map_err(SetupError::from)?;
    }
    Ok(setup)
}

fn with_sigma(args: &Args, mut data: Vec<Measurement>) -> Result<Vec<Measurement>, Failure> {
    let Some(text) = &args.sigma else { return Ok(data) };
    let (mm, deg) = (text.parse::<Length>().map(Length::mm), text.parse::<Angle>().map(Angle::degrees));
    let (value, angle) = match (mm, deg) {
        (Ok(mm), _) => (mm, false),
        (_, Ok(deg)) => (deg, true),
        (Err(e), _) => return Err(Failure::usage(format!("--sigma: {e}"))),
    };
    if value <= 0.0 {
        return Err(Failure::usage("--sigma: a standard deviation must be above 0"));
    }
    let lacking = data.iter_mut().filter(|m| m.sigma.is_none() && m.seen.is_angle() == angle);
    lacking.for_each(|m| m.sigma = Some(value));
    Ok(data)
}

fn question(args: &Args, setup: Setup, data: Vec<Measurement>) -> Result<Question, Failure> {
    let pairs = args.prior.iter().map(|text| {
        text.split_once('=').map(|(k, v)| (k.trim().to_string(), v.trim().to_string())).ok_or_else(|| {
            Failure::usage(format!("--prior {text}: write KEY=LIMIT, for example --prior theta=0.25deg"))
        })
    });
    let priors: Vec<(String, String)> = pairs.collect::<Result<_, _>>()?;
    let unknowns = unknowns(&args.free, &priors, &setup).map_err(|e| {
        let prefix = if e.starts_with("--") { "" } else { "--free: " };
        Failure::usage(format!("{prefix}{e}"))
    })?;
    let view =
        View { turned: args.view_turn == Some(ViewTurn::Half), mirrored: args.mirror == Some(YesNo::Yes) };
    Ok(Question { setup, unknowns, data, view, robust: args.robust })
}

fn answer(
    args: &Args,
    output: &OutputArgs,
    question: &Question,
    fitted: &Fitted,
) -> Result<Outcome, Failure> {
    let known = Known { turn: args.view_turn.is_some(), mirror: args.mirror.is_some() };
    let views = other_views(question, fitted, known);
    let datasets = if args.all_datasets { other_datasets(question, fitted) } else { Vec::new() };
    let kept = kept(question, fitted);
    let doubts = doubts(question, fitted);
    let target = args.target.target()?.or(question.setup.cut[0].target);
    // with several crystals no one turn is the answer
    let target = target.filter(|_| kept.crystals.len() == 1);
    let advice = target.map(|target| Ok::<_, Failure>((target, setting_for(&kept, target)?))).transpose()?;
    let finding = Finding { question, fitted, doubts: &doubts, advice, views: &views, datasets: &datasets };
    let mut conventions = Conventions::of(&kept);
    if !args.image.image.is_empty() {
        conventions.uses(&["filter"]);
    }
    if finding.holds() {
        args.experiment.write_job(&kept)?;
    } else {
        conventions.warnings.push("no fit: see the text of the answer".into());
    }
    let answer = Answer {
        command: "fit",
        tables: tables(&finding),
        text: text(&finding),
        conventions,
        job: resolved_job(&kept),
        solved: finding.holds(),
    };
    output.outcome(&answer, None)
}

//! `fit`: what are the real cut, tilt zero, roll and pump?

use std::path::PathBuf;

use clap::{Args as ClapArgs, ValueEnum};
use twincone::fit::{Fitted, Measurement, Question, TEMPLATE, View, doubts, fit, read, unknowns};
use twincone::job::setup::{GivenCut, Needs, Setup, Stage};
use twincone::job::{resolve, setup::SetupError};
use twincone::matching::{Actuator, Target, tune};
use twincone::quantity::{Angle, Length};
use twincone::report::fit::{Finding, tables, text};
use twincone::report::{Answer, Conventions, resolved_job};

use super::cut::TargetArgs;
use super::failure::Failure;
use super::options::{ExperimentArgs, catalogue, name_of, read_text};
use super::output::{Outcome, OutputArgs};

/// Options of `fit`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// CSV file of measurements, or - for standard input
    #[arg(value_name = "FILE", required_unless_present = "template")]
    file: Option<PathBuf>,
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
    #[arg(long, value_name = "SIZE")]
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
    let path = args.file.as_ref().ok_or_else(|| Failure::usage("no file of measurements"))?;
    let data = read(&read_text(path)?).map_err(|e| Failure::usage(format!("{}: {e}", name_of(path))))?;
    let setup = setup(args, output)?;
    let question = question(args, setup, with_sigma(args, data)?)?;
    let fitted = fit(&question).map_err(|e| Failure::usage(e.to_string()))?;
    answer(args, output, &question, &fitted)
}

/// The experiment as it is believed to be.
fn setup(args: &Args, output: &OutputArgs) -> Result<Setup, Failure> {
    let document = args.experiment.document()?;
    let mut setup = resolve(&document, &catalogue(output, &document)?, Needs::ALL)?;
    if let (Some(target @ Target::HalfAngle(_)), false) = (args.target.target()?, setup.interaction_given) {
        // settles on type I, as other commands do
        setup.tuning(target, None).map_err(SetupError::from)?;
    }
    setup.only_crystal("fit").map_err(Failure::usage)?;
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
    let unknowns =
        unknowns(&args.free, &priors, &setup).map_err(|e| Failure::usage(format!("--free: {e}")))?;
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
    let views = other_views(args, question);
    let datasets = if args.all_datasets { other_datasets(question) } else { Vec::new() };
    let kept = kept(question, fitted);
    args.experiment.write_job(&kept)?;
    let doubts = doubts(question, fitted);
    let advice = advice(args, question, &kept)?;
    let finding = Finding { question, fitted, doubts: &doubts, advice, views: &views, datasets: &datasets };
    let mut conventions = Conventions::of(&kept);
    if !finding.holds() {
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

/// Fits with the picture standing in the other ways that the options leave open.
fn other_views(args: &Args, question: &Question) -> Vec<(View, Fitted)> {
    if !question.data.iter().any(|m| m.seen.has_place()) {
        return Vec::new();
    }
    let open = View::ALL.into_iter().filter(|view| {
        *view != question.view
            && (args.view_turn.is_none() || view.turned == question.view.turned)
            && (args.mirror.is_none() || view.mirrored == question.view.mirrored)
    });
    let each = open.filter_map(|view| Some((view, fit(&Question { view, ..question.clone() }).ok()?)));
    each.collect()
}

fn other_datasets(question: &Question) -> Vec<(String, Result<Fitted, String>)> {
    let crystal = &question.setup.crystals[0];
    let others = crystal.material.sets().iter().enumerate().filter(|(i, _)| *i != crystal.dataset);
    let each = others.map(|(index, set)| {
        let mut again = question.clone();
        again.setup.crystals[0] = crystal.with_dataset(index);
        (set.id.clone(), fit(&again).map_err(|e| e.to_string()))
    });
    each.collect()
}

/// The experiment with the fitted values, as a job keeps it.
fn kept(question: &Question, fitted: &Fitted) -> Setup {
    let mut setup = fitted.setup.clone();
    let believed = question.setup.stage.unwrap_or(Stage { zero: None, per_turn: None, reversed: false });
    if let Some(zero) = fitted.zero {
        setup.stage = Some(Stage { zero: Some(Angle::from_degrees(zero)), ..believed });
    }
    setup.cut[0] = GivenCut { theta: true, phi: true, target: None };
    setup.forget_all_typed();
    setup
}

/// The tilt that reaches the target with the fitted crystal.
fn advice(
    args: &Args,
    question: &Question,
    kept: &Setup,
) -> Result<Option<(Target, Option<Angle>)>, Failure> {
    let Some(target) = args.target.target()?.or(question.setup.cut[0].target) else { return Ok(None) };
    let mut setup = kept.clone();
    let tuned = tune(&setup.tuning(target, Some(Actuator::Tilt))?)?;
    Ok(Some((target, tuned.turns.first().map(|turn| turn.crystal.orientation.tilt))))
}

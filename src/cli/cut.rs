//! `cut`: which cut do I order?

use clap::{Args as ClapArgs, ValueEnum};
use twincone::job::setup::{GivenCut, Needs, Setup};
use twincone::job::target_angle;
use twincone::matching::{
    CutSolution, Design, Find, Interaction, Opinion, Status, Target, alternatives, design, opinions,
    shortfall,
};
use twincone::optics::Crystal;
use twincone::report::cut::{Attempt, no_solution, ranking, spread_lines, table, text};
use twincone::report::{Answer, Conventions, resolved_job};

use super::failure::Failure;
use super::options::ExperimentArgs;
use super::output::{Outcome, OutputArgs};

/// Options of `cut`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    #[command(flatten)]
    target: TargetArgs,
    /// What to solve for, at otherwise given cut
    #[arg(long, value_enum, default_value = "theta")]
    find: Sought,
    /// Try every crystal and rank those that can do it
    #[arg(long)]
    all_materials: bool,
    /// One row per data set, with the spread
    #[arg(long)]
    all_datasets: bool,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

/// The wanted emission; angles outside the crystal.
#[derive(Debug, ClapArgs)]
#[group(multiple = false)]
pub struct TargetArgs {
    /// Pairs along the pump (default)
    #[arg(long)]
    pub collinear: bool,
    /// Half angle of the signal's cone
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    pub half_angle: Option<String>,
    /// Angle of the crossings from the pump
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    pub crossing: Option<String>,
    /// Full angle between the two photons at the crossings
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    pub separation: Option<String>,
    /// The signal's cone shrinks to a beam
    #[arg(long)]
    pub beamlike: bool,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
pub enum Sought {
    /// Angle between face normal and Z; in biaxial crystals in all principal planes
    Theta,
    /// Azimuth of the face normal
    Phi,
    /// Poling period
    Poling,
    /// Temperature
    Temperature,
    /// Pump wavelength
    Pump,
}

impl TargetArgs {
    /// The target, if one was named.
    ///
    /// # Errors
    /// An angle without a unit or out of bounds.
    pub fn target(&self) -> Result<Option<Target>, Failure> {
        let angle = |option: &str, text: &str, most: f64| {
            target_angle(text, most).map_err(|why| Failure::usage(format!("{option}: {why}")))
        };
        Ok(match (&self.half_angle, &self.crossing, &self.separation) {
            (Some(text), ..) => Some(Target::HalfAngle(angle("--half-angle", text, 60.0)?)),
            (_, Some(text), _) => Some(Target::Crossing(angle("--crossing", text, 60.0)?)),
            (.., Some(text)) => Some(Target::Separation(angle("--separation", text, 120.0)?)),
            _ if self.beamlike => Some(Target::Beamlike),
            _ if self.collinear => Some(Target::Collinear),
            _ => None,
        })
    }
}

impl Sought {
    /// As a job names it.
    pub fn name(self) -> &'static str {
        match self {
            Self::Theta => "theta",
            Self::Phi => "phi",
            Self::Poling => "poling",
            Self::Temperature => "temperature",
            Self::Pump => "pump",
        }
    }

    fn find(self) -> Find {
        match self {
            Self::Theta => Find::Theta,
            Self::Phi => Find::Phi,
            Self::Poling => Find::Poling,
            Self::Temperature => Find::Temperature,
            Self::Pump => Find::Pump,
        }
    }
}

/// Solves for one material, several, or all.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let listed = args.experiment.setups(output, Needs { cut: false, pump: true }, args.all_materials)?;
    let several = args.all_materials || listed.len() > 1;
    let setups: Vec<Setup> = listed.iter().flat_map(Setup::one_per_signal).collect();
    let mut attempts = Vec::new();
    let mut spreads = Vec::new();
    let mut alone = Vec::new();
    let find = args.find.find();
    for setup in &setups {
        let question = question(args, setup)?;
        let own = attempt(setup, &question, several)?;
        let others = opinions(&question.crystal, &setup.photons(), |other| {
            let found = design(&Design { crystal: other.clone(), ..question.clone() }).unwrap_or_default();
            (other.clone(), found)
        });
        if let Ok(found) = own.outcome.as_ref().map(Vec::as_slice)
            && !(several && others.is_empty())
        {
            let id = if several { format!("{}: ", setup.crystals[0].material.id) } else { String::new() };
            let answers: Vec<_> = others.iter().map(|o| o.clone().map(|(_, found)| found)).collect();
            spreads.extend(spread_lines(find, found, &answers).into_iter().map(|line| format!("{id}{line}")));
        }
        if several && others.is_empty() && own.outcome.is_ok() {
            alone.push(setup.crystals[0].material.id.clone());
        }
        attempts.push(own);
        if args.all_datasets {
            attempts.extend(others.into_iter().map(|o| other_attempt(&question.crystal, o)));
        }
    }
    if !alone.is_empty() {
        spreads
            .push(format!("{}: no other data set, so nothing says how sure the cut is.", alone.join(", ")));
    }
    let asked = question(args, &setups[0])?;
    let answered = answered(&setups[0], &asked, &attempts);
    if !several {
        args.experiment.write_job(&answered)?;
    }
    let mut conventions = describe(&setups, &attempts, several);
    conventions.lines.splice(0..0, spreads);
    let first = Setup { interaction: asked.interaction, ..setups[0].clone() };
    let text = match several {
        true => ranking(&first, asked.target, &attempts),
        false => text(&first, asked.target, find, &attempts),
    };
    let answer = Answer {
        command: "cut",
        tables: vec![table(&first, &attempts, several)],
        text,
        conventions,
        job: resolved_job(&answered),
        solved: attempts.iter().any(|a| a.outcome.is_ok()),
    };
    output.outcome(&answer, None)
}

/// The job that the answer amounts to: the brightest solution, or the target where there is none.
fn answered(setup: &Setup, asked: &Design, attempts: &[Attempt]) -> Setup {
    let mut setup = setup.clone();
    // of the data set asked for; the others are opinions
    let own = attempts.first().and_then(|a| a.outcome.as_ref().ok());
    match own.into_iter().flatten().max_by(|a, b| a.d_eff.unwrap_or(0.0).total_cmp(&b.d_eff.unwrap_or(0.0))) {
        Some(best) => {
            setup.forget_typed();
            setup.crystals = vec![best.crystal.clone()];
            setup.pump = Some(best.photons.pump);
            setup.cut = vec![GivenCut { theta: true, phi: true, target: None }];
            setup.interaction_given = true;
            setup.interaction = match asked.interaction {
                Interaction::Any => Interaction::Explicit(best.process),
                named => named,
            };
        }
        None => setup.cut[0].target = Some(asked.target),
    }
    setup
}

/// Conventions of the first setup; where several materials compete, the data sets are named in the table.
fn describe(setups: &[Setup], attempts: &[Attempt], several: bool) -> Conventions {
    let mut first = Conventions::of(&setups[0]);
    if !several {
        for attempt in attempts.iter().skip(1).filter(|a| a.outcome.is_ok()) {
            first.datasets.push(format!("{}:{}", attempt.crystal.material.id, attempt.crystal.set().id));
        }
        return first;
    }
    let mut named = Conventions::default();
    for attempt in attempts.iter().filter(|a| a.outcome.is_ok()) {
        named.add_dataset(&attempt.crystal);
    }
    let pointer = "Data sets as named above, each at its own temperature; `twincone materials show ID` gives ranges and papers.";
    named.lines = vec![pointer.into()];
    named.lines.extend(first.lines.drain(first.datasets.len()..));
    named
}

fn question(args: &Args, setup: &Setup) -> Result<Design, Failure> {
    let given: GivenCut = setup.cut[0];
    let (target, find) = (args.target.target()?, args.find.find());
    if given.target.is_some() && target.is_some() && args.experiment.names_target() {
        return Err(Failure::usage("the target is named twice: leave out --cut, or the other one"));
    }
    if find == Find::Theta && given.theta && args.experiment.names_theta() {
        return Err(Failure::usage(
            "--theta is what is sought; leave it out, or ask for --find poling, temperature or pump",
        ));
    }
    Ok(setup.design(target, find)?)
}

/// Solves; a failure is an answer where several materials compete, else an error.
fn attempt(setup: &Setup, question: &Design, several: bool) -> Result<Attempt, Failure> {
    let failed = |status: Status, why: String| Attempt {
        crystal: question.crystal.clone(),
        outcome: Err((status, why)),
        unmatched: Vec::new(),
    };
    match Attempt::of(question) {
        Ok(Attempt { outcome: Err((Status::NoPhaseMatching, _)), unmatched, crystal }) if !several => {
            let outcome = Err((Status::NoPhaseMatching, why_none(setup, question)?));
            Ok(Attempt { crystal, outcome, unmatched })
        }
        Ok(answer) => Ok(answer),
        Err(error) if several => Ok(failed(Status::from(&error), error.to_string())),
        Err(error) => Err(error.into()),
    }
}

fn why_none(setup: &Setup, question: &Design) -> Result<String, Failure> {
    let nearest = shortfall(question)?;
    let asked = Setup { interaction: question.interaction, ..setup.clone() };
    Ok(no_solution(&asked, question.find, question.target, nearest, &alternatives(question, nearest)))
}

type Told = Opinion<(Crystal, Vec<CutSolution>)>;

fn other_attempt(own: &Crystal, told: Told) -> Attempt {
    match told.answer {
        Ok((crystal, found)) if !found.is_empty() => {
            Attempt { crystal, outcome: Ok(found), unmatched: Vec::new() }
        }
        Ok((crystal, _)) => Attempt {
            crystal,
            outcome: Err((Status::NoPhaseMatching, "no phase matching".into())),
            unmatched: Vec::new(),
        },
        Err(error) => {
            let index = own.material.sets().iter().position(|s| s.id == told.dataset).unwrap_or(own.dataset);
            Attempt {
                crystal: own.with_dataset(index),
                outcome: Err((Status::from(&error), error.to_string())),
                unmatched: Vec::new(),
            }
        }
    }
}

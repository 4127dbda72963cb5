//! The setup at every point: keys with a handle are set, the others are read as text once for each combination.

use std::sync::OnceLock;

use toml::Spanned;

use super::{Fault, rows};
use crate::job::axes::{Axis, Value};
use crate::job::keys::{Holds, Unit};
use crate::job::plan::{Plan, Report, Search};
use crate::job::setup::{Needs, Setup, SetupError};
use crate::job::{Document, Handle, JobError, resolve};
use crate::matching::{Status, Target};
use crate::material::Catalogue;
use crate::quantity::Angle;

/// Combinations of keys without a handle that are kept; of more, each point reads its own.
const KEPT: u64 = 1024;

/// How an axis acts on a setup.
#[derive(Debug)]
enum Action {
    /// Sets a number.
    Set(Handle, Unit),
    /// Sets the angle that a report looks for.
    Seek(fn(f64) -> Target),
    /// Overrides the key's text.
    Read,
}

impl Action {
    fn of(axis: &Axis, setup: &Setup) -> Self {
        match (axis.path.key.path, axis.unit) {
            ("sweep.target.crossing", _) => Self::Seek(Target::Crossing),
            ("sweep.target.half-angle", _) => Self::Seek(Target::HalfAngle),
            ("sweep.target.separation", _) => Self::Seek(Target::Separation),
            (_, Some(unit)) => {
                Handle::of(&axis.path, setup).map_or(Self::Read, |handle| Self::Set(handle, unit))
            }
            _ => Self::Read,
        }
    }
}

/// Setups of a sweep.
#[derive(Debug)]
pub(super) struct Setups<'a> {
    document: &'a Document,
    catalogue: &'a Catalogue,
    /// One for each axis.
    actions: Vec<Action>,
    /// For each dimension, how many combinations of texts it holds: its length, or 1 where all its keys have handles.
    combinations: Vec<u64>,
    kept: Vec<OnceLock<Result<Setup, Fault>>>,
    /// A point whose numbers every setup can have.
    benign: u64,
    needs: Needs,
    /// Whether cuts are to be settled at each point.
    settles: bool,
}

impl<'a> Setups<'a> {
    /// Tries a few points until one can be, and every word of the axes.
    pub fn new(document: &'a Document, catalogue: &'a Catalogue, plan: &Plan) -> Result<Self, SetupError> {
        let needs = Needs { cut: rows::needs_cut(plan.report), pump: true };
        let (benign, setup) = probe(document, catalogue, plan, needs)?;
        let actions: Vec<Action> = plan.grid.axes().map(|axis| Action::of(axis, &setup)).collect();
        let mut rest = actions.as_slice();
        let mut combinations = Vec::with_capacity(plan.grid.dimensions.len());
        for dimension in &plan.grid.dimensions {
            let (own, others) = rest.split_at(dimension.axes.len());
            rest = others;
            let reads = own.iter().any(|action| matches!(action, Action::Read));
            combinations.push(if reads { dimension.count } else { 1 });
        }
        let settles = actions.iter().any(|a| matches!(a, Action::Set(handle, _) if handle.unsettles()));
        let mut kept = Vec::new();
        let count: u64 = combinations.iter().product();
        if count <= KEPT {
            kept.resize_with(count as usize, OnceLock::new);
        }
        let setups = Self { document, catalogue, actions, combinations, kept, benign, needs, settles };
        setups.check_words(plan)?;
        Ok(setups)
    }

    /// Which combination of texts a point has.
    pub fn combination(&self, plan: &Plan, point: u64) -> u64 {
        let texts = plan.grid.indices(point).zip(&self.combinations);
        texts.fold(0, |sum, (index, count)| if *count > 1 { sum * count + index } else { sum })
    }

    /// How many combinations there are.
    pub fn combination_count(&self) -> u64 {
        self.combinations.iter().product()
    }

    /// The setup of a combination of texts; its numbers are still to be set.
    pub fn base(&self, plan: &Plan, combination: u64) -> Result<Setup, Fault> {
        match self.kept.get(combination as usize) {
            Some(kept) => kept.get_or_init(|| self.read(plan, combination).map_err(Fault::from)).clone(),
            None => self.read(plan, combination).map_err(Fault::from),
        }
    }

    /// Reads a combination of texts, with numbers that every setup can have.
    fn read(&self, plan: &Plan, combination: u64) -> Result<Setup, SetupError> {
        let (mut stride, mut rest) = (self.combination_count(), combination);
        let texts = self.combinations.iter().map(move |count| {
            stride /= count;
            let index = rest / stride;
            rest %= stride;
            (index, *count)
        });
        let benign = plan.grid.indices(self.benign);
        let indices = texts.zip(benign).map(|((own, count), benign)| if count > 1 { own } else { benign });
        let document = with_texts(self.document, plan, plan.grid.values_at(indices));
        let mut setup = resolve(&document, self.catalogue, Needs { cut: false, ..self.needs })?;
        if !self.settles {
            setup.settle(self.needs)?;
        }
        Ok(setup)
    }

    /// Sets a point's numbers.
    pub fn set(&self, plan: &Plan, point: u64, setup: &mut Setup, search: &mut Search) -> Result<(), Fault> {
        for (action, value) in self.actions.iter().zip(plan.grid.values(point)) {
            let Value::Number(value) = value else { continue };
            match action {
                Action::Set(handle, unit) => handle.set(setup, value, *unit).map_err(Fault::invalid)?,
                Action::Seek(target) => search.target = Some(target(Angle::from_degrees(value).si())),
                Action::Read => {}
            }
        }
        setup.check().map_err(Fault::invalid)?;
        if self.settles {
            setup.settle(self.needs)?;
        }
        Ok(())
    }

    /// A word that no combination can have is a slip of the pen, not a point without an answer.
    fn check_words(&self, plan: &Plan) -> Result<(), SetupError> {
        const TRIED: u64 = 64;
        let mut stride = self.combination_count();
        for (dimension, count) in plan.grid.dimensions.iter().zip(&self.combinations) {
            stride /= count;
            let words: Vec<(&Axis, &[Spanned<String>])> =
                dimension.axes.iter().filter_map(|axis| Some((axis, axis.words()?))).collect();
            if words.is_empty() || *count > TRIED {
                continue;
            }
            for index in 0..*count {
                // combinations with this word: numbers a * (count * stride) + index * stride + b
                let around = self.combination_count() / (count * stride);
                let all =
                    (0..around).flat_map(|a| (0..stride).map(move |b| (a * count + index) * stride + b));
                if let Some(message) = self.always_invalid(plan, all.take(TRIED as usize)) {
                    return Err(self.at_word(&words, index as usize, &message).into());
                }
            }
        }
        Ok(())
    }

    /// Why none of these combinations can be; `None` where one can.
    fn always_invalid(&self, plan: &Plan, combinations: impl Iterator<Item = u64>) -> Option<String> {
        let mut message = None;
        for combination in combinations {
            match self.base(plan, combination) {
                Err(why) if why.status == Status::Invalid => message = Some(why.message),
                _ => return None,
            }
        }
        message
    }

    /// The message at the place of the word that it names, or of the first one.
    fn at_word(&self, words: &[(&Axis, &[Spanned<String>])], index: usize, message: &str) -> JobError {
        let named = |(axis, all): &(&Axis, &[Spanned<String>])| {
            let rest = message.strip_prefix(&said(axis, all[index].get_ref()))?;
            Some((all[index].span(), rest.trim_start_matches(": ")))
        };
        let (place, message) =
            words.iter().find_map(named).unwrap_or_else(|| (words[0].1[index].span(), message));
        self.document.fault(place, message)
    }

    /// Where materials are looked up.
    pub fn catalogue(&self) -> &Catalogue {
        self.catalogue
    }

    /// The job that is swept.
    pub fn document(&self) -> &Document {
        self.document
    }

    /// Setups of all combinations of materials and data sets, with the first of every other text.
    pub fn of_each_material<'p>(&'p self, plan: &'p Plan) -> impl Iterator<Item = Setup> + 'p {
        let mut strides = Vec::new();
        let mut stride = self.combination_count();
        for (dimension, count) in plan.grid.dimensions.iter().zip(&self.combinations) {
            stride /= count;
            let names_material = |axis: &Axis| {
                axis.path.key.path.ends_with(".material") || axis.path.key.path.ends_with(".dataset")
            };
            if *count > 1 && dimension.axes.iter().any(names_material) {
                strides.push((*count, stride));
            }
        }
        let count: u64 = strides.iter().map(|(count, _)| count).product();
        (0..count.min(KEPT)).filter_map(move |number| {
            let mut rest = number;
            let mut combination = 0;
            for (count, stride) in &strides {
                combination += rest % count * stride;
                rest /= count;
            }
            self.base(plan, combination).ok()
        })
    }

    /// What a person may not expect.
    pub fn warnings(&self, plan: &Plan) -> Vec<String> {
        let target = self.base(plan, 0).is_ok_and(|setup| setup.cut.iter().any(|cut| cut.target.is_some()));
        let mut all = Vec::new();
        if target && self.settles && plan.report != Report::Cut {
            all.push(
                "the cut is given as a target, so that each point has a crystal of its own cut; give theta to keep the crystal"
                    .into(),
            );
        }
        all
    }
}

/// What messages call a value of an axis.
fn said(axis: &Axis, text: &str) -> String {
    format!("{} = {text}", axis.path.typed)
}

/// A document with the values of a point written into it. Materials come first, since a new one drops the data set.
fn with_texts<'v>(document: &Document, plan: &Plan, values: impl Iterator<Item = Value<'v>>) -> Document {
    let mut document = document.clone();
    let mut all: Vec<(&Axis, Value<'_>)> = plan.grid.axes().zip(values).collect();
    all.sort_by_key(|(axis, _)| axis.path.key.path != "crystal.material");
    for (axis, value) in all {
        let (key, text) = (axis.path.typed.as_str(), axis.text(value));
        let name = said(axis, &text);
        match axis.path.key.holds {
            Holds::Flag => document.set_raw(&name, key, &text),
            _ => document.set(&name, key, &text),
        }
    }
    document
}

/// A point that can be, and its setup; that a point has no cut or no index is no fault of the job.
fn probe(
    document: &Document,
    catalogue: &Catalogue,
    plan: &Plan,
    needs: Needs,
) -> Result<(u64, Setup), SetupError> {
    const TRIED: u64 = 16;
    let last = plan.grid.count() - 1;
    let mut first_fault = None;
    let tried = (0..=TRIED.min(last))
        .map(|n| (u128::from(last) * u128::from(n) / u128::from(TRIED.min(last).max(1))) as u64);
    for point in tried {
        let document = with_texts(document, plan, plan.grid.values(point));
        let tried = resolve(&document, catalogue, Needs { cut: false, ..needs }).and_then(|setup| {
            let mut settled = setup.clone();
            match settled.settle(needs) {
                Err(SetupError::Job(error)) => Err(error.into()),
                _ => Ok(setup),
            }
        });
        match tried {
            Ok(setup) => return Ok((point, setup)),
            Err(error) => {
                first_fault.get_or_insert(error);
            }
        }
    }
    Err(first_fault.unwrap_or_else(|| JobError("the sweep has no points".into()).into()))
}

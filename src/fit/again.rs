//! What else is asked of a fit: other ways the picture may stand, other data sets, the job it leaves, the turn to set.

use super::measured::View;
use super::solve::{Fitted, Question, fit};
use crate::job::setup::{GivenCut, Setup, SetupError, Stage};
use crate::matching::{Actuator, ConesError, Target, tune};
use crate::quantity::Angle;

/// What is known of how a picture stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Known {
    /// Whether it is turned.
    pub turn: bool,
    /// Whether it is mirrored.
    pub mirror: bool,
}

/// The question with the uncertainties that its own fit found: each other description would find larger ones for itself,
/// and all would fit as well.
fn measured_alike(question: &Question, fitted: &Fitted) -> Question {
    question.with_scatter(fitted.scatter.unwrap_or(1.0))
}

/// Fits with the picture standing in the other ways that are not ruled out; none where no places were measured.
#[must_use]
pub fn other_views(question: &Question, fitted: &Fitted, known: Known) -> Vec<(View, Fitted)> {
    let question = &measured_alike(question, fitted);
    if !question.data.iter().any(|m| m.seen.has_place()) {
        return Vec::new();
    }
    let own = question.view;
    let open = |view: &View| {
        *view != own
            && (!known.turn || view.turned == own.turned)
            && (!known.mirror || view.mirrored == own.mirrored)
    };
    let fitted = |view: View| Some((view, fit(&Question { view, ..question.clone() }).ok()?));
    View::ALL.into_iter().filter(open).filter_map(fitted).collect()
}

/// Fits with the other data sets of the first crystal's material, by their ids; all crystals of that material change theirs.
#[must_use]
pub fn other_datasets(question: &Question, fitted: &Fitted) -> Vec<(String, Result<Fitted, String>)> {
    let question = &measured_alike(question, fitted);
    let crystal = &question.setup.crystals[0];
    let others = crystal.material.sets().iter().enumerate().filter(|(i, _)| *i != crystal.dataset);
    let each = others.map(|(index, set)| {
        let mut again = question.clone();
        for crystal in again.setup.crystals.iter_mut().filter(|c| c.material.id == crystal.material.id) {
            *crystal = crystal.with_dataset(index);
        }
        (set.id.clone(), fit(&again).map_err(|e| e.to_string()))
    });
    each.collect()
}

/// The experiment with the fitted values, as a job keeps it.
#[must_use]
pub fn kept(question: &Question, fitted: &Fitted) -> Setup {
    let mut setup = fitted.setup.clone();
    let believed = question.setup.stage.unwrap_or(Stage { zero: None, per_turn: None, reversed: false });
    if let Some(zero) = fitted.zero {
        setup.stage = Some(Stage { zero: Some(Angle::from_degrees(zero)), ..believed });
    }
    setup.cut.fill(GivenCut { theta: true, phi: true, target: None });
    setup.forget_all_typed();
    setup
}

/// The tilt nearest the present one that reaches a target with the fitted crystal; `None` where none does.
///
/// # Errors
/// Several crystals or signals; indices that are not to be had.
pub fn setting_for(kept: &Setup, target: Target) -> Result<Option<Angle>, SetupError> {
    let question = kept.clone().tuning(target, Some(Actuator::Tilt))?;
    let tuned = tune(&question).map_err(|error| match error {
        ConesError::Material(error) => SetupError::Material(error),
        ConesError::Description(text) => crate::job::JobError(text).into(),
    })?;
    Ok(tuned.turns.first().map(|turn| turn.crystal.orientation.tilt))
}

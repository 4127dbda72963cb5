//! What a sweep is to write: its report, its axes, and what the searches of some reports look for.

use super::axes::Grid;
use super::description::{Description, Sweep, Text};
use super::document::{Document, JobError};
use super::resolve::targets;
use crate::matching::{Actuator, Find, Target};
use crate::pairs::Basis;
use crate::places::nearest;

/// Which rows.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Report {
    /// Which cut to order.
    Cut,
    /// Where the rings are.
    Rings,
    /// Where they cross.
    Crossings,
    /// How far to turn.
    Tilt,
    /// Which state comes out.
    State,
    /// Which plates.
    Compensate,
}

impl Report {
    /// All of them, with their names.
    pub const ALL: [(&'static str, Self); 6] = [
        ("cut", Self::Cut),
        ("rings", Self::Rings),
        ("crossings", Self::Crossings),
        ("tilt", Self::Tilt),
        ("state", Self::State),
        ("compensate", Self::Compensate),
    ];

    /// As a job names it.
    #[must_use]
    pub fn name(self) -> &'static str {
        Self::ALL.iter().find(|(_, report)| *report == self).map_or("", |(name, _)| name)
    }
}

/// What the searches of `cut` and `tilt` look for.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Search {
    /// Wanted emission; `None` for that of the cut, or pairs along the pump.
    pub target: Option<Target>,
    /// What `tilt` changes; `None` for the turn with the larger effect.
    pub by: Option<Actuator>,
    /// What `cut` solves for.
    pub find: Find,
    /// Which pair of crossings `state` and `compensate` are about, from 1; the first where left open.
    pub pair: Option<usize>,
    /// Basis of `state`; `None` for both.
    pub basis: Option<Basis>,
    /// Whether `compensate` puts plates between half-wave plates.
    pub half_wave: bool,
}

/// A sweep.
#[derive(Debug, Clone)]
pub struct Plan {
    /// Which rows.
    pub report: Report,
    /// Which points.
    pub grid: Grid,
    /// For reports that search.
    pub search: Search,
}

impl Plan {
    /// Reads the `[sweep]` of a description.
    ///
    /// # Errors
    /// What is missing or wrong, with its place.
    pub fn read(document: &Document, description: &Description) -> Result<Self, JobError> {
        let none = Sweep::default();
        let sweep = description.sweep.as_ref().unwrap_or(&none);
        let Some(text) = &sweep.report else {
            let known: Vec<&str> = Report::ALL.iter().map(|(name, _)| *name).collect();
            return Err(JobError(format!(
                "no report: pass --report, or write report = \"crossings\" under [sweep]; there are {}",
                known.join(", ")
            )));
        };
        let plan = Self {
            report: choice(document, text, &Report::ALL)?,
            grid: Grid::read(document, description)?,
            search: search(document, sweep)?,
        };
        let sweeps_target = plan.grid.axes().any(|axis| axis.path.key.path.starts_with("sweep.target."));
        if plan.report == Report::Tilt && plan.search.target.is_none() && !sweeps_target {
            let message = "report tilt needs to know what for: write target = { crossing = \"3 deg\" } under [sweep], \
                           or pass --crossing 3deg";
            return Err(document.fault(text.span(), message));
        }
        if let (Report::Cut, Some(Target::Touching), Some(target)) =
            (plan.report, plan.search.target, &sweep.target)
        {
            return Err(
                document.fault(target.span(), "report cut cannot look for rings that touch; report tilt can")
            );
        }
        Ok(plan)
    }
}

fn search(document: &Document, sweep: &Sweep) -> Result<Search, JobError> {
    let actuators = [
        ("tilt", Actuator::Tilt),
        ("cross-tilt", Actuator::CrossTilt),
        ("temperature", Actuator::Temperature),
        ("pump", Actuator::Pump),
    ];
    let finds = [
        ("theta", Find::Theta),
        ("phi", Find::Phi),
        ("poling", Find::Poling),
        ("temperature", Find::Temperature),
        ("pump", Find::Pump),
    ];
    let bases = [("oe", Basis::Histories), ("lab", Basis::Lab)];
    let target = match &sweep.target {
        Some(written) => {
            let wanted = written.get_ref();
            let angles = [&wanted.crossing, &wanted.half_angle, &wanted.separation].map(Option::as_ref);
            let flags = [
                (wanted.collinear, Target::Collinear),
                (wanted.beamlike, Target::Beamlike),
                (wanted.touching, Target::Touching),
            ];
            let mut all = targets(document, angles, &flags)?;
            if all.len() != 1 {
                return Err(
                    document.fault(written.span(), "give one target, such as { crossing = \"3 deg\" }")
                );
            }
            all.pop()
        }
        None => None,
    };
    Ok(Search {
        target,
        by: sweep.by.as_ref().map(|text| choice(document, text, &actuators)).transpose()?,
        find: sweep.find.as_ref().map_or(Ok(Find::Theta), |text| choice(document, text, &finds))?,
        pair: match &sweep.pair {
            None => None,
            Some(number) if (1..=9999).contains(number.get_ref()) => Some(*number.get_ref() as usize),
            Some(number) => return Err(document.fault(number.span(), "pairs are numbered from 1")),
        },
        basis: sweep.basis.as_ref().map(|text| choice(document, text, &bases)).transpose()?,
        half_wave: sweep.half_wave == Some(true),
    })
}

fn choice<T: Copy>(document: &Document, text: &Text, choices: &[(&str, T)]) -> Result<T, JobError> {
    let word = text.get_ref().trim();
    choices.iter().find(|(name, _)| *name == word).map(|(_, value)| *value).ok_or_else(|| {
        let names: Vec<&str> = choices.iter().map(|(name, _)| *name).collect();
        let near = nearest(word, names.iter().copied());
        let hint = near.map_or(String::new(), |near| format!("; did you mean `{near}`?"));
        document.fault(text.span(), &format!("`{word}` is none of {}{hint}", names.join(", ")))
    })
}

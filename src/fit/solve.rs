//! The fit: starts, assignments, uncertainties.

use nalgebra::{DMatrix, DVector};
use thiserror::Error;

use super::check::check;
use super::least_squares::{Minimum, Residuals, minimise};
use super::measured::{Measurement, View};
use super::model::{Differences, Model};
use super::unknown::Unknown;
use crate::job::Setup;

/// No unknown leaves this many of its prior's standard deviations.
const BOUND: f64 = 8.0;
/// A residual beyond this many standard deviations counts less where the loss is robust (Huber, Ann. Math. Stat. 35, 73
/// (1964)).
const ROBUST: f64 = 1.5;
/// What a measurement without a stated uncertainty is taken to have at first: mm, or degrees.
const ASSUMED: (f64, f64) = (0.5, 0.03);

/// Why there is no fit.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[error("{0}")]
pub struct FitError(pub String);

/// The question.
#[derive(Debug, Clone)]
pub struct Question {
    /// The experiment as it is believed to be.
    pub setup: Setup,
    /// What may differ.
    pub unknowns: Vec<Unknown>,
    /// What was seen.
    pub data: Vec<Measurement>,
    /// How the picture stands.
    pub view: View,
    /// Whether far-off measurements count less.
    pub robust: bool,
}

impl Question {
    /// The unknown that changes the rings most: along which starts are looked for.
    #[must_use]
    pub fn tuner(&self) -> Option<usize> {
        let tunes = ["theta", "zero", "tilt", "wavelength", "phi", "cross_tilt", "temperature", "poling"];
        let last = |u: &Unknown| u.name.rsplit('.').next().unwrap_or_default().to_string();
        tunes.iter().find_map(|t| self.unknowns.iter().position(|u| last(u) == *t))
    }
}

/// One number against its prediction.
#[derive(Debug, Clone, PartialEq)]
pub struct Residual {
    /// Line of the file.
    pub line: usize,
    /// Tilt or reading as the row has it, degrees.
    pub tilt: Option<f64>,
    /// Which number.
    pub quantity: &'static str,
    /// As measured.
    pub measured: f64,
    /// As fitted.
    pub fitted: f64,
    /// Standard deviation.
    pub sigma: f64,
    /// Which of the rings it could be of, from 0.
    pub choice: usize,
}

impl Residual {
    /// Measured minus fitted in standard deviations.
    #[must_use]
    pub fn pull(&self) -> f64 {
        (self.measured - self.fitted) / self.sigma
    }

    /// Whether it is too far off to be chance.
    #[must_use]
    pub fn is_outlier(&self) -> bool {
        self.pull().abs() > 4.0
    }
}

/// The answer.
#[derive(Debug, Clone)]
pub struct Fitted {
    /// The unknowns, in their units.
    pub values: Vec<f64>,
    /// Their standard deviations.
    pub sigmas: Vec<f64>,
    /// Their correlations.
    pub correlations: DMatrix<f64>,
    /// Whether an unknown was stopped by its bound.
    pub at_bound: Vec<bool>,
    /// What the data alone say, in units of the priors: J^T J without the priors' rows.
    pub information: DMatrix<f64>,
    /// Sum of squared pulls of the data.
    pub chi_square: f64,
    /// Sum of squares of the unknowns' distances from their priors, in standard deviations.
    pub strain: f64,
    /// Numbers measured minus unknowns that the data determine.
    pub freedom: f64,
    /// Every number.
    pub residuals: Vec<Residual>,
    /// chi-square with the rings that carry no label taken the other way, where there are such.
    pub other_way: Option<f64>,
    /// Where some uncertainties were not stated: the scatter in units of what was assumed for those.
    pub scatter: Option<f64>,
    /// Whether the search settled.
    pub settled: bool,
    /// The experiment with the fitted values.
    pub setup: Setup,
    /// What the mount's scale reads at back-reflection, degrees, where that was fitted.
    pub zero: Option<f64>,
    /// Lines whose ring or crossing does not exist at the fitted values.
    pub absent: Vec<usize>,
}

impl Fitted {
    /// What speaks against the values: chi-square of the data and distance from what was believed. The most likely of
    /// several descriptions has the least.
    #[must_use]
    pub fn against(&self) -> f64 {
        self.chi_square + self.strain
    }

    /// chi-square over the degrees of freedom; `None` where there are none.
    #[must_use]
    pub fn reduced(&self) -> Option<f64> {
        (self.freedom > 0.5).then(|| self.chi_square / self.freedom)
    }

    /// Median of the squared pulls in units of what it is for normal errors, 0.6745^2: outliers, if they are few, do not
    /// move it. `None` without measurements.
    #[must_use]
    pub fn typical(&self) -> Option<f64> {
        const NORMAL: f64 = 0.6745 * 0.6745;
        let pull = |r: &Residual| ((r.measured - r.fitted) / r.sigma).powi(2);
        let mut pulls: Vec<f64> = self.residuals.iter().map(pull).collect();
        pulls.sort_by(f64::total_cmp);
        pulls.get(pulls.len() / 2).map(|median| median / NORMAL)
    }
}

/// Fits. Measurements without a stated uncertainty get one from their scatter, with which the fit is made again: priors
/// weigh against data only if both have a size.
///
/// # Errors
/// Too few measurements, places where no light can go, nothing of the kind within reach of the priors.
pub fn fit(question: &Question) -> Result<Fitted, FitError> {
    const LEAST: f64 = 1e-2;
    check(question)?;
    let first = fit_as_stated(question)?;
    if question.data.iter().all(|m| m.sigma.is_some()) {
        return Ok(first);
    }
    let scatter = first.reduced().map_or(1.0, |r| r.sqrt().max(LEAST));
    let again = question.with_scatter(scatter);
    Ok(Fitted { scatter: Some(scatter), ..fit_as_stated(&again)? })
}

impl Question {
    /// The same with uncertainties for what has none, so many times what is assumed.
    #[must_use]
    pub fn with_scatter(&self, scatter: f64) -> Self {
        let mut again = self.clone();
        for m in again.data.iter_mut().filter(|m| m.sigma.is_none()) {
            m.sigma = Some(scatter * assumed(m));
        }
        again
    }
}

/// What a measurement without a stated uncertainty is taken to have at first.
fn assumed(m: &Measurement) -> f64 {
    if m.seen.is_angle() { ASSUMED.1 } else { ASSUMED.0 }
}

fn fit_as_stated(question: &Question) -> Result<Fitted, FitError> {
    let mut search = Search::new(question);
    let choices = search.choices()?;
    let mut best: Option<(Minimum, Vec<usize>)> = None;
    let mut other: Option<f64> = None;
    for (start, assigned) in search.starts(&choices) {
        let Some(found) = search.descend(start, assigned, &choices) else { continue };
        if best.as_ref().is_none_or(|(b, _)| found.0.cost < b.cost) {
            best = Some(found);
        }
    }
    let Some((mut minimum, mut assigned)) = best else { return Err(search.nothing()) };
    if choices.contains(&2) {
        let swapped = swapped(&assigned, &choices);
        let starts = [minimum.x.clone(), DVector::zeros(minimum.x.len())];
        for start in starts {
            let Some(found) = search.run(start, &swapped) else { continue };
            if found.cost < minimum.cost {
                other = Some(minimum.cost);
                (minimum, assigned) = (found, swapped.clone());
            } else {
                other = Some(other.map_or(found.cost, |o| o.min(found.cost)));
            }
        }
    }
    search.answer(minimum, &assigned, other)
}

fn swapped(assigned: &[usize], choices: &[usize]) -> Vec<usize> {
    assigned.iter().zip(choices).map(|(a, c)| if *c == 2 { 1 - a } else { *a }).collect()
}

/// A fit in progress.
struct Search<'a> {
    question: &'a Question,
    model: Model,
}

impl<'a> Search<'a> {
    fn new(question: &'a Question) -> Self {
        Self { question, model: Model::new(&question.setup, question.view) }
    }

    fn values(&self, x: &DVector<f64>) -> Vec<f64> {
        self.question.unknowns.iter().zip(x.iter()).map(|(u, z)| u.prior + z * u.scale).collect()
    }

    fn set(&mut self, x: &DVector<f64>) -> Option<()> {
        let values = self.values(x);
        self.model.set(&self.question.unknowns, &values).ok()
    }

    /// How many rings each measurement could be of.
    fn choices(&mut self) -> Result<Vec<usize>, FitError> {
        let mut all = Vec::new();
        for m in &self.question.data {
            let count = self.model.choices(m).map_err(|e| FitError(format!("line {}: {e}", m.line)))?;
            if count == 0 {
                return Err(FitError(format!(
                    "line {}: there is no such photon here: look at photon, polarization, wavelength and --type",
                    m.line
                )));
            }
            all.push(count);
        }
        Ok(all)
    }

    fn sigma(&self, m: &Measurement) -> f64 {
        m.sigma.unwrap_or_else(|| assumed(m))
    }

    /// Pulls of all data with an assignment, then of the priors; `None` where the experiment cannot be so. A crossing
    /// that is not there counts as far off, so that steps towards it are worth taking.
    fn residuals(&mut self, x: &DVector<f64>, assigned: &[usize]) -> Option<DVector<f64>> {
        self.set(x)?;
        let mut all = Vec::new();
        for (m, choice) in self.question.data.iter().zip(assigned) {
            let sigma = self.sigma(m);
            match self.model.differences(m, *choice) {
                Some(differences) => {
                    all.extend(
                        differences.iter().map(|(_, fitted, seen)| self.loss((fitted - seen) / sigma)),
                    );
                }
                None => return None,
            }
        }
        for (unknown, z) in self.question.unknowns.iter().zip(x.iter()) {
            all.push(if unknown.prior_sigma.is_some() { *z } else { 0.0 });
        }
        Some(DVector::from_vec(all))
    }

    /// Slopes of the residuals: exact where there is a ring, else by central differences.
    fn slopes(&mut self, x: &DVector<f64>, assigned: &[usize]) -> Option<DMatrix<f64>> {
        self.set(x)?;
        let question = self.question;
        let unknowns = &question.unknowns;
        let mut rows = Vec::new();
        for (m, choice) in question.data.iter().zip(assigned) {
            let sigma = self.sigma(m);
            let differences = self.model.differences(m, *choice)?;
            let slopes = match self.model.slopes(m, *choice, unknowns) {
                Some(slopes) => slopes,
                None => self.across(x, m, *choice, differences.len())?,
            };
            for (row, (_, fitted, seen)) in slopes.row_iter().zip(&differences) {
                let steep = self.loss_slope((fitted - seen) / sigma) / sigma;
                rows.push(row.transpose().zip_map(&self.scales(), |slope, scale| steep * scale * slope));
            }
        }
        for (i, unknown) in unknowns.iter().enumerate() {
            let mut row = DVector::zeros(unknowns.len());
            row[i] = if unknown.prior_sigma.is_some() { 1.0 } else { 0.0 };
            rows.push(row);
        }
        Some(DMatrix::from_fn(rows.len(), unknowns.len(), |i, j| rows[i][j]))
    }

    fn scales(&self) -> DVector<f64> {
        DVector::from_iterator(self.question.unknowns.len(), self.question.unknowns.iter().map(|u| u.scale))
    }

    /// Slopes of the differences of one measurement in the unknowns' units by differences over a thousandth of the scale, to
    /// both sides or to the one where there is something: for the stand-in of a ring that is not there, whose slope is that
    /// of a search and not of a prediction, and for rings that only touch.
    fn across(
        &mut self,
        x: &DVector<f64>,
        m: &Measurement,
        choice: usize,
        rows: usize,
    ) -> Option<DMatrix<f64>> {
        const STEP: f64 = 1e-3;
        let here = self.model.differences(m, choice)?;
        let scales = self.scales();
        let mut slopes = DMatrix::zeros(rows, x.len());
        for i in 0..x.len() {
            let mut at = |step: f64| {
                let mut there = x.clone();
                there[i] += step;
                self.set(&there)?;
                self.model.differences(m, choice)
            };
            let (up, down) = (at(STEP), at(-STEP));
            let (to, from, step) = match (&up, &down) {
                (Some(up), Some(down)) => (up, down, 2.0 * STEP),
                (Some(up), None) => (up, &here, STEP),
                (None, Some(down)) => (&here, down, STEP),
                (None, None) => return None,
            };
            for row in 0..rows {
                slopes[(row, i)] = (to[row].1 - from[row].1) / (step * scales[i]);
            }
        }
        self.set(x)?;
        Some(slopes)
    }

    fn square(&self, differences: &Differences, sigma: f64) -> f64 {
        differences.iter().map(|(_, fitted, seen)| self.loss((fitted - seen) / sigma).powi(2)).sum()
    }

    /// A pull, or a smaller one whose square grows in proportion to it.
    fn loss(&self, pull: f64) -> f64 {
        if !self.question.robust || pull.abs() <= ROBUST {
            return pull;
        }
        // r'^2 = 2 k |r| - k^2
        pull.signum() * (2.0 * ROBUST * pull.abs() - ROBUST * ROBUST).sqrt()
    }

    /// Slope of [`Self::loss`].
    fn loss_slope(&self, pull: f64) -> f64 {
        if !self.question.robust || pull.abs() <= ROBUST {
            return 1.0;
        }
        ROBUST / (2.0 * ROBUST * pull.abs() - ROBUST * ROBUST).sqrt()
    }

    /// The ring of each measurement that lies nearest, and the sum of squares that makes; `None` where something does
    /// not exist.
    fn nearest(&mut self, x: &DVector<f64>, choices: &[usize]) -> Option<(f64, Vec<usize>)> {
        self.set(x)?;
        let mut cost = 0.0;
        let mut assigned = Vec::new();
        for (m, count) in self.question.data.iter().zip(choices) {
            let sigma = self.sigma(m);
            let mut least: Option<(f64, usize)> = None;
            for choice in 0..*count {
                let Some(differences) = self.model.differences(m, choice) else { continue };
                let square = self.square(&differences, sigma);
                if least.is_none_or(|(best, _)| square < best) {
                    least = Some((square, choice));
                }
            }
            let (least, choice) = least?;
            cost += least;
            assigned.push(choice);
        }
        Some((cost, assigned))
    }

    /// Where to begin: the priors, and the best of a line of values of the unknown that tunes most.
    fn starts(&mut self, choices: &[usize]) -> Vec<(DVector<f64>, Vec<usize>)> {
        const STARTS: usize = 3;
        let count = self.question.unknowns.len();
        let tuner = self.question.tuner();
        let mut tried = Vec::new();
        for n in 0..=20 {
            let mut x = DVector::zeros(count);
            let z = 0.3 * f64::from(n - 10);
            match tuner {
                Some(index) => x[index] = z,
                None if n != 10 => continue,
                None => {}
            }
            if let Some((cost, assigned)) = self.nearest(&x, choices) {
                tried.push((cost, x, assigned));
            }
        }
        tried.sort_by(|a, b| a.0.total_cmp(&b.0));
        let mut kept: Vec<(DVector<f64>, Vec<usize>)> = Vec::new();
        for (_, x, assigned) in tried {
            // neighbours lead to the same minimum
            if kept.len() < STARTS && kept.iter().all(|(k, _)| (k - &x).amax() > 0.7) {
                kept.push((x, assigned));
            }
        }
        kept
    }

    fn run(&mut self, start: DVector<f64>, assigned: &[usize]) -> Option<Minimum> {
        minimise(&mut Assigned { search: self, assigned }, start, BOUND)
    }

    /// Fits and assigns anew until the assignment stays.
    fn descend(
        &mut self,
        start: DVector<f64>,
        mut assigned: Vec<usize>,
        choices: &[usize],
    ) -> Option<(Minimum, Vec<usize>)> {
        let mut found = self.run(start, &assigned)?;
        for _ in 0..4 {
            let Some((_, again)) = self.nearest(&found.x, choices) else { break };
            if again == assigned {
                break;
            }
            assigned = again;
            found = self.run(found.x, &assigned)?;
        }
        Some((found, assigned))
    }

    /// Why no start could be evaluated.
    fn nothing(&mut self) -> FitError {
        let zero = DVector::zeros(self.question.unknowns.len());
        let _ = self.set(&zero);
        let question = self.question;
        let missing = question.data.iter().find(|m| self.model.differences(m, 0).is_none());
        let line = missing.map_or(0, |m| m.line);
        FitError(format!(
            "line {line}: nothing of the kind exists within reach of the priors (no crossing, or no ring near that place): look \
             at the units, at the tilt's sign and at the job's cut, or widen --prior"
        ))
    }

    fn answer(
        &mut self,
        minimum: Minimum,
        assigned: &[usize],
        other: Option<f64>,
    ) -> Result<Fitted, FitError> {
        let unknowns = &self.question.unknowns;
        let count = unknowns.len();
        let rows = minimum.residuals.len() - count;
        let slopes = minimum.jacobian.rows(0, rows).into_owned();
        let information = slopes.tr_mul(&slopes);
        let mut normal = information.clone();
        for (i, unknown) in unknowns.iter().enumerate() {
            normal[(i, i)] += if unknown.prior_sigma.is_some() { 1.0 } else { 0.0 };
        }
        let Some(covariance) = normal.clone().cholesky().map(|c| c.inverse()).filter(sound) else {
            return Err(inseparable(unknowns, &normal));
        };
        // digits far below any uncertainty say nothing, and make jobs hard to read
        let values: Vec<f64> =
            self.values(&minimum.x).iter().map(|v| (v * 1e7).round() / 1e7 + 0.0).collect();
        self.model
            .set(unknowns, &values)
            .ok()
            .ok_or_else(|| FitError("the fitted values are impossible".into()))?;
        let residuals = self.all_residuals(assigned);
        let chi_square: f64 = residuals.iter().map(|r| r.pull().powi(2)).sum();
        // an unknown that the priors hold takes nothing of the data's freedom
        let determined = (&covariance * &information).trace();
        let freedom = rows as f64 - determined;
        let sigmas: Vec<f64> = (0..count).map(|i| covariance[(i, i)].sqrt() * unknowns[i].scale).collect();
        let correlations = DMatrix::from_fn(count, count, |i, j| {
            covariance[(i, j)] / (covariance[(i, i)] * covariance[(j, j)]).sqrt()
        });
        let zero = unknowns.iter().position(Unknown::is_zero).map(|i| values[i]);
        let absent = self.absent(assigned);
        Ok(Fitted {
            sigmas,
            correlations,
            at_bound: minimum.x.iter().map(|z| z.abs() >= BOUND - 1e-6).collect(),
            information,
            chi_square,
            strain: unknowns
                .iter()
                .zip(minimum.x.iter())
                .filter(|(u, _)| u.prior_sigma.is_some())
                .map(|(_, z)| z * z)
                .sum(),
            freedom,
            residuals,
            other_way: other.map(|cost| chi_square + cost - minimum.cost),
            scatter: None,
            settled: minimum.settled,
            setup: self.model.setup().clone(),
            zero,
            absent,
            values,
        })
    }

    fn all_residuals(&mut self, assigned: &[usize]) -> Vec<Residual> {
        let mut all = Vec::new();
        for (m, choice) in self.question.data.iter().zip(assigned) {
            let sigma = self.sigma(m);
            for (quantity, fitted, measured) in self.model.differences(m, *choice).unwrap_or_default() {
                let (line, tilt) = (m.line, m.settings.tilt.or(m.settings.reading));
                all.push(Residual { line, tilt, quantity, measured, fitted, sigma, choice: *choice });
            }
        }
        all
    }

    /// Lines whose ring has no light at the fitted values.
    fn absent(&mut self, assigned: &[usize]) -> Vec<usize> {
        let question = self.question;
        let gone = |(m, choice): &(&Measurement, &usize)| {
            let size = self.model.differences(m, **choice);
            let negative =
                |d: &(&'static str, f64, f64)| matches!(d.0, "radius_mm" | "half_angle_deg") && d.1 < 0.0;
            size.is_none_or(|all| all.iter().any(negative))
        };
        question.data.iter().zip(assigned).filter(gone).map(|(m, _)| m.line).collect()
    }
}

/// The residuals of a search with an assignment.
struct Assigned<'a, 'b> {
    search: &'a mut Search<'b>,
    assigned: &'a [usize],
}

impl Residuals for Assigned<'_, '_> {
    fn at(&mut self, x: &DVector<f64>) -> Option<DVector<f64>> {
        self.search.residuals(x, self.assigned)
    }

    fn slopes(&mut self, x: &DVector<f64>) -> Option<DMatrix<f64>> {
        self.search.slopes(x, self.assigned)
    }
}

fn sound(covariance: &DMatrix<f64>) -> bool {
    covariance.iter().all(|v| v.is_finite()) && (0..covariance.nrows()).all(|i| covariance[(i, i)] > 0.0)
}

/// Without priors some combination is not determined at all.
fn inseparable(unknowns: &[Unknown], normal: &DMatrix<f64>) -> FitError {
    let eigen = normal.clone().symmetric_eigen();
    let weakest = eigen.eigenvectors.column(eigen.eigenvalues.imin());
    let names: Vec<&str> = unknowns
        .iter()
        .zip(weakest.iter())
        .filter(|(_, part)| part.abs() > 0.2)
        .map(|(u, _)| u.name.as_str())
        .collect();
    FitError(format!(
        "the data do not determine {}; give a prior (--prior {}=...) or free fewer",
        names.join(" and "),
        names.first().copied().unwrap_or("theta")
    ))
}

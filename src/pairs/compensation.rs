//! Plates that make the two histories alike: thickness, cut and orientation from materials that are allowed.
//!
//! The phase between the histories, to first order in the frequencies of photon and pump and in a's direction, is s.p with
//! the slopes s of the source; each plate adds its thickness times slopes of its own. With C the covariance of p over what
//! filters, irises and the pump's line let through, the variance (s0 + sum L_k s_k).C(s0 + sum L_k s_k) is least for
//! thicknesses that solve a linear system, subject to L >= 0. The best of all cuts and quarter turns are then polished on
//! the full sum |sum w Phi_1 Phi_2* e^(i sum L_k g_k)|, and judged by the state they leave.

use std::f64::consts::PI;

use nalgebra::{DMatrix, DVector, Matrix4, Vector4};

use super::plate::{Point, Site};
use super::solve::{Question, State};
use super::stack::{PUMP, Stack};
use super::{Bench, Compensator, HistoryBasis, Mixture, Opening, PairsError, Place, Vary};
use crate::frame::Cut;
use crate::matching::Status;
use crate::optics::Crystal;
use crate::quantity::{Angle, Length, SPEED_OF_LIGHT};

/// One plate of a proposal.
#[derive(Debug, Clone)]
pub struct Designed {
    /// The plate where it stands.
    pub plate: Compensator,
    /// Group delay of the first history's wave minus that of the second's in it, s.
    pub delay: f64,
    /// Change of the diagonal visibility when it is 1 % thicker, and 1 % thinner.
    pub per_thickness: [f64; 2],
    /// Change of the diagonal visibility when it is rolled by a degree.
    pub per_roll: f64,
    /// Smallest further tilt, radians, that moves the phase between the histories by pi; `None` within 30 deg.
    pub tilt_for_pi: Option<f64>,
    /// Smallest further tilts that bring the phase of the second history to that of the first, and opposite to it.
    pub tilt_to: [Option<f64>; 2],
}

/// Plates that belong together.
#[derive(Debug, Clone)]
pub struct Proposal {
    /// In order a, b, pump.
    pub plates: Vec<Designed>,
    /// Visibility between diagonal polarizers without any plate.
    pub before: f64,
    /// With these.
    pub after: f64,
    /// The state with these.
    pub state: State,
    /// `NotConverged` where a visibility, before or after, may be far off.
    pub status: Status,
}

/// Longest plate that is proposed, m.
const LONGEST: f64 = 20e-3;
/// How many of the combinations are polished.
const POLISHED: usize = 6;

/// The design problem: points that stand for what is collected, and slopes.
struct Task<'q, 'a> {
    question: &'q Question<'a>,
    bare: Bench,
    points: Vec<Point>,
    /// The nominal pair, then steps up and down in each parameter.
    probes: Vec<Point>,
    /// Steps of omega_a, x, y, omega_p.
    steps: Vector4<f64>,
    covariance: Matrix4<f64>,
    slopes: Vector4<f64>,
    sites: Vec<Site>,
    head_on: bool,
    half_wave: bool,
    nominal: [f64; 3],
}

/// A plate whose thickness is open.
#[derive(Clone)]
struct Candidate {
    site: usize,
    plate: Crystal,
    slopes: Vector4<f64>,
}

/// Some candidates with thicknesses.
#[derive(Clone)]
struct Combination {
    parts: Vec<(Candidate, f64)>,
    variance: f64,
}

/// The best plates of each material, best first; compensators that the bench has already are left out. `half_wave`: plates
/// in the arms stand behind half-wave plates at 45 deg.
///
/// # Errors
/// As [`Question::state`].
pub fn compensate(
    question: &Question<'_>,
    materials: &[Crystal],
    half_wave: bool,
) -> Result<Answers, PairsError> {
    let task = Task::new(question, half_wave)?;
    let before = task.judge(&[])?;
    let mut answers = Answers { proposals: Vec::new(), useless: Vec::new() };
    for material in materials {
        let id = || material.material.id.clone();
        let found = match task.best_of(material) {
            Ok(best) => best,
            Err(PairsError::Material(error)) => {
                answers.useless.push((id(), error.to_string()));
                continue;
            }
            Err(other) => return Err(other),
        };
        let mut choices: Vec<Vec<Compensator>> = found.iter().map(|best| task.plates(best)).collect();
        choices.extend(task.plates_of_rule(material)?);
        match task.best_judged(choices)? {
            Some(plates) => answers.proposals.push(task.propose(plates, &before)?),
            None => answers.useless.push((id(), "no plate of it helps".into())),
        }
    }
    answers.proposals.sort_by(|a, b| b.after.total_cmp(&a.after));
    Ok(answers)
}

/// What the allowed materials give.
#[derive(Debug, Clone)]
pub struct Answers {
    /// The best of each material, best first.
    pub proposals: Vec<Proposal>,
    /// Materials that give nothing, and why.
    pub useless: Vec<(String, String)>,
}

/// The rules for one crystal: its own cut and half its length in both arms, rolled by a quarter turn; and as the source
/// stands, behind half-wave plates at 45 deg, which mends the spatial phase too. Nothing for several crystals.
///
/// # Errors
/// As [`Question::state`].
pub fn half_length(question: &Question<'_>) -> Result<Vec<Proposal>, PairsError> {
    let [crystal] = question.crystals else { return Ok(Vec::new()) };
    let task = Task::new(question, false)?;
    let before = task.judge(&[])?;
    [false, true].into_iter().map(|half_wave| task.propose(rule(crystal, half_wave), &before)).collect()
}

/// The plates of the rule, in arm a and arm b.
fn rule(crystal: &Crystal, half_wave: bool) -> Vec<Compensator> {
    let mut plate = as_plate(crystal);
    plate.length = Length::metres(0.5 * crystal.length.si());
    let turn = if half_wave { 0.0 } else { 90.0 };
    plate.orientation.roll = Angle::from_degrees(crystal.orientation.roll.degrees() + turn);
    [Place::A, Place::B].map(|place| Compensator { place, plate: plate.clone(), half_wave }).to_vec()
}

/// A crystal's material and cut, upright and unpoled.
fn as_plate(crystal: &Crystal) -> Crystal {
    Crystal { orientation: Default::default(), reversal: Default::default(), poling: None, ..crystal.clone() }
}

impl<'q, 'a> Task<'q, 'a> {
    fn new(question: &'q Question<'a>, half_wave: bool) -> Result<Self, PairsError> {
        let bare = Bench { compensators: Vec::new(), ..question.bench.clone() };
        let own = Question { bench: &bare, ..*question };
        let (_, pair, _) = own.pair()?;
        let stack = Stack::new(question.crystals, &bare, &pair, question.interaction)?;
        own.demand_drive(&stack, &pair)?;
        let basis = stack.history_basis()?;
        let seen = as_irises(&bare, &stack);
        let mixture = Mixture::new(&stack, &seen, Vary::ALL);
        let points: Vec<Point> = mixture.samples()?.iter().map(|sample| Point::new(sample, &basis)).collect();
        let mut sites: Vec<Site> = [0, 1].map(|arm| Site::in_arm(&stack, &basis, arm, half_wave)).to_vec();
        sites.extend(Site::in_pump(&stack)?);
        let nominal = stack.nominal();
        let steps = Vector4::new(1e-6 * nominal[0], 1e-6, 1e-6, 1e-6 * nominal[PUMP]);
        let probes = probes(&mixture, &basis, &steps)?;
        let slopes = Vector4::from_fn(|i, _| {
            (probes[2 * i + 1].value * probes[2 * i + 2].value.conj()).arg() / (2.0 * steps[i])
        });
        let covariance = covariance(&stack, &points);
        let head_on = mixture.is_of_points();
        drop(mixture);
        Ok(Self {
            question,
            points,
            probes,
            steps,
            covariance,
            slopes,
            sites,
            head_on,
            half_wave,
            nominal,
            bare,
        })
    }

    /// The state that plates leave.
    fn judge(&self, plates: &[Compensator]) -> Result<State, PairsError> {
        let bench = Bench { compensators: plates.to_vec(), ..self.bare.clone() };
        Question { bench: &bench, ..*self.question }.state()
    }

    fn plates(&self, combination: &Combination) -> Vec<Compensator> {
        combination.parts.iter().map(|(candidate, length)| self.compensator(candidate, *length)).collect()
    }

    /// The rule for one crystal of this material, as it is and polished; nothing else.
    fn plates_of_rule(&self, material: &Crystal) -> Result<Vec<Vec<Compensator>>, PairsError> {
        let [crystal] = self.question.crystals else { return Ok(Vec::new()) };
        if crystal.material.id != material.material.id || crystal.set().id != material.set().id {
            return Ok(Vec::new());
        }
        let plates = rule(crystal, self.half_wave);
        let part = |(site, compensator): (usize, &Compensator)| {
            let plate = compensator.plate.clone();
            let length = plate.length.si();
            (Candidate { site, plate, slopes: Vector4::zeros() }, length)
        };
        let parts = plates.iter().enumerate().map(part).collect();
        let (polished, _) = self.polish(Combination { parts, variance: 0.0 })?;
        Ok(vec![self.plates(&polished), plates])
    }

    /// The plates that leave the best state.
    fn best_judged(&self, choices: Vec<Vec<Compensator>>) -> Result<Option<Vec<Compensator>>, PairsError> {
        let mut best: Option<(f64, Vec<Compensator>)> = None;
        for plates in choices {
            let value = self.judge(&plates)?.histories.coherence();
            if best.as_ref().is_none_or(|(most, _)| value > *most) {
                best = Some((value, plates));
            }
        }
        Ok(best.map(|(_, plates)| plates))
    }

    fn compensator(&self, candidate: &Candidate, length: f64) -> Compensator {
        let plate = Crystal { length: Length::metres(length), ..candidate.plate.clone() };
        let place = self.sites[candidate.site].place;
        Compensator { place, plate, half_wave: self.half_wave && place != Place::Pump }
    }

    fn propose(&self, plates: Vec<Compensator>, before: &State) -> Result<Proposal, PairsError> {
        let state = self.judge(&plates)?;
        let after = state.histories.coherence();
        let changed = |index: usize, change: &dyn Fn(&mut Crystal)| -> Result<f64, PairsError> {
            let mut plates = plates.clone();
            change(&mut plates[index].plate);
            Ok(self.judge(&plates)?.histories.coherence() - after)
        };
        // that of the second history, ahead of the first; a tilt takes its change off
        let phase = state.histories.nearest_bell().phase;
        let to = |target: f64| {
            let turns = move |change: f64| ((phase - change - target) / (2.0 * PI)).floor();
            move |before: f64, change: f64| turns(before) != turns(change)
        };
        let mut designed = Vec::with_capacity(plates.len());
        for (index, compensator) in plates.iter().enumerate() {
            let site = self.site(compensator.place);
            let plate = &compensator.plate;
            let scaled = |factor: f64| {
                changed(index, &|plate| plate.length = Length::metres(plate.length.si() * factor))
            };
            let rolled = changed(index, &|plate| {
                plate.orientation.roll = Angle::radians(plate.orientation.roll.si() + 1f64.to_radians());
            })?;
            let k0 = self.nominal[wave_of(compensator.place)] / SPEED_OF_LIGHT;
            designed.push(Designed {
                delay: site.delay(plate, k0)? * plate.hot_length().si(),
                per_thickness: [scaled(1.01)?, scaled(0.99)?],
                per_roll: rolled,
                tilt_for_pi: self.tilt(site, plate, |_, change| change.abs() >= PI)?,
                tilt_to: [self.tilt(site, plate, to(0.0))?, self.tilt(site, plate, to(PI))?],
                plate: compensator.clone(),
            });
        }
        let missed = [before, &state].iter().any(|state| state.status == Status::NotConverged);
        let status = if missed { Status::NotConverged } else { Status::Ok };
        Ok(Proposal { plates: designed, before: before.histories.coherence(), after, state, status })
    }

    fn site(&self, place: Place) -> &Site {
        self.sites.iter().find(|site| site.place == place).unwrap_or(&self.sites[0])
    }

    /// Smallest tilt, either way, at which the phase of the first history minus that of the second has changed so that
    /// `reached` is true of the last change and this one.
    fn tilt(
        &self,
        site: &Site,
        plate: &Crystal,
        reached: impl Fn(f64, f64) -> bool,
    ) -> Result<Option<f64>, PairsError> {
        let length = plate.hot_length().si();
        let nominal = &self.probes[..1];
        let phase = |tilt: f64| -> Result<f64, PairsError> {
            let mut tilted = plate.clone();
            tilted.orientation.tilt = Angle::radians(plate.orientation.tilt.si() + tilt);
            Ok(site.rates(&tilted, nominal, self.head_on)?[0] * length)
        };
        let still = phase(0.0)?;
        let step = 0.02f64.to_radians();
        let mut before = [0.0, 0.0];
        for j in 1..=1500 {
            for (side, sign) in [1.0, -1.0].into_iter().enumerate() {
                let tilt = sign * step * f64::from(j);
                let change = phase(tilt)? - still;
                if reached(before[side], change) {
                    return Ok(Some(tilt));
                }
                before[side] = change;
            }
        }
        Ok(None)
    }

    /// The best combination of plates of one material.
    fn best_of(&self, material: &Crystal) -> Result<Option<Combination>, PairsError> {
        let mut ranked: Vec<Combination> = Vec::new();
        for cut in cuts(material, self.question.crystals) {
            let plate = Crystal { cut, ..as_plate(material) };
            let mut per_site = Vec::new();
            for site in 0..self.sites.len() {
                per_site.push(self.candidates(&plate, site)?);
            }
            for a in &per_site[0] {
                for b in &per_site[1] {
                    let pumps = per_site.get(2).map_or(&[][..], Vec::as_slice);
                    if pumps.is_empty() {
                        ranked.extend(self.thicknesses(&[a, b]));
                    }
                    pumps.iter().for_each(|pump| ranked.extend(self.thicknesses(&[a, b, pump])));
                }
            }
        }
        ranked.sort_by(|one, two| one.cost().total_cmp(&two.cost()));
        let mut best: Option<(Combination, f64)> = None;
        for combination in ranked.into_iter().take(POLISHED) {
            let (polished, value) = self.polish(combination)?;
            if best.as_ref().is_none_or(|(_, most)| value > *most + 1e-9) {
                best = Some((polished, value));
            }
        }
        Ok(best.map(|(combination, _)| combination))
    }

    /// One plate in its four quarter turns (two where half a turn changes nothing).
    fn candidates(&self, plate: &Crystal, site: usize) -> Result<Vec<Candidate>, PairsError> {
        // the pump has one direction: nothing is gained by an axis that leans out of the face
        let mut plate = plate.clone();
        if self.sites[site].place == Place::Pump {
            plate.cut.theta = Angle::from_degrees(90.0);
        }
        let flat = (plate.cut.theta.degrees() - 90.0).abs() < 1e-9;
        let turns = if flat { 2 } else { 4 };
        let mut all = Vec::with_capacity(turns);
        for quarters in 0..turns {
            let mut plate = plate.clone();
            let roll = self.sites[site].roll(quarters).degrees();
            let roll = if flat { 90.0 - (90.0 - roll).rem_euclid(180.0) } else { roll };
            plate.orientation.roll = Angle::from_degrees(roll);
            let rates = self.sites[site].rates(&plate, &self.probes, self.head_on)?;
            let slopes =
                Vector4::from_fn(|i, _| (rates[2 * i + 1] - rates[2 * i + 2]) / (2.0 * self.steps[i]));
            all.push(Candidate { site, plate, slopes });
        }
        Ok(all)
    }

    /// Least variance with thicknesses that are not negative: the best of all subsets. `None` where no plate helps.
    fn thicknesses(&self, candidates: &[&Candidate]) -> Option<Combination> {
        let mut best: Option<Combination> = None;
        for subset in 1..1_usize << candidates.len() {
            let chosen: Vec<&Candidate> = candidates
                .iter()
                .enumerate()
                .filter(|(i, _)| subset >> i & 1 == 1)
                .map(|(_, c)| *c)
                .collect();
            let Some(lengths) = self.least_squares(&chosen) else { continue };
            if lengths.iter().any(|l| *l <= 1e-6 || *l > LONGEST) {
                continue;
            }
            let slopes = chosen.iter().zip(&lengths).fold(self.slopes, |s, (c, l)| s + c.slopes * *l);
            let variance = (self.covariance * slopes).dot(&slopes);
            let parts = chosen.into_iter().cloned().zip(lengths).collect();
            let found = Combination { parts, variance };
            if best.as_ref().is_none_or(|b| found.cost() < b.cost()) {
                best = Some(found);
            }
        }
        best
    }

    /// Solves sum_k (s_j.C s_k) L_k = -s_j.C s_0.
    fn least_squares(&self, chosen: &[&Candidate]) -> Option<Vec<f64>> {
        let n = chosen.len();
        let c = &self.covariance;
        // lengths in millimetres keep the matrix near one
        let scale = 1e-3;
        let matrix =
            DMatrix::from_fn(n, n, |j, k| (c * chosen[k].slopes).dot(&chosen[j].slopes) * scale * scale);
        let right = DVector::from_fn(n, |j, _| -(c * self.slopes).dot(&chosen[j].slopes) * scale);
        let size = matrix.diagonal().max();
        if size <= 0.0 {
            return None;
        }
        // equal plates in both arms may do the same: the shortest of equals
        let regular = matrix + DMatrix::identity(n, n) * (1e-7 * size);
        Some(regular.cholesky()?.solve(&right).iter().map(|l| l * scale).collect())
    }

    /// Thicknesses by search on the full sum, and the coherence they leave.
    fn polish(&self, mut combination: Combination) -> Result<(Combination, f64), PairsError> {
        let mut rates = Vec::with_capacity(combination.parts.len());
        for (candidate, _) in &combination.parts {
            rates.push(self.sites[candidate.site].rates(&candidate.plate, &self.points, self.head_on)?);
        }
        let mut lengths: Vec<f64> = combination.parts.iter().map(|(_, length)| *length).collect();
        let mut best = self.coherence(&rates, &lengths);
        let mut steps: Vec<f64> = lengths.iter().map(|length| 0.05 * length).collect();
        for _ in 0..400 {
            let mut moved = false;
            for k in 0..lengths.len() {
                for sign in [1.0, -1.0] {
                    let kept = lengths[k];
                    lengths[k] = (kept + sign * steps[k]).clamp(1e-6, LONGEST);
                    let value = self.coherence(&rates, &lengths);
                    if value > best {
                        best = value;
                        moved = true;
                    } else {
                        lengths[k] = kept;
                    }
                }
            }
            if !moved {
                steps.iter_mut().for_each(|step| *step *= 0.5);
                if steps.iter().all(|step| *step < 1e-7) {
                    break;
                }
            }
        }
        combination.parts.iter_mut().zip(lengths).for_each(|(part, length)| part.1 = length);
        Ok((combination, best))
    }

    fn coherence(&self, rates: &[Vec<f64>], lengths: &[f64]) -> f64 {
        let mut sum = nalgebra::Complex::from(0.0);
        let mut most = 0.0;
        for (j, point) in self.points.iter().enumerate() {
            let phase: f64 = rates.iter().zip(lengths).map(|(rate, length)| rate[j] * length).sum();
            sum += point.value * nalgebra::Complex::cis(phase);
            most += point.value.norm();
        }
        sum.norm() / most
    }
}

impl Combination {
    /// Variance with a little added for thickness, so that of equals the thinner and more even is taken.
    fn cost(&self) -> f64 {
        self.variance + 1e-5 * self.parts.iter().map(|(_, length)| (1e3 * length).powi(2)).sum::<f64>()
    }
}

fn wave_of(place: Place) -> usize {
    match place {
        Place::A | Place::Both => 0,
        Place::B => 1,
        Place::Pump => PUMP,
    }
}

/// Cuts that are tried: that of the source where it is of this material, the axis in the face, and tilted ones.
fn cuts(material: &Crystal, crystals: &[Crystal]) -> Vec<Cut> {
    let phi = Angle::default();
    let alike = crystals.iter().filter(|c| c.material.id == material.material.id);
    let mut cuts: Vec<Cut> = alike.map(|c| c.cut).collect();
    cuts.dedup();
    cuts.extend((2..=9).map(|tens| Cut { theta: Angle::from_degrees(10.0 * f64::from(tens)), phi }));
    cuts
}

/// Fibres as irises of a similar view: their modes are 1/e^2 wide in intensity at lambda/(pi w).
fn as_irises(bench: &Bench, stack: &Stack) -> Bench {
    let mut seen = bench.clone();
    for (arm, collection) in seen.collection.iter_mut().enumerate() {
        if let Opening::Fibre(radius) = collection.opening {
            let photon = if arm == 0 { stack.photons.signal } else { stack.photons.idler };
            let full = 2.0 * photon.si() / (std::f64::consts::PI * radius.si());
            collection.opening = Opening::Iris(Angle::radians(full));
        }
    }
    seen
}

/// The nominal pair, then for omega_a, x, y, omega_p a step up and one down.
fn probes(
    mixture: &Mixture<'_>,
    basis: &HistoryBasis,
    steps: &Vector4<f64>,
) -> Result<Vec<Point>, PairsError> {
    let mut all = vec![mixture.probe([0.0; 4])?];
    for i in 0..4 {
        for sign in [1.0, -1.0] {
            let mut at = [0.0; 4];
            at[i] = sign * steps[i];
            all.push(mixture.probe(at)?);
        }
    }
    Ok(all.iter().map(|sample| Point::new(sample, basis)).collect())
}

/// Second moments of omega_a, x, y, omega_p about their means.
fn covariance(stack: &Stack, points: &[Point]) -> Matrix4<f64> {
    let frame = super::disc::ArmFrame::new(stack.arms[0]);
    let nominal = stack.nominal();
    let at = |point: &Point| {
        let place = frame.place(&point.directions[0]);
        let off = |i: usize| point.k0[i] * SPEED_OF_LIGHT - nominal[i];
        Vector4::new(off(0), place.x, place.y, off(PUMP))
    };
    let total: f64 = points.iter().map(|p| p.value.norm()).sum();
    let mean = points.iter().fold(Vector4::zeros(), |sum, p| sum + at(p) * p.value.norm()) / total;
    points.iter().fold(Matrix4::zeros(), |sum, p| {
        let off = at(p) - mean;
        sum + off * off.transpose() * (p.value.norm() / total)
    })
}

//! Published angles, wavelengths, temperatures, poling periods and walk-offs: what the library makes of each.
//!
//! The numbers come from papers and handbooks. They stand in `literature/cases.toml` with their source, the tolerance
//! and why it is what it is; `literature/README.md` explains the columns. Which data set meets which number, and what
//! comes out where one misses, was decided there by a separate calculator. So a case holds the library up against
//! both: one that `meets` against the paper, one that `misses` against the calculator, to its last digit.
//!
//! All cases that fail are listed together.

use std::collections::HashSet;
use std::sync::{Arc, LazyLock};

use serde::Deserialize;
use twincone::matching::*;
use twincone::material::{Catalogue, Optic, Reach};
use twincone::optics::{Crystal, Polarization, along_direction};
use twincone::quantity::{Angle, Length, Temperature, Wavelength};

/// Half of the last of the four decimals that `computed` is given with, and what binary fractions may add to it.
const LAST_DIGIT: f64 = 0.5e-4 + 1e-9;

/// The file as it is read.
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Cases {
    case: Vec<Case>,
}

/// One published number; README.md has the meaning of every field.
#[derive(Deserialize, Clone)]
#[serde(deny_unknown_fields)]
struct Case {
    id: String,
    material: String,
    dataset: String,
    quantity: Quantity,
    process: Option<String>,
    pump_nm: Option<f64>,
    signal_nm: Option<f64>,
    plane: Option<Where>,
    theta_deg: Option<f64>,
    phi_deg: Option<f64>,
    tilt_deg: Option<f64>,
    half_angle_deg: Option<f64>,
    separation_deg: Option<f64>,
    wavelength_nm: Option<f64>,
    polarization: Option<String>,
    group_velocity_condition: Option<Condition>,
    temperature_degc: Option<f64>,
    poling_um: Option<f64>,
    #[serde(default)]
    extrapolate: bool,
    expected_low: f64,
    expected_high: f64,
    tolerance: f64,
    why_tolerance: String,
    source: String,
    known: Known,
    confidence: Confidence,
    why: String,
    outcome: Outcome,
    computed: Option<f64>,
    reason: Option<String>,
}

/// What was published.
#[derive(Deserialize, Clone, Copy, PartialEq, Debug)]
#[serde(rename_all = "snake_case")]
enum Quantity {
    Theta,
    Phi,
    Wavelength,
    Temperature,
    Poling,
    Walkoff,
    HalfAngle,
    Crossing,
    Separation,
    GroupVelocityMatch,
}

/// Where a cut is looked for.
#[derive(Deserialize, Clone, Copy, PartialEq, Debug)]
enum Where {
    #[serde(rename = "uniaxial")]
    Uniaxial,
    #[serde(rename = "XY")]
    Xy,
    #[serde(rename = "XZ")]
    Xz,
    #[serde(rename = "YZ")]
    Yz,
}

/// Which group indices are to agree.
#[derive(Deserialize, Clone, Copy, PartialEq, Debug)]
enum Condition {
    #[serde(rename = "pump equals o photon")]
    OrdinaryPhoton,
    #[serde(rename = "pump equals mean of daughters")]
    MeanOfDaughters,
}

/// How the published number is known.
#[derive(Deserialize, Clone, Copy, PartialEq, Debug)]
enum Known {
    #[serde(rename = "seen")]
    Seen,
    #[serde(rename = "seen second-hand")]
    SecondHand,
    #[serde(rename = "from memory")]
    FromMemory,
    #[serde(rename = "common practice, no source")]
    CommonPractice,
}

/// How sure it is.
#[derive(Deserialize, Clone, Copy, PartialEq, Debug)]
#[serde(rename_all = "snake_case")]
enum Confidence {
    High,
    Medium,
    Low,
}

/// What the data set is expected to make of it.
#[derive(Deserialize, Clone, Copy, PartialEq, Debug)]
#[serde(rename_all = "snake_case")]
enum Outcome {
    Meets,
    Misses,
}

static CASES: LazyLock<Vec<Case>> = LazyLock::new(|| {
    let read: Result<Cases, _> = toml::from_str(include_str!("literature/cases.toml"));
    read.unwrap_or_else(|error| panic!("tests/literature/cases.toml: {error}")).case
});

/// A field that this quantity cannot do without.
fn needed<T>(value: Option<T>, name: &str) -> Result<T, String> {
    value.ok_or_else(|| format!("{name} is missing"))
}

impl Case {
    /// Every solution that the library finds, in the unit of the quantity.
    fn answers(&self) -> Result<Vec<f64>, String> {
        match self.quantity {
            Quantity::Theta => self.solved(Find::Theta, |s| Some(s.crystal.cut.theta.degrees())),
            Quantity::Phi => self.solved(Find::Phi, |s| Some(s.crystal.cut.phi.degrees())),
            Quantity::Wavelength => self.solved(Find::Pump, |s| Some(s.photons.pump.nm())),
            Quantity::Temperature => self.solved(Find::Temperature, |s| Some(s.crystal.temperature.degc())),
            Quantity::Poling => self.solved(Find::Poling, |s| s.crystal.poling.map(Length::um)),
            Quantity::Walkoff => self.walkoffs(),
            Quantity::HalfAngle => self.half_angles(),
            Quantity::Crossing => self.crossings(|pair| Some(pair.direction.polar_deg())),
            Quantity::Separation => {
                self.crossings(|pair| Some(pair.direction.angle_to(pair.partner?).to_degrees()))
            }
            Quantity::GroupVelocityMatch => self.group_velocity_matches(),
        }
    }

    /// The crystal at the given cut, tilt, temperature and period; 0 stands where a cut is sought.
    fn crystal(&self) -> Result<Crystal, String> {
        let material = Arc::new(Catalogue::default().get(&self.material).map_err(|e| e.to_string())?);
        let mut crystal = Crystal::new(material, Some(&self.dataset)).map_err(|e| e.to_string())?;
        let biaxial = crystal.material.file.optic == Optic::Biaxial;
        let (theta, phi) = match self.plane {
            Some(Where::Xy) => (90.0, 0.0),
            Some(Where::Yz) => (0.0, 90.0),
            Some(Where::Xz | Where::Uniaxial) => (0.0, 0.0),
            None if self.quantity == Quantity::GroupVelocityMatch => (0.0, 0.0),
            None if biaxial => (needed(self.theta_deg, "theta_deg")?, needed(self.phi_deg, "phi_deg")?),
            None => (needed(self.theta_deg, "theta_deg")?, self.phi_deg.unwrap_or(0.0)),
        };
        crystal = crystal.with_cut(theta, phi);
        crystal.orientation.tilt = Angle::from_degrees(self.tilt_deg.unwrap_or(0.0));
        crystal.poling = self.poling_um.map(|um| Length::metres(um * 1e-6));
        crystal.temperature = self.temperature_degc.map_or(crystal.temperature, Temperature::celsius);
        crystal.reach = if self.extrapolate { Reach::Extrapolate } else { Reach::Within };
        Ok(crystal)
    }

    fn interaction(&self) -> Result<Interaction, String> {
        let process: Process =
            needed(self.process.as_ref(), "process")?.parse().map_err(|e: ProcessError| e.to_string())?;
        Ok(Interaction::Explicit(process))
    }

    /// Where the pump is the unknown, signal and idler stay equal.
    fn photons(&self) -> Result<Photons, String> {
        let pump = Wavelength::from_nm(needed(self.pump_nm, "pump_nm")?);
        let signal = match self.quantity {
            Quantity::Wavelength | Quantity::GroupVelocityMatch => pump.doubled(),
            _ => Wavelength::from_nm(needed(self.signal_nm, "signal_nm")?),
        };
        Photons::new(pump, signal).ok_or_else(|| "the signal must be longer than the pump".into())
    }

    /// The wanted emission; all but cuts for a ring or crossing are collinear.
    fn target(&self) -> Target {
        let half_angle = self.half_angle_deg.map(|deg| Target::HalfAngle(deg.to_radians()));
        let separation = self.separation_deg.map(|deg| Target::Separation(deg.to_radians()));
        half_angle.or(separation).unwrap_or(Target::Collinear)
    }

    fn design(&self, find: Find) -> Result<Design, String> {
        Ok(Design {
            crystal: self.crystal()?,
            photons: self.photons()?,
            fixed_signal: None,
            interaction: self.interaction()?,
            target: self.target(),
            find,
            phi_given: matches!(self.plane, Some(Where::Xz | Where::Yz)),
        })
    }

    fn solved(&self, find: Find, value: fn(&CutSolution) -> Option<f64>) -> Result<Vec<f64>, String> {
        let found = design(&self.design(find)?).map_err(|e| e.to_string())?;
        Ok(found.iter().filter_map(value).collect())
    }

    /// Of the wave whose wave vector is along the given direction.
    fn walkoffs(&self) -> Result<Vec<f64>, String> {
        let crystal = self.crystal()?;
        let wavelength = Wavelength::from_nm(needed(self.wavelength_nm, "wavelength_nm")?);
        let principal = crystal.principal(wavelength).map_err(|e| e.to_string())?;
        let wanted = needed(self.polarization.as_deref(), "polarization")?;
        let [_, _, along] = crystal.cut.axes();
        let mut waves = along_direction(&principal, along.0).into_iter();
        let named = waves.find(|(name, _)| name.to_string() == wanted);
        let (_, wave) = named.ok_or_else(|| format!("there is no {wanted} wave in this crystal"))?;
        Ok(vec![wave.walkoff.to_degrees()])
    }

    fn cones(&self) -> Result<Cones, String> {
        let photons = self.photons()?;
        cones(&[self.crystal()?], photons.pump, &[photons.signal], self.interaction()?, Want::Both)
            .map_err(|e| e.to_string())
    }

    fn half_angles(&self) -> Result<Vec<f64>, String> {
        let rings = self.cones()?.rings.into_iter().filter(|row| row.photon == Landing::Signal);
        Ok(rings.filter_map(|row| Some(row.ring.ok()?.half_angle.to_degrees())).collect())
    }

    fn crossings(&self, value: fn(&Crossing) -> Option<f64>) -> Result<Vec<f64>, String> {
        Ok(self.cones()?.crossings.iter().filter_map(|row| value(row.crossing.as_ref()?)).collect())
    }

    /// Pump wavelengths at which the group indices at the matched collinear cut fulfil the condition.
    fn group_velocity_matches(&self) -> Result<Vec<f64>, String> {
        let start = self.design(Find::Theta)?;
        let condition = needed(self.group_velocity_condition, "group_velocity_condition")?;
        let mut unequal = |nm: f64| {
            let pump = Wavelength::from_nm(nm);
            let photons = Photons::new(pump, pump.doubled())?;
            // where there are two cuts, the smaller: one branch, so that the difference is continuous
            let found = design(&Design { photons, ..start.clone() }).ok()?;
            condition.residual(found.first()?)
        };
        let nm = start.photons.pump.nm();
        let near = Scan { from: 0.8 * nm, to: 1.25 * nm, intervals: 45 };
        Ok(roots(&mut unequal, near).into_iter().map(|root| root.x).collect())
    }

    /// How far from the published interval and its tolerance; 0 within.
    fn distance(&self, answer: f64) -> f64 {
        let (low, high) = (self.expected_low - self.tolerance, self.expected_high + self.tolerance);
        (low - answer).max(answer - high).max(0.0)
    }

    /// The answer that counts: the nearest to the interval (to its middle, which is the same outside of it).
    fn nearest(&self, answers: &[f64]) -> Option<f64> {
        let middle = 0.5 * (self.expected_low + self.expected_high);
        answers.iter().copied().min_by(|a, b| (a - middle).abs().total_cmp(&(b - middle).abs()))
    }

    /// What is wrong with an answer; `None` where it is as the file has it.
    fn complaint(&self, answer: Option<f64>) -> Option<&'static str> {
        let within = answer.is_some_and(|a| self.distance(a) == 0.0);
        match (self.outcome, answer, self.computed) {
            (Outcome::Meets, None, _) => Some("should meet the source, but there is no solution"),
            (Outcome::Meets, Some(_), _) => (!within).then_some("should meet the source"),
            (Outcome::Misses, ..) if within => Some("should miss the source"),
            (Outcome::Misses, Some(_), None) => Some("there should be no solution"),
            (Outcome::Misses, None, Some(_)) => Some("misses by having no solution"),
            (Outcome::Misses, Some(answer), Some(computed)) => {
                ((answer - computed).abs() > LAST_DIGIT).then_some("misses elsewhere")
            }
            (Outcome::Misses, None, None) => None,
        }
    }

    /// A line of the table of failures; `None` where all is well.
    fn failure(&self) -> Option<String> {
        let (answer, complaint) = match self.answers() {
            Ok(answers) => {
                let answer = self.nearest(&answers);
                (answer, self.complaint(answer)?.to_string())
            }
            Err(error) => (None, error),
        };
        let number = |x: Option<f64>| x.map_or("-".into(), |x| format!("{x:.4}"));
        Some(format!(
            "{:<52} {:<20} {:>10} {:>10} {:>22} {:>8}  {complaint} ({:?}, {:?})",
            self.id,
            format!("{:?}", self.quantity),
            number(answer),
            number(self.computed),
            format!("{} to {}", self.expected_low, self.expected_high),
            self.tolerance,
            self.known,
            self.confidence,
        ))
    }

    /// What is amiss with the way the case is written down.
    fn faults(&self) -> Vec<&'static str> {
        let texts = [&self.source, &self.why, &self.why_tolerance];
        let cut = matches!(self.quantity, Quantity::Theta | Quantity::Phi);
        let checks = [
            (texts.iter().all(|t| !t.trim().is_empty()), "source, why and why_tolerance must say something"),
            (self.expected_low <= self.expected_high, "expected_low is above expected_high"),
            (self.tolerance > 0.0, "the tolerance must be positive"),
            (cut == self.plane.is_some(), "a plane belongs to theta and phi"),
            (
                (self.quantity == Quantity::Phi) == (self.plane == Some(Where::Xy)),
                "phi is sought in plane XY",
            ),
            (self.half_angle_deg.is_none() || self.separation_deg.is_none(), "two targets"),
            (self.outcome == Outcome::Misses || self.computed.is_none(), "computed belongs to a miss"),
            (self.is_excused(), "a miss has a reason, a hit none"),
        ];
        checks.into_iter().filter(|(fine, _)| !fine).map(|(_, fault)| fault).collect()
    }

    fn is_excused(&self) -> bool {
        let said = self.reason.as_ref().is_some_and(|r| !r.trim().is_empty());
        said == (self.outcome == Outcome::Misses)
    }
}

impl Condition {
    /// Difference of group delays along the pump, s/m.
    fn residual(self, solution: &CutSolution) -> Option<f64> {
        let waves = solution.pairing.as_ref()?;
        let (signal, idler) = (waves.signal.delay, waves.idler.delay);
        let other = match self {
            Self::MeanOfDaughters => 0.5 * (signal + idler),
            Self::OrdinaryPhoton if solution.process.signal == Polarization::Ordinary => signal,
            Self::OrdinaryPhoton if solution.process.idler == Polarization::Ordinary => idler,
            Self::OrdinaryPhoton => return None,
        };
        Some(waves.pump.delay - other)
    }
}

#[test]
fn published_numbers_come_out_as_expected() {
    let failures: Vec<String> = CASES.iter().filter_map(Case::failure).collect();
    assert!(
        failures.is_empty(),
        "{} of {} cases\n{:<52} {:<20} {:>10} {:>10} {:>22} {:>8}\n{}",
        failures.len(),
        CASES.len(),
        "case",
        "quantity",
        "found",
        "computed",
        "published",
        "+-",
        failures.join("\n")
    );
}

#[test]
fn cases_are_written_down_completely() {
    let mut seen = HashSet::new();
    let mut faults: Vec<String> = Vec::new();
    for case in CASES.iter() {
        faults.extend(case.faults().into_iter().map(|fault| format!("{}: {fault}", case.id)));
        if !seen.insert(&case.id) {
            faults.push(format!("{}: the id stands there twice", case.id));
        }
    }
    assert!(faults.is_empty(), "\n{}", faults.join("\n"));
}

#[test]
fn cases_cover_crystals_and_planes() {
    assert!(CASES.len() >= 40, "{} cases", CASES.len());
    let crystals: HashSet<&str> = CASES.iter().map(|case| case.material.as_str()).collect();
    assert!(crystals.len() >= 8, "{crystals:?}");
    for plane in [Where::Uniaxial, Where::Xy, Where::Xz, Where::Yz] {
        assert!(CASES.iter().any(|case| case.plane == Some(plane)), "no case in {plane:?}");
    }
}

/// The comparison itself notices what it is there for.
#[test]
fn a_case_that_comes_out_differently_is_reported() {
    let mut case = CASES.iter().find(|case| case.outcome == Outcome::Meets).expect("a hit").clone();
    let edge = case.expected_high + case.tolerance;
    assert_eq!(case.complaint(Some(edge)), None);
    assert!(case.complaint(Some(edge + 1e-6)).is_some());
    assert!(case.complaint(None).is_some());
    case.outcome = Outcome::Misses;
    assert!(case.complaint(Some(edge)).is_some());
    assert_eq!(case.complaint(None), None);
    assert!(case.complaint(Some(edge + 1.0)).is_some(), "a solution where there should be none");
    case.computed = Some(edge + 1.0);
    assert_eq!(case.complaint(Some(edge + 1.000_04)), None);
    assert!(case.complaint(Some(edge + 1.000_06)).is_some());
    assert!(case.complaint(None).is_some());
}

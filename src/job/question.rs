//! What a setup asks of the searches for cuts and turns, with the defaults that depend on the target.

use super::document::JobError;
use super::settle::choose_phi;
use super::setup::Setup;
use crate::matching::{Actuator, Design, Find, Interaction, Target, Tuning};
use crate::material::{Catalogue, MaterialError, Optic};
use crate::optics::Crystal;
use crate::pairs;
use crate::quantity::{Angle, Wavelength};

impl Setup {
    /// The cut that gives `target`, or what the cut was given as, or pairs along the pump.
    ///
    /// # Errors
    /// A cut that must be known and is not.
    pub fn design(&self, target: Option<Target>, find: Find) -> Result<Design, JobError> {
        let given = self.cut[0];
        let target = target.or(given.target).unwrap_or(Target::Collinear);
        let mut crystal = self.crystals[0].clone();
        match find {
            Find::Theta => {}
            // XY-plane cuts; poled crystals are cut across X or Y unless told
            Find::Phi | Find::Poling if !given.theta => crystal.cut.theta = Angle::from_degrees(90.0),
            _ if !given.theta => {
                return Err(JobError(
                    "this searches at a given cut: pass --theta (and --phi), for example --theta 90deg --phi 0deg"
                        .into(),
                ));
            }
            _ => {}
        }
        let biaxial = crystal.material.file.optic == Optic::Biaxial;
        if biaxial
            && given.theta
            && !given.phi
            && matches!(find, Find::Poling | Find::Temperature | Find::Pump)
        {
            return Err(JobError(format!(
                "no phi: {} is biaxial, so its cut needs both angles; pass --phi, for example --phi 0deg",
                crystal.material.id
            )));
        }
        let interaction = match (self.interaction_given, target, find) {
            (true, ..) => self.interaction,
            (false, Target::HalfAngle(_), _) => Interaction::One,
            (false, Target::Collinear, Find::Poling) => Interaction::Any,
            _ => self.interaction,
        };
        Ok(Design {
            crystal,
            photons: self.photons(),
            fixed_signal: self.signals.fixed(),
            interaction,
            target,
            find,
            phi_given: given.phi,
        })
    }

    /// The settings that give `target`. Settles on type I for a half angle where no type was named.
    ///
    /// # Errors
    /// Several crystals or signals, of which one is to be named.
    pub fn tuning(&mut self, target: Target, actuator: Option<Actuator>) -> Result<Tuning, JobError> {
        let photons = self.only_photons("tilt").map_err(JobError)?;
        let interaction = self.interaction_for(Some(target));
        if interaction != self.interaction {
            self.interaction = interaction;
            choose_phi(self, 0);
        }
        let crystal = self.only_crystal("tilt").map_err(JobError)?.clone();
        Ok(Tuning {
            crystal,
            photons,
            fixed_signal: self.signals.fixed(),
            interaction: self.interaction,
            target,
            actuator,
        })
    }

    /// What state a pair of crossings has; `signals` are those of this setup.
    #[must_use]
    pub fn pairs<'a>(
        &'a self,
        signals: &'a [Wavelength],
        number: Option<usize>,
        wanted: f64,
    ) -> pairs::Question<'a> {
        pairs::Question {
            crystals: &self.crystals,
            pump: self.pump(),
            signals,
            interaction: self.interaction,
            bench: &self.bench,
            number,
            wanted,
        }
    }

    /// A length for every crystal.
    ///
    /// # Errors
    /// It is missing.
    pub fn demand_length(&self, command: &str) -> Result<(), JobError> {
        let missing = || {
            JobError(format!(
                "no length: `{command}` needs that of every crystal; pass --length, for example --length 2mm, or write \
                 crystal.length in the job file"
            ))
        };
        self.length_given.then_some(()).ok_or_else(missing)
    }

    /// What plates may be made of: `allow` by id, or the first crystal's own material and quartz. A plate of the first
    /// crystal's material takes its data set and temperature.
    ///
    /// # Errors
    /// A material or data set that is not known.
    pub fn plates(&self, catalogue: &Catalogue, allow: &[String]) -> Result<Vec<Crystal>, MaterialError> {
        let first = &self.crystals[0];
        let own = first.material.id.as_str();
        let default = [own.to_string(), "quartz".into()];
        let named = if allow.is_empty() { &default[..] } else { allow };
        let plate = |name: &String| {
            let (id, set) = name.split_once(':').map_or((name.as_str(), None), |(id, set)| (id, Some(set)));
            if id == own && set.is_none() {
                return Ok(first.clone());
            }
            let plate = Crystal::new(catalogue.shared(id)?, set)?;
            Ok(Crystal { reach: first.reach, ..plate })
        };
        named.iter().map(plate).collect()
    }
}

//! An experiment as the physics knows it: SI numbers, every default decided.

use super::description::Description;
use super::document::JobError;
use super::limits::{self, Limit};
use super::settle::settle_cut;
use crate::matching::{Interaction, Photons, Target};
use crate::material::MaterialError;
use crate::optics::Crystal;
use crate::pairs::{Bench, Line};
use crate::quantity::{Angle, Length, Wavelength};

use thiserror::Error;

/// Why a description is no experiment.
#[derive(Debug, Clone, Error)]
pub enum SetupError {
    /// Bad or missing values.
    #[error(transparent)]
    Job(#[from] JobError),
    /// Indices or materials that are not to be had.
    #[error(transparent)]
    Material(#[from] MaterialError),
    /// A cut that was to be found and does not exist.
    #[error("{0}")]
    NoCut(String),
}

/// What a description must hold beside pump and crystal.
#[derive(Debug, Clone, Copy, Default)]
pub struct Needs {
    /// A cut, given or solved for; else it may be missing and a target is left alone.
    pub cut: bool,
    /// A pump wavelength; else it may be missing.
    pub pump: bool,
}

impl Needs {
    /// Pump, crystal and cut.
    pub const ALL: Self = Self { cut: true, pump: true };
}

/// An experiment.
#[derive(Debug, Clone)]
pub struct Setup {
    /// What it is called.
    pub title: Option<String>,
    /// Vacuum wavelength of the pump; `None` where none was given and none is needed.
    pub pump: Option<Wavelength>,
    /// In the order in which the pump meets them.
    pub crystals: Vec<Crystal>,
    /// Whether the cut of each crystal was given.
    pub cut: Vec<GivenCut>,
    /// Polarizations.
    pub interaction: Interaction,
    /// Whether the interaction was named, or is the default.
    pub interaction_given: bool,
    /// Wavelengths of the signals.
    pub signals: Signals,
    /// Of the screen from the crystal.
    pub screen: Length,
    /// What pump and pairs meet beside the crystals.
    pub bench: Bench,
    /// The mount's scale.
    pub stage: Option<Stage>,
    /// Whether the length was given.
    pub length_given: bool,
    /// The description it was made of: what later commands read and this setup does not hold.
    pub written: Description,
}

/// Which signal wavelengths.
#[derive(Debug, Clone, PartialEq)]
pub enum Signals {
    /// Twice the pump, whatever it is.
    Degenerate,
    /// These.
    At(Vec<Wavelength>),
}

impl Signals {
    /// Wavelengths for a pump.
    #[must_use]
    pub fn for_pump(&self, pump: Wavelength) -> Vec<Wavelength> {
        match self {
            Self::Degenerate => vec![pump.doubled()],
            Self::At(all) => all.clone(),
        }
    }

    /// The signal that stays when the pump changes, if any.
    #[must_use]
    pub fn fixed(&self) -> Option<Wavelength> {
        match self {
            Self::Degenerate => None,
            Self::At(all) => all.first().copied(),
        }
    }
}

/// What was said of a cut.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct GivenCut {
    /// theta was given.
    pub theta: bool,
    /// phi was given.
    pub phi: bool,
    /// theta was solved for this.
    pub target: Option<Target>,
}

/// What a mount's scale shows.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Stage {
    /// Reading at back-reflection; without it a reading says nothing.
    pub zero: Option<Angle>,
    /// Turn of the crystal per turn of the screw.
    pub per_turn: Option<Angle>,
    /// Whether readings fall when the tilt rises.
    pub reversed: bool,
}

impl Stage {
    /// Reading at a tilt.
    #[must_use]
    pub fn reading(&self, tilt: Angle) -> Option<Angle> {
        let sign = if self.reversed { -1.0 } else { 1.0 };
        self.zero.map(|zero| Angle::radians(zero.si() + sign * tilt.si()))
    }

    /// Turns of the screw for a turn of the crystal, positive where the reading rises.
    #[must_use]
    pub fn turns(&self, turn: Angle) -> Option<f64> {
        let sign = if self.reversed { -1.0 } else { 1.0 };
        self.per_turn.map(|per_turn| sign * turn.si() / per_turn.si())
    }
}

impl Setup {
    /// The pump's wavelength, which [`Needs::pump`] demanded.
    ///
    /// # Panics
    /// If the setup was resolved without needing a pump.
    #[must_use]
    pub fn pump(&self) -> Wavelength {
        self.pump.expect("resolve() with Needs::pump gives a pump")
    }

    /// Solves the cuts that were given as targets, and chooses what was left open; to be called again when pump, photons,
    /// temperature or cut have changed.
    ///
    /// # Errors
    /// A cut that is missing or does not exist.
    pub fn settle(&mut self, needs: Needs) -> Result<(), SetupError> {
        if needs.cut {
            self.interaction = self.interaction_for(None);
        }
        (0..self.crystals.len()).try_for_each(|index| settle_cut(self, index, needs))
    }

    /// What the limits of single values do not say: photons fit the pump, and no crystal stands edge-on to it.
    ///
    /// # Errors
    /// A combination that cannot be.
    pub fn check(&self) -> Limit {
        if let (Some(pump), Signals::At(all)) = (self.pump, &self.signals) {
            all.iter().try_for_each(|signal| limits::photon(*signal, pump))?;
        }
        self.check_spectrum()?;
        self.crystals.iter().try_for_each(|crystal| limits::facing(&crystal.orientation))
    }

    /// A spectrum that was measured holds the pump's wavelength.
    pub(super) fn check_spectrum(&self) -> Limit {
        let (Some(pump), Line::Measured(trace)) = (self.pump, &self.bench.line) else { return Ok(()) };
        let [from, to] = trace.range();
        if (from..=to).contains(&pump.si()) {
            return Ok(());
        }
        Err(format!(
            "the spectrum goes from {:.3} nm to {:.3} nm, which does not hold the pump wavelength, {pump}: correct one of \
             the two",
            1e9 * from,
            1e9 * to
        ))
    }

    /// The interaction that was named; else type I where a half angle is wanted of a cut or as `target`, and type II.
    #[must_use]
    pub fn interaction_for(&self, target: Option<Target>) -> Interaction {
        let cuts = self.cut.iter().map(|cut| cut.target);
        let half_angle = cuts.chain([target]).any(|t| matches!(t, Some(Target::HalfAngle(_))));
        match (self.interaction_given, half_angle) {
            (true, _) => self.interaction,
            (false, true) => Interaction::One,
            (false, false) => Interaction::Two,
        }
    }

    /// Signal wavelengths for the pump.
    #[must_use]
    pub fn signals(&self) -> Vec<Wavelength> {
        self.signals.for_pump(self.pump())
    }

    /// Lets the values of this setup stand for what was typed of cut, poling, temperature, pump and process.
    pub fn forget_typed(&mut self) {
        for crystal in &mut self.written.crystal {
            let crystal = crystal.get_mut();
            (crystal.cut, crystal.poling, crystal.temperature) = (None, None, None);
        }
        if let Some(pump) = &mut self.written.pump {
            pump.get_mut().wavelength = None;
        }
    }

    /// Keeps of what was typed only the keys that this setup does not hold.
    pub fn forget_all_typed(&mut self) {
        self.forget_typed();
        self.written.screen = None;
        if let Some(stage) = &mut self.written.stage {
            stage.zero = None;
        }
        for crystal in &mut self.written.crystal {
            let crystal = crystal.get_mut();
            (crystal.length, crystal.tilt, crystal.cross_tilt, crystal.roll) = (None, None, None, None);
        }
    }

    /// The same experiment for each signal wavelength on its own.
    #[must_use]
    pub fn one_per_signal(&self) -> Vec<Self> {
        match &self.signals {
            Signals::At(all) if all.len() > 1 => {
                all.iter().map(|w| Self { signals: Signals::At(vec![*w]), ..self.clone() }).collect()
            }
            _ => vec![self.clone()],
        }
    }

    /// The one crystal.
    ///
    /// # Errors
    /// There are several.
    pub fn only_crystal(&self, command: &str) -> Result<&Crystal, String> {
        match self.crystals.as_slice() {
            [only] => Ok(only),
            _ => Err(format!(
                "the job has several crystals; `{command}` looks at one: describe that one alone"
            )),
        }
    }

    /// Photons of the one signal wavelength.
    ///
    /// # Errors
    /// There are several.
    pub fn only_photons(&self, command: &str) -> Result<Photons, String> {
        match self.signals().as_slice() {
            [_] => Ok(self.photons()),
            _ => Err(format!(
                "several signal wavelengths are given; `{command}` looks at one: pass --signal once"
            )),
        }
    }

    /// Photons of the first listed signal.
    #[must_use]
    pub fn photons(&self) -> Photons {
        let first = self.signals()[0];
        Photons::new(self.pump(), first).expect("resolve() checks that signals are longer than the pump")
    }
}

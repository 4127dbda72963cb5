//! A validated experiment in SI, with no option left open: all that the physics ever sees.

use std::str::FromStr;
use std::sync::Arc;

use toml::Spanned;

use super::description::{self, Description, Text};
use super::document::{Document, JobError};
use crate::frame::{Cut, Orientation, Reversal};
use crate::matching::{Design, Find, Interaction, Photons, Process, ProcessError, Target, design};
use crate::material::{Catalogue, Material, MaterialError, Optic, Reach};
use crate::optics::Crystal;
use crate::quantity::{Angle, Duration, Frequency, Length, Power, QuantityError, Temperature, Wavelength};

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

    /// Turns of the screw for a turn of the crystal.
    #[must_use]
    pub fn turns(&self, turn: Angle) -> Option<f64> {
        self.per_turn.map(|per_turn| turn.si() / per_turn.si())
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

    /// Signal wavelengths for the pump.
    #[must_use]
    pub fn signals(&self) -> Vec<Wavelength> {
        self.signals.for_pump(self.pump())
    }

    /// Photons of the first listed signal.
    #[must_use]
    pub fn photons(&self) -> Photons {
        let first = self.signals()[0];
        Photons::new(self.pump(), first).expect("resolve() checks that signals are longer than the pump")
    }
}

/// Reads a description in the words of its document.
struct Reader<'a> {
    document: &'a Document,
}

impl Reader<'_> {
    fn fault<T>(&self, place: &Spanned<T>, message: &str) -> SetupError {
        self.document.fault(place.span(), message).into()
    }

    fn read<T: FromStr<Err = QuantityError>>(&self, text: &Text) -> Result<T, SetupError> {
        text.get_ref().parse().map_err(|e: QuantityError| self.fault(text, &e.to_string()))
    }

    fn maybe<T: FromStr<Err = QuantityError>>(&self, text: Option<&Text>) -> Result<Option<T>, SetupError> {
        text.map(|t| self.read(t)).transpose()
    }

    fn positive(&self, text: Option<&Text>, what: &str) -> Result<Option<Length>, SetupError> {
        let length = self.maybe::<Length>(text)?;
        match (text, length) {
            (Some(text), Some(length)) if length.si() <= 0.0 => {
                Err(self.fault(text, &format!("{what} must be positive, not {}", text.get_ref())))
            }
            _ => Ok(length),
        }
    }

    fn wavelength(&self, text: &Text, what: &str) -> Result<Wavelength, SetupError> {
        let wavelength: Wavelength = self.read(text)?;
        if wavelength.si() <= 0.0 {
            return Err(self.fault(text, &format!("{what} must be positive, not {}", text.get_ref())));
        }
        Ok(wavelength)
    }

    /// A turn of a crystal; beyond 80 deg the face is edge-on to the beam.
    fn turn(&self, text: Option<&Text>, what: &str) -> Result<Angle, SetupError> {
        let Some(text) = text else { return Ok(Angle::default()) };
        let angle: Angle = self.read(text)?;
        if angle.degrees().abs() > 80.0 {
            let message = format!(
                "{what} must lie within -80 deg to 80 deg, not {angle}: the beam would miss the face"
            );
            return Err(self.fault(text, &message));
        }
        Ok(angle)
    }

    fn one_of<T: Copy>(&self, text: &Text, choices: &[(&str, T)]) -> Result<T, SetupError> {
        let found = choices.iter().find(|(name, _)| name == text.get_ref());
        found.map(|(_, value)| *value).ok_or_else(|| {
            let names: Vec<_> = choices.iter().map(|(name, _)| format!("`{name}`")).collect();
            self.fault(text, &format!("`{}` is none of {}", text.get_ref(), names.join(", ")))
        })
    }
}

/// Turns a document into an experiment; cuts given as targets are solved here.
///
/// # Errors
/// What is missing, impossible or not to be had, with its place.
pub fn resolve(document: &Document, catalogue: &Catalogue, needs: Needs) -> Result<Setup, SetupError> {
    let description = document.describe()?;
    resolve_description(document, &description, catalogue, needs)
}

/// As [`resolve`], for a description that was read already.
///
/// # Errors
/// As [`resolve`].
pub fn resolve_description(
    document: &Document,
    description: &Description,
    catalogue: &Catalogue,
    needs: Needs,
) -> Result<Setup, SetupError> {
    let reader = Reader { document };
    check_unused(&reader, description)?;
    let pump = pump_wavelength(&reader, description, needs)?;
    let (signals, interaction, interaction_given) = emission(&reader, description, pump)?;
    let mut setup = Setup {
        title: description.title.clone(),
        pump,
        crystals: Vec::new(),
        cut: Vec::new(),
        interaction,
        interaction_given,
        signals,
        screen: reader
            .positive(description.screen.as_ref().and_then(|s| s.distance.as_ref()), "the screen distance")?
            .unwrap_or(Length::metres(1.0)),
        stage: stage(&reader, description)?,
        length_given: description.crystal.iter().all(|c| c.get_ref().length.is_some()),
        written: description.clone(),
    };
    if description.crystal.is_empty() {
        return Err(JobError(
            "no crystal: pass --material, for example --material bbo, or write a [crystal] in the job file"
                .into(),
        )
        .into());
    }
    for (index, written) in description.crystal.iter().enumerate() {
        let (crystal, cut) = crystal(&reader, description, written, index, catalogue)?;
        setup.crystals.push(crystal);
        setup.cut.push(cut);
    }
    for index in 0..setup.crystals.len() {
        settle_cut(&mut setup, index, needs)?;
    }
    Ok(setup)
}

fn pump_wavelength(
    reader: &Reader<'_>,
    d: &Description,
    needs: Needs,
) -> Result<Option<Wavelength>, SetupError> {
    match d.pump.as_ref().and_then(|p| p.get_ref().wavelength.as_ref()) {
        Some(text) => reader.wavelength(text, "the pump wavelength").map(Some),
        None if needs.pump => {
            Err(JobError("no pump wavelength: pass --pump, for example --pump 405nm, or write pump.wavelength in the job file".into()).into())
        }
        None => Ok(None),
    }
}

type Emitted = (Signals, Interaction, bool);

fn emission(reader: &Reader<'_>, d: &Description, pump: Option<Wavelength>) -> Result<Emitted, SetupError> {
    let Some(emission) = &d.emission else { return Ok((Signals::Degenerate, Interaction::Two, false)) };
    let emission = emission.get_ref();
    let interaction = match (&emission.kind, &emission.process) {
        (Some(kind), Some(_)) => {
            return Err(reader.fault(kind, "give the type or the process, not both"));
        }
        (_, Some(text)) => {
            let process: Process =
                text.get_ref().parse().map_err(|e: ProcessError| reader.fault(text, &e.to_string()))?;
            Interaction::Explicit(process)
        }
        (Some(kind), None) => reader.one_of(
            kind,
            &[
                ("II", Interaction::Two),
                ("I", Interaction::One),
                ("0", Interaction::Zero),
                ("2", Interaction::Two),
                ("1", Interaction::One),
            ],
        )?,
        (None, None) => Interaction::Two,
    };
    let given = emission.kind.is_some() || emission.process.is_some();
    Ok((signals(reader, emission, pump)?, interaction, given))
}

fn signals(
    reader: &Reader<'_>,
    emission: &description::Emission,
    pump: Option<Wavelength>,
) -> Result<Signals, SetupError> {
    if let (Some(idler), false) = (&emission.idler, emission.signal.is_empty()) {
        return Err(reader.fault(idler, "give the signal or the idler, not both: energy fixes the other"));
    }
    let listed = emission.signal.iter().chain(&emission.idler);
    let mut all = Vec::new();
    for text in listed {
        if text.get_ref().trim() == "degenerate" {
            if emission.signal.len() > 1 {
                let Some(pump) = pump else { continue };
                all.push(pump.doubled());
                continue;
            }
            return Ok(Signals::Degenerate);
        }
        let wavelength = reader.wavelength(text, "the signal wavelength")?;
        let Some(pump) = pump else { continue };
        let Some(partner) = wavelength.partner(pump) else {
            return Err(reader.fault(
                text,
                &format!("{wavelength} is not longer than the pump, {pump}: a photon of a pair has less energy than the pump"),
            ));
        };
        all.push(if emission.idler.is_some() { partner } else { wavelength });
    }
    Ok(if all.is_empty() { Signals::Degenerate } else { Signals::At(all) })
}

fn stage(reader: &Reader<'_>, d: &Description) -> Result<Option<Stage>, SetupError> {
    let Some(stage) = &d.stage else { return Ok(None) };
    let per_turn = reader.maybe::<Angle>(stage.per_turn.as_ref())?;
    if let (Some(text), Some(angle)) = (&stage.per_turn, per_turn)
        && angle.si() <= 0.0
    {
        return Err(reader.fault(text, "the turn per screw turn must be positive; write reversed = true for a screw that counts backwards"));
    }
    Ok(Some(Stage {
        zero: reader.maybe(stage.zero.as_ref())?,
        per_turn,
        reversed: stage.reversed.unwrap_or(false),
    }))
}

fn crystal(
    reader: &Reader<'_>,
    d: &Description,
    written: &Spanned<description::Crystal>,
    index: usize,
    catalogue: &Catalogue,
) -> Result<(Crystal, GivenCut), SetupError> {
    let c = written.get_ref();
    let (material, dataset) = material(reader, c, catalogue)?;
    let mut crystal = Crystal::new(material, dataset.as_deref()).map_err(|e| {
        c.dataset
            .as_ref()
            .or(c.material.as_ref())
            .map_or(e.clone().into(), |t| reader.fault(t, &e.to_string()))
    })?;
    crystal.name = c.name.as_ref().map_or((index + 1).to_string(), |n| n.get_ref().clone());
    if let Some(temperature) = reader.maybe::<Temperature>(c.temperature.as_ref())? {
        if temperature.degc() < -273.15 {
            let text = c.temperature.as_ref().unwrap_or_else(|| unreachable!("it was read"));
            return Err(reader.fault(text, "a temperature cannot lie below absolute zero"));
        }
        crystal.temperature = temperature;
    }
    if let Some(reference) = reader.maybe(c.reference_temperature.as_ref())? {
        crystal.reference_temperature = reference;
    }
    crystal.length =
        reader.positive(c.length.as_ref(), "the crystal length")?.unwrap_or(Length::metres(1e-3));
    crystal.poling = reader.positive(c.poling.as_ref(), "the poling period")?;
    reader
        .positive(c.gap_before.as_ref().filter(|g| !g.get_ref().trim_start().starts_with('0')), "the gap")?;
    if c.extrapolate == Some(true) {
        crystal.reach = Reach::Extrapolate;
    }
    let mount = d.mount.as_ref();
    crystal.orientation = Orientation {
        tilt: reader.turn(c.tilt.as_ref(), "the tilt")?,
        cross_tilt: reader.turn(c.cross_tilt.as_ref(), "the cross tilt")?,
        roll: reader.maybe(c.roll.as_ref())?.unwrap_or_default(),
        about_x: reader.turn(mount.and_then(|m| m.about_x.as_ref()), "the mount's turn")?,
        about_y: reader.turn(mount.and_then(|m| m.about_y.as_ref()), "the mount's turn")?,
    };
    if let Some(text) = &c.reversed {
        crystal.reversal = reader.one_of(
            text,
            &[
                ("about-beam", Reversal::AboutBeam),
                ("about-vertical", Reversal::AboutVertical),
                ("about-horizontal", Reversal::AboutHorizontal),
            ],
        )?;
    }
    let given = given_cut(reader, c, &mut crystal)?;
    Ok((crystal, given))
}

/// `bbo`, `bbo:kato-1986`, or `./mine.toml`.
fn material(
    reader: &Reader<'_>,
    c: &description::Crystal,
    catalogue: &Catalogue,
) -> Result<(Arc<Material>, Option<String>), SetupError> {
    let Some(text) = &c.material else {
        return Err(JobError("no material: pass --material, for example --material bbo, or write crystal.material in the job file".into()).into());
    };
    let (id, set) = match text.get_ref().split_once(':') {
        Some((id, set)) => (id, Some(set.to_string())),
        None => (text.get_ref().as_str(), None),
    };
    let material = catalogue.get(id).map_err(|e| reader.fault(text, &e.to_string()))?;
    let dataset = match (&c.dataset, set) {
        (Some(_), Some(_)) => {
            return Err(
                reader.fault(text, "the data set is named twice; write it in `dataset` or after the colon")
            );
        }
        (Some(set), None) => Some(set.get_ref().clone()),
        (None, set) => set,
    };
    Ok((Arc::new(material), dataset))
}

fn given_cut(
    reader: &Reader<'_>,
    c: &description::Crystal,
    crystal: &mut Crystal,
) -> Result<GivenCut, SetupError> {
    let Some(written) = &c.cut else { return Ok(GivenCut::default()) };
    let cut = written.get_ref();
    let theta = reader.maybe::<Angle>(cut.theta.as_ref())?;
    if let (Some(text), Some(theta)) = (&cut.theta, theta)
        && !(0.0..=180.0).contains(&theta.degrees())
    {
        return Err(reader.fault(text, &format!("theta must lie within 0 deg to 180 deg, not {theta}")));
    }
    let angle = |text: &Text, most: f64| -> Result<f64, SetupError> {
        let angle: Angle = reader.read(text)?;
        let allowed = angle.degrees() > 0.0 && angle.degrees() < most;
        if allowed {
            Ok(angle.si())
        } else {
            Err(reader.fault(text, &format!("the angle must lie between 0 deg and {most} deg, not {angle}")))
        }
    };
    let mut targets = Vec::new();
    if let Some(text) = &cut.crossing {
        targets.push(Target::Crossing(angle(text, 60.0)?));
    }
    if let Some(text) = &cut.half_angle {
        targets.push(Target::HalfAngle(angle(text, 60.0)?));
    }
    if let Some(text) = &cut.separation {
        targets.push(Target::Separation(angle(text, 120.0)?));
    }
    if cut.collinear == Some(true) {
        targets.push(Target::Collinear);
    }
    if cut.beamlike == Some(true) {
        targets.push(Target::Beamlike);
    }
    if targets.len() + usize::from(theta.is_some()) > 1 {
        return Err(reader.fault(written, "give theta or one target for the cut, not both"));
    }
    let phi = reader.maybe::<Angle>(cut.phi.as_ref())?;
    crystal.cut = Cut { theta: theta.unwrap_or_default(), phi: phi.unwrap_or_default() };
    Ok(GivenCut { theta: theta.is_some(), phi: phi.is_some(), target: targets.first().copied() })
}

/// Solves a cut that was given as a target, and chooses phi where it was left open.
fn settle_cut(setup: &mut Setup, index: usize, needs: Needs) -> Result<(), SetupError> {
    let given = setup.cut[index];
    if !needs.cut {
        return Ok(());
    }
    if let (Some(Target::HalfAngle(_)), false) = (given.target, setup.interaction_given) {
        setup.interaction = Interaction::One;
    }
    let Some(target) = given.target else {
        if !given.theta {
            return Err(JobError(format!(
                "no cut: pass --theta (and --phi), or let it be solved with --cut, for example --cut {}; \
                 `twincone cut` answers which one to order",
                if setup.interaction == Interaction::One { "half-angle=3deg" } else { "crossing=3deg" }
            ))
            .into());
        }
        let biaxial = setup.crystals[index].material.file.optic == Optic::Biaxial;
        if biaxial && !given.phi {
            let id = &setup.crystals[index].material.id;
            return Err(JobError(format!(
                "no phi: {id} is biaxial, so its cut needs both angles; pass --phi, for example --phi 0deg for the XZ plane"
            ))
            .into());
        }
        choose_phi(setup, index);
        return Ok(());
    };
    if setup.pump.is_none() {
        return Err(JobError("a cut given as a target needs a pump wavelength: pass --pump".into()).into());
    }
    let question = Design {
        crystal: setup.crystals[index].clone(),
        photons: setup.photons(),
        fixed_signal: setup.signals.fixed(),
        interaction: setup.interaction,
        target,
        find: Find::Theta,
        phi_given: given.phi,
    };
    let found = design(&question).map_err(|e| match e {
        crate::matching::ConesError::Material(e) => SetupError::Material(e),
        crate::matching::ConesError::Description(text) => JobError(text).into(),
    })?;
    let best = found.into_iter().max_by(|a, b| a.d_eff.unwrap_or(0.0).total_cmp(&b.d_eff.unwrap_or(0.0)));
    let Some(best) = best else {
        return Err(SetupError::NoCut(format!(
            "no cut of {} gives that in {}; `twincone cut` with the same options says how far off it is",
            setup.crystals[index].material.id, setup.interaction
        )));
    };
    setup.crystals[index].cut = best.crystal.cut;
    Ok(())
}

/// phi of largest |d_eff| in a uniaxial crystal, whose geometry does not depend on it.
fn choose_phi(setup: &mut Setup, index: usize) {
    let given = setup.cut[index];
    let crystal = &setup.crystals[index];
    let (Some(_), false, Some(tensor)) = (setup.pump, given.phi, crystal.material.tensor.clone()) else {
        return;
    };
    if crystal.material.file.optic != Optic::Uniaxial {
        return;
    }
    let upright =
        Crystal { orientation: Orientation::default(), reversal: Reversal::None, ..crystal.clone() };
    let Ok(emission) = crate::matching::Emission::of(&upright, setup.photons()) else { return };
    let Some(roles) = emission.roles(setup.interaction).ok().and_then(|r| r.first().copied()) else { return };
    if let Some(phi) = crate::matching::best_phi(&emission, roles, &tensor) {
        setup.crystals[index].cut.phi = phi;
    }
}

/// Reads the values that no command uses yet, so that a mistake in them is found at once.
fn check_unused(reader: &Reader<'_>, d: &Description) -> Result<(), SetupError> {
    if let Some(pump) = &d.pump {
        let pump = pump.get_ref();
        reader.positive(pump.waist.as_ref(), "the waist")?;
        reader.maybe::<Power>(pump.power.as_ref())?;
        reader.maybe::<Duration>(pump.pulse.as_ref())?;
        check_polarization(reader, d)?;
        if let Some(text) = &pump.linewidth {
            let as_length = text.get_ref().parse::<Length>().map(|_| ());
            as_length.or_else(|_| text.get_ref().parse::<Frequency>().map(|_| ())).map_err(|_| {
                reader.fault(
                    text,
                    &format!("`{}` is no linewidth; write one such as `0.1 nm` or `200 GHz`", text.get_ref()),
                )
            })?;
        }
    }
    let arms = [("a", ()), ("b", ()), ("both", ())];
    for collection in &d.collection {
        if let Some(arm) = &collection.arm {
            reader.one_of(arm, &arms)?;
        }
        if let Some(iris) = &collection.iris {
            let as_angle = iris.get_ref().parse::<Angle>().map(|_| ());
            as_angle.or_else(|_| iris.get_ref().parse::<Length>().map(|_| ())).map_err(|_| {
                reader.fault(iris, &format!("`{}` is no iris; write its full angle, `0.2 deg`, or its diameter at the screen, `3 mm`", iris.get_ref()))
            })?;
        }
        reader.positive(collection.fibre.as_ref(), "the fibre's mode radius")?;
        if let Some(direction) = &collection.direction {
            reader.read::<Angle>(&direction.h)?;
            reader.read::<Angle>(&direction.v)?;
        }
    }
    for filter in &d.filter {
        if let Some(arm) = &filter.arm {
            reader.one_of(arm, &arms)?;
        }
        if let Some(shape) = &filter.shape {
            reader.one_of(shape, &[("gaussian", ()), ("rectangular", ())])?;
        }
        reader.positive(filter.width.as_ref(), "the filter width")?;
        if let Some(centre) = &filter.centre {
            reader.wavelength(centre, "the filter centre")?;
        }
    }
    for compensator in &d.compensator {
        if let Some(arm) = &compensator.arm {
            reader.one_of(arm, &[("a", ()), ("b", ()), ("both", ()), ("pump", ())])?;
        }
        reader.positive(compensator.length.as_ref(), "the compensator length")?;
        reader.maybe::<Angle>(compensator.roll.as_ref())?;
        reader.turn(compensator.tilt.as_ref(), "the compensator's tilt")?;
    }
    Ok(())
}

/// `"matched"`, or a table of `angle` and `phase`.
fn check_polarization(reader: &Reader<'_>, d: &Description) -> Result<(), SetupError> {
    let Some(pump) = &d.pump else { return Ok(()) };
    let Some(value) = &pump.get_ref().polarization else { return Ok(()) };
    let is_angle = |v: &toml::Value| v.as_str().is_some_and(|text| text.parse::<Angle>().is_ok());
    let fine = match value.get_ref() {
        toml::Value::String(word) => word == "matched",
        toml::Value::Table(table) => {
            table.iter().all(|(k, v)| matches!(k.as_str(), "angle" | "phase") && is_angle(v))
        }
        _ => false,
    };
    let message = format!(
        "`{}` is no pump polarization; write polarization = \"matched\" or {{ angle = \"45 deg\", phase = \"0 deg\" }}",
        value.get_ref()
    );
    if fine { Ok(()) } else { Err(reader.fault(value, &message)) }
}

//! A description becomes a [`Setup`]: every text is read, every default filled in, every limit checked.

use std::str::FromStr;
use std::sync::Arc;

use toml::Spanned;

use super::arms;
use super::checks::check_unused;
use super::description::{self, Description, Text};
use super::document::{Document, JobError};
use super::limits;
use super::setup::{GivenCut, Needs, Setup, SetupError, Signals, Stage};
use crate::frame::{Cut, Orientation, Reversal};
use crate::matching::{Interaction, Process, ProcessError, Target};
use crate::material::{Catalogue, Material, Reach};
use crate::optics::Crystal;
use crate::quantity::{Angle, Length, QuantityError, Temperature, Wavelength};

/// Reads a description in the words of its document.
pub(super) struct Reader<'a> {
    pub(super) document: &'a Document,
}

impl Reader<'_> {
    pub(super) fn fault<T>(&self, place: &Spanned<T>, message: &str) -> SetupError {
        self.document.fault(place.span(), message).into()
    }

    pub(super) fn read<T: FromStr<Err = QuantityError>>(&self, text: &Text) -> Result<T, SetupError> {
        text.get_ref().parse().map_err(|error: QuantityError| {
            let message = match &error {
                QuantityError::NoUnit { text: number, kind, units, first } if text.get_ref().is_bare() => {
                    format!("`{number}` has no unit; {kind} needs one of {units}: write \"{number} {first}\", in quotes")
                }
                other => other.to_string(),
            };
            self.fault(text, &message)
        })
    }

    pub(super) fn maybe<T: FromStr<Err = QuantityError>>(
        &self,
        text: Option<&Text>,
    ) -> Result<Option<T>, SetupError> {
        text.map(|t| self.read(t)).transpose()
    }

    pub(super) fn positive(&self, text: Option<&Text>, what: &str) -> Result<Option<Length>, SetupError> {
        let length = self.maybe::<Length>(text)?;
        match (text, length) {
            (Some(text), Some(length)) => {
                self.within(text, limits::positive(length, what, text.get_ref()))?;
                Ok(Some(length))
            }
            _ => Ok(None),
        }
    }

    /// A limit that a value at this place breaks.
    pub(super) fn within<T>(&self, place: &Spanned<T>, limit: limits::Limit) -> Result<(), SetupError> {
        limit.map_err(|why| self.fault(place, &why))
    }

    pub(super) fn wavelength(&self, text: &Text, what: &str) -> Result<Wavelength, SetupError> {
        let wavelength: Wavelength = self.read(text)?;
        self.within(text, limits::wavelength(wavelength, what, text.get_ref()))?;
        Ok(wavelength)
    }

    /// A turn of a crystal; beyond 80 deg the face is edge-on to the beam.
    pub(super) fn turn(&self, text: Option<&Text>, what: &str) -> Result<Angle, SetupError> {
        let Some(text) = text else { return Ok(Angle::default()) };
        let angle: Angle = self.read(text)?;
        self.within(text, limits::turn(angle, what))?;
        Ok(angle)
    }

    pub(super) fn one_of<T: Copy>(&self, text: &Text, choices: &[(&str, T)]) -> Result<T, SetupError> {
        let found = choices.iter().find(|(name, _)| *name == &**text.get_ref());
        found.map(|(_, value)| *value).ok_or_else(|| {
            // other spellings of a choice are accepted but not advertised
            let advertised = choices.iter().filter(|(name, _)| !matches!(*name, "ii" | "i" | "2" | "1"));
            let names: Vec<_> = advertised.map(|(name, _)| format!("`{name}`")).collect();
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
    let screen = reader
        .positive(description.screen.as_ref().and_then(|s| s.distance.as_ref()), "the screen distance")?
        .unwrap_or(Length::metres(1.0));
    let bench = arms::bench(&reader, description, screen)?;
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
        screen,
        bench,
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
        if let (Some(name), true) =
            (&written.get_ref().name, setup.crystals.iter().any(|c| c.name == crystal.name))
        {
            return Err(reader.fault(name, "another crystal has this name; keys could not tell them apart"));
        }
        setup.crystals.push(crystal);
        setup.cut.push(cut);
    }
    setup.settle(needs)?;
    if let Some(text) = description.pump.as_ref().and_then(|pump| pump.get_ref().spectrum.as_ref()) {
        reader.within(text, setup.check_spectrum())?;
    }
    setup.bench.compensators = arms::compensators(&reader, description, &setup.crystals, catalogue)?;
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
                ("ii", Interaction::Two),
                ("i", Interaction::One),
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
        reader.within(text, limits::photon(wavelength, pump))?;
        let Some(partner) = wavelength.partner(pump) else { continue };
        let signal = if emission.idler.is_some() { partner } else { wavelength };
        if all.iter().all(|other: &Wavelength| (other.si() / signal.si() - 1.0).abs() > 1e-9) {
            all.push(signal);
        }
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
    crystal.name = c.name.as_ref().map_or((index + 1).to_string(), |n| n.get_ref().to_string());
    for text in c.temperature.iter().chain(&c.reference_temperature) {
        reader.within(text, limits::temperature(reader.read(text)?))?;
    }
    if let Some(temperature) = reader.maybe::<Temperature>(c.temperature.as_ref())? {
        crystal.temperature = temperature;
    }
    if let Some(reference) = reader.maybe(c.reference_temperature.as_ref())? {
        crystal.reference_temperature = reference;
    }
    crystal.length =
        reader.positive(c.length.as_ref(), "the crystal length")?.unwrap_or(Length::metres(1e-3));
    crystal.poling = reader.positive(c.poling.as_ref(), "the poling period")?;
    crystal.expands = c.thermal_expansion.unwrap_or(true);
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
    reader.within(written, limits::facing(&crystal.orientation))?;
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
pub(super) fn material(
    reader: &Reader<'_>,
    c: &description::Crystal,
    catalogue: &Catalogue,
) -> Result<(Arc<Material>, Option<String>), SetupError> {
    let Some(text) = &c.material else {
        return Err(JobError("no material: pass --material, for example --material bbo, or write crystal.material in the job file".into()).into());
    };
    let (id, set) = match text.get_ref().split_once(':') {
        Some((id, set)) => (id, Some(set.to_string())),
        None => (&**text.get_ref(), None),
    };
    let material = catalogue.shared(id).map_err(|e| reader.fault(text, &e.to_string()))?;
    let dataset = match (&c.dataset, set) {
        (Some(_), Some(_)) => {
            return Err(
                reader.fault(text, "the data set is named twice; write it in `dataset` or after the colon")
            );
        }
        (Some(set), None) => Some(set.get_ref().to_string()),
        (None, set) => set,
    };
    Ok((material, dataset))
}

fn given_cut(
    reader: &Reader<'_>,
    c: &description::Crystal,
    crystal: &mut Crystal,
) -> Result<GivenCut, SetupError> {
    let Some(written) = &c.cut else { return Ok(GivenCut::default()) };
    let cut = written.get_ref();
    let theta = reader.maybe::<Angle>(cut.theta.as_ref())?;
    if let (Some(text), Some(theta)) = (&cut.theta, theta) {
        reader.within(text, limits::theta(theta))?;
    }
    let angles = [&cut.crossing, &cut.half_angle, &cut.separation].map(Option::as_ref);
    let flags = [(cut.collinear, Target::Collinear), (cut.beamlike, Target::Beamlike)];
    let targets = targets(reader.document, angles, &flags)?;
    if targets.len() + usize::from(theta.is_some()) > 1 {
        return Err(reader.fault(written, "give theta or one target for the cut, not both"));
    }
    let phi = reader.maybe::<Angle>(cut.phi.as_ref())?;
    crystal.cut = Cut { theta: theta.unwrap_or_default(), phi: phi.unwrap_or_default() };
    Ok(GivenCut { theta: theta.is_some(), phi: phi.is_some(), target: targets.first().copied() })
}

/// The targets that are named: a crossing, half angle or separation, and what is said by a flag.
pub(super) fn targets(
    document: &Document,
    [crossing, half_angle, separation]: [Option<&Text>; 3],
    flags: &[(Option<bool>, Target)],
) -> Result<Vec<Target>, JobError> {
    type ByAngle = fn(f64) -> Target;
    let by_angle = [
        (crossing, Target::Crossing as ByAngle, 60.0),
        (half_angle, Target::HalfAngle, 60.0),
        (separation, Target::Separation, 120.0),
    ];
    let mut all = Vec::new();
    for (text, target, most) in by_angle {
        let Some(text) = text else { continue };
        let angle = target_angle(text.get_ref(), most).map_err(|why| document.fault(text.span(), &why))?;
        all.push(target(angle));
    }
    all.extend(flags.iter().filter(|(flag, _)| *flag == Some(true)).map(|(_, target)| *target));
    Ok(all)
}

/// An angle that a target may have, in radians: above 0 and below `most` degrees.
///
/// # Errors
/// What is wrong with it.
pub fn target_angle(text: &str, most: f64) -> Result<f64, String> {
    let angle: Angle = text.parse().map_err(|e: QuantityError| e.to_string())?;
    limits::target(angle, most).map(|()| angle.si())
}

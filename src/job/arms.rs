//! The pump's spread, collection, filters and compensators of a description, in SI.

use std::sync::Arc;

use toml::Spanned;

use super::checks::{check, either, positive};
use super::curve_file::{self, Curve};
use super::description::{self, Description, Text};
use super::document::JobError;
use super::resolve::{Reader, material};
use super::setup::SetupError;
use crate::frame::{Cut, Direction};
use crate::material::{Catalogue, Material, Reach};
use crate::optics::Crystal;
use crate::pairs::{
    Bench, Collection, Compensator, Filter, Line, Opening, Place, PumpPolarization, Shape, Trace,
};
use crate::quantity::{Angle, Duration, Frequency, Length};

/// All but the compensators, which take from the crystals what they leave open.
pub(super) fn bench(reader: &Reader<'_>, d: &Description, screen: Length) -> Result<Bench, SetupError> {
    let mut bench = Bench { gaps: gaps(reader, d)?, ..Bench::default() };
    if let Some(pump) = &d.pump {
        let pump = pump.get_ref();
        bench.waist = reader.positive(pump.waist.as_ref(), "the waist")?;
        bench.line = line(reader, pump)?;
        bench.polarization = polarization(reader, pump.polarization.as_ref())?;
    }
    for collection in &d.collection {
        collect(reader, collection, screen, &mut bench.collection)?;
    }
    for written in &d.filter {
        let filter = filter(reader, written)?;
        arms(reader, written.arm.as_ref())?.iter().for_each(|arm| bench.filters[*arm].push(filter.clone()));
    }
    Ok(bench)
}

/// The curve in a file that a value names.
fn curve(reader: &Reader<'_>, text: &Text, curve: Curve) -> Result<Arc<Trace>, SetupError> {
    let name = &**text.get_ref();
    let content = reader.document.attachment(name).ok_or_else(|| {
        reader.fault(text, &format!("the file {name} was not read; attach its text to the document"))
    })?;
    let trace =
        curve_file::read(content, curve).map_err(|why| reader.fault(text, &format!("{name}: {why}")))?;
    Ok(Arc::new(trace))
}

fn gaps(reader: &Reader<'_>, d: &Description) -> Result<Vec<Length>, SetupError> {
    let gap = |crystal: &Spanned<description::Crystal>| {
        let Some(text) = &crystal.get_ref().gap_before else { return Ok(Length::default()) };
        let gap: Length = reader.read(text)?;
        if gap.si() < 0.0 {
            return Err(reader.fault(text, &format!("the gap cannot be negative, as {} is", text.get_ref())));
        }
        Ok(gap)
    };
    d.crystal.iter().map(gap).collect()
}

fn line(reader: &Reader<'_>, pump: &description::Pump) -> Result<Line, SetupError> {
    positive::<Duration>(reader, pump.pulse.as_ref(), "the pulse", Duration::si)?;
    if let Some(text) = &pump.linewidth {
        let size = either::<Length, Frequency>(text, Length::si, Frequency::si);
        check(reader, text, size, "the linewidth", "a linewidth such as `0.1 nm` or `200 GHz`")?;
    }
    if let Some(text) = &pump.spectrum {
        if let Some(other) = pump.linewidth.as_ref().or(pump.pulse.as_ref()) {
            return Err(reader.fault(other, "the spectrum of the pump is in a file already: leave out the linewidth or pulse, or the file"));
        }
        return Ok(Line::Measured(curve(reader, text, Curve::Intensity)?));
    }
    match (&pump.linewidth, &pump.pulse) {
        (Some(_), Some(pulse)) => Err(reader.fault(
            pulse,
            "give the linewidth or the pulse, not both: a pulse of this duration is taken to be transform-limited",
        )),
        (Some(text), None) => Ok(match text.get_ref().parse::<Length>() {
            Ok(width) => Line::Width(width),
            Err(_) => Line::Band(reader.read(text)?),
        }),
        (None, Some(text)) => Ok(Line::Pulse(reader.read(text)?)),
        (None, None) => Ok(Line::Monochromatic),
    }
}

/// `"matched"`, or a table of `angle` and `phase`.
fn polarization(
    reader: &Reader<'_>,
    value: Option<&Spanned<toml::Value>>,
) -> Result<PumpPolarization, SetupError> {
    let Some(value) = value else { return Ok(PumpPolarization::Matched) };
    let angle = |v: &toml::Value| v.as_str().and_then(|text| text.parse::<Angle>().ok());
    let found = match value.get_ref() {
        toml::Value::String(word) if word == "matched" => Some(PumpPolarization::Matched),
        toml::Value::Table(table) => {
            let known =
                table.iter().all(|(k, v)| matches!(k.as_str(), "angle" | "phase") && angle(v).is_some());
            let of = |key: &str| table.get(key).and_then(angle).unwrap_or_default();
            known.then(|| PumpPolarization::Given { angle: of("angle"), phase: of("phase") })
        }
        _ => None,
    };
    found.ok_or_else(|| {
        let message = format!(
            "`{}` is no pump polarization; write polarization = \"matched\" or {{ angle = \"45 deg\", phase = \"0 deg\" }}",
            value.get_ref()
        );
        reader.fault(value, &message)
    })
}

/// Indices of the arms that a key names: both where it says nothing.
fn arms(reader: &Reader<'_>, arm: Option<&Text>) -> Result<&'static [usize], SetupError> {
    let choices: [(&str, &'static [usize]); 3] = [("a", &[0]), ("b", &[1]), ("both", &[0, 1])];
    arm.map_or(Ok(&[0, 1]), |text| reader.one_of(text, &choices))
}

fn collect(
    reader: &Reader<'_>,
    written: &description::Collection,
    screen: Length,
    arms_of: &mut [Collection; 2],
) -> Result<(), SetupError> {
    let named = arms(reader, written.arm.as_ref())?;
    let opening = opening(reader, written, screen)?;
    let direction = match &written.direction {
        Some(direction) => {
            let (h, v): (Angle, Angle) = (reader.read(&direction.h)?, reader.read(&direction.v)?);
            if named.len() > 1 {
                let message = "a direction belongs to one arm: write arm = \"a\" or arm = \"b\" beside it";
                return Err(reader.fault(&direction.h, message));
            }
            for (text, angle) in [(&direction.h, h), (&direction.v, v)] {
                if angle.degrees().abs() > 60.0 {
                    let message = format!("{angle} lies outside the search region of 60 deg about the pump");
                    return Err(reader.fault(text, &message));
                }
            }
            Some(Direction::from_angles(h, v))
        }
        None => None,
    };
    for arm in named {
        let collection = &mut arms_of[*arm];
        collection.opening = opening.unwrap_or(collection.opening);
        collection.direction = direction.or(collection.direction);
    }
    Ok(())
}

fn opening(
    reader: &Reader<'_>,
    written: &description::Collection,
    screen: Length,
) -> Result<Option<Opening>, SetupError> {
    if let Some(iris) = &written.iris {
        let size = either::<Angle, Length>(iris, Angle::si, Length::si);
        let kinds = "an iris: its full angle, `0.2 deg`, or its diameter at the screen, `3 mm`";
        check(reader, iris, size, "the iris", kinds)?;
    }
    let fibre = reader.positive(written.fibre.as_ref(), "the fibre's mode radius")?;
    match (&written.iris, fibre, &written.fibre) {
        (Some(_), Some(_), Some(text)) => {
            Err(reader.fault(text, "an arm has an iris or a fibre, not both; leave one out"))
        }
        (Some(iris), ..) => {
            let full = match iris.get_ref().parse::<Angle>() {
                Ok(angle) => angle,
                Err(_) => {
                    let diameter: Length = reader.read(iris)?;
                    Angle::radians(2.0 * (0.5 * diameter.si() / screen.si()).atan())
                }
            };
            if full.degrees() > 60.0 {
                return Err(
                    reader.fault(iris, "an iris wider than 60 deg sees more than a cone; make it smaller")
                );
            }
            Ok(Some(Opening::Iris(full)))
        }
        (None, Some(radius), _) => Ok(Some(Opening::Fibre(radius))),
        _ => Ok(None),
    }
}

fn filter(reader: &Reader<'_>, written: &description::Filter) -> Result<Filter, SetupError> {
    arms(reader, written.arm.as_ref())?;
    let boxed = |text| reader.one_of(text, &[("gaussian", false), ("rectangular", true)]);
    let boxed = written.shape.as_ref().map_or(Ok(false), boxed)?;
    let shape = if boxed { Shape::Rectangular } else { Shape::Gaussian };
    let width = reader.positive(written.width.as_ref(), "the filter width")?;
    let centre =
        written.centre.as_ref().map(|text| reader.wavelength(text, "the filter centre")).transpose()?;
    if let Some(file) = &written.file {
        if let Some(other) = written.width.as_ref().or(written.shape.as_ref()) {
            return Err(reader.fault(other, "this filter has a file, which says how wide it is and of which shape; leave out width and shape, or the file"));
        }
        let measured = Filter::measured(curve(reader, file, Curve::Transmission)?);
        return Ok(Filter { centre: centre.or(measured.centre), ..measured });
    }
    width.map(|width| Filter { shape, width, centre }).ok_or_else(|| {
        let place = written.centre.as_ref().or(written.shape.as_ref()).or(written.arm.as_ref());
        let message = "a filter needs a width, its FWHM, such as width = \"3 nm\", or a file";
        place.map_or_else(|| JobError(message.into()).into(), |text| reader.fault(text, message))
    })
}

/// The compensators; what they leave open they take from the first crystal.
pub(super) fn compensators(
    reader: &Reader<'_>,
    d: &Description,
    crystals: &[Crystal],
    catalogue: &Catalogue,
) -> Result<Vec<Compensator>, SetupError> {
    d.compensator.iter().map(|written| compensator(reader, written, &crystals[0], catalogue)).collect()
}

fn compensator(
    reader: &Reader<'_>,
    written: &description::Compensator,
    first: &Crystal,
    catalogue: &Catalogue,
) -> Result<Compensator, SetupError> {
    let places = [("a", Place::A), ("b", Place::B), ("both", Place::Both), ("pump", Place::Pump)];
    let place = written.arm.as_ref().map_or(Ok(Place::Both), |text| reader.one_of(text, &places))?;
    let mut plate = plate(reader, written, first, catalogue)?;
    let length = reader.positive(written.length.as_ref(), "the compensator length")?;
    plate.length = length.ok_or_else(|| {
        let place = written.material.as_ref().or(written.arm.as_ref());
        let message =
            "a compensator needs a length, such as length = \"1 mm\"; `twincone compensate` proposes one";
        place.map_or_else(|| JobError(message.into()).into(), |text| reader.fault(text, message))
    })?;
    plate.orientation.roll = reader.maybe(written.roll.as_ref())?.unwrap_or_default();
    plate.orientation.tilt = reader.turn(written.tilt.as_ref(), "the compensator's tilt")?;
    if let Some(cut) = &written.cut {
        plate.cut = self::cut(reader, cut, plate.cut)?;
    }
    Ok(Compensator { place, plate, half_wave: written.half_wave.unwrap_or(false) })
}

fn plate(
    reader: &Reader<'_>,
    written: &description::Compensator,
    first: &Crystal,
    catalogue: &Catalogue,
) -> Result<Crystal, SetupError> {
    let mut plate = if written.material.is_none() && written.dataset.is_none() {
        let untilted =
            Crystal { orientation: Default::default(), reversal: Default::default(), ..first.clone() };
        Crystal { poling: None, ..untilted }
    } else {
        let own = Text::clone;
        let named = description::Crystal {
            material: written.material.as_ref().map(own),
            dataset: written.dataset.as_ref().map(own),
            ..Default::default()
        };
        let (material, dataset): (Arc<Material>, Option<String>) = match &named.material {
            Some(_) => material(reader, &named, catalogue)?,
            None => (first.material.clone(), named.dataset.as_ref().map(|set| set.get_ref().to_string())),
        };
        let fault = |message: &str| {
            let place = named.dataset.as_ref().or(named.material.as_ref());
            place.map_or_else(|| JobError(message.into()).into(), |text| reader.fault(text, message))
        };
        let mut plate = Crystal::new(material, dataset.as_deref()).map_err(|e| fault(&e.to_string()))?;
        plate.cut = first.cut;
        plate
    };
    if first.reach == Reach::Extrapolate {
        plate.reach = Reach::Extrapolate;
    }
    Ok(plate)
}

fn cut(reader: &Reader<'_>, written: &description::Cut, open: Cut) -> Result<Cut, SetupError> {
    if let Some(text) =
        written.crossing.as_ref().or(written.half_angle.as_ref()).or(written.separation.as_ref())
    {
        return Err(reader.fault(text, "a compensator emits nothing: give its cut as theta and phi"));
    }
    let theta = reader.maybe::<Angle>(written.theta.as_ref())?;
    if let (Some(text), Some(theta)) = (&written.theta, theta)
        && !(0.0..=180.0).contains(&theta.degrees())
    {
        return Err(reader.fault(text, &format!("theta must lie within 0 deg to 180 deg, not {theta}")));
    }
    let phi = reader.maybe::<Angle>(written.phi.as_ref())?;
    Ok(Cut { theta: theta.unwrap_or(open.theta), phi: phi.unwrap_or(open.phi) })
}

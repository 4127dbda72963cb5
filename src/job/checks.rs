//! Values that no command reads yet: a mistake in them is found all the same.

use super::description::Description;
use super::resolve::Reader;
use super::setup::SetupError;
use crate::quantity::{Angle, Duration, Frequency, Length, Power};

/// Reads the values that no command uses yet, so that a mistake in them is found at once.
pub(super) fn check_unused(reader: &Reader<'_>, d: &Description) -> Result<(), SetupError> {
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

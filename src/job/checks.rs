//! Values that no command reads yet: a mistake in them is found all the same.

use std::str::FromStr;

use super::description::{Description, Text};
use super::resolve::Reader;
use super::setup::SetupError;
use crate::quantity::{Angle, Duration, Frequency, Length, Power, QuantityError};

/// Reads the values that no command uses yet, so that a mistake in them is found at once.
pub(super) fn check_unused(reader: &Reader<'_>, d: &Description) -> Result<(), SetupError> {
    if let Some(pump) = &d.pump {
        let pump = pump.get_ref();
        reader.positive(pump.waist.as_ref(), "the waist")?;
        positive::<Power>(reader, pump.power.as_ref(), "the power", Power::si)?;
        positive::<Duration>(reader, pump.pulse.as_ref(), "the pulse", Duration::si)?;
        check_polarization(reader, d)?;
        if let Some(text) = &pump.linewidth {
            let size = either::<Length, Frequency>(text, Length::si, Frequency::si);
            check(reader, text, size, "the linewidth", "a linewidth such as `0.1 nm` or `200 GHz`")?;
        }
    }
    let arms = [("a", ()), ("b", ()), ("both", ())];
    for collection in &d.collection {
        if let Some(arm) = &collection.arm {
            reader.one_of(arm, &arms)?;
        }
        if let Some(iris) = &collection.iris {
            let size = either::<Angle, Length>(iris, Angle::si, Length::si);
            let kinds = "an iris: its full angle, `0.2 deg`, or its diameter at the screen, `3 mm`";
            check(reader, iris, size, "the iris", kinds)?;
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

/// A quantity of either kind in SI; `None` where the text is neither.
fn either<A: FromStr, B: FromStr>(text: &Text, a: fn(A) -> f64, b: fn(B) -> f64) -> Option<f64> {
    text.get_ref().parse::<A>().map(a).or_else(|_| text.get_ref().parse::<B>().map(b)).ok()
}

fn check(
    reader: &Reader<'_>,
    text: &Text,
    size: Option<f64>,
    what: &str,
    kinds: &str,
) -> Result<(), SetupError> {
    match size {
        None => Err(reader.fault(text, &format!("`{}` is not {kinds}", text.get_ref()))),
        Some(size) if size <= 0.0 => {
            Err(reader.fault(text, &format!("{what} must be positive, not {}", text.get_ref())))
        }
        Some(_) => Ok(()),
    }
}

fn positive<T: FromStr<Err = QuantityError>>(
    reader: &Reader<'_>,
    text: Option<&Text>,
    what: &str,
    si: fn(T) -> f64,
) -> Result<(), SetupError> {
    let Some(text) = text else { return Ok(()) };
    check(reader, text, Some(si(reader.read::<T>(text)?)), what, what)
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

//! Values that no command reads yet: a mistake in them is found all the same.

use std::str::FromStr;

use super::description::{Description, Text};
use super::resolve::Reader;
use super::setup::SetupError;
use crate::quantity::{Power, QuantityError};

/// Reads the values that no command uses yet, so that a mistake in them is found at once.
pub(super) fn check_unused(reader: &Reader<'_>, d: &Description) -> Result<(), SetupError> {
    let power = d.pump.as_ref().and_then(|pump| pump.get_ref().power.as_ref());
    positive::<Power>(reader, power, "the power", Power::si)
}

/// A quantity of either kind in SI; `None` where the text is neither.
pub(super) fn either<A: FromStr, B: FromStr>(text: &Text, a: fn(A) -> f64, b: fn(B) -> f64) -> Option<f64> {
    text.get_ref().parse::<A>().map(a).or_else(|_| text.get_ref().parse::<B>().map(b)).ok()
}

/// A size that was read, which must be positive.
pub(super) fn check(
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

/// A quantity, which must be positive.
pub(super) fn positive<T: FromStr<Err = QuantityError>>(
    reader: &Reader<'_>,
    text: Option<&Text>,
    what: &str,
    si: fn(T) -> f64,
) -> Result<(), SetupError> {
    let Some(text) = text else { return Ok(()) };
    check(reader, text, Some(si(reader.read::<T>(text)?)), what, what)
}

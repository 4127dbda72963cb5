//! "What the other data sets give", as a line.

use crate::matching::Opinion;

use super::angles::fixed;

/// One line: each other set's number, the range, and the sets that cannot serve these wavelengths.
pub(super) fn line(
    what: &str,
    own: Option<f64>,
    opinions: &[(String, Result<Option<f64>, String>)],
    decimals: usize,
) -> String {
    if opinions.is_empty() {
        return format!("Other data sets: none, so nothing says how sure {what} is.");
    }
    let told: Vec<String> = opinions
        .iter()
        .filter_map(|(id, answer)| answer.as_ref().ok().map(|value| (id, value)))
        .map(|(id, value)| {
            value.map_or_else(|| format!("{id} none"), |v| format!("{id} {}", fixed(v, decimals)))
        })
        .collect();
    let left_out: Vec<String> = opinions
        .iter()
        .filter_map(|(id, answer)| answer.as_ref().err().map(|why| format!("{id} ({why})")))
        .collect();
    let values = opinions.iter().filter_map(|(_, answer)| answer.as_ref().ok().copied().flatten());
    let all: Vec<f64> = values.chain(own).collect();
    let mut text = match told.as_slice() {
        [] => format!("Other data sets for {what}: none covers these wavelengths"),
        _ => format!("Other data sets for {what}: {}", told.join(", ")),
    };
    if all.len() > 1 {
        let (low, high) =
            all.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(*v), h.max(*v)));
        text.push_str(&format!("; with this one {} to {}", fixed(low, decimals), fixed(high, decimals)));
    }
    if !left_out.is_empty() {
        text.push_str(&format!("; left out: {}", left_out.join(", ")));
    }
    text.push('.');
    text
}

/// Opinions as numbers in the unit of the line; the reason for leaving one out in a few words.
pub(super) fn numbers<T>(
    opinions: &[Opinion<T>],
    number: impl Fn(&T) -> Option<f64>,
) -> Vec<(String, Result<Option<f64>, String>)> {
    let name = |o: &Opinion<T>| match o.extrapolated && o.answer.is_ok() {
        true => format!("{} (extrapolated)", o.dataset),
        false => o.dataset.clone(),
    };
    opinions.iter().map(|o| (name(o), o.answer.as_ref().map(&number).map_err(reason))).collect()
}

pub(super) fn reason(error: &crate::material::MaterialError) -> String {
    use crate::material::MaterialError::{NoThermoOptics, OutOfRange, TemperatureOutOfRange};
    match error {
        OutOfRange { from, to, .. } => format!("valid {from} to {to}"),
        NoThermoOptics { .. } => "no thermo-optic terms".into(),
        TemperatureOutOfRange { .. } => "temperature out of range".into(),
        other => other.to_string(),
    }
}

//! What follows for the order: which tolerance to pay for, and whether to order the cut a little high.

use super::bench::Bench;
use super::contribution::{Contribution, Origin};
use super::errors::{Cause, Errors};
use super::samples::{Chances, Draw, Sample, chances, sample};
use crate::material::MaterialError;
use crate::optics::Indices;

/// Advice in numbers.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Advice {
    /// The error that asks for the largest turn, and that turn, radians.
    pub most_turn: Option<(Cause, f64)>,
    /// The error that leaves most after turning, and what it leaves, radians.
    pub most_left: Option<(Cause, f64)>,
    /// Change of theta, radians, that leaves one sample in a hundred without light before turning; `None` where fewer
    /// are dark as ordered.
    pub shift_theta: Option<f64>,
}

/// What contributions and samples advise.
///
/// # Errors
/// Indices that are not to be had.
pub fn advise(
    bench: &Bench,
    contributions: &[Contribution],
    samples: &[Sample],
) -> Result<Advice, MaterialError> {
    let worst = |of: fn(&super::End) -> Option<f64>| {
        let each = contributions.iter().filter_map(|c| match &c.origin {
            Origin::Cause(cause) => {
                let ends = c.ends.iter().filter_map(|end| end.as_ref().ok().and_then(of));
                ends.map(f64::abs).reduce(f64::max).map(|value| (*cause, value))
            }
            _ => None,
        });
        each.reduce(|a, b| if b.1 > a.1 { b } else { a })
    };
    Ok(Advice {
        most_turn: worst(|end| end.turn),
        most_left: worst(|end| end.left_over),
        shift_theta: brighter(bench, samples)?,
    })
}

/// The change of theta that gives light to all but one sample in a hundred. Delta_k at its least changes almost evenly
/// with theta, so the largest shortfalls divided by that slope say it.
fn brighter(bench: &Bench, samples: &[Sample]) -> Result<Option<f64>, MaterialError> {
    const STEP: f64 = 1e-4;
    const DARK: f64 = 0.01;
    let mut short: Vec<f64> = samples.iter().filter_map(|s| s.shortfall).collect();
    short.sort_by(f64::total_cmp);
    let Some(worst) = short.get(((1.0 - DARK) * short.len() as f64) as usize).filter(|s| **s > 0.0) else {
        return Ok(None);
    };
    let mut indices = Indices::default();
    let mut least = |theta: f64| {
        let stand = bench.stand(&Errors::only(Cause::Theta, theta), bench.crystal.dataset, &mut indices)?;
        Ok(stand.and_then(|s| bench.shortfall(&s.turned(0.0))))
    };
    let slope = least(STEP)?.zip(least(-STEP)?).map(|(a, b)| (a - b) / (2.0 * STEP));
    Ok(slope.filter(|s| *s != 0.0).map(|slope| -worst / slope))
}

/// What the chances would be with theta ordered as advised, the turn within `limit` (radians), where that leaves fewer
/// samples dark than `ordered` does; at most ten thousand samples tell.
#[must_use]
pub fn ordered_otherwise(
    bench: &Bench,
    draw: &Draw,
    advice: &Advice,
    ordered: &Chances,
    limit: f64,
) -> Option<Chances> {
    const ENOUGH: usize = 10_000;
    // another theta may lie where no such light is at all
    let bench = bench.with_theta(bench.crystal.cut.theta.si() + advice.shift_theta?).ok()?;
    let draw = Draw { count: draw.count.min(ENOUGH), ..draw.clone() };
    let others = chances(&sample(&bench, &draw).ok()?, limit);
    (others.dark < ordered.dark).then_some(others)
}

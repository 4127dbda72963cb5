//! All errors together: random combinations, a stream of numbers for each, so that the samples do not depend on the
//! number of threads.

use std::f64::consts::TAU;

use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use rayon::prelude::*;

use super::bench::Bench;
use super::errors::{CAUSES, Errors};
use crate::material::MaterialError;
use crate::optics::Indices;

/// How a stated error is meant.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Spread {
    /// A limit: every value up to it is as likely.
    Limit,
    /// One standard deviation of a normal distribution.
    Deviation,
}

/// What to draw.
#[derive(Debug, Clone)]
pub struct Draw {
    /// Stated errors.
    pub errors: Errors,
    /// How they are meant.
    pub spread: Spread,
    /// How many samples.
    pub count: usize,
    /// Of the random numbers.
    pub seed: u64,
    /// Data sets to choose from, by index; each as likely.
    pub datasets: Vec<usize>,
}

/// One combination.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// What is off.
    pub off: Errors,
    /// Which data set the crystal follows.
    pub dataset: usize,
    /// The angle that the target is about, radians; `None` where there is none.
    pub angle: Option<f64>,
    /// Least Delta_k in any direction, rad/m: no light where positive or missing.
    pub shortfall: Option<f64>,
    /// Turn from the setting that brings the target back, radians.
    pub turn: Option<f64>,
}

impl Sample {
    /// Whether some direction is phase matched before any turning.
    #[must_use]
    pub fn has_light(&self) -> bool {
        self.shortfall.is_some_and(|s| s <= 0.0)
    }
}

/// Draws and computes all samples, on the threads of the current pool.
///
/// # Errors
/// The first sample for which indices are not to be had.
pub fn sample(bench: &Bench, draw: &Draw) -> Result<Vec<Sample>, MaterialError> {
    (0..draw.count)
        .into_par_iter()
        .with_min_len(64)
        .map_init(Indices::default, |indices, number| {
            let (off, dataset) = drawn(draw, number as u64);
            one(bench, off, dataset, indices)
        })
        .collect()
}

/// Deviations and data set of one sample; they depend on seed and number alone.
fn drawn(draw: &Draw, number: u64) -> (Errors, usize) {
    let mut stream = ChaCha8Rng::seed_from_u64(draw.seed);
    stream.set_stream(number);
    let mut off = Errors::default();
    for (value, cause) in off.0.iter_mut().zip(CAUSES) {
        let (a, b) = (uniform(&mut stream), uniform(&mut stream));
        let unit = match draw.spread {
            Spread::Limit => 2.0 * a - 1.0,
            // Box and Muller, Ann. Math. Stat. 29, 610 (1958)
            Spread::Deviation => (-2.0 * (1.0 - a).ln()).sqrt() * (TAU * b).cos(),
        };
        *value = unit * draw.errors.of(cause);
    }
    let which = (uniform(&mut stream) * draw.datasets.len() as f64) as usize;
    (off, draw.datasets[which.min(draw.datasets.len() - 1)])
}

/// In [0, 1), on a grid of 2^-53.
fn uniform(stream: &mut ChaCha8Rng) -> f64 {
    (stream.next_u64() >> 11) as f64 / (1u64 << 53) as f64
}

fn one(bench: &Bench, off: Errors, dataset: usize, indices: &mut Indices) -> Result<Sample, MaterialError> {
    let nothing = Sample { off, dataset, angle: None, shortfall: None, turn: None };
    let Some(stand) = bench.stand(&off, dataset, indices)? else { return Ok(nothing) };
    let emission = stand.turned(0.0);
    let angle = bench.angle(&emission);
    // where the target's angle exists there is light, and the least Delta_k is below zero
    let shortfall = bench.shortfall(&emission);
    Ok(Sample { angle, shortfall, turn: bench.repair(&stand), ..nothing })
}

/// What the samples say together.
#[derive(Debug, Clone, PartialEq)]
pub struct Chances {
    /// How many.
    pub count: usize,
    /// Percentiles 2.5, 16, 50, 84 and 97.5 of the target's angle over the samples that have one, radians.
    pub angle: Option<[f64; 5]>,
    /// Share of samples whose target's angle exists.
    pub has_angle: f64,
    /// Share of samples without any light before turning.
    pub dark: f64,
    /// Share of samples that a turn within the limit takes to the target.
    pub reached: f64,
    /// Percentiles 0.5, 2.5, 50, 97.5 and 99.5 of the turn that reaches the target, radians.
    pub turn: Option<[f64; 5]>,
}

/// Sums samples up; `limit` is the largest turn from the setting, radians.
#[must_use]
pub fn chances(samples: &[Sample], limit: f64) -> Chances {
    let share = |count: usize| count as f64 / samples.len().max(1) as f64;
    let angles: Vec<f64> = samples.iter().filter_map(|s| s.angle).collect();
    let turns: Vec<f64> = samples.iter().filter_map(|s| s.turn).collect();
    Chances {
        count: samples.len(),
        has_angle: share(angles.len()),
        dark: share(samples.iter().filter(|s| !s.has_light()).count()),
        reached: share(turns.iter().filter(|t| t.abs() <= limit).count()),
        angle: percentiles(angles, [2.5, 16.0, 50.0, 84.0, 97.5]),
        turn: percentiles(turns, [0.5, 2.5, 50.0, 97.5, 99.5]),
    }
}

/// Percentiles by linear interpolation between the sorted values.
fn percentiles(mut values: Vec<f64>, wanted: [f64; 5]) -> Option<[f64; 5]> {
    if values.is_empty() {
        return None;
    }
    values.sort_by(f64::total_cmp);
    Some(wanted.map(|percent| {
        let place = percent / 100.0 * (values.len() - 1) as f64;
        let below = place.floor() as usize;
        let above = (below + 1).min(values.len() - 1);
        values[below] + (values[above] - values[below]) * (place - below as f64)
    }))
}

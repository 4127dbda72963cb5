//! Where rings lie: the minima of the mismatch with Delta_k < 0.

use super::Status;
use super::curve::{REGION, RingFault};
use super::mismatch::{Mismatch, Stationary};
use crate::frame::Tangential;

/// Minima about which rings lie, the one nearest the pump first.
pub(super) enum Seeds {
    One(Stationary),
    Several(Vec<Stationary>),
}

impl std::ops::Deref for Seeds {
    type Target = [Stationary];

    fn deref(&self) -> &[Stationary] {
        match self {
            Self::One(seed) => std::slice::from_ref(seed),
            Self::Several(seeds) => seeds,
        }
    }
}

/// Minima of the mismatch with Delta_k < 0 about which rings lie: one where the mismatch is convex, else one for
/// each connected region of Delta_k < 0 on a grid over the search region.
pub(super) fn seeds(mismatch: &Mismatch) -> Result<Seeds, RingFault> {
    let central = mismatch.stationary(mismatch.along_pump());
    if mismatch.is_convex() {
        return match central {
            Some(seed) if seed.value < mismatch.rounding() => Ok(Seeds::One(seed)),
            Some(seed) if seed.smooth => {
                Err(RingFault { status: Status::NoPhaseMatching, shortfall: Some(seed.value) })
            }
            Some(_) | None => Err(RingFault::new(Status::NotConverged)),
        };
    }
    let mut seeds: Vec<Stationary> = Vec::new();
    for start in lowest_of_each_region(mismatch) {
        let Some(seed) = mismatch.stationary(start).filter(|s| s.value < mismatch.rounding()) else {
            continue;
        };
        let apart = |other: &Stationary| {
            (other.q.u - seed.q.u).hypot(other.q.v - seed.q.v) > 1e-6 * mismatch.k0_signal()
        };
        if seeds.iter().all(apart) {
            seeds.push(seed);
        }
    }
    if let Some(seed) = central.filter(|s| s.value < mismatch.rounding() && seeds.is_empty()) {
        seeds.push(seed);
    }
    if seeds.is_empty() {
        return Err(RingFault { status: Status::NoPhaseMatching, shortfall: central.map(|s| s.value) });
    }
    // the one nearest the pump first
    let pump = mismatch.along_pump();
    let away = |s: &Stationary| (s.q.u - pump.u).hypot(s.q.v - pump.v);
    seeds.sort_by(|a, b| away(a).total_cmp(&away(b)));
    Ok(Seeds::Several(seeds))
}

/// Grid points with the least Delta_k in each connected region of Delta_k < 0 (flood fill over four neighbours).
fn lowest_of_each_region(mismatch: &Mismatch) -> Vec<Tangential> {
    const SIDE: usize = 41;
    let place = |i: usize| 2.0 * i as f64 / (SIDE - 1) as f64 - 1.0;
    let k0 = mismatch.k0_signal();
    let at = |n: usize| Tangential { u: k0 * place(n % SIDE), v: k0 * place(n / SIDE) };
    let value = |n: usize| {
        let q = at(n);
        let inside = mismatch.direction(q).is_some_and(|d| d.lab().0.z >= REGION);
        inside.then(|| mismatch.at(q)).flatten().map(|s| s.value).filter(|v| *v < 0.0)
    };
    let mut below: Vec<Option<f64>> = (0..SIDE * SIDE).map(value).collect();
    let mut lowest = Vec::new();
    let mut queue = Vec::new();
    for start in 0..below.len() {
        let Some(first) = below[start].take() else { continue };
        let mut best = (first, start);
        queue.push(start);
        while let Some(n) = queue.pop() {
            let (column, row) = (n % SIDE, n / SIDE);
            let neighbours = [
                (column > 0).then(|| n - 1),
                (column + 1 < SIDE).then_some(n + 1),
                (row > 0).then(|| n - SIDE),
                (row + 1 < SIDE).then_some(n + SIDE),
            ];
            for m in neighbours.into_iter().flatten() {
                if let Some(value) = below[m].take() {
                    best = if value < best.0 { (value, m) } else { best };
                    queue.push(m);
                }
            }
        }
        lowest.push(at(best.1));
    }
    lowest
}

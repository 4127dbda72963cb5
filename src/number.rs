//! Numbers that formulas are written for: one, or several side by side, with the same bits.
//!
//! Lanes are as many machine words wide as the processor has them; no product is fused with a sum, and sums over lanes
//! are taken in one order, so results do not depend on the machine.

use std::ops::{Add, Div, Mul, Neg, Sub};
use std::sync::LazyLock;

use fearless_simd::prelude::*;
use fearless_simd::{Level, dispatch, f64x8};

/// Numbers side by side.
pub(crate) type Wide<S> = f64x8<S>;

/// Lanes of a wide number; numbers of samples are multiples of it.
pub(crate) const LANES: usize = 8;

/// What formulas need of a number.
pub(crate) trait Number:
    Copy
    + Neg<Output = Self>
    + Add<Output = Self>
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Div<Output = Self>
    + Add<f64, Output = Self>
    + Sub<f64, Output = Self>
    + Mul<f64, Output = Self>
{
    /// Square root; not a number below zero.
    fn root(self) -> Self;

    /// One divided by it.
    fn reciprocal(self) -> Self;
}

impl Number for f64 {
    #[inline(always)]
    fn root(self) -> Self {
        self.sqrt()
    }

    #[inline(always)]
    fn reciprocal(self) -> Self {
        1.0 / self
    }
}

impl<S: Simd> Number for Wide<S> {
    #[inline(always)]
    fn root(self) -> Self {
        self.sqrt()
    }

    #[inline(always)]
    fn reciprocal(self) -> Self {
        Self::splat(self.simd, 1.0) / self
    }
}

/// The widest vectors of this machine.
pub(crate) fn level() -> Level {
    static LEVEL: LazyLock<Level> = LazyLock::new(Level::new);
    *LEVEL
}

/// The numbers from place j on.
#[inline(always)]
pub(crate) fn wide<S: Simd>(simd: S, from: &[f64], j: usize) -> Wide<S> {
    Wide::from_slice(simd, &from[j..j + LANES])
}

/// Every `stride`-th number, from place j of those on.
#[inline(always)]
pub(crate) fn strided<S: Simd>(simd: S, from: &[f64], j: usize, stride: usize) -> Wide<S> {
    Wide::from_fn(
        simd,
        #[inline(always)]
        |l| from[(j + l) * stride],
    )
}

/// Sums of terms at 0, [`LANES`], ... below `count`, each of them for the numbers from there on.
#[inline(always)]
pub(crate) fn sums<S: Simd, const N: usize>(
    simd: S,
    count: usize,
    mut terms: impl FnMut(usize) -> [Wide<S>; N],
) -> [f64; N] {
    let mut all = [Wide::splat(simd, 0.0); N];
    for j in (0..count).step_by(LANES) {
        let terms = terms(j);
        for n in 0..N {
            all[n] += terms[n];
        }
    }
    all.map(total)
}

/// Least and largest of numbers, as many as lanes or a multiple of it.
pub(crate) fn range(all: &[f64]) -> [f64; 2] {
    #[inline(always)]
    fn of<S: Simd>(simd: S, all: &[f64]) -> [f64; 2] {
        let (mut least, mut largest) = (wide(simd, all, 0), wide(simd, all, 0));
        for j in (LANES..all.len()).step_by(LANES) {
            (least, largest) = (least.min(wide(simd, all, j)), largest.max(wide(simd, all, j)));
        }
        let (least, largest): ([f64; LANES], [f64; LANES]) = (least.into(), largest.into());
        [least.into_iter().fold(f64::INFINITY, f64::min), largest.into_iter().fold(-f64::INFINITY, f64::max)]
    }
    dispatch!(level(), simd => of(simd, all))
}

/// Sum over the lanes.
#[inline(always)]
pub(crate) fn total<S: Simd>(lanes: Wide<S>) -> f64 {
    let all: [f64; LANES] = lanes.into();
    all.iter().sum()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[inline(always)]
    fn formula<T: Number>(x: T, y: T) -> [T; 2] {
        let root = (x * x + y * y + 0.5).root();
        [root - x * 3.0, (root * y - 0.25).reciprocal() / (x + 2.0)]
    }

    /// One by one and side by side, on every kind of vectors that this machine has.
    #[test]
    fn lanes_have_the_bits_of_single_numbers() {
        let x: Vec<f64> = (0..9 * LANES).map(|j| (1.7 * j as f64).sin()).collect();
        let y: Vec<f64> = (0..9 * LANES).map(|j| (0.3 * j as f64).cos()).collect();
        for level in [Level::baseline(), level()] {
            let mut compared = 0;
            dispatch!(level, simd => for j in (0..x.len()).step_by(LANES) {
                let lanes = formula(wide(simd, &x, j), wide(simd, &y, j));
                for l in 0..LANES {
                    let single = formula(x[j + l], y[j + l]);
                    assert_eq!(single.map(f64::to_bits), [lanes[0][l], lanes[1][l]].map(f64::to_bits));
                    compared += 1;
                }
            });
            assert_eq!(compared, x.len());
        }
    }

    #[test]
    fn sums_do_not_depend_on_the_vectors() {
        let x: Vec<f64> = (0..9 * LANES).map(|j| (1.7 * j as f64).sin()).collect();
        let of = |level: Level| {
            dispatch!(level, simd => sums(simd, x.len(), |j| {
                let x = wide(simd, &x, j);
                [x, x * x, strided(simd, &[1.0; 3 * LANES], 0, 3)]
            }))
        };
        let [sum, squares, ones] = of(level());
        assert_eq!(of(Level::baseline()).map(f64::to_bits), [sum, squares, ones].map(f64::to_bits));
        assert!((sum - x.iter().sum::<f64>()).abs() < 1e-13);
        assert!((squares - x.iter().map(|x| x * x).sum::<f64>()).abs() < 1e-13);
        assert_eq!(ones, x.len() as f64);
        let [least, largest] = range(&x);
        assert!(
            x.iter().all(|x| (least..=largest).contains(x)) && x.contains(&least) && x.contains(&largest)
        );
    }
}

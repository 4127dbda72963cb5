//! How few wavelengths and pump directions a mean of sinc^2 over both needs.
//!
//! sinc^2(phi) is the integral over u from 0 to 1 of 2 (1 - u) cos(2 u phi). So its mean over phi = phi0 + a.t + c s, with t
//! distributed as the pump's directions (in standard deviations) and s as the filter (in widths of its window), is
//!
//! mean = int 2 (1 - u) Re[exp(2 i u phi0) X(2 u a_x) X(2 u a_y) S(2 u c)] du,
//!
//! X and S being the characteristic functions of directions and wavelengths. Sums over samples have the same form with
//! their own X and S, which repeat where the integral's vanish. Where the pump alone blurs, S is needed only for small u, and
//! the other way round: sampled together, either may be far coarser than by itself.

use nalgebra::Complex;

/// How the phase Delta_k L/2 towards a place changes.
#[derive(Debug, Clone, Copy)]
pub(super) struct Spread {
    /// With one standard deviation of the pump's direction about each axis, rad.
    pub pump: [f64; 2],
    /// Across the filter's window, rad.
    pub filter: f64,
}

/// Samples on either side of the middle along each axis of the pump, and wavelengths.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Counts {
    pub pump: [usize; 2],
    pub wavelengths: usize,
}

/// What may be left out of the mean, in units of the largest mean at the same place.
const LEFT_OUT: f64 = 3e-4;
/// Values of u.
const STEPS: usize = 96;
const PUMP: [usize; 13] = [2, 3, 4, 5, 6, 8, 10, 12, 15, 19, 24, 30, 40];
const WAVELENGTHS: [usize; 13] = [15, 21, 27, 35, 45, 61, 81, 105, 141, 181, 241, 315, 401];

/// The pump's directions along one axis, in standard deviations, with their weights; `n` on either side.
pub(super) fn line(n: usize, reach: f64) -> Vec<(f64, f64)> {
    let places = (-(n as i64)..=n as i64).map(|j| reach * j as f64 / n as f64);
    places.map(|t| (t, (-0.5 * t * t).exp())).collect()
}

/// sum w exp(i kappa t) / sum w
fn characteristic(samples: &[(f64, f64)], kappa: f64) -> Complex<f64> {
    let sum = samples.iter().fold((Complex::new(0.0, 0.0), 0.0), |(sum, all), (t, weight)| {
        let (sin, cos) = (kappa * t).sin_cos();
        (sum + Complex::new(cos, sin) * *weight, all + weight)
    });
    sum.0 / sum.1
}

/// Of one axis at each place and u: by each number of samples, and the last by so many that it counts as the integral.
struct Axis(Vec<Vec<Complex<f64>>>);

impl Axis {
    fn new(spreads: &[f64], lines: &[Vec<(f64, f64)>]) -> Self {
        let at = |line: &Vec<(f64, f64)>| {
            let values = spreads.iter().flat_map(|a| (0..STEPS).map(move |j| 2.0 * middle(j) * a));
            values.map(|kappa| characteristic(line, kappa)).collect()
        };
        Self(lines.iter().map(at).collect())
    }
}

fn middle(j: usize) -> f64 {
    (j as f64 + 0.5) / STEPS as f64
}

/// The cheapest counts that leave out less than [`LEFT_OUT`] at every place; `None` where none of those tried does.
///
/// `window` gives so many wavelengths as places across the window, -1/2 to 1/2, with their weights. A given number of
/// wavelengths is kept.
pub(super) fn fewest(
    spreads: &[Spread],
    reach: f64,
    window: impl Fn(usize) -> Vec<(f64, f64)>,
    given: Option<usize>,
) -> Option<Counts> {
    let wavelengths: Vec<usize> = given.map_or(WAVELENGTHS.to_vec(), |n| vec![n]);
    let fine = |counts: &[usize], most: usize| counts.iter().copied().chain([most]).collect::<Vec<_>>();
    let directions: Vec<_> = fine(&PUMP, 160).into_iter().map(|n| line(n, reach)).collect();
    let colours: Vec<_> = fine(&wavelengths, given.unwrap_or(801)).into_iter().map(&window).collect();
    if colours.iter().any(Vec::is_empty) {
        return None;
    }
    let of = |get: fn(&Spread) -> f64| spreads.iter().map(get).collect::<Vec<f64>>();
    let x = Axis::new(&of(|s| s.pump[0]), &directions);
    let y = Axis::new(&of(|s| s.pump[1]), &directions);
    let s = Axis::new(&of(|s| s.filter), &colours);
    let exact = |n: usize| x.0[PUMP.len()][n] * y.0[PUMP.len()][n] * s.0[wavelengths.len()][n];
    let share = |n: usize| 2.0 * (1.0 - middle(n % STEPS)) / STEPS as f64;
    let right = |i: usize, j: usize, k: usize| {
        (0..spreads.len()).all(|place| {
            let range = place * STEPS..(place + 1) * STEPS;
            let (off, whole) = range.fold((0.0, 0.0), |(off, whole), n| {
                let sampled = x.0[i][n] * y.0[j][n] * s.0[k][n];
                (off + share(n) * (sampled - exact(n)).norm(), whole + share(n) * exact(n).norm())
            });
            off < LEFT_OUT * whole
        })
    };
    let mut all: Vec<(usize, [usize; 3])> = Vec::new();
    for (i, nx) in PUMP.iter().enumerate() {
        for (j, ny) in PUMP.iter().enumerate() {
            for (k, n) in wavelengths.iter().enumerate() {
                all.push(((2 * nx + 1) * (2 * ny + 1) * n, [i, j, k]));
            }
        }
    }
    all.sort_unstable();
    let (_, [i, j, k]) = all.into_iter().find(|(_, [i, j, k])| right(*i, *j, *k))?;
    Some(Counts { pump: [PUMP[i], PUMP[j]], wavelengths: wavelengths[k] })
}

/// The largest u that counts in the mean at a place: how much of sinc^2's finest detail is left.
pub(super) fn detail(spread: &Spread, reach: f64, window: &[(f64, f64)]) -> f64 {
    let directions = line(40, reach);
    let part = |u: f64| {
        let [x, y] = spread.pump.map(|a| characteristic(&directions, 2.0 * u * a));
        let s = if window.is_empty() {
            Complex::from(1.0)
        } else {
            characteristic(window, 2.0 * u * spread.filter)
        };
        (1.0 - u) * (x * y * s).norm()
    };
    let parts: Vec<f64> = (0..STEPS).map(|j| part(middle(j))).collect();
    let whole: f64 = parts.iter().sum();
    let mut rest = 0.0;
    for j in (0..STEPS).rev() {
        rest += parts[j];
        if rest > LEFT_OUT * whole {
            return middle(j) + 0.5 / STEPS as f64;
        }
    }
    1.0
}

#[cfg(test)]
mod tests {
    use super::*;

    const REACH: f64 = 3.5;

    fn rectangular(n: usize) -> Vec<(f64, f64)> {
        (0..n).map(|j| ((j as f64 + 0.5) / n as f64 - 0.5, 1.0)).collect()
    }

    fn gaussian(n: usize) -> Vec<(f64, f64)> {
        // three widths across, 4 ln 2 x^2 in widths
        rectangular(n)
            .into_iter()
            .map(|(s, _)| (s, (-4.0 * std::f64::consts::LN_2 * 9.0 * s * s).exp()))
            .collect()
    }

    /// The mean itself, by the samples.
    fn mean(phase: f64, spread: &Spread, counts: Counts, window: fn(usize) -> Vec<(f64, f64)>) -> f64 {
        let (mut sum, mut all) = (0.0, 0.0);
        for (x, wx) in line(counts.pump[0], REACH) {
            for (y, wy) in line(counts.pump[1], REACH) {
                for (s, ws) in window(counts.wavelengths) {
                    let phi: f64 = phase + spread.pump[0] * x + spread.pump[1] * y + spread.filter * s;
                    let sinc = if phi.abs() < 1e-9 { 1.0 } else { phi.sin() / phi };
                    sum += wx * wy * ws * sinc * sinc;
                    all += wx * wy * ws;
                }
            }
        }
        sum / all
    }

    #[test]
    fn few_samples_give_the_mean_of_many() {
        for window in [gaussian as fn(usize) -> Vec<(f64, f64)>, rectangular] {
            let spreads = [
                Spread { pump: [7.0, 0.5], filter: 90.0 },
                Spread { pump: [6.0, 1.0], filter: 70.0 },
                Spread { pump: [0.3, 0.2], filter: 40.0 },
            ];
            let few = fewest(&spreads, REACH, window, None).expect("some counts do");
            let many = Counts { pump: [60, 30], wavelengths: 801 };
            for spread in &spreads {
                let top = mean(0.0, spread, many, window);
                for phase in [0.0, 3.0, 11.0, 25.0] {
                    let off = mean(phase, spread, few, window) - mean(phase, spread, many, window);
                    assert!(off.abs() < 2.0 * LEFT_OUT * top, "{spread:?} {phase} {off} {top} {few:?}");
                }
            }
        }
    }

    /// 90 rad want 90 wavelengths by themselves and 7 rad a deviation want 19 directions on either side; together fewer.
    #[test]
    fn what_blurs_saves_samples() {
        let spread = Spread { pump: [7.0, 0.3], filter: 90.0 };
        let few = fewest(&[spread], REACH, gaussian, None).expect("some counts do");
        let product = (2 * few.pump[0] + 1) * (2 * few.pump[1] + 1) * few.wavelengths;
        assert!(product < 39 * 5 * 91 / 3, "{few:?}");
        assert!(detail(&spread, REACH, &gaussian(101)) < 0.6);
        assert!(detail(&Spread { pump: [0.0; 2], filter: 0.0 }, REACH, &[]) > 0.95);
    }
}

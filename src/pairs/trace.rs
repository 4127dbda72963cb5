//! A measured curve over wavelength: what a filter transmits, or how bright a pump's line is.

use std::cmp::Ordering;

use super::quadrature::Rule;

/// Samples of a curve that is nowhere negative, joined by cubics that rise and fall with the samples and no more (F. N.
/// Fritsch, J. Butland, SIAM J. Sci. Stat. Comput. 5, 300 (1984), from memory); nothing outside.
#[derive(Debug, Clone, PartialEq)]
pub struct Trace {
    /// Wavelength, m, rising; value.
    samples: Vec<[f64; 2]>,
    /// Slope at each sample, per m.
    slopes: Vec<f64>,
    /// Where the curve first and last has half of its largest value, m.
    halves: [f64; 2],
}

impl Trace {
    /// Through samples (wavelength in m, value).
    ///
    /// # Errors
    /// Fewer than three, numbers that are not finite, wavelengths that do not rise, values below 0 or all 0; the index of the
    /// sample at fault.
    pub fn new(samples: Vec<[f64; 2]>) -> Result<Self, (usize, &'static str)> {
        if samples.len() < 3 {
            return Err((samples.len(), "a curve needs three samples at least"));
        }
        for (index, [wavelength, value]) in samples.iter().enumerate() {
            let before = index.checked_sub(1).map_or(0.0, |before| samples[before][0]);
            if !wavelength.is_finite() || !value.is_finite() {
                return Err((index, "a number is not finite"));
            }
            if *wavelength <= before {
                return Err((index, "wavelengths must rise from line to line; sort them, each once"));
            }
            if *value < 0.0 {
                return Err((index, "the value is below 0; take the dark reading's noise off, or write 0"));
            }
        }
        let most = samples.iter().map(|s| s[1]).fold(0.0, f64::max);
        if most <= 0.0 {
            return Err((0, "all values are 0: nothing would pass"));
        }
        let slopes = slopes(&samples);
        let halves = halves(&samples, 0.5 * most);
        Ok(Self { samples, slopes, halves })
    }

    /// Between two samples, wavelengths in m.
    #[must_use]
    pub fn at(&self, wavelength: f64) -> f64 {
        let after = self.samples.partition_point(|s| s[0] <= wavelength);
        if after == 0 || wavelength > self.samples[self.samples.len() - 1][0] {
            return 0.0;
        }
        let i = (after - 1).min(self.samples.len() - 2);
        let [[x0, y0], [x1, y1]] = [self.samples[i], self.samples[i + 1]];
        let h = x1 - x0;
        let t = (wavelength - x0) / h;
        // Hermite's cubic
        let (s, t2) = (1.0 - t, t * t);
        let value = s * s * ((1.0 + 2.0 * t) * y0 + t * h * self.slopes[i])
            + t2 * ((1.0 + 2.0 * s) * y1 - s * h * self.slopes[i + 1]);
        value.max(0.0)
    }

    /// Wavelengths of the samples, m.
    pub fn wavelengths(&self) -> impl Iterator<Item = f64> {
        self.samples.iter().map(|s| s[0])
    }

    /// First and last wavelength at which the curve is above `share` of its largest value, as far as its samples tell, m.
    #[must_use]
    pub fn above(&self, share: f64) -> [f64; 2] {
        let least = share * self.samples.iter().map(|s| s[1]).fold(0.0, f64::max);
        let first = self.samples.iter().position(|s| s[1] > least).unwrap_or(0);
        let last = self.samples.iter().rposition(|s| s[1] > least).unwrap_or(0);
        [self.samples[first.saturating_sub(1)][0], self.samples[(last + 1).min(self.samples.len() - 1)][0]]
    }

    /// First and last sample, m.
    #[must_use]
    pub fn range(&self) -> [f64; 2] {
        [self.samples[0][0], self.samples[self.samples.len() - 1][0]]
    }

    /// Halfway between the points of half the largest value, m.
    #[must_use]
    pub fn middle(&self) -> f64 {
        0.5 * (self.halves[0] + self.halves[1])
    }

    /// Between the points of half the largest value, m.
    #[must_use]
    pub fn width(&self) -> f64 {
        self.halves[1] - self.halves[0]
    }

    /// Wavelengths and weights whose sum is the integral of the curve: three points of Gauss between samples.
    pub(super) fn measure(&self) -> Vec<[f64; 2]> {
        let rule = Rule::legendre(3);
        let pieces = self.samples.windows(2).map(|pair| [pair[0][0], pair[1][0]]);
        let points = pieces.flat_map(|piece| rule.on(piece).collect::<Vec<_>>());
        points.map(|[x, weight]| [x, weight * self.at(x)]).filter(|[_, weight]| *weight > 0.0).collect()
    }
}

/// Zero at extremes, else a harmonic mean of the slopes on both sides.
fn slopes(samples: &[[f64; 2]]) -> Vec<f64> {
    let step = |i: usize| samples[i + 1][0] - samples[i][0];
    let rise = |i: usize| (samples[i + 1][1] - samples[i][1]) / step(i);
    let last = samples.len() - 1;
    let slope = |i: usize| {
        if i == 0 || i == last {
            return 0.0;
        }
        let (before, after) = (rise(i - 1), rise(i));
        if before * after <= 0.0 {
            return 0.0;
        }
        let (h0, h1) = (step(i - 1), step(i));
        let (w0, w1) = (2.0 * h1 + h0, h1 + 2.0 * h0);
        (w0 + w1) / (w0 / before + w1 / after)
    };
    (0..=last).map(slope).collect()
}

/// First and last crossing of a level, straight between samples; the ends where the curve begins above it.
fn halves(samples: &[[f64; 2]], level: f64) -> [f64; 2] {
    let last = samples.len() - 1;
    let cross = |i: usize| {
        let [[x0, y0], [x1, y1]] = [samples[i], samples[i + 1]];
        match y0.total_cmp(&y1) {
            Ordering::Equal => x0,
            _ => x0 + (x1 - x0) * (level - y0) / (y1 - y0),
        }
    };
    let first = samples.iter().position(|s| s[1] >= level).unwrap_or(0);
    let end = samples.iter().rposition(|s| s[1] >= level).unwrap_or(last);
    [
        if first == 0 { samples[0][0] } else { cross(first - 1) },
        if end == last { samples[last][0] } else { cross(end) },
    ]
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    fn gaussian(width: f64, step: f64) -> Trace {
        let count = (3.0 * width / step) as i32;
        let value = |x: f64| (-4.0 * std::f64::consts::LN_2 * (x / width).powi(2)).exp();
        let samples = (-count..=count).map(|j| f64::from(j) * step).map(|x| [810.0 + x, value(x)]);
        Trace::new(samples.collect()).expect("a curve")
    }

    #[test]
    fn a_sampled_gaussian_is_a_gaussian() {
        let trace = gaussian(3.0, 0.1);
        assert_relative_eq!(trace.middle(), 810.0, max_relative = 1e-9);
        assert_relative_eq!(trace.width(), 3.0, max_relative = 1e-3);
        for x in [-2.03, -0.77, 0.0, 0.33, 1.49] {
            let exact = (-4.0 * std::f64::consts::LN_2 * (x / 3.0f64).powi(2)).exp();
            assert!((trace.at(810.0 + x) - exact).abs() < 1e-3, "{x}");
        }
        // width sqrt(pi/(4 ln 2))
        let area: f64 = trace.measure().iter().map(|m| m[1]).sum();
        assert_relative_eq!(area, 3.0 * 1.064_467, max_relative = 2e-4);
        assert_eq!(trace.at(800.0), 0.0);
        assert_eq!(trace.at(820.0), 0.0);
    }

    #[test]
    fn curves_stay_between_their_samples() {
        let trace =
            Trace::new(vec![[1.0, 0.0], [2.0, 0.0], [3.0, 1.0], [4.0, 1.0], [5.0, 0.0]]).expect("a curve");
        for j in 0..=400 {
            let x = 1.0 + 0.01 * f64::from(j);
            assert!((0.0..=1.0).contains(&trace.at(x)), "{x}");
        }
        assert_eq!(trace.above(0.0), [2.0, 5.0]);
    }

    #[test]
    fn what_is_no_curve_is_refused() {
        let index = |samples: &[[f64; 2]]| Trace::new(samples.to_vec()).expect_err("no curve").0;
        assert_eq!(index(&[[1.0, 0.0], [2.0, 1.0]]), 2);
        assert_eq!(index(&[[1.0, 0.0], [2.0, 1.0], [2.0, 0.0]]), 2);
        assert_eq!(index(&[[1.0, 0.0], [2.0, -1.0], [3.0, 0.0]]), 1);
        assert_eq!(index(&[[1.0, 0.0], [2.0, f64::NAN], [3.0, 0.0]]), 1);
        assert_eq!(index(&[[1.0, 0.0], [2.0, 0.0], [3.0, 0.0]]), 0);
    }
}

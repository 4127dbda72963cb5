//! What light a picture is taken in: the filter's wavelengths and the pump's angular spread.

use crate::job::Setup;
use crate::quantity::{Length, Wavelength};

pub use crate::pairs::{Filter, Shape};

/// Filters of both photons, and the pump's waist.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Light {
    /// Before the photon of the listed wavelength, one behind the other; none let its nominal wavelength pass alone.
    pub signal: Vec<Filter>,
    /// Before its twin.
    pub idler: Vec<Filter>,
    /// 1/e^2 radius of the pump's intensity in the crystal; `None` for a plane wave.
    pub waist: Option<Length>,
}

impl Light {
    /// As the experiment describes it.
    #[must_use]
    pub fn of(setup: &Setup) -> Self {
        let [signal, idler] = setup.bench.filters.clone();
        Self { signal, idler, waist: setup.bench.waist }
    }
}

/// Shortest and longest wavelength, m, that pass all filters: within half a width of each centre (rectangular) or 1.5
/// widths (Gaussian, where the transmission has fallen to 0.2 %), or as far as 0.2 % of the best passes (measured). `None`
/// where nothing passes.
fn window(filters: &[Filter], nominal: Wavelength) -> Option<[f64; 2]> {
    let ends = filters.iter().map(|filter| filter.open(filter.centre.unwrap_or(nominal).si(), 1.5, 2e-3));
    let [from, to] = ends.reduce(|a, b| [a[0].max(b[0]), a[1].min(b[1])])?;
    (from < to).then_some([from, to])
}

/// The middle of what filters let pass, the nominal wavelength without any; `None` where nothing passes.
pub(crate) fn centre(filters: &[Filter], nominal: Wavelength) -> Option<Wavelength> {
    match filters {
        [] => Some(nominal),
        [one] => Some(one.centre.unwrap_or(nominal)),
        all => window(all, nominal).map(|[from, to]| Wavelength::metres(0.5 * (from + to))),
    }
}

/// `count` wavelengths across filters that stand one behind the other and their weights: midpoints of equal intervals. A
/// weight is the product of the transmissions times d omega, which is d lambda / lambda^2; for one filter weights add up to
/// 1, for several to what the others let pass of what the narrowest one does.
pub(crate) fn samples(filters: &[Filter], nominal: Wavelength, count: usize) -> Vec<(Wavelength, f64)> {
    let Some(narrowest) = filters.iter().min_by(|a, b| a.width.si().total_cmp(&b.width.si())) else {
        return vec![(nominal, 1.0)];
    };
    let across = |filters: &[Filter]| -> Vec<(Wavelength, f64)> {
        let Some([from, to]) = window(filters, nominal) else { return Vec::new() };
        let step = (to - from) / count as f64;
        let sample = |j: usize| {
            let wavelength = Wavelength::metres(from + step * (j as f64 + 0.5));
            let passed: f64 = filters.iter().map(|f| f.transmission(wavelength, nominal)).product();
            (wavelength, passed * step / wavelength.si().powi(2))
        };
        (0..count).map(sample).collect()
    };
    let whole: f64 = across(std::slice::from_ref(narrowest)).iter().map(|(_, weight)| weight).sum();
    let mut all = across(filters);
    all.iter_mut().for_each(|(_, weight)| *weight /= whole);
    all
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn weights_add_up_and_meet_the_half_width() {
        let filter = Filter { shape: Shape::Gaussian, width: Length::metres(3e-9), centre: None };
        let samples = samples(&[filter], Wavelength::from_nm(810.0), 301);
        let sum: f64 = samples.iter().map(|s| s.1).sum();
        assert!((sum - 1.0).abs() < 1e-12);
        // 3.00 nm wide at 810 nm: the weight per d omega differs across the filter by less than a percent
        let peak = samples[150].1;
        let half = samples.iter().filter(|s| s.1 > 0.5 * peak).count() as f64 * 9.0 / 301.0;
        assert!((half - 3.0).abs() < 0.06, "{half}");
    }

    #[test]
    fn filters_one_behind_the_other_multiply() {
        let nominal = Wavelength::from_nm(810.0);
        let gaussian =
            |nm: f64| Filter { shape: Shape::Gaussian, width: Length::metres(nm * 1e-9), centre: None };
        let sum = |all: &[Filter]| samples(all, nominal, 301).iter().map(|s| s.1).sum::<f64>();
        // widths of Gaussians: 1/w^2 = 1/3^2 + 1/4^2, w = 2.4 nm; both pass 2.4/3 of what the first does
        assert!((sum(&[gaussian(3.0), gaussian(4.0)]) - 0.8).abs() < 3e-3);
        let away =
            Filter { shape: Shape::Rectangular, centre: Some(Wavelength::from_nm(820.0)), ..gaussian(1.0) };
        assert!(samples(&[gaussian(3.0), away.clone()], nominal, 301).is_empty());
        // half a Gaussian
        let upper = Filter { width: Length::metres(10e-9), centre: Some(Wavelength::from_nm(815.0)), ..away };
        assert!((sum(&[gaussian(3.0), upper]) - 0.5).abs() < 2e-3);
    }
}

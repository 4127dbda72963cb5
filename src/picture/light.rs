//! What light a picture is taken in: the filter's wavelengths and the pump's angular spread.

use crate::job::Setup;
use crate::job::description::Filter as Written;
use crate::quantity::{Length, Wavelength};

/// Form of a filter's transmission.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Shape {
    /// exp(-4 ln 2 (lambda - centre)^2 / width^2)
    Gaussian,
    /// 1 within half a width of the centre, 0 outside.
    Rectangular,
}

/// A filter before the detector.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Filter {
    /// Form of the transmission.
    pub shape: Shape,
    /// FWHM of the transmission.
    pub width: Length,
    /// Where it transmits most; `None` for the photon's nominal wavelength.
    pub centre: Option<Wavelength>,
}

/// Filters of both photons, and the pump's waist.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Light {
    /// Before the photon of the listed wavelength; `None` lets its nominal wavelength pass alone.
    pub signal: Option<Filter>,
    /// Before its twin.
    pub idler: Option<Filter>,
    /// 1/e^2 radius of the pump's intensity in the crystal; `None` for a plane wave.
    pub waist: Option<Length>,
}

impl Light {
    /// As the experiment describes it: `[[filter]]` and `pump.waist`.
    ///
    /// # Errors
    /// A sentence, where a filter is given by a file or a value is no quantity.
    pub fn of(setup: &Setup) -> Result<Self, String> {
        let written = &setup.written;
        let waist = written.pump.as_ref().and_then(|p| p.get_ref().waist.as_ref());
        let waist = waist.map(|w| w.get_ref().parse()).transpose().map_err(|e| format!("{e}"))?;
        let before = |arm: &str| {
            let stands =
                |f: &&Written| f.arm.as_ref().is_none_or(|a| [arm, "both"].contains(&&**a.get_ref()));
            written.filter.iter().find(stands).map(read).transpose().map(Option::flatten)
        };
        Ok(Self { signal: before("a")?, idler: before("b")?, waist })
    }
}

/// A filter; `None` where no width is given.
fn read(written: &Written) -> Result<Option<Filter>, String> {
    if written.file.is_some() {
        return Err(
            "pictures know filters by width and shape; a measured trace (filter.file) is not read".into()
        );
    }
    let Some(width) = &written.width else { return Ok(None) };
    let rectangular = written.shape.as_ref().is_some_and(|s| &**s.get_ref() == "rectangular");
    let centre = written.centre.as_ref().map(|c| c.get_ref().parse::<Wavelength>()).transpose();
    Ok(Some(Filter {
        shape: if rectangular { Shape::Rectangular } else { Shape::Gaussian },
        width: width.get_ref().parse().map_err(|e| format!("the filter width: {e}"))?,
        centre: centre.map_err(|e| format!("the filter centre: {e}"))?,
    }))
}

impl Filter {
    /// `count` wavelengths across the filter and their weights, which add up to 1.
    ///
    /// Midpoints of equal intervals in wavelength over the width (rectangular) or over 1.5 widths on either side of the
    /// centre (Gaussian, where the transmission has fallen to 0.2 %); a weight is transmission times d omega, which is
    /// d lambda / lambda^2.
    #[must_use]
    pub fn samples(&self, nominal: Wavelength, count: usize) -> Vec<(Wavelength, f64)> {
        let centre = self.centre.unwrap_or(nominal).si();
        let reach = match self.shape {
            Shape::Gaussian => 3.0 * self.width.si(),
            Shape::Rectangular => self.width.si(),
        };
        let mut all: Vec<(Wavelength, f64)> = (0..count)
            .map(|j| {
                let off = reach * ((j as f64 + 0.5) / count as f64 - 0.5);
                let wavelength = centre + off;
                let transmission = match self.shape {
                    Shape::Gaussian => {
                        (-4.0 * std::f64::consts::LN_2 * (off / self.width.si()).powi(2)).exp()
                    }
                    Shape::Rectangular => 1.0,
                };
                (Wavelength::metres(wavelength), transmission / (wavelength * wavelength))
            })
            .collect();
        let sum: f64 = all.iter().map(|(_, weight)| weight).sum();
        all.iter_mut().for_each(|(_, weight)| *weight /= sum);
        all
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn weights_add_up_and_meet_the_half_width() {
        let filter = Filter { shape: Shape::Gaussian, width: Length::metres(3e-9), centre: None };
        let samples = filter.samples(Wavelength::from_nm(810.0), 301);
        let sum: f64 = samples.iter().map(|s| s.1).sum();
        assert!((sum - 1.0).abs() < 1e-12);
        // 3.00 nm wide at 810 nm: the weight per d omega differs across the filter by less than a percent
        let peak = samples[150].1;
        let half = samples.iter().filter(|s| s.1 > 0.5 * peak).count() as f64 * 9.0 / 301.0;
        assert!((half - 3.0).abs() < 0.06, "{half}");
    }
}

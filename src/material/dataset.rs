//! One publication's principal indices: n, its derivatives, and where they hold.

use std::ops::RangeInclusive;

use num_dual::{Dual2_64, Dual64, DualNum};

use super::dispersion::{Axis, TemperatureFactor, ThermoAxis};
use super::file::{self, Dataset, Optic};
use super::{Fault, parse, per_axis};
use crate::quantity::{SPEED_OF_LIGHT, Temperature, Wavelength};

/// One publication's principal indices, validated.
#[derive(Debug, Clone)]
pub struct DataSet {
    /// First author and year.
    pub id: String,
    /// As it was written.
    pub file: Dataset,
    /// Valid wavelengths.
    pub from: Wavelength,
    /// Valid wavelengths.
    pub to: Wavelength,
    /// Where the indices hold: as stated, else 20 degC.
    pub temperature: Temperature,
    axes: [Axis; 3],
    factor: Option<TemperatureFactor>,
    pub(super) thermo: Option<ThermoTerms>,
}

#[derive(Debug, Clone)]
pub(super) struct ThermoTerms {
    reference: Temperature,
    pub(super) range: Option<RangeInclusive<f64>>,
    axes: [ThermoAxis; 3],
}

/// Index of one principal axis with its derivatives; wavelengths in um.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Index {
    /// Refractive index.
    pub n: f64,
    /// dn/dlambda in 1/um.
    pub slope: f64,
    /// d2n/dlambda2 in 1/um^2.
    pub curvature: f64,
}

/// Principal indices n_X, n_Y, n_Z at one wavelength and temperature.
#[derive(Debug, Clone, Copy)]
pub struct Principal {
    /// Wavelength they belong to.
    pub wavelength: Wavelength,
    /// Along X, Y, Z.
    pub axes: [Index; 3],
    /// One optic axis (along Z) or two.
    pub optic: Optic,
}

impl Index {
    /// Impermittivity 1/n^2 and its first and second derivative with respect to angular frequency (s/rad units).
    #[must_use]
    pub fn impermittivity(&self, wavelength: Wavelength) -> [f64; 3] {
        // lambda = 2 pi c / omega:  d/domega = -(lambda/omega) d/dlambda
        let um = wavelength.um();
        let omega = wavelength.angular_frequency();
        let n_w = -um / omega * self.slope;
        let n_ww = (um / omega).powi(2) * self.curvature + 2.0 * um / omega.powi(2) * self.slope;
        let n = self.n;
        // eta = n^-2:  eta' = -2 n^-3 n',  eta'' = 6 n^-4 n'^2 - 2 n^-3 n''
        [n.powi(-2), -2.0 * n.powi(-3) * n_w, 6.0 * n.powi(-4) * n_w * n_w - 2.0 * n.powi(-3) * n_ww]
    }

    /// Group index n - lambda dn/dlambda of a wave along this axis.
    #[must_use]
    pub fn group(&self, wavelength: Wavelength) -> f64 {
        self.n - wavelength.um() * self.slope
    }

    /// Group-velocity dispersion lambda^3/(2 pi c^2) d2n/dlambda2 in s^2/m.
    #[must_use]
    pub fn dispersion(&self, wavelength: Wavelength) -> f64 {
        let lambda = wavelength.si();
        lambda.powi(3) / (2.0 * std::f64::consts::PI * SPEED_OF_LIGHT * SPEED_OF_LIGHT)
            * self.curvature
            * 1e12
    }
}

/// Whether to leave a data set's range.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Reach {
    /// Outside the range is an error.
    #[default]
    Within,
    /// Outside the range is allowed and marked.
    Extrapolate,
}

impl DataSet {
    /// Whether the wavelength lies inside the set's range (to a part in 10^9, so that its own limits do).
    #[must_use]
    pub fn covers(&self, wavelength: Wavelength) -> bool {
        let slack = 1e-9 * wavelength.si();
        wavelength.si() >= self.from.si() - slack && wavelength.si() <= self.to.si() + slack
    }

    /// Whether indices at this temperature lie inside the thermo-optic range.
    #[must_use]
    pub fn covers_temperature(&self, temperature: Temperature) -> bool {
        let within =
            |terms: &ThermoTerms| terms.range.as_ref().is_none_or(|r| r.contains(&temperature.degc()));
        self.same_temperature(temperature) || self.thermo.as_ref().is_none_or(within)
    }

    /// Whether the set knows how its indices change with temperature.
    #[must_use]
    pub fn has_thermo_optics(&self) -> bool {
        self.thermo.is_some() || self.factor.is_some()
    }

    pub(super) fn same_temperature(&self, temperature: Temperature) -> bool {
        (temperature.degc() - self.temperature.degc()).abs() < 1e-9
    }

    /// Index of axis 0, 1, 2 (X, Y, Z), without range checks; `None` beyond a pole.
    pub(super) fn index(
        &self,
        axis: usize,
        wavelength: Wavelength,
        temperature: Temperature,
    ) -> Option<Index> {
        let um = Dual2_64::from_re(wavelength.um()).derivative();
        let t = Dual2_64::from_re(temperature.degc());
        let mut n = self.axes[axis].n_squared(um, t, self.factor).sqrt();
        if let Some(thermo) = &self.thermo {
            n += thermo.axes[axis].delta(um, t - thermo.reference.degc());
        }
        let physical = n.re.is_finite() && n.re > 1.0 && n.v1.is_finite() && n.v2.is_finite();
        physical.then_some(Index { n: n.re, slope: n.v1, curvature: n.v2 })
    }

    /// dn/dT of axis 0, 1, 2 in 1/K; `None` where the set has no thermo-optic terms.
    #[must_use]
    pub fn thermo_slope(&self, axis: usize, wavelength: Wavelength, temperature: Temperature) -> Option<f64> {
        if !self.has_thermo_optics() {
            return None;
        }
        let um = Dual64::from_re(wavelength.um());
        let t = Dual64::from_re(temperature.degc()).derivative();
        let mut n = self.axes[axis].n_squared(um, t, self.factor).sqrt();
        if let Some(thermo) = &self.thermo {
            n += thermo.axes[axis].delta(um, t - thermo.reference.degc());
        }
        Some(n.eps)
    }
}

impl DataSet {
    pub(super) fn from_file(file: &Dataset, optic: Optic) -> Result<Self, Fault> {
        let form = file.form.get_ref();
        let wanted = if optic == Optic::Uniaxial { "o and e" } else { "x, y and z" };
        let axes = per_axis(optic, [&form.o, &form.e, &form.x, &form.y, &form.z]);
        let [Some(x), Some(y), Some(z)] = axes else {
            return Err(Fault::at(&file.form, format!("coefficients are needed for the axes {wanted}")));
        };
        if let Some(fault) = [x, y, z].into_iter().find_map(Axis::fault) {
            return Err(Fault::at(&file.form, fault));
        }
        let (from, to) = (parse::<Wavelength>(&file.range.from)?, parse::<Wavelength>(&file.range.to)?);
        if from.si() <= 0.0 || to <= from {
            return Err(Fault::at(
                &file.range.to,
                "the range must begin above zero and end above its beginning",
            ));
        }
        let thermo = match &file.thermo {
            Some(t) => Some(ThermoTerms::from_file(t.get_ref(), optic)?),
            None => None,
        };
        Ok(Self {
            id: file.id.get_ref().clone(),
            from,
            to,
            temperature: file.temperature.as_ref().map_or(Ok(Temperature::celsius(20.0)), parse)?,
            axes: [x.clone(), y.clone(), z.clone()],
            factor: form.temperature_factor,
            thermo,
            file: file.clone(),
        })
    }
}

impl ThermoTerms {
    fn from_file(file: &file::Thermo, optic: Optic) -> Result<Self, Fault> {
        let range = match &file.range {
            Some(r) => Some(parse::<Temperature>(&r.from)?.degc()..=parse::<Temperature>(&r.to)?.degc()),
            None => None,
        };
        let axes = per_axis(optic, [&file.o, &file.e, &file.x, &file.y, &file.z]);
        Ok(Self {
            reference: parse(&file.reference)?,
            range,
            axes: axes.map(|a| a.cloned().unwrap_or_default()),
        })
    }
}

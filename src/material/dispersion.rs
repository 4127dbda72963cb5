//! Refractive index of one principal axis as a function of wavelength and temperature.
//!
//! One form serves every published equation in use, with its coefficients as printed:
//!
//! n^2 = c + sum_i s_i l^p_i / (l^2 - C_i) + sum_j a_j l^e_j,   l in um,
//!
//! where each coefficient may have a companion proportional to F = (T - T1)(T + T2) (lithium niobate and tantalate),
//! and to n itself may be added dn = (sum a_m l^m) t + (sum b_m l^m) t^2, t = T - T_ref (all others).
//! The formula is written once, over a scalar that carries exact derivatives.

use num_dual::DualNum;
use serde::Deserialize;

/// One principal axis of a data set. Wavelengths in um, temperatures in degC.
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Axis {
    constant: f64,
    #[serde(default)]
    constant_f: f64,
    #[serde(default)]
    resonances: Vec<Resonance>,
    #[serde(default)]
    powers: Vec<PowerTerm>,
}

/// strength l^power / (l^2 - pole)
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
struct Resonance {
    strength: f64,
    #[serde(default)]
    strength_f: f64,
    #[serde(default)]
    power: i32,
    /// The pole as printed without a square, um^2.
    pole_um2: Option<f64>,
    /// The pole as printed with a square, um.
    pole_um: Option<f64>,
    #[serde(default)]
    pole_um_f: f64,
}

/// coefficient l^exponent
#[derive(Debug, Clone, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct PowerTerm {
    coefficient: f64,
    #[serde(default)]
    coefficient_f: f64,
    exponent: f64,
}

/// T1 and T2 of F = (T - T1)(T + T2), degC.
#[derive(Debug, Clone, Copy, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct TemperatureFactor {
    minus: f64,
    plus: f64,
}

impl TemperatureFactor {
    fn at<D: DualNum<f64> + Copy>(self, temperature: D) -> D {
        (temperature - self.minus) * (temperature + self.plus)
    }
}

impl Axis {
    /// Square of the index, without thermo-optic terms that add to n.
    pub fn n_squared<D: DualNum<f64> + Copy>(
        &self,
        um: D,
        temperature: D,
        factor: Option<TemperatureFactor>,
    ) -> D {
        let f = factor.map_or_else(|| D::from(0.0), |factor| factor.at(temperature));
        let um2 = um * um;
        let mut sum = f * self.constant_f + self.constant;
        for r in &self.resonances {
            let pole = match r.pole_um {
                Some(pole) => {
                    let pole = f * r.pole_um_f + pole;
                    pole * pole
                }
                None => D::from(r.pole_um2.unwrap_or(0.0)),
            };
            sum += (f * r.strength_f + r.strength) * um.powi(r.power) / (um2 - pole);
        }
        for p in &self.powers {
            sum += (f * p.coefficient_f + p.coefficient) * power(um, p.exponent);
        }
        sum
    }

    /// What is wrong with the coefficients, in words; `None` where nothing is.
    #[must_use]
    pub fn fault(&self) -> Option<&'static str> {
        let both_or_none = |r: &Resonance| r.pole_um.is_some() == r.pole_um2.is_some();
        if self.resonances.iter().any(both_or_none) {
            return Some("each resonance needs one of `pole_um` (squared by the program) and `pole_um2`");
        }
        let squared_with_f = |r: &Resonance| r.pole_um.is_none() && r.pole_um_f != 0.0;
        self.resonances.iter().any(squared_with_f).then_some("`pole_um_f` goes with `pole_um`")
    }
}

fn power<D: DualNum<f64> + Copy>(x: D, exponent: f64) -> D {
    if exponent.fract() == 0.0 && exponent.abs() < 100.0 { x.powi(exponent as i32) } else { x.powf(exponent) }
}

/// dn = (sum of `linear`) t + (sum of `quadratic`) t^2.
#[derive(Debug, Clone, Default, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ThermoAxis {
    #[serde(default)]
    linear: Vec<PowerTerm>,
    #[serde(default)]
    quadratic: Vec<PowerTerm>,
}

impl ThermoAxis {
    /// What is added to n at `t` degrees above the reference temperature.
    pub fn delta<D: DualNum<f64> + Copy>(&self, um: D, t: D) -> D {
        let sum = |terms: &[PowerTerm]| {
            terms.iter().fold(D::from(0.0), |sum, p| sum + power(um, p.exponent) * p.coefficient)
        };
        sum(&self.linear) * t + sum(&self.quadratic) * t * t
    }
}

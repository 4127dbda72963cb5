//! Crystals: dispersion, nonlinearity, thermal behaviour, and where each number comes from.

mod catalogue;
pub mod dispersion;
#[allow(missing_docs, reason = "each field is the key of the same name in a material file, described there")]
pub mod file;
pub mod tensor;

pub(crate) use catalogue::nearest;
pub use catalogue::{Catalogue, TEMPLATE};
pub use file::{Known, Optic, Relative};

use std::ops::RangeInclusive;

use nalgebra::{Matrix3, Vector3};
use num_dual::{Dual2_64, Dual64, DualNum};
use thiserror::Error;
use toml::Spanned;

use crate::quantity::{SPEED_OF_LIGHT, Temperature, Wavelength};
use dispersion::{Axis, TemperatureFactor, ThermoAxis};
use file::{Dataset, ExpansionAxis, File};
use tensor::Tensor;

/// Why a material cannot be had or used.
#[derive(Debug, Clone, Error)]
pub enum MaterialError {
    /// No crystal of this id.
    #[error("unknown crystal `{id}`{hint}; `twincone materials` lists them")]
    Unknown {
        /// As asked for.
        id: String,
        /// ", did you mean ...", or nothing.
        hint: String,
    },
    /// No such data set of this crystal.
    #[error("{material} has no data set `{dataset}`; it has {available}")]
    UnknownDataset {
        /// Crystal id.
        material: String,
        /// As asked for.
        dataset: String,
        /// Ids of those it has.
        available: String,
    },
    /// A wavelength that the data set does not cover.
    #[error(
        "{whose}{wavelength:.3} is outside {from} to {to}, where {material}:{dataset} is valid; {remedy}"
    )]
    OutOfRange {
        /// "the idler, ", or nothing.
        whose: &'static str,
        /// The wavelength asked for.
        wavelength: Wavelength,
        /// Shortest wavelength of the set.
        from: Wavelength,
        /// Longest wavelength of the set.
        to: Wavelength,
        /// Crystal id.
        material: String,
        /// Data set id.
        dataset: String,
        /// The sets that do cover it, and how to go on.
        remedy: String,
    },
    /// A temperature for a set that has no thermo-optic terms.
    #[error(
        "{material}:{dataset} holds at {own} only, it has no thermo-optic terms (asked for {asked}); {remedy}"
    )]
    NoThermoOptics {
        /// Crystal id.
        material: String,
        /// Data set id.
        dataset: String,
        /// The set's own temperature.
        own: Temperature,
        /// The temperature asked for.
        asked: Temperature,
        /// The sets that have terms.
        remedy: String,
    },
    /// A temperature outside the range of the thermo-optic terms.
    #[error(
        "{asked} is outside {from} to {to}, where the thermo-optic terms of {material}:{dataset} are valid; choose a temperature inside or pass --extrapolate"
    )]
    TemperatureOutOfRange {
        /// The temperature asked for.
        asked: Temperature,
        /// Lowest temperature.
        from: Temperature,
        /// Highest temperature.
        to: Temperature,
        /// Crystal id.
        material: String,
        /// Data set id.
        dataset: String,
    },
    /// The formula gives no index there (a pole nearby).
    #[error(
        "{material}:{dataset} gives no index at {wavelength:.3} and {temperature}: too far outside its range"
    )]
    NoIndex {
        /// The wavelength asked for.
        wavelength: Wavelength,
        /// The temperature asked for.
        temperature: Temperature,
        /// Crystal id.
        material: String,
        /// Data set id.
        dataset: String,
    },
    /// A material file that cannot be read.
    #[error("{0}")]
    File(String),
}

/// A crystal, validated.
#[derive(Debug, Clone)]
pub struct Material {
    /// Short name for the command line.
    pub id: String,
    /// As it was written.
    pub file: File,
    /// Completed nonlinear tensor in the dielectric frame; `None` in centrosymmetric crystals.
    pub tensor: Option<Tensor>,
    sets: Vec<DataSet>,
    expansion: Option<(Temperature, [ExpansionAxis; 3])>,
    default: usize,
}

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
    thermo: Option<ThermoTerms>,
}

#[derive(Debug, Clone)]
struct ThermoTerms {
    reference: Temperature,
    range: Option<RangeInclusive<f64>>,
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

    fn same_temperature(&self, temperature: Temperature) -> bool {
        (temperature.degc() - self.temperature.degc()).abs() < 1e-9
    }

    /// Index of axis 0, 1, 2 (X, Y, Z), without range checks; `None` beyond a pole.
    fn index(&self, axis: usize, wavelength: Wavelength, temperature: Temperature) -> Option<Index> {
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

impl Material {
    /// Data sets, in the order of the file.
    #[must_use]
    pub fn sets(&self) -> &[DataSet] {
        &self.sets
    }

    /// The set used where none is named.
    #[must_use]
    pub fn default_set(&self) -> &DataSet {
        &self.sets[self.default]
    }

    /// A data set by id, or the default one.
    ///
    /// # Errors
    /// [`MaterialError::UnknownDataset`] names those there are.
    pub fn set(&self, id: Option<&str>) -> Result<&DataSet, MaterialError> {
        let Some(id) = id else { return Ok(self.default_set()) };
        self.sets.iter().find(|s| s.id == id).ok_or_else(|| MaterialError::UnknownDataset {
            material: self.id.clone(),
            dataset: id.into(),
            available: join(self.sets.iter().map(|s| s.id.as_str())),
        })
    }

    /// Principal indices from one data set.
    ///
    /// # Errors
    /// Outside the set's range or temperature unless `reach` allows it; the text names range and remedy.
    pub fn principal(
        &self,
        set: &DataSet,
        wavelength: Wavelength,
        temperature: Temperature,
        reach: Reach,
    ) -> Result<Principal, MaterialError> {
        self.check_reach(set, wavelength, temperature, reach)?;
        let mut axes = [Index { n: 1.0, slope: 0.0, curvature: 0.0 }; 3];
        for (axis, slot) in axes.iter_mut().enumerate() {
            *slot = set.index(axis, wavelength, temperature).ok_or_else(|| MaterialError::NoIndex {
                wavelength,
                temperature,
                material: self.id.clone(),
                dataset: set.id.clone(),
            })?;
        }
        Ok(Principal { wavelength, axes, optic: self.file.optic })
    }

    fn check_reach(
        &self,
        set: &DataSet,
        wavelength: Wavelength,
        temperature: Temperature,
        reach: Reach,
    ) -> Result<(), MaterialError> {
        if !set.same_temperature(temperature) && !set.has_thermo_optics() {
            let others: Vec<_> =
                self.sets.iter().filter(|s| s.has_thermo_optics()).map(|s| s.id.as_str()).collect();
            return Err(MaterialError::NoThermoOptics {
                material: self.id.clone(),
                dataset: set.id.clone(),
                own: set.temperature,
                asked: temperature,
                remedy: match others.as_slice() {
                    [] => "no set of this crystal has them: leave the temperature out".into(),
                    some => format!("choose one of {}, which have them", some.join(", ")),
                },
            });
        }
        if reach == Reach::Extrapolate {
            return Ok(());
        }
        if !set.covers(wavelength) {
            return Err(self.out_of_range(set, wavelength));
        }
        match set.thermo.as_ref().and_then(|t| t.range.as_ref()) {
            Some(range) if !set.covers_temperature(temperature) => {
                Err(MaterialError::TemperatureOutOfRange {
                    asked: temperature,
                    from: Temperature::celsius(*range.start()),
                    to: Temperature::celsius(*range.end()),
                    material: self.id.clone(),
                    dataset: set.id.clone(),
                })
            }
            _ => Ok(()),
        }
    }

    fn out_of_range(&self, set: &DataSet, wavelength: Wavelength) -> MaterialError {
        MaterialError::OutOfRange {
            whose: "",
            wavelength,
            from: set.from,
            to: set.to,
            material: self.id.clone(),
            dataset: set.id.clone(),
            remedy: self.sets_that_cover(&[wavelength]),
        }
    }

    /// Which sets cover all these wavelengths, as advice.
    #[must_use]
    pub fn sets_that_cover(&self, wavelengths: &[Wavelength]) -> String {
        let covers_all = |set: &&DataSet| wavelengths.iter().all(|w| set.covers(*w));
        let covering: Vec<_> = self.sets.iter().filter(covers_all).map(|s| s.id.as_str()).collect();
        match covering.as_slice() {
            [] => "no set of this crystal covers it; pass --extrapolate to go on, and the result is marked"
                .into(),
            some => {
                format!("use {}, or pass --extrapolate to go on, and the result is marked", some.join(" or "))
            }
        }
    }

    /// Length at `temperature` of a length 1 at 25 degC (or at `reference`), along a direction in the dielectric frame.
    #[must_use]
    pub fn expansion(&self, along: Vector3<f64>, reference: Temperature, temperature: Temperature) -> f64 {
        let Some((own_reference, axes)) = &self.expansion else { return 1.0 };
        let strain = |axis: &ExpansionAxis, at: Temperature| {
            let t = at.degc() - own_reference.degc();
            axis.linear_per_k * t + axis.quadratic_per_k2 * t * t
        };
        // strain tensor is diagonal in the dielectric frame: dl/l = sum_i s_i a_i^2
        let along_at = |at: Temperature| (0..3).map(|i| strain(&axes[i], at) * along[i].powi(2)).sum::<f64>();
        (1.0 + along_at(temperature)) / (1.0 + along_at(reference))
    }

    /// Looks at every data set over its whole range: indices that exist and are physical, axes in order, check values met.
    ///
    /// # Errors
    /// The first thing that is not right, in a sentence.
    pub fn examine(&self) -> Result<(), String> {
        self.sets.iter().try_for_each(|set| self.examine_set(set))
    }

    fn examine_set(&self, set: &DataSet) -> Result<(), String> {
        const POINTS: usize = 200;
        for n in 0..=POINTS {
            let share = n as f64 / POINTS as f64;
            let wavelength = Wavelength::metres(set.from.si() * (set.to.si() / set.from.si()).powf(share));
            let p =
                self.principal(set, wavelength, set.temperature, Reach::Within).map_err(|e| e.to_string())?;
            let [x, y, z] = p.axes.map(|i| i.n);
            if [x, y, z].iter().any(|n| *n > 6.0) {
                return Err(format!(
                    "{}: an index above 6 at {wavelength}; look at the signs of the coefficients",
                    set.id
                ));
            }
            if p.optic == Optic::Biaxial && !(x <= y && y <= z) {
                return Err(format!(
                    "{}: n_x <= n_y <= n_z does not hold at {wavelength} ({x:.4}, {y:.4}, {z:.4}); rename the axes",
                    set.id
                ));
            }
        }
        for check in &set.file.check {
            let axis = axis_number(&check.axis, self.file.optic)
                .ok_or_else(|| format!("{}: `{}` is no axis of this crystal", set.id, check.axis))?;
            let wavelength = Wavelength::metres(check.wavelength_um * 1e-6);
            let found = set.index(axis, wavelength, set.temperature).map_or(f64::NAN, |i| i.n);
            let off = (found - check.n).abs();
            if off.is_nan() || off > 1e-6 {
                return Err(format!(
                    "{}: n_{} at {} um comes out as {found:.7}, not {:.7}; look at the coefficients",
                    set.id, check.axis, check.wavelength_um, check.n
                ));
            }
        }
        Ok(())
    }

    /// Validates a material file's content.
    ///
    /// # Errors
    /// A sentence with the place in the text, given by `span`, where something is wrong.
    pub fn from_file(file: File) -> Result<Self, Fault> {
        let tensor = build_tensor(&file)?;
        let mut sets = Vec::with_capacity(file.dataset.len());
        for dataset in &file.dataset {
            sets.push(DataSet::from_file(dataset.get_ref(), file.optic)?);
        }
        let default = sets.iter().position(|s| &s.id == file.default_dataset.get_ref()).ok_or_else(|| {
            Fault::at(&file.default_dataset, "names no data set of this file; write the id of one of them")
        })?;
        let expansion = match &file.thermal_expansion {
            Some(e) => {
                let axes = per_axis(file.optic, [&e.o, &e.e, &e.x, &e.y, &e.z]);
                Some((parse(&e.reference)?, axes.map(|a| a.copied().unwrap_or_default())))
            }
            None => None,
        };
        Ok(Self { id: file.id.get_ref().clone(), tensor, sets, expansion, default, file })
    }
}

/// A place in a material file and what is wrong there.
#[derive(Debug, Clone)]
pub struct Fault {
    /// Byte range in the file.
    pub span: std::ops::Range<usize>,
    /// What is wrong and what to do.
    pub message: String,
}

impl Fault {
    fn at<T>(place: &Spanned<T>, message: impl Into<String>) -> Self {
        Self { span: place.span(), message: message.into() }
    }
}

fn parse<T: std::str::FromStr<Err = crate::quantity::QuantityError>>(
    text: &Spanned<String>,
) -> Result<T, Fault> {
    text.get_ref().parse().map_err(|e: crate::quantity::QuantityError| Fault::at(text, e.to_string()))
}

/// 0, 1, 2 for the name of an axis.
fn axis_number(name: &str, optic: Optic) -> Option<usize> {
    match (optic, name) {
        (Optic::Uniaxial, "o") | (Optic::Biaxial, "x") => Some(0),
        (Optic::Biaxial, "y") => Some(1),
        (Optic::Uniaxial, "e") | (Optic::Biaxial, "z") => Some(2),
        _ => None,
    }
}

/// Picks o, o, e or x, y, z from the five optional axes o, e, x, y, z.
fn per_axis<T>(optic: Optic, [o, e, x, y, z]: [&Option<T>; 5]) -> [Option<&T>; 3] {
    match optic {
        Optic::Uniaxial => [o.as_ref(), o.as_ref(), e.as_ref()],
        Optic::Biaxial => [x.as_ref(), y.as_ref(), z.as_ref()],
    }
}

fn build_tensor(file: &File) -> Result<Option<Tensor>, Fault> {
    let Some(spanned) = &file.nonlinearity else { return Ok(None) };
    let given = spanned.get_ref();
    let mut frame = Matrix3::<f64>::zeros();
    for (column, name) in [&given.frame.x, &given.frame.y, &given.frame.z].into_iter().enumerate() {
        let (sign, bare) = name.strip_prefix('-').map_or((1.0, name.as_str()), |bare| (-1.0, bare));
        let row = ["x", "y", "z"].iter().position(|n| *n == bare);
        let row = row.ok_or_else(|| {
            Fault::at(spanned, format!("`{name}` is not an axis; write x, y or z, with a minus to turn it"))
        })?;
        frame[(row, column)] = sign;
    }
    if (frame.determinant() - 1.0).abs() > 1e-12 {
        return Err(Fault::at(spanned, "`frame` is not right-handed; turn the sign of one of its axes"));
    }
    Tensor::from_elements(
        &given.elements_pm_per_v,
        file.point_group.get_ref(),
        given.unique_axis.as_deref(),
        given.kleinman,
        frame,
    )
    .map(Some)
    .map_err(|message| Fault::at(spanned, message))
}

impl DataSet {
    fn from_file(file: &Dataset, optic: Optic) -> Result<Self, Fault> {
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

fn join<'a>(names: impl Iterator<Item = &'a str>) -> String {
    names.collect::<Vec<_>>().join(", ")
}

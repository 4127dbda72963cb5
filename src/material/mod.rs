//! Crystals: dispersion, nonlinearity, thermal behaviour, and where each number comes from.

mod catalogue;
mod dataset;
pub mod dispersion;
mod error;
#[allow(missing_docs, reason = "each field is the key of the same name in a material file, described there")]
pub mod file;
pub mod tensor;

pub use catalogue::{Catalogue, TEMPLATE, digest};
pub use dataset::{DataSet, Index, Principal, Reach};
pub use error::MaterialError;
pub use file::{Known, Optic, Relative};

use nalgebra::{Matrix3, Vector3};
use num_dual::DualNum;
use toml::Spanned;

use crate::quantity::{Angle, Temperature, Wavelength};
use file::{ExpansionAxis, File};
use tensor::Tensor;

/// A crystal, validated.
#[derive(Debug, Clone)]
pub struct Material {
    /// Short name for the command line.
    pub id: String,
    /// As it was written.
    pub file: File,
    /// Of the text of its file: another text has another digest.
    pub digest: u64,
    /// Completed nonlinear tensor in the dielectric frame; `None` in centrosymmetric crystals.
    pub tensor: Option<Tensor>,
    sets: Vec<DataSet>,
    expansion: Option<(Temperature, [ExpansionAxis; 3])>,
    default: usize,
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
        self.expansion_of([along.x, along.y, along.z], reference, temperature.degc())
    }

    /// The same over a scalar that carries derivatives; `degc` is the temperature in degC.
    #[must_use]
    pub fn expansion_of<D: DualNum<f64> + Copy>(&self, along: [D; 3], reference: Temperature, degc: D) -> D {
        let Some((own_reference, axes)) = &self.expansion else { return D::from(1.0) };
        let strain = |axis: &ExpansionAxis, at: D| {
            let t = at - own_reference.degc();
            t * axis.linear_per_k + t * t * axis.quadratic_per_k2
        };
        // strain tensor is diagonal in the dielectric frame: dl/l = sum_i s_i a_i^2
        let along_at =
            |at: D| (0..3).fold(D::from(0.0), |sum, i| sum + strain(&axes[i], at) * along[i] * along[i]);
        (along_at(degc) + 1.0) / (along_at(D::from(reference.degc())) + 1.0)
    }

    /// What `phi` is called in the other choice of crystal axes in use: the smallest equivalent angle, and how to tell
    /// that choice. `None` where there is only one.
    #[must_use]
    pub fn other_phi(&self, phi: Angle) -> Option<(Angle, &str)> {
        let other = self.file.nonlinearity.as_ref()?.get_ref().other_convention.as_ref()?;
        let degrees = |text: &Spanned<String>| parse::<Angle>(text).ok().map(Angle::degrees);
        let there = (phi.degrees() + degrees(&other.phi_shift)?).rem_euclid(degrees(&other.phi_period)?);
        Some((Angle::from_degrees(crate::quantity::tidy(there)), other.text.as_str()))
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
        Ok(Self { id: file.id.get_ref().clone(), digest: 0, tensor, sets, expansion, default, file })
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
    if let Some(other) = &given.other_convention {
        parse::<Angle>(&other.phi_shift)?;
        let period: Angle = parse(&other.phi_period)?;
        if period.si() <= 0.0 {
            return Err(Fault::at(&other.phi_period, "the period must be positive, such as 60 deg"));
        }
    }
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

fn join<'a>(names: impl Iterator<Item = &'a str>) -> String {
    names.collect::<Vec<_>>().join(", ")
}

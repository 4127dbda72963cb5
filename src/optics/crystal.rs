//! A crystal as it is cut and mounted: what gives a [`Medium`](super::Medium) at each wavelength.

use std::sync::Arc;

use nalgebra::Vector3;

use crate::frame::{Cut, Dielectric, Orientation, Placement, Reversal};
use crate::material::{DataSet, Material, MaterialError, Principal, Reach};
use crate::quantity::{Angle, Length, Temperature, Wavelength};

/// One crystal of the experiment, with every option decided.
#[derive(Debug, Clone)]
pub struct Crystal {
    /// What it is called in reports.
    pub name: String,
    /// What it is made of.
    pub material: Arc<Material>,
    /// Which of the material's data sets is used.
    pub dataset: usize,
    /// Angles of the face normal.
    pub cut: Cut,
    /// How it was put into its mount.
    pub reversal: Reversal,
    /// How its mount stands.
    pub orientation: Orientation,
    /// Along the face normal, at `reference_temperature`.
    pub length: Length,
    /// Period of the domains along the face normal, at `reference_temperature`.
    pub poling: Option<Length>,
    /// Temperature of the crystal.
    pub temperature: Temperature,
    /// Temperature at which `length` and `poling` are stated.
    pub reference_temperature: Temperature,
    /// Whether length and poling period grow with temperature where the material says how.
    pub expands: bool,
    /// Whether the data set may be used outside its range.
    pub reach: Reach,
}

impl Crystal {
    /// A crystal cut across Z, 1 mm long, upright, at the data set's own temperature; change what differs.
    ///
    /// ```
    /// use std::sync::Arc;
    /// use twincone::material::Catalogue;
    /// use twincone::optics::Crystal;
    ///
    /// let bbo = Arc::new(Catalogue::default().get("bbo")?);
    /// let crystal = Crystal::new(bbo, Some("kato-1986"))?;
    /// assert_eq!(crystal.temperature.degc(), 20.0);
    /// # Ok::<(), twincone::material::MaterialError>(())
    /// ```
    ///
    /// # Errors
    /// An unknown data set.
    pub fn new(material: Arc<Material>, dataset: Option<&str>) -> Result<Self, MaterialError> {
        let set = material.set(dataset)?;
        let temperature = set.temperature;
        let dataset = material.sets().iter().position(|s| s.id == set.id).unwrap_or(0);
        Ok(Self {
            name: "1".into(),
            material,
            dataset,
            cut: Cut { theta: Angle::default(), phi: Angle::default() },
            reversal: Reversal::None,
            orientation: Orientation::default(),
            length: Length::metres(1e-3),
            poling: None,
            temperature,
            reference_temperature: Temperature::celsius(25.0),
            expands: true,
            reach: Reach::Within,
        })
    }

    /// The same crystal with other cut angles, in degrees.
    #[must_use]
    pub fn with_cut(self, theta_deg: f64, phi_deg: f64) -> Self {
        let cut = Cut { theta: Angle::from_degrees(theta_deg), phi: Angle::from_degrees(phi_deg) };
        Self { cut, ..self }
    }

    /// The data set in use.
    #[must_use]
    pub fn set(&self) -> &DataSet {
        &self.material.sets()[self.dataset]
    }

    /// The same crystal described by another of the material's data sets, at that set's own temperature where it
    /// knows no other.
    #[must_use]
    pub fn with_dataset(&self, dataset: usize) -> Self {
        let set = &self.material.sets()[dataset];
        let temperature = if set.has_thermo_optics() { self.temperature } else { set.temperature };
        Self { dataset, temperature, ..self.clone() }
    }

    /// Axes of crystal and mount in the lab.
    #[must_use]
    pub fn placement(&self) -> Placement {
        Placement::new(self.cut, self.reversal, &self.orientation)
    }

    /// Axis in the lab about which a small positive change of `tilt` (or `cross_tilt`) turns the crystal, right-handed.
    #[must_use]
    pub fn turning_axis(&self, cross: bool) -> Vector3<f64> {
        const STEP: f64 = 1e-6;
        let mut turned = self.orientation;
        let turn = if cross { &mut turned.cross_tilt } else { &mut turned.tilt };
        *turn = Angle::radians(turn.si() + STEP);
        (turned.rotation() * self.orientation.rotation().inverse()).scaled_axis().normalize()
    }

    /// Where the entrance face sends the pump's reflection.
    #[must_use]
    pub fn reflection(&self) -> Vector3<f64> {
        let normal = self.orientation.rotation() * Vector3::z();
        Vector3::z() - normal * (2.0 * normal.z)
    }

    /// Principal indices at a wavelength and the crystal's temperature.
    ///
    /// # Errors
    /// Outside the data set's range, unless the crystal may extrapolate.
    pub fn principal(&self, wavelength: Wavelength) -> Result<Principal, MaterialError> {
        self.material.principal(self.set(), wavelength, self.temperature, self.reach)
    }

    /// Whether indices at this wavelength lie outside the data set's range.
    #[must_use]
    pub fn extrapolates(&self, wavelength: Wavelength) -> bool {
        !self.set().covers(wavelength) || !self.set().covers_temperature(self.temperature)
    }

    /// Length along the normal at the crystal's temperature.
    #[must_use]
    pub fn hot_length(&self) -> Length {
        Length::metres(self.length.si() * self.expansion())
    }

    /// Poling period at the crystal's temperature.
    #[must_use]
    pub fn hot_poling(&self) -> Option<Length> {
        self.poling.map(|period| Length::metres(period.si() * self.expansion()))
    }

    /// Ratio of a length along the normal at the crystal's temperature to that at `reference_temperature`.
    #[must_use]
    pub fn expansion(&self) -> f64 {
        if !self.expands {
            return 1.0;
        }
        let [_, _, Dielectric(w)] = self.cut.axes();
        self.material.expansion(w, self.reference_temperature, self.temperature)
    }
}

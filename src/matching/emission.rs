//! One crystal emitting pairs of given wavelengths: indices once per wavelength, media once per orientation.

use nalgebra::Vector3;

use super::interaction::{Interaction, Process, Roles};
use super::mismatch::Mismatch;
use super::partner::Pairing;
use crate::frame::{Direction, Lab, Mount, Orientation, Placement, Tangential};
use crate::material::{MaterialError, Principal, tensor::is_centrosymmetric};
use crate::optics::{Crystal, Indices, Medium, Sheet};
use crate::quantity::Wavelength;

/// Wavelengths of one process; energy is conserved by construction.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Photons {
    /// Of the pump.
    pub pump: Wavelength,
    /// Of the signal.
    pub signal: Wavelength,
    /// Of the idler.
    pub idler: Wavelength,
}

impl Photons {
    /// The idler follows from pump and signal; `None` where the signal is not longer than the pump.
    #[must_use]
    pub fn new(pump: Wavelength, signal: Wavelength) -> Option<Self> {
        Some(Self { pump, signal, idler: signal.partner(pump)? })
    }

    /// Whether signal and idler have the same wavelength (to a part in 10^9).
    #[must_use]
    pub fn degenerate(&self) -> bool {
        (self.signal.si() / self.idler.si() - 1.0).abs() < 1e-9
    }

    /// Signal and idler exchanged.
    #[must_use]
    pub fn exchanged(&self) -> Self {
        Self { pump: self.pump, signal: self.idler, idler: self.signal }
    }
}

/// Principal indices at the three wavelengths: independent of how the crystal is cut and mounted.
#[derive(Debug, Clone, Copy)]
pub struct Triplet {
    /// At the pump.
    pub pump: Principal,
    /// At the signal.
    pub signal: Principal,
    /// At the idler.
    pub idler: Principal,
}

impl Triplet {
    /// Looks up the indices of a crystal.
    ///
    /// # Errors
    /// A wavelength or temperature outside the data set's range.
    pub fn new(crystal: &Crystal, photons: &Photons) -> Result<Self, MaterialError> {
        Self::by(crystal, photons, |wavelength| crystal.principal(wavelength))
    }

    /// The same from indices that may be remembered.
    ///
    /// # Errors
    /// A wavelength or temperature outside the data set's range.
    pub fn remembered(
        indices: &mut Indices,
        crystal: &Crystal,
        photons: &Photons,
    ) -> Result<Self, MaterialError> {
        Self::by(crystal, photons, |wavelength| indices.principal(crystal, wavelength))
    }

    fn by(
        crystal: &Crystal,
        photons: &Photons,
        mut principal: impl FnMut(Wavelength) -> Result<Principal, MaterialError>,
    ) -> Result<Self, MaterialError> {
        let mut look_up = |name: &'static str, wavelength: Wavelength| {
            principal(wavelength).map_err(|error| match error {
                MaterialError::OutOfRange { wavelength, from, to, material, dataset, .. } => {
                    let all = [photons.pump, photons.signal, photons.idler];
                    let remedy = crystal.material.sets_that_cover(&all);
                    MaterialError::OutOfRange { whose: name, wavelength, from, to, material, dataset, remedy }
                }
                other => other,
            })
        };
        Ok(Self {
            pump: look_up("the pump, ", photons.pump)?,
            signal: look_up("the signal, ", photons.signal)?,
            idler: look_up("the idler, ", photons.idler)?,
        })
    }

    /// The three media in a placement.
    #[must_use]
    pub fn media(&self, placement: &Placement) -> Media {
        let axes = placement.dielectric_axes();
        Media {
            pump: Medium::new(&self.pump, axes),
            signal: Medium::new(&self.signal, axes),
            idler: Medium::new(&self.idler, axes),
        }
    }
}

/// The crystal at the three frequencies, in the mount frame.
#[derive(Debug, Clone, Copy)]
pub struct Media {
    /// At the pump.
    pub pump: Medium,
    /// At the signal.
    pub signal: Medium,
    /// At the idler.
    pub idler: Medium,
}

impl Media {
    fn exchanged(&self) -> Self {
        Self { pump: self.pump, signal: self.idler, idler: self.signal }
    }
}

/// A crystal that stands in the beam, at the wavelengths of one pair of photons.
#[derive(Debug, Clone)]
pub struct Emission {
    /// The wavelengths.
    pub photons: Photons,
    /// Frames of the crystal.
    pub placement: Placement,
    /// The crystal at the three frequencies.
    pub media: Media,
    /// 2 pi / period of the domains at the crystal's temperature, rad/m; 0 without poling.
    pub grating: f64,
    /// The media of the crystal at normal incidence, where the sign of the grating's term is decided.
    upright: Option<Box<(Placement, Media)>>,
    /// Length along the normal, m.
    pub length: f64,
}

impl Emission {
    /// From indices that are already known; `crystal` gives cut, mount, length and poling.
    #[must_use]
    pub fn new(crystal: &Crystal, photons: Photons, triplet: &Triplet) -> Self {
        let placement = crystal.placement();
        let at_normal_incidence = || {
            let upright = Placement::new(crystal.cut, crystal.reversal, &Orientation::default());
            Box::new((upright, triplet.media(&upright)))
        };
        Self {
            upright: crystal.poling.map(|_| at_normal_incidence()),
            photons,
            media: triplet.media(&placement),
            placement,
            grating: crystal.hot_poling().map_or(0.0, |period| 2.0 * std::f64::consts::PI / period.si()),
            length: crystal.hot_length().si(),
        }
    }

    /// Looks the indices up.
    ///
    /// # Errors
    /// A wavelength or temperature outside the data set's range.
    pub fn of(crystal: &Crystal, photons: Photons) -> Result<Self, MaterialError> {
        Ok(Self::new(crystal, photons, &Triplet::new(crystal, &photons)?))
    }

    /// Sheet assignments of an interaction at these wavelengths.
    ///
    /// # Errors
    /// o and e asked of a biaxial crystal.
    pub fn roles(&self, interaction: Interaction) -> Result<Vec<Roles>, String> {
        interaction.roles(&self.media.pump, &self.media.signal, &self.media.idler)
    }

    /// In the words of the crystal's kind.
    #[must_use]
    pub fn process(&self, roles: Roles) -> Process {
        roles.process(&self.media.pump, &self.media.signal, &self.media.idler)
    }

    /// The processes that an interaction stands for in this crystal: of type 0 the brighter one; of an explicit
    /// degenerate process also the same pair with signal and idler exchanged.
    ///
    /// # Errors
    /// o and e asked of a biaxial crystal.
    pub fn wanted(&self, crystal: &Crystal, interaction: Interaction) -> Result<Vec<Roles>, String> {
        let mut all = self.roles(interaction)?;
        if interaction == Interaction::Zero {
            all = vec![self.brightest(crystal, &all)];
        }
        if let (Interaction::Explicit(_), [only], true) =
            (interaction, all.as_slice(), self.photons.degenerate())
            && only.signal != only.idler
        {
            all.push(only.exchanged());
        }
        Ok(all)
    }

    /// The assignment with the largest |d_eff| along the pump.
    pub(super) fn brightest(&self, crystal: &Crystal, all: &[Roles]) -> Roles {
        let d_eff = |roles: &Roles| {
            let tensor = crystal.material.tensor.as_ref()?;
            Some(self.pairing(*roles, Direction::forward())?.d_eff(self, tensor))
        };
        let mut best = all[0];
        for roles in &all[1..] {
            if d_eff(roles) > d_eff(&best) {
                best = *roles;
            }
        }
        best
    }

    /// Mismatch of a process, with the grating's sign of [`Self::grating_sign`].
    #[must_use]
    pub fn mismatch(&self, roles: Roles) -> Option<Mismatch> {
        let sign = if self.grating == 0.0 { 1.0 } else { self.grating_sign(roles)? };
        Mismatch::new(&self.media, roles, &self.placement, sign * self.grating)
    }

    /// Sign s of the grating term: the one that matches better for a pair along the pump at normal incidence, whatever
    /// the crystal's tilt. `None` without poling.
    #[must_use]
    pub fn grating_sign(&self, roles: Roles) -> Option<f64> {
        let (placement, media) = self.upright.as_deref()?;
        let bare = Mismatch::new(media, roles, placement, 0.0)?;
        bare.at(bare.along_pump()).map(|at| at.value.signum())
    }

    /// The pump and a pair whose signal leaves towards `signal`; `None` where a wave does not exist.
    #[must_use]
    pub fn pairing(&self, roles: Roles, signal: Direction) -> Option<Pairing> {
        Pairing::new(self, roles, signal)
    }

    /// The same pairs seen from the idler.
    #[must_use]
    pub fn exchanged(&self) -> Self {
        let upright = self.upright.as_deref();
        Self {
            photons: self.photons.exchanged(),
            placement: self.placement,
            media: self.media.exchanged(),
            grating: self.grating,
            upright: upright.map(|(placement, media)| Box::new((*placement, media.exchanged()))),
            length: self.length,
        }
    }

    /// Whether symmetry forbids a pair whose signal leaves towards `signal`; `None` where the tensor is not known.
    #[must_use]
    pub fn is_dark(&self, crystal: &Crystal, roles: Roles, signal: Direction) -> Option<bool> {
        self.is_dark_with(crystal, roles, &self.mismatch(roles)?, signal)
    }

    /// The same where the mismatch is known.
    pub(super) fn is_dark_with(
        &self,
        crystal: &Crystal,
        roles: Roles,
        mismatch: &Mismatch,
        signal: Direction,
    ) -> Option<bool> {
        let material = &crystal.material;
        match &material.tensor {
            Some(tensor) => {
                let pairing = Pairing::of(self, roles, mismatch, signal)?;
                Some(pairing.d_eff(self, tensor) < 1e-6 * tensor.largest())
            }
            None => is_centrosymmetric(material.file.point_group.get_ref()).then_some(true),
        }
    }

    /// Polar angle and azimuth of the pump's wave vector in the dielectric frame, radians.
    #[must_use]
    pub fn pump_inside(&self, roles: Roles) -> Option<(f64, f64)> {
        let mismatch = Mismatch::new(&self.media, roles, &self.placement, 0.0)?;
        let k = self.media.pump.wave(roles.pump, mismatch.pump())?.k;
        let d = self.placement.to_dielectric(k).0;
        Some((d.xy().norm().atan2(d.z), d.y.atan2(d.x)))
    }

    /// Azimuth of the signal's electric field in the lab, from +x towards +y, degrees in [0, 180), for a direction
    /// outside; `None` where there is no such wave.
    #[must_use]
    pub fn field_azimuth(&self, roles: Roles, signal: Direction) -> Option<f64> {
        self.azimuth_of_field(&self.media.signal, roles.signal, signal)
    }

    /// The same for the idler.
    #[must_use]
    pub fn idler_field_azimuth(&self, roles: Roles, idler: Direction) -> Option<f64> {
        self.azimuth_of_field(&self.media.idler, roles.idler, idler)
    }

    fn azimuth_of_field(&self, medium: &Medium, sheet: Sheet, direction: Direction) -> Option<f64> {
        let Lab(d) = direction.lab();
        let Mount(inside) = self.placement.to_mount(Lab(d));
        if inside.z <= 0.0 {
            return None;
        }
        let q = Tangential { u: medium.k0() * inside.x, v: medium.k0() * inside.y };
        let Lab(field) = self.placement.to_lab(medium.wave(sheet, q)?.field);
        // the transverse part of the field, in the plane that the photon outside lies across
        let outside: Vector3<f64> = field - d * field.dot(&d);
        let azimuth = outside.y.atan2(outside.x).to_degrees().rem_euclid(180.0);
        // 0 and 180 deg are the same field, whatever rounding makes of it
        let horizontal = !(1e-9..=180.0 - 1e-9).contains(&azimuth);
        Some(if horizontal { 0.0 } else { crate::quantity::tidy(azimuth) })
    }
}

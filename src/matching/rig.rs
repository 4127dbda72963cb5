//! A crystal and its photons with one quantity free: what cuts and turns are searched on.

use super::emission::{Emission, Photons, Triplet};
use crate::optics::Crystal;
use crate::quantity::{Angle, Length, Temperature, Wavelength};

/// The quantity that is varied, and the unit of its setting.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Knob {
    /// Polar angle of the cut, radians.
    Theta,
    /// Azimuth of the cut, radians.
    Phi,
    /// Inverse poling period, 1/m: a grating's vector grows with it, and 0 is no grating.
    InversePeriod,
    /// Tilt, radians.
    Tilt,
    /// Cross tilt, radians.
    CrossTilt,
    /// Temperature, degrees Celsius.
    Temperature,
    /// Pump wavelength, m.
    Pump,
}

impl Knob {
    /// Whether other settings mean other refractive indices.
    fn moves_indices(self) -> bool {
        matches!(self, Self::Temperature | Self::Pump)
    }
}

/// Crystal, photons and their indices; only the knob's quantity changes.
pub(super) struct Rig {
    pub crystal: Crystal,
    pub photons: Photons,
    /// A signal wavelength that stays when the pump changes; else both photons keep their frequency ratio.
    pub fixed_signal: Option<Wavelength>,
    pub triplet: Triplet,
    pub knob: Knob,
}

impl Rig {
    /// The rig at a setting of its knob; `None` where it cannot be there.
    pub fn at(&self, setting: f64) -> Option<(Crystal, Photons, Emission)> {
        let mut crystal = self.crystal.clone();
        let mut photons = self.photons;
        match self.knob {
            Knob::Theta => crystal.cut.theta = Angle::radians(setting),
            Knob::Phi => crystal.cut.phi = Angle::radians(setting),
            Knob::InversePeriod => {
                crystal.poling = (setting > 0.0).then(|| Length::metres(1.0 / setting));
            }
            Knob::Tilt => crystal.orientation.tilt = Angle::radians(setting),
            Knob::CrossTilt => crystal.orientation.cross_tilt = Angle::radians(setting),
            Knob::Temperature => crystal.temperature = Temperature::celsius(setting),
            Knob::Pump => photons = retuned(&photons, Wavelength::metres(setting), self.fixed_signal)?,
        }
        let emission = match self.knob.moves_indices() {
            true => Emission::of(&crystal, photons).ok()?,
            false => Emission::new(&crystal, photons, &self.triplet),
        };
        Some((crystal, photons, emission))
    }

    /// A function of the emission as a function of the setting.
    pub fn along<'a, T>(&'a self, f: impl Fn(&Emission) -> Option<T> + 'a) -> impl Fn(f64) -> Option<T> + 'a {
        move |setting| self.at(setting).and_then(|(_, _, emission)| f(&emission))
    }
}

/// The photons when the pump changes: the signal stays if fixed, else the frequency ratio stays.
pub(super) fn retuned(
    photons: &Photons,
    pump: Wavelength,
    fixed_signal: Option<Wavelength>,
) -> Option<Photons> {
    let share = photons.pump.si() / photons.signal.si();
    Photons::new(pump, fixed_signal.unwrap_or(Wavelength::metres(pump.si() / share)))
}

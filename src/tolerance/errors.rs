//! What can be off, by how much.

use crate::matching::Photons;
use crate::optics::Crystal;
use crate::quantity::{Angle, Length, Temperature, Wavelength};

/// Something that is not as it was ordered or set.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Cause {
    /// Polar angle of the cut.
    Theta,
    /// Azimuth of the cut.
    Phi,
    /// Wavelength of the pump.
    Pump,
    /// Temperature of the crystal.
    Temperature,
    /// Setting of the tilt.
    Tilt,
    /// Roll of the crystal in its mount.
    Roll,
    /// Length of the crystal.
    Length,
    /// Direction of the pump, horizontally.
    PumpHorizontal,
    /// Direction of the pump, vertically.
    PumpVertical,
}

/// In the order of tables.
pub const CAUSES: [Cause; 9] = [
    Cause::Theta,
    Cause::Phi,
    Cause::Pump,
    Cause::Temperature,
    Cause::Tilt,
    Cause::Roll,
    Cause::Length,
    Cause::PumpHorizontal,
    Cause::PumpVertical,
];

impl Cause {
    /// As it stands in tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Theta => "theta",
            Self::Phi => "phi",
            Self::Pump => "pump_wavelength",
            Self::Temperature => "temperature",
            Self::Tilt => "tilt_setting",
            Self::Roll => "roll",
            Self::Length => "length",
            Self::PumpHorizontal => "pump_direction_h",
            Self::PumpVertical => "pump_direction_v",
        }
    }

    /// Unit in tables.
    #[must_use]
    pub fn unit(self) -> &'static str {
        match self {
            Self::Pump => "nm",
            Self::Temperature => "K",
            Self::Length => "mm",
            _ => "deg",
        }
    }

    /// A value in SI in the unit of tables.
    #[must_use]
    pub fn shown(self, si: f64) -> f64 {
        match self {
            Self::Pump => Wavelength::metres(si).nm(),
            Self::Temperature => si,
            Self::Length => Length::metres(si).mm(),
            _ => Angle::radians(si).degrees(),
        }
    }
}

/// An error, or a deviation, for each of [`CAUSES`], in SI (radians, metres, kelvin).
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Errors(pub [f64; CAUSES.len()]);

impl Errors {
    /// What is usual: a catalogue's cut of half a degree, a diode that is 2 nm off its label, a mount set by hand.
    /// Common practice; the cut's error is what suppliers state for stock pieces.
    #[must_use]
    pub fn usual() -> Self {
        let deg = |x: f64| Angle::from_degrees(x).si();
        Self([deg(0.5), deg(0.5), 2e-9, 2.0, deg(0.1), deg(1.0), 1e-4, deg(0.05), deg(0.05)])
    }

    /// Of one cause.
    #[must_use]
    pub fn of(&self, cause: Cause) -> f64 {
        self.0[cause as usize]
    }

    /// With one cause at a value, the others as they are.
    #[must_use]
    pub fn with(mut self, cause: Cause, value: f64) -> Self {
        self.0[cause as usize] = value;
        self
    }

    /// Nothing off but one cause.
    #[must_use]
    pub fn only(cause: Cause, value: f64) -> Self {
        Self::default().with(cause, value)
    }

    /// The crystal and photons with these deviations, seen from the pump: a pump that points elsewhere is a crystal that
    /// stands otherwise, and everything that leaves it points elsewhere too ([`Self::aim`]). `None` where no photon is
    /// longer than the pump.
    #[must_use]
    pub fn applied(
        &self,
        crystal: &Crystal,
        photons: Photons,
        fixed_signal: Option<Wavelength>,
    ) -> Option<(Crystal, Photons)> {
        let mut crystal = crystal.clone();
        let plus = |angle: Angle, cause: Cause| Angle::radians(angle.si() + self.of(cause));
        crystal.cut.theta = plus(crystal.cut.theta, Cause::Theta);
        crystal.cut.phi = plus(crystal.cut.phi, Cause::Phi);
        let stands = &mut crystal.orientation;
        stands.tilt = plus(stands.tilt, Cause::Tilt);
        stands.roll = plus(stands.roll, Cause::Roll);
        // a pump turned by +h about y sees the crystal turned by -h; upwards is a turn by -v about x
        stands.about_y = Angle::radians(stands.about_y.si() - self.of(Cause::PumpHorizontal));
        stands.about_x = plus(stands.about_x, Cause::PumpVertical);
        crystal.length = Length::metres(crystal.length.si() + self.of(Cause::Length));
        let warmer = self.of(Cause::Temperature);
        if warmer != 0.0 {
            crystal.temperature = Temperature::celsius(crystal.temperature.degc() + warmer);
        }
        if self.of(Cause::Pump) == 0.0 {
            return Some((crystal, photons));
        }
        let pump = Wavelength::metres(photons.pump.si() + self.of(Cause::Pump));
        let ratio = photons.signal.si() / photons.pump.si();
        let signal = fixed_signal.unwrap_or(Wavelength::metres(pump.si() * ratio));
        Some((crystal, Photons::new(pump, signal)?))
    }

    /// Where the pump points, horizontally and vertically, radians.
    #[must_use]
    pub fn aim(&self) -> [f64; 2] {
        [self.of(Cause::PumpHorizontal), self.of(Cause::PumpVertical)]
    }
}

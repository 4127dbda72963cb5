//! Keys whose numbers can be set in a [`Setup`] directly, without going through text: what sweeps turn millions of times.

use super::keys::{KeyPath, Unit};
use super::limits::{self, Limit};
use super::setup::{Setup, Signals};
use crate::matching::Target;
use crate::quantity::{Angle, Length, Temperature, Wavelength};

/// A key of one setup.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Handle {
    what: What,
    /// Crystals it acts on, from 0.
    crystals: Vec<usize>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum What {
    Tilt,
    CrossTilt,
    Roll,
    AboutX,
    AboutY,
    Theta,
    Phi,
    Crossing,
    HalfAngle,
    Separation,
    Length,
    Poling,
    Temperature,
    ReferenceTemperature,
    Pump,
    Signal,
    Screen,
}

impl Handle {
    /// The handle of a key; `None` where a change of it has to be read anew.
    #[must_use]
    pub fn of(path: &KeyPath, setup: &Setup) -> Option<Self> {
        let what = match path.key.path {
            "crystal.tilt" => What::Tilt,
            "crystal.cross_tilt" => What::CrossTilt,
            "crystal.roll" => What::Roll,
            "crystal.cut.theta" => What::Theta,
            "crystal.cut.phi" => What::Phi,
            "crystal.cut.crossing" => What::Crossing,
            "crystal.cut.half-angle" => What::HalfAngle,
            "crystal.cut.separation" => What::Separation,
            "crystal.length" => What::Length,
            "crystal.poling" => What::Poling,
            "crystal.temperature" => What::Temperature,
            "crystal.reference_temperature" => What::ReferenceTemperature,
            "mount.about_x" => What::AboutX,
            "mount.about_y" => What::AboutY,
            "pump.wavelength" if signals_stand_alone(setup) => What::Pump,
            "emission.signal" => What::Signal,
            "screen.distance" => What::Screen,
            _ => return None,
        };
        let all = 0..setup.crystals.len();
        let crystals = match (path.item.as_deref(), what) {
            (Some("*"), _)
            | (None, What::AboutX | What::AboutY | What::Pump | What::Signal | What::Screen) => all.collect(),
            (None, _) if setup.crystals.len() == 1 => vec![0],
            (None, _) => return None,
            (Some(item), _) => {
                let numbered = item.parse::<usize>().ok().map(|n| n.wrapping_sub(1));
                let named = || setup.crystals.iter().position(|c| c.name == item);
                vec![numbered.filter(|n| all.contains(n)).or_else(named)?]
            }
        };
        Some(Self { what, crystals })
    }

    /// Whether cuts and azimuths that were left open may come out differently: call [`Setup::settle`] then.
    #[must_use]
    pub fn unsettles(&self) -> bool {
        !matches!(
            self.what,
            What::Tilt
                | What::CrossTilt
                | What::Roll
                | What::AboutX
                | What::AboutY
                | What::Length
                | What::Screen
        )
    }

    /// Sets the value, in the unit of the key's column.
    ///
    /// # Errors
    /// A value that the key cannot have.
    pub fn set(&self, setup: &mut Setup, value: f64, unit: Unit) -> Limit {
        let angle = Angle::from_degrees(value);
        match self.what {
            What::Pump => {
                let pump = wavelength(value, "the pump wavelength")?;
                setup.pump = Some(pump);
            }
            What::Signal => {
                let signal = wavelength(value, "the signal wavelength")?;
                match &mut setup.signals {
                    Signals::At(all) if all.len() == 1 => all[0] = signal,
                    other => *other = Signals::At(vec![signal]),
                }
            }
            What::Screen => {
                let distance = length(value, unit);
                limits::positive(distance, "the screen distance", &distance)?;
                setup.screen = distance;
            }
            _ => {}
        }
        for &index in &self.crystals {
            self.set_crystal(setup, index, value, unit, angle)?;
        }
        Ok(())
    }

    fn set_crystal(&self, setup: &mut Setup, index: usize, value: f64, unit: Unit, angle: Angle) -> Limit {
        let crystal = &mut setup.crystals[index];
        let given = &mut setup.cut[index];
        let turn = |what: &str| limits::turn(angle, what).map(|()| angle);
        match self.what {
            What::Tilt => crystal.orientation.tilt = turn("the tilt")?,
            What::CrossTilt => crystal.orientation.cross_tilt = turn("the cross tilt")?,
            What::Roll => crystal.orientation.roll = angle,
            What::AboutX => crystal.orientation.about_x = turn("the mount's turn")?,
            What::AboutY => crystal.orientation.about_y = turn("the mount's turn")?,
            What::Theta => {
                limits::theta(angle)?;
                crystal.cut.theta = angle;
                (given.theta, given.target) = (true, None);
            }
            What::Phi => {
                crystal.cut.phi = angle;
                given.phi = true;
            }
            What::Crossing | What::HalfAngle | What::Separation => {
                let most = if self.what == What::Separation { 120.0 } else { 60.0 };
                limits::target(angle, most)?;
                let target = match self.what {
                    What::Crossing => Target::Crossing(angle.si()),
                    What::HalfAngle => Target::HalfAngle(angle.si()),
                    _ => Target::Separation(angle.si()),
                };
                (given.theta, given.target) = (false, Some(target));
            }
            What::Length => {
                let length = length(value, unit);
                limits::positive(length, "the crystal length", &length)?;
                crystal.length = length;
            }
            What::Poling => {
                let period = length(value, unit);
                limits::positive(period, "the poling period", &period)?;
                crystal.poling = Some(period);
            }
            What::Temperature => {
                limits::temperature(Temperature::celsius(value))?;
                crystal.temperature = Temperature::celsius(value);
            }
            What::ReferenceTemperature => {
                limits::temperature(Temperature::celsius(value))?;
                crystal.reference_temperature = Temperature::celsius(value);
            }
            What::Pump | What::Signal | What::Screen => {}
        }
        Ok(())
    }
}

/// Whether the signals that were read do not depend on the pump: not given as an idler, nor as a list with "degenerate".
fn signals_stand_alone(setup: &Setup) -> bool {
    let Some(emission) = &setup.written.emission else { return true };
    let emission = emission.get_ref();
    let follows = |text: &super::description::Text| text.get_ref().trim() == "degenerate";
    emission.idler.is_none() && !(emission.signal.len() > 1 && emission.signal.iter().any(follows))
}

fn wavelength(nm: f64, what: &str) -> Result<Wavelength, String> {
    let wavelength = metres(nm, Unit::Nm);
    let wavelength = Wavelength::metres(wavelength);
    limits::wavelength(wavelength, what, &wavelength)?;
    Ok(wavelength)
}

fn length(value: f64, unit: Unit) -> Length {
    Length::metres(metres(value, unit))
}

/// In metres, within a unit in the last place of what the text "405.1 nm" is read as.
fn metres(value: f64, unit: Unit) -> f64 {
    match unit {
        Unit::Nm => value / 1e9,
        Unit::Um => value / 1e6,
        _ => value / 1e3,
    }
}

//! Where a pixel is: a square sensor across the pump, on a screen or behind a lens.

use crate::frame::{Direction, Lab};
use crate::matching::{Cones, RingRow};
use crate::quantity::{Angle, Length};

use nalgebra::Vector3;

/// What brings the far field onto the sensor.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Optics {
    /// A screen at this distance from the crystal: x = distance dx/dz.
    Screen(Length),
    /// A lens of this focal length, its sensor in the focal plane: x = f dx/dz.
    Lens(Length),
}

impl Optics {
    /// Distance or focal length: millimetres on the sensor per unit of dx/dz.
    #[must_use]
    pub fn scale(self) -> Length {
        match self {
            Self::Screen(scale) | Self::Lens(scale) => scale,
        }
    }

    /// Width on the sensor of a field of this full angle about the pump.
    #[must_use]
    pub fn field(self, full: Angle) -> Length {
        Length::metres(2.0 * self.scale().si() * (0.5 * full.si()).tan())
    }
}

/// From where the sensor is seen. As it is, +x is on the right and +y up: what a translucent screen shows to somebody
/// downstream who looks back at the laser.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct Seen {
    /// Turned by half a turn.
    pub turned: bool,
    /// Left and right exchanged, after the turn.
    pub mirrored: bool,
}

impl Seen {
    /// Signs of x to the right and of y upwards.
    #[must_use]
    pub fn signs(self) -> (f64, f64) {
        let turn = if self.turned { -1.0 } else { 1.0 };
        (if self.mirrored { -turn } else { turn }, turn)
    }

    /// In words.
    #[must_use]
    pub fn words(self) -> &'static str {
        match (self.turned, self.mirrored) {
            (false, false) => "as a translucent screen shows it from downstream: +x right, +y up",
            (true, false) => "turned by 180 deg: +x left, +y down",
            (false, true) => "mirrored, as from upstream along the beam: +x left, +y up",
            (true, true) => "turned by 180 deg and mirrored: +x right, +y down",
        }
    }
}

/// A square sensor centred on the undeviated pump.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sensor {
    /// What stands before it.
    pub optics: Optics,
    /// Width and height of the sensor.
    pub field: Length,
    /// Pixels along each side.
    pub pixels: usize,
    /// From where it is seen.
    pub seen: Seen,
}

impl Sensor {
    /// Width of a field about the pump that holds all rings with a margin; 12 deg where there is none.
    #[must_use]
    pub fn field_for(cones: &Cones, optics: Optics) -> Length {
        let reach = |row: &RingRow| {
            let ring = row.ring.as_ref().ok()?;
            let (centre, radius) = ring.circle();
            Some(centre.x.abs().max(centre.y.abs()) + radius + ring.thickness.unwrap_or(0.03))
        };
        let most = cones.rings.iter().filter_map(reach).fold(0.0, f64::max);
        let half = if most > 0.0 { 1.12 * most } else { 6f64.to_radians().tan() };
        // rounded up to two digits
        let field = 2.0 * half * optics.scale().si();
        let digit = 10f64.powf(field.log10().floor() - 1.0);
        Length::metres((field / digit).ceil() * digit)
    }

    /// Width of a pixel, m.
    #[must_use]
    pub fn pitch(&self) -> f64 {
        self.field.si() / self.pixels as f64
    }

    /// Lab (x, y) in m of a place given in pixels from the upper left corner; the middle of the first pixel is
    /// (0.5, 0.5).
    #[must_use]
    pub fn place(&self, column: f64, row: f64) -> (f64, f64) {
        let (right, up) = self.seen.signs();
        let middle = 0.5 * self.pixels as f64;
        (right * (column - middle) * self.pitch(), up * (middle - row) * self.pitch())
    }

    /// The inverse of [`Self::place`].
    #[must_use]
    pub fn pixel(&self, x: f64, y: f64) -> (f64, f64) {
        let (right, up) = self.seen.signs();
        let middle = 0.5 * self.pixels as f64;
        (middle + right * x / self.pitch(), middle - up * y / self.pitch())
    }

    /// The direction in air that lands at (x, y), m.
    #[must_use]
    pub fn direction(&self, x: f64, y: f64) -> Direction {
        Direction::new(Lab(Vector3::new(x, y, self.optics.scale().si())))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn places_and_pixels_are_inverse_and_signs_follow_the_view() {
        for (turned, mirrored) in [(false, false), (true, false), (false, true), (true, true)] {
            let sensor = Sensor {
                optics: Optics::Screen(Length::metres(1.0)),
                field: Length::metres(0.2),
                pixels: 100,
                seen: Seen { turned, mirrored },
            };
            let (x, y) = sensor.place(75.0, 20.0);
            let (column, row) = sensor.pixel(x, y);
            assert!((column - 75.0).abs() < 1e-9 && (row - 20.0).abs() < 1e-9);
            let words = sensor.seen.words();
            assert_eq!(words.contains("+x right"), x > 0.0, "{words}");
            assert_eq!(words.contains("+y up"), y > 0.0, "{words}");
        }
    }
}

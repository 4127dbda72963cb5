//! How thick a ring is in the light of the job: with its filter and the pump's spread, not at one wavelength alone.

use nalgebra::Vector2;

use super::glow::{Glow, GlowError, Sampling, glows};
use super::light::Light;
use super::sensor::{Optics, Seen, Sensor};
use crate::job::Setup;
use crate::matching::{Cones, Landing, Ring, RingRow, SAMPLES};
use crate::quantity::Length;

/// Azimuths that are averaged.
const AZIMUTHS: usize = 8;
/// Places along a radius.
const PLACES: usize = 61;

/// For each ring the full width at half maximum of its brightness along a radius, mean over azimuths, in units of the
/// screen's distance; `None` where there is no ring, where its inside is filled to more than half, or where the filters let
/// nothing pass.
///
/// # Errors
/// What keeps a picture from being taken.
pub fn ring_widths(setup: &Setup, light: &Light, cones: &Cones) -> Result<Vec<Option<f64>>, GlowError> {
    let optics = Optics::Screen(Length::metres(1.0));
    let field = Sensor::field_for(cones, optics);
    let sensor = Sensor { optics, field, pixels: 256, seen: Seen::default() };
    let glows = glows(setup, light, &sensor, Sampling { wavelengths: None })?;
    let width = |row: &RingRow| {
        let ring = row.ring.as_ref().ok()?;
        let roles = if row.photon == Landing::Signal { row.roles } else { row.roles.exchanged() };
        let is_own = |glow: &&Glow| {
            glow.crystal == row.crystal
                && glow.roles == roles
                && (glow.nominal.nm() - row.wavelength.nm()).abs() < 1e-6
        };
        mean_width(glows.iter().find(is_own)?, ring)
    };
    Ok(cones.rings.iter().map(width).collect())
}

fn mean_width(glow: &Glow, ring: &Ring) -> Option<f64> {
    let (centre, radius) = ring.circle();
    let first = ring.thickness.unwrap_or(radius).min(radius);
    let mut sum = 0.0;
    for n in 0..AZIMUTHS {
        let (x, y) = ring.curve.direction(n * SAMPLES / AZIMUTHS).on_screen_mm(Length::metres(1e-3));
        let out = Vector2::new(x, y) - centre;
        let reach = out.norm();
        let at = |r: f64| {
            let place = centre + out * (r / reach);
            glow.brightness(place.x, place.y, 1.0)
        };
        sum += width_along(at, reach, first)?;
    }
    Some(sum / AZIMUTHS as f64)
}

/// Width at half maximum of what stands about `middle`, looked for in windows that double until both ends are dim.
fn width_along(at: impl Fn(f64) -> f64, middle: f64, first: f64) -> Option<f64> {
    let mut half = first;
    for _ in 0..8 {
        let from = (middle - half).max(0.0);
        let step = (middle + half - from) / (PLACES - 1) as f64;
        let values: Vec<f64> = (0..PLACES).map(|j| at(from + step * j as f64)).collect();
        let (top, most) = values.iter().enumerate().max_by(|a, b| a.1.total_cmp(b.1))?;
        let bright = |j: &usize| values[*j] < 0.5 * most;
        let ends = (0..top).rev().find(bright).zip((top + 1..PLACES).find(bright));
        if let Some((low, high)) = ends {
            // between two places by a straight line
            let edge = |dim: usize, lit: usize| {
                let part = (0.5 * most - values[dim]) / (values[lit] - values[dim]);
                from + step * (dim as f64 + part * (lit as f64 - dim as f64))
            };
            return Some(edge(high, high - 1) - edge(low, low + 1));
        }
        if from == 0.0 && (0..top).rev().find(bright).is_none() && half > 2.0 * middle {
            return None;
        }
        half *= 2.0;
    }
    None
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_width_of_a_hill_is_found_from_any_first_guess() {
        // 1/(1 + ((r - 3)/0.1)^2) is half at 2.9 and 3.1
        let hill = |r: f64| 1.0 / (1.0 + ((r - 3.0) / 0.1).powi(2));
        for first in [0.05, 0.3, 0.4] {
            let width = width_along(hill, 3.0, first).expect("a hill");
            assert!((width - 0.2).abs() < 4e-3, "{first} {width}");
        }
        assert!(width_along(|r| (-r * r).exp(), 0.1, 0.1).is_none());
    }
}

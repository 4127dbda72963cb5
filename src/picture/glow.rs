//! What shines: for each crystal, process and photon the mismatches at all wavelengths and pump directions.

use nalgebra::{Matrix3, Vector3};

use super::light::{Filter, Light, centre, samples};
use super::sensor::Sensor;
use crate::frame::{Orientation, Tangential};
use crate::job::Setup;
use crate::matching::{Emission, Mismatch, Photons, Roles, Triplet};
use crate::material::MaterialError;
use crate::optics::Crystal;
use crate::quantity::{Angle, Wavelength};

/// One photon of one process in one crystal.
#[derive(Debug)]
pub(super) struct Glow {
    /// Lab components of the mount's u, v and w.
    pub axes: [Vector3<f64>; 3],
    /// Half the crystal's length, m.
    pub half_length: f64,
    /// |d_eff|^2 L^2 on a grid over the sensor.
    pub strength: Strength,
    /// Wavelengths and pump directions.
    pub waves: Vec<Wave>,
}

/// One wavelength at one direction of the pump.
#[derive(Debug, Clone)]
pub(super) struct Wave {
    /// Delta_k as a function of the photon's tangential wave vector.
    pub mismatch: Mismatch,
    /// Vacuum wavenumber of the photon, rad/m.
    pub k0: f64,
    /// Share of filter and pump, times k0^2/(lambda_s lambda_i).
    pub weight: f64,
}

/// Side of the grid of [`Strength`].
const GRID: usize = 17;

/// |d_eff|^2 L^2 in (pm/V m)^2 on a grid of places, x fastest.
#[derive(Debug)]
pub(super) struct Strength {
    half_field: f64,
    values: Vec<f64>,
}

impl Strength {
    /// Between the grid's values, linear in x and y; m.
    pub fn at(&self, x: f64, y: f64) -> f64 {
        let cells = (GRID - 1) as f64;
        let place = |t: f64| ((t / self.half_field + 1.0) * 0.5 * cells).clamp(0.0, cells - 1e-9);
        let (s, t) = (place(x), place(y));
        let (i, j) = (s as usize, t as usize);
        let (s, t) = (s - i as f64, t - j as f64);
        let v = |i: usize, j: usize| self.values[j * GRID + i];
        let along = |j: usize| v(i, j) * (1.0 - s) + v(i + 1, j) * s;
        along(j) * (1.0 - t) + along(j + 1) * t
    }

    /// Largest value.
    pub fn largest(&self) -> f64 {
        self.values.iter().copied().fold(0.0, f64::max)
    }
}

/// Fewest wavelengths across a filter.
const FEWEST: usize = 15;

/// How finely the integrals are sampled.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sampling {
    /// Wavelengths across a filter; `None` for as many as the ring's shift asks for.
    pub wavelengths: Option<usize>,
}

/// Phase Delta_k L/2 between two samples of an integral, rad. sinc^2 has no Fourier component beyond exp(2i phase), so
/// sums over equal steps below pi are as good as the integral.
const PHASE_STEP: f64 = 1.0;

/// All that shines on the sensor.
pub(super) fn glows(
    setup: &Setup,
    light: &Light,
    sensor: &Sensor,
    sampling: Sampling,
) -> Result<Vec<Glow>, GlowError> {
    let mut all: Vec<Glow> = Vec::new();
    for crystal in &setup.crystals {
        let mut seen: Vec<(Roles, u64)> = Vec::new();
        for signal in setup.signals() {
            let photons = Photons::new(setup.pump(), signal)
                .ok_or_else(|| GlowError::Description("a signal is not longer than the pump".into()))?;
            let emission = Emission::of(crystal, photons)?;
            let wanted = emission.wanted(crystal, setup.interaction).map_err(GlowError::Description)?;
            let twins = wanted.iter().map(|r| (photons.exchanged(), r.exchanged(), &light.idler));
            let mut bands: Vec<_> = wanted.iter().map(|r| (photons, *r, &light.signal)).collect();
            if !photons.degenerate() {
                bands.extend(twins);
            }
            for (photons, roles, filters) in bands {
                // filters that have nothing in common leave the dark
                let Some(centre) = centre(filters, photons.signal) else { continue };
                let key = (roles, (centre.nm() * 1e6).round() as u64);
                if !seen.contains(&key) {
                    seen.push(key);
                    let source = Source {
                        crystal,
                        roles,
                        filters,
                        nominal: photons.signal,
                        centre,
                        pump: setup.pump(),
                    };
                    all.push(source.glow(light, sensor, sampling)?);
                }
            }
        }
    }
    Ok(all)
}

/// Why nothing can shine.
#[derive(Debug, Clone, thiserror::Error)]
pub enum GlowError {
    /// Indices are not to be had.
    #[error(transparent)]
    Material(#[from] MaterialError),
    /// The description does not hold together.
    #[error("{0}")]
    Description(String),
}

/// One photon of one process before it is sampled.
struct Source<'a> {
    crystal: &'a Crystal,
    roles: Roles,
    filters: &'a [Filter],
    nominal: Wavelength,
    centre: Wavelength,
    pump: Wavelength,
}

impl Source<'_> {
    fn photons(&self, wavelength: Wavelength) -> Result<Photons, GlowError> {
        Photons::new(self.pump, wavelength).ok_or_else(|| {
            GlowError::Description(format!(
                "the filter lets {wavelength} pass, which is not longer than the pump"
            ))
        })
    }

    fn glow(&self, light: &Light, sensor: &Sensor, sampling: Sampling) -> Result<Glow, GlowError> {
        let photons = self.photons(self.centre)?;
        let nominal = Emission::of(self.crystal, photons)?;
        let [u, v] = nominal.placement.face_axes();
        let mut glow = Glow {
            axes: [u, v, u.cross(&v)],
            half_length: 0.5 * nominal.length,
            strength: self.strength(&nominal, sensor),
            waves: Vec::new(),
        };
        let triplet = Triplet::new(self.crystal, &photons)?;
        let angles = self.pump_angles(light, sensor, &glow, &triplet, photons);
        let count = match sampling.wavelengths {
            _ if self.filters.is_empty() => 1,
            Some(count) => count.max(1),
            None => self.count(sensor, &glow)?,
        };
        let wavelengths = samples(self.filters, self.nominal, count);
        for (wavelength, share) in wavelengths {
            let photons = self.photons(wavelength)?;
            let triplet = Triplet::new(self.crystal, &photons)?;
            let k0 = wavelength.wavenumber();
            let frequencies = self.pump.si().powi(2) / (photons.signal.si() * photons.idler.si());
            for (crystal, part) in &angles {
                let Some(mismatch) = Emission::new(crystal, photons, &triplet).mismatch(self.roles) else {
                    continue;
                };
                let weight = share * part * frequencies * (k0 / self.pump.wavenumber()).powi(2);
                glow.waves.push(Wave { mismatch, k0, weight });
            }
        }
        Ok(glow)
    }

    /// |d_eff|^2 L^2 for the nominal wavelength and a plane pump; without a tensor d_eff counts as 1 pm/V.
    fn strength(&self, emission: &Emission, sensor: &Sensor) -> Strength {
        let half_field = 0.5 * sensor.field.si();
        let place = |n: usize| half_field * (2.0 * n as f64 / (GRID - 1) as f64 - 1.0);
        let d_eff = |n: usize| {
            let Some(tensor) = &self.crystal.material.tensor else { return 1.0 };
            let direction = sensor.direction(place(n % GRID), place(n / GRID));
            emission.pairing(self.roles, direction).map_or(0.0, |p| p.d_eff(emission, tensor))
        };
        let values = (0..GRID * GRID).map(|n| (d_eff(n) * emission.length).powi(2)).collect();
        Strength { half_field, values }
    }

    /// How many wavelengths keep the phase between two of them below [`PHASE_STEP`] wherever there is light.
    fn count(&self, sensor: &Sensor, glow: &Glow) -> Result<usize, GlowError> {
        let mut waves = Vec::new();
        for (wavelength, _) in samples(self.filters, self.nominal, 3) {
            let Some(mismatch) = Emission::of(self.crystal, self.photons(wavelength)?)?.mismatch(self.roles)
            else {
                return Ok(FEWEST);
            };
            waves.push(Wave { mismatch, k0: wavelength.wavenumber(), weight: 1.0 });
        }
        let change = |(x, y)| {
            Some((glow.phase(&waves[0], sensor, x, y)? - glow.phase(&waves[2], sensor, x, y)?).abs())
        };
        let most = glow.lit(sensor, &waves[1]).into_iter().filter_map(change).fold(0.0, f64::max);
        // the outer two of three midpoints lie two thirds of the whole range apart
        Ok(((1.5 * most / PHASE_STEP).ceil() as usize).clamp(FEWEST, 401) | 1)
    }

    /// Directions of the pump as crystals that are turned the other way, with their shares of the power.
    ///
    /// The field of a waist w has the angular spectrum exp(-q^2 w^2/4), its power exp(-q^2 w^2/2): a Gaussian of
    /// standard deviation 1/w in each component.
    fn pump_angles(
        &self,
        light: &Light,
        sensor: &Sensor,
        glow: &Glow,
        triplet: &Triplet,
        photons: Photons,
    ) -> Vec<(Crystal, f64)> {
        let Some(waist) = light.waist else { return vec![(self.crystal.clone(), 1.0)] };
        let deviation = 1.0 / (waist.si() * self.pump.wavenumber());
        let turned = |x: f64, y: f64| self.crystal_for(Vector3::new(x, y, 1.0));
        let wave = |crystal: &Crystal| {
            let mismatch = Emission::new(crystal, photons, triplet).mismatch(self.roles)?;
            Some(Wave { mismatch, k0: photons.signal.wavenumber(), weight: 1.0 })
        };
        let Some(straight) = wave(self.crystal) else { return Vec::new() };
        let lit = glow.lit(sensor, &straight);
        let count = |crystal: Crystal| {
            let moved = wave(&crystal);
            let phase = |(x, y): &(f64, f64)| {
                let moved = glow.phase(moved.as_ref()?, sensor, *x, *y)?;
                Some((moved - glow.phase(&straight, sensor, *x, *y)?).abs())
            };
            let most = lit.iter().filter_map(phase).fold(0.0, f64::max);
            // trapezoidal sum: exact but for exp(-(2 pi/h - 2 phase)^2/2) in units of the standard deviation
            let step = std::f64::consts::TAU / (2.0 * most + 5.0);
            ((REACH / step).ceil() as usize).clamp(2, 15)
        };
        let (nx, ny) = (count(turned(deviation, 0.0)), count(turned(0.0, deviation)));
        let line = |n: usize| {
            let places = (-(n as i64)..=n as i64).map(move |j| REACH * j as f64 / n as f64);
            places.map(|t| (t, (-0.5 * t * t).exp())).collect::<Vec<_>>()
        };
        let mut all: Vec<(Crystal, f64)> = Vec::new();
        for (y, wy) in line(ny) {
            for (x, wx) in line(nx) {
                if x.hypot(y) <= REACH {
                    all.push((turned(x * deviation, y * deviation), wx * wy));
                }
            }
        }
        let sum: f64 = all.iter().map(|(_, share)| share).sum();
        all.iter_mut().for_each(|(_, share)| *share /= sum);
        all
    }

    /// The crystal as it stands before a pump that comes along `pump` (lab) instead of z.
    fn crystal_for(&self, pump: Vector3<f64>) -> Crystal {
        // R turns z to the pump; seen from the pump the mount stands at R^-1 M, taken apart as Ry(b) Rx(a) Rz(c)
        let back = nalgebra::Rotation3::rotation_between(&pump, &Vector3::z()).unwrap_or_default();
        let m: Matrix3<f64> = (back * self.crystal.orientation.rotation()).into_inner();
        let orientation = Orientation {
            roll: Angle::radians(m[(1, 0)].atan2(m[(1, 1)])),
            about_x: Angle::radians((-m[(1, 2)]).clamp(-1.0, 1.0).asin()),
            about_y: Angle::radians(m[(0, 2)].atan2(m[(2, 2)])),
            ..Orientation::default()
        };
        Crystal { orientation, ..self.crystal.clone() }
    }
}

/// The pump's angular spectrum is followed to so many standard deviations.
const REACH: f64 = 3.5;

impl Glow {
    /// Tangential wave vector towards a place on the sensor.
    pub fn tangential(&self, k0: f64, x: f64, y: f64, scale: f64) -> Tangential {
        let k = Vector3::new(x, y, scale) * (k0 / (x * x + y * y + scale * scale).sqrt());
        Tangential { u: k.dot(&self.axes[0]), v: k.dot(&self.axes[1]) }
    }

    /// Delta_k L/2 towards a place on the sensor.
    pub fn phase(&self, wave: &Wave, sensor: &Sensor, x: f64, y: f64) -> Option<f64> {
        let q = self.tangential(wave.k0, x, y, sensor.optics.scale().si());
        wave.mismatch.at(q).map(|s| s.value * self.half_length)
    }

    /// Places of a grid near which sinc^2 may be large.
    pub fn lit(&self, sensor: &Sensor, wave: &Wave) -> Vec<(f64, f64)> {
        const SIDE: usize = 33;
        let cell = sensor.field.si() / SIDE as f64;
        let place = |n: usize| cell * (n as f64 + 0.5 - 0.5 * SIDE as f64);
        let places = (0..SIDE * SIDE).map(|n| (place(n % SIDE), place(n / SIDE)));
        places
            .filter(|(x, y)| {
                let Some(phase) = self.phase(wave, sensor, *x, *y) else { return false };
                phase.abs() < 20.0 + self.steepness(wave, sensor, *x, *y) * cell
            })
            .collect()
    }

    /// Largest change of Delta_k L/2 per metre on the sensor, rad/m.
    pub fn steepness(&self, wave: &Wave, sensor: &Sensor, x: f64, y: f64) -> f64 {
        let scale = sensor.optics.scale().si();
        let step = 1e-4 * scale;
        let phase = |dx: f64, dy: f64| self.phase(wave, sensor, x + dx, y + dy);
        let along = |a: Option<f64>, b: Option<f64>| a.zip(b).map_or(0.0, |(a, b)| (a - b) / (2.0 * step));
        along(phase(step, 0.0), phase(-step, 0.0)).hypot(along(phase(0.0, step), phase(0.0, -step)))
    }

    /// Whether photons can leave the exit face towards a place, and how d^2q goes with the sensor's area:
    /// d^2q = k0^2 (d.w) dOmega, dOmega = (d.z)^3 dA / scale^2; here without k0 and scale.
    pub fn geometry(&self, x: f64, y: f64, scale: f64) -> f64 {
        let r2 = x * x + y * y + scale * scale;
        let w = &self.axes[2];
        (x * w.x + y * w.y + scale * w.z).max(0.0) * scale.powi(3) / (r2 * r2)
    }
}

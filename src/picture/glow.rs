//! What shines: for each crystal, process and photon the mismatches at all wavelengths and pump directions.

use nalgebra::{Matrix3, Vector3};

use super::fewest::{Counts, Spread, detail, fewest, line};
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
    /// Index of the crystal, from 0.
    pub crystal: usize,
    /// Sheets of the process, with the photon as signal.
    pub roles: Roles,
    /// Nominal wavelength of the photon.
    pub nominal: Wavelength,
    /// Lab components of the mount's u, v and w.
    pub axes: [Vector3<f64>; 3],
    /// Half the crystal's length, m.
    pub half_length: f64,
    /// |d_eff|^2 L^2 on a grid over the sensor.
    pub strength: Strength,
    /// Wavelengths and pump directions.
    pub waves: Vec<Wave>,
    /// Places with light, and how much of the finest detail of sinc^2 is left there by filter and pump, 0 to 1.
    pub details: Vec<((f64, f64), f64)>,
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
    for (index, crystal) in setup.crystals.iter().enumerate() {
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
                        index,
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
    index: usize,
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
            crystal: self.index,
            roles: self.roles,
            nominal: self.nominal,
            axes: [u, v, u.cross(&v)],
            half_length: 0.5 * nominal.length,
            strength: self.strength(&nominal, sensor),
            waves: Vec::new(),
            details: Vec::new(),
        };
        let Counts { pump, wavelengths: count } = self.counts(light, sensor, sampling, &mut glow)?;
        let angles = self.pump_angles(light, pump);
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

    /// How many wavelengths and pump directions; how fine the details of the picture are goes into the glow.
    fn counts(
        &self,
        light: &Light,
        sensor: &Sensor,
        sampling: Sampling,
        glow: &mut Glow,
    ) -> Result<Counts, GlowError> {
        let photons = self.photons(self.centre)?;
        let wave = |crystal: &Crystal, photons: Photons| -> Result<Option<Wave>, GlowError> {
            let mismatch = Emission::of(crystal, photons)?.mismatch(self.roles);
            let k0 = photons.signal.wavenumber();
            Ok(mismatch.map(|mismatch| Wave { mismatch, k0, weight: 1.0 }))
        };
        let fewest_of_all = Counts { pump: [0, 0], wavelengths: 1 };
        let Some(straight) = wave(self.crystal, photons)? else { return Ok(fewest_of_all) };
        // three midpoints of the filter's window, and one standard deviation of the pump either way about both axes
        let mut colours = Vec::new();
        for (wavelength, _) in samples(self.filters, self.nominal, 3) {
            colours.push(wave(self.crystal, self.photons(wavelength)?)?);
        }
        let deviation = light.waist.map_or(0.0, |waist| 1.0 / (waist.si() * self.pump.wavenumber()));
        let mut turned = Vec::new();
        if deviation > 0.0 {
            for (x, y) in [(1.0, 0.0), (-1.0, 0.0), (0.0, 1.0), (0.0, -1.0)] {
                let crystal = self.crystal_for(Vector3::new(x * deviation, y * deviation, 1.0));
                turned.push(wave(&crystal, photons)?);
            }
        }
        let change = |wave: &Option<Wave>, x: f64, y: f64| {
            Some(glow.phase(wave.as_ref()?, sensor, x, y)? - glow.phase(&straight, sensor, x, y)?)
        };
        let mut spreads = Vec::new();
        let (mut bent, mut steepest) = (false, 0.0f64);
        for (x, y) in glow.lit(sensor, &straight) {
            let by: Vec<f64> = turned.iter().map(|w| change(w, x, y).map_or(0.0, f64::abs)).collect();
            let pump = if by.len() == 4 { [by[0].max(by[1]), by[2].max(by[3])] } else { [0.0; 2] };
            // phi = b s + q s^2 at s = -1/3, 0, 1/3 of the window
            let mut filter = 0.0;
            if let [Some(low), Some(middle), Some(high)] =
                [0, 1, 2].map(|n| colours.get(n).and_then(|w| change(w, x, y)))
            {
                let (b, q) = (1.5 * (high - low), 4.5 * (high + low - 2.0 * middle));
                bent |= q.abs() > 0.3 * b.abs();
                steepest = steepest.max(b.abs() + q.abs());
                filter = b.abs();
            }
            spreads.push(((x, y), Spread { pump, filter }));
        }
        let alone = |most: f64| {
            // trapezoidal sum: exact but for exp(-(2 pi/h - 2 phase)^2/2) in units of the standard deviation
            let step = std::f64::consts::TAU / (2.0 * most + 5.0);
            ((REACH / step).ceil() as usize).clamp(2, 40)
        };
        let most = |axis: usize| spreads.iter().fold(0.0, |m: f64, (_, s)| m.max(s.pump[axis]));
        // phases of two neighbouring wavelengths less than PHASE_STEP apart wherever there is light
        let by_itself = ((steepest / PHASE_STEP).ceil() as usize).clamp(FEWEST, 401) | 1;
        let given = sampling.wavelengths.map(|count| count.max(1));
        let mut counts = Counts {
            pump: if turned.is_empty() { [0, 0] } else { [alone(most(0)), alone(most(1))] },
            wavelengths: if self.filters.is_empty() { 1 } else { given.unwrap_or(by_itself) },
        };
        let window = |count: usize| {
            let all = samples(self.filters, self.nominal, count);
            let ends = all.first().zip(all.last()).map(|(a, b)| (a.0.si(), b.0.si()));
            let (first, last) = ends.unwrap_or((0.0, 1.0));
            let span = (last - first).max(1e-15) / (1.0 - 1.0 / count.max(2) as f64);
            all.iter()
                .map(|(w, weight)| ((w.si() - first) / span - 0.5 + 0.5 / count as f64, *weight))
                .collect()
        };
        if !turned.is_empty() && !self.filters.is_empty() && !bent {
            let step = spreads.len().div_ceil(12).max(1);
            let some: Vec<Spread> = spreads.iter().step_by(step).map(|(_, spread)| *spread).collect();
            let cost = |c: &Counts| (2 * c.pump[0] + 1) * (2 * c.pump[1] + 1) * c.wavelengths;
            if let Some(few) = fewest(&some, REACH, window, given).filter(|few| cost(few) < cost(&counts)) {
                counts = few;
            }
        }
        let colours = if self.filters.is_empty() { Vec::new() } else { window(101) };
        let step = spreads.len().div_ceil(60).max(1);
        glow.details = spreads
            .iter()
            .step_by(step)
            .map(|(place, spread)| (*place, if bent { 1.0 } else { detail(spread, REACH, &colours) }))
            .collect();
        Ok(counts)
    }

    /// Directions of the pump as crystals that are turned the other way, with their shares of the power.
    ///
    /// The field of a waist w has the angular spectrum exp(-q^2 w^2/4), its power exp(-q^2 w^2/2): a Gaussian of
    /// standard deviation 1/w in each component.
    fn pump_angles(&self, light: &Light, [nx, ny]: [usize; 2]) -> Vec<(Crystal, f64)> {
        let Some(waist) = light.waist else { return vec![(self.crystal.clone(), 1.0)] };
        if nx == 0 || ny == 0 {
            return Vec::new();
        }
        let deviation = 1.0 / (waist.si() * self.pump.wavenumber());
        let mut all: Vec<(Crystal, f64)> = Vec::new();
        for (y, wy) in line(ny, REACH) {
            for (x, wx) in line(nx, REACH) {
                if x.hypot(y) <= REACH {
                    all.push((self.crystal_for(Vector3::new(x * deviation, y * deviation, 1.0)), wx * wy));
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

    /// Brightness at a place, in units of its own: the sum over wavelengths and pump directions, with |d_eff|^2 and solid angle.
    pub fn brightness(&self, x: f64, y: f64, scale: f64) -> f64 {
        let one = |wave: &Wave| {
            let q = self.tangential(wave.k0, x, y, scale);
            let phase = wave.mismatch.at(q).map(|s| s.value * self.half_length);
            phase.map_or(0.0, |p| wave.weight * if p.abs() < 1e-9 { 1.0 } else { (p.sin() / p).powi(2) })
        };
        self.strength.at(x, y) * self.geometry(x, y, scale) * self.waves.iter().map(one).sum::<f64>()
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

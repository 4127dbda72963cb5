//! What a camera in the far field counts: intensity on a grid of pixels.
//!
//! A pixel holds the mean over its area of
//!
//! I(x, y) = sum over crystals, processes and photons of  <|d_eff|^2 L^2 sinc^2(Delta_k L/2) k_s^2/(lambda_s lambda_i)>
//!           (d.w) (d.z)^3,
//!
//! the rate of photons per area of the sensor up to a factor common to all pixels: pairs are counted per d^2q d omega
//! of the detected photon, d^2q = k_s^2 (d.w) d Omega with w the face normal, and d Omega = (d.z)^3 dA / scale^2.
//! Angle brackets are the mean over the filter (weights transmission times d omega) and over the pump's angular
//! spectrum (incoherent, since the partner carries the difference); the partner is not looked at. The photon's
//! direction d is exact refraction at the tilted faces, since tangential wave vectors are conserved.
//! |d_eff| is that of the nominal wavelengths and a plane pump, interpolated on a grid of 17 x 17 places. 1 is what a
//! pixel at the pump would count if all wavelengths were phase matched there and the brightest process of the picture
//! were as bright there as at its brightest place. Refractive indices in the prefactor, Fresnel losses, the pump's
//! linewidth and what is reflected within the crystal are left out.
//!
//! Along a row of pixels Delta_k L/2 is interpolated by cubics through exact values and slopes, checked when the
//! exposure is prepared to 5e-6 rad; sinc^2 is evaluated in single precision to 3e-7. The mean over a pixel is
//! f + h^2/24 (f_xx + f_yy) from neighbouring samples, with several samples per pixel where the phase changes by more than
//! half a radian across one; as sinc^2 has no Fourier component beyond exp(2i phase), the picture's sum does not depend
//! on the grid. Rows are independent, so any number of threads gives the same numbers.

use std::f64::consts::PI;

use fearless_simd::{Level, dispatch};
use rayon::prelude::*;

use super::glow::{Glow, GlowError, Sampling, Wave, glows};
use super::light::Light;
use super::sensor::Sensor;
use super::sinc::{fused, sinc_squared};
use crate::frame::Tangential;
use crate::job::Setup;

/// An exposure that is ready to be taken.
#[derive(Debug)]
pub struct Exposure {
    sensor: Sensor,
    glows: Vec<Glow>,
    /// Value of I that counts as 1.
    unit: f64,
    /// Samples along each side of a pixel.
    fineness: usize,
    /// Samples between two exact values.
    stride: usize,
    level: Level,
}

/// What the sensor has counted.
#[derive(Debug, Clone, PartialEq)]
pub struct Picture {
    /// The sensor.
    pub sensor: Sensor,
    /// Mean intensity of each pixel, row by row from the upper left corner; 1 as in [`Exposure`].
    pub values: Vec<f32>,
}

/// Phase across one sample, rad.
const SAMPLE: f64 = 0.5;
/// Rows of pixels that are worked on together.
const BLOCK: usize = 32;
/// Beyond this phase sinc^2 is below 10^-7 and is left out.
const DARK: f64 = 3200.0;

/// Below this width of a sample, in units of the distance, |d_eff|^2 and solid angle are linear over eight samples to
/// 10^-6: cos^4 falls by 2 (8 h)^2/8 of itself.
const FLAT: f64 = 3e-4;

impl Exposure {
    /// Looks up indices and decides how finely to sample.
    ///
    /// # Errors
    /// A wavelength of the filter outside a data set's range; a filter that passes the pump.
    pub fn new(setup: &Setup, light: &Light, sensor: Sensor, sampling: Sampling) -> Result<Self, GlowError> {
        let glows = glows(setup, light, &sensor, sampling)?;
        let brightest = |g: &Glow| {
            let weight: f64 = g.waves.iter().map(|w| w.weight).sum();
            weight * g.strength.largest()
        };
        let unit = glows.iter().map(brightest).fold(0.0, f64::max);
        let mut new = Self {
            sensor,
            unit: if unit > 0.0 { unit } else { 1.0 },
            fineness: 1,
            stride: 64,
            level: Level::new(),
            glows,
        };
        new.fineness = new.fineness();
        while new.stride > 4 && !new.interpolates() {
            new.stride /= 2;
        }
        Ok(new)
    }

    /// Number of (wavelength, pump direction, process) combinations that each pixel sums.
    #[must_use]
    pub fn waves(&self) -> usize {
        self.glows.iter().map(|g| g.waves.len()).sum()
    }

    /// Samples along each side of a pixel.
    #[must_use]
    pub fn samples_per_side(&self) -> usize {
        self.fineness
    }

    fn fineness(&self) -> usize {
        let pitch = self.sensor.pitch();
        let steepest = |glow: &Glow| {
            let Some(wave) = glow.waves.get(glow.waves.len() / 2) else { return 0.0 };
            let steep =
                |((x, y), left): &((f64, f64), f64)| left * glow.steepness(wave, &self.sensor, *x, *y);
            glow.details.iter().map(steep).fold(0.0, f64::max)
        };
        let most = self.glows.iter().map(steepest).fold(0.0, f64::max);
        ((most * pitch / SAMPLE).ceil() as usize).clamp(1, 32)
    }

    /// Whether cubics over the present stride are right to 5e-6 rad halfway between exact values, where there is light.
    fn interpolates(&self) -> bool {
        let half = 0.5 * self.stride as f64 * self.pitch();
        let scale = self.sensor.optics.scale().si();
        let right = |glow: &Glow, wave: &Wave, x: f64, y: f64| {
            let nodes = [x - half, x, x + half].map(|x| Place::at(glow, x, y, scale).node(glow, wave));
            let [Some(a), Some(exact), Some(b)] = nodes else { return true };
            let middle = 0.5 * (a.phase + b.phase) + 0.25 * half * (a.slope - b.slope);
            (middle - exact.phase).abs() < 5e-6
        };
        self.glows.iter().all(|glow| {
            [glow.waves.first(), glow.waves.last()].into_iter().flatten().all(|wave| {
                glow.lit(&self.sensor, wave).into_iter().step_by(7).all(|(x, y)| right(glow, wave, x, y))
            })
        })
    }

    /// Width of a sample, m.
    fn pitch(&self) -> f64 {
        self.sensor.pitch() / self.fineness as f64
    }

    /// Takes the picture, on all threads of the current pool.
    #[must_use]
    pub fn take(&self) -> Picture {
        let pixels = self.sensor.pixels;
        let mut values = vec![0f32; pixels * pixels];
        values.par_chunks_mut(BLOCK * pixels).enumerate().for_each(|(n, rows)| self.block(n * BLOCK, rows));
        Picture { sensor: self.sensor, values }
    }

    /// Rows of pixels from `first` on.
    fn block(&self, first: usize, out: &mut [f32]) {
        let (pixels, n) = (self.sensor.pixels, self.fineness);
        let mut scratch = vec![0f32; pixels * n + 2];
        // three neighbouring rows of samples with one more at either end
        let mut lines: [Vec<f32>; 3] = std::array::from_fn(|_| vec![0f32; pixels * n + 2]);
        let share = 1.0 / (n * n) as f32;
        let start = (first * n) as f64 - 0.5;
        self.samples(start, &mut lines[0], &mut scratch);
        self.samples(start + 1.0, &mut lines[1], &mut scratch);
        for (row, out) in out.chunks_exact_mut(pixels).enumerate() {
            for fine in 0..n {
                let next = start + (row * n + fine + 2) as f64;
                self.samples(next, &mut lines[2], &mut scratch);
                for (column, pixel) in out.iter_mut().enumerate() {
                    *pixel += share * (0..n).map(|j| mean(&lines, column * n + j + 1)).sum::<f32>();
                }
                lines.rotate_left(1);
            }
        }
    }

    /// Intensity at the samples of one row, whose middle lies `row` sample widths below the upper edge.
    fn samples(&self, row: f64, line: &mut [f32], scratch: &mut [f32]) {
        let (n, pitch) = (self.fineness as f64, self.pitch());
        let (right, _) = self.sensor.seen.signs();
        let (left, y) = self.sensor.place(-0.5 / n, row / n);
        let step = right * pitch;
        let scale = self.sensor.optics.scale().si();
        line.fill(0.0);
        let between: Vec<f32> = (0..self.stride).map(|j| j as f32 / self.stride as f32).collect();
        let row = Row { left, step, stride: self.stride, places: &between, level: self.level };
        let mut cubics = Vec::new();
        let places = line.len().div_ceil(self.stride) + 1;
        for glow in &self.glows {
            scratch.fill(0.0);
            let at = |n: usize| Place::at(glow, left + step * (n * self.stride) as f64, y, scale);
            let places: Vec<Place> = (0..places).map(at).collect();
            for wave in &glow.waves {
                row.add(glow, wave, &places, &mut cubics, scratch);
            }
            let factor = |j: usize| {
                let x = left + step * j as f64;
                (glow.strength.at(x, y) * glow.geometry(x, y, scale) / self.unit) as f32
            };
            weigh(line, scratch, factor, if pitch < FLAT * scale { 8 } else { 1 });
        }
    }
}

/// Adds `values` times a factor that is taken as linear over `reach` samples.
fn weigh(line: &mut [f32], values: &[f32], factor: impl Fn(usize) -> f32, reach: usize) {
    let mut here = factor(0);
    for (n, (sums, values)) in line.chunks_mut(reach).zip(values.chunks(reach)).enumerate() {
        let next = factor((n + 1) * reach);
        let rise = (next - here) / reach as f32;
        for (j, (sum, value)) in sums.iter_mut().zip(values).enumerate() {
            *sum += value * (here + rise * j as f32);
        }
        here = next;
    }
}

/// Mean over one sample's square: f + h^2/24 (f_xx + f_yy) by differences.
#[inline(always)]
fn mean(lines: &[Vec<f32>; 3], j: usize) -> f32 {
    let here = lines[1][j];
    let around = lines[0][j] + lines[2][j] + lines[1][j - 1] + lines[1][j + 1];
    here + (around - 4.0 * here) * (1.0 / 24.0)
}

/// A place on the sensor: the direction's components along u and v and their slopes along x.
#[derive(Clone, Copy)]
struct Place {
    d: [f64; 2],
    slope: [f64; 2],
    y: f64,
    scale: f64,
}

/// Phase and its slope along x.
#[derive(Clone, Copy)]
struct Node {
    phase: f64,
    slope: f64,
}

impl Place {
    fn at(glow: &Glow, x: f64, y: f64, scale: f64) -> Self {
        let inverse = 1.0 / (x * x + y * y + scale * scale).sqrt();
        // d.u = (x u.x + y u.y + scale u.z)/r and its slope u.x/r - (d.u) x/r^2
        let along = |u: &nalgebra::Vector3<f64>| (x * u.x + y * u.y + scale * u.z) * inverse;
        let d = [along(&glow.axes[0]), along(&glow.axes[1])];
        let slope = [0, 1].map(|i| (glow.axes[i].x - d[i] * x * inverse) * inverse);
        Self { d, slope, y, scale }
    }

    /// Exact phase; `None` where a photon is evanescent.
    #[inline]
    fn node(&self, glow: &Glow, wave: &Wave) -> Option<Node> {
        let sample = wave.mismatch.at(Tangential { u: wave.k0 * self.d[0], v: wave.k0 * self.d[1] })?;
        let slope = wave.k0 * (sample.slope[0] * self.slope[0] + sample.slope[1] * self.slope[1]);
        Some(Node { phase: sample.value * glow.half_length, slope: slope * glow.half_length })
    }
}

/// A horizontal line of samples at x = left + j step.
struct Row<'a> {
    left: f64,
    step: f64,
    /// Samples between two exact values.
    stride: usize,
    /// j / stride for each of them.
    places: &'a [f32],
    level: Level,
}

impl Row<'_> {
    /// Adds weight sinc^2; `places` are `stride` samples apart.
    fn add(&self, glow: &Glow, wave: &Wave, places: &[Place], cubics: &mut Vec<Cubic>, line: &mut [f32]) {
        let span = self.step * self.stride as f64;
        cubics.clear();
        let mut before = places[0].node(glow, wave);
        for (n, place) in places[1..].iter().enumerate() {
            let after = place.node(glow, wave);
            cubics.push(match (before, after) {
                (Some(a), Some(b)) => cubic(a, b, span),
                _ => {
                    let part = line.chunks_mut(self.stride).nth(n).unwrap_or_default();
                    self.add_singly(glow, wave, (self.left + span * n as f64, place), part);
                    None
                }
            });
            before = after;
        }
        let weight = wave.weight as f32;
        if fuses(self.level) {
            dispatch!(self.level, _simd => add_all::<true>(cubics, self.places, weight, line));
        } else {
            dispatch!(self.level, _simd => add_all::<false>(cubics, self.places, weight, line));
        }
    }

    /// Near the border beyond which there is no wave: each sample for itself, from x on.
    fn add_singly(&self, glow: &Glow, wave: &Wave, (x, place): (f64, &Place), part: &mut [f32]) {
        for (j, sum) in part.iter_mut().enumerate() {
            let place = Place::at(glow, x + self.step * j as f64, place.y, place.scale);
            if let Some(node) = place.node(glow, wave).filter(|n| n.phase.abs() < DARK) {
                *sum += wave.weight as f32 * sinc_squared::<false>((node.phase / PI) as f32);
            }
        }
    }
}

/// Whether the processor multiplies and adds in one rounding.
#[inline]
fn fuses(level: Level) -> bool {
    #[cfg(any(target_arch = "x86", target_arch = "x86_64"))]
    return matches!(level, Level::Avx2(_) | Level::Avx512(_));
    #[cfg(not(any(target_arch = "x86", target_arch = "x86_64")))]
    return cfg!(target_arch = "aarch64") && !level.is_fallback();
}

/// Delta_k L/2 in half turns between two nodes, in powers of the place between them; `None` where nothing is to be added.
type Cubic = Option<[f32; 4]>;

/// The cubic through two nodes `span` apart.
#[inline]
fn cubic(a: Node, b: Node, span: f64) -> Cubic {
    let dark = a.phase.abs().min(b.phase.abs()) > DARK && a.phase * b.phase > 0.0;
    let (sa, sb, rise) = (a.slope * span, b.slope * span, b.phase - a.phase);
    let powers = [a.phase, sa, 3.0 * rise - 2.0 * sa - sb, sa + sb - 2.0 * rise];
    (!dark).then(|| powers.map(|c| (c * (1.0 / PI)) as f32))
}

/// Adds weight sinc^2 to a whole line, `places` (from 0 to below 1) for each cubic: the loop that the compiler evaluates
/// side by side.
#[inline(always)]
fn add_all<const FUSED: bool>(cubics: &[Cubic], places: &[f32], weight: f32, line: &mut [f32]) {
    for (part, cubic) in line.chunks_mut(places.len()).zip(cubics) {
        let Some([c0, c1, c2, c3]) = *cubic else { continue };
        let add = |t: f32, sum: &mut f32| {
            let phase = fused::<FUSED>(fused::<FUSED>(fused::<FUSED>(c3, t, c2), t, c1), t, c0);
            *sum = fused::<FUSED>(weight, sinc_squared::<FUSED>(phase), *sum);
        };
        let (groups, rest) = part.as_chunks_mut::<16>();
        let (group_places, _) = places.as_chunks::<16>();
        for (group, places) in groups.iter_mut().zip(group_places) {
            for (sum, t) in group.iter_mut().zip(places) {
                add(*t, sum);
            }
        }
        let done = 16 * groups.len();
        for (sum, t) in rest.iter_mut().zip(&places[done..]) {
            add(*t, sum);
        }
    }
}

impl Picture {
    /// Sum of all pixels times their area in units of the field's: does not depend on the grid.
    #[must_use]
    pub fn total(&self) -> f64 {
        self.values.iter().map(|v| f64::from(*v)).sum::<f64>() / self.values.len() as f64
    }

    /// Largest pixel.
    #[must_use]
    pub fn brightest(&self) -> f64 {
        f64::from(self.values.iter().copied().fold(0.0, f32::max))
    }
}

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
//! exposure is prepared to 2e-6 rad; sinc^2 is evaluated in single precision to 3e-7. The mean over a pixel is
//! f + h^2/24 (f_xx + f_yy) from neighbouring samples, with several samples per pixel where the phase changes by more than
//! half a radian across one; as sinc^2 has no Fourier component beyond exp(2i phase), the picture's sum does not depend
//! on the grid. Rows are independent, so any number of threads gives the same numbers.

use rayon::prelude::*;

use super::glow::{Glow, GlowError, Sampling, Wave, glows};
use super::light::Light;
use super::sensor::Sensor;
use super::sinc::sinc_squared;
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
const BLOCK: usize = 16;
/// Beyond this phase sinc^2 is below 10^-7 and is left out.
const DARK: f64 = 3200.0;

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
        let mut new =
            Self { sensor, unit: if unit > 0.0 { unit } else { 1.0 }, fineness: 1, stride: 64, glows };
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
            let lit = glow.lit(&self.sensor, wave);
            lit.into_iter().map(|(x, y)| glow.steepness(wave, &self.sensor, x, y)).fold(0.0, f64::max)
        };
        let most = self.glows.iter().map(steepest).fold(0.0, f64::max);
        ((most * pitch / SAMPLE).ceil() as usize).clamp(1, 32)
    }

    /// Whether cubics over the present stride are right to 2e-6 rad halfway between exact values, where there is light.
    fn interpolates(&self) -> bool {
        let half = 0.5 * self.stride as f64 * self.pitch();
        self.glows.iter().all(|glow| {
            let ends = [glow.waves.first(), glow.waves.last()];
            ends.into_iter().flatten().all(|wave| {
                let scale = self.sensor.optics.scale().si();
                glow.lit(&self.sensor, wave).into_iter().step_by(7).all(|(x, y)| {
                    let row = Row::new(glow, wave, y, scale);
                    let (Some(a), Some(b)) = (row.node(x - half), row.node(x + half)) else { return true };
                    let Some(exact) = row.node(x) else { return true };
                    let h = 2.0 * half;
                    let middle = 0.5 * (a.phase + b.phase) + 0.125 * h * (a.slope - b.slope);
                    (middle - exact.phase).abs() < 2e-6
                })
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
        for glow in &self.glows {
            scratch.fill(0.0);
            for wave in &glow.waves {
                Row::new(glow, wave, y, scale).add(left, step, self.stride, scratch);
            }
            for (j, (sum, value)) in line.iter_mut().zip(scratch.iter()).enumerate() {
                if *value != 0.0 {
                    let x = left + step * j as f64;
                    *sum += value * (glow.strength.at(x, y) * glow.geometry(x, y, scale) / self.unit) as f32;
                }
            }
        }
    }
}

/// Mean over one sample's square: f + h^2/24 (f_xx + f_yy) by differences.
#[inline(always)]
fn mean(lines: &[Vec<f32>; 3], j: usize) -> f32 {
    let here = lines[1][j];
    let around = lines[0][j] + lines[2][j] + lines[1][j - 1] + lines[1][j + 1];
    here + (around - 4.0 * here) * (1.0 / 24.0)
}

/// One wave along a horizontal line of the sensor.
struct Row<'a> {
    wave: &'a Wave,
    half_length: f64,
    /// u.x and y u.y + scale u.z, then the same of v.
    along: [f64; 2],
    fixed: [f64; 2],
    /// y^2 + scale^2
    off2: f64,
}

/// Phase and its slope along x.
#[derive(Clone, Copy)]
struct Node {
    phase: f64,
    slope: f64,
}

impl<'a> Row<'a> {
    fn new(glow: &Glow, wave: &'a Wave, y: f64, scale: f64) -> Self {
        let [u, v, _] = &glow.axes;
        Self {
            wave,
            half_length: glow.half_length,
            along: [u.x, v.x],
            fixed: [y * u.y + scale * u.z, y * v.y + scale * v.z],
            off2: y * y + scale * scale,
        }
    }

    /// Exact phase at x; `None` where a photon is evanescent.
    fn node(&self, x: f64) -> Option<Node> {
        let inverse = 1.0 / (x * x + self.off2).sqrt();
        let (k, turn) = (self.wave.k0 * inverse, x * inverse * inverse);
        // q = k0 (x u.x + ...)/r and dq/dx = k0 u.x/r - q x/r^2
        let q = [0, 1].map(|i| k * (x * self.along[i] + self.fixed[i]));
        let dq = [0, 1].map(|i| k * self.along[i] - q[i] * turn);
        let sample = self.wave.mismatch.at(crate::frame::Tangential { u: q[0], v: q[1] })?;
        let slope = sample.slope[0] * dq[0] + sample.slope[1] * dq[1];
        Some(Node { phase: sample.value * self.half_length, slope: slope * self.half_length })
    }

    /// Adds weight sinc^2 at x = left + j step.
    fn add(&self, left: f64, step: f64, stride: usize, line: &mut [f32]) {
        let weight = self.wave.weight as f32;
        let span = step * stride as f64;
        let mut before = self.node(left);
        for (n, part) in line.chunks_mut(stride).enumerate() {
            let x = left + span * n as f64;
            let after = self.node(x + span);
            match (before, after) {
                (Some(a), Some(b)) => {
                    if a.phase.abs().min(b.phase.abs()) < DARK || a.phase * b.phase < 0.0 {
                        add_cubic(a, b, span, weight, stride, part);
                    }
                }
                _ => self.add_singly(x, step, weight, part),
            }
            before = after;
        }
    }

    /// Near the border beyond which there is no wave: each sample for itself.
    fn add_singly(&self, x: f64, step: f64, weight: f32, part: &mut [f32]) {
        for (j, sum) in part.iter_mut().enumerate() {
            if let Some(node) = self.node(x + step * j as f64).filter(|n| n.phase.abs() < DARK) {
                *sum += weight * sinc_squared(node.phase as f32);
            }
        }
    }
}

/// Adds weight sinc^2 of the cubic through two nodes a distance `span` apart.
fn add_cubic(a: Node, b: Node, span: f64, weight: f32, stride: usize, part: &mut [f32]) {
    let (sa, sb, rise) = (a.slope * span, b.slope * span, b.phase - a.phase);
    let c0 = a.phase as f32;
    let c1 = sa as f32;
    let c2 = (3.0 * rise - 2.0 * sa - sb) as f32;
    let c3 = (sa + sb - 2.0 * rise) as f32;
    let inverse = 1.0 / stride as f32;
    for (j, sum) in part.iter_mut().enumerate() {
        let t = j as f32 * inverse;
        *sum += weight * sinc_squared(((c3 * t + c2) * t + c1) * t + c0);
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

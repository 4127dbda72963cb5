//! The mixture that is collected: amplitudes summed over what is measured, squares over what is not.
//!
//! Frequencies and directions add incoherently for points and irises; a fibre mode adds amplitudes over directions. A
//! spread of the pump's frequency adds incoherently whether it is a linewidth or that of a pulse, because each set of
//! photon frequencies comes from one pump frequency. Weights are in d omega, transmissions of filters in wavelength.

use std::f64::consts::LN_2;

use nalgebra::{Complex, Matrix4, Vector2, Vector3, Vector4};

use super::amplitude::{Behind, Born};
use super::band::Band;
use super::bench::{Bench, Filter, Opening, REACH};
use super::disc::{ArmFrame, Passage};
use super::quadrature::Rule;
use super::slab::Ray;
use super::stack::{PUMP, Stack, Tuned, wavelength};
use super::state::{Amplitude, DensityMatrix};
use super::{PairsError, Vary};

/// What is integrated over, made ready.
#[derive(Debug, Clone)]
pub struct Mixture<'a> {
    pub(super) stack: &'a Stack,
    pub(super) filters: [Vec<Filter>; 2],
    /// Radii of the irises as sines; infinite without.
    pub(super) radii: [f64; 2],
    /// 1/e^2 mode radii of the fibres, m.
    fibres: [Option<f64>; 2],
    frames: [ArmFrame; 2],
    /// FWHM of the pump's spectrum, rad/s.
    line: f64,
    /// 1/e^2 radius of the pump, m.
    waist: Option<f64>,
    vary: Vary,
}

/// Points of each quadrature: pump frequency, pump direction, frequency of a, radius and azimuth of directions.
type Orders = [usize; 5];

const LINE: usize = 0;
const TILT: usize = 1;
const BAND: usize = 2;
const RADIUS: usize = 3;
const AZIMUTH: usize = 4;

const FIRST: Orders = [6, 4, 14, 3, 8];

/// A density matrix with the error of its elements.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Estimate {
    /// In H and V of each arm: HH, HV, VH, VV.
    pub lab: DensityMatrix,
    /// Twice the largest change of an element when the quadratures are refined one by one, added up: the error of a
    /// visibility.
    pub error: f64,
    /// Frequencies of a that were integrated over at the pump's centre, rad/s.
    pub band: Band,
}

impl<'a> Mixture<'a> {
    /// What a bench collects, with only some of it varied.
    pub fn new(stack: &'a Stack, bench: &Bench, vary: Vary) -> Self {
        let opening = |arm: usize| if vary.direction { bench.collection[arm].opening } else { Opening::All };
        let radii = [0, 1].map(|arm| match opening(arm) {
            Opening::Iris(full) => (0.5 * full.si()).sin(),
            _ => f64::INFINITY,
        });
        let fibres = [0, 1].map(|arm| match opening(arm) {
            Opening::Fibre(radius) => Some(radius.si()),
            _ => None,
        });
        let mut filters = bench.filters.clone();
        if vary.recentred {
            filters.iter_mut().flatten().for_each(|filter| filter.centre = None);
        }
        Self {
            stack,
            filters,
            radii,
            fibres,
            frames: stack.arms.map(ArmFrame::new),
            line: if vary.line { bench.line.width(stack.photons.pump) } else { 0.0 },
            waist: if vary.direction { bench.waist.map(|w| w.si()) } else { None },
            vary,
        }
    }

    /// The collected state, refined until its error is below `wanted` (or the quadratures are very fine).
    ///
    /// # Errors
    /// Indices that are not to be had; nothing passes filters and irises.
    pub fn estimate(&self, wanted: f64) -> Result<Estimate, PairsError> {
        const ROUNDS: usize = 14;
        let mut orders = FIRST;
        let mut best = self.once(&orders)?;
        for round in 0..ROUNDS {
            let mut error = 0.0;
            let mut finest = best;
            let mut next = orders;
            for axis in 0..orders.len() {
                if !self.is_varied(axis) {
                    continue;
                }
                let mut trial = orders;
                trial[axis] = raised(orders[axis]);
                let refined = self.once(&trial)?;
                let change = 2.0 * (refined.0.0 - best.0.0).camax();
                error += change;
                if change > 0.15 * wanted {
                    next[axis] = trial[axis];
                    finest = refined;
                }
            }
            if error <= wanted || next == orders || round + 1 == ROUNDS {
                return Ok(Estimate { lab: finest.0, error, band: finest.1 });
            }
            let changed = next.iter().zip(&orders).filter(|(a, b)| a != b).count();
            best = if changed == 1 { finest } else { self.once(&next)? };
            orders = next;
        }
        unreachable!("the last round returns")
    }

    fn is_varied(&self, axis: usize) -> bool {
        let spread = self.radii.iter().any(|r| r.is_finite()) || self.fibres.iter().any(Option::is_some);
        match axis {
            LINE => self.line > 0.0,
            TILT => self.waist.is_some(),
            BAND => self.vary.frequency,
            _ => spread,
        }
    }

    fn once(&self, orders: &Orders) -> Result<(DensityMatrix, Band), PairsError> {
        let mut sum = Sum { mixture: self, total: Matrix4::zeros(), tuned: Tuned::default(), born: Vec::new() };
        let band = sum.over_line(orders)?;
        let lab = DensityMatrix::new(&sum.total).ok_or(PairsError::NothingCollected)?;
        Ok((lab, band))
    }

    /// What passes the irises.
    fn passage<'f>(&self, follow: &'f dyn Fn(Vector2<f64>) -> Option<Vector2<f64>>) -> Passage<'f> {
        Passage { a: self.radii[0], b: self.radii[1], follow }
    }

    fn followed(&self, pump: &Vector3<f64>, k0: &[f64; 3], at: Vector2<f64>) -> Option<Vector2<f64>> {
        let b = self.stack.follow(pump, &self.frames[0].direction(at), k0)?;
        Some(self.frames[1].place(&b))
    }

    pub(super) fn is_open(&self, omega: f64, pump: f64) -> bool {
        let k0 = Self::wavenumbers(omega, pump);
        self.passage(&|at| self.followed(&Vector3::z(), &k0, at)).is_open()
    }

    pub(super) fn miss(&self, omega: f64, pump: f64) -> Option<f64> {
        let k0 = Self::wavenumbers(omega, pump);
        self.passage(&|at| self.followed(&Vector3::z(), &k0, at)).miss()
    }

    fn transmission(&self, omega: f64, pump: f64) -> f64 {
        let waves = [wavelength(omega), wavelength(pump - omega)];
        let arm = |arm: usize| -> f64 {
            self.filters[arm].iter().map(|f| f.transmission(waves[arm], self.photon(arm))).product()
        };
        arm(0) * arm(1)
    }
}

fn raised(order: usize) -> usize {
    order + order.div_ceil(2)
}

/// The sum while it is built.
struct Sum<'a, 'b> {
    mixture: &'b Mixture<'a>,
    total: Matrix4<Amplitude>,
    tuned: Tuned,
    born: Vec<Born>,
}

impl Sum<'_, '_> {
    fn over_line(&mut self, orders: &Orders) -> Result<Band, PairsError> {
        let mixture = self.mixture;
        let centre = mixture.stack.nominal()[PUMP];
        let mut middle = None;
        if mixture.line == 0.0 {
            return self.over_band(centre, 1.0, orders)?.ok_or(PairsError::NothingCollected);
        }
        for [x, weight] in Rule::legendre(orders[LINE]).on([-REACH, REACH]) {
            // Gaussian of intensity, x in FWHM
            let weight = weight * (-4.0 * LN_2 * x * x).exp();
            let band = self.over_band(centre + x * mixture.line, weight, orders)?;
            if middle.is_none() || x.abs() < 1.0 {
                middle = band.or(middle);
            }
        }
        middle.ok_or(PairsError::NothingCollected)
    }

    fn over_band(&mut self, pump: f64, weight: f64, orders: &Orders) -> Result<Option<Band>, PairsError> {
        let mixture = self.mixture;
        if !mixture.vary.frequency {
            let nominal = mixture.stack.nominal();
            let omega = nominal[0] * pump / nominal[PUMP];
            self.over_directions(omega, pump, weight, orders)?;
            return Ok(Some([omega, omega]));
        }
        let Some(band) = mixture.band(pump, &mut self.tuned) else { return Ok(None) };
        // the middle is a kink of what two equal irises let through
        let centre = mixture.stack.nominal()[0] * pump / mixture.stack.nominal()[PUMP];
        let rule = Rule::legendre(orders[BAND]);
        let kinked = mixture.radii.iter().all(|r| r.is_finite()) && centre > band[0] && centre < band[1];
        let pieces: &[Band] = if kinked { &[[band[0], centre], [centre, band[1]]] } else { &[band] };
        for piece in pieces {
            for [omega, share] in rule.on(*piece) {
                let transmitted = mixture.transmission(omega, pump);
                if transmitted > 0.0 {
                    self.over_directions(omega, pump, weight * share * transmitted, orders)?;
                }
            }
        }
        Ok(Some(band))
    }

    fn over_directions(
        &mut self,
        omega: f64,
        pump: f64,
        weight: f64,
        orders: &Orders,
    ) -> Result<(), PairsError> {
        self.mixture.stack.tune(&mut self.tuned, omega, pump)?;
        let mixture = self.mixture;
        let Some(waist) = mixture.waist else {
            self.over_discs(&Vector3::z(), weight, orders);
            return Ok(());
        };
        // |A_p(q)|^2 = exp(-q^2 w^2/2), out to 3 standard deviations 1/w
        let rule = Rule::legendre(orders[TILT]);
        let k0 = self.tuned.k0[PUMP];
        for [x, wx] in rule.on([-3.5, 3.5]) {
            for [y, wy] in rule.on([-3.5, 3.5]) {
                let gauss = (-0.5 * (x * x + y * y)).exp();
                let (sx, sy) = (x / (waist * k0), y / (waist * k0));
                let direction = Vector3::new(sx, sy, (1.0 - sx * sx - sy * sy).max(0.0).sqrt());
                self.over_discs(&direction, weight * wx * wy * gauss, orders);
            }
        }
        Ok(())
    }

    fn over_discs(&mut self, pump: &Vector3<f64>, weight: f64, orders: &Orders) {
        let mixture = self.mixture;
        if mixture.radii.iter().all(|r| !r.is_finite()) {
            let a = mixture.stack.arms[0];
            if let Some(field) = self.field(pump, &a) {
                self.total += field * field.adjoint() * Complex::from(weight);
            }
            return;
        }
        let k0 = self.tuned.k0;
        let follow = |at| mixture.followed(pump, &k0, at);
        let mut nodes = Vec::new();
        mixture.passage(&follow).nodes(&Rule::legendre(orders[RADIUS]), orders[AZIMUTH], &mut nodes);
        for (at, share) in nodes {
            let a = mixture.frames[0].direction(at);
            if let Some(field) = self.field(pump, &a) {
                self.total += field * field.adjoint() * Complex::from(weight * share);
            }
        }
    }

    /// The two-photon field towards a direction of a, in HH, HV, VH, VV.
    fn field(&mut self, pump: &Vector3<f64>, a: &Vector3<f64>) -> Option<Vector4<Amplitude>> {
        let stack = self.mixture.stack;
        let k0 = self.tuned.k0;
        let a = Ray::new(k0[0], *a);
        let b = Ray::new(k0[1], stack.follow(pump, &a.d, &k0)?);
        stack.born(&self.tuned, &a, &b, Behind::Plates, &mut self.born)?;
        Some(self.born.iter().fold(Vector4::zeros(), |sum, pair| sum + pair.field()))
    }
}

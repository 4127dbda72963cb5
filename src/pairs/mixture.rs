//! The mixture that is collected: amplitudes summed over what is measured, squares over what is not.
//!
//! Frequencies and directions add incoherently for points and irises; a fibre mode adds amplitudes over directions. A
//! spread of the pump's frequency adds incoherently whether it is a linewidth or that of a pulse, because each set of
//! photon frequencies comes from one pump frequency. Weights are in d omega and, within irises, in d^2 q; transmissions of
//! filters in wavelength.

use std::f64::consts::LN_2;

use nalgebra::{Complex, Matrix4, Vector2, Vector3, Vector4};

use super::amplitude::{Behind, Born};
use super::band::Band;
use super::bench::{Bench, Filter, Line, Opening};
use super::disc::{ArmFrame, Passage};
use super::plate::Point;
use super::quadrature::Rule;
use super::slab::Ray;
use super::stack::{PUMP, Stack, Tuned, wavelength};
use super::state::{Amplitude, DensityMatrix};
use super::{HistoryBasis, PairsError, Vary};
use crate::quantity::Wavelength;

/// What is integrated over, made ready.
#[derive(Debug, Clone)]
pub struct Mixture<'a> {
    pub(super) stack: &'a Stack,
    pub(super) filters: [Vec<Filter>; 2],
    /// Radii of the irises as sines; infinite without.
    pub(super) radii: [f64; 2],
    /// 1/e^2 mode radii of the fibres, m.
    pub(super) fibres: [Option<f64>; 2],
    pub(super) frames: [ArmFrame; 2],
    /// FWHM of the pump's spectrum, rad/s.
    line: f64,
    /// That spectrum as many points (rad/s, weight), where it was measured.
    spectrum: Option<Vec<[f64; 2]>>,
    /// 1/e^2 radius of the pump, m.
    pub(super) waist: Option<f64>,
    vary: Vary,
}

/// Points of each quadrature: pump frequency, pump direction, frequency of a, radius and azimuth of directions.
type Orders = [usize; 5];

const LINE: usize = 0;
const TILT: usize = 1;
const BAND: usize = 2;
const RADIUS: usize = 3;
const AZIMUTH: usize = 4;

/// Where the pump's spread of directions ends, in standard deviations 1/waist of its intensity.
const SPREAD: f64 = 3.5;

/// The error that is told is this many times what refining changes.
const SAFETY: f64 = 2.0;

const FIRST: Orders = [5, 3, 14, 3, 8];

/// A density matrix with the error of its elements.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Estimate {
    /// In H and V of each arm: HH, HV, VH, VV.
    pub lab: DensityMatrix,
    /// Four times the largest change of an element when the quadratures are refined one by one, added up: twice the change
    /// of a visibility.
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
        let spectrum = match &bench.line {
            Line::Measured(trace) if vary.line => Some(trace.measure()),
            _ => None,
        };
        let in_frequency = |[w, weight]: [f64; 2]| [Wavelength::metres(w).angular_frequency(), weight];
        Self {
            stack,
            filters,
            radii,
            fibres,
            frames: stack.arms.map(ArmFrame::new),
            line: if vary.line { bench.line.width(stack.photons.pump) } else { 0.0 },
            spectrum: spectrum.map(|points| points.into_iter().map(in_frequency).collect()),
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
        // some seconds; the error that is left is told
        const MOST_SAMPLES: usize = 1_000_000;
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
                let change = SAFETY * 2.0 * (refined.lab.0 - best.lab.0).camax();
                error += change;
                if change > 0.15 * wanted {
                    next[axis] = trial[axis];
                    finest = refined;
                }
            }
            if error <= wanted || next == orders || round + 1 == ROUNDS || finest.samples > MOST_SAMPLES {
                return Ok(Estimate { lab: finest.lab, error, band: finest.band });
            }
            let changed = next.iter().zip(&orders).filter(|(a, b)| a != b).count();
            best = if changed == 1 { finest } else { self.once(&next)? };
            orders = next;
        }
        unreachable!("the last round returns")
    }

    /// Whether directions are points: a's stands, b follows, and plates in the arms are passed head-on, since nothing is
    /// said of what brings the light to them.
    #[must_use]
    pub fn is_of_points(&self) -> bool {
        !self.spreads()
    }

    /// Whether irises see less than the pump's spread of directions: then they are integrated over one by one.
    fn is_narrow(&self, waist: f64) -> bool {
        self.radii[1] * self.photon(1).wavenumber() * waist < 2.0 && self.radii[0].is_finite()
    }

    /// The one arm with a fibre, and its mode radius.
    fn only_fibre(&self) -> Option<(usize, f64)> {
        match self.fibres {
            [Some(radius), None] => Some((0, radius)),
            [None, Some(radius)] => Some((1, radius)),
            _ => None,
        }
    }

    fn spreads(&self) -> bool {
        self.radii.iter().any(|r| r.is_finite()) || self.fibres.iter().any(Option::is_some)
    }

    fn is_varied(&self, axis: usize) -> bool {
        let modes = self.fibres.iter().all(Option::is_some);
        let narrow = self.waist.is_some_and(|waist| self.is_narrow(waist));
        match axis {
            LINE => self.line > 0.0,
            TILT => self.waist.is_some() && !narrow && !modes,
            BAND => self.vary.frequency,
            RADIUS => self.spreads(),
            // a fibre, a focused pump and no iris: all are sums over planes
            _ => {
                let planes = self.only_fibre().is_some() && self.waist.is_some();
                self.spreads() && !modes && (!planes || self.radii.iter().any(|r| r.is_finite()))
            }
        }
    }

    fn once(&self, orders: &Orders) -> Result<Once, PairsError> {
        let mut sum = Sum::new(self);
        let band = sum.over_line(orders)?;
        let lab = DensityMatrix::new(&sum.total).ok_or(PairsError::NothingCollected)?;
        Ok(Once { lab, band, samples: sum.samples })
    }

    /// How many pairs are collected, roughly and in units of its own.
    pub(super) fn brightness(&self) -> Result<f64, PairsError> {
        let mut sum = Sum::new(self);
        sum.over_line(&FIRST)?;
        Ok(sum.total.trace().re)
    }

    /// Pairs that stand for the mixture: some hundreds.
    pub(super) fn samples(&self) -> Result<Vec<Sample>, PairsError> {
        let mut sum = Sum { record: Some(Vec::new()), ..Sum::new(self) };
        sum.over_line(&[6, 3, 24, 3, 8])?;
        sum.record.filter(|all| !all.is_empty()).ok_or(PairsError::NothingCollected)
    }

    /// The pair that is off the nominal one by so much: frequency of a (rad/s), direction of a (sines along H and V),
    /// frequency of the pump (rad/s).
    pub(super) fn probe(&self, [omega, x, y, pump]: [f64; 4]) -> Result<Sample, PairsError> {
        let nominal = self.stack.nominal();
        let mut sum = Sum { record: Some(Vec::new()), ..Sum::new(self) };
        self.stack.tune(&mut sum.tuned, nominal[0] + omega, nominal[PUMP] + pump)?;
        sum.add(&Vector3::z(), &self.frames[0].direction(Vector2::new(x, y)), 1.0);
        sum.record.and_then(|all| all.first().copied()).ok_or(PairsError::NothingCollected)
    }

    /// Phase of the first history minus that of the second behind everything, radians within (-pi, pi], for a pair that is
    /// off the nominal one: frequency of a (rad/s), direction of a (sines along H and V of the arm), frequency of the pump
    /// (rad/s).
    ///
    /// # Errors
    /// Indices that are not to be had; such a pair cannot leave.
    pub fn relative_phase(&self, basis: &HistoryBasis, off: [f64; 4]) -> Result<f64, PairsError> {
        Ok(Point::new(&self.probe(off)?, basis).value.arg())
    }

    /// What passes the irises.
    pub(super) fn passage<'f>(
        &self,
        follow: &'f dyn Fn(Vector2<f64>) -> Option<Vector2<f64>>,
    ) -> Passage<'f> {
        Passage { a: self.radii[0], b: self.radii[1], follow }
    }

    pub(super) fn followed(
        &self,
        pump: &Vector3<f64>,
        k0: &[f64; 3],
        at: Vector2<f64>,
    ) -> Option<Vector2<f64>> {
        let b = self.stack.follow(pump, &self.frames[0].direction(at), k0)?;
        Some(self.frames[1].place(&b))
    }

    pub(super) fn is_open(&self, omega: f64, pump: f64) -> bool {
        let k0 = Self::wavenumbers(omega, pump);
        let follow = |at| self.followed(&Vector3::z(), &k0, at);
        let passage = self.passage(&follow);
        Passage { b: passage.b + self.blur(k0[1]), ..passage }.is_open()
    }

    pub(super) fn miss(&self, omega: f64, pump: f64) -> Option<f64> {
        let k0 = Self::wavenumbers(omega, pump);
        let follow = |at| self.followed(&Vector3::z(), &k0, at);
        let passage = self.passage(&follow);
        Passage { b: passage.b + self.blur(k0[1]), ..passage }.miss()
    }

    /// How far the pump's spread of directions can move b, as a sine.
    fn blur(&self, k0: f64) -> f64 {
        self.waist.map_or(0.0, |waist| SPREAD / (waist * k0))
    }

    /// What a fibre takes of a direction where the other arm has none: |u|^2 of its mode.
    fn seen(&self, arm: usize, k0: f64, at: Vector2<f64>) -> f64 {
        self.fibres[arm].map_or(1.0, |w| (-0.5 * (k0 * w).powi(2) * at.norm_squared()).exp())
    }

    /// Frequencies of the pump with weights.
    fn pump_frequencies(&self, order: usize) -> Vec<[f64; 2]> {
        if let Some(points) = &self.spectrum {
            return Rule::weighted(points, order).0;
        }
        // a Gaussian of intensity, exp(-4 ln 2 x^2) with x in FWHM
        let scale = 0.5 / LN_2.sqrt() * self.line;
        let centre = self.stack.nominal()[PUMP];
        Rule::hermite(order).0.into_iter().map(|[x, weight]| [centre + x * scale, weight]).collect()
    }

    /// Frequencies of a with weights, which hold what the filters transmit.
    fn frequencies(&self, piece: Band, pump: f64, order: usize) -> Vec<[f64; 2]> {
        let mut joints: Vec<f64> = Vec::new();
        for (arm, filters) in self.filters.iter().enumerate() {
            let photon = self.photon(arm);
            let own = filters.iter().flat_map(|filter| filter.joints(photon));
            let omega = own.map(|w| Wavelength::metres(w).angular_frequency());
            joints.extend(omega.map(|omega| if arm == 0 { omega } else { pump - omega }));
        }
        let weighed = |[omega, share]: [f64; 2]| [omega, share * self.transmission(omega, pump)];
        if joints.is_empty() {
            return Rule::legendre(order).on(piece).map(weighed).collect();
        }
        // a measured filter may be open in a small part of the piece: a rule of its own, from points that are close enough
        // for every filter
        const STEPS: usize = 64;
        let step = (piece[1] - piece[0]) / STEPS as f64;
        joints.extend((0..=STEPS).map(|j| piece[0] + step * j as f64));
        joints.retain(|omega| (piece[0]..=piece[1]).contains(omega));
        joints.sort_by(f64::total_cmp);
        let rule = Rule::legendre(3);
        let between =
            joints.windows(2).flat_map(|pair| rule.on([pair[0], pair[1]]).map(weighed).collect::<Vec<_>>());
        let points: Vec<[f64; 2]> = between.filter(|point| point[1] > 0.0).collect();
        Rule::weighted(&points, order).0
    }

    /// What the filters of both arms leave of pairs whose photon a has this wavelength, at the pump's centre.
    #[must_use]
    pub fn passes(&self, a: Wavelength) -> f64 {
        self.transmission(a.angular_frequency(), self.stack.nominal()[PUMP])
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
pub(super) struct Sum<'a, 'b> {
    pub(super) mixture: &'b Mixture<'a>,
    pub(super) total: Matrix4<Amplitude>,
    pub(super) tuned: Tuned,
    born: Vec<Born>,
    /// Directions and weights, kept for their room.
    nodes: [Vec<(Vector2<f64>, f64)>; 2],
    /// Band of phase matching about the pump's centre, once it is known.
    nulls: Option<Band>,
    samples: usize,
    /// Where each sample is kept, if it is wanted.
    record: Option<Vec<Sample>>,
}

/// One pair of the mixture.
#[derive(Debug, Clone, Copy)]
pub(super) struct Sample {
    /// Vacuum wavenumbers of a, b and the pump, rad/m.
    pub k0: [f64; 3],
    /// Of a and b.
    pub directions: [Vector3<f64>; 2],
    /// As the two histories make it.
    pub born: [Born; 2],
    pub weight: f64,
}

/// One pass of all quadratures.
#[derive(Clone, Copy)]
struct Once {
    lab: DensityMatrix,
    band: Band,
    samples: usize,
}

impl<'a, 'b> Sum<'a, 'b> {
    pub(super) fn new(mixture: &'b Mixture<'a>) -> Self {
        Self {
            mixture,
            total: Matrix4::zeros(),
            tuned: Tuned::default(),
            born: Vec::new(),
            nodes: [Vec::new(), Vec::new()],
            nulls: None,
            samples: 0,
            record: None,
        }
    }
}

impl Sum<'_, '_> {
    fn over_line(&mut self, orders: &Orders) -> Result<Band, PairsError> {
        let mixture = self.mixture;
        let centre = mixture.stack.nominal()[PUMP];
        if mixture.line == 0.0 {
            return self.over_band(centre, 1.0, orders)?.ok_or(PairsError::NothingCollected);
        }
        let mut middle: Option<(f64, Band)> = None;
        for [pump, weight] in mixture.pump_frequencies(orders[LINE]) {
            let off = (pump - centre).abs();
            if let Some(band) = self.over_band(pump, weight, orders)?
                && middle.is_none_or(|(least, _)| off < least)
            {
                middle = Some((off, band));
            }
        }
        middle.map(|(_, band)| band).ok_or(PairsError::NothingCollected)
    }

    fn over_band(&mut self, pump: f64, weight: f64, orders: &Orders) -> Result<Option<Band>, PairsError> {
        let mixture = self.mixture;
        if !mixture.vary.frequency {
            let nominal = mixture.stack.nominal();
            let omega = nominal[0] * pump / nominal[PUMP];
            self.over_directions(omega, pump, weight, orders)?;
            return Ok(Some([omega, omega]));
        }
        let Some(band) = mixture.band(pump, &mut self.tuned, &mut self.nulls) else { return Ok(None) };
        // the middle is a kink of what two equal irises let through
        let centre = mixture.stack.nominal()[0] * pump / mixture.stack.nominal()[PUMP];
        let kinked = mixture.radii.iter().all(|r| r.is_finite()) && centre > band[0] && centre < band[1];
        let pieces: &[Band] = if kinked { &[[band[0], centre], [centre, band[1]]] } else { &[band] };
        for piece in pieces {
            for [omega, share] in mixture.frequencies(*piece, pump, orders[BAND]) {
                if share > 0.0 {
                    self.over_directions(omega, pump, weight * share, orders)?;
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
        if let [Some(a), Some(b)] = mixture.fibres {
            self.over_modes([a, b], weight, orders[RADIUS]);
            return Ok(());
        }
        let Some(waist) = mixture.waist else {
            self.over_discs(&Vector3::z(), weight, orders);
            return Ok(());
        };
        if let Some((arm, radius)) = mixture.only_fibre() {
            self.over_one_mode(arm, radius, waist, weight, [orders[RADIUS], orders[TILT], orders[AZIMUTH]]);
            return Ok(());
        }
        if mixture.is_narrow(waist) {
            self.over_both_discs(waist, weight, orders);
            return Ok(());
        }
        // |A_p(q)|^2 = exp(-q^2 w^2/2)
        let rule = Rule::hermite(orders[TILT]);
        let scale = std::f64::consts::SQRT_2 / (waist * self.tuned.k0[PUMP]);
        for [x, wx] in &rule.0 {
            for [y, wy] in &rule.0 {
                self.over_discs(&tilted(x * scale, y * scale), weight * wx * wy, orders);
            }
        }
        Ok(())
    }

    /// Both photons within the discs that are common to irises and one fibre's field of view.
    fn over_discs(&mut self, pump: &Vector3<f64>, weight: f64, orders: &Orders) {
        let mixture = self.mixture;
        if !mixture.spreads() {
            self.add(pump, &mixture.stack.arms[0], weight);
            return;
        }
        let k0 = self.tuned.k0;
        let follow = |at| mixture.followed(pump, &k0, at);
        let passage = mixture.passage(&follow);
        // a fibre alone is a Gaussian window on directions, 4 e-folds wide
        let view = |arm: usize| mixture.fibres[arm].map_or(f64::INFINITY, |w| 4.0 / (k0[arm] * w));
        let passage = Passage { a: passage.a.min(view(0)), b: passage.b.min(view(1)), ..passage };
        let mut nodes = std::mem::take(&mut self.nodes[0]);
        passage.nodes(&Rule::legendre(orders[RADIUS]), orders[AZIMUTH], &mut nodes);
        for (at, share) in &nodes {
            let seen = mixture.seen(0, k0[0], *at) * follow(*at).map_or(0.0, |at| mixture.seen(1, k0[1], at));
            self.add(pump, &mixture.frames[0].direction(*at), weight * share * seen * k0[0] * k0[0]);
        }
        self.nodes[0] = nodes;
    }

    /// Directions of a and b one by one, weighed with the pump that each pair needs.
    fn over_both_discs(&mut self, waist: f64, weight: f64, orders: &Orders) {
        let mixture = self.mixture;
        let k0 = self.tuned.k0;
        let mut nodes = std::mem::take(&mut self.nodes);
        let rule = Rule::legendre(orders[RADIUS]);
        for (arm, nodes) in nodes.iter_mut().enumerate() {
            let passage = Passage { a: mixture.radii[arm], b: f64::INFINITY, follow: &|at| Some(at) };
            passage.nodes(&rule, orders[AZIMUTH], nodes);
        }
        for (at_a, share_a) in &nodes[0] {
            let a = mixture.frames[0].direction(*at_a);
            for (at_b, share_b) in &nodes[1] {
                let b = mixture.frames[1].direction(*at_b);
                let q = (a * k0[0] + b * k0[1]).xy();
                let gauss = (-0.5 * q.norm_squared() * waist * waist).exp();
                self.add_pair(&a, &b, weight * share_a * share_b * gauss * (k0[0] * k0[1]).powi(2));
            }
        }
        self.nodes = nodes;
    }

    fn add(&mut self, pump: &Vector3<f64>, a: &Vector3<f64>, weight: f64) {
        if let Some(b) = self.mixture.stack.follow(pump, a, &self.tuned.k0) {
            self.add_pair(a, &b, weight);
        }
    }

    fn add_pair(&mut self, a: &Vector3<f64>, b: &Vector3<f64>, weight: f64) {
        let Some(field) = self.pair_field(a, b) else { return };
        self.total += field * field.adjoint() * Complex::from(weight);
        if let Some(samples) = &mut self.record {
            let born = self.mixture.stack.named.map(|index| self.born[index]);
            samples.push(Sample { k0: self.tuned.k0, directions: [*a, *b], born, weight });
        }
    }

    /// The two-photon field towards a direction of a, in HH, HV, VH, VV.
    pub(super) fn field(&mut self, pump: &Vector3<f64>, a: &Vector3<f64>) -> Option<Vector4<Amplitude>> {
        let b = self.mixture.stack.follow(pump, a, &self.tuned.k0)?;
        self.pair_field(a, &b)
    }

    /// The pairs of all histories that [`Self::field`] looked at last.
    pub(super) fn last_born(&self) -> &[Born] {
        &self.born
    }

    pub(super) fn pair_field(&mut self, a: &Vector3<f64>, b: &Vector3<f64>) -> Option<Vector4<Amplitude>> {
        let k0 = self.tuned.k0;
        let (a, b) = (Ray::new(k0[0], *a), Ray::new(k0[1], *b));
        self.samples += 1;
        let behind = if self.mixture.is_of_points() { Behind::PlatesHeadOn } else { Behind::Plates };
        self.mixture.stack.born(&self.tuned, &a, &b, behind, &mut self.born)?;
        let field = self.born.iter().fold(Vector4::zeros(), |sum, pair| sum + pair.field());
        Some(if self.mixture.vary.even { field.try_normalize(0.0)? } else { field })
    }
}

/// The unit vector with these components along x and y.
pub(super) fn tilted(x: f64, y: f64) -> Vector3<f64> {
    Vector3::new(x, y, (1.0 - x * x - y * y).max(0.0).sqrt())
}

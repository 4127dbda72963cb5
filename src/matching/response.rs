//! What a small change of crystal or photons does to a phase mismatch, and so to rings and crossings: exact first
//! derivatives.
//!
//! Delta_k(d, p) is a function of the signal's external direction d and of a parameter p: a turn of the mount, a turn of
//! the dielectric axes in it, indices, wavelengths. A direction that stays matched obeys
//!
//! grad Delta_k . dd/dp + F_p = 0,   F_p = the change of Delta_k at fixed d,
//!
//! so that on a meridian of a traced ring d psi/dp = -F_p/F_psi. What is fitted to the samples (cone, circle) is
//! stationary in a sum over them, and follows by the implicit function theorem once more.

use nalgebra::{Matrix2, Matrix3, Vector2, Vector3};
use num_dual::{Dual64, DualNum};

use super::cones::Landing;
use super::emission::Emission;
use super::interaction::Roles;
use super::mismatch::Mismatch;
use super::ring::Ring;
use crate::frame::{Direction, Lab, Tangential};
use crate::optics::{Crystal, Drift, Medium, Sheet};
use crate::quantity::Wavelength;

/// A small change of a crystal and its photons, for each unit of whatever changes them.
#[derive(Debug, Clone, Copy, Default)]
pub struct Change {
    /// Turn of the mount in the lab, right-handed, radians.
    pub mount: Vector3<f64>,
    /// Of the crystal at the frequencies of pump, signal and idler.
    pub media: [Drift; 3],
    /// Of 2 pi/period, rad/m.
    pub grating: f64,
}

impl Change {
    /// For each radian that the mount turns about a lab axis.
    #[must_use]
    pub fn turn(axis: Vector3<f64>) -> Self {
        Self { mount: axis, ..Self::default() }
    }

    /// For each radian of theta, or of phi. A poled crystal expands along its normal, which is another one then.
    #[must_use]
    pub fn cut(crystal: &Crystal, emission: &Emission, phi: bool) -> Self {
        let axes = emission.placement.cut_axes(crystal.reversal);
        let turn = if phi { axes.phi } else { axes.theta };
        let (theta, azimuth) = (crystal.cut.theta.si(), crystal.cut.phi.si());
        let [mut theta, mut azimuth] = [theta, azimuth].map(Dual64::from_re);
        if phi {
            azimuth = azimuth.derivative();
        } else {
            theta = theta.derivative();
        }
        // the face normal, as `Cut::axes` has it
        let (s, c) = (theta.sin(), theta.cos());
        let normal = [s * azimuth.cos(), s * azimuth.sin(), c];
        let temperature = Dual64::from_re(crystal.temperature.degc());
        let drift = Drift { turn, ..Drift::default() };
        Self {
            media: [drift; 3],
            grating: grating(crystal, emission, normal, temperature),
            ..Self::default()
        }
    }

    /// For each metre of pump wavelength. The signal keeps its wavelength, or is twice the pump's.
    #[must_use]
    pub fn pump(emission: &Emission, degenerate: bool) -> Self {
        // k0 = 2 pi/lambda, and energy is conserved: k0_idler = k0_pump - k0_signal
        let pump = -emission.media.pump.k0() / emission.photons.pump.si();
        let signal = if degenerate { 0.5 * pump } else { 0.0 };
        let drift =
            |medium: &Medium, k0: f64| Drift { k0, eta: medium.dispersion() * k0, ..Drift::default() };
        let media = &emission.media;
        let each = [(&media.pump, pump), (&media.signal, signal), (&media.idler, pump - signal)]
            .map(|(m, k)| drift(m, k));
        Self { media: each, ..Self::default() }
    }

    /// For each kelvin.
    #[must_use]
    pub fn temperature(crystal: &Crystal, emission: &Emission) -> Self {
        // d(n^-2)/dT = -2 n^-3 dn/dT
        let drift = |wavelength: Wavelength| {
            let set = crystal.set();
            let slope = |axis: usize| set.thermo_slope(axis, wavelength, crystal.temperature).unwrap_or(0.0);
            let n = crystal.principal(wavelength).map(|p| p.axes.map(|index| index.n)).unwrap_or([1.0; 3]);
            let eta = Vector3::from_fn(|axis, _| -2.0 * n[axis].powi(-3) * slope(axis));
            Drift { eta, ..Drift::default() }
        };
        let photons = &emission.photons;
        let [_, _, crate::frame::Dielectric(normal)] = crystal.cut.axes();
        let normal = [normal.x, normal.y, normal.z].map(Dual64::from_re);
        let temperature = Dual64::from_re(crystal.temperature.degc()).derivative();
        Self {
            media: [photons.pump, photons.signal, photons.idler].map(drift),
            grating: grating(crystal, emission, normal, temperature),
            ..Self::default()
        }
    }

    /// For each metre of poling period.
    #[must_use]
    pub fn poling(crystal: &Crystal, emission: &Emission) -> Self {
        let period = crystal.poling.map_or(f64::INFINITY, |period| period.si());
        Self { grating: -emission.grating / period, ..Self::default() }
    }

    /// So many times this change.
    #[must_use]
    pub fn times(mut self, factor: f64) -> Self {
        self.mount *= factor;
        self.grating *= factor;
        for drift in &mut self.media {
            (drift.k0, drift.eta, drift.turn) = (drift.k0 * factor, drift.eta * factor, drift.turn * factor);
        }
        self
    }
}

/// Derivative of 2 pi/(period x expansion), rad/m.
fn grating(crystal: &Crystal, emission: &Emission, normal: [Dual64; 3], temperature: Dual64) -> f64 {
    if !crystal.expands || emission.grating == 0.0 {
        return 0.0;
    }
    let length = crystal.material.expansion_of(normal, crystal.reference_temperature, temperature);
    -emission.grating * length.eps / length.re
}

/// How the mismatch of one process answers to changes, as a function of the direction of one of its photons.
#[derive(Debug, Clone, Copy)]
pub struct Response<'a> {
    emission: &'a Emission,
    roles: Roles,
    landing: Landing,
    /// Sign of the grating's term.
    sign: f64,
}

/// A wave that can be asked for its change.
struct Ask<'a> {
    medium: &'a Medium,
    sheet: Sheet,
    index: usize,
}

impl<'a> Response<'a> {
    /// Of the process with these roles; directions are those of the photon that lands so.
    #[must_use]
    pub fn new(emission: &'a Emission, roles: Roles, landing: Landing) -> Option<Self> {
        let sign = if emission.grating == 0.0 { 1.0 } else { emission.grating_sign(roles)? };
        Some(Self { emission, roles, landing, sign })
    }

    /// The photon whose direction is given, and its twin.
    fn photons(&self) -> [Ask<'a>; 2] {
        let media = &self.emission.media;
        let signal = Ask { medium: &media.signal, sheet: self.roles.signal, index: 1 };
        let idler = Ask { medium: &media.idler, sheet: self.roles.idler, index: 2 };
        if self.landing == Landing::Signal { [signal, idler] } else { [idler, signal] }
    }

    /// First-order changes of Delta_k (rad/m) at a fixed unit direction in the lab; `None` where a photon is evanescent.
    #[must_use]
    pub fn at(&self, d: &Vector3<f64>, changes: &[Change]) -> Option<Vec<f64>> {
        let pump = Ask { medium: &self.emission.media.pump, sheet: self.roles.pump, index: 0 };
        let [own, twin] = self.photons();
        let face = self.emission.placement.face_axes();
        let ahead = Vector3::z();
        let conserved =
            |k0: f64, d: &Vector3<f64>| Tangential { u: k0 * d.dot(&face[0]), v: k0 * d.dot(&face[1]) };
        let (q_pump, q_own) = (conserved(pump.medium.k0(), &ahead), conserved(own.medium.k0(), d));
        let of_pump = pump.medium.tangent(pump.sheet, q_pump)?;
        let of_own = own.medium.tangent(own.sheet, q_own)?;
        let of_twin = twin.medium.tangent(twin.sheet, q_pump - q_own)?;
        let change = |change: &Change| {
            // q_i = k0 d.u_i and the face's axes turn by Omega x u_i
            let turned = face.map(|axis| change.mount.cross(&axis));
            let moved = |k0: f64, drift: &Drift, d: &Vector3<f64>| Tangential {
                u: drift.k0 * d.dot(&face[0]) + k0 * d.dot(&turned[0]),
                v: drift.k0 * d.dot(&face[1]) + k0 * d.dot(&turned[1]),
            };
            let dq_pump = moved(pump.medium.k0(), &change.media[pump.index], &ahead);
            let dq_own = moved(own.medium.k0(), &change.media[own.index], d);
            of_pump.change(&change.media[pump.index], dq_pump)
                - of_own.change(&change.media[own.index], dq_own)
                - of_twin.change(&change.media[twin.index], dq_pump - dq_own)
                - self.sign * change.grating
        };
        Some(changes.iter().map(change).collect())
    }
}

/// First-order change of a ring and of what fits it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RingChange {
    /// Of the unit axis of the cone, across it.
    pub axis: Vector3<f64>,
    /// Of the cone's half angle, radians.
    pub half_angle: f64,
    /// Of the centre of the circle on the screen, in units of the distance.
    pub centre: Vector2<f64>,
    /// Of its radius.
    pub radius: f64,
}

/// One sample of a ring: where it is, and how a meridian leads to it.
struct Sample {
    d: Vector3<f64>,
    /// d d/d psi.
    along: Vector3<f64>,
    /// Away from the axis, across it.
    out: Vector3<f64>,
    sin: f64,
    cos: f64,
    gradient: Vector3<f64>,
    /// F_psi.
    steep: f64,
    /// F_p of each change.
    at_rest: Vec<f64>,
}

impl Ring {
    /// Changes of a ring that was found with `mismatch`, one for each of `changes`; `None` for a ring that is a point, and
    /// where the mismatch does not grow across it.
    #[must_use]
    pub fn changes(
        &self,
        mismatch: &Mismatch,
        response: &Response<'_>,
        changes: &[Change],
    ) -> Option<Vec<RingChange>> {
        let axis = self.curve.frame.axis;
        let samples: Vec<Sample> = (0..self.curve.count())
            .map(|j| {
                let d = self.curve.vector(j);
                let cos = d.dot(&axis);
                let across = d - axis * cos;
                let sin = across.norm();
                let out = across.try_normalize(1e-12)?;
                let along = out * cos - axis * sin;
                let gradient = mismatch.towards(d)?.gradient;
                let steep = gradient.dot(&along);
                let at_rest = response.at(&d, changes)?;
                (steep != 0.0).then_some(Sample { d, along, out, sin, cos, gradient, steep, at_rest })
            })
            .collect::<Option<_>>()?;
        let tilting = Tilting::new(&samples, self.curve.frame.across, axis)?;
        let circle = self.circle();
        (0..changes.len()).map(|p| self.change(&samples, &tilting, circle, p)).collect()
    }

    fn change(
        &self,
        samples: &[Sample],
        tilting: &Tilting,
        circle: (Vector2<f64>, f64),
        p: usize,
    ) -> Option<RingChange> {
        let axis = tilting.follow(samples, p);
        let a = tilting.axis;
        let mut versine = 0.0;
        let mut moved = Vec::with_capacity(samples.len());
        for s in samples {
            let carried = carried(s, &a, &axis);
            let psi = -(s.at_rest[p] + s.gradient.dot(&carried)) / s.steep;
            versine += s.sin * psi;
            let change = s.along * psi + carried;
            // P = (x, y)/z
            let place = s.d.xy() / s.d.z;
            moved.push((place, (change.xy() - place * change.z) / s.d.z));
        }
        let (centre, radius) = circle_change(&moved, circle)?;
        // cos alpha = mean cos psi
        let half_angle = versine / samples.len() as f64 / self.half_angle.sin();
        Some(RingChange { axis, half_angle, centre, radius })
    }
}

/// How a point at fixed (psi, phi) moves when the axis a does by `axis`, and its frame is carried along without turning:
/// (cos psi a + sin psi rho)' = cos psi a' - sin psi a (a'.rho).
fn carried(s: &Sample, a: &Vector3<f64>, axis: &Vector3<f64>) -> Vector3<f64> {
    axis * s.cos - a * (s.sin * axis.dot(&s.out))
}

/// The axis of the cone that fits best, and the equations that hold it there.
///
/// With x_i = sin psi rho_i (i = 1, 2 across the axis) and z = cos psi, the axis is an eigenvector of the covariance of the
/// samples: g_i = sum (x_i - mean(x_i))(z - mean(z)) = 0. Then dg_i = sum A_i d psi = 0 with
/// A_i = cos psi rho_i (z - mean(z)) - (x_i - mean(x_i)) sin psi, and d psi is linear in the change of the axis.
struct Tilting {
    axis: Vector3<f64>,
    across: [Vector3<f64>; 2],
    /// A_1, A_2 of each sample.
    weights: Vec<[f64; 2]>,
    inverse: Matrix2<f64>,
}

impl Tilting {
    fn new(samples: &[Sample], across: [Vector3<f64>; 2], axis: Vector3<f64>) -> Option<Self> {
        let count = samples.len() as f64;
        let rho = |s: &Sample, i: usize| s.out.dot(&across[i]);
        let mean = |i: usize| samples.iter().map(|s| s.sin * rho(s, i)).sum::<f64>() / count;
        let (means, height) = ([mean(0), mean(1)], samples.iter().map(|s| s.cos).sum::<f64>() / count);
        let weight = |s: &Sample, i: usize| {
            s.cos * rho(s, i) * (s.cos - height) - (s.sin * rho(s, i) - means[i]) * s.sin
        };
        let weights: Vec<[f64; 2]> = samples.iter().map(|s| [weight(s, 0), weight(s, 1)]).collect();
        let mut matrix = Matrix2::zeros();
        for (s, w) in samples.iter().zip(&weights) {
            for (l, direction) in across.iter().enumerate() {
                let psi = -s.gradient.dot(&carried(s, &axis, direction)) / s.steep;
                (0..2).for_each(|i| matrix[(i, l)] += w[i] * psi);
            }
        }
        Some(Self { axis, across, weights, inverse: matrix.try_inverse()? })
    }

    /// The change of the axis that keeps g = 0.
    fn follow(&self, samples: &[Sample], p: usize) -> Vector3<f64> {
        let mut rest = Vector2::zeros();
        for (s, w) in samples.iter().zip(&self.weights) {
            let psi = -s.at_rest[p] / s.steep;
            rest += Vector2::new(w[0], w[1]) * psi;
        }
        let change = -(self.inverse * rest);
        self.across[0] * change.x + self.across[1] * change.y
    }
}

/// Change of the circle that fits points best when they move. With e = (P - c)/|P - c| and r = |P - c| - R it obeys
/// sum r (e, 1) = 0; the derivative of that with respect to (c, R) is the Hessian of the sum of squares.
fn circle_change(
    points: &[(Vector2<f64>, Vector2<f64>)],
    (centre, radius): (Vector2<f64>, f64),
) -> Option<(Vector2<f64>, f64)> {
    let (mut hessian, mut right) = (Matrix3::zeros(), Vector3::zeros());
    for (point, moved) in points {
        let from = point - centre;
        let distance = from.norm();
        let e = from / distance;
        let bend = (distance - radius) / distance;
        // d(r e)/dP = e e^T + (r/|P - c|)(1 - e e^T), and minus that for dc
        let turn = e * e.transpose() * (1.0 - bend) + Matrix2::identity() * bend;
        let pushed = turn * moved;
        right += Vector3::new(pushed.x, pushed.y, e.dot(moved));
        hessian +=
            Matrix3::new(turn[(0, 0)], turn[(0, 1)], e.x, turn[(1, 0)], turn[(1, 1)], e.y, e.x, e.y, 1.0);
    }
    let change = hessian.cholesky()?.solve(&right);
    Some((change.xy(), change.z))
}

/// Changes of a direction in which two processes are matched; `None` where their rings only touch.
#[must_use]
pub(crate) fn crossing_changes(
    direction: Direction,
    mismatches: [&Mismatch; 2],
    responses: [&Response<'_>; 2],
    changes: &[Change],
) -> Option<Vec<Vector3<f64>>> {
    let Lab(d) = direction.lab();
    let gradients = [mismatches[0].towards(d)?.gradient, mismatches[1].towards(d)?.gradient];
    let across = gradients.map(|g| g - d * g.dot(&d));
    // g1.x = -F1, g2.x = -F2, d.x = 0
    let determinant = d.dot(&across[0].cross(&across[1]));
    if determinant.abs() < 1e-9 * across[0].norm() * across[1].norm() {
        return None;
    }
    let (one, two) = (responses[0].at(&d, changes)?, responses[1].at(&d, changes)?);
    let (to_one, to_two) = (across[1].cross(&d) / determinant, d.cross(&across[0]) / determinant);
    Some(one.iter().zip(&two).map(|(f1, f2)| -(to_one * *f1 + to_two * *f2)).collect())
}

/// The point of a ring nearest to a place on the screen; lengths in units of the distance.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Foot {
    /// On the screen.
    pub place: Vector2<f64>,
    /// Unit vector out of the ring.
    pub outwards: Vector2<f64>,
    /// How far the place asked for lies outside the ring; negative inside.
    pub beyond: f64,
    /// How fast Delta_k grows outwards on the screen, rad/m per unit.
    steep: f64,
}

impl Foot {
    /// Of a place. Each step goes to the tangent at the last foot; the error shrinks by the distance over the ring's radius
    /// of curvature. `None` where that leads nowhere, as from a ring's middle.
    #[must_use]
    pub fn of(mismatch: &Mismatch, from: Vector2<f64>) -> Option<Self> {
        const STEPS: usize = 100;
        const LONGEST: f64 = 0.1;
        let mut place = from;
        for _ in 0..STEPS {
            let (value, gradient) = on_screen(mismatch, place)?;
            let square = gradient.norm_squared();
            if square == 0.0 {
                return None;
            }
            // the nearest point to `from` of the line value + gradient.(P - place) = 0
            let foot = from - gradient * ((value + gradient.dot(&(from - place))) / square);
            let mut step = foot - place;
            let length = step.norm();
            if length > LONGEST {
                step *= LONGEST / length;
            }
            place += step;
            if length < 1e-13 {
                let (_, gradient) = on_screen(mismatch, place)?;
                let outwards = gradient.normalize();
                let beyond = (from - place).dot(&outwards);
                return Some(Self { place, outwards, beyond, steep: gradient.norm() });
            }
        }
        None
    }

    /// Changes of `beyond` while the place asked for stays: the foot goes out by -F_p over the slope, and where along the
    /// ring it lies does not count, since the distance is stationary there.
    #[must_use]
    pub fn changes(&self, response: &Response<'_>, changes: &[Change]) -> Option<Vec<f64>> {
        let d = Vector3::new(self.place.x, self.place.y, 1.0).normalize();
        Some(response.at(&d, changes)?.into_iter().map(|f| f / self.steep).collect())
    }
}

/// Delta_k towards a place on the screen and its gradient there, rad/m per unit.
fn on_screen(mismatch: &Mismatch, place: Vector2<f64>) -> Option<(f64, Vector2<f64>)> {
    let d = Vector3::new(place.x, place.y, 1.0).normalize();
    let there = mismatch.towards(d)?;
    // dd = (dP - d (d.dP))/|(P, 1)| with 1/|(P, 1)| = d_z
    let across = there.gradient - d * there.gradient.dot(&d);
    Some((there.value, across.xy() * d.z))
}

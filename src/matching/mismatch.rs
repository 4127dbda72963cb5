//! The normal phase mismatch of one process as a function of the signal's direction.
//!
//! Delta_k = k_wp - k_ws(q_s) - k_wi(q_p - q_s) - K,   K = 2 pi s m / Lambda,
//! d Delta_k / d q_s = S_s,t/S_s,w - S_i,t/S_i,w.
//! Tangential wave vectors and frequencies are conserved exactly.

use nalgebra::Vector3;

use super::count;
use super::emission::Media;
use super::interaction::Roles;
use crate::frame::{Direction, Lab, Mount, Placement, Tangential};
use crate::number::Number;
use crate::optics::{Normal, Quadric, Surface};

/// Phase mismatch of one process in one crystal; signal and idler by role.
#[derive(Debug, Clone, Copy)]
pub struct Mismatch {
    q_pump: Tangential,
    /// k_wp - K, rad/m.
    available: f64,
    signal: Surface,
    idler: Surface,
    k0_signal: f64,
    k0_idler: f64,
    face: [Vector3<f64>; 2],
    normal: Vector3<f64>,
}

/// Mismatch and its gradient at one tangential wave vector.
#[derive(Debug, Clone, Copy)]
pub struct Sample<T = f64> {
    /// Delta_k, rad/m.
    pub value: T,
    /// d Delta_k/d q_u and d q_v, dimensionless.
    pub slope: [T; 2],
}

/// Mismatch towards an external direction of the signal.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Towards {
    /// Delta_k, rad/m.
    pub value: f64,
    /// Delta_k changes by gradient . delta d for a small change of the unit direction d (lab), rad/m.
    pub gradient: Vector3<f64>,
}

/// Where the mismatch is stationary.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Stationary {
    /// Signal's tangential wave vector.
    pub q: Tangential,
    /// Delta_k there, rad/m.
    pub value: f64,
    /// Second derivatives along q_u and q_v, m: uu, uv, vv.
    pub hessian: [f64; 3],
    /// Whether the slopes vanish there; where a sheet has a peak that is not smooth (a fast one on an optic axis) this
    /// is only the lowest point that was reached.
    pub smooth: bool,
}

/// The mismatch of two quadrics: what loops over many wave vectors want, without branches.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Quadrics {
    q_pump: Tangential,
    available: f64,
    signal: Quadric,
    idler: Quadric,
}

impl Quadrics {
    /// Normal component of the signal's wave vector inside.
    #[inline(always)]
    pub fn signal_height<T: Number>(&self, q: Tangential<T>) -> T {
        self.signal.height(q).k_w()
    }

    /// Not a number where a photon is evanescent.
    #[inline(always)]
    pub fn sample<T: Number>(&self, q: Tangential<T>) -> Sample<T> {
        let other = Tangential { u: -q.u + self.q_pump.u, v: -q.v + self.q_pump.v };
        let (signal, idler) = (self.signal.height(q), self.idler.height(other));
        // both reciprocals by one division
        let inverse = (signal.root * idler.root).reciprocal();
        let from = self.signal.slope(&signal, inverse * idler.root);
        let to = self.idler.slope(&idler, inverse * signal.root);
        Sample {
            value: -signal.k_w() + self.available - idler.k_w(),
            slope: [to[0] - from[0], to[1] - from[1]],
        }
    }
}

/// Delta_k = k_wp - K - k_ws - k_wi and its slopes.
#[inline(always)]
fn difference(available: f64, signal: &Normal, idler: &Normal) -> Sample {
    Sample {
        value: available - signal.k_w - idler.k_w,
        slope: [idler.slope[0] - signal.slope[0], idler.slope[1] - signal.slope[1]],
    }
}

impl Mismatch {
    /// For the media of a process in a crystal placed so, pumped along lab z; `grating` in rad/m. `None` where the
    /// pump cannot enter or would meet the crystal from behind.
    #[must_use]
    pub fn new(media: &Media, roles: Roles, placement: &Placement, grating: f64) -> Option<Self> {
        let k0_pump = media.pump.k0();
        let Mount(d) = placement.to_mount(Lab(Vector3::z()));
        if d.z <= 0.0 {
            return None;
        }
        let q_pump = Tangential { u: k0_pump * d.x, v: k0_pump * d.y };
        let face = placement.face_axes();
        Some(Self {
            q_pump,
            available: media.pump.surface(roles.pump).normal(q_pump)?.k_w - grating,
            signal: *media.signal.surface(roles.signal),
            idler: *media.idler.surface(roles.idler),
            k0_signal: media.signal.k0(),
            k0_idler: media.idler.k0(),
            face,
            normal: face[0].cross(&face[1]),
        })
    }

    /// The same pairs seen from the idler: signal and idler exchanged.
    #[must_use]
    pub fn exchanged(&self) -> Self {
        Self {
            signal: self.idler,
            idler: self.signal,
            k0_signal: self.k0_idler,
            k0_idler: self.k0_signal,
            ..*self
        }
    }

    /// Tangential wave vector of the pump, rad/m.
    #[must_use]
    pub fn pump(&self) -> Tangential {
        self.q_pump
    }

    /// Mismatch at a signal's tangential wave vector (rad/m); `None` where a photon is evanescent.
    #[inline]
    #[must_use]
    pub fn at(&self, q: Tangential) -> Option<Sample> {
        count::add(1);
        self.solve(q)
    }

    /// The same, not a number where a photon is evanescent; for loops that count for themselves.
    pub(super) fn sample(&self, q: Tangential) -> Sample {
        let nowhere = Sample { value: f64::NAN, slope: [f64::NAN; 2] };
        self.solve(q).unwrap_or(nowhere)
    }

    #[inline]
    fn solve(&self, q: Tangential) -> Option<Sample> {
        match self.quadrics() {
            Some(quadrics) => {
                let sample = quadrics.sample(q);
                (sample.slope[0].is_finite() && sample.slope[1].is_finite()).then_some(sample)
            }
            None => {
                let signal = self.signal.normal(q)?;
                let idler = self.idler.normal(self.q_pump - q)?;
                Some(difference(self.available, &signal, &idler))
            }
        }
    }

    /// The same for a crystal whose sheets are quadrics.
    #[inline]
    pub(super) fn quadrics(&self) -> Option<Quadrics> {
        let (signal, idler) = (*self.signal.as_quadric()?, *self.idler.as_quadric()?);
        Some(Quadrics { q_pump: self.q_pump, available: self.available, signal, idler })
    }

    /// Components of a lab vector along u and v in units of the signal's wavenumber, rad/m, and along the normal.
    pub(super) fn on_face(&self, vector: &Vector3<f64>) -> Vector3<f64> {
        let [u, v] = &self.face;
        Vector3::new(self.k0_signal * vector.dot(u), self.k0_signal * vector.dot(v), vector.dot(&self.normal))
    }

    /// Whether the idler of a signal with this tangential wave vector can leave the crystal.
    #[inline]
    pub(super) fn idler_leaves(&self, q: Tangential) -> bool {
        let idler = self.q_pump - q;
        idler.u * idler.u + idler.v * idler.v < self.k0_idler * self.k0_idler
    }

    /// Mismatch of the signal towards a unit direction in the lab; `None` where a photon is evanescent or totally
    /// reflected.
    pub(super) fn along(&self, d: Vector3<f64>) -> Option<Sample> {
        let on_face = self.on_face(&d);
        if on_face.z <= 0.0 {
            return None;
        }
        self.at(Tangential { u: on_face.x, v: on_face.y })
    }

    /// Mismatch towards a unit direction in the lab; `None` behind the exit face and where the idler is evanescent.
    #[inline]
    pub(crate) fn towards(&self, d: Vector3<f64>) -> Option<Towards> {
        if d.dot(&self.normal) <= 0.0 {
            return None;
        }
        let [u, v] = &self.face;
        let sample = self.at(Tangential { u: self.k0_signal * d.dot(u), v: self.k0_signal * d.dot(v) })?;
        let gradient = (u * sample.slope[0] + v * sample.slope[1]) * self.k0_signal;
        Some(Towards { value: sample.value, gradient })
    }

    /// The signal's tangential wave vector for an external direction.
    #[must_use]
    pub fn tangential(&self, direction: Direction) -> Tangential {
        let Lab(d) = direction.lab();
        Tangential { u: self.k0_signal * d.dot(&self.face[0]), v: self.k0_signal * d.dot(&self.face[1]) }
    }

    /// The signal's external direction; `None` where it is totally reflected.
    #[must_use]
    pub fn direction(&self, q: Tangential) -> Option<Direction> {
        outside(q, self.k0_signal, &self.face, &self.normal)
    }

    /// Where the idler goes when the signal goes to `direction`; `None` where it is totally reflected.
    #[must_use]
    pub fn partner(&self, direction: Direction) -> Option<Direction> {
        outside(self.q_pump - self.tangential(direction), self.k0_idler, &self.face, &self.normal)
    }

    /// The signal's wave vector inside the crystal, mount frame, rad/m.
    pub(crate) fn inside(&self, q: Tangential) -> Option<Vector3<f64>> {
        Some(Vector3::new(q.u, q.v, self.signal.normal(q)?.k_w))
    }

    /// Whether the mismatch is a convex function, so that its zeros are one convex curve about its minimum.
    #[must_use]
    pub fn is_convex(&self) -> bool {
        self.signal.is_convex() && self.idler.is_convex()
    }

    /// The lowest point reached by damped Newton steps from `start`; `None` if they leave the domain.
    pub(crate) fn stationary(&self, start: Tangential) -> Option<Stationary> {
        const STEPS: usize = 100;
        let mut q = start;
        let (mut here, mut hessian) = self.bent(q)?;
        for _ in 0..STEPS {
            let [a, b, c] = hessian;
            let determinant = a * c - b * b;
            let [gu, gv] = here.slope;
            let (mut du, mut dv) = if determinant > 0.0 {
                ((b * gv - c * gu) / determinant, (b * gu - a * gv) / determinant)
            } else {
                let size = 1e-3 * self.k0_signal / gu.hypot(gv).max(1e-300);
                (-gu * size, -gv * size)
            };
            let limit = 0.3 * self.k0_signal;
            let mut size = (du * du + dv * dv).sqrt();
            if size > limit {
                (du, dv) = (du * limit / size, dv * limit / size);
                size = limit;
            }
            let Some(moved) = self.descend(q, &here, [du, dv]) else { break };
            (q, here, hessian) = moved;
            // Newton squares the error in units of k0: below this the next step would be rounding
            if size <= 1e-9 * self.k0_signal && determinant > 0.0 {
                break;
            }
        }
        let smooth = here.slope[0].hypot(here.slope[1]) < 1e-7;
        Some(Stationary { q, value: here.value, hessian, smooth })
    }

    /// Halves a step until the slope along it does not grow and the point lies in the domain.
    fn descend(
        &self,
        q: Tangential,
        here: &Sample,
        step: [f64; 2],
    ) -> Option<(Tangential, Sample, [f64; 3])> {
        let steep = |sample: &Sample| sample.slope[0].powi(2) + sample.slope[1].powi(2);
        let before = steep(here);
        let mut scale = 1.0;
        for _ in 0..40 {
            let moved = Tangential { u: q.u + scale * step[0], v: q.v + scale * step[1] };
            if let Some((sample, hessian)) = self.bent(moved)
                && (steep(&sample) < before || sample.value < here.value)
            {
                return Some((moved, sample, hessian));
            }
            scale *= 0.5;
        }
        None
    }

    /// Least Delta_k of any direction, rad/m: below zero there is a ring about that direction; `None` where photons are
    /// evanescent.
    #[must_use]
    pub fn least(&self) -> Option<f64> {
        self.stationary(self.along_pump()).map(|s| s.value)
    }

    /// Mismatch and its second derivatives with respect to q: uu, uv, vv.
    fn bent(&self, q: Tangential) -> Option<(Sample, [f64; 3])> {
        count::add(1);
        let other = self.q_pump - q;
        let (signal, idler) = (self.signal.normal(q)?, self.idler.normal(other)?);
        let s = self.signal.curvature(q, &signal);
        let i = self.idler.curvature(other, &idler);
        let hessian = [-s.uu - i.uu, -s.uv - i.uv, -s.vv - i.vv];
        Some((difference(self.available, &signal, &idler), hessian))
    }

    /// Tangential wave vector of a signal that travels with the pump: a start for [`Self::stationary`].
    pub(crate) fn along_pump(&self) -> Tangential {
        let share = self.k0_signal / (self.k0_signal + self.k0_idler);
        Tangential { u: share * self.q_pump.u, v: share * self.q_pump.v }
    }

    /// Below this Delta_k is zero to rounding error, rad/m.
    pub(crate) fn rounding(&self) -> f64 {
        1e-14 * (self.k0_signal + self.k0_idler)
    }

    pub(crate) fn k0_signal(&self) -> f64 {
        self.k0_signal
    }

    pub(super) fn k0_idler(&self) -> f64 {
        self.k0_idler
    }
}

/// External direction of a tangential wave vector, in the lab.
fn outside(q: Tangential, k0: f64, face: &[Vector3<f64>; 2], normal: &Vector3<f64>) -> Option<Direction> {
    let (u, v) = (q.u / k0, q.v / k0);
    let w2 = 1.0 - u * u - v * v;
    (w2 > 0.0).then(|| Direction::new(Lab(face[0] * u + face[1] * v + normal * w2.sqrt())))
}

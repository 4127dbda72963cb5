//! The dispersion surface of a crystal, sheet by sheet: the normal wave-vector component that goes with a tangential
//! one, and its exact derivatives.
//!
//! Both sheets of any crystal obey G(k) = k0^2 with a function G homogeneous of second degree: the eigenvalue of the
//! impermittivity transverse to k, times k^2. With a the axis of the largest impermittivity alpha, c that of the
//! smallest gamma, and the two optic axes p, r in their plane,
//!
//! G(k) = 1/2 [ (alpha + gamma) k^2 + (alpha - gamma) ( (k.p)(k.r) +- |k x p| |k x r| ) ],
//!
//! plus for the fast sheet (M. Born, E. Wolf, Principles of Optics, section 15.3, in the form of the two wave-normal
//! angles; from memory). Where p = +-r the crystal is uniaxial and both sheets are quadrics k.M k = k0^2.
//! Energy flows along the gradient of G, so all derivatives of k_w follow from those of G.

use nalgebra::{Matrix3, Vector3};

use crate::frame::Tangential;

/// One of the two sheets at a given frequency.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Sheet {
    /// The inner sheet: smaller index.
    Fast,
    /// The outer sheet: larger index.
    Slow,
}

/// A solution at a tangential wave vector.
#[derive(Debug, Clone, Copy)]
pub struct Normal {
    /// Forward normal component of the wave vector, rad/m.
    pub k_w: f64,
    /// d k_w/d q_u and d k_w/d q_v = -S_u/S_w, -S_v/S_w with S the ray.
    pub slope: [f64; 2],
}

/// Second derivatives of k_w with respect to (q_u, q_v), in m: uu, uv, vv.
#[derive(Debug, Clone, Copy)]
pub struct Curvature {
    /// d2 k_w / d q_u2
    pub uu: f64,
    /// d2 k_w / d q_u d q_v
    pub uv: f64,
    /// d2 k_w / d q_v2
    pub vv: f64,
}

/// One sheet of the dispersion surface in the mount frame.
#[derive(Debug, Clone, Copy)]
pub struct Surface {
    k0_squared: f64,
    shape: Shape,
}

#[derive(Debug, Clone, Copy)]
enum Shape {
    /// G = k.M k
    Quadric(Matrix3<f64>),
    Branch(Branch),
}

/// One sheet of a biaxial crystal.
#[derive(Debug, Clone, Copy)]
struct Branch {
    /// (alpha + gamma)/2 and (alpha - gamma)/2.
    mean: f64,
    half: f64,
    gamma: f64,
    optic_axes: [Vector3<f64>; 2],
    /// +1 for the fast sheet, -1 for the slow one.
    sign: f64,
    /// Whether k_w is concave for every wave that can leave the face.
    convex: bool,
}

/// G and its gradient at one k.
struct Local {
    value: f64,
    gradient: Vector3<f64>,
}

impl Surface {
    /// The ellipsoid k.M k = k0^2.
    pub(super) fn quadric(matrix: Matrix3<f64>, k0: f64) -> Self {
        Self { k0_squared: k0 * k0, shape: Shape::Quadric(matrix) }
    }

    /// One sheet of a biaxial crystal with optic axes in the mount frame.
    pub(super) fn branch(
        alpha: f64,
        gamma: f64,
        optic_axes: [Vector3<f64>; 2],
        sheet: Sheet,
        k0: f64,
    ) -> Self {
        let sign = if sheet == Sheet::Fast { 1.0 } else { -1.0 };
        let convex = sheet == Sheet::Fast || !dimple_in_reach(alpha, gamma, &optic_axes);
        let (mean, half) = (0.5 * (alpha + gamma), 0.5 * (alpha - gamma));
        Self {
            k0_squared: k0 * k0,
            shape: Shape::Branch(Branch { mean, half, gamma, optic_axes, sign, convex }),
        }
    }

    /// Whether k_w is a concave function of q for every wave that can leave the face, as it is on every sheet but the
    /// slow one of a biaxial crystal near its optic axes. A phase mismatch built of such sheets is convex and its ring
    /// is one closed convex curve.
    #[must_use]
    pub fn is_convex(&self) -> bool {
        match &self.shape {
            Shape::Quadric(_) => true,
            Shape::Branch(branch) => branch.convex,
        }
    }

    /// Forward normal component at `q` (rad/m) and its slopes; `None` where the wave is evanescent.
    #[inline]
    #[must_use]
    pub fn normal(&self, q: Tangential) -> Option<Normal> {
        match &self.shape {
            Shape::Quadric(m) => {
                // M_ww k_w^2 + 2 b k_w + c = k0^2, the larger root; dG/dk_w /2 = sqrt(discriminant)
                let b = m[(0, 2)] * q.u + m[(1, 2)] * q.v;
                let c = m[(0, 0)] * q.u * q.u + 2.0 * m[(0, 1)] * q.u * q.v + m[(1, 1)] * q.v * q.v;
                let discriminant = b * b - m[(2, 2)] * (c - self.k0_squared);
                if discriminant.is_nan() || discriminant <= 0.0 {
                    return None;
                }
                let flow = discriminant.sqrt();
                let k_w = (flow - b) / m[(2, 2)];
                let along = |row: usize| m[(row, 0)] * q.u + m[(row, 1)] * q.v + m[(row, 2)] * k_w;
                Some(Normal { k_w, slope: [-along(0) / flow, -along(1) / flow] })
            }
            Shape::Branch(branch) => branch.normal(q, self.k0_squared),
        }
    }

    /// Second derivatives of k_w where `normal` was found at `q`.
    #[must_use]
    pub fn curvature(&self, q: Tangential, normal: &Normal) -> Curvature {
        let k = Vector3::new(q.u, q.v, normal.k_w);
        // G(q, k_w(q)) = k0^2 twice differentiated, with H half the Hessian of G and g half its gradient:
        // k_ij = -(H_ij + H_iw k_j + H_jw k_i + H_ww k_i k_j) / g_w
        let (h, flow) = match &self.shape {
            Shape::Quadric(m) => (*m, (m * k).z),
            Shape::Branch(branch) => (branch.half_hessian(k), 0.5 * branch.local(k).gradient.z),
        };
        let s = normal.slope;
        let second = |i: usize, j: usize| {
            -(h[(i, j)] + h[(i, 2)] * s[j] + h[(j, 2)] * s[i] + h[(2, 2)] * s[i] * s[j]) / flow
        };
        Curvature { uu: second(0, 0), uv: second(0, 1), vv: second(1, 1) }
    }

    /// Half the gradient of G at wave vector `k` (mount frame): its direction is that of the energy flow.
    #[must_use]
    pub fn flow(&self, k: Vector3<f64>) -> Vector3<f64> {
        match &self.shape {
            Shape::Quadric(m) => m * k,
            Shape::Branch(branch) => 0.5 * branch.local(k).gradient,
        }
    }
}

/// Whether the dimple of the slow sheet about an optic axis reaches directions that refract out of the face.
///
/// The dimple ends where a plane touches the sheet along a circle, which holds the optic axis within it and is seen
/// under the angle chi, tan^2 chi = (1/gamma - 1/beta)(1/beta - 1/alpha) alpha gamma (external conical refraction; Born
/// and Wolf, section 15.3.4, from memory): within 2 chi of the axis all is covered. Waves that can leave lie within
/// asin(1/n_min) = asin(sqrt(alpha)) of the normal.
fn dimple_in_reach(alpha: f64, gamma: f64, optic_axes: &[Vector3<f64>; 2]) -> bool {
    // sin^2 V = (alpha - beta)/(alpha - gamma), and p.r = cos 2V
    let sin2 = 0.5 * (1.0 - optic_axes[0].dot(&optic_axes[1]));
    let beta = alpha - sin2 * (alpha - gamma);
    let chi =
        ((1.0 / gamma - 1.0 / beta) * (1.0 / beta - 1.0 / alpha) * alpha * gamma).max(0.0).sqrt().atan();
    let reach = alpha.sqrt().min(1.0).asin() + 2.0 * chi + 1f64.to_radians();
    optic_axes.iter().any(|axis| axis.z.abs().min(1.0).acos() < reach)
}

/// Below this sine of the angle to an optic axis the two sheets touch to rounding error.
const ON_AXIS: f64 = 1e-12;

impl Branch {
    fn local(&self, k: Vector3<f64>) -> Local {
        let [p, r] = &self.optic_axes;
        let (kp, kr) = (k.dot(p), k.dot(r));
        let (across_p, across_r) = (k - p * kp, k - r * kr);
        let (a, b) = (across_p.norm(), across_r.norm());
        let size = k.norm();
        let towards = |across: Vector3<f64>, length: f64| {
            if length > ON_AXIS * size { across / length } else { Vector3::zeros() }
        };
        let value = self.mean * size * size + self.half * (kp * kr + self.sign * a * b);
        let twist = p * kr + r * kp + (towards(across_p, a) * b + towards(across_r, b) * a) * self.sign;
        Local { value, gradient: k * (2.0 * self.mean) + twist * self.half }
    }

    fn half_hessian(&self, k: Vector3<f64>) -> Matrix3<f64> {
        let [p, r] = &self.optic_axes;
        let across = |axis: &Vector3<f64>| {
            let vector = k - axis * k.dot(axis);
            (vector, vector.norm(), Matrix3::identity() - axis * axis.transpose())
        };
        let (vp, a, project_p) = across(p);
        let (vr, b, project_r) = across(r);
        let mut twist = p * r.transpose() + r * p.transpose();
        if a > ON_AXIS * k.norm() && b > ON_AXIS * k.norm() {
            let (np, nr) = (vp / a, vr / b);
            let bend_p = (project_p - np * np.transpose()) * (b / a);
            let bend_r = (project_r - nr * nr.transpose()) * (a / b);
            twist += (bend_p + bend_r + np * nr.transpose() + nr * np.transpose()) * self.sign;
        }
        Matrix3::identity() * self.mean + twist * (0.5 * self.half)
    }

    /// Newton on G(q, k_w) = k0^2 from the sphere of the largest index, which lies outside both sheets.
    fn normal(&self, q: Tangential, k0_squared: f64) -> Option<Normal> {
        const STEPS: usize = 60;
        let outer = k0_squared / self.gamma - q.u * q.u - q.v * q.v;
        if outer.is_nan() || outer <= 0.0 {
            return None;
        }
        let mut k = Vector3::new(q.u, q.v, outer.sqrt());
        for _ in 0..STEPS {
            let here = self.local(k);
            if here.gradient.z <= 0.0 {
                return None;
            }
            let step = (here.value - k0_squared) / here.gradient.z;
            k.z -= step;
            if k.z <= 0.0 {
                return None;
            }
            if step.abs() <= 4.0 * f64::EPSILON * k.z {
                let g = self.local(k).gradient;
                return Some(Normal { k_w: k.z, slope: [-g.x / g.z, -g.y / g.z] });
            }
        }
        // rounding can keep the last step just above the bound: accept what Newton settled on
        let g = self.local(k).gradient;
        let settled = (self.local(k).value - k0_squared).abs() <= 1e-13 * k0_squared;
        settled.then(|| Normal { k_w: k.z, slope: [-g.x / g.z, -g.y / g.z] })
    }
}

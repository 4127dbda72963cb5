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
use crate::number::Number;

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

/// What a quadric's k_w and its slopes are made of at one tangential wave vector.
#[derive(Clone, Copy)]
pub(crate) struct Height<T> {
    /// sqrt(D); not a number where the wave is evanescent.
    pub root: T,
    /// (Q q)_u and (Q q)_v.
    bowl: [T; 2],
    /// b.
    lean: T,
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
pub struct Surface(Shape);

#[derive(Debug, Clone, Copy)]
enum Shape {
    Quadric(Quadric),
    Branch(Branch),
}

/// An ellipsoid k.M k = k0^2, solved for its upper half: with everything divided by M_ww,
///
/// k_w = sqrt(D) - b,   b = b_u q_u + b_v q_v,   D = k0^2/M_ww - q.Q q.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Quadric {
    ww: f64,
    /// k0^2/M_ww.
    top: f64,
    /// M_uw/M_ww and M_vw/M_ww.
    lean: [f64; 2],
    /// Q_ij = M_ij/M_ww - b_i b_j: uu, uv, vv.
    bowl: [f64; 3],
}

/// One sheet of a biaxial crystal.
#[derive(Debug, Clone, Copy)]
struct Branch {
    k0_squared: f64,
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

impl Surface {
    /// The ellipsoid k.M k = k0^2.
    pub(super) fn quadric(matrix: &Matrix3<f64>, k0: f64) -> Self {
        Self(Shape::Quadric(Quadric::new(matrix, k0)))
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
        Self(Shape::Branch(Branch { k0_squared: k0 * k0, mean, half, gamma, optic_axes, sign, convex }))
    }

    /// Whether k_w is a concave function of q for every wave that can leave the face, as it is on every sheet but the
    /// slow one of a biaxial crystal near its optic axes. A phase mismatch built of such sheets is convex and its ring
    /// is one closed convex curve.
    #[must_use]
    pub fn is_convex(&self) -> bool {
        match &self.0 {
            Shape::Quadric(_) => true,
            Shape::Branch(branch) => branch.convex,
        }
    }

    /// The sheet as a quadric, if it is one.
    #[inline]
    pub(crate) fn as_quadric(&self) -> Option<&Quadric> {
        match &self.0 {
            Shape::Quadric(quadric) => Some(quadric),
            Shape::Branch(_) => None,
        }
    }

    /// Forward normal component at `q` (rad/m) and its slopes; `None` where the wave is evanescent.
    #[inline]
    #[must_use]
    pub fn normal(&self, q: Tangential) -> Option<Normal> {
        match &self.0 {
            Shape::Quadric(quadric) => {
                let normal = quadric.normal(q);
                (normal.k_w.is_finite() && normal.slope[0].is_finite()).then_some(normal)
            }
            Shape::Branch(branch) => branch.normal(q),
        }
    }

    /// Second derivatives of k_w where `normal` was found at `q`.
    #[inline]
    #[must_use]
    pub fn curvature(&self, q: Tangential, normal: &Normal) -> Curvature {
        match &self.0 {
            Shape::Quadric(quadric) => quadric.curvature(q, normal),
            Shape::Branch(branch) => branch.curvature(q, normal),
        }
    }

    /// Half the gradient of G at wave vector `k` (mount frame): its direction is that of the energy flow.
    #[must_use]
    pub fn flow(&self, k: Vector3<f64>) -> Vector3<f64> {
        match &self.0 {
            Shape::Quadric(quadric) => quadric.flow(k),
            Shape::Branch(branch) => 0.5 * branch.gradient(k),
        }
    }
}

impl<T: Number> Height<T> {
    /// k_w = sqrt(D) - b.
    #[inline(always)]
    pub fn k_w(&self) -> T {
        self.root - self.lean
    }
}

impl Quadric {
    fn new(m: &Matrix3<f64>, k0: f64) -> Self {
        let ww = m[(2, 2)];
        let lean = [m[(0, 2)] / ww, m[(1, 2)] / ww];
        let bowl = |i: usize, j: usize| m[(i, j)] / ww - lean[i] * lean[j];
        Self { ww, top: k0 * k0 / ww, lean, bowl: [bowl(0, 0), bowl(0, 1), bowl(1, 1)] }
    }

    /// The square root and what goes with it.
    #[inline(always)]
    pub(crate) fn height<T: Number>(&self, q: Tangential<T>) -> Height<T> {
        let ([lean_u, lean_v], [uu, uv, vv]) = (self.lean, self.bowl);
        // half the gradient of q.Q q
        let (u, v) = (q.u * uu + q.v * uv, q.u * uv + q.v * vv);
        Height {
            root: (-(u * q.u + v * q.v) + self.top).root(),
            bowl: [u, v],
            lean: q.u * lean_u + q.v * lean_v,
        }
    }

    /// d k_w/d q_i = -(Q q)_i/sqrt(D) - b_i, given 1/sqrt(D).
    #[inline(always)]
    pub(crate) fn slope<T: Number>(&self, height: &Height<T>, inverse: T) -> [T; 2] {
        let ([lean_u, lean_v], [u, v]) = (self.lean, height.bowl);
        [-(u * inverse) - lean_u, -(v * inverse) - lean_v]
    }

    /// k_w and its slopes; not a number where the wave is evanescent.
    #[inline(always)]
    pub(crate) fn normal(&self, q: Tangential) -> Normal {
        let height = self.height(q);
        Normal { k_w: height.k_w(), slope: self.slope(&height, height.root.reciprocal()) }
    }

    #[inline]
    fn curvature(&self, q: Tangential, normal: &Normal) -> Curvature {
        let ([lean_u, lean_v], [uu, uv, vv]) = (self.lean, self.bowl);
        let root = normal.k_w + lean_u * q.u + lean_v * q.v;
        // k_ij = -(Q_ij + s_i s_j)/sqrt(D) with s = grad sqrt(D)
        let (u, v) = (normal.slope[0] + lean_u, normal.slope[1] + lean_v);
        Curvature { uu: -(uu + u * u) / root, uv: -(uv + u * v) / root, vv: -(vv + v * v) / root }
    }

    /// M k.
    fn flow(&self, k: Vector3<f64>) -> Vector3<f64> {
        let ([lean_u, lean_v], [uu, uv, vv]) = (self.lean, self.bowl);
        // (M k)_w = M_ww (k_w + b),   (M k)_i = M_ww (Q q)_i + b_i (M k)_w
        let w = self.ww * (k.z + lean_u * k.x + lean_v * k.y);
        let u = self.ww * (uu * k.x + uv * k.y) + lean_u * w;
        let v = self.ww * (uv * k.x + vv * k.y) + lean_v * w;
        Vector3::new(u, v, w)
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
    /// Gradient of G.
    #[inline]
    fn gradient(&self, k: Vector3<f64>) -> Vector3<f64> {
        let [p, r] = &self.optic_axes;
        let (kp, kr) = (k.dot(p), k.dot(r));
        let (across_p, across_r) = (k - p * kp, k - r * kr);
        let (aa, bb) = (across_p.norm_squared(), across_r.norm_squared());
        let ab = (aa * bb).sqrt();
        // grad |k x p| |k x r| = ab (across_p/a^2 + across_r/b^2); a vector on its axis has no direction of its own
        let on_axis = ON_AXIS * ON_AXIS * k.norm_squared();
        let share = |square: f64| if square > on_axis { self.sign * ab / square } else { 0.0 };
        let twist = p * kr + r * kp + across_p * share(aa) + across_r * share(bb);
        k * (2.0 * self.mean) + twist * self.half
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

    fn curvature(&self, q: Tangential, normal: &Normal) -> Curvature {
        let k = Vector3::new(q.u, q.v, normal.k_w);
        // G(q, k_w(q)) = k0^2 twice differentiated, with H half the Hessian of G and g half its gradient:
        // k_ij = -(H_ij + H_iw k_j + H_jw k_i + H_ww k_i k_j) / g_w
        let (h, flow) = (self.half_hessian(k), 0.5 * self.gradient(k).z);
        let s = normal.slope;
        let second = |i: usize, j: usize| {
            -(h[(i, j)] + h[(i, 2)] * s[j] + h[(j, 2)] * s[i] + h[(2, 2)] * s[i] * s[j]) / flow
        };
        Curvature { uu: second(0, 0), uv: second(0, 1), vv: second(1, 1) }
    }

    /// Newton on G(q, k_w) = k0^2 from the sphere of the largest index, which lies outside both sheets.
    fn normal(&self, q: Tangential) -> Option<Normal> {
        const STEPS: usize = 60;
        let outer = self.k0_squared / self.gamma - q.u * q.u - q.v * q.v;
        if outer.is_nan() || outer <= 0.0 {
            return None;
        }
        let mut k_w = outer.sqrt();
        let mut before: f64 = 0.0;
        for _ in 0..STEPS {
            let [excess, slope] = self.upwards(q, k_w);
            if slope <= 0.0 {
                return None;
            }
            let step = excess / slope;
            k_w -= step;
            if k_w <= 0.0 {
                return None;
            }
            // errors that square leave step (step/before)^2 to the next step
            let (size, shrink) = (step.abs(), step / before);
            if size <= 4.0 * f64::EPSILON * k_w || size * shrink * shrink <= 0.1 * f64::EPSILON * k_w {
                return Some(self.found(q, k_w));
            }
            before = step;
        }
        // rounding can keep the last step just above the bound: accept what Newton settled on
        let settled = self.upwards(q, k_w)[0].abs() <= 1e-13 * self.k0_squared;
        settled.then(|| self.found(q, k_w))
    }

    fn found(&self, q: Tangential, k_w: f64) -> Normal {
        let g = self.gradient(Vector3::new(q.u, q.v, k_w));
        Normal { k_w, slope: [-g.x / g.z, -g.y / g.z] }
    }

    /// G - k0^2 and dG/dk_w on the way up at fixed q.
    #[inline]
    fn upwards(&self, q: Tangential, k_w: f64) -> [f64; 2] {
        let k = Vector3::new(q.u, q.v, k_w);
        // |k x a|^2 and half its derivative, (k x a).(w x a)
        let across = |a: &Vector3<f64>| {
            let (x, y, z) = (k.y * a.z - k.z * a.y, k.z * a.x - k.x * a.z, k.x * a.y - k.y * a.x);
            [x * x + y * y + z * z, y * a.x - x * a.y]
        };
        let [p, r] = &self.optic_axes;
        let (kp, kr) = (k.dot(p), k.dot(r));
        let ([aa, aw], [bb, bw]) = (across(p), across(r));
        let size = k.norm_squared();
        let ab = (aa * bb).sqrt();
        // d(ab)/dk_w = (aw bb + bw aa)/(ab); on an optic axis the sheets touch and have no slope of their own
        let twist = if ab > ON_AXIS * size { (aw * bb + bw * aa) / ab } else { 0.0 };
        let value = self.mean * size + self.half * (kp * kr + self.sign * ab);
        let slope = 2.0 * self.mean * k_w + self.half * (p.z * kr + r.z * kp + self.sign * twist);
        [value - self.k0_squared, slope]
    }
}

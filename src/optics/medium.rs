//! A crystal at one frequency in the mount frame: two waves at each tangential wave vector.

use std::fmt;

use nalgebra::{Matrix3, Vector3};

use super::surface::{Normal, Sheet, Surface};
use crate::frame::{Mount, Tangential};
use crate::material::{Optic, Principal};
use crate::quantity::SPEED_OF_LIGHT;

/// Polarization of a wave by the name the trade gives it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Polarization {
    /// o, in uniaxial crystals.
    Ordinary,
    /// e, in uniaxial crystals.
    Extraordinary,
    /// Smaller index.
    Fast,
    /// Larger index.
    Slow,
}

impl Polarization {
    /// As it is written in processes and tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Ordinary => "o",
            Self::Extraordinary => "e",
            Self::Fast => "fast",
            Self::Slow => "slow",
        }
    }
}

impl fmt::Display for Polarization {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.name())
    }
}

/// A plane wave in the crystal; vectors in the mount frame.
#[derive(Debug, Clone, Copy)]
pub struct Wave {
    /// Wave vector, rad/m.
    pub k: Mount,
    /// Unit direction of energy flow.
    pub ray: Mount,
    /// Unit electric field; the sign is arbitrary.
    pub field: Mount,
    /// d k_w/d omega at fixed tangential wave vector: group delay per thickness, s/m.
    pub delay: f64,
    /// Whether k lies on an optic axis, where field and ray are one choice among many.
    pub on_optic_axis: bool,
}

impl Wave {
    /// Angle between wave vector and ray, radians.
    #[must_use]
    pub fn walkoff(&self) -> f64 {
        self.k.0.cross(&self.ray.0).norm().atan2(self.k.0.dot(&self.ray.0))
    }
}

/// A small change of a medium, for each unit of whatever changes it.
#[derive(Debug, Clone, Copy, Default)]
pub struct Drift {
    /// Of the vacuum wavenumber, rad/m.
    pub k0: f64,
    /// Of 1/n^2 along X, Y, Z.
    pub eta: Vector3<f64>,
    /// Turn of the dielectric axes in the mount frame, right-handed, radians.
    pub turn: Vector3<f64>,
}

/// One wave of a sheet with what its first-order changes are made of.
#[derive(Debug, Clone, Copy)]
pub struct Tangent {
    k0: f64,
    k: Vector3<f64>,
    /// Half the gradient of G.
    flow: Vector3<f64>,
    /// Squares of the unit displacement's components along X, Y, Z, times k^2: dG/d eta.
    weight: Vector3<f64>,
}

impl Tangent {
    /// First-order change of the normal component, rad/m, when the medium drifts and the tangential one changes by `q`.
    ///
    /// G(k; eta, axes) = k0^2 holds throughout. Axes turned by t see k turned back, so dG = -grad G . (t x k) at fixed k;
    /// dG/d eta_i = k^2 D_i^2, since D is an eigenvector and its own change does not count. With g = grad G/2
    ///
    /// d k_w = [k0 dk0 - k^2 sum_i D_i^2 d eta_i/2 + g.(t x k) - g_u dq_u - g_v dq_v] / g_w.
    #[must_use]
    pub fn change(&self, drift: &Drift, q: Tangential) -> f64 {
        let turned = self.flow.dot(&drift.turn.cross(&self.k));
        let along = self.flow.x * q.u + self.flow.y * q.v;
        (self.k0 * drift.k0 - 0.5 * self.weight.dot(&drift.eta) + turned - along) / self.flow.z
    }
}

/// A crystal at one frequency, oriented in the mount frame.
#[derive(Debug, Clone, Copy)]
pub struct Medium {
    k0: f64,
    optic: Optic,
    /// Columns X, Y, Z in the mount frame.
    axes: Matrix3<f64>,
    /// 1/n^2 along X, Y, Z and its derivative with respect to angular frequency.
    eta: Vector3<f64>,
    eta_w: Vector3<f64>,
    optic_axes: [Vector3<f64>; 2],
    fast: Surface,
    slow: Surface,
    /// Which sheet the ordinary wave of a uniaxial crystal is.
    ordinary: Sheet,
}

impl Medium {
    /// From principal indices and the dielectric axes X, Y, Z as columns in the mount frame.
    #[must_use]
    pub fn new(principal: &Principal, axes: Matrix3<f64>) -> Self {
        let k0 = principal.wavelength.wavenumber();
        let impermittivity = principal.axes.map(|index| index.impermittivity(principal.wavelength));
        let eta = Vector3::from(impermittivity.map(|e| e[0]));
        let eta_w = Vector3::from(impermittivity.map(|e| e[1]));
        let ordinary = if eta.z > eta.x { Sheet::Slow } else { Sheet::Fast };
        let (optic_axes, fast, slow) = match principal.optic {
            Optic::Uniaxial => uniaxial(eta, axes, ordinary, k0),
            Optic::Biaxial => biaxial(eta, axes, k0),
        };
        Self { k0, optic: principal.optic, axes, eta, eta_w, optic_axes, fast, slow, ordinary }
    }

    /// Vacuum wavenumber, rad/m.
    #[must_use]
    pub fn k0(&self) -> f64 {
        self.k0
    }

    /// One sheet of the dispersion surface.
    #[must_use]
    pub fn surface(&self, sheet: Sheet) -> &Surface {
        match sheet {
            Sheet::Fast => &self.fast,
            Sheet::Slow => &self.slow,
        }
    }

    /// Name of a sheet's wave: o and e in uniaxial crystals, fast and slow in biaxial ones.
    #[must_use]
    pub fn polarization(&self, sheet: Sheet) -> Polarization {
        match (self.optic, sheet) {
            (Optic::Uniaxial, sheet) if sheet == self.ordinary => Polarization::Ordinary,
            (Optic::Uniaxial, _) => Polarization::Extraordinary,
            (Optic::Biaxial, Sheet::Fast) => Polarization::Fast,
            (Optic::Biaxial, Sheet::Slow) => Polarization::Slow,
        }
    }

    /// The sheet of a polarization; `None` for o and e in a biaxial crystal, where they mean nothing.
    #[must_use]
    pub fn sheet(&self, polarization: Polarization) -> Option<Sheet> {
        match (self.optic, polarization) {
            (_, Polarization::Fast) => Some(Sheet::Fast),
            (_, Polarization::Slow) => Some(Sheet::Slow),
            (Optic::Uniaxial, Polarization::Ordinary) => Some(self.ordinary),
            (Optic::Uniaxial, Polarization::Extraordinary) => Some(other(self.ordinary)),
            (Optic::Biaxial, _) => None,
        }
    }

    /// The wave of a sheet at a tangential wave vector (rad/m); `None` where it is evanescent.
    #[must_use]
    pub fn wave(&self, sheet: Sheet, q: Tangential) -> Option<Wave> {
        let normal = self.surface(sheet).normal(q)?;
        Some(self.wave_at(sheet, q, &normal))
    }

    /// What first-order changes of a sheet's wave are made of, at a tangential wave vector (rad/m); `None` where the wave
    /// is evanescent.
    #[must_use]
    pub fn tangent(&self, sheet: Sheet, q: Tangential) -> Option<Tangent> {
        let k = Vector3::new(q.u, q.v, self.surface(sheet).normal(q)?.k_w);
        let displacement = self.axes.tr_mul(&self.displacement(sheet, k).0);
        Some(Tangent {
            k0: self.k0,
            k,
            flow: self.surface(sheet).flow(k),
            weight: displacement.component_mul(&displacement) * k.norm_squared(),
        })
    }

    /// d(1/n^2)/d k0 along X, Y, Z, m.
    #[must_use]
    pub fn dispersion(&self) -> Vector3<f64> {
        self.eta_w * SPEED_OF_LIGHT
    }

    /// Dielectric axes X, Y, Z as columns in the mount frame.
    #[must_use]
    pub fn axes(&self) -> &Matrix3<f64> {
        &self.axes
    }

    /// The wave whose normal component is already known.
    #[must_use]
    pub fn wave_at(&self, sheet: Sheet, q: Tangential, normal: &Normal) -> Wave {
        let k = Vector3::new(q.u, q.v, normal.k_w);
        let flow = self.surface(sheet).flow(k);
        let (displacement, on_optic_axis) = self.displacement(sheet, k);
        // impermittivity and its frequency derivative act on dielectric components of the unit displacement D:
        let d = self.axes.tr_mul(&displacement);
        let field = self.axes * self.eta.component_mul(&d);
        // G = k^2 D.eta D = omega^2/c^2:  dG/domega at fixed k = k^2 D.eta' D  (D is an eigenvector, so its own change
        // does not count);  dk_w/domega = (2 omega/c^2 - dG/domega) / (dG/dk_w)
        let drift = k.norm_squared() * d.dot(&self.eta_w.component_mul(&d));
        let delay = (2.0 * self.k0 / SPEED_OF_LIGHT - drift) / (2.0 * flow.z);
        Wave {
            k: Mount(k),
            ray: Mount(flow.normalize()),
            field: Mount(field.normalize()),
            delay,
            on_optic_axis,
        }
    }

    /// Unit electric displacement of a sheet's wave along `k`, and whether k is an optic axis.
    ///
    /// With m, n the unit vectors along k x p and k x r: slow D along m - n, fast D along m + n (each across k and
    /// the other); whichever sum is longer is taken and the other follows.
    fn displacement(&self, sheet: Sheet, k: Vector3<f64>) -> (Vector3<f64>, bool) {
        let direction = k.normalize();
        let [p, r] = &self.optic_axes;
        let across = [direction.cross(p), direction.cross(r)];
        let on_axis = across.iter().any(|c| c.norm() < 1e-12);
        let fallback = || direction.cross(&self.axes.column(2)).try_normalize(1e-9);
        let unit = |c: Vector3<f64>| {
            c.try_normalize(1e-12)
                .or_else(fallback)
                .unwrap_or_else(|| direction.cross(&Vector3::x()).normalize())
        };
        let [m, n] = across.map(unit);
        let (sum, difference) = (m + n, m - n);
        let fast = if sum.norm_squared() > difference.norm_squared() {
            sum.normalize()
        } else {
            difference.normalize().cross(&direction)
        };
        (if sheet == Sheet::Fast { fast } else { direction.cross(&fast) }, on_axis)
    }
}

fn other(sheet: Sheet) -> Sheet {
    match sheet {
        Sheet::Fast => Sheet::Slow,
        Sheet::Slow => Sheet::Fast,
    }
}

/// o: eta_o k^2 = k0^2.  e: eta_o (k.a)^2 + eta_e (k^2 - (k.a)^2) = k0^2.
fn uniaxial(
    eta: Vector3<f64>,
    axes: Matrix3<f64>,
    ordinary: Sheet,
    k0: f64,
) -> ([Vector3<f64>; 2], Surface, Surface) {
    let a = axes.column(2).into_owned();
    let o = Surface::quadric(&(Matrix3::identity() * eta.x), k0);
    let e = Surface::quadric(&(Matrix3::identity() * eta.z + a * a.transpose() * (eta.x - eta.z)), k0);
    // the order of sheets in `displacement` follows from the sign of the pair: r = p where o is fast, r = -p where slow
    match ordinary {
        Sheet::Fast => ([a, a], o, e),
        Sheet::Slow => ([a, -a], e, o),
    }
}

/// Optic axes lie in the plane of the largest and smallest impermittivity, at the angle V from the latter:
/// sin^2 V = (alpha - beta)/(alpha - gamma).
fn biaxial(eta: Vector3<f64>, axes: Matrix3<f64>, k0: f64) -> ([Vector3<f64>; 2], Surface, Surface) {
    let mut order = [0, 1, 2];
    order.sort_by(|a, b| eta[*b].total_cmp(&eta[*a]));
    let [alpha, beta, gamma] = order.map(|i| eta[i]);
    let span = alpha - gamma;
    let sin = if span > 0.0 { ((alpha - beta) / span).clamp(0.0, 1.0).sqrt() } else { 0.0 };
    let cos = if span > 0.0 { ((beta - gamma) / span).clamp(0.0, 1.0).sqrt() } else { 1.0 };
    let (x, z) = (axes.column(order[0]).into_owned(), axes.column(order[2]).into_owned());
    let optic_axes = [x * sin + z * cos, z * cos - x * sin];
    let sheet = |sheet| Surface::branch(alpha, gamma, optic_axes, sheet, k0);
    (optic_axes, sheet(Sheet::Fast), sheet(Sheet::Slow))
}

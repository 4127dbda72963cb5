//! Indices of the two waves along a given wave-vector direction in the crystal.

use nalgebra::{Matrix3, Vector3};

use super::medium::{Medium, Polarization};
use super::surface::Sheet;
use crate::frame::Tangential;
use crate::material::Principal;
use crate::quantity::SPEED_OF_LIGHT;

/// What a wave along a direction, or polarized along a principal axis, sees.
#[derive(Debug, Clone, Copy)]
pub struct Along {
    /// Phase index.
    pub n: f64,
    /// c dk/domega at fixed direction of the wave vector.
    pub group_index: f64,
    /// d2k/domega2 at fixed direction, s^2/m.
    pub dispersion: f64,
    /// Between wave vector and ray, radians.
    pub walkoff: f64,
    /// Unit displacement in the dielectric frame: its squared components weigh the principal axes.
    pub displacement: Vector3<f64>,
    /// Whether the direction is an optic axis.
    pub on_optic_axis: bool,
}

impl Along {
    /// dn/dT from those of the principal axes (1/K); `None` where one that counts is not known.
    ///
    /// 1/n^2 = sum D_i^2/n_i^2 with D an eigenvector, so dn = n^3 sum D_i^2 dn_i/n_i^3.
    #[must_use]
    pub fn thermo_slope(&self, principal: &Principal, axes: [Option<f64>; 3]) -> Option<f64> {
        let mut sum = 0.0;
        for ((weight, index), slope) in self.displacement.iter().zip(&principal.axes).zip(axes) {
            sum += weight * weight / index.n.powi(3) * slope?;
        }
        Some(self.n.powi(3) * sum)
    }
}

/// Waves along a unit direction in the dielectric frame: fast and slow, with their names.
#[must_use]
pub fn along_direction(principal: &Principal, direction: Vector3<f64>) -> [(Polarization, Along); 2] {
    // a mount whose w is the direction: then q = 0 and k is along w
    let w = direction.normalize();
    let u = w.cross(&if w.z.abs() < 0.9 { Vector3::z() } else { Vector3::x() }).normalize();
    let axes = Matrix3::from_rows(&[u.transpose(), w.cross(&u).transpose(), w.transpose()]);
    let medium = Medium::new(principal, axes);
    let waves = [Sheet::Fast, Sheet::Slow]
        .map(|sheet| (sheet, medium.wave(sheet, Tangential::default()).expect("q = 0 is never evanescent")));
    let displacement = waves.map(|(_, wave)| {
        // D is along eps E; eps = 1/eta
        let field = axes.tr_mul(&wave.field.0);
        let eps = Vector3::from(principal.axes.map(|index| index.n * index.n));
        eps.component_mul(&field).normalize()
    });
    let impermittivity = principal.axes.map(|index| index.impermittivity(principal.wavelength));
    let derivative = |order: usize, a: usize, b: usize| -> f64 {
        (0..3).map(|i| displacement[a][i] * impermittivity[i][order] * displacement[b][i]).sum()
    };
    let omega = principal.wavelength.angular_frequency();
    std::array::from_fn(|this| {
        let that = 1 - this;
        // lambda = 1/n^2 is an eigenvalue of eta(omega) across k. Perturbation theory:
        // lambda' = D.eta' D,  lambda'' = D.eta'' D + 2 (D.eta' D')^2 / (lambda - lambda_other)
        let value = derivative(0, this, this);
        let split = value - derivative(0, that, that);
        let mixing = derivative(1, this, that).powi(2);
        let repulsion = if mixing == 0.0 || split == 0.0 { 0.0 } else { 2.0 * mixing / split };
        let (first, second) = (derivative(1, this, this), derivative(2, this, this) + repulsion);
        // n = lambda^(-1/2)
        let n = value.powf(-0.5);
        let n_w = -0.5 * n.powi(3) * first;
        let n_ww = 0.75 * n.powi(5) * first * first - 0.5 * n.powi(3) * second;
        let (sheet, wave) = &waves[this];
        let along = Along {
            n,
            group_index: n + omega * n_w,
            // k = n omega/c
            dispersion: (2.0 * n_w + omega * n_ww) / SPEED_OF_LIGHT,
            walkoff: wave.walkoff(),
            displacement: displacement[this],
            on_optic_axis: wave.on_optic_axis,
        };
        (medium.polarization(*sheet), along)
    })
}

/// Waves polarized along X, Y and Z.
#[must_use]
pub fn along_axes(principal: &Principal) -> [Along; 3] {
    std::array::from_fn(|axis| {
        let index = &principal.axes[axis];
        Along {
            n: index.n,
            group_index: index.group(principal.wavelength),
            dispersion: index.dispersion(principal.wavelength),
            walkoff: 0.0,
            displacement: Vector3::ith(axis, 1.0),
            on_optic_axis: false,
        }
    })
}

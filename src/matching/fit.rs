//! Planes and circles that fit points best.

use fearless_simd::dispatch;
use fearless_simd::prelude::*;
use nalgebra::{Matrix3, SymmetricEigen, Vector2, Vector3};

use crate::number::{self, Number as _, Wide, sums, wide};

/// Sums over points and products of their components, xx, xy, xz, yy, yz, zz.
pub(super) struct Moments {
    count: f64,
    sum: Vector3<f64>,
    products: [f64; 6],
}

impl Moments {
    /// Of points from place 0, [`number::LANES`], ... on. They should lie about the origin, or differences lose digits.
    #[inline(always)]
    pub fn new<S: Simd>(simd: S, count: usize, mut points: impl FnMut(usize) -> [Wide<S>; 3]) -> Self {
        let [x, y, z, xx, xy, xz, yy, yz, zz] = sums(
            simd,
            count,
            #[inline(always)]
            |j| {
                let [x, y, z] = points(j);
                [x, y, z, x * x, x * y, x * z, y * y, y * z, z * z]
            },
        );
        Self { count: count as f64, sum: Vector3::new(x, y, z), products: [xx, xy, xz, yy, yz, zz] }
    }

    /// Normal of the plane that fits points best, on the side of `towards`: smallest eigenvector of their covariance.
    pub fn normal(&self, towards: &Vector3<f64>) -> Vector3<f64> {
        let ([xx, xy, xz, yy, yz, zz], [x, y, z]) = (self.products, self.sum.into());
        // sum of (d - mean)(d - mean)^T
        let (mx, my, mz) = (x / self.count, y / self.count, z / self.count);
        let products = [xx - x * mx, xy - x * my, xz - x * mz, yy - y * my, yz - y * mz, zz - z * mz];
        smallest(products, towards)
    }

    /// Mean square distance from a place.
    pub fn square_from(&self, place: &Vector3<f64>) -> f64 {
        let [xx, _, _, yy, _, zz] = self.products;
        (xx + yy + zz - 2.0 * self.sum.dot(place)) / self.count + place.norm_squared()
    }
}

/// Eigenvector of the smallest eigenvalue of a symmetric matrix (xx, xy, xz, yy, yz, zz). It is that of the largest one
/// of the adjugate, whose eigenvalues are products of two: where points lie near a plane its powers converge at once.
fn smallest([xx, xy, xz, yy, yz, zz]: [f64; 6], towards: &Vector3<f64>) -> Vector3<f64> {
    const STEPS: usize = 20;
    let (axx, axy, axz) = (yy * zz - yz * yz, xz * yz - xy * zz, xy * yz - xz * yy);
    let (ayy, ayz, azz) = (xx * zz - xz * xz, xy * xz - xx * yz, xx * yy - xy * xy);
    let adjugate = |v: Vector3<f64>| {
        Vector3::new(
            axx * v.x + axy * v.y + axz * v.z,
            axy * v.x + ayy * v.y + ayz * v.z,
            axz * v.x + ayz * v.y + azz * v.z,
        )
    };
    // powers of it, scaled to z = 1: points lie near a plane across z, roughly
    let mut axis = adjugate(*towards);
    for _ in 0..STEPS {
        axis *= 1.0 / axis.z;
        let next = adjugate(axis);
        let (x, y) = (next.x - axis.x * next.z, next.y - axis.y * next.z);
        if x * x + y * y <= 1e-32 * next.z * next.z {
            return next * (towards.z.signum() * next.z.signum() / next.norm());
        }
        axis = next;
    }
    let eigen = SymmetricEigen::new(Matrix3::new(xx, xy, xz, xy, yy, yz, xz, yz, zz));
    let axis = eigen.eigenvectors.column(eigen.eigenvalues.imin()).normalize();
    if axis.dot(towards) < 0.0 { -axis } else { axis }
}

/// Circle with the least sum of squared distances to the points (x, y), by Newton; their number is a multiple of
/// [`number::LANES`].
pub(super) fn circle(x: &[f64], y: &[f64]) -> (Vector2<f64>, f64) {
    dispatch!(number::level(), simd => circle_wide(simd, x, y))
}

#[inline(always)]
fn circle_wide<S: Simd>(simd: S, x: &[f64], y: &[f64]) -> (Vector2<f64>, f64) {
    let count = x.len() as f64;
    let sum = sums(
        simd,
        x.len(),
        #[inline(always)]
        |j| [wide(simd, x, j), wide(simd, y, j)],
    );
    let mut centre = Vector2::from(sum) / count;
    let [distances] = sums(
        simd,
        x.len(),
        #[inline(always)]
        |j| {
            let (x, y) = (wide(simd, x, j) - centre.x, wide(simd, y, j) - centre.y);
            [(x * x + y * y).sqrt()]
        },
    );
    let mut radius = distances / count;
    for _ in 0..50 {
        // with e = (p - c)/|p - c| and r = |p - c| - R:  gradient -sum r (e, 1);
        // Hessian sum [(1 - R/|p - c|) I + R/|p - c| e e^T, e; e^T, 1]
        let [gx, gy, gr, xx, xy, yy, ex, ey] = sums(
            simd,
            x.len(),
            #[inline(always)]
            |j| {
                let (x, y) = (wide(simd, x, j) - centre.x, wide(simd, y, j) - centre.y);
                let distance = (x * x + y * y).sqrt().max(f64::MIN_POSITIVE);
                let inverse = distance.reciprocal();
                let (ex, ey) = (x * inverse, y * inverse);
                let (residual, bend) = (distance - radius, inverse * radius);
                let (bx, by) = (bend * ex, bend * ey);
                [residual * ex, residual * ey, residual, -by * ey + 1.0, bx * ey, -bx * ex + 1.0, ex, ey]
            },
        );
        // the last row gives step_R = (gr - e.step)/n
        let (sxx, sxy, syy) = (xx - ex * ex / count, xy - ex * ey / count, yy - ey * ey / count);
        let (sx, sy) = (gx - ex * gr / count, gy - ey * gr / count);
        let determinant = sxx * syy - sxy * sxy;
        // a minimum lies below only where the Hessian is positive
        if !(sxx > 0.0 && determinant > 0.0) {
            break;
        }
        let step = Vector2::new(syy * sx - sxy * sy, sxx * sy - sxy * sx) / determinant;
        let grows = (gr - ex * step.x - ey * step.y) / count;
        centre += step;
        radius += grows;
        // what is left is the square of this
        if step.norm_squared() + grows * grows <= 1e-16 * radius * radius {
            break;
        }
    }
    (centre, radius)
}

//! Planes and circles that fit points best.

use nalgebra::{Matrix3, SymmetricEigen, Vector2, Vector3};

/// Normal of the plane that fits points best, on the side of `towards`: smallest eigenvector of their covariance. The
/// points should lie about the origin, or differences lose digits.
pub(super) fn normal(points: impl Iterator<Item = Vector3<f64>>, towards: &Vector3<f64>) -> Vector3<f64> {
    let (mut n, mut x, mut y, mut z) = (0.0, 0.0, 0.0, 0.0);
    let (mut xx, mut xy, mut xz, mut yy, mut yz, mut zz) = (0.0, 0.0, 0.0, 0.0, 0.0, 0.0);
    for d in points {
        n += 1.0;
        (x, y, z) = (x + d.x, y + d.y, z + d.z);
        (xx, xy, xz) = (xx + d.x * d.x, xy + d.x * d.y, xz + d.x * d.z);
        (yy, yz, zz) = (yy + d.y * d.y, yz + d.y * d.z, zz + d.z * d.z);
    }
    // sum of (d - mean)(d - mean)^T
    let (mx, my, mz) = (x / n, y / n, z / n);
    let (xx, xy, xz) = (xx - x * mx, xy - x * my, xz - x * mz);
    let (yy, yz, zz) = (yy - y * my, yz - y * mz, zz - z * mz);
    smallest([xx, xy, xz, yy, yz, zz], towards)
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
    let mut axis = *towards;
    for _ in 0..STEPS {
        let next = adjugate(adjugate(axis));
        let square = next.norm_squared();
        if square == 0.0 {
            break;
        }
        let next = next * (1.0 / square.sqrt());
        let moved = (next - axis).norm_squared();
        axis = next;
        if moved <= 1e-30 {
            return axis;
        }
    }
    let eigen = SymmetricEigen::new(Matrix3::new(xx, xy, xz, xy, yy, yz, xz, yz, zz));
    let axis = eigen.eigenvectors.column(eigen.eigenvalues.imin()).normalize();
    if axis.dot(towards) < 0.0 { -axis } else { axis }
}

/// Circle with the least sum of squared distances to the points, by Newton.
pub(super) fn circle(points: &[Vector2<f64>]) -> (Vector2<f64>, f64) {
    let count = points.len() as f64;
    let mut centre = points.iter().sum::<Vector2<f64>>() / count;
    let mut radius = points.iter().map(|p| (p - centre).norm()).sum::<f64>() / count;
    improve(&mut centre, &mut radius, points);
    (centre, radius)
}

/// Newton steps on sum (|p - c| - R)^2 until the circle stays.
fn improve(centre: &mut Vector2<f64>, radius: &mut f64, points: &[Vector2<f64>]) {
    for _ in 0..50 {
        // with e = (p - c)/|p - c| and r = |p - c| - R:  gradient -sum r (e, 1);
        // Hessian sum [(1 - R/|p - c|) I + R/|p - c| e e^T, e; e^T, 1]
        let mut right = Vector3::zeros();
        let (mut xx, mut xy, mut yy, mut x, mut y, mut n) = (0.0, 0.0, 0.0, 0.0, 0.0, 0.0);
        for p in points {
            let from = p - *centre;
            let distance = from.norm().max(f64::MIN_POSITIVE);
            let inverse = 1.0 / distance;
            let (ex, ey) = (from.x * inverse, from.y * inverse);
            let (residual, bend) = (distance - *radius, *radius * inverse);
            right += Vector3::new(ex, ey, 1.0) * residual;
            xx += 1.0 - bend * ey * ey;
            xy += bend * ex * ey;
            yy += 1.0 - bend * ex * ex;
            x += ex;
            y += ey;
            n += 1.0;
        }
        let hessian = Matrix3::new(xx, xy, x, xy, yy, y, x, y, n);
        let Some(step) = hessian.cholesky().map(|c| c.solve(&right)) else { break };
        *centre += Vector2::new(step.x, step.y);
        *radius += step.z;
        // what is left is the square of this
        if step.norm() <= 1e-9 * *radius {
            break;
        }
    }
}

//! Planes and circles that fit points best.

use nalgebra::{Matrix3, SymmetricEigen, Vector2, Vector3};

/// Normal of the plane that fits points best, on the side of `towards`: smallest eigenvector of their covariance.
pub(super) fn normal(
    points: impl Iterator<Item = Vector3<f64>> + Clone,
    towards: &Vector3<f64>,
) -> Vector3<f64> {
    let mut count = 0.0;
    let mut mean = Vector3::zeros();
    for point in points.clone() {
        count += 1.0;
        mean += point;
    }
    mean /= count;
    let mut c = Covariance::default();
    points.for_each(|point| c.add(&(point - mean)));
    c.smallest(towards)
}

/// Sum of x x^T.
#[derive(Default)]
struct Covariance {
    xx: f64,
    xy: f64,
    xz: f64,
    yy: f64,
    yz: f64,
    zz: f64,
}

impl Covariance {
    #[inline]
    fn add(&mut self, d: &Vector3<f64>) {
        self.xx += d.x * d.x;
        self.xy += d.x * d.y;
        self.xz += d.x * d.z;
        self.yy += d.y * d.y;
        self.yz += d.y * d.z;
        self.zz += d.z * d.z;
    }

    /// The smallest eigenvector is the largest of the adjugate, whose eigenvalues are products of two: where points lie
    /// near a plane its powers converge at once.
    fn smallest(&self, towards: &Vector3<f64>) -> Vector3<f64> {
        const STEPS: usize = 30;
        let Self { xx, xy, xz, yy, yz, zz } = *self;
        let adjugate = Matrix3::new(
            yy * zz - yz * yz,
            xz * yz - xy * zz,
            xy * yz - xz * yy,
            xz * yz - xy * zz,
            xx * zz - xz * xz,
            xy * xz - xx * yz,
            xy * yz - xz * yy,
            xy * xz - xx * yz,
            xx * yy - xy * xy,
        );
        let mut axis = *towards;
        for _ in 0..STEPS {
            let Some(next) = (adjugate * axis).try_normalize(0.0) else { break };
            let moved = (next - axis).norm_squared();
            axis = next;
            if moved <= 1e-32 {
                return axis;
            }
        }
        let matrix = Matrix3::new(xx, xy, xz, xy, yy, yz, xz, yz, zz);
        let eigen = SymmetricEigen::new(matrix);
        let axis = eigen.eigenvectors.column(eigen.eigenvalues.imin()).normalize();
        if axis.dot(towards) < 0.0 { -axis } else { axis }
    }
}

/// Circle with the least sum of squared distances to the points, by Newton; few of them give the start.
pub(super) fn circle(points: &[Vector2<f64>]) -> (Vector2<f64>, f64) {
    let third = || points.iter().step_by(3);
    let count = third().count() as f64;
    let mut centre = third().sum::<Vector2<f64>>() / count;
    let mut radius = third().map(|p| (p - centre).norm()).sum::<f64>() / count;
    improve(&mut centre, &mut radius, third);
    improve(&mut centre, &mut radius, || points.iter());
    (centre, radius)
}

/// Newton steps on sum (|p - c| - R)^2 until the circle stays.
fn improve<'a, I: Iterator<Item = &'a Vector2<f64>>>(
    centre: &mut Vector2<f64>,
    radius: &mut f64,
    points: impl Fn() -> I,
) {
    for _ in 0..50 {
        // with e = (p - c)/|p - c| and r = |p - c| - R:  gradient -sum r (e, 1);
        // Hessian sum [(1 - R/|p - c|) I + R/|p - c| e e^T, e; e^T, 1]
        let mut hessian = Matrix3::zeros();
        let mut right = Vector3::zeros();
        let (mut xx, mut xy, mut yy, mut x, mut y, mut n) = (0.0, 0.0, 0.0, 0.0, 0.0, 0.0);
        for p in points() {
            let from = p - *centre;
            let distance = from.norm();
            let inverse = 1.0 / distance.max(f64::MIN_POSITIVE);
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
        hessian.copy_from(&Matrix3::new(xx, xy, x, xy, yy, y, x, y, n));
        let Some(step) = hessian.cholesky().map(|c| c.solve(&right)) else { break };
        *centre += Vector2::new(step.x, step.y);
        *radius += step.z;
        // what is left is the square of this
        if step.norm() <= 1e-9 * *radius {
            break;
        }
    }
}

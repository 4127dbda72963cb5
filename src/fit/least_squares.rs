//! Least squares by the method of Levenberg and Marquardt (Marquardt, J. Soc. Ind. Appl. Math. 11, 431 (1963)), with
//! bounds and central differences.
//!
//! Unknowns come scaled, so that 1 is a change of about a standard deviation of what is known beforehand. Residuals are
//! computed to about 1e-9 of their own scale; a central difference with step h is off by h^2 f'''/6 + 1e-9/h, so h = 1e-3
//! leaves about 1e-6 of the slope, which is far below what any uncertainty is known to. Slopes of traced rings would need
//! the derivative of the tracing; none is to be had in closed form for axis and circle.

use nalgebra::{DMatrix, DVector};

/// Step of central differences, scaled.
const STEP: f64 = 1e-3;

/// Where the sum of squares is least.
#[derive(Debug, Clone)]
pub struct Minimum {
    /// Scaled unknowns.
    pub x: DVector<f64>,
    /// Residuals there.
    pub residuals: DVector<f64>,
    /// Their slopes there.
    pub jacobian: DMatrix<f64>,
    /// Sum of squares.
    pub cost: f64,
    /// Whether the last steps changed nothing.
    pub settled: bool,
}

/// From a start to the nearest minimum of the sum of squares within -bound to +bound; `None` where the residuals are not
/// defined at the start.
pub fn minimise(
    residuals: &mut impl FnMut(&DVector<f64>) -> Option<DVector<f64>>,
    start: DVector<f64>,
    bound: f64,
) -> Option<Minimum> {
    const STEPS: usize = 60;
    let clamped = |x: DVector<f64>| x.map(|v| v.clamp(-bound, bound));
    let mut x = clamped(start);
    let mut here = residuals(&x)?;
    let mut cost = here.norm_squared();
    let mut damping = 1e-3;
    let mut settled = false;
    let mut jacobian = slopes(residuals, &x, &here)?;
    for _ in 0..STEPS {
        let normal = jacobian.tr_mul(&jacobian);
        let gradient = jacobian.tr_mul(&here);
        let mut moved = false;
        while damping < 1e12 {
            let mut damped = normal.clone();
            for i in 0..damped.nrows() {
                damped[(i, i)] += damping * (normal[(i, i)] + 1e-9 * normal.trace() + 1e-30);
            }
            let Some(step) = damped.cholesky().map(|c| -c.solve(&gradient)) else {
                damping *= 10.0;
                continue;
            };
            let there = clamped(&x + &step);
            let tried =
                residuals(&there).filter(|r| r.norm_squared().is_finite() && r.norm_squared() <= cost);
            let Some(tried) = tried else {
                damping *= 10.0;
                if step.amax() < 1e-9 {
                    break;
                }
                continue;
            };
            let gain = cost - tried.norm_squared();
            let size = (&there - &x).amax();
            settled = size < 1e-6 || gain <= 1e-10 * (1e-3 + cost);
            (x, cost, here) = (there, tried.norm_squared(), tried);
            damping = (damping * 0.1).max(1e-12);
            moved = true;
            break;
        }
        settled |= !moved;
        if settled {
            break;
        }
        jacobian = slopes(residuals, &x, &here)?;
    }
    let jacobian = slopes(residuals, &x, &here)?;
    Some(Minimum { x, residuals: here, jacobian, cost, settled })
}

/// Slopes by central differences; from one side where the other is not defined.
fn slopes(
    residuals: &mut impl FnMut(&DVector<f64>) -> Option<DVector<f64>>,
    x: &DVector<f64>,
    here: &DVector<f64>,
) -> Option<DMatrix<f64>> {
    let mut jacobian = DMatrix::zeros(here.len(), x.len());
    for i in 0..x.len() {
        let mut at = |step: f64| {
            let mut there = x.clone();
            there[i] += step;
            residuals(&there)
        };
        let column = match (at(STEP), at(-STEP)) {
            (Some(up), Some(down)) => (up - down) / (2.0 * STEP),
            (Some(up), None) => (up - here) / STEP,
            (None, Some(down)) => (here - down) / STEP,
            (None, None) => return None,
        };
        jacobian.set_column(i, &column);
    }
    Some(jacobian)
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    /// Rosenbrock, Comput. J. 3, 175 (1960): a curved valley with its floor at (1, 1).
    #[test]
    fn a_curved_valley_is_followed_to_its_floor() {
        let mut f = |x: &DVector<f64>| Some(DVector::from_vec(vec![10.0 * (x[1] - x[0] * x[0]), 1.0 - x[0]]));
        let found = minimise(&mut f, DVector::from_vec(vec![-1.2, 1.0]), 10.0).expect("a minimum");
        assert!(found.settled);
        assert_abs_diff_eq!(found.x[0], 1.0, epsilon = 1e-5);
        assert_abs_diff_eq!(found.x[1], 1.0, epsilon = 1e-5);
    }

    #[test]
    fn bounds_hold() {
        let mut f = |x: &DVector<f64>| Some(DVector::from_vec(vec![x[0] - 5.0]));
        let found = minimise(&mut f, DVector::from_vec(vec![0.0]), 2.0).expect("a minimum");
        assert_eq!(found.x[0], 2.0);
    }

    /// The slopes of a straight line are those of its formula.
    #[test]
    fn slopes_are_exact_for_lines() {
        let mut f = |x: &DVector<f64>| Some(DVector::from_vec(vec![3.0 * x[0] - x[1], x[1]]));
        let found = minimise(&mut f, DVector::from_vec(vec![1.0, 1.0]), 10.0).expect("a minimum");
        assert_abs_diff_eq!(found.jacobian[(0, 0)], 3.0, epsilon = 1e-9);
        assert_abs_diff_eq!(found.jacobian[(0, 1)], -1.0, epsilon = 1e-9);
    }

    /// A direction without any effect does not stop the others.
    #[test]
    fn an_unknown_without_effect_stays() {
        let mut f = |x: &DVector<f64>| Some(DVector::from_vec(vec![x[0] - 0.5]));
        let found = minimise(&mut f, DVector::from_vec(vec![0.0, 0.3]), 2.0).expect("a minimum");
        assert_abs_diff_eq!(found.x[0], 0.5, epsilon = 1e-6);
        assert_abs_diff_eq!(found.x[1], 0.3, epsilon = 1e-9);
    }
}

//! Least squares by the method of Levenberg and Marquardt, with bounds; the steps are those of the crate
//! `levenberg-marquardt` (J. J. More, Lecture Notes in Mathematics 630, 105 (1978), as in MINPACK).
//!
//! Unknowns come scaled, so that 1 is a change of about a standard deviation of what is known beforehand. Two things the
//! crate does not know are put around it. What is not defined counts as residuals a thousand times as large, so that a step
//! there is refused and a shorter one tried. Beyond a bound residuals are those on it, so that nothing is gained there, and
//! the search begins once more from the bound itself: what the slopes drive outwards there is held, and the others go on.

use std::cell::RefCell;

use levenberg_marquardt::{LeastSquaresProblem, LevenbergMarquardt, TerminationReason};
use nalgebra::storage::Owned;
use nalgebra::{DMatrix, DVector, Dyn};

/// What is to be made small.
pub trait Residuals {
    /// At scaled unknowns; `None` where they are not defined.
    fn at(&mut self, x: &DVector<f64>) -> Option<DVector<f64>>;

    /// Their slopes.
    fn slopes(&mut self, x: &DVector<f64>) -> Option<DMatrix<f64>>;
}

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

/// The problem within its bounds.
struct Bounded<'a, R> {
    /// The crate asks for slopes of what it does not change.
    inner: RefCell<&'a mut R>,
    bound: f64,
    /// Unknowns that stay where they are.
    held: Vec<bool>,
    x: DVector<f64>,
    residuals: DVector<f64>,
}

impl<R: Residuals> Bounded<'_, R> {
    fn clamped(&self) -> DVector<f64> {
        self.x.map(|v| v.clamp(-self.bound, self.bound))
    }
}

impl<R: Residuals> LeastSquaresProblem<f64, Dyn, Dyn> for &mut Bounded<'_, R> {
    type ResidualStorage = Owned<f64, Dyn>;
    type JacobianStorage = Owned<f64, Dyn, Dyn>;
    type ParameterStorage = Owned<f64, Dyn>;

    fn set_params(&mut self, x: &DVector<f64>) {
        const FAR: f64 = 1e3;
        self.x.copy_from(x);
        let there = self.clamped();
        match self.inner.get_mut().at(&there).filter(|r| r.norm_squared().is_finite()) {
            Some(residuals) => self.residuals = residuals,
            None => self.residuals.iter_mut().for_each(|r| *r = FAR * (1.0 + r.abs())),
        }
    }

    fn params(&self) -> DVector<f64> {
        self.x.clone()
    }

    fn residuals(&self) -> Option<DVector<f64>> {
        Some(self.residuals.clone())
    }

    fn jacobian(&self) -> Option<DMatrix<f64>> {
        let mut slopes = self.inner.borrow_mut().slopes(&self.clamped())?;
        for (mut column, held) in slopes.column_iter_mut().zip(&self.held) {
            if *held {
                column.fill(0.0);
            }
        }
        Some(slopes)
    }
}

/// From a start to the nearest minimum of the sum of squares within -bound to +bound; `None` where the residuals are not
/// defined at the start.
pub fn minimise(problem: &mut impl Residuals, start: DVector<f64>, bound: f64) -> Option<Minimum> {
    /// Relative change of the sum of squares, or of the unknowns, that ends a search.
    const ENOUGH: f64 = 1e-10;
    const ROUNDS: usize = 6;
    let mut x = start.map(|v| v.clamp(-bound, bound));
    let mut settled = false;
    for _ in 0..ROUNDS {
        let residuals = problem.at(&x)?;
        let downhill = -problem.slopes(&x)?.tr_mul(&residuals);
        let outwards = |(x, down): (&f64, &f64)| x.abs() >= bound && x * down > 0.0;
        let held: Vec<bool> = x.iter().zip(downhill.iter()).map(outwards).collect();
        let any = held.contains(&true);
        let mut bounded =
            Bounded { inner: RefCell::new(&mut *problem), bound, held, x: x.clone(), residuals };
        let search = LevenbergMarquardt::new().with_tol(ENOUGH).with_stepbound(10.0);
        let (_, report) = search.minimize(&mut bounded);
        // where nothing at all can be gained the tolerance is met more than well
        let no_more = matches!(report.termination, TerminationReason::NoImprovementPossible(_));
        settled = report.termination.was_successful() || no_more;
        let clamped = bounded.clamped();
        let left = bounded.x != clamped;
        let moved = (&clamped - &x).amax();
        x = clamped;
        if !(left || any) || moved < 1e-9 {
            break;
        }
    }
    let residuals = problem.at(&x)?;
    let jacobian = problem.slopes(&x)?;
    Some(Minimum { cost: residuals.norm_squared(), x, residuals, jacobian, settled })
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    struct Functions<F, G>(F, G);

    impl<F: Fn(&DVector<f64>) -> Option<Vec<f64>>, G: Fn(&DVector<f64>) -> DMatrix<f64>> Residuals
        for Functions<F, G>
    {
        fn at(&mut self, x: &DVector<f64>) -> Option<DVector<f64>> {
            self.0(x).map(DVector::from_vec)
        }

        fn slopes(&mut self, x: &DVector<f64>) -> Option<DMatrix<f64>> {
            Some(self.1(x))
        }
    }

    fn matrix(rows: usize, columns: usize, values: &[f64]) -> DMatrix<f64> {
        DMatrix::from_row_slice(rows, columns, values)
    }

    /// Rosenbrock, Comput. J. 3, 175 (1960): a curved valley with its floor at (1, 1).
    #[test]
    fn a_curved_valley_is_followed_to_its_floor() {
        let mut valley = Functions(
            |x: &DVector<f64>| Some(vec![10.0 * (x[1] - x[0] * x[0]), 1.0 - x[0]]),
            |x: &DVector<f64>| matrix(2, 2, &[-20.0 * x[0], 10.0, -1.0, 0.0]),
        );
        let found = minimise(&mut valley, DVector::from_vec(vec![-1.2, 1.0]), 10.0).expect("a minimum");
        assert!(found.settled);
        assert_abs_diff_eq!(found.x[0], 1.0, epsilon = 1e-5);
        assert_abs_diff_eq!(found.x[1], 1.0, epsilon = 1e-5);
    }

    #[test]
    fn bounds_hold() {
        let mut line =
            Functions(|x: &DVector<f64>| Some(vec![x[0] - 5.0]), |_: &DVector<f64>| matrix(1, 1, &[1.0]));
        let found = minimise(&mut line, DVector::from_vec(vec![0.0]), 2.0).expect("a minimum");
        assert_eq!(found.x[0], 2.0);
    }

    /// One unknown is driven over its bound on the way; the other has to be found all the same, along the bound.
    #[test]
    fn a_bound_is_followed() {
        let mut plane = Functions(
            |x: &DVector<f64>| Some(vec![x[0] - 5.0, x[1] - 0.1 * x[0]]),
            |_: &DVector<f64>| matrix(2, 2, &[1.0, 0.0, -0.1, 1.0]),
        );
        let found = minimise(&mut plane, DVector::from_vec(vec![0.0, -1.0]), 2.0).expect("a minimum");
        assert_eq!(found.x[0], 2.0);
        assert_abs_diff_eq!(found.x[1], 0.2, epsilon = 1e-6);
    }

    /// The full step leads to where nothing is defined.
    #[test]
    fn the_border_of_what_is_defined_is_not_crossed() {
        let mut root = Functions(
            |x: &DVector<f64>| (x[0] > 0.0).then(|| vec![x[0].ln() + 3.0]),
            |x: &DVector<f64>| matrix(1, 1, &[1.0 / x[0]]),
        );
        let found = minimise(&mut root, DVector::from_vec(vec![2.0]), 8.0).expect("a minimum");
        assert_abs_diff_eq!(found.x[0], (-3f64).exp(), epsilon = 1e-7);
        assert!(minimise(&mut root, DVector::from_vec(vec![-1.0]), 8.0).is_none());
    }

    /// A direction without any effect does not stop the others.
    #[test]
    fn an_unknown_without_effect_stays() {
        let mut one = Functions(
            |x: &DVector<f64>| Some(vec![x[0] - 0.5, 0.0]),
            |_: &DVector<f64>| matrix(2, 2, &[1.0, 0.0, 0.0, 0.0]),
        );
        let found = minimise(&mut one, DVector::from_vec(vec![0.0, 0.3]), 2.0).expect("a minimum");
        assert_abs_diff_eq!(found.x[0], 0.5, epsilon = 1e-6);
        assert_abs_diff_eq!(found.x[1], 0.3, epsilon = 1e-9);
    }
}

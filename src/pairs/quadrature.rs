//! Nodes and weights.

use nalgebra::{DMatrix, SymmetricEigen};

/// Nodes in (-1, 1) and weights of Gauss-Legendre quadrature.
#[derive(Debug, Clone, PartialEq)]
pub struct Rule(pub Vec<[f64; 2]>);

impl Rule {
    /// Of `n` points: exact for polynomials of degree 2 n - 1; roots of the Legendre polynomial by Newton's method.
    #[must_use]
    pub fn legendre(n: usize) -> Self {
        let size = n as f64;
        let node = |i: usize| {
            // a first guess good to O(n^-4) (F. G. Tricomi, from memory)
            let angle = std::f64::consts::PI * (i as f64 + 0.75) / (size + 0.5);
            let mut x = (1.0 - (size - 1.0) / (8.0 * size.powi(3))) * angle.cos();
            let mut slope = 1.0;
            for _ in 0..100 {
                let [value, derivative] = polynomial(n, x);
                slope = derivative;
                let step = value / derivative;
                x -= step;
                if step.abs() < 1e-15 {
                    break;
                }
            }
            [x, 2.0 / ((1.0 - x * x) * slope * slope)]
        };
        Self((0..n).map(node).collect())
    }

    /// Gauss-Hermite: sum of w f(x) for the integral of exp(-x^2) f(x) over all x, exact for polynomials of degree 2 n - 1.
    ///
    /// Nodes are the eigenvalues of the Jacobi matrix of the recurrence, weights follow from the first components of its
    /// eigenvectors (G. H. Golub, J. H. Welsch, Math. Comp. 23, 221 (1969), from memory).
    #[must_use]
    pub fn hermite(n: usize) -> Self {
        let beside =
            |i: usize, j: usize| if i.abs_diff(j) == 1 { (0.5 * i.max(j) as f64).sqrt() } else { 0.0 };
        let eigen = SymmetricEigen::new(DMatrix::from_fn(n, n, beside));
        let weight = |j: usize| std::f64::consts::PI.sqrt() * eigen.eigenvectors[(0, j)].powi(2);
        Self((0..n).map(|j| [eigen.eigenvalues[j], weight(j)]).collect())
    }

    /// Nodes and weights on an interval.
    pub fn on(&self, [from, to]: [f64; 2]) -> impl Iterator<Item = [f64; 2]> {
        let (middle, half) = (0.5 * (from + to), 0.5 * (to - from));
        self.0.iter().map(move |[x, weight]| [middle + half * x, half * weight])
    }
}

/// P_n(x) and its derivative: (k + 1) P_(k+1) = (2k + 1) x P_k - k P_(k-1).
fn polynomial(n: usize, x: f64) -> [f64; 2] {
    let (mut before, mut here) = (0.0, 1.0);
    for k in 0..n {
        let k = k as f64;
        (before, here) = (here, ((2.0 * k + 1.0) * x * here - k * before) / (k + 1.0));
    }
    [here, n as f64 * (x * here - before) / (x * x - 1.0)]
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    #[test]
    fn polynomials_are_integrated_exactly() {
        for n in [1, 2, 5, 16, 63] {
            let rule = Rule::legendre(n);
            for power in [0, 2 * n - 2] {
                let sum: f64 = rule.on([0.0, 2.0]).map(|[x, w]| w * (x / 2.0).powi(power as i32)).sum();
                assert_relative_eq!(sum, 2.0 / (power as f64 + 1.0), max_relative = 1e-12);
            }
        }
    }

    #[test]
    fn moments_of_a_gaussian_are_exact() {
        for n in [1, 3, 8, 21] {
            let sum = |power: i32| -> f64 { Rule::hermite(n).0.iter().map(|[x, w]| w * x.powi(power)).sum() };
            let root_pi = std::f64::consts::PI.sqrt();
            assert_relative_eq!(sum(0), root_pi, max_relative = 1e-12);
            if n > 1 {
                assert_relative_eq!(sum(2), 0.5 * root_pi, max_relative = 1e-12);
            }
        }
    }
}

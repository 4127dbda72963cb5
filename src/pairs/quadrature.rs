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

    /// For a measure that is given as many points (x, weight): sum of w f(x) for the sum over all of them, exact for polynomials
    /// of degree 2 n - 1.
    ///
    /// The recurrence p_(k+1) = (x - a_k) p_k - b_k p_(k-1) of the polynomials that are orthogonal on the points has
    /// a_k = (x p_k, p_k)/(p_k, p_k) and b_k = (p_k, p_k)/(p_(k-1), p_(k-1)) (T. J. Stieltjes; W. Gautschi, SIAM J. Sci. Stat.
    /// Comput. 3, 289 (1982), from memory); nodes and weights follow as for Hermite.
    #[must_use]
    pub fn weighted(points: &[[f64; 2]], n: usize) -> Self {
        let total: f64 = points.iter().map(|p| p[1]).sum();
        let ends =
            points.iter().fold([f64::INFINITY, f64::NEG_INFINITY], |e, p| [e[0].min(p[0]), e[1].max(p[0])]);
        if total <= 0.0 {
            return Self(Vec::new());
        }
        let (middle, half) = (0.5 * (ends[0] + ends[1]), (0.5 * (ends[1] - ends[0])).max(f64::MIN_POSITIVE));
        let x: Vec<f64> = points.iter().map(|p| (p[0] - middle) / half).collect();
        // polynomials of norm one: their values neither grow nor vanish
        let mut before = vec![0.0; x.len()];
        let mut here = vec![total.sqrt().recip(); x.len()];
        let (mut diagonal, mut beside): (Vec<f64>, Vec<f64>) = (Vec::new(), Vec::new());
        for k in 0..n {
            let a: f64 = points.iter().zip(&x).zip(&here).map(|((p, x), v)| p[1] * x * v * v).sum();
            diagonal.push(a);
            let b = if k == 0 { 0.0 } else { beside[k - 1] };
            let mut next: Vec<f64> =
                x.iter().zip(&here).zip(&before).map(|((x, v), u)| (x - a) * v - b * u).collect();
            let norm = points.iter().zip(&next).map(|(p, v)| p[1] * v * v).sum::<f64>().sqrt();
            // as many nodes as there are points do not change the sum any more
            if norm < 1e-12 {
                break;
            }
            next.iter_mut().for_each(|v| *v /= norm);
            beside.push(norm);
            before = std::mem::replace(&mut here, next);
        }
        let n = diagonal.len();
        let jacobi = DMatrix::from_fn(n, n, |i, j| match i.abs_diff(j) {
            0 => diagonal[i],
            1 => beside[i.min(j)],
            _ => 0.0,
        });
        let eigen = SymmetricEigen::new(jacobi);
        let node =
            |j: usize| [middle + half * eigen.eigenvalues[j], total * eigen.eigenvectors[(0, j)].powi(2)];
        Self((0..n).map(node).collect())
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
    fn a_measure_of_points_is_summed_exactly() {
        // two lines of a laser, unevenly bright
        let line = |x: f64, at: f64, width: f64| (-((x - at) / width).powi(2)).exp();
        let points: Vec<[f64; 2]> = (0..=600)
            .map(|j| f64::from(j) * 0.01)
            .map(|x| [x, line(x, 1.0, 0.2) + 0.3 * line(x, 4.0, 0.1)])
            .collect();
        for n in [1, 4, 9, 20] {
            let rule = Rule::weighted(&points, n);
            assert_eq!(rule.0.len(), n);
            for power in [0, 2 * n as i32 - 1] {
                let sum = |all: &[[f64; 2]]| all.iter().map(|[x, w]| w * (x / 6.0).powi(power)).sum::<f64>();
                assert_relative_eq!(sum(&rule.0), sum(&points), max_relative = 1e-10);
            }
        }
        // fewer points than nodes: the points themselves
        let few = Rule::weighted(&[[1.0, 2.0], [3.0, 5.0]], 8);
        assert_relative_eq!(few.0.iter().map(|[x, w]| w * x).sum::<f64>(), 17.0, max_relative = 1e-12);
        assert_eq!(Rule::weighted(&[], 3).0.len(), 0);
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

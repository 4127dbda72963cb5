//! A two-photon polarization state and what is asked of it.

use nalgebra::{Complex, Matrix2, Matrix3, Matrix4, SymmetricEigen, Vector4};

/// Which polarizations a state is written in.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Basis {
    /// Those of the two histories.
    Histories,
    /// H and V of each arm.
    Lab,
}

impl Basis {
    /// Both.
    pub const ALL: [Self; 2] = [Self::Histories, Self::Lab];

    /// As options and tables name it.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Histories => "oe",
            Self::Lab => "lab",
        }
    }
}

/// Complex amplitude.
pub type Amplitude = Complex<f64>;

/// Density matrix of polarizations of arm a and arm b, in a product basis 00, 01, 10, 11 (a first): Hermitian, positive,
/// of trace one.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct DensityMatrix(pub Matrix4<Amplitude>);

/// The Bell state of free phase that lies nearest.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Nearest {
    /// Whether the photons of the state are polarized alike: (|00> + e^(i phase)|11>)/sqrt 2, else
    /// (|01> + e^(i phase)|10>)/sqrt 2.
    pub alike: bool,
    /// Of the second term, radians.
    pub phase: f64,
    /// Overlap with it.
    pub fidelity: f64,
}

impl DensityMatrix {
    /// From an unnormalised mixture; `None` where nothing was collected.
    #[must_use]
    pub fn new(mixture: &Matrix4<Amplitude>) -> Option<Self> {
        let trace = mixture.trace().re;
        let hermitian = (mixture + mixture.adjoint()) * Complex::from(0.5);
        (trace > 0.0 && trace.is_finite()).then(|| Self(hermitian / Complex::from(trace)))
    }

    /// The projector on a state.
    #[must_use]
    pub fn pure(state: &Vector4<Amplitude>) -> Option<Self> {
        Self::new(&(state * state.adjoint()))
    }

    /// The same state with basis vectors of arm a and b as columns of `a` and `b`: (A (x) B)^dagger rho (A (x) B).
    #[must_use]
    pub fn in_basis(&self, a: &Matrix2<Amplitude>, b: &Matrix2<Amplitude>) -> Self {
        let both = a.kronecker(b);
        Self(both.adjoint() * self.0 * both)
    }

    /// With the arms exchanged.
    #[must_use]
    pub fn swapped(&self) -> Self {
        let order = [0, 2, 1, 3];
        Self(Matrix4::from_fn(|i, j| self.0[(order[i], order[j])]))
    }

    /// `|<sz sz>|`: contrast of coincidences between polarizers along the basis.
    #[must_use]
    pub fn visibility_straight(&self) -> f64 {
        let p = |i: usize| self.0[(i, i)].re;
        (p(0) - p(1) - p(2) + p(3)).abs()
    }

    /// Largest `|<sx sx>|` over a phase given to the second basis state of arm b: contrast between diagonal polarizers once
    /// the phase has been set.
    ///
    /// With that phase f, `<sx sx> = 2 Re[e^(i f) (rho_(00,11) + rho_(01,10)*)]` up to the sign of f.
    #[must_use]
    pub fn visibility_diagonal(&self) -> f64 {
        2.0 * (self.0[(0, 3)] + self.0[(1, 2)].conj()).norm()
    }

    /// 2 |rho_(00,11)| / (rho_(00,00) + rho_(11,11)): in the basis of two histories, of which one makes 00 and the other
    /// 11, the contrast between diagonal polarizers of the pairs that are still in one of these.
    #[must_use]
    pub fn coherence(&self) -> f64 {
        let both = self.0[(0, 0)].re + self.0[(3, 3)].re;
        if both > 0.0 { 2.0 * self.0[(0, 3)].norm() / both } else { 0.0 }
    }

    /// tr rho^2.
    #[must_use]
    pub fn purity(&self) -> f64 {
        self.0.norm_squared()
    }

    /// W. K. Wootters, Phys. Rev. Lett. 80, 2245 (1998): l1 - l2 - l3 - l4 with the square roots l of the eigenvalues of
    /// rho (sy x sy) rho* (sy x sy). With rho = S S^dagger they are the singular values of S^T (sy x sy) S.
    #[must_use]
    pub fn concurrence(&self) -> f64 {
        let eigen = SymmetricEigen::new(self.0);
        let roots = eigen.eigenvalues.map(|value| Complex::from(value.max(0.0).sqrt()));
        let s = eigen.eigenvectors * Matrix4::from_diagonal(&roots);
        let one = Complex::from(1.0);
        let mut flip = Matrix4::zeros();
        for (i, j, sign) in [(0, 3, -one), (1, 2, one), (2, 1, one), (3, 0, -one)] {
            flip[(i, j)] = sign;
        }
        let mut l = (s.transpose() * flip * s).singular_values();
        l.as_mut_slice().sort_by(|a, b| b.total_cmp(a));
        (l[0] - l[1] - l[2] - l[3]).max(0.0)
    }

    /// Bell state of free phase with the largest overlap.
    ///
    /// `<B|rho|B> = (rho_(00,00) + rho_(11,11))/2 + |rho_(00,11)|` at the phase arg rho_(11,00), and so with 01 and 10.
    #[must_use]
    pub fn nearest_bell(&self) -> Nearest {
        let overlap =
            |i: usize, j: usize| 0.5 * (self.0[(i, i)].re + self.0[(j, j)].re) + self.0[(i, j)].norm();
        let (same, opposite) = (overlap(0, 3), overlap(1, 2));
        let alike = same >= opposite;
        let (i, j) = if alike { (0, 3) } else { (1, 2) };
        Nearest { alike, phase: self.0[(j, i)].arg(), fidelity: same.max(opposite) }
    }

    /// Overlap with (|00> + sign |11>)/sqrt 2, or (|01> + sign |10>)/sqrt 2.
    #[must_use]
    pub fn overlap(&self, alike: bool, sign: f64) -> f64 {
        let (i, j) = if alike { (0, 3) } else { (1, 2) };
        0.5 * (self.0[(i, i)].re + self.0[(j, j)].re) + sign * self.0[(i, j)].re
    }

    /// Largest S of a CHSH test: 2 sqrt(m1 + m2) with the two largest eigenvalues m of T^T T, T_ij = tr(rho s_i x s_j)
    /// (R. Horodecki, P. Horodecki, M. Horodecki, Phys. Lett. A 200, 340 (1995)).
    #[must_use]
    pub fn chsh_max(&self) -> f64 {
        let t = self.correlations();
        let mut m = (t.transpose() * t).symmetric_eigenvalues();
        m.as_mut_slice().sort_by(|a, b| b.total_cmp(a));
        2.0 * (m[0] + m[1]).max(0.0).sqrt()
    }

    /// tr(rho s_i x s_j) for i, j = x, y, z.
    #[must_use]
    pub fn correlations(&self) -> Matrix3<f64> {
        let (zero, one, i) = (Complex::from(0.0), Complex::from(1.0), Complex::i());
        let pauli = [
            Matrix2::new(zero, one, one, zero),
            Matrix2::new(zero, -i, i, zero),
            Matrix2::new(one, zero, zero, -one),
        ];
        Matrix3::from_fn(|j, k| (self.0 * pauli[j].kronecker(&pauli[k])).trace().re)
    }

    /// Smallest eigenvalue; below zero only by rounding.
    #[must_use]
    pub fn least_eigenvalue(&self) -> f64 {
        SymmetricEigen::new(self.0).eigenvalues.min()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    /// (|00> + e^(i phase)|11>)/sqrt 2 whose coherence is multiplied by v.
    fn dephased(v: f64, phase: f64) -> DensityMatrix {
        let mut rho = Matrix4::zeros();
        rho[(0, 0)] = Complex::from(0.5);
        rho[(3, 3)] = Complex::from(0.5);
        rho[(3, 0)] = Complex::from_polar(0.5 * v, phase);
        rho[(0, 3)] = rho[(3, 0)].conj();
        DensityMatrix(rho)
    }

    #[test]
    fn a_dephased_bell_state_has_the_concurrence_of_its_coherence() {
        for v in [0.0, 0.3, 0.77, 1.0] {
            let rho = dephased(v, 0.4);
            assert_abs_diff_eq!(rho.concurrence(), v, epsilon = 1e-12);
            assert_abs_diff_eq!(rho.visibility_diagonal(), v, epsilon = 1e-15);
            assert_abs_diff_eq!(rho.visibility_straight(), 1.0, epsilon = 1e-15);
            assert_abs_diff_eq!(rho.chsh_max(), 2.0 * (1.0 + v * v).sqrt(), epsilon = 1e-12);
            assert_abs_diff_eq!(rho.purity(), 0.5 * (1.0 + v * v), epsilon = 1e-15);
        }
    }

    #[test]
    fn the_nearest_bell_state_has_the_phase_of_the_second_term() {
        let nearest = dephased(0.8, 0.4).nearest_bell();
        assert!(nearest.alike);
        assert_abs_diff_eq!(nearest.phase, 0.4, epsilon = 1e-15);
        assert_abs_diff_eq!(nearest.fidelity, 0.9, epsilon = 1e-15);
    }

    /// Werner state p |singlet><singlet| + (1 - p)/4: concurrence (3p - 1)/2, S = 2 sqrt 2 p.
    #[test]
    fn a_werner_state_is_entangled_above_a_third() {
        let one = Complex::from(1.0);
        let singlet = Vector4::new(Complex::from(0.0), one, -one, Complex::from(0.0));
        for p in [0.2, 0.5, 0.9] {
            let pure = DensityMatrix::pure(&singlet).expect("a state").0 * Complex::from(p);
            let rho = DensityMatrix(pure + Matrix4::identity() * Complex::from(0.25 * (1.0 - p)));
            assert_abs_diff_eq!(rho.concurrence(), (1.5 * p - 0.5_f64).max(0.0), epsilon = 1e-12);
            assert_abs_diff_eq!(rho.chsh_max(), 8f64.sqrt() * p, epsilon = 1e-12);
        }
    }

    #[test]
    fn exchanged_arms_exchange_the_order_of_the_basis() {
        let state = Vector4::new(1.0, 2.0, 3.0, 4.0).map(Complex::from);
        let swapped = Vector4::new(1.0, 3.0, 2.0, 4.0).map(Complex::from);
        let rho = DensityMatrix::pure(&state).expect("a state");
        assert_eq!(Some(rho.swapped()), DensityMatrix::pure(&swapped));
    }
}

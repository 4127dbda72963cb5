//! The basis of the two histories: in each arm the polarization that the first history leaves there, and that of the second.

use nalgebra::{Complex, Matrix2, SymmetricEigen, Vector2, Vector3};

use super::PairsError;
use super::amplitude::Behind;
use super::slab::Ray;
use super::stack::Stack;
use super::state::Amplitude;

/// Basis vectors of arm a and b as columns, in H and V: the nearest orthonormal ones to the fields of the first and second
/// history behind the crystals, before compensators, at nominal directions and wavelengths. Each has a positive real
/// largest component, so that phases of the state mean something.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct HistoryBasis {
    /// Columns: first, second history.
    pub a: Matrix2<Amplitude>,
    /// Columns: first, second history.
    pub b: Matrix2<Amplitude>,
}

impl Stack {
    /// The basis of the two histories that the pair is named by: both made their pair in state 00 or 11.
    ///
    /// # Errors
    /// Indices that are not to be had, waves that do not exist, histories of equal polarization.
    pub fn history_basis(&self) -> Result<HistoryBasis, PairsError> {
        let tuned = self.tuned()?;
        let a = Ray::new(tuned.k0[0], self.arms[0]);
        // the partner at nominal wavelengths, even where b looks elsewhere
        let follow = self.follow(&Vector3::z(), &a.d, &tuned.k0).ok_or(PairsError::NoHistories)?;
        let b = Ray::new(tuned.k0[1], follow);
        let mut born = Vec::new();
        self.born(&tuned, &a, &b, Behind::Crystals, &mut born).ok_or(PairsError::NoHistories)?;
        let [first, second] = self.named.map(|index| born[index]);
        let arm = |arm: usize| orthonormal(first.fields[arm], second.fields[arm]).ok_or(PairsError::Alike);
        Ok(HistoryBasis { a: arm(0)?, b: arm(1)? })
    }
}

/// T (T^dagger T)^(-1/2) for the columns T: of all orthonormal pairs that which changes the two vectors least.
fn orthonormal(first: Vector2<Amplitude>, second: Vector2<Amplitude>) -> Option<Matrix2<Amplitude>> {
    let columns = Matrix2::from_columns(&[real(first), real(second)]);
    let eigen = SymmetricEigen::new(columns.adjoint() * columns);
    if eigen.eigenvalues.min() < 1e-6 {
        return None;
    }
    let roots = Matrix2::from_diagonal(&eigen.eigenvalues.map(|value| Complex::from(value.sqrt().recip())));
    Some(columns * eigen.eigenvectors * roots * eigen.eigenvectors.adjoint())
}

/// The unit vector with its larger component real and positive.
fn real(field: Vector2<Amplitude>) -> Vector2<Amplitude> {
    let larger = if field.x.norm() >= field.y.norm() { field.x } else { field.y };
    let field = field * Complex::cis(-larger.arg());
    field / Complex::from(field.norm())
}

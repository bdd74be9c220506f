//! An orthonormal basis out of overlapping functions.

use crate::numeric::linalg::{LinalgError, symmetric_eigen};
use nalgebra::DMatrix;

/// Combinations of functions whose overlap eigenvalue lies below this are removed: they carry no
/// independent information, and the rounding errors of the integrals would be divided by it.
pub const NEAR_DEPENDENCE: f64 = 1e-7;

/// The matrix X of canonical orthogonalisation, Xᵀ S X = 1, and the number of combinations that
/// were removed as nearly dependent (Szabo and Ostlund, Modern Quantum Chemistry, section 3.4.5).
///
/// # Errors
/// If the overlap matrix is not finite.
pub fn canonical_orthogonalisation(
    overlap: &DMatrix<f64>,
) -> Result<(DMatrix<f64>, usize), LinalgError> {
    let (values, vectors) = symmetric_eigen(overlap)?;
    let removed = values.iter().filter(|&&s| s < NEAR_DEPENDENCE).count();
    let kept = values.len() - removed;
    let mut x = vectors.columns(removed, kept).into_owned();
    for (mut column, s) in x.column_iter_mut().zip(values.iter().skip(removed)) {
        column /= s.sqrt();
    }
    Ok((x, removed))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn twins_are_reduced_to_one() {
        // Three functions, the last two nearly the same.
        let s = DMatrix::from_row_slice(
            3,
            3,
            &[1.0, 0.2, 0.2, 0.2, 1.0, 1.0 - 1e-9, 0.2, 1.0 - 1e-9, 1.0],
        );
        let (x, removed) = canonical_orthogonalisation(&s).expect("finite");
        assert_eq!((x.ncols(), removed), (2, 1));
        let unit = x.transpose() * &s * &x;
        assert!((unit - DMatrix::identity(2, 2)).amax() < 1e-12);
    }
}

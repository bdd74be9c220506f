//! Dense linear algebra on nalgebra matrices, carried out by the crate `faer`.
//!
//! Every result is the same to the last bit for any number of threads: a product is cut into
//! blocks of output columns whose width is fixed, each block is one sequential product, and no sum
//! is ever split between threads. Factorisations run on one thread.

use faer::dyn_stack::{MemBuffer, MemStack};
use faer::linalg::{cholesky::llt, evd, matmul, triangular_solve};
use faer::{Accum, MatMut, MatRef, Par};
use nalgebra::{DMatrix, DVector};
use rayon::prelude::*;

/// Width of an output block of a parallel product.
const BLOCK: usize = 64;
/// Products with fewer multiplications than this are not worth a second thread.
const SMALL_PRODUCT: usize = 1 << 18;

/// Why a factorisation failed.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum LinalgError {
    /// A Cholesky pivot was not positive.
    #[error("the matrix is not positive definite (pivot {pivot} of {size})")]
    NotPositiveDefinite {
        /// Position of the pivot, from 1.
        pivot: usize,
        /// Rows of the matrix.
        size: usize,
    },
    /// The eigenvalue iteration did not converge (the input holds NaN or infinity).
    #[error("the eigenvalues of a {size} × {size} matrix could not be found")]
    NoEigenvalues {
        /// Rows of the matrix.
        size: usize,
    },
}

/// A view of a nalgebra matrix for faer, without a copy.
pub fn view(matrix: &DMatrix<f64>) -> MatRef<'_, f64> {
    MatRef::from_column_major_slice(matrix.as_slice(), matrix.nrows(), matrix.ncols())
}

/// A mutable view of a nalgebra matrix for faer, without a copy.
pub fn view_mut(matrix: &mut DMatrix<f64>) -> MatMut<'_, f64> {
    let (rows, columns) = matrix.shape();
    MatMut::from_column_major_slice_mut(matrix.as_mut_slice(), rows, columns)
}

/// out = a·b, or out += a·b, on the calling thread alone.
///
/// # Panics
/// If the shapes do not fit.
pub fn product_sequential(out: MatMut<'_, f64>, add: bool, a: MatRef<'_, f64>, b: MatRef<'_, f64>) {
    let accumulate = if add { Accum::Add } else { Accum::Replace };
    matmul::matmul(out, accumulate, a, b, 1.0, Par::Seq);
}

/// a·b. Transposes are views: `product(view(&c).transpose(), view(&s))` is cᵀ·s.
///
/// # Panics
/// If the shapes do not fit.
pub fn product(a: MatRef<'_, f64>, b: MatRef<'_, f64>) -> DMatrix<f64> {
    assert_eq!(a.ncols(), b.nrows(), "inner dimensions of a product");
    let (rows, columns) = (a.nrows(), b.ncols());
    let mut out = DMatrix::zeros(rows, columns);
    if rows == 0 || columns == 0 {
        return out;
    }
    if rows * columns * a.ncols() < SMALL_PRODUCT {
        product_sequential(view_mut(&mut out), false, a, b);
        return out;
    }
    out.as_mut_slice()
        .par_chunks_mut(rows * BLOCK)
        .enumerate()
        .for_each(|(block, chunk)| {
            let width = chunk.len() / rows;
            let target = MatMut::from_column_major_slice_mut(chunk, rows, width);
            product_sequential(target, false, a, b.subcols(block * BLOCK, width));
        });
    out
}

/// xᵀ·a·x, for symmetric `a` symmetric to the last bit.
///
/// # Panics
/// If the shapes do not fit.
pub fn congruence(x: &DMatrix<f64>, a: &DMatrix<f64>) -> DMatrix<f64> {
    let half = product(view(a), view(x));
    let mut out = product(view(x).transpose(), view(&half));
    symmetrise(&mut out);
    out
}

/// Replaces a by (a + aᵀ)/2.
///
/// # Panics
/// If `a` is not square.
pub fn symmetrise(a: &mut DMatrix<f64>) {
    let n = a.nrows();
    assert_eq!(n, a.ncols(), "only a square matrix can be symmetrised");
    for j in 0..n {
        for i in 0..j {
            let mean = 0.5 * (a[(i, j)] + a[(j, i)]);
            a[(i, j)] = mean;
            a[(j, i)] = mean;
        }
    }
}

/// Sum of the products of corresponding elements, tr(aᵀb).
pub fn dot(a: &DMatrix<f64>, b: &DMatrix<f64>) -> f64 {
    a.dot(b)
}

/// The lower triangular Cholesky factor L of a = L·Lᵀ (the upper triangle of L is zero). Only the
/// lower triangle of `a` is read.
///
/// # Errors
/// If `a` is not positive definite.
pub fn cholesky(mut a: DMatrix<f64>) -> Result<DMatrix<f64>, LinalgError> {
    let n = a.nrows();
    let mut memory = MemBuffer::new(llt::factor::cholesky_in_place_scratch::<f64>(
        n,
        Par::Seq,
        Default::default(),
    ));
    llt::factor::cholesky_in_place(
        view_mut(&mut a),
        Default::default(),
        Par::Seq,
        MemStack::new(&mut memory),
        Default::default(),
    )
    .map_err(|llt::factor::LltError::NonPositivePivot { index }| {
        LinalgError::NotPositiveDefinite {
            pivot: index + 1,
            size: n,
        }
    })?;
    a.fill_upper_triangle(0.0, 1);
    Ok(a)
}

/// Overwrites the columns b of `right` by L⁻¹·b, on the calling thread alone.
///
/// # Panics
/// If the shapes do not fit.
pub fn solve_lower(lower: MatRef<'_, f64>, right: MatMut<'_, f64>) {
    triangular_solve::solve_lower_triangular_in_place(lower, right, Par::Seq);
}

/// Eigenvalues, rising, and orthonormal eigenvectors (columns) of a symmetric matrix. Only the
/// lower triangle is read. The sign of each vector is fixed: its element of largest magnitude is
/// positive.
///
/// # Errors
/// If the matrix holds anything that is not finite.
pub fn symmetric_eigen(a: &DMatrix<f64>) -> Result<(DVector<f64>, DMatrix<f64>), LinalgError> {
    let n = a.nrows();
    let mut values = DVector::zeros(n);
    let mut vectors = DMatrix::zeros(n, n);
    if a.iter().any(|x| !x.is_finite()) {
        return Err(LinalgError::NoEigenvalues { size: n });
    }
    if n == 0 {
        return Ok((values, vectors));
    }
    let mut memory = MemBuffer::new(evd::self_adjoint_evd_scratch::<f64>(
        n,
        evd::ComputeEigenvectors::Yes,
        Par::Seq,
        Default::default(),
    ));
    evd::self_adjoint_evd(
        view(a),
        faer::diag::DiagMut::from_slice_mut(values.as_mut_slice()),
        Some(view_mut(&mut vectors)),
        Par::Seq,
        MemStack::new(&mut memory),
        Default::default(),
    )
    .map_err(|_| LinalgError::NoEigenvalues { size: n })?;
    for mut column in vectors.column_iter_mut() {
        // Ties between equal magnitudes go to the first within rounding.
        let largest = column.amax();
        let leading = column.iter().find(|x| x.abs() > 0.999_999 * largest);
        if leading.is_some_and(|x| *x < 0.0) {
            column.neg_mut();
        }
    }
    Ok((values, vectors))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Numbers without pattern, the same every time.
    fn matrix(rows: usize, columns: usize) -> DMatrix<f64> {
        DMatrix::from_fn(rows, columns, |i, j| {
            ((i * 7 + j * 13 + 3) as f64 * 0.731).sin()
        })
    }

    #[test]
    fn products_agree_with_nalgebra() {
        for (m, k, n) in [(1, 1, 1), (5, 0, 3), (3, 70, 200), (150, 90, 131)] {
            let (a, b) = (matrix(m, k), matrix(k, n));
            let c = product(view(&a), view(&b));
            assert!((c - &a * &b).amax() < 1e-11);
            let c = product(view(&b).transpose(), view(&a).transpose());
            assert!((c - (&a * &b).transpose()).amax() < 1e-11);
        }
    }

    #[test]
    fn same_bits_for_one_and_two_threads() {
        let (a, b) = (matrix(201, 147), matrix(147, 333));
        let run = |threads| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads);
            pool.build()
                .expect("a thread pool")
                .install(|| product(view(&a), view(&b)))
        };
        assert_eq!(run(1), run(2));
    }

    #[test]
    fn cholesky_and_solve_undo_each_other() {
        let a = matrix(90, 120);
        let square = &a * a.transpose() + DMatrix::identity(90, 90);
        let lower = cholesky(square.clone()).expect("positive definite");
        assert!((&lower * lower.transpose() - &square).amax() < 1e-12);
        let mut right = matrix(90, 7);
        let before = right.clone();
        solve_lower(view(&lower), view_mut(&mut right));
        assert!((&lower * right - before).amax() < 1e-12);
        let mut bad = DMatrix::<f64>::identity(4, 4);
        bad[(2, 2)] = -1.0;
        let error = cholesky(bad).expect_err("not positive definite");
        assert_eq!(
            error,
            LinalgError::NotPositiveDefinite { pivot: 3, size: 4 }
        );
    }

    #[test]
    fn eigenvectors_diagonalise() {
        for n in [0, 1, 2, 33, 150] {
            let a = matrix(n, n);
            let symmetric = &a + a.transpose();
            let (values, vectors) = symmetric_eigen(&symmetric).expect("finite input");
            let rebuilt = &vectors * DMatrix::from_diagonal(&values) * vectors.transpose();
            assert!((rebuilt - &symmetric).iter().all(|x| x.abs() < 1e-11));
            let identity = congruence(&vectors, &DMatrix::identity(n, n));
            assert!(
                (identity - DMatrix::identity(n, n))
                    .iter()
                    .all(|x| x.abs() < 1e-12)
            );
            assert!(values.as_slice().windows(2).all(|w| w[0] <= w[1]));
        }
        let mut bad = DMatrix::<f64>::identity(3, 3);
        bad[(1, 0)] = f64::NAN;
        assert!(symmetric_eigen(&bad).is_err());
    }
}

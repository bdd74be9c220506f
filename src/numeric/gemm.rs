//! Matrix products into given memory, on all threads, with the same bits for any number of them.
//!
//! The output is cut into blocks whose size depends on the shape alone; each block is one
//! sequential product and no sum is divided. Long outputs are cut by rows, wide ones by columns.

use faer::linalg::matmul;
use faer::{Accum, MatMut, MatRef, Par};
use nalgebra::DMatrix;
use rayon::prelude::*;

/// Widest block of the output along the direction that is cut.
const BLOCK: usize = 192;
/// Narrowest such block.
const NARROW: usize = 16;
/// Blocks that the output is cut into where it is small.
const BLOCKS: usize = 16;
/// Products with fewer multiplications than this are not worth a second thread.
const SMALL: usize = 1 << 18;

/// out ← factor·a·b, or out ← out + factor·a·b where `add` is set.
///
/// # Panics
/// If the shapes do not fit.
pub fn gemm(out: MatMut<'_, f64>, add: bool, factor: f64, a: MatRef<'_, f64>, b: MatRef<'_, f64>) {
    assert_eq!(a.ncols(), b.nrows(), "inner dimensions of a product");
    assert_eq!(
        (out.nrows(), out.ncols()),
        (a.nrows(), b.ncols()),
        "shape of a product"
    );
    let (rows, columns) = (a.nrows(), b.ncols());
    if rows == 0 || columns == 0 {
        return;
    }
    let accumulate = if add { Accum::Add } else { Accum::Replace };
    if rows * columns * a.ncols() < SMALL {
        matmul::matmul(out, accumulate, a, b, factor, Par::Seq);
        return;
    }
    if rows > columns {
        let width = width(rows);
        out.par_row_chunks_mut(width)
            .enumerate()
            .for_each(|(i, block)| {
                let a = a.subrows(i * width, block.nrows());
                matmul::matmul(block, accumulate, a, b, factor, Par::Seq);
            });
    } else {
        let width = width(columns);
        out.par_col_chunks_mut(width)
            .enumerate()
            .for_each(|(i, block)| {
                let b = b.subcols(i * width, block.ncols());
                matmul::matmul(block, accumulate, a, b, factor, Par::Seq);
            });
    }
}

fn width(length: usize) -> usize {
    length.div_ceil(BLOCKS).clamp(NARROW, BLOCK)
}

/// The elements of a matrix seen with another number of rows, without a copy.
///
/// # Panics
/// If the number of elements is not a multiple of `rows`.
pub fn reshaped(matrix: &DMatrix<f64>, rows: usize) -> MatRef<'_, f64> {
    slice(matrix.as_slice(), rows)
}

/// A column-major slice seen as a matrix.
///
/// # Panics
/// If the number of elements is not a multiple of `rows`.
pub fn slice(values: &[f64], rows: usize) -> MatRef<'_, f64> {
    let columns = values.len().checked_div(rows).unwrap_or(0);
    MatRef::from_column_major_slice(values, rows, columns)
}

/// A mutable column-major slice seen as a matrix.
///
/// # Panics
/// If the number of elements is not a multiple of `rows`.
pub fn slice_mut(values: &mut [f64], rows: usize) -> MatMut<'_, f64> {
    let columns = values.len().checked_div(rows).unwrap_or(0);
    MatMut::from_column_major_slice_mut(values, rows, columns)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::linalg::{view, view_mut};

    fn matrix(rows: usize, columns: usize) -> DMatrix<f64> {
        DMatrix::from_fn(rows, columns, |i, j| {
            ((i * 5 + j * 11 + 1) as f64 * 0.37).sin()
        })
    }

    #[test]
    fn agrees_with_nalgebra_in_every_shape() {
        for (m, k, n) in [
            (1, 1, 1),
            (3, 0, 2),
            (700, 40, 90),
            (30, 80, 900),
            (250, 7, 250),
        ] {
            let (a, b, mut c) = (matrix(m, k), matrix(k, n), matrix(m, n));
            let expected = &c + 0.3 * &a * &b;
            gemm(view_mut(&mut c), true, 0.3, view(&a), view(&b));
            assert!(k == 0 || (c - expected).amax() < 1e-12, "{m} {k} {n}");
        }
    }

    #[test]
    fn same_bits_for_one_and_two_threads() {
        let (a, b) = (matrix(401, 147), matrix(147, 333));
        let run = |threads| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads);
            let mut c = DMatrix::zeros(401, 333);
            pool.build()
                .expect("a thread pool")
                .install(|| gemm(view_mut(&mut c), false, 1.0, view(&a), view(&b)));
            c
        };
        assert_eq!(run(1), run(2));
    }
}

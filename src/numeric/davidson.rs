//! Block Davidson search for the low eigenpairs of a large symmetric matrix.
//!
//! The matrix is known through its products with vectors and its (approximate) diagonal. Its first
//! few coordinates, the leading ones, are special: the caller wants every eigenpair below a ceiling
//! whose vector has at least a given weight in them. Started from all leading coordinates, the
//! search space contains the block Krylov space of the leading block, so that an eigenvector with
//! any weight there cannot be missed by symmetry; pairs are followed until each one meets the
//! residual norm, and each residual norm is reported. Method: E. R. Davidson, J. Comput. Phys. 17,
//! 87 (1975); block form: B. Liu, LBL-8158 (1978) (memory).
//!
//! A residual norm ‖r‖ bounds the distance of the value from an exact eigenvalue.

use super::gemm::gemm;
use super::linalg::{LinalgError, product, symmetric_eigen, view, view_mut};
use nalgebra::{DMatrix, DVector};

/// Pairs that are not converged are followed from this share of the wanted weight on.
const FOLLOWED_SHARE: f64 = 0.25;
/// Error of a residual norm that is got as a difference of squares, relative to the value.
const ESTIMATE_ERROR: f64 = 1e-5;
/// A direction with a smaller norm after orthogonalisation adds nothing.
const DEPENDENT: f64 = 1e-7;
/// Smallest denominator of the preconditioner.
const SMALLEST_GAP: f64 = 1e-2;

/// A symmetric matrix by its action.
pub trait SymmetricOperator {
    /// Rows.
    fn size(&self) -> usize;
    /// Approximate diagonal, for the preconditioner.
    fn diagonal(&self) -> &[f64];
    /// Products with the columns of `vectors`.
    fn apply(&self, vectors: &DMatrix<f64>) -> DMatrix<f64>;
}

/// What is looked for, and how hard.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Search {
    /// Number of leading coordinates.
    pub leading: usize,
    /// Only eigenvalues below this are wanted.
    pub ceiling: f64,
    /// Smallest weight (sum of squares) in the leading coordinates of a wanted eigenvector.
    pub least_weight: f64,
    /// Residual norm at which a pair is converged.
    pub residual: f64,
    /// Iterations after which the search gives up.
    pub max_iterations: usize,
    /// Vectors that the space may hold before it is condensed.
    pub max_vectors: usize,
}

/// An eigenpair.
#[derive(Debug, Clone, PartialEq)]
pub struct Pair {
    /// Eigenvalue.
    pub value: f64,
    /// Normalised eigenvector.
    pub vector: DVector<f64>,
    /// ‖A·x − λ·x‖.
    pub residual: f64,
}

/// Why the search failed.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum DavidsonError {
    /// Some pairs did not converge.
    #[error(
        "{open} of {wanted} eigenvectors were not converged after {iterations} iterations (largest residual norm {worst:.1e})"
    )]
    NotConverged {
        /// Pairs not converged.
        open: usize,
        /// Pairs wanted.
        wanted: usize,
        /// Iterations done.
        iterations: usize,
        /// Largest residual norm among them.
        worst: f64,
    },
    /// The small eigenproblem failed.
    #[error(transparent)]
    Linalg(#[from] LinalgError),
}

/// Finds all wanted eigenpairs, by rising eigenvalue. `start` must contain the leading
/// coordinates' unit vectors among its columns if none is to be missed.
///
/// # Errors
/// If pairs remain unconverged.
pub fn search(
    operator: &dyn SymmetricOperator,
    start: &DMatrix<f64>,
    search: &Search,
) -> Result<Vec<Pair>, DavidsonError> {
    let size = operator.size();
    let mut space = Space::new(size);
    space.extend(operator, start.clone());
    for iteration in 1.. {
        let (values, vectors) = symmetric_eigen(&space.projected())?;
        let followed = space.followed(&values, &vectors, search);
        let (ritz, residuals) = space.ritz(&values, &vectors, &followed);
        let norms: Vec<f64> = residuals.column_iter().map(|r| r.norm()).collect();
        let weights: Vec<f64> = ritz.column_iter().map(|x| weight(&x, search)).collect();
        let exhausted = space.len() >= size;
        let open: Vec<usize> = (0..followed.len())
            .filter(|&k| {
                let reaches = values[followed[k]] - norms[k] < search.ceiling;
                norms[k] > search.residual && reaches && !exhausted
            })
            .collect();
        if open.is_empty() {
            let wanted = (0..followed.len()).filter(|&k| {
                values[followed[k]] < search.ceiling && weights[k] >= search.least_weight
            });
            return Ok(wanted
                .map(|k| Pair {
                    value: values[followed[k]],
                    vector: ritz.column(k).into_owned(),
                    residual: norms[k],
                })
                .collect());
        }
        let mut directions = DMatrix::zeros(size, open.len());
        for (column, &k) in open.iter().enumerate() {
            let theta = values[followed[k]];
            let scaled = precondition(&residuals.column(k), operator.diagonal(), theta);
            directions.set_column(column, &scaled);
        }
        let condensed =
            space.len() + open.len() > search.max_vectors && space.len() > 2 * followed.len();
        if condensed {
            space.condense(&vectors, &followed, start);
        }
        let mut added = space.extend(operator, directions);
        if added == 0 {
            // An exact preconditioner turns a residual back into the space; the bare one leads out.
            added = space.extend(operator, residuals.select_columns(&open));
        }
        if iteration == search.max_iterations || (added == 0 && !condensed) {
            return Err(DavidsonError::NotConverged {
                open: open.len(),
                wanted: followed.len(),
                iterations: iteration,
                worst: open.iter().map(|&k| norms[k]).fold(0.0, f64::max),
            });
        }
    }
    unreachable!("the loop returns")
}

fn weight<S>(vector: &nalgebra::Vector<f64, nalgebra::Dyn, S>, search: &Search) -> f64
where
    S: nalgebra::Storage<f64, nalgebra::Dyn>,
{
    vector.rows(0, search.leading).norm_squared()
}

fn precondition(
    residual: &nalgebra::DVectorView<'_, f64>,
    diagonal: &[f64],
    theta: f64,
) -> DVector<f64> {
    let scale = |(r, d): (&f64, &f64)| {
        let gap = theta - d;
        r / if gap.abs() < SMALLEST_GAP {
            SMALLEST_GAP.copysign(gap)
        } else {
            gap
        }
    };
    let mut scaled =
        DVector::from_iterator(diagonal.len(), residual.iter().zip(diagonal).map(scale));
    let norm = scaled.norm();
    if norm > 0.0 {
        scaled /= norm;
    }
    scaled
}

/// The search space: orthonormal vectors, their images, and the projected matrix.
struct Space {
    size: usize,
    vectors: DMatrix<f64>,
    images: DMatrix<f64>,
    projected: DMatrix<f64>,
    /// Scalar products of the images.
    gram: DMatrix<f64>,
}

impl Space {
    fn new(size: usize) -> Self {
        Self {
            size,
            vectors: DMatrix::zeros(size, 0),
            images: DMatrix::zeros(size, 0),
            projected: DMatrix::zeros(0, 0),
            gram: DMatrix::zeros(0, 0),
        }
    }

    fn len(&self) -> usize {
        self.vectors.ncols()
    }

    fn projected(&self) -> DMatrix<f64> {
        self.projected.clone()
    }

    /// Adds what is new in the columns of `block`; returns the number of vectors added.
    fn extend(&mut self, operator: &dyn SymmetricOperator, block: DMatrix<f64>) -> usize {
        let fresh = self.orthogonalised(block);
        let added = fresh.ncols();
        if added == 0 {
            return 0;
        }
        let images = operator.apply(&fresh);
        let cross = product(view(&self.vectors).transpose(), view(&images));
        let own = product(view(&fresh).transpose(), view(&images));
        grow(&mut self.projected, &cross, &own);
        let cross = product(view(&self.images).transpose(), view(&images));
        let own = product(view(&images).transpose(), view(&images));
        grow(&mut self.gram, &cross, &own);
        append(&mut self.vectors, &fresh);
        append(&mut self.images, &images);
        added
    }

    /// An orthonormal basis of what the columns of `block` add to the space.
    fn orthogonalised(&self, mut block: DMatrix<f64>) -> DMatrix<f64> {
        for _ in 0..2 {
            let overlap = product(view(&self.vectors).transpose(), view(&block));
            if overlap.nrows() > 0 {
                gemm(
                    view_mut(&mut block),
                    true,
                    -1.0,
                    view(&self.vectors),
                    view(&overlap),
                );
            }
        }
        let mut kept: Vec<DVector<f64>> = Vec::new();
        let room = self.size - self.len();
        for column in block.column_iter() {
            let mut x = column.into_owned();
            let before = x.norm();
            if kept.len() == room || before < DEPENDENT {
                continue;
            }
            x /= before;
            for _ in 0..2 {
                for y in &kept {
                    let overlap = y.dot(&x);
                    x.axpy(-overlap, y, 1.0);
                }
            }
            // What is left after losing digits must be cleaned of the old space once more.
            let norm = x.norm();
            if norm < DEPENDENT {
                continue;
            }
            x /= norm;
            let overlap = self.vectors.tr_mul(&x);
            x.gemv(-1.0, &self.vectors, &overlap, 1.0);
            for y in &kept {
                let overlap = y.dot(&x);
                x.axpy(-overlap, y, 1.0);
            }
            let norm = x.norm();
            if norm > 0.5 {
                kept.push(x / norm);
            }
        }
        if kept.is_empty() {
            DMatrix::zeros(self.size, 0)
        } else {
            DMatrix::from_columns(&kept)
        }
    }

    /// Positions of the Ritz pairs that have enough weight to be wanted or to become so, and whose
    /// residual norm (estimated here) lets them reach below the ceiling.
    fn followed(
        &self,
        values: &DVector<f64>,
        vectors: &DMatrix<f64>,
        search: &Search,
    ) -> Vec<usize> {
        let leading = self.vectors.rows(0, search.leading).into_owned() * vectors;
        let turned = product(view(&self.gram), view(vectors));
        (0..values.len())
            .filter(|&k| {
                let squared = vectors.column(k).dot(&turned.column(k)) - values[k] * values[k];
                let residual = squared.max(0.0).sqrt() + ESTIMATE_ERROR * (1.0 + values[k].abs());
                leading.column(k).norm_squared() >= FOLLOWED_SHARE * search.least_weight
                    && values[k] - residual < search.ceiling
            })
            .collect()
    }

    /// Ritz vectors and residuals at the given positions.
    fn ritz(
        &self,
        values: &DVector<f64>,
        vectors: &DMatrix<f64>,
        at: &[usize],
    ) -> (DMatrix<f64>, DMatrix<f64>) {
        let chosen = vectors.select_columns(at);
        let ritz = product(view(&self.vectors), view(&chosen));
        let mut residuals = product(view(&self.images), view(&chosen));
        for (column, &k) in at.iter().enumerate() {
            let x = ritz.column(column);
            residuals.column_mut(column).axpy(-values[k], &x, 1.0);
        }
        (ritz, residuals)
    }

    /// Keeps the followed Ritz vectors and the start vectors, and forgets the rest.
    fn condense(&mut self, vectors: &DMatrix<f64>, followed: &[usize], start: &DMatrix<f64>) {
        let mut kept = vectors.select_columns(followed);
        let start = product(view(&self.vectors).transpose(), view(start));
        for column in start.column_iter() {
            let mut x = column.into_owned();
            for _ in 0..2 {
                let overlap = kept.tr_mul(&x);
                x.gemv(-1.0, &kept, &overlap, 1.0);
            }
            let norm = x.norm();
            if norm > 1e-3 {
                append(&mut kept, &DMatrix::from_columns(&[x / norm]));
            }
        }
        self.vectors = product(view(&self.vectors), view(&kept));
        self.images = product(view(&self.images), view(&kept));
        self.projected = kept.tr_mul(&(&self.projected * &kept));
        self.gram = kept.tr_mul(&(&self.gram * &kept));
    }
}

/// Borders a symmetric matrix.
fn grow(matrix: &mut DMatrix<f64>, cross: &DMatrix<f64>, own: &DMatrix<f64>) {
    let (old, added) = cross.shape();
    let mut out = DMatrix::zeros(old + added, old + added);
    out.view_mut((0, 0), (old, old)).copy_from(matrix);
    out.view_mut((0, old), (old, added)).copy_from(cross);
    out.view_mut((old, 0), (added, old))
        .copy_from(&cross.transpose());
    let symmetric = (own + own.transpose()) * 0.5;
    out.view_mut((old, old), (added, added))
        .copy_from(&symmetric);
    *matrix = out;
}

fn append(matrix: &mut DMatrix<f64>, columns: &DMatrix<f64>) {
    let old = matrix.ncols();
    let grown = std::mem::replace(matrix, DMatrix::zeros(0, 0));
    *matrix = grown.insert_columns(old, columns.ncols(), 0.0);
    matrix.columns_mut(old, columns.ncols()).copy_from(columns);
}

#[cfg(test)]
mod tests {
    use super::*;

    struct Dense {
        matrix: DMatrix<f64>,
        diagonal: Vec<f64>,
    }

    impl SymmetricOperator for Dense {
        fn size(&self) -> usize {
            self.matrix.nrows()
        }
        fn diagonal(&self) -> &[f64] {
            &self.diagonal
        }
        fn apply(&self, vectors: &DMatrix<f64>) -> DMatrix<f64> {
            &self.matrix * vectors
        }
    }

    /// Four leading coordinates coupled to a dense ladder, two of them only to every other rung.
    fn ladder(size: usize) -> Dense {
        let mut matrix = DMatrix::zeros(size, size);
        for i in 0..size {
            matrix[(i, i)] = if i < 4 {
                0.3 + 0.2 * i as f64
            } else {
                0.8 + 0.01 * i as f64
            };
        }
        for i in 0..4 {
            for j in 4..size {
                if (i + j) % 2 == 0 {
                    let coupling = 0.05 * ((i * 3 + j) as f64).sin();
                    matrix[(i, j)] = coupling;
                    matrix[(j, i)] = coupling;
                }
            }
        }
        for j in 4..size - 2 {
            let coupling = 0.02 * (j as f64).cos();
            matrix[(j, j + 2)] = coupling;
            matrix[(j + 2, j)] = coupling;
        }
        let diagonal = matrix.diagonal().iter().copied().collect();
        Dense { matrix, diagonal }
    }

    fn settings(max_vectors: usize) -> Search {
        Search {
            leading: 4,
            ceiling: 1.5,
            least_weight: 1e-3,
            residual: 1e-8,
            max_iterations: 200,
            max_vectors,
        }
    }

    #[test]
    fn finds_what_dense_diagonalisation_finds() {
        let operator = ladder(120);
        let (values, vectors) = symmetric_eigen(&operator.matrix).expect("finite");
        let start = DMatrix::identity(120, 4);
        // With room for everything, and with a space so small that it is condensed on the way.
        for room in [1000, 60] {
            let search_settings = settings(room);
            let found = search(&operator, &start, &search_settings).expect("converges");
            let expected: Vec<usize> = (0..120)
                .filter(|&k| {
                    values[k] < 1.5 && weight(&vectors.column(k), &search_settings) >= 1e-3
                })
                .collect();
            assert_eq!(found.len(), expected.len());
            for (pair, &k) in found.iter().zip(&expected) {
                assert!((pair.value - values[k]).abs() < 1e-12);
                assert!(pair.residual <= 1e-8);
                assert!((pair.vector.dot(&vectors.column(k)).abs() - 1.0).abs() < 1e-10);
            }
        }
    }

    #[test]
    fn too_few_iterations_are_an_error() {
        let operator = ladder(120);
        let start = DMatrix::identity(120, 4);
        let hasty = Search {
            max_iterations: 2,
            ..settings(1000)
        };
        let error = search(&operator, &start, &hasty).expect_err("cannot converge");
        assert!(matches!(
            error,
            DavidsonError::NotConverged { iterations: 2, .. }
        ));
    }
}

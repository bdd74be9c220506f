//! Direct inversion in the iterative subspace (P. Pulay, J. Comput. Chem. 3, 556, 1982).

use nalgebra::{DMatrix, DVector};
use std::collections::VecDeque;

/// Fock matrices kept.
const HISTORY: usize = 8;
/// Weights beyond this only amplify rounding errors.
const LARGEST_WEIGHT: f64 = 1e4;

/// One iteration: Fock matrices and their errors, one per spin channel.
#[derive(Debug, Clone)]
struct Entry {
    fock: Vec<DMatrix<f64>>,
    error: Vec<DMatrix<f64>>,
}

/// Combines earlier Fock matrices so that their error vectors cancel as well as they can.
#[derive(Debug, Clone, Default)]
pub struct Diis {
    entries: VecDeque<Entry>,
    /// Scalar products of the errors, in the order of the entries.
    products: VecDeque<VecDeque<f64>>,
}

impl Diis {
    /// Forgets everything.
    pub fn clear(&mut self) {
        self.entries.clear();
        self.products.clear();
    }

    /// Takes in the newest Fock matrices with their errors and returns the best combination.
    pub fn extrapolate(
        &mut self,
        fock: Vec<DMatrix<f64>>,
        error: Vec<DMatrix<f64>>,
    ) -> Vec<DMatrix<f64>> {
        if self.entries.len() == HISTORY {
            self.forget_oldest();
        }
        let entry = Entry { fock, error };
        let mut row: VecDeque<f64> = self
            .entries
            .iter()
            .map(|e| inner(&e.error, &entry.error))
            .collect();
        for (old, product) in self.products.iter_mut().zip(&row) {
            old.push_back(*product);
        }
        row.push_back(inner(&entry.error, &entry.error));
        self.products.push_back(row);
        self.entries.push_back(entry);
        loop {
            match self.weights() {
                Some(weights) => return self.combine(&weights),
                // Errors that are nearly dependent make the weights useless.
                None => self.forget_oldest(),
            }
        }
    }

    fn forget_oldest(&mut self) {
        self.entries.pop_front();
        self.products.pop_front();
        for row in &mut self.products {
            row.pop_front();
        }
    }

    /// Weights that sum to 1 and minimise the combined error; `None` if they are ill determined.
    fn weights(&self) -> Option<DVector<f64>> {
        let n = self.entries.len();
        if n == 1 {
            return Some(DVector::from_element(1, 1.0));
        }
        // Scaled to a unit diagonal, so that the errors' falling sizes do no harm.
        let scale: Vec<f64> = (0..n)
            .map(|i| self.products[i][i].sqrt().max(f64::MIN_POSITIVE).recip())
            .collect();
        let matrix = DMatrix::from_fn(n, n, |i, j| self.products[i][j] * scale[i] * scale[j]);
        let mut eigen = matrix.symmetric_eigen();
        // A vanishing eigenvalue is a combination without error: kept, but finite.
        eigen.eigenvalues.apply(|v| *v = v.max(1e-15));
        // min wᵀBw with Σw = 1 is w ∝ B⁻¹·1.
        let ones = DVector::from_column_slice(&scale);
        let projected = eigen
            .eigenvectors
            .tr_mul(&ones)
            .component_div(&eigen.eigenvalues);
        let mut weights = (&eigen.eigenvectors * projected).component_mul(&ones);
        weights /= weights.sum();
        weights
            .iter()
            .all(|w| w.abs() < LARGEST_WEIGHT)
            .then_some(weights)
    }

    fn combine(&self, weights: &DVector<f64>) -> Vec<DMatrix<f64>> {
        let channels = self.entries[0].fock.len();
        (0..channels)
            .map(|c| {
                let mut sum = &self.entries[0].fock[c] * weights[0];
                for (entry, &w) in self.entries.iter().zip(weights.iter()).skip(1) {
                    sum.zip_apply(&entry.fock[c], |s, f| *s += w * f);
                }
                sum
            })
            .collect()
    }
}

fn inner(a: &[DMatrix<f64>], b: &[DMatrix<f64>]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a.dot(b)).sum()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_linear_problem_is_solved_in_as_many_steps_as_it_has_unknowns() {
        // Error e(f) = A f − b, linear in f: after n + 1 points the combination has no error.
        let a = DMatrix::from_row_slice(3, 3, &[2.0, 0.3, 0.1, 0.3, 1.5, -0.2, 0.1, -0.2, 1.1]);
        let b = DMatrix::from_column_slice(3, 1, &[1.0, -2.0, 0.5]);
        let error = |f: &DMatrix<f64>| &a * f - &b;
        let mut diis = Diis::default();
        let mut f = DMatrix::zeros(3, 1);
        for _ in 0..3 {
            let e = error(&f);
            f = diis.extrapolate(vec![f.clone()], vec![e]).remove(0);
            f -= error(&f) * 0.3;
        }
        let e = error(&f);
        f = diis.extrapolate(vec![f.clone()], vec![e]).remove(0);
        assert!(error(&f).norm() < 1e-9, "{}", error(&f).norm());
    }
}

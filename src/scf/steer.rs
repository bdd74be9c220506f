//! From one Fock matrix to the next: DIIS, and what is done when that alone does not converge.

use super::ScfStep;
use super::diis::Diis;
use crate::numeric::linalg::{product, view};
use nalgebra::DMatrix;

/// Iterations in which the gradient must fall to a third, else the calculation counts as stuck.
const PATIENCE: usize = 12;
/// Level shifts that are tried in turn, hartree.
const SHIFTS: [f64; 4] = [0.3, 0.6, 1.2, 2.4];
/// Below this gradient (hartree) the end is near and nothing is shifted.
const NEAR: f64 = 1e-3;

/// Keeps what earlier iterations have taught.
#[derive(Debug, Clone, Default)]
pub struct Steering {
    diis: Diis,
    /// Gradient and iteration at the last progress.
    progress: Option<(f64, usize)>,
    /// How often the calculation got stuck.
    stuck: usize,
}

impl Steering {
    /// The Fock matrices to diagonalise next.
    ///
    /// Plain DIIS as long as the gradient keeps falling. When it is stuck, the history is dropped
    /// and the empty orbitals are raised by a level shift (V. R. Saunders, I. H. Hillier, Int. J.
    /// Quantum Chem. 7, 699, 1973), a larger one each time, until the gradient is small.
    pub fn next(
        &mut self,
        step: &ScfStep,
        focks: Vec<DMatrix<f64>>,
        gradients: Vec<DMatrix<f64>>,
        densities: &[DMatrix<f64>],
        s: &DMatrix<f64>,
    ) -> Vec<DMatrix<f64>> {
        match self.progress {
            Some((best, since)) if step.gradient_hartree > best / 3.0 => {
                if step.iteration - since >= PATIENCE {
                    self.stuck += 1;
                    self.diis.clear();
                    self.progress = Some((step.gradient_hartree, step.iteration));
                }
            }
            _ => self.progress = Some((step.gradient_hartree, step.iteration)),
        }
        let mut focks = self.diis.extrapolate(focks, gradients);
        if self.stuck > 0 && step.gradient_hartree > NEAR {
            let shift = SHIFTS[(self.stuck - 1).min(SHIFTS.len() - 1)];
            for (fock, density) in focks.iter_mut().zip(densities) {
                // F + σ(S − S D S) leaves the occupied orbitals of D and raises all others by σ.
                let ds = product(view(density), view(s));
                *fock += (s - product(view(s), view(&ds))) * shift;
            }
        }
        focks
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::linalg::symmetric_eigen;

    #[test]
    fn a_stuck_calculation_gets_its_empty_levels_raised() {
        let s = DMatrix::identity(2, 2);
        let fock = DMatrix::from_diagonal_element(2, 2, -0.5) + DMatrix::from_element(2, 2, -0.1);
        // The lower orbital (1, 1)/√2 is occupied: levels −0.7 and −0.5.
        let density = DMatrix::from_element(2, 2, 0.5);
        let mut steering = Steering::default();
        let mut levels = |iteration, gradient_hartree| {
            let step = ScfStep {
                iteration,
                energy_hartree: -1.0,
                energy_change_hartree: 1.0,
                gradient_hartree,
            };
            let error = DMatrix::from_element(2, 2, gradient_hartree);
            let next = steering.next(
                &step,
                vec![fock.clone()],
                vec![error],
                std::slice::from_ref(&density),
                &s,
            );
            symmetric_eigen(&next[0]).expect("finite").0
        };
        for iteration in 1..=PATIENCE {
            assert!((levels(iteration, 0.2)[1] + 0.5).abs() < 1e-12);
        }
        let raised = levels(PATIENCE + 1, 0.2);
        assert!((raised[0] + 0.7).abs() < 1e-12 && (raised[1] + 0.5 - SHIFTS[0]).abs() < 1e-12);
        // Near the end nothing is shifted any more.
        assert!((levels(PATIENCE + 2, 1e-4)[1] + 0.5).abs() < 1e-12);
    }
}

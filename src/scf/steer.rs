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

//! Density-fitted self-consistent field.

mod degeneracy;

pub use degeneracy::DEGENERACY_TOLERANCE_HARTREE;

use nalgebra::{DMatrix, DVector};

/// Molecular orbitals of one spin (or of both, in a closed shell).
#[derive(Debug, Clone, PartialEq)]
pub struct SpinOrbitals {
    /// Coefficients: basis functions × orbitals, orthonormal in the overlap metric.
    pub coefficients: DMatrix<f64>,
    /// Energies, hartree, rising.
    pub energies: DVector<f64>,
    /// Electrons per orbital.
    pub occupations: DVector<f64>,
}

/// The orbitals of a wave function; restricted ones share one set for both spins.
#[derive(Debug, Clone, PartialEq)]
pub enum Orbitals {
    /// One set, occupations 2 or 0.
    Restricted(SpinOrbitals),
    /// Two sets, occupations 1 or 0.
    Unrestricted {
        /// Spin up.
        alpha: SpinOrbitals,
        /// Spin down.
        beta: SpinOrbitals,
    },
}

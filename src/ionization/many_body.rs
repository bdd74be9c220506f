//! What the many-body methods share: their errors.

use crate::numeric::davidson::DavidsonError;
use crate::numeric::linalg::LinalgError;

/// Why a many-body calculation failed.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ManyBodyError {
    /// Orbitals that differ for the two spins.
    #[error("this method takes a closed shell; the orbitals given are unrestricted")]
    OpenShell,
    /// The frozen core leaves nothing.
    #[error("{frozen} frozen core orbitals leave none of the {occupied} occupied orbitals")]
    NothingOccupied {
        /// Occupied orbitals.
        occupied: usize,
        /// Those to be frozen.
        frozen: usize,
    },
    /// The basis is minimal and full.
    #[error(
        "all {occupied} orbitals of this basis are occupied: nothing is left to correlate with"
    )]
    NoVirtuals {
        /// Occupied orbitals.
        occupied: usize,
    },
    /// The calculation would not fit.
    #[error(
        "{method} needs {:.1} GB of memory ({occupied} occupied, {virtuals} virtual orbitals, {auxiliaries} auxiliary functions); the limit is {:.1} GB",
        *needed_bytes as f64 / 1e9,
        *limit_bytes as f64 / 1e9
    )]
    Memory {
        /// Name of the method.
        method: &'static str,
        /// Bytes needed.
        needed_bytes: u64,
        /// Bytes allowed.
        limit_bytes: u64,
        /// Occupied orbitals that take part.
        occupied: usize,
        /// Virtual orbitals.
        virtuals: usize,
        /// Auxiliary functions.
        auxiliaries: usize,
    },
    /// Characters of the orbitals are missing.
    #[error(transparent)]
    Ionization(#[from] super::IonizationError),
    /// Eigenvectors did not converge.
    #[error(transparent)]
    Davidson(#[from] DavidsonError),
    /// A matrix could not be diagonalised.
    #[error(transparent)]
    Linalg(#[from] LinalgError),
}

impl ManyBodyError {
    /// Whether an iteration ended before it converged.
    pub fn is_not_converged(&self) -> bool {
        matches!(
            self,
            ManyBodyError::Davidson(DavidsonError::NotConverged { .. })
        )
    }
}

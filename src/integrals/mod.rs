//! One-electron integrals, and two- and three-centre Coulomb integrals, over contracted real
//! spherical Gaussians.
//!
//! Everything rests on one representation and one kernel. A charge distribution (the product of
//! two shells, or a single shell) is a sum of Hermite Gaussians ([`distribution`]). Overlap,
//! kinetic energy and dipole need only its lowest terms ([`one_electron`]); attraction to nuclei,
//! the metric (P|Q) and the three-centre integrals (μν|P) all go through [`kernel`]. What is
//! fitted and stored is described in [`fitted`]. Why this recurrence: `docs/engine.md`.
//!
//! # Conventions
//! Atomic units. Orbital shells to g, auxiliary shells to i. Functions of a shell from m = −l to
//! m = +l, harmonics as in [`crate::basis::harmonics`]. Matrices are functions × functions and
//! exactly symmetric. All results are the same to the last bit for any number of threads.

pub mod coulomb;
pub mod distribution;
pub mod fitted;
pub mod hermite;
pub mod kernel;
pub mod one_electron;
pub mod targets;

pub use coulomb::{coulomb_metric, three_centre};
pub use fitted::FittedPairs;
pub use one_electron::{dipole, kinetic, nuclear_attraction, overlap};

use crate::basis::{Basis, MAX_AUXILIARY_L, MAX_ORBITAL_L};
use crate::numeric::linalg::LinalgError;

/// Why integrals could not be made.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum IntegralError {
    /// A shell of too high an angular momentum.
    #[error("basis '{basis}' has a shell with l = {l}; the highest possible here is {highest}")]
    AngularMomentum {
        /// Name of the basis.
        basis: String,
        /// Angular momentum found.
        l: usize,
        /// Highest supported.
        highest: usize,
    },
    /// The auxiliary functions are linearly dependent.
    #[error("the Coulomb metric of the auxiliary basis '{basis}' cannot be factored: {source}")]
    Metric {
        /// Name of the auxiliary basis.
        basis: String,
        /// What the factorisation said.
        source: LinalgError,
    },
}

/// Checks that an orbital basis can be handled here.
///
/// # Errors
/// If a shell lies beyond g.
pub fn check_orbital(basis: &Basis) -> Result<(), IntegralError> {
    check(basis, MAX_ORBITAL_L)
}

/// Checks that an auxiliary basis can be handled here.
///
/// # Errors
/// If a shell lies beyond i.
pub fn check_auxiliary(basis: &Basis) -> Result<(), IntegralError> {
    check(basis, MAX_AUXILIARY_L)
}

fn check(basis: &Basis, highest: usize) -> Result<(), IntegralError> {
    match basis.shells.iter().map(|s| s.l).max() {
        Some(l) if l > highest => Err(IntegralError::AngularMomentum {
            basis: basis.name.clone(),
            l,
            highest,
        }),
        _ => Ok(()),
    }
}

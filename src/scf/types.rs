//! What goes into a self-consistent-field calculation and what comes out.

use super::{diagonalise, fock};
use crate::basis::Basis;
use crate::integrals::{FittedPairs, IntegralError};
use crate::molecule::Molecule;
use crate::numeric::linalg::LinalgError;
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

impl SpinOrbitals {
    /// The density matrix C·n·Cᵀ of these orbitals.
    pub fn density(&self) -> DMatrix<f64> {
        let mut weighted = self.coefficients.clone();
        for (mut column, &n) in weighted.column_iter_mut().zip(self.occupations.iter()) {
            column *= n;
        }
        weighted * self.coefficients.transpose()
    }
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

impl Orbitals {
    /// Density matrix of all electrons.
    pub fn total_density(&self) -> DMatrix<f64> {
        match self {
            Orbitals::Restricted(both) => both.density(),
            Orbitals::Unrestricted { alpha, beta } => alpha.density() + beta.density(),
        }
    }
}

/// Settings of the iteration.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ScfOptions {
    /// Iterations after which it gives up.
    pub max_iterations: usize,
    /// Largest change of the energy at convergence, hartree.
    pub energy_tolerance_hartree: f64,
    /// Largest element of the orbital gradient at convergence, hartree.
    pub gradient_tolerance_hartree: f64,
    /// Memory that may be taken, bytes.
    pub memory_limit_bytes: u64,
}

impl Default for ScfOptions {
    fn default() -> Self {
        Self {
            max_iterations: 128,
            energy_tolerance_hartree: 1e-9,
            gradient_tolerance_hartree: 1e-7,
            memory_limit_bytes: 16_000_000_000,
        }
    }
}

/// One iteration, as the observer sees it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ScfStep {
    /// From 1.
    pub iteration: usize,
    /// Total energy, hartree.
    pub energy_hartree: f64,
    /// Change since the last iteration, hartree (infinite in the first).
    pub energy_change_hartree: f64,
    /// Largest element of the orbital gradient, hartree.
    pub gradient_hartree: f64,
}

impl ScfStep {
    /// Whether both criteria are met.
    pub fn converged(&self, options: &ScfOptions) -> bool {
        self.energy_change_hartree.abs() <= options.energy_tolerance_hartree
            && self.gradient_hartree <= options.gradient_tolerance_hartree
    }

    pub(super) fn not_converged(&self) -> ScfError {
        ScfError::NotConverged {
            iterations: self.iteration,
            energy_change_hartree: self.energy_change_hartree,
            gradient_hartree: self.gradient_hartree,
        }
    }
}

/// A converged calculation.
#[derive(Debug, Clone, PartialEq)]
pub struct ScfResult {
    /// Orbitals of the converged density's Fock matrix.
    pub orbitals: Orbitals,
    /// Total energy, hartree.
    pub energy_hartree: f64,
    /// Repulsion of the nuclei, hartree.
    pub nuclear_repulsion_hartree: f64,
    /// Iterations taken.
    pub iterations: usize,
    /// Change of the energy in the last iteration, hartree.
    pub energy_change_hartree: f64,
    /// Largest element of the orbital gradient at the end, hartree.
    pub gradient_hartree: f64,
    /// Total dipole moment, debye; the origin is that of the input frame.
    pub dipole_debye: [f64; 3],
    /// Combinations of basis functions that were removed as nearly dependent.
    pub removed_functions: usize,
}

/// Why there is no converged result.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ScfError {
    /// Unpaired electrons.
    #[error(
        "multiplicity {multiplicity} with {electrons} electrons: open shells are not available yet, only closed shells (multiplicity 1, an even number of electrons)"
    )]
    OpenShell {
        /// Multiplicity asked for.
        multiplicity: u32,
        /// Electrons of the molecule.
        electrons: usize,
    },
    /// No electrons at all.
    #[error("the molecule has no electrons")]
    NoElectrons,
    /// The basis belongs to another molecule.
    #[error("basis '{basis}' is laid out for {found} atoms, the molecule has {expected}")]
    WrongAtoms {
        /// Name of the basis.
        basis: String,
        /// Atoms of the basis.
        found: usize,
        /// Atoms of the molecule.
        expected: usize,
    },
    /// More orbitals to occupy than the basis has.
    #[error(
        "{needed} orbitals are occupied but the basis has only {available} independent functions"
    )]
    BasisTooSmall {
        /// Occupied orbitals.
        needed: usize,
        /// Independent functions.
        available: usize,
    },
    /// The calculation would not fit.
    #[error(
        "the calculation needs {:.1} GB of memory ({functions} basis functions, {auxiliaries} auxiliary functions); the limit is {:.1} GB",
        *needed_bytes as f64 / 1e9,
        *limit_bytes as f64 / 1e9
    )]
    Memory {
        /// Bytes needed.
        needed_bytes: u64,
        /// Bytes allowed.
        limit_bytes: u64,
        /// Basis functions.
        functions: usize,
        /// Auxiliary functions.
        auxiliaries: usize,
    },
    /// Integrals could not be made.
    #[error(transparent)]
    Integrals(#[from] IntegralError),
    /// A matrix could not be diagonalised.
    #[error(transparent)]
    Linalg(#[from] LinalgError),
    /// The iteration did not come to rest.
    #[error(
        "not converged after {iterations} iterations: the energy still changed by {energy_change_hartree:.1e} hartree and the orbital gradient was {gradient_hartree:.1e} hartree"
    )]
    NotConverged {
        /// Iterations done.
        iterations: usize,
        /// Last change of the energy, hartree.
        energy_change_hartree: f64,
        /// Largest element of the orbital gradient, hartree.
        gradient_hartree: f64,
    },
}

/// Occupied orbitals of every spin channel: one channel in a closed shell.
pub(super) fn occupied_orbitals(
    molecule: &Molecule,
    basis: &Basis,
) -> Result<Vec<usize>, ScfError> {
    let electrons = molecule.electron_count();
    if electrons == 0 {
        return Err(ScfError::NoElectrons);
    }
    if basis.atom_functions.len() != molecule.atoms.len() {
        return Err(ScfError::WrongAtoms {
            basis: basis.name.clone(),
            found: basis.atom_functions.len(),
            expected: molecule.atoms.len(),
        });
    }
    if molecule.multiplicity != 1 || !electrons.is_multiple_of(2) {
        return Err(ScfError::OpenShell {
            multiplicity: molecule.multiplicity,
            electrons,
        });
    }
    Ok(vec![electrons / 2])
}

pub(super) fn check_size(occupied: &[usize], available: usize) -> Result<(), ScfError> {
    match occupied.iter().max() {
        Some(&needed) if needed > available => Err(ScfError::BasisTooSmall { needed, available }),
        _ => Ok(()),
    }
}

/// Bytes that a calculation with these numbers of occupied orbitals per spin channel (one channel
/// in a closed shell) takes at its largest on the current thread pool: the fitted pairs, the Coulomb metric and its
/// factor, the shares of the Fock build, and some twenty matrices of the size of the basis.
pub fn memory_bytes(basis: &Basis, auxiliary: &Basis, occupied: &[usize]) -> u64 {
    let channels = occupied.len();
    let orbitals = occupied.iter().max().copied().unwrap_or(0);
    let threads = rayon::current_num_threads();
    let (n, m) = (basis.functions as u64, auxiliary.functions as u64);
    FittedPairs::bytes(basis.functions, auxiliary.functions)
        + 8 * (2 * m * m + 20 * channels as u64 * n * n)
        + fock::bytes(basis.functions, orbitals, channels, threads)
}

pub(super) fn check_memory(
    basis: &Basis,
    auxiliary: &Basis,
    occupied: &[usize],
    options: &ScfOptions,
) -> Result<(), ScfError> {
    let needed_bytes = memory_bytes(basis, auxiliary, occupied);
    if needed_bytes > options.memory_limit_bytes {
        return Err(ScfError::Memory {
            needed_bytes,
            limit_bytes: options.memory_limit_bytes,
            functions: basis.functions,
            auxiliaries: auxiliary.functions,
        });
    }
    Ok(())
}

/// All orbitals of the final Fock matrices.
pub(super) fn orbitals(
    x: &DMatrix<f64>,
    focks: &[DMatrix<f64>],
    occupied: &[usize],
) -> Result<Orbitals, ScfError> {
    let electrons = if focks.len() == 1 { 2.0 } else { 1.0 };
    let mut sets = Vec::with_capacity(focks.len());
    for (fock, &count) in focks.iter().zip(occupied) {
        let (energies, coefficients) = diagonalise(x, fock)?;
        let filled = |i, _| if i < count { electrons } else { 0.0 };
        sets.push(SpinOrbitals {
            occupations: DVector::from_fn(energies.len(), filled),
            coefficients,
            energies,
        });
    }
    let beta = (sets.len() > 1).then(|| sets.remove(1));
    let first = sets.remove(0);
    Ok(match beta {
        None => Orbitals::Restricted(first),
        Some(beta) => Orbitals::Unrestricted { alpha: first, beta },
    })
}

//! Density-fitted self-consistent field.
//!
//! [`run`] is the whole method on a page. It is written over spin channels: a closed shell is one
//! channel of doubly occupied orbitals. Building blocks: [`guess`], [`fock`], [`diis`],
//! [`orthogonal`]. Equations: Szabo and Ostlund, Modern Quantum Chemistry, chapter 3.

mod degeneracy;
pub mod diis;
pub mod fock;
pub mod guess;
pub mod orthogonal;
mod steer;
mod types;

pub use degeneracy::DEGENERACY_TOLERANCE_HARTREE;
pub use types::{Orbitals, ScfError, ScfOptions, ScfResult, ScfStep, SpinOrbitals, memory_bytes};

use crate::basis::Basis;
use crate::integrals::{FittedPairs, dipole, kinetic, nuclear_attraction, overlap};
use crate::molecule::Molecule;
use crate::numeric::linalg::{congruence, product, symmetric_eigen, view};
use crate::units::DEBYE_PER_ATOMIC_UNIT;
use nalgebra::{DMatrix, DVector, Vector3};

/// Solves the Hartree-Fock equations of a molecule.
///
/// `observer` is called once per iteration. Closed shells only for now.
///
/// # Errors
/// [`ScfError`]: an open shell, a basis too small, too little memory, integrals that cannot be
/// made, or no convergence.
pub fn run(
    molecule: &Molecule,
    basis: &Basis,
    auxiliary: &Basis,
    options: &ScfOptions,
    observer: &mut dyn FnMut(&ScfStep),
) -> Result<ScfResult, ScfError> {
    let occupied = types::occupied_orbitals(molecule, basis)?;
    types::check_memory(basis, auxiliary, &occupied, options)?;
    let nuclear_repulsion_hartree = molecule.nuclear_repulsion_hartree();
    let s = overlap(basis);
    let core = kinetic(basis) + nuclear_attraction(basis, &charges(molecule));
    let (x, removed) = orthogonal::canonical_orthogonalisation(&s)?;
    types::check_size(&occupied, x.ncols())?;
    let pairs = FittedPairs::new(basis, auxiliary)?;
    let fock_matrices = |channels: &[DMatrix<f64>], density: &Density| -> Vec<_> {
        let repulsion = fock::two_electron(&pairs, channels, density.weight);
        let exchange = repulsion.exchange.iter();
        exchange.map(|k| &core + &repulsion.coulomb - k).collect()
    };

    // The guess is no determinant: it only supplies the first Fock matrix.
    let guess = vec![guess::superposed_atoms(molecule, basis, auxiliary)?; occupied.len()];
    let mut channels = occupy(&x, &fock_matrices(&guess, &Density::of(&guess)), &occupied)?;
    let mut steering = steer::Steering::default();
    let mut last_energy = f64::INFINITY;
    let mut iteration = 0;
    loop {
        iteration += 1;
        let density = Density::of(&channels);
        let focks = fock_matrices(&channels, &density);
        let energy = nuclear_repulsion_hartree + density.electronic_energy(&core, &focks);
        let gradients = density.gradients(&focks, &s, &x);
        let step = ScfStep {
            iteration,
            energy_hartree: energy,
            energy_change_hartree: energy - last_energy,
            gradient_hartree: gradients.iter().map(|g| g.amax()).fold(0.0, f64::max),
        };
        observer(&step);
        let converged = step.converged(options);
        if !converged && (iteration >= options.max_iterations || !energy.is_finite()) {
            return Err(step.not_converged());
        }
        let focks = steering.next(&step, focks, gradients, &density.channels, &s);
        if converged {
            // The extrapolated Fock matrix is closer to the solution than the last one.
            let orbitals = types::orbitals(&x, &focks, &occupied)?;
            return Ok(ScfResult {
                dipole_debye: dipole_moment(molecule, basis, &orbitals.total_density()),
                orbitals,
                energy_hartree: energy,
                nuclear_repulsion_hartree,
                iterations: iteration,
                energy_change_hartree: step.energy_change_hartree,
                gradient_hartree: step.gradient_hartree,
                removed_functions: removed,
            });
        }
        channels = occupy(&x, &focks, &occupied)?;
        last_energy = energy;
    }
}

/// Density matrices of a set of channels; one channel stands for both spins.
struct Density {
    channels: Vec<DMatrix<f64>>,
    /// Electrons per orbital.
    weight: f64,
}

impl Density {
    fn of(channels: &[DMatrix<f64>]) -> Self {
        let densities: Vec<_> = channels
            .iter()
            .map(|c| product(view(c), view(c).transpose()))
            .collect();
        let weight = if densities.len() == 1 { 2.0 } else { 1.0 };
        Self {
            channels: densities,
            weight,
        }
    }

    /// E = ½ Σ_σ tr D_σ (h + F_σ).
    fn electronic_energy(&self, core: &DMatrix<f64>, focks: &[DMatrix<f64>]) -> f64 {
        let of_channel = |(d, f): (&DMatrix<f64>, &DMatrix<f64>)| d.dot(core) + d.dot(f);
        let sum: f64 = self.channels.iter().zip(focks).map(of_channel).sum();
        0.5 * self.weight * sum
    }

    /// The orbital gradient Xᵀ(FDS − SDF)X: the occupied-virtual elements of F, hartree.
    fn gradients(
        &self,
        focks: &[DMatrix<f64>],
        s: &DMatrix<f64>,
        x: &DMatrix<f64>,
    ) -> Vec<DMatrix<f64>> {
        let of_channel = |(f, d): (&DMatrix<f64>, &DMatrix<f64>)| {
            let fx = product(view(f), view(x));
            let dsx = product(view(d), view(&product(view(s), view(x))));
            let half = product(view(&fx).transpose(), view(&dsx));
            &half - half.transpose()
        };
        focks.iter().zip(&self.channels).map(of_channel).collect()
    }
}

/// The lowest orbitals of every channel.
fn occupy(
    x: &DMatrix<f64>,
    focks: &[DMatrix<f64>],
    occupied: &[usize],
) -> Result<Vec<DMatrix<f64>>, ScfError> {
    let lowest = |(fock, &count): (&DMatrix<f64>, &usize)| {
        let (_, c) = diagonalise(x, fock)?;
        Ok(c.columns(0, count).into_owned())
    };
    focks.iter().zip(occupied).map(lowest).collect()
}

/// Solves F C = S C ε in the orthonormal basis X.
fn diagonalise(
    x: &DMatrix<f64>,
    fock: &DMatrix<f64>,
) -> Result<(DVector<f64>, DMatrix<f64>), ScfError> {
    let (energies, vectors) = symmetric_eigen(&congruence(x, fock))?;
    Ok((energies, product(view(x), view(&vectors))))
}

fn charges(molecule: &Molecule) -> Vec<(f64, Vector3<f64>)> {
    let charge = |atom: &crate::molecule::Atom| (f64::from(atom.number), atom.position_bohr);
    molecule.atoms.iter().map(charge).collect()
}

/// Nuclear minus electronic dipole moment, debye; the origin is that of the input frame.
fn dipole_moment(molecule: &Molecule, basis: &Basis, density: &DMatrix<f64>) -> [f64; 3] {
    let electrons = dipole(basis, Vector3::zeros()).map(|r| r.dot(density));
    let mut moment = Vector3::zeros();
    for (z, position) in charges(molecule) {
        moment += position * z;
    }
    moment -= Vector3::from(electrons);
    (moment * DEBYE_PER_ATOMIC_UNIT).into()
}

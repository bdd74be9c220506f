//! Bond orders, counted three ways.

use super::intrinsic::IntrinsicOrbitals;
use crate::basis::Basis;
use crate::levels::{Character, Verdict};
use crate::scf::{Orbitals, SpinOrbitals};
use nalgebra::DMatrix;

/// Mayer's bond order between every two atoms: 2 Σ_σ Σ_{μ∈A,ν∈B} (P^σ S)_μν (P^σ S)_νμ over the
/// spins σ (I. Mayer, Chem. Phys. Lett. 97, 270, 1983). Depends on the basis set where that is
/// large and diffuse. Symmetric; zero diagonal.
pub fn mayer(basis: &Basis, overlap: &DMatrix<f64>, orbitals: &Orbitals) -> DMatrix<f64> {
    let atoms = basis.atom_functions.len();
    let mut orders = DMatrix::zeros(atoms, atoms);
    let spins = orbitals.by_spin();
    // A restricted set stands for two equal spins.
    let weight = if spins.len() == 1 { 2.0 } else { 1.0 };
    for (_, spin) in spins {
        let occupied = spin.coefficients.columns(0, spin.occupied());
        let ps = occupied * (occupied.transpose() * overlap);
        for a in 0..atoms {
            for b in 0..a {
                let mut sum = 0.0;
                for mu in basis.atom_functions[a].clone() {
                    for nu in basis.atom_functions[b].clone() {
                        sum += ps[(mu, nu)] * ps[(nu, mu)];
                    }
                }
                orders[(a, b)] += weight * 2.0 * sum;
                orders[(b, a)] = orders[(a, b)];
            }
        }
    }
    orders
}

/// Wiberg's bond order of a closed shell in the orthonormal intrinsic orbitals: Σ P_μν² (K. B.
/// Wiberg, Tetrahedron 24, 1083, 1968). Hardly depends on the basis set. Zero diagonal.
pub fn wiberg(intrinsic: &IntrinsicOrbitals) -> DMatrix<f64> {
    let density = &intrinsic.orthonormal * intrinsic.orthonormal.transpose() * 2.0;
    let ranges = &intrinsic.minimal.atom_functions;
    DMatrix::from_fn(ranges.len(), ranges.len(), |a, b| {
        if a == b {
            return 0.0;
        }
        let (ra, rb) = (&ranges[a], &ranges[b]);
        density
            .view((ra.start, rb.start), (ra.len(), rb.len()))
            .norm_squared()
    })
}

/// The textbook count, (bonding − antibonding electrons)/2, from the verdicts on one spin's (or a
/// closed shell's) orbitals: all bonds of the molecule together.
pub fn counted(orbitals: &SpinOrbitals, characters: &[Option<Character>]) -> f64 {
    let sign = |character: &Character| match character.verdict {
        Verdict::Bonding => 0.5,
        Verdict::Antibonding => -0.5,
        Verdict::LonePair | Verdict::Nonbonding | Verdict::Mixed => 0.0,
    };
    let occupied = characters.iter().zip(orbitals.occupations.iter());
    occupied
        .filter_map(|(c, n)| c.as_ref().map(|c| n * sign(c)))
        .sum()
}

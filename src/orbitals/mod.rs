//! What orbitals are made of: populations and character.
//!
//! [`characters`] answers, for every occupied valence orbital, which atoms and bonds it lives on
//! and whether it bonds, with the numbers that say so. It works in intrinsic atomic orbitals
//! ([`intrinsic`]), judges degenerate sets as a whole ([`evidence`]), applies a written rule
//! ([`verdict`]) and puts the outcome into words ([`words`]). The rule and its thresholds are
//! explained in `docs/character.md`.

pub mod bond_order;
pub mod evidence;
pub mod frame;
pub mod intrinsic;
pub mod verdict;
pub mod words;

pub use evidence::{BondEvidence, Evidence};
pub use frame::Frame;
pub use intrinsic::IntrinsicOrbitals;

use crate::basis::{Basis, BasisError};
use crate::levels::{AtomShare, BondShare, Character};
use crate::molecule::Molecule;
use crate::numeric::linalg::LinalgError;
use crate::scf::SpinOrbitals;
use nalgebra::DMatrix;
use thiserror::Error;

/// Smallest share of an orbital on an atom that is listed.
pub const LISTED_SHARE: f64 = 0.01;

/// Why no character could be given.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum CharacterError {
    /// The minimal set of atomic orbitals could not be built.
    #[error(transparent)]
    Basis(#[from] BasisError),
    /// More occupied orbitals than the atoms have orbitals of their own.
    #[error(
        "{occupied} occupied orbitals cannot be made of the atoms' {atomic} own orbitals, so their character cannot be named; is the charge right?"
    )]
    TooManyOccupied {
        /// Occupied orbitals.
        occupied: usize,
        /// Orbitals of the free atoms.
        atomic: usize,
    },
    /// An occupied orbital that the atoms' orbitals hardly overlap with.
    #[error(
        "an occupied orbital is not made of the atoms' own orbitals (projection {smallest:.1e}), so its character cannot be named; is the charge right?"
    )]
    NotOfAtoms {
        /// Smallest eigenvalue of the projected overlap.
        smallest: f64,
    },
    /// The overlap of the basis cannot be factored.
    #[error(
        "the basis functions are linearly dependent, so populations cannot be computed; choose a smaller basis"
    )]
    DependentBasis,
    /// Eigenvalues could not be found.
    #[error(transparent)]
    Linalg(#[from] LinalgError),
}

/// Character of every orbital of one spin (or of a closed shell): one entry per orbital, `None`
/// for core and empty ones. All members of a degenerate set get the same character.
///
/// `overlap` is that of `basis`; orbitals are in order of rising energy, occupied ones first.
pub fn characters(
    molecule: &Molecule,
    basis: &Basis,
    overlap: &DMatrix<f64>,
    orbitals: &SpinOrbitals,
) -> Result<Vec<Option<Character>>, CharacterError> {
    let mut characters = vec![None; orbitals.energies.len()];
    let all_evidence = evidence(molecule, basis, overlap, orbitals)?;
    let frame = Frame::of(molecule);
    let sets = all_evidence.len();
    for (i, evidence) in all_evidence.iter().enumerate() {
        let character = character(molecule, &frame, evidence, sets - 1 - i);
        for orbital in evidence.orbitals.clone() {
            characters[orbital] = Some(character.clone());
        }
    }
    Ok(characters)
}

/// The evidence behind [`characters`], one entry per set of valence orbitals by rising energy.
pub fn evidence(
    molecule: &Molecule,
    basis: &Basis,
    overlap: &DMatrix<f64>,
    orbitals: &SpinOrbitals,
) -> Result<Vec<Evidence>, CharacterError> {
    let valence = molecule.core_orbital_count()..orbitals.occupied();
    if valence.is_empty() {
        return Ok(Vec::new());
    }
    let intrinsic = IntrinsicOrbitals::new(molecule, basis, overlap, orbitals)?;
    let inside = |set: &std::ops::Range<usize>| {
        let cut = set.start.max(valence.start)..set.end.min(valence.end);
        (!cut.is_empty()).then_some(cut)
    };
    let sets: Vec<_> = orbitals
        .degenerate_sets()
        .iter()
        .filter_map(inside)
        .collect();
    Ok(evidence::gather(
        molecule,
        &Frame::of(molecule),
        &intrinsic,
        &sets,
    ))
}

fn character(
    molecule: &Molecule,
    frame: &Frame,
    evidence: &Evidence,
    below_homo: usize,
) -> Character {
    let verdict = verdict::verdict(evidence);
    let mut atoms: Vec<AtomShare> = evidence
        .atom_shares
        .iter()
        .enumerate()
        .filter(|&(_, &share)| share >= LISTED_SHARE)
        .map(|(atom, &share)| AtomShare {
            atom,
            name: molecule.atom_name(atom),
            share,
        })
        .collect();
    // Equal members keep the order of the file: rounding noise must not decide.
    let rank = |value: f64| (value.abs() * 1e6).round();
    atoms.sort_by(|a, b| rank(b.share).total_cmp(&rank(a.share)));
    let mut bonds: Vec<BondShare> = evidence
        .bonds
        .iter()
        .map(|bond| BondShare {
            atoms: bond.atoms,
            name: molecule.bond_name(bond.atoms),
            overlap_population: bond.overlap_population,
        })
        .collect();
    bonds.sort_by(|a, b| rank(b.overlap_population).total_cmp(&rank(a.overlap_population)));
    Character {
        verdict,
        description: words::describe(molecule, frame, evidence, verdict, below_homo),
        net_overlap_population: evidence.net_overlap_population,
        atoms,
        bonds,
    }
}

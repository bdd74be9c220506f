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
pub mod irreps;
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
    /// The free-atom orbitals themselves are linearly dependent.
    #[error("two atoms are so close that their orbitals cannot be told apart")]
    CoincidentAtoms,
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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::integrals::{kinetic, nuclear_attraction, overlap};
    use crate::levels::Verdict;
    use crate::numeric::linalg::{congruence, symmetric_eigen};
    use nalgebra::{DVector, Rotation3, Vector3};

    /// Orbitals without electron repulsion: exact for one electron, and a stand-in with the right
    /// symmetry and orthonormality otherwise.
    fn bare_orbitals(
        molecule: &Molecule,
        name: &str,
    ) -> (Basis, DMatrix<f64>, SpinOrbitals, DMatrix<f64>) {
        let basis = Basis::bundled(molecule, name).unwrap();
        let s = overlap(&basis);
        let charges: Vec<_> = molecule
            .atoms
            .iter()
            .map(|a| (f64::from(a.number), a.position_bohr))
            .collect();
        let h = kinetic(&basis) + nuclear_attraction(&basis, &charges);
        let (values, vectors) = symmetric_eigen(&s).unwrap();
        let x = &vectors * DMatrix::from_diagonal(&values.map(|v| v.powf(-0.5)));
        let (energies, rotated) = symmetric_eigen(&congruence(&x, &h)).unwrap();
        let electrons = if molecule.is_closed_shell() { 2.0 } else { 1.0 };
        let occupied = molecule.spin_electrons().0;
        let occupations =
            DVector::from_fn(
                energies.len(),
                |i, _| if i < occupied { electrons } else { 0.0 },
            );
        let coefficients = x * rotated;
        (
            basis,
            s,
            SpinOrbitals {
                coefficients,
                energies,
                occupations,
            },
            h,
        )
    }

    fn read(xyz: &str, charge: i32) -> Molecule {
        let text = format!("{}\n\n{xyz}", xyz.lines().count());
        Molecule::from_xyz(&text, "test", charge, None).unwrap()
    }

    const WATER: &str = "O 0 0 0\nH 0 0.7569 -0.5859\nH 0 -0.7569 -0.5859";

    #[test]
    fn intrinsic_orbitals_hold_the_occupied_space_exactly() {
        let water = read(WATER, 0);
        for name in ["6-31g*", "def2-svp", "cc-pvtz"] {
            let (basis, s, orbitals, h) = bare_orbitals(&water, name);
            let intrinsic = IntrinsicOrbitals::new(&water, &basis, &s, &orbitals).unwrap();
            let identity = DMatrix::identity(5, 5);
            let (c, o) = (&intrinsic.coefficients, &intrinsic.orthonormal);
            assert!((o.transpose() * o - &identity).amax() < 1e-10, "{name}");
            let norm = c.transpose() * &intrinsic.overlap * c;
            assert!((norm - &identity).amax() < 1e-10, "{name}");
            // The Fock matrix (here: the bare Hamiltonian) has its own energies in that space.
            let energies = o.transpose() * &intrinsic.fock * o;
            let occupied = orbitals.coefficients.columns(0, 5);
            let expected = occupied.transpose() * h * occupied;
            assert!((energies - expected).amax() < 1e-9, "{name}");
            for i in 0..5 {
                assert!((intrinsic.atom_shares(i).sum() - 1.0).abs() < 1e-10);
            }
        }
    }

    #[test]
    fn one_electron_bonds_in_the_hydrogen_molecule_ion() {
        let ion = read("H 0 0 0\nH 0 0 1.057", 1);
        let (basis, s, orbitals, _) = bare_orbitals(&ion, "cc-pvtz");
        // E = −1.1026 hartree at 2 bohr with 1/R, so ε = −1.1026 (D. R. Bates et al., Phil.
        // Trans. R. Soc. A 246, 215, 1953; memory).
        assert!(
            (orbitals.energies[0] + 1.1026).abs() < 2e-3,
            "{}",
            orbitals.energies[0]
        );
        let list = characters(&ion, &basis, &s, &orbitals).unwrap();
        let bond = list[0].as_ref().unwrap();
        assert_eq!(bond.verdict, Verdict::Bonding);
        assert_eq!(bond.description, "σ bonding: H–H; HOMO");
        assert!(list[1..].iter().all(Option::is_none));
        // By symmetry half on each atom; one bond: net = 4·½·S/(1+S) with S of the two orbitals.
        assert!((bond.atoms[0].share - 0.5).abs() < 1e-10);
        let intrinsic = IntrinsicOrbitals::new(&ion, &basis, &s, &orbitals).unwrap();
        let small = intrinsic.overlap[(0, 1)];
        assert!((bond.net_overlap_population - 2.0 * small / (1.0 + small)).abs() < 1e-10);
    }

    #[test]
    fn evidence_feels_neither_motion_nor_rotation_inside_a_degenerate_set() {
        let methane = "C 0 0 0\nH 0.6276 0.6276 0.6276\nH -0.6276 -0.6276 0.6276\n\
                       H -0.6276 0.6276 -0.6276\nH 0.6276 -0.6276 -0.6276";
        let methane = read(methane, 0);
        let (basis, s, orbitals, _) = bare_orbitals(&methane, "def2-svp");
        let plain = evidence(&methane, &basis, &s, &orbitals).unwrap();
        let sizes: Vec<usize> = plain.iter().map(|e| e.orbitals.len()).collect();
        assert_eq!(sizes, [1, 3]);

        let turn = Rotation3::from_euler_angles(0.7, -0.4, 1.9);
        let moved = methane.moved(&turn, Vector3::new(1.0, -2.0, 0.5));
        let (basis_2, s_2, orbitals_2, _) = bare_orbitals(&moved, "def2-svp");
        let turned = evidence(&moved, &basis_2, &s_2, &orbitals_2).unwrap();

        let mut mixed = orbitals.clone();
        let set = plain[1].orbitals.clone();
        let members = orbitals.coefficients.columns(set.start, 3) * turn.matrix();
        mixed
            .coefficients
            .columns_mut(set.start, 3)
            .copy_from(&members);
        let mixed = evidence(&methane, &basis, &s, &mixed).unwrap();

        for other in [turned, mixed] {
            for (a, b) in plain.iter().zip(&other) {
                assert!((a.net_overlap_population - b.net_overlap_population).abs() < 1e-8);
                assert!((a.s_share - b.s_share).abs() < 1e-8);
                for (x, y) in a.atom_shares.iter().zip(&b.atom_shares) {
                    assert!((x - y).abs() < 1e-8);
                }
                for (x, y) in a.bonds.iter().zip(&b.bonds) {
                    assert!((x.overlap_population - y.overlap_population).abs() < 1e-8);
                    assert!((x.pi_part - y.pi_part).abs() < 1e-8);
                    assert!((x.interaction_ev - y.interaction_ev).abs() < 1e-6);
                }
            }
        }
    }

    #[test]
    fn too_many_electrons_for_the_atoms_are_refused() {
        let helium = read("He 0 0 0", -2);
        let (basis, s, orbitals, _) = bare_orbitals(&helium, "def2-svp");
        let error = characters(&helium, &basis, &s, &orbitals).unwrap_err();
        assert_eq!(
            error,
            CharacterError::TooManyOccupied {
                occupied: 2,
                atomic: 1
            }
        );
    }

    #[test]
    fn reflection_splits_water_into_one_pi_and_sigma_orbitals() {
        let water = read(WATER, 0);
        let (basis, s, orbitals, _) = bare_orbitals(&water, "def2-svp");
        let pi: Vec<f64> = evidence(&water, &basis, &s, &orbitals)
            .unwrap()
            .iter()
            .map(|e| e.pi_share.unwrap())
            .collect();
        assert!(
            pi.iter().all(|x| x.abs() < 1e-8 || (x - 1.0).abs() < 1e-8),
            "{pi:?}"
        );
        assert!((pi.iter().sum::<f64>() - 1.0).abs() < 1e-8, "{pi:?}");
    }
}

//! The numbers behind a verdict, for one orbital or one degenerate set.
//!
//! Everything here is an average over the members of the set, which is the same for every choice
//! of members inside it.

use super::frame::{Frame, pi_shares, turn_to_z};
use super::intrinsic::IntrinsicOrbitals;
use crate::basis::harmonics::turned_harmonics;
use crate::molecule::Molecule;
use crate::units::hartree_to_ev;
use nalgebra::DMatrix;
use std::ops::Range;

/// What is known about an orbital (or the average member of a degenerate set).
#[derive(Debug, Clone, PartialEq)]
pub struct Evidence {
    /// The orbitals, counted from 0 with the core.
    pub orbitals: Range<usize>,
    /// Share on every atom; sums to 1.
    pub atom_shares: Vec<f64>,
    /// Overlap population summed over all pairs of atoms, electrons per electron pair.
    pub net_overlap_population: f64,
    /// One entry per bonded pair, by atom numbers.
    pub bonds: Vec<BondEvidence>,
    /// Share of the orbital that is π in the frame of a linear or planar molecule.
    pub pi_share: Option<f64>,
    /// Share of s functions.
    pub s_share: f64,
}

/// What is known about an orbital in one bond.
#[derive(Debug, Clone, PartialEq)]
pub struct BondEvidence {
    /// The atoms, from 0.
    pub atoms: [usize; 2],
    /// Overlap population, electrons per electron pair.
    pub overlap_population: f64,
    /// The part of it that is π about the bond itself.
    pub pi_part: f64,
    /// What the orbital's energy owes to mixing across the bond, eV; negative holds together.
    pub interaction_ev: f64,
}

impl Evidence {
    /// Sum of the overlap populations over the bonded pairs alone.
    pub fn bonded_overlap_population(&self) -> f64 {
        self.bonds.iter().map(|b| b.overlap_population).sum()
    }

    /// Sum of the interaction energies over the bonded pairs, eV.
    pub fn bond_interaction_ev(&self) -> f64 {
        self.bonds.iter().map(|b| b.interaction_ev).sum()
    }

    /// Largest share on one atom.
    pub fn largest_share(&self) -> f64 {
        self.atom_shares.iter().copied().fold(0.0, f64::max)
    }
}

/// Gathers the evidence for every given set of occupied orbitals.
pub fn gather(
    molecule: &Molecule,
    frame: &Frame,
    intrinsic: &IntrinsicOrbitals,
    sets: &[Range<usize>],
) -> Vec<Evidence> {
    let pi = pi_shares(frame, intrinsic);
    let pairs = molecule.bonded_pairs();
    let bond_frames: Vec<BondFrame> = pairs
        .iter()
        .map(|p| BondFrame::new(molecule, intrinsic, p.atoms))
        .collect();
    let one_set = |set: &Range<usize>| {
        let weight = 1.0 / set.len() as f64;
        let mut evidence = Evidence {
            orbitals: set.clone(),
            atom_shares: vec![0.0; molecule.atoms.len()],
            net_overlap_population: 0.0,
            bonds: pairs
                .iter()
                .map(|p| BondEvidence {
                    atoms: p.atoms,
                    overlap_population: 0.0,
                    pi_part: 0.0,
                    interaction_ev: 0.0,
                })
                .collect(),
            pi_share: pi.as_ref().map(|_| 0.0),
            s_share: 0.0,
        };
        for i in set.clone() {
            let shares = intrinsic.atom_shares(i);
            for (sum, share) in evidence.atom_shares.iter_mut().zip(shares.iter()) {
                *sum += weight * share;
            }
            let populations = intrinsic.overlap_populations(i);
            let interaction = intrinsic.interaction_hartree(i);
            evidence.net_overlap_population += weight * populations.lower_triangle().sum();
            for (bond, bond_frame) in evidence.bonds.iter_mut().zip(&bond_frames) {
                let [a, b] = bond.atoms;
                bond.overlap_population += weight * populations[(a, b)];
                bond.interaction_ev += weight * hartree_to_ev(interaction[(a, b)]);
                bond.pi_part += weight * bond_frame.pi_population(intrinsic, i);
            }
            if let (Some(sum), Some(pi)) = (evidence.pi_share.as_mut(), pi.as_ref()) {
                *sum += weight * pi[i];
            }
            let s_shells = intrinsic.minimal.shells.iter().filter(|s| s.l == 0);
            evidence.s_share += weight
                * s_shells
                    .map(|s| intrinsic.orthonormal[(s.first, i)].powi(2))
                    .sum::<f64>();
        }
        evidence
    };
    sets.iter().map(one_set).collect()
}

/// The functions of two bonded atoms turned so that the bond is z, with the overlap block between
/// all functions that are not σ about it.
struct BondFrame {
    ranges: [Range<usize>; 2],
    turns: [DMatrix<f64>; 2],
    pi_overlap: DMatrix<f64>,
}

impl BondFrame {
    fn new(molecule: &Molecule, intrinsic: &IntrinsicOrbitals, atoms: [usize; 2]) -> BondFrame {
        let position = |k: usize| molecule.atoms[atoms[k]].position_bohr;
        let turn = turn_to_z(&(position(1) - position(0)).normalize());
        let ranges = atoms.map(|a| intrinsic.minimal.atom_functions[a].clone());
        let mut turns = [0, 1].map(|k| DMatrix::zeros(ranges[k].len(), ranges[k].len()));
        let mut sigma = [0, 1].map(|k| vec![false; ranges[k].len()]);
        for shell in &intrinsic.minimal.shells {
            for k in 0..2 {
                if shell.atom == atoms[k] {
                    let at = shell.first - ranges[k].start;
                    turns[k]
                        .view_mut((at, at), (shell.len(), shell.len()))
                        .copy_from(&turned_harmonics(shell.l, &turn));
                    sigma[k][at + shell.l] = true;
                }
            }
        }
        let block = intrinsic.overlap.view(
            (ranges[0].start, ranges[1].start),
            (ranges[0].len(), ranges[1].len()),
        );
        let mut pi_overlap = &turns[0] * block * turns[1].transpose();
        for (i, &sigma_0) in sigma[0].iter().enumerate() {
            for (j, &sigma_1) in sigma[1].iter().enumerate() {
                if sigma_0 || sigma_1 {
                    pi_overlap[(i, j)] = 0.0;
                }
            }
        }
        BondFrame {
            ranges,
            turns,
            pi_overlap,
        }
    }

    fn pi_population(&self, intrinsic: &IntrinsicOrbitals, orbital: usize) -> f64 {
        let column = intrinsic.coefficients.column(orbital);
        let turned = [0, 1].map(|k| {
            let range = &self.ranges[k];
            &self.turns[k] * column.rows(range.start, range.len())
        });
        4.0 * (turned[0].transpose() * &self.pi_overlap * &turned[1])[(0, 0)]
    }
}

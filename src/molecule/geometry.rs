//! What follows from the nuclei alone: formula, electrons, repulsion, bonds.

use super::{Molecule, core_orbitals, covalent_radius_angstrom};
use crate::units::{angstrom_to_bohr, bohr_to_angstrom};
use nalgebra::Vector3;
use std::collections::BTreeMap;

/// Two atoms count as bonded when they are closer than the sum of their covalent radii plus this, Å.
///
/// 0.45 Å takes in the long bonds (H–H of H2⁺ is 0.44 Å longer than its sum, N–N of N2O4 0.36, F–F
/// 0.27) and leaves out the shortest second neighbours (C···C across cyclobutane 0.63, H···H of
/// water 0.89, F···F of tetrafluoromethane 1.02); bond lengths from memory.
pub const BOND_SLACK_ANGSTROM: f64 = 0.45;

/// Two bonded atoms.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct BondedPair {
    /// The atoms, from 0, the lower index first.
    pub atoms: [usize; 2],
    /// Distance, Å.
    pub length_angstrom: f64,
}

impl Molecule {
    /// Formula in Hill's order: C, H, then the rest by the alphabet; all by the alphabet when
    /// there is no carbon. The charge follows as `+`, `2+`, `-`.
    pub fn formula(&self) -> String {
        let mut counts: BTreeMap<&str, usize> = BTreeMap::new();
        for atom in &self.atoms {
            *counts.entry(atom.symbol()).or_default() += 1;
        }
        let mut parts = Vec::new();
        if counts.contains_key("C") {
            for first in ["C", "H"] {
                parts.extend(counts.remove(first).map(|n| (first, n)));
            }
        }
        parts.extend(counts);
        let mut formula = String::new();
        for (symbol, n) in parts {
            formula += symbol;
            if n > 1 {
                formula += &n.to_string();
            }
        }
        if self.charge != 0 {
            if self.charge.abs() > 1 {
                formula += &format!(" {}", self.charge.abs());
            }
            formula.push(if self.charge > 0 { '+' } else { '-' });
        }
        formula
    }

    /// Sum of the nuclear charges.
    pub fn nuclear_charge(&self) -> i64 {
        self.atoms.iter().map(|a| i64::from(a.number)).sum()
    }

    /// Number of electrons: nuclear charges minus the total charge (0 if the charge exceeds them).
    pub fn electron_count(&self) -> usize {
        usize::try_from(self.nuclear_charge() - i64::from(self.charge)).unwrap_or(0)
    }

    /// Spin-up and spin-down electrons: their difference is the multiplicity less one.
    pub fn spin_electrons(&self) -> (usize, usize) {
        let electrons = self.electron_count();
        let unpaired = self.multiplicity.saturating_sub(1) as usize;
        let beta = electrons.saturating_sub(unpaired) / 2;
        (electrons - beta, beta)
    }

    /// Whether all electrons are paired.
    pub fn is_closed_shell(&self) -> bool {
        self.multiplicity == 1
    }

    /// Repulsion of the nuclei, hartree: Σ_{A<B} Z_A Z_B / R_AB.
    pub fn nuclear_repulsion_hartree(&self) -> f64 {
        let mut sum = 0.0;
        for (i, a) in self.atoms.iter().enumerate() {
            for b in &self.atoms[..i] {
                let r = (a.position_bohr - b.position_bohr).norm();
                sum += f64::from(a.number) * f64::from(b.number) / r;
            }
        }
        sum
    }

    /// Number of core orbitals of the whole molecule (see [`core_orbitals`]), never more than it
    /// has electron pairs.
    pub fn core_orbital_count(&self) -> usize {
        let cores: usize = self.atoms.iter().map(|a| core_orbitals(a.number)).sum();
        cores.min(self.spin_electrons().1)
    }

    /// Distance of two atoms, Å.
    pub fn distance_angstrom(&self, a: usize, b: usize) -> f64 {
        bohr_to_angstrom((self.atoms[a].position_bohr - self.atoms[b].position_bohr).norm())
    }

    /// Pairs of atoms closer than the sum of their covalent radii plus [`BOND_SLACK_ANGSTROM`], by
    /// rising atom numbers.
    pub fn bonded_pairs(&self) -> Vec<BondedPair> {
        let mut pairs = Vec::new();
        for a in 0..self.atoms.len() {
            for b in a + 1..self.atoms.len() {
                let radius = |i: usize| covalent_radius_angstrom(self.atoms[i].number);
                let Some((ra, rb)) = radius(a).zip(radius(b)) else {
                    continue;
                };
                let length_angstrom = self.distance_angstrom(a, b);
                if length_angstrom < ra + rb + BOND_SLACK_ANGSTROM {
                    pairs.push(BondedPair {
                        atoms: [a, b],
                        length_angstrom,
                    });
                }
            }
        }
        pairs
    }

    /// Element and number from 1, for example `S1`.
    pub fn atom_name(&self, atom: usize) -> String {
        format!("{}{}", self.atoms[atom].symbol(), atom + 1)
    }

    /// The two names of a pair joined by a dash, for example `S1–H2`.
    pub fn bond_name(&self, atoms: [usize; 2]) -> String {
        format!("{}–{}", self.atom_name(atoms[0]), self.atom_name(atoms[1]))
    }

    /// Positions of all atoms, Å.
    pub fn positions_angstrom(&self) -> Vec<Vector3<f64>> {
        self.atoms
            .iter()
            .map(|a| a.position_bohr.map(bohr_to_angstrom))
            .collect()
    }

    /// The same molecule moved and turned: x → rotation·x + shift (Å).
    pub fn moved(
        &self,
        rotation: &nalgebra::Rotation3<f64>,
        shift_angstrom: Vector3<f64>,
    ) -> Molecule {
        let mut moved = self.clone();
        for atom in &mut moved.atoms {
            atom.position_bohr =
                rotation * atom.position_bohr + shift_angstrom.map(angstrom_to_bohr);
        }
        moved
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn molecule(xyz: &str, charge: i32) -> Molecule {
        let lines = xyz.lines().count();
        Molecule::from_xyz(&format!("{lines}\n\n{xyz}"), "test.xyz", charge, None).unwrap()
    }

    const WATER: &str = "O 0 0 0.119262\nH 0 0.763239 -0.477047\nH 0 -0.763239 -0.477047";

    #[test]
    fn formulas_follow_hill() {
        assert_eq!(molecule(WATER, 0).formula(), "H2O");
        assert_eq!(molecule(WATER, 1).formula(), "H2O+");
        assert_eq!(molecule(WATER, 2).formula(), "H2O 2+");
        assert_eq!(molecule("Cl 0 0 0\nH 0 0 1.27", 0).formula(), "ClH");
        assert_eq!(
            molecule("Br 0 0 1.9\nC 0 0 0\nH 1 0 -0.4\nH -1 0 -0.4", -1).formula(),
            "CH2Br-"
        );
    }

    #[test]
    fn repulsion_of_hydrogen_is_one_over_r() {
        let h2 = molecule("H 0 0 0\nH 0 0 0.529177210903", 0);
        assert!((h2.nuclear_repulsion_hartree() - 1.0).abs() < 1e-14);
    }

    #[test]
    fn repulsion_does_not_feel_motion() {
        let water = molecule(WATER, 0);
        let turned = water.moved(
            &nalgebra::Rotation3::from_euler_angles(0.3, -1.1, 2.0),
            Vector3::new(4.0, -3.0, 1.5),
        );
        let change = water.nuclear_repulsion_hartree() - turned.nuclear_repulsion_hartree();
        assert!(change.abs() < 1e-12);
    }

    #[test]
    fn electrons_and_cores_are_counted() {
        let water = molecule(WATER, 0);
        assert_eq!(water.electron_count(), 10);
        assert_eq!(water.spin_electrons(), (5, 5));
        assert_eq!(water.core_orbital_count(), 1);
        let cation = molecule(WATER, 1);
        assert_eq!((cation.multiplicity, cation.spin_electrons()), (2, (5, 4)));
        // A bare lithium cation keeps no valence pair, and never more core than pairs.
        let beryllium = molecule("Be 0 0 0", 2);
        assert_eq!(beryllium.core_orbital_count(), 1);
        assert_eq!(molecule("Br 0 0 0\nH 0 0 1.41", 0).core_orbital_count(), 14);
    }

    #[test]
    fn bonds_are_those_of_the_structural_formula() {
        let water = molecule(WATER, 0);
        let pairs: Vec<_> = water.bonded_pairs().iter().map(|p| p.atoms).collect();
        assert_eq!(pairs, [[0, 1], [0, 2]]);
        assert_eq!(water.bond_name([0, 1]), "O1–H2");
        let fluorine = molecule("F 0 0 0\nF 0 0 1.41", 0);
        assert_eq!(fluorine.bonded_pairs().len(), 1);
        let cyclobutane = molecule("C 0 0 0\nC 1.52 0 0\nC 1.52 1.52 0\nC 0 1.52 0", 0);
        assert_eq!(cyclobutane.bonded_pairs().len(), 4);
        assert_eq!(molecule("H 0 0 0\nH 0 0 1.057", 1).bonded_pairs().len(), 1);
    }
}

//! Contracted spherical Gaussian shells: bundled sets, and a set put on a molecule.
//!
//! A [`BasisSet`] is what was published, per element and with its literature; a [`Basis`] is a set
//! put on the atoms of a molecule. General contractions become one shell per contraction and SP
//! shells are split, so every [`Shell`] has one angular momentum and one list of coefficients.
//! All functions are spherical, also the d functions of 6-31G*.

mod data;
pub mod harmonics;
mod minimal;
mod set;

pub use data::{BUNDLED, canonical_name, correlation_auxiliary, default_auxiliary};
pub use minimal::{MINIMAL_NAME, minimal_set};
pub use set::{BasisSet, ElementBasis, RawShell, Role};

use crate::molecule::{Molecule, symbol};
use nalgebra::Vector3;
use std::f64::consts::PI;
use std::ops::Range;
use thiserror::Error;

/// Highest angular momentum of an orbital shell (g).
pub const MAX_ORBITAL_L: usize = 4;
/// Highest angular momentum of an auxiliary shell (i, which transition metals need).
pub const MAX_AUXILIARY_L: usize = 6;

/// A contracted shell of 2l + 1 real spherical Gaussians on one centre.
///
/// χ_m(r) = Σ_k c_k · S_lm(r − R) · exp(−α_k |r − R|²), m = −l … +l, where S_lm is the real
/// solid harmonic normalised so that Σ_m S_lm² = r^{2l} × (2l+1)/(4π). Coefficients include the
/// normalisation, so that ⟨χ_m|χ_m⟩ = 1.
#[derive(Debug, Clone, PartialEq)]
pub struct Shell {
    /// Index of the atom that carries it.
    pub atom: usize,
    /// Centre, bohr.
    pub centre_bohr: Vector3<f64>,
    /// Angular momentum l.
    pub l: usize,
    /// Exponents α_k, bohr⁻².
    pub exponents: Vec<f64>,
    /// Coefficients c_k with all normalisation in them.
    pub coefficients: Vec<f64>,
    /// Index of its first function in the basis.
    pub first: usize,
}

impl Shell {
    /// Number of functions, 2l + 1.
    pub fn len(&self) -> usize {
        2 * self.l + 1
    }

    /// A shell always has functions; kept for symmetry with `len`.
    pub fn is_empty(&self) -> bool {
        false
    }

    /// Range of its functions in the basis.
    pub fn functions(&self) -> Range<usize> {
        self.first..self.first + self.len()
    }

    /// ⟨χ_m|χ_m⟩, the same for every m; 1 but for rounding.
    pub fn self_overlap(&self) -> f64 {
        let mut sum = 0.0;
        for (&a, &ca) in self.exponents.iter().zip(&self.coefficients) {
            for (&b, &cb) in self.exponents.iter().zip(&self.coefficients) {
                sum += ca * cb * radial_moment(self.l, a + b);
            }
        }
        sum
    }
}

/// A basis set put on the atoms of a molecule.
#[derive(Debug, Clone, PartialEq)]
pub struct Basis {
    /// Canonical lower-case name of the set.
    pub name: String,
    /// Shells, atom by atom; `first` rises without gaps.
    pub shells: Vec<Shell>,
    /// Total number of functions.
    pub functions: usize,
    /// For each atom the half-open range of its functions.
    pub atom_functions: Vec<Range<usize>>,
}

/// Why a basis could not be had.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum BasisError {
    /// No bundled set has that name.
    #[error("unknown basis set '{found}'; did you mean '{nearest}'? Known: {known}")]
    UnknownSet {
        /// Name asked for.
        found: String,
        /// Closest known name.
        nearest: String,
        /// All known names.
        known: String,
    },
    /// A set that fits densities was asked to hold orbitals, or the other way round.
    #[error("'{set}' is an {actual} basis; expected an {wanted} basis such as '{example}'")]
    WrongRole {
        /// Name of the set.
        set: String,
        /// Its role.
        actual: Role,
        /// The role needed.
        wanted: Role,
        /// A name that would fit.
        example: &'static str,
    },
    /// The set does not reach an element of the molecule.
    #[error("basis set '{set}' has no functions for {symbol}; it covers {covered}")]
    MissingElement {
        /// Name of the set.
        set: String,
        /// Element symbol.
        symbol: String,
        /// Elements that the set covers, as ranges.
        covered: String,
    },
    /// A shell beyond what the integrals handle.
    #[error(
        "basis set '{set}' has functions of l = {l} on {symbol}; the highest supported is l = {highest}"
    )]
    AngularMomentum {
        /// Name of the set.
        set: String,
        /// Element symbol.
        symbol: String,
        /// Angular momentum found.
        l: usize,
        /// Highest supported in that role.
        highest: usize,
    },
    /// Text of a basis file that cannot be read.
    #[error("{file}, line {line}: found '{found}'; expected {expected}")]
    BadData {
        /// File or set.
        file: String,
        /// Line from 1.
        line: usize,
        /// What stands there.
        found: String,
        /// What should stand there.
        expected: &'static str,
    },
}

impl Basis {
    /// Puts a set on the atoms of a molecule.
    pub fn new(molecule: &Molecule, set: &BasisSet) -> Result<Basis, BasisError> {
        let highest = match set.role {
            Role::Orbital => MAX_ORBITAL_L,
            Role::Auxiliary => MAX_AUXILIARY_L,
        };
        let mut basis = Basis {
            name: set.name.clone(),
            shells: Vec::new(),
            functions: 0,
            atom_functions: Vec::with_capacity(molecule.atoms.len()),
        };
        for (index, atom) in molecule.atoms.iter().enumerate() {
            let element_symbol = || symbol(atom.number).unwrap_or("?").to_string();
            let element = set
                .element(atom.number)
                .ok_or_else(|| BasisError::MissingElement {
                    set: set.name.clone(),
                    symbol: element_symbol(),
                    covered: set.covered(),
                })?;
            let start = basis.functions;
            for raw in &element.shells {
                if raw.l > highest {
                    return Err(BasisError::AngularMomentum {
                        set: set.name.clone(),
                        symbol: element_symbol(),
                        l: raw.l,
                        highest,
                    });
                }
                let shell = normalised_shell(raw, index, atom.position_bohr, basis.functions);
                basis.functions += shell.len();
                basis.shells.push(shell);
            }
            basis.atom_functions.push(start..basis.functions);
        }
        Ok(basis)
    }

    /// A bundled set, by name, put on the atoms of a molecule.
    pub fn bundled(molecule: &Molecule, name: &str) -> Result<Basis, BasisError> {
        Basis::new(molecule, &BasisSet::bundled(name)?)
    }

    /// For each function the index of its atom.
    pub fn atom_of_function(&self) -> Vec<usize> {
        let mut atoms = Vec::with_capacity(self.functions);
        for (atom, range) in self.atom_functions.iter().enumerate() {
            atoms.extend(range.clone().map(|_| atom));
        }
        atoms
    }
}

/// Turns published coefficients, which refer to normalised primitives, into coefficients of
/// S_lm·exp(−αr²), and normalises the contraction.
fn normalised_shell(raw: &RawShell, atom: usize, centre_bohr: Vector3<f64>, first: usize) -> Shell {
    let primitive_norm = |a: f64| 1.0 / radial_moment(raw.l, 2.0 * a).sqrt();
    let coefficients: Vec<f64> = raw
        .exponents
        .iter()
        .zip(&raw.coefficients)
        .map(|(&a, &c)| c * primitive_norm(a))
        .collect();
    let exponents = raw.exponents.clone();
    let mut shell = Shell {
        atom,
        centre_bohr,
        l: raw.l,
        exponents,
        coefficients,
        first,
    };
    let norm = shell.self_overlap().sqrt();
    shell.coefficients.iter_mut().for_each(|c| *c /= norm);
    shell
}

/// ∫₀^∞ r^{2l+2} exp(−p r²) dr = Γ(l + 3/2) / (2 p^{l+3/2}) (W. Gröbner and N. Hofreiter's table,
/// memory), the radial part of a product of two S_lm Gaussians on one centre.
fn radial_moment(l: usize, p: f64) -> f64 {
    let mut gamma = PI.sqrt() / 2.0;
    for k in 1..=l {
        gamma *= k as f64 + 0.5;
    }
    gamma / (2.0 * p.powi(l as i32) * p * p.sqrt())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::molecule::Atom;

    fn atom(number: u8) -> Molecule {
        let atoms = vec![Atom {
            number,
            position_bohr: Vector3::zeros(),
        }];
        Molecule {
            name: "atom".into(),
            atoms,
            charge: 0,
            multiplicity: 1,
        }
    }

    #[test]
    fn every_bundled_shell_is_normalised() {
        let mut shells = 0;
        for name in BUNDLED {
            let set = BasisSet::bundled(name).unwrap();
            for z in 1..=36 {
                if set.element(z).is_none() {
                    continue;
                }
                match Basis::new(&atom(z), &set) {
                    Ok(basis) => {
                        for shell in &basis.shells {
                            let error = (shell.self_overlap() - 1.0).abs();
                            assert!(error < 1e-13, "{name} element {z}: {error:e}");
                            shells += 1;
                        }
                    }
                    // Only auxiliary sets of heavy elements go past h.
                    Err(BasisError::AngularMomentum { l: 6, .. }) => assert!(z > 20),
                    Err(other) => panic!("{name} element {z}: {other}"),
                }
            }
        }
        assert!(shells > 9000, "{shells}");
    }

    #[test]
    fn published_contractions_are_normalised_as_printed() {
        // Before renormalising, the printed coefficients of a valid set give norms near 1: this
        // catches a misread column, which renormalising would hide. STO-3G prints seven digits.
        let set = BasisSet::bundled("sto-3g").unwrap();
        for z in 1..=10 {
            for raw in &set.element(z).unwrap().shells {
                let mut norm = 0.0;
                for (a, ca) in raw.exponents.iter().zip(&raw.coefficients) {
                    for (b, cb) in raw.exponents.iter().zip(&raw.coefficients) {
                        let s = 2.0 * (a * b).sqrt() / (a + b);
                        norm += ca * cb * s.powf(raw.l as f64 + 1.5);
                    }
                }
                assert!(
                    (norm - 1.0).abs() < 1e-5,
                    "element {z}, l = {}: {norm}",
                    raw.l
                );
            }
        }
    }

    #[test]
    fn radial_moment_agrees_with_quadrature() {
        for l in 0..=5 {
            let p = 0.7;
            let step = 1e-3;
            let sum: f64 = (1..20_000)
                .map(|i| i as f64 * step)
                .map(|r| r.powi(2 * l + 2) * (-p * r * r).exp() * step)
                .sum();
            assert!((sum / radial_moment(l as usize, p) - 1.0).abs() < 1e-9);
        }
    }

    #[test]
    fn function_counts_are_the_published_ones() {
        // (set, element, functions): contracted sizes of the sets' own papers, memory.
        let counts = [
            ("sto-3g", 6, 5),
            ("6-31g*", 6, 14),
            ("6-31g*", 1, 2),
            ("cc-pvdz", 6, 14),
            ("cc-pvdz", 1, 5),
            ("cc-pvtz", 8, 30),
            ("aug-cc-pvdz", 8, 23),
            ("aug-cc-pvtz", 8, 46),
            ("def2-svp", 6, 14),
            ("def2-tzvp", 6, 31),
            ("def2-tzvp", 1, 6),
            ("def2-qzvp", 6, 57),
            ("cc-pvtz", 17, 34),
        ];
        for (name, z, functions) in counts {
            let basis = Basis::bundled(&atom(z), name).unwrap();
            assert_eq!(basis.functions, functions, "{name} on element {z}");
        }
    }

    #[test]
    fn functions_run_through_the_atoms_without_gaps() {
        let xyz = "3\n\nO 0 0 0.119\nH 0 0.763 -0.477\nH 0 -0.763 -0.477";
        let water = Molecule::from_xyz(xyz, "water", 0, None).unwrap();
        let basis = Basis::bundled(&water, "def2-SVP").unwrap();
        assert_eq!(basis.name, "def2-svp");
        assert_eq!(basis.functions, 24);
        assert_eq!(basis.atom_functions, [0..14, 14..19, 19..24]);
        let mut next = 0;
        for shell in &basis.shells {
            assert_eq!(shell.first, next);
            assert_eq!(shell.centre_bohr, water.atoms[shell.atom].position_bohr);
            assert!(basis.atom_functions[shell.atom].contains(&shell.first));
            next += shell.len();
        }
        assert_eq!(basis.atom_of_function()[13..15], [0, 1]);
    }

    #[test]
    fn errors_name_what_is_missing() {
        let missing = Basis::bundled(&atom(19), "cc-pvdz")
            .unwrap_err()
            .to_string();
        assert!(
            missing.contains("no functions for K; it covers H–Ar, Ca–Kr"),
            "{missing}"
        );
        let set = BasisSet::parse("# role orbital\nFe\nh 1.0\n", "odd").unwrap();
        let high = Basis::new(&atom(26), &set).unwrap_err().to_string();
        assert!(
            high.contains("l = 5 on Fe; the highest supported is l = 4"),
            "{high}"
        );
    }
}

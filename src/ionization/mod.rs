//! Ionization energies from orbitals.
//!
//! [`koopmans()`] turns orbitals into [`HoleState`](crate::levels::HoleState)s; [`orbital_lines`]
//! lists the orbitals themselves.

pub mod adc;
pub mod fitted;
mod hole_states;
mod koopmans;
pub mod many_body;
pub mod p3;
pub mod poles;
pub mod second_order;

pub use fitted::{FittedOrbitals, Pairs};
pub use hole_states::{ManyBodyLevels, ManyBodySettings, hole_states};
pub use koopmans::koopmans;
pub use many_body::ManyBodyError;

use crate::levels::{Character, OrbitalLine, Spin};
use crate::scf::Orbitals;
use crate::units::hartree_to_ev;
use thiserror::Error;

/// Why ionized states could not be given.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum IonizationError {
    /// An occupied valence orbital came without a character.
    #[error("{label} is an occupied valence orbital but has no character")]
    NoCharacter {
        /// The orbital's label.
        label: String,
    },
    /// Not one list of characters per spin.
    #[error("found {found} list(s) of characters; expected {expected}, one per spin")]
    CharacterLists {
        /// Lists given.
        found: usize,
        /// Lists needed.
        expected: usize,
    },
}

/// Name of an orbital without symmetry: `orbital N` from 1, with its spin where the spins differ.
pub fn orbital_label(index: usize, spin: Spin) -> String {
    match spin {
        Spin::Both => format!("orbital {}", index + 1),
        Spin::Alpha => format!("orbital {} α", index + 1),
        Spin::Beta => format!("orbital {} β", index + 1),
    }
}

/// The occupied orbitals and the `empty` lowest empty ones of each spin, by rising energy.
///
/// `core` lowest orbitals are marked as core. `characters` as for [`koopmans()`].
pub fn orbital_lines(
    orbitals: &Orbitals,
    core: usize,
    characters: &[Vec<Option<Character>>],
    empty: usize,
) -> Vec<OrbitalLine> {
    let mut lines = Vec::new();
    for (place, (spin, set)) in orbitals.by_spin().into_iter().enumerate() {
        let shown = (set.occupied() + empty).min(set.energies.len());
        for index in 0..shown {
            let energy_hartree = set.energies[index];
            let character = characters.get(place).and_then(|list| list.get(index));
            lines.push(OrbitalLine {
                index,
                spin,
                label: orbital_label(index, spin),
                energy_hartree,
                energy_ev: hartree_to_ev(energy_hartree),
                occupation: set.occupations[index],
                core: index < core,
                character: character.cloned().flatten(),
            });
        }
    }
    lines.sort_by(|a, b| a.energy_hartree.total_cmp(&b.energy_hartree));
    lines
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::scf::SpinOrbitals;
    use nalgebra::{DMatrix, DVector};

    #[test]
    fn lines_hold_the_occupied_and_the_lowest_empty_orbitals() {
        let set = |energies: &[f64], occupations: &[f64]| SpinOrbitals {
            coefficients: DMatrix::identity(energies.len(), energies.len()),
            energies: DVector::from_row_slice(energies),
            occupations: DVector::from_row_slice(occupations),
        };
        let both = set(
            &[-20.5, -1.2, -0.5, 0.1, 0.3, 0.4],
            &[2.0, 2.0, 2.0, 0.0, 0.0, 0.0],
        );
        let lines = orbital_lines(&Orbitals::Restricted(both), 1, &[], 2);
        assert_eq!(lines.len(), 5);
        assert!(lines[0].core && !lines[1].core);
        assert_eq!(lines[4].label, "orbital 5");
        assert_eq!((lines[2].occupation, lines[3].occupation), (2.0, 0.0));
        assert!((lines[1].energy_ev + 1.2 * 27.211_386_245_988).abs() < 1e-12);

        let alpha = set(&[-0.9, -0.5], &[1.0, 1.0]);
        let beta = set(&[-0.8, 0.0], &[1.0, 0.0]);
        let lines = orbital_lines(&Orbitals::Unrestricted { alpha, beta }, 0, &[], 5);
        let labels: Vec<&str> = lines.iter().map(|l| l.label.as_str()).collect();
        assert_eq!(
            labels,
            ["orbital 1 α", "orbital 1 β", "orbital 2 α", "orbital 2 β"]
        );
    }
}

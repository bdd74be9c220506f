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
use crate::scf::{Orbitals, SpinOrbitals};
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
    /// Not one portrait per orbital of each spin.
    #[error("found {found:?} portraits of orbitals, expected {expected:?}, by spin")]
    Portraits {
        /// Portraits given, by spin.
        found: Vec<usize>,
        /// Orbitals, by spin.
        expected: Vec<usize>,
    },
}

/// What is known of one orbital beside its energy.
#[derive(Debug, Clone, PartialEq)]
pub struct Portrait {
    /// Its name, for example `2b1`; members of a degenerate set share it.
    pub label: String,
    /// Its character; `None` for core and empty orbitals.
    pub character: Option<Character>,
}

/// The orbital's name with its spin where the spins differ.
fn spin_label(portrait: &Portrait, spin: Spin) -> String {
    let label = &portrait.label;
    match spin {
        Spin::Both => label.clone(),
        Spin::Alpha => format!("{label} α"),
        Spin::Beta => format!("{label} β"),
    }
}

/// The occupied orbitals and the `empty` lowest empty ones of each spin, by rising energy.
///
/// `core` lowest orbitals are marked as core. `portraits` as for [`koopmans()`].
///
/// # Errors
/// [`IonizationError`] where portraits are missing.
pub fn orbital_lines(
    orbitals: &Orbitals,
    core: usize,
    portraits: &[Vec<Portrait>],
    empty: usize,
) -> Result<Vec<OrbitalLine>, IonizationError> {
    let mut lines = Vec::new();
    for ((spin, set), portraits) in by_spin(orbitals, portraits)? {
        let shown = (set.occupied() + empty).min(set.energies.len());
        for index in 0..shown {
            let energy_hartree = set.energies[index];
            lines.push(OrbitalLine {
                index,
                spin,
                label: spin_label(&portraits[index], spin),
                energy_hartree,
                energy_ev: hartree_to_ev(energy_hartree),
                occupation: set.occupations[index],
                core: index < core,
                character: portraits[index].character.clone(),
            });
        }
    }
    lines.sort_by(|a, b| a.energy_hartree.total_cmp(&b.energy_hartree));
    Ok(lines)
}

type SpinWithPortraits<'a> = ((Spin, &'a SpinOrbitals), &'a [Portrait]);

/// The orbitals of each spin beside their portraits.
fn by_spin<'a>(
    orbitals: &'a Orbitals,
    portraits: &'a [Vec<Portrait>],
) -> Result<Vec<SpinWithPortraits<'a>>, IonizationError> {
    let spins = orbitals.by_spin();
    let expected = spins.iter().map(|(_, set)| set.energies.len());
    let found = portraits.iter().map(Vec::len);
    if !expected.clone().eq(found.clone()) {
        return Err(IonizationError::Portraits {
            found: found.collect(),
            expected: expected.collect(),
        });
    }
    let portraits = portraits.iter().map(Vec::as_slice);
    Ok(spins.into_iter().zip(portraits).collect())
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::{DMatrix, DVector};

    fn named(count: usize) -> Vec<Portrait> {
        let portrait = |i| Portrait {
            label: format!("n{i}"),
            character: None,
        };
        (0..count).map(portrait).collect()
    }

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
        let lines = orbital_lines(&Orbitals::Restricted(both), 1, &[named(6)], 2).unwrap();
        assert_eq!(lines.len(), 5);
        assert!(lines[0].core && !lines[1].core);
        assert_eq!(lines[4].label, "n4");
        assert_eq!((lines[2].occupation, lines[3].occupation), (2.0, 0.0));
        assert!((lines[1].energy_ev + 1.2 * 27.211_386_245_988).abs() < 1e-12);

        let alpha = set(&[-0.9, -0.5], &[1.0, 1.0]);
        let beta = set(&[-0.8, 0.0], &[1.0, 0.0]);
        let lines = orbital_lines(
            &Orbitals::Unrestricted { alpha, beta },
            0,
            &[named(2), named(2)],
            5,
        )
        .unwrap();
        let labels: Vec<&str> = lines.iter().map(|l| l.label.as_str()).collect();
        assert_eq!(labels, ["n0 α", "n0 β", "n1 α", "n1 β"]);
    }
}

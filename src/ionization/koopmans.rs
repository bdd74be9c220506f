//! Koopmans' theorem: the vertical ionization energy is minus the orbital energy.
//!
//! T. Koopmans, Physica 1, 104 (1934). The ion is described with the frozen orbitals of the
//! molecule. Two errors are left out and often cancel: the ion's electrons relax (which lowers the
//! true value) and correlate less (which raises it). For outer-valence orbitals of small molecules
//! the value is typically 0.5–1.5 eV too high; orbitals that relax differently can come out in the
//! wrong order (the textbook case is nitrogen, 3σg and 1πu). Inner-valence bands are worse and may
//! break up into many lines, which this level cannot show.

use super::{IonizationError, Portrait, by_spin, spin_label};
use crate::levels::{HoleState, LineKind, OrbitalWeight};
use crate::scf::Orbitals;
use crate::units::hartree_to_ev;

/// One hole state per set of equivalent occupied valence orbitals, by rising ionization energy.
///
/// `core` lowest orbitals are left out. `portraits` holds one list per spin, in the order of
/// [`Orbitals::by_spin`], with one entry per orbital. Members of a degenerate set become one state
/// at their mean energy, with equal weights; its label is that of the lowest-numbered member. The
/// pole strength is 1 for each member, by construction of the level. For unrestricted orbitals
/// each spin gives its own states, and the index of a weight counts within that spin.
pub fn koopmans(
    orbitals: &Orbitals,
    core: usize,
    portraits: &[Vec<Portrait>],
) -> Result<Vec<HoleState>, IonizationError> {
    let mut states = Vec::new();
    for ((spin, set), portraits) in by_spin(orbitals, portraits)? {
        let occupied = set.occupied();
        for members in set.degenerate_sets() {
            let members = members.start.max(core)..members.end.min(occupied);
            if members.is_empty() {
                continue;
            }
            let portrait = &portraits[members.start];
            let label = spin_label(portrait, spin);
            let Some(character) = portrait.character.clone() else {
                return Err(IonizationError::NoCharacter { label });
            };
            let degeneracy = members.len();
            let mean = set.energies.rows(members.start, degeneracy).mean();
            let weight = 1.0 / degeneracy as f64;
            states.push(HoleState {
                label,
                ionization_energy_ev: hartree_to_ev(-mean),
                koopmans_ev: hartree_to_ev(-mean),
                pole_strength: 1.0,
                degeneracy,
                kind: LineKind::Main,
                leading_orbitals: members
                    .map(|index| OrbitalWeight { index, weight })
                    .collect(),
                character,
                envelope: None,
            });
        }
    }
    states.sort_by(|a, b| a.ionization_energy_ev.total_cmp(&b.ionization_energy_ev));
    Ok(states)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::levels::{Character, Verdict};
    use crate::scf::SpinOrbitals;
    use nalgebra::{DMatrix, DVector};

    fn orbitals(energies: &[f64], occupied: usize, electrons: f64) -> SpinOrbitals {
        let n = energies.len();
        SpinOrbitals {
            coefficients: DMatrix::identity(n, n),
            energies: DVector::from_row_slice(energies),
            occupations: DVector::from_fn(n, |i, _| if i < occupied { electrons } else { 0.0 }),
        }
    }

    fn portrait(label: &str, known: bool) -> Portrait {
        Portrait {
            label: label.to_owned(),
            character: known.then(|| Character {
                verdict: Verdict::Nonbonding,
                description: format!("like {label}"),
                net_overlap_population: 0.0,
                atoms: Vec::new(),
                bonds: Vec::new(),
            }),
        }
    }

    #[test]
    fn degenerate_members_are_one_state_and_the_core_is_left_out() {
        let set = orbitals(&[-20.0, -1.0, -0.600_02, -0.6, -0.5, 0.2], 5, 2.0);
        let labels = ["1a1", "2a1", "1e", "1e", "3a1", "4a1"];
        let portraits = labels.map(|l| portrait(l, true)).to_vec();
        let states = koopmans(&Orbitals::Restricted(set), 1, &[portraits]).unwrap();
        let labels: Vec<&str> = states.iter().map(|s| s.label.as_str()).collect();
        assert_eq!(labels, ["3a1", "1e", "2a1"]);
        let pair = &states[1];
        assert_eq!((pair.degeneracy, pair.pole_strength), (2, 1.0));
        assert!((pair.ionization_energy_ev - 0.600_01 * 27.211_386_245_988).abs() < 1e-9);
        let indices: Vec<usize> = pair.leading_orbitals.iter().map(|w| w.index).collect();
        assert_eq!(indices, [2, 3]);
        assert_eq!(
            pair.leading_orbitals.iter().map(|w| w.weight).sum::<f64>(),
            1.0
        );
        assert_eq!(pair.character.description, "like 1e");
    }

    #[test]
    fn a_set_is_cut_where_the_core_ends() {
        let set = orbitals(&[-1.0, -1.0, -0.5], 3, 2.0);
        let portraits = vec![
            portrait("core", false),
            portrait("valence", true),
            portrait("outer", true),
        ];
        let states = koopmans(&Orbitals::Restricted(set), 1, &[portraits]).unwrap();
        assert_eq!(states[1].degeneracy, 1);
        assert_eq!(states[1].label, "valence");
    }

    #[test]
    fn both_spins_give_states() {
        let alpha = orbitals(&[-0.9, -0.5, 0.1], 2, 1.0);
        let beta = orbitals(&[-0.8, 0.0, 0.1], 1, 1.0);
        let list = |known: [bool; 3]| {
            let labels = ["1a1", "1b1", "2a1"];
            (labels.iter().zip(known))
                .map(|(label, known)| portrait(label, known))
                .collect::<Vec<_>>()
        };
        let portraits = [list([true, true, false]), list([true, false, false])];
        let orbitals = Orbitals::Unrestricted { alpha, beta };
        let states = koopmans(&orbitals, 0, &portraits).unwrap();
        let labels: Vec<&str> = states.iter().map(|s| s.label.as_str()).collect();
        assert_eq!(labels, ["1b1 α", "1a1 β", "1a1 α"]);
        assert!(koopmans(&orbitals, 0, &portraits[..1]).is_err());
        let lacking = [list([true, true, false]), list([false; 3])];
        let error = koopmans(&orbitals, 0, &lacking).unwrap_err().to_string();
        assert!(error.contains("1a1 β"), "{error}");
    }
}

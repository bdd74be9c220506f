//! From the many-body methods to the plain hole states that the rest of the program reads.
//!
//! Rules. A state belongs to the set of equivalent orbitals that gives it most of its pole strength.
//! States of one set at the same energy are one entry of that degeneracy. The strongest entry of a
//! set is its *main* line, all others are *satellites*; a main line whose pole strength is far below
//! 1 says that the one-electron picture has failed there. Methods with one root per orbital have
//! main lines only.

use super::adc::{self, Order};
use super::fitted::{FittedOrbitals, Pairs};
use super::many_body::ManyBodyError;
use super::second_order::{self, Quasiparticle};
use super::{koopmans, orbital_label, p3};
use crate::integrals::FittedPairs;
use crate::levels::{Character, HoleState, LineKind, Method, OrbitalWeight, Spin};
use crate::scf::{DEGENERACY_TOLERANCE_HARTREE, Orbitals, SpinOrbitals};
use crate::units::{ev_to_hartree, hartree_to_ev};
use std::ops::Range;

/// Smallest weight of an orbital that is listed.
const LISTED_WEIGHT: f64 = 0.01;

/// What is asked of a many-body method.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ManyBodySettings {
    /// Number of core orbitals (the lowest); no hole states are given for them.
    pub core: usize,
    /// Whether the core is left out of the correlated step.
    pub frozen_core: bool,
    /// Highest ionization energy of interest, eV (ADC only).
    pub ceiling_ev: f64,
    /// Smallest pole strength of interest (ADC only).
    pub least_strength: f64,
    /// Memory that may be taken besides the fitted pairs, bytes.
    pub memory_limit_bytes: u64,
}

impl Default for ManyBodySettings {
    fn default() -> Self {
        Self {
            core: 0,
            frozen_core: true,
            ceiling_ev: 25.0,
            least_strength: 0.02,
            memory_limit_bytes: 16_000_000_000,
        }
    }
}

/// Hole states, and where the method had nothing to say.
#[derive(Debug, Clone, PartialEq)]
pub struct ManyBodyLevels {
    /// States by rising ionization energy.
    pub states: Vec<HoleState>,
    /// Valence orbitals without a line, each with the reason in words.
    pub unresolved: Vec<String>,
}

/// One line before equivalent ones are merged.
struct Line {
    ionization_hartree: f64,
    pole_strength: f64,
    /// Contribution of each orbital to the strength.
    orbital_strengths: Vec<f64>,
}

/// The hole states of a closed shell by any of the methods. `characters` as for [`koopmans()`].
///
/// # Errors
/// For an open shell, too little memory, eigenvectors that do not converge, or a missing character.
pub fn hole_states(
    method: Method,
    orbitals: &Orbitals,
    pairs: &FittedPairs,
    settings: &ManyBodySettings,
    characters: &[Vec<Option<Character>>],
) -> Result<ManyBodyLevels, ManyBodyError> {
    let order = match method {
        Method::Koopmans => {
            let states = koopmans(orbitals, settings.core, characters)?;
            let unresolved = Vec::new();
            return Ok(ManyBodyLevels { states, unresolved });
        }
        Method::SecondOrder | Method::P3 => None,
        Method::Adc2 => Some(Order::Second),
        Method::Adc2x => Some(Order::SecondExtended),
        Method::Adc3 => Some(Order::Third),
    };
    let Orbitals::Restricted(set) = orbitals else {
        return Err(ManyBodyError::OpenShell);
    };
    let [characters] = characters else {
        let (found, expected) = (characters.len(), 1);
        return Err(super::IonizationError::CharacterLists { found, expected }.into());
    };
    let frozen = if settings.frozen_core {
        settings.core
    } else {
        0
    };
    let wanted = match method {
        Method::SecondOrder => Pairs::WithoutVirtual,
        _ => Pairs::All,
    };
    let fitted = FittedOrbitals::new(orbitals, pairs, frozen, wanted)?;
    let valence = settings.core.saturating_sub(frozen)..fitted.occupied();
    let mut unresolved = Vec::new();
    let lines = match (method, order) {
        (_, Some(order)) => adc_lines(&fitted, order, settings)?,
        (Method::P3, _) => p3_lines(&fitted, valence, settings, &mut unresolved)?,
        _ => valence
            .map(|p| {
                let poles = second_order::self_energy(&fitted, p);
                let root = Quasiparticle::new(frozen + p, poles.energy(), poles.main());
                single(root)
            })
            .collect(),
    };
    let states = merged(set, settings.core, lines, characters)?;
    Ok(ManyBodyLevels { states, unresolved })
}

fn single(root: Quasiparticle) -> Line {
    let mut orbital_strengths = vec![0.0; root.orbital + 1];
    orbital_strengths[root.orbital] = root.pole_strength;
    Line {
        ionization_hartree: root.ionization_hartree,
        pole_strength: root.pole_strength,
        orbital_strengths,
    }
}

fn adc_lines(
    fitted: &FittedOrbitals,
    order: Order,
    settings: &ManyBodySettings,
) -> Result<Vec<Line>, ManyBodyError> {
    let options = adc::Options {
        ceiling_hartree: ev_to_hartree(settings.ceiling_ev),
        least_strength: settings.least_strength,
        memory_limit_bytes: settings.memory_limit_bytes,
        ..adc::Options::default()
    };
    let spectrum = adc::run(fitted, order, &options)?;
    let line = |state: adc::State| Line {
        ionization_hartree: state.ionization_hartree,
        pole_strength: state.pole_strength,
        orbital_strengths: state.orbital_strengths,
    };
    Ok(spectrum.states.into_iter().map(line).collect())
}

fn p3_lines(
    fitted: &FittedOrbitals,
    valence: Range<usize>,
    settings: &ManyBodySettings,
    unresolved: &mut Vec<String>,
) -> Result<Vec<Line>, ManyBodyError> {
    p3::check_memory(fitted, settings.memory_limit_bytes)?;
    let mut lines = Vec::new();
    for found in p3::lines(fitted, valence) {
        match found.safe() {
            Some(root) => lines.push(single(root)),
            None => unresolved.push(format!(
                "{} (Koopmans {:.2} eV): no P3 root with a pole strength between {} and 1; the one-electron picture does not hold there, take an ADC level",
                orbital_label(found.orbital, Spin::Both),
                hartree_to_ev(found.koopmans_hartree),
                p3::SAFE_STRENGTH
            )),
        }
    }
    Ok(lines)
}

/// Lines of one set of orbitals at one energy.
struct Entry {
    set: usize,
    lines: Vec<Line>,
}

impl Entry {
    fn energy(&self) -> f64 {
        let sum: f64 = self.lines.iter().map(|l| l.ionization_hartree).sum();
        sum / self.lines.len() as f64
    }

    fn strength(&self) -> f64 {
        let sum: f64 = self.lines.iter().map(|l| l.pole_strength).sum();
        sum / self.lines.len() as f64
    }
}

/// Merges equivalent lines and names them.
fn merged(
    set: &SpinOrbitals,
    core: usize,
    mut lines: Vec<Line>,
    characters: &[Option<Character>],
) -> Result<Vec<HoleState>, ManyBodyError> {
    let occupied = set.occupied();
    let sets: Vec<Range<usize>> = set
        .degenerate_sets()
        .into_iter()
        .map(|s| s.start.max(core)..s.end.min(occupied))
        .filter(|s| !s.is_empty())
        .collect();
    lines.sort_by(|a, b| a.ionization_hartree.total_cmp(&b.ionization_hartree));
    let mut entries: Vec<Entry> = Vec::new();
    for line in lines {
        let share = |members: &Range<usize>| -> f64 {
            let own = line.orbital_strengths.iter().enumerate();
            own.filter(|(p, _)| members.contains(p))
                .map(|(_, x)| x)
                .sum()
        };
        let leading = (0..sets.len()).max_by(|&a, &b| share(&sets[a]).total_cmp(&share(&sets[b])));
        let Some(leading) = leading.filter(|&s| share(&sets[s]) > 0.0) else {
            continue; // a core hole, or no hole at all
        };
        let partner = entries.iter_mut().find(|entry| {
            let gap = line.ionization_hartree - entry.lines[0].ionization_hartree;
            entry.set == leading
                && entry.lines.len() < sets[leading].len()
                && gap < DEGENERACY_TOLERANCE_HARTREE
        });
        match partner {
            Some(entry) => entry.lines.push(line),
            None => entries.push(Entry {
                set: leading,
                lines: vec![line],
            }),
        }
    }
    let mut states = Vec::with_capacity(entries.len());
    for entry in &entries {
        let own = entries.iter().filter(|e| e.set == entry.set);
        let strongest = own.map(Entry::strength).fold(0.0, f64::max);
        let members = sets[entry.set].clone();
        let label = orbital_label(members.start, Spin::Both);
        let character = characters.get(members.start).and_then(Clone::clone);
        let character = character.ok_or_else(|| super::IonizationError::NoCharacter {
            label: label.clone(),
        })?;
        let koopmans = -set.energies.rows(members.start, members.len()).mean();
        states.push(HoleState {
            label,
            ionization_energy_ev: hartree_to_ev(entry.energy()),
            koopmans_ev: hartree_to_ev(koopmans),
            pole_strength: entry.strength(),
            degeneracy: entry.lines.len(),
            kind: if entry.strength() >= strongest {
                LineKind::Main
            } else {
                LineKind::Satellite
            },
            leading_orbitals: weights(entry),
            character,
            envelope: None,
        });
    }
    states.sort_by(|a, b| a.ionization_energy_ev.total_cmp(&b.ionization_energy_ev));
    Ok(states)
}

/// Orbitals by their mean contribution to the strength of an entry's lines, largest first.
fn weights(entry: &Entry) -> Vec<OrbitalWeight> {
    let longest = entry.lines.iter().map(|l| l.orbital_strengths.len()).max();
    let mut out: Vec<OrbitalWeight> = (0..longest.unwrap_or(0))
        .map(|index| {
            let own = entry
                .lines
                .iter()
                .filter_map(|l| l.orbital_strengths.get(index));
            OrbitalWeight {
                index,
                weight: own.sum::<f64>() / entry.lines.len() as f64,
            }
        })
        .filter(|w| w.weight >= LISTED_WEIGHT)
        .collect();
    // Weights that are equal but for rounding keep the order of the orbitals.
    let rounded = |w: &OrbitalWeight| (w.weight * 1e6).round();
    out.sort_by(|a, b| {
        rounded(b)
            .total_cmp(&rounded(a))
            .then(a.index.cmp(&b.index))
    });
    out
}

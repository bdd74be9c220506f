//! From the many-body methods to the plain hole states that the rest of the program reads.
//!
//! Rules. A state belongs to the set of equivalent orbitals that gives it most of its pole strength.
//! States of one set at the same energy are one entry of that degeneracy. The strongest entry of a
//! set is its *main* line, all others are *satellites*; a main line whose pole strength is far below
//! 1 says that the one-electron picture has failed there. A search that ends at a ceiling may show
//! the satellites of a set and miss its main line: unless it found half of the set's strength, it
//! names no main line of that set and says so. Methods with one root per orbital have main lines
//! only.

use super::adc::{self, Order};
use super::fitted::{FittedOrbitals, Pairs};
use super::many_body::ManyBodyError;
use super::second_order::{self, Quasiparticle};
use super::{Portrait, by_spin, koopmans, p3};
use crate::integrals::FittedPairs;
use crate::levels::{HoleState, LineKind, Method, OrbitalWeight};
use crate::scf::{DEGENERACY_TOLERANCE_HARTREE, Orbitals, SpinOrbitals};
use crate::units::{ev_to_hartree, hartree_to_ev};
use std::ops::Range;

/// Smallest weight of an orbital that is listed.
const LISTED_WEIGHT: f64 = 0.01;

/// Share of a set's strength that a search must have found before it names the main line.
const MAIN_SHARE: f64 = 0.5;

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

/// The hole states of a closed shell by any of the methods. `portraits` as for [`koopmans()`].
///
/// # Errors
/// For an open shell, too little memory, eigenvectors that do not converge, or a missing
/// portrait or character.
pub fn hole_states(
    method: Method,
    orbitals: &Orbitals,
    pairs: &FittedPairs,
    settings: &ManyBodySettings,
    portraits: &[Vec<Portrait>],
) -> Result<ManyBodyLevels, ManyBodyError> {
    let order = match method {
        Method::Koopmans => {
            let states = koopmans(orbitals, settings.core, portraits)?;
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
    let portraits = by_spin(orbitals, portraits)?[0].1;
    let frozen = if settings.frozen_core {
        settings.core
    } else {
        0
    };
    let wanted = match method {
        Method::SecondOrder => Pairs::WithoutVirtual,
        _ => Pairs::All,
    };
    check_memory(method, set, pairs, frozen, wanted, settings)?;
    let fitted = FittedOrbitals::new(orbitals, pairs, frozen, wanted)?;
    let valence = settings.core.saturating_sub(frozen)..fitted.occupied();
    let mut unresolved = Vec::new();
    let lines = match (method, order) {
        (_, Some(order)) => adc_lines(&fitted, order, settings)?,
        (Method::P3, _) => p3_lines(&fitted, valence, settings, portraits, &mut unresolved)?,
        _ => valence
            .map(|p| {
                let poles = second_order::self_energy(&fitted, p);
                let root = Quasiparticle::new(frozen + p, poles.energy(), poles.main());
                single(root)
            })
            .collect(),
    };
    let ceiling_ev = order.map(|_| settings.ceiling_ev);
    let sets = valence_sets(set, settings.core);
    let states = merged(set, &sets, lines, portraits, ceiling_ev, &mut unresolved)?;
    Ok(ManyBodyLevels { states, unresolved })
}

/// Refuses fitted pairs of orbitals that alone would not fit.
fn check_memory(
    method: Method,
    set: &SpinOrbitals,
    pairs: &FittedPairs,
    frozen: usize,
    wanted: Pairs,
    settings: &ManyBodySettings,
) -> Result<(), ManyBodyError> {
    let occupied = set.occupied().saturating_sub(frozen);
    let virtuals = set.energies.len() - set.occupied();
    let auxiliaries = pairs.auxiliaries();
    let needed_bytes = FittedOrbitals::bytes(occupied, virtuals, auxiliaries, wanted);
    let limit_bytes = settings.memory_limit_bytes;
    if needed_bytes > limit_bytes {
        return Err(ManyBodyError::Memory {
            method: method.name(),
            needed_bytes,
            limit_bytes,
            occupied,
            virtuals,
            auxiliaries,
        });
    }
    Ok(())
}

/// Sets of equivalent occupied valence orbitals.
fn valence_sets(set: &SpinOrbitals, core: usize) -> Vec<Range<usize>> {
    let occupied = set.occupied();
    (set.degenerate_sets().into_iter())
        .map(|s| s.start.max(core)..s.end.min(occupied))
        .filter(|s| !s.is_empty())
        .collect()
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
    portraits: &[Portrait],
    unresolved: &mut Vec<String>,
) -> Result<Vec<Line>, ManyBodyError> {
    p3::check_memory(fitted, settings.memory_limit_bytes)?;
    let mut lines = Vec::new();
    for found in p3::lines(fitted, valence) {
        match found.safe() {
            Some(root) => lines.push(single(root)),
            None => {
                let note = format!(
                    "{} (Koopmans {:.2} eV): no P3 root with a pole strength between {} and 1; the one-electron picture does not hold there, take an ADC level.",
                    portraits[found.orbital].label,
                    hartree_to_ev(found.koopmans_hartree),
                    p3::SAFE_STRENGTH
                );
                // Members of a degenerate set say the same.
                if !unresolved.contains(&note) {
                    unresolved.push(note);
                }
            }
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

/// Merges equivalent lines and names them. Below a ceiling, `unresolved` gets a sentence for every
/// set whose main line was not found.
fn merged(
    set: &SpinOrbitals,
    sets: &[Range<usize>],
    mut lines: Vec<Line>,
    portraits: &[Portrait],
    ceiling_ev: Option<f64>,
    unresolved: &mut Vec<String>,
) -> Result<Vec<HoleState>, ManyBodyError> {
    let koopmans = |members: &Range<usize>| {
        hartree_to_ev(-set.energies.rows(members.start, members.len()).mean())
    };
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
    let missed: Vec<bool> = (sets.iter().enumerate())
        .map(|(number, members)| {
            let own = entries.iter().filter(|e| e.set == number);
            let strengths = own.flat_map(|e| &e.lines).map(|l| l.pole_strength);
            let found = strengths.sum::<f64>() / members.len() as f64;
            ceiling_ev.is_some() && found < MAIN_SHARE
        })
        .collect();
    for (members, _) in sets.iter().zip(&missed).filter(|(_, missed)| **missed) {
        unresolved.push(format!(
            "{} (Koopmans {:.2} eV): no main line was found below {:.0} eV, where the search ended.",
            portraits[members.start].label,
            koopmans(members),
            ceiling_ev.unwrap_or_default(),
        ));
    }
    let mut states = Vec::with_capacity(entries.len());
    for entry in &entries {
        let own = entries.iter().filter(|e| e.set == entry.set);
        let strongest = own.map(Entry::strength).fold(0.0, f64::max);
        let members = sets[entry.set].clone();
        let portrait = &portraits[members.start];
        let label = portrait.label.clone();
        let Some(character) = portrait.character.clone() else {
            return Err(super::IonizationError::NoCharacter { label }.into());
        };
        states.push(HoleState {
            label,
            ionization_energy_ev: hartree_to_ev(entry.energy()),
            koopmans_ev: koopmans(&members),
            pole_strength: entry.strength(),
            degeneracy: entry.lines.len(),
            kind: if entry.strength() >= strongest && !missed[entry.set] {
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

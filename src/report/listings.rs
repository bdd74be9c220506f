//! Which tables there are, and what stands in them.

use super::Dossier;
use super::prose;
use super::table::{Lean, Table};
use super::words::{
    Words, chemical, counted, decimals, energy, measured, orbital, percent, signed, thousands,
    wrapped,
};
use crate::assign::Match;
use crate::fit::{Band, BandFit, FitStatistics};
use crate::levels::{Character, HoleState, Levels, LineKind};

use Lean::{Left, Right};

/// Width of running text on a terminal, characters.
const LINE: usize = 88;

fn words(text: impl Into<String>) -> Words {
    Words::from(text.into())
}

/// Labels with a separator between them.
fn labels(names: &[String]) -> Words {
    let mut out = words("");
    for (i, name) in names.iter().enumerate() {
        if i > 0 {
            out = out.then(words(" + "));
        }
        out = out.then(orbital(name));
    }
    out
}

/// The hole states of a computation.
pub fn hole_states(levels: &Levels) -> Table {
    let mut table = Table::new(&[
        ("State", Left),
        ("Vertical I / eV", Right),
        ("−ε / eV", Right),
        ("Pole strength", Right),
        ("Deg.", Right),
        ("Kind", Left),
        ("Verdict", Left),
        ("Character", Left),
    ]);
    let satellites = levels
        .hole_states
        .iter()
        .any(|s| s.kind == LineKind::Satellite);
    for state in &levels.hole_states {
        let kind = match (satellites, state.kind) {
            (false, _) => "",
            (true, LineKind::Main) => "main",
            (true, LineKind::Satellite) => "satellite",
        };
        table.row(vec![
            orbital(&state.label),
            words(energy(state.ionization_energy_ev)),
            words(energy(state.koopmans_ev)),
            words(format!("{:.2}", state.pole_strength)),
            words(state.degeneracy.to_string()),
            words(kind),
            words(state.character.verdict.to_string()),
            words(state.character.description.clone()),
        ]);
    }
    table.without_empty_columns()
}

/// The computed levels of a molecule, for a terminal.
pub fn levels_table(levels: &Levels) -> String {
    let molecule = &levels.molecule;
    let group = match &molecule.point_group {
        Some(group) => format!(", {group}"),
        None => String::new(),
    };
    let scf = &levels.scf;
    let level = &levels.level;
    let mut auxiliary = level.auxiliary.clone();
    if let Some(correlation) = &level.correlation_auxiliary {
        let core = if level.frozen_core {
            "core frozen"
        } else {
            "all electrons"
        };
        auxiliary += &format!("; correlated with {correlation}, {core}");
    }
    let notes: String = (prose::level_notes(levels).iter())
        .map(|note| wrapped(note, LINE) + "\n")
        .collect();
    format!(
        "{}, {}{group}, charge {}, multiplicity {}\n\
         {} (auxiliary {})\n\
         Total energy {:.8} hartree after {}\n\n{}\n{notes}{}\n",
        molecule.name,
        molecule.formula,
        molecule.charge,
        molecule.multiplicity,
        level,
        auxiliary,
        scf.energy_hartree,
        counted(scf.iterations, "iteration"),
        hole_states(levels).text(),
        wrapped(prose::level_limits(level.method), LINE),
    )
}

fn energy_with(band: &Band, value: f64) -> String {
    format!(
        "{value:.digits$}",
        digits = decimals(band.vertical_sd).clamp(2, 4)
    )
}

/// Bands as they were found, without any assignment.
pub fn bands(bands: &[Band]) -> Table {
    let mut table = Table::new(&[
        ("Band", Right),
        ("Vertical / eV", Right),
        ("Maximum / eV", Right),
        ("Origin / eV", Right),
        ("FWHM / eV", Right),
        ("Area / counts", Right),
        ("Members", Right),
        ("Spacing / eV", Right),
    ]);
    for band in bands {
        let origin = band
            .origin_ev
            .map_or("–".to_owned(), |o| energy_with(band, o));
        let spacing = band
            .spacing_ev
            .map_or("–".to_owned(), |s| format!("{s:.3}"));
        table.row(vec![
            words(band.id.to_string()),
            words(measured(band.vertical_ev, band.vertical_sd)),
            words(energy_with(band, band.maximum_ev)),
            words(origin),
            words(format!("{:.3}", band.fwhm_ev)),
            words(format!(
                "{} ± {}",
                thousands(band.area),
                thousands(band.area_sd)
            )),
            words(band.members.len().to_string()),
            words(spacing),
        ]);
    }
    table
}

/// What a fit found in a trace, for a terminal: the bands of the most probable grouping, the
/// other groupings with their odds, how good the fit is.
pub fn bands_table(fit: &BandFit) -> String {
    let Some(first) = fit.groupings.first() else {
        return format!("No bands.\n{}\n", quality(&fit.statistics));
    };
    let mut out = bands(&first.bands).text();
    out.push('\n');
    if fit.groupings.len() > 1 {
        out.push_str(&format!(
            "This grouping of the lines into bands: {} (from the shapes alone). Others:\n",
            percent(first.probability)
        ));
        for grouping in &fit.groupings[1..] {
            let places: Vec<String> = grouping
                .bands
                .iter()
                .map(|b| energy(b.vertical_ev))
                .collect();
            out.push_str(&format!(
                "  {}: {} with vertical energies {} eV\n",
                percent(grouping.probability),
                counted(grouping.bands.len(), "band"),
                places.join(", ")
            ));
        }
    }
    out.push_str(&quality(&fit.statistics));
    out.push('\n');
    for note in prose::fit_notes(&fit.undetermined, &fit.correlations) {
        out.push_str(&note);
        out.push('\n');
    }
    out.push_str(&wrapped(prose::WORDS_OF_ENERGY, LINE));
    out.push('\n');
    out
}

fn quality(statistics: &FitStatistics) -> String {
    wrapped(&prose::fit_quality(statistics), LINE)
}

/// The computed states that a match names, in its order.
pub(super) fn states_of<'a>(dossier: &'a Dossier, found: &'a Match) -> Vec<&'a HoleState> {
    let state = |label: &String| {
        dossier
            .levels
            .hole_states
            .iter()
            .find(|s| &s.label == label && s.kind == LineKind::Main)
    };
    found.hole_states.iter().filter_map(state).collect()
}

/// `bonding: C–H σ`, or the description alone where it says the verdict itself.
pub(super) fn character(character: &Character) -> String {
    let verdict = character.verdict.to_string();
    match character.description.as_str() {
        "" => verdict,
        text if text.contains(&verdict) => text.to_owned(),
        text => format!("{verdict}: {text}"),
    }
}

/// What is said about a band that is none of the molecule's, or open.
fn remark_words(dossier: &Dossier, band: usize) -> Words {
    let mut out = words("");
    for remark in dossier.remarks_of(band) {
        if !out.plain.is_empty() {
            out = out.then(words("; "));
        }
        let kind = prose::remark_kind(remark.kind);
        out = out.then(match remark.candidates.first() {
            Some(best) => words(format!("{kind}: "))
                .then(chemical(&best.cause))
                .then(words(format!(" ({})", percent(best.probability)))),
            None => words(kind),
        });
    }
    out
}

/// The assignment: one row per band.
pub fn assignment(dossier: &Dossier) -> Table {
    let mut table = Table::new(&[
        ("Band", Right),
        ("Vertical / eV", Right),
        ("Maximum / eV", Right),
        ("Origin / eV", Right),
        ("Area / %", Right),
        ("Hole states", Left),
        ("Computed / eV", Right),
        ("Residual / eV", Right),
        ("Character", Left),
        ("Probability", Right),
        ("Else", Left),
        ("Remark", Left),
    ]);
    let total: f64 = dossier.bands.iter().map(|b| b.area).sum();
    for band in &dossier.bands {
        let origin = band
            .origin_ev
            .map_or(String::new(), |o| energy_with(band, o));
        let found = dossier.match_of(band.id);
        let states = found.map_or(Vec::new(), |m| states_of(dossier, m));
        let computed: Vec<String> = states
            .iter()
            .map(|s| energy(s.ionization_energy_ev))
            .collect();
        let mut kinds: Vec<String> = Vec::new();
        for kind in found.iter().flat_map(|m| &m.character).map(character) {
            if !kinds.contains(&kind) {
                kinds.push(kind);
            }
        }
        let mut others = words("");
        for other in found.iter().flat_map(|m| &m.alternatives).take(3) {
            if !others.plain.is_empty() {
                others = others.then(words(", "));
            }
            let names = match other.hole_states.is_empty() {
                true => words("none"),
                false => labels(&other.hole_states),
            };
            others = others
                .then(names)
                .then(words(format!(" {}", percent(other.probability))));
        }
        table.row(vec![
            words(band.id.to_string()),
            words(measured(band.vertical_ev, band.vertical_sd)),
            words(energy_with(band, band.maximum_ev)),
            words(origin),
            words(format!(
                "{:.1}",
                if total > 0.0 {
                    100.0 * band.area / total
                } else {
                    0.0
                }
            )),
            found.map_or(words("–"), |m| labels(&m.hole_states)),
            words(computed.join(", ")),
            words(found.map_or(String::new(), |m| signed(m.residual_ev))),
            words(kinds.join("; ")),
            words(found.map_or(String::new(), |m| percent(m.probability))),
            others,
            remark_words(dossier, band.id),
        ]);
    }
    table.without_empty_columns()
}

/// The assignment, for a terminal: short columns, then remarks and what was not seen.
pub fn assignment_table(dossier: &Dossier) -> String {
    let mut table = Table::new(&[
        ("Band", Right),
        ("Vertical / eV", Right),
        ("Maximum / eV", Right),
        ("Hole states", Left),
        ("Computed / eV", Right),
        ("Residual / eV", Right),
        ("Verdict", Left),
        ("Probability", Right),
    ]);
    for band in &dossier.bands {
        let found = dossier.match_of(band.id);
        let states = found.map_or(Vec::new(), |m| states_of(dossier, m));
        let computed: Vec<String> = states
            .iter()
            .map(|s| energy(s.ionization_energy_ev))
            .collect();
        let mut verdicts: Vec<String> = Vec::new();
        for verdict in found
            .iter()
            .flat_map(|m| &m.character)
            .map(|c| c.verdict.to_string())
        {
            if !verdicts.contains(&verdict) {
                verdicts.push(verdict);
            }
        }
        let states = match found {
            Some(found) => labels(&found.hole_states),
            None => match dossier.remarks_of(band.id).next() {
                Some(remark) => remark_short(remark),
                None => words("–"),
            },
        };
        table.row(vec![
            words(band.id.to_string()),
            words(measured(band.vertical_ev, band.vertical_sd)),
            words(energy_with(band, band.maximum_ev)),
            states,
            words(computed.join(", ")),
            words(found.map_or(String::new(), |m| signed(m.residual_ev))),
            words(verdicts.join(", ")),
            words(found.map_or(String::new(), |m| percent(m.probability))),
        ]);
    }
    let mut out = table.without_empty_columns().text();
    for remark in &dossier.remarks {
        let text = wrapped(&format!("† {}", remark.text), LINE);
        out.push_str(&format!("\n{text}\n"));
    }
    out.push_str(&format!("\n{}\n", wrapped(&prose::shift(dossier), LINE)));
    out
}

fn remark_short(remark: &crate::assign::Remark) -> Words {
    let cause = remark.candidates.first().map(|c| c.cause.as_str());
    words(format!("† {}", cause.unwrap_or("unexplained")))
}

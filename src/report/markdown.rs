//! `assignment.md`: what a chemist reads.

use super::Dossier;
use super::listings::{assignment, hole_states};
use super::prose;
use super::table::escaped;
use super::words::{chemical, energy, percent};
use crate::assign::Stance;
use std::fmt::Write as _;

/// The report as Markdown.
pub fn assignment_md(dossier: &Dossier) -> String {
    let mut out = String::new();
    let formula = chemical(&dossier.levels.molecule.formula).unicode();
    let title = escaped(&dossier.title);
    let mut part = |text: String| {
        out.push_str(text.trim_end());
        out.push_str("\n\n");
    };
    part(format!("# Photoelectron bands of {title} ({formula})"));
    part(escaped(&prose::summary(dossier)));
    part(escaped(&prose::shift(dossier)));
    part("![The trace with its bands, and the computed sticks](overlay.svg)".to_owned());
    part("## Assignment".to_owned());
    match dossier.bands.is_empty() {
        true => part("No band was found in the trace.".to_owned()),
        false => part(assignment(dossier).markdown()),
    }
    part(prose::WORDS_OF_ENERGY.to_owned());
    if !dossier.assignment.unseen.is_empty() {
        let names = dossier.assignment.unseen.join(", ");
        part(format!(
            "Computed inside the trace, but no band was found for: {}.",
            escaped(&names)
        ));
    }
    evidence(dossier, &mut part);
    remarks(dossier, &mut part);
    part("## Fit".to_owned());
    part(escaped(&prose::fit_quality(&dossier.fit.statistics)));
    if let Some(text) = prose::grouping(dossier) {
        part(text);
    }
    let notes = prose::fit_notes(&dossier.fit.undetermined, &dossier.fit.correlations);
    if !notes.is_empty() {
        part(bullets(notes.iter().map(|n| escaped(n))));
    }
    part(format!(
        "## Computed levels ({})",
        escaped(&dossier.levels.level.to_string())
    ));
    part(hole_states(&dossier.levels).markdown());
    let notes = prose::level_notes(&dossier.levels);
    if !notes.is_empty() {
        part(bullets(notes.iter().map(|n| escaped(n))));
    }
    part(prose::level_limits(dossier.levels.level.method).to_owned());
    part("## Trace and settings".to_owned());
    part(escaped(&prose::trace(dossier)));
    if !dossier.trace.comments.is_empty() {
        part("The file says of itself:".to_owned());
        part(bullets(dossier.trace.comments.iter().map(|c| escaped(c))));
    }
    if !dossier.study.is_empty() {
        let lines = settings(dossier)
            .into_iter()
            .map(|(k, v)| format!("`{k}`: {}", escaped(&v)));
        part(bullets(lines));
    }
    part(format!("Made by {}.", escaped(&dossier.program)));
    let end = out.trim_end().len();
    out.truncate(end);
    out.push('\n');
    out
}

fn bullets(lines: impl Iterator<Item = String>) -> String {
    lines
        .map(|l| format!("- {l}"))
        .collect::<Vec<_>>()
        .join("\n")
}

fn evidence(dossier: &Dossier, part: &mut impl FnMut(String)) {
    if dossier.matches.iter().all(|m| m.evidence.is_empty()) {
        return;
    }
    part("## Evidence".to_owned());
    for found in dossier.matches.iter().filter(|m| !m.evidence.is_empty()) {
        let names = found.hole_states.join(" + ");
        part(format!(
            "**Band {} as {}** ({})",
            found.band,
            escaped(&names),
            percent(found.probability)
        ));
        part(bullets(found.evidence.iter().map(|e| {
            format!(
                "{}: {}{}",
                stance(e.stance),
                escaped(&e.text),
                odds(e.weight)
            )
        })));
    }
}

fn remarks(dossier: &Dossier, part: &mut impl FnMut(String)) {
    if dossier.remarks.is_empty() {
        return;
    }
    part("## Remarks".to_owned());
    let lines = dossier.remarks.iter().map(|r| {
        let mut line = format!(
            "**{} at {} eV{}.** {}",
            prose::capital(prose::remark_kind(r.kind)),
            energy(r.position_ev),
            r.band.map_or(String::new(), |b| format!(" (band {b})")),
            escaped(&r.text)
        );
        for c in &r.candidates {
            let _ = write!(
                line,
                "\n  - {}: {}, expected at {:.3} eV, observed {:+.3} eV from there",
                escaped(&c.cause),
                percent(c.probability),
                c.expected_ev,
                c.deviation_ev
            );
        }
        line
    });
    part(bullets(lines));
}

/// Word for a stance.
pub(super) fn stance(stance: Stance) -> &'static str {
    match stance {
        Stance::For => "for",
        Stance::Against => "against",
        Stance::Neutral => "context",
    }
}

/// ` (odds × 3.2)`, or nothing where the evidence carries no weight.
pub(super) fn odds(weight: f64) -> String {
    match weight {
        0.0 => String::new(),
        w if w.abs() > 6.9 => format!(" (odds × 10^{:.0})", w / std::f64::consts::LN_10),
        w => format!(" (odds × {:.2})", w.exp()),
    }
}

/// Settings by name; tables in tables get dotted names.
pub(super) fn settings(dossier: &Dossier) -> Vec<(String, String)> {
    fn walk(name: &str, value: &serde_json::Value, out: &mut Vec<(String, String)>) {
        match value {
            serde_json::Value::Object(fields) => {
                for (key, inner) in fields {
                    walk(&format!("{name}.{key}"), inner, out);
                }
            }
            serde_json::Value::String(text) => out.push((name.to_owned(), text.clone())),
            serde_json::Value::Null => out.push((name.to_owned(), "not set".to_owned())),
            other => out.push((name.to_owned(), other.to_string())),
        }
    }
    let mut out = Vec::new();
    for (key, value) in &dossier.study {
        walk(key, value, &mut out);
    }
    out
}

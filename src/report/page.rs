//! `page.html`: figure, tables and evidence on one page that needs nothing else.

use super::listings::{assignment, hole_states};
use super::markdown::{odds, settings, stance};
use super::words::{Words, chemical, energy, orbital, percent};
use super::{Dossier, Figure, prose};
use crate::assign::{Match, Remark};
use maud::{DOCTYPE, Markup, PreEscaped, html};

const STYLE: &str = "\
:root{color-scheme:light dark;--ground:#fff;--ink:#1a1a1a;--soft:#5c5c5c;--rule:#d5d5d5;--tint:#f3f5f8}\
@media (prefers-color-scheme:dark){:root{--ground:#16181b;--ink:#e6e6e6;--soft:#a3a8ae;--rule:#3a3e44;--tint:#1f2328}}\
*{box-sizing:border-box}\
body{margin:0 auto;padding:2rem 1.25rem 4rem;max-width:62rem;background:var(--ground);color:var(--ink);\
font:16px/1.5 system-ui,sans-serif}\
h1{font-size:1.6rem;line-height:1.25;margin:0 0 .75rem}\
h2{font-size:1.15rem;margin:2.25rem 0 .5rem;padding-top:.75rem;border-top:1px solid var(--rule)}\
h3{font-size:1rem;margin:1.25rem 0 .25rem}\
figure{margin:1.5rem 0;padding:.5rem;background:#fff;border:1px solid var(--rule);border-radius:4px}\
figure svg{display:block;width:100%;height:auto}\
figcaption{color:#5c5c5c;font-size:.85rem;padding:.5rem .25rem 0}\
.wide{overflow-x:auto}\
table{border-collapse:collapse;font-size:.875rem;font-variant-numeric:tabular-nums;width:100%}\
th{text-align:left;border-bottom:2px solid var(--rule);vertical-align:bottom}\
td{border-bottom:1px solid var(--rule);vertical-align:top}\
th,td{padding:.3rem .55rem}\
.number{text-align:right;white-space:nowrap}\
sub,sup{line-height:0}\
ul{padding-left:1.2rem;margin:.25rem 0}\
li.against{color:var(--soft)}\
.aside{color:var(--soft);font-size:.9rem}\
dl{display:grid;grid-template-columns:max-content 1fr;gap:.15rem 1rem;font-size:.875rem}\
dt{font-family:ui-monospace,monospace}dd{margin:0;overflow-wrap:anywhere}\
@media print{body{max-width:none;padding:0;font-size:10pt}h2{break-after:avoid}\
figure,tr,li{break-inside:avoid}.wide{overflow:visible}table{font-size:7.5pt}}";

/// The page; `figure` is the drawing of the same dossier.
pub fn page_html(dossier: &Dossier, figure: &Figure) -> String {
    let formula = chemical(&dossier.levels.molecule.formula);
    let title = Words::from(format!("Photoelectron bands of {} (", dossier.title))
        .then(formula)
        .then(Words::from(")"));
    let page = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                title { (title.plain) }
                style { (PreEscaped(STYLE)) }
            }
            body {
                h1 { (title.html()) }
                p { (prose::summary(dossier)) }
                p { (prose::shift(dossier)) }
                figure {
                    (PreEscaped(figure.svg()))
                    figcaption { (caption(dossier)) }
                }
                h2 { "Assignment" }
                @if dossier.bands.is_empty() {
                    p { "No band was found in the trace." }
                } @else {
                    (assignment(dossier).html())
                }
                p.aside { (prose::WORDS_OF_ENERGY) }
                @if !dossier.assignment.unseen.is_empty() {
                    p {
                        "Computed inside the trace, but no band was found for: "
                        @for (i, name) in dossier.assignment.unseen.iter().enumerate() {
                            @if i > 0 { ", " }
                            (orbital(name).html())
                        }
                        "."
                    }
                }
                @if dossier.matches.iter().any(|m| !m.evidence.is_empty()) {
                    h2 { "Evidence" }
                    @for found in dossier.matches.iter().filter(|m| !m.evidence.is_empty()) {
                        (evidence(found))
                    }
                }
                @if !dossier.remarks.is_empty() {
                    h2 { "Remarks" }
                    ul { @for remark in &dossier.remarks { (remark_item(remark)) } }
                }
                h2 { "Fit" }
                p { (prose::fit_quality(&dossier.fit.statistics)) }
                @if let Some(text) = prose::grouping(dossier) { p { (text) } }
                @let notes = prose::fit_notes(&dossier.fit.undetermined, &dossier.fit.correlations);
                @if !notes.is_empty() { ul { @for note in notes { li { (note) } } } }
                h2 { "Computed levels (" (dossier.levels.level) ")" }
                (hole_states(&dossier.levels).html())
                @let notes = prose::level_notes(&dossier.levels);
                @if !notes.is_empty() { ul { @for note in notes { li { (note) } } } }
                p.aside { (prose::level_limits(dossier.levels.level.method)) }
                h2 { "Trace and settings" }
                p { (prose::trace(dossier)) }
                @if !dossier.trace.comments.is_empty() {
                    p { "The file says of itself:" }
                    ul { @for comment in &dossier.trace.comments { li { (comment) } } }
                }
                @if !dossier.study.is_empty() {
                    dl { @for (name, value) in settings(dossier) { dt { (name) } dd { (value) } } }
                }
                p.aside { "Made by " (dossier.program) "." }
            }
        }
    };
    page.into_string()
}

fn caption(dossier: &Dossier) -> &'static str {
    match (
        dossier.overlay.sticks.is_empty(),
        dossier.overlay.fit.is_empty(),
    ) {
        (true, true) => "The measured trace.",
        (true, false) => {
            "Top: residuals of the fit in standard deviations. Below: the measured trace, the \
             fit, its background, and each band in its colour with its number."
        }
        (false, _) => {
            "Top: residuals of the fit in standard deviations. Middle: the measured trace, the \
             fit, its background, and each band in its colour with its number. Bottom: the \
             computed ionization energies, thick where they stand after the common shift and \
             scale and in the colour of their band, thin where they were computed."
        }
    }
}

fn evidence(found: &Match) -> Markup {
    html! {
        h3 {
            "Band " (found.band) " as "
            @for (i, name) in found.hole_states.iter().enumerate() {
                @if i > 0 { " + " }
                (orbital(name).html())
            }
            " (" (percent(found.probability)) ")"
        }
        ul {
            @for item in &found.evidence {
                li class=(stance(item.stance)) {
                    b { (stance(item.stance)) } ": " (item.text) (odds(item.weight))
                }
            }
        }
    }
}

fn remark_item(remark: &Remark) -> Markup {
    html! {
        li {
            b {
                (prose::capital(prose::remark_kind(remark.kind)))
                " at " (energy(remark.position_ev)) " eV"
                @if let Some(band) = remark.band { " (band " (band) ")" }
                ". "
            }
            (remark.text)
            @if !remark.candidates.is_empty() {
                ul {
                    @for c in &remark.candidates {
                        li {
                            (chemical(&c.cause).html()) ": " (percent(c.probability))
                            ", expected at " (format!("{:.3}", c.expected_ev))
                            " eV, observed " (format!("{:+.3}", c.deviation_ev)) " eV from there"
                        }
                    }
                }
            }
        }
    }
}

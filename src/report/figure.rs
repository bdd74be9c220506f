//! The figure: heading, residuals, trace with its bands, computed sticks, one energy axis.
//!
//! One drawing serves a study (all panels), bands alone (no sticks) and a prediction alone (no
//! measured points). It is as wide as two columns of a journal, 180 mm; no letter is smaller than
//! 7 points. Colours are told apart by readers with any of the common colour deficiencies, and
//! numbers repeat what colours say.

use super::axes::Scale;
use super::canvas::{Anchor, Canvas, Ink, TextBox, Type, width};
use super::words::{Words, chemical};
use super::{Dossier, Overlay, ReportError};
use super::{legend, panels, render, sticks};
use crate::assign::{Remark, RemarkKind};
use crate::fit::Band;

/// Width of the page in points: 180 mm.
const PAGE_WIDTH: f64 = 510.24;
/// Left and right edges of the panels.
const EDGES: [f64; 2] = [50.0, 500.0];
const RESIDUAL_HEIGHT: f64 = 43.0;
const TRACE_HEIGHT: f64 = 160.0;
const PANEL_GAP: f64 = 5.0;
const AXIS_HEIGHT: f64 = 31.0;

pub(super) const BLACK: Ink = Ink::new(0x1a1a1a);
pub(super) const SOFT: Ink = Ink::new(0x5c5c5c);
pub(super) const PALE: Ink = Ink::new(0xa8a8a8);

/// Regular text.
pub(super) const TEXT: Type = Type {
    size: 7.5,
    bold: false,
    ink: BLACK,
};
/// Smallest text.
pub(super) const SMALL: Type = Type {
    size: 7.0,
    bold: false,
    ink: SOFT,
};
const TITLE: Type = Type {
    size: 9.0,
    bold: true,
    ink: BLACK,
};

/// Band colours: neighbours differ in lightness as well as in hue.
const PALETTE: [Ink; 8] = [
    Ink::new(0x33629c),
    Ink::new(0xd9822b),
    Ink::new(0x2f9484),
    Ink::new(0xb8527f),
    Ink::new(0x6db1d6),
    Ink::new(0x8a6d2f),
    Ink::new(0x6a4c93),
    Ink::new(0x93a83f),
];

/// What stands above a figure.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Heading {
    /// At the left, for example `hydrogen sulfide, H2S`; formulas get their subscripts.
    pub title: String,
    /// At the right, for example `hν = 21.22 eV · koopmans/def2-tzvp`.
    pub details: String,
}

/// What is drawn, and where its energies stand.
pub(super) struct Scene<'a> {
    pub overlay: &'a Overlay,
    pub bands: &'a [Band],
    pub remarks: &'a [Remark],
    pub x: Scale,
    pub edges: [f64; 2],
}

impl Scene<'_> {
    /// Whether there are measured points.
    pub fn is_measured(&self) -> bool {
        !self.overlay.energy_ev.is_empty()
    }

    /// The remark that says that a band is none of the molecule's.
    pub fn foreign(&self, band: usize) -> Option<&Remark> {
        self.remarks
            .iter()
            .find(|r| r.band == Some(band) && is_foreign(r))
    }

    /// Colour of a band.
    pub fn ink(&self, band: usize) -> Ink {
        match self.foreign(band) {
            Some(_) => Ink::new(0x8c8c8c),
            None => PALETTE[band.saturating_sub(1) % PALETTE.len()],
        }
    }
}

/// Whether a remark is about a feature that none of the computed states explains.
pub(super) fn is_foreign(remark: &Remark) -> bool {
    match remark.kind {
        RemarkKind::ForeignGas | RemarkKind::LampSatellite | RemarkKind::Unexplained => true,
        RemarkKind::MissingBand | RemarkKind::OpenOrder | RemarkKind::Fit => false,
    }
}

/// A finished figure.
#[derive(Debug, Clone, PartialEq)]
pub struct Figure {
    svg: String,
    texts: Vec<TextBox>,
}

impl Figure {
    /// The overlay of a study.
    ///
    /// # Errors
    /// See [`Figure::new`].
    pub fn of(dossier: &Dossier) -> Result<Figure, ReportError> {
        let molecule = &dossier.levels.molecule;
        let title = match dossier.title.contains(&molecule.formula) {
            true => dossier.title.clone(),
            false => format!("{}, {}", dossier.title, molecule.formula),
        };
        let mut details = Vec::new();
        if let Some(energy) = dossier.trace.photon_energy_ev {
            details.push(format!("hν = {energy:.2} eV"));
        }
        details.push(dossier.levels.level.to_string());
        if !dossier.matches.is_empty() {
            let a = &dossier.assignment;
            let sign = if a.shift_ev < 0.0 { '−' } else { '+' };
            let (scale, shift) = (a.scale, a.shift_ev.abs());
            details.push(format!(
                "shifted: {scale:.3} × computed {sign} {shift:.2} eV"
            ));
        }
        let heading = Heading {
            title,
            details: details.join(" · "),
        };
        Figure::new(&heading, &dossier.overlay, &dossier.bands, &dossier.remarks)
    }

    /// A figure of whatever the overlay holds.
    ///
    /// # Errors
    /// [`ReportError::Empty`] without measured points and prediction,
    /// [`ReportError::Inconsistent`] where arrays do not fit together, [`ReportError::Drawing`]
    /// when the drawing library fails.
    pub fn new(
        heading: &Heading,
        overlay: &Overlay,
        bands: &[Band],
        remarks: &[Remark],
    ) -> Result<Figure, ReportError> {
        overlay.check()?;
        let span = span(overlay).ok_or(ReportError::Empty)?;
        let scene = Scene {
            overlay,
            bands,
            remarks,
            x: Scale::energy(span, EDGES, overlay.direction),
            edges: EDGES,
        };
        let mut ink = Canvas::default();
        let mut top = draw_heading(&mut ink, heading, &scene);
        if !overlay.residual.is_empty() {
            panels::residuals(&mut ink, &scene, [top, top + RESIDUAL_HEIGHT]);
            top += RESIDUAL_HEIGHT + PANEL_GAP;
        }
        panels::trace(&mut ink, &scene, [top, top + TRACE_HEIGHT]);
        top += TRACE_HEIGHT;
        if overlay.sticks.iter().any(|s| scene.x.holds(s.shifted_ev)) {
            top = sticks::draw(&mut ink, &scene, top + PANEL_GAP);
        }
        draw_axis(&mut ink, &scene, top);
        let size = [PAGE_WIDTH, top + AXIS_HEIGHT];
        let (letters, texts) = ink.finish(size)?;
        let svg = render::outlined(&letters, &heading.title)?;
        Ok(Figure { svg, texts })
    }

    /// As SVG, letters drawn as outlines: it looks the same everywhere and needs no font.
    pub fn svg(&self) -> &str {
        &self.svg
    }

    /// As PNG, 300 pixels to the inch.
    ///
    /// # Errors
    /// [`ReportError::Drawing`].
    pub fn png(&self) -> Result<Vec<u8>, ReportError> {
        render::png(&self.svg)
    }

    /// As PDF of one page.
    ///
    /// # Errors
    /// [`ReportError::Drawing`].
    pub fn pdf(&self) -> Result<Vec<u8>, ReportError> {
        render::pdf(&self.svg)
    }

    /// Every text in it and the box that it fills.
    pub fn texts(&self) -> &[TextBox] {
        &self.texts
    }
}

/// Energies that the axis spans: the measured trace, else the prediction.
fn span(overlay: &Overlay) -> Option<[f64; 2]> {
    let measured = &overlay.energy_ev;
    let predicted = overlay.predicted.as_ref().map(|p| &p.energy_ev);
    let axis = match measured.is_empty() {
        false => measured,
        true => predicted?,
    };
    let (low, high) = (*axis.first()?, *axis.last()?);
    let margin = 0.012 * (high - low);
    Some([low - margin, high + margin])
}

fn draw_heading(ink: &mut Canvas, heading: &Heading, scene: &Scene<'_>) -> f64 {
    let [left, right] = scene.edges;
    let title = chemical(&cut(&heading.title, TITLE, right - left));
    let details = Words::from(cut(&heading.details, SMALL, right - left));
    let mut base = 15.0;
    ink.text([left, base], Anchor::Start, &title, TITLE);
    if width(&title, TITLE) + width(&details, SMALL) + 12.0 > right - left {
        base += 11.0;
    }
    ink.text([right, base], Anchor::End, &details, SMALL);
    base += 13.0;
    legend::draw(ink, scene, [left, base]) + 7.0
}

/// As much of a text as there is room for.
fn cut(text: &str, style: Type, room: f64) -> String {
    let mut shown = text.to_owned();
    let mut letters: Vec<char> = text.chars().collect();
    while width(&Words::from(shown.as_str()), style) > room && letters.pop().is_some() {
        shown = letters.iter().chain(&['…']).collect();
    }
    shown
}

fn draw_axis(ink: &mut Canvas, scene: &Scene<'_>, top: f64) {
    let ticks = scene.x.ticks(9.0);
    for &value in &ticks.minor {
        let x = scene.x.at(value);
        ink.line(&[[x, top], [x, top + 2.0]], BLACK, 0.5);
    }
    for &value in &ticks.major {
        let x = scene.x.at(value);
        ink.line(&[[x, top], [x, top + 3.5]], BLACK, 0.6);
        let text = ticks.text(value, 1.0);
        ink.text([x, top + 11.5], Anchor::Middle, &text, TEXT);
    }
    let middle = 0.5 * (scene.edges[0] + scene.edges[1]);
    let title = Words::from("Ionization energy (eV)");
    let style = Type { size: 8.5, ..TEXT };
    ink.text([middle, top + 24.0], Anchor::Middle, &title, style);
}

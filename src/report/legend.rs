//! The legend of the figure: one entry for each kind of mark that is there.

use super::OverlayStick;
use super::canvas::{Anchor, Canvas, Ink, width};
use super::figure::{BLACK, PALE, SMALL, SOFT, Scene, TEXT, is_foreign};
use super::panels::{BACKGROUND, DOT, PREDICTED};
use super::words::Words;

/// A mark that the legend explains.
enum Sample {
    Dot,
    Line(Ink, f64),
    Dashes(Ink, f64),
    Triangle,
    Tick,
    Dagger,
    Absent,
}

impl Sample {
    fn width(&self) -> f64 {
        match self {
            Sample::Line(..) | Sample::Dashes(..) => 13.0,
            Sample::Dot | Sample::Triangle => 5.0,
            Sample::Tick | Sample::Dagger | Sample::Absent => 4.0,
        }
    }

    fn draw(&self, ink: &mut Canvas, x: f64, base: f64) {
        let mid = base - 2.5;
        let right = x + self.width();
        let centre = 0.5 * (x + right);
        match *self {
            Sample::Dot => ink.dot([centre, mid], 1.3, DOT),
            Sample::Line(colour, width) => ink.line(&[[x, mid], [right, mid]], colour, width),
            Sample::Dashes(colour, width) => {
                ink.dashed(&[[x, mid], [right, mid]], colour, width, 3.0, 2.0);
            }
            Sample::Triangle => {
                let foot = mid + 2.6;
                ink.area(&[[centre, mid - 2.8], [x, foot], [right, foot]], SOFT);
            }
            Sample::Tick => {
                ink.line(&[[centre, mid - 2.4], [centre, mid + 2.6]], SOFT, 0.8);
            }
            Sample::Dagger => ink.text([x, base], Anchor::Start, &Words::from("†"), TEXT),
            Sample::Absent => {
                let ends = [[centre, mid - 3.5], [centre, mid + 3.5]];
                ink.dashed(&ends, PALE.darker(0.7), 1.6, 1.8, 1.2);
            }
        }
    }
}

/// What the marks mean; takes as many lines as it needs and returns the base of the last one.
pub fn draw(ink: &mut Canvas, scene: &Scene<'_>, [left, base]: [f64; 2]) -> f64 {
    const LINE: f64 = 10.5;
    let overlay = scene.overlay;
    let mut entries = Vec::new();
    if scene.is_measured() {
        entries.push((Sample::Dot, "measured"));
    }
    if !overlay.fit.is_empty() {
        entries.push((Sample::Line(BLACK, 0.9), "fit"));
        entries.push((Sample::Dashes(BACKGROUND, 0.7), "background"));
    }
    if !scene.bands.is_empty() {
        entries.push((Sample::Triangle, "vertical energy"));
        if scene.bands.iter().any(|b| b.members.len() > 1) {
            entries.push((Sample::Tick, "member"));
        }
    }
    if scene.remarks.iter().any(is_foreign) {
        entries.push((Sample::Dagger, "not assigned"));
    }
    let shown = |s: &OverlayStick| scene.x.holds(s.shifted_ev);
    let has_sticks = overlay.sticks.iter().any(shown);
    if overlay.predicted.is_some() && (has_sticks || !scene.is_measured()) {
        entries.push((Sample::Line(PREDICTED, 0.9), "predicted"));
    }
    let absent = |s: &OverlayStick| s.band.is_none() && shown(s);
    if scene.is_measured() && overlay.sticks.iter().any(absent) {
        entries.push((Sample::Absent, "no band"));
    }
    let (mut x, mut base) = (left, base);
    for (sample, text) in entries {
        let words = Words::from(text);
        let extent = sample.width() + 3.5 + width(&words, SMALL);
        if x > left && x + extent > scene.edges[1] {
            (x, base) = (left, base + LINE);
        }
        sample.draw(ink, x, base);
        let start = [x + sample.width() + 3.5, base];
        ink.text(start, Anchor::Start, &words, SMALL);
        x += extent + 8.0;
    }
    base
}

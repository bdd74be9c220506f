//! The computed half of the figure: shifted sticks with their labels, and how far they moved.

use super::OverlayStick;
use super::canvas::{Anchor, Canvas, Ink, Type, width};
use super::figure::{BLACK, PALE, SMALL, SOFT, Scene, TEXT};
use super::place::{Seat, seats};
use super::words::{Words, orbital};

const ROW_HEIGHT: f64 = 19.0;
const STICK_HEIGHT: f64 = 42.0;
/// Height over which a leader slants from its stick to its label.
const SLANT: f64 = 9.0;
/// Height of the lines that join shifted and unshifted positions.
const JOIN: f64 = 15.0;
const RAW_TICK: f64 = 7.0;
const LABEL: Type = Type { size: 7.5, ..TEXT };
const CURVE: Ink = Ink::new(0x33629c);

/// Draws the panel from `top` on; returns where it ends.
pub fn draw(ink: &mut Canvas, scene: &Scene<'_>, top: f64) -> f64 {
    let [left, right] = scene.edges;
    let mut shown: Vec<&OverlayStick> = scene
        .overlay
        .sticks
        .iter()
        .filter(|s| scene.x.holds(s.shifted_ev))
        .collect();
    shown.sort_by(|a, b| {
        scene
            .x
            .at(a.shifted_ev)
            .total_cmp(&scene.x.at(b.shifted_ev))
    });
    let texts: Vec<[Words; 2]> = shown
        .iter()
        .map(|s| [orbital(&s.label), Words::from(s.verdict.to_string())])
        .collect();
    let widths: Vec<f64> = texts
        .iter()
        .map(|[label, verdict]| width(label, LABEL).max(width(verdict, SMALL)))
        .collect();
    let anchors: Vec<f64> = shown.iter().map(|s| scene.x.at(s.shifted_ev)).collect();
    let placed = seats(&anchors, &widths, [left + 3.0, right - 3.0]);
    let rows = match &placed {
        Some(seats) => seats.iter().map(|s| s.row + 1).max().unwrap_or(0),
        None => 1,
    };
    let head = top + 3.0 + ROW_HEIGHT * rows as f64;
    let elbow = head + SLANT;
    let foot = elbow + 3.0 + STICK_HEIGHT;
    let moved = shown
        .iter()
        .any(|s| (s.shifted_ev - s.computed_ev).abs() > 1e-6);
    let bottom = match moved {
        true => foot + JOIN + RAW_TICK,
        false => foot,
    };
    if scene.is_measured() {
        predicted(ink, scene, foot);
    }
    let thick = if shown.len() > 40 { 1.0 } else { 2.2 };
    let tallest = shown.iter().map(|s| s.height).fold(0.0, f64::max);
    for (i, stick) in shown.iter().enumerate() {
        let x = anchors[i];
        let tip = foot - STICK_HEIGHT * stick.height / tallest;
        match stick.band {
            Some(band) => ink.line(&[[x, foot], [x, tip]], scene.ink(band), thick),
            None if scene.is_measured() => {
                let grey = PALE.darker(0.7);
                ink.dashed(&[[x, foot], [x, tip]], grey, 0.75 * thick, 3.0, 2.0);
            }
            None => ink.line(&[[x, foot], [x, tip]], BLACK.at(0.75), thick),
        }
        if moved {
            join(ink, scene, stick, [foot, bottom]);
        }
        if let Some(seats) = &placed {
            let line = leader(&seats[i], x, tip, elbow, head);
            ink.line(&line, SOFT.at(0.8), 0.4);
            let [label, verdict] = &texts[i];
            let seat = &seats[i];
            let place = seat.path[seat.row];
            let base = row_bottom(seat.row, head) - 2.5;
            ink.text([place, base - 8.0], Anchor::Middle, label, LABEL);
            ink.text([place, base], Anchor::Middle, verdict, SMALL);
        }
    }
    if placed.is_none() {
        let note = Words::from(format!(
            "{} states: their labels stand in the table",
            shown.len()
        ));
        let middle = 0.5 * (left + right);
        ink.text([middle, top + 12.0], Anchor::Middle, &note, SMALL);
    }
    if moved {
        ink.line(&[[left, foot], [right, foot]], PALE, 0.4);
        let caption = |ink: &mut Canvas, y: f64, text: &str| {
            ink.text([left - 4.0, y], Anchor::End, &Words::from(text), SMALL);
        };
        caption(ink, foot + 1.0, "shifted");
        caption(ink, bottom - 1.0, "computed");
    }
    ink.frame([left, top, right, bottom], BLACK, 0.6);
    bottom
}

/// Lower edge of a row of labels; row 0 is the lowest.
fn row_bottom(row: usize, head: f64) -> f64 {
    head - ROW_HEIGHT * row as f64
}

/// From the tip of a stick up, aslant to its place in the lowest row, and on from row to row.
fn leader(seat: &Seat, x: f64, tip: f64, elbow: f64, head: f64) -> Vec<[f64; 2]> {
    let mut line = vec![[x, tip - 1.0], [x, elbow], [seat.path[0], head + 0.5]];
    for row in 0..seat.row {
        let top = row_bottom(row, head) - ROW_HEIGHT + 3.0;
        line.push([seat.path[row], top]);
        line.push([seat.path[row + 1], row_bottom(row + 1, head) + 0.5]);
    }
    line
}

/// The line from a shifted stick to where it was computed, cut at the edge of the panel.
fn join(ink: &mut Canvas, scene: &Scene<'_>, stick: &OverlayStick, [foot, bottom]: [f64; 2]) {
    let [left, right] = scene.edges;
    let (from, to) = (scene.x.at(stick.shifted_ev), scene.x.at(stick.computed_ev));
    let tick = bottom - RAW_TICK;
    let end = to.clamp(left, right);
    let share = if to == from {
        1.0
    } else {
        (end - from) / (to - from)
    };
    let line = [[from, foot], [end, foot + share * (tick - foot)]];
    ink.line(&line, SOFT.at(0.55), 0.4);
    if scene.x.holds(stick.computed_ev) {
        ink.line(&[[to, tick], [to, bottom]], SOFT, 0.9);
    }
}

/// The predicted trace behind the sticks, at their scale.
fn predicted(ink: &mut Canvas, scene: &Scene<'_>, foot: f64) {
    let Some(curve) = &scene.overlay.predicted else {
        return;
    };
    let inside = curve
        .energy_ev
        .iter()
        .zip(&curve.intensity)
        .filter(|(e, _)| scene.x.holds(**e));
    let highest = inside.clone().map(|(_, v)| *v).fold(0.0, f64::max);
    if highest <= 0.0 {
        return;
    }
    let line: Vec<[f64; 2]> = inside
        .map(|(e, v)| [scene.x.at(*e), foot - STICK_HEIGHT * v.max(0.0) / highest])
        .collect();
    if let (Some(first), Some(last)) = (line.first().copied(), line.last().copied()) {
        let mut shape = line.clone();
        shape.push([last[0], foot]);
        shape.push([first[0], foot]);
        ink.area(&shape, CURVE.at(0.10));
        ink.line(&line, CURVE.at(0.7), 0.6);
    }
}

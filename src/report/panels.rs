//! The measured half of the figure: residuals, trace, bands.

use super::axes::{Scale, intensity_title, unit_of};
use super::canvas::{Anchor, Canvas, Ink, Type, width};
use super::figure::{BLACK, SMALL, SOFT, Scene, TEXT, is_foreign};
use super::place::{Percher, Skyline};
use super::words::{Words, chemical};
use crate::assign::Remark;

pub(super) const DOT: Ink = Ink::new(0x7c7c7c);
const BAR: Ink = Ink::new(0xababab);
pub(super) const BACKGROUND: Ink = Ink::new(0x7a7a7a);
pub(super) const PREDICTED: Ink = Ink::new(0x33629c);
const FRAME: f64 = 0.6;
/// Strip at the bottom of the trace panel where members and vertical energies are marked.
const STRIP: f64 = 8.0;
/// Longest cause that is printed beside a mark, in characters.
const LONGEST_CAUSE: usize = 26;

/// Size of the measured points by how dense they stand, and whether error bars would be seen.
/// Points are opaque: transparent ones by the thousand make a PDF slow.
struct Dots {
    radius: f64,
    bars: bool,
    crowded: bool,
}

impl Dots {
    fn new(scene: &Scene<'_>) -> Self {
        let per_point = scene.overlay.energy_ev.len() as f64 / (scene.edges[1] - scene.edges[0]);
        let (radius, bars, crowded) = match per_point {
            d if d < 0.35 => (1.1, true, false),
            d if d < 1.2 => (0.8, false, false),
            d if d < 3.0 => (0.6, false, false),
            _ => (0.42, false, true),
        };
        Dots {
            radius,
            bars,
            crowded,
        }
    }

    /// Points to draw. Where many fall on the same column of the page, the lowest, the highest
    /// and two between stand for all.
    fn thinned(&self, points: &[[f64; 2]]) -> Vec<[f64; 2]> {
        const COLUMN: f64 = 0.8;
        if !self.crowded {
            return points.to_vec();
        }
        let column = |p: &[f64; 2]| (p[0] / COLUMN).floor();
        let mut out = Vec::new();
        for chunk in points.chunk_by(|a, b| column(a) == column(b)) {
            let mut sorted = chunk.to_vec();
            sorted.sort_by(|a, b| a[1].total_cmp(&b[1]));
            let last = sorted.len() - 1;
            let mut picks = vec![0, last / 3, 2 * last / 3, last];
            picks.dedup();
            out.extend(picks.into_iter().map(|i| sorted[i]));
        }
        out
    }

    fn draw(&self, ink: &mut Canvas, points: &[[f64; 2]]) {
        for &[x, y] in points {
            let r = self.radius;
            match self.crowded {
                true => ink.block([x - r, y - r, x + r, y + r], DOT),
                false => ink.dot([x, y], r, DOT),
            }
        }
    }
}

fn at(x: &Scale, y: &Scale, energies: &[f64], values: &[f64]) -> Vec<[f64; 2]> {
    let pairs = energies.iter().zip(values);
    pairs.map(|(e, v)| [x.at(*e), y.at(*v)]).collect()
}

fn minor_ticks(ink: &mut Canvas, edge: f64, y: &Scale, wanted: f64) {
    for value in y.ticks(wanted).minor {
        let at = y.at(value);
        ink.line(&[[edge, at], [edge - 2.0, at]], BLACK, 0.5);
    }
}

fn major_ticks(ink: &mut Canvas, edge: f64, y: &Scale, wanted: f64, unit: f64) {
    let ticks = y.ticks(wanted);
    for &value in &ticks.major {
        let at = y.at(value);
        ink.line(&[[edge, at], [edge - 3.5, at]], BLACK, 0.6);
        let text = ticks.text(value, unit);
        ink.text([edge - 5.5, at + 2.7], Anchor::End, &text, TEXT);
    }
}

/// The residual panel between two heights.
pub fn residuals(ink: &mut Canvas, scene: &Scene<'_>, [top, bottom]: [f64; 2]) {
    let [left, right] = scene.edges;
    let overlay = scene.overlay;
    let largest = overlay.residual.iter().fold(0.0f64, |m, r| m.max(r.abs()));
    let limit = (1.08 * largest).clamp(3.6, 7.0);
    let y = Scale::new([-limit, limit], [bottom - 2.0, top + 2.0]);
    ink.block([left, y.at(2.0), right, y.at(-2.0)], Ink::new(0xe9edf2));
    ink.line(&[[left, y.at(0.0)], [right, y.at(0.0)]], SOFT, 0.5);
    let dots = Dots::new(scene);
    let inside = |r: &f64| r.abs() <= limit;
    let points = at(&scene.x, &y, &overlay.energy_ev, &overlay.residual);
    let (within, beyond): (Vec<_>, Vec<_>) = points
        .iter()
        .zip(&overlay.residual)
        .partition(|(_, r)| inside(r));
    let within: Vec<[f64; 2]> = within.into_iter().map(|(p, _)| *p).collect();
    dots.draw(ink, &dots.thinned(&within));
    // What lies beyond the panel is shown at its edge, never dropped.
    for ([x, _], residual) in beyond {
        let (tip, foot) = match *residual > 0.0 {
            true => (top + 1.0, top + 5.0),
            false => (bottom - 1.0, bottom - 5.0),
        };
        let corners = [[*x, tip], [x - 1.8, foot], [x + 1.8, foot]];
        ink.area(&corners, Ink::new(0xb03a2e));
    }
    ink.frame([left, top, right, bottom], BLACK, FRAME);
    major_ticks(ink, left, &y, limit.min(4.0), 1.0);
    let title = Words::from("Residual (σ)");
    let middle = 0.5 * (top + bottom);
    ink.upright_text([14.0, middle], Anchor::Middle, &title, SMALL);
}

/// The trace panel between two heights: bands, background, points, fit, numbers.
pub fn trace(ink: &mut Canvas, scene: &Scene<'_>, [top, bottom]: [f64; 2]) {
    let [left, right] = scene.edges;
    let Some((low, high)) = extent(scene) else {
        return;
    };
    let floor = bottom - STRIP;
    let mut head = high;
    let mut labels = Vec::new();
    // Labels need headroom, and the height they stand at depends on the scale.
    for _ in 0..12 {
        head *= 1.04;
        let y = Scale::new([low, head], [floor, top]);
        labels = place_labels(scene, &y, floor);
        let highest = labels
            .iter()
            .map(|l: &Label| l.perch.bounds[1])
            .fold(f64::INFINITY, f64::min);
        if highest >= top + 3.0 {
            break;
        }
        head += (low.max(head) - low) * ((top + 3.0 - highest) / (floor - top)).min(0.5);
    }
    let y = Scale::new([low, head], [floor, top]);
    match scene.is_measured() {
        true => draw_measured(ink, scene, &y),
        false => draw_predicted(ink, scene, &y),
    }
    draw_marks(ink, scene, bottom);
    for label in &labels {
        let [l, _, r, b] = label.perch.bounds;
        if let Some([x, from, to]) = label.perch.leader {
            ink.line(&[[x, from], [x, to]], SOFT, 0.4);
        }
        let middle = [0.5 * (l + r), b - 1.0];
        ink.text(middle, Anchor::Middle, &label.words, label.style);
    }
    ink.frame([left, top, right, bottom], BLACK, FRAME);
    let largest = match scene.is_measured() {
        true => head,
        false => 1.0,
    };
    let unit = unit_of(largest);
    let title = match scene.is_measured() {
        true => {
            minor_ticks(ink, left, &y, 5.0);
            major_ticks(ink, left, &y, 5.0, unit);
            intensity_title("Intensity", unit, &scene.overlay.unit)
        }
        false => Words::from("Predicted intensity (arbitrary units)"),
    };
    let style = Type { size: 8.5, ..TEXT };
    let middle = 0.5 * (top + bottom);
    ink.upright_text([15.0, middle], Anchor::Middle, &title, style);
}

/// Lowest and highest intensity shown.
fn extent(scene: &Scene<'_>) -> Option<(f64, f64)> {
    let overlay = scene.overlay;
    let values: Vec<f64> = match scene.is_measured() {
        true => overlay
            .intensity
            .iter()
            .chain(&overlay.fit)
            .copied()
            .collect(),
        false => overlay.predicted.as_ref()?.intensity.clone(),
    };
    let low = values.iter().copied().fold(0.0, f64::min);
    let high = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    Some((low, if high > low { high } else { low + 1.0 }))
}

fn draw_measured(ink: &mut Canvas, scene: &Scene<'_>, y: &Scale) {
    let overlay = scene.overlay;
    let energies = overlay.curve_axis();
    let base = match overlay.background.is_empty() {
        true => vec![0.0; energies.len()],
        false => overlay.background.clone(),
    };
    let [low, high] = y.range();
    let seen = 0.0015 * (high - low);
    let mut outlines = Vec::new();
    for curve in &overlay.bands {
        let above = |v: &f64| *v > seen;
        let Some(first) = curve.intensity.iter().position(above) else {
            continue;
        };
        let last = curve.intensity.iter().rposition(above).unwrap_or(first);
        let range = first.saturating_sub(1)..(last + 2).min(energies.len());
        let sums: Vec<f64> = range
            .clone()
            .map(|i| base[i] + curve.intensity[i])
            .collect();
        let upper = at(&scene.x, y, &energies[range.clone()], &sums);
        let mut shape = upper.clone();
        shape.extend(
            at(&scene.x, y, &energies[range.clone()], &base[range])
                .iter()
                .rev(),
        );
        let colour = scene.ink(curve.band);
        ink.area(&shape, colour.at(0.30));
        outlines.push((upper, colour));
    }
    let dots = Dots::new(scene);
    let points = at(&scene.x, y, &overlay.energy_ev, &overlay.intensity);
    if dots.bars {
        for ((point, value), sd) in points
            .iter()
            .zip(&overlay.intensity)
            .zip(&overlay.intensity_sd)
        {
            let ends = [y.at(value - sd).min(y.at(low)), y.at(value + sd)];
            if point[1] - ends[1] > dots.radius + 0.4 {
                ink.line(&[[point[0], ends[0]], [point[0], ends[1]]], BAR, 0.4);
            }
        }
    }
    if overlay.fit.is_empty() {
        // No fit leads the eye from point to point.
        ink.line(&points, BAR, 0.5);
    }
    dots.draw(ink, &dots.thinned(&points));
    if !overlay.fit.is_empty() {
        let curve = at(&scene.x, y, energies, &overlay.background);
        ink.dashed(&curve, BACKGROUND, 0.7, 3.0, 2.0);
    }
    for (line, colour) in outlines {
        ink.line(&line, colour, 0.7);
    }
    ink.line(&at(&scene.x, y, energies, &overlay.fit), BLACK, 0.9);
}

fn draw_predicted(ink: &mut Canvas, scene: &Scene<'_>, y: &Scale) {
    if let Some(curve) = &scene.overlay.predicted {
        let line = at(&scene.x, y, &curve.energy_ev, &curve.intensity);
        let mut shape = line.clone();
        let ends = (line.first(), line.last());
        if let (Some(first), Some(last)) = ends {
            shape.push([last[0], y.at(0.0)]);
            shape.push([first[0], y.at(0.0)]);
        }
        ink.area(&shape, PREDICTED.at(0.14));
        ink.line(&line, PREDICTED, 1.0);
    }
}

/// Members and vertical energies at the foot of the panel.
fn draw_marks(ink: &mut Canvas, scene: &Scene<'_>, bottom: f64) {
    for band in scene.bands {
        let colour = scene.ink(band.id).darker(0.85);
        if band.members.len() > 1 {
            for member in band.members.iter().filter(|m| scene.x.holds(m.position_ev)) {
                let x = scene.x.at(member.position_ev);
                ink.line(&[[x, bottom], [x, bottom - 3.5]], colour, 0.7);
            }
        }
        if scene.x.holds(band.vertical_ev) {
            let x = scene.x.at(band.vertical_ev);
            let corners = [
                [x, bottom - 6.0],
                [x - 2.2, bottom - 0.6],
                [x + 2.2, bottom - 0.6],
            ];
            ink.area(&corners, colour);
        }
    }
}

struct Label {
    words: Words,
    style: Type,
    perch: super::place::Perch,
}

/// What a remark says in the figure: its most probable cause.
fn cause(remark: &Remark) -> String {
    let text = match remark.candidates.first() {
        Some(candidate) => candidate.cause.as_str(),
        None => "unexplained",
    };
    match text.chars().count() > LONGEST_CAUSE {
        true => text.chars().take(LONGEST_CAUSE - 1).chain(['…']).collect(),
        false => text.to_owned(),
    }
}

fn place_labels(scene: &Scene<'_>, y: &Scale, floor: f64) -> Vec<Label> {
    let overlay = scene.overlay;
    let mut skyline = Skyline::new(scene.edges, floor);
    skyline.trace(&at(&scene.x, y, overlay.curve_axis(), &overlay.fit));
    let bars = Dots::new(scene).bars;
    for (i, &value) in overlay.intensity.iter().enumerate() {
        let x = scene.x.at(overlay.energy_ev[i]);
        let reach = if bars { overlay.intensity_sd[i] } else { 0.0 };
        skyline.point(x, y.at(value + reach) - 0.8);
    }
    let number_style = |band: usize| Type {
        size: 8.5,
        bold: true,
        ink: scene.ink(band).darker(0.72),
    };
    let shown = |energy: f64| scene.x.holds(energy);
    // Numbers first, the tallest bands before the others: they have the best right to their place.
    let mut wanted: Vec<(f64, Words, Type)> = Vec::new();
    for band in scene.bands.iter().filter(|b| shown(b.maximum_ev)) {
        let mark = if scene.foreign(band.id).is_some() {
            "†"
        } else {
            ""
        };
        let words = Words::from(format!("{}{mark}", band.id));
        wanted.push((scene.x.at(band.maximum_ev), words, number_style(band.id)));
    }
    wanted.sort_by(|a, b| {
        let height = |x: f64| skyline.top(x - 0.5, x + 0.5);
        height(a.0)
            .total_cmp(&height(b.0))
            .then(a.0.total_cmp(&b.0))
    });
    let mut causes: Vec<(f64, Words, Type)> = Vec::new();
    for remark in scene
        .remarks
        .iter()
        .filter(|r| is_foreign(r) && shown(r.position_ev))
    {
        let band = scene.bands.iter().find(|b| Some(b.id) == remark.band);
        let (energy, mark) = match band.filter(|b| shown(b.maximum_ev)) {
            Some(band) => (band.maximum_ev, ""),
            None => (remark.position_ev, "† "),
        };
        let words = Words::from(mark).then(chemical(&cause(remark)));
        causes.push((scene.x.at(energy), words, SMALL));
    }
    causes.sort_by(|a, b| a.0.total_cmp(&b.0));
    let places: Vec<f64> = causes.iter().map(|c| c.0).collect();
    let mut percher = Percher::new(&skyline, [scene.edges[0] + 2.0, scene.edges[1] - 2.0]);
    let mut labels = Vec::new();
    let count = wanted.len();
    for (i, (x, words, style)) in wanted.into_iter().chain(causes).enumerate() {
        let size = [width(&words, style), style.size + 0.5];
        let others: Vec<f64> = match i.checked_sub(count) {
            Some(k) => places
                .iter()
                .enumerate()
                .filter(|(j, _)| *j != k)
                .map(|(_, x)| *x)
                .collect(),
            None => Vec::new(),
        };
        let perch = percher.perch(x, size, &others);
        labels.push(Label {
            words,
            style,
            perch,
        });
    }
    labels
}

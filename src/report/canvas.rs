//! A page to draw on: points (1/72 inch) from the top left corner, with a record of every text.
//!
//! Drawing is done by the SVG backend of `plotters`, which rounds to whole units; the canvas
//! therefore has [`UNITS`] units to the point, and only the page's width and height are stated in
//! millimetres. Texts are measured with the very font that draws them.

use super::ReportError;
use super::lines::{dashes, simplify};
use super::words::{Height, Words};
use plotters::prelude::{
    DrawingBackend, FontDesc, FontFamily, FontStyle, FontTransform, RGBAColor, SVGBackend,
    ShapeStyle, TextStyle,
};
use plotters::style::register_font;
use plotters::style::text_anchor::{HPos, Pos, VPos};
use std::sync::OnceLock;

/// Name of the font that every text is set in.
pub const FONT: &str = "DejaVu Sans";
/// Units of the drawing to one point.
const UNITS: f64 = 10.0;
/// Millimetres to one point.
const MM: f64 = 25.4 / 72.0;
/// Height over depth of the font's line, in em; its measure is reckoned from it.
const LINE_HEIGHT: f64 = 1.164_062_5;
/// Where the backend hangs a text's top above its base line, in em.
const HANG: f64 = 0.76;
/// The backend's font size is that of the em times this.
const BACKEND_SIZE: f64 = 1.24;
const PAPER: Ink = Ink::new(0xffffff);
/// Size of sub- and superscripts.
const SCRIPT: f64 = 0.72;

/// A colour with its opacity.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Ink {
    /// Red, green, blue.
    pub rgb: (u8, u8, u8),
    /// 0 clear to 1 full.
    pub alpha: f64,
}

impl Ink {
    /// Full colour from `0xRRGGBB`.
    pub const fn new(hex: u32) -> Self {
        Ink {
            rgb: ((hex >> 16) as u8, (hex >> 8) as u8, hex as u8),
            alpha: 1.0,
        }
    }

    /// The same with another opacity.
    pub const fn at(self, alpha: f64) -> Self {
        Ink { alpha, ..self }
    }

    /// The same, darker: each channel times `factor`.
    pub fn darker(self, factor: f64) -> Self {
        let scale = |c: u8| (f64::from(c) * factor).round() as u8;
        let (r, g, b) = self.rgb;
        Ink {
            rgb: (scale(r), scale(g), scale(b)),
            ..self
        }
    }

    fn backend(self) -> RGBAColor {
        RGBAColor(self.rgb.0, self.rgb.1, self.rgb.2, self.alpha)
    }
}

/// Which point of a text is given.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Anchor {
    /// Its left end.
    Start,
    /// Its middle.
    Middle,
    /// Its right end.
    End,
}

/// How a text looks.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Type {
    /// Size in points.
    pub size: f64,
    /// Bold or regular.
    pub bold: bool,
    /// Colour.
    pub ink: Ink,
}

/// A text that stands on the page, with the box it fills (points; left, top, right, bottom).
#[derive(Debug, Clone, PartialEq)]
pub struct TextBox {
    /// What it says.
    pub text: String,
    /// Left, top, right, bottom in points from the page's top left corner.
    pub bounds: [f64; 4],
    /// Size of its letters in points.
    pub size: f64,
}

enum Mark {
    Line(Vec<[f64; 2]>, Ink, f64),
    Area(Vec<[f64; 2]>, Ink),
    Dot([f64; 2], f64, Ink),
    Text(String, [f64; 2], Type, bool),
}

/// The page.
#[derive(Default)]
pub struct Canvas {
    marks: Vec<Mark>,
    texts: Vec<TextBox>,
}

impl Canvas {
    /// A line through points, `width` points thick.
    pub fn line(&mut self, points: &[[f64; 2]], ink: Ink, width: f64) {
        if points.len() > 1 {
            self.marks.push(Mark::Line(simplify(points), ink, width));
        }
    }

    /// A dashed line: `dash` points drawn, `gap` points left out.
    pub fn dashed(&mut self, points: &[[f64; 2]], ink: Ink, width: f64, dash: f64, gap: f64) {
        for piece in dashes(&simplify(points), dash, gap) {
            self.marks.push(Mark::Line(piece, ink, width));
        }
    }

    /// A filled polygon.
    pub fn area(&mut self, points: &[[f64; 2]], ink: Ink) {
        if points.len() > 2 {
            self.marks.push(Mark::Area(simplify(points), ink));
        }
    }

    /// A filled rectangle: left, top, right, bottom.
    pub fn block(&mut self, [x0, y0, x1, y1]: [f64; 4], ink: Ink) {
        let corners = vec![[x0, y0], [x1, y0], [x1, y1], [x0, y1]];
        self.marks.push(Mark::Area(corners, ink));
    }

    /// A frame: left, top, right, bottom.
    pub fn frame(&mut self, [x0, y0, x1, y1]: [f64; 4], ink: Ink, width: f64) {
        let corners = vec![[x0, y0], [x1, y0], [x1, y1], [x0, y1], [x0, y0]];
        self.marks.push(Mark::Line(corners, ink, width));
    }

    /// A filled circle.
    pub fn dot(&mut self, centre: [f64; 2], radius: f64, ink: Ink) {
        self.marks.push(Mark::Dot(centre, radius, ink));
    }

    /// A text; `at` is its point on the base line that `anchor` names.
    pub fn text(&mut self, at: [f64; 2], anchor: Anchor, words: &Words, style: Type) {
        self.set(at, anchor, words, style, false);
    }

    /// A text that runs upwards.
    pub fn upright_text(&mut self, at: [f64; 2], anchor: Anchor, words: &Words, style: Type) {
        self.set(at, anchor, words, style, true);
    }

    fn set(&mut self, at: [f64; 2], anchor: Anchor, words: &Words, style: Type, up: bool) {
        let length = width(words, style);
        let start = match anchor {
            Anchor::Start => 0.0,
            Anchor::Middle => -0.5 * length,
            Anchor::End => -length,
        };
        // Along the text and across it (positive: below the base line).
        let place = |along: f64, across: f64| match up {
            false => [at[0] + along, at[1] + across],
            true => [at[0] + across, at[1] - along],
        };
        let mut along = start;
        for run in &words.runs {
            let (run_style, drop) = run_style(style, run.height);
            let shown = run.text.trim_start_matches(' ');
            let spaces = run.text.len() - shown.len();
            let skipped = text_width(&" ".repeat(spaces), run_style);
            let origin = place(along + skipped, drop);
            self.marks
                .push(Mark::Text(shown.to_owned(), origin, run_style, up));
            along += text_width(&run.text, run_style);
        }
        let [ax, ay] = place(start, -HANG * style.size);
        let [bx, by] = place(along, 0.22 * style.size);
        self.texts.push(TextBox {
            text: words.plain.clone(),
            bounds: [ax.min(bx), ay.min(by), ax.max(bx), ay.max(by)],
            size: style.size,
        });
    }

    /// The page on white paper as SVG, its letters still letters, with the boxes of its texts.
    ///
    /// # Errors
    /// [`ReportError::Drawing`] from the backend.
    pub fn finish(self, size: [f64; 2]) -> Result<(String, Vec<TextBox>), ReportError> {
        let units = size.map(|s| (s * UNITS).round() as u32);
        let mut svg = String::new();
        {
            let mut backend = SVGBackend::with_string(&mut svg, (units[0], units[1]));
            let [width, height] = size;
            let sheet = vec![[0.0, 0.0], [width, 0.0], [width, height], [0.0, height]];
            draw(&mut backend, &Mark::Area(sheet, PAPER))?;
            for mark in &self.marks {
                draw(&mut backend, mark)?;
            }
            backend.present().map_err(failed)?;
        }
        let head = svg.find('>').map_or(0, |i| i + 1);
        let page = format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{:.4}mm\" height=\"{:.4}mm\" \
             viewBox=\"0 0 {} {}\" stroke-linejoin=\"round\">",
            f64::from(units[0]) / UNITS * MM,
            f64::from(units[1]) / UNITS * MM,
            units[0],
            units[1]
        );
        svg.replace_range(..head, &page);
        Ok((svg, self.texts))
    }
}

fn failed(error: impl std::fmt::Display) -> ReportError {
    ReportError::Drawing {
        format: "SVG",
        reason: error.to_string(),
    }
}

fn draw(backend: &mut SVGBackend<'_>, mark: &Mark) -> Result<(), ReportError> {
    let unit = |p: &[f64; 2]| -> (i32, i32) {
        ((p[0] * UNITS).round() as i32, (p[1] * UNITS).round() as i32)
    };
    let shape = |ink: &Ink, width: f64, filled: bool| ShapeStyle {
        color: ink.backend(),
        filled,
        stroke_width: (width * UNITS).round().max(1.0) as u32,
    };
    let drawn = match mark {
        Mark::Line(points, ink, width) => {
            backend.draw_path(points.iter().map(unit), &shape(ink, *width, false))
        }
        Mark::Area(points, ink) => {
            backend.fill_polygon(points.iter().map(unit), &shape(ink, 0.0, true))
        }
        Mark::Dot(centre, radius, ink) => {
            let r = (radius * UNITS).round().max(1.0) as u32;
            backend.draw_circle(unit(centre), r, &shape(ink, 0.0, true), true)
        }
        Mark::Text(text, origin, style, up) => {
            let hang = HANG * style.size;
            let (corner, turn) = match up {
                false => ([origin[0], origin[1] - hang], FontTransform::None),
                true => ([origin[0] - hang, origin[1]], FontTransform::Rotate270),
            };
            let colour = style.ink.backend();
            let look = TextStyle::from(font(style.bold, style.size * BACKEND_SIZE * UNITS))
                .pos(Pos::new(HPos::Left, VPos::Top))
                .transform(turn)
                .color(&colour);
            backend.draw_text(text, &look, unit(&corner))
        }
    };
    drawn.map_err(failed)
}

fn font(bold: bool, size: f64) -> FontDesc<'static> {
    static REGISTERED: OnceLock<bool> = OnceLock::new();
    // The bytes are part of the program; a test sees to it that they are a font.
    REGISTERED.get_or_init(|| {
        let regular = register_font(FONT, FontStyle::Normal, dejavu::sans::regular());
        let bold = register_font(FONT, FontStyle::Bold, dejavu::sans::bold());
        regular.is_ok() && bold.is_ok()
    });
    let style = match bold {
        true => FontStyle::Bold,
        false => FontStyle::Normal,
    };
    FontDesc::new(FontFamily::Name(FONT), size, style)
}

fn run_style(style: Type, height: Height) -> (Type, f64) {
    let script = Type {
        size: SCRIPT * style.size,
        ..style
    };
    match height {
        Height::Base => (style, 0.0),
        Height::Sub => (script, 0.18 * style.size),
        Height::Super => (script, -0.34 * style.size),
    }
}

/// Width of a text in points.
pub fn width(words: &Words, style: Type) -> f64 {
    words
        .runs
        .iter()
        .map(|run| text_width(&run.text, run_style(style, run.height).0))
        .sum()
}

fn text_width(text: &str, style: Type) -> f64 {
    const FINE: f64 = 10_000.0;
    let measured = font(style.bold, FINE).layout_box(text);
    let units = measured.map_or(0, |(_, (x, _))| x);
    f64::from(units) / FINE * LINE_HEIGHT * style.size
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_font_is_measured() {
        let style = Type {
            size: 10.0,
            bold: false,
            ink: Ink::new(0),
        };
        // Advance of a digit in this font: 1303 of 2048 units to the em.
        let zero = text_width("0", style);
        assert!((zero - 13_030.0 / 2048.0).abs() < 0.01, "{zero}");
        assert!(
            text_width(
                "0",
                Type {
                    bold: true,
                    ..style
                }
            ) > zero
        );
    }
}

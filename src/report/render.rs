//! From the one drawing to its file formats: SVG with outlined letters, PNG, PDF.

use super::ReportError;
use super::canvas::FONT;
use std::sync::{Arc, OnceLock};
use usvg::fontdb::Database;

/// Resolution of the PNG, pixels to the inch.
const PNG_DPI: f32 = 300.0;
/// SVG's own resolution, pixels to the inch.
const SVG_DPI: f32 = 96.0;

fn fonts() -> Arc<Database> {
    static FONTS: OnceLock<Arc<Database>> = OnceLock::new();
    let load = || {
        let mut fonts = Database::new();
        fonts.load_font_data(dejavu::sans::regular().to_vec());
        fonts.load_font_data(dejavu::sans::bold().to_vec());
        Arc::new(fonts)
    };
    FONTS.get_or_init(load).clone()
}

fn failed(format: &'static str, reason: impl std::fmt::Display) -> ReportError {
    ReportError::Drawing {
        format,
        reason: reason.to_string(),
    }
}

fn parsed(svg: &str, format: &'static str) -> Result<usvg::Tree, ReportError> {
    let options = usvg::Options {
        font_family: FONT.to_owned(),
        fontdb: fonts(),
        ..usvg::Options::default()
    };
    usvg::Tree::from_str(svg, &options).map_err(|e| failed(format, e))
}

/// The same drawing with letters as outlines, and a title for those who cannot see it.
pub fn outlined(letters: &str, title: &str) -> Result<String, ReportError> {
    let tree = parsed(letters, "SVG")?;
    let options = usvg::WriteOptions {
        coordinates_precision: 2,
        transforms_precision: 5,
        indent: usvg::Indent::None,
        ..usvg::WriteOptions::default()
    };
    let outlines = tree.to_string(&options);
    let head = outlines.find('>').map_or(0, |i| i + 1);
    let (width, height) = (tree.size().width(), tree.size().height());
    let mm = |pixels: f32| pixels / SVG_DPI * 25.4;
    let escaped = title
        .replace('&', "&amp;")
        .replace('<', "&lt;")
        .replace('>', "&gt;");
    Ok(format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{:.3}mm\" height=\"{:.3}mm\" \
         viewBox=\"0 0 {width:.3} {height:.3}\" role=\"img\"><title>{escaped}</title>{}\n",
        mm(width),
        mm(height),
        &outlines[head..]
    ))
}

/// As PNG.
pub fn png(svg: &str) -> Result<Vec<u8>, ReportError> {
    let tree = parsed(svg, "PNG")?;
    let zoom = PNG_DPI / SVG_DPI;
    let size = tree.size();
    let pixels = |length: f32| (length * zoom).round() as u32;
    let (width, height) = (pixels(size.width()), pixels(size.height()));
    let mut image = resvg::tiny_skia::Pixmap::new(width, height)
        .ok_or_else(|| failed("PNG", format!("{width} × {height} pixels are too many")))?;
    let transform = resvg::tiny_skia::Transform::from_scale(zoom, zoom);
    resvg::render(&tree, transform, &mut image.as_mut());
    image.encode_png().map_err(|e| failed("PNG", e))
}

/// As PDF.
pub fn pdf(svg: &str) -> Result<Vec<u8>, ReportError> {
    let tree = parsed(svg, "PDF")?;
    let page = svg2pdf::PageOptions { dpi: SVG_DPI };
    let mut bytes = svg2pdf::to_pdf(&tree, svg2pdf::ConversionOptions::default(), page)
        .map_err(|e| failed("PDF", e))?;
    settle(&mut bytes);
    Ok(bytes)
}

/// Puts the entries of resource dictionaries in order. The converter writes them in the order of
/// a hash table, another one in every run; to a reader it means nothing, and no length changes.
fn settle(pdf: &mut [u8]) {
    for mark in [&b"/XObject <<\n"[..], b"/ExtGState <<\n"] {
        let mut from = 0;
        while let Some(found) = find(&pdf[from..], mark) {
            let start = from + found + mark.len();
            let Some(length) = find(&pdf[start..], b">>") else {
                return;
            };
            let end = start + length;
            let entries = pdf[start..end].to_vec();
            let (lines, tail) = match entries.iter().rposition(|b| *b == b'\n') {
                Some(last) => entries.split_at(last + 1),
                None => (&[][..], &entries[..]),
            };
            let mut lines: Vec<&[u8]> = lines.split_inclusive(|b| *b == b'\n').collect();
            lines.sort_by_key(|line| (line.len(), *line));
            let sorted = [lines.concat().as_slice(), tail].concat();
            pdf[start..end].copy_from_slice(&sorted);
            from = end;
        }
    }
}

fn find(bytes: &[u8], pattern: &[u8]) -> Option<usize> {
    bytes.windows(pattern.len()).position(|w| w == pattern)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn dictionary_entries_are_put_in_order() {
        let mut pdf = b"<<\n  /XObject <<\n    /xo10 9 0 R\n    /xo2 7 0 R\n  >>\n  /ExtGState <<\n    /gs1 3 0 R\n    /gs0 4 0 R\n  >>\n>>".to_vec();
        settle(&mut pdf);
        let expected = "<<\n  /XObject <<\n    /xo2 7 0 R\n    /xo10 9 0 R\n  >>\n  /ExtGState <<\n    /gs0 4 0 R\n    /gs1 3 0 R\n  >>\n>>";
        assert_eq!(String::from_utf8(pdf).unwrap(), expected);
    }
}

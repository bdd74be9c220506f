//! Lines, cells and numbers of delimited text.
//!
//! The `csv` crate is not used here: it has no runs of blanks, no decimal comma and no place of a
//! cell within its line, and those are what this reader is for.

use super::super::{DecimalMark, Delimiter};

/// Marks that make a line a comment when they stand at its beginning.
pub(super) const COMMENT_MARKS: [&str; 5] = ["#", "%", ";", "!", "//"];

/// The text of a comment line without its mark; `None` for other lines.
pub(super) fn comment(line: &str) -> Option<&str> {
    let line = line.trim_start();
    let mark = COMMENT_MARKS.iter().find(|mark| line.starts_with(**mark))?;
    Some(&line[mark.len()..])
}

/// One cell: its text without blanks and quotation marks around it, and where it begins.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Cell<'a> {
    pub text: &'a str,
    /// Byte in the line.
    pub at: usize,
}

/// A quotation mark without partner, at this byte.
#[derive(Debug, PartialEq)]
pub(super) struct OpenQuote {
    pub at: usize,
}

/// Splits a line into `cells` (which is emptied first). Empty cells at the end are dropped:
/// trailing delimiters are common and mean nothing.
pub(super) fn split<'a>(
    line: &'a str,
    delimiter: Delimiter,
    cells: &mut Vec<Cell<'a>>,
) -> Result<(), OpenQuote> {
    cells.clear();
    let ends_cell = |c: char| match delimiter {
        Delimiter::Tab => c == '\t',
        Delimiter::Semicolon => c == ';',
        Delimiter::Comma => c == ',',
        Delimiter::Blanks => c.is_whitespace(),
    };
    let pads_cell = |c: char| c.is_whitespace() && !(c == '\t' && delimiter == Delimiter::Tab);
    let mut at = 0;
    loop {
        at += line[at..].len() - line[at..].trim_start_matches(pads_cell).len();
        if at >= line.len() {
            break;
        }
        let next = if line[at..].starts_with('"') {
            let inside = at + 1;
            let close = line[inside..].find('"').ok_or(OpenQuote { at })? + inside;
            cells.push(Cell {
                text: line[inside..close].trim(),
                at,
            });
            close + 1
        } else {
            let end = line[at..].find(ends_cell).map_or(line.len(), |n| at + n);
            cells.push(Cell {
                text: line[at..end].trim_end(),
                at,
            });
            end
        };
        // Whatever stands between a closing mark and the delimiter belongs to no cell we know.
        at = match line[next..].find(ends_cell) {
            Some(n) => next + n + line[next + n..].chars().next().map_or(0, char::len_utf8),
            None => break,
        };
    }
    while cells.last().is_some_and(|cell| cell.text.is_empty()) {
        cells.pop();
    }
    Ok(())
}

/// Reads a number; infinities and NaN come through, so that the caller can name them.
///
/// Besides what Rust accepts: a minus sign of typography (U+2212) and exponents written with D.
pub(super) fn number(text: &str, mark: DecimalMark) -> Option<f64> {
    let plain = text
        .bytes()
        .all(|b| matches!(b, b'0'..=b'9' | b'.' | b'-' | b'+' | b'e' | b'E'));
    match (plain, mark) {
        (true, DecimalMark::Point) => text.parse().ok(),
        (true, DecimalMark::Comma) if text.contains('.') => None,
        _ => {
            let mut rewritten = text.replace('\u{2212}', "-");
            if mark == DecimalMark::Comma {
                if rewritten.contains('.') {
                    return None;
                }
                rewritten = rewritten.replace(',', ".");
            }
            let digit_led = rewritten.trim_start_matches(['+', '-', '.']);
            if digit_led.starts_with(|c: char| c.is_ascii_digit()) {
                rewritten = rewritten.replace(['d', 'D'], "e");
            }
            rewritten.parse().ok()
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn texts(line: &str, delimiter: Delimiter) -> Vec<&str> {
        let mut cells = Vec::new();
        split(line, delimiter, &mut cells).unwrap();
        cells.iter().map(|c| c.text).collect()
    }

    #[test]
    fn cells_by_delimiter() {
        assert_eq!(texts("1, 2 ,,", Delimiter::Comma), ["1", "2"]);
        assert_eq!(texts("1,,2", Delimiter::Comma), ["1", "", "2"]);
        assert_eq!(texts(" 1 \t 2  3 ", Delimiter::Blanks), ["1", "2", "3"]);
        assert_eq!(texts("a b\t2\t", Delimiter::Tab), ["a b", "2"]);
        assert_eq!(texts("\t2", Delimiter::Tab), ["", "2"]);
        assert_eq!(
            texts("\"E, eV\";\"1,5\"", Delimiter::Semicolon),
            ["E, eV", "1,5"]
        );
        assert_eq!(texts("\"E, eV\" , 3", Delimiter::Comma), ["E, eV", "3"]);
        assert_eq!(texts("", Delimiter::Comma), [""; 0]);
        let mut cells = Vec::new();
        assert_eq!(
            split("1,\"2", Delimiter::Comma, &mut cells),
            Err(OpenQuote { at: 2 })
        );
    }

    #[test]
    fn numbers_by_decimal_mark() {
        use DecimalMark::{Comma, Point};
        assert_eq!(number("1.5e3", Point), Some(1500.0));
        assert_eq!(number("1,5", Comma), Some(1.5));
        assert_eq!(number("1.5", Comma), None);
        assert_eq!(number("1,5", Point), None);
        assert_eq!(number("1.200,5", Comma), None);
        assert_eq!(number("−2.5D+01", Point), Some(-25.0));
        assert_eq!(
            number("-0", Point).map(f64::to_bits),
            Some((-0.0_f64).to_bits())
        );
        assert!(number("NaN", Point).unwrap().is_nan());
        assert_eq!(number("-inf", Point), Some(f64::NEG_INFINITY));
        for bad in ["", "-", "e5", "1_000", "12a", "d", "1,2,3"] {
            assert_eq!(number(bad, Point), None, "{bad}");
            assert_eq!(number(bad, Comma), None, "{bad}");
        }
    }

    #[test]
    fn comments_by_mark() {
        assert_eq!(comment("  // x"), Some(" x"));
        assert_eq!(comment("1 # x"), None);
    }
}

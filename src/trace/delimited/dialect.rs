//! Finding out how a text parts its columns and writes its decimals.
//!
//! Every combination is tried on the first rows; the one under which most rows hold two numbers
//! or more wins, and among those the one that leaves the fewest cells unread. No two combinations
//! can explain the same rows differently, save where a comma may part thousands: then every
//! number with a comma has exactly three digits behind it. A column of axis values that all carry
//! a comma settles that (thousands would be missing below 1,000); else it is an error.

use super::super::error::{Problem, shorten};
use super::super::{DecimalMark, Delimiter, ReadOptions};
use super::cells::{Cell, number, split};

/// How a text parts its columns and writes its decimals.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Dialect {
    pub delimiter: Delimiter,
    pub decimal: DecimalMark,
}

/// In order of preference, for texts that several explain alike.
const CANDIDATES: [Dialect; 8] = {
    use DecimalMark::{Comma as DComma, Point};
    use Delimiter::{Blanks, Comma, Semicolon, Tab};
    [
        Dialect {
            delimiter: Tab,
            decimal: Point,
        },
        Dialect {
            delimiter: Tab,
            decimal: DComma,
        },
        Dialect {
            delimiter: Semicolon,
            decimal: Point,
        },
        Dialect {
            delimiter: Semicolon,
            decimal: DComma,
        },
        Dialect {
            delimiter: Comma,
            decimal: Point,
        },
        Dialect {
            delimiter: Comma,
            decimal: DComma,
        },
        Dialect {
            delimiter: Blanks,
            decimal: Point,
        },
        Dialect {
            delimiter: Blanks,
            decimal: DComma,
        },
    ]
};

/// Rows looked at; all rows where these show nothing.
pub(super) const SAMPLE: usize = 400;

impl Dialect {
    /// Finds the dialect of the rows (comments and empty lines left out).
    pub fn find<'a>(
        rows: impl Iterator<Item = (usize, &'a str)> + Clone,
        options: &ReadOptions,
    ) -> Result<Self, (Option<usize>, Problem)> {
        let sampled = Self::best(rows.clone().take(SAMPLE), options);
        match sampled.or_else(|| Self::best(rows.clone(), options)) {
            Some(dialect) => Ok(dialect),
            None => Err(Self::why_none(rows, options)),
        }
    }

    fn best<'a>(
        rows: impl Iterator<Item = (usize, &'a str)> + Clone,
        options: &ReadOptions,
    ) -> Option<Self> {
        let mut best = None;
        let mut best_score = (0, 0.0);
        for dialect in CANDIDATES {
            let wanted = options.delimiter.is_none_or(|d| d == dialect.delimiter)
                && options.decimal.is_none_or(|d| d == dialect.decimal);
            if !wanted {
                continue;
            }
            let (mut good, mut numbers, mut all, mut commas) = (0_u32, 0, 0, false);
            let mut cells = Vec::new();
            for (_, row) in rows.clone() {
                let n = dialect.count_numbers(row, &mut cells);
                if n >= 2 {
                    good += 1;
                    numbers += n;
                    all += cells.len();
                    commas |= cells.iter().any(|c| c.text.contains(','));
                }
            }
            // A comma can be both only where quotation marks tell the two apart.
            let twice = dialect.delimiter == Delimiter::Comma
                && dialect.decimal == DecimalMark::Comma
                && !commas;
            let score = (good, numbers as f64 / all.max(1) as f64);
            if score > best_score && !twice {
                (best, best_score) = (Some(dialect), score);
            }
        }
        best
    }

    /// Splits a row and counts the cells that are numbers.
    pub fn count_numbers<'a>(&self, row: &'a str, cells: &mut Vec<Cell<'a>>) -> usize {
        if split(row, self.delimiter, cells).is_err() {
            return 0;
        }
        cells
            .iter()
            .filter(|cell| number(cell.text, self.decimal).is_some())
            .count()
    }

    fn why_none<'a>(
        mut rows: impl Iterator<Item = (usize, &'a str)> + Clone,
        options: &ReadOptions,
    ) -> (Option<usize>, Problem) {
        let decimal_comma = options.decimal == Some(DecimalMark::Comma);
        if options.delimiter == Some(Delimiter::Comma) && decimal_comma {
            return (None, Problem::CommaTwice);
        }
        let lone = rows.clone().find(|(_, row)| {
            let row = row.trim().trim_end_matches([',', ';']);
            number(row, DecimalMark::Point)
                .or(number(row, DecimalMark::Comma))
                .is_some()
        });
        match (lone, rows.next()) {
            (Some((line, row)), _) => (
                Some(line),
                Problem::OneColumn {
                    found: shorten(row),
                },
            ),
            (None, Some((line, row))) => (
                Some(line),
                Problem::NoRows {
                    found: shorten(row),
                },
            ),
            (None, None) => (None, Problem::OnlyComments),
        }
    }
}

/// Whether a number could be read with its commas parting thousands: 1 to 3 digits, then groups
/// of exactly three.
fn like_thousands(text: &str) -> bool {
    let mut groups = text.trim_start_matches(['+', '-']).split(',');
    let first = groups.next().unwrap_or_default();
    let digits = |g: &str| g.bytes().all(|b| b.is_ascii_digit());
    (1..=3).contains(&first.len())
        && digits(first)
        && !first.starts_with('0')
        && groups.all(|g| g.len() == 3 && digits(g))
}

/// Watches the numbers of a file with decimal commas for one that proves the comma decimal.
#[derive(Debug, Default)]
pub(super) struct CommaWatch<'a> {
    proven: bool,
    axis_without: bool,
    axis_with: bool,
    doubtful: Option<(usize, Cell<'a>)>,
}

impl<'a> CommaWatch<'a> {
    /// Looks at one number.
    pub fn see(&mut self, line: usize, cell: Cell<'a>, is_axis: bool) {
        let has_comma = cell.text.contains(',');
        if is_axis {
            self.axis_with |= has_comma;
            self.axis_without |= !has_comma;
        }
        if has_comma {
            if like_thousands(cell.text) {
                self.doubtful.get_or_insert((line, cell));
            } else {
                self.proven = true;
            }
        }
    }

    /// The first number that may be misread, where nothing proves how it is meant.
    pub fn doubt(&self) -> Option<(usize, Cell<'a>)> {
        let settled = self.proven || (self.axis_with && !self.axis_without);
        self.doubtful.filter(|_| !settled)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn dialect(row: &str) -> Option<Dialect> {
        Dialect::find(std::iter::once((1, row)), &ReadOptions::default()).ok()
    }

    #[test]
    fn finds_each_dialect() {
        use DecimalMark::{Comma as DComma, Point};
        use Delimiter::{Blanks, Comma, Semicolon, Tab};
        for (row, delimiter, decimal) in [
            ("15.58,1200", Comma, Point),
            ("15.58, 1200", Comma, Point),
            ("15.58;1200", Semicolon, Point),
            ("15,58;1200", Semicolon, DComma),
            ("15,58;1200,5;", Semicolon, DComma),
            ("15.58\t1200", Tab, Point),
            ("15,58\t1200", Tab, DComma),
            ("15.58  1200", Blanks, Point),
            ("15,58 1200,25", Blanks, DComma),
            ("\"15,58\",\"1200\"", Comma, DComma),
            ("15.58,1200,ok", Comma, Point),
            ("15\t\t1200", Blanks, Point),
            ("1;2", Semicolon, Point),
        ] {
            assert_eq!(dialect(row), Some(Dialect { delimiter, decimal }), "{row}");
        }
        assert_eq!(dialect("15.58"), None);
        assert_eq!(dialect("15,58\tabc"), None);
    }

    #[test]
    fn thousands_are_doubted() {
        for (text, expected) in [
            ("1,200", true),
            ("12,345,678", true),
            ("0,200", false),
            ("1,20", false),
            ("1234,500", false),
            ("1,200e1", false),
        ] {
            assert_eq!(like_thousands(text), expected, "{text}");
        }
    }
}

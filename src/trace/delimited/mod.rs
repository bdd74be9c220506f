//! Delimited text: rows of numbers parted by commas, semicolons, tabulators or blanks.
//!
//! The text is passed over three times, always line by line: its comments are collected, its
//! dialect found on the first rows, and its rows read. Only the chosen columns are kept.

mod cells;
mod columns;
mod dialect;
mod write;

use cells::{Cell, comment, number, split};
use columns::Columns;
use dialect::{CommaWatch, Dialect};

use super::error::{Problem, TraceError, shorten};
use super::record::{Meaning, Record};
use super::stated::Stated;
use super::text::{character, numbered_lines};
use super::words;
use super::{DecimalMark, Delimiter, ReadOptions};

pub(super) use write::exact;
pub use write::write_delimited;

/// Reads the text as one record.
pub(super) fn read(text: &str, source: &str, options: &ReadOptions) -> Result<Record, TraceError> {
    if text.trim().is_empty() {
        return Err(TraceError::file(source, Problem::Empty));
    }
    let mut stated = Stated::default();
    for (line, text) in numbered_lines(text) {
        if let Some(comment) = comment(text) {
            stated
                .take(line, comment)
                .map_err(|problem| TraceError::line(source, line, problem))?;
        }
    }
    let dialect = Dialect::find(rows(text), options).map_err(|(line, problem)| TraceError {
        line,
        ..TraceError::file(source, problem)
    })?;
    let layout = Layout::find(text, dialect, source, &mut stated)?;
    let columns =
        columns::choose(&layout.names, layout.width, options).map_err(|problem| TraceError {
            line: layout.line,
            ..TraceError::file(source, problem)
        })?;
    let reading = Reading {
        source,
        dialect,
        layout: &layout,
        columns: &columns,
        options,
    };
    let mut record = reading.rows(text, &stated)?;

    (record.meaning, record.meaning_from) = reading.meaning(&stated);
    if let Some(name) = layout.names.get(columns.energy) {
        record.foreign_unit = words::foreign_unit(name, words::meaning(name));
    }
    record.abscissa_line = layout.line;
    record.axis = stated
        .axis()
        .map_err(|problem| TraceError::file(source, problem))?;
    record.photon_energy_ev = stated.photon_energy_ev;
    record.noise = stated.noise;
    record.converted = stated.ours;
    record.notes = stated.notes;
    if let Some(written_from) = stated.source.filter(|s| s != source) {
        record
            .notes
            .push(format!("this file was written from '{written_from}'"));
    }
    if !stated.ours {
        record.notes.extend(columns.notes);
    }
    record.comments = stated.comments.into_iter().map(|(_, text)| text).collect();
    Ok(record)
}

/// Lines that are neither comments nor empty.
fn rows(text: &str) -> impl Iterator<Item = (usize, &str)> + Clone {
    numbered_lines(text).filter(|(_, line)| !line.trim().is_empty() && comment(line).is_none())
}

/// Lines just before the data that are looked at for a header.
const HEAD_ROWS: usize = 6;

/// Where the data begins, how wide it is, and what its columns are called.
#[derive(Debug)]
struct Layout {
    /// Line of the first row of data.
    first: usize,
    /// Cells in a row.
    width: usize,
    /// One name per column (with its unit, where a row of units follows), or none at all.
    names: Vec<String>,
    /// Line of the header.
    line: Option<usize>,
}

impl Layout {
    fn find(
        text: &str,
        dialect: Dialect,
        source: &str,
        stated: &mut Stated,
    ) -> Result<Layout, TraceError> {
        let mut cells = Vec::new();
        let mut before: Vec<(usize, &str)> = Vec::new();
        let mut widths: Vec<(usize, usize)> = Vec::new();
        let mut first = None;
        for (line, row) in rows(text).take(dialect::SAMPLE.max(before_data(text, dialect) + 1)) {
            if dialect.count_numbers(row, &mut cells) >= 2 {
                first.get_or_insert(line);
                match widths.iter_mut().find(|(width, _)| *width == cells.len()) {
                    Some((_, times)) => *times += 1,
                    None => widths.push((cells.len(), 1)),
                }
            } else if first.is_none() {
                before.push((line, row));
            }
        }
        // The first of the commonest widths: max_by_key would take the last.
        let common = widths.iter().map(|w| w.1).max().unwrap_or(0);
        let width = widths.iter().find(|w| w.1 == common).map_or(0, |w| w.0);
        let first = first.ok_or_else(|| TraceError::file(source, Problem::OnlyComments))?;
        let mut layout = Layout {
            first,
            width,
            names: Vec::new(),
            line: None,
        };
        layout.read_head(&before, dialect, source, stated)?;
        if layout.names.is_empty() {
            layout.read_comment_head(dialect, stated);
        }
        Ok(layout)
    }

    /// Finds the header among the lines before the data; the others become comments.
    fn read_head(
        &mut self,
        before: &[(usize, &str)],
        dialect: Dialect,
        source: &str,
        stated: &mut Stated,
    ) -> Result<(), TraceError> {
        let mut cells = Vec::new();
        for (line, row) in before {
            let numbers = dialect.count_numbers(row, &mut cells);
            if numbers > 0 && cells.len() == self.width {
                // A row of data with a bad cell, not a header.
                let is_bad = |c: &&Cell| number(c.text, dialect.decimal).is_none();
                let bad = cells.iter().find(is_bad).copied().unwrap_or(cells[0]);
                let at = cells.iter().position(|c| *c == bad).unwrap_or(0) + 1;
                let problem = not_a_number(bad.text, format!("column {at}"), dialect);
                return Err(TraceError::at(
                    source,
                    *line,
                    character(row, bad.at),
                    problem,
                ));
            }
        }
        let last_rows = before.iter().rev().take(HEAD_ROWS);
        let named = last_rows.map_while(|(_, row)| head_cells(row, dialect, self.width));
        let mut named: Vec<Vec<String>> = named.collect();
        named.reverse();
        let tail = named.len();
        let block = &before[before.len() - tail..];
        let telling = |names: &Vec<String>| words::telling(names);
        let most = named.iter().map(telling).max().unwrap_or(0);
        // Of several such lines the first that tells most is the header, the next its units.
        let head = if most > 0 {
            named.iter().position(|names| telling(names) == most)
        } else {
            tail.checked_sub(1)
        };
        let mut used = 0;
        if let Some(head) = head {
            self.names = named[head].clone();
            self.line = Some(block[head].0);
            used = 1;
            if head + 2 == tail {
                for (name, unit) in self.names.iter_mut().zip(&named[head + 1]) {
                    name.push_str(&format!(" ({unit})"));
                }
                used = 2;
            }
        } else if let Some((line, row)) = before.last()
            && dialect.delimiter != Delimiter::Blanks
            && split(row, dialect.delimiter, &mut cells).is_ok()
            && cells.len() > 1
        {
            let problem = Problem::HeaderWidth {
                found: cells.len(),
                expected: self.width,
            };
            return Err(TraceError::line(source, *line, problem));
        }
        let kept = before.len() - used;
        if kept > 0 {
            stated.notes.push(format!(
                "{kept} lines before the data bear no comment mark and were kept as comments"
            ));
        }
        let head_lines = head.map_or(0..0, |h| h..h + used);
        let skipped = before.len() - tail;
        for (i, (line, row)) in before.iter().enumerate() {
            if i < skipped || !head_lines.contains(&(i - skipped)) {
                stated.comments.push((*line, row.trim().to_string()));
            }
        }
        Ok(())
    }

    /// A header may be the last comment before the data, if its words are those of columns.
    fn read_comment_head(&mut self, dialect: Dialect, stated: &Stated) {
        let before = stated
            .comments
            .iter()
            .rev()
            .find(|(line, _)| (1..self.first).contains(line));
        let Some((line, text)) = before else { return };
        if let Some(names) = head_cells(text, dialect, self.width)
            && words::telling(&names) > 0
        {
            self.names = names;
            self.line = Some(*line);
        }
    }
}

/// Rows before the first one that holds two numbers.
fn before_data(text: &str, dialect: Dialect) -> usize {
    let mut cells = Vec::new();
    rows(text)
        .take_while(|(_, row)| dialect.count_numbers(row, &mut cells) < 2)
        .count()
}

/// The names in a header line, if there are exactly `width` and none is a number. Where blanks
/// part the columns, names may hold single blanks if two or a tabulator part them.
fn head_cells(row: &str, dialect: Dialect, width: usize) -> Option<Vec<String>> {
    let mut cells = Vec::new();
    split(row, dialect.delimiter, &mut cells).ok()?;
    let mut names: Vec<String> = cells.iter().map(|c| c.text.to_string()).collect();
    if dialect.delimiter == Delimiter::Blanks && names.len() != width {
        let parts = row.trim().split('\t').flat_map(|part| part.split("  "));
        names = parts
            .map(str::trim)
            .filter(|p| !p.is_empty())
            .map(String::from)
            .collect();
    }
    let no_number = names.iter().all(|n| number(n, dialect.decimal).is_none());
    (names.len() == width && no_number).then_some(names)
}

fn not_a_number(found: &str, what: String, dialect: Dialect) -> Problem {
    let hint = match dialect.decimal {
        DecimalMark::Point if found.contains(',') => {
            " (commas between thousands are not read; if the comma is a decimal mark, say \
             decimal = \"comma\")"
        }
        DecimalMark::Comma if found.contains('.') => {
            " (the decimal mark was taken to be a comma, by the other rows)"
        }
        _ => "",
    };
    Problem::NotANumber {
        found: shorten(found),
        what,
        hint,
    }
}

/// Everything that reading a row needs.
struct Reading<'a> {
    source: &'a str,
    dialect: Dialect,
    layout: &'a Layout,
    columns: &'a Columns,
    options: &'a ReadOptions,
}

impl Reading<'_> {
    /// Reads all rows; other than numbers the record is left empty.
    fn rows(&self, text: &str, stated: &Stated) -> Result<Record, TraceError> {
        let Columns {
            energy, counts, sd, ..
        } = *self.columns;
        let exposure = self.own_columns(stated)?;
        let mut record = Record {
            sd: sd.map(|_| Vec::new()),
            exposure_ev: exposure.map(|_| Vec::new()),
            abscissa_name: self
                .layout
                .names
                .get(energy)
                .cloned()
                .unwrap_or("energy".to_string()),
            ..Record::default()
        };
        let mut cells = Vec::new();
        let mut watch = CommaWatch::default();
        let mut points_seen = false;
        for (line, row) in rows(text).skip_while(|(line, _)| *line < self.layout.first) {
            self.split_row(line, row, &mut cells)?;
            let mut value = |column: usize, role: &str| {
                let cell = cells[column];
                points_seen |= cell.text.contains('.');
                if self.dialect.decimal == DecimalMark::Comma {
                    watch.see(line, cell, column == energy);
                }
                self.value(line, row, cell, column, role)
            };
            record.abscissa.push(value(energy, "the axis")?);
            record.counts.push(value(counts, "the counts")?);
            if let (Some(column), Some(list)) = (sd, &mut record.sd) {
                list.push(value(column, "the standard deviation")?);
            }
            if let (Some(column), Some(list)) = (exposure, &mut record.exposure_ev) {
                list.push(value(column, "the exposure")?);
            }
            record.lines.push(line as u32);
        }
        if let Some((line, cell)) = watch.doubt()
            && self.options.decimal.is_none()
        {
            let problem = Problem::AmbiguousDecimal {
                found: cell.text.to_string(),
            };
            return Err(TraceError::line(self.source, line, problem));
        }
        if self.dialect.delimiter == Delimiter::Comma
            && self.options.delimiter.is_none()
            && !points_seen
        {
            record.axis_hint = " (if the commas in this file are decimal marks, say decimal = \
                                \"comma\" and what the delimiter is)";
        }
        Ok(record)
    }

    /// The exposure column of a file of ours, which must have all its columns.
    fn own_columns(&self, stated: &Stated) -> Result<Option<usize>, TraceError> {
        if !stated.ours {
            return Ok(None);
        }
        let place = |name: &str| self.layout.names.iter().position(|n| n == name);
        match write::COLUMNS
            .into_iter()
            .find(|name| place(name).is_none())
        {
            Some(missing) => {
                let line = self.layout.line.or(Some(self.layout.first));
                let problem = Problem::OwnColumn(missing);
                Err(TraceError {
                    line,
                    ..TraceError::file(self.source, problem)
                })
            }
            None => Ok(place(write::COLUMNS[3])),
        }
    }

    fn split_row<'t>(
        &self,
        line: usize,
        row: &'t str,
        cells: &mut Vec<Cell<'t>>,
    ) -> Result<(), TraceError> {
        split(row, self.dialect.delimiter, cells).map_err(|open| {
            TraceError::at(
                self.source,
                line,
                character(row, open.at),
                Problem::OpenQuote,
            )
        })?;
        let (found, expected) = (cells.len(), self.layout.width);
        if found != expected {
            let byte = cells
                .get(expected)
                .map_or(row.trim_end().len(), |extra| extra.at);
            let problem = Problem::Ragged { found, expected };
            return Err(TraceError::at(
                self.source,
                line,
                character(row, byte),
                problem,
            ));
        }
        Ok(())
    }

    fn value(
        &self,
        line: usize,
        row: &str,
        cell: Cell,
        column: usize,
        role: &str,
    ) -> Result<f64, TraceError> {
        let problem = match number(cell.text, self.dialect.decimal) {
            Some(value) if value.is_finite() => return Ok(value),
            Some(_) => {
                let found = shorten(cell.text);
                Problem::NotFinite {
                    found,
                    what: self.describe(column, role),
                }
            }
            None => not_a_number(cell.text, self.describe(column, role), self.dialect),
        };
        Err(TraceError::at(
            self.source,
            line,
            character(row, cell.at),
            problem,
        ))
    }

    fn describe(&self, column: usize, role: &str) -> String {
        match self.layout.names.get(column) {
            Some(name) => format!("{role} (column {}, '{name}')", column + 1),
            None => format!("{role} (column {})", column + 1),
        }
    }

    /// What the axis column is by the header, else by the comments if all that speak agree.
    fn meaning(&self, stated: &Stated) -> (Meaning, String) {
        if let Some(name) = self.layout.names.get(self.columns.energy) {
            let meaning = words::meaning(name);
            if meaning != Meaning::Unsaid {
                return (meaning, format!("its header '{name}'"));
            }
        }
        let spoken = stated
            .comments
            .iter()
            .filter_map(|(line, text)| match words::meaning(text) {
                meaning @ (Meaning::Ionization | Meaning::Kinetic) => Some((*line, meaning)),
                _ => None,
            });
        let spoken: Vec<(usize, Meaning)> = spoken.collect();
        match spoken[..] {
            [(line, meaning), ..] if spoken.iter().all(|s| s.1 == meaning) => {
                (meaning, format!("the comment in line {line}"))
            }
            _ => (Meaning::Unsaid, String::new()),
        }
    }
}

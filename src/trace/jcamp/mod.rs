//! JCAMP-DX, the exchange format of IUPAC, versions 4.24 and 5.01.
//!
//! R. S. McDonald, P. A. Wilks, Appl. Spectrosc. 42, 151 (1988) (4.24); P. Lampen, H. Hillig,
//! A. N. Davies, M. Linscheid, Appl. Spectrosc. 48, 1545 (1994) and the 5.01 update of 1999 (from
//! memory). Read are the tables `XYDATA` (every compression), `XYPOINTS` and `PEAK TABLE`, in a
//! single block or in blocks linked at any depth. What the standard asks to be checked is checked:
//! the number of points, the abscissa at the beginning of each line, the check values. `NTUPLES`
//! and `PEAK ASSIGNMENTS` are no traces; blocks of them are passed over if others are there.

mod asdf;
mod block;
mod write;

use thiserror::Error;

use super::error::{Problem, TraceError, shorten};
use super::record::Record;
use super::text::{character, numbered_lines};
use block::Block;

pub use asdf::Ordinates;
pub use write::write_jcamp;

/// What can be wrong with a JCAMP-DX file.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
#[allow(
    missing_docs,
    reason = "the message of each variant is its documentation"
)]
pub enum JcampProblem {
    #[error("found '{found}', expected a record '##LABEL= value'")]
    NoEquals { found: String },
    #[error("found '{found}' outside any block; a block begins with ##TITLE=")]
    OutsideBlock { found: String },
    #[error("the file ends within the block '{title}' of line {opened}; expected ##END=")]
    Unclosed { title: String, opened: usize },
    #[error("found no ##{label}= before the {table}, which needs it")]
    MissingLabel {
        label: &'static str,
        table: &'static str,
    },
    #[error("found ##{label}= '{found}', expected {expected}")]
    LabelValue {
        label: String,
        found: String,
        expected: &'static str,
    },
    #[error("found the form '{found}', expected {expected}")]
    Form {
        found: String,
        expected: &'static str,
    },
    #[error("found a second table in one block; expected one (more belong in linked blocks)")]
    SecondTable,
    #[error("found no XYDATA, XYPOINTS or PEAK TABLE in the file{instead}")]
    NoTable { instead: String },

    #[error("found '{found}', expected a number")]
    Number { found: String },
    #[error("found '?', a missing ordinate; a trace has no gaps")]
    MissingOrdinate,
    #[error(
        "found the check value {found}, expected {expected}, the last ordinate of the line before"
    )]
    CheckValue { found: f64, expected: f64 },
    #[error(
        "found no check value; the line before ends in a difference, so this one begins with one"
    )]
    NoCheckValue,
    #[error("found a difference at the beginning of a line, expected an ordinate")]
    DifferenceFirst,
    #[error("found a repeat count at the beginning of a line, expected an ordinate")]
    RepeatFirst,
    #[error("found the repeat count {found}, expected a whole number from 1")]
    RepeatCount { found: f64 },
    #[error("found more than {limit} points, expected no more (by NPOINTS and the file's size)")]
    TooManyPoints { limit: usize },
    #[error("found {found} points, expected {expected} by NPOINTS")]
    PointCount { found: usize, expected: usize },
    #[error(
        "found the abscissa {found}, expected {expected} at point {point} (by FIRSTX, LASTX and \
         NPOINTS): points are missing or too many before this line"
    )]
    Abscissa {
        found: f64,
        expected: f64,
        point: usize,
    },
    #[error("found {found} numbers, expected groups of {group}")]
    Groups { found: usize, group: usize },
    #[error("found {found} values in ##{label}=, expected {expected}, one per point")]
    ListLength {
        label: String,
        found: usize,
        expected: usize,
    },
}

/// Points that may come out of a text however short it is: repeat counts make few letters many.
const POINTS_AT_LEAST: usize = 1 << 20;

/// Whether a text is JCAMP-DX: its first record is the title.
pub(super) fn is(text: &str) -> bool {
    let first = numbered_lines(text).find(|(_, line)| !uncommented(line).trim().is_empty());
    first.is_some_and(|(_, line)| {
        let record = line
            .trim_start()
            .strip_prefix("##")
            .and_then(|r| r.split_once('='));
        record.is_some_and(|(label, _)| normal(label) == "TITLE")
    })
}

/// Reads every trace of a text.
pub(super) fn read(text: &str, source: &str) -> Result<Vec<Record>, TraceError> {
    let limit = POINTS_AT_LEAST + 4 * text.len();
    let mut open: Vec<Block> = Vec::new();
    let mut records = Vec::new();
    let mut passed_over = Vec::new();
    for (number, line) in numbered_lines(text) {
        let at =
            |byte, problem: Problem| TraceError::at(source, number, character(line, byte), problem);
        let line_body = uncommented(line);
        let trimmed = line_body.trim_start();
        let indent = line_body.len() - trimmed.len();
        let Some(record) = trimmed.strip_prefix("##") else {
            if trimmed.is_empty() {
                continue;
            }
            match open.last_mut() {
                Some(block) => block
                    .continued(number, line_body)
                    .map_err(|(byte, problem)| at(byte, problem))?,
                None => {
                    let found = shorten(trimmed);
                    return Err(at(indent, JcampProblem::OutsideBlock { found }.into()));
                }
            }
            continue;
        };
        let Some((label, value)) = record.split_once('=') else {
            let found = shorten(trimmed);
            return Err(at(indent, JcampProblem::NoEquals { found }.into()));
        };
        match (normal(label).as_str(), open.last_mut()) {
            ("TITLE", _) => open.push(Block::new(number, value, limit)),
            (_, None) => {
                let found = shorten(trimmed);
                return Err(at(indent, JcampProblem::OutsideBlock { found }.into()));
            }
            ("END", Some(_)) => {
                if let Some(block) = open.pop() {
                    let finished = block.finish(source);
                    let finished = finished.map_err(|(line, problem)| TraceError {
                        line: Some(line),
                        ..TraceError::file(source, problem)
                    })?;
                    match finished {
                        block::Finished::Trace(record) => records.push(*record),
                        block::Finished::OtherTable(label) => passed_over.push(label),
                        block::Finished::Nothing => {}
                    }
                }
            }
            (normal, Some(block)) => {
                let done = block.labelled(number, normal, label.trim(), value);
                done.map_err(|(line, problem)| TraceError::line(source, line, problem))?;
            }
        }
    }
    if let Some(block) = open.pop() {
        let (title, opened) = (shorten(&block.title), block.opened);
        return Err(TraceError::file(
            source,
            JcampProblem::Unclosed { title, opened }.into(),
        ));
    }
    if records.is_empty() {
        let instead = match passed_over.join(", ") {
            none if none.is_empty() => none,
            labels => format!(", only {labels}"),
        };
        return Err(TraceError::file(
            source,
            JcampProblem::NoTable { instead }.into(),
        ));
    }
    Ok(records)
}

/// A line without its comment.
fn uncommented(line: &str) -> &str {
    line.split_once("$$").map_or(line, |(before, _)| before)
}

/// A label as the standard compares it: upper case, without blanks, hyphens, strokes and lines.
fn normal(label: &str) -> String {
    let kept = label
        .chars()
        .filter(|c| !matches!(c, ' ' | '\t' | '-' | '/' | '_'));
    kept.flat_map(char::to_uppercase).collect()
}

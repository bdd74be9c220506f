//! A file with one trace or several, before one is chosen and its axis converted.

use std::fmt;
use std::path::Path;

use serde::Serialize;

use super::error::{Problem, TraceError};
use super::record::Record;
use super::{Choice, ReadOptions, Trace, axis, delimited, jcamp, vamas};

/// The formats that can be read.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Format {
    /// Rows of numbers parted by commas, semicolons, tabulators or blanks.
    Delimited,
    /// JCAMP-DX 4.24 and 5.01 (IUPAC).
    JcampDx,
    /// VAMAS (ISO 14976).
    Vamas,
}

impl fmt::Display for Format {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        f.write_str(match self {
            Format::Delimited => "delimited text",
            Format::JcampDx => "JCAMP-DX",
            Format::Vamas => "VAMAS (ISO 14976)",
        })
    }
}

/// What a file holds: one record per trace, in the order of the file.
#[derive(Debug, Clone, PartialEq)]
pub struct TraceFile {
    /// The file's name as the user gave it.
    pub source: String,
    /// Its format, found from its first line.
    pub format: Format,
    /// Its traces as they stand in the file; at least one.
    pub traces: Vec<Record>,
}

/// One line of a file's table of contents.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Content {
    /// Number to choose it by, from 1.
    pub number: usize,
    /// Name to choose it by; empty where the format has no names.
    pub name: String,
    /// Number of points.
    pub points: usize,
    /// What the file calls the axis.
    pub axis: String,
    /// First and last axis value, in the file's own unit.
    pub span: [f64; 2],
}

impl TraceFile {
    /// Reads the file at `path`. `options` say how delimited text is to be taken apart; axis and
    /// window play no part yet.
    ///
    /// # Errors
    /// [`TraceError`] with the place.
    pub fn read(path: &Path, options: &ReadOptions) -> Result<Self, TraceError> {
        let source = path.display().to_string();
        let bytes = std::fs::read(path)
            .map_err(|e| TraceError::file(&source, Problem::Unreadable(e.to_string())))?;
        Self::from_bytes(&bytes, &source, options)
    }

    /// Reads the bytes of a file; `source` is the name used in messages.
    ///
    /// Text is UTF-8, with or without a byte-order mark. Other eight-bit text is read as Latin-1,
    /// with a note: numbers are the same in both, comments nearly always.
    ///
    /// # Errors
    /// As [`read`](Self::read).
    pub fn from_bytes(
        bytes: &[u8],
        source: &str,
        options: &ReadOptions,
    ) -> Result<Self, TraceError> {
        if bytes.starts_with(&[0xFF, 0xFE]) || bytes.starts_with(&[0xFE, 0xFF]) {
            return Err(TraceError::file(source, Problem::Utf16));
        }
        if let Some(at) = bytes.iter().position(|&b| b == 0) {
            return Err(TraceError::file(source, Problem::Binary { byte: at + 1 }));
        }
        match std::str::from_utf8(bytes) {
            Ok(text) => Self::from_text(text, source, options),
            Err(bad) => {
                let valid = &bytes[..bad.valid_up_to()];
                let line = valid.iter().filter(|&&b| b == b'\n').count() + 1;
                let text: String = bytes.iter().map(|&b| char::from(b)).collect();
                let mut file = Self::from_text(&text, source, options)?;
                for record in &mut file.traces {
                    let note = format!("line {line} is not UTF-8: the file was read as Latin-1");
                    record.notes.push(note);
                }
                Ok(file)
            }
        }
    }

    /// Reads text; `source` is the name used in messages.
    ///
    /// # Errors
    /// As [`read`](Self::read).
    pub fn from_text(text: &str, source: &str, options: &ReadOptions) -> Result<Self, TraceError> {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let text = text.trim_end_matches('\u{1a}');
        let (format, traces) = if jcamp::is(text) {
            (Format::JcampDx, jcamp::read(text, source)?)
        } else if vamas::is(text) {
            (Format::Vamas, vamas::read(text, source)?)
        } else {
            (
                Format::Delimited,
                vec![delimited::read(text, source, options)?],
            )
        };
        Ok(TraceFile {
            source: source.to_string(),
            format,
            traces,
        })
    }

    /// The table of contents.
    pub fn contents(&self) -> Vec<Content> {
        let content = |(i, record): (usize, &Record)| Content {
            number: i + 1,
            name: record.name.clone(),
            points: record.counts.len(),
            axis: record.abscissa_name.clone(),
            span: match (record.abscissa.first(), record.abscissa.last()) {
                (Some(&first), Some(&last)) => [first, last],
                _ => [f64::NAN; 2],
            },
        };
        self.traces.iter().enumerate().map(content).collect()
    }

    /// Takes the trace that `options.trace` chooses, with its axis converted. A file with a
    /// single trace needs no choice.
    ///
    /// # Errors
    /// When the choice is missing, fits none or several, or the trace cannot be converted.
    pub fn into_trace(mut self, options: &ReadOptions) -> Result<Trace, TraceError> {
        let chosen = self
            .choose(options.trace.as_ref())
            .map_err(|problem| TraceError::file(&self.source, problem))?;
        axis::to_trace(self.traces.swap_remove(chosen), &self.source, options)
    }

    fn choose(&self, choice: Option<&Choice>) -> Result<usize, Problem> {
        let count = self.traces.len();
        let listed = |of: &[usize]| {
            let line = |&i: &usize| format!("{} '{}'", i + 1, self.traces[i].name);
            of.iter().map(line).collect::<Vec<_>>().join(", ")
        };
        let all: Vec<usize> = (0..count).collect();
        match choice {
            None if count == 1 => Ok(0),
            None => Err(Problem::SeveralTraces {
                count,
                there: listed(&all),
            }),
            Some(Choice::Number(wanted)) if (1..=count).contains(wanted) => Ok(wanted - 1),
            Some(Choice::Number(wanted)) => Err(Problem::TraceOutOfRange {
                wanted: *wanted,
                count,
            }),
            Some(Choice::Name(name)) => {
                let same = |i: &usize| {
                    self.traces[*i].name.trim().to_lowercase() == name.trim().to_lowercase()
                };
                let hits: Vec<usize> = all.iter().copied().filter(same).collect();
                match hits[..] {
                    [one] => Ok(one),
                    [] => {
                        let (wanted, there) = (name.clone(), listed(&all));
                        Err(Problem::UnknownTrace { wanted, there })
                    }
                    _ => Err(Problem::AmbiguousTrace {
                        wanted: name.clone(),
                        there: listed(&hits),
                    }),
                }
            }
        }
    }
}

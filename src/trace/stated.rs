//! Statements in comment lines, in the one form that our own writer uses: `key: value unit`.
//!
//! A file whose first line is the mark `# trace: bandproof/trace/1` was written by
//! [`write_delimited`](super::write_delimited): its energies are converted already, its statements
//! must be right, and its own comments and notes stand behind `comment:` and `note:`. In any other
//! file the same lines about axis, photon energy and calibration are honoured, each with a note;
//! one that is nearly right is left alone, also with a note.

use super::error::Problem;
use super::{Axis, Noise};

/// Key of the mark of a file that we wrote.
pub(super) const TRACE: &str = "trace";
/// The mark's value: the version of this form.
pub(super) const VERSION: &str = "bandproof/trace/1";

pub(super) const SOURCE: &str = "source";
pub(super) const AXIS: &str = "axis";
pub(super) const PHOTON: &str = "photon energy";
pub(super) const LENGTH: &str = "flight length";
pub(super) const TIME_ZERO: &str = "time zero";
pub(super) const RETARDING: &str = "retarding potential";
pub(super) const NOISE: &str = "noise";
pub(super) const NOTE: &str = "note";
pub(super) const COMMENT: &str = "comment";

/// Every key of a statement.
pub(super) const KEYS: [&str; 9] = [
    SOURCE, AXIS, PHOTON, LENGTH, TIME_ZERO, RETARDING, NOISE, NOTE, COMMENT,
];

/// What the comment lines of a file state.
#[derive(Debug, Default, PartialEq)]
pub(super) struct Stated {
    /// Whether the file bears our mark.
    pub ours: bool,
    pub source: Option<String>,
    pub noise: Option<Noise>,
    pub photon_energy_ev: Option<f64>,
    axis: Option<&'static str>,
    length_m: Option<f64>,
    time_zero_ns: Option<f64>,
    retarding_v: Option<f64>,
    /// Remaining comments with the line each stands in (0: from a `comment:` statement).
    pub comments: Vec<(usize, String)>,
    pub notes: Vec<String>,
}

impl Stated {
    /// Takes in the text of one comment line, without its mark.
    pub fn take(&mut self, line: usize, text: &str) -> Result<(), Problem> {
        if line == 1 && text.trim().split_once(": ") == Some((TRACE, VERSION)) {
            self.ours = true;
            return Ok(());
        }
        let trimmed = text.trim();
        if self.ours {
            // Our own lines carry the text behind ": " to the end of the line, blanks included.
            let text = text.strip_prefix(' ').unwrap_or(text);
            let (key, value) = text
                .split_once(": ")
                .unwrap_or((text.trim_end_matches(':'), ""));
            if !self.own(key, value)? && !trimmed.is_empty() {
                self.comments.push((line, trimmed.to_string()));
            }
            return Ok(());
        }
        if !trimmed.is_empty() {
            self.comments.push((line, trimmed.to_string()));
        }
        if let Some((key, value)) = trimmed.split_once(": ") {
            self.foreign(line, key, value.trim());
        }
        Ok(())
    }

    /// Takes a statement of a file that we wrote; false where it is none.
    pub fn own(&mut self, key: &str, value: &str) -> Result<bool, Problem> {
        match key {
            COMMENT => self.comments.push((0, unescape(value))),
            NOTE => self.notes.push(unescape(value)),
            SOURCE => self.source = Some(unescape(value)),
            NOISE => {
                let noise = match value {
                    "poisson" => Some(Noise::Poisson),
                    "stated" => Some(Noise::Stated),
                    _ => None,
                };
                self.noise = Some(noise.ok_or_else(|| bad(NOISE, value))?);
            }
            _ => return self.quantity(key, value),
        }
        Ok(true)
    }

    /// Takes a statement of a file that we did not write, if it is one, with a note.
    pub fn foreign(&mut self, line: usize, key: &str, value: &str) {
        match self.quantity(key, value) {
            Ok(true) => self
                .notes
                .push(format!("line {line} of the file gives {key}: {value}")),
            Ok(false) => {}
            Err(problem) => {
                self.notes
                    .push(format!("line {line} of the file was not used: {problem}"));
            }
        }
    }

    /// Takes a statement about axis, photon energy or calibration; false where it is none.
    fn quantity(&mut self, key: &str, value: &str) -> Result<bool, Problem> {
        let number = |key, unit| {
            let number = value
                .strip_suffix(unit)
                .and_then(|v| v.trim_end().parse::<f64>().ok());
            number
                .filter(|n| n.is_finite())
                .ok_or_else(|| bad(key, value))
                .map(Some)
        };
        match key {
            AXIS => {
                let known = ["ionization", "kinetic", "wavenumber", "flight-time"];
                let axis = known.into_iter().find(|k| *k == value);
                self.axis = Some(axis.ok_or_else(|| bad(AXIS, value))?);
            }
            PHOTON => self.photon_energy_ev = number(PHOTON, "eV")?,
            LENGTH => self.length_m = number(LENGTH, "m")?,
            TIME_ZERO => self.time_zero_ns = number(TIME_ZERO, "ns")?,
            RETARDING => self.retarding_v = number(RETARDING, "V")?,
            _ => return Ok(false),
        }
        Ok(true)
    }

    /// The stated axis. Flight times need their length and time zero; without a statement of the
    /// retarding potential there was none.
    pub fn axis(&self) -> Result<Option<Axis>, Problem> {
        let calibration = self
            .length_m
            .zip(self.time_zero_ns)
            .map(|(length_m, time_zero_ns)| {
                let retarding_v = self.retarding_v.unwrap_or(0.0);
                Axis::FlightTime {
                    length_m,
                    time_zero_ns,
                    retarding_v,
                }
            });
        Ok(match self.axis {
            Some("ionization") => Some(Axis::Ionization),
            Some("kinetic") => Some(Axis::Kinetic),
            Some("wavenumber") => Some(Axis::Wavenumber),
            Some(found) => {
                let expected = "flight length and time zero stated beside it";
                let found = found.to_string();
                Some(calibration.ok_or(Problem::StatedValue {
                    key: AXIS,
                    found,
                    expected,
                })?)
            }
            None if self.ours => {
                let expected = "an axis stated in every file with the trace mark";
                return Err(Problem::StatedValue {
                    key: AXIS,
                    found: String::new(),
                    expected,
                });
            }
            None => calibration,
        })
    }
}

fn bad(key: &'static str, found: &str) -> Problem {
    let expected = match key {
        AXIS => "ionization, kinetic, wavenumber or flight-time",
        PHOTON => "a number and eV",
        LENGTH => "a number and m",
        TIME_ZERO => "a number and ns",
        RETARDING => "a number and V",
        _ => "poisson or stated",
    };
    Problem::StatedValue {
        key,
        found: found.to_string(),
        expected,
    }
}

/// Makes any text fit one line of a text file.
pub(super) fn escape(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '\\' => out.push_str("\\\\"),
            '\n' => out.push_str("\\n"),
            '\r' => out.push_str("\\r"),
            '\0' => out.push_str("\\0"),
            c => out.push(c),
        }
    }
    out
}

fn unescape(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    let mut chars = text.chars();
    while let Some(c) = chars.next() {
        let plain = if c == '\\' {
            chars.next().unwrap_or('\\')
        } else {
            c
        };
        out.push(match (c, plain) {
            ('\\', 'n') => '\n',
            ('\\', 'r') => '\r',
            ('\\', '0') => '\0',
            (_, plain) => plain,
        });
    }
    out
}

//! What can be wrong with a trace file, always with the place.

use thiserror::Error;

use super::jcamp::JcampProblem;
use super::vamas::VamasProblem;

/// A file that could not be read as a trace: where, and what the problem is.
#[derive(Debug, Clone, PartialEq, Error)]
#[error("{}{problem}", place(.file, *.line, *.column))]
pub struct TraceError {
    /// The file's name as the user gave it.
    pub file: String,
    /// Line, counted from 1, where one line is to blame.
    pub line: Option<usize>,
    /// Character in that line, counted from 1.
    pub column: Option<usize>,
    /// What was found and what was expected.
    pub problem: Box<Problem>,
}

fn place(file: &str, line: Option<usize>, column: Option<usize>) -> String {
    match (line, column) {
        (Some(line), Some(column)) => format!("{file}:{line}:{column}: "),
        (Some(line), None) => format!("{file}:{line}: "),
        _ => format!("{file}: "),
    }
}

impl TraceError {
    /// A problem of the file as a whole.
    pub fn file(file: &str, problem: Problem) -> Self {
        TraceError {
            file: file.to_string(),
            line: None,
            column: None,
            problem: Box::new(problem),
        }
    }

    /// A problem of one line.
    pub fn line(file: &str, line: usize, problem: Problem) -> Self {
        TraceError {
            line: Some(line),
            ..Self::file(file, problem)
        }
    }

    /// A problem at a character of a line.
    pub fn at(file: &str, line: usize, column: usize, problem: Problem) -> Self {
        TraceError {
            line: Some(line),
            column: Some(column),
            ..Self::file(file, problem)
        }
    }
}

/// What was found in a trace file, and what was expected instead.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
#[allow(
    missing_docs,
    reason = "the message of each variant is its documentation"
)]
pub enum Problem {
    #[error("cannot read the file: {0}")]
    Unreadable(String),
    #[error("the file is empty; expected rows of energy and counts")]
    Empty,
    #[error("byte {byte} is zero, so this is not a text file; expected rows of energy and counts")]
    Binary { byte: usize },
    #[error("the file is UTF-16; save it as UTF-8 or plain text")]
    Utf16,

    #[error("found {count} traces: {there}; say which with trace (a name or a number)")]
    SeveralTraces { count: usize, there: String },
    #[error("found {count} traces, so there is no trace {wanted}; count from 1")]
    TraceOutOfRange { wanted: usize, count: usize },
    #[error("found no trace named '{wanted}'; there are {there}")]
    UnknownTrace { wanted: String, there: String },
    #[error("found several traces named '{wanted}': {there}; choose by number")]
    AmbiguousTrace { wanted: String, there: String },
    #[error(transparent)]
    Jcamp(#[from] JcampProblem),
    #[error(transparent)]
    Vamas(#[from] VamasProblem),

    #[error("found only comments; expected rows of energy and counts")]
    OnlyComments,
    #[error(
        "found '{found}', and no row that holds two numbers; expected rows of energy and counts"
    )]
    NoRows { found: String },
    #[error("found one number in a row ('{found}') and never two; expected energy and counts")]
    OneColumn { found: String },
    #[error(
        "found {found} cells in this row, expected {expected} as in the rows before and after \
         (if this line is not data, begin it with #)"
    )]
    Ragged { found: usize, expected: usize },
    #[error("found {found} names in the header, expected {expected}, one for each column")]
    HeaderWidth { found: usize, expected: usize },
    #[error("found {}, expected a number for {what}{hint}", quoted(.found))]
    NotANumber {
        found: String,
        what: String,
        hint: &'static str,
    },
    #[error("found '{found}', expected a finite number for {what}")]
    NotFinite { found: String, what: String },
    #[error("found a quotation mark that is never closed; expected its partner in the same line")]
    OpenQuote,
    #[error(
        "found '{found}': its comma may be a decimal mark or part the thousands, and no other \
         number in the file tells which; say decimal = \"comma\", or take the commas out"
    )]
    AmbiguousDecimal { found: String },
    #[error(
        "comma cannot be both the delimiter and the decimal mark of unquoted numbers; \
         change delimiter or decimal"
    )]
    CommaTwice,

    #[error("found no column named '{wanted}' for the {role}; the columns are {there}")]
    UnknownColumn {
        wanted: String,
        role: &'static str,
        there: String,
    },
    #[error("found {width} columns, so there is no column {wanted} for the {role}; count from 1")]
    ColumnOutOfRange {
        wanted: usize,
        width: usize,
        role: &'static str,
    },
    #[error("column {column} was chosen for both {first} and {second}; expected different ones")]
    ColumnTwice {
        column: usize,
        first: &'static str,
        second: &'static str,
    },
    #[error(
        "found several columns that may hold the {role}: {candidates}; say which with {option}"
    )]
    AmbiguousColumn {
        role: &'static str,
        candidates: String,
        option: &'static str,
    },
    #[error("cannot tell which of {width} columns holds the {role}; say which with {option}")]
    UnclearColumn {
        role: &'static str,
        width: usize,
        option: &'static str,
    },
    #[error("the axis '{column}' is in {unit}; expected {expected}")]
    Unit {
        column: String,
        unit: String,
        expected: &'static str,
    },

    #[error("found {found} channels, expected at least {needed}")]
    TooFew { found: usize, needed: usize },
    #[error("found {found} channels that electrons can reach, expected at least {needed}: {why}")]
    TooFewReachable {
        found: usize,
        needed: usize,
        why: String,
    },
    #[error("found {found} of {of} channels between {lo} and {hi} eV, expected at least {needed}")]
    TooFewInWindow {
        found: usize,
        of: usize,
        lo: f64,
        hi: f64,
        needed: usize,
    },
    #[error("found {what} {value} a second time (first in line {first}); expected each once{hint}")]
    Duplicate {
        what: String,
        value: f64,
        first: usize,
        hint: &'static str,
    },
    #[error(
        "found {what} {value} after {previous}, but the axis was {direction} before; \
         expected it to go one way throughout (one sweep per file){hint}"
    )]
    TurnsBack {
        what: String,
        value: f64,
        previous: f64,
        direction: &'static str,
        hint: &'static str,
    },
    #[error(
        "channels lie closer together, or further apart, than floating-point energies can tell \
         (near {energy_ev} eV)"
    )]
    Unresolvable { energy_ev: f64 },
    #[error(
        "found {found} counts; raw counts cannot be negative (a background-subtracted trace \
         needs a column of standard deviations)"
    )]
    NegativeCounts { found: f64 },
    #[error(
        "found the standard deviation {found}, expected a positive one (leave the column out \
         and the counts are taken as Poisson)"
    )]
    SdNotPositive { found: f64 },
    #[error("found the exposure {found} eV, expected a positive width")]
    ExposureNotPositive { found: f64 },

    #[error("the axis is {axis}{because}, so the photon energy is needed; say photon_energy_ev")]
    NoPhotonEnergy { axis: &'static str, because: String },
    #[error("found the photon energy {found} eV, expected a positive number")]
    PhotonEnergy { found: f64 },
    #[error(
        "found the kinetic energy {kinetic} eV, expected one below the photon energy of {photon} \
         eV; correct the photon energy, or cut these channels off with window_ev"
    )]
    KineticAbovePhoton { kinetic: f64, photon: f64 },
    #[error(
        "column '{column}' holds flight times, which need their calibration: flight length (m), \
         time zero (ns), retarding potential (V) and photon energy (eV)"
    )]
    Uncalibrated { column: String },
    #[error("found the {what} {found}, expected {expected}")]
    Calibration {
        what: &'static str,
        found: f64,
        expected: &'static str,
    },
    #[error("found the window {lo} to {hi} eV, expected two finite energies, the lower one first")]
    Window { lo: f64, hi: f64 },
    #[error(
        "this file already holds ionization energies, converted earlier ({stated}); \
         leave out what the study says about it ({wanted})"
    )]
    AlreadyConverted { stated: String, wanted: String },
    #[error("found '{key}: {found}', expected {expected}")]
    StatedValue {
        key: &'static str,
        found: String,
        expected: &'static str,
    },
    #[error("found no column '{0}', which a file that begins with its trace mark must have")]
    OwnColumn(&'static str),
}

fn quoted(text: &str) -> String {
    if text.is_empty() {
        "an empty cell".to_string()
    } else {
        format!("'{}'", shorten(text))
    }
}

/// The beginning of a text that may be long, fit for a message.
pub(super) fn shorten(text: &str) -> String {
    const LONGEST: usize = 40;
    let text = text.trim();
    if text.chars().count() <= LONGEST {
        return text.to_string();
    }
    text.chars().take(LONGEST).chain(['…']).collect()
}

//! Why a geometry is refused: every message names file and line, what was found, what was expected.

use thiserror::Error;

/// Atoms closer than this are taken for a slip in the file, Å (the shortest bond, H–H, is 0.74).
pub const CLOSEST_ANGSTROM: f64 = 0.2;

/// A coordinate beyond this is taken for a slip in the file, Å.
pub const FARTHEST_ANGSTROM: f64 = 1e4;

/// Why a geometry was refused.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum GeometryError {
    /// The file could not be opened or read.
    #[error("{file}: cannot be read: {reason}")]
    Unreadable {
        /// File as the user gave it.
        file: String,
        /// The system's words.
        reason: String,
    },
    /// The bytes are not UTF-8.
    #[error("{file}:{line}: found bytes that are not UTF-8 text; expected a plain-text XYZ file")]
    NotText {
        /// File as the user gave it.
        file: String,
        /// Line from 1.
        line: usize,
    },
    /// Nothing but blanks.
    #[error(
        "{file}: the file is empty; expected a line with the number of atoms, a comment line and the atoms"
    )]
    Empty {
        /// File as the user gave it.
        file: String,
    },
    /// The first line is not a positive whole number.
    #[error(
        "{file}:{line}: found '{found}'; expected the number of atoms, a whole number of at least 1"
    )]
    BadCount {
        /// File as the user gave it.
        file: String,
        /// Line from 1.
        line: usize,
        /// What stands there.
        found: String,
    },
    /// The file ends before the promised number of atoms.
    #[error(
        "{file}:{line}: the file ends after {found} atom(s); line {count_line} promises {expected}"
    )]
    TooFewAtoms {
        /// File as the user gave it.
        file: String,
        /// Last line of the file.
        line: usize,
        /// Line of the count.
        count_line: usize,
        /// Atoms found.
        found: usize,
        /// Atoms promised.
        expected: usize,
    },
    /// There is more after the promised number of atoms.
    #[error(
        "{file}:{line}: found '{found}' after the {expected} atom(s) that line {count_line} promises; expected the end of the file (one geometry per file)"
    )]
    TooManyAtoms {
        /// File as the user gave it.
        file: String,
        /// First line too many.
        line: usize,
        /// Line of the count.
        count_line: usize,
        /// What stands there.
        found: String,
        /// Atoms promised.
        expected: usize,
    },
    /// An atom line with fewer or more than four columns.
    #[error("{file}:{line}: found {found} column(s) in '{text}'; expected 4: element, x, y, z (Å)")]
    WrongColumns {
        /// File as the user gave it.
        file: String,
        /// Line from 1.
        line: usize,
        /// Columns found.
        found: usize,
        /// The line.
        text: String,
    },
    /// Neither a symbol nor an atomic number.
    #[error("{file}:{line}: found '{found}'; expected an element symbol or atomic number")]
    UnknownElement {
        /// File as the user gave it.
        file: String,
        /// Line from 1.
        line: usize,
        /// What stands there.
        found: String,
    },
    /// An element past krypton.
    #[error(
        "{file}:{line}: found {symbol} (element {number}); expected an element from H to Kr, the last with bundled basis sets"
    )]
    UnsupportedElement {
        /// File as the user gave it.
        file: String,
        /// Line from 1.
        line: usize,
        /// Its symbol.
        symbol: &'static str,
        /// Its atomic number.
        number: u8,
    },
    /// A coordinate that is not a number.
    #[error("{file}:{line}: found '{found}' for {axis}; expected a number in Å{hint}")]
    NotANumber {
        /// File as the user gave it.
        file: String,
        /// Line from 1.
        line: usize,
        /// `x`, `y` or `z`.
        axis: char,
        /// What stands there.
        found: String,
        /// Advice, empty if there is none.
        hint: &'static str,
    },
    /// A coordinate that is NaN, infinite or absurdly large.
    #[error(
        "{file}:{line}: found '{found}' for {axis}; expected a finite number within ±{FARTHEST_ANGSTROM} Å"
    )]
    OutOfRange {
        /// File as the user gave it.
        file: String,
        /// Line from 1.
        line: usize,
        /// `x`, `y` or `z`.
        axis: char,
        /// What stands there.
        found: String,
    },
    /// Two atoms on top of each other.
    #[error(
        "{file}:{line}: this atom is {distance_angstrom:.3} Å from the one on line {other_line}; expected at least {CLOSEST_ANGSTROM} Å"
    )]
    TooClose {
        /// File as the user gave it.
        file: String,
        /// Line of the later atom.
        line: usize,
        /// Line of the earlier atom.
        other_line: usize,
        /// Distance, Å.
        distance_angstrom: f64,
    },
    /// More charge than protons, or nothing left to ionize.
    #[error("{file}: charge {charge} leaves no electrons; the nuclei have {protons} protons")]
    NoElectrons {
        /// File as the user gave it.
        file: String,
        /// The charge asked for.
        charge: i32,
        /// Sum of the atomic numbers.
        protons: i64,
    },
    /// A multiplicity that the electrons cannot have.
    #[error(
        "{file}: multiplicity {multiplicity} does not fit {electrons} electrons (charge {charge}); expected {expected}"
    )]
    Multiplicity {
        /// File as the user gave it.
        file: String,
        /// The multiplicity asked for.
        multiplicity: u32,
        /// Electrons at that charge.
        electrons: usize,
        /// The charge.
        charge: i32,
        /// The multiplicities that fit.
        expected: String,
    },
}

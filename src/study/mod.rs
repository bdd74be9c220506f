//! Resolves what the user asked for and runs it.
//!
//! [`request`] is what the user wrote, [`settings`] what will run, [`compute`] the theory half,
//! [`assigning`] the whole job, [`dossier`] the record that every output is drawn from.

pub mod assigning;
pub mod begin;
pub mod compute;
pub mod dossier;
pub mod request;
pub mod settings;
pub mod simulating;

use crate::assign::AssignError;
use crate::basis::BasisError;
use crate::fit::FitError;
use crate::integrals::IntegralError;
use crate::ionization::{IonizationError, ManyBodyError};
use crate::lineshape::ShapeError;
use crate::molecule::GeometryError;
use crate::orbitals::CharacterError;
use crate::orbitals::irreps::IrrepError;
use crate::report::ReportError;
use crate::scf::ScfError;
use crate::trace::TraceError;
use request::RequestError;
use std::fmt;
use std::path::PathBuf;

/// Why a study could not be finished.
#[derive(Debug, thiserror::Error)]
pub enum StudyError {
    /// The study file or an override cannot be understood.
    #[error(transparent)]
    Request(#[from] RequestError),
    /// A file cannot be read.
    #[error("{}: cannot read the file: {source}", path.display())]
    Unreadable {
        /// The file.
        path: PathBuf,
        /// What the system says.
        source: std::io::Error,
    },
    /// A key that is needed is missing.
    #[error("{source_name}: found no {key}, expected {expected}")]
    Missing {
        /// The study file.
        source_name: String,
        /// Dotted key.
        key: &'static str,
        /// What belongs there.
        expected: &'static str,
    },
    /// A number on the command line is out of range.
    #[error("option {option}: {problem}")]
    Option {
        /// The option.
        option: &'static str,
        /// What was found and what was expected.
        problem: String,
    },
    /// The study file to write is there already.
    #[error("{}: the file exists; say --overwrite to write over it", path.display())]
    Exists {
        /// The file.
        path: PathBuf,
    },
    /// An output cannot be written.
    #[error("{}: cannot write the file: {source}", path.display())]
    Unwritable {
        /// The file.
        path: PathBuf,
        /// What the system says.
        source: std::io::Error,
    },
    /// The geometry is wrong.
    #[error(transparent)]
    Geometry(#[from] GeometryError),
    /// The basis is unknown or lacks an element.
    #[error(transparent)]
    Basis(#[from] BasisError),
    /// The mean-field calculation failed.
    #[error(transparent)]
    Scf(#[from] ScfError),
    /// The orbitals cannot be analysed.
    #[error(transparent)]
    Character(#[from] CharacterError),
    /// The orbitals cannot be labelled.
    #[error(transparent)]
    Labels(#[from] IrrepError),
    /// Hole states cannot be made.
    #[error(transparent)]
    Ionization(#[from] IonizationError),
    /// The integrals of the correlated step cannot be had.
    #[error(transparent)]
    Integrals(#[from] IntegralError),
    /// The correlated step failed.
    #[error(transparent)]
    ManyBody(#[from] ManyBodyError),
    /// The trace is wrong.
    #[error(transparent)]
    Trace(#[from] TraceError),
    /// A line shape is impossible.
    #[error(transparent)]
    Shape(#[from] ShapeError),
    /// The fit failed.
    #[error("{file}: {error}")]
    Fit {
        /// The trace's file.
        file: String,
        /// What went wrong.
        error: FitError,
    },
    /// The matching failed.
    #[error(transparent)]
    Assign(#[from] AssignError),
    /// An output could not be made.
    #[error(transparent)]
    Report(#[from] ReportError),
}

/// What a running study tells its caller.
#[derive(Debug, Clone, PartialEq)]
pub enum Event {
    /// A stage began.
    Stage(&'static str),
    /// An iteration of the mean-field calculation ended.
    Scf {
        /// Number, from 1.
        iteration: usize,
        /// Energy, hartree.
        energy_hartree: f64,
        /// Largest element of the orbital gradient, hartree.
        gradient_hartree: f64,
    },
    /// The fit moved on.
    Fit(String),
}

impl fmt::Display for Event {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Event::Stage(name) => f.write_str(name),
            Event::Scf {
                iteration,
                energy_hartree,
                gradient_hartree,
            } => write!(
                f,
                "orbitals: iteration {iteration}, energy {energy_hartree:.8} hartree, gradient {gradient_hartree:.1e}"
            ),
            Event::Fit(text) => write!(f, "fit: {text}"),
        }
    }
}

/// Receives events while a study runs.
pub type Observer<'a> = &'a mut dyn FnMut(&Event);

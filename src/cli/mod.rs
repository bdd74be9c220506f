//! The command line: the only module that prints.

pub mod arguments;
mod commands;
mod progress;

use crate::report::ReportError;
use crate::scf::ScfError;
use crate::study::StudyError;
use arguments::{Arguments, Command};
use clap::Parser;
use std::process::ExitCode;

/// The input is wrong.
pub const WRONG_INPUT: u8 = 2;
/// A calculation did not converge.
pub const NOT_CONVERGED: u8 = 3;
/// An output could not be written.
pub const NOT_WRITTEN: u8 = 4;

/// Runs the program with the arguments of the process.
pub fn run() -> ExitCode {
    let arguments = Arguments::parse();
    if let Some(threads) = arguments.threads {
        // Fails only where a pool exists already, which nothing before this line makes.
        if let Err(error) = rayon::ThreadPoolBuilder::new()
            .num_threads(threads.get())
            .build_global()
        {
            eprintln!("error: option --threads: {error}");
            return ExitCode::from(WRONG_INPUT);
        }
    }
    let outcome = match arguments.command {
        Command::Assign(a) => commands::assign(a),
        Command::Levels(a) => commands::levels(a),
        Command::Simulate(a) => commands::simulate(a),
        Command::Bands(a) => commands::bands(a),
        Command::Trace(a) => commands::trace(a),
        Command::Begin(a) => commands::begin(a),
    };
    match outcome {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(exit_code(&error))
        }
    }
}

fn exit_code(error: &StudyError) -> u8 {
    match error {
        StudyError::Scf(ScfError::NotConverged { .. }) => NOT_CONVERGED,
        StudyError::ManyBody(error) if error.is_not_converged() => NOT_CONVERGED,
        StudyError::Fit { error, .. } if error.is_not_converged() => NOT_CONVERGED,
        StudyError::Report(ReportError::Write { .. }) | StudyError::Unwritable { .. } => {
            NOT_WRITTEN
        }
        _ => WRONG_INPUT,
    }
}

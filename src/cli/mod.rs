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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::ionization::ManyBodyError;
    use crate::numeric::davidson::DavidsonError;

    #[test]
    fn failures_of_the_correlated_step_have_their_exit_codes() {
        let open = ManyBodyError::Davidson(DavidsonError::NotConverged {
            open: 1,
            wanted: 4,
            iterations: 60,
            worst: 1e-3,
        });
        assert_eq!(exit_code(&open.into()), NOT_CONVERGED);
        let large = ManyBodyError::Memory {
            method: "ADC(3)",
            needed_bytes: 2_000_000_000,
            limit_bytes: 1_000_000_000,
            occupied: 20,
            virtuals: 400,
            auxiliaries: 1200,
        };
        assert_eq!(exit_code(&large.into()), WRONG_INPUT);
    }
}

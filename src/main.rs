//! The `bandproof` program; see the library for everything.

use std::process::ExitCode;

fn main() -> ExitCode {
    bandproof::cli::run()
}

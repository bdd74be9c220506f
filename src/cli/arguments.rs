//! Commands and options, with the help a chemist reads.

use crate::study::request::{AxisName, LevelName};
use crate::trace::Choice;
use clap::{Args, Parser, Subcommand};
use std::path::PathBuf;

/// Assigns the bands of a gas-phase valence photoelectron spectrum to molecular orbitals.
///
/// A geometry and a measured trace go in; out come the bands with their uncertainties, the
/// orbital that each electron left, what kind of orbital it was, the odds, and a remark on every
/// feature that no one-electron ionization explains.
#[derive(Debug, Parser)]
#[command(name = "bandproof", version, after_help = EXAMPLES)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
    /// Threads to use; all processors if absent. Results do not depend on it.
    #[arg(long, global = true, value_name = "N")]
    pub threads: Option<std::num::NonZeroUsize>,
}

const EXAMPLES: &str = "\
Examples:
  bandproof begin furan.xyz furan.csv            write a study file to fill in
  bandproof assign furan.toml                    the main job: figure, table, page
  bandproof levels furan.xyz                     computed ionization energies only
  bandproof bands furan.csv --photon-energy 21.218   bands of a trace, no molecule needed

Exit codes: 0 done; 2 the input is wrong; 3 a calculation did not converge;
4 an output could not be written.";

/// The commands.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// Assign every band of a measured trace: figure, table, page and data
    Assign(AssignArguments),
    /// Compute orbitals and ionization energies of a molecule
    Levels(LevelsArguments),
    /// Predict the trace that a molecule would give
    Simulate(SimulateArguments),
    /// Find and fit the bands of a trace; no molecule needed
    Bands(BandsArguments),
    /// Show what is in a measured file; convert it to ionization energy
    Trace(TraceArguments),
    /// Write a commented study file for a molecule and a trace
    Begin(BeginArguments),
}

/// How to compute.
#[derive(Debug, Args)]
pub struct ComputeArguments {
    /// Method and basis [default: koopmans/def2-tzvp]; methods: koopmans, second-order, p3, adc2,
    /// adc2x, adc3
    #[arg(long, value_name = "METHOD/BASIS")]
    pub level: Option<LevelName>,
    /// Total charge of the molecule [default: 0]
    #[arg(long, value_name = "Q", allow_hyphen_values = true)]
    pub charge: Option<i32>,
    /// Spin multiplicity 2S+1 [default: the lowest that fits the electrons]
    #[arg(long, value_name = "M")]
    pub multiplicity: Option<u32>,
    /// Auxiliary set of the density fitting [default: the one that belongs to the basis]
    #[arg(long, value_name = "NAME")]
    pub auxiliary: Option<String>,
    /// Correlate the core electrons too (methods beyond koopmans)
    #[arg(long)]
    pub all_electrons: bool,
}

/// How to read a trace.
#[derive(Debug, Args)]
pub struct ReadArguments {
    /// Which trace of the file, by name or by number from 1, where it holds several
    #[arg(long, value_name = "TRACE", value_parser = choice)]
    pub choice: Option<Choice>,
    /// What the axis holds [default: what the file says, else ionization energy]
    #[arg(long, value_name = "ionization|kinetic|wavenumber|flight-time")]
    pub axis: Option<AxisName>,
    /// Photon energy, eV (He I α is 21.218)
    #[arg(long, value_name = "EV")]
    pub photon_energy: Option<f64>,
    /// Column of the axis, by name or by number from 1
    #[arg(long, value_name = "COLUMN", value_parser = choice)]
    pub energy_column: Option<Choice>,
    /// Column of the counts, by name or by number from 1
    #[arg(long, value_name = "COLUMN", value_parser = choice)]
    pub counts_column: Option<Choice>,
    /// Column of the standard deviations, by name or by number from 1
    #[arg(long, value_name = "COLUMN", value_parser = choice)]
    pub sd_column: Option<Choice>,
    /// Ionization energies to use, eV
    #[arg(long, num_args = 2, value_names = ["LOW", "HIGH"])]
    pub window: Option<Vec<f64>>,
    /// Merge neighbouring channels until each is at least this wide, eV
    #[arg(long, value_name = "EV")]
    pub merge: Option<f64>,
    /// Flight length, m
    #[arg(long, value_name = "M")]
    pub flight_length: Option<f64>,
    /// Time zero, ns
    #[arg(long, value_name = "NS", allow_hyphen_values = true)]
    pub time_zero: Option<f64>,
    /// Retarding potential, V
    #[arg(long, value_name = "V", allow_hyphen_values = true)]
    pub retarding: Option<f64>,
}

/// `assign`.
#[derive(Debug, Args)]
#[command(after_help = "\
Examples:
  bandproof assign hydrogen-sulfide.toml
  bandproof assign hydrogen-sulfide.toml --level koopmans/def2-svp --into quick
  bandproof assign hydrogen-sulfide.toml --set trace.window_ev='[9, 17]'

Writes overlay.svg, .png and .pdf (the figure), assignment.csv and .md (the table),
page.html (both, with the remarks) and dossier.json (everything known).")]
pub struct AssignArguments {
    /// Study file (TOML); `bandproof begin` writes one
    pub study: PathBuf,
    /// How to compute.
    #[command(flatten)]
    pub compute: ComputeArguments,
    /// How to read the trace.
    #[command(flatten)]
    pub read: ReadArguments,
    /// Override any key of the study file; may be repeated
    #[arg(long = "set", value_name = "KEY=VALUE")]
    pub set: Vec<String>,
    /// Folder to write [default: STUDY.assigned beside the study file]
    #[arg(long, value_name = "FOLDER")]
    pub into: Option<PathBuf>,
}

/// `levels`.
#[derive(Debug, Args)]
#[command(after_help = "\
Examples:
  bandproof levels water.xyz
  bandproof levels water.xyz --level koopmans/cc-pvtz --json > water.json
  bandproof levels nitrogen.xyz --level p3/def2-tzvp

An ionization energy by Koopmans' rule is usually 0.5 to 1.5 eV too high, and the order of
neighbours within about 1 eV can be wrong (N2 is the standing example).")]
pub struct LevelsArguments {
    /// Geometry, XYZ format in Å
    pub molecule: PathBuf,
    /// How to compute.
    #[command(flatten)]
    pub compute: ComputeArguments,
    /// Print JSON (schema bandproof/levels/1) instead of a table
    #[arg(long)]
    pub json: bool,
}

/// `simulate`.
#[derive(Debug, Args)]
#[command(after_help = "\
Examples:
  bandproof simulate water.xyz --resolution 0.4
  bandproof simulate water.xyz --scale 0.92 --into water-predicted")]
pub struct SimulateArguments {
    /// Geometry, XYZ format in Å
    pub molecule: PathBuf,
    /// How to compute.
    #[command(flatten)]
    pub compute: ComputeArguments,
    /// Full width at half maximum of every line, eV
    #[arg(long, value_name = "EV", default_value_t = 0.3)]
    pub resolution: f64,
    /// Added to every computed ionization energy, eV
    #[arg(
        long,
        value_name = "EV",
        default_value_t = 0.0,
        allow_hyphen_values = true
    )]
    pub shift: f64,
    /// Every computed ionization energy is multiplied by this before the shift
    #[arg(long, value_name = "FACTOR", default_value_t = 1.0)]
    pub scale: f64,
    /// Photon energy, eV: states above it are left out
    #[arg(long, value_name = "EV")]
    pub photon_energy: Option<f64>,
    /// Folder to write [default: MOLECULE.simulated]
    #[arg(long, value_name = "FOLDER")]
    pub into: Option<PathBuf>,
}

/// `bands`.
#[derive(Debug, Args)]
#[command(after_help = "\
Examples:
  bandproof bands furan.csv
  bandproof bands run.csv --axis flight-time --photon-energy 22.36 \\
      --flight-length 0.37369 --time-zero 3428.5 --merge 0.005")]
pub struct BandsArguments {
    /// Measured file
    pub trace: PathBuf,
    /// How to read it.
    #[command(flatten)]
    pub read: ReadArguments,
    /// Instrument's resolution (full width at half maximum), eV; estimated if absent
    #[arg(long, value_name = "EV")]
    pub resolution: Option<f64>,
    /// Print JSON instead of a table
    #[arg(long)]
    pub json: bool,
    /// Also write figure and tables into this folder
    #[arg(long, value_name = "FOLDER")]
    pub into: Option<PathBuf>,
}

/// `trace`.
#[derive(Debug, Args)]
#[command(after_help = "\
Examples:
  bandproof trace furan.csv
  bandproof trace furan.csv --axis kinetic --photon-energy 21.218 --write furan-ie.csv")]
pub struct TraceArguments {
    /// Measured file
    pub trace: PathBuf,
    /// How to read it.
    #[command(flatten)]
    pub read: ReadArguments,
    /// Write the trace on its ionization-energy axis to this file
    #[arg(long, value_name = "FILE")]
    pub write: Option<PathBuf>,
}

/// `begin`.
#[derive(Debug, Args)]
#[command(after_help = "Example:\n  bandproof begin furan.xyz furan.csv --study furan.toml")]
pub struct BeginArguments {
    /// Geometry, XYZ format in Å
    pub molecule: PathBuf,
    /// Measured file
    pub trace: PathBuf,
    /// Study file to write [default: MOLECULE.toml in the current folder]
    #[arg(long, value_name = "FILE")]
    pub study: Option<PathBuf>,
    /// Write over an existing study file
    #[arg(long)]
    pub overwrite: bool,
}

fn choice(text: &str) -> Result<Choice, String> {
    match text.parse().expect("any text is a name") {
        Choice::Number(0) => Err("found 0, expected a name or a number from 1".to_owned()),
        choice => Ok(choice),
    }
}

//! A measured trace on an ionization-energy axis, and the readers that make one.
//!
//! Counts stay as they were recorded; only the axis is converted. `exposure` carries what the
//! conversion does to a channel, so Poisson statistics stay with the raw counts: the counts
//! expected in channel i are `exposure[i] × intensity(energy[i])`.
//!
//! A file passes three rooms. Each format has a reader of its own that knows its syntax and
//! nothing of spectra, and hands over a raw [`Record`]: numbers as they stand, with the line
//! each came from and whatever the file states about them. The `axis` room alone turns records
//! into ionization energies. [`Trace`] is what everyone else sees. A new format is a new reader.
//!
//! What the readers accept, and what they refuse and why, stands in `docs/traces.md`.

mod axis;
mod delimited;
mod error;
mod file;
mod jcamp;
mod options;
mod record;
mod regroup;
mod stated;
mod text;
mod vamas;
mod words;

use std::path::Path;

use serde::{Deserialize, Serialize};

pub use delimited::write_delimited;
pub use error::{Problem, TraceError};
pub use file::{Content, Format, TraceFile};
pub use jcamp::{JcampProblem, Ordinates, write_jcamp};
pub use options::{Choice, DecimalMark, Delimiter, ReadOptions};
pub use record::{Meaning, Record};
pub use vamas::VamasProblem;

/// Fewest channels that make a trace: below this no band can be told from its background.
pub const MIN_CHANNELS: usize = 8;

/// A measured spectrum. All vectors have one entry per channel.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Trace {
    /// Where it came from: the file's name as the user gave it.
    pub source: String,
    /// Ionization energy of each channel, eV, strictly rising; spacing need not be uniform.
    pub energy_ev: Vec<f64>,
    /// Recorded counts.
    pub counts: Vec<f64>,
    /// Standard deviation of each count, always positive.
    pub sd: Vec<f64>,
    /// Counts per unit intensity (per eV), eV. For a binned axis (flight time) the width of the
    /// channel in eV (this is the Jacobian); for a scanned axis (equal dwell per point) one
    /// constant, the median step, so that areas come out in counts.
    pub exposure_ev: Vec<f64>,
    /// How the standard deviations are known.
    pub noise: Noise,
    /// Photon energy, eV, where known.
    pub photon_energy_ev: Option<f64>,
    /// How the axis was recorded.
    pub axis: Axis,
    /// Comment lines of the file, without their marks.
    pub comments: Vec<String>,
    /// What the reader decided or noticed on the way, in sentences: a guessed axis, channels
    /// left out, counts that do not look like counts.
    #[serde(default)]
    pub notes: Vec<String>,
}

/// How the standard deviations of the counts are known.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Noise {
    /// Raw counts: the standard deviation is the square root of the expected count.
    Poisson,
    /// The file states them.
    Stated,
}

/// The axis as recorded, with what is needed to turn it into ionization energy.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case", tag = "kind")]
pub enum Axis {
    /// Ionization (binding) energy, eV.
    Ionization,
    /// Kinetic energy of the electrons, eV; needs the photon energy.
    Kinetic,
    /// Ionization (binding) energy as a wavenumber, cm⁻¹.
    Wavenumber,
    /// Flight time: E_kin = ½·m·(L/(t − t0))² + retarding potential.
    FlightTime {
        /// Flight length, metres.
        length_m: f64,
        /// Time zero, nanoseconds.
        time_zero_ns: f64,
        /// Retarding potential that the electrons climbed before the drift, volts.
        #[serde(default)]
        retarding_v: f64,
    },
}

impl Axis {
    /// The name used in files and messages.
    pub fn name(&self) -> &'static str {
        match self {
            Axis::Ionization => "ionization",
            Axis::Kinetic => "kinetic",
            Axis::Wavenumber => "wavenumber",
            Axis::FlightTime { .. } => "flight-time",
        }
    }
}

impl Trace {
    /// Number of channels.
    pub fn len(&self) -> usize {
        self.energy_ev.len()
    }

    /// Whether there is no channel.
    pub fn is_empty(&self) -> bool {
        self.energy_ev.is_empty()
    }

    /// Lowest and highest ionization energy, eV. Panics on an empty trace, which no reader makes.
    pub fn span_ev(&self) -> [f64; 2] {
        [self.energy_ev[0], self.energy_ev[self.len() - 1]]
    }

    /// Sum of all counts.
    pub fn total_counts(&self) -> f64 {
        self.counts.iter().sum()
    }

    /// Whether every entry is a whole number that is not negative, as raw counts are. Normalised,
    /// smoothed, averaged or background-subtracted traces fail this.
    pub fn looks_like_counts(&self) -> bool {
        self.counts.iter().all(|&c| c >= 0.0 && c.fract() == 0.0)
    }
}

/// Standard deviation of a raw count: its square root, and 1 where nothing was counted.
pub fn poisson_sd(count: f64) -> f64 {
    count.max(1.0).sqrt()
}

/// Reads a trace from the file at `path`: the one that `options` choose, where there are several.
///
/// # Errors
/// [`TraceError`] with file, line and column, what was found and what was expected.
pub fn read(path: &Path, options: &ReadOptions) -> Result<Trace, TraceError> {
    TraceFile::read(path, options)?.into_trace(options)
}

/// Reads a trace from the bytes of a file; `source` is the name used in messages.
///
/// # Errors
/// As [`read`].
pub fn from_bytes(bytes: &[u8], source: &str, options: &ReadOptions) -> Result<Trace, TraceError> {
    TraceFile::from_bytes(bytes, source, options)?.into_trace(options)
}

/// Reads a trace from text; `source` is the name used in messages.
///
/// # Errors
/// As [`read`].
pub fn from_text(text: &str, source: &str, options: &ReadOptions) -> Result<Trace, TraceError> {
    TraceFile::from_text(text, source, options)?.into_trace(options)
}

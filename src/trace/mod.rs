//! A measured trace on an ionization-energy axis, and the readers that make one.
//!
//! Counts stay as they were recorded; only the axis is converted. `exposure` carries what the
//! conversion does to a channel, so Poisson statistics stay with the raw counts: the counts
//! expected in channel i are `exposure[i] × intensity(energy[i])`.

use serde::{Deserialize, Serialize};

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
    /// Flight time: E_kin = ½·m·(L/(t − t0))² + retarding potential.
    FlightTime {
        /// Flight length, metres.
        length_m: f64,
        /// Time zero, nanoseconds.
        time_zero_ns: f64,
        /// Retarding potential that the electrons climbed before the drift, volts.
        retarding_v: f64,
    },
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
}

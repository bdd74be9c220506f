//! Matches bands to hole states and says what has no partner.
//!
//! Sees only plain data: groupings of a fit and [`crate::levels::Levels`]. An assignment can be
//! redone from two JSON files.

use crate::levels::Character;
use serde::{Deserialize, Serialize};

/// What is known about the experiment apart from the trace itself.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Conditions {
    /// Photon energy, eV, where known: nothing above it can be ionized, and lamp satellites are
    /// reckoned from it.
    pub photon_energy_ev: Option<f64>,
    /// Ionization energies that the trace covers, eV.
    pub window_ev: [f64; 2],
    /// Standard deviation of the energy scale's offset, eV.
    pub scale_offset_sd_ev: f64,
}

/// The outcome of matching.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Assignment {
    /// Index of the most probable grouping among those given; all ids below are its bands.
    pub grouping: usize,
    /// Posterior probability of that grouping.
    pub grouping_probability: f64,
    /// One per band that has hole states, by rising energy.
    pub matches: Vec<Match>,
    /// Labels of hole states inside the window that no band was found for.
    pub unseen: Vec<String>,
    /// What the one-electron picture does not explain.
    pub remarks: Vec<Remark>,
    /// I(measured) ≈ scale × I(computed) + shift: the shift, eV.
    pub shift_ev: f64,
    /// Standard deviation of the shift at the centre of the matched levels, eV.
    pub shift_sd_ev: f64,
    /// The scale.
    pub scale: f64,
}

/// A band and the hole states that it shows.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Match {
    /// Id of the band.
    pub band: usize,
    /// Labels of the hole states, by rising energy; several may share a band.
    pub hole_states: Vec<String>,
    /// Posterior probability that the band shows exactly these states.
    pub probability: f64,
    /// Characters of the states, in the same order.
    pub character: Vec<Character>,
    /// Measured vertical energy minus the mean computed one, no shift applied, eV.
    pub residual_raw_ev: f64,
    /// The same after shift and scale, eV.
    pub residual_ev: f64,
    /// What speaks for and against.
    pub evidence: Vec<Evidence>,
    /// Other sets of states for this band that the evidence leaves open, most probable first.
    pub alternatives: Vec<Alternative>,
}

/// One piece of evidence.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Evidence {
    /// For or against.
    pub stance: Stance,
    /// Natural logarithm of the odds it contributes; 0 where it is only context.
    pub weight: f64,
    /// One sentence.
    pub text: String,
}

/// For or against.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Stance {
    /// Supports the match.
    For,
    /// Speaks against it.
    Against,
    /// Context without a side.
    Neutral,
}

/// Another reading of a band.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Alternative {
    /// Labels of the hole states; empty: the band belongs to none of the computed states.
    pub hole_states: Vec<String>,
    /// Posterior probability.
    pub probability: f64,
}

/// A feature that the one-electron picture does not explain.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Remark {
    /// What kind of feature.
    pub kind: RemarkKind,
    /// Where, eV.
    pub position_ev: f64,
    /// Band concerned, where there is one.
    pub band: Option<usize>,
    /// Possible causes, most probable first.
    pub candidates: Vec<Candidate>,
    /// One or two sentences: what was seen, what may cause it, what would settle it.
    pub text: String,
}

/// Kinds of remark.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum RemarkKind {
    /// A band without a partner; the leading candidate is a gas in the cell.
    ForeignGas,
    /// A band without a partner; the leading candidate is another line of the lamp.
    LampSatellite,
    /// A band without a partner and without a known cause.
    Unexplained,
    /// A hole state inside the window without a band.
    MissingBand,
    /// Neighbouring states whose order the level cannot decide.
    OpenOrder,
    /// The fit leaves structure, or a parameter that the data do not determine.
    Fit,
}

/// A possible cause.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Candidate {
    /// For example `N2 X v=0` or `He I β of band 2`.
    pub cause: String,
    /// Where it should stand, eV.
    pub expected_ev: f64,
    /// Observed minus expected, eV.
    pub deviation_ev: f64,
    /// Probability among the candidates and "none of these".
    pub probability: f64,
}

//! Matches bands to hole states and says what has no partner.
//!
//! Sees only plain data: groupings of a fit and [`crate::levels::Levels`]. An assignment can be
//! redone from two JSON files.
//!
//! Method: a generative model of the trace (hole states with the known error of their level, gases,
//! lamp lines, unknown bands), whose posterior over *all* assignments is summed exactly by dynamic
//! programming ([`chart`], [`posterior`]) and integrated over shift, scale and strength. A
//! probability therefore compares every alternative, bands that belong to nothing included. The
//! model with every prior and its source is `docs/assignment.md`. Valid for main lines of the
//! valence shell; satellites of the calculation are not matched.

mod chart;
mod decode;
mod evidence;
mod foreign;
mod grid;
mod likelihood;
mod posterior;
mod prior;
mod reading;
mod remarks;
#[cfg(test)]
mod sample;
#[cfg(test)]
mod simulation;
#[cfg(test)]
mod small_cases;

use crate::fit::Grouping;
use crate::levels::{Character, Levels, Method};
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// Why no assignment could be made.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum AssignError {
    /// The fit offered no reading of the trace.
    #[error("the fit gives no grouping of its lines into bands, so there is nothing to assign")]
    NoGrouping,
    /// The window is empty or not finite.
    #[error("the window {low} to {high} eV is not a range of ionization energies")]
    Window {
        /// Lower end, eV.
        low: f64,
        /// Upper end, eV.
        high: f64,
    },
    /// A number of the conditions is out of range.
    #[error("{name} is {value}; expected {expected}")]
    Condition {
        /// Which.
        name: &'static str,
        /// The value found.
        value: f64,
        /// What it should be.
        expected: &'static str,
    },
    /// A grouping's probability is not one.
    #[error("grouping {grouping} has the probability {probability}; expected 0 to 1")]
    Probability {
        /// Index of the grouping.
        grouping: usize,
        /// The value found.
        probability: f64,
    },
    /// A band holds a number that no fit can give.
    #[error("band {band} of grouping {grouping}: {name} is {value}; expected {expected}")]
    Band {
        /// Index of the grouping.
        grouping: usize,
        /// Id of the band.
        band: usize,
        /// Which number.
        name: &'static str,
        /// The value found.
        value: f64,
        /// What it should be.
        expected: &'static str,
    },
    /// A hole state holds a number that no calculation can give.
    #[error(
        "hole state '{label}' has the ionization energy {energy_ev} eV and pole strength \
         {pole_strength}; expected a finite energy and a strength above 0 and up to 1"
    )]
    State {
        /// Its label.
        label: String,
        /// Its energy, eV.
        energy_ev: f64,
        /// Its pole strength.
        pole_strength: f64,
    },
    /// The method's error is not known, so nothing can be said about how far off it is.
    #[error("no error model for the method '{method}'")]
    NoErrorModel {
        /// The method.
        method: Method,
    },
    /// A table built into the program cannot be read.
    #[error("built-in table {table}: {message}")]
    Table {
        /// Its name.
        table: &'static str,
        /// What is wrong.
        message: String,
    },
    /// The sum over assignments left the range of numbers.
    #[error("the sum over all assignments is {evidence}: bands or states too many or too odd")]
    Numerical {
        /// The sum.
        evidence: f64,
    },
}

/// Assigns bands to hole states.
///
/// Every grouping is weighed by its own probability times how well hole states, gases and lamp
/// lines explain its bands; the most probable one is reported. Energies in eV throughout; the
/// order of groupings' bands and of hole states does not matter.
///
/// # Errors
/// [`AssignError`] for numbers that no fit, calculation or experiment can give.
pub fn assign(
    groupings: &[Grouping],
    levels: &Levels,
    conditions: &Conditions,
) -> Result<Assignment, AssignError> {
    reading::check(groupings, conditions)?;
    let prior = prior::Prior::new(levels, conditions)?;
    let chart = chart::Chart::new(&prior);
    let surroundings = foreign::Surroundings::new(&levels.molecule.formula, conditions)?;
    let mut readings = Vec::with_capacity(groupings.len());
    for grouping in groupings {
        readings.push(reading::Reading::new(
            grouping,
            &prior,
            &chart,
            &surroundings,
        )?);
    }
    let scores: Vec<f64> = (groupings.iter().zip(&readings))
        .map(|(grouping, reading)| grouping.probability * reading.posterior.evidence)
        .collect();
    let total: f64 = scores.iter().sum();
    let mut best = 0;
    for (number, score) in scores.iter().enumerate() {
        if *score > scores[best] {
            best = number;
        }
    }
    if !(total.is_finite() && total > 0.0) {
        return Err(AssignError::Numerical { evidence: total });
    }
    let mut assignment = readings[best].assignment(&prior, &chart, &surroundings, levels);
    assignment.grouping = best;
    assignment.grouping_probability = scores[best] / total;
    Ok(assignment)
}

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

//! What the user may say about a file that its text does not.

use std::convert::Infallible;
use std::fmt;
use std::str::FromStr;

use serde::{Deserialize, Serialize};

use super::Axis;

/// How to read a trace. Everything is optional; what is left out is taken from the file.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
#[serde(default)]
pub struct ReadOptions {
    /// Which trace of the file, where it holds several.
    pub trace: Option<Choice>,
    /// How the axis was recorded. Without it the file's own words decide, and a note says so.
    pub axis: Option<Axis>,
    /// Photon energy, eV. Kinetic energies and flight times need it.
    pub photon_energy_ev: Option<f64>,
    /// The column of energies or flight times.
    pub energy_column: Option<Choice>,
    /// The column of counts.
    pub counts_column: Option<Choice>,
    /// The column of standard deviations. Without one the counts are taken as Poisson.
    pub sd_column: Option<Choice>,
    /// Lowest and highest ionization energy to keep, eV.
    pub window_ev: Option<[f64; 2]>,
    /// What parts the columns, where the text leaves it open.
    pub delimiter: Option<Delimiter>,
    /// The decimal mark, where the text leaves it open.
    pub decimal: Option<DecimalMark>,
}

/// One of several things in a file, by name (letter case is ignored) or by number from 1.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(untagged)]
pub enum Choice {
    /// Number, counted from 1.
    Number(usize),
    /// Name, as the file's header gives it.
    Name(String),
}

impl FromStr for Choice {
    type Err = Infallible;

    fn from_str(text: &str) -> Result<Self, Infallible> {
        let text = text.trim();
        Ok(match text.parse() {
            Ok(number) => Choice::Number(number),
            Err(_) => Choice::Name(text.to_string()),
        })
    }
}

impl fmt::Display for Choice {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        match self {
            Choice::Number(number) => write!(f, "{number}"),
            Choice::Name(name) => write!(f, "'{name}'"),
        }
    }
}

/// What parts the columns of delimited text.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Delimiter {
    /// A tabulator.
    Tab,
    /// A semicolon.
    Semicolon,
    /// A comma.
    Comma,
    /// One or more blanks or tabulators.
    Blanks,
}

/// The mark between the whole and the fraction of a number.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum DecimalMark {
    /// 15.58
    Point,
    /// 15,58
    Comma,
}

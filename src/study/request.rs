//! What the user asked for: the study file, everything in it optional.
//!
//! A value that cannot be right is refused while the file is read, so that the message names the
//! line. Several requests (a file, then overrides from the command line) are laid over each
//! other key by key; see [`StudyRequest::layered`].

use crate::levels::Method;
use crate::report::Direction;
use crate::trace::{Choice, DecimalMark, Delimiter};
use serde::{Deserialize, Serialize};
use std::path::PathBuf;

/// A study file.
#[derive(Debug, Clone, Default, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct StudyRequest {
    /// Name of the study, for the outputs.
    pub name: Option<String>,
    /// The molecule.
    #[serde(default)]
    pub molecule: MoleculeRequest,
    /// The trace.
    #[serde(default)]
    pub trace: TraceRequest,
    /// How to compute.
    #[serde(default)]
    pub level: LevelRequest,
    /// How to fit.
    #[serde(default)]
    pub fit: FitRequest,
    /// What to write.
    #[serde(default)]
    pub output: OutputRequest,
}

/// Section `[molecule]`.
#[derive(Debug, Clone, Default, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct MoleculeRequest {
    /// XYZ file, relative to the study file.
    pub geometry: Option<PathBuf>,
    /// Total charge; 0 if absent.
    pub charge: Option<i32>,
    /// Spin multiplicity; the lowest that fits if absent.
    pub multiplicity: Option<u32>,
}

/// Section `[trace]`.
#[derive(Debug, Clone, Default, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct TraceRequest {
    /// Measured file, relative to the study file.
    pub file: Option<PathBuf>,
    /// Which trace of the file, by name or number from 1, where it holds several.
    pub choice: Option<Choice>,
    /// `ionization`, `kinetic`, `wavenumber` or `flight-time`; read from the file if absent.
    pub axis: Option<AxisName>,
    /// Photon energy, eV.
    pub photon_energy_ev: Option<Positive>,
    /// Column of the axis: a name or a number from 1.
    pub energy_column: Option<Choice>,
    /// Column of the counts.
    pub counts_column: Option<Choice>,
    /// Column of the standard deviations.
    pub sd_column: Option<Choice>,
    /// What parts the columns, where the text leaves it open.
    pub delimiter: Option<Delimiter>,
    /// The decimal mark, where the text leaves it open.
    pub decimal: Option<DecimalMark>,
    /// Ionization energies to use, eV.
    pub window_ev: Option<Window>,
    /// Standard deviation of the energy scale's offset, eV.
    pub scale_offset_sd_ev: Option<Positive>,
    /// Neighbouring channels are merged until each is at least this wide, eV.
    pub merge_ev: Option<Positive>,
    /// Flight length, m.
    pub flight_length_m: Option<Positive>,
    /// Time zero, ns.
    pub time_zero_ns: Option<f64>,
    /// Retarding potential, V.
    pub retarding_v: Option<f64>,
}

/// Section `[level]`.
#[derive(Debug, Clone, Default, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LevelRequest {
    /// `method/basis`, for example `koopmans/def2-tzvp`.
    pub level: Option<LevelName>,
    /// Auxiliary set of the density fitting.
    pub auxiliary: Option<String>,
    /// Whether methods beyond Koopmans correlate the core electrons too; no if absent.
    pub all_electrons: Option<bool>,
}

/// Section `[fit]`.
#[derive(Debug, Clone, Default, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct FitRequest {
    /// Instrument's resolution (FWHM), eV.
    pub resolution_ev: Option<Positive>,
    /// Most lines to try.
    pub max_lines: Option<usize>,
}

/// Section `[output]`.
#[derive(Debug, Clone, Default, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct OutputRequest {
    /// Folder to write, relative to the study file.
    pub folder: Option<PathBuf>,
    /// Which way the energy axis runs.
    pub direction: Option<Direction>,
}

/// Kind of axis, as a word.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum AxisName {
    /// Ionization (binding) energy.
    Ionization,
    /// Kinetic energy.
    Kinetic,
    /// Ionization (binding) energy as a wavenumber.
    Wavenumber,
    /// Flight time.
    FlightTime,
}

impl AxisName {
    /// The word.
    pub fn name(self) -> &'static str {
        match self {
            AxisName::Ionization => "ionization",
            AxisName::Kinetic => "kinetic",
            AxisName::Wavenumber => "wavenumber",
            AxisName::FlightTime => "flight-time",
        }
    }
}

impl std::str::FromStr for AxisName {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let known = [
            Self::Ionization,
            Self::Kinetic,
            Self::Wavenumber,
            Self::FlightTime,
        ];
        known
            .into_iter()
            .find(|axis| axis.name() == text)
            .ok_or_else(|| {
                let names = known.map(Self::name).join(", ");
                format!("found '{text}', expected one of {names}")
            })
    }
}

/// A number that is finite and above zero.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(try_from = "f64", into = "f64")]
pub struct Positive(f64);

impl Positive {
    /// The number.
    pub fn get(self) -> f64 {
        self.0
    }
}

impl TryFrom<f64> for Positive {
    type Error = String;

    fn try_from(value: f64) -> Result<Self, String> {
        if value.is_finite() && value > 0.0 {
            Ok(Self(value))
        } else {
            Err(format!(
                "found {value}, expected a finite number above zero"
            ))
        }
    }
}

impl From<Positive> for f64 {
    fn from(value: Positive) -> f64 {
        value.0
    }
}

/// A range of ionization energies, eV, low before high.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(try_from = "Vec<f64>", into = "[f64; 2]")]
pub struct Window([f64; 2]);

impl Window {
    /// Low and high end, eV.
    pub fn ends(self) -> [f64; 2] {
        self.0
    }
}

impl TryFrom<Vec<f64>> for Window {
    type Error = String;

    fn try_from(found: Vec<f64>) -> Result<Self, String> {
        match found[..] {
            [low, high] if low.is_finite() && high.is_finite() && low < high => {
                Ok(Self([low, high]))
            }
            _ => Err(format!(
                "found {found:?}, expected two finite energies, the lower one first"
            )),
        }
    }
}

impl From<Window> for [f64; 2] {
    fn from(window: Window) -> [f64; 2] {
        window.0
    }
}

/// A level as the user wrote it: `method/basis`.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "String", into = "String")]
pub struct LevelName {
    /// Method.
    pub method: Method,
    /// Name of the basis; checked when the basis is looked up.
    pub basis: String,
}

impl Default for LevelName {
    /// `koopmans/def2-tzvp`.
    fn default() -> Self {
        Self {
            method: Method::Koopmans,
            basis: "def2-tzvp".to_owned(),
        }
    }
}

impl std::str::FromStr for LevelName {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let (method, basis) = text.trim().split_once('/').ok_or_else(|| {
            format!("found '{text}', expected METHOD/BASIS, for example koopmans/def2-tzvp")
        })?;
        if basis.trim().is_empty() {
            return Err(format!("found '{text}', expected a basis after the slash"));
        }
        Ok(Self {
            method: method.trim().parse()?,
            basis: basis.trim().to_ascii_lowercase(),
        })
    }
}

impl TryFrom<String> for LevelName {
    type Error = String;

    fn try_from(text: String) -> Result<Self, String> {
        text.parse()
    }
}

impl From<LevelName> for String {
    fn from(level: LevelName) -> String {
        format!("{}/{}", level.method, level.basis)
    }
}

/// Why a study file or an override could not be read.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("{place}: {message}")]
pub struct RequestError {
    /// `file:line:column`, or the option of the command line.
    pub place: String,
    /// What was found and what was expected.
    pub message: String,
}

impl StudyRequest {
    /// Reads one TOML text; `source` names it in messages.
    pub fn from_toml(text: &str, source: &str) -> Result<Self, RequestError> {
        parse(text, source).map(|(request, _)| request)
    }

    /// Reads a study file's text and lays overrides over it. Each override reads `key = value`
    /// with a dotted key, for example `trace.window_ev = [8, 21]`; a bare word as value is taken
    /// for text. Later overrides win.
    pub fn layered(text: &str, source: &str, overrides: &[String]) -> Result<Self, RequestError> {
        let (mut request, mut table) = parse(text, source)?;
        for line in overrides {
            let source = format!("override '{line}'");
            let (_, over) = parse(line, &source).or_else(|error| {
                let quoted = quote_value(line).ok_or(error.clone())?;
                parse(&quoted, &source).map_err(|_| error)
            })?;
            lay_over(&mut table, over);
            request = table
                .clone()
                .try_into()
                .map_err(|e: toml::de::Error| RequestError {
                    place: source,
                    message: e.message().trim().to_owned(),
                })?;
        }
        Ok(request)
    }
}

fn parse(text: &str, source: &str) -> Result<(StudyRequest, toml::Table), RequestError> {
    let locate = |e: toml::de::Error| {
        let place = match e.span() {
            Some(span) => {
                let before = &text[..span.start.min(text.len())];
                let line = before.matches('\n').count() + 1;
                let column = before.chars().rev().take_while(|&c| c != '\n').count() + 1;
                format!("{source}:{line}:{column}")
            }
            None => source.to_owned(),
        };
        RequestError {
            place,
            message: e.message().trim().to_owned(),
        }
    };
    let request = toml::from_str(text).map_err(locate)?;
    let table = toml::from_str(text).map_err(locate)?;
    Ok((request, table))
}

/// `key = word` with the word put in quotes.
fn quote_value(line: &str) -> Option<String> {
    let (key, value) = line.split_once('=')?;
    Some(format!("{key} = {:?}", value.trim()))
}

fn lay_over(base: &mut toml::Table, over: toml::Table) {
    for (key, value) in over {
        match (base.get_mut(&key), value) {
            (Some(toml::Value::Table(inner)), toml::Value::Table(value)) => lay_over(inner, value),
            (_, value) => {
                base.insert(key, value);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn overrides_win_key_by_key() {
        let text = "name = 'a'\n[trace]\nfile = 't.csv'\nwindow_ev = [8, 20]\n";
        let over = [
            "trace.window_ev = [9, 21]".to_owned(),
            "level.level=koopmans/def2-svp".to_owned(),
        ];
        let request = StudyRequest::layered(text, "s.toml", &over).unwrap();
        assert_eq!(request.trace.window_ev.unwrap().ends(), [9.0, 21.0]);
        assert_eq!(request.trace.file.unwrap(), PathBuf::from("t.csv"));
        assert_eq!(request.level.level.unwrap().basis, "def2-svp");
    }

    #[test]
    fn errors_name_line_and_column() {
        let text = "name = 'a'\n[trace]\nwindow_ev = [20, 8]\n";
        let error = StudyRequest::from_toml(text, "s.toml").unwrap_err();
        assert_eq!(error.place, "s.toml:3:13");
        assert!(error.message.contains("lower one first"), "{error}");

        let error = StudyRequest::from_toml("[trase]\n", "s.toml").unwrap_err();
        assert!(error.place.starts_with("s.toml:1:"), "{error}");
        assert!(error.message.contains("trase"), "{error}");
    }
}

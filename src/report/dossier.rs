//! The dossier: the whole result of a study as plain data. Every output is drawn from it.
//!
//! The JSON form is the stable schema `bandproof/dossier/1`: fields are added freely and never
//! renamed. [`Dossier::check`] says whether the arrays fit together, so that drawing code need
//! not ask again.

use super::ReportError;
use crate::assign::{Assignment, Match, Remark};
use crate::fit::{Band, BandFit, CorrelatedPair, FitStatistics, Peak};
use crate::levels::{Levels, Verdict};
use crate::trace::{Axis, Noise, Trace};
use serde::{Deserialize, Serialize};

/// Name of the JSON schema of [`Dossier`].
pub const SCHEMA: &str = "bandproof/dossier/1";

/// The whole result of a study.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Dossier {
    /// Always [`SCHEMA`].
    pub schema: String,
    /// Name and version of the program, for example `bandproof 0.1.0`.
    pub program: String,
    /// Title of the study, as the user gave it or the molecule's name.
    pub title: String,
    /// Every setting that was in force, resolved, in the order of the study file.
    pub study: serde_json::Map<String, serde_json::Value>,
    /// The measured trace, apart from its points.
    pub trace: TraceSummary,
    /// The computed side.
    pub levels: Levels,
    /// The bands of the grouping that the assignment chose, by rising vertical energy.
    pub bands: Vec<Band>,
    /// Matches of bands with hole states, by rising energy.
    pub matches: Vec<Match>,
    /// What the one-electron picture does not explain.
    pub remarks: Vec<Remark>,
    /// How well the trace is described.
    pub fit: FitSummary,
    /// What the matching decided as a whole.
    pub assignment: AssignmentSummary,
    /// All that the figure shows, as arrays.
    pub overlay: Overlay,
}

/// The measured trace, apart from its points.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TraceSummary {
    /// The file's name as the user gave it.
    pub source: String,
    /// Number of channels used.
    pub channels: usize,
    /// Lowest and highest ionization energy, eV.
    pub span_ev: [f64; 2],
    /// Photon energy, eV, where known.
    pub photon_energy_ev: Option<f64>,
    /// How the axis was recorded.
    pub axis: Axis,
    /// How the standard deviations of the counts are known.
    pub noise: Noise,
    /// Comment lines of the file.
    pub comments: Vec<String>,
}

/// How well the trace is described.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FitSummary {
    /// Goodness of the fit.
    pub statistics: FitStatistics,
    /// The fitted lines, by rising energy; members of bands point here.
    pub peaks: Vec<Peak>,
    /// Parameters that the data do not determine, in words.
    pub undetermined: Vec<String>,
    /// Pairs of parameters that the data can hardly tell apart.
    pub correlations: Vec<CorrelatedPair>,
    /// The ways to group the lines into bands, most probable from the shapes alone first.
    pub groupings: Vec<GroupingOdds>,
}

/// One way to group the lines into bands, with its odds.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct GroupingOdds {
    /// Probability from the shapes alone.
    pub probability: f64,
    /// Vertical energies of its bands, eV.
    pub vertical_ev: Vec<f64>,
}

/// What the matching decided as a whole.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct AssignmentSummary {
    /// Index into [`FitSummary::groupings`] of the grouping that `bands` follows.
    pub grouping: usize,
    /// Posterior probability of that grouping.
    pub grouping_probability: f64,
    /// I(measured) ≈ scale × I(computed) + shift: the shift, eV.
    pub shift_ev: f64,
    /// Standard deviation of the shift at the centre of the matched levels, eV.
    pub shift_sd_ev: f64,
    /// The scale.
    pub scale: f64,
    /// Labels of hole states inside the window that no band was found for.
    pub unseen: Vec<String>,
}

/// All that a figure shows. Measured arrays have the length of `energy_ev`, fitted curves that of
/// [`Overlay::curve_axis`]; a figure of a prediction alone leaves the measured arrays empty.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Overlay {
    /// Ionization energy of each channel, eV, strictly rising.
    pub energy_ev: Vec<f64>,
    /// Measured intensity, in `unit`.
    pub intensity: Vec<f64>,
    /// Its standard deviation.
    pub intensity_sd: Vec<f64>,
    /// Unit of the intensities in words, for example `counts` or `counts per eV`.
    pub unit: String,
    /// Axis of the fitted curves, eV, where they are wanted smoother than the channels stand;
    /// empty: the curves follow the channels.
    #[serde(default)]
    pub curve_ev: Vec<f64>,
    /// Fitted total; empty where nothing was fitted.
    pub fit: Vec<f64>,
    /// Fitted background; empty where nothing was fitted.
    pub background: Vec<f64>,
    /// One curve per band, background not included.
    pub bands: Vec<BandCurve>,
    /// (Measured − fit) in standard deviations, per channel; empty where nothing was fitted.
    pub residual: Vec<f64>,
    /// The computed hole states on the measured axis.
    pub sticks: Vec<OverlayStick>,
    /// Predicted trace; `null` where none was made.
    pub predicted: Option<PredictedCurve>,
    /// Which way the energy axis runs.
    #[serde(default)]
    pub direction: Direction,
}

/// The curve of one band.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BandCurve {
    /// Id of the band.
    pub band: usize,
    /// Intensity on [`Overlay::curve_axis`], background not included.
    pub intensity: Vec<f64>,
}

/// A computed hole state on the measured axis.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct OverlayStick {
    /// Label of the hole state.
    pub label: String,
    /// Ionization energy as computed, eV.
    pub computed_ev: f64,
    /// The same after the common shift and scale, eV.
    pub shifted_ev: f64,
    /// Height relative to the other sticks (pole strength × degeneracy), positive.
    pub height: f64,
    /// Id of the band that shows it; `null` where none does.
    pub band: Option<usize>,
    /// Character in one word.
    pub verdict: Verdict,
}

/// A predicted trace.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PredictedCurve {
    /// Ionization energy, eV, strictly rising.
    pub energy_ev: Vec<f64>,
    /// Intensity in arbitrary units.
    pub intensity: Vec<f64>,
}

/// Which way the energy axis of a figure runs.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Direction {
    /// Ionization energy rises from left to right.
    #[default]
    Rising,
    /// Ionization energy falls from left to right, as in many older figures.
    Falling,
}

impl TraceSummary {
    /// What a dossier keeps of a trace that is not empty, beside its points.
    pub fn of(trace: &Trace) -> Self {
        TraceSummary {
            source: trace.source.clone(),
            channels: trace.len(),
            span_ev: trace.span_ev(),
            photon_energy_ev: trace.photon_energy_ev,
            axis: trace.axis,
            noise: trace.noise,
            comments: trace.comments.clone(),
        }
    }
}

impl FitSummary {
    /// What a dossier keeps of a fit, beside the chosen bands and the curves.
    pub fn of(fit: &BandFit) -> Self {
        let groupings = fit.groupings.iter().map(|g| GroupingOdds {
            probability: g.probability,
            vertical_ev: g.bands.iter().map(|b| b.vertical_ev).collect(),
        });
        FitSummary {
            statistics: fit.statistics.clone(),
            peaks: fit.peaks.clone(),
            undetermined: fit.undetermined.clone(),
            correlations: fit.correlations.clone(),
            groupings: groupings.collect(),
        }
    }
}

impl AssignmentSummary {
    /// What a dossier keeps of an assignment, beside matches and remarks.
    pub fn of(assignment: &Assignment) -> Self {
        AssignmentSummary {
            grouping: assignment.grouping,
            grouping_probability: assignment.grouping_probability,
            shift_ev: assignment.shift_ev,
            shift_sd_ev: assignment.shift_sd_ev,
            scale: assignment.scale,
            unseen: assignment.unseen.clone(),
        }
    }
}

impl Dossier {
    /// Says whether the dossier can be drawn and written: arrays of equal length, numbers finite
    /// (JSON has no others), ids and labels that exist.
    ///
    /// # Errors
    /// [`ReportError::Inconsistent`] with the place and what is wrong there.
    pub fn check(&self) -> Result<(), ReportError> {
        self.overlay.check()?;
        for (i, band) in self.bands.iter().enumerate() {
            let numbers = [
                band.vertical_ev,
                band.vertical_sd,
                band.maximum_ev,
                band.origin_ev.unwrap_or(0.0),
                band.area,
                band.area_sd,
                band.fwhm_ev,
                band.spacing_ev.unwrap_or(0.0),
            ];
            finite(&format!("bands[{i}]"), &numbers)?;
        }
        let known = |band: usize| self.bands.iter().any(|b| b.id == band);
        for (i, found) in self.matches.iter().enumerate() {
            let place = format!("matches[{i}]");
            if !known(found.band) {
                return wrong(place, format!("there is no band {}", found.band));
            }
            for label in &found.hole_states {
                if !self.levels.hole_states.iter().any(|s| &s.label == label) {
                    return wrong(place, format!("there is no hole state '{label}'"));
                }
            }
            let numbers = [found.probability, found.residual_raw_ev, found.residual_ev];
            finite(&place, &numbers)?;
        }
        for (i, remark) in self.remarks.iter().enumerate() {
            let place = format!("remarks[{i}]");
            finite(&place, &[remark.position_ev])?;
            if let Some(band) = remark.band
                && !known(band)
            {
                return wrong(place, format!("there is no band {band}"));
            }
        }
        let s = &self.fit.statistics;
        finite(
            "fit.statistics",
            &[
                s.chi_squared,
                s.reduced_chi_squared,
                s.runs_score,
                s.runs_probability,
            ],
        )?;
        let a = &self.assignment;
        finite(
            "assignment",
            &[a.grouping_probability, a.shift_ev, a.shift_sd_ev, a.scale],
        )?;
        for state in &self.levels.hole_states {
            finite(
                &format!("levels.hole_states '{}'", state.label),
                &[
                    state.ionization_energy_ev,
                    state.koopmans_ev,
                    state.pole_strength,
                ],
            )?;
        }
        Ok(())
    }

    /// The match of a band, where it has one.
    pub fn match_of(&self, band: usize) -> Option<&Match> {
        self.matches.iter().find(|m| m.band == band)
    }

    /// The remarks about a band.
    pub fn remarks_of(&self, band: usize) -> impl Iterator<Item = &Remark> {
        self.remarks.iter().filter(move |r| r.band == Some(band))
    }
}

impl Overlay {
    /// Axis of the fitted curves, eV.
    pub fn curve_axis(&self) -> &[f64] {
        match self.curve_ev.is_empty() {
            true => &self.energy_ev,
            false => &self.curve_ev,
        }
    }

    /// Says whether the arrays fit together; see [`Dossier::check`].
    ///
    /// # Errors
    /// [`ReportError::Inconsistent`] with the place and what is wrong there.
    pub fn check(&self) -> Result<(), ReportError> {
        let n = self.energy_ev.len();
        axis("overlay.energy_ev", &self.energy_ev)?;
        axis("overlay.curve_ev", &self.curve_ev)?;
        let points = self.curve_axis().len();
        let (fitted, residuals) = match self.fit.is_empty() {
            true => (0, 0),
            false => (points, n),
        };
        let arrays: [(&str, &[f64], usize); 5] = [
            ("overlay.intensity", &self.intensity, n),
            ("overlay.intensity_sd", &self.intensity_sd, n),
            ("overlay.fit", &self.fit, fitted),
            ("overlay.background", &self.background, fitted),
            ("overlay.residual", &self.residual, residuals),
        ];
        for (place, values, expected) in arrays {
            array(place, values, expected)?;
        }
        for curve in &self.bands {
            array(
                &format!("overlay.bands, band {}", curve.band),
                &curve.intensity,
                points,
            )?;
        }
        for stick in &self.sticks {
            let place = format!("overlay.sticks '{}'", stick.label);
            finite(&place, &[stick.computed_ev, stick.shifted_ev, stick.height])?;
            if stick.height <= 0.0 {
                return wrong(place, format!("height {} is not positive", stick.height));
            }
        }
        if let Some(curve) = &self.predicted {
            axis("overlay.predicted.energy_ev", &curve.energy_ev)?;
            array(
                "overlay.predicted.intensity",
                &curve.intensity,
                curve.energy_ev.len(),
            )?;
        }
        Ok(())
    }
}

fn wrong<T>(place: String, problem: String) -> Result<T, ReportError> {
    Err(ReportError::Inconsistent { place, problem })
}

fn finite(place: &str, values: &[f64]) -> Result<(), ReportError> {
    match values.iter().find(|v| !v.is_finite()) {
        Some(v) => wrong(place.to_owned(), format!("{v} is not a finite number")),
        None => Ok(()),
    }
}

fn array(place: &str, values: &[f64], expected: usize) -> Result<(), ReportError> {
    if values.len() != expected {
        let found = values.len();
        return wrong(
            place.to_owned(),
            format!("{found} values where {expected} belong"),
        );
    }
    finite(place, values)
}

fn axis(place: &str, values: &[f64]) -> Result<(), ReportError> {
    finite(place, values)?;
    match values.windows(2).find(|w| w[1] <= w[0]) {
        Some(w) => wrong(
            place.to_owned(),
            format!("energies do not rise: {} then {}", w[0], w[1]),
        ),
        None => Ok(()),
    }
}

//! Reads bands out of a trace: finds them, fits them, groups resolved members into bands.
//!
//! The model is counts_i = exposure_i × intensity(E_i) with intensity = background + Σ area ×
//! Voigt line. Raw counts are fitted by maximum Poisson likelihood (ordinary weighting with √counts
//! loses a seventh of the area at ten counts per channel), stated standard deviations by weighted
//! least squares. No guesses are needed: [`fit_bands`] scans the trace with matched filters, adds
//! lines from the residual while they pay for themselves, and takes out those that do not. The
//! lines are then read as bands: a band is one ionization with all its vibrational members, and
//! where several readings are plausible all are returned with their odds.

mod background;
mod bands;
mod build;
mod channels;
mod describe;
mod grouping;
mod model;
mod modes;
mod scan;
pub mod solver;

pub use bands::fit_bands;

use crate::lineshape::Shape;
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// What a fit may be told; everything has a default.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FitOptions {
    /// Resolution of the instrument (FWHM), eV: no line is fitted narrower than 0.85 times this.
    pub resolution_ev: Option<f64>,
    /// Ionization energies to fit, eV; the whole trace without.
    pub window_ev: Option<[f64; 2]>,
    /// Most lines.
    pub max_lines: usize,
    /// Highest degree of the polynomial background.
    pub background_degree: usize,
    /// Whether the background may have an exponential tail.
    pub background_tail: bool,
    /// Probability that noise alone gives a line anywhere in the trace.
    pub false_alarm: f64,
    /// Most readings of the lines as bands.
    pub max_groupings: usize,
}

impl Default for FitOptions {
    fn default() -> Self {
        FitOptions {
            resolution_ev: None,
            window_ev: None,
            max_lines: 80,
            background_degree: 6,
            background_tail: true,
            false_alarm: 0.01,
            max_groupings: 8,
        }
    }
}

/// How far a fit has come.
#[derive(Debug, Clone, PartialEq)]
pub struct FitStep {
    /// What has just been done.
    pub stage: Stage,
    /// Lines in the model.
    pub lines: usize,
    /// χ² (deviance for raw counts).
    pub chi_squared: f64,
}

/// Stages of a fit.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stage {
    /// Candidates of the trace were fitted.
    Candidates,
    /// Lines were added from the residual; number of the round.
    Added(usize),
    /// Lines that do not pay were taken out.
    Pruned,
    /// All parameters were fitted to convergence.
    Converged,
    /// Lines were grouped into bands.
    Grouped,
}

impl std::fmt::Display for FitStep {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self.stage {
            Stage::Candidates => write!(f, "candidates of the trace fitted")?,
            Stage::Added(round) => write!(f, "lines added from the residual, round {round}")?,
            Stage::Pruned => write!(f, "lines that do not pay taken out")?,
            Stage::Converged => write!(f, "fit converged")?,
            Stage::Grouped => write!(f, "lines grouped into bands")?,
        }
        write!(f, ": {} lines, χ² {:.1}", self.lines, self.chi_squared)
    }
}

/// Why there is no fit.
#[derive(Debug, Error)]
pub enum FitError {
    /// The vectors of a trace differ in length.
    #[error("the trace has {energies} energies but {length} {what}")]
    Lengths {
        /// Number of energies.
        energies: usize,
        /// Which vector differs.
        what: &'static str,
        /// Its length.
        length: usize,
    },
    /// A window without extent.
    #[error("the window from {low} to {high} eV is empty")]
    EmptyWindow {
        /// Lower end, eV.
        low: f64,
        /// Upper end, eV.
        high: f64,
    },
    /// Too little data.
    #[error("{channels} channels lie in the window; a fit needs at least {least}")]
    TooFewChannels {
        /// Channels in the window.
        channels: usize,
        /// Channels needed.
        least: usize,
    },
    /// A channel that cannot be fitted.
    #[error("channel {channel}: {what} ({value})")]
    BadChannel {
        /// Number of the channel in the trace, from 1.
        channel: usize,
        /// What is wrong.
        what: &'static str,
        /// The offending value.
        value: f64,
    },
    /// An option outside its range.
    #[error("fit option `{option}` is {value}; it must be {wanted}")]
    BadOption {
        /// Name of the option.
        option: &'static str,
        /// Its value.
        value: f64,
        /// What it must be.
        wanted: &'static str,
    },
    /// The least-squares run failed or did not converge.
    #[error("the fit failed: {0}")]
    Solver(#[from] solver::SolverError),
}

/// Everything that a fit says about a trace.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BandFit {
    /// The fitted lines, by rising energy.
    pub peaks: Vec<Peak>,
    /// Ways to group the lines into bands, most probable first; probabilities sum to 1.
    pub groupings: Vec<Grouping>,
    /// Fitted background on the trace's axis, intensity (counts per eV); outside the fitted window
    /// its value at the nearer end.
    pub background: Vec<f64>,
    /// Fitted total on the trace's axis, intensity (counts per eV).
    pub total: Vec<f64>,
    /// Residuals on the trace's axis in standard deviations (signed root of the deviance); zero
    /// outside the fitted window.
    pub residuals: Vec<f64>,
    /// Energies that were fitted, eV.
    pub window_ev: [f64; 2],
    /// How good the fit is.
    pub statistics: FitStatistics,
    /// Parameters that the data do not determine, in words.
    pub undetermined: Vec<String>,
    /// Pairs of parameters with |correlation| above 0.9.
    pub correlations: Vec<CorrelatedPair>,
}

impl FitError {
    /// Whether the fit ran but found no minimum (rather than that the input was wrong).
    pub fn is_not_converged(&self) -> bool {
        matches!(
            self,
            FitError::Solver(
                solver::SolverError::NotConverged(_) | solver::SolverError::Machinery(_)
            )
        )
    }
}

impl BandFit {
    /// Intensity of one band of a grouping at given energies, counts per eV, without background.
    pub fn band_curve(&self, band: &Band, energies: &[f64]) -> Vec<f64> {
        let lines: Vec<&Peak> = band.peaks.iter().map(|&k| &self.peaks[k]).collect();
        energies
            .iter()
            .map(|&e| lines.iter().map(|p| p.intensity(e)).sum())
            .collect()
    }
}

impl Peak {
    /// Intensity of the line at an energy, counts per eV.
    pub fn intensity(&self, energy_ev: f64) -> f64 {
        match Shape::new(self.gaussian_fwhm_ev, self.lorentzian_fwhm_ev) {
            Ok(shape) => self.area * shape.value(energy_ev - self.position_ev),
            Err(_) => 0.0,
        }
    }
}

/// One fitted line shape: an unresolved band, or one vibrational member of a resolved one.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Peak {
    /// Centre, eV.
    pub position_ev: f64,
    /// Standard deviation of the centre, eV.
    pub position_sd: f64,
    /// Area, counts.
    pub area: f64,
    /// Standard deviation of the area.
    pub area_sd: f64,
    /// Gaussian part of the width (FWHM), eV.
    pub gaussian_fwhm_ev: f64,
    /// Lorentzian part of the width (FWHM), eV.
    pub lorentzian_fwhm_ev: f64,
    /// Full width at half maximum of the whole shape, eV.
    pub fwhm_ev: f64,
    /// Standard deviation of the width, eV; `null` where the data do not determine it.
    pub fwhm_sd: Option<f64>,
    /// Gain in log likelihood over a fit without this line.
    pub significance: f64,
}

/// One way to read the lines as bands.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Grouping {
    /// Probability of this reading, from the shapes alone.
    pub probability: f64,
    /// Bands by rising vertical energy.
    pub bands: Vec<Band>,
}

/// Everything that the trace shows of one ionization.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Band {
    /// Number by rising vertical energy, from 1.
    pub id: usize,
    /// First moment, eV: by the Franck-Condon sum rule the vertical ionization energy.
    pub vertical_ev: f64,
    /// Standard deviation of `vertical_ev`.
    pub vertical_sd: f64,
    /// Highest point of the fitted band, eV.
    pub maximum_ev: f64,
    /// First resolved member, eV; `null` where none is resolved.
    pub origin_ev: Option<f64>,
    /// Area, counts.
    pub area: f64,
    /// Standard deviation of `area`.
    pub area_sd: f64,
    /// Full width at half maximum of the envelope (of the line where unresolved), eV.
    pub fwhm_ev: f64,
    /// Mean spacing of the members, eV; `null` for fewer than two.
    pub spacing_ev: Option<f64>,
    /// Gain in log likelihood over a fit without this band.
    pub significance: f64,
    /// Members by rising energy; one for an unresolved band.
    pub members: Vec<Member>,
    /// All lines that make up the band, as indices into [`BandFit::peaks`], by rising energy:
    /// more than the members where a member's shape takes several lines.
    pub peaks: Vec<usize>,
}

/// One vibrational member of a band.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Member {
    /// Index into [`BandFit::peaks`]: its strongest line.
    pub peak: usize,
    /// Centre, eV.
    pub position_ev: f64,
    /// Standard deviation of the centre, eV.
    pub position_sd: f64,
    /// Area, counts.
    pub area: f64,
    /// Standard deviation of the area.
    pub area_sd: f64,
}

/// Goodness of a fit.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FitStatistics {
    /// χ² of the fit (deviance for Poisson counts).
    pub chi_squared: f64,
    /// Channels minus free parameters.
    pub degrees_of_freedom: usize,
    /// χ² per degree of freedom.
    pub reduced_chi_squared: f64,
    /// Wald-Wolfowitz runs test of the residual signs: standard score.
    pub runs_score: f64,
    /// Two-sided probability of a runs score at least as extreme.
    pub runs_probability: f64,
    /// Iterations of the last least-squares run.
    pub iterations: usize,
    /// Why the solver stopped.
    pub stopped_because: String,
}

/// Two parameters that the data can hardly tell apart.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CorrelatedPair {
    /// Name of the first, for example `line 2 area`.
    pub first: String,
    /// Name of the second.
    pub second: String,
    /// Correlation coefficient.
    pub correlation: f64,
}

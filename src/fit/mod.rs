//! Reads bands out of a trace: finds them, fits them, groups resolved members into bands.

pub mod solver;

use serde::{Deserialize, Serialize};

/// Everything that a fit says about a trace.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BandFit {
    /// The fitted lines, by rising energy.
    pub peaks: Vec<Peak>,
    /// Ways to group the lines into bands, most probable first; probabilities sum to 1.
    pub groupings: Vec<Grouping>,
    /// Fitted background on the trace's axis, intensity (counts per eV).
    pub background: Vec<f64>,
    /// Fitted total on the trace's axis, intensity (counts per eV).
    pub total: Vec<f64>,
    /// How good the fit is.
    pub statistics: FitStatistics,
    /// Parameters that the data do not determine, in words.
    pub undetermined: Vec<String>,
    /// Pairs of parameters with |correlation| above 0.9.
    pub correlations: Vec<CorrelatedPair>,
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
}

/// One vibrational member of a band.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Member {
    /// Index into [`BandFit::peaks`].
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

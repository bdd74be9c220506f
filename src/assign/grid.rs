//! Points at which the common shift, slope and strength of a molecule's states are tried.
//!
//! A regular grid under the prior, fine enough for the sharpest posterior that the bands can give.
//! The rectangle rule is exact for Gaussians to 2·exp(−2π²·(σ/h)²): 1e-5 at a step h of 1.2 σ.

use super::likelihood::Comparison;
use super::prior::{AREA_LN_SD, STRENGTH_LN_SD};

/// Where the integrand is evaluated: equally weighted but for the prior.
pub(super) struct Grid {
    /// Shift at lever zero, slope, prior weight.
    pub common: Vec<(f64, f64, f64)>,
    /// Logarithm of the strength, prior weight.
    pub strengths: Vec<(f64, f64)>,
    /// Lever about which the shift is counted, eV.
    pub lever_ev: f64,
}

/// Grid steps per posterior standard deviation expected when all bands are matched.
const STEP: f64 = 1.2;
/// How far the grid reaches, prior standard deviations: shift and slope, strength.
const REACH: f64 = 4.0;
/// See [`REACH`].
const STRENGTH_REACH: f64 = 3.0;

impl Grid {
    /// A grid fine enough for the sharpest posterior that these bands can give; `refine` divides
    /// the step.
    pub(super) fn new(comparison: &Comparison, refine: f64) -> Self {
        let prior = comparison.prior;
        let states = &prior.states;
        let pairs = states.len().min(comparison.data.len()) as f64;
        if states.is_empty() {
            return Grid {
                common: vec![(0.0, 0.0, 1.0)],
                strengths: vec![(0.0, 1.0)],
                lever_ev: 0.0,
            };
        }
        let count = states.len() as f64;
        let lever = states.iter().map(|s| s.lever_ev).sum::<f64>() / count;
        let spread = states
            .iter()
            .map(|s| (s.lever_ev - lever).powi(2))
            .sum::<f64>()
            / count;
        let scatter = states
            .iter()
            .map(|s| s.scatter_ev)
            .fold(f64::INFINITY, f64::min);
        let sharpest = |prior_sd: f64, information: f64| {
            STEP / refine / (prior_sd.powi(-2) + information).sqrt()
        };
        let shift_sd = (prior.shift_sd_ev.powi(2) + (prior.slope_sd * lever).powi(2)).sqrt();
        let shifts = points(
            REACH * shift_sd,
            sharpest(shift_sd, pairs / scatter.powi(2)),
        );
        let slopes = points(
            REACH * prior.slope_sd,
            sharpest(prior.slope_sd, pairs * spread / scatter.powi(2)),
        );
        let density = |x: f64, sd: f64| (-0.5 * (x / sd).powi(2)).exp();
        let mut common = Vec::with_capacity(shifts.len() * slopes.len());
        for &slope in &slopes {
            for &at_lever in &shifts {
                let shift = at_lever - slope * lever;
                let weight = density(shift, prior.shift_sd_ev) * density(slope, prior.slope_sd);
                common.push((shift, slope, weight));
            }
        }
        let usual = comparison.usual_ln_strength();
        let step = sharpest(STRENGTH_LN_SD, pairs / AREA_LN_SD.powi(2));
        let strengths = (points(STRENGTH_REACH * STRENGTH_LN_SD, step).into_iter())
            .map(|x| (usual + x, density(x, STRENGTH_LN_SD)))
            .collect();
        let mut grid = Grid {
            common,
            strengths,
            lever_ev: lever,
        };
        let total: f64 = grid.common.iter().map(|p| p.2).sum();
        grid.common.iter_mut().for_each(|p| p.2 /= total);
        let total: f64 = grid.strengths.iter().map(|p| p.1).sum();
        grid.strengths.iter_mut().for_each(|p| p.1 /= total);
        grid
    }
}

/// Regular points about zero out to `reach`.
fn points(reach: f64, step: f64) -> Vec<f64> {
    let half = (reach / step).ceil() as i64;
    (-half..=half).map(|i| i as f64 * step).collect()
}

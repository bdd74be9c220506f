//! The part of a trace that is fitted, and how its counts are distributed.

use super::FitError;
use crate::trace::{Noise, Trace};

/// Fewest channels that a fit accepts: a line and a sloping background have six parameters, and
/// a residual has to be left to judge them by.
pub(super) const FEWEST_CHANNELS: usize = 12;

/// How counts scatter about their expectation.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Scatter {
    /// Poisson: deviance 2·Σ[m − y + y·ln(y/m)] (Baker and Cousins, Nucl. Instrum. Methods 221,
    /// 437, 1984), which has no bias at low counts.
    Poisson,
    /// Normal with known standard deviations: χ².
    Normal,
}

/// Channels inside the fitted window.
#[derive(Debug, Clone)]
pub(super) struct Channels {
    pub energy: Vec<f64>,
    pub exposure: Vec<f64>,
    pub counts: Vec<f64>,
    pub sd: Vec<f64>,
    pub scatter: Scatter,
    /// First channel of the window in the trace.
    pub first: usize,
}

impl Channels {
    /// Cuts the window out of a trace and checks what the fit relies on.
    pub fn new(trace: &Trace, window_ev: Option<[f64; 2]>) -> Result<Self, FitError> {
        let n = trace.energy_ev.len();
        for (what, length) in [
            ("counts", trace.counts.len()),
            ("standard deviations", trace.sd.len()),
            ("exposures", trace.exposure_ev.len()),
        ] {
            if length != n {
                return Err(FitError::Lengths {
                    energies: n,
                    what,
                    length,
                });
            }
        }
        let [low, high] = window_ev.unwrap_or([f64::NEG_INFINITY, f64::INFINITY]);
        if !matches!(low.partial_cmp(&high), Some(std::cmp::Ordering::Less)) {
            return Err(FitError::EmptyWindow { low, high });
        }
        let first = trace.energy_ev.partition_point(|&e| e < low);
        let end = trace.energy_ev.partition_point(|&e| e <= high).max(first);
        if end - first < FEWEST_CHANNELS {
            return Err(FitError::TooFewChannels {
                channels: end - first,
                least: FEWEST_CHANNELS,
            });
        }
        let scatter = match trace.noise {
            Noise::Poisson => Scatter::Poisson,
            Noise::Stated => Scatter::Normal,
        };
        let channels = Channels {
            energy: trace.energy_ev[first..end].to_vec(),
            exposure: trace.exposure_ev[first..end].to_vec(),
            counts: trace.counts[first..end].to_vec(),
            sd: trace.sd[first..end].to_vec(),
            scatter,
            first,
        };
        channels.check()?;
        Ok(channels)
    }

    fn check(&self) -> Result<(), FitError> {
        let bad = |i: usize, what, value| {
            Err(FitError::BadChannel {
                channel: self.first + i + 1,
                what,
                value,
            })
        };
        for i in 0..self.len() {
            if !self.energy[i].is_finite() {
                return bad(i, "energy is not finite", self.energy[i]);
            }
            if i > 0 && self.energy[i] <= self.energy[i - 1] {
                return bad(i, "energy does not rise", self.energy[i]);
            }
            if !(self.exposure[i] > 0.0 && self.exposure[i].is_finite()) {
                return bad(i, "exposure is not positive", self.exposure[i]);
            }
            if !self.counts[i].is_finite() {
                return bad(i, "count is not finite", self.counts[i]);
            }
            match self.scatter {
                Scatter::Poisson if self.counts[i] < 0.0 => {
                    return bad(i, "raw count is negative", self.counts[i]);
                }
                Scatter::Normal if !(self.sd[i] > 0.0 && self.sd[i].is_finite()) => {
                    return bad(i, "standard deviation is not positive", self.sd[i]);
                }
                _ => {}
            }
        }
        Ok(())
    }

    pub fn len(&self) -> usize {
        self.energy.len()
    }

    /// Length of the window, eV.
    pub fn span(&self) -> f64 {
        self.energy[self.len() - 1] - self.energy[0]
    }

    /// Channels with energies in `[low, high]`.
    pub fn range(&self, low: f64, high: f64) -> std::ops::Range<usize> {
        let from = self.energy.partition_point(|&e| e < low);
        let to = self.energy.partition_point(|&e| e <= high);
        from..to.max(from)
    }

    /// Distance between channels at an energy, eV.
    pub fn spacing(&self, energy: f64) -> f64 {
        let i = self
            .energy
            .partition_point(|&e| e < energy)
            .clamp(1, self.len() - 1);
        self.energy[i] - self.energy[i - 1]
    }

    /// What channel `i` adds to the value to be minimised when `expected` counts are expected.
    pub fn deviance(&self, i: usize, expected: f64) -> f64 {
        let y = self.counts[i];
        match self.scatter {
            Scatter::Normal => ((y - expected) / self.sd[i]).powi(2),
            Scatter::Poisson if y > 0.0 => {
                // m − y + y·ln(y/m) with d = (m − y)/y: y·(d − ln(1 + d)), without cancellation.
                let d = (expected - y) / y;
                2.0 * y * (d - d.ln_1p())
            }
            Scatter::Poisson => 2.0 * expected,
        }
    }

    /// Variance of channel `i` when `expected` counts are expected.
    pub fn variance(&self, i: usize, expected: f64) -> f64 {
        match self.scatter {
            Scatter::Normal => self.sd[i] * self.sd[i],
            Scatter::Poisson => expected,
        }
    }

    /// Signed root of the deviance of each channel: residuals in standard deviations.
    pub fn residuals(&self, expected: &[f64]) -> Vec<f64> {
        (0..self.len())
            .map(|i| {
                let size = self.deviance(i, expected[i]).max(0.0).sqrt();
                size.copysign(self.counts[i] - expected[i])
            })
            .collect()
    }
}

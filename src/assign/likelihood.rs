//! What a band says for or against a set of hole states: position, area, look.
//!
//! Every weight is a ratio to the same yardstick, a band that has nothing to do with anything: it
//! stands anywhere in the window and its area anywhere in a wide logarithmic range. Weights of
//! alternatives that read the trace as different numbers of bands can then be compared.

use super::chart::Chart;
use super::prior::{
    self, AREA_LN_RANGE, AREA_LN_SD, Look, Prior, SEEN, SHARING_FLOOR_EV, SHARING_WIDTH, SPLIT,
    SPLIT_MEAN_EV, WILD_FACTOR,
};
use crate::fit::Band;

/// What counts of a band.
#[derive(Debug, Clone)]
pub(super) struct Datum {
    pub vertical_ev: f64,
    pub vertical_sd: f64,
    /// Logarithm of the area and its variance; `None` where the area is not positive.
    pub ln_area: Option<(f64, f64)>,
    /// Within this distance of the centre states are not told apart (standard deviation), eV.
    pub sharing_ev: f64,
    pub look: Look,
    /// Weight of all explanations without a hole state.
    pub foreign: f64,
}

/// Width that a trace's sharpest band may owe to the instrument, at most, eV.
const INSTRUMENT_LIMIT_EV: f64 = 0.1;

/// Estimates the instrument's width from the sharpest band, eV.
pub(super) fn instrument_width_ev(bands: &[Band]) -> f64 {
    bands
        .iter()
        .map(|b| b.fwhm_ev)
        .fold(INSTRUMENT_LIMIT_EV, f64::min)
        .max(1e-3)
}

impl Datum {
    pub(super) fn new(band: &Band, instrument_ev: f64, foreign: f64) -> Self {
        let relative = band.area_sd / band.area;
        Datum {
            vertical_ev: band.vertical_ev,
            vertical_sd: band.vertical_sd,
            ln_area: (band.area > 0.0).then(|| (band.area.ln(), relative.min(1.0).powi(2))),
            sharing_ev: (SHARING_WIDTH * band.fwhm_ev).max(SHARING_FLOOR_EV),
            look: look(band, instrument_ev),
            foreign,
        }
    }
}

/// How the band looks: by the spread of its members where they are resolved, else by its width.
pub(super) fn look(band: &Band, instrument_ev: f64) -> Look {
    let own = (band.fwhm_ev.powi(2) - instrument_ev.powi(2))
        .max(0.0)
        .sqrt();
    let width = if band.members.len() > 1 {
        let total: f64 = band.members.iter().map(|m| m.area.max(0.0)).sum();
        let mean = |f: &dyn Fn(f64) -> f64| {
            let sum: f64 = band
                .members
                .iter()
                .map(|m| m.area.max(0.0) * f(m.position_ev))
                .sum();
            sum / total.max(f64::MIN_POSITIVE)
        };
        let centre = mean(&|x| x);
        let full_width = (8.0 * std::f64::consts::LN_2).sqrt();
        full_width * mean(&|x| (x - centre).powi(2)).sqrt()
    } else {
        own
    };
    if band.members.len() < 2 && (band.fwhm_ev <= 1.3 * instrument_ev || own <= 0.08) {
        Look::Line
    } else if width <= 0.3 {
        Look::Sharp
    } else if width <= 0.6 {
        Look::Medium
    } else {
        Look::Broad
    }
}

/// Weights that depend on shift and slope.
pub(super) struct Positions {
    /// Per band and set.
    pub sets: Vec<Vec<f64>>,
    /// Per band (the first of the run), state and number of bands minus 2.
    pub splits: Vec<Vec<[f64; 2]>>,
    /// Per list in [`Chart::gaps`]: probability that those states are missing.
    pub gaps: Vec<f64>,
    /// Per state: probability that it is missing.
    pub missing: Vec<f64>,
}

/// Weights that depend on the overall strength.
pub(super) struct Areas {
    /// Per band and strength class.
    pub sets: Vec<Vec<f64>>,
    /// As in [`Positions::splits`].
    pub splits: Vec<Vec<[f64; 2]>>,
}

/// Bands beside states.
pub(super) struct Comparison<'a> {
    pub prior: &'a Prior,
    pub chart: &'a Chart,
    pub data: &'a [Datum],
    /// Strength class of each set.
    pub class_of_set: Vec<usize>,
    /// Total strength and variance of its logarithm, per class.
    classes: Vec<(f64, f64)>,
    /// Look, per band and set.
    looks: Vec<Vec<f64>>,
}

impl<'a> Comparison<'a> {
    pub(super) fn new(prior: &'a Prior, chart: &'a Chart, data: &'a [Datum]) -> Self {
        let mut classes: Vec<(f64, f64)> = Vec::new();
        let class_of_set = (chart.sets.iter())
            .map(|set| {
                let class = strength_class(prior, set);
                classes.iter().position(|c| *c == class).unwrap_or_else(|| {
                    classes.push(class);
                    classes.len() - 1
                })
            })
            .collect();
        let looks = (data.iter())
            .map(|datum| {
                chart
                    .sets
                    .iter()
                    .map(|set| look_weight(prior, set, datum.look))
                    .collect()
            })
            .collect();
        Comparison {
            prior,
            chart,
            data,
            class_of_set,
            classes,
            looks,
        }
    }

    /// All weights at one shift and slope (both on top of the class's own).
    pub(super) fn positions(&self, shift_ev: f64, slope: f64) -> Positions {
        let states = &self.prior.states;
        let width = self.prior.window_width_ev();
        let expected: Vec<f64> = states
            .iter()
            .map(|s| s.expected_ev + shift_ev + slope * s.lever_ev)
            .collect();
        let missing: Vec<f64> = (states.iter().zip(&expected))
            .map(|(s, e)| 1.0 - SEEN * self.inside(*e, s.scatter_ev))
            .collect();
        let mut positions = Positions {
            sets: Vec::with_capacity(self.data.len()),
            splits: Vec::with_capacity(self.data.len()),
            gaps: (self.chart.gaps.iter())
                .map(|gap| gap.iter().map(|&s| missing[s]).product())
                .collect(),
            missing,
        };
        for (number, band) in self.data.iter().enumerate() {
            let near: Vec<[f64; 2]> = (states.iter().zip(&expected))
                .map(|(state, expected)| {
                    let whole = if state.degeneracy > 1 {
                        1.0 - SPLIT
                    } else {
                        1.0
                    };
                    let off = band.vertical_ev - expected;
                    let blur = band.sharing_ev;
                    let density = |blur| prior::scatter_density(off, state.scatter_ev, blur);
                    let root = std::f64::consts::TAU.sqrt();
                    [
                        SEEN * whole * width * density(band.vertical_sd),
                        SEEN * whole * root * blur * density(blur),
                    ]
                })
                .collect();
            let root = std::f64::consts::TAU.sqrt();
            let sets = (self.chart.sets.iter().zip(&self.looks[number]))
                .map(|(set, look)| match set.as_slice() {
                    [state] => near[*state][0] * look,
                    several => {
                        let together: f64 = several.iter().map(|s| near[*s][1]).product();
                        let n = several.len() as f64;
                        together * n.sqrt() / (root * band.sharing_ev) * width * look
                    }
                })
                .collect();
            positions.sets.push(sets);
            positions.splits.push(
                (0..states.len())
                    .map(|state| {
                        [2, 3].map(|parts| self.split_position(number, state, parts, &expected))
                    })
                    .collect(),
            );
        }
        positions
    }

    /// Probability that a state expected at `expected` stands where it can be seen.
    fn inside(&self, expected: f64, scatter: f64) -> f64 {
        let [low, high] = self.prior.visible_ev;
        prior::scatter_below(high - expected, scatter)
            - prior::scatter_below(low - expected, scatter)
    }

    /// Position and look of a degenerate state over `parts` bands from `first` on.
    fn split_position(&self, first: usize, state: usize, parts: usize, expected: &[f64]) -> f64 {
        let degeneracy = self.prior.states[state].degeneracy;
        if parts > degeneracy || first + parts > self.data.len() {
            return 0.0;
        }
        let run = &self.data[first..first + parts];
        // Twofold degeneracy splits in two, threefold in two or three alike.
        let chance = SPLIT / (degeneracy.min(3) - 1) as f64;
        let width = self.prior.window_width_ev();
        let n = parts as f64;
        let mean = run.iter().map(|b| b.vertical_ev).sum::<f64>() / n;
        let blur = run
            .iter()
            .map(|b| b.vertical_sd.powi(2))
            .sum::<f64>()
            .sqrt()
            / n;
        let scatter = self.prior.states[state].scatter_ev;
        let mut weight = SEEN * chance * width;
        weight *= prior::scatter_density(mean - expected[state], scatter, blur);
        for pair in run.windows(2) {
            let gap = pair[1].vertical_ev - pair[0].vertical_ev;
            weight *= width * (-gap / SPLIT_MEAN_EV).exp() / SPLIT_MEAN_EV;
        }
        let verdict = self.prior.states[state].character.verdict;
        run.iter()
            .fold(weight, |w, band| w * prior::look_odds(verdict, band.look))
    }

    /// All weights at one logarithm of the area per unit of strength.
    pub(super) fn areas(&self, ln_strength: f64) -> Areas {
        let sets = (self.data.iter())
            .map(|band| {
                (self.classes.iter())
                    .map(|(strength, variance)| {
                        area_weight(band, ln_strength + strength.ln(), *variance)
                    })
                    .collect()
            })
            .collect();
        let splits = (0..self.data.len())
            .map(|first| {
                (self.prior.states.iter())
                    .map(|state| {
                        let strength = state.strength;
                        [2usize, 3].map(|parts| {
                            let expected = ln_strength + (strength / parts as f64).ln();
                            (self.data.iter().skip(first).take(parts))
                                .map(|band| area_weight(band, expected, AREA_LN_SD.powi(2)))
                                .product()
                        })
                    })
                    .collect()
            })
            .collect();
        Areas { sets, splits }
    }

    /// Logarithm of the area per unit of strength to start from: everything over everything.
    pub(super) fn usual_ln_strength(&self) -> f64 {
        let area: f64 = self
            .data
            .iter()
            .filter_map(|b| b.ln_area)
            .map(|(ln_area, _)| ln_area.exp())
            .sum();
        let [low, high] = self.prior.visible_ev;
        let inside: f64 = (self.prior.states.iter())
            .filter(|s| s.expected_ev > low && s.expected_ev < high)
            .map(|s| s.strength)
            .sum();
        if area > 0.0 {
            (area / inside.max(1.0)).ln()
        } else {
            0.0
        }
    }
}

/// Total strength, and variance of the logarithm of its area: independent factors partly cancel.
fn strength_class(prior: &Prior, set: &[usize]) -> (f64, f64) {
    let strengths = || set.iter().map(|&s| prior.states[s].strength);
    let total: f64 = strengths().sum();
    let squares: f64 = strengths().map(|x| x * x).sum();
    (total, AREA_LN_SD.powi(2) * squares / (total * total))
}

/// Weight of an area against an unrelated one.
fn area_weight(band: &Datum, expected_ln_area: f64, variance: f64) -> f64 {
    band.ln_area.map_or(1.0, |(ln_area, own)| {
        AREA_LN_RANGE * prior::normal(ln_area - expected_ln_area, variance + own)
    })
}

/// Weight of a look against an unrelated one.
pub(super) fn look_weight(prior: &Prior, set: &[usize], look: Look) -> f64 {
    match set {
        [state] => prior::look_odds(prior.states[*state].character.verdict, look),
        _ => prior::shared_look_odds(look),
    }
}

/// The single weights of one match at given shift, slope and strength, as natural logarithms.
pub(super) struct Ledger {
    pub position: f64,
    pub area: f64,
    pub look: f64,
    /// Standard deviation that the residual is normal within, eV.
    pub position_sd_ev: f64,
    /// Measured over expected area.
    pub area_ratio: Option<f64>,
}

/// Splits the weight of a set for one band into its parts.
pub(super) fn ledger(
    prior: &Prior,
    band: &Datum,
    set: &[usize],
    expected: &[f64],
    ln_strength: f64,
) -> Ledger {
    let width = prior.window_width_ev();
    let n = set.len() as f64;
    let blur = if set.len() > 1 {
        band.sharing_ev
    } else {
        band.vertical_sd
    };
    let root = std::f64::consts::TAU.sqrt();
    let mut position = width.ln() + n.sqrt().ln() + (n - 1.0) * (root * blur).ln();
    let mut variance = 0.0;
    for &state in set {
        let scatter = prior.states[state].scatter_ev;
        let off = band.vertical_ev - expected[state];
        position += prior::scatter_density(off, scatter, blur)
            .max(f64::MIN_POSITIVE)
            .ln();
        let wild = 1.0 + prior::WILD_SHARE * (WILD_FACTOR * WILD_FACTOR - 1.0);
        variance += scatter * scatter * wild;
    }
    let (strength, area_variance) = strength_class(prior, set);
    let expected_ln_area = ln_strength + strength.ln();
    Ledger {
        position,
        area: area_weight(band, expected_ln_area, area_variance)
            .max(f64::MIN_POSITIVE)
            .ln(),
        look: look_weight(prior, set, band.look).ln(),
        position_sd_ev: variance.sqrt() / n,
        area_ratio: band
            .ln_area
            .map(|(ln_area, _)| (ln_area - expected_ln_area).exp()),
    }
}

//! Sums over all assignments, exactly, and integrates over what the molecule's states have in
//! common: shift, slope and overall strength.
//!
//! For given shift, slope and strength the weight of an assignment is a product of one factor per
//! band and per missing state, so a forward and a backward sweep over the chart give its sum over
//! all assignments and the share of every single (band, set) pair (the forward-backward algorithm:
//! Baum and others, 1970, memory). The three common quantities are integrated on a regular grid
//! under their prior; for integrands as smooth as these Gaussians the error of the rectangle rule
//! falls faster than any power of the step. Weights stay far inside the range of f64: every band
//! can be foreign at a weight near 0.2 and every state missing at one above 0.03, so no sum is
//! ever smaller than the product of those, and no logarithms are needed in the sweeps.

use super::AssignError;
use super::chart::Chart;
use super::grid::Grid;
use super::likelihood::{Areas, Comparison, Positions};
use rayon::prelude::*;

/// The posterior of one reading of the trace.
#[derive(Debug, Clone)]
pub(super) struct Posterior {
    /// Sum over all assignments, integrated: how well this reading fits, relative to a trace full
    /// of unrelated bands.
    pub evidence: f64,
    /// Probability that a band shows exactly a set, per band and set.
    pub sets: Vec<Vec<f64>>,
    /// Probability that a degenerate state claims 2 or 3 bands from this one on, per band and
    /// state.
    pub splits: Vec<Vec<[f64; 2]>>,
    /// Probability that a band shows no hole state.
    pub foreign: Vec<f64>,
    /// Shift at [`Posterior::lever_ev`], on top of the class's own, eV.
    pub shift_ev: f64,
    /// Its standard deviation, eV.
    pub shift_sd_ev: f64,
    /// Slope on top of the class's own.
    pub slope: f64,
    /// Lever at which shift and slope are independent a posteriori, nearly, eV.
    pub lever_ev: f64,
    /// Logarithm of area per unit of strength.
    pub ln_strength: f64,
}

/// Points of the grid below this share of the best are left out of the integral and the shares.
const NEGLIGIBLE: f64 = 1e-9;

/// Weights at one point of the grid.
pub(super) struct Weights<'a> {
    comparison: &'a Comparison<'a>,
    positions: &'a Positions,
    areas: &'a Areas,
    /// Per band and set.
    sets: Vec<Vec<f64>>,
}

impl<'a> Weights<'a> {
    pub(super) fn new(
        comparison: &'a Comparison<'a>,
        positions: &'a Positions,
        areas: &'a Areas,
    ) -> Self {
        let classes = &comparison.class_of_set;
        let sets = (positions.sets.iter().zip(&areas.sets))
            .map(|(place, area)| {
                place
                    .iter()
                    .zip(classes)
                    .map(|(p, c)| p * area[*c])
                    .collect()
            })
            .collect();
        Weights {
            comparison,
            positions,
            areas,
            sets,
        }
    }

    fn split(&self, band: usize, state: usize) -> [f64; 2] {
        let (p, a) = (
            self.positions.splits[band][state],
            self.areas.splits[band][state],
        );
        [p[0] * a[0], p[1] * a[1]]
    }
}

/// Sums over all ways to reach each place, per band: on arrival and after travelling.
struct Sweep {
    arrival: Vec<Vec<f64>>,
    travelled: Vec<Vec<f64>>,
}

fn forward(chart: &Chart, weights: &Weights) -> Sweep {
    let bands = weights.comparison.data.len();
    let mut arrival = vec![vec![0.0; chart.places]; bands + 1];
    let mut travelled = Vec::with_capacity(bands);
    arrival[0][0] = 1.0;
    let missing = &weights.positions.missing;
    for band in 0..bands {
        let mut on_way = arrival[band].clone();
        for pass in &chart.passes {
            on_way[pass.to] += on_way[pass.from] * pass.missing.map_or(1.0, |s| missing[s]);
        }
        let (here, later) = arrival.split_at_mut(band + 1);
        let here = &here[band];
        let sets = &weights.sets[band];
        for (place, sum) in here.iter().enumerate() {
            later[0][place] += sum * weights.comparison.data[band].foreign;
        }
        for take in &chart.late_takes {
            later[0][take.to] += here[take.from] * sets[take.set];
        }
        for take in &chart.takes {
            later[0][take.to] +=
                on_way[take.from] * sets[take.set] * weights.positions.gaps[take.gap];
        }
        for split in &chart.splits {
            let w = weights.split(band, split.state);
            for parts in 2..=3 {
                if w[parts - 2] > 0.0 {
                    later[parts - 1][split.to] += on_way[split.from] * w[parts - 2];
                }
            }
        }
        travelled.push(on_way);
    }
    Sweep { arrival, travelled }
}

/// Weight of ending at each place: all states not passed are missing.
fn ending(chart: &Chart, weights: &Weights) -> Vec<f64> {
    let mut end = vec![0.0; chart.places];
    for &(place, passed) in &chart.ends {
        end[place] = weights.positions.missing[passed..].iter().product();
    }
    end
}

/// Sum over all assignments at one point of the grid.
pub(super) fn total(chart: &Chart, weights: &Weights) -> f64 {
    let sweep = forward(chart, weights);
    let last = &sweep.arrival[weights.comparison.data.len()];
    last.iter()
        .zip(ending(chart, weights))
        .map(|(sum, end)| sum * end)
        .sum()
}

/// Adds the share of every pair at one point of the grid, `weight` being the point's own.
fn collect(chart: &Chart, weights: &Weights, weight: f64, shares: &mut Shares) {
    let bands = weights.comparison.data.len();
    let sweep = forward(chart, weights);
    let mut later = vec![ending(chart, weights)];
    later.resize(bands + 1, Vec::new());
    later.reverse();
    let missing = &weights.positions.missing;
    for band in (0..bands).rev() {
        let mut on_way = vec![0.0; chart.places];
        let next = &later[band + 1];
        let data = &weights.comparison.data[band];
        let sets = &weights.sets[band];
        let mut here: Vec<f64> = next.iter().map(|sum| sum * data.foreign).collect();
        let arrived = &sweep.arrival[band];
        shares.foreign[band] += weight * arrived.iter().zip(&here).map(|(a, b)| a * b).sum::<f64>();
        for take in &chart.late_takes {
            let tail = sets[take.set] * next[take.to];
            here[take.from] += tail;
            shares.sets[band][take.set] += weight * arrived[take.from] * tail;
        }
        for take in &chart.takes {
            let gap = weights.positions.gaps[take.gap];
            let tail = sets[take.set] * gap * next[take.to];
            on_way[take.from] += tail;
            shares.sets[band][take.set] += weight * sweep.travelled[band][take.from] * tail;
        }
        for split in &chart.splits {
            let w = weights.split(band, split.state);
            for parts in 2..=3 {
                if w[parts - 2] > 0.0 {
                    let tail = w[parts - 2] * later[band + parts][split.to];
                    on_way[split.from] += tail;
                    shares.splits[band][split.state][parts - 2] +=
                        weight * sweep.travelled[band][split.from] * tail;
                }
            }
        }
        for pass in chart.passes.iter().rev() {
            on_way[pass.from] += on_way[pass.to] * pass.missing.map_or(1.0, |s| missing[s]);
        }
        here.iter_mut().zip(&on_way).for_each(|(a, b)| *a += b);
        later[band] = here;
    }
}

/// Unnormalised probabilities.
#[derive(Clone)]
struct Shares {
    sets: Vec<Vec<f64>>,
    splits: Vec<Vec<[f64; 2]>>,
    foreign: Vec<f64>,
}

impl Shares {
    fn new(comparison: &Comparison) -> Self {
        let bands = comparison.data.len();
        Shares {
            sets: vec![vec![0.0; comparison.chart.sets.len()]; bands],
            splits: vec![vec![[0.0; 2]; comparison.prior.states.len()]; bands],
            foreign: vec![0.0; bands],
        }
    }

    fn add(&mut self, other: &Shares) {
        for (mine, theirs) in self
            .sets
            .iter_mut()
            .flatten()
            .zip(other.sets.iter().flatten())
        {
            *mine += theirs;
        }
        for (mine, theirs) in self
            .splits
            .iter_mut()
            .flatten()
            .zip(other.splits.iter().flatten())
        {
            mine[0] += theirs[0];
            mine[1] += theirs[1];
        }
        for (mine, theirs) in self.foreign.iter_mut().zip(&other.foreign) {
            *mine += theirs;
        }
    }

    fn scale(&mut self, factor: f64) {
        self.sets.iter_mut().flatten().for_each(|x| *x *= factor);
        self.splits
            .iter_mut()
            .flatten()
            .flatten()
            .for_each(|x| *x *= factor);
        self.foreign.iter_mut().for_each(|x| *x *= factor);
    }
}

/// Integrates over the grid.
pub(super) fn solve(comparison: &Comparison, grid: &Grid) -> Result<Posterior, AssignError> {
    let chart = comparison.chart;
    let areas: Vec<Areas> = grid
        .strengths
        .iter()
        .map(|(ln_strength, _)| comparison.areas(*ln_strength))
        .collect();
    // A probe at three strengths shows where shift and slope are out of the question.
    let middle = areas.len() / 2;
    let probes = [middle / 2, middle, middle + middle / 2];
    let probed: Vec<f64> = (grid.common.par_iter())
        .map(|(shift, slope, weight)| {
            let positions = comparison.positions(*shift, *slope);
            let at = |n: &usize| total(chart, &Weights::new(comparison, &positions, &areas[*n]));
            weight * probes.iter().map(at).fold(0.0, f64::max)
        })
        .collect();
    let threshold = NEGLIGIBLE * probed.iter().copied().fold(0.0, f64::max);
    // First sweep: the integrand everywhere else.
    let sums: Vec<Vec<f64>> = (grid.common.par_iter().zip(&probed))
        .map(|((shift, slope, weight), probe)| {
            if *probe < threshold {
                return vec![0.0; areas.len()];
            }
            let positions = comparison.positions(*shift, *slope);
            (areas.iter().zip(&grid.strengths))
                .map(|(areas, (_, strength_weight))| {
                    let weights = Weights::new(comparison, &positions, areas);
                    weight * strength_weight * total(chart, &weights)
                })
                .collect()
        })
        .collect();
    let evidence: f64 = sums.iter().flatten().sum();
    let best = sums.iter().flatten().copied().fold(0.0, f64::max);
    if !(evidence.is_finite() && evidence > 0.0) {
        return Err(AssignError::Numerical { evidence });
    }
    // Second sweep: shares of the pairs, where it matters.
    let parts: Vec<Option<Shares>> = (grid.common.par_iter().zip(&sums))
        .map(|((shift, slope, weight), row)| {
            if row.iter().all(|x| *x < NEGLIGIBLE * best) {
                return None;
            }
            let positions = comparison.positions(*shift, *slope);
            let mut shares = Shares::new(comparison);
            for (number, (_, strength_weight)) in grid.strengths.iter().enumerate() {
                if row[number] >= NEGLIGIBLE * best {
                    let weights = Weights::new(comparison, &positions, &areas[number]);
                    collect(chart, &weights, weight * strength_weight, &mut shares);
                }
            }
            Some(shares)
        })
        .collect();
    let mut shares = Shares::new(comparison);
    parts.iter().flatten().for_each(|part| shares.add(part));
    let kept: f64 = sums
        .iter()
        .flatten()
        .filter(|x| **x >= NEGLIGIBLE * best)
        .sum();
    shares.scale(1.0 / kept);

    let lever = grid.lever_ev;
    let mean = |f: &dyn Fn(usize, usize) -> f64| {
        let mut sum = 0.0;
        for (i, row) in sums.iter().enumerate() {
            for (j, x) in row.iter().enumerate() {
                sum += x * f(i, j);
            }
        }
        sum / evidence
    };
    let at_lever = |i: usize| grid.common[i].0 + grid.common[i].1 * lever;
    let shift_ev = mean(&|i, _| at_lever(i));
    Ok(Posterior {
        evidence,
        shift_ev,
        shift_sd_ev: mean(&|i, _| (at_lever(i) - shift_ev).powi(2)).sqrt(),
        slope: mean(&|i, _| grid.common[i].1),
        lever_ev: lever,
        ln_strength: mean(&|_, j| grid.strengths[j].0),
        sets: shares.sets,
        splits: shares.splits,
        foreign: shares.foreign,
    })
}

impl Posterior {
    /// Before anything was summed.
    pub(super) fn none() -> Self {
        Posterior {
            evidence: 0.0,
            sets: Vec::new(),
            splits: Vec::new(),
            foreign: Vec::new(),
            shift_ev: 0.0,
            shift_sd_ev: 0.0,
            slope: 0.0,
            lever_ev: 0.0,
            ln_strength: 0.0,
        }
    }

    /// Expected energy of every state, eV.
    pub(super) fn expected(&self, comparison: &Comparison) -> Vec<f64> {
        (comparison.prior.states.iter())
            .map(|s| s.expected_ev + self.shift_ev + self.slope * (s.lever_ev - self.lever_ev))
            .collect()
    }

    /// Probability that `band` is one of several that show `state`.
    pub(super) fn split_share(&self, band: usize, state: usize) -> f64 {
        let run = |first: usize, parts: usize| self.splits[first][state][parts - 2];
        let mut sum = run(band, 2) + run(band, 3);
        if band >= 1 {
            sum += run(band - 1, 2) + run(band - 1, 3);
        }
        if band >= 2 {
            sum += run(band - 2, 3);
        }
        sum
    }

    /// Probability that `state` shows in no band.
    pub(super) fn missing(&self, chart: &Chart, state: usize) -> f64 {
        let mut seen = 0.0;
        for band in 0..self.foreign.len() {
            for (set, share) in chart.sets.iter().zip(&self.sets[band]) {
                if set.contains(&state) {
                    seen += share;
                }
            }
            seen += self.splits[band][state].iter().sum::<f64>();
        }
        (1.0 - seen).max(0.0)
    }
}

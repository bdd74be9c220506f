//! Picks one assignment to show: the one that expects to have the most bands right.
//!
//! The sum of the bands' probabilities is maximised over whole assignments, so no state is given
//! away twice, and each band's own probability stays what it is.

use super::chart::Chart;
use super::likelihood::Comparison;
use super::posterior::Posterior;

/// How a place was reached.
#[derive(Clone, Copy)]
enum Step {
    Foreign,
    LateTake(usize),
    Take(usize),
    /// Number of the split and of its bands.
    Split(usize, usize),
}

/// Hole states of each band, empty for a foreign one.
pub(super) fn best_sets(comparison: &Comparison, posterior: &Posterior) -> Vec<Vec<usize>> {
    let chart = comparison.chart;
    let bands = comparison.data.len();
    let low = f64::NEG_INFINITY;
    let mut score = vec![vec![low; chart.places]; bands + 1];
    let mut how: Vec<Vec<Option<Step>>> = vec![vec![None; chart.places]; bands + 1];
    let mut routes = Vec::with_capacity(bands);
    score[0][0] = 0.0;
    for band in 0..bands {
        let here = score[band].clone();
        let mut on_way = here.clone();
        let mut route: Vec<Option<usize>> = vec![None; chart.places];
        for (number, pass) in chart.passes.iter().enumerate() {
            if on_way[pass.from] > on_way[pass.to] {
                on_way[pass.to] = on_way[pass.from];
                route[pass.to] = Some(number);
            }
        }
        let mut offer = |layer: usize, place: usize, value: f64, step: Step| {
            if value > score[layer][place] {
                score[layer][place] = value;
                how[layer][place] = Some(step);
            }
        };
        for (place, value) in here.iter().enumerate() {
            offer(
                band + 1,
                place,
                value + posterior.foreign[band],
                Step::Foreign,
            );
        }
        for (number, take) in chart.late_takes.iter().enumerate() {
            let gain = share(comparison, posterior, band, take.set);
            offer(
                band + 1,
                take.to,
                here[take.from] + gain,
                Step::LateTake(number),
            );
        }
        for (number, take) in chart.takes.iter().enumerate() {
            let gain = share(comparison, posterior, band, take.set);
            offer(
                band + 1,
                take.to,
                on_way[take.from] + gain,
                Step::Take(number),
            );
        }
        for (number, split) in chart.splits.iter().enumerate() {
            for parts in 2..=3 {
                if posterior.splits[band][split.state][parts - 2] > 0.0 {
                    let alone = chart.sets.binary_search(&vec![split.state]).unwrap_or(0);
                    let gain: f64 = (band..band + parts)
                        .map(|b| share(comparison, posterior, b, alone))
                        .sum();
                    let value = on_way[split.from] + gain;
                    offer(band + parts, split.to, value, Step::Split(number, parts));
                }
            }
        }
        routes.push(route);
    }
    trace_back(chart, &score[bands], &how, &routes)
}

fn trace_back(
    chart: &Chart,
    last: &[f64],
    how: &[Vec<Option<Step>>],
    routes: &[Vec<Option<usize>>],
) -> Vec<Vec<usize>> {
    let bands = routes.len();
    let mut result = vec![Vec::new(); bands];
    let end = (chart.ends.iter().map(|e| e.0))
        .max_by(|a, b| last[*a].total_cmp(&last[*b]).then(b.cmp(a)));
    let Some(mut place) = end else { return result };
    let mut layer = bands;
    while layer > 0 {
        let Some(step) = how[layer][place] else { break };
        let (band, travelled) = match step {
            Step::Foreign => (layer - 1, None),
            Step::LateTake(number) => {
                result[layer - 1] = chart.sets[chart.late_takes[number].set].clone();
                place = chart.late_takes[number].from;
                (layer - 1, None)
            }
            Step::Take(number) => {
                result[layer - 1] = chart.sets[chart.takes[number].set].clone();
                (layer - 1, Some(chart.takes[number].from))
            }
            Step::Split(number, parts) => {
                let split = &chart.splits[number];
                result[layer - parts..layer].fill(vec![split.state]);
                (layer - parts, Some(split.from))
            }
        };
        if let Some(mut at) = travelled {
            while let Some(number) = routes[band][at] {
                at = chart.passes[number].from;
            }
            place = at;
        }
        layer = band;
    }
    result
}

/// Probability that `band` shows exactly `set`, a split state counting for each of its bands.
pub(super) fn share(
    comparison: &Comparison,
    posterior: &Posterior,
    band: usize,
    set: usize,
) -> f64 {
    let chart = comparison.chart;
    let mut sum = posterior.sets[band][set];
    if let [state] = chart.sets[set].as_slice() {
        sum += posterior.split_share(band, *state);
    }
    sum
}

//! Whether a probability of p is right with frequency p, on spectra drawn from the model itself:
//! unknown shift, slope and strength, scatter, missing and merging states, splittings, gases and
//! unknown bands. What the model leaves out on purpose (limits on disorder, see
//! [`super::chart`]) the draws contain, so this tests those limits too.

use super::chart::Chart;
use super::decode;
use super::foreign::Surroundings;
use super::likelihood::Comparison;
use super::prior::{
    AREA_LN_RANGE, AREA_LN_SD, Look, Prior, SEEN, SHARING_WIDTH, SPLIT, SPLIT_MEAN_EV, WILD_FACTOR,
    WILD_SHARE, look_odds, shared_look_odds,
};
use super::reading::Reading;
use super::sample::{band, conditions, grouping, levels, state};
use crate::fit::Band;
use crate::levels::{HoleState, Verdict};
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Exp, Poisson, StandardNormal};

const LOOKS: [Look; 4] = [Look::Line, Look::Sharp, Look::Medium, Look::Broad];
/// Full width at half maximum that each look is drawn with, eV.
const WIDTHS_EV: [f64; 4] = [0.05, 0.2, 0.45, 0.8];

struct Draw {
    prior: Prior,
    /// Bands with the states that they truly show.
    bands: Vec<(Band, Vec<usize>)>,
}

fn normal(rng: &mut ChaCha8Rng) -> f64 {
    StandardNormal.sample(rng)
}

/// A look from four odds that sum to four.
fn pick_look(rng: &mut ChaCha8Rng, odds: impl Fn(Look) -> f64) -> usize {
    let mut rest = rng.random_range(0.0..4.0);
    for (n, look) in LOOKS.into_iter().enumerate() {
        rest -= odds(look);
        if rest < 0.0 {
            return n;
        }
    }
    3
}

fn draw(rng: &mut ChaCha8Rng) -> Draw {
    let verdicts = [
        Verdict::LonePair,
        Verdict::Bonding,
        Verdict::Mixed,
        Verdict::Nonbonding,
    ];
    let mut energy = rng.random_range(9.5..11.5);
    let hole_states: Vec<HoleState> = (0..rng.random_range(3..7))
        .map(|n| {
            energy += rng.random_range(0.1..2.6);
            let degeneracy = if rng.random_bool(0.15) { 2 } else { 1 };
            state(
                &format!("s{n}"),
                energy,
                degeneracy,
                verdicts[rng.random_range(0..4)],
            )
        })
        .collect();
    let prior = Prior::new(&levels(hole_states), &conditions()).unwrap();
    let [low, high] = prior.visible_ev;
    let shift = prior.shift_sd_ev * normal(rng);
    let slope = prior.slope_sd * normal(rng);
    let ln_strength = 1000.0_f64.ln();
    // Single states and their bands: position, area, look.
    let mut single: Vec<(f64, f64, usize, Vec<usize>)> = Vec::new();
    let mut split: Vec<(f64, f64, usize, Vec<usize>)> = Vec::new();
    for (number, state) in prior.states.iter().enumerate() {
        let wide = if rng.random_bool(WILD_SHARE) {
            WILD_FACTOR
        } else {
            1.0
        };
        let place = state.expected_ev
            + shift
            + slope * state.lever_ev
            + wide * state.scatter_ev * normal(rng);
        if !(low..high).contains(&place) || !rng.random_bool(SEEN) {
            continue;
        }
        let verdict = state.character.verdict;
        let ln_area =
            |rng: &mut ChaCha8Rng, part: f64| ln_strength + part.ln() + AREA_LN_SD * normal(rng);
        if state.degeneracy == 2 && rng.random_bool(SPLIT) {
            let gap = Exp::new(1.0 / SPLIT_MEAN_EV).unwrap().sample(rng);
            for side in [-0.5, 0.5] {
                let look = pick_look(rng, |l| look_odds(verdict, l));
                split.push((
                    place + side * gap,
                    ln_area(rng, 1.0).exp(),
                    look,
                    vec![number],
                ));
            }
        } else {
            let look = pick_look(rng, |l| look_odds(verdict, l));
            let area = ln_area(rng, state.strength).exp();
            single.push((place, area, look, vec![number]));
        }
    }
    single.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut made: Vec<(f64, f64, usize, Vec<usize>)> = Vec::new();
    for next in single {
        let look = pick_look(rng, shared_look_odds);
        let reach = SHARING_WIDTH * WIDTHS_EV[look];
        let gap = made.last().map_or(f64::INFINITY, |last| next.0 - last.0);
        if rng.random_bool((-gap * gap / (4.0 * reach * reach)).exp().min(1.0)) {
            let last = made.last_mut().unwrap();
            let n = last.3.len() as f64;
            last.0 = (n * last.0 + next.0) / (n + 1.0);
            last.1 += next.1;
            last.2 = look;
            last.3.extend(next.3);
            last.3.sort_unstable();
        } else {
            made.push(next);
        }
    }
    made.extend(split);
    let any_area =
        |rng: &mut ChaCha8Rng| (ln_strength + 2.0 - AREA_LN_RANGE * rng.random::<f64>()).exp();
    let unknown = Poisson::new(prior.unknown_bands()).unwrap().sample(rng) as usize;
    for _ in 0..unknown {
        let place = rng.random_range(low..high);
        made.push((place, any_area(rng), rng.random_range(0..4), Vec::new()));
    }
    for (place, area) in gases(rng) {
        if (low..high).contains(&place) {
            made.push((place, area, 0, Vec::new()));
        }
    }
    made.sort_by(|a, b| a.0.total_cmp(&b.0));
    let bands = (made.into_iter().enumerate())
        .map(|(n, (place, area, look, truth))| (band(n + 1, place, area, WIDTHS_EV[look]), truth))
        .collect();
    Draw { prior, bands }
}

/// Lines of at most one gas: position and area.
fn gases(rng: &mut ChaCha8Rng) -> Vec<(f64, f64)> {
    let lines: [(f64, &[(f64, f64)]); 3] = [
        (0.10, &[(15.5808, 1.0), (16.9306, 0.47), (18.7507, 0.26)]),
        (0.10, &[(12.6188, 1.0)]),
        (0.03, &[(15.7596, 1.0), (15.9371, 0.5)]),
    ];
    let offset = conditions().scale_offset_sd_ev * normal(rng);
    for (presence, lines) in lines {
        if rng.random_bool(presence) {
            let whole = (1000.0_f64.ln() + 2.0 - 6.0 * rng.random::<f64>()).exp();
            return (lines.iter())
                .filter(|(_, share)| rng.random_bool(0.7 * share))
                .map(|(place, share)| (place + offset, whole * share))
                .collect();
        }
    }
    Vec::new()
}

#[test]
fn probabilities_are_frequencies() {
    let mut rng = ChaCha8Rng::seed_from_u64(20);
    let edges = [0.0, 0.5, 0.7, 0.85, 0.95, 0.99, 1.0 + 1e-9];
    let mut bins = vec![(0usize, 0.0, 0.0); edges.len() - 1];
    for _ in 0..1000 {
        let draw = draw(&mut rng);
        let made = grouping(draw.bands.iter().map(|(band, _)| band.clone()).collect());
        let chart = Chart::new(&draw.prior);
        let mut quiet = conditions();
        quiet.photon_energy_ev = None;
        let surroundings = Surroundings::new("CX", &quiet).unwrap();
        let reading = Reading::new(&made, &draw.prior, &chart, &surroundings).unwrap();
        let comparison = Comparison::new(&draw.prior, &chart, &reading.data);
        let best = decode::best_sets(&comparison, &reading.posterior);
        for (at, (_, truth)) in draw.bands.iter().enumerate() {
            let p = match best[at].as_slice() {
                [] => reading.posterior.foreign[at],
                set => {
                    let number = chart.sets.binary_search(&set.to_vec()).unwrap();
                    decode::share(&comparison, &reading.posterior, at, number)
                }
            };
            let bin = edges.iter().rposition(|edge| p >= *edge).unwrap();
            bins[bin].0 += 1;
            bins[bin].1 += p;
            bins[bin].2 += f64::from(u8::from(best[at] == *truth));
        }
    }
    let (mut all, mut promised, mut kept) = (0, 0.0, 0.0);
    for (n, (count, sum, right)) in bins.iter().enumerate() {
        let size = (*count).max(1) as f64;
        let (mean, frequency) = (sum / size, right / size);
        println!(
            "{:.2}..{:.2}: {count} bands, promised {mean:.3}, right {frequency:.3}",
            edges[n],
            edges[n + 1]
        );
        all += count;
        promised += sum;
        kept += right;
        let noise = (mean * (1.0 - mean) / size).sqrt();
        assert!(
            (mean - frequency).abs() < 0.04 + 2.5 * noise,
            "bin {n}: {mean} {frequency}"
        );
    }
    let total = all as f64;
    println!(
        "all {all}: promised {:.3}, right {:.3}",
        promised / total,
        kept / total
    );
    // Measured 0.02 too much promised: bands that stand closer than they could be told apart are
    // not made less likely by the model (docs/assignment.md).
    assert!(((promised - kept) / total).abs() < 0.03);
}

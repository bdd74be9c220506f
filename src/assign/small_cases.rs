//! The sums of [`super::posterior`] against plain enumeration, and properties of the outcome.

use super::assign;
use super::chart::{Chart, LARGEST_SET, WAITING, allowed_gaps, may_share, may_wait};
use super::grid::Grid;
use super::likelihood::{Comparison, Datum, instrument_width_ev};
use super::posterior::{Weights, solve, total};
use super::prior::Prior;
use super::sample::{band, conditions, grouping, levels, state};
use crate::fit::Band;
use crate::levels::{HoleState, Verdict};

/// What one band shows in an assignment written out.
#[derive(Clone, Debug, PartialEq)]
enum Shows {
    Nothing,
    Set(Vec<usize>),
    /// First band of a degenerate state's run, and the number of bands.
    Run(usize, usize),
    /// Later band of a run.
    Inside,
}

/// All assignments that the rules of the chart allow, written down without the chart.
fn enumerate(prior: &Prior, bands: usize) -> Vec<Vec<Shows>> {
    let mut all = Vec::new();
    extend(prior, bands, &mut Vec::new(), 0, &mut all);
    all.retain(|assignment| lawful(prior, assignment));
    all
}

fn extend(
    prior: &Prior,
    bands: usize,
    so_far: &mut Vec<Shows>,
    used: u32,
    all: &mut Vec<Vec<Shows>>,
) {
    if so_far.len() == bands {
        all.push(so_far.clone());
        return;
    }
    let n = prior.states.len();
    so_far.push(Shows::Nothing);
    extend(prior, bands, so_far, used, all);
    so_far.pop();
    for pick in 1u32..1 << n {
        if pick & used == 0 {
            let set: Vec<usize> = (0..n).filter(|s| pick >> s & 1 == 1).collect();
            let span = set[set.len() - 1] - set[0] + 1;
            let near = set
                .windows(2)
                .all(|pair| may_share(prior, pair[0], pair[1]));
            if near && set.len() <= LARGEST_SET && span - set.len() <= allowed_gaps(set.len()) {
                so_far.push(Shows::Set(set));
                extend(prior, bands, so_far, used | pick, all);
                so_far.pop();
            }
        }
    }
    for state in 0..n {
        for parts in 2..=prior.states[state].degeneracy.min(3) {
            if used >> state & 1 == 0 && so_far.len() + parts <= bands {
                let before = so_far.len();
                so_far.push(Shows::Run(state, parts));
                so_far.resize(before + parts, Shows::Inside);
                extend(prior, bands, so_far, used | 1 << state, all);
                so_far.truncate(before);
            }
        }
    }
}

/// Order may be broken only between neighbours, and by few at a time; a split state is never
/// taken late.
fn lawful(prior: &Prior, assignment: &[Shows]) -> bool {
    let mut taken: Vec<usize> = Vec::new();
    for (band, shows) in assignment.iter().enumerate() {
        let now: Vec<usize> = match shows {
            Shows::Nothing | Shows::Inside => continue,
            Shows::Set(set) => set.clone(),
            Shows::Run(state, _) => vec![*state],
        };
        if let Shows::Run(state, _) = shows
            && taken.iter().any(|t| t > state)
        {
            return false;
        }
        taken.extend(now);
        let highest = taken.iter().copied().max().unwrap_or(0);
        let waiting: Vec<usize> = (assignment[band + 1..].iter())
            .flat_map(|later| match later {
                Shows::Set(set) => set.clone(),
                Shows::Run(state, _) => vec![*state],
                _ => Vec::new(),
            })
            .filter(|s| *s < highest)
            .collect();
        if waiting.len() > WAITING || waiting.iter().any(|&s| !may_wait(prior, s, highest)) {
            return false;
        }
    }
    true
}

fn case(states: &[(f64, usize, Verdict)], bands: &[(f64, f64, f64)]) -> (Prior, Vec<Datum>) {
    let hole_states: Vec<HoleState> = (states.iter().enumerate())
        .map(|(n, (energy, degeneracy, verdict))| {
            state(&format!("s{n}"), *energy, *degeneracy, *verdict)
        })
        .collect();
    let prior = Prior::new(&levels(hole_states), &conditions()).unwrap();
    let made: Vec<Band> = (bands.iter().enumerate())
        .map(|(n, (vertical, area, fwhm))| band(n + 1, *vertical, *area, *fwhm))
        .collect();
    let instrument = instrument_width_ev(&made);
    let data = made
        .iter()
        .map(|b| Datum::new(b, instrument, 0.23))
        .collect();
    (prior, data)
}

fn small_cases() -> Vec<(Prior, Vec<Datum>)> {
    use Verdict::{Bonding, LonePair, Mixed};
    vec![
        case(&[(10.5, 1, LonePair)], &[(10.4, 900.0, 0.05)]),
        case(
            &[(10.5, 1, LonePair), (13.7, 1, Mixed), (14.2, 1, Bonding)],
            &[(10.4, 900.0, 0.05), (13.3, 1500.0, 0.6)],
        ),
        case(
            &[
                (11.0, 1, LonePair),
                (12.0, 2, Bonding),
                (12.4, 1, Mixed),
                (13.0, 1, Bonding),
            ],
            &[(10.4, 900.0, 0.05), (11.3, 1500.0, 0.3), (11.8, 800.0, 0.4)],
        ),
        case(
            &[
                (12.0, 3, Bonding),
                (12.2, 1, Mixed),
                (13.1, 1, Mixed),
                (13.3, 1, Bonding),
                (13.5, 2, Bonding),
            ],
            &[
                (10.4, 900.0, 0.5),
                (11.3, 1500.0, 0.3),
                (11.8, 800.0, 0.4),
                (12.5, 300.0, 0.1),
            ],
        ),
        case(
            &[
                (12.0, 1, Bonding),
                (12.1, 1, Mixed),
                (12.2, 1, Mixed),
                (12.3, 1, Bonding),
                (15.5, 1, Mixed),
                (16.0, 1, LonePair),
            ],
            &[(10.9, 900.0, 0.5), (11.3, 1500.0, 0.3), (14.0, 800.0, 0.4)],
        ),
    ]
}

#[test]
fn sums_equal_plain_enumeration() {
    for (number, (prior, data)) in small_cases().iter().enumerate() {
        let chart = Chart::new(prior);
        let comparison = Comparison::new(prior, &chart, data);
        let assignments = enumerate(prior, data.len());
        let usual = comparison.usual_ln_strength();
        for (shift, slope, strength) in [(0.0, 0.0, 0.0), (0.35, -0.04, 0.8), (-0.6, 0.06, -0.5)] {
            let positions = comparison.positions(shift, slope);
            let areas = comparison.areas(usual + strength);
            let plain: f64 = (assignments.iter())
                .map(|a| plain_weight(prior, &comparison, &positions, &areas, a))
                .sum();
            let weights = Weights::new(&comparison, &positions, &areas);
            let swept = total(&chart, &weights);
            assert!(
                (swept / plain - 1.0).abs() < 1e-10,
                "case {number}: {swept} by sweep, {plain} by enumeration of {}",
                assignments.len()
            );
        }
    }
}

#[test]
fn probabilities_equal_plain_enumeration() {
    for (number, (prior, data)) in small_cases().iter().enumerate() {
        let chart = Chart::new(prior);
        let comparison = Comparison::new(prior, &chart, data);
        let full = Grid::new(&comparison, 1.0);
        let assignments = enumerate(prior, data.len());
        // Point by point, then a coarse grid of several: both sides use the same points.
        let common: Vec<_> = full.common.iter().copied().skip(9).step_by(23).collect();
        let strengths: Vec<_> = full.strengths.iter().copied().step_by(5).collect();
        let mut grids: Vec<(Grid, f64)> = (common.iter().zip(&strengths))
            .map(|(point, strength)| {
                let grid = Grid {
                    common: vec![*point],
                    strengths: vec![*strength],
                    lever_ev: full.lever_ev,
                };
                (grid, 1e-10)
            })
            .collect();
        // Points of negligible weight are left out of the integral: about 1e-9 each at most.
        grids.push((
            Grid {
                common,
                strengths,
                lever_ev: full.lever_ev,
            },
            1e-7,
        ));
        for (grid, tolerance) in &grids {
            compare(number, &comparison, &assignments, grid, *tolerance);
        }
    }
}

fn compare(
    number: usize,
    comparison: &Comparison,
    assignments: &[Vec<Shows>],
    grid: &Grid,
    tolerance: f64,
) {
    let (prior, chart, bands) = (comparison.prior, comparison.chart, comparison.data.len());
    let posterior = solve(comparison, grid).unwrap();
    let mut plain_sets = vec![vec![0.0; chart.sets.len()]; bands];
    let mut plain_foreign = vec![0.0; bands];
    let mut plain_runs = vec![0.0; prior.states.len()];
    let mut all = 0.0;
    for &(shift, slope, w) in &grid.common {
        let positions = comparison.positions(shift, slope);
        for &(ln_strength, v) in &grid.strengths {
            let areas = comparison.areas(ln_strength);
            for a in assignments {
                let weight = w * v * plain_weight(prior, comparison, &positions, &areas, a);
                all += weight;
                for (b, shows) in a.iter().enumerate() {
                    match shows {
                        Shows::Nothing => plain_foreign[b] += weight,
                        Shows::Set(set) => {
                            plain_sets[b][chart.sets.binary_search(set).unwrap()] += weight;
                        }
                        Shows::Run(state, _) => plain_runs[*state] += weight,
                        Shows::Inside => {}
                    }
                }
            }
        }
    }
    assert!(
        (posterior.evidence / all - 1.0).abs() < tolerance,
        "case {number}"
    );
    for b in 0..bands {
        let foreign = plain_foreign[b] / all;
        assert!(
            (posterior.foreign[b] - foreign).abs() < tolerance,
            "case {number}, band {b}"
        );
        for (set, plain) in plain_sets[b].iter().enumerate() {
            assert!(
                (posterior.sets[b][set] - plain / all).abs() < tolerance,
                "case {number}"
            );
        }
    }
    for (state, plain) in plain_runs.iter().enumerate() {
        let runs: f64 = posterior.splits.iter().flat_map(|row| row[state]).sum();
        assert!(
            (runs - plain / all).abs() < tolerance,
            "case {number}, state {state}"
        );
    }
}

fn plain_weight(
    prior: &Prior,
    comparison: &Comparison,
    positions: &super::likelihood::Positions,
    areas: &super::likelihood::Areas,
    assignment: &[Shows],
) -> f64 {
    let mut weight = 1.0;
    let mut seen = vec![false; prior.states.len()];
    for (band, shows) in assignment.iter().enumerate() {
        match shows {
            Shows::Nothing => weight *= comparison.data[band].foreign,
            Shows::Set(set) => {
                let number = comparison.chart.sets.binary_search(set).unwrap();
                weight *= positions.sets[band][number]
                    * areas.sets[band][comparison.class_of_set[number]];
                set.iter().for_each(|&s| seen[s] = true);
            }
            Shows::Run(state, parts) => {
                weight *= positions.splits[band][*state][parts - 2]
                    * areas.splits[band][*state][parts - 2];
                seen[*state] = true;
            }
            Shows::Inside => {}
        }
    }
    (seen.iter().zip(&positions.missing))
        .filter(|(seen, _)| !**seen)
        .fold(weight, |w, (_, missing)| w * missing)
}

#[test]
fn each_band_has_exactly_one_reading() {
    for (prior, data) in &small_cases() {
        let chart = Chart::new(prior);
        let comparison = Comparison::new(prior, &chart, data);
        let posterior = solve(&comparison, &Grid::new(&comparison, 1.0)).unwrap();
        for b in 0..data.len() {
            let runs: f64 = (0..prior.states.len())
                .map(|s| posterior.split_share(b, s))
                .sum();
            let sum: f64 = posterior.sets[b].iter().sum::<f64>() + posterior.foreign[b] + runs;
            assert!((sum - 1.0).abs() < 1e-9, "{sum}");
        }
    }
}

#[test]
fn the_grid_is_fine_enough() {
    for (prior, data) in &small_cases() {
        let chart = Chart::new(prior);
        let comparison = Comparison::new(prior, &chart, data);
        let usual = solve(&comparison, &Grid::new(&comparison, 1.0)).unwrap();
        let fine = solve(&comparison, &Grid::new(&comparison, 2.0)).unwrap();
        assert!((usual.evidence / fine.evidence - 1.0).abs() < 2e-3);
        for (a, b) in usual.sets.iter().flatten().zip(fine.sets.iter().flatten()) {
            assert!((a - b).abs() < 1e-3, "{a} {b}");
        }
    }
}

fn plain_case() -> (Vec<HoleState>, Vec<Band>) {
    let states = vec![
        state("2b1", 10.44, 1, Verdict::LonePair),
        state("5a1", 13.57, 1, Verdict::Mixed),
        state("2b2", 16.08, 1, Verdict::Bonding),
    ];
    let bands = vec![
        band(1, 10.48, 1000.0, 0.05),
        band(2, 13.4, 1100.0, 0.7),
        band(3, 15.5, 900.0, 0.9),
    ];
    (states, bands)
}

#[test]
fn the_order_of_the_input_does_not_matter() {
    let (mut states, mut bands) = plain_case();
    let first = assign(
        &[grouping(bands.clone())],
        &levels(states.clone()),
        &conditions(),
    )
    .unwrap();
    states.reverse();
    bands.rotate_left(1);
    let second = assign(&[grouping(bands)], &levels(states), &conditions()).unwrap();
    assert_eq!(first, second);
}

#[test]
fn a_common_shift_of_the_level_is_absorbed() {
    let (states, bands) = plain_case();
    let run = |offset: f64| {
        let moved = states.iter().cloned().map(|mut s| {
            s.ionization_energy_ev += offset;
            s
        });
        assign(
            &[grouping(bands.clone())],
            &levels(moved.collect()),
            &conditions(),
        )
        .unwrap()
    };
    let usual = run(0.0);
    for offset in [-0.2, 0.2] {
        let moved = run(offset);
        for (a, b) in usual.matches.iter().zip(&moved.matches) {
            assert_eq!(a.hole_states, b.hole_states);
            assert!((a.probability - b.probability).abs() < 0.05);
        }
    }
}

//! Resolved vibrational progressions of one to five ionizations: are their members grouped right?

use super::synthetic::{Line, fit, progression, trace};
use bandproof::fit::{BandFit, Grouping};
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;

/// Bands of 3 to 11 members with spacings of 0.08 to 0.35 eV at a resolution of 20 to 60 meV, the
/// next origin beyond the last member or among the members.
fn draw(rng: &mut ChaCha8Rng, interleaved: bool) -> Vec<Vec<Line>> {
    let resolution = rng.random_range(0.02..0.06);
    let count = rng.random_range(1..=5);
    let mut bands = Vec::new();
    let mut origin = 9.0;
    for _ in 0..count {
        let spacing = rng.random_range(0.08..0.35f64).max(1.3 * resolution);
        let huang_rhys = rng.random_range(0.3..3.5);
        let area = 10f64.powf(rng.random_range(3.7..4.8));
        let members: Vec<Line> = progression(origin, spacing, huang_rhys, area, resolution)
            .into_iter()
            .filter(|l| l.area > 0.02 * area)
            .take(11)
            .collect();
        let last = members[members.len() - 1].position;
        origin = if interleaved {
            origin + (last - origin) * rng.random_range(0.4..0.9) + 0.05
        } else {
            last + rng.random_range(0.5..1.2)
        };
        bands.push(members);
    }
    bands
}

/// Whether every fitted line is in a band with exactly the lines of the same ionization.
fn is_right(grouping: &Grouping, found: &BandFit, truth: &[Vec<Line>]) -> bool {
    let owner = |peak: usize| {
        let at = found.peaks[peak].position_ev;
        let distance = |members: &Vec<Line>| {
            members
                .iter()
                .map(|l| (l.position - at).abs())
                .fold(f64::INFINITY, f64::min)
        };
        (0..truth.len()).min_by(|&a, &b| distance(&truth[a]).total_cmp(&distance(&truth[b])))
    };
    grouping.bands.len() == truth.len()
        && grouping
            .bands
            .iter()
            .all(|b| b.peaks.iter().all(|&k| owner(k) == owner(b.peaks[0])))
}

/// Draws traces; returns how many have the first reading right, and how many any reading.
fn count_right(seeds: std::ops::Range<u64>, interleaved: bool) -> (usize, usize) {
    let (mut first, mut any) = (0, 0);
    for seed in seeds {
        let mut rng = ChaCha8Rng::seed_from_u64(seed);
        let truth = draw(&mut rng, interleaved);
        let lines: Vec<Line> = truth.iter().flatten().copied().collect();
        let top = 0.8 + lines.iter().map(|l| l.position).fold(0.0, f64::max);
        let channels = ((top - 8.3) / 0.005) as usize;
        let background = |e: f64| 8000.0 + 300.0 * (e - 8.0);
        let found = fit(&trace([8.3, top], channels, &lines, background, &mut rng));
        first += usize::from(is_right(&found.groupings[0], &found, &truth));
        any += usize::from(found.groupings.iter().any(|g| is_right(g, &found, &truth)));
    }
    (first, any)
}

#[test]
fn members_of_separate_progressions_are_grouped() {
    let (first, any) = count_right(77_000..77_040, false);
    println!("apart: {first} of 40 right at first, {any} among the readings");
    assert!(first >= 38, "{first}");
}

#[test]
fn interleaved_progressions_are_partly_told_apart() {
    // Members of different ionizations often coincide here: no reading can then be right in
    // every line.
    let (first, any) = count_right(78_000..78_020, true);
    println!("interleaved: {first} of 20 right at first, {any} among the readings");
    assert!(first >= 6, "{first}");
}

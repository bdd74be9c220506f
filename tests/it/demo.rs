//! The invented studies of `spectra-demo`: that the files are what the generator makes, and that
//! what was planted can be seen at all.

#[path = "../../spectra-demo/model.rs"]
mod model;
#[path = "demo/outcome.rs"]
mod outcome;

use model::Scenario;
use std::path::{Path, PathBuf};

fn folder(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("spectra-demo")
        .join(name)
}

fn text(path: PathBuf) -> String {
    std::fs::read_to_string(&path).unwrap_or_else(|error| panic!("{}: {error}", path.display()))
}

/// Counts of `file`'s rows, in the order of the file.
fn counts(file: &str) -> Vec<u64> {
    let rows = file.lines().filter(|line| !line.starts_with('#')).skip(1);
    rows.map(|row| row.split([',', ';']).next_back().unwrap().parse().unwrap())
        .collect()
}

#[test]
fn committed_traces_are_what_the_generator_writes() {
    for scenario in model::all() {
        let committed = text(folder(scenario.name).join(format!("{}.csv", scenario.name)));
        let made = scenario.file();
        let header = |file: &str| -> Vec<String> {
            let lines = file.lines().take_while(|line| line.starts_with('#'));
            lines.map(str::to_owned).collect()
        };
        assert_eq!(header(&committed), header(&made));
        assert!(committed.starts_with("# INVENTED DATA. Heather Moss air station"));
        let (committed, made) = (counts(&committed), counts(&made));
        assert_eq!(committed.len(), made.len());
        // Another mathematics library may round a mean differently and change that point's draw.
        let changed = committed.iter().zip(&made).filter(|(a, b)| a != b).count();
        assert!(
            changed * 1000 <= made.len(),
            "{}: {changed} points",
            scenario.name
        );
    }
}

#[test]
fn planted_bands_have_their_published_energies() {
    let mut bands = 0;
    for scenario in model::all() {
        for band in &scenario.bands {
            let published = band.published;
            // The published vertical energy is the maximum, the first moment lies a little above.
            let above = band.vertical_ev() - published.vertical_ev;
            assert!(
                (-0.01..0.1).contains(&above),
                "{} {}",
                scenario.name,
                band.state
            );
            if let Some(adiabatic) = published.adiabatic_ev {
                assert_eq!(band.origin_ev, adiabatic);
            }
            let shares: f64 = band.members.iter().map(|m| m.share).sum();
            assert!((shares - 1.0).abs() < 1e-12);
            bands += 1;
        }
    }
    assert_eq!(bands, 3 + 4 + 10);
}

/// Sum over the points of (with − without)²/with: the square of the standard score that a search
/// with the exact shape would give the planted feature.
fn score(with: &Scenario, without: &Scenario, range: [f64; 2]) -> f64 {
    let axis = with.axis_ev();
    let (with, without) = (with.expected(), without.expected());
    (0..axis.len())
        .filter(|k| (range[0]..range[1]).contains(&axis[*k]))
        .map(|k| (with[k] - without[k]).powi(2) / with[k])
        .sum::<f64>()
        .sqrt()
}

/// Standard score of each scenario's planted accident, around the line that carries it.
fn accident(scenario: &Scenario) -> f64 {
    let mut without = scenario.clone();
    without.gases.clear();
    without.lamp.clear();
    let line = match (scenario.gases.first(), scenario.lamp.first()) {
        (Some(gas), _) => gas.bands[0].origin_ev,
        (None, Some(lamp)) => scenario.bands[0].origin_ev - lamp.excess_ev,
        (None, None) => panic!("{} has no accident", scenario.name),
    };
    let line = line + scenario.offset_ev;
    score(scenario, &without, [line - 0.06, line + 0.06])
}

#[test]
fn planted_accidents_stand_out() {
    for scenario in model::all() {
        let published = accident(&scenario);
        let moved: Vec<f64> = (1..=20).map(|n| accident(&scenario.moved(n))).collect();
        let least = moved.iter().copied().fold(f64::INFINITY, f64::min);
        println!(
            "{}: {published:.0} sd, moved: at least {least:.0} sd",
            scenario.name
        );
        assert!(published > 20.0 && least > 8.0, "{}", scenario.name);
    }
}

#[test]
fn counting_noise_is_poisson() {
    for scenario in model::all() {
        let (expected, counts) = (scenario.expected(), scenario.counts());
        // Pearson's χ² has mean n and variance 2n + Σ 1/μ.
        let pairs = expected.iter().zip(&counts);
        let chi2: f64 = pairs.map(|(m, c)| (*c as f64 - m).powi(2) / m).sum();
        let n = expected.len() as f64;
        let variance = 2.0 * n + expected.iter().map(|m| m.recip()).sum::<f64>();
        let score = (chi2 - n) / variance.sqrt();
        assert!(score.abs() < 3.5, "{}: {score}", scenario.name);
        let residuals: Vec<f64> = expected
            .iter()
            .zip(&counts)
            .map(|(m, c)| *c as f64 - m)
            .collect();
        let runs = bandproof::numeric::statistics::runs_test(&residuals).unwrap();
        assert!(runs.score.abs() < 3.5, "{}: {runs:?}", scenario.name);
        let peak = *counts.iter().max().unwrap();
        assert!(
            (5_000..=50_000).contains(&peak),
            "{}: {peak}",
            scenario.name
        );
    }
}

#[test]
fn moved_truth_keeps_to_its_rules() {
    for scenario in model::all() {
        let mut before = scenario.counts();
        for draw in 1..=10 {
            let moved = scenario.moved(draw);
            for (band, published) in moved.bands.iter().zip(&scenario.bands) {
                assert!((band.origin_ev - published.origin_ev).abs() <= 0.3);
                assert!((0.5..=2.0).contains(&(band.area / published.area)));
            }
            for pair in moved.bands.windows(2) {
                assert!(pair[1].vertical_ev() - pair[0].vertical_ev() >= 0.15);
            }
            for (gas, published) in moved.gases.iter().zip(&scenario.gases) {
                let factor = gas.bands[0].area / published.bands[0].area;
                assert!((0.5..=2.0).contains(&factor));
                for (band, published) in gas.bands.iter().zip(&published.bands) {
                    assert_eq!(band.origin_ev, published.origin_ev);
                    assert!((band.area / published.area / factor - 1.0).abs() < 1e-12);
                }
            }
            let counts = moved.counts();
            assert_ne!(counts, before);
            assert_eq!(moved.counts(), counts);
            before = counts;
        }
    }
}

#[test]
fn studies_name_files_that_exist() {
    for scenario in model::all() {
        let study: toml::Table = toml::from_str(&text(folder(scenario.name).join("study.toml")))
            .unwrap_or_else(|error| panic!("{}: {error}", scenario.name));
        for (section, key) in [("molecule", "geometry"), ("trace", "file")] {
            let name = study[section][key].as_str().unwrap();
            assert!(folder(scenario.name).join(name).is_file(), "{name}");
        }
        let trace = &study["trace"];
        assert_eq!(
            trace["photon_energy_ev"].as_float(),
            Some(model::PHOTON_ENERGY_EV)
        );
        let file = text(folder(scenario.name).join(trace["file"].as_str().unwrap()));
        let columns = file.lines().find(|line| !line.starts_with('#')).unwrap();
        for key in ["energy_column", "counts_column"] {
            let name = trace[key].as_str().unwrap();
            assert!(columns.split([',', ';']).any(|column| column == name));
        }
        let resolution = study["fit"]["resolution_ev"].as_float();
        assert_eq!(resolution, Some(scenario.resolution_ev));
    }
}

#[test]
fn dichloroethene_has_its_published_structure() {
    // C=C 1.305, C–Cl 1.740, C–H 1.078 Å, CCCl 119.9°, CCH 125.3° (Craig et al., J. Phys. Chem. A
    // 102, 6745 (1998), abstract).
    let file = text(folder("dichloroethene").join("trans-1,2-dichloroethene.xyz"));
    let atoms: Vec<(String, [f64; 3])> = file
        .lines()
        .skip(2)
        .map(|line| {
            let words: Vec<&str> = line.split_whitespace().collect();
            (
                words[0].to_owned(),
                [1, 2, 3].map(|k| words[k].parse().unwrap()),
            )
        })
        .collect();
    let between = |a: usize, b: usize| [0, 1, 2].map(|k| atoms[b].1[k] - atoms[a].1[k]);
    let dot = |u: [f64; 3], v: [f64; 3]| u.iter().zip(v).map(|(a, b)| a * b).sum::<f64>();
    let length = |u: [f64; 3]| dot(u, u).sqrt();
    let angle = |a: usize, b: usize, c: usize| {
        let (u, v) = (between(b, a), between(b, c));
        (dot(u, v) / length(u) / length(v)).acos().to_degrees()
    };
    let elements: Vec<&str> = atoms.iter().map(|(element, _)| element.as_str()).collect();
    assert_eq!(elements, ["C", "C", "Cl", "Cl", "H", "H"]);
    for (a, b, expected) in [
        (0, 1, 1.305),
        (0, 2, 1.740),
        (1, 3, 1.740),
        (0, 4, 1.078),
        (1, 5, 1.078),
    ] {
        assert!((length(between(a, b)) - expected).abs() < 1e-7);
    }
    for (a, b, c, expected) in [
        (1, 0, 2, 119.9),
        (0, 1, 3, 119.9),
        (1, 0, 4, 125.3),
        (0, 1, 5, 125.3),
    ] {
        assert!((angle(a, b, c) - expected).abs() < 1e-5);
    }
    // trans: the chlorines lie on opposite sides of the double bond.
    assert!(atoms[2].1[1] * atoms[3].1[1] < 0.0);
}

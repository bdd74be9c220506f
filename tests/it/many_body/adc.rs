//! ADC(2), ADC(2)-x and ADC(3).

use super::support::{AdcLine, JKFIT, grouped, solve, table};
use bandproof::ionization::Pairs;
use bandproof::ionization::adc::{self, Options, Order, State};
use bandproof::units::{EV_PER_HARTREE, ev_to_hartree};

const ENERGY_EV: f64 = 1e-4;
const STRENGTH: f64 = 1e-4;
/// States closer than this are compared by the sum of their strengths: in a degenerate set only
/// that is fixed.
const SAME_EV: f64 = 1e-3;

fn order(method: &str) -> Order {
    match method {
        "adc2" => Order::Second,
        "adc2x" => Order::SecondExtended,
        "adc3" => Order::Third,
        other => panic!("unknown method {other}"),
    }
}

fn ev(state: &State) -> f64 {
    state.ionization_hartree * EV_PER_HARTREE
}

/// Main lines and satellites down to those of no strength at all. The reference may have missed
/// members of a degenerate set (its list ends somewhere), never the other way round.
#[test]
fn every_state_of_the_independent_program() {
    let rows: Vec<AdcLine> = table("adc.csv");
    assert_eq!(rows.len(), 527);
    let (mut worst_energy, mut worst_strength) = (0.0_f64, 0.0_f64);
    for ((name, basis), lines) in grouped(rows, |r| (r.molecule.clone(), r.basis.clone())) {
        let solved = solve("geometries", &name, &basis, JKFIT, Pairs::All);
        for (method, lines) in grouped(lines, |r| r.method.clone()) {
            let energies = lines.iter().map(|l| l.ionization_energy_ev);
            let options = Options {
                ceiling_hartree: ev_to_hartree(energies.fold(0.0, f64::max) + 0.05),
                least_strength: 0.0,
                two_hole_start: 60,
                ..Options::default()
            };
            let spectrum = adc::run(&solved.orbitals, order(&method), &options).expect("converges");
            for line in &lines {
                let at = line.ionization_energy_ev;
                let ours: Vec<&State> = spectrum
                    .states
                    .iter()
                    .filter(|s| (ev(s) - at).abs() < SAME_EV)
                    .collect();
                let theirs: Vec<&AdcLine> = lines
                    .iter()
                    .filter(|l| (l.ionization_energy_ev - at).abs() < SAME_EV)
                    .collect();
                let what = format!("{name} {basis} {method}: {line:?} {ours:?}");
                let energy = ours
                    .iter()
                    .map(|s| (ev(s) - at).abs())
                    .fold(f64::INFINITY, f64::min);
                assert!(energy < ENERGY_EV, "{what}");
                assert!(ours.len() >= theirs.len(), "{what}");
                let own: f64 = ours.iter().map(|s| s.pole_strength).sum();
                let other: f64 = theirs.iter().map(|l| l.pole_strength).sum();
                let off = match ours.len() == theirs.len() {
                    true => (own - other).abs(),
                    false => (other - own).max(0.0),
                };
                assert!(off < STRENGTH, "{what}");
                let residual = ours.iter().map(|s| s.residual_hartree).fold(0.0, f64::max);
                assert!(residual <= options.residual_hartree, "{what}");
                worst_energy = worst_energy.max(energy);
                worst_strength = worst_strength.max(off);
            }
        }
    }
    println!("worst: {worst_energy:.1e} eV, {worst_strength:.1e}");
}

#[test]
fn the_two_hole_configurations_of_a_satellite_are_named() {
    let solved = solve("geometries", "N2", "def2-svp", JKFIT, Pairs::All);
    let options = Options {
        ceiling_hartree: ev_to_hartree(32.0),
        least_strength: 0.02,
        ..Options::default()
    };
    let spectrum = adc::run(&solved.orbitals, Order::Third, &options).expect("converges");
    let (main, satellites): (Vec<&State>, Vec<&State>) = spectrum
        .states
        .iter()
        .partition(|s| s.one_hole_weight > 0.5);
    assert_eq!(main.len(), 4);
    assert!(!satellites.is_empty());
    for state in satellites {
        let weight: f64 = state.configurations.iter().map(|c| c.weight).sum();
        assert!(
            weight > 0.5 && weight + state.one_hole_weight < 1.0 + 1e-9,
            "{state:?}"
        );
        for c in &state.configurations {
            assert!(c.holes[0] <= c.holes[1] && c.holes[1] < 7 && c.particle >= 7);
        }
    }
}

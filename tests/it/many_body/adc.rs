//! ADC(2), ADC(2)-x and ADC(3).

use super::support::{AdcLine, JKFIT, grouped, solve, table};
use bandproof::ionization::Pairs;
use bandproof::ionization::adc::{self, Options, Order, State};
use bandproof::units::{EV_PER_HARTREE, ev_to_hartree};

const ENERGY_EV: f64 = 1e-4;
const STRENGTH: f64 = 1e-4;
/// States closer than this share their strength in ways that depend on rounding.
const DEGENERATE_EV: f64 = 1e-3;

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

#[test]
fn every_state_of_the_independent_program() {
    let rows: Vec<AdcLine> = table("adc.csv");
    let total = rows.len();
    let (mut worst_energy, mut worst_strength) = (0.0_f64, 0.0_f64);
    let mut failures = Vec::new();
    for ((name, basis), lines) in grouped(rows, |r| (r.molecule.clone(), r.basis.clone())) {
        let solved = solve("geometries", &name, &basis, JKFIT, Pairs::All);
        for (method, lines) in grouped(lines, |r| r.method.clone()) {
            let top = lines
                .iter()
                .map(|l| l.ionization_energy_ev)
                .fold(0.0, f64::max);
            let options = Options {
                ceiling_hartree: ev_to_hartree(top + 0.05),
                least_strength: 0.0,
                residual_hartree: 1e-6,
                two_hole_start: 60,
                ..Options::default()
            };
            let start = std::time::Instant::now();
            let spectrum = adc::run(&solved.orbitals, order(&method), &options).expect("converges");
            println!(
                "{name} {basis} {method}: {} states, {:.2} s",
                spectrum.states.len(),
                start.elapsed().as_secs_f64()
            );
            for line in &lines {
                let at = line.ionization_energy_ev;
                let away = |s: &&State| (ev(s) - at).abs();
                let nearest = spectrum
                    .states
                    .iter()
                    .min_by(|a, b| away(a).total_cmp(&away(b)));
                let nearest = nearest.expect("some states");
                let near = |e: f64| (e - at).abs() < DEGENERATE_EV;
                let ours: f64 = spectrum
                    .states
                    .iter()
                    .filter(|s| near(ev(s)))
                    .map(|s| s.pole_strength)
                    .sum();
                let theirs: f64 = lines
                    .iter()
                    .filter(|l| near(l.ionization_energy_ev))
                    .map(|l| l.pole_strength)
                    .sum();
                let own = spectrum.states.iter().filter(|s| near(ev(s))).count();
                let other = lines
                    .iter()
                    .filter(|l| near(l.ionization_energy_ev))
                    .count();
                let missing = if other < own {
                    (theirs - ours).max(0.0)
                } else {
                    (ours - theirs).abs()
                };
                let (e, p) = (away(&nearest), missing);
                if e > ENERGY_EV || p > STRENGTH {
                    failures.push(format!(
                        "{name} {basis} {method} {at} {:.6}: off by {e:.1e} eV, {p:.1e} ({} ours)",
                        line.pole_strength,
                        spectrum.states.iter().filter(|s| near(ev(s))).count()
                    ));
                } else {
                    worst_energy = worst_energy.max(e);
                    worst_strength = worst_strength.max(p);
                }
            }
        }
    }
    println!("{total} lines, worst of the rest {worst_energy:.1e} eV, {worst_strength:.1e}");
    for line in &failures {
        println!("{line}");
    }
    assert!(failures.is_empty());
}

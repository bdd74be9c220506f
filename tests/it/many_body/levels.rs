//! Hole states as the rest of the program gets them.

use super::support::{JKFIT, solve};
use bandproof::ionization::{ManyBodySettings, Pairs, Portrait, hole_states};
use bandproof::levels::{Character, HoleState, LineKind, Method, Verdict};
use bandproof::scf::{Orbitals, SpinOrbitals};

/// One portrait per orbital; members of a degenerate set share a name.
fn portraits(set: &SpinOrbitals) -> Vec<Vec<Portrait>> {
    let character = Character {
        verdict: Verdict::Mixed,
        description: String::new(),
        net_overlap_population: 0.0,
        atoms: Vec::new(),
        bonds: Vec::new(),
    };
    let named = |members: std::ops::Range<usize>| {
        let portrait = Portrait {
            label: format!("set from {}", members.start),
            character: (members.start < set.occupied()).then(|| character.clone()),
        };
        vec![portrait; members.len()]
    };
    vec![set.degenerate_sets().into_iter().flat_map(named).collect()]
}

fn both_spins(orbitals: &Orbitals) -> &SpinOrbitals {
    match orbitals {
        Orbitals::Restricted(set) => set,
        Orbitals::Unrestricted { .. } => panic!("a closed shell"),
    }
}

fn states(name: &str, method: Method, ceiling_ev: f64) -> (Vec<HoleState>, Vec<String>) {
    let solved = solve("geometries", name, "def2-svp", JKFIT, Pairs::WithoutVirtual);
    let settings = ManyBodySettings {
        core: 2,
        ceiling_ev,
        ..ManyBodySettings::default()
    };
    let levels = hole_states(
        method,
        &solved.scf.orbitals,
        &solved.pairs,
        &settings,
        &portraits(both_spins(&solved.scf.orbitals)),
    )
    .expect("a closed shell");
    (levels.states, levels.unresolved)
}

#[test]
fn nitrogen_by_every_method() {
    for method in Method::ALL {
        let (states, unresolved) = states("N2", method, 45.0);
        let pi = states.iter().find(|s| s.degeneracy == 2).expect("a pair");
        assert_eq!(
            pi.leading_orbitals[0].index + 1,
            pi.leading_orbitals[1].index
        );
        assert_eq!(pi.kind, LineKind::Main, "{method}");
        let first = pi.leading_orbitals[0].index;
        assert_eq!(pi.label, format!("set from {first}"), "{method}");
        assert!((pi.leading_orbitals[0].weight - pi.leading_orbitals[1].weight).abs() < 1e-6);
        let mains = states.iter().filter(|s| s.kind == LineKind::Main).count();
        // 2σg, 2σu, 3σg and the 1πu pair; P3 has nothing to say on 2σg.
        assert_eq!(mains + unresolved.len(), 4, "{method}: {states:?}");
        assert_eq!(unresolved.is_empty(), method != Method::P3);
        let strong = states
            .iter()
            .all(|s| s.pole_strength > 0.0 && s.pole_strength <= 1.0);
        assert!(strong, "{method}: {states:?}");
        let satellites = states.iter().any(|s| s.kind == LineKind::Satellite);
        let many = matches!(method, Method::Adc2 | Method::Adc2x | Method::Adc3);
        assert_eq!(satellites, many, "{method}");
    }
}

#[test]
fn third_order_puts_sigma_first_in_nitrogen() {
    for method in [Method::P3, Method::Adc3] {
        let (states, _) = states("N2", method, 25.0);
        assert_eq!(
            (states[0].degeneracy, states[1].degeneracy),
            (1, 2),
            "{method}"
        );
    }
}

/// 2σg of nitrogen lies near 38 eV: a search to 32 eV finds its satellites at most.
#[test]
fn a_main_line_beyond_the_ceiling_is_not_made_up() {
    let (states, unresolved) = states("N2", Method::Adc3, 32.0);
    let mains = states.iter().filter(|s| s.kind == LineKind::Main);
    assert_eq!(mains.count(), 3, "{states:?}");
    let [note] = &unresolved[..] else {
        panic!("{unresolved:?}")
    };
    assert!(note.starts_with("set from 2 (Koopmans "), "{note}");
    assert!(note.contains("below 32 eV"), "{note}");
}

#[test]
fn a_calculation_that_does_not_fit_is_refused_with_the_figure() {
    let solved = solve("geometries", "N2", "def2-svp", JKFIT, Pairs::WithoutVirtual);
    for method in [Method::SecondOrder, Method::P3, Method::Adc2, Method::Adc3] {
        let settings = ManyBodySettings {
            core: 2,
            memory_limit_bytes: 100_000,
            ..ManyBodySettings::default()
        };
        let error = hole_states(
            method,
            &solved.scf.orbitals,
            &solved.pairs,
            &settings,
            &portraits(both_spins(&solved.scf.orbitals)),
        )
        .expect_err("does not fit");
        assert!(error.to_string().contains("needs"), "{error}");
    }
}

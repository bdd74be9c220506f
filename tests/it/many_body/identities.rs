//! What must hold whatever the reference values say.

use super::support::{JKFIT, data, solve, solve_molecule};
use bandproof::ionization::adc::{self, Options, Order};
use bandproof::ionization::{Pairs, p3, second_order};
use bandproof::molecule::Molecule;
use bandproof::numeric::davidson::SymmetricOperator;
use bandproof::numeric::linalg::symmetric_eigen;
use nalgebra::{Rotation3, Vector3};

const ORDERS: [Order; 3] = [Order::Second, Order::SecondExtended, Order::Third];

#[test]
fn complete_diagonalisation_gives_the_states_of_the_search() {
    for name in ["H2O", "NH3", "N2"] {
        let solved = solve("geometries", name, "6-31g*", JKFIT, Pairs::All);
        for order in ORDERS {
            let (matrix, amplitudes) = adc::build(&solved.orbitals, order);
            let dense = matrix.dense();
            assert!(
                (&dense - dense.transpose()).amax() < 1e-12,
                "{name} {order:?}"
            );
            let (values, vectors) = symmetric_eigen(&dense).expect("finite");
            let spectroscopic = adc::spectroscopic(&vectors, &amplitudes, matrix.shape);
            let strengths: Vec<f64> = spectroscopic
                .column_iter()
                .map(|x| x.norm_squared())
                .collect();
            let options = Options {
                ceiling_hartree: 1.4,
                ..Options::default()
            };
            let found = adc::run(&solved.orbitals, order, &options).expect("converges");
            let expected: Vec<usize> = (0..matrix.size())
                .filter(|&k| values[k] < options.ceiling_hartree && strengths[k] >= 0.01)
                .collect();
            assert_eq!(found.states.len(), expected.len(), "{name} {order:?}");
            for (state, k) in found.states.iter().zip(expected) {
                assert!((state.ionization_hartree - values[k]).abs() < 1e-9);
                assert!(state.residual_hartree <= options.residual_hartree);
                // Within an exactly degenerate set only the sum is fixed, and every one here has
                // equal members.
                assert!(
                    (state.pole_strength - strengths[k]).abs() < 1e-5,
                    "{name} {order:?}"
                );
            }
            // The states are complete: what is found in all of them is the norm of the amplitudes.
            for (p, total) in found.total_strengths.iter().enumerate() {
                let sum: f64 = spectroscopic.row(p).iter().map(|x| x * x).sum();
                assert!((sum - total).abs() < 1e-11);
                assert!(
                    *total > 0.95 && *total < 1.0,
                    "{name} {order:?} {p}: {total}"
                );
            }
            // All orbitals together hold half the electrons, up to higher than second order.
            let all: f64 = strengths.iter().sum();
            let electrons = matrix.shape.o as f64;
            assert!(
                (all / electrons - 1.0).abs() < 0.01,
                "{name} {order:?}: {all}"
            );
        }
    }
}

#[test]
fn strengths_of_all_second_order_roots_sum_to_one() {
    let solved = solve("geometries", "CO", "def2-svp", JKFIT, Pairs::WithoutVirtual);
    for p in 0..solved.orbitals.occupied() {
        let roots = second_order::self_energy(&solved.orbitals, p).roots(-1e3, 1e3);
        let total: f64 = roots.iter().map(|r| r.strength).sum();
        assert!((total - 1.0).abs() < 1e-9, "orbital {p}: {total}");
    }
}

/// Two molecules out of each other's reach have the states of one, each twice.
#[test]
fn far_molecules_do_not_matter() {
    let single = Molecule::read(&data("geometries/N2.xyz"), 0, None).expect("sound");
    let mut double = single.clone();
    for atom in &single.atoms {
        let mut copy = *atom;
        copy.position_bohr += Vector3::new(380.0, 120.0, 0.0);
        double.atoms.push(copy);
    }
    let one = solve_molecule(single, "6-31g*", JKFIT, Pairs::All).orbitals;
    let two = solve_molecule(double, "6-31g*", JKFIT, Pairs::All).orbitals;
    for order in ORDERS {
        let options = Options {
            ceiling_hartree: 0.9,
            ..Options::default()
        };
        let one = adc::run(&one, order, &options).expect("converges").states;
        let two = adc::run(&two, order, &options).expect("converges").states;
        assert_eq!(two.len(), 2 * one.len());
        for (k, state) in two.iter().enumerate() {
            let same = &one[k / 2];
            assert!(
                (state.ionization_hartree - same.ionization_hartree).abs() < 1e-6,
                "{order:?}"
            );
            assert!(
                (state.pole_strength - same.pole_strength).abs() < 1e-5,
                "{order:?}"
            );
        }
    }
}

/// Orbitals of a degenerate set are arbitrary up to a rotation among themselves; turning the
/// molecule turns them, and the states must not notice.
#[test]
fn turned_molecules_have_the_same_states() {
    let straight = Molecule::read(&data("geometries/NH3.xyz"), 0, None).expect("sound");
    let turn = Rotation3::from_euler_angles(0.3, -1.1, 2.0);
    let mut turned = straight.clone();
    for atom in &mut turned.atoms {
        atom.position_bohr = turn * atom.position_bohr;
    }
    let straight = solve_molecule(straight, "6-31g*", JKFIT, Pairs::All).orbitals;
    let turned = solve_molecule(turned, "6-31g*", JKFIT, Pairs::All).orbitals;
    for order in ORDERS {
        let options = Options::default();
        let a = adc::run(&straight, order, &options)
            .expect("converges")
            .states;
        let b = adc::run(&turned, order, &options)
            .expect("converges")
            .states;
        assert_eq!(a.len(), b.len());
        for (a, b) in a.iter().zip(&b) {
            assert!((a.ionization_hartree - b.ionization_hartree).abs() < 1e-8);
            assert!((a.pole_strength - b.pole_strength).abs() < 1e-6);
        }
    }
    let (a, b) = (p3::lines(&straight, 1..5), p3::lines(&turned, 1..5));
    for (a, b) in a.iter().zip(&b) {
        if let (Some(a), Some(b)) = (a.safe(), b.safe()) {
            assert!((a.ionization_hartree - b.ionization_hartree).abs() < 1e-7);
        }
    }
}

#[test]
fn results_do_not_depend_on_the_number_of_threads() {
    let solved = solve("geometries", "H2CO", "def2-svp", JKFIT, Pairs::All);
    let run = |threads| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads);
        let options = Options::default();
        pool.build()
            .expect("a thread pool")
            .install(|| adc::run(&solved.orbitals, Order::Third, &options).expect("converges"))
    };
    assert_eq!(run(1), run(2));
}

use super::*;
use crate::molecule::Atom;
use nalgebra::Rotation3;
use rand::seq::SliceRandom;
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;

fn molecule(atoms: Vec<(u8, Vector3<f64>)>) -> Molecule {
    let atom = |(number, position): (u8, Vector3<f64>)| Atom {
        number,
        position_bohr: position.map(angstrom_to_bohr),
    };
    Molecule {
        name: "test".into(),
        atoms: atoms.into_iter().map(atom).collect(),
        charge: 0,
        multiplicity: 1,
    }
}

/// Atoms in general positions of a group: four elements, so that nothing higher is left over.
fn general(symbol: Schoenflies, random: &mut ChaCha8Rng) -> Molecule {
    let operations = group::ideal(symbol).operations;
    let mut atoms = Vec::new();
    for number in [7, 8, 9, 17] {
        let radius = random.random_range(2.0..4.0);
        let direction = Vector3::from_fn(|_, _| random.random_range(-1.0..1.0)).normalize();
        for operation in &operations {
            atoms.push((number, operation * direction * radius));
        }
    }
    molecule(atoms)
}

fn shaken(molecule: &Molecule, noise_angstrom: f64, random: &mut ChaCha8Rng) -> Molecule {
    let turn = Rotation3::from_euler_angles(
        random.random_range(-3.0..3.0),
        random.random_range(-1.5..1.5),
        random.random_range(-3.0..3.0),
    );
    let mut shaken = molecule.moved(&turn, Vector3::new(1.0, -2.0, 0.5));
    for atom in &mut shaken.atoms {
        let noise = Vector3::from_fn(|_, _| random.random_range(-1.0..1.0));
        atom.position_bohr += noise * angstrom_to_bohr(noise_angstrom);
    }
    shaken.atoms.shuffle(random);
    shaken
}

#[test]
fn every_group_is_recognised_in_any_frame_and_order() {
    let mut random = ChaCha8Rng::seed_from_u64(1);
    for symbol in group::all_symbols() {
        let built = general(symbol, &mut random);
        for noise in [0.0, 1e-4] {
            let turned = shaken(&built, noise, &mut random);
            let group = find(&turned, 1e-3);
            assert_eq!(group.symbol, symbol, "noise {noise}");
            assert!(group.deviation_angstrom <= 2.0 * noise + 1e-9);
        }
    }
}

/// The operations handed out are exact: they map the symmetrised molecule onto itself, form a
/// group in the frame of the input, and permute atoms as they multiply.
#[test]
fn operations_are_exact_symmetries_of_the_symmetrised_molecule() {
    let mut random = ChaCha8Rng::seed_from_u64(2);
    for symbol in group::all_symbols() {
        let turned = shaken(&general(symbol, &mut random), 1e-4, &mut random);
        let group = find(&turned, 1e-3);
        let exact = group.symmetrised(&turned);
        for (a, b) in exact.atoms.iter().zip(&turned.atoms) {
            let moved = bohr_to_angstrom((a.position_bohr - b.position_bohr).norm());
            assert!(moved <= group.deviation_angstrom + 1e-12);
        }
        for operation in &group.operations {
            for (atom, &image) in exact.atoms.iter().zip(&operation.permutation) {
                let moved = operation.input_matrix * (atom.position_bohr - group.origin_bohr)
                    + group.origin_bohr;
                assert!((moved - exact.atoms[image].position_bohr).norm() < 1e-10);
                assert_eq!(atom.number, exact.atoms[image].number);
            }
        }
        let again = find(&exact, 1e-9);
        assert_eq!(again.symbol, symbol);
        assert!(again.deviation_angstrom < 1e-11);
        let standard = group.standardised(&turned);
        for operation in &group.operations {
            for (atom, &image) in standard.atoms.iter().zip(&operation.permutation) {
                let moved = operation.matrix * atom.position_bohr;
                assert!((moved - standard.atoms[image].position_bohr).norm() < 1e-10);
            }
        }
    }
}

/// No atom moves by more than the tolerance: a square distorted by 0.02 Å is a square within
/// 0.05 Å and a lower figure within 0.005 Å.
#[test]
fn tolerance_is_the_distance_that_an_atom_may_move() {
    let square = |long: f64| {
        molecule(vec![
            (6, Vector3::zeros()),
            (9, Vector3::new(long, 0.0, 0.0)),
            (9, Vector3::new(-long, 0.0, 0.0)),
            (9, Vector3::new(0.0, 1.5, 0.0)),
            (9, Vector3::new(0.0, -1.5, 0.0)),
        ])
    };
    let distorted = square(1.54);
    let group = find(&distorted, 0.05);
    assert_eq!(group.symbol, Schoenflies::Prism(4));
    assert!((group.deviation_angstrom - 0.02).abs() < 1e-9);
    assert_eq!(find(&distorted, 0.021).symbol, Schoenflies::Prism(4));
    assert_eq!(find(&distorted, 0.019).symbol, Schoenflies::Prism(2));
    assert_eq!(group.equivalent_atoms(), [vec![0], vec![1, 2, 3, 4]]);
    // Nothing is symmetric within nothing, and nonsense asks for nothing.
    let lopsided = shaken(&distorted, 0.1, &mut ChaCha8Rng::seed_from_u64(3));
    for tolerance in [0.0, -1.0, f64::NAN] {
        assert_eq!(find(&lopsided, tolerance).symbol, Schoenflies::C1);
    }
}

#[test]
fn linear_molecules_and_atoms() {
    let mut random = ChaCha8Rng::seed_from_u64(4);
    let line = |atoms: &[(u8, f64)]| {
        molecule(
            atoms
                .iter()
                .map(|&(n, z)| (n, Vector3::new(0.0, 0.0, z)))
                .collect(),
        )
    };
    let cases = [
        (line(&[(10, 0.0)]), Schoenflies::Atom),
        (line(&[(6, 0.0), (8, 1.13)]), Schoenflies::LinearPolar),
        (line(&[(7, 0.0), (7, 1.1)]), Schoenflies::LinearCentred),
        (
            line(&[(6, 0.0), (8, 1.16), (8, -1.16)]),
            Schoenflies::LinearCentred,
        ),
        (
            line(&[(6, 0.0), (8, 1.16), (16, -1.56)]),
            Schoenflies::LinearPolar,
        ),
        (
            line(&[(7, 0.0), (7, 1.13), (8, 2.31)]),
            Schoenflies::LinearPolar,
        ),
    ];
    for (molecule, symbol) in cases {
        for _ in 0..5 {
            let turned = shaken(&molecule, 1e-4, &mut random);
            let group = find(&turned, 1e-3);
            assert_eq!(group.symbol, symbol);
            let standard = group.standardised(&turned);
            for atom in &standard.atoms {
                assert!(atom.position_bohr.xy().norm() < 1e-12);
            }
        }
    }
    let bent = molecule(vec![
        (6, Vector3::zeros()),
        (8, Vector3::new(0.02, 0.0, 1.16)),
        (8, Vector3::new(0.02, 0.0, -1.16)),
    ]);
    assert_eq!(find(&bent, 0.001).symbol, Schoenflies::Pyramidal(2));
    assert_eq!(find(&bent, 0.05).symbol, Schoenflies::LinearCentred);
}

/// Mulliken's choices: x across a planar molecule, z through most atoms.
#[test]
fn standard_frames_follow_the_conventions() {
    let mut random = ChaCha8Rng::seed_from_u64(5);
    let water = molecule(vec![
        (8, Vector3::zeros()),
        (1, Vector3::new(0.76, 0.0, 0.59)),
        (1, Vector3::new(-0.76, 0.0, 0.59)),
    ]);
    let mut ethene = vec![
        (6, Vector3::new(0.667, 0.0, 0.0)),
        (6, Vector3::new(-0.667, 0.0, 0.0)),
    ];
    for (x, y) in [(1.0, 1.0), (1.0, -1.0), (-1.0, 1.0), (-1.0, -1.0)] {
        ethene.push((1, Vector3::new(1.238 * x, 0.923 * y, 0.0)));
    }
    let mut benzene = Vec::new();
    for k in 0..6 {
        let (sin, cos) = (f64::from(k) * std::f64::consts::PI / 3.0 + 0.2).sin_cos();
        benzene.push((6, Vector3::new(1.39 * cos, 1.39 * sin, 0.0)));
        benzene.push((1, Vector3::new(2.48 * cos, 2.48 * sin, 0.0)));
    }
    for (name, molecule, check) in [
        ("water", water, [0, 1]),
        ("ethene", molecule(ethene), [0, 1]),
        ("benzene", molecule(benzene), [2, 1]),
    ] {
        for _ in 0..5 {
            let turned = shaken(&molecule, 1e-4, &mut random);
            let standard = find(&turned, 1e-3).standardised(&turned);
            let across = standard
                .atoms
                .iter()
                .all(|a| a.position_bohr[check[0]].abs() < 1e-9);
            assert!(across, "{name} is not planar where it should be");
            // Two carbons on z (ethene), two on x (benzene), one oxygen on z (water).
            let line: usize = if name == "benzene" { 0 } else { 2 };
            let on_line = standard.atoms.iter().filter(|a| {
                let p = a.position_bohr;
                a.number > 1 && (p.norm() - p[line].abs()).abs() < 1e-9
            });
            assert_eq!(
                on_line.count(),
                if name == "water" { 1 } else { 2 },
                "{name}"
            );
        }
    }
}

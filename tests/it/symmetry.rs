//! Point groups and symmetry labels of molecules.
//!
//! `tests/data/symmetry/labels.csv` holds the expectations, its last column where each comes from.
//! Levels stand from the outermost orbital inwards; those joined by `=` may come in any order, as
//! Hartree-Fock need not agree with experiment there.

use bandproof::basis::Basis;
use bandproof::integrals::overlap;
use bandproof::molecule::Molecule;
use bandproof::molecule::symmetry::{self, PointGroup, Schoenflies};
use bandproof::orbitals::irreps::{self, OrbitalSymmetry};
use bandproof::scf::{self, Orbitals, ScfOptions, SpinOrbitals};
use bandproof::units::angstrom_to_bohr;
use nalgebra::{DMatrix, DVector, Rotation3, SymmetricEigen, Vector3};
use rand::seq::SliceRandom;
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rayon::prelude::*;
use std::collections::BTreeSet;
use std::path::Path;

struct Row {
    molecule: Molecule,
    group: String,
    basis: String,
    levels: String,
}

fn read(name: &str, charge: i32) -> Molecule {
    let path =
        Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("tests/data/symmetry/{name}.xyz"));
    Molecule::read(&path, charge, None).unwrap()
}

fn rows() -> Vec<Row> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/symmetry/labels.csv");
    let mut table = csv::Reader::from_path(path).unwrap();
    let row = |record: csv::StringRecord| {
        assert!(!record[5].is_empty(), "{} has no source", &record[0]);
        Row {
            molecule: read(&record[0], record[1].parse().unwrap()),
            group: record[2].to_string(),
            basis: record[3].to_string(),
            levels: record[4].to_string(),
        }
    };
    table.records().map(|r| row(r.unwrap())).collect()
}

struct Solved {
    group: PointGroup,
    orbitals: SpinOrbitals,
    symmetry: Vec<OrbitalSymmetry>,
    occupied: usize,
}

fn solve(molecule: &Molecule, set: &str, tolerance: f64) -> Solved {
    let basis = Basis::bundled(molecule, set).unwrap();
    let auxiliary = Basis::bundled(molecule, "def2-universal-jkfit").unwrap();
    let options = ScfOptions::default();
    let result = scf::run(molecule, &basis, &auxiliary, &options, &mut |_| ());
    let result = result.unwrap_or_else(|e| panic!("{}: {e}", molecule.name));
    let Orbitals::Restricted(orbitals) = result.orbitals else {
        panic!("{} is not a closed shell", molecule.name);
    };
    let group = symmetry::find(molecule, tolerance);
    let symmetry = irreps::labels(
        &group,
        molecule,
        &basis,
        &overlap(&basis),
        &orbitals.coefficients,
        &orbitals.energies,
    )
    .unwrap();
    Solved {
        group,
        orbitals,
        symmetry,
        occupied: molecule.electron_count() / 2,
    }
}

/// Labels of the occupied sets from the outermost inwards.
fn outermost(solved: &Solved) -> Vec<String> {
    let sets = solved.symmetry[..solved.occupied].iter().enumerate();
    let mut labels: Vec<String> = sets
        .filter(|(i, s)| s.members[0] == *i)
        .map(|(_, s)| s.label.clone())
        .collect();
    labels.reverse();
    labels
}

#[test]
fn point_groups_are_those_of_the_textbook() {
    let rows = rows();
    let groups: BTreeSet<&str> = rows.iter().map(|r| r.group.as_str()).collect();
    assert!(
        rows.len() >= 80 && groups.len() >= 28,
        "{} {}",
        rows.len(),
        groups.len()
    );
    for row in &rows {
        let found = symmetry::find(&row.molecule, symmetry::DEFAULT_TOLERANCE_ANGSTROM);
        assert_eq!(found.symbol.to_string(), row.group, "{}", row.molecule.name);
        assert!(found.deviation_angstrom < 1e-6, "{}", row.molecule.name);
    }
}

/// What is wrong with the labels of one molecule; empty if nothing.
fn faults(row: &Row) -> Vec<String> {
    let name = &row.molecule.name;
    let tolerance = symmetry::DEFAULT_TOLERANCE_ANGSTROM;
    let solved = solve(&row.molecule, &row.basis, tolerance);
    let mut faults = Vec::new();
    for orbital in &solved.symmetry {
        if orbital.set_weight < 1.0 - 1e-5 || orbital.spread_hartree > 1e-5 {
            faults.push(format!("{name}: {orbital:?}"));
        }
    }
    let found = outermost(&solved);
    let mut next = 0;
    for together in row.levels.split_whitespace() {
        let expected: BTreeSet<&str> = together.split('=').collect();
        let end = (next + expected.len()).min(found.len());
        let here: BTreeSet<&str> = found[next..end].iter().map(String::as_str).collect();
        if here != expected {
            faults.push(format!("{name}: found {here:?}, expected {expected:?}"));
        }
        next = end;
    }
    faults
}

#[test]
fn orbital_labels_are_the_published_ones() {
    let mut rows = rows();
    rows.retain(|row| !row.levels.is_empty());
    let groups: BTreeSet<&str> = rows.iter().map(|r| r.group.as_str()).collect();
    assert!(rows.len() >= 70 && groups.len() >= 23);
    let faults: Vec<String> = rows.par_iter().flat_map(faults).collect();
    assert!(faults.is_empty(), "{}", faults.join("\n"));
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

/// Rotation, order of the atoms and a noise of 1e-4 Å change no label of an occupied orbital, nor
/// the number of empty orbitals of each symmetry.
#[test]
fn labels_do_not_depend_on_frame_order_or_noise() {
    let mut random = ChaCha8Rng::seed_from_u64(11);
    for name in [
        "water",
        "ammonia",
        "methane",
        "ethene",
        "carbon_dioxide",
        "boron_trifluoride",
        "allene",
        "ethane",
        "tetrafluoromethane",
        "cyclopropane",
        "trans_diimide",
        "hydrogen_peroxide",
        "neon",
        "hydrogen_cyanide",
        "benzene",
        "sulfur_hexafluoride",
        "tetraphosphorus",
    ] {
        let molecule = read(name, 0);
        let reference = solve(&molecule, "sto-3g", 0.01);
        let core = molecule.core_orbital_count();
        for noise in [0.0, 1e-4, 1e-4] {
            let turned = shaken(&molecule, noise, &mut random);
            let solved = solve(&turned, "sto-3g", 0.01);
            assert_eq!(solved.group.symbol, reference.group.symbol, "{name}");
            let labels = |s: &Solved| -> Vec<String> {
                s.symmetry.iter().map(|o| o.label.clone()).collect()
            };
            let (found, expected) = (labels(&solved), labels(&reference));
            let valence = core..solved.occupied;
            assert_eq!(
                found[valence.clone()],
                expected[valence],
                "{name}, noise {noise}"
            );
            // Cores of equivalent atoms lie closer together than the noise moves them.
            let sorted = |mut labels: Vec<String>| {
                labels.sort();
                labels
            };
            assert_eq!(sorted(found), sorted(expected), "{name}, noise {noise}");
            // Empty orbitals crowd, and mix more. Lowest valence weight in 204 noisy geometries:
            // 0.9976, where 1a2′ and 4e′ of boron trifluoride nearly meet in this basis.
            for orbital in &solved.symmetry[core..solved.occupied] {
                assert!(orbital.weight > 0.995, "{name}, noise {noise}: {orbital:?}");
            }
        }
    }
}

/// Every operation leaves the overlap matrix as it is, and operations on orbitals multiply as the
/// operations on space do.
#[test]
fn operations_on_functions_represent_the_group() {
    for name in [
        "ammonia",
        "allene",
        "boron_trifluoride",
        "carbon_dioxide",
        "methane",
        "twisted_ethane",
    ] {
        let molecule = read(name, 0);
        let group = symmetry::find(&molecule, 0.01);
        let molecule = group.symmetrised(&molecule);
        let basis = Basis::bundled(&molecule, "def2-tzvp").unwrap();
        let s = overlap(&basis);
        let identity = DMatrix::identity(basis.functions, basis.functions);
        let matrices: Vec<DMatrix<f64>> = (0..group.operations.len())
            .map(|k| irreps::apply(&group, k, &basis, &identity).unwrap())
            .collect();
        for (a, matrix) in group.operations.iter().zip(&matrices) {
            let error = (matrix.transpose() * &s * matrix - &s).amax();
            assert!(error < 1e-11, "{name}: {error:e}");
            for (b, other) in group.operations.iter().zip(&matrices) {
                let product = a.matrix * b.matrix;
                let place = group
                    .operations
                    .iter()
                    .position(|o| (o.matrix - product).amax() < 1e-9);
                let error = (matrix * other - &matrices[place.unwrap()]).amax();
                assert!(error < 1e-11, "{name}: {error:e}");
            }
        }
    }
}

/// Symmetry-adapted functions counted by hand: the eigenvectors of the overlap matrix as orbitals.
#[test]
fn basis_functions_reduce_as_worked_out_by_hand() {
    let cases = [
        ("water", "4a1 1b1 2b2"),
        ("ammonia", "4a1 2e"),
        ("methane", "3a1 2t2"),
        ("ethene", "4ag 4b1u 2b2u 2b3g 1b3u 1b2g"),
        ("carbon_dioxide", "5σg 4σu 2πu 1πg"),
        ("hydrogen_cyanide", "7σ 2π"),
        // s, σ, tangential and π of C6, s of H6: the π are a2u, e1g, e2u, b2g.
        (
            "benzene",
            "4a1g 4e1u 4e2g 4b1u 1e1u 1e2g 1b2u 1a2g 1a2u 1e1g 1e2u 1b2g",
        ),
        ("argon", "3s 2p"),
    ];
    for (name, expected) in cases {
        let molecule = read(name, 0);
        let group = symmetry::find(&molecule, 0.01);
        let basis = Basis::bundled(&molecule, "sto-3g").unwrap();
        let s = overlap(&basis);
        let eigen = SymmetricEigen::new(s.clone());
        let mut order: Vec<usize> = (0..basis.functions).collect();
        order.sort_by(|&a, &b| eigen.eigenvalues[a].total_cmp(&eigen.eigenvalues[b]));
        let energies =
            DVector::from_iterator(order.len(), order.iter().map(|&k| eigen.eigenvalues[k]));
        let mut orbitals = eigen.eigenvectors.select_columns(&order);
        for (mut column, value) in orbitals.column_iter_mut().zip(&energies) {
            column /= value.sqrt();
        }
        let found = irreps::labels(&group, &molecule, &basis, &s, &orbitals, &energies).unwrap();
        let mut counts = std::collections::BTreeMap::new();
        for item in expected.split(' ') {
            let letters = item.find(|c: char| !c.is_ascii_digit()).unwrap();
            *counts.entry(item[letters..].to_string()).or_insert(0) +=
                item[..letters].parse::<usize>().unwrap();
        }
        let mut by_irrep = std::collections::BTreeMap::new();
        for (i, orbital) in found.iter().enumerate() {
            if orbital.members[0] == i {
                *by_irrep.entry(orbital.irrep.clone()).or_insert(0) += 1;
            }
        }
        assert_eq!(by_irrep, counts, "{name}");
    }
}

/// Water with one bond 0.04 Å too long is Cs, and nearly C2v: the parent's labels hold, with
/// weights that fall short of 1 by the square of the distortion.
#[test]
fn near_symmetric_molecules_carry_the_parents_labels_with_a_weight() {
    let water = read("water", 0);
    let stretched = |by: f64| {
        let mut longer = water.clone();
        let bond = longer.atoms[1].position_bohr - longer.atoms[0].position_bohr;
        longer.atoms[1].position_bohr += bond.normalize() * angstrom_to_bohr(by);
        longer
    };
    let lost = |by: f64| -> f64 {
        let molecule = stretched(by);
        assert_eq!(symmetry::find(&molecule, 0.001).symbol, Schoenflies::Cs);
        let solved = solve(&molecule, "def2-svp", 0.1);
        assert_eq!(solved.group.symbol, Schoenflies::Pyramidal(2));
        assert!(solved.group.deviation_angstrom > by / 4.0 && solved.group.deviation_angstrom < by);
        assert_eq!(outermost(&solved), ["1b1", "3a1", "1b2", "2a1", "1a1"]);
        let lowest = solved.symmetry[..5]
            .iter()
            .map(|o| o.weight)
            .fold(1.0, f64::min);
        assert!(lowest < 1.0 - 1e-6);
        1.0 - lowest
    };
    let (small, large) = (lost(0.01), lost(0.04));
    assert!(large < 0.01, "{large}");
    assert!((large / small / 16.0 - 1.0).abs() < 0.1, "{small} {large}");
}

#[test]
fn numbering_can_start_at_the_valence_shell() {
    let solved = solve(&read("hydrogen_sulfide", 0), "sto-3g", 0.01);
    let valence = irreps::valence_labels(&solved.symmetry, 5);
    assert_eq!(valence[5..9], ["1a1", "1b2", "2a1", "1b1"]);
    assert_eq!(valence[..2], ["1a1", "2a1"]);
}

#[test]
fn states_of_ions_are_written_as_terms() {
    let written = [
        ("b1", 2, "²B1"),
        ("e1g", 2, "²E1g"),
        ("a″", 3, "³A″"),
        ("t2", 2, "²T2"),
        ("πg", 2, "²Πg"),
        ("σg", 2, "²Σg⁺"),
        ("σ", 1, "¹Σ⁺"),
        ("δ", 4, "⁴Δ"),
        ("p", 2, "²P"),
    ];
    for (irrep, multiplicity, label) in written {
        assert_eq!(irreps::state_label(irrep, multiplicity), label);
    }
}

#[test]
fn what_does_not_belong_together_is_refused() {
    let water = read("water", 0);
    let solved = solve(&water, "sto-3g", 0.01);
    let basis = Basis::bundled(&water, "sto-3g").unwrap();
    let other = symmetry::find(&read("methane", 0), 0.01);
    let (c, e) = (&solved.orbitals.coefficients, &solved.orbitals.energies);
    let s = overlap(&basis);
    let error = irreps::labels(&other, &water, &basis, &s, c, e).unwrap_err();
    assert_eq!(
        error.to_string(),
        "atoms of the point group: found 5, expected 3"
    );
    let few = e.rows(0, 3).into_owned();
    let error = irreps::labels(&solved.group, &water, &basis, &s, c, &few).unwrap_err();
    assert_eq!(error.to_string(), "orbital energies: found 3, expected 7");
    let error = irreps::labels(&solved.group, &water, &basis, &-s, c, e).unwrap_err();
    assert!(error.to_string().contains("not positive"), "{error}");
}

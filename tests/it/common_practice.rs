//! What every chemist knows about small molecules, as the program computes it.
//!
//! Facts without a citation are common practice, no source. Geometries: `tests/data/geometries`.

use bandproof::basis::{Basis, default_auxiliary};
use bandproof::integrals::overlap;
use bandproof::ionization::{Portrait, koopmans, orbital_lines};
use bandproof::levels::{Character, HoleState, Verdict};
use bandproof::molecule::Molecule;
use bandproof::orbitals::{IntrinsicOrbitals, bond_order, characters};
use bandproof::scf::{self, Orbitals, ScfOptions, SpinOrbitals};
use nalgebra::DMatrix;
use std::path::PathBuf;

/// The sets on which every verdict below must agree.
const SETS: [&str; 3] = ["def2-svp", "def2-tzvp", "cc-pvtz"];

struct Outcome {
    molecule: Molecule,
    basis: Basis,
    overlap: DMatrix<f64>,
    orbitals: SpinOrbitals,
    characters: Vec<Option<Character>>,
    /// By rising ionization energy: the outermost first.
    states: Vec<HoleState>,
}

fn geometry(name: &str) -> Molecule {
    let folder = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("tests/data/geometries");
    Molecule::read(&folder.join(format!("{name}.xyz")), 0, None).unwrap()
}

fn compute(name: &str, set: &str) -> Outcome {
    let molecule = geometry(name);
    let basis = Basis::bundled(&molecule, set).unwrap();
    let auxiliary = Basis::bundled(&molecule, default_auxiliary(set)).unwrap();
    let result = scf::run(
        &molecule,
        &basis,
        &auxiliary,
        &ScfOptions::default(),
        &mut |_| {},
    )
    .unwrap();
    let Orbitals::Restricted(orbitals) = &result.orbitals else {
        panic!("{name}: closed shell")
    };
    let orbitals = orbitals.clone();
    let overlap = overlap(&basis);
    let characters = characters(&molecule, &basis, &overlap, &orbitals).unwrap();
    let core = molecule.core_orbital_count();
    let portraits = [(characters.iter().enumerate())
        .map(|(i, character)| Portrait {
            label: format!("orbital {}", i + 1),
            character: character.clone(),
        })
        .collect::<Vec<_>>()];
    let states = koopmans(&result.orbitals, core, &portraits).unwrap();
    let lines = orbital_lines(&result.orbitals, core, &portraits, 2).unwrap();
    assert_eq!(lines.len(), orbitals.occupied() + 2);
    assert!(
        lines
            .iter()
            .all(|l| l.character.is_some() == (!l.core && l.occupation > 0.5))
    );
    Outcome {
        molecule,
        basis,
        overlap,
        orbitals,
        characters,
        states,
    }
}

impl Outcome {
    fn verdicts(&self) -> Vec<(Verdict, usize)> {
        self.states
            .iter()
            .map(|s| (s.character.verdict, s.degeneracy))
            .collect()
    }

    fn counted_bond_order(&self) -> f64 {
        bond_order::counted(&self.orbitals, &self.characters)
    }

    fn mayer(&self) -> DMatrix<f64> {
        let orbitals = Orbitals::Restricted(self.orbitals.clone());
        bond_order::mayer(&self.basis, &self.overlap, &orbitals)
    }

    fn wiberg(&self) -> DMatrix<f64> {
        let intrinsic =
            IntrinsicOrbitals::new(&self.molecule, &self.basis, &self.overlap, &self.orbitals);
        bond_order::wiberg(&intrinsic.unwrap())
    }

    fn hydrogen_share(&self, state: &HoleState) -> f64 {
        let atoms = state.character.atoms.iter();
        atoms
            .filter(|a| self.molecule.atoms[a.atom].number == 1)
            .map(|a| a.share)
            .sum()
    }

    /// The evidence as a table; shown by `cargo test -- --nocapture`.
    fn print(&self, set: &str) {
        println!("{} {set}", self.molecule.formula());
        for s in &self.states {
            let c = &s.character;
            let atoms: Vec<String> = c
                .atoms
                .iter()
                .take(3)
                .map(|a| format!("{} {:.2}", a.name, a.share))
                .collect();
            println!(
                "  {:<11} {:7.2} eV  net {:+.2}  {:<10} {}  [{}]",
                s.label,
                s.ionization_energy_ev,
                c.net_overlap_population,
                c.verdict.to_string(),
                c.description,
                atoms.join(", ")
            );
        }
    }
}

fn in_every_set(name: &str, check: impl Fn(&Outcome)) {
    for set in SETS {
        let outcome = compute(name, set);
        outcome.print(set);
        check(&outcome);
    }
}

use Verdict::{Antibonding, Bonding, LonePair, Nonbonding};

#[test]
fn hydrogen_has_one_bonding_pair_and_bond_order_one() {
    in_every_set("h2", |h2| {
        assert_eq!(h2.verdicts(), [(Bonding, 1)]);
        assert_eq!(h2.states[0].character.description, "σ bonding: H–H; HOMO");
        assert_eq!(h2.counted_bond_order(), 1.0);
        // Two electrons in one orbital shared evenly: exactly 1 in any basis.
        assert!((h2.mayer()[(0, 1)] - 1.0).abs() < 1e-8);
        assert!((h2.wiberg()[(0, 1)] - 1.0).abs() < 1e-8);
    });
}

#[test]
fn the_valence_set_of_carbon_monoxide_gives_bond_order_three() {
    in_every_set("co", |co| {
        assert_eq!(co.counted_bond_order(), 3.0);
        assert_eq!(
            co.verdicts(),
            [(LonePair, 1), (Bonding, 2), (LonePair, 1), (Bonding, 1)],
            "5σ, 1π, 4σ, 3σ"
        );
        // Computed orders lie below the count because the bonds are polar.
        for order in [co.mayer()[(0, 1)], co.wiberg()[(0, 1)]] {
            assert!((2.0..3.0).contains(&order), "{order}");
        }
    });
}

#[test]
fn nitrogen_has_bond_order_three() {
    in_every_set("n2", |n2| {
        assert_eq!(n2.counted_bond_order(), 3.0);
        assert!((n2.wiberg()[(0, 1)] - 3.0).abs() < 0.1, "{}", n2.wiberg());
    });
}

#[test]
fn the_outermost_pair_of_carbon_dioxide_is_a_nonbonding_oxygen_pi_pair() {
    in_every_set("co2", |co2| {
        let outermost = &co2.states[0];
        assert_eq!(
            (outermost.character.verdict, outermost.degeneracy),
            (Nonbonding, 2)
        );
        assert_eq!(
            outermost.character.description,
            "nonbonding O lone pairs (O2 and O3), π, doubly degenerate; HOMO"
        );
        let oxygen: f64 = outermost
            .character
            .atoms
            .iter()
            .filter(|a| co2.molecule.atoms[a.atom].number == 8)
            .map(|a| a.share)
            .sum();
        assert!((oxygen - 1.0).abs() < 1e-3, "{oxygen}");
        // Four bonding and four nonbonding pairs, so two bonds to either side.
        let pairs = |wanted: Verdict| -> usize {
            co2.verdicts()
                .iter()
                .filter(|v| v.0 == wanted)
                .map(|v| v.1)
                .sum()
        };
        assert_eq!((pairs(Bonding), pairs(Nonbonding)), (4, 4));
    });
}

#[test]
fn the_outermost_orbital_of_water_is_a_lone_pair_without_hydrogen() {
    in_every_set("h2o", |water| {
        let outermost = &water.states[0];
        assert_eq!(outermost.character.verdict, LonePair);
        assert_eq!(
            outermost.character.description,
            "O lone pair, π (out of plane); HOMO"
        );
        // By symmetry no hydrogen 1s; the intrinsic orbitals hold nothing else on hydrogen.
        assert!(water.hydrogen_share(outermost) < 1e-8);
        for inner in &water.states[1..] {
            assert_eq!(
                inner.character.verdict, Bonding,
                "{}",
                inner.character.description
            );
            // Spread over both bonds alike, so none is a second lone pair of its own.
            let [first, second] = &inner.character.bonds[..] else {
                panic!()
            };
            assert!((first.overlap_population - second.overlap_population).abs() < 1e-5);
            assert!(water.hydrogen_share(inner) > 0.03);
        }
        assert_eq!(water.states.len(), 4);
        assert_eq!(water.states[0].leading_orbitals[0].index, 4);
    });
}

#[test]
fn methane_has_one_and_three_bonding_orbitals_and_nothing_else() {
    in_every_set("ch4", |methane| {
        assert_eq!(methane.verdicts(), [(Bonding, 3), (Bonding, 1)]);
        let [t2, a1] = &methane.states[..] else {
            panic!()
        };
        assert_eq!(
            t2.character.description,
            "σ bonding: C–H, triply degenerate; HOMO"
        );
        assert_eq!(a1.character.description, "σ bonding: C–H; HOMO−1");
        for bond in t2.character.bonds.iter().chain(&a1.character.bonds) {
            let order = t2.character.bonds[0].overlap_population;
            assert!(bond.overlap_population > 0.1 && order > 0.1);
        }
        assert_eq!(methane.counted_bond_order(), 4.0);
        for h in 1..5 {
            assert!((methane.wiberg()[(0, h)] - 1.0).abs() < 0.05);
        }
    });
}

/// Names that nobody disputes: outermost orbitals from the last one inwards.
#[test]
fn undisputed_verdicts_come_out_in_every_set() {
    let table: [(&str, &[Verdict]); 9] = [
        ("hf", &[LonePair, Bonding]),
        ("h2s", &[LonePair, Bonding, Bonding, Bonding]),
        ("nh3", &[LonePair, Bonding, Bonding]),
        ("h2co", &[LonePair, Bonding]),
        ("c2h4", &[Bonding]),
        ("c2h2", &[Bonding]),
        ("hcn", &[Bonding, LonePair]),
        ("f2", &[Antibonding]),
        ("benzene", &[Bonding]),
    ];
    for (name, expected) in table {
        let sets = if name == "benzene" {
            &SETS[..1]
        } else {
            &SETS[..]
        };
        for set in sets {
            let outcome = compute(name, set);
            outcome.print(set);
            let found: Vec<Verdict> = outcome
                .verdicts()
                .iter()
                .take(expected.len())
                .map(|v| v.0)
                .collect();
            assert_eq!(found, expected, "{name} in {set}");
        }
    }
}

/// Szabo and Ostlund, Modern Quantum Chemistry, table 3.13 (memory): −ε of 3σg and 1πu of N2 at
/// 2.074 bohr are 0.540 and 0.573 hartree in STO-3G, 0.630 and 0.612 in 6-31G*; experiment 0.573
/// and 0.624. The larger basis reverses the order, and experiment sides with the small one.
///
/// Allowed: one unit of the last printed digit. Exact values at that geometry are 0.5395 and
/// 0.6301 (six Cartesian d functions, as in the book); spherical d functions change the latter to
/// 0.6295.
#[test]
fn koopmans_order_in_nitrogen_depends_on_the_basis() {
    const LAST_PRINTED_DIGIT: f64 = 0.001;
    let minus_energies = |set: &str| {
        let n2 = compute("n2", set);
        let set_of = |degeneracy: usize| {
            n2.states
                .iter()
                .find(|s| s.degeneracy == degeneracy)
                .unwrap()
                .leading_orbitals[0]
        };
        // The outermost single state is 3σg, the pair is 1πu.
        [set_of(1), set_of(2)].map(|w| -n2.orbitals.energies[w.index])
    };
    let small = minus_energies("sto-3g");
    let large = minus_energies("6-31g*");
    println!("3σg, 1πu: STO-3G {small:.5?}, 6-31G* {large:.5?}");
    for (found, printed) in [(small, [0.540, 0.573]), (large, [0.630, 0.612])] {
        for (f, p) in found.iter().zip(printed) {
            assert!((f - p).abs() < LAST_PRINTED_DIGIT, "{f} against {p}");
        }
    }
    let experiment = [0.573, 0.624];
    assert!((experiment[0] < experiment[1]) == (small[0] < small[1]));
    assert!((experiment[0] < experiment[1]) != (large[0] < large[1]));
}

//! Reading the reference tables, and orbitals to compare with them.

use bandproof::basis::Basis;
use bandproof::integrals::FittedPairs;
use bandproof::ionization::{FittedOrbitals, Pairs};
use bandproof::molecule::Molecule;
use bandproof::scf::{self, ScfOptions, ScfResult};
use serde::Deserialize;
use serde::de::DeserializeOwned;
use std::path::PathBuf;

pub const JKFIT: &str = "def2-universal-jkfit";

/// A file or folder of the reference data.
pub fn data(name: &str) -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
        .join("tests/data/many_body")
        .join(name)
}

/// All rows of a table.
pub fn table<T: DeserializeOwned>(name: &str) -> Vec<T> {
    let mut reader = csv::Reader::from_path(data(name)).expect("a readable table");
    reader
        .deserialize()
        .map(|row| row.expect("a sound row"))
        .collect()
}

/// One line of `second_order.csv`.
#[derive(Debug, Clone, Deserialize)]
pub struct SecondOrderLine {
    pub molecule: String,
    pub basis: String,
    pub orbital: usize,
    pub koopmans_ev: f64,
    pub ionization_energy_ev: f64,
    pub pole_strength: f64,
}

/// One line of `adc.csv`.
#[derive(Debug, Clone, Deserialize)]
pub struct AdcLine {
    pub molecule: String,
    pub basis: String,
    pub method: String,
    pub ionization_energy_ev: f64,
    pub pole_strength: f64,
}

/// One line of `near_exact_lines.csv`.
#[derive(Debug, Clone, Deserialize)]
pub struct NearExactLine {
    pub molecule: String,
    pub line: usize,
    pub orbital: usize,
    pub basis: String,
    pub gf2_ev: f64,
    pub gf2_strength: f64,
    pub p3_ev: Option<f64>,
    pub p3_strength: Option<f64>,
    pub p3plus_ev: Option<f64>,
    pub p3plus_strength: Option<f64>,
}

/// A molecule of the reference set, with its mean field and fitted orbitals.
pub struct Solved {
    pub scf: ScfResult,
    pub pairs: FittedPairs,
    pub orbitals: FittedOrbitals,
}

/// Solves a molecule of `folder`; see [`solve_molecule`].
pub fn solve(folder: &str, name: &str, basis_name: &str, auxiliary: &str, wanted: Pairs) -> Solved {
    let path = data(folder).join(format!("{name}.xyz"));
    let molecule = Molecule::read(&path, 0, None).expect("a sound geometry");
    solve_molecule(molecule, basis_name, auxiliary, wanted)
}

/// Solves a molecule with the JK set in the mean field and `auxiliary` after it; no frozen core.
pub fn solve_molecule(
    molecule: Molecule,
    basis_name: &str,
    auxiliary: &str,
    wanted: Pairs,
) -> Solved {
    let basis = Basis::bundled(&molecule, basis_name).expect("a bundled basis");
    let jkfit = Basis::bundled(&molecule, JKFIT).expect("a bundled basis");
    let options = ScfOptions {
        energy_tolerance_hartree: 1e-10,
        gradient_tolerance_hartree: 1e-8,
        ..ScfOptions::default()
    };
    let scf = scf::run(&molecule, &basis, &jkfit, &options, &mut |_| {}).expect("converges");
    let auxiliary = Basis::bundled(&molecule, auxiliary).expect("a bundled basis");
    let pairs = FittedPairs::new(&basis, &auxiliary).expect("fits");
    let orbitals = FittedOrbitals::new(&scf.orbitals, &pairs, 0, wanted).expect("closed shell");
    Solved {
        scf,
        pairs,
        orbitals,
    }
}

/// Groups rows by a key, in order of first appearance.
pub fn grouped<T, K: PartialEq>(rows: Vec<T>, key: impl Fn(&T) -> K) -> Vec<(K, Vec<T>)> {
    let mut groups: Vec<(K, Vec<T>)> = Vec::new();
    for row in rows {
        let this = key(&row);
        match groups.iter_mut().find(|g| g.0 == this) {
            Some(group) => group.1.push(row),
            None => groups.push((this, vec![row])),
        }
    }
    groups
}

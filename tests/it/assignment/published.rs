//! Koopmans levels and published bands of 19 molecules, from `tests/data/assignment`.

use bandproof::assign::Conditions;
use bandproof::fit::{Band, Grouping, Member};
use bandproof::levels::{
    AtomLine, AtomShare, Character, HoleState, Level, Levels, LineKind, Method, MoleculeSummary,
    SCHEMA, ScfSummary, Verdict,
};
use bandproof::units::hartree_to_ev;
use serde::Deserialize;

#[derive(Deserialize)]
struct LevelRow {
    molecule: String,
    label: String,
    energy_hartree: f64,
    degeneracy: usize,
    verdict: Verdict,
    pi: u8,
    net: f64,
    nof: f64,
}

#[derive(Deserialize, Clone)]
pub struct BandRow {
    pub molecule: String,
    pub vertical_ev: f64,
    pub adiabatic_ev: Option<f64>,
    pub orbitals: String,
    pub confidence: String,
}

fn rows<T: for<'a> Deserialize<'a>>(text: &str) -> Vec<T> {
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .from_reader(text.as_bytes());
    reader.deserialize().map(|row| row.unwrap()).collect()
}

fn level_rows() -> Vec<LevelRow> {
    rows(include_str!("../../data/assignment/levels.csv"))
}

pub fn band_rows(molecule: &str) -> Vec<BandRow> {
    let all: Vec<BandRow> = rows(include_str!("../../data/assignment/bands.csv"));
    all.into_iter()
        .filter(|row| row.molecule == molecule)
        .collect()
}

pub const MOLECULES: [(&str, &str); 19] = [
    ("H2O", "H2O"),
    ("H2S", "H2S"),
    ("NH3", "H3N"),
    ("CH4", "CH4"),
    ("HF", "FH"),
    ("HCl", "ClH"),
    ("N2", "N2"),
    ("CO", "CO"),
    ("CO2", "CO2"),
    ("N2O", "N2O"),
    ("HCN", "CHN"),
    ("C2H2", "C2H2"),
    ("C2H4", "C2H4"),
    ("butadiene", "C4H6"),
    ("H2CO", "CH2O"),
    ("CH3OH", "CH4O"),
    ("furan", "C4H4O"),
    ("pyridine", "C5H5N"),
    ("benzene", "C6H6"),
];

/// Koopmans levels of a molecule. Atom 0 stands for all N, O and F atoms, atom 1 for the rest.
pub fn levels(molecule: &str, described: bool) -> Levels {
    let formula = MOLECULES
        .iter()
        .find(|m| m.0 == molecule)
        .map_or("", |m| m.1);
    let share = |atom, name: &str, share| AtomShare {
        atom,
        name: name.to_string(),
        share,
    };
    let mut hole_states: Vec<HoleState> = (level_rows().into_iter())
        .filter(|row| row.molecule == molecule)
        .map(|row| HoleState {
            label: row.label.clone(),
            ionization_energy_ev: -hartree_to_ev(row.energy_hartree),
            koopmans_ev: -hartree_to_ev(row.energy_hartree),
            pole_strength: 1.0,
            degeneracy: row.degeneracy,
            kind: LineKind::Main,
            leading_orbitals: Vec::new(),
            character: Character {
                verdict: row.verdict,
                description: match (described, row.pi == 1) {
                    (true, true) => "π".to_string(),
                    (true, false) => "σ".to_string(),
                    (false, _) => String::new(),
                },
                net_overlap_population: row.net,
                atoms: vec![share(0, "O1", row.nof), share(1, "C2", 1.0 - row.nof)],
                bonds: Vec::new(),
            },
            envelope: None,
        })
        .collect();
    if !described {
        hole_states
            .iter_mut()
            .for_each(|s| s.label = s.label.replace('π', "p"));
    }
    hole_states.sort_by(|a, b| a.ionization_energy_ev.total_cmp(&b.ionization_energy_ev));
    let atom = |element: &str| AtomLine {
        element: element.to_string(),
        x: 0.0,
        y: 0.0,
        z: 0.0,
    };
    Levels {
        schema: SCHEMA.to_string(),
        program: String::new(),
        molecule: MoleculeSummary {
            name: molecule.to_string(),
            formula: formula.to_string(),
            charge: 0,
            multiplicity: 1,
            point_group: None,
            atoms: vec![atom("O"), atom("C")],
        },
        level: Level {
            method: Method::Koopmans,
            basis: "def2-tzvp".to_string(),
            auxiliary: "def2-universal-jkfit".to_string(),
            correlation_auxiliary: None,
            frozen_core: false,
        },
        scf: ScfSummary {
            energy_hartree: 0.0,
            nuclear_repulsion_hartree: 0.0,
            iterations: 1,
            converged: true,
            dipole_debye: [0.0; 3],
        },
        orbitals: Vec::new(),
        hole_states,
        notes: Vec::new(),
    }
}

pub fn band(vertical: f64, area: f64, fwhm: f64) -> Band {
    let (position_sd, area_sd) = (0.005, 0.03 * area);
    Band {
        id: 0,
        vertical_ev: vertical,
        vertical_sd: position_sd,
        maximum_ev: vertical,
        origin_ev: None,
        area,
        area_sd,
        fwhm_ev: fwhm,
        spacing_ev: None,
        significance: 300.0,
        peaks: vec![0],
        members: vec![Member {
            peak: 0,
            position_ev: vertical,
            position_sd,
            area,
            area_sd,
        }],
    }
}

/// Sorted and numbered.
pub fn grouping(mut bands: Vec<Band>) -> Grouping {
    bands.sort_by(|a, b| a.vertical_ev.total_cmp(&b.vertical_ev));
    for (n, band) in bands.iter_mut().enumerate() {
        band.id = n + 1;
        band.members.iter_mut().for_each(|m| m.peak = n);
    }
    Grouping {
        probability: 1.0,
        bands,
    }
}

/// Bands of a molecule: published positions; 1,000 counts per orbital times a factor between 0.6
/// and 1.6 that runs through the list; width from vertical minus adiabatic where both are known.
pub fn published(molecule: &str) -> Vec<Band> {
    let degeneracy = |label: &str| {
        let row = level_rows()
            .into_iter()
            .find(|r| r.molecule == molecule && r.label == label);
        row.map_or(1, |r| r.degeneracy)
    };
    let factors = [1.2, 0.7, 1.0, 1.6, 0.6, 1.4, 0.9];
    let list = band_rows(molecule);
    let sharing = |orbitals: &str| list.iter().filter(|r| r.orbitals == orbitals).count() as f64;
    (list.iter().enumerate())
        .map(|(n, row)| {
            let orbitals: usize = row.orbitals.split('+').map(degeneracy).sum();
            let area = 1000.0 * orbitals as f64 / sharing(&row.orbitals) * factors[n % 7];
            let fwhm = match row.adiabatic_ev {
                Some(adiabatic) => (1.2 * (row.vertical_ev - adiabatic)).max(0.06),
                None => 0.4,
            };
            band(row.vertical_ev, area, fwhm)
        })
        .collect()
}

pub fn he_i() -> Conditions {
    Conditions {
        photon_energy_ev: Some(21.218),
        window_ev: [8.0, 20.8],
        scale_offset_sd_ev: 0.03,
    }
}

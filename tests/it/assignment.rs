//! Real molecules: Koopmans levels beside published bands. Foreign lines and lamp ghosts planted
//! by hand. Odd input.

use bandproof::assign::{AssignError, Assignment, Conditions, RemarkKind, assign};
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
struct BandRow {
    molecule: String,
    vertical_ev: f64,
    adiabatic_ev: Option<f64>,
    orbitals: String,
    confidence: String,
}

fn rows<T: for<'a> Deserialize<'a>>(text: &str) -> Vec<T> {
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .from_reader(text.as_bytes());
    reader.deserialize().map(|row| row.unwrap()).collect()
}

fn level_rows() -> Vec<LevelRow> {
    rows(include_str!("../data/assignment/levels.csv"))
}

fn band_rows(molecule: &str) -> Vec<BandRow> {
    let all: Vec<BandRow> = rows(include_str!("../data/assignment/bands.csv"));
    all.into_iter()
        .filter(|row| row.molecule == molecule)
        .collect()
}

const MOLECULES: [(&str, &str); 19] = [
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
fn levels(molecule: &str, described: bool) -> Levels {
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
    }
}

fn band(vertical: f64, area: f64, fwhm: f64) -> Band {
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
fn grouping(mut bands: Vec<Band>) -> Grouping {
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
fn published(molecule: &str) -> Vec<Band> {
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

fn he_i() -> Conditions {
    Conditions {
        photon_energy_ev: Some(21.218),
        window_ev: [8.0, 20.8],
        scale_offset_sd_ev: 0.03,
    }
}

fn run(levels: &Levels, bands: Vec<Band>) -> Assignment {
    assign(&[grouping(bands)], levels, &he_i()).unwrap()
}

/// Probability that the outcome gives to `orbitals` for band `id`, and whether it is the choice.
fn reading(outcome: &Assignment, id: usize, orbitals: &str) -> (f64, bool) {
    let mut wanted: Vec<&str> = orbitals.split('+').collect();
    wanted.sort_unstable();
    let same = |labels: &[String]| {
        let mut labels: Vec<&str> = labels.iter().map(String::as_str).collect();
        labels.sort_unstable();
        labels == wanted
    };
    let Some(matched) = outcome.matches.iter().find(|m| m.band == id) else {
        return (0.0, false);
    };
    if same(&matched.hole_states) {
        return (matched.probability, true);
    }
    let other = matched.alternatives.iter().find(|a| same(&a.hole_states));
    (other.map_or(0.0, |a| a.probability), false)
}

fn print(molecule: &str, outcome: &Assignment, truth: &[BandRow]) {
    println!(
        "{molecule}: I = {:.3} x E {:+.2} eV (sd {:.2})",
        outcome.scale, outcome.shift_ev, outcome.shift_sd_ev
    );
    for (n, row) in truth.iter().enumerate() {
        let (p, chosen) = reading(outcome, n + 1, &row.orbitals);
        let shown = outcome.matches.iter().find(|m| m.band == n + 1);
        println!(
            "  {:5.2} {:<8} {:<6} p = {p:.3} {}  shown {:?} {:.3} off {:+.2}",
            row.vertical_ev,
            row.orbitals,
            row.confidence,
            if chosen { "chosen" } else { "      " },
            shown.map(|m| m.hole_states.join("+")).unwrap_or_default(),
            shown.map_or(0.0, |m| m.probability),
            shown.map_or(0.0, |m| m.residual_ev),
        );
    }
    for remark in &outcome.remarks {
        println!(
            "  {:?} {:.2}: {}",
            remark.kind, remark.position_ev, remark.text
        );
    }
}

#[test]
fn published_bands_find_their_orbitals() {
    let (mut bands, mut chosen, mut named) = (0, 0, 0);
    for described in [true, false] {
        println!("--- classes {described}");
        for (molecule, _) in MOLECULES {
            let truth = band_rows(molecule);
            let start = std::time::Instant::now();
            let outcome = run(&levels(molecule, described), published(molecule));
            println!("{:?}", start.elapsed());
            let mut shown = truth.clone();
            if !described {
                shown
                    .iter_mut()
                    .for_each(|r| r.orbitals = r.orbitals.replace('π', "p"));
            }
            print(molecule, &outcome, &shown);
            for (n, row) in shown.iter().enumerate() {
                let (p, c) = reading(&outcome, n + 1, &row.orbitals);
                bands += 1;
                chosen += usize::from(c);
                named += usize::from(c || p >= 0.05);
            }
        }
    }
    println!("{bands} bands, {chosen} on the published orbital, {named} named");
}

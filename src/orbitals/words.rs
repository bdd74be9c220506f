//! A verdict in a chemist's words.

use super::evidence::{BondEvidence, Evidence};
use super::frame::Frame;
use super::verdict::LONE_PAIR_SHARE;
use crate::levels::Verdict;
use crate::molecule::Molecule;

/// Above this π share an orbital is called π, below its complement σ.
const PURE_SHARE: f64 = 0.9;
/// A bond is named from this share of the largest overlap population on.
const NAMED_BOND: f64 = 0.25;
/// What an orbital with another verdict does against a bond is named from this share on.
const NAMED_AGAINST: f64 = 0.4;
/// Least overlap population of a bond that is named at all, electrons.
const LEAST_POPULATION: f64 = 0.02;
/// An atom of a nonbonding orbital is named from this share on.
const NAMED_ATOM: f64 = 0.15;
/// More bonds than this are not listed one by one.
const LONGEST_LIST: usize = 4;

/// One phrase, for example `S lone pair, π (out of plane); HOMO`. `below_homo` counts the
/// degenerate sets between this one and the highest occupied, 0 for that itself.
pub fn describe(
    molecule: &Molecule,
    frame: &Frame,
    evidence: &Evidence,
    verdict: Verdict,
    below_homo: usize,
) -> String {
    let kind = Kind::of(frame, evidence);
    let mut text = match verdict {
        Verdict::Bonding => bonding(molecule, evidence, kind),
        Verdict::Antibonding => {
            let names = bond_names(molecule, evidence, -1.0, NAMED_BOND);
            kind.before(&format!("antibonding: {}", or_all_atoms(names)))
        }
        Verdict::LonePair => {
            let atom = largest(evidence);
            // Without a plane or axis the words describe bonds, which a lone pair has none of.
            let after = if *frame == Frame::Solid {
                ""
            } else {
                kind.after()
            };
            format!("{} lone pair{after}", short_name(molecule, atom))
        }
        Verdict::Nonbonding => nonbonding(molecule, evidence, kind),
        Verdict::Mixed => {
            let [holds, drives] = [1.0, -1.0]
                .map(|sign| or_all_atoms(bond_names(molecule, evidence, sign, NAMED_BOND)));
            kind.before(&format!("mixed, bonding: {holds}; antibonding: {drives}"))
        }
    };
    match evidence.orbitals.len() {
        1 => {}
        2 => text += ", doubly degenerate",
        3 => text += ", triply degenerate",
        n => text += &format!(", {n}-fold degenerate"),
    }
    match below_homo {
        0 => text += "; HOMO",
        n => text += &format!("; HOMO−{n}"),
    }
    text
}

/// What is known about σ and π.
#[derive(Clone, Copy, PartialEq)]
enum Kind {
    Sigma { plane: bool },
    Pi { plane: bool },
    AtomS,
    AtomP,
    Unknown,
}

impl Kind {
    fn of(frame: &Frame, evidence: &Evidence) -> Kind {
        let plane = matches!(frame, Frame::Planar(_));
        match (frame, evidence.pi_share) {
            (Frame::Atom, _) if evidence.s_share > PURE_SHARE => Kind::AtomS,
            (Frame::Atom, _) if evidence.s_share < 1.0 - PURE_SHARE => Kind::AtomP,
            (_, Some(pi)) if pi > PURE_SHARE => Kind::Pi { plane },
            (_, Some(pi)) if pi < 1.0 - PURE_SHARE => Kind::Sigma { plane },
            (Frame::Solid, _) => Kind::of_bonds(evidence),
            _ => Kind::Unknown,
        }
    }

    /// Without a plane or axis the bonds decide: all named bonds σ, or all π.
    fn of_bonds(evidence: &Evidence) -> Kind {
        let total: f64 = evidence
            .bonds
            .iter()
            .map(|b| b.overlap_population.abs())
            .sum();
        let pi: f64 = evidence.bonds.iter().map(|b| b.pi_part.abs()).sum();
        if total < LEAST_POPULATION {
            Kind::Unknown
        } else if pi > 0.75 * total {
            Kind::Pi { plane: false }
        } else if pi < 0.25 * total {
            Kind::Sigma { plane: false }
        } else {
            Kind::Unknown
        }
    }

    fn before(self, words: &str) -> String {
        match self {
            Kind::Sigma { .. } => format!("σ {words}"),
            Kind::Pi { .. } => format!("π {words}"),
            _ => words.to_string(),
        }
    }

    fn after(self) -> &'static str {
        match self {
            Kind::Sigma { plane: true } => ", σ (in plane)",
            Kind::Sigma { plane: false } => ", σ",
            Kind::Pi { plane: true } => ", π (out of plane)",
            Kind::Pi { plane: false } => ", π",
            Kind::AtomS => ", s",
            Kind::AtomP => ", p",
            Kind::Unknown => "",
        }
    }
}

fn bonding(molecule: &Molecule, evidence: &Evidence, kind: Kind) -> String {
    let weak = evidence.net_overlap_population < 0.1 && evidence.bonded_overlap_population() < 0.1;
    let atom = largest(evidence);
    if weak && evidence.atom_shares[atom] >= LONE_PAIR_SHARE {
        return format!(
            "mostly {}{}, weakly bonding",
            short_name(molecule, atom),
            kind.after()
        );
    }
    let names = or_all_atoms(bond_names(molecule, evidence, 1.0, NAMED_BOND));
    let mut text = kind.before(&format!(
        "{}bonding: {names}",
        if weak { "weakly " } else { "" }
    ));
    let against = bond_names(molecule, evidence, -1.0, NAMED_AGAINST);
    if !against.is_empty() {
        text += &format!("; antibonding: {}", against.join(", "));
    }
    text
}

fn nonbonding(molecule: &Molecule, evidence: &Evidence, kind: Kind) -> String {
    let mut atoms: Vec<usize> = (0..evidence.atom_shares.len())
        .filter(|&a| evidence.atom_shares[a] >= NAMED_ATOM)
        .collect();
    // Equivalent atoms come in the order of the file, not of rounding.
    atoms.sort_by(|&a, &b| {
        let percent = |i: usize| (evidence.atom_shares[i] * 100.0).round();
        percent(b).total_cmp(&percent(a)).then(a.cmp(&b))
    });
    let held: f64 = atoms.iter().map(|&a| evidence.atom_shares[a]).sum();
    let names: Vec<String> = atoms.iter().map(|&a| short_name(molecule, a)).collect();
    let list = list(&names);
    let one_element = atoms
        .windows(2)
        .all(|w| molecule.atoms[w[0]].number == molecule.atoms[w[1]].number);
    if atoms.is_empty() {
        format!("nonbonding, spread over the molecule{}", kind.after())
    } else if one_element && held >= 0.8 && !molecule_has_bond(evidence, &atoms) {
        let symbol = molecule.atoms[atoms[0]].symbol();
        format!("nonbonding {symbol} lone pairs ({list}){}", kind.after())
    } else {
        format!("nonbonding, on {list}{}", kind.after())
    }
}

fn molecule_has_bond(evidence: &Evidence, atoms: &[usize]) -> bool {
    evidence
        .bonds
        .iter()
        .any(|b| b.atoms.iter().all(|a| atoms.contains(a)))
}

fn largest(evidence: &Evidence) -> usize {
    let shares = &evidence.atom_shares;
    (0..shares.len())
        .max_by(|&a, &b| shares[a].total_cmp(&shares[b]))
        .unwrap_or(0)
}

/// The bonds that hold (`sign` +1) or drive apart (−1), strongest first: element pairs such as
/// `C–H`, or single bonds where an element pair occurs with both signs.
fn bond_names(
    molecule: &Molecule,
    evidence: &Evidence,
    sign: f64,
    least_share: f64,
) -> Vec<String> {
    let largest = evidence
        .bonds
        .iter()
        .map(|b| b.overlap_population.abs())
        .fold(0.0, f64::max);
    let threshold = (least_share * largest).max(LEAST_POPULATION);
    let named = |sign: f64| {
        let mut bonds: Vec<&BondEvidence> = evidence
            .bonds
            .iter()
            .filter(|b| sign * b.overlap_population >= threshold)
            .collect();
        bonds.sort_by(|a, b| {
            let thousandth = |x: &BondEvidence| (x.overlap_population.abs() * 1e3).round();
            thousandth(b)
                .total_cmp(&thousandth(a))
                .then(a.atoms.cmp(&b.atoms))
        });
        bonds
    };
    let pair_name = |b: &BondEvidence| {
        let mut symbols = b.atoms.map(|a| molecule.atoms[a].symbol());
        // Carbon first, hydrogen last, else by the alphabet.
        symbols.sort_by_key(|s| (*s == "H", *s != "C", *s));
        format!("{}–{}", symbols[0], symbols[1])
    };
    let opposite: Vec<String> = named(-sign).into_iter().map(pair_name).collect();
    let mut names: Vec<String> = Vec::new();
    for bond in named(sign) {
        let pair = pair_name(bond);
        let name = if opposite.contains(&pair) {
            molecule.bond_name(bond.atoms)
        } else {
            pair
        };
        if !names.contains(&name) {
            names.push(name);
        }
    }
    if names.len() > LONGEST_LIST {
        names.truncate(LONGEST_LIST - 1);
        names.push("…".to_string());
    }
    names
}

fn or_all_atoms(names: Vec<String>) -> String {
    if names.is_empty() {
        "between atoms that are not neighbours".to_string()
    } else {
        names.join(", ")
    }
}

/// `S` where the molecule has one sulfur, `O2` where there are several oxygens.
fn short_name(molecule: &Molecule, atom: usize) -> String {
    let number = molecule.atoms[atom].number;
    if molecule.atoms.iter().filter(|a| a.number == number).count() == 1 {
        molecule.atoms[atom].symbol().to_string()
    } else {
        molecule.atom_name(atom)
    }
}

fn list(names: &[String]) -> String {
    match names {
        [] => String::new(),
        [one] => one.clone(),
        [first @ .., last] => format!("{} and {last}", first.join(", ")),
    }
}

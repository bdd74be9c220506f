//! Levels and bands made by hand, for the tests of this module.

use super::Conditions;
use crate::fit::{Band, Grouping, Member};
use crate::levels::{
    Character, HoleState, Level, Levels, LineKind, Method, MoleculeSummary, ScfSummary, Verdict,
};

/// A hole state without atoms or σ/π description: scheme `plain`, class `other`.
pub(super) fn state(label: &str, energy: f64, degeneracy: usize, verdict: Verdict) -> HoleState {
    HoleState {
        label: label.to_string(),
        ionization_energy_ev: energy,
        koopmans_ev: energy,
        pole_strength: 1.0,
        degeneracy,
        kind: LineKind::Main,
        leading_orbitals: Vec::new(),
        character: Character {
            verdict,
            description: String::new(),
            net_overlap_population: 0.0,
            atoms: Vec::new(),
            bonds: Vec::new(),
        },
        envelope: None,
    }
}

pub(super) fn levels(hole_states: Vec<HoleState>) -> Levels {
    Levels {
        schema: crate::levels::SCHEMA.to_string(),
        program: String::new(),
        molecule: MoleculeSummary {
            name: "sample".to_string(),
            formula: "CX".to_string(),
            charge: 0,
            multiplicity: 1,
            point_group: None,
            atoms: Vec::new(),
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

pub(super) fn band(id: usize, vertical: f64, area: f64, fwhm: f64) -> Band {
    let (position_sd, area_sd) = (0.004, 0.02 * area);
    Band {
        id,
        vertical_ev: vertical,
        vertical_sd: position_sd,
        maximum_ev: vertical,
        origin_ev: None,
        area,
        area_sd,
        fwhm_ev: fwhm,
        spacing_ev: None,
        significance: 500.0,
        peaks: vec![id - 1],
        members: vec![Member {
            peak: id - 1,
            position_ev: vertical,
            position_sd,
            area,
            area_sd,
        }],
    }
}

pub(super) fn grouping(bands: Vec<Band>) -> Grouping {
    Grouping {
        probability: 1.0,
        bands,
    }
}

pub(super) fn conditions() -> Conditions {
    Conditions {
        photon_energy_ev: Some(21.218),
        window_ev: [8.0, 20.0],
        scale_offset_sd_ev: 0.03,
    }
}

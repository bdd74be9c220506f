//! The studies of the Heather Moss air station.
//!
//! Ionization energies are published ones, recalled from the papers named ("memory"), as are the
//! vibrational quanta unless said otherwise. How strongly each vibration is excited, the widths,
//! the areas and all accidents are invented.

use super::{Band, Form, Gas, LampLine, Line, Mode, Published, Scenario, lines, progression};

const KIMURA: &str = "Kimura et al., Handbook of HeI Photoelectron Spectra (1981), memory";
const TURNER: &str = "Turner et al., Molecular Photoelectron Spectroscopy (1970), memory";
const BIERI: &str = "Bieri and Asbrink, J. Electron Spectrosc. 20, 149 (1980), memory";

/// All studies.
pub fn all() -> Vec<Scenario> {
    vec![hydrogen_sulfide(), formaldehyde(), furan()]
}

fn published(adiabatic_ev: f64, vertical_ev: f64, source: &'static str) -> Published {
    Published {
        adiabatic_ev: Some(adiabatic_ev),
        vertical_ev,
        source,
    }
}

fn mode(quantum_ev: f64, huang_rhys: f64) -> Mode {
    Mode {
        quantum_ev,
        huang_rhys,
    }
}

/// Hydrogen sulfide with nitrogen in the cell.
fn hydrogen_sulfide() -> Scenario {
    Scenario {
        name: "hydrogen-sulfide",
        molecule: "hydrogen sulfide",
        story: "Bog gas from the heated cell, lamp behind its monochromator; the purge valve \
                leaked, so dry nitrogen is in the cell.",
        bands: vec![
            Band {
                state: "X 2B1",
                orbital: "2b1",
                origin_ev: 10.466,
                published: published(10.466, 10.48, KIMURA),
                // The origin dominates (Hochlaf, Weitzel, Ng, J. Chem. Phys. 120, 6944 (2004),
                // abstract); stretch 2480 and bend 1160 cm-1: memory.
                members: progression(&[mode(0.3075, 0.06), mode(0.1438, 0.035)], 0.010, 0.002),
                area: 130_000.0,
            },
            Band {
                state: "A 2A1",
                orbital: "5a1",
                origin_ev: 12.78,
                published: published(12.78, 13.4, KIMURA),
                members: bent_to_linear(),
                area: 110_000.0,
            },
            Band {
                state: "B 2B2",
                orbital: "2b2",
                origin_ev: 14.8,
                published: published(14.8, 15.5, KIMURA),
                // Diffuse: the ion falls apart; the stretch is blurred away.
                members: progression(&[mode(0.23, 3.04)], 0.26, 0.01),
                area: 95_000.0,
            },
        ],
        gases: vec![nitrogen(9_500.0)],
        lamp: vec![],
        window_ev: [9.6, 16.6],
        step_ev: 0.005,
        resolution_ev: 0.025,
        background: [90.0, 170.0],
        offset_ev: 0.018,
        form: Form::IonizationCommas,
        seed: 20_140_311,
    }
}

/// The bending progression of a bent molecule that becomes nearly linear: quanta first fall, then
/// rise again, and the members blur from v = 5 on ("The electronic spectrum of the H2S+ ion
/// radical", abstract, Ohio State symposium on molecular spectroscopy 1972: bending intervals that
/// fall and rise again, sub-bands lost to predissociation from v = 5 on). The size of the quanta,
/// 0.11 eV, is from memory.
fn bent_to_linear() -> Vec<Line> {
    let factor = 5.65;
    let mut weight = 1.0;
    let mut offset_ev = 0.0;
    let mut members = Vec::new();
    for v in 0..18 {
        let quanta = f64::from(v);
        members.push(Line {
            offset_ev,
            share: weight,
            gaussian_fwhm_ev: 0.015 + 0.003 * quanta,
            lorentzian_fwhm_ev: if v < 5 { 0.0 } else { 0.02 * (quanta - 4.0) },
        });
        weight *= factor / (quanta + 1.0);
        offset_ev += 0.108 + 0.000_25 * (quanta - 5.0).powi(2);
    }
    let total: f64 = members.iter().map(|m| m.share).sum();
    members.iter_mut().for_each(|m| m.share /= total);
    members
}

/// Formaldehyde with the lamp's monochromator taken out.
fn formaldehyde() -> Scenario {
    Scenario {
        name: "formaldehyde",
        molecule: "formaldehyde",
        story: "Gas over warmed peat, lamp without its monochromator for more light: its weaker \
                lines ionize too.",
        bands: vec![
            Band {
                state: "X 2B2",
                orbital: "2b2",
                origin_ev: 10.885,
                published: published(10.885, 10.9, TURNER),
                // 0-0 dominates; nu1 2580, nu2 1590, nu3 1210 cm-1 (Turner et al., memory).
                members: progression(
                    &[mode(0.3199, 0.05), mode(0.1971, 0.12), mode(0.15, 0.09)],
                    0.010,
                    0.001,
                ),
                area: 120_000.0,
            },
            Band {
                state: "A 2B1",
                orbital: "1b1",
                origin_ev: 14.1,
                published: published(14.1, 14.5, TURNER),
                // C=O stretch, 1210 cm-1 (Turner et al., memory), long.
                members: progression(&[mode(0.15, 2.75)], 0.055, 0.008),
                area: 80_000.0,
            },
            Band {
                state: "B 2A1",
                orbital: "5a1",
                origin_ev: 15.85,
                published: published(15.85, 16.1, TURNER),
                members: progression(&[mode(0.157, 1.6)], 0.10, 0.02),
                area: 95_000.0,
            },
            Band {
                state: "C 2B2",
                orbital: "1b2",
                origin_ev: 16.9,
                published: published(16.9, 17.0, TURNER),
                members: progression(&[mode(0.12, 1.4)], 0.16, 0.02),
                area: 50_000.0,
            },
        ],
        gases: vec![],
        lamp: vec![
            // He I beta 23.087 and gamma 23.742 eV, 1.2-2 % and 0.2-0.5 % of alpha (memory).
            LampLine {
                name: "He I beta",
                excess_ev: 1.869,
                relative_intensity: 0.015,
            },
            LampLine {
                name: "He I gamma",
                excess_ev: 2.524,
                relative_intensity: 0.0025,
            },
        ],
        window_ev: [8.6, 18.2],
        step_ev: 0.005,
        resolution_ev: 0.022,
        background: [150.0, 270.0],
        offset_ev: -0.012,
        form: Form::IonizationCommas,
        seed: 20_140_902,
    }
}

/// A band of the data bank, whose vertical energy is published and whose vibrations merge: one
/// mode, blurred by `width_ev`, with the first moment at the published value.
fn blurred(
    state: &'static str,
    orbital: &'static str,
    vertical_ev: f64,
    mode: Mode,
    width_ev: f64,
    area: f64,
) -> Band {
    Band {
        state,
        orbital,
        origin_ev: vertical_ev - mode.quantum_ev * mode.huang_rhys,
        published: Published {
            adiabatic_ev: None,
            vertical_ev,
            source: BIERI,
        },
        members: progression(&[mode], width_ev, 0.01),
        area,
    }
}

/// Furan with a trace of water.
fn furan() -> Scenario {
    Scenario {
        name: "furan",
        molecule: "furan",
        story: "Vapour of charred peat, lamp behind its monochromator; the cell was not baked long \
                enough and still gives off water.",
        bands: vec![
            Band {
                state: "X 2A2",
                orbital: "1a2",
                origin_ev: 8.883,
                published: published(8.883, 8.89, KIMURA),
                members: progression(&[mode(0.173, 0.34), mode(0.134, 0.30)], 0.014, 0.003),
                area: 130_000.0,
            },
            Band {
                state: "A 2B1",
                orbital: "2b1",
                origin_ev: 10.25,
                published: published(10.25, 10.32, KIMURA),
                members: progression(&[mode(0.107, 0.75)], 0.050, 0.008),
                area: 125_000.0,
            },
            blurred("B", "9a1", 12.9, mode(0.115, 1.8), 0.12, 120_000.0),
            blurred("C", "8a1", 13.8, mode(0.12, 1.5), 0.15, 110_000.0),
            blurred("D", "6b2", 14.4, mode(0.13, 1.2), 0.13, 130_000.0),
            blurred("E", "5b2", 15.3, mode(0.1, 0.8), 0.14, 115_000.0),
            blurred("F", "1b1", 15.6, mode(0.15, 0.9), 0.16, 100_000.0),
            blurred("G", "7a1", 17.5, mode(0.12, 1.5), 0.20, 80_000.0),
            blurred("H", "4b2", 18.2, mode(0.12, 1.3), 0.20, 85_000.0),
            blurred("I", "6a1", 18.8, mode(0.11, 1.2), 0.20, 70_000.0),
        ],
        gases: vec![water(3_600.0)],
        lamp: vec![],
        window_ev: [8.3, 19.6],
        step_ev: 0.005,
        resolution_ev: 0.030,
        background: [110.0, 330.0],
        offset_ev: 0.025,
        form: Form::KineticSemicolons,
        seed: 20_141_127,
    }
}

/// Nitrogen; `area` is that of its X band in counts. Origins and Franck-Condon factors: Huber and
/// Herzberg (1979) constants, memory, in Morse curves. Partial cross sections X : A : B at He I of
/// 1 : 1.4 : 0.3, memory.
fn nitrogen(area: f64) -> Gas {
    let source = "Huber and Herzberg, Constants of Diatomic Molecules (1979), memory";
    let x = [(0.0, 0.9168), (0.2696, 0.0783), (0.5353, 0.0047)];
    let a = [
        (0.0, 0.2638),
        (0.2323, 0.3185),
        (0.4609, 0.2199),
        (0.6857, 0.1150),
        (0.9069, 0.0509),
        (1.1243, 0.0203),
        (1.338, 0.0075),
    ];
    let b = [(0.0, 0.8826), (0.2943, 0.1153), (0.5828, 0.0022)];
    let band = |state, orbital, origin_ev, vertical_ev, members: &[(f64, f64)], area| Band {
        state,
        orbital,
        origin_ev,
        published: published(origin_ev, vertical_ev, source),
        members: lines(members, 0.008),
        area,
    };
    Gas {
        name: "N2",
        bands: vec![
            band("X", "3sigma_g", 15.5808, 15.58, &x, area),
            band("A", "1pi_u", 16.6987, 16.93, &a, 1.4 * area),
            band("B", "2sigma_u", 18.7507, 18.75, &b, 0.3 * area),
        ],
    }
}

/// Water; `area` is that of its X band in counts. The two wider bands hardly rise above the noise
/// of what they lie under, but they are there.
fn water(area: f64) -> Gas {
    let source = "Karlsson et al., J. Chem. Phys. 62, 4745 (1975), memory";
    let band = |state, orbital, origin_ev, vertical_ev, members, area| Band {
        state,
        orbital,
        origin_ev,
        published: published(origin_ev, vertical_ev, source),
        members,
        area,
    };
    // nu1 3213 and nu2 1408 cm-1 (Reutt et al. 1986, memory).
    let x = lines(
        &[(0.0, 0.75), (0.1746, 0.07), (0.3984, 0.165), (0.573, 0.015)],
        0.012,
    );
    let a = progression(&[mode(0.1125, 8.0)], 0.05, 0.004);
    let b = progression(&[mode(0.197, 6.0)], 0.25, 0.01);
    Gas {
        name: "H2O",
        bands: vec![
            band("X", "1b1", 12.6188, 12.62, x, area),
            band("A", "3a1", 13.84, 14.74, a, area),
            band("B", "1b2", 17.19, 18.51, b, 0.9 * area),
        ],
    }
}

//! Invented dossiers: shapes and numbers are plausible, nothing in them was measured.

use super::recipe::{Recipe, line, owned, progression, uniform};
use bandproof::assign::{Candidate, Remark, RemarkKind};
use bandproof::fit::{BandFit, Grouping};
use bandproof::levels::Verdict::{Antibonding, Bonding, LonePair, Mixed, Nonbonding};
use bandproof::report::Dossier;
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;

fn remark(kind: RemarkKind, at: f64, band: Option<usize>, cause: &str, text: &str) -> Remark {
    let candidates = match cause {
        "" => Vec::new(),
        cause => vec![Candidate {
            cause: cause.to_owned(),
            expected_ev: at - 0.004,
            deviation_ev: 0.004,
            probability: 0.96,
        }],
    };
    Remark {
        kind,
        position_ev: at,
        band,
        candidates,
        text: text.to_owned(),
    }
}

/// Three bands of a small molecule, and a line of nitrogen on the flank of the third.
pub fn sulfide() -> Dossier {
    Recipe {
        title: "hydrogen sulfide",
        formula: "H2S",
        axis: uniform(9.5, 18.5, 900),
        exposure: 0.01,
        unit: "counts per eV",
        background: |x| 3_000.0 + 350.0 * (x - 9.5),
        shapes: vec![
            progression(10.47, 0.29, 0.105, 9_000.0, 0.05),
            progression(12.78, 0.14, 4.4, 12_000.0, 0.07),
            progression(14.8, 0.23, 3.0, 11_000.0, 0.20),
            line(15.58, 1_500.0, 0.05),
        ],
        states: owned(&[
            ("2b1", 10.49, LonePair, "S lone pair, π (out of plane)", Some(1)),
            ("5a1", 13.72, Mixed, "S–H σ and S lone pair", Some(2)),
            ("2b2", 16.11, Bonding, "S–H σ", Some(3)),
        ]),
        scale: 0.94,
        shift: 0.5,
        remarks: vec![remark(
            RemarkKind::ForeignGas,
            15.58,
            Some(4),
            "N2 X v=0",
            "A sharp line at 15.580 eV on the flank of band 3 fits the X line of dinitrogen; its v=1 member at 15.851 eV would settle it.",
        )],
    }
    .cook()
}

/// Eleven bands and ten states in twelve electronvolts.
pub fn crowded() -> Dossier {
    Recipe {
        title: "furan",
        formula: "C4H4O",
        axis: uniform(8.0, 20.5, 1250),
        exposure: 0.01,
        unit: "counts per eV",
        background: |x| 4_000.0 + 900.0 * (x - 8.0),
        shapes: vec![
            line(7.03 + 1.5, 260.0, 0.06),
            progression(8.88, 0.17, 0.9, 9_500.0, 0.06),
            progression(10.31, 0.15, 0.8, 8_200.0, 0.07),
            line(12.62, 900.0, 0.045),
            line(13.0, 6_000.0, 0.55),
            line(13.75, 5_500.0, 0.40),
            line(14.4, 6_000.0, 0.45),
            line(15.2, 7_500.0, 0.40),
            line(15.6, 5_500.0, 0.50),
            line(17.5, 4_000.0, 0.60),
            line(18.8, 4_500.0, 0.60),
        ],
        states: owned(&[
            ("1a2", 8.72, Bonding, "C=C π", Some(2)),
            ("2b1", 10.83, Bonding, "C=C π and O lone pair", Some(3)),
            ("9a1", 14.40, LonePair, "O lone pair, in the plane", Some(5)),
            ("8a1", 15.28, Bonding, "C–C σ", Some(6)),
            ("6b2", 15.65, Nonbonding, "C–H σ", Some(7)),
            ("5b2", 16.95, Antibonding, "C–O σ*", Some(8)),
            ("1b1", 17.16, Bonding, "π all round the ring", Some(8)),
            ("7a1", 17.20, Bonding, "C–H σ", Some(9)),
            ("6a1", 20.05, Bonding, "C–C σ", Some(10)),
            ("4b2", 21.30, Bonding, "C–H σ", Some(11)),
            ("5a1", 22.30, Bonding, "C–O σ", None),
        ]),
        scale: 0.86,
        shift: 1.0,
        remarks: vec![
            remark(
                RemarkKind::ForeignGas,
                12.62,
                Some(4),
                "H2O X (000)",
                "A sharp line at 12.620 eV fits water in the cell.",
            ),
            remark(
                RemarkKind::LampSatellite,
                8.53,
                Some(1),
                "He I β of band 3",
                "A weak feature 1.87 eV below band 3 fits the β line of the lamp.",
            ),
            remark(
                RemarkKind::MissingBand,
                20.18,
                None,
                "",
                "5a1 is expected at 20.18 eV, where no band was found.",
            ),
        ],
    }
    .cook()
}

/// One band, few points, few counts.
pub fn one_band() -> Dossier {
    Recipe {
        title: "argon-like",
        formula: "Ar",
        axis: uniform(15.2, 16.4, 61),
        exposure: 0.02,
        unit: "counts",
        background: |_| 200.0,
        shapes: vec![line(15.76, 60.0, 0.12)],
        states: owned(&[("3p", 16.05, Nonbonding, "Ar 3p, doublet", Some(1))]),
        scale: 1.0,
        shift: -0.28,
        remarks: Vec::new(),
    }
    .cook()
}

/// Noise.
pub fn empty() -> Dossier {
    Recipe {
        title: "nothing there",
        formula: "He",
        axis: uniform(8.0, 20.0, 301),
        exposure: 0.05,
        unit: "counts",
        background: |x| 100.0 + 4.0 * x,
        shapes: Vec::new(),
        states: owned(&[("1s", 24.98, Nonbonding, "He 1s", None)]),
        scale: 1.0,
        shift: 0.0,
        remarks: Vec::new(),
    }
    .cook()
}

/// Eight thousand points, denser towards high energy, as flight times give.
pub fn dense() -> Dossier {
    let axis = (0..8000)
        .map(|i| 21.2 - 11.7 / (1.0 + f64::from(i) / 6500.0).powi(2))
        .collect();
    Recipe {
        title: "trans-1,2-dichloroethene",
        formula: "C2H2Cl2",
        axis,
        exposure: 0.002,
        unit: "counts per eV",
        background: |x| 20_000.0 + 9_000.0 * (0.5 * (x - 18.5)).exp(),
        shapes: vec![
            progression(9.64, 0.17, 0.7, 60_000.0, 0.09),
            line(11.9, 80_000.0, 0.22),
            line(12.2, 60_000.0, 0.20),
            line(12.7, 70_000.0, 0.25),
            line(14.0, 65_000.0, 0.30),
            progression(15.58, 0.27, 0.08, 25_000.0, 0.06),
            line(16.4, 50_000.0, 0.40),
            line(18.4, 45_000.0, 0.70),
        ],
        states: owned(&[
            ("orbital 24", 9.98, Bonding, "C=C π", Some(1)),
            ("orbital 23", 13.01, LonePair, "Cl lone pairs", Some(2)),
            ("orbital 22", 13.21, LonePair, "Cl lone pairs", Some(3)),
            ("orbital 21", 13.25, LonePair, "Cl lone pairs", Some(3)),
            ("orbital 20", 13.88, LonePair, "Cl lone pairs", Some(4)),
            ("orbital 19", 15.36, Bonding, "C–Cl σ", Some(5)),
            ("orbital 18", 18.3, Bonding, "C–H σ", Some(7)),
            ("orbital 17", 20.9, Bonding, "C–C σ", Some(8)),
        ]),
        scale: 0.89,
        shift: 0.6,
        remarks: vec![remark(
            RemarkKind::ForeignGas,
            15.58,
            Some(6),
            "N2 X v=0",
            "The calibration gas.",
        )],
    }
    .cook()
}

/// Many states in one window.
pub fn large(states: usize) -> Dossier {
    let verdicts = [Bonding, LonePair, Nonbonding, Antibonding, Mixed];
    let many = (0..states)
        .map(|i| {
            let share = i as f64 / states as f64;
            let energy = 9.0 + 12.0 * share.sqrt() + 0.3 * (i as f64 * 1.7).sin();
            let label = format!("orbital {}", 2 * states - i);
            (
                label,
                energy,
                verdicts[i % 5],
                String::new(),
                Some(1 + (i * 12) / states),
            )
        })
        .collect();
    Recipe {
        title: "a large molecule",
        formula: "C20H14",
        axis: uniform(7.0, 20.0, 700),
        exposure: 0.02,
        unit: "counts",
        background: |_| 300.0,
        shapes: (0..12)
            .map(|i| {
                line(
                    8.2 + 0.9 * f64::from(i),
                    900.0 + 90.0 * f64::from(i % 4),
                    0.7,
                )
            })
            .collect(),
        states: many,
        scale: 0.9,
        shift: 0.1,
        remarks: Vec::new(),
    }
    .cook()
}

/// Whatever the seed gives: up to 16 bands, some of them foreign, and up to 30 states.
pub fn random(seed: u64) -> Dossier {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let bands = rng.random_range(0..16usize);
    let states = rng.random_range(0..30usize);
    let verdicts = [Bonding, LonePair, Nonbonding, Antibonding, Mixed];
    let causes = [
        "N2 X v=0",
        "He I β of band 12",
        "H2O X (000)",
        "",
        "an impurity nobody thought of",
    ];
    let mut shapes = Vec::new();
    let mut remarks = Vec::new();
    for _ in 0..bands {
        let at = rng.random_range(8.1..19.9);
        let area = 10f64.powf(rng.random_range(2.0..4.3));
        shapes.push(match rng.random_bool(0.3) {
            true => progression(at, 0.17, rng.random_range(0.2..4.0), area, 0.07),
            false => line(at, area, rng.random_range(0.05..0.9)),
        });
        if rng.random_bool(0.3) {
            let cause = causes[rng.random_range(0..causes.len())];
            let kind = match cause {
                "" => RemarkKind::Unexplained,
                _ => RemarkKind::ForeignGas,
            };
            let band = rng.random_bool(0.8).then_some(shapes.len());
            remarks.push(remark(kind, at, band, cause, "Seen."));
        }
    }
    let many = (0..states).map(|i| {
        let energy = rng.random_range(8.0..24.0);
        let band = (bands > 0 && rng.random_bool(0.8)).then(|| rng.random_range(1..=bands));
        (
            format!("{}b1g", i + 1),
            energy,
            verdicts[i % 5],
            "C–C σ".to_owned(),
            band,
        )
    });
    Recipe {
        title: "a molecule with a rather long systematic name, longer than the width of a page of a journal leaves room for",
        formula: "C10H8",
        states: many.collect(),
        axis: uniform(8.0, 20.0, rng.random_range(60..1500)),
        exposure: 0.01,
        unit: "counts per eV",
        background: |x| 2_000.0 + 100.0 * x,
        shapes,
        scale: 0.85,
        shift: 0.9,
        remarks,
    }
    .cook()
}

/// The fit that belongs to a dossier, with a second way to group its lines.
pub fn fit_of(dossier: &Dossier) -> BandFit {
    let fewer = dossier.bands[1..].to_vec();
    BandFit {
        peaks: dossier.fit.peaks.clone(),
        groupings: vec![
            Grouping {
                probability: 0.83,
                bands: dossier.bands.clone(),
            },
            Grouping {
                probability: 0.17,
                bands: fewer,
            },
        ],
        background: dossier.overlay.background.clone(),
        total: dossier.overlay.fit.clone(),
        residuals: dossier.overlay.residual.clone(),
        window_ev: dossier.trace.span_ev,
        statistics: dossier.fit.statistics.clone(),
        undetermined: dossier.fit.undetermined.clone(),
        correlations: dossier.fit.correlations.clone(),
    }
}

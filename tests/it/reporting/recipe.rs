//! How an invented dossier is made from a list of bands and states.

use bandproof::assign::{Alternative, Evidence, Match, Remark, Stance};
use bandproof::fit::{Band, CorrelatedPair, FitStatistics, Member, Peak};
use bandproof::levels::{
    self, AtomLine, AtomShare, BondShare, Character, HoleState, Level, Levels, LineKind, Method,
    MoleculeSummary, OrbitalLine, OrbitalWeight, ScfSummary, Spin, Verdict,
};
use bandproof::report::{
    AssignmentSummary, BandCurve, Direction, Dossier, FitSummary, GroupingOdds, Overlay,
    OverlayStick, PredictedCurve, SCHEMA, TraceSummary,
};
use bandproof::trace::{Axis, Noise};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Poisson};

/// A band to invent: members (energy, area), width of each.
pub struct Shape {
    members: Vec<(f64, f64)>,
    fwhm: f64,
}

pub fn line(at: f64, area: f64, fwhm: f64) -> Shape {
    Shape {
        members: vec![(at, area)],
        fwhm,
    }
}

/// Members with Poisson-like heights about a mean number of quanta.
pub fn progression(origin: f64, spacing: f64, mean: f64, area: f64, fwhm: f64) -> Shape {
    let mut weight = (-mean).exp();
    let mut members = Vec::new();
    for v in 0..14 {
        if weight > 0.012 {
            members.push((origin + spacing * f64::from(v), area * weight));
        }
        weight *= mean / f64::from(v + 1);
    }
    Shape { members, fwhm }
}

pub fn profile(x: f64, centre: f64, area: f64, fwhm: f64) -> f64 {
    let s = fwhm / 2.354_82;
    area * (-0.5 * ((x - centre) / s).powi(2)).exp() / (s * 2.506_628_27)
}

impl Shape {
    fn at(&self, x: f64) -> f64 {
        let parts = self.members.iter();
        parts.map(|(e, a)| profile(x, *e, *a, self.fwhm)).sum()
    }

    fn area(&self) -> f64 {
        self.members.iter().map(|m| m.1).sum()
    }

    fn vertical(&self) -> f64 {
        self.members.iter().map(|m| m.0 * m.1).sum::<f64>() / self.area()
    }

    fn maximum(&self) -> f64 {
        let (low, high) = (
            self.members[0].0 - 0.2,
            self.members[self.members.len() - 1].0 + 0.2,
        );
        let grid = (0..=2000).map(|i| low + (high - low) * f64::from(i) / 2000.0);
        grid.max_by(|a, b| self.at(*a).total_cmp(&self.at(*b)))
            .unwrap()
    }
}

/// A computed state to invent: label, computed energy, verdict, description, band that shows it.
pub type State = (&'static str, f64, Verdict, &'static str, Option<usize>);

pub struct Recipe {
    pub title: &'static str,
    pub formula: &'static str,
    pub axis: Vec<f64>,
    pub exposure: f64,
    pub unit: &'static str,
    pub background: fn(f64) -> f64,
    pub shapes: Vec<Shape>,
    pub states: Vec<(String, f64, Verdict, String, Option<usize>)>,
    pub scale: f64,
    pub shift: f64,
    pub remarks: Vec<Remark>,
}

pub fn owned(states: &[State]) -> Vec<(String, f64, Verdict, String, Option<usize>)> {
    let own = |s: &State| (s.0.to_owned(), s.1, s.2, s.3.to_owned(), s.4);
    states.iter().map(own).collect()
}

pub fn uniform(low: f64, high: f64, n: usize) -> Vec<f64> {
    let step = (high - low) / (n - 1) as f64;
    (0..n).map(|i| low + step * i as f64).collect()
}

pub fn character(verdict: Verdict, description: &str) -> Character {
    Character {
        verdict,
        description: description.to_owned(),
        net_overlap_population: 0.12,
        atoms: vec![AtomShare {
            atom: 0,
            name: "S1".to_owned(),
            share: 0.93,
        }],
        bonds: vec![BondShare {
            atoms: [0, 1],
            name: "S1–H2".to_owned(),
            overlap_population: 0.06,
        }],
    }
}

impl Recipe {
    pub fn cook(self) -> Dossier {
        let mut rng = ChaCha8Rng::seed_from_u64(7);
        // Few channels: the curves get an axis of their own.
        let few = self.axis.len() < 100;
        let grid = match (self.axis.first(), self.axis.last()) {
            (Some(a), Some(b)) => uniform(*a, *b, 900),
            _ => Vec::new(),
        };
        let smooth = if few { &grid } else { &self.axis };
        let background: Vec<f64> = self.axis.iter().map(|x| (self.background)(*x)).collect();
        let curves: Vec<Vec<f64>> = self
            .shapes
            .iter()
            .map(|s| self.axis.iter().map(|x| s.at(*x)).collect())
            .collect();
        let backdrop: Vec<f64> = smooth.iter().map(|x| (self.background)(*x)).collect();
        let drawn: Vec<Vec<f64>> = self
            .shapes
            .iter()
            .map(|s| smooth.iter().map(|x| s.at(*x)).collect())
            .collect();
        let fit = (0..smooth.len())
            .map(|i| backdrop[i] + drawn.iter().map(|c| c[i]).sum::<f64>())
            .collect();
        let curve_ev = if few { grid.clone() } else { Vec::new() };
        let total: Vec<f64> = (0..self.axis.len())
            .map(|i| background[i] + curves.iter().map(|c| c[i]).sum::<f64>())
            .collect();
        let counts: Vec<f64> = total
            .iter()
            .map(|t| {
                Poisson::new((t * self.exposure).max(1e-3))
                    .unwrap()
                    .sample(&mut rng)
            })
            .collect();
        let intensity: Vec<f64> = counts.iter().map(|c| c / self.exposure).collect();
        let intensity_sd: Vec<f64> = counts
            .iter()
            .map(|c| c.max(1.0).sqrt() / self.exposure)
            .collect();
        let residual = (0..counts.len())
            .map(|i| {
                let expected = total[i] * self.exposure;
                (counts[i] - expected) / expected.max(1.0).sqrt()
            })
            .collect();
        let mut peaks = Vec::new();
        let mut bands = Vec::new();
        for (k, shape) in self.shapes.iter().enumerate() {
            let mut members = Vec::new();
            for (energy, area) in &shape.members {
                members.push(Member {
                    peak: peaks.len(),
                    position_ev: *energy,
                    position_sd: 0.0014,
                    area: *area,
                    area_sd: area.sqrt(),
                });
                peaks.push(Peak {
                    position_ev: *energy,
                    position_sd: 0.0014,
                    area: *area,
                    area_sd: area.sqrt(),
                    gaussian_fwhm_ev: shape.fwhm,
                    lorentzian_fwhm_ev: 0.0,
                    fwhm_ev: shape.fwhm,
                    fwhm_sd: Some(0.002),
                    significance: 140.0,
                });
            }
            let resolved = members.len() > 1;
            bands.push(Band {
                id: k + 1,
                vertical_ev: shape.vertical(),
                vertical_sd: if resolved { 0.0021 } else { 0.012 },
                maximum_ev: shape.maximum(),
                origin_ev: resolved.then(|| shape.members[0].0),
                area: shape.area(),
                area_sd: shape.area().sqrt(),
                fwhm_ev: if resolved {
                    4.0 * shape.fwhm
                } else {
                    shape.fwhm
                },
                spacing_ev: resolved.then(|| shape.members[1].0 - shape.members[0].0),
                significance: 300.0,
                peaks: members.iter().map(|m: &Member| m.peak).collect(),
                members,
            });
        }
        let move_to = |e: f64| self.scale * e + self.shift;
        let mut matches: Vec<Match> = Vec::new();
        for band in &bands {
            let shown: Vec<_> = self
                .states
                .iter()
                .filter(|s| s.4 == Some(band.id))
                .collect();
            if shown.is_empty() {
                continue;
            }
            let mean = shown.iter().map(|s| s.1).sum::<f64>() / shown.len() as f64;
            let first = shown[0].0.clone();
            matches.push(Match {
                band: band.id,
                hole_states: shown.iter().map(|s| s.0.clone()).collect(),
                probability: if band.id % 3 == 0 { 0.81 } else { 0.994 },
                character: shown.iter().map(|s| character(s.2, &s.3)).collect(),
                residual_raw_ev: band.vertical_ev - mean,
                residual_ev: band.vertical_ev - move_to(mean),
                evidence: vec![
                    Evidence {
                        stance: Stance::For,
                        weight: 2.3,
                        text: format!("{first} stands {:.2} eV from the band.", 0.11),
                    },
                    Evidence {
                        stance: Stance::Against,
                        weight: -0.4,
                        text: "The band is wider than lone pairs usually are.".to_owned(),
                    },
                ],
                alternatives: match band.id % 3 {
                    0 => vec![
                        Alternative {
                            hole_states: vec![self.states[0].0.clone()],
                            probability: 0.16,
                        },
                        Alternative {
                            hole_states: Vec::new(),
                            probability: 0.03,
                        },
                    ],
                    _ => Vec::new(),
                },
            });
        }
        let hole_states = self
            .states
            .iter()
            .enumerate()
            .map(|(i, s)| HoleState {
                label: s.0.clone(),
                ionization_energy_ev: s.1,
                koopmans_ev: s.1,
                pole_strength: 1.0,
                degeneracy: 1,
                kind: LineKind::Main,
                leading_orbitals: vec![OrbitalWeight {
                    index: i,
                    weight: 1.0,
                }],
                character: character(s.2, &s.3),
                envelope: None,
            })
            .collect();
        let predicted = PredictedCurve {
            intensity: grid
                .iter()
                .map(|x| {
                    self.states
                        .iter()
                        .map(|s| profile(*x, move_to(s.1), 1.0, 0.45))
                        .sum()
                })
                .collect(),
            energy_ev: grid,
        };
        let sticks = self
            .states
            .iter()
            .map(|s| OverlayStick {
                label: s.0.clone(),
                computed_ev: s.1,
                shifted_ev: move_to(s.1),
                height: if s.3.contains("doublet") { 2.0 } else { 1.0 },
                band: s.4,
                verdict: s.2,
            })
            .collect();
        let unseen = self
            .states
            .iter()
            .filter(|s| s.4.is_none() && move_to(s.1) < 20.0);
        let unseen = unseen.map(|s| s.0.clone()).collect();
        let verticals = bands.iter().map(|b| b.vertical_ev).collect();
        Dossier {
            schema: SCHEMA.to_owned(),
            program: "bandproof 0.1.0".to_owned(),
            title: self.title.to_owned(),
            study: serde_json::from_str(
                r#"{"level":"koopmans/def2-tzvp","trace":{"file":"a.csv","photon_energy_ev":21.218},"fit":{"lines":null}}"#,
            )
            .unwrap(),
            trace: TraceSummary {
                source: "a.csv".to_owned(),
                channels: self.axis.len(),
                span_ev: [self.axis[0], self.axis[self.axis.len() - 1]],
                photon_energy_ev: Some(21.218),
                axis: Axis::Ionization,
                noise: Noise::Poisson,
                comments: vec!["Invented for the Heather Moss air station.".to_owned()],
            },
            levels: Levels {
                schema: levels::SCHEMA.to_owned(),
                program: "bandproof 0.1.0".to_owned(),
                molecule: MoleculeSummary {
                    name: self.title.to_owned(),
                    formula: self.formula.to_owned(),
                    charge: 0,
                    multiplicity: 1,
                    point_group: Some("C2v".to_owned()),
                    atoms: vec![AtomLine {
                        element: "S".to_owned(),
                        x: 0.0,
                        y: 0.0,
                        z: 0.1,
                    }],
                },
                level: Level {
                    method: Method::Koopmans,
                    basis: "def2-tzvp".to_owned(),
                    auxiliary: "def2-universal-jkfit".to_owned(),
                    correlation_auxiliary: None,
                    frozen_core: false,
                },
                scf: ScfSummary {
                    energy_hartree: -398.7,
                    nuclear_repulsion_hartree: 12.7,
                    iterations: 11,
                    converged: true,
                    dipole_debye: [0.0, 0.0, 1.1],
                },
                orbitals: vec![OrbitalLine {
                    index: 0,
                    spin: Spin::Both,
                    label: "1a1".to_owned(),
                    energy_hartree: -92.0,
                    energy_ev: -2503.4,
                    occupation: 2.0,
                    core: true,
                    character: None,
                }],
                hole_states,
                notes: Vec::new(),
            },
            matches,
            remarks: self.remarks,
            fit: FitSummary {
                statistics: FitStatistics {
                    chi_squared: 1.03 * self.axis.len() as f64,
                    degrees_of_freedom: self.axis.len(),
                    reduced_chi_squared: 1.03,
                    runs_score: -0.42,
                    runs_probability: 0.67,
                    iterations: 23,
                    stopped_because: "the deviance no longer falls".to_owned(),
                },
                peaks,
                undetermined: vec!["Lorentzian width of line 2".to_owned()],
                correlations: vec![CorrelatedPair {
                    first: "line 2 area".to_owned(),
                    second: "line 3 area".to_owned(),
                    correlation: -0.94,
                }],
                groupings: vec![GroupingOdds {
                    probability: 1.0,
                    vertical_ev: verticals,
                }],
            },
            assignment: AssignmentSummary {
                grouping: 0,
                grouping_probability: 1.0,
                shift_ev: self.shift,
                shift_sd_ev: 0.12,
                scale: self.scale,
                unseen,
            },
            overlay: Overlay {
                bands: bands
                    .iter()
                    .zip(drawn)
                    .map(|(b, intensity)| BandCurve {
                        band: b.id,
                        intensity,
                    })
                    .collect(),
                energy_ev: self.axis,
                intensity,
                intensity_sd,
                unit: self.unit.to_owned(),
                curve_ev,
                fit,
                background: backdrop,
                residual,
                sticks,
                predicted: Some(predicted),
                direction: Direction::Rising,
            },
            bands,
        }
    }
}

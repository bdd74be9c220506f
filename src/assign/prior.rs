//! What is known before the trace is looked at: the error of each level and the prior odds.
//!
//! A computed vertical energy E becomes an expected one by
//! I = E + shift + slope·(E − reference) + u + v·(E − reference) + e,
//! where u and v are unknown but common to the molecule and e scatters from state to state. The
//! numbers are per method and class of state, in `data/level_errors.csv`, which says how they were
//! fitted. Everything else that has to be assumed stands in the constants below, each with its
//! reason; `docs/assignment.md` tells the same story in one piece.

use super::{AssignError, Conditions};
use crate::levels::{Character, HoleState, Levels, LineKind, Method, Verdict};
use serde::Deserialize;

/// Probability that a state inside the window shows up in some band. Judgement: a fit loses about
/// one band in thirty to overlap and noise.
pub(super) const SEEN: f64 = 0.97;
/// Expected number of bands per eV that belong neither to the molecule nor to a known gas or lamp
/// line: one in five He I spectra of 12 eV has one. Judgement.
pub(super) const UNKNOWN_BANDS_PER_EV: f64 = 0.2 / 12.0;
/// Share of the states whose error is of another size than the rest, and how much larger its
/// standard deviation is: 3σg of F2, 2p of Ne and 2π of N2O in the fitted set (3 of 94).
pub(super) const WILD_SHARE: f64 = 0.03;
/// See [`WILD_SHARE`].
pub(super) const WILD_FACTOR: f64 = 3.0;
/// Standard deviation of the logarithm of area per degeneracy: a factor of two at He I, where
/// cross sections of neighbouring valence orbitals differ that much (common practice, no source).
pub(super) const AREA_LN_SD: f64 = std::f64::consts::LN_2;
/// Width of the logarithmic range over which areas of unrelated bands are spread: 1 to 3,000.
pub(super) const AREA_LN_RANGE: f64 = 8.0;
/// Standard deviation of the logarithm of the overall strength about total area over total
/// degeneracy.
pub(super) const STRENGTH_LN_SD: f64 = 0.8;
/// Two states count as one band when they stand within about this share of the band's full width
/// at half maximum from its centre (standard deviation of a Gaussian rule).
pub(super) const SHARING_WIDTH: f64 = 0.35;
/// A fit cannot separate closer states than this, however narrow the band, eV.
pub(super) const SHARING_FLOOR_EV: f64 = 0.05;
/// Probability that a degenerate state shows as two or three bands (Jahn-Teller or spin-orbit).
pub(super) const SPLIT: f64 = 0.3;
/// Mean splitting of such bands, eV: 0.02 to 0.1 for spin-orbit splitting of light atoms, 0.5 to
/// 1.0 for strong Jahn-Teller cases such as CH4 and NH3.
pub(super) const SPLIT_MEAN_EV: f64 = 0.4;
/// Largest number of neighbours that a state may be out of order with, and the largest gap in
/// computed energy, eV: beyond three standard deviations of a difference order is not in doubt.
pub(super) const ORDER_REACH: usize = 4;
/// See [`ORDER_REACH`].
pub(super) const ORDER_REACH_EV: f64 = 2.5;

/// States expected further than this outside the window, in standard deviations of all errors
/// together, are left out: the chance that one shows inside is below 0.001.
const OUT_OF_SIGHT: f64 = 3.5;

/// Error of one class of states at one method, as the data file holds it.
#[derive(Debug, Clone, PartialEq, Deserialize)]
pub(super) struct LevelError {
    method: String,
    scheme: String,
    class: String,
    pub reference_ev: f64,
    pub shift_ev: f64,
    pub slope: f64,
    pub shift_sd_ev: f64,
    pub slope_sd: f64,
    pub scatter_sd_ev: f64,
}

/// Reads the embedded table for one method.
pub(super) fn level_errors(method: Method) -> Result<Vec<LevelError>, AssignError> {
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .from_reader(include_str!("data/level_errors.csv").as_bytes());
    let mut rows = Vec::new();
    for row in reader.deserialize::<LevelError>() {
        let row = row.map_err(|source| AssignError::Table {
            table: "level_errors.csv",
            message: source.to_string(),
        })?;
        if row.method == method.name() {
            rows.push(row);
        }
    }
    if rows.is_empty() {
        return Err(AssignError::NoErrorModel { method });
    }
    Ok(rows)
}

/// A hole state with what the level's known error makes of it.
#[derive(Debug, Clone)]
pub(super) struct State {
    pub label: String,
    pub character: Character,
    pub degeneracy: usize,
    /// Degeneracy times pole strength: what its area goes with.
    pub strength: f64,
    /// As computed, eV.
    pub computed_ev: f64,
    /// Expected before the trace is seen, eV.
    pub expected_ev: f64,
    /// Computed minus reference energy: lever of the slope, eV.
    pub lever_ev: f64,
    /// Core standard deviation of the scatter (see [`WILD_SHARE`]), eV.
    pub scatter_ev: f64,
    /// The class's slope of the error.
    pub slope: f64,
}

/// Everything assumed about one molecule at one level.
#[derive(Debug, Clone)]
pub(super) struct Prior {
    /// States that may show in the window, by rising expected energy.
    pub states: Vec<State>,
    /// States expected so far above the window that only a second lamp line can reach them.
    pub beyond: Vec<State>,
    /// Standard deviation of the molecule's own shift, eV.
    pub shift_sd_ev: f64,
    /// Standard deviation of the molecule's own slope.
    pub slope_sd: f64,
    /// Lower and upper end of what can be seen, eV.
    pub visible_ev: [f64; 2],
}

impl Prior {
    pub(super) fn new(levels: &Levels, conditions: &Conditions) -> Result<Self, AssignError> {
        let rows = level_errors(levels.level.method)?;
        let [low, high] = conditions.window_ev;
        let high = conditions
            .photon_energy_ev
            .map_or(high, |limit| high.min(limit));
        let mains: Vec<&HoleState> = levels
            .hole_states
            .iter()
            .filter(|s| s.kind == LineKind::Main)
            .collect();
        let described = mains.iter().any(|s| says_pi(s));
        let mut prior = Prior {
            states: Vec::new(),
            beyond: Vec::new(),
            shift_sd_ev: 0.0,
            slope_sd: 0.0,
            visible_ev: [low, high],
        };
        for state in mains {
            check(state)?;
            let scheme = if described { "described" } else { "plain" };
            let class = class_of(state, levels);
            let row = rows.iter().find(|r| r.scheme == scheme && r.class == class);
            let row = row.ok_or_else(|| AssignError::Table {
                table: "level_errors.csv",
                message: format!("no {scheme} class '{class}' for {}", levels.level.method),
            })?;
            prior.shift_sd_ev = row.shift_sd_ev;
            prior.slope_sd = row.slope_sd;
            let lever_ev = state.ionization_energy_ev - row.reference_ev;
            let wild = 1.0 + WILD_SHARE * (WILD_FACTOR * WILD_FACTOR - 1.0);
            let entry = State {
                label: state.label.clone(),
                character: state.character.clone(),
                degeneracy: state.degeneracy.max(1),
                strength: state.degeneracy.max(1) as f64 * state.pole_strength,
                computed_ev: state.ionization_energy_ev,
                expected_ev: state.ionization_energy_ev + row.shift_ev + row.slope * lever_ev,
                lever_ev,
                scatter_ev: row.scatter_sd_ev / wild.sqrt(),
                slope: row.slope,
            };
            let spread = (row.shift_sd_ev.powi(2)
                + (row.slope_sd * lever_ev).powi(2)
                + row.scatter_sd_ev.powi(2))
            .sqrt();
            if entry.expected_ev > high + OUT_OF_SIGHT * spread {
                prior.beyond.push(entry);
            } else if entry.expected_ev > low - OUT_OF_SIGHT * spread {
                prior.states.push(entry);
            }
        }
        let by_energy = |a: &State, b: &State| {
            (a.expected_ev.total_cmp(&b.expected_ev))
                .then(a.computed_ev.total_cmp(&b.computed_ev))
                .then(a.label.cmp(&b.label))
        };
        prior.states.sort_by(by_energy);
        prior.beyond.sort_by(by_energy);
        Ok(prior)
    }

    /// Expected number of unknown bands in the window: the weight of one.
    pub(super) fn unknown_bands(&self) -> f64 {
        UNKNOWN_BANDS_PER_EV * self.window_width_ev()
    }

    /// Width of the window, eV: unrelated bands stand anywhere in it.
    pub(super) fn window_width_ev(&self) -> f64 {
        (self.visible_ev[1] - self.visible_ev[0]).max(0.1)
    }
}

/// Rejects a state that no calculation could have given.
fn check(state: &HoleState) -> Result<(), AssignError> {
    let energy = state.ionization_energy_ev;
    let strength = state.pole_strength;
    if !energy.is_finite() || !(0.0..=1.0 + 1e-6).contains(&strength) || strength == 0.0 {
        return Err(AssignError::State {
            label: state.label.clone(),
            energy_ev: energy,
            pole_strength: strength,
        });
    }
    Ok(())
}

fn says_pi(state: &HoleState) -> bool {
    state.character.description.contains('π') || state.label.contains('π')
}

/// The class whose error the state shares: half or more on N, O, F or Ne and not bonding; else π;
/// else the rest.
fn class_of(state: &HoleState, levels: &Levels) -> &'static str {
    let hard: f64 = (state.character.atoms.iter())
        .filter(|share| {
            let element = levels
                .molecule
                .atoms
                .get(share.atom)
                .map(|a| a.element.as_str());
            matches!(element, Some("N" | "O" | "F" | "Ne"))
        })
        .map(|share| share.share)
        .sum();
    let verdict = state.character.verdict;
    let idle = matches!(
        verdict,
        Verdict::LonePair | Verdict::Nonbonding | Verdict::Antibonding
    );
    if idle && hard >= 0.5 {
        "lone-pair-nof"
    } else if says_pi(state) {
        "pi"
    } else {
        "other"
    }
}

/// Density at `deviation` of the scatter (core and wild part), blurred by `blur_sd`.
pub(super) fn scatter_density(deviation: f64, core_sd: f64, blur_sd: f64) -> f64 {
    let core = core_sd * core_sd + blur_sd * blur_sd;
    let wild = (WILD_FACTOR * core_sd).powi(2) + blur_sd * blur_sd;
    (1.0 - WILD_SHARE) * normal(deviation, core) + WILD_SHARE * normal(deviation, wild)
}

/// Probability that the scatter stays below `deviation`.
pub(super) fn scatter_below(deviation: f64, core_sd: f64) -> f64 {
    (1.0 - WILD_SHARE) * normal_below(deviation / core_sd)
        + WILD_SHARE * normal_below(deviation / (WILD_FACTOR * core_sd))
}

/// Normal density of given variance.
pub(super) fn normal(deviation: f64, variance: f64) -> f64 {
    (-0.5 * deviation * deviation / variance).exp() / (std::f64::consts::TAU * variance).sqrt()
}

/// Standard normal distribution function, error below 1e-7: complementary error function by the
/// rational fit of Abramowitz and Stegun 7.1.26 (memory).
fn normal_below(x: f64) -> f64 {
    let z = x.abs() / std::f64::consts::SQRT_2;
    let t = 1.0 / (1.0 + 0.327_591_1 * z);
    let poly = t
        * (0.254_829_592
            + t * (-0.284_496_736
                + t * (1.421_413_741 + t * (-1.453_152_027 + t * 1.061_405_429))));
    let upper = 0.5 * poly * (-z * z).exp();
    if x > 0.0 { 1.0 - upper } else { upper }
}

/// How a band looks, by the full width that its structure adds to the instrument's.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Look {
    /// No wider than a single line of this trace.
    Line,
    /// Up to 0.3 eV.
    Sharp,
    /// Up to 0.6 eV.
    Medium,
    /// Wider.
    Broad,
}

impl Look {
    pub(super) fn words(self) -> &'static str {
        match self {
            Look::Line => "a single sharp line",
            Look::Sharp => "narrow, with most of its area in one line",
            Look::Medium => "of medium width",
            Look::Broad => "broad or a long progression",
        }
    }
}

/// Probability of each look, four times over (so that 1 means no information). Judgement, after
/// the common practice that an electron without a part in bonding leaves a sharp origin and a
/// short progression. No two verdicts differ by more than a factor of four.
pub(super) fn look_odds(verdict: Verdict, look: Look) -> f64 {
    let row = match verdict {
        Verdict::LonePair | Verdict::Nonbonding => [0.25, 0.40, 0.25, 0.10],
        Verdict::Antibonding => [0.15, 0.35, 0.30, 0.20],
        Verdict::Mixed => [0.15, 0.25, 0.35, 0.25],
        Verdict::Bonding => [0.07, 0.18, 0.35, 0.40],
    };
    4.0 * row[look as usize]
}

/// The same for a band that several states share.
pub(super) fn shared_look_odds(look: Look) -> f64 {
    4.0 * [0.03, 0.12, 0.35, 0.50][look as usize]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_method_has_an_error_model() {
        for method in Method::ALL {
            let rows = level_errors(method).unwrap();
            for (scheme, count) in [("plain", 2), ("described", 3)] {
                let rows: Vec<_> = rows.iter().filter(|r| r.scheme == scheme).collect();
                assert_eq!(rows.len(), count, "{method} {scheme}");
                for row in &rows {
                    assert!(row.scatter_sd_ev > 0.0);
                    // Common to the molecule, so one value for all classes.
                    assert_eq!(row.shift_sd_ev, rows[0].shift_sd_ev);
                    assert_eq!(row.slope_sd, rows[0].slope_sd);
                }
            }
        }
    }

    #[test]
    fn distribution_function_meets_its_tabulated_values() {
        // Φ(1) = 0.8413447461, Φ(−1.96) = 0.0249978951, Φ(3) = 0.9986501020 (any table of the
        // normal distribution).
        for (x, p) in [
            (1.0, 0.841_344_746_1),
            (-1.96, 0.024_997_895_1),
            (3.0, 0.998_650_102_0),
        ] {
            assert!((normal_below(x) - p).abs() < 1e-7, "{x}");
        }
    }

    #[test]
    fn density_integrates_to_the_distribution() {
        let (core, step) = (0.39, 1e-3);
        let sum: f64 = (-20_000..700)
            .map(|i| scatter_density((i as f64 + 0.5) * step, core, 0.0) * step)
            .sum();
        assert!((sum - scatter_below(0.7, core)).abs() < 1e-6);
    }

    #[test]
    fn looks_are_probabilities() {
        let looks = [Look::Line, Look::Sharp, Look::Medium, Look::Broad];
        let verdicts = [
            Verdict::LonePair,
            Verdict::Mixed,
            Verdict::Bonding,
            Verdict::Antibonding,
        ];
        for verdict in verdicts {
            let sum: f64 = looks.iter().map(|l| look_odds(verdict, *l)).sum();
            assert!((sum - 4.0).abs() < 1e-12);
        }
        assert!((looks.iter().map(|l| shared_look_odds(*l)).sum::<f64>() - 4.0).abs() < 1e-12);
    }
}

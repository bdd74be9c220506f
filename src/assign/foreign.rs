//! Bands that are not the molecule's: lines of gases in the cell, and ghosts of the molecule's own
//! bands made by other lines of the lamp.
//!
//! Every candidate gets a weight on the scale of [`super::likelihood`]: prior chance × position ×
//! look × (for ghosts) area. The data files say where lines and intensities come from.

use super::AssignError;
use super::Conditions;
use super::likelihood::Datum;
use super::prior::{AREA_LN_RANGE, Look, Prior, normal};
use crate::fit::Band;
use serde::Deserialize;

/// Chance that a gas that is present shows its strongest line as a band of its own.
const STRONGEST_LINE_SEEN: f64 = 0.7;
/// Chance that a line of the lamp makes a visible ghost of a given band.
const GHOST_SEEN: f64 = 0.3;
/// Standard deviation of the logarithm of a ghost's relative area: lamp intensities vary by two.
const GHOST_LN_SD: f64 = 0.6;
/// Uncertainty of a tabulated line and of the maximum of a band seen without structure, eV.
const LINE_SD_EV: f64 = 0.005;
/// See [`LINE_SD_EV`].
const ENVELOPE_SD_EV: f64 = 0.06;
/// Standard deviation of the logarithm of an envelope's width, and the range over which widths of
/// unrelated bands are spread (0.03 to 1.5 eV).
const ENVELOPE_WIDTH_LN_SD: f64 = 0.3;
/// See [`ENVELOPE_WIDTH_LN_SD`].
const WIDTH_LN_RANGE: f64 = 4.0;
/// What is left of a candidate gas for each of its lines that ought to be seen and is not: where
/// it would be a few times the faintest band, and where it could not be overlooked.
const ABSENT_LINE: f64 = 0.2;
/// See [`ABSENT_LINE`].
const ABSENT_STRONG_LINE: f64 = 0.01;
/// Areas, as multiples of the faintest band's, from which a line ought to be found and from which
/// it could not be overlooked.
pub(super) const FOUND_FROM: f64 = 2.0;
/// See [`FOUND_FROM`].
const STRONG_FROM: f64 = 10.0;
/// A sharp line is hidden under a band if it stands lower than this share of the band's mean
/// height; the width of such a line, eV.
const HIDDEN_HEIGHT: f64 = 0.2;
/// See [`HIDDEN_HEIGHT`].
const LINE_WIDTH_EV: f64 = 0.04;
/// Standard deviation of the logarithm of a line's share in its gas: the tabulated shares are
/// rough and the analyser's transmission is not known.
const GAS_SHARE_LN_SD: f64 = 0.6;
/// A line this close to a tabulated energy may be that line, eV: some scale offsets.
const SAME_LINE_EV: f64 = 0.08;
/// A photon energy this close to a lamp's main line names the lamp, eV.
const LAMP_TOLERANCE_EV: f64 = 0.05;

/// One line of a gas.
#[derive(Debug, Clone, Deserialize)]
pub(super) struct GasLine {
    pub gas: String,
    formula: String,
    presence: f64,
    pub line: String,
    pub energy_ev: f64,
    pub share: f64,
    pub shape: String,
    fwhm_ev: Option<f64>,
}

/// A line that a lamp emits beside its main line.
#[derive(Debug, Clone, Deserialize)]
struct LampLine {
    main_ev: f64,
    line_ev: f64,
    line: String,
    share: f64,
}

/// What a band may be instead of the molecule's.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Cause {
    /// Number of a line in [`Surroundings::lines`].
    Gas(usize),
    /// Index of the parent band.
    Ghost(usize),
    /// Ghost of a state above the photon energy.
    Beyond,
}

/// A candidate cause of one band.
#[derive(Debug, Clone)]
pub(super) struct Suspect {
    pub cause: Cause,
    pub name: String,
    pub expected_ev: f64,
    pub deviation_ev: f64,
    pub weight: f64,
}

/// A gas seen in another band.
#[derive(Debug, Clone)]
pub(super) struct Seen {
    pub gas: String,
    /// Probability that the other band is this gas.
    pub probability: f64,
    /// Logarithm of the gas's whole area as that band tells it.
    pub ln_area: Option<f64>,
}

/// What is believed of gases after a first look, for one band: the others' word.
#[derive(Debug, Clone, Default)]
pub(super) struct Belief {
    /// Gases seen elsewhere in the trace.
    pub seen: Vec<Seen>,
    /// Offset of the energy scale with its standard deviation, eV; `None` for the prior's.
    pub offset_ev: Option<(f64, f64)>,
}

/// Tables and conditions that bear on foreign bands.
pub(super) struct Surroundings {
    pub lines: Vec<GasLine>,
    lamp: Vec<LampLine>,
    pub offset_sd_ev: f64,
}

impl Surroundings {
    /// Reads the tables; gases with the sample's own formula and lamps of another photon energy
    /// drop out.
    pub(super) fn new(formula: &str, conditions: &Conditions) -> Result<Self, AssignError> {
        let mut lines: Vec<GasLine> = table("cell_gases.csv", include_str!("data/cell_gases.csv"))?;
        lines.retain(|line| line.formula != formula);
        let mut lamp: Vec<LampLine> = table("lamp_lines.csv", include_str!("data/lamp_lines.csv"))?;
        lamp.retain(|line| {
            let photon = conditions.photon_energy_ev;
            photon.is_some_and(|p| (p - line.main_ev).abs() <= LAMP_TOLERANCE_EV)
        });
        Ok(Surroundings {
            lines,
            lamp,
            offset_sd_ev: conditions.scale_offset_sd_ev,
        })
    }

    /// Whether lamp lines could be tested at all.
    pub(super) fn knows_lamp(&self) -> bool {
        !self.lamp.is_empty()
    }

    /// All candidates for band `at` that deserve mention, heaviest first.
    pub(super) fn suspects(
        &self,
        bands: &[&Band],
        data: &[Datum],
        at: usize,
        prior: &Prior,
        belief: &Belief,
    ) -> Vec<Suspect> {
        let mut all: Vec<Suspect> = (0..self.lines.len())
            .map(|line| self.gas(bands, data, at, prior, belief, line))
            .collect();
        for line in &self.lamp {
            for parent in (0..bands.len()).filter(|p| *p != at) {
                all.push(ghost(bands, data, at, parent, prior, line));
            }
            if line.line_ev > line.main_ev + 10.0 {
                all.extend(prior.beyond.iter().map(|state| {
                    let expected_ev = state.expected_ev - (line.line_ev - line.main_ev);
                    let deviation_ev = bands[at].vertical_ev - expected_ev;
                    let spread = state.scatter_ev.powi(2)
                        + prior.shift_sd_ev.powi(2)
                        + (prior.slope_sd * state.lever_ev).powi(2);
                    Suspect {
                        cause: Cause::Beyond,
                        name: format!("{} of {}", line.line, state.label),
                        expected_ev,
                        deviation_ev,
                        weight: GHOST_SEEN
                            * line.share
                            * prior.window_width_ev()
                            * normal(deviation_ev, spread),
                    }
                }));
            }
        }
        all.retain(|s| s.weight > 1e-4 * prior.unknown_bands());
        all.sort_by(|a, b| b.weight.total_cmp(&a.weight).then(a.name.cmp(&b.name)));
        all
    }

    fn gas(
        &self,
        bands: &[&Band],
        data: &[Datum],
        at: usize,
        prior: &Prior,
        belief: &Belief,
        number: usize,
    ) -> Suspect {
        let line = &self.lines[number];
        let band = bands[at];
        let (offset, offset_sd) = belief.offset_ev.unwrap_or((0.0, self.offset_sd_ev));
        let presence = presence(belief, line, &data[at]);
        let same_gas = || self.lines.iter().filter(|l| l.gas == line.gas);
        let strongest = same_gas().map(|l| l.share).fold(0.0, f64::max);
        let shown = STRONGEST_LINE_SEEN * (line.share / strongest).max(0.05);
        let envelope = line.shape == "envelope";
        let own_sd = if envelope { ENVELOPE_SD_EV } else { LINE_SD_EV };
        let place = if envelope {
            band.vertical_ev
        } else {
            anchor_ev(band)
        };
        let deviation_ev = place - line.energy_ev;
        let variance = own_sd.powi(2) + offset_sd.powi(2) + band.vertical_sd.powi(2);
        let mut weight = presence * shown * prior.window_width_ev();
        weight *= normal(deviation_ev - offset, variance);
        weight *= self.gas_look(band, data[at].look, line, offset, variance.sqrt());
        for other in same_gas().filter(|l| l.line != line.line && l.shape == "line") {
            let over_faintest = ought_to_show(bands, data, at, prior, line, other);
            if over_faintest > STRONG_FROM {
                weight *= ABSENT_STRONG_LINE;
            } else if over_faintest > FOUND_FROM {
                weight *= ABSENT_LINE;
            }
        }
        Suspect {
            cause: Cause::Gas(number),
            name: format!("{} {}", line.gas, line.line),
            expected_ev: line.energy_ev,
            deviation_ev,
            weight,
        }
    }

    /// How well the band's look fits a gas line, against an unrelated band's.
    fn gas_look(&self, band: &Band, look: Look, line: &GasLine, offset: f64, sd: f64) -> f64 {
        if let Some(fwhm) = line.fwhm_ev {
            let off = (band.fwhm_ev / fwhm).ln();
            return WIDTH_LN_RANGE * normal(off, ENVELOPE_WIDTH_LN_SD.powi(2));
        }
        if band.members.len() < 2 {
            return 4.0 * [0.85, 0.12, 0.02, 0.01][look as usize];
        }
        // A resolved band: all its members must be lines of the same gas.
        let top = band.members.iter().map(|m| m.area).fold(0.0, f64::max);
        let all_known = (band.members.iter().filter(|m| m.area > 0.1 * top)).all(|m| {
            self.lines.iter().any(|l| {
                l.gas == line.gas
                    && l.shape == "line"
                    && (m.position_ev - offset - l.energy_ev).abs() < 3.0 * sd + 0.01
            })
        });
        4.0 * if all_known { 0.85 } else { 0.02 }
    }
}

/// Prior weight of the gas: its own, or, as far as it was seen in another band, how well this
/// band's area goes with that one's.
fn presence(belief: &Belief, line: &GasLine, datum: &Datum) -> f64 {
    let Some(seen) = belief.seen.iter().find(|seen| seen.gas == line.gas) else {
        return line.presence;
    };
    let agreement = match (seen.ln_area, datum.ln_area) {
        (Some(whole), Some((own, own_var))) => {
            let off = own - whole - line.share.ln();
            AREA_LN_RANGE * normal(off, GAS_SHARE_LN_SD.powi(2) + own_var)
        }
        _ => 1.0,
    };
    (1.0 - seen.probability) * line.presence + seen.probability * agreement
}

/// Reads an embedded table.
fn table<T: for<'a> Deserialize<'a>>(
    name: &'static str,
    text: &str,
) -> Result<Vec<T>, AssignError> {
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .from_reader(text.as_bytes());
    (reader.deserialize().collect::<Result<Vec<T>, csv::Error>>()).map_err(|source| {
        AssignError::Table {
            table: name,
            message: source.to_string(),
        }
    })
}

/// Where a band is sharpest: its strongest member, or its maximum, eV.
pub(super) fn anchor_ev(band: &Band) -> f64 {
    let strongest = band.members.iter().max_by(|a, b| a.area.total_cmp(&b.area));
    match strongest {
        Some(member) if band.members.len() > 1 => member.position_ev,
        _ => band.maximum_ev,
    }
}

/// How strongly `other`, a line of the same gas, should show as a line of its own if band `at` is
/// `line`: its area as a multiple of the faintest band's; 0 where it lies outside the window, is
/// hidden, or may be what another band shows.
pub(super) fn ought_to_show(
    bands: &[&Band],
    data: &[Datum],
    at: usize,
    prior: &Prior,
    line: &GasLine,
    other: &GasLine,
) -> f64 {
    let area = |i: usize| data[i].ln_area.map_or(0.0, |(ln_area, _)| ln_area.exp());
    let faintest = (0..bands.len()).map(area).fold(f64::INFINITY, f64::min);
    let expected = area(at) * other.share / line.share;
    let [low, high] = prior.visible_ev;
    let inside = other.energy_ev > low + 0.1 && other.energy_ev < high - 0.1;
    let hidden = (0..bands.len()).any(|i| {
        let height = area(i) / bands[i].fwhm_ev.max(LINE_WIDTH_EV);
        covers(bands[i], other.energy_ev) && expected / LINE_WIDTH_EV < HIDDEN_HEIGHT * height
    });
    let shown = (bands.iter()).any(|band| {
        let positions = band.members.iter().map(|m| m.position_ev);
        (positions.chain([band.maximum_ev])).any(|p| (p - other.energy_ev).abs() < SAME_LINE_EV)
    });
    match inside && !hidden && !shown {
        true => expected / faintest,
        false => 0.0,
    }
}

/// Whether a band reaches over `energy_ev`.
pub(super) fn covers(band: &Band, energy_ev: f64) -> bool {
    let reach = 0.7 * band.fwhm_ev + 0.05;
    let positions = || {
        band.members
            .iter()
            .map(|m| m.position_ev)
            .chain([band.vertical_ev])
    };
    let low = positions().fold(f64::INFINITY, f64::min) - reach;
    let high = positions().fold(f64::NEG_INFINITY, f64::max) + reach;
    energy_ev > low && energy_ev < high
}

/// Band `at` as the ghost of band `parent` made by another line of the lamp: an electron of the
/// same ionization energy E, ejected by hν' instead of hν, is booked at E − (hν' − hν).
fn ghost(
    bands: &[&Band],
    data: &[Datum],
    at: usize,
    parent: usize,
    prior: &Prior,
    line: &LampLine,
) -> Suspect {
    let (band, source) = (bands[at], bands[parent]);
    let expected_ev = anchor_ev(source) - (line.line_ev - line.main_ev);
    let deviation_ev = anchor_ev(band) - expected_ev;
    let variance = LINE_SD_EV.powi(2)
        + band.vertical_sd.powi(2)
        + source.vertical_sd.powi(2)
        + (0.1 * source.fwhm_ev).powi(2);
    let mut weight = GHOST_SEEN * prior.window_width_ev() * normal(deviation_ev, variance);
    weight *= match (data[at].ln_area, data[parent].ln_area) {
        (Some((own, own_var)), Some((whole, whole_var))) => {
            let spread = GHOST_LN_SD.powi(2) + own_var + whole_var;
            AREA_LN_RANGE * normal(own - whole - line.share.ln(), spread)
        }
        _ => 0.0,
    };
    let alike = (data[at].look as usize).abs_diff(data[parent].look as usize);
    weight *= 4.0 * [0.55, 0.18, 0.06, 0.03][alike];
    Suspect {
        cause: Cause::Ghost(parent),
        name: format!("{} of band {}", line.line, source.id),
        expected_ev,
        deviation_ev,
        weight,
    }
}

//! One reading of the trace (a grouping) carried from bands to matches.

use super::chart::Chart;
use super::decode;
use super::evidence;
use super::foreign::{Belief, Cause, Seen, Surroundings, Suspect};
use super::grid::Grid;
use super::likelihood::{self, Comparison, Datum};
use super::posterior::{self, Posterior};
use super::prior::Prior;
use super::remarks;
use super::{Alternative, AssignError, Assignment, Conditions, Match};
use crate::fit::{Band, Grouping};
use crate::levels::Levels;

/// Alternatives below this probability are not listed.
pub(super) const WORTH_LISTING: f64 = 0.01;

/// Rejects numbers that no experiment or fit can give.
pub(super) fn check(groupings: &[Grouping], conditions: &Conditions) -> Result<(), AssignError> {
    let [low, high] = conditions.window_ev;
    if !(low.is_finite() && high.is_finite() && low < high) {
        return Err(AssignError::Window { low, high });
    }
    let condition = |name, value, expected| {
        Err(AssignError::Condition {
            name,
            value,
            expected,
        })
    };
    let offset = conditions.scale_offset_sd_ev;
    if !(offset.is_finite() && offset >= 0.0) {
        return condition(
            "scale_offset_sd_ev",
            offset,
            "a finite number, not negative",
        );
    }
    if let Some(photon) = conditions.photon_energy_ev
        && !(photon.is_finite() && photon > low)
    {
        return condition(
            "photon_energy_ev",
            photon,
            "a finite number above the window's start",
        );
    }
    if groupings.is_empty() {
        return Err(AssignError::NoGrouping);
    }
    for (number, grouping) in groupings.iter().enumerate() {
        let probability = grouping.probability;
        if !(0.0..=1.0 + 1e-9).contains(&probability) {
            return Err(AssignError::Probability {
                grouping: number,
                probability,
            });
        }
        for band in &grouping.bands {
            let wrong = |name, value, expected| {
                Err(AssignError::Band {
                    grouping: number,
                    band: band.id,
                    name,
                    value,
                    expected,
                })
            };
            for (name, value) in [
                ("vertical_ev", band.vertical_ev),
                ("maximum_ev", band.maximum_ev),
            ] {
                if !value.is_finite() {
                    return wrong(name, value, "a finite energy");
                }
            }
            if !(band.vertical_sd.is_finite() && band.vertical_sd >= 0.0) {
                return wrong(
                    "vertical_sd",
                    band.vertical_sd,
                    "a finite number, not negative",
                );
            }
            if !(band.fwhm_ev.is_finite() && band.fwhm_ev > 0.0) {
                return wrong("fwhm_ev", band.fwhm_ev, "a positive width");
            }
            if !band.area.is_finite() || band.area_sd.is_nan() {
                return wrong(
                    "area",
                    band.area,
                    "a finite number with its standard deviation",
                );
            }
        }
    }
    Ok(())
}

/// A grouping with its posterior.
pub(super) struct Reading<'a> {
    /// By rising vertical energy.
    pub bands: Vec<&'a Band>,
    pub data: Vec<Datum>,
    /// Candidate causes of each band, heaviest first.
    pub suspects: Vec<Vec<Suspect>>,
    pub posterior: Posterior,
}

impl<'a> Reading<'a> {
    pub(super) fn new(
        grouping: &'a Grouping,
        prior: &Prior,
        chart: &Chart,
        surroundings: &Surroundings,
    ) -> Result<Self, AssignError> {
        let mut bands: Vec<&Band> = grouping.bands.iter().collect();
        bands.sort_by(|a, b| {
            a.vertical_ev
                .total_cmp(&b.vertical_ev)
                .then(a.id.cmp(&b.id))
        });
        let instrument = likelihood::instrument_width_ev(&grouping.bands);
        let data = bands
            .iter()
            .map(|b| Datum::new(b, instrument, prior.unknown_bands()))
            .collect();
        let blank = vec![Belief::default(); bands.len()];
        let mut reading = Reading {
            bands,
            data,
            suspects: Vec::new(),
            posterior: Posterior::none(),
        };
        reading.weigh(prior, chart, surroundings, &blank)?;
        // A second look: a gas seen in one band is expected in the others, and tells the offset.
        if let Some(beliefs) = reading.beliefs(surroundings) {
            reading.weigh(prior, chart, surroundings, &beliefs)?;
        }
        Ok(reading)
    }

    fn weigh(
        &mut self,
        prior: &Prior,
        chart: &Chart,
        surroundings: &Surroundings,
        beliefs: &[Belief],
    ) -> Result<(), AssignError> {
        self.suspects = (0..self.bands.len())
            .map(|at| surroundings.suspects(&self.bands, &self.data, at, prior, &beliefs[at]))
            .collect();
        for (datum, suspects) in self.data.iter_mut().zip(&self.suspects) {
            datum.foreign = prior.unknown_bands() + suspects.iter().map(|s| s.weight).sum::<f64>();
        }
        let comparison = Comparison::new(prior, chart, &self.data);
        self.posterior = posterior::solve(&comparison, &Grid::new(&comparison, 1.0))?;
        Ok(())
    }

    /// Probability that `suspect` is the cause of band `at`.
    pub(super) fn guilt(&self, at: usize, suspect: &Suspect) -> f64 {
        self.posterior.foreign[at] * suspect.weight / self.data[at].foreign
    }

    /// What the other bands say of gases, per band; `None` where no gas is likely anywhere. The
    /// offset of the scale is learnt from single lines only.
    fn beliefs(&self, surroundings: &Surroundings) -> Option<Vec<Belief>> {
        let mut sightings = Vec::new();
        for (band, suspects) in self.suspects.iter().enumerate() {
            for suspect in suspects {
                if let Cause::Gas(line) = suspect.cause {
                    let probability = self.guilt(band, suspect);
                    if probability > 0.02 {
                        sightings.push((band, suspect, &surroundings.lines[line], probability));
                    }
                }
            }
        }
        if sightings.is_empty() {
            return None;
        }
        let beliefs = (0..self.bands.len())
            .map(|at| {
                let mut seen: Vec<Seen> = Vec::new();
                let prior_precision = surroundings.offset_sd_ev.max(1e-4).powi(-2);
                let (mut precision, mut sum) = (prior_precision, 0.0);
                for (band, suspect, line, probability) in &sightings {
                    if *band == at {
                        continue;
                    }
                    let ln_area = self.data[*band].ln_area.map(|(ln, _)| ln - line.share.ln());
                    let sighting = Seen {
                        gas: line.gas.clone(),
                        probability: *probability,
                        ln_area,
                    };
                    match seen.iter_mut().find(|s| s.gas == line.gas) {
                        Some(known) if known.probability < *probability => *known = sighting,
                        Some(_) => {}
                        None => seen.push(sighting),
                    }
                    if line.shape == "line" {
                        let sd = self.bands[*band].vertical_sd.max(0.005);
                        precision += probability * sd.powi(-2);
                        sum += probability * suspect.deviation_ev * sd.powi(-2);
                    }
                }
                Belief {
                    seen,
                    offset_ev: Some((sum / precision, precision.powf(-0.5))),
                }
            })
            .collect();
        Some(beliefs)
    }

    /// The outcome for this reading alone.
    pub(super) fn assignment(
        &self,
        prior: &Prior,
        chart: &Chart,
        surroundings: &Surroundings,
        levels: &Levels,
    ) -> Assignment {
        let comparison = Comparison::new(prior, chart, &self.data);
        let best = decode::best_sets(&comparison, &self.posterior);
        let expected = self.posterior.expected(&comparison);
        let matches: Vec<Match> = (0..self.bands.len())
            .filter(|&at| !best[at].is_empty())
            .map(|at| self.matched(&comparison, at, &best[at], &expected, levels))
            .collect();
        let outcome = remarks::Outcome {
            reading: self,
            comparison: &comparison,
            best: &best,
            expected: &expected,
            surroundings,
            level: levels.level.to_string(),
        };
        let scale = 1.0 + self.posterior.slope + prior.states.first().map_or(0.0, |s| s.slope);
        let shown: Vec<usize> = best.iter().flatten().copied().collect();
        let about: Vec<usize> = if shown.is_empty() {
            (0..prior.states.len()).collect()
        } else {
            shown
        };
        let shift = about
            .iter()
            .map(|&s| expected[s] - scale * prior.states[s].computed_ev);
        Assignment {
            grouping: 0,
            grouping_probability: 1.0,
            matches,
            unseen: outcome.unseen(),
            remarks: outcome.remarks(),
            shift_ev: if about.is_empty() {
                0.0
            } else {
                shift.sum::<f64>() / about.len() as f64
            },
            shift_sd_ev: self.posterior.shift_sd_ev,
            scale,
        }
    }

    fn matched(
        &self,
        comparison: &Comparison,
        at: usize,
        set: &[usize],
        expected: &[f64],
        levels: &Levels,
    ) -> Match {
        let states = &comparison.prior.states;
        let band = self.bands[at];
        let readings = self.readings(comparison, at);
        let probability = readings.iter().find(|r| r.0 == set).map_or(0.0, |r| r.1);
        let labels = |set: &[usize]| -> Vec<String> {
            set.iter().map(|&s| states[s].label.clone()).collect()
        };
        let alternatives: Vec<Alternative> = (readings.iter())
            .filter(|r| r.0 != set && r.1 >= WORTH_LISTING)
            .map(|r| Alternative {
                hole_states: labels(&r.0),
                probability: r.1,
            })
            .collect();
        let weight: f64 = set.iter().map(|&s| states[s].strength).sum();
        let mean = |f: &dyn Fn(usize) -> f64| {
            set.iter().map(|&s| states[s].strength * f(s)).sum::<f64>() / weight
        };
        let centre_ev = mean(&|s| expected[s]);
        let split = matches!(set, [state] if self.posterior.split_share(at, *state) > 0.5);
        let case = evidence::Case {
            prior: comparison.prior,
            datum: &self.data[at],
            set,
            expected,
            centre_ev,
            ln_strength: self.posterior.ln_strength,
            split,
            probability,
            runner_up: alternatives.first(),
            level: levels.level.to_string(),
        };
        Match {
            band: band.id,
            hole_states: labels(set),
            probability,
            character: set.iter().map(|&s| states[s].character.clone()).collect(),
            residual_raw_ev: band.vertical_ev - mean(&|s| states[s].computed_ev),
            residual_ev: band.vertical_ev - centre_ev,
            evidence: case.evidence(),
            alternatives,
        }
    }

    /// All readings of a band with their probabilities, most probable first; the empty set is the
    /// foreign band.
    pub(super) fn readings(&self, comparison: &Comparison, at: usize) -> Vec<(Vec<usize>, f64)> {
        let mut all: Vec<(Vec<usize>, f64)> = (comparison.chart.sets.iter().enumerate())
            .map(|(n, set)| {
                (
                    set.clone(),
                    decode::share(comparison, &self.posterior, at, n),
                )
            })
            .collect();
        all.push((Vec::new(), self.posterior.foreign[at]));
        all.sort_by(|a, b| b.1.total_cmp(&a.1).then(a.0.cmp(&b.0)));
        all
    }
}

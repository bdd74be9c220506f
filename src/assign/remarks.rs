//! What the one-electron picture does not explain, in words.

use super::decode;
use super::foreign::{Cause, FOUND_FROM, Surroundings, Suspect, covers, ought_to_show};
use super::likelihood::Comparison;
use super::prior::scatter_below;
use super::reading::Reading;
use super::{Candidate, Remark, RemarkKind};

/// Two orders are both named when the less likely one has at least this probability.
const ORDER_IN_DOUBT: f64 = 0.10;
/// A state is called missing when it should stand inside the window with this probability.
const SURELY_INSIDE: f64 = 0.90;
/// Candidates below this share are not listed.
const WORTH_NAMING: f64 = 0.01;

/// The chosen assignment with all that remarks are made of.
pub(super) struct Outcome<'a> {
    pub reading: &'a Reading<'a>,
    pub comparison: &'a Comparison<'a>,
    /// Hole states per band.
    pub best: &'a [Vec<usize>],
    /// Expected energy per state, eV.
    pub expected: &'a [f64],
    pub surroundings: &'a Surroundings,
    /// Method and basis.
    pub level: String,
}

impl Outcome<'_> {
    /// All remarks, by rising energy.
    pub(super) fn remarks(&self) -> Vec<Remark> {
        let mut remarks: Vec<Remark> = (0..self.best.len())
            .filter(|&at| self.best[at].is_empty())
            .map(|at| self.foreign_band(at))
            .collect();
        remarks.extend(self.missing_states());
        remarks.extend(self.open_orders());
        remarks.sort_by(|a, b| a.position_ev.total_cmp(&b.position_ev));
        remarks
    }

    /// Labels of states that no band was given to although they should be inside the window.
    pub(super) fn unseen(&self) -> Vec<String> {
        (self.absent().into_iter())
            .filter(|&s| self.inside(s) > 0.5)
            .map(|s| self.comparison.prior.states[s].label.clone())
            .collect()
    }

    fn absent(&self) -> Vec<usize> {
        let states = 0..self.comparison.prior.states.len();
        states
            .filter(|s| !self.best.iter().any(|set| set.contains(s)))
            .collect()
    }

    /// Probability that a state stands inside the window, after shift and scale.
    fn inside(&self, state: usize) -> f64 {
        let [low, high] = self.comparison.prior.visible_ev;
        let posterior = &self.reading.posterior;
        let sd = self.comparison.prior.states[state]
            .scatter_ev
            .hypot(posterior.shift_sd_ev);
        scatter_below(high - self.expected[state], sd)
            - scatter_below(low - self.expected[state], sd)
    }

    fn foreign_band(&self, at: usize) -> Remark {
        let reading = self.reading;
        let band = reading.bands[at];
        let total = reading.data[at].foreign;
        let suspects = &reading.suspects[at];
        let candidates: Vec<Candidate> = (suspects.iter())
            .map(|s| Candidate {
                cause: s.name.clone(),
                expected_ev: s.expected_ev,
                deviation_ev: s.deviation_ev,
                probability: s.weight / total,
            })
            .filter(|c| c.probability >= WORTH_NAMING)
            .take(5)
            .collect();
        let place = band.maximum_ev;
        let leader = suspects
            .first()
            .filter(|s| s.weight > self.comparison.prior.unknown_bands());
        let (kind, mut text) = match leader {
            Some(s) => match s.cause {
                Cause::Gas(line) => (RemarkKind::ForeignGas, self.gas_text(at, s, line)),
                Cause::Ghost(_) | Cause::Beyond => {
                    (RemarkKind::LampSatellite, self.ghost_text(at, s))
                }
            },
            None => (RemarkKind::Unexplained, self.unexplained_text(at, suspects)),
        };
        let state = (reading.readings(self.comparison, at).into_iter())
            .find(|r| !r.0.is_empty() && r.1 >= ORDER_IN_DOUBT);
        if let Some((set, probability)) = state {
            text.push_str(&format!(
                " It may still be {} of the molecule ({:.0} %).",
                self.names(&set),
                100.0 * probability
            ));
        }
        Remark {
            kind,
            position_ev: place,
            band: Some(band.id),
            candidates,
            text,
        }
    }

    fn gas_text(&self, at: usize, suspect: &Suspect, line: usize) -> String {
        let band = self.reading.bands[at];
        let line = &self.surroundings.lines[line];
        let mut text = format!(
            "Band {} at {:.2} eV matches no orbital of the molecule; it stands {:.0} meV from the {} \
             line of {} at {:.3} eV, so {} in the cell is the likely cause.",
            band.id,
            band.maximum_ev,
            1000.0 * suspect.deviation_ev.abs(),
            line.line,
            line.gas,
            line.energy_ev,
            line.gas,
        );
        let others = || {
            (self.surroundings.lines.iter())
                .filter(|l| l.gas == line.gas && l.line != line.line && l.share > 0.02)
                .filter(|l| {
                    let [low, high] = self.comparison.prior.visible_ev;
                    l.energy_ev > low && l.energy_ev < high
                })
        };
        let seen: Vec<String> = others()
            .filter(|l| {
                (0..self.best.len()).any(|b| {
                    b != at
                        && self.best[b].is_empty()
                        && self.reading.suspects[b]
                            .first()
                            .is_some_and(|s| s.name == format!("{} {}", l.gas, l.line))
                })
            })
            .map(|l| l.line.clone())
            .collect();
        let hidden = others().any(|l| self.reading.bands.iter().any(|b| covers(b, l.energy_ev)));
        let prior = self.comparison.prior;
        let absent: Vec<&str> = others()
            .filter(|l| l.shape == "line")
            .filter(|l| {
                let (bands, data) = (&self.reading.bands, &self.reading.data);
                ought_to_show(bands, data, at, prior, line, l) > FOUND_FROM
            })
            .map(|l| l.line.as_str())
            .collect();
        if !seen.is_empty() {
            text.push_str(&format!(" Its {} is seen too.", seen.join(", ")));
        } else if hidden {
            text.push_str(" Its other lines would lie under bands of the molecule.");
        }
        if !absent.is_empty() {
            text.push_str(&format!(
                " Against it: {} should be seen as well and is not.",
                absent.join(", ")
            ));
        }
        text.push_str(" A run after pumping, or with the gas added, would settle it.");
        text
    }

    fn ghost_text(&self, at: usize, suspect: &Suspect) -> String {
        let band = self.reading.bands[at];
        let share = match suspect.cause {
            Cause::Ghost(parent) => {
                format!(
                    ", {:.1} % of its area,",
                    100.0 * band.area / self.reading.bands[parent].area
                )
            }
            _ => String::new(),
        };
        format!(
            "Band {} at {:.2} eV{share} is where {} should appear ({:.2} eV): a ghost made by \
             another line of the lamp. It should vanish with a monochromator and change with the \
             lamp's pressure.",
            band.id, band.maximum_ev, suspect.name, suspect.expected_ev,
        )
    }

    fn unexplained_text(&self, at: usize, suspects: &[Suspect]) -> String {
        let band = self.reading.bands[at];
        let total = self.reading.data[at].foreign;
        let mut text = format!(
            "Band {} at {:.2} eV matches no orbital of the molecule at this level, no line of the \
             usual gases{}.",
            band.id,
            band.maximum_ev,
            if self.surroundings.knows_lamp() {
                " and no ghost of another lamp line"
            } else {
                " (lamp lines were not tested: the photon energy is not that of a known lamp)"
            },
        );
        let named: Vec<String> = (suspects.iter())
            .filter(|s| s.weight / total >= WORTH_NAMING)
            .take(3)
            .map(|s| format!("{} ({:.0} %)", s.name, 100.0 * s.weight / total))
            .collect();
        if !named.is_empty() {
            text.push_str(&format!(" Remote candidates: {}.", named.join(", ")));
        }
        text.push_str(
            " An impurity, a satellite state or a wrong fit may cause it; a purified sample or a \
             level with satellites would tell.",
        );
        text
    }

    fn missing_states(&self) -> Vec<Remark> {
        (self.absent().into_iter())
            .filter(|&s| self.inside(s) >= SURELY_INSIDE)
            .filter(|&s| self.reading.posterior.missing(self.comparison.chart, s) > 0.5)
            .map(|s| {
                let state = &self.comparison.prior.states[s];
                Remark {
                    kind: RemarkKind::MissingBand,
                    position_ev: self.expected[s],
                    band: None,
                    candidates: Vec::new(),
                    text: format!(
                        "{} should give a band near {:.2} eV, well inside the window, and none was \
                         found. It may be weak or lie under a neighbour; more counts or another \
                         photon energy would show it.",
                        state.label, self.expected[s]
                    ),
                }
            })
            .collect()
    }

    /// Pairs of bands whose states may be exchanged, and pairs whose order is not the computed one.
    fn open_orders(&self) -> Vec<Remark> {
        let bands = self.best.len();
        let mut remarks = Vec::new();
        for low in 0..bands {
            for high in low + 1..bands {
                if let Some(remark) = self.open_order(low, high) {
                    remarks.push(remark);
                }
            }
        }
        remarks
    }

    fn open_order(&self, low: usize, high: usize) -> Option<Remark> {
        let states = &self.comparison.prior.states;
        let (here, there) = (&self.best[low], &self.best[high]);
        let mut best_pair: Option<(usize, usize, f64)> = None;
        for &a in here.iter().filter(|a| !there.contains(a)) {
            for &b in there.iter().filter(|b| !here.contains(b)) {
                let exchanged = self.shown(low, b).min(self.shown(high, a));
                if best_pair.is_none_or(|(_, _, p)| exchanged > p) {
                    best_pair = Some((a, b, exchanged));
                }
            }
        }
        let (a, b, exchanged) = best_pair?;
        let reversed = states[a].computed_ev > states[b].computed_ev;
        if exchanged < ORDER_IN_DOUBT && !reversed {
            return None;
        }
        let kept = self.shown(low, a).min(self.shown(high, b));
        let (first, second) = (self.reading.bands[low], self.reading.bands[high]);
        let candidate = |x: usize, y: usize, probability: f64| Candidate {
            cause: format!("{} below {}", states[x].label, states[y].label),
            expected_ev: self.expected[x],
            deviation_ev: first.vertical_ev - self.expected[x],
            probability,
        };
        let order = format!(
            "{} is read as band {} and {} as band {} ({:.0} %); the reverse order has {:.0} %.",
            states[a].label,
            first.id,
            states[b].label,
            second.id,
            100.0 * kept,
            100.0 * exchanged,
        );
        let apart = states[a].computed_ev - states[b].computed_ev;
        let doubt = exchanged >= ORDER_IN_DOUBT;
        let level = &self.level;
        let text = match (reversed, doubt) {
            (true, false) => format!(
                "{order} {level} computes the reverse order, but its known errors outweigh the \
                 {apart:.2} eV between them."
            ),
            (true, true) => format!(
                "{order} {level} computes the reverse order, {apart:.2} eV apart, less than its \
                 known errors. A level with electron correlation, or the bands' vibrational \
                 structure, would decide."
            ),
            _ => format!(
                "{order} {level} cannot decide it; a level with electron correlation, or the \
                 bands' vibrational structure, would."
            ),
        };
        Some(Remark {
            kind: RemarkKind::OpenOrder,
            position_ev: 0.5 * (first.vertical_ev + second.vertical_ev),
            band: Some(first.id),
            candidates: vec![candidate(a, b, kept), candidate(b, a, exchanged)],
            text,
        })
    }

    /// Probability that `band` shows `state`, alone or with others.
    fn shown(&self, band: usize, state: usize) -> f64 {
        (self.comparison.chart.sets.iter().enumerate())
            .filter(|(_, set)| set.contains(&state))
            .map(|(n, _)| decode::share(self.comparison, &self.reading.posterior, band, n))
            .sum()
    }

    fn names(&self, set: &[usize]) -> String {
        let labels: Vec<&str> = set
            .iter()
            .map(|&s| self.comparison.prior.states[s].label.as_str())
            .collect();
        labels.join(" + ")
    }
}

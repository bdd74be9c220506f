//! Why a band was given to its states, sentence by sentence, with the weights behind it.
//!
//! Weights of position, area and look are natural logarithms of odds against a band that has
//! nothing to do with the molecule, reckoned at the posterior mean of shift, scale and strength.
//! The last sentence holds the odds against the next best reading, from the full posterior.

use super::likelihood::{self, Datum};
use super::prior::Prior;
use super::reading::WORTH_LISTING;
use super::{Alternative, Evidence, Stance};

/// One band with the states it was given.
pub(super) struct Case<'a> {
    pub prior: &'a Prior,
    pub datum: &'a Datum,
    pub set: &'a [usize],
    /// Expected energy per state, eV.
    pub expected: &'a [f64],
    /// Expected energy of the whole set, eV.
    pub centre_ev: f64,
    pub ln_strength: f64,
    /// Whether the set's one state shows in several bands.
    pub split: bool,
    pub probability: f64,
    pub runner_up: Option<&'a Alternative>,
    /// Method and basis.
    pub level: String,
}

impl Case<'_> {
    pub(super) fn evidence(&self) -> Vec<Evidence> {
        let ledger = likelihood::ledger(
            self.prior,
            self.datum,
            self.set,
            self.expected,
            self.ln_strength,
        );
        vec![
            self.position(ledger.position, ledger.position_sd_ev),
            self.area(ledger.area, ledger.area_ratio),
            self.look(ledger.look),
            self.rival(),
        ]
    }

    fn position(&self, weight: f64, usual_ev: f64) -> Evidence {
        let off = self.datum.vertical_ev - self.centre_ev;
        let what = if self.set.len() == 1 {
            "this state"
        } else {
            "the middle of these states"
        };
        weighed(
            weight,
            format!(
                "After shift and scale {} puts {what} at {:.2} eV; the band stands {:.2} eV {}, \
                 where {usual_ev:.2} eV is usual.",
                self.level,
                self.centre_ev,
                off.abs(),
                if off < 0.0 { "lower" } else { "higher" },
            ),
        )
    }

    fn area(&self, weight: f64, ratio: Option<f64>) -> Evidence {
        let orbitals: usize = self
            .set
            .iter()
            .map(|&s| self.prior.states[s].degeneracy)
            .sum();
        if self.split {
            return context(format!(
                "The {orbitals} orbitals of this degenerate state share their area between bands, \
                 as spin-orbit or Jahn-Teller splitting makes them."
            ));
        }
        match ratio {
            Some(ratio) => weighed(
                weight,
                format!(
                    "Its area is {ratio:.2} times what {orbitals} orbital{} would give on average; \
                     a factor of two either way is usual.",
                    if orbitals == 1 { "" } else { "s" },
                ),
            ),
            None => context("Its area is not known well enough to count.".to_string()),
        }
    }

    fn look(&self, weight: f64) -> Evidence {
        let words = self.datum.look.words();
        let text = match self.set {
            [state] => format!(
                "The band is {words}; removing an electron from a {} orbital {} this.",
                self.prior.states[*state].character.verdict,
                if weight >= 0.0 {
                    "often gives"
                } else {
                    "seldom gives"
                },
            ),
            several => format!("The band is {words}, shared by {} states.", several.len()),
        };
        weighed(weight, text)
    }

    fn rival(&self) -> Evidence {
        let percent = 100.0 * self.probability;
        let Some(other) = self.runner_up else {
            let odds = self.probability.max(1e-9) / (1.0 - self.probability).max(1e-9);
            return weighed(
                odds.ln(),
                format!(
                    "This reading has {percent:.1} %; no other reaches {:.0} %.",
                    100.0 * WORTH_LISTING
                ),
            );
        };
        let name = match other.hole_states.as_slice() {
            [] => "no hole state at all".to_string(),
            labels => labels.join(" + "),
        };
        weighed(
            (self.probability.max(1e-9) / other.probability).ln(),
            format!(
                "The next best reading, {name}, has {:.0} % against {percent:.0} %.",
                100.0 * other.probability
            ),
        )
    }
}

fn weighed(weight: f64, text: String) -> Evidence {
    let stance = if weight > 0.1 {
        Stance::For
    } else if weight < -0.1 {
        Stance::Against
    } else {
        Stance::Neutral
    };
    Evidence {
        stance,
        weight,
        text,
    }
}

fn context(text: String) -> Evidence {
    Evidence {
        stance: Stance::Neutral,
        weight: 0.0,
        text,
    }
}

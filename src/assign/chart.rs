//! The hypotheses: every admissible way to give bands their hole states, as one graph.
//!
//! Bands are read by rising energy. A place in the graph says how many states (by rising expected
//! energy) have been passed and which of those were put off for a later band. One band then moves
//! from place to place: it takes a set of states, or none (a foreign band), or a degenerate state
//! claims two or three bands in a row. States passed without being taken or put off are missing.
//! Order is therefore kept except where a state is put off, which is allowed only for neighbours:
//! at most [`ORDER_REACH`] places and [`ORDER_REACH_EV`] apart, at most [`WAITING`] at a time.
//!
//! Each complete assignment is exactly one path, so sums over paths are sums over assignments. A
//! band's move has two parts. First it travels: leading states are passed one by one, each missing
//! or put off. Then it takes a set whose first new member is the next state; gaps inside the set
//! are again missing or put off. A band that travels must take something new, otherwise the same
//! assignment would be found twice.

use super::prior::{ORDER_REACH, ORDER_REACH_EV, Prior};
use std::collections::BTreeMap;

/// Most states waiting for a later band when a band is done.
pub(super) const WAITING: usize = 2;
/// Most states in one band.
pub(super) const LARGEST_SET: usize = 6;
/// Most states left out between the lowest and the highest of one band: wider for small sets,
/// where it is likelier.
pub(super) fn allowed_gaps(size: usize) -> usize {
    match size {
        0 | 1 => 0,
        2..=4 => 2,
        _ => 1,
    }
}

/// Neighbours in one band are expected at most this far apart, eV: further apart, a band that was
/// not found is the likelier story.
const SHARING_REACH_EV: f64 = 1.5;

/// Whether `upper` may be the next state above `lower` in one band.
pub(super) fn may_share(prior: &Prior, lower: usize, upper: usize) -> bool {
    prior.states[upper].expected_ev - prior.states[lower].expected_ev <= SHARING_REACH_EV
}

/// Passing one state before a band takes its set.
pub(super) struct Pass {
    pub from: usize,
    pub to: usize,
    /// The state where it is missing; `None` where it is put off.
    pub missing: Option<usize>,
}

/// A band taking a set.
pub(super) struct Take {
    pub from: usize,
    pub to: usize,
    pub set: usize,
    /// Index into [`Chart::gaps`]: states inside the set that are missing.
    pub gap: usize,
}

/// A degenerate state claiming several bands in a row.
pub(super) struct Split {
    pub from: usize,
    pub to: usize,
    pub state: usize,
}

/// The graph for one list of states.
pub(super) struct Chart {
    /// Number of places.
    pub places: usize,
    /// Sets of states that a band may show, each rising.
    pub sets: Vec<Vec<usize>>,
    /// Lists of missing states inside sets; the first is empty.
    pub gaps: Vec<Vec<usize>>,
    /// Passing moves, in an order in which each place is complete before it is left.
    pub passes: Vec<Pass>,
    /// Sets that take only states put off before: these leave from the band's arrival place.
    pub late_takes: Vec<Take>,
    /// Sets with a new state: these leave after travelling.
    pub takes: Vec<Take>,
    /// Splittings, which leave after travelling.
    pub splits: Vec<Split>,
    /// Places where all may end, with the number of states passed there.
    pub ends: Vec<(usize, usize)>,
}

/// States passed; those waiting from earlier bands; those that the travelling band has put off.
/// The last two are kept apart because a band must not take what it has itself put off.
type Place = (usize, Vec<usize>, Vec<usize>);

impl Chart {
    pub(super) fn new(prior: &Prior) -> Self {
        let sets = all_sets(prior);
        Builder::new(prior, sets).build()
    }
}

impl Chart {
    /// The same chart without the places from which no end can be reached.
    fn without_dead_ends(mut self) -> Self {
        let mut alive = vec![false; self.places];
        self.ends.iter().for_each(|(place, _)| alive[*place] = true);
        loop {
            let before = alive.iter().filter(|a| **a).count();
            for take in self.takes.iter().chain(&self.late_takes) {
                alive[take.from] |= alive[take.to];
            }
            self.splits
                .iter()
                .for_each(|m| alive[m.from] |= alive[m.to]);
            self.passes
                .iter()
                .rev()
                .for_each(|m| alive[m.from] |= alive[m.to]);
            if alive.iter().filter(|a| **a).count() == before {
                break;
            }
        }
        let mut number = vec![0; self.places];
        let mut count = 0;
        for place in 0..self.places {
            if alive[place] {
                number[place] = count;
                count += 1;
            }
        }
        self.places = count;
        for takes in [&mut self.takes, &mut self.late_takes] {
            takes.retain(|m| alive[m.to]);
            takes
                .iter_mut()
                .for_each(|m| (m.from, m.to) = (number[m.from], number[m.to]));
        }
        self.splits.retain(|m| alive[m.to]);
        self.splits
            .iter_mut()
            .for_each(|m| (m.from, m.to) = (number[m.from], number[m.to]));
        self.passes.retain(|m| alive[m.to]);
        self.passes
            .iter_mut()
            .for_each(|m| (m.from, m.to) = (number[m.from], number[m.to]));
        self.ends
            .iter_mut()
            .for_each(|(place, _)| *place = number[*place]);
        self
    }
}

/// All sets allowed by size, gaps and energies.
fn all_sets(prior: &Prior) -> Vec<Vec<usize>> {
    let states = prior.states.len();
    let mut sets = Vec::new();
    for first in 0..states {
        let mut open = vec![vec![first]];
        while let Some(set) = open.pop() {
            if set.len() < LARGEST_SET {
                let last = set[set.len() - 1];
                for next in last + 1..(last + 4).min(states) {
                    let mut longer = set.clone();
                    longer.push(next);
                    if next - first + 1 - longer.len() <= 2 && may_share(prior, last, next) {
                        open.push(longer);
                    }
                }
            }
            let missing = set[set.len() - 1] - first + 1 - set.len();
            if missing <= allowed_gaps(set.len()) {
                sets.push(set);
            }
        }
    }
    sets.sort();
    sets
}

struct Builder<'a> {
    prior: &'a Prior,
    sets: Vec<Vec<usize>>,
    by_member: Vec<Vec<usize>>,
    numbers: BTreeMap<Place, usize>,
    gap_numbers: BTreeMap<Vec<usize>, usize>,
    /// Places yet to be left, with what may leave them.
    open: BTreeMap<Place, Reached>,
    passes: Vec<(usize, Pass)>,
    late_takes: Vec<Take>,
    takes: Vec<Take>,
    splits: Vec<Split>,
}

#[derive(Clone, Copy, Default)]
struct Reached {
    arrived: bool,
    done_arrival: bool,
    done_travel: bool,
}

impl<'a> Builder<'a> {
    fn new(prior: &'a Prior, sets: Vec<Vec<usize>>) -> Self {
        let n = prior.states.len();
        let mut by_member = vec![Vec::new(); n];
        // A set is listed under each of its members: the lower ones may have been put off.
        for (number, set) in sets.iter().enumerate() {
            for &member in set {
                by_member[member].push(number);
            }
        }
        Builder {
            prior,
            sets,
            by_member,
            numbers: BTreeMap::new(),
            gap_numbers: BTreeMap::from([(Vec::new(), 0)]),
            open: BTreeMap::new(),
            passes: Vec::new(),
            late_takes: Vec::new(),
            takes: Vec::new(),
            splits: Vec::new(),
        }
    }

    fn number(&mut self, place: &Place, arrived: bool) -> usize {
        let next = self.numbers.len();
        let number = *self.numbers.entry(place.clone()).or_insert(next);
        self.open.entry(place.clone()).or_default().arrived |= arrived;
        number
    }

    fn gap(&mut self, states: Vec<usize>) -> usize {
        let next = self.gap_numbers.len();
        *self.gap_numbers.entry(states).or_insert(next)
    }

    fn build(mut self) -> Chart {
        self.number(&(0, Vec::new(), Vec::new()), true);
        loop {
            let todo: Vec<(Place, Reached)> = (self.open.iter())
                .filter(|(_, r)| !r.done_travel || (r.arrived && !r.done_arrival))
                .map(|(place, r)| (place.clone(), *r))
                .collect();
            if todo.is_empty() {
                break;
            }
            for (place, reached) in todo {
                if reached.arrived && !reached.done_arrival {
                    self.take_late(&place);
                    self.open.entry(place.clone()).or_default().done_arrival = true;
                }
                if !reached.done_travel {
                    self.travel(&place);
                    self.open.entry(place).or_default().done_travel = true;
                }
            }
        }
        self.passes
            .sort_by_key(|(passed, pass)| (*passed, pass.from, pass.to));
        let mut gaps = vec![Vec::new(); self.gap_numbers.len()];
        for (states, number) in self.gap_numbers {
            gaps[number] = states;
        }
        let ends = (self.numbers.iter())
            .filter(|(place, _)| place.1.is_empty() && self.open[*place].arrived)
            .map(|((passed, _, _), number)| (*number, *passed))
            .collect();
        let chart = Chart {
            places: self.numbers.len(),
            sets: self.sets,
            gaps,
            passes: self.passes.into_iter().map(|(_, pass)| pass).collect(),
            late_takes: self.late_takes,
            takes: self.takes,
            splits: self.splits,
            ends,
        };
        chart.without_dead_ends()
    }

    /// Sets made of waiting states alone.
    fn take_late(&mut self, place: &Place) {
        let (passed, waiting, _) = place;
        let from = self.number(place, true);
        for pick in 1..1usize << waiting.len() {
            let set: Vec<usize> = (0..waiting.len())
                .filter(|i| pick >> i & 1 == 1)
                .map(|i| waiting[i])
                .collect();
            let Ok(set) = self.sets.binary_search(&set) else {
                continue;
            };
            let left = without(waiting, &self.sets[set]);
            let to = self.number(&(*passed, left, Vec::new()), true);
            self.late_takes.push(Take {
                from,
                to,
                set,
                gap: 0,
            });
        }
    }

    /// Passing the next state, or taking a set of which it is the first new member.
    fn travel(&mut self, place: &Place) {
        let (next, waiting, put_off) = place;
        let next = *next;
        if next == self.prior.states.len() || self.hopeless(place) {
            return;
        }
        let from = self.number(place, false);
        if next + 1 < self.prior.states.len() {
            let to = self.number(&(next + 1, waiting.clone(), put_off.clone()), false);
            self.passes.push((
                next,
                Pass {
                    from,
                    to,
                    missing: Some(next),
                },
            ));
            if put_off.len() < WAITING {
                let mut longer = put_off.clone();
                longer.push(next);
                let to = self.number(&(next + 1, waiting.clone(), longer), false);
                self.passes.push((
                    next,
                    Pass {
                        from,
                        to,
                        missing: None,
                    },
                ));
            }
        }
        if self.prior.states[next].degeneracy > 1 {
            let left = merged(waiting, put_off, &[]);
            if self.may_stay(&left, next) {
                let to = self.number(&(next + 1, left, Vec::new()), true);
                self.splits.push(Split {
                    from,
                    to,
                    state: next,
                });
            }
        }
        for set_number in self.by_member[next].clone() {
            let set = self.sets[set_number].clone();
            if set.iter().any(|s| *s < next && !waiting.contains(s)) {
                continue;
            }
            let last = set[set.len() - 1];
            let inside: Vec<usize> = (next + 1..last).filter(|s| !set.contains(s)).collect();
            for pick in 0..1usize << inside.len() {
                let later = |i: &usize| pick >> i & 1 == 1;
                let late: Vec<usize> = (0..inside.len()).filter(later).map(|i| inside[i]).collect();
                let left = merged(&without(waiting, &set), put_off, &late);
                if !self.may_stay(&left, last) {
                    continue;
                }
                let gap = self.gap(without(&inside, &late));
                let to = self.number(&(last + 1, left, Vec::new()), true);
                self.takes.push(Take {
                    from,
                    to,
                    set: set_number,
                    gap,
                });
            }
        }
    }

    /// Whether something waits here that nothing taken from here on leaves a chance.
    fn hopeless(&self, place: &Place) -> bool {
        let (next, waiting, put_off) = place;
        let too_far = |state: &usize| !may_wait(self.prior, *state, *next);
        let widest = LARGEST_SET + 1;
        put_off.iter().any(too_far)
            || waiting
                .iter()
                .any(|state| too_far(state) && next - state >= widest)
    }

    /// Whether all of `left` may wait after `taken`, the highest state so far, has been taken.
    fn may_stay(&self, left: &[usize], taken: usize) -> bool {
        left.len() <= WAITING && left.iter().all(|&s| may_wait(self.prior, s, taken))
    }
}

/// Whether `state` may be taken by a later band than `taken`, which is expected above it.
pub(super) fn may_wait(prior: &Prior, state: usize, taken: usize) -> bool {
    let gap_ev = prior.states[taken].expected_ev - prior.states[state].expected_ev;
    taken - state <= ORDER_REACH && gap_ev <= ORDER_REACH_EV
}

fn without(list: &[usize], remove: &[usize]) -> Vec<usize> {
    list.iter()
        .copied()
        .filter(|s| !remove.contains(s))
        .collect()
}

fn merged(first: &[usize], second: &[usize], third: &[usize]) -> Vec<usize> {
    let mut all = [first, second, third].concat();
    all.sort_unstable();
    all
}

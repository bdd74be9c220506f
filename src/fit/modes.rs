//! A vibrational progression in up to three modes, grown member by member.

use super::grouping::LineView;
use crate::numeric::statistics::{ln_normal, log_sum_exp};

/// Spacings of resolved members, eV: from skeletal modes to hydrogen stretches.
const SPACINGS: [f64; 2] = [0.03, 0.55];

/// Modes that one band may show.
const MODES: usize = 3;

/// Probability that a band shows members at all, and that it shows them in one more mode.
const ONE_MORE_MODE: [f64; MODES] = [0.5, 0.25, 0.15];

/// Relative scatter of a spacing from one member to the next (anharmonicity included).
const SPACING_SCATTER: f64 = 0.03;

/// Lines broader than this are seldom single vibrational members: by e for each further scale, eV.
const BLURRED_EV: f64 = 0.15;
const BLURRED_SCALE_EV: f64 = 0.05;

/// Scatter of ln(intensity ratio) about Poisson's law.
const RATIO_SCATTER: f64 = 0.6;

/// Least distance of members over their mean width, below which they are not resolved, and the
/// uncertainty of a position, over a spacing, above which nothing is known about regularity.
const RESOLVED: f64 = 0.7;
const KNOWN: f64 = 0.25;

/// One vibrational member: a line, or several that make up its shape.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Member {
    /// Lines of the trace, the strongest first.
    pub lines: Vec<usize>,
    /// Centre and width of the strongest line.
    pub view: LineView,
    /// Area of all lines.
    pub area: f64,
    /// Quanta in each mode.
    pub quanta: [usize; MODES],
}

impl Member {
    pub fn new(k: usize, line: &LineView) -> Self {
        Member {
            lines: vec![k],
            view: *line,
            area: line.area,
            quanta: [0; MODES],
        }
    }

    /// Adds a component to its shape.
    pub fn absorb(&mut self, k: usize, line: &LineView) {
        self.area += line.area;
        if line.area > self.view.area {
            self.view = *line;
            self.lines.insert(0, k);
        } else {
            self.lines.push(k);
        }
    }
}

/// Members of a band by rising energy.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Progression {
    pub members: Vec<Member>,
    /// Modes seen.
    pub modes: usize,
}

impl Progression {
    pub fn new(origin: Member) -> Self {
        Progression {
            members: vec![origin],
            modes: 0,
        }
    }

    fn at(&self, quanta: [usize; MODES]) -> Option<&Member> {
        self.members.iter().find(|m| m.quanta == quanta)
    }

    /// Member one quantum of `mode` below.
    fn below(&self, quanta: [usize; MODES], mode: usize) -> Option<&Member> {
        let mut lower = quanta;
        lower[mode] = lower[mode].checked_sub(1)?;
        self.at(lower)
    }

    /// Last seen spacing of a mode along the chain that ends below `quanta`, and its variance.
    fn spacing(&self, quanta: [usize; MODES], mode: usize) -> Option<(f64, f64)> {
        let along = self.below(quanta, mode).and_then(|upper| {
            let lower = self.below(upper.quanta, mode)?;
            Some((upper, lower))
        });
        let (upper, lower) = along.or_else(|| {
            let mut one = [0; MODES];
            one[mode] = 1;
            Some((self.at(one)?, self.at([0; MODES])?))
        })?;
        let variance = upper.view.position_sd.powi(2) + lower.view.position_sd.powi(2);
        Some((upper.view.position - lower.view.position, variance))
    }

    /// Free places of the lattice next to a member.
    fn free_places(&self) -> Vec<[usize; MODES]> {
        let mut places = Vec::new();
        for member in &self.members {
            for mode in 0..self.modes {
                let mut up = member.quanta;
                up[mode] += 1;
                if self.at(up).is_none() && !places.contains(&up) {
                    places.push(up);
                }
            }
        }
        places
    }

    /// Predicted position and its variance at a place of the lattice, from the nearest member.
    fn predicted(&self, quanta: [usize; MODES]) -> Option<(f64, f64)> {
        (0..self.modes).find_map(|mode| {
            let below = self.below(quanta, mode)?;
            let (spacing, variance) = self.spacing(quanta, mode)?;
            let scatter = SPACING_SCATTER * spacing;
            Some((
                below.view.position + spacing,
                variance + below.view.position_sd.powi(2) + scatter * scatter,
            ))
        })
    }

    /// Expected ln(area) at a place and its scatter: Poisson's law along each chain.
    fn expected_ln_area(&self, quanta: [usize; MODES]) -> Option<(f64, f64)> {
        let mut estimates = Vec::new();
        for mode in 0..self.modes {
            let Some(below) = self.below(quanta, mode) else {
                continue;
            };
            let n = quanta[mode];
            match self.below(below.quanta, mode) {
                Some(lower) => {
                    let ratio = (below.area / lower.area).ln() + ((n - 1) as f64 / n as f64).ln();
                    estimates.push((below.area.ln() + ratio, RATIO_SCATTER));
                }
                None => {
                    // A combination member repeats the ratio of the fundamental to the origin.
                    let mut one = [0; MODES];
                    one[mode] = 1;
                    let origin = self.at([0; MODES]);
                    match (self.at(one), origin) {
                        (Some(first), Some(origin)) if below.quanta != origin.quanta => {
                            let ratio = (first.area / origin.area).ln();
                            estimates.push((below.area.ln() + ratio, RATIO_SCATTER));
                        }
                        _ => estimates.push((below.area.ln() - 0.7, 1.2)),
                    }
                }
            }
        }
        estimates
            .into_iter()
            .min_by(|a, b| a.1.total_cmp(&b.1).then(b.0.total_cmp(&a.0)))
    }

    /// The progression with line `k` as a further member, in each way that fits, with the log
    /// density of the line in that role.
    pub fn extended_by(&self, k: usize, line: &LineView) -> Vec<(Progression, f64)> {
        let mut ways = Vec::new();
        let resolved = self.members.iter().all(|m| {
            let apart = (line.position - m.view.position).abs();
            apart > RESOLVED * 0.5 * (line.width + m.view.width)
                && line.position_sd.max(m.view.position_sd) < KNOWN * apart
        });
        if !resolved {
            return ways;
        }
        let width =
            self.width_density(line) - (line.width - BLURRED_EV).max(0.0) / BLURRED_SCALE_EV;
        for place in self.free_places() {
            let (Some((position, variance)), Some((ln_area, scatter))) =
                (self.predicted(place), self.expected_ln_area(place))
            else {
                continue;
            };
            let sd = (variance + line.position_sd.powi(2)).sqrt();
            if (line.position - position).abs() > 5.0 * sd {
                continue;
            }
            let relative = line.area_sd / line.area;
            let area_sd = (scatter * scatter + relative.min(1.0).powi(2)).sqrt();
            let density = ln_normal(line.position, position, sd)
                + ln_normal(line.area.ln(), ln_area, area_sd)
                + width;
            ways.push((self.with(k, line, place, self.modes), density));
        }
        if self.modes < MODES {
            let origin = &self.members[0];
            let spacing = line.position - origin.view.position;
            if (SPACINGS[0]..=SPACINGS[1]).contains(&spacing) {
                let begins = ONE_MORE_MODE[self.modes];
                let position = -(spacing * (SPACINGS[1] / SPACINGS[0]).ln()).ln();
                let ratio = (line.area / origin.area).ln();
                // A first mode may have its maximum further up; another one seldom.
                let area = if self.modes == 0 {
                    ln_normal(ratio, -0.4, 1.1)
                } else {
                    ln_normal(ratio, -1.2, 1.0)
                };
                let mut place = [0; MODES];
                place[self.modes] = 1;
                let density = begins.ln() + position + area + width;
                ways.push((self.with(k, line, place, self.modes + 1), density));
            }
        }
        ways
    }

    /// Log density of a member's width: that of the others within an eighth, now and then more.
    fn width_density(&self, line: &LineView) -> f64 {
        let total: f64 = self.members.iter().map(|m| m.view.area).sum();
        let mean = self
            .members
            .iter()
            .map(|m| m.view.area / total * m.view.width.ln())
            .sum::<f64>();
        let measured = (line.width_sd / line.width).min(1.0);
        let sd = (0.12_f64.powi(2) + measured * measured).sqrt();
        let ln_width = line.width.ln();
        log_sum_exp(&[
            0.85_f64.ln() + ln_normal(ln_width, mean, sd),
            0.15_f64.ln() + ln_normal(ln_width, mean, 0.5),
        ])
    }

    fn with(&self, k: usize, line: &LineView, place: [usize; MODES], modes: usize) -> Self {
        let mut longer = self.clone();
        let mut member = Member::new(k, line);
        member.quanta = place;
        longer.members.push(member);
        longer.modes = modes;
        longer
    }

    /// Where the next member of each mode should stand, and with which area, if there is one.
    pub fn expected_next(&self) -> Vec<(f64, f64)> {
        (0..self.modes)
            .filter_map(|mode| {
                let mut next = [0; MODES];
                next[mode] = 1;
                while self.at(next).is_some() {
                    next[mode] += 1;
                }
                let (position, _) = self.predicted(next)?;
                let (ln_area, _) = self.expected_ln_area(next)?;
                Some((position, ln_area.exp()))
            })
            .collect()
    }

    /// Mean spacing of the mode with most members along its main chain, eV.
    pub fn mean_spacing(&self) -> Option<f64> {
        let origin = self.at([0; MODES])?;
        (0..self.modes)
            .filter_map(|mode| {
                let mut top = [0; MODES];
                loop {
                    let mut up = top;
                    up[mode] += 1;
                    if self.at(up).is_none() {
                        break;
                    }
                    top = up;
                }
                let end = self.at(top)?;
                let quanta = top[mode];
                (quanta > 0).then(|| {
                    (
                        quanta,
                        (end.view.position - origin.view.position) / quanta as f64,
                    )
                })
            })
            .fold(None, |best: Option<(usize, f64)>, found| match best {
                Some(b) if b.0 >= found.0 => Some(b),
                _ => Some(found),
            })
            .map(|(_, spacing)| spacing)
    }
}

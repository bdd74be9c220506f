//! Groups lines into bands, with odds.
//!
//! A line is one of three things: the first line of a new ionization, a further member of the
//! vibrational progression of an earlier one, or a further component of a shape that one Voigt
//! profile does not describe. Every reading of the whole trace gets a log score, the sum over its
//! lines of log densities in position, area and width under the role that the line plays, and over
//! its bands of the probability that the next member, which such an envelope leads one to expect,
//! stays below the noise. Readings are built line by line in order of energy and the best
//! [`BEAM`] kept.
//!
//! The densities are broad and stated as constants below. They say: valence ionizations lie about
//! 1.4 eV apart; vibrational spacings lie between 0.03 and 0.55 eV (those of hydrogen stretches);
//! members are evenly spaced to a few per cent, equally wide, and their intensities follow
//! Poisson's law (displaced harmonic oscillators) within a factor of two; bands are more often
//! steep on the low-energy side. These are common practice of the trade, no source.

use super::modes::{Member, Progression};
use crate::numeric::statistics::{ln_normal, log_sum_exp, normal_cdf};

/// Readings kept while lines are added.
const BEAM: usize = 400;

/// Ionizations per eV of a valence spectrum.
const IONIZATIONS_PER_EV: f64 = 0.7;

/// Density of a new ionization's first line in ln area and ln width: anything within a few
/// factors of e.
const LN_AREA_DENSITY: f64 = 0.2;
const LN_WIDTH_DENSITY: f64 = 0.35;

/// Probability that a band's shape takes one more component.
const COMPONENT: f64 = 0.5;

/// Separation of a component from its shape's strongest line, in widths, up to which it counts as
/// near, and the scatter beyond.
const ONE_SHAPE: f64 = 1.0;
const ONE_SHAPE_SLACK: f64 = 0.25;

/// Probability that a resolved progression stands on a floor of its own that is not resolved, and
/// how much broader than a member such a floor is at least.
const PEDESTAL: f64 = 0.5;
const BROADER: f64 = 1.5;

/// Probability that a band has a weak line that only sums up part of its envelope, and the largest
/// share of the band's area that such a line has.
const WING: f64 = 0.5;
const WING_SHARE: f64 = 0.08;

/// Foreign lines per eV, and the scatter of ln(area) among a molecule's ionizations.
const FOREIGN_PER_EV: f64 = 0.15;
const STRENGTH_SCATTER: f64 = 0.9;

/// How far beyond the last resolved member blurred ones are looked for, eV.
const BEYOND: f64 = 0.4;

/// Probability that a band shows one member only.
const SINGLE: f64 = 0.5;

/// Probability that a visible next member is missing all the same.
const VANISHED: f64 = 0.02;

/// A line as the grouping sees it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct LineView {
    pub position: f64,
    pub position_sd: f64,
    pub area: f64,
    pub area_sd: f64,
    pub width: f64,
    pub width_sd: f64,
}

/// Lines that are one band, and how they hang together.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Group {
    pub lines: Vec<usize>,
    pub progression: Progression,
}

/// A reading of all lines so far.
#[derive(Debug, Clone)]
struct Reading {
    groups: Vec<Group>,
    score: f64,
}

/// A reading of all lines, with its probability.
#[derive(Debug, Clone)]
pub(super) struct Scored {
    pub groups: Vec<Group>,
    pub probability: f64,
}

/// Readings of `lines` (by rising position) as bands, most probable first, at most `most`.
/// `visible(energy, width)` is the area that a line there needs to be seen.
pub(super) fn readings(
    lines: &[LineView],
    visible: &dyn Fn(f64, f64) -> f64,
    most: usize,
) -> Vec<Scored> {
    let mut beam = vec![Reading {
        groups: Vec::new(),
        score: 0.0,
    }];
    for k in 0..lines.len() {
        let mut next: Vec<Reading> = beam.iter().flat_map(|r| grow(r, k, lines)).collect();
        // Ties are broken by the order in which readings arise, which is fixed.
        next.sort_by(|a, b| b.score.total_cmp(&a.score));
        next.truncate(BEAM);
        beam = next;
    }
    for reading in &mut beam {
        for group in &reading.groups {
            reading.score += ended(group, lines, visible);
        }
    }
    joined(&mut beam, |r| with_pedestals(r, lines));
    beam.sort_by(|a, b| b.score.total_cmp(&a.score));
    beam.truncate(BEAM);
    joined(&mut beam, |r| with_wings(r, lines));
    for reading in &mut beam {
        reading.score += strengths(&reading.groups, lines);
    }
    // Different roles of the lines within the same bands are one reading.
    let mut distinct: Vec<(Vec<Vec<usize>>, Reading, Vec<f64>)> = Vec::new();
    for reading in beam {
        let mut partition: Vec<Vec<usize>> =
            reading.groups.iter().map(|g| g.lines.clone()).collect();
        partition.sort();
        match distinct.iter_mut().find(|d| d.0 == partition) {
            Some(same) => {
                same.2.push(reading.score);
                if reading.score > same.1.score {
                    same.1 = reading;
                }
            }
            None => {
                let score = reading.score;
                distinct.push((partition, reading, vec![score]));
            }
        }
    }
    let mut scored: Vec<(f64, Reading)> = distinct
        .into_iter()
        .map(|(_, reading, scores)| (log_sum_exp(&scores), reading))
        .collect();
    scored.sort_by(|a, b| b.0.total_cmp(&a.0));
    scored.truncate(most);
    let logs: Vec<f64> = scored.iter().map(|s| s.0).collect();
    let all = log_sum_exp(&logs);
    scored
        .into_iter()
        .map(|(log, reading)| Scored {
            groups: reading.groups,
            probability: (log - all).exp(),
        })
        .collect()
}

/// Adds the readings in which bands of others are joined; those that arise are looked at in their
/// turn, since more than two may join.
fn joined(beam: &mut Vec<Reading>, join: impl Fn(&Reading) -> Vec<Reading>) {
    let mut from = 0;
    while from < beam.len() {
        let more: Vec<Reading> = beam[from..].iter().flat_map(&join).collect();
        from = beam.len();
        beam.extend(more);
    }
}

/// Log weight of the bands' areas: ionizations are of like strength within a factor of a few;
/// what is much weaker is foreign, and that is rarer. (Relative to the even density that every
/// band got when it was begun.)
fn strengths(groups: &[Group], lines: &[LineView]) -> f64 {
    let areas: Vec<f64> = (groups.iter())
        .map(|g| g.lines.iter().map(|&k| lines[k].area).sum())
        .collect();
    let squares: f64 = areas.iter().map(|a| a * a).sum();
    let typical = (squares / areas.iter().sum::<f64>()).ln();
    let even = (IONIZATIONS_PER_EV * LN_AREA_DENSITY).ln();
    let weight = |area: &f64| {
        log_sum_exp(&[
            IONIZATIONS_PER_EV.ln() + ln_normal(area.ln(), typical, STRENGTH_SCATTER),
            (FOREIGN_PER_EV * LN_AREA_DENSITY).ln(),
        ]) - even
    };
    areas.iter().map(weight).sum()
}

/// All ways to give line `k` a place in a reading.
fn grow(reading: &Reading, k: usize, lines: &[LineView]) -> Vec<Reading> {
    let line = &lines[k];
    let mut grown = Vec::new();
    let mut fresh = reading.clone();
    fresh.groups.push(Group {
        lines: vec![k],
        progression: Progression::new(Member::new(k, line)),
    });
    fresh.score += (IONIZATIONS_PER_EV * LN_AREA_DENSITY * LN_WIDTH_DENSITY).ln();
    grown.push(fresh);
    for (g, group) in reading.groups.iter().enumerate() {
        for (progression, density) in roles(group, k, lines) {
            let mut next = reading.clone();
            next.groups[g].lines.push(k);
            next.groups[g].progression = progression;
            next.score += density;
            grown.push(next);
        }
    }
    grown
}

/// The roles that line `k` can play in a group, each with its log density.
fn roles(group: &Group, k: usize, lines: &[LineView]) -> Vec<(Progression, f64)> {
    let line = &lines[k];
    let mut roles = Vec::new();
    if let Some((member, density)) = as_component(group, line, lines) {
        let mut progression = group.progression.clone();
        progression.members[member].absorb(k, line);
        roles.push((progression, density));
    }
    roles.extend(group.progression.extended_by(k, line));
    roles
}

/// Line as a component of an existing member's shape: which member, and the log density.
fn as_component(group: &Group, line: &LineView, lines: &[LineView]) -> Option<(usize, f64)> {
    let mut best: Option<(f64, usize, f64)> = None;
    for (m, member) in group.progression.members.iter().enumerate() {
        for &other in &member.lines {
            let other = &lines[other];
            let mean_width = 0.5 * (line.width + other.width);
            let apart = (line.position - other.position).abs() / mean_width;
            if apart > 1.3 || best.as_ref().is_some_and(|b| b.0 <= apart) {
                continue;
            }
            let ln_area = (line.area / other.area).ln();
            let ln_width = (line.width / other.width).ln();
            // Density over energy: (1/mean width) × density over separation in widths.
            let position = ln_normal(apart, 0.5, 0.3) - mean_width.ln();
            // Down to a fiftieth of its neighbour, or up to as much more.
            let area = if ln_area.abs() < 4.0 {
                -(8.0_f64).ln()
            } else {
                -8.0
            };
            let width = ln_normal(ln_width, 0.0, 0.6);
            // Steep towards low energy: the weaker component on the high side.
            let side: f64 = if ln_area < 0.0 { 1.4 } else { 0.6 };
            let density =
                COMPONENT.ln() + position + area + width + side.ln() + reach(line, member);
            best = Some((apart, m, density));
        }
    }
    best.map(|(_, m, density)| (m, density))
}

/// Log weight of how far a component stands from the strongest line of the shape that it mends:
/// one skewed shape does not reach over several widths, though a chain of components might.
fn reach(line: &LineView, member: &Member) -> f64 {
    let strongest = &member.view;
    let apart = (line.position - strongest.position).abs() / line.width.max(strongest.width);
    -0.5 * ((apart - ONE_SHAPE).max(0.0) / ONE_SHAPE_SLACK).powi(2)
}

/// Log probability that a band shows no further member.
fn ended(group: &Group, lines: &[LineView], visible: &dyn Fn(f64, f64) -> f64) -> f64 {
    let progression = &group.progression;
    // A line much sharper than the one whose shape it should mend is foreign to it.
    let sharpness: f64 = progression
        .members
        .iter()
        .flat_map(|m| {
            let width = m
                .lines
                .iter()
                .map(|&k| lines[k].width * lines[k].area)
                .sum::<f64>()
                / m.area;
            m.lines.iter().map(move |&k| (width / lines[k].width).ln())
        })
        .map(|ratio| -0.5 * ((ratio - 0.7).max(0.0) / 0.4).powi(2))
        .sum();
    if progression.members.len() < 2 {
        return SINGLE.ln() + sharpness;
    }
    let width = lines[group.lines[0]].width;
    let unseen = |position: f64, area: f64| {
        let least = visible(position, width);
        if least == f64::INFINITY {
            return 1.0;
        }
        VANISHED + (1.0 - VANISHED) * normal_cdf((least / area).ln() / 0.8)
    };
    progression
        .expected_next()
        .into_iter()
        .map(|(position, area)| unseen(position, area).ln())
        .sum::<f64>()
        + sharpness
}

/// Readings in which a broad unresolved band is part of a progression: higher members and other
/// modes that blur into each other, under the resolved members or beyond the last of them.
fn with_pedestals(reading: &Reading, lines: &[LineView]) -> Vec<Reading> {
    let mut merged = Vec::new();
    for (p, progression) in reading.groups.iter().enumerate() {
        let members = &progression.progression.members;
        if members.len() < 2 {
            continue;
        }
        let above = Extent::of(&progression.lines, lines);
        let line_width = members[0].view.width;
        let low = members[0].view.position - 0.5 * line_width;
        let high = members[members.len() - 1].view.position + BEYOND;
        for (q, pedestal) in reading.groups.iter().enumerate() {
            let below = Extent::of(&pedestal.lines, lines);
            if p == q
                || pedestal.progression.members.len() > 1
                || !(low..=high).contains(&below.centre)
                || below.width < BROADER * line_width
                || below.width > 3.0 * above.width
            {
                continue;
            }
            let ln_area = (below.area / above.area).ln();
            let widths = 3.0 * above.width / (BROADER * line_width);
            let together = PEDESTAL.ln() - (high - low).ln() + ln_normal(ln_area, -1.8, 1.2)
                - widths.max(2.0).ln().ln();
            let apart =
                (IONIZATIONS_PER_EV * LN_AREA_DENSITY * LN_WIDTH_DENSITY).ln() + SINGLE.ln();
            let mut next = reading.clone();
            let floor = next.groups[q].lines.clone();
            next.groups[p].lines.extend(floor);
            next.groups[p].lines.sort();
            next.groups.remove(q);
            next.score += together - apart;
            merged.push(next);
        }
    }
    merged
}

/// Readings in which a weak line on a band or on its high-energy side is part of its envelope:
/// combination members and the tail of a progression that one line sums up.
fn with_wings(reading: &Reading, lines: &[LineView]) -> Vec<Reading> {
    let mut merged = Vec::new();
    for (q, wing) in reading.groups.iter().enumerate() {
        let &[k] = &wing.lines[..] else { continue };
        let line = &lines[k];
        // The strongest band that the line may belong to.
        let home = (reading.groups.iter().enumerate())
            .filter(|(p, _)| *p != q)
            .filter_map(|(p, group)| {
                let whole = Extent::of(&group.lines, lines);
                let ends = |f: fn(f64, f64) -> f64, from| {
                    let positions = group.lines.iter().map(|&k| lines[k].position);
                    positions.fold(from, f)
                };
                let (low, high) = (ends(f64::min, f64::MAX), ends(f64::max, f64::MIN) + BEYOND);
                let sharpest = (group.lines.iter())
                    .map(|&k| lines[k].width)
                    .fold(f64::MAX, f64::min);
                let fits = (low..=high).contains(&line.position)
                    && line.area < WING_SHARE * whole.area
                    && line.width > 0.7 * sharpest;
                fits.then_some((p, whole.area, high - low))
            })
            .max_by(|a, b| a.1.total_cmp(&b.1));
        let Some((p, _, range)) = home else { continue };
        let together = WING.ln() - range.ln() + (LN_AREA_DENSITY * LN_WIDTH_DENSITY).ln();
        let apart = (IONIZATIONS_PER_EV * LN_AREA_DENSITY * LN_WIDTH_DENSITY).ln() + SINGLE.ln();
        let mut next = reading.clone();
        next.groups[p].lines.push(k);
        next.groups[p].lines.sort();
        next.groups.remove(q);
        next.score += together - apart;
        merged.push(next);
    }
    merged
}

/// Centre, width and area of several lines together.
struct Extent {
    centre: f64,
    width: f64,
    area: f64,
}

impl Extent {
    fn of(members: &[usize], lines: &[LineView]) -> Self {
        let area: f64 = members.iter().map(|&k| lines[k].area).sum();
        let mean = |f: &dyn Fn(&LineView) -> f64| {
            members
                .iter()
                .map(|&k| lines[k].area / area * f(&lines[k]))
                .sum::<f64>()
        };
        let centre = mean(&|l| l.position);
        // Squares of widths add; 8·ln 2 turns a variance into the square of a width.
        let eight_ln_2 = 8.0 * std::f64::consts::LN_2;
        let square = mean(&|l| l.width.powi(2) + eight_ln_2 * (l.position - centre).powi(2));
        Extent {
            centre,
            width: square.sqrt(),
            area,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(position: f64, area: f64, width: f64) -> LineView {
        LineView {
            position,
            position_sd: 0.003,
            area,
            area_sd: 0.03 * area,
            width,
            width_sd: 0.05 * width,
        }
    }

    fn best(lines: &[LineView]) -> (Vec<Vec<usize>>, f64) {
        let found = readings(lines, &|_, _| 50.0, 8);
        let total: f64 = found.iter().map(|s| s.probability).sum();
        assert!((total - 1.0).abs() < 1e-12);
        let mut partition: Vec<Vec<usize>> =
            found[0].groups.iter().map(|g| g.lines.clone()).collect();
        partition.sort();
        (partition, found[0].probability)
    }

    #[test]
    fn far_apart_lines_are_bands_of_their_own() {
        let (partition, p) = best(&[
            line(9.0, 1000.0, 0.3),
            line(10.3, 1200.0, 0.35),
            line(12.9, 900.0, 0.4),
        ]);
        assert_eq!(partition, [vec![0], vec![1], vec![2]]);
        assert!(p > 0.9, "{p}");
    }

    #[test]
    fn a_regular_series_is_one_band() {
        // Huang-Rhys factor 2, spacing 0.11 eV with a little anharmonicity.
        let mut area = 1000.0;
        let mut lines = Vec::new();
        for v in 0..7 {
            let n = v as f64;
            lines.push(line(12.0 + 0.11 * n - 0.0005 * n * n, area, 0.06));
            area *= 2.0 / (n + 1.0);
        }
        let (partition, p) = best(&lines);
        assert_eq!(partition, [vec![0, 1, 2, 3, 4, 5, 6]]);
        assert!(p > 0.9, "{p}");
    }

    #[test]
    fn two_modes_on_a_strong_origin_are_one_band() {
        let (partition, p) = best(&[
            line(10.88, 5000.0, 0.03),
            line(11.03, 500.0, 0.03),
            line(11.077, 900.0, 0.03),
        ]);
        assert_eq!(partition, [vec![0, 1, 2]]);
        assert!(p > 0.6, "{p}");
    }

    #[test]
    fn a_sharp_line_on_a_broad_band_is_foreign_to_it() {
        let (partition, p) = best(&[line(12.61, 300.0, 0.03), line(12.8, 9000.0, 0.8)]);
        assert_eq!(partition, [vec![0], vec![1]]);
        assert!(p > 0.9, "{p}");
    }

    #[test]
    fn interleaved_progressions_are_told_apart() {
        let mut lines = Vec::new();
        let mut area = 2000.0;
        for v in 0..5 {
            lines.push(line(12.0 + 0.20 * v as f64, area, 0.04));
            area *= 1.2 / (v + 1) as f64;
        }
        let mut area = 1500.0;
        for v in 0..5 {
            lines.push(line(12.53 + 0.13 * v as f64, area, 0.06));
            area *= 1.5 / (v + 1) as f64;
        }
        lines.sort_by(|a, b| a.position.total_cmp(&b.position));
        let found = readings(&lines, &|_, _| 30.0, 8);
        let first: Vec<f64> = found[0]
            .groups
            .iter()
            .map(|g| lines[g.lines[0]].position)
            .collect();
        assert_eq!(found[0].groups.len(), 2, "{:?}", found[0].groups);
        assert_eq!(first, [12.0, 12.53]);
    }

    #[test]
    fn a_third_mode_and_its_combinations_join() {
        // Spacings 0.150, 0.197 and 0.319 eV on a strong origin, with combinations.
        let lines = [
            line(10.873, 92000.0, 0.024),
            line(11.023, 8400.0, 0.0245),
            line(11.070, 11000.0, 0.0245),
            line(11.192, 5200.0, 0.027),
            line(11.221, 900.0, 0.024),
            line(11.267, 700.0, 0.024),
            line(11.342, 400.0, 0.027),
            line(11.389, 600.0, 0.027),
        ];
        let (partition, p) = best(&lines);
        assert_eq!(partition, [vec![0, 1, 2, 3, 4, 5, 6, 7]]);
        assert!(p > 0.7, "{p}");
    }

    #[test]
    fn an_unresolved_floor_belongs_to_its_progression() {
        let mut lines = Vec::new();
        let mut area = 2000.0;
        for v in 0..8 {
            lines.push(line(12.8 + 0.11 * v as f64, area, 0.04));
            area *= 3.5 / (v + 1) as f64;
        }
        lines.push(line(13.45, 15000.0, 0.5));
        lines.sort_by(|a, b| a.position.total_cmp(&b.position));
        let (partition, p) = best(&lines);
        assert_eq!(partition.len(), 1, "{partition:?}");
        assert!((0.5..0.99).contains(&p), "{p}");
    }

    #[test]
    fn an_overlap_of_two_similar_components_stays_open() {
        let found = readings(
            &[line(13.0, 5000.0, 0.4), line(13.35, 4000.0, 0.4)],
            &|_, _| 50.0,
            8,
        );
        assert!(found.len() >= 2);
        assert!(found[0].probability < 0.95, "{}", found[0].probability);
    }
}

//! The numbers of a band: moments with their uncertainties, maximum, width, members.

use super::channels::Channels;
use super::grouping::{Group, LineView, readings};
use super::model::{PER_LINE, Parameters};
use super::solver::Covariance;
use super::{Band, FitOptions, Grouping, Member, Peak};

/// What the readings are made from.
pub(super) struct Fitted<'a> {
    pub data: &'a Channels,
    pub parameters: &'a Parameters,
    pub peaks: &'a [Peak],
    pub covariance: &'a Covariance,
    /// Fall of the deviance that a line has to bring to be seen.
    pub price: f64,
}

/// All plausible readings of the lines as bands.
pub(super) fn groupings(fitted: &Fitted, options: &FitOptions) -> Vec<Grouping> {
    let expected = fitted.parameters.expected(fitted.data);
    let lines: Vec<LineView> = fitted
        .peaks
        .iter()
        .map(|p| LineView {
            position: p.position_ev,
            position_sd: p.position_sd,
            area: p.area,
            area_sd: p.area_sd,
            width: p.fwhm_ev,
            width_sd: p.fwhm_sd.unwrap_or(p.fwhm_ev),
        })
        .collect();
    let visible = |energy: f64, width: f64| fitted.least_area(&expected, energy, width);
    readings(&lines, &visible, options.max_groupings)
        .into_iter()
        .map(|scored| {
            let mut bands: Vec<Band> = scored
                .groups
                .iter()
                .map(|group| fitted.band(group, &expected))
                .collect();
            bands.sort_by(|a, b| a.vertical_ev.total_cmp(&b.vertical_ev));
            for (k, band) in bands.iter_mut().enumerate() {
                band.id = k + 1;
            }
            Grouping {
                probability: scored.probability,
                bands,
            }
        })
        .collect()
}

impl Fitted<'_> {
    /// Area that a line needs to stand out, counts: infinite outside the window.
    fn least_area(&self, expected: &[f64], energy: f64, width: f64) -> f64 {
        let under = self.data.range(energy - 0.6 * width, energy + 0.6 * width);
        if under.is_empty() || energy + width > self.data.energy[self.data.len() - 1] {
            return f64::INFINITY;
        }
        let variance: f64 = under.map(|i| self.data.variance(i, expected[i])).sum();
        (self.price * variance.max(1.0)).sqrt() / 0.85
    }

    /// Position in the covariance matrix of a parameter of a line: 0 position, 3 area.
    fn at(&self, line: usize, what: usize) -> usize {
        self.parameters.background.parameters() + PER_LINE * line + what
    }

    /// Variance of a quantity with the given derivatives by position and area of some lines.
    fn variance(&self, slopes: &[(usize, f64, f64)]) -> f64 {
        let c = &self.covariance.matrix;
        let mut sum = 0.0;
        for &(i, by_position, by_area) in slopes {
            for &(j, other_position, other_area) in slopes {
                let (xi, ai, xj, aj) = (self.at(i, 0), self.at(i, 3), self.at(j, 0), self.at(j, 3));
                sum += by_position * other_position * c[(xi, xj)]
                    + by_position * other_area * c[(xi, aj)]
                    + by_area * other_position * c[(ai, xj)]
                    + by_area * other_area * c[(ai, aj)];
            }
        }
        sum.max(0.0)
    }

    /// Area, first moment and their standard deviations.
    fn moments(&self, lines: &[usize]) -> [f64; 4] {
        let area: f64 = lines.iter().map(|&k| self.peaks[k].area).sum();
        let moment: f64 = lines
            .iter()
            .map(|&k| self.peaks[k].area * self.peaks[k].position_ev)
            .sum::<f64>()
            / area;
        let of_moment: Vec<(usize, f64, f64)> = lines
            .iter()
            .map(|&k| {
                let p = &self.peaks[k];
                (k, p.area / area, (p.position_ev - moment) / area)
            })
            .collect();
        let of_area: Vec<(usize, f64, f64)> = lines.iter().map(|&k| (k, 0.0, 1.0)).collect();
        [
            area,
            self.variance(&of_area).sqrt(),
            moment,
            self.variance(&of_moment).sqrt(),
        ]
    }

    fn band(&self, group: &Group, expected: &[f64]) -> Band {
        let [area, area_sd, vertical_ev, vertical_sd] = self.moments(&group.lines);
        let curve = |e: f64| -> f64 {
            group
                .lines
                .iter()
                .map(|&k| self.peaks[k].intensity(e))
                .sum()
        };
        let members: Vec<Member> = group
            .progression
            .members
            .iter()
            .map(|m| {
                let [area, area_sd, position_ev, position_sd] = self.moments(&m.lines);
                Member {
                    peak: m.lines[0],
                    position_ev,
                    position_sd,
                    area,
                    area_sd,
                }
            })
            .collect();
        let maximum_ev = self.maximum(&group.lines, &curve);
        let resolved = members.len() > 1;
        Band {
            id: 0,
            vertical_ev,
            vertical_sd,
            maximum_ev,
            origin_ev: resolved.then(|| members[0].position_ev),
            area,
            area_sd,
            fwhm_ev: if resolved {
                self.envelope_width(&group.lines, vertical_ev, area)
            } else {
                width_at_half(&curve, maximum_ev, self.peaks[group.lines[0]].fwhm_ev)
            },
            spacing_ev: group.progression.mean_spacing(),
            significance: self.significance(&group.lines, expected),
            members,
            peaks: group.lines.clone(),
        }
    }

    /// Highest point of a sum of lines: near one of their centres.
    fn maximum(&self, lines: &[usize], curve: &dyn Fn(f64) -> f64) -> f64 {
        let mut best = (f64::NEG_INFINITY, 0.0);
        for &k in lines {
            let p = &self.peaks[k];
            // Golden-section search around each centre.
            let ratio = 0.5 * (5.0_f64.sqrt() - 1.0);
            let (mut low, mut high) = (
                p.position_ev - 0.7 * p.fwhm_ev,
                p.position_ev + 0.7 * p.fwhm_ev,
            );
            for _ in 0..60 {
                let (a, b) = (high - ratio * (high - low), low + ratio * (high - low));
                if curve(a) > curve(b) {
                    high = b;
                } else {
                    low = a;
                }
            }
            let at = 0.5 * (low + high);
            let height = curve(at);
            if height > best.0 {
                best = (height, at);
            }
        }
        best.1
    }

    /// Width of the Gaussian with the second moment of the band (Gaussian parts of the lines).
    fn envelope_width(&self, lines: &[usize], centre: f64, area: f64) -> f64 {
        let eight_ln_2 = 8.0 * std::f64::consts::LN_2;
        lines
            .iter()
            .map(|&k| {
                let p = &self.peaks[k];
                let spread = eight_ln_2 * (p.position_ev - centre).powi(2);
                p.area / area * (p.gaussian_fwhm_ev.powi(2) + spread)
            })
            .sum::<f64>()
            .sqrt()
    }

    /// Half the rise of the deviance when the lines go and everything else stays.
    fn significance(&self, lines: &[usize], expected: &[f64]) -> f64 {
        let mut left = expected.to_vec();
        for &k in lines {
            let (window, counts) = self.parameters.line_counts(self.data, k);
            for (i, c) in window.zip(counts) {
                left[i] -= c;
            }
        }
        (0..self.data.len())
            .filter(|&i| left[i] != expected[i])
            .map(|i| {
                let least = 1e-6 * expected[i];
                0.5 * (self.data.deviance(i, left[i].max(least))
                    - self.data.deviance(i, expected[i]))
            })
            .sum()
    }
}

/// Distance between the outermost points at half the height around a maximum.
fn width_at_half(curve: &dyn Fn(f64) -> f64, at: f64, scale: f64) -> f64 {
    let half = 0.5 * curve(at);
    let edge = |direction: f64| {
        let step = 0.02 * scale;
        let mut inside = 0.0;
        let mut outside = step;
        while curve(at + direction * outside) > half && outside < 100.0 * scale {
            inside = outside;
            outside += step;
        }
        for _ in 0..50 {
            let middle = 0.5 * (inside + outside);
            if curve(at + direction * middle) > half {
                inside = middle;
            } else {
                outside = middle;
            }
        }
        0.5 * (inside + outside)
    };
    edge(1.0) + edge(-1.0)
}

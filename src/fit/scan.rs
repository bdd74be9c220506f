//! Where lines may be: matched filters over positions and widths.
//!
//! [`blobs`] looks at the raw trace. At each position and width a Gaussian on a local straight
//! line is fitted by weighted least squares; its score is area over standard deviation. Maxima in
//! position and width together are candidates: a sharp line on a broad band, each member of a
//! progression and the broad band itself all have a maximum of their own, at their own width
//! (the scale-space idea of Lindeberg, Int. J. Comput. Vision 30, 79, 1998, with a filter that is
//! optimal for counting noise). [`residue`] does the same for what a fit leaves over.

use super::channels::Channels;
use crate::lineshape::GAUSSIAN_FWHM_PER_SD;
use crate::numeric::statistics::normal_quantile;

/// Ratio of neighbouring widths on the grid.
const WIDTH_STEP: f64 = std::f64::consts::SQRT_2;

/// Grid positions per standard deviation of the filter.
const POSITIONS_PER_SD: f64 = 3.0;

/// A place where a line may be.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Candidate {
    pub position: f64,
    /// Full width at half maximum of the best filter, eV.
    pub fwhm: f64,
    /// Area that the filter finds, counts.
    pub area: f64,
    /// Area over its standard deviation.
    pub score: f64,
}

/// Widths (FWHM, eV) that are tried.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Widths(pub Vec<f64>);

/// Widest single line looked for, eV: strongly Jahn-Teller distorted bands reach about this.
pub(super) const WIDEST: f64 = 1.5;

impl Widths {
    /// From the narrowest line that the channels (or the instrument) can show to a broad band.
    pub fn new(data: &Channels, resolution: Option<f64>) -> Self {
        let mut steps: Vec<f64> = data.energy.windows(2).map(|w| w[1] - w[0]).collect();
        steps.sort_by(f64::total_cmp);
        let finest = steps[steps.len() / 10];
        let mut width = resolution.unwrap_or(0.0).max(2.5 * finest);
        let widest = WIDEST.min(data.span() / 3.0);
        let mut widths = vec![width];
        while width * WIDTH_STEP <= widest {
            width *= WIDTH_STEP;
            widths.push(width);
        }
        Widths(widths)
    }

    /// Independent places, about. Six per width of the line: with it, noise traces give as many
    /// lines as `false_alarm` says; a fit moves and widens a candidate, so that more than the grid
    /// is tried.
    pub fn places(&self, data: &Channels) -> f64 {
        self.0.iter().map(|w| 6.0 * data.span() / w).sum()
    }

    /// Score that noise exceeds somewhere with probability `false_alarm`.
    pub fn threshold(&self, data: &Channels, false_alarm: f64) -> f64 {
        normal_quantile(1.0 - false_alarm / self.places(data))
    }
}

/// Running sums for means over ranges of channels.
struct Sums {
    counts: Vec<f64>,
    exposure: Vec<f64>,
}

impl Sums {
    fn new(data: &Channels) -> Self {
        let running = |values: &[f64]| {
            let mut sum = 0.0;
            let mut out = vec![0.0];
            out.extend(values.iter().map(|x| {
                sum += x;
                sum
            }));
            out
        };
        Sums {
            counts: running(&data.counts),
            exposure: running(&data.exposure),
        }
    }

    /// Expected counts per exposure around channel `i`, never zero.
    fn rate(&self, from: usize, to: usize) -> f64 {
        (self.counts[to] - self.counts[from] + 0.5) / (self.exposure[to] - self.exposure[from])
    }
}

/// Variance of each channel from the mean count around it, for one filter width.
fn local_variance(data: &Channels, sums: &Sums, sd: f64) -> Vec<f64> {
    use super::channels::Scatter;
    match data.scatter {
        Scatter::Normal => data.sd.iter().map(|s| s * s).collect(),
        Scatter::Poisson => (0..data.len())
            .map(|i| {
                let near = data.range(data.energy[i] - 0.5 * sd, data.energy[i] + 0.5 * sd);
                let from = near.start.min(i.saturating_sub(1));
                let to = near.end.max((i + 2).min(data.len()));
                data.exposure[i] * sums.rate(from, to)
            })
            .collect(),
    }
}

/// One width of the scan: scores and areas over grid positions.
struct Row {
    fwhm: f64,
    positions: Vec<f64>,
    scores: Vec<f64>,
    areas: Vec<f64>,
}

impl Row {
    fn new(data: &Channels, fwhm: f64, fit: impl Fn(f64) -> Option<(f64, f64)>) -> Self {
        let step = fwhm / GAUSSIAN_FWHM_PER_SD / POSITIONS_PER_SD;
        let n = (data.span() / step).floor() as usize + 1;
        let mut row = Row {
            fwhm,
            positions: Vec::with_capacity(n),
            scores: Vec::with_capacity(n),
            areas: Vec::with_capacity(n),
        };
        for k in 0..n {
            let position = data.energy[0] + (k as f64 + 0.5) * step;
            let (area, score) = fit(position).unwrap_or((0.0, 0.0));
            row.positions.push(position);
            row.scores.push(score);
            row.areas.push(area);
        }
        row
    }

    /// Best score within `reach` of a position.
    fn best_near(&self, position: f64, reach: f64) -> f64 {
        let from = self.positions.partition_point(|&x| x < position - reach);
        let to = self.positions.partition_point(|&x| x <= position + reach);
        self.scores[from..to].iter().copied().fold(0.0, f64::max)
    }
}

/// Maxima of the score over positions and neighbouring widths, best first.
fn maxima(rows: &[Row], least: f64) -> Vec<Candidate> {
    let mut found = Vec::new();
    for (r, row) in rows.iter().enumerate() {
        for k in 0..row.scores.len() {
            let score = row.scores[k];
            let left = if k > 0 { row.scores[k - 1] } else { 0.0 };
            let right = row.scores.get(k + 1).copied().unwrap_or(0.0);
            if score < least || score < left || score <= right {
                continue;
            }
            let reach = 0.5 * row.fwhm / GAUSSIAN_FWHM_PER_SD * 1.5;
            let finer = r > 0 && rows[r - 1].best_near(row.positions[k], reach) > score;
            let coarser =
                r + 1 < rows.len() && rows[r + 1].best_near(row.positions[k], reach) >= score;
            if !finer && !coarser {
                found.push(Candidate {
                    position: row.positions[k],
                    fwhm: row.fwhm,
                    area: row.areas[k],
                    score,
                });
            }
        }
    }
    found.sort_by(|a, b| b.score.total_cmp(&a.score));
    found
}

/// Candidates in the raw trace with a score of at least `least`, best first.
pub(super) fn blobs(data: &Channels, widths: &Widths, least: f64) -> Vec<Candidate> {
    let sums = Sums::new(data);
    let rows: Vec<Row> = widths
        .0
        .iter()
        .map(|&fwhm| {
            let sd = fwhm / GAUSSIAN_FWHM_PER_SD;
            let variance = local_variance(data, &sums, sd);
            Row::new(data, fwhm, |position| {
                on_a_line(data, &variance, position, sd)
            })
        })
        .collect();
    maxima(&rows, least)
}

/// Area and score of a Gaussian on a local straight line, by weighted least squares.
fn on_a_line(data: &Channels, variance: &[f64], position: f64, sd: f64) -> Option<(f64, f64)> {
    let (low, high) = (position - 2.5 * sd, position + 2.5 * sd);
    let near = data.range(low, high);
    // The line needs both sides to stand on.
    let inside = low.max(data.energy[0]) < position - 1.5 * sd
        && high.min(data.energy[data.len() - 1]) > position + 1.5 * sd;
    if near.len() < 6 || !inside {
        return None;
    }
    // Normal equations for (constant, slope, height).
    let mut a = [[0.0; 3]; 3];
    let mut b = [0.0; 3];
    for i in near {
        let u = (data.energy[i] - position) / sd;
        let x = data.exposure[i];
        let columns = [x, x * u, x * (-0.5 * u * u).exp()];
        let w = 1.0 / variance[i];
        for j in 0..3 {
            b[j] += w * columns[j] * data.counts[i];
            for k in 0..=j {
                a[j][k] += w * columns[j] * columns[k];
            }
        }
    }
    // Cholesky factor; the height comes last, so its variance is 1/l₂₂².
    let l00 = a[0][0].sqrt();
    let l10 = a[1][0] / l00;
    let l11 = (a[1][1] - l10 * l10).max(0.0).sqrt();
    let l20 = a[2][0] / l00;
    let l21 = (a[2][1] - l20 * l10) / l11;
    let l22 = (a[2][2] - l20 * l20 - l21 * l21).max(0.0).sqrt();
    let y0 = b[0] / l00;
    let y1 = (b[1] - l10 * y0) / l11;
    let y2 = (b[2] - l20 * y0 - l21 * y1) / l22;
    let height = y2 / l22;
    let area = height * sd * (2.0 * std::f64::consts::PI).sqrt();
    (area.is_finite() && y2.is_finite()).then_some((area, y2))
}

/// Candidates in what a fit leaves over: `expected` are its counts. Scores are those of a line
/// added with everything else held, so they err low where a line resembles what is there already.
pub(super) fn residue(
    data: &Channels,
    expected: &[f64],
    widths: &Widths,
    least: f64,
) -> Vec<Candidate> {
    let pull: Vec<f64> = (0..data.len())
        .map(|i| (data.counts[i] - expected[i]) / data.variance(i, expected[i]))
        .collect();
    let rows: Vec<Row> = widths
        .0
        .iter()
        .map(|&fwhm| {
            let sd = fwhm / GAUSSIAN_FWHM_PER_SD;
            Row::new(data, fwhm, |position| {
                let last = data.energy[data.len() - 1];
                if position - 0.5 * fwhm < data.energy[0] || position + 0.5 * fwhm > last {
                    return None;
                }
                let (mut slope, mut information) = (0.0, 0.0);
                for i in data.range(position - 3.0 * sd, position + 3.0 * sd) {
                    let u = (data.energy[i] - position) / sd;
                    let s = data.exposure[i] * (-0.5 * u * u).exp();
                    slope += s * pull[i];
                    information += s * s / data.variance(i, expected[i]);
                }
                let area = slope / information * sd * (2.0 * std::f64::consts::PI).sqrt();
                let score = slope / information.sqrt();
                (area.is_finite() && score.is_finite()).then_some((area, score))
            })
        })
        .collect();
    maxima(&rows, least)
}

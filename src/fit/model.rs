//! The expected counts of a trace: background + Σ area × Voigt line, times exposure; its deviance
//! from the measured counts, and the derivatives that the solver needs.
//!
//! A line's derivatives are kept only in a window around it, set when the model is made and fixed
//! while it is solved, so that sums over channels stay sparse and the objective stays smooth.
//! Poisson counts are fitted by Fisher's scoring: gradient Σ(1 − y/m)·∂m, information Σ∂m∂mᵀ/m.

use super::background::Background;
use super::channels::Channels;
use super::scan::WIDEST;
use super::solver::{Bounds, Linearization, Objective};
use crate::lineshape::Shape;
use nalgebra::{DMatrix, DVector};
use std::ops::Range;

/// Parameters of one line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Line {
    /// Centre, eV.
    pub position: f64,
    /// Gaussian full width at half maximum, eV.
    pub gaussian: f64,
    /// Lorentzian full width over the Gaussian one.
    pub ratio: f64,
    /// Area, counts.
    pub area: f64,
    /// Whether the fit may use a Lorentzian part.
    pub voigt: bool,
}

/// Parameters per line: position, Gaussian width, ratio, area.
pub(super) const PER_LINE: usize = 4;

/// Largest Lorentzian width over the Gaussian one. Valence bands of molecules are wider by
/// vibration and rotation than by lifetime; beyond this a line would only imitate a background.
const HIGHEST_RATIO: f64 = 1.5;

/// Ratio for which a window has room even while a line has no wings, so that growing wings do
/// not change what they are compared with.
const LEAST_WING: f64 = 0.05;

impl Line {
    pub fn shape(&self) -> Shape {
        Shape::new(self.gaussian, self.gaussian * self.ratio)
            .expect("widths are kept positive by the bounds")
    }

    pub fn fwhm(&self) -> f64 {
        self.shape().fwhm()
    }

    /// How far its counts matter: the Gaussian core to 10⁻¹⁰ of the top, a Lorentzian wing to
    /// about 10⁻⁵, and a margin for the line to move within one run of the solver.
    pub fn reach(&self) -> f64 {
        let wing = if self.voigt {
            150.0 * self.ratio.max(LEAST_WING) * self.gaussian
        } else {
            0.0
        };
        4.5 * self.gaussian + wing
    }
}

/// Everything that the fit may vary.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Parameters {
    pub background: Background,
    pub coefficients: Vec<f64>,
    pub lines: Vec<Line>,
}

impl Parameters {
    /// Expected counts in every channel.
    pub fn expected(&self, data: &Channels) -> Vec<f64> {
        let mut total: Vec<f64> = data
            .energy
            .iter()
            .map(|&e| self.background.evaluate(e, &self.coefficients, None))
            .collect();
        for line in &self.lines {
            let shape = line.shape();
            for i in line_window(data, line) {
                total[i] += line.area * shape.value(data.energy[i] - line.position);
            }
        }
        for (m, x) in total.iter_mut().zip(&data.exposure) {
            *m *= x;
        }
        total
    }

    /// Expected counts of one line over its window.
    pub fn line_counts(&self, data: &Channels, k: usize) -> (Range<usize>, Vec<f64>) {
        let line = &self.lines[k];
        let window = line_window(data, line);
        let shape = line.shape();
        let counts = window
            .clone()
            .map(|i| data.exposure[i] * line.area * shape.value(data.energy[i] - line.position))
            .collect();
        (window, counts)
    }

    /// Total deviance.
    pub fn deviance(&self, data: &Channels) -> f64 {
        let expected = self.expected(data);
        (0..data.len()).map(|i| data.deviance(i, expected[i])).sum()
    }
}

/// Least Gaussian width at an energy: what the instrument and the channels can show, eV.
pub(super) fn least_width(data: &Channels, energy: f64, narrowest: f64) -> f64 {
    narrowest.max(1.5 * data.spacing(energy))
}

fn line_window(data: &Channels, line: &Line) -> Range<usize> {
    let reach = line.reach();
    data.range(line.position - reach, line.position + reach)
}

/// Which parameters of [`Parameters`] a fit varies.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Selection {
    /// Lines, by index.
    pub lines: Vec<usize>,
    /// Whether the background takes part.
    pub background: bool,
    /// Whether positions and widths take part, or only the areas.
    pub shapes: bool,
    /// Channels compared.
    pub range: Range<usize>,
}

impl Selection {
    /// Everything over the whole window.
    pub fn all(parameters: &Parameters, data: &Channels) -> Self {
        Selection {
            lines: (0..parameters.lines.len()).collect(),
            background: true,
            shapes: true,
            range: 0..data.len(),
        }
    }
}

/// A selection of parameters as an objective for the solver.
pub(super) struct Model<'a> {
    data: &'a Channels,
    start: &'a Parameters,
    selection: Selection,
    /// Counts expected from what is not varied, over the range.
    fixed: Vec<f64>,
    /// Background derivatives that do not depend on parameters, per channel: none with a tail.
    polynomial: Option<Vec<f64>>,
    /// Channels of each varied line, within the range.
    windows: Vec<Range<usize>>,
}

impl<'a> Model<'a> {
    pub fn new(data: &'a Channels, start: &'a Parameters, selection: Selection) -> Self {
        let range = selection.range.clone();
        let mut fixed = vec![0.0; range.len()];
        for k in 0..start.lines.len() {
            if !selection.lines.contains(&k) {
                let (window, counts) = start.line_counts(data, k);
                for (i, c) in window.zip(counts) {
                    if range.contains(&i) {
                        fixed[i - range.start] += c;
                    }
                }
            }
        }
        let n = start.background.parameters();
        let mut polynomial = None;
        if !selection.background {
            for i in range.clone() {
                let b = start
                    .background
                    .evaluate(data.energy[i], &start.coefficients, None);
                fixed[i - range.start] += data.exposure[i] * b;
            }
        } else if start.background.tail.is_none() {
            let mut terms = vec![0.0; n * range.len()];
            let mut row = vec![0.0; n];
            for i in range.clone() {
                start
                    .background
                    .evaluate(data.energy[i], &start.coefficients, Some(&mut row));
                for k in 0..n {
                    terms[k * range.len() + i - range.start] = data.exposure[i] * row[k];
                }
            }
            polynomial = Some(terms);
        }
        let windows = selection
            .lines
            .iter()
            .map(|&k| {
                let w = line_window(data, &start.lines[k]);
                w.start.max(range.start)..w.end.min(range.end).max(w.start.max(range.start))
            })
            .collect();
        Model {
            data,
            start,
            selection,
            fixed,
            polynomial,
            windows,
        }
    }

    fn background_parameters(&self) -> usize {
        if self.selection.background {
            self.start.background.parameters()
        } else {
            0
        }
    }

    /// Present values of the varied parameters.
    pub fn vector(&self) -> Vec<f64> {
        let mut v = Vec::with_capacity(self.parameters());
        if self.selection.background {
            v.extend_from_slice(&self.start.coefficients);
        }
        for &k in &self.selection.lines {
            let line = &self.start.lines[k];
            v.extend([line.position, line.gaussian, line.ratio, line.area]);
        }
        v
    }

    /// The parameters with varied ones put in.
    pub fn with(&self, vector: &[f64]) -> Parameters {
        let mut p = self.start.clone();
        let nb = self.background_parameters();
        if nb > 0 {
            p.coefficients.copy_from_slice(&vector[..nb]);
        }
        for (l, &k) in self.selection.lines.iter().enumerate() {
            p.lines[k] = line_of(&vector[nb + PER_LINE * l..], p.lines[k].voigt);
        }
        p
    }

    /// Bounds of the varied parameters. `narrowest` is the least Gaussian width.
    pub fn bounds(&self, narrowest: f64) -> Bounds {
        let data = self.data;
        let span = data.span();
        let exposure: f64 = data.exposure.iter().sum();
        let mut bounds = Bounds::free(0);
        let mut push = |low: f64, high: f64| {
            bounds.lower.push(low);
            bounds.upper.push(high);
        };
        if self.selection.background {
            // A thousandth of a count in all keeps every expectation positive.
            let least = 1e-3 / exposure;
            for _ in 0..=self.start.background.degree {
                push(least, f64::INFINITY);
            }
            if self.start.background.tail.is_some() {
                push(0.0, f64::INFINITY);
                push(0.02 * span, 2.0 * span);
            }
        }
        for &k in &self.selection.lines {
            let line = &self.start.lines[k];
            if self.selection.shapes {
                let room = 1.5 * line.gaussian * (1.0 + line.ratio);
                push(
                    (line.position - room).max(data.energy[0]),
                    (line.position + room).min(data.energy[data.len() - 1]),
                );
                let least = least_width(data, line.position, narrowest);
                let most = (3.0 * line.gaussian).min(WIDEST).min(0.6 * span).max(least);
                push(least.max(line.gaussian / 3.0).min(most), most);
                push(0.0, if line.voigt { HIGHEST_RATIO } else { 0.0 });
            } else {
                push(line.position, line.position);
                push(line.gaussian, line.gaussian);
                push(line.ratio, line.ratio);
            }
            push(0.0, f64::INFINITY);
        }
        bounds
    }

    /// Expected counts over the range, and the columns of derivatives where wanted.
    fn expand(&self, vector: &[f64], mut columns: Option<&mut Columns>) -> Vec<f64> {
        let range = self.selection.range.clone();
        let n = range.len();
        let nb = self.background_parameters();
        let mut expected = self.fixed.clone();
        if let Some(terms) = &self.polynomial {
            for k in 0..nb {
                let term = &terms[k * n..(k + 1) * n];
                for (m, t) in expected.iter_mut().zip(term) {
                    *m += vector[k] * t;
                }
            }
            if let Some(c) = columns.as_deref_mut() {
                c.background.copy_from_slice(terms);
            }
        } else if nb > 0 {
            let mut row = vec![0.0; nb];
            for i in range.clone() {
                let b = self.start.background.evaluate(
                    self.data.energy[i],
                    &vector[..nb],
                    Some(&mut row),
                );
                expected[i - range.start] += self.data.exposure[i] * b;
                if let Some(c) = columns.as_deref_mut() {
                    for k in 0..nb {
                        c.background[k * n + i - range.start] = self.data.exposure[i] * row[k];
                    }
                }
            }
        }
        for (l, window) in self.windows.iter().enumerate() {
            let line = line_of(&vector[nb + PER_LINE * l..], true);
            let size = window.len();
            for (j, i) in window.clone().enumerate() {
                let d = self.data.energy[i] - line.position;
                let x = self.data.exposure[i];
                match columns.as_deref_mut() {
                    None => expected[i - range.start] += x * line.area * value(&line, d),
                    Some(c) => {
                        let [v, centre, gaussian, ratio] = value_and_gradient(&line, d);
                        expected[i - range.start] += x * line.area * v;
                        let out = &mut c.lines[l];
                        out[j] = x * line.area * centre;
                        out[size + j] = x * line.area * gaussian;
                        out[2 * size + j] = x * line.area * ratio;
                        out[3 * size + j] = x * v;
                    }
                }
            }
        }
        expected
    }
}

/// Derivatives of the expected counts: background over the whole range, lines over their windows.
struct Columns {
    background: Vec<f64>,
    lines: Vec<Vec<f64>>,
}

fn line_of(v: &[f64], voigt: bool) -> Line {
    Line {
        position: v[0],
        gaussian: v[1],
        ratio: v[2],
        area: v[3],
        voigt,
    }
}

const FOUR_LN_2: f64 = 4.0 * std::f64::consts::LN_2;

/// Height of a Gaussian of unit area and unit width: 2·√(ln 2/π).
const GAUSSIAN_TOP: f64 = 0.939_437_278_699_651_3;

fn value(line: &Line, d: f64) -> f64 {
    if line.ratio == 0.0 {
        let t = d / line.gaussian;
        GAUSSIAN_TOP / line.gaussian * (-FOUR_LN_2 * t * t).exp()
    } else {
        line.shape().value(d)
    }
}

/// Value, then derivatives by centre, Gaussian width and ratio.
pub(super) fn value_and_gradient(line: &Line, d: f64) -> [f64; 4] {
    if line.ratio == 0.0 && !line.voigt {
        let t = d / line.gaussian;
        let v = GAUSSIAN_TOP / line.gaussian * (-FOUR_LN_2 * t * t).exp();
        let slope = 2.0 * FOUR_LN_2 * t * v / line.gaussian;
        return [v, slope, slope * t - v / line.gaussian, 0.0];
    }
    let g = line.shape().value_and_gradient(d);
    [
        g.value,
        g.centre,
        g.gaussian_fwhm + line.ratio * g.lorentzian_fwhm,
        line.gaussian * g.lorentzian_fwhm,
    ]
}

impl Objective for Model<'_> {
    fn parameters(&self) -> usize {
        self.background_parameters() + PER_LINE * self.selection.lines.len()
    }

    fn value(&self, vector: &[f64]) -> f64 {
        if vector.iter().any(|x| !x.is_finite()) {
            return f64::NAN;
        }
        let first = self.selection.range.start;
        self.expand(vector, None)
            .iter()
            .enumerate()
            .map(|(j, &m)| self.data.deviance(first + j, m))
            .sum()
    }

    fn linearize(&self, vector: &[f64]) -> Linearization {
        let range = self.selection.range.clone();
        let n = range.len();
        let nb = self.background_parameters();
        let total = self.parameters();
        let mut columns = Columns {
            background: vec![0.0; nb * n],
            lines: self
                .windows
                .iter()
                .map(|w| vec![0.0; PER_LINE * w.len()])
                .collect(),
        };
        let expected = self.expand(vector, Some(&mut columns));
        // Everything in units of each channel's standard deviation.
        let mut weight = vec![0.0; n];
        let mut residual = vec![0.0; n];
        for j in 0..n {
            let i = range.start + j;
            weight[j] = 1.0 / self.data.variance(i, expected[j]).sqrt();
            residual[j] = (expected[j] - self.data.counts[i]) * weight[j];
        }
        let blocks: Vec<(Range<usize>, Vec<&mut [f64]>)> = {
            let Columns { background, lines } = &mut columns;
            let mut blocks: Vec<(Range<usize>, Vec<&mut [f64]>)> = Vec::new();
            if nb > 0 {
                blocks.push((0..n, background.chunks_exact_mut(n).collect()));
            }
            for (window, line) in self.windows.iter().zip(lines) {
                let w = window.start - range.start..window.end - range.start;
                let columns = if w.is_empty() {
                    (0..PER_LINE).map(|_| &mut [] as &mut [f64]).collect()
                } else {
                    line.chunks_exact_mut(w.len()).collect()
                };
                blocks.push((w, columns));
            }
            blocks
        };
        normal_equations(blocks, &weight, &residual, total)
    }
}

/// Jᵀr and JᵀJ from blocks of columns, each block non-zero in one range of channels only.
fn normal_equations(
    mut blocks: Vec<(Range<usize>, Vec<&mut [f64]>)>,
    weight: &[f64],
    residual: &[f64],
    total: usize,
) -> Linearization {
    let mut gradient = DVector::zeros(total);
    let mut gram = DMatrix::zeros(total, total);
    for (window, columns) in &mut blocks {
        for column in columns.iter_mut() {
            for (c, w) in column.iter_mut().zip(&weight[window.clone()]) {
                *c *= w;
            }
        }
    }
    let mut first_row = 0;
    for (b, (window, columns)) in blocks.iter().enumerate() {
        for (j, column) in columns.iter().enumerate() {
            gradient[first_row + j] = dot(column, &residual[window.clone()]);
        }
        let mut other_row = first_row;
        for (other_window, other_columns) in &blocks[b..] {
            let common = window.start.max(other_window.start)..window.end.min(other_window.end);
            if common.start < common.end {
                for (i, left) in columns.iter().enumerate() {
                    let left = &left[common.start - window.start..common.end - window.start];
                    for (j, right) in other_columns.iter().enumerate() {
                        let right = &right
                            [common.start - other_window.start..common.end - other_window.start];
                        let value = dot(left, right);
                        gram[(first_row + i, other_row + j)] = value;
                        gram[(other_row + j, first_row + i)] = value;
                    }
                }
            }
            other_row += other_columns.len();
        }
        first_row += columns.len();
    }
    Linearization::Normal { gradient, gram }
}

/// Scalar product in four lanes: fixed order, so the same result everywhere.
fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut lanes = [0.0; 4];
    let (a4, b4) = (a.chunks_exact(4), b.chunks_exact(4));
    let rest: f64 = a4
        .remainder()
        .iter()
        .zip(b4.remainder())
        .map(|(x, y)| x * y)
        .sum();
    for (x, y) in a4.zip(b4) {
        for k in 0..4 {
            lanes[k] += x[k] * y[k];
        }
    }
    lanes.iter().sum::<f64>() + rest
}

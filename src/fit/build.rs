//! Decides which lines a trace shows: candidates from the trace, more from the residual, and
//! away with what does not pay.
//!
//! A line is added when the deviance falls by more than its parameters cost by the Bayesian
//! information criterion (3·ln n) and by more than noise would achieve at any of the places and
//! widths tried (with probability `false_alarm` in the whole trace). The same price is asked when
//! lines are taken out again. The background competes on equal terms: a higher degree or an
//! exponential tail is tried before lines wider than an eighth of the window are believed.

use super::background::{Background, End, HIGHEST_DEGREE};
use super::channels::Channels;
use super::model::{Line, Model, PER_LINE, Parameters, Selection, value_and_gradient};
use super::scan::{Candidate, Widths, blobs, residue};
use super::solver::{Solution, SolverOptions, run};
use super::{FitError, FitOptions, FitStep, Stage};
use nalgebra::{Matrix4, Vector4};

/// Least gain over its price before the background is made more flexible.
const BACKGROUND_MARGIN: f64 = 4.0;

/// What a line costs more inside another one: there it changes a shape, with all parameters of
/// both to do so, and chance has more ways to be fitted (found on traces of two overlapping
/// lines).
const OVERLAP_PREMIUM: f64 = 8.0;

/// The same for a Lorentzian part of a line.
const WING_MARGIN: f64 = 6.0;

/// A line that stands out of the noise by this many standard deviations shows the resolution.
const PROMINENT: f64 = 10.0;

pub(super) struct Builder<'a> {
    pub data: &'a Channels,
    pub options: &'a FitOptions,
    pub observer: &'a mut dyn FnMut(&FitStep),
    pub widths: Widths,
    /// Fall of the deviance that one more line has to bring.
    pub price: f64,
    /// Least Gaussian width, eV.
    pub narrowest: f64,
}

impl<'a> Builder<'a> {
    pub fn new(
        data: &'a Channels,
        options: &'a FitOptions,
        observer: &'a mut dyn FnMut(&FitStep),
    ) -> Self {
        let widths = Widths::new(data, options.resolution_ev);
        let score = widths.threshold(data, options.false_alarm);
        let price = (3.0 * (data.len() as f64).ln()).max(score * score);
        let narrowest = options.resolution_ev.map_or(0.0, |r| 0.85 * r);
        Builder {
            data,
            options,
            observer,
            widths,
            price,
            narrowest,
        }
    }

    /// Finds the lines.
    pub fn build(&mut self) -> Result<Parameters, FitError> {
        let mut parameters = self.seed()?;
        self.tell(Stage::Candidates, &parameters);
        for round in 0..12 {
            if self.free_wings(&mut parameters) {
                self.settle(&mut parameters)?;
            }
            let flexible = self.improve_background(&mut parameters)?;
            let added = self.add(&mut parameters)?;
            if added == 0 && !flexible {
                break;
            }
            self.settle(&mut parameters)?;
            self.tell(Stage::Added(round + 1), &parameters);
        }
        self.judge_resolution(&parameters);
        for _ in 0..4 {
            self.free_wings(&mut parameters);
            self.settle(&mut parameters)?;
            let removed = self.remove(&mut parameters)?;
            self.settle(&mut parameters)?;
            let added = self.add(&mut parameters)?;
            self.tell(Stage::Pruned, &parameters);
            if removed + added == 0 {
                break;
            }
        }
        self.settle(&mut parameters)?;
        Ok(parameters)
    }

    /// Learns the resolution from the narrowest line that is known well: anything much narrower
    /// is a quirk of a few channels.
    fn judge_resolution(&mut self, parameters: &Parameters) {
        if self.options.resolution_ev.is_some() {
            return;
        }
        let expected = parameters.expected(self.data);
        let width = parameters
            .lines
            .iter()
            .filter(|line| self.prominence(line, &expected) > PROMINENT)
            .map(Line::fwhm)
            .min_by(f64::total_cmp);
        self.narrowest = width.map_or(0.0, |w| 0.6 * w);
    }

    fn tell(&mut self, stage: Stage, parameters: &Parameters) {
        (self.observer)(&FitStep {
            stage,
            lines: parameters.lines.len(),
            chi_squared: parameters.deviance(self.data),
        });
    }

    /// Candidates of the raw trace with a background, amplitudes first, then everything.
    fn seed(&mut self) -> Result<Parameters, FitError> {
        let data = self.data;
        let counts: f64 = data.counts.iter().sum();
        let exposure: f64 = data.exposure.iter().sum();
        let level = (counts / exposure).max(1.0 / exposure);
        let degree = self.options.background_degree.min(1);
        let mut parameters = Parameters {
            background: Background {
                low: data.energy[0],
                high: data.energy[data.len() - 1],
                degree,
                tail: None,
            },
            coefficients: vec![level; degree + 1],
            lines: Vec::new(),
        };
        let least = self.price.sqrt();
        for c in blobs(data, &self.widths, least)
            .into_iter()
            .take(2 * self.options.max_lines)
        {
            parameters.lines.push(line_from(&c));
        }
        sort(&mut parameters.lines);
        let (fitted, _) = self.fit(&parameters, &amplitudes(&parameters, data), 200, 1.0)?;
        parameters = fitted;
        self.drop_weak(&mut parameters, 3.0)?;
        self.settle(&mut parameters)?;
        Ok(parameters)
    }

    /// Takes out lines whose area is below `least` standard deviations, one pass.
    fn drop_weak(&self, parameters: &mut Parameters, least: f64) -> Result<(), FitError> {
        let (fitted, solution) =
            self.fit(parameters, &amplitudes(parameters, self.data), 200, 0.1)?;
        let first = fitted.background.parameters();
        let mut k = 0;
        *parameters = fitted;
        parameters.lines.retain(|line| {
            let sd = solution.covariance.sd(first + PER_LINE * k + 3);
            k += 1;
            line.area > least * sd && line.area > 0.0
        });
        Ok(())
    }

    /// Fits everything, loosely.
    fn settle(&self, parameters: &mut Parameters) -> Result<(), FitError> {
        let selection = Selection::all(parameters, self.data);
        let (fitted, _) = self.fit(parameters, &selection, 25, 0.1)?;
        *parameters = fitted;
        for line in &mut parameters.lines {
            if line.ratio < 1e-4 {
                line.ratio = 0.0;
                line.voigt = false;
            }
        }
        parameters.lines.retain(|line| line.area > 0.0);
        sort(&mut parameters.lines);
        Ok(())
    }

    /// Gives a Lorentzian part to lines whose wings show in the residual: by the score that the
    /// ratio would get, with the line's other parameters free to follow. Returns whether there
    /// were any.
    fn free_wings(&self, parameters: &mut Parameters) -> bool {
        let mut any = false;
        let data = self.data;
        let expected = parameters.expected(data);
        let least = ((data.len() as f64).ln() + WING_MARGIN).sqrt();
        for line in &mut parameters.lines {
            if line.voigt || line.area <= 0.0 {
                continue;
            }
            let winged = Line {
                voigt: true,
                ..*line
            };
            let reach = winged.reach().min(4.0 * line.gaussian);
            let mut information = Matrix4::zeros();
            let mut slope = Vector4::zeros();
            for i in data.range(line.position - reach, line.position + reach) {
                let [v, centre, gaussian, ratio] =
                    value_and_gradient(&winged, data.energy[i] - line.position);
                let column = Vector4::new(
                    line.area * centre,
                    line.area * gaussian,
                    v,
                    line.area * ratio,
                ) * data.exposure[i];
                let variance = data.variance(i, expected[i]);
                information += column * column.transpose() / variance;
                slope += column * ((data.counts[i] - expected[i]) / variance);
            }
            // Step of the ratio over its standard deviation.
            if let Some(inverse) = information.try_inverse() {
                let step = (inverse * slope)[3];
                line.voigt = step > least * inverse[(3, 3)].max(0.0).sqrt();
                any |= line.voigt;
            }
        }
        any
    }

    /// How far a line stands out of the noise under it, in standard deviations.
    fn prominence(&self, line: &Line, expected: &[f64]) -> f64 {
        let reach = 0.6 * line.fwhm();
        let under = self
            .data
            .range(line.position - reach, line.position + reach);
        let variance: f64 = under.map(|i| self.data.variance(i, expected[i])).sum();
        0.85 * line.area / variance.max(1.0).sqrt()
    }

    /// Runs the solver on a selection, moving the windows along until they fit the lines.
    /// `resolve` is the change of the deviance that ends it.
    pub fn fit(
        &self,
        start: &Parameters,
        selection: &Selection,
        iterations: usize,
        resolve: f64,
    ) -> Result<(Parameters, Solution), FitError> {
        let mut parameters = start.clone();
        let mut passes = 0;
        loop {
            let model = Model::new(self.data, &parameters, selection.clone());
            let vector = model.vector();
            let options = SolverOptions {
                max_iterations: iterations,
                value_tolerance: resolve / (selection.range.len() as f64),
                polish: false,
                ..SolverOptions::default()
            };
            let solution = run(&model, &vector, &model.bounds(self.narrowest), &options)?;
            let next = model.with(&solution.parameters);
            passes += 1;
            let moved = selection.lines.iter().any(|&k| {
                let (a, b) = (&parameters.lines[k], &next.lines[k]);
                (a.position - b.position).abs() > 0.7 * a.gaussian
                    || b.gaussian > 1.5 * a.gaussian
                    || b.gaussian < 0.6 * a.gaussian
                    || b.ratio * b.gaussian > 1.5 * a.ratio * a.gaussian + 0.05 * b.gaussian
            });
            parameters = next;
            if !moved || passes == 4 {
                return Ok((parameters, solution));
            }
        }
    }

    /// Fall of the deviance that line `k` has to be worth.
    pub fn price_of(&self, parameters: &Parameters, k: usize) -> f64 {
        let line = &parameters.lines[k];
        let width = line.fwhm();
        let overlaps = parameters.lines.iter().enumerate().any(|(j, other)| {
            let other_width = other.fwhm();
            j != k
                && (other.position - line.position).abs() < 0.5 * (width + other_width)
                && width < 3.0 * other_width
                && other_width < 3.0 * width
        });
        if overlaps {
            self.price + OVERLAP_PREMIUM
        } else {
            self.price
        }
    }

    /// Lines that a change at `position` over `width` disturbs, and the channels to compare.
    pub fn neighbourhood(&self, parameters: &Parameters, position: f64, width: f64) -> Selection {
        let (mut low, mut high) = (position - 2.0 * width, position + 2.0 * width);
        let mut lines = Vec::new();
        for (k, line) in parameters.lines.iter().enumerate() {
            let w = line.fwhm();
            if (line.position - position).abs() <= 1.5 * width + w && w <= 4.0 * width {
                lines.push(k);
                low = low.min(line.position - 2.0 * w);
                high = high.max(line.position + 2.0 * w);
            }
        }
        let range = self.data.range(low, high);
        Selection {
            lines,
            background: high - low > 0.4 * self.data.span(),
            shapes: true,
            range,
        }
    }

    /// Adds lines from the residual; returns how many.
    fn add(&self, parameters: &mut Parameters) -> Result<usize, FitError> {
        let expected = parameters.expected(self.data);
        let candidates = residue(self.data, &expected, &self.widths, 0.6 * self.price.sqrt());
        let mut added = 0;
        let mut tried: Vec<Candidate> = Vec::new();
        for c in candidates {
            if parameters.lines.len() >= self.options.max_lines || tried.len() >= 40 {
                break;
            }
            let apart = |t: &Candidate| {
                (t.position - c.position).abs() > 0.7 * (t.fwhm + c.fwhm)
                    || t.fwhm > 4.0 * c.fwhm
                    || c.fwhm > 4.0 * t.fwhm
            };
            if !tried.iter().all(apart) {
                continue;
            }
            tried.push(c);
            let mut trial = parameters.clone();
            trial.lines.push(line_from(&c));
            let gain = self.try_change(parameters, &mut trial, c.position, c.fwhm)?;
            if gain > self.price_of(&trial, trial.lines.len() - 1) {
                *parameters = trial;
                added += 1;
            }
        }
        Ok(added)
    }

    /// Fits `trial` near a place; returns how much the deviance falls against `before`.
    fn try_change(
        &self,
        before: &Parameters,
        trial: &mut Parameters,
        position: f64,
        width: f64,
    ) -> Result<f64, FitError> {
        let selection = self.neighbourhood(trial, position, width);
        let (fitted, _) = self.fit(trial, &selection, 40, 0.05)?;
        *trial = fitted;
        Ok(before.deviance(self.data) - trial.deviance(self.data))
    }

    /// Tries a background of higher degree or with a tail; returns whether one was taken.
    fn improve_background(&self, parameters: &mut Parameters) -> Result<bool, FitError> {
        let data = self.data;
        let before = parameters.deviance(data);
        let count_price = (data.len() as f64).ln();
        let mut best: Option<(f64, Parameters)> = None;
        let mut consider = |trial: Parameters, price: f64| -> Result<(), FitError> {
            let selection = Selection {
                lines: (0..trial.lines.len()).collect(),
                background: true,
                shapes: false,
                range: 0..data.len(),
            };
            let (fitted, _) = self.fit(&trial, &selection, 60, 0.1)?;
            let profit = before - fitted.deviance(data) - price - BACKGROUND_MARGIN;
            if profit > best.as_ref().map_or(0.0, |b| b.0) {
                best = Some((profit, fitted));
            }
            Ok(())
        };
        let background = &parameters.background;
        if background.degree < self.options.background_degree.min(HIGHEST_DEGREE) {
            let mut trial = parameters.clone();
            trial.coefficients = background.raise(&parameters.coefficients);
            trial.background.degree += 1;
            consider(trial, count_price)?;
        }
        if background.tail.is_none() && self.options.background_tail {
            for end in [End::High, End::Low] {
                let mut trial = parameters.clone();
                trial.background.tail = Some(end);
                let level = parameters.coefficients.iter().copied().fold(0.0, f64::max);
                trial.coefficients.extend([0.3 * level, 0.3 * data.span()]);
                consider(trial, 2.0 * count_price)?;
            }
        }
        let taken = best.is_some();
        if let Some((_, fitted)) = best {
            *parameters = fitted;
        }
        Ok(taken)
    }

    /// Takes out lines that do not pay, the weakest first; returns how many.
    fn remove(&self, parameters: &mut Parameters) -> Result<usize, FitError> {
        let mut removed = 0;
        let selection = Selection::all(parameters, self.data);
        let (_, solution) = self.fit(parameters, &selection, 1, 1.0)?;
        let first = parameters.background.parameters();
        let mut order: Vec<(f64, f64)> = parameters
            .lines
            .iter()
            .enumerate()
            .map(|(k, l)| {
                let sd = solution.covariance.sd(first + PER_LINE * k + 3);
                (l.area / sd.max(f64::MIN_POSITIVE), l.position)
            })
            .filter(|(score, _)| *score < 4.0 * self.price.sqrt())
            .collect();
        order.sort_by(|a, b| a.0.total_cmp(&b.0));
        for (_, position) in order {
            let Some(k) = parameters.lines.iter().position(|l| l.position == position) else {
                continue;
            };
            if let Some(without) = self.without(parameters, k)? {
                *parameters = without;
                removed += 1;
            }
        }
        Ok(removed)
    }

    /// The fit without line `k`, where that costs less than the line's price.
    fn without(&self, parameters: &Parameters, k: usize) -> Result<Option<Parameters>, FitError> {
        let loss = self.loss_without(parameters, k)?;
        Ok((loss.0 < self.price_of(parameters, k)).then_some(loss.1))
    }

    /// How much the deviance rises without line `k`, its neighbours fitted again.
    pub fn loss_without(
        &self,
        parameters: &Parameters,
        k: usize,
    ) -> Result<(f64, Parameters), FitError> {
        let gone = parameters.lines[k];
        let width = gone.fwhm();
        let mut bare = parameters.clone();
        bare.lines.remove(k);
        let mut starts = vec![bare.clone()];
        // The nearest neighbour may have to take over.
        let near = (0..bare.lines.len()).min_by(|&a, &b| {
            let d =
                |j: usize| (bare.lines[j].position - gone.position).abs() / bare.lines[j].fwhm();
            d(a).total_cmp(&d(b))
        });
        if let Some(j) = near {
            let other = bare.lines[j];
            if (other.position - gone.position).abs() < 0.7 * (width + other.fwhm()) {
                let mut merged = bare;
                merged.lines[j] = merge(&gone, &other);
                starts.push(merged);
            }
        }
        let mut best: Option<(f64, Parameters)> = None;
        for mut trial in starts {
            let gain = self.try_change(parameters, &mut trial, gone.position, width)?;
            if best.as_ref().is_none_or(|b| -gain < b.0) {
                best = Some((-gain, trial));
            }
        }
        Ok(best.expect("there is at least one start"))
    }
}

/// One line with the area, centre and spread of two.
fn merge(a: &Line, b: &Line) -> Line {
    let area = a.area + b.area;
    if area <= 0.0 {
        return *b;
    }
    let (p, q) = (a.area / area, b.area / area);
    let position = p * a.position + q * b.position;
    // In units of squared FWHM: 8·ln 2 times the variance.
    let spread = 8.0 * std::f64::consts::LN_2 * p * q * (a.position - b.position).powi(2);
    Line {
        position,
        gaussian: (p * a.gaussian.powi(2) + q * b.gaussian.powi(2) + spread).sqrt(),
        ratio: p * a.ratio + q * b.ratio,
        area,
        voigt: a.voigt || b.voigt,
    }
}

fn line_from(c: &Candidate) -> Line {
    Line {
        position: c.position,
        gaussian: c.fwhm,
        ratio: 0.0,
        area: c.area.max(1e-3),
        voigt: false,
    }
}

fn amplitudes(parameters: &Parameters, data: &Channels) -> Selection {
    Selection {
        shapes: false,
        ..Selection::all(parameters, data)
    }
}

pub(super) fn sort(lines: &mut [Line]) {
    lines.sort_by(|a, b| a.position.total_cmp(&b.position));
}

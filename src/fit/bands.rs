//! From a trace to bands: the order of work, and the numbers that describe the result.

use super::build::{Builder, sort};
use super::channels::Channels;
use super::describe::{Fitted, groupings};
use super::model::{Line, Model, PER_LINE, Parameters, Selection};
use super::solver::{Covariance, Objective, Solution, SolverOptions, StopReason, minimize};
use super::{BandFit, CorrelatedPair, FitError, FitOptions, FitStatistics, FitStep, Peak, Stage};
use crate::numeric::statistics::runs_test;
use crate::trace::Trace;

/// Correlations above this are reported.
const REPORTED_CORRELATION: f64 = 0.9;

/// An area known to less than this is reported as undetermined.
const LOOSE_AREA: f64 = 0.3;

/// Finds, fits and groups the bands of a trace. `observer` hears of every stage.
///
/// A trace without significant lines gives a fit without bands: that is a result. A fit that does
/// not converge is an error.
pub fn fit_bands(
    trace: &Trace,
    options: &FitOptions,
    observer: &mut dyn FnMut(&FitStep),
) -> Result<BandFit, FitError> {
    check(options)?;
    let data = Channels::new(trace, options.window_ev)?;
    let mut builder = Builder::new(&data, options, observer);
    let found = builder.build()?;
    let (mut parameters, mut solution) = converge(&builder, found)?;
    // What each line is worth; one that turns out not to pay goes, and the rest is fitted again.
    let mut significance;
    loop {
        significance = Vec::with_capacity(parameters.lines.len());
        let mut without = None;
        for k in 0..parameters.lines.len() {
            let (loss, rest) = builder.loss_without(&parameters, k)?;
            significance.push(0.5 * loss.max(0.0));
            if loss < builder.price_of(&parameters, k)
                && without.as_ref().is_none_or(|(l, _)| loss < *l)
            {
                without = Some((loss, rest));
            }
        }
        match without {
            Some((_, rest)) => (parameters, solution) = converge(&builder, rest)?,
            None => break,
        }
    }
    let deviance = solution.value;
    (builder.observer)(&FitStep {
        stage: Stage::Converged,
        lines: parameters.lines.len(),
        chi_squared: deviance,
    });
    let first = parameters.background.parameters();
    let peaks: Vec<Peak> = parameters
        .lines
        .iter()
        .enumerate()
        .map(|(k, line)| describe(line, &solution, first + PER_LINE * k, significance[k]))
        .collect();
    let fitted = Fitted {
        data: &data,
        parameters: &parameters,
        peaks: &peaks,
        covariance: &solution.covariance,
        price: builder.price,
    };
    let groupings = groupings(&fitted, options);
    (builder.observer)(&FitStep {
        stage: Stage::Grouped,
        lines: peaks.len(),
        chi_squared: deviance,
    });
    let names = names(&parameters);
    let expected = parameters.expected(&data);
    let residuals = data.residuals(&expected);
    let mut all_residuals = vec![0.0; trace.len()];
    all_residuals[data.first..data.first + data.len()].copy_from_slice(&residuals);
    let background: Vec<f64> = trace
        .energy_ev
        .iter()
        .map(|&e| {
            let inside = e.clamp(parameters.background.low, parameters.background.high);
            parameters
                .background
                .evaluate(inside, &parameters.coefficients, None)
        })
        .collect();
    let total = trace
        .energy_ev
        .iter()
        .zip(&background)
        .map(|(&e, b)| b + peaks.iter().map(|p| p.intensity(e)).sum::<f64>())
        .collect();
    Ok(BandFit {
        groupings,
        background,
        total,
        residuals: all_residuals,
        window_ev: [data.energy[0], data.energy[data.len() - 1]],
        statistics: statistics(&data, &residuals, &solution),
        undetermined: undetermined(&parameters, &peaks, &solution, &names),
        correlations: correlations(&solution.covariance, &names),
        peaks,
    })
}

fn check(options: &FitOptions) -> Result<(), FitError> {
    let refuse = |option, value, wanted| {
        Err(FitError::BadOption {
            option,
            value,
            wanted,
        })
    };
    if let Some(r) = options.resolution_ev {
        if !(r > 0.0 && r.is_finite()) {
            return refuse("resolution_ev", r, "positive");
        }
    }
    if !(options.false_alarm > 0.0 && options.false_alarm < 1.0) {
        return refuse("false_alarm", options.false_alarm, "between 0 and 1");
    }
    if options.max_groupings == 0 {
        return refuse("max_groupings", 0.0, "at least 1");
    }
    Ok(())
}

/// χ² counts as settled when a step promises and brings less than this: all parameters are then
/// within a hundredth of a standard deviation of the minimum, along whatever valley the data leave.
const SETTLED_CHI_SQUARED: f64 = 1e-4;

/// Fits everything until nothing moves, without lines that shrink to nothing on the way.
fn converge(
    builder: &Builder,
    mut parameters: Parameters,
) -> Result<(Parameters, Solution), FitError> {
    let data = builder.data;
    let mut last = f64::INFINITY;
    for _ in 0..12 {
        let selection = Selection::all(&parameters, data);
        let model = Model::new(data, &parameters, selection);
        let start = model.vector();
        let options = SolverOptions {
            value_tolerance: SETTLED_CHI_SQUARED / (1.0 + model.value(&start)),
            ..SolverOptions::default()
        };
        let solution = minimize(&model, &start, &model.bounds(builder.narrowest), &options)?;
        let next = model.with(&solution.parameters);
        let settled = (last - solution.value).abs() < 1e-6 * (1.0 + solution.value.abs());
        last = solution.value;
        parameters = next;
        let count = parameters.lines.len();
        parameters.lines.retain(|l| l.area > 0.0);
        sort(&mut parameters.lines);
        if parameters.lines.len() < count {
            continue;
        }
        let in_order = solution
            .parameters
            .get(parameters.background.parameters()..)
            .is_some_and(|v| v.chunks(PER_LINE).map(|l| l[0]).is_sorted());
        if settled && in_order {
            return Ok((parameters, solution));
        }
    }
    // Each run converged, but moving the windows along changes the minimum again and again.
    let selection = Selection::all(&parameters, data);
    let (_, mut solution) = builder.fit(&parameters, &selection, 1, 1.0)?;
    solution.stop = StopReason::NoProgress;
    Err(super::solver::SolverError::NotConverged(Box::new(solution)).into())
}

/// A line in the words of the result. `at` is where its parameters start.
fn describe(line: &Line, solution: &Solution, at: usize, significance: f64) -> Peak {
    let covariance = &solution.covariance;
    let fwhm = line.fwhm();
    // The width is g·f(ratio): its variance from those of g and the ratio.
    let by_gaussian = fwhm / line.gaussian;
    let by_ratio = {
        let h = 1e-5;
        let wider = Line {
            ratio: line.ratio + h,
            ..*line
        };
        (wider.fwhm() - fwhm) / h
    };
    let c = &covariance.matrix;
    let variance = by_gaussian.powi(2) * c[(at + 1, at + 1)]
        + by_ratio.powi(2) * c[(at + 2, at + 2)]
        + 2.0 * by_gaussian * by_ratio * c[(at + 1, at + 2)];
    let fwhm_sd = variance.max(0.0).sqrt();
    let known = !solution.at_bound[at + 1]
        && !covariance.is_undetermined(at + 1)
        && fwhm_sd.is_finite()
        && fwhm_sd < fwhm;
    Peak {
        position_ev: line.position,
        position_sd: covariance.sd(at),
        area: line.area,
        area_sd: covariance.sd(at + 3),
        gaussian_fwhm_ev: line.gaussian,
        lorentzian_fwhm_ev: line.gaussian * line.ratio,
        fwhm_ev: fwhm,
        fwhm_sd: known.then_some(fwhm_sd),
        significance,
    }
}

/// Names of all parameters; lines count from 1.
fn names(parameters: &Parameters) -> Vec<String> {
    let mut names = parameters.background.names();
    for k in 1..=parameters.lines.len() {
        for what in ["position", "Gaussian width", "Lorentzian width", "area"] {
            names.push(format!("line {k} {what}"));
        }
    }
    names
}

fn statistics(data: &Channels, residuals: &[f64], solution: &Solution) -> FitStatistics {
    let free = solution.at_bound.iter().filter(|held| !**held).count();
    let degrees_of_freedom = data.len().saturating_sub(free);
    let runs = runs_test(residuals);
    FitStatistics {
        chi_squared: solution.value,
        degrees_of_freedom,
        reduced_chi_squared: solution.value / (degrees_of_freedom.max(1) as f64),
        runs_score: runs.map_or(0.0, |r| r.score),
        runs_probability: runs.map_or(1.0, |r| r.probability),
        iterations: solution.iterations,
        stopped_because: solution.stop.to_string(),
    }
}

/// Parameters that the data do not determine, in words.
fn undetermined(
    parameters: &Parameters,
    peaks: &[Peak],
    solution: &Solution,
    names: &[String],
) -> Vec<String> {
    let mut words = Vec::new();
    for direction in &solution.covariance.undetermined {
        let parts: Vec<&str> = direction.iter().map(|&(j, _)| names[j].as_str()).collect();
        words.push(match parts.len() {
            1 => format!("{}: the trace does not depend on it", parts[0]),
            _ => format!("{}: only together", parts.join(", ")),
        });
    }
    let first = parameters.background.parameters();
    for (k, peak) in peaks.iter().enumerate() {
        let name = |what: usize| &names[first + PER_LINE * k + what];
        if peak.fwhm_sd.is_none() {
            let why = if solution.at_bound[first + PER_LINE * k + 1] {
                "held at the end of its range"
            } else {
                "its uncertainty exceeds it"
            };
            words.push(format!("{}: {why}", name(1)));
        }
        if peak.position_sd > 0.5 * peak.fwhm_ev {
            words.push(format!("{}: ±{:.3} eV", name(0), peak.position_sd));
        }
        if peak.area_sd > LOOSE_AREA * peak.area {
            words.push(format!(
                "{}: ±{:.0} %",
                name(3),
                100.0 * peak.area_sd / peak.area
            ));
        }
    }
    words
}

fn correlations(covariance: &Covariance, names: &[String]) -> Vec<CorrelatedPair> {
    let mut pairs = Vec::new();
    for i in 0..names.len() {
        for j in i + 1..names.len() {
            let correlation = covariance.correlation(i, j);
            if correlation.abs() > REPORTED_CORRELATION {
                pairs.push(CorrelatedPair {
                    first: names[i].clone(),
                    second: names[j].clone(),
                    correlation,
                });
            }
        }
    }
    pairs
}

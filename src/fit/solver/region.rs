//! The trust-region iteration, as an argmin solver.

use super::linear::System;
use super::{Bounds, Objective, Solution, SolverOptions, StopReason};
use argmin::core::{Error, IterState, KV, Problem, Solver, State, TerminationReason};
use nalgebra::DVector;

/// argmin's state: only the parameters and the value are used.
type Progress = IterState<Vec<f64>, (), (), (), (), f64>;

/// Steps shorter than this, over the scaled length of the parameters, are rounding.
const SETTLED: f64 = 4.0 * f64::EPSILON;

/// Trust-region Levenberg-Marquardt with an active set of bounds.
pub(super) struct TrustRegion {
    bounds: Bounds,
    options: SolverOptions,
    /// Largest column length of J seen so far, per parameter (Moré's scaling).
    scale: Vec<f64>,
    radius: f64,
    point: Vec<f64>,
    value: f64,
    system: Option<System>,
    /// Scaled length of the last polishing step; `None` while descending.
    polishing: Option<f64>,
    polished: usize,
    evaluations: usize,
    stop: StopReason,
}

impl TrustRegion {
    pub(super) fn new(bounds: &Bounds, options: &SolverOptions) -> Self {
        TrustRegion {
            bounds: bounds.clone(),
            options: *options,
            scale: Vec::new(),
            radius: 0.0,
            point: Vec::new(),
            value: f64::INFINITY,
            system: None,
            polishing: None,
            polished: 0,
            evaluations: 0,
            stop: StopReason::IterationLimit,
        }
    }

    /// The solution at the present point.
    pub(super) fn finish<O: Objective>(self, objective: &O, iterations: usize) -> Solution {
        let system = self
            .system
            .unwrap_or_else(|| System::new(objective.linearize(&self.point)));
        let gradient = system.gradient();
        let at_bound: Vec<bool> = (0..self.point.len())
            .map(|j| held(&self.bounds, &self.point, &gradient, j))
            .collect();
        let free: Vec<usize> = (0..at_bound.len()).filter(|&j| !at_bound[j]).collect();
        Solution {
            covariance: system.covariance(&free),
            parameters: self.point,
            value: self.value,
            iterations,
            evaluations: self.evaluations,
            stop: self.stop,
            at_bound,
        }
    }

    fn scaled_length(&self, x: impl Iterator<Item = f64>) -> f64 {
        x.zip(&self.scale)
            .map(|(x, s)| (x * s).powi(2))
            .sum::<f64>()
            .sqrt()
    }

    fn rescale(&mut self) {
        let norms = self.system.as_ref().expect("linearized").column_norms();
        if self.scale.is_empty() {
            self.scale = norms
                .iter()
                .map(|&x| if x > 0.0 { x } else { 1.0 })
                .collect();
        } else {
            for (s, x) in self.scale.iter_mut().zip(norms) {
                *s = s.max(x);
            }
        }
    }

    /// Step that minimises the model within `radius` and the bounds.
    fn step(&self, radius: f64) -> DVector<f64> {
        let system = self.system.as_ref().expect("linearized");
        let n = self.point.len();
        let gradient = system.gradient();
        let mut step = DVector::zeros(n);
        let mut free: Vec<usize> = (0..n)
            .filter(|&j| !held(&self.bounds, &self.point, &gradient, j))
            .collect();
        while !free.is_empty() {
            let used = self.scaled_length(step.iter().copied());
            let left = (radius * radius - used * used).max(0.0).sqrt();
            if left == 0.0 {
                break;
            }
            let inner = system
                .decompose(&free, &self.scale, &step)
                .step_within(left);
            let mut trial = step.clone();
            for (k, &j) in free.iter().enumerate() {
                trial[j] = inner[k] / self.scale[j];
            }
            // How much of its step each parameter can make; the first to meet a bound are cut.
            let room = |j: usize| {
                let goal = self.point[j] + trial[j];
                let edge = goal.max(self.bounds.lower[j]).min(self.bounds.upper[j]);
                (edge - self.point[j], edge != goal)
            };
            let reach = free
                .iter()
                .filter(|&&j| room(j).1)
                .map(|&j| (room(j).0 - step[j]) / (trial[j] - step[j]))
                .fold(f64::INFINITY, f64::min);
            if reach == f64::INFINITY {
                step = trial;
                break;
            }
            let (cut, kept): (Vec<usize>, Vec<usize>) = free.iter().partition(|&&j| {
                let (left, meets) = room(j);
                meets && (left - step[j]) / (trial[j] - step[j]) <= reach + 0.1
            });
            for j in cut {
                step[j] = room(j).0;
            }
            free = kept;
        }
        if system.predicted_change(&step) < 0.0 {
            step
        } else {
            self.steepest(radius)
        }
    }

    /// Step along the scaled gradient to the model's minimum, the radius or the first bound: it
    /// always lowers the model, for when a step cut at bounds does not.
    fn steepest(&self, radius: f64) -> DVector<f64> {
        let system = self.system.as_ref().expect("linearized");
        let gradient = system.gradient();
        let direction = DVector::from_fn(self.point.len(), |j, _| {
            if held(&self.bounds, &self.point, &gradient, j) {
                0.0
            } else {
                -gradient[j] / (self.scale[j] * self.scale[j])
            }
        });
        let length = self.scaled_length(direction.iter().copied());
        if length == 0.0 {
            return direction;
        }
        let slope = gradient.dot(&direction);
        let curvature = system.predicted_change(&direction) - 2.0 * slope;
        let mut reach = radius / length;
        if curvature > 0.0 {
            reach = reach.min(-slope / curvature);
        }
        for j in 0..self.point.len() {
            if direction[j] != 0.0 {
                let bound = if direction[j] > 0.0 {
                    self.bounds.upper[j]
                } else {
                    self.bounds.lower[j]
                };
                reach = reach.min((bound - self.point[j]) / direction[j]);
            }
        }
        direction * reach
    }

    fn moved(&self, step: &DVector<f64>) -> Vec<f64> {
        let mut x: Vec<f64> = self
            .point
            .iter()
            .zip(step.iter())
            .map(|(x, s)| x + s)
            .collect();
        self.bounds.clamp(&mut x);
        x
    }

    /// Takes a point; false where the derivatives are not finite there.
    fn take<O: Objective>(
        &mut self,
        problem: &mut Problem<O>,
        point: Vec<f64>,
        value: f64,
    ) -> Result<bool, Error> {
        let linearization = problem.problem("jacobian_count", |o| Ok(o.linearize(&point)))?;
        if !linearization.is_finite() {
            return Ok(false);
        }
        self.system = Some(System::new(linearization));
        self.point = point;
        self.value = value;
        self.rescale();
        Ok(true)
    }

    /// One accepted step of descent, or the end of it.
    fn descend<O: Objective>(&mut self, problem: &mut Problem<O>) -> Result<bool, Error> {
        let length = self.scaled_length(self.point.iter().copied());
        for _ in 0..80 {
            let step = self.step(self.radius);
            let moved_by = self.scaled_length(step.iter().copied());
            let predicted = -self
                .system
                .as_ref()
                .expect("linearized")
                .predicted_change(&step);
            if moved_by == 0.0 || predicted <= 0.0 {
                return self.end_descent(StopReason::GradientVanished);
            }
            let small = self.options.value_tolerance * self.value.abs();
            let goal = self.moved(&step);
            self.evaluations += 1;
            let value = problem.problem("cost_count", |o| Ok(o.value(&goal)))?;
            let gain = self.value - value;
            let ratio = if value.is_finite() {
                gain / predicted
            } else {
                -1.0
            };
            if ratio < 0.25 {
                self.radius = if value.is_finite() {
                    0.25 * moved_by
                } else {
                    0.1 * moved_by
                };
            } else if ratio > 0.75 && moved_by > 0.95 * self.radius {
                self.radius *= 2.0;
            }
            let settled = predicted <= small && gain.abs() <= small;
            if ratio > 1e-4 && gain > 0.0 && self.take(problem, goal, value)? {
                return if settled {
                    self.end_descent(StopReason::ValueSettled)
                } else {
                    Ok(true)
                };
            }
            if settled {
                return self.end_descent(StopReason::ValueSettled);
            }
            if moved_by <= SETTLED * length.max(f64::MIN_POSITIVE) {
                return self.end_descent(StopReason::ParametersSettled);
            }
        }
        self.stop = StopReason::NoProgress;
        Ok(false)
    }

    fn end_descent(&mut self, reason: StopReason) -> Result<bool, Error> {
        self.stop = reason;
        if self.options.polish {
            self.polishing = Some(f64::INFINITY);
        }
        Ok(self.options.polish)
    }

    /// One Gauss-Newton step, taken while such steps keep shrinking.
    fn polish<O: Objective>(&mut self, problem: &mut Problem<O>, last: f64) -> Result<bool, Error> {
        let length = self.scaled_length(self.point.iter().copied());
        let step = self.step(f64::INFINITY);
        let moved_by = self.scaled_length(step.iter().copied());
        self.polished += 1;
        if moved_by <= SETTLED * length || moved_by >= 0.9 * last || self.polished > 100 {
            return Ok(false);
        }
        let goal = self.moved(&step);
        self.evaluations += 1;
        let value = problem.problem("cost_count", |o| Ok(o.value(&goal)))?;
        // Near the minimum the value is flat to rounding: it may not rise visibly.
        let visible = 1e-9 * self.value.abs();
        if !value.is_finite() || value > self.value + visible {
            return Ok(false);
        }
        if !self.take(problem, goal, value)? {
            return Ok(false);
        }
        self.polishing = Some(moved_by);
        if self.stop == StopReason::ValueSettled && moved_by <= 1e-12 * length {
            self.stop = StopReason::ParametersSettled;
        }
        Ok(true)
    }
}

/// Whether a parameter lies at a bound with the descent direction pointing out of the box.
fn held(bounds: &Bounds, point: &[f64], gradient: &DVector<f64>, j: usize) -> bool {
    bounds.lower[j] == bounds.upper[j]
        || (point[j] <= bounds.lower[j] && gradient[j] >= 0.0)
        || (point[j] >= bounds.upper[j] && gradient[j] <= 0.0)
}

impl<O: Objective> Solver<O, Progress> for TrustRegion {
    fn name(&self) -> &str {
        "bounded trust-region Levenberg-Marquardt"
    }

    fn init(
        &mut self,
        problem: &mut Problem<O>,
        mut state: Progress,
    ) -> Result<(Progress, Option<KV>), Error> {
        let point = state.take_param().unwrap_or_default();
        self.evaluations += 1;
        let value = problem.problem("cost_count", |o| Ok(o.value(&point)))?;
        self.take(problem, point, value)?;
        let length = self.scaled_length(self.point.iter().copied());
        self.radius = self.options.first_radius * if length > 0.0 { length } else { 1.0 };
        Ok((state.param(self.point.clone()).cost(self.value), None))
    }

    fn next_iter(
        &mut self,
        problem: &mut Problem<O>,
        state: Progress,
    ) -> Result<(Progress, Option<KV>), Error> {
        let goes_on = match self.polishing {
            None => self.descend(problem)?,
            Some(last) => self.polish(problem, last)?,
        };
        let state = state.param(self.point.clone()).cost(self.value);
        let state = if goes_on {
            state
        } else {
            state.terminate_with(match self.stop.converged() {
                true => TerminationReason::SolverConverged,
                false => TerminationReason::SolverExit(self.stop.to_string()),
            })
        };
        Ok((state, None))
    }
}

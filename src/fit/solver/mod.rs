//! Bounded nonlinear least squares.
//!
//! Method: Levenberg-Marquardt in its trust-region form (Moré, 1978; the step length is found from
//! the secular equation on a singular value decomposition), with simple bounds kept by an active
//! set: a step that would leave the box is cut at the bound and the rest of the parameters is
//! solved again. It runs as a [`argmin::core::Solver`] under argmin's executor, because argmin has
//! no bounded least squares of its own.
//!
//! The objective is anything with a Gauss-Newton structure: a value, its half gradient Jᵀr and a
//! positive semidefinite half Hessian JᵀJ. Least squares gives J and r themselves; a Poisson
//! likelihood gives the score and Fisher's information.
//!
//! Once the value stops changing at the level of rounding, plain Gauss-Newton steps go on while
//! they keep shrinking: the value of a sum of squares is flat to √ε around its minimum, the
//! gradient is not, and the last eight digits come from there.

mod linear;
mod region;

pub use linear::{Covariance, Linearization};

use argmin::core::{Executor, IterState, State};
use region::TrustRegion;
use thiserror::Error;

/// What the solver minimises.
pub trait Objective {
    /// Number of parameters.
    fn parameters(&self) -> usize;
    /// The value to be minimised, Σr² or a deviance; not finite where the model has no value.
    fn value(&self, parameters: &[f64]) -> f64;
    /// Half gradient and half Gauss-Newton Hessian of the value, in one of two forms.
    fn linearize(&self, parameters: &[f64]) -> Linearization;
}

/// Lowest and highest value of each parameter; infinite where there is none.
#[derive(Debug, Clone, PartialEq)]
pub struct Bounds {
    /// Lowest values.
    pub lower: Vec<f64>,
    /// Highest values.
    pub upper: Vec<f64>,
}

impl Bounds {
    /// No bounds on any of `n` parameters.
    pub fn free(n: usize) -> Self {
        Bounds {
            lower: vec![f64::NEG_INFINITY; n],
            upper: vec![f64::INFINITY; n],
        }
    }

    /// Moves every parameter that lies outside to its nearest bound.
    pub fn clamp(&self, parameters: &mut [f64]) {
        for (j, x) in parameters.iter_mut().enumerate() {
            *x = x.max(self.lower[j]).min(self.upper[j]);
        }
    }

    fn check(&self, n: usize) -> Result<(), SolverError> {
        if self.lower.len() != n || self.upper.len() != n {
            return Err(SolverError::Sizes {
                parameters: n,
                bounds: self.lower.len().min(self.upper.len()),
            });
        }
        for j in 0..n {
            // Written so that a NaN is refused too.
            if !matches!(
                self.lower[j].partial_cmp(&self.upper[j]),
                Some(std::cmp::Ordering::Less | std::cmp::Ordering::Equal)
            ) {
                return Err(SolverError::EmptyBounds {
                    parameter: j,
                    lower: self.lower[j],
                    upper: self.upper[j],
                });
            }
        }
        Ok(())
    }
}

/// How long and how closely the solver works.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SolverOptions {
    /// Most accepted steps.
    pub max_iterations: usize,
    /// First trust-region radius over the scaled length of the start.
    pub first_radius: f64,
    /// Relative change of the value, predicted and found, under which descent ends.
    pub value_tolerance: f64,
    /// Whether Gauss-Newton steps then polish the parameters to rounding.
    pub polish: bool,
}

impl Default for SolverOptions {
    fn default() -> Self {
        SolverOptions {
            max_iterations: 2000,
            first_radius: 1.0,
            value_tolerance: 1e-14,
            polish: true,
        }
    }
}

/// Why a run ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum StopReason {
    /// The parameters stopped moving at the level of rounding.
    ParametersSettled,
    /// The value stopped changing.
    ValueSettled,
    /// The gradient vanished.
    GradientVanished,
    /// No step lowers the value although the gradient says one should.
    NoProgress,
    /// The iteration limit came first.
    IterationLimit,
}

impl StopReason {
    /// Whether the run found a minimum.
    pub fn converged(self) -> bool {
        matches!(
            self,
            StopReason::ParametersSettled | StopReason::ValueSettled | StopReason::GradientVanished
        )
    }
}

impl std::fmt::Display for StopReason {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(match self {
            StopReason::ParametersSettled => "the parameters settled to rounding",
            StopReason::ValueSettled => "the value settled",
            StopReason::GradientVanished => "the gradient vanished",
            StopReason::NoProgress => "no step made progress",
            StopReason::IterationLimit => "the iteration limit was reached",
        })
    }
}

/// Where a run ended.
#[derive(Debug, Clone, PartialEq)]
pub struct Solution {
    /// The parameters.
    pub parameters: Vec<f64>,
    /// The value there.
    pub value: f64,
    /// Accepted steps.
    pub iterations: usize,
    /// Evaluations of the value.
    pub evaluations: usize,
    /// Why the run ended.
    pub stop: StopReason,
    /// Whether each parameter lies at one of its bounds, held there by the gradient.
    pub at_bound: Vec<bool>,
    /// Inverse of JᵀJ over the parameters that are not at a bound.
    pub covariance: Covariance,
}

/// Why there is no solution.
#[derive(Debug, Error)]
pub enum SolverError {
    /// The numbers of parameters and bounds differ.
    #[error("{parameters} parameters but {bounds} bounds")]
    Sizes {
        /// Number of parameters.
        parameters: usize,
        /// Number of bounds.
        bounds: usize,
    },
    /// A lower bound above the upper one.
    #[error("parameter {parameter}: lower bound {lower} is above upper bound {upper}")]
    EmptyBounds {
        /// Which parameter, from 0.
        parameter: usize,
        /// Its lower bound.
        lower: f64,
        /// Its upper bound.
        upper: f64,
    },
    /// The model has no value at the start.
    #[error("the objective has no finite value or derivative at the start")]
    NotFiniteAtStart,
    /// The run ended before a minimum was found; its last state is kept.
    #[error("not converged after {} iterations: {}", .0.iterations, .0.stop)]
    NotConverged(Box<Solution>),
    /// The machinery itself failed.
    #[error("least-squares run failed: {0}")]
    Machinery(String),
}

/// Minimises `objective` from `start` within `bounds`.
///
/// A start outside the bounds is moved to the nearest bound. A run that ends anywhere but at a
/// minimum is [`SolverError::NotConverged`], with the last state inside.
pub fn minimize<O: Objective>(
    objective: &O,
    start: &[f64],
    bounds: &Bounds,
    options: &SolverOptions,
) -> Result<Solution, SolverError> {
    let solution = run(objective, start, bounds, options)?;
    if solution.stop.converged() {
        Ok(solution)
    } else {
        Err(SolverError::NotConverged(Box::new(solution)))
    }
}

/// As [`minimize`], but an unfinished run is returned like a finished one: for intermediate fits
/// that are refined later. The caller looks at [`Solution::stop`].
pub fn run<O: Objective>(
    objective: &O,
    start: &[f64],
    bounds: &Bounds,
    options: &SolverOptions,
) -> Result<Solution, SolverError> {
    let n = objective.parameters();
    if start.len() != n {
        return Err(SolverError::Sizes {
            parameters: start.len(),
            bounds: n,
        });
    }
    bounds.check(n)?;
    let mut first = start.to_vec();
    bounds.clamp(&mut first);
    if !objective.value(&first).is_finite() || !objective.linearize(&first).is_finite() {
        return Err(SolverError::NotFiniteAtStart);
    }
    let result = Executor::new(Borrowed(objective), TrustRegion::new(bounds, options))
        .configure(|state: IterState<Vec<f64>, (), (), (), (), f64>| {
            state
                .param(first)
                .max_iters(options.max_iterations as u64)
                .target_cost(f64::NEG_INFINITY)
                .counting(false)
        })
        .timer(false)
        .run()
        .map_err(|e| SolverError::Machinery(e.to_string()))?;
    let iterations = result.state.get_iter() as usize;
    Ok(result.solver.finish(objective, iterations))
}

/// Lets argmin own an objective that the caller keeps.
struct Borrowed<'a, O>(&'a O);

impl<O: Objective> Objective for Borrowed<'_, O> {
    fn parameters(&self) -> usize {
        self.0.parameters()
    }
    fn value(&self, parameters: &[f64]) -> f64 {
        self.0.value(parameters)
    }
    fn linearize(&self, parameters: &[f64]) -> Linearization {
        self.0.linearize(parameters)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::{DMatrix, DVector};

    /// Rosenbrock's valley as a sum of squares: minimum 0 at (1, 1).
    struct Valley {
        normal: bool,
    }

    impl Objective for Valley {
        fn parameters(&self) -> usize {
            2
        }
        fn value(&self, p: &[f64]) -> f64 {
            100.0 * (p[1] - p[0] * p[0]).powi(2) + (1.0 - p[0]).powi(2)
        }
        fn linearize(&self, p: &[f64]) -> Linearization {
            let residuals = DVector::from_vec(vec![10.0 * (p[1] - p[0] * p[0]), 1.0 - p[0]]);
            let jacobian = DMatrix::from_row_slice(2, 2, &[-20.0 * p[0], 10.0, -1.0, 0.0]);
            if self.normal {
                Linearization::Normal {
                    gradient: jacobian.tr_mul(&residuals),
                    gram: jacobian.tr_mul(&jacobian),
                }
            } else {
                Linearization::Rows {
                    residuals,
                    jacobian,
                }
            }
        }
    }

    #[test]
    fn both_forms_of_linearization_find_the_minimum() {
        for normal in [false, true] {
            let s = minimize(
                &Valley { normal },
                &[-1.2, 1.0],
                &Bounds::free(2),
                &SolverOptions::default(),
            )
            .unwrap();
            assert!((s.parameters[0] - 1.0).abs() < 1e-14, "{s:?}");
            assert!((s.parameters[1] - 1.0).abs() < 1e-14, "{s:?}");
        }
    }

    #[test]
    fn minimum_on_a_bound_is_exact_and_drops_out_of_the_covariance() {
        // With p0 ≤ 1/2 the minimum is (1/2, 1/4), value 1/4.
        for normal in [false, true] {
            let bounds = Bounds {
                lower: vec![-2.0, -2.0],
                upper: vec![0.5, 2.0],
            };
            let options = SolverOptions::default();
            let s = minimize(&Valley { normal }, &[-1.2, 1.0], &bounds, &options).unwrap();
            assert_eq!(s.parameters[0], 0.5);
            assert!((s.parameters[1] - 0.25).abs() < 1e-14);
            assert!((s.value - 0.25).abs() < 1e-14);
            assert_eq!(s.at_bound, [true, false]);
            assert_eq!(s.covariance.sd(0), 0.0);
            assert!((s.covariance.sd(1) - 0.1).abs() < 1e-12);
        }
    }

    /// y = (a + b)·x with two points: only the sum is determined.
    struct SumOnly;

    impl Objective for SumOnly {
        fn parameters(&self) -> usize {
            3
        }
        fn value(&self, p: &[f64]) -> f64 {
            (p[0] + p[1] - 3.0).powi(2) + (2.0 * (p[0] + p[1]) - 6.0).powi(2)
        }
        fn linearize(&self, p: &[f64]) -> Linearization {
            let t = p[0] + p[1];
            Linearization::Rows {
                residuals: DVector::from_vec(vec![t - 3.0, 2.0 * t - 6.0, 0.0]),
                jacobian: DMatrix::from_row_slice(
                    3,
                    3,
                    &[1.0, 1.0, 0.0, 2.0, 2.0, 0.0, 0.0, 0.0, 0.0],
                ),
            }
        }
    }

    #[test]
    fn undetermined_directions_are_named() {
        let options = SolverOptions::default();
        let s = minimize(&SumOnly, &[0.0, 1.0, 7.0], &Bounds::free(3), &options).unwrap();
        assert!((s.parameters[0] + s.parameters[1] - 3.0).abs() < 1e-14);
        assert_eq!(s.parameters[2], 7.0);
        let mut named: Vec<Vec<usize>> = s
            .covariance
            .undetermined
            .iter()
            .map(|d| d.iter().map(|&(j, _)| j).collect())
            .collect();
        named.sort();
        assert_eq!(named, [vec![0, 1], vec![2]]);
    }

    #[test]
    fn unfinished_run_is_an_error_that_keeps_its_state() {
        let options = SolverOptions {
            max_iterations: 2,
            ..SolverOptions::default()
        };
        let valley = Valley { normal: false };
        match minimize(&valley, &[-1.2, 1.0], &Bounds::free(2), &options) {
            Err(SolverError::NotConverged(s)) => {
                assert_eq!(s.stop, StopReason::IterationLimit);
                assert_eq!(s.iterations, 2);
                assert!(s.value < valley.value(&[-1.2, 1.0]));
            }
            other => panic!("{other:?}"),
        }
    }

    #[test]
    fn start_without_a_value_is_refused() {
        let r = minimize(
            &Valley { normal: false },
            &[f64::NAN, 1.0],
            &Bounds::free(2),
            &SolverOptions::default(),
        );
        assert!(matches!(r, Err(SolverError::NotFiniteAtStart)));
    }
}

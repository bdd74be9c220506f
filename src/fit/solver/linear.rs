//! The linear algebra of one step: the quadratic model of the objective, trust-region steps on it
//! and the covariance at the end.

use nalgebra::{DMatrix, DVector, SymmetricEigen};

/// The objective near a point: value(x + s) ≈ value + 2·gᵀs + sᵀGs.
#[derive(Debug, Clone, PartialEq)]
pub enum Linearization {
    /// By residuals and their derivatives: g = Jᵀr, G = JᵀJ. Steps keep the full precision of J.
    Rows {
        /// Residuals r.
        residuals: DVector<f64>,
        /// J, one row per residual, one column per parameter.
        jacobian: DMatrix<f64>,
    },
    /// By sums over channels: cheap where J is large and sparse; steps lose half the digits of J,
    /// the minimum that they lead to does not, since g is exact.
    Normal {
        /// g = Jᵀr.
        gradient: DVector<f64>,
        /// G = JᵀJ.
        gram: DMatrix<f64>,
    },
}

impl Linearization {
    /// Whether every number in it is finite.
    pub fn is_finite(&self) -> bool {
        match self {
            Linearization::Rows {
                residuals,
                jacobian,
            } => residuals
                .iter()
                .chain(jacobian.iter())
                .all(|x| x.is_finite()),
            Linearization::Normal { gradient, gram } => {
                gradient.iter().chain(gram.iter()).all(|x| x.is_finite())
            }
        }
    }
}

/// A linearization brought to the size of the parameter space.
pub(super) enum System {
    /// Upper triangle R of a QR decomposition of J, and Qᵀr.
    Triangle { r: DMatrix<f64>, z: DVector<f64> },
    /// Half gradient and half Hessian.
    Normal { g: DVector<f64>, gram: DMatrix<f64> },
}

impl System {
    pub(super) fn new(linearization: Linearization) -> Self {
        match linearization {
            Linearization::Rows {
                residuals,
                jacobian,
            } => {
                if jacobian.nrows() < jacobian.ncols() {
                    return System::Triangle {
                        r: jacobian,
                        z: residuals,
                    };
                }
                let n = jacobian.ncols();
                let qr = jacobian.qr();
                let mut z = residuals;
                qr.q_tr_mul(&mut z);
                System::Triangle {
                    r: qr.r(),
                    z: z.rows(0, n).into_owned(),
                }
            }
            Linearization::Normal { gradient, gram } => System::Normal { g: gradient, gram },
        }
    }

    /// Half gradient.
    pub(super) fn gradient(&self) -> DVector<f64> {
        match self {
            System::Triangle { r, z } => r.tr_mul(z),
            System::Normal { g, .. } => g.clone(),
        }
    }

    /// Length of each column of J.
    pub(super) fn column_norms(&self) -> Vec<f64> {
        match self {
            System::Triangle { r, .. } => r.column_iter().map(|c| c.norm()).collect(),
            System::Normal { gram, .. } => (0..gram.ncols())
                .map(|j| gram[(j, j)].max(0.0).sqrt())
                .collect(),
        }
    }

    /// Change of the value that the quadratic model predicts for a step.
    pub(super) fn predicted_change(&self, step: &DVector<f64>) -> f64 {
        match self {
            System::Triangle { r, z } => {
                let moved = r * step;
                moved.dot(&moved) + 2.0 * z.dot(&moved)
            }
            System::Normal { g, gram } => 2.0 * g.dot(step) + step.dot(&(gram * step)),
        }
    }

    /// Singular values and directions of J over the columns `free`, each divided by `scale`, with
    /// the residual already moved by the step of the parameters that are held.
    pub(super) fn decompose(
        &self,
        free: &[usize],
        scale: &[f64],
        held_step: &DVector<f64>,
    ) -> Decomposed {
        match self {
            System::Triangle { r, z } => {
                let columns = DMatrix::from_fn(r.nrows(), free.len(), |i, j| {
                    r[(i, free[j])] / scale[free[j]]
                });
                let moved = z + r * held_step;
                let svd = columns.svd(true, true);
                let (u, vt) = (svd.u.expect("asked for"), svd.v_t.expect("asked for"));
                let rotated = u.tr_mul(&moved);
                Decomposed {
                    slopes: rotated.component_mul(&svd.singular_values),
                    singular: svd.singular_values,
                    directions: vt.transpose(),
                }
            }
            System::Normal { g, gram } => {
                let moved = g + gram * held_step;
                let scaled = DMatrix::from_fn(free.len(), free.len(), |i, j| {
                    gram[(free[i], free[j])] / (scale[free[i]] * scale[free[j]])
                });
                let slope = DVector::from_fn(free.len(), |j, _| moved[free[j]] / scale[free[j]]);
                let eigen = SymmetricEigen::new(scaled);
                Decomposed {
                    slopes: eigen.eigenvectors.tr_mul(&slope),
                    singular: eigen.eigenvalues.map(|x| x.max(0.0).sqrt()),
                    directions: eigen.eigenvectors,
                }
            }
        }
    }

    /// Smallest relative singular value that rounding still leaves meaningful.
    fn rounding_floor(&self) -> f64 {
        match self {
            System::Triangle { r, .. } => 16.0 * r.ncols() as f64 * f64::EPSILON,
            System::Normal { gram, .. } => (16.0 * gram.ncols() as f64 * f64::EPSILON).sqrt(),
        }
    }

    /// Inverse of JᵀJ over the columns `free`.
    pub(super) fn covariance(&self, free: &[usize]) -> Covariance {
        let norms = self.column_norms();
        let n = norms.len();
        let mut matrix = DMatrix::zeros(n, n);
        let mut undetermined = Vec::new();
        // A parameter that nothing depends on has a column of zeros.
        let (alive, dead): (Vec<usize>, Vec<usize>) = free.iter().partition(|&&j| norms[j] > 0.0);
        for j in dead {
            undetermined.push(vec![(j, 1.0)]);
            matrix[(j, j)] = f64::INFINITY;
        }
        if !alive.is_empty() {
            let scale: Vec<f64> = norms
                .iter()
                .map(|&x| if x > 0.0 { x } else { 1.0 })
                .collect();
            let parts = self.decompose(&alive, &scale, &DVector::zeros(n));
            let floor = self.rounding_floor() * parts.singular.max();
            for k in 0..parts.singular.len() {
                let v = parts.directions.column(k);
                if parts.singular[k] <= floor {
                    undetermined.push(
                        alive
                            .iter()
                            .zip(v.iter())
                            .filter(|(_, c)| c.abs() > 0.1)
                            .map(|(&j, &c)| (j, c))
                            .collect(),
                    );
                    continue;
                }
                let weight = 1.0 / (parts.singular[k] * parts.singular[k]);
                for (a, &i) in alive.iter().enumerate() {
                    for (b, &j) in alive.iter().enumerate() {
                        matrix[(i, j)] += weight * v[a] * v[b] / (scale[i] * scale[j]);
                    }
                }
            }
        }
        Covariance {
            matrix,
            undetermined,
        }
    }
}

/// J over some columns in its singular directions.
pub(super) struct Decomposed {
    /// Singular values.
    singular: DVector<f64>,
    /// uᵀr·σ: the half gradient along each direction.
    slopes: DVector<f64>,
    /// Right singular vectors, as columns.
    directions: DMatrix<f64>,
}

impl Decomposed {
    /// Smallest step (in scaled parameters) that minimises the quadratic model within a ball.
    pub(super) fn step_within(&self, radius: f64) -> DVector<f64> {
        let largest = self.singular.max();
        if largest <= 0.0 {
            return DVector::zeros(self.directions.nrows());
        }
        let floor = (f64::EPSILON * self.singular.len() as f64 * largest).powi(2);
        let along = |damping: f64| -> DVector<f64> {
            DVector::from_fn(self.singular.len(), |k, _| {
                let curvature = self.singular[k] * self.singular[k];
                if damping == 0.0 && curvature <= floor {
                    0.0
                } else {
                    -self.slopes[k] / (curvature + damping)
                }
            })
        };
        let newton = along(0.0);
        if newton.norm() <= radius {
            return &self.directions * newton;
        }
        // 1/|q(λ)| is nearly linear in λ: Newton's method on 1/radius − 1/|q(λ)|, kept in a bracket.
        let mut low = 0.0;
        let mut high = self.slopes.norm() / radius;
        let mut damping = (1e-3 * high).max((low * high).sqrt());
        for _ in 0..60 {
            if damping < low || damping > high || damping == 0.0 {
                damping = (1e-3 * high).max((low * high).sqrt());
            }
            let q = along(damping);
            let length = q.norm();
            let excess = length - radius;
            if excess.abs() <= 1e-3 * radius {
                break;
            }
            if excess > 0.0 {
                low = damping;
            } else {
                high = damping;
            }
            let falling: f64 = (0..q.len())
                .map(|k| q[k] * q[k] / (self.singular[k] * self.singular[k] + damping))
                .sum();
            damping += excess / radius * (length * length) / falling;
        }
        &self.directions * along(damping)
    }
}

/// Inverse of JᵀJ, with what it cannot say.
#[derive(Clone, PartialEq)]
pub struct Covariance {
    /// Covariances; rows and columns of parameters held at a bound are zero. Multiply by the
    /// residual variance where the residuals are not in units of their standard deviation.
    pub matrix: DMatrix<f64>,
    /// Directions that the objective does not depend on (to rounding): parameter numbers with
    /// their components. They are left out of `matrix`.
    pub undetermined: Vec<Vec<(usize, f64)>>,
}

impl std::fmt::Debug for Covariance {
    /// Standard deviations instead of the whole matrix, which nobody reads.
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let sd: Vec<f64> = (0..self.matrix.ncols()).map(|j| self.sd(j)).collect();
        f.debug_struct("Covariance")
            .field("sd", &sd)
            .field("undetermined", &self.undetermined)
            .finish_non_exhaustive()
    }
}

impl Covariance {
    /// Standard deviation of a parameter.
    pub fn sd(&self, parameter: usize) -> f64 {
        self.matrix[(parameter, parameter)].max(0.0).sqrt()
    }

    /// Whether a parameter takes part in an undetermined direction.
    pub fn is_undetermined(&self, parameter: usize) -> bool {
        self.undetermined
            .iter()
            .flatten()
            .any(|&(j, _)| j == parameter)
    }

    /// Correlation coefficient of two parameters; 0 where one of them has no variance.
    pub fn correlation(&self, first: usize, second: usize) -> f64 {
        let product = self.sd(first) * self.sd(second);
        if product > 0.0 && product.is_finite() {
            self.matrix[(first, second)] / product
        } else {
            0.0
        }
    }
}

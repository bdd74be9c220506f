//! Charge distributions as sums of Hermite Gaussians: the product of two shells, or one shell.
//!
//! A product of two primitive Gaussians is a finite sum of derivatives of one s Gaussian at the
//! centre of charge P (McMurchie and Davidson, J. Comput. Phys. 26, 218, 1978):
//! χ_a χ_b = Σ_tuv E^{ab}_tuv ∂_Px^t ∂_Py^u ∂_Pz^v exp(−p|r − P|²). The matrix E is made directly
//! for contracted real spherical functions: it holds the contraction coefficients, the solid
//! harmonics and the Gaussian prefactor exp(−ab|A − B|²/p).

use super::hermite;
use crate::basis::{MAX_ORBITAL_L, Shell};
use nalgebra::Vector3;

/// Exponents and centre of one Hermite expansion.
#[derive(Debug, Clone, Copy)]
pub struct Primitive {
    /// Total exponent p, bohr⁻².
    pub exponent: f64,
    /// Centre P, bohr.
    pub centre: Vector3<f64>,
    /// Exponent of the second function, bohr⁻² (zero for a single shell).
    pub second_exponent: f64,
}

/// A set of charge distributions that share primitives: the functions of one shell, or the
/// products of the functions of two.
#[derive(Debug, Clone, Default)]
pub struct Distribution {
    /// Highest degree of the Hermite Gaussians.
    pub degree: usize,
    /// Number of distributions: functions of the first shell × functions of the second, the
    /// first running fast.
    pub rows: usize,
    /// The primitives that were kept.
    pub primitives: Vec<Primitive>,
    /// E: primitive × triple × row, the row running fast.
    pub expansion: Vec<f64>,
}

/// Room for the one-dimensional coefficients: exponents up to l + 1 on both sides.
const SIDE: usize = MAX_ORBITAL_L + 2;

/// E_t^{ij} along one axis, without the Gaussian prefactor.
type Axis = [[[f64; 2 * SIDE]; SIDE]; SIDE];

/// Fills E_t^{ij} for i ≤ `la`, j ≤ `lb` by the two-term recursion in i, then in j:
/// E_t^{i+1,j} = E_{t−1}^{ij}/(2p) + x_PA E_t^{ij} + (t + 1) E_{t+1}^{ij}.
fn fill_axis(e: &mut Axis, la: usize, lb: usize, p: f64, pa: f64, pb: f64) {
    let half = 0.5 / p;
    e[0][0][0] = 1.0;
    e[0][0][1] = 0.0;
    let raise = |from: &[f64; 2 * SIDE], degree: usize, x: f64| {
        let mut to = [0.0; 2 * SIDE];
        for t in 0..=degree + 1 {
            let mut value = if t <= degree { x * from[t] } else { 0.0 };
            if t > 0 {
                value += half * from[t - 1];
            }
            if t < degree {
                value += (t + 1) as f64 * from[t + 1];
            }
            to[t] = value;
        }
        to
    };
    for i in 0..=la {
        if i > 0 {
            e[i][0] = raise(&e[i - 1][0], i - 1, pa);
        }
        for j in 1..=lb {
            e[i][j] = raise(&e[i][j - 1], i + j - 1, pb);
        }
    }
}

impl Distribution {
    /// Makes this the products of two shells, keeping the storage. Primitive products whose
    /// estimated self-repulsion √(ab|ab) stays below `threshold` (hartree^½) are left out;
    /// afterwards [`Self::is_empty`] says whether any is left.
    ///
    /// # Panics
    /// If an angular momentum exceeds [`MAX_ORBITAL_L`].
    pub fn set_pair(&mut self, a: &Shell, b: &Shell, threshold: f64) {
        assert!(
            a.l <= MAX_ORBITAL_L && b.l <= MAX_ORBITAL_L,
            "orbital shells end at g"
        );
        self.degree = a.l + b.l;
        self.rows = a.len() * b.len();
        self.primitives.clear();
        self.expansion.clear();
        let block = hermite::count(self.degree) * self.rows;
        let distance = a.centre_bohr - b.centre_bohr;
        let mut axes = [[[[0.0; 2 * SIDE]; SIDE]; SIDE]; 3];
        for (&alpha, &ca) in a.exponents.iter().zip(&a.coefficients) {
            for (&beta, &cb) in b.exponents.iter().zip(&b.coefficients) {
                let p = alpha + beta;
                let factor = ca * cb * (-alpha * beta / p * distance.norm_squared()).exp();
                if factor == 0.0 {
                    continue;
                }
                let centre = (a.centre_bohr * alpha + b.centre_bohr * beta) / p;
                let (pa, pb) = (centre - a.centre_bohr, centre - b.centre_bohr);
                for axis in 0..3 {
                    fill_axis(&mut axes[axis], a.l, b.l, p, pa[axis], pb[axis]);
                }
                let start = self.expansion.len();
                self.expansion.resize(start + block, 0.0);
                let e = &mut self.expansion[start..];
                expand_product(e, self.rows, a.l, b.l, factor, &axes);
                if self_repulsion(e, self.rows, self.degree, p) < threshold {
                    self.expansion.truncate(start);
                } else {
                    self.primitives.push(Primitive {
                        exponent: p,
                        centre,
                        second_exponent: beta,
                    });
                }
            }
        }
    }

    /// The functions of a single shell. By Hobson's theorem S_lm(r) exp(−αr²) is
    /// (2α)^{−l} S_lm(∂_C) exp(−α|r − C|²): only the highest degree occurs.
    pub fn of_shell(shell: &Shell) -> Self {
        let rows = shell.len();
        let block = hermite::count(shell.l) * rows;
        let mut expansion = vec![0.0; block * shell.exponents.len()];
        let mut primitives = Vec::with_capacity(shell.exponents.len());
        let pairs = shell.exponents.iter().zip(&shell.coefficients);
        for ((&alpha, &c), e) in pairs.zip(expansion.chunks_exact_mut(block)) {
            primitives.push(Primitive {
                exponent: alpha,
                centre: shell.centre_bohr,
                second_exponent: 0.0,
            });
            let factor = c / (2.0 * alpha).powi(shell.l as i32);
            for (m, harmonic) in hermite::harmonic_terms(shell.l).iter().enumerate() {
                for term in harmonic {
                    let [t, u, v] = term.powers;
                    e[hermite::index(t, u, v) * rows + m] += factor * term.coefficient;
                }
            }
        }
        Self {
            degree: shell.l,
            rows,
            primitives,
            expansion,
        }
    }

    /// Whether every primitive was left out.
    pub fn is_empty(&self) -> bool {
        self.primitives.is_empty()
    }

    /// The expansion of one primitive: triple × row.
    pub fn block(&self, primitive: usize) -> &[f64] {
        let size = hermite::count(self.degree) * self.rows;
        &self.expansion[primitive * size..][..size]
    }
}

/// Adds factor × S_a S_b in Hermite Gaussians to `e` (triple × row).
fn expand_product(e: &mut [f64], rows: usize, la: usize, lb: usize, factor: f64, axes: &[Axis; 3]) {
    let mut row = 0;
    for right in hermite::harmonic_terms(lb) {
        for left in hermite::harmonic_terms(la) {
            for tb in right {
                for ta in left {
                    let c = factor * ta.coefficient * tb.coefficient;
                    let [ex, ey, ez] =
                        [0, 1, 2].map(|i: usize| &axes[i][ta.powers[i]][tb.powers[i]]);
                    let [dx, dy, dz] = [0, 1, 2].map(|i: usize| ta.powers[i] + tb.powers[i]);
                    for t in 0..=dx {
                        let cx = c * ex[t];
                        for u in 0..=dy {
                            let cxy = cx * ey[u];
                            for v in 0..=dz {
                                e[hermite::index(t, u, v) * rows + row] += cxy * ez[v];
                            }
                        }
                    }
                }
            }
            row += 1;
        }
    }
}

/// Estimate of the largest √(ab|ab) among the rows of one primitive: a Hermite Gaussian of degree
/// d scales as p^{d/2}, and ⟨s|s⟩ repels itself with 2π^{5/2} / (p² √(2p)).
fn self_repulsion(e: &[f64], rows: usize, degree: usize, p: f64) -> f64 {
    let mut largest = 0.0f64;
    let mut start = 0;
    for d in 0..=degree {
        let end = hermite::count(d) * rows;
        let size = e[start..end].iter().fold(0.0f64, |m, x| m.max(x.abs()));
        largest = largest.max(size * p.powf(0.5 * d as f64));
        start = end;
    }
    let pi = std::f64::consts::PI;
    largest * (2.0 * pi.powf(2.5) / (p * p * (2.0 * p).sqrt())).sqrt()
}

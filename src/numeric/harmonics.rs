//! Real solid harmonics as polynomials.
//!
//! S_lm(r) is homogeneous of degree l and harmonic, normalised so that
//! Σ_m S_lm(r)² = (2l + 1)/(4π) · r^{2l}; in other words S_lm is orthonormal on the unit sphere.
//! Signs without the Condon-Shortley phase: S_11 ∝ x, S_10 ∝ z, S_1−1 ∝ y, and for each m > 0
//! S_lm goes with Re (x + iy)^m, S_l−m with Im (x + iy)^m.

use std::sync::LazyLock;

/// Highest degree that is tabulated.
pub const MAX_DEGREE: usize = 5;

/// One term: coefficient × x^i y^j z^k.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Monomial {
    /// Exponents of x, y, z.
    pub powers: [usize; 3],
    /// Factor.
    pub coefficient: f64,
}

static TABLE: LazyLock<Vec<Vec<Vec<Monomial>>>> = LazyLock::new(|| {
    (0..=MAX_DEGREE)
        .map(|l| {
            let l = l as i32;
            (-l..=l).map(|m| expand(l as usize, m)).collect()
        })
        .collect()
});

/// The 2l + 1 harmonics of degree `l`, m from −l to l, each as its nonzero monomials.
///
/// # Panics
/// If `l` exceeds [`MAX_DEGREE`].
pub fn solid_harmonics(l: usize) -> &'static [Vec<Monomial>] {
    &TABLE[l]
}

fn factorial(n: usize) -> f64 {
    (1..=n).map(|i| i as f64).product()
}

fn binomial(n: usize, k: usize) -> f64 {
    factorial(n) / (factorial(k) * factorial(n - k))
}

/// r^l P_l^|m|(cos θ) times Re or Im of (x + iy)^|m|: with
/// Π(z, r²) = Σ_k (−1)^k 2^{−l} C(l,k) C(2l−2k,l) (l−2k)!/(l−2k−m)! r^{2k} z^{l−2k−m}
/// (Varshalovich, Moskalev, Khersonskii, Quantum Theory of Angular Momentum, chapter 5; memory).
fn expand(l: usize, m: i32) -> Vec<Monomial> {
    let am = m.unsigned_abs() as usize;
    let pi = std::f64::consts::PI;
    let fold = if m == 0 { 1.0 } else { 2.0 };
    let norm = (fold * (2 * l + 1) as f64 / (4.0 * pi) * factorial(l - am) / factorial(l + am))
        .sqrt();
    let mut terms: Vec<Monomial> = Vec::new();
    let mut add = |powers: [usize; 3], coefficient: f64| {
        match terms.iter_mut().find(|t| t.powers == powers) {
            Some(term) => term.coefficient += coefficient,
            None => terms.push(Monomial {
                powers,
                coefficient,
            }),
        }
    };
    // (x + iy)^am = Σ_p C(am,p) x^{am−p} (iy)^p: even p real, odd p imaginary.
    let parity = usize::from(m < 0);
    for k in 0..=(l - am) / 2 {
        let sign = if k % 2 == 0 { 1.0 } else { -1.0 };
        let radial = sign * binomial(l, k) * binomial(2 * l - 2 * k, l) * factorial(l - 2 * k)
            / factorial(l - 2 * k - am)
            / 2f64.powi(l as i32);
        for p in (parity..=am).step_by(2) {
            let phase = if (p / 2) % 2 == 0 { 1.0 } else { -1.0 };
            let angular = phase * binomial(am, p);
            // r^{2k} = Σ k!/(a! b! c!) x^{2a} y^{2b} z^{2c}
            for a in 0..=k {
                for b in 0..=k - a {
                    let c = k - a - b;
                    let multinomial = factorial(k) / (factorial(a) * factorial(b) * factorial(c));
                    add(
                        [am - p + 2 * a, p + 2 * b, l - 2 * k - am + 2 * c],
                        norm * radial * angular * multinomial,
                    );
                }
            }
        }
    }
    terms.retain(|t| t.coefficient.abs() > 1e-12);
    terms
}

#[cfg(test)]
mod tests {
    use super::*;

    fn value(l: usize, m: usize, r: [f64; 3]) -> f64 {
        solid_harmonics(l)[m]
            .iter()
            .map(|t| {
                t.coefficient * (0..3).map(|i| r[i].powi(t.powers[i] as i32)).product::<f64>()
            })
            .sum()
    }

    #[test]
    fn squares_add_up_to_the_sphere() {
        let r = [0.3, -0.7, 1.1];
        let r2: f64 = r.iter().map(|x| x * x).sum();
        for l in 0..=MAX_DEGREE {
            let sum: f64 = (0..2 * l + 1).map(|m| value(l, m, r).powi(2)).sum();
            let expected = (2 * l + 1) as f64 / (4.0 * std::f64::consts::PI) * r2.powi(l as i32);
            assert!((sum / expected - 1.0).abs() < 1e-13, "l = {l}");
        }
    }

    #[test]
    fn laplacian_vanishes() {
        for l in 2..=MAX_DEGREE {
            for harmonic in solid_harmonics(l) {
                let mut laplacian = std::collections::BTreeMap::new();
                for t in harmonic {
                    for axis in 0..3 {
                        if t.powers[axis] >= 2 {
                            let mut powers = t.powers;
                            powers[axis] -= 2;
                            let factor = (t.powers[axis] * (t.powers[axis] - 1)) as f64;
                            *laplacian.entry(powers).or_insert(0.0) += factor * t.coefficient;
                        }
                    }
                }
                assert!(laplacian.values().all(|c: &f64| c.abs() < 1e-12));
            }
        }
    }

    #[test]
    fn order_and_signs() {
        let r = [0.2, 0.5, 0.9];
        let s = (3.0 / (4.0 * std::f64::consts::PI)).sqrt();
        for (m, x) in [r[1], r[2], r[0]].into_iter().enumerate() {
            assert!((value(1, m, r) - s * x).abs() < 1e-15);
        }
        // S_22 ∝ x² − y², S_2−2 ∝ xy, both with √(15/4π) (half of it for the first).
        let d = (15.0 / (4.0 * std::f64::consts::PI)).sqrt();
        assert!((value(2, 0, r) - d * r[0] * r[1]).abs() < 1e-14);
        assert!((value(2, 4, r) - d / 2.0 * (r[0] * r[0] - r[1] * r[1])).abs() < 1e-14);
    }
}

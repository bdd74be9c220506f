//! Hermite Gaussians: how the derivatives ∂_x^t ∂_y^u ∂_z^v are numbered, and the recursion that
//! makes their Coulomb integrals.
//!
//! Triples (t, u, v) are stored by rising degree t + u + v; within a degree t falls first, then u.
//! The triples up to degree d therefore form a prefix of the list of any higher degree.

use crate::basis::MAX_AUXILIARY_L;
use crate::basis::harmonics::{cartesian_powers, solid_harmonics};
use crate::numeric::boys::MAX_ORDER;
use std::sync::LazyLock;

/// Highest degree that the tables hold.
pub const MAX_DEGREE: usize = MAX_ORDER;

/// Number of triples with t + u + v ≤ `degree`.
pub const fn count(degree: usize) -> usize {
    (degree + 1) * (degree + 2) * (degree + 3) / 6
}

/// Position of a triple.
pub const fn index(t: usize, u: usize, v: usize) -> usize {
    let degree = t + u + v;
    let rest = degree - t;
    let below = if degree == 0 { 0 } else { count(degree - 1) };
    below + rest * (rest + 1) / 2 + v
}

/// Room for all triples up to [`MAX_DEGREE`], rounded up to a power of two.
pub const ROOM: usize = 1024;

/// One step of R^{(n)}_{…t+1…} = x·R^{(n+1)}_{…t…} + t·R^{(n+1)}_{…t−1…} (McMurchie and Davidson,
/// J. Comput. Phys. 26, 218, 1978).
#[derive(Debug, Clone, Copy)]
pub struct Step {
    /// Along which axis.
    pub axis: usize,
    /// Position of …t….
    pub lower: u16,
    /// Position of …t−1… (0 when t = 0).
    pub lowest: u16,
    /// t.
    pub factor: f64,
}

/// The step that makes each triple; entry 0 is never used.
pub static STEPS: LazyLock<Vec<Step>> = LazyLock::new(|| {
    triples(MAX_DEGREE)
        .map(|triple| {
            // The axis with the smallest exponent saves the second term where it is 1.
            let Some(axis) = (0..3).filter(|&i| triple[i] > 0).min_by_key(|&i| triple[i]) else {
                return Step {
                    axis: 0,
                    lower: 0,
                    lowest: 0,
                    factor: 0.0,
                };
            };
            let down = |by: usize| {
                let mut lower = triple;
                lower[axis] -= by;
                index(lower[0], lower[1], lower[2]) as u16
            };
            let factor = triple[axis] - 1;
            Step {
                axis,
                lower: down(1),
                lowest: if factor == 0 { 0 } else { down(2) },
                factor: factor as f64,
            }
        })
        .collect()
});

/// All triples up to a degree, in order.
pub fn triples(degree: usize) -> impl Iterator<Item = [usize; 3]> {
    (0..=degree).flat_map(|d| {
        (0..=d)
            .rev()
            .flat_map(move |t| (0..=d - t).rev().map(move |u| [t, u, d - t - u]))
    })
}

/// One term of a solid harmonic: coefficient × x^i y^j z^k.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Term {
    /// i, j, k.
    pub powers: [usize; 3],
    /// Factor.
    pub coefficient: f64,
}

static HARMONICS: LazyLock<Vec<Vec<Vec<Term>>>> = LazyLock::new(|| {
    let terms = |row: nalgebra::DVector<f64>, l: usize| {
        cartesian_powers(l)
            .into_iter()
            .zip(row.iter().copied())
            .filter(|(_, coefficient)| *coefficient != 0.0)
            .map(|(powers, coefficient)| Term {
                powers,
                coefficient,
            })
            .collect()
    };
    (0..=MAX_AUXILIARY_L)
        .map(|l| {
            let matrix = solid_harmonics(l);
            matrix
                .row_iter()
                .map(|row| terms(row.transpose(), l))
                .collect()
        })
        .collect()
});

/// The nonzero terms of the solid harmonics of degree `l`, m from −l to l.
///
/// # Panics
/// If `l` exceeds [`MAX_AUXILIARY_L`].
pub fn harmonic_terms(l: usize) -> &'static [Vec<Term>] {
    &HARMONICS[l]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbering_is_without_gaps() {
        for (i, [t, u, v]) in triples(MAX_DEGREE).enumerate() {
            assert_eq!(index(t, u, v), i);
        }
        assert_eq!(triples(MAX_DEGREE).count(), count(MAX_DEGREE));
        assert!(count(MAX_DEGREE) <= ROOM);
    }
}

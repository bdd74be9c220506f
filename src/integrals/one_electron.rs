//! Overlap, kinetic energy, dipole and nuclear attraction.
//!
//! With a product of shells in Hermite Gaussians only the terms of degree 0, 1 and 2 have nonzero
//! moments: ∫Λ_000 = (π/p)^{3/2}, ∫x Λ_000 = P_x (π/p)^{3/2}, ∫x Λ_100 = (π/p)^{3/2}, and so on
//! (Helgaker, Jørgensen, Olsen, Molecular Electronic-Structure Theory, section 9.5; memory).

use super::distribution::{Distribution, Primitive};
use super::hermite;
use super::kernel::{self, Scratch};
use super::targets::Targets;
use crate::basis::{Basis, Shell};
use crate::numeric::lanes::Eight;
use nalgebra::{DMatrix, Vector3};
use rayon::prelude::*;

/// Primitive products with a smaller self-repulsion estimate (hartree^½) are left out.
const NEGLIGIBLE: f64 = 1e-18;

/// Overlap ⟨μ|ν⟩.
pub fn overlap(basis: &Basis) -> DMatrix<f64> {
    moments(basis, |m, _, _| m.zero)
}

/// Kinetic energy ⟨μ|−½∇²|ν⟩, hartree.
///
/// For a solid-harmonic Gaussian −½∇² χ = [β(2l + 3) − 2β²|r − B|²] χ, so this too is a moment.
pub fn kinetic(basis: &Basis) -> DMatrix<f64> {
    moments(basis, |m, primitive, b| {
        let beta = primitive.second_exponent;
        let square = m.square(primitive.centre - b.centre_bohr);
        beta * ((2 * b.l + 3) as f64 * m.zero - 2.0 * beta * square)
    })
}

/// Position ⟨μ|r − origin|ν⟩ along x, y and z, bohr. The electronic dipole moment is minus its
/// trace with the density.
pub fn dipole(basis: &Basis, origin: Vector3<f64>) -> [DMatrix<f64>; 3] {
    [0, 1, 2].map(|axis| {
        moments(basis, |m, primitive, _| {
            (primitive.centre - origin)[axis] * m.zero + m.first[axis]
        })
    })
}

/// Attraction to point charges, ⟨μ| Σ_C −Z_C/|r − C| |ν⟩, hartree; `charges` are Z (elementary
/// charges) with their positions (bohr).
pub fn nuclear_attraction(basis: &Basis, charges: &[(f64, Vector3<f64>)]) -> DMatrix<f64> {
    let electrons: Vec<_> = charges.iter().map(|&(z, centre)| (-z, centre)).collect();
    let targets = Targets::of_charges(&electrons);
    symmetric_by_pairs(
        basis,
        |pair, _, scratch: &mut (Scratch, Vec<Eight>), out| {
            let (scratch, raw) = scratch;
            let size = pair.rows * targets.width;
            if raw.len() < size {
                raw.resize(size, Eight::ZERO);
            }
            kernel::coulomb(pair, &targets, scratch, raw);
            for (row, value) in raw.chunks_exact(targets.width).zip(out) {
                targets.gather(row, std::slice::from_mut(value));
            }
        },
    )
}

/// Integrals of 1, r − P and |r − P|² over one row of one primitive.
struct Moments {
    zero: f64,
    first: [f64; 3],
    second: f64,
}

impl Moments {
    /// Integral of |r − B|² when P − B = `shift`.
    fn square(&self, shift: Vector3<f64>) -> f64 {
        let cross: f64 = (0..3).map(|i| shift[i] * self.first[i]).sum();
        self.second + 2.0 * cross + shift.norm_squared() * self.zero
    }
}

fn moments(
    basis: &Basis,
    combine: impl Fn(&Moments, &Primitive, &Shell) -> f64 + Sync,
) -> DMatrix<f64> {
    symmetric_by_pairs(basis, |pair, b, _: &mut (), out| {
        out.fill(0.0);
        for (k, primitive) in pair.primitives.iter().enumerate() {
            let e = pair.block(k);
            let volume = (std::f64::consts::PI / primitive.exponent).powf(1.5);
            for (row, out) in out.iter_mut().enumerate() {
                let at = |t, u, v| {
                    if t + u + v <= pair.degree {
                        volume * e[hermite::index(t, u, v) * pair.rows + row]
                    } else {
                        0.0
                    }
                };
                let zero = at(0, 0, 0);
                let curvature = at(2, 0, 0) + at(0, 2, 0) + at(0, 0, 2);
                let m = Moments {
                    zero,
                    first: [at(1, 0, 0), at(0, 1, 0), at(0, 0, 1)],
                    second: 1.5 / primitive.exponent * zero + 2.0 * curvature,
                };
                *out += combine(&m, primitive, b);
            }
        }
    })
}

/// Fills a symmetric matrix shell pair by shell pair. `fill` gets the pair's distribution, its
/// second shell, the thread's scratch, and the block to fill (first shell running fast).
fn symmetric_by_pairs<T: Default>(
    basis: &Basis,
    fill: impl Fn(&Distribution, &Shell, &mut T, &mut [f64]) + Sync,
) -> DMatrix<f64> {
    let shells = &basis.shells;
    let columns: Vec<Vec<f64>> = (0..shells.len())
        .into_par_iter()
        .map_init(
            || (Distribution::default(), T::default()),
            |(pair, scratch), j| {
                let b = &shells[j];
                let below = basis.functions - b.first;
                let mut column = vec![0.0; below * b.len()];
                let mut start = 0;
                for a in &shells[j..] {
                    let size = a.len() * b.len();
                    pair.set_pair(a, b, NEGLIGIBLE);
                    fill(pair, b, scratch, &mut column[start..start + size]);
                    start += size;
                }
                column
            },
        )
        .collect();
    let mut out = DMatrix::zeros(basis.functions, basis.functions);
    for (j, column) in columns.iter().enumerate() {
        let b = &shells[j];
        let mut values = column.iter();
        for a in &shells[j..] {
            for nu in b.first..b.first + b.len() {
                for mu in a.first..a.first + a.len() {
                    let value = *values.next().expect("one value per pair of functions");
                    // Within a diagonal block the later of the two twins wins: exact symmetry.
                    out[(mu, nu)] = value;
                    out[(nu, mu)] = value;
                }
            }
        }
    }
    out
}

//! Coulomb and exchange matrices from fitted pairs of functions: the one Fock builder.
//!
//! With the half-transformed X^Q_μi = Σ_ν B^Q_μν C_νi of a channel whose density is C·Cᵀ:
//! K_μν = Σ_Qi X^Q_μi X^Q_νi, γ_Q = Σ_μi X^Q_μi C_μi = Σ_μν B^Q_μν D_μν, J_μν = Σ_Q γ_Q B^Q_μν.
//!
//! Auxiliary functions come in chunks. The chunks are dealt out to a number of groups that depends
//! on the size of the problem alone; every group sums its own share, and the shares are added in
//! order. So the result is the same to the last bit for any number of threads.

use crate::integrals::FittedPairs;
use crate::integrals::fitted::CHUNK;
use crate::numeric::linalg::product_sequential;
use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, MatMut, MatRef, Par};
use nalgebra::DMatrix;
use rayon::prelude::*;

/// Most groups that a build is divided into.
const GROUPS: usize = 32;
/// Bytes that the shares of all groups may take together (the number of groups falls above).
const SHARES: usize = 1 << 29;

/// What electron repulsion adds to the one-electron Hamiltonian.
#[derive(Debug, Clone)]
pub struct TwoElectron {
    /// J of the total density.
    pub coulomb: DMatrix<f64>,
    /// K of each spin channel.
    pub exchange: Vec<DMatrix<f64>>,
}

/// Sums of one group of chunks.
struct Share {
    coulomb: Vec<f64>,
    exchange: Vec<DMatrix<f64>>,
}

/// Builds J and K. A channel's orbitals are weighted so that its density is C·Cᵀ; the total
/// density is the sum over channels, times `weight` (2 when one channel stands for both spins).
pub fn two_electron(pairs: &FittedPairs, channels: &[DMatrix<f64>], weight: f64) -> TwoElectron {
    let n = pairs.functions();
    let chunks = pairs.chunks();
    let groups = group_count(pairs, channels.len());
    let shares: Vec<Share> = (0..groups)
        .into_par_iter()
        .map(|g| {
            let range = g * chunks / groups..(g + 1) * chunks / groups;
            share(pairs, channels, weight, range)
        })
        .collect();
    let mut coulomb = vec![0.0; pairs.packed_len()];
    let mut exchange = vec![DMatrix::zeros(n, n); channels.len()];
    for share in &shares {
        for (sum, part) in coulomb.iter_mut().zip(&share.coulomb) {
            *sum += part;
        }
        for (sum, part) in exchange.iter_mut().zip(&share.exchange) {
            *sum += part;
        }
    }
    for k in &mut exchange {
        k.fill_upper_triangle_with_lower_triangle();
    }
    TwoElectron {
        coulomb: pairs.unpack(&coulomb),
        exchange,
    }
}

/// Bytes that a build takes besides the fitted pairs, on `threads` threads, for channels with
/// `orbitals` orbitals each.
pub fn bytes(functions: usize, orbitals: usize, channels: usize, threads: usize) -> u64 {
    let share = share_bytes(functions * (functions + CHUNK) / 2, functions, channels);
    let halves = 8 * CHUNK * orbitals * functions * channels * threads;
    ((share * GROUPS).min(SHARES.max(share)) + halves) as u64
}

fn share_bytes(packed: usize, functions: usize, channels: usize) -> usize {
    8 * (packed + channels * functions * functions)
}

fn group_count(pairs: &FittedPairs, channels: usize) -> usize {
    let share = share_bytes(pairs.packed_len(), pairs.functions(), channels);
    let fit = SHARES / share.max(1);
    GROUPS.min(fit).min(pairs.chunks()).max(1)
}

fn share(
    pairs: &FittedPairs,
    channels: &[DMatrix<f64>],
    weight: f64,
    range: std::ops::Range<usize>,
) -> Share {
    let n = pairs.functions();
    let mut out = Share {
        coulomb: vec![0.0; pairs.packed_len()],
        exchange: vec![DMatrix::zeros(n, n); channels.len()],
    };
    let mut half = Vec::new();
    for chunk in range {
        let width = pairs.chunk(chunk).len();
        let mut charges = vec![0.0; width];
        for (c, k) in channels.iter().zip(&mut out.exchange) {
            let rows = width * c.ncols();
            half.resize(rows * n, 0.0);
            pairs.half_transform(chunk, c, &mut half);
            // As a matrix: (i, Q) × μ.
            let x = MatRef::from_column_major_slice(&half, rows, n);
            triangular::matmul(
                MatMut::from_column_major_slice_mut(k.as_mut_slice(), n, n),
                BlockStructure::TriangularLower,
                Accum::Add,
                x.transpose(),
                BlockStructure::Rectangular,
                x,
                BlockStructure::Rectangular,
                1.0,
                Par::Seq,
            );
            // As a matrix: Q × (μ, i), against C_μi in the same order.
            let coefficients = c.transpose();
            product_sequential(
                MatMut::from_column_major_slice_mut(&mut charges, width, 1),
                true,
                MatRef::from_column_major_slice(&half, width, c.len()),
                MatRef::from_column_major_slice(coefficients.as_slice(), c.len(), 1),
            );
        }
        for charge in &mut charges {
            *charge *= weight;
        }
        pairs.add_potential(chunk, &charges, &mut out.coulomb);
    }
    out
}

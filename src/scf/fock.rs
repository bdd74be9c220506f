//! Coulomb and exchange matrices from fitted pairs of functions: the one Fock builder.
//!
//! J_μν = Σ_Q B^Q_μν Σ_λσ B^Q_λσ D_λσ and K_μν = Σ_Q Σ_i X^Q_μi X^Q_νi with the half-transformed
//! X^Q_μi = Σ_ν B^Q_μν C_νi. Each B^Q is read from memory once per build and serves both.
//!
//! The auxiliary functions are dealt out to a number of groups that depends on the size of the
//! problem alone; every group sums its own share, and the shares are added in order. So the result
//! is the same to the last bit for any number of threads.

use crate::integrals::FittedPairs;
use crate::numeric::linalg::{product_sequential, view};
use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, MatMut, MatRef, Par};
use nalgebra::{DMatrix, DVectorView};
use rayon::prelude::*;

/// Most groups that a build is divided into.
const GROUPS: usize = 32;
/// Bytes that the shares of all groups may take together (the number of groups falls above).
const SHARES: usize = 1 << 29;
/// Bytes of half-transformed vectors that a group collects before it contracts them.
const BATCH: usize = 1 << 20;

/// What electron repulsion adds to the one-electron Hamiltonian.
#[derive(Debug, Clone)]
pub struct TwoElectron {
    /// J of the total density.
    pub coulomb: DMatrix<f64>,
    /// K of each spin channel.
    pub exchange: Vec<DMatrix<f64>>,
}

/// Sums of one group of auxiliary functions.
struct Share {
    coulomb: Vec<f64>,
    exchange: Vec<DMatrix<f64>>,
}

/// Builds J from the total density and K from each channel's orbitals, weighted so that the
/// channel's density is C·Cᵀ.
pub fn two_electron(
    pairs: &FittedPairs,
    total_density: &DMatrix<f64>,
    channels: &[DMatrix<f64>],
) -> TwoElectron {
    let n = pairs.functions();
    let weighted = pairs.pack_weighted(total_density);
    let groups = group_count(pairs, channels.len());
    let auxiliaries = pairs.auxiliaries();
    let shares: Vec<Share> = (0..groups)
        .into_par_iter()
        .map(|g| {
            let range = g * auxiliaries / groups..(g + 1) * auxiliaries / groups;
            share(pairs, &weighted, channels, range)
        })
        .collect();
    let mut coulomb = vec![0.0; pairs.rows()];
    let mut exchange = vec![DMatrix::zeros(n, n); channels.len()];
    for share in &shares {
        add(&mut coulomb, &share.coulomb);
        for (sum, part) in exchange.iter_mut().zip(&share.exchange) {
            *sum += part;
        }
    }
    let mut matrix = DMatrix::zeros(n, n);
    pairs.unpack(&coulomb, matrix.as_mut_slice());
    for k in &mut exchange {
        k.fill_upper_triangle_with_lower_triangle();
    }
    TwoElectron {
        coulomb: matrix,
        exchange,
    }
}

/// Bytes that a build takes besides the fitted pairs.
pub fn bytes(functions: usize, channels: usize) -> u64 {
    let share = share_bytes(functions * (functions + 1) / 2, functions, channels);
    (share * GROUPS).min(SHARES.max(share)) as u64
}

fn share_bytes(rows: usize, functions: usize, channels: usize) -> usize {
    8 * (rows + channels * functions * functions)
}

fn group_count(pairs: &FittedPairs, channels: usize) -> usize {
    let share = share_bytes(pairs.rows(), pairs.functions(), channels);
    GROUPS
        .min(SHARES / share.max(1))
        .min(pairs.auxiliaries())
        .max(1)
}

fn share(
    pairs: &FittedPairs,
    weighted: &[f64],
    channels: &[DMatrix<f64>],
    range: std::ops::Range<usize>,
) -> Share {
    let n = pairs.functions();
    let mut out = Share {
        coulomb: vec![0.0; pairs.rows()],
        exchange: vec![DMatrix::zeros(n, n); channels.len()],
    };
    let widest = channels.iter().map(DMatrix::ncols).max().unwrap_or(0);
    let at_once = (BATCH / (8 * n * widest).max(1)).max(1);
    let mut halves: Vec<Vec<f64>> = channels
        .iter()
        .map(|c| vec![0.0; n * c.ncols() * at_once.min(range.len())])
        .collect();
    let mut packed = vec![0.0; pairs.rows()];
    let mut full = vec![0.0; n * n];
    let mut batch_start = range.start;
    while batch_start < range.end {
        let batch = batch_start..(batch_start + at_once).min(range.end);
        for q in batch.clone() {
            pairs.read(q, &mut packed);
            let charge = dot(&packed, weighted);
            add_scaled(&mut out.coulomb, charge, &packed);
            pairs.unpack(&packed, &mut full);
            let matrix = MatRef::from_column_major_slice(&full, n, n);
            for (c, half) in channels.iter().zip(&mut halves) {
                let size = n * c.ncols();
                let slot = &mut half[(q - batch.start) * size..][..size];
                let slot = MatMut::from_column_major_slice_mut(slot, n, c.ncols());
                product_sequential(slot, false, matrix, view(c));
            }
        }
        for ((c, half), k) in channels.iter().zip(&halves).zip(&mut out.exchange) {
            let columns = c.ncols() * batch.len();
            let half = MatRef::from_column_major_slice(&half[..n * columns], n, columns);
            triangular::matmul(
                MatMut::from_column_major_slice_mut(k.as_mut_slice(), n, n),
                BlockStructure::TriangularLower,
                Accum::Add,
                half,
                BlockStructure::Rectangular,
                half.transpose(),
                BlockStructure::Rectangular,
                1.0,
                Par::Seq,
            );
        }
        batch_start = batch.end;
    }
    out
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    DVectorView::from_slice(a, a.len()).dot(&DVectorView::from_slice(b, b.len()))
}

fn add(sum: &mut [f64], part: &[f64]) {
    for (s, p) in sum.iter_mut().zip(part) {
        *s += p;
    }
}

fn add_scaled(sum: &mut [f64], factor: f64, part: &[f64]) {
    for (s, p) in sum.iter_mut().zip(part) {
        *s += factor * p;
    }
}

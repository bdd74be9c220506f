//! Products of basis functions, fitted in the Coulomb metric and kept in memory.
//!
//! (μν|λσ) ≈ Σ_PQ (μν|P) (P|Q)⁻¹ (Q|λσ) = Σ_Q B^Q_μν B^Q_λσ with B = L⁻¹ (P|μν) and
//! (P|Q) = L·Lᵀ (Vahtras, Almlöf, Feyereisen, Chem. Phys. Lett. 213, 514, 1993; memory).
//!
//! Only one triangle of μν is kept, grouped by pairs of shells, and pairs that do not overlap are
//! left out. The rows are cut into tiles of a few hundred; one thread makes the integrals of a
//! tile, solves for B while they are in cache, and stores it with the rows running fast, so that
//! B^Q for one Q is read in long runs.

use super::coulomb::{Workspace, coulomb_metric};
use super::targets::Targets;
use super::{IntegralError, check_auxiliary, check_orbital};
use crate::basis::Basis;
use crate::numeric::linalg::{cholesky, solve_lower, view};
use faer::MatMut;
use nalgebra::DMatrix;
use rayon::prelude::*;

/// Primitive products with a smaller self-repulsion estimate (hartree^½) are left out.
const NEGLIGIBLE: f64 = 1e-13;
/// Rows after which a tile is closed.
const TILE_ROWS: usize = 256;

/// The rows of one pair of shells, functions of the first running fast.
#[derive(Debug, Clone, Copy)]
struct PairBlock {
    a: (usize, usize),
    b: (usize, usize),
    /// First row within the tile.
    row: usize,
}

#[derive(Debug, Clone)]
struct Tile {
    blocks: Vec<PairBlock>,
    rows: usize,
    /// Rows × auxiliary functions, rows running fast.
    values: Vec<f64>,
}

/// B^Q_μν for all pairs of basis functions and all fitted auxiliary functions.
#[derive(Debug, Clone)]
pub struct FittedPairs {
    functions: usize,
    auxiliaries: usize,
    rows: usize,
    tiles: Vec<Tile>,
}

impl FittedPairs {
    /// Bytes that the fitted pairs of `functions` basis and `auxiliaries` auxiliary functions take
    /// at most.
    pub fn bytes(functions: usize, auxiliaries: usize) -> u64 {
        // Blocks of a shell with itself are stored whole: 3 % more at most in practice.
        let rows = functions as u64 * (functions as u64 + 8) / 2;
        8 * rows * auxiliaries as u64
    }

    /// Makes and fits the three-centre integrals.
    ///
    /// # Errors
    /// If a shell has too high an angular momentum or the auxiliary functions are dependent.
    pub fn new(basis: &Basis, auxiliary: &Basis) -> Result<Self, IntegralError> {
        check_orbital(basis)?;
        check_auxiliary(auxiliary)?;
        let lower =
            cholesky(coulomb_metric(auxiliary)).map_err(|source| IntegralError::Metric {
                basis: auxiliary.name.clone(),
                source,
            })?;
        let targets = Targets::of_shells(&auxiliary.shells);
        let tiles: Vec<Tile> = batches(basis)
            .into_par_iter()
            .map_init(
                || (Workspace::default(), Vec::new()),
                |(work, integrals), batch| {
                    fitted_tile(basis, &batch, &targets, &lower, work, integrals)
                },
            )
            .collect();
        Ok(Self {
            functions: basis.functions,
            auxiliaries: auxiliary.functions,
            rows: tiles.iter().map(|t| t.rows).sum(),
            tiles,
        })
    }

    /// Number of basis functions.
    pub fn functions(&self) -> usize {
        self.functions
    }

    /// Number of auxiliary functions.
    pub fn auxiliaries(&self) -> usize {
        self.auxiliaries
    }

    /// Number of pairs of functions kept (length of a packed vector).
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// Copies B^Q for one Q as a packed vector.
    ///
    /// # Panics
    /// If `q` or the length of `out` is out of range.
    pub fn read(&self, q: usize, out: &mut [f64]) {
        assert_eq!(out.len(), self.rows, "length of a packed vector");
        let mut rest = out;
        for tile in &self.tiles {
            let (now, later) = rest.split_at_mut(tile.rows);
            now.copy_from_slice(&tile.values[q * tile.rows..][..tile.rows]);
            rest = later;
        }
    }

    /// Packs a symmetric matrix so that the scalar product with B^Q is Σ_μν B^Q_μν M_μν.
    pub fn pack_weighted(&self, matrix: &DMatrix<f64>) -> Vec<f64> {
        let mut out = Vec::with_capacity(self.rows);
        self.each_block(|block, _| {
            let weight = if block.a.0 == block.b.0 { 1.0 } else { 2.0 };
            for nu in block.b.0..block.b.1 {
                for mu in block.a.0..block.a.1 {
                    out.push(weight * matrix[(mu, nu)]);
                }
            }
        });
        out
    }

    /// Spreads a packed vector out to the full symmetric matrix (column-major, functions²). Pairs
    /// that were left out are not touched, so the matrix must start as zeros.
    pub fn unpack(&self, packed: &[f64], matrix: &mut [f64]) {
        let n = self.functions;
        self.each_block(|block, start| {
            let (first, end) = block.a;
            let width = end - first;
            let mut at = start;
            for nu in block.b.0..block.b.1 {
                let run = &packed[at..at + width];
                matrix[nu * n + first..nu * n + end].copy_from_slice(run);
                at += width;
            }
            if block.a.0 != block.b.0 {
                let height = block.b.1 - block.b.0;
                for mu in 0..width {
                    let column = &mut matrix[(first + mu) * n + block.b.0..][..height];
                    for (i, value) in column.iter_mut().enumerate() {
                        *value = packed[start + i * width + mu];
                    }
                }
            }
        });
    }

    /// Calls `f` with every block and its first row in a packed vector.
    fn each_block(&self, mut f: impl FnMut(&PairBlock, usize)) {
        let mut first = 0;
        for tile in &self.tiles {
            for block in &tile.blocks {
                f(block, first + block.row);
            }
            first += tile.rows;
        }
    }
}

/// All pairs of shells (first ≥ second), cut where a tile is full.
fn batches(basis: &Basis) -> Vec<Vec<(usize, usize)>> {
    let mut batches = vec![Vec::new()];
    let mut rows = 0;
    for (i, a) in basis.shells.iter().enumerate() {
        for (j, b) in basis.shells[..=i].iter().enumerate() {
            if rows >= TILE_ROWS {
                batches.push(Vec::new());
                rows = 0;
            }
            rows += a.len() * b.len();
            let last = batches.len() - 1;
            batches[last].push((i, j));
        }
    }
    batches
}

fn fitted_tile(
    basis: &Basis,
    batch: &[(usize, usize)],
    targets: &Targets,
    lower: &DMatrix<f64>,
    work: &mut Workspace,
    integrals: &mut Vec<f64>,
) -> Tile {
    integrals.clear();
    let mut blocks = Vec::new();
    let mut rows = 0;
    for &(i, j) in batch {
        let (a, b) = (&basis.shells[i], &basis.shells[j]);
        if work.push_pair(a, b, NEGLIGIBLE, targets, integrals) {
            blocks.push(PairBlock {
                a: (a.first, a.first + a.len()),
                b: (b.first, b.first + b.len()),
                row: rows,
            });
            rows += a.len() * b.len();
        }
    }
    let n = targets.len;
    let mut values = vec![0.0; rows * n];
    if rows > 0 {
        let right = MatMut::from_column_major_slice_mut(&mut integrals[..], n, rows);
        solve_lower(view(lower), right);
        transpose(integrals, n, &mut values);
    }
    Tile {
        blocks,
        rows,
        values,
    }
}

/// Transposes a column-major matrix with `height` rows, in blocks that fit a few cache lines.
fn transpose(from: &[f64], height: usize, to: &mut [f64]) {
    const SIDE: usize = 16;
    let width = from.len() / height;
    for i0 in (0..height).step_by(SIDE) {
        for j0 in (0..width).step_by(SIDE) {
            for i in i0..(i0 + SIDE).min(height) {
                for j in j0..(j0 + SIDE).min(width) {
                    to[i * width + j] = from[j * height + i];
                }
            }
        }
    }
}

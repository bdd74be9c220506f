//! Products of basis functions, fitted in the Coulomb metric and kept in memory.
//!
//! (μν|λσ) ≈ Σ_PQ (μν|P) (P|Q)⁻¹ (Q|λσ) = Σ_Q B^Q_μν B^Q_λσ with B = L⁻¹ (P|μν) and
//! (P|Q) = L·Lᵀ (Vahtras, Almlöf, Feyereisen, Chem. Phys. Lett. 213, 514, 1993; memory).
//!
//! # Storage
//! The basis is cut into groups of whole shells. Of the square of groups only the lower triangle of
//! blocks is kept, and blocks whose functions nowhere overlap are left out; blocks on the diagonal
//! are whole. Within a block the auxiliary functions are cut into chunks of [`CHUNK`]; a chunk is
//! laid out `[ν][μ][Q]` with Q running fast. So a half transformation needs no unpacking: for one
//! μ (or one ν) the block is a matrix with Q along its columns, whatever the triangle. Whatever is
//! summed over Q is done chunk by chunk, which bounds the memory and fixes the order of the sums.

use super::coulomb::{Workspace, coulomb_metric};
use super::targets::Targets;
use super::{IntegralError, check_auxiliary, check_orbital};
use crate::basis::{Basis, Shell};
use crate::numeric::linalg::{cholesky, product_sequential, solve_lower, view};
use faer::{MatMut, MatRef};
use nalgebra::DMatrix;
use rayon::prelude::*;
use std::ops::Range;

/// Primitive products with a smaller self-repulsion estimate (hartree^½) are left out.
const NEGLIGIBLE: f64 = 1e-13;
/// Functions after which a group of shells is closed.
const GROUP: usize = 32;
/// Auxiliary functions of one chunk.
pub const CHUNK: usize = 48;

/// B^Q_μν for μ in one group and ν in one group that is not later.
#[derive(Debug, Clone)]
struct Block {
    mu: Range<usize>,
    nu: Range<usize>,
    /// Chunk by chunk `[ν][μ][Q]`.
    values: Vec<f64>,
}

impl Block {
    fn pairs(&self) -> usize {
        self.mu.len() * self.nu.len()
    }

    fn diagonal(&self) -> bool {
        self.mu.start == self.nu.start
    }

    fn chunk(&self, q: &Range<usize>) -> &[f64] {
        &self.values[q.start * self.pairs()..q.end * self.pairs()]
    }
}

/// B^Q_μν for all pairs of basis functions and all fitted auxiliary functions.
#[derive(Debug, Clone)]
pub struct FittedPairs {
    functions: usize,
    auxiliaries: usize,
    blocks: Vec<Block>,
}

impl FittedPairs {
    /// Bytes that the fitted pairs of `functions` basis and `auxiliaries` auxiliary functions take
    /// at most.
    pub fn bytes(functions: usize, auxiliaries: usize) -> u64 {
        let pairs = functions as u64 * (functions + GROUP) as u64 / 2;
        8 * pairs * auxiliaries as u64
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
        let groups = groups(&basis.shells);
        // The largest blocks come first, so that the threads finish together.
        let mut places: Vec<(usize, usize)> = (0..groups.len())
            .flat_map(|i| (0..=i).map(move |j| (i, j)))
            .collect();
        places.reverse();
        let blocks = places
            .into_par_iter()
            .map_init(Builder::default, |builder, (i, j)| {
                builder.block(groups[i], groups[j], &targets, &lower)
            })
            .flatten()
            .collect();
        Ok(Self {
            functions: basis.functions,
            auxiliaries: auxiliary.functions,
            blocks,
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

    /// Number of chunks.
    pub fn chunks(&self) -> usize {
        self.auxiliaries.div_ceil(CHUNK)
    }

    /// The auxiliary functions of a chunk.
    pub fn chunk(&self, index: usize) -> Range<usize> {
        let start = index * CHUNK;
        start..(start + CHUNK).min(self.auxiliaries)
    }

    /// Length of a packed vector: one number per stored pair of functions.
    pub fn packed_len(&self) -> usize {
        self.blocks.iter().map(Block::pairs).sum()
    }

    /// X^Q_μi = Σ_ν B^Q_μν C_νi for one chunk, laid out `[μ][i][Q]`: the columns of
    /// `coefficients` are i, and `out` has chunk × columns × functions elements.
    ///
    /// # Panics
    /// If a size does not fit.
    pub fn half_transform(&self, chunk: usize, coefficients: &DMatrix<f64>, out: &mut [f64]) {
        let q = self.chunk(chunk);
        let width = coefficients.ncols();
        assert_eq!(
            coefficients.nrows(),
            self.functions,
            "rows of the coefficients"
        );
        assert_eq!(
            out.len(),
            q.len() * width * self.functions,
            "size of the result"
        );
        out.fill(0.0);
        if width == 0 {
            return;
        }
        let slab = q.len() * width;
        let c = view(coefficients);
        for block in &self.blocks {
            let values = block.chunk(&q);
            let (tall, wide) = (block.mu.len(), block.nu.len());
            for mu in 0..tall {
                // Columns are ν.
                let b = MatRef::from_column_major_slice_with_stride(
                    &values[mu * q.len()..],
                    q.len(),
                    wide,
                    tall * q.len(),
                );
                let target = &mut out[(block.mu.start + mu) * slab..][..slab];
                let target = MatMut::from_column_major_slice_mut(target, q.len(), width);
                product_sequential(target, true, b, c.subrows(block.nu.start, wide));
            }
            if block.diagonal() {
                continue;
            }
            for nu in 0..wide {
                // Columns are μ.
                let b = &values[nu * tall * q.len()..][..tall * q.len()];
                let b = MatRef::from_column_major_slice(b, q.len(), tall);
                let target = &mut out[(block.nu.start + nu) * slab..][..slab];
                let target = MatMut::from_column_major_slice_mut(target, q.len(), width);
                product_sequential(target, true, b, c.subrows(block.mu.start, tall));
            }
        }
    }

    /// Adds Σ_Q weights_Q B^Q_μν, Q in one chunk, to a packed vector.
    ///
    /// # Panics
    /// If a size does not fit.
    pub fn add_potential(&self, chunk: usize, weights: &[f64], packed: &mut [f64]) {
        let q = self.chunk(chunk);
        let weights = MatRef::from_column_major_slice(weights, q.len(), 1);
        let mut rest = packed;
        for block in &self.blocks {
            let (now, later) = rest.split_at_mut(block.pairs());
            let b = MatRef::from_column_major_slice(block.chunk(&q), q.len(), block.pairs());
            let target = MatMut::from_column_major_slice_mut(now, block.pairs(), 1);
            product_sequential(target, true, b.transpose(), weights);
            rest = later;
        }
    }

    /// The symmetric matrix of a packed vector.
    pub fn unpack(&self, packed: &[f64]) -> DMatrix<f64> {
        let mut matrix = DMatrix::zeros(self.functions, self.functions);
        let mut values = packed.iter();
        for block in &self.blocks {
            for nu in block.nu.clone() {
                for mu in block.mu.clone() {
                    let value = *values.next().expect("a packed vector of these pairs");
                    matrix[(mu, nu)] = value;
                    matrix[(nu, mu)] = value;
                }
            }
        }
        matrix
    }
}

/// Cuts shells into runs of about [`GROUP`] functions.
fn groups(shells: &[Shell]) -> Vec<&[Shell]> {
    let mut groups = Vec::new();
    let mut rest = shells;
    while !rest.is_empty() {
        let mut functions = 0;
        let fits = |shell: &&Shell| {
            functions += shell.len();
            functions <= GROUP
        };
        let (now, later) = rest.split_at(rest.iter().take_while(fits).count().max(1));
        groups.push(now);
        rest = later;
    }
    groups
}

fn functions_of(group: &[Shell]) -> Range<usize> {
    let last = &group[group.len() - 1];
    group[0].first..last.first + last.len()
}

/// What one thread needs to make blocks.
#[derive(Default)]
struct Builder {
    work: Workspace,
    integrals: Vec<f64>,
    /// Where in the block each row of `integrals` belongs: (μ, ν).
    places: Vec<(usize, usize)>,
}

impl Builder {
    /// Integrals and fit of one block; `None` if the groups do not overlap.
    fn block(
        &mut self,
        left: &[Shell],
        right: &[Shell],
        targets: &Targets,
        lower: &DMatrix<f64>,
    ) -> Option<Block> {
        let (mu, nu) = (functions_of(left), functions_of(right));
        let mut block = Block {
            values: Vec::new(),
            mu,
            nu,
        };
        for b in right {
            self.integrals.clear();
            self.places.clear();
            // On the diagonal only one of (ab) and (ba) is computed.
            for a in left.iter().filter(|a| a.first >= b.first) {
                let any = self
                    .work
                    .push_pair(a, b, NEGLIGIBLE, targets, &mut self.integrals);
                if any {
                    for nu in b.functions() {
                        for mu in a.functions() {
                            self.places.push((mu - block.mu.start, nu - block.nu.start));
                        }
                    }
                }
            }
            if self.places.is_empty() {
                continue;
            }
            let n = targets.len;
            let right =
                MatMut::from_column_major_slice_mut(&mut self.integrals[..], n, self.places.len());
            solve_lower(view(lower), right);
            if block.values.is_empty() {
                block.values.resize(block.pairs() * n, 0.0);
            }
            self.store(&mut block, n);
        }
        (!block.values.is_empty()).then_some(block)
    }

    fn store(&self, block: &mut Block, auxiliaries: usize) {
        let (tall, pairs, diagonal) = (block.mu.len(), block.pairs(), block.diagonal());
        let rows = self.integrals.chunks_exact(auxiliaries);
        for (row, &(mu, nu)) in rows.zip(&self.places) {
            for (chunk, values) in row.chunks(CHUNK).enumerate() {
                let start = chunk * CHUNK * pairs;
                let at = start + (nu * tall + mu) * values.len();
                block.values[at..at + values.len()].copy_from_slice(values);
                if diagonal {
                    let at = start + (mu * tall + nu) * values.len();
                    block.values[at..at + values.len()].copy_from_slice(values);
                }
            }
        }
    }
}

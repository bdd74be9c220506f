//! The matrix whose eigenvalues are ionization energies, known by its products with vectors.
//!
//! Rows: the one-hole states i, then the two-hole one-particle states (k, l, a) in the orthonormal
//! doublet basis of [`super::layout::spin_adapt`].

use super::layout::{Shape, spin_adapt, swap_holes};
use crate::numeric::davidson::SymmetricOperator;
use crate::numeric::gemm::{gemm, slice, slice_mut};
use crate::numeric::linalg::view;
use faer::linalg::matmul;
use faer::{Accum, Par};
use nalgebra::DMatrix;
use rayon::prelude::*;

/// First-order interaction of the two-hole one-particle states.
#[derive(Debug, Clone)]
pub struct Interaction {
    /// (ia|jb) in the ring arrangement.
    pub exchange: DMatrix<f64>,
    /// (ij|ab) in the ring arrangement.
    pub direct: DMatrix<f64>,
    /// (kp|lq) in row q + o·p, column l + o·k.
    pub holes: DMatrix<f64>,
}

/// The spin-adapted matrix.
#[derive(Debug, Clone)]
pub struct AdcMatrix {
    /// Numbers of orbitals.
    pub shape: Shape,
    /// One-hole block, hartree.
    pub one_hole: DMatrix<f64>,
    /// Coupling, two-hole states down the rows, one-hole states along the columns.
    pub coupling: DMatrix<f64>,
    /// Zeroth-order energies of the two-hole states.
    pub two_hole: Vec<f64>,
    /// Their interaction, beyond strict second order.
    pub interaction: Option<Interaction>,
    diagonal: Vec<f64>,
}

impl AdcMatrix {
    /// Puts the parts together; `coupling` is not yet spin-adapted.
    pub fn new(
        shape: Shape,
        one_hole: DMatrix<f64>,
        mut coupling: DMatrix<f64>,
        occupied: &[f64],
        virtuals: &[f64],
        interaction: Option<Interaction>,
    ) -> Self {
        spin_adapt(coupling.as_mut_slice(), shape);
        let mut two_hole = Vec::with_capacity(shape.two_hole());
        for e_k in occupied {
            for e_l in occupied {
                two_hole.extend(virtuals.iter().map(|e_a| e_a - e_k - e_l));
            }
        }
        let mut diagonal: Vec<f64> = one_hole.diagonal().iter().copied().collect();
        diagonal.extend_from_slice(&two_hole);
        if let Some(interaction) = &interaction {
            refine_diagonal(&mut diagonal[shape.o..], interaction, shape);
        }
        Self {
            shape,
            one_hole,
            coupling,
            two_hole,
            interaction,
            diagonal,
        }
    }

    /// The whole matrix, for small cases.
    pub fn dense(&self) -> DMatrix<f64> {
        let n = self.size();
        self.apply(&DMatrix::identity(n, n))
    }
}

/// Estimates of the diagonal of the interaction, for the preconditioner only.
fn refine_diagonal(two_hole: &mut [f64], interaction: &Interaction, shape: Shape) {
    let Shape { o, v } = shape;
    for k in 0..o {
        for l in 0..o {
            let kl = l + o * k;
            let holes = interaction.holes[(kl, kl)];
            for a in 0..v {
                let (ka, la) = (k * v + a, l * v + a);
                two_hole[a + v * kl] +=
                    holes - interaction.direct[(ka, ka)] - interaction.direct[(la, la)]
                        + 0.5 * (interaction.exchange[(ka, ka)] + interaction.exchange[(la, la)]);
            }
        }
    }
}

impl SymmetricOperator for AdcMatrix {
    fn size(&self) -> usize {
        self.shape.o + self.shape.two_hole()
    }

    fn diagonal(&self) -> &[f64] {
        &self.diagonal
    }

    fn apply(&self, vectors: &DMatrix<f64>) -> DMatrix<f64> {
        let (o, pairs) = (self.shape.o, self.shape.two_hole());
        let count = vectors.ncols();
        let n = o + pairs;
        let one = view(vectors).subrows(0, o);
        let two = view(vectors).subrows(o, pairs);
        let mut out = DMatrix::zeros(n, count);
        let mut top = DMatrix::zeros(o, count);
        gemm(
            slice_mut(top.as_mut_slice(), o),
            false,
            1.0,
            view(&self.one_hole),
            one,
        );
        let coupling = view(&self.coupling);
        gemm(
            slice_mut(top.as_mut_slice(), o),
            true,
            1.0,
            coupling.transpose(),
            two,
        );
        let mut bottom = match &self.interaction {
            None => DMatrix::zeros(pairs, count),
            Some(interaction) => {
                let two = vectors.rows(o, pairs).into_owned();
                interaction.apply(&two, self.shape)
            }
        };
        gemm(
            slice_mut(bottom.as_mut_slice(), pairs),
            true,
            1.0,
            coupling,
            one,
        );
        out.as_mut_slice()
            .par_chunks_mut(n)
            .enumerate()
            .for_each(|(j, column)| {
                column[..o].copy_from_slice(&top.as_slice()[j * o..(j + 1) * o]);
                let from = &bottom.as_slice()[j * pairs..(j + 1) * pairs];
                let x = &vectors.as_slice()[j * n + o..(j + 1) * n];
                for k in 0..pairs {
                    column[o + k] = from[k] + self.two_hole[k] * x[k];
                }
            });
        out
    }
}

impl Interaction {
    /// The interaction on vectors of two-hole states, without their zeroth-order energies:
    /// Σ_pq (kp|lq) z_pq,a, less the attraction (aa'|ll') of the particle to either hole, plus the
    /// exchange (la|l'a') on the spin-coupled pair.
    pub fn apply(&self, vectors: &DMatrix<f64>, shape: Shape) -> DMatrix<f64> {
        let (v, m, pairs) = (shape.v, shape.ov(), shape.two_hole());
        let count = vectors.ncols();
        let mut out = DMatrix::zeros(pairs, count);
        // [z | z with holes swapped], and the spin-coupled z, as matrices with (l, a) down the rows.
        let mut both = vec![0.0; 2 * pairs * count];
        let (plain, swapped) = both.split_at_mut(pairs * count);
        let mut coupled = vec![0.0; pairs * count];
        plain
            .par_chunks_mut(pairs)
            .zip(swapped.par_chunks_mut(pairs))
            .zip(coupled.par_chunks_mut(pairs))
            .zip(vectors.as_slice().par_chunks(pairs))
            .for_each(|(((plain, swapped), coupled), z)| {
                plain.copy_from_slice(z);
                swap_holes(z, shape, swapped);
                coupled.copy_from_slice(z);
                spin_adapt(coupled, shape);
            });
        let mut attraction = vec![0.0; 2 * pairs * count];
        gemm(
            slice_mut(&mut attraction, m),
            false,
            -1.0,
            view(&self.direct),
            slice(&both, m),
        );
        let mut exchange = vec![0.0; pairs * count];
        gemm(
            slice_mut(&mut exchange, m),
            false,
            1.0,
            view(&self.exchange),
            slice(&coupled, m),
        );
        let (direct, crossed) = attraction.split_at(pairs * count);
        out.as_mut_slice()
            .par_chunks_mut(pairs)
            .zip(both[..pairs * count].par_chunks(pairs))
            .zip(exchange.par_chunks_mut(pairs))
            .zip(direct.par_chunks(pairs).zip(crossed.par_chunks(pairs)))
            .for_each(|(((out, z), exchange), (direct, crossed))| {
                let target = slice_mut(out, v);
                let holes = view(&self.holes);
                matmul::matmul(target, Accum::Replace, slice(z, v), holes, 1.0, Par::Seq);
                spin_adapt(exchange, shape);
                let mut back = vec![0.0; pairs];
                swap_holes(crossed, shape, &mut back);
                for k in 0..pairs {
                    out[k] += exchange[k] + direct[k] + back[k];
                }
            });
        out
    }
}

//! Fitted pairs of molecular orbitals, the form in which every many-body method here takes its
//! two-electron integrals: (pq|rs) = Σ_P B^P_pq B^P_rs.
//!
//! Occupied orbitals are those that take part: with a frozen core the lowest are left out of every
//! sum. Pairs run down the rows (second index of `ov` and first of `vv` fastest, see the fields),
//! auxiliary functions along the columns.

use super::many_body::ManyBodyError;
use crate::integrals::FittedPairs;
use crate::numeric::gemm::{slice, slice_mut};
use crate::numeric::linalg::product_sequential;
use crate::scf::{Orbitals, SpinOrbitals};
use nalgebra::DMatrix;
use rayon::prelude::*;

/// Which pairs of orbitals are wanted.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Pairs {
    /// Occupied with occupied and occupied with virtual.
    WithoutVirtual,
    /// Those and virtual with virtual.
    All,
}

/// Fitted pairs of the orbitals of a closed shell, and the orbital energies.
#[derive(Debug, Clone)]
pub struct FittedOrbitals {
    /// Occupied orbitals that were left out (the lowest ones).
    pub frozen: usize,
    /// Energies of the occupied orbitals that take part, hartree.
    pub occupied_energies: Vec<f64>,
    /// Energies of the virtual orbitals, hartree.
    pub virtual_energies: Vec<f64>,
    /// B^P_ij in row i·o + j.
    pub oo: DMatrix<f64>,
    /// B^P_ia in row i·v + a.
    pub ov: DMatrix<f64>,
    /// B^P_ab in row a·v + b; empty unless asked for.
    pub vv: DMatrix<f64>,
}

impl FittedOrbitals {
    /// Transforms fitted pairs of basis functions to the molecular orbitals.
    ///
    /// # Errors
    /// For an open shell, or if `frozen` leaves no occupied orbital.
    pub fn new(
        orbitals: &Orbitals,
        pairs: &FittedPairs,
        frozen: usize,
        wanted: Pairs,
    ) -> Result<Self, ManyBodyError> {
        let Orbitals::Restricted(set) = orbitals else {
            return Err(ManyBodyError::OpenShell);
        };
        let all = set.occupations.iter().filter(|&&n| n > 0.0).count();
        if frozen >= all {
            return Err(ManyBodyError::NothingOccupied {
                occupied: all,
                frozen,
            });
        }
        if all == set.energies.len() {
            return Err(ManyBodyError::NoVirtuals { occupied: all });
        }
        Ok(Self::transform(set, pairs, frozen..all, wanted))
    }

    fn transform(
        set: &SpinOrbitals,
        pairs: &FittedPairs,
        occupied: std::ops::Range<usize>,
        wanted: Pairs,
    ) -> Self {
        let n = pairs.functions();
        let energies = set.energies.as_slice();
        let (o, v) = (occupied.len(), energies.len() - occupied.end);
        let c = set.coefficients.as_slice();
        let c_o = slice(&c[occupied.start * n..occupied.end * n], n);
        let c_v = slice(&c[occupied.end * n..], n);
        let vv_rows = if wanted == Pairs::All { v * v } else { 0 };
        let auxiliaries = pairs.auxiliaries();
        let mut oo = DMatrix::zeros(o * o, auxiliaries);
        let mut ov = DMatrix::zeros(o * v, auxiliaries);
        let mut vv = DMatrix::zeros(vv_rows, auxiliaries);
        // Without virtual pairs the chunks of `vv` are empty; the iterator still has to run.
        let vv_chunks: Vec<&mut [f64]> = match vv_rows {
            0 => (0..auxiliaries).map(|_| <&mut [f64]>::default()).collect(),
            rows => vv.as_mut_slice().chunks_mut(rows).collect(),
        };
        oo.as_mut_slice()
            .par_chunks_mut(o * o)
            .zip(ov.as_mut_slice().par_chunks_mut(o * v))
            .zip(vv_chunks)
            .enumerate()
            .for_each_init(
                || {
                    (
                        vec![0.0; pairs.rows()],
                        vec![0.0; n * n],
                        vec![0.0; n * o.max(v)],
                    )
                },
                |(packed, full, half), (q, ((oo, ov), vv))| {
                    pairs.read(q, packed);
                    pairs.unpack(packed, full);
                    let b = slice(full, n);
                    product_sequential(slice_mut(&mut half[..n * o], n), false, b, c_o);
                    let half_o = slice(&half[..n * o], n);
                    product_sequential(slice_mut(oo, o), false, c_o.transpose(), half_o);
                    product_sequential(slice_mut(ov, v), false, c_v.transpose(), half_o);
                    if !vv.is_empty() {
                        product_sequential(slice_mut(&mut half[..n * v], n), false, b, c_v);
                        let half_v = slice(&half[..n * v], n);
                        product_sequential(slice_mut(vv, v), false, c_v.transpose(), half_v);
                    }
                },
            );
        Self {
            frozen: occupied.start,
            occupied_energies: energies[occupied.clone()].to_vec(),
            virtual_energies: energies[occupied.end..].to_vec(),
            oo,
            ov,
            vv,
        }
    }

    /// Occupied orbitals that take part.
    pub fn occupied(&self) -> usize {
        self.occupied_energies.len()
    }

    /// Virtual orbitals.
    pub fn virtuals(&self) -> usize {
        self.virtual_energies.len()
    }

    /// Auxiliary functions.
    pub fn auxiliaries(&self) -> usize {
        self.ov.ncols()
    }

    /// Bytes that the pairs take.
    pub fn bytes(occupied: usize, virtuals: usize, auxiliaries: usize, wanted: Pairs) -> u64 {
        let (o, v) = (occupied as u64, virtuals as u64);
        let vv = if wanted == Pairs::All { v * v } else { 0 };
        8 * auxiliaries as u64 * (o * o + o * v + vv)
    }
}

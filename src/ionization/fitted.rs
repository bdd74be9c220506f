//! Fitted pairs of molecular orbitals, the form in which every many-body method here takes its
//! two-electron integrals: (pq|rs) = Σ_P B^P_pq B^P_rs.
//!
//! Occupied orbitals are those that take part: with a frozen core the lowest are left out of every
//! sum. Pairs run down the rows (second index of `ov` and first of `vv` fastest, see the fields),
//! auxiliary functions along the columns.

use super::many_body::ManyBodyError;
use crate::integrals::FittedPairs;
use crate::numeric::gemm::{slice, slice_mut};
use crate::numeric::linalg::{product_sequential, view};
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
        let energies = set.energies.as_slice();
        let (o, v) = (occupied.len(), energies.len() - occupied.end);
        let c_o = set.coefficients.columns(occupied.start, o).into_owned();
        let c_v = set.coefficients.columns(occupied.end, v).into_owned();
        let oo = both_transformed(pairs, &c_o, &c_o);
        let ov = both_transformed(pairs, &c_o, &c_v);
        let vv = match wanted {
            Pairs::All => both_transformed(pairs, &c_v, &c_v),
            Pairs::WithoutVirtual => DMatrix::zeros(0, pairs.auxiliaries()),
        };
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

/// B^P_pq in row p·(columns of `second`) + q and column P, for p in the columns of `first` and q in
/// those of `second`.
fn both_transformed(
    pairs: &FittedPairs,
    first: &DMatrix<f64>,
    second: &DMatrix<f64>,
) -> DMatrix<f64> {
    let (n, wide, tall) = (pairs.functions(), first.ncols(), second.ncols());
    let rows = wide * tall;
    let mut out = DMatrix::zeros(rows, pairs.auxiliaries());
    let mut chunks: Vec<(usize, &mut [f64])> = Vec::with_capacity(pairs.chunks());
    let mut rest = out.as_mut_slice();
    for chunk in 0..pairs.chunks() {
        let (now, later) = rest.split_at_mut(rows * pairs.chunk(chunk).len());
        chunks.push((chunk, now));
        rest = later;
    }
    chunks.into_par_iter().for_each(|(chunk, target)| {
        let width = pairs.chunk(chunk).len();
        // [μ][p][Q], then [q][p][Q], auxiliary functions running fast.
        let mut half = vec![0.0; width * wide * n];
        pairs.half_transform(chunk, first, &mut half);
        let mut full = vec![0.0; width * wide * tall];
        product_sequential(
            slice_mut(&mut full, width * wide),
            false,
            slice(&half, width * wide),
            view(second),
        );
        for p in 0..wide {
            for q in 0..tall {
                let from = &full[width * (p + wide * q)..][..width];
                for (aux, x) in from.iter().enumerate() {
                    target[p * tall + q + rows * aux] = *x;
                }
            }
        }
    });
    out
}

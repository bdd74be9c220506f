//! The Coulomb metric (P|Q), and three-centre integrals (μν|P) of one pair of shells.

use super::distribution::Distribution;
use super::kernel::{self, Scratch};
use super::targets::Targets;
use crate::basis::{Basis, Shell};
use crate::numeric::lanes::Eight;
use crate::numeric::linalg::symmetrise;
use nalgebra::DMatrix;
use rayon::prelude::*;

/// Storage that one thread needs to make Coulomb integrals.
#[derive(Debug, Clone, Default)]
pub struct Workspace {
    pair: Distribution,
    scratch: Scratch,
    raw: Vec<Eight>,
}

impl Workspace {
    fn integrals(&mut self, targets: &Targets, mut row: impl FnMut(usize, &[Eight])) {
        let size = self.pair.rows * targets.width;
        if self.raw.len() < size {
            self.raw.resize(size, Eight::ZERO);
        }
        kernel::coulomb(&self.pair, targets, &mut self.scratch, &mut self.raw);
        let rows = self.raw.chunks_exact(targets.width);
        for (i, raw) in rows.take(self.pair.rows).enumerate() {
            row(i, raw);
        }
    }

    /// Appends (ab|P) for all targets P to `out`, pair by pair of functions (a's running fast),
    /// and returns true; or returns false, leaving `out` alone, if the pair is negligible.
    pub fn push_pair(
        &mut self,
        a: &Shell,
        b: &Shell,
        threshold: f64,
        targets: &Targets,
        out: &mut Vec<f64>,
    ) -> bool {
        self.pair.set_pair(a, b, threshold);
        if self.pair.is_empty() {
            return false;
        }
        let start = out.len();
        out.resize(start + self.pair.rows * targets.len, 0.0);
        let mut slots = out[start..].chunks_exact_mut(targets.len);
        self.integrals(targets, |_, raw| {
            let slot = slots.next().expect("one slot per row");
            targets.gather(raw, slot);
        });
        true
    }
}

/// (P|Q), hartree, over all auxiliary functions.
pub fn coulomb_metric(auxiliary: &Basis) -> DMatrix<f64> {
    let targets = Targets::of_shells(&auxiliary.shells);
    let n = auxiliary.functions;
    let mut metric = DMatrix::zeros(n, n);
    let columns: Vec<Vec<f64>> = auxiliary
        .shells
        .par_iter()
        .map_init(Workspace::default, |work, shell| {
            work.pair = Distribution::of_shell(shell);
            let mut columns = vec![0.0; shell.len() * n];
            work.integrals(&targets, |i, raw| {
                targets.gather(raw, &mut columns[i * n..(i + 1) * n]);
            });
            columns
        })
        .collect();
    for (shell, values) in auxiliary.shells.iter().zip(&columns) {
        metric.as_mut_slice()[shell.first * n..][..values.len()].copy_from_slice(values);
    }
    symmetrise(&mut metric);
    metric
}

/// (μν|P), hartree, for the functions of two shells: one row per pair (those of `a` running fast),
/// one column per auxiliary function. For tests and small uses; [`super::FittedPairs`] makes all
/// of them.
pub fn three_centre(a: &Shell, b: &Shell, auxiliary: &Basis) -> DMatrix<f64> {
    let targets = Targets::of_shells(&auxiliary.shells);
    let mut out = Vec::new();
    Workspace::default().push_pair(a, b, 0.0, &targets, &mut out);
    out.resize(a.len() * b.len() * targets.len, 0.0);
    DMatrix::from_row_slice(a.len() * b.len(), targets.len, &out)
}

//! The two arrangements of a four-index quantity x_ij^ab and the way between them.
//!
//! * *ring*: row i·v + a, column j·v + b. Products of two such matrices are ring diagrams.
//! * *pair*: row a + v·b, column j + o·i. Products with one such matrix are ladder diagrams.
//!
//! Vectors over two holes and a particle have the element (k, l, a) at a + v·(l + o·k).

use nalgebra::DMatrix;
use rayon::prelude::*;

/// Numbers of occupied and virtual orbitals.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Shape {
    /// Occupied orbitals.
    pub o: usize,
    /// Virtual orbitals.
    pub v: usize,
}

impl Shape {
    /// Rows of a ring matrix.
    pub fn ov(self) -> usize {
        self.o * self.v
    }

    /// Elements of a vector over two holes and a particle.
    pub fn two_hole(self) -> usize {
        self.o * self.o * self.v
    }
}

/// y_ij^ab = x_ij^ba, both in the ring arrangement.
pub fn exchanged(x: &DMatrix<f64>, shape: Shape) -> DMatrix<f64> {
    let Shape { o, v } = shape;
    let m = shape.ov();
    let mut out = DMatrix::zeros(m, m);
    out.as_mut_slice()
        .par_chunks_mut(m * v)
        .enumerate()
        .for_each(|(j, block)| {
            for i in 0..o {
                for b in 0..v {
                    for a in 0..v {
                        block[b * m + i * v + a] = x[(i * v + b, j * v + a)];
                    }
                }
            }
        });
    out
}

/// 2·x − exchanged(x).
pub fn spin_summed(x: &DMatrix<f64>, shape: Shape) -> DMatrix<f64> {
    let mut out = exchanged(x, shape);
    combine(&mut out, -1.0, 2.0, x);
    out
}

/// out ← own·out + factor·x.
pub fn combine(out: &mut DMatrix<f64>, own: f64, factor: f64, x: &DMatrix<f64>) {
    const RUN: usize = 1 << 14;
    out.as_mut_slice()
        .par_chunks_mut(RUN)
        .zip(x.as_slice().par_chunks(RUN))
        .for_each(|(out, x)| {
            for (out, x) in out.iter_mut().zip(x) {
                *out = own * *out + factor * x;
            }
        });
}

/// Replaces a ring matrix by x + xᵀ.
pub fn add_transpose(x: &DMatrix<f64>) -> DMatrix<f64> {
    let mut out = x.transpose();
    combine(&mut out, 1.0, 1.0, x);
    out
}

/// Divides a ring matrix by ε_i + ε_j − ε_a − ε_b.
pub fn divide(x: &mut DMatrix<f64>, occupied: &[f64], virtuals: &[f64]) {
    let v = virtuals.len();
    let m = x.nrows();
    x.as_mut_slice()
        .par_chunks_mut(m)
        .enumerate()
        .for_each(|(column, values)| {
            let own = occupied[column / v] - virtuals[column % v];
            for (i, chunk) in values.chunks_mut(v).enumerate() {
                for (x, e_a) in chunk.iter_mut().zip(virtuals) {
                    *x /= own + occupied[i] - e_a;
                }
            }
        });
}

/// From the ring to the pair arrangement.
pub fn to_pairs(x: &DMatrix<f64>, shape: Shape) -> DMatrix<f64> {
    let Shape { o, v } = shape;
    let mut out = DMatrix::zeros(v * v, o * o);
    out.as_mut_slice()
        .par_chunks_mut(v * v)
        .enumerate()
        .for_each(|(ij, column)| {
            let (i, j) = (ij / o, ij % o);
            for b in 0..v {
                let from = &x.as_slice()[(j * v + b) * o * v + i * v..][..v];
                column[b * v..(b + 1) * v].copy_from_slice(from);
            }
        });
    out
}

/// From the pair to the ring arrangement.
pub fn to_rings(x: &DMatrix<f64>, shape: Shape) -> DMatrix<f64> {
    let Shape { o, v } = shape;
    let m = shape.ov();
    let mut out = DMatrix::zeros(m, m);
    out.as_mut_slice()
        .par_chunks_mut(m)
        .enumerate()
        .for_each(|(jb, column)| {
            let (j, b) = (jb / v, jb % v);
            for i in 0..o {
                let from = &x.as_slice()[(j + o * i) * v * v + b * v..][..v];
                column[i * v..(i + 1) * v].copy_from_slice(from);
            }
        });
    out
}

/// Spin adaptation of two holes k and l coupled to a doublet: the part symmetric in k and l stays,
/// the antisymmetric one is scaled by √3, after which the ordinary scalar product over all k, l, a
/// is that of the doublet states. Works on every vector of `values` (length o²v each) in place.
pub fn spin_adapt(values: &mut [f64], shape: Shape) {
    let Shape { o, v } = shape;
    let root = 3.0_f64.sqrt();
    for vector in values.chunks_mut(shape.two_hole()) {
        for k in 0..o {
            for l in 0..k {
                let (at, back) = (v * (l + o * k), v * (k + o * l));
                for a in 0..v {
                    let (x, y) = (vector[at + a], vector[back + a]);
                    let (even, odd) = (0.5 * (x + y), 0.5 * root * (x - y));
                    vector[at + a] = even + odd;
                    vector[back + a] = even - odd;
                }
            }
        }
    }
}

/// The vector with k and l exchanged.
pub fn swap_holes(vector: &[f64], shape: Shape, out: &mut [f64]) {
    let Shape { o, v } = shape;
    for k in 0..o {
        for l in 0..o {
            let from = &vector[v * (k + o * l)..][..v];
            out[v * (l + o * k)..][..v].copy_from_slice(from);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn arrangements_are_the_same_numbers() {
        let shape = Shape { o: 3, v: 4 };
        let x = DMatrix::from_fn(12, 12, |r, c| (r * 100 + c) as f64);
        let pairs = to_pairs(&x, shape);
        assert_eq!(to_rings(&pairs, shape), x);
        // x_20^31: i = 2, j = 0, a = 3, b = 1.
        assert_eq!(pairs[(3 + 4, 6)], x[(2 * 4 + 3, 1)]);
        assert_eq!(exchanged(&x, shape)[(2 * 4 + 3, 1)], x[(2 * 4 + 1, 3)]);
        assert_eq!(exchanged(&exchanged(&x, shape), shape), x);
    }

    #[test]
    fn spin_adaptation_is_the_doublet_metric() {
        // ⟨x|x⟩ = Σ 2x_kl² − x_kl·x_lk for the mixed-spin amplitudes of a doublet.
        let shape = Shape { o: 3, v: 2 };
        let x: Vec<f64> = (0..18).map(|k| ((k * k) as f64 * 0.7).sin()).collect();
        let mut swapped = vec![0.0; 18];
        swap_holes(&x, shape, &mut swapped);
        let metric: f64 = x
            .iter()
            .zip(&swapped)
            .map(|(x, y)| 2.0 * x * x - x * y)
            .sum();
        let mut adapted = x.clone();
        spin_adapt(&mut adapted, shape);
        let norm: f64 = adapted.iter().map(|x| x * x).sum();
        assert!((norm - metric).abs() < 1e-13);
    }
}

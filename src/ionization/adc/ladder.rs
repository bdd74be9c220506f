//! Contractions with integrals of three or four virtual orbitals, made in blocks from fitted pairs
//! and never stored as a whole.

use super::layout::Shape;
use crate::ionization::fitted::FittedOrbitals;
use crate::numeric::gemm::{gemm, slice, slice_mut};
use crate::numeric::linalg::{product_sequential, view};
use nalgebra::DMatrix;
use rayon::prelude::*;

/// Σ_cd (ac|bd) t_ij^cd, both in the pair arrangement.
///
/// Even and odd combinations under exchange of c and d (of a and b, of i and j) do not mix, so that
/// each index pair runs over one triangle only.
pub fn particle_ladder(orbitals: &FittedOrbitals, pairs: &DMatrix<f64>) -> DMatrix<f64> {
    let shape = Shape {
        o: orbitals.occupied(),
        v: orbitals.virtuals(),
    };
    let Shape { o, v } = shape;
    let hole_pairs: Vec<(usize, usize)> =
        (0..o).flat_map(|i| (0..=i).map(move |j| (i, j))).collect();
    let (even, odd) = combinations(pairs, &hole_pairs, shape);
    let count = hole_pairs.len();
    // Row a of the result for all b ≤ a: (even, odd), each (a + 1) × count. Longest rows first.
    let rows: Vec<(Vec<f64>, Vec<f64>)> = (0..v)
        .into_par_iter()
        .with_max_len(1)
        .map(|turn| {
            let a = v - 1 - turn;
            let (plus, minus) = integrals(orbitals, a);
            let mut r = (vec![0.0; (a + 1) * count], vec![0.0; (a + 1) * count]);
            let triangle = v * (v + 1) / 2;
            let (plus, minus) = (slice(&plus, triangle), slice(&minus, triangle));
            product_sequential(
                slice_mut(&mut r.0, a + 1),
                false,
                plus.transpose(),
                view(&even),
            );
            product_sequential(
                slice_mut(&mut r.1, a + 1),
                false,
                minus.transpose(),
                view(&odd),
            );
            r
        })
        .collect();
    let mut out = DMatrix::zeros(v * v, o * o);
    for (k, &(i, j)) in hole_pairs.iter().enumerate() {
        for a in 0..v {
            let (even, odd) = &rows[v - 1 - a];
            for b in 0..=a {
                let (p, m) = (even[b + (a + 1) * k], odd[b + (a + 1) * k]);
                let (ab, ba) = (0.5 * (p + m), 0.5 * (p - m));
                out[(a + v * b, j + o * i)] = ab;
                out[(b + v * a, j + o * i)] = ba;
                out[(b + v * a, i + o * j)] = ab;
                out[(a + v * b, i + o * j)] = ba;
            }
        }
    }
    out
}

/// t_ij^cd ± t_ij^dc for c ≥ d down the rows (halved for c = d) and i ≥ j along the columns.
fn combinations(
    pairs: &DMatrix<f64>,
    hole_pairs: &[(usize, usize)],
    shape: Shape,
) -> (DMatrix<f64>, DMatrix<f64>) {
    let Shape { o, v } = shape;
    let triangle = v * (v + 1) / 2;
    let mut even = DMatrix::zeros(triangle, hole_pairs.len());
    let mut odd = even.clone();
    for (k, &(i, j)) in hole_pairs.iter().enumerate() {
        let t = pairs.column(j + o * i);
        let mut row = 0;
        for c in 0..v {
            for d in 0..=c {
                let (x, y) = (t[c + v * d], t[d + v * c]);
                even[(row, k)] = if c == d { x } else { x + y };
                odd[(row, k)] = x - y;
                row += 1;
            }
        }
    }
    (even, odd)
}

/// (ac|bd) ± (ad|bc) for c ≥ d down the rows and b ≤ a along the columns.
fn integrals(orbitals: &FittedOrbitals, a: usize) -> (Vec<f64>, Vec<f64>) {
    let v = orbitals.virtuals();
    let triangle = v * (v + 1) / 2;
    let all = view(&orbitals.vv);
    let own = all.subrows(a * v, v);
    let mut plus = vec![0.0; triangle * (a + 1)];
    let mut minus = vec![0.0; triangle * (a + 1)];
    // (ac|bd) in row c, column d, for one b at a time.
    let mut block = vec![0.0; v * v];
    for b in 0..=a {
        let other = all.subrows(b * v, v);
        product_sequential(slice_mut(&mut block, v), false, own, other.transpose());
        let mut row = triangle * b;
        for c in 0..v {
            for d in 0..=c {
                let (x, y) = (block[c + v * d], block[d + v * c]);
                plus[row] = x + y;
                minus[row] = x - y;
                row += 1;
            }
        }
    }
    (plus, minus)
}

/// (pc|ab) for one orbital p, given its fitted pairs with all virtual orbitals (rows of
/// [`FittedOrbitals::ov`]): row c, column b + v·a.
pub fn three_virtual(orbitals: &FittedOrbitals, p: usize) -> DMatrix<f64> {
    let v = orbitals.virtuals();
    let own = view(&orbitals.ov).subrows(p * v, v);
    let mut out = DMatrix::zeros(v, v * v);
    gemm(
        slice_mut(out.as_mut_slice(), v),
        false,
        1.0,
        own,
        view(&orbitals.vv).transpose(),
    );
    out
}

/// The sums over auxiliary functions that end in a virtual-occupied matrix (v × o):
/// Σ_P Σ_c B^P_ac Y^P_ic − Σ_P Σ_k B^P_ki Y^P_ka, for Y in the arrangement of
/// [`FittedOrbitals::ov`].
pub fn brillouin(orbitals: &FittedOrbitals, y: &DMatrix<f64>) -> DMatrix<f64> {
    let (o, v) = (orbitals.occupied(), orbitals.virtuals());
    sum_over_auxiliaries(orbitals.auxiliaries(), v * o, |q, out| {
        let y = slice(column(y, q), v);
        let mut target = slice_mut(out, v);
        gemm(
            target.as_mut(),
            true,
            1.0,
            slice(column(&orbitals.vv, q), v),
            y,
        );
        gemm(target, true, -1.0, y, slice(column(&orbitals.oo, q), o));
    })
    .reshape_generic(nalgebra::Dyn(v), nalgebra::Dyn(o))
}

/// ½ Σ_Pa (X^P_ia Y^P_ja + Y^P_ia X^P_ja), o × o.
pub fn hole_overlap(orbitals: &FittedOrbitals, x: &DMatrix<f64>, y: &DMatrix<f64>) -> DMatrix<f64> {
    let (o, v) = (orbitals.occupied(), orbitals.virtuals());
    let sum = sum_over_auxiliaries(orbitals.auxiliaries(), o * o, |q, out| {
        let (x, y) = (slice(column(x, q), v), slice(column(y, q), v));
        gemm(slice_mut(out, o), true, 0.5, x.transpose(), y);
    })
    .reshape_generic(nalgebra::Dyn(o), nalgebra::Dyn(o));
    &sum + sum.transpose()
}

/// Coulomb and exchange operator J − ½K of a one-particle density (occupied, then virtual
/// orbitals, electrons of both spins), its occupied-occupied (o × o) and virtual-occupied (v × o)
/// blocks.
pub fn mean_field(
    orbitals: &FittedOrbitals,
    density: &DMatrix<f64>,
) -> (DMatrix<f64>, DMatrix<f64>) {
    let (o, v) = (orbitals.occupied(), orbitals.virtuals());
    let n = o + v;
    let sum = sum_over_auxiliaries(orbitals.auxiliaries(), n * o, |q, out| {
        let (oo, ov, vv) = (
            column(&orbitals.oo, q),
            column(&orbitals.ov, q),
            column(&orbitals.vv, q),
        );
        // All orbitals against occupied ones: n × o.
        let mut all = DMatrix::zeros(n, o);
        for i in 0..o {
            all.view_mut((0, i), (o, 1))
                .copy_from_slice(&oo[i * o..(i + 1) * o]);
            all.view_mut((o, i), (v, 1))
                .copy_from_slice(&ov[i * v..(i + 1) * v]);
        }
        let mut turned = DMatrix::zeros(n, o);
        gemm(
            slice_mut(turned.as_mut_slice(), n),
            false,
            1.0,
            view(density),
            view(&all),
        );
        let mut charge = 0.0;
        for i in 0..o {
            charge += turned[(i, i)];
        }
        // What the diagonal of D·B lacks is the trace over virtual orbitals.
        for b in 0..v {
            for a in 0..v {
                charge += density[(o + a, o + b)] * vv[a + v * b];
            }
            for k in 0..o {
                charge += density[(o + b, k)] * ov[k * v + b];
            }
        }
        let turned = view(&turned);
        let (top, bottom) = (turned.subrows(0, o), turned.subrows(o, v));
        let target = slice_mut(out, n);
        let (mut own, mut mixed) = target.split_at_row_mut(o);
        gemm(own.as_mut(), true, -0.5, slice(oo, o), top);
        gemm(own.as_mut(), true, -0.5, slice(ov, v).transpose(), bottom);
        gemm(mixed.as_mut(), true, -0.5, slice(ov, v), top);
        gemm(mixed.as_mut(), true, -0.5, slice(vv, v), bottom);
        for i in 0..o {
            for j in 0..o {
                own[(j, i)] += charge * oo[i * o + j];
            }
            for a in 0..v {
                mixed[(a, i)] += charge * ov[i * v + a];
            }
        }
    })
    .reshape_generic(nalgebra::Dyn(n), nalgebra::Dyn(o));
    (sum.rows(0, o).into_owned(), sum.rows(o, v).into_owned())
}

/// Column `q` of a matrix as a slice.
fn column(matrix: &DMatrix<f64>, q: usize) -> &[f64] {
    let rows = matrix.nrows();
    &matrix.as_slice()[q * rows..(q + 1) * rows]
}

/// Σ_q f(q), in groups of fixed size whose sums are added in order.
fn sum_over_auxiliaries(
    count: usize,
    length: usize,
    f: impl Fn(usize, &mut [f64]) + Sync,
) -> DMatrix<f64> {
    const GROUP: usize = 32;
    let parts: Vec<Vec<f64>> = (0..count.div_ceil(GROUP))
        .into_par_iter()
        .map(|group| {
            let mut part = vec![0.0; length];
            for q in group * GROUP..((group + 1) * GROUP).min(count) {
                f(q, &mut part);
            }
            part
        })
        .collect();
    let mut out = DMatrix::zeros(length, 1);
    for part in parts {
        for (sum, x) in out.as_mut_slice().iter_mut().zip(part) {
            *sum += x;
        }
    }
    out
}

//! The blocks of the matrix and the spectroscopic amplitudes, order by order.
//!
//! Working equations of the non-Dyson scheme for a closed shell, (pq|rs) real, with
//! t_ij^ab = (ia|jb)/(ε_i + ε_j − ε_a − ε_b), u = 2t − (a and b exchanged), and the state (k, l, a)
//! having a hole of the same spin as the removed electron in k and a spin-opposed hole and particle
//! in l and a (doublet part). K is the one-hole block, V the coupling, f the amplitudes:
//!
//! * second order: K_ij = −ε_i δ_ij − ½ Σ_lab [u_il^ab (ja|lb) + u_jl^ab (ia|lb)],
//!   V_i,kla = (ik|la), f_i,j = δ_ij − ½ Σ t_ik^ab u_jk^ab, f_i,a = t_i^a(2), f_kla,b = −t_kl^ba.
//! * third order: K gains the same sum with second-order t, the mean field of the second-order
//!   density (static self-energy), and three terms quadratic in t; V gains
//!   Σ_bc (ic|ab) t_kl^cb + Σ_mb [(ik|mb) u_lm^ab − (ib|km) t_lm^ab − (ib|lm) t_km^ba];
//!   f gains the corresponding terms with second-order t and third-order t_i^a.
//!
//! The scheme: J. Schirmer, A. B. Trofimov, G. Stelter, J. Chem. Phys. 109, 4734 (1998); A. B.
//! Trofimov, J. Schirmer, J. Chem. Phys. 123, 144115 (2005) (memory). The spin-summed forms here
//! were derived for this program from the unitary-transformation picture and hold to 1e-14 against
//! an independent implementation; how they were put together is told in `docs/ionization.md`.

use super::Order;
use super::ladder::{brillouin, hole_overlap, mean_field, particle_ladder, three_virtual};
use super::layout::{
    Shape, add_transpose, combine, divide, exchanged, spin_adapt, spin_summed, to_pairs, to_rings,
};
use super::operator::{AdcMatrix, Interaction};
use crate::ionization::fitted::FittedOrbitals;
use crate::numeric::gemm::{gemm, reshaped, slice, slice_mut};
use crate::numeric::linalg::{product, view, view_mut};
use nalgebra::DMatrix;

/// Spectroscopic amplitudes f: how the removal of an electron from orbital p overlaps with the
/// basis states of the matrix.
#[derive(Debug, Clone)]
pub struct Amplitudes {
    /// f_i,p with p along the columns: occupied orbitals, then virtual ones; o × (o + v).
    pub one_hole: DMatrix<f64>,
    /// t_ij^ab in the ring arrangement: f_kla,b = −t_kl^ba (not yet spin-adapted).
    pub two_hole: DMatrix<f64>,
}

/// Builds the matrix and the amplitudes of a closed shell.
pub fn build(orbitals: &FittedOrbitals, order: Order) -> (AdcMatrix, Amplitudes) {
    let shape = Shape {
        o: orbitals.occupied(),
        v: orbitals.virtuals(),
    };
    let (e_o, e_v) = (&orbitals.occupied_energies, &orbitals.virtual_energies);
    let first = FirstOrder::new(orbitals, shape);
    let singles = divided_singles(brillouin(orbitals, &first.y), e_o, e_v);
    let mut one_hole = -hole_overlap(orbitals, &first.y, &orbitals.ov);
    for (i, e) in e_o.iter().enumerate() {
        one_hole[(i, i)] -= e;
    }
    let hole_density = density_overlap(&first.t, &first.u, shape);
    let mut amplitudes = DMatrix::zeros(shape.o, shape.o + shape.v);
    amplitudes
        .columns_mut(0, shape.o)
        .copy_from(&(DMatrix::identity(shape.o, shape.o) - &hole_density * 0.5));
    amplitudes
        .columns_mut(shape.o, shape.v)
        .copy_from(&singles.transpose());
    let mut coupling = first_order_coupling(orbitals, shape);
    if order == Order::Second {
        let matrix = AdcMatrix::new(shape, one_hole, coupling, e_o, e_v, None);
        let amplitudes = Amplitudes {
            one_hole: amplitudes,
            two_hole: first.t,
        };
        return (matrix, amplitudes);
    }
    let exchange = ring_exchange(orbitals);
    let direct = ring_direct(orbitals, shape);
    let holes = hole_interaction(orbitals, shape);
    let second = second_order_doubles(orbitals, shape, &first, &exchange, &direct, &holes);
    let mut two_hole = first.t.clone();
    combine(&mut two_hole, 1.0, 1.0, &second);
    if order == Order::Third {
        let third = ThirdOrder {
            orbitals,
            shape,
            first: &first,
            singles: &singles,
            hole_density: &hole_density,
        };
        third.add(
            &second,
            &direct,
            &mut one_hole,
            &mut coupling,
            &mut amplitudes,
        );
    }
    let interaction = Interaction {
        exchange,
        direct,
        holes,
    };
    let matrix = AdcMatrix::new(shape, one_hole, coupling, e_o, e_v, Some(interaction));
    let amplitudes = Amplitudes {
        one_hole: amplitudes,
        two_hole,
    };
    (matrix, amplitudes)
}

/// The matrix of ADC(2)-x and, apart from it, the second-order coupling (spin-adapted, in the
/// arrangement of [`AdcMatrix::coupling`]): what the P3 self-energy is made of.
pub fn build_for_p3(orbitals: &FittedOrbitals) -> (AdcMatrix, DMatrix<f64>) {
    let shape = Shape {
        o: orbitals.occupied(),
        v: orbitals.virtuals(),
    };
    let mut t = ring_exchange(orbitals);
    let interaction = Interaction {
        exchange: t.clone(),
        direct: ring_direct(orbitals, shape),
        holes: hole_interaction(orbitals, shape),
    };
    divide(
        &mut t,
        &orbitals.occupied_energies,
        &orbitals.virtual_energies,
    );
    let mut second = DMatrix::zeros(shape.two_hole(), shape.o);
    let integrals = three_occupied(orbitals);
    let (u, crossed) = (spin_summed(&t, shape), exchanged(&t, shape));
    add_small_coupling(&integrals, &t, &u, &crossed, shape, &mut second);
    let pairs = to_pairs(&t, shape);
    for i in 0..shape.o {
        add_ladder_coupling(&three_virtual(orbitals, i), &pairs, i, shape, &mut second);
    }
    spin_adapt(second.as_mut_slice(), shape);
    let first = first_order_coupling(orbitals, shape);
    let (e_o, e_v) = (&orbitals.occupied_energies, &orbitals.virtual_energies);
    let empty = DMatrix::zeros(shape.o, shape.o);
    let matrix = AdcMatrix::new(shape, empty, first, e_o, e_v, Some(interaction));
    (matrix, second)
}

/// First-order doubles and what is made of them right away.
struct FirstOrder {
    t: DMatrix<f64>,
    u: DMatrix<f64>,
    /// Y^P_ia = Σ_jb u_ij^ab B^P_jb.
    y: DMatrix<f64>,
}

impl FirstOrder {
    fn new(orbitals: &FittedOrbitals, shape: Shape) -> Self {
        let mut t = ring_exchange(orbitals);
        divide(
            &mut t,
            &orbitals.occupied_energies,
            &orbitals.virtual_energies,
        );
        let u = spin_summed(&t, shape);
        let y = dot(&u, &orbitals.ov);
        Self { t, u, y }
    }
}

/// a·b on all threads.
fn dot(a: &DMatrix<f64>, b: &DMatrix<f64>) -> DMatrix<f64> {
    let mut out = DMatrix::zeros(a.nrows(), b.ncols());
    gemm(view_mut(&mut out), false, 1.0, view(a), view(b));
    out
}

fn divided_singles(mut numerator: DMatrix<f64>, e_o: &[f64], e_v: &[f64]) -> DMatrix<f64> {
    for (i, e_i) in e_o.iter().enumerate() {
        for (a, e_a) in e_v.iter().enumerate() {
            numerator[(a, i)] /= e_i - e_a;
        }
    }
    numerator
}

/// (ia|jb) in the ring arrangement.
fn ring_exchange(orbitals: &FittedOrbitals) -> DMatrix<f64> {
    let m = orbitals.ov.nrows();
    let mut out = DMatrix::zeros(m, m);
    let ov = view(&orbitals.ov);
    gemm(view_mut(&mut out), false, 1.0, ov, ov.transpose());
    out
}

/// (ij|ab) in the ring arrangement.
fn ring_direct(orbitals: &FittedOrbitals, shape: Shape) -> DMatrix<f64> {
    let mut pairs = DMatrix::zeros(shape.v * shape.v, shape.o * shape.o);
    gemm(
        view_mut(&mut pairs),
        false,
        1.0,
        view(&orbitals.vv),
        view(&orbitals.oo).transpose(),
    );
    to_rings(&pairs, shape)
}

/// (kp|lq) in row q + o·p, column l + o·k.
fn hole_interaction(orbitals: &FittedOrbitals, shape: Shape) -> DMatrix<f64> {
    let o = shape.o;
    let oo = product(view(&orbitals.oo), view(&orbitals.oo).transpose());
    DMatrix::from_fn(o * o, o * o, |pq, kl| {
        let (p, q, k, l) = (pq / o, pq % o, kl / o, kl % o);
        oo[(k * o + p, l * o + q)]
    })
}

/// (ik|la) for i along the columns and (k, l, a) down the rows.
fn first_order_coupling(orbitals: &FittedOrbitals, shape: Shape) -> DMatrix<f64> {
    let Shape { o, v } = shape;
    let integrals = three_occupied(orbitals);
    DMatrix::from_fn(shape.two_hole(), o, |row, i| {
        let (a, l, k) = (row % v, row / v % o, row / v / o);
        integrals[(i * o + k, l * v + a)]
    })
}

/// (ij|ka) in row i·o + j, column k·v + a.
fn three_occupied(orbitals: &FittedOrbitals) -> DMatrix<f64> {
    product(view(&orbitals.oo), view(&orbitals.ov).transpose())
}

/// Σ_kab x_ik^ab y_jk^ab.
fn density_overlap(x: &DMatrix<f64>, y: &DMatrix<f64>, shape: Shape) -> DMatrix<f64> {
    let rows = shape.ov() * shape.v;
    product(reshaped(x, rows).transpose(), reshaped(y, rows))
}

/// Second-order doubles: particle ladder, hole ladder and rings over the same denominator.
fn second_order_doubles(
    orbitals: &FittedOrbitals,
    shape: Shape,
    first: &FirstOrder,
    exchange: &DMatrix<f64>,
    direct: &DMatrix<f64>,
    holes: &DMatrix<f64>,
) -> DMatrix<f64> {
    let pairs = to_pairs(&first.t, shape);
    let mut ladders = particle_ladder(orbitals, &pairs);
    gemm(view_mut(&mut ladders), true, 1.0, view(&pairs), view(holes));
    let crossed = dot(&exchanged(&first.t, shape), direct);
    let mut rings = exchanged(&crossed, shape);
    gemm(
        view_mut(&mut rings),
        true,
        1.0,
        view(&first.t),
        view(direct),
    );
    combine(&mut rings, -1.0, 0.0, direct);
    gemm(
        view_mut(&mut rings),
        true,
        1.0,
        view(&first.u),
        view(exchange),
    );
    let mut out = add_transpose(&rings);
    combine(&mut out, 1.0, 1.0, &to_rings(&ladders, shape));
    divide(
        &mut out,
        &orbitals.occupied_energies,
        &orbitals.virtual_energies,
    );
    out
}

/// What third order adds.
struct ThirdOrder<'a> {
    orbitals: &'a FittedOrbitals,
    shape: Shape,
    first: &'a FirstOrder,
    singles: &'a DMatrix<f64>,
    hole_density: &'a DMatrix<f64>,
}

impl ThirdOrder<'_> {
    fn add(
        &self,
        second: &DMatrix<f64>,
        direct: &DMatrix<f64>,
        one_hole: &mut DMatrix<f64>,
        coupling: &mut DMatrix<f64>,
        amplitudes: &mut DMatrix<f64>,
    ) {
        let (orbitals, shape) = (self.orbitals, self.shape);
        let Shape { o, v } = shape;
        let FirstOrder { t, u, y } = self.first;
        let (static_holes, static_mixed) = mean_field(orbitals, &self.density());
        // u·u and, with the exchanged rings, u·u + 3·t'·t' (t' exchanged).
        let mut squares = dot(u, u);
        let z = dot(u, y);
        let crossed = exchanged(t, shape);
        gemm(
            view_mut(&mut squares),
            true,
            3.0,
            view(&crossed),
            view(&crossed),
        );
        let pairs = to_pairs(t, shape);
        let summed_pairs = to_pairs(u, shape);
        let hole_ladder = product(view(&pairs).transpose(), view(&summed_pairs));
        let integrals = three_occupied(orbitals);

        let y2 = dot(&spin_summed(second, shape), &orbitals.ov);
        *one_hole -= hole_overlap(orbitals, &y2, &orbitals.ov);
        *one_hole -= static_holes;
        *one_hole -= hole_overlap(orbitals, &z, &orbitals.ov);
        let rings = density_overlap(&squares, direct, shape);
        *one_hole += (&rings + rings.transpose()) * 0.25;
        let ladder = self.hole_ladder_block(&hole_ladder);
        *one_hole -= (&ladder + ladder.transpose()) * 0.5;

        let mut sources = y2;
        combine(&mut sources, 1.0, 1.0, &z);
        let mut numerator = static_mixed + brillouin(orbitals, &sources);
        self.add_hole_terms(&integrals, &hole_ladder, &squares, &mut numerator);
        add_small_coupling(&integrals, t, u, &crossed, shape, coupling);
        for i in 0..o {
            let three = three_virtual(orbitals, i);
            let ladder = add_ladder_coupling(&three, &pairs, i, shape, coupling);
            let by_particle = slice(summed_pairs.as_slice(), v);
            let own = slice(ladder.as_slice(), shape.two_hole());
            let target = slice_mut(&mut numerator.as_mut_slice()[i * v..(i + 1) * v], v);
            gemm(target, true, -1.0, by_particle, own);
            let block = ring_columns(&squares, i, shape);
            gemm(
                view_mut(&mut numerator),
                true,
                -0.5,
                view(&three),
                view(&block),
            );
        }
        let third = divided_singles(
            numerator,
            &orbitals.occupied_energies,
            &orbitals.virtual_energies,
        );
        let mut mixed = amplitudes.columns_mut(o, v);
        mixed += third.transpose();
        let cross = density_overlap(t, &spin_summed(second, shape), shape);
        let mut own = amplitudes.columns_mut(0, o);
        own -= (&cross + cross.transpose()) * 0.5;
    }

    /// The second-order density matrix, less the Hartree-Fock one, electrons of both spins.
    fn density(&self) -> DMatrix<f64> {
        let Shape { o, v } = self.shape;
        let mut density = DMatrix::zeros(o + v, o + v);
        density
            .view_mut((0, 0), (o, o))
            .copy_from(&(self.hole_density * -2.0));
        let mut particles = DMatrix::zeros(v, v);
        for m in 0..o {
            let (t, u) = (view(&self.first.t), view(&self.first.u));
            let (t, u) = (t.subcols(m * v, v), u.subcols(m * v, v));
            gemm(view_mut(&mut particles), true, 2.0, t.transpose(), u);
        }
        density.view_mut((o, o), (v, v)).copy_from(&particles);
        let mixed = self.singles * 2.0;
        density
            .view_mut((0, o), (o, v))
            .copy_from(&mixed.transpose());
        density.view_mut((o, 0), (v, o)).copy_from(&mixed);
        density
    }

    /// Σ_nlm Σ_de t_in^de u_lm^de (jl|nm).
    fn hole_ladder_block(&self, hole_ladder: &DMatrix<f64>) -> DMatrix<f64> {
        let o = self.shape.o;
        let oo = product(view(&self.orbitals.oo), view(&self.orbitals.oo).transpose());
        DMatrix::from_fn(o, o, |i, j| {
            let mut sum = 0.0;
            for l in 0..o {
                for m in 0..o {
                    for n in 0..o {
                        sum += hole_ladder[(n + o * i, m + o * l)] * oo[(j * o + l, n * o + m)];
                    }
                }
            }
            sum
        })
    }

    /// Terms of the third-order singles with three occupied orbitals in the integral.
    fn add_hole_terms(
        &self,
        integrals: &DMatrix<f64>,
        hole_ladder: &DMatrix<f64>,
        squares: &DMatrix<f64>,
        numerator: &mut DMatrix<f64>,
    ) {
        let Shape { o, v } = self.shape;
        for i in 0..o {
            for l in 0..o {
                for m in 0..o {
                    for n in 0..o {
                        let factor = hole_ladder[(n + o * i, m + o * l)];
                        let row = m * o + n;
                        for a in 0..v {
                            numerator[(a, i)] += factor * integrals[(row, l * v + a)];
                        }
                    }
                }
            }
        }
        for m in 0..o {
            // (mn|ie) with (n, e) down the rows.
            let block = DMatrix::from_fn(o * v, o, |ne, i| {
                integrals[(m * o + ne / v, i * v + ne % v)]
            });
            let rows = view(squares).subrows(m * v, v);
            gemm(view_mut(numerator), true, 0.5, rows, view(&block));
        }
    }
}

/// x_if,me for one m, with f + v·e down the rows and i along the columns.
fn ring_columns(x: &DMatrix<f64>, m: usize, shape: Shape) -> DMatrix<f64> {
    let Shape { o, v } = shape;
    DMatrix::from_fn(v * v, o, |fe, i| x[(i * v + fe % v, m * v + fe / v)])
}

/// Adds Σ_bc (ic|ab) t_kl^cb to the coupling of orbital i and returns it, a down the rows.
fn add_ladder_coupling(
    three: &DMatrix<f64>,
    pairs: &DMatrix<f64>,
    i: usize,
    shape: Shape,
    coupling: &mut DMatrix<f64>,
) -> DMatrix<f64> {
    let Shape { o, v } = shape;
    let mut ladder = DMatrix::zeros(v, o * o);
    let turned = slice(three.as_slice(), v * v);
    gemm(
        view_mut(&mut ladder),
        false,
        1.0,
        turned.transpose(),
        view(pairs),
    );
    for (x, l) in coupling.column_mut(i).iter_mut().zip(ladder.iter()) {
        *x += l;
    }
    ladder
}

/// The second-order coupling's terms with three occupied orbitals in the integral.
fn add_small_coupling(
    integrals: &DMatrix<f64>,
    t: &DMatrix<f64>,
    u: &DMatrix<f64>,
    crossed: &DMatrix<f64>,
    shape: Shape,
    coupling: &mut DMatrix<f64>,
) {
    let Shape { o, v } = shape;
    // (km|ib) in row i·o + k, column m·v + b.
    let turned = DMatrix::from_fn(o * o, o * v, |ik, mb| {
        integrals[((ik % o) * o + mb / v, (ik / o) * v + mb % v)]
    });
    let mut same = dot(integrals, u);
    gemm(view_mut(&mut same), true, -1.0, view(&turned), view(t));
    let other = dot(&turned, crossed);
    for i in 0..o {
        for k in 0..o {
            for l in 0..o {
                for a in 0..v {
                    coupling[(a + v * (l + o * k), i)] +=
                        same[(i * o + k, l * v + a)] - other[(i * o + l, k * v + a)];
                }
            }
        }
    }
}

//! The one kernel behind every Coulomb integral of the program: a [`Distribution`] on the left,
//! [`Targets`] on the right, eight right-hand primitives at a time.
//!
//! For one primitive on each side, with α = pq/(p + q) and R = P − C,
//!
//! (ab|S_lm) = (2π/p) · charge · √(q/(p + q)) · Σ_tuv E^{ab}_tuv Σ_τνφ c^{lm}_τνφ R_{t+τ,u+ν,v+φ},
//!
//! where R_tuv = ∂_x^t ∂_y^u ∂_z^v F_0(α R²) comes from the Boys function by the recursion of
//! [`hermite::Step`], and the inner sum runs over the monomials of a solid harmonic (degree l
//! only: Hobson's theorem). The outer sum is a small matrix product over all primitives and
//! triples at once, with its results held in registers.

use super::distribution::{Distribution, Primitive};
use super::hermite;
use super::targets::{Block, Targets};
use crate::basis::MAX_AUXILIARY_L;
use crate::numeric::boys;
use crate::numeric::lanes::{Eight, Kernel, Lanes, dispatch};
use pulp::Simd;
use std::sync::LazyLock;

/// Intermediate values kept at a time, in [`Eight`]s (48 kB), so that they stay in cache.
const CHUNK: usize = 768;

/// Working storage, one per thread.
#[derive(Debug, Clone)]
pub struct Scratch {
    /// R_tuv.
    derivatives: Vec<Eight>,
    /// (primitive, triple) × component.
    intermediate: Vec<Eight>,
}

impl Default for Scratch {
    fn default() -> Self {
        Self {
            derivatives: vec![Eight::ZERO; hermite::ROOM],
            intermediate: vec![Eight::ZERO; CHUNK],
        }
    }
}

/// One product c · R of the ket sum.
#[derive(Debug, Clone, Copy)]
struct Term {
    /// Which monomial of degree l.
    monomial: usize,
    coefficient: f64,
}

/// What turns derivatives into solid harmonics of one degree.
struct Harmonics {
    /// Per component its terms.
    components: Vec<Vec<Term>>,
    /// For every triple (t,u,v) the positions of (t+τ, u+ν, v+φ), monomial by monomial.
    sums: Vec<u16>,
    monomials: usize,
}

static HARMONICS: LazyLock<Vec<Harmonics>> = LazyLock::new(|| {
    (0..=MAX_AUXILIARY_L)
        .map(|l| {
            let monomials: Vec<_> = hermite::triples(l)
                .filter(|m| m.iter().sum::<usize>() == l)
                .collect();
            let components = hermite::harmonic_terms(l)
                .iter()
                .map(|harmonic| {
                    let term = |t: &hermite::Term| Term {
                        monomial: monomials
                            .iter()
                            .position(|m| *m == t.powers)
                            .expect("every monomial of degree l is listed"),
                        coefficient: t.coefficient,
                    };
                    harmonic.iter().map(term).collect()
                })
                .collect();
            let sums = hermite::triples(hermite::MAX_DEGREE - l)
                .flat_map(|[t, u, v]| {
                    monomials
                        .iter()
                        .map(move |m| hermite::index(t + m[0], u + m[1], v + m[2]) as u16)
                })
                .collect();
            Harmonics {
                components,
                sums,
                monomials: monomials.len(),
            }
        })
        .collect()
});

/// Computes all Coulomb integrals between `left` and `targets` into `raw`: row by row, each of
/// `targets.width` [`Eight`]s, to be added up by [`Targets::gather`]. What `raw` held before is
/// lost.
pub fn coulomb(left: &Distribution, targets: &Targets, scratch: &mut Scratch, raw: &mut [Eight]) {
    let raw = &mut raw[..left.rows * targets.width];
    if left.is_empty() {
        raw.fill(Eight::ZERO);
        return;
    }
    dispatch(Coulomb {
        left,
        targets,
        scratch,
        raw,
    });
}

struct Coulomb<'a> {
    left: &'a Distribution,
    targets: &'a Targets,
    scratch: &'a mut Scratch,
    raw: &'a mut [Eight],
}

impl Kernel for Coulomb<'_> {
    type Output = ();

    #[inline(always)]
    fn run<S: Simd, const N: usize>(self, simd: S) {
        let Coulomb {
            left,
            targets,
            scratch,
            raw,
        } = self;
        let triples = hermite::count(left.degree);
        let derivatives: &mut [Eight; hermite::ROOM] = (&mut scratch.derivatives[..])
            .try_into()
            .expect("the scratch holds exactly this many");
        for group in &targets.groups {
            let harmonics = &HARMONICS[group.l];
            let components = 2 * group.l + 1;
            let slab = triples * components;
            let at_once = (CHUNK / slab).max(1);
            if scratch.intermediate.len() < at_once * slab {
                scratch.intermediate.resize(at_once * slab, Eight::ZERO);
            }
            for (b, block) in group.blocks.iter().enumerate() {
                let position = group.first + b * components;
                let mut expansion = &left.expansion[..];
                for (chunk, primitives) in left.primitives.chunks(at_once).enumerate() {
                    let middle = &mut scratch.intermediate[..primitives.len() * slab];
                    for (primitive, slab) in primitives.iter().zip(middle.chunks_exact_mut(slab)) {
                        let order = left.degree + group.l;
                        potential::<S, N>(simd, order, primitive, block, derivatives);
                        harmonic::<S, N>(simd, harmonics, derivatives, slab);
                    }
                    let (now, later) = expansion.split_at(primitives.len() * triples * left.rows);
                    expansion = later;
                    let product = Product {
                        expansion: now,
                        rows: left.rows,
                        middle,
                        components,
                        add: chunk > 0,
                        width: targets.width,
                        position,
                    };
                    product.run::<S, N>(simd, raw);
                }
            }
        }
    }
}

/// R_tuv up to degree `order`, all prefactors included.
#[inline(always)]
fn potential<S: Simd, const N: usize>(
    simd: S,
    order: usize,
    left: &Primitive,
    right: &Block,
    r: &mut [Eight; hermite::ROOM],
) {
    let one = Lanes::<S, N>::splat(simd, 1.0);
    let p = Lanes::splat(simd, left.exponent);
    let distance: [Lanes<S, N>; 3] = std::array::from_fn(|axis| {
        Lanes::splat(simd, left.centre[axis]).sub(simd, Lanes::load(&right.centre[axis]))
    });
    let [x, y, z] = distance;
    let squared = x.mul(simd, x);
    let squared = y.mul_add(simd, y, squared);
    let squared = z.mul_add(simd, z, squared);
    // q/(p + q), which is 1 for a point charge.
    let ratio = one.div(
        simd,
        p.mul_add(simd, Lanes::load(&right.inverse_exponent), one),
    );
    let alpha = p.mul(simd, ratio);
    let mut f = [Lanes::splat(simd, 0.0); boys::MAX_ORDER + 1];
    boys::lanes(simd, order, alpha.mul(simd, squared), &mut f);
    let mut factor = ratio.sqrt(simd).mul(simd, Lanes::load(&right.charge)).mul(
        simd,
        Lanes::splat(simd, 2.0 * std::f64::consts::PI / left.exponent),
    );
    let minus_two_alpha = alpha.mul(simd, Lanes::splat(simd, -2.0));
    for value in &mut f[..=order] {
        *value = value.mul(simd, factor);
        factor = factor.mul(simd, minus_two_alpha);
    }
    // R^{(n)} replaces R^{(n+1)} in place, from the highest degree down.
    let steps = &hermite::STEPS[..];
    f[order].store(&mut r[0]);
    for n in (0..order).rev() {
        let end = hermite::count(order - n);
        for (i, step) in steps[..end].iter().enumerate().skip(1).rev() {
            let lower = Lanes::<S, N>::load(&r[step.lower as usize % hermite::ROOM]);
            let mut value = lower.mul(simd, distance[step.axis]);
            if step.factor != 0.0 {
                let lowest = Lanes::load(&r[step.lowest as usize % hermite::ROOM]);
                value = lowest.mul_add(simd, Lanes::splat(simd, step.factor), value);
            }
            value.store(&mut r[i % hermite::ROOM]);
        }
        f[n].store(&mut r[0]);
    }
}

/// Σ c^{lm} R_{t+τ,u+ν,v+φ} for every triple and component.
#[inline(always)]
fn harmonic<S: Simd, const N: usize>(
    simd: S,
    harmonics: &Harmonics,
    r: &[Eight; hermite::ROOM],
    out: &mut [Eight],
) {
    let components = &harmonics.components[..];
    let sums = harmonics.sums.chunks_exact(harmonics.monomials);
    for (sums, out) in sums.zip(out.chunks_exact_mut(components.len())) {
        for (terms, out) in components.iter().zip(out) {
            let mut value = Lanes::<S, N>::splat(simd, 0.0);
            for term in terms {
                let at = sums[term.monomial] as usize % hermite::ROOM;
                let c = Lanes::splat(simd, term.coefficient);
                value = Lanes::load(&r[at]).mul_add(simd, c, value);
            }
            value.store(out);
        }
    }
}

/// raw[row][position + m] (+)= Σ_k expansion[k][row] · middle[k][m].
struct Product<'a> {
    expansion: &'a [f64],
    rows: usize,
    middle: &'a [Eight],
    components: usize,
    add: bool,
    width: usize,
    position: usize,
}

impl Product<'_> {
    #[inline(always)]
    fn run<S: Simd, const N: usize>(&self, simd: S, raw: &mut [Eight]) {
        let mut row = 0;
        while row + 4 <= self.rows {
            self.strip::<S, N, 4>(simd, row, raw);
            row += 4;
        }
        match self.rows - row {
            3 => self.strip::<S, N, 3>(simd, row, raw),
            2 => self.strip::<S, N, 2>(simd, row, raw),
            1 => self.strip::<S, N, 1>(simd, row, raw),
            _ => {}
        }
    }

    /// `A` rows: as many components at a time as the registers hold.
    #[inline(always)]
    fn strip<S: Simd, const N: usize, const A: usize>(
        &self,
        simd: S,
        row: usize,
        raw: &mut [Eight],
    ) {
        let mut m = 0;
        if N == 1 || A <= 2 {
            while m + 2 <= self.components {
                self.tile::<S, N, A, 2>(simd, row, m, raw);
                m += 2;
            }
        }
        while m < self.components {
            self.tile::<S, N, A, 1>(simd, row, m, raw);
            m += 1;
        }
    }

    #[inline(always)]
    fn tile<S: Simd, const N: usize, const A: usize, const B: usize>(
        &self,
        simd: S,
        row: usize,
        m: usize,
        raw: &mut [Eight],
    ) {
        let mut sums = [[Lanes::<S, N>::splat(simd, 0.0); B]; A];
        let left = self.expansion.chunks_exact(self.rows);
        let right = self.middle.chunks_exact(self.components);
        for (left, right) in left.zip(right) {
            let (left, right) = (&left[row..row + A], &right[m..m + B]);
            let right: [Lanes<S, N>; B] = std::array::from_fn(|j| Lanes::load(&right[j]));
            for i in 0..A {
                let factor = Lanes::splat(simd, left[i]);
                for j in 0..B {
                    sums[i][j] = right[j].mul_add(simd, factor, sums[i][j]);
                }
            }
        }
        for (i, sums) in sums.into_iter().enumerate() {
            let at = (row + i) * self.width + self.position + m;
            for (sum, out) in sums.into_iter().zip(&mut raw[at..at + B]) {
                let value = if self.add {
                    sum.add(simd, Lanes::load(out))
                } else {
                    sum
                };
                value.store(out);
            }
        }
    }
}

//! Integrals against an independent library (Obara-Saika and Rys, crate `integral`), closed forms
//! and identities.

use bandproof::basis::{Basis, MAX_AUXILIARY_L, MAX_ORBITAL_L, Shell};
use bandproof::integrals::{self, FittedPairs};
use nalgebra::{DMatrix, Vector3};
use std::f64::consts::PI;

/// Absolute agreement asked of integrals of order 1.
const INTEGRAL: f64 = 1e-11;

/// 1/√∫ r^{2l+2} exp(−2αr²) dr.
fn primitive_norm(l: usize, alpha: f64) -> f64 {
    // ∫ r^{2l+2} e^{−ar²} dr = (2l+1)!! √(π/a) / (2^{l+2} a^{l+1})
    let a = 2.0 * alpha;
    let double: f64 = (0..=l).map(|i| (2 * i + 1) as f64).product();
    (double * (PI / a).sqrt() / (2f64.powi(l as i32 + 2) * a.powi(l as i32 + 1))).powf(-0.5)
}

/// Centre, l, [(exponent, coefficient of the normalised primitive)].
type Contraction<'a> = (Vector3<f64>, usize, &'a [(f64, f64)]);

/// A basis of such contractions, which are not renormalised.
fn basis(shells: &[Contraction]) -> Basis {
    let mut functions = 0;
    let shells: Vec<Shell> = shells
        .iter()
        .enumerate()
        .map(|(atom, &(centre_bohr, l, primitives))| {
            let first = functions;
            functions += 2 * l + 1;
            Shell {
                atom,
                centre_bohr,
                l,
                exponents: primitives.iter().map(|p| p.0).collect(),
                coefficients: primitives
                    .iter()
                    .map(|p| p.1 * primitive_norm(l, p.0))
                    .collect(),
                first,
            }
        })
        .collect();
    Basis {
        name: "by hand".into(),
        functions,
        atom_functions: shells.iter().map(|s| s.first..s.first + s.len()).collect(),
        shells,
    }
}

fn oracle(basis: &Basis) -> integral::Basis {
    let shells = basis.shells.iter().map(|s| {
        let coefficients = s.exponents.iter().zip(&s.coefficients);
        integral::Shell::new_spherical(
            s.l,
            s.centre_bohr.into(),
            s.exponents.clone(),
            coefficients
                .map(|(&a, c)| c / primitive_norm(s.l, a))
                .collect(),
        )
        .expect("a shell the library takes")
    });
    integral::Basis::new(shells.collect())
}

/// Shells of every l up to `top` on scattered centres, contracted ones among them.
fn scattered(top: usize) -> Basis {
    let contracted: &[(f64, f64)] = &[(9.1, 0.2), (1.7, 0.6), (0.42, 0.4)];
    let single: &[(f64, f64)] = &[(0.8, 1.0)];
    let diffuse: &[(f64, f64)] = &[(0.07, 1.0)];
    let centres = [
        Vector3::new(0.1, -0.4, 0.3),
        Vector3::new(1.3, 0.9, -0.7),
        Vector3::new(-0.8, 1.9, 1.1),
    ];
    let mut shells = Vec::new();
    for l in 0..=top {
        shells.push((centres[l % 3], l, contracted));
        shells.push((centres[(l + 1) % 3], l, single));
        shells.push((centres[(l + 2) % 3], l, diffuse));
    }
    basis(&shells)
}

/// Place of our function m of a shell in the library's order, which is the same but for
/// p = x, y, z.
fn place(l: usize, m: usize) -> usize {
    if l == 1 { [1, 2, 0][m] } else { m }
}

fn places(basis: &Basis) -> Vec<usize> {
    let of_shell = |s: &Shell| {
        (0..s.len())
            .map(|m| s.first + place(s.l, m))
            .collect::<Vec<_>>()
    };
    basis.shells.iter().flat_map(of_shell).collect()
}

fn assert_close(basis: &Basis, ours: &DMatrix<f64>, theirs: &[f64], tolerance: f64, what: &str) {
    let n = ours.ncols();
    assert_eq!(ours.len(), theirs.len(), "{what}: size");
    let places = places(basis);
    for i in 0..n {
        for j in 0..n {
            let (x, y) = (ours[(i, j)], theirs[places[i] * n + places[j]]);
            assert!(
                (x - y).abs() <= tolerance * y.abs().max(1.0),
                "{what} ({i}, {j}): {x} against {y}"
            );
        }
    }
}

#[test]
fn one_electron_integrals_agree_with_an_independent_library() {
    let ours = scattered(MAX_ORBITAL_L);
    let theirs = oracle(&ours);
    assert_close(
        &ours,
        &integrals::overlap(&ours),
        &theirs.overlap(),
        INTEGRAL,
        "overlap",
    );
    assert_close(
        &ours,
        &integrals::kinetic(&ours),
        &theirs.kinetic(),
        INTEGRAL,
        "kinetic",
    );
    let origin = Vector3::new(0.2, -1.0, 0.5);
    let components = integrals::dipole(&ours, origin);
    for (x, y) in components.iter().zip(theirs.dipole(origin.into())) {
        assert_close(&ours, x, &y, INTEGRAL, "dipole");
    }
    let charges = [
        (3.0, Vector3::new(0.1, -0.4, 0.3)),
        (7.5, Vector3::new(4.0, 5.0, -6.0)),
        (1.0, Vector3::new(-30.0, 2.0, 8.0)),
    ];
    let list: Vec<([f64; 3], f64)> = charges.iter().map(|&(z, r)| (r.into(), z)).collect();
    assert_close(
        &ours,
        &integrals::nuclear_attraction(&ours, &charges),
        &theirs.nuclear(&list),
        INTEGRAL,
        "nuclear attraction",
    );
}

#[test]
fn three_centre_integrals_agree_with_an_independent_library() {
    let orbital = scattered(MAX_ORBITAL_L);
    let auxiliary = scattered(MAX_AUXILIARY_L);
    let (theirs, their_auxiliary) = (oracle(&orbital), oracle(&auxiliary));
    for (i, a) in orbital.shells.iter().enumerate() {
        for (j, b) in orbital.shells.iter().enumerate().step_by(2) {
            let ours = integrals::three_centre(a, b, &auxiliary);
            for (k, p) in auxiliary.shells.iter().enumerate() {
                let block = theirs.eri_3c_block(&their_auxiliary, i, j, k);
                for ia in 0..a.len() {
                    for ib in 0..b.len() {
                        for ip in 0..p.len() {
                            let x = ours[(ib * a.len() + ia, p.first + ip)];
                            let (ta, tb, tp) = (place(a.l, ia), place(b.l, ib), place(p.l, ip));
                            let y = block[(ta * b.len() + tb) * p.len() + tp];
                            assert!(
                                (x - y).abs() <= INTEGRAL * y.abs().max(1.0),
                                "shells {i} {j} {k}, functions {ia} {ib} {ip}: {x} against {y}"
                            );
                        }
                    }
                }
            }
        }
    }
}

#[test]
fn metric_agrees_with_an_independent_library() {
    let auxiliary = scattered(MAX_AUXILIARY_L);
    let ours = integrals::coulomb_metric(&auxiliary);
    assert_close(
        &auxiliary,
        &ours,
        &oracle(&auxiliary).eri_2c(),
        INTEGRAL,
        "metric",
    );
}

#[test]
fn normalised_shells_have_unit_overlap_for_every_l() {
    for l in 0..=MAX_ORBITAL_L {
        for alpha in [0.02, 1.0, 3.7e4] {
            let one = basis(&[(Vector3::new(0.3, 0.2, -5.0), l, &[(alpha, 1.0)])]);
            let s = integrals::overlap(&one);
            let error = (s - DMatrix::identity(2 * l + 1, 2 * l + 1)).amax();
            assert!(error < 1e-13, "l = {l}, α = {alpha}: {error:e}");
        }
    }
    // Auxiliary shells reach i, where only Coulomb integrals exist: the self-repulsion of a
    // normalised function is the same for every m and the off-diagonal elements vanish.
    for l in 0..=MAX_AUXILIARY_L {
        let alpha = 0.9;
        let one = basis(&[(Vector3::new(0.3, 0.2, -5.0), l, &[(alpha, 1.0)])]);
        let metric = integrals::coulomb_metric(&one);
        // In momentum space, (P|P) = 4π ∫ |χ(k)|²/k² d³k / (2π)³ with χ(k) ∝ k^l exp(−k²/4α)
        // against ∫ |χ(k)|² d³k / (2π)³ = 1: a ratio of gamma functions, (4π/2α)/(l + 1/2).
        let expected = 4.0 * PI / (2.0 * alpha) / (l as f64 + 0.5);
        let error = (metric - DMatrix::identity(2 * l + 1, 2 * l + 1) * expected).amax();
        assert!(error < 1e-12, "l = {l}: {error:e}");
    }
}

#[test]
fn s_functions_follow_closed_forms() {
    // Two normalised 1s Gaussians of equal exponent a at distance R and a charge at the midpoint:
    // S = exp(−aR²/2), T = S(3a/2 − a²R²/2), V = −Z·S·2√(2a/π).
    let (a, distance) = (0.7f64, 1.9f64);
    let ends = [Vector3::zeros(), Vector3::new(0.0, 0.0, distance)];
    let two = basis(&[(ends[0], 0, &[(a, 1.0)]), (ends[1], 0, &[(a, 1.0)])]);
    let r2 = distance * distance;
    let s = (-0.5 * a * r2).exp();
    assert!((integrals::overlap(&two)[(0, 1)] - s).abs() < 1e-15);
    let t = s * (1.5 * a - 0.5 * a * a * r2);
    assert!((integrals::kinetic(&two)[(0, 1)] - t).abs() < 1e-15);
    let middle = [(2.0, (ends[0] + ends[1]) / 2.0)];
    let v = -2.0 * s * 2.0 * (2.0 * a / PI).sqrt();
    assert!((integrals::nuclear_attraction(&two, &middle)[(0, 1)] - v).abs() < 1e-14);
    // A charge far away sees a point charge: V → −Z/R.
    let far = [(1.0, Vector3::new(0.0, 1e4, 0.0))];
    let v = integrals::nuclear_attraction(&two, &far)[(0, 0)];
    assert!((v + 1e-4).abs() < 1e-16);
}

#[test]
fn kinetic_energy_is_the_curvature_of_the_overlap() {
    // ⟨a|−½∇²|b⟩ = −½ Σ_i ∂²/∂B_i² ⟨a|b⟩, here by central differences of the overlap.
    let contracted: &[(f64, f64)] = &[(1.7, 0.6), (0.42, 0.4)];
    let h = 1e-3;
    for (la, lb) in [(0, 2), (1, 3), (4, 4), (3, 0)] {
        let at = |shift: Vector3<f64>| {
            let pair = basis(&[
                (Vector3::new(0.1, -0.2, 0.3), la, contracted),
                (Vector3::new(0.9, 0.5, -0.4) + shift, lb, contracted),
            ]);
            integrals::overlap(&pair)
        };
        let centre = at(Vector3::zeros());
        let mut laplacian = DMatrix::zeros(centre.nrows(), centre.ncols());
        for axis in 0..3 {
            let mut step = Vector3::zeros();
            step[axis] = h;
            // Fourth-order second difference.
            let (one, two) = (at(step) + at(-step), at(step * 2.0) + at(-step * 2.0));
            laplacian += (one * 16.0 - two - &centre * 30.0) / (12.0 * h * h);
        }
        let pair = basis(&[
            (Vector3::new(0.1, -0.2, 0.3), la, contracted),
            (Vector3::new(0.9, 0.5, -0.4), lb, contracted),
        ]);
        let t = integrals::kinetic(&pair);
        for i in 0..2 * la + 1 {
            for j in 2 * la + 1..t.ncols() {
                let expected = -0.5 * laplacian[(i, j)];
                assert!((t[(i, j)] - expected).abs() < 1e-7, "l = {la}, {lb}");
            }
        }
    }
}

#[test]
fn fitting_reproduces_a_product_that_the_auxiliary_set_holds() {
    // The product of two s functions on one centre is itself an s function of the sum exponent:
    // with that function in the auxiliary set, (ss|ss) comes out exactly.
    let (a, b) = (0.6, 1.1);
    let origin = Vector3::new(0.2, 0.1, -0.3);
    let orbital = basis(&[(origin, 0, &[(a, 1.0)]), (origin, 0, &[(b, 1.0)])]);
    let auxiliary = basis(&[
        (origin, 0, &[(2.0 * a, 1.0)]),
        (origin, 0, &[(a + b, 1.0)]),
        (origin, 0, &[(2.0 * b, 1.0)]),
    ]);
    let pairs = FittedPairs::new(&orbital, &auxiliary).expect("independent functions");
    let exact = oracle(&orbital).eri();
    let n = 2;
    let full: Vec<DMatrix<f64>> = (0..3)
        .map(|q| {
            let mut packed = vec![0.0; pairs.packed_len()];
            let unit: Vec<f64> = (0..3).map(|i| f64::from(u8::from(i == q))).collect();
            pairs.add_potential(0, &unit, &mut packed);
            pairs.unpack(&packed)
        })
        .collect();
    for i in 0..n * n * n * n {
        let (p, q, r, s) = (i / 8, i / 4 % 2, i / 2 % 2, i % 2);
        let fitted: f64 = full.iter().map(|m| m[(p, q)] * m[(r, s)]).sum();
        assert!((fitted - exact[i]).abs() < 1e-12, "({p}{q}|{r}{s})");
    }
}

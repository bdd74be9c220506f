//! Real solid harmonics as polynomials in x, y, z.
//!
//! S_lm is r^l times the real spherical harmonic, normalised on the unit sphere, so that
//! Σ_m S_lm² = r^{2l}·(2l+1)/(4π), with m from −l to +l: for l = 1 that is y, z, x (all times
//! √(3/4π)). Negative m carry sin(|m|φ), positive m cos(mφ), without the Condon-Shortley sign.
//!
//! Formula: T. Helgaker, P. Jørgensen, J. Olsen, Molecular Electronic-Structure Theory, section
//! 6.4 (memory), times √((2l+1)/4π) for the normalisation used here.

use nalgebra::{DMatrix, DVector, Matrix3, Vector3};
use std::f64::consts::PI;

/// Exponents (i, j, k) of x^i y^j z^k for one l: i falls first, then j: `xx, xy, xz, yy, yz, zz`.
pub fn cartesian_powers(l: usize) -> Vec<[usize; 3]> {
    let mut powers = Vec::with_capacity(cartesian_count(l));
    for i in (0..=l).rev() {
        for j in (0..=l - i).rev() {
            powers.push([i, j, l - i - j]);
        }
    }
    powers
}

/// Number of monomials of degree l: (l+1)(l+2)/2.
pub fn cartesian_count(l: usize) -> usize {
    (l + 1) * (l + 2) / 2
}

/// Place of x^i y^j z^k in [`cartesian_powers`] of i + j + k.
pub fn cartesian_index([_, j, k]: [usize; 3]) -> usize {
    let rest = j + k;
    rest * (rest + 1) / 2 + k
}

/// Coefficients of S_lm: (2l+1) × [`cartesian_count`], row m + l, columns in the order of
/// [`cartesian_powers`].
pub fn solid_harmonics(l: usize) -> DMatrix<f64> {
    let mut matrix = DMatrix::zeros(2 * l + 1, cartesian_count(l));
    for row in 0..=2 * l {
        let m = row as i64 - l as i64;
        let a = m.unsigned_abs() as usize;
        // sin terms take the odd powers of y, cos terms the even ones.
        let odd = usize::from(m < 0);
        let kronecker = if m == 0 { 2.0 } else { 1.0 };
        let norm = (2.0 * factorial(l + a) * factorial(l - a) / kronecker).sqrt()
            / (2f64.powi(a as i32) * factorial(l))
            * ((2 * l + 1) as f64 / (4.0 * PI)).sqrt();
        for t in 0..=(l - a) / 2 {
            for u in 0..=t {
                let mut y_power = odd;
                while y_power <= a {
                    let sign = if (t + y_power / 2).is_multiple_of(2) {
                        1.0
                    } else {
                        -1.0
                    };
                    let value = sign
                        * 0.25f64.powi(t as i32)
                        * binomial(l, t)
                        * binomial(l - t, a + t)
                        * binomial(t, u)
                        * binomial(a, y_power);
                    let j = 2 * u + y_power;
                    let k = l - 2 * t - a;
                    let i = l - j - k;
                    matrix[(row, cartesian_index([i, j, k]))] += norm * value;
                    y_power += 2;
                }
            }
        }
    }
    matrix
}

/// Value of every S_lm at a point, m from −l to +l.
pub fn solid_harmonic_values(l: usize, point: &Vector3<f64>) -> DVector<f64> {
    let powers = cartesian_powers(l);
    let power = |base: f64, n: usize| base.powi(n as i32);
    let monomials = DVector::from_iterator(
        powers.len(),
        powers
            .iter()
            .map(|&[i, j, k]| power(point.x, i) * power(point.y, j) * power(point.z, k)),
    );
    solid_harmonics(l) * monomials
}

/// How the harmonics of one l mix when the axes are turned or mirrored: the matrix D with
/// S_l(R·r) = D(R)·S_l(r), orthogonal for an orthogonal R.
///
/// D(R) = Σ over a point set of S_l(R·r)·S_l(r)ᵀ times the inverse of Σ S_l(r)·S_l(r)ᵀ; exact, since
/// the harmonics of one l are closed under R and the points (a spiral) determine them.
pub fn turned_harmonics(l: usize, rotation: &Matrix3<f64>) -> DMatrix<f64> {
    let size = 2 * l + 1;
    let (mut mixed, mut gram) = (DMatrix::zeros(size, size), DMatrix::zeros(size, size));
    let points = 4 * size;
    for i in 0..points {
        // Golden-angle spiral: even coverage of the sphere.
        let z = 1.0 - (2 * i + 1) as f64 / points as f64;
        let (sin, cos) = (i as f64 * PI * (3.0 - 5f64.sqrt())).sin_cos();
        let ring = (1.0 - z * z).sqrt();
        let point = Vector3::new(ring * cos, ring * sin, z);
        let here = solid_harmonic_values(l, &point);
        let there = solid_harmonic_values(l, &(rotation * point));
        mixed += &there * here.transpose();
        gram += &here * here.transpose();
    }
    let inverse = gram
        .cholesky()
        .expect("the spiral determines the harmonics")
        .inverse();
    mixed * inverse
}

fn factorial(n: usize) -> f64 {
    (1..=n).map(|k| k as f64).product()
}

fn binomial(n: usize, k: usize) -> f64 {
    if k > n {
        0.0
    } else {
        factorial(n) / (factorial(k) * factorial(n - k))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn value(row: &[f64], l: usize, [x, y, z]: [f64; 3]) -> f64 {
        cartesian_powers(l)
            .iter()
            .zip(row)
            .map(|(&[i, j, k], c)| c * x.powi(i as i32) * y.powi(j as i32) * z.powi(k as i32))
            .sum()
    }

    fn rows(l: usize) -> Vec<Vec<f64>> {
        solid_harmonics(l)
            .row_iter()
            .map(|r| r.iter().copied().collect())
            .collect()
    }

    #[test]
    fn low_orders_are_the_textbook_ones() {
        let s1 = (3.0 / (4.0 * PI)).sqrt();
        let p = [0.3, -0.7, 1.1];
        let [x, y, z] = p;
        let dipoles: Vec<f64> = rows(1).iter().map(|r| value(r, 1, p) / s1).collect();
        for (found, expected) in dipoles.iter().zip([y, z, x]) {
            assert!((found - expected).abs() < 1e-14);
        }
        let s2 = (15.0 / (4.0 * PI)).sqrt();
        let expected = [
            x * y,
            y * z,
            (2.0 * z * z - x * x - y * y) / 12f64.sqrt(),
            x * z,
            (x * x - y * y) / 2.0,
        ];
        for (row, expected) in rows(2).iter().zip(expected) {
            assert!((value(row, 2, p) / s2 - expected).abs() < 1e-14);
        }
        // f, m = +3: x(x² − 3y²), positive.
        let f3 = value(&rows(3)[6], 3, p) / (35.0 / (32.0 * PI)).sqrt();
        assert!((f3 - x * (x * x - 3.0 * y * y)).abs() < 1e-13);
    }

    #[test]
    fn squares_sum_to_a_constant_on_the_sphere() {
        for l in 0..=6 {
            for p in [[0.3, -0.7, 1.1], [1.0, 0.0, 0.0], [-0.2, 0.9, 0.4]] {
                let r2: f64 = p.iter().map(|v| v * v).sum();
                let sum: f64 = rows(l).iter().map(|r| value(r, l, p).powi(2)).sum();
                let expected = r2.powi(l as i32) * (2 * l + 1) as f64 / (4.0 * PI);
                assert!((sum / expected - 1.0).abs() < 1e-12, "l = {l}");
            }
        }
    }

    #[test]
    fn laplace_gives_zero() {
        for l in 2..=6 {
            for row in rows(l) {
                let mut laplacian = vec![0.0; cartesian_count(l - 2)];
                for (&[i, j, k], c) in cartesian_powers(l).iter().zip(&row) {
                    let power = [i, j, k];
                    for axis in 0..3 {
                        if power[axis] >= 2 {
                            let mut lower = power;
                            lower[axis] -= 2;
                            let factor = (power[axis] * (power[axis] - 1)) as f64;
                            laplacian[cartesian_index(lower)] += c * factor;
                        }
                    }
                }
                assert!(laplacian.iter().all(|v| v.abs() < 1e-11), "l = {l}");
            }
        }
    }

    #[test]
    fn harmonics_are_orthonormal_on_the_sphere() {
        // ∫ x^i y^j z^k over the unit sphere, all even: 4π (i−1)!!(j−1)!!(k−1)!!/(i+j+k+1)!!.
        let double = |n: usize| -> f64 { (1..=n).rev().step_by(2).map(|v| v as f64).product() };
        for l in 0..=6 {
            let matrix = solid_harmonics(l);
            let powers = cartesian_powers(l);
            let moments = DMatrix::from_fn(powers.len(), powers.len(), |a, b| {
                let p: Vec<usize> = (0..3).map(|x| powers[a][x] + powers[b][x]).collect();
                if p.iter().any(|v| v % 2 == 1) {
                    return 0.0;
                }
                let odd = |v: usize| if v == 0 { 1.0 } else { double(v - 1) };
                4.0 * PI * p.iter().map(|&v| odd(v)).product::<f64>() / double(2 * l + 1)
            });
            let gram = &matrix * moments * matrix.transpose();
            let error = (gram - DMatrix::identity(2 * l + 1, 2 * l + 1)).amax();
            assert!(error < 1e-12, "l = {l}: {error:e}");
        }
    }

    #[test]
    fn turning_twice_is_turning_by_the_product() {
        let first = *nalgebra::Rotation3::from_euler_angles(0.4, -1.2, 2.2).matrix();
        let second = *nalgebra::Rotation3::from_euler_angles(-0.9, 0.3, 0.7).matrix();
        let mirror = Matrix3::from_diagonal(&Vector3::new(1.0, 1.0, -1.0));
        for l in 0..=5 {
            let one_by_one = turned_harmonics(l, &first) * turned_harmonics(l, &second);
            let at_once = turned_harmonics(l, &(first * second));
            assert!((&one_by_one - &at_once).amax() < 1e-12, "l = {l}");
            let identity = DMatrix::identity(2 * l + 1, 2 * l + 1);
            assert!(
                (&at_once * at_once.transpose() - identity).amax() < 1e-12,
                "l = {l}"
            );
            // A mirror through xy changes the sign where l + m is odd.
            let signs = turned_harmonics(l, &mirror);
            for row in 0..=2 * l {
                let sign = if row % 2 == 0 { 1.0 } else { -1.0 };
                assert!((signs[(row, row)] - sign).abs() < 1e-12);
            }
        }
    }
}

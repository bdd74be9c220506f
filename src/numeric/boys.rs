//! The Boys function F_m(T) = ∫₀¹ t^{2m} exp(−T t²) dt, eight arguments at a time.
//!
//! * T < 40: Taylor series of eight terms about the nearest point of a table of spacing 1/8, at
//!   the highest order only. The remainder is below (1/16)⁸/8! ≈ 6e-15 of F_m. Lower orders by
//!   downward recursion F_{m−1} = (2T F_m + e^{−T}) / (2m − 1), all terms positive, hence stable.
//! * T ≥ 40: F_0 = ½ √(π/T), short of the exact value by erfc(√40) < 4e-19, and upward recursion
//!   F_{m+1} = ((2m + 1) F_m − e^{−T}) / (2T), where nothing cancels while T exceeds m.
//!
//! The table itself comes from the series e^{−T} Σ_k (2T)^k / ((2m+1)(2m+3)…(2m+2k+1)), all
//! terms positive. Formulas: Helgaker, Jørgensen, Olsen, Molecular Electronic-Structure Theory
//! (Wiley 2000), section 9.8 (memory).

use super::lanes::{Eight, Kernel, Lanes, dispatch};
use pulp::Simd;
use std::sync::LazyLock;

/// Highest order that can be asked for.
pub const MAX_ORDER: usize = 16;

/// From here on the asymptotic form is used.
const LARGE: f64 = 40.0;
/// Table points per unit of T.
const PER_UNIT: usize = 8;
/// Terms of the Taylor series.
const TERMS: usize = 8;
/// Orders kept per point.
const COLUMNS: usize = MAX_ORDER + TERMS;
/// Points 0, 1/8, …, 40.
const POINTS: usize = LARGE as usize * PER_UNIT + 1;
/// Terms of the exponential's series about the same point: (1/16)¹⁰/10! < 1e-18.
const EXPONENTIAL_TERMS: usize = 10;

struct Table {
    /// F_m at each point, m = 0 … COLUMNS − 1.
    boys: Vec<[f64; COLUMNS]>,
    /// e^{−T} at each point.
    exponential: Vec<f64>,
}

static TABLE: LazyLock<Table> = LazyLock::new(|| {
    let argument = |i: usize| i as f64 / PER_UNIT as f64;
    Table {
        boys: (0..POINTS).map(|i| tabulated(argument(i))).collect(),
        exponential: (0..POINTS).map(|i| (-argument(i)).exp()).collect(),
    }
});

/// All orders at one argument: series at the top, recursion down.
fn tabulated(t: f64) -> [f64; COLUMNS] {
    let mut row = [0.0; COLUMNS];
    let decay = (-t).exp();
    let top = COLUMNS - 1;
    let mut term = 1.0 / (2 * top + 1) as f64;
    let mut sum = term;
    let mut k = 1;
    while term > 1e-18 * sum {
        term *= 2.0 * t / (2 * top + 2 * k + 1) as f64;
        sum += term;
        k += 1;
    }
    row[top] = decay * sum;
    for m in (1..COLUMNS).rev() {
        row[m - 1] = (2.0 * t * row[m] + decay) / (2 * m - 1) as f64;
    }
    row
}

/// F_0 … F_`order` of eight arguments T ≥ 0; `out[m]` holds order m of all lanes.
///
/// Meant to be inlined into a [`Kernel`]; `order` is at most [`MAX_ORDER`] and `out` longer.
#[inline(always)]
pub fn lanes<S: Simd, const N: usize>(
    simd: S,
    order: usize,
    t: Lanes<S, N>,
    out: &mut [Lanes<S, N>],
) {
    let mut arguments = Eight::ZERO;
    t.store(&mut arguments);
    let mut largest = 0.0f64;
    let mut smallest = f64::INFINITY;
    for x in arguments.0 {
        largest = largest.max(x);
        smallest = smallest.min(x);
    }
    if smallest >= LARGE {
        return asymptotic(simd, order, &arguments, t, out);
    }
    tabular(simd, order, &arguments, t, out);
    if largest >= LARGE {
        let mut far = [Lanes::splat(simd, 0.0); MAX_ORDER + 1];
        asymptotic(simd, order, &arguments, t, &mut far);
        for m in 0..=order {
            let (mut near_m, mut far_m) = (Eight::ZERO, Eight::ZERO);
            out[m].store(&mut near_m);
            far[m].store(&mut far_m);
            for lane in 0..8 {
                if arguments.0[lane] >= LARGE {
                    near_m.0[lane] = far_m.0[lane];
                }
            }
            out[m] = Lanes::load(&near_m);
        }
    }
}

/// The branch for T < [`LARGE`]; lanes beyond it give a finite number of no meaning.
#[inline(always)]
fn tabular<S: Simd, const N: usize>(
    simd: S,
    order: usize,
    arguments: &Eight,
    t: Lanes<S, N>,
    out: &mut [Lanes<S, N>],
) {
    let table = &*TABLE;
    let mut derivatives = [Eight::ZERO; TERMS];
    let mut points = Eight::ZERO;
    let mut decay = Eight::ZERO;
    let order = order.min(MAX_ORDER);
    for lane in 0..8 {
        let i = (arguments.0[lane].min(LARGE) * PER_UNIT as f64 + 0.5) as usize;
        let row = &table.boys[i][order..order + TERMS];
        for k in 0..TERMS {
            derivatives[k].0[lane] = row[k];
        }
        points.0[lane] = i as f64 / PER_UNIT as f64;
        decay.0[lane] = table.exponential[i];
    }
    // dF_m/dT = −F_{m+1}: a polynomial in −ΔT with coefficients F_{m+k} / k!.
    let step = Lanes::load(&points).sub(simd, t);
    let mut value = Lanes::load(&derivatives[TERMS - 1]);
    for k in (0..TERMS - 1).rev() {
        let scaled = step.mul(simd, Lanes::splat(simd, 1.0 / (k + 1) as f64));
        value = value.mul_add(simd, scaled, Lanes::load(&derivatives[k]));
    }
    let one = Lanes::splat(simd, 1.0);
    let mut exponential = one;
    for k in (0..EXPONENTIAL_TERMS - 1).rev() {
        let scaled = step.mul(simd, Lanes::splat(simd, 1.0 / (k + 1) as f64));
        exponential = exponential.mul_add(simd, scaled, one);
    }
    let exponential = exponential.mul(simd, Lanes::load(&decay));
    let twice = t.add(simd, t);
    out[order] = value;
    for m in (1..=order).rev() {
        value = value
            .mul_add(simd, twice, exponential)
            .mul(simd, Lanes::splat(simd, 1.0 / (2 * m - 1) as f64));
        out[m - 1] = value;
    }
}

/// The branch for T ≥ [`LARGE`]; smaller lanes give a number of no meaning.
#[inline(always)]
fn asymptotic<S: Simd, const N: usize>(
    simd: S,
    order: usize,
    arguments: &Eight,
    t: Lanes<S, N>,
    out: &mut [Lanes<S, N>],
) {
    let mut decay = Eight::ZERO;
    for lane in 0..8 {
        // Below 1e-300 nothing is left, and the argument may be huge.
        decay.0[lane] = (-arguments.0[lane].min(690.0)).exp();
    }
    let decay = Lanes::load(&decay);
    let half_over_t = Lanes::splat(simd, 0.5).div(simd, t);
    let mut value = Lanes::splat(simd, std::f64::consts::FRAC_PI_2)
        .mul(simd, half_over_t)
        .sqrt(simd);
    // √(π/2 · 1/(2T)) = ½ √(π/T)
    out[0] = value;
    for m in 0..order {
        value = value
            .mul(simd, Lanes::splat(simd, (2 * m + 1) as f64))
            .sub(simd, decay)
            .mul(simd, half_over_t);
        out[m + 1] = value;
    }
}

/// F_0 … F_`order` at one argument, for occasional use.
///
/// # Panics
/// If `order` exceeds [`MAX_ORDER`].
pub fn boys(order: usize, t: f64) -> Vec<f64> {
    assert!(order <= MAX_ORDER, "order {order} exceeds {MAX_ORDER}");
    struct One(usize, f64);
    impl Kernel for One {
        type Output = Vec<f64>;
        #[inline(always)]
        fn run<S: Simd, const N: usize>(self, simd: S) -> Vec<f64> {
            let mut out = [Lanes::<S, N>::splat(simd, 0.0); MAX_ORDER + 1];
            lanes(simd, self.0, Lanes::splat(simd, self.1), &mut out);
            let mut first = Eight::ZERO;
            (0..=self.0)
                .map(|m| {
                    out[m].store(&mut first);
                    first.0[0]
                })
                .collect()
        }
    }
    dispatch(One(order, t))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Tanh-sinh quadrature of the defining integral: an independent, slow way.
    fn by_quadrature(m: usize, t: f64) -> f64 {
        let h = 1.0 / 64.0;
        let mut sum = 0.0;
        for k in -400i32..=400 {
            let x = f64::from(k) * h;
            let s = std::f64::consts::FRAC_PI_2 * x.sinh();
            // u = (1 + tanh s) / 2 on (0, 1), written without cancellation near u = 0.
            let u = 1.0 / (1.0 + (-2.0 * s).exp());
            let weight = std::f64::consts::FRAC_PI_2 * x.cosh() / (2.0 * s.cosh() * s.cosh());
            if weight > 0.0 && u > 0.0 {
                sum += weight * u.powi(2 * m as i32) * (-t * u * u).exp();
            }
        }
        sum * h
    }

    #[test]
    fn agrees_with_quadrature_everywhere() {
        let mut worst = 0.0f64;
        for i in 0..400 {
            let t = 0.173 * f64::from(i) + 0.001 * f64::from(i * i);
            let values = boys(MAX_ORDER, t);
            for m in [0, 1, 2, 5, 9, 13, 16] {
                let exact = by_quadrature(m, t);
                worst = worst.max((values[m] / exact - 1.0).abs());
            }
        }
        assert!(worst < 2e-13, "largest relative error {worst:e}");
    }

    #[test]
    fn every_requested_order_is_right() {
        // The starting order of the recursion must not matter.
        for t in [0.0, 0.06, 3.3, 17.77, 39.99, 40.0, 41.5, 300.0, 1e6] {
            let all = boys(MAX_ORDER, t);
            for order in 0..=MAX_ORDER {
                let some = boys(order, t);
                for m in 0..=order {
                    let error = (some[m] / all[m] - 1.0).abs();
                    assert!(error < 2e-14, "F_{m}({t}) from order {order}: {error:e}");
                }
            }
        }
    }

    #[test]
    fn limits() {
        for (m, value) in boys(MAX_ORDER, 0.0).into_iter().enumerate() {
            assert!((value * (2 * m + 1) as f64 - 1.0).abs() < 1e-15);
        }
        // F_0(T) = √(π/T)/2 · erf(√T); erf(1) from Abramowitz and Stegun, table 7.1.
        let erf_one = 0.842_700_792_949_714_9;
        assert!((boys(0, 1.0)[0] - std::f64::consts::PI.sqrt() / 2.0 * erf_one).abs() < 1e-15);
    }
}

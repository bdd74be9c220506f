//! Area-normalised line shapes with their derivatives.
//!
//! One shape covers all cases: the Voigt profile, a Gaussian of full width at half maximum
//! `gaussian_fwhm` (the instrument) convolved with a Lorentzian of full width `lorentzian_fwhm`
//! (the lifetime). With either width zero it is exactly the other one. With d the distance from
//! the centre and k = 2√(ln 2)/gaussian_fwhm,
//!
//! ```text
//! V(d) = (k/√π) Re w(kd + ik·lorentzian_fwhm/2)        w: the Faddeeva function
//! ```
//!
//! so the width derivatives are those of w; the Gaussian one is the heat equation,
//! ∂V/∂gaussian_fwhm = gaussian_fwhm/(8 ln 2)·∂²V/∂d², which stays exact down to zero width.
//! Accuracy: that of [`crate::numeric::faddeeva`], relative in the wings as well as at the top.

use crate::numeric::faddeeva::{erfc, faddeeva, faddeeva_with_derivatives};
use nalgebra::Complex;
use std::f64::consts::{FRAC_1_PI, LN_2, PI};

/// Full width at half maximum of a Gaussian over its standard deviation: √(8 ln 2).
pub const GAUSSIAN_FWHM_PER_SD: f64 = 2.354_820_045_030_949_3;

/// A line shape of unit area, centred at 0. Widths and distances share one unit (eV here).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shape {
    gaussian_fwhm: f64,
    lorentzian_fwhm: f64,
}

/// Why a shape cannot be made.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
pub enum ShapeError {
    /// A width is negative, infinite or not a number.
    #[error(
        "a width must be a finite number and not negative: Gaussian {gaussian}, Lorentzian {lorentzian}"
    )]
    Width {
        /// Gaussian full width at half maximum as given.
        gaussian: f64,
        /// Lorentzian full width at half maximum as given.
        lorentzian: f64,
    },
    /// Both widths are zero.
    #[error("a line shape needs a width: Gaussian and Lorentzian are both zero")]
    NoWidth,
}

/// Value of a shape with its partial derivatives.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ShapeGradient {
    /// Value, per unit of the axis.
    pub value: f64,
    /// Derivative with respect to the position of the centre (minus that in the distance).
    pub centre: f64,
    /// Derivative with respect to the Gaussian full width at half maximum.
    pub gaussian_fwhm: f64,
    /// Derivative with respect to the Lorentzian full width at half maximum (one-sided at 0).
    pub lorentzian_fwhm: f64,
}

impl Shape {
    /// A shape of the given full widths at half maximum.
    pub fn new(gaussian_fwhm: f64, lorentzian_fwhm: f64) -> Result<Self, ShapeError> {
        let fits = |width: f64| width.is_finite() && width >= 0.0;
        if !fits(gaussian_fwhm) || !fits(lorentzian_fwhm) {
            return Err(ShapeError::Width {
                gaussian: gaussian_fwhm,
                lorentzian: lorentzian_fwhm,
            });
        }
        if gaussian_fwhm == 0.0 && lorentzian_fwhm == 0.0 {
            return Err(ShapeError::NoWidth);
        }
        Ok(Shape {
            gaussian_fwhm,
            lorentzian_fwhm,
        })
    }

    /// Full width at half maximum of the Gaussian part.
    pub fn gaussian_fwhm(&self) -> f64 {
        self.gaussian_fwhm
    }

    /// Full width at half maximum of the Lorentzian part.
    pub fn lorentzian_fwhm(&self) -> f64 {
        self.lorentzian_fwhm
    }

    /// This shape seen through a further Gaussian broadening: squares of Gaussian widths add.
    pub fn broadened(&self, gaussian_fwhm: f64) -> Result<Self, ShapeError> {
        Shape::new(
            self.gaussian_fwhm.hypot(gaussian_fwhm),
            self.lorentzian_fwhm,
        )
    }

    /// k of the module's formula.
    fn inverse_width(&self) -> f64 {
        2.0 * LN_2.sqrt() / self.gaussian_fwhm
    }

    /// Value at `distance` from the centre.
    pub fn value(&self, distance: f64) -> f64 {
        if self.gaussian_fwhm == 0.0 {
            let half = 0.5 * self.lorentzian_fwhm;
            return half * FRAC_1_PI / (distance * distance + half * half);
        }
        let k = self.inverse_width();
        let x = k * distance;
        let norm = k / PI.sqrt();
        if self.lorentzian_fwhm == 0.0 {
            return norm * (-x * x).exp();
        }
        norm * faddeeva(Complex::new(x, 0.5 * k * self.lorentzian_fwhm)).re
    }

    /// Value at `distance` from the centre with the derivatives in centre and widths.
    pub fn value_and_gradient(&self, distance: f64) -> ShapeGradient {
        if self.gaussian_fwhm == 0.0 {
            let half = 0.5 * self.lorentzian_fwhm;
            let square = distance * distance + half * half;
            let value = half * FRAC_1_PI / square;
            return ShapeGradient {
                value,
                centre: 2.0 * distance * value / square,
                gaussian_fwhm: 0.0,
                lorentzian_fwhm: 0.5 * FRAC_1_PI * (distance - half) * (distance + half)
                    / (square * square),
            };
        }
        let k = self.inverse_width();
        let norm = k / PI.sqrt();
        let z = Complex::new(k * distance, 0.5 * k * self.lorentzian_fwhm);
        let [w, first, second] = faddeeva_with_derivatives(z);
        ShapeGradient {
            value: norm * w.re,
            centre: -norm * k * first.re,
            gaussian_fwhm: norm * second.re / (2.0 * self.gaussian_fwhm),
            lorentzian_fwhm: -0.5 * norm * k * first.im,
        }
    }

    /// Adds `area` times the shape at `centre` to `out`, one value per entry of `axis`.
    pub fn add(&self, centre: f64, area: f64, axis: &[f64], out: &mut [f64]) {
        for (value, position) in out.iter_mut().zip(axis) {
            *value += area * self.value(position - centre);
        }
    }

    /// Area between the distances `low` and `high` (in this order) from the centre. Closed forms
    /// for the pure shapes; the Voigt profile by Gauss-Legendre quadrature in panels narrow
    /// enough for 10⁻¹² of the panel.
    pub fn area_between(&self, low: f64, high: f64) -> f64 {
        if low > 0.0 {
            return self.area_between(-high, -low); // the left wing has no 1 − small
        }
        if self.gaussian_fwhm == 0.0 {
            let half = 0.5 * self.lorentzian_fwhm;
            let below = |d: f64| half.atan2(-d) * FRAC_1_PI;
            return below(high) - below(low);
        }
        if self.lorentzian_fwhm == 0.0 {
            let k = self.inverse_width();
            let below = |d: f64| 0.5 * erfc(-k * d);
            return below(high) - below(low);
        }
        let panel = 0.25 * self.gaussian_fwhm.max(self.lorentzian_fwhm);
        let count = ((high - low) / panel).ceil().max(1.0);
        let width = (high - low) / count;
        (0..count as usize)
            .map(|k| self.panel_area(low + (k as f64 + 0.5) * width, 0.5 * width))
            .sum()
    }

    /// Eight-point Gauss-Legendre over one panel (nodes and weights: Abramowitz and Stegun 25.4).
    fn panel_area(&self, centre: f64, half: f64) -> f64 {
        const NODES: [(f64, f64); 4] = [
            (0.183_434_642_495_649_8, 0.362_683_783_378_362),
            (0.525_532_409_916_329, 0.313_706_645_877_887_3),
            (0.796_666_477_413_626_7, 0.222_381_034_453_374_5),
            (0.960_289_856_497_536_3, 0.101_228_536_290_376_3),
        ];
        half * NODES
            .iter()
            .map(|(node, weight)| {
                weight * (self.value(centre - half * node) + self.value(centre + half * node))
            })
            .sum::<f64>()
    }

    /// Full width at half maximum of the whole shape: Newton's iteration on the exact profile from
    /// the approximation of J. J. Olivero and R. L. Longbothum, J. Quant. Spectrosc. Radiat.
    /// Transfer 17, 233 (1977), which is within 0.02 %.
    pub fn fwhm(&self) -> f64 {
        if self.gaussian_fwhm == 0.0 {
            return self.lorentzian_fwhm;
        }
        if self.lorentzian_fwhm == 0.0 {
            return self.gaussian_fwhm;
        }
        let goal = 0.5 * self.value(0.0);
        let mut half = 0.5 * olivero_longbothum(self.gaussian_fwhm, self.lorentzian_fwhm);
        for _ in 0..20 {
            let there = self.value_and_gradient(half);
            let step = (there.value - goal) / there.centre;
            half += step;
            if step.abs() <= 1e-15 * half {
                break;
            }
        }
        2.0 * half
    }
}

/// Approximate width of a Voigt profile, within 0.02 %.
fn olivero_longbothum(gaussian: f64, lorentzian: f64) -> f64 {
    0.5346 * lorentzian + (0.2166 * lorentzian * lorentzian + gaussian * gaussian).sqrt()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn refuses_what_has_no_shape() {
        assert_eq!(Shape::new(0.0, 0.0), Err(ShapeError::NoWidth));
        for (gaussian, lorentzian) in [(-1.0, 1.0), (1.0, f64::NAN), (f64::INFINITY, 0.0)] {
            let refusal = Shape::new(gaussian, lorentzian);
            assert!(matches!(refusal, Err(ShapeError::Width { .. })));
        }
    }

    #[test]
    fn peaks_have_their_textbook_heights() {
        // Gaussian: 2√(ln 2/π)/fwhm; Lorentzian: 2/(π fwhm).
        let gaussian = Shape::new(2.0, 0.0).unwrap();
        assert!((gaussian.value(0.0) - (LN_2 / PI).sqrt()).abs() < 1e-15);
        assert!((gaussian.value(1.0) / gaussian.value(0.0) - 0.5).abs() < 1e-15);
        let lorentzian = Shape::new(0.0, 2.0).unwrap();
        assert!((lorentzian.value(0.0) - FRAC_1_PI).abs() < 1e-15);
        assert!((lorentzian.value(1.0) / lorentzian.value(0.0) - 0.5).abs() < 1e-15);
        assert!((GAUSSIAN_FWHM_PER_SD - (8.0 * LN_2).sqrt()).abs() < 1e-15);
    }

    #[test]
    fn broadening_adds_squares() {
        let shape = Shape::new(3.0, 1.0).unwrap().broadened(4.0).unwrap();
        assert_eq!((shape.gaussian_fwhm(), shape.lorentzian_fwhm()), (5.0, 1.0));
    }
}

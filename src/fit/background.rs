//! What lies under the bands: a polynomial that cannot become negative, and an exponential tail.

/// Shape of the background over a window.
///
/// The polynomial is a sum of Bernstein polynomials with coefficients that are not negative, so it
/// is positive throughout. The tail rises exponentially to one end of the window: slow electrons
/// scattered on their way pile up at high ionization energy.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Background {
    pub low: f64,
    pub high: f64,
    /// Degree of the polynomial.
    pub degree: usize,
    /// Which end a tail rises to, where there is one.
    pub tail: Option<End>,
}

/// An end of the window.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum End {
    Low,
    High,
}

impl Background {
    /// Number of parameters: polynomial coefficients, then amplitude and decay length of the tail.
    pub fn parameters(&self) -> usize {
        self.degree + 1 + if self.tail.is_some() { 2 } else { 0 }
    }

    /// Value at an energy, and the derivatives by the parameters where wanted.
    pub fn evaluate(
        &self,
        energy: f64,
        parameters: &[f64],
        derivatives: Option<&mut [f64]>,
    ) -> f64 {
        let t = (energy - self.low) / (self.high - self.low);
        let terms = bernstein(self.degree, t);
        let mut value = 0.0;
        for k in 0..=self.degree {
            value += parameters[k] * terms[k];
        }
        let tail = self.tail.map(|end| {
            let distance = match end {
                End::Low => energy - self.low,
                End::High => self.high - energy,
            };
            let (amplitude, decay) = (parameters[self.degree + 1], parameters[self.degree + 2]);
            let shape = (-distance / decay).exp();
            value += amplitude * shape;
            [shape, amplitude * shape * distance / (decay * decay)]
        });
        if let Some(out) = derivatives {
            out[..=self.degree].copy_from_slice(&terms[..=self.degree]);
            if let Some(tail) = tail {
                out[self.degree + 1..self.degree + 3].copy_from_slice(&tail);
            }
        }
        value
    }

    /// Coefficients of the same polynomial one degree up.
    pub fn raise(&self, parameters: &[f64]) -> Vec<f64> {
        let n = self.degree;
        let mut raised: Vec<f64> = (0..=n + 1)
            .map(|k| {
                let w = k as f64 / (n + 1) as f64;
                let left = if k > 0 { w * parameters[k - 1] } else { 0.0 };
                let right = if k <= n {
                    (1.0 - w) * parameters[k]
                } else {
                    0.0
                };
                left + right
            })
            .collect();
        raised.extend_from_slice(&parameters[n + 1..]);
        raised
    }

    /// Names of the parameters.
    pub fn names(&self) -> Vec<String> {
        let mut names: Vec<String> = (0..=self.degree)
            .map(|k| format!("background coefficient {k}"))
            .collect();
        if self.tail.is_some() {
            names.push("background tail height".into());
            names.push("background tail decay length".into());
        }
        names
    }
}

/// Highest degree of the polynomial.
pub(super) const HIGHEST_DEGREE: usize = 8;

/// All Bernstein polynomials of a degree at `t`.
fn bernstein(degree: usize, t: f64) -> [f64; HIGHEST_DEGREE + 1] {
    let mut b = [0.0; HIGHEST_DEGREE + 1];
    b[0] = 1.0;
    for n in 1..=degree {
        for k in (0..=n).rev() {
            let from_left = if k > 0 { t * b[k - 1] } else { 0.0 };
            let stays = if k < n { (1.0 - t) * b[k] } else { 0.0 };
            b[k] = from_left + stays;
        }
    }
    b
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cubic() -> Background {
        Background {
            low: 8.0,
            high: 12.0,
            degree: 3,
            tail: Some(End::High),
        }
    }

    #[test]
    fn equal_coefficients_are_a_constant() {
        for t in [0.0, 0.3, 1.0] {
            let sum: f64 = bernstein(5, t).iter().sum();
            assert!((sum - 1.0).abs() < 1e-15);
        }
    }

    #[test]
    fn raising_the_degree_changes_nothing() {
        let low = cubic();
        let p = [3.0, 0.5, 2.0, 7.0, 4.0, 0.8];
        let raised = low.raise(&p);
        let high = Background {
            degree: 4,
            ..low.clone()
        };
        for e in [8.0, 8.7, 10.0, 12.0] {
            let difference = low.evaluate(e, &p, None) - high.evaluate(e, &raised, None);
            assert!(difference.abs() < 1e-13);
        }
    }

    #[test]
    fn derivatives_agree_with_differences() {
        let b = cubic();
        let p = [3.0, 0.5, 2.0, 7.0, 4.0, 0.8];
        let mut d = [0.0; 6];
        b.evaluate(11.1, &p, Some(&mut d));
        for k in 0..6 {
            let h = 1e-6;
            let (mut up, mut down) = (p, p);
            up[k] += h;
            down[k] -= h;
            let slope = (b.evaluate(11.1, &up, None) - b.evaluate(11.1, &down, None)) / (2.0 * h);
            assert!((slope - d[k]).abs() < 1e-8, "{k}: {slope} {}", d[k]);
        }
    }
}

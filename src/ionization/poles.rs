//! Roots of a quasi-particle equation ω = ε + Σ_n r_n/(ω − x_n) with positive residues.
//!
//! Between two neighbouring poles x the function ω − ε − Σ(ω) rises from −∞ to +∞, so each gap
//! holds exactly one root, and bracketing finds it without jumping to another. A root's pole
//! strength is 1/(1 − Σ′); the strengths of all roots sum to 1.
//!
//! Which root is which. Scaling all residues from 0 to their value moves the roots but never across
//! a pole: the root in the gap that holds ε is the one *continuous* with Koopmans' value. The
//! *main* root is the strongest one. They are the same root wherever its strength is above ½.
//!
//! All roots of a window are found by dividing it: distant poles enter a small interval through an
//! interpolant on Chebyshev nodes, and only the near ones are summed one by one.

use std::f64::consts::PI;

/// Poles closer than this are one, hartree.
const SAME: f64 = 1e-10;
/// Residues below this are left out, hartree².
const NEGLIGIBLE: f64 = 1e-16;
/// Chebyshev nodes; poles at least half the width away from an interval: error 3.7^−28 of a term.
const NODES: usize = 28;
/// Poles that an interval may hold before it is divided.
const FEW: usize = 40;
/// Most bisection and Newton steps on one root.
const STEPS: usize = 200;

/// A root of the quasi-particle equation.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Root {
    /// ω, hartree.
    pub energy: f64,
    /// Pole strength, 0 to 1.
    pub strength: f64,
    /// ω − ε − Σ(ω), hartree.
    pub residual: f64,
}

/// The self-energy of one orbital as poles and residues.
#[derive(Debug, Clone, Default)]
pub struct Poles {
    energy: f64,
    positions: Vec<f64>,
    residues: Vec<f64>,
}

impl Poles {
    /// No poles yet; `energy` is ε, hartree.
    pub fn new(energy: f64) -> Self {
        Self {
            energy,
            ..Self::default()
        }
    }

    /// Adds a pole.
    pub fn push(&mut self, position: f64, residue: f64) {
        if residue > NEGLIGIBLE {
            self.positions.push(position);
            self.residues.push(residue);
        }
    }

    /// ε, hartree.
    pub fn energy(&self) -> f64 {
        self.energy
    }

    /// Number of poles.
    pub fn len(&self) -> usize {
        self.positions.len()
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.positions.is_empty()
    }

    /// Σ(ω) and Σ′(ω).
    pub fn self_energy(&self, omega: f64) -> (f64, f64) {
        sum(&self.positions, &self.residues, omega)
    }

    /// The root in the gap that holds ε.
    pub fn continuous(&self) -> Root {
        let mut below = f64::NEG_INFINITY;
        let mut above = f64::INFINITY;
        for &x in &self.positions {
            if x <= self.energy {
                below = below.max(x);
            } else {
                above = above.min(x);
            }
        }
        self.solve(below, above, |omega| self.self_energy(omega))
    }

    /// The strongest root. All roots of a window that grows around ε are looked at until the
    /// strength left over is too small to hold a stronger one.
    pub fn main(&self) -> Root {
        let continuous = self.continuous();
        if continuous.strength > 0.5 {
            return continuous;
        }
        let mut half_width = 0.25;
        loop {
            let roots = self.roots(self.energy - half_width, self.energy + half_width);
            let found: f64 = roots.iter().map(|r| r.strength).sum();
            let strongest = roots.into_iter().fold(continuous, |best, r| {
                if r.strength > best.strength { r } else { best }
            });
            if strongest.strength >= 1.0 - found - 1e-9 || half_width > 1e3 {
                return strongest;
            }
            half_width *= 2.0;
        }
    }

    /// All roots from `low` to below `high` (hartree), by rising ω.
    pub fn roots(&self, low: f64, high: f64) -> Vec<Root> {
        let mut out = Vec::new();
        if low >= high {
            return out;
        }
        let far = Far::zero(low, high);
        let mut all: Vec<(f64, f64)> = self
            .positions
            .iter()
            .copied()
            .zip(self.residues.iter().copied())
            .collect();
        all.sort_by(|a, b| a.0.total_cmp(&b.0));
        all.dedup_by(|next, kept| {
            let same = next.0 - kept.0 < SAME;
            if same {
                kept.1 += next.1;
            }
            same
        });
        self.divide(&all, &far, &mut out);
        out
    }

    /// Finds the roots of an interval: `near` are the poles that `far` does not cover.
    fn divide(&self, near: &[(f64, f64)], far: &Far, out: &mut Vec<Root>) {
        let (low, high) = (far.low, far.high);
        let reach = 0.5 * (high - low);
        let first = near.partition_point(|p| p.0 < low - reach);
        let last = near.partition_point(|p| p.0 <= high + reach);
        let mut far = far.clone();
        far.add(&near[..first]);
        far.add(&near[last..]);
        let near = &near[first..last];
        if near.len() > FEW && reach > 4.0 * SAME {
            let middle = 0.5 * (low + high);
            self.divide(near, &far.restricted(low, middle), out);
            self.divide(near, &far.restricted(middle, high), out);
            return;
        }
        let (positions, residues): (Vec<f64>, Vec<f64>) = near.iter().copied().unzip();
        let function = |omega: f64| {
            let (s, d) = sum(&positions, &residues, omega);
            let (t, e) = far.value(omega);
            (s + t, d + e)
        };
        let inside = positions
            .iter()
            .copied()
            .filter(|x| (low..high).contains(x));
        let mut edges = vec![low];
        edges.extend(inside);
        edges.push(high);
        for (k, pair) in edges.windows(2).enumerate() {
            let (left, right) = (pair[0], pair[1]);
            // At the ends of the interval, which are no poles, the sign has to be looked at.
            let misfit = |omega: f64| omega - self.energy - function(omega).0;
            let rises_from_below = k > 0 || left == right || misfit(left) <= 0.0;
            let ends_above = k + 2 < edges.len() || misfit(right) > 0.0;
            if left < right && rises_from_below && ends_above {
                out.push(self.solve(left, right, function));
            }
        }
    }

    /// The root between two poles: Newton's steps, kept inside the bracket by bisection.
    fn solve(&self, below: f64, above: f64, sigma: impl Fn(f64) -> (f64, f64)) -> Root {
        let (mut low, mut high) = (below, above);
        let mut omega = if low < self.energy && self.energy < high {
            self.energy
        } else {
            0.5 * (low + high)
        };
        let mut best = Root {
            energy: omega,
            strength: 0.0,
            residual: f64::INFINITY,
        };
        for _ in 0..STEPS {
            let (value, slope) = sigma(omega);
            let residual = omega - self.energy - value;
            if residual.is_finite() && residual.abs() <= best.residual.abs() {
                best = Root {
                    energy: omega,
                    strength: 1.0 / (1.0 - slope),
                    residual,
                };
            }
            if residual > 0.0 {
                high = omega;
            } else {
                low = omega;
            }
            let newton = omega - residual / (1.0 - slope);
            let next = if newton > low && newton < high {
                newton
            } else if low.is_infinite() {
                high - 2.0 * (1.0 + (self.energy - high).abs())
            } else if high.is_infinite() {
                low + 2.0 * (1.0 + (self.energy - low).abs())
            } else {
                0.5 * (low + high)
            };
            if next == omega || (next - omega).abs() < 4.0 * f64::EPSILON * omega.abs() {
                break;
            }
            omega = next;
        }
        best
    }
}

/// Σ r/(ω − x) and its derivative.
fn sum(positions: &[f64], residues: &[f64], omega: f64) -> (f64, f64) {
    let (mut value, mut slope) = (0.0, 0.0);
    for (x, r) in positions.iter().zip(residues) {
        let inverse = 1.0 / (omega - x);
        let term = r * inverse;
        value += term;
        slope -= term * inverse;
    }
    (value, slope)
}

/// The part of a self-energy that comes from distant poles, interpolated on an interval.
#[derive(Clone)]
struct Far {
    low: f64,
    high: f64,
    nodes: [f64; NODES],
    values: [f64; NODES],
    slopes: [f64; NODES],
}

impl Far {
    fn zero(low: f64, high: f64) -> Self {
        let node = |k| {
            let angle = PI * (k as f64 + 0.5) / NODES as f64;
            0.5 * (low + high) - 0.5 * (high - low) * angle.cos()
        };
        Self {
            low,
            high,
            nodes: std::array::from_fn(node),
            values: [0.0; NODES],
            slopes: [0.0; NODES],
        }
    }

    fn add(&mut self, poles: &[(f64, f64)]) {
        for k in 0..NODES {
            for &(x, r) in poles {
                let inverse = 1.0 / (self.nodes[k] - x);
                self.values[k] += r * inverse;
                self.slopes[k] -= r * inverse * inverse;
            }
        }
    }

    fn restricted(&self, low: f64, high: f64) -> Self {
        let mut part = Self::zero(low, high);
        for k in 0..NODES {
            (part.values[k], part.slopes[k]) = self.value(part.nodes[k]);
        }
        part
    }

    /// Barycentric interpolation (J.-P. Berrut, L. N. Trefethen, SIAM Rev. 46, 501, 2004).
    fn value(&self, omega: f64) -> (f64, f64) {
        let (mut value, mut slope, mut norm) = (0.0, 0.0, 0.0);
        for k in 0..NODES {
            let distance = omega - self.nodes[k];
            if distance == 0.0 {
                return (self.values[k], self.slopes[k]);
            }
            let sign = if k % 2 == 0 { 1.0 } else { -1.0 };
            let weight = sign * (PI * (k as f64 + 0.5) / NODES as f64).sin() / distance;
            value += weight * self.values[k];
            slope += weight * self.slopes[k];
            norm += weight;
        }
        (value / norm, slope / norm)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::linalg::symmetric_eigen;
    use nalgebra::DMatrix;

    fn arrow(count: usize, strength: f64) -> Poles {
        let mut poles = Poles::new(-0.9);
        for k in 0..count {
            let x = -2.0 + 3.7 * k as f64 / count as f64;
            poles.push(x, strength * (1.0 + (k as f64).sin()) / count as f64);
        }
        poles
    }

    /// The same problem as a symmetric arrowhead matrix.
    fn dense(poles: &Poles) -> (Vec<f64>, Vec<f64>) {
        let n = poles.len();
        let mut matrix = DMatrix::zeros(n + 1, n + 1);
        matrix[(0, 0)] = poles.energy;
        for k in 0..n {
            matrix[(k + 1, k + 1)] = poles.positions[k];
            matrix[(k + 1, 0)] = poles.residues[k].sqrt();
        }
        let (values, vectors) = symmetric_eigen(&matrix).expect("finite");
        let strengths = vectors.row(0).iter().map(|x| x * x).collect();
        (values.as_slice().to_vec(), strengths)
    }

    #[test]
    fn all_roots_are_those_of_the_arrowhead_matrix() {
        for (count, strength) in [(1, 0.1), (30, 0.02), (700, 0.1)] {
            let poles = arrow(count, strength);
            let (values, strengths) = dense(&poles);
            let roots = poles.roots(-10.0, 10.0);
            assert_eq!(roots.len(), values.len());
            for (root, (value, strength)) in roots.iter().zip(values.iter().zip(&strengths)) {
                assert!((root.energy - value).abs() < 1e-11, "{root:?} {value}");
                assert!(
                    (root.strength - strength).abs() < 1e-9,
                    "{root:?} {strength}"
                );
            }
            let total: f64 = roots.iter().map(|r| r.strength).sum();
            assert!((total - 1.0).abs() < 1e-9);
            let strongest = strengths.iter().copied().fold(0.0, f64::max);
            assert!((poles.main().strength - strongest).abs() < 1e-9);
            let window = poles.roots(-1.0, -0.5);
            let inside = values.iter().filter(|v| (-1.0..-0.5).contains(*v)).count();
            assert_eq!(window.len(), inside);
        }
    }

    #[test]
    fn weak_coupling_is_perturbation_theory() {
        let poles = arrow(50, 1e-8);
        let root = poles.continuous();
        let (shift, _) = poles.self_energy(-0.9);
        assert!((root.energy - (-0.9 + shift)).abs() < 1e-10);
        assert!(root.strength > 0.999);
        assert!(root.residual.abs() < 1e-14);
    }

    #[test]
    fn without_poles_the_root_is_koopmans() {
        let root = Poles::new(-0.4).main();
        assert_eq!((root.energy, root.strength), (-0.4, 1.0));
    }
}

//! The partial third-order self-energy P3 of a closed shell, and its renormalised form P3+.
//!
//! J. V. Ortiz, J. Chem. Phys. 104, 7599 (1996); renormalised: J. V. Ortiz, Int. J. Quantum Chem.
//! 105, 803 (2005) (memory). Beside the second-order term with one hole and two particles, the part
//! with two holes and a particle is taken with its third-order corrections from one side:
//!
//! Σ_pp(ω) = Σ^2p1h(ω) + Σ_n V_n [V_n + W_n + U_n(ω)]/(ω + d_n),
//!
//! n running over the two-hole states of [`super::adc`], d_n = ε_a − ε_k − ε_l, V the first-order
//! coupling, W the second-order coupling, and U_n = −Σ_m C_nm V_m/(ω + d_m) with the first-order
//! interaction C of the two-hole states. In P3+ the W term is divided by 1 + Y(ω), Y being minus its
//! ratio to the V² term. Against near-exact values both are off by 0.23 eV on average in the outer
//! valence region (one published set of 39 lines); in the inner valence region they mean nothing, since one
//! root per orbital is sought near the poles of Σ: such lines are told by a pole strength below
//! [`SAFE_STRENGTH`].

use super::adc::{AdcMatrix, build_for_p3};
use super::fitted::FittedOrbitals;
use super::many_body::ManyBodyError;
use super::poles::{Poles, Root};
use super::second_order::{Quasiparticle, push_particle_poles};
use nalgebra::DMatrix;

/// Pole strength from which on the renormalised form may be used.
pub const SAFE_STRENGTH: f64 = 0.8;
/// Newton steps.
const STEPS: usize = 60;
/// |ω − ε − Σ(ω)| at which a root is found, hartree.
const CONVERGED: f64 = 1e-10;
/// Longest Newton step, hartree.
const LONGEST_STEP: f64 = 0.1;

/// What P3 says of one orbital.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct P3Line {
    /// Orbital, from 0, frozen ones counted.
    pub orbital: usize,
    /// −ε, hartree.
    pub koopmans_hartree: f64,
    /// The P3 root; `None` where the iteration from Koopmans' value found none.
    pub plain: Option<Quasiparticle>,
    /// The P3+ root; `None` where none was found.
    pub renormalised: Option<Quasiparticle>,
}

impl P3Line {
    /// The renormalised line where it is safe: both roots found, both strong.
    pub fn safe(&self) -> Option<Quasiparticle> {
        let strong = |q: &Quasiparticle| (SAFE_STRENGTH..=1.0).contains(&q.pole_strength);
        self.plain
            .filter(strong)
            .and(self.renormalised.filter(strong))
    }
}

/// P3 and P3+ of the occupied orbitals that take part, counted without frozen ones.
pub fn lines(orbitals: &FittedOrbitals, wanted: std::ops::Range<usize>) -> Vec<P3Line> {
    let (matrix, second) = build_for_p3(orbitals);
    let energies = &orbitals.occupied_energies[wanted.clone()];
    let particle_poles: Vec<Poles> = wanted
        .clone()
        .map(|p| {
            let mut poles = Poles::new(orbitals.occupied_energies[p]);
            push_particle_poles(orbitals, p, &mut poles);
            poles
        })
        .collect();
    let problem = Problem {
        matrix: &matrix,
        first: matrix
            .coupling
            .columns(wanted.start, wanted.len())
            .into_owned(),
        second: second.columns(wanted.start, wanted.len()).into_owned(),
        particle_poles,
    };
    let plain = problem.solve(energies, false);
    let renormalised = problem.solve(energies, true);
    let line = |(place, p): (usize, usize)| {
        let orbital = orbitals.frozen + p;
        let found = |roots: &[Option<Root>]| {
            roots[place].map(|root| Quasiparticle {
                orbital,
                koopmans_hartree: -energies[place],
                ionization_hartree: -root.energy,
                pole_strength: root.strength,
                residual_hartree: root.residual,
            })
        };
        P3Line {
            orbital,
            koopmans_hartree: -energies[place],
            plain: found(&plain),
            renormalised: found(&renormalised),
        }
    };
    wanted.enumerate().map(line).collect()
}

/// Checks that the intermediates of [`lines`] fit.
///
/// # Errors
/// If they do not.
pub fn check_memory(orbitals: &FittedOrbitals, limit_bytes: u64) -> Result<(), ManyBodyError> {
    let (o, v) = (orbitals.occupied() as u64, orbitals.virtuals() as u64);
    // Five ring matrices, couplings and search vectors, one block of integrals.
    let needed_bytes = 8 * (5 * o * o * v * v + 7 * o * o * o * v + v * v * v);
    if needed_bytes > limit_bytes {
        return Err(ManyBodyError::Memory {
            method: "P3",
            needed_bytes,
            limit_bytes,
            occupied: orbitals.occupied(),
            virtuals: orbitals.virtuals(),
            auxiliaries: orbitals.auxiliaries(),
        });
    }
    Ok(())
}

struct Problem<'a> {
    matrix: &'a AdcMatrix,
    /// V of every orbital treated.
    first: DMatrix<f64>,
    /// W of every orbital treated.
    second: DMatrix<f64>,
    particle_poles: Vec<Poles>,
}

impl Problem<'_> {
    /// Newton's steps from Koopmans' values, all orbitals at once.
    fn solve(&self, energies: &[f64], renormalised: bool) -> Vec<Option<Root>> {
        let mut omegas = energies.to_vec();
        let mut roots: Vec<Option<Root>> = vec![None; energies.len()];
        for _ in 0..STEPS {
            let open: Vec<usize> = (0..energies.len())
                .filter(|&k| roots[k].is_none())
                .collect();
            if open.is_empty() {
                break;
            }
            let values = self.self_energies(&omegas, &open, renormalised);
            for (&k, (value, slope)) in open.iter().zip(values) {
                let residual = omegas[k] - energies[k] - value;
                if residual.abs() < CONVERGED {
                    roots[k] = Some(Root {
                        energy: omegas[k],
                        strength: 1.0 / (1.0 - slope),
                        residual,
                    });
                }
                let step = residual / (1.0 - slope);
                omegas[k] -= step.clamp(-LONGEST_STEP, LONGEST_STEP);
            }
        }
        roots
    }

    /// Σ and Σ′ of the orbitals `open`, each at its own ω.
    fn self_energies(&self, omegas: &[f64], open: &[usize], renormalised: bool) -> Vec<(f64, f64)> {
        let energies = &self.matrix.two_hole;
        let mut scaled = DMatrix::zeros(energies.len(), open.len());
        for (column, &k) in open.iter().enumerate() {
            let v = self.first.column(k);
            for (n, d) in energies.iter().enumerate() {
                scaled[(n, column)] = v[n] / (omegas[k] + d);
            }
        }
        let turned = match &self.matrix.interaction {
            Some(interaction) => interaction.apply(&scaled, self.matrix.shape),
            None => DMatrix::zeros(energies.len(), open.len()),
        };
        let one = |(column, &k): (usize, &usize)| {
            let (v, w) = (self.first.column(k), self.second.column(k));
            // Value and slope of the V², VW and VU terms.
            let (mut vv, mut vw, mut vu) = ([0.0; 2], [0.0; 2], [0.0; 2]);
            for (n, d) in energies.iter().enumerate() {
                let inverse = 1.0 / (omegas[k] + d);
                let x = scaled[(n, column)];
                vv[0] += x * v[n];
                vv[1] -= x * v[n] * inverse;
                vw[0] += x * w[n];
                vw[1] -= x * w[n] * inverse;
                vu[0] -= x * turned[(n, column)];
                vu[1] += 2.0 * x * inverse * turned[(n, column)];
            }
            if renormalised && vv[0] != 0.0 {
                // A/(1 − A/B) with A the VW and B the V² term.
                let (a, b) = (vw[0], vv[0]);
                let gap = b - a;
                let slope = (vw[1] * b + a * vv[1]) / gap - a * b * (vv[1] - vw[1]) / (gap * gap);
                vw = [a * b / gap, slope];
            }
            let (value, slope) = self.particle_poles[k].self_energy(omegas[k]);
            (value + vv[0] + vw[0] + vu[0], slope + vv[1] + vw[1] + vu[1])
        };
        open.iter().enumerate().map(one).collect()
    }
}

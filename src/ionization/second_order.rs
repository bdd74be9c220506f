//! Diagonal second-order Dyson self-energy of a closed shell.
//!
//! Σ_pp(ω) = Σ_iab (pa|ib)[2(pa|ib) − (pb|ia)]/(ω + ε_i − ε_a − ε_b)
//!         + Σ_ija (pi|ja)[2(pi|ja) − (pj|ia)]/(ω + ε_a − ε_i − ε_j)
//! (Szabo and Ostlund, Modern Quantum Chemistry, chapter 7). The quasi-particle equation
//! ω = ε_p + Σ_pp(ω) is solved between its poles, see [`super::poles`].
//!
//! One orbital is treated at a time and no amplitudes are stored: cost o·v²·N per orbital, memory
//! that of one orbital's poles, o·v²/2 of them. Outer-valence energies come out 0.7 eV too low on
//! average; below about 20 eV a line often breaks up, and then one root per orbital is no answer:
//! [`Quasiparticle::pole_strength`] tells.

use super::fitted::FittedOrbitals;
use super::poles::{Poles, Root};
use crate::numeric::gemm::gemm;
use crate::numeric::linalg::{view, view_mut};
use nalgebra::DMatrix;

/// The quasi-particle line of one orbital.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Quasiparticle {
    /// Orbital, from 0, frozen ones counted.
    pub orbital: usize,
    /// Koopmans' ionization energy −ε, hartree.
    pub koopmans_hartree: f64,
    /// Ionization energy −ω, hartree.
    pub ionization_hartree: f64,
    /// Pole strength, 0 to 1.
    pub pole_strength: f64,
    /// ω − ε − Σ(ω), hartree.
    pub residual_hartree: f64,
}

impl Quasiparticle {
    pub(super) fn new(orbital: usize, energy: f64, root: Root) -> Self {
        Self {
            orbital,
            koopmans_hartree: -energy,
            ionization_hartree: -root.energy,
            pole_strength: root.strength,
            residual_hartree: root.residual,
        }
    }
}

/// The strongest line of every occupied orbital that takes part, by rising orbital.
pub fn quasiparticles(orbitals: &FittedOrbitals) -> Vec<Quasiparticle> {
    (0..orbitals.occupied())
        .map(|p| {
            let poles = self_energy(orbitals, p);
            Quasiparticle::new(orbitals.frozen + p, poles.energy(), poles.main())
        })
        .collect()
}

/// The self-energy of occupied orbital `p` (counted without frozen ones) as poles.
///
/// # Panics
/// If `p` is out of range.
pub fn self_energy(orbitals: &FittedOrbitals, p: usize) -> Poles {
    let mut poles = Poles::new(orbitals.occupied_energies[p]);
    push_particle_poles(orbitals, p, &mut poles);
    let (o, v) = (orbitals.occupied(), orbitals.virtuals());
    let (e_o, e_v) = (&orbitals.occupied_energies, &orbitals.virtual_energies);
    // (pi|ja) in row i, column j·v + a.
    let mut g = DMatrix::zeros(o, o * v);
    let own = view(&orbitals.oo).subrows(p * o, o);
    gemm(
        view_mut(&mut g),
        false,
        1.0,
        own,
        view(&orbitals.ov).transpose(),
    );
    for j in 0..o {
        for a in 0..v {
            for i in 0..=j {
                let residue = pair_residue(g[(i, j * v + a)], g[(j, i * v + a)], i == j);
                poles.push(e_o[i] + e_o[j] - e_v[a], residue);
            }
        }
    }
    poles
}

/// Adds the poles with one hole and two particles, which lie above all virtual energies.
pub(super) fn push_particle_poles(orbitals: &FittedOrbitals, p: usize, poles: &mut Poles) {
    let (o, v) = (orbitals.occupied(), orbitals.virtuals());
    let (e_o, e_v) = (&orbitals.occupied_energies, &orbitals.virtual_energies);
    let own = view(&orbitals.ov).subrows(p * v, v);
    // (pa|ib) in row a, column b, for one i at a time.
    let mut h = DMatrix::zeros(v, v);
    for i in 0..o {
        let other = view(&orbitals.ov).subrows(i * v, v);
        gemm(view_mut(&mut h), false, 1.0, own, other.transpose());
        for b in 0..v {
            for a in 0..=b {
                let residue = pair_residue(h[(a, b)], h[(b, a)], a == b);
                poles.push(e_v[a] + e_v[b] - e_o[i], residue);
            }
        }
    }
}

/// x(2x − y) + y(2y − x), or x² where both are the same integral.
fn pair_residue(x: f64, y: f64, same: bool) -> f64 {
    if same {
        x * x
    } else {
        2.0 * (x * x + y * y - x * y)
    }
}

//! Which orbitals belong together: degenerate sets.

use super::{Orbitals, SpinOrbitals};
use crate::levels::Spin;
use std::ops::Range;

/// Orbitals whose energies lie within this of the lowest of their set count as degenerate, hartree.
///
/// 1e-4 hartree is 2.7 meV: a tenth of a good spectrometer's resolution and far below the error of
/// any method here, so nothing that could be told apart is merged. It is above the splitting that
/// coordinates rounded to 1e-4 Å cause (orbital energies change by up to about 0.5 hartree/Å).
pub const DEGENERACY_TOLERANCE_HARTREE: f64 = 1e-4;

impl SpinOrbitals {
    /// Number of occupied orbitals.
    pub fn occupied(&self) -> usize {
        self.occupations.iter().filter(|&&n| n > 0.5).count()
    }

    /// All orbitals cut into sets of equal energy and equal occupation, by rising energy.
    pub fn degenerate_sets(&self) -> Vec<Range<usize>> {
        let mut sets: Vec<Range<usize>> = Vec::new();
        for i in 0..self.energies.len() {
            let joins = sets.last().is_some_and(|set| {
                let first = set.start;
                self.energies[i] - self.energies[first] <= DEGENERACY_TOLERANCE_HARTREE
                    && self.occupations[i] == self.occupations[first]
            });
            match sets.last_mut() {
                Some(set) if joins => set.end = i + 1,
                _ => sets.push(i..i + 1),
            }
        }
        sets
    }
}

impl Orbitals {
    /// The sets of orbitals with the spin that each is for.
    pub fn by_spin(&self) -> Vec<(Spin, &SpinOrbitals)> {
        match self {
            Orbitals::Restricted(both) => vec![(Spin::Both, both)],
            Orbitals::Unrestricted { alpha, beta } => {
                vec![(Spin::Alpha, alpha), (Spin::Beta, beta)]
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::{DMatrix, DVector};

    #[test]
    fn sets_end_at_gaps_and_at_the_last_occupied_orbital() {
        let energies = [
            -20.0, -0.7, -0.699_95, -0.699_89, -0.5, -0.5, -0.5, -0.499_99,
        ];
        let occupations = [2.0, 2.0, 2.0, 2.0, 2.0, 2.0, 0.0, 0.0];
        let orbitals = SpinOrbitals {
            coefficients: DMatrix::identity(8, 8),
            energies: DVector::from_row_slice(&energies),
            occupations: DVector::from_row_slice(&occupations),
        };
        // The set is measured from its first member, so a ladder of small steps does not merge.
        assert_eq!(orbitals.degenerate_sets(), [0..1, 1..3, 3..4, 4..6, 6..8]);
        assert_eq!(orbitals.occupied(), 6);
    }
}

//! The nuclei about their centre: what a symmetry search looks at.

use crate::molecule::Molecule;
use nalgebra::{Matrix3, SymmetricEigen, Vector3};

/// Elements and positions about the centre of nuclear charge, which every operation leaves in
/// place.
pub(super) struct Body {
    pub numbers: Vec<u8>,
    /// Bohr, about the centre.
    pub positions: Vec<Vector3<f64>>,
    /// The centre in the frame of the input, bohr.
    pub centre: Vector3<f64>,
}

impl Body {
    pub fn new(molecule: &Molecule) -> Self {
        let mut centre = Vector3::zeros();
        let mut charge = 0.0;
        for atom in &molecule.atoms {
            centre += atom.position_bohr * f64::from(atom.number);
            charge += f64::from(atom.number);
        }
        centre /= charge.max(1.0);
        Body {
            numbers: molecule.atoms.iter().map(|a| a.number).collect(),
            positions: molecule
                .atoms
                .iter()
                .map(|a| a.position_bohr - centre)
                .collect(),
            centre,
        }
    }

    pub fn len(&self) -> usize {
        self.numbers.len()
    }

    /// The direction of the molecule if no atom is farther than `limit` (bohr) from one line
    /// through the centre.
    pub fn line(&self, limit: f64) -> Option<Vector3<f64>> {
        let mut spread = Matrix3::zeros();
        for position in &self.positions {
            spread += position * position.transpose();
        }
        let eigen = SymmetricEigen::new(spread);
        let axis: Vector3<f64> = eigen
            .eigenvectors
            .column(eigen.eigenvalues.imax())
            .into_owned();
        let off = |p: &Vector3<f64>| (p - axis * axis.dot(p)).norm();
        (self.len() <= 2 || self.positions.iter().all(|p| off(p) <= limit)).then_some(axis)
    }

    /// The permutation that turns a line end for end, if every atom finds a partner of its element
    /// within `limit` (bohr).
    pub fn reversal(&self, axis: &Vector3<f64>, limit: f64) -> Option<Vec<usize>> {
        let along: Vec<f64> = self.positions.iter().map(|p| axis.dot(p)).collect();
        let mut order: Vec<usize> = (0..self.len()).collect();
        order.sort_by(|&i, &j| along[i].total_cmp(&along[j]));
        let mut permutation = vec![0; self.len()];
        for (&i, &j) in order.iter().zip(order.iter().rev()) {
            if self.numbers[i] != self.numbers[j] || (along[i] + along[j]).abs() > limit {
                return None;
            }
            permutation[i] = j;
        }
        Some(permutation)
    }
}

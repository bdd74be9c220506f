//! Shape of the nuclear frame (linear, planar, solid) and what it makes of σ and π.

use super::intrinsic::IntrinsicOrbitals;
use crate::basis::harmonics::turned_harmonics;
use crate::molecule::Molecule;
use crate::units::angstrom_to_bohr;
use nalgebra::{DVector, Matrix3, Rotation3, Vector3};
use std::f64::consts::PI;

/// Atoms within this of one line or plane make a linear or planar molecule, Å.
pub const SHAPE_TOLERANCE_ANGSTROM: f64 = 0.05;

/// Shape of the nuclear frame.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Frame {
    /// A single atom.
    Atom,
    /// All atoms on a line along this unit vector.
    Linear(Vector3<f64>),
    /// All atoms in a plane with this unit normal.
    Planar(Vector3<f64>),
    /// Neither.
    Solid,
}

impl Frame {
    /// The shape of a molecule, from the principal axes of its unweighted atoms.
    pub fn of(molecule: &Molecule) -> Frame {
        let count = molecule.atoms.len();
        if count == 1 {
            return Frame::Atom;
        }
        let centre = molecule
            .atoms
            .iter()
            .map(|a| a.position_bohr)
            .sum::<Vector3<f64>>()
            / count as f64;
        let spread = molecule.atoms.iter().fold(Matrix3::zeros(), |sum, a| {
            let d = a.position_bohr - centre;
            sum + d * d.transpose()
        });
        let eigen = spread.symmetric_eigen();
        let mut order = [0, 1, 2];
        order.sort_by(|&a, &b| eigen.eigenvalues[a].total_cmp(&eigen.eigenvalues[b]));
        let axis = |k: usize| eigen.eigenvectors.column(order[k]).into_owned();
        let tolerance = angstrom_to_bohr(SHAPE_TOLERANCE_ANGSTROM);
        let flat_along = |direction: &Vector3<f64>| {
            let height = |a: &crate::molecule::Atom| (a.position_bohr - centre).dot(direction);
            molecule.atoms.iter().all(|a| height(a).abs() < tolerance)
        };
        match (flat_along(&axis(0)), flat_along(&axis(1))) {
            (true, true) => Frame::Linear(axis(2)),
            (true, false) => Frame::Planar(axis(0)),
            _ => Frame::Solid,
        }
    }
}

/// How much of each occupied orbital is σ and how much π in the frame.
///
/// In a linear molecule π is |m| = 1 about the axis (so δ counts neither way); in a plane π is
/// what changes sign on reflection. `None` for atoms and solid molecules, where the words have no
/// global meaning.
pub fn pi_shares(frame: &Frame, intrinsic: &IntrinsicOrbitals) -> Option<DVector<f64>> {
    let direction = match frame {
        Frame::Linear(axis) => axis,
        Frame::Planar(normal) => normal,
        Frame::Atom | Frame::Solid => return None,
    };
    let planar = matches!(frame, Frame::Planar(_));
    let turn = turn_to_z(direction);
    let mut shares = DVector::zeros(intrinsic.orthonormal.ncols());
    for shell in &intrinsic.minimal.shells {
        let turned =
            turned_harmonics(shell.l, &turn) * intrinsic.orthonormal.rows(shell.first, shell.len());
        for row in 0..shell.len() {
            let m = row.abs_diff(shell.l);
            let counts = if planar {
                (shell.l + m) % 2 == 1
            } else {
                m == 1
            };
            if counts {
                for i in 0..shares.len() {
                    shares[i] += turned[(row, i)].powi(2);
                }
            }
        }
    }
    Some(shares)
}

/// A rotation that carries a direction to z.
pub fn turn_to_z(direction: &Vector3<f64>) -> Matrix3<f64> {
    let half_turn = Rotation3::from_axis_angle(&Vector3::x_axis(), PI);
    Rotation3::rotation_between(direction, &Vector3::z())
        .unwrap_or(half_turn)
        .into_inner()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn frame(xyz: &str) -> Frame {
        let text = format!("{}\n\n{xyz}", xyz.lines().count());
        Frame::of(&Molecule::from_xyz(&text, "test", 0, None).unwrap())
    }

    #[test]
    fn shapes_are_recognised_in_any_position() {
        assert_eq!(frame("Ar 1 2 3"), Frame::Atom);
        let Frame::Linear(axis) = frame("O 1 0 0\nC 2 1 0\nO 3 2 0.03") else {
            panic!()
        };
        assert!(
            axis.dot(&Vector3::new(0.5f64.sqrt(), 0.5f64.sqrt(), 0.0))
                .abs()
                > 0.999
        );
        let Frame::Planar(normal) = frame("O 0 0 5\nH 0.76 0.59 5\nH -0.76 0.59 5") else {
            panic!()
        };
        assert!((normal.z.abs() - 1.0).abs() < 1e-12);
        assert_eq!(
            frame("N 0 0 0.3\nH 0.94 0 0\nH -0.47 0.81 0\nH -0.47 -0.81 0"),
            Frame::Solid
        );
    }

    #[test]
    fn turning_to_z_works_for_every_direction() {
        for direction in [
            Vector3::z(),
            -Vector3::z(),
            Vector3::x(),
            Vector3::new(0.6, 0.0, -0.8),
        ] {
            assert!((turn_to_z(&direction) * direction - Vector3::z()).norm() < 1e-12);
            // A p orbital along the direction is all m = 0 (row 1 of y, z, x).
            let p = DVector::from_row_slice(&[direction.y, direction.z, direction.x]);
            let turned = turned_harmonics(1, &turn_to_z(&direction)) * p;
            assert!((turned[1] - 1.0).abs() < 1e-12);
        }
    }
}

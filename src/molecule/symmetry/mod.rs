//! The point group of a molecule within a tolerance, its operations, its standard frame and its
//! irreducible representations.
//!
//! The tolerance has one meaning: no atom is moved by more than it when the geometry is made
//! exactly symmetric. Operations are searched for in the geometry itself (`search`), the group is
//! named from the kinds of operations (`frame`), and the operations handed out are the exact ones
//! of the ideal group (`group`), laid over the molecule by least squares. The standard frame
//! follows R. S. Mulliken, J. Chem. Phys. 23, 1997 (1955); see `docs/symmetry.md`.
//!
//! Valid for any molecule; axes of any order. A linear molecule has infinitely many operations, of
//! which it gets as many as tell the angular momenta |m| ≤ 5 about the axis apart.

mod body;
mod frame;
mod group;
mod schoenflies;
mod search;

pub use group::Irrep;
pub use schoenflies::Schoenflies;

use super::Molecule;
use crate::units::{angstrom_to_bohr, bohr_to_angstrom};
use body::Body;
use group::IdealGroup;
use nalgebra::{Matrix3, Vector3};

/// Tolerance that takes in geometries printed to two or three decimals of an Å, and structures
/// optimised without symmetry.
pub const DEFAULT_TOLERANCE_ANGSTROM: f64 = 0.01;

/// How unlike an ideal operation a found one may look, largest matrix element, before a frame is
/// given up.
const MATCH_LIMIT: f64 = 0.5;

/// Frames whose misfits differ by less than this fit equally well.
const SAME_MISFIT: f64 = 0.02;

/// A symmetry operation about the origin of the group.
#[derive(Debug, Clone, PartialEq)]
pub struct Operation {
    /// Orthogonal matrix in the standard frame: x → R·x.
    pub matrix: Matrix3<f64>,
    /// The same in the frame of the input.
    pub input_matrix: Matrix3<f64>,
    /// Atom i is taken to the place of atom `permutation[i]`.
    pub permutation: Vec<usize>,
}

/// The point group of a molecule, laid over it.
#[derive(Debug, Clone, PartialEq)]
pub struct PointGroup {
    /// Symbol.
    pub symbol: Schoenflies,
    /// Fixed point of all operations: the centre of nuclear charge, bohr.
    pub origin_bohr: Vector3<f64>,
    /// Into the standard frame: x′ = rotation·(x − origin); a proper rotation.
    pub rotation: Matrix3<f64>,
    /// Operations, identity first: all of a finite group, a sufficient part of an infinite one
    /// (for an atom, identity and inversion).
    pub operations: Vec<Operation>,
    /// Irreducible representations; none for an atom, whose orbitals go by l.
    pub irreps: Vec<Irrep>,
    /// Largest distance that an atom must move for exact symmetry, Å.
    pub deviation_angstrom: f64,
    /// Tolerance that the search was given, Å.
    pub tolerance_angstrom: f64,
    symmetric_bohr: Vec<Vector3<f64>>,
}

impl PointGroup {
    /// The molecule with exact symmetry, in the place and orientation of the input.
    pub fn symmetrised(&self, molecule: &Molecule) -> Molecule {
        let place = |s: &Vector3<f64>| self.rotation.transpose() * s + self.origin_bohr;
        self.with_positions(molecule, place)
    }

    /// The molecule with exact symmetry, in the standard frame.
    pub fn standardised(&self, molecule: &Molecule) -> Molecule {
        self.with_positions(molecule, |s| *s)
    }

    fn with_positions(
        &self,
        molecule: &Molecule,
        place: impl Fn(&Vector3<f64>) -> Vector3<f64>,
    ) -> Molecule {
        let mut moved = molecule.clone();
        for (atom, position) in moved.atoms.iter_mut().zip(&self.symmetric_bohr) {
            atom.position_bohr = place(position);
        }
        moved
    }

    /// Atoms that the operations take into each other, each set by rising index.
    pub fn equivalent_atoms(&self) -> Vec<Vec<usize>> {
        let mut sets: Vec<Vec<usize>> = Vec::new();
        for atom in 0..self.symmetric_bohr.len() {
            if sets.iter().any(|set| set.contains(&atom)) {
                continue;
            }
            let mut set: Vec<usize> = self
                .operations
                .iter()
                .map(|operation| operation.permutation[atom])
                .collect();
            set.sort_unstable();
            set.dedup();
            sets.push(set);
        }
        sets
    }
}

/// Finds the point group: the largest whose exact symmetry moves no atom by more than the
/// tolerance (Å). With a generous tolerance it is the parent group of a near-symmetric molecule.
pub fn find(molecule: &Molecule, tolerance_angstrom: f64) -> PointGroup {
    let body = Body::new(molecule);
    let tolerance = angstrom_to_bohr(tolerance_angstrom.max(0.0));
    let laid = if body.len() <= 1 {
        Laid::new(Schoenflies::Atom, Matrix3::identity(), &body, |_| {
            vec![0; body.len()]
        })
    } else if let Some(laid) = linear(&body, tolerance) {
        laid
    } else {
        bent(molecule, &body, tolerance)
    };
    let operations = laid
        .group
        .operations
        .iter()
        .zip(laid.permutations)
        .map(|(matrix, permutation)| Operation {
            matrix: *matrix,
            input_matrix: laid.rotation.transpose() * matrix * laid.rotation,
            permutation,
        })
        .collect();
    PointGroup {
        symbol: laid.symbol,
        origin_bohr: body.centre,
        rotation: laid.rotation,
        operations,
        irreps: laid.group.irreps,
        deviation_angstrom: bohr_to_angstrom(laid.deviation),
        tolerance_angstrom,
        symmetric_bohr: laid.symmetric,
    }
}

/// An ideal group laid over a body.
struct Laid {
    symbol: Schoenflies,
    group: IdealGroup,
    rotation: Matrix3<f64>,
    permutations: Vec<Vec<usize>>,
    symmetric: Vec<Vector3<f64>>,
    deviation: f64,
}

impl Laid {
    /// Lays a group over a body from a first rotation, which is then fitted: positions and
    /// their symmetric average in turn, each step bringing the two closer.
    fn new(
        symbol: Schoenflies,
        rotation: Matrix3<f64>,
        body: &Body,
        permutation: impl Fn(usize) -> Vec<usize>,
    ) -> Laid {
        let group = group::ideal(symbol);
        let permutations: Vec<Vec<usize>> = (0..group.operations.len()).map(permutation).collect();
        let mut laid = Laid {
            symbol,
            group,
            rotation,
            permutations,
            symmetric: Vec::new(),
            deviation: 0.0,
        };
        for _ in 0..100 {
            laid.average(body);
            let mut covariance = Matrix3::zeros();
            for (s, p) in laid.symmetric.iter().zip(&body.positions) {
                covariance += s * p.transpose();
            }
            // Where the atoms leave a rotation open (on a line), it stays as it is.
            covariance += laid.rotation * 1e-6;
            let Some(better) = search::nearest_orthogonal(&covariance, 1.0) else {
                break;
            };
            let change = (better - laid.rotation).amax();
            laid.rotation = better;
            if change < 1e-14 {
                break;
            }
        }
        laid.average(body);
        laid
    }

    /// s_p(i) = mean over the operations of R·x_i.
    fn average(&mut self, body: &Body) {
        let turned: Vec<Vector3<f64>> = body.positions.iter().map(|p| self.rotation * p).collect();
        let mut mean = vec![Vector3::zeros(); turned.len()];
        for (operation, permutation) in self.group.operations.iter().zip(&self.permutations) {
            for (position, &image) in turned.iter().zip(permutation) {
                mean[image] += operation * position;
            }
        }
        let order = self.group.operations.len() as f64;
        mean.iter_mut().for_each(|s| *s /= order);
        self.deviation = mean
            .iter()
            .zip(&turned)
            .map(|(s, t)| (s - t).norm())
            .fold(0.0, f64::max);
        self.symmetric = mean;
    }
}

fn linear(body: &Body, tolerance: f64) -> Option<Laid> {
    let axis = body.line(tolerance)?;
    let frames = frame::candidate_frames(std::iter::once(&mirror_across(&axis)));
    let rotation = closest_to_input(frames)?;
    let stay: Vec<usize> = (0..body.len()).collect();
    if let Some(reversal) = body.reversal(&axis, 2.0 * tolerance) {
        let ideal = group::ideal(Schoenflies::LinearCentred);
        let laid = Laid::new(Schoenflies::LinearCentred, rotation, body, |k| {
            match ideal.operations[k][(2, 2)] > 0.0 {
                true => stay.clone(),
                false => reversal.clone(),
            }
        });
        if laid.deviation <= tolerance {
            return Some(laid);
        }
    }
    let laid = Laid::new(Schoenflies::LinearPolar, rotation, body, |_| stay.clone());
    (laid.deviation <= tolerance || body.len() == 2).then_some(laid)
}

fn mirror_across(axis: &Vector3<f64>) -> Matrix3<f64> {
    Matrix3::identity() - axis * axis.transpose() * 2.0
}

fn closest_to_input(frames: Vec<Matrix3<f64>>) -> Option<Matrix3<f64>> {
    frames
        .into_iter()
        .max_by(|a, b| a.trace().total_cmp(&b.trace()))
}

/// The group of a molecule that is not linear. Operations are given up, the roughest first, until
/// the rest form a group that moves no atom too far; identity alone always does.
fn bent(molecule: &Molecule, body: &Body, tolerance: f64) -> Laid {
    // Two atoms off by the tolerance in opposite directions are twice as far from each other.
    let mut found = search::operations(body, 2.0 * tolerance);
    loop {
        if found.len() == 1 {
            let stay = |_| found[0].permutation.clone();
            return Laid::new(Schoenflies::C1, Matrix3::identity(), body, stay);
        }
        if search::is_closed(&found)
            && let Some(laid) = lay(molecule, body, &found)
            && laid.deviation <= tolerance
        {
            return laid;
        }
        // Sorted by error. An operation and its inverse have nearly the same: if only one goes,
        // the rest is not closed, and the other follows. The identity stays.
        found.pop();
    }
}

fn lay(molecule: &Molecule, body: &Body, found: &[search::Found]) -> Option<Laid> {
    let symbol = frame::classify(found)?;
    let ideal = group::ideal(symbol);
    let matrices = || found.iter().map(|f| &f.matrix);
    let fits: Vec<_> = frame::candidate_frames(matrices())
        .into_iter()
        .filter_map(|rotation| {
            let (places, misfit) =
                frame::matching(&ideal.operations, matrices(), &rotation, MATCH_LIMIT)?;
            Some((rotation, places, misfit))
        })
        .collect();
    let closest = fits.iter().map(|fit| fit.2).fold(f64::INFINITY, f64::min);
    let (rotation, places, _) = fits
        .into_iter()
        .filter(|fit| fit.2 < closest + SAME_MISFIT)
        .max_by(|a, b| a.0.trace().total_cmp(&b.0.trace()))?;
    let first = Laid::new(symbol, rotation, body, |k| {
        found[places[k]].permutation.clone()
    });
    if frame::preference(symbol, molecule, &first.symmetric).is_empty() {
        return Some(first);
    }
    // Now that the operations are exact, choose among the frames in which they look the same.
    let mut best: Option<(Vec<f64>, Matrix3<f64>, Vec<usize>)> = None;
    for turn in frame::candidate_frames(ideal.operations.iter()) {
        let exact = ideal.operations.iter();
        let Some((places, _)) = frame::matching(&ideal.operations, exact, &turn, 1e-6) else {
            continue;
        };
        let positions: Vec<_> = first.symmetric.iter().map(|s| turn * s).collect();
        let mut key = frame::preference(symbol, molecule, &positions);
        // Least turned comes last of all.
        key.push((turn * first.rotation).trace());
        if best
            .as_ref()
            .is_none_or(|(other, ..)| is_better(&key, other))
        {
            best = Some((key, turn, places));
        }
    }
    let (_, turn, places) = best?;
    Some(Laid::new(symbol, turn * first.rotation, body, |k| {
        first.permutations[places[k]].clone()
    }))
}

/// Lexicographic, with differences below a thousandth taken for none.
fn is_better(key: &[f64], other: &[f64]) -> bool {
    key.iter()
        .zip(other)
        .find(|(a, b)| (*a - *b).abs() > 1e-3 * a.abs().max(1.0))
        .is_some_and(|(a, b)| a > b)
}

#[cfg(test)]
mod tests;

//! Which orthogonal operations map a non-linear molecule onto itself.
//!
//! Two atoms that do not lie on one line with the centre fix an operation up to a reflection in
//! their plane: wherever an operation takes them, it takes them to atoms of the same element at
//! the same distance from the centre and from each other. So every pair of such images is tried
//! with both handednesses, the atoms are paired off, the operation is fitted to all of them, and
//! what leaves every atom close to its partner is kept. No family of groups needs code of its own.

use super::body::Body;
use nalgebra::{Matrix3, Vector3};
use std::collections::HashSet;

/// An operation that a molecule has, roughly.
#[derive(Debug, Clone)]
pub(super) struct Found {
    /// The best orthogonal matrix, in the frame of the input.
    pub matrix: Matrix3<f64>,
    /// Atom i goes to the place of atom `permutation[i]`.
    pub permutation: Vec<usize>,
    /// Largest distance of an atom from its partner's place, bohr.
    pub error: f64,
}

impl Found {
    /// Whether it is a rotation.
    pub fn is_proper(&self) -> bool {
        self.matrix.determinant() > 0.0
    }

    fn key(&self) -> (Vec<usize>, bool) {
        (self.permutation.clone(), self.is_proper())
    }
}

/// All operations with an error of at most `limit` (bohr); identity always among them.
pub(super) fn operations(body: &Body, limit: f64) -> Vec<Found> {
    let mut found = vec![Found {
        matrix: Matrix3::identity(),
        permutation: (0..body.len()).collect(),
        error: 0.0,
    }];
    let Some([a, b]) = reference_atoms(body, limit) else {
        return found;
    };
    let frame = |first: &Vector3<f64>, second: &Vector3<f64>, hand: f64| {
        let one = first.normalize();
        let two = (second - one * one.dot(second)).normalize();
        Matrix3::from_columns(&[one, two, one.cross(&two) * hand])
    };
    let place = |i: usize| &body.positions[i];
    let home = frame(place(a), place(b), 1.0);
    let distance = (place(a) - place(b)).norm();
    let images_b = images(body, b, limit);
    for image_a in images(body, a, limit) {
        for &image_b in &images_b {
            let apart = (place(image_a) - place(image_b)).norm();
            if image_a == image_b || (apart - distance).abs() > 2.0 * limit {
                continue;
            }
            for hand in [1.0, -1.0] {
                let start = frame(place(image_a), place(image_b), hand) * home.transpose();
                let Some(candidate) = fitted(body, start, hand) else {
                    continue;
                };
                let known = found.iter().any(|f| {
                    f.permutation == candidate.permutation && f.is_proper() == candidate.is_proper()
                });
                if candidate.error <= limit && !known {
                    found.push(candidate);
                }
            }
        }
    }
    // The same order whatever order the atoms were tried in.
    found.sort_by(|x, y| x.error.total_cmp(&y.error).then(x.key().cmp(&y.key())));
    found
}

/// Two atoms with few possible images, not on one line with the centre.
fn reference_atoms(body: &Body, limit: f64) -> Option<[usize; 2]> {
    let far: Vec<usize> = (0..body.len())
        .filter(|&i| body.positions[i].norm() > 2.0 * limit)
        .collect();
    let count = |i: usize| images(body, i, limit).len();
    let a = *far.iter().min_by(|&&i, &&j| {
        let radii = body.positions[j]
            .norm()
            .total_cmp(&body.positions[i].norm());
        count(i).cmp(&count(j)).then(radii)
    })?;
    let sine = |i: usize| {
        let (x, y) = (&body.positions[a], &body.positions[i]);
        x.cross(y).norm() / (x.norm() * y.norm())
    };
    let widest = far.iter().map(|&i| sine(i)).fold(0.0, f64::max);
    let b = *far
        .iter()
        .filter(|&&i| sine(i) > 0.5 * widest)
        .min_by(|&&i, &&j| count(i).cmp(&count(j)).then(sine(j).total_cmp(&sine(i))))?;
    (sine(b) > 0.0).then_some([a, b])
}

/// Atoms that may be the image of one: same element, same distance from the centre.
fn images(body: &Body, atom: usize, limit: f64) -> Vec<usize> {
    let radius = body.positions[atom].norm();
    (0..body.len())
        .filter(|&i| {
            body.numbers[i] == body.numbers[atom]
                && (body.positions[i].norm() - radius).abs() <= limit
        })
        .collect()
}

/// Pairs the atoms off under an approximate operation and fits it to all of them.
fn fitted(body: &Body, start: Matrix3<f64>, hand: f64) -> Option<Found> {
    let mut matrix = start;
    let mut permutation = Vec::new();
    for _ in 0..2 {
        permutation = paired(body, &matrix)?;
        let mut covariance = Matrix3::zeros();
        for (i, &j) in permutation.iter().enumerate() {
            covariance += body.positions[j] * body.positions[i].transpose();
        }
        matrix = nearest_orthogonal(&covariance, hand)?;
    }
    let error = permutation
        .iter()
        .enumerate()
        .map(|(i, &j)| (matrix * body.positions[i] - body.positions[j]).norm())
        .fold(0.0, f64::max);
    Some(Found {
        matrix,
        permutation,
        error,
    })
}

/// For every atom the one whose place it takes; `None` if two would take the same.
fn paired(body: &Body, matrix: &Matrix3<f64>) -> Option<Vec<usize>> {
    let mut taken = vec![false; body.len()];
    let mut permutation = Vec::with_capacity(body.len());
    for (i, position) in body.positions.iter().enumerate() {
        let moved = matrix * position;
        let gap = |j: usize| (body.positions[j] - moved).norm_squared();
        let nearest = (0..body.len())
            .filter(|&j| body.numbers[j] == body.numbers[i])
            .min_by(|&j, &k| gap(j).total_cmp(&gap(k)))?;
        if std::mem::replace(&mut taken[nearest], true) {
            return None;
        }
        permutation.push(nearest);
    }
    Some(permutation)
}

/// The orthogonal matrix of the given determinant that maximises tr(RᵀM) (W. Kabsch, Acta Cryst.
/// A32, 922, 1976).
pub(super) fn nearest_orthogonal(matrix: &Matrix3<f64>, determinant: f64) -> Option<Matrix3<f64>> {
    let svd = matrix.svd(true, true);
    let (u, v_t) = (svd.u?, svd.v_t?);
    let mut signs = Vector3::repeat(1.0);
    // The weakest direction pays for the handedness.
    signs[svd.singular_values.imin()] = determinant * (u * v_t).determinant().signum();
    Some(u * Matrix3::from_diagonal(&signs) * v_t)
}

/// Whether the product of any two operations is again one of them.
pub(super) fn is_closed(found: &[Found]) -> bool {
    let known: HashSet<_> = found.iter().map(Found::key).collect();
    found.iter().all(|a| {
        found.iter().all(|b| {
            let product: Vec<usize> = b.permutation.iter().map(|&i| a.permutation[i]).collect();
            known.contains(&(product, a.is_proper() == b.is_proper()))
        })
    })
}

//! From operations to a symbol, and from a symbol to the standard frame.

use super::Schoenflies;
use super::search::Found;
use crate::molecule::Molecule;
use nalgebra::{Matrix3, Vector3};

/// The symbol of a closed set of operations, from the kinds of operations in it; `None` if they
/// are those of no molecular group, which a closed set never is.
pub(super) fn classify(found: &[Found]) -> Option<Schoenflies> {
    use Schoenflies::*;
    let rotations: Vec<&Found> = found.iter().filter(|f| f.is_proper()).collect();
    let h = rotations.len();
    let orders: Vec<usize> = rotations.iter().map(|f| order(&f.permutation)).collect();
    let main = orders
        .iter()
        .position(|&n| n == orders.iter().copied().max().unwrap_or(1))?;
    let n = orders[main];
    let mirrors: Vec<Vector3<f64>> = found
        .iter()
        .filter(|f| !f.is_proper() && (f.matrix.trace() - 1.0).abs() < 0.5)
        .filter(|f| order(&f.permutation) <= 2)
        .map(|f| axis(&f.matrix))
        .collect();
    let inverted = found
        .iter()
        .any(|f| !f.is_proper() && (f.matrix.trace() + 3.0).abs() < 0.5);
    if found.len() != h && found.len() != 2 * h {
        return None;
    }
    let chiral = found.len() == h;
    let main_axis = axis(&rotations[main].matrix);
    let horizontal = mirrors.iter().any(|m| m.dot(&main_axis).abs() > 0.7);
    Some(match (h, n) {
        (1, _) if chiral => C1,
        (1, _) if inverted => Ci,
        (1, _) => Cs,
        (12, 3) if chiral => T,
        (12, 3) if inverted => Th,
        (12, 3) => Td,
        (24, 4) if chiral => O,
        (24, 4) => Oh,
        (60, 5) if chiral => I,
        (60, 5) => Ih,
        _ if h == n && chiral => Cyclic(n),
        _ if h == n && horizontal => Paddle(n),
        _ if h == n && !mirrors.is_empty() => Pyramidal(n),
        _ if h == n => Rotoreflection(2 * n),
        _ if h == 2 * n && chiral => Dihedral(n),
        // All three axes of D2 are alike; only D2h has the inversion.
        (4, 2) if inverted => Prism(2),
        (4, 2) => Antiprism(2),
        _ if h == 2 * n && horizontal => Prism(n),
        _ if h == 2 * n => Antiprism(n),
        _ => return None,
    })
}

/// How often a permutation must be applied to change nothing.
fn order(permutation: &[usize]) -> usize {
    let mut moved: Vec<usize> = permutation.to_vec();
    let mut n = 1;
    while moved.iter().enumerate().any(|(i, &j)| i != j) {
        moved = moved.iter().map(|&i| permutation[i]).collect();
        n += 1;
    }
    n
}

/// The axis of an operation: of a rotation, or of the rotation in a rotation-reflection, for a
/// mirror its normal. Meaningless for identity and inversion.
pub(super) fn axis(matrix: &Matrix3<f64>) -> Vector3<f64> {
    let proper = matrix * matrix.determinant().signum();
    // R + Rᵀ − (tr R − 1)·1 = 2(1 − cos α)·a·aᵀ for any rotation about a.
    let outer = proper + proper.transpose() - Matrix3::identity() * (proper.trace() - 1.0);
    let columns = [0, 1, 2].map(|k| outer.column(k).into_owned());
    let longest = columns
        .into_iter()
        .max_by(|a, b| a.norm().total_cmp(&b.norm()))
        .unwrap_or_else(Vector3::x);
    longest.try_normalize(1e-9).unwrap_or_else(Vector3::x)
}

/// Rotations into frames whose z is an axis of one of the operations and whose x is an axis across
/// it, or any direction across it if there is none. Without axes the input's own frame.
pub(super) fn candidate_frames<'a>(
    operations: impl Iterator<Item = &'a Matrix3<f64>>,
) -> Vec<Matrix3<f64>> {
    let mut axes: Vec<Vector3<f64>> = Vec::new();
    for matrix in operations {
        if (matrix - Matrix3::identity() * matrix.determinant().signum()).amax() < 0.3 {
            continue;
        }
        let new = axis(matrix);
        if axes.iter().all(|a| a.dot(&new).abs() < 0.99) {
            axes.push(new);
        }
    }
    axes = axes.iter().flat_map(|a| [*a, -a]).collect();
    if axes.is_empty() {
        return vec![Matrix3::identity()];
    }
    let mut frames = Vec::new();
    for z in &axes {
        let mut across: Vec<Vector3<f64>> = axes
            .iter()
            .filter(|a| a.dot(z).abs() < 0.2)
            .map(|a| (a - z * z.dot(a)).normalize())
            // A mirror's normal, or a direction in the mirror.
            .flat_map(|a| [a, z.cross(&a)])
            .collect();
        if across.is_empty() {
            let x = [Vector3::x(), Vector3::y()]
                .into_iter()
                .find(|e| e.dot(z).abs() < 0.8)
                .unwrap_or_else(Vector3::z);
            across.push((x - z * z.dot(&x)).normalize());
        }
        for x in across {
            let y = z.cross(&x);
            frames.push(Matrix3::from_rows(&[
                x.transpose(),
                y.transpose(),
                z.transpose(),
            ]));
        }
    }
    frames
}

/// For every ideal operation the place of its nearest counterpart among the found ones, seen in a
/// frame, and the largest misfit; `None` unless they match one to one with a misfit under
/// `limit` in every element.
pub(super) fn matching<'a>(
    ideal: &[Matrix3<f64>],
    found: impl Iterator<Item = &'a Matrix3<f64>>,
    frame: &Matrix3<f64>,
    limit: f64,
) -> Option<(Vec<usize>, f64)> {
    let seen: Vec<Matrix3<f64>> = found.map(|r| frame * r * frame.transpose()).collect();
    let mut taken = vec![false; seen.len()];
    let mut places = Vec::with_capacity(ideal.len());
    let mut worst: f64 = 0.0;
    for operation in ideal {
        let (place, misfit) = seen
            .iter()
            .map(|r| (r - operation).amax())
            .enumerate()
            .min_by(|a, b| a.1.total_cmp(&b.1))?;
        if misfit > limit || std::mem::replace(&mut taken[place], true) {
            return None;
        }
        worst = worst.max(misfit);
        places.push(place);
    }
    Some((places, worst))
}

/// What the orientation conventions prefer, most important first, larger better; empty where the
/// group leaves nothing to choose that would change a label.
///
/// After R. S. Mulliken, J. Chem. Phys. 23, 1997 (1955) (memory): in D2h (and D2) x stands across
/// a planar molecule and z passes through most atoms, then bonds; in C2v the plane yz holds most
/// atoms, so that x stands across a planar molecule; in C4v, C6v, … the σv (here xz) hold most
/// atoms; in D4h, D6h, … the C2′ (here x) pass through most atoms, then bonds. Remaining ties
/// are ours: nuclear charge, then extent.
pub(super) fn preference(
    symbol: Schoenflies,
    molecule: &Molecule,
    positions: &[Vector3<f64>],
) -> Vec<f64> {
    use Schoenflies::*;
    const NEAR_BOHR: f64 = 1e-3;
    // Number, charge and second moment of the atoms with all the given coordinates zero.
    let atoms = |zero: &[usize], along: usize| -> [f64; 3] {
        let mut sums = [0.0; 3];
        for (atom, p) in molecule.atoms.iter().zip(positions) {
            if zero.iter().all(|&k| p[k].abs() < NEAR_BOHR) {
                let charge = f64::from(atom.number);
                sums[0] += 1.0;
                sums[1] += charge;
                sums[2] += charge * p[along] * p[along];
            }
        }
        sums
    };
    let bonds = |zero: [usize; 2]| -> f64 {
        let cut = molecule.bonded_pairs().into_iter().filter(|pair| {
            let middle = (positions[pair.atoms[0]] + positions[pair.atoms[1]]) / 2.0;
            zero.iter().all(|&k| middle[k].abs() < NEAR_BOHR)
        });
        cut.count() as f64
    };
    match symbol {
        Pyramidal(2) => atoms(&[0], 1).to_vec(),
        Pyramidal(n) if n.is_multiple_of(2) => atoms(&[1], 0).to_vec(),
        Dihedral(2) | Prism(2) => {
            let [in_plane, plane_charge, y_extent] = atoms(&[0], 1);
            let planar = in_plane as usize == positions.len();
            let [on_z, z_charge, z_extent] = atoms(&[0, 1], 2);
            let whole_z = atoms(&[], 2)[2];
            vec![
                f64::from(u8::from(planar)),
                on_z,
                bonds([0, 1]),
                z_charge,
                z_extent,
                in_plane,
                plane_charge,
                whole_z,
                y_extent,
            ]
        }
        Dihedral(n) | Prism(n) if n.is_multiple_of(2) => {
            let [on_x, charge, extent] = atoms(&[1, 2], 0);
            vec![on_x, bonds([1, 2]), charge, extent]
        }
        _ => Vec::new(),
    }
}

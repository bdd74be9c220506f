//! The ideal groups: operations in the standard frame and their irreducible representations.
//!
//! Nothing is tabulated. An axial group is built from a generator about z (a rotation, or a
//! rotation-reflection), an operation across it (a twofold axis along x, or the mirror xz) and the
//! inversion or the mirror xy; its characters follow from the angular momentum m about z and the
//! signs under the rest. The cubic and icosahedral groups are closed from generators, and their
//! characters are peeled off the characters of the spherical harmonics of l = 1 to 4. Names follow
//! R. S. Mulliken, J. Chem. Phys. 23, 1997 (1955) (memory).
//!
//! A pair of complex-conjugate representations (E of C3, S4, T, …) counts as one real one of
//! dimension 2, as is common practice.

use super::Schoenflies;
use nalgebra::{Matrix3, Vector3};
use std::f64::consts::{PI, TAU};

/// Order of the axis that stands in for the infinite one of a linear molecule: functions up to
/// l = 5 have |m| ≤ 5, which twelve rotations tell apart.
const LINEAR_ORDER: usize = 12;

/// An irreducible representation over the real numbers.
#[derive(Debug, Clone, PartialEq)]
pub struct Irrep {
    /// Name in small letters, as orbitals carry it: `b1`, `e1g`, `a″`, `σg`, `πu`.
    pub name: String,
    /// Number of partners.
    pub dimension: usize,
    /// Whether it is a pair of complex-conjugate representations.
    pub paired: bool,
    /// Character of every operation, in the order of the group's operations.
    pub characters: Vec<f64>,
}

impl Irrep {
    fn new(name: impl Into<String>, dimension: usize, paired: bool, characters: Vec<f64>) -> Self {
        Irrep {
            name: name.into(),
            dimension,
            paired,
            characters,
        }
    }

    /// Weight of operation k in the projector P = Σ_k w_k·R_k onto this representation:
    /// d·χ(R)/(order), half that for a pair.
    pub fn projector_weight(&self, k: usize) -> f64 {
        let dimension = if self.paired { 1 } else { self.dimension };
        dimension as f64 * self.characters[k] / self.characters.len() as f64
    }
}

/// Operations and representations of a group in its standard frame.
pub(super) struct IdealGroup {
    pub operations: Vec<Matrix3<f64>>,
    pub irreps: Vec<Irrep>,
}

/// The ideal group of a symbol. A linear molecule gets the finite part that tells |m| ≤ 5 apart;
/// an atom only identity and inversion, without representations (its orbitals go by l).
pub(super) fn ideal(symbol: Schoenflies) -> IdealGroup {
    use Schoenflies::*;
    match symbol {
        C1 => axial(turn(1), 1, None),
        Ci => doubled(axial(turn(1), 1, None), inversion(), ["g", "u"]),
        Cs => doubled(axial(turn(1), 1, None), mirror_z(), ["′", "″"]),
        Cyclic(n) => axial(turn(n), n, None),
        Pyramidal(n) => axial(turn(n), n, Some(mirror_y())),
        Paddle(n) => with_horizontal(axial(turn(n), n, None), n),
        Rotoreflection(n) if n % 4 == 2 => {
            doubled(axial(turn(n / 2), n / 2, None), inversion(), ["g", "u"])
        }
        Rotoreflection(n) => axial(mirror_z() * turn(n), n, None),
        Dihedral(n) => axial(turn(n), n, Some(half_turn_x())),
        Prism(n) => with_horizontal(axial(turn(n), n, Some(half_turn_x())), n),
        Antiprism(n) if n % 2 == 1 => doubled(
            axial(turn(n), n, Some(half_turn_x())),
            inversion(),
            ["g", "u"],
        ),
        Antiprism(n) => axial(mirror_z() * turn(2 * n), 2 * n, Some(half_turn_x())),
        T => tetrahedral_rotations(),
        Td => tetrahedral(),
        Th => doubled(tetrahedral_rotations(), inversion(), ["g", "u"]),
        O => octahedral_rotations(),
        Oh => doubled(octahedral_rotations(), inversion(), ["g", "u"]),
        I => icosahedral_rotations(),
        Ih => doubled(icosahedral_rotations(), inversion(), ["g", "u"]),
        LinearPolar => linear(),
        LinearCentred => doubled(linear(), inversion(), ["g", "u"]),
        Atom => IdealGroup {
            operations: vec![Matrix3::identity(), inversion()],
            irreps: Vec::new(),
        },
    }
}

fn turn(n: usize) -> Matrix3<f64> {
    let (sin, cos) = (TAU / n as f64).sin_cos();
    Matrix3::new(cos, -sin, 0.0, sin, cos, 0.0, 0.0, 0.0, 1.0)
}

fn inversion() -> Matrix3<f64> {
    -Matrix3::identity()
}

fn mirror_z() -> Matrix3<f64> {
    Matrix3::from_diagonal(&Vector3::new(1.0, 1.0, -1.0))
}

fn mirror_y() -> Matrix3<f64> {
    Matrix3::from_diagonal(&Vector3::new(1.0, -1.0, 1.0))
}

fn half_turn_x() -> Matrix3<f64> {
    Matrix3::from_diagonal(&Vector3::new(1.0, -1.0, -1.0))
}

/// The group of g^k and g^k·p, k = 0 … n−1, where g generates and p stands across.
fn axial(generator: Matrix3<f64>, n: usize, across: Option<Matrix3<f64>>) -> IdealGroup {
    let mut operations = Vec::new();
    let mut power = Matrix3::identity();
    for _ in 0..n {
        operations.push(power);
        power = generator * power;
    }
    if let Some(across) = across {
        let turned: Vec<_> = operations.iter().map(|r| r * across).collect();
        operations.extend(turned);
    }
    // Characters of g^k from `first`, of g^k·p that of g^k times `sign`.
    let characters = |first: &dyn Fn(usize) -> f64, sign: f64| -> Vec<f64> {
        let plain = (0..n).map(first);
        match across {
            None => plain.collect(),
            Some(_) => plain.chain((0..n).map(|k| sign * first(k))).collect(),
        }
    };
    let alternating = |k: usize| if k.is_multiple_of(2) { 1.0 } else { -1.0 };
    let mut irreps = Vec::new();
    let mut singles: Vec<(&str, &dyn Fn(usize) -> f64)> = vec![("a", &|_| 1.0)];
    if n.is_multiple_of(2) {
        singles.push(("b", &alternating));
    }
    for (letter, first) in singles {
        match across {
            None => irreps.push(Irrep::new(letter, 1, false, characters(first, 1.0))),
            Some(_) => {
                for (subscript, sign) in [("1", 1.0), ("2", -1.0)] {
                    let name = format!("{letter}{subscript}");
                    irreps.push(Irrep::new(name, 1, false, characters(first, sign)));
                }
            }
        }
    }
    // D2 has its own names: B1, B2, B3 belong to z, y, x.
    if n == 2 && across.is_some_and(|p| p.determinant() > 0.0) && generator.determinant() > 0.0 {
        for (irrep, name) in irreps.iter_mut().zip(["a", "b1", "b3", "b2"]) {
            irrep.name = name.to_string();
        }
        irreps.swap(2, 3);
    }
    let pairs = (n - 1) / 2;
    for m in 1..=pairs {
        let name = if pairs == 1 {
            "e".to_string()
        } else {
            format!("e{m}")
        };
        let first = |k: usize| 2.0 * (TAU * (m * k) as f64 / n as f64).cos();
        irreps.push(Irrep::new(
            name,
            2,
            across.is_none(),
            characters(&first, 0.0),
        ));
    }
    IdealGroup { operations, irreps }
}

/// Direct product with the two-element group of an operation that commutes with all.
fn doubled(group: IdealGroup, extra: Matrix3<f64>, suffixes: [&str; 2]) -> IdealGroup {
    let mut operations = group.operations;
    let turned: Vec<_> = operations.iter().map(|r| extra * r).collect();
    operations.extend(turned);
    let mut irreps = Vec::new();
    for (suffix, sign) in suffixes.into_iter().zip([1.0, -1.0]) {
        for irrep in &group.irreps {
            let mut twice = irrep.clone();
            twice.name += suffix;
            let mirrored = irrep.characters.iter().map(|c| sign * c);
            twice.characters.extend(mirrored);
            irreps.push(twice);
        }
    }
    IdealGroup { operations, irreps }
}

fn with_horizontal(group: IdealGroup, n: usize) -> IdealGroup {
    if n.is_multiple_of(2) {
        doubled(group, inversion(), ["g", "u"])
    } else {
        doubled(group, mirror_z(), ["′", "″"])
    }
}

/// C∞v by twelve rotations and twelve mirrors; what belongs to |m| = 6 is left out.
fn linear() -> IdealGroup {
    let mut group = axial(turn(LINEAR_ORDER), LINEAR_ORDER, Some(mirror_y()));
    group.irreps.retain(|irrep| !irrep.name.starts_with('b'));
    let names = ["σ", "σ−", "π", "δ", "φ", "γ", "η"];
    for (irrep, name) in group.irreps.iter_mut().zip(names) {
        irrep.name = name.to_string();
    }
    group
}

/// All products of the generators, identity first.
fn closed(generators: &[Matrix3<f64>]) -> Vec<Matrix3<f64>> {
    let mut operations = vec![Matrix3::identity()];
    let mut next = 0;
    while next < operations.len() {
        for generator in generators {
            let product = generator * operations[next];
            if operations.iter().all(|r| (r - product).amax() > 1e-6) {
                operations.push(product);
            }
        }
        next += 1;
    }
    operations
}

/// Character of the harmonics of one l under an operation: sin((l + ½)α)/sin(α/2) for a rotation
/// by α, times (−1)^l where the inversion comes with it.
fn harmonic_character(l: usize, operation: &Matrix3<f64>) -> f64 {
    let (proper, sign) = match operation.determinant() > 0.0 {
        true => (*operation, 1.0),
        false => (-operation, if l.is_multiple_of(2) { 1.0 } else { -1.0 }),
    };
    let cos = ((proper.trace() - 1.0) / 2.0).clamp(-1.0, 1.0);
    let angle = cos.acos();
    // As a sum of cosines it has no removable singularity at zero.
    let sum: f64 = (1..=l).map(|m| 2.0 * (m as f64 * angle).cos()).sum();
    sign * (1.0 + sum)
}

fn harmonics(l: usize, operations: &[Matrix3<f64>]) -> Vec<f64> {
    operations
        .iter()
        .map(|r| harmonic_character(l, r))
        .collect()
}

fn difference(a: &[f64], b: &[f64]) -> Vec<f64> {
    a.iter().zip(b).map(|(a, b)| a - b).collect()
}

fn product(a: &[f64], b: &[f64]) -> Vec<f64> {
    a.iter().zip(b).map(|(a, b)| a * b).collect()
}

/// A third of a turn about (1, 1, 1).
fn third_of_turn() -> Matrix3<f64> {
    Matrix3::new(0.0, 0.0, 1.0, 1.0, 0.0, 0.0, 0.0, 1.0, 0.0)
}

fn tetrahedral_rotations() -> IdealGroup {
    let operations = closed(&[turn(2), third_of_turn()]);
    let t = harmonics(1, &operations);
    let e = difference(&harmonics(2, &operations), &t);
    let irreps = vec![
        Irrep::new("a", 1, false, vec![1.0; operations.len()]),
        Irrep::new("e", 2, true, e),
        Irrep::new("t", 3, false, t),
    ];
    IdealGroup { operations, irreps }
}

fn tetrahedral() -> IdealGroup {
    let operations = closed(&[mirror_z() * turn(4), third_of_turn()]);
    let a2: Vec<f64> = operations.iter().map(Matrix3::determinant).collect();
    let t2 = harmonics(1, &operations);
    let e = difference(&harmonics(2, &operations), &t2);
    let irreps = vec![
        Irrep::new("a1", 1, false, vec![1.0; operations.len()]),
        Irrep::new("a2", 1, false, a2.clone()),
        Irrep::new("e", 2, false, e),
        Irrep::new("t1", 3, false, product(&t2, &a2)),
        Irrep::new("t2", 3, false, t2),
    ];
    IdealGroup { operations, irreps }
}

fn octahedral_rotations() -> IdealGroup {
    let operations = closed(&[turn(4), third_of_turn()]);
    // Odd permutations of the three axes change the sign of a2.
    let a2: Vec<f64> = operations
        .iter()
        .map(|r| r.map(f64::abs).determinant().round())
        .collect();
    let t1 = harmonics(1, &operations);
    let t2 = product(&t1, &a2);
    let e = difference(&harmonics(2, &operations), &t2);
    let irreps = vec![
        Irrep::new("a1", 1, false, vec![1.0; operations.len()]),
        Irrep::new("a2", 1, false, a2),
        Irrep::new("e", 2, false, e),
        Irrep::new("t1", 3, false, t1),
        Irrep::new("t2", 3, false, t2),
    ];
    IdealGroup { operations, irreps }
}

fn icosahedral_rotations() -> IdealGroup {
    // The twelve corners are (0, ±1, ±φ) and its cyclic permutations.
    let golden = (1.0 + 5f64.sqrt()) / 2.0;
    let corner = nalgebra::Unit::new_normalize(Vector3::new(0.0, 1.0, golden));
    let fifth = *nalgebra::Rotation3::from_axis_angle(&corner, 2.0 * PI / 5.0).matrix();
    let operations = closed(&[turn(2), third_of_turn(), fifth]);
    let [t1, h, f, g4] = [1, 2, 3, 4].map(|l| harmonics(l, &operations));
    let g = difference(&g4, &h);
    let t2 = difference(&f, &g);
    let irreps = vec![
        Irrep::new("a", 1, false, vec![1.0; operations.len()]),
        Irrep::new("t1", 3, false, t1),
        Irrep::new("t2", 3, false, t2),
        Irrep::new("g", 4, false, g),
        Irrep::new("h", 5, false, h),
    ];
    IdealGroup { operations, irreps }
}

#[cfg(test)]
pub(super) fn all_symbols() -> Vec<Schoenflies> {
    use Schoenflies::*;
    let mut symbols = vec![C1, Ci, Cs, T, Td, Th, O, Oh, I, Ih];
    for n in 2..=8 {
        symbols.extend([
            Cyclic(n),
            Pyramidal(n),
            Paddle(n),
            Dihedral(n),
            Prism(n),
            Antiprism(n),
            Rotoreflection(2 * n),
        ]);
    }
    symbols
}

#[cfg(test)]
mod tests {
    use super::*;

    fn named<'a>(group: &'a IdealGroup, name: &str) -> &'a Irrep {
        group
            .irreps
            .iter()
            .find(|irrep| irrep.name == name)
            .unwrap_or_else(|| panic!("no {name}"))
    }

    #[test]
    fn operations_form_a_group_of_the_right_order() {
        for symbol in all_symbols() {
            let group = ideal(symbol);
            assert_eq!(Some(group.operations.len()), symbol.order(), "{symbol}");
            for a in &group.operations {
                assert!((a * a.transpose() - Matrix3::identity()).amax() < 1e-12);
                for b in &group.operations {
                    let product = a * b;
                    let hits = group
                        .operations
                        .iter()
                        .filter(|r| (*r - product).amax() < 1e-9);
                    assert_eq!(hits.count(), 1, "{symbol}");
                }
            }
        }
    }

    /// First and second orthogonality, and Σ d² = order with complex pairs counted as two.
    #[test]
    fn characters_are_orthogonal_and_complete() {
        for symbol in all_symbols() {
            let group = ideal(symbol);
            let order = group.operations.len() as f64;
            let mut squares = 0;
            for (i, a) in group.irreps.iter().enumerate() {
                assert!((a.characters[0] - a.dimension as f64).abs() < 1e-9);
                squares += a.dimension * a.dimension / (1 + usize::from(a.paired));
                for (j, b) in group.irreps.iter().enumerate() {
                    let sum: f64 = product(&a.characters, &b.characters).iter().sum();
                    let norm = if a.paired { 2.0 } else { 1.0 };
                    let expected = if i == j { norm } else { 0.0 };
                    assert!(
                        (sum / order - expected).abs() < 1e-9,
                        "{symbol}: {} {}",
                        a.name,
                        b.name
                    );
                }
            }
            assert_eq!(squares, group.operations.len(), "{symbol}");
        }
    }

    /// A character is the same for conjugate operations, and the one of a product with an
    /// operation of a one-dimensional representation is the product.
    #[test]
    fn characters_respect_the_multiplication_table() {
        for symbol in all_symbols() {
            let group = ideal(symbol);
            let place = |m: Matrix3<f64>| {
                let found = group.operations.iter().position(|r| (r - m).amax() < 1e-9);
                found.unwrap_or_else(|| panic!("{symbol} is not closed"))
            };
            for (i, a) in group.operations.iter().enumerate() {
                for (j, b) in group.operations.iter().enumerate() {
                    let conjugate = place(a * b * a.transpose());
                    let both = place(a * b);
                    for irrep in &group.irreps {
                        let c = &irrep.characters;
                        assert!(
                            (c[conjugate] - c[j]).abs() < 1e-9,
                            "{symbol} {}",
                            irrep.name
                        );
                        if irrep.dimension == 1 {
                            assert!((c[both] - c[i] * c[j]).abs() < 1e-9);
                        }
                    }
                }
            }
        }
    }

    /// What x, y, z and the rotations belong to: the right-hand columns of any printed character
    /// table (common practice, no source).
    #[test]
    fn coordinates_belong_where_the_printed_tables_put_them() {
        let of_symbol: [(Schoenflies, &str, &str, &str, &str); 19] = [
            (Schoenflies::Cs, "a′", "a″", "a″", "a′"),
            (Schoenflies::Cyclic(2), "b", "a", "b", "a"),
            (Schoenflies::Pyramidal(2), "b1", "a1", "b2", "a2"),
            (Schoenflies::Pyramidal(3), "e", "a1", "e", "a2"),
            (Schoenflies::Pyramidal(4), "e", "a1", "e", "a2"),
            (Schoenflies::Pyramidal(6), "e1", "a1", "e1", "a2"),
            (Schoenflies::Paddle(2), "bu", "au", "bg", "ag"),
            (Schoenflies::Paddle(3), "e′", "a″", "e″", "a′"),
            (Schoenflies::Rotoreflection(4), "e", "b", "e", "a"),
            (Schoenflies::Rotoreflection(8), "e1", "b", "e3", "a"),
            (Schoenflies::Dihedral(2), "b3", "b1", "b3", "b1"),
            (Schoenflies::Prism(2), "b3u", "b1u", "b3g", "b1g"),
            (Schoenflies::Prism(3), "e′", "a2″", "e″", "a2′"),
            (Schoenflies::Prism(5), "e1′", "a2″", "e1″", "a2′"),
            (Schoenflies::Prism(6), "e1u", "a2u", "e1g", "a2g"),
            (Schoenflies::Antiprism(2), "e", "b2", "e", "a2"),
            (Schoenflies::Antiprism(3), "eu", "a2u", "eg", "a2g"),
            (Schoenflies::Antiprism(4), "e1", "b2", "e3", "a2"),
            (Schoenflies::Td, "t2", "t2", "t1", "t1"),
        ];
        for (symbol, x, z, turn_x, turn_z) in of_symbol {
            let group = ideal(symbol);
            // Weight of a coordinate in a representation: Σ_R w_R·R_aa, with det R for an axial
            // vector.
            let weight = |name: &str, axis: usize, axial: bool| -> f64 {
                let irrep = named(&group, name);
                let terms = group.operations.iter().enumerate().map(|(k, r)| {
                    let sign = if axial { r.determinant() } else { 1.0 };
                    irrep.projector_weight(k) * sign * r[(axis, axis)]
                });
                terms.sum()
            };
            for (name, axis, axial) in [
                (x, 0, false),
                (z, 2, false),
                (turn_x, 0, true),
                (turn_z, 2, true),
            ] {
                let found = weight(name, axis, axial);
                assert!((found - 1.0).abs() < 1e-9, "{symbol} {name}: {found}");
            }
        }
    }

    /// Spot values of printed tables (common practice, no source).
    #[test]
    fn cubic_and_icosahedral_characters_are_the_printed_ones() {
        let golden = (1.0 + 5f64.sqrt()) / 2.0;
        let group = ideal(Schoenflies::Ih);
        let fifth = group
            .operations
            .iter()
            .position(|r| r.determinant() > 0.0 && (r.trace() - golden).abs() < 1e-9)
            .unwrap();
        let found = ["ag", "t1g", "t2u", "gu", "hg"].map(|n| named(&group, n).characters[fifth]);
        for (found, expected) in found.iter().zip([1.0, golden, 1.0 - golden, -1.0, 0.0]) {
            assert!((found - expected).abs() < 1e-9);
        }
        let group = ideal(Schoenflies::Oh);
        let quarter = group
            .operations
            .iter()
            .position(|r| r.determinant() > 0.0 && (r.trace() - 1.0).abs() < 1e-9)
            .unwrap();
        let found = ["a2g", "eg", "t1u", "t2g"].map(|n| named(&group, n).characters[quarter]);
        for (found, expected) in found.iter().zip([-1.0, 0.0, 1.0, -1.0]) {
            assert!((found - expected).abs() < 1e-9);
        }
    }

    #[test]
    fn symbols_print_as_chemists_write_them() {
        let printed = [
            (Schoenflies::Pyramidal(2), "C2v"),
            (Schoenflies::Antiprism(3), "D3d"),
            (Schoenflies::LinearCentred, "D∞h"),
            (Schoenflies::Atom, "Kh"),
        ];
        for (symbol, text) in printed {
            assert_eq!(symbol.to_string(), text);
        }
    }
}

//! A minimal set of atomic orbitals: what a chemist means by "2s" and "2p".

use super::{Basis, BasisError, BasisSet, ElementBasis, Role};
use crate::molecule::Molecule;

/// Name of the set made by [`minimal_set`].
pub const MINIMAL_NAME: &str = "atomic-minimal";

/// How many orbitals of each l (s, p, d) a free atom fills, counted by shells.
fn filled_shells(number: u8) -> [usize; 3] {
    match number {
        0..=2 => [1, 0, 0],
        3..=4 => [2, 0, 0],
        5..=10 => [2, 1, 0],
        11..=12 => [3, 1, 0],
        13..=18 => [3, 2, 0],
        19..=20 => [4, 2, 0],
        21..=30 => [4, 2, 1],
        _ => [4, 3, 1],
    }
}

/// The filled atomic orbitals of every element from H to Kr.
///
/// The leading contractions of cc-pVTZ are the atoms' own Hartree-Fock orbitals (T. H. Dunning,
/// J. Chem. Phys. 90, 1007, 1989), which is the reference that intrinsic atomic orbitals want
/// (G. Knizia, J. Chem. Theory Comput. 9, 4834, 2013). cc-pVTZ does not reach potassium, whose
/// orbitals come from STO-3G.
pub fn minimal_set() -> Result<BasisSet, BasisError> {
    let atomic = BasisSet::bundled("cc-pvtz")?;
    let substitute = BasisSet::bundled("sto-3g")?;
    let mut set = atomic.clone();
    set.name = MINIMAL_NAME.to_string();
    set.display_name =
        "atomic orbitals (leading contractions of cc-pVTZ; STO-3G for K)".to_string();
    set.role = Role::Orbital;
    for number in 1..=crate::molecule::LAST_SUPPORTED {
        let Some(full) = atomic
            .element(number)
            .or_else(|| substitute.element(number))
        else {
            continue;
        };
        let mut left = filled_shells(number);
        let mut element = ElementBasis::default();
        for shell in &full.shells {
            if shell.l < left.len() && left[shell.l] > 0 {
                left[shell.l] -= 1;
                element.shells.push(shell.clone());
            }
        }
        set.set_element(number, element);
    }
    Ok(set)
}

impl Basis {
    /// The filled atomic orbitals of every atom (see [`minimal_set`]).
    pub fn minimal(molecule: &Molecule) -> Result<Basis, BasisError> {
        Basis::new(molecule, &minimal_set()?)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::basis::{Shell, radial_moment};
    use crate::molecule::Atom;
    use nalgebra::Vector3;

    fn radial_integral(a: &Shell, b: &Shell, power: impl Fn(f64) -> f64) -> f64 {
        let mut sum = 0.0;
        for (ea, ca) in a.exponents.iter().zip(&a.coefficients) {
            for (eb, cb) in b.exponents.iter().zip(&b.coefficients) {
                sum += ca * cb * radial_moment(a.l, ea + eb) * power(ea + eb);
            }
        }
        sum
    }

    /// The leading contractions are the atom's orbitals: orthogonal and ever wider. A set whose
    /// contractions came in another order would fail here.
    #[test]
    fn members_are_the_orbitals_of_the_atom_in_order() {
        for number in 1..=36 {
            let atoms = vec![Atom {
                number,
                position_bohr: Vector3::zeros(),
            }];
            let multiplicity = 1 + u32::from(number % 2);
            let atom = Molecule {
                name: "atom".into(),
                atoms,
                charge: 0,
                multiplicity,
            };
            let basis = Basis::minimal(&atom).unwrap();
            assert!(2 * basis.functions >= number as usize, "element {number}");
            let [s, p, d] = filled_shells(number);
            assert_eq!(basis.functions, s + 3 * p + 5 * d, "element {number}");
            for l in 0..3 {
                let shells: Vec<&Shell> = basis.shells.iter().filter(|x| x.l == l).collect();
                // ⟨r²⟩ of one shell: (l + 3/2)/p per product of primitives.
                let width = |x: &Shell| radial_integral(x, x, |p| (l as f64 + 1.5) / p);
                for pair in shells.windows(2) {
                    assert!(width(pair[0]) < width(pair[1]), "element {number}, l = {l}");
                }
                if number == 19 {
                    continue; // STO-3G is not made of orthogonal orbitals
                }
                for (i, a) in shells.iter().enumerate() {
                    for b in &shells[..i] {
                        let overlap = radial_integral(a, b, |_| 1.0);
                        assert!(overlap.abs() < 0.02, "element {number}, l = {l}: {overlap}");
                    }
                }
            }
        }
    }
}

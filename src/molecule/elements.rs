//! The elements: symbols, covalent radii and the size of the atomic core.

/// Highest atomic number that the program computes with (krypton).
pub const LAST_SUPPORTED: u8 = 36;

/// Symbols by atomic number, hydrogen to radon; index 0 is unused. The tail past krypton only
/// serves error texts ("iodine is not supported" says more than "unknown element").
const SYMBOLS: [&str; 87] = [
    "", "H", "He", "Li", "Be", "B", "C", "N", "O", "F", "Ne", "Na", "Mg", "Al", "Si", "P", "S",
    "Cl", "Ar", "K", "Ca", "Sc", "Ti", "V", "Cr", "Mn", "Fe", "Co", "Ni", "Cu", "Zn", "Ga", "Ge",
    "As", "Se", "Br", "Kr", "Rb", "Sr", "Y", "Zr", "Nb", "Mo", "Tc", "Ru", "Rh", "Pd", "Ag", "Cd",
    "In", "Sn", "Sb", "Te", "I", "Xe", "Cs", "Ba", "La", "Ce", "Pr", "Nd", "Pm", "Sm", "Eu", "Gd",
    "Tb", "Dy", "Ho", "Er", "Tm", "Yb", "Lu", "Hf", "Ta", "W", "Re", "Os", "Ir", "Pt", "Au", "Hg",
    "Tl", "Pb", "Bi", "Po", "At", "Rn",
];

/// Single-bond covalent radii in Å, hydrogen to krypton; index 0 is unused.
///
/// B. Cordero et al., Dalton Trans. 2008, 2832 (memory): sp³ carbon, low-spin Mn, Fe and Co.
const COVALENT_RADII_ANGSTROM: [f64; 37] = [
    0.0, 0.31, 0.28, 1.28, 0.96, 0.84, 0.76, 0.71, 0.66, 0.57, 0.58, 1.66, 1.41, 1.21, 1.11, 1.07,
    1.05, 1.02, 1.06, 2.03, 1.76, 1.70, 1.60, 1.53, 1.39, 1.39, 1.32, 1.26, 1.24, 1.32, 1.22, 1.22,
    1.20, 1.19, 1.20, 1.20, 1.16,
];

/// Symbol of an element; `None` for 0 and past radon.
pub fn symbol(number: u8) -> Option<&'static str> {
    SYMBOLS
        .get(number as usize)
        .copied()
        .filter(|s| !s.is_empty())
}

/// Atomic number of a symbol in any case (`cl`, `CL` and `Cl` are chlorine); `None` if unknown.
pub fn number_of_symbol(text: &str) -> Option<u8> {
    (1..SYMBOLS.len())
        .find(|&z| SYMBOLS[z].eq_ignore_ascii_case(text))
        .map(|z| z as u8)
}

/// Single-bond covalent radius, Å; `None` past krypton.
pub fn covalent_radius_angstrom(number: u8) -> Option<f64> {
    COVALENT_RADII_ANGSTROM
        .get(number as usize)
        .copied()
        .filter(|&r| r > 0.0)
}

/// Number of core orbitals of an atom.
///
/// H–He 0, Li–Ne 1, Na–Ar 5, K–Ca 5, Sc–Ge 9, As–Kr 14. Up to argon this is the noble-gas core of
/// common practice. Beyond it, a shell counts as core only where it lies below every neighbour's
/// valence s level (fluorine 2s, the deepest, at −1.6 hartree): 3s3p from scandium on, 3d from
/// arsenic on. So the core orbitals of a molecule are simply its lowest ones, and what light of
/// a laboratory lamp might reach (potassium 3p, gallium 3d) stays among the valence orbitals.
pub fn core_orbitals(number: u8) -> usize {
    match number {
        0..=2 => 0,
        3..=10 => 1,
        11..=20 => 5,
        21..=32 => 9,
        _ => 14,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn symbols_and_numbers_are_inverse() {
        for z in 1..=86 {
            let s = symbol(z).unwrap();
            assert_eq!(number_of_symbol(s), Some(z));
            assert_eq!(number_of_symbol(&s.to_lowercase()), Some(z));
        }
        assert_eq!(symbol(0), None);
        assert_eq!(symbol(87), None);
        assert_eq!(number_of_symbol(""), None);
        // Places that a slip in the table would move (periodic table, common practice).
        for (s, z) in [
            ("Ne", 10),
            ("Ar", 18),
            ("Kr", 36),
            ("Xe", 54),
            ("Lu", 71),
            ("Rn", 86),
        ] {
            assert_eq!(number_of_symbol(s), Some(z));
        }
    }

    #[test]
    fn every_supported_element_has_a_radius_and_a_core_smaller_than_itself() {
        for z in 1..=LAST_SUPPORTED {
            let r = covalent_radius_angstrom(z).unwrap();
            assert!((0.25..2.1).contains(&r));
            assert!(2 * core_orbitals(z) < z as usize);
        }
        assert_eq!(covalent_radius_angstrom(37), None);
    }
}

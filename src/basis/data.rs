//! The bundled sets: names, spellings, and which auxiliary set goes with which.

macro_rules! bundled {
    ($($name:literal => $file:literal),+ $(,)?) => {
        /// Names of all bundled sets: orbital sets by size, then auxiliary ones.
        pub const BUNDLED: &[&str] = &[$($name),+];

        /// Text of a bundled set by canonical name.
        pub(super) fn text(name: &str) -> Option<&'static str> {
            match name {
                $($name => Some(include_str!(concat!("data/", $file, ".txt"))),)+
                _ => None,
            }
        }
    };
}

bundled! {
    "sto-3g" => "sto-3g",
    "6-31g*" => "6-31gs",
    "def2-svp" => "def2-svp",
    "def2-svpd" => "def2-svpd",
    "cc-pvdz" => "cc-pvdz",
    "aug-cc-pvdz" => "aug-cc-pvdz",
    "def2-tzvp" => "def2-tzvp",
    "def2-tzvpp" => "def2-tzvpp",
    "def2-tzvpd" => "def2-tzvpd",
    "cc-pvtz" => "cc-pvtz",
    "aug-cc-pvtz" => "aug-cc-pvtz",
    "def2-qzvp" => "def2-qzvp",
    "def2-universal-jkfit" => "def2-universal-jkfit",
    "def2-svp-rifit" => "def2-svp-rifit",
    "def2-svpd-rifit" => "def2-svpd-rifit",
    "cc-pvdz-rifit" => "cc-pvdz-rifit",
    "aug-cc-pvdz-rifit" => "aug-cc-pvdz-rifit",
    "def2-tzvp-rifit" => "def2-tzvp-rifit",
    "def2-tzvpp-rifit" => "def2-tzvpp-rifit",
    "def2-tzvpd-rifit" => "def2-tzvpd-rifit",
    "cc-pvtz-rifit" => "cc-pvtz-rifit",
    "aug-cc-pvtz-rifit" => "aug-cc-pvtz-rifit",
    "def2-qzvp-rifit" => "def2-qzvp-rifit",
}

/// The spelling under which a set is kept: lower case, blanks and underscores as hyphens,
/// `(d)` as `*`. The name need not be a known one.
pub fn canonical_name(name: &str) -> String {
    let name = name.trim().to_lowercase().replace([' ', '_'], "-");
    match name.as_str() {
        "6-31g(d)" | "6-31gs" | "631g*" | "6-31-g*" => "6-31g*".to_string(),
        "sto3g" => "sto-3g".to_string(),
        _ => name,
    }
}

/// The auxiliary set with which the mean field of any bundled orbital set is fitted.
///
/// F. Weigend's set (J. Comput. Chem. 29, 167, 2008) is made for Coulomb and exchange of every
/// orbital set up to quadruple zeta, so one name serves them all.
pub fn default_auxiliary(_basis_name: &str) -> &'static str {
    "def2-universal-jkfit"
}

/// The auxiliary set made for the correlated step of an orbital set; `None` where none is bundled
/// (STO-3G, 6-31G*), and the mean field's set has to serve.
pub fn correlation_auxiliary(basis_name: &str) -> Option<&'static str> {
    let wanted = format!("{}-rifit", canonical_name(basis_name));
    BUNDLED.iter().copied().find(|&name| name == wanted)
}

/// The known name with the fewest single-letter changes from the given one.
pub(super) fn nearest_name(name: &str) -> &'static str {
    BUNDLED
        .iter()
        .copied()
        .min_by_key(|known| edit_distance(name, known))
        .unwrap_or("def2-tzvp")
}

/// Levenshtein's distance.
fn edit_distance(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, ca) in a.chars().enumerate() {
        let mut diagonal = row[0];
        row[0] = i + 1;
        for (j, &cb) in b.iter().enumerate() {
            let replaced = diagonal + usize::from(ca != cb);
            diagonal = row[j + 1];
            row[j + 1] = replaced.min(diagonal + 1).min(row[j] + 1);
        }
    }
    row[b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::basis::{BasisSet, Role};

    #[test]
    fn every_bundled_set_reads_and_keeps_its_literature() {
        for name in BUNDLED {
            let set = BasisSet::bundled(name).unwrap();
            assert_eq!(set.name, *name);
            assert_eq!(canonical_name(&set.display_name), *name);
            assert!(
                set.references
                    .iter()
                    .all(|r| r.contains("doi") || r.contains("unpublished")),
                "{name}"
            );
            assert!(
                !set.references.is_empty() && set.origin.contains("Exchange"),
                "{name}"
            );
            let auxiliary = name.ends_with("fit");
            assert_eq!(set.role == Role::Auxiliary, auxiliary, "{name}");
            for z in [1, 6, 7, 8, 9, 16, 17, 35] {
                assert!(set.element(z).is_some(), "{name} lacks element {z}");
            }
        }
    }

    #[test]
    fn names_are_forgiving_and_suggestions_near() {
        for name in ["6-31G(d)", " 6-31G* ", "6-31gs"] {
            assert_eq!(BasisSet::bundled(name).unwrap().name, "6-31g*");
        }
        assert_eq!(BasisSet::bundled("Def2_TZVP").unwrap().name, "def2-tzvp");
        let error = BasisSet::bundled("def2-tvzp").unwrap_err().to_string();
        assert!(
            error.contains("unknown basis set 'def2-tvzp'; did you mean 'def2-"),
            "{error}"
        );
        assert!(error.contains("Known: sto-3g, 6-31g*, "), "{error}");
        assert_eq!(nearest_name("aug-cc-pvdt"), "aug-cc-pvdz");
        assert_eq!(nearest_name("ccpvtz"), "cc-pvtz");
        assert_eq!(
            (edit_distance("", "abc"), edit_distance("kitten", "sitting")),
            (3, 3)
        );
    }

    #[test]
    fn auxiliary_sets_exist() {
        assert!(BUNDLED.contains(&default_auxiliary("cc-pvdz")));
        assert_eq!(correlation_auxiliary("def2-SVP"), Some("def2-svp-rifit"));
        assert_eq!(
            correlation_auxiliary("aug-cc-pvtz"),
            Some("aug-cc-pvtz-rifit")
        );
        assert_eq!(correlation_auxiliary("6-31g*"), None);
    }
}

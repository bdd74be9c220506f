//! A published basis set and the reader of its text.
//!
//! The format is our own and stands in `data/generate.py`, which writes it: comment lines with
//! name, role and literature; an element symbol; one line per shell with the letter of its angular
//! momentum, the exponents, and after each `:` the coefficients of one contraction.

use super::BasisError;
use super::data::{self, BUNDLED};
use crate::molecule::{number_of_symbol, symbol};
use std::collections::BTreeMap;
use std::fmt;

/// What a set is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Role {
    /// Holds orbitals.
    Orbital,
    /// Fits products of orbitals.
    Auxiliary,
}

impl fmt::Display for Role {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Role::Orbital => "orbital",
            Role::Auxiliary => "auxiliary",
        })
    }
}

/// A basis set as published.
#[derive(Debug, Clone, PartialEq)]
pub struct BasisSet {
    /// Canonical lower-case name.
    pub name: String,
    /// Name as its authors write it.
    pub display_name: String,
    /// What it is for.
    pub role: Role,
    /// Where the numbers were taken from.
    pub origin: String,
    /// Literature, each with the elements that it covers.
    pub references: Vec<String>,
    elements: BTreeMap<u8, ElementBasis>,
}

/// The shells of one element.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct ElementBasis {
    /// Shells in the published order; general contractions split.
    pub shells: Vec<RawShell>,
}

/// One contraction as published.
#[derive(Debug, Clone, PartialEq)]
pub struct RawShell {
    /// Angular momentum l.
    pub l: usize,
    /// Exponents, bohr⁻².
    pub exponents: Vec<f64>,
    /// Coefficients over normalised primitives; none is zero.
    pub coefficients: Vec<f64>,
}

impl BasisSet {
    /// A bundled set by name, in any case; `6-31g(d)` is `6-31g*`.
    pub fn bundled(name: &str) -> Result<BasisSet, BasisError> {
        let canonical = data::canonical_name(name);
        match data::text(&canonical) {
            Some(text) => BasisSet::parse(text, &canonical),
            None => Err(BasisError::UnknownSet {
                found: name.to_string(),
                nearest: data::nearest_name(&canonical).to_string(),
                known: BUNDLED.join(", "),
            }),
        }
    }

    /// A bundled orbital set by name; refuses an auxiliary one.
    pub fn orbital(name: &str) -> Result<BasisSet, BasisError> {
        BasisSet::bundled(name)?.expect_role(Role::Orbital, "def2-tzvp")
    }

    /// A bundled auxiliary set by name; refuses an orbital one.
    pub fn auxiliary(name: &str) -> Result<BasisSet, BasisError> {
        BasisSet::bundled(name)?.expect_role(Role::Auxiliary, "def2-universal-jkfit")
    }

    fn expect_role(self, wanted: Role, example: &'static str) -> Result<BasisSet, BasisError> {
        if self.role == wanted {
            Ok(self)
        } else {
            Err(BasisError::WrongRole {
                set: self.name,
                actual: self.role,
                wanted,
                example,
            })
        }
    }

    /// The shells of an element; `None` where the set does not reach.
    pub fn element(&self, number: u8) -> Option<&ElementBasis> {
        self.elements.get(&number)
    }

    /// Replaces the shells of an element.
    pub(super) fn set_element(&mut self, number: u8, shells: ElementBasis) {
        self.elements.insert(number, shells);
    }

    /// The elements that the set covers, as ranges: `H–Ar, Ca–Kr`.
    pub fn covered(&self) -> String {
        let mut runs: Vec<(u8, u8)> = Vec::new();
        for &z in self.elements.keys() {
            match runs.last_mut() {
                Some((_, last)) if *last + 1 == z => *last = z,
                _ => runs.push((z, z)),
            }
        }
        let name = |z: u8| symbol(z).unwrap_or("?");
        let texts: Vec<String> = runs
            .iter()
            .map(|&(a, b)| match a == b {
                true => name(a).to_string(),
                false => format!("{}–{}", name(a), name(b)),
            })
            .collect();
        texts.join(", ")
    }

    /// Reads the text of a set; `file` names it in errors and becomes the canonical name.
    pub fn parse(text: &str, file: &str) -> Result<BasisSet, BasisError> {
        let mut set = BasisSet {
            name: file.to_string(),
            display_name: file.to_string(),
            role: Role::Orbital,
            origin: String::new(),
            references: Vec::new(),
            elements: BTreeMap::new(),
        };
        let mut current: Option<u8> = None;
        for (i, line) in text.lines().enumerate() {
            let bad = |found: &str, expected| BasisError::BadData {
                file: file.to_string(),
                line: i + 1,
                found: found.chars().take(40).collect(),
                expected,
            };
            let line = line.trim();
            if let Some(comment) = line.strip_prefix('#') {
                let (key, value) = comment
                    .trim()
                    .split_once(' ')
                    .unwrap_or((comment.trim(), ""));
                match key {
                    "name" => set.display_name = value.to_string(),
                    "role" if value == "orbital" => set.role = Role::Orbital,
                    "role" if value == "auxiliary" => set.role = Role::Auxiliary,
                    "role" => return Err(bad(value, "'orbital' or 'auxiliary'")),
                    "origin" => set.origin = value.to_string(),
                    "reference" => set.references.push(value.to_string()),
                    _ => {}
                }
                continue;
            }
            let mut words = line.split_whitespace();
            let Some(head) = words.next() else { continue };
            // A shell's letter is lower case, an element starts with a capital.
            if head.starts_with(|c: char| c.is_ascii_uppercase()) {
                let z = number_of_symbol(head).ok_or_else(|| bad(head, "an element symbol"))?;
                set.elements.entry(z).or_default();
                current = Some(z);
                continue;
            }
            let l = "spdfghi".find(head).filter(|_| head.len() == 1);
            let l = l.ok_or_else(|| bad(head, "an element symbol or a shell letter"))?;
            let z = current.ok_or_else(|| bad(head, "an element symbol before the first shell"))?;
            let shells = parse_shell(l, &line[1..]).map_err(|(found, why)| bad(&found, why))?;
            set.elements.entry(z).or_default().shells.extend(shells);
        }
        Ok(set)
    }
}

/// One line of exponents and contractions; zero coefficients are dropped.
fn parse_shell(l: usize, text: &str) -> Result<Vec<RawShell>, (String, &'static str)> {
    let mut columns = Vec::new();
    for part in text.split(':') {
        let mut column = Vec::new();
        for word in part.split_whitespace() {
            match word.parse::<f64>() {
                Ok(v) if v.is_finite() => column.push(v),
                _ => return Err((word.to_string(), "a finite number")),
            }
        }
        columns.push(column);
    }
    let exponents = columns.remove(0);
    if exponents.is_empty() || exponents.iter().any(|&a| a <= 0.0) {
        return Err((text.trim().to_string(), "positive exponents"));
    }
    if columns.is_empty() {
        if exponents.len() > 1 {
            return Err((text.trim().to_string(), "coefficients after ':'"));
        }
        columns.push(vec![1.0]);
    }
    let mut shells = Vec::new();
    for column in columns {
        if column.len() != exponents.len() {
            return Err((text.trim().to_string(), "as many coefficients as exponents"));
        }
        let kept = exponents.iter().zip(&column).filter(|&(_, &c)| c != 0.0);
        let (exponents, coefficients): (Vec<f64>, Vec<f64>) = kept.unzip();
        if exponents.is_empty() {
            return Err((
                text.trim().to_string(),
                "a contraction that is not all zero",
            ));
        }
        shells.push(RawShell {
            l,
            exponents,
            coefficients,
        });
    }
    Ok(shells)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shells_are_split_and_zeros_dropped() {
        let text = "# name My Set\n# role auxiliary\n# reference H: someone\nC\n\
                    s 10 2 0.5 : 0.1 0.2 0 : 0 0 1\np 0.3\n";
        let set = BasisSet::parse(text, "my-set").unwrap();
        assert_eq!(
            (set.display_name.as_str(), set.role),
            ("My Set", Role::Auxiliary)
        );
        assert_eq!(set.references, ["H: someone"]);
        let shells = &set.element(6).unwrap().shells;
        assert_eq!(shells.len(), 3);
        assert_eq!(shells[0].exponents, [10.0, 2.0]);
        assert_eq!(shells[1].exponents, [0.5]);
        assert_eq!(
            (shells[2].l, shells[2].coefficients.as_slice()),
            (1, [1.0].as_slice())
        );
        assert_eq!(set.covered(), "C");
    }

    #[test]
    fn bad_text_is_located() {
        let cases = [
            ("s 1\n", 1, "before the first shell"),
            ("Zz\n", 1, "an element symbol"),
            ("C\nk 1\n", 2, "a shell letter"),
            ("C\nsp 1\n", 2, "a shell letter"),
            ("C\ns\n", 2, "positive exponents"),
            ("C\ns -1\n", 2, "positive exponents"),
            ("C\ns nan\n", 2, "a finite number"),
            ("C\ns 1 2\n", 2, "coefficients after"),
            ("C\ns 1 2 : 1\n", 2, "as many coefficients"),
            ("C\n\ns 1 2 : 0 0\n", 3, "not all zero"),
            ("# role other\n", 1, "'orbital' or"),
        ];
        for (text, line, words) in cases {
            let message = BasisSet::parse(text, "x").unwrap_err().to_string();
            assert!(
                message.starts_with(&format!("x, line {line}: ")),
                "{message}"
            );
            assert!(message.contains(words), "{message}");
        }
    }

    #[test]
    fn roles_are_checked() {
        assert!(BasisSet::orbital("def2-tzvp").is_ok());
        let error = BasisSet::orbital("def2-universal-jkfit")
            .unwrap_err()
            .to_string();
        assert!(
            error.contains("is an auxiliary basis; expected an orbital basis"),
            "{error}"
        );
        assert!(BasisSet::auxiliary("cc-pvdz").is_err());
    }
}

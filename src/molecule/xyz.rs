//! The reader of XYZ files.
//!
//! First line: number of atoms. Second line: a comment, which is never interpreted (charge and
//! multiplicity come from the caller alone, so that a stray word cannot change a calculation).
//! Then one line per atom: an element (symbol in any case, or atomic number) and x, y, z in Å.
//! Blank lines before the count and among or after the atoms, tabs, CRLF and a byte-order mark do
//! no harm. Anything else is an error that names file and line.

use super::error::{CLOSEST_ANGSTROM, FARTHEST_ANGSTROM, GeometryError};
use super::{Atom, LAST_SUPPORTED, Molecule, number_of_symbol, symbol};
use crate::units::{angstrom_to_bohr, bohr_to_angstrom};
use nalgebra::Vector3;
use std::path::Path;

impl Molecule {
    /// Reads an XYZ file. The name of the molecule is the file's stem.
    ///
    /// `multiplicity: None` takes the lowest that fits: 1 for an even number of electrons, 2 for
    /// an odd one.
    pub fn read(
        path: &Path,
        charge: i32,
        multiplicity: Option<u32>,
    ) -> Result<Molecule, GeometryError> {
        let file = path.display().to_string();
        let bytes = std::fs::read(path).map_err(|e| GeometryError::Unreadable {
            file: file.clone(),
            reason: e.to_string(),
        })?;
        let text = std::str::from_utf8(&bytes).map_err(|e| GeometryError::NotText {
            file: file.clone(),
            line: 1 + bytes[..e.valid_up_to()]
                .iter()
                .filter(|&&b| b == b'\n')
                .count(),
        })?;
        let mut molecule = Molecule::from_xyz(text, &file, charge, multiplicity)?;
        if let Some(stem) = path.file_stem() {
            molecule.name = stem.to_string_lossy().into_owned();
        }
        Ok(molecule)
    }

    /// Reads XYZ text; `source` names it in errors and becomes the molecule's name.
    pub fn from_xyz(
        text: &str,
        source: &str,
        charge: i32,
        multiplicity: Option<u32>,
    ) -> Result<Molecule, GeometryError> {
        let (atoms, atom_lines) = read_atoms(text, source)?;
        check_distances(&atoms, &atom_lines, source)?;
        let mut molecule = Molecule {
            name: source.to_string(),
            atoms,
            charge,
            multiplicity: 1,
        };
        molecule.multiplicity = fitting_multiplicity(&molecule, source, multiplicity)?;
        Ok(molecule)
    }

    /// The molecule as XYZ text, Å with ten decimals; `comment` becomes the second line.
    pub fn to_xyz(&self, comment: &str) -> String {
        let comment = comment.replace(['\n', '\r'], " ");
        let mut text = format!("{}\n{comment}\n", self.atoms.len());
        for atom in &self.atoms {
            let p = atom.position_bohr.map(bohr_to_angstrom);
            text += &format!(
                "{:<2} {:16.10} {:16.10} {:16.10}\n",
                atom.symbol(),
                p.x,
                p.y,
                p.z
            );
        }
        text
    }
}

/// The atoms with the line of each.
fn read_atoms(text: &str, file: &str) -> Result<(Vec<Atom>, Vec<usize>), GeometryError> {
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);
    let mut lines = text
        .lines()
        .enumerate()
        .map(|(i, line)| (i + 1, line.trim()));
    let file_name = || file.to_string();

    let Some((count_line, count_text)) = lines.by_ref().find(|(_, line)| !line.is_empty()) else {
        return Err(GeometryError::Empty { file: file_name() });
    };
    let expected = match count_text.parse::<usize>() {
        Ok(n) if n > 0 => n,
        _ => {
            let found = shortened(count_text);
            return Err(GeometryError::BadCount {
                file: file_name(),
                line: count_line,
                found,
            });
        }
    };
    let mut last_line = count_line;
    if let Some((comment_line, _)) = lines.next() {
        last_line = comment_line;
    }

    let (mut atoms, mut atom_lines) = (Vec::new(), Vec::new());
    for (line, content) in lines {
        last_line = line;
        if content.is_empty() {
            continue;
        }
        if atoms.len() == expected {
            let found = shortened(content);
            return Err(GeometryError::TooManyAtoms {
                file: file_name(),
                line,
                count_line,
                found,
                expected,
            });
        }
        atoms.push(read_atom(content, file, line)?);
        atom_lines.push(line);
    }
    if atoms.len() < expected {
        let found = atoms.len();
        return Err(GeometryError::TooFewAtoms {
            file: file_name(),
            line: last_line,
            count_line,
            found,
            expected,
        });
    }
    Ok((atoms, atom_lines))
}

fn read_atom(content: &str, file: &str, line: usize) -> Result<Atom, GeometryError> {
    let columns: Vec<&str> = content.split_whitespace().collect();
    let [element, x, y, z] = columns[..] else {
        return Err(GeometryError::WrongColumns {
            file: file.to_string(),
            line,
            found: columns.len(),
            text: shortened(content),
        });
    };
    let number = read_element(element, file, line)?;
    let mut position_bohr = Vector3::zeros();
    for (i, (axis, found)) in [('x', x), ('y', y), ('z', z)].into_iter().enumerate() {
        position_bohr[i] = angstrom_to_bohr(read_coordinate(found, axis, file, line)?);
    }
    Ok(Atom {
        number,
        position_bohr,
    })
}

fn read_element(found: &str, file: &str, line: usize) -> Result<u8, GeometryError> {
    let number = match found.parse::<u8>() {
        Ok(n) => symbol(n).map(|_| n),
        Err(_) => number_of_symbol(found),
    };
    match number.and_then(|n| symbol(n).map(|s| (n, s))) {
        None => Err(GeometryError::UnknownElement {
            file: file.to_string(),
            line,
            found: shortened(found),
        }),
        Some((number, symbol)) if number > LAST_SUPPORTED => {
            Err(GeometryError::UnsupportedElement {
                file: file.to_string(),
                line,
                symbol,
                number,
            })
        }
        Some((number, _)) => Ok(number),
    }
}

fn read_coordinate(found: &str, axis: char, file: &str, line: usize) -> Result<f64, GeometryError> {
    let file = file.to_string();
    // Fortran programs write 1.0D-03.
    let value = found.replace(['d', 'D'], "e").parse::<f64>();
    match value {
        Ok(v) if v.is_finite() && v.abs() <= FARTHEST_ANGSTROM => Ok(v),
        Ok(_) => Err(GeometryError::OutOfRange {
            file,
            line,
            axis,
            found: shortened(found),
        }),
        Err(_) => {
            let hint = if found.contains(',') {
                " (with a decimal point, not a comma)"
            } else {
                ""
            };
            Err(GeometryError::NotANumber {
                file,
                line,
                axis,
                found: shortened(found),
                hint,
            })
        }
    }
}

fn check_distances(atoms: &[Atom], atom_lines: &[usize], file: &str) -> Result<(), GeometryError> {
    for (i, a) in atoms.iter().enumerate() {
        for (j, b) in atoms[..i].iter().enumerate() {
            let distance_angstrom = bohr_to_angstrom((a.position_bohr - b.position_bohr).norm());
            if distance_angstrom < CLOSEST_ANGSTROM {
                return Err(GeometryError::TooClose {
                    file: file.to_string(),
                    line: atom_lines[i],
                    other_line: atom_lines[j],
                    distance_angstrom,
                });
            }
        }
    }
    Ok(())
}

fn fitting_multiplicity(
    molecule: &Molecule,
    file: &str,
    wanted: Option<u32>,
) -> Result<u32, GeometryError> {
    let electrons = molecule.electron_count();
    if electrons == 0 {
        return Err(GeometryError::NoElectrons {
            file: file.to_string(),
            charge: molecule.charge,
            protons: molecule.nuclear_charge(),
        });
    }
    let lowest = 1 + (electrons % 2) as u32;
    let multiplicity = wanted.unwrap_or(lowest);
    let parity_fits = multiplicity % 2 == lowest % 2;
    if multiplicity == 0 || !parity_fits || multiplicity as usize > electrons + 1 {
        let highest = electrons + 1;
        let kind = if lowest == 1 {
            "an odd number"
        } else {
            "an even number"
        };
        return Err(GeometryError::Multiplicity {
            file: file.to_string(),
            multiplicity,
            electrons,
            charge: molecule.charge,
            expected: format!("{kind} from {lowest} to {highest}"),
        });
    }
    Ok(multiplicity)
}

/// At most 40 characters of what was found, without control characters.
fn shortened(text: &str) -> String {
    let clean = |c: char| if c.is_control() { ' ' } else { c };
    if text.chars().count() <= 40 {
        text.chars().map(clean).collect()
    } else {
        text.chars().take(39).map(clean).chain(['…']).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn read(text: &str) -> Result<Molecule, GeometryError> {
        Molecule::from_xyz(text, "m.xyz", 0, None)
    }

    fn message(text: &str) -> String {
        read(text).expect_err(text).to_string()
    }

    #[test]
    fn harmless_oddities_are_read() {
        let plain = read("2\nwater-like\nO 0 0 0\nH 0 0 0.97\n").unwrap();
        let odd =
            "\u{feff}\r\n 2 \r\n\r\n\to\t0.0 0 -0\t\r\n\r\n1   0 0.0D+00 9.7e-1   \r\n\r\n \r\n";
        assert_eq!(read(odd).unwrap(), plain);
        assert_eq!(plain.multiplicity, 2);
        assert_eq!(read("1\nmultiplicity 3\nO 0 0 0").unwrap().multiplicity, 1);
    }

    #[test]
    fn written_text_reads_back() {
        let first = read("2\n\nO 0.1 -0.2 0.3\nH 0 0 -0.97").unwrap();
        let second = read(&first.to_xyz("two\nlines")).unwrap();
        for (a, b) in first.atoms.iter().zip(&second.atoms) {
            assert_eq!(a.number, b.number);
            assert!((a.position_bohr - b.position_bohr).norm() < 1e-10);
        }
    }

    #[test]
    fn every_malformed_file_is_located() {
        // (text, the line that the message must name, what it must say)
        let located = [
            ("two\n\nH 0 0 0", 1, "found 'two'"),
            ("2.0\n\nH 0 0 0\nH 0 0 1", 1, "whole number"),
            ("-1\n\nH 0 0 0", 1, "at least 1"),
            ("0\n\n", 1, "at least 1"),
            ("1 atom\n\nH 0 0 0", 1, "1 atom"),
            ("H 0 0 0\nH 0 0 0.74", 1, "number of atoms"),
            ("99999999999999999999999\n\nH 0 0 0", 1, "number of atoms"),
            ("2\n\nH 0 0 0", 3, "after 1 atom(s); line 1 promises 2"),
            ("2\n", 1, "after 0 atom(s)"),
            (
                "1\n\nH 0 0 0\nH 0 0 0.74",
                4,
                "found 'H 0 0 0.74' after the 1 atom(s)",
            ),
            ("1\n\nHe 0 0 0\n\n1\n\nHe 0 0 0", 5, "one geometry per file"),
            ("1\n\nH 0 0", 3, "found 3 column(s)"),
            ("1\n\nH", 3, "found 1 column(s)"),
            ("1\n\nH 0 0 0 0.5", 3, "found 5 column(s)"),
            ("1\n\nH,0,0,0", 3, "found 1 column(s)"),
            ("1\n\nQ 0 0 0", 3, "found 'Q'"),
            ("1\n\n0 0 0 0", 3, "found '0'; expected an element"),
            ("1\n\n87 0 0 0", 3, "found '87'"),
            ("1\n\n300 0 0 0", 3, "found '300'"),
            ("1\n\n-6 0 0 0", 3, "found '-6'"),
            ("1\n\nI 0 0 0", 3, "I (element 53)"),
            ("1\n\nH 0 zero 0", 3, "found 'zero' for y"),
            ("1\n\nH 0 0 0,5", 3, "not a comma"),
            ("1\n\nH 0 0 nan", 3, "found 'nan' for z; expected a finite"),
            ("1\n\nH inf 0 0", 3, "found 'inf' for x; expected a finite"),
            ("1\n\nH 0 -infinity 0", 3, "finite"),
            ("1\n\nH 0 1e400 0", 3, "finite"),
            ("1\n\nH 0 1e5 0", 3, "within ±10000"),
            (
                "2\n\nH 0 0 0\nH 0 0 0.19",
                4,
                "0.190 Å from the one on line 3",
            ),
            (
                "3\n\nO 0 0 0\nH 0 0 1\n\nH 0 0 1",
                6,
                "0.000 Å from the one on line 4",
            ),
        ];
        for (text, line, words) in located {
            let message = message(text);
            assert!(
                message.starts_with(&format!("m.xyz:{line}: ")),
                "{text:?}: {message}"
            );
            assert!(message.contains(words), "{text:?}: {message}");
        }
        for empty in ["", "\n \r\n\t\n", "\u{feff}"] {
            assert!(message(empty).starts_with("m.xyz: the file is empty"));
        }
        let long = message(&format!("1\n\n{} 0 0 0", "é".repeat(500)));
        assert!(long.chars().count() < 150, "{long}");
    }

    #[test]
    fn multiplicity_must_fit_the_electrons() {
        let oh = |charge, multiplicity| {
            Molecule::from_xyz("2\n\nO 0 0 0\nH 0 0 0.97", "oh.xyz", charge, multiplicity)
                .map(|m| m.multiplicity)
                .map_err(|e| e.to_string())
        };
        assert_eq!(oh(0, None), Ok(2));
        assert_eq!(oh(0, Some(4)), Ok(4));
        assert_eq!(oh(-1, None), Ok(1));
        assert_eq!(oh(0, Some(10)), Ok(10));
        assert!(
            oh(0, Some(1))
                .unwrap_err()
                .contains("9 electrons (charge 0); expected an even")
        );
        assert!(
            oh(-1, Some(2))
                .unwrap_err()
                .contains("expected an odd number from 1 to 11")
        );
        assert!(oh(0, Some(12)).is_err());
        assert!(oh(0, Some(0)).is_err());
        assert!(oh(9, None).unwrap_err().contains("leaves no electrons"));
        assert!(oh(i32::MAX, None).is_err());
        assert!(oh(i32::MIN, None).is_ok());
    }

    #[test]
    fn unreadable_and_binary_files_are_named() {
        let folder = tempfile::tempdir().unwrap();
        let missing = folder.path().join("none.xyz");
        let error = Molecule::read(&missing, 0, None).unwrap_err().to_string();
        assert!(error.contains("none.xyz: cannot be read"), "{error}");
        let binary = folder.path().join("bad.xyz");
        std::fs::write(&binary, b"1\n\nH 0 0 \xff\n").unwrap();
        let error = Molecule::read(&binary, 0, None).unwrap_err().to_string();
        assert!(error.contains("bad.xyz:3: found bytes"), "{error}");
        let good = folder.path().join("argon.xyz");
        std::fs::write(&good, "1\n\nAr 0 0 0\n").unwrap();
        assert_eq!(Molecule::read(&good, 0, None).unwrap().name, "argon");
    }
}

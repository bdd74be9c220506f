//! The architecture as tests: layers look down, rooms hold what they should, files stay short.

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};

const LONGEST_FILE: usize = 800;

/// Module → layer, from the table in DEVELOPERS.md (rows `| 3 | `integrals` | … |`).
fn layer_table() -> BTreeMap<String, u32> {
    let text = fs::read_to_string(root().join("DEVELOPERS.md")).unwrap();
    let mut table = BTreeMap::new();
    for line in text.lines() {
        let cells: Vec<&str> = line.split('|').map(str::trim).collect();
        let Some(layer) = cells.get(1).and_then(|c| c.parse().ok()) else {
            continue;
        };
        for name in cells[2].split(',') {
            table.insert(name.trim().trim_matches('`').to_owned(), layer);
        }
    }
    assert!(table.len() >= 10, "no layer table found in DEVELOPERS.md");
    table
}

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

/// Every Rust file below src with its top-level module and its text.
fn sources() -> Vec<(String, PathBuf, String)> {
    fn walk(folder: &Path, found: &mut Vec<PathBuf>) {
        for entry in fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                walk(&path, found);
            } else if path.extension().is_some_and(|e| e == "rs") {
                found.push(path);
            }
        }
    }
    let src = root().join("src");
    let mut paths = Vec::new();
    walk(&src, &mut paths);
    paths.sort();
    paths
        .into_iter()
        .map(|path| {
            let first = path.strip_prefix(&src).unwrap().iter().next().unwrap();
            let module = first.to_str().unwrap().trim_end_matches(".rs").to_owned();
            let text = fs::read_to_string(&path).unwrap();
            (module, path, text)
        })
        .filter(|(module, ..)| module != "lib" && module != "main")
        .collect()
}

/// The text without comments and without the unit tests at a file's end.
fn code(text: &str) -> String {
    text.lines()
        .take_while(|line| !line.starts_with("#[cfg(test)]"))
        .map(|line| line.split("//").next().unwrap())
        .collect::<Vec<_>>()
        .join("\n")
}

/// Modules named after `crate::`, also inside braces: `use crate::{fit, levels::Levels}`.
fn crate_paths(code: &str) -> Vec<String> {
    let mut found = Vec::new();
    for piece in code.split("crate::").skip(1) {
        let word = |text: &str| -> String {
            text.trim_start()
                .chars()
                .take_while(|c| c.is_alphanumeric() || *c == '_')
                .collect()
        };
        if let Some(list) = piece.strip_prefix('{') {
            let (mut depth, mut item) = (0, String::new());
            for c in list.chars() {
                match c {
                    '{' => depth += 1,
                    '}' if depth == 0 => break,
                    '}' => depth -= 1,
                    ',' if depth == 0 => found.push(word(&std::mem::take(&mut item))),
                    _ if depth == 0 => item.push(c),
                    _ => {}
                }
            }
            found.push(word(&item));
        } else {
            found.push(word(piece));
        }
    }
    found.retain(|name| !name.is_empty());
    found
}

#[test]
fn every_module_stands_in_the_table() {
    let table = layer_table();
    for (module, path, _) in sources() {
        assert!(
            table.contains_key(&module),
            "{} belongs to module '{module}', which the table in DEVELOPERS.md lacks",
            path.display()
        );
    }
}

#[test]
fn modules_import_only_from_lower_layers() {
    let table = layer_table();
    let mut wrong = Vec::new();
    for (module, path, text) in sources() {
        for target in crate_paths(&code(&text)) {
            let Some(below) = table.get(&target) else {
                continue; // a macro or an item re-exported by nobody: the compiler knows it
            };
            if target != module && *below >= table[&module] {
                wrong.push(format!("{}: {module} → {target}", path.display()));
            }
        }
    }
    assert!(
        wrong.is_empty(),
        "upward or sideways:\n{}",
        wrong.join("\n")
    );
}

#[test]
fn import_reader_sees_braces() {
    let code =
        "use crate::{fit::{Band, Grouping}, levels, trace::Trace};\nlet x = crate::units::EV;";
    assert_eq!(crate_paths(code), ["fit", "levels", "trace", "units"]);
}

#[test]
fn conversion_factors_live_in_units() {
    let factors = [
        "27.2113", "0.529177", "1.88972", "2.54174", "1.23984", "8065.5", "219474",
    ];
    for (module, path, text) in sources() {
        let bare = code(&text).replace('_', "");
        for factor in factors.iter().filter(|f| bare.contains(**f)) {
            assert!(
                module == "units",
                "{}: conversion factor {factor}",
                path.display()
            );
        }
    }
}

#[test]
fn only_some_modules_touch_files_and_one_prints() {
    let may_touch_files = ["trace", "molecule", "report", "study", "cli"];
    for (module, path, text) in sources() {
        let code = code(&text);
        if ["std::fs", "File::", "fs::"]
            .iter()
            .any(|w| code.contains(w))
        {
            let allowed = may_touch_files.contains(&module.as_str());
            assert!(allowed, "{} touches the file system", path.display());
        }
        if ["println!", "print!(", "eprint!(", "dbg!("]
            .iter()
            .any(|w| code.contains(w))
        {
            assert!(module == "cli", "{} prints", path.display());
        }
    }
}

#[test]
fn theory_and_measurement_do_not_meet_below_the_matcher() {
    let theory = [
        "molecule",
        "basis",
        "integrals",
        "scf",
        "orbitals",
        "ionization",
    ];
    let measured = ["trace", "lineshape", "fit"];
    for (module, path, text) in sources() {
        let uses = crate_paths(&code(&text));
        let crosses = |ours: &[&str], others: &[&str]| {
            ours.contains(&module.as_str()) && uses.iter().any(|u| others.contains(&u.as_str()))
        };
        let crossing = crosses(&theory, &measured) || crosses(&measured, &theory);
        assert!(!crossing, "{} crosses over", path.display());
    }
}

#[test]
fn files_can_be_read_in_one_sitting() {
    for (_, path, text) in sources() {
        let lines = text.lines().count();
        assert!(lines <= LONGEST_FILE, "{}: {lines} lines", path.display());
    }
}

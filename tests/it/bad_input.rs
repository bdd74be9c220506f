//! Wrong input through the program itself: each case ends with exit code 2 and a message that
//! names the place, and nothing is written.

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

const GOOD_XYZ: &str = "3\nwater\nO 0 0 0.119\nH 0 0.763 -0.477\nH 0 -0.763 -0.477\n";

/// A trace without a flaw: a flat background with one line.
fn good_trace() -> String {
    let mut text = "ionization_energy_ev,counts\n".to_owned();
    for i in 0..200 {
        let energy = 11.0 + 0.02 * f64::from(i);
        let line = 900.0 * (-((energy - 12.6) / 0.05).powi(2)).exp();
        text += &format!("{energy:.3},{:.0}\n", 20.0 + line);
    }
    text
}

fn bandproof(folder: &Path, arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_bandproof"))
        .args(arguments)
        .current_dir(folder)
        .output()
        .expect("the program starts")
}

/// Runs the program in a folder that holds `files`; it must refuse, say `expected`, and leave
/// nothing behind.
fn refused(name: &str, files: &[(&str, &[u8])], arguments: &[&str], expected: &str) {
    let folder = tempfile::tempdir().unwrap();
    for (file, content) in files {
        fs::write(folder.path().join(file), content).unwrap();
    }
    let output = bandproof(folder.path(), arguments);
    let message = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{name}: {message}");
    assert!(message.starts_with("error: "), "{name}: {message}");
    assert!(
        message.contains(expected),
        "{name}: expected '{expected}' in: {message}"
    );
    assert!(!message.contains("panicked"), "{name}: {message}");
    let left = fs::read_dir(folder.path()).unwrap().count();
    assert_eq!(left, files.len(), "{name}: something was written");
}

#[test]
fn malformed_geometries_are_refused_with_their_line() {
    let cases: &[(&str, &[u8], &str)] = &[
        ("empty file", b"", "m.xyz: "),
        ("only blanks", b" \n\t\n", "m.xyz: "),
        ("no count", b"water\n\nO 0 0 0\n", "m.xyz:1: found 'water'"),
        ("count zero", b"0\n\n", "m.xyz:1: found '0'"),
        ("negative count", b"-3\n\nO 0 0 0\n", "m.xyz:1: found '-3'"),
        (
            "fractional count",
            b"1.5\n\nO 0 0 0\n",
            "m.xyz:1: found '1.5'",
        ),
        (
            "too few atoms",
            b"3\n\nO 0 0 0\nH 0 0 1\n",
            "after 2 atom(s); line 1 promises 3",
        ),
        ("too many atoms", b"1\n\nHe 0 0 0\nHe 0 0 3\n", "m.xyz:4: "),
        ("unknown element", b"1\n\nXq 0 0 0\n", "m.xyz:3: found 'Xq'"),
        ("element out of reach", b"1\n\nU 0 0 0\n", "m.xyz:3: "),
        (
            "not a number",
            b"1\n\nHe 0 zero 0\n",
            "m.xyz:3: found 'zero'",
        ),
        (
            "decimal comma",
            b"1\n\nHe 0 0,5 0\n",
            "m.xyz:3: found '0,5'",
        ),
        ("NaN", b"1\n\nHe 0 NaN 0\n", "m.xyz:3: found 'NaN'"),
        ("infinity", b"1\n\nHe inf 0 0\n", "m.xyz:3: found 'inf'"),
        (
            "missing column",
            b"1\n\nHe 0 0\n",
            "m.xyz:3: found 3 column(s)",
        ),
        ("atoms too close", b"2\n\nH 0 0 0\nH 0 0 0.1\n", "m.xyz:4: "),
        ("not text", b"1\n\nHe 0 0 \xff\n", "m.xyz:3: "),
        ("open shell", b"1\n\nH 0 0 0\n", "open shell"),
    ];
    for (name, content, expected) in cases {
        refused(name, &[("m.xyz", content)], &["levels", "m.xyz"], expected);
    }
    let water = ("m.xyz", GOOD_XYZ.as_bytes());
    let more: &[(&str, &[&str], &str)] = &[
        ("missing file", &["levels", "n.xyz"], "n.xyz"),
        (
            "multiplicity",
            &["levels", "m.xyz", "--multiplicity", "2"],
            "multiplicity 2",
        ),
        (
            "charge",
            &["levels", "m.xyz", "--charge", "10"],
            "charge 10",
        ),
        (
            "basis",
            &["levels", "m.xyz", "--level", "koopmans/def2-tzpv"],
            "def2-tzvp",
        ),
        (
            "method",
            &["levels", "m.xyz", "--level", "kopmans/def2-svp"],
            "kopmans",
        ),
        (
            "level without basis",
            &["levels", "m.xyz", "--level", "koopmans"],
            "METHOD/BASIS",
        ),
        (
            "auxiliary",
            &["levels", "m.xyz", "--auxiliary", "nonesuch"],
            "nonesuch",
        ),
        (
            "resolution",
            &["simulate", "m.xyz", "--resolution", "0"],
            "--resolution",
        ),
    ];
    for (name, arguments, expected) in more {
        refused(name, &[water], arguments, expected);
    }
}

#[test]
fn malformed_studies_are_refused_with_line_and_column() {
    let head = "[molecule]\ngeometry = 'm.xyz'\n";
    let trace = "[trace]\nfile = 't.csv'\n";
    let cases: &[(&str, String, &str)] = &[
        ("not TOML", "[molecule\n".into(), "s.toml:1:"),
        ("empty study", String::new(), "s.toml: found no trace.file"),
        (
            "no geometry",
            trace.into(),
            "s.toml: found no molecule.geometry",
        ),
        ("no trace", head.into(), "s.toml: found no trace.file"),
        (
            "unknown section",
            format!("{head}{trace}[tracee]\n"),
            "s.toml:5:2: unknown field `tracee`",
        ),
        (
            "unknown key",
            format!("{head}{trace}photon_energy = 21\n"),
            "s.toml:5:1: unknown field",
        ),
        (
            "text for number",
            format!("{head}charge = 'one'\n"),
            "s.toml:3:10: ",
        ),
        (
            "fraction for charge",
            format!("{head}charge = 0.5\n"),
            "s.toml:3:10: ",
        ),
        (
            "negative multiplicity",
            format!("{head}multiplicity = -1\n"),
            "s.toml:3:16: ",
        ),
        (
            "key twice",
            format!("{head}geometry = 'n.xyz'\n"),
            "s.toml:3:1: duplicate key",
        ),
        (
            "window turned",
            format!("{head}{trace}window_ev = [14, 12]\n"),
            "s.toml:5:13: found [14, 12]",
        ),
        (
            "window of three",
            format!("{head}{trace}window_ev = [1, 2, 3]\n"),
            "s.toml:5:13: ",
        ),
        (
            "photon energy zero",
            format!("{head}{trace}photon_energy_ev = 0\n"),
            "s.toml:5:20: ",
        ),
        (
            "photon energy nan",
            format!("{head}{trace}photon_energy_ev = nan\n"),
            "s.toml:5:20: ",
        ),
        (
            "axis word",
            format!("{head}{trace}axis = 'binding'\n"),
            "s.toml:5:8: unknown variant `binding`",
        ),
        (
            "level word",
            format!("{head}[level]\nlevel = 'dft/def2-svp'\n"),
            "s.toml:4:9: unknown method 'dft'",
        ),
        (
            "direction word",
            format!("{head}[output]\ndirection = 'left'\n"),
            "s.toml:4:13: ",
        ),
        (
            "flight time uncalibrated",
            format!("{head}{trace}axis = 'flight-time'\nphoton_energy_ev = 21.2\n"),
            "s.toml: found no trace.flight_length_m",
        ),
        (
            "kinetic without photon energy",
            format!("{head}{trace}axis = 'kinetic'\n"),
            "t.csv",
        ),
        (
            "missing geometry file",
            format!("[molecule]\ngeometry = 'n.xyz'\n{trace}"),
            "n.xyz",
        ),
        (
            "missing trace file",
            format!("{head}[trace]\nfile = 'u.csv'\n"),
            "u.csv",
        ),
        (
            "window beside the trace",
            format!("{head}{trace}window_ev = [30, 40]\n"),
            "t.csv",
        ),
        (
            "unknown column",
            format!("{head}{trace}counts_column = 'signal'\n"),
            "t.csv:1: found no column named 'signal'",
        ),
    ];
    let good = good_trace();
    for (name, study, expected) in cases {
        let files: [(&str, &[u8]); 3] = [
            ("s.toml", study.as_bytes()),
            ("m.xyz", GOOD_XYZ.as_bytes()),
            ("t.csv", good.as_bytes()),
        ];
        refused(name, &files, &["assign", "s.toml"], expected);
    }
    let files: [(&str, &[u8]); 3] = [
        ("s.toml", &[head, trace].concat().into_bytes()),
        ("m.xyz", GOOD_XYZ.as_bytes()),
        ("t.csv", good.as_bytes()),
    ];
    let overrides: &[(&str, &[&str], &str)] = &[
        ("missing study", &["assign", "r.toml"], "r.toml"),
        (
            "override of nothing",
            &["assign", "s.toml", "--set", "trace.windw=[1,2]"],
            "windw",
        ),
        (
            "override turned",
            &["assign", "s.toml", "--set", "trace.window_ev=[9,8]"],
            "[9, 8]",
        ),
        (
            "flag turned",
            &["assign", "s.toml", "--window", "15", "12"],
            "[15, 12]",
        ),
        (
            "begin again",
            &["begin", "m.xyz", "t.csv", "--study", "s.toml"],
            "--overwrite",
        ),
    ];
    for (name, arguments, expected) in overrides {
        refused(name, &files, arguments, expected);
    }
}

#[test]
fn malformed_traces_are_refused_with_line_and_column() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/traces/bad");
    let list: toml::Table = fs::read_to_string(folder.join("cases.toml"))
        .unwrap()
        .parse()
        .unwrap();
    let mut run = 0;
    for case in list["case"].as_array().unwrap() {
        if case.get("options").is_some() {
            continue; // the reader's own test gives these their options
        }
        let file = case["file"].as_str().unwrap();
        let expected = format!("{file}{}", case["expected"].as_str().unwrap());
        let content = fs::read(folder.join(file)).unwrap();
        for command in ["trace", "bands"] {
            refused(file, &[(file, &content)], &[command, file], &expected);
        }
        run += 1;
    }
    assert!(run >= 30, "only {run} malformed traces were run");
}

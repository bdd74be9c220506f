//! The program as its user meets it: commands, what they print and write, exit codes.

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

fn demo(name: &str) -> String {
    format!("{}/spectra-demo/{name}", env!("CARGO_MANIFEST_DIR"))
}

fn bandproof(folder: &Path, arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_bandproof"))
        .args(arguments)
        .current_dir(folder)
        .output()
        .expect("the program starts")
}

fn printed(folder: &Path, arguments: &[&str]) -> String {
    let output = bandproof(folder, arguments);
    let message = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{arguments:?}: {message}");
    assert!(message.is_empty(), "quiet in a pipe, but: {message}");
    String::from_utf8(output.stdout).unwrap()
}

#[test]
fn levels_follow_the_schema_in_any_number_of_threads() {
    let folder = tempfile::tempdir().unwrap();
    let geometry = demo("hydrogen-sulfide/hydrogen-sulfide.xyz");
    let arguments = [
        "levels",
        &geometry,
        "--level",
        "koopmans/def2-svp",
        "--json",
    ];
    let one = printed(
        folder.path(),
        &[&arguments[..], &["--threads", "1"]].concat(),
    );
    let two = printed(
        folder.path(),
        &[&arguments[..], &["--threads", "2"]].concat(),
    );
    assert_eq!(one, two);
    let json: serde_json::Value = serde_json::from_str(&one).unwrap();
    assert_eq!(json["schema"], "bandproof/levels/1");
    assert_eq!(json["molecule"]["formula"], "H2S");
    assert_eq!(json["level"]["method"], "koopmans");
    assert_eq!(json["scf"]["converged"], true);
    let states = json["hole_states"].as_array().unwrap();
    assert_eq!(states.len(), 4);
    let first = &states[0];
    let index = first["leading_orbitals"][0]["index"].as_u64().unwrap() as usize;
    let orbital = &json["orbitals"][index];
    let koopmans = -orbital["energy_ev"].as_f64().unwrap();
    assert!((koopmans - first["ionization_energy_ev"].as_f64().unwrap()).abs() < 1e-9);
    assert_eq!(first["pole_strength"], 1.0);
}

/// Koopmans' rule puts 1πu of nitrogen first, the spectrum 3σg (15.58 and 16.93 eV; common
/// practice).
#[test]
fn levels_beyond_koopmans_say_where_the_order_changed() {
    let folder = tempfile::tempdir().unwrap();
    let geometry = format!(
        "{}/tests/data/many_body/geometries/N2.xyz",
        env!("CARGO_MANIFEST_DIR")
    );
    for method in ["second-order", "adc3"] {
        let level = format!("{method}/def2-svp");
        let arguments = ["levels", &geometry, "--level", &level];
        let text = printed(folder.path(), &arguments);
        let one_line = text.split_whitespace().collect::<Vec<_>>().join(" ");
        assert!(one_line.contains("Order changed: 3σg ("), "{text}");
        assert!(one_line.contains("comes before 1πu ("), "{text}");
        assert!(
            one_line.contains("correlated with def2-svp-rifit, core frozen"),
            "{text}"
        );

        let json = printed(folder.path(), &[&arguments[..], &["--json"]].concat());
        let json: serde_json::Value = serde_json::from_str(&json).unwrap();
        assert_eq!(json["schema"], "bandproof/levels/1");
        assert_eq!(json["level"]["method"], method);
        assert_eq!(json["level"]["frozen_core"], true);
        assert_eq!(json["level"]["auxiliary"], "def2-universal-jkfit");
        let states = json["hole_states"].as_array().unwrap();
        let mains: Vec<&str> = (states.iter())
            .filter(|state| state["kind"] == "main")
            .map(|state| state["label"].as_str().unwrap())
            .collect();
        assert_eq!(mains[..3], ["3σg", "1πu", "2σu"], "{method}");
        for state in states {
            let strength = state["pole_strength"].as_f64().unwrap();
            assert!(strength > 0.0 && strength < 1.0, "{state}");
            assert!(state["character"]["verdict"].is_string(), "{state}");
        }
        // The search of ADC ends below 2σg, and says so.
        let notes = json["notes"].as_array().unwrap();
        assert_eq!(notes.is_empty(), method == "second-order", "{notes:?}");

        let all = [&arguments[..], &["--json", "--all-electrons"]].concat();
        let all: serde_json::Value = serde_json::from_str(&printed(folder.path(), &all)).unwrap();
        assert_eq!(all["level"]["frozen_core"], false);
        let first = |json: &serde_json::Value| {
            json["hole_states"][0]["ionization_energy_ev"]
                .as_f64()
                .unwrap()
        };
        let core_effect = (first(&all) - first(&json)).abs();
        assert!(core_effect > 1e-6 && core_effect < 0.1, "{core_effect}");
    }
}

#[test]
fn a_study_can_be_begun_and_run() {
    let folder = tempfile::tempdir().unwrap();
    for file in ["formaldehyde.xyz", "formaldehyde.csv"] {
        fs::copy(
            demo(&format!("formaldehyde/{file}")),
            folder.path().join(file),
        )
        .unwrap();
    }
    printed(
        folder.path(),
        &["begin", "formaldehyde.xyz", "formaldehyde.csv"],
    );
    let small = ["--level", "koopmans/def2-svp", "--photon-energy", "21.218"];
    let run = [&["assign", "formaldehyde.toml"], &small[..]].concat();
    let output = printed(folder.path(), &run);
    let written = folder.path().join("formaldehyde.assigned");
    for name in [
        "overlay.svg",
        "overlay.png",
        "overlay.pdf",
        "assignment.csv",
        "assignment.md",
        "page.html",
        "dossier.json",
    ] {
        assert!(output.contains(name), "{name} is not named");
        assert!(written.join(name).metadata().unwrap().len() > 200, "{name}");
    }
    let dossier = fs::read_to_string(written.join("dossier.json")).unwrap();
    let json: serde_json::Value = serde_json::from_str(&dossier).unwrap();
    assert_eq!(json["levels"]["level"]["basis"], "def2-svp");
    assert_eq!(json["study"]["theory"]["level"], "koopmans/def2-svp");
    assert_eq!(json["study"]["trace"]["read"]["photon_energy_ev"], 21.218);

    // The same study gives the same bytes, whatever the number of threads.
    printed(
        folder.path(),
        &[&run[..], &["--threads", "1", "--into", "again"]].concat(),
    );
    for name in ["dossier.json", "overlay.svg", "assignment.md"] {
        let bytes = |folder: &Path| fs::read(folder.join(name)).unwrap();
        assert_eq!(
            bytes(&written),
            bytes(&folder.path().join("again")),
            "{name}"
        );
    }
}

#[test]
fn a_trace_can_be_described_and_converted() {
    let folder = tempfile::tempdir().unwrap();
    let furan = demo("furan/furan.csv");
    let kinetic = ["--axis", "kinetic", "--photon-energy", "21.218"];
    let described = printed(folder.path(), &[&["trace", &furan], &kinetic[..]].concat());
    assert!(described.contains("kinetic"), "{described}");
    printed(
        folder.path(),
        &[&["trace", &furan, "--write", "ie.csv"], &kinetic[..]].concat(),
    );
    let again = printed(folder.path(), &["trace", "ie.csv"]);
    assert!(again.contains("21.218"), "{again}");
}

#[test]
fn bands_need_no_molecule() {
    let folder = tempfile::tempdir().unwrap();
    let trace = demo("hydrogen-sulfide/hydrogen-sulfide.csv");
    let text = printed(folder.path(), &["bands", &trace, "--into", "out", "--json"]);
    let json: serde_json::Value =
        serde_json::from_str(text.split("\nWrote").next().unwrap()).unwrap();
    assert!(json["groupings"][0]["bands"].as_array().unwrap().len() >= 3);
    assert!(folder.path().join("out").read_dir().unwrap().count() >= 3);
}

#[test]
fn a_simulation_writes_its_figure() {
    let folder = tempfile::tempdir().unwrap();
    let geometry = demo("formaldehyde/formaldehyde.xyz");
    let small = [
        "--level",
        "koopmans/def2-svp",
        "--into",
        "out",
        "--photon-energy",
        "21.2",
    ];
    printed(
        folder.path(),
        &[&["simulate", &geometry], &small[..]].concat(),
    );
    assert!(folder.path().join("out").read_dir().unwrap().count() >= 3);
}

#[test]
fn an_output_that_cannot_be_written_is_exit_code_4() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(
        folder.path().join("taken"),
        "a file where a folder should be",
    )
    .unwrap();
    let geometry = demo("formaldehyde/formaldehyde.xyz");
    let arguments = [
        "simulate",
        &geometry,
        "--level",
        "koopmans/sto-3g",
        "--into",
        "taken",
    ];
    let output = bandproof(folder.path(), &arguments);
    assert_eq!(output.status.code(), Some(4));
    let kept = fs::read_to_string(folder.path().join("taken")).unwrap();
    assert_eq!(kept, "a file where a folder should be");
}

#[test]
fn help_has_examples_for_every_command() {
    let folder = tempfile::tempdir().unwrap();
    for command in ["assign", "levels", "simulate", "bands", "trace", "begin"] {
        let help = printed(folder.path(), &[command, "--help"]);
        assert!(help.contains("Example"), "{command}");
    }
}

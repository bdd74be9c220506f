//! A truly measured spectrum: trans-1,2-dichloroethene with nitrogen, raw counts against flight
//! time (data published with Phys. Chem. Chem. Phys. 26, 28406 (2024), doi 10.1039/D4CP02952F).
//! The data are not part of the project; the test runs where they are at hand.

use std::path::{Path, PathBuf};
use std::process::Command;

/// The folder of measured data: `BANDPROOF_MEASURED`, else `shared/measured` beside the project.
fn measured_file() -> Option<PathBuf> {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let folder = std::env::var_os("BANDPROOF_MEASURED")
        .map_or_else(|| root.join("../shared/measured"), PathBuf::from);
    let file = folder.join("trans_dce_n2/static_run_counts_vs_flight_time.csv");
    file.is_file().then_some(file)
}

#[test]
fn dichloroethene_is_assigned_from_raw_flight_times() {
    let Some(file) = measured_file() else {
        println!("skipped: the measured dichloroethene data are not at hand");
        return;
    };
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let out = tempfile::tempdir().unwrap();
    let quoted = |path: &Path| toml::Value::from(path.to_str().unwrap()).to_string();
    let output = Command::new(env!("CARGO_BIN_EXE_bandproof"))
        .arg("assign")
        .arg(root.join("tests/data/measured/trans-dichloroethene.toml"))
        .args(["--set", &format!("trace.file = {}", quoted(&file))])
        .arg("--into")
        .arg(out.path().join("out"))
        .output()
        .unwrap();
    let message = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{message}");
    println!("{}", String::from_utf8_lossy(&output.stdout));

    let dossier = std::fs::read_to_string(out.path().join("out/dossier.json")).unwrap();
    let dossier: serde_json::Value = serde_json::from_str(&dossier).unwrap();
    let remarks = dossier["remarks"].as_array().unwrap();
    let named = |cause: &str, energy: f64| {
        remarks.iter().any(|remark| {
            let first = remark["candidates"][0]["cause"].as_str().unwrap_or("");
            let position = remark["position_ev"].as_f64().unwrap();
            first.contains(cause) && (position - energy).abs() < 0.1
        })
    };
    // The calibration gas: N2+ X and A (Huber and Herzberg 1979, memory: 15.581, 16.70 to 17.2).
    assert!(named("N2 X", 15.581), "{remarks:#?}");
    // The first band: the π bonding pair of C=C and Cl (first ionization energy 9.6 eV, memory).
    let first = &dossier["matches"][0];
    assert_eq!(first["hole_states"].as_array().unwrap().len(), 1);
    let described = first["character"][0]["description"].as_str().unwrap();
    assert!(described.contains('π'), "{described}");
    let band = &dossier["bands"][0]["vertical_ev"].as_f64().unwrap();
    assert!((band - 9.8).abs() < 0.3, "{band}");
    assert!(out.path().join("out/overlay.png").is_file());
}

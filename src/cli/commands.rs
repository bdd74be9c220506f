//! One function per command: flags into settings, the run, what is printed.

use super::arguments::{
    AssignArguments, BandsArguments, BeginArguments, ComputeArguments, LevelsArguments,
    ReadArguments, SimulateArguments, TraceArguments,
};
use super::progress::Progress;
use crate::fit::FitOptions;
use crate::molecule::Molecule;
use crate::report;
use crate::study::request::{AxisName, Positive, StudyRequest};
use crate::study::settings::{Settings, TheorySettings, TraceSettings};
use crate::study::{StudyError, assigning, begin as template, compute, simulating};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// Stands for the study file in messages where there is none.
const COMMAND_LINE: &str = "command line";

pub(super) fn assign(a: AssignArguments) -> Result<(), StudyError> {
    let text = std::fs::read_to_string(&a.study).map_err(|source| StudyError::Unreadable {
        path: a.study.clone(),
        source,
    })?;
    let source = a.study.display().to_string();
    let overrides = [
        compute_overrides(&a.compute),
        read_overrides(&a.read),
        a.set,
    ]
    .concat();
    let request = StudyRequest::layered(&text, &source, &overrides)?;
    let mut settings = Settings::resolve(request, &a.study)?;
    if let Some(folder) = a.into {
        settings.folder = folder;
    }
    let progress = Progress::new();
    let dossier = assigning::run(&settings, &mut |e| progress.show(e))?;
    let written = report::write(&dossier, &settings.folder)?;
    drop(progress);
    print(&report::assignment_table(&dossier));
    print("\nWrote\n");
    for path in written {
        print(&format!("  {}\n", path.display()));
    }
    Ok(())
}

pub(super) fn levels(a: LevelsArguments) -> Result<(), StudyError> {
    let settings = theory(&a.compute, a.molecule)?;
    let progress = Progress::new();
    let levels = compute::levels(&settings, &mut |e| progress.show(e))?;
    drop(progress);
    if a.json {
        print_json(&levels);
    } else {
        print(&report::levels_table(&levels));
    }
    Ok(())
}

pub(super) fn simulate(a: SimulateArguments) -> Result<(), StudyError> {
    let positive = |option, value| {
        Positive::try_from(value).map_err(|problem| StudyError::Option { option, problem })
    };
    positive("--resolution", a.resolution)?;
    positive("--scale", a.scale)?;
    let folder = a.into.unwrap_or_else(|| {
        let stem = a.molecule.file_stem().unwrap_or_default().to_string_lossy();
        PathBuf::from(format!("{stem}.simulated"))
    });
    let settings = simulating::SimulateSettings {
        theory: theory(&a.compute, a.molecule)?,
        resolution_ev: a.resolution,
        shift_ev: a.shift,
        scale: a.scale,
        photon_energy_ev: a.photon_energy,
    };
    let progress = Progress::new();
    let simulated = simulating::run(&settings, &mut |e| progress.show(e))?;
    let written = simulated.write(&folder)?;
    drop(progress);
    print(&report::levels_table(&simulated.levels));
    print("\nWrote\n");
    for path in written {
        print(&format!("  {}\n", path.display()));
    }
    Ok(())
}

pub(super) fn bands(a: BandsArguments) -> Result<(), StudyError> {
    let mut overrides = read_overrides(&a.read);
    overrides.extend(a.resolution.map(|r| format!("fit.resolution_ev = {r:?}")));
    let (settings, options) = measured(&overrides, a.trace)?;
    let progress = Progress::new();
    let measured = assigning::fit(&settings, &options, &mut |e| progress.show(e))?;
    drop(progress);
    if a.json {
        print_json(&measured.fit);
    } else {
        print(&report::bands_table(&measured.fit));
    }
    if let Some(folder) = a.into {
        let written = measured.write(&folder)?;
        print("\nWrote\n");
        for path in written {
            print(&format!("  {}\n", path.display()));
        }
    }
    Ok(())
}

pub(super) fn trace(a: TraceArguments) -> Result<(), StudyError> {
    let (settings, _) = measured(&read_overrides(&a.read), a.trace)?;
    let trace = settings.load()?;
    print(&report::trace_summary(&trace));
    if let Some(path) = a.write {
        let mut text = Vec::new();
        crate::trace::write_delimited(&trace, &mut text).expect("writing to memory does not fail");
        report::put_in_place(&path, &text)?;
        print(&format!("\nWrote\n  {}\n", path.display()));
    }
    Ok(())
}

pub(super) fn begin(a: BeginArguments) -> Result<(), StudyError> {
    let molecule = Molecule::read(&a.molecule, 0, None)?;
    let (settings, _) = measured(&[], a.trace.clone())?;
    let trace = settings.load()?;
    let study = a.study.unwrap_or_else(|| {
        let stem = a.molecule.file_stem().unwrap_or_default().to_string_lossy();
        PathBuf::from(format!("{stem}.toml"))
    });
    if study.exists() && !a.overwrite {
        return Err(StudyError::Exists { path: study });
    }
    let folder = study.parent().unwrap_or(Path::new(""));
    let seen_from_study = |path: &Path| template::relative_to(path, folder);
    let text = template::study_text(
        &seen_from_study(&a.molecule),
        &molecule,
        &seen_from_study(&a.trace),
        &trace,
    );
    report::put_in_place(&study, text.as_bytes())?;
    print(&format!(
        "Wrote\n  {}\n\nNext: look it over, then run\n  bandproof assign {}\n",
        study.display(),
        study.display()
    ));
    Ok(())
}

/// A study without a file: what the flags say. Paths are relative to here.
fn flags_only(overrides: &[String]) -> Result<StudyRequest, StudyError> {
    Ok(StudyRequest::layered("", COMMAND_LINE, overrides)?)
}

fn theory(compute: &ComputeArguments, molecule: PathBuf) -> Result<TheorySettings, StudyError> {
    let mut request = flags_only(&compute_overrides(compute))?;
    request.molecule.geometry = Some(molecule);
    TheorySettings::resolve(
        &request.molecule,
        &request.level,
        Path::new(""),
        COMMAND_LINE,
    )
}

fn measured(
    overrides: &[String],
    file: PathBuf,
) -> Result<(TraceSettings, FitOptions), StudyError> {
    let mut request = flags_only(overrides)?;
    request.trace.file = Some(file);
    let trace = TraceSettings::resolve(&request.trace, Path::new(""), COMMAND_LINE)?;
    Ok((trace, request.fit.resolve()))
}

/// The flags as overrides of study keys, so that one rule lays both over the file.
fn compute_overrides(compute: &ComputeArguments) -> Vec<String> {
    let text = |value: &str| toml::Value::from(value).to_string();
    let level = compute.level.clone().map(String::from);
    [
        level.map(|l| format!("level.level = {}", text(&l))),
        compute.charge.map(|q| format!("molecule.charge = {q}")),
        (compute.multiplicity).map(|m| format!("molecule.multiplicity = {m}")),
        (compute.auxiliary.as_deref()).map(|a| format!("level.auxiliary = {}", text(a))),
        (compute.all_electrons).then(|| "level.all_electrons = true".to_owned()),
    ]
    .into_iter()
    .flatten()
    .collect()
}

fn read_overrides(read: &ReadArguments) -> Vec<String> {
    let key = |key: &str, value: Option<String>| value.map(|v| format!("trace.{key} = {v}"));
    let number = |value: Option<f64>| value.map(|v| toml::Value::from(v).to_string());
    let choice = |value: &Option<crate::trace::Choice>| {
        value.as_ref().map(|c| match c {
            crate::trace::Choice::Number(n) => n.to_string(),
            crate::trace::Choice::Name(name) => toml::Value::from(name.as_str()).to_string(),
        })
    };
    let axis = read
        .axis
        .map(|a| toml::Value::from(AxisName::name(a)).to_string());
    let window = (read.window.as_ref()).map(|w| toml::Value::from(w.clone()).to_string());
    [
        key("choice", choice(&read.choice)),
        key("axis", axis),
        key("photon_energy_ev", number(read.photon_energy)),
        key("energy_column", choice(&read.energy_column)),
        key("counts_column", choice(&read.counts_column)),
        key("sd_column", choice(&read.sd_column)),
        key("window_ev", window),
        key("merge_ev", number(read.merge)),
        key("flight_length_m", number(read.flight_length)),
        key("time_zero_ns", number(read.time_zero)),
        key("retarding_v", number(read.retarding)),
    ]
    .into_iter()
    .flatten()
    .collect()
}

fn print_json(value: &impl serde::Serialize) {
    let text = serde_json::to_string_pretty(value).expect("plain data has a JSON form");
    print(&text);
    print("\n");
}

/// Prints; a reader that closes the pipe early is no error.
fn print(text: &str) {
    let mut out = io::stdout().lock();
    if let Err(error) = out.write_all(text.as_bytes())
        && error.kind() != io::ErrorKind::BrokenPipe
    {
        eprintln!("error: cannot print: {error}");
    }
}

//! Writes the invented traces of the Heather Moss air station.
//!
//! ```text
//! cargo run --release --example heather-moss                  # rewrites the traces in spectra-demo/
//! cargo run --release --example heather-moss -- moved 7 OUT   # draw 7 of the moved truth, into OUT/
//! cargo run --release --example heather-moss -- truth         # prints what was planted, as tables
//! ```

mod model;

use std::path::{Path, PathBuf};
use std::{env, fs, io, process::ExitCode};

fn main() -> ExitCode {
    let arguments: Vec<String> = env::args().skip(1).collect();
    let words: Vec<&str> = arguments.iter().map(String::as_str).collect();
    let outcome = match words.as_slice() {
        [] => write_all(&home(), |scenario| scenario),
        ["moved", draw, folder] => match draw.parse() {
            Ok(draw) => write_all(Path::new(folder), |scenario| scenario.moved(draw)),
            Err(error) => Err(io::Error::other(format!("draw number '{draw}': {error}"))),
        },
        ["truth"] => {
            model::all().iter().for_each(print_truth);
            Ok(())
        }
        _ => Err(io::Error::other(
            "expected nothing, `truth`, or `moved NUMBER FOLDER`",
        )),
    };
    match outcome {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("{error}");
            ExitCode::FAILURE
        }
    }
}

fn home() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("spectra-demo")
}

/// Writes each study's trace; elsewhere than at home, its geometry and study file too.
fn write_all(folder: &Path, change: impl Fn(model::Scenario) -> model::Scenario) -> io::Result<()> {
    for scenario in model::all() {
        let scenario = change(scenario);
        let there = folder.join(scenario.name);
        let origin = home().join(scenario.name);
        fs::create_dir_all(&there)?;
        if there.canonicalize()? != origin.canonicalize()? {
            let geometry = format!("{}.xyz", scenario.name);
            for name in ["study.toml", geometry.as_str()] {
                fs::copy(origin.join(name), there.join(name))?;
            }
        }
        let path = there.join(format!("{}.csv", scenario.name));
        fs::write(&path, scenario.file())?;
        println!("{}", path.display());
    }
    Ok(())
}

/// What was planted, as a Markdown table.
fn print_truth(scenario: &model::Scenario) {
    println!(
        "### {} (offset {:+} eV)\n",
        scenario.molecule, scenario.offset_ev
    );
    println!(
        "| band | orbital | published | origin | first moment | spread | area | members above 2 % |"
    );
    println!("| --- | --- | --- | --- | --- | --- | --- | --- |");
    let own = scenario.bands.iter().map(|band| (String::new(), band));
    let foreign = scenario.gases.iter().flat_map(|gas| {
        gas.bands
            .iter()
            .map(move |band| (format!("{} ", gas.name), band))
    });
    for (prefix, band) in own.chain(foreign) {
        let members: Vec<String> = band
            .members
            .iter()
            .filter(|m| m.share >= 0.02)
            .map(|m| {
                format!(
                    "{:.3} ({:.0} %)",
                    band.origin_ev + m.offset_ev,
                    100.0 * m.share
                )
            })
            .collect();
        println!(
            "| {prefix}{} | {} | {:.2} | {:.3} | {:.3} | {:.3} | {:.0} | {} |",
            band.state,
            band.orbital,
            band.published.vertical_ev,
            band.origin_ev,
            band.vertical_ev(),
            band.spread_ev(),
            band.area,
            members.join(", ")
        );
    }
    for line in &scenario.lamp {
        println!(
            "| {} | all | −{:.3} eV | | | | {:.2} % | |",
            line.name,
            line.excess_ev,
            100.0 * line.relative_intensity
        );
    }
    println!();
}

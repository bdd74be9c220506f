//! Runs planted traces through the whole job and holds the outcome against what was planted.

use super::folder;
use super::model::{self, Scenario};
use bandproof::assign::{Assignment, Conditions, Remark, RemarkKind, assign};
use bandproof::fit::{BandFit, FitOptions, fit_bands};
use bandproof::levels::Levels;
use bandproof::study::compute;
use bandproof::study::request::StudyRequest;
use bandproof::study::settings::Settings;
use std::fmt::Write as _;

/// A planted band may be found this far from its first moment, eV: unresolved neighbours and the
/// instrument's offset move it.
const BAND_TOLERANCE_EV: f64 = 0.12;
/// The same for a line of a gas or of the lamp.
const LINE_TOLERANCE_EV: f64 = 0.06;
/// Least probability at which an alternative counts as named.
const NAMED: f64 = 0.05;
/// Draws of each study, and how many must come out right.
const DRAWS: u64 = 10;
const RIGHT: usize = 9;

struct Run {
    fit: BandFit,
    assignment: Assignment,
}

fn settings(scenario: &Scenario) -> Settings {
    let path = folder(scenario.name).join("study.toml");
    let request = StudyRequest::from_toml(&super::text(path.clone()), "study.toml").unwrap();
    Settings::resolve(request, &path).unwrap()
}

fn levels(scenario: &Scenario) -> Levels {
    compute::levels(&settings(scenario).theory, &mut |_| {}).unwrap()
}

fn run(scenario: &Scenario, levels: &Levels) -> Run {
    let settings = settings(scenario);
    let read = &settings.trace.read;
    let trace = bandproof::trace::from_text(&scenario.file(), scenario.name, read).unwrap();
    let options: &FitOptions = &settings.fit;
    let fit = fit_bands(&trace, options, &mut |_| {}).unwrap();
    let conditions = Conditions {
        photon_energy_ev: trace.photon_energy_ev,
        window_ev: trace.span_ev(),
        scale_offset_sd_ev: settings.trace.scale_offset_sd_ev,
    };
    let assignment = assign(&fit.groupings, levels, &conditions).unwrap();
    Run { fit, assignment }
}

/// What is wrong with the outcome, in words; empty if nothing is.
fn complaints(scenario: &Scenario, run: &Run) -> String {
    let mut wrong = String::new();
    let bands = &run.fit.groupings[run.assignment.grouping].bands;
    for planted in &scenario.bands {
        let energy = planted.vertical_ev() + scenario.offset_ev;
        let nearest = bands
            .iter()
            .filter(|band| run.assignment.matches.iter().any(|m| m.band == band.id))
            .min_by(|a, b| {
                let distance = |band: &&bandproof::fit::Band| (band.vertical_ev - energy).abs();
                distance(a).total_cmp(&distance(b))
            });
        let Some(band) = nearest.filter(|b| (b.vertical_ev - energy).abs() < BAND_TOLERANCE_EV)
        else {
            let _ = write!(wrong, "no band for {} at {energy:.2}; ", planted.orbital);
            continue;
        };
        let found = run
            .assignment
            .matches
            .iter()
            .find(|m| m.band == band.id)
            .unwrap();
        let orbital = planted.orbital.to_owned();
        let named = found.hole_states == [orbital.clone()]
            || found
                .alternatives
                .iter()
                .any(|other| other.probability >= NAMED && other.hole_states.contains(&orbital));
        if !named {
            let _ = write!(
                wrong,
                "{orbital} at {energy:.2} is called {:?}; ",
                found.hole_states
            );
        }
    }
    for remark in &run.assignment.remarks {
        if !planted(scenario, remark) {
            let _ = write!(
                wrong,
                "flagged {:?} at {:.2}; ",
                remark.kind, remark.position_ev
            );
        }
    }
    let line = main_line(scenario);
    let named = |remark: &Remark| {
        remark.kind == line.kind
            && (remark.position_ev - line.energy_ev).abs() < LINE_TOLERANCE_EV
            && remark.candidates[0].cause.contains(line.cause)
    };
    if !run.assignment.remarks.iter().any(named) {
        let _ = write!(
            wrong,
            "{} at {:.2} is not named; ",
            line.cause, line.energy_ev
        );
    }
    wrong
}

struct PlantedLine {
    kind: RemarkKind,
    energy_ev: f64,
    cause: &'static str,
}

/// The accident that the study is about.
fn main_line(scenario: &Scenario) -> PlantedLine {
    match (scenario.gases.first(), scenario.lamp.first()) {
        (Some(gas), _) => PlantedLine {
            kind: RemarkKind::ForeignGas,
            energy_ev: gas.bands[0].origin_ev + scenario.offset_ev,
            cause: gas.name,
        },
        (None, Some(lamp)) => PlantedLine {
            kind: RemarkKind::LampSatellite,
            energy_ev: scenario.bands[0].origin_ev - lamp.excess_ev + scenario.offset_ev,
            cause: "He I β",
        },
        (None, None) => panic!("{} has no accident", scenario.name),
    }
}

/// Whether a remark is about something that was planted: open order between neighbours, a line of
/// a planted gas, or the ghost of a planted band.
fn planted(scenario: &Scenario, remark: &Remark) -> bool {
    let near =
        |energy: f64| (remark.position_ev - scenario.offset_ev - energy).abs() < LINE_TOLERANCE_EV;
    match remark.kind {
        RemarkKind::OpenOrder => true,
        RemarkKind::ForeignGas => (scenario.gases.iter())
            .filter(|gas| remark.candidates[0].cause.contains(gas.name))
            .flat_map(|gas| &gas.bands)
            .any(|band| {
                band.members
                    .iter()
                    .any(|m| near(band.origin_ev + m.offset_ev))
            }),
        RemarkKind::LampSatellite => scenario.lamp.iter().any(|lamp| {
            scenario.bands.iter().any(|band| {
                let member = |m: &model::Line| near(band.origin_ev + m.offset_ev - lamp.excess_ev);
                let ghost = band.vertical_ev() - lamp.excess_ev;
                band.members.iter().any(member)
                    || (remark.position_ev - scenario.offset_ev - ghost).abs() < BAND_TOLERANCE_EV
            })
        }),
        RemarkKind::Unexplained | RemarkKind::MissingBand | RemarkKind::Fit => false,
    }
}

#[test]
fn the_studies_come_out_right() {
    for scenario in model::all() {
        let wrong = complaints(&scenario, &run(&scenario, &levels(&scenario)));
        assert!(wrong.is_empty(), "{}: {wrong}", scenario.name);
    }
}

#[test]
fn moved_truths_come_out_right() {
    let mut totals = Vec::new();
    for scenario in model::all() {
        let levels = levels(&scenario);
        let mut right = 0;
        for draw in 1..=DRAWS {
            let moved = scenario.moved(draw);
            let wrong = complaints(&moved, &run(&moved, &levels));
            right += usize::from(wrong.is_empty());
            if !wrong.is_empty() {
                println!("{}, draw {draw}: {wrong}", scenario.name);
            }
        }
        println!("{}: {right} of {DRAWS} draws right", scenario.name);
        totals.push((scenario.name, right));
    }
    assert!(
        totals.iter().all(|t| t.1 >= RIGHT),
        "of {DRAWS}: {totals:?}"
    );
}

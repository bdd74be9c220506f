//! Reading traces: every dialect of delimited text, every axis, every way to be wrong, and the
//! way back to a file.

mod jcamp;
mod vamas;

use std::collections::BTreeSet;
use std::fs;
use std::path::Path;

use bandproof::trace::{
    self, Axis, Choice, DecimalMark, Delimiter, Noise, ReadOptions, Trace, write_delimited,
};
use bandproof::units;
use proptest::prelude::*;
use serde::Deserialize;

const BAD: &str = "tests/data/traces/bad";

fn read(text: &str) -> Trace {
    read_with(text, &ReadOptions::default())
}

fn read_with(text: &str, options: &ReadOptions) -> Trace {
    trace::from_text(text, "run.csv", options).unwrap_or_else(|e| panic!("{e}\n{text}"))
}

fn message(text: &str, options: &ReadOptions) -> String {
    trace::from_text(text, "run.csv", options)
        .unwrap_err()
        .to_string()
}

/// Ten rows: energies 15.0 to 15.9 eV and counts 100 to 109, written by `row`.
fn ten(row: impl Fn(f64, u32) -> String) -> String {
    (0..10)
        .map(|i| row(15.0 + f64::from(i) / 10.0, 100 + i))
        .collect()
}

fn is_ten(trace: &Trace) {
    let energies: Vec<f64> = (0..10).map(|i| 15.0 + f64::from(i) / 10.0).collect();
    let counts: Vec<f64> = (0..10).map(|i| 100.0 + f64::from(i)).collect();
    for (found, expected) in trace.energy_ev.iter().zip(&energies) {
        assert!((found - expected).abs() < 1e-12, "{found} {expected}");
    }
    assert_eq!(trace.counts, counts);
    assert_eq!(trace.noise, Noise::Poisson);
    assert_eq!(trace.sd[0], 10.0);
    assert!(trace.exposure_ev.iter().all(|e| (e - 0.1).abs() < 1e-12));
}

fn comma(number: f64) -> String {
    format!("{number:.1}").replace('.', ",")
}

#[test]
fn every_dialect_gives_the_same_trace() {
    let dialects = [
        ("comma", ten(|e, c| format!("{e:.1},{c}\n"))),
        ("comma and blank", ten(|e, c| format!("  {e:.1} , {c}\n"))),
        ("trailing commas", ten(|e, c| format!("{e:.1},{c},,\n"))),
        ("semicolon", ten(|e, c| format!("{e:.1};{c}\n"))),
        (
            "semicolon, decimal comma",
            ten(|e, c| format!("{};{c}\n", comma(e))),
        ),
        ("tabulator", ten(|e, c| format!("{e:.1}\t{c}\n"))),
        (
            "tabulator, decimal comma",
            ten(|e, c| format!("{}\t{c},0\n", comma(e))),
        ),
        ("blanks", ten(|e, c| format!("   {e:.1}    {c}\n"))),
        (
            "blanks, decimal comma",
            ten(|e, c| format!("{} {c}\n", comma(e))),
        ),
        (
            "quoted decimal comma",
            ten(|e, c| format!("\"{}\",\"{c}\"\n", comma(e))),
        ),
        (
            "exponents",
            ten(|e, c| format!("{e:e},{:E}\n", f64::from(c))),
        ),
        (
            "FORTRAN exponents",
            ten(|e, c| format!("{:.3}D+01 {c}\n", e / 10.0)),
        ),
        ("CR LF", ten(|e, c| format!("{e:.1},{c}\r\n"))),
        ("CR alone", ten(|e, c| format!("{e:.1},{c}\r"))),
        (
            "byte-order mark",
            format!("\u{feff}{}", ten(|e, c| format!("{e:.1},{c}\n"))),
        ),
        (
            "end-of-file mark",
            format!("{}\u{1a}", ten(|e, c| format!("{e:.1},{c}\n"))),
        ),
        ("empty lines", ten(|e, c| format!("\n{e:.1},{c}\n   \n"))),
        (
            "header",
            format!(
                "Energy (eV),Counts\n{}",
                ten(|e, c| format!("{e:.1},{c}\n"))
            ),
        ),
        ("header with blanks", {
            format!(
                "Binding energy (eV)   Counts\n{}",
                ten(|e, c| format!("{e:.1} {c}\n"))
            )
        }),
        ("header and units", {
            format!(
                "Binding Energy;Counts\neV;1/s\n{}",
                ten(|e, c| format!("{e:.1};{c}\n"))
            )
        }),
        (
            "columns swapped",
            format!("counts,energy\n{}", ten(|e, c| format!("{c},{e:.1}\n"))),
        ),
        ("header in a comment", {
            format!(
                "# counts, energy_ev\n{}",
                ten(|e, c| format!("{c},{e:.1}\n"))
            )
        }),
        (
            "text column",
            format!(
                "ok,energy,counts\n{}",
                ten(|e, c| format!("yes,{e:.1},{c}\n"))
            ),
        ),
    ];
    for (name, text) in dialects {
        println!("{name}");
        is_ten(&read(&text));
    }
}

#[test]
fn falling_axes_are_turned_round() {
    let rising = ten(|e, c| format!("{e:.1},{c}\n"));
    let falling: String = rising.lines().rev().map(|l| format!("{l}\n")).collect();
    assert_eq!(read(&falling), read(&rising));
}

#[test]
fn comments_keep_their_order_and_lose_their_marks() {
    let marked = "# one\n% two\n; three\n! four\n// five\n#\n";
    let text = format!("{marked}{}# six\n", ten(|e, c| format!("{e:.1},{c}\n")));
    let trace = read(&text);
    is_ten(&trace);
    assert_eq!(
        trace.comments,
        ["one", "two", "three", "four", "five", "six"]
    );
}

#[test]
fn lines_before_the_data_without_mark_are_kept_and_noted() {
    let text = format!(
        "Gas cell run 12\nSample,furan\nEnergy,Counts\n{}",
        ten(|e, c| format!("{e:.1},{c}\n"))
    );
    let trace = read(&text);
    is_ten(&trace);
    assert_eq!(trace.comments, ["Gas cell run 12", "Sample,furan"]);
    assert!(trace.notes[0].starts_with("2 lines before the data bear no comment mark"));
}

#[test]
fn latin_1_is_read_with_a_note() {
    let mut bytes = b"energy,counts\n# slit 50 \xb5m\n".to_vec();
    bytes.extend(ten(|e, c| format!("{e:.1},{c}\n")).bytes());
    let trace = trace::from_bytes(&bytes, "run.csv", &ReadOptions::default()).unwrap();
    is_ten(&trace);
    assert_eq!(trace.comments, ["slit 50 µm"]);
    assert!(
        trace
            .notes
            .contains(&"line 2 is not UTF-8: the file was read as Latin-1".into())
    );
}

#[test]
fn columns_by_name_and_number() {
    let text = format!(
        "run,E,up,down,up_sd\n{}",
        ten(|e, c| format!("1,{e:.1},{c},7,2.5\n"))
    );
    let options = ReadOptions {
        energy_column: Some(Choice::Number(2)),
        counts_column: Some(Choice::Name("UP".into())),
        ..Default::default()
    };
    let trace = read_with(&text, &options);
    assert_eq!(trace.counts[9], 109.0);
    assert_eq!((trace.noise, trace.sd[3]), (Noise::Stated, 2.5));
    let options: ReadOptions =
        toml::from_str("energy_column = 'e'\ncounts_column = 4\nsd_column = 'up_sd'").unwrap();
    assert_eq!(read_with(&text, &options).counts, [7.0; 10]);
}

#[test]
fn dialect_options_settle_what_the_text_leaves_open() {
    let text = "energy\tcounts\n".to_string()
        + &[1, 3, 12, 1200, 4310, 1250, 300, 20, 5]
            .iter()
            .enumerate()
            .map(|(i, c)| match *c {
                1000.. => format!("{i}\t{},{:03}\n", c / 1000, c % 1000),
                _ => format!("{i}\t{c}\n"),
            })
            .collect::<String>();
    assert!(message(&text, &ReadOptions::default()).contains("may be a decimal mark"));
    let decimal = ReadOptions {
        decimal: Some(DecimalMark::Comma),
        ..Default::default()
    };
    assert_eq!(read_with(&text, &decimal).counts[3], 1.2);
    let point = ReadOptions {
        decimal: Some(DecimalMark::Point),
        ..Default::default()
    };
    assert!(message(&text, &point).contains("run.csv:5:3: found '1,200', expected a number"));
    // An axis whose every value has a comma is proof enough.
    let axis = ten(|e, c| format!("{}00\t{c}\n", comma(e)));
    is_ten(&read(&axis));
    let blanks = ReadOptions {
        delimiter: Some(Delimiter::Blanks),
        ..Default::default()
    };
    is_ten(&read_with(&ten(|e, c| format!("{e:.1}\t{c}\n")), &blanks));
}

#[test]
fn kinetic_energies_become_ionization_energies() {
    let text = format!(
        "Kinetic energy,counts\n{}",
        ten(|e, c| format!("{e:.1},{c}\n"))
    );
    let options = ReadOptions {
        photon_energy_ev: Some(21.218),
        ..Default::default()
    };
    let trace = read_with(&text, &options);
    assert_eq!(trace.axis, Axis::Kinetic);
    assert!((trace.energy_ev[0] - (21.218 - 15.9)).abs() < 1e-12);
    assert_eq!(trace.counts[0], 109.0);
    assert!(trace.energy_ev.windows(2).all(|w| w[0] < w[1]));
    assert!(
        trace.notes[0].contains("kinetic, by its header 'Kinetic energy'"),
        "{:?}",
        trace.notes
    );
    // A window keeps channels beyond the photon energy out, where they would be an error.
    let below = ReadOptions {
        photon_energy_ev: Some(15.75),
        ..Default::default()
    };
    assert!(message(&text, &below).contains("below the photon energy"));
    let window = ReadOptions {
        window_ev: Some([0.0, 2.0]),
        ..below
    };
    assert_eq!(read_with(&text, &window).len(), 8);
}

#[test]
fn negative_kinetic_energies_are_left_out_and_noted() {
    let text: String = (-3..12)
        .map(|i| format!("{},{}\n", f64::from(i) * 0.5, 10 + i))
        .collect();
    let options = ReadOptions {
        axis: Some(Axis::Kinetic),
        photon_energy_ev: Some(21.218),
        ..Default::default()
    };
    let trace = read_with(&text, &options);
    assert_eq!(trace.len(), 12);
    let note = "left out 3 channels with a negative kinetic energy (24 counts)";
    assert!(trace.notes.iter().any(|n| n == note), "{:?}", trace.notes);
}

#[test]
fn wavenumbers_become_electronvolts() {
    let text: String = (0..10)
        .map(|i| format!("{},{}\n", 100_000 + 100 * i, i))
        .collect();
    let trace = read(&format!("wavenumber (cm-1),counts\n{text}"));
    assert_eq!(trace.axis, Axis::Wavenumber);
    assert!((trace.energy_ev[0] - 12.398_419_84).abs() < 1e-8);
    assert!((trace.exposure_ev[0] - 0.012_398_419_84).abs() < 1e-12);
}

#[test]
fn words_in_comments_decide_only_if_they_agree() {
    let data = ten(|e, c| format!("{e:.1},{c}\n"));
    let options = ReadOptions {
        photon_energy_ev: Some(21.218),
        ..Default::default()
    };
    let kinetic = read_with(&format!("# kinetic energy axis\n{data}"), &options);
    assert_eq!(kinetic.axis, Axis::Kinetic);
    assert!(
        kinetic.notes[0].contains("by the comment in line 1"),
        "{:?}",
        kinetic.notes
    );
    let both = read_with(
        &format!("# kinetic energy\n# binding energy\n{data}"),
        &options,
    );
    assert_eq!(both.axis, Axis::Ionization);
    assert!(both.notes[0].starts_with("nothing says how the axis was recorded"));
}

#[test]
fn statements_in_comments_are_honoured_and_noted() {
    let data = ten(|e, c| format!("{e:.1},{c}\n"));
    let text = format!("# axis: kinetic\n# photon energy: 21.218 eV\n{data}");
    let trace = read(&text);
    assert_eq!(
        (trace.axis, trace.photon_energy_ev),
        (Axis::Kinetic, Some(21.218))
    );
    assert!(trace.notes[1].contains("line 2 of the file gives photon energy: 21.218 eV"));
    let other = ReadOptions {
        photon_energy_ev: Some(40.814),
        ..Default::default()
    };
    let trace = read_with(&text, &other);
    assert_eq!(trace.photon_energy_ev, Some(40.814));
    assert!(
        trace
            .notes
            .iter()
            .any(|n| n.contains("40.814 eV was asked for"))
    );
    let vague = read(&format!("# photon energy: He I\n{data}"));
    assert_eq!(vague.photon_energy_ev, None);
    assert!(vague.notes[0].contains("was not used"), "{:?}", vague.notes);
}

/// A flight-time axis with a flat intensity of 50 counts per eV, exactly integrated per channel.
fn flat_flight_times(axis: Axis, photon: f64, steps: &[f64]) -> String {
    let Axis::FlightTime {
        length_m,
        time_zero_ns,
        retarding_v,
    } = axis
    else {
        unreachable!()
    };
    let energy = |t: f64| {
        let kinetic = units::flight_kinetic_energy_ev(length_m, (t - time_zero_ns) * 1e-9);
        photon - kinetic - retarding_v
    };
    let mut text = String::from("flight_time_ns,counts,sd\n");
    for w in steps.windows(3) {
        let (early, late) = (0.5 * (w[0] + w[1]), 0.5 * (w[1] + w[2]));
        let counts = 50.0 * (energy(late) - energy(early));
        text += &format!("{},{counts},1\n", w[1]);
    }
    text
}

#[test]
fn flight_times_keep_their_counts_and_exposures() {
    let axis = Axis::FlightTime {
        length_m: 0.4,
        time_zero_ns: 3000.0,
        retarding_v: 2.5,
    };
    // Channels that grow: a time axis need not be uniform.
    let steps: Vec<f64> = (0..400)
        .map(|i| 3160.0 + f64::from(i) + 2e-3 * f64::from(i * i))
        .collect();
    let text = flat_flight_times(axis, 21.218, &steps);
    let options = ReadOptions {
        axis: Some(axis),
        photon_energy_ev: Some(21.218),
        ..Default::default()
    };
    let trace = read_with(&text, &options);
    assert_eq!(trace.len(), 398);
    // Flat per eV must come out flat; the two end channels have no neighbour on one side.
    for i in 1..397 {
        let intensity = trace.counts[i] / trace.exposure_ev[i];
        assert!((intensity - 50.0).abs() < 1e-6, "channel {i}: {intensity}");
    }
    // 2.5 V are added to the drift energy: the last channel's energy by hand.
    let drift = 0.5 * 9.109_383_701_5e-31 * (0.4_f64 / ((steps[398] - 3000.0) * 1e-9)).powi(2);
    let expected = 21.218 - 2.5 - drift / 1.602_176_634e-19;
    assert!((trace.energy_ev[397] - expected).abs() < 1e-5);
    // Channels tile the axis.
    for i in 1..398 {
        let gap = (trace.energy_ev[i] - 0.5 * trace.exposure_ev[i])
            - (trace.energy_ev[i - 1] + 0.5 * trace.exposure_ev[i - 1]);
        assert!(gap.abs() < 1e-10, "channel {i}: {gap}");
    }
}

#[test]
fn unreachable_flight_times_are_left_out_and_noted() {
    let text: String = (0..200).map(|i| format!("{},2\n", 2990 + 2 * i)).collect();
    let axis = Axis::FlightTime {
        length_m: 0.4,
        time_zero_ns: 3000.0,
        retarding_v: 0.0,
    };
    let options = ReadOptions {
        axis: Some(axis),
        photon_energy_ev: Some(21.218),
        ..Default::default()
    };
    let trace = read_with(&text, &options);
    assert!(trace.energy_ev[0] > 0.0);
    // Edges lie at odd times, so the channel at 3000 ns begins before time zero.
    let before = "left out 6 channels that begin at or before time zero (12 counts)";
    assert!(trace.notes.iter().any(|n| n == before), "{:?}", trace.notes);
    let fast = trace
        .notes
        .iter()
        .find(|n| n.contains("more kinetic energy than the photon"));
    assert!(fast.is_some(), "{:?}", trace.notes);
    let left_out: f64 = 400.0 - trace.total_counts();
    let told: f64 = trace
        .notes
        .iter()
        .filter_map(|n| n.rsplit_once('(')?.1.split(' ').next()?.parse::<f64>().ok())
        .sum();
    assert_eq!(left_out, told);
}

#[test]
fn counts_that_are_none_are_noted() {
    let trace = read(&ten(|e, c| format!("{e:.1},{}\n", f64::from(c) / 7.0)));
    assert!(!trace.looks_like_counts());
    assert!(
        trace
            .notes
            .iter()
            .any(|n| n.contains("not all whole numbers"))
    );
    assert!(read(&ten(|e, c| format!("{e:.1},{c}\n"))).looks_like_counts());
}

#[test]
fn merging_keeps_counts_widths_and_middles() {
    let axis = Axis::FlightTime {
        length_m: 0.4,
        time_zero_ns: 3000.0,
        retarding_v: 0.0,
    };
    let text: String = (0..3000)
        .map(|i| format!("{},{}\n", 3200 + i, i % 7))
        .collect();
    let options = ReadOptions {
        axis: Some(axis),
        photon_energy_ev: Some(21.218),
        ..Default::default()
    };
    let fine = read_with(&text, &options);
    let coarse = fine.merged(0.01);
    assert!(coarse.len() < fine.len() / 2);
    assert!(coarse.exposure_ev.iter().all(|&e| e >= 0.01));
    assert_eq!(coarse.total_counts(), fine.total_counts());
    let width = |t: &Trace| t.exposure_ev.iter().sum::<f64>();
    assert!((width(&coarse) - width(&fine)).abs() < 1e-10);
    for i in 1..coarse.len() {
        let gap = (coarse.energy_ev[i] - 0.5 * coarse.exposure_ev[i])
            - (coarse.energy_ev[i - 1] + 0.5 * coarse.exposure_ev[i - 1]);
        assert!(gap.abs() < 1e-10, "channel {i}: {gap}");
    }
    assert_eq!(coarse.sd[5], coarse.counts[5].max(1.0).sqrt());
    assert_eq!(fine.merged(0.0), fine);
    let window = fine.window([10.0, 12.0]).unwrap();
    assert!(window.span_ev()[0] >= 10.0 && window.span_ev()[1] <= 12.0);
    assert!(fine.window([12.0, 10.0]).is_err());
    assert!(fine.window([30.0, 40.0]).is_err());
}

#[derive(Deserialize)]
struct Cases {
    case: Vec<Case>,
}

#[derive(Deserialize)]
struct Case {
    file: String,
    expected: String,
    #[serde(default)]
    options: ReadOptions,
}

#[test]
fn malformed_traces_are_named_with_their_place() {
    let list = fs::read_to_string(format!("{BAD}/cases.toml")).unwrap();
    let cases: Cases = toml::from_str(&list).unwrap();
    let listed: BTreeSet<String> = cases.case.iter().map(|c| c.file.clone()).collect();
    let there: BTreeSet<String> = fs::read_dir(BAD)
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .filter(|name| name != "cases.toml" && name != "README.md")
        .collect();
    assert_eq!(listed, there);
    let mut wrong = Vec::new();
    for case in &cases.case {
        let path = format!("{BAD}/{}", case.file);
        let found = match trace::read(Path::new(&path), &case.options) {
            Ok(trace) => format!("no error, {} channels", trace.len()),
            Err(error) => error.to_string(),
        };
        if !found.starts_with(&format!("{path}{}", case.expected)) {
            wrong.push(format!(
                "{path}\n  expected {}\n  found    {found}",
                case.expected
            ));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
    assert!(cases.case.len() >= 25);
}

#[test]
fn a_missing_file_is_named() {
    let error = trace::read(Path::new("no/such/file.csv"), &ReadOptions::default()).unwrap_err();
    assert!(
        error
            .to_string()
            .starts_with("no/such/file.csv: cannot read the file:"),
        "{error}"
    );
}

fn any_axis() -> impl Strategy<Value = Axis> {
    prop_oneof![
        Just(Axis::Ionization),
        Just(Axis::Kinetic),
        Just(Axis::Wavenumber),
        (1e-3..10.0, -1e5..1e5, -50.0..50.0).prop_map(|(length_m, time_zero_ns, retarding_v)| {
            Axis::FlightTime {
                length_m,
                time_zero_ns,
                retarding_v,
            }
        }),
    ]
}

fn any_trace() -> impl Strategy<Value = Trace> {
    let number = prop_oneof![
        0.0..1e6_f64,
        Just(0.0),
        1e-300..1e300,
        (0u32..100_000).prop_map(f64::from)
    ];
    let positive = prop_oneof![1e-6..1e6, 1e-300..1e300];
    let channel = (
        prop_oneof![1e-9..10.0, Just(0.01)],
        number,
        positive.clone(),
        positive,
    );
    (
        proptest::collection::vec(channel, trace::MIN_CHANNELS..40),
        -10.0..1e3,
        any_axis(),
        proptest::option::of(1e-3..1e5),
        any::<bool>(),
        proptest::collection::vec(any::<String>(), 0..4),
        proptest::collection::vec(any::<String>(), 0..4),
        "[ -~]{1,12}",
    )
        .prop_map(
            |(channels, start, axis, photon_energy_ev, stated, comments, notes, source)| {
                let mut energy: f64 = start;
                let mut trace = Trace {
                    source,
                    energy_ev: vec![],
                    counts: vec![],
                    sd: vec![],
                    exposure_ev: vec![],
                    noise: if stated {
                        Noise::Stated
                    } else {
                        Noise::Poisson
                    },
                    photon_energy_ev,
                    axis,
                    comments,
                    notes,
                };
                for (step, counts, sd, exposure) in channels {
                    energy = f64::max(energy + step, energy.next_up());
                    trace.energy_ev.push(energy);
                    trace
                        .counts
                        .push(if stated { 0.0 - 1.5 * counts } else { counts });
                    trace.sd.push(sd);
                    trace.exposure_ev.push(exposure);
                }
                trace
            },
        )
}

/// Equal to the last bit, the sign of zero included.
fn bits(trace: &Trace) -> Vec<u64> {
    let columns = [
        &trace.energy_ev,
        &trace.counts,
        &trace.sd,
        &trace.exposure_ev,
    ];
    columns
        .iter()
        .flat_map(|c| c.iter().map(|v| v.to_bits()))
        .collect()
}

proptest! {
    #[test]
    fn any_trace_survives_writing_and_reading(trace in any_trace()) {
        let mut text = Vec::new();
        write_delimited(&trace, &mut text).unwrap();
        let back = trace::from_bytes(&text, &trace.source, &ReadOptions::default());
        let back = back.map_err(|e| TestCaseError::fail(e.to_string()))?;
        prop_assert_eq!(bits(&back), bits(&trace));
        prop_assert_eq!(back, trace);
    }

    #[test]
    fn any_text_is_read_or_refused(text in "([0-9.,;\t eE+-]{0,12}(\n|\r\n|#|\")){0,30}") {
        if let Ok(trace) = trace::from_text(&text, "any", &ReadOptions::default()) {
            prop_assert!(trace.energy_ev.windows(2).all(|w| w[0] < w[1]));
            prop_assert!(trace.sd.iter().chain(&trace.exposure_ev).all(|v| *v > 0.0));
        }
    }

    #[test]
    fn any_bytes_are_read_or_refused(bytes in proptest::collection::vec(any::<u8>(), 0..200)) {
        let _ = trace::from_bytes(&bytes, "any", &ReadOptions::default());
    }
}

//! VAMAS (ISO 14976): regular and irregular scans, several blocks, abbreviated blocks.

use bandproof::trace::{self, Axis, Choice, Format, ReadOptions, Trace, TraceFile};
use proptest::prelude::*;

const NAME: &str = "run.vms";

/// Lines of the head. `listed` is the inclusion (positive) or exclusion (negative) list.
fn head(scan: &str, listed: &[i32], blocks: usize) -> String {
    let sign = if listed.first().is_some_and(|i| *i < 0) {
        -1
    } else {
        1
    };
    let mut lines = vec![
        "VAMAS Surface Chemical Analysis Standard Data Transfer Format 1988 May 4".to_string(),
        "Heather Moss".into(),
        "gas cell".into(),
        "Not Specified".into(),
        "furan".into(),
        "1".into(),
        "made up".into(),
        "NORM".into(),
        scan.into(),
        "1".into(),
        "1".into(),
        "pressure".into(),
        "Pa".into(),
        (sign * listed.len() as i32).to_string(),
    ];
    lines.extend(listed.iter().map(|i| i.abs().to_string()));
    lines.extend(["0".into(), "0".into(), "1".into(), blocks.to_string()]);
    lines.join("\n") + "\n"
}

/// The groups of lines of a block, each with its item number (0: always there).
fn block(name: &str, regular: bool, values: &str, count: usize) -> Vec<(i32, String)> {
    let axis = if regular {
        "kinetic energy\neV\n4.0\n0.1"
    } else {
        ""
    };
    let variables = match regular {
        true => "2\ncounts\nd\nTransmission\nd",
        false => "3\nBinding energy\neV\nIntensity\nd\nstandard deviation\nd",
    };
    let ranges = if regular {
        "0\n1\n0\n1"
    } else {
        "0\n1\n0\n1\n0\n1"
    };
    [
        (0, name),
        (0, "furan"),
        (1, "2024"),
        (2, "5"),
        (3, "17"),
        (4, "12"),
        (5, "30"),
        (6, "0"),
        (7, "0"),
        (8, "2\nslit 50 µm\n"),
        (9, "UPS"),
        (11, "0.1"),
        (12, "He I"),
        (14, "21.218"),
        (15, "1e37"),
        (16, "0\n0"),
        (19, "45"),
        (20, "0"),
        (21, "FAT"),
        (22, "5"),
        (24, "1"),
        (25, "4.3"),
        (26, "0"),
        (27, "0\n0"),
        (28, "0\n0"),
        (29, "furan"),
        (30, "\n-1"),
        (31, axis),
        (32, variables),
        (33, "pulse counting"),
        (34, "0.5"),
        (35, "3"),
        (36, "0"),
        (38, "0\n0"),
        (39, "0"),
        (40, "1\ntemperature\nK\n300"),
        (0, "a future line"),
        (0, &count.to_string()),
        (0, ranges),
        (0, values),
    ]
    .into_iter()
    .filter(|(item, text)| *item != 31 || !text.is_empty())
    .map(|(item, text)| (item, text.to_string()))
    .collect()
}

fn joined(lines: Vec<(i32, String)>, given: impl Fn(i32) -> bool) -> String {
    let kept = lines
        .into_iter()
        .filter(|(item, _)| *item == 0 || given(*item));
    kept.map(|(_, text)| text + "\n").collect()
}

/// Ten points from 4.0 eV, counts from 100 and a transmission that falls.
fn regular_values() -> String {
    let rows: Vec<String> = (0..10)
        .map(|i| format!("{}\n{}", 100 + i, 10 - i))
        .collect();
    rows.join("\n")
}

fn regular() -> String {
    head("REGULAR", &[], 1)
        + &joined(block("Survey", true, &regular_values(), 20), |_| true)
        + "end of experiment\n"
}

fn read(text: &str) -> Trace {
    trace::from_text(text, NAME, &ReadOptions::default()).unwrap_or_else(|e| panic!("{e}\n{text}"))
}

fn message(text: &str) -> String {
    trace::from_text(text, NAME, &ReadOptions::default())
        .unwrap_err()
        .to_string()
}

#[test]
fn a_regular_scan_is_read() {
    let trace = read(&regular());
    assert_eq!(
        (trace.axis, trace.photon_energy_ev),
        (Axis::Kinetic, Some(21.218))
    );
    assert_eq!(trace.counts[0], 109.0);
    assert!((trace.energy_ev[0] - (21.218 - 4.9)).abs() < 1e-12);
    for comment in [
        "made up",
        "slit 50 µm",
        "sample: furan",
        "pressure (Pa): 0.1",
        "temperature (K): 300",
        "analysis source: He I",
        "collection time per channel, s: 0.5",
        "analyser work function (not applied), eV: 4.3",
        "measured: year 2024, month 5, day 17, hours 12, minutes 30",
    ] {
        assert!(
            trace.comments.iter().any(|c| c == comment),
            "{comment}: {:?}",
            trace.comments
        );
    }
    let note = "'counts' was taken as the counts; not used: 'Transmission'";
    assert!(trace.notes.iter().any(|n| n == note), "{:?}", trace.notes);
    let cut_short = read(&regular().replace("end of experiment\n", ""));
    assert!(
        cut_short
            .notes
            .iter()
            .any(|n| n == "the file ends without 'end of experiment'")
    );
    let windows = regular().replace('\n', "\r\n");
    assert_eq!(read(&windows).counts, trace.counts);
}

#[test]
fn an_irregular_scan_is_read() {
    let energies = [9.0, 9.1, 9.3, 9.4, 9.6, 10.0, 10.1, 10.5, 11.0];
    let rows: Vec<String> = energies
        .iter()
        .map(|e| format!("{e}\n{}\n2.5", 10.0 * e))
        .collect();
    let text = head("IRREGULAR", &[], 1)
        + &joined(block("Valence", false, &rows.join("\n"), 27), |_| true)
        + "end of experiment\n";
    let trace = read(&text);
    assert_eq!(
        (trace.axis, &trace.energy_ev[..]),
        (Axis::Ionization, &energies[..])
    );
    assert_eq!((trace.counts[0], trace.sd[0]), (90.0, 2.5));
}

#[test]
fn later_blocks_take_what_they_leave_out_from_the_first() {
    // The second block states its comment, abscissa and parameters anew; or all but the rest.
    let stated = [8, 31, 40];
    let second = || {
        let mut lines = block("Detail", true, &regular_values(), 20);
        for (item, text) in &mut lines {
            match item {
                8 => *text = "0".into(),
                31 => *text = "kinetic energy\neV\n6.0\n0.05".into(),
                40 => *text = "0".into(),
                _ => {}
            }
        }
        lines
    };
    let included: Vec<i32> = stated.to_vec();
    let excluded: Vec<i32> = (1..=40)
        .filter(|i| !stated.contains(i))
        .map(|i| -i)
        .collect();
    for listed in [included, excluded] {
        let text = head("REGULAR", &listed, 2)
            + &joined(block("Survey", true, &regular_values(), 20), |_| true)
            + &joined(second(), |item| stated.contains(&item))
            + "end of experiment\n";
        let file = TraceFile::from_text(&text, NAME, &ReadOptions::default()).unwrap();
        assert_eq!(file.format, Format::Vamas);
        let contents = file.contents();
        assert_eq!(
            (contents[1].number, contents[1].name.as_str()),
            (2, "Detail")
        );
        assert_eq!(
            (contents[1].points, contents[1].span),
            (10, [6.0, 6.0 + 9.0 * 0.05])
        );
        assert!(message(&text).contains("found 2 traces: 1 'Survey', 2 'Detail'"));
        let trace = Some(Choice::Name("detail".into()));
        let options = ReadOptions {
            trace,
            ..ReadOptions::default()
        };
        let trace = file.into_trace(&options).unwrap();
        assert!((trace.energy_ev[9] - (21.218 - 6.0)).abs() < 1e-12);
        assert!(
            !trace
                .comments
                .iter()
                .any(|c| c.contains("temperature") || c.contains("slit"))
        );
    }
}

#[test]
fn what_does_not_fit_is_found() {
    let good = regular();
    let replaced = |from: &str, to: &str| message(&good.replacen(from, to, 1));
    for (found, expected) in [
        (
            replaced("REGULAR", "MAPPING"),
            ":9: found 'MAPPING', expected the scan mode REGULAR",
        ),
        (
            replaced("NORM", "NORMAL"),
            ":8: found 'NORMAL', expected an experiment mode",
        ),
        (
            replaced("UPS", "ups?"),
            ":31: found 'ups?', expected a technique",
        ),
        (
            replaced("\n2024\n", "\nlast year\n"),
            ":21: found 'last year', expected a number",
        ),
        (
            replaced("109", "many"),
            ":96: found 'many', expected an ordinate value",
        ),
        (replaced("109", "1e37"), ":96: found '1"),
        (
            replaced("\n20\n0\n", "\n21\n0\n"),
            ":73: found 21 ordinate values for 2 variables",
        ),
        (
            replaced("\n20\n0\n", "\n22\n0\n"),
            ":98: found 'end of experiment', expected an ordinate",
        ),
        (
            replaced("\n20\n0\n", "\n18\n0\n"),
            ":96: found '109', expected end of experiment",
        ),
        (
            message(good.split("\n20\n").next().unwrap()),
            ":72: the file ends, expected",
        ),
        (
            replaced("\neV\n", "\nJ\n"),
            ":53: the axis 'kinetic energy (J)' is in J; expected eV",
        ),
    ] {
        let start = format!("{NAME}{expected}");
        assert!(found.starts_with(&start), "{expected}\n{found}");
    }
}

proptest! {
    #[test]
    fn any_change_to_a_file_is_read_or_refused(
        at in 0.0..1.0f64,
        cut in 0usize..30,
        put in "[0-9A-Za-z.\n-]{0,8}",
    ) {
        let text = regular().replace('µ', "u");
        let start = (at * text.len() as f64) as usize;
        let end = (start + cut).min(text.len());
        let changed = format!("{}{put}{}", &text[..start], &text[end..]);
        if let Ok(trace) = trace::from_text(&changed, "any", &ReadOptions::default()) {
            prop_assert!(trace.energy_ev.windows(2).all(|w| w[0] < w[1]));
        }
    }
}

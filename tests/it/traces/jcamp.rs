//! JCAMP-DX: tables, checks, linked blocks, files decoded by another program, the way back.

use std::fs;

use bandproof::trace::{
    self, Axis, Choice, Format, Noise, Ordinates, ReadOptions, Trace, TraceFile, write_jcamp,
};
use proptest::prelude::*;

use super::{any_trace, bits};

const DATA: &str = "tests/data/traces/jcamp";
const FORMS: [(Ordinates, &str); 5] = [
    (Ordinates::Pairs, "pairs"),
    (Ordinates::Affn, "affn"),
    (Ordinates::Pac, "pac"),
    (Ordinates::Sqz, "sqz"),
    (Ordinates::Dif, "dif"),
];

fn read(text: &str) -> Trace {
    let options = ReadOptions::default();
    trace::from_text(text, "run.jdx", &options).unwrap_or_else(|e| panic!("{e}\n{text}"))
}

fn message(text: &str) -> String {
    trace::from_text(text, "run.jdx", &ReadOptions::default())
        .unwrap_err()
        .to_string()
}

fn written(traces: &[Trace], form: Ordinates) -> String {
    let mut out = Vec::new();
    write_jcamp(traces, form, &mut out).unwrap();
    String::from_utf8(out).unwrap()
}

/// A file of ten points, 15.0 to 15.9 eV, with the given records before the table.
fn block(table: &str) -> String {
    format!(
        "##TITLE= ten points\n##JCAMP-DX= 4.24\n##DATA TYPE= PHOTOELECTRON SPECTRUM\n\
         ##OWNER= nobody\n##XUNITS= EV\n##YUNITS= COUNTS\n##FIRSTX= 15.0\n##LASTX= 15.9\n\
         ##XFACTOR= 0.1\n##YFACTOR= 2\n##NPOINTS= 10\n{table}##END=\n"
    )
}

#[test]
fn tables_of_every_form_agree() {
    let values: Vec<f64> = [5, 6, 7, 7, 7, 4, -1, 0, 12, 11]
        .map(|v| 2.0 * f64::from(v))
        .into();
    let tables = [
        (
            "AFFN",
            "##XYDATA= (X++(Y..Y))\n150 5 6 7 7\n154 7 4 -1 0 12\n159 11\n",
        ),
        (
            "commas",
            "##XYDATA=(X++(Y..Y))\n150, 5, 6, 7, 7, 7, 4, -1, 0, 12, 11\n",
        ),
        ("PAC", "##XYDATA= (X++(Y..Y))\n150+5+6+7+7+7+4-1+0+12+11\n"),
        ("SQZ", "##XYDATA= (X++(Y..Y))\n150EFGGGDa@A2A1\n"),
        ("SQZ, DUP", "##XYDATA= (X++(Y..Y))\n150EFGUDa@A2A1\n"),
        (
            "DIF",
            "##XYDATA= (X++(Y..Y))\n150EJJ%%\n154Gln\n156aJJ2j\n159A1 $$ check\n",
        ),
        (
            "DIF, DUP",
            "##XYDATA= (X++(Y..Y))\n150EJT%T\n154GlnJJ2j\n159A1\n",
        ),
        (
            "label written otherwise",
            "##xy-data= ( X++ (Y..Y) )\n150 5 6 7 7 7 $$ half\n$$ a remark\n155 4 -1 0 12 11\n",
        ),
        (
            "pairs",
            "##XYPOINTS= (XY..XY)\n150,5 151,6 152,7\n153,7; 154,7; 155,4\n156 -1 157 0\n158,12\n159,11\n",
        ),
    ];
    for (name, table) in tables {
        let file = TraceFile::from_text(&block(table), "run.jdx", &ReadOptions::default());
        let file = file.unwrap_or_else(|e| panic!("{name}: {e}"));
        assert_eq!((file.format, file.traces.len()), (Format::JcampDx, 1));
        let record = &file.traces[0];
        assert_eq!(
            (record.name.as_str(), &record.counts),
            ("ten points", &values),
            "{name}"
        );
        for (i, energy) in record.abscissa.iter().enumerate() {
            assert!((energy - (15.0 + 0.1 * i as f64)).abs() < 1e-12, "{name}");
        }
    }
}

const TABLE: &str = "##XYDATA= (X++(Y..Y))\n150 5 6 7 7 7\n155 4 1 0 12 11\n";

#[test]
fn units_name_the_axis() {
    let text = block(TABLE);
    let trace = read(&text);
    assert_eq!(
        (trace.axis, trace.noise),
        (Axis::Ionization, Noise::Poisson)
    );
    assert_eq!(
        trace.comments,
        [
            "DATA TYPE: PHOTOELECTRON SPECTRUM",
            "OWNER: nobody",
            "YUNITS: COUNTS"
        ]
    );
    let kinetic = text.replace("= EV", "= KINETIC ENERGY (EV)\n##$PHOTON ENERGY= 21.218 eV");
    let trace = read(&kinetic);
    assert_eq!(
        (trace.axis, trace.photon_energy_ev),
        (Axis::Kinetic, Some(21.218))
    );
    assert!((trace.energy_ev[9] - 6.218).abs() < 1e-12);
    assert_eq!(read(&text.replace("= EV", "= 1/CM")).axis, Axis::Wavenumber);
    let ppm = message(&text.replace("= EV", "= PPM"));
    assert!(
        ppm.contains("run.jdx:5: the axis 'PPM' is in PPM; expected eV"),
        "{ppm}"
    );
    let time = message(&text.replace("= EV", "= NANOSECONDS"));
    assert!(
        time.contains("holds flight times, which need their calibration"),
        "{time}"
    );
}

#[test]
fn what_does_not_fit_is_found() {
    for (from, to, expected) in [
        (
            "7 7 7",
            "7 7",
            ":14:1: found the abscissa 15.5, expected 15.4 at point 5",
        ),
        ("155 ", "156 ", ":14:1: found the abscissa 15.6"),
        ("12 11", "12 11 3", ":14:17: found more than 10 points"),
        ("12 11", "12", ":12: found 9 points, expected 10 by NPOINTS"),
        ("12 11", "12 ?", ":14:14: found '?', a missing ordinate"),
        (
            "12 11",
            "12 1.1.1",
            ":14:14: found '1.1.1', expected a number",
        ),
        ("4 1", "4 *", ":14:7: found '*', expected a number"),
        (
            "(Y..Y)",
            "(R..R)",
            ":12: found the form '(X++(R..R))', expected (X++(Y..Y))",
        ),
        (
            "##NPOINTS= 10\n",
            "",
            ":11: found no ##NPOINTS= before the XYDATA",
        ),
        ("##FIRSTX= 15.0\n", "", ":11: found no ##FIRSTX="),
        ("##YFACTOR= 2\n", "", ":11: found no ##YFACTOR="),
        (
            "##YFACTOR= 2",
            "##YFACTOR= two",
            ":10: found ##YFACTOR= 'two', expected a number",
        ),
        (
            "##YFACTOR= 2",
            "##YFACTOR= 0",
            ":10: found ##YFACTOR= '0', expected a factor",
        ),
        (
            "= 10\n",
            "= ten\n",
            ":11: found ##NPOINTS= 'ten', expected a whole number",
        ),
        ("= 10\n", "= 1e9\n", ":12: found more than"),
        ("##XUNITS= EV\n", "", ":11: found no ##XUNITS="),
        (
            "##END=\n",
            "",
            ": the file ends within the block 'ten points' of line 1",
        ),
        ("##END=", "##END", ":15:1: found '##END', expected a record"),
        (
            "##END=",
            "##END=\nstray",
            ":16:1: found 'stray' outside any block",
        ),
        (
            "##END=",
            "##PEAK TABLE= (XY..XY)\n1,2\n##END=",
            ":15: found a second table",
        ),
    ] {
        let text = block(TABLE).replace(from, to);
        let found = message(&text);
        assert!(
            found.starts_with(&format!("run.jdx{expected}")),
            "{expected}\n{found}"
        );
    }
    let pairs = block("##XYPOINTS= (XY..XY)\n150,5 151\n");
    assert!(message(&pairs).contains("found 3 numbers, expected groups of 2"));
    let tuples = block("##NTUPLES= NMR SPECTRUM\n");
    assert!(
        message(&tuples).contains("no XYDATA, XYPOINTS or PEAK TABLE in the file, only NTUPLES")
    );
}

#[test]
fn wrong_check_values_are_found() {
    let good = "##XYDATA= (X++(Y..Y))\n150EJJ%%\n154GlJn\n157@JT\n159B\n";
    let file = TraceFile::from_text(&block(good), "run.jdx", &ReadOptions::default());
    assert_eq!(file.unwrap().traces[0].counts[..3], [10.0, 12.0, 14.0]);
    let bad = message(&block(&good.replace("154G", "154H")));
    assert_eq!(
        bad,
        "run.jdx:14:4: found the check value 8, expected 7, the last ordinate of the line before"
    );
    let last = message(&block(&good.replace("159B", "159D")));
    assert!(
        last.contains("run.jdx:16:4: found the check value 4, expected 2"),
        "{last}"
    );
}

#[test]
fn peak_tables_are_read_with_a_note() {
    let peaks: String = (0..10)
        .map(|i| format!("{},{},0.5\n", 150 + 3 * i, i))
        .collect();
    let text = block(&format!("##PEAK TABLE= (XYW..XYW)\n{peaks}"));
    let trace = read(&text);
    assert_eq!(trace.counts[9], 18.0);
    assert!(
        trace
            .notes
            .iter()
            .any(|n| n.starts_with("this is a peak table")),
        "{:?}",
        trace.notes
    );
}

#[test]
fn linked_blocks_are_listed_and_chosen() {
    let inner = block(TABLE);
    let other = block(TABLE)
        .replace("ten points", "Dark run")
        .replace("12 11", "12 99");
    let outer = format!(
        "##TITLE= two\n##JCAMP-DX= 5.01\n##DATA TYPE= LINK\n##BLOCKS= 3\n{inner}\n\
         ##TITLE= inside\n##DATA TYPE= LINK\n##BLOCKS= 1\n{other}##END=\n\
         ##TITLE= words only\n##COMMENT= nothing\nat all\n##END=\n##END=\n"
    );
    let options = ReadOptions::default();
    let file = TraceFile::from_text(&outer, "run.jdx", &options).unwrap();
    let names: Vec<(usize, String)> = file
        .contents()
        .into_iter()
        .map(|c| (c.number, c.name))
        .collect();
    assert_eq!(
        names,
        [(1, "ten points".to_string()), (2, "Dark run".to_string())]
    );
    let choose = |choice: &str| {
        let trace = Some(choice.parse::<Choice>().unwrap());
        let options = ReadOptions {
            trace,
            ..ReadOptions::default()
        };
        trace::from_text(&outer, "run.jdx", &options)
            .map(|t| t.counts[9])
            .map_err(|e| e.to_string())
    };
    assert_eq!(choose("1"), Ok(22.0));
    assert_eq!(choose("dark run"), Ok(198.0));
    assert!(
        choose("3")
            .unwrap_err()
            .contains("found 2 traces, so there is no trace 3")
    );
    assert!(
        choose("x")
            .unwrap_err()
            .contains("there are 1 'ten points', 2 'Dark run'")
    );
    let none = message(&outer);
    assert!(
        none.contains("found 2 traces: 1 'ten points', 2 'Dark run'; say which"),
        "{none}"
    );
}

/// A trace with an exactly even axis and whole counts: runs of zeros, noise, a band.
fn sample() -> Trace {
    let mut state = 12_345_u64;
    let counts: Vec<f64> = (0..300)
        .map(|i| {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1);
            let noise = (state >> 60) as f64;
            let height = 4000.0 * (-(f64::from(i) - 170.0).powi(2) / 50.0).exp();
            if i < 60 {
                0.0
            } else {
                (height + noise).round()
            }
        })
        .collect();
    Trace {
        source: "sample".into(),
        energy_ev: (0..300).map(|i| 8.0 + f64::from(i) / 64.0).collect(),
        sd: counts.iter().map(|&c| trace::poisson_sd(c)).collect(),
        exposure_ev: vec![1.0 / 64.0; 300],
        counts,
        noise: Noise::Poisson,
        photon_energy_ev: Some(21.218),
        axis: Axis::Kinetic,
        comments: vec!["made up".into()],
        notes: vec!["costs $$ to run".into()],
    }
}

/// The sample without its zeros, so that no difference stands more than nine times.
fn steps() -> Trace {
    let sample = sample();
    let [low, high] = [8.0 + 60.0 / 64.0, sample.span_ev()[1]];
    Trace {
        notes: sample.notes.clone(),
        ..sample.window([low, high]).unwrap()
    }
}

/// What other programs make of our files: see `decode.py` beside them.
#[test]
fn our_files_are_read_alike_by_other_programs() {
    let mut compared = 0;
    let mut files: Vec<(Trace, Ordinates, &str)> =
        FORMS.map(|(form, name)| (sample(), form, name)).into();
    files.push((steps(), Ordinates::Dif, "steps"));
    for (trace, form, name) in files {
        let path = format!("{DATA}/{name}.jdx");
        let text = fs::read_to_string(&path).unwrap();
        assert_eq!(text, written(std::slice::from_ref(&trace), form), "{path}");
        let back = trace::from_text(&text, "sample", &ReadOptions::default()).unwrap();
        assert_eq!(back, trace);
        let mut decoded_by = 0;
        for program in ["jcamp", "nmrglue"] {
            let Ok(decoded) = fs::read_to_string(format!("{DATA}/{name}.{program}.csv")) else {
                continue;
            };
            decoded_by += 1;
            assert_eq!(decoded.lines().count(), back.len(), "{name} by {program}");
            for (i, line) in decoded.lines().enumerate() {
                let mut cells = line.split(',').map(|c| c.parse::<f64>().unwrap()).rev();
                assert_eq!(
                    cells.next(),
                    Some(back.counts[i]),
                    "{name} by {program}, point {i}"
                );
                if let Some(x) = cells.next() {
                    assert_eq!(x, back.energy_ev[i], "{name} by {program}, point {i}");
                }
                compared += 1;
            }
        }
        assert!(decoded_by > 0, "{name}");
    }
    println!("{compared} points compared");
}

proptest! {
    #[test]
    fn any_traces_survive_writing_and_reading(
        traces in proptest::collection::vec(any_trace(), 1..4),
        form in 0..FORMS.len(),
    ) {
        let text = written(&traces, FORMS[form].0);
        for (i, trace) in traces.iter().enumerate() {
            let options = ReadOptions { trace: Some(Choice::Number(i + 1)), ..Default::default() };
            let back = trace::from_text(&text, &trace.source, &options);
            let back = back.map_err(|e| TestCaseError::fail(e.to_string()))?;
            prop_assert_eq!(bits(&back), bits(trace));
            prop_assert_eq!(&back, trace);
        }
    }

    #[test]
    fn even_whole_traces_survive_in_every_form(
        counts in proptest::collection::vec(
            prop_oneof![0..20i64, Just(0i64), -4_503_599_627_370_495_i64..4_503_599_627_370_495],
            trace::MIN_CHANNELS..200,
        ),
        form in 0..FORMS.len(),
    ) {
        let n = counts.len();
        let counts: Vec<f64> = counts.into_iter().map(|c| c as f64).collect();
        let trace = Trace {
            energy_ev: (0..n).map(|i| 9.5 + i as f64 / 128.0).collect(),
            sd: vec![1.5; n],
            exposure_ev: vec![1.0 / 128.0; n],
            counts,
            noise: Noise::Stated,
            ..sample()
        };
        let text = written(std::slice::from_ref(&trace), FORMS[form].0);
        let table = if form == 0 { "##XYPOINTS" } else { "##XYDATA" };
        prop_assert!(text.contains(table));
        prop_assert!(text.lines().filter(|l| !l.starts_with("##")).all(|l| l.len() <= 80));
        let back = trace::from_text(&text, "sample", &ReadOptions::default());
        prop_assert_eq!(back.map_err(|e| TestCaseError::fail(e.to_string()))?, trace);
    }

    #[test]
    fn any_change_to_a_file_is_read_or_refused(
        form in 0..FORMS.len(),
        at in 0.0..1.0f64,
        cut in 0usize..30,
        put in "[0-9A-Za-z#$=%@+., \n-]{0,8}",
    ) {
        let text = written(&[sample()], FORMS[form].0);
        let start = (at * text.len() as f64) as usize;
        let end = (start + cut).min(text.len());
        let changed = format!("{}{put}{}", &text[..start], &text[end..]);
        if let Ok(trace) = trace::from_text(&changed, "any", &ReadOptions::default()) {
            prop_assert!(trace.energy_ev.windows(2).all(|w| w[0] < w[1]));
        }
    }
}

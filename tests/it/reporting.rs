//! Figures, tables and files of a report, on invented dossiers.
//!
//! With `BANDPROOF_FIGURES=folder` the figures are kept in that folder, to be looked at.

mod invented;
mod recipe;

use bandproof::report::{
    self, BandCurve, Direction, Dossier, Figure, FitSummary, Heading, Overlay, ReportError, TextBox,
};
use invented::{crowded, dense, empty, large, one_band, random, sulfide};
use std::path::Path;

fn keep(name: &str, figure: &Figure) {
    if let Some(folder) = std::env::var_os("BANDPROOF_FIGURES") {
        let folder = Path::new(&folder);
        std::fs::create_dir_all(folder).unwrap();
        for ending in ["svg", "png", "pdf"] {
            report::write_figure(figure, &folder.join(format!("{name}.{ending}"))).unwrap();
        }
    }
}

fn overlap(a: &TextBox, b: &TextBox) -> bool {
    let ([al, at, ar, ab], [bl, bt, br, bb]) = (a.bounds, b.bounds);
    al < br && bl < ar && at < bb && bt < ab
}

/// Checks what every figure has to satisfy.
fn check(name: &str, figure: &Figure) {
    keep(name, figure);
    let tree = usvg::Tree::from_str(figure.svg(), &usvg::Options::default()).unwrap();
    assert!(
        !figure.svg().contains("<text"),
        "{name}: letters are not outlined"
    );
    let pt = 72.0 / 96.0;
    let (width, height) = (tree.size().width() * pt, tree.size().height() * pt);
    assert!((width - 510.24).abs() < 0.1, "{name}: {width} pt wide");
    assert!((180.0..620.0).contains(&height), "{name}: {height} pt high");
    let texts = figure.texts();
    for (i, a) in texts.iter().enumerate() {
        let [left, top, right, bottom] = a.bounds;
        assert!(
            left >= 0.0 && top >= 0.0 && right <= f64::from(width) && bottom <= f64::from(height),
            "{name}: '{}' leaves the page: {:?}",
            a.text,
            a.bounds
        );
        assert!(
            a.size >= 7.0,
            "{name}: '{}' is set in {} pt",
            a.text,
            a.size
        );
        for b in &texts[i + 1..] {
            assert!(
                !overlap(a, b),
                "{name}: '{}' {:?} and '{}' {:?} overlap",
                a.text,
                a.bounds,
                b.text,
                b.bounds
            );
        }
    }
}

#[test]
fn no_text_covers_another_in_any_figure() {
    let cases = [
        ("sulfide", sulfide()),
        ("crowded", crowded()),
        ("one_band", one_band()),
        ("empty", empty()),
        ("dense", dense()),
        ("large", large(34)),
        ("very_large", large(160)),
    ];
    for (name, mut dossier) in cases {
        check(name, &Figure::of(&dossier).unwrap());
        dossier.overlay.direction = Direction::Falling;
        check(&format!("{name}_falling"), &Figure::of(&dossier).unwrap());
    }
}

#[test]
fn no_text_covers_another_in_random_figures() {
    for seed in 0..60 {
        let figure = Figure::of(&random(seed)).unwrap();
        check(&format!("random_{seed}"), &figure);
    }
}

#[test]
fn bands_and_predictions_have_figures_of_their_own() {
    let dossier = sulfide();
    let heading = Heading {
        title: "unknown gas 7".to_owned(),
        details: "hν = 21.22 eV".to_owned(),
    };
    let alone = Overlay {
        sticks: Vec::new(),
        predicted: None,
        ..dossier.overlay.clone()
    };
    let bands = Figure::new(&heading, &alone, &dossier.bands, &[]).unwrap();
    check("bands_alone", &bands);
    let unfitted = Overlay {
        fit: Vec::new(),
        background: Vec::new(),
        residual: Vec::new(),
        bands: Vec::new(),
        ..alone
    };
    check(
        "trace_alone",
        &Figure::new(&heading, &unfitted, &[], &[]).unwrap(),
    );
    let prediction = Overlay {
        sticks: dossier.overlay.sticks.clone(),
        predicted: dossier.overlay.predicted.clone(),
        unit: "counts".to_owned(),
        ..Overlay::default()
    };
    let predicted = Figure::new(&heading, &prediction, &[], &[]).unwrap();
    check("prediction_alone", &predicted);
    let nothing = Figure::new(&heading, &Overlay::default(), &[], &[]);
    assert!(matches!(nothing, Err(ReportError::Empty)));
}

#[test]
fn a_reversed_axis_mirrors_the_ticks() {
    let place = |figure: &Figure, text: &str| {
        let found = figure.texts().iter().find(|t| t.text == text).unwrap();
        0.5 * (found.bounds[0] + found.bounds[2])
    };
    let mut dossier = sulfide();
    let rising = Figure::of(&dossier).unwrap();
    dossier.overlay.direction = Direction::Falling;
    let falling = Figure::of(&dossier).unwrap();
    assert!(place(&rising, "10") < place(&rising, "16"));
    assert!(place(&falling, "10") > place(&falling, "16"));
    assert!((place(&rising, "10") + place(&falling, "10") - 550.0).abs() < 0.2);
}

#[test]
fn texts_are_where_the_figure_says() {
    // The drawing library measures, another one draws: the two must agree on widths.
    let letters = "<svg xmlns='http://www.w3.org/2000/svg' width='400' height='40'>\
                   <text x='10' y='20' font-family='DejaVu Sans' font-size='7.5'>Ionization energy (eV) σπ′₂</text></svg>";
    let mut options = usvg::Options::default();
    options
        .fontdb_mut()
        .load_font_data(dejavu::sans::regular().to_vec());
    let tree = usvg::Tree::from_str(letters, &options).unwrap();
    let drawn = f64::from(tree.root().bounding_box().width());
    let mut dossier = one_band();
    dossier.levels.hole_states[0].label = "Ionization energy (eV) σπ′₂".to_owned();
    dossier.matches[0].hole_states[0] = "Ionization energy (eV) σπ′₂".to_owned();
    dossier.overlay.sticks[0].label = "Ionization energy (eV) σπ′₂".to_owned();
    let figure = Figure::of(&dossier).unwrap();
    let found = figure
        .texts()
        .iter()
        .find(|t| t.text.ends_with("σπ′₂"))
        .unwrap();
    let said = found.bounds[2] - found.bounds[0];
    // Side bearings of the first and last letter, and kerning, make the difference.
    assert!((said - drawn).abs() < 1.5, "said {said}, drawn {drawn}");
}

#[test]
fn every_letter_used_has_a_glyph() {
    let outline = |c: char| {
        let svg = format!(
            "<svg xmlns='http://www.w3.org/2000/svg' width='40' height='40'><text x='9' y='20' \
             font-family='DejaVu Sans' font-size='20'>{c}</text></svg>"
        );
        let mut options = usvg::Options::default();
        options
            .fontdb_mut()
            .load_font_data(dejavu::sans::regular().to_vec());
        let tree = usvg::Tree::from_str(&svg, &options).unwrap();
        tree.to_string(&usvg::WriteOptions::default())
    };
    // A code point that no font has: what is drawn for it is drawn for every missing letter.
    let missing = outline('\u{0378}');
    for c in "σπδφΣΠΔΦβγαν′″†·−–…≥×±₀₁₂₃₄₅₆₇₈₉⁻¹²³ũ₊".chars()
    {
        let drawn = outline(c);
        assert!(
            drawn != missing && drawn.contains("<path"),
            "no glyph for {c}"
        );
    }
}

/// The same data; numbers may differ in their last bit, which the reader of JSON may round.
fn same(place: &str, a: &serde_json::Value, b: &serde_json::Value) {
    use serde_json::Value::{Array, Number, Object};
    match (a, b) {
        (Object(a), Object(b)) => {
            assert!(a.keys().eq(b.keys()), "{place}: other fields");
            for (key, value) in a {
                same(&format!("{place}.{key}"), value, &b[key]);
            }
        }
        (Array(a), Array(b)) => {
            assert_eq!(a.len(), b.len(), "{place}");
            for (i, (a, b)) in a.iter().zip(b).enumerate() {
                same(&format!("{place}[{i}]"), a, b);
            }
        }
        (Number(a), Number(b)) => {
            let (a, b) = (a.as_f64().unwrap(), b.as_f64().unwrap());
            assert!(
                (a - b).abs() <= 2.0 * f64::EPSILON * b.abs(),
                "{place}: {a} and {b}"
            );
        }
        _ => assert_eq!(a, b, "{place}"),
    }
}

#[test]
fn the_dossier_survives_json_and_has_the_schema_names() {
    for dossier in [sulfide(), crowded(), one_band(), empty()] {
        let text = serde_json::to_string(&dossier).unwrap();
        let back: Dossier = serde_json::from_str(&text).unwrap();
        same(
            "dossier",
            &serde_json::to_value(&back).unwrap(),
            &serde_json::to_value(&dossier).unwrap(),
        );
    }
    let value = serde_json::to_value(crowded()).unwrap();
    assert_eq!(value["schema"], "bandproof/dossier/1");
    assert_eq!(value["levels"]["schema"], "bandproof/levels/1");
    let has = |object: &serde_json::Value, names: &[&str]| {
        for name in names {
            assert!(object.get(name).is_some(), "{name} is missing");
        }
    };
    has(
        &value["bands"][0],
        &[
            "id",
            "vertical_ev",
            "vertical_sd",
            "maximum_ev",
            "origin_ev",
            "area",
            "area_sd",
            "fwhm_ev",
            "members",
        ],
    );
    has(&value["bands"][0]["members"][0], &["position_ev", "area"]);
    has(
        &value["matches"][0],
        &[
            "band",
            "hole_states",
            "probability",
            "character",
            "evidence",
        ],
    );
    has(
        &value["remarks"][0],
        &["kind", "position_ev", "band", "candidates", "text"],
    );
}

#[test]
fn a_dossier_of_an_earlier_build_is_still_read() {
    let text = include_str!("../data/reporting/dossier.json");
    let dossier: Dossier = serde_json::from_str(text).unwrap();
    dossier.check().unwrap();
    assert_eq!(dossier.bands.len(), 1);
    Figure::of(&dossier).unwrap();
}

#[test]
fn all_outputs_are_written_and_are_what_they_say() {
    let parent = tempfile::tempdir().unwrap();
    let folder = parent.path().join("results/sulfide");
    let dossier = sulfide();
    let paths = report::write(&dossier, &folder).unwrap();
    if let Some(kept) = std::env::var_os("BANDPROOF_FIGURES") {
        report::write(&dossier, &Path::new(&kept).join("report")).unwrap();
        report::write(&crowded(), &Path::new(&kept).join("crowded_report")).unwrap();
        report::write(&one_band(), &Path::new(&kept).join("one_band_report")).unwrap();
    }
    let names: Vec<_> = paths
        .iter()
        .map(|p| p.file_name().unwrap().to_str().unwrap())
        .collect();
    assert_eq!(
        names,
        [
            "dossier.json",
            "assignment.csv",
            "assignment.md",
            "overlay.svg",
            "overlay.png",
            "overlay.pdf",
            "page.html"
        ]
    );
    assert_eq!(
        std::fs::read_dir(&folder).unwrap().count(),
        7,
        "something else is left there"
    );
    let read = |name: &str| std::fs::read(folder.join(name)).unwrap();
    let json: Dossier = serde_json::from_slice(&read("dossier.json")).unwrap();
    assert_eq!(json.bands.len(), dossier.bands.len());
    let png = read("overlay.png");
    assert_eq!(&png[..8], b"\x89PNG\r\n\x1a\n");
    let pixels = u32::from_be_bytes(png[16..20].try_into().unwrap());
    assert!(
        (2125..=2127).contains(&pixels),
        "{pixels} pixels wide: 180 mm at 300 dpi are 2126"
    );
    let pdf = read("overlay.pdf");
    assert!(pdf.starts_with(b"%PDF-1."));
    let pages = pdf.windows(10).filter(|w| w == b"/Type/Page").count();
    let text = String::from_utf8_lossy(&pdf);
    let pages = pages.max(text.matches("/Type /Page\n").count());
    assert!(text.contains("/Count 1"), "not one page ({pages})");
    assert!(!text.contains("CreationDate"));
    // Again, over what is there: the same bytes.
    let before: Vec<Vec<u8>> = paths.iter().map(|p| std::fs::read(p).unwrap()).collect();
    report::write(&dossier, &folder).unwrap();
    let after: Vec<Vec<u8>> = paths.iter().map(|p| std::fs::read(p).unwrap()).collect();
    for ((name, a), b) in names.iter().zip(&before).zip(&after) {
        assert!(a == b, "{name}: the same dossier gave other bytes");
    }
}

#[test]
fn nothing_is_left_when_a_file_cannot_be_written() {
    let parent = tempfile::tempdir().unwrap();
    // A folder stands where the last file would go.
    let folder = parent.path().join("taken");
    std::fs::create_dir_all(folder.join("page.html")).unwrap();
    std::fs::write(folder.join("assignment.csv"), "from before").unwrap();
    let error = report::write(&one_band(), &folder).unwrap_err();
    assert!(matches!(&error, ReportError::Write { path, .. } if path.ends_with("page.html")));
    assert!(error.to_string().contains("page.html"), "{error}");
    let mut left: Vec<_> = std::fs::read_dir(&folder)
        .unwrap()
        .map(|e| e.unwrap().file_name().into_string().unwrap())
        .collect();
    left.sort();
    assert_eq!(left, ["assignment.csv", "page.html"]);
    assert_eq!(
        std::fs::read(folder.join("assignment.csv")).unwrap(),
        b"from before"
    );
    // A file stands where the folder would be.
    let file = parent.path().join("file");
    std::fs::write(&file, "x").unwrap();
    let error = report::write(&one_band(), &file.join("results")).unwrap_err();
    assert!(matches!(error, ReportError::Write { .. }), "{error}");
    assert_eq!(std::fs::read(&file).unwrap(), b"x");
}

#[test]
fn a_dossier_that_does_not_fit_together_is_refused_before_anything_is_made() {
    let parent = tempfile::tempdir().unwrap();
    let folder = parent.path().join("results");
    type Damage = fn(&mut Dossier);
    let damages: [(Damage, &str); 9] = [
        (|d| d.overlay.fit.truncate(3), "overlay.fit: 3 values"),
        (
            |d| d.overlay.intensity[4] = f64::NAN,
            "overlay.intensity: NaN",
        ),
        (
            |d| d.overlay.energy_ev.swap(1, 2),
            "overlay.energy_ev: energies do not rise",
        ),
        (
            |d| {
                d.overlay.bands.push(BandCurve {
                    band: 2,
                    intensity: vec![1.0],
                })
            },
            "overlay.bands, band 2: 1 values",
        ),
        (
            |d| d.overlay.sticks[0].height = 0.0,
            "height 0 is not positive",
        ),
        (
            |d| d.matches[0].band = 77,
            "matches[0]: there is no band 77",
        ),
        (
            |d| d.matches[0].hole_states[0] = "9z".to_owned(),
            "there is no hole state '9z'",
        ),
        (|d| d.bands[0].vertical_sd = f64::INFINITY, "bands[0]: inf"),
        (
            |d| d.matches[0].evidence[0].weight = f64::NAN,
            "dossier.json could not be made",
        ),
    ];
    for (damage, message) in damages {
        let mut dossier = sulfide();
        damage(&mut dossier);
        let error = report::write(&dossier, &folder).unwrap_err();
        assert!(
            error.to_string().contains(message),
            "'{error}' lacks '{message}'"
        );
        assert!(!folder.exists());
    }
}

#[test]
fn other_endings_are_refused() {
    let folder = tempfile::tempdir().unwrap();
    let figure = Figure::of(&one_band()).unwrap();
    let error = report::write_figure(&figure, &folder.path().join("a.jpg")).unwrap_err();
    assert!(
        error
            .to_string()
            .contains("should end in .svg, .png or .pdf"),
        "{error}"
    );
    assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), 0);
}

#[test]
fn the_csv_has_one_row_per_band_with_full_numbers() {
    let dossier = crowded();
    let text = report::assignment_csv(&dossier).unwrap();
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let head = reader.headers().unwrap().clone();
    let column = |name: &str| head.iter().position(|h| h == name).unwrap();
    let rows: Vec<csv::StringRecord> = reader.records().map(Result::unwrap).collect();
    assert_eq!(rows.len(), dossier.bands.len());
    for (row, band) in rows.iter().zip(&dossier.bands) {
        assert_eq!(row[column("band")], band.id.to_string());
        let vertical: f64 = row[column("vertical_ev")].parse().unwrap();
        assert_eq!(vertical, band.vertical_ev);
        match dossier.match_of(band.id) {
            Some(found) => {
                assert_eq!(row[column("hole_states")], found.hole_states.join("; "));
                let p: f64 = row[column("probability")].parse().unwrap();
                assert_eq!(p, found.probability);
            }
            None => assert_eq!(&row[column("hole_states")], ""),
        }
    }
    assert!(
        rows.iter()
            .any(|r| r[column("remark_causes")].starts_with("H2O X"))
    );
}

#[test]
fn the_report_says_which_energy_is_which() {
    for dossier in [sulfide(), crowded(), one_band(), empty()] {
        let md = report::assignment_md(&dossier);
        let figure = Figure::of(&dossier).unwrap();
        let page = report::page_html(&dossier, &figure);
        for text in [&md, &page] {
            assert!(text.contains("Vertical: the first moment"));
            assert!(text.contains("Koopmans"));
            assert!(!text.contains("NaN"));
            // The word stands only where it is said that this is not decided.
            assert_eq!(text.matches("adiabatic").count(), 1);
        }
        assert!(!page.contains("<script") && !page.contains("http://localhost"));
        let links = page.matches("http").count();
        let names = page.matches("http://www.w3.org/").count();
        assert_eq!(links, names, "the page asks for something from elsewhere");
    }
    let md = report::assignment_md(&sulfide());
    assert!(
        md.starts_with("# Photoelectron bands of hydrogen sulfide (H₂S)\n"),
        "{md}"
    );
    assert!(md.contains("| 1 | 10.498 ± 0.002 |"), "{md}");
}

#[test]
fn text_from_outside_cannot_break_the_page() {
    let mut dossier = one_band();
    dossier.title = "<script>alert(1)</script> & \"x\" | *y*".to_owned();
    dossier.trace.comments = vec!["</style><b>".to_owned()];
    let figure = Figure::of(&dossier).unwrap();
    usvg::Tree::from_str(figure.svg(), &usvg::Options::default()).unwrap();
    let page = report::page_html(&dossier, &figure);
    assert!(!page.contains("<script>") && !page.contains("</style><b>"));
    let md = report::assignment_md(&dossier);
    assert!(md.contains("\\<script>"), "{md}");
}

#[test]
fn the_summary_of_a_fit_keeps_its_odds() {
    let dossier = crowded();
    let fit = invented::fit_of(&dossier);
    let summary = FitSummary::of(&fit);
    let odds: Vec<f64> = summary.groupings.iter().map(|g| g.probability).collect();
    assert_eq!(odds, [0.83, 0.17]);
    assert_eq!(summary.groupings[0].vertical_ev.len(), 11);
    assert_eq!(summary.groupings[1].vertical_ev.len(), 10);
    assert_eq!(summary.statistics, fit.statistics);
}

#[test]
fn terminal_tables_are_aligned() {
    let dossier = crowded();
    let levels = report::levels_table(&dossier.levels);
    assert!(levels.contains("State"), "{levels}");
    let fit = invented::fit_of(&dossier);
    let bands = report::bands_table(&fit);
    let lines: Vec<&str> = bands.lines().take(2 + dossier.bands.len()).collect();
    assert!(lines[0].starts_with("Band   Vertical / eV"), "{bands}");
    let end = lines[1].chars().count();
    assert!(
        lines[2..].iter().all(|l| l.chars().count() <= end),
        "{bands}"
    );
    let assignment = report::assignment_table(&dossier);
    assert!(assignment.contains("† H2O X (000)"), "{assignment}");
    if std::env::var_os("BANDPROOF_FIGURES").is_some() {
        println!(
            "{levels}\n{bands}\n{assignment}\n{}",
            report::assignment_md(&dossier)
        );
    }
}

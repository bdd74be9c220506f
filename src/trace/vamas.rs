//! VAMAS, the transfer format of surface chemical analysis (ISO 14976:1998).
//!
//! W. A. Dench, L. B. Hazell, M. P. Seah, Surf. Interface Anal. 13, 63 (1988), from memory. A file
//! is a list of lines without labels; what a line means follows from its place and from the lines
//! before it. Each block is one spectrum. The first block is complete; in the others only the
//! items of the inclusion list stand (or all but those of the exclusion list), and the rest is as
//! in the first. Regular and irregular scans are read; maps are refused, they hold no spectra.
//!
//! Nothing is applied to the energies: work function and target bias, which belong to solids, are
//! kept in the comments.

use std::iter::Peekable;

use thiserror::Error;

use super::error::{Problem, TraceError, shorten};
use super::record::{Meaning, Record};
use super::text::numbered_lines;
use super::words::{self, Role};

/// What can be wrong with a VAMAS file.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
#[allow(
    missing_docs,
    reason = "the message of each variant is its documentation"
)]
pub enum VamasProblem {
    #[error("the file ends, expected {expected}")]
    End { expected: &'static str },
    #[error("found '{found}', expected {expected}")]
    Line {
        found: String,
        expected: &'static str,
    },
    #[error("found {found} ordinate values for {variables} variables, expected a multiple")]
    Uneven { found: usize, variables: usize },
    #[error("found no block, expected at least one spectrum")]
    NoBlock,
    #[error(
        "found one variable in an irregular scan, expected two or more: the abscissa and the counts"
    )]
    NoOrdinates,
}

const FIRST_LINE: &str = "VAMAS Surface Chemical Analysis Standard Data Transfer Format";
/// The standard's number for "not known".
const UNKNOWN: f64 = 1e37;
/// Items of a block that the inclusion list can name.
const ITEMS: usize = 40;

/// Whether a text is VAMAS.
pub(super) fn is(text: &str) -> bool {
    text.trim_start().starts_with(FIRST_LINE)
}

/// Reads every block.
pub(super) fn read(text: &str, source: &str) -> Result<Vec<Record>, TraceError> {
    let text = text.trim_end();
    let lines: Lines = Box::new(numbered_lines(text));
    let total = numbered_lines(text).count();
    let mut cursor = Cursor {
        lines: lines.peekable(),
        line: 1,
        total,
    };
    read_lines(&mut cursor)
        .map_err(|problem| TraceError::line(source, cursor.line, Problem::from(problem)))
}

type Lines<'a> = Box<dyn Iterator<Item = (usize, &'a str)> + 'a>;

/// A place in the list of lines.
struct Cursor<'a> {
    lines: Peekable<Lines<'a>>,
    /// The line that was read last: errors point at it.
    line: usize,
    total: usize,
}

type Parsed<T> = Result<T, VamasProblem>;

impl<'a> Cursor<'a> {
    fn text(&mut self, expected: &'static str) -> Parsed<&'a str> {
        let (line, text) = self.lines.next().ok_or(VamasProblem::End { expected })?;
        self.line = line;
        Ok(text.trim())
    }

    fn skip(&mut self, count: usize, what: &'static str) -> Parsed<()> {
        for _ in 0..count {
            self.text(what)?;
        }
        Ok(())
    }

    fn number(&mut self, expected: &'static str) -> Parsed<f64> {
        let text = self.text(expected)?;
        match text.parse::<f64>() {
            Ok(number) if number.is_finite() => Ok(number),
            _ => Err(VamasProblem::Line {
                found: shorten(text),
                expected,
            }),
        }
    }

    fn whole(&mut self, expected: &'static str) -> Parsed<i64> {
        let text = self.text(expected)?;
        text.parse().map_err(|_| VamasProblem::Line {
            found: shorten(text),
            expected,
        })
    }

    /// A count of lines that follow; no more can follow than there are.
    fn count(&mut self, expected: &'static str) -> Parsed<usize> {
        let found = self.whole(expected)?;
        match usize::try_from(found) {
            Ok(count) if count <= self.total => Ok(count),
            _ => Err(VamasProblem::Line {
                found: found.to_string(),
                expected,
            }),
        }
    }

    fn one_of(&mut self, list: &[&'static str], expected: &'static str) -> Parsed<&'static str> {
        let text = self.text(expected)?;
        let known = list.iter().find(|word| **word == text);
        known.copied().ok_or_else(|| VamasProblem::Line {
            found: shorten(text),
            expected,
        })
    }
}

/// What the head of the file says about its blocks.
struct Head {
    mode: &'static str,
    regular: bool,
    variables: Vec<String>,
    /// Whether item i + 1 stands in blocks after the first.
    given: [bool; ITEMS],
    future_lines: usize,
    blocks: usize,
    comments: Vec<String>,
}

fn read_lines(cursor: &mut Cursor) -> Parsed<Vec<Record>> {
    let head = read_head(cursor)?;
    let mut records = Vec::new();
    let mut first: Option<Items> = None;
    for _ in 0..head.blocks {
        let (record, items) = read_block(cursor, &head, first.as_ref())?;
        records.push(record);
        first.get_or_insert(items);
    }
    if records.is_empty() {
        return Err(VamasProblem::NoBlock);
    }
    if cursor.lines.peek().is_some() {
        let found = cursor.text("end of experiment")?;
        if !found.eq_ignore_ascii_case("end of experiment") {
            let found = shorten(found);
            let expected = "end of experiment (the lines before do not fit the format)";
            return Err(VamasProblem::Line { found, expected });
        }
    } else {
        let note = "the file ends without 'end of experiment'".to_string();
        records
            .iter_mut()
            .for_each(|record| record.notes.push(note.clone()));
    }
    Ok(records)
}

fn read_head(cursor: &mut Cursor) -> Parsed<Head> {
    const MODES: [&str; 9] = [
        "MAP", "MAPDP", "MAPSV", "MAPSVDP", "NORM", "SDP", "SDPSV", "SEM", "NOEXP",
    ];
    let mut comments = Vec::new();
    cursor.text("the format identifier")?;
    for what in ["institution", "instrument", "operator", "experiment"] {
        keep(&mut comments, what, cursor.text("an identifier")?);
    }
    for _ in 0..cursor.count("the number of comment lines")? {
        keep(&mut comments, "", cursor.text("a comment line")?);
    }
    let mode = cursor.one_of(&MODES, "an experiment mode (NORM, MAP, SDP, …)")?;
    let scans = ["REGULAR", "IRREGULAR"];
    let scan = cursor.one_of(
        &scans,
        "the scan mode REGULAR or IRREGULAR (maps are not read)",
    )?;
    if ["MAP", "MAPDP", "NORM", "SDP"].contains(&mode) {
        cursor.whole("the number of spectral regions")?;
    }
    if ["MAP", "MAPDP"].contains(&mode) {
        cursor.skip(
            3,
            "the number of analysis positions, then of x and y coordinates",
        )?;
    }
    let mut variables = Vec::new();
    for _ in 0..cursor.count("the number of experimental variables")? {
        let label = cursor.text("the label of an experimental variable")?;
        let unit = cursor.text("the unit of an experimental variable")?;
        variables.push(format!("{label} ({unit})"));
    }
    let listed = cursor.whole("the number of entries in the inclusion or exclusion list")?;
    let including = listed > 0;
    let mut given = [!including; ITEMS];
    if listed.unsigned_abs() > ITEMS as u64 {
        let expected = "at most 40 entries in the inclusion or exclusion list";
        return Err(VamasProblem::Line {
            found: listed.to_string(),
            expected,
        });
    }
    for _ in 0..listed.unsigned_abs() {
        let expected = "the number of an item, 1 to 40";
        let item = cursor.whole(expected)?;
        let place = usize::try_from(item).ok().and_then(|i| i.checked_sub(1));
        let place = place.and_then(|i| given.get_mut(i));
        *place.ok_or(VamasProblem::Line {
            found: item.to_string(),
            expected,
        })? = including;
    }
    let manual = cursor.count("the number of manually entered items")?;
    cursor.skip(manual, "the number of a manually entered item")?;
    let future_head = cursor.count("the number of future upgrade experiment entries")?;
    let future_lines = cursor.count("the number of future upgrade block entries")?;
    cursor.skip(future_head, "a future upgrade experiment entry")?;
    let blocks = cursor.count("the number of blocks")?;
    Ok(Head {
        mode,
        regular: scan == "REGULAR",
        variables,
        given,
        future_lines,
        blocks,
        comments,
    })
}

/// Items of a block that matter to us, and that later blocks may leave out.
#[derive(Debug, Clone, Default)]
struct Items {
    comments: Vec<String>,
    technique: &'static str,
    source_energy: Option<f64>,
    /// Label, unit, start and increment of a regular scan.
    abscissa: (String, String, f64, f64),
    abscissa_line: usize,
    /// Label and unit of each corresponding variable.
    variables: Vec<(String, String)>,
    additional: usize,
}

fn read_block(cursor: &mut Cursor, head: &Head, first: Option<&Items>) -> Parsed<(Record, Items)> {
    const TECHNIQUES: [&str; 14] = [
        "AES diff",
        "AES dir",
        "EDX",
        "ELS",
        "FABMS",
        "FABMS energy spec",
        "ISS",
        "SIMS",
        "SIMS energy spec",
        "SNMS",
        "SNMS energy spec",
        "UPS",
        "XPS",
        "XRF",
    ];
    const IONS: [&str; 7] = [
        "FABMS",
        "FABMS energy spec",
        "ISS",
        "SIMS",
        "SIMS energy spec",
        "SNMS",
        "SNMS energy spec",
    ];
    const PROFILED: [&str; 7] = ["AES diff", "AES dir", "EDX", "ELS", "UPS", "XPS", "XRF"];
    let given = |item: usize| first.is_none() || head.given[item - 1];
    let mode = |list: &[&str]| list.contains(&head.mode);
    let profiling = mode(&["MAPDP", "MAPSVDP", "SDP", "SDPSV"]);
    let mut items = first.cloned().unwrap_or_default();
    let mut comments = head.comments.clone();

    let name = cursor.text("the identifier of a block")?.to_string();
    keep(
        &mut comments,
        "sample",
        cursor.text("the identifier of the sample")?,
    );
    let mut moment = Vec::new();
    for (item, what) in (1..).zip([
        "year", "month", "day", "hours", "minutes", "seconds", "zone",
    ]) {
        if given(item) {
            let expected = "a number of the date (year, month, day, hours, minutes, seconds, zone)";
            let value = cursor.number(expected)?;
            if item <= 6 && value > 0.0 {
                moment.push(format!("{what} {value}"));
            }
        }
    }
    if moment
        .first()
        .is_some_and(|first| first.starts_with("year"))
    {
        keep(&mut comments, "measured", &moment.join(", "));
    }
    if given(8) {
        items.comments.clear();
        for _ in 0..cursor.count("the number of lines in the block comment")? {
            keep(
                &mut items.comments,
                "",
                cursor.text("a line of the block comment")?,
            );
        }
    }
    comments.extend(items.comments.iter().cloned());
    if given(9) {
        items.technique = cursor.one_of(&TECHNIQUES, "a technique (UPS, XPS, …)")?;
    }
    keep(&mut comments, "technique", items.technique);
    if given(10) && mode(&["MAP", "MAPDP"]) {
        cursor.skip(2, "the x and y coordinates")?;
    }
    if given(11) {
        for variable in &head.variables {
            let value = cursor.text("the value of an experimental variable")?;
            keep(&mut comments, variable, value);
        }
    }
    if given(12) {
        keep(
            &mut comments,
            "analysis source",
            cursor.text("the label of the analysis source")?,
        );
    }
    if given(13) && (profiling || IONS.contains(&items.technique)) {
        cursor.skip(3, "the sputtering ion: atomic number, atoms and charge")?;
    }
    if given(14) {
        let energy = cursor.number("the characteristic energy of the analysis source")?;
        items.source_energy = Some(energy).filter(|e| *e > 0.0 && *e < UNKNOWN);
    }
    if given(15) {
        cursor.skip(1, "the strength of the analysis source")?;
    }
    if given(16) {
        cursor.skip(2, "the beam width of the analysis source")?;
    }
    if given(17) && mode(&["MAP", "MAPDP", "MAPSV", "MAPSVDP", "SEM"]) {
        cursor.skip(2, "the field of view")?;
    }
    if given(18) && mode(&["SEM", "MAPSV", "MAPSVDP"]) {
        cursor.skip(6, "the coordinates of the linescans")?;
    }
    for item in [19, 20] {
        if given(item) {
            cursor.skip(1, "an angle of the analysis source")?;
        }
    }
    if given(21) {
        keep(
            &mut comments,
            "analyser mode",
            cursor.text("the analyser mode")?,
        );
    }
    if given(22) {
        let energy = cursor.text("the pass energy or retard ratio")?;
        keep(&mut comments, "pass energy or retard ratio", energy);
    }
    if given(23) && items.technique == "AES diff" {
        cursor.skip(1, "the differential width")?;
    }
    if given(24) {
        cursor.skip(1, "the magnification of the transfer lens")?;
    }
    for (item, what, expected) in [
        (
            25,
            "analyser work function (not applied), eV",
            "the work function of the analyser",
        ),
        (26, "target bias (not applied), V", "the target bias"),
    ] {
        if given(item) {
            let value = cursor.number(expected)?;
            if value != 0.0 && value.abs() < UNKNOWN {
                keep(&mut comments, what, &value.to_string());
            }
        }
    }
    for item in [27, 28] {
        if given(item) {
            cursor.skip(2, "the analysis width or the take-off angles")?;
        }
    }
    if given(29) {
        keep(&mut comments, "species", cursor.text("the species label")?);
    }
    if given(30) {
        keep(
            &mut comments,
            "transition",
            cursor.text("the transition or charge state label")?,
        );
        cursor.number("the charge of the detected particle")?;
    }
    if given(31) && head.regular {
        let label = cursor.text("the abscissa label")?.to_string();
        let unit = cursor.text("the abscissa units")?.to_string();
        items.abscissa_line = cursor.line;
        let start = cursor.number("the abscissa start")?;
        items.abscissa = (label, unit, start, cursor.number("the abscissa increment")?);
    }
    if given(32) {
        items.variables.clear();
        for _ in 0..cursor.count("the number of corresponding variables")? {
            let label = cursor
                .text("the label of a corresponding variable")?
                .to_string();
            if !head.regular && items.variables.is_empty() {
                items.abscissa_line = cursor.line;
            }
            let unit = cursor
                .text("the unit of a corresponding variable")?
                .to_string();
            items.variables.push((label, unit));
        }
    }
    if given(33) {
        let modes = ["analogue", "pulse counting"];
        let signal = cursor.one_of(&modes, "the signal mode, analogue or pulse counting")?;
        keep(&mut comments, "signal mode", signal);
    }
    for (item, what, expected) in [
        (
            34,
            "collection time per channel, s",
            "the signal collection time",
        ),
        (35, "scans", "the number of scans"),
        (
            36,
            "signal time correction, s",
            "the signal time correction",
        ),
    ] {
        if given(item) {
            let value = cursor.number(expected)?;
            if value != 0.0 && value.abs() < UNKNOWN {
                keep(&mut comments, what, &value.to_string());
            }
        }
    }
    if given(37) && profiling && PROFILED.contains(&items.technique) {
        cursor.skip(7, "the sputtering source")?;
    }
    if given(38) {
        cursor.skip(2, "the tilt of the sample")?;
    }
    if given(39) {
        cursor.skip(1, "the rotation of the sample")?;
    }
    if given(40) {
        items.additional = cursor.count("the number of additional numerical parameters")?;
        for _ in 0..items.additional {
            let label = cursor.text("the label of an additional parameter")?;
            let unit = cursor.text("the unit of an additional parameter")?;
            let value = cursor.text("the value of an additional parameter")?;
            keep(&mut comments, &format!("{label} ({unit})"), value);
        }
    }
    cursor.skip(head.future_lines, "a future upgrade block entry")?;

    let mut record = read_ordinates(cursor, head, &items)?;
    record.name = name;
    record.comments = comments;
    if let Some(energy) = items
        .source_energy
        .filter(|_| ["UPS", "XPS"].contains(&items.technique))
    {
        record.photon_energy_ev = Some(energy);
        record.notes.push(format!(
            "the photon energy of {energy} eV is the file's characteristic energy of the source"
        ));
    }
    Ok((record, items))
}

fn read_ordinates(cursor: &mut Cursor, head: &Head, items: &Items) -> Parsed<Record> {
    let found = cursor.count("the number of ordinate values")?;
    let width = items.variables.len();
    if width == 0 {
        let expected = "at least one corresponding variable";
        return Err(VamasProblem::Line {
            found: "0 variables".to_string(),
            expected,
        });
    }
    if found % width != 0 {
        return Err(VamasProblem::Uneven {
            found,
            variables: width,
        });
    }
    if !head.regular && width == 1 {
        return Err(VamasProblem::NoOrdinates);
    }
    cursor.skip(
        2 * width,
        "the least and the greatest ordinate of each variable",
    )?;
    let (name, unit) = match head.regular {
        true => (&items.abscissa.0, &items.abscissa.1),
        false => (&items.variables[0].0, &items.variables[0].1),
    };
    let others = usize::from(!head.regular)..width;
    let role = |i: &usize| words::role(&items.variables[*i].0);
    let counted = |i: &usize| matches!(role(i), Some(Role::Counts { .. }));
    let counts = others.clone().find(counted).unwrap_or(others.start);
    let sd = others
        .clone()
        .find(|i| *i != counts && role(i) == Some(Role::Sd));

    let mut record = Record {
        abscissa_name: format!("{name} ({unit})"),
        abscissa_line: Some(items.abscissa_line),
        sd: sd.map(|_| Vec::new()),
        ..Record::default()
    };
    for i in 0..found / width {
        if head.regular {
            record
                .abscissa
                .push(items.abscissa.2 + i as f64 * items.abscissa.3);
        }
        for variable in 0..width {
            let value = cursor.number("an ordinate value")?;
            if value.abs() >= UNKNOWN && variable == counts {
                let expected = "a known ordinate value";
                return Err(VamasProblem::Line {
                    found: value.to_string(),
                    expected,
                });
            }
            if !head.regular && variable == 0 {
                record.abscissa.push(value);
            } else if variable == counts {
                record.counts.push(value);
            } else if Some(variable) == sd
                && let Some(list) = &mut record.sd
            {
                list.push(value);
            }
        }
        record.lines.push(cursor.line as u32);
    }
    let unused: Vec<&str> = others
        .filter(|i| *i != counts && Some(*i) != sd)
        .map(|i| items.variables[i].0.as_str())
        .collect();
    if !unused.is_empty() {
        let (label, unused) = (&items.variables[counts].0, unused.join("', '"));
        record.notes.push(format!(
            "'{label}' was taken as the counts; not used: '{unused}'"
        ));
    }
    record.meaning = match words::meaning(&format!("{name} {unit}")) {
        Meaning::Time if unit.eq_ignore_ascii_case("ev") => Meaning::Unsaid,
        meaning => meaning,
    };
    record.meaning_from = format!("its abscissa label '{name}'");
    let known = match record.meaning {
        Meaning::Wavenumber => true,
        Meaning::Time => unit.eq_ignore_ascii_case("ns"),
        _ => unit.eq_ignore_ascii_case("ev"),
    };
    record.foreign_unit = (!known).then(|| (unit.clone(), "eV, cm-1 or ns"));
    Ok(record)
}

/// Keeps a piece of text as a comment, unless there is none.
fn keep(comments: &mut Vec<String>, what: &str, text: &str) {
    let text = text.trim();
    if text.is_empty() || text.eq_ignore_ascii_case("not specified") {
        return;
    }
    comments.push(if what.is_empty() {
        text.to_string()
    } else {
        format!("{what}: {text}")
    });
}

//! One block of a JCAMP-DX file, from its title to its end.

use super::super::error::Problem;
use super::super::record::{Meaning, Record};
use super::super::stated::{KEYS, Stated, VERSION};
use super::super::words;
use super::asdf::Decoder;
use super::write::{EXPOSURE, SD};
use super::{JcampProblem, normal};

/// A block that is being read.
#[derive(Debug)]
pub(super) struct Block {
    pub title: String,
    /// Line of its title.
    pub opened: usize,
    limit: usize,
    labels: Vec<Labelled>,
    table: Option<Table>,
    /// Whether lines without label still belong to the table.
    in_table: bool,
}

#[derive(Debug)]
struct Labelled {
    line: usize,
    normal: String,
    label: String,
    value: String,
}

#[derive(Debug)]
struct Table {
    name: &'static str,
    line: usize,
    kind: Kind,
    x: Vec<f64>,
    y: Vec<f64>,
    lines: Vec<u32>,
    x_factor: f64,
    y_factor: f64,
    points: Option<usize>,
    loose: Vec<f64>,
}

#[derive(Debug)]
enum Kind {
    /// `(X++(Y..Y))`
    Even {
        decoder: Decoder,
        first: f64,
        last: f64,
    },
    /// `(XY..XY)` and its kin: numbers in groups of so many, abscissa and ordinate first.
    Pairs { group: usize },
}

/// What a block turned out to be.
pub(super) enum Finished {
    Trace(Box<Record>),
    /// It has a table that is no trace.
    OtherTable(String),
    /// It has no table: a block that links others, or only text.
    Nothing,
}

/// Labels whose content the record carries elsewhere.
const STRUCTURE: [&str; 19] = [
    "JCAMPDX",
    "BLOCKS",
    "BLOCKID",
    "CROSSREFERENCE",
    "DATACLASS",
    "XUNITS",
    "FIRSTX",
    "LASTX",
    "MINX",
    "MAXX",
    "FIRSTY",
    "LASTY",
    "MINY",
    "MAXY",
    "XFACTOR",
    "YFACTOR",
    "NPOINTS",
    "DELTAX",
    "$TRACE",
];

/// Tables that are no traces.
const OTHER_TABLES: [&str; 4] = ["NTUPLES", "DATATABLE", "PEAKASSIGNMENTS", "RADATA"];

impl Block {
    pub fn new(opened: usize, title: &str, limit: usize) -> Self {
        let title = title.trim().to_string();
        Block {
            title,
            opened,
            limit,
            labels: Vec::new(),
            table: None,
            in_table: false,
        }
    }

    /// Takes a record.
    pub fn labelled(
        &mut self,
        line: usize,
        normal: &str,
        label: &str,
        value: &str,
    ) -> Result<(), (usize, Problem)> {
        self.in_table = false;
        let name = match normal {
            "XYDATA" => "XYDATA",
            "XYPOINTS" => "XYPOINTS",
            "PEAKTABLE" => "PEAK TABLE",
            _ => {
                let (normal, label) = (normal.to_string(), label.to_string());
                self.labels.push(Labelled {
                    line,
                    normal,
                    label,
                    value: value.to_string(),
                });
                return Ok(());
            }
        };
        if self.table.is_some() {
            return Err((line, JcampProblem::SecondTable.into()));
        }
        self.table = Some(
            self.begin(name, line, value)
                .map_err(|(at, problem)| (at, problem.into()))?,
        );
        self.in_table = true;
        Ok(())
    }

    /// Takes a line without label: one more of the table, or of the record before.
    pub fn continued(&mut self, line: usize, text: &str) -> Result<(), (usize, Problem)> {
        match (&mut self.table, self.labels.last_mut()) {
            (Some(table), _) if self.in_table => table
                .line(line, text, self.limit)
                .map_err(|(at, p)| (at, p.into())),
            (_, Some(labelled)) => {
                labelled.value.push('\n');
                labelled.value.push_str(text);
                Ok(())
            }
            _ => {
                self.title.push(' ');
                self.title.push_str(text.trim());
                Ok(())
            }
        }
    }

    /// Prepares for the lines of a table. Errors carry the line to blame.
    fn begin(
        &self,
        name: &'static str,
        line: usize,
        form: &str,
    ) -> Result<Table, (usize, JcampProblem)> {
        let form: String = form.chars().filter(|c| !c.is_whitespace()).collect();
        let form = form.to_uppercase();
        let bad_form = |expected| {
            (
                line,
                JcampProblem::Form {
                    found: form.clone(),
                    expected,
                },
            )
        };
        let needed = |label: &'static str| {
            let missing = (line, JcampProblem::MissingLabel { label, table: name });
            self.number(label, "a number", |_| true)?.ok_or(missing)
        };
        let factor = |label| self.number(label, "a factor other than zero", |f| f != 0.0);
        let whole = |n: f64| n >= 0.0 && n.fract() == 0.0;
        let points = match self.number("NPOINTS", "a whole number", whole)? {
            Some(n) if n > self.limit as f64 => {
                return Err((line, JcampProblem::TooManyPoints { limit: self.limit }));
            }
            points => points.map(|n| n as usize),
        };
        let (kind, x_factor, y_factor) = if name == "XYDATA" {
            if form != "(X++(Y..Y))" {
                return Err(bad_form("(X++(Y..Y))"));
            }
            needed("NPOINTS")?;
            let kind = Kind::Even {
                decoder: Decoder::new(points.unwrap_or(self.limit)),
                first: needed("FIRSTX")?,
                last: needed("LASTX")?,
            };
            needed("XFACTOR")?;
            needed("YFACTOR")?;
            (kind, factor("XFACTOR")?, factor("YFACTOR")?)
        } else {
            let group = match form.as_str() {
                "(XY..XY)" => 2,
                "(XYW..XYW)" if name == "PEAK TABLE" => 3,
                _ if name == "PEAK TABLE" => return Err(bad_form("(XY..XY) or (XYW..XYW)")),
                _ => return Err(bad_form("(XY..XY)")),
            };
            (
                Kind::Pairs { group },
                factor("XFACTOR")?,
                factor("YFACTOR")?,
            )
        };
        Ok(Table {
            name,
            line,
            kind,
            x: Vec::new(),
            y: Vec::new(),
            lines: Vec::new(),
            x_factor: x_factor.unwrap_or(1.0),
            y_factor: y_factor.unwrap_or(1.0),
            points,
            loose: Vec::new(),
        })
    }

    fn find(&self, normal: &str) -> Option<&Labelled> {
        self.labels.iter().find(|l| l.normal == normal)
    }

    /// The number behind a label, which must fulfil a condition.
    fn number(
        &self,
        normal: &str,
        expected: &'static str,
        fits: impl Fn(f64) -> bool,
    ) -> Result<Option<f64>, (usize, JcampProblem)> {
        let Some(labelled) = self.find(normal) else {
            return Ok(None);
        };
        match labelled.value.trim().parse::<f64>() {
            Ok(value) if value.is_finite() && fits(value) => Ok(Some(value)),
            _ => {
                let (label, found) = (labelled.label.clone(), super::shorten(&labelled.value));
                Err((
                    labelled.line,
                    JcampProblem::LabelValue {
                        label,
                        found,
                        expected,
                    },
                ))
            }
        }
    }

    /// Ends the block. Errors carry the line to blame.
    pub fn finish(mut self, source: &str) -> Result<Finished, (usize, Problem)> {
        let Some(table) = self.table.take() else {
            let other = self
                .labels
                .iter()
                .find(|l| OTHER_TABLES.contains(&l.normal.as_str()));
            return Ok(other.map_or(Finished::Nothing, |l| Finished::OtherTable(l.label.clone())));
        };
        let line = table.line;
        let mut record = table.finish().map_err(|problem| (line, problem.into()))?;
        let missing = JcampProblem::MissingLabel {
            label: "XUNITS",
            table: "end of the block",
        };
        let units = self.find("XUNITS").ok_or((line, Problem::from(missing)))?;
        let unit = units.value.trim();
        record.name = self.title.clone();
        record.abscissa_name = unit.to_string();
        record.abscissa_line = Some(units.line);
        (record.meaning, record.foreign_unit) = axis_of(unit);
        record.meaning_from = format!("its XUNITS '{unit}'");
        self.take_statements(&mut record, source)?;
        Ok(Finished::Trace(Box::new(record)))
    }

    fn take_statements(&self, record: &mut Record, source: &str) -> Result<(), (usize, Problem)> {
        let ours = |l: &Labelled| l.normal == "$TRACE" && l.value.trim() == VERSION;
        let mut stated = Stated::default();
        stated.ours = self.labels.iter().any(ours);
        for l in &self.labels {
            let value = l.value.strip_prefix(' ').unwrap_or(&l.value);
            let key = l
                .normal
                .strip_prefix('$')
                .and_then(|own| KEYS.into_iter().find(|key| normal(key) == own));
            if !stated.ours {
                if let Some(key) = key {
                    stated.foreign(l.line, key, value.trim());
                }
                if !STRUCTURE.contains(&l.normal.as_str()) && !l.value.trim().is_empty() {
                    let value = l.value.split_whitespace().collect::<Vec<_>>().join(" ");
                    let label = if l.label.is_empty() {
                        "comment"
                    } else {
                        &l.label
                    };
                    stated.comments.push((l.line, format!("{label}: {value}")));
                }
                continue;
            }
            if let Some(key) = key {
                stated
                    .own(key, value)
                    .map_err(|problem| (l.line, problem))?;
            }
            let list = |expected| {
                self.list(l, expected)
                    .map_err(|p| (l.line, Problem::from(p)))
            };
            if l.normal == normal(SD) {
                record.sd = Some(list(record.counts.len())?);
            } else if l.normal == normal(EXPOSURE) {
                record.exposure_ev = Some(list(record.counts.len())?);
            }
        }
        if stated.ours {
            for (label, there) in [
                (SD, record.sd.is_some()),
                (EXPOSURE, record.exposure_ev.is_some()),
            ] {
                if !there {
                    let missing = JcampProblem::MissingLabel {
                        label,
                        table: "end of the block",
                    };
                    return Err((self.opened, missing.into()));
                }
            }
            if let Some(from) = stated.source.take_if(|s| s != source) {
                stated
                    .notes
                    .push(format!("this file was written from '{from}'"));
            }
        }
        record.axis = stated.axis().map_err(|problem| (self.opened, problem))?;
        record.photon_energy_ev = stated.photon_energy_ev;
        record.noise = stated.noise;
        record.converted = stated.ours;
        record.notes.extend(stated.notes);
        record.comments = stated.comments.into_iter().map(|(_, text)| text).collect();
        Ok(())
    }

    fn list(&self, labelled: &Labelled, expected: usize) -> Result<Vec<f64>, JcampProblem> {
        let mut values = Vec::with_capacity(expected);
        for word in labelled.value.split_whitespace() {
            match word.parse::<f64>() {
                Ok(value) if value.is_finite() => values.push(value),
                _ => {
                    return Err(JcampProblem::Number {
                        found: super::shorten(word),
                    });
                }
            }
        }
        if values.len() != expected {
            let (label, found) = (labelled.label.clone(), values.len());
            return Err(JcampProblem::ListLength {
                label,
                found,
                expected,
            });
        }
        Ok(values)
    }
}

impl Table {
    /// Reads one line of the table; `limit` is for tables that do not say how many points.
    fn line(&mut self, line: usize, text: &str, limit: usize) -> Result<(), (usize, JcampProblem)> {
        match &mut self.kind {
            Kind::Even {
                decoder,
                first,
                last,
            } => {
                let Some(start) = decoder.line(text, &mut self.y)? else {
                    return Ok(());
                };
                let points = self.points.unwrap_or(limit);
                let step = (*last - *first) / (points.max(2) - 1) as f64;
                let expected = grid([*first, *last], points, start.index);
                let found = start.x * self.x_factor;
                // Written abscissae are rounded; a missing point shifts them by a whole step.
                let slack = (0.5 * step.abs()).max(1.001 * start.x_rounding * self.x_factor.abs());
                if (found - expected).abs() > slack {
                    let point = start.index + 1;
                    return Err((
                        0,
                        JcampProblem::Abscissa {
                            found,
                            expected,
                            point,
                        },
                    ));
                }
                self.lines.resize(self.y.len(), line as u32);
            }
            Kind::Pairs { group } => {
                for (at, word) in words_of(text) {
                    let value = match word.parse::<f64>() {
                        Ok(value) if value.is_finite() => value,
                        _ if word == "?" => return Err((at, JcampProblem::MissingOrdinate)),
                        _ => {
                            return Err((
                                at,
                                JcampProblem::Number {
                                    found: super::shorten(word),
                                },
                            ));
                        }
                    };
                    self.loose.push(value);
                    if self.loose.len() == *group {
                        self.x.push(self.loose[0] * self.x_factor);
                        self.y.push(self.loose[1]);
                        self.lines.push(line as u32);
                        self.loose.clear();
                    }
                }
            }
        }
        Ok(())
    }

    fn finish(mut self) -> Result<Record, JcampProblem> {
        let found = self.y.len();
        if !self.loose.is_empty()
            && let Kind::Pairs { group } = self.kind
        {
            let found = found * group + self.loose.len();
            return Err(JcampProblem::Groups { found, group });
        }
        if let Some(expected) = self.points.filter(|&n| n != found) {
            return Err(JcampProblem::PointCount { found, expected });
        }
        let mut notes = Vec::new();
        if let Kind::Even {
            decoder,
            first,
            last,
        } = &self.kind
        {
            self.x = (0..found)
                .map(|i| grid([*first, *last], found, i))
                .collect();
            if decoder.awaits_check() {
                notes.push(
                    "the last line of XYDATA ends in a difference, and no check value follows"
                        .to_string(),
                );
            }
        }
        if self.name == "PEAK TABLE" {
            notes.push(
                "this is a peak table: heights of maxima, not a sampled trace; nothing stands \
                 between its points"
                    .to_string(),
            );
        }
        for y in &mut self.y {
            *y *= self.y_factor;
        }
        if let Some(bad) = self.x.iter().chain(&self.y).find(|v| !v.is_finite()) {
            return Err(JcampProblem::Number {
                found: bad.to_string(),
            });
        }
        Ok(Record {
            abscissa: self.x,
            counts: self.y,
            lines: self.lines,
            notes,
            ..Record::default()
        })
    }
}

/// Point `i` of `points` that lie evenly between a first and a last.
pub(super) fn grid([first, last]: [f64; 2], points: usize, i: usize) -> f64 {
    if i + 1 == points {
        return last;
    }
    first + i as f64 * ((last - first) / (points.max(2) - 1) as f64)
}

/// Words of a line parted by blanks, commas or semicolons, with the byte where each begins.
fn words_of(text: &str) -> impl Iterator<Item = (usize, &str)> {
    let start = text.as_ptr() as usize;
    text.split([' ', '\t', ',', ';'])
        .filter(|word| !word.is_empty())
        .map(move |word| (word.as_ptr() as usize - start, word))
}

/// What an XUNITS value says: the axis, or the unit that is not converted.
fn axis_of(unit: &str) -> (Meaning, Option<(String, &'static str)>) {
    let lower = unit.to_lowercase();
    let word = |w: &str| {
        lower
            .split(|c: char| !c.is_alphanumeric())
            .any(|part| part == w)
    };
    let meaning = words::meaning(unit);
    let known = match meaning {
        Meaning::Wavenumber => true,
        Meaning::Time => word("ns") || lower.contains("nanosec"),
        _ => word("ev") || lower.contains("electron volt") || lower.contains("electronvolt"),
    };
    let time = lower.contains("second");
    let meaning = if time { Meaning::Time } else { meaning };
    let known = known || (time && lower.contains("nanosec"));
    let expected = "eV, 1/CM or NANOSECONDS";
    (meaning, (!known).then(|| (unit.to_string(), expected)))
}

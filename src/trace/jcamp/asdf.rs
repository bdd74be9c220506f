//! Ordinates of `(X++(Y..Y))` tables: the ASCII squeezed difference form and its simpler kin.
//!
//! R. S. McDonald, P. A. Wilks, "JCAMP-DX: a standard form for exchange of infrared spectra in
//! computer readable form", Appl. Spectrosc. 42, 151 (1988), the section on tabular data.
//! A line begins with the abscissa of its first ordinate. Ordinates follow in any mixture of
//!
//! | form | an ordinate is | for example |
//! | --- | --- | --- |
//! | AFFN | a number after a blank, comma or semicolon | `1 -2 3` |
//! | PAC | a number whose sign parts it from the one before | `+1-2+3` |
//! | SQZ | digits whose first one, with the sign, is a letter: `@`, `A`–`I`, `a`–`i` | `AbC` |
//! | DIF | the difference to the one before, first digit `%`, `J`–`R`, `j`–`r` | `Al%` |
//! | DUP | a count of how often the one before stands, itself included: `S`–`Z`, `s` | `AT` |
//!
//! After a line that ends in a difference, the next one begins with the last ordinate again: the
//! check value. It adds no point, and must agree. An exponent needs its sign (`1E+3`): without
//! one, E is the squeezed digit 5.

use super::JcampProblem;

/// Turns lines into ordinates.
#[derive(Debug)]
pub(super) struct Decoder {
    last: f64,
    after_difference: bool,
    /// Most ordinates that may come.
    limit: usize,
}

/// How a line begins.
#[derive(Debug, PartialEq)]
pub(super) struct Start {
    /// The abscissa as written.
    pub x: f64,
    /// Half a unit of its last digit.
    pub x_rounding: f64,
    /// Which ordinate it belongs to, from 0.
    pub index: usize,
}

/// What is wrong, and at which byte of the line.
pub(super) type Fault = (usize, JcampProblem);

enum Item {
    Value(f64),
    Difference(f64),
    Repeat(f64),
}

impl Decoder {
    pub fn new(limit: usize) -> Self {
        Decoder {
            last: f64::NAN,
            after_difference: false,
            limit,
        }
    }

    /// Whether the last line ended in a difference, so that a check value is still to come.
    pub fn awaits_check(&self) -> bool {
        self.after_difference
    }

    /// Reads one line, comments taken off, and appends its ordinates; `None` for an empty line.
    pub fn line(&mut self, line: &str, out: &mut Vec<f64>) -> Result<Option<Start>, Fault> {
        let Some(mut at) = next_item(line, 0) else {
            return Ok(None);
        };
        let (x, end) = plain_number(line, at)?;
        let x_rounding = rounding(&line[at..end]);
        at = end;
        let is_check = self.after_difference;
        let index = if is_check { out.len() - 1 } else { out.len() };
        let mut first = true;
        let mut difference = None;
        while let Some(start) = next_item(line, at) {
            let (item, end) = item(line, start)?;
            at = end;
            let fault = |problem| Err((start, problem));
            match item {
                Item::Value(value) if first && is_check => {
                    let slack = 1e-9 * value.abs().max(1.0);
                    if (value - self.last).abs() > slack {
                        let (found, expected) = (value, self.last);
                        return fault(JcampProblem::CheckValue { found, expected });
                    }
                }
                _ if first && is_check => return fault(JcampProblem::NoCheckValue),
                Item::Value(value) => {
                    self.push(value, 1, out).map_err(|p| (start, p))?;
                    difference = None;
                }
                Item::Difference(_) if first => return fault(JcampProblem::DifferenceFirst),
                Item::Difference(step) => {
                    self.push(self.last + step, 1, out)
                        .map_err(|p| (start, p))?;
                    difference = Some(step);
                }
                Item::Repeat(_) if first => return fault(JcampProblem::RepeatFirst),
                Item::Repeat(times) => {
                    if !(times >= 1.0 && times.fract() == 0.0) {
                        return fault(JcampProblem::RepeatCount { found: times });
                    }
                    let more = times as usize - 1;
                    match difference {
                        // A repeated difference moves on with every repetition.
                        Some(step) => {
                            for _ in 0..more {
                                self.push(self.last + step, 1, out)
                                    .map_err(|p| (start, p))?;
                            }
                        }
                        None => self.push(self.last, more, out).map_err(|p| (start, p))?,
                    }
                }
            }
            first = false;
        }
        if !first {
            self.after_difference = difference.is_some();
        }
        Ok(Some(Start {
            x,
            x_rounding,
            index,
        }))
    }

    fn push(&mut self, value: f64, times: usize, out: &mut Vec<f64>) -> Result<(), JcampProblem> {
        if times > self.limit - out.len() {
            return Err(JcampProblem::TooManyPoints { limit: self.limit });
        }
        out.extend(std::iter::repeat_n(value, times));
        self.last = value;
        Ok(())
    }
}

/// Byte at which the next item begins.
fn next_item(line: &str, at: usize) -> Option<usize> {
    let separator = |b: &u8| matches!(b, b' ' | b'\t' | b',' | b';');
    let skipped = line.as_bytes()[at..]
        .iter()
        .take_while(|b| separator(b))
        .count();
    (at + skipped < line.len()).then_some(at + skipped)
}

/// One item that begins at a byte, and where it ends.
fn item(line: &str, at: usize) -> Result<(Item, usize), Fault> {
    let lead = line.as_bytes()[at];
    let wrap: fn(f64) -> Item = match lead {
        b'@' | b'A'..=b'I' | b'a'..=b'i' => Item::Value,
        b'%' | b'J'..=b'R' | b'j'..=b'r' => Item::Difference,
        b'S'..=b'Z' | b's' => Item::Repeat,
        _ => return plain_number(line, at).map(|(value, end)| (Item::Value(value), end)),
    };
    let digit = match lead {
        b'@' | b'%' => 0,
        b'A'..=b'I' => i32::from(lead - b'A') + 1,
        b'a'..=b'i' => -i32::from(lead - b'a') - 1,
        b'J'..=b'R' => i32::from(lead - b'J') + 1,
        b'j'..=b'r' => -i32::from(lead - b'j') - 1,
        b's' => 9,
        _ => i32::from(lead - b'S') + 1,
    };
    let bytes = line.as_bytes();
    let body = |b: &u8| b.is_ascii_digit() || *b == b'.';
    let end = at + 1 + bytes[at + 1..].iter().take_while(|b| body(b)).count();
    // The digit's text keeps the sign, "-5" and all; minus zero does not occur.
    let text = format!("{digit}{}", &line[at + 1..end]);
    match text.parse() {
        Ok(value) => Ok((wrap(value), end)),
        Err(_) => Err((
            at,
            JcampProblem::Number {
                found: line[at..end].to_string(),
            },
        )),
    }
}

/// A number as people write it, and where it ends.
fn plain_number(line: &str, at: usize) -> Result<(f64, usize), Fault> {
    let bytes = line.as_bytes();
    let digits = |from: usize| {
        bytes[from..]
            .iter()
            .take_while(|b| b.is_ascii_digit())
            .count()
    };
    let mut end = at;
    if matches!(bytes[end], b'+' | b'-') {
        end += 1;
    }
    end += digits(end);
    if bytes.get(end) == Some(&b'.') {
        end += 1 + digits(end + 1);
    }
    let exponent = bytes.get(end).is_some_and(|b| matches!(b, b'E' | b'e'))
        && bytes.get(end + 1).is_some_and(|b| matches!(b, b'+' | b'-'))
        && bytes.get(end + 2).is_some_and(u8::is_ascii_digit);
    if exponent {
        end += 2 + digits(end + 2);
    }
    match line[at..end].parse::<f64>() {
        Ok(value) if value.is_finite() && bytes.get(end) != Some(&b'.') => Ok((value, end)),
        _ => {
            let word = line[at..]
                .split([' ', '\t', ',', ';'])
                .next()
                .unwrap_or_default();
            let problem = match word.starts_with('?') {
                true => JcampProblem::MissingOrdinate,
                false => JcampProblem::Number {
                    found: super::shorten(word),
                },
            };
            Err((at, problem))
        }
    }
}

/// Half a unit of the last digit of a number.
fn rounding(text: &str) -> f64 {
    let (digits, exponent) = text.split_once(['E', 'e']).unwrap_or((text, "0"));
    let decimals = digits
        .split_once('.')
        .map_or(0, |(_, fraction)| fraction.len());
    let exponent: i32 = exponent.parse().unwrap_or(0);
    0.5 * 10f64.powi(exponent.saturating_sub(decimals as i32))
}

/// How ordinates are written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ordinates {
    /// Pairs of abscissa and ordinate, `(XY..XY)`: the only form for an uneven axis.
    Pairs,
    /// Numbers parted by blanks.
    Affn,
    /// Numbers parted by their signs.
    Pac,
    /// First digit and sign in one letter.
    Sqz,
    /// Differences, repeated ones counted, with check values.
    Dif,
}

/// Longest line that the standard allows.
const WIDTH: usize = 80;

/// Writes whole numbers as lines of ordinates; `x` gives the text of each abscissa.
pub(super) fn encode(values: &[i64], form: Ordinates, x: impl Fn(usize) -> String) -> Vec<String> {
    if form == Ordinates::Dif {
        return encode_differences(values, x);
    }
    let mut lines: Vec<String> = Vec::new();
    for (i, &value) in values.iter().enumerate() {
        let token = match form {
            Ordinates::Pac => format!("{value:+}"),
            Ordinates::Sqz => squeezed(value),
            _ => format!(" {value}"),
        };
        match lines.last_mut() {
            Some(line) if line.len() + token.len() <= WIDTH => line.push_str(&token),
            _ => lines.push(x(i) + &token),
        }
    }
    lines
}

fn encode_differences(values: &[i64], x: impl Fn(usize) -> String) -> Vec<String> {
    let Some(&first) = values.first() else {
        return Vec::new();
    };
    let mut lines = vec![x(0) + &squeezed(first)];
    let mut i = 0;
    // A level beginning is counted, not written as differences, if a difference follows: the
    // line must end in one for the check value that comes next.
    let level = values.iter().take_while(|v| **v == first).count();
    if level > 1 && level < values.len() {
        lines[0].push_str(&count(level));
        i = level - 1;
    }
    while i + 1 < values.len() {
        let step = values[i + 1] - values[i];
        let same = values[i..]
            .windows(2)
            .take_while(|w| w[1] - w[0] == step)
            .count();
        let mut token = coded(step, '%', 'J', 'j');
        if same > 1 {
            token.push_str(&count(same));
        }
        match lines.last_mut() {
            Some(line) if line.len() + token.len() <= WIDTH => line.push_str(&token),
            // The line begins with the ordinate that ended the one before: its check value.
            _ => lines.push(x(i) + &squeezed(values[i]) + &token),
        }
        i += same;
    }
    if values.len() > 1 {
        lines.push(x(i) + &squeezed(values[i]));
    }
    lines
}

fn squeezed(value: i64) -> String {
    coded(value, '@', 'A', 'a')
}

/// A number whose first digit and sign are one letter: `zero` for 0, from `plus` for 1, from
/// `minus` for −1.
fn coded(value: i64, zero: char, plus: char, minus: char) -> String {
    let digits = value.unsigned_abs().to_string();
    let first = digits.as_bytes()[0] - b'0';
    let base = if value < 0 { minus } else { plus };
    let lead = match first {
        0 => zero,
        n => char::from(base as u8 + n - 1),
    };
    format!("{lead}{}", &digits[1..])
}

fn count(times: usize) -> String {
    let digits = times.to_string();
    let lead = match digits.as_bytes()[0] {
        b'9' => 's',
        digit => char::from(b'S' + digit - b'1'),
    };
    format!("{lead}{}", &digits[1..])
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The example of the 1988 paper (its figure of the same data in each form; from memory): the
    /// values, and their form in differences with repeats.
    const VALUES: [i64; 53] = [
        0, 0, 0, 0, 2, 4, 4, 4, 7, 5, 4, 4, 5, 5, 7, 10, 11, 11, 6, 5, 7, 6, 9, 9, 7, 10, 10, 9,
        10, 11, 12, 15, 16, 16, 14, 17, 38, 38, 35, 38, 42, 47, 54, 59, 66, 75, 78, 88, 96, 104,
        110, 121, 128,
    ];
    const DIFFERENCES: &str = "599.860@VKT%TLkj%J%KLJ%njKjL%kL%jJULJ%kLK1%lLMNPNPRLJ0QTOJ1P";

    fn decode(lines: &[&str]) -> Result<Vec<f64>, Fault> {
        let mut decoder = Decoder::new(1000);
        let mut out = Vec::new();
        for line in lines {
            decoder.line(line, &mut out)?;
        }
        Ok(out)
    }

    fn fault(lines: &[&str]) -> (usize, String) {
        let (at, problem) = decode(lines).unwrap_err();
        (at, problem.to_string())
    }

    #[test]
    fn published_example_is_read_and_written() {
        let expected = VALUES.map(|v| v as f64);
        assert_eq!(decode(&[DIFFERENCES, "651.860A28"]).unwrap(), expected);
        let x = |i: usize| format!("{:.3}", 599.860 + i as f64);
        assert_eq!(
            encode(&VALUES, Ordinates::Dif, x),
            [DIFFERENCES, "651.860A28"]
        );
        for form in [Ordinates::Affn, Ordinates::Pac, Ordinates::Sqz] {
            let lines = encode(&VALUES, form, x);
            assert!(lines.iter().all(|line| line.len() <= WIDTH));
            let lines: Vec<&str> = lines.iter().map(String::as_str).collect();
            assert_eq!(decode(&lines).unwrap(), expected, "{form:?}");
        }
    }

    #[test]
    fn forms_mix_and_fractions_are_numbers() {
        assert_eq!(decode(&["1 2 -3,4;5"]).unwrap(), [2.0, -3.0, 4.0, 5.0]);
        assert_eq!(decode(&["1+2-3+4.5"]).unwrap(), [2.0, -3.0, 4.5]);
        assert_eq!(decode(&["1A2b3 7@"]).unwrap(), [12.0, -23.0, 7.0, 0.0]);
        assert_eq!(decode(&["1 7T 5U"]).unwrap(), [7.0, 7.0, 5.0, 5.0, 5.0]);
        // E with a sign is an exponent, without one a squeezed digit.
        assert_eq!(decode(&["1E+1 2E-1 3E2"]).unwrap(), [0.2, 3.0, 52.0]);
        assert_eq!(decode(&["1A5J1T", "3C7"]).unwrap(), [15.0, 26.0, 37.0]);
    }

    #[test]
    fn check_values_are_checked() {
        assert_eq!(
            decode(&["1A0J", "2A1J", "3A2"]).unwrap(),
            [10.0, 11.0, 12.0]
        );
        let (at, text) = fault(&["1A0J", "2A2J"]);
        assert_eq!(
            (at, text.contains("the check value 12, expected 11")),
            (1, true)
        );
        assert!(fault(&["1A0J", "2J1"]).1.contains("no check value"));
        assert!(fault(&["1J"]).1.contains("a difference at the beginning"));
        assert!(fault(&["1T"]).1.contains("a repeat count at the beginning"));
        assert!(
            fault(&["1A5.5.5"])
                .1
                .contains("found 'A5.5.5', expected a number")
        );
        assert!(fault(&["1 5S.5"]).1.contains("the repeat count 1.5"));
        assert!(fault(&["1 ?"]).1.contains("missing ordinate"));
        assert_eq!(fault(&["1 2 µ"]).0, 4);
    }

    #[test]
    fn repeats_cannot_outgrow_the_points() {
        let mut decoder = Decoder::new(10);
        let mut out = Vec::new();
        let (_, problem) = decoder.line("1A0S999999999999", &mut out).unwrap_err();
        assert_eq!(problem, JcampProblem::TooManyPoints { limit: 10 });
        assert!(out.capacity() < 100);
    }
}

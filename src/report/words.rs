//! How names and numbers are put in print: subscripts, Greek letters, digits by uncertainty.

use maud::{Markup, html};

/// A piece of text with sub- and superscripts, and the form that data files carry.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Words {
    /// As in the data: `2b1`, `H2S`.
    pub plain: String,
    /// As in print.
    pub runs: Vec<Run>,
}

/// Characters on one height.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Run {
    /// The characters.
    pub text: String,
    /// Where they stand.
    pub height: Height,
}

/// Where characters stand.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Height {
    /// On the line.
    Base,
    /// Below it.
    Sub,
    /// Above it.
    Super,
}

impl From<&str> for Words {
    fn from(text: &str) -> Self {
        Words::from(text.to_owned())
    }
}

impl From<String> for Words {
    fn from(text: String) -> Self {
        let run = Run {
            text: text.clone(),
            height: Height::Base,
        };
        Words {
            plain: text,
            runs: vec![run],
        }
    }
}

impl Words {
    fn build(plain: &str) -> Self {
        Words {
            plain: plain.to_owned(),
            runs: Vec::new(),
        }
    }

    fn push(&mut self, height: Height, c: char) {
        match self.runs.last_mut() {
            Some(run) if run.height == height => run.text.push(c),
            _ => self.runs.push(Run {
                text: c.to_string(),
                height,
            }),
        }
    }

    /// Appends other words.
    pub fn then(mut self, other: Words) -> Self {
        self.plain.push_str(&other.plain);
        for run in other.runs {
            for c in run.text.chars() {
                self.push(run.height, c);
            }
        }
        self
    }

    /// As HTML.
    pub fn html(&self) -> Markup {
        html! {
            @for run in &self.runs {
                @match run.height {
                    Height::Base => (run.text),
                    Height::Sub => sub { (run.text) },
                    Height::Super => sup { (run.text) },
                }
            }
        }
    }

    /// With the subscript digits that Unicode has; other scripts stay on the line.
    pub fn unicode(&self) -> String {
        let mut out = String::new();
        for run in &self.runs {
            for c in run.text.chars() {
                match (run.height, c.to_digit(10)) {
                    (Height::Sub, Some(d)) => {
                        out.extend(char::from_u32('₀' as u32 + d));
                    }
                    _ => out.push(c),
                }
            }
        }
        out
    }
}

/// Text in which words that read as chemical formulas get their subscripts: `N2 X` → N₂ X.
pub fn chemical(text: &str) -> Words {
    let mut words = Words::build(text);
    for (i, token) in text.split(' ').enumerate() {
        if i > 0 {
            words.push(Height::Base, ' ');
        }
        let is_formula = reads_as_formula(token);
        let mut digits = Height::Base;
        for c in token.chars() {
            if is_formula && (c.is_ascii_alphabetic() || c == ')') {
                digits = Height::Sub;
            }
            let height = if c.is_ascii_digit() {
                digits
            } else {
                Height::Base
            };
            words.push(height, c);
        }
    }
    words
}

/// Capital, perhaps a small letter, perhaps digits, again and again; at least one digit, and no
/// word of the language looks like that.
fn reads_as_formula(token: &str) -> bool {
    let token = token.trim_end_matches([',', ';', '.', ':', ')']);
    let token = token.trim_start_matches('(');
    let mut digit_seen = false;
    let mut may_be_small = false;
    for (i, c) in token.chars().enumerate() {
        if c.is_ascii_uppercase() {
            may_be_small = true;
        } else if c.is_ascii_lowercase() {
            if !may_be_small {
                return false;
            }
            may_be_small = false;
        } else if c.is_ascii_digit() && i > 0 {
            digit_seen = true;
            may_be_small = false;
        } else if c != '(' && c != ')' {
            return false;
        }
    }
    digit_seen
}

/// An orbital or state label in print: `2b1` → 2b₁, `1pi_u` → 1πᵤ, `5a'` → 5a′. What does not
/// read as a symmetry label stays as it is.
pub fn orbital(label: &str) -> Words {
    symmetry_label(label).unwrap_or_else(|| Words::from(label))
}

fn symmetry_label(label: &str) -> Option<Words> {
    const GREEK: [(&str, char); 8] = [
        ("sigma", 'σ'),
        ("pi", 'π'),
        ("delta", 'δ'),
        ("phi", 'φ'),
        ("Sigma", 'Σ'),
        ("Pi", 'Π'),
        ("Delta", 'Δ'),
        ("Phi", 'Φ'),
    ];
    let mut words = Words::build(label);
    let number = label.len() - label.trim_start_matches(|c: char| c.is_ascii_digit()).len();
    for c in label[..number].chars() {
        words.push(Height::Base, c);
    }
    let rest = &label[number..];
    let (letter, rest) = match GREEK.iter().find(|(name, _)| rest.starts_with(name)) {
        Some((name, letter)) => (*letter, &rest[name.len()..]),
        None => {
            let letter = rest.chars().next()?;
            (letter, &rest[letter.len_utf8()..])
        }
    };
    if !"abetσπδφABETΣΠΔΦ".contains(letter) {
        return None;
    }
    words.push(Height::Base, letter);
    for c in rest.chars() {
        match c {
            '_' => {}
            '0'..='9' | 'g' | 'u' => words.push(Height::Sub, c),
            '\'' | '′' => words.push(Height::Base, '′'),
            '"' | '″' => words.push(Height::Base, '″'),
            '+' => words.push(Height::Super, '+'),
            '-' | '−' => words.push(Height::Super, '−'),
            _ => return None,
        }
    }
    Some(words)
}

/// `10.471 ± 0.002`: digits by the standard deviation (two of them where it begins with 1).
pub fn measured(value: f64, sd: f64) -> String {
    let digits = decimals(sd);
    format!("{value:.digits$} ± {sd:.digits$}")
}

/// Decimals that a standard deviation leaves meaningful: 0 to 4.
pub fn decimals(sd: f64) -> usize {
    if !(sd.is_finite() && sd > 0.0) {
        return 3;
    }
    let power = sd.log10().floor();
    let leading = sd / 10f64.powf(power);
    let digits = if leading < 1.95 { 1.0 - power } else { -power };
    digits.clamp(0.0, 4.0) as usize
}

/// An energy that no standard deviation goes with: two decimals.
pub fn energy(value: f64) -> String {
    format!("{value:.2}")
}

/// A signed energy difference: `+0.12`, `−0.30`.
pub fn signed(value: f64) -> String {
    let text = format!("{:.2}", value.abs());
    let nothing = text.bytes().all(|b| b == b'0' || b == b'.');
    match (nothing, value < 0.0) {
        (true, _) => text,
        (false, true) => format!("−{text}"),
        (false, false) => format!("+{text}"),
    }
}

/// A probability in per cent that never claims certainty: `< 1 %`, `97 %`, `> 99 %`.
pub fn percent(p: f64) -> String {
    if p > 0.995 {
        "> 99 %".to_owned()
    } else if p < 0.01 {
        "< 1 %".to_owned()
    } else {
        format!("{:.0} %", 100.0 * p)
    }
}

/// `one band`, `3 bands`: a count with its noun.
pub fn counted(n: usize, noun: &str) -> String {
    match n {
        0 => format!("no {noun}s"),
        1 => format!("one {noun}"),
        _ => format!("{n} {noun}s"),
    }
}

/// A number with thin groups of three before the point: `12 345`.
pub fn thousands(value: f64) -> String {
    let digits = format!("{:.0}", value.abs());
    let mut out = String::new();
    for (i, c) in digits.chars().enumerate() {
        if i > 0 && (digits.len() - i).is_multiple_of(3) {
            out.push('\u{202f}');
        }
        out.push(c);
    }
    if value < 0.0 && digits != "0" {
        out.insert(0, '−');
    }
    out
}

/// The text in lines of at most `width` characters, broken at blanks.
pub fn wrapped(text: &str, width: usize) -> String {
    let mut out = String::new();
    let mut used = 0;
    for word in text.split_whitespace() {
        let length = word.chars().count();
        if used > 0 && used + 1 + length > width {
            out.push('\n');
            used = 0;
        } else if used > 0 {
            out.push(' ');
            used += 1;
        }
        out.push_str(word);
        used += length;
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn labels_get_their_scripts() {
        let cases = [
            ("2b1", "2b₁"),
            ("1a1g", "1a₁g"),
            ("3sigma_g+", "3σg+"),
            ("1pi_u", "1πu"),
            ("5a'", "5a′"),
            ("1e\"", "1e″"),
            ("orbital 9", "orbital 9"),
            ("", ""),
        ];
        for (label, print) in cases {
            let words = orbital(label);
            assert_eq!(words.unicode(), print);
            assert_eq!(words.plain, label);
        }
        let sub = &orbital("1a1g").runs[1];
        assert_eq!((sub.text.as_str(), sub.height), ("1g", Height::Sub));
    }

    #[test]
    fn only_formulas_get_subscripts() {
        let cases = [
            ("N2 X v=0", "N₂ X v=0"),
            ("C2H2Cl2", "C₂H₂Cl₂"),
            ("He I β of band 2", "He I β of band 2"),
            ("Ar 2P3/2", "Ar 2P3/2"),
            ("(CH3)2CO", "(CH₃)₂CO"),
            ("H2O, HOH", "H₂O, HOH"),
        ];
        for (text, print) in cases {
            assert_eq!(chemical(text).unicode(), print);
        }
    }

    #[test]
    fn digits_follow_the_uncertainty() {
        assert_eq!(measured(10.47123, 0.0021), "10.471 ± 0.002");
        assert_eq!(measured(10.47123, 0.0012), "10.4712 ± 0.0012");
        assert_eq!(measured(13.4, 0.04), "13.40 ± 0.04");
        assert_eq!(measured(1234.5, 19.6), "1234 ± 20");
        assert_eq!(measured(12.0, 0.0000004), "12.0000 ± 0.0000");
        assert_eq!(decimals(0.0), 3);
    }

    #[test]
    fn signs_and_odds() {
        assert_eq!(signed(0.304), "+0.30");
        assert_eq!(signed(-0.304), "−0.30");
        assert_eq!(signed(-0.001), "0.00");
        assert_eq!(percent(1.0), "> 99 %");
        assert_eq!(percent(0.972), "97 %");
        assert_eq!(percent(0.0), "< 1 %");
        assert_eq!(thousands(-1234567.0), "−1\u{202f}234\u{202f}567");
        assert_eq!(thousands(999.0), "999");
    }

    #[test]
    fn lines_are_broken_at_blanks() {
        assert_eq!(wrapped("one two  three four", 9), "one two\nthree\nfour");
        assert_eq!(wrapped("unbreakable", 4), "unbreakable");
    }
}

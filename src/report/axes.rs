//! Scales: from data to the page, with the places and texts of their ticks.

use super::Direction;
use super::words::{Height, Run, Words};

/// A linear scale.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Scale {
    from: [f64; 2],
    to: [f64; 2],
}

impl Scale {
    /// The scale that puts `from[0]` at `to[0]` and `from[1]` at `to[1]`; a range of no extent is
    /// widened.
    pub fn new(from: [f64; 2], to: [f64; 2]) -> Self {
        let from = match from[1] > from[0] {
            true => from,
            false => [from[0] - 0.5, from[0] + 0.5],
        };
        Scale { from, to }
    }

    /// The energy scale between two edges of the page.
    pub fn energy(span: [f64; 2], [left, right]: [f64; 2], direction: Direction) -> Self {
        match direction {
            Direction::Rising => Scale::new(span, [left, right]),
            Direction::Falling => Scale::new(span, [right, left]),
        }
    }

    /// Place of a value.
    pub fn at(&self, value: f64) -> f64 {
        let share = (value - self.from[0]) / (self.from[1] - self.from[0]);
        self.to[0] + share * (self.to[1] - self.to[0])
    }

    /// Whether a value lies on the scale.
    pub fn holds(&self, value: f64) -> bool {
        (self.from[0]..=self.from[1]).contains(&value)
    }

    /// The range of values.
    pub fn range(&self) -> [f64; 2] {
        self.from
    }

    /// Ticks at round values, about `wanted` of them.
    pub fn ticks(&self, wanted: f64) -> Ticks {
        Ticks::new(self.from, wanted)
    }
}

/// Round values on a scale.
#[derive(Debug, Clone, PartialEq)]
pub struct Ticks {
    /// Values that carry a text.
    pub major: Vec<f64>,
    /// Values between them.
    pub minor: Vec<f64>,
    step: f64,
}

impl Ticks {
    fn new([low, high]: [f64; 2], wanted: f64) -> Self {
        let rough = (high - low) / wanted.max(1.0);
        let power = 10f64.powf(rough.log10().floor());
        let (factor, parts) = match rough / power {
            x if x < 1.5 => (1.0, 5.0),
            x if x < 3.5 => (2.0, 4.0),
            x if x < 7.5 => (5.0, 5.0),
            _ => (10.0, 5.0),
        };
        let step = factor * power;
        let multiples = |step: f64| -> Vec<f64> {
            let slack = 1e-9 * (high - low);
            let first = ((low - slack) / step).ceil() as i64;
            let last = ((high + slack) / step).floor() as i64;
            (first..=last).map(|k| k as f64 * step).collect()
        };
        Ticks {
            major: multiples(step),
            minor: multiples(step / parts),
            step,
        }
    }

    /// Text of a major tick, its value divided by `unit`.
    pub fn text(&self, value: f64, unit: f64) -> Words {
        let decimals = -((self.step / unit).log10() + 1e-9).floor();
        let decimals = decimals.clamp(0.0, 9.0) as usize;
        let text = format!("{:.decimals$}", value / unit);
        let zero = text.bytes().all(|b| b"-0.".contains(&b));
        match zero {
            true => Words::from("0"),
            false => Words::from(text.replace('-', "−")),
        }
    }
}

/// The power of ten (a multiple of three) that intensities are divided by in print: 1 up to
/// 9 999.
pub fn unit_of(largest: f64) -> f64 {
    match largest {
        x if x >= 1e4 => 10f64.powi(3 * (x.log10() / 3.0 + 1e-9).floor() as i32),
        x if x > 0.0 && x < 0.01 => 10f64.powi(3 * (x.log10() / 3.0).floor() as i32),
        _ => 1.0,
    }
}

/// `Intensity (10³ counts)`.
pub fn intensity_title(noun: &str, unit: f64, unit_name: &str) -> Words {
    let mut words = Words::from(format!("{noun} ("));
    if unit != 1.0 {
        let power = unit.log10().round();
        let power = Run {
            text: format!("{power:.0}").replace('-', "−"),
            height: Height::Super,
        };
        words = words.then(Words::from("10"));
        words.plain.push_str(&power.text);
        words.runs.push(power);
        words = words.then(Words::from(" "));
    }
    words.then(Words::from(format!("{unit_name})")))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn texts(range: [f64; 2], wanted: f64) -> Vec<String> {
        let unit = unit_of(range[1]);
        let ticks = Scale::new(range, [0.0, 1.0]).ticks(wanted);
        let words = ticks.major.iter().map(|v| ticks.text(*v, unit));
        words.map(|w| w.plain).collect()
    }

    #[test]
    fn ticks_are_round() {
        assert_eq!(
            texts([9.87, 13.2], 7.0),
            ["10.0", "10.5", "11.0", "11.5", "12.0", "12.5", "13.0"]
        );
        assert_eq!(
            texts([8.0, 22.0], 8.0),
            ["8", "10", "12", "14", "16", "18", "20", "22"]
        );
        assert_eq!(
            texts([0.0, 31_000.0], 6.0),
            ["0", "5", "10", "15", "20", "25", "30"]
        );
        assert_eq!(
            texts([0.0, 12_500.0], 5.0),
            ["0", "2", "4", "6", "8", "10", "12"]
        );
        assert_eq!(
            texts([0.0, 2_600_000.0], 5.0),
            ["0", "0.5", "1.0", "1.5", "2.0", "2.5"]
        );
        assert_eq!(texts([-4.2, 4.2], 4.0), ["−4", "−2", "0", "2", "4"]);
        assert_eq!(texts([0.0, 0.004], 4.0), ["0", "1", "2", "3", "4"]);
    }

    #[test]
    fn both_directions() {
        let rising = Scale::energy([8.0, 12.0], [0.0, 100.0], Direction::Rising);
        let falling = Scale::energy([8.0, 12.0], [0.0, 100.0], Direction::Falling);
        assert_eq!((rising.at(9.0), falling.at(9.0)), (25.0, 75.0));
        assert!(falling.holds(8.0) && !falling.holds(12.1));
    }

    #[test]
    fn a_range_of_no_extent_is_widened() {
        let scale = Scale::new([3.0, 3.0], [0.0, 10.0]);
        assert_eq!(scale.at(3.0), 5.0);
        assert!(!scale.ticks(5.0).major.is_empty());
    }

    #[test]
    fn powers_of_ten() {
        assert_eq!(
            [unit_of(9_999.0), unit_of(10_000.0), unit_of(2.6e6)],
            [1.0, 1e3, 1e6]
        );
        assert_eq!(
            intensity_title("Intensity", 1e3, "counts").plain,
            "Intensity (103 counts)"
        );
    }
}

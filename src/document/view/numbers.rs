//! Figures as the pages print them: scaled to people's units, rounded by what is known of them.

use crate::display::{self, NO_BREAK};
use crate::quantity::{Estimate, decimals_for};
use serde::Serialize;

/// Printed where there is nothing to print.
pub(super) const NONE: &str = "–";

/// One cell of a table: a figure with its unit, or words.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub(super) struct Cell {
    /// The figure, or the words.
    pub text: String,
    /// The unit of the figure; empty for none.
    pub unit: String,
    /// Whether it is set bold.
    pub bold: bool,
}

impl Cell {
    /// A figure with its unit.
    pub fn figure(text: impl Into<String>, unit: impl Into<String>) -> Self {
        Cell {
            text: text.into(),
            unit: unit.into(),
            bold: false,
        }
    }

    /// Words, or a figure that has no unit.
    pub fn words(text: impl Into<String>) -> Self {
        Cell::figure(text, "")
    }

    /// Nothing to print.
    pub fn none() -> Self {
        Cell::words(NONE)
    }

    /// The same, bold where wanted.
    pub fn bold(mut self, bold: bool) -> Self {
        self.bold = bold;
        self
    }

    /// Figure and unit as they stand in a sentence.
    pub fn sentence(&self) -> String {
        if self.unit.is_empty() {
            self.text.clone()
        } else if self.unit == "°" {
            format!("{}°", self.text)
        } else {
            format!("{}{NO_BREAK}{}", self.text, self.unit)
        }
    }
}

/// A row of a table of figures with units, or the line over a group of rows.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub(super) struct Row {
    /// Whether the label is the line over a group.
    pub group: bool,
    /// What the row holds.
    pub label: String,
    /// Its cells.
    pub cells: Vec<Cell>,
}

impl Row {
    /// A row.
    pub fn new(label: impl Into<String>, cells: Vec<Cell>) -> Self {
        Row {
            group: false,
            label: label.into(),
            cells,
        }
    }

    /// The line over a group of rows.
    pub fn group(label: impl Into<String>) -> Self {
        Row {
            group: true,
            label: label.into(),
            cells: Vec::new(),
        }
    }
}

/// A table of figures with units.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub(super) struct Table {
    /// Heads, that of the labels first.
    pub heads: Vec<String>,
    /// Rows.
    pub rows: Vec<Row>,
}

/// A time unit that a whole row or column shares.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum TimeUnit {
    /// Seconds.
    Seconds,
    /// Minutes.
    Minutes,
}

impl TimeUnit {
    /// Seconds while every time is below 120 s, else minutes.
    pub fn for_all(times_s: impl IntoIterator<Item = f64>) -> Self {
        if times_s.into_iter().any(|t| t >= 120.0) {
            TimeUnit::Minutes
        } else {
            TimeUnit::Seconds
        }
    }

    /// As printed.
    pub fn sign(self) -> &'static str {
        match self {
            TimeUnit::Seconds => "s",
            TimeUnit::Minutes => "min",
        }
    }

    /// Units per second.
    pub fn factor(self) -> f64 {
        match self {
            TimeUnit::Seconds => 1.0,
            TimeUnit::Minutes => 1.0 / 60.0,
        }
    }

    /// A time without an interval, two or three figures of it.
    pub fn figure(self, seconds: f64) -> String {
        let value = seconds * self.factor();
        let decimals = usize::from(value.abs() < 9.95);
        display::fixed(value, decimals)
    }

    /// The same as a cell.
    pub fn cell(self, seconds: f64) -> Cell {
        Cell::figure(self.figure(seconds), self.sign())
    }
}

/// Value and interval of an estimate, in a unit that is `factor` times smaller.
pub(super) fn estimate(of: Estimate, factor: f64) -> (String, String) {
    let scaled = of.scaled(factor);
    let half = scaled.half_width();
    // An interval that is nothing beside the value leaves the rounding to the value.
    let decimals = if half > 1e-4 * scaled.value.abs() {
        // Two figures of the half width where the value has no more than three, else one.
        let two = decimals_for(half, 6);
        let three = decimals_of(&display::significant(scaled.value, 3));
        two.min(three).max(two.saturating_sub(1))
    } else {
        decimals_of(&display::plain(scaled.value, 4))
    };
    let figure = |value| display::fixed(value, decimals);
    (
        figure(scaled.value),
        format!("{} to {}", figure(scaled.low), figure(scaled.high)),
    )
}

/// The places behind the point of a printed figure.
pub(super) fn decimals_of(text: &str) -> usize {
    text.split_once('.').map_or(0, |(_, after)| after.len())
}

/// The places that a column of figures shares: that of the middle one of their half widths.
pub(super) fn column_decimals(half_widths: &[f64]) -> usize {
    let mut known: Vec<f64> = half_widths
        .iter()
        .copied()
        .filter(|h| h.is_finite() && *h > 0.0)
        .collect();
    if known.is_empty() {
        return 2;
    }
    let middle = known.len() / 2;
    known.select_nth_unstable_by(middle, f64::total_cmp);
    decimals_for(known[middle], 4)
}

/// The places that show a change of `change` in about `parts` parts.
pub(super) fn decimals_to_show(change: f64, parts: f64) -> usize {
    if change > 0.0 && change.is_finite() {
        libm::ceil(-libm::log10(change / parts)).clamp(0.0, 6.0) as usize
    } else {
        1
    }
}

/// A maximum sensitivity or a gain margin: two places, one from 10, none from 100.
pub(super) fn ratio(value: f64) -> String {
    let decimals = if value < 9.995 {
        2
    } else if value < 99.95 {
        1
    } else {
        0
    };
    display::fixed(value, decimals)
}

/// A whole number with its thousands apart.
pub(super) fn count(n: usize) -> String {
    grouped(&n.to_string())
}

/// Digits before the point in groups of three from five digits on.
pub(super) fn grouped(text: &str) -> String {
    let (whole, after) = match text.split_once('.') {
        Some((whole, after)) => (whole, Some(after)),
        None => (text, None),
    };
    let digits = whole.trim_start_matches('−');
    let mut out = String::from(if digits.len() < whole.len() {
        "−"
    } else {
        ""
    });
    for (index, digit) in digits.chars().enumerate() {
        if index > 0 && digits.len() > 4 && (digits.len() - index) % 3 == 0 {
            out.push('\u{202f}');
        }
        out.push(digit);
    }
    if let Some(after) = after {
        out.push('.');
        out.push_str(after);
    }
    out
}

/// A small number in words, as it stands at the head of a sentence or within one.
pub(super) fn number_word(n: usize) -> String {
    const WORDS: [&str; 13] = [
        "none", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten",
        "eleven", "twelve",
    ];
    WORDS
        .get(n)
        .map_or_else(|| n.to_string(), |w| (*w).to_owned())
}

/// A text with its first letter large.
pub(super) fn capital(text: &str) -> String {
    let mut letters = text.chars();
    match letters.next() {
        Some(first) => first.to_uppercase().chain(letters).collect(),
        None => String::new(),
    }
}

/// A sentence that goes on after a colon.
pub(super) fn lower(text: &str) -> String {
    let mut letters = text.chars();
    letters
        .next()
        .map(|first| first.to_lowercase().chain(letters).collect())
        .unwrap_or_default()
}

/// A text that ends as a sentence does.
pub(super) fn sentence(text: &str) -> String {
    let text = text.trim();
    if text.is_empty() || text.ends_with(['.', '!', '?']) {
        capital(text)
    } else {
        format!("{}.", capital(text))
    }
}

/// "1", "1 and 2", "1, 2 and 5".
pub(super) fn listed(items: &[String]) -> String {
    match items {
        [] => String::new(),
        [one] => one.clone(),
        [head @ .., last] => format!("{} and {last}", head.join(", ")),
    }
}

/// The fewest places (at most `most`) that show every value to within `tolerance`.
pub(super) fn decimals_within(
    values: impl Iterator<Item = f64> + Clone,
    tolerance: f64,
    most: usize,
) -> usize {
    (0..most)
        .find(|&places| {
            let scale = libm::pow(10.0, places as f64);
            values
                .clone()
                .all(|v| (libm::round(v * scale) / scale - v).abs() <= tolerance)
        })
        .unwrap_or(most)
}

/// Text from people on one line: control characters and runs of space become one space.
pub(super) fn tidy(text: &str) -> String {
    text.split(|c: char| c.is_control() || c == ' ')
        .filter(|part| !part.is_empty())
        .collect::<Vec<_>>()
        .join(" ")
}

/// Words that stand after a figure and must not part from it.
const UNITS: [&str; 31] = [
    "%", "%/%", "°C", "°F", "°C/%", "s", "ms", "min", "h", "mm", "m", "m³", "m³/h", "m3", "m3/h",
    "degC", "degF", "t/h", "kg/h", "l/min", "bar", "mbar", "kPa", "Pa", "τ", "θ", "σ", "times",
    "scans", "points", "samples",
];

/// Words that a figure must not part from when it follows them.
const NAMERS: [&str; 8] = ["step", "steps", "Step", "Steps", "Ms", "page", "OP", "PV"];

/// Sentences on one line, with figures bound to their units and to what they number.
pub(super) fn bound(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    let mut before = "";
    let text = tidy(text);
    for word in text.split(' ') {
        if !out.is_empty() {
            let bare = word.trim_end_matches(['.', ',', ';', ':', ')']);
            let after_figure =
                before.ends_with(|c: char| c.is_ascii_digit()) && UNITS.contains(&bare);
            let figure_after = word.starts_with(|c: char| c.is_ascii_digit() || c == '−')
                && NAMERS.contains(&before);
            out.push(if after_figure || figure_after {
                NO_BREAK
            } else {
                ' '
            });
        }
        out.push_str(word);
        before = word;
    }
    out
}

#[cfg(test)]
mod unit_tests {
    use super::*;

    #[test]
    fn estimates_round_by_their_interval() {
        let gain = Estimate::new(0.934_21, 0.914, 0.951);
        assert_eq!(
            estimate(gain, 1.0),
            ("0.934".to_owned(), "0.914 to 0.951".to_owned())
        );
        let exact = Estimate::new(0.25, 0.25, 0.25);
        assert_eq!(estimate(exact, 1.0).0, "0.25");
    }

    #[test]
    fn thousands_stand_apart_from_five_digits_on() {
        assert_eq!(count(3871), "3871");
        assert_eq!(count(13_871), "13\u{202f}871");
        assert_eq!(grouped("−1234567.25"), "−1\u{202f}234\u{202f}567.25");
    }

    #[test]
    fn figures_do_not_part_from_their_units() {
        assert_eq!(
            bound("drift 31 % (bound 20 %), step 2 at 5 min"),
            "drift 31\u{a0}% (bound 20\u{a0}%), step\u{a0}2 at 5\u{a0}min"
        );
        assert_eq!(bound("Unit 200 steam"), "Unit 200 steam");
    }

    #[test]
    fn text_from_people_stays_on_one_line() {
        assert_eq!(tidy(" a\r\nb\tc  d "), "a b c d");
        assert_eq!(sentence("it cycles"), "It cycles.");
        assert_eq!(listed(&["1".into(), "2".into(), "5".into()]), "1, 2 and 5");
    }
}

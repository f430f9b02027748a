//! Cells of measured values: numbers, known texts for bad samples, quality and mode words.

use super::numbers::{DecimalSign, number};
use super::table::Cell;

/// Texts that stand in the place of a value when there was none, lower case.
const BAD_TEXTS: [&str; 41] = [
    "bad",
    "bad input",
    "bad value",
    "bad data",
    "bad quality",
    "no data",
    "nodata",
    "no good data",
    "no value",
    "no result",
    "invalid",
    "error",
    "fail",
    "failed",
    "fault",
    "i/o timeout",
    "timeout",
    "time out",
    "comm fail",
    "comm error",
    "not connected",
    "disconnected",
    "offline",
    "off-line",
    "out of service",
    "shutdown",
    "under range",
    "over range",
    "underrange",
    "overrange",
    "uncertain",
    "questionable",
    "unknown",
    "n/a",
    "na",
    "null",
    "none",
    "nil",
    "unavailable",
    "not available",
    "inf",
];

/// Prints of a result that is not a number, lower case.
const NOT_A_NUMBER: [&str; 6] = ["nan", "-nan", "1.#qnan", "-1.#ind", "1.#inf", "-1.#inf"];

/// What a cell of a value holds.
#[derive(Debug, Clone, PartialEq)]
pub enum Value {
    /// A number.
    Number(f64),
    /// A bad sample; why.
    Bad(String),
    /// Neither a number nor a known text.
    Unreadable,
}

/// Whether a text is one of the built-in or the job's own texts for a bad sample.
fn is_bad_text(text: &str, own: &[String]) -> bool {
    let lower = text.to_lowercase();
    let bare =
        lower.trim_matches(|letter: char| matches!(letter, '<' | '>' | '[' | ']' | '(' | ')'));
    BAD_TEXTS.contains(&bare)
        || lower
            .chars()
            .all(|letter| matches!(letter, '-' | '?' | '*' | '#' | '.'))
        || lower.starts_with('#')
        || lower.starts_with("err:")
        || own.iter().any(|own| own.trim().to_lowercase() == lower)
}

/// Reads a cell of PV, OP or SP. `bad_values` are the job's own texts for bad samples.
pub fn value(cell: Cell<'_>, decimal: DecimalSign, bad_values: &[String]) -> Value {
    match cell {
        Cell::Number(number) if number.is_finite() => {
            let listed = !bad_values.is_empty()
                && bad_values
                    .iter()
                    .any(|own| own.trim() == number.to_string());
            if listed {
                Value::Bad(format!("value {number}"))
            } else {
                Value::Number(number)
            }
        }
        Cell::Number(_) => Value::Bad("not a number".to_owned()),
        Cell::Empty => Value::Bad("empty".to_owned()),
        Cell::Error(error) => Value::Bad(format!("error value {error}")),
        Cell::Boolean(_) | Cell::Date(_) | Cell::Duration(_) => Value::Unreadable,
        Cell::Text(text) => {
            // The job's own texts come first: they may look like numbers ("-9999").
            if bad_values
                .iter()
                .any(|own| own.trim().eq_ignore_ascii_case(text))
            {
                return Value::Bad(format!("text \"{text}\""));
            }
            if let Some(number) = number(text, decimal) {
                return Value::Number(number);
            }
            if NOT_A_NUMBER.contains(&text.to_lowercase().as_str()) {
                Value::Bad("not a number".to_owned())
            } else if is_bad_text(text, bad_values) {
                Value::Bad(format!("text \"{text}\""))
            } else {
                Value::Unreadable
            }
        }
    }
}

/// Whether a quality cell says good. `None` where it cannot be told. Numbers are the codes of
/// process data exchange (192 and above good, below bad), or 1 and 0.
pub fn is_good(cell: Cell<'_>, bad_values: &[String]) -> Option<bool> {
    let code = |code: f64| match code {
        192.0..=255.0 => Some(true),
        1.0 => Some(true),
        0.0..192.0 => Some(false),
        // Codes with further status in the bits above: the low byte is the quality.
        256.0..=65_535.0 if code == libm::floor(code) => Some(code % 256.0 >= 192.0),
        _ => None,
    };
    match cell {
        Cell::Boolean(good) => Some(good),
        Cell::Number(number) => code(number),
        Cell::Error(_) => Some(false),
        Cell::Empty | Cell::Date(_) | Cell::Duration(_) => None,
        Cell::Text(text) => {
            if bad_values
                .iter()
                .any(|own| own.trim().eq_ignore_ascii_case(text))
            {
                return Some(false);
            }
            if let Some(number) = number(text, DecimalSign::Point) {
                return code(number);
            }
            let lower = text.to_lowercase();
            if let Some(digits) = lower.strip_prefix("0x") {
                return u16::from_str_radix(digits, 16)
                    .ok()
                    .and_then(|number| code(f64::from(number)));
            }
            let first = lower
                .split(|letter: char| !letter.is_alphanumeric())
                .next()
                .unwrap_or_default();
            match first {
                "good" | "g" | "ok" | "okay" | "valid" | "true" | "yes" | "y" | "normal" => {
                    Some(true)
                }
                "bad" | "b" | "uncertain" | "u" | "questionable" | "q" | "invalid" | "false"
                | "no" | "n" | "not" | "fail" | "failed" | "fault" | "error" | "stale" => {
                    Some(false)
                }
                _ => is_bad_text(text, bad_values).then_some(false),
            }
        }
    }
}

/// Whether a mode text means manual.
pub fn is_manual(mode: &str, manual_values: &[String]) -> bool {
    ["MAN", "MANUAL", "M"]
        .iter()
        .any(|word| word.eq_ignore_ascii_case(mode))
        || manual_values
            .iter()
            .any(|own| own.trim().eq_ignore_ascii_case(mode))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn bad_samples_are_told_from_unreadable_cells() {
        let read = |text| value(Cell::Text(text), DecimalSign::Point, &["-9999".to_owned()]);
        assert_eq!(read("71.2"), Value::Number(71.2));
        assert_eq!(read("No Data"), Value::Bad("text \"No Data\"".into()));
        assert_eq!(read("NaN"), Value::Bad("not a number".into()));
        assert_eq!(read("#N/A"), Value::Bad("text \"#N/A\"".into()));
        assert_eq!(read("---"), Value::Bad("text \"---\"".into()));
        assert_eq!(read("-9999"), Value::Bad("text \"-9999\"".into()));
        assert_eq!(read("7l.2"), Value::Unreadable);
        assert_eq!(read("71,2"), Value::Unreadable);
        assert_eq!(
            value(Cell::Error("#REF!"), DecimalSign::Point, &[]),
            Value::Bad("error value #REF!".into())
        );
        assert_eq!(
            value(Cell::Boolean(true), DecimalSign::Point, &[]),
            Value::Unreadable
        );
    }

    #[test]
    fn quality_words_and_codes() {
        for (text, expected) in [
            ("Good", Some(true)),
            ("Good, non-specific", Some(true)),
            ("192", Some(true)),
            ("216", Some(true)),
            ("0", Some(false)),
            ("64", Some(false)),
            ("1", Some(true)),
            ("0xC0", Some(true)),
            ("0x18", Some(false)),
            ("TRUE", Some(true)),
            ("false", Some(false)),
            ("Not good", Some(false)),
            ("Uncertain", Some(false)),
            ("Bad [comm]", Some(false)),
            ("I/O Timeout", Some(false)),
            ("perhaps", None),
        ] {
            assert_eq!(is_good(Cell::Text(text), &[]), expected, "{text}");
        }
        assert!(is_manual("Man", &[]));
        assert!(!is_manual("AUTO", &[]));
        assert!(is_manual("2", &["2".to_owned()]));
    }
}

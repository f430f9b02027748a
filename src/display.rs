//! Figures as they are printed: minus sign, units, durations. Only pages, plots and messages use it.

use crate::quantity::decimals_for;

/// Keeps a figure and its unit on one line.
pub const NO_BREAK: char = '\u{a0}';

/// A figure with a fixed number of decimals and a true minus sign; a rounded zero has no sign.
pub fn fixed(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    match text.strip_prefix('-') {
        Some(digits) if digits.bytes().all(|b| b == b'0' || b == b'.') => digits.to_owned(),
        Some(digits) => format!("−{digits}"),
        None => text,
    }
}

/// A figure with `digits` significant digits, trailing zeros kept, no exponent.
pub fn significant(value: f64, digits: usize) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    let rounded = crate::quantity::round_significant(value, digits);
    let first = libm::floor(libm::log10(rounded.abs())) as i64;
    let decimals = (digits as i64 - 1 - first).max(0) as usize;
    fixed(rounded, decimals)
}

/// A figure with as many digits as it needs (at most `digits` significant), no trailing zeros.
pub fn plain(value: f64, digits: usize) -> String {
    let text = significant(value, digits);
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.').to_owned()
    } else {
        text
    }
}

/// A figure rounded by its interval: one place beyond the first figure of the half width.
pub fn by_interval(value: f64, half_width: f64) -> String {
    fixed(value, decimals_for(half_width, 6))
}

/// A time: seconds below 120 s, else minutes.
pub fn duration(seconds: f64) -> String {
    let (value, unit) = if seconds.abs() < 120.0 {
        (seconds, "s")
    } else {
        (seconds / 60.0, "min")
    };
    let decimals = if value.abs() >= 99.95 {
        0
    } else if value.abs() >= 9.95 {
        if unit == "s" { 0 } else { 1 }
    } else {
        1
    };
    format!("{}{NO_BREAK}{unit}", fixed(value, decimals))
}

/// A unit as printed: the spellings of exports become the signs of the trade.
pub fn unit(text: &str) -> String {
    match text.trim() {
        "degC" | "deg C" | "DegC" | "DEGC" | "°C" => "°C".to_owned(),
        "degF" | "deg F" | "DegF" | "DEGF" | "°F" => "°F".to_owned(),
        "m3/h" => "m³/h".to_owned(),
        "Nm3/h" => "Nm³/h".to_owned(),
        "m3" => "m³".to_owned(),
        "um" => "µm".to_owned(),
        other => other.to_owned(),
    }
}

/// A figure and its unit, bound together; no unit leaves the figure alone.
pub fn with_unit(figure: &str, unit_text: &str) -> String {
    let unit_text = unit(unit_text);
    if unit_text.is_empty() {
        figure.to_owned()
    } else {
        format!("{figure}{NO_BREAK}{unit_text}")
    }
}

/// Text for a cell of a CSV file: one that a spreadsheet would run as a formula gets an apostrophe before
/// it. A plain number that begins with its sign is none.
pub fn spreadsheet_cell(text: &str) -> String {
    // `parse` alone would also take "-inf", which a spreadsheet does not.
    let plain_number = text
        .bytes()
        .all(|b| b.is_ascii_digit() || b"+-.eE".contains(&b))
        && text.parse::<f64>().is_ok();
    if text.starts_with(['=', '+', '-', '@', '\t', '\r', '\n']) && !plain_number {
        format!("'{text}")
    } else {
        text.to_owned()
    }
}

/// "1 step", "2 steps".
pub fn counted(count: usize, one: &str, many: &str) -> String {
    format!("{count}{NO_BREAK}{}", if count == 1 { one } else { many })
}

/// Increasing numbers with runs of three and more in short: "1 to 4 and 7".
pub fn runs(numbers: &[usize]) -> String {
    let mut parts = Vec::new();
    let mut from = 0;
    for end in 1..=numbers.len() {
        if end < numbers.len() && numbers[end] == numbers[end - 1] + 1 {
            continue;
        }
        let run = &numbers[from..end];
        match run {
            [first, _, .., last] if run.len() > 2 => {
                parts.push(format!("{first}{NO_BREAK}to{NO_BREAK}{last}"))
            }
            _ => parts.extend(run.iter().map(ToString::to_string)),
        }
        from = end;
    }
    match parts.as_slice() {
        [head @ .., last] if !head.is_empty() => format!("{} and {last}", head.join(", ")),
        _ => parts.concat(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn figures_print_as_on_paper() {
        assert_eq!(fixed(-0.001, 1), "0.0");
        assert_eq!(fixed(-1.25, 1), "−1.2");
        assert_eq!(significant(0.8333, 3), "0.833");
        assert_eq!(plain(42.0, 4), "42");
        assert_eq!(plain(3.60, 4), "3.6");
        assert_eq!(duration(24.2), "24\u{a0}s");
        assert_eq!(duration(246.0), "4.1\u{a0}min");
        assert_eq!(with_unit("5", "degC"), "5\u{a0}°C");
        assert_eq!(counted(1, "step", "steps"), "1\u{a0}step");
    }

    #[test]
    fn no_cell_is_run_by_a_spreadsheet() {
        assert_eq!(spreadsheet_cell("=1+1"), "'=1+1");
        assert_eq!(spreadsheet_cell("@SUM(A1)"), "'@SUM(A1)");
        assert_eq!(spreadsheet_cell("\t=1"), "'\t=1");
        assert_eq!(spreadsheet_cell("-inf"), "'-inf");
        assert_eq!(spreadsheet_cell("-1.5e3"), "-1.5e3");
        assert_eq!(spreadsheet_cell("TIC-204"), "TIC-204");
    }

    #[test]
    fn runs_of_numbers_are_told_in_short() {
        assert_eq!(
            runs(&[1, 2, 3, 4, 7, 9, 10]),
            "1\u{a0}to\u{a0}4, 7, 9 and 10"
        );
        assert_eq!(runs(&[1, 2]), "1 and 2");
        assert_eq!(runs(&[]), "");
    }
}

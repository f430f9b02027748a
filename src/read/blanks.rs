//! Text files whose columns are set apart by white space alone.
//!
//! A date and the time of day behind it are one cell. Headings may be of several words where wider
//! blanks set the columns apart. A row with fewer or more cells than the others is an error: nothing
//! tells which of its values is missing.

use super::numbers::{DecimalSign, Shape, number, shape};
use super::stamp::stamp;
use crate::notice::{Place, Problem};

/// Tokens that a moment may be written in: "Sat 14 Mar 2026 9:05:00 AM".
const TOKENS_OF_A_MOMENT: usize = 6;

/// How many columns the lines have that white space sets apart; `None` where it does not: fewer than
/// two, or not the same in nearly every line.
pub(super) fn regular_columns<'a>(lines: impl Iterator<Item = &'a str>) -> Option<usize> {
    let counts: Vec<usize> = lines.map(|line| narrow(line).len()).collect();
    let usual = middle(&counts)?;
    let alike = counts.iter().filter(|count| **count == usual).count();
    (usual > 1 && alike * 10 >= counts.len() * 8).then_some(usual)
}

fn middle(counts: &[usize]) -> Option<usize> {
    let mut counts = counts.to_vec();
    counts.sort_unstable();
    counts.get(counts.len() / 2).copied()
}

/// Whether every comma of a line is a decimal sign where white space sets the columns apart.
pub(super) fn commas_are_decimal(line: &str) -> bool {
    narrow(line)
        .iter()
        .filter(|cell| cell.contains(','))
        .all(|cell| {
            cell.ends_with(|last: char| last.is_ascii_digit() || last == '%')
                && (number(cell, DecimalSign::Comma).is_some() || stamp(cell).is_some())
        })
}

/// The same lines with a tab between the columns.
///
/// # Errors
/// Where a row of values has another number of cells than the others.
pub(super) fn with_tabs(text: &str, file: &str) -> Result<String, Problem> {
    let filled = text.lines().filter(|line| !line.trim().is_empty());
    let counts: Vec<usize> = filled.map(|line| narrow(line).len()).collect();
    let usual = middle(&counts).unwrap_or(1);
    let mut tabbed = String::with_capacity(text.len());
    let mut has_begun = false;
    for (index, line) in text.lines().enumerate() {
        let mut cells = narrow(line);
        if cells.len() != usual {
            let wide = wide(line);
            if wide.len() == usual {
                cells = wide;
            }
        }
        let is_row = is_row(&cells);
        if has_begun && is_row && cells.len() != usual {
            return Err(Problem::error(
                Place::file(file).row(index + 1),
                format!(
                    "the line has {} values and the others have {usual}; between blanks nothing tells which column each belongs to",
                    cells.len()
                ),
            )
            .hint("export again with a semicolon or a tab between the columns"));
        }
        has_begun |= is_row && cells.len() == usual;
        tabbed.push_str(&cells.join("\t"));
        tabbed.push('\n');
    }
    Ok(tabbed)
}

/// Whether cells are those of a sample: a time or a number, then a number.
fn is_row(cells: &[&str]) -> bool {
    let is_number = |cell: &&str| shape(cell) != Shape::NotNumber;
    cells
        .first()
        .is_some_and(|first| stamp(first).is_some() || is_number(first))
        && cells[1..].iter().any(is_number)
}

/// Where each run of letters that are no white space begins and ends; a quoted text is one.
fn tokens(line: &str) -> Vec<(usize, usize)> {
    let mut tokens = Vec::new();
    let mut begun = None;
    let mut quoted = false;
    for (at, letter) in line.char_indices() {
        if letter == '"' {
            quoted = !quoted;
        }
        match (letter.is_whitespace() && !quoted, begun) {
            (true, Some(start)) => {
                tokens.push((start, at));
                begun = None;
            }
            (false, None) => begun = Some(at),
            _ => {}
        }
    }
    tokens.extend(begun.map(|start| (start, line.len())));
    tokens
}

/// Cells set apart by any white space.
fn narrow(line: &str) -> Vec<&str> {
    let tokens = tokens(line);
    let mut cells = Vec::with_capacity(tokens.len());
    let mut next = 0;
    while let Some(&(start, end)) = tokens.get(next) {
        let together = tokens[next..]
            .iter()
            .take(TOKENS_OF_A_MOMENT)
            .rposition(|(_, end)| is_moment(&line[start..*end]))
            .unwrap_or(0);
        let end = tokens.get(next + together).map_or(end, |(_, end)| *end);
        cells.push(&line[start..end]);
        next += together + 1;
    }
    cells
}

/// Cells set apart by two blanks or more, or by a tab.
fn wide(line: &str) -> Vec<&str> {
    line.split("  ")
        .flat_map(|part| part.split('\t'))
        .map(str::trim)
        .filter(|cell| !cell.is_empty())
        .collect()
}

/// Whether several tokens are one cell: a date with its time of day, or the heading over both.
fn is_moment(text: &str) -> bool {
    if !text.contains(char::is_whitespace) {
        return false;
    }
    let words: Vec<&str> = text.split_whitespace().collect();
    if let [date, time] = words[..]
        && date.eq_ignore_ascii_case("date")
        && time.eq_ignore_ascii_case("time")
    {
        return true;
    }
    text.contains(':')
        && stamp(text).is_some_and(|stamp| stamp.date.is_some() && stamp.time_us.is_some())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_date_and_its_time_of_day_are_one_cell() {
        for (line, expected) in [
            (
                "2026-03-14 09:05:00  71.2   40",
                vec!["2026-03-14 09:05:00", "71.2", "40"],
            ),
            (
                "14 Mar 2026 9:05:00 AM 71.2 40",
                vec!["14 Mar 2026 9:05:00 AM", "71.2", "40"],
            ),
            ("Date Time PV OP", vec!["Date Time", "PV", "OP"]),
            (
                "  09:05:00 71.2 \"no data\"",
                vec!["09:05:00", "71.2", "\"no data\""],
            ),
            ("20260314 71.2 40", vec!["20260314", "71.2", "40"]),
        ] {
            assert_eq!(narrow(line), expected, "{line}");
        }
    }

    #[test]
    fn commas_between_columns_are_no_decimals() {
        assert!(commas_are_decimal("14.03.2026 09:05:00  71,2  40,0"));
        for line in ["0, 71, 40", "2026-03-14 09:05:00,71.2,40", "0,71.2,40 %"] {
            assert!(!commas_are_decimal(line), "{line}");
        }
    }

    #[test]
    fn a_row_that_lacks_a_value_is_no_other_row() {
        let text = "Time  PV  OP\n0  71.2  40\n1  40\n2  71.3  40\n";
        let problem = with_tabs(text, "a.txt").expect_err("a value is missing");
        assert_eq!(
            problem.to_string(),
            "a.txt, line 3: the line has 2 values and the others have 3; between blanks nothing tells which column each belongs to\n    \
             export again with a semicolon or a tab between the columns"
        );
        let text = "Trend of 3 signals\n0 71.2 40\n1 71.2 40\n\n2 signals were left out\n";
        assert_eq!(
            with_tabs(text, "a.txt").as_deref(),
            Ok("Trend	of	3	signals
0	71.2	40
1	71.2	40

2	signals	were	left	out
")
        );
    }
}

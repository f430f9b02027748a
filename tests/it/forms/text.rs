//! Delimited text: signs between columns, decimals, thousands, encodings, ends of lines, what stands
//! around the rows.

use super::{Files, HEADINGS, Truth, delimited, iso, truth};
use asleft::read::ColumnNames;

fn holds(truth: &Truth, form: &str, bytes: impl AsRef<[u8]>) {
    truth.is_in(&Files::one("trend.csv", bytes).read(), form);
}

#[test]
fn every_delimiter() {
    let truth = truth();
    for delimiter in [",", ";", "\t", "|"] {
        holds(&truth, delimiter, delimited(&truth.plain(), delimiter));
    }
}

/// The plain export with a decimal comma.
fn with_comma(truth: &Truth) -> Vec<Vec<String>> {
    let mut rows = truth.plain();
    for row in &mut rows[1..] {
        for cell in &mut row[1..4] {
            *cell = cell.replace('.', ",");
        }
    }
    rows
}

#[test]
fn a_decimal_comma() {
    let truth = truth();
    let mut rows = with_comma(&truth);
    for delimiter in [";", "\t", "|"] {
        holds(&truth, delimiter, delimited(&rows, delimiter));
    }
    // Between commas the numbers stand in quotes.
    for row in &mut rows[1..] {
        for cell in &mut row[1..4] {
            *cell = format!("\"{cell}\"");
        }
    }
    holds(&truth, "in quotes", delimited(&rows, ","));
}

/// `1234.56` with its thousands set apart, within quotes.
fn grouped(number: &str, separator: &str, decimal: &str) -> String {
    let (whole, decimals) = number.split_once('.').expect("a number with decimals");
    let (thousands, rest) = whole.split_at(whole.len().saturating_sub(3));
    let whole = if thousands.is_empty() {
        rest.to_owned()
    } else {
        format!("{thousands}{separator}{rest}")
    };
    format!("\"{whole}{decimal}{decimals}\"")
}

#[test]
fn thousands_set_apart_within_quotes() {
    let truth = truth();
    for (separator, decimal) in [
        (",", "."),
        (".", ","),
        (" ", ","),
        ("\u{a0}", ","),
        ("\u{202f}", ","),
        ("'", "."),
    ] {
        let mut rows = truth.plain();
        for row in &mut rows[1..] {
            for cell in &mut row[1..4] {
                *cell = grouped(cell, separator, decimal);
            }
        }
        let form = format!("{separator:?} and {decimal:?}");
        for delimiter in [",", ";"] {
            holds(&truth, &form, delimited(&rows, delimiter));
        }
    }
}

#[test]
fn every_encoding() {
    let truth = truth();
    let mut rows = truth.plain();
    "FIC-301.PV [m³/h]".clone_into(&mut rows[0][1]);
    let text = delimited(&rows, ";");
    let wide = |bytes_of: fn(u16) -> [u8; 2], mark: &str| -> Vec<u8> {
        format!("{mark}{text}")
            .encode_utf16()
            .flat_map(bytes_of)
            .collect()
    };
    // The raised three is the same byte in Windows-1252 as its number in Unicode.
    let windows: Vec<u8> = text
        .chars()
        .map(|letter| u8::try_from(u32::from(letter)).expect("a letter of Latin-1"))
        .collect();
    for (form, bytes) in [
        ("UTF-8", text.clone().into_bytes()),
        (
            "UTF-8 with its mark",
            format!("\u{feff}{text}").into_bytes(),
        ),
        (
            "UTF-16 LE with its mark",
            wide(u16::to_le_bytes, "\u{feff}"),
        ),
        (
            "UTF-16 BE with its mark",
            wide(u16::to_be_bytes, "\u{feff}"),
        ),
        ("UTF-16 LE", wide(u16::to_le_bytes, "")),
        ("UTF-16 BE", wide(u16::to_be_bytes, "")),
        ("Windows-1252", windows),
    ] {
        let log = Files::one("trend.csv", bytes).read();
        truth.is_in(&log, form);
        let roles = &log.sources[0].roles;
        assert_eq!(roles[1].unit.as_deref(), Some("m³/h"), "{form}");
    }
}

#[test]
fn every_end_of_line() {
    let truth = truth();
    let text = delimited(&truth.plain(), ",");
    holds(&truth, "CRLF", text.replace('\n', "\r\n"));
    holds(&truth, "CR", text.replace('\n', "\r"));
    holds(&truth, "no end of the last line", text.trim_end());
    holds(&truth, "blank lines", text.replace('\n', "\n\n"));
}

#[test]
fn titles_and_comments_above_the_headings() {
    let truth = truth();
    for delimiter in [",", ";", "\t"] {
        let text = delimited(&truth.plain(), delimiter);
        for above in [
            "Trend export\n",
            "Trend export, unit 300\nPrinted;2026-03-15 07:00\n\n",
            "# exported by the shift office\n# signals: 4\n# from 2026-03-14 09:00:00 to 2026-03-14 09:15:00\n",
            "Title\tStep test; FIC-301, feed\nOperator,A. Quill\n",
            "\"Report of\nthe night\"\n",
        ] {
            holds(&truth, above, format!("{above}{text}"));
        }
    }
}

#[test]
fn a_row_of_units_below_the_headings() {
    let truth = truth();
    for units in [
        ["", "m3/h", "%", "m3/h", ""],
        ["s", "[m³/h]", "[%]", "[m³/h]", "-"],
    ] {
        let mut rows = truth.plain();
        rows.insert(1, units.map(str::to_owned).to_vec());
        let log = Files::one("trend.csv", delimited(&rows, ";")).read();
        truth.is_in(&log, units[1]);
        let unit = log.sources[0].roles[1].unit.as_deref();
        assert_eq!(unit, Some(units[1].trim_matches(['[', ']'])));
    }
}

#[test]
fn more_signs_or_headings_than_values() {
    let truth = truth();
    let text = delimited(&truth.plain(), ";");
    holds(&truth, "trailing separators", text.replace('\n', ";;\n"));
    let (heading, rows) = text.split_once('\n').expect("a heading");
    holds(
        &truth,
        "separators behind values",
        format!("{heading}\n{}", rows.replace('\n', ";\n")),
    );
    holds(
        &truth,
        "more headings",
        format!("{heading};Remark;Batch\n{rows}"),
    );
    holds(
        &truth,
        "separators behind headings",
        format!("{heading};;;\n{rows}"),
    );
}

#[test]
fn no_headings_at_all() {
    let truth = truth();
    let rows = truth.plain();
    for delimiter in [",", ";", "\t"] {
        let bytes = delimited(&rows[1..], delimiter);
        let columns = ["#1", "#2", "#3", "#4", "#5"].map(|name| Some(name.to_owned()));
        let [time, pv, op, sp, mode] = columns;
        let named = ColumnNames {
            time,
            pv,
            op,
            sp,
            mode,
            ..ColumnNames::default()
        };
        let log = Files::one("trend.csv", bytes).columns(named).read();
        truth.is_in(&log, "columns by number");
    }
}

#[test]
fn columns_set_apart_by_white_space() {
    let truth = truth();
    let rows = truth.plain();
    let in_columns: String = rows
        .iter()
        .map(|row| {
            format!(
                "{:<19}  {:>12}  {:>12}  {:>12}  {:>12}\n",
                row[0], row[1], row[2], row[3], row[4]
            )
        })
        .collect();
    holds(&truth, "in columns", &in_columns);
    holds(
        &truth,
        "in columns, set in",
        in_columns.replace('\n', "\n   "),
    );
    holds(&truth, "one space", delimited(&rows, " "));
    let mut date_and_time = rows.clone();
    "Date Time".clone_into(&mut date_and_time[0][0]);
    holds(
        &truth,
        "one space, date and time apart",
        delimited(&date_and_time, " "),
    );
    // Headings of several words, wider apart than a word from the next.
    let mut words = truth.table(
        &[
            "Time",
            "FIC-301 PV",
            "FIC-301 OP",
            "FIC-301 SP",
            "FIC-301 mode",
        ],
        iso,
    );
    for row in &mut words {
        for cell in row {
            *cell = format!("{cell:>22}");
        }
    }
    holds(&truth, "headings of several words", delimited(&words, ""));
    holds(&truth, "tabs and spaces", delimited(&rows, " \t "));
    holds(
        &truth,
        "decimal comma",
        delimited(&with_comma(&truth), "   "),
    );
    assert_eq!(rows[0], HEADINGS);
}

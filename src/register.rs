//! The register: one line per record, for spreadsheets. A working list, made anew each run.

use crate::display::spreadsheet_cell;
use crate::predict::Margins;
use crate::quantity::{Estimate, round_significant};
use crate::record::{Record, SettingsBlock, Status};
use crate::settings::Native;
use serde::Serialize;
use serde_json::Value;

/// Significant digits of the figures that were worked out. Settings are printed as they are typed.
const DIGITS: usize = 4;

/// Marks the file as UTF-8, without which common spreadsheet programs garble °C.
const BYTE_ORDER_MARK: &[u8] = b"\xef\xbb\xbf";

/// What stands in one cell.
#[derive(Debug, Clone, PartialEq)]
enum Cell {
    /// Nothing is known: never 0.
    Blank,
    /// Words.
    Text(String),
    /// A figure.
    Number(f64),
}

/// A column: its heading, and what a record has to say there. The headings of the settings are
/// those of the loop schedule.
type Column = (&'static str, fn(&Record) -> Cell);

const COLUMNS: &[Column] = &[
    ("document", |r| text(&r.document.number)),
    ("revision", |r| text(&r.document.revision)),
    (STATUS, |r| word(&r.document.status)),
    (TAG, |r| text(&r.control_loop.tag)),
    ("service", |r| text(&r.control_loop.service)),
    ("form", |r| word(&r.control_loop.form)),
    ("p as", |r| word(&r.control_loop.p_as)),
    ("i as", |r| word(&r.control_loop.i_as)),
    ("d as", |r| word(&r.control_loop.d_as)),
    ("pv unit", |r| text(&r.control_loop.pv.unit)),
    ("found p", |r| proportional(found(r))),
    ("found i", |r| term(found(r), |native| native.i)),
    ("found d", |r| term(found(r), |native| native.d)),
    ("recommended p", |r| proportional(recommended(r))),
    ("recommended i", |r| term(recommended(r), |native| native.i)),
    ("recommended d", |r| term(recommended(r), |native| native.d)),
    ("left p", |r| proportional(left(r))),
    ("left i", |r| term(left(r), |native| native.i)),
    ("left d", |r| term(left(r), |native| native.d)),
    ("left was recommended", |r| {
        left(r).map_or(Cell::Blank, |_| {
            text(if r.document.status == Status::Withheld {
                "no: the record is withheld"
            } else {
                "yes"
            })
        })
    }),
    ("left differs from recommended", |r| {
        yes_or_no(r.settings.as_left_differs)
    }),
    ("model", |r| {
        r.model.as_ref().map_or(Cell::Blank, |m| word(&m.fit.kind))
    }),
    ("gain", |r| {
        figure(r.model.as_ref().map(|m| m.gain_engineering.value))
    }),
    ("gain unit", |r| {
        r.model
            .as_ref()
            .map_or(Cell::Blank, |m| text(&m.gain_engineering.unit))
    }),
    ("time constant s", |r| {
        estimate(r.model.as_ref().and_then(|m| m.fit.time_constant_s))
    }),
    ("second time constant s", |r| {
        estimate(r.model.as_ref().and_then(|m| m.fit.second_time_constant_s))
    }),
    ("dead time s", |r| {
        estimate(r.model.as_ref().map(|m| m.fit.dead_time_s))
    }),
    ("closed-loop time constant s", |r| {
        figure(r.design.as_ref().map(|d| d.closed_loop_time_constant_s))
    }),
    ("binding limit", |r| {
        r.design
            .as_ref()
            .map_or(Cell::Blank, |d| word(&d.binding_limit))
    }),
    ("found Ms", |r| sensitivity(found(r), |block| block.margins)),
    ("found Ms, worst", |r| {
        sensitivity(found(r), |block| block.worst_margins)
    }),
    ("recommended Ms", |r| {
        sensitivity(recommended(r), |block| block.margins)
    }),
    ("recommended Ms, worst", |r| {
        sensitivity(recommended(r), |block| block.worst_margins)
    }),
    ("left Ms", |r| sensitivity(left(r), |block| block.margins)),
    ("left Ms, worst", |r| {
        sensitivity(left(r), |block| block.worst_margins)
    }),
    ("trial agrees", |r| {
        yes_or_no(r.trial.as_ref().map(|trial| trial.agrees))
    }),
    ("open items", |r| {
        let items: Vec<&str> = r
            .document
            .open_items
            .iter()
            .map(|item| item.text.as_str())
            .collect();
        text(&items.join("; "))
    }),
];

/// Heading of the column that names the loop, and of the one that says what became of it.
const TAG: &str = "tag";
const STATUS: &str = "status";

/// The register of these records, and of the loops that have none (`not_recorded`, by tag), as the bytes of a CSV file, UTF-8 with a byte order mark, one
/// line per loop in the order given, decimal points, and blank where nothing is known.
pub fn to_csv(records: &[Record], not_recorded: &[String]) -> Vec<u8> {
    const IN_MEMORY: &str = "memory takes every line";
    let mut writer = csv::Writer::from_writer(BYTE_ORDER_MARK.to_vec());
    writer
        .write_record(COLUMNS.iter().map(|(heading, _)| heading))
        .expect(IN_MEMORY);
    for record in records {
        writer
            .write_record(COLUMNS.iter().map(|(_, cell)| cell(record).written()))
            .expect(IN_MEMORY);
    }
    for tag in not_recorded {
        let cells = COLUMNS.iter().map(|(heading, _)| match *heading {
            TAG => spreadsheet_cell(tag),
            STATUS => "not recorded".to_owned(),
            _ => String::new(),
        });
        writer.write_record(cells).expect(IN_MEMORY);
    }
    writer.into_inner().expect(IN_MEMORY)
}

impl Cell {
    /// The cell as it goes into the file.
    fn written(&self) -> String {
        match self {
            Cell::Blank => String::new(),
            Cell::Number(value) => value.to_string(),
            Cell::Text(words) => spreadsheet_cell(words),
        }
    }
}

fn text(words: &str) -> Cell {
    if words.is_empty() {
        Cell::Blank
    } else {
        Cell::Text(words.to_owned())
    }
}

/// A word of the record's JSON as people write it.
fn word(value: &impl Serialize) -> Cell {
    match serde_json::to_value(value) {
        Ok(Value::String(name)) => text(&name.replace('-', " ")),
        _ => Cell::Blank,
    }
}

fn figure(value: Option<f64>) -> Cell {
    value.map_or(Cell::Blank, |value| {
        Cell::Number(round_significant(value, DIGITS))
    })
}

fn estimate(value: Option<Estimate>) -> Cell {
    figure(value.map(|estimate| estimate.value))
}

fn yes_or_no(value: Option<bool>) -> Cell {
    value.map_or(Cell::Blank, |yes| text(if yes { "yes" } else { "no" }))
}

fn found(record: &Record) -> Option<&SettingsBlock> {
    Some(&record.settings.as_found)
}

fn recommended(record: &Record) -> Option<&SettingsBlock> {
    record.settings.recommended.as_ref()
}

fn left(record: &Record) -> Option<&SettingsBlock> {
    record.settings.as_left.as_ref()
}

fn proportional(block: Option<&SettingsBlock>) -> Cell {
    block.map_or(Cell::Blank, |block| Cell::Number(block.native.p))
}

/// The integral or derivative setting; 0 is how a controller is told not to use it.
fn term(block: Option<&SettingsBlock>, value: fn(Native) -> f64) -> Cell {
    match block.map(|block| value(block.native)) {
        None => Cell::Blank,
        Some(0.0) => text("off"),
        Some(value) => Cell::Number(value),
    }
}

fn sensitivity(
    block: Option<&SettingsBlock>,
    margins: fn(&SettingsBlock) -> Option<Margins>,
) -> Cell {
    match block.and_then(margins) {
        None => Cell::Blank,
        Some(margins) if !margins.stable => text("unstable"),
        Some(margins) => figure(margins.ms),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_cell_is_run_by_a_spreadsheet() {
        for (words, written) in [
            ("=1+1", "'=1+1"),
            ("@SUM(A1)", "'@SUM(A1)"),
            ("-2+3", "'-2+3"),
            ("+cmd", "'+cmd"),
            ("\t=1", "'\t=1"),
            ("\r=1", "'\r=1"),
            ("-inf", "'-inf"),
            ("- spare", "'- spare"),
            ("-12.5", "-12.5"),
            ("+3", "+3"),
            ("feed = recycle", "feed = recycle"),
        ] {
            assert_eq!(Cell::Text(words.into()).written(), written);
        }
    }

    #[test]
    fn figures_are_figures_and_nothing_is_not_zero() {
        assert_eq!(figure(Some(-1.234_56)).written(), "-1.235");
        assert_eq!(figure(Some(0.000_012_346)).written(), "0.00001235");
        assert_eq!(figure(None).written(), "");
        assert_eq!(yes_or_no(None).written(), "");
    }
}

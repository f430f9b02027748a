//! Where the headings of a log stand and where its rows begin.

use super::ColumnNames;
use super::headings::{Owner, meaning, squash};
use super::numbers::DecimalSign;
use super::numbers::{Shape, shape};
use super::stamp::stamp;
use super::table::{Cell, Row, Table};
use super::units;
use super::values::{Value, value};

/// How many rows from the top the data must have begun.
const ROWS_LOOKED_AT: usize = 400;
/// How many rows in a row must look like data.
const ROWS_ALIKE: usize = 3;
/// How far above the data the headings may stand, in rows that hold anything.
const ROWS_ABOVE: usize = 5;

/// A column with its heading.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Heading {
    /// Column, 0 for the first.
    pub column: usize,
    /// The text; empty in a log without headings.
    pub text: String,
    /// Unit from the row of units under the headings.
    pub unit_below: Option<String>,
}

/// How a table is laid out. Rows are indices of the table.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Layout {
    /// The row of headings.
    pub heading_row: Option<usize>,
    /// First row of data.
    pub data_start: usize,
    /// One for every column that has a heading or data.
    pub headings: Vec<Heading>,
}

#[derive(PartialEq, Clone, Copy)]
enum Look {
    Empty,
    Moment,
    Number,
    Bad,
    Text,
}

fn look(cell: Cell<'_>) -> Look {
    match cell {
        Cell::Empty => Look::Empty,
        Cell::Date(_) | Cell::Duration(_) => Look::Moment,
        Cell::Number(_) => Look::Number,
        Cell::Error(_) => Look::Bad,
        Cell::Boolean(_) => Look::Text,
        Cell::Text(text) => {
            if shape(text) != Shape::NotNumber {
                Look::Number
            } else if stamp(text).is_some() {
                Look::Moment
            } else if matches!(value(cell, DecimalSign::Point, &[]), Value::Bad(_)) {
                Look::Bad
            } else {
                Look::Text
            }
        }
    }
}

/// Whether a row looks like a sample: a time with a value, or mostly numbers.
fn looks_like_data(row: Row<'_>, width: usize, counted: bool) -> bool {
    let (mut moments, mut numbers, mut bad, mut filled) = (0, 0, 0, 0);
    for cell in row.cells() {
        match look(cell) {
            Look::Empty => continue,
            Look::Moment => moments += 1,
            Look::Number => numbers += 1,
            Look::Bad => bad += 1,
            Look::Text => {}
        }
        filled += 1;
    }
    (moments > 0 && numbers + bad > 0)
        || (numbers > 1 && 2 * numbers >= filled)
        || ((width == 1 || counted) && numbers > 0 && 2 * numbers >= filled)
}

/// Whether a row has its times where `sample` has them, and something beside them: a row of a long table
/// whose value is a word, as the mode is.
fn is_timed_alike(row: Row<'_>, sample: Row<'_>) -> bool {
    let times = |row: Row<'_>| -> Vec<usize> {
        row.cells()
            .enumerate()
            .filter(|(_, cell)| look(*cell) == Look::Moment)
            .map(|(column, _)| column)
            .collect()
    };
    let at = times(row);
    !at.is_empty() && at == times(sample) && row.width() == sample.width()
}

/// Finds headings and data; `None` where no rows look like samples. `counted` is a log without a clock.
pub fn find(
    table: &Table,
    names: &ColumnNames,
    tag: Option<&str>,
    counted: bool,
) -> Option<Layout> {
    let rows = table.len();
    let is_data = |index: usize| looks_like_data(table.row(index), table.width(), counted);
    let found = (0..rows.min(ROWS_LOOKED_AT)).find(|&start| {
        is_data(start)
            && (start + 1..rows.min(start + ROWS_ALIKE))
                .all(|index| is_data(index) || is_timed_alike(table.row(index), table.row(start)))
    })?;
    // A long table may begin with a word: the first row of a mode is no heading.
    let data_start = (0..found)
        .rev()
        .take_while(|&index| is_timed_alike(table.row(index), table.row(found)))
        .last()
        .unwrap_or(found);
    let above = data_start.saturating_sub(ROWS_ABOVE)..data_start;
    let heading_row = above
        .clone()
        .map(|index| (index, heading_score(table.row(index), names, tag)))
        .filter(|(_, score)| *score > 0)
        // The first of the best: a row of units below must not win by a draw.
        .rev()
        .max_by_key(|(_, score)| *score)
        .map(|(index, _)| index)
        .or_else(|| {
            // No usual word anywhere: the widest row of texts right above the data.
            let widest = |index: &usize| {
                table
                    .row(*index)
                    .cells()
                    .filter(|cell| matches!(cell, Cell::Text(_)))
                    .count()
            };
            above
                .clone()
                .rev()
                .max_by_key(widest)
                .filter(|index| widest(index) > 1)
        });
    let unit_rows = heading_row.map_or(0..0, |row| row + 1..data_start);
    let headings = (0..table.width())
        .map(|column| Heading {
            column,
            text: heading_row.map_or_else(String::new, |row| table.row(row).cell(column).text()),
            unit_below: unit_rows.clone().find_map(|row| {
                let text = table.row(row).cell(column).text();
                let bare = text.trim_matches(['[', ']', '(', ')']).to_owned();
                (units::known(&bare).is_some() || units::TimeUnit::of(&bare).is_some())
                    .then_some(bare)
            }),
        })
        .collect();
    Some(Layout {
        heading_row,
        data_start,
        headings,
    })
}

/// How much a row looks like headings: columns named in the schedule count most.
fn heading_score(row: Row<'_>, names: &ColumnNames, tag: Option<&str>) -> usize {
    let mut score = 0;
    for cell in row.cells() {
        let Cell::Text(text) = cell else { continue };
        let meaning = meaning(text, tag);
        let is_named = names
            .all()
            .any(|name| squash(name) == squash(text) && !name.starts_with('#'));
        score += 10 * usize::from(is_named);
        score += match (&meaning.role, &meaning.owner) {
            (Some(_), Owner::This) => 3,
            (Some(_), _) => 2,
            (None, Owner::Nobody) => 0,
            (None, _) => 1,
        };
    }
    score
}

//! Cells of a sheet as they are kept: column by column, eight bytes for each cell that holds anything.

use super::rows::RowNumbers;
use super::table::Cell;
use chrono::{DateTime, NaiveDateTime};
use std::collections::HashMap;

/// Texts that come again are kept once, so many different ones of a sheet.
const TEXTS_REMEMBERED: usize = 1024;
/// Rows and columns of the largest sheet that there is (ECMA-376 part 1, 18.3.1.73 and 18.3.1.13).
const ROWS_MOST: u32 = 1_048_576;
const COLUMNS_MOST: u32 = 16_384;
/// A list that is full grows by its own length over this.
const GROWTH: usize = 4;

/// Error values of spreadsheets as they print them.
pub(super) const ERRORS: [&str; 8] = [
    "#DIV/0!", "#N/A", "#NAME?", "#NULL!", "#NUM!", "#REF!", "#VALUE!", "#DATA!",
];

/// What the eight bytes of a cell are.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Kind {
    /// Where it begins and ends in the sheet's text, four bytes each.
    Text,
    Number,
    Boolean,
    /// Microseconds since 1970-01-01.
    Date,
    Duration,
    /// Index in [`ERRORS`].
    Error,
}

/// Cells of one kind in rows that follow each other.
#[derive(Debug, Clone, Copy)]
struct Run {
    row: u32,
    length: u32,
    /// Of its first cell among the column's values.
    value: u32,
    kind: Kind,
}

#[derive(Debug, Default)]
struct Column {
    runs: Vec<Run>,
    values: Vec<u64>,
}

impl Column {
    fn push(&mut self, row: usize, kind: Kind, value: u64) {
        let row = u32::try_from(row).expect("a sheet has fewer than 2^32 rows");
        match self.runs.last_mut() {
            Some(run) if run.kind == kind && run.row + run.length == row => run.length += 1,
            _ => {
                let value = u32::try_from(self.values.len())
                    .expect("a column has no more cells than the sheet has rows");
                self.runs.push(Run {
                    row,
                    length: 1,
                    value,
                    kind,
                });
            }
        }
        push_lean(&mut self.values, value);
    }

    /// Takes the last cell back where it stands in `row`.
    fn take_back(&mut self, row: usize) {
        if let Some(run) = self.runs.last_mut()
            && (run.row + run.length - 1) as usize == row
        {
            run.length -= 1;
            if run.length == 0 {
                self.runs.pop();
            }
            self.values.pop();
        }
    }

    fn get(&self, row: usize) -> Option<(Kind, u64)> {
        let after = self.runs.partition_point(|run| run.row as usize <= row);
        let run = self.runs.get(after.checked_sub(1)?)?;
        let past = row - run.row as usize;
        (past < run.length as usize).then(|| (run.kind, self.values[run.value as usize + past]))
    }
}

/// Doubling would let a long column take up to twice its room.
fn push_lean<T>(list: &mut Vec<T>, value: T) {
    if list.len() == list.capacity() {
        list.reserve_exact((list.len() / GROWTH).max(4));
    }
    list.push(value);
}

/// A cell on its way from a workbook.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum NewCell<'a> {
    Text(&'a str),
    Number(f64),
    Boolean(bool),
    Date(NaiveDateTime),
    Duration(f64),
    Error(usize),
}

/// Why a cell cannot be added.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Refused {
    /// It stands above the last one.
    OutOfOrder,
    /// The texts of the sheet do not fit their places.
    TooLarge,
    /// It stands where no sheet has cells.
    BeyondSheet,
}

/// The cells of a sheet in rows that hold anything.
#[derive(Debug, Default)]
pub(super) struct SheetCells {
    columns: Vec<Column>,
    text: String,
    numbers: RowNumbers,
    rows: usize,
}

/// Fills the cells of a sheet row by row.
#[derive(Debug, Default)]
pub(super) struct SheetBuilder {
    cells: SheetCells,
    /// Row of the sheet that was begun last.
    row: Option<u32>,
    known: HashMap<Box<str>, u64>,
}

impl SheetBuilder {
    /// Adds a cell; rows come in order, a second cell at a place takes the first one's. Positions
    /// count from 0 at A1.
    pub fn push(&mut self, row: u32, column: u32, cell: &NewCell<'_>) -> Result<(), Refused> {
        if row >= ROWS_MOST || column >= COLUMNS_MOST {
            return Err(Refused::BeyondSheet);
        }
        let column = column as usize;
        if self.row.is_some_and(|last| row < last) {
            return Err(Refused::OutOfOrder);
        }
        let is_same_row = self.row == Some(row);
        if is_same_row && let Some(column) = self.cells.columns.get_mut(column) {
            column.take_back(self.cells.rows - 1);
        }
        let (kind, value) = match cell {
            NewCell::Text(text) => {
                let text = super::delimited::trimmed(text);
                if text.is_empty() {
                    return Ok(());
                }
                (Kind::Text, self.keep_text(text).ok_or(Refused::TooLarge)?)
            }
            NewCell::Number(number) => (Kind::Number, number.to_bits()),
            NewCell::Boolean(value) => (Kind::Boolean, u64::from(*value)),
            NewCell::Date(at) => (Kind::Date, at.and_utc().timestamp_micros().cast_unsigned()),
            NewCell::Duration(seconds) => (Kind::Duration, seconds.to_bits()),
            NewCell::Error(error) => (Kind::Error, *error as u64),
        };
        if !is_same_row {
            self.row = Some(row);
            self.cells.numbers.push(self.cells.rows, row as usize + 1);
            self.cells.rows += 1;
        }
        if self.cells.columns.len() <= column {
            self.cells.columns.resize_with(column + 1, Column::default);
        }
        self.cells.columns[column].push(self.cells.rows - 1, kind, value);
        Ok(())
    }

    /// Keeps a text; `None` where the texts grow beyond 4 GiB.
    fn keep_text(&mut self, text: &str) -> Option<u64> {
        if let Some(known) = self.known.get(text) {
            return Some(*known);
        }
        let kept = &mut self.cells.text;
        let start = u32::try_from(kept.len()).ok()?;
        let end = u32::try_from(kept.len() + text.len()).ok()?;
        kept.push_str(text);
        let value = u64::from(start) << 32 | u64::from(end);
        if self.known.len() < TEXTS_REMEMBERED {
            self.known.insert(text.into(), value);
        }
        Some(value)
    }

    /// The sheet as it is kept.
    pub fn finish(mut self) -> SheetCells {
        for column in &mut self.cells.columns {
            column.runs.shrink_to_fit();
            column.values.shrink_to_fit();
        }
        self.cells.text.shrink_to_fit();
        self.cells
    }
}

impl SheetCells {
    /// Number of rows.
    pub fn len(&self) -> usize {
        self.rows
    }

    /// Number of columns up to the last one that holds anything.
    pub fn width(&self) -> usize {
        self.columns.len()
    }

    /// Row of the sheet, 1 for the first.
    pub fn number(&self, row: usize) -> usize {
        self.numbers.get(row)
    }

    /// Number of cells of a row up to the last one that holds anything.
    pub fn width_of(&self, row: usize) -> usize {
        self.columns
            .iter()
            .rposition(|column| column.get(row).is_some())
            .map_or(0, |last| last + 1)
    }

    /// A cell; empty beyond the last column.
    pub fn cell(&self, row: usize, column: usize) -> Cell<'_> {
        let Some((kind, value)) = self.columns.get(column).and_then(|column| column.get(row))
        else {
            return Cell::Empty;
        };
        match kind {
            Kind::Text => {
                let (start, end) = ((value >> 32) as usize, value as u32 as usize);
                Cell::Text(&self.text[start..end])
            }
            Kind::Number => Cell::Number(f64::from_bits(value)),
            Kind::Boolean => Cell::Boolean(value != 0),
            Kind::Date => Cell::Date(
                DateTime::from_timestamp_micros(value.cast_signed())
                    .expect("it was made from a date")
                    .naive_utc(),
            ),
            Kind::Duration => Cell::Duration(f64::from_bits(value)),
            Kind::Error => Cell::Error(ERRORS[value as usize]),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cells_come_back_as_they_were_put_in() {
        let mut builder = SheetBuilder::default();
        let at: NaiveDateTime = "2026-03-14T09:05:00.5".parse().expect("a time");
        let cells = [
            (4, 1, NewCell::Number(71.2), Cell::Number(71.2)),
            (4, 2, NewCell::Text(" Bad "), Cell::Text("Bad")),
            (5, 1, NewCell::Date(at), Cell::Date(at)),
            (5, 2, NewCell::Text("Bad"), Cell::Text("Bad")),
            (9, 1, NewCell::Duration(0.5), Cell::Duration(0.5)),
            (9, 2, NewCell::Error(1), Cell::Error("#N/A")),
            (9, 0, NewCell::Boolean(true), Cell::Boolean(true)),
        ];
        for (row, column, cell, _) in &cells {
            builder.push(*row, *column, cell).expect("in order");
        }
        let sheet = builder.finish();
        let rows = [4, 5, 9];
        for (row, column, _, expected) in &cells {
            let index = rows.iter().position(|r| r == row).expect("a row");
            assert_eq!(sheet.number(index), *row as usize + 1);
            assert_eq!(sheet.cell(index, *column as usize), *expected);
        }
        assert_eq!((sheet.len(), sheet.width()), (3, 3));
        assert_eq!(sheet.cell(0, 0), Cell::Empty);
        assert_eq!(sheet.cell(0, 7), Cell::Empty);
        assert_eq!(sheet.text, "Bad");
    }

    #[test]
    fn a_second_cell_at_a_place_takes_it_and_rows_keep_their_order() {
        let mut builder = SheetBuilder::default();
        builder.push(3, 0, &NewCell::Number(1.0)).expect("added");
        builder.push(3, 0, &NewCell::Text("two")).expect("added");
        assert_eq!(
            builder.push(2, 0, &NewCell::Number(3.0)),
            Err(Refused::OutOfOrder)
        );
        assert_eq!(builder.finish().cell(0, 0), Cell::Text("two"));
    }

    #[test]
    fn a_cell_in_the_far_corner_costs_no_more_than_another() {
        let mut builder = SheetBuilder::default();
        builder
            .push(1_048_575, 16_383, &NewCell::Number(1.0))
            .expect("added");
        let sheet = builder.finish();
        let kept: usize = sheet
            .columns
            .iter()
            .map(|column| column.values.capacity())
            .sum();
        assert_eq!(kept, 1);
    }

    #[test]
    fn a_number_takes_eight_bytes() {
        let mut builder = SheetBuilder::default();
        for row in 0..10_000 {
            builder
                .push(row, 0, &NewCell::Number(f64::from(row)))
                .expect("in order");
        }
        let column = &builder.finish().columns[0];
        assert_eq!((column.values.capacity(), column.runs.len()), (10_000, 1));
        assert_eq!(size_of_val(&column.values[0]), 8);
    }
}

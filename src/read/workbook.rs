//! Workbooks: opened once, their sheets read when they are asked for.

use super::guard::guarded;
use super::sheet::{ERRORS, NewCell, Refused, SheetBuilder, SheetCells};
use super::table::{Table, too_large};
use super::weight::too_heavy;
use crate::notice::{Place, Problem};
use calamine::{Data, DataRef, ExcelDateTime, Reader, Sheets};
use std::io::Cursor;
use std::panic::AssertUnwindSafe;

/// A workbook whose sheets can be read.
pub(super) struct Workbook {
    book: Sheets<Cursor<Vec<u8>>>,
    name: String,
    ending: String,
}

impl std::fmt::Debug for Workbook {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Workbook")
            .field("name", &self.name)
            .finish_non_exhaustive()
    }
}

/// The reading library refuses the file (its own words are of no use to who exported it), or the cells
/// themselves are at fault.
enum Failure {
    /// It would not fit the memory, or has no end.
    Heavy(String),
    Library,
    Cells(Refused),
}

impl<E: std::error::Error> From<E> for Failure {
    fn from(_: E) -> Self {
        Failure::Library
    }
}

impl Workbook {
    /// Opens a workbook.
    ///
    /// # Errors
    /// Where the bytes are none of that kind.
    pub fn open(bytes: Vec<u8>, name: &str, ending: &str) -> Result<Self, Problem> {
        let opened = guard(|| match too_heavy(&bytes, ending) {
            Some(reason) => Err(Failure::Heavy(reason)),
            None => open(bytes, ending),
        });
        let book = opened.map_err(|failure| told(failure, name, ending))?;
        Ok(Workbook {
            book,
            name: name.to_owned(),
            ending: ending.to_owned(),
        })
    }

    /// Names of the sheets that hold cells, in order.
    pub fn sheets(&self) -> Vec<String> {
        let kinds = self.book.sheets_metadata().iter();
        kinds
            .filter(|sheet| sheet.typ == calamine::SheetType::WorkSheet)
            .map(|sheet| sheet.name.clone())
            .collect()
    }

    /// Reads a sheet.
    ///
    /// # Errors
    /// Where it is damaged.
    pub fn read(&mut self, sheet: &str) -> Result<Table, Problem> {
        let cells = guard(|| read_sheet(&mut self.book, sheet));
        match cells {
            Ok(cells) => Ok(Table::of_sheet(&self.name, sheet, cells)),
            Err(failure) => Err(told(failure, &self.name, &self.ending)),
        }
    }
}

/// A workbook damaged on the way may break the reading library's own expectations: that is a problem
/// of this one file and must not end the run.
fn guard<T>(work: impl FnOnce() -> Result<T, Failure>) -> Result<T, Failure> {
    guarded(AssertUnwindSafe(work)).unwrap_or(Err(Failure::Library))
}

fn told(failure: Failure, name: &str, ending: &str) -> Problem {
    match failure {
        Failure::Library => Problem::error(
            Place::file(name),
            format!("the file is not a whole .{ending} workbook: it was cut short or damaged on the way, or is of another kind"),
        )
        .hint("copy it again from where it was exported, or open it in a spreadsheet program and save it again"),
        Failure::Heavy(reason) => Problem::error(
            Place::file(name),
            format!("the workbook was not opened: {reason}"),
        )
        .hint("export a shorter time, or open it in a spreadsheet program and save it again"),
        Failure::Cells(Refused::BeyondSheet) => Problem::error(
            Place::file(name),
            "the workbook is damaged: a cell stands beyond the last column or row of any sheet",
        )
        .hint("open it in a spreadsheet program and save it again"),
        Failure::Cells(_) => too_large(name),
    }
}

fn open(bytes: Vec<u8>, ending: &str) -> Result<Sheets<Cursor<Vec<u8>>>, Failure> {
    let bytes = Cursor::new(bytes);
    Ok(match ending {
        "xls" => Sheets::Xls(calamine::Xls::new(bytes)?),
        "xlsb" => Sheets::Xlsb(calamine::Xlsb::new(bytes)?),
        "ods" => Sheets::Ods(calamine::Ods::new(bytes)?),
        _ => Sheets::Xlsx(calamine::Xlsx::new(bytes)?),
    })
}

fn read_sheet(book: &mut Sheets<Cursor<Vec<u8>>>, sheet: &str) -> Result<SheetCells, Failure> {
    let mut builder = SheetBuilder::default();
    let streamed = each_cell(book, sheet, |(row, column), value| {
        with_cell(value, |cell| builder.push(row, column, cell))
    });
    match streamed {
        Err(Failure::Cells(Refused::OutOfOrder)) => read_in_disorder(book, sheet),
        outcome => outcome.map(|()| builder.finish()),
    }
}

/// A sheet whose rows are not written one after the other: no usual program does that.
fn read_in_disorder(
    book: &mut Sheets<Cursor<Vec<u8>>>,
    sheet: &str,
) -> Result<SheetCells, Failure> {
    let mut cells: Vec<((u32, u32), Data)> = Vec::new();
    each_cell(book, sheet, |position, value| {
        cells.push((position, value.clone().into()));
        Ok(())
    })?;
    cells.sort_by_key(|(position, _)| *position);
    let mut builder = SheetBuilder::default();
    for ((row, column), value) in &cells {
        with_cell(&borrowed(value), |cell| builder.push(*row, *column, cell))
            .map_err(Failure::Cells)?;
    }
    Ok(builder.finish())
}

/// Hands every cell of a sheet with its position to `take`. The streaming readers never lay out the
/// whole rectangle of a sheet, which a single stray cell at its far corner would make too large for memory.
fn each_cell(
    book: &mut Sheets<Cursor<Vec<u8>>>,
    sheet: &str,
    mut take: impl FnMut((u32, u32), &DataRef<'_>) -> Result<(), Refused>,
) -> Result<(), Failure> {
    match book {
        Sheets::Xlsx(book) => {
            let mut reader = book.worksheet_cells_reader(sheet)?;
            while let Some(cell) = reader.next_cell()? {
                take(cell.get_position(), cell.get_value()).map_err(Failure::Cells)?;
            }
        }
        Sheets::Xlsb(book) => {
            let mut reader = book.worksheet_cells_reader(sheet)?;
            while let Some(cell) = reader.next_cell()? {
                take(cell.get_position(), cell.get_value()).map_err(Failure::Cells)?;
            }
        }
        other => {
            let range = other.worksheet_range(sheet)?;
            let (first_row, first_column) = range.start().unwrap_or((0, 0));
            for (row, column, value) in range.used_cells() {
                let position = (first_row + row as u32, first_column + column as u32);
                take(position, &borrowed(value)).map_err(Failure::Cells)?;
            }
        }
    }
    Ok(())
}

fn borrowed(value: &Data) -> DataRef<'_> {
    match value {
        Data::Int(number) => DataRef::Int(*number),
        Data::Float(number) => DataRef::Float(*number),
        Data::String(text) => DataRef::SharedString(text),
        Data::Bool(value) => DataRef::Bool(*value),
        Data::DateTime(at) => DataRef::DateTime(*at),
        Data::DateTimeIso(text) => DataRef::DateTimeIso(text.clone()),
        Data::DurationIso(text) => DataRef::DurationIso(text.clone()),
        Data::Error(error) => DataRef::Error(error.clone()),
        Data::Empty => DataRef::Empty,
    }
}

/// Hands the cell on that a value of the library is; an empty one is none.
fn with_cell(
    value: &DataRef<'_>,
    take: impl FnOnce(&NewCell<'_>) -> Result<(), Refused>,
) -> Result<(), Refused> {
    take(&match value {
        DataRef::Empty => return Ok(()),
        DataRef::Int(number) => NewCell::Number(*number as f64),
        DataRef::Float(number) => NewCell::Number(*number),
        DataRef::String(text) => NewCell::Text(text),
        DataRef::SharedString(text) => NewCell::Text(text),
        DataRef::Bool(value) => NewCell::Boolean(*value),
        DataRef::DateTime(at) => date_cell(at),
        DataRef::DateTimeIso(text) => {
            super::iso::date(text).map_or(NewCell::Text(text), NewCell::Date)
        }
        DataRef::DurationIso(text) => {
            super::iso::duration_s(text).map_or(NewCell::Text(text), NewCell::Duration)
        }
        DataRef::Error(error) => NewCell::Error(error_index(error)),
    })
}

/// A date cell: below one day it is a time of day, which has no date.
fn date_cell(at: &ExcelDateTime) -> NewCell<'static> {
    let days = at.as_f64();
    if at.is_duration() || (0.0..1.0).contains(&days) {
        // To the microsecond: a serial number holds no more than that.
        return NewCell::Duration(libm::round(days * 86_400.0e6) / 1e6);
    }
    if !(1.0..2_958_466.0).contains(&days) {
        return NewCell::Number(days);
    }
    at.as_datetime()
        .map_or(NewCell::Number(days), NewCell::Date)
}

/// Index of an error value among [`ERRORS`].
fn error_index(error: &calamine::CellErrorType) -> usize {
    use calamine::CellErrorType as Kind;
    let text = match error {
        Kind::Div0 => "#DIV/0!",
        Kind::NA => "#N/A",
        Kind::Name => "#NAME?",
        Kind::Null => "#NULL!",
        Kind::Num => "#NUM!",
        Kind::Ref => "#REF!",
        Kind::Value => "#VALUE!",
        Kind::GettingData => "#DATA!",
    };
    let known = ERRORS.iter().position(|known| *known == text);
    known.expect("every error value is listed")
}

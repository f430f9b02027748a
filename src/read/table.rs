//! Sheets of workbooks and delimited text as tables of located cells.

use super::blanks;
use super::delimited::{TextCells, Unreadable};
use super::sheet::SheetCells;
use super::text::{self, Decoded};
use crate::notice::{Place, Problem};
use chrono::{NaiveDateTime, NaiveTime};

/// What stands in a cell.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Cell<'a> {
    /// Nothing, or only spaces.
    Empty,
    /// Text, trimmed and not empty.
    Text(&'a str),
    /// A number of a workbook.
    Number(f64),
    /// TRUE or FALSE of a workbook.
    Boolean(bool),
    /// A date, with time of day, of a workbook.
    Date(NaiveDateTime),
    /// A time of day or a duration of a workbook, seconds.
    Duration(f64),
    /// An error value of a workbook, as it is printed there.
    Error(&'static str),
}

impl Cell<'_> {
    /// Whether the cell holds nothing.
    pub fn is_empty(self) -> bool {
        self == Cell::Empty
    }

    /// The cell as a person reads it; whole numbers without a decimal point.
    pub fn text(self) -> String {
        match self {
            Cell::Empty => String::new(),
            Cell::Text(text) => text.to_owned(),
            // Adding 0 takes the sign off a negative zero.
            Cell::Number(number) => (number + 0.0).to_string(),
            Cell::Boolean(true) => "TRUE".to_owned(),
            Cell::Boolean(false) => "FALSE".to_owned(),
            Cell::Date(at) if at.time() == NaiveTime::MIN => at.format("%Y-%m-%d").to_string(),
            Cell::Date(at) => at.format("%Y-%m-%d %H:%M:%S%.f").to_string(),
            Cell::Duration(seconds) => clock_text(seconds),
            Cell::Error(error) => error.to_owned(),
        }
    }
}

/// Seconds as hours, minutes and seconds.
fn clock_text(seconds: f64) -> String {
    let whole = libm::floor(seconds);
    let (hours, minutes) = (
        libm::floor(whole / 3600.0),
        libm::floor(whole / 60.0) % 60.0,
    );
    let rest = seconds - hours * 3600.0 - minutes * 60.0;
    if rest == libm::floor(rest) {
        format!("{hours:02}:{minutes:02}:{rest:02}")
    } else {
        format!("{hours:02}:{minutes:02}:{rest:06.3}")
    }
}

/// The cells of a table, kept as its kind of file needs.
#[derive(Debug)]
enum Cells {
    Text(TextCells),
    Sheet(SheetCells),
}

/// A sheet of a workbook or a delimited text file: rows of cells in order, empty rows left out,
/// every cell at its own column from the left edge of the sheet.
///
/// A text file is kept as its text, with four bytes a row for where it begins; a sheet column by
/// column, with eight bytes a cell. Every loop takes its columns from there.
#[derive(Debug)]
pub struct Table {
    /// File as named in the job, with forward slashes.
    pub file: String,
    /// Sheet of a workbook; `None` for text files.
    pub sheet: Option<String>,
    /// Sign between the columns of a text file; `None` for sheets.
    pub delimiter: Option<char>,
    /// Encoding of a text file; `None` for sheets.
    pub encoding: Option<&'static str>,
    cells: Cells,
}

/// One row of a table.
#[derive(Debug, Clone, Copy)]
pub struct Row<'a> {
    table: &'a Table,
    index: usize,
    /// Row of the sheet or line of the file, 1 for the first.
    pub number: usize,
}

impl<'a> Row<'a> {
    /// The cell in a column, 0 for the first; empty beyond the end of the row.
    pub fn cell(self, column: usize) -> Cell<'a> {
        self.table.cell(self.index, column)
    }

    /// All cells up to the last one of the row.
    pub fn cells(self) -> impl Iterator<Item = Cell<'a>> {
        (0..self.width()).map(move |column| self.cell(column))
    }

    /// Number of cells up to the last one.
    pub fn width(self) -> usize {
        match &self.table.cells {
            Cells::Text(cells) => cells.width_of(self.index),
            Cells::Sheet(cells) => cells.width_of(self.index),
        }
    }
}

impl Table {
    /// Number of rows that hold anything.
    pub fn len(&self) -> usize {
        match &self.cells {
            Cells::Text(cells) => cells.len(),
            Cells::Sheet(cells) => cells.len(),
        }
    }

    /// Whether no cell holds anything.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// Number of columns up to the last one that holds anything.
    pub fn width(&self) -> usize {
        match &self.cells {
            Cells::Text(cells) => cells.width(),
            Cells::Sheet(cells) => cells.width(),
        }
    }

    /// The n-th row that holds anything, 0 for the first.
    pub fn row(&self, index: usize) -> Row<'_> {
        let number = match &self.cells {
            Cells::Text(cells) => cells.number(index),
            Cells::Sheet(cells) => cells.number(index),
        };
        Row {
            table: self,
            index,
            number,
        }
    }

    /// All rows that hold anything.
    pub fn rows(&self) -> impl Iterator<Item = Row<'_>> {
        (0..self.len()).map(|index| self.row(index))
    }

    /// A cell of the n-th row that holds anything; empty beyond its end.
    pub fn cell(&self, index: usize, column: usize) -> Cell<'_> {
        match &self.cells {
            Cells::Text(cells) => text_cell(cells.text(index, column)),
            Cells::Sheet(cells) => cells.cell(index, column),
        }
    }

    /// The rows of a text file; `None` for sheets.
    pub(super) fn as_text(&self) -> Option<&TextCells> {
        match &self.cells {
            Cells::Text(cells) => Some(cells),
            Cells::Sheet(_) => None,
        }
    }

    /// The table as a place.
    pub fn place(&self) -> Place {
        let place = Place::file(&self.file);
        match &self.sheet {
            Some(sheet) => place.sheet(sheet),
            None => place,
        }
    }

    /// A delimited text file.
    ///
    /// # Errors
    /// Where a quotation mark is left open, the text is beyond what can be addressed, or blanks alone set
    /// its columns apart and a row lacks a value.
    pub(super) fn of_text(file: &str, decoded: Decoded) -> Result<Self, Problem> {
        let (delimiter, skipped) = text::delimiter(&decoded.text);
        let cells = if delimiter == b' ' {
            TextCells::new(blanks::with_tabs(&decoded.text, file)?, 0, b'\t')
        } else {
            TextCells::new(decoded.text, skipped, delimiter)
        };
        let cells = cells.map_err(|reason| match reason {
            Unreadable::OpenQuote(line) => Problem::error(
                Place::file(file).row(line),
                "a quotation mark is opened here and not closed",
            ),
            Unreadable::TooLarge => too_large(file),
        })?;
        Ok(Table {
            file: file.to_owned(),
            sheet: None,
            delimiter: Some(char::from(delimiter)),
            encoding: Some(decoded.encoding),
            cells: Cells::Text(cells),
        })
    }

    /// A sheet of a workbook.
    pub(super) fn of_sheet(file: &str, sheet: &str, cells: SheetCells) -> Self {
        Table {
            file: file.to_owned(),
            sheet: Some(sheet.to_owned()),
            delimiter: None,
            encoding: None,
            cells: Cells::Sheet(cells),
        }
    }
}

/// A trimmed text as a cell.
pub(super) fn text_cell(text: &str) -> Cell<'_> {
    if text.is_empty() {
        Cell::Empty
    } else {
        Cell::Text(text)
    }
}

pub(super) fn too_large(file: &str) -> Problem {
    Problem::error(Place::file(file), "the file holds more than 4 GiB of text")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::read::source::SourceFile;
    use chrono::NaiveDate;

    fn text(name: &str, text: &str) -> Result<Table, Problem> {
        Table::of_text(name, text::decode(text.as_bytes().to_vec()))
    }

    #[test]
    fn lines_keep_their_numbers_over_blank_lines_and_quotes() {
        let table = text(
            "a.csv",
            "title\r\n\r\n\r\nt,pv\r\n1,\"two\r\nlines\"\r\n\r\n2,3\r\n",
        )
        .expect("a table");
        let numbers: Vec<usize> = table.rows().map(|row| row.number).collect();
        assert_eq!(numbers, [1, 4, 5, 8]);
        assert_eq!(table.row(2).cell(1), Cell::Text("two\r\nlines"));
        assert_eq!(table.row(3).cell(7), Cell::Empty);
    }

    #[test]
    fn an_open_quotation_mark_is_named_where_it_opens() {
        let mut lines = "t,pv\n1,2\n3,\"4\n".to_owned();
        lines.push_str(&"5,6\n".repeat(100));
        let problem = text("a.csv", &lines).expect_err("an open quote");
        assert_eq!(
            problem.to_string(),
            "a.csv, line 3: a quotation mark is opened here and not closed"
        );
    }

    #[test]
    fn cells_of_a_workbook_keep_place_and_kind() {
        let mut book = rust_xlsxwriter::Workbook::new();
        let sheet = book.add_worksheet();
        sheet.set_name("Trend").expect("a name");
        let date = rust_xlsxwriter::Format::new().set_num_format("yyyy-mm-dd hh:mm:ss");
        let time = rust_xlsxwriter::Format::new().set_num_format("hh:mm:ss");
        sheet.write_string(3, 2, " Time ").expect("written");
        sheet
            .write_datetime_with_format(
                4,
                2,
                rust_xlsxwriter::ExcelDateTime::from_ymd(2026, 3, 14)
                    .and_then(|at| at.and_hms(9, 5, 0.5))
                    .expect("a date"),
                &date,
            )
            .expect("written");
        sheet.write_number(4, 3, 71.25).expect("written");
        sheet.write_boolean(4, 4, true).expect("written");
        sheet
            .write_number_with_format(5, 2, 0.5, &time)
            .expect("written");
        sheet
            .write_number_with_format(5, 3, 0.0, &time)
            .expect("written");
        let bytes = book.save_to_buffer().expect("a workbook");
        let file = SourceFile::from_bytes(bytes, "logs/a.xlsx").expect("readable");
        assert_eq!(file.sha256.len(), 64);
        let table = file.sheet("trend").expect("the sheet").expect("readable");
        assert_eq!(table.row(0).number, 4);
        assert_eq!(table.row(0).cell(0), Cell::Empty);
        assert_eq!(table.row(0).cell(2), Cell::Text("Time"));
        let at =
            NaiveDate::from_ymd_opt(2026, 3, 14).and_then(|d| d.and_hms_milli_opt(9, 5, 0, 500));
        assert_eq!(table.row(1).cell(2), Cell::Date(at.expect("a date")));
        assert_eq!(table.row(1).cell(3), Cell::Number(71.25));
        assert_eq!(table.row(1).cell(4), Cell::Boolean(true));
        assert_eq!(table.row(2).cell(2), Cell::Duration(43_200.0));
        assert_eq!(table.row(2).cell(2).text(), "12:00:00");
        assert_eq!(table.row(2).cell(3), Cell::Duration(0.0));
    }

    #[test]
    fn durations_of_open_documents_are_read() {
        assert_eq!(crate::read::iso::duration_s("PT09H05M00S"), Some(32_700.0));
        assert_eq!(crate::read::iso::duration_s("P1DT0H0M0.5S"), Some(86_400.5));
        assert_eq!(crate::read::iso::duration_s("P1M"), None);
        assert_eq!(
            crate::read::iso::date("2026-03-14"),
            crate::read::iso::date("2026-03-14T00:00:00")
        );
    }
}

//! Sheets of workbooks and delimited text as tables of located cells.

use super::blanks;
use super::guard::guarded;
use super::text;
use crate::notice::{Place, Problem};
use calamine::{Data, DataRef, ExcelDateTime, Reader, Sheets};
use chrono::{NaiveDateTime, NaiveTime};
use std::io::Cursor;

/// A text record over more lines than this has a quotation mark that was never closed.
const LINES_PER_RECORD: usize = 50;

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

/// A cell as it is kept: text lies in one string for the whole table.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Stored {
    Empty,
    Text { start: u32, end: u32 },
    Number(f64),
    Boolean(bool),
    Date(NaiveDateTime),
    Duration(f64),
    Error(&'static str),
}

/// A row: where its cells begin, and its number in the sheet or its line in the file.
#[derive(Debug, Clone, Copy)]
struct RowAt {
    number: usize,
    first_cell: usize,
}

/// A sheet of a workbook or a delimited text file: rows of cells in order, empty rows left out,
/// every cell at its own column from the left edge of the sheet.
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
    text: String,
    cells: Vec<Stored>,
    rows: Vec<RowAt>,
    width: usize,
}

/// One row of a table.
#[derive(Debug, Clone, Copy)]
pub struct Row<'a> {
    table: &'a Table,
    cells: &'a [Stored],
    /// Row of the sheet or line of the file, 1 for the first.
    pub number: usize,
}

impl<'a> Row<'a> {
    /// The cell in a column, 0 for the first; empty beyond the end of the row.
    pub fn cell(self, column: usize) -> Cell<'a> {
        match self.cells.get(column) {
            None | Some(Stored::Empty) => Cell::Empty,
            Some(Stored::Text { start, end }) => {
                Cell::Text(&self.table.text[*start as usize..*end as usize])
            }
            Some(Stored::Number(number)) => Cell::Number(*number),
            Some(Stored::Boolean(value)) => Cell::Boolean(*value),
            Some(Stored::Date(at)) => Cell::Date(*at),
            Some(Stored::Duration(seconds)) => Cell::Duration(*seconds),
            Some(Stored::Error(error)) => Cell::Error(error),
        }
    }

    /// All cells up to the last one of the row.
    pub fn cells(self) -> impl Iterator<Item = Cell<'a>> {
        (0..self.cells.len()).map(move |column| self.cell(column))
    }

    /// Number of cells up to the last one.
    pub fn width(self) -> usize {
        self.cells.len()
    }
}

impl Table {
    /// A table to fill row by row.
    fn new(file: &str, sheet: Option<&str>) -> Self {
        Table {
            file: file.to_owned(),
            sheet: sheet.map(str::to_owned),
            delimiter: None,
            encoding: None,
            text: String::new(),
            cells: Vec::new(),
            rows: Vec::new(),
            width: 0,
        }
    }

    /// Number of rows that hold anything.
    pub fn len(&self) -> usize {
        self.rows.len()
    }

    /// Whether no cell holds anything.
    pub fn is_empty(&self) -> bool {
        self.rows.is_empty()
    }

    /// Number of columns up to the last one that holds anything.
    pub fn width(&self) -> usize {
        self.width
    }

    /// The n-th row that holds anything, 0 for the first.
    pub fn row(&self, index: usize) -> Row<'_> {
        let at = self.rows[index];
        let end = self
            .rows
            .get(index + 1)
            .map_or(self.cells.len(), |next| next.first_cell);
        Row {
            table: self,
            cells: &self.cells[at.first_cell..end],
            number: at.number,
        }
    }

    /// All rows that hold anything.
    pub fn rows(&self) -> impl Iterator<Item = Row<'_>> {
        (0..self.len()).map(|index| self.row(index))
    }

    /// The table as a place.
    pub fn place(&self) -> Place {
        let place = Place::file(&self.file);
        match &self.sheet {
            Some(sheet) => place.sheet(sheet),
            None => place,
        }
    }

    fn begin_row(&mut self, number: usize) {
        self.rows.push(RowAt {
            number,
            first_cell: self.cells.len(),
        });
    }

    /// Ends the row begun last; a row without anything in it is taken back.
    fn end_row(&mut self) {
        let Some(row) = self.rows.last().copied() else {
            return;
        };
        while self.cells.len() > row.first_cell && self.cells.last() == Some(&Stored::Empty) {
            self.cells.pop();
        }
        if self.cells.len() == row.first_cell {
            self.rows.pop();
        } else {
            self.width = self.width.max(self.cells.len() - row.first_cell);
        }
    }

    /// Keeps a text; `None` where the texts of the table grow beyond 4 GiB.
    fn store_text(&mut self, text: &str) -> Option<Stored> {
        let text = text.trim_matches(|letter: char| letter.is_whitespace() || letter == '\u{feff}');
        if text.is_empty() {
            return Some(Stored::Empty);
        }
        let start = u32::try_from(self.text.len()).ok()?;
        let end = u32::try_from(self.text.len() + text.len()).ok()?;
        self.text.push_str(text);
        Some(Stored::Text { start, end })
    }

    /// A delimited text file.
    pub(super) fn from_text(file: &str, bytes: &[u8]) -> Result<Self, Problem> {
        let decoded = text::decode(bytes);
        let (delimiter, skipped) = text::delimiter(&decoded.text);
        let body = &decoded.text[skipped..];
        let mut table = Table::new(file, None);
        table.delimiter = Some(char::from(delimiter));
        table.encoding = Some(decoded.encoding);
        if delimiter == b' ' {
            return table.filled_from_blanks(body);
        }
        let mut reader = csv::ReaderBuilder::new()
            .delimiter(delimiter)
            .has_headers(false)
            .flexible(true)
            .from_reader(body.as_bytes());
        let mut record = csv::StringRecord::new();
        let mut line = 1 + decoded.text[..skipped].matches('\n').count();
        let mut counted_to = 0;
        loop {
            match reader.read_record(&mut record) {
                Ok(true) => {}
                Ok(false) => break,
                Err(error) => {
                    return Err(Problem::error(
                        Place::file(file).row(line),
                        format!("the line cannot be read: {error}"),
                    ));
                }
            }
            // Blank lines before the record belong to no record: the line is counted from the bytes.
            let from = record
                .position()
                .map_or(counted_to, |position| position.byte() as usize);
            let begins = from
                + body[from..]
                    .bytes()
                    .take_while(|byte| matches!(byte, b'\r' | b'\n'))
                    .count();
            line += count_lines(&body[counted_to..begins]);
            counted_to = begins;
            let ends = reader.position().byte() as usize;
            if count_lines(&body[begins..ends]) > LINES_PER_RECORD {
                return Err(Problem::error(
                    Place::file(file).row(line),
                    "a quotation mark is opened here and not closed",
                ));
            }
            table.begin_row(line);
            for field in &record {
                let stored = table.store_text(field).ok_or_else(|| too_large(file))?;
                table.cells.push(stored);
            }
            table.end_row();
        }
        Ok(table)
    }

    /// The lines of a text whose columns white space sets apart.
    fn filled_from_blanks(mut self, text: &str) -> Result<Self, Problem> {
        for line in blanks::lines(text, &self.file)? {
            self.begin_row(line.number);
            for cell in line.cells {
                let stored = self.store_text(cell).ok_or_else(|| too_large(&self.file))?;
                self.cells.push(stored);
            }
            self.end_row();
        }
        Ok(self)
    }

    /// A sheet from its cells in any order; positions count from 0 at A1.
    fn from_cells(
        file: &str,
        sheet: &str,
        mut cells: Vec<(u32, u32, Owned)>,
    ) -> Result<Self, Problem> {
        if !cells.is_sorted_by_key(|(row, column, _)| (*row, *column)) {
            cells.sort_by_key(|(row, column, _)| (*row, *column));
        }
        let mut table = Table::new(file, Some(sheet));
        let mut current = None;
        for (row, column, value) in cells {
            if current != Some(row) {
                table.end_row();
                table.begin_row(row as usize + 1);
                current = Some(row);
            }
            let stored = match value {
                Owned::Text(text) => table.store_text(&text).ok_or_else(|| too_large(file))?,
                Owned::Other(stored) => stored,
            };
            let begins = table.rows.last().map_or(0, |row| row.first_cell);
            let place = begins + column as usize;
            if place < table.cells.len() {
                table.cells[place] = stored;
            } else {
                table.cells.resize(place, Stored::Empty);
                table.cells.push(stored);
            }
        }
        table.end_row();
        Ok(table)
    }
}

fn count_lines(text: &str) -> usize {
    text.bytes().filter(|byte| *byte == b'\n').count()
}

fn too_large(file: &str) -> Problem {
    Problem::error(Place::file(file), "the file holds more than 4 GiB of text")
}

/// A cell on its way from a workbook into a table.
enum Owned {
    Text(String),
    Other(Stored),
}

/// The sheets of a workbook.
pub(super) fn workbook_tables(
    bytes: Vec<u8>,
    name: &str,
    ending: &str,
) -> Result<Vec<Table>, Problem> {
    let unreadable = |reason: String| {
        Problem::error(
            Place::file(name),
            format!("the file is not a readable .{ending} workbook: {reason}"),
        )
        .hint("open it in a spreadsheet program and save it again")
    };
    // A workbook damaged on the way may break the reading library's own expectations: that is a
    // problem of this one file and must not end the run.
    guarded(|| read_workbook(bytes, name, ending))
        .unwrap_or_else(|| Err(ReadError::Workbook("it is damaged".to_owned())))
        .map_err(|error| match error {
            ReadError::Workbook(reason) => unreadable(reason),
            ReadError::Problem(problem) => problem,
        })
}

enum ReadError {
    Workbook(String),
    Problem(Problem),
}

impl<E: std::error::Error> From<E> for ReadError {
    fn from(error: E) -> Self {
        ReadError::Workbook(error.to_string())
    }
}

fn read_workbook(bytes: Vec<u8>, name: &str, ending: &str) -> Result<Vec<Table>, ReadError> {
    let bytes = Cursor::new(bytes);
    let mut workbook = match ending {
        "xls" => Sheets::Xls(calamine::Xls::new(bytes)?),
        "xlsb" => Sheets::Xlsb(calamine::Xlsb::new(bytes)?),
        "ods" => Sheets::Ods(calamine::Ods::new(bytes)?),
        _ => Sheets::Xlsx(calamine::Xlsx::new(bytes)?),
    };
    let sheets: Vec<String> = workbook
        .sheets_metadata()
        .iter()
        .filter(|sheet| sheet.typ == calamine::SheetType::WorkSheet)
        .map(|sheet| sheet.name.clone())
        .collect();
    let mut tables = Vec::with_capacity(sheets.len());
    for sheet in sheets {
        let mut cells = Vec::new();
        // The streaming readers never lay out the whole rectangle of a sheet, which a single
        // stray cell at its far corner would make too large for memory.
        match &mut workbook {
            Sheets::Xlsx(book) => {
                let mut reader = book.worksheet_cells_reader(&sheet)?;
                while let Some(cell) = reader.next_cell()? {
                    push_cell(&mut cells, cell.get_position(), cell.get_value());
                }
            }
            Sheets::Xlsb(book) => {
                let mut reader = book.worksheet_cells_reader(&sheet)?;
                while let Some(cell) = reader.next_cell()? {
                    push_cell(&mut cells, cell.get_position(), cell.get_value());
                }
            }
            other => {
                let range = other.worksheet_range(&sheet)?;
                let (first_row, first_column) = range.start().unwrap_or((0, 0));
                for (row, column, value) in range.used_cells() {
                    let position = (first_row + row as u32, first_column + column as u32);
                    push_cell(&mut cells, position, &borrowed(value));
                }
            }
        }
        tables.push(Table::from_cells(name, &sheet, cells).map_err(ReadError::Problem)?);
    }
    Ok(tables)
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

fn push_cell(cells: &mut Vec<(u32, u32, Owned)>, position: (u32, u32), value: &DataRef<'_>) {
    let value = match value {
        DataRef::Empty => return,
        DataRef::Int(number) => Owned::Other(Stored::Number(*number as f64)),
        DataRef::Float(number) => Owned::Other(Stored::Number(*number)),
        DataRef::String(text) => Owned::Text(text.clone()),
        DataRef::SharedString(text) => Owned::Text((*text).to_owned()),
        DataRef::Bool(value) => Owned::Other(Stored::Boolean(*value)),
        DataRef::DateTime(at) => Owned::Other(date_cell(at)),
        DataRef::DateTimeIso(text) => super::iso::date(text).map_or_else(
            || Owned::Text(text.clone()),
            |at| Owned::Other(Stored::Date(at)),
        ),
        DataRef::DurationIso(text) => super::iso::duration_s(text).map_or_else(
            || Owned::Text(text.clone()),
            |seconds| Owned::Other(Stored::Duration(seconds)),
        ),
        DataRef::Error(error) => Owned::Other(Stored::Error(error_text(error))),
    };
    cells.push((position.0, position.1, value));
}

/// A date cell: below one day it is a time of day, which has no date.
fn date_cell(at: &ExcelDateTime) -> Stored {
    let days = at.as_f64();
    if at.is_duration() || (0.0..1.0).contains(&days) {
        // To the microsecond: a serial number holds no more than that.
        return Stored::Duration(libm::round(days * 86_400.0e6) / 1e6);
    }
    if !(1.0..2_958_466.0).contains(&days) {
        return Stored::Number(days);
    }
    at.as_datetime().map_or(Stored::Number(days), Stored::Date)
}

fn error_text(error: &calamine::CellErrorType) -> &'static str {
    use calamine::CellErrorType as Kind;
    match error {
        Kind::Div0 => "#DIV/0!",
        Kind::NA => "#N/A",
        Kind::Name => "#NAME?",
        Kind::Null => "#NULL!",
        Kind::Num => "#NUM!",
        Kind::Ref => "#REF!",
        Kind::Value => "#VALUE!",
        Kind::GettingData => "#DATA!",
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::read::source::SourceFile;
    use chrono::NaiveDate;

    fn text(name: &str, text: &str) -> Result<Table, Problem> {
        SourceFile::from_bytes(text.as_bytes().to_vec(), name).map(|mut file| file.tables.remove(0))
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
        let table = file.sheet("trend").expect("the sheet");
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

//! Delimited text as it is kept: the text itself and where its rows begin.
//!
//! A text is about as compact as the numbers in it, so it is kept as it was read and each loop takes its
//! columns from it; a cell is found by its row and the delimiters before it. Marks that quote a field are
//! understood as the csv crate does.

use super::rows::RowNumbers;
use std::collections::BTreeMap;

/// A record over more lines than this has a quotation mark that was never closed.
const LINES_PER_RECORD: usize = 50;
/// In rows wider than this each so many cells' place is kept, so that none is far to find.
const CELLS_PER_PLACE: usize = 16;

/// Why a text does not make rows.
#[derive(Debug, PartialEq, Eq)]
pub(super) enum Unreadable {
    /// A quotation mark is opened in this line and not closed.
    OpenQuote(usize),
    /// Its places do not fit four bytes.
    TooLarge,
}

/// The rows of a delimited text that hold anything.
#[derive(Debug)]
pub(super) struct TextCells {
    text: String,
    delimiter: u8,
    /// Whether a quotation mark stands anywhere.
    quoted: bool,
    /// Where each row begins.
    starts: Vec<u32>,
    numbers: RowNumbers,
    width: usize,
    /// Where every [`CELLS_PER_PLACE`]th cell of a row begins, for all rows, and where in that list each
    /// row's begin. Both empty where no row is that wide.
    places: Vec<u32>,
    places_of_row: Vec<u32>,
    /// Quoted fields whose text does not stand in the file as it reads, by where they begin.
    unquoted: BTreeMap<u32, String>,
}

/// A field: where its text stands, and where what ends it.
struct Field {
    from: usize,
    to: usize,
    /// The delimiter, the line's end or the end of the text.
    end: usize,
    is_last: bool,
    /// Whether marks stand within it.
    has_marks: bool,
}

impl TextCells {
    /// Finds the rows of `text`, the first `skipped` bytes left out.
    pub fn new(text: String, skipped: usize, delimiter: u8) -> Result<Self, Unreadable> {
        if u32::try_from(text.len()).is_err() {
            return Err(Unreadable::TooLarge);
        }
        let quoted = memchr::memchr(b'"', text.as_bytes()).is_some();
        let mut cells = TextCells {
            text,
            delimiter,
            quoted,
            starts: Vec::new(),
            numbers: RowNumbers::default(),
            width: 0,
            places: Vec::new(),
            places_of_row: Vec::new(),
            unquoted: BTreeMap::new(),
        };
        if cells.is_simple() {
            cells.find_lines(skipped);
        } else {
            cells.find_rows(skipped)?;
        }
        cells.starts.shrink_to_fit();
        cells.places.shrink_to_fit();
        Ok(cells)
    }

    /// Whether every line is a row and every delimiter ends a cell.
    fn is_simple(&self) -> bool {
        let bytes = self.text.as_bytes();
        let ends_line = |at: usize| bytes.get(at + 1) == Some(&b'\n');
        !self.quoted && memchr::memchr_iter(b'\r', bytes).all(ends_line)
    }

    /// Finds the rows of a text whose lines they are.
    fn find_lines(&mut self, skipped: usize) {
        let text = std::mem::take(&mut self.text);
        let bytes = text.as_bytes();
        let mut line = 1 + memchr::memchr_iter(b'\n', &bytes[..skipped]).count();
        let mut begins = skipped;
        while begins < bytes.len() {
            let end =
                memchr::memchr(b'\n', &bytes[begins..]).map_or(bytes.len(), |past| begins + past);
            let row = bytes[begins..end]
                .strip_suffix(b"\r")
                .unwrap_or(&bytes[begins..end]);
            let delimiters = memchr::memchr_iter(self.delimiter, row).count();
            let is_full = row
                .last()
                .is_some_and(|last| last.is_ascii_graphic() && *last != self.delimiter);
            let filled = if is_full {
                delimiters + 1
            } else {
                let cells = text[begins..begins + row.len()].split(char::from(self.delimiter));
                let is_filled = |(_, cell): &(usize, &str)| !trimmed(cell).is_empty();
                cells
                    .enumerate()
                    .filter(is_filled)
                    .last()
                    .map_or(0, |(column, _)| column + 1)
            };
            if filled > 0 {
                let places = self.places.len();
                if delimiters >= CELLS_PER_PLACE {
                    let ends = memchr::memchr_iter(self.delimiter, row);
                    let behind = ends.skip(CELLS_PER_PLACE - 1).step_by(CELLS_PER_PLACE);
                    self.places
                        .extend(behind.map(|end| (begins + end + 1) as u32));
                }
                self.add_row(begins, line, filled, places);
            }
            begins = end + 1;
            line += 1;
        }
        self.text = text;
    }

    /// Adds a row; its kept places were added from the `places`th on.
    fn add_row(&mut self, begins: usize, line: usize, filled: usize, places: usize) {
        self.width = self.width.max(filled);
        self.numbers.push(self.starts.len(), line);
        if !self.places.is_empty() {
            // No row before the first wide one has places.
            self.places_of_row.resize(self.starts.len(), 0);
            self.places_of_row.push(places as u32);
        }
        self.starts.push(begins as u32);
    }

    /// Finds the rows of any text.
    fn find_rows(&mut self, skipped: usize) -> Result<(), Unreadable> {
        let lines_in = |text: &[u8]| memchr::memchr_iter(b'\n', text).count();
        let length = self.text.len();
        let mut line = 1 + lines_in(&self.text.as_bytes()[..skipped]);
        let mut at = skipped;
        while at < length {
            match self.text.as_bytes()[at] {
                b'\n' => {
                    line += 1;
                    at += 1;
                    continue;
                }
                b'\r' => {
                    at += 1;
                    continue;
                }
                _ => {}
            }
            let begins = at;
            let places = self.places.len();
            let (mut column, mut filled) = (0, 0);
            let end = loop {
                let field = self.field(at);
                if field.has_marks {
                    let read = without_marks(&self.text[at..field.end]);
                    self.unquoted.insert(at as u32, read);
                }
                if column > 0 && column % CELLS_PER_PLACE == 0 {
                    self.places.push(at as u32);
                }
                column += 1;
                if !self.content(&field, at).is_empty() {
                    filled = column;
                }
                if field.is_last {
                    break field.end;
                }
                at = field.end + 1;
            };
            at = (end + 1).min(length);
            let lines = if self.quoted {
                lines_in(&self.text.as_bytes()[begins..at])
            } else {
                usize::from(self.text.as_bytes().get(end) == Some(&b'\n'))
            };
            if lines > LINES_PER_RECORD {
                return Err(Unreadable::OpenQuote(line));
            }
            if filled == 0 {
                self.places.truncate(places);
            } else {
                self.add_row(begins, line, filled, places);
            }
            line += lines;
        }
        Ok(())
    }

    /// The field that begins at `at`.
    fn field(&self, at: usize) -> Field {
        let bytes = self.text.as_bytes();
        let ending = |from: usize| {
            memchr::memchr3(self.delimiter, b'\n', b'\r', &bytes[from..])
                .map_or(bytes.len(), |past| from + past)
        };
        let is_last = |end: usize| bytes.get(end) != Some(&self.delimiter);
        if !self.quoted || bytes.get(at) != Some(&b'"') {
            let end = ending(at);
            return Field {
                from: at,
                to: end,
                end,
                is_last: is_last(end),
                has_marks: false,
            };
        }
        let mut doubled = false;
        let mut closed = at + 1;
        loop {
            closed =
                memchr::memchr(b'"', &bytes[closed..]).map_or(bytes.len(), |past| closed + past);
            if bytes.get(closed + 1) != Some(&b'"') {
                break;
            }
            doubled = true;
            closed += 2;
        }
        let closed = closed.min(bytes.len());
        let end = ending((closed + 1).min(bytes.len()));
        Field {
            from: at + 1,
            to: closed,
            end,
            is_last: is_last(end),
            has_marks: doubled || end > closed + 1,
        }
    }

    /// The trimmed text of a field that begins at `at`.
    fn content(&self, field: &Field, at: usize) -> &str {
        let text = if field.has_marks {
            &self.unquoted[&(at as u32)]
        } else {
            &self.text[field.from..field.to]
        };
        trimmed(text)
    }

    /// Number of rows.
    pub fn len(&self) -> usize {
        self.starts.len()
    }

    /// Number of columns up to the last one that holds anything.
    pub fn width(&self) -> usize {
        self.width
    }

    /// Line of a row, 1 for the first.
    pub fn number(&self, row: usize) -> usize {
        self.numbers.get(row)
    }

    /// Number of cells of a row up to the last one that holds anything.
    pub fn width_of(&self, row: usize) -> usize {
        let mut at = self.starts[row] as usize;
        let (mut column, mut filled) = (0, 0);
        loop {
            let field = self.field(at);
            column += 1;
            if !self.content(&field, at).is_empty() {
                filled = column;
            }
            if field.is_last {
                return filled;
            }
            at = field.end + 1;
        }
    }

    /// The kept place nearest before a cell: its column and where it begins. `None` where the row ends
    /// before it.
    fn place_before(&self, row: usize, column: usize) -> Option<(usize, usize)> {
        let passed = column / CELLS_PER_PLACE;
        if passed == 0 {
            return Some((0, self.starts[row] as usize));
        }
        let first = *self.places_of_row.get(row)? as usize;
        let end = self
            .places_of_row
            .get(row + 1)
            .map_or(self.places.len(), |next| *next as usize);
        let place = self.places[first..end].get(passed - 1)?;
        Some((passed * CELLS_PER_PLACE, *place as usize))
    }

    /// The fields of a row, from the first on.
    #[inline]
    pub fn fields(&self, row: usize) -> Fields<'_> {
        Fields {
            cells: self,
            row,
            column: 0,
            at: self.starts[row] as usize,
            is_over: false,
        }
    }

    /// The trimmed text of a cell; empty beyond the end of the row.
    pub fn text(&self, row: usize, column: usize) -> &str {
        let mut fields = self.fields(row);
        if fields.go_to(column) {
            fields.take()
        } else {
            ""
        }
    }
}

/// Fields of a row, one after the other.
pub(super) struct Fields<'a> {
    cells: &'a TextCells,
    row: usize,
    /// The field that comes next, and where it begins.
    column: usize,
    at: usize,
    is_over: bool,
}

impl<'a> Fields<'a> {
    /// Goes on to a column that was not passed yet; false where the row ends before it.
    #[inline]
    pub fn go_to(&mut self, column: usize) -> bool {
        if self.is_over {
            return false;
        }
        if column / CELLS_PER_PLACE > self.column / CELLS_PER_PLACE {
            match self.cells.place_before(self.row, column) {
                Some(place) => (self.column, self.at) = place,
                None => self.is_over = true,
            }
        }
        while self.column < column && !self.is_over {
            let field = self.cells.field(self.at);
            self.step_over(field.end, field.is_last);
        }
        !self.is_over
    }

    #[inline]
    fn step_over(&mut self, end: usize, is_last: bool) {
        self.column += 1;
        self.at = end + 1;
        self.is_over = is_last;
    }

    /// The text from the next field on.
    #[inline]
    pub fn rest(&self) -> &'a [u8] {
        &self.cells.text.as_bytes()[self.at..]
    }

    /// Sign between the fields.
    #[inline]
    pub fn delimiter(&self) -> u8 {
        self.cells.delimiter
    }

    /// Goes past the next field if it is `length` bytes long, and says whether it is. That it begins with
    /// no quotation mark and holds no delimiter is known.
    #[inline]
    pub fn pass(&mut self, length: usize) -> bool {
        let end = self.at + length;
        let ending = self.cells.text.as_bytes().get(end).copied();
        let is_end = match ending {
            None | Some(b'\n' | b'\r') => true,
            Some(byte) => byte == self.cells.delimiter,
        };
        if is_end {
            self.step_over(end, ending != Some(self.cells.delimiter));
        }
        is_end
    }

    /// The trimmed text of the next field, which is passed.
    pub fn take(&mut self) -> &'a str {
        let field = self.cells.field(self.at);
        let text = self.cells.content(&field, self.at);
        self.step_over(field.end, field.is_last);
        text
    }
}

/// A text without white space and byte order marks at its ends.
pub(super) fn trimmed(text: &str) -> &str {
    let is_plain = |byte: Option<&u8>| byte.is_some_and(|byte| byte.is_ascii_graphic());
    let bytes = text.as_bytes();
    if is_plain(bytes.first()) && is_plain(bytes.last()) {
        return text;
    }
    text.trim_matches(|letter: char| letter.is_whitespace() || letter == '\u{feff}')
}

/// What a quoted field reads: a doubled mark stands for one, what follows the closing mark for itself.
fn without_marks(field: &str) -> String {
    let mut read = String::with_capacity(field.len());
    let mut rest = field.strip_prefix('"').unwrap_or(field);
    while let Some((before, after)) = rest.split_once('"') {
        read.push_str(before);
        match after.strip_prefix('"') {
            Some(inside) => {
                read.push('"');
                rest = inside;
            }
            None => {
                read.push_str(after);
                return read;
            }
        }
    }
    read.push_str(rest);
    read
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn cells(text: &str) -> TextCells {
        TextCells::new(text.to_owned(), 0, b',').expect("rows")
    }

    fn fields(cells: &TextCells) -> Vec<Vec<String>> {
        let row = |row| {
            let mut fields = cells.fields(row);
            let text = |column| {
                assert!(fields.go_to(column));
                fields.take().to_owned()
            };
            (0..cells.width_of(row)).map(text).collect()
        };
        (0..cells.len()).map(row).collect()
    }

    /// The same from the csv crate: each field trimmed, empty ones at the end of a row left out, empty
    /// rows left out.
    fn by_the_csv_crate(text: &str) -> Vec<Vec<String>> {
        let mut reader = csv::ReaderBuilder::new()
            .has_headers(false)
            .flexible(true)
            .from_reader(text.as_bytes());
        let rows = reader.records().map(|record| {
            let record = record.expect("text");
            let mut row: Vec<String> = record.iter().map(|f| trimmed(f).to_owned()).collect();
            while row.last().is_some_and(String::is_empty) {
                row.pop();
            }
            row
        });
        rows.filter(|row| !row.is_empty()).collect()
    }

    proptest! {
        #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

        #[test]
        fn any_text_has_the_fields_that_the_csv_crate_finds(text in "[a\", \r\n°]{0,60}") {
            prop_assert_eq!(fields(&cells(&text)), by_the_csv_crate(&text));
        }

        #[test]
        fn lines_without_quotation_marks_are_found_alike(text in "([a, °]{0,12}\r?\n){0,8}[a, ]{0,9}") {
            let simple = cells(&text);
            prop_assert_eq!(fields(&simple), by_the_csv_crate(&text));
            let mut other = cells("");
            other.text = text;
            other.find_rows(0).expect("rows");
            prop_assert_eq!(&simple.starts, &other.starts);
            prop_assert_eq!(simple.width, other.width);
            let numbers = |cells: &TextCells| (0..cells.len()).map(|row| cells.number(row)).collect::<Vec<_>>();
            prop_assert_eq!(numbers(&simple), numbers(&other));
        }

        #[test]
        fn any_cell_of_a_wide_row_is_found_alone(widths in prop::collection::vec(0_usize..70, 1..6)) {
            let row = |width: &usize| (0..*width).map(|k| k.to_string()).collect::<Vec<_>>().join(",");
            let text = widths.iter().map(row).collect::<Vec<_>>().join("\n");
            let cells = cells(&text);
            let filled = widths.iter().filter(|width| **width > 0);
            for (index, width) in filled.enumerate() {
                for column in 0..75 {
                    let expected = if column < *width { column.to_string() } else { String::new() };
                    prop_assert_eq!(cells.text(index, column), expected);
                }
                let mut fields = cells.fields(index);
                for column in [3, 15, 16, 40, 74] {
                    let found = if fields.go_to(column) { fields.take() } else { "" };
                    prop_assert_eq!(found, cells.text(index, column));
                }
            }
        }
    }

    #[test]
    fn a_row_of_a_plain_log_costs_four_bytes_beside_its_text() {
        let cells = cells(&"2026-03-14T09:05:00,71.2,40,70\n".repeat(10_000));
        assert_eq!(cells.starts.capacity(), 10_000);
        assert_eq!(size_of_val(&cells.starts[0]), 4);
        assert!(cells.places.is_empty() && cells.places_of_row.is_empty());
        assert!(cells.unquoted.is_empty());
        assert_eq!(cells.number(9_999), 10_000);
    }
}

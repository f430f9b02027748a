//! Workbooks: real dates, serial numbers and text, wherever on the sheet the log begins.

use super::{CellText, Column, Figures, Sample, Truth, holds, read_or_told, told, truth};
use proptest::prelude::*;
use rust_xlsxwriter::{Format, Workbook, Worksheet};
use std::fmt::Write as _;
use std::io::{Cursor, Write as _};
use zip::write::{SimpleFileOptions, ZipWriter};

/// How moments stand in a workbook.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Moments {
    /// Real dates with their time of day.
    Dates,
    /// A real date, and a real time of day beside it.
    Apart,
    /// Serial numbers without the format of a date.
    Serial,
    /// Text.
    Text,
}

/// How a workbook is written.
#[derive(Debug, Clone)]
struct Form {
    moments: Moments,
    /// Rows above and columns before the log.
    offset: (u32, u16),
    title: bool,
    units: bool,
    /// Another sheet before that holds no log.
    cover: bool,
}

fn form() -> impl Strategy<Value = Form> {
    let moments = prop::sample::select(vec![
        Moments::Dates,
        Moments::Apart,
        Moments::Serial,
        Moments::Text,
    ]);
    let offset = (0_u32..6, 0_u16..30);
    (moments, offset, any::<bool>(), any::<bool>(), any::<bool>()).prop_map(
        |(moments, offset, title, units, cover)| Form {
            moments,
            offset,
            title,
            units,
            cover,
        },
    )
}

/// Days since 1899-12-30.
fn serial(ms: i64) -> f64 {
    ms as f64 / 86_400_000.0 + 25_569.0
}

impl Form {
    fn time_headings(&self) -> &'static [&'static str] {
        match self.moments {
            Moments::Apart => &["Date", "Time"],
            _ => &["Timestamp"],
        }
    }

    fn xlsx(&self, truth: &Truth) -> Vec<u8> {
        let mut book = Workbook::new();
        if self.cover {
            let sheet = book.add_worksheet();
            sheet
                .write_string(0, 0, "Exported for unit 200")
                .expect("written");
        }
        let sheet = book.add_worksheet();
        let (mut row, first) = self.offset;
        if self.title {
            sheet.write_string(row, first, "Trend").expect("written");
            row += 2;
        }
        let columns = truth.columns(self.units);
        let times = self.time_headings();
        let headings = times
            .iter()
            .copied()
            .chain(columns.iter().map(|(text, _)| text.as_str()));
        for (column, heading) in headings.enumerate() {
            sheet
                .write_string(row, first + column as u16, heading)
                .expect("written");
        }
        for sample in &truth.samples {
            row += 1;
            self.write_time(sheet, row, first, truth, sample);
            for (k, (_, column)) in columns.iter().enumerate() {
                let at = first + (times.len() + k) as u16;
                match column.cell(sample) {
                    CellText::Number(figures) => sheet.write_number(row, at, figures.value()),
                    CellText::Text("") => continue,
                    CellText::Text(text) => sheet.write_string(row, at, text),
                }
                .expect("written");
            }
        }
        book.save_to_buffer().expect("a workbook")
    }

    fn write_time(
        &self,
        sheet: &mut Worksheet,
        row: u32,
        first: u16,
        truth: &Truth,
        sample: &Sample,
    ) {
        let format = |pattern: &str| Format::new().set_num_format(pattern);
        let ms = truth.start_ms + sample.at_ms;
        let days = ms.div_euclid(86_400_000) * 86_400_000;
        match self.moments {
            Moments::Dates => {
                let pattern = format("yyyy-mm-dd hh:mm:ss.000");
                sheet
                    .write_number_with_format(row, first, serial(ms), &pattern)
                    .expect("written");
            }
            Moments::Apart => {
                let (date, time) = (format("dd/mm/yyyy"), format("hh:mm:ss.000"));
                sheet
                    .write_number_with_format(row, first, serial(days), &date)
                    .expect("written");
                let of_day = (ms - days) as f64 / 86_400_000.0;
                sheet
                    .write_number_with_format(row, first + 1, of_day, &time)
                    .expect("written");
            }
            Moments::Serial => {
                sheet.write_number(row, first, serial(ms)).expect("written");
            }
            Moments::Text => {
                let text = truth.at(sample).format("%Y-%m-%d %H:%M:%S%.3f").to_string();
                sheet.write_string(row, first, text).expect("written");
            }
        }
    }

    /// The same as an open document.
    fn ods(&self, truth: &Truth) -> Vec<u8> {
        let (rows, first) = self.offset;
        let before = match first {
            0 => String::new(),
            _ => format!("<table:table-cell table:number-columns-repeated=\"{first}\"/>"),
        };
        let mut table = String::new();
        if rows > 0 {
            write!(table, "<table:table-row table:number-rows-repeated=\"{rows}\"><table:table-cell/></table:table-row>")
                .expect("a string takes any text");
        }
        let columns = truth.columns(self.units);
        let headings = self
            .time_headings()
            .iter()
            .copied()
            .chain(columns.iter().map(|(text, _)| text.as_str()));
        let headings: String = headings.map(text_cell).collect();
        write!(
            table,
            "<table:table-row>{before}{headings}</table:table-row>"
        )
        .expect("a string");
        for sample in &truth.samples {
            let mut cells = self.ods_time(truth, sample);
            for (_, column) in &columns {
                cells.push_str(&ods_cell(*column, sample));
            }
            write!(table, "<table:table-row>{before}{cells}</table:table-row>").expect("a string");
        }
        open_document(&table)
    }

    fn ods_time(&self, truth: &Truth, sample: &Sample) -> String {
        let at = truth.at(sample);
        let date = |text: String| {
            format!("<table:table-cell office:value-type=\"date\" office:date-value=\"{text}\"/>")
        };
        match self.moments {
            Moments::Dates => date(at.format("%Y-%m-%dT%H:%M:%S%.3f").to_string()),
            Moments::Apart => {
                let time = at.format("PT%HH%MM%S%.3fS");
                format!(
                    "{}<table:table-cell office:value-type=\"time\" office:time-value=\"{time}\"/>",
                    date(at.format("%Y-%m-%d").to_string())
                )
            }
            Moments::Serial => float_cell(serial(truth.start_ms + sample.at_ms)),
            Moments::Text => text_cell(&at.format("%Y-%m-%d %H:%M:%S%.3f").to_string()),
        }
    }
}

fn text_cell(text: &str) -> String {
    format!(
        "<table:table-cell office:value-type=\"string\"><text:p>{text}</text:p></table:table-cell>"
    )
}

fn float_cell(value: f64) -> String {
    format!("<table:table-cell office:value-type=\"float\" office:value=\"{value}\"/>")
}

fn ods_cell(column: Column, sample: &Sample) -> String {
    match column.cell(sample) {
        CellText::Number(figures) => float_cell(Figures::value(figures)),
        CellText::Text("") => "<table:table-cell/>".to_owned(),
        CellText::Text(text) => text_cell(text),
    }
}

/// An open document with one sheet of these rows.
pub(super) fn open_document(rows: &str) -> Vec<u8> {
    let content = format!(
        "<?xml version=\"1.0\" encoding=\"UTF-8\"?><office:document-content \
         xmlns:office=\"urn:oasis:names:tc:opendocument:xmlns:office:1.0\" \
         xmlns:table=\"urn:oasis:names:tc:opendocument:xmlns:table:1.0\" \
         xmlns:text=\"urn:oasis:names:tc:opendocument:xmlns:text:1.0\"><office:body>\
         <office:spreadsheet><table:table table:name=\"Trend\">{rows}</table:table>\
         </office:spreadsheet></office:body></office:document-content>"
    );
    let mut archive = ZipWriter::new(Cursor::new(Vec::new()));
    let stored = SimpleFileOptions::default().compression_method(zip::CompressionMethod::Stored);
    for (name, part) in [
        ("mimetype", "application/vnd.oasis.opendocument.spreadsheet"),
        ("content.xml", &content),
        (
            "META-INF/manifest.xml",
            "<manifest:manifest xmlns:manifest=\"urn:oasis:names:tc:opendocument:xmlns:manifest:1.0\"/>",
        ),
    ] {
        let options = match name {
            "mimetype" => stored,
            _ => SimpleFileOptions::default(),
        };
        archive.start_file(name, options).expect("a part");
        archive.write_all(part.as_bytes()).expect("written");
    }
    archive.finish().expect("an archive").into_inner()
}

#[test]
fn a_trace_written_as_a_workbook_in_any_form_is_read_again_as_it_was() {
    holds(150, (truth(), form()), |(truth, form)| {
        let log = read_or_told("trend.xlsx", &form.xlsx(&truth), &told(None, None))?;
        truth.is(&log, None)
    });
}

#[test]
fn a_trace_written_as_an_open_document_in_any_form_is_read_again_as_it_was() {
    holds(150, (truth(), form()), |(truth, form)| {
        let log = read_or_told("trend.ods", &form.ods(&truth), &told(None, None))?;
        truth.is(&log, None)
    });
}

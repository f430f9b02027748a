//! A table of cells, and the three kinds of file that it is written to.

use std::error::Error;
use std::fs::File;
use std::io::Write as _;
use std::path::Path;

use chrono::{NaiveDate, NaiveDateTime};
use rust_xlsxwriter::{DocProperties, ExcelDateTime, Format, Workbook, Worksheet};
use zip::CompressionMethod;
use zip::write::{SimpleFileOptions, ZipWriter};

/// One cell.
#[derive(Clone)]
pub enum Cell {
    /// Nothing.
    Empty,
    /// Text.
    Text(String),
    /// A number, and how many decimals the export gives it.
    Number(f64, usize),
    /// A date and time of day.
    Time(NaiveDateTime),
}

/// One sheet: text rows above the headings, headings, rows.
pub struct Table {
    /// Name of the sheet.
    pub name: &'static str,
    /// Lines of text above the headings; an empty one leaves a row free.
    pub title: Vec<&'static str>,
    /// Headings.
    pub headings: Vec<String>,
    /// Rows, each as long as the headings.
    pub rows: Vec<Vec<Cell>>,
}

/// How an export to CSV writes its cells.
pub struct CsvStyle {
    /// Between cells.
    pub delimiter: u8,
    /// Decimal sign.
    pub decimal: &'static str,
    /// Of times, as chrono formats them.
    pub time: &'static str,
}

fn rounded(value: f64, decimals: usize) -> f64 {
    let scale = 10f64.powi(i32::try_from(decimals).expect("an export has few decimals"));
    let rounded = (value * scale).round() / scale;
    if rounded == 0.0 { 0.0 } else { rounded }
}

/// Writes a table as CSV, with lines that end as on Windows.
pub fn write_csv(path: &Path, table: &Table, style: &CsvStyle) -> Result<(), Box<dyn Error>> {
    let mut writer = csv::WriterBuilder::new()
        .delimiter(style.delimiter)
        .terminator(csv::Terminator::CRLF)
        .from_path(path)?;
    writer.write_record(&table.headings)?;
    for row in &table.rows {
        writer.write_record(row.iter().map(|cell| match cell {
            Cell::Empty => String::new(),
            Cell::Text(text) => text.clone(),
            Cell::Number(value, decimals) => {
                format!("{:.decimals$}", rounded(*value, *decimals)).replace('.', style.decimal)
            }
            Cell::Time(time) => time.format(style.time).to_string(),
        }))?;
    }
    writer.flush()?;
    Ok(())
}

/// Days since 1899-12-30, as spreadsheets count them.
fn serial_date(time: NaiveDateTime) -> f64 {
    let epoch = NaiveDate::from_ymd_opt(1899, 12, 30)
        .and_then(|day| day.and_hms_opt(0, 0, 0))
        .expect("the epoch is a date");
    (time - epoch).num_milliseconds() as f64 / 86_400_000.0
}

/// An empty workbook with a fixed date of creation, so that its bytes are the same each time.
pub fn new_workbook(title: &str) -> Result<Workbook, Box<dyn Error>> {
    let mut workbook = Workbook::new();
    let created = ExcelDateTime::from_ymd(2026, 3, 13)?.and_hms(16, 0, 0)?;
    workbook.set_properties(
        &DocProperties::new()
            .set_title(title)
            .set_company("Larkmoor Solvents")
            .set_creation_datetime(&created),
    );
    Ok(workbook)
}

/// Writes tables as the sheets of one workbook; times are real dates shown as `time_format`.
pub fn write_xlsx(path: &Path, tables: &[Table], time_format: &str) -> Result<(), Box<dyn Error>> {
    let mut workbook = new_workbook("Trend export")?;
    let time_format = Format::new().set_num_format(time_format);
    for table in tables {
        let sheet = workbook.add_worksheet();
        sheet.set_name(table.name)?;
        fill_sheet(sheet, table, &time_format)?;
    }
    workbook.save(path)?;
    Ok(())
}

/// Fills a sheet with a table.
pub fn fill_sheet(
    sheet: &mut Worksheet,
    table: &Table,
    time_format: &Format,
) -> Result<(), Box<dyn Error>> {
    let bold = Format::new().set_bold();
    let mut at = 0u32;
    for line in &table.title {
        if !line.is_empty() {
            sheet.write_string(at, 0, *line)?;
        }
        at += 1;
    }
    for (column, heading) in table.headings.iter().enumerate() {
        let column = u16::try_from(column)?;
        sheet.write_string_with_format(at, column, heading, &bold)?;
        sheet.set_column_width(column, if column == 0 { 23.0 } else { 14.0 })?;
    }
    for row in &table.rows {
        at += 1;
        for (column, cell) in row.iter().enumerate() {
            let column = u16::try_from(column)?;
            match cell {
                Cell::Empty => {}
                Cell::Text(text) => {
                    sheet.write_string(at, column, text)?;
                }
                Cell::Number(value, decimals) => {
                    sheet.write_number(at, column, rounded(*value, *decimals))?;
                }
                Cell::Time(time) => {
                    sheet.write_number_with_format(at, column, serial_date(*time), time_format)?;
                }
            }
        }
    }
    Ok(())
}

const ODS_TYPE: &str = "application/vnd.oasis.opendocument.spreadsheet";

const ODS_HEAD: &str = r#"<?xml version="1.0" encoding="UTF-8"?>
<office:document-content xmlns:office="urn:oasis:names:tc:opendocument:xmlns:office:1.0" xmlns:style="urn:oasis:names:tc:opendocument:xmlns:style:1.0" xmlns:table="urn:oasis:names:tc:opendocument:xmlns:table:1.0" xmlns:text="urn:oasis:names:tc:opendocument:xmlns:text:1.0" xmlns:number="urn:oasis:names:tc:opendocument:xmlns:datastyle:1.0" office:version="1.3"><office:automatic-styles><number:date-style style:name="stamp"><number:year number:style="long"/><number:text>-</number:text><number:month number:style="long"/><number:text>-</number:text><number:day number:style="long"/><number:text> </number:text><number:hours number:style="long"/><number:text>:</number:text><number:minutes number:style="long"/><number:text>:</number:text><number:seconds number:style="long"/></number:date-style><style:style style:name="when" style:family="table-cell" style:data-style-name="stamp"/></office:automatic-styles><office:body><office:spreadsheet>"#;

const ODS_MANIFEST: &str = r#"<?xml version="1.0" encoding="UTF-8"?>
<manifest:manifest xmlns:manifest="urn:oasis:names:tc:opendocument:xmlns:manifest:1.0" manifest:version="1.3"><manifest:file-entry manifest:full-path="/" manifest:version="1.3" manifest:media-type="application/vnd.oasis.opendocument.spreadsheet"/><manifest:file-entry manifest:full-path="content.xml" manifest:media-type="text/xml"/></manifest:manifest>
"#;

/// Writes tables as the sheets of an OpenDocument spreadsheet, times as real dates.
pub fn write_ods(path: &Path, tables: &[Table]) -> Result<(), Box<dyn Error>> {
    let mut content = String::from(ODS_HEAD);
    for table in tables {
        content.push_str(&format!("<table:table table:name=\"{}\">", table.name));
        let headings = table.headings.iter().cloned().map(Cell::Text).collect();
        let titles = table
            .title
            .iter()
            .map(|line| vec![Cell::Text((*line).to_owned())]);
        for row in titles.chain([headings]).chain(table.rows.iter().cloned()) {
            content.push_str("<table:table-row>");
            for cell in &row {
                content.push_str(&ods_cell(cell));
            }
            content.push_str("</table:table-row>\n");
        }
        content.push_str("</table:table>");
    }
    content.push_str("</office:spreadsheet></office:body></office:document-content>\n");

    let mut archive = ZipWriter::new(File::create(path)?);
    let plain = SimpleFileOptions::default().compression_method(CompressionMethod::Stored);
    let packed = SimpleFileOptions::default().compression_method(CompressionMethod::Deflated);
    // The format asks for the type first and not compressed.
    archive.start_file("mimetype", plain)?;
    archive.write_all(ODS_TYPE.as_bytes())?;
    archive.start_file("content.xml", packed)?;
    archive.write_all(content.as_bytes())?;
    archive.start_file("META-INF/manifest.xml", packed)?;
    archive.write_all(ODS_MANIFEST.as_bytes())?;
    archive.finish()?;
    Ok(())
}

fn ods_cell(cell: &Cell) -> String {
    match cell {
        Cell::Empty => "<table:table-cell/>".to_owned(),
        Cell::Text(text) => {
            let text = text.replace('&', "&amp;").replace('<', "&lt;");
            format!(
                "<table:table-cell office:value-type=\"string\"><text:p>{text}</text:p></table:table-cell>"
            )
        }
        Cell::Number(value, decimals) => {
            let value = rounded(*value, *decimals);
            format!(
                "<table:table-cell office:value-type=\"float\" office:value=\"{value}\"><text:p>{value:.decimals$}</text:p></table:table-cell>"
            )
        }
        Cell::Time(time) => {
            let value = time.format("%Y-%m-%dT%H:%M:%S");
            let text = time.format("%Y-%m-%d %H:%M:%S");
            format!(
                "<table:table-cell table:style-name=\"when\" office:value-type=\"date\" office:date-value=\"{value}\"><text:p>{text}</text:p></table:table-cell>"
            )
        }
    }
}

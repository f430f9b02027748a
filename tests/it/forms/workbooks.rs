//! Workbooks. `.xlsx`, `.xlsm` and `.ods` are written here; `.xls` and `.xlsb` are kept in `tests/logs`,
//! beside the script that made them.

use super::{Files, HEADINGS, ROWS, Truth, at, start, truth};
use asleft::read::{ColumnNames, LogRead, LogRule};
use chrono::{NaiveDateTime, NaiveTime, Timelike};
use rust_xlsxwriter::{Format, Formula, Workbook, Worksheet};
use std::fmt::Write as _;
use std::io::{Cursor, Read, Write};

/// A date and time of day as a spreadsheet keeps it: days since 1899-12-30 (25569 is 1970-01-01).
fn serial(moment: NaiveDateTime) -> f64 {
    25_569.0 + moment.and_utc().timestamp() as f64 / 86_400.0
}

/// Days from the zero of the 1900 system to that of the 1904 system.
const DAYS_TO_1904: f64 = 1462.0;

/// Writes the time of a row into the first cells of a row of the sheet: how many it took.
type TimeCells<'a> = &'a dyn Fn(&mut Worksheet, u32, u16, usize) -> u16;

/// Fills a sheet with the trace, its headings in the cell at `row` and `column`.
fn fill(sheet: &mut Worksheet, at: (u32, u16), times: &[&str], truth: &Truth, time: TimeCells) {
    let (row, column) = at;
    let headings = times.iter().chain(&HEADINGS[1..]);
    for (column, heading) in (column..).zip(headings) {
        sheet.write_string(row, column, *heading).expect("written");
    }
    for k in 0..ROWS {
        let row = row + 1 + k as u32;
        let column = column + time(sheet, row, column, k);
        for (column, values) in (column..).zip([&truth.pv, &truth.op, &truth.sp]) {
            let value: f64 = values[k].parse().expect("a number");
            sheet.write_number(row, column, value).expect("written");
        }
        sheet.write_string(row, column + 3, "MAN").expect("written");
    }
}

fn number_as(sheet: &mut Worksheet, cell: (u32, u16), value: f64, format: &str) {
    let format = Format::new().set_num_format(format);
    sheet
        .write_number_with_format(cell.0, cell.1, value, &format)
        .expect("written");
}

fn real_dates(sheet: &mut Worksheet, row: u32, column: u16, k: usize) -> u16 {
    number_as(sheet, (row, column), serial(at(k)), "yyyy-mm-dd hh:mm:ss");
    1
}

/// The time of day of a row, days.
fn part_of_day(k: usize) -> f64 {
    f64::from(at(k).time().num_seconds_from_midnight()) / 86_400.0
}

/// A book with one sheet, "Trend", its log at A1.
fn book(truth: &Truth, times: &[&str], time: TimeCells) -> Vec<u8> {
    let mut book = Workbook::new();
    let sheet = book.add_worksheet();
    sheet.set_name("Trend").expect("a name");
    fill(sheet, (0, 0), times, truth, time);
    book.save_to_buffer().expect("a workbook")
}

/// The same book with one of its parts changed.
fn changed(book: &[u8], part: &str, change: impl Fn(&str) -> String) -> Vec<u8> {
    let mut from = zip::ZipArchive::new(Cursor::new(book)).expect("an archive");
    let mut to = zip::ZipWriter::new(Cursor::new(Vec::new()));
    let mut is_changed = false;
    for index in 0..from.len() {
        let mut entry = from.by_index(index).expect("a part");
        let name = entry.name().expect("a name").into_owned();
        let mut bytes = Vec::new();
        entry.read_to_end(&mut bytes).expect("readable");
        if name == part {
            let text = String::from_utf8(bytes).expect("text");
            let new = change(&text);
            is_changed = new != text;
            bytes = new.into_bytes();
        }
        to.start_file(name.as_str(), zip::write::SimpleFileOptions::default())
            .expect("begun");
        to.write_all(&bytes).expect("written");
    }
    assert!(is_changed, "{part}");
    to.finish().expect("finished").into_inner()
}

fn clock_format(log: &LogRead) -> &str {
    &log.sources[0].clock_format
}

#[test]
fn real_dates_and_dates_as_text() {
    let truth = truth();
    let log = Files::one("trend.xlsx", book(&truth, &["Time"], &real_dates)).read();
    truth.is_in(&log, "real dates");
    assert_eq!(clock_format(&log), "real dates of the workbook");
    for format in [
        "%Y-%m-%d %H:%M:%S",
        "%d/%m/%Y %H:%M:%S",
        "%m/%d/%Y %I:%M:%S %p",
    ] {
        let as_text = |sheet: &mut Worksheet, row: u32, column: u16, k: usize| {
            let text = at(k).format(format).to_string();
            sheet.write_string(row, column, text).expect("written");
            1
        };
        let bytes = book(&truth, &["Time"], &as_text);
        truth.is_in(&Files::one("trend.xlsx", bytes).read(), format);
    }
    // Numbers that lost their date format are days all the same.
    let bare = |sheet: &mut Worksheet, row: u32, column: u16, k: usize| {
        sheet
            .write_number(row, column, serial(at(k)))
            .expect("written");
        1
    };
    let log = Files::one("trend.xlsx", book(&truth, &["Time"], &bare)).read();
    truth.is_in(&log, "serial numbers");
    // A book with macros is the same in another package.
    let bytes = changed(
        &book(&truth, &["Time"], &real_dates),
        "[Content_Types].xml",
        |text| {
            text.replace(
                "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet.main+xml",
                "application/vnd.ms-excel.sheet.macroEnabled.main+xml",
            )
        },
    );
    truth.is_in(&Files::one("trend.xlsm", bytes).read(), "xlsm");
}

#[test]
fn a_time_of_day_with_its_date_elsewhere() {
    let truth = truth();
    let apart = |sheet: &mut Worksheet, row: u32, column: u16, k: usize| {
        let date = at(k).date().and_time(NaiveTime::MIN);
        number_as(sheet, (row, column), serial(date), "dd/mm/yyyy");
        number_as(sheet, (row, column + 1), part_of_day(k), "hh:mm:ss");
        2
    };
    let bytes = book(&truth, &["Date", "Time"], &apart);
    truth.is_in(&Files::one("trend.xlsx", bytes).read(), "a column for each");
    let of_day = |sheet: &mut Worksheet, row: u32, column: u16, k: usize| {
        number_as(sheet, (row, column), part_of_day(k), "hh:mm:ss");
        1
    };
    let files = Files::one("trend.xlsx", book(&truth, &["Time"], &of_day));
    let rule = LogRule {
        date: Some(start().date()),
        ..LogRule::default()
    };
    truth.is_in(&files.rule(rule).read(), "the date in the job");
    // A date as text beside a real time of day.
    let mixed = |sheet: &mut Worksheet, row: u32, column: u16, k: usize| {
        let text = at(k).format("%d.%m.%Y").to_string();
        sheet.write_string(row, column, text).expect("written");
        number_as(sheet, (row, column + 1), part_of_day(k), "h:mm:ss AM/PM");
        2
    };
    let bytes = book(&truth, &["Date", "Time"], &mixed);
    truth.is_in(&Files::one("trend.xlsx", bytes).read(), "a date as text");
}

#[test]
fn days_counted_from_1904() {
    let truth = truth();
    let since_1904 = |sheet: &mut Worksheet, row: u32, column: u16, k: usize| {
        let days = serial(at(k)) - DAYS_TO_1904;
        number_as(sheet, (row, column), days, "yyyy-mm-dd hh:mm:ss");
        1
    };
    let bytes = changed(
        &book(&truth, &["Time"], &since_1904),
        "xl/workbook.xml",
        |text| text.replacen("<workbookPr ", "<workbookPr date1904=\"1\" ", 1),
    );
    truth.is_in(&Files::one("trend.xlsx", bytes).read(), "xlsx");
    for name in ["apart_1904.xls", "apart_1904.xlsb"] {
        truth.is_in(&Files::kept(name).read(), name);
    }
}

/// A book with a cover, titles merged over the columns, the headings in C6.
fn report(truth: &Truth) -> Workbook {
    let mut book = Workbook::new();
    let cover = book.add_worksheet();
    cover.set_name("Cover").expect("a name");
    cover
        .write_string(0, 0, "Step tests of unit 300")
        .expect("written");
    cover.write_string(2, 0, "Printed").expect("written");
    cover
        .write_string(2, 1, "2026-03-15 07:00")
        .expect("written");
    let sheet = book.add_worksheet();
    sheet.set_name("Trend").expect("a name");
    for (row, title) in [(2, "Unit 300, feed flow"), (3, "Night shift")] {
        sheet
            .merge_range(row, 2, row, 6, title, &Format::new())
            .expect("merged");
    }
    fill(sheet, (5, 2), &["Time"], truth, &real_dates);
    book
}

#[test]
fn titles_over_merged_columns_and_a_range_that_does_not_begin_at_a1() {
    let truth = truth();
    let bytes = report(&truth).save_to_buffer().expect("a workbook");
    let log = Files::one("trend.xlsx", bytes).read();
    truth.is_in(&log, "xlsx");
    assert_eq!(log.sources[0].sheet.as_deref(), Some("Trend"));
    for name in ["trend.xls", "trend.xlsb"] {
        let log = Files::kept(name).read();
        truth.is_in(&log, name);
        assert_eq!(log.sources[0].sheet.as_deref(), Some("Trend"));
        assert_eq!(log.sources[0].roles[1].unit.as_deref(), Some("m³/h"));
    }
}

#[test]
fn results_of_formulas() {
    let truth = truth();
    let mut book = Workbook::new();
    let sheet = book.add_worksheet();
    fill(sheet, (0, 0), &["Time"], &truth, &real_dates);
    for k in 0..ROWS {
        let row = 1 + k as u32;
        for (column, values) in (1..).zip([&truth.pv, &truth.op]) {
            let formula = Formula::new("=H1*2").set_result(&values[k]);
            sheet.write_formula(row, column, formula).expect("written");
        }
        let mode = Formula::new("=\"M\"&\"AN\"").set_result("MAN");
        sheet.write_formula(row, 4, mode).expect("written");
    }
    let bytes = book.save_to_buffer().expect("a workbook");
    truth.is_in(&Files::one("trend.xlsx", bytes).read(), "xlsx");
    truth.is_in(&Files::kept("formulas.xlsb").read(), "xlsb");
}

/// Rows of the trace whose PV, and whose OP, is an error value in the files with errors.
const BAD_PV: [usize; 2] = [50, 51];
const BAD_OP: usize = 90;

fn has_errors(truth: &Truth, log: &LogRead, form: &str) {
    let bad: Vec<usize> = (0..ROWS).filter(|&k| !log.samples.good[k]).collect();
    assert_eq!(bad, BAD_PV, "{form}");
    assert_eq!(log.sources[0].bad.len(), 1, "{form}");
    for k in (0..ROWS).filter(|k| !BAD_PV.contains(k)) {
        assert_eq!(
            log.samples.pv[k].to_string().parse(),
            truth.pv[k].parse::<f64>(),
            "{form}"
        );
    }
    assert!(log.samples.op[BAD_OP].is_nan(), "{form}");
    assert_eq!(
        log.samples.op.iter().filter(|op| op.is_nan()).count(),
        1,
        "{form}"
    );
}

#[test]
fn error_values_are_bad_samples() {
    let truth = truth();
    let mut book = Workbook::new();
    let sheet = book.add_worksheet();
    sheet.set_name("Trend").expect("a name");
    fill(sheet, (0, 0), &["Time"], &truth, &real_dates);
    let error = |sheet: &mut Worksheet, k: usize, column: u16, text: &str| {
        let formula = Formula::new("=NA()").set_result(text);
        sheet
            .write_formula(1 + k as u32, column, formula)
            .expect("written");
    };
    for k in BAD_PV {
        error(sheet, k, 1, "#N/A");
    }
    error(sheet, BAD_OP, 2, "#VALUE!");
    let bytes = book.save_to_buffer().expect("a workbook");
    for files in [
        Files::one("errors.xlsx", bytes),
        Files::kept("errors.xls"),
        Files::kept("errors.xlsb"),
        Files::one("errors.ods", open_document(&truth, Clock::Stamp, true)),
    ] {
        let log = files.read();
        let form = &log.sources[0].file;
        has_errors(&truth, &log, form);
        let [(cause, count)] = log.sources[0].bad.iter().collect::<Vec<_>>()[..] else {
            panic!("{form}: {:?}", log.sources[0].bad);
        };
        assert!(cause.contains("#N/A"), "{form}: {cause}");
        assert_eq!(*count, 2, "{form}");
        let [warning] = &log.warnings[..] else {
            panic!("{form}: {:?}", log.warnings);
        };
        let warning = warning.to_string();
        assert!(
            warning.starts_with(&format!(
                "{form}, sheet \"Trend\": 1 cell of the OP without a value ("
            )) && warning.ends_with("#VALUE!: 1); the value before is held")
                || warning.ends_with("\"#VALUE!\": 1); the value before is held"),
            "{warning}"
        );
    }
}

#[test]
fn several_sheets() {
    let truth = truth();
    let mut book = report(&truth);
    let other = book.add_worksheet();
    other.set_name("Second run").expect("a name");
    fill(other, (0, 0), &["Time"], &truth, &real_dates);
    let bytes = book.save_to_buffer().expect("a workbook");
    for sheet in ["Trend", "Second run", "second RUN"] {
        let log = Files::new(&format!("trend.xlsx#{sheet}"))
            .with("trend.xlsx", &bytes)
            .read();
        truth.is_in(&log, sheet);
    }
    let files = Files::one("trend.xlsx", &bytes);
    assert_eq!(
        files.refusal(),
        "trend.xlsx: 2 sheets hold this loop: Trend, Second run\n    name one, for example trend.xlsx#Trend"
    );
    let files = Files::new("trend.xlsx#Third run").with("trend.xlsx", &bytes);
    assert_eq!(
        files.refusal(),
        "trend.xlsx: there is no sheet \"Third run\"; the sheets are \"Cover\", \"Trend\", \"Second run\""
    );
}

#[test]
fn columns_by_number_count_from_the_edge_of_the_sheet() {
    let truth = truth();
    let bytes = report(&truth).save_to_buffer().expect("a workbook");
    let named = ColumnNames {
        time: Some("#3".to_owned()),
        pv: Some("#4".to_owned()),
        op: Some("#5".to_owned()),
        ..ColumnNames::default()
    };
    truth.is_in(
        &Files::new("trend.xlsx#Trend")
            .with("trend.xlsx", bytes)
            .columns(named)
            .read(),
        "#3",
    );
}

/// How an open document writes the clock.
#[derive(Clone, Copy)]
enum Clock {
    Stamp,
    Apart,
    Text,
}

/// The trace as an open document: a title over merged cells, the log from C3, a formula, equal rows kept once.
fn open_document(truth: &Truth, clock: Clock, errors: bool) -> Vec<u8> {
    let text = |text: &str| {
        format!(
            "<table:table-cell office:value-type=\"string\"><text:p>{text}</text:p></table:table-cell>"
        )
    };
    let number = |value: &str| {
        format!(
            "<table:table-cell table:formula=\"of:=[.I1]\" office:value-type=\"float\" office:value=\"{value}\"><text:p>{value}</text:p></table:table-cell>"
        )
    };
    let empty = "<table:table-cell table:number-columns-repeated=\"2\"/>";
    let mut rows = format!(
        "<table:table-row><table:table-cell table:number-columns-spanned=\"5\" office:value-type=\"string\">\
         <text:p>Unit 300</text:p></table:table-cell><table:covered-table-cell table:number-columns-repeated=\"4\"/></table:table-row>\
         <table:table-row>{}</table:table-row><table:table-row>{empty}",
        "<table:table-cell table:number-columns-repeated=\"7\"/>"
    );
    if let Clock::Apart = clock {
        rows += &text("Date");
    }
    for heading in HEADINGS {
        rows += &text(heading);
    }
    rows += "</table:table-row>";
    for k in 0..ROWS {
        let stamp = at(k);
        let time = match clock {
            Clock::Stamp => format!(
                "<table:table-cell office:value-type=\"date\" office:date-value=\"{}\"><text:p>14.03.26</text:p></table:table-cell>",
                stamp.format("%Y-%m-%dT%H:%M:%S")
            ),
            Clock::Apart => format!(
                "<table:table-cell office:value-type=\"date\" office:date-value=\"{}\"><text:p>14.03.26</text:p></table:table-cell>\
                 <table:table-cell office:value-type=\"time\" office:time-value=\"{}\"><text:p>9:05</text:p></table:table-cell>",
                stamp.format("%Y-%m-%d"),
                stamp.format("PT%HH%MM%SS")
            ),
            Clock::Text => text(&stamp.format("%d.%m.%Y %H:%M:%S").to_string()),
        };
        let pv = if errors && BAD_PV.contains(&k) {
            text("#N/A")
        } else {
            number(&truth.pv[k])
        };
        let op = if errors && k == BAD_OP {
            text("#VALUE!")
        } else {
            number(&truth.op[k])
        };
        write!(
            rows,
            "<table:table-row>{empty}{time}{pv}{op}{}{}</table:table-row>",
            number(&truth.sp[k]),
            text("MAN")
        )
        .expect("a string takes any text");
    }
    let content = format!(
        "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\
         <office:document-content xmlns:office=\"urn:oasis:names:tc:opendocument:xmlns:office:1.0\" \
         xmlns:table=\"urn:oasis:names:tc:opendocument:xmlns:table:1.0\" \
         xmlns:text=\"urn:oasis:names:tc:opendocument:xmlns:text:1.0\" \
         xmlns:of=\"urn:oasis:names:tc:opendocument:xmlns:of:1.2\">\
         <office:body><office:spreadsheet><table:table table:name=\"Trend\">{rows}</table:table>\
         </office:spreadsheet></office:body></office:document-content>"
    );
    let manifest = "<?xml version=\"1.0\"?><manifest:manifest xmlns:manifest=\"urn:oasis:names:tc:opendocument:xmlns:manifest:1.0\"/>";
    let mut archive = zip::ZipWriter::new(Cursor::new(Vec::new()));
    let plain =
        zip::write::SimpleFileOptions::default().compression_method(zip::CompressionMethod::Stored);
    for (name, text) in [
        ("mimetype", "application/vnd.oasis.opendocument.spreadsheet"),
        ("META-INF/manifest.xml", manifest),
        ("content.xml", &content),
    ] {
        archive.start_file(name, plain).expect("begun");
        archive.write_all(text.as_bytes()).expect("written");
    }
    archive.finish().expect("finished").into_inner()
}

#[test]
fn open_documents() {
    let truth = truth();
    for (form, clock) in [
        ("real dates", Clock::Stamp),
        ("date and time apart", Clock::Apart),
        ("dates as text", Clock::Text),
    ] {
        let log = Files::one("trend.ods", open_document(&truth, clock, false)).read();
        truth.is_in(&log, form);
        assert_eq!(log.sources[0].sheet.as_deref(), Some("Trend"));
    }
}

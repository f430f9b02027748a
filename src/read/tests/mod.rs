//! Whole logs, as they come out of trend systems.

mod cells;
mod files;

use super::*;
use rust_xlsxwriter::{ExcelDateTime, Format, Workbook};

/// A folder of logs that are read as one loop's.
struct Logs {
    folder: tempfile::TempDir,
    request: LogRequest,
}

impl Logs {
    fn new(files: &str) -> Self {
        let folder = tempfile::tempdir().expect("a folder");
        let request = LogRequest {
            root: folder.path().to_path_buf(),
            files: files.to_owned(),
            tag: Some("TIC-204".to_owned()),
            ..LogRequest::default()
        };
        Logs { folder, request }
    }

    fn with(self, name: &str, bytes: impl AsRef<[u8]>) -> Self {
        std::fs::write(self.folder.path().join(name), bytes).expect("written");
        self
    }

    fn asking(mut self, change: impl FnOnce(&mut LogRequest)) -> Self {
        change(&mut self.request);
        self
    }

    fn rule(self, change: impl FnOnce(&mut LogRule)) -> Self {
        let mut rule = LogRule::default();
        change(&mut rule);
        self.asking(|request| request.rules.push(rule))
    }

    fn read(&self) -> LogRead {
        read_log(&self.request, &FileCache::new()).unwrap_or_else(|problems| {
            let texts: Vec<String> = problems.iter().map(ToString::to_string).collect();
            panic!("{}", texts.join("\n"))
        })
    }

    fn refusal(&self) -> String {
        let problems = read_log(&self.request, &FileCache::new()).expect_err("a refusal");
        let texts: Vec<String> = problems.iter().map(ToString::to_string).collect();
        texts.join("\n")
    }
}

fn csv(text: &str) -> Logs {
    Logs::new("a.csv").with("a.csv", text)
}

/// Date, PV and OP of four rows in a way of writing; every one gives the same samples.
fn four_rows(heading: &str, times: [&str; 4]) -> String {
    let mut text = format!("{heading};TIC-204.PV;TIC-204.OP\n");
    for (time, (pv, op)) in times
        .iter()
        .zip([(71.2, 40), (71.25, 40), (71.4, 45), (72.0, 45)])
    {
        text.push_str(&format!("{time};{pv};{op}\n"));
    }
    text
}

fn assert_four_rows(log: &LogRead) {
    assert_eq!(log.samples.t_s, [0.0, 1.0, 2.0, 3.0]);
    assert_eq!(log.samples.pv, [71.2, 71.25, 71.4, 72.0]);
    assert_eq!(log.samples.op, [40.0, 40.0, 45.0, 45.0]);
    assert_eq!(log.sources[0].interval_s, 1.0);
}

/// A workbook with a title sheet, titles above the headings, a used range that does not begin at A1.
fn workbook() -> Vec<u8> {
    let mut book = Workbook::new();
    let title = book.add_worksheet();
    title.write_string(0, 0, "Trend report").expect("written");
    title.write_string(2, 0, "Printed").expect("written");
    title.write_string(2, 1, "2026-03-15").expect("written");
    let sheet = book.add_worksheet();
    sheet.set_name("Trend").expect("a name");
    let date = Format::new().set_num_format("yyyy-mm-dd hh:mm:ss");
    sheet
        .write_string(3, 2, "Unit 200, night shift")
        .expect("written");
    for (column, heading) in [
        "Timestamp",
        "TIC-204/PV [degC]",
        "TIC-204/OP",
        "TIC-204/MODE",
    ]
    .iter()
    .enumerate()
    {
        sheet
            .write_string(5, 2 + column as u16, *heading)
            .expect("written");
    }
    for (k, (pv, op)) in [(71.2, 40.0), (71.25, 40.0), (71.4, 45.0), (72.0, 45.0)]
        .iter()
        .enumerate()
    {
        let at = ExcelDateTime::from_ymd(2026, 3, 14)
            .and_then(|at| at.and_hms(9, 5, k as f64))
            .expect("a date");
        let row = 6 + k as u32;
        sheet
            .write_datetime_with_format(row, 2, at, &date)
            .expect("written");
        sheet.write_number(row, 3, *pv).expect("written");
        sheet.write_number(row, 4, *op).expect("written");
        sheet
            .write_string(row, 5, if k < 2 { "AUTO" } else { "Man" })
            .expect("written");
    }
    book.save_to_buffer().expect("a workbook")
}

//! Whole logs, as they come out of trend systems.

use super::*;
use crate::trace::Trace;
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

#[test]
fn every_way_to_write_a_clock_gives_the_same_samples() {
    let dated = Clock::Dated("2026-03-14T23:59:58".parse().expect("a time"));
    for (heading, times) in [
        (
            "Time",
            [
                "2026-03-14 23:59:58",
                "2026-03-14 23:59:59",
                "2026-03-15 00:00:00",
                "2026-03-15 00:00:01",
            ],
        ),
        (
            "Time",
            [
                "2026-03-14T23:59:58Z",
                "2026-03-14T23:59:59Z",
                "2026-03-15T00:00:00Z",
                "2026-03-15T00:00:01Z",
            ],
        ),
        (
            "Time",
            [
                "14.03.2026 23:59:58",
                "14.03.2026 23:59:59",
                "15.03.2026 00:00:00",
                "15.03.2026 00:00:01",
            ],
        ),
        (
            "Time",
            [
                "14/03/26 23:59:58",
                "14/03/26 23:59:59",
                "15/03/26 00:00:00",
                "15/03/26 00:00:01",
            ],
        ),
        (
            "Time",
            [
                "3/14/2026 11:59:58 PM",
                "3/14/2026 11:59:59 PM",
                "3/15/2026 12:00:00 AM",
                "3/15/2026 12:00:01 AM",
            ],
        ),
        (
            "Time",
            [
                "14-Mar-26 23:59:58",
                "14-Mar-26 23:59:59",
                "15-Mar-26 00:00:00",
                "15-Mar-26 00:00:01",
            ],
        ),
        (
            "When",
            [
                "2026-03-14 23:59:58",
                "2026-03-14 23:59:59",
                "2026-03-15 00:00:00",
                "2026-03-15 00:00:01",
            ],
        ),
        (
            "Date;Time",
            [
                "14.03.2026;23:59:58",
                "14.03.2026;23:59:59",
                "15.03.2026;00:00:00",
                "15.03.2026;00:00:01",
            ],
        ),
        (
            "Time",
            ["1773532798", "1773532799", "1773532800", "1773532801"],
        ),
        (
            "Time",
            [
                "1773532798000",
                "1773532799000",
                "1773532800000",
                "1773532801000",
            ],
        ),
        // Days since 1899-12-30: 46095 is 2026-03-14.
        (
            "Time",
            [
                "46095.9999768519",
                "46095.9999884259",
                "46096",
                "46096.0000115741",
            ],
        ),
    ] {
        let log = csv(&four_rows(heading, times)).read();
        assert_four_rows(&log);
        assert_eq!(log.clock, dated, "{times:?}");
    }
    for (heading, times) in [
        ("Time (s)", ["0", "1", "2", "3"]),
        (
            "Elapsed minutes",
            ["0", "0.0166666667", "0.0333333333", "0.05"],
        ),
        ("t", ["0", "1", "2", "3"]),
        ("Time", ["09:05:58", "09:05:59", "09:06:00", "09:06:01"]),
        ("Time", ["23:59:58", "23:59:59", "00:00:00", "00:00:01"]),
    ] {
        let log = csv(&four_rows(heading, times)).read();
        let rounded: Vec<f64> = log
            .samples
            .t_s
            .iter()
            .map(|t| libm::round(t * 1e3) / 1e3)
            .collect();
        assert_eq!(rounded, [0.0, 1.0, 2.0, 3.0], "{times:?}");
        assert_eq!(log.clock, Clock::Elapsed, "{times:?}");
    }
    let log = csv("TIC-204.PV;TIC-204.OP\n71.2;40\n71.25;40\n71.4;45\n72.0;45\n")
        .rule(|rule| rule.interval_s = Some(1.0))
        .read();
    assert_four_rows(&log);
    let log = csv(&four_rows(
        "Time",
        ["23:59:58", "23:59:59", "00:00:00", "00:00:01"],
    ))
    .rule(|rule| rule.date = chrono::NaiveDate::from_ymd_opt(2026, 3, 14))
    .read();
    assert_four_rows(&log);
    assert_eq!(log.clock, dated);
}

#[test]
fn every_file_format_gives_the_same_samples() {
    let text = four_rows("Time", ["0", "1", "2", "3"]).replace("Time", "Time (s)");
    let comma_decimal = "\u{feff}Time (s)\tTIC-204.PV\tTIC-204.OP\r\n0\t71,2\t40\r\n1\t71,25\t40\r\n2\t71,4\t45\r\n3\t72,0\t45\r\n";
    let utf16: Vec<u8> = [0xFF, 0xFE]
        .into_iter()
        .chain(comma_decimal[3..].encode_utf16().flat_map(u16::to_le_bytes))
        .collect();
    for bytes in [
        text.clone().into_bytes(),
        text.replace(';', ",").into_bytes(),
        text.replace(';', "|").into_bytes(),
        text.replace("71.25", "\"71.25\"").into_bytes(),
        format!("Trend export\nUnit 200; from here\n\n{text}").into_bytes(),
        text.replacen('\n', "\ns;degC;%\n", 1).into_bytes(),
        format!("{text}\nEnd of export\n").into_bytes(),
        comma_decimal.as_bytes().to_vec(),
        utf16,
    ] {
        assert_four_rows(&Logs::new("a.csv").with("a.csv", bytes).read());
    }
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

#[test]
fn a_workbook_is_read_where_its_log_stands() {
    let log = Logs::new("a.xlsx").with("a.xlsx", workbook()).read();
    assert_four_rows(&log);
    assert_eq!(log.sources[0].sheet.as_deref(), Some("Trend"));
    assert_eq!(log.samples.manual, [false, false, true, true]);
    assert_eq!(log.sources[0].roles[1].unit.as_deref(), Some("degC"));
    let refusal = Logs::new("a.xlsx#Trnd")
        .with("a.xlsx", workbook())
        .refusal();
    assert_eq!(
        refusal,
        "a.xlsx: there is no sheet \"Trnd\"; the sheets are \"Sheet1\", \"Trend\""
    );
    let refusal = Logs::new("a.xlsx")
        .with("a.xlsx", workbook())
        .asking(|request| request.pv_unit = Some("degF".into()))
        .refusal();
    assert!(
        refusal.starts_with("a.xlsx, sheet \"Trend\", cell D6: the PV of the log is in degC, that of the schedule in degF\n"),
        "{refusal}"
    );
    let log = Logs::new("a.xlsx")
        .with("a.xlsx", workbook())
        .asking(|request| {
            request.pv_unit = Some("degF".into());
            request.pv_scale = Some(1.8);
            request.pv_offset = Some(32.0);
        })
        .read();
    assert_eq!(log.samples.pv[0], 71.2 * 1.8 + 32.0);
}

#[test]
fn a_long_table_is_joined_on_time() {
    let log = csv("Tag,Time,Value,Quality\n\
         LIC-9.PV,2026-03-14 09:00:00,1,Good\n\
         TIC-204.PV,2026-03-14 09:00:00,71.2,Good\n\
         TIC-204.OP,2026-03-14 09:00:00,40,Good\n\
         TIC-204.PV,2026-03-14 09:00:02,71.3,Bad\n\
         TIC-204.OP,2026-03-14 09:00:03,45,Good\n\
         TIC-204.PV,2026-03-14 09:00:04,71.9,192\n\
         TIC-204.SP,2026-03-14 08:59:00,70,Good\n")
    .read();
    let samples = &log.samples;
    assert_eq!(samples.t_s, [0.0, 2.0, 3.0, 4.0]);
    assert_eq!(samples.op, [40.0, 40.0, 45.0, 45.0]);
    assert_eq!(samples.sp, [70.0; 4]);
    assert_eq!(samples.good, [true, false, true, true]);
    // The row of the OP's own move holds no sample of the PV, and none that was bad.
    assert!(samples.pv[2].is_nan());
    assert_eq!(
        log.sources[0].bad,
        BTreeMap::from([("quality Bad".to_owned(), 1)])
    );
    let span = Span::new(0.0, 100.0).expect("a range");
    let trace = Trace::new(samples, span, span).expect("a trace");
    assert_eq!(trace.t_s(), [0.0, 4.0]);
    assert_eq!(trace.bad_t_s(), [2.0]);
    assert_eq!(trace.op_log().0, [0.0, 2.0, 3.0, 4.0]);
}

#[test]
fn signals_of_a_long_table_may_be_named() {
    let text = "Name,Time (s),Value\nT5,0,71\nV5,0,40\nT5,1,72\nV5,1,45\n";
    let refusal = csv(text).refusal();
    assert_eq!(
        refusal,
        "a.csv, column \"Name\": no tag is recognised as the PV; the tags are \"T5\", \"V5\"\n    \
         name it in the schedule under \"pv column\"\n\
         a.csv, column \"Name\": no tag is recognised as the OP; the tags are \"T5\", \"V5\"\n    \
         name it in the schedule under \"op column\""
    );
    let log = csv(text)
        .asking(|request| {
            request.columns.pv = Some("T5".into());
            request.columns.op = Some("v5".into());
        })
        .read();
    assert_eq!(log.samples.pv, [71.0, 72.0]);
    assert_eq!(log.samples.op, [40.0, 45.0]);
}

#[test]
fn no_row_below_the_headings_is_passed_over() {
    let text = "Time,PV,OP\n2026-03-14 09:00:00,Void,Void\n2026-03-14 09:00:01,71,40\n2026-03-14 09:00:02,71,40\n";
    let refusal = csv(text).refusal();
    assert!(
        refusal.starts_with("a.csv, line 2, column \"PV\": \"Void\" is not a number"),
        "{refusal}"
    );
}

#[test]
fn a_status_that_is_no_quality_is_left_alone() {
    let text =
        |status: &str| format!("Time (s),PV,OP,Status\n0,71,40,{status}\n1,72,40,{status}\n");
    assert_eq!(csv(&text("Running")).read().bad_samples(), 0);
    assert!(
        csv(&text("Bad"))
            .refusal()
            .contains("the PV has no good sample (quality Bad: 2)")
    );
    let mixed = "Time (s),PV,OP,Quality\n0,71,40,Good\n1,72,40,Perhaps\n";
    assert!(
        csv(mixed)
            .refusal()
            .starts_with("a.csv, line 3, column \"Quality\": \"Perhaps\" is not a known quality")
    );
}

#[test]
fn bad_samples_are_counted_by_cause_and_unreadable_cells_named() {
    let text = "Time (s),TIC-204.PV,TIC-204.OP\n0,71,40\n1,Bad,40\n2,,40\n3,NaN,40\n4,500,40\n5,Void,40\n6,72,40\n";
    let span = Span::new(0.0, 100.0).expect("a range");
    let refusal = csv(text)
        .asking(|request| request.pv_span = Some(span))
        .refusal();
    assert_eq!(
        refusal,
        "a.csv, line 7, column \"TIC-204.PV\": \"Void\" is not a number\n    \
         correct it, or name the text under bad_values in a [[log]] table of job.toml"
    );
    let log = csv(text)
        .asking(|request| request.pv_span = Some(span))
        .rule(|rule| rule.bad_values = vec!["void".into()])
        .read();
    let bad = &log.sources[0].bad;
    let causes: Vec<(&str, usize)> = bad
        .iter()
        .map(|(cause, count)| (cause.as_str(), *count))
        .collect();
    assert_eq!(
        causes,
        [
            ("empty", 1),
            ("not a number", 1),
            ("outside the range", 1),
            ("text \"Bad\"", 1),
            ("text \"Void\"", 1)
        ]
    );
    assert_eq!(log.sources[0].samples, 2);
}

#[test]
fn many_unreadable_cells_are_counted() {
    let mut text = "Time (s),TIC-204.PV,TIC-204.OP\n0,71,40\n1,71,40\n2,71,40\n".to_owned();
    for k in 3..40 {
        text.push_str(&format!("{k},7l,40\n"));
    }
    let refusal = csv(&text).refusal();
    assert!(
        refusal.ends_with("a.csv: 37 cells cannot be read; the first 5 are told above"),
        "{refusal}"
    );
    assert_eq!(refusal.matches("is not a number").count(), 5);
}

#[test]
fn what_is_ambiguous_is_asked_for() {
    let refusal = csv(&four_rows(
        "Time",
        [
            "03/04/2026 09:00:00",
            "03/04/2026 09:00:01",
            "03/04/2026 09:00:02",
            "03/04/2026 09:00:03",
        ],
    ))
    .refusal();
    assert_eq!(
        refusal,
        "a.csv, line 2, column 1: the date 03/04/2026 reads as 3 April 2026 (day first) or as 4 March 2026 (month first), and no other row tells which\n    \
         add to job.toml: [[log]] with files = [\"a.csv\"] and dates = \"dmy\" or dates = \"mdy\""
    );
    let log = csv(&four_rows(
        "Time",
        [
            "03/03/2026 09:00:00",
            "03/03/2026 09:00:01",
            "03/03/2026 09:00:02",
            "03/03/2026 09:00:03",
        ],
    ))
    .read();
    assert_four_rows(&log);
    let refusal = csv("Time (s);PV;OP\n0;1.234;40\n1;1.240;40\n2;1.240;45\n").refusal();
    assert_eq!(
        refusal,
        "a.csv, line 2, column \"PV\": \"1.234\" may be a number with decimals or with thousands, and no other cell tells which\n    \
         add to job.toml: [[log]] with files = [\"a.csv\"] and decimal = \".\" or decimal = \",\""
    );
    // Over midnight only one order lets the dates follow each other.
    let log = csv(&four_rows(
        "Time",
        [
            "03/04/2026 23:59:58",
            "03/04/2026 23:59:59",
            "04/04/2026 00:00:00",
            "04/04/2026 00:00:01",
        ],
    ))
    .read();
    assert_four_rows(&log);
    let log = csv("Time (s);PV;OP\n0;1.234;40\n1;1.240;40\n2;1.240;45\n")
        .rule(|rule| rule.decimal = Some(DecimalSign::Comma))
        .read();
    assert_eq!(log.samples.pv[0], 1234.0);
}

#[test]
fn columns_that_cannot_be_told_are_named() {
    let refusal = csv("Time (s),TIC-204.PV,TIC-204.PV,TIC-204.OP\n0,1,2,3\n1,1,2,3\n").refusal();
    assert_eq!(
        refusal,
        "a.csv, line 1: 2 columns may be the PV: \"TIC-204.PV\" (#2), \"TIC-204.PV\" (#3)\n    \
         name one in the schedule under \"pv column\""
    );
    let log = csv("Time (s),TIC-204.PV,TIC-204.PV,TIC-204.OP\n0,1,2,3\n1,1,2,3\n")
        .asking(|request| request.columns.pv = Some("#3".into()))
        .read();
    assert_eq!(log.samples.pv, [2.0, 2.0]);
    let refusal = csv("Time (s),Temperature (degC),Valve\n0,1,2\n1,1,2\n")
        .asking(|request| {
            request.columns.pv = Some("Temprature".into());
            request.columns.op = Some("valve".into());
        })
        .refusal();
    assert_eq!(
        refusal,
        "a.csv, line 1: the schedule names PV column \"Temprature\", which the log does not have; its headings are \"Time (s)\", \"Temperature (degC)\", \"Valve\"\n    \
         did you mean \"Temperature (degC)\"?"
    );
    let log = csv("Time (s),Temperature (degC),Valve\n0,1,2\n1,1,2\n")
        .asking(|request| {
            request.columns.pv = Some("temperature".into());
            request.columns.op = Some("valve".into());
        })
        .read();
    assert_eq!(log.samples.op, [2.0, 2.0]);
    let refusal = csv("Time (s),FIC-203.PV,FIC-203.OP\n0,1,2\n1,1,2\n").refusal();
    assert_eq!(
        refusal,
        "a.csv, line 1: no column is recognised as the PV of TIC-204; its headings are \"Time (s)\", \"FIC-203.PV\", \"FIC-203.OP\"\n    \
         name it in the schedule under \"pv column\""
    );
    let log = csv("0,1,2\n1,1,2\n2,1,2\n")
        .asking(|request| {
            request.columns.time = Some("#1".into());
            request.columns.pv = Some("#2".into());
            request.columns.op = Some("#3".into());
        })
        .read();
    assert_eq!(log.samples.op, [2.0, 2.0, 2.0]);
}

#[test]
fn logs_are_cut_and_put_together() {
    let first = "Time,PV,OP\n2026-03-14 09:00:00,1,10\n2026-03-14 09:00:01,2,10\n2026-03-14 09:00:02,3,10\n";
    let second = "Time,PV,OP\n2026-03-14 09:00:02,4,20\n2026-03-14 09:00:03,5,20\n";
    let both = Logs::new("b.csv; a.csv")
        .with("a.csv", first)
        .with("b.csv", second);
    let log = both.read();
    assert_eq!(log.samples.pv, [1.0, 2.0, 4.0, 5.0]);
    assert_eq!(log.sources[0].file, "a.csv");
    assert_eq!(log.warnings.len(), 1);
    let log = both
        .asking(|request| {
            request.from = Some(Moment::Dated(
                "2026-03-14T09:00:01".parse().expect("a time"),
            ));
            request.to = Some(Moment::Dated(
                "2026-03-14T09:00:02".parse().expect("a time"),
            ));
        })
        .read();
    assert_eq!(log.samples.pv, [2.0, 4.0]);
    assert_eq!(log.samples.t_s, [0.0, 1.0]);
    let refusal = csv(first)
        .asking(|request| request.from = Some(Moment::Elapsed(5.0)))
        .refusal();
    assert!(refusal.starts_with("a.csv: the log bears dates, but it is to be cut at 5 s"));
    let refusal = csv(first)
        .asking(|request| {
            request.from = Some(Moment::Dated(
                "2026-03-15T00:00:00".parse().expect("a time"),
            ))
        })
        .refusal();
    assert_eq!(
        refusal,
        "a.csv: nothing is left within the cut; the log reaches from 2026-03-14 09:00:00 to 2026-03-14 09:00:02"
    );
}

#[test]
fn reporting_by_exception_is_no_gap() {
    let mut text = "Time (s),PV,OP\n".to_owned();
    let mut t = 0;
    for k in 0..60 {
        t += [1, 4, 2, 30, 7][k % 5];
        text.push_str(&format!("{t},{k},40\n"));
    }
    let log = csv(&text).read();
    assert!(log.sources[0].compressed);
    assert_eq!(log.sources[0].gaps, []);
    let regular: String = (0..60)
        .filter(|k| !(20..30).contains(k))
        .map(|k| format!("{k},{k},40\n"))
        .collect();
    let log = csv(&format!("Time (s),PV,OP\n{regular}")).read();
    assert!(!log.sources[0].compressed);
    assert_eq!(
        log.sources[0].gaps,
        [Gap {
            from_s: 19.0,
            to_s: 30.0
        }]
    );
}

#[test]
fn signals_at_times_of_their_own_are_no_bad_samples() {
    let mut text = "Time (s),PV,OP\n0,71,40\n".to_owned();
    for k in 1..40 {
        let (pv, op) = if k % 2 == 0 { ("72", "") } else { ("", "41") };
        text.push_str(&format!("{k},{pv},{op}\n"));
    }
    let log = csv(&text).read();
    assert_eq!(log.bad_samples(), 0);
    assert_eq!(log.sources[0].samples, 20);
    assert_eq!(log.warnings.len(), 1);
}

#[test]
fn what_was_attached_can_be_read_as_a_log() {
    let log = csv(&four_rows(
        "Time",
        [
            "2026-03-14 23:59:58",
            "2026-03-14 23:59:59",
            "2026-03-15 00:00:00",
            "2026-03-15 00:00:01",
        ],
    ))
    .read();
    let attached = samples_csv(&log.samples, log.clock);
    let again = Logs::new("samples.csv")
        .with("samples.csv", attached)
        .read();
    assert_eq!(again.samples.pv, log.samples.pv);
    assert_eq!(again.clock, log.clock);
}

#[test]
fn an_inspection_says_what_it_saw_and_what_it_could_not_decide() {
    let logs = Logs::new("a.xlsx").with("a.xlsx", workbook()).with(
        "b.csv",
        "Time,TIC-204.PV,TIC-204.OP,TI-301.PV\n2026-03-14 09:00:00,71,40,5\n2026-03-14 09:00:01,71,40,5\n",
    );
    let cache = FileCache::new();
    let look = |file| {
        let request = inspect::InspectRequest {
            file,
            ..inspect::InspectRequest::default()
        };
        inspect::inspect(logs.folder.path(), &request, &cache).expect("readable")
    };
    let workbook = look("a.xlsx");
    assert_eq!(
        workbook.tables[0].undecided,
        ["no rows of times and numbers were found: not a log"]
    );
    let found = &workbook.tables[1].loops[0];
    assert_eq!(found.tag.as_deref(), Some("TIC-204"));
    assert_eq!(found.schedule["test log"], "a.xlsx#Trend");
    assert_eq!(found.schedule["pv column"], "TIC-204/PV [degC]");
    let text = workbook.text();
    assert!(text.contains("      PV           D \"TIC-204/PV [degC]\", unit degC: the heading bears the tag TIC-204\n"), "{text}");
    let text = look("b.csv");
    assert_eq!(text.tables[0].loops.len(), 1);
    assert!(
        text.tables[0].undecided[0]
            .starts_with("TI-301: b.csv, line 1: no column is recognised as the OP")
    );
    assert!(serde_json::to_string(&text).is_ok());
}

#[test]
fn patterns_match_names_below_folders() {
    assert!(matches_pattern("logs/aic*.csv", "logs/aic208.csv"));
    assert!(matches_pattern("logs/*.CSV", "logs/aic208.csv"));
    assert!(!matches_pattern("logs/*.csv", "logs/old/aic208.csv"));
    assert!(matches_pattern("logs/**/*.csv", "logs/old/aic208.csv"));
    assert!(matches_pattern("logs/**/*.csv", "logs/aic208.csv"));
    assert!(matches_pattern("logs/tic20?.xlsx", "logs/tic207.xlsx"));
    assert!(!matches_pattern("logs/tic20?.xlsx", "logs/tic2077.xlsx"));
}

#[test]
fn file_cells_are_split() {
    let references = file_references("logs\\a.xlsx#Trend 1; logs/run#2.csv ;").expect("two files");
    assert_eq!(
        references,
        [
            FileReference {
                file: "logs/a.xlsx".into(),
                sheet: Some("Trend 1".into())
            },
            FileReference {
                file: "logs/run#2.csv".into(),
                sheet: None
            }
        ]
    );
    for outside in ["../a.csv", "/etc/a.csv", "C:\\a.csv", " ; "] {
        assert!(file_references(outside).is_err(), "{outside}");
    }
}

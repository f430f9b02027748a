//! Files, formats and clocks.

use super::*;

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
        "a.csv, line 2, column \"Time\": the date 03/04/2026 reads as 3 April 2026 (day first) or as 4 March 2026 (month first), and no other row tells which\n    \
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

/// The same four rows as an open document, with dates and times of day in columns of their own.
fn open_document() -> Vec<u8> {
    use std::io::Write;
    let mut rows = String::from("<table:table-row>");
    for heading in ["Date", "Time", "TIC-204.PV", "TIC-204.OP"] {
        rows.push_str(&format!(
            "<table:table-cell office:value-type=\"string\"><text:p>{heading}</text:p></table:table-cell>"
        ));
    }
    rows.push_str("</table:table-row>");
    for (second, (pv, op)) in [(71.2, 40), (71.25, 40), (71.4, 45), (72.0, 45)]
        .iter()
        .enumerate()
    {
        rows.push_str(&format!(
            "<table:table-row>\
             <table:table-cell office:value-type=\"date\" office:date-value=\"2026-03-14\"><text:p>14.03.26</text:p></table:table-cell>\
             <table:table-cell office:value-type=\"time\" office:time-value=\"PT09H05M{second:02}S\"><text:p>9:05</text:p></table:table-cell>\
             <table:table-cell office:value-type=\"float\" office:value=\"{pv}\"><text:p>{pv}</text:p></table:table-cell>\
             <table:table-cell office:value-type=\"float\" office:value=\"{op}\"><text:p>{op}</text:p></table:table-cell>\
             </table:table-row>"
        ));
    }
    let content = format!(
        "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\
         <office:document-content xmlns:office=\"urn:oasis:names:tc:opendocument:xmlns:office:1.0\" \
         xmlns:table=\"urn:oasis:names:tc:opendocument:xmlns:table:1.0\" \
         xmlns:text=\"urn:oasis:names:tc:opendocument:xmlns:text:1.0\">\
         <office:body><office:spreadsheet><table:table table:name=\"Trend\">{rows}</table:table>\
         </office:spreadsheet></office:body></office:document-content>"
    );
    let manifest = "<?xml version=\"1.0\"?><manifest:manifest xmlns:manifest=\"urn:oasis:names:tc:opendocument:xmlns:manifest:1.0\"/>";
    let mut archive = zip::ZipWriter::new(std::io::Cursor::new(Vec::new()));
    let plain =
        zip::write::SimpleFileOptions::default().compression_method(zip::CompressionMethod::Stored);
    for (name, text) in [
        ("mimetype", "application/vnd.oasis.opendocument.spreadsheet"),
        ("META-INF/manifest.xml", manifest),
        ("content.xml", content.as_str()),
    ] {
        archive.start_file(name, plain).expect("begun");
        archive.write_all(text.as_bytes()).expect("written");
    }
    archive.finish().expect("finished").into_inner()
}

#[test]
fn an_open_document_with_date_and_time_apart_is_read() {
    let log = Logs::new("a.ods").with("a.ods", open_document()).read();
    assert_four_rows(&log);
    assert_eq!(
        log.clock,
        Clock::Dated("2026-03-14T09:05:00".parse().expect("a time"))
    );
    assert_eq!(log.sources[0].sheet.as_deref(), Some("Trend"));
}

#[test]
fn a_long_table_with_words_among_its_values_is_read() {
    // Every third row holds the mode; the log may begin with one.
    for order in [["PV", "OP", "MODE"], ["MODE", "PV", "OP"]] {
        let mut text = String::from("Tag,Timestamp,Value\n");
        for (second, (pv, op)) in [(71.2, 40), (71.25, 40), (71.4, 45), (72.0, 45)]
            .iter()
            .enumerate()
        {
            for signal in order {
                let value = match signal {
                    "PV" => pv.to_string(),
                    "OP" => op.to_string(),
                    _ => "MAN".to_owned(),
                };
                text.push_str(&format!(
                    "TIC-204.{signal},2026-03-14T09:05:0{second},{value}\n"
                ));
            }
        }
        let log = csv(&text).read();
        assert_four_rows(&log);
        assert_eq!(log.samples.mode, ["MAN"; 4]);
    }
}

#[test]
fn a_clock_coarser_than_its_rows_is_told() {
    let rows = |step_s: f64| {
        let mut text = String::from("Time,TIC-204.PV,TIC-204.OP\n");
        for k in 0..60 {
            let second = f64::from(k) * step_s;
            text.push_str(&format!("2026-03-14 09:05:{second:02.0},{k},40\n"));
        }
        csv(&text).read().warnings
    };
    assert!(rows(0.95).is_empty(), "a few are no matter");
    let found = rows(0.5);
    assert!(
        found[0]
            .to_string()
            .starts_with("a.csv: 29 of 60 rows bear the same time as another row"),
        "{}",
        found[0]
    );
}

#[test]
fn a_file_of_several_loops_is_opened_once() {
    let logs = csv("Time,TIC-204.PV,TIC-204.OP,FIC-9.PV,FIC-9.OP\n0,71,40,5,20\n1,72,40,6,20\n");
    let cache = FileCache::new();
    let first = read_log(&logs.request, &cache).expect("a log");
    std::fs::remove_file(logs.folder.path().join("a.csv")).expect("removed");
    let logs = logs.asking(|request| request.tag = Some("FIC-9".to_owned()));
    let second = read_log(&logs.request, &cache).expect("what was read is kept");
    assert_eq!(first.samples.pv, [71.0, 72.0]);
    assert_eq!(second.samples.pv, [5.0, 6.0]);
    assert_eq!(first.sources[0].sha256, second.sources[0].sha256);
}

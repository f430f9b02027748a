//! What cannot be read for certain is refused, in these words.

use super::{Files, INTERVAL_S, ROWS, Truth, at, delimited, iso, truth};
use asleft::read::{ColumnNames, LogRule};
use chrono::{NaiveDateTime, TimeDelta};

/// The trace with these times.
fn timed(truth: &Truth, time: impl Fn(usize) -> String) -> Files {
    let headings = [
        "Time",
        "FIC-301.PV",
        "FIC-301.OP",
        "FIC-301.SP",
        "FIC-301.MODE",
    ];
    Files::one("trend.csv", delimited(&truth.table(&headings, time), ";"))
}

/// The times of the trace from another first moment.
fn from(moment: &str, format: &'static str) -> impl Fn(usize) -> String {
    let first: NaiveDateTime = moment.parse().expect("a moment");
    move |k| {
        (first + TimeDelta::seconds(INTERVAL_S * k as i64))
            .format(format)
            .to_string()
    }
}

#[test]
fn dates_that_read_two_ways() {
    let truth = truth();
    let files = timed(&truth, from("2026-04-03T09:05:00", "%d/%m/%Y %H:%M:%S"));
    assert_eq!(
        files.refusal(),
        "trend.csv, line 2, column \"Time\": the date 03/04/2026 reads as 3 April 2026 (day first) or as 4 March 2026 (month first), and no other row tells which\n    \
         add to job.toml: [[log]] with files = [\"trend.csv\"] and dates = \"dmy\" or dates = \"mdy\""
    );
    let files = timed(&truth, from("2026-04-03T09:05:00", "%y-%m-%d %H:%M:%S"));
    assert_eq!(
        files.refusal(),
        "trend.csv, line 2, column \"Time\": the date 26-04-03 reads as 26 April 2003 (day first) or as 3 April 2026 (year first), and no other row tells which\n    \
         add to job.toml: [[log]] with files = [\"trend.csv\"] and dates = \"dmy\" or dates = \"ymd\""
    );
}

#[test]
fn dates_that_a_spreadsheet_turned_round() {
    let truth = truth();
    let mut book = rust_xlsxwriter::Workbook::new();
    let sheet = book.add_worksheet();
    let format = rust_xlsxwriter::Format::new().set_num_format("dd/mm/yyyy hh:mm:ss");
    for (column, heading) in ["Time", "PV", "OP"].into_iter().enumerate() {
        sheet
            .write_string(0, column as u16, heading)
            .expect("written");
    }
    for k in 0..20 {
        let row = 1 + k as u32;
        if k < 10 {
            let days = 46_000.0 + k as f64 / 86_400.0;
            sheet
                .write_number_with_format(row, 0, days, &format)
                .expect("written");
        } else {
            sheet
                .write_string(row, 0, format!("14/03/2026 09:05:{k}"))
                .expect("written");
        }
        let value: f64 = truth.pv[k].parse().expect("a number");
        sheet.write_number(row, 1, value).expect("written");
        sheet.write_number(row, 2, 40.0).expect("written");
    }
    let bytes = book.save_to_buffer().expect("a workbook");
    assert_eq!(
        Files::one("trend.xlsx", bytes).refusal(),
        "trend.xlsx, sheet \"Sheet1\", cell A12: 10 times of this column are real dates and 10 are text: day and month may have been swapped in those that a spreadsheet recognised\n    \
         export again without opening the file in a spreadsheet program"
    );
}

#[test]
fn decimals_that_read_two_ways() {
    let truth = truth();
    let mut rows = truth.plain();
    for row in &mut rows[1..] {
        row[1] = format!("1.{}", &row[1][..3]);
        "40".clone_into(&mut row[2]);
        "1".clone_into(&mut row[3]);
    }
    let value = rows[1][1].clone();
    assert_eq!(
        Files::one("trend.csv", delimited(&rows, ";")).refusal(),
        format!(
            "trend.csv, line 2, column \"FIC-301.PV\": \"{value}\" may be a number with decimals or with thousands, and no other cell tells which\n    \
             add to job.toml: [[log]] with files = [\"trend.csv\"] and decimal = \".\" or decimal = \",\""
        )
    );
}

#[test]
fn both_decimal_signs() {
    let truth = truth();
    let mut rows = truth.plain();
    for row in &mut rows[100..] {
        row[1] = row[1].replace('.', ",");
    }
    let (point, comma) = (rows[1][1].clone(), rows[100][1].clone());
    assert_eq!(
        Files::one("trend.csv", delimited(&rows, ";")).refusal(),
        format!(
            "trend.csv, line 101, column \"FIC-301.PV\": \"{comma}\" has a decimal comma, but \"{point}\" in row 2 has a decimal point\n    \
             export again with one decimal sign"
        )
    );
}

#[test]
fn several_columns_for_one_role() {
    let truth = truth();
    for (headings, expected) in [
        (
            ["Time", "FIC-301.PV", "FIC-301.OP", "FIC-301/PV", "Mode"],
            "2 columns may be the PV: \"FIC-301.PV\" (#2), \"FIC-301/PV\" (#4)\n    name one in the schedule under \"pv column\"",
        ),
        (
            ["Time", "PV", "OP", "MV", "Mode"],
            "2 columns may be the OP: \"OP\" (#3), \"MV\" (#4)\n    name one in the schedule under \"op column\"",
        ),
        (
            ["Time", "PV", "OP", "SP", "SetPoint"],
            "2 columns may be the SP: \"SP\" (#4), \"SetPoint\" (#5)\n    name one in the schedule under \"sp column\"",
        ),
    ] {
        let files = Files::one("trend.csv", delimited(&truth.table(&headings, iso), ";"));
        assert_eq!(files.refusal(), format!("trend.csv, line 1: {expected}"));
    }
    let mut rows = truth.plain();
    for (k, row) in rows.iter_mut().enumerate() {
        row.insert(
            1,
            if k == 0 {
                "UTC time".to_owned()
            } else {
                iso(k)
            },
        );
    }
    assert_eq!(
        Files::one("trend.csv", delimited(&rows, ";")).refusal(),
        "trend.csv, line 1: 2 columns may be the time: \"Time\" (#1), \"UTC time\" (#2)\n    name one in the schedule under \"time column\""
    );
}

#[test]
fn columns_that_are_not_there() {
    let truth = truth();
    let table =
        |headings: [&str; 5]| Files::one("trend.csv", delimited(&truth.table(&headings, iso), ";"));
    let files = table(["Time", "TIC-204.PV", "TIC-204.OP", "TIC-204.SP", "Remark"]);
    assert_eq!(
        files.refusal(),
        "trend.csv, line 1: no column is recognised as the PV of FIC-301; its headings are \"Time\", \"TIC-204.PV\", \"TIC-204.OP\", \"TIC-204.SP\", \"Remark\"\n    \
         name it in the schedule under \"pv column\""
    );
    let files = table(["Time", "FIC-301.PV", "Valve", "FIC-301.SP", "Remark"]);
    assert_eq!(
        files.refusal(),
        "trend.csv, line 1: no column is recognised as the OP; its headings are \"Time\", \"FIC-301.PV\", \"Valve\", \"FIC-301.SP\", \"Remark\"\n    \
         name it in the schedule under \"op column\", or the file that holds it beside this one under \"test log\""
    );
    let named = |op: &str| ColumnNames {
        op: Some(op.to_owned()),
        ..ColumnNames::default()
    };
    let files =
        table(["Time", "FIC-301.PV", "Valve", "FIC-301.SP", "Remark"]).columns(named("Valv"));
    assert_eq!(
        files.refusal(),
        "trend.csv, line 1: the schedule names OP column \"Valv\", which the log does not have; its headings are \"Time\", \"FIC-301.PV\", \"Valve\", \"FIC-301.SP\", \"Remark\"\n    \
         did you mean \"Valve\"?"
    );
    let files = table(["Time", "FIC-301.PV", "Valve", "FIC-301.SP", "Remark"]).columns(named("#9"));
    assert_eq!(
        files.refusal(),
        "trend.csv, line 1: the schedule names OP column #9, but the log has columns #1 to #5"
    );
    let files =
        table(["Time", "FIC-301.PV", "Valve", "FIC-301.SP", "Remark"]).columns(named("FIC-301.PV"));
    assert_eq!(
        files.refusal(),
        "trend.csv, line 1: the schedule names column #2 as PV and as OP"
    );
}

#[test]
fn units_that_differ() {
    let truth = truth();
    for (heading, unit, shown) in [
        ("FIC-301.PV (degF)", "degC", "degF"),
        ("FIC-301.PV [°F]", "°C", "°F"),
        ("FIC-301 PV psi", "bar", "psi"),
        ("FIC-301.PV [l/h]", "m3/h", "l/h"),
        ("FIC-301.PV [bar(a)]", "bar(g)", "bar(a)"),
    ] {
        let headings = ["Time", heading, "FIC-301.OP", "FIC-301.SP", "FIC-301.MODE"];
        let text = delimited(&truth.table(&headings, iso), ";");
        let asking = || {
            Files::one("trend.csv", &text).asking(|request| request.pv_unit = Some(unit.to_owned()))
        };
        assert_eq!(
            asking().refusal(),
            format!(
                "trend.csv, line 1, column \"{heading}\": the PV of the log is in {shown}, that of the schedule in {unit}\n    \
                 give pv scale and pv offset in the schedule (schedule unit = log unit × scale + offset), or the unit and range of the log"
            )
        );
        // With the conversion it is read.
        let log = asking()
            .asking(|request| {
                request.pv_scale = Some(0.5);
                request.pv_offset = Some(-10.0);
            })
            .read();
        let first: f64 = truth.pv[0].parse().expect("a number");
        assert_eq!(log.samples.pv[0], first * 0.5 - 10.0);
    }
    // A unit that nobody knows, and one that does not say what it is against, are no contradiction.
    for (heading, unit) in [
        ("FIC-301.PV (widgets)", "m3/h"),
        ("FIC-301.PV [bar]", "bar(g)"),
        ("FIC-301.PV [m³/h]", "m3/h"),
    ] {
        let headings = ["Time", heading, "FIC-301.OP", "FIC-301.SP", "FIC-301.MODE"];
        let text = delimited(&truth.table(&headings, iso), ";");
        let log = Files::one("trend.csv", text)
            .asking(|request| request.pv_unit = Some(unit.to_owned()))
            .read();
        truth.is_in(&log, heading);
    }
}

#[test]
fn time_that_runs_back() {
    let truth = truth();
    let mut rows = truth.plain();
    // 63 s late: 21 rows after its place.
    let late = rows.remove(50);
    rows.insert(71, late);
    assert_eq!(
        Files::one("trend.csv", delimited(&rows, ";")).refusal(),
        "trend.csv, line 72, column \"Time\": time runs back from 2026-03-14 09:08:30 to 2026-03-14 09:07:27\n    \
         where summer time ends there, give zone in a [[log]] table of job.toml; else export the test again in order of time"
    );
}

#[test]
fn an_hour_that_summer_time_skips() {
    let truth = truth();
    let zone = LogRule {
        zone: Some(chrono_tz::Europe::Berlin),
        ..LogRule::default()
    };
    let files = timed(&truth, from("2026-03-29T01:55:00", "%Y-%m-%d %H:%M:%S")).rule(zone);
    assert_eq!(
        files.refusal(),
        "trend.csv, line 102, column \"Time\": 2026-03-29 02:00:00 does not exist in the time of Europe/Berlin: summer time skips it\n    \
         correct or remove the zone in the [[log]] table of job.toml"
    );
}

#[test]
fn rows_without_a_time_or_a_number() {
    let truth = truth();
    let mut rows = truth.plain();
    rows[40][0].clear();
    "soon".clone_into(&mut rows[41][0]);
    assert_eq!(
        Files::one("trend.csv", delimited(&rows, ";")).refusal(),
        "trend.csv, line 41, column \"Time\": the row has values and no time\n\
         trend.csv, line 42, column \"Time\": \"soon\" is not a time like the others"
    );
    let mut rows = truth.plain();
    "forty".clone_into(&mut rows[40][2]);
    assert_eq!(
        Files::one("trend.csv", delimited(&rows, ";")).refusal(),
        "trend.csv, line 41, column \"FIC-301.OP\": \"forty\" is not a number\n    \
         correct it, or name the text under bad_values in a [[log]] table of job.toml"
    );
    let mut rows = truth.plain();
    for (k, row) in rows.iter_mut().enumerate() {
        row.push(if k == 0 {
            "Quality".to_owned()
        } else {
            "perhaps".to_owned()
        });
    }
    assert!(
        Files::one("trend.csv", delimited(&rows, ";")).refusal().starts_with(
            "trend.csv, line 2, column \"Quality\": \"perhaps\" is not a known quality\n    \
             name it under bad_values in a [[log]] table of job.toml where it means a bad sample, or name another quality column\n"
        )
    );
}

#[test]
fn a_row_between_blanks_that_lacks_a_value() {
    let truth = truth();
    let mut rows = truth.plain();
    rows[40].remove(2);
    assert_eq!(
        Files::one("trend.txt", delimited(&rows, "  ")).refusal(),
        "trend.txt, line 41: the line has 4 values and the others have 5; between blanks nothing tells which column each belongs to\n    \
         export again with a semicolon or a tab between the columns"
    );
}

/// One signal with its times.
fn signal(heading: &str, values: &[String], first: usize) -> String {
    let rows = values.iter().enumerate();
    let rows: String = rows
        .map(|(k, value)| format!("{};{value}\n", iso(first + k)))
        .collect();
    format!("Time;{heading}\n{rows}")
}

#[test]
fn files_that_do_not_make_a_loop() {
    let truth = truth();
    // No OP in any; an OP of another time; a whole log and a later one that lost its OP.
    let no_op = "no column is recognised as the OP; its headings are \"Time\", \"FIC-301.PV\"\n    \
                 name it in the schedule under \"op column\", or the file that holds it beside this one under \"test log\"";
    let files = Files::new("a.csv; b.csv")
        .with("a.csv", signal("FIC-301.PV", &truth.pv, 0))
        .with("b.csv", signal("FIC-301.PV", &truth.pv, ROWS));
    assert_eq!(
        files.refusal(),
        format!("a.csv, line 1: {no_op}\nb.csv, line 1: {no_op}")
    );
    let files = Files::new("a.csv; b.csv")
        .with("a.csv", signal("FIC-301.PV", &truth.pv, 0))
        .with("b.csv", signal("FIC-301.OP", &truth.op, ROWS));
    assert_eq!(
        files.refusal(),
        "a.csv: it holds the PV from 2026-03-14 09:05:00 to 2026-03-14 09:14:57, and no file of the loop holds the OP at that time\n    \
         name files of the same time\n\
         b.csv: it holds the OP from 2026-03-14 09:15:00 to 2026-03-14 09:24:57, and no file of the loop holds the PV at that time\n    \
         name files of the same time"
    );
    let files = Files::new("a.csv; b.csv")
        .with("a.csv", delimited(&truth.plain(), ";"))
        .with("b.csv", signal("FIC-301.PV", &truth.pv, ROWS));
    assert_eq!(files.refusal(), format!("b.csv, line 1: {no_op}"));
}

#[test]
fn clocks_that_do_not_go_together() {
    let truth = truth();
    let times = |format: &'static str, first: usize| {
        let rows: String = (0..ROWS)
            .map(|k| {
                format!(
                    "{};{};{}\n",
                    at(first + k).format(format),
                    truth.pv[k],
                    truth.op[k]
                )
            })
            .collect();
        format!("Time;PV;OP\n{rows}")
    };
    let files = Files::new("a.csv; b.csv")
        .with("a.csv", times("%Y-%m-%dT%H:%M:%S+01:00", 0))
        .with("b.csv", times("%Y-%m-%dT%H:%M:%S", ROWS));
    assert_eq!(
        files.refusal(),
        "b.csv: the times are local and those of a.csv tell their offset from universal time: nothing tells how they follow each other\n    \
         give zone in a [[log]] table of job.toml for the file with local times"
    );
    let files = Files::new("a.csv; b.csv")
        .with("a.csv", times("%Y-%m-%dT%H:%M:%S", 0))
        .with("b.csv", times("%H:%M:%S", ROWS));
    assert_eq!(
        files.refusal(),
        "b.csv: logs without dates cannot be put together: nothing tells how they follow each other\n    \
         give one file per test"
    );
}

#[test]
fn workbooks_that_are_damaged() {
    let mut book = rust_xlsxwriter::Workbook::new();
    book.add_worksheet().write_number(0, 0, 1).expect("written");
    let whole = book.save_to_buffer().expect("a workbook");
    let cut = &whole[..whole.len() / 2];
    for name in ["trend.xlsx", "trend.xlsm", "trend.xlsb", "trend.ods"] {
        let ending = name.rsplit_once('.').map_or("", |(_, ending)| ending);
        assert_eq!(
            Files::one(name, cut).refusal(),
            format!(
                "{name}: the file is not a whole .{ending} workbook: it was cut short or damaged on the way, or is of another kind\n    \
                 copy it again from where it was exported, or open it in a spreadsheet program and save it again"
            )
        );
    }
}

#[test]
fn times_to_the_right_of_their_signals() {
    let truth = truth();
    let mut text = "FIC-301.PV;Time;FIC-301.OP;Time;Remark\n".to_owned();
    for k in 0..ROWS {
        text += &format!("{};{};{};{};-\n", truth.pv[k], iso(k), truth.op[k], iso(k));
    }
    assert_eq!(
        Files::one("trend.csv", text).refusal(),
        "trend.csv, line 1: 2 columns may be the time: \"Time\" (#2), \"Time\" (#4)\n    \
         name one in the schedule under \"time column\""
    );
}

//! Whole job folders.

use super::*;
use crate::design::Aim;
use crate::settings::{Action, EquationForm, IntegralUnit, Native, ProportionalUnit};
use crate::trace::Moment;
use rust_xlsxwriter::{ExcelDateTime, Format, Workbook};

const JOB: &str = "[job]\nplant = \"P\"\nowner = \"O\"\ndocument = \"D-{tag}\"\nrevision = \"0\"\ndate = 2026-03-14\nreason = \"First\"\n[[procedure]]\ntitle = \"Permit\"\nreference = \"SP-1\"\n";

const HEADINGS: &str = "Tag;Service;PV unit;PV low;pv_high;Action;Form;P as;I as;Scan s";

/// A folder with a `job.toml` and a schedule as text.
fn folder(job: &str, schedule: &str) -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a folder");
    std::fs::write(folder.path().join("job.toml"), job).expect("written");
    std::fs::write(folder.path().join("loops.csv"), schedule).expect("written");
    folder
}

fn read(schedule: &str) -> (Job, Vec<Problem>) {
    Job::read(folder(JOB, schedule).path()).unwrap_or_else(|problems| panic!("{problems:?}"))
}

fn texts(problems: &[Problem]) -> Vec<String> {
    problems.iter().map(ToString::to_string).collect()
}

fn refusal(job: &str, schedule: &str) -> Vec<String> {
    texts(&Job::read(folder(job, schedule).path()).expect_err("a refusal"))
}

/// The problems of the first row of a schedule with further columns.
fn row_problems(headings: &str, cells: &str) -> Vec<String> {
    let (job, _) = read(&format!(
        "{HEADINGS};{headings}\nTIC-1;Outlet;degC;0;100;reverse;standard;gain;s;1;{cells}\n"
    ));
    texts(&job.loops[0].as_ref().expect_err("a bad row").problems)
}

#[test]
fn a_workbook_of_every_kind_of_cell_is_typed() {
    let mut book = Workbook::new();
    book.add_worksheet().set_name("Notes").expect("a name");
    let sheet = book.add_worksheet();
    let date = Format::new().set_num_format("yyyy-mm-dd");
    let cells = [
        ("TAG", "101"),
        ("service", "Outlet"),
        ("PV Unit", "degC"),
        ("pv low", "0"),
        ("pv high", "150"),
        ("action", "Direct"),
        ("form", "Ideal"),
        ("p as", "Band"),
        ("i as", "1/min"),
        ("scan s", "0.5"),
        ("found p", "120"),
        ("found i", "0.5"),
        ("left p", "80"),
        ("left i", "0.7"),
        ("left action", "reverse"),
        ("aim", "Set Point"),
        ("derivative", "yes"),
        ("revision", "0"),
        ("test log", "logs/a.xlsx#Trend"),
        ("test to", "90"),
        ("op column", "#3"),
        ("safety", "no"),
    ];
    for (column, (heading, value)) in cells.iter().enumerate() {
        let column = column as u16;
        sheet
            .write_string(2, column + 1, *heading)
            .expect("written");
        match value.parse::<f64>() {
            Ok(number) => sheet.write_number(3, column + 1, number).expect("written"),
            Err(_) => sheet.write_string(3, column + 1, *value).expect("written"),
        };
    }
    for (column, heading, day) in [(24, "left on", 16), (25, "tested on", 15)] {
        sheet.write_string(2, column, heading).expect("written");
        let at = ExcelDateTime::from_ymd(2026, 3, day).expect("a date");
        sheet
            .write_datetime_with_format(3, column, at, &date)
            .expect("written");
    }
    let folder = folder(JOB, "");
    std::fs::remove_file(folder.path().join("loops.csv")).expect("removed");
    book.save(folder.path().join("loops.xlsx")).expect("saved");
    let (job, warnings) = Job::read(folder.path()).expect("a job");
    assert_eq!(warnings, []);
    let row = job.loops[0].as_ref().expect("a row");
    assert_eq!(row.tag, "101");
    assert_eq!(row.place.to_string(), "loops.xlsx, sheet \"Sheet2\", row 4");
    assert_eq!(row.controller.form, EquationForm::Standard);
    assert_eq!(row.controller.p_as, ProportionalUnit::Band);
    assert_eq!(row.controller.i_as, IntegralUnit::PerMinute);
    assert_eq!(row.controller.d_filter_n, 10.0);
    assert_eq!(row.controller.op_span.high(), 100.0);
    assert_eq!(row.action, Action::Direct);
    assert_eq!(
        row.found,
        Some(Native {
            p: 120.0,
            i: 0.5,
            d: 0.0
        })
    );
    let left = row.left.as_ref().expect("settings as left");
    assert_eq!(
        left.native,
        Native {
            p: 80.0,
            i: 0.7,
            d: 0.0
        }
    );
    assert_eq!(row.left_action, Some(Action::Reverse));
    assert_eq!(
        left.on.map(|on| on.to_string()).as_deref(),
        Some("2026-03-16")
    );
    assert_eq!(row.aim, Aim::SetPoint);
    assert_eq!(row.revision.as_deref(), Some("0"));
    assert_eq!(
        row.test.as_ref().and_then(|log| log.to),
        Some(Moment::Elapsed(90.0))
    );
    assert_eq!(row.columns.op.as_deref(), Some("#3"));
    assert_eq!(job.document(row).number, "D-101");
    assert_eq!(job.document(row).reason.as_deref(), Some("First"));
    let csv = String::from_utf8(schedule_row_csv(row)).expect("text");
    assert!(csv.starts_with("TAG,service,PV Unit,"), "{csv}");
    assert!(csv.contains("\n101,Outlet,degC,0,150,Direct,"), "{csv}");
}

#[test]
fn a_row_that_cannot_be_used_does_not_stop_the_others() {
    let (job, warnings) = read(&format!(
        "{HEADINGS};xyzzy;found i\nTIC-1;Outlet;degC;100;0;revers;standard;gain;s;0;red;\nTIC-2;Inlet;degC;0;100;reverse;standard;gain;s;1;;\n"
    ));
    let bad = job.loops[0].as_ref().expect_err("a bad row");
    assert_eq!((bad.tag.as_str(), bad.row), ("TIC-1", 2));
    assert_eq!(
        texts(&bad.problems),
        [
            "loops.csv, line 2, column \"pv high\": pv high has to be above pv low, found pv low 100 and pv high 0\n    are the two swapped?",
            "loops.csv, line 2, column \"action\": action has to be reverse or direct, found \"revers\"\n    did you mean \"reverse\"?",
            "loops.csv, line 2, column \"scan s\": scan s has to be above 0, found 0",
        ]
    );
    let row = job.loops[1].as_ref().expect("a good row");
    assert_eq!(row.number, 2);
    assert_eq!(
        texts(&row.missing_for_record()),
        [
            "loops.csv, line 3: TIC-2 has no found p, which a record needs\n    fill in the column \"found p\"",
            "loops.csv, line 3: TIC-2 has no test log, which a record needs\n    fill in the column \"test log\""
        ]
    );
    assert_eq!(
        texts(&warnings),
        [
            "loops.csv, line 1, column \"xyzzy\": the heading \"xyzzy\" is not known; its column is not read"
        ]
    );
}

#[test]
fn cells_that_cannot_be_are_named() {
    for (headings, cells, expected) in [
        (
            "found p;found i",
            ";10",
            "found p is blank although found i or found d is given",
        ),
        (
            "found p",
            "-2",
            "found p has to be above 0 (the sign is the action's), found -2",
        ),
        (
            "found p",
            "two",
            "found p has to be a number, found \"two\"",
        ),
        (
            "found p;found i",
            "2;-1",
            "found i must not be below 0, found -1",
        ),
        (
            "left p;left on",
            "2;14.03.2026",
            "left on has to be a date such as 2026-03-14, found \"14.03.2026\"",
        ),
        (
            "aim;allowed deviation",
            "averaging;5",
            "expected load is blank; the aim averaging needs it",
        ),
        (
            "safety",
            "perhaps",
            "safety has to be yes or no, found \"perhaps\"",
        ),
        (
            "test log;test from;test to",
            "a.csv;2026-03-14 09:00;2026-03-14 08:00",
            "test to is not after test from",
        ),
        (
            "test log;test from",
            "a.csv;monday",
            "test from has to be a date and time such as 2026-03-14 09:05:00, or seconds where the log has no dates, found \"monday\"",
        ),
        ("pv scale", "0", "pv scale must not be 0"),
        (
            "pv filter s",
            "0.5 s",
            "pv filter s has to be a number, found \"0.5 s\"\n    write 0.5 alone, in the unit of the heading",
        ),
        (
            "pv filter s",
            "0,5 s",
            "write 0,5 alone, in the unit of the heading",
        ),
        (
            "found p;found i",
            "red;10",
            "found p has to be a number, found \"red\"",
        ),
        (
            "found p",
            "1e300",
            "found p is out of all proportion, found 1e300",
        ),
        (
            "test log;trial log",
            "a.csv;a.csv",
            "the trial log is the test log, a.csv",
        ),
        (
            "pv column;op column",
            "#2;#2",
            "op column is \"#2\", which pv column is already",
        ),
        (
            "inner loop",
            "FIC-9",
            "the inner loop FIC-9 is not in the loop schedule",
        ),
        (
            "inner loop",
            "TIC-1",
            "the cascade of TIC-1 comes back to itself",
        ),
    ] {
        let found = row_problems(headings, cells);
        assert_eq!(found.len(), 1, "{found:?}");
        assert!(found[0].contains(expected), "{found:?}");
    }
    let (job, _) = read(&format!(
        "{HEADINGS}\nTIC-1;Outlet;degC;0;100;reverse;parallel;band;s;1\n"
    ));
    assert_eq!(
        texts(&job.loops[0].as_ref().expect_err("a bad row").problems),
        [
            "loops.csv, line 2, column \"p as\": p as has to be gain or gain per unit with the form parallel, found \"band\"",
            "loops.csv, line 2, column \"i as\": i as has to be 1/s or 1/min with the form parallel (its integral setting is a gain), found \"s\""
        ]
    );
    let (job, _) = read(&format!(
        "{HEADINGS};found p;found i;found d\nTIC-1;Outlet;degC;0;100;reverse;parallel;gain;1/s;1;0;0.1;2\n"
    ));
    assert_eq!(
        texts(&job.loops[0].as_ref().expect_err("a bad row").problems),
        [
            "loops.csv, line 2, column \"found d\": found d has no meaning where found p is 0: its filter follows from both"
        ]
    );
}

#[test]
fn tags_that_come_twice_are_both_refused() {
    let row = |tag: &str| format!("{tag};Outlet;degC;0;100;reverse;standard;gain;s;1\n");
    let (job, _) = read(&format!(
        "{HEADINGS}\n{}{}{}",
        row("TIC-1"),
        row("TIC-2"),
        row("tic-1")
    ));
    let bad = job.loops[0].as_ref().expect_err("refused");
    assert_eq!(
        texts(&bad.problems),
        ["loops.csv, line 2: the tag TIC-1 stands in more than one row: 2, 4"]
    );
    assert!(job.loops[1].is_ok());
    assert!(job.loops[2].is_err());
}

#[test]
fn inner_loops_come_before_outer_ones() {
    let row = |tag: &str, inner: &str| {
        format!("{tag};Outlet;degC;0;100;reverse;standard;gain;s;1;{inner}\n")
    };
    let (job, _) = read(&format!(
        "{HEADINGS};inner loop\n{}{}{}{}",
        row("AIC-1", "tic-2"),
        row("LIC-4", ""),
        row("TIC-2", "FIC-3"),
        row("FIC-3", "")
    ));
    assert_eq!(job.inner_first(), [3, 2, 0, 1]);
    let outer = job.loops[0].as_ref().expect("a row");
    assert_eq!(outer.inner_loop.as_deref(), Some("TIC-2"));
    let (job, _) = read(&format!(
        "{HEADINGS};inner loop\n{}{}",
        row("A-1", "B-2"),
        row("B-2", "A-1")
    ));
    assert!(job.loops.iter().all(Result::is_err));
}

#[test]
fn what_stops_the_job_is_told_together() {
    let found = refusal(
        "[job]\nplant = \"P\"\n",
        "tag;service;pv untt\nTIC-1;Outlet;degC\n",
    );
    assert!(
        found
            .iter()
            .any(|text| text.starts_with("job.toml, line 1: \"owner\" is missing"))
    );
    assert!(
        found.iter().any(|text| text.starts_with(
            "loops.csv, line 1: the loop schedule lacks the headings \"pv unit\", \"pv low\","
        )),
        "{found:?}"
    );
    assert!(
        found
            .iter()
            .any(|text| text.ends_with("did you mean \"pv unit\"?")),
        "{found:?}"
    );
    let found = refusal(JOB, &format!("{HEADINGS}\n;;;\n"));
    assert_eq!(
        found,
        [
            "loops.csv: the loop schedule has headings and no loop\n    give each loop a row below the headings"
        ]
    );
    let caution = format!("{JOB}[[caution]]\nloops = [\"TIC-9\"]\ntext = \"Mind\"\n");
    let found = refusal(
        &caution,
        &format!("{HEADINGS}\nTIC-1;Outlet;degC;0;100;reverse;standard;gain;s;1\n"),
    );
    assert_eq!(
        found,
        [
            "job.toml, line 11: the caution is for TIC-9, which is not in the loop schedule\n    did you mean \"TIC-1\"?"
        ]
    );
}

#[test]
fn schedules_are_looked_for_by_name() {
    let folder = tempfile::tempdir().expect("a folder");
    let found = texts(&Job::read(folder.path()).expect_err("nothing there"));
    assert!(found[0].starts_with("job.toml: there is no such file in the job folder"));
    assert!(found[1].starts_with("the job folder holds no loop schedule"));
    for name in ["loops.xlsx", "loops.csv"] {
        std::fs::write(folder.path().join(name), "x").expect("written");
    }
    let found = texts(&Job::read(folder.path()).expect_err("two of them"));
    assert!(
        found[1]
            .starts_with("the job folder holds more than one loop schedule: loops.xlsx, loops.csv")
    );
}

#[test]
fn numbers_as_text_follow_the_decimal_sign_of_the_schedule() {
    let (job, _) = read(&format!(
        "{HEADINGS};found p;found i\nTIC-1;Outlet;degC;0;100;reverse;standard;gain;s;0,5;1,25;60\n"
    ));
    let row = job.loops[0].as_ref().expect("a row");
    assert_eq!(row.controller.scan_s, 0.5);
    assert_eq!(row.found.map(|found| found.p), Some(1.25));
    let found = refusal(
        JOB,
        &format!("{HEADINGS};found p\nTIC-1;Outlet;degC;0;100;reverse;standard;gain;s;1;1,250\n"),
    );
    assert!(found[0].starts_with("loops.csv, line 2, column \"found p\": \"1,250\" may be a number with decimals or with thousands"));
}

#[test]
fn formulas_are_not_handed_on() {
    let (job, _) = read(&format!(
        "{HEADINGS};remarks;pv offset\nTIC-1;Outlet;degC;-5;100;reverse;standard;gain;s;1;=1+1;-3\n"
    ));
    let row = job.loops[0].as_ref().expect("a row");
    let csv = String::from_utf8(schedule_row_csv(row)).expect("text");
    assert!(
        csv.ends_with("TIC-1,Outlet,degC,-5,100,reverse,standard,gain,s,1,'=1+1,-3\n"),
        "{csv}"
    );
}

#[test]
fn document_numbers_are_file_names_and_each_ones_own() {
    let job = JOB.replace("date =", "dossier = \"D-X-1\"\ndate =");
    let row = |tag: &str| format!("{tag};Outlet;degC;0;100;reverse;standard;gain;s;1\n");
    let folder = folder(
        &job,
        &format!("{HEADINGS}\n{}{}{}", row("A/B"), row("X-1"), row("TIC-2")),
    );
    let (job, _) = Job::read(folder.path()).expect("a job");
    let message = |k: usize| {
        job.loops[k].as_ref().expect_err("refused").problems[0]
            .message
            .clone()
    };
    assert!(message(0).starts_with("the document number D-A/B holds \"/\""));
    assert_eq!(
        message(1),
        "the document number D-X-1 is that of the dossier"
    );
    assert!(job.loops[2].is_ok());
}

#[test]
fn a_log_that_is_not_there_is_told_at_its_cell() {
    let folder = tempfile::tempdir().expect("a folder");
    let root = folder.path();
    std::fs::write(root.join("job.toml"), JOB).expect("written");
    std::fs::write(
        root.join("loops.csv"),
        format!(
            "{HEADINGS};test log\nTIC-1;Outlet;degC;0;100;reverse;standard;gain;s;1;{}\n",
            "\"logs/TIC_1.csv;b.csv;logs/there.csv\""
        ),
    )
    .expect("written");
    std::fs::create_dir(root.join("logs")).expect("a folder");
    for name in ["logs/tic1.csv", "logs/there.csv"] {
        std::fs::write(root.join(name), "t,pv,op\n").expect("written");
    }
    let (job, _) = Job::read(root).expect("a job");
    let row = job.loops[0].as_ref().expect("a good row");
    let log = row.test.as_ref().expect("a log");
    assert_eq!(
        texts(&job.find_files(log).expect_err("two are missing")),
        [
            "loops.csv, line 2, column \"test log\": there is no file logs/TIC_1.csv in the job folder\n    did you mean logs/tic1.csv?",
            "loops.csv, line 2, column \"test log\": there is no file b.csv in the job folder"
        ]
    );
    let outside = LogCell {
        files: "../a.csv".into(),
        ..log.clone()
    };
    assert!(
        texts(&job.find_files(&outside).expect_err("outside"))[0].starts_with(
            "loops.csv, line 2, column \"test log\": ../a.csv: a log is named by its place below the job folder"
        )
    );
}

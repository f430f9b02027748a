//! Jobs with several mistakes at once, and what the exit code tells.

use crate::plant::{JobFolder, morning, span, steps};
use crate::support::{Run, asleft, names_in};
use asleft::model::{Kind, ProcessModel};
use rust_xlsxwriter::Workbook;
use serde_json::Value;
use std::fs;

const TEST_LOG: &[(&str, &str)] = &[("test log", "logs/good.csv")];

fn good_log() -> String {
    let model = ProcessModel::of_kind(Kind::FirstOrder, 1.1, 30.0, 0.0, 5.0);
    let trend = steps(model, &[40.0, 45.0, 40.0, 35.0, 40.0], 180.0, 1.0, 0.05);
    trend.csv(["Time", "PV", "OP", "SP"], span(0.0, 100.0), morning(3))
}

/// A job of two loops, the second of which a test spoils.
fn two_loops(cells: &[(&str, &str)]) -> JobFolder {
    JobFolder::new()
        .with("logs/good.csv", good_log())
        .and_loop("TIC-1", TEST_LOG)
        .and_loop("TIC-2", cells)
}

/// A workbook whose sheet "Trend" has a text among its numbers, in C5.
fn workbook_with_a_word() -> Vec<u8> {
    let mut book = Workbook::new();
    book.add_worksheet().set_name("Title").expect("a name");
    let sheet = book.add_worksheet();
    sheet.set_name("Trend").expect("a name");
    for (column, heading) in ["Time (s)", "TIC-2.PV", "TIC-2.OP"].into_iter().enumerate() {
        sheet
            .write_string(0, column as u16, heading)
            .expect("written");
    }
    for row in 1..40_u32 {
        sheet.write_number(row, 0, f64::from(row)).expect("written");
        sheet.write_number(row, 1, 50.0).expect("written");
        sheet.write_number(row, 2, 40.0).expect("written");
    }
    sheet.write_string(4, 2, "forty").expect("written");
    book.save_to_buffer().expect("a workbook")
}

fn said(run: &Run) -> String {
    let words: Vec<&str> = run
        .out
        .split_whitespace()
        .chain(run.err.split_whitespace())
        .collect();
    words.join(" ")
}

fn holds(run: &Run, texts: &[&str]) {
    let said = said(run);
    for text in texts {
        assert!(
            said.contains(text),
            "\"{text}\" is not in:\n{}{}",
            run.out,
            run.err
        );
    }
}

#[test]
fn mistakes_in_job_schedule_and_log_are_told_together() {
    let job = two_loops(&[("test log", "logs/word.xlsx#Trend")])
        .with("logs/word.xlsx", workbook_with_a_word())
        .and_loop("TIC-3", &[("test log", "logs/good.csv"), ("scan s", "0")])
        .and_in_job("[[log]]\nfiles = [\"logs/tic9*.csv\"]\ndates = \"dmy\"\n");
    let run = asleft(&["check", job.typed()]).ends_with(3);
    holds(
        &run,
        &[
            "warning job.toml: no log of the schedule fits the pattern \"logs/tic9*.csv\" of a [[log]] table",
            "error logs/word.xlsx, sheet \"Trend\", cell C5: \"forty\" is not a number",
            "error loops.csv, line 4, column \"scan s\": scan s has to be above 0, found 0",
            "Would give 0 records for signature, 1 draft, 0 withheld; 2 loops failed.",
        ],
    );
    // What stops the job as a whole does not hide the schedule's mistakes.
    let job = job.and_in_job("[limitz]\nms = 1.7\n");
    let run = asleft(&["check", job.typed()]).ends_with(1);
    holds(
        &run,
        &[
            "error job.toml, line 18: \"limitz\" is not a table of job.toml did you mean \"limits\"?",
            "error loops.csv, line 4, column \"scan s\": scan s has to be above 0, found 0",
        ],
    );
}

#[test]
fn one_bad_loop_does_not_stop_the_others() {
    let job = two_loops(&[("test log", "logs/none.csv")]);
    let run = asleft(&["record", job.typed()]).ends_with(3);
    holds(
        &run,
        &[
            "TIC-1 draft HM-TIC-1_rev0.pdf",
            "TIC-2 failed error loops.csv, line 3, column \"test log\": there is no file logs/none.csv in the job folder",
            "dossier draft HM-DOSSIER_rev0.pdf",
            "0 records for signature, 1 draft, 0 withheld; 1 loop failed.",
        ],
    );
    assert_eq!(
        names_in(&job.path().join("records")),
        [
            "HM-DOSSIER_rev0.json",
            "HM-DOSSIER_rev0.pdf",
            "HM-TIC-1_rev0.json",
            "HM-TIC-1_rev0.pdf",
            "register.csv"
        ]
    );
    // `check` foretold it, and `--quiet` tells the failure alone.
    asleft(&["check", job.typed()]).ends_with(3);
    let run = asleft(&["check", "--quiet", job.typed()]).ends_with(3);
    assert!(run.out.is_empty(), "{}", run.out);
    assert!(run.err.starts_with("TIC-2"), "{}", run.err);
    // Alone it leaves nothing to be done; the loop that can be recorded, alone, is done.
    asleft(&["check", job.typed(), "--loop", "tic-2"]).ends_with(1);
    asleft(&["check", job.typed(), "--loop", "TIC-1"]).ends_with(0);
    let run = asleft(&["check", job.typed(), "--loop", "TIC-9"]).ends_with(1);
    holds(&run, &["there is no loop TIC-9", "did you mean TIC-"]);
}

#[test]
fn files_that_are_no_workbooks_are_told() {
    let job = two_loops(&[("test log", "logs/text.xlsx")])
        .with("logs/text.xlsx", "Time,PV,OP\n0,50,40\n")
        .with("logs/word.xlsx", workbook_with_a_word())
        .and_loop("TIC-3", &[("test log", "logs/word.xlsx#Trand")]);
    let run = asleft(&["check", job.typed()]).ends_with(3);
    holds(
        &run,
        &[
            "error logs/text.xlsx: ",
            "error logs/word.xlsx: there is no sheet \"Trand\"",
        ],
    );
}

#[test]
fn a_place_that_cannot_be_written_to_ends_with_1() {
    let job = two_loops(TEST_LOG).with("taken", "a file of that name");
    for out in ["taken", "taken/records"] {
        let out = job.path().join(out);
        let out = out.to_str().expect("a plain path");
        let run = asleft(&["record", job.typed(), "--out", out]).ends_with(1);
        holds(&run, &["taken"]);
        assert!(run.out.is_empty(), "{}", run.out);
    }
    assert_eq!(
        fs::read_to_string(job.path().join("taken")).expect("there"),
        "a file of that name"
    );
    assert!(!job.path().join("records").exists());
    let taken = job.path().join("taken");
    asleft(&["new", taken.to_str().expect("a plain path")]).ends_with(1);
}

#[test]
fn every_command_gives_one_json_document() {
    let job = two_loops(&[("test log", "logs/none.csv")]);
    let log = job.path().join("logs/good.csv");
    let fresh = job.path().join("fresh");
    let [log, fresh] = [&log, &fresh].map(|path| path.to_str().expect("a plain path"));
    for (arguments, code) in [
        (vec!["new", fresh], 0),
        (vec!["new", fresh], 1),
        (vec!["inspect", log], 0),
        (
            vec!["inspect", "--job", job.typed(), "--tag", "TIC-1", log],
            0,
        ),
        (vec!["inspect", job.typed()], 1),
        (vec!["check", job.typed()], 3),
        (vec!["check", fresh], 0),
        (vec!["record", "--no-dossier", job.typed()], 3),
        (vec!["schema"], 0),
    ] {
        let run = asleft(&[&["--json"], arguments.as_slice()].concat()).ends_with(code);
        let document: Value = serde_json::from_str(&run.out)
            .unwrap_or_else(|error| panic!("{arguments:?}: {error}\n{}", run.out));
        assert!(document.is_object(), "{arguments:?}");
        assert!(run.err.is_empty(), "{arguments:?}: {}", run.err);
    }
}

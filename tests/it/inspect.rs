//! What `inspect` says of a file, and that the line of the schedule it proposes does read that file.

use crate::plant::JobFolder;
use crate::support::{asleft, asleft_in, files_below, folder, holds_as_kept, root};
use serde_json::Value;
use std::fmt::Write;
use std::fs;
use std::path::Path;

/// Lines and signs that a terminal shows at once.
const SCREEN: (usize, usize) = (30, 100);

/// A step test of 90 rows, each as `row` writes it from its number, its PV and its OP.
fn steps(heading: &str, row: impl Fn(usize, f64, f64) -> String) -> String {
    let mut text = format!("{heading}\n");
    for k in 0..90 {
        let op = if (30..60).contains(&k) { 45.0 } else { 40.0 };
        let pv = 50.0 + 0.25 * op + 0.01 * (k % 7) as f64;
        writeln!(text, "{}", row(k, pv, op)).expect("a string takes any text");
    }
    text
}

fn minute(k: usize) -> String {
    format!("{:02}:{:02}:00", 9 + k / 60, k % 60)
}

/// Files of strangers: each says too little, or says it in its own way.
fn strange() -> Vec<(&'static str, Vec<u8>)> {
    let utf16 = steps(
        "Zeit;TIC-1 Istwert [°C];TIC-1 Stellwert [%]",
        |k, pv, op| format!("14.03.2026 {};{pv:.2};{op:.1}", minute(k)).replace('.', ","),
    )
    // The points of the dates are not decimal points.
    .replace("14,03,2026", "14.03.2026");
    let utf16 = std::iter::once(0xFEFF).chain(utf16.encode_utf16());
    let text = |text: String| text.into_bytes();
    vec![
        ("utf16.csv", utf16.flat_map(u16::to_le_bytes).collect()),
        (
            "order of day and month.csv",
            text(steps("Time,PV,OP", |k, pv, op| {
                format!("03/04/2026 {},{pv:.2},{op}", minute(k))
            })),
        ),
        (
            "decimals or thousands.csv",
            text(steps("Time;TIC-2.PV;TIC-2.OP", |k, pv, op| {
                format!("2026-03-14 {};{:.3};{op}", minute(k), pv / 8.0)
            })),
        ),
        (
            "both.csv",
            text(steps("Time;PV;OP", |k, pv, op| {
                format!("03/04/2026 {};{:.3};{op}", minute(k), pv / 8.0)
            })),
        ),
        (
            "two may be the PV.csv",
            text(steps("Time,Measurement,PV,Output", |k, pv, op| {
                format!("2026-03-14 {},{pv:.2},{:.2},{op}", minute(k), pv + 1.0)
            })),
        ),
        (
            "unusual word.csv",
            text(steps(
                "Date,Time,TIC-3 Water (ppm),TIC-3 OP",
                |k, pv, op| format!("14/03/2026,{},{pv:.2},{op}", minute(k)),
            )),
        ),
        (
            "another tag for the valve.csv",
            text(steps("Time,TI-4,TV-4 position", |k, pv, op| {
                format!("2026-03-14 {},{pv:.2},{op}", minute(k))
            })),
        ),
        (
            "long.csv",
            text(steps("Tag;Timestamp;Value;Quality", |k, pv, op| {
                let quality = if k % 20 == 7 { "Bad" } else { "Good" };
                let at = minute(k);
                format!(
                    "TIC-5.PV;2026-03-14T{at}Z;{pv:.2};{quality}\nTIC-5.OP;2026-03-14T{at}Z;{op};Good"
                )
            })),
        ),
        (
            "elapsed.csv",
            text(steps("Elapsed min\tPV\tOP\tSP\tMode", |k, pv, op| {
                format!("{:.1}\t{pv:.2}\t{op}\t50\tMAN", 0.1 * k as f64)
            })),
        ),
        (
            "epoch.csv",
            text(steps("t,PV [bar],OP [%]", |k, pv, op| {
                format!("{},{pv:.2},{op}", 1_760_000_000_000_u64 + 1000 * k as u64)
            })),
        ),
        (
            "name.csv",
            text(steps("Time,EXAMPLE-1.PV,EXAMPLE-1.OP", |k, pv, op| {
                format!("2026-03-14 {},{pv:.2},{op}", minute(k))
            })),
        ),
        (
            "same heading twice.csv",
            text(steps("Time,Value,Value,Output", |k, pv, op| {
                format!("2026-03-14 {},{pv:.2},{:.2},{op}", minute(k), pv + 1.0)
            })),
        ),
        ("many.csv", text(many())),
    ]
}

/// Eighty loops side by side, and an indicator.
fn many() -> String {
    let mut heading = "Time,PI-9.PV".to_owned();
    for tag in 100..180 {
        write!(heading, ",FIC-{tag}.PV,FIC-{tag}.OP").expect("a string");
    }
    steps(&heading, |k, pv, op| {
        let mut row = format!("2026-03-14 {},7.5", minute(k));
        for tag in 0..80 {
            write!(row, ",{:.2},{op}", pv + f64::from(tag)).expect("a string");
        }
        row
    })
}

/// Every loop that `inspect` found in a file, as its JSON has it.
fn loops_in(report: &Value) -> Vec<Value> {
    let tables = report["logs"][0]["tables"].as_array().expect("tables");
    tables
        .iter()
        .flat_map(|table| table["loops"].as_array().expect("loops").clone())
        .collect()
}

fn inspected(log: &Path) -> Value {
    let report =
        asleft::inspect(&[log.to_path_buf()], None, None).expect("a file that can be read");
    serde_json::to_value(&report).expect("a report is JSON")
}

#[test]
fn the_line_it_proposes_reads_the_file() {
    let mut rules = String::new();
    let mut files: Vec<(String, Vec<u8>)> = strange()
        .into_iter()
        .map(|(name, bytes)| (name.to_owned(), bytes))
        .collect();
    for ending in ["csv", "xlsx", "ods"] {
        for path in files_below(&root().join("demo_data/logs"), ending) {
            let name = path.file_name().expect("a name").to_string_lossy();
            files.push((name.into_owned(), fs::read(&path).expect("readable")));
        }
    }
    assert!(files.len() > 24);
    let mut proposed = 0;
    for (name, bytes) in &files {
        // Looked at where it lies before there is a job, as a stranger's file does.
        let elsewhere = folder();
        let log = elsewhere.path().join(name);
        fs::write(&log, bytes).expect("written");
        let report = inspected(&log);
        let loops = loops_in(&report);
        assert!(!loops.is_empty(), "{name}: {report:#}");
        if let Some(line) = loops[0]["supposed"][0].as_str()
            && !line.contains("column")
        {
            let keys = line.replace(", ", "\n");
            writeln!(rules, "[[log]]\nfiles = [\"logs/{name}\"]\n{keys}").expect("a string");
        }
        // Of eighty loops alike three say it all.
        for one in loops.iter().take(3) {
            proposed += 1;
            let cells = one["schedule"]["cells"].as_object().expect("a proposal");
            // As a person copies it: the lines of a csv file say the same as the cells.
            let values = one["schedule"]["values"].as_str().expect("a line");
            let headings = one["schedule"]["headings"].as_str().expect("a line");
            let parsed = parsed(&format!("{headings}\n{values}\n"));
            assert_eq!(parsed.len(), cells.len(), "{name}");
            let low = one["pv_range"][0].as_f64().expect("a number").min(0.0) - 1.0;
            let high = one["pv_range"][1].as_f64().expect("a number") + 1.0;
            let op_high = one["op_range"][1].as_f64().expect("a number").max(100.0);
            let mut row = vec![
                ("pv low".to_owned(), low.to_string()),
                ("pv high".to_owned(), high.to_string()),
                ("op high".to_owned(), op_high.to_string()),
            ];
            for (heading, value) in &parsed {
                assert_eq!(cells[heading].as_str(), Some(value.as_str()), "{name}");
                if heading != "tag" {
                    row.push((heading.clone(), value.clone()));
                }
            }
            let row: Vec<(&str, &str)> = row
                .iter()
                .map(|(heading, value)| (heading.as_str(), value.as_str()))
                .collect();
            // A log without tags leaves it to the person to give one.
            let tag = cells["tag"].as_str().filter(|tag| !tag.is_empty());
            let tag = tag.unwrap_or("TIC-77");
            let job = JobFolder::new()
                .and_in_job(&rules)
                .with(&format!("logs/{name}"), bytes)
                .and_loop(tag, &row);
            let report = asleft::check(job.path(), &[]).expect("a job");
            let report = serde_json::to_value(&report).expect("a report is JSON");
            let outcome = &report["loops"][0];
            assert_eq!(
                outcome["outcome"], "ready",
                "{name}, {headings} / {values}, with {rules}: {outcome:#}"
            );
        }
    }
    assert!(proposed > 30, "{proposed}");
}

/// Headings and values of two lines.
fn parsed(text: &str) -> Vec<(String, String)> {
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let headings = reader.headers().expect("headings").clone();
    let record = reader.records().next().expect("a line").expect("values");
    headings
        .iter()
        .zip(&record)
        .map(|(heading, value)| (heading.to_owned(), value.to_owned()))
        .collect()
}

#[test]
fn every_file_is_told_in_one_screen() {
    let elsewhere = folder();
    for (name, bytes) in strange() {
        fs::write(elsewhere.path().join(name), bytes).expect("written");
    }
    let mut files = files_below(elsewhere.path(), "csv");
    files.extend(files_below(&root().join("demo_data/logs"), ""));
    for file in files {
        let report = asleft::inspect(std::slice::from_ref(&file), None, None);
        let text = report.expect("readable").to_string();
        let lines = text.lines().count();
        assert!(lines <= SCREEN.0, "{lines} lines\n{text}");
        // The name of a file is as long as its folder makes it.
        for line in text.lines().skip(1) {
            let is_path = line.contains(&elsewhere.path().to_string_lossy().into_owned());
            assert!(is_path || line.chars().count() <= SCREEN.1, "{line}");
        }
        for what in ["clock", "span"] {
            assert!(text.contains(&format!("    {what} ")), "{what}\n{text}");
        }
    }
}

#[test]
fn the_screens_are_as_kept() {
    let elsewhere = folder();
    for (name, bytes) in strange() {
        fs::write(elsewhere.path().join(name), bytes).expect("written");
    }
    let told = |name: &str| {
        asleft_in(elsewhere.path(), &["inspect", name])
            .ends_with(0)
            .out
    };
    for (kept, text) in [
        (
            "workbook",
            asleft(&["inspect", "demo_data/logs/fic201.xlsx"])
                .ends_with(0)
                .out,
        ),
        ("long", told("long.csv")),
        ("undecided", told("order of day and month.csv")),
        ("two_candidates", told("two may be the PV.csv")),
        ("many", told("many.csv")),
    ] {
        holds_as_kept(&format!("tests/golden/inspect_{kept}.txt"), &text);
    }
}

#[test]
fn one_loop_of_many_is_told_in_full() {
    let elsewhere = folder();
    fs::write(elsewhere.path().join("many.csv"), many()).expect("written");
    let run = asleft_in(
        elsewhere.path(),
        &["inspect", "many.csv", "--tag", "FIC-179"],
    )
    .ends_with(0);
    for said in ["\"FIC-179.PV\"", "\"FIC-179.OP\"", "FIC-179,logs/many.csv"] {
        assert!(run.out.contains(said), "{said}\n{}", run.out);
    }
    let run = asleft_in(
        elsewhere.path(),
        &["inspect", "many.csv", "--tag", "FIC-200"],
    )
    .ends_with(1);
    assert!(
        run.out
            .contains("no column is recognised as the PV of FIC-200"),
        "{}",
        run.out
    );
}

#[test]
fn a_file_that_is_no_log_ends_with_1_and_one_of_two_with_3() {
    let elsewhere = folder();
    let at = elsewhere.path();
    fs::write(at.join("letter.csv"), "Dear sirs,\nthe log is not here.\n").expect("written");
    fs::write(at.join("many.csv"), many()).expect("written");
    let run = asleft_in(at, &["inspect", "letter.csv"]).ends_with(1);
    assert!(run.out.contains("not a log"), "{}", run.out);
    let run = asleft_in(at, &["inspect", "letter.csv", "--quiet"]).ends_with(1);
    assert!(
        run.out.is_empty() && run.err.contains("not a log"),
        "{}",
        run.err
    );
    asleft_in(at, &["inspect", "nowhere.csv"]).ends_with(1);
    let run = asleft_in(at, &["inspect", "nowhere.csv", "many.csv"]).ends_with(3);
    assert!(
        run.out.contains("nowhere.csv: there is no such file"),
        "{}",
        run.out
    );
    assert!(run.out.contains("FIC-100"), "{}", run.out);
}

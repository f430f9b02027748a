//! One trace of an invented loop in every form that trend systems write: each form gives that trace, bit
//! for bit at the digits that the form holds. `tests/README.md` lists form and test.

mod clocks;
mod layouts;
mod refusals;

mod samples;
mod text;
mod workbooks;

use crate::plant::Random;
use crate::support::{files_below, folder, holds_as_kept, root};
use asleft::model::{Kind, ProcessModel};
use asleft::quantity::Span;
use asleft::read::{ColumnNames, FileCache, LogRead, LogRequest, LogRule, read_log};
use asleft::trace::Clock;
use chrono::{NaiveDateTime, TimeDelta};
use std::collections::BTreeSet;
use std::fmt::Write;
use std::fs;
use tempfile::TempDir;

/// The trace, kept beside the binary files that hold it too.
const TRACE: &str = "tests/logs/trace.csv";
/// Rows of the trace.
const ROWS: usize = 200;
/// Seconds from row to row: a whole part of a minute, an hour and a day.
const INTERVAL_S: i64 = 3;

/// Usual headings of the columns.
const HEADINGS: [&str; 5] = [
    "Time",
    "FIC-301.PV",
    "FIC-301.OP",
    "FIC-301.SP",
    "FIC-301.MODE",
];

fn start() -> NaiveDateTime {
    "2026-03-14T09:05:00".parse().expect("a moment")
}

/// Moment of a row.
fn at(row: usize) -> NaiveDateTime {
    start() + TimeDelta::seconds(INTERVAL_S * row as i64)
}

/// The trace of the loop FIC-301, 0 to 2000 m³/h: as text, with the digits that every form is given.
struct Truth {
    pv: Vec<String>,
    op: Vec<String>,
    sp: Vec<String>,
}

/// The kept trace.
fn truth() -> Truth {
    let text = fs::read_to_string(root().join(TRACE)).expect("the kept trace");
    let mut truth = Truth {
        pv: Vec::new(),
        op: Vec::new(),
        sp: Vec::new(),
    };
    for line in text.lines().skip(1) {
        let cells: Vec<&str> = line.split(',').collect();
        truth.pv.push(cells[1].to_owned());
        truth.op.push(cells[2].to_owned());
        truth.sp.push(cells[3].to_owned());
    }
    assert_eq!(truth.pv.len(), ROWS);
    truth
}

/// A flow that answers to two moves of its valve, with a little noise.
#[test]
fn the_kept_trace_is_what_its_generator_makes() {
    let model = ProcessModel::of_kind(Kind::FirstOrder, 1.3, 24.0, 0.0, 9.0);
    let t_s: Vec<f64> = (0..ROWS).map(|k| (INTERVAL_S * k as i64) as f64).collect();
    let moves = [(180.0, 5.5), (390.0, -8.0)];
    let answer = model.response_to_held(&moves, &t_s);
    let mut random = Random::new(301);
    let mut text = "time,pv,op,sp,mode\n".to_owned();
    for (k, t_s) in t_s.iter().enumerate() {
        let pv = 1180.0 + 20.0 * (answer[k] + 0.05 * random.normal());
        let op = moves
            .iter()
            .filter(|(at, _)| at <= t_s)
            .fold(40.0, |op, (_, by)| op + by);
        let time = at(k).format("%Y-%m-%dT%H:%M:%S");
        writeln!(text, "{time},{pv:.2},{op:.1},1180.0,MAN").expect("a string takes any text");
    }
    holds_as_kept(TRACE, &text);
}

impl Truth {
    /// Headings and rows with times as `time` writes them.
    fn table(&self, headings: &[&str], time: impl Fn(usize) -> String) -> Vec<Vec<String>> {
        let heading_row = headings.iter().map(|text| (*text).to_owned()).collect();
        let rows = (0..ROWS).map(|k| {
            vec![
                time(k),
                self.pv[k].clone(),
                self.op[k].clone(),
                self.sp[k].clone(),
                "MAN".to_owned(),
            ]
        });
        std::iter::once(heading_row).chain(rows).collect()
    }

    /// The plain export: ISO times, usual headings.
    fn plain(&self) -> Vec<Vec<String>> {
        self.table(&HEADINGS, iso)
    }

    /// Holds a log against the trace.
    fn is_in(&self, log: &LogRead, form: &str) {
        self.has_values_of(log, form);
        assert_eq!(log.clock, Clock::Dated(start()), "{form}");
        assert_eq!(log.samples.mode, vec!["MAN"; ROWS], "{form}");
        assert!(log.samples.manual.iter().all(|manual| *manual), "{form}");
        self.has_sp_of(log, form);
        assert!(log.warnings.is_empty(), "{form}: {:?}", log.warnings);
    }

    /// The same without clock, mode and warnings: seconds from the first row, PV and OP.
    fn has_values_of(&self, log: &LogRead, form: &str) {
        let seconds: Vec<f64> = (0..ROWS).map(|k| (INTERVAL_S * k as i64) as f64).collect();
        let samples = &log.samples;
        assert_eq!(bits(&samples.t_s), bits(&seconds), "{form}: times");
        assert_eq!(bits(&samples.pv), bits(&numbers(&self.pv)), "{form}: PV");
        assert_eq!(bits(&samples.op), bits(&numbers(&self.op)), "{form}: OP");
        assert!(samples.good.iter().all(|good| *good), "{form}");
    }

    fn has_sp_of(&self, log: &LogRead, form: &str) {
        assert_eq!(
            bits(&log.samples.sp),
            bits(&numbers(&self.sp)),
            "{form}: SP"
        );
    }
}

/// The time of a row as ISO 8601 with a space.
fn iso(row: usize) -> String {
    at(row).format("%Y-%m-%d %H:%M:%S").to_string()
}

fn numbers(texts: &[String]) -> Vec<f64> {
    texts
        .iter()
        .map(|text| text.parse().expect("a number"))
        .collect()
}

fn bits(values: &[f64]) -> Vec<u64> {
    values.iter().map(|value| value.to_bits()).collect()
}

/// Rows of cells as delimited text.
fn delimited(rows: &[Vec<String>], delimiter: &str) -> String {
    rows.iter().map(|row| row.join(delimiter) + "\n").collect()
}

/// Files of the loop in a folder, and what a job asks of them.
struct Files {
    folder: TempDir,
    request: LogRequest,
}

impl Files {
    /// The text of the cell `test log`.
    fn new(files: &str) -> Self {
        let folder = folder();
        let request = LogRequest {
            root: folder.path().to_path_buf(),
            files: files.to_owned(),
            tag: Some("FIC-301".to_owned()),
            pv_unit: Some("m3/h".to_owned()),
            pv_span: Span::new(0.0, 2000.0).ok(),
            op_unit: Some("%".to_owned()),
            op_span: Span::new(0.0, 100.0).ok(),
            ..LogRequest::default()
        };
        Files { folder, request }
    }

    /// One file of these bytes.
    fn one(name: &str, bytes: impl AsRef<[u8]>) -> Self {
        Files::new(name).with(name, bytes)
    }

    /// A file kept under `tests/logs`.
    fn kept(name: &str) -> Self {
        let path = root().join("tests/logs").join(name);
        Files::one(name, fs::read(path).expect("the kept file"))
    }

    fn with(self, name: &str, bytes: impl AsRef<[u8]>) -> Self {
        fs::write(self.folder.path().join(name), bytes).expect("written");
        self
    }

    fn columns(mut self, columns: ColumnNames) -> Self {
        self.request.columns = columns;
        self
    }

    fn asking(mut self, change: impl FnOnce(&mut LogRequest)) -> Self {
        change(&mut self.request);
        self
    }

    /// With one `[[log]]` table in `job.toml`.
    fn rule(self, rule: LogRule) -> Self {
        self.asking(|request| request.rules.push(rule))
    }

    fn read(&self) -> LogRead {
        read_log(&self.request, &FileCache::new()).unwrap_or_else(|problems| {
            let texts: Vec<String> = problems.iter().map(ToString::to_string).collect();
            panic!("{}", texts.join("\n"))
        })
    }

    /// All that keeps the files from being read, as it is printed.
    fn refusal(&self) -> String {
        let problems = read_log(&self.request, &FileCache::new()).expect_err("a refusal");
        let texts: Vec<String> = problems.iter().map(ToString::to_string).collect();
        texts.join("\n")
    }
}

/// The tests of this folder but those of refusals, as `tests/README.md` names them.
fn tests_of_forms() -> BTreeSet<String> {
    let files = files_below(&root().join("tests/it/forms"), ".rs");
    let mut tests = BTreeSet::new();
    for file in files {
        let module = file
            .file_stem()
            .expect("a name")
            .to_string_lossy()
            .into_owned();
        if ["mod", "refusals"].contains(&module.as_str()) {
            continue;
        }
        let text = fs::read_to_string(&file).expect("a source is text");
        let mut is_test = false;
        for line in text.lines() {
            if is_test && let Some(name) = line.strip_prefix("fn ") {
                let name = name.split('(').next().unwrap_or_default();
                tests.insert(format!("{module}::{name}"));
            }
            is_test = line == "#[test]";
        }
    }
    tests
}

#[test]
fn the_list_of_forms_names_every_test() {
    let text = fs::read_to_string(root().join("tests/README.md")).expect("the list");
    let named: BTreeSet<String> = text
        .split('`')
        .filter(|part| part.split("::").count() == 2 && !part.starts_with("forms::"))
        .filter(|part| !part.contains(' '))
        .map(str::to_owned)
        .collect();
    let tests = tests_of_forms();
    assert!(tests.len() > 30, "{tests:?}");
    assert_eq!(named, tests);
}

//! Step tests and closed-loop trials of invented loops, and job folders that hold them.

use crate::support::{asleft, folder};
use asleft::archive;
use asleft::model::{ProcessModel, State};
use asleft::quantity::Span;
use asleft::record::Record;
use chrono::{NaiveDate, NaiveDateTime, TimeDelta};
use rust_xlsxwriter::{ExcelDateTime, Format, Workbook};
use std::fmt::Write;
use std::fs;
use std::path::Path;
use tempfile::TempDir;

/// Evenly distributed and normal numbers from a seed (G. Marsaglia, J. Statistical Software 8 (2003) 14:
/// xorshift64).
pub struct Random(u64);

impl Random {
    pub fn new(seed: u64) -> Self {
        let mut random = Random(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1);
        for _ in 0..20 {
            random.even();
        }
        random
    }

    fn even(&mut self) -> f64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        (self.0 >> 11) as f64 / (1_u64 << 53) as f64
    }

    pub fn normal(&mut self) -> f64 {
        let radius = libm::sqrt(-2.0 * libm::log(1.0 - self.even()));
        radius * libm::cos(std::f64::consts::TAU * self.even())
    }
}

/// Samples of one loop at regular times from second 0, PV and OP in percent.
#[derive(Clone)]
pub struct Trend {
    pub interval_s: f64,
    pub pv: Vec<f64>,
    pub op: Vec<f64>,
    /// Set point, %; empty where it was not logged.
    pub sp: Vec<f64>,
}

/// A step test: the OP stands at the first of `op` for one hold, then at each of the others.
pub fn steps(
    model: ProcessModel,
    op: &[f64],
    hold_s: f64,
    interval_s: f64,
    noise_percent: f64,
) -> Trend {
    let rows = libm::round(hold_s * op.len() as f64 / interval_s) as usize;
    let t_s: Vec<f64> = (0..rows).map(|k| k as f64 * interval_s).collect();
    let moves: Vec<(f64, f64)> = (1..op.len())
        .map(|k| (hold_s * k as f64, op[k] - op[0]))
        .collect();
    let mut random = Random::new(7);
    let answer = model.response_to_held(&moves, &t_s);
    Trend {
        interval_s,
        pv: answer
            .iter()
            .map(|pv| 50.0 + pv + noise_percent * random.normal())
            .collect(),
        op: t_s
            .iter()
            .map(|t| op[(libm::floor(t / hold_s) as usize).min(op.len() - 1)])
            .collect(),
        sp: Vec::new(),
    }
}

/// A closed-loop trial with a PI controller that executes at every sample: the set point stands at 50 %
/// for a fifth of `length_s`, then at 55 %. Backward differences, gain of the process positive.
pub fn trial(
    model: ProcessModel,
    kc: f64,
    ti_s: f64,
    interval_s: f64,
    length_s: f64,
    noise_percent: f64,
) -> Trend {
    let rows = libm::round(length_s / interval_s) as usize;
    let delay = libm::round(model.dead_time_s() / interval_s) as usize;
    let mut random = Random::new(8);
    let mut state = State::default();
    let mut trend = Trend {
        interval_s,
        pv: Vec::new(),
        op: Vec::new(),
        sp: Vec::new(),
    };
    let mut integral = 0.0;
    for k in 0..rows {
        let sp = if k < rows / 5 { 50.0 } else { 55.0 };
        let pv = 50.0 + state.pv(&model) + noise_percent * random.normal();
        integral += kc * interval_s / ti_s * (sp - pv);
        let op = 40.0 + kc * (sp - pv) + integral;
        trend.pv.push(pv);
        trend.op.push(op);
        trend.sp.push(sp);
        let arrives = k.checked_sub(delay).map_or(40.0, |then| trend.op[then]);
        state.advance(&model, interval_s, arrives - 40.0);
    }
    trend
}

/// Columns in the order of an export: time, PV, OP and, where it was logged, SP.
pub type Headings<'a> = [&'a str; 4];

impl Trend {
    fn at(&self, start: NaiveDateTime, row: usize) -> NaiveDateTime {
        let micros = libm::round(row as f64 * self.interval_s * 1e6) as i64;
        start + TimeDelta::microseconds(micros)
    }

    /// As delimited text, PV and SP in engineering units with all their digits.
    pub fn csv(&self, headings: Headings, pv: Span, start: NaiveDateTime) -> String {
        let mut text = format!("{},{},{}", headings[0], headings[1], headings[2]);
        if !self.sp.is_empty() {
            write!(text, ",{}", headings[3]).expect("a string takes any text");
        }
        text.push('\n');
        for (k, (value, op)) in self.pv.iter().zip(&self.op).enumerate() {
            let time = self.at(start, k).format("%Y-%m-%d %H:%M:%S%.f");
            write!(text, "{time},{},{op}", pv.engineering(*value)).expect("a string");
            if let Some(sp) = self.sp.get(k) {
                write!(text, ",{}", pv.engineering(*sp)).expect("a string takes any text");
            }
            text.push('\n');
        }
        text
    }

    /// As a workbook with one sheet, "Trend".
    pub fn workbook(&self, headings: Headings, pv: Span, start: NaiveDateTime) -> Vec<u8> {
        let mut book = Workbook::new();
        let sheet = book.add_worksheet();
        sheet.set_name("Trend").expect("a name");
        let stamp = Format::new().set_num_format("yyyy-mm-dd hh:mm:ss");
        for (column, heading) in headings[..3].iter().enumerate() {
            sheet
                .write_string(0, column as u16, *heading)
                .expect("written");
        }
        for (k, (value, op)) in self.pv.iter().zip(&self.op).enumerate() {
            let row = k as u32 + 1;
            let time = self.at(start, k).format("%Y-%m-%dT%H:%M:%S%.3f");
            let time = ExcelDateTime::parse_from_str(&time.to_string()).expect("a date and time");
            sheet
                .write_datetime_with_format(row, 0, &time, &stamp)
                .expect("written");
            sheet
                .write_number(row, 1, pv.engineering(*value))
                .expect("written");
            sheet.write_number(row, 2, *op).expect("written");
        }
        book.save_to_buffer().expect("a workbook")
    }
}

pub fn span(low: f64, high: f64) -> Span {
    Span::new(low, high).expect("a range")
}

/// Ten in the morning of a day in March 2026.
pub fn morning(day: u32) -> NaiveDateTime {
    NaiveDate::from_ymd_opt(2026, 3, day)
        .and_then(|date| date.and_hms_opt(10, 0, 0))
        .expect("a moment")
}

/// What stands in a schedule's row unless a test says otherwise.
const ROW: [(&str, &str); 12] = [
    ("service", "Jacket of reactor R-1"),
    ("pv unit", "degC"),
    ("pv low", "0"),
    ("pv high", "100"),
    ("action", "reverse"),
    ("form", "standard"),
    ("p as", "gain"),
    ("i as", "s"),
    ("scan s", "0.5"),
    ("found p", "0.5"),
    ("found i", "60"),
    ("aim", "load"),
];

const JOB: &str = "\
[job]
plant = \"Harrow Mill\"
owner = \"Harrow Chemicals\"
document = \"HM-{tag}\"
dossier = \"HM-DOSSIER\"
revision = \"0\"
date = 2026-03-20
reason = \"Issued for hand-over\"

[[procedure]]
title = \"Permit to work\"
reference = \"HM-01\"

[[signature]]
role = \"Tested by\"
name = \"P. Marsh\"
";

/// A job folder that is gone when the test is over.
pub struct JobFolder {
    folder: TempDir,
    rows: Vec<Vec<(String, String)>>,
}

impl JobFolder {
    pub fn new() -> Self {
        let folder = folder();
        fs::create_dir(folder.path().join("logs")).expect("made");
        fs::write(folder.path().join("job.toml"), JOB).expect("written");
        JobFolder {
            folder,
            rows: Vec::new(),
        }
    }

    /// The same with more text at the end of `job.toml`.
    pub fn and_in_job(self, text: &str) -> Self {
        fs::write(self.path().join("job.toml"), format!("{JOB}\n{text}")).expect("written");
        self
    }

    /// With a file below the folder.
    pub fn with(self, name: &str, bytes: impl AsRef<[u8]>) -> Self {
        fs::write(self.path().join(name), bytes).expect("written");
        self
    }

    /// With one more loop; its cells beside the usual ones.
    pub fn and_loop(mut self, tag: &str, cells: &[(&str, &str)]) -> Self {
        let mut row = vec![("tag".to_owned(), tag.to_owned())];
        row.extend(ROW.map(|(name, value)| (name.to_owned(), value.to_owned())));
        self.rows.push(row);
        self.set(tag, cells);
        self
    }

    /// Sets cells of a loop's row and writes the schedule, `loops.csv`, anew.
    pub fn set(&mut self, tag: &str, cells: &[(&str, &str)]) {
        let row = self
            .rows
            .iter_mut()
            .find(|row| row[0].1 == tag)
            .expect("the loop is there");
        for (name, value) in cells {
            row.retain(|(heading, _)| heading != name);
            row.push(((*name).to_owned(), (*value).to_owned()));
        }
        fs::write(self.path().join("loops.csv"), schedule(&self.rows)).expect("written");
    }

    pub fn path(&self) -> &Path {
        self.folder.path()
    }

    /// The folder as it is typed.
    pub fn typed(&self) -> &str {
        self.path().to_str().expect("a plain path")
    }

    /// Records all loops without a dossier and gives the record of each, in order.
    pub fn records(&self) -> Vec<Record> {
        asleft(&["record", "--no-dossier", self.typed()]).ends_with(0);
        self.rows.iter().map(|row| self.record(&row[0].1)).collect()
    }

    /// The record of a loop as it was written.
    pub fn record(&self, tag: &str) -> Record {
        let path = self.path().join(format!("records/HM-{tag}_rev0.json"));
        archive::read_record(&path).expect("a record")
    }
}

/// A loop schedule as delimited text: every heading that a row has.
pub fn schedule(rows: &[Vec<(String, String)>]) -> String {
    let mut headings: Vec<&str> = Vec::new();
    for (heading, _) in rows.iter().flatten() {
        if !headings.contains(&heading.as_str()) {
            headings.push(heading);
        }
    }
    let mut text = csv_line(&headings);
    for row in rows {
        let cells: Vec<&str> = headings
            .iter()
            .map(|heading| {
                let cell = row.iter().find(|(name, _)| name == heading);
                cell.map_or("", |(_, value)| value.as_str())
            })
            .collect();
        text.push('\n');
        text.push_str(&csv_line(&cells));
    }
    text.push('\n');
    text
}

/// Cells as a line of delimited text, in quotation marks where they need them.
pub fn csv_line(cells: &[&str]) -> String {
    let quoted = |cell: &&str| match cell.contains([',', '"', '\n']) {
        true => format!("\"{}\"", cell.replace('"', "\"\"")),
        false => (*cell).to_owned(),
    };
    cells.iter().map(quoted).collect::<Vec<String>>().join(",")
}

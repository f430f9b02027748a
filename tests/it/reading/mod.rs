//! Any trace written in any form and read again is the same trace, to the last digit that the form holds;
//! and no bytes at all make the reader panic.

mod damage;
mod hostile;
mod text;
mod workbook;

use crate::support::folder;
use asleft::notice::Problem;
use asleft::read::{DateOrder, DecimalSign, FileCache, LogRead, LogRequest, LogRule, read_log};
use asleft::trace::Clock;
use chrono::{DateTime, NaiveDateTime, TimeDelta};
use proptest::prelude::*;
use proptest::test_runner::{Config, RngAlgorithm, TestRng, TestRunner};
use std::fs;

/// The loop that is read.
const TAG: &str = "TIC-101";

/// Runs a property on cases that are the same in every run.
fn holds<S: Strategy>(
    cases: u32,
    strategy: S,
    property: impl Fn(S::Value) -> Result<(), TestCaseError>,
) {
    let config = Config {
        cases,
        failure_persistence: None,
        max_shrink_iters: 2000,
        ..Config::default()
    };
    let random = TestRng::deterministic_rng(RngAlgorithm::ChaCha);
    TestRunner::new_with_rng(config, random)
        .run(&strategy, property)
        .unwrap_or_else(|failure| panic!("{failure}"));
}

/// A number as it is written: whole figures, of which so many are decimals.
#[derive(Debug, Clone, Copy)]
struct Figures {
    whole: i64,
    decimals: usize,
}

impl Figures {
    /// The number with this decimal sign.
    fn text(self, sign: char) -> String {
        let (minus, digits) = if self.whole < 0 {
            ("-", self.whole.unsigned_abs().to_string())
        } else {
            ("", self.whole.to_string())
        };
        let digits = format!("{digits:0>width$}", width = self.decimals + 1);
        let (whole, decimals) = digits.split_at(digits.len() - self.decimals);
        if decimals.is_empty() {
            format!("{minus}{whole}")
        } else {
            format!("{minus}{whole}{sign}{decimals}")
        }
    }

    fn value(self) -> f64 {
        self.text('.').parse().expect("a number")
    }
}

fn figures() -> impl Strategy<Value = Figures> {
    // From single figures to all that a double holds, and small ones behind many zeros.
    prop_oneof![
        4 => (-99_999_i64..100_000, 0_usize..5),
        1 => (-999_999_999_i64..1_000_000_000, 0_usize..10),
        1 => (-99_i64..100, 6_usize..12),
    ]
    .prop_map(|(whole, decimals)| Figures { whole, decimals })
}

/// One row of the trace.
#[derive(Debug, Clone)]
struct Sample {
    /// Since the first, milliseconds.
    at_ms: i64,
    /// Its value, or the text that stands in its place.
    pv: Result<Figures, &'static str>,
    op: Figures,
    sp: Figures,
    manual: bool,
}

/// A trace as it was before it was written.
#[derive(Debug, Clone)]
struct Truth {
    /// First moment, milliseconds since 1970.
    start_ms: i64,
    samples: Vec<Sample>,
    has_sp: bool,
    has_mode: bool,
}

fn truth() -> impl Strategy<Value = Truth> {
    let gap_ms = prop_oneof![
        3 => Just(1000_i64),
        2 => 1_i64..5000,
        1 => 5000_i64..3_600_000,
    ];
    let bad = prop::sample::select(vec![
        "Bad",
        "No Data",
        "",
        "NaN",
        "#N/A",
        "---",
        "I/O Timeout",
    ]);
    let pv = prop_oneof![9 => figures().prop_map(Ok), 1 => bad.prop_map(Err)];
    let sample = (gap_ms, pv, figures(), figures(), any::<bool>());
    // The years 2001 to 2060.
    let start_ms = 978_307_200_000_i64..2_840_000_000_000;
    let samples = (figures(), prop::collection::vec(sample, 5..30));
    (start_ms, samples, any::<bool>(), any::<bool>()).prop_map(
        |(start_ms, (first, samples), has_sp, has_mode)| {
            let mut at_ms = 0;
            let mut samples: Vec<Sample> = samples
                .into_iter()
                .map(|(gap_ms, pv, op, sp, manual)| {
                    at_ms += gap_ms;
                    Sample {
                        at_ms,
                        pv,
                        op,
                        sp,
                        manual,
                    }
                })
                .collect();
            // A log without any good sample is refused.
            samples[0].pv = Ok(first);
            let begins_ms = samples[0].at_ms;
            for sample in &mut samples {
                sample.at_ms -= begins_ms;
            }
            Truth {
                start_ms,
                samples,
                has_sp,
                has_mode,
            }
        },
    )
}

impl Truth {
    fn at(&self, sample: &Sample) -> NaiveDateTime {
        DateTime::from_timestamp_millis(self.start_ms + sample.at_ms)
            .expect("a moment")
            .naive_utc()
    }

    /// Holds what was read against it. `elapsed_from_ms`: the log counts elapsed time, from there.
    fn is(&self, log: &LogRead, elapsed_from_ms: Option<i64>) -> Result<(), TestCaseError> {
        let seconds =
            |sample: &Sample| ((elapsed_from_ms.unwrap_or(0) + sample.at_ms) * 1000) as f64 / 1e6;
        let samples = &log.samples;
        let all = || self.samples.iter();
        prop_assert_eq!(
            bits(&samples.t_s),
            bits(&all().map(seconds).collect::<Vec<_>>())
        );
        let good: Vec<bool> = all().map(|sample| sample.pv.is_ok()).collect();
        prop_assert_eq!(&samples.good, &good);
        for (k, sample) in all().enumerate() {
            if let Ok(pv) = sample.pv {
                prop_assert_eq!(
                    samples.pv[k].to_bits(),
                    pv.value().to_bits(),
                    "PV, row {}",
                    k
                );
            }
        }
        let op: Vec<f64> = all().map(|sample| sample.op.value()).collect();
        prop_assert_eq!(bits(&samples.op), bits(&op));
        let sp: Vec<f64> = all().map(|sample| sample.sp.value()).collect();
        prop_assert_eq!(bits(&samples.sp), bits(if self.has_sp { &sp } else { &[] }));
        let manual: Vec<bool> = all().map(|sample| sample.manual).collect();
        prop_assert_eq!(
            &samples.manual[..],
            if self.has_mode { &manual[..] } else { &[] }
        );
        let clock = match elapsed_from_ms {
            Some(_) => Clock::Elapsed,
            None => Clock::Dated(self.at(&self.samples[0])),
        };
        prop_assert_eq!(log.clock, clock);
        Ok(())
    }

    /// Its columns: heading, and the cell of a row.
    fn columns(&self, units: bool) -> Vec<(String, Column)> {
        let heading = |word: &str, unit: &str| match units {
            true => format!("{TAG}.{word} [{unit}]"),
            false => format!("{TAG}.{word}"),
        };
        let mut columns = vec![
            (heading("PV", "°C"), Column::Pv),
            (heading("OP", "%"), Column::Op),
        ];
        if self.has_sp {
            columns.push((heading("SP", "°C"), Column::Sp));
        }
        if self.has_mode {
            columns.push((format!("{TAG}.MODE"), Column::Mode));
        }
        columns
    }
}

/// A signal of the loop, or of another.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Column {
    Pv,
    Op,
    Sp,
    Mode,
    Other,
}

/// What stands in a cell.
enum CellText {
    Number(Figures),
    Text(&'static str),
}

impl Column {
    fn cell(self, sample: &Sample) -> CellText {
        match self {
            Column::Pv => match sample.pv {
                Ok(figures) => CellText::Number(figures),
                Err(text) => CellText::Text(text),
            },
            Column::Op => CellText::Number(sample.op),
            Column::Sp => CellText::Number(sample.sp),
            Column::Mode => CellText::Text(if sample.manual { "MAN" } else { "AUTO" }),
            Column::Other => CellText::Number(Figures {
                whole: sample.at_ms % 977,
                decimals: 1,
            }),
        }
    }
}

/// The same bits: a NaN is itself, and no digit is lost.
fn bits(values: &[f64]) -> Vec<u64> {
    // A negative zero is a zero: its sign is no digit.
    values.iter().map(|value| (value + 0.0).to_bits()).collect()
}

/// Reads one file of the loop.
fn read(name: &str, bytes: &[u8], rule: Option<LogRule>) -> Result<LogRead, Vec<Problem>> {
    let folder = folder();
    fs::write(folder.path().join(name), bytes).expect("written");
    let request = LogRequest {
        root: folder.path().to_path_buf(),
        files: name.to_owned(),
        tag: Some(TAG.to_owned()),
        rules: rule.into_iter().collect(),
        ..LogRequest::default()
    };
    read_log(&request, &FileCache::new())
}

/// What the person knows of an export that does not say it.
fn told(dates: Option<DateOrder>, decimal: Option<DecimalSign>) -> LogRule {
    LogRule {
        dates,
        decimal,
        ..LogRule::default()
    }
}

/// Reads a file; where it may be read in two ways the reader has to ask, and is then told.
fn read_or_told(name: &str, bytes: &[u8], rule: &LogRule) -> Result<LogRead, TestCaseError> {
    match read(name, bytes, None) {
        Ok(log) => Ok(log),
        Err(problems) => {
            for problem in &problems {
                let asks = problem
                    .hint
                    .as_ref()
                    .is_some_and(|hint| hint.contains("[[log]]"));
                prop_assert!(asks, "{}\n{}", problem, String::from_utf8_lossy(bytes));
            }
            let log = read(name, bytes, Some(rule.clone()));
            log.map_err(|problems| TestCaseError::fail(format!("{problems:?}")))
        }
    }
}

/// `moment` some milliseconds later.
fn later(moment: NaiveDateTime, ms: i64) -> NaiveDateTime {
    moment + TimeDelta::milliseconds(ms)
}

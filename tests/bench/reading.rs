//! What reading a long log costs beside the libraries that it stands on: `cargo bench --bench reading`.
//!
//! A csv and an xlsx of 1,000,000 rows and 4 columns (time, PV, OP, SP) are made once. Then the library
//! alone and the whole reading, from the disk to samples, take turns, so that whatever else the machine
//! does falls on both; what counts is the ratio of their medians. Of the csv crate three ways are measured:
//! a walk over its records as they come, the same with one record used again for every row, and that
//! with each field made a time or a number, as it takes to have samples. The reading makes a digest of the file besides. The peak of the memory is counted by the
//! allocator and held against the samples kept: time, PV, OP and SP of every row, 8 bytes each.

use asleft::read::{FileCache, LogRead, LogRequest, read_log};
use calamine::Reader;
use chrono::{NaiveDate, NaiveDateTime, TimeDelta};
use cpu_time::ProcessTime;
use peakmem_alloc::{INSTRUMENTED_SYSTEM, PeakMemAlloc, PeakMemAllocTrait};
use std::alloc::System;
use std::fmt::Write as _;
use std::fs;
use std::hint::black_box;
use std::io::{BufReader, Write};
use std::path::Path;
use std::time::Instant;

#[global_allocator]
static ALLOCATOR: &PeakMemAlloc<System> = &INSTRUMENTED_SYSTEM;

const ROWS: usize = 1_000_000;
const CSV: &str = "long.csv";
const XLSX: &str = "long.xlsx";
const HEADINGS: [&str; 4] = ["Time", "TIC-204.PV", "TIC-204.OP", "TIC-204.SP"];

fn main() {
    let folder = tempfile::tempdir().expect("a folder");
    let root = folder.path();
    let is_asked = |what: &str| {
        let mut names = std::env::args()
            .skip(1)
            .filter(|name| !name.starts_with('-'))
            .peekable();
        names.peek().is_none() || names.any(|name| what.contains(&name))
    };
    say(&format!(
        "{ROWS} rows of 4 columns; medians of turns: elapsed, and on the processors\n"
    ));
    if is_asked(CSV) {
        write_csv(&root.join(CSV));
        csv(root);
    }
    if is_asked(XLSX) {
        write_xlsx(&root.join(XLSX));
        xlsx(root);
    }
}

fn csv(root: &Path) {
    let file = root.join(CSV);
    let work: [&dyn Fn(); 4] = [
        &|| walk_csv(&file),
        &|| walk_csv_in_place(&file),
        &|| parse_csv(&file),
        &|| read(root, CSV),
    ];
    let [alone, in_place, parsed, asleft] = in_turns(31, work);
    say(&alone.line("csv   the csv crate walks it", &[]));
    say(&in_place.line("csv   the same, one record for all", &[]));
    say(&parsed.line("csv   the same, fields parsed", &[]));
    let others = [
        ("the walk", alone),
        ("that with one record", in_place),
        ("that with its fields parsed", parsed),
    ];
    say(&asleft.line("csv   asleft, from disk to samples", &others));
    say(&peak_line("csv   peak of memory", peak(|| read(root, CSV))));
}

fn xlsx(root: &Path) {
    let file = root.join(XLSX);
    let work: [&dyn Fn(); 3] = [&|| walk_cells(&file), &|| walk_range(&file), &|| {
        read(root, XLSX)
    }];
    let [cells, range, asleft] = in_turns(7, work);
    say(&cells.line("xlsx  calamine, cells one by one", &[]));
    say(&range.line("xlsx  calamine, range of the sheet", &[]));
    let others = [("calamine's range", range), ("its cells", cells)];
    say(&asleft.line("xlsx  asleft, from disk to samples", &others));
    say(&peak_line(
        "xlsx  peak of memory",
        peak(|| read(root, XLSX)),
    ));
}

fn say(line: &str) {
    writeln!(std::io::stdout(), "{line}").expect("a terminal");
}

/// Seconds that some work took.
#[derive(Clone, Copy)]
struct Took {
    elapsed: f64,
    /// Of all processors.
    computing: f64,
}

impl Took {
    fn line(self, name: &str, others: &[(&str, Took)]) -> String {
        let mut line = format!(
            "{name:36} {:8.1} ms {:8.1} ms",
            self.elapsed * 1e3,
            self.computing * 1e3
        );
        for (other, took) in others {
            write!(
                line,
                "   {:.2} and {:.2} times {other}",
                self.elapsed / took.elapsed,
                self.computing / took.computing
            )
            .expect("a string takes any text");
        }
        line
    }
}

/// Medians of several pieces of work that take turns.
fn in_turns<const N: usize>(turns: usize, work: [&dyn Fn(); N]) -> [Took; N] {
    let mut times: [[Vec<f64>; 2]; N] = [const { [Vec::new(), Vec::new()] }; N];
    for _ in 0..turns {
        for ([elapsed, computing], work) in times.iter_mut().zip(work) {
            let (begun, cpu) = (Instant::now(), ProcessTime::now());
            work();
            elapsed.push(begun.elapsed().as_secs_f64());
            computing.push(cpu.elapsed().as_secs_f64());
        }
    }
    let median = |mut times: Vec<f64>| {
        times.sort_unstable_by(f64::total_cmp);
        times[turns / 2]
    };
    times.map(|[elapsed, computing]| Took {
        elapsed: median(elapsed),
        computing: median(computing),
    })
}

fn peak_line(name: &str, bytes: f64) -> String {
    let kept = (4 * size_of::<f64>() * ROWS) as f64;
    let mib = |bytes: f64| bytes / f64::from(1 << 20);
    format!(
        "{name:36} {:8.1} MiB  {:.2} times the {:.1} MiB of the samples kept",
        mib(bytes),
        bytes / kept,
        mib(kept)
    )
}

/// Bytes at the peak of some work above those before it.
fn peak(work: impl Fn()) -> f64 {
    // The allocator counts from the last reset.
    ALLOCATOR.reset_peak_memory();
    work();
    ALLOCATOR.get_peak_memory() as f64
}

fn at(row: usize) -> NaiveDateTime {
    let first = NaiveDate::from_ymd_opt(2026, 3, 14).and_then(|day| day.and_hms_opt(9, 5, 0));
    first.expect("a time") + TimeDelta::seconds(row as i64)
}

/// PV, OP and SP of a row: a slow swing with a fixed pattern upon it, moves of the OP, a constant SP.
fn values(row: usize) -> [f64; 3] {
    let pattern = (row * 7919 % 1000) as f64 / 1000.0;
    let swing = libm::sin(row as f64 / 3000.0);
    [
        libm::round((71.0 + 4.0 * swing + 0.2 * pattern) * 1000.0) / 1000.0,
        40.0 + 2.5 * (row / 20_000 % 3) as f64,
        70.0,
    ]
}

fn write_csv(path: &Path) {
    let mut text = HEADINGS.join(",");
    text.push('\n');
    for row in 0..ROWS {
        let [pv, op, sp] = values(row);
        let time = at(row).format("%Y-%m-%dT%H:%M:%S");
        writeln!(text, "{time},{pv:.3},{op:.2},{sp:.1}").expect("a string takes any text");
    }
    fs::write(path, text).expect("written");
}

/// Days of a spreadsheet.
fn serial(at: NaiveDateTime) -> f64 {
    at.and_utc().timestamp() as f64 / 86_400.0 + 25_569.0
}

fn write_xlsx(path: &Path) {
    let mut book = rust_xlsxwriter::Workbook::new();
    let date = rust_xlsxwriter::Format::new().set_num_format("yyyy-mm-dd hh:mm:ss");
    let sheet = book.add_worksheet();
    for (column, heading) in HEADINGS.iter().enumerate() {
        sheet
            .write_string(0, column as u16, *heading)
            .expect("written");
    }
    for row in 0..ROWS {
        let line = row as u32 + 1;
        sheet
            .write_number_with_format(line, 0, serial(at(row)), &date)
            .expect("written");
        for (column, value) in (1..).zip(values(row)) {
            sheet.write_number(line, column, value).expect("written");
        }
    }
    book.save(path).expect("written");
}

/// The csv crate as its manual walks a file first: record by record.
fn walk_csv(path: &Path) {
    let mut reader = csv::Reader::from_path(path).expect("a file");
    let mut fields = 0;
    for record in reader.records() {
        fields += record.expect("a record").len();
    }
    assert_eq!(fields, 4 * ROWS);
}

/// As its chapter on speed has it: one record, used again for every row.
fn walk_csv_in_place(path: &Path) {
    let mut reader = csv::Reader::from_path(path).expect("a file");
    let mut record = csv::StringRecord::new();
    let mut fields = 0;
    while reader.read_record(&mut record).expect("a record") {
        fields += record.len();
    }
    assert_eq!(fields, 4 * ROWS);
}

/// The same with every field parsed by the means of chrono and the standard library.
fn parse_csv(path: &Path) {
    let mut reader = csv::Reader::from_path(path).expect("a file");
    let mut record = csv::StringRecord::new();
    let mut times: Vec<NaiveDateTime> = Vec::new();
    let mut numbers: [Vec<f64>; 3] = [const { Vec::new() }; 3];
    while reader.read_record(&mut record).expect("a record") {
        times.push(record[0].parse().expect("a time"));
        for (numbers, field) in numbers.iter_mut().zip(record.iter().skip(1)) {
            numbers.push(field.parse().expect("a number"));
        }
    }
    assert_eq!(times.len(), ROWS);
    black_box((times, numbers));
}

fn open(path: &Path) -> calamine::Xlsx<BufReader<fs::File>> {
    calamine::open_workbook(path).expect("a workbook")
}

fn walk_cells(path: &Path) {
    let mut book = open(path);
    let mut cells = book
        .worksheet_cells_reader("Sheet1")
        .expect("the sheet's cells");
    let mut count = 0;
    while let Some(cell) = cells.next_cell().expect("a cell") {
        black_box(cell.get_value());
        count += 1;
    }
    assert_eq!(count, 4 * (ROWS + 1));
}

fn walk_range(path: &Path) {
    let range = open(path).worksheet_range("Sheet1").expect("the sheet");
    let count = range.used_cells().map(black_box).count();
    assert_eq!(count, 4 * (ROWS + 1));
}

fn read(root: &Path, file: &str) {
    let request = LogRequest {
        root: root.to_path_buf(),
        files: file.to_owned(),
        tag: Some("TIC-204".to_owned()),
        ..LogRequest::default()
    };
    let cache = FileCache::new();
    let read: LogRead = read_log(&request, &cache).expect("a log");
    assert_eq!(read.samples.t_s.len(), ROWS);
    assert_eq!(read.samples.sp.len(), ROWS);
    black_box(read);
}

//! What reading a long log costs beside the libraries that it stands on: `cargo bench --bench reading`.
//!
//! A csv and an xlsx of 1,000,000 rows and 4 columns (time, PV, OP, SP) are made once. Then the library
//! alone and the whole reading, from the disk to samples, take turns, so that whatever else the machine
//! does falls on both; what counts is the ratio of their medians. The peak of the memory is counted by the
//! allocator and held against the samples kept: time, PV, OP and SP of every row, 8 bytes each.

use asleft::read::{FileCache, LogRead, LogRequest, read_log};
use calamine::Reader;
use chrono::{NaiveDate, NaiveDateTime, TimeDelta};
use peakmem_alloc::{INSTRUMENTED_SYSTEM, PeakMemAlloc, PeakMemAllocTrait};
use std::alloc::System;
use std::fmt::Write as _;
use std::fs;
use std::hint::black_box;
use std::io::{BufReader, Write};
use std::path::Path;
use std::time::{Duration, Instant};

#[global_allocator]
static ALLOCATOR: &PeakMemAlloc<System> = &INSTRUMENTED_SYSTEM;

const ROWS: usize = 1_000_000;
const CSV: &str = "long.csv";
const XLSX: &str = "long.xlsx";
const HEADINGS: [&str; 4] = ["Time", "TIC-204.PV", "TIC-204.OP", "TIC-204.SP"];

fn main() {
    let folder = tempfile::tempdir().expect("a folder");
    let root = folder.path();
    write_csv(&root.join(CSV));
    write_xlsx(&root.join(XLSX));
    let csv = root.join(CSV);
    let xlsx = root.join(XLSX);

    let [csv_alone, csv_asleft] = in_turns(15, [&|| walk_csv(&csv), &|| read(root, CSV)]);
    let [cells, range, xlsx_asleft] = in_turns(
        5,
        [&|| walk_cells(&xlsx), &|| walk_range(&xlsx), &|| {
            read(root, XLSX)
        }],
    );
    let kept = (4 * size_of::<f64>() * ROWS) as f64;
    let csv_peak = peak(|| read(root, CSV));
    let xlsx_peak = peak(|| read(root, XLSX));

    let ms = |time: Duration| time.as_secs_f64() * 1e3;
    let mib = |bytes: f64| bytes / f64::from(1 << 20);
    let ratio = |a: Duration, b: Duration| a.as_secs_f64() / b.as_secs_f64();
    let report = [
        format!("{ROWS} rows of 4 columns, medians of turns"),
        format!(
            "csv    the csv crate walks it          {:8.1} ms",
            ms(csv_alone)
        ),
        format!(
            "csv    asleft, from disk to samples    {:8.1} ms   {:.2} times the csv crate",
            ms(csv_asleft),
            ratio(csv_asleft, csv_alone)
        ),
        format!(
            "xlsx   calamine, cells one by one      {:8.1} ms",
            ms(cells)
        ),
        format!(
            "xlsx   calamine, range of the sheet    {:8.1} ms",
            ms(range)
        ),
        format!(
            "xlsx   asleft, from disk to samples    {:8.1} ms   {:.2} times calamine's range, {:.2} times its cells",
            ms(xlsx_asleft),
            ratio(xlsx_asleft, range),
            ratio(xlsx_asleft, cells)
        ),
        format!(
            "memory samples kept                    {:8.1} MiB",
            mib(kept)
        ),
        format!(
            "memory peak while the csv is read      {:8.1} MiB  {:.2} times the samples",
            mib(csv_peak),
            csv_peak / kept
        ),
        format!(
            "memory peak while the xlsx is read     {:8.1} MiB  {:.2} times the samples",
            mib(xlsx_peak),
            xlsx_peak / kept
        ),
    ];
    writeln!(std::io::stdout(), "{}", report.join("\n")).expect("a terminal");
}

/// Median times of several pieces of work that take turns.
fn in_turns<const N: usize>(turns: usize, work: [&dyn Fn(); N]) -> [Duration; N] {
    let mut times: [Vec<Duration>; N] = [const { Vec::new() }; N];
    for _ in 0..turns {
        for (times, work) in times.iter_mut().zip(work) {
            let begun = Instant::now();
            work();
            times.push(begun.elapsed());
        }
    }
    times.map(|mut times| {
        times.sort_unstable();
        times[turns / 2]
    })
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

/// The csv crate as its manual walks a file: one record, used again for every row.
fn walk_csv(path: &Path) {
    let mut reader = csv::Reader::from_path(path).expect("a file");
    let mut record = csv::StringRecord::new();
    let mut fields = 0;
    while reader.read_record(&mut record).expect("a record") {
        fields += record.len();
    }
    assert_eq!(fields, 4 * ROWS);
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

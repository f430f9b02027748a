//! How long the parts of a run take: `cargo bench`, see `tests/README.md`.

mod alone;

use alone::Alone;
use asleft::archive;
use asleft::document::{self, Templates};
use asleft::figures;
use asleft::job::Job;
use asleft::read::{self, FileCache, LogRequest};
use asleft::record::{LogRole, Record};
use asleft::{RecordOptions, record};
use divan::Bencher;
use std::path::{Path, PathBuf};
use std::sync::OnceLock;
use std::time::Instant;
use tempfile::TempDir;

fn main() {
    divan::main();
}

fn demo() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("demo_data")
}

fn folder() -> TempDir {
    tempfile::tempdir().expect("a folder for the records")
}

fn record_demo(out: &Path, only: &[&str], dossier: bool) {
    let options = RecordOptions {
        only: only.iter().map(|tag| (*tag).to_owned()).collect(),
        out: Some(out.to_path_buf()),
        dossier,
    };
    record(&demo(), &options, &mut |_| {}).expect("the demo job can be recorded");
}

/// The main job: twelve loops read, fitted, designed, typeset and written, with dossier and register.
#[divan::bench(sample_count = 3, sample_size = 1)]
fn record_the_demo_job(bencher: Bencher) {
    bencher
        .with_inputs(|| {
            comemo::evict(0);
            folder()
        })
        .bench_refs(|out| record_demo(out.path(), &[], true));
}

/// The same short of typesetting and writing.
#[divan::bench(sample_count = 10, sample_size = 1)]
fn check_the_demo_job() {
    asleft::check(&demo(), &[]).expect("the demo job can be checked");
}

/// Every log of the demo job, from the disk to samples.
#[divan::bench(sample_count = 10, sample_size = 1)]
fn read_all_logs(bencher: Bencher) {
    let (job, _) = Job::read(&demo()).expect("a job");
    let rows = || job.loops.iter().flatten();
    let requests: Vec<LogRequest> = rows()
        .filter_map(|row| job.test_request(row))
        .chain(rows().filter_map(|row| job.trial_request(row)))
        .collect();
    bencher.with_inputs(FileCache::new).bench_refs(|cache| {
        for request in &requests {
            let read = read::read_log(request, cache).expect("a log");
            divan::black_box(read);
        }
    });
}

/// Pairs of runs that are compared, and how much longer a record may take than its typesetting.
const PAIRS: usize = 21;
const MOST_TIMES_THE_TYPESETTER: f64 = 1.33;

/// A record beside Typst alone on the same files: view, figures, layout and PDF against layout and PDF. Both in
/// turn, nothing remembered, so that what else the machine does meets both alike.
#[divan::bench(sample_count = 1, sample_size = 1)]
#[expect(clippy::print_stderr, reason = "the ratio is what is measured")]
fn a_record_beside_the_typesetter_alone() {
    let record = typesettable();
    let figures = figures::draw(record);
    let templates = Templates::default();
    let sources = document::record_sources(record, &figures, &[], &templates).expect("sources");
    let alone = Alone::new(sources);
    let mut ratios: Vec<f64> = (0..PAIRS)
        .map(|_| {
            comemo::evict(0);
            let start = Instant::now();
            let figures = figures::draw(record);
            let whole = document::typeset_record(record, &figures, &[], &templates).expect("a PDF");
            let whole_s = start.elapsed().as_secs_f64();
            drop(whole);
            comemo::evict(0);
            let start = Instant::now();
            let pages = alone.pdf();
            let alone_s = start.elapsed().as_secs_f64();
            drop(pages);
            whole_s / alone_s
        })
        .collect();
    ratios.sort_by(f64::total_cmp);
    let median = ratios[PAIRS / 2];
    eprintln!(
        "a record takes {median:.2} times as long as the typesetter alone (of {PAIRS} pairs {:.2} to {:.2})",
        ratios[PAIRS / 4],
        ratios[3 * PAIRS / 4]
    );
    assert!(median < MOST_TIMES_THE_TYPESETTER, "{median}");
}

/// FIC-203 of the demo job with its samples, for typesetting alone.
fn typesettable() -> &'static Record {
    static RECORD: OnceLock<Record> = OnceLock::new();
    RECORD.get_or_init(|| {
        let out = folder();
        record_demo(out.path(), &["FIC-203"], false);
        let json = out.path().join("LM-200-IC-FIC-203_rev0.json");
        let mut record = archive::read_record(&json).expect("it was written");
        let (job, _) = Job::read(&demo()).expect("a job");
        let found = job.find("FIC-203").expect("it is there");
        let row = found.as_ref().expect("a row in order");
        for log in &mut record.logs {
            let request = match log.role {
                LogRole::Test => job.test_request(row),
                LogRole::Trial => job.trial_request(row),
            };
            let read = read::read_log(&request.expect("a log"), &FileCache::new());
            log.data = read.expect("readable").samples;
        }
        record
    })
}

/// A record from its figures to the bytes of the PDF, attachments left out; nothing that the typesetter
/// remembers of an earlier one is used.
#[divan::bench(sample_count = 10, sample_size = 1)]
fn typeset_a_record(bencher: Bencher) {
    let record = typesettable();
    bencher.with_inputs(|| comemo::evict(0)).bench_values(|()| {
        let figures = figures::draw(record);
        document::typeset_record(record, &figures, &[], &Templates::default()).expect("a PDF")
    });
}

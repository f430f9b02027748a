//! What the fuzz targets share: the sources of the reader, and what they do with a file.
//!
//! The sources are taken in by their path. As a library `asleft` brings the typesetter, which takes many
//! minutes to compile with the fuzzer's counters and is not what is fuzzed.
#![allow(dead_code, unused_imports, missing_docs)]

#[path = "../../../src/archive/mod.rs"]
pub mod archive;
#[path = "../../../src/design/mod.rs"]
pub mod design;
#[path = "../../../src/display.rs"]
pub mod display;
#[path = "../../../src/identify/mod.rs"]
pub mod identify;
#[path = "../../../src/inspect/mod.rs"]
pub mod inspect;
#[path = "../../../src/job/mod.rs"]
pub mod job;
#[path = "../../../src/model.rs"]
pub mod model;
#[path = "../../../src/notice.rs"]
pub mod notice;
#[path = "../../../src/predict/mod.rs"]
pub mod predict;
#[path = "../../../src/quantity.rs"]
pub mod quantity;
#[path = "../../../src/read/mod.rs"]
pub mod read;
#[path = "../../../src/record/mod.rs"]
pub mod record;
#[path = "../../../src/report/mod.rs"]
pub mod report;
#[path = "../../../src/settings.rs"]
pub mod settings;
#[path = "../../../src/steps.rs"]
pub mod steps;
#[path = "../../../src/trace.rs"]
pub mod trace;

use std::fs;
use std::path::Path;

/// Panics that the reader catches itself are problems of the file and no finding; every other one is.
pub fn let_guarded_panics_pass() {
    let usual = std::panic::take_hook();
    std::panic::set_hook(Box::new(move |panic| {
        if !read::is_guarded() {
            usual(panic);
        }
    }));
}

/// Looks at a file as `inspect` does (every sheet, every loop), then reads the loops found as a job would.
/// Whatever comes of it, each refusal has to name its place.
pub fn read_everything(ending: &str, bytes: &[u8]) {
    let folder = tempfile::tempdir().expect("a folder");
    let name = format!("log.{ending}");
    fs::write(folder.path().join(&name), bytes).expect("written");
    for problem in read_in(folder.path(), &name) {
        assert!(problem.place.is_some(), "{problem}");
    }
}

fn read_in(folder: &Path, name: &str) -> Vec<notice::Problem> {
    match inspect::inspect(&[folder.join(name)], None, None) {
        Ok(report) => {
            let text = report.to_string();
            let json = serde_json::to_string(&report).expect("a report is JSON");
            assert!(!text.is_empty() && !json.is_empty());
            Vec::new()
        }
        Err(problems) => problems,
    }
}

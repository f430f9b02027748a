//! What the fuzz targets share: the sources of the reader, and what they do with a file.
//!
//! The sources are taken in by their path: the reader, the search for steps and the ground they stand on. As a
//! library `asleft` brings the typesetter, which takes long to compile with the fuzzer's counters and is not
//! what is fuzzed.
#![allow(dead_code, missing_docs)]

#[path = "../../../src/display.rs"]
pub mod display;
#[path = "../../../src/model.rs"]
pub mod model;
#[path = "../../../src/notice.rs"]
pub mod notice;
#[path = "../../../src/quantity.rs"]
pub mod quantity;
#[path = "../../../src/read/mod.rs"]
pub mod read;
#[path = "../../../src/settings.rs"]
pub mod settings;
#[path = "../../../src/steps.rs"]
pub mod steps;
#[path = "../../../src/trace.rs"]
pub mod trace;

use quantity::Span;
use read::FileCache;
use read::inspect::{InspectRequest, LoopInspection, inspect};
use std::fs;
use trace::Trace;

/// Panics that the reader catches itself are problems of the file and no finding; every other one is.
pub fn let_guarded_panics_pass() {
    let usual = std::panic::take_hook();
    std::panic::set_hook(Box::new(move |panic| {
        if !read::is_guarded() {
            usual(panic);
        }
    }));
}

/// Looks at a file as `inspect` does: every sheet, every loop, the moves of its OP. Whatever comes of it, each
/// refusal has to name its place.
pub fn read_everything(ending: &str, bytes: &[u8]) {
    let folder = tempfile::tempdir().expect("a folder");
    let name = format!("log.{ending}");
    fs::write(folder.path().join(&name), bytes).expect("written");
    let request = InspectRequest {
        file: &name,
        file_in_job: &name,
        ..InspectRequest::default()
    };
    match inspect(folder.path(), &request, &FileCache::new()) {
        Ok(found) => {
            for table in &found.tables {
                for problem in &table.undecided {
                    assert!(problem.place.is_some(), "{problem}");
                }
                table.loops.iter().for_each(find_moves);
            }
        }
        Err(problem) => assert!(problem.place.is_some(), "{problem}"),
    }
}

fn find_moves(found: &LoopInspection) {
    let (Ok(pv), Ok(op)) = (Span::new(0.0, 100.0), Span::new(0.0, 100.0)) else {
        return;
    };
    if let Ok(trace) = Trace::new(&found.log.samples, pv, op) {
        let _ = steps::find(&trace, 0.0);
    }
}

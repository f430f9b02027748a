//! Reads step-test logs, fits and tunes each control loop, and typesets its loop-tuning record.

pub mod archive;
pub mod assemble;
pub mod design;
pub mod display;
pub mod document;
pub mod figures;
pub mod identify;
pub mod job;
pub mod model;
pub mod notice;
pub mod predict;
pub mod quantity;
pub mod read;
pub mod record;
pub mod register;
pub mod report;
pub mod settings;
pub mod steps;
pub mod trace;

use notice::Problem;
use report::{CheckReport, NewReport, Progress, RunReport};
use std::path::{Path, PathBuf};

/// What `record` is asked for.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct RecordOptions {
    /// Tags of the loops to record; empty: all.
    pub only: Vec<String>,
    /// Folder of the records; `None`: `records` in the job folder.
    pub out: Option<PathBuf>,
    /// Whether the dossier is wanted.
    pub dossier: bool,
}

/// Lays out a job folder.
///
/// # Errors
/// Where the folder is not empty or cannot be written.
pub fn new_job(folder: &Path) -> Result<NewReport, Vec<Problem>> {
    Err(not_assembled(folder))
}

/// Tells what logs hold.
///
/// # Errors
/// Where a log cannot be read.
pub fn inspect(
    logs: &[PathBuf],
    _tag: Option<&str>,
    _job: Option<&Path>,
) -> Result<CheckReport, Vec<Problem>> {
    Err(logs.iter().flat_map(|log| not_assembled(log)).collect())
}

/// Does all that [`record`] would do short of writing.
///
/// # Errors
/// Where the job cannot be read.
pub fn check(folder: &Path, _only: &[String]) -> Result<CheckReport, Vec<Problem>> {
    Err(not_assembled(folder))
}

/// Writes the records, the dossier and the register.
///
/// # Errors
/// Where the job cannot be read or the output not be written.
pub fn record(
    folder: &Path,
    _options: &RecordOptions,
    _progress: &mut dyn FnMut(Progress),
) -> Result<RunReport, Vec<Problem>> {
    Err(not_assembled(folder))
}

fn not_assembled(path: &Path) -> Vec<Problem> {
    let file = notice::Place::file(path.display().to_string());
    vec![Problem::error(
        file,
        "the pipeline is not assembled on this branch",
    )]
}

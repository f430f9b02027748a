//! `inspect`: what logs hold, with the moves of the OP that a step test would be made of.

use crate::job::{Job, manifest};
use crate::notice::{Place, Problem};
use crate::quantity::Span;
use crate::read::inspect::{InspectRequest, Inspection, LoopInspection, OpMove};
use crate::read::{self, FileCache, LogRule};
use crate::report::{DONE, Report};
use crate::steps;
use crate::trace::Trace;
use serde::Serialize;
use std::fmt::{self, Display};
use std::path::{Path, PathBuf};

/// What `inspect` found.
#[derive(Debug, Serialize)]
pub struct InspectReport {
    /// Every log looked at, in the order named.
    pub logs: Vec<Inspection>,
}

impl Display for InspectReport {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (k, log) in self.logs.iter().enumerate() {
            if k > 0 {
                writeln!(f)?;
            }
            write!(f, "{}", log.text())?;
        }
        Ok(())
    }
}

impl Report for InspectReport {
    fn exit_code(&self) -> u8 {
        DONE
    }

    fn failures(&self) -> Option<String> {
        None
    }
}

/// Tells what logs hold. `tag` narrows a log of many loops, `job` lends its `[[log]]` rules; without it the
/// job folder that a log lies in does.
///
/// # Errors
/// Where a log or the job cannot be read; all of them together.
pub fn inspect(
    logs: &[PathBuf],
    tag: Option<&str>,
    job: Option<&Path>,
) -> Result<InspectReport, Vec<Problem>> {
    let rules = match job {
        None => Vec::new(),
        Some(folder) => Job::read(folder)?.0.manifest.logs,
    };
    let cache = FileCache::default();
    let mut found = Vec::new();
    let mut problems = Vec::new();
    for log in logs {
        let outcome = match (job, job_above(log)) {
            (None, Some(above)) => look_at(log, tag, Some(&above), &rules_of(&above), &cache),
            _ => look_at(log, tag, job, &rules, &cache),
        };
        match outcome {
            Ok(inspection) => found.push(inspection),
            Err(problem) => problems.push(problem),
        }
    }
    if problems.is_empty() {
        Ok(InspectReport { logs: found })
    } else {
        Err(problems)
    }
}

/// The job folder that a log lies in.
fn job_above(log: &Path) -> Option<PathBuf> {
    log.ancestors()
        .skip(1)
        .find(|folder| folder.join(manifest::FILE).is_file())
        .map(Path::to_path_buf)
}

/// The rules of a job that may still be in the making: none where it cannot be read yet.
fn rules_of(job: &Path) -> Vec<LogRule> {
    Job::read(job).map_or_else(|_| Vec::new(), |(job, _)| job.manifest.logs)
}

fn look_at(
    log: &Path,
    tag: Option<&str>,
    job: Option<&Path>,
    rules: &[LogRule],
    cache: &FileCache,
) -> Result<Inspection, Problem> {
    // Rules name files as they lie below the job folder.
    let (root, below) = match job.and_then(|folder| Some((folder, log.strip_prefix(folder).ok()?)))
    {
        Some((folder, below)) => (folder, below),
        None => (Path::new(""), log),
    };
    let Some(name) = below.to_str() else {
        return Err(Problem::error(
            Place::file(log.display().to_string()),
            "the name of the file is not readable text",
        ));
    };
    let reference = read::split_sheet(&name.replace('\\', "/"));
    let request = InspectRequest {
        file: &reference.file,
        sheet: reference.sheet.as_deref(),
        tag,
        rules,
    };
    let mut inspection = read::inspect::inspect(root, &request, cache)?;
    for table in &mut inspection.tables {
        for found in &mut table.loops {
            add_moves(found);
        }
    }
    Ok(inspection)
}

/// The moves of the OP, found as a step test's would be; the ranges are not known here, so the OP's is
/// taken as 0 to 100 unless it goes beyond.
fn add_moves(found: &mut LoopInspection) {
    let [op_low, op_high] = found.op_range;
    let [pv_low, pv_high] = found.pv_range;
    let spans = Span::new(pv_low, pv_high.max(pv_low + 1e-6))
        .and_then(|pv| Ok((pv, Span::new(op_low.min(0.0), op_high.max(100.0))?)));
    let Ok((pv_span, op_span)) = spans else {
        found.op_remark = Some("OP or PV has no values to look at".to_owned());
        return;
    };
    let moves = Trace::new(&found.log.samples, pv_span, op_span)
        .map_err(|error| error.to_string())
        .and_then(|trace| steps::find(&trace, 0.0).map_err(|error| error.to_string()));
    match moves {
        Ok(steps) => {
            found.op_moves = Some(
                steps
                    .iter()
                    .map(|step| OpMove {
                        at: found.log.clock.at(step.at_s),
                        from: op_span.engineering(step.op_from),
                        to: op_span.engineering(step.op_to),
                    })
                    .collect(),
            );
        }
        Err(remark) => {
            found.op_moves = Some(Vec::new());
            found.op_remark = Some(remark);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_log_in_a_job_folder_is_named_and_read_as_the_job_does() {
        let folder = tempfile::tempdir().expect("a folder");
        let root = folder.path().join("job");
        crate::job::new_job(&root).expect("a new job");
        let job_file = root.join(manifest::FILE);
        let mut text = std::fs::read_to_string(&job_file).expect("readable");
        text.push_str("[[log]]\nfiles = [\"logs/a.csv\"]\ndates = \"dmy\"\n");
        std::fs::write(&job_file, text).expect("written");
        let log = root.join("logs/a.csv");
        let mut rows = String::from("Time,PV,OP\n");
        for minute in 10..40 {
            rows.push_str(&format!("03/04/2026 09:{minute}:00,50,40\n"));
        }
        std::fs::write(&log, rows).expect("written");
        let report = inspect(&[log], None, None).expect("readable").to_string();
        assert!(report.starts_with("logs/a.csv\n"), "{report}");
        assert!(report.contains("test log = logs/a.csv\n"), "{report}");
        assert!(report.contains("2026-04-03 09:10:00"), "{report}");
    }
}

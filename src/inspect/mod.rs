//! `inspect`: what logs hold, with the moves of the OP that a step test would be made of.

mod screen;

use crate::job::{Job, manifest};
use crate::notice::{Place, Problem};
use crate::quantity::Span;
use crate::read::inspect::{InspectRequest, Inspection, LoopInspection, OpMove};
use crate::read::{self, FileCache, LogRule};
use crate::report::{DONE, NOTHING_DONE, Page, Report, SOME_FAILED};
use crate::steps;
use crate::trace::Trace;
use serde::Serialize;
use std::fmt::{self, Display};
use std::path::{Path, PathBuf};

/// What `inspect` found.
#[derive(Debug, Serialize)]
pub struct InspectReport {
    /// Every log that could be opened, in the order named.
    pub logs: Vec<Inspection>,
    /// What stood against the others.
    pub problems: Vec<Problem>,
}

impl InspectReport {
    /// Files that hold no loop that can be read, those that could not be opened among them.
    fn unread(&self) -> usize {
        let has_loop = |log: &Inspection| log.tables.iter().any(|table| !table.loops.is_empty());
        self.problems.len() + self.logs.iter().filter(|log| !has_loop(log)).count()
    }
}

impl Display for InspectReport {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut page = Page::new(&[]);
        for log in &self.logs {
            page.blank();
            screen::write(&mut page, log);
        }
        page.blank();
        page.problems(0, &self.problems);
        write!(f, "{}", page.text().trim_end_matches('\n'))?;
        writeln!(f)
    }
}

impl Report for InspectReport {
    fn exit_code(&self) -> u8 {
        match self.unread() {
            0 => DONE,
            unread if unread < self.logs.len() + self.problems.len() => SOME_FAILED,
            _ => NOTHING_DONE,
        }
    }

    fn failures(&self) -> Option<String> {
        let undecided = self
            .logs
            .iter()
            .flat_map(|log| &log.tables)
            .filter(|table| table.loops.is_empty())
            .flat_map(|table| &table.undecided);
        let problems: Vec<Problem> = self.problems.iter().chain(undecided).cloned().collect();
        if self.unread() == 0 || problems.is_empty() {
            return None;
        }
        let mut page = Page::new(&[]);
        page.problems(0, &problems);
        Some(page.text().to_owned())
    }
}

/// Tells what logs hold. `tag` narrows a log of many loops, `job` lends its `[[log]]` rules; without it the
/// job folder that a log lies in does.
///
/// # Errors
/// Where the job cannot be read, or none of the logs can be opened; all of it together.
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
    if found.is_empty() {
        return Err(problems);
    }
    Ok(InspectReport {
        logs: found,
        problems,
    })
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
    let file_in_job = match root.as_os_str().is_empty() {
        false => reference.file.clone(),
        // Outside a job a log is proposed as it will be named once it lies where logs do.
        true => {
            let name = reference.file.rsplit('/').next().unwrap_or_default();
            format!("logs/{name}")
        }
    };
    let request = InspectRequest {
        file: &reference.file,
        file_in_job: &file_in_job,
        sheet: reference.sheet.as_deref(),
        tag,
        rules,
    };
    let mut inspection = read::inspect::inspect(root, &request, cache)?;
    for table in &mut inspection.tables {
        for problem in &mut table.undecided {
            name_as_in_job(problem, &reference.file, &file_in_job);
        }
        for found in &mut table.loops {
            for problem in found.undecided.iter_mut().chain(&mut found.warnings) {
                name_as_in_job(problem, &reference.file, &file_in_job);
            }
            add_moves(found);
        }
    }
    Ok(inspection)
}

/// Lines for `job.toml` name a file as the job will.
fn name_as_in_job(problem: &mut Problem, file: &str, file_in_job: &str) {
    if let Some(hint) = &mut problem.hint {
        *hint = hint.replace(&format!("\"{file}\""), &format!("\"{file_in_job}\""));
    }
}

/// The moves of the OP, found as a step test's would be; the ranges are not known here, so the OP's is
/// taken as 0 to 100 unless it goes beyond.
fn add_moves(found: &mut LoopInspection) {
    let [pv_low, pv_high] = found.pv_range;
    let Some([op_low, op_high]) = found.op_range else {
        found.op_remark = Some("none: the OP has no values".to_owned());
        return;
    };
    let spans = Span::new(pv_low, pv_high.max(pv_low + 1e-6 * pv_low.abs().max(1.0)))
        .and_then(|pv| Ok((pv, Span::new(op_low.min(0.0), op_high.max(100.0))?)));
    let (pv_span, op_span) = match spans {
        Ok(spans) => spans,
        Err(error) => {
            found.op_remark = Some(format!("not looked for: {error}"));
            return;
        }
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
                        pulse: step.pulse,
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
        assert!(report.contains("tag,test log\n"), "{report}");
        assert!(report.contains(" ,logs/a.csv\n"), "{report}");
        assert!(report.contains("2026-04-03 09:10:00"), "{report}");
    }
}

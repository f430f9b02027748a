//! `inspect`: what logs hold, with the moves of the OP that a step test would be made of.

use crate::job::Job;
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

/// Tells what logs hold. `tag` narrows a log of many loops, `job` lends its `[[log]]` rules.
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
        match look_at(log, tag, job, &rules, &cache) {
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

//! Before the test: the plan sheets of a job, each from the loop's row of the schedule and the earlier records
//! of it. No log is read.

use crate::archive::{self, EarlierRecords, FileNames};
use crate::assemble::PROGRAM;
use crate::document::{self, Templates};
use crate::job::{Job, LoopRow};
use crate::notice::Problem;
use crate::pipeline;
use crate::plan::{self, LogWanted, Plan, PlanInput};
use crate::report::{LoopOutcome, LoopReport, PlanReport, Progress};
use crate::run::{self, RECORDS_FOLDER, Selected};
use std::path::{Path, PathBuf};

/// Folder of the plans in the job folder.
const PLANS_FOLDER: &str = "plan";

/// What the number of a plan has after that of the record to come.
const NUMBER_ENDING: &str = "_plan";

/// What `plan` is asked for.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct PlanOptions {
    /// Tags of the loops to plan; empty: all.
    pub only: Vec<String>,
    /// Folder of the plans; `None`: `plan` in the job folder.
    pub out: Option<PathBuf>,
    /// Folder of earlier records; `None`: `records` in the job folder.
    pub records: Option<PathBuf>,
}

/// Makes the plan sheets.
///
/// # Errors
/// Where the job as a whole cannot be used, the folder of earlier records cannot be read, or the folder of the
/// plans cannot be written.
pub fn plan_sheets(
    folder: &Path,
    options: &PlanOptions,
    progress: &mut dyn FnMut(Progress),
) -> Result<PlanReport, Vec<Problem>> {
    let mut selected = run::select(folder, &options.only)?;
    refuse_clashes(&mut selected.job);
    let records = options
        .records
        .clone()
        .unwrap_or_else(|| folder.join(RECORDS_FOLDER));
    let earlier = archive::earlier_records(&records).map_err(|problem| vec![problem])?;
    let out = options
        .out
        .clone()
        .unwrap_or_else(|| folder.join(PLANS_FOLDER));
    archive::prepare(&out).map_err(|problem| vec![problem])?;
    let loops = selected
        .wanted
        .iter()
        .enumerate()
        .map(|(done, &index)| {
            progress(Progress {
                done,
                of: selected.wanted.len(),
                now: run::tag_of(&selected.job, index).to_owned(),
            });
            one_loop(&selected, index, &earlier, &out, &selected.templates)
        })
        .collect();
    let mut notices = selected.notices.clone();
    notices.extend(
        earlier
            .unusable
            .iter()
            .filter(|unusable| unusable.tag.is_none())
            .map(|unusable| unusable.problem.clone()),
    );
    Ok(PlanReport {
        job: run::shown(folder),
        out: run::shown(&out),
        notices,
        loops,
    })
}

/// Two loops whose plans would be one file: both fail.
fn refuse_clashes(job: &mut Job) {
    let mut names = Vec::new();
    for row in job.loops.iter().flatten() {
        if let Ok(name) = FileNames::of_plan(&number(job, row)) {
            names.push((row.tag.clone(), name));
        }
    }
    let labelled = names.iter().map(|(tag, name)| (tag.as_str(), name));
    for (tag, problem) in archive::clashes(labelled) {
        job.refuse(&tag, problem);
    }
}

fn number(job: &Job, row: &LoopRow) -> String {
    format!("{}{NUMBER_ENDING}", job.document(row).number)
}

fn one_loop(
    selected: &Selected,
    index: usize,
    earlier: &EarlierRecords,
    out: &Path,
    templates: &Templates,
) -> LoopReport {
    let job = &selected.job;
    let mut notices = Vec::new();
    let outcome = match &job.loops[index] {
        Err(bad) => Err(bad.problems.clone()),
        Ok(row) => {
            let set_aside = set_aside(row, earlier);
            notices.extend(set_aside.iter().cloned());
            let plan = plan_of(job, row, earlier, &set_aside);
            write(job, &plan, out, templates).map(|(pdf, warnings)| {
                notices.extend(warnings);
                LoopOutcome::Planned {
                    pdf,
                    summary: summary(&plan),
                    plan: Box::new(plan),
                }
            })
        }
    };
    run::loop_report(
        job,
        index,
        outcome.unwrap_or_else(|problems| LoopOutcome::Failed { problems }),
        notices,
    )
}

/// The records of the loop that cannot be used.
fn set_aside(row: &LoopRow, earlier: &EarlierRecords) -> Vec<Problem> {
    earlier
        .unusable
        .iter()
        .filter(|unusable| {
            unusable
                .tag
                .as_deref()
                .is_some_and(|tag| tag.eq_ignore_ascii_case(&row.tag))
        })
        .map(|unusable| {
            let problem = unusable.problem.clone();
            Problem {
                message: format!("{}; the plan does not rest on it", problem.message),
                ..problem
            }
        })
        .collect()
}

/// The plan of one loop.
fn plan_of(job: &Job, row: &LoopRow, earlier: &EarlierRecords, set_aside: &[Problem]) -> Plan {
    let mut document = pipeline::document_of(job, row);
    document.number = number(job, row);
    plan::plan(PlanInput {
        document,
        control_loop: pipeline::loop_of(job, row),
        found: row.found,
        earlier: earlier.of_loop(&row.tag),
        // A page bears no path: the file's name is enough to find it.
        set_aside: set_aside
            .iter()
            .map(|problem| {
                let file = problem.place.as_ref().map_or("", |place| {
                    place.file.rsplit('/').next().unwrap_or(&place.file)
                });
                let why = problem.message.split("; the plan").next();
                format!("{file}: {}", why.unwrap_or_default())
            })
            .collect(),
        log: log_wanted(job, row),
        site_cautions: pipeline::site_cautions(job, row),
        program: PROGRAM,
    })
}

fn log_wanted(job: &Job, row: &LoopRow) -> LogWanted {
    let columns = [
        ("time", &row.columns.time),
        ("PV", &row.columns.pv),
        ("OP", &row.columns.op),
        ("SP", &row.columns.sp),
        ("mode", &row.columns.mode),
    ];
    let blank = [
        ("found p", row.found.is_none()),
        ("found i", row.found.is_none()),
        ("test log", row.test.is_none()),
        ("tested by", row.tested_by.is_none()),
        ("tested on", row.tested_on.is_none()),
        ("witnessed by", row.witnessed_by.is_none()),
        ("conditions", row.conditions.is_none()),
    ];
    LogWanted {
        file: row.test.as_ref().map(|log| log.files.clone()),
        file_is_there: row
            .test
            .as_ref()
            .is_some_and(|log| job.find_files(log).is_ok()),
        columns: columns
            .into_iter()
            .filter_map(|(role, heading)| Some((role.to_owned(), heading.clone()?)))
            .collect(),
        to_fill_in: blank
            .into_iter()
            .filter(|(_, is_blank)| *is_blank)
            .map(|(heading, _)| heading.to_owned())
            .collect(),
    }
}

/// Typesets a plan and writes it; the name of the file, and what the typesetter warns of.
fn write(
    job: &Job,
    plan: &Plan,
    out: &Path,
    templates: &Templates,
) -> Result<(String, Vec<Problem>), Vec<Problem>> {
    let one = |problem: Problem| vec![problem];
    let names = FileNames::of_plan(&plan.number).map_err(one)?;
    let typeset = document::typeset_plan(plan, templates)
        .map_err(|error| vec![pipeline::document_problem(job, &error)])?;
    let sealed = archive::seal_plan(typeset.pdf).map_err(one)?;
    archive::write_plan(out, &names, &sealed).map_err(one)?;
    let warnings = typeset.warnings.into_iter().map(pipeline::template_warning);
    Ok((names.pdf(), warnings.collect()))
}

/// What the terminal says of a plan.
fn summary(plan: &Plan) -> String {
    use crate::display::plain;
    use crate::plan::{NotProposed, Size};
    let from = plan
        .basis
        .as_ref()
        .map(|basis| format!("{} revision {}", basis.number, basis.revision));
    match (plan.size, from) {
        (Size::Proposed { op_percent, .. }, Some(from)) => format!(
            "OP moves of {} % proposed, from {from}",
            plain(op_percent, 3)
        ),
        (
            Size::ToAgree {
                because: NotProposed::Protective,
            },
            _,
        ) => "no test: a protective loop without its procedure".to_owned(),
        (
            Size::ToAgree {
                because: NotProposed::NoModel,
            },
            Some(from),
        ) => format!("size of the moves to agree with operations: {from} holds no model"),
        (Size::ToAgree { .. }, Some(from)) => {
            format!("size of the moves to agree with operations: {from} could not assess the noise")
        }
        (_, None) => "size of the moves to agree with operations: no earlier record".to_owned(),
    }
}

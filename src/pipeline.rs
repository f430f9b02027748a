//! From the checked job to finished records: reading, engineering, typesetting and writing of each loop.

use crate::archive::{self, Standing};
use crate::assemble::{self, InnerRecord, LoopInput, PROGRAM};
use crate::document::{self, Attachment, AttachmentKind, DossierInput, DossierRecord, Templates};
use crate::figures::{self, Figure};
use crate::job::{Job, LogCell, LoopRow, schedule_row_csv};
use crate::notice::{Problem, Severity};
use crate::read::{self, FileCache, LogRead, Source};
use crate::record::{
    Document, GapRecord, LimitsInForce, Log, LogRole, LogSource, Loop, PageSize, Procedure, Range,
    Record, Revision, Signature, Status,
};
use crate::trace::{Clock, gaps};
use std::collections::BTreeMap;
use std::path::Path;

/// One loop's record and what was noticed on the way.
#[derive(Debug, Clone)]
pub struct Engineered {
    /// The record, not sealed yet.
    pub record: Record,
    /// What stops nothing.
    pub notices: Vec<Problem>,
}

/// A record as it stands in the folder of the records, with what goes into the dossier.
#[derive(Debug, Clone)]
pub struct Recorded {
    /// The sealed record; of one that was issued before, the issued one.
    pub record: Record,
    /// Its figures.
    pub figures: Vec<Figure>,
    /// Its attachments.
    pub attachments: Vec<Attachment>,
    /// Whether it was issued before and left as it is.
    pub kept: bool,
    /// What stops nothing.
    pub notices: Vec<Problem>,
}

/// Reads the logs of one loop and makes its record. `inner` is the record of its inner loop.
///
/// # Errors
/// Everything that keeps this loop from having a record.
pub fn engineer(
    job: &Job,
    row: &LoopRow,
    inner: Option<InnerRecord>,
    cache: &FileCache,
) -> Result<Engineered, Vec<Problem>> {
    let mut problems = row.missing_for_record();
    let mut notices = Vec::new();
    let mut log_of = |cell: Option<&LogCell>, request: Option<read::LogRequest>, role| {
        if let Err(missing) = job.find_files(cell?) {
            problems.extend(missing);
            return None;
        }
        match read::read_log(&request?, cache) {
            Ok(read) => {
                notices.extend(read.warnings.clone());
                Some(log_record(role, read))
            }
            Err(found) => {
                problems.extend(found);
                None
            }
        }
    };
    let test = log_of(row.test.as_ref(), job.test_request(row), LogRole::Test);
    let trial = log_of(row.trial.as_ref(), job.trial_request(row), LogRole::Trial);
    let (Some(test), Some(found), true) = (test, row.found, problems.is_empty()) else {
        return Err(problems);
    };
    let input = LoopInput {
        document: document_of(job, row),
        control_loop: loop_of(job, row),
        controller: row.controller,
        found,
        left: row.left.as_ref().map(|left| left.native),
        test,
        trial,
        limits: limits_of(job, row),
        site_cautions: site_cautions(job, row),
        inner,
    };
    Ok(Engineered {
        record: assemble::assemble(input)?,
        notices,
    })
}

/// Seals a record, typesets it and writes it, unless it was issued before.
///
/// # Errors
/// Where it cannot be written, typeset, or would replace an issued record that differs.
pub fn write(
    job: &Job,
    row: &LoopRow,
    engineered: Engineered,
    out: &Path,
    templates: &Templates,
) -> Result<Recorded, Vec<Problem>> {
    let Engineered {
        record,
        mut notices,
    } = engineered;
    let sealed = archive::seal(record).map_err(one)?;
    let standing = archive::look(out, &sealed).map_err(one)?;
    let (record, slot) = match standing {
        Standing::Free(slot) => (sealed, Some(slot)),
        Standing::Issued { kept, notice } => {
            notices.extend(notice);
            (*kept, None)
        }
    };
    let figures = figures::draw(&record);
    let json = archive::json_text(&record);
    let attachments = attachments_of(&record, &json, row);
    let kept = slot.is_none();
    if let Some(slot) = slot {
        let typeset = document::typeset_record(&record, &figures, &attachments, templates)
            .map_err(|error| vec![document_problem(job, &error)])?;
        slot.store(&json, &typeset.pdf).map_err(one)?;
        notices.extend(typeset.warnings.into_iter().map(template_warning));
    }
    Ok(Recorded {
        record,
        figures,
        attachments,
        kept,
        notices,
    })
}

/// The record that [`write`] would leave in the folder, short of typesetting and writing it.
///
/// # Errors
/// As [`write`].
pub fn look(engineered: &Engineered, out: &Path) -> Result<Record, Vec<Problem>> {
    let sealed = archive::seal(engineered.record.clone()).map_err(one)?;
    Ok(match archive::look(out, &sealed).map_err(one)? {
        Standing::Free(_) => sealed,
        Standing::Issued { kept, .. } => *kept,
    })
}

/// Whether the dossier of these records, inner loops first, could be written: what [`write_dossier`] would
/// find short of typesetting.
///
/// # Errors
/// As [`write_dossier`].
pub fn look_for_dossier(
    job: &Job,
    records: &[Record],
    not_recorded: &[String],
    out: &Path,
) -> Result<(), Vec<Problem>> {
    let dossier = archive::Dossier::new(dossier_document(job), records, not_recorded, PROGRAM);
    archive::look_for_dossier(out, &dossier)
        .map(drop)
        .map_err(one)
}

/// Binds and writes the dossier. `records` stand inner loop first.
///
/// # Errors
/// Where it cannot be typeset or written, or would replace an issued dossier that differs.
pub fn write_dossier(
    job: &Job,
    records: &[&Recorded],
    not_recorded: &[String],
    out: &Path,
    templates: &Templates,
) -> Result<(archive::Dossier, bool, Vec<Problem>), Vec<Problem>> {
    let sealed: Vec<Record> = records.iter().map(|r| r.record.clone()).collect();
    let dossier = archive::Dossier::new(dossier_document(job), &sealed, not_recorded, PROGRAM);
    match archive::look_for_dossier(out, &dossier).map_err(one)? {
        Standing::Issued { kept, notice } => Ok((*kept, true, notice.into_iter().collect())),
        Standing::Free(slot) => {
            let bound: Vec<DossierRecord> = records
                .iter()
                .map(|r| DossierRecord {
                    record: &r.record,
                    figures: &r.figures,
                    attachments: &r.attachments,
                })
                .collect();
            let typeset = document::typeset_dossier(
                &dossier_input(&dossier.document, job, not_recorded),
                &bound,
                templates,
            )
            .map_err(|error| vec![document_problem(job, &error)])?;
            slot.store(&archive::json_text(&dossier), &typeset.pdf)
                .map_err(one)?;
            let warnings = typeset.warnings.into_iter().map(template_warning);
            Ok((dossier, false, warnings.collect()))
        }
    }
}

fn one(problem: Problem) -> Vec<Problem> {
    vec![problem]
}

/// What the typesetter warns of. Its own text names file, line and column.
pub fn template_warning(text: String) -> Problem {
    Problem {
        severity: Severity::Warning,
        ..Problem::general(format!("the typesetter warns: {text}"))
    }
}

/// What kept a document from being typeset, with the job's own templates in mind.
pub fn document_problem(job: &Job, error: &document::DocumentError) -> Problem {
    let problem = Problem::general(error.to_string());
    match (error.hint(), &job.manifest.template) {
        (Some(hint), _) => problem.hint(hint),
        (None, Some(folder)) => problem.hint(format!("the job's own templates lie in {folder}")),
        (None, None) => problem,
    }
}

fn attachments_of(record: &Record, json: &str, row: &LoopRow) -> Vec<Attachment> {
    let mut attachments = vec![Attachment {
        name: "record.json".to_owned(),
        kind: AttachmentKind::Record,
        bytes: json.as_bytes().to_vec(),
    }];
    attachments.extend(record.logs.iter().map(|log| Attachment {
        name: log.samples_file.clone(),
        kind: AttachmentKind::Samples,
        bytes: read::samples_csv(&log.data, log.zero.map_or(Clock::Elapsed, Clock::Dated)),
    }));
    attachments.push(Attachment {
        name: "schedule-row.csv".to_owned(),
        kind: AttachmentKind::ScheduleRow,
        bytes: schedule_row_csv(row),
    });
    attachments
}

/// What was read of one test, as the record tells it.
fn log_record(role: LogRole, read: LogRead) -> Log {
    let good: Vec<f64> = read
        .samples
        .t_s
        .iter()
        .zip(&read.samples.good)
        .filter_map(|(t, good)| good.then_some(*t))
        .collect();
    let mut bad_by_cause = BTreeMap::new();
    for (cause, count) in read.sources.iter().flat_map(|source| &source.bad) {
        *bad_by_cause.entry(cause.clone()).or_insert(0) += count;
    }
    let first = read.sources.first();
    let moment = |t: Option<&f64>| read.clock.at(t.copied().unwrap_or(0.0));
    let samples = read::samples_csv(&read.samples, read.clock);
    Log {
        role,
        file: first.map(|s| s.file.clone()).unwrap_or_default(),
        sheet: first.and_then(|s| s.sheet.clone()),
        sha256: first.map(|s| s.sha256.clone()).unwrap_or_default(),
        rows: read.sources.iter().map(|source| source.rows).sum(),
        also: read.sources.iter().skip(1).map(log_source).collect(),
        samples: good.len(),
        from: moment(read.samples.t_s.first()),
        to: moment(read.samples.t_s.last()),
        zero: match read.clock {
            Clock::Dated(zero) => Some(zero),
            Clock::Elapsed => None,
        },
        interval_s: crate::trace::median_interval(&good),
        bad_samples: read.bad_samples(),
        bad_by_cause,
        gaps: gaps(&good)
            .iter()
            .filter(|_| !read.is_compressed())
            .map(|gap| GapRecord {
                from: read.clock.at(gap.from_s),
                to: read.clock.at(gap.to_s),
            })
            .collect(),
        notes: read.sources.iter().flat_map(notes_of).collect(),
        samples_file: match role {
            LogRole::Test => "samples-test.csv",
            LogRole::Trial => "samples-trial.csv",
        }
        .to_owned(),
        samples_sha256: archive::sha256(&samples),
        data: read.samples,
    }
}

fn log_source(source: &Source) -> LogSource {
    LogSource {
        file: source.file.clone(),
        sheet: source.sheet.clone(),
        sha256: source.sha256.clone(),
        rows: source.rows,
    }
}

/// What the reader did that a signer should know.
fn notes_of(source: &Source) -> Vec<String> {
    use crate::display::counted;
    let mut notes = Vec::new();
    if source.duplicates > 0 {
        notes.push(format!(
            "{} given up for a later one of the same time",
            counted(source.duplicates, "row", "rows")
        ));
    }
    if source.sorted_rows > 0 {
        notes.push(format!(
            "{} out of order put in order",
            counted(source.sorted_rows, "row", "rows")
        ));
    }
    notes.extend(source.fold.clone());
    if source.compressed {
        notes.push("reported by exception: samples come when a value changed".to_owned());
    }
    notes
}

fn limits_of(job: &Job, row: &LoopRow) -> LimitsInForce {
    let mut design = job.manifest.design_bounds;
    if let Some(limit) = row.op_move_limit_percent {
        design.op_move_percent = limit;
    }
    LimitsInForce {
        design,
        verdict: job.manifest.verdict_bounds,
    }
}

fn page_of(job: &Job) -> PageSize {
    match job.manifest.page {
        crate::job::Page::A4 => PageSize::A4,
        crate::job::Page::UsLetter => PageSize::UsLetter,
    }
}

/// The parts of the title block that all documents of a job share.
fn job_document(job: &Job) -> Document {
    let manifest = &job.manifest;
    let name_of = |begins: &str| {
        manifest
            .signatures
            .iter()
            .find(|s| s.role.to_lowercase().starts_with(begins))
            .and_then(|s| s.name.clone())
    };
    Document {
        number: manifest.dossier.clone(),
        revision: manifest.revision.clone(),
        status: Status::Draft,
        date: manifest.date,
        owner: manifest.owner.clone(),
        plant: manifest.plant.clone(),
        area: manifest.area.clone(),
        client: manifest.client.clone(),
        creator: manifest.signatures.first().and_then(|s| s.name.clone()),
        approver: name_of("approved"),
        page: page_of(job),
        open_items: Vec::new(),
        remarks: Vec::new(),
        signatures: manifest
            .signatures
            .iter()
            .map(|s| Signature {
                role: s.role.clone(),
                name: s.name.clone(),
            })
            .collect(),
        procedures: manifest
            .procedures
            .iter()
            .map(|p| Procedure {
                title: p.title.clone(),
                reference: p.reference.clone(),
            })
            .collect(),
        revisions: manifest
            .revision_history
            .iter()
            .map(|r| Revision {
                revision: r.revision.clone(),
                date: r.date,
                reason: r.reason.clone(),
            })
            .collect(),
    }
}

/// The title block of a loop's document.
pub fn document_of(job: &Job, row: &LoopRow) -> Document {
    let identity = job.document(row);
    let mut document = job_document(job);
    document.revisions.push(Revision {
        revision: identity.revision.clone(),
        date: identity.date,
        reason: identity.reason.unwrap_or_default(),
    });
    Document {
        number: identity.number,
        revision: identity.revision,
        date: identity.date,
        ..document
    }
}

fn dossier_document(job: &Job) -> Document {
    let mut document = job_document(job);
    document.revisions.push(Revision {
        revision: document.revision.clone(),
        date: document.date,
        reason: job.manifest.reason.clone().unwrap_or_default(),
    });
    document
}

fn dossier_input(document: &Document, job: &Job, not_recorded: &[String]) -> DossierInput {
    DossierInput {
        number: document.number.clone(),
        title: match &job.manifest.area {
            Some(area) => format!("Loop tuning, {area}"),
            None => format!("Loop tuning, {}", job.manifest.plant),
        },
        revision: document.revision.clone(),
        date: document.date,
        owner: document.owner.clone(),
        plant: document.plant.clone(),
        area: document.area.clone(),
        client: document.client.clone(),
        page: document.page,
        signatures: document.signatures.clone(),
        procedures: document.procedures.clone(),
        not_recorded: not_recorded.to_vec(),
        program: PROGRAM.to_owned(),
    }
}

/// The site's own cautions for a loop.
pub fn site_cautions(job: &Job, row: &LoopRow) -> Vec<String> {
    job.manifest
        .cautions
        .iter()
        .filter(|caution| caution.loops.is_empty() || caution.loops.contains(&row.tag))
        .map(|caution| caution.text.clone())
        .collect()
}

/// The loop as its row of the schedule describes it.
pub fn loop_of(job: &Job, row: &LoopRow) -> Loop {
    let left = row.left.as_ref();
    let particulars = [
        ("controller", &row.controller_name),
        ("transmitter", &row.transmitter),
        ("valve", &row.valve),
        ("valve fail", &row.valve_fail),
        ("normal mode", &row.normal_mode),
        ("drawing", &row.drawing),
        ("change number", &row.change_number),
        ("remarks", &row.remarks),
    ];
    Loop {
        tag: row.tag.clone(),
        service: row.service.clone(),
        pv: Range {
            unit: row.pv_unit.clone(),
            low: row.controller.pv_span.low(),
            high: row.controller.pv_span.high(),
        },
        op: Range {
            unit: row.op_unit.clone(),
            low: row.controller.op_span.low(),
            high: row.controller.op_span.high(),
        },
        action: row.action,
        left_action: row.left_action,
        form: row.controller.form,
        p_as: row.controller.p_as,
        i_as: row.controller.i_as,
        d_as: row.controller.d_as,
        p_on: row.controller.p_on,
        d_on: row.controller.d_on,
        d_filter_n: row.controller.d_filter_n,
        scan_s: row.controller.scan_s,
        pv_filter_s: row.pv_filter_s,
        left_pv_filter_s: row.left_pv_filter_s,
        pv_filter_in_log: row.pv_filter_in_log,
        aim: row.aim,
        derivative: row.derivative,
        target_s: row.target_s,
        target_reason: row.target_reason.clone(),
        allowed_deviation: row.allowed_deviation,
        expected_load_percent: row.expected_load_percent,
        inner_loop: row.inner_loop.clone(),
        outer_loops: job
            .loops
            .iter()
            .flatten()
            .filter(|other| {
                other
                    .inner_loop
                    .as_deref()
                    .is_some_and(|tag| tag.eq_ignore_ascii_case(&row.tag))
            })
            .map(|other| other.tag.clone())
            .collect(),
        safety: row.safety,
        safety_procedure: row.safety_procedure.clone(),
        waiver: row.waiver.clone(),
        entered_by: left.and_then(|left| left.entered_by.clone()),
        left_on: left.and_then(|left| left.on).map(|day| day.date()),
        tested_by: row.tested_by.clone(),
        tested_on: row.tested_on.map(|day| day.date()),
        witnessed_by: row.witnessed_by.clone(),
        conditions: row.conditions.clone(),
        particulars: particulars
            .into_iter()
            .filter_map(|(name, text)| Some((name.to_owned(), text.clone()?)))
            .collect(),
    }
}

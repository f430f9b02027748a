//! The runs over a whole job: loop by loop on all cores, inner loops before those that cascade to them.

use crate::archive::{self, FileNames};
use crate::assemble::{self, InnerRecord};
use crate::document::{self, Alphabet, Templates};
use crate::job::{self, Job, LoopRow};
use crate::notice::{Place, Problem, nearest};
use crate::pipeline::{self, Engineered, Recorded};
use crate::read::FileCache;
use crate::record::Record;
use crate::register;
use crate::report::{
    CheckReport, DossierOutcome, LoopOutcome, LoopReport, NewReport, Progress, RunReport,
};
use std::path::{Path, PathBuf};
use std::sync::OnceLock;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::mpsc;

/// Folder of the records in the job folder.
pub(crate) const RECORDS_FOLDER: &str = "records";

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

/// A job with the loops that this run is about.
pub(crate) struct Selected {
    pub job: Job,
    pub notices: Vec<Problem>,
    /// Places in `job.loops`, in the order of the schedule.
    pub wanted: Vec<usize>,
    pub templates: Templates,
}

/// Lays out a job folder.
///
/// # Errors
/// Where the folder is not empty or cannot be written.
pub fn new_job(folder: &Path) -> Result<NewReport, Vec<Problem>> {
    let files = job::new_job(folder).map_err(|problem| vec![problem])?;
    Ok(NewReport {
        folder: shown(folder),
        files,
    })
}

/// Does all that [`record`] would do short of typesetting and writing.
///
/// # Errors
/// Where the job as a whole cannot be used.
pub fn check(folder: &Path, only: &[String]) -> Result<CheckReport, Vec<Problem>> {
    let selected = select(folder, only)?;
    let out = folder.join(RECORDS_FOLDER);
    let alphabet = Alphabet::new(&selected.templates);
    let outcomes = each_loop(&selected, &mut |_| {}, |row, engineered| {
        let record = pipeline::look(&engineered, &out)?;
        // What the logs bring in: names of files and sheets, conditions.
        match alphabet.lacks_for(&record) {
            Some((character, text)) => Err(vec![
                Problem::error(row.place.clone(), job::undrawable_message(character, &text))
                    .hint(document::FONT_HINT),
            ]),
            None => Ok((engineered, record)),
        }
    });
    let dossier = if only.is_empty() {
        check_dossier(&selected, &outcomes, &out)
    } else {
        Vec::new()
    };
    let loops = selected
        .wanted
        .iter()
        .zip(outcomes)
        .map(|(&index, outcome)| {
            let (outcome, notices) = match outcome {
                Ok((engineered, _)) => (
                    LoopOutcome::Ready {
                        status: engineered.record.document.status,
                        open_items: open_items(&engineered.record),
                        next_time: next_time(&engineered.record),
                    },
                    engineered.notices,
                ),
                Err(problems) => (LoopOutcome::Failed { problems }, Vec::new()),
            };
            loop_report(&selected.job, index, outcome, notices)
        })
        .collect();
    Ok(CheckReport {
        job: shown(folder),
        notices: selected.notices,
        loops,
        dossier,
    })
}

/// What would keep the dossier from being bound.
fn check_dossier(
    selected: &Selected,
    outcomes: &[Result<(Engineered, Record), Vec<Problem>>],
    out: &Path,
) -> Vec<Problem> {
    let records: Vec<Record> = in_binding_order(selected, outcomes)
        .into_iter()
        .map(|(_, record)| record.clone())
        .collect();
    if records.is_empty() {
        return Vec::new();
    }
    let not_recorded = not_recorded(selected, outcomes);
    pipeline::look_for_dossier(&selected.job, &records, &not_recorded, out)
        .err()
        .unwrap_or_default()
}

/// What came out well, inner loops before the loops that cascade to them.
fn in_binding_order<'a, T, E>(selected: &Selected, outcomes: &'a [Result<T, E>]) -> Vec<&'a T> {
    selected
        .job
        .inner_first()
        .into_iter()
        .filter_map(|index| {
            let place = selected.wanted.iter().position(|&k| k == index)?;
            outcomes[place].as_ref().ok()
        })
        .collect()
}

/// Makes records, dossier and register.
///
/// # Errors
/// Where the job as a whole cannot be used or the folder of the records cannot be written.
pub fn record(
    folder: &Path,
    options: &RecordOptions,
    progress: &mut dyn FnMut(Progress),
) -> Result<RunReport, Vec<Problem>> {
    let selected = select(folder, &options.only)?;
    let templates = &selected.templates;
    let out = options
        .out
        .clone()
        .unwrap_or_else(|| folder.join(RECORDS_FOLDER));
    archive::prepare(&out).map_err(|problem| vec![problem])?;
    let outcomes = each_loop(&selected, progress, |row, engineered| {
        pipeline::write(&selected.job, row, engineered, &out, templates)
    });
    let recorded: Vec<&Recorded> = outcomes.iter().flatten().collect();
    let dossier = (options.dossier && options.only.is_empty() && !recorded.is_empty()).then(|| {
        progress(Progress {
            done: selected.wanted.len(),
            of: selected.wanted.len(),
            now: "the dossier".to_owned(),
        });
        dossier(&selected, &outcomes, &out, templates)
    });
    let mut notices = selected.notices.clone();
    let register = if options.only.is_empty() && !recorded.is_empty() {
        let records: Vec<Record> = recorded.iter().map(|r| r.record.clone()).collect();
        let missing = not_recorded(&selected, &outcomes);
        archive::write_register(&out, &register::to_csv(&records, &missing))
            .map_err(|problem| vec![problem])?;
        Some(archive::REGISTER_FILE.to_owned())
    } else {
        None
    };
    let loops = selected
        .wanted
        .iter()
        .zip(&outcomes)
        .map(|(&index, outcome)| match outcome {
            Ok(recorded) => {
                let document = &recorded.record.document;
                let written = FileNames::new(&document.number, &document.revision).map(|names| {
                    LoopOutcome::Written {
                        status: document.status,
                        open_items: open_items(&recorded.record),
                        next_time: next_time(&recorded.record),
                        pdf: names.pdf(),
                        json: names.json(),
                        kept: recorded.kept,
                    }
                });
                let outcome = written.unwrap_or_else(|problem| LoopOutcome::Failed {
                    problems: vec![problem],
                });
                loop_report(&selected.job, index, outcome, recorded.notices.clone())
            }
            Err(problems) => loop_report(
                &selected.job,
                index,
                LoopOutcome::Failed {
                    problems: problems.clone(),
                },
                Vec::new(),
            ),
        })
        .collect();
    notices.dedup();
    Ok(RunReport {
        job: shown(folder),
        out: shown(&out),
        notices,
        loops,
        dossier,
        register,
    })
}

pub(crate) fn shown(path: &Path) -> String {
    path.display().to_string().replace('\\', "/")
}

fn open_items(record: &Record) -> Vec<String> {
    record
        .document
        .open_items
        .iter()
        .map(|item| item.text.clone())
        .collect()
}

fn next_time(record: &Record) -> Vec<String> {
    let advice = record.test.next_time.iter();
    advice
        .map(|advice| format!("{} {}", advice.what, advice.how))
        .collect()
}

pub(crate) fn loop_report(
    job: &Job,
    index: usize,
    outcome: LoopOutcome,
    notices: Vec<Problem>,
) -> LoopReport {
    LoopReport {
        tag: tag_of(job, index).to_owned(),
        outcome,
        notices,
    }
}

pub(crate) fn tag_of(job: &Job, index: usize) -> &str {
    match &job.loops[index] {
        Ok(row) => &row.tag,
        Err(bad) => &bad.tag,
    }
}

/// Reads the job and picks the loops asked for.
pub(crate) fn select(folder: &Path, only: &[String]) -> Result<Selected, Vec<Problem>> {
    let (mut job, notices) = Job::read(folder)?;
    let templates = Templates::new(job.template_files()?);
    let alphabet = Alphabet::new(&templates);
    let undrawable = job.refuse_undrawable(|text| alphabet.lacks(text), document::FONT_HINT);
    if !undrawable.is_empty() {
        return Err(undrawable);
    }
    let tags: Vec<&str> = (0..job.loops.len()).map(|k| tag_of(&job, k)).collect();
    let unknown: Vec<Problem> = only
        .iter()
        .filter(|tag| !tags.iter().any(|known| known.eq_ignore_ascii_case(tag)))
        .map(|tag| {
            let problem = Problem::error(
                Place::file(&job.schedule_file),
                format!("there is no loop {tag}"),
            );
            match nearest(tag, tags.iter().copied()) {
                Some(known) => problem.hint(format!("did you mean {known}?")),
                None => problem.hint(format!("the loops are {}", tags.join(", "))),
            }
        })
        .collect();
    if !unknown.is_empty() {
        return Err(unknown);
    }
    let wanted = (0..job.loops.len())
        .filter(|&k| {
            only.is_empty()
                || only
                    .iter()
                    .any(|tag| tag.eq_ignore_ascii_case(tag_of(&job, k)))
        })
        .collect();
    let mut selected = Selected {
        job,
        notices,
        wanted,
        templates,
    };
    refuse_clashes(&mut selected);
    Ok(selected)
}

/// Two loops whose documents would be one file: both fail, neither overwrites the other.
fn refuse_clashes(selected: &mut Selected) {
    let mut names = Vec::new();
    for row in selected.job.loops.iter().flatten() {
        let identity = selected.job.document(row);
        if let Ok(name) = FileNames::new(&identity.number, &identity.revision) {
            names.push((row.tag.clone(), name));
        }
    }
    let labelled = names.iter().map(|(tag, name)| (tag.as_str(), name));
    for (tag, problem) in archive::clashes(labelled) {
        selected.job.refuse(&tag, problem);
    }
}

/// The loops that have to be engineered for this run, inner loops first: those asked for and the inner
/// loops that they stand on.
fn needed(selected: &Selected) -> Vec<usize> {
    let job = &selected.job;
    let mut needed = vec![false; job.loops.len()];
    for &start in &selected.wanted {
        let mut next = Some(start);
        while let Some(index) = next.filter(|&k| !needed[k]) {
            needed[index] = true;
            next = inner_of(job, index);
        }
    }
    job.inner_first()
        .into_iter()
        .filter(|&k| needed[k])
        .collect()
}

/// Place of the loop's inner loop in the schedule.
fn inner_of(job: &Job, index: usize) -> Option<usize> {
    let inner = job.loops[index].as_ref().ok()?.inner_loop.as_deref()?;
    (0..job.loops.len()).find(|&k| tag_of(job, k).eq_ignore_ascii_case(inner))
}

/// Engineers every loop and does `finish` with those asked for, on all cores. Outcomes come in the
/// order of `selected.wanted`, whatever order the work was done in.
fn each_loop<T: Send + Sync>(
    selected: &Selected,
    progress: &mut dyn FnMut(Progress),
    finish: impl Fn(&LoopRow, Engineered) -> Result<T, Vec<Problem>> + Sync,
) -> Vec<Result<T, Vec<Problem>>> {
    let job = &selected.job;
    let order = needed(selected);
    let cache = FileCache::default();
    // An outer loop waits for its inner one; that one was taken earlier, so somebody is at it.
    let inner: Vec<OnceLock<Option<InnerRecord>>> =
        job.loops.iter().map(|_| OnceLock::new()).collect();
    let outcomes: Vec<OnceLock<Result<T, Vec<Problem>>>> =
        job.loops.iter().map(|_| OnceLock::new()).collect();
    let next = AtomicUsize::new(0);
    let (told, heard) = mpsc::channel();
    let work = |told: mpsc::Sender<usize>| {
        while let Some(&index) = order.get(next.fetch_add(1, Ordering::Relaxed)) {
            // Who listens is the thread that started this one; it listens to the end.
            let _ = told.send(index);
            let Ok(row) = &job.loops[index] else { continue };
            // Set whatever happens: who waits for this loop must not wait for ever.
            let announced = Announced(&inner[index]);
            let engineered = engineer(job, index, row, &inner, &cache);
            let for_outer = engineered.as_ref().ok();
            let _ = announced
                .0
                .set(for_outer.map(|e| assemble::inner_record(&e.record)));
            drop(announced);
            if selected.wanted.contains(&index) {
                let _ = outcomes[index].set(engineered.and_then(|e| finish(row, e)));
            }
        }
    };
    let workers = std::thread::available_parallelism()
        .map_or(1, |n| n.get())
        .min(order.len());
    std::thread::scope(|scope| {
        for _ in 0..workers {
            let told = told.clone();
            scope.spawn(|| work(told));
        }
        drop(told);
        for (done, index) in heard.iter().enumerate() {
            progress(Progress {
                done,
                of: order.len(),
                now: tag_of(job, index).to_owned(),
            });
        }
    });
    let mut outcomes = outcomes;
    selected
        .wanted
        .iter()
        .map(|&index| match &job.loops[index] {
            Err(bad) => Err(bad.problems.clone()),
            Ok(_) => outcomes[index]
                .take()
                .expect("every loop asked for was worked on"),
        })
        .collect()
}

/// Says at the latest when it goes out of scope, also by a panic, that there is no record to wait for.
struct Announced<'a>(&'a OnceLock<Option<InnerRecord>>);

impl Drop for Announced<'_> {
    fn drop(&mut self) {
        let _ = self.0.set(None);
    }
}

fn engineer(
    job: &Job,
    index: usize,
    row: &LoopRow,
    inner: &[OnceLock<Option<InnerRecord>>],
    cache: &FileCache,
) -> Result<Engineered, Vec<Problem>> {
    let inner_record = match inner_of(job, index) {
        None => None,
        Some(k) => {
            let found = match &job.loops[k] {
                Ok(_) => inner[k].wait().clone(),
                Err(_) => None,
            };
            match found {
                Some(record) => Some(record),
                None => {
                    return Err(vec![Problem::error(
                        row.place.clone(),
                        format!(
                            "its inner loop {} could not be recorded, and this loop stands on it",
                            tag_of(job, k)
                        ),
                    )]);
                }
            }
        }
    };
    pipeline::engineer(job, row, inner_record, cache)
}

/// Tags of the loops asked for that have no record, in the order of the schedule.
fn not_recorded<T, E>(selected: &Selected, outcomes: &[Result<T, E>]) -> Vec<String> {
    selected
        .wanted
        .iter()
        .zip(outcomes)
        .filter(|(_, outcome)| outcome.is_err())
        .map(|(&index, _)| tag_of(&selected.job, index).to_owned())
        .collect()
}

/// The dossier of all records that there are, inner loops before the loops that cascade to them.
fn dossier(
    selected: &Selected,
    outcomes: &[Result<Recorded, Vec<Problem>>],
    out: &Path,
    templates: &Templates,
) -> DossierOutcome {
    let records = in_binding_order(selected, outcomes);
    let not_recorded = not_recorded(selected, outcomes);
    let written = pipeline::write_dossier(&selected.job, &records, &not_recorded, out, templates)
        .and_then(|(dossier, kept, notices)| {
            let document = &dossier.document;
            let names = FileNames::new(&document.number, &document.revision)
                .map_err(|problem| vec![problem])?;
            Ok(DossierOutcome::Written {
                status: document.status,
                pdf: names.pdf(),
                json: names.json(),
                kept,
                notices,
            })
        });
    written.unwrap_or_else(|problems| DossierOutcome::Failed { problems })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::Report;

    #[test]
    fn a_test_of_which_nothing_can_be_used_says_why() {
        let folder = tempfile::tempdir().expect("a folder");
        let root = folder.path().join("job");
        new_job(&root).expect("a new job");
        let log = root.join("logs/example-1.csv");
        let text = std::fs::read_to_string(&log).expect("readable");
        let stuck: Vec<String> = text
            .lines()
            .enumerate()
            .map(|(line, row)| {
                let mut cells: Vec<&str> = row.split(',').collect();
                if line > 0 {
                    cells[1] = "55.0";
                }
                cells.join(",")
            })
            .collect();
        std::fs::write(&log, stuck.join("\n")).expect("written");
        let report = check(&root, &[]).expect("a job");
        let LoopOutcome::Ready {
            status, open_items, ..
        } = &report.loops[0].outcome
        else {
            panic!("{report}");
        };
        assert_eq!(*status, crate::record::Status::Withheld);
        assert!(
            open_items[0].starts_with(
                "No step of the test can be used. Steps 1\u{a0}to\u{a0}4 are rejected"
            ),
            "{open_items:?}"
        );
        assert!(
            open_items[0].contains("PV does not change"),
            "{open_items:?}"
        );
    }

    #[test]
    fn check_tells_what_would_keep_the_dossier_from_being_bound() {
        let folder = tempfile::tempdir().expect("a folder");
        let root = folder.path().join("job");
        new_job(&root).expect("a new job");
        let report = check(&root, &[]).expect("a job");
        assert_eq!((report.dossier.len(), report.exit_code()), (0, 0));
        std::fs::create_dir(root.join(RECORDS_FOLDER)).expect("a folder");
        let pdf = root.join(RECORDS_FOLDER).join("IC-DOSSIER_rev0.pdf");
        std::fs::write(pdf, "issued").expect("written");
        let report = check(&root, &[]).expect("a job");
        assert_eq!(report.exit_code(), crate::report::SOME_FAILED);
        assert!(report.to_string().contains("dossier    failed"), "{report}");
        let narrowed = check(&root, &["EXAMPLE-1".to_owned()]).expect("a job");
        assert_eq!(narrowed.exit_code(), 0, "{narrowed}");
    }
}

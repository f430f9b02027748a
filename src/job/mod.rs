//! The job: `job.toml` and the loop schedule, read and checked.

mod characters;
pub mod headings;
pub mod manifest;
mod new;
pub mod row;
mod row_reader;
pub mod schedule;
mod templates;
mod toml_reader;

use crate::notice::{Place, Problem, nearest};
use crate::read::{self, LogRequest, LogRule};
use chrono::NaiveDate;
use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

pub use characters::undrawable_message;
pub use manifest::{Manifest, Page, Procedure, Revision, Signature, SiteCaution};
pub use new::new_job;
pub use row::{Day, Left, LogCell, LoopRow};
pub use schedule::{BadRow, schedule_row_csv};

/// A job folder, checked: what every run works on.
#[derive(Debug, Clone, PartialEq)]
pub struct Job {
    /// The folder.
    pub root: PathBuf,
    /// `job.toml`.
    pub manifest: Manifest,
    /// Name of the loop schedule's file.
    pub schedule_file: String,
    /// The loops in the order of the schedule; a row that cannot be used stands for itself alone.
    pub loops: Vec<Result<LoopRow, BadRow>>,
}

/// What identifies the document of one loop.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct DocumentIdentity {
    /// Document number.
    pub number: String,
    /// Revision.
    pub revision: String,
    /// Date of issue.
    pub date: NaiveDate,
    /// Reason for the revision.
    pub reason: Option<String>,
}

impl Job {
    /// Reads a job folder. The warnings beside the job stop nothing.
    ///
    /// # Errors
    /// Where `job.toml` or the loop schedule as a whole cannot be used; all findings of both together.
    pub fn read(folder: &Path) -> Result<(Job, Vec<Problem>), Vec<Problem>> {
        if !folder.is_dir() {
            return Err(vec![Problem::general(format!(
                "{} is not a folder",
                folder.display()
            ))]);
        }
        let manifest = read_manifest(folder);
        let schedule = schedule::read(folder);
        let (manifest, schedule) = match (manifest, schedule) {
            (Ok(manifest), Ok(schedule)) => (manifest, schedule),
            (manifest, schedule) => {
                let mut problems = manifest.err().unwrap_or_default();
                match schedule {
                    Ok(schedule) => {
                        problems.extend(schedule.warnings);
                        for bad in schedule.rows.into_iter().filter_map(Result::err) {
                            problems.extend(bad.problems);
                        }
                    }
                    Err(found) => problems.extend(found),
                }
                return Err(problems);
            }
        };
        let mut job = Job {
            root: folder.to_path_buf(),
            manifest,
            schedule_file: schedule.file,
            loops: schedule.rows,
        };
        let mut warnings = schedule.warnings;
        warnings.extend(new::left_as_laid_out(&job.manifest));
        let problems = job.check_manifest(&mut warnings);
        if !problems.is_empty() {
            return Err(problems);
        }
        job.refuse_numbers();
        Ok((job, warnings))
    }

    /// What only both files together show to be wrong.
    fn check_manifest(&self, warnings: &mut Vec<Problem>) -> Vec<Problem> {
        let mut problems = Vec::new();
        let tags: Vec<&str> = self.loops.iter().map(tag_of).collect();
        for caution in &self.manifest.cautions {
            for tag in &caution.loops {
                if tags.iter().any(|known| known.eq_ignore_ascii_case(tag)) {
                    continue;
                }
                // A caution that is printed nowhere would be missed by nobody until it was needed.
                let mut problem = Problem::error(
                    caution.place.clone(),
                    format!("the caution is for {tag}, which is not in the loop schedule"),
                );
                problem.hint = nearest(tag, tags.iter().copied())
                    .map(|near| format!("did you mean \"{near}\"?"));
                problems.push(problem);
            }
        }
        if let Some(template) = &self.manifest.template
            && !self.root.join(template).is_dir()
        {
            problems.push(Problem::error(
                Place::file(manifest::FILE),
                format!("the template folder \"{template}\" is not in the job folder"),
            ));
        }
        let files: Vec<String> = self
            .loops
            .iter()
            .flatten()
            .flat_map(|row| [&row.test, &row.trial])
            .flatten()
            .filter_map(|log| crate::read::file_references(&log.files).ok())
            .flatten()
            .map(|reference| reference.file)
            .collect();
        for LogRule {
            files: patterns, ..
        } in &self.manifest.logs
        {
            for pattern in patterns {
                let fits = |file: &String| crate::read::matches_pattern(pattern, file);
                if !files.iter().any(fits) {
                    warnings.push(Problem::warning(
                        Place::file(manifest::FILE),
                        format!("no log of the schedule fits the pattern \"{pattern}\" of a [[log]] table"),
                    ));
                }
            }
        }
        problems
    }

    /// Rows whose document number cannot be a file name or is that of another document.
    fn refuse_numbers(&mut self) {
        let mut owners: BTreeMap<String, Vec<String>> = BTreeMap::new();
        let dossier = self.manifest.dossier.to_lowercase();
        for row in self.loops.iter().flatten() {
            let number = self.document(row).number.to_lowercase();
            owners.entry(number).or_default().push(row.tag.clone());
        }
        let refusals: Vec<Option<BadRow>> = self
            .loops
            .iter()
            .map(|row| {
                let row = row.as_ref().ok()?;
                let number = self.document(row).number;
                if number.to_lowercase() == dossier {
                    return Some(row.refused(format!(
                        "the document number {number} is that of the dossier"
                    )));
                }
                let owners = &owners[&number.to_lowercase()];
                (owners.len() > 1).then(|| {
                    row.refused(format!(
                        "the document number {number} is that of several loops: {}",
                        owners.join(", ")
                    ))
                })
            })
            .collect();
        for (row, refusal) in self.loops.iter_mut().zip(refusals) {
            if let Some(bad) = refusal {
                *row = Err(bad);
            }
        }
    }

    /// Number, revision, date and reason of a loop's document: its own where the schedule gives
    /// them, else the job's.
    pub fn document(&self, row: &LoopRow) -> DocumentIdentity {
        let number = self
            .manifest
            .document
            .replace("{tag}", &row.tag)
            .replace("{n}", &format!("{:03}", row.number));
        DocumentIdentity {
            number,
            revision: row
                .revision
                .clone()
                .unwrap_or_else(|| self.manifest.revision.clone()),
            date: row.date.unwrap_or(self.manifest.date),
            reason: row.reason.clone().or_else(|| self.manifest.reason.clone()),
        }
    }

    /// The loop of that tag, ignoring case.
    pub fn find(&self, tag: &str) -> Option<&Result<LoopRow, BadRow>> {
        self.loops
            .iter()
            .find(|row| tag_of(row).eq_ignore_ascii_case(tag))
    }

    /// Places in `loops` so that every inner loop comes before the loop that cascades to it;
    /// otherwise in the order of the schedule. Rows that cannot be used are left out.
    pub fn inner_first(&self) -> Vec<usize> {
        let place_of = |tag: &str| {
            self.loops
                .iter()
                .position(|row| row.is_ok() && tag_of(row).eq_ignore_ascii_case(tag))
        };
        let mut order = Vec::new();
        let mut placed = BTreeSet::new();
        for start in 0..self.loops.len() {
            let mut chain = Vec::new();
            let mut next = Some(start);
            while let Some(index) = next {
                let Ok(row) = &self.loops[index] else { break };
                // The schedule was refused where a cascade comes back to itself.
                if placed.contains(&index) || chain.contains(&index) {
                    break;
                }
                chain.push(index);
                next = row.inner_loop.as_deref().and_then(place_of);
            }
            for index in chain.into_iter().rev() {
                placed.insert(index);
                order.push(index);
            }
        }
        order
    }

    /// What to read for the loop's step test; `None` where the schedule names no log.
    pub fn test_request(&self, row: &LoopRow) -> Option<LogRequest> {
        row.test.as_ref().map(|log| self.request(row, log))
    }

    /// What to read for the loop's closed-loop trial; `None` where the schedule names no log.
    pub fn trial_request(&self, row: &LoopRow) -> Option<LogRequest> {
        row.trial.as_ref().map(|log| self.request(row, log))
    }

    /// Whether the files that the cell names lie in the job folder.
    ///
    /// # Errors
    /// Those that do not, at the cell, with the file that may have been meant.
    pub fn find_files(&self, log: &LogCell) -> Result<(), Vec<Problem>> {
        let at_cell = |mut problem: Problem| {
            problem.message = match problem.place.replace(log.place.clone()) {
                Some(file) => format!("{file}: {}", problem.message),
                None => problem.message,
            };
            vec![problem]
        };
        let references = read::file_references(&log.files).map_err(at_cell)?;
        let missing: Vec<Problem> = references
            .iter()
            .filter(|reference| !self.root.join(&reference.file).exists())
            .map(|reference| self.missing_file(log, &reference.file))
            .collect();
        if missing.is_empty() {
            Ok(())
        } else {
            Err(missing)
        }
    }

    fn missing_file(&self, log: &LogCell, file: &str) -> Problem {
        let mut problem = Problem::error(
            log.place.clone(),
            format!("there is no file {file} in the job folder"),
        );
        let wanted = file.rsplit('/').next().unwrap_or(file);
        let there = files_below(&self.root);
        let names = there
            .iter()
            .map(|known| known.rsplit('/').next().unwrap_or(known));
        problem.hint = nearest(wanted, names)
            .and_then(|near| there.iter().find(|known| known.ends_with(near)))
            .map(|near| format!("did you mean {near}?"));
        problem
    }

    fn request(&self, row: &LoopRow, log: &LogCell) -> LogRequest {
        LogRequest {
            root: self.root.clone(),
            files: log.files.clone(),
            tag: Some(row.tag.clone()),
            columns: row.columns.clone(),
            from: log.from,
            to: log.to,
            pv_unit: Some(row.pv_unit.clone()),
            pv_span: Some(row.controller.pv_span),
            op_unit: Some(row.op_unit.clone()),
            op_span: Some(row.controller.op_span),
            pv_scale: row.pv_scale,
            pv_offset: row.pv_offset,
            rules: self.manifest.logs.clone(),
        }
    }
}

fn tag_of(row: &Result<LoopRow, BadRow>) -> &str {
    match row {
        Ok(row) => &row.tag,
        Err(bad) => &bad.tag,
    }
}

/// Files in the folder and in the folders of it, in order of name, with forward slashes: where logs lie.
fn files_below(root: &Path) -> Vec<String> {
    let names = |folder: PathBuf| -> Vec<(String, bool)> {
        std::fs::read_dir(folder)
            .into_iter()
            .flatten()
            .flatten()
            .filter_map(|entry| {
                let is_folder = entry.path().is_dir();
                entry
                    .file_name()
                    .into_string()
                    .ok()
                    .map(|name| (name, is_folder))
            })
            .collect()
    };
    let mut files = Vec::new();
    for (name, is_folder) in names(root.to_path_buf()) {
        if is_folder {
            let within = names(root.join(&name)).into_iter();
            files.extend(
                within
                    .filter(|(_, is_folder)| !is_folder)
                    .map(|(file, _)| format!("{name}/{file}")),
            );
        } else {
            files.push(name);
        }
    }
    files.sort();
    files
}

fn read_manifest(folder: &Path) -> Result<Manifest, Vec<Problem>> {
    let place = || Place::file(manifest::FILE);
    match std::fs::read(folder.join(manifest::FILE)) {
        Ok(bytes) => Manifest::read(&crate::read::text::decode(bytes).text),
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => Err(vec![
            Problem::error(place(), "there is no such file in the job folder")
                .hint("`asleft new` lays out a job folder"),
        ]),
        Err(error) => Err(vec![Problem::error(
            place(),
            format!("the file cannot be read: {}", error.kind()),
        )]),
    }
}

#[cfg(test)]
mod tests;

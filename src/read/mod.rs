//! Reading: from exported files to the samples of one loop.
//!
//! A file becomes a table of located cells (`table`), the table gets its headings and rows told
//! apart (`layout`), its columns their roles (`roles`), its times one clock (`clock`, `order`), and
//! its cells become samples (`extract`). Whatever cannot be read for certain is an error at its
//! place; whatever had to be decided is reported with its reason.

mod blanks;
mod cells;
pub mod clock;
mod collect;
mod columns;
mod compound;
mod dates;
mod delimited;
mod extract;
mod guard;
pub mod headings;
pub mod inspect;
mod iso;
mod join;
pub mod layout;
pub mod numbers;
pub mod order;
mod parts;
mod proposal;
pub mod roles;
pub mod rows;
pub mod samples;
mod series;
mod sheet;
pub mod source;
pub mod stamp;
pub mod table;
mod tags;
pub mod text;
mod timed;
mod times;
mod tracks;
pub mod units;
pub mod values;
mod weight;
mod workbook;

use crate::notice::{Place, Problem};
use crate::quantity::Span;
use crate::trace::{Clock, Gap, Moment, Samples};
use chrono::NaiveDate;
use chrono_tz::Tz;
use std::collections::BTreeMap;
use std::path::PathBuf;

pub use guard::is_guarded;
pub use numbers::DecimalSign;
pub use proposal::Proposal;
pub use roles::RoleFound;
pub use samples::{read_samples_csv, samples_csv};
pub use source::FileCache;
pub use stamp::DateOrder;
pub use units::TimeUnit;

/// Columns that the schedule names: heading text, or `#3` for the third column.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct ColumnNames {
    /// Time; `Date + Time` for two columns.
    pub time: Option<String>,
    /// PV (in a long table: its text in the tag column).
    pub pv: Option<String>,
    /// OP.
    pub op: Option<String>,
    /// SP.
    pub sp: Option<String>,
    /// Mode.
    pub mode: Option<String>,
    /// Quality.
    pub quality: Option<String>,
    /// Tag, in long tables.
    pub tag: Option<String>,
}

impl ColumnNames {
    /// Every name that is given.
    pub fn all(&self) -> impl Iterator<Item = &str> {
        [
            &self.time,
            &self.pv,
            &self.op,
            &self.sp,
            &self.mode,
            &self.quality,
            &self.tag,
        ]
        .into_iter()
        .flatten()
        .map(String::as_str)
    }
}

/// One `[[log]]` table of `job.toml`: what exports do not say themselves.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct LogRule {
    /// Patterns of files it is for; every file where empty.
    pub files: Vec<String>,
    /// Decimal sign.
    pub decimal: Option<DecimalSign>,
    /// Order of day and month.
    pub dates: Option<DateOrder>,
    /// Zone of local time.
    pub zone: Option<Tz>,
    /// Date of the first row, for logs with time of day only.
    pub date: Option<NaiveDate>,
    /// Seconds from row to row, for logs without a clock.
    pub interval_s: Option<f64>,
    /// Unit of a time column that counts plain numbers.
    pub time_unit: Option<TimeUnit>,
    /// Further texts that mean a bad sample.
    pub bad_values: Vec<String>,
    /// Further texts of the mode column that mean manual.
    pub manual_values: Vec<String>,
}

impl LogRule {
    /// Whether the rule is for this file (forward slashes, below the job folder).
    pub fn matches(&self, file: &str) -> bool {
        self.files.is_empty()
            || self
                .files
                .iter()
                .any(|pattern| matches_pattern(pattern, file))
    }
}

/// Whether a file fits a pattern: `*` stands for any part of a name, `**` for any folders, `?` for
/// one letter. Case does not count: file systems differ in that.
pub fn matches_pattern(pattern: &str, file: &str) -> bool {
    fn fits(pattern: &[char], file: &[char]) -> bool {
        match pattern {
            [] => file.is_empty(),
            ['*', '*', '/', rest @ ..] => {
                fits(rest, file)
                    || file
                        .iter()
                        .enumerate()
                        .any(|(k, letter)| *letter == '/' && fits(rest, &file[k + 1..]))
            }
            ['*', '*', rest @ ..] => (0..=file.len()).any(|k| fits(rest, &file[k..])),
            ['*', rest @ ..] => (0..=file.len())
                .take_while(|&k| k == 0 || file[k - 1] != '/')
                .any(|k| fits(rest, &file[k..])),
            ['?', rest @ ..] => {
                file.first().is_some_and(|letter| *letter != '/') && fits(rest, &file[1..])
            }
            [letter, rest @ ..] => file.first() == Some(letter) && fits(rest, &file[1..]),
        }
    }
    let even = |text: &str| {
        let text = text.replace('\\', "/").to_lowercase();
        let text = text.strip_prefix("./").unwrap_or(&text).to_owned();
        text.chars().collect::<Vec<char>>()
    };
    fits(&even(pattern), &even(file))
}

/// What is wanted of which log.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct LogRequest {
    /// Folder that the files are named from.
    pub root: PathBuf,
    /// `file.xlsx`, `file.xlsx#Sheet`, several with `;`.
    pub files: String,
    /// Tag of the loop; `None`: the only loop of the log.
    pub tag: Option<String>,
    /// Columns that the schedule names.
    pub columns: ColumnNames,
    /// First moment wanted.
    pub from: Option<Moment>,
    /// Last moment wanted.
    pub to: Option<Moment>,
    /// Unit of the PV in the schedule.
    pub pv_unit: Option<String>,
    /// Range of the PV; samples far outside are bad. `None`: not checked.
    pub pv_span: Option<Span>,
    /// Unit of the OP in the schedule.
    pub op_unit: Option<String>,
    /// Range of the OP. `None`: not checked.
    pub op_span: Option<Span>,
    /// Schedule unit = log unit × scale + offset.
    pub pv_scale: Option<f64>,
    /// See `pv_scale`.
    pub pv_offset: Option<f64>,
    /// The `[[log]]` tables in order; the first that matches a file is used for it.
    pub rules: Vec<LogRule>,
}

/// One file that was read, for the record.
#[derive(Debug, Clone, PartialEq)]
pub struct Source {
    /// File as named in the job, with forward slashes.
    pub file: String,
    /// Sheet of a workbook.
    pub sheet: Option<String>,
    /// SHA-256 of the file, hexadecimal.
    pub sha256: String,
    /// Rows of this loop in the file.
    pub rows: usize,
    /// Good samples of the PV that are used.
    pub samples: usize,
    /// First moment used.
    pub from: Moment,
    /// Last moment used.
    pub to: Moment,
    /// Bad samples by cause, within what is used.
    pub bad: BTreeMap<String, usize>,
    /// Rows given up for a later one of the same moment.
    pub duplicates: usize,
    /// Rows that stood out of order by up to a minute and were sorted.
    pub sorted_rows: usize,
    /// The summer-time fold that was unfolded, in words.
    pub fold: Option<String>,
    /// Usual time between samples, s.
    pub interval_s: f64,
    /// Nine in ten intervals differ from the usual one by no more than this, s.
    pub jitter_s: f64,
    /// Whether samples come when the value changed rather than at an interval.
    pub compressed: bool,
    /// Stretches without a good sample, s on the samples' clock.
    pub gaps: Vec<Gap>,
    /// How the clock is written.
    pub clock_format: String,
    /// Decimal sign of its numbers.
    pub decimal: DecimalSign,
    /// Which column got which role, and why.
    pub roles: Vec<RoleFound>,
}

/// The samples of one loop, and where they come from.
#[derive(Debug, Clone, PartialEq)]
pub struct LogRead {
    /// Where second 0 of the samples lies: their first moment (logs of elapsed time: their own 0).
    pub clock: Clock,
    /// The samples, engineering units.
    pub samples: Samples,
    /// The files, in order of time.
    pub sources: Vec<Source>,
    /// What should be told and stops nothing.
    pub warnings: Vec<Problem>,
}

impl LogRead {
    /// Bad samples of all files.
    pub fn bad_samples(&self) -> usize {
        self.sources
            .iter()
            .flat_map(|source| source.bad.values())
            .sum()
    }

    /// Whether any file was reported by exception.
    pub fn is_compressed(&self) -> bool {
        self.sources.iter().any(|source| source.compressed)
    }
}

/// A file and, where given, its sheet.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct FileReference {
    /// File with forward slashes.
    pub file: String,
    /// Sheet.
    pub sheet: Option<String>,
}

/// Splits `file.xlsx#Sheet`; a `#` in the name of a text file is part of the name.
pub fn split_sheet(text: &str) -> FileReference {
    let (file, sheet) = match text.rsplit_once('#') {
        Some((file, sheet)) if !sheet.trim().is_empty() && has_workbook_ending(file) => {
            (file.trim(), Some(sheet.trim().to_owned()))
        }
        _ => (text, None),
    };
    let file = file.replace('\\', "/");
    FileReference {
        file: file.strip_prefix("./").unwrap_or(&file).to_owned(),
        sheet,
    }
}

/// Splits the text of a `test log` cell.
///
/// # Errors
/// Where it names no file, or one outside the job folder.
pub fn file_references(text: &str) -> Result<Vec<FileReference>, Problem> {
    let mut references = Vec::new();
    for part in text
        .split(';')
        .map(str::trim)
        .filter(|part| !part.is_empty())
    {
        let FileReference { file, sheet } = split_sheet(part);
        let is_outside =
            file.starts_with('/') || file.contains(':') || file.split('/').any(|step| step == "..");
        if is_outside {
            return Err(Problem::error(
                Place::file(&file),
                "a log is named by its place below the job folder",
            )
            .hint("copy the file into the job folder, for example to logs/"));
        }
        references.push(FileReference { file, sheet });
    }
    if references.is_empty() {
        return Err(Problem::general("no log file is named"));
    }
    Ok(references)
}

fn has_workbook_ending(file: &str) -> bool {
    let lower = file.trim().to_lowercase();
    source::WORKBOOK_ENDINGS
        .iter()
        .any(|ending| lower.ends_with(&format!(".{ending}")))
}

/// Reads the samples of one loop from its files.
///
/// # Errors
/// Where a file, column, clock or cell cannot be read for certain; all problems of a file together.
pub fn read_log(request: &LogRequest, cache: &FileCache) -> Result<LogRead, Vec<Problem>> {
    let references = file_references(&request.files).map_err(|problem| vec![problem])?;
    extract::read(request, &references, cache)
}

#[cfg(test)]
mod tests;

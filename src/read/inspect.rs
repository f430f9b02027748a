//! What a log holds, for a person who has not yet written its row of the schedule.

use super::extract;
use super::headings::{Owner, Role, meaning};
use super::layout::{self, Layout};
use super::numbers::{DecimalSign, Shape, number, shape};
use super::proposal::{self, Proposal};
use super::roles::{self, RoleFound};
use super::source::FileCache;
use super::stamp::stamp;
use super::supposed::{Supposition, suppositions};
use super::table::{Cell, Table};
use super::tags::{TagFound, tags_in};
use super::{ColumnNames, FileReference, LogRead, LogRequest, LogRule};
use crate::notice::{Place, Problem, column_letters};
use crate::trace::Moment;
use serde::Serialize;
use std::collections::BTreeMap;
use std::path::Path;

/// How many cells are looked at to say what the columns hold: fewer rows of a table that is very wide.
const CELLS_LOOKED_AT: usize = 2_000_000;
/// How many tags are looked at: every heading is looked at for each of them.
const LOOPS_READ: usize = 100;
/// How many columns are tried as the one that is missing.
const COLUMNS_SUPPOSED: usize = 6;
/// What a column of measured values holds.
const NUMBERS: &str = "numbers";
/// What a column without any cell holds.
const NOTHING: &str = "nothing";

/// What a file holds.
#[derive(Debug, Serialize)]
pub struct Inspection {
    /// File as named.
    pub file: String,
    /// SHA-256 of the file, hexadecimal.
    pub sha256: String,
    /// Its sheets, or the one table of a text file.
    pub tables: Vec<TableInspection>,
}

/// What a sheet or text file holds.
#[derive(Debug, Serialize)]
pub struct TableInspection {
    /// Sheet; `None` for text files.
    pub sheet: Option<String>,
    /// Sign between the columns of a text file.
    pub delimiter: Option<char>,
    /// Encoding of a text file.
    pub encoding: Option<&'static str>,
    /// Rows that hold anything.
    pub rows: usize,
    /// Row or line of the headings, 1 for the first.
    pub heading_row: Option<usize>,
    /// Every column.
    pub columns: Vec<ColumnFound>,
    /// The loops that can be read.
    pub loops: Vec<LoopInspection>,
    /// Tags beyond the first hundred, which were not looked at: asked for by name each is.
    pub further: Vec<String>,
    /// Tags that are no loop: those that have a PV alone or an OP alone.
    pub others: Vec<OtherTag>,
    /// Where no loop can be read: the roles that could be given all the same, and why.
    pub roles: Vec<RoleFound>,
    /// What could not be decided, with what to do about it.
    pub undecided: Vec<Problem>,
}

/// A column of a table.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct ColumnFound {
    /// Position, 0 for the first column of the sheet.
    #[serde(skip)]
    pub index: usize,
    /// As a person finds it: `C` in a sheet, `#3` in a text file.
    pub column: String,
    /// Its heading; empty where it has none.
    pub heading: String,
    /// What its cells are, in words.
    pub holds: String,
}

/// A tag that is no loop by itself.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct OtherTag {
    /// The tag.
    pub tag: String,
    /// What it lacks.
    pub lacks: &'static str,
}

/// A stretch without a good sample.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct GapFound {
    /// Last good sample before it.
    pub from: Moment,
    /// First good sample after it.
    pub to: Moment,
}

/// A deliberate move of the OP.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct OpMove {
    /// When.
    pub at: Moment,
    /// OP before, in its own unit.
    pub from: f64,
    /// OP after, in its own unit; of a pulse its furthest level.
    pub to: f64,
    /// Whether the OP came back at once.
    pub pulse: bool,
}

/// What a log holds of one loop.
#[derive(Debug, Serialize)]
pub struct LoopInspection {
    /// Tag; `None` in a log whose headings bear none.
    pub tag: Option<String>,
    /// Which column got which role, and why.
    pub roles: Vec<RoleFound>,
    /// How the clock is written, and how that is known.
    pub clock: String,
    /// Decimal sign of the numbers that are text.
    pub decimal: char,
    /// What was supposed where the file does not tell: keys of a `[[log]]` table of `job.toml`, or a cell
    /// of the schedule. Any one of them makes it readable; what follows holds for the first. Empty where
    /// nothing had to be supposed.
    pub supposed: Vec<String>,
    /// What is not decided until one of these stands there.
    pub undecided: Vec<Problem>,
    /// First moment.
    pub from: Moment,
    /// Last moment.
    pub to: Moment,
    /// Rows of the loop.
    pub rows: usize,
    /// Good samples of the PV.
    pub samples: usize,
    /// Usual time between samples, s.
    pub interval_s: f64,
    /// Nine in ten intervals differ from it by no more than this, s.
    pub jitter_s: f64,
    /// Whether samples come when the value changed.
    pub compressed: bool,
    /// Bad samples by cause.
    pub bad_samples: BTreeMap<String, usize>,
    /// Rows given up for a later one of the same moment.
    pub duplicates: usize,
    /// Rows sorted.
    pub sorted_rows: usize,
    /// The summer-time fold that was unfolded.
    pub fold: Option<String>,
    /// Stretches without a good sample.
    pub gaps: Vec<GapFound>,
    /// Lowest and highest good PV.
    pub pv_range: [f64; 2],
    /// Lowest and highest OP; `None` where the column holds no value.
    pub op_range: Option<[f64; 2]>,
    /// Lowest and highest SP; `None` where it was not logged.
    pub sp_range: Option<[f64; 2]>,
    /// Words of the mode column with how often each stands there.
    pub modes: BTreeMap<String, usize>,
    /// Moves of the OP; `None` until looked for, empty where there are none.
    pub op_moves: Option<Vec<OpMove>>,
    /// What is remarkable about them, in words.
    pub op_remark: Option<String>,
    /// Cells of the schedule that would read it; `None` where the name of the file stands against any.
    pub schedule: Option<Proposal>,
    /// What should be told.
    pub warnings: Vec<Problem>,
    /// The samples, for finding the OP's moves.
    #[serde(skip)]
    pub log: LogRead,
}

/// What is to be looked at.
#[derive(Debug, Clone, Default)]
pub struct InspectRequest<'a> {
    /// File as it is to be printed, below `root`.
    pub file: &'a str,
    /// The file as a job would name it.
    pub file_in_job: &'a str,
    /// Sheet; all where `None`.
    pub sheet: Option<&'a str>,
    /// Tag; every loop where `None`.
    pub tag: Option<&'a str>,
    /// The `[[log]]` tables of the job.
    pub rules: &'a [LogRule],
}

/// Looks at a file below `root`.
///
/// # Errors
/// Where the file cannot be read at all, or lacks the sheet asked for.
pub fn inspect(
    root: &Path,
    request: &InspectRequest<'_>,
    cache: &FileCache,
) -> Result<Inspection, Problem> {
    let file = cache.open(root, request.file)?;
    let tables = match request.sheet {
        Some(sheet) => {
            let table = file.sheet(sheet).ok_or_else(|| {
                Problem::error(
                    Place::file(request.file),
                    format!("there is no sheet \"{sheet}\""),
                )
            })?;
            vec![table?]
        }
        None => file.tables()?,
    };
    let look = Look {
        root,
        request,
        cache,
    };
    Ok(Inspection {
        file: file.name.clone(),
        sha256: file.sha256.clone(),
        tables: tables
            .into_iter()
            .map(|table| look.at_table(table))
            .collect(),
    })
}

/// One look at one file.
struct Look<'a> {
    root: &'a Path,
    request: &'a InspectRequest<'a>,
    cache: &'a FileCache,
}

impl Look<'_> {
    fn at_table(&self, table: &Table) -> TableInspection {
        let rule = extract::rule_for(self.request.rules, self.request.file)
            .cloned()
            .unwrap_or_default();
        let names = ColumnNames::default();
        let counted = rule.interval_s.is_some();
        let layout = layout::find(table, &names, self.request.tag, counted, false);
        let mut found = TableInspection {
            sheet: table.sheet.clone(),
            delimiter: table.delimiter,
            encoding: table.encoding,
            rows: table.len(),
            heading_row: None,
            columns: Vec::new(),
            loops: Vec::new(),
            further: Vec::new(),
            others: Vec::new(),
            roles: Vec::new(),
            undecided: Vec::new(),
        };
        let Some(layout) = layout else {
            found.undecided.push(if table.is_empty() {
                Problem::error(table.place(), "it holds no cells")
            } else {
                Problem::error(
                    table.place(),
                    "no rows of times and numbers were found: not a log",
                )
                .hint("a log has one row per sample, with its time and values")
            });
            return found;
        };
        found.heading_row = layout.heading_row.map(|row| table.row(row).number);
        found.columns = columns_of(table, &layout);
        let tags = match self.request.tag {
            Some(_) => Vec::new(),
            None => tags_in(table, &layout),
        };
        self.add_loops(&mut found, table, &rule, &tags);
        if found.loops.is_empty() {
            let tag = self
                .request
                .tag
                .or(tags.first().map(|found| found.tag.as_str()));
            found.roles = recognised(table, &layout, &rule, tag);
        }
        found
    }

    /// Reads every loop that the tags may stand for; a table without tags may hold one.
    fn add_loops(
        &self,
        found: &mut TableInspection,
        table: &Table,
        rule: &LogRule,
        tags: &[TagFound],
    ) {
        let mut incomplete = Vec::new();
        let (tags, further) = tags.split_at(tags.len().min(LOOPS_READ));
        found.further = further.iter().map(|tag| tag.tag.clone()).collect();
        for tag in tags {
            match self.at_loop(table, rule, Some(&tag.tag), true) {
                Ok(one) => found.loops.push(one),
                Err(_) if !(tag.has_pv && tag.has_op) => incomplete.push(tag),
                Err(problems) => found.undecided.extend(problems),
            }
        }
        found.others = incomplete
            .iter()
            .map(|tag| OtherTag {
                tag: tag.tag.clone(),
                lacks: if tag.has_pv { "OP" } else { "PV" },
            })
            .collect();
        if found.loops.is_empty() && found.undecided.is_empty() {
            // No tag has both: the file may still hold one loop whose headings bear no common tag.
            let tag = match (self.request.tag, tags) {
                (Some(tag), _) => Some(tag),
                (None, [only]) => Some(only.tag.as_str()),
                _ => None,
            };
            match self.at_loop(table, rule, tag, false) {
                Ok(one) => found.loops.push(one),
                Err(problems) => found.undecided.extend(problems),
            }
        }
    }

    /// One loop, read as it is or, where it reads in several ways, in the first of them. `own` leaves
    /// columns that do not bear the tag out of account.
    fn at_loop(
        &self,
        table: &Table,
        rule: &LogRule,
        tag: Option<&str>,
        own: bool,
    ) -> Result<LoopInspection, Vec<Problem>> {
        let as_it_is = Supposition {
            rules: self.request.rules.to_vec(),
            ..Supposition::default()
        };
        let problems = match self.read(table, tag, &as_it_is) {
            Ok(log) => return Ok(self.describe(tag, table, log, &as_it_is)),
            Err(problems) => problems,
        };
        // As little as makes it readable: the order of day and month alone, the decimal sign alone, both;
        // then a column.
        let columns = self.columns_supposed(table, rule, tag, own);
        for ways in suppositions(rule).into_iter().chain([columns]) {
            let mut readable = ways
                .into_iter()
                .filter_map(|way| Some((self.read(table, tag, &way).ok()?, way)));
            if let Some((log, first)) = readable.next() {
                let mut one = self.describe(tag, table, log, &first);
                one.supposed = vec![first.line];
                one.supposed.extend(readable.map(|(_, way)| way.line));
                one.undecided = problems;
                return Ok(one);
            }
        }
        Err(problems)
    }

    /// Columns of numbers that may be the PV or the OP, where the one is missing and the other is not.
    fn columns_supposed(
        &self,
        table: &Table,
        rule: &LogRule,
        tag: Option<&str>,
        own: bool,
    ) -> Vec<Supposition> {
        let names = ColumnNames::default();
        let Some(layout) = layout::find(table, &names, tag, rule.interval_s.is_some(), false)
        else {
            return Vec::new();
        };
        let found = recognised(table, &layout, rule, tag);
        let has = |role: Role| found.iter().any(|found| found.role == role);
        let role = match (has(Role::Pv), has(Role::Op)) {
            (false, true) => Role::Pv,
            (true, false) => Role::Op,
            _ => return Vec::new(),
        };
        let is_open = |column: usize| {
            !found.iter().any(|found| found.column == column)
                && what_it_holds(table, &layout, column).starts_with(NUMBERS)
        };
        layout
            .headings
            .iter()
            .filter(|heading| !own || meaning(&heading.text, tag).owner == Owner::This)
            .filter(|heading| is_open(heading.column))
            .take(COLUMNS_SUPPOSED)
            .map(|heading| {
                let is_alone = |text: &str| {
                    layout
                        .headings
                        .iter()
                        .filter(|other| other.text == text)
                        .count()
                        == 1
                };
                let name = if is_alone(&heading.text) {
                    proposal::by_heading(&heading.text, heading.column)
                } else {
                    proposal::by_number(&heading.text, heading.column)
                };
                let line = format!("{} = {name}", role.schedule_heading());
                let mut columns = ColumnNames::default();
                match role {
                    Role::Pv => columns.pv = Some(name),
                    _ => columns.op = Some(name),
                }
                Supposition {
                    line,
                    rules: self.request.rules.to_vec(),
                    columns,
                }
            })
            .collect()
    }

    fn read(
        &self,
        table: &Table,
        tag: Option<&str>,
        way: &Supposition,
    ) -> Result<LogRead, Vec<Problem>> {
        let request = LogRequest {
            root: self.root.to_path_buf(),
            tag: tag.map(str::to_owned),
            columns: way.columns.clone(),
            rules: way.rules.clone(),
            ..LogRequest::default()
        };
        let reference = FileReference {
            file: self.request.file.to_owned(),
            sheet: table.sheet.clone(),
        };
        extract::read(&request, &[reference], self.cache)
    }

    fn describe(
        &self,
        tag: Option<&str>,
        table: &Table,
        log: LogRead,
        way: &Supposition,
    ) -> LoopInspection {
        let samples = &log.samples;
        let good_pv = (0..samples.t_s.len())
            .filter(|&k| samples.good[k])
            .map(|k| samples.pv[k]);
        let pv_range = range(good_pv).unwrap_or([f64::NAN; 2]);
        let mut modes = BTreeMap::new();
        for mode in samples.mode.iter().filter(|mode| !mode.is_empty()) {
            *modes.entry(mode.clone()).or_insert(0) += 1;
        }
        let mut source = log.sources[0].clone();
        if !way.line.is_empty() {
            // Nobody gave it: `supposed` says what was.
            source.clock_format = source
                .clock_format
                .replace(" as given in job.toml", ", supposed");
            for found in &mut source.roles {
                if found.why == roles::NAMED {
                    found.why = "supposed".to_owned();
                }
            }
        }
        let schedule = proposal::propose(
            &proposal::Seen {
                root: self.root,
                file: self.request.file,
                file_in_job: self.request.file_in_job,
                tag,
                table,
                rules: &way.rules,
                columns: &way.columns,
                log: &log,
            },
            self.cache,
        );
        LoopInspection {
            tag: tag.map(str::to_owned),
            roles: source.roles,
            clock: source.clock_format,
            decimal: source.decimal.sign(),
            supposed: Vec::new(),
            undecided: Vec::new(),
            from: source.from,
            to: source.to,
            rows: source.rows,
            samples: source.samples,
            interval_s: source.interval_s,
            jitter_s: source.jitter_s,
            compressed: source.compressed,
            bad_samples: source.bad,
            duplicates: source.duplicates,
            sorted_rows: source.sorted_rows,
            fold: source.fold,
            gaps: source
                .gaps
                .iter()
                .map(|gap| GapFound {
                    from: log.clock.at(gap.from_s),
                    to: log.clock.at(gap.to_s),
                })
                .collect(),
            pv_range,
            op_range: range(samples.op.iter().copied()),
            sp_range: range(samples.sp.iter().copied()),
            modes,
            op_moves: None,
            op_remark: None,
            schedule,
            warnings: log.warnings.clone(),
            log,
        }
    }
}

/// Lowest and highest of the finite values.
fn range(values: impl Iterator<Item = f64>) -> Option<[f64; 2]> {
    values
        .filter(|value| value.is_finite())
        .fold(None, |range, value| match range {
            None => Some([value, value]),
            Some([low, high]) => Some([low.min(value), high.max(value)]),
        })
}

/// Every column that has a heading or holds anything.
fn columns_of(table: &Table, layout: &Layout) -> Vec<ColumnFound> {
    layout
        .headings
        .iter()
        .map(|heading| ColumnFound {
            index: heading.column,
            column: if table.sheet.is_some() {
                column_letters(heading.column)
            } else {
                format!("#{}", heading.column + 1)
            },
            heading: heading.text.clone(),
            holds: what_it_holds(table, layout, heading.column),
        })
        .filter(|column| !column.heading.is_empty() || column.holds != NOTHING)
        .collect()
}

fn what_it_holds(table: &Table, layout: &Layout, column: usize) -> String {
    let (mut numbers, mut moments) = (0, 0);
    let mut range: Option<[f64; 2]> = None;
    let mut word = None;
    let rows = (CELLS_LOOKED_AT / table.width().max(1)).max(20);
    let end = table.len().min(layout.data_start + rows);
    for index in layout.data_start..end {
        let value = match table.row(index).cell(column) {
            Cell::Empty => continue,
            Cell::Number(value) => Some(value),
            Cell::Date(_) | Cell::Duration(_) => None,
            Cell::Text(text) if shape(text) != Shape::NotNumber => {
                number(text, DecimalSign::Point).or_else(|| number(text, DecimalSign::Comma))
            }
            Cell::Text(text) if stamp(text).is_some() => None,
            cell => {
                word.get_or_insert_with(|| cell.text());
                continue;
            }
        };
        match value {
            Some(value) => {
                numbers += 1;
                let [low, high] = range.unwrap_or([value, value]);
                range = Some([low.min(value), high.max(value)]);
            }
            None => moments += 1,
        }
    }
    match (numbers, moments, range, word) {
        (0, 0, _, None) => NOTHING.to_owned(),
        (0, 0, _, Some(word)) => {
            let word: String = word.chars().take(20).collect();
            format!("text such as \"{word}\"")
        }
        (_, 0, Some([low, high]), _) => format!("{NUMBERS} {low} to {high}"),
        (0, _, _, _) => "dates or times".to_owned(),
        _ => "numbers and times".to_owned(),
    }
}

/// The columns that a table would be read with, nothing named.
fn recognised(table: &Table, layout: &Layout, rule: &LogRule, tag: Option<&str>) -> Vec<RoleFound> {
    let wanted = roles::Wanted {
        names: &ColumnNames::default(),
        tag,
        interval_s: rule.interval_s,
        partial: false,
    };
    roles::recognise(table, layout, wanted).found
}

//! What a log holds, for a person who has not yet written its row of the schedule.

use super::extract;
use super::headings::{Owner, Role, meaning};
use super::layout::{self, Layout};
use super::source::FileCache;
use super::table::Table;
use super::{ColumnNames, FileReference, LogRead, LogRequest, LogRule, RoleFound};
use crate::notice::{Problem, column_letters};
use crate::trace::Moment;
use serde::Serialize;
use std::collections::BTreeMap;
use std::fmt::Write;
use std::path::Path;

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
    /// Headings in order; empty where a column has none.
    pub headings: Vec<String>,
    /// The loops that can be read.
    pub loops: Vec<LoopInspection>,
    /// What could not be decided, in words.
    pub undecided: Vec<String>,
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
    /// OP after, in its own unit.
    pub to: f64,
}

/// What a log holds of one loop.
#[derive(Debug, Serialize)]
pub struct LoopInspection {
    /// Tag; `None` in a log whose headings bear none.
    pub tag: Option<String>,
    /// Which column got which role, and why.
    pub roles: Vec<RoleFound>,
    /// How the clock is written.
    pub clock: String,
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
    /// Lowest and highest OP.
    pub op_range: [f64; 2],
    /// Moves of the OP; `None` until looked for, empty where there are none.
    pub op_moves: Option<Vec<OpMove>>,
    /// What is remarkable about them, in words.
    pub op_remark: Option<String>,
    /// Cells of the schedule that would read it, by heading.
    pub schedule: BTreeMap<String, String>,
    /// What should be told.
    pub warnings: Vec<String>,
    /// The samples, for finding the OP's moves.
    #[serde(skip)]
    pub log: LogRead,
}

/// What is to be looked at.
#[derive(Debug, Clone, Default)]
pub struct InspectRequest<'a> {
    /// File as it is to be printed, below `root`.
    pub file: &'a str,
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
    let rule = extract::rule_for(request.rules, request.file)
        .cloned()
        .unwrap_or_default();
    let tables = match request.sheet {
        Some(sheet) => {
            let table = file.sheet(sheet).ok_or_else(|| {
                Problem::error(
                    crate::notice::Place::file(request.file),
                    format!("there is no sheet \"{sheet}\""),
                )
            })?;
            vec![table?]
        }
        None => file.tables()?,
    };
    let tables = tables
        .into_iter()
        .map(|table| inspect_table(root, request, &rule, table, cache))
        .collect();
    Ok(Inspection {
        file: file.name.clone(),
        sha256: file.sha256.clone(),
        tables,
    })
}

fn inspect_table(
    root: &Path,
    request: &InspectRequest<'_>,
    rule: &LogRule,
    table: &Table,
    cache: &FileCache,
) -> TableInspection {
    let names = ColumnNames::default();
    let layout = layout::find(table, &names, request.tag, rule.interval_s.is_some());
    let mut found = TableInspection {
        sheet: table.sheet.clone(),
        delimiter: table.delimiter,
        encoding: table.encoding,
        rows: table.len(),
        heading_row: None,
        headings: Vec::new(),
        loops: Vec::new(),
        undecided: Vec::new(),
    };
    let Some(layout) = layout else {
        found.undecided.push(if table.is_empty() {
            "it holds no cells".to_owned()
        } else {
            "no rows of times and numbers were found: not a log".to_owned()
        });
        return found;
    };
    found.heading_row = layout.heading_row.map(|row| table.row(row).number);
    found.headings = layout
        .headings
        .iter()
        .map(|heading| heading.text.clone())
        .collect();
    let tags: Vec<Option<String>> = match request.tag {
        Some(tag) => vec![Some(tag.to_owned())],
        None => tags_in(table, &layout),
    };
    for tag in tags {
        let log_request = LogRequest {
            root: root.to_path_buf(),
            tag: tag.clone(),
            rules: request.rules.to_vec(),
            ..LogRequest::default()
        };
        let reference = FileReference {
            file: request.file.to_owned(),
            sheet: table.sheet.clone(),
        };
        match extract::read(&log_request, &[reference], cache) {
            Ok(log) => found.loops.push(describe(tag, log, table)),
            Err(problems) => {
                for problem in problems {
                    let about = tag
                        .as_ref()
                        .map_or_else(String::new, |tag| format!("{tag}: "));
                    found.undecided.push(format!("{about}{problem}"));
                }
            }
        }
    }
    found
}

/// Tags in headings or, in a long table, in the tag column; `[None]` where there are none.
fn tags_in(table: &Table, layout: &Layout) -> Vec<Option<String>> {
    let mut tags: Vec<Option<String>> = Vec::new();
    let mut take = |text: &str| {
        let meaning = meaning(text, None);
        if let (Owner::Other(tag), Some((Role::Pv | Role::Op, _))) = (meaning.owner, meaning.role) {
            let tag = Some(tag);
            if !tags.contains(&tag) {
                tags.push(tag);
            }
        }
    };
    let roles: Vec<(usize, Role)> = layout
        .headings
        .iter()
        .filter_map(|heading| {
            let meaning = meaning(&heading.text, None);
            let (role, _) = meaning.role.filter(|_| meaning.owner == Owner::Nobody)?;
            Some((heading.column, role))
        })
        .collect();
    if let Some((column, _)) = roles.iter().find(|(_, role)| *role == Role::Tag) {
        let mut seen = std::collections::BTreeSet::new();
        for index in layout.data_start..table.len() {
            let text = table.row(index).cell(*column).text();
            if seen.insert(text.clone()) {
                take(&text);
            }
        }
    }
    for heading in &layout.headings {
        take(&heading.text);
    }
    if tags.is_empty() {
        tags.push(None);
    }
    tags
}

fn describe(tag: Option<String>, log: LogRead, table: &Table) -> LoopInspection {
    let range = |values: &mut dyn Iterator<Item = f64>| {
        values.fold([f64::INFINITY, f64::NEG_INFINITY], |[low, high], value| {
            [low.min(value), high.max(value)]
        })
    };
    let samples = &log.samples;
    let pv_range = range(
        &mut (0..samples.t_s.len())
            .filter(|&k| samples.good[k] && samples.pv[k].is_finite())
            .map(|k| samples.pv[k]),
    );
    let op_range = range(&mut samples.op.iter().copied().filter(|op| op.is_finite()));
    let source = log.sources[0].clone();
    let mut schedule = BTreeMap::new();
    if let Some(tag) = &tag {
        schedule.insert("tag".to_owned(), tag.clone());
    }
    schedule.insert(
        "test log".to_owned(),
        match &table.sheet {
            Some(sheet) => format!("{}#{sheet}", table.file),
            None => table.file.clone(),
        },
    );
    for found in &source.roles {
        // In a long table the value column is found by itself.
        if found.role == Role::Value {
            continue;
        }
        let name = if found.heading.is_empty() {
            format!("#{}", found.column + 1)
        } else {
            found.heading.clone()
        };
        schedule
            .entry(found.role.schedule_heading().to_owned())
            .and_modify(|first: &mut String| {
                first.push_str(" + ");
                first.push_str(&name);
            })
            .or_insert(name);
    }
    LoopInspection {
        tag,
        roles: source.roles,
        clock: source.clock_format,
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
        op_range,
        op_moves: None,
        op_remark: None,
        schedule,
        warnings: log.warnings.iter().map(ToString::to_string).collect(),
        log,
    }
}

/// A figure without more decimals than it needs, at most four.
fn figure(value: f64) -> String {
    let text = format!("{value:.4}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

impl Inspection {
    /// The inspection as text for a terminal.
    pub fn text(&self) -> String {
        let mut text = format!("{}\n", self.file);
        for table in &self.tables {
            let what = match (&table.sheet, table.delimiter) {
                (Some(sheet), _) => format!("sheet \"{sheet}\""),
                (None, Some('\t')) => "text, columns apart by tabs".to_owned(),
                (None, Some(sign)) => format!("text, columns apart by {sign}"),
                (None, None) => "text".to_owned(),
            };
            let headings = table.heading_row.map_or("no headings".to_owned(), |row| {
                format!("headings in row {row}")
            });
            let _ = writeln!(text, "  {what}: {} rows, {headings}", table.rows);
            for found in &table.loops {
                found.write(&mut text, table.sheet.is_some());
            }
            for line in &table.undecided {
                let _ = writeln!(text, "    not decided: {}", line.replace('\n', "\n    "));
            }
        }
        text
    }
}

impl LoopInspection {
    fn write(&self, text: &mut String, is_sheet: bool) {
        let name = self.tag.as_deref().unwrap_or("a loop without a tag");
        let _ = writeln!(text, "    {name}");
        let mut line = |what: &str, value: String| {
            let _ = writeln!(text, "      {what:<12} {value}");
        };
        for found in &self.roles {
            let column = if is_sheet {
                column_letters(found.column)
            } else {
                format!("#{}", found.column + 1)
            };
            let unit = found
                .unit
                .as_ref()
                .map_or_else(String::new, |unit| format!(", unit {unit}"));
            line(
                found.role.name(),
                format!("{column} \"{}\"{unit}: {}", found.heading, found.why),
            );
        }
        line("clock", self.clock.clone());
        line("span", format!("{} to {}", self.from, self.to));
        line(
            "samples",
            if self.compressed {
                format!(
                    "{} of {} rows, written when the value changed, usually after {} s",
                    self.samples,
                    self.rows,
                    figure(self.interval_s)
                )
            } else {
                format!(
                    "{} of {} rows, every {} s, jitter {} s",
                    self.samples,
                    self.rows,
                    figure(self.interval_s),
                    figure(self.jitter_s)
                )
            },
        );
        line(
            "PV",
            format!(
                "{} to {}",
                figure(self.pv_range[0]),
                figure(self.pv_range[1])
            ),
        );
        line(
            "OP",
            format!(
                "{} to {}",
                figure(self.op_range[0]),
                figure(self.op_range[1])
            ),
        );
        if self.bad_samples.is_empty() {
            line("bad samples", "none".to_owned());
        }
        for (cause, count) in &self.bad_samples {
            line("bad samples", format!("{count}: {cause}"));
        }
        if self.duplicates + self.sorted_rows > 0 {
            line(
                "order",
                format!(
                    "{} rows of a moment that comes again, {} rows out of order by up to a minute",
                    self.duplicates, self.sorted_rows
                ),
            );
        }
        if let Some(fold) = &self.fold {
            line("summer time", fold.clone());
        }
        for gap in &self.gaps {
            line("gap", format!("{} to {}", gap.from, gap.to));
        }
        if let Some(moves) = &self.op_moves {
            for found in moves {
                line(
                    "OP move",
                    format!(
                        "{}: {} to {}",
                        found.at,
                        figure(found.from),
                        figure(found.to)
                    ),
                );
            }
        }
        if let Some(remark) = &self.op_remark {
            line("OP moves", remark.clone());
        }
        for (heading, value) in &self.schedule {
            line("schedule", format!("{heading} = {value}"));
        }
        for warning in &self.warnings {
            line("note", warning.replace('\n', "\n                   "));
        }
    }
}

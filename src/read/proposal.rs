//! The cells of the loop schedule that would read a log just looked at.

use super::headings::Role;
use super::source::FileCache;
use super::table::Table;
use super::{ColumnNames, FileReference, LogRead, LogRequest, LogRule, extract, split_sheet};
use serde::Serialize;
use std::collections::BTreeMap;
use std::path::Path;

/// Longest heading that is given by its text rather than by its number.
const LONGEST_HEADING: usize = 40;

/// Cells of the loop schedule that read a log: as they are typed, and as two lines of a delimited text file.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Proposal {
    /// Value by heading. The tag is empty where the log bears none: it is the person's to give.
    pub cells: BTreeMap<String, String>,
    /// The headings as a line of a csv file, in the order of a schedule.
    pub headings: String,
    /// The values as a line of a csv file.
    pub values: String,
}

/// What was looked at.
pub(super) struct Seen<'a> {
    pub root: &'a Path,
    pub file: &'a str,
    pub file_in_job: &'a str,
    pub tag: Option<&'a str>,
    pub table: &'a Table,
    pub rules: &'a [LogRule],
    /// Columns that had to be named for it to be read.
    pub columns: &'a ColumnNames,
    pub log: &'a LogRead,
}

/// The fewest cells that give the same samples again: columns are named only where they would not be
/// recognised, by number only where their heading does not tell them. `None` where no cells do, which
/// the name of the file alone can cause.
pub(super) fn propose(seen: &Seen<'_>, cache: &FileCache) -> Option<Proposal> {
    [None, Some(by_heading as Naming), Some(by_number as Naming)]
        .into_iter()
        .flat_map(|name| [(name, true), (name, false)])
        .find_map(|(name, with_sheet)| {
            let names = column_names(seen, name);
            let sheet = seen.table.sheet.as_deref().filter(|_| with_sheet);
            let log_cell = log_cell(seen.file_in_job, sheet)?;
            let gives_the_same = reads_the_same(seen, cache, &names, sheet);
            gives_the_same.then(|| Proposal::new(seen, &names, log_cell))
        })
}

/// Text of a `test log` cell; `None` where it would be taken for something else.
fn log_cell(file: &str, sheet: Option<&str>) -> Option<String> {
    let text = sheet.map_or_else(|| file.to_owned(), |sheet| format!("{file}#{sheet}"));
    let back = split_sheet(&text);
    let is_itself = back.file == file && back.sheet.as_deref() == sheet.map(str::trim);
    let is_plain = !text.contains([';', ':']) && !text.contains(char::is_control);
    (is_itself && is_plain).then_some(text)
}

/// How a column is named in the schedule.
type Naming = fn(&str, usize) -> String;

/// A column by its heading where that is plain text, else by its number.
pub(super) fn by_heading(heading: &str, column: usize) -> String {
    // A spreadsheet would run what begins with these, and `#` begins a number.
    let is_plain = !heading.is_empty()
        && heading.chars().count() <= LONGEST_HEADING
        && !heading.starts_with(['=', '+', '-', '@', '#'])
        && !heading.contains(char::is_control)
        && heading.trim() == heading;
    if is_plain {
        heading.to_owned()
    } else {
        by_number(heading, column)
    }
}

/// A column by its number.
pub(super) fn by_number(_heading: &str, column: usize) -> String {
    format!("#{}", column + 1)
}

fn column_names(seen: &Seen<'_>, name: Option<Naming>) -> ColumnNames {
    let Some(name) = name else {
        return seen.columns.clone();
    };
    let mut names = ColumnNames::default();
    let roles = &seen.log.sources[0].roles;
    let is_long = roles.iter().any(|found| found.role == Role::Value);
    for found in roles {
        let is_named = matches!(found.role, Role::Pv | Role::Op | Role::Sp | Role::Mode);
        // In a long table these are named by their text in the tag column, which has no number.
        let given = if is_long && is_named {
            found.heading.clone()
        } else {
            name(&found.heading, found.column)
        };
        let slot = match found.role {
            Role::Time => &mut names.time,
            Role::Pv => &mut names.pv,
            Role::Op => &mut names.op,
            Role::Sp => &mut names.sp,
            Role::Mode => &mut names.mode,
            Role::Quality => &mut names.quality,
            Role::Tag => &mut names.tag,
            Role::Value => continue,
        };
        match slot {
            // Date and time of day apart.
            Some(first) => {
                first.push_str(" + ");
                first.push_str(&given);
            }
            None => *slot = Some(given),
        }
    }
    names
}

fn unit(seen: &Seen<'_>, role: Role) -> Option<String> {
    seen.log.sources[0]
        .roles
        .iter()
        .find(|found| found.role == role)
        .and_then(|found| found.unit.clone())
}

fn reads_the_same(
    seen: &Seen<'_>,
    cache: &FileCache,
    names: &ColumnNames,
    sheet: Option<&str>,
) -> bool {
    let request = LogRequest {
        root: seen.root.to_path_buf(),
        tag: seen.tag.map(str::to_owned),
        columns: names.clone(),
        pv_unit: unit(seen, Role::Pv),
        op_unit: unit(seen, Role::Op),
        rules: seen.rules.to_vec(),
        ..LogRequest::default()
    };
    let reference = FileReference {
        file: seen.file.to_owned(),
        sheet: sheet.map(str::to_owned),
    };
    let bits =
        |values: &[f64]| -> Vec<u64> { values.iter().map(|value| value.to_bits()).collect() };
    extract::read(&request, &[reference], cache).is_ok_and(|again| {
        let (one, other) = (&again.samples, &seen.log.samples);
        again.clock == seen.log.clock
            && one.good == other.good
            && one.mode == other.mode
            && bits(&one.t_s) == bits(&other.t_s)
            && bits(&one.pv) == bits(&other.pv)
            && bits(&one.op) == bits(&other.op)
            && bits(&one.sp) == bits(&other.sp)
    })
}

impl Proposal {
    fn new(seen: &Seen<'_>, names: &ColumnNames, log_cell: String) -> Self {
        let tag = seen.tag.unwrap_or_default().to_owned();
        let named = |role: Role, name: &Option<String>| (role.schedule_heading(), name.clone());
        let cells: Vec<(&str, String)> = [
            ("tag", Some(tag)),
            ("pv unit", unit(seen, Role::Pv)),
            ("op unit", unit(seen, Role::Op)),
            ("test log", Some(log_cell)),
            named(Role::Time, &names.time),
            named(Role::Pv, &names.pv),
            named(Role::Op, &names.op),
            named(Role::Sp, &names.sp),
            named(Role::Mode, &names.mode),
            named(Role::Quality, &names.quality),
            named(Role::Tag, &names.tag),
        ]
        .into_iter()
        .filter_map(|(heading, value)| Some((heading, value?)))
        .collect();
        let line = |texts: &mut dyn Iterator<Item = &str>| {
            texts.map(quoted).collect::<Vec<String>>().join(",")
        };
        Proposal {
            headings: line(&mut cells.iter().map(|(heading, _)| *heading)),
            values: line(&mut cells.iter().map(|(_, value)| value.as_str())),
            cells: cells
                .into_iter()
                .map(|(heading, value)| (heading.to_owned(), value))
                .collect(),
        }
    }
}

/// A field of a csv file, in quotation marks where it needs them.
fn quoted(text: &str) -> String {
    if text.contains([',', '"', ';']) {
        format!("\"{}\"", text.replace('"', "\"\""))
    } else {
        text.to_owned()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_log_cell_names_what_it_should() {
        assert_eq!(
            log_cell("logs/a.xlsx", Some("Trend")).as_deref(),
            Some("logs/a.xlsx#Trend")
        );
        assert_eq!(log_cell("logs/a.csv", None).as_deref(), Some("logs/a.csv"));
        // A sheet whose name would be split, a file whose name would.
        assert_eq!(log_cell("logs/a.xlsx", Some("A;B")), None);
        assert_eq!(log_cell("logs/a.xlsx", Some("A#1")), None);
        assert_eq!(log_cell("logs/a;b.csv", None), None);
    }

    #[test]
    fn a_heading_is_named_by_number_where_its_text_does_not_do() {
        assert_eq!(by_heading("TIC-204.PV", 1), "TIC-204.PV");
        assert_eq!(by_heading("", 1), "#2");
        assert_eq!(by_heading("=PV", 1), "#2");
        assert_eq!(by_heading("two\nlines", 1), "#2");
        assert_eq!(quoted("a \"b\", c"), "\"a \"\"b\"\", c\"");
    }
}

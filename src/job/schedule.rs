//! The loop schedule: one row per loop, every cell typed and checked.

use super::headings::{HEADINGS, Heading, of};
use super::row::LoopRow;
use super::row_reader::{NUMERIC, RowReader};
use crate::display::spreadsheet_cell;
use crate::notice::{Place, Problem, nearest};
use crate::read::numbers::{DecimalSign, Evidence};
use crate::read::source::{SourceFile, WORKBOOK_ENDINGS};
use crate::read::table::{Cell, Table};
use std::collections::BTreeMap;
use std::path::Path;

/// A row that cannot be used; the others go on without it.
#[derive(Debug, Clone, PartialEq)]
pub struct BadRow {
    /// Its tag, or which row it is where it has none.
    pub tag: String,
    /// Row of the sheet or line of the file.
    pub row: usize,
    /// Everything wrong with it.
    pub problems: Vec<Problem>,
}

/// The rows of a schedule in order.
#[derive(Debug)]
pub struct Schedule {
    /// Name of the file.
    pub file: String,
    /// SHA-256 of the file, hexadecimal.
    pub sha256: String,
    /// The rows.
    pub rows: Vec<Result<LoopRow, BadRow>>,
    /// What should be told and stops nothing.
    pub warnings: Vec<Problem>,
}

/// Finds and reads the loop schedule of a job folder.
///
/// # Errors
/// Where there is none or more than one, it cannot be read, lacks a heading or holds no loop.
pub fn read(folder: &Path) -> Result<Schedule, Vec<Problem>> {
    let names: Vec<String> = WORKBOOK_ENDINGS
        .iter()
        .chain(&["csv"])
        .map(|ending| format!("loops.{ending}"))
        .filter(|name| folder.join(name).is_file())
        .collect();
    let [name] = names.as_slice() else {
        return Err(vec![if names.is_empty() {
            Problem::general("the job folder holds no loop schedule")
                .hint("a loop schedule is called loops.xlsx, .xlsm, .xlsb, .xls, .ods or .csv; `asleft new` makes one")
        } else {
            Problem::general(format!(
                "the job folder holds more than one loop schedule: {}",
                names.join(", ")
            ))
            .hint("keep one")
        }]);
    };
    let file = SourceFile::read(&folder.join(name), name).map_err(|problem| vec![problem])?;
    read_file(&file)
}

/// Reads a schedule from its file.
///
/// # Errors
/// As [`read`].
pub fn read_file(file: &SourceFile) -> Result<Schedule, Vec<Problem>> {
    let has_tag = |table: &&Table| {
        !table.is_empty()
            && table
                .row(0)
                .cells()
                .any(|cell| of(&cell.text()).is_some_and(|heading| heading.name == "tag"))
    };
    let tables = file.tables().map_err(|problem| vec![problem])?;
    let filled = || tables.iter().copied().filter(|table| !table.is_empty());
    let Some(table) = filled().find(has_tag).or_else(|| filled().next()) else {
        return Err(vec![Problem::error(
            Place::file(&file.name),
            "the loop schedule is empty",
        )]);
    };
    let mut warnings = Vec::new();
    let columns = columns(table, &mut warnings)?;
    let decimal = decimal_sign(table, &columns)?;
    let mut rows = Vec::new();
    let mut number = 0;
    for index in 1..table.len() {
        let row = table.row(index);
        if columns.values().all(|&column| row.cell(column).is_empty()) {
            continue;
        }
        number += 1;
        let reader = RowReader::new(table, row, &columns, decimal);
        let outcome = LoopRow::read(reader, number, &mut warnings);
        rows.push(outcome);
    }
    if rows.is_empty() {
        return Err(vec![
            Problem::error(table.place(), "the loop schedule has headings and no loop")
                .hint("give each loop a row below the headings"),
        ]);
    }
    refuse_duplicates(&mut rows);
    refuse_cascades(&mut rows);
    Ok(Schedule {
        file: file.name.clone(),
        sha256: file.sha256.clone(),
        rows,
        warnings,
    })
}

/// Which column each heading stands over.
fn columns(
    table: &Table,
    warnings: &mut Vec<Problem>,
) -> Result<BTreeMap<&'static str, usize>, Vec<Problem>> {
    let heading_row = table.row(0);
    let mut columns: BTreeMap<&'static str, usize> = BTreeMap::new();
    let mut problems = Vec::new();
    for (column, cell) in heading_row.cells().enumerate() {
        if cell.is_empty() {
            continue;
        }
        let text = cell.text();
        let place = table
            .place()
            .row(heading_row.number)
            .column(column, Some(&text));
        match of(&text) {
            Some(Heading { name, .. }) => {
                if let Some(first) = columns.insert(name, column) {
                    problems.push(Problem::error(
                        place,
                        format!(
                            "the heading \"{name}\" stands twice, here and in column {}",
                            crate::notice::column_letters(first)
                        ),
                    ));
                }
            }
            None => {
                let mut warning = Problem::warning(
                    place,
                    format!("the heading \"{text}\" is not known; its column is not read"),
                );
                let names = HEADINGS.iter().map(|heading| heading.name);
                warning.hint = nearest(&text.to_lowercase(), names)
                    .map(|near| format!("did you mean \"{near}\"?"));
                warnings.push(warning);
            }
        }
    }
    let missing: Vec<String> = HEADINGS
        .iter()
        .filter(|heading| heading.required && !columns.contains_key(heading.name))
        .map(|heading| format!("\"{}\"", heading.name))
        .collect();
    if !missing.is_empty() {
        problems.push(
            Problem::error(
                table.place().row(heading_row.number),
                format!(
                    "the loop schedule lacks the headings {}",
                    missing.join(", ")
                ),
            )
            .hint("headings stand in the first row that holds anything"),
        );
    }
    if problems.is_empty() {
        Ok(columns)
    } else {
        // An unknown heading is often the missing one misspelt.
        problems.append(warnings);
        Err(problems)
    }
}

/// The decimal sign of numbers that stand as text.
fn decimal_sign(
    table: &Table,
    columns: &BTreeMap<&'static str, usize>,
) -> Result<DecimalSign, Vec<Problem>> {
    let numeric = NUMERIC
        .iter()
        .filter_map(|name| columns.get(name).map(|column| (*name, *column)));
    let mut evidence = Evidence::default();
    for (name, column) in numeric {
        for row in table.rows().skip(1) {
            if let Cell::Text(text) = row.cell(column) {
                evidence.observe(text, || (row.number, column, name));
            }
        }
    }
    let place = |(row, column, name): (usize, usize, &str)| {
        table.place().row(row).column(column, Some(name))
    };
    evidence.decide(table.delimiter).map_err(|undecided| {
        use crate::read::numbers::Undecided;
        vec![match undecided {
            Undecided::Either { at, text } => Problem::error(
                place(at),
                format!("\"{text}\" may be a number with decimals or with thousands, and no other cell tells which"),
            )
            .hint("write it without a sign between thousands and with another number of decimals"),
            Undecided::Both { point, comma } => Problem::error(
                place(comma.0),
                format!(
                    "\"{}\" has a decimal comma, but \"{}\" in row {} has a decimal point",
                    comma.1, point.1, point.0.0
                ),
            )
            .hint("write all numbers with one decimal sign"),
        }]
    })
}

/// Tags that stand in more than one row: none of those rows can be told from the other.
fn refuse_duplicates(rows: &mut [Result<LoopRow, BadRow>]) {
    let mut places: BTreeMap<String, Vec<usize>> = BTreeMap::new();
    for row in rows.iter() {
        let (tag, number) = match row {
            Ok(row) => (&row.tag, row.place.row.unwrap_or_default()),
            Err(bad) => (&bad.tag, bad.row),
        };
        places.entry(tag.to_lowercase()).or_default().push(number);
    }
    for row in rows.iter_mut() {
        let Ok(found) = row else { continue };
        let same = &places[&found.tag.to_lowercase()];
        if same.len() > 1 {
            let list: Vec<String> = same.iter().map(ToString::to_string).collect();
            *row = Err(found.refused(format!(
                "the tag {} stands in more than one row: {}",
                found.tag,
                list.join(", ")
            )));
        }
    }
}

/// Inner loops that are not there, and cascades that come back to where they began.
fn refuse_cascades(rows: &mut [Result<LoopRow, BadRow>]) {
    let tags: Vec<String> = rows
        .iter()
        .map(|row| match row {
            Ok(row) => row.tag.clone(),
            Err(bad) => bad.tag.clone(),
        })
        .collect();
    let inner: BTreeMap<String, String> = rows
        .iter()
        .flatten()
        .filter_map(|row| {
            let inner = row.inner_loop.as_ref()?;
            Some((row.tag.to_lowercase(), inner.to_lowercase()))
        })
        .collect();
    for row in rows.iter_mut() {
        let Ok(found) = row else { continue };
        let Some(wanted) = &found.inner_loop else {
            continue;
        };
        if let Some(known) = tags
            .iter()
            .find(|tag| tag.to_lowercase() == wanted.to_lowercase())
        {
            let own = found.tag.to_lowercase();
            let mut next = Some(&wanted.to_lowercase()).cloned();
            // No chain of inner loops is longer than the schedule.
            for _ in 0..tags.len() {
                match next {
                    Some(tag) if tag == own => {
                        *row = Err(found
                            .refused(format!("the cascade of {} comes back to itself", found.tag)));
                        break;
                    }
                    Some(tag) => next = inner.get(&tag).cloned(),
                    None => break,
                }
            }
            if let Ok(found) = row {
                found.inner_loop = Some(known.clone());
            }
        } else {
            let near = nearest(wanted, tags.iter().map(String::as_str));
            let mut bad = found.refused(format!(
                "the inner loop {wanted} is not in the loop schedule"
            ));
            if let (Some(near), Some(problem)) = (near, bad.problems.last_mut()) {
                problem.hint = Some(format!("did you mean \"{near}\"?"));
            }
            *row = Err(bad);
        }
    }
}

/// A row of the schedule as delimited text for attaching to its record: headings and values as
/// they stand there. A text that a spreadsheet would run as a formula is set off by an apostrophe.
pub fn schedule_row_csv(row: &LoopRow) -> Vec<u8> {
    let mut writer = csv::WriterBuilder::new()
        .terminator(csv::Terminator::Any(b'\n'))
        .from_writer(Vec::new());
    let headings = row
        .as_read
        .iter()
        .map(|cell| spreadsheet_cell(&cell.heading));
    let values = row.as_read.iter().map(|cell| spreadsheet_cell(&cell.value));
    writer
        .write_record(headings)
        .and_then(|()| writer.write_record(values))
        .expect("writing to memory does not fail, and both lines have as many fields");
    writer.into_inner().expect("memory takes what is left")
}

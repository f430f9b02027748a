//! Which column of a log is which, for one loop.

use super::ColumnNames;
use super::clock::TimeColumns;
use super::headings::{Meaning, Owner, Role, Sureness, meaning, squash};
use super::layout::{Heading, Layout};
use super::parts::name_the_value;
use super::stamp::stamp;
use super::table::{Cell, Table};
use super::times::{blocks, hold_all, quality_beside_pv, times_of_blocks};
use super::values::is_good;
use crate::notice::{Problem, nearest};
use serde::Serialize;
use std::collections::BTreeMap;

/// Why a column has its role that the schedule names for it.
pub(super) const NAMED: &str = "named in the schedule";

/// A column that was given a role.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct RoleFound {
    /// What it is for.
    pub role: Role,
    /// Column, 0 for the first.
    pub column: usize,
    /// Its heading as it stands there; empty in a log without headings.
    pub heading: String,
    /// Unit given in the heading or below it.
    pub unit: Option<String>,
    /// Why it was given the role.
    pub why: String,
}

/// The columns of one loop in a table.
#[derive(Debug, Clone)]
pub struct Roles {
    /// Where the time stands.
    pub time: TimeColumns,
    /// Every column with a role, in the order of [`Role`].
    pub found: Vec<RoleFound>,
    /// Whether rows bear a tag and a value each.
    pub long: bool,
    /// Signals that have a time column of their own, another than `time`.
    pub own_times: BTreeMap<Role, TimeColumns>,
    /// Why the table alone is no log of the loop, where other files may hold the rest of it.
    pub missing: Vec<Problem>,
}

impl Roles {
    /// The column of a role.
    pub fn column(&self, role: Role) -> Option<usize> {
        self.found(role).map(|found| found.column)
    }

    /// The time of a role.
    pub fn time_of(&self, role: Role) -> TimeColumns {
        self.own_times.get(&role).copied().unwrap_or(self.time)
    }

    /// What was found for a role.
    pub fn found(&self, role: Role) -> Option<&RoleFound> {
        self.found.iter().find(|found| found.role == role)
    }
}

/// One table with what its headings say for one loop.
pub(super) struct Headings<'a> {
    pub table: &'a Table,
    pub layout: &'a Layout,
    pub meanings: Vec<Meaning>,
}

impl Headings<'_> {
    fn list(&self) -> String {
        let texts: Vec<String> = self
            .layout
            .headings
            .iter()
            .filter(|heading| !heading.text.is_empty())
            .map(|heading| format!("\"{}\"", heading.text))
            .collect();
        if texts.is_empty() {
            "it has no headings".to_owned()
        } else {
            format!("its headings are {}", texts.join(", "))
        }
    }

    fn problem(&self, message: String) -> Problem {
        let place = match self.layout.heading_row {
            Some(row) => self.table.place().row(self.table.row(row).number),
            None => self.table.place(),
        };
        Problem::error(place, message)
    }

    pub fn role(&self, role: Role, column: usize, why: String) -> RoleFound {
        let heading = &self.layout.headings[column];
        RoleFound {
            role,
            column,
            heading: heading.text.clone(),
            unit: self.meanings[column]
                .unit
                .clone()
                .or_else(|| heading.unit_below.clone()),
            why,
        }
    }

    /// The column that the schedule names: by heading, with or without its unit, or by number.
    fn named(&self, name: &str, role: Role) -> Result<usize, Problem> {
        if let Some(number) = name.trim().strip_prefix('#') {
            return match number.trim().parse::<usize>() {
                Ok(number) if (1..=self.table.width()).contains(&number) => Ok(number - 1),
                _ => Err(self.problem(format!(
                    "the schedule names {} column {name}, but the log has columns #1 to #{}",
                    role.name(),
                    self.table.width()
                ))),
            };
        }
        let headings = || self.layout.headings.iter();
        let whole: Vec<&Heading> = headings()
            .filter(|heading| even(&heading.text) == even(name))
            .collect();
        let without_unit = || {
            headings()
                .filter(|heading| {
                    let text = heading.text.split(['(', '[']).next().unwrap_or_default();
                    !text.trim().is_empty() && squash(text) == squash(name)
                })
                .collect::<Vec<_>>()
        };
        let one_row = || {
            headings()
                .filter(|heading| heading.rows.iter().any(|text| even(text) == even(name)))
                .collect::<Vec<_>>()
        };
        let matches = [whole, without_unit(), one_row()]
            .into_iter()
            .find(|matches| !matches.is_empty())
            .unwrap_or_default();
        match matches.as_slice() {
            [one] => Ok(one.column),
            [] => {
                let known = headings()
                    .map(|heading| heading.text.as_str())
                    .filter(|text| !text.is_empty());
                let problem = self.problem(format!(
                    "the schedule names {} column \"{name}\", which the log does not have; {}",
                    role.name(),
                    self.list()
                ));
                Err(match nearest(name, known) {
                    Some(near) => problem.hint(format!("did you mean \"{near}\"?")),
                    None => problem,
                })
            }
            several => Err(self
                .problem(format!(
                    "{} columns have the heading \"{name}\" that the schedule names as {} column",
                    several.len(),
                    role.name()
                ))
                .hint(format!(
                    "give the column by its number: {}",
                    several
                        .iter()
                        .map(|heading| format!("#{}", heading.column + 1))
                        .collect::<Vec<_>>()
                        .join(" or ")
                ))),
        }
    }

    /// The column whose heading gives it the role most surely; a heading with the loop's own tag
    /// goes before one without any.
    fn recognised(&self, role: Role, tag: Option<&str>) -> Result<Option<RoleFound>, Problem> {
        for owner in [Owner::This, Owner::Nobody] {
            let candidates: Vec<(usize, Sureness)> = self
                .meanings
                .iter()
                .enumerate()
                .filter(|(_, meaning)| meaning.owner == owner)
                .filter_map(|(column, meaning)| match meaning.role {
                    Some((found, sureness)) if found == role => Some((column, sureness)),
                    _ => None,
                })
                .collect();
            let Some(best) = candidates.iter().map(|(_, sureness)| *sureness).min() else {
                continue;
            };
            let best: Vec<usize> = candidates
                .iter()
                .filter(|(_, sureness)| *sureness == best)
                .map(|(column, _)| *column)
                .collect();
            let [column] = best[..] else {
                return Err(self.several(role, &best));
            };
            let why = match (&owner, tag) {
                (Owner::This, Some(tag)) => format!("the heading bears the tag {tag}"),
                _ => format!("the heading is usual for the {}", role.name()),
            };
            return Ok(Some(self.role(role, column, why)));
        }
        Ok(None)
    }

    /// One column that the schedule names for two roles.
    fn named_twice(&self, found: &[RoleFound]) -> Option<Problem> {
        let signals = || found.iter().filter(|found| SIGNALS.contains(&found.role));
        let (one, other) = signals()
            .flat_map(|one| signals().map(move |other| (one, other)))
            .find(|(one, other)| one.role < other.role && one.column == other.column)?;
        Some(self.problem(format!(
            "the schedule names column #{} as {} and as {}",
            one.column + 1,
            one.role.name(),
            other.role.name()
        )))
    }

    fn several(&self, role: Role, columns: &[usize]) -> Problem {
        let texts: Vec<String> = columns
            .iter()
            .map(|&column| {
                format!(
                    "\"{}\" (#{})",
                    self.layout.headings[column].text,
                    column + 1
                )
            })
            .collect();
        self.problem(format!(
            "{} columns may be the {}: {}",
            columns.len(),
            role.name(),
            texts.join(", ")
        ))
        .hint(format!(
            "name one in the schedule under \"{}\"",
            role.schedule_heading()
        ))
    }
}

/// What a column of values may be.
pub(super) const SIGNALS: [Role; 4] = [Role::Pv, Role::Op, Role::Sp, Role::Mode];

/// A heading for comparison: case, spaces and underscores do not count.
fn even(text: &str) -> String {
    text.chars()
        .filter(|letter| !letter.is_whitespace() && *letter != '_')
        .flat_map(char::to_lowercase)
        .collect()
}

/// Whether the first cells of a column hold dates, and whether they hold times of day. Several are
/// looked at: a log may begin at midnight, which a workbook keeps as a bare date.
pub(super) fn date_and_time(table: &Table, layout: &Layout, column: usize) -> (bool, bool) {
    const CELLS_LOOKED_AT: usize = 5;
    (layout.data_start..table.len())
        .map(|index| table.row(index).cell(column))
        .filter(|cell| !cell.is_empty())
        .take(CELLS_LOOKED_AT)
        .map(|cell| match cell {
            Cell::Date(at) => (true, at.time() != chrono::NaiveTime::MIN),
            Cell::Duration(_) => (false, true),
            Cell::Text(text) => stamp(text).map_or((false, false), |stamp| {
                (stamp.date.is_some(), stamp.time_us.is_some())
            }),
            _ => (false, false),
        })
        .fold((false, false), |all, cell| {
            (all.0 || cell.0, all.1 || cell.1)
        })
}

/// Whether any of the first cells of a column is a known quality.
fn holds_quality(table: &Table, layout: &Layout, column: usize) -> bool {
    const CELLS_LOOKED_AT: usize = 50;
    (layout.data_start..table.len())
        .map(|index| table.row(index).cell(column))
        .filter(|cell| !cell.is_empty())
        .take(CELLS_LOOKED_AT)
        .any(|cell| is_good(cell, &[]).is_some())
}

/// What is wanted of the columns of a table.
#[derive(Debug, Clone, Copy)]
pub struct Wanted<'a> {
    /// Columns that the schedule names.
    pub names: &'a ColumnNames,
    /// Tag of the loop.
    pub tag: Option<&'a str>,
    /// Seconds from row to row, of a log without a clock.
    pub interval_s: Option<f64>,
    /// Whether other files may hold the signals that this one lacks.
    pub partial: bool,
}

/// What the headings of a table tell for one loop, also where they do not tell all.
#[derive(Debug)]
pub struct Recognised {
    /// Where the time stands; `None` where that is not known.
    time: Option<TimeColumns>,
    own_times: BTreeMap<Role, TimeColumns>,
    /// Every column that could be given a role.
    pub found: Vec<RoleFound>,
    /// Whether rows bear a tag and a value each.
    long: bool,
    missing: Vec<Problem>,
    /// Roles that are missing, named wrongly or may be one of several columns'.
    pub problems: Vec<Problem>,
}

/// Gives columns their roles as far as that can be told.
pub fn recognise(table: &Table, layout: &Layout, wanted: Wanted<'_>) -> Recognised {
    let Wanted {
        names,
        tag,
        interval_s,
        partial,
    } = wanted;
    let headings = Headings {
        table,
        layout,
        meanings: layout
            .headings
            .iter()
            .map(|heading| meaning(&heading.text, tag))
            .collect(),
    };
    let mut problems = Vec::new();
    let mut found: Vec<RoleFound> = Vec::new();
    let time = time_columns(&headings, names, interval_s, &mut found);
    let blocks = match &time {
        Err(_) if names.time.is_none() => blocks(&headings),
        _ => None,
    };
    // In a long table these may name the signal's own text in the tag column.
    let mut unknown_names = Vec::new();
    // Which column is the value matters in a long table alone.
    let mut several_values = Vec::new();
    for (role, name) in [
        (Role::Pv, &names.pv),
        (Role::Op, &names.op),
        (Role::Sp, &names.sp),
        (Role::Mode, &names.mode),
        (Role::Quality, &names.quality),
        (Role::Tag, &names.tag),
        (Role::Value, &None),
    ] {
        let outcome = match name {
            Some(name) => headings
                .named(name, role)
                .map(|column| Some(headings.role(role, column, NAMED.to_owned()))),
            None => headings.recognised(role, tag),
        };
        // Each signal's own quality: that of the PV is wanted.
        let outcome = match (outcome, &blocks) {
            (Err(_), Some(blocks)) if role == Role::Quality && name.is_none() => {
                Ok(quality_beside_pv(&headings, blocks, &found))
            }
            (outcome, _) => outcome,
        };
        match outcome {
            Ok(Some(role)) => found.push(role),
            Ok(None) => {}
            Err(problem)
                if name.is_some()
                    && matches!(role, Role::Pv | Role::Op | Role::Sp | Role::Mode) =>
            {
                unknown_names.push(problem);
            }
            Err(problem) if role == Role::Value => several_values.push(problem),
            Err(problem) => problems.push(problem),
        }
    }
    // "Status" is as often that of something else: such a column has to hold what a quality is.
    found.retain(|found| {
        found.role != Role::Quality
            || names.quality.is_some()
            || squash(&found.heading).contains("QUAL")
            || holds_quality(table, layout, found.column)
    });
    problems.extend(headings.named_twice(&found));
    let blocks = blocks.filter(|blocks| hold_all(blocks, &found));
    let (time, own_times) = match (time, blocks) {
        (Ok(time), _) => (Some(time), BTreeMap::new()),
        (Err(_), Some(blocks)) => {
            let (time, own) = times_of_blocks(&headings, &blocks, &mut found);
            (Some(time), own)
        }
        (Err(problem), None) => {
            problems.insert(0, problem);
            (None, BTreeMap::new())
        }
    };
    let has = |found: &[RoleFound], role: Role| found.iter().any(|found| found.role == role);
    let is_table_of = |found: &[RoleFound]| has(found, Role::Tag) && has(found, Role::Value);
    if partial && !SIGNALS.iter().any(|&role| has(&found, role)) && !is_table_of(&found) {
        name_the_value(&headings, tag, &mut found);
    }
    let is_for_values = partial && !SIGNALS.iter().any(|&role| has(&found, role));
    if (has(&found, Role::Tag) && !has(&found, Role::Pv)) || is_for_values {
        problems.append(&mut several_values);
    }
    let long = is_table_of(&found) && !has(&found, Role::Pv);
    let mut missing = Vec::new();
    if !long {
        missing.append(&mut unknown_names);
        if missing.is_empty() && problems.is_empty() && !has(&found, Role::Pv) {
            missing.push(no_pv(&headings, tag));
        } else if missing.is_empty() && problems.is_empty() && !has(&found, Role::Op) {
            missing.push(
                headings
                    .problem(format!(
                        "no column is recognised as the OP; {}",
                        headings.list()
                    ))
                    .hint("name it in the schedule under \"op column\", or the file that holds it beside this one under \"test log\""),
            );
        }
    }
    if !partial || !SIGNALS.iter().any(|&role| has(&found, role)) {
        problems.append(&mut missing);
    }
    found.sort_by_key(|found| found.role);
    Recognised {
        time,
        own_times,
        found,
        long,
        missing,
        problems,
    }
}

/// Gives every column its role.
///
/// # Errors
/// Where a column that is needed is missing, named wrongly or may be one of several.
pub fn assign(table: &Table, layout: &Layout, wanted: Wanted<'_>) -> Result<Roles, Vec<Problem>> {
    let Wanted { names, tag, .. } = wanted;
    let Recognised {
        time,
        own_times,
        mut found,
        long,
        missing,
        problems,
    } = recognise(table, layout, wanted);
    let Some(time) = time.filter(|_| problems.is_empty()) else {
        return Err(problems);
    };
    if !long {
        found.retain(|found| found.role != Role::Value);
        // A tag column beside a PV column narrows the rows; one that was only guessed from a
        // usual word ("name") and does not hold this tag does not.
        let holds_tag = |column: usize| {
            (layout.data_start..table.len()).any(|index| {
                meaning(&table.row(index).cell(column).text(), tag).owner == Owner::This
            })
        };
        found.retain(|found| {
            found.role != Role::Tag || names.tag.is_some() || holds_tag(found.column)
        });
    }
    Ok(Roles {
        time,
        found,
        long,
        own_times,
        missing,
    })
}

fn no_pv(headings: &Headings<'_>, tag: Option<&str>) -> Problem {
    let message = match tag {
        Some(tag) => format!(
            "no column is recognised as the PV of {tag}; {}",
            headings.list()
        ),
        None => format!("no column is recognised as the PV; {}", headings.list()),
    };
    headings
        .problem(message)
        .hint("name it in the schedule under \"pv column\"")
}

fn time_columns(
    headings: &Headings<'_>,
    names: &ColumnNames,
    interval_s: Option<f64>,
    found: &mut Vec<RoleFound>,
) -> Result<TimeColumns, Problem> {
    if let Some(name) = &names.time {
        let why = || NAMED.to_owned();
        // A heading may itself hold a plus sign: the whole name is tried first.
        if let Some((date, time)) = name.split_once('+')
            && headings.named(name, Role::Time).is_err()
        {
            let date = headings.named(date.trim(), Role::Time)?;
            let time = headings.named(time.trim(), Role::Time)?;
            found.push(headings.role(Role::Time, date, why()));
            found.push(headings.role(Role::Time, time, why()));
            return Ok(TimeColumns::Pair { date, time });
        }
        let column = headings.named(name, Role::Time)?;
        found.push(headings.role(Role::Time, column, why()));
        return Ok(TimeColumns::Single(column));
    }
    if let Some(interval_s) = interval_s {
        return Ok(TimeColumns::Counted { interval_s });
    }
    let holds = |column: usize| date_and_time(headings.table, headings.layout, column);
    let by_heading: Vec<usize> = headings
        .meanings
        .iter()
        .enumerate()
        .filter(|(_, meaning)| matches!(meaning.role, Some((Role::Time, _))))
        .map(|(column, _)| column)
        .collect();
    let of_kind = |kind: (bool, bool)| {
        by_heading
            .iter()
            .copied()
            .filter(|&column| holds(column) == kind)
            .collect::<Vec<usize>>()
    };
    let single = |column: usize, why: &str, found: &mut Vec<RoleFound>| {
        found.push(headings.role(Role::Time, column, why.to_owned()));
        Ok(TimeColumns::Single(column))
    };
    match (
        of_kind((true, true)).as_slice(),
        of_kind((true, false)).as_slice(),
        of_kind((false, true)).as_slice(),
    ) {
        ([column], _, _) => single(*column, "it holds date and time of day", found),
        ([], [date], [time]) => {
            found.push(headings.role(Role::Time, *date, "it holds the date".to_owned()));
            found.push(headings.role(Role::Time, *time, "it holds the time of day".to_owned()));
            Ok(TimeColumns::Pair {
                date: *date,
                time: *time,
            })
        }
        ([], _, _) if by_heading.len() > 1 => {
            let exact: Vec<usize> = by_heading
                .iter()
                .copied()
                .filter(|&column| {
                    headings.meanings[column].role == Some((Role::Time, Sureness::Exact))
                })
                .collect();
            match exact.as_slice() {
                [column] => single(*column, "the heading is usual for the time", found),
                _ => Err(headings.several(Role::Time, &by_heading)),
            }
        }
        ([], _, _) => {
            if let [column] = by_heading[..] {
                return single(column, "the heading is usual for the time", found);
            }
            // No usual heading: the only column that holds dates.
            let dated: Vec<usize> = (0..headings.table.width())
                .filter(|&column| holds(column).0)
                .collect();
            match dated[..] {
                [column] => single(column, "the only column that holds dates", found),
                [] => Err(headings
                    .problem(format!(
                        "no column is recognised as the time; {}",
                        headings.list()
                    ))
                    .hint("name it in the schedule under \"time column\", or give interval_s in a [[log]] table of job.toml")),
                _ => Err(headings.several(Role::Time, &dated)),
            }
        }
        (several, _, _) => Err(headings.several(Role::Time, several)),
    }
}

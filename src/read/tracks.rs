//! The signals of a loop, each in order of time: side by side in a wide table, or one after another
//! in a long one.

use super::clock::Scale;
use super::extract::Understood;
use super::headings::{Owner, Role, Sureness, meaning, squash};
use super::order::{self, Ordered};
use super::rows::Rows;
use super::table::Cell;
use super::{LogRequest, LogRule};
use crate::notice::Problem;
use std::collections::BTreeMap;

/// One signal of a table: its column, and its rows in order of time.
#[derive(Debug)]
pub(super) struct Track {
    pub column: usize,
    /// In order of time; `ordered.rows` counts rows of the table.
    pub ordered: Ordered,
}

/// The signals of a loop, each in order of time.
pub(super) enum Tracks {
    /// Side by side: one row holds them all.
    Wide(WideTracks),
    /// One after another.
    Long(LongTracks),
}

/// Signals of a wide table: columns, and the rows that they share.
pub(super) struct WideTracks {
    pub pv: usize,
    pub op: Option<usize>,
    pub sp: Option<usize>,
    pub mode: Option<usize>,
    /// In order of time; `ordered.rows` counts rows of the table.
    pub ordered: Ordered,
}

/// Signals of a long table, each with rows of its own.
pub(super) struct LongTracks {
    pub pv: Track,
    pub op: Option<Track>,
    pub sp: Option<Track>,
    pub mode: Option<Track>,
    /// Roles found in the tag column.
    pub named: Vec<super::RoleFound>,
}

impl Tracks {
    /// The rows of the PV in order of time.
    pub fn main(&self) -> &Ordered {
        match self {
            Tracks::Wide(wide) => &wide.ordered,
            Tracks::Long(long) => &long.pv.ordered,
        }
    }
}

/// Puts the signals of a loop in order. `rows` are its rows in the table, `t_us` their moments.
pub(super) fn tracks(
    request: &LogRequest,
    rule: &LogRule,
    understood: &Understood<'_>,
    rows: &Rows,
    t_us: Vec<i64>,
    scale: Scale,
    shift_us: i64,
) -> Result<Tracks, Vec<Problem>> {
    let table = understood.table;
    let ordered = |rows: &Rows, t_us: Vec<i64>| -> Result<Ordered, Vec<Problem>> {
        let place = |k: usize| table.place().row(table.row(rows.get(k)).number);
        let mut ordered = order::order(t_us, scale, rule.zone, shift_us, place)
            .map_err(|problem| vec![problem])?;
        ordered.rows = rows.pick(&ordered.rows);
        Ok(ordered)
    };
    let roles = &understood.roles;
    if !roles.long {
        let mut ordered = ordered(rows, t_us)?;
        count_from_first(&mut [&mut ordered], scale);
        return Ok(Tracks::Wide(WideTracks {
            pv: roles
                .column(Role::Pv)
                .expect("a wide table was given its PV column"),
            op: roles.column(Role::Op),
            sp: roles.column(Role::Sp),
            mode: roles.column(Role::Mode),
            ordered,
        }));
    }
    let column = roles
        .column(Role::Value)
        .expect("a long table has a value column");
    let tag_column = roles
        .column(Role::Tag)
        .expect("a long table has a tag column");
    let texts = series_texts(request, understood, rows, tag_column)?;
    let mut named = Vec::new();
    let mut track = |role: Role| -> Result<Option<Track>, Vec<Problem>> {
        let Some(text) = texts.get(&role) else {
            return Ok(None);
        };
        let bears = |row: usize| match table.cell(row, tag_column) {
            Cell::Text(found) => found == text,
            cell => cell.text() == *text,
        };
        let chosen: Rows = (0..rows.len()).filter(|&k| bears(rows.get(k))).collect();
        let times = chosen.iter().map(|k| t_us[k]).collect();
        named.push(super::RoleFound {
            role,
            column,
            heading: text.clone(),
            unit: None,
            why: format!("{} rows bear this tag", chosen.len()),
        });
        Ok(Some(Track {
            column,
            ordered: ordered(&rows.pick(&chosen), times)?,
        }))
    };
    let (pv, op, sp, mode) = (
        track(Role::Pv)?,
        track(Role::Op)?,
        track(Role::Sp)?,
        track(Role::Mode)?,
    );
    let mut tracks = LongTracks {
        pv: pv.expect("the PV's text was found among the tags"),
        op,
        sp,
        mode,
        named,
    };
    let mut all: Vec<&mut Ordered> = [&mut tracks.op, &mut tracks.sp, &mut tracks.mode]
        .into_iter()
        .flatten()
        .map(|track| &mut track.ordered)
        .collect();
    all.insert(0, &mut tracks.pv.ordered);
    count_from_first(&mut all, scale);
    Ok(Tracks::Long(tracks))
}

/// Times of day without a date count from the first row of the log (that of the first signal).
fn count_from_first(signals: &mut [&mut Ordered], scale: Scale) {
    let first = signals
        .first()
        .and_then(|signal| signal.t_us.first().copied());
    if let (Some(first), Scale::TimeOfDay { dated: false }) = (first, scale) {
        for signal in signals {
            for t_us in &mut signal.t_us {
                *t_us -= first;
            }
        }
    }
}

/// The text in the tag column that stands for each signal of the loop.
fn series_texts(
    request: &LogRequest,
    understood: &Understood<'_>,
    rows: &Rows,
    tag_column: usize,
) -> Result<BTreeMap<Role, String>, Vec<Problem>> {
    let table = understood.table;
    let mut texts: Vec<String> = Vec::new();
    let mut seen = std::collections::BTreeSet::new();
    for row in rows.iter() {
        let cell = table.cell(row, tag_column);
        if matches!(cell, Cell::Text(text) if seen.contains(text)) {
            continue;
        }
        let text = cell.text();
        if seen.insert(text.clone()) {
            texts.push(text);
        }
    }
    let place = || {
        table.place().column(
            tag_column,
            Some(&understood.layout.headings[tag_column].text),
        )
    };
    let list = || {
        let mut shown: Vec<String> = texts
            .iter()
            .take(12)
            .map(|text| format!("\"{text}\""))
            .collect();
        if texts.len() > shown.len() {
            shown.push(format!("{} more", texts.len() - shown.len()));
        }
        shown.join(", ")
    };
    let mut found = BTreeMap::new();
    let mut problems = Vec::new();
    for (role, name) in [
        (Role::Pv, &request.columns.pv),
        (Role::Op, &request.columns.op),
        (Role::Sp, &request.columns.sp),
        (Role::Mode, &request.columns.mode),
    ] {
        if let Some(name) = name {
            match texts.iter().find(|text| squash(text) == squash(name)) {
                Some(text) => {
                    found.insert(role, text.clone());
                }
                None => problems.push(Problem::error(
                    place(),
                    format!(
                        "the schedule names {} \"{name}\", which no row bears; the tags are {}",
                        role.name(),
                        list()
                    ),
                )),
            }
            continue;
        }
        let sureness = |text: &str| match meaning(text, request.tag.as_deref()) {
            meaning if meaning.role.is_some_and(|(found, _)| found == role) => meaning
                .role
                .map(|(_, sureness)| (meaning.owner != Owner::This, sureness)),
            _ => None,
        };
        let best: Option<(bool, Sureness)> = texts.iter().filter_map(|text| sureness(text)).min();
        let matching: Vec<&String> = texts
            .iter()
            .filter(|text| best.is_some() && sureness(text) == best)
            .collect();
        match matching.as_slice() {
            [] => {}
            [text] => {
                found.insert(role, (*text).clone());
            }
            several => problems.push(
                Problem::error(
                    place(),
                    format!(
                        "{} tags may be the {}: {}",
                        several.len(),
                        role.name(),
                        several
                            .iter()
                            .map(|text| format!("\"{text}\""))
                            .collect::<Vec<_>>()
                            .join(", ")
                    ),
                )
                .hint(format!(
                    "name one in the schedule under \"{}\"",
                    role.schedule_heading()
                )),
            ),
        }
    }
    if problems.is_empty() {
        for role in [Role::Pv, Role::Op] {
            if !found.contains_key(&role) {
                problems.push(
                    Problem::error(
                        place(),
                        format!(
                            "no tag is recognised as the {}; the tags are {}",
                            role.name(),
                            list()
                        ),
                    )
                    .hint(format!(
                        "name it in the schedule under \"{}\"",
                        role.schedule_heading()
                    )),
                );
            }
        }
    }
    if problems.is_empty() {
        Ok(found)
    } else {
        Err(problems)
    }
}

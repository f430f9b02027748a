//! The signals of a loop, each in order of time: side by side in a wide table, or one after another
//! in a long one.

use super::clock::{DAY_US, Scale, TimeColumns};
use super::extract::Understood;
use super::headings::{Owner, Role, Sureness, meaning, squash};
use super::order::{self, Carried, Ordered};
use super::rows::Rows;
use super::table::Cell;
use super::{LogRequest, LogRule};
use crate::notice::Problem;
use std::collections::BTreeMap;
use std::rc::Rc;

/// One signal of a table: its column, and its rows in order of time.
#[derive(Debug)]
pub(super) struct Track {
    pub column: usize,
    /// In order of time; `ordered.rows` counts rows of the table. Signals side by side share it.
    pub ordered: Rc<Ordered>,
}

/// The signals of a loop, each in order of time.
pub(super) struct Tracks {
    pub pv: Option<Track>,
    pub op: Option<Track>,
    pub sp: Option<Track>,
    pub mode: Option<Track>,
    /// Roles found in the tag column of a long table.
    pub named: Vec<super::RoleFound>,
    /// Signals of the loop that the table lacks, where other files may hold them.
    pub missing: Vec<Problem>,
}

impl Tracks {
    /// The PV, or the first signal of a table that holds no PV.
    pub fn main(&self) -> &Track {
        [&self.pv, &self.op, &self.sp, &self.mode]
            .into_iter()
            .flatten()
            .next()
            .expect("a table without any signal was refused")
    }
}

/// Rows with their times: rows of the table, and microseconds of each.
#[derive(Debug, Clone, Default)]
pub(super) struct Timed {
    pub rows: Rows,
    pub t_us: Vec<i64>,
}

/// What puts the rows of a signal in order.
#[derive(Debug, Clone, Copy)]
pub(super) struct Order<'a> {
    pub scale: Scale,
    pub rule: &'a LogRule,
    pub carried: Carried,
}

/// The signals of a table. `main` are the rows of the PV, `own` those of signals with a time column of
/// their own.
///
/// # Errors
/// Where time runs back, or signals of a long table cannot be told.
pub(super) fn tracks(
    request: &LogRequest,
    understood: &Understood<'_>,
    main: Timed,
    mut own: BTreeMap<Role, Timed>,
    order: Order<'_>,
) -> Result<Tracks, Vec<Problem>> {
    let table = understood.table;
    let scale = order.scale;
    let roles = &understood.roles;
    let in_order = |timed: Timed, time: TimeColumns| {
        let Timed { rows, t_us } = timed;
        let place = |k: usize| {
            let place = table.place().row(table.row(rows.get(k)).number);
            let (TimeColumns::Single(column) | TimeColumns::Pair { time: column, .. }) = time
            else {
                return place;
            };
            let heading = &understood.layout.headings[column].text;
            place.column(column, (!heading.is_empty()).then_some(heading.as_str()))
        };
        let mut ordered = order::order(t_us, scale, order.rule.zone, order.carried, place)
            .map_err(|problem| vec![problem])?;
        ordered.rows = rows.pick(&ordered.rows);
        Ok::<_, Vec<Problem>>(Rc::new(ordered))
    };
    if !roles.long {
        let shared = in_order(main, roles.time)?;
        let mut track = |role: Role| -> Result<Option<Track>, Vec<Problem>> {
            let Some(column) = roles.column(role) else {
                return Ok(None);
            };
            let ordered = match own.remove(&role) {
                Some(timed) => in_order(timed, roles.time_of(role))?,
                None => Rc::clone(&shared),
            };
            Ok(Some(Track { column, ordered }))
        };
        let mut tracks = Tracks {
            pv: track(Role::Pv)?,
            op: track(Role::Op)?,
            sp: track(Role::Sp)?,
            mode: track(Role::Mode)?,
            named: Vec::new(),
            missing: roles.missing.clone(),
        };
        tracks.count_from_first(scale);
        return Ok(tracks);
    }
    let column = roles
        .column(Role::Value)
        .expect("a long table has a value column");
    let tag_column = roles
        .column(Role::Tag)
        .expect("a long table has a tag column");
    let Timed { rows, t_us } = main;
    let (texts, missing) = series_texts(request, understood, &rows)?;
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
        let timed = Timed {
            rows: rows.pick(&chosen),
            t_us: chosen.iter().map(|k| t_us[k]).collect(),
        };
        let ordered = in_order(timed, roles.time)?;
        named.push(super::RoleFound {
            role,
            column,
            heading: text.clone(),
            unit: None,
            why: format!("{} rows bear this tag", chosen.len()),
        });
        Ok(Some(Track { column, ordered }))
    };
    let (pv, op, sp, mode) = (
        track(Role::Pv)?,
        track(Role::Op)?,
        track(Role::Sp)?,
        track(Role::Mode)?,
    );
    let mut tracks = Tracks {
        pv,
        op,
        sp,
        mode,
        named,
        missing,
    };
    tracks.count_from_first(scale);
    Ok(tracks)
}

impl Tracks {
    /// Times of day without a date count from the first row of the log (that of the first signal). A
    /// signal that begins in the other half of the day begins on the other side of midnight.
    fn count_from_first(&mut self, scale: Scale) {
        let Scale::TimeOfDay { dated } = scale else {
            return;
        };
        let Some(first) = self.main().ordered.t_us.first().copied() else {
            return;
        };
        let zero = if dated { 0 } else { first };
        for track in [&mut self.pv, &mut self.op, &mut self.sp, &mut self.mode]
            .into_iter()
            .flatten()
        {
            let begins = track.ordered.t_us.first().copied().unwrap_or(first);
            let days = if begins - first < -DAY_US / 2 {
                DAY_US
            } else if begins - first > DAY_US / 2 {
                -DAY_US
            } else {
                0
            };
            for t_us in &mut Rc::make_mut(&mut track.ordered).t_us {
                *t_us += days - zero;
            }
        }
    }
}

/// The text in the tag column for each signal, and what the table lacks.
pub(super) type Texts = (BTreeMap<Role, String>, Vec<Problem>);

/// The text in the tag column that stands for each signal of the loop.
pub(super) fn series_texts(
    request: &LogRequest,
    understood: &Understood<'_>,
    rows: &Rows,
) -> Result<Texts, Vec<Problem>> {
    let table = understood.table;
    let tag_column = understood
        .roles
        .column(Role::Tag)
        .expect("a long table has a tag column");
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
    // A name that another file may bear.
    let mut absent = Vec::new();
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
                None => (if understood.partial {
                    &mut absent
                } else {
                    &mut problems
                })
                .push(Problem::error(
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
    let mut missing = absent;
    if problems.is_empty() && missing.is_empty() {
        for role in [Role::Pv, Role::Op] {
            if !found.contains_key(&role) {
                missing.push(
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
    if !understood.partial || found.is_empty() {
        problems.append(&mut missing);
    }
    if problems.is_empty() {
        Ok((found, missing))
    } else {
        Err(problems)
    }
}

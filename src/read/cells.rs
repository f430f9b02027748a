//! The cells of a loop's signals as samples.

use super::collect::BadCells;
use super::extract::Understood;
use super::headings::Role;
use super::numbers::DecimalSign;
use super::series::Series;
use super::table::{Cell, Row};
use super::tracks::{Track, Tracks};
use super::values::{self, Value};
use super::{LogRequest, LogRule};
use crate::notice::{Place, Problem};
use crate::quantity::Span;
use std::collections::BTreeMap;

/// Samples farther outside the range than this part of it are bad.
const OUTSIDE_RANGE: f64 = 0.10;
/// Where at least this part of the rows lacks the PV and has the OP, and as many the other way
/// round, the signals were written each at its own times.
const OWN_TIMES: f64 = 0.05;

/// Samples of one file on its own clock, microseconds; one entry per moment.
#[derive(Debug, Clone, Default)]
pub(super) struct FileSamples {
    pub t_us: Vec<i64>,
    pub pv: Vec<f64>,
    pub good: Vec<bool>,
    /// Why a sample is bad, an index into `causes`.
    pub cause: Vec<Option<usize>>,
    pub causes: Vec<String>,
    pub op: Vec<f64>,
    pub sp: Option<Vec<f64>>,
    pub mode: Option<Vec<String>>,
}

impl FileSamples {
    /// Good samples of the PV.
    pub fn good_count(&self) -> usize {
        (0..self.t_us.len())
            .filter(|&k| self.good[k] && self.pv[k].is_finite())
            .count()
    }

    /// Bad samples by cause.
    pub fn bad_by_cause(&self) -> BTreeMap<String, usize> {
        let mut counts = BTreeMap::new();
        for cause in self.cause.iter().flatten() {
            *counts.entry(self.causes[*cause].clone()).or_insert(0) += 1;
        }
        counts
    }

    fn cause(&mut self, text: &str) -> usize {
        match self.causes.iter().position(|known| known == text) {
            Some(index) => index,
            None => {
                self.causes.push(text.to_owned());
                self.causes.len() - 1
            }
        }
    }

    pub fn push_pv(&mut self, t_us: i64, reading: Reading) {
        self.t_us.push(t_us);
        self.pv.push(reading.value);
        self.good.push(reading.bad.is_none());
        let cause = reading.bad.map(|text| self.cause(&text));
        self.cause.push(cause);
    }
}

/// A value, and why it is bad where it is.
#[derive(Debug, Clone)]
pub(super) struct Reading {
    pub value: f64,
    pub bad: Option<String>,
}

/// Reads the cells of a loop's signals.
pub(super) struct CellReader<'a> {
    pub understood: &'a Understood<'a>,
    pub decimal: DecimalSign,
    pub rule: &'a LogRule,
    pub request: &'a LogRequest,
}

/// Cells of OP and SP that held no value, by cause.
#[derive(Default)]
struct Lost(BTreeMap<String, usize>);

impl CellReader<'_> {
    /// The samples within `wanted` (first and last microsecond).
    ///
    /// # Errors
    /// Where a cell is neither a number nor a known text for a bad sample.
    pub fn samples(
        &self,
        tracks: &Tracks,
        wanted: (i64, i64),
        warnings: &mut Vec<Problem>,
    ) -> Result<FileSamples, Vec<Problem>> {
        let roles = &self.understood.roles;
        if roles.long || !roles.own_times.is_empty() {
            return Ok(self.series(tracks, wanted, warnings)?.join(wanted.0));
        }
        let mut bad_cells = BadCells::default();
        let mut lost = BTreeMap::new();
        let samples = self.side_by_side(tracks, wanted, &mut bad_cells, &mut lost, warnings);
        self.tell(bad_cells, lost, warnings)?;
        Ok(samples)
    }

    /// The signals within `wanted`, each at its own times; what OP, SP and mode were before is kept, since it
    /// is still held within.
    ///
    /// # Errors
    /// As [`CellReader::samples`].
    pub fn series(
        &self,
        tracks: &Tracks,
        wanted: (i64, i64),
        warnings: &mut Vec<Problem>,
    ) -> Result<Series, Vec<Problem>> {
        let mut bad_cells = BadCells::default();
        let mut lost = BTreeMap::new();
        let series = self.each_signal(tracks, wanted, &mut bad_cells, &mut lost);
        self.tell(bad_cells, lost, warnings)?;
        Ok(series)
    }

    /// Refuses what cannot be read, warns of what was lost.
    fn tell(
        &self,
        bad_cells: BadCells,
        lost: BTreeMap<Role, Lost>,
        warnings: &mut Vec<Problem>,
    ) -> Result<(), Vec<Problem>> {
        bad_cells.finish(self.understood.table.place())?;
        for (role, Lost(causes)) in lost {
            let total: usize = causes.values().sum();
            let listed: Vec<String> = causes
                .iter()
                .map(|(cause, count)| format!("{cause}: {count}"))
                .collect();
            warnings.push(Problem::warning(
                self.understood.table.place(),
                format!(
                    "{total} {} of the {} without a value ({}); the value before is held",
                    if total == 1 { "cell" } else { "cells" },
                    Role::name(role),
                    listed.join(", ")
                ),
            ));
        }
        Ok(())
    }

    fn place(&self, row: Row<'_>, column: usize) -> Place {
        let heading = &self.understood.layout.headings[column].text;
        self.understood
            .table
            .place()
            .row(row.number)
            .column(column, (!heading.is_empty()).then_some(heading.as_str()))
    }

    /// A cell of PV, OP or SP; a cell that cannot be read is put among the bad ones.
    fn value(&self, row: Row<'_>, column: usize, bad_cells: &mut BadCells) -> Reading {
        let cell = row.cell(column);
        match values::value(cell, self.decimal, &self.rule.bad_values) {
            Value::Number(value) => Reading { value, bad: None },
            Value::Bad(cause) => Reading {
                value: f64::NAN,
                bad: Some(cause),
            },
            Value::Unreadable => {
                bad_cells.add(|| {
                    Problem::error(
                        self.place(row, column),
                        format!("\"{}\" is not a number", cell.text()),
                    )
                    .hint("correct it, or name the text under bad_values in a [[log]] table of job.toml")
                });
                Reading {
                    value: f64::NAN,
                    bad: Some(String::new()),
                }
            }
        }
    }

    /// Why a sample is bad for its quality, where it is.
    fn bad_quality(&self, row: Row<'_>, bad_cells: &mut BadCells) -> Option<String> {
        let column = self.understood.roles.column(Role::Quality)?;
        let cell = row.cell(column);
        match values::is_good(cell, &self.rule.bad_values) {
            Some(true) => None,
            Some(false) => Some(format!("quality {}", cell.text())),
            // An empty quality beside a value says nothing against it in exports that write only
            // what is not good.
            None if cell.is_empty() => None,
            None => {
                bad_cells.add(|| {
                    Problem::error(
                        self.place(row, column),
                        format!("\"{}\" is not a known quality", cell.text()),
                    )
                    .hint("name it under bad_values in a [[log]] table of job.toml where it means a bad sample, or name another quality column")
                });
                None
            }
        }
    }

    /// The PV of a row in the schedule's unit.
    fn pv(&self, row: Row<'_>, column: usize, bad_cells: &mut BadCells) -> Reading {
        let mut reading = self.value(row, column, bad_cells);
        reading.value = self.scaled(reading.value);
        if reading.bad.is_none() {
            reading.bad = self.bad_quality(row, bad_cells).or_else(|| {
                is_outside(reading.value, self.request.pv_span)
                    .then(|| "outside the range".to_owned())
            });
        }
        reading
    }

    fn scaled(&self, value: f64) -> f64 {
        value * self.request.pv_scale.unwrap_or(1.0) + self.request.pv_offset.unwrap_or(0.0)
    }

    /// OP or SP of a row; NaN where it holds none.
    fn other(
        &self,
        row: Row<'_>,
        column: usize,
        role: Role,
        bad_cells: &mut BadCells,
        lost: &mut BTreeMap<Role, Lost>,
    ) -> f64 {
        let mut reading = self.value(row, column, bad_cells);
        let span = if role == Role::Op {
            self.request.op_span
        } else {
            reading.value = self.scaled(reading.value);
            self.request.pv_span
        };
        if reading.bad.is_none() && is_outside(reading.value, span) {
            reading.bad = Some("outside the range".to_owned());
        }
        match reading.bad {
            None => reading.value,
            Some(cause) => {
                let Lost(causes) = lost.entry(role).or_default();
                *causes.entry(cause).or_insert(0) += 1;
                f64::NAN
            }
        }
    }

    /// A table with the signals side by side: one sample per row.
    fn side_by_side(
        &self,
        tracks: &Tracks,
        wanted: (i64, i64),
        bad_cells: &mut BadCells,
        lost: &mut BTreeMap<Role, Lost>,
        warnings: &mut Vec<Problem>,
    ) -> FileSamples {
        let table = self.understood.table;
        let own_times = self.has_own_times(tracks, wanted);
        if own_times {
            warnings.push(Problem::warning(
                table.place(),
                "PV and OP are written at times of their own; empty cells were read as no sample",
            ));
        }
        let mut samples = FileSamples {
            sp: tracks.sp.as_ref().map(|_| Vec::new()),
            mode: tracks.mode.as_ref().map(|_| Vec::new()),
            ..FileSamples::default()
        };
        let mut mode_held = String::new();
        let Some(pv) = &tracks.pv else {
            return samples;
        };
        for (t_us, index) in within(pv, wanted) {
            let row = table.row(index);
            let is_empty = |column: usize| row.cell(column).is_empty();
            if own_times && is_empty(pv.column) {
                samples.push_pv(
                    t_us,
                    Reading {
                        value: f64::NAN,
                        bad: None,
                    },
                );
            } else {
                let reading = self.pv(row, pv.column, bad_cells);
                samples.push_pv(t_us, reading);
            }
            let mut other = |track: &Track, role: Role| {
                if own_times && is_empty(track.column) {
                    f64::NAN
                } else {
                    self.other(row, track.column, role, bad_cells, lost)
                }
            };
            samples.op.push(
                tracks
                    .op
                    .as_ref()
                    .map_or(f64::NAN, |op| other(op, Role::Op)),
            );
            if let (Some(sp), Some(track)) = (&mut samples.sp, &tracks.sp) {
                sp.push(other(track, Role::Sp));
            }
            if let (Some(mode), Some(track)) = (&mut samples.mode, &tracks.mode) {
                let cell = row.cell(track.column);
                if !cell.is_empty() {
                    mode_held = cell.text();
                }
                mode.push(mode_held.clone());
            }
        }
        samples
    }

    /// Whether PV and OP stand in rows of their own.
    fn has_own_times(&self, tracks: &Tracks, wanted: (i64, i64)) -> bool {
        let (Some(pv), Some(op)) = (&tracks.pv, &tracks.op) else {
            return false;
        };
        let (mut rows, mut pv_only, mut op_only) = (0, 0, 0);
        for (_, index) in within(pv, wanted) {
            let row = self.understood.table.row(index);
            let has = |column: usize| !matches!(row.cell(column), Cell::Empty);
            rows += 1;
            pv_only += usize::from(has(pv.column) && !has(op.column));
            op_only += usize::from(!has(pv.column) && has(op.column));
        }
        let share = |count: usize| count as f64 > OWN_TIMES * rows as f64;
        share(pv_only) && share(op_only)
    }

    fn each_signal(
        &self,
        tracks: &Tracks,
        wanted: (i64, i64),
        bad_cells: &mut BadCells,
        lost: &mut BTreeMap<Role, Lost>,
    ) -> Series {
        let table = self.understood.table;
        let until = (i64::MIN, wanted.1);
        let is_long = self.understood.roles.long;
        let pv = tracks.pv.as_ref().map(|track| {
            within(track, wanted)
                .map(|(t_us, index)| (t_us, self.pv(table.row(index), track.column, bad_cells)))
                .collect()
        });
        let mut series = |track: &Option<Track>, role: Role| -> Option<Vec<(i64, f64)>> {
            let track = track.as_ref()?;
            let read = |(t_us, index)| {
                let row = table.row(index);
                // In a long table each row has its own quality; else the column is that of the PV.
                let quality = if is_long {
                    self.bad_quality(row, bad_cells)
                } else {
                    None
                };
                let value = match quality {
                    None => self.other(row, track.column, role, bad_cells, lost),
                    Some(cause) => {
                        let Lost(causes) = lost.entry(role).or_default();
                        *causes.entry(cause).or_insert(0) += 1;
                        f64::NAN
                    }
                };
                (t_us, value)
            };
            let values: Vec<(i64, f64)> = within(track, until).map(read).collect();
            Some(
                values
                    .into_iter()
                    .filter(|(_, value)| value.is_finite())
                    .collect(),
            )
        };
        let op = series(&tracks.op, Role::Op);
        let sp = series(&tracks.sp, Role::Sp);
        let mode = tracks.mode.as_ref().map(|track| {
            within(track, until)
                .map(|(t_us, index)| (t_us, table.row(index).cell(track.column).text()))
                .filter(|(_, mode)| !mode.is_empty())
                .collect()
        });
        Series { pv, op, sp, mode }
    }
}

/// Moments of a track within `wanted`, each with its row of the table.
fn within(track: &Track, wanted: (i64, i64)) -> impl Iterator<Item = (i64, usize)> {
    let t_us = &track.ordered.t_us;
    let first = t_us.partition_point(|t| *t < wanted.0);
    let end = t_us.partition_point(|t| *t <= wanted.1).max(first);
    (first..end).map(|k| (t_us[k], track.rows[track.ordered.rows[k]]))
}

fn is_outside(value: f64, span: Option<Span>) -> bool {
    span.is_some_and(|span| {
        let slack = OUTSIDE_RANGE * span.width();
        value < span.low() - slack || value > span.high() + slack
    })
}

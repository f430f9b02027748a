//! The cells of a loop's signals as samples.

use super::collect::BadCells;
use super::columns::Columns;
use super::extract::Understood;
use super::headings::Role;
use super::numbers::DecimalSign;
use super::order::Ordered;
use super::rows::Rows;
use super::table::Row;
use super::tracks::{LongTracks, Track, Tracks, WideTracks};
use super::values::{self, Value};
use super::{LogRequest, LogRule};
use crate::notice::{Place, Problem};
use crate::quantity::Span;
use std::collections::BTreeMap;
use std::ops::Range;

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
    /// Bad samples by cause.
    pub bad: BTreeMap<String, usize>,
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

    fn push_pv(&mut self, t_us: i64, reading: Reading) {
        self.t_us.push(t_us);
        self.pv.push(reading.value);
        self.good.push(reading.bad.is_none());
        self.count(reading.bad);
    }

    fn count(&mut self, bad: Option<String>) {
        if let Some(cause) = bad {
            *self.bad.entry(cause).or_insert(0) += 1;
        }
    }
}

/// A value, and why it is bad where it is.
struct Reading {
    value: f64,
    bad: Option<String>,
}

impl Reading {
    /// Of a time at which the PV was not sampled.
    const NONE: Reading = Reading {
        value: f64::NAN,
        bad: None,
    };
}

/// Where a cell stands: its row in the table, and its column.
#[derive(Clone, Copy)]
struct At {
    row: usize,
    column: usize,
}

/// Reads the cells of a loop's signals.
pub(super) struct CellReader<'a> {
    pub understood: &'a Understood<'a>,
    /// Column of the PV's quality.
    pub quality: Option<usize>,
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
        tracks: Tracks,
        columns: &mut Columns,
        wanted: (i64, i64),
        warnings: &mut Vec<Problem>,
    ) -> Result<FileSamples, Vec<Problem>> {
        let mut bad_cells = BadCells::default();
        let mut lost = BTreeMap::new();
        let samples = match tracks {
            Tracks::Long(long) => self.joined(&long, columns, wanted, &mut bad_cells, &mut lost),
            Tracks::Wide(wide) => {
                self.side_by_side(wide, columns, wanted, &mut bad_cells, &mut lost, warnings)
            }
        };
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
        Ok(samples)
    }

    fn place(&self, row: Row<'_>, column: usize) -> Place {
        let heading = &self.understood.layout.headings[column].text;
        self.understood
            .table
            .place()
            .row(row.number)
            .column(column, (!heading.is_empty()).then_some(heading.as_str()))
    }

    /// A cell of PV, OP or SP; `number` is what it plainly holds, NaN where it does not. A cell that
    /// cannot be read is put among the bad ones.
    fn value(&self, at: At, number: f64, bad_cells: &mut BadCells) -> Reading {
        if !number.is_nan() {
            return Reading {
                value: number,
                bad: None,
            };
        }
        let (row, column) = (self.understood.table.row(at.row), at.column);
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
    fn bad_quality(&self, row: usize, bad_cells: &mut BadCells) -> Option<String> {
        let column = self.quality?;
        let cell = self.understood.table.cell(row, column);
        match values::is_good(cell, &self.rule.bad_values) {
            Some(true) => None,
            Some(false) => Some(format!("quality {}", cell.text())),
            // An empty quality beside a value says nothing against it in exports that write only
            // what is not good.
            None if cell.is_empty() => None,
            None => {
                bad_cells.add(|| {
                    Problem::error(
                        self.place(self.understood.table.row(row), column),
                        format!("\"{}\" is not a known quality", cell.text()),
                    )
                    .hint("name it under bad_values in a [[log]] table of job.toml where it means a bad sample, or name another quality column")
                });
                None
            }
        }
    }

    /// The PV of a row in the schedule's unit.
    fn pv(&self, at: At, number: f64, bad_cells: &mut BadCells) -> Reading {
        let mut reading = self.value(at, number, bad_cells);
        reading.value = self.scaled(reading.value);
        if reading.bad.is_none() {
            reading.bad = self.bad_quality(at.row, bad_cells).or_else(|| {
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
        at: At,
        number: f64,
        role: Role,
        bad_cells: &mut BadCells,
        lost: &mut BTreeMap<Role, Lost>,
    ) -> f64 {
        let mut reading = self.value(at, number, bad_cells);
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

    /// A table with the signals side by side: one sample per row. The columns themselves become the
    /// samples.
    fn side_by_side(
        &self,
        tracks: WideTracks,
        columns: &mut Columns,
        wanted: (i64, i64),
        bad_cells: &mut BadCells,
        lost: &mut BTreeMap<Role, Lost>,
        warnings: &mut Vec<Problem>,
    ) -> FileSamples {
        let table = self.understood.table;
        let Ordered { mut t_us, rows, .. } = tracks.ordered;
        let within = within(&t_us, wanted);
        let rows = rows.pick(&Rows::Run(within.clone()));
        t_us.truncate(within.end);
        t_us.drain(..within.start);
        let mut pv = columns.take(tracks.pv, &rows);
        let mut op = tracks
            .op
            .map(|column| (column, columns.take(column, &rows)));
        let mut sp = tracks
            .sp
            .map(|column| (column, columns.take(column, &rows)));
        let op_numbers = op.as_ref().map(|(column, op)| (*column, op.as_slice()));
        let own_times = self.has_own_times(&rows, (tracks.pv, &pv), op_numbers);
        if own_times {
            warnings.push(Problem::warning(
                table.place(),
                "PV and OP are written at times of their own; empty cells were read as no sample",
            ));
        }
        let mut samples = FileSamples {
            good: Vec::with_capacity(rows.len()),
            mode: tracks.mode.map(|_| Vec::new()),
            ..FileSamples::default()
        };
        let mut mode_held = String::new();
        for (k, row) in rows.iter().enumerate() {
            let not_sampled = |column: usize, number: f64| {
                own_times && number.is_nan() && table.cell(row, column).is_empty()
            };
            let at = |column: usize| At { row, column };
            let reading = if not_sampled(tracks.pv, pv[k]) {
                Reading::NONE
            } else {
                self.pv(at(tracks.pv), pv[k], bad_cells)
            };
            pv[k] = reading.value;
            samples.good.push(reading.bad.is_none());
            samples.count(reading.bad);
            for (role, signal) in [(Role::Op, &mut op), (Role::Sp, &mut sp)] {
                if let Some((column, numbers)) = signal
                    && !not_sampled(*column, numbers[k])
                {
                    numbers[k] = self.other(at(*column), numbers[k], role, bad_cells, lost);
                }
            }
            if let (Some(mode), Some(column)) = (&mut samples.mode, tracks.mode) {
                let cell = table.cell(row, column);
                if !cell.is_empty() {
                    mode_held = cell.text();
                }
                mode.push(mode_held.clone());
            }
        }
        samples.op = op.map_or_else(|| vec![f64::NAN; rows.len()], |(_, op)| op);
        samples.sp = sp.map(|(_, sp)| sp);
        samples.pv = pv;
        samples.t_us = t_us;
        samples
    }

    /// Whether PV and OP stand in rows of their own.
    fn has_own_times(
        &self,
        rows: &Rows,
        (pv, pv_numbers): (usize, &[f64]),
        op: Option<(usize, &[f64])>,
    ) -> bool {
        let Some((op, op_numbers)) = op else {
            return false;
        };
        let (mut pv_only, mut op_only) = (0, 0);
        for (k, row) in rows.iter().enumerate() {
            let has = |column: usize, number: f64| {
                !number.is_nan() || !self.understood.table.cell(row, column).is_empty()
            };
            let (has_pv, has_op) = (has(pv, pv_numbers[k]), has(op, op_numbers[k]));
            pv_only += usize::from(has_pv && !has_op);
            op_only += usize::from(!has_pv && has_op);
        }
        let share = |count: usize| count as f64 > OWN_TIMES * rows.len() as f64;
        share(pv_only) && share(op_only)
    }

    /// A long table: PV at its own times, OP, SP and mode held; an OP move between two samples of
    /// the PV gets a row of its own, without a PV, so that its time is kept.
    fn joined(
        &self,
        tracks: &LongTracks,
        columns: &mut Columns,
        wanted: (i64, i64),
        bad_cells: &mut BadCells,
        lost: &mut BTreeMap<Role, Lost>,
    ) -> FileSamples {
        let table = self.understood.table;
        // What stood before the cut is still held in it.
        let until = (i64::MIN, wanted.1);
        let mut series = |track: &Option<Track>, role: Role| -> Option<Vec<(i64, f64)>> {
            let track = track.as_ref()?;
            let numbers = columns.take(track.column, &track.ordered.rows);
            let read = |k: usize| {
                let (t_us, row) = (track.ordered.t_us[k], track.ordered.rows.get(k));
                let column = track.column;
                let value = match self.bad_quality(row, bad_cells) {
                    None => self.other(At { row, column }, numbers[k], role, bad_cells, lost),
                    Some(cause) => {
                        let Lost(causes) = lost.entry(role).or_default();
                        *causes.entry(cause).or_insert(0) += 1;
                        f64::NAN
                    }
                };
                (t_us, value)
            };
            let values: Vec<(i64, f64)> = within(&track.ordered.t_us, until).map(read).collect();
            Some(
                values
                    .into_iter()
                    .filter(|(_, value)| value.is_finite())
                    .collect(),
            )
        };
        let op = series(&tracks.op, Role::Op).unwrap_or_default();
        let sp = series(&tracks.sp, Role::Sp);
        let mode: Option<Vec<(i64, String)>> = tracks.mode.as_ref().map(|track| {
            let text = |k: usize| {
                let row = track.ordered.rows.get(k);
                (track.ordered.t_us[k], table.cell(row, track.column).text())
            };
            within(&track.ordered.t_us, until)
                .map(text)
                .filter(|(_, mode)| !mode.is_empty())
                .collect()
        });
        let mut moves: Vec<i64> = op
            .windows(2)
            .filter(|pair| pair[1].1 != pair[0].1 && pair[1].0 >= wanted.0)
            .map(|pair| pair[1].0)
            .collect();
        moves.reverse();
        let mut samples = FileSamples::default();
        let Track { column, ordered } = &tracks.pv;
        let column = *column;
        let numbers = columns.take(column, &ordered.rows);
        for k in within(&ordered.t_us, wanted) {
            let (t_us, row) = (ordered.t_us[k], ordered.rows.get(k));
            while let Some(at) = moves.pop_if(|at| *at <= t_us) {
                if at < t_us {
                    samples.push_pv(at, Reading::NONE);
                }
            }
            let reading = self.pv(At { row, column }, numbers[k], bad_cells);
            samples.push_pv(t_us, reading);
        }
        while let Some(at) = moves.pop() {
            samples.push_pv(at, Reading::NONE);
        }
        samples.op = held(&samples.t_us, &op, f64::NAN);
        samples.sp = sp.map(|sp| held(&samples.t_us, &sp, f64::NAN));
        samples.mode = mode.map(|mode| held(&samples.t_us, &mode, String::new()));
        samples
    }
}

/// Places of the moments within `wanted`.
fn within(t_us: &[i64], wanted: (i64, i64)) -> Range<usize> {
    let first = t_us.partition_point(|t| *t < wanted.0);
    let end = t_us.partition_point(|t| *t <= wanted.1).max(first);
    first..end
}

/// The value that holds at each time: the last one at or before it.
fn held<T: Clone>(t_us: &[i64], series: &[(i64, T)], before: T) -> Vec<T> {
    let mut next = 0;
    t_us.iter()
        .map(|t| {
            while series.get(next).is_some_and(|(at, _)| at <= t) {
                next += 1;
            }
            match next {
                0 => before.clone(),
                _ => series[next - 1].1.clone(),
            }
        })
        .collect()
}

fn is_outside(value: f64, span: Option<Span>) -> bool {
    span.is_some_and(|span| {
        let slack = OUTSIDE_RANGE * span.width();
        value < span.low() - slack || value > span.high() + slack
    })
}

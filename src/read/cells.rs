//! The cells of a loop's signals as samples.

use super::collect::BadCells;
use super::columns::Columns;
use super::extract::Understood;
use super::headings::Role;
use super::numbers::DecimalSign;
use super::order::Ordered;
use super::rows::Rows;
use super::series::Series;
use super::table::Row;
use super::tracks::{Track, Tracks};
use super::values::{self, Value};
use super::{LogRequest, LogRule};
use crate::notice::{Place, Problem};
use crate::quantity::Span;
use std::collections::BTreeMap;
use std::ops::Range;
use std::rc::Rc;

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

    pub fn push_pv(&mut self, t_us: i64, reading: Reading) {
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
#[derive(Debug, Clone)]
pub(super) struct Reading {
    pub value: f64,
    pub bad: Option<String>,
}

impl Reading {
    /// Of a time at which the PV was not sampled.
    pub const NONE: Reading = Reading {
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
        let roles = &self.understood.roles;
        if roles.long || !roles.own_times.is_empty() {
            let series = self.series(&tracks, columns, wanted, warnings)?;
            return Ok(series.join(wanted.0));
        }
        let mut bad_cells = BadCells::default();
        let mut lost = BTreeMap::new();
        let samples =
            self.side_by_side(tracks, columns, wanted, &mut bad_cells, &mut lost, warnings);
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
        columns: &mut Columns,
        wanted: (i64, i64),
        warnings: &mut Vec<Problem>,
    ) -> Result<Series, Vec<Problem>> {
        let mut bad_cells = BadCells::default();
        let mut lost = BTreeMap::new();
        let series = self.each_signal(tracks, columns, wanted, &mut bad_cells, &mut lost);
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
        tracks: Tracks,
        columns: &mut Columns,
        wanted: (i64, i64),
        bad_cells: &mut BadCells,
        lost: &mut BTreeMap<Role, Lost>,
        warnings: &mut Vec<Problem>,
    ) -> FileSamples {
        let table = self.understood.table;
        let column_of = |track: Option<Track>| track.map(|track| track.column);
        let (op, sp) = (column_of(tracks.op), column_of(tracks.sp));
        let mode = column_of(tracks.mode);
        let Some(pv) = tracks.pv else {
            return FileSamples::default();
        };
        let pv_column = pv.column;
        // Nobody shares the order any more.
        let Ordered { mut t_us, rows, .. } = Rc::unwrap_or_clone(pv.ordered);
        let within = within(&t_us, wanted);
        let rows = rows.pick(&Rows::Run(within.clone()));
        t_us.truncate(within.end);
        t_us.drain(..within.start);
        let mut pv = columns.take(pv_column, &rows);
        let mut op = op.map(|column| (column, columns.take(column, &rows)));
        let mut sp = sp.map(|column| (column, columns.take(column, &rows)));
        let op_numbers = op.as_ref().map(|(column, op)| (*column, op.as_slice()));
        let own_times = self.has_own_times(&rows, (pv_column, &pv), op_numbers);
        if own_times {
            warnings.push(Problem::warning(
                table.place(),
                "PV and OP are written at times of their own; empty cells were read as no sample",
            ));
        }
        let mut samples = FileSamples {
            good: Vec::with_capacity(rows.len()),
            mode: mode.map(|_| Vec::new()),
            ..FileSamples::default()
        };
        let mut mode_held = String::new();
        for (k, row) in rows.iter().enumerate() {
            let not_sampled = |column: usize, number: f64| {
                own_times && number.is_nan() && table.cell(row, column).is_empty()
            };
            let at = |column: usize| At { row, column };
            let reading = if not_sampled(pv_column, pv[k]) {
                Reading::NONE
            } else {
                self.pv(at(pv_column), pv[k], bad_cells)
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
            if let (Some(modes), Some(column)) = (&mut samples.mode, mode) {
                let cell = table.cell(row, column);
                if !cell.is_empty() {
                    mode_held = cell.text();
                }
                modes.push(mode_held.clone());
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

    /// Each signal on its own.
    fn each_signal(
        &self,
        tracks: &Tracks,
        columns: &mut Columns,
        wanted: (i64, i64),
        bad_cells: &mut BadCells,
        lost: &mut BTreeMap<Role, Lost>,
    ) -> Series {
        let table = self.understood.table;
        let until = (i64::MIN, wanted.1);
        let is_long = self.understood.roles.long;
        let pv = tracks.pv.as_ref().map(|Track { column, ordered }| {
            let numbers = columns.pick(*column, &ordered.rows);
            let read = |k: usize| {
                let (row, column) = (ordered.rows.get(k), *column);
                let reading = self.pv(At { row, column }, numbers[k], bad_cells);
                (ordered.t_us[k], reading)
            };
            within(&ordered.t_us, wanted).map(read).collect()
        });
        let mut series = |track: &Option<Track>, role: Role| -> Option<Vec<(i64, f64)>> {
            let Track { column, ordered } = track.as_ref()?;
            let numbers = columns.pick(*column, &ordered.rows);
            let read = |k: usize| {
                let (row, column) = (ordered.rows.get(k), *column);
                // In a long table each row has its own quality; else the column is that of the PV.
                let quality = if is_long {
                    self.bad_quality(row, bad_cells)
                } else {
                    None
                };
                let value = match quality {
                    None => self.other(At { row, column }, numbers[k], role, bad_cells, lost),
                    Some(cause) => {
                        let Lost(causes) = lost.entry(role).or_default();
                        *causes.entry(cause).or_insert(0) += 1;
                        f64::NAN
                    }
                };
                (ordered.t_us[k], value)
            };
            let values: Vec<(i64, f64)> = within(&ordered.t_us, until).map(read).collect();
            Some(
                values
                    .into_iter()
                    .filter(|(_, value)| value.is_finite())
                    .collect(),
            )
        };
        let op = series(&tracks.op, Role::Op);
        let sp = series(&tracks.sp, Role::Sp);
        let mode = tracks.mode.as_ref().map(|Track { column, ordered }| {
            within(&ordered.t_us, until)
                .map(|k| {
                    (
                        ordered.t_us[k],
                        table.cell(ordered.rows.get(k), *column).text(),
                    )
                })
                .filter(|(_, mode)| !mode.is_empty())
                .collect()
        });
        Series { pv, op, sp, mode }
    }
}

/// Places of the moments within `wanted`.
fn within(t_us: &[i64], wanted: (i64, i64)) -> Range<usize> {
    let first = t_us.partition_point(|t| *t < wanted.0);
    let end = t_us.partition_point(|t| *t <= wanted.1).max(first);
    first..end
}

fn is_outside(value: f64, span: Option<Span>) -> bool {
    span.is_some_and(|span| {
        let slack = OUTSIDE_RANGE * span.width();
        value < span.low() - slack || value > span.high() + slack
    })
}

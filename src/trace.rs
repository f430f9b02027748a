//! Samples of one loop on one clock.

use crate::quantity::Span;
use chrono::{NaiveDateTime, TimeDelta};
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};
use std::cmp::Ordering;
use std::fmt;
use thiserror::Error;

/// Where a log's second 0 lies.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Clock {
    /// Second 0 is this date and time of day, as exported.
    Dated(NaiveDateTime),
    /// The log counts seconds from its own beginning; it bears no date.
    Elapsed,
}

/// A moment of a log: date and time of day, or elapsed seconds where the log bears no date.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(untagged)]
pub enum Moment {
    /// Date and time of day.
    Dated(NaiveDateTime),
    /// Seconds from the beginning of the log.
    Elapsed(f64),
}

impl fmt::Display for Moment {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Moment::Dated(at) => write!(f, "{}", at.format("%Y-%m-%d %H:%M:%S")),
            Moment::Elapsed(seconds) => write!(f, "{seconds:.0} s"),
        }
    }
}

impl Clock {
    /// The moment `t_s` seconds after the clock's second 0.
    pub fn at(self, t_s: f64) -> Moment {
        match self {
            Clock::Dated(zero) => {
                Moment::Dated(zero + TimeDelta::microseconds(libm::round(t_s * 1e6) as i64))
            }
            Clock::Elapsed => Moment::Elapsed(t_s),
        }
    }
}

/// A stretch without usable PV samples, seconds on the log's clock.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Gap {
    /// Last good sample before it.
    pub from_s: f64,
    /// First good sample after it.
    pub to_s: f64,
}

/// The columns of a log for one loop, in engineering units as exported, on one clock.
///
/// All columns have one value per time; times increase strictly. A PV that is missing or was
/// marked bad is not good; its value is kept where it was a number, else it is NaN. A good PV that
/// is NaN was not sampled at that time, which belongs to the OP alone (signals written at times of
/// their own). OP and SP are NaN where the export left them out before their first value.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Samples {
    /// Seconds on the log's clock.
    pub t_s: Vec<f64>,
    /// PV, engineering units.
    pub pv: Vec<f64>,
    /// Whether the PV may be used.
    pub good: Vec<bool>,
    /// OP, in the OP's own unit.
    pub op: Vec<f64>,
    /// SP, engineering units of the PV; empty where not logged.
    pub sp: Vec<f64>,
    /// Controller mode as exported; empty where not logged.
    pub mode: Vec<String>,
    /// Whether the mode means manual; empty where not logged.
    pub manual: Vec<bool>,
}

/// Why columns do not make a trace.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum TraceError {
    /// Columns of different length.
    #[error("columns of different length: {0}")]
    Lengths(String),
    /// Time does not increase strictly.
    #[error("time does not increase at sample {0}")]
    Time(usize),
    /// No good PV with a known OP is left.
    #[error("the log has no good sample of the PV with a known OP")]
    Empty,
}

/// One loop's log ready for analysis: seconds and percent of span, good PV samples only, OP known
/// at every sample and held between samples. Times increase strictly, nothing is NaN.
#[derive(Debug, Clone, PartialEq)]
pub struct Trace {
    t_s: Vec<f64>,
    pv: Vec<f64>,
    op: Vec<f64>,
    sp: Vec<f64>,
    manual: Vec<bool>,
    /// OP at the log's own sample times, also where the PV was bad: moves are not lost in a gap.
    op_t_s: Vec<f64>,
    op_all: Vec<f64>,
    /// Times of all good samples, also of those that were thinned out.
    pv_t_s: Vec<f64>,
    bad_t_s: Vec<f64>,
    interval_s: f64,
}

impl Trace {
    /// The samples in percent; bad PV samples are left out, their times kept for counting.
    ///
    /// # Errors
    /// Where the columns do not fit each other or no usable sample is left.
    pub fn new(samples: &Samples, pv_span: Span, op_span: Span) -> Result<Self, TraceError> {
        let n = samples.t_s.len();
        for (name, len, optional) in [
            ("pv", samples.pv.len(), false),
            ("good", samples.good.len(), false),
            ("op", samples.op.len(), false),
            ("sp", samples.sp.len(), true),
            ("mode", samples.manual.len(), true),
        ] {
            if len != n && !(optional && len == 0) {
                return Err(TraceError::Lengths(format!("{n} times, {len} of {name}")));
            }
        }
        if let Some(k) = samples
            .t_s
            .windows(2)
            .position(|w| w[0].partial_cmp(&w[1]) != Some(Ordering::Less))
        {
            return Err(TraceError::Time(k + 1));
        }
        let mut trace = Trace {
            t_s: Vec::with_capacity(n),
            pv: Vec::with_capacity(n),
            op: Vec::with_capacity(n),
            sp: Vec::new(),
            manual: Vec::new(),
            op_t_s: Vec::with_capacity(n),
            op_all: Vec::with_capacity(n),
            pv_t_s: Vec::new(),
            bad_t_s: Vec::new(),
            interval_s: 0.0,
        };
        let mut op_held = f64::NAN;
        let mut sp_held = f64::NAN;
        for k in 0..n {
            if samples.op[k].is_finite() {
                op_held = op_span.percent(samples.op[k]);
            }
            if let Some(sp) = samples.sp.get(k).filter(|sp| sp.is_finite()) {
                sp_held = pv_span.percent(*sp);
            }
            if op_held.is_nan() {
                continue;
            }
            trace.op_t_s.push(samples.t_s[k]);
            trace.op_all.push(op_held);
            if !samples.good[k] {
                trace.bad_t_s.push(samples.t_s[k]);
                continue;
            }
            if !samples.pv[k].is_finite() {
                continue;
            }
            trace.t_s.push(samples.t_s[k]);
            trace.pv.push(pv_span.percent(samples.pv[k]));
            trace.op.push(op_held);
            if !samples.sp.is_empty() {
                trace.sp.push(sp_held);
            }
            if !samples.manual.is_empty() {
                trace.manual.push(samples.manual[k]);
            }
        }
        if trace.t_s.is_empty() {
            return Err(TraceError::Empty);
        }
        // Before its first value the SP is taken as that value: no move is made up of what is not known.
        match trace.sp.iter().find(|sp| !sp.is_nan()).copied() {
            Some(first) => {
                for sp in trace.sp.iter_mut().take_while(|sp| sp.is_nan()) {
                    *sp = first;
                }
            }
            None => trace.sp.clear(),
        }
        trace.pv_t_s.clone_from(&trace.t_s);
        trace.interval_s = median_interval(&trace.t_s);
        Ok(trace)
    }

    /// Number of good samples.
    pub fn len(&self) -> usize {
        self.t_s.len()
    }

    /// Never true: a trace has at least one sample.
    pub fn is_empty(&self) -> bool {
        self.t_s.is_empty()
    }

    /// Times of the good samples, seconds on the log's clock, strictly increasing.
    pub fn t_s(&self) -> &[f64] {
        &self.t_s
    }

    /// PV of the good samples, percent of span.
    pub fn pv(&self) -> &[f64] {
        &self.pv
    }

    /// OP at the good samples, percent of OP span.
    pub fn op(&self) -> &[f64] {
        &self.op
    }

    /// SP at the good samples, percent of PV span; `None` where not logged.
    pub fn sp(&self) -> Option<&[f64]> {
        (!self.sp.is_empty()).then_some(&self.sp)
    }

    /// Whether the loop was in manual at the good samples; `None` where no mode was logged.
    pub fn manual(&self) -> Option<&[bool]> {
        (!self.manual.is_empty()).then_some(&self.manual)
    }

    /// Every logged OP (also where the PV was bad): times, s, and values, percent.
    pub fn op_log(&self) -> (&[f64], &[f64]) {
        (&self.op_t_s, &self.op_all)
    }

    /// Times of the bad PV samples, s.
    pub fn bad_t_s(&self) -> &[f64] {
        &self.bad_t_s
    }

    /// Times of all good samples as logged, s: of a thinned trace more than its own.
    pub fn logged_t_s(&self) -> &[f64] {
        &self.pv_t_s
    }

    /// Median time between good samples, s; 0 for a single sample.
    pub fn interval_s(&self) -> f64 {
        self.interval_s
    }

    /// The same log with only each n-th refresh of the PV left, for a PV that is held between
    /// refreshes (an analyser's cycle): indices of the good samples to keep.
    pub fn thinned(&self, keep: &[usize]) -> Trace {
        let pick = |values: &[f64]| keep.iter().map(|&k| values[k]).collect::<Vec<_>>();
        let t_s = pick(&self.t_s);
        Trace {
            interval_s: median_interval(&t_s),
            t_s,
            pv: pick(&self.pv),
            op: pick(&self.op),
            sp: if self.sp.is_empty() {
                Vec::new()
            } else {
                pick(&self.sp)
            },
            manual: if self.manual.is_empty() {
                Vec::new()
            } else {
                keep.iter().map(|&k| self.manual[k]).collect()
            },
            op_t_s: self.op_t_s.clone(),
            op_all: self.op_all.clone(),
            pv_t_s: self.pv_t_s.clone(),
            bad_t_s: self.bad_t_s.clone(),
        }
    }
}

impl Trace {
    /// The same samples with other values of the OP, percent: one for each that was logged, in order.
    pub fn with_op_log(&self, op: Vec<f64>) -> Trace {
        let held = |t: &f64| {
            let here = self.op_t_s.partition_point(|logged| logged <= t);
            op[here.saturating_sub(1)]
        };
        Trace {
            op: self.t_s.iter().map(held).collect(),
            op_all: op,
            ..self.clone()
        }
    }

    /// Indices of the good samples at which the PV was refreshed, where it is held for several
    /// samples between refreshes (an analyser's cycle); `None` where each sample stands for itself.
    ///
    /// Told from a coarse resolution, whose values also repeat, by the changes being of many sizes
    /// and a constant number of samples apart.
    pub fn refreshes(&self) -> Option<Vec<usize>> {
        let changes: Vec<usize> = (1..self.len())
            .filter(|&k| self.pv[k] != self.pv[k - 1])
            .collect();
        // With fewer refreshes than this no cycle can be told.
        if changes.len() < 8 || self.len() < 3 * changes.len() {
            return None;
        }
        let mut cycles: Vec<f64> = changes
            .windows(2)
            .map(|w| self.t_s[w[1]] - self.t_s[w[0]])
            .collect();
        let middle = cycles.len() / 2;
        let cycle = *cycles.select_nth_unstable_by(middle, f64::total_cmp).1;
        let slack = (1.01 * self.interval_s).max(0.1 * cycle);
        // A refresh that brings the same value again is not seen: whole multiples count as well.
        let on_cycle = cycles
            .iter()
            .filter(|c| {
                let multiple = libm::round(*c / cycle);
                (1.0..=4.0).contains(&multiple) && (*c - multiple * cycle).abs() <= slack
            })
            .count();
        let once = cycles
            .iter()
            .filter(|c| (*c - cycle).abs() <= slack)
            .count();
        let mut sizes: Vec<f64> = changes
            .iter()
            .map(|&k| (self.pv[k] - self.pv[k - 1]).abs())
            .collect();
        sizes.sort_by(f64::total_cmp);
        let smallest = sizes.iter().filter(|s| **s < 1.01 * sizes[0]).count();
        let enough = |count: usize, part: f64| count as f64 >= part * changes.len() as f64;
        if cycle < 2.5 * self.interval_s
            || !enough(on_cycle + 1, 0.9)
            || !enough(once + 1, 0.6)
            || enough(smallest, 0.7)
        {
            return None;
        }
        let mut keep = Vec::new();
        let mut last_s = self.t_s[changes[0]] - cycle;
        let mut next_change = changes.iter().copied().peekable();
        for k in 0..self.len() {
            let changed = next_change.next_if_eq(&k).is_some();
            if changed || (k >= changes[0] && self.t_s[k] - last_s >= cycle + slack) {
                // A value that came again is put where the cycle has it.
                last_s = if changed { self.t_s[k] } else { last_s + cycle };
                keep.push(k);
            }
        }
        Some(keep)
    }
}

/// Stretches longer than three times the median interval without a good sample.
pub fn gaps(t_s_good: &[f64]) -> Vec<Gap> {
    let limit = longest_unbroken_s(median_interval(t_s_good));
    t_s_good
        .windows(2)
        .filter(|w| w[1] - w[0] > limit)
        .map(|w| Gap {
            from_s: w[0],
            to_s: w[1],
        })
        .collect()
}

/// The longest time between good samples that is no gap, s: three times the usual interval.
pub fn longest_unbroken_s(interval_s: f64) -> f64 {
    3.0 * interval_s
}

/// Median of the differences of increasing times, s; 0 for fewer than two.
pub fn median_interval(t_s: &[f64]) -> f64 {
    median(&mut t_s.windows(2).map(|w| w[1] - w[0]).collect::<Vec<_>>())
}

/// Median of some values, the upper one of two; 0 where there are none. Their order is lost.
pub fn median(values: &mut [f64]) -> f64 {
    // The intervals of most logs are all the same.
    if values.windows(2).all(|pair| pair[0] == pair[1]) {
        return values.first().copied().unwrap_or(0.0);
    }
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

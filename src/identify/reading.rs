//! The reading: gain, dead time and time constant taken off one step as with a ruler.

use super::noise::{Line, Noise, line};
use super::{Reading, StepFit};
use crate::steps::OpStep;
use crate::trace::Trace;

/// Part of the whole change that a first-order answer has made after one time constant, 1 − 1/e.
const ONE_TIME_CONSTANT: f64 = 0.632_120_558_828_557_7;
/// The PV has left its noise band beyond this many σ.
const BAND_SIGMAS: f64 = 3.0;
/// Reading and fit differ where they are further apart than this part of the fit.
const DIFFERS: f64 = 0.25;

/// Mean PV of the quiet stretch and of the tail (the last fifth of the window's time), %.
pub(crate) fn ends(trace: &Trace, step: &OpStep) -> (f64, f64) {
    let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len().max(1) as f64;
    let quiet = &trace.pv()[step.quiet.clone()];
    let tail = &trace.pv()[tail(trace, step)];
    match (quiet.is_empty(), tail.is_empty()) {
        (false, false) => (mean(quiet), mean(tail)),
        (false, true) => (mean(quiet), mean(quiet)),
        (true, false) => (mean(tail), mean(tail)),
        (true, true) => {
            let near = trace.t_s().partition_point(|t| *t < step.at_s);
            let pv = trace.pv()[near.min(trace.len() - 1)];
            (pv, pv)
        }
    }
}

fn tail(trace: &Trace, step: &OpStep) -> std::ops::Range<usize> {
    let t_s = &trace.t_s()[step.window.clone()];
    let (Some(first), Some(last)) = (t_s.first(), t_s.last()) else {
        return step.window.clone();
    };
    let from = last - (last - first) / 5.0;
    // Never before the move: where hardly any time was watched the tail is what was watched.
    let start = trace
        .t_s()
        .partition_point(|t| *t < from.max(step.at_s))
        .min(step.window.end.saturating_sub(1))
        .max(step.window.start);
    start..step.window.end
}

/// The reading of a step; `None` where it cannot be taken (a pulse, no answer, no samples).
pub(crate) fn read(
    trace: &Trace,
    step: &OpStep,
    noise: &Noise,
    integrates: bool,
) -> Option<Reading> {
    let change_op = step.op_to - step.op_from;
    if step.pulse || step.quiet.is_empty() || change_op == 0.0 {
        return None;
    }
    if integrates {
        return slopes(trace, step, change_op);
    }
    let (base, end) = ends(trace, step);
    let change = end - base;
    let band = noise
        .sigma
        .map_or(0.05 * change.abs(), |sigma| BAND_SIGMAS * sigma)
        .min(0.4 * change.abs());
    let after = step.quiet.end..step.window.end;
    // As part of the whole change: 0 at the base, 1 at the end.
    let part: Vec<f64> = trace.pv()[after.clone()]
        .iter()
        .map(|pv| (pv - base) / change)
        .collect();
    if change == 0.0 || part.len() < 3 {
        return None;
    }
    let t_s: Vec<f64> = trace.t_s()[after].iter().map(|t| t - step.at_s).collect();
    let first_s = last_crossing(&t_s, &part, band / change.abs())?;
    let reached_s = (first_crossing(&t_s, &part, ONE_TIME_CONSTANT)?
        + last_crossing(&t_s, &part, ONE_TIME_CONSTANT)?)
        / 2.0;
    Some(Reading {
        gain: change / change_op,
        dead_time_s: first_s.max(0.0),
        time_constant_s: Some((reached_s - first_s).max(0.0)),
        base_percent: base,
        end_percent: end,
        slopes_percent_per_s: None,
        differs: false,
    })
}

/// When a curve rises through a level for the first time, between samples by a line.
fn first_crossing(t_s: &[f64], values: &[f64], level: f64) -> Option<f64> {
    let k = values.iter().position(|v| *v >= level)?;
    Some(crossing(t_s, values, level, k))
}

/// When a curve rises through a level for good.
fn last_crossing(t_s: &[f64], values: &[f64], level: f64) -> Option<f64> {
    let k = values.iter().rposition(|v| *v < level).map_or(0, |k| k + 1);
    (k < values.len()).then(|| crossing(t_s, values, level, k))
}

fn crossing(t_s: &[f64], values: &[f64], level: f64, k: usize) -> f64 {
    if k == 0 {
        return t_s[0];
    }
    let (a, b) = (values[k - 1], values[k]);
    let part = if b > a { (level - a) / (b - a) } else { 1.0 };
    t_s[k - 1] + part.clamp(0.0, 1.0) * (t_s[k] - t_s[k - 1])
}

/// Slopes before and after; the dead time is where both lines meet.
fn slopes(trace: &Trace, step: &OpStep, change_op: f64) -> Option<Reading> {
    let lay = |range: std::ops::Range<usize>| -> Option<Line> {
        (range.len() >= 3).then(|| line(&trace.t_s()[range.clone()], &trace.pv()[range]))
    };
    let before = lay(step.quiet.clone())?;
    // The second half of what was watched: dead time and lag are over by then.
    let watched = step.quiet.end..step.window.end;
    let after = lay(watched.start + watched.len() / 2..watched.end)?;
    let bend = after.slope - before.slope;
    if bend == 0.0 {
        return None;
    }
    // before.mean + s₁(t − t₁) = after.mean + s₂(t − t₂).
    let meet_s = (before.mean - before.slope * before.mean_t_s - after.mean
        + after.slope * after.mean_t_s)
        / bend;
    let last = *trace.pv().get(step.window.end.checked_sub(1)?)?;
    Some(Reading {
        gain: bend / change_op,
        dead_time_s: (meet_s - step.at_s).max(0.0),
        time_constant_s: None,
        base_percent: before.mean,
        end_percent: last,
        slopes_percent_per_s: Some([before.slope, after.slope]),
        differs: false,
    })
}

/// Whether a reading and a fit are further apart than they should be, in gain or in dead time plus
/// time constants. Both count the lags of an integrating process as dead time, and the sampling
/// interval is no difference.
pub(crate) fn differs(reading: &Reading, fit: &StepFit, interval_s: f64) -> bool {
    let lags = fit.time_constant_s.map_or(0.0, |e| e.value)
        + fit.second_time_constant_s.map_or(0.0, |e| e.value);
    let fitted_s = fit.dead_time_s.value + lags;
    let read_s = reading.dead_time_s + reading.time_constant_s.unwrap_or(0.0);
    (reading.gain - fit.gain.value).abs() > DIFFERS * fit.gain.value.abs()
        || (read_s - fitted_s).abs() > (DIFFERS * fitted_s).max(2.0 * interval_s)
}

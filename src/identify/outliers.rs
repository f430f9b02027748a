//! Single samples of the PV that stand apart from their neighbours: spikes of a transmitter or of the
//! network, no answer of a process.

use crate::trace::Trace;

/// Samples to either side that a sample is held against: an edge passes their median untouched, up to two
/// spikes in a row do not.
const BESIDE: usize = 2;
/// A spike stands apart by this many robust standard deviations of what samples usually do. Of normal noise
/// one sample in some 10¹² does.
const APART: f64 = 7.0;
/// And by this many of the smallest differences that the PV's digits show.
const DIGITS: f64 = 4.0;
/// Samples after a change of the OP in which a fast PV may turn within one or two: nothing is left out there.
const AFTER_MOVE: usize = 6;
/// Fewest samples that tell what is usual.
const FEWEST: usize = 20;
/// Where more than this part of the samples stands apart it is no spikes.
const MOST_PART: f64 = 0.05;

/// Indices of the samples to keep, where some stand apart; `None` where all are kept.
pub(crate) fn without(trace: &Trace) -> Option<Vec<usize>> {
    let pv = trace.pv();
    if pv.len() < FEWEST {
        return None;
    }
    let apart: Vec<f64> = (0..pv.len()).map(|k| apart(pv, k)).collect();
    let usual = usual(&apart);
    let digit = pv
        .windows(2)
        .map(|w| (w[1] - w[0]).abs())
        .filter(|d| *d > 1e-9)
        .fold(f64::INFINITY, f64::min);
    if !digit.is_finite() {
        return None;
    }
    let limit = (APART * usual).max(DIGITS * digit);
    let moving = moving(trace);
    let near: Vec<bool> = apart.iter().map(|apart| *apart <= limit).collect();
    let stays = |k: &usize| near[*k] || moving[*k] || between(trace, &near, *k) <= limit;
    let keep: Vec<usize> = (0..pv.len()).filter(stays).collect();
    let left_out = pv.len() - keep.len();
    (left_out > 0 && left_out as f64 <= MOST_PART * pv.len() as f64).then_some(keep)
}

/// How far a sample is from the median of itself and its neighbours.
fn apart(pv: &[f64], k: usize) -> f64 {
    let near = k.saturating_sub(BESIDE)..(k + BESIDE + 1).min(pv.len());
    let mut beside: Vec<f64> = pv[near].to_vec();
    let middle = beside.len() / 2;
    (pv[k] - *beside.select_nth_unstable_by(middle, f64::total_cmp).1).abs()
}

/// How far a sample is from the line between the nearest that do not stand apart: on a slope two spikes
/// nearby draw the median away.
fn between(trace: &Trace, near: &[bool], k: usize) -> f64 {
    let (t_s, pv) = (trace.t_s(), trace.pv());
    let left = (0..k).rev().find(|j| near[*j]);
    let right = (k + 1..pv.len()).find(|j| near[*j]);
    match (left, right) {
        (Some(a), Some(b)) => {
            let part = (t_s[k] - t_s[a]) / (t_s[b] - t_s[a]);
            (pv[k] - pv[a] - part * (pv[b] - pv[a])).abs()
        }
        (Some(a), None) | (None, Some(a)) => (pv[k] - pv[a]).abs(),
        (None, None) => 0.0,
    }
}

/// Robust standard deviation of what samples usually are apart, 0 values left out: of five samples one is
/// the median itself.
fn usual(apart: &[f64]) -> f64 {
    let mut values: Vec<f64> = apart.iter().copied().filter(|d| *d > 0.0).collect();
    if values.is_empty() {
        return 0.0;
    }
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1 / 0.6745
}

/// Whether the OP has just moved, at each sample.
fn moving(trace: &Trace) -> Vec<bool> {
    let op = trace.op();
    let mut since = AFTER_MOVE;
    (0..op.len())
        .map(|k| {
            let moved = k > 0 && (op[k] - op[k - 1]).abs() > 0.1;
            since = if moved { 0 } else { since + 1 };
            since < AFTER_MOVE
        })
        .collect()
}

//! Finding the steps: deliberate moves of the OP, and the windows around them.

use crate::trace::{Trace, median_interval};
use std::ops::Range;
use thiserror::Error;

/// Smallest move of the OP that counts as deliberate, %.
const SMALLEST_MOVE_PERCENT: f64 = 0.2;
/// A move is larger than this many times the OP's own jitter.
const MOVE_OVER_JITTER: f64 = 5.0;
/// Fewest samples in a quiet stretch, where the log has them.
const QUIET_SAMPLES: usize = 10;
/// Opposite moves that leave less than this part of the larger one are a pulse.
const PULSE_REMAINDER: f64 = 0.1;

/// One deliberate move of the OP with the samples that belong to it (indices into the trace).
#[derive(Debug, Clone, PartialEq)]
pub struct OpStep {
    /// 1 for the first move of the log.
    pub number: usize,
    /// When the OP began to move, s on the log's clock.
    pub at_s: f64,
    /// OP before the move, %.
    pub op_from: f64,
    /// OP after the move, %; of a pulse, its furthest level.
    pub op_to: f64,
    /// Whether the OP came back at once (an opposite move nets it out): a pulse.
    pub pulse: bool,
    /// From the beginning of the quiet stretch to the next move.
    pub window: Range<usize>,
    /// The quiet stretch before the move.
    pub quiet: Range<usize>,
}

/// Why no step could be looked for.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum StepsError {
    /// OP never moved beyond its own jitter.
    #[error("the OP never moves in this log")]
    NoMoves,
    /// OP moves all the time and no mode column says that the loop was in manual.
    #[error("the OP moves all the time: this is closed-loop data, not a step test")]
    ClosedLoop,
    /// A mode column says the loop was never in manual.
    #[error("the mode column says that the loop was never in manual")]
    NeverManual,
}

/// A move of the OP: one or several changes close together.
#[derive(Debug, Clone, Copy)]
struct Move {
    /// First sample of the OP's log that differs from the level before.
    first: usize,
    /// Last sample of the OP's log that still changed.
    last: usize,
    from: f64,
    to: f64,
    /// Furthest level reached.
    peak: f64,
    pulse: bool,
}

/// Finds the moves of the OP and the windows around them, in order of time.
///
/// Moves closer together than five intervals or three scans are one step. Moves in alternating
/// directions that leave less than a tenth of the largest, each nearer to the next than a third of
/// the hold that follows, are one pulse. Where a mode column was logged, only what was done in manual
/// counts.
///
/// # Errors
/// Where the log holds no deliberate move to look at.
pub fn find(trace: &Trace, scan_s: f64) -> Result<Vec<OpStep>, StepsError> {
    let stretches = manual_stretches(trace)?;
    let refreshes = trace.refreshes();
    let mut steps = Vec::new();
    for (from_s, to_s) in stretches {
        let (times, values) = trace.op_log();
        let range = times.partition_point(|t| *t < from_s)..times.partition_point(|t| *t <= to_s);
        let (times, values) = (&times[range.clone()], &values[range]);
        let apart_s = (5.0 * median_interval(times)).max(3.0 * scan_s);
        let jitter = jitter(values);
        let moves = merge_pulses(&moves(times, values, jitter, apart_s), times);
        if trace.manual().is_none() && moves_all_the_time(times, values, &moves, jitter) {
            return Err(StepsError::ClosedLoop);
        }
        for (k, this) in moves.iter().enumerate() {
            let before_s = if k == 0 {
                from_s
            } else {
                times[moves[k - 1].last]
            };
            let end_s = moves.get(k + 1).map(|next| times[next.first]);
            let at_s = times[this.first];
            let quiet = quiet_stretch(trace, refreshes.as_deref(), before_s, at_s);
            let end = match end_s {
                Some(next) => trace.t_s().partition_point(|t| *t < next),
                None => trace.t_s().partition_point(|t| *t <= to_s),
            };
            steps.push(OpStep {
                number: steps.len() + 1,
                at_s,
                op_from: this.from,
                op_to: if this.pulse { this.peak } else { this.to },
                pulse: this.pulse,
                window: quiet.start..end.max(quiet.end),
                quiet,
            });
        }
    }
    if steps.is_empty() {
        return Err(StepsError::NoMoves);
    }
    Ok(steps)
}

/// First and last second of each stretch in manual; the whole log where no mode was logged.
///
/// Where no mode was logged, stretches in which the OP follows the PV are a controller's.
fn manual_stretches(trace: &Trace) -> Result<Vec<(f64, f64)>, StepsError> {
    let t_s = trace.t_s();
    let by_hand = match trace.manual() {
        Some(_) => None,
        None => by_hand(trace),
    };
    let Some(manual) = trace.manual().or(by_hand.as_deref()) else {
        let (op_t_s, _) = trace.op_log();
        return Ok(vec![(op_t_s[0], op_t_s[op_t_s.len() - 1])]);
    };
    let mut stretches = Vec::new();
    let mut start = None;
    for k in 0..=manual.len() {
        let now = manual.get(k).copied().unwrap_or(false);
        match (start, now) {
            (None, true) => start = Some(k),
            (Some(from), false) => {
                stretches.push((t_s[from], t_s[k - 1]));
                start = None;
            }
            _ => {}
        }
    }
    if stretches.is_empty() && by_hand.is_some() {
        return Err(StepsError::ClosedLoop);
    }
    if stretches.is_empty() {
        return Err(StepsError::NeverManual);
    }
    Ok(stretches)
}

/// Samples looked at together for whether the OP follows the PV.
const BLOCK: usize = 30;
/// Part of a block's samples at which a controller's output has changed, at least.
const CHANGING: f64 = 0.4;
/// Correlation of the OP's changes with those of the PV from which they are a controller's: what it makes of
/// the PV's noise. Of an OP that has nothing to do with them one block in ten thousand has it.
const FOLLOWS: f64 = 0.7;

/// Whether each sample was taken with the OP left alone or moved by hand; `None` where all were, as far as
/// PV and OP can tell.
fn by_hand(trace: &Trace) -> Option<Vec<bool>> {
    let changes = |values: &[f64]| -> Vec<f64> { values.windows(2).map(|w| w[1] - w[0]).collect() };
    let (op, pv) = (changes(trace.op()), changes(trace.pv()));
    let follows = |block: Range<usize>| {
        let op = &op[block.clone()];
        let changed = op.iter().filter(|d| d.abs() > 1e-9).count();
        let lagged = block.start.saturating_sub(1)..block.end - 1;
        changed as f64 >= CHANGING * op.len() as f64
            && (correlation(op, &pv[block]).abs() > FOLLOWS
                || (lagged.len() == op.len() && correlation(op, &pv[lagged]).abs() > FOLLOWS))
    };
    let count = op.len() / BLOCK;
    let blocks: Vec<bool> = (0..count)
        .map(|k| follows(k * BLOCK..(k + 1) * BLOCK))
        .collect();
    // One block alone is chance, and one between two of a controller's belongs to it.
    let near = |k: usize| k > 0 && blocks[k - 1] || k + 1 < count && blocks[k + 1];
    let between = |k: usize| k > 0 && k + 1 < count && blocks[k - 1] && blocks[k + 1];
    let controller: Vec<bool> = (0..count)
        .map(|k| blocks[k] && near(k) || between(k))
        .collect();
    if !controller.contains(&true) {
        return None;
    }
    let mut by_hand = vec![true; trace.len()];
    for block in (0..count).filter(|k| controller[*k]) {
        // Up to where the OP is left alone on either side.
        let still = |k: &usize| op.get(*k).is_none_or(|d| d.abs() <= 1e-9);
        let mut from = block * BLOCK;
        while from > 0 && !still(&(from - 1)) {
            from -= 1;
        }
        let end = ((block + 1) * BLOCK..op.len())
            .find(still)
            .unwrap_or(op.len());
        by_hand[from..=end].fill(false);
    }
    Some(by_hand)
}

/// Correlation of two series about their means; 0 where one does not change.
fn correlation(a: &[f64], b: &[f64]) -> f64 {
    let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len().max(1) as f64;
    let (mean_a, mean_b) = (mean(a), mean(b));
    let (mut aa, mut bb, mut ab) = (0.0, 0.0, 0.0);
    for (x, y) in a.iter().zip(b) {
        aa += (x - mean_a) * (x - mean_a);
        bb += (y - mean_b) * (y - mean_b);
        ab += (x - mean_a) * (y - mean_b);
    }
    if aa > 0.0 && bb > 0.0 {
        ab / libm::sqrt(aa * bb)
    } else {
        0.0
    }
}

/// Robust standard deviation of the OP's sample-to-sample jitter, %; 0 for an OP that stands still.
pub(crate) fn jitter(values: &[f64]) -> f64 {
    let mut changes: Vec<f64> = values.windows(2).map(|w| (w[1] - w[0]).abs()).collect();
    if changes.is_empty() {
        return 0.0;
    }
    let middle = changes.len() / 2;
    // Median of |difference| of two samples with standard deviation s: 0.6745·√2·s.
    *changes.select_nth_unstable_by(middle, f64::total_cmp).1 / (0.6745 * std::f64::consts::SQRT_2)
}

fn median(values: &[f64]) -> f64 {
    let mut values = values.to_vec();
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

/// Moves larger than the jitter, those closer together than `apart_s` joined.
fn moves(times: &[f64], values: &[f64], jitter: f64, apart_s: f64) -> Vec<Move> {
    let large = (MOVE_OVER_JITTER * jitter).max(SMALLEST_MOVE_PERCENT);
    // What still belongs to a level: the jitter, or the last digit of a still OP.
    let small = (3.0 * jitter).max(0.01);
    // Excursions: the level is left by more than `large`. A ramp leaves it again and again.
    let mut excursions: Vec<(usize, usize)> = Vec::new();
    let mut level = values[0];
    let mut near = 0;
    let mut held = 0;
    for (k, &op) in values.iter().enumerate() {
        if (op - level).abs() > large {
            excursions.push((near + 1, k));
            (level, near, held) = (op, k, 0);
            continue;
        }
        if (op - level).abs() <= small {
            near = k;
        }
        held += 1;
        if held == 5 {
            // A single sample is a poor level where the OP jitters or was caught half-way.
            level = median(&values[k - 4..=k]);
            if (op - level).abs() <= small {
                near = k;
            }
        }
    }
    let mut joined: Vec<(usize, usize)> = Vec::new();
    for excursion in excursions {
        match joined.last_mut() {
            Some(last) if times[excursion.0] - times[last.1] <= apart_s => last.1 = excursion.1,
            _ => joined.push(excursion),
        }
    }
    let mut found: Vec<Move> = Vec::new();
    for (k, &(first, mut last)) in joined.iter().enumerate() {
        let next = joined.get(k + 1).map_or(values.len(), |n| n.0);
        let since = k.checked_sub(1).map_or(0, |b| joined[b].1);
        let hold = &values[last..next];
        let to = median(hold);
        // The tail of a ramp below the size of an excursion.
        while last + 1 < next && (values[last] - to).abs() > small {
            last += 1;
        }
        let from = median(&values[since.min(first - 1)..first]);
        let peak = values[first..=last]
            .iter()
            .copied()
            .chain([to])
            .fold(from, |peak, op| {
                if (op - from).abs() > (peak - from).abs() {
                    op
                } else {
                    peak
                }
            });
        let net = (to - from).abs();
        let returned = net < PULSE_REMAINDER * (peak - from).abs();
        if returned || net > large {
            found.push(Move {
                first,
                last,
                from,
                to,
                peak,
                pulse: returned,
            });
        }
    }
    found
}

/// Joins two or three alternating moves that net out before a longer hold.
fn merge_pulses(moves: &[Move], times: &[f64]) -> Vec<Move> {
    let end_s = times.last().copied().unwrap_or(0.0);
    let mut merged: Vec<Move> = Vec::new();
    let mut k = 0;
    while k < moves.len() {
        let run = [3, 2].into_iter().find(|&n| {
            k + n <= moves.len() && nets_out(&moves[k..k + n], moves.get(k + n), times, end_s)
        });
        match run {
            Some(n) => {
                let part = &moves[k..k + n];
                let from = part[0].from;
                let peak = part.iter().fold(from, |peak, m| {
                    if (m.to - from).abs() > (peak - from).abs() {
                        m.to
                    } else {
                        peak
                    }
                });
                merged.push(Move {
                    last: part[n - 1].last,
                    to: part[n - 1].to,
                    peak,
                    pulse: true,
                    ..part[0]
                });
                k += n;
            }
            None => {
                merged.push(moves[k]);
                k += 1;
            }
        }
    }
    merged
}

fn nets_out(part: &[Move], next: Option<&Move>, times: &[f64], end_s: f64) -> bool {
    if part.iter().any(|m| m.pulse) {
        return false;
    }
    let last = part[part.len() - 1];
    let hold_s = next.map_or(end_s, |n| times[n.first]) - times[last.last];
    let largest = part
        .iter()
        .map(|m| (m.to - m.from).abs())
        .fold(0.0, f64::max);
    let alternate = part
        .windows(2)
        .all(|w| (w[0].to - w[0].from) * (w[1].to - w[1].from) < 0.0);
    let near = part
        .windows(2)
        .all(|w| times[w[1].first] - times[w[0].first] < hold_s / 3.0);
    alternate && near && (last.to - part[0].from).abs() < PULSE_REMAINDER * largest
}

/// Whether the OP is never left alone, as a controller in automatic moves it: most samples differ
/// from the one before, and not by a jitter about a level that is held.
fn moves_all_the_time(times: &[f64], values: &[f64], moves: &[Move], jitter: f64) -> bool {
    let changed = values
        .windows(2)
        .filter(|w| (w[1] - w[0]).abs() > 1e-9)
        .count();
    if values.len() < 10 || changed * 2 < values.len() {
        return false;
    }
    let moving_s: f64 = moves.iter().map(|m| times[m.last] - times[m.first]).sum();
    let whole_s = times[times.len() - 1] - times[0];
    if moving_s > 0.4 * whole_s {
        return true;
    }
    // A jitter about a level differs over many samples by no more than over one; a controller's
    // output has gone elsewhere.
    let typical = |lag: usize| {
        let apart: Vec<f64> = values
            .iter()
            .zip(&values[lag..])
            .map(|(a, b)| (b - a).abs())
            .collect();
        median(&apart)
    };
    let far = if values.len() > 50 { 20 } else { 5 };
    if typical(far) > 2.0 * typical(1) {
        return true;
    }
    // A held level with jitter: variance about the level equals half the mean square of differences.
    // A controller's wandering has much more variance than its differences show.
    let (mut about_level, mut count) = (0.0, 0.0);
    let mut from = 0;
    for end in moves.iter().map(|m| m.first).chain([values.len()]) {
        let hold = &values[from.min(end)..end];
        if hold.len() >= 5 {
            let level = median(hold);
            about_level += hold.iter().map(|v| (v - level) * (v - level)).sum::<f64>();
            count += hold.len() as f64;
        }
        from = moves
            .iter()
            .find(|m| m.first == end)
            .map_or(end, |m| m.last + 1);
    }
    count > 0.0 && about_level / count > 4.0 * jitter * jitter + 1e-6
}

/// The last third of the time since the previous move, and ten samples (refreshes of a held PV) where
/// they are there.
fn quiet_stretch(
    trace: &Trace,
    refreshes: Option<&[usize]>,
    before_s: f64,
    at_s: f64,
) -> Range<usize> {
    let t_s = trace.t_s();
    let end = t_s.partition_point(|t| *t < at_s);
    let earliest = t_s.partition_point(|t| *t < before_s).min(end);
    let third = t_s.partition_point(|t| *t < at_s - (at_s - before_s) / 3.0);
    let ten = match refreshes {
        None => end.saturating_sub(QUIET_SAMPLES),
        Some(keep) => {
            let before = keep.partition_point(|k| *k < end);
            before
                .checked_sub(QUIET_SAMPLES)
                .map_or(0, |first| keep[first])
        }
    };
    third.min(ten).max(earliest).min(end)..end
}

#[cfg(test)]
#[path = "steps_tests.rs"]
mod tests;

//! The trial's set-point moves, each judged.

use super::agreement::{self, Compared};
use super::run::{LEAST_SAMPLES, Line, Rest, Run};
use super::{AsLeft, Trial, TrialError, TrialKind, TrialMove};
use crate::display::counted;
use crate::predict::measure::Disturbance;
use std::ops::Range;

/// Set-point moves smaller than this are none, % of span.
const LEAST_MOVE_PERCENT: f64 = 0.2;
/// A set-point move is judged where it is this many times the band that a settled PV strays in.
const MOVE_OVER_BAND: f64 = 3.0;
/// Swings below this part of the move are none.
const SWING_PART: f64 = 0.05;

/// A move of the set point: its size, and the samples from the first at the new one to the next move.
struct Move {
    window: Range<usize>,
    size: f64,
}

/// The trial by its set-point moves; `None` where none was made that was watched at all.
pub(super) fn trial(run: &Run, left: &AsLeft) -> Option<Result<Trial, TrialError>> {
    let moves = moves(run, left.controller.scan_s);
    let first = moves.first()?.window.start;
    let mut candidates: Vec<&Move> = moves
        .iter()
        .filter(|m| m.window.len() >= LEAST_SAMPLES / 2)
        .collect();
    let largest = largest(candidates.iter().map(|m| m.size))?;
    let size_percent = candidates[largest].size.abs();
    let wander = run.wander(first);
    let needed_percent = MOVE_OVER_BAND * run.least_band(wander);
    if size_percent < needed_percent {
        return Some(Err(TrialError::MoveTooSmall {
            size_percent,
            needed_percent,
        }));
    }
    candidates.retain(|m| m.size.abs() >= needed_percent);
    let rest = Rest {
        pv: run.quiet_mean(run.pv, first),
        op: run.quiet_mean(run.op, first),
        sp: run.sp[first - 1],
    };
    let lines = run.predicted_by_all(left, rest, |_| 0.0);
    let mut judged: Vec<TrialMove> = candidates
        .iter()
        .map(|m| judge(run, left, &lines, m, rest, wander))
        .collect();
    // A move that was followed by the next before the loop is predicted to settle tells nothing of
    // settling; where that holds for all of them, the largest has to say so.
    if judged.iter().any(watched) {
        judged.retain(watched);
    } else if let Some(kept) = self::largest(judged.iter().map(|m| m.step_percent)) {
        judged = vec![judged.swap_remove(kept)];
    }
    let left_out = moves.len() - judged.len();
    let not_judged = (left_out > 0).then(|| {
        format!(
            "{} not judged: too small against noise and wander, or not watched for as long as the loop is \
             predicted to take.",
            counted(
                left_out,
                "set-point move was",
                "set-point moves were"
            )
        )
    });
    Some(Ok(gathered(run, &lines, judged, not_judged)))
}

fn watched(judged: &TrialMove) -> bool {
    judged.predicted.settling_time_s.is_some()
}

/// Place of the largest size; of equal ones the first.
fn largest(sizes: impl Iterator<Item = f64>) -> Option<usize> {
    let mut found: Option<(usize, f64)> = None;
    for (k, size) in sizes.enumerate() {
        if found.is_none_or(|(_, so_far)| size.abs() > so_far * (1.0 + 1e-9)) {
            found = Some((k, size.abs()));
        }
    }
    found.map(|(k, _)| k)
}

/// Moves of the set point; a ramp, or moves in quick succession, are one.
fn moves(run: &Run, scan_s: f64) -> Vec<Move> {
    let interval = crate::trace::median_interval(run.t_s);
    let together = (5.0 * interval).max(3.0 * scan_s);
    let mut found: Vec<(usize, usize)> = Vec::new();
    for k in 1..run.sp.len() {
        if run.sp[k] == run.sp[k - 1] {
            continue;
        }
        match found.last_mut() {
            Some((_, last)) if run.t_s[k] - run.t_s[*last] <= together => *last = k,
            _ => found.push((k, k)),
        }
    }
    let mut moves: Vec<Move> = found
        .into_iter()
        .map(|(first, last)| Move {
            window: first..run.t_s.len(),
            size: run.sp[last] - run.sp[first - 1],
        })
        .filter(|m| m.size.abs() >= LEAST_MOVE_PERCENT)
        .collect();
    for k in 1..moves.len() {
        moves[k - 1].window.end = moves[k].window.start;
    }
    moves
}

fn judge(
    run: &Run,
    left: &AsLeft,
    lines: &[Line],
    moved: &Move,
    at_rest: Rest,
    wander: f64,
) -> TrialMove {
    let Move { window, size } = moved;
    let before = window.start - 1;
    let sp = run.sp[before];
    let of = |pv: &[f64], op: &[f64], hold_s| {
        // The same offset between PV and SP at rest is taken off measured and predicted.
        let rest = Rest {
            pv: at_rest.pv - at_rest.sp + sp,
            op: op[before],
            sp,
        };
        let moved = (Disturbance::SetPoint(*size), window.clone());
        run.metrics(moved, (pv, op), rest, wander, hold_s)
    };
    let by_models: Vec<_> = lines.iter().map(|l| of(&l.pv, &l.op, None)).collect();
    let predicted = by_models[0];
    let measured = of(&run.smooth, run.op, predicted.settling_time_s);
    let oscillation = run.oscillation(window.clone(), SWING_PART * size.abs(), 1);
    let compared = Compared::new(&measured, &by_models);
    let against = compared.against(oscillation.as_ref(), left.integrates());
    TrialMove {
        at_s: run.t_s[window.start],
        step_percent: *size,
        measured,
        predicted,
        settling_time_of_models_s: compared.settling_s,
        overshoot_of_models_percent: Some(compared.overshoot_percent),
        agrees: against.is_empty(),
        oscillation,
        why: against.join("; "),
    }
}

fn gathered(
    run: &Run,
    lines: &[Line],
    judged: Vec<TrialMove>,
    not_judged: Option<String>,
) -> Trial {
    let chosen = largest(judged.iter().map(|m| m.step_percent)).unwrap_or(0);
    let chosen = &judged[chosen];
    let worst = judged
        .iter()
        .filter_map(|m| m.oscillation.as_ref())
        .max_by(|a, b| {
            let key = |o: &crate::predict::oscillation::Oscillation| o.limit_cycle;
            (key(a).cmp(&key(b))).then(a.decay_ratio.total_cmp(&b.decay_ratio))
        });
    Trial {
        kind: TrialKind::SetPoint,
        at_s: chosen.at_s,
        step_percent: chosen.step_percent,
        measured: chosen.measured,
        predicted: chosen.predicted,
        predicted_rmse_percent: run.rmse(&lines[0].pv),
        agrees: judged.iter().all(|m| m.agrees),
        oscillation: worst.cloned(),
        why: agreement::in_words(&judged),
        curve: run.curve(&lines[0]),
        band: run.band(lines),
        not_judged,
        moves: judged,
    }
}

//! Judging a step after its fit: every rule with its figure and its bounds.

use super::choice::Candidate;
use super::covariance;
use super::noise::{Noise, line};
use super::reading;
use super::words::{against, bound, figure, time_text};
use super::{Check, Reason, ReasonCode, Verdict, VerdictBounds};
use crate::steps::OpStep;
use crate::trace::Trace;

/// A signal this near to 0 or 100 % stands at the end of its range, %.
const END_OF_RANGE_PERCENT: f64 = 0.05;
/// Samples after the move of an integrating process: fewer are a reservation, or rejected.
const INTEGRATING_SAMPLES: [f64; 2] = [20.0, 10.0];
/// How the reason begins that a PV moved before the step.
pub(crate) const DRIFT: &str = "drift";
/// A gap in an integrating process's window above this part of it rejects.
const INTEGRATING_GAP: f64 = 0.2;

/// Verdict with its reasons and the figures of all rules.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Judged {
    pub verdict: Verdict,
    pub reasons: Vec<Reason>,
    pub checks: Vec<Check>,
}

impl Judged {
    fn new() -> Self {
        Judged {
            verdict: Verdict::Accepted,
            reasons: Vec::new(),
            checks: Vec::new(),
        }
    }

    fn worsen(&mut self, verdict: Verdict, reason: Reason) {
        let rank = |v: Verdict| match v {
            Verdict::Accepted => 0,
            Verdict::Reservation => 1,
            Verdict::Rejected => 2,
        };
        if rank(verdict) > rank(self.verdict) {
            self.verdict = verdict;
        }
        self.reasons.push(reason);
    }

    /// Rejects for a reason that has no bounds to print.
    pub(crate) fn reject(&mut self, code: ReasonCode, text: impl Into<String>) {
        self.worsen(
            Verdict::Rejected,
            Reason {
                code,
                text: text.into(),
                figure: None,
                bound: None,
            },
        );
    }

    /// Holds a figure against its pair of bounds; `text` makes the words from figure and bound.
    fn hold(
        &mut self,
        code: ReasonCode,
        figure: Option<f64>,
        bounds: [f64; 2],
        at_least: bool,
        text: impl Fn(&str, &str) -> String,
    ) {
        self.checks.push(Check {
            code,
            figure,
            reservation: Some(bounds[0]),
            rejected: Some(bounds[1]),
        });
        let Some(value) = figure else { return };
        let beyond = |limit: f64| {
            if at_least {
                value < limit
            } else {
                value > limit
            }
        };
        let (verdict, limit) = if beyond(bounds[1]) {
            (Verdict::Rejected, bounds[1])
        } else if beyond(bounds[0]) {
            (Verdict::Reservation, bounds[0])
        } else {
            return;
        };
        self.worsen(
            verdict,
            Reason {
                code,
                text: text(&against(value, limit), &bound(limit)),
                figure: Some(value),
                bound: Some(limit),
            },
        );
    }
}

/// What judging needs beside the step.
pub(crate) struct Grounds<'a> {
    pub trace: &'a Trace,
    pub noise: &'a Noise,
    pub bounds: &'a VerdictBounds,
    pub not_before_s: Option<f64>,
    /// What the step moved the valve by, % of OP: the OP's own move where no dead band is known.
    pub change_op: f64,
    /// Slope of the PV that earlier moves of the OP explain, % per s; 0 where nothing is known.
    pub explained_slope: f64,
}

/// When the OP had arrived, within a tenth of its move, s; the beginning of the move for a pulse.
pub(crate) fn arrived_s(trace: &Trace, step: &OpStep) -> f64 {
    let (times, values) = trace.op_log();
    let range = (step.op_to - step.op_from).abs();
    let from = times.partition_point(|t| *t < step.at_s);
    if step.pulse {
        return step.at_s;
    }
    times[from..]
        .iter()
        .zip(&values[from..])
        .find(|(_, op)| (*op - step.op_to).abs() <= 0.1 * range)
        .map_or(step.at_s, |(t, _)| *t)
}

/// Time of the last good sample of a step's window, s.
pub(crate) fn watched_until_s(trace: &Trace, step: &OpStep) -> f64 {
    step.window
        .clone()
        .next_back()
        .map_or(step.at_s, |k| trace.t_s()[k])
}

/// The whole change of the PV that a fit gives a step, %: K·ΔOP, or K′·ΔOP times the time watched;
/// for a pulse the most that the PV moves.
pub(crate) fn change_percent(
    trace: &Trace,
    step: &OpStep,
    own: &Candidate,
    moves: &[(f64, f64)],
    change_op: f64,
) -> f64 {
    let model = own.fit.process();
    let gain = model.gain();
    if step.pulse {
        let t_s: Vec<f64> = trace.t_s()[step.window.clone()]
            .iter()
            .map(|t| t - step.at_s)
            .collect();
        return model
            .response_to_held(moves, &t_s)
            .iter()
            .fold(0.0_f64, |most, pv| most.max(pv.abs()));
    }
    let change_op = change_op.abs();
    if own.fit.kind.integrates() {
        let watched = watched_until_s(trace, step) - arrived_s(trace, step);
        gain.abs() * change_op * (watched - model.dead_time_s()).max(0.0)
    } else {
        gain.abs() * change_op
    }
}

/// What noise alone does not explain, percent of the PV's movement; `sigma` of 0 where not assessable.
pub(crate) fn misfit_percent<'a>(
    rss: f64,
    sigma: f64,
    windows: impl Iterator<Item = &'a [f64]>,
) -> f64 {
    let (mut movement, mut rows) = (0.0, 0.0);
    for pv in windows {
        let mean = pv.iter().sum::<f64>() / pv.len().max(1) as f64;
        movement += pv.iter().map(|y| (y - mean) * (y - mean)).sum::<f64>();
        rows += pv.len() as f64;
    }
    if movement <= 0.0 {
        return 0.0;
    }
    100.0 * libm::sqrt((rss - rows * sigma * sigma).max(0.0) / movement)
}

/// A fit of a step's own best kind with the moves of its window, or why there is none.
pub(crate) type OwnFit<'a> = Result<(&'a Candidate, &'a [(f64, f64)]), String>;

/// Judges a step by the fit of its own best kind.
pub(crate) fn judge(step: &OpStep, own: OwnFit, grounds: &Grounds) -> Judged {
    let mut judged = Judged::new();
    let trace = grounds.trace;
    if grounds.not_before_s.is_some_and(|since| step.at_s < since) {
        judged.reject(
            ReasonCode::InnerLoop,
            "tested before the inner loop was left as it is now",
        );
    }
    saturation(&mut judged, step, trace);
    match own {
        Err(why) => {
            bad_samples(&mut judged, step, grounds, None);
            judged.reject(ReasonCode::NoFit, why);
        }
        Ok((own, moves)) => {
            change_and_drift(&mut judged, step, own, moves, grounds);
            watched_and_samples(&mut judged, step, own, grounds);
            bad_samples(&mut judged, step, grounds, Some(own));
            misfit(&mut judged, step, own, grounds);
            // Without a noise figure the fit's own intervals must show that there was an answer.
            if grounds.noise.sigma.is_none() && !stands_out(own) {
                judged.reject(
                    ReasonCode::NoFit,
                    "no answer to the move can be told from chance",
                );
            }
        }
    }
    judged
}

/// Whether the gain is known to better than its own half.
pub(crate) fn stands_out(own: &Candidate) -> bool {
    let covariance = covariance::logarithmic(&own.fit, 1.0);
    covariance.matrix[0][0] < 0.25
}

fn change_and_drift(
    judged: &mut Judged,
    step: &OpStep,
    own: &Candidate,
    moves: &[(f64, f64)],
    grounds: &Grounds,
) {
    let trace = grounds.trace;
    let change = change_percent(trace, step, own, moves, grounds.change_op);
    judged.hold(
        ReasonCode::Change,
        grounds.noise.sigma.filter(|s| *s > 0.0).map(|s| change / s),
        grounds.bounds.change_over_sigma,
        true,
        |f, b| format!("PV changed by {f} times its noise (bound {b})"),
    );
    let (t_s, pv) = (
        &trace.t_s()[step.quiet.clone()],
        &trace.pv()[step.quiet.clone()],
    );
    let drift = if t_s.len() < 3 || change <= 0.0 {
        None
    } else {
        let slope = line(t_s, pv).slope;
        if own.fit.kind.integrates() {
            let bend = own.fit.gains[0].abs() * grounds.change_op.abs();
            Some(100.0 * (slope - grounds.explained_slope).abs() / bend)
        } else {
            // A PV on its way from before the log bends a fit to a gain that it does not have: what was seen
            // of the change counts where it is less.
            let (from, to) = reading::ends(trace, step);
            let seen = if step.pulse {
                change
            } else {
                (to - from).abs()
            };
            let change = change.min(seen).max(f64::MIN_POSITIVE);
            Some(100.0 * slope.abs() * (t_s[t_s.len() - 1] - t_s[0]) / change)
        }
    };
    judged.hold(
        ReasonCode::Drift,
        drift,
        grounds.bounds.drift_percent,
        false,
        |f, b| format!("{DRIFT} {f} % (bound {b} %)"),
    );
    if !grounds.noise.compressed {
        rest_before(judged, t_s.len());
    }
}

/// Samples of the quiet stretch below which the rest before the move is not known well, and below
/// which it is not known at all.
const QUIET_SAMPLES: [usize; 2] = [10, 3];

/// Without rest before the move nobody knows what the PV would have done by itself.
fn rest_before(judged: &mut Judged, samples: usize) {
    let verdict = if samples < QUIET_SAMPLES[1] {
        Verdict::Rejected
    } else if samples < QUIET_SAMPLES[0] {
        Verdict::Reservation
    } else {
        return;
    };
    let word = if samples == 1 { "sample" } else { "samples" };
    judged.worsen(
        verdict,
        Reason {
            code: ReasonCode::Drift,
            text: format!(
                "only {samples} {word} at rest before the move (bound {})",
                QUIET_SAMPLES[0]
            ),
            figure: Some(samples as f64),
            bound: Some(QUIET_SAMPLES[0] as f64),
        },
    );
}

fn watched_and_samples(judged: &mut Judged, step: &OpStep, own: &Candidate, grounds: &Grounds) {
    let trace = grounds.trace;
    let theta = own.fit.point.dead_time_s;
    let (tau, _) = own.fit.point.lags(own.fit.kind);
    let watched = (watched_until_s(trace, step) - arrived_s(trace, step) - theta).max(0.0);
    if own.fit.kind.integrates() {
        // A dead time below the sampling interval is not known to be any shorter.
        let theta = theta.max(trace.interval_s());
        judged.hold(
            ReasonCode::Watched,
            (!step.pulse && theta > 0.0).then(|| watched / theta),
            grounds.bounds.watched_theta,
            true,
            |f, b| format!("watched {f} θ (bound {b} θ)"),
        );
        let after = step.window.end - step.quiet.end;
        judged.hold(
            ReasonCode::Samples,
            Some(after as f64),
            INTEGRATING_SAMPLES,
            true,
            |f, b| format!("{f} samples after the move (bound {b})"),
        );
        return;
    }
    judged.hold(
        ReasonCode::Watched,
        (!step.pulse).then(|| watched / tau),
        grounds.bounds.watched_tau,
        true,
        |f, b| format!("watched {f} τ (bound {b} τ)"),
    );
    judged.hold(
        ReasonCode::Samples,
        (trace.interval_s() > 0.0).then(|| tau / trace.interval_s()),
        grounds.bounds.samples_per_tau,
        true,
        |f, b| format!("{f} samples per time constant (bound {b})"),
    );
}

fn saturation(judged: &mut Judged, step: &OpStep, trace: &Trace) {
    let at_end = |percent: f64, near: f64| percent <= near || percent >= 100.0 - near;
    let pv = trace.pv()[step.window.clone()]
        .iter()
        .filter(|pv| at_end(**pv, END_OF_RANGE_PERCENT))
        .count();
    // The OP as logged: it may stand at its end where the PV has no sample.
    let (from_s, until_s) = window_s(trace, step);
    let (op_t_s, op_log) = trace.op_log();
    let op = op_t_s
        .iter()
        .zip(op_log)
        .filter(|(t, _)| **t >= from_s && **t <= until_s)
        .filter(|(_, op)| at_end(**op, 1e-9))
        .count();
    judged.checks.push(Check {
        code: ReasonCode::Saturated,
        figure: Some((pv + op) as f64),
        reservation: None,
        rejected: Some(0.0),
    });
    for (name, count) in [("PV", pv), ("OP", op)] {
        if count > 0 {
            judged.worsen(
                Verdict::Rejected,
                Reason {
                    code: ReasonCode::Saturated,
                    text: format!("{name} at the end of its range"),
                    figure: Some(count as f64),
                    bound: Some(0.0),
                },
            );
        }
    }
}

fn bad_samples(judged: &mut Judged, step: &OpStep, grounds: &Grounds, own: Option<&Candidate>) {
    let trace = grounds.trace;
    let t_s = &trace.t_s()[step.window.clone()];
    if t_s.is_empty() {
        return;
    }
    let (first, last) = window_s(trace, step);
    let bad_t_s = trace.bad_t_s();
    // Bad samples against the samples as logged: of an analyser's held PV not its refreshes alone.
    let within = |times: &[f64]| {
        times.partition_point(|t| *t <= last) - times.partition_point(|t| *t < first)
    };
    let bad = within(bad_t_s) as f64;
    let good = within(trace.logged_t_s()) as f64;
    judged.hold(
        ReasonCode::BadSamples,
        Some(100.0 * bad / (bad + good)),
        grounds.bounds.bad_percent,
        false,
        |f, b| format!("bad samples {f} % (bound {b} %)"),
    );
    let Some(own) = own else { return };
    let limit = 3.0 * trace.interval_s();
    // What is missing at the end counts like what is missing between.
    let mut times = t_s.to_vec();
    times.push(last);
    let longest = times
        .windows(2)
        // A compressed log leaves samples out where nothing happened: a gap only if some were bad.
        .filter(|w| w[1] - w[0] > limit && (!grounds.noise.compressed || has_bad(bad_t_s, w)))
        .map(|w| w[1] - w[0])
        .fold(0.0, f64::max);
    let (allowed, name) = if own.fit.kind.integrates() {
        (INTEGRATING_GAP * (last - first), "a fifth of the window")
    } else {
        (own.fit.point.lags(own.fit.kind).0, "τ")
    };
    if longest > allowed {
        judged.worsen(
            Verdict::Rejected,
            Reason {
                code: ReasonCode::BadSamples,
                text: format!(
                    "a gap of {} (bound {name}, {})",
                    time_text(longest),
                    time_text(allowed)
                ),
                figure: Some(longest),
                bound: Some(allowed),
            },
        );
    }
}

fn has_bad(bad_t_s: &[f64], between: &[f64]) -> bool {
    let next = bad_t_s.partition_point(|t| *t <= between[0]);
    bad_t_s.get(next).is_some_and(|t| *t <= between[1])
}

/// First and last second of a step's window, up to the next move also where the PV's last samples are
/// bad: the OP is logged there too, and stands where the step left it.
fn window_s(trace: &Trace, step: &OpStep) -> (f64, f64) {
    let window = step.window.clone();
    let (Some(&first), Some(&last)) = (
        trace.t_s().get(window.start),
        trace.t_s().get(window.end.saturating_sub(1)),
    ) else {
        return (step.at_s, step.at_s);
    };
    let (op_t_s, op) = trace.op_log();
    let here = op_t_s.partition_point(|t| *t <= last);
    let stands = op
        .get(here.saturating_sub(1))
        .copied()
        .unwrap_or(step.op_to);
    // A tenth of the step is no move of its own.
    let still = 0.1 * (step.op_to - step.op_from).abs();
    let until = (here..op.len())
        .take_while(|&k| (op[k] - stands).abs() <= still)
        .last()
        .map_or(last, |k| op_t_s[k]);
    let next_good = trace
        .t_s()
        .get(window.end)
        .copied()
        .unwrap_or(f64::INFINITY);
    (first, if until < next_good { until } else { last })
}

fn misfit(judged: &mut Judged, step: &OpStep, own: &Candidate, grounds: &Grounds) {
    let pv = &grounds.trace.pv()[step.window.clone()];
    let value = grounds
        .noise
        .sigma
        .map(|sigma| misfit_percent(own.fit.rss, sigma, std::iter::once(pv)));
    judged.hold(
        ReasonCode::Misfit,
        value,
        grounds.bounds.misfit_percent,
        false,
        |f, b| format!("misfit {f} % (bound {b} %)"),
    );
}

/// Rejects the usable steps whose gain has the other sign: the side with the larger sum of moves
/// stands; where both are equal none does. `steps`: verdict, gain, ΔOP.
pub(crate) fn compare_signs(steps: &mut [(&mut Judged, f64, f64)]) {
    let usable = |j: &Judged| j.verdict != Verdict::Rejected;
    let sum = |steps: &[(&mut Judged, f64, f64)], positive: bool| -> f64 {
        steps
            .iter()
            .filter(|(j, gain, _)| usable(j) && (*gain > 0.0) == positive)
            .map(|(_, _, change_op)| change_op.abs())
            .sum()
    };
    let (up, down) = (sum(steps, true), sum(steps, false));
    for (judged, gain, _) in steps.iter_mut() {
        judged.checks.push(Check {
            code: ReasonCode::Sign,
            figure: Some(if *gain > 0.0 { 1.0 } else { -1.0 }),
            reservation: None,
            rejected: None,
        });
        if !usable(judged) || up == 0.0 || down == 0.0 {
            continue;
        }
        let (own, other) = if *gain > 0.0 { (up, down) } else { (down, up) };
        // Sums of the same moves can differ in the last digit.
        if own < other * (1.0 + 1e-9) {
            judged.reject(
                ReasonCode::Sign,
                format!(
                    "gain of the other sign: moves of {} % of OP show this one, of {} % the other",
                    figure(own),
                    figure(other)
                ),
            );
        }
    }
}

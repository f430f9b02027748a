//! What to do next time where steps are rejected or weak.

use super::choice::Candidate;
use super::covariance;
use super::noise::Noise;
use super::pooled::Fitted;
use super::verdict::{Judged, arrived_s, stands_out, watched_until_s};
use super::words::{figure, rounded_up, time_text};
use super::{Advice, Context, Model, ReasonCode, Verdict};
use crate::quantity::Estimate;
use crate::trace::Trace;

/// A good step moves the PV by this many times its noise.
const CHANGE_SIGMAS: f64 = 20.0;
/// Time constants to watch after the dead time.
const WATCH_LAGS: f64 = 4.0;
/// A time constant known from a poor test is taken as long as its interval says, but no more than this
/// many times its value.
const MOST_LONGER: f64 = 1.5;
/// Samples to log for each time constant.
const LOG_PER_LAG: f64 = 20.0;
/// No move should end nearer to the end of the range than this, %.
const CLEARANCE_PERCENT: f64 = 5.0;

/// What is known of the process for advice: the model, or else the best fit of any step.
struct Known {
    gain: f64,
    integrates: bool,
    lags_s: f64,
    lag_s: Option<f64>,
    theta_s: f64,
}

fn known(
    model: Option<&Model>,
    steps: &[(Option<(&Fitted, &Candidate)>, &Judged)],
) -> Option<Known> {
    if let Some(model) = model {
        let lag_s = model.time_constant_s.map(|e| e.value);
        // What is to be waited for may be as long as the interval says.
        let longest = |e: Option<Estimate>| e.map_or(0.0, |e| e.high.min(MOST_LONGER * e.value));
        return Some(Known {
            gain: model.gain.value,
            integrates: model.kind.integrates(),
            lags_s: longest(model.time_constant_s) + longest(model.second_time_constant_s),
            lag_s,
            theta_s: model.dead_time_s.value,
        });
    }
    // The step whose gain is known best, if it is known at all.
    let (_, best) = steps
        .iter()
        .filter_map(|(fitted, judged)| {
            let (fitted, own) = (*fitted)?;
            let clean = judged.reasons.iter().all(|r| {
                !matches!(
                    r.code,
                    ReasonCode::Saturated | ReasonCode::InnerLoop | ReasonCode::Sign
                )
            });
            let change = (fitted.step.op_to - fitted.step.op_from).abs();
            (clean && stands_out(own)).then_some((change, own))
        })
        .max_by(|a, b| a.0.total_cmp(&b.0))?;
    let kind = best.fit.kind;
    let (tau, tau2) = best.fit.point.lags(kind);
    let has_lag = kind != crate::model::Kind::Integrating;
    Some(Known {
        gain: best.fit.gains[0],
        integrates: kind.integrates(),
        lags_s: if has_lag {
            let sd = covariance::logarithmic(&best.fit, 1.0).matrix[1][1];
            let longer = libm::exp(covariance::TWO_SIDED_95 * libm::sqrt(sd.max(0.0)));
            (tau + tau2) * longer.min(MOST_LONGER)
        } else {
            0.0
        },
        lag_s: has_lag.then_some(tau),
        theta_s: best.fit.point.dead_time_s,
    })
}

/// Advice for the next test, empty where every step was accepted. `steps`: the fit of the step's own
/// kind where there is one, and its verdict.
pub(crate) fn next_time(
    trace: &Trace,
    context: &Context,
    noise: &Noise,
    model: Option<&Model>,
    steps: &[(Option<(&Fitted, &Candidate)>, &Judged)],
    tried: &[crate::steps::OpStep],
) -> Vec<Advice> {
    let has = |code: ReasonCode| {
        steps.iter().any(|(_, judged)| {
            judged.verdict != Verdict::Accepted && judged.reasons.iter().any(|r| r.code == code)
        })
    };
    let known = known(model, steps);
    let mut advice = Vec::new();
    let mut say = |what: &str, how: String| {
        advice.push(Advice {
            what: what.to_owned(),
            how,
        });
    };
    let largest = tried
        .iter()
        .map(|s| (s.op_to - s.op_from).abs())
        .fold(0.0, f64::max);
    let watched_s = tried
        .iter()
        .map(|s| watched_until_s(trace, s) - arrived_s(trace, s))
        .fold(0.0, f64::max);
    let needed = match (&known, noise.sigma) {
        (Some(known), Some(sigma)) => {
            let time = if known.integrates {
                (watched_s - known.theta_s).max(trace.interval_s())
            } else {
                1.0
            };
            Some(CHANGE_SIGMAS * sigma / (known.gain.abs() * time))
        }
        _ => None,
    };
    let unit = |percent: f64| context.op_span.engineering_change(percent);
    if has(ReasonCode::Change) || has(ReasonCode::NoFit) || has(ReasonCode::Misfit) {
        say("Move", how_far(needed, noise.sigma, largest, context));
    }
    if has(ReasonCode::Saturated) {
        let size = needed.unwrap_or(largest).clamp(1.0, 40.0);
        let room = CLEARANCE_PERCENT + size;
        let at = tried
            .first()
            .map_or(50.0, |s| s.op_from)
            .clamp(room, 100.0 - room);
        let five = libm::round(at / 5.0) * 5.0;
        let at = if five >= room && five <= 100.0 - room {
            five
        } else {
            at
        };
        say(
            "Start",
            format!(
                "near OP {}, so that no move ends within {CLEARANCE_PERCENT} % of the end of a range.",
                op_text(context.op_span.engineering(at), context)
            ),
        );
    }
    if has(ReasonCode::Watched) || has(ReasonCode::Drift) || has(ReasonCode::Change) {
        if let Some(known) = &known {
            let wait = if known.integrates {
                (known.theta_s + WATCH_LAGS * known.lags_s).max(5.0 * known.theta_s)
            } else {
                known.theta_s + WATCH_LAGS * known.lags_s
            };
            if wait > 0.0 {
                say(
                    "Wait",
                    format!(
                        "at least {} after each move, until the PV is steady before the next.",
                        short_time(wait)
                    ),
                );
            }
        } else {
            say(
                "Wait",
                "until the PV is steady before each move and after it.".to_owned(),
            );
        }
    }
    if has(ReasonCode::Samples) {
        let interval = known.as_ref().and_then(|k| {
            k.lag_s
                .map(|lag| lag / LOG_PER_LAG)
                .or((k.theta_s > 0.0).then_some(k.theta_s / 5.0))
        });
        match interval {
            Some(s) if s < trace.interval_s() => {
                say(
                    "Log",
                    format!("the PV every {} s or faster.", crate::display::plain(s, 2)),
                );
            }
            // What was logged would do for the process as it is known.
            Some(_) => {}
            None => say("Log", "the PV faster.".to_owned()),
        }
    }
    if has(ReasonCode::BadSamples) {
        say("Log", "with a PV that is good throughout.".to_owned());
    }
    // Without a reason of its own a one-sided or a single step still wants its counterpart.
    let directions = |up: bool| {
        steps.iter().zip(tried).any(|((_, judged), step)| {
            judged.verdict != Verdict::Rejected && (step.op_to > step.op_from) == up
        })
    };
    if advice.is_empty() && !(directions(true) && directions(false)) {
        let size = needed.unwrap_or(0.0).max(largest);
        let how = if size > 0.0 {
            format!(
                "OP by about {} in both directions.",
                op_text(unit(rounded_up(size)), context)
            )
        } else {
            "OP by hand with the loop in manual, twice in one direction and then back, each time until the PV \
             is steady; log the mode with it."
                .to_owned()
        };
        advice.push(Advice {
            what: "Move".to_owned(),
            how,
        });
    }
    advice
}

/// A time rounded up, without needless decimals.
fn short_time(seconds: f64) -> String {
    let seconds = if seconds < 120.0 {
        rounded_up(seconds)
    } else {
        60.0 * rounded_up(seconds / 60.0)
    };
    time_text(seconds).replace(".0 ", " ")
}

/// An OP value or move in its own unit; percent where its range is 0 to 100.
fn op_text(value: f64, context: &Context) -> String {
    let percent = context.op_span.low() == 0.0 && context.op_span.high() == 100.0;
    let value = crate::quantity::round_significant(value, 2);
    if percent {
        format!("{value} %")
    } else {
        format!("{value} (its own unit)")
    }
}

fn how_far(needed: Option<f64>, sigma: Option<f64>, largest: f64, context: &Context) -> String {
    let text = |percent: f64| op_text(context.op_span.engineering_change(percent), context);
    match (needed, sigma) {
        (Some(needed), _) if needed > 30.0 => format!(
            "OP by as much as operations allow: {} would be needed for the PV to change by about \
             {CHANGE_SIGMAS} times its noise. Filter the noise at its source first.",
            text(rounded_up(needed))
        ),
        (Some(needed), _) if needed <= largest => format!(
            "OP by {} as the largest move here, with nothing else disturbing the PV.",
            text(largest)
        ),
        (Some(needed), _) => format!(
            "OP by at least {} (PV then changes by about {CHANGE_SIGMAS} times its noise), once up and once down.",
            text(rounded_up(needed))
        ),
        (None, Some(sigma)) => format!(
            "OP by more than {}, so far that the PV changes by {} % of its range ({CHANGE_SIGMAS} \
             times its noise), once up and once down.",
            text(largest),
            figure(rounded_up(CHANGE_SIGMAS * sigma))
        ),
        (None, None) => format!("OP by more than {}, once up and once down.", text(largest)),
    }
}

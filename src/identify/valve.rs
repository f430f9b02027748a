//! Valve dead band from reversals, told apart from a gain that differs by operating point or by direction.
//!
//! The valve is taken as play: it stands where it is until the OP has run through the dead band, then
//! follows half of it behind (the backlash operator, e.g. G. Tao, P.V. Kokotovic, Adaptive Control of
//! Systems with Actuator and Sensor Nonlinearities, Wiley 1996). For each dead band the PV is fitted from the
//! position that the OP as logged gives such a valve; the profile of the sum of squares over the dead band
//! has its interval where it rises by the likelihood ratio's bound (W.A. Venzon, S.H. Moolgavkar, Applied
//! Statistics 37 (1988) 87-94), with the memory of the noise counted.
//!
//! How much of the play lay before the first move nobody knows: it is a parameter of its own. A test that
//! tells a dead band moves twice in one direction and reverses.

use super::covariance::student_95;
use super::least_squares::Point;
use super::pooled::{self, Fitted};
use super::profile::{Profile, SETS, crossing, golden, play, prepared, problem};
use super::{NONLINEAR_RATIO, Valve, search};
use crate::model::Kind;
use crate::steps::OpStep;
use crate::trace::Trace;

/// Points of the first look over all dead bands.
const GRID: usize = 16;
/// A dead band reaches no further than this part of the smallest move that the PV answered to.
const MOST_OF_MOVE: f64 = 0.98;
/// An interval that reaches beyond this part of the largest dead band looked at has no upper end.
const UNBOUNDED: f64 = 0.9;
/// A dead band that leaves more doubt about the gain than this (as a standard deviation of its logarithm)
/// is printed, but not taken off the moves.
const MOST_GAIN_SD: f64 = 0.1;
/// A dead band whose interval begins below this is none that matters, %.
const SMALLEST_PERCENT: f64 = 0.02;
/// Scatter between steps this many times what noise explains is no chance.
const BEYOND_CHANCE: f64 = 4.0;
/// By so much in BIC a dead band is believed before a gain that differs by direction or by operating
/// point, and one of these before both: odds of about 3 to 1.
const VALVE_FIRST: f64 = 2.0;
/// The OP's jitter from peak to peak, as standard deviations: of a readback the valve never sees it.
const PEAK_TO_PEAK: f64 = 6.0;

/// What steps in both directions tell beside the common model.
#[derive(Debug, Clone, PartialEq, Default)]
pub(crate) struct Findings {
    pub valve: Option<Valve>,
    /// Why there is no figure of the dead band, in words.
    pub not_assessed: Option<String>,
    /// Gain of upward moves over that of downward moves, where direction explains the gains.
    pub direction_ratio: Option<f64>,
    /// What the doubt about the dead band adds to the standard deviation of ln gain.
    pub gain_sd: f64,
}

impl Findings {
    fn none(why: &str) -> Self {
        Findings {
            not_assessed: Some(why.to_owned()),
            ..Findings::default()
        }
    }
}

impl Valve {
    /// Position of the valve, % of OP, at each of the OP's values since the beginning of the log.
    pub fn positions(&self, op: &[f64]) -> Vec<f64> {
        play(op, self.dead_band_percent, self.start_percent)
    }

    /// Whether the test shows a dead band at all: its interval leaves 0 out.
    pub fn is_seen(&self) -> bool {
        self.low > 0.0
    }
}

/// The trace and its steps as the valve moved: for fits, not for print.
pub(crate) fn as_moved(trace: &Trace, steps: &[OpStep], valve: &Valve) -> (Trace, Vec<OpStep>) {
    let (times, op) = trace.op_log();
    let positions = valve.positions(op);
    let moved = steps
        .iter()
        .enumerate()
        .map(|(k, step)| {
            let first = times.partition_point(|t| *t < step.at_s);
            let next = steps.get(k + 1).map_or(f64::INFINITY, |s| s.at_s);
            let end = times.partition_point(|t| *t < next);
            let from = positions[first.saturating_sub(1)];
            let part = &positions[first..end.max(first)];
            let furthest = part.iter().fold(from, |far, p| {
                if (p - from).abs() > (far - from).abs() {
                    *p
                } else {
                    far
                }
            });
            // The OP may be logged for longer than the step was watched.
            let watched = super::verdict::watched_until_s(trace, step);
            let there = times.partition_point(|t| *t <= watched).max(first + 1);
            let to = positions[there.min(positions.len()) - 1];
            OpStep {
                op_from: from,
                op_to: if step.pulse { furthest } else { to },
                ..step.clone()
            }
        })
        .collect();
    (trace.with_op_log(positions), moved)
}

/// Whether a usable step turns back on the move before it.
fn reverses(steps: &[OpStep], usable: &[&Fitted]) -> bool {
    let way = |s: &OpStep| s.op_to - s.op_from;
    usable.iter().any(|fitted| {
        let step = &fitted.step;
        let before = steps
            .iter()
            .rev()
            .find(|s| s.at_s < step.at_s)
            .map(|s| if s.pulse { -way(s) } else { way(s) });
        before.is_some_and(|before| before * way(step) < 0.0)
    })
}

/// What the usable steps tell of the valve and of gains that differ. `kind` and `point` are those of the
/// pooled model.
pub(crate) fn assess(
    trace: &Trace,
    steps: &[OpStep],
    usable: &[&Fitted],
    kind: Kind,
    point: Point,
) -> Findings {
    // In a pulse what the valve loses and how the process answers cannot be told apart well.
    let usable: Vec<&Fitted> = usable.iter().copied().filter(|f| !f.step.pulse).collect();
    if usable.is_empty() {
        return Findings::none("a pulse does not tell a dead band: make steps that are held");
    }
    if !reverses(steps, &usable) {
        return Findings {
            direction_ratio: None,
            ..Findings::none("the test has no reversal, pulses not counted, that the PV answers")
        };
    }
    if usable.len() < 2 {
        return Findings::none("a single usable step does not tell what is lost on reversal");
    }
    let Some(mut profile) = prepared(trace, steps, &usable, kind, point) else {
        return Findings::none("the steps could not be fitted together");
    };
    let smallest = usable
        .iter()
        .map(|f| (f.step.op_to - f.step.op_from).abs())
        .fold(f64::INFINITY, f64::min);
    let most = MOST_OF_MOVE * smallest;
    let mut found = searched(&profile, most);
    if profile.ramped() && found.best > SMALLEST_PERCENT {
        // Of a ramp the play also delays the answer: dead time and lags are found anew.
        let valve = Valve {
            dead_band_percent: found.best,
            low: 0.0,
            high: most,
            open: true,
            in_fit: false,
            start_percent: profile.start(found.best, found.slack),
        };
        let (moved, moved_steps) = as_moved(trace, steps, &valve);
        let windows = usable.iter().map(|f| {
            let step = moved_steps.iter().find(|s| s.number == f.step.number);
            pooled::window(&moved, step.unwrap_or(&f.step))
        });
        let problem = problem(windows.collect(), &usable, kind);
        if let Ok(fit) = search::fit(&problem, kind, &[profile.point]) {
            profile = profile.at(fit.point, fit.rss);
            found = searched(&profile, most);
        }
    }
    finding(&profile, &found, trace)
}

/// The best explanation of the steps, and the profile over the dead band beside it.
struct Search {
    /// Index into [`SETS`].
    set: usize,
    /// Whether the dead band is part of it.
    with_valve: bool,
    best: f64,
    slack: f64,
    low: f64,
    high: f64,
    /// Whether larger dead bands than the largest looked at would do as well.
    open: bool,
}

/// The least of a profile over the dead band, within the two points of the grid around its least one.
fn least_over(most: f64, curve: impl Fn(f64) -> f64) -> (f64, f64) {
    let grid = |k: usize| most * k as f64 / GRID as f64;
    let place = (0..=GRID)
        .min_by(|a, b| curve(grid(*a)).total_cmp(&curve(grid(*b))))
        .expect("the grid has points");
    let at = golden(
        (grid(place.saturating_sub(1)), grid((place + 1).min(GRID))),
        &curve,
    );
    (at, curve(at))
}

fn searched(profile: &Profile, most: f64) -> Search {
    // Everything that may explain the steps, each no richer than the steps are many. Between a dead
    // band and a gain that differs, the valve is the usual cause.
    let mut best = (f64::INFINITY, 0, false);
    let mut offer = |rss: f64, parameters: usize, handicap: f64, set: usize, valve: bool| {
        let bic = profile.bic(rss, parameters) + handicap;
        if parameters <= profile.pieces.len() && bic < best.0 {
            best = (bic, set, valve);
        }
    };
    for (set, factors) in SETS.iter().enumerate() {
        let alone = factors.len();
        let handicap = VALVE_FIRST * (alone - 1) as f64;
        offer(profile.rss(0.0, 0.0, factors), alone, handicap, set, false);
        let taken_up = least_over(most, |b| profile.rss(b, 0.0, factors)).1;
        offer(taken_up, alone + 1, handicap, set, true);
        let any = least_over(most, |b| profile.least(b, factors).rss).1;
        offer(any, alone + 2, handicap, set, true);
    }
    let (_, set, with_valve) = best;
    refined(profile, (set, with_valve), most)
}

fn refined(profile: &Profile, (set, with_valve): (usize, bool), most: f64) -> Search {
    let factors = SETS[set];
    let at = |dead_band: f64| profile.least(dead_band, factors);
    let (mut best, _) = least_over(most, |b| at(b).rss);
    let mut least = at(best);
    let parameters = factors.len() + 1 + usize::from(least.matters);
    let chance = student_95(profile.effective - parameters as f64);
    let mut bound = chance * chance * profile.variance;
    // What the steps scatter by beyond their noise.
    let spare = profile.pieces.len().saturating_sub(parameters);
    if spare > 0 {
        let scatter = (least.rss - profile.free_rss).max(0.0) / spare as f64;
        if scatter > BEYOND_CHANCE * profile.variance {
            let chance = student_95(spare as f64);
            bound = chance * chance * scatter;
        }
    }
    // The play taken up at the start, unless the samples say otherwise: of dead bands that do as well
    // the smallest.
    let (plain, plain_rss) = least_over(most, |b| profile.rss(b, 0.0, factors));
    if plain_rss <= least.rss + 0.25 * bound {
        (best, least.slack) = (plain, 0.0);
    }
    let beyond = |b: f64| at(b).rss - least.rss > bound;
    let grid = |k: usize| most * k as f64 / GRID as f64;
    let low = (0..=GRID)
        .rev()
        .find(|&k| grid(k) < best && beyond(grid(k)))
        .map_or(0.0, |k| crossing(grid(k), grid(k + 1).min(best), beyond));
    let high = (0..=GRID)
        .find(|&k| grid(k) > best && beyond(grid(k)))
        .map(|k| crossing(grid(k), grid(k.max(1) - 1).max(best), beyond));
    Search {
        set,
        with_valve,
        best,
        slack: least.slack,
        low,
        open: high.is_none_or(|high| high > UNBOUNDED * most),
        high: high.unwrap_or(most),
    }
}

fn finding(profile: &Profile, found: &Search, trace: &Trace) -> Findings {
    let set = SETS[found.set];
    let (dead_band, slack) = if found.with_valve {
        (found.best, found.slack)
    } else {
        (0.0, 0.0)
    };
    let (factors, _) = profile.solve(&profile.sums(dead_band, slack), set);
    let (up, down) = (factors[0] + factors[1], factors[0] - factors[1]);
    let ratio = up / down;
    let mut findings = Findings {
        direction_ratio: (set.contains(&1)
            && ratio > 0.0
            && (ratio >= NONLINEAR_RATIO || ratio <= 1.0 / NONLINEAR_RATIO))
            .then_some(ratio),
        ..Findings::default()
    };
    // Of a readback that jitters the play may be smaller by all of it.
    let (_, op) = trace.op_log();
    let jitter = PEAK_TO_PEAK * crate::steps::jitter(op);
    let low = (found.low - jitter).max(0.0);
    let shown = found.with_valve && low > SMALLEST_PERCENT;
    if found.open && !shown {
        findings.not_assessed = Some(
            "the only reversals follow a first move that may have taken up the play itself: move twice \
             in one direction, then back"
                .to_owned(),
        );
        return findings;
    }
    // What the gain would be at either end of the interval.
    let gain = |b: f64| {
        let slack = profile.least(b, set).slack;
        profile.solve(&profile.sums(b, slack), set).0[0].abs()
    };
    let here = gain(found.best);
    let gain_sd = [found.low, found.high]
        .map(|b| libm::log(gain(b) / here).abs())
        .into_iter()
        .fold(0.0, f64::max)
        / super::covariance::TWO_SIDED_95;
    let in_fit = shown && !found.open && gain_sd < MOST_GAIN_SD;
    if in_fit {
        findings.gain_sd = gain_sd;
    }
    findings.valve = Some(Valve {
        dead_band_percent: found.best,
        low: if shown { low } else { 0.0 },
        high: found.high,
        open: found.open,
        in_fit,
        start_percent: profile.start(found.best, found.slack),
    });
    findings
}

//! A trial without a set-point move that can be judged: load steps at the process input, fitted.

use super::agreement::ends;
use super::run::{LEAST_SAMPLES, Line, Rest, Run, mean};
use super::{AsLeft, Trial, TrialError, TrialKind, TrialMove};
use crate::display::{fixed, with_unit};
use crate::model::ProcessModel;
use crate::predict::measure::Disturbance;
use std::ops::Range;

/// A load's misfit agrees up to this, percent.
const MISFIT_AGREES: f64 = 35.0;
/// A fitted load stands out where its peak exceeds the noise by this.
const LOAD_OVER_NOISE: f64 = 5.0;
/// Least peak of a load that stands out, and least swing, % of span.
const LEAST_PEAK_PERCENT: f64 = 0.1;
/// Instants at which a load is tried to begin.
const LOAD_STARTS: usize = 240;
/// Load steps that are fitted to one run at most: with more of them any run could be explained.
const MOST_LOADS: usize = 3;
/// A load is past where its effect on the PV has come below this part of its peak; another is looked
/// for only there, so that no two of them mend the shape of one.
const PAST_PART: f64 = 0.1;
/// Times that the loads found so far are fitted anew, each with the others taken off.
const PASSES: usize = 3;

/// A load step fitted to the run.
#[derive(Clone, Copy)]
struct Load {
    /// Sample at which it begins.
    start: usize,
    /// % of OP.
    size: f64,
}

/// Load steps fitted with one model, and what they leave.
struct Fitted {
    loads: Vec<Load>,
    /// PV at rest, %.
    base: f64,
    line: Line,
    misfit_percent: f64,
}

/// The trial by the loads that came in.
pub(super) fn trial(run: &Run, left: &AsLeft) -> Result<Trial, TrialError> {
    let oscillation = run.oscillation(0..run.t_s.len(), LEAST_PEAK_PERCENT, 0);
    let fitted = Fit::new(run, left, left.model).fitted();
    if fitted.loads.is_empty() && oscillation.is_none() {
        return Err(TrialError::NothingHappened);
    }
    let loads = loads_in_words(&fitted.loads);
    let (agrees, why) = match &oscillation {
        Some(seen) => (false, format!("{}.", seen.text)),
        None if fitted.misfit_percent <= MISFIT_AGREES => (
            true,
            format!(
                "{loads} with a misfit of {:.0} % (bound {MISFIT_AGREES} %), and no cycle is seen.",
                fitted.misfit_percent
            ),
        ),
        None => match best_of_others(run, left) {
            Some((name, misfit)) if misfit <= MISFIT_AGREES => (
                true,
                format!(
                    "With {name} the loads explain the run with a misfit of {misfit:.0} % (bound {MISFIT_AGREES} %; \
                     {:.0} % with the fitted model), and no cycle is seen.",
                    fitted.misfit_percent
                ),
            ),
            _ => (
                false,
                format!(
                    "{loads} with a misfit of {:.0} % only (bound {MISFIT_AGREES} %), whichever model of the test \
                     is taken.",
                    fitted.misfit_percent
                ),
            ),
        },
    };
    let lines = run.predicted_by_all(left, fitted.rest(run), |t| load_at(run, &fitted.loads, t));
    let judged = |load: Load, window| moved(run, &lines, &fitted, load, window, agrees);
    let end = |k: usize| fitted.loads.get(k + 1).map_or(run.t_s.len(), |l| l.start);
    let loads = fitted.loads.iter().enumerate();
    let moves: Vec<TrialMove> = loads
        .map(|(k, load)| judged(*load, load.start..end(k)))
        .collect();
    // A cycle without any load: figures of the whole run.
    let cycle = judged(
        Load {
            start: 0,
            size: 0.0,
        },
        0..run.t_s.len(),
    );
    let chosen = moves
        .iter()
        .max_by(|a, b| a.step_percent.abs().total_cmp(&b.step_percent.abs()))
        .unwrap_or(&cycle);
    Ok(Trial {
        kind: TrialKind::Load,
        at_s: chosen.at_s,
        step_percent: chosen.step_percent,
        measured: chosen.measured,
        predicted: chosen.predicted,
        predicted_rmse_percent: run.rmse(&fitted.line.pv),
        agrees,
        oscillation,
        why,
        curve: run.curve(&fitted.line),
        band: run.band(&lines),
        not_judged: None,
        moves,
    })
}

/// The model of the set that leaves the least misfit, and that.
fn best_of_others(run: &Run, left: &AsLeft) -> Option<(String, f64)> {
    left.stable_others()
        .map(|(name, model)| {
            let fitted = Fit::new(run, left, model).fitted();
            (name.clone(), fitted.misfit_percent)
        })
        .min_by(|a, b| a.1.total_cmp(&b.1))
}

/// "A load step of 5.0 % OP explains the run", "Load steps of 5.0 and −3.0 % OP explain the run".
fn loads_in_words(loads: &[Load]) -> String {
    match loads {
        [one] => format!(
            "A load step of {} explains the run",
            with_unit(&fixed(one.size, 1), "% OP")
        ),
        [most @ .., last] => {
            let most: Vec<String> = most.iter().map(|l| fixed(l.size, 1)).collect();
            format!(
                "Load steps of {} and {} explain the run",
                most.join(", "),
                with_unit(&fixed(last.size, 1), "% OP")
            )
        }
        [] => "No load step explains the run".to_owned(),
    }
}

fn load_at(run: &Run, loads: &[Load], t: f64) -> f64 {
    loads
        .iter()
        .filter(|load| t >= run.t_s[load.start])
        .map(|load| load.size)
        .sum()
}

impl Fitted {
    fn rest(&self, run: &Run) -> Rest {
        Rest {
            pv: self.base,
            op: run.quiet_mean(run.op, self.loads.first().map_or(0, |load| load.start)),
            sp: run.sp[0],
        }
    }
}

/// One load with its figures over `window`.
fn moved(
    run: &Run,
    lines: &[Line],
    fitted: &Fitted,
    load: Load,
    window: Range<usize>,
    agrees: bool,
) -> TrialMove {
    let at_rest = fitted.rest(run);
    let wander = run.wander(window.start);
    let before = window.start.saturating_sub(1);
    let of = |pv: &[f64], op: &[f64], op_rest, hold_s| {
        let rest = Rest {
            op: op_rest,
            ..at_rest
        };
        let moved = (Disturbance::Load(load.size), window.clone());
        run.metrics(moved, (pv, op), rest, wander, hold_s)
    };
    let op_rest = |op: &[f64]| {
        if fitted
            .loads
            .first()
            .is_some_and(|first| first.start == load.start)
        {
            at_rest.op
        } else {
            op[before]
        }
    };
    let settling = lines
        .iter()
        .filter_map(|l| of(&l.pv, &l.op, op_rest(&l.op), None).settling_time_s);
    let line = &fitted.line;
    let predicted = of(&line.pv, &line.op, op_rest(&line.op), None);
    TrialMove {
        at_s: run.t_s[window.start],
        step_percent: load.size,
        measured: of(
            &run.smooth,
            run.op,
            op_rest(run.op),
            predicted.settling_time_s,
        ),
        predicted,
        settling_time_of_models_s: ends(settling),
        overshoot_of_models_percent: None,
        agrees,
        oscillation: None,
        why: String::new(),
    }
}

/// The fit of load steps with one model.
struct Fit<'r> {
    run: &'r Run<'r>,
    left: &'r AsLeft<'r>,
    model: &'r ProcessModel,
    /// PV deviation after a load of 1 % OP at the first sample, the OP far from its ends; later loads
    /// are the same, later.
    unit: Vec<f64>,
    /// Seconds after which that is past; `None` where the run ends before.
    past_s: Option<f64>,
    /// PV at the samples less what the set point alone makes of it.
    beside_set_point: Vec<f64>,
}

impl<'r> Fit<'r> {
    fn new(run: &'r Run<'r>, left: &'r AsLeft<'r>, model: &'r ProcessModel) -> Self {
        let still = Run {
            sp: vec![0.0; run.sp.len()],
            smooth: Vec::new(),
            ..*run
        };
        let rest = Rest {
            pv: 0.0,
            op: 50.0,
            sp: 0.0,
        };
        let unit = still.predicted(left, model, rest, |_| 1.0).pv;
        let from = Rest {
            pv: run.sp[0],
            op: run.op[0],
            sp: run.sp[0],
        };
        let by_set_point = run.predicted(left, model, from, |_| 0.0).pv;
        let both = run.pv.iter().zip(by_set_point);
        let beside_set_point = both.map(|(pv, by)| pv - by).collect();
        let peak = highest(&unit);
        let last = unit.iter().rposition(|v| v.abs() > PAST_PART * peak);
        Fit {
            run,
            left,
            model,
            past_s: last
                .and_then(|last| run.t_s.get(last + 1))
                .map(|t| t - run.t_s[0]),
            unit,
            beside_set_point,
        }
    }

    /// The fewest load steps that explain the run, or the most that are tried.
    fn fitted(&self) -> Fitted {
        let mut loads: Vec<Load> = Vec::new();
        let mut best = self.with(&loads);
        while loads.len() < MOST_LOADS {
            let Some(next) = self.next(&loads) else { break };
            loads.push(next);
            if loads.len() > 1 {
                for _ in 0..PASSES {
                    self.fit_again(&mut loads);
                }
            }
            loads.sort_by_key(|load| load.start);
            best = self.with(&loads);
            if best.misfit_percent <= MISFIT_AGREES {
                break;
            }
        }
        best
    }

    /// One more load that stands out, begun where no other is at work.
    fn next(&self, loads: &[Load]) -> Option<Load> {
        let left_over = self.without(loads);
        let last = self.run.t_s.len() - LEAST_SAMPLES / 2;
        let stride = last.div_ceil(LOAD_STARTS);
        let coarse = self.best(&left_over, loads, (0..last).step_by(stride))?;
        let near = self.near(coarse.start, stride);
        let found = self.best(&left_over, loads, near)?;
        let seen = &self.unit[..self.unit.len() - found.start];
        let peak = found.size.abs() * highest(seen);
        (peak > (LOAD_OVER_NOISE * self.run.noise).max(LEAST_PEAK_PERCENT)).then_some(found)
    }

    /// Each load again, with the others taken off.
    fn fit_again(&self, loads: &mut [Load]) {
        let stride = self.run.t_s.len().div_ceil(LOAD_STARTS);
        for k in 0..loads.len() {
            let others: Vec<Load> = (0..loads.len())
                .filter(|other| *other != k)
                .map(|other| loads[other])
                .collect();
            let near = self.near(loads[k].start, stride);
            if let Some(found) = self.best(&self.without(&others), &others, near) {
                loads[k] = found;
            }
        }
    }

    fn near(&self, start: usize, stride: usize) -> Range<usize> {
        let last = self.run.t_s.len() - LEAST_SAMPLES / 2;
        start.saturating_sub(stride)..(start + stride).min(last)
    }

    /// The load of least squares among those that begin at `starts`, away from the others.
    fn best(
        &self,
        values: &[f64],
        others: &[Load],
        starts: impl Iterator<Item = usize>,
    ) -> Option<Load> {
        let t_s = self.run.t_s;
        let free = |start: &usize| {
            others.iter().all(|other| {
                self.past_s
                    .is_some_and(|past| (t_s[*start] - t_s[other.start]).abs() >= past)
            })
        };
        starts
            .filter(free)
            .filter_map(|start| self.one(values, start))
            .min_by(|a, b| a.1.total_cmp(&b.1))
            .map(|(load, _)| load)
    }

    /// Least squares of base + size × shape to `values`, the shape moved to begin at sample `start`; and the
    /// sum of squares left, less what is the same for every load.
    fn one(&self, values: &[f64], start: usize) -> Option<(Load, f64)> {
        let (mut s1, mut s2, mut y1, mut ys) = (0.0, 0.0, 0.0, 0.0);
        for (k, &y) in values.iter().enumerate() {
            y1 += y;
            if k > start {
                let s = self.unit_at(self.run.t_s[k] - self.run.t_s[start]);
                s1 += s;
                s2 += s * s;
                ys += s * y;
            }
        }
        let count = values.len() as f64;
        let spread = s2 - s1 * s1 / count;
        let covered = ys - s1 * y1 / count;
        let size = covered / spread;
        (spread > 0.0).then_some((Load { start, size }, -size * covered))
    }

    /// PV at the samples, without what the set point and the loads do.
    fn without(&self, loads: &[Load]) -> Vec<f64> {
        let run = self.run;
        (0..run.t_s.len())
            .map(|k| {
                let done = loads
                    .iter()
                    .filter(|load| k > load.start)
                    .map(|load| load.size * self.unit_at(run.t_s[k] - run.t_s[load.start]));
                self.beside_set_point[k] - done.sum::<f64>()
            })
            .collect()
    }

    /// The unit response, `after` seconds from the load.
    fn unit_at(&self, after: f64) -> f64 {
        let t_s = self.run.t_s;
        let t = t_s[0] + after;
        let k = t_s.partition_point(|s| *s <= t).max(1) - 1;
        match (t_s.get(k + 1), self.unit.get(k + 1)) {
            (Some(next_t), Some(next)) => {
                let into = (t - t_s[k]) / (next_t - t_s[k]);
                self.unit[k] + into * (next - self.unit[k])
            }
            _ => self.unit[k],
        }
    }

    /// What these loads leave, the loop simulated with the ends of the OP.
    fn with(&self, loads: &[Load]) -> Fitted {
        let mut fitted = Fitted {
            loads: loads.to_vec(),
            base: mean(&self.without(loads)) + self.run.sp[0],
            line: Line {
                pv: Vec::new(),
                op: Vec::new(),
            },
            misfit_percent: 0.0,
        };
        fitted.line = self
            .run
            .predicted(self.left, self.model, fitted.rest(self.run), |t| {
                load_at(self.run, loads, t)
            });
        fitted.misfit_percent = misfit_percent(self.run, &fitted.line.pv);
        fitted
    }
}

fn highest(values: &[f64]) -> f64 {
    values.iter().fold(0.0, |peak: f64, v| peak.max(v.abs()))
}

/// 100·√max(0, ‖y − ŷ‖² − nσ²)/‖y − ȳ‖.
fn misfit_percent(run: &Run, predicted: &[f64]) -> f64 {
    let middle = mean(run.pv);
    let (mut left, mut whole) = (0.0, 0.0);
    for (y, p) in run.pv.iter().zip(predicted) {
        left += (y - p) * (y - p);
        whole += (y - middle) * (y - middle);
    }
    let noise = run.pv.len() as f64 * run.sigma * run.sigma;
    if whole > 0.0 {
        100.0 * libm::sqrt((left - noise).max(0.0) / whole)
    } else {
        0.0
    }
}

//! The closed-loop trial held against the prediction.

mod agreement;

use crate::display::{fixed, with_unit};
use crate::model::ProcessModel;
use crate::predict::measure::{
    Disturbance, Meter, SETTLED_LEAST_PERCENT, Sample, Thinner, noise_sd, smoothed,
};
use crate::predict::oscillation::{self, Oscillation};
use crate::predict::simulate::{Inputs, SampledController, run};
use crate::predict::{Curve, Metrics, PvFilter};
use crate::settings::{Action, Controller, Terms};
use crate::trace::Trace;
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};
use std::ops::Range;
use thiserror::Error;

/// What the trial was judged on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum TrialKind {
    /// A set-point move.
    SetPoint,
    /// A load disturbance; no set point was moved.
    Load,
}

/// A closed-loop trial: what it showed, and what the model predicted for it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Trial {
    /// What it was judged on.
    pub kind: TrialKind,
    /// When that was, seconds on the samples' clock.
    pub at_s: f64,
    /// Its size: % of span (set point) or % of OP (load, fitted).
    pub step_percent: f64,
    /// The measured figures.
    #[serde(flatten)]
    pub measured: Metrics,
    /// The same figures of the predicted response.
    pub predicted: Metrics,
    /// Root mean square of measured less predicted PV over the whole run, % of span.
    pub predicted_rmse_percent: f64,
    /// Whether measured and predicted agree.
    pub agrees: bool,
    /// An oscillation, where one is seen.
    pub oscillation: Option<Oscillation>,
    /// In words, why they agree or do not.
    pub why: String,
    /// The prediction on the samples' clock, thinned: seconds of the log, PV and OP in % of their ranges.
    pub curve: Curve,
}

/// Why a log is no trial.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum TrialError {
    /// A mode column says that the loop was never in automatic.
    #[error("the mode column says that the loop was never in automatic")]
    NeverAutomatic,
    /// Too few samples.
    #[error("only {0} samples in automatic: too few for a trial")]
    TooShort(usize),
    /// Neither a set-point move nor a load that stands out.
    #[error("no set-point move, and no load disturbance beyond the noise")]
    NothingHappened,
    /// The set point was moved, by too little to be seen.
    #[error(
        "the set point was moved by {size_percent:.1} % of span only; against the noise and wander of this PV \
         a trial needs {needed_percent:.1} %"
    )]
    MoveTooSmall {
        /// The largest move, % of span.
        size_percent: f64,
        /// What would be enough, % of span.
        needed_percent: f64,
    },
}

/// The loop as it was left: what the prediction is made with.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AsLeft<'a> {
    /// The process.
    pub model: &'a ProcessModel,
    /// The settings, magnitudes, in the controller's own form.
    pub terms: &'a Terms,
    /// The controller.
    pub controller: &'a Controller,
    /// The PV filter.
    pub filter: PvFilter,
    /// The controller's action.
    pub action: Action,
}

/// Samples that a trial needs in automatic.
const LEAST_SAMPLES: usize = 30;
/// Set-point moves smaller than this are none, % of span.
const LEAST_MOVE_PERCENT: f64 = 0.2;
/// A load's misfit agrees up to this, percent.
const MISFIT_AGREES: f64 = 35.0;
/// A fitted load stands out where its peak exceeds the noise by this.
const LOAD_OVER_NOISE: f64 = 5.0;
/// The PV is smoothed over this part of the process's dead time plus time constant before figures are
/// read off it: short against any answer of the loop, long against noise.
const SMOOTHED_PART: f64 = 0.1;
/// A set-point move is judged where it is this many times the band that a settled PV strays in.
const MOVE_OVER_BAND: f64 = 3.0;
/// A swing exceeds the noise by this: noise alone reaches it once in 100,000 samples.
const SWING_OVER_NOISE: f64 = 4.5;
/// Instants at which a load is tried to begin.
const LOAD_STARTS: usize = 240;

/// The stretch in automatic with its noise.
struct Run<'a> {
    t_s: &'a [f64],
    pv: &'a [f64],
    op: &'a [f64],
    /// Set point at each sample; the mean PV where none was logged.
    sp: Vec<f64>,
    smooth: Vec<f64>,
    /// Noise of the smoothed PV, %.
    noise: f64,
    /// Noise of the PV, %.
    sigma: f64,
}

/// A load step fitted to the run.
struct FittedLoad {
    /// Sample at which it begins.
    start: usize,
    /// % of OP.
    size: f64,
    /// PV before it, %.
    base: f64,
    /// Sum of squares left, less what is the same for every load.
    squares: f64,
}

/// A move of the set point: the first sample at the new one, and its size.
struct Move {
    index: usize,
    size: f64,
}

/// Holds a closed-loop log against what the model predicts for it.
///
/// # Errors
/// Where the log holds nothing to judge.
pub fn trial(trace: &Trace, loop_as_left: &AsLeft) -> Result<Trial, TrialError> {
    let run = Run::new(trace, loop_as_left)?;
    let moves = run.moves(loop_as_left.controller.scan_s);
    // The largest move; of equal ones the first.
    let mut chosen: Option<usize> = None;
    for (k, m) in moves.iter().enumerate() {
        let end = moves.get(k + 1).map_or(run.t_s.len(), |next| next.index);
        let larger = chosen.is_none_or(|c| m.size.abs() > moves[c].size.abs() * (1.0 + 1e-9));
        if larger && end - m.index >= LEAST_SAMPLES / 2 {
            chosen = Some(k);
        }
    }
    match chosen {
        Some(k) => {
            let needed_percent = MOVE_OVER_BAND * run.least_band(moves[k].index);
            let size_percent = moves[k].size.abs();
            if size_percent < needed_percent {
                return Err(TrialError::MoveTooSmall {
                    size_percent,
                    needed_percent,
                });
            }
            let end = moves.get(k + 1).map_or(run.t_s.len(), |next| next.index);
            Ok(run.set_point_trial(loop_as_left, &moves, k, end))
        }
        None => run.load_trial(loop_as_left),
    }
}

impl<'a> Run<'a> {
    /// The longest stretch in automatic.
    fn new(trace: &'a Trace, loop_as_left: &AsLeft) -> Result<Self, TrialError> {
        let stretch = longest_automatic(trace);
        if stretch.is_empty() {
            return Err(TrialError::NeverAutomatic);
        }
        if stretch.len() < LEAST_SAMPLES {
            return Err(TrialError::TooShort(stretch.len()));
        }
        let t_s = &trace.t_s()[stretch.clone()];
        let pv = &trace.pv()[stretch.clone()];
        let sp = match trace.sp() {
            Some(sp) => sp[stretch.clone()].to_vec(),
            None => vec![mean(pv); pv.len()],
        };
        let model = loop_as_left.model;
        let pace = model.dead_time_s() + model.time_constant_s().unwrap_or(0.0);
        let (smooth, width) = smoothed(t_s, pv, SMOOTHED_PART * pace);
        let sigma = noise_sd(pv);
        Ok(Run {
            t_s,
            pv,
            op: &trace.op()[stretch],
            sp,
            smooth,
            noise: sigma / libm::sqrt(width),
            sigma,
        })
    }

    /// Moves of the set point; a ramp, or moves in quick succession, are one.
    fn moves(&self, scan_s: f64) -> Vec<Move> {
        let interval = crate::trace::median_interval(self.t_s);
        let together = (5.0 * interval).max(3.0 * scan_s);
        let mut found: Vec<(usize, usize)> = Vec::new();
        for k in 1..self.sp.len() {
            if self.sp[k] == self.sp[k - 1] {
                continue;
            }
            match found.last_mut() {
                Some((_, last)) if self.t_s[k] - self.t_s[*last] <= together => *last = k,
                _ => found.push((k, k)),
            }
        }
        found
            .into_iter()
            .map(|(first, last)| Move {
                index: first,
                size: self.sp[last] - self.sp[first - 1],
            })
            .filter(|m| m.size.abs() >= LEAST_MOVE_PERCENT)
            .collect()
    }

    /// Mean of `values` over the last third of the time before `index`, at least 10 samples where
    /// there are that many.
    fn quiet_mean(&self, values: &[f64], index: usize) -> f64 {
        if index == 0 {
            return values[0];
        }
        let since = self.t_s[index] - (self.t_s[index] - self.t_s[0]) / 3.0;
        let from = self.t_s[..index].partition_point(|t| *t < since);
        mean(&values[from.min(index.saturating_sub(10))..index])
    }

    /// PV and OP that the model gives from rest at (`pv`, `op`), at the samples.
    fn predicted(
        &self,
        left: &AsLeft,
        pv: f64,
        op: f64,
        sp_at_rest: f64,
        load: impl Fn(f64) -> f64,
    ) -> (Vec<f64>, Vec<f64>) {
        let scan_s = left.controller.scan_s;
        let start = self.t_s[0];
        let executions = libm::ceil((self.t_s[self.t_s.len() - 1] - start) / scan_s) as usize + 2;
        let mut controller = SampledController::new(
            left.terms,
            left.controller,
            left.filter,
            left.action,
            [(-op).min(0.0), (100.0 - op).max(0.0)],
        );
        let (mut at, mut filled) = (0, 0);
        let mut before: Option<Sample> = None;
        let mut answer = (Vec::new(), Vec::new());
        run(
            left.model,
            &mut controller,
            scan_s,
            executions,
            |k| {
                let now = start + k as f64 * scan_s;
                while at + 1 < self.t_s.len() && self.t_s[at + 1] <= now + 1e-9 * scan_s {
                    at += 1;
                }
                Inputs {
                    set_point: self.sp[at] - sp_at_rest,
                    load: load(now),
                }
            },
            |now| {
                // Between two executions the OP is that of the first; the PV is taken as straight.
                if let Some(from) = before {
                    while filled < self.t_s.len() && self.t_s[filled] - start < now.t_s {
                        let into = (self.t_s[filled] - start - from.t_s) / scan_s;
                        answer.0.push(pv + from.pv + into * (now.pv - from.pv));
                        answer.1.push(op + from.op);
                        filled += 1;
                    }
                }
                before = Some(now);
            },
        );
        answer
    }

    /// Figures of a response over `window`: deviations from `pv`, `op` and `sp`. A measured one has
    /// settled when it has stayed in the band for `hold_s`, as long as it was predicted to take.
    fn metrics(
        &self,
        disturbance: Disturbance,
        window: Range<usize>,
        response: (&[f64], &[f64]),
        rest: (f64, f64, f64),
        hold_s: Option<f64>,
    ) -> Metrics {
        let margin = (3.0 * self.noise).max(self.wander(window.start));
        let mut meter = Meter::new(disturbance).with_margin(margin);
        if let Some(hold_s) = hold_s {
            meter = meter.with_hold(hold_s);
        }
        let (at, (pv, op, sp)) = (self.t_s[window.start], rest);
        for k in window {
            meter.take(Sample {
                t_s: self.t_s[k] - at,
                set_point: self.sp[k] - sp,
                pv: response.0[k] - pv,
                op: response.1[k] - op,
            });
        }
        meter.metrics()
    }

    /// Half width of the narrowest settling band before sample `first`, % of span.
    fn least_band(&self, first: usize) -> f64 {
        SETTLED_LEAST_PERCENT + (3.0 * self.noise).max(self.wander(first))
    }

    /// How far the smoothed PV strays from its mean while the loop is at rest before sample `first`, %
    /// (19 in 20 samples): what the plant does by itself is no part of the response. 0 where the log
    /// shows too little of it.
    fn wander(&self, first: usize) -> f64 {
        let rest: Vec<f64> = (0..first)
            .rev()
            .take_while(|&k| self.sp[k] == self.sp[first - 1])
            .map(|k| self.smooth[k])
            .collect();
        if rest.len() < LEAST_SAMPLES {
            return 0.0;
        }
        let middle = mean(&rest);
        let mut strays: Vec<f64> = rest.iter().map(|pv| (pv - middle).abs()).collect();
        let place = strays.len() * 19 / 20;
        *strays.select_nth_unstable_by(place, f64::total_cmp).1
    }

    fn set_point_trial(&self, left: &AsLeft, moves: &[Move], chosen: usize, end: usize) -> Trial {
        let first = moves[0].index;
        let sp_at_rest = self.sp[first - 1];
        let (pv_rest, op_rest) = (
            self.quiet_mean(self.pv, first),
            self.quiet_mean(self.op, first),
        );
        let (pv, op) = self.predicted(left, pv_rest, op_rest, sp_at_rest, |_| 0.0);
        let Move { index, size } = moves[chosen];
        let window = index..end;
        // The same offset between PV and SP at rest is taken off measured and predicted.
        let sp_before = self.sp[index - 1];
        let rest = |op: &[f64]| (pv_rest - sp_at_rest + sp_before, op[index - 1], sp_before);
        let step = Disturbance::SetPoint(size);
        let predicted = self.metrics(step, window.clone(), (&pv, &op), rest(&op), None);
        let measured = self.metrics(
            step,
            window.clone(),
            (&self.smooth, self.op),
            rest(self.op),
            predicted.settling_time_s,
        );
        let threshold = (SWING_OVER_NOISE * self.noise).max(0.05 * size.abs());
        let oscillation = self.oscillation(window, threshold, 1);
        let (agrees, why) = agreement::agreement(&measured, &predicted, oscillation.as_ref());
        self.result(
            (TrialKind::SetPoint, self.t_s[index], size),
            (measured, predicted),
            oscillation,
            (agrees, why),
            (pv, op),
        )
    }

    fn load_trial(&self, left: &AsLeft) -> Result<Trial, TrialError> {
        let sp = self.sp[0];
        let threshold = (SWING_OVER_NOISE * self.noise).max(0.1);
        let oscillation = self.oscillation(0..self.t_s.len(), threshold, 0);
        // The answer to a load of 1 % OP from the first sample on; later loads are the same, later.
        let unit = self.unit_load(left);
        let FittedLoad {
            start, size, base, ..
        } = self.fit_load(&unit);
        let seen = &unit[..unit.len() - start];
        let peak = size.abs() * seen.iter().map(|v| v.abs()).fold(0.0, f64::max);
        let stands_out = peak > (LOAD_OVER_NOISE * self.noise).max(0.1);
        if !stands_out && oscillation.is_none() {
            return Err(TrialError::NothingHappened);
        }
        let at = self.t_s[start];
        let op_rest = self.quiet_mean(self.op, start);
        let load = |t: f64| if t >= at { size } else { 0.0 };
        let (pv, op) = self.predicted(left, base, op_rest, sp, load);
        let window = start..self.t_s.len();
        let step = Disturbance::Load(size);
        let rest = (base, op_rest, sp);
        let predicted = self.metrics(step, window.clone(), (&pv, &op), rest, None);
        let measured = self.metrics(
            step,
            window,
            (&self.smooth, self.op),
            rest,
            predicted.settling_time_s,
        );
        let misfit = self.misfit_percent(&pv);
        let (agrees, why) = match &oscillation {
            Some(seen) => (false, format!("{}.", seen.text)),
            None if misfit <= MISFIT_AGREES => (
                true,
                format!(
                    "A load step of {} explains the run with a misfit of {misfit:.0} % (bound {MISFIT_AGREES} %), and no cycle is seen.",
                    with_unit(&fixed(size, 1), "% OP")
                ),
            ),
            None => (
                false,
                format!(
                    "A load step of {} explains the run with a misfit of {misfit:.0} % only (bound {MISFIT_AGREES} %).",
                    with_unit(&fixed(size, 1), "% OP")
                ),
            ),
        };
        Ok(self.result(
            (TrialKind::Load, at, size),
            (measured, predicted),
            oscillation,
            (agrees, why),
            (pv, op),
        ))
    }

    fn result(
        &self,
        (kind, at_s, step_percent): (TrialKind, f64, f64),
        (measured, predicted): (Metrics, Metrics),
        oscillation: Option<Oscillation>,
        (agrees, why): (bool, String),
        (pv, op): (Vec<f64>, Vec<f64>),
    ) -> Trial {
        let squares = self.pv.iter().zip(&pv).map(|(a, b)| (a - b) * (a - b));
        let predicted_rmse_percent = libm::sqrt(squares.sum::<f64>() / pv.len() as f64);
        let mut line = Thinner::new(pv.len());
        for (k, (&pv, &op)) in pv.iter().zip(&op).enumerate() {
            line.take(Sample {
                t_s: self.t_s[k],
                set_point: self.sp[k],
                pv,
                op,
            });
        }
        Trial {
            kind,
            at_s,
            step_percent,
            measured,
            predicted,
            predicted_rmse_percent,
            agrees,
            oscillation,
            why,
            curve: line.curve(),
        }
    }

    fn oscillation(
        &self,
        window: Range<usize>,
        threshold: f64,
        skip: usize,
    ) -> Option<Oscillation> {
        let error: Vec<f64> = window
            .clone()
            .map(|k| self.sp[k] - self.smooth[k])
            .collect();
        oscillation::find(&self.t_s[window], &error, threshold, skip)
    }

    /// PV deviation after a load of 1 % OP at the first sample, the OP far from its ends.
    fn unit_load(&self, left: &AsLeft) -> Vec<f64> {
        let still = Run {
            sp: vec![0.0; self.sp.len()],
            smooth: Vec::new(),
            ..*self
        };
        still.predicted(left, 0.0, 50.0, 0.0, |_| 1.0).0
    }

    /// The load step that explains the PV best; `unit` is the answer to 1 % OP from the first sample on.
    fn fit_load(&self, unit: &[f64]) -> FittedLoad {
        let last = self.t_s.len() - LEAST_SAMPLES / 2;
        let stride = last.div_ceil(LOAD_STARTS);
        let better = |best: FittedLoad, start: usize| match self.load_from(unit, start) {
            Some(found) if found.squares < best.squares => found,
            _ => best,
        };
        let none = FittedLoad {
            start: 0,
            size: 0.0,
            base: mean(self.pv),
            squares: f64::INFINITY,
        };
        let coarse = (0..last).step_by(stride).fold(none, better);
        let near = coarse.start.saturating_sub(stride)..(coarse.start + stride).min(last);
        near.fold(coarse, better)
    }

    /// Least squares of base + size × shape, the shape moved to begin at sample `start`.
    fn load_from(&self, unit: &[f64], start: usize) -> Option<FittedLoad> {
        let (mut s1, mut s2, mut y1, mut ys) = (0.0, 0.0, 0.0, 0.0);
        for k in 0..self.t_s.len() {
            let y = self.pv[k] - self.sp[k];
            y1 += y;
            if k > start {
                let s = self.at(unit, self.t_s[k] - self.t_s[start]);
                s1 += s;
                s2 += s * s;
                ys += s * y;
            }
        }
        let count = self.t_s.len() as f64;
        let spread = s2 - s1 * s1 / count;
        let size = (ys - s1 * y1 / count) / spread;
        (spread > 0.0).then(|| FittedLoad {
            start,
            size,
            base: (y1 - size * s1) / count + self.sp[0],
            squares: -size * (ys - s1 * y1 / count),
        })
    }

    /// A response given at the samples, `after` seconds from the first.
    fn at(&self, response: &[f64], after: f64) -> f64 {
        let t = self.t_s[0] + after;
        let k = self.t_s.partition_point(|s| *s <= t).max(1) - 1;
        match (self.t_s.get(k + 1), response.get(k + 1)) {
            (Some(next_t), Some(next)) => {
                let into = (t - self.t_s[k]) / (next_t - self.t_s[k]);
                response[k] + into * (next - response[k])
            }
            _ => response[k],
        }
    }

    /// 100·√max(0, ‖y − ŷ‖² − nσ²)/‖y − ȳ‖.
    fn misfit_percent(&self, predicted: &[f64]) -> f64 {
        let middle = mean(self.pv);
        let (mut left, mut whole) = (0.0, 0.0);
        for (y, p) in self.pv.iter().zip(predicted) {
            left += (y - p) * (y - p);
            whole += (y - middle) * (y - middle);
        }
        let noise = self.pv.len() as f64 * self.sigma * self.sigma;
        if whole > 0.0 {
            100.0 * libm::sqrt((left - noise).max(0.0) / whole)
        } else {
            0.0
        }
    }
}

/// The longest stretch of samples in automatic; all of them where no mode was logged.
fn longest_automatic(trace: &Trace) -> Range<usize> {
    let Some(manual) = trace.manual() else {
        return 0..trace.len();
    };
    let mut longest = 0..0;
    let mut from = 0;
    for k in 0..=manual.len() {
        if k == manual.len() || manual[k] {
            if k - from > longest.len() {
                longest = from..k;
            }
            from = k + 1;
        }
    }
    longest
}

fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

#[cfg(test)]
mod tests;

//! Identification: from the steps of a trace to a process model with its intervals.

mod advice;
mod bounds;
mod choice;
pub mod covariance;
mod descent;
pub mod least_squares;
pub mod memory;
mod noise;
mod outliers;
mod pass;
mod pooled;
mod profile;
mod reading;
mod response;
mod search;
mod valve;
mod verdict;
mod words;

use crate::model::{Kind, ProcessModel};
use crate::quantity::Estimate;
use crate::steps::OpStep;
use crate::trace::{Moment, Trace};
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};
use std::borrow::Cow;

pub use bounds::VerdictBounds;

/// Verdict on a step.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum Verdict {
    /// Usable.
    Accepted,
    /// Usable, with the reason printed.
    Reservation,
    /// Not used, with the reason printed.
    Rejected,
}

/// What a verdict was given for; the code of a reason.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, JsonSchema,
)]
#[serde(rename_all = "kebab-case")]
pub enum ReasonCode {
    /// PV change against the noise.
    Change,
    /// PV was not at rest before the step.
    Drift,
    /// Watched for too short a time after the move.
    Watched,
    /// Too few samples for the time constant.
    Samples,
    /// PV or OP stood at the end of its range.
    Saturated,
    /// Bad samples or a gap in the window.
    BadSamples,
    /// The fit leaves more than the noise.
    Misfit,
    /// Gain of the other sign than the other steps.
    Sign,
    /// The loop was not in manual.
    Mode,
    /// No model could be fitted.
    NoFit,
    /// In a cascade: tested before the inner loop was left as it is.
    InnerLoop,
}

/// Why a verdict is not plainly `accepted`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Reason {
    /// The rule.
    pub code: ReasonCode,
    /// In words, with the figure and its bound: "drift 31 % (bound 20 %)".
    pub text: String,
    /// The figure the rule looks at, where it is a number.
    pub figure: Option<f64>,
    /// The bound it was held against.
    pub bound: Option<f64>,
}

impl Reason {
    /// Whether it is that the PV moved before the step, and not that too little of its rest was seen.
    pub(crate) fn is_slope(&self) -> bool {
        self.code == ReasonCode::Drift && self.text.starts_with(verdict::DRIFT)
    }
}

/// The 63.2 % construction on one step (self-regulating), or its slopes (integrating).
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Reading {
    /// Gain, %/% or, for an integrating process, %/s/%.
    pub gain: f64,
    /// From the move of the OP to the first answer of the PV, s.
    pub dead_time_s: f64,
    /// From the first answer to 63.2 % of the whole change, s; `None` for integrating processes.
    pub time_constant_s: Option<f64>,
    /// Mean PV of the quiet stretch, %.
    pub base_percent: f64,
    /// Mean PV of the settled tail, %; for integrating processes the PV at the end of the window.
    pub end_percent: f64,
    /// Slopes before and after, % per s, for integrating processes.
    pub slopes_percent_per_s: Option<[f64; 2]>,
    /// Whether reading and fit differ by more than 25 % in gain or in dead time plus time constant.
    pub differs: bool,
}

/// The least-squares fit of one step, with the kind of the record's model.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct StepFit {
    /// Which model.
    pub kind: Kind,
    /// Gain, %/% or %/s/%, signed.
    pub gain: Estimate,
    /// τ, s; `None` for a pure integrator.
    pub time_constant_s: Option<Estimate>,
    /// τ₂, s, second-order alone.
    pub second_time_constant_s: Option<Estimate>,
    /// θ, s.
    pub dead_time_s: Estimate,
    /// What noise does not explain, percent of the PV's movement (03, misfit).
    pub residual_percent: f64,
    /// Root mean square of the residual, % of span.
    pub rmse_percent: f64,
    /// PV that the fit gives with the OP at its value before the move, %.
    pub bias_percent: f64,
    /// Slope added to the model, % per s about the time of the move; 0 where none was needed.
    pub drift_percent_per_s: f64,
}

/// One step of the record: what was done, what it showed, and whether it is used.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Step {
    /// 1 for the first move of the log.
    pub number: usize,
    /// When.
    pub at: Moment,
    /// When, seconds on the samples' clock.
    pub at_s: f64,
    /// OP before, in its own unit.
    pub op_from: f64,
    /// OP after, in its own unit.
    pub op_to: f64,
    /// PV before (mean of the quiet stretch), engineering units.
    pub pv_from: f64,
    /// PV at the end (mean of the tail), engineering units.
    pub pv_to: f64,
    /// First and last second of the window, on the samples' clock.
    pub window_s: [f64; 2],
    /// First and last second of the quiet stretch.
    pub quiet_s: [f64; 2],
    /// Whether it is a pulse.
    pub pulse: bool,
    /// The verdict.
    pub verdict: Verdict,
    /// Why, where it is not plainly accepted.
    pub reasons: Vec<Reason>,
    /// The figures every verdict rule looked at, with their bounds, also where they passed.
    pub checks: Vec<Check>,
    /// The 63.2 % reading.
    pub reading: Option<Reading>,
    /// The fit of this step alone.
    pub fit: Option<StepFit>,
}

/// One rule of the verdict with its figure and bounds.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Check {
    /// The rule.
    pub code: ReasonCode,
    /// The figure; `None` where it could not be assessed.
    pub figure: Option<f64>,
    /// Bound for a reservation.
    pub reservation: Option<f64>,
    /// Bound for a rejection.
    pub rejected: Option<f64>,
}

/// A kind that was not chosen.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Alternative {
    /// Which kind.
    pub kind: Kind,
    /// Its BIC less that of the chosen kind.
    pub bic: f64,
    /// Root mean square of its residual, % of span.
    pub rmse_percent: f64,
    /// Why it was not chosen, in words.
    pub why_not: String,
}

/// One model of the set that the design has to be safe for.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct SetMember {
    /// Where it comes from: "step 2", "end of the interval, 1st axis, up".
    pub label: String,
    /// Gain, %/% or %/s/%.
    pub gain: f64,
    /// τ, s.
    pub time_constant_s: Option<f64>,
    /// τ₂, s.
    pub second_time_constant_s: Option<f64>,
    /// θ, s.
    pub dead_time_s: f64,
}

/// The process model of a record: the pooled fit over all usable steps.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Model {
    /// Which model.
    pub kind: Kind,
    /// Gain, %/% or %/s/%, signed.
    pub gain: Estimate,
    /// τ, s; `None` for a pure integrator.
    pub time_constant_s: Option<Estimate>,
    /// τ₂, s, second-order alone.
    pub second_time_constant_s: Option<Estimate>,
    /// θ, s.
    pub dead_time_s: Estimate,
    /// Numbers of the steps it was fitted to.
    pub steps: Vec<usize>,
    /// Robust standard deviation of the PV's noise, %; `None` where not assessable.
    pub noise_sd_percent: Option<f64>,
    /// Smallest step of the PV's digits, %; `None` where not assessable.
    pub resolution_percent: Option<f64>,
    /// Root mean square of the pooled residual, %.
    pub rmse_percent: f64,
    /// What noise does not explain, percent of the movement.
    pub residual_percent: f64,
    /// The parameters of `covariance`, in order: `ln gain`, `ln time constant`, ... `ln (dead time + interval)`.
    pub covariance_of: Vec<String>,
    /// Covariance of those, row by row, after widening.
    pub covariance: Vec<Vec<f64>>,
    /// Lag-one autocorrelation of the residual.
    pub residual_autocorrelation: f64,
    /// Effective number of samples.
    pub effective_samples: f64,
    /// Whether the intervals were widened to cover the spread between steps.
    pub widened: bool,
    /// Largest gain of a usable step over the smallest, where their intervals do not meet; `None` where they agree.
    pub gain_ratio: Option<f64>,
    /// Gain of upward moves over that of downward moves, where the direction explains that gains differ.
    pub direction_ratio: Option<f64>,
    /// Where the kind is not decided by the data: in words, why, and what was designed for.
    pub undecided: Option<String>,
    /// The kinds not chosen.
    pub alternatives: Vec<Alternative>,
    /// Every model the design has to be safe for, the fitted one not among them.
    pub set: Vec<SetMember>,
}

/// What identification makes of a test.
#[derive(Debug, Clone, PartialEq)]
pub struct Identification {
    /// Every step found, judged.
    pub steps: Vec<Step>,
    /// The model; `None` where no step is usable.
    pub model: Option<Model>,
    /// Robust standard deviation of the PV's noise, %; `None` where not assessable.
    pub noise_sd_percent: Option<f64>,
    /// max(noise sd, resolution/√12), %; `None` where not assessable.
    pub sigma_percent: Option<f64>,
    /// Whether the log was compressed, which is why noise is not assessable then.
    pub compressed: bool,
    /// Samples that stand apart from their neighbours and were left out.
    pub outliers: usize,
    /// What to do next time where steps are rejected or weak, one line each: (what, how).
    pub next_time: Vec<Advice>,
    /// Valve dead band; `None`: not assessable.
    pub valve: Option<Valve>,
    /// Why the dead band is not assessable, in words.
    pub valve_not_assessed: Option<String>,
}

/// Advice for the next test.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Advice {
    /// "Move", "Start", "Wait", "Log".
    pub what: String,
    /// The rest of the sentence, with its figures.
    pub how: String,
}

/// Valve dead band from reversals.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Valve {
    /// OP move lost on reversal, %.
    pub dead_band_percent: f64,
    /// Low end of the 95 % interval; 0 where the test shows none.
    pub low: f64,
    /// High end of the 95 % interval.
    pub high: f64,
    /// Whether the test bounds it from below alone: `high` is then the smallest move, which the valve followed.
    pub open: bool,
    /// Whether gains and fits are those of the valve's own moves, the dead band taken off the OP's.
    pub in_fit: bool,
    /// Position of the valve less the OP at the beginning of the log, % of OP.
    pub start_percent: f64,
}

impl Model {
    /// The fitted values as a model to compute with.
    pub fn process(&self) -> ProcessModel {
        ProcessModel::of_kind(
            self.kind,
            self.gain.value,
            self.time_constant_s.map_or(0.0, |e| e.value),
            self.second_time_constant_s.map_or(0.0, |e| e.value),
            self.dead_time_s.value,
        )
    }

    /// The models of the set with their labels.
    pub fn set_models(&self) -> Vec<(&str, ProcessModel)> {
        self.set
            .iter()
            .map(|m| {
                let model = ProcessModel::of_kind(
                    self.kind,
                    m.gain,
                    m.time_constant_s.unwrap_or(0.0),
                    m.second_time_constant_s.unwrap_or(0.0),
                    m.dead_time_s,
                );
                (m.label.as_str(), model)
            })
            .collect()
    }
}

/// Gains of the steps that differ by less than this factor are not called non-linear: intervals of
/// good tests are narrow enough to part steps by a few percent, which no loop notices (Ms moves by less
/// than the margin between the two robustness limits).
const NONLINEAR_RATIO: f64 = 1.2;

impl Model {
    /// Whether the two time constants cannot be told apart: a double lag.
    pub fn double_lag(&self) -> bool {
        match (self.time_constant_s, self.second_time_constant_s) {
            (Some(longer), Some(shorter)) => longer.low <= shorter.high,
            _ => false,
        }
    }

    /// Largest gain of a step over the smallest, where the process is non-linear enough to say so.
    pub fn nonlinear_gain(&self) -> Option<f64> {
        self.gain_ratio.filter(|ratio| *ratio >= NONLINEAR_RATIO)
    }
}

impl StepFit {
    /// The fitted values as a model to compute with.
    pub fn process(&self) -> ProcessModel {
        ProcessModel::of_kind(
            self.kind,
            self.gain.value,
            self.time_constant_s.map_or(0.0, |e| e.value),
            self.second_time_constant_s.map_or(0.0, |e| e.value),
            self.dead_time_s.value,
        )
    }
}

/// What identification needs beside the trace.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Context {
    /// The samples' clock, for the moments of the steps.
    pub clock: crate::trace::Clock,
    /// Range of the PV, for engineering units in the steps.
    pub pv_span: crate::quantity::Span,
    /// Range of the OP.
    pub op_span: crate::quantity::Span,
    /// Bounds of the verdict rules.
    pub bounds: VerdictBounds,
    /// Steps before this second were tested on another process (an inner loop was changed
    /// since): they are rejected. `None` otherwise.
    pub not_before_s: Option<f64>,
}

/// Judges the steps, reads and fits them, and fits the model over all usable ones.
///
/// Each step is fitted and judged with its own best kind; the pooled kind is chosen over the usable
/// steps; each usable step's fit is then given in that kind. A PV that is held between refreshes is
/// thinned to them first, and samples that stand apart from their neighbours are left out.
pub fn identify(trace: &Trace, steps: &[OpStep], context: &Context) -> Identification {
    let (mut trace, mut steps) = (Cow::Borrowed(trace), Cow::Borrowed(steps));
    if let Some(keep) = trace.refreshes() {
        (trace, steps) = thinned(&trace, &steps, &keep);
    }
    let mut outliers = 0;
    // A compressed log holds a single sample where the PV went there and back.
    if !noise::is_compressed(&trace)
        && let Some(keep) = outliers::without(&trace)
    {
        outliers = trace.len() - keep.len();
        (trace, steps) = thinned(&trace, &steps, &keep);
    }
    Identification {
        outliers,
        ..pass::identify_samples(&trace, &steps, context)
    }
}

/// A trace with some of its samples, and its steps in these.
fn thinned<'a>(
    trace: &Trace,
    steps: &[OpStep],
    keep: &[usize],
) -> (Cow<'a, Trace>, Cow<'a, [OpStep]>) {
    let steps = steps.iter().map(|step| in_kept(step, keep)).collect();
    (Cow::Owned(trace.thinned(keep)), Cow::Owned(steps))
}

/// A step with its ranges in the samples that were kept.
fn in_kept(step: &OpStep, keep: &[usize]) -> OpStep {
    let at = |index: usize| keep.partition_point(|k| *k < index);
    let range = |range: &std::ops::Range<usize>| at(range.start)..at(range.end);
    OpStep {
        window: range(&step.window),
        quiet: range(&step.quiet),
        ..step.clone()
    }
}

#[cfg(test)]
mod tests;

//! Identification: from the steps of a trace to a process model with its intervals.

mod advice;
mod bounds;
mod choice;
pub mod covariance;
mod descent;
pub mod least_squares;
pub mod memory;
mod noise;
mod pooled;
mod reading;
mod response;
mod search;
mod verdict;
mod words;

use crate::model::{Kind, ProcessModel};
use crate::quantity::Estimate;
use crate::steps::OpStep;
use crate::trace::{Moment, Trace};
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

pub use bounds::VerdictBounds;
use choice::Candidate;
use least_squares::Problem;
use noise::Noise;
use pooled::Fitted;
use verdict::{Grounds, Judged};

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
    /// What to do next time where steps are rejected or weak, one line each: (what, how).
    pub next_time: Vec<Advice>,
    /// Valve dead band; `None`: not assessed.
    pub valve: Option<Valve>,
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
    /// Low end of the 95 % interval.
    pub low: f64,
    /// High end of the 95 % interval.
    pub high: f64,
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
/// thinned to them first.
pub fn identify(trace: &Trace, steps: &[OpStep], context: &Context) -> Identification {
    match trace.refreshes() {
        Some(keep) => {
            let steps: Vec<OpStep> = steps.iter().map(|s| on_refreshes(s, &keep)).collect();
            identify_samples(&trace.thinned(&keep), &steps, context)
        }
        None => identify_samples(trace, steps, context),
    }
}

/// A step with its ranges in the thinned samples.
fn on_refreshes(step: &OpStep, keep: &[usize]) -> OpStep {
    let at = |index: usize| keep.partition_point(|k| *k < index);
    let range = |range: &std::ops::Range<usize>| at(range.start)..at(range.end);
    OpStep {
        window: range(&step.window),
        quiet: range(&step.quiet),
        ..step.clone()
    }
}

/// A step through fit and verdict.
struct Work {
    fitted: Option<Fitted>,
    own: Option<Kind>,
    judged: Judged,
}

impl Work {
    fn own(&self) -> Option<(&Fitted, &Candidate)> {
        let fitted = self.fitted.as_ref()?;
        Some((fitted, fitted.of(self.own?)))
    }
}

fn identify_samples(trace: &Trace, steps: &[OpStep], context: &Context) -> Identification {
    let noise = noise::assess(trace, steps);
    let mut work: Vec<Work> = Vec::new();
    for (k, step) in steps.iter().enumerate() {
        let before = k.checked_sub(1).map(|b| &steps[b]);
        work.push(fit_and_judge(trace, step, before, &noise, context));
    }
    compare_signs(&mut work, steps);
    let usable: Vec<&Fitted> = work
        .iter()
        .filter(|w| w.judged.verdict != Verdict::Rejected)
        .filter_map(|w| w.fitted.as_ref())
        .collect();
    let own_kinds: Vec<Kind> = work
        .iter()
        .filter(|w| w.judged.verdict != Verdict::Rejected)
        .filter_map(|w| w.own)
        .collect();
    let watched_s = usable
        .iter()
        .map(|f| watched_s(trace, &f.step))
        .fold(0.0, f64::max);
    let model = if usable.is_empty() {
        None
    } else {
        pooled::model(trace, &usable, &own_kinds, &noise, watched_s)
    };
    let for_advice: Vec<_> = work.iter().map(|w| (w.own(), &w.judged)).collect();
    let next_time = advice::next_time(trace, context, &noise, model.as_ref(), &for_advice, steps);
    let kind = model.as_ref().map(|m| m.kind);
    Identification {
        steps: work
            .iter()
            .zip(steps)
            .map(|(work, step)| finished(trace, step, work, kind, &noise, context))
            .collect(),
        model,
        noise_sd_percent: noise.sd,
        sigma_percent: noise.sigma,
        compressed: noise.compressed,
        next_time,
        valve: None,
    }
}

fn watched_s(trace: &Trace, step: &OpStep) -> f64 {
    verdict::watched_until_s(trace, step) - verdict::arrived_s(trace, step)
}

fn fit_and_judge(
    trace: &Trace,
    step: &OpStep,
    before: Option<&OpStep>,
    noise: &Noise,
    context: &Context,
) -> Work {
    let window = pooled::window(trace, step);
    let fitted = if step.quiet.is_empty() {
        Err("there are no samples before the move".to_owned())
    } else {
        choice::of_step(&Problem::new(vec![window.clone()]))
            .map(|candidates| Fitted {
                step: step.clone(),
                window,
                candidates,
            })
            .map_err(|error| error.to_string())
    };
    let own = fitted.as_ref().ok().map(|fitted| {
        choice::choose(
            &fitted.candidates,
            watched_s(trace, step),
            trace.interval_s(),
        )
        .kind
    });
    let mut grounds = Grounds {
        trace,
        noise,
        bounds: &context.bounds,
        not_before_s: context.not_before_s,
        explained_slope: 0.0,
    };
    let judged = match (&fitted, own) {
        (Ok(fitted), Some(kind)) => {
            let own = fitted.of(kind);
            grounds.explained_slope =
                before.map_or(0.0, |b| explained_slope(trace, b, step, own.fit.gains[0]));
            verdict::judge(step, Ok((own, fitted.window.own_moves())), &grounds)
        }
        (Err(why), _) => verdict::judge(step, Err(why.clone()), &grounds),
        (Ok(_), None) => verdict::judge(step, Err("no kind fits".to_owned()), &grounds),
    };
    Work {
        fitted: fitted.ok(),
        own,
        judged,
    }
}

/// Slope of an integrating PV that the move before explains, % per s: that of its quiet stretch and
/// what its move added. A level driven on purpose does not drift.
fn explained_slope(trace: &Trace, before: &OpStep, step: &OpStep, gain_per_s: f64) -> f64 {
    let contiguous = before.window.end >= step.quiet.start && before.quiet.len() >= 3;
    if !contiguous {
        return 0.0;
    }
    let quiet = before.quiet.clone();
    let slope = noise::line(&trace.t_s()[quiet.clone()], &trace.pv()[quiet]).slope;
    slope + gain_per_s * (step.op_from - before.op_from)
}

fn compare_signs(work: &mut [Work], steps: &[OpStep]) {
    let mut compared: Vec<(&mut Judged, f64, f64)> = work
        .iter_mut()
        .zip(steps)
        .filter_map(|(work, step)| {
            let gain = work.fitted.as_ref()?.of(work.own?).fit.gains[0];
            Some((&mut work.judged, gain, step.op_to - step.op_from))
        })
        .collect();
    verdict::compare_signs(&mut compared);
}

/// A step as the record holds it; `kind` is that of the model.
fn finished(
    trace: &Trace,
    step: &OpStep,
    work: &Work,
    kind: Option<Kind>,
    noise: &Noise,
    context: &Context,
) -> Step {
    let usable = work.judged.verdict != Verdict::Rejected;
    let fit = work
        .fitted
        .as_ref()
        .zip(kind)
        .filter(|_| usable)
        .map(|(fitted, kind)| {
            pooled::step_fit(
                fitted.of(kind),
                &fitted.window.pv,
                noise,
                trace.interval_s(),
            )
        });
    let integrates = kind.or(work.own).is_some_and(Kind::integrates);
    let mut reading = reading::read(trace, step, noise, integrates);
    if let (Some(reading), Some(fit)) = (&mut reading, &fit) {
        reading.differs = reading::differs(reading, fit, trace.interval_s());
    }
    let (from, to) = reading::ends(trace, step);
    let seconds = |range: &std::ops::Range<usize>| {
        let times = &trace.t_s()[range.clone()];
        [
            times.first().copied().unwrap_or(step.at_s),
            times.last().copied().unwrap_or(step.at_s),
        ]
    };
    Step {
        number: step.number,
        at: context.clock.at(step.at_s),
        at_s: step.at_s,
        op_from: context.op_span.engineering(step.op_from),
        op_to: context.op_span.engineering(step.op_to),
        pv_from: context.pv_span.engineering(from),
        pv_to: context.pv_span.engineering(to),
        window_s: seconds(&step.window),
        quiet_s: seconds(&step.quiet),
        pulse: step.pulse,
        verdict: work.judged.verdict,
        reasons: work.judged.reasons.clone(),
        checks: work.judged.checks.clone(),
        reading,
        fit,
    }
}

#[cfg(test)]
mod tests;

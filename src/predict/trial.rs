//! The closed-loop trial held against the prediction.
//!
//! Every set-point move that can be judged is judged; where none was made, load steps are. What is
//! measured agrees where it lies within what the models of the test predict, widened by a tolerance: a
//! trial cannot tell models apart that the test could not.

mod agreement;
mod load;
mod run;
mod set_point;

use crate::model::ProcessModel;
use crate::predict::oscillation::Oscillation;
use crate::predict::{Curve, Metrics, PvFilter, margins};
use crate::settings::{Action, Controller, Terms};
use crate::trace::Trace;
use run::Run;
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// What the trial was judged on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum TrialKind {
    /// Set-point moves.
    SetPoint,
    /// Load disturbances; no set point was moved that could be judged.
    Load,
}

/// A closed-loop trial: what it showed, and what the model predicted for it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Trial {
    /// What it was judged on.
    pub kind: TrialKind,
    /// When the largest of `moves` was, seconds on the samples' clock.
    pub at_s: f64,
    /// Its size: % of span (set point) or % of OP (load, fitted).
    pub step_percent: f64,
    /// The measured figures after it.
    #[serde(flatten)]
    pub measured: Metrics,
    /// The same figures of the predicted response.
    pub predicted: Metrics,
    /// Root mean square of measured less predicted PV over the whole run, % of span.
    pub predicted_rmse_percent: f64,
    /// Whether measured and predicted agree, after every move.
    pub agrees: bool,
    /// An oscillation, where one is seen: the worst of all moves.
    pub oscillation: Option<Oscillation>,
    /// In words, why they agree or do not.
    pub why: String,
    /// The prediction on the samples' clock, thinned: seconds of the log, PV and OP in % of their ranges.
    pub curve: Curve,
    /// Every set-point move that was judged, or every load step that was found, in order of time.
    #[serde(default)]
    pub moves: Vec<TrialMove>,
    /// How many set-point moves were not judged, and why, in words; `None` where all were.
    #[serde(default)]
    pub not_judged: Option<String>,
    /// What the models of the test predict between them, on the samples' clock.
    #[serde(default)]
    pub band: Band,
}

/// One set-point move of a trial, or one load step, and what came of it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct TrialMove {
    /// When, seconds on the samples' clock.
    pub at_s: f64,
    /// Its size: % of span (set point) or % of OP (load, fitted).
    pub step_percent: f64,
    /// The measured figures.
    pub measured: Metrics,
    /// The figures that the fitted model predicts.
    pub predicted: Metrics,
    /// Shortest and longest settling time that the models of the test predict, s; `None` where none
    /// settles in the time watched.
    pub settling_time_of_models_s: Option<[f64; 2]>,
    /// Smallest and largest overshoot that they predict, percent of the step; `None` for a load.
    pub overshoot_of_models_percent: Option<[f64; 2]>,
    /// Whether measured and predicted agree.
    pub agrees: bool,
    /// An oscillation, where one is seen.
    pub oscillation: Option<Oscillation>,
    /// In words, what speaks against agreement; empty where nothing does.
    pub why: String,
}

/// The lowest and the highest PV that the models of the test predict, at instants as many as a plot shows.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize, JsonSchema)]
pub struct Band {
    /// Seconds of the log.
    pub t_s: Vec<f64>,
    /// Lowest PV, % of its range.
    pub pv_low: Vec<f64>,
    /// Highest PV, % of its range.
    pub pv_high: Vec<f64>,
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
    /// The fitted process.
    pub model: &'a ProcessModel,
    /// The other models of the test, each named as in a sentence.
    pub others: &'a [(String, ProcessModel)],
    /// The settings, magnitudes, in the controller's own form.
    pub terms: &'a Terms,
    /// The controller.
    pub controller: &'a Controller,
    /// The PV filter.
    pub filter: PvFilter,
    /// The controller's action.
    pub action: Action,
}

impl<'a> AsLeft<'a> {
    /// The other models with which the loop is stable: a run that settles has shown the rest to be wrong.
    fn stable_others(&self) -> impl Iterator<Item = &'a (String, ProcessModel)> {
        let left = *self;
        self.others.iter().filter(move |(_, model)| {
            margins(model, left.terms, left.controller, left.filter, left.action).stable
        })
    }

    /// Whether the controller brings the PV back to its set point.
    fn integrates(&self) -> bool {
        match *self.terms {
            Terms::Standard { ti_s, .. } | Terms::Series { ti_s, .. } => ti_s.is_some(),
            Terms::Parallel { ki_per_s, .. } => ki_per_s > 0.0,
        }
    }
}

/// Holds a closed-loop log against what the models predict for it.
///
/// # Errors
/// Where the log holds nothing to judge.
pub fn trial(trace: &Trace, loop_as_left: &AsLeft) -> Result<Trial, TrialError> {
    let run = Run::new(trace, loop_as_left.model)?;
    match set_point::trial(&run, loop_as_left) {
        Some(Ok(found)) => Ok(found),
        // A load may have come in beside moves that are too small.
        Some(Err(too_small)) => load::trial(&run, loop_as_left).map_err(|_| too_small),
        None => load::trial(&run, loop_as_left),
    }
}

#[cfg(test)]
mod tests;

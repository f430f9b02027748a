//! The closed-loop trial held against the prediction.

use super::{Curve, Metrics};
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

/// What was moved in the trial.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum TrialKind {
    /// The set point.
    SetPoint,
    /// The load.
    Load,
}

/// A loop that swings.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Oscillation {
    /// Size of a swing over the one before it.
    pub decay_ratio: f64,
    /// Period, s.
    pub period_s: f64,
    /// Whether it goes on at a stable amplitude.
    pub limit_cycle: bool,
    /// In words.
    pub text: String,
}

/// What the closed-loop trial showed.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Trial {
    /// What was moved.
    pub kind: TrialKind,
    /// When, s on the samples' clock.
    pub at_s: f64,
    /// By how much, % of span (set point) or % of OP (load).
    pub step_percent: f64,
    /// The measured figures.
    #[serde(flatten)]
    pub measured: Metrics,
    /// The same, predicted with the settings as left.
    pub predicted: Metrics,
    /// Root mean square of measured less predicted PV, % of span.
    pub predicted_rmse_percent: f64,
    /// Whether measured and predicted agree.
    pub agrees: bool,
    /// Why, or why not, in words.
    pub why: String,
    /// The swinging, where it swings.
    pub oscillation: Option<Oscillation>,
    /// Predicted PV and OP, % of span, `t_s` on the samples' clock.
    pub curve: Curve,
}

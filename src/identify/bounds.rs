//! The bounds that steps are judged by.

use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

/// Bounds of the verdict rules, each `[reservation, rejected]`. Defaults are those of the method.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(default, deny_unknown_fields)]
pub struct VerdictBounds {
    /// PV change over σ, at least.
    pub change_over_sigma: [f64; 2],
    /// Drift over the quiet stretch, percent of the change, at most.
    pub drift_percent: [f64; 2],
    /// Watched time over τ, self-regulating, at least.
    pub watched_tau: [f64; 2],
    /// Watched time over θ, integrating, at least.
    pub watched_theta: [f64; 2],
    /// Samples per time constant, at least.
    pub samples_per_tau: [f64; 2],
    /// Bad samples in the window, percent, at most.
    pub bad_percent: [f64; 2],
    /// Misfit, percent, at most.
    pub misfit_percent: [f64; 2],
}

impl Default for VerdictBounds {
    fn default() -> Self {
        VerdictBounds {
            change_over_sigma: [10.0, 5.0],
            drift_percent: [5.0, 20.0],
            watched_tau: [3.0, 1.5],
            watched_theta: [5.0, 2.0],
            samples_per_tau: [5.0, 2.0],
            bad_percent: [5.0, 20.0],
            misfit_percent: [35.0, 60.0],
        }
    }
}

//! Margins and predicted responses of a loop.

use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

pub mod frequency;
pub mod measure;
pub mod open_loop;
pub mod oscillation;
pub mod simulate;
pub mod trial;
pub(crate) mod words;

pub use frequency::margins;

/// Stability margins of one loop. An unstable loop has no margin: all `None`.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Margins {
    /// Whether the closed loop is stable.
    pub stable: bool,
    /// Maximum sensitivity Ms.
    pub ms: Option<f64>,
    /// Maximum complementary sensitivity Mt.
    pub mt: Option<f64>,
    /// Gain margin, a ratio; `None` where the gain may rise without bound.
    pub gain_margin: Option<f64>,
    /// Phase margin, degrees; `None` where the loop gain never crosses 1.
    pub phase_margin_deg: Option<f64>,
    /// Delay margin, s; `None` where the loop gain never crosses 1.
    pub delay_margin_s: Option<f64>,
}

impl Margins {
    /// An unstable loop: no margin.
    pub fn unstable() -> Self {
        Margins {
            stable: false,
            ms: None,
            mt: None,
            gain_margin: None,
            phase_margin_deg: None,
            delay_margin_s: None,
        }
    }
}

/// The PV filter as the margins see it.
///
/// Where the log was taken after the filter and the filter was not changed since, both times are the
/// same and the fitted model holds the filter's lag.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct PvFilter {
    /// Filter time constant while the log was taken and seen in it, s; 0 where the log was taken
    /// before the filter (or there is none).
    pub in_log_s: f64,
    /// Filter time constant that the controller has, s.
    pub in_controller_s: f64,
}

/// A line of a predicted or measured response, thinned for printing.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize, JsonSchema)]
pub struct Curve {
    /// Seconds from the step.
    pub t_s: Vec<f64>,
    /// PV deviation from its start, %.
    pub pv: Vec<f64>,
    /// OP deviation from its start, %.
    pub op: Vec<f64>,
}

/// Figures of one closed-loop response.
///
/// Definitions: overshoot past the new set point in percent of the step; rise time from 10 to
/// 90 % of the step; settling time the last sample outside ±2 % of the step (at least ±0.1 % of span);
/// IAE the integral of |SP − PV|; OP travel the sum of all OP moves (K.J. Åström, T. Hägglund, PID
/// Controllers, 2nd ed. 1995, sec. 4.2).
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize, JsonSchema)]
pub struct Metrics {
    /// Overshoot, percent of the step; `None` for a load step.
    pub overshoot_percent: Option<f64>,
    /// 10-90 % rise time, s; `None` for a load step, or where 90 % is not reached.
    pub rise_time_s: Option<f64>,
    /// Settling time, s; `None` where it does not settle within the horizon.
    pub settling_time_s: Option<f64>,
    /// Integral of the absolute error, % of span times s.
    pub iae_percent_s: f64,
    /// Largest deviation of the PV from the set point (load) or from its start (set point), % of span.
    pub peak_deviation_percent: f64,
    /// Sum of all OP moves, %.
    pub op_travel_percent: f64,
}

/// A predicted response: its figures and its line.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Response {
    /// Size of the step, % of span (set point) or % of OP (load).
    pub step_percent: f64,
    /// The figures.
    #[serde(flatten)]
    pub metrics: Metrics,
    /// The line.
    pub curve: Curve,
}

/// Both predicted responses of one set of settings.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Predicted {
    /// After a set-point step of 5 % of span.
    pub set_point: Response,
    /// After a load step of 5 % of OP at the process input.
    pub load: Response,
}

//! Design: the fastest loop that every limit allows.

use crate::design::candidate::{Recipe, second_lag_s};
use crate::design::finish::{Finished, finish};
use crate::design::limits::Basis;
use crate::design::robustness::RobustnessLimit;
use crate::identify::Model;
use crate::model::ProcessModel;
pub use crate::predict::PvFilter;
use crate::settings::{Controller, Native, Standard};
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

mod candidate;
mod finish;
mod limits;
mod robustness;
pub mod rules;
#[cfg(test)]
mod tests;
mod words;

pub use candidate::effective_dead_time_s;
pub use robustness::{WorstMargins, other_models, worst_margins};

/// What the loop is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum Aim {
    /// Follow set-point changes.
    SetPoint,
    /// Hold against load changes.
    #[default]
    Load,
    /// Let a level move to smooth the flow; integrating processes only.
    Averaging,
}

/// The limits on the closed-loop time constant.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, JsonSchema,
)]
#[serde(rename_all = "kebab-case")]
pub enum LimitName {
    /// The closed-loop time constant asked for.
    Target,
    /// The effective dead time.
    DeadTime,
    /// Ms of the fitted model and of every model of the set.
    Robustness,
    /// Not driven many times faster than the process is.
    TimeConstant,
    /// OP movement that measurement noise causes.
    Noise,
    /// OP moved at once by a set-point step.
    OpMove,
    /// Controller executes several times within it.
    ScanTime,
    /// Slower than the inner loop of the cascade.
    InnerLoop,
    /// Averaging level: allowed deviation for the expected load.
    LevelDeviation,
}

/// Whether a reason may override a limit.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum Hardness {
    /// Yields to nothing.
    Hard,
    /// Yields to a target that has a reason.
    Soft,
}

/// How a limit came out.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum LimitOutcome {
    /// Met by the final settings.
    Met,
    /// Met whatever the closed-loop time constant.
    MetByAny,
    /// A soft limit overridden by a target with a reason.
    Overridden,
    /// A target faster (or slower) than the other limits allow, or a level that they do not let be
    /// kept within its deviation.
    NotMet,
    /// Could not be assessed from the data.
    NotAssessed,
}

/// One limit of the design.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Limit {
    /// Which.
    pub limit: LimitName,
    /// The closed-loop time constant it needs at least, s; `None` where any meets it or it was not assessed.
    pub needs_s: Option<f64>,
    /// Hard or soft; `None` for the target.
    pub kind: Option<Hardness>,
    /// How it came out.
    pub outcome: LimitOutcome,
    /// The figure it looks at, of the final settings (e.g. Ms, OP sd %), where there is one.
    pub figure: Option<f64>,
    /// The bound of that figure.
    pub bound: Option<f64>,
    /// What it asks, in words.
    pub detail: String,
}

/// Settings that a published rule gives on the same model.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct RuleSettings {
    /// Usual name of the rule.
    pub rule: String,
    /// Author, publication, year.
    pub source: String,
    /// Standard form.
    pub settings: Standard,
    /// Ms on the fitted model; `None` where unstable.
    pub ms: Option<f64>,
    /// Phase margin, degrees.
    pub phase_margin_deg: Option<f64>,
    /// Whether the model lies in the rule's published range.
    pub in_range: bool,
}

/// How the settings were arrived at.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Design {
    /// The closed-loop time constant τc, s.
    pub closed_loop_time_constant_s: f64,
    /// Effective dead time θe, s.
    pub effective_dead_time_s: f64,
    /// The limit that decided it.
    pub binding_limit: LimitName,
    /// In words: which limit decided, and with what figure.
    pub binding_detail: String,
    /// Which model of the set stands nearest to the robustness limit.
    pub governing_model: Option<String>,
    /// Whether derivative action is used, and why or why not.
    pub derivative: String,
    /// All limits, the target first.
    pub limits: Vec<Limit>,
    /// Published rules on the same model; empty where not assessed.
    pub rules: Vec<RuleSettings>,
    /// What the engineer should know of it, in words, for the cautions.
    pub remarks: Vec<String>,
}

/// Bounds of the design limits. Defaults are those of the method.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct DesignBounds {
    /// Ms of the fitted model, at most.
    pub ms: f64,
    /// Ms of every model of the set, at most.
    pub worst_ms: f64,
    /// τc in effective dead times, at least.
    pub dead_time: f64,
    /// τc in scans, at least.
    pub scan: f64,
    /// τc in closed-loop time constants of the inner loop, at least.
    pub inner: f64,
    /// τ / τc, at most.
    pub time_constant: f64,
    /// OP movement (sd) caused by noise, %, at most.
    pub noise_percent: f64,
    /// OP moved at once by a 1 % set-point step, %, at most.
    pub op_move_percent: f64,
}

impl Default for DesignBounds {
    fn default() -> Self {
        DesignBounds {
            ms: 1.8,
            worst_ms: 2.0,
            dead_time: 1.0,
            scan: 5.0,
            inner: 4.0,
            time_constant: 5.0,
            noise_percent: 0.5,
            op_move_percent: 5.0,
        }
    }
}

/// What the inner loop of a cascade brings.
#[derive(Debug, Clone, PartialEq)]
pub struct InnerLoop {
    /// Its tag.
    pub tag: String,
    /// Its closed-loop time constant, s.
    pub closed_loop_time_constant_s: f64,
}

/// What the schedule asks of the design.
#[derive(Debug, Clone, PartialEq)]
pub struct DesignRequest {
    /// What the loop is for.
    pub aim: Aim,
    /// Whether derivative action may be used.
    pub derivative: bool,
    /// Closed-loop time constant asked for, s.
    pub target_s: Option<f64>,
    /// Why a target faster than the soft limits is wanted, and who says so.
    pub target_reason: Option<String>,
    /// Averaging: allowed deviation of the level, % of span.
    pub allowed_deviation_percent: Option<f64>,
    /// Averaging: expected load change, % of OP.
    pub expected_load_percent: Option<f64>,
    /// The inner loop, where this one cascades.
    pub inner: Option<InnerLoop>,
    /// Bounds in force (the schedule's own OP move limit already put in).
    pub bounds: DesignBounds,
}

/// Why no settings are recommended.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum Refusal {
    /// Scan longer than τ + θ: the controller misses the process.
    ScanTooSlow {
        /// In words, with figures.
        text: String,
    },
    /// No closed-loop time constant satisfies every limit.
    NoSolution {
        /// In words: which model stands in the way.
        text: String,
    },
    /// The request does not fit the process (e.g. averaging on a self-regulating one).
    WrongAim {
        /// In words.
        text: String,
    },
}

/// A finished design.
#[derive(Debug, Clone, PartialEq)]
pub struct Designed {
    /// How it was arrived at.
    pub design: Design,
    /// What to type, rounded.
    pub native: Native,
    /// The typed numbers in standard form; `None` only for a parallel form without P.
    pub standard: Option<Standard>,
}

impl DesignRequest {
    /// The reason for the target, where one is given.
    pub fn reason(&self) -> Option<&str> {
        let reason = self.target_reason.as_deref()?.trim();
        (!reason.is_empty()).then_some(reason)
    }
}

/// A PID design is taken where its Kc/Ti is at least this many times the PI design's: integral action is
/// what holds against load, and less is not worth a third setting.
const DERIVATIVE_WORTH: f64 = 1.2;

/// The fastest settings that every limit allows.
///
/// `sigma_percent` is the noise σ, % of span, `None` where not assessable.
///
/// # Errors
/// Where no settings may be recommended.
pub fn design(
    model: &Model,
    sigma_percent: Option<f64>,
    controller: &Controller,
    filter: PvFilter,
    request: &DesignRequest,
) -> Result<Designed, Refusal> {
    let process = model.process();
    check(&process, controller, request)?;
    let robustness = RobustnessLimit::new(
        model,
        request.bounds.ms,
        request.bounds.worst_ms,
        controller,
        filter,
    );
    let finished = |derivative| {
        let recipe = Recipe::new(&process, controller, filter, request.aim, derivative);
        finish(&Basis {
            process: &process,
            recipe: &recipe,
            controller,
            filter,
            sigma_percent,
            request,
            robustness: &robustness,
        })
        .map(|finished| (finished, recipe.effective_dead_time_s))
    };
    let without = finished(false);
    let second = second_lag_s(&process).unwrap_or(0.0);
    let theta = process.dead_time_s();
    let refused = if !request.derivative {
        Some("Not used: the loop schedule does not ask for it.".to_owned())
    } else if second <= 0.0 {
        Some("Not used: the model has no second time constant for it to take up.".to_owned())
    } else if second <= theta {
        Some(format!(
            "Not used: the second time constant of {} is not longer than the dead time of {}.",
            words::duration(second),
            words::duration(theta)
        ))
    } else {
        None
    };
    let (chosen, derivative) = match refused {
        Some(why) => (without, why),
        None => with_or_without(without, finished(true)),
    };
    let (finished, effective_dead_time_s) = chosen?;
    let uses_derivative = finished.typed.native.d > 0.0;
    Ok(Designed {
        design: Design {
            closed_loop_time_constant_s: finished.tau_c_s,
            effective_dead_time_s,
            binding_limit: finished.binding,
            binding_detail: finished.binding_detail,
            governing_model: Some(finished.governing_model),
            derivative,
            limits: finished.limits,
            rules: rules::published_rules(&process, controller, filter, uses_derivative),
            remarks: finished.remarks,
        },
        native: finished.typed.native,
        standard: finished.standard,
    })
}

type Outcome = Result<(Finished, f64), Refusal>;

/// The design with derivative action where it is worth it, and why.
fn with_or_without(without: Outcome, with: Outcome) -> (Outcome, String) {
    let integral_action = |outcome: &Outcome| {
        let standard = outcome.as_ref().ok()?.0.standard?;
        Some(standard.kc / standard.ti_s?)
    };
    match (integral_action(&without), integral_action(&with)) {
        (Some(pi), Some(pid)) if pid >= DERIVATIVE_WORTH * pi => (
            with,
            format!(
                "Used: it takes up the second time constant, and Kc/Ti is {:.1} times that of the design without it.",
                pid / pi
            ),
        ),
        (Some(pi), Some(pid)) => (
            without,
            format!(
                "Not used: with it Kc/Ti would be {:.2} times that of the design without it, at least {DERIVATIVE_WORTH} times is asked for.",
                pid / pi
            ),
        ),
        (None, Some(_)) => (
            with,
            "Used: without it no settings satisfy every limit.".to_owned(),
        ),
        (_, None) => (
            without,
            "Not used: with it no settings satisfy every limit.".to_owned(),
        ),
    }
}

/// What no choice of τc can mend.
fn check(
    process: &ProcessModel,
    controller: &Controller,
    request: &DesignRequest,
) -> Result<(), Refusal> {
    let wrong_aim = |text: &str| {
        Err(Refusal::WrongAim {
            text: text.to_owned(),
        })
    };
    if request.aim == Aim::Averaging {
        if !process.kind().integrates() {
            return wrong_aim(
                "The aim is averaging, and the process settles by itself: averaging is for integrating processes only.",
            );
        }
        let given = |value: Option<f64>| value.is_some_and(|v| v.is_finite() && v > 0.0);
        if !given(request.allowed_deviation_percent) || !given(request.expected_load_percent) {
            return wrong_aim(
                "The aim is averaging, and the allowed deviation or the expected load is not given.",
            );
        }
    }
    // Of an integrating process no scan misses the movement; the scan-time limit alone holds there.
    if let (false, Some(tau)) = (process.kind().integrates(), process.time_constant_s()) {
        let total = tau + process.second_time_constant_s().unwrap_or(0.0) + process.dead_time_s();
        if controller.scan_s > total {
            return Err(Refusal::ScanTooSlow {
                text: format!(
                    "The controller executes every {}, longer than time constant and dead time together ({}): it misses the process.",
                    words::duration(controller.scan_s),
                    words::duration(total)
                ),
            });
        }
    }
    Ok(())
}

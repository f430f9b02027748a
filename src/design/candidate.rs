//! From a closed-loop time constant to settings: SIMC on the fitted model.

use crate::design::Aim;
use crate::model::ProcessModel;
use crate::predict::PvFilter;
use crate::settings::{Controller, Native, Standard, Terms};

/// What the design makes settings from: the model brought to one lag (or an integrator) and dead time,
/// with the second lag left over where the derivative takes it up.
///
/// Half rule, SIMC and series derivative: S. Skogestad, J. Process Control 13 (2003) 291-309.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Recipe {
    /// Magnitude of the process gain: %/%, or %/s/% for integrating processes.
    pub gain: f64,
    /// Time constant after the half rule, s; `None` for integrating processes.
    pub time_constant_s: Option<f64>,
    /// What stands for τ in Kc and Ti: τ, or τ + θ/3 where θ > τ (C. Grimholt, S. Skogestad, PID'12, 2012).
    lead_s: Option<f64>,
    /// Whether Ti follows τ alone (IMC), without the bound 4(τc + θe).
    unbounded_integral: bool,
    /// Td′ of the series form, s; 0 without derivative action.
    pub series_derivative_s: f64,
    /// Effective dead time θe, s.
    pub effective_dead_time_s: f64,
}

/// Settings as they would be typed, and what they amount to.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Typed {
    /// The numbers at the faceplate, rounded.
    pub native: Native,
    /// The same in the controller's own form.
    pub terms: Terms,
}

/// The lag that derivative action would take up, s: τ₂, or the lag behind an integrator.
pub fn second_lag_s(model: &ProcessModel) -> Option<f64> {
    match *model {
        ProcessModel::IntegratingLag {
            time_constant_s, ..
        } => Some(time_constant_s),
        _ => model.second_time_constant_s(),
    }
}

impl Recipe {
    /// The recipe for a model; with `derivative` its second lag is taken up by Td′.
    pub fn new(
        model: &ProcessModel,
        controller: &Controller,
        filter: PvFilter,
        aim: Aim,
        derivative: bool,
    ) -> Self {
        let second = second_lag_s(model).unwrap_or(0.0);
        let series_derivative_s = if derivative { second } else { 0.0 };
        // Half of what the derivative does not take up goes to the lag, half to the dead time.
        let half = (second - series_derivative_s) / 2.0;
        let theta = model.dead_time_s() + half;
        let time_constant_s =
            (!model.kind().integrates()).then(|| model.time_constant_s().unwrap_or(0.0) + half);
        let dead_time_dominant = time_constant_s.is_some_and(|tau| theta > tau);
        let lead_s = time_constant_s.map(|tau| {
            if dead_time_dominant {
                tau + theta / 3.0
            } else {
                tau
            }
        });
        let derivative_lag = if controller.d_filter_n > 0.0 {
            series_derivative_s / controller.d_filter_n
        } else {
            0.0
        };
        Recipe {
            gain: model.gain().abs(),
            time_constant_s,
            lead_s,
            unbounded_integral: aim == Aim::SetPoint && !dead_time_dominant,
            series_derivative_s,
            effective_dead_time_s: theta + unseen_lag_s(controller, filter) + derivative_lag,
        }
    }

    /// The settings for a closed-loop time constant, s, in standard form, unrounded.
    pub fn settings(&self, tau_c_s: f64) -> Standard {
        let wait = tau_c_s + self.effective_dead_time_s;
        let (kc, ti_s) = match self.lead_s {
            None => (1.0 / (self.gain * wait), 4.0 * wait),
            Some(lead) if self.unbounded_integral => (lead / (self.gain * wait), lead),
            Some(lead) => (lead / (self.gain * wait), lead.min(4.0 * wait)),
        };
        Standard::from_series(kc, Some(ti_s), self.series_derivative_s)
    }

    /// The same as they would be typed. `None` where the controller's form cannot hold them.
    pub fn typed(&self, tau_c_s: f64, controller: &Controller) -> Option<Typed> {
        let native = controller.native(self.settings(tau_c_s))?.rounded();
        Some(Typed {
            native,
            terms: controller.terms(native),
        })
    }
}

/// Lag between process and controller that the log did not see, as a delay: half a scan, and the PV
/// filter where it was added or lengthened since, s.
pub fn unseen_lag_s(controller: &Controller, filter: PvFilter) -> f64 {
    controller.scan_s / 2.0 + (filter.in_controller_s - filter.in_log_s).max(0.0)
}

/// Effective dead time θe of a model without derivative action: dead time, half of the second lag, and
/// what lies between process and controller; s.
pub fn effective_dead_time_s(
    model: &ProcessModel,
    controller: &Controller,
    filter: PvFilter,
) -> f64 {
    Recipe::new(model, controller, filter, Aim::Load, false).effective_dead_time_s
}

//! The sampled controller on the exact process.
//!
//! All signals are deviations from a state of rest, in percent. The controller executes each scan
//! and its OP is held in between; the process answers exactly, with dead time of any fraction of a scan.

use crate::model::{Hold, ProcessModel, State};
use crate::predict::measure::{Disturbance, Meter, Sample, Thinner};
use crate::predict::{Predicted, PvFilter, Response};
use crate::settings::{Action, ActsOn, Controller, Terms};
use std::collections::VecDeque;

/// Set-point step of a prediction, % of span.
pub const SET_POINT_STEP_PERCENT: f64 = 5.0;
/// Load step of a prediction, % of OP.
pub const LOAD_STEP_PERCENT: f64 = 5.0;
/// Executions that a prediction is cut off at, so that a mistyped integral time costs no hours.
const MOST_EXECUTIONS: f64 = 2e6;

/// Where the loop stands at rest before the step, percent of the ranges.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct OperatingPoint {
    /// OP, %.
    pub op_percent: f64,
    /// PV and set point, %.
    pub pv_percent: f64,
}

/// A PID controller as it executes: once each scan, with its OP held to its range.
///
/// With h the scan, e = SP − PV, x what the derivative acts on, Tf = Td/N:
/// d_k = (Tf d_(k−1) + Kc Td (x_k − x_(k−1)))/(Tf + h) and I_k = I_(k−1) + Kc h/Ti e_k (backward
/// differences; K.J. Åström, T. Hägglund, PID Controllers, 2nd ed. 1995, sec. 3.6). The series form
/// keeps its own structure: x passes (1 + Td′ s)/(1 + Td′ s/N) by the same differences, and what
/// leaves it feeds the proportional and the integral term. While the OP stands at the end of its
/// range, the integral takes no step that would drive it further.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SampledController {
    /// The action's sign is in the gains.
    terms: SampledTerms,
    p_on: ActsOn,
    d_on: ActsOn,
    filter: SampledFilter,
    op_low: f64,
    op_high: f64,
    integral: f64,
    derivative: f64,
    derivative_input: f64,
}

/// The terms of a controller as it executes, % OP per %; formulas at [`SampledController`].
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SampledTerms {
    /// OP moved by 1 % of what the proportional term acts on.
    pub proportional: f64,
    /// OP moved each scan by 1 % of error.
    pub integral_per_scan: f64,
    /// OP moved at once by the derivative term where what it acts on moves by 1 %.
    pub derivative_step: f64,
    /// Part of that which is left one scan later.
    pub derivative_decay: f64,
    /// Error that 1 % of the derivative term's OP stands for in the integral; 0 but for the series form.
    pub derivative_to_integral: f64,
}

impl SampledTerms {
    /// The terms at the controller's scan and with its derivative filter.
    pub fn new(terms: &Terms, controller: &Controller) -> Self {
        let h = controller.scan_s;
        let n = controller.d_filter_n;
        let filtered = |td: f64| if n > 0.0 { td / n } else { 0.0 };
        let (proportional, integral_per_s, derivative, tf, series) = match *terms {
            Terms::Standard { kc, ti_s, td_s } => {
                let ki = ti_s.map_or(0.0, |ti| kc / ti);
                (kc, ki, kc * td_s, filtered(td_s), false)
            }
            Terms::Series { kc, ti_s, td_s } => {
                // (1 + Td′ s)/(1 + Tf s) = 1 + (Td′ − Tf) s/(1 + Tf s).
                let (ki, tf) = (ti_s.map_or(0.0, |ti| kc / ti), filtered(td_s));
                (kc, ki, kc * (td_s - tf), tf, true)
            }
            // Without proportional gain the derivative's filter would be infinitely slow.
            Terms::Parallel {
                kp: 0.0, ki_per_s, ..
            } => (0.0, ki_per_s, 0.0, 0.0, false),
            Terms::Parallel { kp, ki_per_s, kd_s } => {
                (kp, ki_per_s, kd_s, filtered(kd_s / kp), false)
            }
        };
        SampledTerms {
            proportional,
            integral_per_scan: integral_per_s * h,
            derivative_step: derivative / (tf + h),
            derivative_decay: tf / (tf + h),
            derivative_to_integral: if series && proportional != 0.0 {
                1.0 / proportional
            } else {
                0.0
            },
        }
    }

    /// The same with all gains times +1 or −1.
    fn times(self, sign: f64) -> Self {
        SampledTerms {
            proportional: sign * self.proportional,
            integral_per_scan: sign * self.integral_per_scan,
            derivative_step: sign * self.derivative_step,
            derivative_decay: self.derivative_decay,
            derivative_to_integral: sign * self.derivative_to_integral,
        }
    }

    /// OP moved at once by a set-point step of 1 %, without the integral's part, %.
    pub fn set_point_kick(&self, controller: &Controller) -> f64 {
        let on_error = |acts_on, size| {
            if acts_on == ActsOn::Error { size } else { 0.0 }
        };
        on_error(controller.p_on, self.proportional)
            + on_error(controller.d_on, self.derivative_step)
    }

    /// Standard deviation of the OP for white noise of standard deviation 1 that reaches proportional
    /// and derivative terms through a lag of `decay` per scan (0 for none).
    ///
    /// The variance of (b₀ + b₁z⁻¹)/(1 + a₁z⁻¹ + a₂z⁻²) driven by white noise (K.J. Åström, Introduction
    /// to Stochastic Control Theory, 1970, ch. 5): ((b₀² + b₁²)(1 + a₂) − 2b₀b₁a₁)/((1 − a₂)((1 + a₂)² − a₁²)).
    pub fn noise_gain(&self, decay: f64) -> f64 {
        let r = self.derivative_decay;
        let b0 = (1.0 - decay) * (self.proportional + self.derivative_step);
        let b1 = -(1.0 - decay) * (self.proportional * r + self.derivative_step);
        let (a1, a2) = (-(decay + r), decay * r);
        let variance = ((b0 * b0 + b1 * b1) * (1.0 + a2) - 2.0 * b0 * b1 * a1)
            / ((1.0 - a2) * ((1.0 + a2) * (1.0 + a2) - a1 * a1));
        libm::sqrt(variance)
    }
}

/// (1 + T1 s)/(1 + T2 s) on samples: a constant part and a lag, the lag exact for an input that
/// keeps each sample's value over the scan that ends with it; T2 = 0: a backward difference.
#[derive(Debug, Clone, Copy, PartialEq)]
struct SampledFilter {
    straight: f64,
    decay: f64,
    lagged: f64,
    /// T1/h where there is no lag.
    difference: f64,
    last: f64,
}

impl SampledFilter {
    fn new(filter: PvFilter, scan_s: f64) -> Self {
        let (lead, lag) = (filter.in_log_s, filter.in_controller_s);
        let (straight, decay, difference) = if lead == lag {
            (1.0, 0.0, 0.0)
        } else if lag > 0.0 {
            (lead / lag, libm::exp(-scan_s / lag), 0.0)
        } else {
            (1.0, 0.0, lead / scan_s)
        };
        SampledFilter {
            straight,
            decay,
            lagged: 0.0,
            difference,
            last: 0.0,
        }
    }

    fn next(&mut self, input: f64) -> f64 {
        self.lagged = self.decay * self.lagged + (1.0 - self.decay) * input;
        let output = self.straight * input
            + (1.0 - self.straight) * self.lagged
            + self.difference * (input - self.last);
        self.last = input;
        output
    }
}

impl SampledController {
    /// The controller at rest; `op_range` holds the ends of the OP's range as deviations from there, %.
    pub fn new(
        terms: &Terms,
        controller: &Controller,
        filter: PvFilter,
        action: Action,
        op_range: [f64; 2],
    ) -> Self {
        let sampled = SampledTerms::new(terms, controller);
        SampledController {
            terms: sampled.times(action.sign()),
            p_on: controller.p_on,
            d_on: controller.d_on,
            filter: SampledFilter::new(filter, controller.scan_s),
            op_low: op_range[0],
            op_high: op_range[1],
            integral: 0.0,
            derivative: 0.0,
            derivative_input: 0.0,
        }
    }

    /// One execution: the OP for this set point and PV, %, all as deviations from the start.
    pub fn execute(&mut self, set_point: f64, pv: f64) -> f64 {
        let pv = self.filter.next(pv);
        let error = set_point - pv;
        let input = |acts_on| match acts_on {
            ActsOn::Error => error,
            ActsOn::Pv => -pv,
        };
        let derivative_input = input(self.d_on);
        let terms = &self.terms;
        self.derivative = terms.derivative_decay * self.derivative
            + terms.derivative_step * (derivative_input - self.derivative_input);
        self.derivative_input = derivative_input;
        let fast = terms.proportional * input(self.p_on) + self.derivative;
        let integral_step =
            terms.integral_per_scan * (error + terms.derivative_to_integral * self.derivative);
        let op = fast + self.integral + integral_step;
        let drives_on =
            (op > self.op_high && integral_step > 0.0) || (op < self.op_low && integral_step < 0.0);
        if !drives_on {
            self.integral += integral_step;
        }
        (fast + self.integral).clamp(self.op_low, self.op_high)
    }
}

/// What acts on the loop from outside from one execution to the next, deviations in %.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Inputs {
    /// Set point, % of span.
    pub set_point: f64,
    /// Load at the process input, % of OP.
    pub load: f64,
}

/// Runs a loop from rest for `executions` scans, the first at time 0, and hands each sample on as
/// the controller sees it: the PV before the new OP acts, and that OP.
pub fn run(
    model: &ProcessModel,
    controller: &mut SampledController,
    scan_s: f64,
    executions: usize,
    mut inputs: impl FnMut(usize) -> Inputs,
    mut visit: impl FnMut(Sample),
) {
    let theta = model.dead_time_s();
    // Whole scans of dead time, and the rest; a rest of rounding size is none.
    let mut whole = libm::floor(theta / scan_s);
    let mut rest = theta - whole * scan_s;
    if rest > scan_s * (1.0 - 1e-9) {
        whole += 1.0;
        rest = 0.0;
    } else if rest < scan_s * 1e-9 {
        rest = 0.0;
    }
    let until_change = Hold::new(model, rest);
    let from_change = Hold::new(model, scan_s - rest);
    // What has left the controller and not yet reached the process, the oldest first; at rest before.
    let waiting = (whole as usize).min(executions);
    let mut under_way: VecDeque<f64> = std::iter::repeat_n(0.0, waiting).collect();
    let mut acting = 0.0;
    let mut state = State::default();
    for k in 0..executions {
        let Inputs { set_point, load } = inputs(k);
        let pv = state.pv(model);
        let op = controller.execute(set_point, pv);
        visit(Sample {
            t_s: k as f64 * scan_s,
            set_point,
            pv,
            op,
        });
        under_way.push_back(op + load);
        if rest > 0.0 {
            state = until_change.advance(state, acting);
        }
        acting = under_way.pop_front().unwrap_or(acting);
        state = from_change.advance(state, acting);
    }
}

/// One loop to predict: everything that its responses follow from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LoopCase<'a> {
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
    /// Where the loop stands at rest.
    pub start: OperatingPoint,
}

impl LoopCase<'_> {
    /// Integral time of the settings, s; 0 without integral action.
    fn integral_time_s(&self) -> f64 {
        match *self.terms {
            Terms::Standard { ti_s, .. } => ti_s.unwrap_or(0.0),
            Terms::Series { ti_s, td_s, .. } => ti_s.map_or(0.0, |ti| ti + td_s),
            Terms::Parallel { kp, ki_per_s, .. } if ki_per_s > 0.0 => kp / ki_per_s,
            Terms::Parallel { .. } => 0.0,
        }
    }

    /// Executions up to the horizon 10(θ + max(τ, Ti)), at least 50.
    fn executions(&self) -> usize {
        let tau = self.model.time_constant_s().unwrap_or(0.0);
        let horizon = 10.0 * (self.model.dead_time_s() + tau.max(self.integral_time_s()));
        let scans = libm::ceil(horizon / self.controller.scan_s);
        scans.clamp(50.0, MOST_EXECUTIONS) as usize + 1
    }

    fn respond(&self, disturbance: Disturbance, executions: usize, visit: impl FnMut(Sample)) {
        let inputs = match disturbance {
            Disturbance::SetPoint(set_point) => Inputs {
                set_point,
                load: 0.0,
            },
            Disturbance::Load(load) => Inputs {
                set_point: 0.0,
                load,
            },
        };
        let mut controller = SampledController::new(
            self.terms,
            self.controller,
            self.filter,
            self.action,
            [-self.start.op_percent, 100.0 - self.start.op_percent],
        );
        let scan_s = self.controller.scan_s;
        run(
            self.model,
            &mut controller,
            scan_s,
            executions,
            |_| inputs,
            visit,
        );
    }

    /// The response to one step, from rest.
    pub fn response(&self, disturbance: Disturbance) -> Response {
        let executions = self.executions();
        let mut meter = Meter::new(disturbance);
        let mut line = Thinner::new(executions);
        self.respond(disturbance, executions, |sample| {
            meter.take(sample);
            line.take(sample);
        });
        let (Disturbance::SetPoint(step) | Disturbance::Load(step)) = disturbance;
        Response {
            step_percent: step,
            metrics: meter.metrics(),
            curve: line.curve(),
        }
    }

    /// Both predicted responses. The steps go upwards, or downwards where the range ends: a set
    /// point beyond 100 %, or a load that the OP has no room below to take back.
    pub fn predict(&self) -> Predicted {
        let up_or_down = |step: f64, up: bool| if up { step } else { -step };
        let set_point = up_or_down(
            SET_POINT_STEP_PERCENT,
            self.start.pv_percent + SET_POINT_STEP_PERCENT <= 100.0,
        );
        let load = up_or_down(
            LOAD_STEP_PERCENT,
            self.start.op_percent - LOAD_STEP_PERCENT >= 0.0,
        );
        Predicted {
            set_point: self.response(Disturbance::SetPoint(set_point)),
            load: self.response(Disturbance::Load(load)),
        }
    }

    /// The closed-loop time constant that the settings give: 63.2 % time of the predicted response to a
    /// set-point step, less `effective_dead_time_s`; s. `None` where 63.2 % is not reached.
    pub fn closed_loop_time_constant_s(&self, effective_dead_time_s: f64) -> Option<f64> {
        let step = Disturbance::SetPoint(SET_POINT_STEP_PERCENT);
        let mut meter = Meter::new(step);
        self.respond(step, self.executions(), |sample| meter.take(sample));
        meter
            .time_to_63_percent()
            .map(|t| (t - effective_dead_time_s).max(0.0))
    }

    /// Largest deviation of the PV from the set point after a load step of `load_percent` of OP, % of span.
    pub fn load_peak_percent(&self, load_percent: f64) -> f64 {
        let load = Disturbance::Load(load_percent);
        let mut meter = Meter::new(load);
        self.respond(load, self.executions(), |sample| meter.take(sample));
        meter.metrics().peak_deviation_percent
    }
}

#[cfg(test)]
mod tests;

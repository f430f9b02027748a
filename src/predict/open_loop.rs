//! The open loop as factors: what margins are computed from.

use crate::model::ProcessModel;
use crate::predict::PvFilter;
use crate::settings::{Action, Controller, Terms};

/// An open loop: gain, poles at the origin, real lags, zeros, and dead time.
///
/// L(s) = g·Π(1 + T s)·Π(1 + a s + b s²) / (sⁿ·Π(1 + τ s))·e^(−θs), lags τ > 0; a zero with
/// T < 0 answers the wrong way first. No pole lies in the right half plane.
#[derive(Debug, Clone, PartialEq)]
pub struct Loop {
    pub(super) gain: f64,
    pub(super) integrators: usize,
    pub(super) lags: Vec<f64>,
    pub(super) zeros: Vec<f64>,
    /// (a, b) of the numerator pairs that have no real zeros: 0 < a² < 4b.
    pub(super) pairs: Vec<(f64, f64)>,
    pub(super) dead_time_s: f64,
}

impl Loop {
    /// A loop that is a gain alone, %/%; its sign is that of the feedback (above 0: negative feedback).
    pub fn gain(gain: f64) -> Self {
        Loop {
            gain,
            integrators: 0,
            lags: Vec::with_capacity(5),
            zeros: Vec::with_capacity(3),
            pairs: Vec::new(),
            dead_time_s: 0.0,
        }
    }

    /// The loop divided by s.
    pub fn integrator(mut self) -> Self {
        self.integrators += 1;
        self
    }

    /// The loop divided by 1 + τ s; τ ≥ 0, s.
    pub fn lag(mut self, tau_s: f64) -> Self {
        if tau_s != 0.0 {
            self.lags.push(tau_s);
        }
        self
    }

    /// The loop times 1 + T s; T of either sign, s.
    pub fn lead(mut self, t_s: f64) -> Self {
        if t_s != 0.0 {
            self.zeros.push(t_s);
        }
        self
    }

    /// The loop times 1 + a s + b s²; a, b ≥ 0.
    pub fn quadratic(mut self, a: f64, b: f64) -> Self {
        let under_root = a * a - 4.0 * b;
        if under_root < 0.0 {
            self.pairs.push((a, b));
            return self;
        }
        let larger = (a + libm::sqrt(under_root)) / 2.0;
        // The smaller from the product, which keeps its figures where b is small.
        let smaller = if larger > 0.0 { b / larger } else { 0.0 };
        self.lead(larger).lead(smaller)
    }

    /// The loop delayed by `theta_s` more; s, ≥ 0.
    pub fn dead_time(mut self, theta_s: f64) -> Self {
        self.dead_time_s += theta_s;
        self
    }

    /// The loop times a process model.
    pub fn process(mut self, model: &ProcessModel) -> Self {
        self.gain *= model.gain();
        if model.kind().integrates() {
            self = self.integrator();
        }
        self.lag(model.time_constant_s().unwrap_or(0.0))
            .lag(model.second_time_constant_s().unwrap_or(0.0))
            .dead_time(model.dead_time_s())
    }

    /// The loop times a controller without its sign, in its own form with its own derivative filter
    /// (N = `filter_n`, 0 for none).
    ///
    /// A parallel controller without proportional gain has no derivative: its filter would be
    /// infinitely slow.
    pub fn controller(mut self, terms: &Terms, filter_n: f64) -> Self {
        let filtered = |td: f64| if filter_n > 0.0 { td / filter_n } else { 0.0 };
        match *terms {
            Terms::Standard { kc, ti_s, td_s } => {
                let tf = filtered(td_s);
                self.gain *= kc;
                self = self.lag(tf);
                match ti_s {
                    None => self.lead(td_s + tf),
                    Some(ti) => {
                        self.gain /= ti;
                        self.integrator().quadratic(ti + tf, ti * (tf + td_s))
                    }
                }
            }
            Terms::Series { kc, ti_s, td_s } => {
                self.gain *= kc;
                self = self.lead(td_s).lag(filtered(td_s));
                match ti_s {
                    None => self,
                    Some(ti) => {
                        self.gain /= ti;
                        self.integrator().lead(ti)
                    }
                }
            }
            Terms::Parallel { kp, ki_per_s, kd_s } => {
                if kp == 0.0 {
                    self.gain *= ki_per_s;
                    return self.integrator();
                }
                let td_s = kd_s / kp;
                let ti_s = (ki_per_s > 0.0).then(|| kp / ki_per_s);
                self.controller(&Terms::Standard { kc: kp, ti_s, td_s }, filter_n)
            }
        }
    }

    /// The loop times the PV filter, as far as the log does not hold it already:
    /// (1 + Tf,logged s)/(1 + Tf s), nothing where both are the same.
    pub fn pv_filter(self, filter: PvFilter) -> Self {
        if filter.in_log_s == filter.in_controller_s {
            return self;
        }
        self.lead(filter.in_log_s).lag(filter.in_controller_s)
    }

    /// Poles less zeros.
    pub(super) fn excess(&self) -> i64 {
        let poles = self.integrators + self.lags.len();
        let zeros = self.zeros.len() + 2 * self.pairs.len();
        poles as i64 - zeros as i64
    }

    /// L(∞) without its dead time, signed: 0 where poles are more than zeros, infinite where fewer.
    pub(super) fn limit(&self) -> f64 {
        match self.excess() {
            1.. => 0.0,
            0 => {
                let zeros: f64 = self.zeros.iter().product();
                let pairs: f64 = self.pairs.iter().map(|pair| pair.1).product();
                self.gain * zeros * pairs / self.lags.iter().product::<f64>()
            }
            _ => f64::INFINITY,
        }
    }
}

/// The open loop of a controller on a process: L = C·P·F·H, with the hold H = e^(−s·scan/2) and the
/// sign that the action gives it.
pub fn open_loop(
    model: &ProcessModel,
    terms: &Terms,
    controller: &Controller,
    filter: PvFilter,
    action: Action,
) -> Loop {
    Loop::gain(action.sign())
        .process(model)
        .controller(terms, controller.d_filter_n)
        .pv_filter(filter)
        .dead_time(controller.scan_s / 2.0)
}

//! One function for each limit.
//!
//! Each says how large the closed-loop time constant τc must be, and, once settings are made, what its
//! figure is with them.

use crate::design::candidate::Recipe;
use crate::design::robustness::{Nearest, RobustnessLimit};
use crate::design::{DesignRequest, InnerLoop};
use crate::model::ProcessModel;
use crate::predict::PvFilter;
use crate::predict::simulate::{LoopCase, OperatingPoint, SampledTerms};
use crate::settings::{Action, ActsOn, Controller, Terms};

/// What one limit asks of τc.
#[derive(Debug, Clone, PartialEq)]
pub enum Need {
    /// At least so many seconds.
    AtLeast(f64),
    /// Nothing: any τc meets it.
    Any,
    /// It could not be assessed.
    NotAssessed,
    /// No τc meets it.
    Impossible(Nearest),
    /// No τc gives settings that the controller's form can hold.
    NoSettings,
}

impl Need {
    /// The least τc, s; 0 where any will do.
    pub fn seconds(&self) -> f64 {
        match self {
            Need::AtLeast(seconds) => *seconds,
            _ => 0.0,
        }
    }
}

/// What all limits look at.
#[derive(Debug, Clone, Copy)]
pub struct Basis<'a> {
    /// The fitted model.
    pub process: &'a ProcessModel,
    /// How settings follow from τc.
    pub recipe: &'a Recipe,
    /// The controller.
    pub controller: &'a Controller,
    /// The PV filter.
    pub filter: PvFilter,
    /// Noise σ of the PV, % of span; `None` where not assessable.
    pub sigma_percent: Option<f64>,
    /// What was asked for, with the bounds in force.
    pub request: &'a DesignRequest,
    /// Ms of every model.
    pub robustness: &'a RobustnessLimit,
}

/// Robustness is searched from this many times the other limits' need downwards.
const SLOW_SIDE: f64 = 100.0;
/// Ratio of neighbouring τc in that search; near its bounds Ms changes by a tenth from one to the next.
const SEARCH_RATIO: f64 = 1.25;
/// τc below this part of θe is not searched: SIMC's loops are past Ms 3 there.
const SEARCH_END: f64 = 0.05;

impl Basis<'_> {
    /// The settings for τc as they would be typed if faceplates took every digit.
    fn terms(&self, tau_c_s: f64) -> Option<Terms> {
        let native = self.controller.native(self.recipe.settings(tau_c_s))?;
        Some(self.controller.terms(native))
    }

    /// Smallest τc from which on `figure` of the settings is at most `bound`, for a figure that falls with τc.
    fn falling(&self, bound: f64, figure: impl Fn(&Terms) -> f64) -> Need {
        let holds = |tau_c: f64| self.terms(tau_c).is_some_and(|t| figure(&t) <= bound);
        if holds(0.0) {
            return Need::Any;
        }
        let mut high = self.recipe.effective_dead_time_s;
        // The gain halves with each doubling, so a bound above 0 is met within a few dozen.
        for _ in 0..60 {
            if holds(high) {
                return Need::AtLeast(halve(0.0, high, holds));
            }
            high *= 2.0;
        }
        Need::AtLeast(f64::INFINITY)
    }
}

/// Relative width to which an edge is narrowed; typed settings have four digits.
const EDGE: f64 = 1e-6;

/// The edge between a τc that does not hold and a larger one that does, from the side that holds.
fn halve(mut fails: f64, mut holds: f64, test: impl Fn(f64) -> bool) -> f64 {
    while holds - fails > EDGE * holds {
        let middle = 0.5 * (fails + holds);
        if test(middle) {
            holds = middle;
        } else {
            fails = middle;
        }
    }
    holds
}

/// Dead time: τc at least a multiple of θe (SIMC's choice for a tight and robust loop is 1).
pub fn dead_time(basis: &Basis) -> Need {
    Need::AtLeast(basis.request.bounds.dead_time * basis.recipe.effective_dead_time_s)
}

/// Time constant: the process is not driven many times faster than itself; not for integrating processes.
pub fn time_constant(basis: &Basis) -> Need {
    match basis.recipe.time_constant_s {
        Some(tau) => Need::AtLeast(tau / basis.request.bounds.time_constant),
        None => Need::Any,
    }
}

/// Scan time: the controller executes several times within τc.
pub fn scan_time(basis: &Basis) -> Need {
    Need::AtLeast(basis.request.bounds.scan * basis.controller.scan_s)
}

/// Inner loop: τc a multiple of the inner loop's.
pub fn inner_loop(basis: &Basis, inner: &InnerLoop) -> Need {
    Need::AtLeast(basis.request.bounds.inner * inner.closed_loop_time_constant_s)
}

/// Standard deviation of the OP that the PV's noise causes through proportional and derivative terms, %.
///
/// σ is that of the logged PV, taken as white at the scan. A filter changed since the log acts as
/// a sampled lag, and what the logged filter had taken away is put back.
pub fn noise_figure(basis: &Basis, sigma_percent: f64, terms: &Terms) -> f64 {
    let sampled = SampledTerms::new(terms, basis.controller);
    let PvFilter {
        in_log_s,
        in_controller_s,
    } = basis.filter;
    if in_log_s == in_controller_s {
        return sigma_percent * sampled.noise_gain(0.0);
    }
    let decay = |lag_s: f64| {
        if lag_s > 0.0 {
            libm::exp(-basis.controller.scan_s / lag_s)
        } else {
            0.0
        }
    };
    let logged = decay(in_log_s);
    // A lag of decay a leaves (1 − a)/(1 + a) of white noise's variance.
    let unfiltered = sigma_percent * libm::sqrt((1.0 + logged) / (1.0 - logged));
    unfiltered * sampled.noise_gain(decay(in_controller_s))
}

/// Noise: the OP moves by no more than so many percent (sd) for the noise of the PV.
pub fn noise(basis: &Basis) -> Need {
    let Some(sigma) = basis.sigma_percent else {
        return Need::NotAssessed;
    };
    basis.falling(basis.request.bounds.noise_percent, |terms| {
        noise_figure(basis, sigma, terms)
    })
}

/// OP moved at once by a set-point step of 1 %, %.
pub fn op_move_figure(basis: &Basis, terms: &Terms) -> f64 {
    SampledTerms::new(terms, basis.controller).set_point_kick(basis.controller)
}

/// OP move: a set-point step of 1 % moves the OP at once by no more than so many percent.
pub fn op_move(basis: &Basis) -> Need {
    if basis.controller.p_on == ActsOn::Pv && basis.controller.d_on == ActsOn::Pv {
        return Need::Any;
    }
    basis.falling(basis.request.bounds.op_move_percent, |terms| {
        op_move_figure(basis, terms)
    })
}

/// Robustness: Ms of the fitted model and of every model of the set.
///
/// Searched from the slow side, from 100 times the need of the other limits (`others_s`) downwards, to
/// the first τc that breaks it: a set whose Ms does not fall steadily with τc is safe all the same.
pub fn robustness(basis: &Basis, others_s: f64) -> Need {
    let holds = |tau_c: f64| {
        basis
            .terms(tau_c)
            .is_some_and(|terms| basis.robustness.holds(&terms))
    };
    let end = SEARCH_END * basis.recipe.effective_dead_time_s;
    let mut tau_c = SLOW_SIDE * others_s.max(basis.recipe.effective_dead_time_s);
    let mut slower_holds = None;
    let mut nearest: Option<Nearest> = None;
    while tau_c > end {
        if holds(tau_c) {
            slower_holds = Some(tau_c);
        } else if let Some(slower) = slower_holds {
            return Need::AtLeast(halve(tau_c, slower, holds));
        } else if let Some(terms) = basis.terms(tau_c) {
            let found = basis.robustness.nearest(&terms);
            if nearest
                .as_ref()
                .is_none_or(|n| found.ms / found.bound < n.ms / n.bound)
            {
                nearest = Some(found);
            }
        }
        tau_c /= SEARCH_RATIO;
    }
    match (slower_holds, nearest) {
        (Some(_), _) => Need::Any,
        (None, Some(nearest)) => Need::Impossible(nearest),
        (None, None) => Need::NoSettings,
    }
}

/// Largest deviation of the level for the expected load, % of span, simulated on the fitted model.
pub fn level_figure(basis: &Basis, expected_load_percent: f64, terms: &Terms) -> f64 {
    let case = LoopCase {
        model: basis.process,
        terms,
        controller: basis.controller,
        filter: basis.filter,
        action: Action::for_gain(basis.process.gain()),
        start: OperatingPoint {
            op_percent: 50.0,
            pv_percent: 50.0,
        },
    };
    // The loop is linear away from the ends of the OP: one percent, and no clamp is met.
    expected_load_percent.abs() * case.load_peak_percent(1.0)
}

/// Level deviation (averaging): the largest τc that keeps the level within the allowed deviation for
/// the expected load; a bound from above. `None` where not even τc = 0 does.
///
/// Without dead time a load step of D % OP lifts the level by K′·D·λ/e, λ = 2(τc + θe); with it by more, so
/// τc is solved on the simulated peak, from that closed form downwards.
pub fn level_deviation(basis: &Basis, allowed_percent: f64, load_percent: f64) -> Option<f64> {
    let holds = |tau_c: f64| {
        basis
            .terms(tau_c)
            .is_some_and(|terms| level_figure(basis, load_percent, &terms) <= allowed_percent)
    };
    let arrest_s = std::f64::consts::E * allowed_percent / (basis.recipe.gain * load_percent.abs());
    let slowest = arrest_s / 2.0 - basis.recipe.effective_dead_time_s;
    if slowest <= 0.0 || !holds(0.0) {
        return None;
    }
    if holds(slowest) {
        return Some(slowest);
    }
    let (mut held, mut fails) = (0.0, slowest);
    while fails - held > EDGE * fails {
        let middle = 0.5 * (held + fails);
        if holds(middle) {
            held = middle;
        } else {
            fails = middle;
        }
    }
    Some(held)
}

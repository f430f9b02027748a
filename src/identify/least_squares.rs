//! Separable least squares on windows of a log: gain and base are solved inside, the search is
//! over dead time and lags only.
//!
//! Output error by variable projection (G.H. Golub, V. Pereyra, SIAM J. Numer. Anal. 10 (1973)
//! 413-432) with the Jacobian of L. Kaufman (BIT 15 (1975) 49-57) and the damping of
//! D.W. Marquardt (J. SIAM 11 (1963) 431-441).

use super::memory::Memory;
use super::search;
use crate::model::{Kind, ProcessModel};
use thiserror::Error;

/// What the PV of a window stands on beside the answer to the OP.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Base {
    /// Nothing: the PV is 0 before the move.
    Nothing,
    /// A level.
    Level,
    /// A level and a constant slope.
    LevelAndSlope,
}

impl Base {
    fn parameters(self) -> usize {
        match self {
            Base::Nothing => 0,
            Base::Level => 1,
            Base::LevelAndSlope => 2,
        }
    }
}

/// A stretch of a log for a fit. Times increase; second 0 is best near the move.
#[derive(Debug, Clone, PartialEq)]
pub struct Window {
    /// Times of the samples, s.
    pub t_s: Vec<f64>,
    /// PV, %.
    pub pv: Vec<f64>,
    /// The OP as logged: (time, deviation from its value at rest from then on, %), in order. A first
    /// time of −∞ tells where it had stood since ever: a self-regulating process has settled there.
    pub moves: Vec<(f64, f64)>,
    /// What the PV stands on.
    pub base: Base,
}

impl Window {
    /// The moves made within the window; those before it are history.
    pub(crate) fn own_moves(&self) -> &[(f64, f64)] {
        let first = self.t_s.first().copied().unwrap_or(f64::NEG_INFINITY);
        &self.moves[self.moves.partition_point(|m| m.0 < first)..]
    }
}

/// What to fit.
#[derive(Debug, Clone, PartialEq)]
pub struct Problem {
    /// The stretches; each has its own base.
    pub windows: Vec<Window>,
    /// Whether each window has a gain of its own; one gain for all otherwise.
    pub gain_per_window: bool,
    /// Whether the process may be moving at the first move: its rate then is free.
    pub moving_at_start: bool,
    /// Dead time, s, where it is known and not searched.
    pub fixed_dead_time_s: Option<f64>,
    /// How many first samples of each window are the last of the one before: the quiet stretch between
    /// two moves is seen twice but measured once.
    pub shared: Vec<usize>,
}

impl Problem {
    /// A fit of gain, base, lags and dead time, one gain for all windows, each at rest at its start.
    pub fn new(windows: Vec<Window>) -> Self {
        Problem {
            shared: vec![0; windows.len()],
            windows,
            gain_per_window: false,
            moving_at_start: false,
            fixed_dead_time_s: None,
        }
    }

    /// Number of samples.
    pub fn rows(&self) -> usize {
        self.windows.iter().map(|w| w.t_s.len()).sum()
    }

    /// Number of parameters of a fit of this kind, the linear ones counted.
    pub fn parameters(&self, kind: Kind) -> usize {
        let gains = if self.gain_per_window {
            self.windows.len()
        } else {
            1
        };
        let bases: usize = self.windows.iter().map(|w| w.base.parameters()).sum();
        gains * (1 + usize::from(self.moving_at_start)) + bases + searched(kind)
            - usize::from(self.fixed_dead_time_s.is_some())
    }
}

/// Why there is no fit.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum FitError {
    /// Fewer samples than the fit needs.
    #[error("{rows} samples are too few for a fit of {parameters} parameters")]
    TooFew {
        /// Samples.
        rows: usize,
        /// Parameters.
        parameters: usize,
    },
    /// OP did not move within the windows.
    #[error("the OP does not move within the window")]
    NoMove,
    /// The PV does not move at all.
    #[error("the PV does not change within the window")]
    Still,
}

/// What the search moves: dead time, and the lags as the logarithm of their geometric mean and the
/// square of half their log ratio. The response is smooth in these also where both lags are equal.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Point {
    /// θ, s.
    pub dead_time_s: f64,
    /// m = ln √(τ τ₂); ln τ for one lag.
    pub ln_lag: f64,
    /// w = (ln(τ/τ₂)/2)², not negative; 0 for one lag.
    pub spread: f64,
}

impl Point {
    /// The point of these figures.
    pub fn new(dead_time_s: f64, tau: f64, tau2: Option<f64>) -> Self {
        let (ln_lag, spread) = match tau2 {
            None => (libm::log(tau), 0.0),
            Some(tau2) => {
                let half = libm::log(tau / tau2) / 2.0;
                (libm::log(tau) - half, half * half)
            }
        };
        Point {
            dead_time_s,
            ln_lag,
            spread,
        }
    }

    /// (τ, τ₂), s, longer first; τ₂ is 0 for kinds with one lag.
    pub fn lags(&self, kind: Kind) -> (f64, f64) {
        if kind == Kind::SecondOrder {
            let half = libm::sqrt(self.spread.max(0.0));
            (libm::exp(self.ln_lag + half), libm::exp(self.ln_lag - half))
        } else {
            (libm::exp(self.ln_lag), 0.0)
        }
    }

    pub(crate) fn get(&self, k: usize) -> f64 {
        [self.dead_time_s, self.ln_lag, self.spread][k]
    }

    pub(crate) fn set(&mut self, k: usize, value: f64) {
        match k {
            0 => self.dead_time_s = value,
            1 => self.ln_lag = value,
            _ => self.spread = value,
        }
    }
}

/// How many of the point's coordinates a kind has.
pub(crate) fn searched(kind: Kind) -> usize {
    match kind {
        Kind::Integrating => 1,
        Kind::FirstOrder | Kind::IntegratingLag => 2,
        Kind::SecondOrder => 3,
    }
}

/// A least-squares fit.
#[derive(Debug, Clone, PartialEq)]
pub struct Fit {
    /// Which model.
    pub kind: Kind,
    /// Gain of each window, all the same unless they were fitted with their own.
    pub gains: Vec<f64>,
    /// Factor of the rate of the unit response for each window where `moving_at_start`, else 0.
    pub rates: Vec<f64>,
    /// Dead time and lags.
    pub point: Point,
    /// Level at second 0 and slope of each window, % and %/s.
    pub bases: Vec<(f64, f64)>,
    /// Sum of squared residuals, %².
    pub rss: f64,
    /// Samples, those of two windows counted twice.
    pub rows: usize,
    /// Samples, each counted once.
    pub samples: usize,
    /// Parameters, linear ones counted.
    pub parameters: usize,
    /// Residual of each sample, window after window.
    pub residual: Vec<f64>,
    /// JᵀJ over gain (relative), dead time, m, w, bases projected out; searched ones only. Empty where
    /// each window has its own gain.
    pub information: Vec<Vec<f64>>,
    /// The same with the noise between the two: σ²JᵀVJ.
    pub middle: Vec<Vec<f64>>,
    /// The same again where the memory of the noise is one standard deviation longer.
    pub doubtful_middle: Vec<Vec<f64>>,
    /// The same from the residual itself, where it turns about from sample to sample.
    pub turning_middle: Option<Vec<Vec<f64>>>,
    /// Memory of the residual.
    pub memory: Memory,
}

impl Fit {
    /// The fitted model, with the gain of the first window.
    pub fn process(&self) -> ProcessModel {
        let (tau, tau2) = self.point.lags(self.kind);
        ProcessModel::of_kind(self.kind, self.gains[0], tau, tau2, self.point.dead_time_s)
    }

    /// Root mean square of the residual, %.
    pub fn rmse(&self) -> f64 {
        libm::sqrt(self.rss / self.rows as f64)
    }
}

/// Fits one kind to all samples, from several starts of its own.
///
/// # Errors
/// Where the samples cannot carry a fit.
pub fn fit(problem: &Problem, kind: Kind) -> Result<Fit, FitError> {
    search::fit(problem, kind, &[])
}

#[cfg(test)]
#[path = "least_squares_tests.rs"]
mod tests;

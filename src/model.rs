//! The process models: what the PV does when the OP moves.
//!
//! PV in percent of span, OP in percent of its span, time in seconds.

use nalgebra::Complex;
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

/// Which of the four models.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, JsonSchema,
)]
#[serde(rename_all = "kebab-case")]
pub enum Kind {
    /// K e^(−θs) / (τs + 1).
    FirstOrder,
    /// K e^(−θs) / ((τs + 1)(τ₂s + 1)), τ ≥ τ₂.
    SecondOrder,
    /// K′ e^(−θs) / s.
    Integrating,
    /// K′ e^(−θs) / (s(τs + 1)).
    IntegratingLag,
}

impl Kind {
    /// All four, simplest first within each family.
    pub const ALL: [Kind; 4] = [
        Kind::FirstOrder,
        Kind::SecondOrder,
        Kind::Integrating,
        Kind::IntegratingLag,
    ];

    /// Whether the PV goes on moving as long as the OP is off balance.
    pub fn integrates(self) -> bool {
        matches!(self, Kind::Integrating | Kind::IntegratingLag)
    }
}

/// A process model with its figures. An integrating process has no steady gain to misuse.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum ProcessModel {
    /// One lag and dead time.
    FirstOrder {
        /// Process gain K, % PV per % OP, signed.
        gain: f64,
        /// Time constant τ, s.
        time_constant_s: f64,
        /// Dead time θ, s.
        dead_time_s: f64,
    },
    /// Two lags and dead time; `time_constant_s` is the longer.
    SecondOrder {
        /// Process gain K, % PV per % OP, signed.
        gain: f64,
        /// Longer time constant τ, s.
        time_constant_s: f64,
        /// Shorter time constant τ₂, s.
        second_time_constant_s: f64,
        /// Dead time θ, s.
        dead_time_s: f64,
    },
    /// Integrator and dead time.
    Integrating {
        /// Process gain K′, % PV per second per % OP, signed.
        gain_per_s: f64,
        /// Dead time θ, s.
        dead_time_s: f64,
    },
    /// Integrator, one lag and dead time.
    IntegratingLag {
        /// Process gain K′, % PV per second per % OP, signed.
        gain_per_s: f64,
        /// The lag τ, s.
        time_constant_s: f64,
        /// Dead time θ, s.
        dead_time_s: f64,
    },
}

impl ProcessModel {
    /// A model of the given kind; `lag_s` and `second_lag_s` are used by the kinds that have them,
    /// and the longer of the two comes first whatever their order.
    pub fn of_kind(kind: Kind, gain: f64, lag_s: f64, second_lag_s: f64, dead_time_s: f64) -> Self {
        match kind {
            Kind::FirstOrder => ProcessModel::FirstOrder {
                gain,
                time_constant_s: lag_s,
                dead_time_s,
            },
            Kind::SecondOrder => ProcessModel::SecondOrder {
                gain,
                time_constant_s: lag_s.max(second_lag_s),
                second_time_constant_s: lag_s.min(second_lag_s),
                dead_time_s,
            },
            Kind::Integrating => ProcessModel::Integrating {
                gain_per_s: gain,
                dead_time_s,
            },
            Kind::IntegratingLag => ProcessModel::IntegratingLag {
                gain_per_s: gain,
                time_constant_s: lag_s,
                dead_time_s,
            },
        }
    }

    /// Which of the four.
    pub fn kind(&self) -> Kind {
        match self {
            ProcessModel::FirstOrder { .. } => Kind::FirstOrder,
            ProcessModel::SecondOrder { .. } => Kind::SecondOrder,
            ProcessModel::Integrating { .. } => Kind::Integrating,
            ProcessModel::IntegratingLag { .. } => Kind::IntegratingLag,
        }
    }

    /// Gain, signed: %/% for self-regulating kinds, %/s/% for integrating ones.
    pub fn gain(&self) -> f64 {
        match *self {
            ProcessModel::FirstOrder { gain, .. } | ProcessModel::SecondOrder { gain, .. } => gain,
            ProcessModel::Integrating { gain_per_s, .. }
            | ProcessModel::IntegratingLag { gain_per_s, .. } => gain_per_s,
        }
    }

    /// The (longer) time constant τ, s; `None` for a pure integrator.
    pub fn time_constant_s(&self) -> Option<f64> {
        match *self {
            ProcessModel::FirstOrder {
                time_constant_s, ..
            }
            | ProcessModel::SecondOrder {
                time_constant_s, ..
            }
            | ProcessModel::IntegratingLag {
                time_constant_s, ..
            } => Some(time_constant_s),
            ProcessModel::Integrating { .. } => None,
        }
    }

    /// The second time constant τ₂, s, of a second-order model.
    pub fn second_time_constant_s(&self) -> Option<f64> {
        match *self {
            ProcessModel::SecondOrder {
                second_time_constant_s,
                ..
            } => Some(second_time_constant_s),
            _ => None,
        }
    }

    /// Dead time θ, s.
    pub fn dead_time_s(&self) -> f64 {
        match *self {
            ProcessModel::FirstOrder { dead_time_s, .. }
            | ProcessModel::SecondOrder { dead_time_s, .. }
            | ProcessModel::Integrating { dead_time_s, .. }
            | ProcessModel::IntegratingLag { dead_time_s, .. } => dead_time_s,
        }
    }

    /// The same model with another gain.
    pub fn with_gain(&self, gain: f64) -> Self {
        ProcessModel::of_kind(
            self.kind(),
            gain,
            self.time_constant_s().unwrap_or(0.0),
            self.second_time_constant_s().unwrap_or(0.0),
            self.dead_time_s(),
        )
    }

    /// Frequency response at `omega_rad_s` > 0, % PV per % OP, dead time exact.
    pub fn frequency_response(&self, omega_rad_s: f64) -> Complex<f64> {
        let s = Complex::new(0.0, omega_rad_s);
        let lag = |tau: f64| s * tau + 1.0;
        let rational = match *self {
            ProcessModel::FirstOrder {
                gain,
                time_constant_s,
                ..
            } => Complex::from(gain) / lag(time_constant_s),
            ProcessModel::SecondOrder {
                gain,
                time_constant_s,
                second_time_constant_s,
                ..
            } => Complex::from(gain) / (lag(time_constant_s) * lag(second_time_constant_s)),
            ProcessModel::Integrating { gain_per_s, .. } => Complex::from(gain_per_s) / s,
            ProcessModel::IntegratingLag {
                gain_per_s,
                time_constant_s,
                ..
            } => Complex::from(gain_per_s) / (s * lag(time_constant_s)),
        };
        let angle = -omega_rad_s * self.dead_time_s();
        rational * Complex::new(libm::cos(angle), libm::sin(angle))
    }

    /// PV at `t_s` after a unit step of the OP at time 0 from rest, %.
    pub fn step_response(&self, t_s: f64) -> f64 {
        let mut state = State::default();
        let after = t_s - self.dead_time_s();
        if after > 0.0 {
            state.advance(self, after, 1.0);
        }
        state.pv(self)
    }

    /// PV deviation at each of `times_s` (increasing) in answer to an OP deviation that is held
    /// between its moves: `moves` holds (time s, new OP deviation from the start, %), times
    /// increasing, and the process is at rest with zero deviation before the first. Exact for any
    /// dead time; cost grows with samples plus moves.
    pub fn response_to_held(&self, moves: &[(f64, f64)], times_s: &[f64]) -> Vec<f64> {
        let mut state = State::default();
        let mut op = 0.0;
        let mut now = f64::NEG_INFINITY;
        let mut next = 0;
        let theta = self.dead_time_s();
        times_s
            .iter()
            .map(|&t| {
                while next < moves.len() && moves[next].0 + theta <= t {
                    let at = moves[next].0 + theta;
                    if now.is_finite() {
                        state.advance(self, at - now, op);
                    }
                    now = at;
                    op = moves[next].1;
                    next += 1;
                }
                if now.is_finite() {
                    state.advance(self, t - now, op);
                    now = t;
                }
                state.pv(self)
            })
            .collect()
    }
}

/// State of a process model: the deviations of its lags, for exact stepping under a held input.
///
/// `first` is the output of the first lag (or of the integrator, %·s of OP), `second` that of the
/// lag behind it.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct State {
    first: f64,
    second: f64,
}

/// (1 − e^(−z)) / z, right for small z.
fn held_average(z: f64) -> f64 {
    if z.abs() < 1e-9 {
        1.0 - z / 2.0
    } else {
        -libm::expm1(-z) / z
    }
}

impl State {
    /// Moves the state `h_s` seconds on under the (already delayed) OP deviation `op`, %. Exact.
    pub fn advance(&mut self, model: &ProcessModel, h_s: f64, op: f64) {
        match *model {
            ProcessModel::FirstOrder {
                time_constant_s, ..
            } => {
                self.first = op + (self.first - op) * libm::exp(-h_s / time_constant_s);
            }
            ProcessModel::SecondOrder {
                time_constant_s: tau,
                second_time_constant_s: tau2,
                ..
            } => {
                // The second lag is fed by the decaying first: ∫ e^(−(h−s)/τ₂) e^(−s/τ) ds / τ₂,
                // written so that τ = τ₂ needs no case of its own and nothing overflows.
                let (a, b) = (libm::exp(-h_s / tau), libm::exp(-h_s / tau2));
                let fed = a * (h_s / tau2) * held_average(h_s / tau2 - h_s / tau);
                let (first, second) = (self.first - op, self.second - op);
                self.first = op + first * a;
                self.second = op + second * b + first * fed;
            }
            ProcessModel::Integrating { .. } => self.first += op * h_s,
            ProcessModel::IntegratingLag {
                time_constant_s: tau,
                ..
            } => {
                // Here `second` is the lag's output, which feeds the integrator `first`.
                let behind = self.second - op;
                self.first += op * h_s + behind * h_s * held_average(h_s / tau);
                self.second = op + behind * libm::exp(-h_s / tau);
            }
        }
    }

    /// PV deviation of this state, %.
    pub fn pv(&self, model: &ProcessModel) -> f64 {
        match *model {
            ProcessModel::FirstOrder { gain, .. } => gain * self.first,
            ProcessModel::SecondOrder { gain, .. } => gain * self.second,
            ProcessModel::Integrating { gain_per_s, .. }
            | ProcessModel::IntegratingLag { gain_per_s, .. } => gain_per_s * self.first,
        }
    }
}

/// A hold of fixed length as one linear map of the state: what `State::advance` does, its
/// exponentials worked out once.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Hold {
    first: [f64; 3],
    second: [f64; 3],
}

impl Hold {
    /// A hold of `h_s` seconds, ≥ 0.
    pub fn new(model: &ProcessModel, h_s: f64) -> Self {
        let column = |first, second, op| {
            let mut state = State { first, second };
            state.advance(model, h_s, op);
            state
        };
        let columns = [
            column(1.0, 0.0, 0.0),
            column(0.0, 1.0, 0.0),
            column(0.0, 0.0, 1.0),
        ];
        Hold {
            first: columns.map(|state| state.first),
            second: columns.map(|state| state.second),
        }
    }

    /// The state at the end of the hold under the (already delayed) OP deviation `op`, %.
    pub fn advance(&self, state: State, op: f64) -> State {
        let row = |row: [f64; 3]| row[0] * state.first + row[1] * state.second + row[2] * op;
        State {
            first: row(self.first),
            second: row(self.second),
        }
    }
}

//! The parts that a process is put together from: valve, pipe, lags, tank, transmitter.

use std::collections::VecDeque;

use crate::random::Random;

/// The static curve from valve position (%) to PV (%), or to the rate of a level (%/s).
///
/// Its slope is `gain * exp(bend * (position - centre))`: constant where `bend` is 0.
#[derive(Clone, Copy)]
pub struct Curve {
    /// Valve position at which the curve passes through `value`, %.
    pub centre: f64,
    /// Value at the centre, % (0 for a level: there it is in balance).
    pub value: f64,
    /// Slope at the centre, %/% (level: %/s/%).
    pub gain: f64,
    /// Relative change of the slope for each % of travel.
    pub bend: f64,
}

impl Curve {
    /// The value at a position.
    pub fn at(&self, position: f64) -> f64 {
        let travel = position - self.centre;
        let rise = if self.bend == 0.0 {
            self.gain * travel
        } else {
            self.gain * (self.bend * travel).exp_m1() / self.bend
        };
        self.value + rise
    }

    /// The mean slope between two positions: what a step between them sees.
    pub fn slope_between(&self, from: f64, to: f64) -> f64 {
        (self.at(to) - self.at(from)) / (to - from)
    }
}

/// A valve that follows its signal with play in the linkage, and may stick.
pub struct Valve {
    position: f64,
    dead_band: f64,
    /// How far the signal must run ahead before a stuck valve jumps, %; 0: it does not stick.
    pub stick: f64,
}

impl Valve {
    /// A valve at rest at `op` that last moved upwards, so an upward move loses nothing.
    pub fn new(op: f64, dead_band: f64) -> Self {
        Self {
            position: op - dead_band / 2.0,
            dead_band,
            stick: 0.0,
        }
    }

    /// The position, %, after the signal has become `op`.
    pub fn follow(&mut self, op: f64) -> f64 {
        if self.stick > 0.0 {
            if (op - self.position).abs() > self.stick {
                self.position = op;
            }
        } else {
            let half = self.dead_band / 2.0;
            self.position = self.position.clamp(op - half, op + half);
        }
        self.position
    }
}

/// A first-order lag, advanced exactly for an input that is held over the tick.
struct Lag {
    state: f64,
    share: f64,
}

impl Lag {
    fn advance(&mut self, input: f64) -> f64 {
        self.state += self.share * (input - self.state);
        self.state
    }
}

/// What one process is made of.
#[derive(Clone, Copy)]
pub struct ProcessSpec {
    /// Static curve of the valve and the process together.
    pub curve: Curve,
    /// Play of the valve, % of OP lost on each reversal.
    pub dead_band: f64,
    /// Transport delay, s; a whole number of ticks.
    pub dead_time_s: f64,
    /// Lags in series, s.
    pub lags_s: &'static [f64],
    /// The curve feeds a tank: its value is the rate of the level.
    pub integrating: bool,
}

/// A process in motion.
pub struct Process {
    curve: Curve,
    /// The valve at its inlet.
    pub valve: Valve,
    pipe: VecDeque<f64>,
    lags: Vec<Lag>,
    integrating: bool,
    level: f64,
    tick_s: f64,
}

impl Process {
    /// The process at rest with the controller output at `op`; a level starts at `level`.
    pub fn at_rest(spec: &ProcessSpec, op: f64, level: f64, tick_s: f64) -> Self {
        let valve = Valve::new(op, spec.dead_band);
        let position = valve.position;
        let mut curve = spec.curve;
        if spec.integrating {
            // The flow on the other side of the tank is whatever balances it at the start.
            curve.value -= curve.at(position);
        }
        let value = curve.at(position);
        let ticks = (spec.dead_time_s / tick_s).round() as usize;
        Self {
            curve,
            valve,
            pipe: std::iter::repeat_n(value, ticks).collect(),
            lags: spec
                .lags_s
                .iter()
                .map(|lag_s| Lag {
                    state: value,
                    share: -(-tick_s / lag_s).exp_m1(),
                })
                .collect(),
            integrating: spec.integrating,
            level: if spec.integrating { level } else { value },
            tick_s,
        }
    }

    /// Advances one tick with the controller output at `op`, in %.
    ///
    /// `load` is a disturbance in % of OP at the process input.
    pub fn advance(&mut self, op: f64, load: f64) {
        let position = self.valve.follow(op);
        self.advance_from(position, load);
    }

    /// As `advance`, past the valve: `position` is the position, or the flow, that the curve is given.
    pub fn advance_from(&mut self, position: f64, load: f64) {
        self.pipe
            .push_back(self.curve.at(position) + self.curve.gain * load);
        let mut value = self
            .pipe
            .pop_front()
            .expect("a value was pushed just before");
        for lag in &mut self.lags {
            value = lag.advance(value);
        }
        if self.integrating {
            self.level += value * self.tick_s;
        } else {
            self.level = value;
        }
    }

    /// The true PV, %.
    pub fn value(&self) -> f64 {
        self.level
    }

    /// The value that a process at rest answers `op` with, %.
    pub fn resting_value(spec: &ProcessSpec, op: f64) -> f64 {
        spec.curve.at(Valve::new(op, spec.dead_band).position)
    }
}

/// A transmitter: white noise, then the steps of its converter.
pub struct Transmitter {
    noise: f64,
    resolution: f64,
    random: Random,
}

impl Transmitter {
    /// Noise (standard deviation) and resolution in % of span.
    pub fn new(noise: f64, resolution: f64, random: Random) -> Self {
        Self {
            noise,
            resolution,
            random,
        }
    }

    /// One reading of `value`, %.
    pub fn read(&mut self, value: f64) -> f64 {
        let noisy = value + self.noise * self.random.gaussian();
        (noisy / self.resolution).round() * self.resolution
    }
}

/// A slow wander of the plant about its mean: a first-order Gauss-Markov process.
pub struct Wander {
    state: f64,
    keep: f64,
    kick: f64,
    random: Random,
}

impl Wander {
    /// Standard deviation `sd` and time constant `time_constant_s`, starting at 0.
    pub fn new(sd: f64, time_constant_s: f64, tick_s: f64, random: Random) -> Self {
        let keep = (-tick_s / time_constant_s).exp();
        Self {
            state: 0.0,
            keep,
            kick: sd * (1.0 - keep * keep).sqrt(),
            random,
        }
    }

    /// The wander one tick later.
    pub fn advance(&mut self) -> f64 {
        self.state = self.keep * self.state + self.kick * self.random.gaussian();
        self.state
    }
}

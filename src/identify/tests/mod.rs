//! Tests of identification on simulated step tests.

mod coverage;
mod intervals;
mod kinds;
mod scenarios;
mod valve;
mod verdicts;

use super::*;
use crate::quantity::Span;
use crate::trace::{Clock, Samples};

/// Small seeded generator (G. Marsaglia, J. Statistical Software 8 (2003) 14: xorshift64).
struct Random(u64);

impl Random {
    fn new(seed: u64) -> Self {
        let mut random = Random(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1);
        for _ in 0..20 {
            random.uniform();
        }
        random
    }

    /// In [0, 1).
    fn uniform(&mut self) -> f64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        (self.0 >> 11) as f64 / (1_u64 << 53) as f64
    }

    fn normal(&mut self) -> f64 {
        let radius = libm::sqrt(-2.0 * libm::log(1.0 - self.uniform()));
        radius * libm::cos(std::f64::consts::TAU * self.uniform())
    }
}

/// A simulated step test.
#[derive(Clone)]
struct Test {
    model: ProcessModel,
    /// (time, OP) from then on; the first at 0.
    op: Vec<(f64, f64)>,
    length_s: f64,
    interval_s: f64,
    /// Share of the interval by which sample times are shifted at random.
    jitter: f64,
    noise: f64,
    /// Autocorrelation of the noise over one interval.
    memory: f64,
    /// Digits of the PV, %; 0 for none.
    resolution: f64,
    base: f64,
    /// Slope of the PV that has nothing to do with the OP, %/s.
    slope: f64,
    /// Play of the valve, % of OP.
    dead_band: f64,
    /// Share of the play that lies before the first move.
    slack: f64,
    seed: u64,
}

impl Test {
    fn new(model: ProcessModel, op: &[(f64, f64)], length_s: f64) -> Self {
        Test {
            model,
            op: op.to_vec(),
            length_s,
            interval_s: 1.0,
            jitter: 0.0,
            noise: 0.05,
            memory: 0.0,
            resolution: 0.0,
            base: 50.0,
            slope: 0.0,
            dead_band: 0.0,
            slack: 0.0,
            seed: 1,
        }
    }

    fn samples(&self) -> Samples {
        let mut random = Random::new(self.seed);
        let rows = (self.length_s / self.interval_s) as usize;
        let t_s: Vec<f64> = (0..rows)
            .map(|k| self.interval_s * (k as f64 + self.jitter * (random.uniform() - 0.5)))
            .collect();
        // The OP moves at a sample, so that the log shows when.
        let seen = |t: f64| t_s[t_s.partition_point(|s| *s < t).min(rows - 1)];
        let moves: Vec<(f64, f64)> = self
            .valve_moves()
            .iter()
            .map(|m| (seen(m.0), m.1))
            .collect();
        let clean = self.model.response_to_held(&moves, &t_s);
        let mut noise = self.noise * random.normal();
        let mut before = t_s[0];
        let pv = clean
            .iter()
            .zip(&t_s)
            .map(|(y, t)| {
                // Kept of the noise since the sample before: its memory runs on in time.
                let kept = libm::pow(self.memory, (t - before) / self.interval_s);
                before = *t;
                noise = kept * noise + self.noise * libm::sqrt(1.0 - kept * kept) * random.normal();
                let pv = self.base + y + self.slope * t + noise;
                if self.resolution > 0.0 {
                    self.resolution * libm::round(pv / self.resolution)
                } else {
                    pv
                }
            })
            .collect();
        let op = t_s
            .iter()
            .map(|t| {
                let k = self.op.partition_point(|m| m.0 <= *t);
                self.op[k.max(1) - 1].1
            })
            .collect();
        Samples {
            good: vec![true; t_s.len()],
            t_s,
            pv,
            op,
            ..Samples::default()
        }
    }

    /// The valve's own moves: with play it stands until the OP has run through it.
    fn valve_moves(&self) -> Vec<(f64, f64)> {
        let start = self.op[0].1;
        let way = self.op.get(1).map_or(1.0, |m| (m.1 - start).signum());
        // How far the OP may still go up and down before the valve follows.
        let (mut up, mut down) = if way > 0.0 {
            (
                self.slack * self.dead_band,
                (1.0 - self.slack) * self.dead_band,
            )
        } else {
            (
                (1.0 - self.slack) * self.dead_band,
                self.slack * self.dead_band,
            )
        };
        let (mut op, mut valve) = (start, 0.0);
        self.op[1..]
            .iter()
            .map(|&(at, to)| {
                let change = to - op;
                op = to;
                let (ahead, behind) = if change > 0.0 {
                    (&mut up, &mut down)
                } else {
                    (&mut down, &mut up)
                };
                let lost = ahead.min(change.abs());
                *ahead -= lost;
                *behind += lost;
                valve += change - lost.copysign(change);
                (at, valve)
            })
            .collect()
    }

    fn identify(&self) -> Identification {
        identify_samples_of(&self.samples(), full())
    }
}

fn full() -> Span {
    Span::new(0.0, 100.0).expect("a range")
}

fn context(pv_span: Span) -> Context {
    Context {
        clock: Clock::Elapsed,
        pv_span,
        op_span: full(),
        bounds: VerdictBounds::default(),
        not_before_s: None,
    }
}

fn identify_samples_of(samples: &Samples, pv_span: Span) -> Identification {
    let trace = Trace::new(samples, pv_span, full()).expect("a trace");
    let steps = crate::steps::find(&trace, 1.0).expect("steps");
    identify(&trace, &steps, &context(pv_span))
}

fn first_order(gain: f64, tau: f64, theta: f64) -> ProcessModel {
    ProcessModel::of_kind(Kind::FirstOrder, gain, tau, 0.0, theta)
}

const UP_AND_BACK: [(f64, f64); 3] = [(0.0, 40.0), (60.0, 45.0), (260.0, 40.0)];

const IN_AND_OUT: [(f64, f64); 5] = [
    (0.0, 40.0),
    (60.0, 45.0),
    (160.0, 40.0),
    (260.0, 35.0),
    (360.0, 40.0),
];

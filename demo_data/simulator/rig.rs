//! One loop on the bench: process, transmitter and controller on one clock, driven by a script.

use crate::controller::{Controller, ControllerSpec, Settings};
use crate::process::{Process, ProcessSpec, Transmitter, Wander};
use crate::random::Random;

/// A loop: everything that does not change between its test and its trial.
#[derive(Clone, Copy)]
pub struct LoopSpec {
    /// Tag.
    pub tag: &'static str,
    /// PV range, engineering units.
    pub pv_low: f64,
    /// Upper end of the PV range.
    pub pv_high: f64,
    /// The process.
    pub process: ProcessSpec,
    /// Standard deviation of the transmitter's noise, % of span.
    pub noise: f64,
    /// Resolution of the transmitter, % of span.
    pub resolution: f64,
    /// Interval at which the PV is refreshed, s.
    pub refresh_s: f64,
    /// Interval of the log, s.
    pub log_s: f64,
    /// Integration tick, s.
    pub tick_s: f64,
    /// Slow wander: standard deviation (% of PV; a level: % of OP) and time constant (s).
    pub wander: (f64, f64),
    /// OP at the start, %.
    pub start_op: f64,
    /// Level at the start, %; not used where the process is self-regulating.
    pub start_level: f64,
}

impl LoopSpec {
    /// PV in engineering units.
    pub fn engineering(&self, percent: f64) -> f64 {
        self.pv_low + (self.pv_high - self.pv_low) * percent / 100.0
    }

    /// PV at rest at the start, %.
    pub fn start_pv(&self) -> f64 {
        if self.process.integrating {
            self.start_level
        } else {
            Process::resting_value(&self.process, self.start_op)
        }
    }
}

/// The loop that another one cascades to.
pub struct Inner {
    process: Process,
    transmitter: Transmitter,
    controller: Controller,
    scan_s: f64,
    op: f64,
    measured: f64,
}

impl Inner {
    /// At rest at the set point `sp` (%).
    pub fn at_rest(
        spec: &LoopSpec,
        controller: &ControllerSpec,
        settings: Settings,
        sp: f64,
        tick_s: f64,
    ) -> Self {
        // The curve is monotone: the resting output is found by halving the range.
        let (mut low, mut high) = (0.0, 100.0);
        for _ in 0..60 {
            let middle = (low + high) / 2.0;
            if Process::resting_value(&spec.process, middle) < sp {
                low = middle;
            } else {
                high = middle;
            }
        }
        Self {
            process: Process::at_rest(&spec.process, low, 0.0, tick_s),
            transmitter: Transmitter::new(spec.noise, spec.resolution, Random::new(spec.tag, 7)),
            controller: Controller::new(controller, settings, spec.pv_high - spec.pv_low),
            scan_s: controller.scan_s,
            op: low,
            measured: sp,
        }
    }

    fn advance(&mut self, sp: f64, tick: usize, tick_s: f64) -> f64 {
        if due(tick, self.scan_s, tick_s) {
            self.measured = self.transmitter.read(self.process.value());
            self.op = self.controller.execute(sp, self.measured, self.op);
        }
        self.process.advance(self.op, 0.0);
        self.process.value()
    }
}

/// One thing that happens at a time.
pub enum Event {
    /// The operator sets the OP: a step.
    Op(f64),
    /// The operator takes the OP back: the end of a pulse, no step of its own.
    Back(f64),
    /// The loop goes to automatic with these settings.
    Auto(Settings),
    /// The loop goes to manual, the OP set to this value.
    Manual(f64),
    /// The set point moves to this value, % of span.
    SetPoint(f64),
    /// A lasting disturbance at the process input, % of OP.
    Load(f64),
}

/// A slow change of the plant: `size` (% of PV; a level: % of OP) spread evenly between two times.
#[derive(Clone, Copy)]
pub struct Drift {
    /// Start, s.
    pub from_s: f64,
    /// End, s.
    pub to_s: f64,
    /// Size; it stays.
    pub size: f64,
}

/// What is done during one log.
pub struct Script {
    /// Length, s.
    pub length_s: f64,
    /// Events, in order of time.
    pub events: Vec<(f64, Event)>,
    /// Drifts.
    pub drifts: Vec<Drift>,
    /// Stick of the valve, %.
    pub stick: f64,
    /// Number of the random stream: another one for each log of a loop.
    pub stream: u64,
}

/// One logged sample; PV and SP in % of span.
#[derive(Clone, Copy)]
pub struct Sample {
    /// Time since the start, s.
    pub t_s: f64,
    /// PV as measured.
    pub pv: f64,
    /// Set point.
    pub sp: f64,
    /// OP, %.
    pub op: f64,
    /// In automatic.
    pub automatic: bool,
    /// Measured PV of the inner loop, %, where there is one.
    pub inner_pv: f64,
}

/// The true gain that one step saw.
pub struct TrueStep {
    /// Slope of the static curve between the two valve positions.
    pub gain: f64,
}

/// A log and the truth behind it.
pub struct Run {
    /// Samples at the log's interval.
    pub samples: Vec<Sample>,
    /// The operator's steps, in order.
    pub steps: Vec<TrueStep>,
}

fn due(tick: usize, interval_s: f64, tick_s: f64) -> bool {
    tick.is_multiple_of(((interval_s / tick_s).round() as usize).max(1))
}

/// Runs a script on a loop.
pub fn run(
    spec: &LoopSpec,
    controller_spec: &ControllerSpec,
    script: Script,
    mut inner: Option<Inner>,
) -> Run {
    let tick_s = spec.tick_s;
    let mut process = Process::at_rest(&spec.process, spec.start_op, spec.start_level, tick_s);
    process.valve.stick = script.stick;
    let mut transmitter = Transmitter::new(
        spec.noise,
        spec.resolution,
        Random::new(spec.tag, 2 * script.stream),
    );
    let mut wander = Wander::new(
        spec.wander.0,
        spec.wander.1,
        tick_s,
        Random::new(spec.tag, 2 * script.stream + 1),
    );
    let mut op = spec.start_op;
    let mut sp = (spec.start_pv() * 10.0).round() / 10.0;
    let (mut load, mut slow, mut measured) = (0.0, 0.0, spec.start_pv());
    let mut controller: Option<Controller> = None;
    let mut position = match inner {
        Some(_) => op,
        None => process.valve.follow(op),
    };
    let mut events = script.events.into_iter().peekable();
    let mut result = Run {
        samples: Vec::new(),
        steps: Vec::new(),
    };
    for tick in 0..=(script.length_s / tick_s).round() as usize {
        let t_s = tick as f64 * tick_s;
        let mut stepped = false;
        while let Some((_, event)) = events.next_if(|(at_s, _)| *at_s <= t_s + tick_s / 2.0) {
            match event {
                Event::Op(value) => {
                    op = value;
                    stepped = true;
                }
                Event::Back(value) => op = value,
                Event::Manual(value) => {
                    op = value;
                    controller = None;
                }
                Event::Auto(settings) => {
                    let span = spec.pv_high - spec.pv_low;
                    controller = Some(Controller::new(controller_spec, settings, span));
                }
                Event::SetPoint(value) => sp = value,
                Event::Load(value) => load = value,
            }
        }
        if due(tick, spec.refresh_s, tick_s) {
            let shift = if spec.process.integrating { 0.0 } else { slow };
            measured = transmitter.read(process.value() + shift);
        }
        if let Some(controller) = &mut controller
            && due(tick, controller_spec.scan_s, tick_s)
        {
            op = controller.execute(sp, measured, op);
        }
        if due(tick, spec.log_s, tick_s) {
            result.samples.push(Sample {
                t_s,
                pv: measured,
                sp,
                op,
                automatic: controller.is_some(),
                inner_pv: inner.as_ref().map_or(0.0, |inner| inner.measured),
            });
        }
        slow = wander.advance() + drift_at(&script.drifts, t_s);
        let before = position;
        position = match &mut inner {
            Some(inner) => {
                let flow = inner.advance(op, tick, tick_s);
                process.advance_from(flow, load);
                op // at rest the inner loop holds its set point
            }
            None => {
                let disturbance = if spec.process.integrating { slow } else { 0.0 };
                process.advance(op, load + disturbance);
                process.valve.follow(op)
            }
        };
        if stepped {
            let gain = spec.process.curve.slope_between(before, position);
            result.steps.push(TrueStep { gain });
        }
    }
    result
}

fn drift_at(drifts: &[Drift], t_s: f64) -> f64 {
    drifts
        .iter()
        .map(|drift| {
            let share = (t_s - drift.from_s) / (drift.to_s - drift.from_s);
            drift.size * share.clamp(0.0, 1.0)
        })
        .sum()
}

//! Records made up for the tests of the figures: a simulated process, tested and tuned.

use crate::design::{Aim, DesignBounds};
use crate::identify::{Model, Reading, Reason, ReasonCode, Step, StepFit, Verdict, VerdictBounds};
use crate::model::{ProcessModel, State};
use crate::predict::trial::{Band, Trial, TrialKind};
use crate::predict::{Curve, Margins, Metrics, Predicted, Response};
use crate::quantity::{Estimate, Span};
use crate::record::*;
use crate::settings::*;
use crate::trace::{Clock, Moment, Samples};
use chrono::{NaiveDate, NaiveDateTime};
use std::collections::BTreeMap;

/// What is simulated. OP moves in percent, PV range in engineering units.
#[derive(Debug, Clone)]
pub struct Plan {
    /// The process.
    pub process: ProcessModel,
    /// (second, OP after the move, %), the first being where the OP stands at the beginning.
    pub moves: Vec<(f64, f64)>,
    /// Last second of the log.
    pub end_s: f64,
    /// Sampling interval, s.
    pub interval_s: f64,
    /// Half width of the noise, % of span.
    pub noise_percent: f64,
    /// PV at the beginning, % of span.
    pub pv_percent: f64,
    /// Range of the PV.
    pub pv: Range,
    /// Range of the OP.
    pub op: Range,
    /// Second 0 of the clock.
    pub zero: Option<NaiveDateTime>,
    /// Numbers of the rejected steps, and why.
    pub rejected: Vec<(usize, ReasonCode)>,
    /// Whether SP is in the test log.
    pub sp: bool,
    /// Whether the settings as found make the loop unstable.
    pub unstable: bool,
    /// Numbers of steps called pulses.
    pub pulses: Vec<usize>,
}

/// Five minutes past nine on the day of the test.
pub fn morning() -> NaiveDateTime {
    NaiveDate::from_ymd_opt(2026, 3, 11)
        .and_then(|d| d.and_hms_opt(9, 5, 0))
        .expect("a date and a time of day")
}

impl Default for Plan {
    fn default() -> Self {
        Plan {
            process: ProcessModel::SecondOrder {
                gain: 0.94,
                time_constant_s: 195.0,
                second_time_constant_s: 45.0,
                dead_time_s: 24.0,
            },
            moves: vec![
                (0.0, 42.0),
                (600.0, 47.0),
                (1800.0, 51.0),
                (3300.0, 46.0),
                (4800.0, 41.0),
                (6000.0, 37.0),
                (7200.0, 42.0),
            ],
            end_s: 7740.0,
            interval_s: 2.0,
            noise_percent: 0.2,
            pv_percent: 47.5,
            pv: range("degC", 60.0, 140.0),
            op: range("%", 0.0, 100.0),
            zero: Some(morning()),
            rejected: vec![(3, ReasonCode::Drift)],
            sp: false,
            unstable: false,
            pulses: Vec::new(),
        }
    }
}

/// A range in words.
pub fn range(unit: &str, low: f64, high: f64) -> Range {
    Range {
        unit: unit.to_owned(),
        low,
        high,
    }
}

/// Noise between -1 and 1, the same at each run.
struct Noise(u64);

impl Noise {
    fn next(&mut self) -> f64 {
        // D.E. Knuth's MMIX constants.
        self.0 = self
            .0
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 11) as f64 / (1u64 << 52) as f64 - 1.0
    }
}

impl Plan {
    fn spans(&self) -> (Span, Span) {
        let span = |r: &Range| Span::new(r.low, r.high).expect("a sample's range");
        (span(&self.pv), span(&self.op))
    }

    fn samples(&self) -> Samples {
        let (pv_span, op_span) = self.spans();
        let n = (self.end_s / self.interval_s) as usize + 1;
        let t_s: Vec<f64> = (0..n).map(|k| k as f64 * self.interval_s).collect();
        let start = self.moves[0].1;
        let deviations: Vec<(f64, f64)> =
            self.moves.iter().map(|&(t, op)| (t, op - start)).collect();
        let mut noise = Noise(207);
        let pv = self
            .process
            .response_to_held(&deviations, &t_s)
            .into_iter()
            .map(|y| pv_span.engineering(self.pv_percent + y + self.noise_percent * noise.next()))
            .collect();
        let op = t_s
            .iter()
            .map(|&t| {
                let held = self.moves.iter().rfind(|m| m.0 <= t).map_or(start, |m| m.1);
                op_span.engineering(held)
            })
            .collect();
        let sp = if self.sp {
            vec![pv_span.engineering(self.pv_percent); n]
        } else {
            Vec::new()
        };
        Samples {
            good: vec![true; n],
            t_s,
            pv,
            op,
            sp,
            ..Samples::default()
        }
    }

    fn clock(&self) -> Clock {
        self.zero.map_or(Clock::Elapsed, Clock::Dated)
    }

    fn steps(&self, data: &Samples) -> Vec<Step> {
        (1..self.moves.len())
            .map(|number| self.step(number, data))
            .collect()
    }

    fn step(&self, number: usize, data: &Samples) -> Step {
        let (pv_span, op_span) = self.spans();
        let (at_s, op) = self.moves[number];
        let before = self.moves[number - 1];
        let end_s = self.moves.get(number + 1).map_or(self.end_s, |m| m.0);
        let quiet_from = at_s - (at_s - before.0) / 3.0;
        let mean = |from: f64, to: f64| {
            let values: Vec<f64> = data
                .t_s
                .iter()
                .zip(&data.pv)
                .filter(|(t, _)| **t >= from && **t <= to)
                .map(|(_, pv)| *pv)
                .collect();
            values.iter().sum::<f64>() / values.len().max(1) as f64
        };
        let pv_from = mean(quiet_from, at_s);
        let integrates = self.process.kind().integrates();
        let value_at = |t: f64| mean(t - 2.0 * self.interval_s, t + 2.0 * self.interval_s);
        let pv_to = if integrates {
            value_at(end_s)
        } else {
            mean(end_s - (end_s - at_s) / 5.0, end_s)
        };
        let rejected = self.rejected.iter().find(|r| r.0 == number);
        let tau = self.process.time_constant_s().unwrap_or(0.0);
        let gain = self.process.gain() * (1.0 + 0.02 * number as f64);
        // Where an integrating process starts off balance the PV has a slope before the move.
        let slope = |op: f64| {
            if integrates {
                gain * (op - self.moves[0].1)
            } else {
                0.0
            }
        };
        let settled = if integrates { value_at(at_s) } else { pv_from };
        Step {
            number,
            at: self.clock().at(at_s),
            at_s,
            op_from: op_span.engineering(before.1),
            op_to: op_span.engineering(op),
            pv_from,
            pv_to,
            window_s: [quiet_from, end_s],
            quiet_s: [quiet_from, at_s],
            pulse: self.pulses.contains(&number),
            verdict: rejected.map_or(Verdict::Accepted, |_| Verdict::Rejected),
            reasons: rejected
                .map(|&(_, code)| Reason {
                    code,
                    text: "drift 31 % (bound 20 %)".to_owned(),
                    figure: Some(31.0),
                    bound: Some(20.0),
                })
                .into_iter()
                .collect(),
            checks: Vec::new(),
            reading: rejected.is_none().then(|| Reading {
                gain,
                dead_time_s: self.process.dead_time_s() + 20.0,
                time_constant_s: (!integrates).then_some(tau),
                base_percent: pv_span.percent(pv_from),
                end_percent: pv_span.percent(pv_to),
                slopes_percent_per_s: integrates.then(|| [slope(before.1), slope(op)]),
                differs: false,
            }),
            fit: rejected.is_none().then(|| StepFit {
                kind: self.process.kind(),
                gain: around(gain),
                time_constant_s: self.process.time_constant_s().map(around),
                second_time_constant_s: self.process.second_time_constant_s().map(around),
                dead_time_s: around(self.process.dead_time_s()),
                residual_percent: 4.0,
                rmse_percent: 0.1,
                bias_percent: pv_span.percent(settled),
                drift_percent_per_s: slope(before.1),
            }),
        }
    }

    fn model(&self, steps: &[Step]) -> Model {
        Model {
            kind: self.process.kind(),
            gain: around(self.process.gain()),
            time_constant_s: self.process.time_constant_s().map(around),
            second_time_constant_s: self.process.second_time_constant_s().map(around),
            dead_time_s: around(self.process.dead_time_s()),
            steps: steps.iter().map(|s| s.number).collect(),
            noise_sd_percent: Some(0.1),
            resolution_percent: None,
            rmse_percent: 0.1,
            residual_percent: 4.0,
            covariance_of: Vec::new(),
            covariance: Vec::new(),
            residual_autocorrelation: 0.0,
            effective_samples: 100.0,
            widened: false,
            gain_ratio: None,
            undecided: None,
            alternatives: Vec::new(),
            set: Vec::new(),
        }
    }

    /// A PI loop on the process: set-point and load response, percent.
    fn loop_curve(
        &self,
        kc: f64,
        ti_s: f64,
        sp: &dyn Fn(f64) -> f64,
        load: f64,
        end_s: f64,
    ) -> Curve {
        let scan_s = end_s / 2000.0;
        let delay = (self.process.dead_time_s() / scan_s) as usize + 1;
        let mut queue = vec![0.0; delay];
        let mut state = State::default();
        let mut integral = 0.0;
        let mut curve = Curve::default();
        let kc = kc * self.process.gain().signum();
        for k in 0..=2000 {
            let t = f64::from(k) * scan_s;
            let pv = state.pv(&self.process);
            let error = sp(t) - pv;
            integral += kc * error * scan_s / ti_s;
            let op = (kc * error + integral).clamp(-50.0, 50.0);
            if k % 4 == 0 {
                curve.t_s.push(t);
                curve.pv.push(pv);
                curve.op.push(op);
            }
            queue.push(op + load);
            state.advance(&self.process, scan_s, queue.remove(0));
        }
        curve
    }

    /// Settings of `speed` times the gain that suits the process, with their responses.
    fn settings(&self, speed: f64) -> SettingsBlock {
        let theta = self.process.dead_time_s().max(1.0);
        let tau = self.process.time_constant_s().unwrap_or(0.0).max(theta);
        let (kc, ti_s) = if self.process.kind().integrates() {
            (
                speed / (self.process.gain().abs() * 4.0 * theta),
                16.0 * theta,
            )
        } else {
            (
                speed * tau / (self.process.gain().abs() * 4.0 * theta),
                tau / speed.max(1.0),
            )
        };
        let end_s = 10.0 * (theta + tau);
        let response = |step_percent: f64, curve: Curve, set_point: bool| Response {
            step_percent,
            metrics: Metrics {
                overshoot_percent: set_point.then_some(13.0),
                rise_time_s: None,
                settling_time_s: (speed < 4.0).then_some(end_s / 4.0),
                iae_percent_s: 1.0,
                peak_deviation_percent: 1.5,
                op_travel_percent: 1.0,
            },
            curve,
        };
        SettingsBlock {
            native: Native {
                p: kc,
                i: ti_s,
                d: 0.0,
            },
            standard: None,
            margins: Some(Margins {
                stable: speed < 4.0,
                ms: None,
                mt: None,
                gain_margin: None,
                phase_margin_deg: None,
                delay_margin_s: None,
            }),
            worst_margins: None,
            worst_model: None,
            predicted: Some(Predicted {
                set_point: response(5.0, self.loop_curve(kc, ti_s, &|_| 5.0, 0.0, end_s), true),
                load: response(5.0, self.loop_curve(kc, ti_s, &|_| 0.0, 5.0, end_s), false),
            }),
        }
    }

    fn trial(&self, left: &SettingsBlock) -> (Samples, Trial) {
        let (pv_span, op_span) = self.spans();
        let end_s = 5400.0;
        let set_point = |t: f64| {
            if (300.0..2700.0).contains(&t) {
                3.75
            } else {
                0.0
            }
        };
        let curve = self.loop_curve(left.native.p, left.native.i, &set_point, 0.0, end_s);
        let mut noise = Noise(11);
        let absolute = Curve {
            t_s: curve.t_s.clone(),
            pv: curve.pv.iter().map(|y| y + self.pv_percent).collect(),
            op: curve.op.iter().map(|u| u + self.moves[0].1).collect(),
        };
        let samples = Samples {
            t_s: curve.t_s.clone(),
            pv: absolute
                .pv
                .iter()
                .map(|y| pv_span.engineering(1.003 * y + self.noise_percent * noise.next()))
                .collect(),
            good: vec![true; curve.t_s.len()],
            op: absolute
                .op
                .iter()
                .map(|u| op_span.engineering(*u))
                .collect(),
            sp: curve
                .t_s
                .iter()
                .map(|&t| pv_span.engineering(self.pv_percent + set_point(t)))
                .collect(),
            ..Samples::default()
        };
        let metrics = Metrics {
            overshoot_percent: Some(21.0),
            settling_time_s: Some(528.0),
            ..Metrics::default()
        };
        let trial = Trial {
            kind: TrialKind::SetPoint,
            at_s: 300.0,
            step_percent: 3.75,
            measured: metrics,
            predicted: metrics,
            predicted_rmse_percent: 0.1,
            agrees: true,
            why: "settles and overshoots as predicted".to_owned(),
            oscillation: None,
            curve: absolute,
            moves: Vec::new(),
            not_judged: None,
            band: Band::default(),
        };
        (samples, trial)
    }

    /// The record of this plan.
    pub fn record(&self) -> Record {
        let data = self.samples();
        let steps = self.steps(&data);
        let usable: Vec<Step> = steps
            .iter()
            .filter(|s| s.verdict != Verdict::Rejected)
            .cloned()
            .collect();
        let model = (!usable.is_empty()).then(|| ModelBlock {
            fit: self.model(&usable),
            gain_engineering: EngineeringGain {
                value: 0.75,
                low: 0.5,
                high: 1.0,
                unit: "degC/%".to_owned(),
            },
        });
        let found = self.settings(if self.unstable { 8.0 } else { 2.4 });
        let left = model.is_some().then(|| self.settings(1.2));
        let trial = left.as_ref().map(|left| self.trial(left));
        let mut logs = vec![self.log(LogRole::Test, data)];
        logs.extend(
            trial
                .iter()
                .map(|(data, _)| self.log(LogRole::Trial, data.clone())),
        );
        Record {
            schema: SCHEMA.to_owned(),
            document: document(if model.is_some() {
                Status::ForSignature
            } else {
                Status::Withheld
            }),
            control_loop: self.control_loop(),
            logs,
            test: Test {
                noise_sd_percent: None,
                sigma_percent: None,
                compressed: false,
                pv_tested: [self.pv.low, self.pv.high],
                op_tested: [self.op.low, self.op.high],
                failure: None,
                next_time: Vec::new(),
            },
            steps,
            model,
            valve: None,
            design: None,
            settings: AllSettings {
                as_found: found,
                recommended: left.clone(),
                as_left: left,
                as_left_differs: Some(false),
            },
            trial: trial.map(|(_, trial)| trial),
            cautions: Vec::new(),
            limits_in_force: LimitsInForce {
                design: DesignBounds::default(),
                verdict: VerdictBounds::default(),
            },
            provenance: Provenance {
                program: "asleft".to_owned(),
                seal: String::new(),
            },
        }
    }

    fn log(&self, role: LogRole, data: Samples) -> Log {
        let clock = self.clock();
        let end = |t: Option<&f64>| clock.at(t.copied().unwrap_or(0.0));
        let (from, to): (Moment, Moment) = (end(data.t_s.first()), end(data.t_s.last()));
        Log {
            role,
            file: "logs/a.csv".to_owned(),
            sheet: None,
            sha256: String::new(),
            rows: data.t_s.len(),
            also: Vec::new(),
            samples: data.t_s.len(),
            from,
            to,
            zero: self.zero,
            interval_s: self.interval_s,
            bad_samples: 0,
            bad_by_cause: BTreeMap::new(),
            gaps: Vec::new(),
            notes: Vec::new(),
            samples_file: "samples-test.csv".to_owned(),
            samples_sha256: String::new(),
            data,
        }
    }

    fn control_loop(&self) -> Loop {
        Loop {
            tag: "TIC-207".to_owned(),
            service: "Tray 12".to_owned(),
            pv: self.pv.clone(),
            op: self.op.clone(),
            action: Action::for_gain(self.process.gain()),
            left_action: None,
            form: EquationForm::Standard,
            p_as: ProportionalUnit::Gain,
            i_as: IntegralUnit::Seconds,
            d_as: DerivativeUnit::Seconds,
            p_on: ActsOn::Error,
            d_on: ActsOn::Pv,
            d_filter_n: 10.0,
            scan_s: 1.0,
            pv_filter_s: 0.0,
            left_pv_filter_s: None,
            pv_filter_in_log: true,
            aim: Aim::Load,
            derivative: false,
            target_s: None,
            target_reason: None,
            allowed_deviation: None,
            expected_load_percent: None,
            inner_loop: None,
            outer_loops: Vec::new(),
            safety: false,
            safety_procedure: None,
            waiver: None,
            entered_by: None,
            left_on: None,
            tested_by: None,
            tested_on: None,
            witnessed_by: None,
            conditions: None,
            particulars: BTreeMap::new(),
        }
    }
}

fn around(value: f64) -> Estimate {
    Estimate::new(value, value * 0.95, value * 1.05)
}

fn document(status: Status) -> Document {
    Document {
        number: "LM-200-IC-TIC-207".to_owned(),
        revision: "1".to_owned(),
        status,
        date: morning().date(),
        owner: String::new(),
        plant: String::new(),
        area: None,
        client: None,
        creator: None,
        approver: None,
        page: PageSize::A4,
        open_items: Vec::new(),
        remarks: Vec::new(),
        signatures: Vec::new(),
        procedures: Vec::new(),
        revisions: Vec::new(),
    }
}

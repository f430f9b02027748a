//! Loops of every kind and every way to type their settings, ready to be assembled.

use crate::plant::{self, Trend};
use crate::synthetic;
use asleft::assemble::LoopInput;
use asleft::design::Aim;
use asleft::model::{Kind, ProcessModel};
use asleft::quantity::Span;
use asleft::record::{Log, LogRole};
use asleft::settings::{
    Action, Controller, DerivativeUnit, EquationForm, IntegralUnit, Native, ProportionalUnit,
    Standard,
};
use asleft::trace::Samples;
use proptest::prelude::*;

/// One loop: what it is and how its settings are typed.
#[derive(Debug, Clone)]
pub struct Plan {
    pub process: ProcessModel,
    pub form: EquationForm,
    pub units: (ProportionalUnit, IntegralUnit, DerivativeUnit),
    pub derivative: bool,
    pub aim: Aim,
    pub target_s: Option<f64>,
    pub left: bool,
    pub trial: bool,
    pub turned: bool,
}

pub fn plans() -> impl Strategy<Value = Plan> {
    let form = prop::sample::select(vec![
        EquationForm::Standard,
        EquationForm::Series,
        EquationForm::Parallel,
    ]);
    let p_as = prop::sample::select(vec![
        ProportionalUnit::Gain,
        ProportionalUnit::Band,
        ProportionalUnit::GainPerUnit,
    ]);
    let i_as = prop::sample::select(vec![
        IntegralUnit::Seconds,
        IntegralUnit::Minutes,
        IntegralUnit::PerSecond,
        IntegralUnit::PerMinute,
    ]);
    let process = (
        prop::sample::select(Kind::ALL.to_vec()),
        0.6..2.0_f64,
        30.0..80.0_f64,
        0.1..0.5_f64,
        0.1..0.5_f64,
    );
    let flags = (
        any::<bool>(),
        any::<bool>(),
        any::<bool>(),
        any::<bool>(),
        any::<bool>(),
    );
    (
        process,
        form,
        p_as,
        i_as,
        flags,
        prop::option::of(5.0..300.0_f64),
    )
        .prop_map(
            |((kind, gain, tau, second, theta), form, p_as, i_as, flags, target_s)| {
                let (derivative, set_point, left, trial, turned) = flags;
                let gain = if kind.integrates() {
                    gain / 100.0
                } else {
                    gain
                };
                let parallel = form == EquationForm::Parallel;
                Plan {
                    process: ProcessModel::of_kind(kind, gain, tau, second * tau, theta * tau),
                    form,
                    units: (
                        if parallel && p_as == ProportionalUnit::Band {
                            ProportionalUnit::Gain
                        } else {
                            p_as
                        },
                        if parallel {
                            IntegralUnit::PerMinute
                        } else {
                            i_as
                        },
                        DerivativeUnit::Minutes,
                    ),
                    derivative,
                    aim: if set_point { Aim::SetPoint } else { Aim::Load },
                    target_s,
                    left,
                    trial,
                    turned,
                }
            },
        )
}

/// A log of a trend in engineering units of 0 to 100.
pub fn log(role: LogRole, trend: &Trend) -> Log {
    let kept = synthetic::signed().logs;
    let like = kept.into_iter().find(|log| log.role == role);
    let count = trend.pv.len();
    Log {
        gaps: Vec::new(),
        data: Samples {
            t_s: (0..count).map(|k| k as f64 * trend.interval_s).collect(),
            pv: trend.pv.clone(),
            op: trend.op.clone(),
            sp: trend.sp.clone(),
            good: vec![true; count],
            ..Samples::default()
        },
        ..like.expect("a log of each role")
    }
}

impl Plan {
    /// PI settings, typed.
    pub fn native(&self, controller: &Controller) -> Native {
        let standard = Standard {
            kc: 0.317_3,
            ti_s: Some(91.37),
            td_s: 0.0,
        };
        let native = controller.native(standard).expect("PI in every form");
        native.rounded()
    }

    /// What the record is made from.
    pub fn input(&self) -> LoopInput {
        let record = synthetic::signed();
        let percent = Span::new(0.0, 100.0).expect("a range");
        let mut l = record.control_loop.clone();
        (l.pv.low, l.pv.high) = (0.0, 100.0);
        (l.form, l.aim, l.derivative) = (self.form, self.aim, self.derivative);
        (l.p_as, l.i_as, l.d_as) = self.units;
        l.target_s = self.target_s;
        l.scan_s = 1.0;
        let model = if self.turned {
            self.process.with_gain(-self.process.gain())
        } else {
            self.process
        };
        l.action = Action::for_gain(model.gain());
        let controller = Controller {
            scan_s: 1.0,
            pv_span: percent,
            op_span: percent,
            ..record
                .controller()
                .map(|c| Controller {
                    form: self.form,
                    p_as: self.units.0,
                    i_as: self.units.1,
                    d_as: self.units.2,
                    ..c
                })
                .expect("ranges")
        };
        let hold_s = 600.0;
        let moves = if model.kind().integrates() {
            [50.0, 53.0, 47.0, 50.0]
        } else {
            [47.0, 52.0, 47.0, 42.0]
        };
        let test = plant::steps(model, &moves, hold_s, 2.0, 0.05);
        // What it holds matters little here; a withheld record does not look at it.
        let trial = plant::trial(self.process, 0.3, 90.0, 2.0, 1800.0, 0.05);
        LoopInput {
            document: record.document.clone(),
            control_loop: l,
            found: self.native(&controller),
            left: self.left.then(|| self.native(&controller)),
            controller,
            test: log(LogRole::Test, &test),
            trial: self.trial.then(|| log(LogRole::Trial, &trial)),
            limits: record.limits_in_force,
            site_cautions: Vec::new(),
            inner: None,
        }
    }
}

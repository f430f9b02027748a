//! Records written by hand, for tests that need one and not how it came about. Invented figures;
//! every block is there, so that no field goes untested.

use asleft::archive;
use asleft::design::{
    Aim, Design, DesignBounds, Hardness, Limit, LimitName, LimitOutcome, RuleSettings,
};
use asleft::identify::{
    Advice, Alternative, Check, Model, Reading, Reason, ReasonCode, SetMember, Step, StepFit,
    Valve, Verdict, VerdictBounds,
};
use asleft::model::Kind;
use asleft::predict::oscillation::Oscillation;
use asleft::predict::trial::{Band, Trial, TrialKind, TrialMove};
use asleft::predict::{Curve, Margins, Metrics, Predicted, Response};
use asleft::quantity::Estimate;
use asleft::record::{
    AllSettings, Caution, Document, EngineeringGain, GapRecord, LimitsInForce, Log, LogRole,
    LogSource, Loop, ModelBlock, OpenCode, OpenItem, PageSize, Procedure, Provenance, Range,
    Record, Remark, Revision, SCHEMA, SettingsBlock, Signature, Status, Test,
};
use asleft::settings::{
    Action, ActsOn, DerivativeUnit, EquationForm, IntegralUnit, Native, ProportionalUnit, Standard,
};
use asleft::trace::{Moment, Samples};
use chrono::{NaiveDate, NaiveDateTime};
use std::collections::BTreeMap;

/// A sealed record for signature of loop TIC-1.
pub fn signed() -> Record {
    sealed(record())
}

/// A sealed record that recommends nothing, of loop TIC-2; its log bears no dates.
pub fn withheld() -> Record {
    let mut record = record();
    record.document.number = "LM-TIC-2".into();
    record.document.status = Status::Withheld;
    record.document.open_items = vec![OpenItem {
        code: OpenCode::NoUsableStep,
        text: "No usable step: the PV moved less than its noise.".into(),
    }];
    record.control_loop.tag = "TIC-2".into();
    record.control_loop.service = "=cmd|' /C calc'!A0".into();
    record.logs.truncate(1);
    record.logs[0].from = Moment::Elapsed(0.0);
    record.logs[0].to = Moment::Elapsed(2.5);
    record.logs[0].zero = None;
    record.logs[0].gaps.clear();
    record.steps[0].at = Moment::Elapsed(1.0);
    record.steps[0].fit = None;
    record.model = None;
    record.valve = None;
    record.design = None;
    record.trial = None;
    record.settings.recommended = None;
    record.settings.as_left = None;
    record.settings.as_left_differs = None;
    let found = &mut record.settings.as_found;
    (found.margins, found.worst_margins) = (None, None);
    (found.worst_model, found.predicted) = (None, None);
    sealed(record)
}

/// The record with the seal of its figures as they now are.
pub fn sealed(record: Record) -> Record {
    archive::seal(record).expect("every figure is a number")
}

fn date(day: u32) -> NaiveDate {
    NaiveDate::from_ymd_opt(2026, 3, day).expect("a date")
}

fn time(minute: u32) -> NaiveDateTime {
    date(12).and_hms_opt(14, minute, 0).expect("a time of day")
}

fn estimate(value: f64) -> Estimate {
    Estimate::new(value, value * 0.9, value * 1.1)
}

fn record() -> Record {
    Record {
        schema: SCHEMA.into(),
        document: document(),
        control_loop: control_loop(),
        logs: vec![log(LogRole::Test), log(LogRole::Trial)],
        test: Test {
            noise_sd_percent: Some(0.04),
            sigma_percent: Some(0.05),
            compressed: false,
            pv_tested: [71.2, 76.9],
            op_tested: [40.0, 45.0],
            failure: None,
            next_time: vec![Advice {
                what: "Move".into(),
                how: "the OP by at least 3 %".into(),
            }],
        },
        steps: vec![step()],
        model: Some(model()),
        valve: Some(Valve {
            dead_band_percent: 0.4,
            low: 0.2,
            high: 0.6,
        }),
        design: Some(design()),
        settings: AllSettings {
            as_found: block(2.0, 60.0, false),
            recommended: Some(block(1.25, 96.0, true)),
            as_left: Some(block(1.25, 96.0, true)),
            as_left_differs: Some(false),
        },
        trial: Some(trial()),
        cautions: vec![Caution {
            about: "operating range".into(),
            text: "Settings hold for 71.2 to 76.9 °C.".into(),
        }],
        limits_in_force: LimitsInForce {
            design: DesignBounds::default(),
            verdict: VerdictBounds::default(),
        },
        provenance: Provenance {
            program: "asleft 0.1.0".into(),
            seal: String::new(),
        },
    }
}

fn document() -> Document {
    let signature = |role: &str, name: Option<&str>| Signature {
        role: role.into(),
        name: name.map(str::to_owned),
    };
    Document {
        number: "LM-TIC-1".into(),
        revision: "0".into(),
        status: Status::ForSignature,
        date: date(14),
        owner: "Larkmoor Solvents".into(),
        plant: "Larkmoor Solvent Recovery".into(),
        area: Some("Unit 200".into()),
        client: None,
        creator: Some("A. Quill".into()),
        approver: None,
        page: PageSize::A4,
        open_items: Vec::new(),
        remarks: vec![Remark {
            label: "Not met".into(),
            text: "A closed-loop time constant of 12 s was asked for; 60 s is the fastest.".into(),
        }],
        signatures: vec![
            signature("Tested by", Some("A. Quill")),
            signature("Approved by", None),
        ],
        procedures: vec![Procedure {
            title: "Permit to work".into(),
            reference: "LM-SP-014".into(),
        }],
        revisions: vec![Revision {
            revision: "0".into(),
            date: date(14),
            reason: "Issued for hand-over".into(),
        }],
    }
}

fn control_loop() -> Loop {
    Loop {
        tag: "TIC-1".into(),
        service: "tray temperature".into(),
        pv: Range {
            unit: "degC".into(),
            low: 0.0,
            high: 150.0,
        },
        op: Range {
            unit: "%".into(),
            low: 0.0,
            high: 100.0,
        },
        action: Action::Reverse,
        left_action: None,
        form: EquationForm::Standard,
        p_as: ProportionalUnit::GainPerUnit,
        i_as: IntegralUnit::PerMinute,
        d_as: DerivativeUnit::Minutes,
        p_on: ActsOn::Error,
        d_on: ActsOn::Pv,
        d_filter_n: 10.0,
        scan_s: 0.5,
        pv_filter_s: 0.0,
        left_pv_filter_s: None,
        pv_filter_in_log: true,
        aim: Aim::Load,
        derivative: false,
        target_s: Some(12.0),
        target_reason: None,
        allowed_deviation: None,
        expected_load_percent: None,
        inner_loop: None,
        outer_loops: Vec::new(),
        safety: false,
        safety_procedure: None,
        waiver: None,
        entered_by: Some("A. Quill".into()),
        left_on: Some(date(13)),
        tested_by: Some("A. Quill".into()),
        tested_on: Some(date(12)),
        witnessed_by: None,
        conditions: Some("60 % load".into()),
        particulars: BTreeMap::from([("valve".into(), "TV-1, 2 in".into())]),
    }
}

fn log(role: LogRole) -> Log {
    let name = match role {
        LogRole::Test => "test",
        LogRole::Trial => "trial",
    };
    Log {
        role,
        file: format!("logs/{name}.xlsx"),
        sheet: Some("Trend".into()),
        sha256: archive::sha256(name.as_bytes()),
        rows: 5,
        also: vec![LogSource {
            file: format!("logs/{name}-2.csv"),
            sheet: None,
            sha256: archive::sha256(b"more"),
            rows: 2,
        }],
        samples: 4,
        from: Moment::Dated(time(0)),
        to: Moment::Dated(time(4)),
        zero: Some(time(0)),
        interval_s: 60.0,
        bad_samples: 1,
        bad_by_cause: BTreeMap::from([("marked bad".into(), 1)]),
        gaps: vec![GapRecord {
            from: Moment::Dated(time(1)),
            to: Moment::Dated(time(3)),
        }],
        notes: vec!["2 rows were out of order and were sorted".into()],
        samples_file: format!("samples-{name}.csv"),
        samples_sha256: archive::sha256(b"samples"),
        data: Samples {
            t_s: vec![0.0, 60.0, 120.0, 180.0, 240.0],
            pv: vec![71.2, 71.3, f64::NAN, 75.1, 76.9],
            good: vec![true, true, false, true, true],
            op: vec![40.0, 45.0, 45.0, 45.0, 45.0],
            ..Samples::default()
        },
    }
}

fn step() -> Step {
    Step {
        number: 1,
        at: Moment::Dated(time(1)),
        at_s: 60.0,
        op_from: 40.0,
        op_to: 45.0,
        pv_from: 71.2,
        pv_to: 76.9,
        window_s: [0.0, 240.0],
        quiet_s: [0.0, 60.0],
        pulse: false,
        verdict: Verdict::Reservation,
        reasons: vec![Reason {
            code: ReasonCode::Drift,
            text: "drift 7 % (bound 5 %)".into(),
            figure: Some(7.0),
            bound: Some(5.0),
        }],
        checks: vec![Check {
            code: ReasonCode::Drift,
            figure: Some(7.0),
            reservation: Some(5.0),
            rejected: Some(20.0),
        }],
        reading: Some(Reading {
            gain: 0.76,
            dead_time_s: 21.0,
            time_constant_s: Some(96.0),
            base_percent: 47.5,
            end_percent: 51.3,
            slopes_percent_per_s: None,
            differs: false,
        }),
        fit: Some(StepFit {
            kind: Kind::FirstOrder,
            gain: estimate(0.75),
            time_constant_s: Some(estimate(95.0)),
            second_time_constant_s: None,
            dead_time_s: estimate(20.0),
            residual_percent: 1.9,
            rmse_percent: 0.05,
            bias_percent: 47.4,
            drift_percent_per_s: 0.0,
        }),
    }
}

fn model() -> ModelBlock {
    ModelBlock {
        fit: Model {
            kind: Kind::FirstOrder,
            gain: estimate(0.75),
            time_constant_s: Some(estimate(95.0)),
            second_time_constant_s: None,
            dead_time_s: estimate(20.0),
            steps: vec![1],
            noise_sd_percent: Some(0.04),
            resolution_percent: None,
            rmse_percent: 0.05,
            residual_percent: 1.9,
            covariance_of: vec!["ln gain".into()],
            covariance: vec![vec![1e-7]],
            residual_autocorrelation: 0.3,
            effective_samples: 2.1,
            widened: false,
            gain_ratio: None,
            undecided: None,
            alternatives: vec![Alternative {
                kind: Kind::SecondOrder,
                bic: 4.2,
                rmse_percent: 0.05,
                why_not: "explains no more".into(),
            }],
            set: vec![SetMember {
                label: "step 1".into(),
                gain: 0.74,
                time_constant_s: Some(93.0),
                second_time_constant_s: None,
                dead_time_s: 22.0,
            }],
        },
        gain_engineering: EngineeringGain {
            value: 1.125,
            low: 1.01,
            high: 1.24,
            unit: "degC/%".into(),
        },
    }
}

fn design() -> Design {
    Design {
        closed_loop_time_constant_s: 60.0,
        effective_dead_time_s: 20.25,
        binding_limit: LimitName::OpMove,
        binding_detail: "The OP may move by 5 % at once.".into(),
        governing_model: None,
        derivative: "not used: the schedule does not allow it".into(),
        limits: vec![Limit {
            limit: LimitName::OpMove,
            needs_s: Some(60.0),
            kind: Some(Hardness::Soft),
            outcome: LimitOutcome::Met,
            figure: Some(5.0),
            bound: Some(5.0),
            detail: "at most 5 % of OP at once".into(),
        }],
        rules: vec![RuleSettings {
            rule: "SIMC".into(),
            source: "S. Skogestad, J. Process Control 13 (2003) 291-309".into(),
            settings: Standard {
                kc: 3.1,
                ti_s: Some(95.0),
                td_s: 0.0,
            },
            ms: Some(1.6),
            phase_margin_deg: Some(61.0),
            in_range: true,
        }],
        remarks: Vec::new(),
    }
}

fn block(p: f64, ti_s: f64, stable: bool) -> SettingsBlock {
    let figure = |value: f64| stable.then_some(value);
    let margins = Margins {
        stable,
        ms: figure(1.456_78),
        mt: figure(1.0),
        gain_margin: None,
        phase_margin_deg: figure(61.0),
        delay_margin_s: figure(43.0),
    };
    let metrics = Metrics {
        overshoot_percent: Some(4.0),
        rise_time_s: Some(70.0),
        settling_time_s: None,
        iae_percent_s: 300.0,
        peak_deviation_percent: 5.2,
        op_travel_percent: 9.0,
    };
    let response = Response {
        step_percent: 5.0,
        metrics,
        curve: Curve {
            t_s: vec![0.0, 60.0],
            pv: vec![0.0, 3.1],
            op: vec![6.2, 4.0],
        },
    };
    SettingsBlock {
        native: Native {
            p,
            i: 60.0 / ti_s,
            d: 0.0,
        },
        standard: Some(Standard {
            kc: p * 1.5,
            ti_s: Some(ti_s),
            td_s: 0.0,
        }),
        margins: Some(margins),
        worst_margins: Some(margins),
        worst_model: Some("step 1".into()),
        predicted: Some(Predicted {
            set_point: response.clone(),
            load: response,
        }),
    }
}

fn trial() -> Trial {
    let metrics = Metrics {
        overshoot_percent: Some(5.0),
        ..Metrics::default()
    };
    let oscillation = Oscillation {
        decay_ratio: 0.1,
        period_s: 200.0,
        limit_cycle: false,
        text: "dies out".into(),
    };
    Trial {
        kind: TrialKind::SetPoint,
        at_s: 10.0,
        step_percent: 4.0,
        measured: metrics,
        predicted: metrics,
        predicted_rmse_percent: 0.2,
        agrees: true,
        why: "settling and overshoot agree".into(),
        oscillation: Some(oscillation.clone()),
        curve: Curve::default(),
        moves: vec![TrialMove {
            at_s: 10.0,
            step_percent: 4.0,
            measured: metrics,
            predicted: metrics,
            settling_time_of_models_s: Some([80.0, 130.0]),
            overshoot_of_models_percent: Some([3.0, 9.0]),
            agrees: true,
            oscillation: Some(oscillation),
            why: String::new(),
        }],
        not_judged: Some("1 set-point move was not judged: too small.".into()),
        band: Band {
            t_s: vec![0.0, 10.0],
            pv_low: vec![49.0, 52.0],
            pv_high: vec![50.0, 54.0],
        },
    }
}

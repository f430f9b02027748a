//! What the made-up records are put together from.

use crate::design::{Aim, Design, Hardness, Limit, LimitName, LimitOutcome, RuleSettings};
use crate::document::{Attachment, AttachmentKind};
use crate::figures::Figure;
use crate::identify::{Alternative, Model, Reading, SetMember, Step, StepFit, Verdict};
use crate::model::Kind;
use crate::predict::{Curve, Margins, Metrics, Predicted, Response};
use crate::quantity::Estimate;
use crate::record::{
    EngineeringGain, Log, LogRole, Loop, ModelBlock, Procedure, Range, Revision, SettingsBlock,
    Signature,
};
use crate::settings::{
    Action, ActsOn, DerivativeUnit, EquationForm, IntegralUnit, Native, ProportionalUnit, Standard,
};
use crate::trace::{Moment, Samples};
use chrono::{NaiveDate, NaiveDateTime};
use std::collections::BTreeMap;

pub(in crate::document) fn date(day: u32) -> NaiveDate {
    NaiveDate::from_ymd_opt(2026, 3, day).expect("a day of March")
}

pub(in crate::document) fn at(day: u32, hour: u32, minute: u32) -> NaiveDateTime {
    date(day)
        .and_hms_opt(hour, minute, 0)
        .expect("a time of day")
}

pub(in crate::document) fn figure(name: &'static str, width_mm: f64, height_mm: f64) -> Figure {
    Figure {
        name,
        svg: format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{width_mm}mm\" height=\"{height_mm}mm\" \
             viewBox=\"0 0 {width_mm} {height_mm}\"><rect x=\"0.2\" y=\"0.2\" width=\"{}\" height=\"{}\" \
             fill=\"none\" stroke=\"black\" stroke-width=\"0.2\"/><text x=\"3\" y=\"6\" \
             font-family=\"Source Sans 3\" font-size=\"3\">PV, °C</text></svg>",
            width_mm - 0.4,
            height_mm - 0.4
        ),
        width_mm,
        height_mm,
        caption: format!("Caption of {name}."),
        alt: format!("A sentence that stands for {name}."),
    }
}

/// A plain frame in the place of each figure, at about the size of the real one.
pub(in crate::document) fn figures() -> Vec<Figure> {
    vec![
        figure("test.svg", 170.0, 110.0),
        figure("fits.svg", 170.0, 85.0),
        figure("reading.svg", 92.0, 62.0),
        figure("change.svg", 80.0, 44.0),
        figure("predicted.svg", 170.0, 88.0),
        figure("trial.svg", 170.0, 92.0),
        figure("withheld.svg", 170.0, 46.0),
    ]
}

pub(in crate::document) fn attachments() -> Vec<Attachment> {
    let of = |name: &str, kind, text: &str| Attachment {
        name: name.to_owned(),
        kind,
        bytes: text.as_bytes().to_vec(),
    };
    vec![
        of("record.json", AttachmentKind::Record, "{}"),
        of(
            "samples-test.csv",
            AttachmentKind::Samples,
            "time,t_s,pv,op,sp,mode,good\n",
        ),
        of("schedule-row.csv", AttachmentKind::ScheduleRow, "tag\n"),
    ]
}

pub(in crate::document) fn estimate(value: f64, low: f64, high: f64) -> Estimate {
    Estimate::new(value, low, high)
}

pub(in crate::document) fn step(
    number: usize,
    op: [f64; 2],
    pv: [f64; 2],
    gain: f64,
    dead_time_s: f64,
) -> Step {
    let hour = 9 + (15 + 20 * number as u32) / 60;
    let minute = (15 + 20 * number as u32) % 60;
    Step {
        number,
        at: Moment::Dated(at(11, hour, minute)),
        at_s: 600.0 + 1200.0 * number as f64,
        op_from: op[0],
        op_to: op[1],
        pv_from: pv[0],
        pv_to: pv[1],
        window_s: [0.0, 0.0],
        quiet_s: [0.0, 0.0],
        pulse: false,
        verdict: Verdict::Accepted,
        reasons: Vec::new(),
        checks: Vec::new(),
        reading: Some(Reading {
            gain,
            dead_time_s: 66.0,
            time_constant_s: Some(198.0),
            base_percent: 47.5,
            end_percent: 52.2,
            slopes_percent_per_s: None,
            differs: number == 1,
        }),
        fit: Some(StepFit {
            kind: Kind::SecondOrder,
            gain: estimate(gain, gain - 0.03, gain + 0.03),
            time_constant_s: Some(estimate(190.0, 180.0, 200.0)),
            second_time_constant_s: Some(estimate(45.0, 35.0, 55.0)),
            dead_time_s: estimate(dead_time_s, dead_time_s - 3.0, dead_time_s + 3.0),
            residual_percent: 4.5,
            rmse_percent: 0.1,
            bias_percent: 47.5,
            drift_percent_per_s: 0.0,
        }),
    }
}

pub(in crate::document) fn margins(
    ms: f64,
    gain_margin: Option<f64>,
    phase: f64,
    delay: f64,
) -> Margins {
    Margins {
        stable: true,
        ms: Some(ms),
        mt: Some(1.2),
        gain_margin,
        phase_margin_deg: Some(phase),
        delay_margin_s: Some(delay),
    }
}

pub(in crate::document) fn predicted(
    overshoot: f64,
    settles: Option<f64>,
    peak: f64,
    back: Option<f64>,
) -> Predicted {
    let metrics = Metrics {
        overshoot_percent: Some(overshoot),
        rise_time_s: Some(110.0),
        settling_time_s: settles,
        iae_percent_s: 492.0,
        peak_deviation_percent: 5.0 * (1.0 + overshoot / 100.0),
        op_travel_percent: 12.0,
    };
    Predicted {
        set_point: Response {
            step_percent: 5.0,
            metrics,
            curve: Curve::default(),
        },
        load: Response {
            step_percent: 5.0,
            metrics: Metrics {
                overshoot_percent: None,
                rise_time_s: None,
                settling_time_s: back,
                peak_deviation_percent: peak,
                ..metrics
            },
            curve: Curve::default(),
        },
    }
}

pub(in crate::document) fn block(
    native: Native,
    standard: Standard,
    fitted: Margins,
    worst: Margins,
    predicted: Predicted,
) -> SettingsBlock {
    SettingsBlock {
        native,
        standard: Some(standard),
        margins: Some(fitted),
        worst_margins: Some(worst),
        worst_model: Some("step 2".to_owned()),
        predicted: Some(predicted),
    }
}

pub(in crate::document) fn limit(
    limit: LimitName,
    needs_s: Option<f64>,
    kind: Option<Hardness>,
    outcome: LimitOutcome,
    figure: Option<f64>,
    detail: &str,
) -> Limit {
    Limit {
        limit,
        needs_s,
        kind,
        outcome,
        figure,
        bound: None,
        detail: detail.to_owned(),
    }
}

pub(in crate::document) fn rule(
    rule: &str,
    kc: f64,
    ti_s: f64,
    ms: Option<f64>,
    in_range: bool,
) -> RuleSettings {
    RuleSettings {
        rule: rule.to_owned(),
        source: format!("Author of {rule}, a journal, 2003"),
        settings: Standard {
            kc,
            ti_s: Some(ti_s),
            td_s: 0.0,
        },
        ms,
        phase_margin_deg: ms.map(|_| 52.0),
        in_range,
    }
}

pub(in crate::document) fn design() -> Design {
    use Hardness::{Hard, Soft};
    use LimitOutcome::{Met, MetByAny, NotAssessed, NotMet};
    Design {
        closed_loop_time_constant_s: 49.0,
        effective_dead_time_s: 47.0,
        binding_limit: LimitName::Robustness,
        binding_detail:
            "Robustness decides: with a closed-loop time constant below 49 s, the model of \
                         step 2 would have Ms above 2.0"
                .to_owned(),
        governing_model: Some("step 2".to_owned()),
        derivative: "Not used: the loop schedule does not ask for it.".to_owned(),
        limits: vec![
            limit(
                LimitName::Target,
                Some(30.0),
                None,
                NotMet,
                None,
                "wanted by operations",
            ),
            limit(
                LimitName::Robustness,
                Some(49.0),
                Some(Hard),
                Met,
                Some(1.98),
                "Ms ≤ 1.8 fitted, ≤ 2.0 for every model of the set",
            ),
            limit(
                LimitName::DeadTime,
                Some(47.0),
                Some(Hard),
                Met,
                Some(1.04),
                "τc at least the effective dead time θe",
            ),
            limit(
                LimitName::Noise,
                None,
                Some(Soft),
                NotAssessed,
                None,
                "OP moved by noise, sd at most 0.5 %",
            ),
            limit(
                LimitName::OpMove,
                None,
                Some(Soft),
                MetByAny,
                Some(2.38),
                "1 % of set point moves OP by at most 5 % at once",
            ),
        ],
        rules: vec![
            rule("Lambda (λ = τ)", 0.88, 216.0, Some(1.22), true),
            rule("SIMC (τc = θ)", 2.49, 216.0, Some(1.69), true),
            rule("Cohen-Coon", 4.58, 108.0, Some(5.13), false),
            rule("ITAE, load", 9.0, 50.0, None, true),
        ],
        remarks: Vec::new(),
    }
}

pub(in crate::document) fn log(role: LogRole, day: u32) -> Log {
    let (name, from, to) = match role {
        LogRole::Test => ("test", at(day, 9, 5), at(day, 11, 14)),
        LogRole::Trial => ("trial", at(day, 13, 30), at(day, 15, 0)),
    };
    Log {
        role,
        file: format!("logs/tic207-{name}.xlsx"),
        sheet: Some("Trend".to_owned()),
        sha256: "0cea6ffe3c638173efe7d204c590f44ba9dea02f5760509e557af2897178f259".to_owned(),
        rows: 13_871,
        also: Vec::new(),
        samples: 13_869,
        from: Moment::Dated(from),
        to: Moment::Dated(to),
        zero: Some(from),
        interval_s: 2.0,
        bad_samples: 2,
        bad_by_cause: BTreeMap::from([("marked bad".to_owned(), 2)]),
        gaps: Vec::new(),
        notes: Vec::new(),
        samples_file: format!("samples-{name}.csv"),
        samples_sha256: "22e799d4987081f59475583b345e10d64525eec79c769d0023ddb542c11809d3"
            .to_owned(),
        data: Samples::default(),
    }
}

pub(in crate::document) fn control_loop() -> Loop {
    Loop {
        tag: "TIC-207".to_owned(),
        service: "Column tray 12 temperature".to_owned(),
        pv: Range {
            unit: "degC".to_owned(),
            low: 60.0,
            high: 140.0,
        },
        op: Range {
            unit: "%".to_owned(),
            low: 0.0,
            high: 100.0,
        },
        action: Action::Reverse,
        left_action: None,
        form: EquationForm::Standard,
        p_as: ProportionalUnit::Band,
        i_as: IntegralUnit::Minutes,
        d_as: DerivativeUnit::Minutes,
        p_on: ActsOn::Error,
        d_on: ActsOn::Pv,
        d_filter_n: 10.0,
        scan_s: 1.0,
        pv_filter_s: 0.0,
        left_pv_filter_s: None,
        pv_filter_in_log: true,
        aim: Aim::Load,
        derivative: false,
        target_s: Some(30.0),
        target_reason: None,
        allowed_deviation: None,
        expected_load_percent: None,
        inner_loop: None,
        outer_loops: Vec::new(),
        safety: false,
        safety_procedure: None,
        waiver: None,
        entered_by: Some("R. Tan".to_owned()),
        left_on: Some(date(13)),
        tested_by: Some("A. Quill".to_owned()),
        tested_on: Some(date(11)),
        witnessed_by: Some("P. Lind".to_owned()),
        conditions: Some("feed 11.8 to 12.3 t/h".to_owned()),
        particulars: BTreeMap::from([
            (
                "controller".to_owned(),
                "Unit 200 control system, card 07".to_owned(),
            ),
            ("valve".to_owned(), "TV-207, steam".to_owned()),
            ("valve fail".to_owned(), "closed".to_owned()),
        ]),
    }
}

pub(in crate::document) fn signature(role: &str, name: Option<&str>) -> Signature {
    Signature {
        role: role.to_owned(),
        name: name.map(str::to_owned),
    }
}

pub(in crate::document) fn signatures() -> Vec<Signature> {
    vec![
        signature("Tested by", Some("A. Quill")),
        signature("Checked by", Some("I. Varga")),
        signature("Approved by", Some("M. Osei")),
        signature("Accepted for operations", None),
    ]
}

pub(in crate::document) fn procedures() -> Vec<Procedure> {
    let of = |reference: &str, title: &str| Procedure {
        reference: reference.to_owned(),
        title: title.to_owned(),
    };
    vec![
        of("LM-SP-014", "Permit to work"),
        of("LM-SP-021", "Management of change"),
    ]
}

pub(in crate::document) fn revision(revision: &str, day: u32, reason: &str) -> Revision {
    Revision {
        revision: revision.to_owned(),
        date: date(day),
        reason: reason.to_owned(),
    }
}

pub(in crate::document) fn model() -> ModelBlock {
    let member = |label: &str, gain: f64| SetMember {
        label: label.to_owned(),
        gain,
        time_constant_s: Some(198.0),
        second_time_constant_s: Some(45.0),
        dead_time_s: 24.0,
    };
    ModelBlock {
        fit: Model {
            kind: Kind::SecondOrder,
            gain: estimate(0.934, 0.65, 1.27),
            time_constant_s: Some(estimate(198.0, 174.0, 228.0)),
            second_time_constant_s: Some(estimate(45.0, 19.0, 65.0)),
            dead_time_s: estimate(24.0, 15.0, 41.0),
            steps: vec![1, 2, 4],
            noise_sd_percent: Some(0.0875),
            resolution_percent: Some(0.01),
            rmse_percent: 0.1,
            residual_percent: 4.5,
            covariance_of: Vec::new(),
            covariance: Vec::new(),
            residual_autocorrelation: 0.2,
            effective_samples: 900.0,
            widened: true,
            direction_ratio: None,
            gain_ratio: Some(1.96),
            undecided: None,
            alternatives: vec![Alternative {
                kind: Kind::FirstOrder,
                bic: 212.0,
                rmse_percent: 0.2,
                why_not: "leaves 2.1 times as much unexplained (BIC higher by 212)".to_owned(),
            }],
            set: vec![
                member("step 1", 0.95),
                member("step 2", 1.27),
                member("step 4", 0.65),
            ],
        },
        gain_engineering: EngineeringGain {
            value: 0.747,
            low: 0.52,
            high: 1.02,
            unit: "degC/%".to_owned(),
        },
    }
}

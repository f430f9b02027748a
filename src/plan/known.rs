//! What an earlier record gives for the next test of its loop.

use crate::design::Aim;
use crate::model::ProcessModel;
use crate::record::{EngineeringGain, Loop, Range, Record};
use chrono::NaiveDate;
use serde::{Serialize, Serializer};

/// The figures of an earlier record.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Basis {
    /// Its document number.
    pub number: String,
    /// Its revision.
    pub revision: String,
    /// Its date of issue.
    pub date: NaiveDate,
    /// Date of its test.
    pub tested_on: Option<NaiveDate>,
    /// Its process model; `None` where it has none.
    #[serde(serialize_with = "as_figures")]
    pub process: Option<ProcessModel>,
    /// Its gain in engineering units.
    pub gain_engineering: Option<EngineeringGain>,
    /// Largest gain of any of its steps over that of the model; 1 where the steps agree.
    pub most_gain_ratio: f64,
    /// σ of the rules: the larger of noise and resolution of the PV, %.
    pub sigma_percent: Option<f64>,
    /// Dead band of the valve, % of OP.
    pub dead_band_percent: Option<f64>,
    /// OP range of its test, OP units.
    pub op_tested: [f64; 2],
    /// PV range of its test, PV units.
    pub pv_tested: [f64; 2],
}

fn as_figures<S: Serializer>(process: &Option<ProcessModel>, to: S) -> Result<S::Ok, S::Error> {
    #[derive(Serialize)]
    struct Figures {
        kind: crate::model::Kind,
        gain: f64,
        time_constant_s: Option<f64>,
        second_time_constant_s: Option<f64>,
        dead_time_s: f64,
    }
    process
        .map(|process| Figures {
            kind: process.kind(),
            gain: process.gain(),
            time_constant_s: process.time_constant_s(),
            second_time_constant_s: process.second_time_constant_s(),
            dead_time_s: process.dead_time_s(),
        })
        .serialize(to)
}

impl Basis {
    /// What a record gives.
    pub fn of(record: &Record) -> Self {
        let model = record.model.as_ref();
        let most_gain_ratio = match (model, record.gains_of_steps()) {
            (Some(block), Some([_, most])) if block.fit.nonlinear_gain().is_some() => {
                (most / block.gain_engineering.value.abs()).max(1.0)
            }
            _ => 1.0,
        };
        Basis {
            number: record.document.number.clone(),
            revision: record.document.revision.clone(),
            date: record.document.date,
            tested_on: record.control_loop.tested_on,
            process: model.map(|block| block.fit.process()),
            gain_engineering: model.map(|block| block.gain_engineering.clone()),
            most_gain_ratio,
            sigma_percent: record.test.sigma_percent,
            dead_band_percent: record.valve.map(|valve| valve.dead_band_percent),
            op_tested: record.test.op_tested,
            pv_tested: record.test.pv_tested,
        }
    }
}

/// The record that the plan is made from: the newest of the loop as it is now that holds a model,
/// else the newest. What is passed over is told in `set_aside`.
pub(super) fn choose<'a>(
    newest_first: &[&'a Record],
    now: &Loop,
    set_aside: &mut Vec<String>,
) -> Option<&'a Record> {
    let name = |record: &Record| {
        let document = &record.document;
        format!("{} revision {}", document.number, document.revision)
    };
    let mut usable: Vec<&Record> = Vec::new();
    for record in newest_first {
        let then = &record.control_loop;
        match changed(then, now) {
            // Gains and noise are in percent of ranges that are no longer those of the loop.
            Some(what) => set_aside.push(format!("{}: {what}", name(record))),
            None => usable.push(record),
        }
    }
    let with_model = usable.iter().position(|record| record.model.is_some());
    let chosen = with_model.unwrap_or(0);
    for record in usable.iter().take(chosen) {
        set_aside.push(format!("{}: it holds no process model", name(record)));
    }
    usable.get(chosen).copied()
}

/// What was changed since a record so that its figures no longer hold.
fn changed(then: &Loop, now: &Loop) -> Option<String> {
    let in_words = |range: &Range| {
        format!(
            "{} to {}",
            crate::display::plain(range.low, 6),
            crate::display::with_unit(&crate::display::plain(range.high, 6), &range.unit)
        )
    };
    [("PV", &then.pv, &now.pv), ("OP", &then.op, &now.op)]
        .into_iter()
        .find(|(_, then, now)| {
            crate::display::unit(&then.unit) != crate::display::unit(&now.unit)
                || (then.low, then.high) != (now.low, now.high)
        })
        .map(|(name, then, now)| {
            format!(
                "its {name} range is {}, the schedule says {}",
                in_words(then),
                in_words(now)
            )
        })
}

/// Whether the PV of a loop without a model is likely to go on moving while the OP is off balance: a
/// level, by the first letter of its tag (ISA-5.1: L), or whatever is to be averaged.
pub(super) fn likely_integrates(of: &Loop) -> bool {
    let function = of
        .tag
        .rsplit(['/', '.', ':', ' '])
        .next()
        .unwrap_or(&of.tag);
    let letters = function
        .trim_start_matches(|sign: char| !sign.is_alphabetic())
        .to_uppercase();
    of.aim == Aim::Averaging || letters.starts_with('L')
}

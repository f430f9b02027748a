//! The closed-loop trial: what was logged beside what was predicted.

use super::numbers::{Cell, Row, Table, TimeUnit, bound, decimals_to_show, sentence};
use super::{Context, Heading, Plot, span_of};
use crate::display::{self, NO_BREAK};
use crate::predict::Metrics;
use crate::predict::trial::{Trial, TrialKind};
use crate::trace::Clock;
use serde::Serialize;

/// The part.
#[derive(Debug, Serialize)]
pub(super) struct TrialPart {
    heading: Heading,
    text: String,
    verdict: String,
    plot: Option<Plot>,
    table: Table,
    note: &'static str,
}

pub(super) fn trial(context: &Context) -> Option<TrialPart> {
    let heading = context.parts.heading(super::TRIAL)?;
    let trial = context.record.trial.as_ref()?;
    Some(TrialPart {
        heading,
        text: text(context, trial),
        verdict: verdict(trial),
        plot: context.plot("trial.svg"),
        table: table(context, trial),
        note: "Settling here: within ±2\u{a0}% of the step widened by the noise of PV, measured and predicted alike; \
               elsewhere within ±2\u{a0}%.",
    })
}

fn text(context: &Context, trial: &Trial) -> String {
    let log = context.record.trial_log();
    let logged = log.map_or_else(
        || "Logged".to_owned(),
        |log| format!("Logged {}", span_of(log, false)),
    );
    let at = log
        .map(|log| {
            let clock = log.zero.map_or(Clock::Elapsed, Clock::Dated);
            match clock.at(trial.at_s) {
                crate::trace::Moment::Dated(at) => format!(" at {}", at.format("%H:%M:%S")),
                crate::trace::Moment::Elapsed(s) => format!(" after {}", display::duration(s)),
            }
        })
        .unwrap_or_default();
    let moved = match trial.kind {
        TrialKind::SetPoint => {
            let change = trial.step_percent * context.pv_per_percent;
            let way = if change < 0.0 { "lowered" } else { "raised" };
            format!(
                "set point {way} by {}{NO_BREAK}{}{at}",
                display::plain(change.abs(), 3),
                context.pv_unit
            )
        }
        TrialKind::Load => format!(
            "no set-point move; a load that amounts to {}{NO_BREAK}% of OP{at}",
            display::significant(trial.step_percent, 2).replace('-', "−")
        ),
    };
    format!("{logged} in automatic, settings as left; {moved}.")
}

fn verdict(trial: &Trial) -> String {
    let why = sentence(&bound(&trial.why));
    let head = if trial.agrees {
        "Agrees with the prediction."
    } else {
        "Does not agree with the prediction."
    };
    // The reason may already say so at its head.
    let mut text = if why.to_lowercase().contains("agree") {
        why
    } else {
        format!("{head} {why}")
    };
    if let Some(oscillation) = &trial.oscillation {
        let said = sentence(&bound(&oscillation.text));
        if !text.contains(said.trim_end_matches('.')) {
            text = format!("{text} {said}");
        }
    }
    text.trim().to_owned()
}

fn table(context: &Context, trial: &Trial) -> Table {
    let both = [&trial.measured, &trial.predicted];
    let percent = |of: fn(&Metrics) -> Option<f64>| {
        both.iter()
            .map(|m| of(m).map_or_else(Cell::none, |v| Cell::figure(display::fixed(v, 0), "%")))
            .collect::<Vec<_>>()
    };
    let times = |of: fn(&Metrics) -> Option<f64>, missing: &str| {
        let unit = TimeUnit::for_all(both.iter().filter_map(|m| of(m)));
        both.iter()
            .map(|m| of(m).map_or_else(|| Cell::words(missing), |t| unit.cell(t)))
            .collect::<Vec<_>>()
    };
    let mut rows = Vec::new();
    if trial.kind == TrialKind::SetPoint {
        rows.push(Row::new("Overshoot", percent(|m| m.overshoot_percent)));
        rows.push(Row::new(
            format!("Rise time, 10 to 90{NO_BREAK}%"),
            times(|m| m.rise_time_s, super::numbers::NONE),
        ));
    }
    rows.push(Row::new(
        "Settling time".to_owned(),
        times(|m| m.settling_time_s, "not settled"),
    ));
    let peaks = both.map(|m| m.peak_deviation_percent * context.pv_per_percent);
    let decimals = decimals_to_show(peaks[0].min(peaks[1]), 30.0);
    rows.push(Row::new(
        if trial.kind == TrialKind::SetPoint {
            "Largest change of PV"
        } else {
            "Largest deviation of PV"
        },
        peaks
            .map(|p| Cell::figure(display::fixed(p, decimals), context.pv_unit.clone()))
            .to_vec(),
    ));
    rows.push(Row::new(
        "IAE",
        both.iter()
            .map(|m| {
                Cell::figure(
                    super::numbers::grouped(&display::significant(m.iae_percent_s, 3)),
                    format!("%{NO_BREAK}s"),
                )
            })
            .collect(),
    ));
    rows.push(Row::new(
        "OP travel",
        both.iter()
            .map(|m| Cell::figure(display::fixed(m.op_travel_percent, 1), "%"))
            .collect(),
    ));
    rows.push(Row::new(
        "Measured less predicted PV (rms)",
        vec![
            Cell::figure(
                display::significant(trial.predicted_rmse_percent * context.pv_per_percent, 2),
                context.pv_unit.clone(),
            ),
            Cell::words(""),
        ],
    ));
    Table {
        heads: vec![
            "Measure".to_owned(),
            "Measured".to_owned(),
            "Predicted".to_owned(),
        ],
        rows,
    }
}

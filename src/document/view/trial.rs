//! The closed-loop trial: what was logged beside what was predicted.

use super::numbers::{Cell, Row, Table, TimeUnit, bound, decimals_to_show, sentence};
use super::{Context, Heading, Plot, span_of};
use crate::display::{self, NO_BREAK};
use crate::predict::Metrics;
use crate::predict::trial::{Trial, TrialKind, TrialMove};
use crate::trace::{Clock, Moment};
use serde::Serialize;

/// The part.
#[derive(Debug, Serialize)]
pub(super) struct TrialPart {
    heading: Heading,
    text: String,
    verdict: String,
    plot: Option<Plot>,
    table: Table,
    note: String,
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
        note: note(trial),
    })
}

fn note(trial: &Trial) -> String {
    let settling = "Settling: within ±2\u{a0}% of the step widened by the noise of PV, measured and predicted alike.";
    if trial.kind == TrialKind::SetPoint && !trial.moves.is_empty() {
        format!(
            "{settling} Measured agrees within ±50\u{a0}% (settling) and 10\u{a0}points (overshoot) of what the models of \
             the test, the fitted one and its set, predict between them."
        )
    } else {
        settling.to_owned()
    }
}

/// " at 10:20:10", where the log has a clock or at least a beginning.
fn when(context: &Context, at_s: f64) -> String {
    context
        .record
        .trial_log()
        .map(|log| {
            let clock = log.zero.map_or(Clock::Elapsed, Clock::Dated);
            match clock.at(at_s) {
                Moment::Dated(at) => format!(" at {}", at.format("%H:%M:%S")),
                Moment::Elapsed(s) => format!(" after {}", display::duration(s)),
            }
        })
        .unwrap_or_default()
}

/// "set point raised by 4 °C", "load of 5 % of OP".
fn moved(context: &Context, kind: TrialKind, step_percent: f64) -> String {
    match kind {
        TrialKind::SetPoint => {
            let change = step_percent * context.pv_per_percent;
            let way = if change < 0.0 { "lowered" } else { "raised" };
            format!(
                "set point {way} by {}{NO_BREAK}{}",
                display::plain(change.abs(), 3),
                context.pv_unit
            )
        }
        TrialKind::Load => format!(
            "load that amounts to {}{NO_BREAK}% of OP",
            display::significant(step_percent, 2).replace('-', "−")
        ),
    }
}

fn text(context: &Context, trial: &Trial) -> String {
    let logged = context.record.trial_log().map_or_else(
        || "Logged".to_owned(),
        |log| format!("Logged {}", span_of(log, false)),
    );
    let mut what = format!(
        "{}{}",
        moved(context, trial.kind, trial.step_percent),
        when(context, trial.at_s)
    );
    if trial.moves.len() > 1 {
        let largest = trial.moves.iter().position(|m| m.at_s == trial.at_s);
        let largest = largest.map_or(0, |k| k + 1);
        what = match trial.kind {
            TrialKind::SetPoint => format!(
                "{} set-point moves, the largest (move{NO_BREAK}{largest}): {what}",
                trial.moves.len()
            ),
            TrialKind::Load => format!(
                "{} loads, the largest (load{NO_BREAK}{largest}): {what}",
                trial.moves.len()
            ),
        };
    }
    if trial.kind == TrialKind::Load {
        what = format!("no set-point move to judge; {what}");
    }
    let not_judged = trial
        .not_judged
        .as_deref()
        .map_or_else(String::new, |said| format!(" {}", sentence(&bound(said))));
    format!("{logged} in automatic, settings as left; {what}.{not_judged}")
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

/// The largest move with all its figures, of the others what they are judged on.
fn table(context: &Context, trial: &Trial) -> Table {
    let largest = trial.moves.iter().find(|m| m.at_s == trial.at_s);
    let responses = largest.map_or([&trial.measured, &trial.predicted], |m| {
        [&m.measured, &m.predicted]
    });
    let mut rows = shape_rows(trial.kind, responses, largest);
    rows.extend(size_rows(context, trial.kind, responses));
    rows.push(Row::new(
        "Measured less predicted PV (rms)",
        vec![
            Cell::figure(
                display::significant(trial.predicted_rmse_percent * context.pv_per_percent, 2),
                context.pv_unit.clone(),
            ),
            Cell::words(""),
            Cell::words(""),
        ],
    ));
    for (k, m) in trial.moves.iter().enumerate() {
        if m.at_s == trial.at_s {
            continue;
        }
        // Loads are judged together.
        let (what, verdict) = match (trial.kind, m.agrees) {
            (TrialKind::Load, _) => ("Load", ""),
            (TrialKind::SetPoint, true) => ("Move", " (agrees)"),
            (TrialKind::SetPoint, false) => ("Move", " (does not agree)"),
        };
        rows.push(Row::group(format!(
            "{what}{NO_BREAK}{}: {}{}{verdict}",
            k + 1,
            moved(context, trial.kind, m.step_percent),
            when(context, m.at_s)
        )));
        let judged = shape_rows(trial.kind, [&m.measured, &m.predicted], Some(m));
        rows.extend(judged.into_iter().filter(|row| row.label != rise_time()));
    }
    let heads = ["Measure", "Measured", "Predicted", "Models of the test"];
    Table {
        heads: heads.map(str::to_owned).to_vec(),
        rows,
    }
}

fn rise_time() -> String {
    format!("Rise time, 10 to 90{NO_BREAK}%")
}

/// "40 to 70 s", "70 s" where both ends print the same.
fn range(low: &Cell, high: &Cell) -> Cell {
    if low == high {
        low.clone()
    } else {
        Cell::words(format!("{} to {}", low.text, high.sentence()))
    }
}

/// Overshoot, rise and settling: what the trial is judged on.
fn shape_rows(kind: TrialKind, both: [&Metrics; 2], judged: Option<&TrialMove>) -> Vec<Row> {
    let with = |mut cells: Vec<Cell>, models: Cell| {
        cells.push(models);
        cells
    };
    let percent = |v: f64| Cell::figure(display::fixed(v, 0), "%");
    let of_models = |ends: Option<[f64; 2]>, cell: &dyn Fn(f64) -> Cell| {
        ends.map_or_else(
            || Cell::words(""),
            |[low, high]| range(&cell(low), &cell(high)),
        )
    };
    let times = |of: fn(&Metrics) -> Option<f64>, missing: &str, ends: Option<[f64; 2]>| {
        let all = both.iter().filter_map(|m| of(m));
        let unit = TimeUnit::for_all(all.chain(ends.into_iter().flatten()));
        let cells = both
            .iter()
            .map(|m| of(m).map_or_else(|| Cell::words(missing), |t| unit.cell(t)));
        with(cells.collect(), of_models(ends, &|t| unit.cell(t)))
    };
    let mut rows = Vec::new();
    if kind == TrialKind::SetPoint {
        let cells = both
            .iter()
            .map(|m| m.overshoot_percent.map_or_else(Cell::none, percent));
        let ends = judged.and_then(|m| m.overshoot_of_models_percent);
        rows.push(Row::new(
            "Overshoot",
            with(cells.collect(), of_models(ends, &percent)),
        ));
        rows.push(Row::new(
            rise_time(),
            times(|m| m.rise_time_s, super::numbers::NONE, None),
        ));
    }
    rows.push(Row::new(
        "Settling time",
        times(
            |m| m.settling_time_s,
            "not settled",
            judged.and_then(|m| m.settling_time_of_models_s),
        ),
    ));
    rows
}

/// Deviation, error and travel.
fn size_rows(context: &Context, kind: TrialKind, both: [&Metrics; 2]) -> Vec<Row> {
    let row = |label: &str, cell: &dyn Fn(&Metrics) -> Cell| {
        let mut cells: Vec<Cell> = both.iter().map(|m| cell(m)).collect();
        cells.push(Cell::words(""));
        Row::new(label, cells)
    };
    let peaks = both.map(|m| m.peak_deviation_percent * context.pv_per_percent);
    let decimals = decimals_to_show(peaks[0].min(peaks[1]), 30.0);
    let largest = match kind {
        TrialKind::SetPoint => "Largest change of PV",
        TrialKind::Load => "Largest deviation of PV",
    };
    vec![
        row(largest, &|m| {
            let peak = m.peak_deviation_percent * context.pv_per_percent;
            Cell::figure(display::fixed(peak, decimals), context.pv_unit.clone())
        }),
        row("IAE", &|m| {
            Cell::figure(
                super::numbers::grouped(&display::significant(m.iae_percent_s, 3)),
                format!("%{NO_BREAK}s"),
            )
        }),
        row("OP travel", &|m| {
            Cell::figure(display::fixed(m.op_travel_percent, 1), "%")
        }),
    ]
}

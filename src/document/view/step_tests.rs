//! The step tests: the test as logged and the table of its steps.

use super::numbers::{
    NONE, TimeUnit, bound, column_decimals, decimals_of, decimals_to_show, decimals_within,
    grouped, listed, sentence, tidy,
};
use super::process::slope_unit;
use super::{Context, Heading, Plot, span_of};
use crate::display::{self, NO_BREAK, runs};
use crate::identify::{Step, Verdict};
use crate::quantity::Estimate;
use crate::trace::Moment;
use serde::Serialize;

/// The part.
#[derive(Debug, Serialize)]
pub(super) struct StepTests {
    heading: Heading,
    text: String,
    plot: Option<Plot>,
    op_unit: String,
    pv_unit: String,
    gain_unit: String,
    time_constant_unit: &'static str,
    dead_time_unit: &'static str,
    /// Whether the steps have a time constant.
    with_time_constant: bool,
    rows: Vec<Vec<String>>,
    /// The reasons of each step's verdict, printed below it.
    reasons: Vec<String>,
    note: String,
}

pub(super) fn step_tests(context: &Context) -> Option<StepTests> {
    let heading = context.parts.heading(super::STEP_TESTS)?;
    let record = context.record;
    let steps = &record.steps;
    let used: Vec<&Step> = steps
        .iter()
        .filter(|s| s.verdict != Verdict::Rejected && s.fit.is_some())
        .collect();
    let fits = || used.iter().filter_map(|s| s.fit.as_ref());

    let with_time_constant = fits().any(|f| f.time_constant_s.is_some());
    let integrates = fits().any(|f| f.kind.integrates());
    let slope = slope_unit(fits().map(|f| f.gain.value.abs()).fold(0.0, f64::max));
    let gain_factor = context.gain_factor() * if integrates { slope.factor() } else { 1.0 };
    let tau_unit = TimeUnit::for_all(fits().filter_map(|f| f.time_constant_s.map(|t| t.value)));
    let theta_unit = TimeUnit::for_all(fits().map(|f| f.dead_time_s.value));

    let half = |of: &dyn Fn(&crate::identify::StepFit) -> Option<Estimate>, factor: f64| {
        let widths: Vec<f64> = fits()
            .filter_map(|f| of(f).map(|e| e.half_width() * factor.abs()))
            .collect();
        column_decimals(&widths)
    };
    // Three figures of the largest gain, as beside the fits.
    let largest = fits()
        .map(|f| (f.gain.value * gain_factor).abs())
        .fold(0.0, f64::max);
    let gain_decimals =
        half(&|f| Some(f.gain), gain_factor).min(decimals_of(&display::significant(largest, 3)));
    let tau_decimals = half(&|f| f.time_constant_s, tau_unit.factor());
    let theta_decimals = half(&|f| Some(f.dead_time_s), theta_unit.factor());

    let smallest = |changes: Vec<f64>| {
        changes
            .into_iter()
            .filter(|c| *c > 0.0)
            .fold(f64::INFINITY, f64::min)
    };
    // A fiftieth of the smallest move is less than anyone would write down.
    let smallest_move = smallest(steps.iter().map(|s| (s.op_to - s.op_from).abs()).collect());
    let op_decimals = decimals_within(
        steps.iter().flat_map(|s| [s.op_from, s.op_to]),
        smallest_move / 50.0,
        3,
    );
    let judged: Vec<&Step> = if used.is_empty() {
        steps.iter().collect()
    } else {
        used.clone()
    };
    let pv_decimals = decimals_to_show(
        smallest(judged.iter().map(|s| (s.pv_to - s.pv_from).abs()).collect()),
        20.0,
    );

    let several_days = several_days(steps);
    let rows = steps
        .iter()
        .map(|step| {
            let fit = step
                .fit
                .as_ref()
                .filter(|_| step.verdict != Verdict::Rejected);
            let figure = |value: Option<f64>, decimals| {
                value.map_or_else(|| NONE.to_owned(), |v| display::fixed(v, decimals))
            };
            let mut row = vec![
                step.number.to_string(),
                moment(step.at, several_days),
                display::fixed(step.op_from, op_decimals),
                display::fixed(step.op_to, op_decimals),
                grouped(&display::fixed(step.pv_from, pv_decimals)),
                grouped(&display::fixed(step.pv_to, pv_decimals)),
                figure(fit.map(|f| f.gain.value * gain_factor), gain_decimals),
            ];
            if with_time_constant {
                row.push(figure(
                    fit.and_then(|f| f.time_constant_s)
                        .map(|t| t.value * tau_unit.factor()),
                    tau_decimals,
                ));
            }
            row.push(figure(
                fit.map(|f| f.dead_time_s.value * theta_unit.factor()),
                theta_decimals,
            ));
            row.push(figure(fit.map(|f| f.residual_percent), 1));
            row.push(
                match step.verdict {
                    Verdict::Accepted => "accepted",
                    Verdict::Reservation => "accepted with reservation",
                    Verdict::Rejected => "rejected",
                }
                .to_owned(),
            );
            row
        })
        .collect();
    let reasons: Vec<String> = steps
        .iter()
        .map(|step| {
            let texts: Vec<String> = step.reasons.iter().map(|r| bound(&r.text)).collect();
            texts.join("; ")
        })
        .collect();

    let gain_unit = if integrates {
        format!("{}/{}/{}", context.pv_unit, slope.sign(), context.op_unit)
    } else {
        format!("{}/{}", context.pv_unit, context.op_unit)
    };
    Some(StepTests {
        heading,
        text: text(context),
        plot: context.plot("test.svg"),
        op_unit: context.op_unit.clone(),
        pv_unit: context.pv_unit.clone(),
        gain_unit,
        time_constant_unit: tau_unit.sign(),
        dead_time_unit: theta_unit.sign(),
        with_time_constant,
        rows,
        reasons,
        note: note(&used, integrates, with_time_constant),
    })
}

fn note(used: &[&Step], integrates: bool, with_time_constant: bool) -> String {
    let gain = if integrates {
        "Gain (slope of PV)"
    } else {
        "Gain"
    };
    let mut names = vec![gain.to_owned()];
    if with_time_constant {
        names.push("time constant τ".to_owned());
    }
    names.push("dead time θ".to_owned());
    let pulses: Vec<usize> = used.iter().filter(|s| s.pulse).map(|s| s.number).collect();
    let pulses = match pulses.as_slice() {
        [] => String::new(),
        [one] => format!(" Step{NO_BREAK}{one} is a pulse: OP was moved back."),
        several => format!(
            " Steps{NO_BREAK}{} are pulses: OP was moved back.",
            runs(several)
        ),
    };
    format!(
        "{} of each step’s own fit. Misfit: what it leaves beyond the noise, in percent of the change of \
         PV.{pulses}",
        listed(&names)
    )
}

/// When, where, by whom.
fn text(context: &Context) -> String {
    let record = context.record;
    let l = &record.control_loop;
    let mut text = "Tested".to_owned();
    if let Some(log) = record.test_log() {
        if let (Moment::Elapsed(_), Some(on)) = (log.from, l.tested_on) {
            text.push_str(&format!(" {on}"));
        }
        text.push(' ');
        text.push_str(&span_of(log, false));
        if !log.data.manual.is_empty() {
            text.push_str(", loop in manual");
        }
    } else if let Some(on) = l.tested_on {
        text.push_str(&format!(" {on}"));
    }
    for part in [
        l.tested_by.as_deref().map(|n| format!("by {}", tidy(n))),
        l.witnessed_by
            .as_deref()
            .map(|n| format!("witnessed by {}", tidy(n))),
    ]
    .into_iter()
    .flatten()
    {
        text.push_str(", ");
        text.push_str(part.trim_end_matches('.'));
    }
    match l.conditions.as_deref().map(bound) {
        Some(conditions) if !conditions.is_empty() => {
            format!("{} Conditions: {}", sentence(&text), sentence(&conditions))
        }
        _ => sentence(&text),
    }
}

fn several_days(steps: &[Step]) -> bool {
    let mut days = steps.iter().filter_map(|s| match s.at {
        Moment::Dated(at) => Some(at.date()),
        Moment::Elapsed(_) => None,
    });
    let first = days.next();
    days.any(|day| Some(day) != first)
}

fn moment(at: Moment, with_date: bool) -> String {
    match at {
        Moment::Dated(at) if with_date => at.format("%m-%d\u{a0}%H:%M:%S").to_string(),
        Moment::Dated(at) => at.format("%H:%M:%S").to_string(),
        Moment::Elapsed(seconds) => display::duration(seconds),
    }
}

//! The page for operations: plain words for the control room, no symbols.

use super::Context;
use super::numbers::{decimals_to_show, lower, tidy};
use crate::design::Aim;
use crate::display::{self, NO_BREAK};
use crate::predict::{Margins, Metrics};
use crate::record::{OpenCode, SettingsBlock};
use serde::Serialize;

/// One loop on the page for operations.
#[derive(Debug, Serialize)]
pub(super) struct Row {
    pub tag: String,
    pub service: String,
    pub different: String,
    pub takes: String,
    pub see: String,
    pub avoid: String,
}

/// Overshoot below which a change looks like one rise without a swing, percent.
const CALM_OVERSHOOT: f64 = 5.0;
/// Overshoot from which a loop is said to swing, percent.
const SWINGS: f64 = 25.0;

pub(super) fn row(context: &Context) -> Option<Row> {
    let l = &context.record.control_loop;
    if context.withheld() {
        // Nothing was recommended; where something was entered all the same, the control room must know.
        context.record.settings.as_left.as_ref()?;
        return Some(Row {
            tag: tidy(&l.tag),
            service: tidy(&l.service),
            different: "Changed, though nothing was recommended for it.".to_owned(),
            takes: "not known".to_owned(),
            see: "Not known: what it will do could not be worked out.".to_owned(),
            avoid: with_protective(
                context,
                vec!["Do not put it in automatic before the engineer in charge agrees.".to_owned()],
            ),
        });
    }
    let after = context.after()?;
    let takes_s = takes(context, after);
    Some(Row {
        tag: tidy(&l.tag),
        service: tidy(&l.service),
        different: different(context, after),
        takes: takes_s.map_or_else(|| "not known".to_owned(), plain_time),
        see: see(context, after),
        avoid: avoid(context),
    })
}

fn oscillates(context: &Context) -> bool {
    context
        .record
        .trial
        .as_ref()
        .is_some_and(|t| t.oscillation.is_some())
}

/// Whether the loop is stable with the settings after the work, on every model of the test.
fn stable(after: &SettingsBlock) -> bool {
    let stable = |margins: Option<Margins>| margins.is_none_or(|m| m.stable);
    stable(after.margins) && stable(after.worst_margins)
}

/// What not to do, with what governs a protective function first.
fn with_protective(context: &Context, said: Vec<String>) -> String {
    super::dossier::protective(context)
        .into_iter()
        .chain(said)
        .collect::<Vec<_>>()
        .join(" ")
}

fn trial_disagrees(context: &Context) -> bool {
    context.record.trial.as_ref().is_some_and(|t| !t.agrees)
}

/// How long a change takes, s: as measured where it was, else as predicted.
fn takes(context: &Context, after: &SettingsBlock) -> Option<f64> {
    if oscillates(context) || !stable(after) {
        return None;
    }
    let measured = context
        .record
        .trial
        .as_ref()
        .and_then(|t| t.measured.settling_time_s);
    let predicted = || {
        let predicted = after.predicted.as_ref()?;
        if context.record.control_loop.aim == Aim::Averaging {
            predicted.load.metrics.settling_time_s
        } else {
            predicted.set_point.metrics.settling_time_s
        }
    };
    measured.or_else(predicted)
}

/// "15 seconds", "6 minutes", "1 hour 20 minutes": as told across a desk.
pub(super) fn plain_time(seconds: f64) -> String {
    if seconds < 90.0 {
        // Up, not to the nearest: nobody is to be told to act before the loop is there.
        let rounded = (libm::ceil(seconds / 5.0) * 5.0).max(5.0);
        return format!("{}{NO_BREAK}seconds", display::fixed(rounded, 0));
    }
    let minutes = libm::round(seconds / 60.0) as usize;
    if minutes < 90 {
        return display::counted(minutes, "minute", "minutes");
    }
    let to_ten = (minutes + 5) / 10 * 10;
    let (hours, rest) = (to_ten / 60, to_ten % 60);
    let hours = display::counted(hours, "hour", "hours");
    if rest == 0 {
        hours
    } else {
        format!("{hours} {rest}{NO_BREAK}minutes")
    }
}

fn set_point(block: &SettingsBlock) -> Option<Metrics> {
    block.predicted.as_ref().map(|p| p.set_point.metrics)
}

fn load(block: &SettingsBlock) -> Option<Metrics> {
    block.predicted.as_ref().map(|p| p.load.metrics)
}

fn different(context: &Context, after: &SettingsBlock) -> String {
    if context.record.settings.as_left.is_none() {
        return format!(
            "Not changed yet: works as before until the new settings are entered. From then on: {}",
            lower(&difference(context, after))
        );
    }
    if oscillates(context) {
        return "Changed, but it went on swinging when it was tried.".to_owned();
    }
    if !stable(after) {
        return "Changed, and by the test it may swing without end.".to_owned();
    }
    if trial_disagrees(context) {
        return "Changed, but when it was tried it did not do as expected.".to_owned();
    }
    difference(context, after)
}

/// What the settings after the work change against those found.
fn difference(context: &Context, after: &SettingsBlock) -> String {
    let found = &context.record.settings.as_found;
    if context.record.control_loop.aim == Aim::Averaging {
        return "Lets the level move to keep the flow steady.".to_owned();
    }
    let mut said = Vec::new();
    let found_swings = found.margins.is_some_and(|m| !m.stable)
        || set_point(found).is_some_and(|m| m.overshoot_percent.unwrap_or(0.0) >= SWINGS);
    let (before, now) = (set_point(found), set_point(after));
    let now_calm = now.is_some_and(|m| m.overshoot_percent.unwrap_or(0.0) < SWINGS);
    let speed = before
        .and_then(|m| m.settling_time_s)
        .zip(now.and_then(|m| m.settling_time_s))
        .map(|(b, n)| n / b);
    if found_swings && now_calm {
        said.push("No longer swings after a set-point change.");
    } else {
        match speed {
            Some(ratio) if ratio < 0.75 => said.push("Follows its set point faster."),
            Some(ratio) if ratio > 1.33 => said.push("Slower after a set-point change."),
            _ => {}
        }
    }
    let hold = load(found)
        .zip(load(after))
        .map(|(b, n)| n.peak_deviation_percent / b.peak_deviation_percent);
    match hold {
        Some(ratio) if ratio < 0.8 => said.push("Holds better when something disturbs it."),
        Some(ratio) if ratio > 1.25 => said.push("Gives way more when something disturbs it."),
        _ => {}
    }
    if said.is_empty() {
        said.push("Hardly different in daily running.");
    }
    said.join(" ")
}

fn see(context: &Context, after: &SettingsBlock) -> String {
    let mut said = Vec::new();
    let dead = context
        .record
        .model
        .as_ref()
        .map_or(0.0, |m| m.fit.dead_time_s.value);
    if dead >= 60.0 {
        said.push(format!(
            "Nothing for the first {} after a change: the process answers late.",
            plain_time(dead)
        ));
    }
    if oscillates(context) || !stable(after) {
        said.push("Swings that do not die away.".to_owned());
        return said.join(" ");
    }
    let step = after
        .predicted
        .as_ref()
        .map_or(0.0, |p| p.set_point.step_percent * context.pv_per_percent);
    match set_point(after).and_then(|m| m.overshoot_percent) {
        Some(_) if context.record.control_loop.aim == Aim::Averaging => {
            said.push("The level wanders; the flow moves slowly and little.".to_owned());
        }
        Some(overshoot) if overshoot < CALM_OVERSHOOT => {
            said.push("After a set-point change: one rise or fall, no second swing.".to_owned());
        }
        Some(overshoot) => {
            let beyond = step * overshoot / 100.0;
            let decimals = decimals_to_show(beyond, 2.0);
            said.push(format!(
                "Goes about {}{NO_BREAK}{unit} past the set point after a change of {}{NO_BREAK}{unit}, then settles.",
                display::fixed(beyond, decimals),
                display::plain(step, 3),
                unit = context.pv_unit,
            ));
        }
        None => {}
    }
    let travel = set_point(&context.record.settings.as_found)
        .zip(set_point(after))
        .map(|(b, n)| n.op_travel_percent / b.op_travel_percent);
    match travel {
        Some(ratio) if ratio > 1.5 => said.push("The output moves more than before.".to_owned()),
        Some(ratio) if ratio < 0.67 => said.push("The output moves less than before.".to_owned()),
        _ => {}
    }
    if let Some(valve) = context
        .record
        .valve
        .filter(|v| v.is_seen() && v.dead_band_percent > 1.0)
    {
        said.push(format!(
            "The output moves by about {}{NO_BREAK}% before the valve turns round.",
            display::fixed(valve.dead_band_percent, 0)
        ));
    }
    if context
        .record
        .model
        .as_ref()
        .is_some_and(|m| m.fit.nonlinear_gain().is_some())
    {
        said.push("Quicker in one part of the range than in the other.".to_owned());
    }
    said.join(" ")
}

fn avoid(context: &Context) -> String {
    let mut said = Vec::new();
    let l = &context.record.control_loop;
    let open_margins = context
        .record
        .document
        .open_items
        .iter()
        .any(|item| item.code == OpenCode::AsLeftMargins);
    if oscillates(context) || trial_disagrees(context) || open_margins {
        said.push(
            "Do not leave it unwatched in automatic until its open item is closed.".to_owned(),
        );
    }
    if l.aim == Aim::Averaging {
        said.push("Do not correct the level by hand while it is within its alarms.".to_owned());
    }
    if !l.outer_loops.is_empty() {
        let outer: Vec<String> = l.outer_loops.iter().map(|t| tidy(t)).collect();
        said.push(format!(
            "Do not take it out of cascade while {} is in automatic.",
            super::numbers::listed(&outer)
        ));
    }
    let [low, high] = context.record.test.pv_tested;
    if high > low {
        let decimals = decimals_to_show(high - low, 10.0);
        said.push(format!(
            "Do not rely on it outside {} to {}{NO_BREAK}{}.",
            display::fixed(low, decimals),
            display::fixed(high, decimals),
            context.pv_unit
        ));
    }
    with_protective(context, said)
}

#[cfg(test)]
mod unit_tests {
    use super::plain_time;

    #[test]
    fn times_are_told_plainly() {
        assert_eq!(plain_time(13.0), "15\u{a0}seconds");
        assert_eq!(plain_time(558.0), "9\u{a0}minutes");
        assert_eq!(plain_time(3600.0), "60\u{a0}minutes");
        assert_eq!(plain_time(7300.0), "2\u{a0}hours");
        assert_eq!(plain_time(4.6e3 + 3600.0), "2\u{a0}hours 20\u{a0}minutes");
    }
}

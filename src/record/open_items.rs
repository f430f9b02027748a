//! What keeps a record from being signed, what was asked for and not met, and the status that follows.

use super::{OpenCode, OpenItem, Record, Remark, Status};
use crate::design::{LimitName, LimitOutcome, Refusal};
use crate::display::{counted, duration, plain, runs};
use crate::identify::{Reason, Step, Verdict};
use crate::settings::Action;

/// Facts that the open items look at and that the record itself does not hold.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Circumstances {
    /// Why the design recommended nothing, where it did.
    pub refusal: Option<Refusal>,
    /// Why this loop cannot be designed on its inner loop, where it cannot.
    pub inner_refusal: Option<String>,
    /// Why it cannot be told whether the test came after the inner loop was left as it is.
    pub inner_order_unknown: Option<String>,
    /// Why the closed-loop trial's log could not be assessed, where it could not.
    pub trial_failure: Option<String>,
}

/// Whether the action in force makes feedback negative on the fitted process.
pub fn action_fits(record: &Record) -> bool {
    let action = record
        .control_loop
        .left_action
        .unwrap_or(record.control_loop.action);
    record
        .model
        .as_ref()
        .is_none_or(|model| Action::for_gain(model.fit.gain.value) == action)
}

/// Usable steps that moved the OP up, and those that moved it down. A pulse counts both ways.
pub fn usable_directions(record: &Record) -> (usize, usize) {
    let usable = || {
        record
            .steps
            .iter()
            .filter(|step| step.verdict != Verdict::Rejected)
    };
    (
        usable().filter(|s| s.pulse || s.op_to > s.op_from).count(),
        usable().filter(|s| s.pulse || s.op_to < s.op_from).count(),
    )
}

/// Number of usable steps.
pub fn usable_steps(record: &Record) -> usize {
    record
        .steps
        .iter()
        .filter(|step| step.verdict != Verdict::Rejected)
        .count()
}

/// Every open item of the record, those that withhold it first. A record that is withheld lists
/// only what withholds it: nothing else can be mended before.
pub fn open_items(record: &Record, circumstances: &Circumstances) -> Vec<OpenItem> {
    let withholding = withholding_items(record, circumstances);
    if withholding.is_empty() {
        draft_items(record, circumstances)
    } else {
        withholding
    }
}

fn item(code: OpenCode, text: impl Into<String>) -> OpenItem {
    OpenItem {
        code,
        text: text.into(),
    }
}

fn action_word(action: Action) -> &'static str {
    match action {
        Action::Direct => "direct",
        Action::Reverse => "reverse",
    }
}

fn withholding_items(record: &Record, circumstances: &Circumstances) -> Vec<OpenItem> {
    let mut items = Vec::new();
    let l = &record.control_loop;
    match &record.model {
        None => items.push(item(
            OpenCode::NoUsableStep,
            match &record.test.failure {
                Some(failure) => format!("No step test can be used: {failure}."),
                None => no_step_in_words(record),
            },
        )),
        Some(model) if !action_fits(record) => {
            let gain = model.fit.gain.value;
            let needed = Action::for_gain(gain);
            let action = l.left_action.unwrap_or(l.action);
            items.push(item(
                OpenCode::ActionAgainstProcess,
                format!(
                    "PV {} when OP rises, so the controller has to be {} acting; the schedule says {}. \
                     In automatic this loop would drive itself to the end of its range. Find out which of \
                     the two is wrong before the loop is put in automatic.",
                    if gain > 0.0 { "rises" } else { "falls" },
                    action_word(needed),
                    action_word(action),
                ),
            ));
        }
        Some(_) => {}
    }
    if let Some(Refusal::ScanTooSlow { text }) = &circumstances.refusal {
        items.push(item(OpenCode::ScanTooSlow, text.clone()));
    }
    if l.safety && l.safety_procedure.is_none() {
        items.push(item(
            OpenCode::SafetyProcedureMissing,
            "The loop takes part in a protective function, and no procedure for changing it is named. \
             It is changed only under the procedure for protective systems.",
        ));
    }
    if let Some(text) = &circumstances.inner_refusal {
        items.push(item(OpenCode::InnerLoopWithheld, text.clone()));
    }
    match &circumstances.refusal {
        Some(Refusal::NoSolution { text }) => items.push(item(OpenCode::NoSolution, text.clone())),
        Some(Refusal::WrongAim { text }) => items.push(item(OpenCode::WrongAim, text.clone())),
        Some(Refusal::ScanTooSlow { .. }) | None => {}
    }
    items
}

fn draft_items(record: &Record, circumstances: &Circumstances) -> Vec<OpenItem> {
    let mut items = Vec::new();
    if record.control_loop.waiver.is_none()
        && let Some(text) = few_steps(record)
    {
        items.push(item(OpenCode::FewSteps, text));
    }
    match &record.settings.as_left {
        None => items.push(item(
            OpenCode::AsLeftMissing,
            "The settings as left are not entered in the loop schedule.",
        )),
        Some(left) => {
            let bound = record.limits_in_force.design.worst_ms;
            match left.worst_margins {
                Some(worst) if !worst.stable => items.push(item(
                    OpenCode::AsLeftMargins,
                    format!(
                        "With the settings as left the loop is not stable on {}.",
                        left.worst_model.as_deref().unwrap_or("the fitted model")
                    ),
                )),
                Some(worst) if worst.ms.is_some_and(|ms| ms > bound) => items.push(item(
                    OpenCode::AsLeftMargins,
                    format!(
                        "With the settings as left the worst Ms is {} ({}); at most {} is allowed.",
                        told_from(worst.ms.unwrap_or(f64::INFINITY), bound),
                        left.worst_model.as_deref().unwrap_or("fitted model"),
                        plain(bound, 3)
                    ),
                )),
                _ => {}
            }
        }
    }
    match &record.trial {
        None => items.push(item(
            OpenCode::TrialMissing,
            match &circumstances.trial_failure {
                Some(failure) => format!("The closed-loop trial could not be assessed: {failure}."),
                None => "The closed-loop trial with the settings as left is missing.".to_owned(),
            },
        )),
        Some(trial) => {
            if let Some(oscillation) = &trial.oscillation {
                items.push(item(
                    OpenCode::TrialOscillates,
                    format!("Closed-loop trial: {}", sentence_end(&oscillation.text)),
                ));
            } else if !trial.agrees {
                items.push(item(
                    OpenCode::TrialDisagrees,
                    format!(
                        "Closed-loop trial: {}",
                        sentence_end(&uncapital(&trial.why))
                    ),
                ));
            }
        }
    }
    if let Some(limit) = record.design.iter().flat_map(|d| &d.limits).find(|limit| {
        limit.limit == LimitName::LevelDeviation && limit.outcome == LimitOutcome::NotMet
    }) {
        items.push(item(OpenCode::LevelDeviation, sentence_end(&limit.detail)));
    }
    items
}

/// The text as it goes on within a sentence: its first word begins small, unless it is a name in capitals.
fn uncapital(text: &str) -> String {
    let mut letters = text.chars();
    match (letters.next(), letters.clone().next()) {
        (Some(first), Some(second)) if second.is_lowercase() => {
            first.to_lowercase().chain(letters).collect()
        }
        _ => text.to_owned(),
    }
}

/// The text with a capital left as it is and a full stop at its end.
fn sentence_end(text: &str) -> String {
    let text = text.trim_end();
    if text.ends_with('.') {
        text.to_owned()
    } else {
        format!("{text}.")
    }
}

/// In words, where fewer than two steps or one direction only are usable.
pub fn few_steps(record: &Record) -> Option<String> {
    let usable = usable_steps(record);
    let (up, down) = usable_directions(record);
    if usable < 2 {
        Some(format!(
            "Only {} of the test can be used; two are needed, one in each direction.",
            counted(usable, "step", "steps")
        ))
    } else if up == 0 || down == 0 {
        Some(format!(
            "All usable steps moved the OP {}: the other direction was not tested.",
            if down == 0 { "up" } else { "down" }
        ))
    } else {
        None
    }
}

/// What was asked for and not met, overridden limits, reservations and waivers.
pub fn remarks(record: &Record, circumstances: &Circumstances) -> Vec<Remark> {
    let mut remarks = Vec::new();
    let mut add = |label: &str, text: String| {
        remarks.push(Remark {
            label: label.to_owned(),
            text,
        });
    };
    if let Some(design) = &record.design {
        for limit in &design.limits {
            match (limit.limit, limit.outcome) {
                (LimitName::Target, LimitOutcome::NotMet) => add(
                    "Not met",
                    format!(
                        "A closed-loop time constant of {} was asked for. {} {} is used.",
                        duration(record.control_loop.target_s.unwrap_or_default()),
                        sentence_end(&design.binding_detail),
                        duration(design.closed_loop_time_constant_s)
                    ),
                ),
                (_, LimitOutcome::Overridden) => add(
                    "Overridden",
                    format!(
                        "{} Reason given: {}",
                        sentence_end(&limit.detail),
                        sentence_end(
                            record
                                .control_loop
                                .target_reason
                                .as_deref()
                                .unwrap_or_default()
                        )
                    ),
                ),
                _ => {}
            }
        }
    }
    if let Some(text) = &circumstances.inner_order_unknown {
        add("Reservation", text.clone());
    }
    if let Some(waiver) = &record.control_loop.waiver
        && let Some(text) = few_steps(record)
    {
        add(
            "Accepted",
            format!("{text} Accepted: {}", sentence_end(waiver)),
        );
    }
    if let Some(undecided) = record
        .model
        .as_ref()
        .and_then(|model| model.fit.undecided.as_ref())
    {
        add("Reservation", sentence_end(undecided));
    }
    // Of a withheld record without a model every step is among the reasons already.
    if record.model.is_some() {
        for (verdict, label, verb) in [
            (
                Verdict::Reservation,
                "Reservation",
                "used with a reservation",
            ),
            (Verdict::Rejected, "Not used", "rejected"),
        ] {
            for group in steps_alike(record, verdict) {
                add(label, steps_in_words(&group, verb));
            }
        }
    }
    remarks
}

/// The reasons that decided a step's verdict: of a rejected step those that are more than a
/// reservation, all of them where none is.
pub fn decisive_reasons(step: &Step) -> Vec<&Reason> {
    let reservation = |reason: &Reason| {
        step.checks.iter().any(|check| {
            check.code == reason.code
                && reason.bound.is_some()
                && check.reservation == reason.bound
                && check.rejected != reason.bound
        })
    };
    let decisive: Vec<&Reason> = step.reasons.iter().filter(|r| !reservation(r)).collect();
    if step.verdict != Verdict::Rejected || decisive.is_empty() {
        step.reasons.iter().collect()
    } else {
        decisive
    }
}

/// That no step can be used, and why.
fn no_step_in_words(record: &Record) -> String {
    let mut text = "No step of the test can be used.".to_owned();
    for group in steps_alike(record, Verdict::Rejected) {
        text.push(' ');
        text.push_str(&steps_in_words(&group, "rejected"));
    }
    text
}

/// Steps of one verdict, those with the same rules behind it together.
fn steps_alike(record: &Record, verdict: Verdict) -> Vec<Vec<&Step>> {
    let codes = |step: &Step| {
        let reasons = decisive_reasons(step).into_iter();
        reasons.map(|r| r.code).collect::<Vec<_>>()
    };
    let mut groups: Vec<Vec<&Step>> = Vec::new();
    for step in record.steps.iter().filter(|s| s.verdict == verdict) {
        match groups.iter_mut().find(|g| codes(g[0]) == codes(step)) {
            Some(group) => group.push(step),
            None => groups.push(vec![step]),
        }
    }
    groups
}

/// "Step 3 is rejected: ...", "Steps 1 and 2 are used with a reservation, at worst: ...".
fn steps_in_words(group: &[&Step], verb: &str) -> String {
    // Figures of rules that ask for at least something are worst where lowest, the others where highest.
    let badness = |step: &Step| {
        decisive_reasons(step)
            .first()
            .and_then(|r| Some(r.figure? / r.bound?))
            .map_or(0.0, |ratio| if ratio < 1.0 { 1.0 / ratio } else { ratio })
    };
    let worst = group
        .iter()
        .copied()
        .max_by(|a, b| badness(a).total_cmp(&badness(b)))
        .unwrap_or(group[0]);
    let reasons: Vec<&str> = decisive_reasons(worst)
        .into_iter()
        .map(|r| r.text.as_str())
        .collect();
    let reasons = reasons.join("; ");
    let numbers: Vec<usize> = group.iter().map(|s| s.number).collect();
    match numbers.as_slice() {
        [one] => format!("Step {one} is {verb}: {reasons}."),
        several => {
            let texts = |step: &Step| {
                let reasons = decisive_reasons(step).into_iter();
                reasons.map(|r| r.text.clone()).collect::<Vec<_>>()
            };
            let alike = group.iter().all(|step| texts(step) == texts(worst));
            let at_worst = if alike { "" } else { ", at worst" };
            format!("Steps {} are {verb}{at_worst}: {reasons}.", runs(several))
        }
    }
}

/// The status that open items leave.
pub fn status(items: &[OpenItem]) -> Status {
    if items.iter().any(|item| item.code.withholds()) {
        Status::Withheld
    } else if items.is_empty() {
        Status::ForSignature
    } else {
        Status::Draft
    }
}

/// A figure with as many digits, three at least, as tell it from the bound that it breaks.
fn told_from(value: f64, bound: f64) -> String {
    (3..=6)
        .map(|digits| plain(value, digits))
        .find(|text| *text != plain(bound, 3))
        .unwrap_or_else(|| format!("just above {}", plain(bound, 3)))
}

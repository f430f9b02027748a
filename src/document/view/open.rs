//! What is open, not met or reserved, and why nothing is recommended.

use super::numbers::{NONE, bound, sentence, tidy};
use super::process::process_sentences;
use super::{Context, Entry};
use crate::display::{NO_BREAK, runs};
use crate::identify::Verdict;
use crate::record::{OpenCode, Record, decisive_reasons};
use std::collections::BTreeMap;

/// Open items and remarks, each pointing to its part.
pub(super) fn open(context: &Context) -> Vec<Entry> {
    let document = &context.record.document;
    let mut entries = Vec::new();
    if document.open_items.is_empty() {
        entries.push(Entry::new("Open", "None."));
    }
    for item in &document.open_items {
        entries.push(Entry::new(
            "Open",
            context
                .parts
                .pointing(&bound(&item.text), part_of(item.code)),
        ));
    }
    for remark in &document.remarks {
        let part = match remark.label.as_str() {
            "Not met" | "Overridden" => super::SETTINGS,
            _ => super::STEP_TESTS,
        };
        entries.push(Entry::new(
            tidy(&remark.label),
            context.parts.pointing(&bound(&remark.text), part),
        ));
    }
    entries
}

/// The part that shows what an open item is about.
fn part_of(code: OpenCode) -> &'static str {
    match code {
        OpenCode::NoUsableStep | OpenCode::FewSteps => super::STEP_TESTS,
        OpenCode::TrialDisagrees | OpenCode::TrialOscillates => super::TRIAL,
        OpenCode::AsLeftMissing | OpenCode::TrialMissing => NONE,
        _ => super::SETTINGS,
    }
}

/// The reasons of a withheld record, and the process where it is known.
pub(super) fn reasons_withheld(context: &Context) -> Vec<Entry> {
    let record = context.record;
    let mut entries = Vec::new();
    for item in &record.document.open_items {
        if item.code == OpenCode::NoUsableStep {
            entries.extend(steps_rejected(record, &item.text));
        } else {
            entries.push(Entry::new(
                reason_label(item.code),
                sentence(&bound(&item.text)),
            ));
        }
    }
    for remark in &record.document.remarks {
        entries.push(Entry::new(
            tidy(&remark.label),
            sentence(&bound(&remark.text)),
        ));
    }
    if let Some(process) = process_sentences(context) {
        entries.push(Entry::new("Process", process));
    }
    entries
}

fn reason_label(code: OpenCode) -> &'static str {
    match code {
        OpenCode::NoUsableStep | OpenCode::FewSteps => "Test",
        OpenCode::ActionAgainstProcess => "Action",
        OpenCode::ScanTooSlow => "Scan",
        OpenCode::SafetyProcedureMissing => "Protective",
        OpenCode::InnerLoopWithheld => "Inner loop",
        OpenCode::NoSolution => "Limits",
        OpenCode::WrongAim => "Aim",
        _ => "Also open",
    }
}

/// Rejected steps with the same reasons in one line; where no step was found, why.
fn steps_rejected(record: &Record, item: &str) -> Vec<Entry> {
    let mut by_reason: BTreeMap<usize, (Vec<usize>, String)> = BTreeMap::new();
    for step in record
        .steps
        .iter()
        .filter(|s| s.verdict == Verdict::Rejected)
    {
        let reasons: Vec<String> = decisive_reasons(step)
            .into_iter()
            .map(|r| bound(&r.text))
            .collect();
        let text = sentence(&reasons.join("; "));
        match by_reason.values_mut().find(|(_, t)| *t == text) {
            Some((numbers, _)) => numbers.push(step.number),
            None => {
                by_reason.insert(step.number, (vec![step.number], text));
            }
        }
    }
    if by_reason.is_empty() {
        return vec![Entry::new("Test", sentence(&bound(item)))];
    }
    by_reason
        .into_values()
        .map(|(numbers, text)| {
            let label = if numbers.len() == 1 { "Step" } else { "Steps" };
            Entry::new(format!("{label}{NO_BREAK}{}", runs(&numbers)), text)
        })
        .collect()
}

//! Facts of the trade, through the whole pipeline: schedule and log to record.

use super::{Case, cases};
use crate::demo;
use crate::plant::{JobFolder, morning, span, steps};
use asleft::design::{LimitName, LimitOutcome};
use asleft::model::{Kind, ProcessModel};
use asleft::record::{OpenCode, Record, Status};
use std::collections::BTreeMap;

/// The records of all cases that state a process, by the case's name, made in one run.
fn records() -> BTreeMap<String, Record> {
    let mut job = JobFolder::new();
    let stated: Vec<Case> = cases("common_practice.toml")
        .into_iter()
        .filter(|case| case.maybe("tau_s").is_some())
        .collect();
    for (k, case) in stated.iter().enumerate() {
        let (tau, theta) = (case.number("tau_s"), case.number("theta_s"));
        let model = ProcessModel::of_kind(Kind::FirstOrder, 1.2, tau, 0.0, theta);
        // Watched for eight time constants; twenty samples in each.
        let hold_s = libm::ceil(8.0 * (tau + theta));
        let trend = steps(
            model,
            &[40.0, 45.0, 40.0, 35.0, 40.0],
            hold_s,
            tau / 20.0,
            0.05,
        );
        let (tag, log) = (format!("TIC-{k}"), format!("logs/{k}.csv"));
        let headings = ["Time", "PV", "OP", "SP"];
        job = job
            .with(&log, trend.csv(headings, span(0.0, 100.0), morning(3)))
            .and_loop(&tag, &[("test log", &log), ("scan s", "0.1")]);
        for name in ["scan_s", "target_s"] {
            if let Some(value) = case.maybe(name) {
                job.set(&tag, &[(&name.replace('_', " "), &value.to_string())]);
            }
        }
    }
    let names = stated.into_iter().map(|case| case.name);
    names.zip(job.records()).collect()
}

#[test]
fn common_practice_is_kept() {
    let records = records();
    for case in cases("common_practice.toml") {
        match case.text("subject") {
            "reading" => reading(&case, &records[&case.name]),
            "scan" => scan(&case, &records[&case.name]),
            "target" => target(&case, &records[&case.name]),
            "loop-kinds" => loop_kinds(&case),
            other => panic!("{}: {other}", case.name),
        }
    }
}

/// The time constant runs from the first answer, in every step's reading and in the model.
fn reading(case: &Case, record: &Record) {
    assert_eq!(case.text("outcome"), "the reading is tau, not tau + theta");
    for step in &record.steps {
        let reading = step.reading.as_ref().expect("a reading");
        case.check(|_| reading.time_constant_s.expect("self-regulating"));
    }
    let model = &record.model.as_ref().expect("a model").fit;
    case.check(|_| model.time_constant_s.expect("self-regulating").value);
}

fn scan(case: &Case, record: &Record) {
    let open: Vec<OpenCode> = record.document.open_items.iter().map(|i| i.code).collect();
    match case.text("outcome") {
        "caution: coarse" => {
            assert!(record.settings.recommended.is_some());
            assert!(!open.contains(&OpenCode::ScanTooSlow));
            let coarse: Vec<&str> = record
                .cautions
                .iter()
                .map(|caution| caution.text.as_str())
                .filter(|text| text.contains("scan") && text.contains("coarse"))
                .collect();
            assert_eq!(coarse.len(), 1, "said once: {:?}", record.cautions);
        }
        "no settings" => {
            assert_eq!(record.document.status, Status::Withheld);
            assert!(open.contains(&OpenCode::ScanTooSlow), "{open:?}");
            assert!(record.settings.recommended.is_none() && record.design.is_none());
        }
        other => panic!("{}: {other}", case.name),
    }
}

fn target(case: &Case, record: &Record) {
    assert_eq!(case.text("outcome"), "the target is not obeyed");
    let asked_s = case.number("target_s");
    let design = record.design.as_ref().expect("a design");
    // Nothing faster than what the dead time needs, which the target is.
    assert!(design.closed_loop_time_constant_s >= case.number("theta_s"));
    assert_ne!(design.binding_limit, LimitName::Target);
    let limit = &design.limits[0];
    assert_eq!(
        (limit.limit, limit.outcome, limit.needs_s),
        (LimitName::Target, LimitOutcome::NotMet, Some(asked_s))
    );
    let said = &record.document.remarks;
    assert!(
        said.iter().any(|remark| remark.label == "Not met"),
        "{said:?}"
    );
}

/// A statement of kind: the demo plant, which is to be as real ones are, keeps to it.
fn loop_kinds(case: &Case) {
    let (letters, range_s): (&[char], _) = match case.text("outcome") {
        "seconds" => (&['F', 'P'], 0.0..60.0),
        "minutes" => (&['T'], 60.0..3600.0),
        other => panic!("{}: {other}", case.name),
    };
    let mut seen = 0;
    for record in demo::records().values() {
        let Some(model) = &record.model else { continue };
        if !record.control_loop.tag.starts_with(letters) {
            continue;
        }
        let tau_s = model.fit.time_constant_s.expect("self-regulating").value;
        assert!(
            range_s.contains(&tau_s),
            "{}: {tau_s} s",
            record.control_loop.tag
        );
        seen += 1;
    }
    assert!(seen >= 3, "{}: {seen} loops of the demo plant", case.name);
}

//! Inner and outer loops, from their logs to their records.

use crate::plant::{JobFolder, Trend, morning, span, steps, trial};
use asleft::design::{LimitName, LimitOutcome};
use asleft::model::{Kind, ProcessModel};
use asleft::record::{OpenCode, Record, Status};

const HEADINGS: [&str; 4] = ["Time", "PV", "OP", "SP"];

fn log(trend: &Trend, day: u32) -> String {
    trend.csv(HEADINGS, span(0.0, 100.0), morning(day))
}

/// Two flows, the second with its action the wrong way round, and a temperature on each.
fn records() -> Vec<Record> {
    let flow = ProcessModel::of_kind(Kind::FirstOrder, 1.1, 4.0, 0.0, 1.0);
    let temperature = ProcessModel::of_kind(Kind::FirstOrder, 0.8, 60.0, 0.0, 6.0);
    let moves = [40.0, 45.0, 40.0, 35.0];
    let (p, i) = (0.5, 4.0);
    let mut job = JobFolder::new()
        .with("logs/f.csv", log(&steps(flow, &moves, 60.0, 0.5, 0.03), 3))
        .with(
            "logs/f_trial.csv",
            log(&trial(flow, p, i, 0.5, 300.0, 0.03), 4),
        )
        .with(
            "logs/t.csv",
            log(&steps(temperature, &moves, 500.0, 2.0, 0.03), 6),
        );
    for (number, action) in [("1", "reverse"), ("2", "direct")] {
        let (inner, outer) = (format!("FIC-{number}"), format!("TIC-{number}"));
        job = job
            .and_loop(
                &inner,
                &[
                    ("test log", "logs/f.csv"),
                    ("trial log", "logs/f_trial.csv"),
                    ("action", action),
                    ("scan s", "0.1"),
                    ("left p", "0.5"),
                    ("left i", "4"),
                    ("left on", "2026-03-04"),
                ],
            )
            .and_loop(
                &outer,
                &[
                    ("test log", "logs/t.csv"),
                    ("inner loop", &inner.to_lowercase()),
                ],
            );
    }
    job.records()
}

#[test]
fn an_outer_loop_stands_on_its_inner_loop_as_left() {
    let records = records();
    let [inner, outer, turned, on_turned] = records.as_slice() else {
        panic!("four loops");
    };
    // They name each other, however the schedule writes the tag.
    assert_eq!(outer.control_loop.inner_loop.as_deref(), Some("FIC-1"));
    assert_eq!(inner.control_loop.outer_loops, ["TIC-1"]);
    let design = outer.design.as_ref().expect("a design");
    let limit = design
        .limits
        .iter()
        .find(|l| l.limit == LimitName::InnerLoop)
        .expect("the limit is shown");
    assert_eq!(limit.outcome, LimitOutcome::Met);
    // Four times the pace of the inner loop as left: its 63.2 % time less its effective dead time. SIMC with
    // Kc = τ/(K(τc + θ)) gives Kc 0.5 for τc + θ = 7.3 s, so a little above 6 s.
    let needs_s = limit.needs_s.expect("seconds");
    assert!((4.0 * 5.0..4.0 * 8.0).contains(&needs_s), "{needs_s}");
    assert!(design.closed_loop_time_constant_s >= needs_s * (1.0 - 1e-9));
    assert!(limit.detail.contains("FIC-1"));
    // What the outer loop's test has seen of the inner one is said.
    let said = outer.cautions.iter().find(|c| c.about == "cascade");
    let said = &said.expect("a caution").text;
    assert!(
        said.contains("FIC-1") && said.contains("as the test showed it"),
        "{said}"
    );
    assert!(
        inner
            .cautions
            .iter()
            .all(|c| !c.text.contains("as the test showed it"))
    );

    assert_eq!(turned.document.status, Status::Withheld);
    assert_eq!(on_turned.document.status, Status::Withheld);
    let codes: Vec<OpenCode> = on_turned
        .document
        .open_items
        .iter()
        .map(|i| i.code)
        .collect();
    assert_eq!(codes, [OpenCode::InnerLoopWithheld]);
    assert!(
        on_turned.document.open_items[0]
            .text
            .contains("FIC-2 is withheld")
    );
    assert!(on_turned.design.is_none() && on_turned.settings.recommended.is_none());
}

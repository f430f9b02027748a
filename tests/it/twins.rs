//! One loop tested once and exported in different ways: what must not change the record, does not.

use crate::plant::{Headings, JobFolder, Trend, morning, span, steps};
use asleft::model::{Kind, ProcessModel};
use asleft::record::Record;
use asleft::settings::{Action, Native};
use chrono::{NaiveDate, TimeDelta};

const HEADINGS: Headings = ["Time", "PV", "OP", "SP"];

fn trend() -> Trend {
    let model = ProcessModel::of_kind(Kind::SecondOrder, 1.4, 40.0, 12.0, 6.0);
    steps(model, &[40.0, 45.0, 40.0, 35.0, 40.0], 300.0, 2.0, 0.08)
}

/// The record of the loop as it was first exported, then its twins in the order of the list below.
fn twins() -> [Record; 6] {
    let trend = trend();
    let percent = span(0.0, 100.0);
    let plain = trend.csv(HEADINGS, percent, morning(3));
    // Seven weeks and some later; over the end of a month and of winter time, which a log in plain dates
    // knows nothing of.
    let later = morning(3) + TimeDelta::seconds(49 * 86_400 + 4321);
    let mirrored = Trend {
        pv: trend.pv.iter().map(|pv| 100.0 - pv).collect(),
        ..trend.clone()
    };
    // A decimal comma is one sign for another, the digits stay.
    let comma = plain.replace(',', ";").replace('.', ",");
    let job = JobFolder::new()
        .and_in_job("[[log]]\nfiles = [\"logs/comma.csv\"]\ndecimal = \",\"")
        .with("logs/plain.csv", &plain)
        .and_loop("TIC-1", &[("test log", "logs/plain.csv")])
        .with("logs/later.csv", trend.csv(HEADINGS, percent, later))
        .and_loop("TIC-2", &[("test log", "logs/later.csv")])
        .with(
            "logs/book.xlsx",
            trend.workbook(HEADINGS, percent, morning(3)),
        )
        .and_loop("TIC-3", &[("test log", "logs/book.xlsx")])
        .with("logs/comma.csv", comma)
        .and_loop("TIC-4", &[("test log", "logs/comma.csv")])
        .with(
            "logs/fahrenheit.csv",
            trend.csv(HEADINGS, span(32.0, 212.0), morning(3)),
        )
        .and_loop(
            "TIC-5",
            &[
                ("test log", "logs/fahrenheit.csv"),
                ("pv unit", "degF"),
                ("pv low", "32"),
                ("pv high", "212"),
            ],
        )
        .with(
            "logs/mirrored.csv",
            mirrored.csv(HEADINGS, percent, morning(3)),
        )
        .and_loop(
            "TIC-6",
            &[("test log", "logs/mirrored.csv"), ("action", "direct")],
        );
    let records = job.records();
    records.try_into().expect("six loops")
}

fn recommended(record: &Record) -> Native {
    let block = record.settings.recommended.as_ref();
    block.expect("settings are recommended").native
}

#[test]
fn twins_have_the_same_model_and_settings() {
    let [plain, later, book, comma, fahrenheit, mirrored] = twins();
    let model = |record: &Record| record.model.as_ref().expect("a model").fit.clone();
    // Seconds count from the log's first moment, and each file holds the same numbers: not a bit differs.
    for same in [&later, &book, &comma] {
        let tag = &same.control_loop.tag;
        assert_eq!(model(same), model(&plain), "{tag}");
        assert_eq!(same.design, plain.design, "{tag}");
        assert_eq!(same.settings, plain.settings, "{tag}");
        assert_eq!(same.logs[0].samples, plain.logs[0].samples, "{tag}");
    }
    let day = |record: &Record| record.logs[0].zero.expect("dated").date();
    assert_eq!(day(&plain), morning(3).date());
    assert_eq!(Some(day(&later)), NaiveDate::from_ymd_opt(2026, 4, 21));

    // Another unit, another sign: the last bit of each sample is another, the search stops elsewhere by a
    // little more than that.
    for (twin, sign) in [(&fahrenheit, 1.0), (&mirrored, -1.0)] {
        let tag = &twin.control_loop.tag;
        let (ours, theirs) = (model(&plain), model(twin));
        assert_eq!(ours.kind, theirs.kind);
        let near = |a: f64, b: f64| (a - b).abs() <= 1e-6 * b.abs().max(1.0);
        assert!(near(sign * theirs.gain.value, ours.gain.value), "{tag}");
        let (ends, own_ends) = (
            (theirs.gain.low, theirs.gain.high),
            (ours.gain.low, ours.gain.high),
        );
        let ends = if sign < 0.0 { (-ends.1, -ends.0) } else { ends };
        assert!(
            near(ends.0, own_ends.0) && near(ends.1, own_ends.1),
            "{tag}"
        );
        for (a, b) in [
            (theirs.time_constant_s, ours.time_constant_s),
            (theirs.second_time_constant_s, ours.second_time_constant_s),
            (Some(theirs.dead_time_s), Some(ours.dead_time_s)),
        ] {
            let (a, b) = (a.expect("two lags"), b.expect("two lags"));
            assert!(
                near(a.value, b.value) && near(a.low, b.low) && near(a.high, b.high),
                "{tag}"
            );
        }
        // Four digits are typed; a difference behind them may turn the last.
        let (ours, theirs) = (recommended(&plain), recommended(twin));
        assert!(
            (theirs.p / ours.p - 1.0).abs() < 1.1e-3,
            "{tag}: {theirs:?}"
        );
        assert!(
            (theirs.i / ours.i - 1.0).abs() < 1.1e-3,
            "{tag}: {theirs:?}"
        );
    }
    // The gain as a person reads it is in the log's own unit.
    let engineering = |record: &Record| {
        record
            .model
            .as_ref()
            .expect("a model")
            .gain_engineering
            .clone()
    };
    let ratio = engineering(&fahrenheit).value / engineering(&plain).value;
    assert!((ratio - 1.8).abs() < 1e-5, "{ratio}");
    assert_eq!(engineering(&fahrenheit).unit, "degF/%");
    assert_eq!(mirrored.control_loop.action, Action::Direct);
}

#[test]
fn a_mirrored_loop_with_its_action_left_is_withheld() {
    let trend = trend();
    let percent = span(0.0, 100.0);
    let job = JobFolder::new()
        .with("logs/plain.csv", trend.csv(HEADINGS, percent, morning(3)))
        .and_loop(
            "TIC-1",
            &[("test log", "logs/plain.csv"), ("action", "direct")],
        );
    let [record] = job.records().try_into().expect("one loop");
    assert!(record.settings.recommended.is_none());
    assert!(
        record
            .cautions
            .iter()
            .any(|caution| caution.about == "sign")
    );
}

//! From an empty folder to a record that is signed, and to the next revision.

use crate::plant::{JobFolder, Trend, morning, span, steps, trial};
use crate::support::{asleft, folder, names_in};
use asleft::archive;
use asleft::model::{Kind, ProcessModel};
use asleft::record::{OpenCode, Record, Status};
use serde_json::Value;
use std::fs;
use std::path::Path;

fn process() -> ProcessModel {
    ProcessModel::of_kind(Kind::FirstOrder, 0.8, 90.0, 0.0, 15.0)
}

fn test() -> Trend {
    steps(process(), &[40.0, 46.0, 40.0, 34.0, 40.0], 500.0, 1.0, 0.05)
}

/// As another maker's trend exports it: headings that say nothing of PV and OP.
fn export(trend: &Trend, day: u32) -> String {
    let headings = ["Stamp", "Jacket", "Valve demand", "Jacket wanted"];
    trend.csv(headings, span(0.0, 200.0), morning(day))
}

const COLUMNS: [(&str, &str); 6] = [
    ("pv high", "200"),
    ("scan s", "1"),
    ("time column", "Stamp"),
    ("pv column", "Jacket"),
    ("op column", "Valve demand"),
    ("test log", "logs/jacket.csv"),
];

fn only_record(records: &Path) -> Record {
    let names = names_in(records);
    let json = names
        .iter()
        .find(|name| name.contains("TIC-7_rev") && name.ends_with(".json"));
    archive::read_record(&records.join(json.expect("a record"))).expect("a record")
}

#[test]
fn a_new_folder_becomes_a_job_of_ones_own() {
    let folder = folder();
    let job = folder.path().join("unit-7");
    let typed = job.to_str().expect("a plain path");
    let run = asleft(&["--json", "new", typed]).ends_with(0);
    let report: Value = serde_json::from_str(&run.out).expect("one JSON document");
    for file in report["files"].as_array().expect("files") {
        assert!(job.join(file.as_str().expect("a name")).is_file(), "{file}");
    }
    // What was laid out is a job: its example is there to be looked at.
    let run = asleft(&["check", typed]).ends_with(0);
    assert!(run.out.contains("EXAMPLE-1 "), "{}", run.out);
    assert!(
        run.out.contains("1 draft, 0 withheld; 0 loops failed"),
        "{}",
        run.out
    );

    // A second `new` loses nothing.
    let run = asleft(&["new", typed]).ends_with(1);
    assert!(
        run.err
            .contains("is not empty; a new job begins in an empty folder"),
        "{}",
        run.err
    );

    // The person's own log and schedule, typed as text, in place of the example's.
    fs::remove_file(job.join("logs/example-1.csv")).expect("removed");
    fs::remove_file(job.join("loops.xlsx")).expect("removed");
    fs::write(job.join("logs/jacket.csv"), export(&test(), 3)).expect("written");
    let schedule = JobFolder::new().and_loop("TIC-7", &COLUMNS);
    fs::copy(schedule.path().join("loops.csv"), job.join("loops.csv")).expect("copied");

    let run = asleft(&[
        "--json",
        "inspect",
        job.join("logs/jacket.csv").to_str().expect("plain"),
    ]);
    // Its headings are a person's own, so no loop is found without the schedule's help.
    let _: Value = serde_json::from_str(&run.ends_with(1).out).expect("one JSON document");
    let run = asleft(&["record", typed]).ends_with(0);
    assert!(run.out.contains("TIC-7 "), "{}", run.out);
    assert_eq!(
        names_in(&job.join("records")),
        [
            "IC-DOSSIER_rev0.json",
            "IC-DOSSIER_rev0.pdf",
            "IC-TIC-7_rev0.json",
            "IC-TIC-7_rev0.pdf",
            "register.csv"
        ]
    );
    holds_the_process(&only_record(&job.join("records")));
}

/// The record of the test: what the process was, and settings by the rule that the design states.
fn holds_the_process(record: &Record) {
    assert_eq!(record.document.status, Status::Draft);
    let open: Vec<OpenCode> = record.document.open_items.iter().map(|i| i.code).collect();
    assert_eq!(open, [OpenCode::AsLeftMissing, OpenCode::TrialMissing]);
    let model = &record.model.as_ref().expect("a model").fit;
    assert_eq!(model.kind, Kind::FirstOrder);
    let tau = model.time_constant_s.expect("a lag");
    for (name, found, truth) in [
        ("gain", model.gain, 0.8),
        ("time constant", tau, 90.0),
        ("dead time", model.dead_time_s, 15.0),
    ] {
        // Half as wide again as the interval: of three figures and this one draw of noise, one just outside
        // its 95 % would be no fault.
        let reach = 1.5 * found.half_width();
        assert!((found.value - truth).abs() < reach, "{name}: {found:?}");
        // And the interval says something: the PV moved a hundred times its noise.
        assert!(found.half_width() < 0.1 * truth, "{name}: {found:?}");
    }
    // The engineering unit: 200 degC of range.
    let engineering = &record.model.as_ref().expect("a model").gain_engineering;
    assert!((engineering.value - 2.0 * model.gain.value).abs() < 1e-12);

    // SIMC on the fitted model: Kc = τ/(K(τc + θe)), Ti = min(τ, 4(τc + θe)) (S. Skogestad, J. Process
    // Control 13 (2003) 291-309), to the four digits typed.
    let design = record.design.as_ref().expect("a design");
    let sum = design.closed_loop_time_constant_s + design.effective_dead_time_s;
    let settings = record.settings.recommended.as_ref().expect("recommended");
    let kc = tau.value / (model.gain.value * sum);
    let ti = tau.value.min(4.0 * sum);
    assert!(
        (settings.native.p / kc - 1.0).abs() < 6e-4,
        "{settings:?} {kc}"
    );
    assert!(
        (settings.native.i / ti - 1.0).abs() < 6e-4,
        "{settings:?} {ti}"
    );
}

#[test]
fn what_was_issued_stays_until_the_next_revision() {
    let mut job = JobFolder::new()
        .with("logs/jacket.csv", export(&test(), 3))
        .and_loop("TIC-7", &COLUMNS);
    let records = job.path().join("records");
    asleft(&["record", "--no-dossier", job.typed()]).ends_with(0);
    let draft = only_record(&records);
    let settings = draft
        .settings
        .recommended
        .as_ref()
        .expect("recommended")
        .native;

    // Entered and tried: the draft is replaced by a record for signature.
    let tried = trial(process(), settings.p, settings.i, 1.0, 1500.0, 0.05);
    fs::write(job.path().join("logs/tried.csv"), export(&tried, 5)).expect("written");
    let (p, i) = (settings.p.to_string(), settings.i.to_string());
    let entered = [
        ("left p", p.as_str()),
        ("left i", &i),
        ("left on", "2026-03-04"),
        ("entered by", "P. Marsh"),
        ("trial log", "logs/tried.csv"),
        ("sp column", "Jacket wanted"),
    ];
    // The test log has no set point; the trial has a heading for it.
    let with_set_point = Trend {
        sp: vec![50.0; test().pv.len()],
        ..test()
    };
    fs::write(
        job.path().join("logs/jacket.csv"),
        export(&with_set_point, 3),
    )
    .expect("written");
    job.set("TIC-7", &entered);
    let run = asleft(&["record", job.typed()]).ends_with(0);
    assert!(run.out.contains("TIC-7     for signature"), "{}", run.out);
    let issued = only_record(&records);
    assert_eq!(issued.document.status, Status::ForSignature);
    assert!(issued.trial.as_ref().expect("a trial").agrees);
    let bytes = |name: &str| fs::read(records.join(name)).expect("there");
    let pdf = bytes("HM-TIC-7_rev0.pdf");

    // The same again: left as it is.
    let run = asleft(&["record", job.typed()]).ends_with(0);
    assert!(run.out.contains("(issued before)"), "{}", run.out);
    assert!(
        run.out.contains("1 record issued before, left as it is."),
        "{}",
        run.out
    );

    // Another number in the schedule: refused, by check as by record, and nothing is lost.
    job.set("TIC-7", &[("left p", "2.5")]);
    let before = names_in(&records);
    for command in ["check", "record"] {
        let run = asleft(&[command, job.typed()]).ends_with(1);
        let said: String = run.out.split_whitespace().collect::<Vec<_>>().join(" ");
        for words in [
            "settings, as left, native, p: ",
            "in the issued record, now 2.5",
            "new revision",
        ] {
            assert!(said.contains(words), "\"{words}\" is not in: {said}");
        }
    }
    assert_eq!(names_in(&records), before);
    assert!(bytes("HM-TIC-7_rev0.pdf") == pdf);

    // What the message asks for.
    job.set(
        "TIC-7",
        &[
            ("revision", "1"),
            ("date", "2026-03-25"),
            ("reason", "Gain raised"),
        ],
    );
    let run = asleft(&["record", "--no-dossier", job.typed()]).ends_with(0);
    assert!(run.out.contains("HM-TIC-7_rev1.pdf"), "{}", run.out);
    assert!(bytes("HM-TIC-7_rev0.pdf") == pdf);
    let revised = archive::read_record(&records.join("HM-TIC-7_rev1.json")).expect("a record");
    assert_eq!(revised.settings.as_left.expect("entered").native.p, 2.5);
    let reasons: Vec<&str> = revised
        .document
        .revisions
        .iter()
        .map(|r| r.reason.as_str())
        .collect();
    assert_eq!(reasons.last(), Some(&"Gain raised"));
}

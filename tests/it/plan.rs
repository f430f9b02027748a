//! Plans before the test, from the schedule alone and from earlier records.

use crate::plant::{JobFolder, morning, span, steps};
use crate::support::{Run, asleft, copy_folder, folder, names_in, root};
use crate::synthetic;
use asleft::archive::{self, FileNames};
use asleft::document::{self, Templates};
use asleft::model::{Kind, ProcessModel};
use asleft::plan::{self, DecidedBy, LogWanted, NotProposed, Plan, PlanInput, Size};
use asleft::record::Record;
use serde_json::Value;
use std::fs;
use std::path::Path;

/// The plan that the program makes with these records of the loop, the newest first.
fn plan_from(records: &[&Record]) -> Plan {
    let now = synthetic::signed();
    let mut document = now.document.clone();
    document.number.push_str("_plan");
    plan::plan(PlanInput {
        document,
        control_loop: now.control_loop.clone(),
        found: Some(now.settings.as_found.native),
        earlier: records.to_vec(),
        set_aside: Vec::new(),
        log: LogWanted {
            file: Some("logs/next.csv".into()),
            file_is_there: false,
            columns: vec![("PV".into(), "Jacket".into())],
            to_fill_in: vec!["tested by".into()],
        },
        site_cautions: vec!["The relief path is lined up.".into()],
        program: "asleft",
    })
}

/// The pages of a plan in one line of plain spaces.
fn pages(plan: &Plan) -> String {
    let pages = document::plan_page_texts(plan, &Templates::default()).expect("typeset");
    let text = pages.join(" ").replace(['\u{a0}', '\u{202f}'], " ");
    text.split_whitespace().collect::<Vec<_>>().join(" ")
}

/// Pages of a PDF, as its page tree counts them.
fn page_count(pdf: &[u8]) -> usize {
    let text = String::from_utf8_lossy(pdf);
    let tree = text.split("/Type/Pages").nth(1).expect("a page tree");
    let count = tree.split("/Count ").nth(1).expect("a count");
    let digits: String = count.chars().take_while(char::is_ascii_digit).collect();
    digits.parse().expect("a number")
}

fn json(run: &Run) -> Value {
    serde_json::from_str(&run.out).expect("one JSON document")
}

fn the_demo_in(folder: &Path) -> String {
    let job = folder.join("demo");
    copy_folder(&root().join("demo_data"), &job);
    if job.join("records").exists() {
        fs::remove_dir_all(job.join("records")).expect("removed");
    }
    job.to_str().expect("a plain path").to_owned()
}

#[test]
fn every_figure_of_a_plan_stands_on_its_pages() {
    let record = synthetic::signed();
    let plan = plan_from(&[&record]);
    let text = pages(&plan);
    let basis = plan.basis.as_ref().expect("a record");
    // The record has K = 0.75 %/%, τ = 95 s, θ = 20 s, σ = 0.05 %, a PV range of 150 degC: 20 σ/K = 1.33 %, on the
    // grid of halves 1.5 %; K · 1.5 % = 1.125 % = 1.69 degC; 1.125/0.05 = 22.5; θ + 4 τ = 400 s, on the clock 7 min; five
    // such watches are 35 min; τ/20 = 4.75 s, which trends offer as 3 s; limits 1.5 and 2 times 1.69.
    for words in [
        "LM-TIC-1_plan".to_owned(),
        format!("LM-TIC-1 revision {} of {}", basis.revision, basis.date),
        "Gain K 0.75 %/% (1.12 °C/%), τ 95 s, θ 20 s, noise σ 0.05 % of span (0.075 °C)".to_owned(),
        "1.5 % of OP: 20 σ/|K| comes to 1.33 %".to_owned(),
        "1.69 °C (1.1 % of span, 22 times its noise)".to_owned(),
        "Four moves of OP, 1.5 % each. Watch 7 min after each move, log every 3 s; 35 min in all."
            .to_owned(),
        "1 up start + 1.5 % start + 1.69 °C 7 min".to_owned(),
        "3 on down start − 1.5 % start − 1.69 °C 7 min".to_owned(),
        "PV high, °C start + 2.5 °C start + 3.4 °C".to_owned(),
        "OP low, % – start − 1.5 %".to_owned(),
        "OP between 6.5 and 93.5 %, PV between 10.9 and 139.1 °C".to_owned(),
        "Controller gain, %/°C 2".to_owned(),
        "logs/next.csv, as the schedule says".to_owned(),
        "PV \"Jacket\"".to_owned(),
        "Into the schedule: tested by".to_owned(),
        "The relief path is lined up.".to_owned(),
        "Page 1 of 2".to_owned(),
        "Page 2 of 2".to_owned(),
    ] {
        assert!(text.contains(&words), "\"{words}\" is not in: {text}");
    }
    for caution in &plan.cautions {
        assert!(text.contains(&caution.text), "{}: {text}", caution.text);
    }
    for signature in &plan.document.signatures {
        assert!(text.contains(&signature.role), "{}", signature.role);
    }
    for procedure in &plan.document.procedures {
        assert!(text.contains(&procedure.reference), "{procedure:?}");
    }
}

#[test]
fn without_a_record_the_fields_are_left_to_operations() {
    let plan = plan_from(&[]);
    assert_eq!(
        plan.size,
        Size::ToAgree {
            because: NotProposed::NoRecord
        }
    );
    assert!(plan.moves.iter().all(|m| m.op_offset_percent.is_none()));
    assert_eq!((plan.times, plan.limits), (None, None));
    let text = pages(&plan);
    assert!(
        text.contains("Size of the moves: agree with operations."),
        "{text}"
    );
    // Each limit with a proposal of its own asks for it: PV twice each way, OP once each way.
    assert_eq!(text.matches("agree with operations").count(), 7, "{text}");
}

#[test]
fn a_record_without_a_model_gives_way_to_the_one_before_it() {
    let older = synthetic::signed();
    let mut newer = older.clone();
    newer.document.revision = "1".into();
    newer.model = None;
    let plan = plan_from(&[&newer, &older]);
    assert_eq!(plan.basis.as_ref().expect("the older").revision, "0");
    assert_eq!(
        plan.set_aside,
        ["LM-TIC-1 revision 1: it holds no process model"]
    );
    assert!(pages(&plan).contains("LM-TIC-1 revision 1: it holds no process model."));
    let alone = plan_from(&[&newer]);
    assert_eq!(
        alone.size,
        Size::ToAgree {
            because: NotProposed::NoModel
        }
    );
}

#[test]
fn figures_in_percent_of_another_range_are_not_used() {
    let mut record = synthetic::signed();
    record.control_loop.pv.high += 50.0;
    let plan = plan_from(&[&record]);
    assert!(plan.basis.is_none());
    assert!(
        plan.set_aside[0].contains("its PV range is"),
        "{:?}",
        plan.set_aside
    );
    let mut record = synthetic::signed();
    record.control_loop.op.unit = "mA".into();
    assert!(plan_from(&[&record]).basis.is_none());
}

#[test]
fn the_dead_band_and_the_sign_of_the_record_are_minded() {
    let mut record = synthetic::signed();
    record.test.sigma_percent = Some(0.001);
    record.valve.as_mut().expect("assessed").dead_band_percent = 1.1;
    let Size::Proposed {
        op_percent,
        decided_by,
        ..
    } = plan_from(&[&record]).size
    else {
        panic!("proposed");
    };
    // Three dead bands are 3.3 %, on the grid of halves 3.5 %.
    assert_eq!((op_percent, decided_by), (3.5, DecidedBy::DeadBand));

    let model = record.model.as_mut().expect("a model");
    model.fit.gain.value = -model.fit.gain.value;
    let plan = plan_from(&[&record]);
    assert!(
        plan.cautions.iter().any(|c| c.about == "sign"),
        "{:?}",
        plan.cautions
    );
}

#[test]
fn the_demo_is_planned_without_a_record() {
    let folder = folder();
    let job = the_demo_in(folder.path());
    let run = asleft(&["plan", &job, "--json"]).ends_with(0);
    let report = json(&run);
    let plans = folder.path().join("demo/plan");
    let names = names_in(&plans);
    assert_eq!(names.len(), 12);
    for (entry, loops) in report["loops"].as_array().expect("loops").iter().zip(1..) {
        assert_eq!(entry["outcome"], "planned", "loop {loops}");
        assert_eq!(entry["plan"]["size"], "to-agree");
        assert_eq!(entry["plan"]["because"], "no-record");
        let name = entry["pdf"].as_str().expect("a name");
        assert!(name.ends_with("_plan.pdf") && names.contains(&name.to_owned()));
        let pdf = fs::read(plans.join(name)).expect("there");
        assert_eq!(page_count(&pdf), 2, "{name}");
    }
    // One loop alone, elsewhere, with the same bytes; nothing is said.
    let out = folder.path().join("one");
    let typed = out.to_str().expect("plain");
    let run = asleft(&["plan", &job, "--loop", "LIC-204", "--out", typed, "--quiet"]).ends_with(0);
    assert!(
        run.out.is_empty() && run.err.is_empty(),
        "{}{}",
        run.out,
        run.err
    );
    assert_eq!(names_in(&out), ["LM-200-IC-LIC-204_plan.pdf"]);
    let bytes = |at: &Path| fs::read(at.join("LM-200-IC-LIC-204_plan.pdf")).expect("there");
    assert!(bytes(&out) == bytes(&plans));
    for path in [
        folder.path().to_str().expect("plain"),
        env!("CARGO_MANIFEST_DIR"),
    ] {
        let pdf = bytes(&out);
        let found = pdf
            .windows(path.len())
            .any(|window| window == path.as_bytes());
        assert!(!found, "a plan names no path");
    }
    // It wrote its plans and nothing else.
    assert!(!folder.path().join("demo/records").exists());
}

fn process() -> ProcessModel {
    ProcessModel::of_kind(Kind::FirstOrder, 0.8, 90.0, 0.0, 15.0)
}

/// A job whose loop TIC-7 was tested and recorded, and which is now to be tested again.
fn tested_before() -> JobFolder {
    let test = steps(process(), &[40.0, 46.0, 40.0, 34.0, 40.0], 500.0, 1.0, 0.05);
    let log = test.csv(["Time", "PV", "OP", "SP"], span(0.0, 100.0), morning(3));
    let mut job = JobFolder::new()
        .with("logs/jacket.csv", log)
        .and_loop("TIC-7", &[("test log", "logs/jacket.csv")]);
    asleft(&["record", "--no-dossier", job.typed()]).ends_with(0);
    job.set(
        "TIC-7",
        &[("test log", ""), ("found p", ""), ("found i", "")],
    );
    job
}

fn plan_json(job: &JobFolder) -> Value {
    json(&asleft(&["plan", job.typed(), "--json"]).ends_with(0))["loops"][0].clone()
}

#[test]
fn the_figures_are_those_of_the_earlier_record() {
    let job = tested_before();
    let record = job.record("TIC-7");
    let model = &record.model.as_ref().expect("a model").fit;
    let sigma = record.test.sigma_percent.expect("assessed");
    let entry = plan_json(&job);
    let plan = &entry["plan"];
    assert_eq!(plan["number"], "HM-TIC-7_plan");
    assert_eq!(plan["basis"]["number"], "HM-TIC-7");
    // ΔOP = 20 σ/|K|, on the grid of halves.
    let wanted = 20.0 * sigma / model.gain.value.abs();
    assert!(
        (wanted - 1.25).abs() < 0.25,
        "σ is about 0.05 and K 0.8: {wanted}"
    );
    let op = plan["op_percent"].as_f64().expect("proposed");
    assert!(
        op >= wanted && op < wanted + 0.5 + 1e-9 && (2.0 * op).fract() == 0.0,
        "{op} {wanted}"
    );
    let pv = plan["pv_percent"].as_f64().expect("proposed");
    assert!((pv - model.gain.value.abs() * op).abs() < 1e-12);
    let signal = plan["signal_to_noise"].as_f64().expect("proposed");
    assert!((signal - pv / sigma).abs() < 1e-9 && signal >= 20.0);
    // θ + 4 τ of the fit, rounded up by less than the half minute of the clock.
    let lag = model.time_constant_s.expect("a lag").value;
    let settles = model.dead_time_s.value + 4.0 * lag;
    let watch = plan["times"]["watch_s"].as_f64().expect("known");
    assert!(
        watch >= settles && watch < settles + 30.0,
        "{watch} {settles}"
    );
    assert_eq!(plan["times"]["total_s"].as_f64(), Some(5.0 * watch));
    let interval = plan["log_interval_s"].as_f64().expect("known");
    assert!(
        interval <= lag / 20.0 && interval > lag / 60.0,
        "{interval}"
    );
    let offsets: Vec<f64> = plan["moves"]
        .as_array()
        .expect("moves")
        .iter()
        .map(|step| step["op_offset_percent"].as_f64().expect("known"))
        .collect();
    assert_eq!(offsets, [op, 0.0, -op, 0.0]);

    // Records that lie elsewhere are named.
    let moved = job.path().join("from 2019");
    fs::rename(job.path().join("records"), &moved).expect("moved");
    assert_eq!(plan_json(&job)["plan"]["because"], "no-record");
    let elsewhere = moved.to_str().expect("plain");
    let run = asleft(&["plan", job.typed(), "--records", elsewhere, "--json"]).ends_with(0);
    assert_eq!(json(&run)["loops"][0]["plan"], *plan);
}

#[test]
fn the_latest_record_counts() {
    let mut job = tested_before();
    job.set(
        "TIC-7",
        &[
            ("test log", "logs/jacket.csv"),
            ("found p", "0.5"),
            ("revision", "1"),
            ("date", "2026-03-25"),
        ],
    );
    asleft(&["record", "--no-dossier", job.typed()]).ends_with(0);
    assert_eq!(names_in(&job.path().join("records")).len(), 5);
    assert_eq!(plan_json(&job)["plan"]["basis"]["revision"], "1");
}

#[test]
fn a_record_whose_seal_does_not_hold_is_not_used() {
    let job = tested_before();
    let path = job.path().join("records/HM-TIC-7_rev0.json");
    let text = fs::read_to_string(&path).expect("there");
    let sigma = job.record("TIC-7").test.sigma_percent.expect("assessed");
    let changed = text.replace(
        &format!("\"sigma_percent\": {sigma}"),
        "\"sigma_percent\": 0.5",
    );
    assert_ne!(text, changed);
    fs::write(&path, changed).expect("written");
    let entry = plan_json(&job);
    assert_eq!(entry["plan"]["size"], "to-agree");
    assert_eq!(
        entry["plan"]["set_aside"][0],
        "HM-TIC-7_rev0.json: was changed after it was sealed"
    );
    let run = asleft(&["plan", job.typed()]).ends_with(0);
    let said = run.out.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(
        said.contains("was changed after it was sealed; the plan does not rest on it"),
        "{said}"
    );
    // What is no JSON at all is told as well, and keeps no loop from its plan.
    fs::write(&path, "{").expect("written");
    let run = asleft(&["plan", job.typed()]).ends_with(0);
    assert!(run.out.contains("is not the JSON expected"), "{}", run.out);
}

#[test]
fn nothing_but_an_untouched_plan_is_written_over() {
    let job = JobFolder::new()
        .and_loop("TIC-1", &[])
        .and_loop("TIC-2", &[]);
    asleft(&["plan", job.typed()]).ends_with(0);
    let path = job.path().join("plan/HM-TIC-1_plan.pdf");
    let first = fs::read(&path).expect("there");
    asleft(&["plan", job.typed()]).ends_with(0);
    assert!(fs::read(&path).expect("there") == first, "the same bytes");
    let noted = [first.as_slice(), b"% 14:05 PV 71.2\n"].concat();
    for (bytes, words) in [
        (noted.as_slice(), "notes in it"),
        (b"mine", "is no plan of this program"),
    ] {
        fs::write(&path, bytes).expect("written");
        let run = asleft(&["plan", job.typed()]).ends_with(3);
        let said = run.out.split_whitespace().collect::<Vec<_>>().join(" ");
        assert!(
            said.contains(words) && said.contains("1 plan; 1 loop failed."),
            "{said}"
        );
        let run = asleft(&["plan", job.typed(), "--loop", "TIC-1", "--quiet"]).ends_with(1);
        assert!(
            run.out.is_empty() && run.err.contains("TIC-1"),
            "{}",
            run.err
        );
        assert_eq!(fs::read(&path).expect("still there"), bytes);
    }
}

#[test]
fn a_new_job_starts_with_its_plan() {
    let folder = folder();
    let job = folder.path().join("unit-7");
    let typed = job.to_str().expect("plain");
    asleft(&["new", typed]).ends_with(0);
    // The example replaced by a loop of one's own, of which nothing is known but what it is.
    fs::remove_file(job.join("loops.xlsx")).expect("removed");
    let blank = [("found p", ""), ("found i", ""), ("aim", "")];
    let schedule = JobFolder::new().and_loop("TIC-7", &blank);
    fs::copy(schedule.path().join("loops.csv"), job.join("loops.csv")).expect("copied");
    let run = asleft(&["plan", typed]).ends_with(0);
    assert!(
        run.out
            .contains("TIC-7     planned        IC-TIC-7_plan.pdf"),
        "{}",
        run.out
    );
    assert_eq!(names_in(&job.join("plan")), ["IC-TIC-7_plan.pdf"]);
    // For a record the same job lacks what the plan asks to be brought back.
    let run = asleft(&["check", typed]).ends_with(1);
    assert!(
        run.out.contains("found p") && run.out.contains("test log"),
        "{}",
        run.out
    );
}

#[test]
fn a_broken_job_is_told_as_by_check() {
    let broken = root().join("tests/broken");
    for (name, code) in [
        ("job_unknown_key", 1),
        ("job_without_procedure", 1),
        ("schedule_heading_missing", 1),
        ("schedule_unknown_word", 1),
        ("schedule_duplicate_tag", 1),
        // What is wrong with a log does not matter before there is one.
        ("schedule_log_missing", 0),
        ("log_op_never_moves", 0),
    ] {
        let folder = folder();
        let job = folder.path().join("job");
        copy_folder(&broken.join("sound"), &job);
        copy_folder(&broken.join(name), &job);
        let typed = job.to_str().expect("plain");
        let run = asleft(&["plan", typed]).ends_with(code);
        let errors = |run: &Run| -> Vec<String> {
            let text = format!("{}{}", run.out, run.err);
            text.lines()
                .map(|line| line.trim().to_owned())
                .filter(|line| line.starts_with("error"))
                .collect()
        };
        if code == 0 {
            assert_eq!(errors(&run), Vec::<String>::new(), "{name}");
        } else {
            let check = asleft(&["check", typed]);
            assert!(!errors(&run).is_empty(), "{name}");
            assert_eq!(errors(&run), errors(&check), "{name}");
        }
    }
}

#[test]
fn a_bad_row_leaves_the_others_their_plans() {
    let job = JobFolder::new()
        .and_loop("TIC-1", &[("scan s", "often")])
        .and_loop("TIC-2", &[("safety", "yes")]);
    let run = asleft(&["plan", job.typed(), "--json"]).ends_with(3);
    let report = json(&run);
    assert_eq!(report["loops"][0]["outcome"], "failed");
    // A protective loop gets its sheet, and the sheet says that there is no test.
    assert_eq!(report["loops"][1]["plan"]["because"], "protective");
    assert_eq!(report["loops"][1]["plan"]["moves"], serde_json::json!([]));
    let pdf = fs::read(job.path().join("plan/HM-TIC-2_plan.pdf")).expect("there");
    assert_eq!(page_count(&pdf), 1);
    let run = asleft(&["plan", job.typed(), "--loop", "TIC-3"]).ends_with(1);
    assert!(run.err.contains("there is no loop TIC-3"), "{}", run.err);
}

#[test]
fn two_plans_never_share_a_file() {
    let names =
        ["LM/1_plan", "lm-1_plan"].map(|number| FileNames::of_plan(number).expect("a name"));
    let labelled = [("A", &names[0]), ("B", &names[1])];
    assert_eq!(archive::clashes(labelled).len(), 2);
}

//! Writing records, reading them back, and never losing what was issued.

use crate::support::{folder, names_in};
use crate::synthetic::{sealed, signed, withheld};
use asleft::archive::{self, Dossier, Standing};
use asleft::notice::{Problem, Severity};
use asleft::record::{Record, Status};
use asleft::trace::Samples;
use std::fs;
use std::path::Path;

/// Looks and, where it may, writes: what a run does with one record.
fn file(folder: &Path, record: &Record, pdf: &[u8]) -> Result<Standing<Record>, Problem> {
    let standing = archive::look(folder, record)?;
    if let Standing::Free(slot) = &standing {
        slot.clone().store(&archive::json_text(record), pdf)?;
    }
    Ok(standing)
}

fn refused(folder: &Path, record: &Record) -> Problem {
    file(folder, record, b"refused").expect_err("what was issued stays")
}

#[test]
fn a_record_comes_back_from_its_json_as_it_went() {
    for record in [signed(), withheld()] {
        let folder = folder();
        file(folder.path(), &record, b"%PDF").expect("written");
        let json = format!("{}_rev0.json", record.document.number);
        let read_back = archive::read_record(&folder.path().join(&json)).expect("a record");
        let mut expected = record.clone();
        for log in &mut expected.logs {
            log.data = Samples::default(); // not in the JSON
        }
        assert_eq!(read_back, expected);

        let text = fs::read_to_string(folder.path().join(&json)).expect("text");
        assert!(
            text.starts_with(
                "{\n \"schema\": \"asleft/record/1\",\n \"document\": {\n  \"number\""
            )
        );
        assert!(text.ends_with("\n}\n"));
        let value: serde_json::Value = serde_json::from_str(&text).expect("JSON");
        assert!(archive::seal_holds(&value));
    }
}

#[test]
fn a_figure_that_is_no_number_is_not_sealed() {
    for spoil in [
        (|record: &mut Record| record.test.pv_tested[0] = f64::NAN) as fn(&mut Record),
        |record| record.test.sigma_percent = Some(f64::INFINITY),
        |record| {
            let fit = record.steps[0].fit.as_mut().expect("a fit");
            fit.rmse_percent = f64::NAN;
        },
    ] {
        let mut record = signed();
        spoil(&mut record);
        let problem = archive::seal(record).expect_err("JSON has no such number");
        assert!(problem.message.contains("TIC-1"), "{problem}");
    }
}

#[test]
fn sealing_keeps_the_samples() {
    assert_eq!(signed().logs[0].data.t_s.len(), 5);
}

#[test]
fn a_draft_or_withheld_record_is_replaced() {
    let folder = folder();
    let mut record = withheld();
    for status in [Status::Draft, Status::Withheld, Status::ForSignature] {
        record.document.status = status;
        record = sealed(record);
        let pdf = format!("{status:?}");
        let standing = file(folder.path(), &record, pdf.as_bytes()).expect("replaced");
        assert!(matches!(standing, Standing::Free(_)));
        let written = fs::read_to_string(folder.path().join("LM-TIC-2_rev0.pdf")).expect("there");
        assert_eq!(written, pdf);
    }
    assert_eq!(
        names_in(folder.path()),
        ["LM-TIC-2_rev0.json", "LM-TIC-2_rev0.pdf"],
        "nothing unfinished is left"
    );
}

#[test]
fn an_issued_record_is_left_as_it_is() {
    let folder = folder();
    let record = signed();
    file(folder.path(), &record, b"issued").expect("written");
    let Standing::Issued { kept, notice } =
        file(folder.path(), &record, b"again").expect("the same inputs")
    else {
        panic!("it was issued");
    };
    assert_eq!(notice, None);
    assert_eq!(kept.provenance, record.provenance);
    assert_eq!(
        kept.logs[0].data.t_s, record.logs[0].data.t_s,
        "with its samples"
    );
    let pdf = fs::read(folder.path().join("LM-TIC-1_rev0.pdf")).expect("there");
    assert_eq!(pdf, b"issued");
}

#[test]
fn other_inputs_ask_for_a_new_revision_and_say_what_differs() {
    let folder = folder();
    let record = signed();
    file(folder.path(), &record, b"issued").expect("written");

    let mut changed = record.clone();
    let left = changed.settings.as_left.as_mut().expect("as left");
    left.native.p = 1.5;
    left.predicted.as_mut().expect("predicted").load.curve.pv = vec![0.0, 9.9];
    changed.logs[0].sha256 = archive::sha256(b"another");
    let problem = refused(folder.path(), &sealed(changed));
    assert!(problem.message.contains("differs"), "{problem}");
    for line in [
        "- logs, no. 1, sha256: \"",
        "- settings, as left, native, p: 1.25 in the issued record, now 1.5",
        "- settings, as left, predicted, load, curve, pv: 2 entries",
    ] {
        assert!(problem.message.contains(line), "{line}\n{problem}");
    }
    assert!(problem.hint.expect("advice").contains("new revision"));

    // A newer program is no excuse where the inputs differ too.
    let mut changed = record.clone();
    changed.control_loop.scan_s = 1.0;
    changed.provenance.program = "asleft 9.0.0".into();
    let problem = refused(folder.path(), &sealed(changed));
    assert!(problem.message.contains("loop, scan s: 0.5"), "{problem}");

    // The new revision has files of its own.
    let mut revised = record.clone();
    revised.document.revision = "1".into();
    file(folder.path(), &sealed(revised), b"revised").expect("written");
    let pdf = fs::read(folder.path().join("LM-TIC-1_rev0.pdf")).expect("there");
    assert_eq!(pdf, b"issued");
    assert_eq!(names_in(folder.path()).len(), 4);
}

#[test]
fn many_differences_are_counted() {
    let folder = folder();
    let record = signed();
    file(folder.path(), &record, b"issued").expect("written");
    let mut changed = record.clone();
    changed.control_loop.pv.high = 200.0;
    let document = &mut changed.document;
    for field in [&mut document.owner, &mut document.plant] {
        field.push('!');
    }
    document.creator = None;
    document.client = Some("C".into());
    document.area = None;
    changed.test.op_tested = [1.0, 2.0];
    let message = refused(folder.path(), &sealed(changed)).message;
    assert_eq!(message.matches("\n- ").count(), 6, "{message}");
    assert!(message.ends_with("- and 2 more"), "{message}");
    assert!(
        message.contains("client: nothing in the issued record, now \"C\""),
        "{message}"
    );
}

#[test]
fn a_newer_program_alone_is_no_reason() {
    let folder = folder();
    let record = signed();
    file(folder.path(), &record, b"issued").expect("written");

    let mut newer = record.clone();
    newer.provenance.program = "asleft 0.2.0".into();
    let Standing::Issued { kept, notice } =
        file(folder.path(), &sealed(newer.clone()), b"newer").expect("the same inputs")
    else {
        panic!("it was issued");
    };
    assert_eq!((kept.provenance, notice), (record.provenance.clone(), None));

    newer
        .design
        .as_mut()
        .expect("a design")
        .closed_loop_time_constant_s = 61.0;
    let Standing::Issued { kept, notice } =
        file(folder.path(), &sealed(newer.clone()), b"newer").expect("the same inputs")
    else {
        panic!("it was issued");
    };
    assert_eq!(kept.provenance, record.provenance);
    let notice = notice.expect("other figures are told");
    assert_eq!(notice.severity, Severity::Warning);
    assert!(notice.message.contains("asleft 0.1.0"), "{notice}");
    assert!(
        notice
            .message
            .contains("closed loop time constant s: 60.0 in the issued record, now 61.0"),
        "{notice}"
    );

    // The same program that comes to other figures was given something else.
    newer.provenance.program = record.provenance.program.clone();
    refused(folder.path(), &sealed(newer));
}

#[test]
fn a_run_that_died_before_the_pdf_is_completed() {
    let folder = folder();
    let record = signed();
    file(folder.path(), &record, b"issued").expect("written");
    let pdf = folder.path().join("LM-TIC-1_rev0.pdf");
    fs::remove_file(&pdf).expect("removed");

    let mut changed = record.clone();
    changed.document.plant.push('!');
    let problem = refused(folder.path(), &sealed(changed));
    assert!(
        problem.message.contains("LM-TIC-1_rev0.pdf, are missing"),
        "{problem}"
    );

    file(folder.path(), &record, b"issued").expect("completed");
    assert_eq!(fs::read(&pdf).expect("there"), b"issued");
}

#[test]
fn what_cannot_be_judged_is_not_overwritten() {
    let folder = folder();
    let record = withheld();
    file(folder.path(), &record, b"withheld").expect("written");
    let json = folder.path().join("LM-TIC-2_rev0.json");
    let text = fs::read_to_string(&json).expect("there");

    fs::remove_file(&json).expect("removed");
    assert!(
        refused(folder.path(), &record)
            .message
            .contains("is missing")
    );

    fs::write(&json, &text[..text.len() / 2]).expect("written");
    let problem = refused(folder.path(), &record);
    assert!(
        problem.to_string().contains("LM-TIC-2_rev0.json, line "),
        "{problem}"
    );
    assert!(problem.hint.is_some());

    fs::write(&json, text.replace("Larkmoor Solvents", "Someone else")).expect("written");
    assert!(
        refused(folder.path(), &record)
            .message
            .contains("changed after it was sealed")
    );

    fs::write(&json, "{\"schema\": \"something/else\"}").expect("written");
    assert!(
        refused(folder.path(), &record)
            .message
            .contains("another document")
    );

    fs::write(&json, &text).expect("written");
    let mut other = record.clone();
    other.control_loop.tag = "TIC-3".into();
    assert!(
        refused(folder.path(), &sealed(other))
            .message
            .contains("the record of TIC-2")
    );
    let pdf = fs::read(folder.path().join("LM-TIC-2_rev0.pdf")).expect("there");
    assert_eq!(pdf, b"withheld");
}

#[test]
fn the_dossier_keeps_the_same_rule() {
    let folder = folder();
    let record = signed();
    let mut title = record.document.clone();
    title.number = "LM-DOSSIER".into();
    let bind = |records: &[Record], missing: &[&str]| {
        let missing: Vec<String> = missing.iter().map(|tag| (*tag).to_owned()).collect();
        Dossier::new(title.clone(), records, &missing, "asleft 0.1.0")
    };
    let store = |dossier: &Dossier, pdf: &[u8]| {
        let standing = archive::look_for_dossier(folder.path(), dossier)?;
        if let Standing::Free(slot) = &standing {
            slot.clone().store(&archive::json_text(dossier), pdf)?;
        }
        Ok::<_, Problem>(standing)
    };

    let draft = bind(&[record.clone(), withheld()], &[]);
    assert_eq!(draft.document.status, Status::Draft);
    assert_eq!(
        bind(std::slice::from_ref(&record), &["TIC-9"])
            .document
            .status,
        Status::Draft
    );
    store(&draft, b"draft").expect("written");

    let issued = bind(std::slice::from_ref(&record), &[]);
    assert_eq!(issued.document.status, Status::ForSignature);
    assert!(matches!(store(&issued, b"issued"), Ok(Standing::Free(_))));
    assert!(matches!(
        store(&issued, b"again"),
        Ok(Standing::Issued { notice: None, .. })
    ));

    let mut revised = record.clone();
    revised.document.revision = "1".into();
    let problem = store(&bind(&[sealed(revised)], &[]), b"revised").expect_err("issued");
    assert!(
        problem
            .message
            .contains("records, no. 1, revision: \"0\" in the issued record, now \"1\""),
        "{problem}"
    );
    let pdf = fs::read(folder.path().join("LM-DOSSIER_rev0.pdf")).expect("there");
    assert_eq!(pdf, b"issued");
}

#[test]
fn the_register_is_made_anew() {
    let folder = folder();
    for text in ["first", "second"] {
        archive::write_register(folder.path(), text.as_bytes()).expect("written");
    }
    let register = fs::read_to_string(folder.path().join(archive::REGISTER_FILE));
    assert_eq!(register.expect("there"), "second");
    assert_eq!(names_in(folder.path()), ["register.csv"]);
}

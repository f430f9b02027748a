//! What a dossier must not leave unsaid: loops without a record, loops that are not stable, settings
//! that were entered though nothing was recommended, protective loops.

use super::sample;
use super::{DossierInput, DossierRecord, Templates, dossier_page_texts};
use crate::predict::Margins;
use crate::record::{OpenCode, OpenItem, Record, Status};

fn text_of(records: &[Record], input: &DossierInput) -> String {
    let figures = sample::figures();
    let parts: Vec<DossierRecord> = records
        .iter()
        .map(|record| DossierRecord {
            record,
            figures: &figures,
            attachments: &[],
        })
        .collect();
    let pages =
        dossier_page_texts(input, &parts, &Templates::default()).expect("a dossier is typeset");
    let words = pages.join(" ").replace(['\u{a0}', '\u{202f}'], " ");
    words.split_whitespace().collect::<Vec<_>>().join(" ")
}

#[test]
fn a_loop_without_a_record_makes_the_dossier_a_draft_and_is_named() {
    let mut input = sample::dossier_input();
    let signed = sample::full();
    assert_eq!(signed.document.status, Status::ForSignature);
    let complete = text_of(std::slice::from_ref(&signed), &input);
    assert!(!complete.contains("Draft"), "{complete}");
    input.not_recorded = vec!["FIC-999".to_owned()];
    let text = text_of(&[signed], &input);
    for said in [
        "Draft: 1 loop is without a record",
        "1 of 2 loops is for signature",
        "Not recorded 1 FIC-999",
        "Without a record: FIC-999.",
    ] {
        assert!(text.contains(said), "{said:?} is not in: {text}");
    }
}

#[test]
fn operators_are_told_of_a_loop_that_is_not_stable() {
    let mut record = sample::full();
    record.trial = None;
    record.document.status = Status::Draft;
    record.document.open_items = vec![OpenItem {
        code: OpenCode::AsLeftMargins,
        text: "With the settings as left the loop is not stable.".to_owned(),
    }];
    let left = record.settings.as_left.as_mut().expect("settings as left");
    left.worst_margins = Some(Margins::unstable());
    let text = text_of(&[record], &sample::dossier_input());
    for said in [
        "by the test it may swing without end",
        "Swings that do not die away.",
        "Do not leave it unwatched in automatic",
    ] {
        assert!(text.contains(said), "{said:?} is not in: {text}");
    }
}

#[test]
fn settings_entered_in_a_withheld_loop_are_told_and_not_recommended() {
    let mut record = sample::withheld();
    let mut left = record.settings.as_found.clone();
    left.native.p = 77.0;
    record.settings.as_left = Some(left);
    let text = text_of(&[record], &sample::dossier_input());
    for said in [
        "not recommended",
        "Changed, though nothing was recommended for it.",
        "Do not put it in automatic before the engineer in charge agrees.",
    ] {
        assert!(text.contains(said), "{said:?} is not in: {text}");
    }
    assert!(!text.contains("Settings to enter"), "{text}");
}

#[test]
fn a_protective_loop_is_entered_under_its_procedure_alone() {
    let mut record = sample::draft();
    record.control_loop.safety = true;
    record.control_loop.safety_procedure = Some("LM-SIS-007".to_owned());
    let text = text_of(&[record], &sample::dossier_input());
    let page = text
        .split("Settings to enter")
        .last()
        .expect("the page of settings to enter");
    assert!(
        page.replace("LM- ", "LM-")
            .contains("Protective function: only under LM-SIS-007."),
        "{page}"
    );
}

#[test]
fn who_approves_is_found_however_the_role_is_written() {
    let mut input = sample::dossier_input();
    for signature in &mut input.signatures {
        signature.role = signature.role.to_lowercase();
    }
    let text = text_of(&[sample::full()], &input);
    assert!(text.contains("Approved by M. Osei"), "{text}");
}

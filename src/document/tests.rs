//! The pages of each kind of record, by their text.

use super::sample;
use super::*;
use crate::record::{OpenCode, OpenItem, Status};

/// Page texts with no-break spaces as plain ones and lines joined, to search in.
pub(super) fn searchable(texts: &[String]) -> Vec<String> {
    texts
        .iter()
        .map(|text| {
            text.replace(['\u{a0}', '\u{202f}'], " ")
                .split_whitespace()
                .collect::<Vec<_>>()
                .join(" ")
        })
        .collect()
}

pub(super) fn pages_of(record: &Record) -> Vec<String> {
    let texts = record_page_texts(record, &sample::figures(), &Templates::default())
        .expect("a record is typeset");
    searchable(&texts)
}

#[track_caller]
pub(super) fn holds(page: &str, texts: &[&str]) {
    for text in texts {
        assert!(page.contains(text), "\"{text}\" is not in: {page}");
    }
}

#[track_caller]
pub(super) fn lacks(pages: &[String], texts: &[&str]) {
    for (page, text) in pages.iter().flat_map(|p| texts.iter().map(move |t| (p, t))) {
        assert!(!page.contains(text), "\"{text}\" is in: {page}");
    }
}

#[test]
fn a_complete_record_has_its_six_pages() {
    let pages = pages_of(&sample::full());
    assert_eq!(pages.len(), 6);
    holds(
        &pages[0],
        &[
            "TIC-207 Column tray 12 temperature",
            "Legal owner Larkmoor Solvents",
            "Document number LM-200-IC-TIC-207",
            "Sheet 1 of 6",
            "For signature. Nothing is open. One request was not met and one reservation stands: see 3.",
            "Proportional band 38 % 42 %",
            "Integral time 1.20 min 3.60 min",
            "Controller gain Kc 2.63 %/% 2.38 %/%",
            "Integral time Ti 72 s 216 s",
            "Unchanged: derivative time off, action reverse, PV filter none.",
            "Entered 2026-03-13 by R. Tan, as recommended, rounded.",
            "PV answers 24 s after a move of OP and covers 63 % of its change in a further 4.1 min.",
            "Each percent of OP raises PV by 0.52 to 1.02 °C",
            "Settles after a set-point change not settled 9.3 min",
            "robustness needs 49 s, which is used (see 7).",
            "Accepted for operations",
            "Page 1 of 6",
        ],
    );
    holds(
        &pages[1],
        &[
            "5 Step tests",
            "Tested 2026-03-11 from 09:05 to 11:14, by A. Quill, witnessed by P. Lind. Conditions: Feed 11.8 to 12.3 t/h.",
            "1 09:35:00 42 47 98.0 101.8 0.76 3.17 19.0 4.5 accepted",
            "10:15:00 51 46 105.3 101.2 – – – – rejected",
            "drift 31 % (bound 20 %)",
            "accepted with reservation",
            "watched 2.6 τ (bound 3 τ)",
        ],
    );
    holds(
        &pages[2],
        &[
            "Second order: two time constants, with dead time. Fitted to steps 1, 2 and 4.",
            "0.93 %/% 0.65 to 1.27 %/% 0.95 %/%",
            "0.75 °C/% 0.52 to 1.02 °C/% 0.76 °C/%",
            "Time constant τ 3.30 min 2.90 to 3.80 min 3.30 min",
            "Valve dead band 0.40 % 0.30 to 0.60 %",
            "The intervals are widened",
        ],
    );
    holds(
        &pages[3],
        &[
            "Robustness decides",
            "Noise OP moved by noise, sd at most 0.5 % not assessed soft",
            "As found Recommended As left",
            "Proportional band 38 % 41.24 % 42 %",
            "Gain margin 1.75 3.91 3.91",
        ],
    );
    lacks(&pages[3..4], &["To enter"]);
    let rest = pages[4..].join(" ");
    holds(
        &rest,
        &[
            "Cohen-Coon 4.58 1.80 5.13",
            "unstable",
            "8 Closed-loop trial",
            "Agrees with the prediction.",
            "Overshoot 21 % 13 %",
            "SHA-256 0cea6ffe3c638173efe7d204c590f44ba9dea02f5760509e557af2897178f259",
            "13 871 rows",
            "LM-SP-021 Management of change",
            "Seal sha256:41366473b98a0c90c145f8356786a06f96ed4a10f98b39b452a31624b5e2cb50",
        ],
    );
}

#[test]
fn a_draft_shows_what_to_enter_and_says_draft_on_every_page() {
    let pages = pages_of(&sample::draft());
    for page in &pages {
        holds(page, &["Draft: not for hand-over, 2 items open"]);
    }
    holds(
        &pages[0],
        &[
            "Draft. Two items are open; one request was not met and one reservation stands: see 3.",
            "1 What is to change",
            "As found To enter",
            "Open The closed-loop trial is missing.",
        ],
    );
    lacks(
        &pages,
        &["As left", "Closed-loop trial Logged", "Entered 2026"],
    );
    holds(&pages[2], &["Valve dead band not assessable"]);
}

#[test]
fn a_withheld_record_recommends_nothing_anywhere() {
    let pages = pages_of(&sample::withheld());
    assert_eq!(pages.len(), 2);
    for page in &pages {
        holds(page, &["Withheld: no settings are recommended"]);
    }
    holds(
        &pages[0],
        &[
            "Withheld. No step of the test can be used. The loop stays as found.",
            "Proportional band 38 %",
            "Nothing was entered.",
            "Steps 1 to 3 PV changed by 1.5 times its noise; at least 5 times is needed.",
            "Step 4 OP stood at the end of its range (100 %).",
            "Move OP by at least 7 %, once up and once down.",
            "Tested by A. Quill",
        ],
    );
    holds(&pages[1], &["Cautions", "Basis"]);
    lacks(
        &pages,
        &[
            "To enter",
            "Recommended",
            "Published rules",
            "41.24",
            "As left",
        ],
    );
}

#[test]
fn settings_entered_against_a_withheld_record_are_told() {
    let mut record = sample::full();
    record.document.status = Status::Withheld;
    record.document.open_items = vec![OpenItem {
        code: OpenCode::ActionAgainstProcess,
        text: "The controller is set to direct action; the process needs reverse".to_owned(),
    }];
    record.settings.recommended = None;
    record.settings.as_left_differs = None;
    record.design = None;
    record.trial = None;
    let pages = pages_of(&record);
    holds(
        &pages[0],
        &[
            "Entered, not recommended",
            "Proportional band 38 % 42 %",
            "Settings were entered all the same; they are not recommended.",
            "Action The controller is set to direct action; the process needs reverse.",
            "Process PV answers 24 s after a move of OP",
        ],
    );
}

#[test]
fn an_integrating_process_is_told_by_its_slope_and_the_controller_in_its_own_units() {
    let pages = pages_of(&sample::integrating());
    holds(
        &pages[0],
        &[
            "In the controller: series form",
            "Controller gain 5 %/% 0.72 %/%",
            "Reset rate 0.20 /min 0.026 /min",
            "Integral time Ti 300 s 2310 s",
            "Each percent of OP lowers PV by 0.120 %/min (0.108 to 0.132 %/min)",
            "PV answers 8.0 s after a move of OP.",
        ],
    );
    holds(
        &pages[1],
        &[
            "Tested 2026-03-11 for 129 min (the log bears no date)",
            "1 30.0 min 42 47 98.0 101.8 −0.120 8.0 4.5 accepted",
        ],
    );
    lacks(&pages[1..3], &["Time constant τ"]);
}

#[test]
fn a_record_is_a_pdf_with_its_attachments_and_the_same_bytes_twice() {
    let typeset = || {
        typeset_record(
            &sample::full(),
            &sample::figures(),
            &sample::attachments(),
            &Templates::default(),
        )
        .expect("a record is typeset")
    };
    let first = typeset();
    assert_eq!(first.warnings, [""; 0]);
    let pdf = first.pdf;
    assert!(pdf.starts_with(b"%PDF-1.7"));
    assert_eq!(pdf, typeset().pdf);
    let has = |needle: &[u8]| pdf.windows(needle.len()).any(|w| w == needle);
    for needle in [
        "record.json",
        "samples-test.csv",
        "schedule-row.csv",
        "<pdfaid:part>3</pdfaid:part>",
        "<pdfaid:conformance>A</pdfaid:conformance>",
        "<pdfuaid:part>1</pdfuaid:part>",
    ] {
        assert!(has(needle.as_bytes()), "{needle} is not in the PDF");
    }
}

#[test]
fn a_record_without_figures_or_model_is_shorter() {
    let mut record = sample::draft();
    record.model = None;
    record.design = None;
    record.settings.recommended = None;
    record.steps.clear();
    record.logs.clear();
    let texts = record_page_texts(&record, &[], &Templates::default())
        .expect("a record that has little is typeset");
    let pages = searchable(&texts);
    assert_eq!(pages.len(), 2);
    lacks(
        &pages,
        &["Step tests", "Process model", "What the loop", "Logs"],
    );
}

#[test]
fn the_letter_page_has_the_same_words() {
    let mut record = sample::full();
    record.document.page = PageSize::UsLetter;
    let letter = pages_of(&record);
    let a4 = pages_of(&sample::full());
    // Page 1 differs in nothing but the number of pages.
    let count = |pages: &[String]| format!("of {}", pages.len());
    assert_eq!(
        letter[0].replace(&count(&letter), "of n"),
        a4[0].replace(&count(&a4), "of n")
    );
}

/// A dossier of every kind of record, the outer loop of a cascade before its inner one.
pub(super) fn dossier_records() -> Vec<Record> {
    let mut outer = sample::full();
    outer.control_loop.tag = "TIC-202".to_owned();
    outer.control_loop.inner_loop = Some("FIC-203".to_owned());
    let mut inner = sample::full();
    inner.control_loop.tag = "FIC-203".to_owned();
    inner.control_loop.outer_loops = vec!["TIC-202".to_owned()];
    vec![
        outer,
        sample::draft(),
        inner,
        sample::withheld(),
        sample::integrating(),
    ]
}

#[test]
fn a_dossier_opens_with_what_each_reader_needs() {
    let records = dossier_records();
    let figures = sample::figures();
    let attachments = sample::attachments();
    let parts: Vec<DossierRecord> = records
        .iter()
        .map(|record| DossierRecord {
            record,
            figures: &figures,
            attachments: &attachments,
        })
        .collect();
    let templates = Templates::default();
    let texts = dossier_page_texts(&sample::dossier_input(), &parts, &templates)
        .expect("a dossier is typeset");
    let pages = searchable(&texts);
    let all = pages.len();
    holds(
        &pages[0],
        &[
            "Loops of Unit 200",
            "Draft: 1 loop is withheld and 1 is open",
            "3 of 5 loops are for signature; 1 loop is withheld and 1 is open.",
            "For signature 3 FIC-203, TIC-202, LIC-205",
            "FIC-203 Column tray 12 temperature",
            &format!("Sheet 1 of {all}"),
        ],
    );
    holds(
        &pages[1],
        &[
            "(outer of FIC-203) PB 38 % 1.20 min PB 42 % 3.60 min K 0.93, τ 3.3 min, τ₂ 45 s, θ 24 s 1.98",
            "integrates, K′ −0.12 /min, θ 8.0 s",
            "none: no usable step – Withheld",
            "TIC-212 The settings as left are not entered. The closed-loop trial is missing.",
        ],
    );
    let operations = &pages[2];
    holds(
        operations,
        &[
            "For operations",
            "No longer swings after a set-point change.",
            "9 minutes",
            "Do not take it out of cascade while TIC-202 is in automatic.",
            "Not changed yet: works as before until the new settings are entered.",
        ],
    );
    lacks(
        std::slice::from_ref(operations),
        &["τ", "θ", "Ms", "Kc", "TIC-210"],
    );
    let enter = &pages[3];
    holds(
        enter,
        &[
            "Settings to enter",
            "TIC-212 Standard form",
            "Proportional band 38 % 41.24 %",
            "Integral time 1.20 min 3.638 min",
            "under LM-SP-014 and LM-SP-021",
        ],
    );
    lacks(std::slice::from_ref(enter), &["TIC-210", "TIC-207"]);
    // Inner loop first, each record with its own number and sheets.
    holds(
        &pages[4],
        &[
            "FIC-203 Column",
            "Page 1 of 6",
            &format!("LM-200-IC-DOSSIER, sheet 5 of {all}"),
            "Register of loops: sheet 2",
        ],
    );
    holds(&pages[10], &["TIC-202 Column", "Page 1 of 6"]);

    let typeset = typeset_dossier(&sample::dossier_input(), &parts, &templates)
        .expect("a dossier is typeset");
    assert_eq!(typeset.warnings, [""; 0]);
    let pdf = typeset.pdf;
    let has = |needle: &[u8]| pdf.windows(needle.len()).any(|w| w == needle);
    assert!(has(b"FIC-203-record.json") && has(b"TIC-202-record.json"));
}

#[test]
fn a_dossier_of_complete_loops_has_no_page_to_enter() {
    let record = sample::full();
    let figures = sample::figures();
    let parts = [DossierRecord {
        record: &record,
        figures: &figures,
        attachments: &[],
    }];
    let texts = dossier_page_texts(&sample::dossier_input(), &parts, &Templates::default())
        .expect("a dossier is typeset");
    let pages = searchable(&texts);
    holds(&pages[0], &["For signature. The loop is for signature."]);
    lacks(&pages, &["Settings to enter", "Open items", "Draft"]);
}

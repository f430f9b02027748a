//! The whole text of the pages, held against kept files: what changed on paper is seen in their difference.

use super::sample;
use super::tests::dossier_records;
use super::view;
use super::*;
use std::path::Path;

/// Holds the text of pages against `tests/golden/NAME.txt`; with `ASLEFT_ACCEPT=1` writes it there.
fn holds_as_kept(name: &str, pages: &[String]) {
    let mut text = String::new();
    for (index, page) in pages.iter().enumerate() {
        text.push_str(&format!("---- page {}\n{}\n", index + 1, page.trim_end()));
    }
    // A no-break space is seen nowhere in a difference.
    let text = text.replace(['\u{a0}', '\u{202f}'], " ");
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("tests/golden/{name}.txt"));
    if std::env::var_os("ASLEFT_ACCEPT").is_some() {
        std::fs::write(&path, text).expect("the kept file can be written");
        return;
    }
    let kept = std::fs::read_to_string(&path).unwrap_or_default();
    for (number, (kept, new)) in kept.lines().zip(text.lines()).enumerate() {
        assert_eq!(
            kept,
            new,
            "tests/golden/{name}.txt, line {}; where the new text is right: ASLEFT_ACCEPT=1 cargo test",
            number + 1
        );
    }
    assert_eq!(kept.len(), text.len(), "tests/golden/{name}.txt");
}

fn pages_of(record: &Record) -> Vec<String> {
    record_page_texts(record, &sample::figures(), &Templates::default())
        .expect("a record is typeset")
}

#[test]
fn the_text_of_each_kind_of_record_is_as_kept() {
    holds_as_kept("record-for-signature", &pages_of(&sample::full()));
    holds_as_kept("record-withheld", &pages_of(&sample::withheld()));
    holds_as_kept("record-integrating", &pages_of(&sample::integrating()));
}

#[test]
fn the_text_of_a_dossier_is_as_kept() {
    let records = dossier_records();
    let figures = sample::figures();
    let parts: Vec<DossierRecord> = records
        .iter()
        .map(|record| DossierRecord {
            record,
            figures: &figures,
            attachments: &[],
        })
        .collect();
    let texts = dossier_page_texts(&sample::dossier_input(), &parts, &Templates::default())
        .expect("a dossier is typeset");
    // Its own pages; the records are kept on their own.
    let own = texts
        .iter()
        .take_while(|text| !text.contains("Loop-tuning record"))
        .cloned()
        .collect::<Vec<_>>();
    assert!(own.len() > 2, "{own:?}");
    holds_as_kept("dossier", &own);
}

/// Every text of a view that a page prints.
fn printed(value: &serde_json::Value, key: &str, into: &mut Vec<String>) {
    // Names of files, what a reader of the screen hears, marks for links.
    let unseen = [
        "path",
        "alt",
        "mime",
        "relationship",
        "description",
        "id",
        "page",
        "authors",
        "keywords",
        "attachments",
        "title_of_file",
    ];
    if unseen.contains(&key) {
        return;
    }
    match value {
        serde_json::Value::String(text) => into.push(text.clone()),
        serde_json::Value::Array(list) => list.iter().for_each(|v| printed(v, key, into)),
        serde_json::Value::Object(map) => map.iter().for_each(|(key, v)| printed(v, key, into)),
        _ => {}
    }
}

#[test]
fn every_word_and_figure_of_the_view_is_on_a_page() {
    let squeezed = |text: &str| -> String { text.chars().filter(|c| !c.is_whitespace()).collect() };
    for record in [
        sample::full(),
        sample::draft(),
        sample::withheld(),
        sample::integrating(),
    ] {
        let figures = sample::figures();
        let view = view::record(&record, &figures, "plots", "record").expect("a view");
        let view = serde_json::to_value(&view).expect("a view is data");
        let mut texts = Vec::new();
        printed(&view, "", &mut texts);
        assert!(texts.len() > 100, "{texts:?}");
        let pages = squeezed(&pages_of(&record).concat());
        for text in texts {
            // The title of the file, not of the page.
            if Some(text.as_str()) == view["document"]["title"].as_str() {
                continue;
            }
            assert!(
                pages.contains(&squeezed(&text)),
                "\"{text}\" is on no page of {}",
                record.control_loop.tag
            );
        }
    }
}

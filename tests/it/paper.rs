//! Where things stand on the pages of the demo plant's records, and a site that brings its own templates.

use crate::demo::with_samples;
use crate::support::{asleft_in, copy_folder, folder, root};
use asleft::document::{self, PageLayout, Placed, Templates};
use asleft::figures::{self, Figure};
use asleft::record::{PageSize, Record};
use std::fs;

/// The binding edge, left of which nothing stands, pt (25 mm).
const BINDING_PT: f64 = 70.8;
/// Right of the text, pt: 15 mm on A4, 20.9 mm on Letter.
const RIGHT_PT: (f64, f64) = (42.5, 59.2);
/// No printer reaches closer to the edge, pt (6 mm).
const EDGE_PT: f64 = 17.0;

fn told(item: &Placed) -> &str {
    item.text.as_deref().unwrap_or("a picture")
}

/// Whether two boxes share more than the touch of their edges.
fn overlap(a: &Placed, b: &Placed) -> bool {
    let across = a.right_pt.min(b.right_pt) - a.left_pt.max(b.left_pt);
    let down = a.bottom_pt.min(b.bottom_pt) - a.top_pt.max(b.top_pt);
    across > 0.6 && down > 0.6
}

/// Holds that nothing leaves the page or lies on something else.
fn check_page(name: &str, page: &PageLayout) {
    let right = page.width_pt
        - if page.width_pt > 600.0 {
            RIGHT_PT.1
        } else {
            RIGHT_PT.0
        };
    let words: Vec<&Placed> = page
        .placed
        .iter()
        .filter(|item| {
            item.text
                .as_ref()
                .is_none_or(|text| !text.trim().is_empty())
        })
        .collect();
    assert!(words.len() > 10, "{name} is empty");
    for (index, item) in words.iter().enumerate() {
        assert!(
            item.left_pt > BINDING_PT - 0.5
                && item.right_pt < right + 0.5
                && item.top_pt > EDGE_PT
                && item.bottom_pt < page.height_pt - EDGE_PT,
            "{name}: {} stands outside: {item:?}",
            told(item)
        );
        for other in &words[..index] {
            assert!(
                !overlap(item, other),
                "{name}: \"{}\" on \"{}\": {item:?} {other:?}",
                told(item),
                told(other)
            );
        }
    }
}

/// Holds that each picture has its caption right below it.
fn check_captions(name: &str, pages: &[PageLayout], figures: &[Figure]) {
    let mut captions: Vec<&str> = figures.iter().map(|f| f.caption.as_str()).collect();
    for page in pages {
        for picture in page.placed.iter().filter(|item| item.text.is_none()) {
            let below = page.placed.iter().find(|item| {
                item.text
                    .as_ref()
                    .is_some_and(|text| !text.trim().is_empty())
                    && item.top_pt > picture.bottom_pt - 0.5
                    && item.top_pt < picture.bottom_pt + 12.0
                    && (item.left_pt - picture.left_pt).abs() < 2.0
            });
            let first = below
                .and_then(|item| item.text.as_deref())
                .unwrap_or_default();
            let at = captions.iter().position(|caption| {
                let start = first
                    .split_whitespace()
                    .take(2)
                    .collect::<Vec<_>>()
                    .join(" ");
                let caption = caption.replace('\u{a0}', " ");
                !start.is_empty() && caption.starts_with(start.replace('\u{a0}', " ").as_str())
            });
            let at =
                at.unwrap_or_else(|| panic!("{name}: \"{first}\" is no caption of {captions:?}"));
            captions.remove(at);
        }
    }
    assert!(captions.is_empty(), "{name}: no picture for {captions:?}");
}

fn check(name: &str, record: &Record) -> usize {
    let figures = figures::draw(record);
    let pages = document::record_layout(record, &figures, &Templates::default())
        .expect("a record is laid out");
    for (index, page) in pages.iter().enumerate() {
        check_page(&format!("{name}, page {}", index + 1), page);
    }
    check_captions(name, &pages, &figures);
    pages.len()
}

#[test]
fn nothing_stands_outside_a_page_on_something_else_or_away_from_its_caption() {
    // Complete, a draft without a trial, with a table of ten limits, withheld.
    for (tag, most) in [
        ("TIC-207", 6),
        ("AIC-208", 6),
        ("TIC-202", 6),
        ("TIC-210", 2),
    ] {
        let mut record = with_samples()[tag].clone();
        assert!(check(tag, &record) <= most, "{tag}");
        record.document.page = PageSize::UsLetter;
        let letter = format!("{tag} on Letter");
        assert!(check(&letter, &record) <= most, "{letter}");
    }
}

/// A table of steps longer than a page: its head stands on each.
#[test]
fn a_long_table_has_its_head_on_every_page() {
    let mut record = with_samples()["TIC-207"].clone();
    let step = record.steps[1].clone();
    record.steps = (1..=60)
        .map(|number| {
            let mut step = step.clone();
            step.number = number;
            step
        })
        .collect();
    let texts = document::record_page_texts(&record, &[], &Templates::default())
        .expect("a record is typeset");
    let with_steps: Vec<&String> = texts
        .iter()
        .filter(|text| {
            text.lines()
                .filter(|line| line.contains("13:27:00"))
                .count()
                > 3
        })
        .collect();
    assert!(with_steps.len() > 1, "{texts:?}");
    for text in with_steps {
        assert!(
            text.contains("Misfit") && text.contains("Verdict"),
            "{text}"
        );
    }
}

/// A job of one sound loop, with a site's folder of templates.
fn job_with_templates(service: &str) -> tempfile::TempDir {
    let place = folder();
    let job = place.path().join("job");
    copy_folder(&root().join("tests/broken/sound"), &job);
    let toml = fs::read_to_string(job.join("job.toml")).expect("a job");
    let toml = toml.replace("[job]\n", "[job]\ntemplate = \"site\"\n");
    fs::write(job.join("job.toml"), toml).expect("written");
    let loops = fs::read_to_string(job.join("loops.csv")).expect("a schedule");
    fs::write(
        job.join("loops.csv"),
        loops.replace("Jacket of R-1", service),
    )
    .expect("written");
    fs::create_dir(job.join("site")).expect("a folder");
    place
}

#[test]
fn a_site_brings_its_words_its_logo_and_its_font() {
    let place = job_with_templates("反应釜温度");
    let site = place.path().join("job/site");
    let asked = asleft_in(place.path(), &["check", "job"]);
    assert_eq!(asked.code, 1, "{}", asked.out);
    let told = asked.out.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(
        told.contains(
            "loops.csv, line 2, column \"service\": no font has the character \"反\" (U+53CD) of \"反应釜温度\""
        ),
        "{told}"
    );
    fs::copy(
        root().join("tests/fonts/five-signs.ttf"),
        site.join("five-signs.ttf"),
    )
    .expect("copied");
    fs::write(
        site.join("logo.svg"),
        "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"80\" height=\"30\"><rect width=\"80\" height=\"30\"/></svg>",
    )
    .expect("written");
    let basis = fs::read_to_string(root().join("templates/basis.typ")).expect("a template");
    let changed = basis.replace("How to verify this record", "How we verify a record");
    assert_ne!(basis, changed);
    fs::write(site.join("basis.typ"), changed).expect("written");
    let asked = asleft_in(place.path(), &["check", "job"]);
    assert_eq!(asked.code, 0, "{}", asked.out);
    let run = asleft_in(place.path(), &["record", "job"]);
    assert_eq!(run.code, 0, "{}{}", run.out, run.err);
    assert!(!run.out.contains("warns"), "{}", run.out);
    assert!(place.path().join("job/records/HM-TIC-1_rev0.pdf").is_file());
}

#[test]
fn a_template_that_is_wrong_or_doubtful_is_told_with_its_place() {
    let place = job_with_templates("Jacket of R-1");
    let template = place.path().join("job/site/basis.typ");
    let basis = fs::read_to_string(root().join("templates/basis.typ")).expect("a template");
    let begins = "#let basis(b) = {";
    let line = 2 + basis
        .lines()
        .position(|line| line == begins)
        .expect("it is there");
    let place_in_file = format!("basis.typ:{line}:");
    fs::write(
        &template,
        basis.replace("#let basis(b) = {", "#let basis(b) = {\n  b.nothing"),
    )
    .expect("written");
    let run = asleft_in(place.path(), &["record", "job"]);
    assert_ne!(run.code, 0);
    assert!(run.out.contains(&place_in_file), "{}{}", run.out, run.err);
    fs::write(
        &template,
        basis.replace(
            "#let basis(b) = {",
            "#let basis(b) = {\n  set text(font: (\"Nowhere\", \"Source Sans 3\"))",
        ),
    )
    .expect("written");
    let run = asleft_in(place.path(), &["record", "job"]);
    assert_eq!(run.code, 0, "{}{}", run.out, run.err);
    assert!(
        run.out
            .contains(&format!("the typesetter warns: {place_in_file}")),
        "{}",
        run.out
    );
}

//! Plan sheets: the records they rest on, their own seal, and the writing of them.
//!
//! A plan is a working paper and may be replaced, but only as it was written: its seal, in the keywords of
//! the PDF, tells a plan of this program from any other file, and an untouched one from one that
//! somebody wrote notes into.

use super::files::{self, Waiting};
use super::names::FileNames;
use super::seal::{self, sha256};
use crate::notice::{Place, Problem};
use crate::plan::{SEAL_DIGITS, SEAL_KEYWORD};
use crate::record::{Record, SCHEMA};
use serde_json::Value;
use std::path::Path;

/// A record's JSON that lies in the folder of the records and cannot be used.
#[derive(Debug, Clone, PartialEq)]
pub struct Unusable {
    /// Tag of its loop, where it names one.
    pub tag: Option<String>,
    /// Why, at its place.
    pub problem: Problem,
}

/// What lies in a folder of records.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct EarlierRecords {
    /// The sound records, the newest first.
    pub records: Vec<Record>,
    /// Those that cannot be used.
    pub unusable: Vec<Unusable>,
}

impl EarlierRecords {
    /// The sound records of a loop, the newest first.
    pub fn of_loop(&self, tag: &str) -> Vec<&Record> {
        self.records
            .iter()
            .filter(|record| record.control_loop.tag.eq_ignore_ascii_case(tag))
            .collect()
    }
}

/// Reads the records in a folder; a folder that is not there holds none. JSON files that are no records
/// are passed over.
///
/// # Errors
/// Where the folder is there and cannot be read.
pub fn earlier_records(folder: &Path) -> Result<EarlierRecords, Problem> {
    let mut found = EarlierRecords::default();
    for name in files::names_in(folder)? {
        if !name.ends_with(".json") {
            continue;
        }
        let path = folder.join(&name);
        let place = Place::file(files::shown(&path));
        let mut unusable = |tag: Option<String>, problem: Problem| {
            found.unusable.push(Unusable { tag, problem });
        };
        let text = match files::read(&path) {
            Ok(text) => text.unwrap_or_default(),
            Err(problem) => {
                unusable(None, warning(problem));
                continue;
            }
        };
        let value: Value = match seal::parsed(&text, &place) {
            Ok(value) => value,
            Err(problem) => {
                unusable(None, warning(problem));
                continue;
            }
        };
        if value["schema"] != SCHEMA {
            continue;
        }
        let tag = value["loop"]["tag"].as_str().map(str::to_owned);
        if !seal::seal_holds(&value) {
            unusable(
                tag,
                Problem::warning(place, "was changed after it was sealed"),
            );
            continue;
        }
        match seal::record_from_text(&text, &place) {
            Ok(record) => found.records.push(record),
            Err(problem) => unusable(tag, warning(problem)),
        }
    }
    // The number of revisions tells two of one day apart.
    found.records.sort_by(|a, b| {
        let age = |record: &Record| {
            let document = &record.document;
            (document.date, document.revisions.len())
        };
        age(b)
            .cmp(&age(a))
            .then_with(|| b.document.revision.cmp(&a.document.revision))
            .then_with(|| a.document.number.cmp(&b.document.number))
    });
    Ok(found)
}

fn warning(problem: Problem) -> Problem {
    Problem {
        severity: crate::notice::Severity::Warning,
        ..problem
    }
}

/// The keyword of a plan without its digits.
fn keyword() -> &'static [u8] {
    &SEAL_KEYWORD.as_bytes()[..SEAL_KEYWORD.len() - SEAL_DIGITS]
}

/// Where the digits of a plan's seal stand in its bytes.
fn places_of_digits(pdf: &[u8]) -> Vec<usize> {
    let keyword = keyword();
    pdf.windows(keyword.len() + SEAL_DIGITS)
        .enumerate()
        .filter(|(_, window)| window.starts_with(keyword))
        .map(|(at, _)| at + keyword.len())
        .collect()
}

/// The plan with its seal: the SHA-256 of the file with zeros in its place. The digits stand in the
/// keywords, which a PDF/A file holds as plain text, so that no offset in the file moves.
///
/// # Errors
/// Where the file has no keyword for the seal.
pub fn seal_plan(mut pdf: Vec<u8>) -> Result<Vec<u8>, Problem> {
    let places = places_of_digits(&pdf);
    if places.is_empty() {
        return Err(
            Problem::general("the plan has no place for its seal among its keywords")
                .hint("the job's own rules.typ has to set the keywords of the document, as the program's does"),
        );
    }
    let digest = sha256(&pdf);
    for at in places {
        pdf[at..at + SEAL_DIGITS].copy_from_slice(digest.as_bytes());
    }
    Ok(pdf)
}

/// What a file is that stands where a plan is to be written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Found {
    /// A plan as it was written.
    Plan,
    /// A plan that was changed since.
    ChangedPlan,
    /// Something else.
    Other,
}

fn look_into(mut pdf: Vec<u8>) -> Found {
    let places = places_of_digits(&pdf);
    let Some(&first) = places.first() else {
        return Found::Other;
    };
    if !pdf.starts_with(b"%PDF-") {
        return Found::Other;
    }
    let borne = pdf[first..first + SEAL_DIGITS].to_vec();
    for at in places {
        pdf[at..at + SEAL_DIGITS].fill(b'0');
    }
    if sha256(&pdf).as_bytes() == borne {
        Found::Plan
    } else {
        Found::ChangedPlan
    }
}

/// Writes a sealed plan, in place of an earlier one that nobody has touched.
///
/// # Errors
/// Where something else stands in its place, or it cannot be written.
pub fn write_plan(folder: &Path, names: &FileNames, pdf: &[u8]) -> Result<(), Problem> {
    let path = folder.join(names.pdf());
    let place = || Place::file(files::shown(&path));
    if let Some(bytes) = files::read_bytes(&path)? {
        match look_into(bytes) {
            Found::Plan => {}
            Found::ChangedPlan => {
                return Err(Problem::error(
                    place(),
                    "the plan was changed after it was written, so somebody may have notes in it",
                )
                .hint("move it to where it is kept, or write to another folder with --out"));
            }
            Found::Other => {
                return Err(Problem::error(
                    place(),
                    "is no plan of this program and is not written over",
                )
                .hint("move it out of the folder, or write to another folder with --out"));
            }
        }
    }
    Waiting::write(folder, names.pdf(), pdf)?.finish(folder)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::fs;

    fn sealed(words: &str) -> Vec<u8> {
        let pdf = format!("%PDF-1.7\n{words}\n({SEAL_KEYWORD}) <x>{SEAL_KEYWORD}</x>\n%%EOF");
        seal_plan(pdf.into_bytes()).expect("a place for the seal")
    }

    #[test]
    fn the_seal_tells_a_plan_from_anything_else() {
        let plan = sealed("moves");
        assert_eq!(look_into(plan.clone()), Found::Plan);
        let text = String::from_utf8(plan.clone()).expect("text");
        assert!(!text.contains("0000000000000000"), "{text}");
        let noted = text.replace("moves", "noted");
        assert_eq!(look_into(noted.into_bytes()), Found::ChangedPlan);
        let appended = format!("{text}\n5 0 obj\n%%EOF");
        assert_eq!(look_into(appended.into_bytes()), Found::ChangedPlan);
        assert_eq!(look_into(b"%PDF-1.7\n%%EOF".to_vec()), Found::Other);
        assert_eq!(look_into(text.as_bytes()[1..].to_vec()), Found::Other);
        assert_eq!(look_into(Vec::new()), Found::Other);
        assert!(seal_plan(b"%PDF-1.7".to_vec()).is_err());
    }

    #[test]
    fn only_an_untouched_plan_is_replaced() {
        let folder = tempfile::tempdir().expect("a folder");
        let names = FileNames::of_plan("LM-1_plan").expect("a name");
        let path = folder.path().join("LM-1_plan.pdf");
        write_plan(folder.path(), &names, &sealed("a")).expect("written");
        write_plan(folder.path(), &names, &sealed("b")).expect("replaced");
        assert_eq!(fs::read(&path).expect("there"), sealed("b"));
        for (bytes, words) in [
            (b"mine".to_vec(), "is no plan of this program"),
            ([sealed("b"), b"note".to_vec()].concat(), "notes in it"),
        ] {
            fs::write(&path, &bytes).expect("written");
            let problem =
                write_plan(folder.path(), &names, &sealed("c")).expect_err("not written over");
            assert!(problem.message.contains(words), "{problem}");
            assert_eq!(fs::read(&path).expect("still there"), bytes);
        }
    }

    #[test]
    fn what_is_no_record_is_passed_over_or_told() {
        let folder = tempfile::tempdir().expect("a folder");
        let missing = earlier_records(&folder.path().join("none")).expect("holds none");
        assert_eq!(missing, EarlierRecords::default());
        for (name, text) in [
            ("dossier.json", "{\"schema\": \"asleft/dossier/1\"}"),
            ("notes.txt", "{"),
            ("broken.json", "{"),
            (
                "changed.json",
                "{\"schema\": \"asleft/record/1\", \"loop\": {\"tag\": \"TIC-1\"}}",
            ),
        ] {
            fs::write(folder.path().join(name), text).expect("written");
        }
        let found = earlier_records(folder.path()).expect("readable");
        assert!(found.records.is_empty());
        let told: Vec<(Option<&str>, String)> = found
            .unusable
            .iter()
            .map(|u| (u.tag.as_deref(), u.problem.to_string()))
            .collect();
        assert_eq!(told.len(), 2, "{told:?}");
        assert!(told[0].0.is_none() && told[0].1.contains("broken.json"));
        assert_eq!(told[1].0, Some("TIC-1"));
        assert!(told[1].1.ends_with("was changed after it was sealed"));
    }
}

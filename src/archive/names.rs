//! Names of the files that a document is kept in.

use crate::notice::Problem;
use std::collections::BTreeMap;

/// Longest name of a file without its ending, bytes: the common bound of file systems is 255, and
/// room is left for the ending and for what a mail program or an archive appends.
const LONGEST_STEM: usize = 200;

/// What the file systems of offices and plants do not take in a name.
const REFUSED: &[char] = &['/', '\\', ':', '*', '?', '"', '<', '>', '|'];

/// Names that one of those systems keeps for devices, whatever follows after a dot.
const DEVICES: &[&str] = &["con", "prn", "aux", "nul"];

/// The two files of one document: `{number}_rev{revision}.pdf` and `.json`.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct FileNames {
    stem: String,
}

impl FileNames {
    /// The names for a document number and revision. Signs that a file system does not take, such
    /// as the slash of `LM/200/TIC-204`, become `-` in the name; the document keeps its number.
    ///
    /// # Errors
    /// Where no name can be made: number or revision empty, a name that begins with a dot, a name
    /// kept for a device, or a name too long.
    pub fn new(number: &str, revision: &str) -> Result<Self, Problem> {
        let number_part = as_file_name(number);
        let revision_part = as_file_name(revision);
        let stem = format!("{number_part}_rev{revision_part}");
        let fault = if number_part.is_empty() {
            Some("it is empty".to_owned())
        } else if revision_part.is_empty() {
            Some("its revision is empty".to_owned())
        } else {
            fault(&stem)
        };
        match fault {
            None => Ok(FileNames { stem }),
            Some(fault) => Err(Problem::general(format!(
                "document number \"{number}\", revision \"{revision}\", cannot name a file: {fault}"
            ))
            .hint(
                "change document or dossier in job.toml, or the revision in job.toml or the schedule",
            )),
        }
    }

    /// The name for the plan of a loop, by the plan's number; it has no revision and no JSON.
    ///
    /// # Errors
    /// As [`FileNames::new`].
    pub fn of_plan(number: &str) -> Result<Self, Problem> {
        let stem = as_file_name(number);
        match fault(&stem) {
            None => Ok(FileNames { stem }),
            Some(fault) => Err(Problem::general(format!(
                "document number \"{number}\" cannot name a file: {fault}"
            ))
            .hint("change document in job.toml")),
        }
    }

    /// Name of the PDF.
    pub fn pdf(&self) -> String {
        format!("{}.pdf", self.stem)
    }

    /// Name of the JSON.
    pub fn json(&self) -> String {
        format!("{}.json", self.stem)
    }
}

/// Why a name cannot be that of a file, where it cannot.
fn fault(stem: &str) -> Option<String> {
    if stem.starts_with('.') {
        Some("a file whose name begins with a dot is hidden".to_owned())
    } else if is_device(stem) {
        Some(format!("a file named \"{stem}\" stands for a device"))
    } else if stem.len() > LONGEST_STEM {
        let length = stem.len();
        Some(format!(
            "a name of {length} bytes is longer than {LONGEST_STEM}"
        ))
    } else {
        None
    }
}

/// A text with only such signs as a file name takes.
fn as_file_name(text: &str) -> String {
    text.trim()
        .chars()
        .map(|sign| {
            if sign.is_control() || REFUSED.contains(&sign) {
                '-'
            } else {
                sign
            }
        })
        .collect()
}

fn is_device(stem: &str) -> bool {
    let base = stem.split('.').next().unwrap_or(stem).trim().to_lowercase();
    let numbered = ["com", "lpt"].iter().any(|port| {
        base.strip_prefix(port)
            .is_some_and(|rest| rest.len() == 1 && rest.bytes().all(|b| b.is_ascii_digit()))
    });
    numbered || DEVICES.contains(&base.as_str())
}

/// Documents whose files would have one name: every one of them with its problem, in the order
/// given. Upper and lower case do not tell names apart, because some file systems do not either.
///
/// Each document comes with what a person knows it by: the tag of its loop, or "the dossier".
pub fn clashes<'a>(
    documents: impl IntoIterator<Item = (&'a str, &'a FileNames)>,
) -> Vec<(String, Problem)> {
    let documents: Vec<(&str, &FileNames)> = documents.into_iter().collect();
    let mut holders: BTreeMap<String, Vec<&str>> = BTreeMap::new();
    for (label, names) in &documents {
        let same = holders.entry(names.stem.to_lowercase()).or_default();
        same.push(label);
    }
    documents
        .iter()
        .filter_map(|(label, names)| {
            let others: Vec<&str> = holders[&names.stem.to_lowercase()]
                .iter()
                .copied()
                .filter(|other| other != label)
                .collect();
            if others.is_empty() {
                return None;
            }
            let problem = Problem::general(format!(
                "its file {} would have the same name as that of {}",
                names.pdf(),
                others.join(", ")
            ))
            .hint("Put {tag} or {n} into `document` in job.toml, so that each loop has its own number");
            Some(((*label).to_owned(), problem))
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn names(number: &str, revision: &str) -> FileNames {
        FileNames::new(number, revision).expect("a number that can name a file")
    }

    #[test]
    fn names_are_number_and_revision() {
        let names = names("LM-200-IC-TIC-204", "0");
        assert_eq!(names.pdf(), "LM-200-IC-TIC-204_rev0.pdf");
        assert_eq!(names.json(), "LM-200-IC-TIC-204_rev0.json");
    }

    #[test]
    fn no_name_leaves_its_folder() {
        assert_eq!(names("LM/200\\IC:1", "A/1").pdf(), "LM-200-IC-1_revA-1.pdf");
        assert_eq!(names("a\u{0}b\nc", "0").pdf(), "a-b-c_rev0.pdf");
        assert!(FileNames::new("../escape", "0").is_err());
    }

    #[test]
    fn what_cannot_name_a_file_is_refused_with_advice() {
        let long = "x".repeat(300);
        for (number, revision, part) in [
            ("  ", "0", "it is empty"),
            ("LM-1", " ", "its revision is empty"),
            (".hidden", "0", "is hidden"),
            ("nul.1", "0", "stands for a device"),
            ("COM7.x", "0", "stands for a device"),
            (long.as_str(), "0", "is longer than 200"),
        ] {
            let problem = FileNames::new(number, revision).expect_err("no name");
            assert!(problem.message.contains(part), "{}", problem.message);
            assert!(problem.hint.is_some());
        }
        assert!(FileNames::new("CONTROL.1", "0").is_ok());
    }

    #[test]
    fn two_documents_never_share_a_name() {
        let (a, b, c, d) = (
            names("LM/1", "0"),
            names("lm-1", "0"),
            names("LM-2", "0"),
            // The seam between number and revision tells nothing apart.
            names("LM-2_rev0", "x"),
        );
        let found = clashes([("A", &a), ("B", &b), ("C", &c), ("D", &d)]);
        let labels: Vec<&str> = found.iter().map(|(label, _)| label.as_str()).collect();
        assert_eq!(labels, ["A", "B"]);
        assert!(found[0].1.message.ends_with("that of B"), "{}", found[0].1);
        assert!(clashes([("C", &c), ("D", &d)]).is_empty());
    }
}

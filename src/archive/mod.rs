//! The archive: names, seals and the writing of issued documents, and reading them back.
//!
//! A document is a pair of files, `{number}_rev{revision}.pdf` and `.json`. The JSON decides what
//! may happen to the pair, so the pair is kept such that the JSON never says more than is there:
//! both files are first written whole under temporary names; then the old PDF is removed, the JSON
//! gets its name, and the PDF last. A run that dies in between leaves a JSON without its PDF, which
//! the next run recognises and completes; it never leaves half a file, a new PDF under an old JSON
//! or an old PDF under a new one.
//!
//! What was issued `for signature` is never overwritten: see [`look`].

mod differences;
mod files;
mod names;
mod plans;
mod seal;

pub use differences::{Difference, between};
pub use files::prepare;
pub use names::{FileNames, clashes};
pub use plans::{EarlierRecords, Unusable, earlier_records, seal_plan, write_plan};
pub use seal::{json_text, read_record, schema_text, seal, seal_holds, seal_of, sha256};

use crate::notice::{Place, Problem};
use crate::record::{Document, Provenance, Record, Status};
use files::Waiting;
use serde::{Deserialize, Serialize};
use serde_json::Value;
use std::path::{Path, PathBuf};

/// Name of the format of a dossier's JSON.
pub const DOSSIER_SCHEMA: &str = "asleft/dossier/1";

/// Name of the register.
pub const REGISTER_FILE: &str = "register.csv";

/// How many differences a message lists; the rest is counted.
const DIFFERENCES_SHOWN: usize = 5;

/// Where the inputs stand in a record's JSON, `*` for any entry of a list. Everything else is worked
/// out from them.
///
/// The digests of the source files and of the samples stand for the logs and for every rule by
/// which they were read and cut: what changes a reading changes a digest.
const INPUTS: &[&[&str]] = &[
    &["document"],
    &["loop"],
    &["logs", "*", "role"],
    &["logs", "*", "file"],
    &["logs", "*", "sheet"],
    &["logs", "*", "sha256"],
    &["logs", "*", "also"],
    &["logs", "*", "samples_sha256"],
    &["limits_in_force"],
    &["settings", "as_found", "native"],
    &["settings", "as_left", "native"],
    // A dossier's: each record with its own seal.
    &["records"],
];

/// Fields below those that are worked out all the same.
const RESULTS_AMONG_INPUTS: &[&[&str]] = &[
    &["document", "status"],
    &["document", "open_items"],
    &["document", "remarks"],
];

/// One record of a dossier.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct DossierEntry {
    /// Tag of the loop.
    pub tag: String,
    /// Document number of the record.
    pub number: String,
    /// Revision of the record.
    pub revision: String,
    /// Status of the record.
    pub status: Status,
    /// Seal of the record.
    pub seal: String,
}

/// The data of a dossier: its title block, and which records it binds. It lies beside the PDF, so
/// that the next run knows what was issued without taking the PDF apart.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Dossier {
    /// Format.
    pub schema: String,
    /// Title block, status, sign-off.
    pub document: Document,
    /// The records bound, in order.
    pub records: Vec<DossierEntry>,
    /// Tags of the loops of the job that have no record.
    #[serde(default)]
    pub not_recorded: Vec<String>,
    /// Where it comes from; the seal is made as that of a record.
    pub provenance: Provenance,
}

impl Dossier {
    /// The sealed data of the dossier that binds these records.
    ///
    /// It is `for signature` only where every loop of the job has a record that is; otherwise it
    /// is a draft, whatever the status in `document` says.
    pub fn new(
        mut document: Document,
        records: &[Record],
        not_recorded: &[String],
        program: &str,
    ) -> Self {
        let complete = not_recorded.is_empty()
            && records
                .iter()
                .all(|record| record.document.status == Status::ForSignature);
        document.status = if complete {
            Status::ForSignature
        } else {
            Status::Draft
        };
        let records = records
            .iter()
            .map(|record| DossierEntry {
                tag: record.control_loop.tag.clone(),
                number: record.document.number.clone(),
                revision: record.document.revision.clone(),
                status: record.document.status,
                seal: record.provenance.seal.clone(),
            })
            .collect();
        let mut dossier = Dossier {
            schema: DOSSIER_SCHEMA.to_owned(),
            document,
            records,
            not_recorded: not_recorded.to_vec(),
            provenance: Provenance {
                program: program.to_owned(),
                seal: String::new(),
            },
        };
        dossier.provenance.seal = seal_of(&seal::as_value(&dossier));
        dossier
    }
}

/// A place in the folder of the records that a document may be written to. There is one only
/// where [`look`] or [`look_for_dossier`] found that nothing issued would be lost.
#[derive(Debug, Clone, PartialEq)]
pub struct Slot {
    folder: PathBuf,
    names: FileNames,
}

impl Slot {
    /// Writes both files of a document; `json` is its JSON text, `pdf` the bytes of its pages.
    ///
    /// # Errors
    /// Where a file cannot be written or replaced.
    pub fn store(self, json: &str, pdf: &[u8]) -> Result<(), Problem> {
        let folder = &self.folder;
        let waiting_pdf = Waiting::write(folder, self.names.pdf(), pdf)?;
        let waiting_json = Waiting::write(folder, self.names.json(), json.as_bytes())?;
        files::remove(&folder.join(self.names.pdf()))?;
        waiting_json.finish(folder)?;
        waiting_pdf.finish(folder)
    }
}

/// What [`look`] found: whether a document is to be written, or was issued before.
#[derive(Debug, Clone, PartialEq)]
pub enum Standing<T> {
    /// There is none, or a draft or withheld one, which may be replaced.
    Free(Slot),
    /// The same was issued before and stays as it is.
    Issued {
        /// The issued one, to stand in the register and the dossier.
        kept: Box<T>,
        /// What the run says of it where this program would come to other figures.
        notice: Option<Problem>,
    },
}

/// Looks whether a record may be written to a folder.
///
/// A `draft` or `withheld` record may be replaced. One `for signature` of the same number and
/// revision stays as it is where its inputs are the same; a newer program that comes to other
/// figures from the same inputs is no reason to replace it, and the run says so. Samples are taken
/// from `record` into the one kept, whose JSON does not hold them; their digests agree.
///
/// # Errors
/// Where something issued would be lost: the inputs differ (the message lists what does), the
/// files hold another loop's record, were changed after they were sealed, cannot be read, or one
/// of the two is missing and cannot be made again as it was.
pub fn look(folder: &Path, record: &Record) -> Result<Standing<Record>, Problem> {
    let names = FileNames::new(&record.document.number, &record.document.revision)?;
    let standing = look_at(folder, names, &seal::as_value(record), |text, place| {
        seal::record_from_text(text, place)
    })?;
    Ok(match standing {
        Standing::Issued { mut kept, notice } => {
            for (issued, new) in kept.logs.iter_mut().zip(&record.logs) {
                issued.data = new.data.clone();
            }
            Standing::Issued { kept, notice }
        }
        free => free,
    })
}

/// The same for a dossier, whose inputs are its title block and the seals of its records.
///
/// # Errors
/// As [`look`].
pub fn look_for_dossier(folder: &Path, dossier: &Dossier) -> Result<Standing<Dossier>, Problem> {
    let names = FileNames::new(&dossier.document.number, &dossier.document.revision)?;
    look_at(folder, names, &seal::as_value(dossier), seal::parsed)
}

fn look_at<T>(
    folder: &Path,
    names: FileNames,
    new: &Value,
    read_back: impl Fn(&str, &Place) -> Result<T, Problem>,
) -> Result<Standing<T>, Problem> {
    let json_path = folder.join(names.json());
    let pdf_path = folder.join(names.pdf());
    let place = Place::file(files::shown(&json_path));
    let Some(text) = files::read(&json_path)? else {
        if pdf_path.exists() {
            return Err(Problem::error(
                Place::file(files::shown(&pdf_path)),
                format!(
                    "its data, {}, is missing, so nobody can tell whether it was issued",
                    names.json()
                ),
            )
            .hint("bring the JSON back from where it went, or move the PDF out of the folder"));
        }
        let folder = folder.to_owned();
        return Ok(Standing::Free(Slot { folder, names }));
    };
    let move_away = "bring the file back as it was issued, or move both files out of the folder";
    let old: Value = seal::parsed(&text, &place).map_err(|problem| problem.hint(move_away))?;
    let (old_tag, new_tag) = (&old["loop"]["tag"], &new["loop"]["tag"]);
    if old_tag != new_tag || old["schema"] != new["schema"] {
        let holds = old_tag
            .as_str()
            .map_or("another document".to_owned(), |tag| {
                format!("the record of {tag}")
            });
        return Err(Problem::error(place, format!("already holds {holds}"))
            .hint("give each document its own number, or write to another folder with --out"));
    }
    if !seal_holds(&old) {
        return Err(Problem::error(place, "was changed after it was sealed").hint(move_away));
    }
    let slot = Slot {
        folder: folder.to_owned(),
        names,
    };
    if old["document"]["status"] != seal::as_value(&Status::ForSignature) {
        return Ok(Standing::Free(slot));
    }

    let changes: Vec<Difference> = between(&old, new)
        .into_iter()
        .filter(|change| change.path[0] != "provenance")
        .collect();
    let same_program = old["provenance"]["program"] == new["provenance"]["program"];
    if !pdf_path.exists() {
        // A run that died before the PDF had its name; what it would have been is made again.
        if changes.is_empty() && same_program {
            return Ok(Standing::Free(slot));
        }
        return Err(Problem::error(
            place,
            format!(
                "was issued, and its pages, {}, are missing",
                slot.names.pdf()
            ),
        )
        .hint("bring the PDF back; where the pair was never handed out, delete this file"));
    }
    let notice = if changes.is_empty() {
        None
    } else if same_program || changes.iter().any(is_input) {
        return Err(differs(place, &changes));
    } else {
        Some(other_figures(place.clone(), &old, &changes))
    };
    let kept = Box::new(read_back(&text, &place)?);
    Ok(Standing::Issued { kept, notice })
}

/// Whether a difference lies in what the job hands in. A block that is missing on one side differs
/// in every field below it.
fn is_input(change: &Difference) -> bool {
    let matches = |fields: &[&str]| {
        fields
            .iter()
            .zip(&change.path)
            .all(|(field, name)| field == name || *field == "*")
    };
    let is_result = RESULTS_AMONG_INPUTS
        .iter()
        .any(|fields| change.path.len() >= fields.len() && matches(fields));
    !is_result && INPUTS.iter().any(|fields| matches(fields))
}

fn differs(place: Place, changes: &[Difference]) -> Problem {
    Problem::error(
        place,
        format!(
            "was issued for signature and this run differs from it:\n{}",
            listed(changes)
        ),
    )
    .hint("give it a new revision, with its date and reason, in the schedule (a dossier: in job.toml)")
}

fn other_figures(place: Place, old: &Value, changes: &[Difference]) -> Problem {
    let program = old["provenance"]["program"]
        .as_str()
        .unwrap_or("another program");
    Problem::warning(
        place,
        format!(
            "is kept as {program} issued it; from the same inputs this program comes to other figures:\n{}",
            listed(changes)
        ),
    )
    .hint("give it a new revision in the schedule where the new figures are wanted")
}

/// The first differences, one a line, what was handed in before what follows from it.
fn listed(changes: &[Difference]) -> String {
    let (inputs, results): (Vec<_>, Vec<_>) = changes.iter().partition(|change| is_input(change));
    let mut lines: Vec<String> = inputs
        .iter()
        .chain(&results)
        .take(DIFFERENCES_SHOWN)
        .map(|change| format!("- {change}"))
        .collect();
    if changes.len() > DIFFERENCES_SHOWN {
        lines.push(format!("- and {} more", changes.len() - DIFFERENCES_SHOWN));
    }
    lines.join("\n")
}

/// Writes the register, in place of the one before: it is a working list, not an issued document.
///
/// # Errors
/// Where it cannot be written.
pub fn write_register(folder: &Path, csv: &[u8]) -> Result<(), Problem> {
    Waiting::write(folder, REGISTER_FILE.to_owned(), csv)?.finish(folder)
}

//! What a run has to say: to the person at the terminal as text, to other programs as JSON.

mod page;

use crate::notice::Problem;
use crate::plan::Plan;
use crate::record::Status;
use serde::Serialize;
use std::fmt::{self, Display};

pub use page::{Page, WIDTH};

/// Done: every loop got its record.
pub const DONE: u8 = 0;
/// Nothing could be done, nothing was written.
pub const NOTHING_DONE: u8 = 1;
/// Some loops could not be recorded, the others were.
pub const SOME_FAILED: u8 = 3;

/// What a command reports: as text by `Display`, as JSON by `Serialize`.
pub trait Report: Display + Serialize {
    /// Exit code of the program.
    fn exit_code(&self) -> u8;

    /// What is said even where the person asked for quiet: the errors. `None` where there is none.
    fn failures(&self) -> Option<String>;
}

/// How far a run has come.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Progress {
    /// What is done already, of `of`.
    pub done: usize,
    /// How many there are to do.
    pub of: usize,
    /// What is being done now: "TIC-204", "the dossier".
    pub now: String,
}

/// Problems that stopped a command before it did anything.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Stopped {
    /// All of them.
    pub problems: Vec<Problem>,
}

/// What `new` laid out.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct NewReport {
    /// The job folder.
    pub folder: String,
    /// What lies in it now, by names below the folder.
    pub files: Vec<String>,
}

/// What became of one loop.
#[derive(Debug, Clone, PartialEq, Serialize)]
#[serde(tag = "outcome", rename_all = "kebab-case")]
pub enum LoopOutcome {
    /// Checked: a record with this status could be written.
    Ready {
        /// Status it would have.
        status: Status,
        /// What would keep it from being signed, one sentence each.
        open_items: Vec<String>,
        /// What to do at the next test where this one was rejected or weak, one sentence each.
        next_time: Vec<String>,
    },
    /// Recorded.
    Written {
        /// Status of the record.
        status: Status,
        /// What keeps it from being signed, one sentence each.
        open_items: Vec<String>,
        /// What to do at the next test where this one was rejected or weak, one sentence each.
        next_time: Vec<String>,
        /// Name of the PDF in the folder of the records.
        pdf: String,
        /// Name of the JSON beside it.
        json: String,
        /// Whether it was issued before and was left as it is.
        kept: bool,
    },
    /// Planned: a sheet for its test was written.
    Planned {
        /// Name of the PDF in the folder of the plans.
        pdf: String,
        /// What it proposes and from what, in words.
        summary: String,
        /// The plan.
        plan: Box<Plan>,
    },
    /// No record could be made.
    Failed {
        /// Why, all of it.
        problems: Vec<Problem>,
    },
}

/// One loop of the run.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct LoopReport {
    /// Tag.
    pub tag: String,
    /// What became of it.
    #[serde(flatten)]
    pub outcome: LoopOutcome,
    /// What else there is to say; nothing of it stops the record.
    pub notices: Vec<Problem>,
}

/// What became of the dossier.
#[derive(Debug, Clone, PartialEq, Serialize)]
#[serde(tag = "outcome", rename_all = "kebab-case")]
pub enum DossierOutcome {
    /// Bound.
    Written {
        /// Its status.
        status: Status,
        /// Name of the PDF in the folder of the records.
        pdf: String,
        /// Name of the JSON beside it.
        json: String,
        /// Whether it was issued before and was left as it is.
        kept: bool,
        /// What else there is to say.
        notices: Vec<Problem>,
    },
    /// Not bound.
    Failed {
        /// Why.
        problems: Vec<Problem>,
    },
}

/// What `check` found.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct CheckReport {
    /// The job folder.
    pub job: String,
    /// What concerns no single loop.
    pub notices: Vec<Problem>,
    /// Every loop, in the order of the schedule.
    pub loops: Vec<LoopReport>,
    /// What would keep the dossier from being bound.
    pub dossier: Vec<Problem>,
}

/// What `record` did.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RunReport {
    /// The job folder.
    pub job: String,
    /// The folder of the records.
    pub out: String,
    /// What concerns no single loop.
    pub notices: Vec<Problem>,
    /// Every loop, in the order of the schedule.
    pub loops: Vec<LoopReport>,
    /// The dossier; `None` where none was asked for.
    pub dossier: Option<DossierOutcome>,
    /// Name of the register in the folder of the records; `None` where no loop got a record.
    pub register: Option<String>,
}

/// What `plan` did.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct PlanReport {
    /// The job folder.
    pub job: String,
    /// The folder of the plans.
    pub out: String,
    /// What concerns no single loop.
    pub notices: Vec<Problem>,
    /// Every loop, in the order of the schedule.
    pub loops: Vec<LoopReport>,
}

/// How many loops came out how.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
struct Tally {
    for_signature: usize,
    draft: usize,
    withheld: usize,
    planned: usize,
    kept: usize,
    failed: usize,
}

impl Tally {
    fn of(loops: &[LoopReport]) -> Self {
        let mut tally = Tally::default();
        for report in loops {
            let status = match &report.outcome {
                LoopOutcome::Failed { .. } => {
                    tally.failed += 1;
                    continue;
                }
                LoopOutcome::Planned { .. } => {
                    tally.planned += 1;
                    continue;
                }
                LoopOutcome::Ready { status, .. } => status,
                LoopOutcome::Written { status, kept, .. } => {
                    tally.kept += usize::from(*kept);
                    status
                }
            };
            match status {
                Status::ForSignature => tally.for_signature += 1,
                Status::Draft => tally.draft += 1,
                Status::Withheld => tally.withheld += 1,
            }
        }
        tally
    }

    fn recorded(self) -> usize {
        self.for_signature + self.draft + self.withheld
    }

    fn exit_code(self) -> u8 {
        match (self.failed, self.recorded() + self.planned) {
            (0, _) => DONE,
            (_, 0) => NOTHING_DONE,
            _ => SOME_FAILED,
        }
    }
}

impl Display for Tally {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let records = if self.for_signature == 1 {
            "record"
        } else {
            "records"
        };
        write!(
            f,
            "{} {records} for signature, {} draft, {} withheld; {} failed",
            self.for_signature,
            self.draft,
            self.withheld,
            counted(self.failed, "loop"),
        )
    }
}

fn counted(count: usize, one: &str) -> String {
    format!("{count} {one}{}", if count == 1 { "" } else { "s" })
}

impl CheckReport {
    fn failed_dossier(&self) -> Option<DossierOutcome> {
        (!self.dossier.is_empty()).then(|| DossierOutcome::Failed {
            problems: self.dossier.clone(),
        })
    }
}

impl Report for CheckReport {
    fn exit_code(&self) -> u8 {
        let code = Tally::of(&self.loops).exit_code();
        if code == DONE && !self.dossier.is_empty() {
            SOME_FAILED
        } else {
            code
        }
    }

    fn failures(&self) -> Option<String> {
        failures(&self.loops, self.failed_dossier().as_ref())
    }
}

impl Report for RunReport {
    fn exit_code(&self) -> u8 {
        let code = Tally::of(&self.loops).exit_code();
        match self.dossier {
            Some(DossierOutcome::Failed { .. }) if code == DONE => SOME_FAILED,
            _ => code,
        }
    }

    fn failures(&self) -> Option<String> {
        failures(&self.loops, self.dossier.as_ref())
    }
}

impl Report for PlanReport {
    fn exit_code(&self) -> u8 {
        Tally::of(&self.loops).exit_code()
    }

    fn failures(&self) -> Option<String> {
        failures(&self.loops, None)
    }
}

impl Report for Stopped {
    fn exit_code(&self) -> u8 {
        NOTHING_DONE
    }

    fn failures(&self) -> Option<String> {
        Some(self.to_string())
    }
}

impl Report for NewReport {
    fn exit_code(&self) -> u8 {
        DONE
    }

    fn failures(&self) -> Option<String> {
        None
    }
}

impl Display for CheckReport {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut page = Page::new(&self.loops);
        page.problems(0, &self.notices);
        page.loops(&self.loops);
        page.blank();
        if let Some(dossier) = self.failed_dossier() {
            page.dossier(&dossier);
            page.blank();
        }
        page.line(0, &format!("Would give {}.", Tally::of(&self.loops)));
        page.line(0, "Nothing was written.");
        f.write_str(page.text())
    }
}

impl Display for RunReport {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut page = Page::new(&self.loops);
        page.problems(0, &self.notices);
        page.loops(&self.loops);
        page.blank();
        if let Some(dossier) = &self.dossier {
            page.dossier(dossier);
        }
        if let Some(register) = &self.register {
            page.row("register", "", register);
        }
        page.blank();
        let tally = Tally::of(&self.loops);
        page.line(0, &format!("{tally}."));
        if tally.kept > 0 {
            page.line(
                0,
                &format!(
                    "{} issued before, left as {}.",
                    counted(tally.kept, "record"),
                    if tally.kept == 1 { "it is" } else { "they are" }
                ),
            );
        }
        let written = tally.recorded() > 0;
        page.line(
            0,
            &if written {
                format!("The records are in {}", self.out)
            } else {
                "Nothing was written.".to_owned()
            },
        );
        f.write_str(page.text())
    }
}

impl Display for PlanReport {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut page = Page::new(&self.loops);
        page.problems(0, &self.notices);
        page.loops(&self.loops);
        page.blank();
        let tally = Tally::of(&self.loops);
        page.line(
            0,
            &format!(
                "{}; {} failed.",
                counted(tally.planned, "plan"),
                counted(tally.failed, "loop")
            ),
        );
        page.line(
            0,
            &if tally.planned > 0 {
                format!("The plans are in {}", self.out)
            } else {
                "Nothing was written.".to_owned()
            },
        );
        f.write_str(page.text())
    }
}

impl Display for Stopped {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut page = Page::new(&[]);
        page.problems(0, &self.problems);
        f.write_str(page.text())
    }
}

impl Display for NewReport {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut page = Page::new(&[]);
        page.line(0, &format!("Laid out {}:", self.folder));
        for file in &self.files {
            page.line(2, file);
        }
        page.blank();
        page.line(
            0,
            &format!(
                "Fill in job.toml and the loop schedule, put the exports into logs, then: asleft check {}",
                self.folder
            ),
        );
        f.write_str(page.text())
    }
}

fn failures(loops: &[LoopReport], dossier: Option<&DossierOutcome>) -> Option<String> {
    let mut page = Page::new(loops);
    for report in loops {
        if matches!(report.outcome, LoopOutcome::Failed { .. }) {
            page.one_loop(report);
        }
    }
    if let Some(dossier @ DossierOutcome::Failed { .. }) = dossier {
        page.dossier(dossier);
    }
    (!page.text().is_empty()).then(|| page.text().to_owned())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::notice::Place;

    fn written(tag: &str, status: Status, kept: bool) -> LoopReport {
        LoopReport {
            tag: tag.into(),
            outcome: LoopOutcome::Written {
                status,
                open_items: Vec::new(),
                next_time: Vec::new(),
                pdf: format!("LM-{tag}_rev0.pdf"),
                json: format!("LM-{tag}_rev0.json"),
                kept,
            },
            notices: Vec::new(),
        }
    }

    fn failed(tag: &str) -> LoopReport {
        let place = Place::file("logs/pic211.csv").row(14).column(1, Some("PV"));
        let problem = Problem::error(
            place,
            "found \"n. a.\" and 11 more like it, expected a number or one of the texts that mean a bad sample",
        )
        .hint("Add the text to bad_values of [[log]] in job.toml");
        LoopReport {
            tag: tag.into(),
            outcome: LoopOutcome::Failed {
                problems: vec![problem],
            },
            notices: Vec::new(),
        }
    }

    fn run(loops: Vec<LoopReport>) -> RunReport {
        RunReport {
            job: "job".into(),
            out: "job/records".into(),
            notices: Vec::new(),
            loops,
            dossier: Some(DossierOutcome::Written {
                status: Status::Draft,
                pdf: "LM-DOSSIER_rev0.pdf".into(),
                json: "LM-DOSSIER_rev0.json".into(),
                kept: false,
                notices: Vec::new(),
            }),
            register: Some("register.csv".into()),
        }
    }

    #[test]
    fn a_run_reads_well() {
        let mut draft = written("TIC-202", Status::Draft, false);
        if let LoopOutcome::Written { open_items, .. } = &mut draft.outcome {
            open_items.push("Closed-loop trial missing.".into());
        }
        let mut report = run(vec![
            written("FIC-201", Status::ForSignature, true),
            draft,
            failed("PIC-211"),
        ]);
        report.notices.push(
            Problem::warning(
                Place::file("loops.xlsx")
                    .sheet("Loops")
                    .row(1)
                    .column(3, None),
                "unknown heading \"scann s\"",
            )
            .hint("The nearest known heading is \"scan s\""),
        );
        let expected = "\
warning  loops.xlsx, sheet \"Loops\", cell D1: unknown heading \"scann s\"
             The nearest known heading is \"scan s\"

FIC-201   for signature  LM-FIC-201_rev0.pdf (issued before)
TIC-202   draft          LM-TIC-202_rev0.pdf
          open     Closed-loop trial missing.
PIC-211   failed
          error    logs/pic211.csv, line 14, column \"PV\": found \"n. a.\" and 11 more like it,
                   expected a number or one of the texts that mean a bad sample
                       Add the text to bad_values of [[log]] in job.toml

dossier   draft          LM-DOSSIER_rev0.pdf
register                 register.csv

1 record for signature, 1 draft, 0 withheld; 1 loop failed.
1 record issued before, left as it is.
The records are in job/records
";
        assert_eq!(report.to_string(), expected);
        assert!(
            report
                .to_string()
                .lines()
                .all(|line| line.chars().count() <= page::WIDTH)
        );
        let failures = report.failures().expect("a loop failed");
        assert!(failures.starts_with("PIC-211   failed\n"), "{failures}");
        assert!(!failures.contains("FIC-201"));
    }

    #[test]
    fn exit_codes_tell_what_was_written() {
        let signed = || written("A", Status::ForSignature, false);
        let withheld = || written("B", Status::Withheld, false);
        assert_eq!(run(vec![signed(), withheld()]).exit_code(), DONE);
        assert_eq!(run(vec![signed(), failed("C")]).exit_code(), SOME_FAILED);
        assert_eq!(run(vec![failed("C")]).exit_code(), NOTHING_DONE);
        let mut report = run(vec![signed()]);
        report.dossier = Some(DossierOutcome::Failed {
            problems: vec![Problem::general("no")],
        });
        assert_eq!(report.exit_code(), SOME_FAILED);
        assert!(report.failures().is_some());
    }

    #[test]
    fn no_cell_steers_the_terminal() {
        let stopped = Stopped {
            problems: vec![Problem::general("found \"\u{1b}[2J\"\n- one\n- two")],
        };
        assert_eq!(
            stopped.to_string(),
            "error    found \"\\u{1b}[2J\"\n         - one\n         - two\n"
        );
    }

    #[test]
    fn json_has_the_place_in_parts() {
        let value = serde_json::to_value(failed("PIC-211")).expect("JSON");
        assert_eq!(value["outcome"], "failed");
        let problem = &value["problems"][0];
        assert_eq!(problem["place"], "logs/pic211.csv, line 14, column \"PV\"");
        assert_eq!(problem["row"], 14);
        assert_eq!(problem["column"], 2);
        assert_eq!(problem["severity"], "error");
    }

    #[test]
    fn a_tag_neither_spoils_the_columns_nor_steers_the_terminal() {
        let long = "T".repeat(300);
        let report = run(vec![failed("A\u{1b}[2J"), failed(&long)]);
        let text = report.to_string();
        assert!(!text.contains('\u{1b}'), "{text}");
        assert!(text.contains(&format!("\n{long}\n")), "{text}");
        let widths = text.lines().map(|line| line.chars().count());
        assert_eq!(
            widths.filter(|width| *width > page::WIDTH).count(),
            1,
            "{text}"
        );
    }
}

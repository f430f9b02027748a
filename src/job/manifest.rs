//! `job.toml`: what the job is, who signs, and what its exports do not say themselves.

use super::toml_reader::{Reader, Table};
use crate::design::DesignBounds;
use crate::identify::VerdictBounds;
use crate::notice::{Place, Problem, nearest};
use crate::read::{DateOrder, DecimalSign, LogRule, TimeUnit};
use chrono::NaiveDate;

/// Name of the file in the job folder.
pub const FILE: &str = "job.toml";

/// Paper of the documents.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Page {
    /// 210 mm × 297 mm.
    #[default]
    A4,
    /// 8.5 in × 11 in.
    UsLetter,
}

/// An earlier revision.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Revision {
    /// Its mark.
    pub revision: String,
    /// Date of issue.
    pub date: NaiveDate,
    /// Why it was issued.
    pub reason: String,
}

/// A site procedure that the cautions defer to.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Procedure {
    /// Its title.
    pub title: String,
    /// Its number.
    pub reference: String,
}

/// One line of the sign-off block.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Signature {
    /// Who signs as what: "Tested by".
    pub role: String,
    /// Name; `None` prints a blank line.
    pub name: Option<String>,
}

/// A caution of the site's own.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct SiteCaution {
    /// Tags of the loops it is for; all where empty.
    pub loops: Vec<String>,
    /// The text.
    pub text: String,
    /// Where it stands.
    pub place: Place,
}

/// Everything in `job.toml`, checked.
#[derive(Debug, Clone, PartialEq)]
pub struct Manifest {
    /// Plant, for the title block.
    pub plant: String,
    /// Legal owner of the documents.
    pub owner: String,
    /// Area or unit.
    pub area: Option<String>,
    /// Client.
    pub client: Option<String>,
    /// Document number with `{tag}` or `{n}`.
    pub document: String,
    /// Document number of the dossier.
    pub dossier: String,
    /// Revision.
    pub revision: String,
    /// Date of issue.
    pub date: NaiveDate,
    /// Reason for this revision.
    pub reason: Option<String>,
    /// Paper.
    pub page: Page,
    /// Folder of the site's own templates, below the job folder.
    pub template: Option<String>,
    /// Earlier revisions, in order.
    pub revision_history: Vec<Revision>,
    /// Site procedures; at least one.
    pub procedures: Vec<Procedure>,
    /// Sign-off block, in order.
    pub signatures: Vec<Signature>,
    /// Cautions of the site's own.
    pub cautions: Vec<SiteCaution>,
    /// What exports do not say themselves, in order.
    pub logs: Vec<LogRule>,
    /// Limits of the design.
    pub design_bounds: DesignBounds,
    /// Limits of the verdicts.
    pub verdict_bounds: VerdictBounds,
}

impl Manifest {
    /// Reads the text of a `job.toml`; all its problems together.
    ///
    /// # Errors
    /// Where the text is not TOML, a key is unknown, missing or holds what it cannot.
    pub fn read(text: &str) -> Result<Manifest, Vec<Problem>> {
        let mut reader = Reader::new(FILE, text);
        let manifest = reader
            .parse()
            .and_then(|root| read_root(&mut reader, &root));
        let problems = reader.finish();
        match manifest {
            Some(manifest) if problems.is_empty() => Ok(manifest),
            _ => Err(problems),
        }
    }
}

fn read_root(reader: &mut Reader<'_>, root: &Table<'_>) -> Option<Manifest> {
    reader.known_keys(
        root,
        &[
            "job",
            "revision_history",
            "procedure",
            "signature",
            "caution",
            "log",
            "limits",
        ],
    );
    let job = reader.table(root, "job");
    if job.is_none() {
        reader.missing(root, "the table [job] is missing");
    }
    let job = job.and_then(|job| read_job(reader, &job));
    let revision_history = reader
        .tables(root, "revision_history")
        .iter()
        .filter_map(|table| {
            reader.known_keys(table, &["revision", "date", "reason"]);
            let revision = reader.required_text(table, "revision");
            let date = reader.required_date(table, "date");
            let reason = reader.required_text(table, "reason");
            Some(Revision {
                revision: revision?,
                date: date?,
                reason: reason?,
            })
        })
        .collect();
    let procedure_tables = reader.tables(root, "procedure");
    if procedure_tables.is_empty() {
        reader.missing(
            root,
            "at least one [[procedure]] is needed: the cautions defer to it",
        );
    }
    let procedures = procedure_tables
        .iter()
        .filter_map(|table| {
            reader.known_keys(table, &["title", "reference"]);
            let title = reader.required_text(table, "title");
            let reference = reader.required_text(table, "reference");
            Some(Procedure {
                title: title?,
                reference: reference?,
            })
        })
        .collect();
    let signatures = reader
        .tables(root, "signature")
        .iter()
        .filter_map(|table| {
            reader.known_keys(table, &["role", "name"]);
            let name = reader.text(table, "name");
            Some(Signature {
                role: reader.required_text(table, "role")?,
                name,
            })
        })
        .collect();
    let cautions = reader
        .tables(root, "caution")
        .iter()
        .filter_map(|table| {
            reader.known_keys(table, &["loops", "text"]);
            let loops = reader.texts(table, "loops");
            Some(SiteCaution {
                loops,
                text: reader.required_text(table, "text")?,
                place: reader.place(table),
            })
        })
        .collect();
    let logs = reader
        .tables(root, "log")
        .iter()
        .map(|table| read_log_rule(reader, table))
        .collect();
    let mut design_bounds = DesignBounds::default();
    let mut verdict_bounds = VerdictBounds::default();
    if let Some(limits) = reader.table(root, "limits") {
        read_limits(reader, &limits, &mut design_bounds, &mut verdict_bounds);
    }
    let job = job?;
    Some(Manifest {
        revision_history,
        procedures,
        signatures,
        cautions,
        logs,
        design_bounds,
        verdict_bounds,
        ..job
    })
}

/// The table `[job]`; the rest of the manifest is left empty.
fn read_job(reader: &mut Reader<'_>, job: &Table<'_>) -> Option<Manifest> {
    reader.known_keys(
        job,
        &[
            "plant", "owner", "area", "client", "document", "dossier", "revision", "date",
            "reason", "page", "template",
        ],
    );
    let plant = reader.required_text(job, "plant");
    let owner = reader.required_text(job, "owner");
    let document = reader.required_text(job, "document");
    let revision = reader.required_text(job, "revision");
    let date = reader.required_date(job, "date");
    let page = reader
        .word(
            job,
            "page",
            &[("a4", Page::A4), ("us-letter", Page::UsLetter)],
        )
        .unwrap_or_default();
    let dossier = reader.text(job, "dossier");
    if let Some(document) = &document
        && !document.contains("{tag}")
        && !document.contains("{n}")
    {
        reader.wrong(
            job,
            "document",
            "the document number needs {tag} or {n}, else every loop has the same number",
        );
    }
    let document = document?;
    let dossier = dossier.unwrap_or_else(|| {
        document
            .replace("{tag}", "DOSSIER")
            .replace("{n}", "DOSSIER")
    });
    Some(Manifest {
        plant: plant?,
        owner: owner?,
        area: reader.text(job, "area"),
        client: reader.text(job, "client"),
        document,
        dossier,
        revision: revision?,
        date: date?,
        reason: reader.text(job, "reason"),
        page,
        template: reader.text(job, "template"),
        revision_history: Vec::new(),
        procedures: Vec::new(),
        signatures: Vec::new(),
        cautions: Vec::new(),
        logs: Vec::new(),
        design_bounds: DesignBounds::default(),
        verdict_bounds: VerdictBounds::default(),
    })
}

fn read_log_rule(reader: &mut Reader<'_>, table: &Table<'_>) -> LogRule {
    reader.known_keys(
        table,
        &[
            "files",
            "decimal",
            "dates",
            "zone",
            "date",
            "interval_s",
            "time_unit",
            "bad_values",
            "manual_values",
        ],
    );
    let zone = reader.text(table, "zone").and_then(|name| {
        let found = name.parse::<chrono_tz::Tz>().ok();
        if found.is_none() {
            let names = chrono_tz::TZ_VARIANTS.iter().map(|zone| zone.name());
            let mut message = format!("\"{name}\" is not a time zone");
            if let Some(near) = nearest(&name, names) {
                message.push_str(&format!("; did you mean \"{near}\"?"));
            }
            reader.wrong(table, "zone", &message);
        }
        found
    });
    LogRule {
        files: reader.texts(table, "files"),
        decimal: reader.word(
            table,
            "decimal",
            &[(".", DecimalSign::Point), (",", DecimalSign::Comma)],
        ),
        dates: reader.word(
            table,
            "dates",
            &[
                ("dmy", DateOrder::DayFirst),
                ("mdy", DateOrder::MonthFirst),
                ("ymd", DateOrder::YearFirst),
            ],
        ),
        zone,
        date: reader.date(table, "date"),
        interval_s: reader.positive(table, "interval_s"),
        time_unit: reader.word(
            table,
            "time_unit",
            &[
                ("ms", TimeUnit::Milliseconds),
                ("s", TimeUnit::Seconds),
                ("min", TimeUnit::Minutes),
                ("h", TimeUnit::Hours),
                ("d", TimeUnit::Days),
            ],
        ),
        bad_values: reader.texts(table, "bad_values"),
        manual_values: reader.texts(table, "manual_values"),
    }
}

/// Which way a hard limit may be moved.
#[derive(Clone, Copy, PartialEq)]
enum Tightened {
    Down,
    Up,
    Freely,
}

fn read_limits(
    reader: &mut Reader<'_>,
    table: &Table<'_>,
    design: &mut DesignBounds,
    verdict: &mut VerdictBounds,
) {
    reader.known_keys(
        table,
        &[
            "ms",
            "worst_ms",
            "dead_time",
            "scan",
            "inner",
            "time_constant",
            "noise_percent",
            "op_move_percent",
            "verdict",
        ],
    );
    for (key, bound, tightened) in [
        ("ms", &mut design.ms, Tightened::Down),
        ("worst_ms", &mut design.worst_ms, Tightened::Down),
        ("dead_time", &mut design.dead_time, Tightened::Up),
        ("scan", &mut design.scan, Tightened::Up),
        ("inner", &mut design.inner, Tightened::Up),
        (
            "time_constant",
            &mut design.time_constant,
            Tightened::Freely,
        ),
        (
            "noise_percent",
            &mut design.noise_percent,
            Tightened::Freely,
        ),
        (
            "op_move_percent",
            &mut design.op_move_percent,
            Tightened::Freely,
        ),
    ] {
        let Some(value) = reader.positive(table, key) else {
            continue;
        };
        let loosened = match tightened {
            Tightened::Down => value > *bound,
            Tightened::Up => value < *bound,
            Tightened::Freely => false,
        };
        if loosened {
            let side = if tightened == Tightened::Down {
                "most"
            } else {
                "least"
            };
            reader.wrong(
                table,
                key,
                &format!("{key} is a hard limit and may only be tightened: at {side} {bound}, found {value}"),
            );
        } else if tightened == Tightened::Down && value <= 1.0 {
            reader.wrong(
                table,
                key,
                &format!("{key} has to be above 1, as it is for any loop, found {value}"),
            );
        } else {
            *bound = value;
        }
    }
    let Some(table) = reader.table(table, "verdict") else {
        return;
    };
    let mut pairs = [
        ("change_over_sigma", &mut verdict.change_over_sigma, true),
        ("drift_percent", &mut verdict.drift_percent, false),
        ("watched_tau", &mut verdict.watched_tau, true),
        ("watched_theta", &mut verdict.watched_theta, true),
        ("samples_per_tau", &mut verdict.samples_per_tau, true),
        ("bad_percent", &mut verdict.bad_percent, false),
        ("misfit_percent", &mut verdict.misfit_percent, false),
    ];
    let known: Vec<&str> = pairs.iter().map(|(key, _, _)| *key).collect();
    reader.known_keys(&table, &known);
    for (key, bound, at_least) in &mut pairs {
        let Some([reservation, rejected]) = reader.pair(&table, key) else {
            continue;
        };
        let in_order = if *at_least {
            reservation >= rejected
        } else {
            reservation <= rejected
        };
        if in_order {
            **bound = [reservation, rejected];
        } else {
            let order = if *at_least { "not below" } else { "not above" };
            reader.wrong(
                &table,
                key,
                &format!("the pair is [reservation, rejected]: the first is {order} the second"),
            );
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const LEAST: &str = "[job]\nplant = \"P\"\nowner = \"O\"\ndocument = \"D-{tag}\"\nrevision = \"0\"\ndate = 2026-03-14\n[[procedure]]\ntitle = \"Permit\"\nreference = \"SP-1\"\n";

    fn problems(text: &str) -> Vec<String> {
        Manifest::read(text)
            .expect_err("problems")
            .iter()
            .map(ToString::to_string)
            .collect()
    }

    #[test]
    fn the_least_that_is_needed() {
        let manifest = Manifest::read(LEAST).expect("a manifest");
        assert_eq!(manifest.dossier, "D-DOSSIER");
        assert_eq!(manifest.page, Page::A4);
        assert_eq!(manifest.design_bounds, DesignBounds::default());
        assert_eq!(manifest.procedures.len(), 1);
    }

    #[test]
    fn everything_that_may_be_said() {
        let text = format!(
            "{LEAST}[[signature]]\nrole = \"Tested by\"\n[[caution]]\nloops = [\"TIC-204\"]\ntext = \"Mind\"\n\
             [[log]]\nfiles = [\"logs/a*.csv\"]\ndecimal = \",\"\ndates = \"dmy\"\nzone = \"Europe/Berlin\"\n\
             interval_s = 1\nbad_values = [\"Void\"]\ndate = 2026-03-01\ntime_unit = \"min\"\n\
             [limits]\nms = 1.6\nnoise_percent = 1.0\n[limits.verdict]\ndrift_percent = [3, 10]\n"
        );
        let manifest = Manifest::read(&text).expect("a manifest");
        assert_eq!(manifest.signatures[0].name, None);
        assert_eq!(manifest.cautions[0].loops, ["TIC-204"]);
        assert_eq!(manifest.logs[0].zone, Some(chrono_tz::Europe::Berlin));
        assert_eq!(manifest.logs[0].interval_s, Some(1.0));
        assert_eq!(manifest.design_bounds.ms, 1.6);
        assert_eq!(manifest.verdict_bounds.drift_percent, [3.0, 10.0]);
    }

    #[test]
    fn every_problem_is_told_with_its_line() {
        let text = "[job]\nplant = \"P\"\nownr = \"O\"\ndocument = \"D\"\nrevision = 0\ndate = \"14.3.2026\"\n[limits]\nms = 1.9\nscan = 2\n";
        assert_eq!(
            problems(text),
            [
                "job.toml, line 1: \"owner\" is missing in [job]",
                "job.toml, line 1: at least one [[procedure]] is needed: the cautions defer to it",
                "job.toml, line 3: \"ownr\" is not a key of [job]\n    did you mean \"owner\"?",
                "job.toml, line 4: the document number needs {tag} or {n}, else every loop has the same number",
                "job.toml, line 5: \"revision\" has to be a text in quotation marks, found a number",
                "job.toml, line 6: \"date\" has to be a date such as 2026-03-14, found \"14.3.2026\"",
                "job.toml, line 8: ms is a hard limit and may only be tightened: at most 1.8, found 1.9",
                "job.toml, line 9: scan is a hard limit and may only be tightened: at least 5, found 2",
            ]
        );
    }

    #[test]
    fn a_text_that_is_not_toml_names_its_line() {
        let found = problems("[job]\nplant = \n");
        assert!(found[0].starts_with("job.toml, line 2: "), "{found:?}");
        let found = problems(&format!("{LEAST}[[log]]\nzone = \"Europe/Berlln\"\n"));
        assert_eq!(
            found,
            [
                "job.toml, line 11: \"Europe/Berlln\" is not a time zone; did you mean \"Europe/Berlin\"?"
            ]
        );
    }
}

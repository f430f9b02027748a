//! From a record to the strings of its pages. Nothing is computed here that the record does not
//! hold, but for units, rounding and words.

mod basis;
mod dossier;
mod model;
mod native;
mod numbers;
mod open;
mod operations;
pub(super) mod plan;
mod plan_words;
mod process;
mod settings;
mod step_tests;
mod summary;
mod trial;

pub(super) use dossier::{dossier, inner_first};

use super::{Attachment, DocumentError};
use crate::display;
use crate::figures::Figure;
use crate::record::{Log, OpenCode, PageSize, Record, SettingsBlock, Signature, Status};
use crate::trace::Moment;
use chrono::NaiveDateTime;
use numbers::tidy;
use serde::Serialize;

/// Everything a record's pages print.
#[derive(Debug, Serialize)]
pub(super) struct RecordView {
    /// Name of the record within the document, for links.
    id: String,
    document: DocumentView,
    tag: String,
    service: String,
    /// What is printed at the head of every page of a draft or withheld record.
    header: String,
    /// The site's logo.
    pub(super) logo: Option<String>,
    summary: summary::Summary,
    tests: Option<step_tests::StepTests>,
    model: Option<model::ModelPart>,
    settings: Option<settings::SettingsPart>,
    trial: Option<trial::TrialPart>,
    cautions: basis::Cautions,
    basis: basis::Basis,
    attachments: Vec<AttachmentView>,
}

/// The title block and what belongs to the file.
#[derive(Debug, Serialize)]
pub(super) struct DocumentView {
    /// "Loop-tuning record".
    kind: &'static str,
    title: String,
    number: String,
    revision: String,
    date: String,
    status: &'static str,
    owner: String,
    page: &'static str,
    authors: Vec<String>,
    keywords: Vec<String>,
    /// Rows of fields.
    fields: Vec<Vec<Field>>,
}

/// One field of the title block.
#[derive(Debug, Serialize)]
pub(super) struct Field {
    label: &'static str,
    /// `None`: the number of sheets, which the page knows.
    value: Option<String>,
    /// Columns of the grid.
    span: usize,
}

impl Field {
    fn new(label: &'static str, value: impl Into<String>, span: usize) -> Self {
        Field {
            label,
            value: Some(value.into()),
            span,
        }
    }

    /// A field that leaves its place blank where there is no value.
    fn optional(label: &'static str, value: String, span: usize) -> Self {
        Field::new(if value.is_empty() { "" } else { label }, value, span)
    }
}

/// Number and title of a part.
#[derive(Debug, Clone, Serialize)]
pub(super) struct Heading {
    number: String,
    title: &'static str,
}

/// A line of a listing: label, and text beside it.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub(super) struct Entry {
    label: String,
    text: String,
}

impl Entry {
    fn new(label: impl Into<String>, text: impl Into<String>) -> Self {
        Entry {
            label: label.into(),
            text: text.into(),
        }
    }
}

/// A line of a sign-off block.
#[derive(Debug, Serialize)]
pub(super) struct SignatureView {
    role: String,
    name: String,
}

/// A figure on a page.
#[derive(Debug, Serialize)]
pub(super) struct Plot {
    path: String,
    width_mm: f64,
    caption: String,
    alt: String,
}

/// A file attached to the document.
#[derive(Debug, Serialize)]
pub(super) struct AttachmentView {
    path: String,
    relationship: &'static str,
    mime: &'static str,
    description: String,
}

impl RecordView {
    /// Adds an attachment that stands beside the templates under `name`.
    pub(super) fn attach(&mut self, attachment: &Attachment, name: String) {
        self.attachments.push(AttachmentView {
            path: format!("/{name}"),
            relationship: attachment.kind.relationship(),
            mime: attachment.kind.mime_type(),
            description: format!("{}: {}", self.tag, attachment.kind.description()),
        });
    }
}

/// The numbers of the parts, so that one part can point to another.
#[derive(Debug, Default)]
struct Parts {
    titles: Vec<&'static str>,
}

const CHANGED: &str = "What changed";
const TO_CHANGE: &str = "What is to change";
const AS_FOUND: &str = "As found";
const DOES: &str = "What the loop does now";
const WILL_DO: &str = "What the loop will do";
const OPEN: &str = "Open and not met";
const WHY_NOT: &str = "Why nothing is recommended";
const NEXT_TEST: &str = "For the next test";
const SIGN_OFF: &str = "Sign-off";
const STEP_TESTS: &str = "Step tests";
const MODEL: &str = "Process model";
const SETTINGS: &str = "Settings";
const TRIAL: &str = "Closed-loop trial";
const CAUTIONS: &str = "Cautions";
const BASIS: &str = "Basis";

/// Whether the record is withheld because the controller executes too seldom.
fn scan_too_slow(record: &Record) -> bool {
    let items = &record.document.open_items;
    items.iter().any(|item| item.code == OpenCode::ScanTooSlow)
}

impl Parts {
    fn of(record: &Record) -> Self {
        let mut titles = Vec::new();
        let mut add = |title, there: bool| {
            if there {
                titles.push(title);
            }
        };
        let withheld = record.document.status == Status::Withheld;
        let entered = record.settings.as_left.is_some();
        let modelled = record.model.is_some();
        add(AS_FOUND, withheld);
        add(CHANGED, !withheld && entered);
        add(TO_CHANGE, !withheld && !entered);
        add(DOES, !withheld && modelled && entered);
        add(WILL_DO, !withheld && modelled && !entered);
        add(OPEN, !withheld);
        add(WHY_NOT, withheld);
        add(
            NEXT_TEST,
            withheld && (!record.test.next_time.is_empty() || scan_too_slow(record)),
        );
        add(SIGN_OFF, true);
        add(STEP_TESTS, !withheld && !record.steps.is_empty());
        add(MODEL, !withheld && modelled);
        add(SETTINGS, !withheld && record.settings.recommended.is_some());
        add(TRIAL, !withheld && record.trial.is_some());
        add(CAUTIONS, true);
        add(BASIS, true);
        Parts { titles }
    }

    fn heading(&self, title: &'static str) -> Option<Heading> {
        let at = self.titles.iter().position(|t| *t == title)?;
        Some(Heading {
            number: (at + 1).to_string(),
            title,
        })
    }

    /// The first of the titles that is there.
    fn first_of(&self, titles: &[&'static str]) -> Heading {
        titles
            .iter()
            .find_map(|title| self.heading(title))
            .expect("every record has the parts of its first page")
    }

    /// " (see 7)" put before the full stop of a text, where that part is there.
    fn pointing(&self, text: &str, title: &'static str) -> String {
        let text = numbers::sentence(text);
        match self.heading(title) {
            Some(heading) if !text.contains("(see ") => {
                let bare = text.strip_suffix('.').unwrap_or(&text);
                let see = format!("see{}{}", display::NO_BREAK, heading.number);
                match bare.strip_suffix(')') {
                    Some(open) => format!("{open}; {see})."),
                    None => format!("{bare} ({see})."),
                }
            }
            _ => text,
        }
    }
}

/// A record with what every part of its view needs.
struct Context<'a> {
    record: &'a Record,
    figures: &'a [Figure],
    /// Folder of the figures in the document.
    folder: &'a str,
    parts: Parts,
    /// PV units per % of PV span.
    pv_per_percent: f64,
    /// OP units per % of OP span.
    op_per_percent: f64,
    pv_unit: String,
    op_unit: String,
}

impl<'a> Context<'a> {
    fn new(
        record: &'a Record,
        figures: &'a [Figure],
        folder: &'a str,
    ) -> Result<Self, DocumentError> {
        let controller = record
            .controller()
            .map_err(|e| DocumentError::Record(e.to_string()))?;
        Ok(Context {
            record,
            figures,
            folder,
            parts: Parts::of(record),
            pv_per_percent: controller.pv_span.width() / 100.0,
            op_per_percent: controller.op_span.width() / 100.0,
            pv_unit: display::unit(&record.control_loop.pv.unit),
            op_unit: display::unit(&record.control_loop.op.unit),
        })
    }

    fn withheld(&self) -> bool {
        self.record.document.status == Status::Withheld
    }

    /// The settings the loop has after the work: as left, or recommended until they are entered.
    fn after(&self) -> Option<&'a SettingsBlock> {
        let settings = &self.record.settings;
        settings.as_left.as_ref().or(settings.recommended.as_ref())
    }

    /// The head over the settings after the work.
    fn after_head(&self) -> &'static str {
        if self.record.settings.as_left.is_some() {
            "As left"
        } else {
            "To enter"
        }
    }

    /// Engineering gain (PV unit per OP unit) of a gain in %/%.
    fn gain_factor(&self) -> f64 {
        self.pv_per_percent / self.op_per_percent
    }

    fn plot(&self, name: &str) -> Option<Plot> {
        let figure = self.figures.iter().find(|figure| figure.name == name)?;
        Some(Plot {
            path: format!("/{}/{name}", self.folder),
            width_mm: figure.width_mm,
            caption: figure.caption.clone(),
            alt: figure.alt.clone(),
        })
    }
}

/// The strings of a record's pages. `folder` holds the figures, `id` names the record for links.
pub(super) fn record(
    record: &Record,
    figures: &[Figure],
    folder: &str,
    id: &str,
) -> Result<RecordView, DocumentError> {
    let context = Context::new(record, figures, folder)?;
    let l = &record.control_loop;
    Ok(RecordView {
        id: id.to_owned(),
        document: document(&context),
        tag: tidy(&l.tag),
        service: tidy(&l.service),
        header: header(record),
        logo: None,
        summary: summary::summary(&context),
        tests: step_tests::step_tests(&context),
        model: model::model(&context),
        settings: settings::settings(&context),
        trial: trial::trial(&context),
        cautions: basis::cautions(&context),
        basis: basis::basis(&context),
        attachments: Vec::new(),
    })
}

/// The status as a word on the page.
fn status_word(status: Status) -> &'static str {
    match status {
        Status::Draft => "Draft",
        Status::ForSignature => "For signature",
        Status::Withheld => "Withheld",
    }
}

fn page_name(page: PageSize) -> &'static str {
    match page {
        PageSize::A4 => "a4",
        PageSize::UsLetter => "us-letter",
    }
}

fn header(record: &Record) -> String {
    match record.document.status {
        Status::ForSignature => String::new(),
        Status::Withheld => "Withheld: no settings are recommended".to_owned(),
        Status::Draft => {
            let open = record.document.open_items.len();
            if open == 0 {
                "Draft: not for hand-over".to_owned()
            } else {
                format!(
                    "Draft: not for hand-over, {} open",
                    display::counted(open, "item", "items")
                )
            }
        }
    }
}

fn document(context: &Context) -> DocumentView {
    let record = context.record;
    let d = &record.document;
    let l = &record.control_loop;
    let text = |value: &Option<String>| value.as_deref().map(tidy).unwrap_or_default();
    let controller = l
        .particulars
        .get("controller")
        .map_or_else(String::new, |c| tidy(c));
    let status = status_word(d.status);
    DocumentView {
        kind: "Loop-tuning record",
        title: format!(
            "{} {} {}, loop-tuning record",
            tidy(&d.number),
            tidy(&l.tag),
            tidy(&l.service)
        ),
        number: tidy(&d.number),
        revision: tidy(&d.revision),
        date: d.date.to_string(),
        status,
        owner: tidy(&d.owner),
        page: page_name(d.page),
        authors: d.creator.as_deref().map(tidy).into_iter().collect(),
        keywords: vec![
            tidy(&d.number),
            format!("revision {}", tidy(&d.revision)),
            status.to_lowercase(),
        ],
        fields: vec![
            vec![
                Field::new("Legal owner", tidy(&d.owner), 2),
                Field::new("Plant", tidy(&d.plant), 2),
                Field::optional("Area", text(&d.area), 2),
            ],
            vec![
                Field::new("Document number", tidy(&d.number), 2),
                Field::new("Revision", tidy(&d.revision), 1),
                Field::new("Date of issue", d.date.to_string(), 1),
                Field::new("Status", status, 1),
                Field {
                    label: "Sheet",
                    value: None,
                    span: 1,
                },
            ],
            vec![
                Field::new("Created by", text(&d.creator), 1),
                Field::new("Approved by", text(&d.approver), 1),
                Field::optional("Controller", controller, 2),
                Field::new("PV range", range(&l.pv), 1),
                Field::new(
                    "Scan",
                    display::with_unit(&display::plain(l.scan_s, 4), "s"),
                    1,
                ),
            ],
        ],
    }
}

/// "60 to 140 °C".
fn range(of: &crate::record::Range) -> String {
    let end = |value| numbers::grouped(&display::plain(value, 6));
    display::with_unit(&format!("{} to {}", end(of.low), end(of.high)), &of.unit)
}

fn sign_off(signatures: &[Signature]) -> Vec<SignatureView> {
    signatures
        .iter()
        .map(|s| SignatureView {
            role: tidy(&s.role),
            name: s.name.as_deref().map(tidy).unwrap_or_default(),
        })
        .collect()
}

/// "2026-03-11 from 09:05 to 11:14", or the length of a log that bears no date.
fn span_of(log: &Log, with_seconds: bool) -> String {
    match (log.from, log.to) {
        (Moment::Dated(from), Moment::Dated(to)) => dated_span(from, to, with_seconds),
        (from, to) => format!(
            "for {} (the log bears no date)",
            display::duration(elapsed(to) - elapsed(from))
        ),
    }
}

fn dated_span(from: NaiveDateTime, to: NaiveDateTime, with_seconds: bool) -> String {
    let time = if with_seconds { "%H:%M:%S" } else { "%H:%M" };
    if from.date() == to.date() {
        format!(
            "{} from {} to {}",
            from.format("%Y-%m-%d"),
            from.format(time),
            to.format(time)
        )
    } else {
        let full = format!("%Y-%m-%d\u{a0}{time}");
        format!("from {} to {}", from.format(&full), to.format(&full))
    }
}

fn elapsed(moment: Moment) -> f64 {
    match moment {
        Moment::Elapsed(seconds) => seconds,
        Moment::Dated(_) => 0.0,
    }
}

//! The documents: records, dossiers and plans typeset as PDF.
//!
//! The pages hold only what the record holds: `view` turns it into finished strings, the templates
//! place them. The same record, figures, attachments and templates give the same bytes.

mod pages;
mod view;
mod world;

#[cfg(test)]
mod dossier_tests;
#[cfg(test)]
mod golden_tests;
#[cfg(test)]
mod sample;
#[cfg(test)]
mod tests;
#[cfg(test)]
mod text_tests;

use crate::figures::Figure;
use crate::plan::Plan;
use crate::record::{PageSize, Procedure, Record, Signature};
use chrono::{Datelike, NaiveDate};
use std::collections::{BTreeMap, BTreeSet};
use thiserror::Error;
use typst::foundations::{Bytes, Datetime, Smart};
use typst_layout::PagedDocument;
use typst_pdf::{PdfOptions, PdfStandard, PdfStandards, Timestamp};
use world::DocumentWorld;

pub use pages::{PageLayout, Placed};
pub use world::Alphabet;

/// Layout results older than this many documents are forgotten. Kept that long they speed up the
/// next record by a quarter; kept for ever they fill the memory of a job with hundreds of loops.
const KEEP_LAYOUTS: usize = 5;

/// What to do about a character that no font has.
pub const FONT_HINT: &str = "write the text with other characters, or put a font that has it (.otf, .ttf, .otc, .ttc) \
                             into the folder that job.toml names as its template";

/// Why a document could not be typeset.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
pub enum DocumentError {
    /// A template is wrong: as Typst reports it, with file, line, column and hints.
    #[error("{0}")]
    Template(String),
    /// A template file is not UTF-8 text.
    #[error("{name}: a template must be UTF-8 text")]
    TemplateEncoding {
        /// Its name in the template folder.
        name: String,
    },
    /// A file of the template folder, a figure or an attachment has a name that cannot be used.
    #[error("\"{name}\" cannot be the name of a file in a document")]
    FileName {
        /// The name.
        name: String,
    },
    /// A character that no embedded font can draw.
    #[error(
        "{place}: no font has the character \"{character}\" (U+{:04X}) of the text \"{text}\"",
        u32::from(*character)
    )]
    MissingCharacter {
        /// The run of text that holds it.
        text: String,
        /// The character.
        character: char,
        /// The page or figure.
        place: String,
    },
    /// The record, as read back, holds a range that is none.
    #[error("the record cannot be printed: {0}")]
    Record(String),
    /// The pages stand but do not make a PDF/A-3a and PDF/UA-1 file: as the export reports it.
    #[error("{0}")]
    Export(String),
}

impl DocumentError {
    /// What to do about it, where something can be done.
    pub fn hint(&self) -> Option<&'static str> {
        match self {
            DocumentError::MissingCharacter { .. } => Some(FONT_HINT),
            DocumentError::TemplateEncoding { .. } => Some("save the file as UTF-8"),
            _ => None,
        }
    }
}

/// The site's own templates by file name, each in the place of the project's file of that name.
/// Fonts (`.otf`, `.ttf`, and collections of them) draw what the project's cannot; `logo.svg` or `logo.png` is printed on the
/// first page.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Templates {
    files: BTreeMap<String, Vec<u8>>,
}

impl Templates {
    /// The files of a template folder: name below the folder, with forward slashes, and content.
    pub fn new(files: BTreeMap<String, Vec<u8>>) -> Self {
        Templates { files }
    }

    /// Name and content of each file.
    fn files(&self) -> impl Iterator<Item = (&str, &Vec<u8>)> {
        self.files
            .iter()
            .map(|(name, bytes)| (name.as_str(), bytes))
    }

    /// The site's logo.
    fn logo(&self) -> Option<String> {
        ["logo.svg", "logo.png"]
            .into_iter()
            .find(|name| self.files.contains_key(*name))
            .map(|name| format!("/{name}"))
    }
}

/// What an attached file is to the document.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum AttachmentKind {
    /// The record's JSON.
    Record,
    /// Samples that the record was made from, CSV.
    Samples,
    /// The loop's row of the loop schedule, CSV.
    ScheduleRow,
}

impl AttachmentKind {
    fn relationship(self) -> &'static str {
        match self {
            AttachmentKind::Record => "data",
            AttachmentKind::Samples | AttachmentKind::ScheduleRow => "source",
        }
    }

    fn mime_type(self) -> &'static str {
        match self {
            AttachmentKind::Record => "application/json",
            AttachmentKind::Samples | AttachmentKind::ScheduleRow => "text/csv",
        }
    }

    fn description(self) -> &'static str {
        match self {
            AttachmentKind::Record => "The figures of the record",
            AttachmentKind::Samples => "Samples the record was made from",
            AttachmentKind::ScheduleRow => "The loop's row of the loop schedule",
        }
    }
}

/// A file attached to a document.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Attachment {
    /// Name, e.g. "record.json"; in a dossier the loop's tag is put before it.
    pub name: String,
    /// What it is.
    pub kind: AttachmentKind,
    /// Content.
    pub bytes: Vec<u8>,
}

/// One record of a dossier with what goes with it.
#[derive(Debug, Clone, Copy)]
pub struct DossierRecord<'a> {
    /// The record.
    pub record: &'a Record,
    /// Its figures.
    pub figures: &'a [Figure],
    /// Its attachments.
    pub attachments: &'a [Attachment],
}

/// What a dossier prints beside its records.
#[derive(Debug, Clone, PartialEq)]
pub struct DossierInput {
    /// Document number.
    pub number: String,
    /// Title: "Loops of Unit 200".
    pub title: String,
    /// Revision.
    pub revision: String,
    /// Date of issue.
    pub date: NaiveDate,
    /// Legal owner.
    pub owner: String,
    /// Plant.
    pub plant: String,
    /// Area.
    pub area: Option<String>,
    /// Client.
    pub client: Option<String>,
    /// Page size.
    pub page: PageSize,
    /// Sign-off block.
    pub signatures: Vec<Signature>,
    /// Site procedures that govern.
    pub procedures: Vec<Procedure>,
    /// Tags of the loops of the job that have no record; any makes the dossier a draft.
    pub not_recorded: Vec<String>,
    /// Program and version.
    pub program: String,
}

/// A document typeset.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Typeset {
    /// The PDF.
    pub pdf: Vec<u8>,
    /// What the typesetter warns of, with file, line and column of the template: a font family that is not
    /// there, a name that is out of use. The project's own templates give none.
    pub warnings: Vec<String>,
}

/// Typesets one record: PDF/A-3a and PDF/UA-1, with the attachments in it.
///
/// # Errors
/// Where a template is wrong or a character cannot be drawn.
pub fn typeset_record(
    record: &Record,
    figures: &[Figure],
    attachments: &[Attachment],
    templates: &Templates,
) -> Result<Typeset, DocumentError> {
    let laid_out = lay_out_record(record, figures, attachments, templates)?;
    let document = &record.document;
    laid_out.export(
        &format!("{} revision {}", document.number, document.revision),
        document.date,
        &record.provenance.program,
    )
}

/// The plain text of each page of a record.
///
/// # Errors
/// As [`typeset_record`].
pub fn record_page_texts(
    record: &Record,
    figures: &[Figure],
    templates: &Templates,
) -> Result<Vec<String>, DocumentError> {
    let laid_out = lay_out_record(record, figures, &[], templates)?;
    let texts = pages::texts(&laid_out.document);
    comemo::evict(KEEP_LAYOUTS);
    Ok(texts)
}

/// Where everything stands on the pages of a record.
///
/// # Errors
/// As [`typeset_record`].
pub fn record_layout(
    record: &Record,
    figures: &[Figure],
    templates: &Templates,
) -> Result<Vec<PageLayout>, DocumentError> {
    let laid_out = lay_out_record(record, figures, &[], templates)?;
    let layout = pages::layout(&laid_out.document);
    comemo::evict(KEEP_LAYOUTS);
    Ok(layout)
}

/// The files that a record is typeset from, by name: what Typst needs beside the fonts to make its pages.
/// `record.typ` is the one to begin with.
///
/// # Errors
/// As [`typeset_record`].
pub fn record_sources(
    record: &Record,
    figures: &[Figure],
    attachments: &[Attachment],
    templates: &Templates,
) -> Result<BTreeMap<String, Vec<u8>>, DocumentError> {
    Ok(lay_out_record(record, figures, attachments, templates)?
        .world
        .files())
}

/// Typesets a dossier: cover, register, open items, page for operations, settings to enter, and
/// every record, inner loops before the loops that cascade to them.
///
/// # Errors
/// As [`typeset_record`].
pub fn typeset_dossier(
    dossier: &DossierInput,
    records: &[DossierRecord],
    templates: &Templates,
) -> Result<Typeset, DocumentError> {
    lay_out_dossier(dossier, records, templates)?.export(
        &format!("{} revision {}", dossier.number, dossier.revision),
        dossier.date,
        &dossier.program,
    )
}

/// The plain text of each page of a dossier.
///
/// # Errors
/// As [`typeset_record`].
pub fn dossier_page_texts(
    dossier: &DossierInput,
    records: &[DossierRecord],
    templates: &Templates,
) -> Result<Vec<String>, DocumentError> {
    let laid_out = lay_out_dossier(dossier, records, templates)?;
    let texts = pages::texts(&laid_out.document);
    comemo::evict(KEEP_LAYOUTS);
    Ok(texts)
}

/// Where everything stands on the pages of a dossier.
///
/// # Errors
/// As [`typeset_record`].
pub fn dossier_layout(
    dossier: &DossierInput,
    records: &[DossierRecord],
    templates: &Templates,
) -> Result<Vec<PageLayout>, DocumentError> {
    let laid_out = lay_out_dossier(dossier, records, templates)?;
    let layout = pages::layout(&laid_out.document);
    comemo::evict(KEEP_LAYOUTS);
    Ok(layout)
}

/// Typesets the plan of a step test: PDF/A-3a and PDF/UA-1; the seal among its keywords is still to be made.
///
/// # Errors
/// As [`typeset_record`].
pub fn typeset_plan(plan: &Plan, templates: &Templates) -> Result<Typeset, DocumentError> {
    lay_out_plan(plan, templates)?.export(&plan.number, plan.date, plan.program)
}

/// The plain text of each page of a plan.
///
/// # Errors
/// As [`typeset_record`].
pub fn plan_page_texts(plan: &Plan, templates: &Templates) -> Result<Vec<String>, DocumentError> {
    let laid_out = lay_out_plan(plan, templates)?;
    let texts = pages::texts(&laid_out.document);
    comemo::evict(KEEP_LAYOUTS);
    Ok(texts)
}

/// A document laid out, ready to be exported.
struct LaidOut {
    world: DocumentWorld,
    document: PagedDocument,
    warnings: Vec<String>,
}

impl LaidOut {
    fn new(
        main: &str,
        view: &impl serde::Serialize,
        templates: &Templates,
        figures: &[(String, &Figure)],
        mut files: Vec<(String, Bytes)>,
    ) -> Result<Self, DocumentError> {
        let data = serde_json::to_vec(view).map_err(|e| DocumentError::Record(e.to_string()))?;
        files.push(("view.json".to_owned(), Bytes::new(data)));
        let mut world = DocumentWorld::new(main, templates, files)?;
        for (folder, figure) in figures {
            pages::check_figure(&world, figure)?;
            // The same few names in every document.
            world.add_figure(&format!("{folder}/{}", figure.name), &figure.svg)?;
        }
        let (document, warnings) = world.lay_out()?;
        pages::check_glyphs(&document)?;
        Ok(LaidOut {
            world,
            document,
            warnings,
        })
    }

    /// The PDF, with an identifier and a date that are the document's own.
    fn export(
        mut self,
        ident: &str,
        date: NaiveDate,
        program: &str,
    ) -> Result<Typeset, DocumentError> {
        let midnight = u8::try_from(date.month())
            .ok()
            .zip(u8::try_from(date.day()).ok())
            .and_then(|(month, day)| Datetime::from_ymd_hms(date.year(), month, day, 0, 0, 0))
            .ok_or_else(|| DocumentError::Record(format!("{date} is no date of issue")))?;
        let standards = PdfStandards::new(&[PdfStandard::A_3a, PdfStandard::Ua_1])
            .expect("PDF/A-3a and PDF/UA-1 go together");
        let options = PdfOptions {
            ident: Smart::Custom(ident.to_owned()),
            creator: Smart::Custom(Some(program.to_owned())),
            timestamp: Some(Timestamp::new_utc(midnight)),
            standards,
            ..PdfOptions::default()
        };
        let pdf = typst_pdf::pdf(&self.document, &options)
            .map_err(|diagnostics| DocumentError::Export(self.world.told(&diagnostics)));
        let warnings = std::mem::take(&mut self.warnings);
        drop(self);
        comemo::evict(KEEP_LAYOUTS);
        pdf.map(|pdf| Typeset { pdf, warnings })
    }
}

fn lay_out_record(
    record: &Record,
    figures: &[Figure],
    attachments: &[Attachment],
    templates: &Templates,
) -> Result<LaidOut, DocumentError> {
    let mut files = Vec::new();
    let mut view = view::record(record, figures, "plots", "record")?;
    view.logo = templates.logo();
    for attachment in attachments {
        view.attach(attachment, attachment.name.clone());
        files.push((
            attachment.name.clone(),
            Bytes::new(attachment.bytes.clone()),
        ));
    }
    LaidOut::new(
        "record.typ",
        &view,
        templates,
        &placed(figures, "plots").collect::<Vec<_>>(),
        files,
    )
}

fn lay_out_dossier(
    dossier: &DossierInput,
    records: &[DossierRecord],
    templates: &Templates,
) -> Result<LaidOut, DocumentError> {
    let mut files = Vec::new();
    let mut names = BTreeSet::new();
    let ordered = view::inner_first(records);
    let mut figures = Vec::new();
    let mut views = Vec::with_capacity(ordered.len());
    for (index, part) in ordered.iter().enumerate() {
        let folder = format!("plots/{index}");
        let mut view = view::record(
            part.record,
            part.figures,
            &folder,
            &format!("record-{index}"),
        )?;
        view.logo = templates.logo();
        figures.extend(placed(part.figures, &folder));
        for attachment in part.attachments {
            let mut name = format!(
                "{}-{}",
                plain_name(&part.record.control_loop.tag),
                attachment.name
            );
            // Tags that differ only in a sign that a file name cannot hold.
            if !names.insert(name.clone()) {
                name = format!("{index}-{name}");
            }
            view.attach(attachment, name.clone());
            files.push((name, Bytes::new(attachment.bytes.clone())));
        }
        views.push(view);
    }
    let view = view::dossier(dossier, &ordered, views, templates.logo())?;
    LaidOut::new("dossier.typ", &view, templates, &figures, files)
}

/// Figures with the folder they lie in.
fn placed<'a>(figures: &'a [Figure], folder: &str) -> impl Iterator<Item = (String, &'a Figure)> {
    let folder = folder.to_owned();
    figures.iter().map(move |figure| (folder.clone(), figure))
}

fn lay_out_plan(plan: &Plan, templates: &Templates) -> Result<LaidOut, DocumentError> {
    let mut view = view::plan::plan(plan);
    view.logo = templates.logo();
    LaidOut::new("plan.typ", &view, templates, &[], Vec::new())
}

/// A tag as part of a file name.
fn plain_name(tag: &str) -> String {
    tag.chars()
        .map(|c| {
            if c.is_alphanumeric() || c == '-' || c == '_' {
                c
            } else {
                '_'
            }
        })
        .collect()
}

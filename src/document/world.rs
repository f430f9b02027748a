//! Everything Typst sees while it typesets one document: compiled-in templates and fonts, a site's
//! own templates over them, and the data of the document. No disk, no clock, no network.

use super::{DocumentError, Templates};
use std::collections::HashMap;
use std::sync::LazyLock;
use typst::diag::{FileError, FileResult, SourceDiagnostic};
use typst::foundations::{Bytes, Datetime, Duration};
use typst::syntax::{DiagSpan, FileId, RootedPath, Source, VirtualPath, VirtualRoot};
use typst::text::{Font, FontBook};
use typst::utils::LazyHash;
use typst::{Library, LibraryExt, World, WorldExt};
use typst_layout::PagedDocument;

/// The project's own templates by file name.
const TEMPLATES: &[(&str, &str)] = &[
    ("rules.typ", include_str!("../../templates/rules.typ")),
    (
        "components.typ",
        include_str!("../../templates/components.typ"),
    ),
    ("summary.typ", include_str!("../../templates/summary.typ")),
    ("tests.typ", include_str!("../../templates/tests.typ")),
    ("model.typ", include_str!("../../templates/model.typ")),
    ("settings.typ", include_str!("../../templates/settings.typ")),
    ("trial.typ", include_str!("../../templates/trial.typ")),
    ("basis.typ", include_str!("../../templates/basis.typ")),
    ("pages.typ", include_str!("../../templates/pages.typ")),
    ("record.typ", include_str!("../../templates/record.typ")),
    ("plan.typ", include_str!("../../templates/plan.typ")),
    ("cover.typ", include_str!("../../templates/cover.typ")),
    ("register.typ", include_str!("../../templates/register.typ")),
    (
        "operations.typ",
        include_str!("../../templates/operations.typ"),
    ),
    ("enter.typ", include_str!("../../templates/enter.typ")),
    ("dossier.typ", include_str!("../../templates/dossier.typ")),
];

/// The text family of every document, upright, bold, italic and both.
const FONTS: [&[u8]; 4] = [
    include_bytes!("../../templates/fonts/SourceSans3-Regular.otf"),
    include_bytes!("../../templates/fonts/SourceSans3-Bold.otf"),
    include_bytes!("../../templates/fonts/SourceSans3-It.otf"),
    include_bytes!("../../templates/fonts/SourceSans3-BoldIt.otf"),
];

/// What all documents of one process share.
struct Shared {
    library: LazyHash<Library>,
    fonts: Vec<Font>,
    book: LazyHash<FontBook>,
    sources: HashMap<FileId, Source>,
}

static SHARED: LazyLock<Shared> = LazyLock::new(|| {
    let fonts: Vec<Font> = FONTS
        .iter()
        .flat_map(|data| Font::iter(Bytes::new(*data)))
        .collect();
    Shared {
        library: LazyHash::new(Library::default()),
        book: LazyHash::new(FontBook::from_fonts(&fonts)),
        fonts,
        sources: TEMPLATES
            .iter()
            .map(|(name, text)| {
                let id = file_id(name).expect("names of the project's templates are plain");
                (id, Source::new(id, (*text).to_owned()))
            })
            .collect(),
    }
});

/// The id of a file below the virtual root. Ids live as long as the process, so every document
/// uses the same few names.
fn file_id(name: &str) -> Result<FileId, DocumentError> {
    let path = VirtualPath::new(format!("/{name}")).map_err(|_| DocumentError::FileName {
        name: name.to_owned(),
    })?;
    Ok(FileId::new(RootedPath::new(VirtualRoot::Project, path)))
}

/// The name of a file as the person who wrote it knows it.
fn file_name(id: FileId) -> String {
    id.get().vpath().get_without_slash().to_owned()
}

/// The inputs of one document.
pub(super) struct DocumentWorld {
    main: FileId,
    /// The site's templates, which stand before the project's own of the same name.
    sources: HashMap<FileId, Source>,
    files: HashMap<FileId, Bytes>,
    /// The site's fonts after the project's own, where the template folder holds any.
    own_fonts: Option<(Vec<Font>, LazyHash<FontBook>)>,
}

impl DocumentWorld {
    /// A world that typesets the template `main`, with the given data files beside it.
    pub(super) fn new(
        main: &str,
        templates: &Templates,
        files: impl IntoIterator<Item = (String, Bytes)>,
    ) -> Result<Self, DocumentError> {
        let mut world = DocumentWorld {
            main: file_id(main)?,
            sources: HashMap::new(),
            files: HashMap::new(),
            own_fonts: None,
        };
        let mut fonts = Vec::new();
        for (name, bytes) in templates.files() {
            let id = file_id(name)?;
            let data = Bytes::new(bytes.clone());
            if name.ends_with(".typ") {
                let text = String::from_utf8(bytes.clone()).map_err(|_| {
                    DocumentError::TemplateEncoding {
                        name: name.to_owned(),
                    }
                })?;
                world.sources.insert(id, Source::new(id, text));
            } else if name.ends_with(".otf") || name.ends_with(".ttf") {
                fonts.extend(Font::iter(data.clone()));
            }
            world.files.insert(id, data);
        }
        if !fonts.is_empty() {
            let all: Vec<Font> = SHARED.fonts.iter().cloned().chain(fonts).collect();
            let book = LazyHash::new(FontBook::from_fonts(&all));
            world.own_fonts = Some((all, book));
        }
        for (name, data) in files {
            world.files.insert(file_id(&name)?, data);
        }
        Ok(world)
    }

    fn fonts(&self) -> &[Font] {
        match &self.own_fonts {
            Some((fonts, _)) => fonts,
            None => &SHARED.fonts,
        }
    }

    /// Whether some font of this document can draw the character.
    pub(super) fn can_draw(&self, character: char) -> bool {
        self.fonts()
            .iter()
            .any(|font| font.info().coverage.contains(character as u32))
    }

    /// Lays the document out.
    pub(super) fn lay_out(&self) -> Result<PagedDocument, DocumentError> {
        typst::compile::<PagedDocument>(self)
            .output
            .map_err(|diagnostics| DocumentError::Template(self.told(&diagnostics)))
    }

    /// Typst's diagnostics as it reports them: file, line, column, message, hints.
    pub(super) fn told(&self, diagnostics: &[SourceDiagnostic]) -> String {
        let lines: Vec<String> = diagnostics
            .iter()
            .map(|diagnostic| {
                let mut line = String::new();
                // An error inside a built-in function has its place in the call that led to it.
                let place = self.place(diagnostic.span).or_else(|| {
                    diagnostic
                        .trace
                        .iter()
                        .find_map(|point| self.place(point.span.into()))
                });
                if let Some(place) = place {
                    line.push_str(&place);
                    line.push_str(": ");
                }
                line.push_str(&diagnostic.message);
                for hint in &diagnostic.hints {
                    line.push_str("\n    hint: ");
                    line.push_str(&hint.v);
                }
                line
            })
            .collect();
        lines.join("\n")
    }

    fn place(&self, span: DiagSpan) -> Option<String> {
        let id = span.id()?;
        let range = self.range(span)?;
        let name = file_name(id);
        let text = match self.source(id) {
            Ok(source) => source.text().to_owned(),
            Err(_) => String::from_utf8(self.file(id).ok()?.to_vec()).ok()?,
        };
        let before = text.get(..range.start)?;
        let line = before.matches('\n').count() + 1;
        let column = before.chars().rev().take_while(|&c| c != '\n').count() + 1;
        Some(format!("{name}:{line}:{column}"))
    }
}

impl World for DocumentWorld {
    fn library(&self) -> &LazyHash<Library> {
        &SHARED.library
    }

    fn book(&self) -> &LazyHash<FontBook> {
        match &self.own_fonts {
            Some((_, book)) => book,
            None => &SHARED.book,
        }
    }

    fn main(&self) -> FileId {
        self.main
    }

    fn source(&self, id: FileId) -> FileResult<Source> {
        self.sources
            .get(&id)
            .or_else(|| SHARED.sources.get(&id))
            .cloned()
            .ok_or_else(|| FileError::NotFound(file_name(id).into()))
    }

    fn file(&self, id: FileId) -> FileResult<Bytes> {
        if let Some(data) = self.files.get(&id) {
            return Ok(data.clone());
        }
        self.source(id)
            .map(|source| Bytes::from_string(source.text().to_owned()))
    }

    fn font(&self, index: usize) -> Option<Font> {
        self.fonts().get(index).cloned()
    }

    /// No clock: the date of a document is part of its data.
    fn today(&self, _offset: Option<Duration>) -> Option<Datetime> {
        None
    }
}

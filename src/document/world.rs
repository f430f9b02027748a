//! Everything Typst sees while it typesets one document: compiled-in templates and fonts, a site's
//! own templates over them, and the data of the document. No disk, no clock, no network.

use super::{DocumentError, Templates};
use crate::record::Record;
use std::collections::{BTreeMap, HashMap};
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

/// The text family of every document, upright, bold, italic and both; after it the families that
/// stand in, in this order, for what it cannot draw.
const FONTS: [&[u8]; 19] = [
    include_bytes!("../../templates/fonts/SourceSans3-Regular.otf"),
    include_bytes!("../../templates/fonts/SourceSans3-Bold.otf"),
    include_bytes!("../../templates/fonts/SourceSans3-It.otf"),
    include_bytes!("../../templates/fonts/SourceSans3-BoldIt.otf"),
    include_bytes!("../../templates/fonts/NotoSans-Regular.ttf"),
    include_bytes!("../../templates/fonts/NotoSansArabic-Regular.ttf"),
    include_bytes!("../../templates/fonts/NotoSansArabic-Bold.ttf"),
    include_bytes!("../../templates/fonts/NotoSansArmenian-Regular.ttf"),
    include_bytes!("../../templates/fonts/NotoSansArmenian-Bold.ttf"),
    include_bytes!("../../templates/fonts/NotoSansDevanagari-Regular.ttf"),
    include_bytes!("../../templates/fonts/NotoSansDevanagari-Bold.ttf"),
    include_bytes!("../../templates/fonts/NotoSansGeorgian-Regular.ttf"),
    include_bytes!("../../templates/fonts/NotoSansGeorgian-Bold.ttf"),
    include_bytes!("../../templates/fonts/NotoSansHebrew-Regular.ttf"),
    include_bytes!("../../templates/fonts/NotoSansHebrew-Bold.ttf"),
    include_bytes!("../../templates/fonts/NotoSansThai-Regular.ttf"),
    include_bytes!("../../templates/fonts/NotoSansThai-Bold.ttf"),
    include_bytes!("../../templates/fonts/NotoSansSymbols-Regular.ttf"),
    include_bytes!("../../templates/fonts/NotoSansMath-Regular.ttf"),
];

/// Endings of font files, single ones and collections.
const FONT_ENDINGS: [&str; 4] = [".otf", ".ttf", ".otc", ".ttc"];

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

fn is_font(name: &str) -> bool {
    let name = name.to_lowercase();
    FONT_ENDINGS.iter().any(|ending| name.ends_with(ending))
}

/// The first character of the text that none of the fonts can draw.
fn undrawable(fonts: &[Font], text: &str) -> Option<char> {
    text.chars().find(|&character| {
        let drawn = |font: &Font| font.info().coverage.contains(character as u32);
        !(character.is_control() || is_unseen(character) || fonts.iter().any(drawn))
    })
}

/// Whether a character only tells how others are drawn, and is never drawn itself (Unicode's
/// Default_Ignorable_Code_Point, as far as it is found in text).
fn is_unseen(character: char) -> bool {
    matches!(
        character,
        '\u{ad}' | '\u{61c}' | '\u{200b}'..='\u{200f}' | '\u{202a}'..='\u{202e}' | '\u{2060}'..='\u{206f}'
            | '\u{fe00}'..='\u{fe0f}' | '\u{feff}'
    )
}

/// The characters that documents with a site's templates can show.
pub struct Alphabet {
    /// The site's own fonts; the project's stand before them.
    site: Vec<Font>,
}

impl Alphabet {
    /// That of documents with these templates.
    pub fn new(templates: &Templates) -> Self {
        let site = templates
            .files()
            .filter(|(name, _)| is_font(name))
            .flat_map(|(_, bytes)| Font::iter(Bytes::new(bytes.clone())))
            .collect();
        Alphabet { site }
    }

    /// The first character of the text that no font has.
    pub fn lacks(&self, text: &str) -> Option<char> {
        undrawable(&SHARED.fonts, text).and_then(|_| {
            // Rarely asked for: only where the project's own fonts do not do.
            let all: Vec<Font> = SHARED.fonts.iter().chain(&self.site).cloned().collect();
            undrawable(&all, text)
        })
    }

    /// The first such character among the texts of a record, with its text.
    pub fn lacks_for(&self, record: &Record) -> Option<(char, String)> {
        let mut rest = vec![serde_json::to_value(record).ok()?];
        while let Some(value) = rest.pop() {
            match value {
                serde_json::Value::String(text) => {
                    if let Some(character) = self.lacks(&text) {
                        return Some((character, text));
                    }
                }
                serde_json::Value::Array(list) => rest.extend(list),
                serde_json::Value::Object(map) => rest.extend(map.into_iter().map(|(_, v)| v)),
                _ => {}
            }
        }
        None
    }
}

/// A figure with each run of a label that the text family cannot draw given to the first font that can.
/// The reader of SVG finds a stand-in only where one font has the whole label. (Scripts that join several
/// characters to one sign, Devanagari and Thai, it still cannot mix with others; the export says so.)
fn with_stand_ins(fonts: &[Font], svg: &str) -> String {
    let drawn_by = |character: char| {
        fonts
            .iter()
            .position(|font| font.info().coverage.contains(character as u32))
    };
    let mut out = String::with_capacity(svg.len());
    for part in svg.split_inclusive('>') {
        let (text, tag) = part.split_at(part.find('<').unwrap_or(part.len()));
        let mut current = 0;
        for character in text.chars() {
            let font = match drawn_by(character) {
                Some(font) if !(character.is_whitespace() || is_unseen(character)) => font,
                _ => current,
            };
            if font != current {
                if current != 0 {
                    out.push_str("</tspan>");
                }
                if font != 0 {
                    out.push_str("<tspan font-family=\"&apos;");
                    out.push_str(&fonts[font].info().family);
                    out.push_str("&apos;\">");
                }
                current = font;
            }
            out.push(character);
        }
        if current != 0 {
            out.push_str("</tspan>");
        }
        out.push_str(tag);
    }
    out
}

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
            } else if is_font(name) {
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

    /// Name and content of every file, templates and data.
    pub(super) fn files(&self) -> BTreeMap<String, Vec<u8>> {
        let sources = SHARED
            .sources
            .iter()
            .chain(&self.sources)
            .map(|(id, source)| (file_name(*id), source.text().as_bytes().to_vec()));
        let files = self
            .files
            .iter()
            .map(|(id, bytes)| (file_name(*id), bytes.to_vec()));
        sources.chain(files).collect()
    }

    fn fonts(&self) -> &[Font] {
        match &self.own_fonts {
            Some((fonts, _)) => fonts,
            None => &SHARED.fonts,
        }
    }

    /// Puts a figure beside the templates.
    pub(super) fn add_figure(&mut self, name: &str, svg: &str) -> Result<(), DocumentError> {
        let known = &SHARED.fonts[0].info().coverage;
        let plain = svg
            .chars()
            .all(|c| c.is_ascii() || known.contains(c as u32));
        let svg = if plain {
            svg.to_owned()
        } else {
            with_stand_ins(self.fonts(), svg)
        };
        self.files.insert(file_id(name)?, Bytes::from_string(svg));
        Ok(())
    }

    /// The first character of the text that no font of this document can draw.
    pub(super) fn undrawable(&self, text: &str) -> Option<char> {
        undrawable(self.fonts(), text)
    }

    /// Lays the document out; with it what Typst warns of.
    pub(super) fn lay_out(&self) -> Result<(PagedDocument, Vec<String>), DocumentError> {
        let compiled = typst::compile::<PagedDocument>(self);
        let document = compiled
            .output
            .map_err(|diagnostics| DocumentError::Template(self.told(&diagnostics)))?;
        let warnings = compiled
            .warnings
            .iter()
            .map(|warning| self.told(std::slice::from_ref(warning)))
            .collect();
        Ok((document, warnings))
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

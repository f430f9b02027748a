//! Typst without the program: the files of a record, the fonts, a compiler and a PDF.

use std::collections::BTreeMap;
use std::path::Path;
use typst::diag::{FileError, FileResult};
use typst::foundations::{Bytes, Datetime, Duration};
use typst::syntax::{FileId, RootedPath, Source, VirtualPath, VirtualRoot};
use typst::text::{Font, FontBook};
use typst::utils::LazyHash;
use typst::{Library, LibraryExt, World};
use typst_layout::PagedDocument;
use typst_pdf::{PdfOptions, PdfStandard, PdfStandards, Timestamp};

/// What Typst is given.
pub struct Alone {
    library: LazyHash<Library>,
    book: LazyHash<FontBook>,
    fonts: Vec<Font>,
    sources: BTreeMap<String, Source>,
    files: BTreeMap<String, Bytes>,
}

impl Alone {
    /// The files of a record by name, `record.typ` among them, with the fonts of the project.
    pub fn new(files: BTreeMap<String, Vec<u8>>) -> Self {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("templates/fonts");
        let mut paths: Vec<_> = std::fs::read_dir(folder)
            .expect("the folder of fonts")
            .map(|entry| entry.expect("an entry").path())
            .filter(|path| path.extension().is_some_and(|e| e == "otf" || e == "ttf"))
            .collect();
        // The text family first, as in the program.
        paths.sort_by_key(|path| (path.extension().is_some_and(|e| e == "ttf"), path.clone()));
        let fonts: Vec<Font> = paths
            .iter()
            .flat_map(|path| Font::iter(Bytes::new(std::fs::read(path).expect("a font"))))
            .collect();
        let sources = files
            .iter()
            .filter(|(name, _)| name.ends_with(".typ"))
            .map(|(name, bytes)| {
                let text = String::from_utf8(bytes.clone()).expect("a template is text");
                (name.clone(), Source::new(id(name), text))
            })
            .collect();
        Alone {
            library: LazyHash::new(Library::default()),
            book: LazyHash::new(FontBook::from_fonts(&fonts)),
            fonts,
            sources,
            files: files
                .into_iter()
                .map(|(name, bytes)| (name, Bytes::new(bytes)))
                .collect(),
        }
    }

    /// Lays out and exports, to the same standards as the program.
    pub fn pdf(&self) -> Vec<u8> {
        let document = typst::compile::<PagedDocument>(self)
            .output
            .expect("the files of a record are laid out");
        let midnight = Datetime::from_ymd_hms(2026, 3, 14, 0, 0, 0).expect("a date");
        let options = PdfOptions {
            timestamp: Some(Timestamp::new_utc(midnight)),
            standards: PdfStandards::new(&[PdfStandard::A_3a, PdfStandard::Ua_1])
                .expect("they go together"),
            ..PdfOptions::default()
        };
        typst_pdf::pdf(&document, &options).expect("a PDF")
    }
}

fn id(name: &str) -> FileId {
    let path = VirtualPath::new(format!("/{name}")).expect("a plain name");
    FileId::new(RootedPath::new(VirtualRoot::Project, path))
}

fn name(id: FileId) -> String {
    id.get().vpath().get_without_slash().to_owned()
}

impl World for Alone {
    fn library(&self) -> &LazyHash<Library> {
        &self.library
    }

    fn book(&self) -> &LazyHash<FontBook> {
        &self.book
    }

    fn main(&self) -> FileId {
        id("record.typ")
    }

    fn source(&self, id: FileId) -> FileResult<Source> {
        let found = self.sources.get(&name(id)).cloned();
        found.ok_or_else(|| FileError::NotFound(name(id).into()))
    }

    fn file(&self, id: FileId) -> FileResult<Bytes> {
        let found = self.files.get(&name(id)).cloned();
        found.ok_or_else(|| FileError::NotFound(name(id).into()))
    }

    fn font(&self, index: usize) -> Option<Font> {
        self.fonts.get(index).cloned()
    }

    fn today(&self, _offset: Option<Duration>) -> Option<Datetime> {
        None
    }
}

//! Files of the job, each read once.

use super::table::Table;
use super::text;
use super::workbook::Workbook;
use crate::notice::{Place, Problem};
use sha2::{Digest, Sha256};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex, OnceLock};

/// File name endings that are read as workbooks.
pub const WORKBOOK_ENDINGS: [&str; 5] = ["xlsx", "xlsm", "xlsb", "xls", "ods"];

/// A file of the job, read once.
#[derive(Debug)]
pub struct SourceFile {
    /// File as named in the job, with forward slashes.
    pub name: String,
    /// SHA-256 of the file, hexadecimal.
    pub sha256: String,
    tables: Vec<Part>,
    /// Kept until every sheet was read.
    workbook: Mutex<Option<Workbook>>,
}

/// A sheet, or the one table of a text file.
#[derive(Debug)]
struct Part {
    sheet: Option<String>,
    table: OnceLock<Result<Table, Problem>>,
}

impl SourceFile {
    /// Reads a file; `name` is how the job calls it.
    ///
    /// # Errors
    /// Where the file is missing, empty, encrypted or not of the kind that its name says.
    pub fn read(path: &Path, name: &str) -> Result<Self, Problem> {
        let bytes = std::fs::read(path).map_err(|error| {
            let problem = |message: String| Problem::error(Place::file(name), message);
            match error.kind() {
                std::io::ErrorKind::NotFound => problem("there is no such file".to_owned()),
                std::io::ErrorKind::PermissionDenied => {
                    problem("the file may not be read".to_owned())
                        .hint("close it in the program that holds it open, or ask for access")
                }
                _ if path.is_dir() => problem("this is a folder, not a file".to_owned()),
                kind => problem(format!("the file cannot be read: {kind}")),
            }
        })?;
        SourceFile::from_bytes(bytes, name)
    }

    /// The same from the file's bytes.
    ///
    /// # Errors
    /// As [`SourceFile::read`].
    pub fn from_bytes(bytes: Vec<u8>, name: &str) -> Result<Self, Problem> {
        if bytes.is_empty() {
            return Err(Problem::error(Place::file(name), "the file is empty"));
        }
        let sha256 = hexadecimal(&Sha256::digest(&bytes));
        let ending = Path::new(name)
            .extension()
            .and_then(|ending| ending.to_str())
            .unwrap_or_default()
            .to_ascii_lowercase();
        let zipped = bytes.starts_with(b"PK\x03\x04");
        let compound = bytes.starts_with(&[0xD0, 0xCF, 0x11, 0xE0]);
        if WORKBOOK_ENDINGS.contains(&ending.as_str()) {
            if compound && ending != "xls" {
                return Err(Problem::error(
                    Place::file(name),
                    "the workbook is locked with a password, or its name ending is wrong",
                )
                .hint("save it without a password"));
            }
            let workbook = Workbook::open(bytes, name, &ending)?;
            let sheets = workbook.sheets().into_iter().map(|sheet| Part {
                sheet: Some(sheet),
                table: OnceLock::new(),
            });
            return Ok(SourceFile {
                name: name.to_owned(),
                sha256,
                tables: sheets.collect(),
                workbook: Mutex::new(Some(workbook)),
            });
        }
        if zipped || compound || bytes.starts_with(b"%PDF") {
            return Err(Problem::error(
                Place::file(name),
                format!("the name ends in \".{ending}\", but the file is not text"),
            )
            .hint("give a workbook (.xlsx, .xlsm, .xlsb, .xls, .ods) or a text file (.csv)"));
        }
        let table = Table::of_text(name, text::decode(bytes))?;
        Ok(SourceFile {
            name: name.to_owned(),
            sha256,
            tables: vec![Part {
                sheet: None,
                table: OnceLock::from(Ok(table)),
            }],
            workbook: Mutex::new(None),
        })
    }

    /// Names of its sheets in order; none for a text file.
    pub fn sheets(&self) -> impl Iterator<Item = &str> {
        self.tables.iter().filter_map(|part| part.sheet.as_deref())
    }

    /// Its sheets in order, or the one table of a text file.
    ///
    /// # Errors
    /// Where one of them is damaged.
    pub fn tables(&self) -> Result<Vec<&Table>, Problem> {
        self.tables.iter().map(|part| self.table(part)).collect()
    }

    /// The table of that sheet, ignoring case; `None` where there is none. No other sheet is read.
    ///
    /// # Errors
    /// Where it is damaged.
    pub fn sheet(&self, sheet: &str) -> Option<Result<&Table, Problem>> {
        let even = |name: &str| name.trim().to_lowercase();
        let part = self
            .tables
            .iter()
            .find(|part| part.sheet.as_deref().map(even) == Some(even(sheet)))?;
        Some(self.table(part))
    }

    fn table<'a>(&'a self, part: &'a Part) -> Result<&'a Table, Problem> {
        let workbook = || {
            self.workbook
                .lock()
                .unwrap_or_else(std::sync::PoisonError::into_inner)
        };
        let read = || {
            let mut workbook = workbook();
            let workbook = workbook
                .as_mut()
                .expect("a workbook is kept until every sheet was read");
            workbook.read(part.sheet.as_deref().unwrap_or_default())
        };
        let table = part.table.get_or_init(read);
        if self.tables.iter().all(|part| part.table.get().is_some()) {
            workbook().take();
        }
        table.as_ref().map_err(Clone::clone)
    }
}

/// Bytes as hexadecimal digits.
pub fn hexadecimal(bytes: &[u8]) -> String {
    use std::fmt::Write;
    bytes.iter().fold(String::new(), |mut text, byte| {
        write!(text, "{byte:02x}").expect("a string takes any text");
        text
    })
}

/// The files that were read, each once, however many loops and threads ask for it.
#[derive(Debug, Default)]
pub struct FileCache {
    files: Mutex<BTreeMap<PathBuf, Arc<ReadOnce>>>,
}

type ReadOnce = OnceLock<Result<Arc<SourceFile>, Problem>>;

impl FileCache {
    /// A cache without files.
    pub fn new() -> Self {
        FileCache::default()
    }

    /// The file `name` below `root`, read now or before.
    ///
    /// # Errors
    /// As [`SourceFile::read`].
    pub fn open(&self, root: &Path, name: &str) -> Result<Arc<SourceFile>, Problem> {
        let path = root.join(name);
        let slot = {
            let mut files = self
                .files
                .lock()
                .unwrap_or_else(std::sync::PoisonError::into_inner);
            Arc::clone(files.entry(path.clone()).or_default())
        };
        slot.get_or_init(|| SourceFile::read(&path, name).map(Arc::new))
            .clone()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn files_of_the_wrong_kind_say_so() {
        let problem =
            SourceFile::from_bytes(b"t,pv\n".to_vec(), "a.xlsx").expect_err("no workbook");
        assert!(
            problem
                .to_string()
                .starts_with("a.xlsx: the file is not a whole .xlsx workbook: it was cut short or damaged on the way, or is of another kind\n"),
            "{problem}"
        );
        let problem =
            SourceFile::from_bytes(b"PK\x03\x04rest".to_vec(), "a.csv").expect_err("no text");
        assert!(problem.to_string().contains("the file is not text"));
        let problem = SourceFile::from_bytes(Vec::new(), "a.csv").expect_err("empty");
        assert_eq!(problem.to_string(), "a.csv: the file is empty");
        let problem = FileCache::new()
            .open(Path::new("nowhere"), "logs/a.csv")
            .expect_err("missing");
        assert_eq!(problem.to_string(), "logs/a.csv: there is no such file");
    }

    #[test]
    fn a_damaged_workbook_is_an_error() {
        let mut book = rust_xlsxwriter::Workbook::new();
        book.add_worksheet().write_number(0, 0, 1).expect("written");
        let whole = book.save_to_buffer().expect("a workbook");
        for cut in [10, whole.len() / 2, whole.len() - 5] {
            assert!(SourceFile::from_bytes(whole[..cut].to_vec(), "a.xlsx").is_err());
        }
        for ending in ["xls", "xlsb", "ods"] {
            assert!(SourceFile::from_bytes(whole.clone(), &format!("a.{ending}")).is_err());
        }
    }

    #[test]
    fn a_file_is_read_once() {
        let folder = tempfile::tempdir().expect("a folder");
        std::fs::write(folder.path().join("a.csv"), "t,pv\n1,2\n").expect("written");
        let cache = FileCache::new();
        let first = cache.open(folder.path(), "a.csv").expect("readable");
        std::fs::remove_file(folder.path().join("a.csv")).expect("removed");
        let second = cache.open(folder.path(), "a.csv").expect("kept");
        assert!(Arc::ptr_eq(&first, &second));
    }

    #[test]
    fn only_the_sheets_asked_for_are_read() {
        let mut book = rust_xlsxwriter::Workbook::new();
        for (name, number) in [("Trend 1", 1), ("Trend 2", 2)] {
            let sheet = book.add_worksheet().set_name(name).expect("a name");
            sheet.write_number(0, 0, number).expect("written");
        }
        let bytes = book.save_to_buffer().expect("a workbook");
        let file = SourceFile::from_bytes(bytes, "a.xlsx").expect("readable");
        let is_read = |k: usize| file.tables[k].table.get().is_some();
        assert_eq!(file.sheets().collect::<Vec<_>>(), ["Trend 1", "Trend 2"]);
        assert!(!is_read(0) && !is_read(1));
        file.sheet("trend 2").expect("there").expect("readable");
        assert!(!is_read(0) && is_read(1));
        assert_eq!(file.tables().expect("readable").len(), 2);
        let workbook = file.workbook.lock().expect("nobody broke it");
        assert!(
            workbook.is_none(),
            "nothing of the file is kept beside its cells"
        );
    }
}

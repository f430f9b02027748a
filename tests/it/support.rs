//! Helpers that let tests read as sentences.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;
use tempfile::TempDir;

/// The folder of the crate.
pub fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

/// A folder that is gone when the test is over.
pub fn folder() -> TempDir {
    tempfile::tempdir().expect("a folder for the test")
}

/// Names in a folder, sorted.
pub fn names_in(folder: &Path) -> Vec<String> {
    let mut names: Vec<String> = fs::read_dir(folder)
        .expect("the folder is there")
        .map(|entry| {
            entry
                .expect("an entry")
                .file_name()
                .to_string_lossy()
                .into()
        })
        .collect();
    names.sort();
    names
}

/// Every file below a folder that ends so, sorted.
pub fn files_below(folder: &Path, ending: &str) -> Vec<PathBuf> {
    let mut found = Vec::new();
    for name in names_in(folder) {
        let path = folder.join(&name);
        if path.is_dir() {
            found.extend(files_below(&path, ending));
        } else if name.ends_with(ending) {
            found.push(path);
        }
    }
    found
}

/// Copies a folder with all that lies in it.
pub fn copy_folder(from: &Path, to: &Path) {
    fs::create_dir_all(to).expect("the folder can be made");
    for name in names_in(from) {
        let (from, to) = (from.join(&name), to.join(&name));
        if from.is_dir() {
            copy_folder(&from, &to);
        } else {
            fs::copy(&from, &to).expect("the file can be copied");
        }
    }
}

/// What a run of the program printed, and how it ended.
pub struct Run {
    /// Exit code.
    pub code: i32,
    /// Standard output.
    pub out: String,
    /// Standard error.
    pub err: String,
}

/// Runs the program with these arguments.
pub fn asleft(arguments: &[&str]) -> Run {
    asleft_in(root(), arguments)
}

/// Runs the program with these arguments in a folder.
pub fn asleft_in(folder: &Path, arguments: &[&str]) -> Run {
    let output = Command::new(env!("CARGO_BIN_EXE_asleft"))
        .current_dir(folder)
        .args(arguments)
        .output()
        .expect("the program starts");
    Run {
        code: output.status.code().expect("the program was not killed"),
        out: String::from_utf8(output.stdout).expect("standard output is UTF-8"),
        err: String::from_utf8(output.stderr).expect("standard error is UTF-8"),
    }
}

impl Run {
    /// Holds the exit code; shows what was printed where it is another.
    pub fn ends_with(self, code: i32) -> Self {
        assert_eq!(
            self.code, code,
            "\nstandard output:\n{}\nstandard error:\n{}",
            self.out, self.err
        );
        self
    }
}

/// Holds a text against a file kept in the tree, by its path below the crate.
///
/// With `ASLEFT_ACCEPT=1` in the environment the text is written there instead: look at the
/// difference before it is committed.
pub fn holds_as_kept(path: &str, text: &str) {
    let path = root().join(path);
    if std::env::var_os("ASLEFT_ACCEPT").is_some() {
        fs::write(&path, text).expect("the kept file can be written");
        return;
    }
    let kept = fs::read_to_string(&path).unwrap_or_default();
    if let Some((number, (kept, new))) = kept
        .lines()
        .chain(std::iter::repeat("(end)"))
        .zip(text.lines().chain(["(end)"]))
        .enumerate()
        .find(|(_, (kept, new))| kept != new)
    {
        panic!(
            "{}, line {}:\n  kept: {kept}\n   now: {new}\nWhere the new text is right: ASLEFT_ACCEPT=1 cargo test",
            path.display(),
            number + 1
        );
    }
    assert_eq!(kept, text);
}

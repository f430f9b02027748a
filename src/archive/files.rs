//! Files that are there whole or not at all.

use crate::notice::{Place, Problem};
use std::fs;
use std::io::{self, Write};
use std::path::Path;
use tempfile::{Builder, NamedTempFile};

/// A file that is being written has this before its name, so that nobody takes it for a record.
const UNFINISHED_PREFIX: &str = ".asleft-";
const UNFINISHED_SUFFIX: &str = ".part";

/// A path as it is shown to people: with forward slashes on every system.
pub fn shown(path: &Path) -> String {
    path.display().to_string().replace('\\', "/")
}

/// Makes the folder where it is missing, holds that files can be written there, and clears away
/// what a run that was killed left unfinished.
///
/// # Errors
/// Where the folder cannot be made or written to.
pub fn prepare(folder: &Path) -> Result<(), Problem> {
    let attempt = || -> io::Result<()> {
        fs::create_dir_all(folder)?;
        for entry in fs::read_dir(folder)? {
            let entry = entry?;
            let name = entry.file_name();
            let name = name.to_string_lossy();
            if name.starts_with(UNFINISHED_PREFIX) && name.ends_with(UNFINISHED_SUFFIX) {
                fs::remove_file(entry.path())?;
            }
        }
        unfinished(folder).map(drop)
    };
    attempt().map_err(|error| {
        let why = if folder.is_file() {
            "a file of that name stands in its place".to_owned()
        } else {
            error.to_string()
        };
        Problem::error(
            Place::file(shown(folder)),
            format!("this folder cannot be written to: {why}"),
        )
        .hint("choose another folder with --out")
    })
}

/// A new file beside the place it will have, under a name of its own.
fn unfinished(folder: &Path) -> io::Result<NamedTempFile> {
    let mut builder = Builder::new();
    builder.prefix(UNFINISHED_PREFIX).suffix(UNFINISHED_SUFFIX);
    // A temporary file is private by default; a record is read by whoever may read the folder.
    #[cfg(unix)]
    builder.permissions(std::os::unix::fs::PermissionsExt::from_mode(0o666));
    builder.tempfile_in(folder)
}

/// Bytes on the disk under a temporary name, waiting for their own.
pub struct Waiting {
    file: NamedTempFile,
    name: String,
}

impl Waiting {
    /// Writes the bytes beside the place of `name` and waits until the disk has them.
    ///
    /// # Errors
    /// Where they cannot be written.
    pub fn write(folder: &Path, name: String, bytes: &[u8]) -> Result<Self, Problem> {
        let attempt = || -> io::Result<NamedTempFile> {
            let mut file = unfinished(folder)?;
            file.write_all(bytes)?;
            file.as_file().sync_all()?;
            Ok(file)
        };
        match attempt() {
            Ok(file) => Ok(Waiting { file, name }),
            Err(error) => Err(not_written(&folder.join(name), &error)),
        }
    }

    /// Gives the file its own name, in place of what had it.
    ///
    /// # Errors
    /// Where it cannot be renamed, for example because another program holds the old file open.
    pub fn finish(self, folder: &Path) -> Result<(), Problem> {
        let path = folder.join(&self.name);
        self.file
            .persist(&path)
            .map_err(|error| not_written(&path, &error.error))?;
        // On Unix a new name is on the disk only when its folder is.
        #[cfg(unix)]
        fs::File::open(folder)
            .and_then(|folder| folder.sync_all())
            .map_err(|error| not_written(&path, &error))?;
        Ok(())
    }
}

/// Removes a file that is about to be replaced; one that is not there is removed already.
///
/// # Errors
/// Where it is there and stays.
pub fn remove(path: &Path) -> Result<(), Problem> {
    match fs::remove_file(path) {
        Err(error) if error.kind() != io::ErrorKind::NotFound => Err(not_written(path, &error)),
        _ => Ok(()),
    }
}

/// The text of a file, `None` where there is no such file.
///
/// # Errors
/// Where it is there and cannot be read as text.
pub fn read(path: &Path) -> Result<Option<String>, Problem> {
    match fs::read_to_string(path) {
        Ok(text) => Ok(Some(text)),
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(None),
        Err(error) => Err(Problem::error(
            Place::file(shown(path)),
            format!("cannot be read: {error}"),
        )),
    }
}

/// The bytes of a file, `None` where there is no such file.
///
/// # Errors
/// Where it is there and cannot be read.
pub fn read_bytes(path: &Path) -> Result<Option<Vec<u8>>, Problem> {
    match fs::read(path) {
        Ok(bytes) => Ok(Some(bytes)),
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(None),
        Err(error) => Err(Problem::error(
            Place::file(shown(path)),
            format!("cannot be read: {error}"),
        )),
    }
}

/// Names of what lies in a folder, sorted; none where there is no such folder.
///
/// # Errors
/// Where it is there and cannot be read.
pub fn names_in(folder: &Path) -> Result<Vec<String>, Problem> {
    let attempt = || -> io::Result<Vec<String>> {
        let mut names = Vec::new();
        for entry in fs::read_dir(folder)? {
            names.push(entry?.file_name().to_string_lossy().into_owned());
        }
        names.sort();
        Ok(names)
    };
    match attempt() {
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(Vec::new()),
        names => names.map_err(|error| {
            Problem::error(
                Place::file(shown(folder)),
                format!("cannot be read: {error}"),
            )
        }),
    }
}

fn not_written(path: &Path, error: &io::Error) -> Problem {
    Problem::error(
        Place::file(shown(path)),
        format!("cannot be written: {error}"),
    )
    .hint("Close it where another program has it open, or choose another folder with --out")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn names_in(folder: &Path) -> Vec<String> {
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

    #[test]
    fn a_file_has_its_name_only_when_it_is_whole() {
        let folder = tempfile::tempdir().expect("a folder");
        let waiting = Waiting::write(folder.path(), "a.json".into(), b"{}").expect("written");
        assert!(!folder.path().join("a.json").exists());
        waiting.finish(folder.path()).expect("renamed");
        assert_eq!(names_in(folder.path()), ["a.json"]);
    }

    #[test]
    fn a_file_in_the_place_of_the_folder_is_told() {
        let folder = tempfile::tempdir().expect("a folder");
        let place = folder.path().join("records");
        fs::write(&place, "mine").expect("written");
        let problem = prepare(&place).expect_err("no folder");
        assert!(
            problem
                .message
                .ends_with("a file of that name stands in its place"),
            "{problem}"
        );
        assert_eq!(fs::read(&place).expect("still there"), b"mine");
    }

    #[test]
    fn what_is_given_up_leaves_nothing() {
        let folder = tempfile::tempdir().expect("a folder");
        drop(Waiting::write(folder.path(), "a.json".into(), b"{}").expect("written"));
        assert!(names_in(folder.path()).is_empty());
    }

    #[test]
    fn the_next_run_clears_what_a_killed_one_left() {
        let folder = tempfile::tempdir().expect("a folder");
        fs::write(folder.path().join(".asleft-x1.part"), "half").expect("written");
        fs::write(folder.path().join("notes.part"), "not ours").expect("written");
        prepare(folder.path()).expect("prepared");
        assert_eq!(names_in(folder.path()), ["notes.part"]);
    }

    #[test]
    fn a_folder_that_is_a_file_is_told() {
        let folder = tempfile::tempdir().expect("a folder");
        let file = folder.path().join("records");
        fs::write(&file, "in the way").expect("written");
        let problem = prepare(&file).expect_err("a file is no folder");
        assert!(problem.message.contains("cannot be written to"));
        assert!(problem.hint.is_some());
    }

    #[cfg(unix)]
    #[test]
    fn a_record_may_be_read_by_others() {
        use std::os::unix::fs::PermissionsExt;
        let folder = tempfile::tempdir().expect("a folder");
        let plain = folder.path().join("plain");
        fs::write(&plain, "").expect("written");
        let waiting = Waiting::write(folder.path(), "a.json".into(), b"{}").expect("written");
        waiting.finish(folder.path()).expect("renamed");
        let mode = |path: &Path| fs::metadata(path).expect("there").permissions().mode();
        assert_eq!(mode(&folder.path().join("a.json")), mode(&plain));
    }
}

//! The site's own templates, and loops that have to be refused after the schedule was read.

use super::{BadRow, Job};
use crate::notice::{Place, Problem};
use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

impl Job {
    /// The files of the job's template folder: name below it, with forward slashes, and content. Empty
    /// where the job has none.
    ///
    /// # Errors
    /// Where the folder or a file in it cannot be read.
    pub fn template_files(&self) -> Result<BTreeMap<String, Vec<u8>>, Vec<Problem>> {
        let mut files = BTreeMap::new();
        if let Some(folder) = &self.manifest.template {
            collect(&self.root.join(folder), "", &mut files).map_err(|error| {
                vec![
                    Problem::error(
                        Place::file(super::manifest::FILE),
                        format!(
                            "the template folder {folder} cannot be read: {}",
                            error.kind()
                        ),
                    )
                    .hint("`template` names a folder below the job folder"),
                ]
            })?;
        }
        Ok(files)
    }

    /// Makes a loop one that cannot be recorded.
    pub fn refuse(&mut self, tag: &str, problem: Problem) {
        for row in &mut self.loops {
            match row {
                Ok(good) if good.tag == tag => {
                    *row = Err(BadRow {
                        tag: tag.to_owned(),
                        row: good.place.row.unwrap_or_default(),
                        problems: vec![problem.clone()],
                    });
                }
                Err(bad) if bad.tag == tag => bad.problems.push(problem.clone()),
                _ => {}
            }
        }
    }
}

fn collect(
    folder: &Path,
    prefix: &str,
    files: &mut BTreeMap<String, Vec<u8>>,
) -> std::io::Result<()> {
    for entry in fs::read_dir(folder)? {
        let entry = entry?;
        let name = format!("{prefix}{}", entry.file_name().to_string_lossy());
        if entry.file_type()?.is_dir() {
            collect(&entry.path(), &format!("{name}/"), files)?;
        } else {
            files.insert(name, fs::read(entry.path())?);
        }
    }
    Ok(())
}

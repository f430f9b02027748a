//! Places in files, and the problems found there.

use serde::{Serialize, Serializer};
use std::fmt;

/// A column as a person finds it: by letter in a sheet, by heading in a text file.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Column {
    /// Position, 0 for the first column of the sheet.
    pub index: usize,
    /// Heading text where the column has one.
    pub heading: Option<String>,
}

/// Where something was found, as the person at the keyboard would look it up.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Place {
    /// File as named in the job, with forward slashes.
    pub file: String,
    /// Sheet of a workbook; `None` for text files.
    pub sheet: Option<String>,
    /// Row or line, 1 for the first.
    pub row: Option<usize>,
    /// Column.
    pub column: Option<Column>,
}

impl Place {
    /// A whole file.
    pub fn file(file: impl Into<String>) -> Self {
        Place {
            file: file.into(),
            ..Place::default()
        }
    }

    /// The same place, narrowed to a sheet.
    pub fn sheet(mut self, sheet: impl Into<String>) -> Self {
        self.sheet = Some(sheet.into());
        self
    }

    /// The same place, narrowed to a row (1 for the first).
    pub fn row(mut self, row: usize) -> Self {
        self.row = Some(row);
        self
    }

    /// The same place, narrowed to a column (0 for the first) with its heading.
    pub fn column(mut self, index: usize, heading: Option<&str>) -> Self {
        self.column = Some(Column {
            index,
            heading: heading.map(str::to_owned),
        });
        self
    }
}

/// The letters over a spreadsheet column: 0 is A, 26 is AA.
pub fn column_letters(index: usize) -> String {
    let mut letters = Vec::new();
    let mut left = index + 1;
    while left > 0 {
        letters.push(char::from(b'A' + ((left - 1) % 26) as u8));
        left = (left - 1) / 26;
    }
    letters.iter().rev().collect()
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.file)?;
        if let Some(sheet) = &self.sheet {
            write!(f, ", sheet \"{sheet}\"")?;
            match (self.row, &self.column) {
                (Some(row), Some(column)) => {
                    write!(f, ", cell {}{row}", column_letters(column.index))?;
                }
                (Some(row), None) => write!(f, ", row {row}")?,
                (None, Some(column)) => write!(f, ", column {}", column_letters(column.index))?,
                (None, None) => {}
            }
            return Ok(());
        }
        if let Some(row) = self.row {
            write!(f, ", line {row}")?;
        }
        if let Some(column) = &self.column {
            match &column.heading {
                Some(heading) => write!(f, ", column \"{heading}\"")?,
                None => write!(f, ", column {}", column.index + 1)?,
            }
        }
        Ok(())
    }
}

/// How much a problem stops.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Severity {
    /// Told, nothing stopped.
    Warning,
    /// What it concerns cannot be done.
    Error,
}

/// Something wrong with what was handed in: where, what was found against what was expected, and
/// what to do about it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Problem {
    /// How much it stops.
    pub severity: Severity,
    /// Where.
    pub place: Option<Place>,
    /// What was found and what was expected, one sentence without a full stop.
    pub message: String,
    /// What to do, one sentence without a full stop.
    pub hint: Option<String>,
}

impl Problem {
    /// An error at a place.
    pub fn error(place: Place, message: impl Into<String>) -> Self {
        Problem {
            severity: Severity::Error,
            place: Some(place),
            message: message.into(),
            hint: None,
        }
    }

    /// A warning at a place.
    pub fn warning(place: Place, message: impl Into<String>) -> Self {
        Problem {
            severity: Severity::Warning,
            ..Problem::error(place, message)
        }
    }

    /// An error that has no place in a file.
    pub fn general(message: impl Into<String>) -> Self {
        Problem {
            severity: Severity::Error,
            place: None,
            message: message.into(),
            hint: None,
        }
    }

    /// The same with advice.
    pub fn hint(mut self, hint: impl Into<String>) -> Self {
        self.hint = Some(hint.into());
        self
    }
}

impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if let Some(place) = &self.place {
            write!(f, "{place}: ")?;
        }
        write!(f, "{}", self.message)?;
        if let Some(hint) = &self.hint {
            write!(f, "\n    {hint}")?;
        }
        Ok(())
    }
}

/// A problem as JSON: its place in parts and as a person reads it.
impl Serialize for Problem {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        #[derive(Serialize)]
        struct Plain<'a> {
            severity: &'static str,
            place: Option<String>,
            file: Option<&'a str>,
            sheet: Option<&'a str>,
            row: Option<usize>,
            column: Option<usize>,
            message: &'a str,
            hint: Option<&'a str>,
        }
        let place = self.place.as_ref();
        Plain {
            severity: match self.severity {
                Severity::Warning => "warning",
                Severity::Error => "error",
            },
            place: place.map(ToString::to_string),
            file: place.map(|place| place.file.as_str()),
            sheet: place.and_then(|place| place.sheet.as_deref()),
            row: place.and_then(|place| place.row),
            // Counted from 1, as rows are.
            column: place.and_then(|place| place.column.as_ref().map(|column| column.index + 1)),
            message: &self.message,
            hint: self.hint.as_deref(),
        }
        .serialize(serializer)
    }
}

/// The known word nearest to one that is not known, where one is near enough to be meant.
pub fn nearest<'a>(word: &str, known: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    // Nobody means another word by another case.
    let word = word.to_lowercase();
    known
        .into_iter()
        .map(|candidate| {
            let likeness = strsim::jaro_winkler(&word, &candidate.to_lowercase());
            (likeness, candidate)
        })
        .filter(|(likeness, _)| *likeness >= 0.75)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, candidate)| candidate)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn places_read_as_a_person_sees_them() {
        let cell = Place::file("logs/tic204.xlsx")
            .sheet("Trend")
            .row(14)
            .column(2, Some("PV"));
        assert_eq!(
            cell.to_string(),
            "logs/tic204.xlsx, sheet \"Trend\", cell C14"
        );
        let line = Place::file("logs/run.csv").row(14).column(1, Some("PV"));
        assert_eq!(line.to_string(), "logs/run.csv, line 14, column \"PV\"");
        assert_eq!(column_letters(26), "AA");
        assert_eq!(column_letters(701), "ZZ");
    }

    #[test]
    fn the_nearest_word_is_found() {
        assert_eq!(nearest("scan", ["scan s", "service"]), Some("scan s"));
        assert_eq!(nearest("xyzzy", ["scan s", "service"]), None);
        assert_eq!(nearest("tic105", ["TIC-105", "FIC-203"]), Some("TIC-105"));
    }
}

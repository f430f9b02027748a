//! Text of the job that could not be shown on a page: told at its cell or line before anything is typeset.

use super::{Job, headings, manifest};
use crate::notice::{Place, Problem};
use crate::read::text;

impl Job {
    /// Refuses the loops whose row holds a character that no font can draw, at the cell; the findings in
    /// `job.toml`, which concern every document, are handed back. `lacks` finds the first such character of
    /// a text; `hint` says what to do.
    pub fn refuse_undrawable(
        &mut self,
        lacks: impl Fn(&str) -> Option<char>,
        hint: &str,
    ) -> Vec<Problem> {
        let told = |place: Place, text: &str| {
            let character = lacks(text)?;
            let message = undrawable_message(character, text);
            Some(Problem::error(place, message).hint(hint))
        };
        let found: Vec<(String, Problem)> = self
            .loops
            .iter()
            .flatten()
            .flat_map(|row| row.as_read.iter().map(move |cell| (row, cell)))
            // A column that is not read is printed nowhere.
            .filter(|(_, cell)| headings::of(&cell.heading).is_some())
            .filter_map(|(row, cell)| {
                let place = row.place.clone().column(cell.column, Some(&cell.heading));
                Some((row.tag.clone(), told(place, &cell.value)?))
            })
            .collect();
        for (tag, problem) in found {
            self.refuse(&tag, problem);
        }
        let Ok(bytes) = std::fs::read(self.root.join(manifest::FILE)) else {
            return Vec::new();
        };
        text::decode(bytes)
            .text
            .lines()
            .enumerate()
            .filter_map(|(index, line)| {
                let place = Place::file(manifest::FILE).row(index + 1);
                told(place, without_comment(line).trim())
            })
            .collect()
    }
}

/// What is wrong with a text that holds a character no font has.
pub fn undrawable_message(character: char, text: &str) -> String {
    format!(
        "no font has the character \"{character}\" (U+{:04X}) of \"{}\"",
        u32::from(character),
        text.replace(char::is_control, " ")
    )
}

/// A line of TOML up to its comment: the first # outside of quotes.
fn without_comment(line: &str) -> &str {
    let mut quote = None;
    let mut escaped = false;
    for (at, character) in line.char_indices() {
        match quote {
            None if character == '#' => return &line[..at],
            None if character == '"' || character == '\'' => quote = Some(character),
            Some('"') if character == '\\' && !escaped => {
                escaped = true;
                continue;
            }
            Some(open) if character == open && !escaped => quote = None,
            _ => {}
        }
        escaped = false;
    }
    line
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_comment_begins_outside_of_quotes_alone() {
        for (line, code) in [
            ("owner = \"A # B\" # C", "owner = \"A # B\" "),
            ("owner = 'A # \" B' # C", "owner = 'A # \" B' "),
            ("owner = \"A \\\" # B\" # C", "owner = \"A \\\" # B\" "),
            ("# all of it", ""),
            ("page = \"a4\"", "page = \"a4\""),
        ] {
            assert_eq!(without_comment(line), code);
        }
    }
}

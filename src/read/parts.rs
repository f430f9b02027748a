//! Files that hold some signals of a loop each: which signal a column of values is, and the signals put
//! together.

use super::headings::{Owner, Role, Sureness, meaning};
use super::roles::{Headings, RoleFound, SIGNALS};
use super::table::Cell;
use std::path::Path;

/// Gives the column "Value" of a file with one signal the role that a title above it, the sheet or the
/// file is named for; nothing where none of them, or one of them twice over, says.
pub(super) fn name_the_value(
    headings: &Headings<'_>,
    tag: Option<&str>,
    found: &mut Vec<RoleFound>,
) {
    let Some(value) = found.iter().position(|found| found.role == Role::Value) else {
        return;
    };
    let column = found[value].column;
    let table = headings.table;
    let heading_row = headings
        .layout
        .heading_row
        .unwrap_or(headings.layout.data_start);
    let titles = (0..heading_row).flat_map(|index| {
        let row = table.row(index);
        let texts: Vec<String> = row
            .cells()
            .filter(|cell| matches!(cell, Cell::Text(_)))
            .map(Cell::text)
            .collect();
        texts
    });
    let file = Path::new(&table.file)
        .file_stem()
        .map(|stem| stem.to_string_lossy().into_owned());
    let levels = [
        ("a title above it", titles.collect::<Vec<String>>()),
        (
            "the name of the sheet",
            table.sheet.iter().cloned().collect(),
        ),
        ("the name of the file", file.into_iter().collect()),
    ];
    // A bare tag is its PV only where nothing says more.
    for bare in [false, true] {
        for (level, texts) in &levels {
            let mut roles: Vec<(Role, &String)> = texts
                .iter()
                .filter_map(|text| Some((signal_of(text, tag, bare)?, text)))
                .collect();
            roles.sort_by_key(|(role, _)| *role);
            roles.dedup_by_key(|(role, _)| *role);
            match roles[..] {
                [] => {}
                [(role, text)] => {
                    found.remove(value);
                    let why = format!("{level} says so: {text}");
                    found.push(headings.role(role, column, why));
                    return;
                }
                _ => return,
            }
        }
    }
}

/// The signal of the loop that a text names: "Tag: TIC-204.PV", "TIC-204_OP 2026-03-14", or "PV" alone.
fn signal_of(text: &str, tag: Option<&str>, bare: bool) -> Option<Role> {
    let named = text.rsplit_once(": ").map_or(text, |(_, name)| name);
    let meaning = meaning(named, tag);
    let (role, sureness) = meaning.role.filter(|(role, _)| SIGNALS.contains(role))?;
    let is_wanted = match meaning.owner {
        Owner::This => (sureness == Sureness::BareTag) == bare,
        Owner::Nobody => !bare && sureness == Sureness::Exact,
        Owner::Other(_) => false,
    };
    is_wanted.then_some(role)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_text_names_a_signal() {
        let role = |text: &str| signal_of(text, Some("TIC-204"), false);
        assert_eq!(role("TIC-204.PV"), Some(Role::Pv));
        assert_eq!(role("Tag: TIC-204/OP"), Some(Role::Op));
        assert_eq!(role("TIC-204_OP_2026-03-14"), Some(Role::Op));
        assert_eq!(role("OP"), Some(Role::Op));
        assert_eq!(role("TIC-204"), None);
        assert_eq!(signal_of("TIC-204", Some("TIC-204"), true), Some(Role::Pv));
        assert_eq!(role("FIC-203.PV"), None);
        assert_eq!(role("Trend"), None);
        assert_eq!(role("Sheet1"), None);
    }
}

//! Which loops a table may hold, told by its headings and tag column.

use super::headings::{Owner, Role, meaning, name_before_role, squash};
use super::layout::Layout;
use super::table::Table;
use std::collections::{BTreeMap, BTreeSet};

/// A tag that stands in headings or in the tag column of a table.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct TagFound {
    /// As it is written first.
    pub tag: String,
    /// Whether a PV bears it.
    pub has_pv: bool,
    /// Whether an OP bears it.
    pub has_op: bool,
}

/// Tags of PVs and OPs in the order of the table.
pub(super) fn tags_in(table: &Table, layout: &Layout) -> Vec<TagFound> {
    let mut tags = Tags::default();
    if let Some(column) = tag_column(layout) {
        let mut seen = BTreeSet::new();
        for index in layout.data_start..table.len() {
            let text = table.row(index).cell(column).text();
            if !seen.contains(&text) {
                tags.take(&text);
                seen.insert(text);
            }
        }
    }
    for heading in &layout.headings {
        tags.take(&heading.text);
    }
    tags.found
}

/// The column whose heading is usual for tags and bears none itself.
fn tag_column(layout: &Layout) -> Option<usize> {
    layout
        .headings
        .iter()
        .find(|heading| {
            let meaning = meaning(&heading.text, None);
            meaning.owner == Owner::Nobody && matches!(meaning.role, Some((Role::Tag, _)))
        })
        .map(|heading| heading.column)
}

/// Tags as they are found, each once however it is written.
#[derive(Default)]
struct Tags {
    found: Vec<TagFound>,
    /// Index of each by its letters and figures.
    known: BTreeMap<String, usize>,
}

impl Tags {
    /// Takes the tag of a heading or of a cell of the tag column, where it bears one.
    fn take(&mut self, text: &str) {
        let meaning = meaning(text, None);
        let (tag, role) = match (meaning.owner, meaning.role) {
            (Owner::Other(tag), Some((role, _))) => (tag, role),
            (Owner::Nobody, _) => match name_before_role(text) {
                Some((name, role)) => (name.to_owned(), role),
                None => return,
            },
            _ => return,
        };
        if !matches!(role, Role::Pv | Role::Op) {
            return;
        }
        let index = *self.known.entry(squash(&tag)).or_insert_with(|| {
            self.found.push(TagFound {
                tag,
                has_pv: false,
                has_op: false,
            });
            self.found.len() - 1
        });
        self.found[index].has_pv |= role == Role::Pv;
        self.found[index].has_op |= role == Role::Op;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_tag_is_found_once_however_it_is_written() {
        let mut tags = Tags::default();
        for text in [
            "TIC-204.PV",
            "TIC204.OP",
            "PI-200",
            "EXAMPLE-1.PV",
            "EXAMPLE-1.OP",
            "Time",
            "TIC-204.MODE",
        ] {
            tags.take(text);
        }
        let found: Vec<(&str, bool, bool)> = tags
            .found
            .iter()
            .map(|found| (found.tag.as_str(), found.has_pv, found.has_op))
            .collect();
        assert_eq!(
            found,
            [
                ("TIC-204", true, true),
                ("PI-200", true, false),
                ("EXAMPLE-1", true, true)
            ]
        );
    }
}

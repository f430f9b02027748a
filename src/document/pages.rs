//! What stands on laid-out pages: their text, and the characters that no font could draw.

use super::DocumentError;
use super::world::DocumentWorld;
use crate::figures::Figure;
use typst::layout::{Frame, FrameItem, Point};
use typst::text::TextItem;
use typst_layout::PagedDocument;

/// The plain text of each page, line by line in reading order.
pub(super) fn texts(document: &PagedDocument) -> Vec<String> {
    document
        .pages()
        .iter()
        .map(|page| {
            let mut text = PageText::default();
            visit(&page.frame, Point::zero(), &mut |at, item| {
                text.push(at, item)
            });
            text.lines
        })
        .collect()
}

/// Calls `with` for every run of text in a frame, with the place of its baseline on the page.
fn visit(frame: &Frame, origin: Point, with: &mut impl FnMut(Point, &TextItem)) {
    for (at, item) in frame.items() {
        match item {
            FrameItem::Group(group) => visit(&group.frame, origin + *at, with),
            FrameItem::Text(text) => with(origin + *at, text),
            _ => {}
        }
    }
}

/// Runs of text joined to lines: a run on the same baseline (or a raised or lowered one that
/// touches it) goes on, any other begins a line.
#[derive(Default)]
struct PageText {
    lines: String,
    end: Option<Point>,
}

impl PageText {
    fn push(&mut self, at: Point, item: &TextItem) {
        if let Some(end) = self.end {
            let size = item.size.to_pt();
            let across = (at.x - end.x).to_pt() / size;
            let down = ((at.y - end.y).to_pt() / size).abs();
            if down > 0.4 || across < -0.3 {
                self.lines.push('\n');
            } else if across > 0.12 {
                self.lines.push(' ');
            }
        }
        self.lines.push_str(&item.text);
        self.end = Some(Point::new(at.x + item.width(), at.y));
    }
}

/// Refuses a document that holds a character no font could draw, naming the text, the character
/// and the page.
pub(super) fn check_glyphs(document: &PagedDocument) -> Result<(), DocumentError> {
    for (index, page) in document.pages().iter().enumerate() {
        let mut missing = None;
        visit(&page.frame, Point::zero(), &mut |_, item| {
            if missing.is_some() {
                return;
            }
            // Glyph 0 is the one a font gives for what it does not have.
            if let Some(glyph) = item.glyphs.iter().find(|glyph| glyph.id == 0) {
                let character = item.text[glyph.range()].chars().next();
                missing = Some((item.text.to_string(), character.unwrap_or('\u{fffd}')));
            }
        });
        if let Some((text, character)) = missing {
            return Err(DocumentError::MissingCharacter {
                text,
                character,
                place: format!("page {}", index + 1),
            });
        }
    }
    Ok(())
}

/// Refuses a figure whose labels hold a character no font can draw: the export would name no place.
pub(super) fn check_figure(world: &DocumentWorld, figure: &Figure) -> Result<(), DocumentError> {
    let mut rest = figure.svg.as_str();
    while let Some(open) = rest.find('>') {
        let after = &rest[open + 1..];
        let text = &after[..after.find('<').unwrap_or(after.len())];
        if let Some(character) = world.undrawable(text) {
            return Err(DocumentError::MissingCharacter {
                text: text.trim().to_owned(),
                character,
                place: format!("figure {}", figure.name),
            });
        }
        rest = &after[text.len()..];
    }
    Ok(())
}

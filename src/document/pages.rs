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
    visit_items(frame, origin, &mut |at, item| {
        if let FrameItem::Text(text) = item {
            with(at, text);
        }
    });
}

/// Calls `with` for everything in a frame that is no frame itself, with its place on the page.
fn visit_items(frame: &Frame, origin: Point, with: &mut impl FnMut(Point, &FrameItem)) {
    for (at, item) in frame.items() {
        match item {
            FrameItem::Group(group) => visit_items(&group.frame, origin + *at, with),
            item => with(origin + *at, item),
        }
    }
}

/// Height of a capital and depth of a descender in sizes of the text, for the boxes of runs.
const CAPITAL: f64 = 0.67;
const DESCENDER: f64 = 0.21;

/// What stands on one page, and where.
#[derive(Debug, Clone, PartialEq)]
pub struct PageLayout {
    /// Width of the page, pt.
    pub width_pt: f64,
    /// Height of the page, pt.
    pub height_pt: f64,
    /// Runs of text and pictures in reading order.
    pub placed: Vec<Placed>,
}

/// A run of text or a picture with its box, pt from the upper left corner of the page.
#[derive(Debug, Clone, PartialEq)]
pub struct Placed {
    /// The text; `None` for a picture.
    pub text: Option<String>,
    /// Left edge.
    pub left_pt: f64,
    /// Upper edge; of text, that of its capitals.
    pub top_pt: f64,
    /// Right edge.
    pub right_pt: f64,
    /// Lower edge; of text, that of its descenders.
    pub bottom_pt: f64,
}

/// Where everything stands.
pub(super) fn layout(document: &PagedDocument) -> Vec<PageLayout> {
    let on_page = |frame: &Frame| {
        let mut placed = Vec::new();
        visit_items(frame, Point::zero(), &mut |at, item| {
            let (left, y) = (at.x.to_pt(), at.y.to_pt());
            match item {
                FrameItem::Text(text) => {
                    let size = text.size.to_pt();
                    placed.push(Placed {
                        text: Some(text.text.to_string()),
                        left_pt: left,
                        top_pt: y - CAPITAL * size,
                        right_pt: left + text.width().to_pt(),
                        bottom_pt: y + DESCENDER * size,
                    });
                }
                FrameItem::Image(_, size, _) => placed.push(Placed {
                    text: None,
                    left_pt: left,
                    top_pt: y,
                    right_pt: left + size.x.to_pt(),
                    bottom_pt: y + size.y.to_pt(),
                }),
                _ => {}
            }
        });
        PageLayout {
            width_pt: frame.width().to_pt(),
            height_pt: frame.height().to_pt(),
            placed,
        }
    };
    let pages = document.pages().iter();
    pages.map(|page| on_page(&page.frame)).collect()
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

//! The plots of a record, drawn as SVG at their true size on the page, in black and greys.
//!
//! Everything comes from the record; nothing is computed here but what lies between a figure and
//! its place on paper. Sizes and strokes are those of the page, in pt, so a figure is placed at its
//! own width and its labels are as large as the text beside it.

mod axis;
mod canvas;
mod change;
#[cfg(test)]
mod checks;
mod fits;
mod geometry;
mod narrate;
mod panel;
mod place;
mod predicted;
mod reading;
mod response;
#[cfg(test)]
mod sample;
mod test;
mod trend;
mod trial;
mod widths;
mod withheld;

use crate::record::{Record, Status};
use canvas::Canvas;
pub use reading::read_step;

/// One figure, ready to be placed at `width_mm`.
#[derive(Debug, Clone, PartialEq)]
pub struct Figure {
    /// File name: `test.svg`, `fits.svg`, `reading.svg`, `change.svg`, `predicted.svg`,
    /// `trial.svg` or `withheld.svg`.
    pub name: &'static str,
    /// The drawing.
    pub svg: String,
    /// Width on the page, mm.
    pub width_mm: f64,
    /// Height on the page, mm.
    pub height_mm: f64,
    /// What stands below it.
    pub caption: String,
    /// What it shows, in sentences, for those who cannot see it.
    pub alt: String,
}

impl Figure {
    fn new(name: &'static str, canvas: &Canvas, caption: String, alt: String) -> Self {
        Figure {
            name,
            svg: canvas.svg(),
            width_mm: canvas.width_mm,
            height_mm: canvas.height_mm,
            caption,
            alt,
        }
    }
}

/// Draws every figure that the record has data for, in the order of the pages.
///
/// A withheld record has one, its test; what the record does not hold is not drawn.
pub fn draw(record: &Record) -> Vec<Figure> {
    let figures = if record.document.status == Status::Withheld {
        vec![withheld::draw(record)]
    } else {
        vec![
            change::draw(record),
            test::draw(record),
            fits::draw(record),
            reading::draw(record),
            predicted::draw(record),
            trial::draw(record),
        ]
    };
    figures.into_iter().flatten().collect()
}

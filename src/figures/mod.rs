//! The figures of a record.

/// One figure, ready to be placed on a page at its own size.
#[derive(Debug, Clone, PartialEq)]
pub struct Figure {
    /// File name, e.g. "test.svg".
    pub name: &'static str,
    /// The drawing.
    pub svg: String,
    /// Width on paper, mm.
    pub width_mm: f64,
    /// Height on paper, mm.
    pub height_mm: f64,
    /// Caption, printed below.
    pub caption: String,
    /// A real sentence that stands for the drawing.
    pub alt: String,
}

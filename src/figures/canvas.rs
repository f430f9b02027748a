//! The sheet that a figure is drawn on, in pt; the one file that knows plotters.
//!
//! Marks are kept in order and played to plotters' SVG backend at the end. That backend counts in
//! whole pixels, so a pt is [`PIXELS_PER_PT`] pixels: every stroke of the plots (0.25 to 1.3 pt) is
//! then a whole number of pixels, and the SVG is placed at its true width on the page.

use super::geometry::{Point, Rect, dashes};
use super::widths::width_pt;
use plotters::prelude::{
    Circle, DrawingAreaErrorKind, IntoDrawingArea, PathElement, RGBColor, Rectangle, SVGBackend,
    ShapeStyle, Text,
};
use plotters::style::text_anchor::{HPos, Pos, VPos};
use plotters::style::{FontDesc, FontFamily, FontStyle, TextStyle};

/// Pixels of the SVG for one pt of the page.
pub const PIXELS_PER_PT: f64 = 20.0;
/// Points in a millimetre.
pub const PT_PER_MM: f64 = 72.0 / 25.4;
/// Family of every label, that of the page's text; in quotes, since a bare name of a family may
/// hold no figure (CSS Fonts Level 3, 3.1).
const FAMILY: &str = "'Source Sans 3'";
/// Size of plot labels, pt: the smallest size of the page.
pub const LABEL_PT: f64 = 8.5;

/// plotters 0.3.7 writes a font's size divided by this into the SVG.
const SIZE_WRITTEN_DIVIDED_BY: f64 = 1.24;
/// plotters sets the baseline this many em below the point of a label anchored at its top.
const BASELINE_BELOW_TOP_EM: f64 = 0.76;
/// Height of capitals and figures above the baseline, em (0.66 in the font, and some air).
const ASCENT_EM: f64 = 0.76;
/// Depth of letters below the baseline, em.
const DESCENT_EM: f64 = 0.22;

/// The four inks of a plot. Nothing depends on a grey: a second photocopy may lose it.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ink {
    /// Text, curves, axes.
    Black,
    /// Samples under a fit, hatching (luma 44 %).
    Middle,
    /// Grid lines (luma 63 %).
    Hair,
}

impl Ink {
    fn color(self) -> RGBColor {
        match self {
            Ink::Black => RGBColor(0, 0, 0),
            Ink::Middle => RGBColor(112, 112, 112),
            Ink::Hair => RGBColor(160, 160, 160),
        }
    }
}

/// How a line is drawn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Stroke {
    /// Width, pt.
    pub width_pt: f64,
    /// Ink.
    pub ink: Ink,
    /// Drawn and left out, pt; `None` for a solid line.
    pub dash: Option<(f64, f64)>,
}

impl Stroke {
    /// A solid line.
    pub const fn solid(width_pt: f64, ink: Ink) -> Self {
        Stroke {
            width_pt,
            ink,
            dash: None,
        }
    }

    /// A black broken line.
    pub const fn dashed(width_pt: f64, on: f64, off: f64) -> Self {
        Stroke {
            width_pt,
            ink: Ink::Black,
            dash: Some((on, off)),
        }
    }
}

/// Which point of a label its x names.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Anchor {
    /// Its left end.
    Start,
    /// Its middle.
    Middle,
    /// Its right end.
    End,
}

/// Words on a plot.
#[derive(Debug, Clone, PartialEq)]
pub struct Label {
    /// The words.
    pub words: String,
    /// Anchor, pt.
    pub x: f64,
    /// Baseline, pt.
    pub y: f64,
    /// Size, pt.
    pub size_pt: f64,
    /// Whether bold.
    pub bold: bool,
    /// What `x` names.
    pub anchor: Anchor,
}

impl Label {
    /// Regular words of the usual size that begin at `x` on the baseline `y`.
    pub fn new(x: f64, y: f64, words: impl Into<String>) -> Self {
        // Control characters have no place in XML and none on paper.
        let words: String = words.into();
        Label {
            words: words.chars().filter(|c| !c.is_control()).collect(),
            x,
            y,
            size_pt: LABEL_PT,
            bold: false,
            anchor: Anchor::Start,
        }
    }

    /// The same, bold.
    pub fn bold(mut self) -> Self {
        self.bold = true;
        self
    }

    /// The same at another size, pt.
    pub fn size(mut self, size_pt: f64) -> Self {
        self.size_pt = size_pt;
        self
    }

    /// The same with `x` naming another point.
    pub fn anchor(mut self, anchor: Anchor) -> Self {
        self.anchor = anchor;
        self
    }

    /// Width of the words, pt.
    pub fn width(&self) -> f64 {
        width_pt(&self.words, self.size_pt, self.bold)
    }

    /// The box that the words fill.
    pub fn area(&self) -> Rect {
        let width = self.width();
        let x0 = match self.anchor {
            Anchor::Start => self.x,
            Anchor::Middle => self.x - width / 2.0,
            Anchor::End => self.x - width,
        };
        Rect::new(
            x0,
            self.y - ASCENT_EM * self.size_pt,
            x0 + width,
            self.y + DESCENT_EM * self.size_pt,
        )
    }
}

/// One thing drawn.
#[derive(Debug, Clone, PartialEq)]
enum Mark {
    Path(Vec<Point>, Stroke),
    Dot(Point, f64, Ink),
    Blank(Rect),
    Words(Label),
}

/// A sheet with what was drawn on it, first things lowest.
#[derive(Debug, Clone, PartialEq)]
pub struct Canvas {
    /// Width, mm.
    pub width_mm: f64,
    /// Height, mm.
    pub height_mm: f64,
    marks: Vec<Mark>,
}

impl Canvas {
    /// An empty sheet.
    pub fn new(width_mm: f64, height_mm: f64) -> Self {
        Canvas {
            width_mm,
            height_mm,
            marks: Vec::new(),
        }
    }

    /// Width, pt.
    pub fn width(&self) -> f64 {
        self.width_mm * PT_PER_MM
    }

    /// Height, pt.
    pub fn height(&self) -> f64 {
        self.height_mm * PT_PER_MM
    }

    /// The whole sheet.
    pub fn area(&self) -> Rect {
        Rect::new(0.0, 0.0, self.width(), self.height())
    }

    /// Draws a path. Points that are not finite are left out: they have no place on paper.
    pub fn path(&mut self, points: &[Point], stroke: Stroke) {
        let kept: Vec<Point> = finite(points);
        if kept.len() > 1 {
            self.marks.push(Mark::Path(kept, stroke));
        }
    }

    /// Draws a straight line.
    pub fn line(&mut self, from: Point, to: Point, stroke: Stroke) {
        self.path(&[from, to], stroke);
    }

    /// Draws round dots.
    pub fn dots(&mut self, points: &[Point], radius_pt: f64, ink: Ink) {
        for point in finite(points) {
            self.marks.push(Mark::Dot(point, radius_pt, ink));
        }
    }

    /// Paints a box white, for words that stand on lines.
    pub fn blank(&mut self, area: Rect) {
        self.marks.push(Mark::Blank(area));
    }

    /// Sets words.
    pub fn words(&mut self, label: Label) {
        if !label.words.is_empty() && label.x.is_finite() && label.y.is_finite() {
            self.marks.push(Mark::Words(label));
        }
    }

    /// Fills a box with slanted lines 7 pt apart.
    pub fn hatch(&mut self, area: Rect) {
        const APART: f64 = 7.0;
        let stroke = Stroke::solid(0.45, Ink::Middle);
        let height = area.y1 - area.y0;
        // Lines lie on one pattern for the whole sheet, so that neighbouring stretches match.
        let sum = area.x0 + area.y0;
        let mut k = libm::ceil(sum / APART) * APART;
        while k < area.x1 + area.y0 + height {
            // Points with x + y = k, from lower left to upper right.
            let (left, right) = ((k - area.y1).max(area.x0), (k - area.y0).min(area.x1));
            if right > left {
                self.line((left, k - left), (right, k - right), stroke);
            }
            k += APART;
        }
    }

    /// The boxes of all words set so far.
    pub fn label_areas(&self) -> Vec<Rect> {
        self.labels().map(Label::area).collect()
    }

    /// All words set so far.
    pub fn labels(&self) -> impl Iterator<Item = &Label> {
        self.marks.iter().filter_map(|mark| match mark {
            Mark::Words(label) => Some(label),
            _ => None,
        })
    }

    /// The sheet as SVG text.
    pub fn svg(&self) -> String {
        let mut svg = String::new();
        let size = (
            pixels(self.width()).unsigned_abs(),
            pixels(self.height()).unsigned_abs(),
        );
        self.play(&mut svg, size)
            .expect("the SVG backend writes to memory, which does not fail");
        // plotters has no word for joins; the mitred default makes noise look taller than it is.
        svg.replacen("<svg ", "<svg stroke-linejoin=\"round\" ", 1)
    }

    fn play(
        &self,
        svg: &mut String,
        size: (u32, u32),
    ) -> Result<(), DrawingAreaErrorKind<std::io::Error>> {
        let area = SVGBackend::with_string(svg, size).into_drawing_area();
        for mark in &self.marks {
            match mark {
                Mark::Path(points, stroke) => {
                    let style = ShapeStyle {
                        color: stroke.ink.color().into(),
                        filled: false,
                        stroke_width: pixels(stroke.width_pt).max(1).unsigned_abs(),
                    };
                    let strokes = match stroke.dash {
                        None => vec![points.clone()],
                        Some((on, off)) => dashes(points, on, off),
                    };
                    for one in strokes {
                        area.draw(&PathElement::new(whole(&one), style))?;
                    }
                }
                Mark::Dot(point, radius, ink) => {
                    let style = ShapeStyle::from(&ink.color()).filled();
                    area.draw(&Circle::new(place(*point), pixels(*radius).max(1), style))?;
                }
                Mark::Blank(rect) => {
                    let corners = [place((rect.x0, rect.y0)), place((rect.x1, rect.y1))];
                    let white = ShapeStyle::from(&RGBColor(255, 255, 255)).filled();
                    area.draw(&Rectangle::new(corners, white))?;
                }
                Mark::Words(label) => {
                    let top = label.y - BASELINE_BELOW_TOP_EM * label.size_pt;
                    area.draw(&Text::new(
                        label.words.clone(),
                        place((label.x, top)),
                        text_style(label),
                    ))?;
                }
            }
        }
        area.present()
    }
}

fn text_style(label: &Label) -> TextStyle<'static> {
    let weight = if label.bold {
        FontStyle::Bold
    } else {
        FontStyle::Normal
    };
    let size = label.size_pt * PIXELS_PER_PT * SIZE_WRITTEN_DIVIDED_BY;
    let h_pos = match label.anchor {
        Anchor::Start => HPos::Left,
        Anchor::Middle => HPos::Center,
        Anchor::End => HPos::Right,
    };
    TextStyle::from(FontDesc::new(FontFamily::Name(FAMILY), size, weight))
        .pos(Pos::new(h_pos, VPos::Top))
}

fn finite(points: &[Point]) -> Vec<Point> {
    points
        .iter()
        .copied()
        .filter(|p| p.0.is_finite() && p.1.is_finite())
        .collect()
}

fn pixels(pt: f64) -> i32 {
    libm::round(pt * PIXELS_PER_PT) as i32
}

fn place(point: Point) -> (i32, i32) {
    (pixels(point.0), pixels(point.1))
}

/// A path in whole pixels, neighbours that fall together drawn once.
fn whole(points: &[Point]) -> Vec<(i32, i32)> {
    let mut kept: Vec<(i32, i32)> = Vec::with_capacity(points.len());
    for &point in points {
        let at = place(point);
        if kept.last() != Some(&at) {
            kept.push(at);
        }
    }
    kept
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sizes_on_the_page_are_exact() {
        let mut canvas = Canvas::new(100.0, 50.0);
        canvas.words(Label::new(10.0, 20.0, "PV, °C <&>\u{7}"));
        canvas.line((0.0, 1.0), (2.0, 3.0), Stroke::solid(0.7, Ink::Black));
        let svg = canvas.svg();
        // 8.5 pt at 20 pixels to the pt.
        assert!(svg.contains("font-size=\"170\""), "{svg}");
        assert!(
            svg.contains("font-family=\"&apos;Source Sans 3&apos;\""),
            "{svg}"
        );
        // Baseline at 20 pt less 0.76 of 8.5 pt; the backend adds the 0.76 em again.
        assert!(svg.contains("y=\"271\" dy=\"0.76em\""), "{svg}");
        assert!(svg.contains("PV, °C &lt;&amp;&gt;\n"), "{svg}");
        assert!(svg.contains("stroke-width=\"14\""), "{svg}");
        assert!(svg.contains("viewBox=\"0 0 5669 2835\""), "{svg}");
    }

    #[test]
    fn what_is_not_finite_is_not_drawn() {
        let mut canvas = Canvas::new(10.0, 10.0);
        canvas.path(
            &[(0.0, f64::NAN), (1.0, 1.0)],
            Stroke::solid(1.0, Ink::Black),
        );
        canvas.dots(&[(f64::INFINITY, 0.0)], 1.0, Ink::Black);
        canvas.words(Label::new(f64::NAN, 0.0, "x"));
        assert_eq!(canvas.marks.len(), 0);
    }

    #[test]
    fn hatching_stays_in_its_box() {
        let mut canvas = Canvas::new(50.0, 50.0);
        let area = Rect::new(10.0, 20.0, 33.0, 90.0);
        canvas.hatch(area);
        assert!(canvas.marks.len() > 5);
        for mark in &canvas.marks {
            let Mark::Path(points, _) = mark else {
                panic!("hatching is made of lines");
            };
            assert!(
                points
                    .iter()
                    .all(|p| { area.grown(1e-9).holds(Rect::new(p.0, p.1, p.0, p.1)) })
            );
        }
    }
}

//! One data window of a figure: from samples to places on the sheet, axes, curves.

use super::axis::{Tick, Values};
use super::canvas::{Anchor, Canvas, Ink, LABEL_PT, Label, Stroke};
use super::geometry::{Point, Rect, clip_path, thin};
use super::widths::width_pt;

/// Axis line and its ticks.
const AXIS: Stroke = Stroke::solid(0.7, Ink::Black);
/// Grid line at a tick of a vertical axis.
const GRID: Stroke = Stroke::solid(0.25, Ink::Hair);
/// Least width on paper that two samples are told apart by, pt.
pub const COLUMN_PT: f64 = 0.45;
/// From the middle of a label's figures down to their baseline, pt.
pub const HALF_FIGURE_PT: f64 = 2.8;
/// Room below an axis line for one line of labels, pt.
pub const BELOW_PT: f64 = 15.8;
/// More room for a second line, pt.
pub const SECOND_LINE_PT: f64 = 10.5;

/// A data window.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Panel {
    /// Where it lies on the sheet.
    pub frame: Rect,
    /// Range of the horizontal axis.
    pub x: (f64, f64),
    /// Range of the vertical axis.
    pub y: (f64, f64),
}

impl Panel {
    /// A window that shows `x` and the range of `axis`; both ranges are wider than nothing.
    pub fn new(frame: Rect, x: (f64, f64), axis: &Values) -> Self {
        let x = if x.1 > x.0 { x } else { (x.0, x.0 + 1.0) };
        Panel {
            frame,
            x,
            y: (axis.low, axis.high),
        }
    }

    /// Place of a horizontal value.
    pub fn at_x(&self, value: f64) -> f64 {
        let part = (value - self.x.0) / (self.x.1 - self.x.0);
        self.frame.x0 + part * (self.frame.x1 - self.frame.x0)
    }

    /// Place of a vertical value.
    pub fn at_y(&self, value: f64) -> f64 {
        let part = (value - self.y.0) / (self.y.1 - self.y.0);
        self.frame.y1 - part * (self.frame.y1 - self.frame.y0)
    }

    /// A path of samples as it lies on the sheet: thinned, and cut at the window.
    pub fn on_sheet(&self, samples: &[Point]) -> Vec<Vec<Point>> {
        let placed: Vec<Point> = samples
            .iter()
            .map(|&(x, y)| (self.at_x(x), self.at_y(y)))
            .filter(|p| p.0.is_finite() && p.1.is_finite())
            .collect();
        // A curve that blows up lies far off the sheet; a rounding there must not show here.
        clip_path(&thin(&placed, COLUMN_PT), self.frame.grown(1e-6))
    }

    /// Draws a path of samples; returns it as drawn.
    pub fn curve(&self, canvas: &mut Canvas, samples: &[Point], stroke: Stroke) -> Vec<Vec<Point>> {
        let parts = self.on_sheet(samples);
        for part in &parts {
            canvas.path(part, stroke);
        }
        parts
    }

    /// Draws samples as they are: dots where they can be told apart, else their envelope.
    pub fn samples(&self, canvas: &mut Canvas, samples: &[Point], ink: Ink) -> Vec<Vec<Point>> {
        const APART_PT: f64 = 0.8;
        let from = samples.first().map_or(0.0, |p| self.at_x(p.0));
        let to = samples.last().map_or(0.0, |p| self.at_x(p.0));
        let parts = self.on_sheet(samples);
        if samples.len() as f64 * APART_PT > (to - from).abs().max(APART_PT) {
            for part in &parts {
                canvas.path(part, Stroke::solid(0.6, ink));
            }
        } else {
            let placed: Vec<Point> = samples
                .iter()
                .map(|&(x, y)| (self.at_x(x), self.at_y(y)))
                .filter(|p| self.frame.grown(1e-6).holds(Rect::new(p.0, p.1, p.0, p.1)))
                .collect();
            // The sparser, the larger: a lone small dot is taken for dirt.
            let apart = (to - from).abs() / samples.len().max(1) as f64;
            canvas.dots(&placed, (0.3 * apart).clamp(0.6, 1.3), ink);
        }
        parts
    }

    /// Draws the vertical axis: a hairline at each tick, its label on the left where `labelled`.
    pub fn value_axis(&self, canvas: &mut Canvas, axis: &Values, labelled: bool) {
        for (from, to) in self.grid(axis) {
            canvas.line(from, to, GRID);
        }
        if labelled {
            for tick in self.spread_ticks(axis) {
                let y = self.at_y(tick.at) + HALF_FIGURE_PT;
                let label = Label::new(self.frame.x0 - 4.0, y, tick.label.clone());
                canvas.words(label.anchor(Anchor::End));
            }
        }
    }

    /// The lines of the grid.
    pub fn grid(&self, axis: &Values) -> Vec<(Point, Point)> {
        axis.ticks
            .iter()
            .map(|tick| self.at_y(tick.at))
            .map(|y| ((self.frame.x0, y), (self.frame.x1, y)))
            .collect()
    }

    /// The ticks whose labels have room above each other.
    fn spread_ticks<'a>(&self, axis: &'a Values) -> Vec<&'a Tick> {
        let least = LABEL_PT + 0.5;
        let apart = axis
            .ticks
            .windows(2)
            .map(|w| self.at_y(w[0].at) - self.at_y(w[1].at))
            .fold(f64::INFINITY, f64::min);
        let every = if apart > 0.0 {
            libm::ceil(least / apart).max(1.0) as usize
        } else {
            1
        };
        axis.ticks.iter().step_by(every).collect()
    }

    /// Draws the time axis along the lower edge.
    pub fn time_axis(&self, canvas: &mut Canvas, ticks: &[Tick]) {
        let y = self.frame.y1;
        canvas.line((self.frame.x0, y), (self.frame.x1, y), AXIS);
        for tick in ticks {
            let x = self.at_x(tick.at);
            canvas.line((x, y), (x, y + 3.0), AXIS);
            // The figure stands under its tick, the unit follows it.
            let from = x - width_pt(&tick.label, LABEL_PT, false) / 2.0;
            let words = format!("{}{}", tick.label, tick.after);
            canvas.words(Label::new(from, y + 12.0, words));
            let below = Label::new(x, y + 12.0 + SECOND_LINE_PT, tick.below.clone());
            canvas.words(below.anchor(Anchor::Middle));
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::axis;
    use super::*;

    fn panel() -> Panel {
        let axis = axis::ticked(0.0, 10.0, 5);
        Panel::new(Rect::new(20.0, 10.0, 120.0, 60.0), (0.0, 100.0), &axis)
    }

    #[test]
    fn values_find_their_place() {
        assert_eq!(panel().at_x(50.0), 70.0);
        assert_eq!(panel().at_y(0.0), 60.0);
        assert_eq!(panel().at_y(10.0), 10.0);
    }

    #[test]
    fn a_curve_that_blows_up_is_cut_at_the_window() {
        let samples: Vec<Point> = (0..100)
            .map(|k| (f64::from(k), 1.3_f64.powi(k) - 5.0))
            .collect();
        let mut canvas = Canvas::new(50.0, 25.0);
        let parts = panel().curve(&mut canvas, &samples, Stroke::solid(1.0, Ink::Black));
        assert!(!parts.is_empty());
        for p in parts.iter().flatten() {
            assert!(
                panel()
                    .frame
                    .grown(0.001)
                    .holds(Rect::new(p.0, p.1, p.0, p.1))
            );
        }
    }

    #[test]
    fn an_empty_range_of_time_still_has_a_scale() {
        let axis = axis::values((1.0, 1.0), 0.0, 4);
        let one = Panel::new(Rect::new(0.0, 0.0, 10.0, 10.0), (5.0, 5.0), &axis);
        assert!(one.at_x(5.0).is_finite() && one.at_y(1.0).is_finite());
    }
}

//! Predicted responses as found beside as left: what page 1 and the settings' section share.

use super::axis::{self, Values};
use super::canvas::{Anchor, Canvas, Ink, Label, Stroke};
use super::geometry::{Point, Rect};
use super::panel::{HALF_FIGURE_PT, Panel};
use super::place::{Block, LINE_PT, Taken, end_labels, name_curve};
use crate::predict::Response;
use crate::record::{Record, SettingsBlock};

/// Settings as found.
pub const FOUND: Stroke = Stroke::dashed(0.7, 3.6, 2.0);
/// Settings as left, or to enter.
pub const NEW: Stroke = Stroke::solid(1.2, Ink::Black);
/// Part of the time axis that lies before the step.
const BEFORE: f64 = 0.05;
/// How far beyond the new response the one as found is followed, in heights of the new one: far
/// enough to see it swing, not so far that the new one is pressed flat.
const BEYOND: f64 = 0.9;
/// A response as found that stays within this is shown whole: a line cut just short of its peak helps
/// nobody.
const BEYOND_WHOLE: f64 = 1.5;
/// The same where the loop as found is unstable: its line leaves the window anyway.
const BEYOND_UNSTABLE: f64 = 0.4;

/// Which of the two responses.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Of {
    /// To a step of the set point.
    SetPoint,
    /// To a step of the load.
    Load,
}

/// The settings whose responses are held against each other.
#[derive(Debug, Clone, Copy)]
pub struct Pair<'a> {
    /// As found, where a response was predicted.
    pub found: Option<&'a SettingsBlock>,
    /// As left, or as recommended where nothing was entered yet.
    pub new: &'a SettingsBlock,
    /// "as left" or "to enter".
    pub name: &'static str,
}

impl<'a> Pair<'a> {
    /// The pair of a record; `None` where there is nothing new to show.
    pub fn of(record: &'a Record) -> Option<Self> {
        let settings = &record.settings;
        let (new, name) = match (&settings.as_left, &settings.recommended) {
            (Some(left), _) => (left, "as left"),
            (None, Some(recommended)) => (recommended, "to enter"),
            (None, None) => return None,
        };
        new.predicted.as_ref()?;
        let found = Some(&settings.as_found).filter(|block| block.predicted.is_some());
        Some(Pair { found, new, name })
    }

    /// The response as found.
    pub fn found_response(&self, of: Of) -> Option<&'a Response> {
        self.found.and_then(|block| response(block, of))
    }

    /// The new response.
    pub fn new_response(&self, of: Of) -> Option<&'a Response> {
        response(self.new, of)
    }

    /// Whether the loop as found is unstable.
    pub fn found_unstable(&self) -> bool {
        self.found.is_some_and(unstable)
    }

    /// How the curve as found is named.
    pub fn found_name(&self) -> &'static str {
        if self.found_unstable() {
            "as found: unstable"
        } else {
            "as found"
        }
    }

    /// Seconds worth showing: until both have settled, the new one never pressed into the first
    /// fifth; the whole line where nothing settles.
    pub fn shown_s(&self, of: Of) -> f64 {
        let end = |r: Option<&Response>| {
            r.and_then(|r| r.curve.t_s.last().copied())
                .filter(|t| t.is_finite())
                .unwrap_or(0.0)
        };
        let settled = |r: Option<&Response>| r.and_then(|r| r.metrics.settling_time_s);
        let (new, found) = (self.new_response(of), self.found_response(of));
        let longest = end(new).max(end(found));
        let wanted = match (settled(new), settled(found)) {
            (Some(new), Some(found)) => (1.6 * new).max((1.1 * found).min(5.0 * new)),
            (Some(new), None) => 3.0 * new,
            (None, Some(found)) => 3.0 * found,
            (None, None) => longest,
        };
        if wanted > 0.0 {
            wanted.min(longest)
        } else {
            longest
        }
    }
}

fn response(block: &SettingsBlock, of: Of) -> Option<&Response> {
    let predicted = block.predicted.as_ref()?;
    Some(match of {
        Of::SetPoint => &predicted.set_point,
        Of::Load => &predicted.load,
    })
}

/// Whether a block of settings makes the loop unstable on the fitted model.
pub fn unstable(block: &SettingsBlock) -> bool {
    block.margins.is_some_and(|m| !m.stable)
}

/// One window of a response: its two lines, in engineering units, from a little before the step.
#[derive(Debug, Clone)]
pub struct Window {
    found: Vec<Point>,
    new: Vec<Point>,
    beyond: f64,
    /// Time axis, s.
    pub time: (f64, f64),
}

impl Window {
    /// Lines of one column of the curves, each value times `factor`, as far as `shown_s`.
    pub fn new(
        pair: &Pair,
        of: Of,
        factor: f64,
        column: impl Fn(&Response) -> &[f64],
    ) -> Option<Self> {
        let (found, new) = (pair.found_response(of), pair.new_response(of)?);
        let shown_s = pair.shown_s(of);
        let before = -BEFORE * shown_s;
        let line = |response: &Response| {
            let mut line = vec![(before, 0.0), (0.0, 0.0)];
            line.extend(
                response
                    .curve
                    .t_s
                    .iter()
                    .zip(column(response))
                    .map(|(&t, &value)| (t, value * factor)),
            );
            line.extend(at_rest_until(&line, shown_s));
            line
        };
        Some(Window {
            found: found.map(line).unwrap_or_default(),
            new: line(new),
            beyond: if pair.found_unstable() {
                BEYOND_UNSTABLE
            } else {
                BEYOND
            },
            time: (before, shown_s),
        })
    }

    /// The vertical axis: the new line whole, the one as found as far as it does not press the new
    /// one flat. `also` is shown in any case.
    pub fn axis(&self, also: &[f64], least: f64, most: usize) -> Values {
        let shown =
            |line: &[Point]| axis::range(line.iter().filter(|p| p.0 <= self.time.1).map(|p| p.1));
        let new = axis::joined(
            shown(&self.new).unwrap_or((0.0, 0.0)),
            axis::range(also.iter().copied()),
        );
        let limits = |beyond: f64| {
            let reach = (new.1 - new.0) * beyond;
            (new.0 - reach, new.1 + reach)
        };
        let (whole, cut) = (limits(BEYOND_WHOLE), limits(self.beyond));
        let found = shown(&self.found)
            .map(|(low, high)| {
                if low >= whole.0 && high <= whole.1 {
                    (low, high)
                } else {
                    (low.max(cut.0), high.min(cut.1))
                }
            })
            .filter(|(low, high)| low <= high);
        axis::values(axis::joined(new, found), least, most)
    }

    /// Draws both lines; returns them as drawn, as found first.
    pub fn draw(&self, canvas: &mut Canvas, panel: &Panel) -> [Vec<Vec<Point>>; 2] {
        let found = panel.curve(canvas, &self.found, FOUND);
        [found, panel.curve(canvas, &self.new, NEW)]
    }

    /// The new line's place at the right edge of the window.
    pub fn new_end(&self, panel: &Panel) -> f64 {
        let last = self.new.iter().rfind(|p| p.0 <= self.time.1);
        last.map_or(f64::NAN, |p| {
            panel.at_y(p.1).clamp(panel.frame.y0, panel.frame.y1)
        })
    }

    /// Whether the line as found leaves the window.
    pub fn found_leaves(&self, panel: &Panel) -> bool {
        self.found
            .iter()
            .any(|p| p.0 <= self.time.1 && !(panel.y.0..=panel.y.1).contains(&p.1))
    }
}

/// Where a line ends before the window does and has come to rest: its last value at the window's end.
fn at_rest_until(line: &[Point], end: f64) -> Option<Point> {
    /// Part of the line, at its end, that has to lie still, and how still, in parts of its whole range.
    const STILL_FROM: f64 = 0.9;
    const STILL: f64 = 0.005;
    let &(last_t, last) = line.last()?;
    let (low, high) = axis::range(line.iter().map(|p| p.1))?;
    let rests = line
        .iter()
        .rev()
        .take_while(|p| p.0 >= STILL_FROM * last_t)
        .all(|p| (p.1 - last).abs() <= STILL * (high - low));
    (last_t < end && rests).then_some((end, last))
}

/// Names both curves in a window: as found beside it, the new one at its end. Where there is no
/// room beside the curve as found its name stands above the window, `above` pt from its edge.
pub fn name_both(
    canvas: &mut Canvas,
    (panel, axis): (&Panel, &Values),
    (window, drawn): (&Window, &[Vec<Vec<Point>>; 2]),
    pair: &Pair,
    set_point: Option<f64>,
    above: f64,
) {
    let [found, new] = drawn;
    let frame = panel.frame;
    let x = frame.x1 + 4.0;
    let end = window.new_end(panel);
    end_labels(canvas, x, &[(end, pair.name)], (frame.y0, frame.y1));
    if let Some(step) = set_point {
        let y = panel.at_y(step);
        let clear = if (y - end).abs() < LINE_PT {
            end + LINE_PT
        } else {
            y
        };
        canvas.words(Label::new(x, clear + HALF_FIGURE_PT, "set point"));
    }
    if found.is_empty() {
        return;
    }
    let mut taken = Taken::words_of(canvas);
    taken.add_paths(new);
    taken.add_grid(panel.grid(axis));
    if let Some(step) = set_point {
        let (begin, end) = panel.x;
        let edge = [(begin, 0.0), (0.0, 0.0), (0.0, step), (end, step)];
        taken.add_paths(&panel.on_sheet(&edge));
    }
    let sheet = Rect::new(frame.x0, frame.y0 - 9.0, frame.x1, frame.y1 - 1.0);
    let block = Block::line(pair.found_name(), false);
    if !name_curve(canvas, &mut taken, found, &block, sheet) {
        let words = format!("dashed: {}", pair.found_name().replace(':', ","));
        let label = Label::new(frame.x1, frame.y0 - above, words);
        canvas.words(label.anchor(Anchor::End));
    }
}

/// Size of the step in engineering units of a range of this width.
pub fn step_size(response: &Response, width: f64) -> f64 {
    response.step_percent / 100.0 * width
}

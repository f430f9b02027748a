//! PV above OP on one time axis: what the test, the withheld test and the trial are drawn from.

use super::axis::{self, Tick, Values};
use super::canvas::{Canvas, Ink, Label, Stroke};
use super::geometry::{Point, Rect, thin};
use super::panel::{BELOW_PT, COLUMN_PT, Panel, SECOND_LINE_PT};
use crate::display;
use crate::quantity::Span;
use crate::record::{Log, Loop};
use crate::trace::{Samples, gaps};

/// From the lower edge of a title's baseline to the window below it, pt.
const TITLE_ABOVE_PT: f64 = 9.5;
/// Least room for value labels on the left, pt.
const LEFT_PT: f64 = 30.0;

/// Samples as lines: (second, value in engineering units).
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Lines {
    /// PV, broken where it was not measured.
    pub pv: Vec<Vec<Point>>,
    /// OP, held between samples.
    pub op: Vec<Point>,
    /// SP, held between samples; empty where not logged.
    pub sp: Vec<Point>,
    /// First and last second.
    pub time: (f64, f64),
}

/// The lines of a log; `None` where it holds less than two moments to draw between.
pub fn lines(samples: &Samples, width_pt: f64) -> Option<Lines> {
    let time = axis::range(samples.t_s.iter().copied())?;
    if time.1 <= time.0 {
        return None;
    }
    let column_s = (time.1 - time.0) / width_pt * COLUMN_PT;
    let pv = runs(samples, column_s);
    let held = |values: &[f64]| thin(&stairs(&samples.t_s, values), column_s);
    Some(Lines {
        pv,
        op: held(&samples.op),
        sp: held(&samples.sp),
        time,
    })
}

/// Good PV samples, in runs without a gap that could be seen.
pub fn runs(samples: &Samples, column_s: f64) -> Vec<Vec<Point>> {
    let good: Vec<Point> = samples
        .t_s
        .iter()
        .zip(&samples.pv)
        .zip(&samples.good)
        .filter(|((t, pv), good)| **good && pv.is_finite() && t.is_finite())
        .map(|((t, pv), _)| (*t, *pv))
        .collect();
    let times: Vec<f64> = good.iter().map(|p| p.0).collect();
    let mut broken = gaps(&times)
        .into_iter()
        .filter(|gap| gap.to_s - gap.from_s > column_s)
        .map(|gap| gap.to_s)
        .peekable();
    let mut runs: Vec<Vec<Point>> = Vec::new();
    for point in good {
        let begins = broken.next_if(|&to| point.0 >= to).is_some();
        match runs.last_mut() {
            Some(run) if !begins => run.push(point),
            _ => runs.push(vec![point]),
        }
    }
    runs
}

/// Values held from each sample to the next; what is missing keeps the value before it.
pub fn stairs(times_s: &[f64], values: &[f64]) -> Vec<Point> {
    let mut path: Vec<Point> = Vec::new();
    let mut held = f64::NAN;
    for (&t, &value) in times_s.iter().zip(values) {
        if !t.is_finite() {
            continue;
        }
        if value.is_finite() && value != held {
            if held.is_finite() {
                path.push((t, held));
            }
            path.push((t, value));
            held = value;
        }
    }
    if let (Some(&last), true) = (times_s.last(), held.is_finite()) {
        path.push((last, held));
    }
    path
}

/// What a trend figure is laid out from.
#[derive(Debug, Clone, Copy)]
pub struct Outline<'a> {
    /// The log.
    pub log: &'a Log,
    /// The loop it belongs to.
    pub control_loop: &'a Loop,
    /// The log's lines.
    pub lines: &'a Lines,
    /// What the upper window shows beside the PV, engineering units.
    pub also_pv: Option<(f64, f64)>,
    /// What the lower window shows beside the OP, in its own unit.
    pub also_op: Option<(f64, f64)>,
    /// Upper edge of the PV window, pt.
    pub top: f64,
    /// Gap between the two windows, with the OP's title in it, pt.
    pub between: f64,
    /// Height of the OP window, pt.
    pub op_height: f64,
    /// Room on the right for labels at the line ends, pt.
    pub right: f64,
    /// Most ticks of the PV axis and of the OP axis.
    pub most_ticks: [usize; 2],
}

/// Both windows with their axes, not yet drawn.
#[derive(Debug, Clone)]
pub struct Trend {
    /// The PV's window.
    pub pv: Panel,
    /// The OP's window.
    pub op: Panel,
    pv_axis: Values,
    op_axis: Values,
    time_ticks: Vec<Tick>,
    titles: [String; 2],
}

impl Trend {
    /// Lays the windows out on `canvas`; `None` where there is no PV or no OP to show.
    pub fn new(canvas: &Canvas, outline: &Outline) -> Option<Self> {
        let (lines, control_loop) = (outline.lines, outline.control_loop);
        let pv_range = axis::range(lines.pv.iter().flatten().map(|p| p.1))?;
        let op_range = axis::range(lines.op.iter().map(|p| p.1))?;
        let pv_range = axis::joined(pv_range, outline.also_pv);
        let op_range = axis::joined(op_range, outline.also_op);
        let [pv_ticks, op_ticks] = outline.most_ticks;
        let pv_axis = axis::values(pv_range, least(&control_loop.pv), pv_ticks);
        let op_axis = axis::values(op_range, least(&control_loop.op), op_ticks);
        let left = LEFT_PT
            .max(pv_axis.label_width() + 6.0)
            .max(op_axis.label_width() + 6.0);
        let x1 = canvas.width() - outline.right;
        let time_ticks = match outline.log.zero {
            Some(zero) => axis::clock(zero, lines.time.0, lines.time.1, x1 - left),
            None => axis::elapsed(lines.time.0, lines.time.1, x1 - left, true),
        };
        let dates = time_ticks.iter().any(|tick| !tick.below.is_empty());
        let below = BELOW_PT + if dates { SECOND_LINE_PT } else { 0.0 };
        let op_y1 = canvas.height() - below;
        let op_y0 = op_y1 - outline.op_height;
        let pv_frame = Rect::new(left, outline.top, x1, op_y0 - outline.between);
        let titles = [
            pv_axis.title("PV", &display::unit(&control_loop.pv.unit)),
            op_axis.title("OP", &display::unit(&control_loop.op.unit)),
        ];
        Some(Trend {
            pv: Panel::new(pv_frame, lines.time, &pv_axis),
            op: Panel::new(Rect::new(left, op_y0, x1, op_y1), lines.time, &op_axis),
            pv_axis,
            op_axis,
            time_ticks,
            titles,
        })
    }

    /// Another title for the upper window.
    pub fn pv_title(mut self, what: &str, unit: &str) -> Self {
        self.titles[0] = self.pv_axis.title(what, &display::unit(unit));
        self
    }

    /// Draws grids, axes and titles.
    pub fn draw_axes(&self, canvas: &mut Canvas) {
        self.pv.value_axis(canvas, &self.pv_axis, true);
        self.op.value_axis(canvas, &self.op_axis, true);
        self.op.time_axis(canvas, &self.time_ticks);
        let [pv, op] = self.titles.clone();
        let op_title = self.op.frame.y0 - TITLE_ABOVE_PT;
        canvas.words(Label::new(0.0, 9.5, pv).bold());
        canvas.words(Label::new(0.0, op_title, op).bold());
    }

    /// The lines of both grids.
    pub fn grid(&self) -> Vec<(Point, Point)> {
        let mut lines = self.pv.grid(&self.pv_axis);
        lines.extend(self.op.grid(&self.op_axis));
        lines
    }

    /// Draws the PV; returns it as drawn.
    pub fn draw_pv(&self, canvas: &mut Canvas, lines: &Lines, width_pt: f64) -> Vec<Vec<Point>> {
        let mut drawn = Vec::new();
        for run in &lines.pv {
            match run.as_slice() {
                // A sample with gaps on both sides makes no line; it was measured all the same.
                [(t, pv)] => {
                    let at = (self.pv.at_x(*t), self.pv.at_y(*pv));
                    canvas.dots(&[at], width_pt, Ink::Black);
                    drawn.push(vec![at, (at.0 + 0.1, at.1)]);
                }
                run => {
                    let stroke = Stroke::solid(width_pt, Ink::Black);
                    drawn.extend(self.pv.curve(canvas, run, stroke));
                    self.mark_sparse(canvas, run);
                }
            }
        }
        drawn
    }

    /// Dots on samples that stand so far apart that the line between them is only a guide.
    fn mark_sparse(&self, canvas: &mut Canvas, run: &[Point]) {
        const FAR_PT: f64 = 5.0;
        let across = self.pv.at_x(run[run.len() - 1].0) - self.pv.at_x(run[0].0);
        if across > FAR_PT * run.len() as f64 {
            let place = |p: &Point| (self.pv.at_x(p.0), self.pv.at_y(p.1));
            let placed: Vec<Point> = run.iter().map(place).collect();
            canvas.dots(&placed, 1.2, Ink::Black);
        }
    }

    /// The PV's place at the end, level enough to set a label at: the median of its last stretch.
    pub fn pv_end(&self, lines: &Lines) -> f64 {
        const LAST_PART: f64 = 0.02;
        let times = lines.time;
        let end = lines.pv.last().and_then(|run| run.last());
        let since = end.map_or(times.1, |p| p.0) - LAST_PART * (times.1 - times.0);
        let samples = lines.pv.iter().flatten().rev();
        let last = samples.take_while(|p| p.0 >= since).map(|p| p.1);
        let mut last: Vec<f64> = last.collect();
        if last.is_empty() {
            return f64::NAN;
        }
        last.sort_by(f64::total_cmp);
        self.pv.at_y(last[last.len() / 2])
    }
}

/// The least range an axis shows, so that a flat line is not blown up to its last digit: a
/// five-hundredth of the measuring range.
pub fn least(range: &crate::record::Range) -> f64 {
    (range.high - range.low).abs() / 500.0
}

/// The set point's range where it lies within reach of the PV's, so that drawing it does not
/// press the PV flat.
pub fn set_point_in_reach(lines: &Lines) -> Option<(f64, f64)> {
    let sp = axis::range(lines.sp.iter().map(|p| p.1))?;
    let pv = axis::range(lines.pv.iter().flatten().map(|p| p.1))?;
    let reach = (pv.1 - pv.0) / 2.0;
    (sp.0 >= pv.0 - reach && sp.1 <= pv.1 + reach).then_some(sp)
}

/// Percent of span as engineering values, times as they are.
pub fn engineering(times_s: &[f64], percent: &[f64], span: Span) -> Vec<Point> {
    times_s
        .iter()
        .zip(percent)
        .map(|(&t, &value)| (t, span.engineering(value)))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_pv_breaks_at_gaps_and_bad_samples_are_not_drawn() {
        let mut samples = Samples {
            t_s: (0..20).map(f64::from).collect(),
            pv: vec![1.0; 20],
            good: vec![true; 20],
            op: vec![5.0; 20],
            ..Samples::default()
        };
        samples.good[3] = false;
        samples.pv[3] = 99.0;
        for k in 8..14 {
            samples.good[k] = false;
        }
        let runs = runs(&samples, 0.01);
        assert_eq!(runs.len(), 2);
        assert_eq!(runs[0].last(), Some(&(7.0, 1.0)));
        assert!(runs.iter().flatten().all(|p| p.1 == 1.0));
    }

    #[test]
    fn op_is_held_between_samples() {
        let path = stairs(&[0.0, 1.0, 2.0, 3.0], &[f64::NAN, 4.0, 4.0, 5.0]);
        assert_eq!(path, [(1.0, 4.0), (3.0, 4.0), (3.0, 5.0), (3.0, 5.0)]);
    }
}

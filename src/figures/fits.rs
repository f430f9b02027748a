//! Each usable step's samples with its own fit, the pooled model and the residual, all on one scale.

use super::axis;
use super::canvas::{Anchor, Canvas, Ink, Label, PT_PER_MM, Stroke};
use super::geometry::{Point, Rect, length};
use super::panel::{BELOW_PT, Panel};
use super::place::{Block, LINE_PT, Taken};
use super::{Figure, narrate, trend};
use crate::display::{fixed, plain, unit, with_unit};
use crate::identify::{Step, StepFit, Verdict};
use crate::model::ProcessModel;
use crate::quantity::{Span, round_significant};
use crate::record::{Log, Record};
use crate::trace::Samples;

const WIDTH_MM: f64 = 170.0;
/// The step's own fit.
const OWN: Stroke = Stroke::solid(1.0, Ink::Black);
/// The pooled model.
const POOLED: Stroke = Stroke::dashed(0.6, 2.4, 1.6);
const RESIDUAL: Stroke = Stroke::solid(0.45, Ink::Black);
/// Charts side by side, at most.
const ACROSS: usize = 6;
/// Steps drawn, at most: four rows fill a page.
const MOST: usize = 4 * ACROSS;
/// Points of a fitted curve.
const CURVE_POINTS: usize = 300;
/// White between two charts, pt.
const BETWEEN_PT: f64 = 7.0;
/// How far a tick's label may reach over the edge of its chart, pt.
const EDGE_PT: f64 = 2.0;
/// How long after the move is shown, in time constants of the pooled model.
const SHOWN_TAU: f64 = 8.0;

/// One step's chart: everything in seconds from the move, and in the unit of the chart.
struct Chart<'a> {
    step: &'a Step,
    fit: &'a StepFit,
    runs: Vec<Vec<Point>>,
    residual: Vec<Vec<Point>>,
    own: Vec<Point>,
    pooled: Vec<Point>,
}

/// What the charts show.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Shown {
    /// PV change divided by the OP's move: the gains can be compared by eye.
    PerPercent,
    /// PV change as it was: for integrating processes and pulses.
    Change,
}

/// Draws the fits; `None` where no usable step has one.
pub fn draw(record: &Record) -> Option<Figure> {
    let pv_span = Span::new(record.control_loop.pv.low, record.control_loop.pv.high).ok()?;
    let op_span = Span::new(record.control_loop.op.low, record.control_loop.op.high).ok()?;
    let log = record.test_log()?;
    let usable: Vec<(&Step, &StepFit)> = record
        .steps
        .iter()
        .filter(|step| step.verdict != Verdict::Rejected)
        .filter_map(|step| Some((step, step.fit.as_ref()?)))
        .collect();
    let plain = usable
        .iter()
        .any(|(step, fit)| step.pulse || fit.kind.integrates() || step.op_from == step.op_to);
    let shown = if plain {
        Shown::Change
    } else {
        Shown::PerPercent
    };
    let time = shown_time(record, &usable)?;
    let charts: Vec<Chart> = usable
        .iter()
        .take(MOST)
        .filter_map(|&(step, fit)| chart(record, log, (pv_span, op_span), step, fit, shown, time))
        .collect();
    if charts.is_empty() {
        return None;
    }
    let left_out = usable.len() - charts.len();
    Some(sheet(record, &charts, shown, time, left_out))
}

/// Time axis of all charts, s from the move.
fn shown_time(record: &Record, usable: &[(&Step, &StepFit)]) -> Option<(f64, f64)> {
    let watched = axis::range(usable.iter().map(|(s, _)| s.window_s[1] - s.at_s))?.1;
    let quiet = axis::range(usable.iter().map(|(s, _)| s.at_s - s.quiet_s[0]))?.1;
    let model = record.model.as_ref().map(|m| m.fit.process());
    let enough = model
        .filter(|m| !m.kind().integrates())
        .map(|m| {
            let lags =
                m.time_constant_s().unwrap_or(0.0) + m.second_time_constant_s().unwrap_or(0.0);
            2.0 * m.dead_time_s() + SHOWN_TAU * lags
        })
        .filter(|enough| *enough > 0.0);
    let end = enough.map_or(watched, |enough| watched.min(enough));
    (end > 0.0).then(|| (-quiet.min(end / 4.0), end))
}

/// What drove the process, % of OP: the OP as logged, or the valve's position where the fits have its dead
/// band taken off.
fn driven(record: &Record, data: &Samples, op_span: Span) -> Vec<f64> {
    let percent = data.op.iter().map(|op| op_span.percent(*op));
    let Some(valve) = record.valve.filter(|valve| valve.in_fit) else {
        return percent.collect();
    };
    // The OP is held where a row leaves it out; before its first value there is none.
    let unknown = data.op.iter().take_while(|op| !op.is_finite()).count();
    let held: Vec<f64> = percent
        .skip(unknown)
        .scan(f64::NAN, |held, op| {
            if op.is_finite() {
                *held = op;
            }
            Some(*held)
        })
        .collect();
    let mut driven = vec![f64::NAN; unknown];
    driven.extend(valve.positions(&held));
    driven
}

/// Where the drive stood before a step, and by how much the step moved it, %.
fn driven_by(
    record: &Record,
    t_s: &[f64],
    driven: &[f64],
    step: &Step,
    op_span: Span,
) -> (f64, f64) {
    let (from, to) = (op_span.percent(step.op_from), op_span.percent(step.op_to));
    let at = |rows: usize| {
        let row = rows.checked_sub(1)?;
        driven.get(row).copied().filter(|p| p.is_finite())
    };
    let before = at(t_s.partition_point(|t| *t < step.at_s));
    let end = at(t_s.partition_point(|t| *t <= step.window_s[1]));
    match (before, end) {
        (Some(before), Some(end)) if record.valve.is_some_and(|v| v.in_fit) && !step.pulse => {
            (before, end - before)
        }
        _ => (from, to - from),
    }
}

/// Answers to a held OP of a process that had settled at the first of its moves, or, where it
/// integrates, begins there.
fn settled_answers(model: &ProcessModel, moves: &[Point], times: &[f64]) -> Vec<f64> {
    let first = moves.first().map_or(0.0, |m| m.1);
    if model.kind().integrates() {
        return model.response_to_held(moves, times);
    }
    let from_first: Vec<Point> = moves.iter().map(|m| (m.0, m.1 - first)).collect();
    let answers = model.response_to_held(&from_first, times);
    answers.iter().map(|a| a + model.gain() * first).collect()
}

fn chart<'a>(
    record: &Record,
    log: &Log,
    (pv_span, op_span): (Span, Span),
    step: &'a Step,
    fit: &'a StepFit,
    shown: Shown,
    time: (f64, f64),
) -> Option<Chart<'a>> {
    let data = &log.data;
    let (from, to) = (step.quiet_s[0].min(step.at_s), step.window_s[1]);
    let driven = driven(record, data, op_span);
    let (op_from, moved) = driven_by(record, &data.t_s, &driven, step, op_span);
    let scale = match shown {
        Shown::PerPercent => pv_span.width() / 100.0 / moved,
        Shown::Change => pv_span.width() / 100.0,
    };
    // The fit was made from the OP as measured, what a settling PV still answers to included, so it is
    // drawn from that.
    let since = if fit.kind.integrates() {
        from
    } else {
        from - (to - from)
    };
    let mut moves: Vec<Point> = Vec::new();
    for (&t, &op) in data.t_s.iter().zip(&driven) {
        if t < since || t >= to || !op.is_finite() {
            continue;
        }
        let deviation = op - op_from;
        if moves
            .last()
            .is_none_or(|last| last.1 != deviation && t - step.at_s > last.0)
        {
            moves.push((t - step.at_s, deviation));
        }
    }
    let column_s = (time.1 - time.0) / WIDTH_MM;
    let runs: Vec<Vec<Point>> = trend::runs(data, column_s)
        .into_iter()
        .map(|run| {
            run.into_iter()
                .filter(|(t, _)| (from..=to).contains(t))
                .map(|(t, pv)| (t - step.at_s, pv_span.percent(pv)))
                .collect::<Vec<Point>>()
        })
        .filter(|run| !run.is_empty())
        .collect();
    let process = fit.process();
    let rest = |t: f64| fit.bias_percent + fit.drift_percent_per_s * t;
    let times: Vec<f64> = runs.iter().flatten().map(|p| p.0).collect();
    let mut fitted = settled_answers(&process, &moves, &times).into_iter();
    let residual = runs
        .iter()
        .map(|run| {
            let left = run.iter().zip(fitted.by_ref());
            left.map(|(&(t, pv), fit)| (t, (pv - rest(t) - fit) * pv_span.width() / 100.0))
                .collect()
        })
        .collect();
    let runs = runs
        .into_iter()
        .map(|run| {
            run.into_iter()
                .map(|(t, pv)| (t, (pv - rest(t)) * scale))
                .collect()
        })
        .collect();
    let curve = |model: &ProcessModel, end: f64| -> Vec<Point> {
        let (begin, end) = ((from - step.at_s).max(time.0), end.min(time.1));
        let each = (end - begin) / (CURVE_POINTS - 1) as f64;
        let times: Vec<f64> = (0..CURVE_POINTS).map(|k| begin + each * k as f64).collect();
        let values = settled_answers(model, &moves, &times);
        times
            .into_iter()
            .zip(values)
            .map(|(t, v)| (t, v * scale))
            .collect()
    };
    let own = curve(&process, to - step.at_s);
    let pooled = record
        .model
        .as_ref()
        .map(|m| {
            // An integrating PV goes on for ever: its model is followed as far as the samples.
            let end = if m.fit.kind.integrates() {
                to - step.at_s
            } else {
                time.1
            };
            curve(&m.fit.process(), end)
        })
        .unwrap_or_default();
    (to > from).then_some(Chart {
        step,
        fit,
        runs,
        residual,
        own,
        pooled,
    })
}

/// Where a row's parts lie below its upper edge, pt.
struct Row {
    head: f64,
    upper: f64,
    lower_title: f64,
    lower: f64,
    height: f64,
    upper_height: f64,
    lower_height: f64,
}

fn row_heights(rows: usize, two_lines: bool) -> Row {
    let upper_height = match rows {
        1 => 120.0,
        2 => 90.0,
        3 => 62.0,
        _ => 40.0,
    };
    let lower_height = if rows > 2 { 22.0 } else { 30.0 };
    let upper = if two_lines { 28.0 } else { 22.0 };
    let lower_title = upper + upper_height + 15.0;
    let lower = lower_title + 9.0;
    Row {
        head: 9.5,
        upper,
        lower_title,
        lower,
        height: lower + lower_height + BELOW_PT + LINE_PT + 3.0,
        upper_height,
        lower_height,
    }
}

/// How the gains are printed beside the curves.
struct GainFigure {
    factor: f64,
    decimals: usize,
    unit: String,
}

impl GainFigure {
    fn new(record: &Record, charts: &[Chart]) -> Self {
        let range = &record.control_loop.pv;
        let integrates = charts.iter().any(|c| c.fit.kind.integrates());
        let each = if integrates { 60.0 } else { 1.0 };
        let change = (range.high - range.low) / 100.0 * each;
        let gains = charts.iter().map(|c| (c.fit.gain.value * change).abs());
        let largest = gains.fold(0.0, f64::max);
        let power = axis::counted_in(largest);
        // Three figures of the largest.
        let first = if largest > 0.0 {
            libm::floor(libm::log10(largest)) as i32
        } else {
            0
        };
        let counted = format!("{} {}", axis::factor(power), unit(&range.unit));
        let per = if integrates {
            "per min for 1\u{a0}% of OP"
        } else {
            "per %"
        };
        GainFigure {
            factor: change * axis::power_of(-power),
            decimals: (2 - first + power).max(0) as usize,
            unit: format!("{} {per}", counted.trim()),
        }
    }

    fn print(&self, gain: f64) -> String {
        let gain = gain * self.factor;
        let figures = if self.decimals == 0 { 3 } else { 17 };
        narrate::grouped(&fixed(round_significant(gain, figures), self.decimals))
    }
}

fn sheet(
    record: &Record,
    charts: &[Chart],
    shown: Shown,
    time: (f64, f64),
    left_out: usize,
) -> Figure {
    let pv = &record.control_loop.pv;
    let pv_unit = unit(&pv.unit);
    let rows = charts.len().div_ceil(ACROSS);
    let across = charts.len().div_ceil(rows).max(2);
    let gains = GainFigure::new(record, charts);
    let least = trend::least(pv);
    let samples = charts.iter().flat_map(|c| c.runs.iter().flatten());
    let curves = charts.iter().flat_map(|c| c.own.iter().chain(&c.pooled));
    let within = |p: &&Point| p.0 >= time.0 && p.0 <= time.1;
    let seen = axis::range(samples.chain(curves).filter(within).map(|p| p.1));
    let seen = axis::joined((0.0, 0.0), seen);
    let least = if shown == Shown::PerPercent {
        least / 100.0
    } else {
        least
    };
    let largest = charts
        .iter()
        .flat_map(|c| c.residual.iter().flatten())
        .filter(within)
        .map(|p| p.1.abs())
        .filter(|r| r.is_finite())
        .fold(0.0, f64::max);
    let upper_axis = axis::values(seen, least, if rows > 2 { 3 } else { 5 });
    let lower_axis = axis::symmetric(largest.max(trend::least(pv) / 10.0) * 1.12);

    let left = 27.0_f64
        .max(upper_axis.label_width() + 6.0)
        .max(lower_axis.label_width() + 6.0);
    let full = WIDTH_MM * PT_PER_MM;
    let width = (full - left - 1.0 - BETWEEN_PT * (across - 1) as f64) / across as f64;
    let two_lines = charts
        .iter()
        .any(|c| head_width(c.step) + Label::new(0.0, 0.0, moved(record, c.step)).width() > width);
    let row = row_heights(rows, two_lines);
    let top = 14.0;
    let height = (top + row.height * rows as f64) / PT_PER_MM;
    let mut canvas = Canvas::new(WIDTH_MM, height);
    let what = match shown {
        Shown::PerPercent => "PV change for 1\u{a0}% of OP",
        Shown::Change => "PV change",
    };
    let title = upper_axis.title(what, &pv_unit);
    let kinds = "samples, the step’s own fit (solid), the pooled model (dashed)";
    canvas.words(Label::new(0.0, 9.5, format!("{title}: {kinds}")));
    let names_pooled = farthest(charts);
    for (k, chart) in charts.iter().enumerate() {
        let (line, column) = (k / across, k % across);
        let y = top + row.height * line as f64;
        let x = left + (width + BETWEEN_PT) * column as f64;
        let upper = Rect::new(
            x,
            y + row.upper,
            x + width,
            y + row.upper + row.upper_height,
        );
        let lower = Rect::new(
            x,
            y + row.lower,
            x + width,
            y + row.lower + row.lower_height,
        );
        let upper = Panel::new(upper, time, &upper_axis);
        let lower = Panel::new(lower, time, &lower_axis);
        upper.value_axis(&mut canvas, &upper_axis, column == 0);
        lower.value_axis(&mut canvas, &lower_axis, column == 0);
        let mut ticks = axis::elapsed(time.0, time.1, width, false);
        for tick in &mut ticks {
            // A label over the edge would reach into the next chart's.
            let half = Label::new(0.0, 0.0, tick.label.clone()).width() / 2.0;
            let at = lower.at_x(tick.at);
            if at - half < x - EDGE_PT || at + half > x + width + EDGE_PT {
                tick.label.clear();
            }
        }
        lower.time_axis(&mut canvas, &ticks);
        if column == 0 {
            let title = lower_axis.title("Residual of the step’s own fit", &pv_unit);
            canvas.words(Label::new(0.0, y + row.lower_title, title));
        }
        if column == across - 1 || k == charts.len() - 1 {
            let name = axis::time_unit(time.1.abs().max(time.0.abs())).name;
            let words = format!("{name} after the move");
            let at = y + row.lower + row.lower_height + 12.0 + LINE_PT;
            canvas.words(Label::new(x + width, at, words).anchor(Anchor::End));
        }
        let two = two_lines.then_some(width);
        head(&mut canvas, record, chart.step, (x, y + row.head), two);
        let names = (k == names_pooled)
            .then_some(record)
            .and_then(|r| r.model.as_ref());
        let pooled_name = names.map(|m| gains.print(m.fit.gain.value));
        let upper = (&upper, &upper_axis);
        draw_chart(&mut canvas, upper, &lower, chart, &gains, pooled_name);
    }
    let mut caption = if charts.len() == 1 {
        format!("The usable step. Bold figure: its gain, {}.", gains.unit)
    } else {
        let of = "Each usable step, one scale. Bold figures: gain of the step";
        format!("{of}, {}.", gains.unit)
    };
    if left_out > 0 {
        caption.push_str(&format!(" {left_out} more usable steps are not drawn."));
    }
    let alt = alt(charts, &gains, pv, largest, shown);
    Figure::new("fits.svg", &canvas, caption, alt)
}

fn head_width(step: &Step) -> f64 {
    step_name(step).width() + 6.0
}

fn step_name(step: &Step) -> Label {
    Label::new(0.0, 0.0, format!("Step {}", step.number))
        .bold()
        .size(9.0)
}

fn moved(record: &Record, step: &Step) -> String {
    let (from, to) = (narrate::op(step.op_from), narrate::op(step.op_to));
    format!("{from} → {}", with_unit(&to, &record.control_loop.op.unit))
}

/// Number and move of a step; the move on a line of its own, `width` wide, where given.
fn head(canvas: &mut Canvas, record: &Record, step: &Step, at: Point, width: Option<f64>) {
    let mut name = step_name(step);
    (name.x, name.y) = at;
    canvas.words(name);
    let words = moved(record, step);
    let Some(width) = width else {
        canvas.words(Label::new(at.0 + head_width(step), at.1, words));
        return;
    };
    let label = Label::new(at.0, at.1 + LINE_PT, words);
    canvas.words(if label.width() <= width {
        label
    } else {
        let (from, to) = (narrate::op(step.op_from), narrate::op(step.op_to));
        Label::new(at.0, at.1 + LINE_PT, format!("{from} → {to}"))
    });
}

/// The chart in which the pooled model stands clearest of the step's own fit.
fn farthest(charts: &[Chart]) -> usize {
    let apart = |chart: &Chart| {
        let pairs = chart.own.iter().zip(&chart.pooled);
        pairs
            .map(|(own, pooled)| (own.1 - pooled.1).abs())
            .fold(0.0, f64::max)
    };
    let mut best = (0, f64::NEG_INFINITY);
    for (k, chart) in charts.iter().enumerate() {
        if apart(chart) > best.1 {
            best = (k, apart(chart));
        }
    }
    best.0
}

fn draw_chart(
    canvas: &mut Canvas,
    (upper, upper_axis): (&Panel, &axis::Values),
    lower: &Panel,
    chart: &Chart,
    gains: &GainFigure,
    pooled_gain: Option<String>,
) {
    let mut taken = Taken::words_of(canvas);
    taken.add_grid(upper.grid(upper_axis));
    for run in &chart.runs {
        taken.add_paths(&upper.samples(canvas, run, Ink::Middle));
    }
    let pooled = upper.curve(canvas, &chart.pooled, POOLED);
    let own = upper.curve(canvas, &chart.own, OWN);
    for run in &chart.residual {
        lower.curve(canvas, run, RESIDUAL);
    }
    taken.add_paths(&pooled);
    taken.add_paths(&own);
    let figure = Block {
        lines: vec![(gains.print(chart.fit.gain.value), true)],
        anchor: Anchor::End,
    };
    at_end(canvas, &mut taken, upper, &own, &figure);
    if let Some(gain) = pooled_gain {
        let block = Block {
            lines: vec![("pooled".to_owned(), false), (gain, false)],
            anchor: Anchor::End,
        };
        at_end(canvas, &mut taken, upper, &pooled, &block);
    }
}

/// Sets a block near the end of a curve, above or below it, where it covers nothing.
fn at_end(
    canvas: &mut Canvas,
    taken: &mut Taken,
    panel: &Panel,
    curve: &[Vec<Point>],
    block: &Block,
) {
    let Some(&(end_x, end_y)) = curve.last().and_then(|part| part.last()) else {
        return;
    };
    let (width, height) = block.size();
    let frame = panel.frame;
    let sheet = Rect::new(
        frame.x0,
        frame.y0 - LINE_PT,
        frame.x1 + 1.0,
        frame.y1 + LINE_PT,
    );
    let right = end_x.max(frame.x0 + width).min(frame.x1);
    let mut spots: Vec<Rect> = Vec::new();
    for back in 0..8 {
        for away in 0..24 {
            let (x1, away) = (right - 8.0 * f64::from(back), 2.0 + 2.0 * f64::from(away));
            for y0 in [end_y + away, end_y - away - height] {
                spots.push(Rect::new(x1 - width, y0, x1, y0 + height));
            }
        }
    }
    // Nearest to the curve's end first.
    let distance = |r: &Rect| {
        let near = (end_x.clamp(r.x0, r.x1), end_y.clamp(r.y0, r.y1));
        length(near, (end_x, end_y))
    };
    spots.sort_by(|a, b| distance(a).total_cmp(&distance(b)));
    if let Some(area) = taken.first_free(sheet, spots) {
        block.set(canvas, area, false);
        taken.add_box(area);
    }
}

fn alt(
    charts: &[Chart],
    gains: &GainFigure,
    pv: &crate::record::Range,
    largest: f64,
    shown: Shown,
) -> String {
    let numbers: Vec<String> = charts.iter().map(|c| c.step.number.to_string()).collect();
    let figures: Vec<String> = charts
        .iter()
        .map(|c| gains.print(c.fit.gain.value))
        .collect();
    let what = match shown {
        Shown::PerPercent => "PV change for 1\u{a0}% of OP",
        Shown::Change => "PV change",
    };
    let (steps, gain) = if charts.len() == 1 {
        ("step", "gain is")
    } else {
        ("steps", "gains are")
    };
    format!(
        "Small charts of {what} for {steps} {}, samples with the step’s own fit and the pooled \
         model. The {gain} {} {}. Residuals stay within ±{}.",
        narrate::list(&numbers),
        narrate::list(&figures),
        gains.unit,
        with_unit(&narrate::grouped(&plain(largest, 2)), &pv.unit)
    )
}

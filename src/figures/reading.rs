//! The reading of one step drawn as with a ruler: 63.2 %, or the two slopes of an integrating process.

use super::axis::{self, Values};
use super::canvas::{Anchor, Canvas, Ink, Label, Stroke};
use super::geometry::{Point, Rect};
use super::panel::{BELOW_PT, HALF_FIGURE_PT, Panel};
use super::place::{Block, LINE_PT, Taken, name_curve};
use super::test::MOVE;
use super::{Figure, narrate, trend};
use crate::display::{duration, fixed, with_unit};
use crate::identify::{Reading, Step, Verdict};
use crate::quantity::Span;
use crate::record::{Range, Record};

const WIDTH_MM: f64 = 92.0;
const HEIGHT_MM: f64 = 58.0;
/// A line drawn with the ruler.
const RULER: Stroke = Stroke::solid(0.7, Ink::Black);
/// Mark at the end of a dimension.
const END_MARK: Stroke = Stroke::solid(1.1, Ink::Black);
/// Room right of the window for the levels' figures, pt: usual and at most.
const RIGHT_PT: (f64, f64) = (64.0, 100.0);
/// Part of the change that is left free beyond the start, for the dimensions.
const ROOM_PART: f64 = 0.22;
/// 1 − 1/e: the part of its whole change that a first-order process covers in one time constant.
const ONE_TIME_CONSTANT: f64 = 0.632;

/// The step that is drawn, and all that is drawn of it, in engineering units and seconds from the move.
struct Ruler<'a> {
    step: &'a Step,
    reading: &'a Reading,
    runs: Vec<Vec<Point>>,
    base: f64,
    end: f64,
    time: (f64, f64),
}

/// The step whose reading is drawn and printed: the first accepted one that has a reading, else the
/// first usable one. A pulse has no end to read.
pub fn read_step(record: &Record) -> Option<(&Step, &Reading)> {
    let of = |verdict: Verdict| {
        record
            .steps
            .iter()
            .filter(move |step| step.verdict == verdict && !step.pulse)
            .find_map(|step| Some((step, step.reading.as_ref()?)))
    };
    of(Verdict::Accepted).or_else(|| of(Verdict::Reservation))
}

/// Draws the step whose reading is printed; `None` where there is none.
pub fn draw(record: &Record) -> Option<Figure> {
    let span = Span::new(record.control_loop.pv.low, record.control_loop.pv.high).ok()?;
    let log = record.test_log()?;
    let (step, reading) = read_step(record)?;
    let time = (step.quiet_s[0] - step.at_s, step.window_s[1] - step.at_s);
    if !(time.1 - time.0).is_finite() || time.1 <= time.0 {
        return None;
    }
    let mut canvas = Canvas::new(WIDTH_MM, HEIGHT_MM);
    let column_s = (time.1 - time.0) / canvas.width();
    let runs: Vec<Vec<Point>> = trend::runs(&log.data, column_s)
        .into_iter()
        .map(|run| {
            run.into_iter()
                .map(|(t, pv)| (t - step.at_s, pv))
                .filter(|(t, _)| (time.0..=time.1).contains(t))
                .collect::<Vec<Point>>()
        })
        .filter(|run| !run.is_empty())
        .collect();
    let ruler = Ruler {
        step,
        reading,
        runs,
        base: span.engineering(reading.base_percent),
        end: span.engineering(reading.end_percent),
        time,
    };
    let (panel, axis) = window(&mut canvas, record, &ruler)?;
    let mut taken = Taken::default();
    taken.add_grid(panel.grid(&axis));
    let (x0, x1, y1) = (panel.frame.x0, panel.frame.x1, panel.frame.y1);
    let dotted = panel.at_x(0.0);
    taken.add_paths(&[
        vec![(x0, y1), (x1, y1)],
        vec![(dotted, panel.frame.y0), (dotted, y1)],
    ]);
    for run in &ruler.runs {
        taken.add_paths(&panel.samples(&mut canvas, run, Ink::Black));
    }
    let alt = match (reading.time_constant_s, reading.slopes_percent_per_s) {
        (_, Some(slopes)) => {
            let slopes = slopes.map(|s| span.engineering_change(s));
            two_slopes(&mut canvas, record, &ruler, &panel, slopes, taken)
        }
        (Some(tau), None) => part_of_change(&mut canvas, record, &ruler, &panel, tau, taken),
        (None, None) => return None,
    };
    let caption = format!("Step {} read with a ruler.", step.number);
    Some(Figure::new("reading.svg", &canvas, caption, alt))
}

/// Draws axes, title and the move of the OP.
fn window(canvas: &mut Canvas, record: &Record, ruler: &Ruler) -> Option<(Panel, Values)> {
    let samples = axis::range(ruler.runs.iter().flatten().map(|p| p.1))?;
    let levels = axis::joined(samples, axis::range([ruler.base, ruler.end]));
    // The dimensions stand on the side that the PV leaves.
    let room = (ruler.end - ruler.base) * ROOM_PART;
    let range = axis::joined(levels, axis::range([ruler.base - room]));
    let axis: Values = axis::values(range, trend::least(&record.control_loop.pv), 6);
    let left = (axis.label_width() + 6.0).max(29.0);
    let pv = &record.control_loop.pv;
    let levels = [("start", ruler.base), ("end", ruler.end)];
    let right = levels
        .map(|(name, at)| Label::new(0.0, 0.0, level_words(name, at, pv)).width() + 5.0)
        .into_iter()
        .fold(RIGHT_PT.0, f64::max)
        .min(RIGHT_PT.1);
    let frame = Rect::new(
        left,
        24.0,
        canvas.width() - right,
        canvas.height() - BELOW_PT,
    );
    let panel = Panel::new(frame, ruler.time, &axis);
    panel.value_axis(canvas, &axis, true);
    let ticks = axis::elapsed(ruler.time.0, ruler.time.1, frame.x1 - frame.x0, true);
    panel.time_axis(canvas, &ticks);
    let unit = crate::display::unit(&record.control_loop.pv.unit);
    canvas.words(Label::new(0.0, 10.0, axis.title("PV", &unit)).bold());
    canvas.line(
        (panel.at_x(0.0), frame.y0 - 3.0),
        (panel.at_x(0.0), frame.y1),
        MOVE,
    );
    let (from, to) = (
        narrate::op(ruler.step.op_from),
        narrate::op(ruler.step.op_to),
    );
    let moved = format!(
        "OP {from} → {}",
        with_unit(&to, &record.control_loop.op.unit)
    );
    canvas.words(Label::new(panel.at_x(0.0) + 3.0, frame.y0 - 3.0, moved));
    Some((panel, axis))
}

fn level_words(name: &str, at: f64, pv: &Range) -> String {
    format!("{name} {}", narrate::pv(at, pv))
}

/// Both levels with their figures at the right ends of the lines.
fn levels(canvas: &mut Canvas, panel: &Panel, ruler: &Ruler, pv: &Range) {
    let [start, end] = [ruler.base, ruler.end].map(|at| panel.at_y(at));
    // Lines nearer to each other than two lines of words: the words part evenly.
    let push = ((LINE_PT - (end - start).abs()) / 2.0).max(0.0);
    let push = if end > start { push } else { -push };
    for (name, at, y, push) in [
        ("start", ruler.base, start, -push),
        ("end", ruler.end, end, push),
    ] {
        canvas.line((panel.frame.x0, y), (panel.frame.x1, y), RULER);
        let (x, y) = (panel.frame.x1 + 4.0, y + push + HALF_FIGURE_PT);
        let label = Label::new(x, y, level_words(name, at, pv));
        let fits = label.area().x1 <= canvas.width();
        canvas.words(if fits { label } else { Label::new(x, y, name) });
    }
}

/// A dimension line with a slanted mark at each of `at`.
fn dimension(canvas: &mut Canvas, y: f64, at: &[f64]) {
    if let (Some(&first), Some(&last)) = (at.first(), at.last()) {
        canvas.line((first, y), (last, y), RULER);
    }
    for &x in at {
        canvas.line((x - 1.6, y + 1.6), (x + 1.6, y - 1.6), END_MARK);
    }
}

/// Sets words at the height `y`: right of `from_to.1`, else left of `from_to.0`, else where there is
/// room above or below; words too long for one line are broken.
fn beside(canvas: &mut Canvas, taken: &mut Taken, from_to: (f64, f64), y: f64, words: [&str; 2]) {
    let sheet = canvas.area();
    let one = Block::line(words.join(" ").trim(), false);
    let two = Block {
        lines: words.map(|w| (w.to_owned(), false)).to_vec(),
        anchor: Anchor::Start,
    };
    for block in [one, two] {
        let (width, height) = block.size();
        let (from, to) = from_to;
        let middle = (from + to - width) / 2.0;
        let lefts = [to + 4.0, from - 4.0 - width, middle, 2.0, sheet.x1 - width];
        let shifts = (0..16).flat_map(|k| [3.0 * f64::from(k), -3.0 * f64::from(k)]);
        let boxes = shifts.flat_map(|shift| {
            let y0 = y - height / 2.0 + shift;
            // Far from its place only beside the construction, where it still reads as its own.
            let count = if shift.abs() < 12.0 { 2 } else { lefts.len() };
            lefts
                .into_iter()
                .take(count)
                .map(move |x0| Rect::new(x0, y0, x0 + width, y0 + height))
        });
        if let Some(area) = taken.first_free(sheet, boxes) {
            block.set(canvas, area, false);
            taken.add_box(area);
            return;
        }
    }
}

/// The 63.2 % construction.
fn part_of_change(
    canvas: &mut Canvas,
    record: &Record,
    ruler: &Ruler,
    panel: &Panel,
    tau: f64,
    mut taken: Taken,
) -> String {
    let pv = &record.control_loop.pv;
    let theta = ruler.reading.dead_time_s;
    let part = ruler.base + ONE_TIME_CONSTANT * (ruler.end - ruler.base);
    let side = if ruler.end >= ruler.base { 1.0 } else { -1.0 };
    levels(canvas, panel, ruler, pv);
    // What was read beyond the window is not drawn beyond it.
    let place = |t: f64| panel.at_x(t).min(panel.frame.x1);
    let [zero, first, covered] = [0.0, theta, theta + tau].map(place);
    let (base_y, part_y) = (panel.at_y(ruler.base), panel.at_y(part));
    canvas.line((panel.frame.x0, part_y), (covered, part_y), RULER);
    // Halfway between the start's line and the edge of the window on that side.
    let edge = if side > 0.0 {
        panel.frame.y1
    } else {
        panel.frame.y0
    };
    let y = (base_y + edge) / 2.0;
    let beyond = y + side * 4.0;
    canvas.line((first, base_y - side * 6.0), (first, beyond), RULER);
    canvas.line((covered, part_y - side * 6.0), (covered, beyond), RULER);
    dimension(canvas, y, &[zero, first, covered]);
    taken.add_words(canvas);
    for at in [base_y, panel.at_y(ruler.end)] {
        taken.add_paths(&[vec![(panel.frame.x0, at), (panel.frame.x1, at)]]);
    }
    taken.add_paths(&[
        vec![(panel.frame.x0, part_y), (covered, part_y)],
        vec![(covered, part_y - side * 6.0), (covered, beyond)],
        vec![(first, base_y - side * 6.0), (first, beyond)],
        vec![(zero, y), (covered, y)],
    ]);
    let dead = format!("dead time {},", duration(theta));
    let then = format!("then time constant {}", duration(tau));
    beside(canvas, &mut taken, (zero, covered), y, [&dead, &then]);
    let figure = narrate::pv(part, pv);
    let of = "63.2\u{a0}% of";
    let change = format!("the change: {figure}");
    let beside_part = (panel.frame.x0, covered);
    let y = part_y + side * 9.0;
    beside(canvas, &mut taken, beside_part, y, [of, &change]);
    format!(
        "PV of step {} with construction lines: start {}, end {}, dead time {}, time constant {} \
         at 63.2\u{a0}% of the change.",
        ruler.step.number,
        narrate::pv(ruler.base, pv),
        narrate::pv(ruler.end, pv),
        duration(theta),
        duration(tau)
    )
}

/// The slopes before and after the move of an integrating process; where they meet the PV answers.
fn two_slopes(
    canvas: &mut Canvas,
    record: &Record,
    ruler: &Ruler,
    panel: &Panel,
    slopes: [f64; 2],
    mut taken: Taken,
) -> String {
    let theta = ruler.reading.dead_time_s;
    let quiet = (ruler.step.quiet_s[0] + ruler.step.quiet_s[1]) / 2.0 - ruler.step.at_s;
    let before = |t: f64| (t, ruler.base + slopes[0] * (t - quiet));
    let after = |t: f64| (t, ruler.end + slopes[1] * (t - ruler.time.1));
    let early = (theta - 0.1 * (ruler.time.1 - theta)).max(ruler.time.0);
    let drawn_before = panel.curve(canvas, &[before(ruler.time.0), before(ruler.time.1)], RULER);
    let drawn_after = panel.curve(canvas, &[after(early), after(ruler.time.1)], RULER);
    let [zero, first] = [0.0, theta].map(|t| panel.at_x(t).min(panel.frame.x1));
    let rising = slopes[1] >= slopes[0];
    let edge = if rising {
        panel.frame.y1
    } else {
        panel.frame.y0
    };
    let base_y = panel.at_y(before(theta).1);
    let y = (base_y + edge) / 2.0;
    let beyond = y + if rising { 4.0 } else { -4.0 };
    canvas.line((first, base_y), (first, beyond), RULER);
    dimension(canvas, y, &[zero, first]);
    taken.add_words(canvas);
    for paths in [&drawn_before, &drawn_after] {
        taken.add_paths(paths);
    }
    let unit = crate::display::unit(&record.control_loop.pv.unit);
    // Both slopes with the decimals of the larger: three figures of that one.
    let larger = 60.0 * slopes[0].abs().max(slopes[1].abs());
    let decimals = if larger > 0.0 {
        (2.0 - libm::floor(libm::log10(larger))).clamp(0.0, 6.0) as usize
    } else {
        0
    };
    let per_minute = |slope: f64| with_unit(&fixed(slope * 60.0, decimals), &format!("{unit}/min"));
    let dead = format!("dead time {}", duration(theta));
    beside(canvas, &mut taken, (zero, first), y, [&dead, ""]);
    let sheet = Rect::new(
        panel.frame.x0,
        panel.frame.y0,
        canvas.width(),
        panel.frame.y1,
    );
    for (name, slope, curve) in [
        ("before", slopes[0], &drawn_before),
        ("after", slopes[1], &drawn_after),
    ] {
        let block = Block::line(&format!("{name}: {}", per_minute(slope)), false);
        name_curve(canvas, &mut taken, curve, &block, sheet);
    }
    format!(
        "PV of step {} with a line through its slope before the move, {}, and one through its slope \
         after it, {}; they part {} after the move.",
        ruler.step.number,
        per_minute(slopes[0]),
        per_minute(slopes[1]),
        duration(theta)
    )
}

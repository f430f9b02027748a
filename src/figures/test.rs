//! The whole step test as logged: PV above, OP below, steps numbered in place, rejected ones hatched.

use super::canvas::{Anchor, Canvas, Ink, Label, Stroke};
use super::geometry::{Point, Rect};
use super::place::{Block, LINE_PT, Taken, end_labels, rows, wrapped};
use super::trend::{self, Lines, Outline, Trend};
use super::{Figure, narrate};
use crate::display::{fixed, with_unit};
use crate::identify::{Reason, ReasonCode, Step, Verdict};
use crate::record::{Log, PageSize, Record, decisive_reasons};

/// Move of the OP.
pub const MOVE: Stroke = Stroke::dashed(0.6, 1.4, 1.8);
/// PV as logged.
pub const PV_PT: f64 = 0.7;
/// SP as logged.
const SP: Stroke = Stroke::solid(0.6, Ink::Black);
/// OP as logged.
pub const OP: Stroke = Stroke::solid(1.0, Ink::Black);
/// White between the words in a hatched stretch and its edges, both together, pt.
const INSIDE_PT: f64 = 6.0;
/// Size of the steps' numbers, pt.
const NUMBER_PT: f64 = 9.5;
/// Room for labels at the line ends, pt.
pub const RIGHT_PT: f64 = 36.0;
const WIDTH_MM: f64 = 170.0;
/// Least and greatest height: less hides the noise, more only stretches it.
const HEIGHTS_MM: (f64, f64) = (110.0, 160.0);
/// What of the page is left for the figure and the table of steps, mm.
const ROOM_MM: f64 = 215.0;
/// Letter pages are lower by this, mm.
const LETTER_LESS_MM: f64 = 17.6;
/// A line of the table of steps, mm.
const LINE_MM: f64 = 5.0;

/// Draws the test; `None` where its log holds nothing to draw.
pub fn draw(record: &Record) -> Option<Figure> {
    let log = record.test_log()?;
    let mut canvas = Canvas::new(WIDTH_MM, height_mm(record));
    let lines = trend::lines(&log.data, canvas.width())?;
    let scale = (canvas.width() - 30.0 - RIGHT_PT) / (lines.time.1 - lines.time.0);
    let marks = Marks::new(&record.steps, &lines, canvas.width(), |step| {
        words_above(step, scale)
    });
    let sp = trend::set_point_in_reach(&lines);
    let outline = Outline {
        log,
        control_loop: &record.control_loop,
        lines: &lines,
        also_pv: sp,
        also_op: None,
        top: 28.0 + marks.height(),
        between: 30.0,
        op_height: 70.0,
        right: RIGHT_PT,
        most_ticks: [8, 5],
    };
    let trend = Trend::new(&canvas, &outline)?;
    hatch(&mut canvas, &trend, &record.steps);
    trend.draw_axes(&mut canvas);
    let mut taken = Taken::default();
    taken.add_paths(&trend.draw_pv(&mut canvas, &lines, PV_PT));
    taken.add_paths(&trend.op.curve(&mut canvas, &lines.op, OP));
    let mut ends = vec![(trend.pv_end(&lines), "PV")];
    if sp.is_some() {
        taken.add_paths(&trend.pv.curve(&mut canvas, &lines.sp, SP));
        ends.extend(lines.sp.last().map(|p| (trend.pv.at_y(p.1), "SP")));
    }
    end_labels(
        &mut canvas,
        trend.pv.frame.x1 + 4.0,
        &ends,
        (trend.pv.frame.y0, trend.pv.frame.y1),
    );
    label_op_end(&mut canvas, &trend, &lines);
    marks.draw(&mut canvas, &trend, &record.steps);
    taken.add_words(&canvas);
    name_rejected(&mut canvas, &trend, &record.steps, &mut taken);

    let mut caption = "The test as logged.".to_owned();
    if !record.steps.is_empty() {
        caption.push_str(" Dotted lines: moves of OP, numbered as in the table.");
    }
    if record.steps.iter().any(|s| s.verdict == Verdict::Rejected) {
        caption.push_str(" Hatched: not used, for the reason in the table.");
    }
    if !lines.sp.is_empty() && sp.is_none() {
        caption.push_str(" SP was logged far from PV and is not drawn.");
    }
    Some(Figure::new("test.svg", &canvas, caption, alt(record, log)))
}

/// Height that fills the page together with the table of steps below it.
fn height_mm(record: &Record) -> f64 {
    let told = |step: &&Step| !step.reasons.is_empty();
    let lines = record.steps.len() + record.steps.iter().filter(told).count();
    let letter = match record.document.page {
        PageSize::A4 => 0.0,
        PageSize::UsLetter => LETTER_LESS_MM,
    };
    (ROOM_MM - letter - LINE_MM * lines as f64).clamp(HEIGHTS_MM.0, HEIGHTS_MM.1)
}

/// Labels the OP's end.
pub fn label_op_end(canvas: &mut Canvas, trend: &Trend, lines: &Lines) {
    if let Some(last) = lines.op.last() {
        let end = [(trend.op.at_y(last.1), "OP")];
        let within = (trend.op.frame.y0, trend.op.frame.y1);
        end_labels(canvas, trend.op.frame.x1 + 4.0, &end, within);
    }
}

/// Hatches the stretch of each rejected step, from its move to the end of its window.
pub fn hatch(canvas: &mut Canvas, trend: &Trend, steps: &[Step]) {
    for step in steps.iter().filter(|s| s.verdict == Verdict::Rejected) {
        if let Some(area) = stretch(trend, step) {
            canvas.hatch(area);
        }
    }
}

/// The stretch of a step over both windows.
fn stretch(trend: &Trend, step: &Step) -> Option<Rect> {
    let frame = trend.pv.frame;
    let from = trend.pv.at_x(step.at_s).clamp(frame.x0, frame.x1);
    let to = trend.pv.at_x(step.window_s[1]).clamp(frame.x0, frame.x1);
    (to > from).then(|| Rect::new(from, frame.y0, to, trend.op.frame.y1))
}

/// The steps' numbers above the windows, each beside the line of its move, in as many rows as they
/// need; behind a number the words that go with it.
pub struct Marks {
    rows: Vec<usize>,
    words: Vec<String>,
}

impl Marks {
    /// Works out the rows. Places are those of a window over the whole width less the margins.
    pub fn new(steps: &[Step], lines: &Lines, width: f64, words: impl Fn(&Step) -> String) -> Self {
        let words: Vec<String> = steps.iter().map(words).collect();
        let scale = (width - 30.0 - RIGHT_PT) / (lines.time.1 - lines.time.0);
        let places: Vec<(f64, f64)> = steps
            .iter()
            .zip(&words)
            .map(|(step, words)| {
                let x = 30.0 + (step.at_s - lines.time.0) * scale;
                (x, 3.0 + number(step).width() + words_width(words))
            })
            .collect();
        Marks {
            rows: rows(&places),
            words,
        }
    }

    /// Room that rows above the first need, pt.
    pub fn height(&self) -> f64 {
        self.rows.iter().copied().max().unwrap_or(0) as f64 * LINE_PT
    }

    /// Draws lines, numbers and words; words stand white on the lines of later steps.
    pub fn draw(&self, canvas: &mut Canvas, trend: &Trend, steps: &[Step]) {
        let frame = trend.pv.frame;
        let base = |row: usize| frame.y0 - 1.0 - LINE_PT * row as f64;
        let shown: Vec<(f64, f64, &Step, &str)> = steps
            .iter()
            .zip(&self.rows)
            .zip(&self.words)
            .map(|((step, &row), words)| {
                (trend.pv.at_x(step.at_s), base(row), step, words.as_str())
            })
            .filter(|(x, ..)| (frame.x0..=frame.x1).contains(x))
            .collect();
        for &(x, base, ..) in &shown {
            canvas.line((x, base - 2.0), (x, trend.op.frame.y1), MOVE);
        }
        for (x, base, step, words) in shown {
            let mut number = number(step);
            (number.x, number.y) = (x + 3.0, base);
            let after = number.area().x1 + 4.0;
            canvas.words(number);
            if words.is_empty() {
                continue;
            }
            // At the right edge of the page as much of the words as there is room for.
            let room = canvas.width() - after;
            let fitting = wrapped(words, room).into_iter().next().unwrap_or_default();
            let label = Label::new(after, base - 0.5, fitting);
            if label.width() <= room {
                let area = label.area();
                canvas.blank(Rect::new(
                    area.x0 - 1.0,
                    base - 8.0,
                    area.x1 + 1.0,
                    base + 0.8,
                ));
                canvas.words(label);
            }
        }
    }
}

fn number(step: &Step) -> Label {
    Label::new(0.0, 0.0, step.number.to_string())
        .bold()
        .size(NUMBER_PT)
}

fn words_width(words: &str) -> f64 {
    if words.is_empty() {
        0.0
    } else {
        4.0 + Label::new(0.0, 0.0, words).width()
    }
}

/// "3 rejected:" over the reason, broken to `width`.
fn rejected_block(step: &Step, width: f64) -> Block {
    let mut lines = vec![(format!("{}\u{a0}rejected", step.number), true)];
    if let Some(reason) = rejecting_reason(step) {
        lines[0].0.push(':');
        let words = wrapped(reason_words(reason), width).into_iter();
        lines.extend(words.map(|line| (line, false)));
    }
    Block {
        lines,
        anchor: Anchor::Middle,
    }
}

/// What stands behind the number of a rejected step whose stretch is too narrow to say it inside.
fn words_above(step: &Step, scale: f64) -> String {
    let width = (step.window_s[1] - step.at_s) * scale - INSIDE_PT;
    if step.verdict != Verdict::Rejected || rejected_block(step, 45.0).size().0 <= width {
        return String::new();
    }
    let reason = rejecting_reason(step).map_or("", reason_words);
    format!("rejected: {reason}")
        .trim_end_matches([':', ' '])
        .to_owned()
}

/// Sets "3 rejected: PV was drifting" into each hatched stretch where it covers nothing.
fn name_rejected(canvas: &mut Canvas, trend: &Trend, steps: &[Step], taken: &mut Taken) {
    let sheet = Rect::new(
        trend.pv.frame.x0,
        trend.pv.frame.y0 + 2.0,
        trend.pv.frame.x1,
        trend.op.frame.y1 - 2.0,
    );
    for step in steps.iter().filter(|s| s.verdict == Verdict::Rejected) {
        let Some(area) = stretch(trend, step) else {
            continue;
        };
        let width = area.x1 - area.x0 - INSIDE_PT;
        let blocks = [rejected_block(step, width), rejected_block(step, 45.0)];
        for block in blocks.into_iter().filter(|b| b.size().0 <= width) {
            let spots = spots(area, sheet, trend.pv.frame.y1 - 4.0, block.size());
            if let Some(spot) = taken.first_free(sheet, spots) {
                block.set(canvas, spot, true);
                taken.add_box(spot.grown(1.5));
                break;
            }
        }
    }
}

/// Places for a block in a stretch: its middle column, then nearer its edges.
fn spots(stretch: Rect, sheet: Rect, pv_foot: f64, size: Point) -> Vec<Rect> {
    let (width, height) = size;
    let middle = (stretch.x0 + stretch.x1) / 2.0;
    let slack = ((stretch.x1 - stretch.x0 - width) / 2.0 - 3.0).max(0.0);
    let mut spots = Vec::new();
    for shift in [0.0, slack * 0.5, -slack * 0.5, slack, -slack] {
        let x0 = (middle + shift - width / 2.0).clamp(sheet.x0, (sheet.x1 - width).max(sheet.x0));
        // Up from the foot of the PV's window, then down through the OP's.
        let above = (0..).map(|k| pv_foot - 3.0 * f64::from(k));
        let above = above.take_while(|y1| y1 - height >= sheet.y0);
        let below = (1..).map(|k| pv_foot + 3.0 * f64::from(k));
        let below = below.take_while(|y1| *y1 <= sheet.y1);
        spots.extend(
            above
                .chain(below)
                .map(|y1| Rect::new(x0, y1 - height, x0 + width, y1)),
        );
    }
    spots
}

/// The reason a step was rejected for: the first that is more than a reservation.
pub fn rejecting_reason(step: &Step) -> Option<&Reason> {
    decisive_reasons(step).first().copied()
}

/// A reason in a few plain words.
pub fn reason_words(reason: &Reason) -> &'static str {
    match reason.code {
        ReasonCode::Change => "PV changed too little",
        ReasonCode::Drift => "PV was drifting",
        ReasonCode::Watched => "watched too short",
        ReasonCode::Samples => "too few samples",
        ReasonCode::Saturated => "at the end of the range",
        ReasonCode::BadSamples => "bad samples",
        ReasonCode::Misfit => "no fit to the samples",
        ReasonCode::Sign => "PV went the other way",
        ReasonCode::Mode => "not in manual",
        ReasonCode::NoFit => "no model fits",
        ReasonCode::InnerLoop => "inner loop changed since",
    }
}

/// The test as a sentence for those who cannot see the plot.
pub fn alt(record: &Record, log: &Log) -> String {
    const MOST: usize = 8;
    let mut text = format!(
        "Two line charts on one time axis, PV above OP, {}.",
        narrate::when(log)
    );
    for step in record.steps.iter().take(MOST) {
        text.push(' ');
        text.push_str(&step_sentence(record, step));
    }
    if record.steps.len() > MOST {
        text.push_str(&format!(
            " {} more steps follow.",
            record.steps.len() - MOST
        ));
    }
    if record.steps.is_empty() {
        let pv = &record.control_loop.pv;
        let decimals = narrate::decimals(pv);
        let [low, high] = record.test.pv_tested;
        text.push_str(&format!(
            " PV lay between {} and {}; no step of OP was found.",
            fixed(low, decimals),
            with_unit(&fixed(high, decimals), &pv.unit)
        ));
    }
    text
}

fn step_sentence(record: &Record, step: &Step) -> String {
    let (pv, op) = (&record.control_loop.pv, &record.control_loop.op);
    let decimals = narrate::decimals(pv);
    let (from, to) = (fixed(step.pv_from, decimals), fixed(step.pv_to, decimals));
    let change = if from == to {
        format!("PV stayed at {}", with_unit(&to, &pv.unit))
    } else {
        let word = if step.pv_to > step.pv_from {
            "rose"
        } else {
            "fell"
        };
        format!("PV {word} from {from} to {}", with_unit(&to, &pv.unit))
    };
    let (from, to) = (
        narrate::op(step.op_from),
        with_unit(&narrate::op(step.op_to), &op.unit),
    );
    let moved = if step.pulse { "pulsed" } else { "moved" };
    let mut text = format!(
        "Step {}: {change} after OP was {moved} from {from} to {to}",
        step.number
    );
    if step.verdict == Verdict::Rejected {
        let why = rejecting_reason(step).map_or_else(String::new, |r| format!(": {}", r.text));
        text.push_str(&format!(", hatched as rejected{why}"));
    }
    text.push('.');
    text
}

#[cfg(test)]
mod tests {
    use super::super::sample::Plan;
    use super::*;
    use crate::identify::Check;

    #[test]
    fn a_reservation_is_no_reason_for_a_rejection() {
        let mut step = Plan::default().record().steps[2].clone();
        let reason = |code, bound| Reason {
            code,
            text: String::new(),
            figure: Some(1.0),
            bound,
        };
        step.checks = vec![Check {
            code: ReasonCode::Watched,
            figure: Some(2.0),
            reservation: Some(3.0),
            rejected: Some(1.5),
        }];
        step.reasons = vec![
            reason(ReasonCode::Watched, Some(3.0)),
            reason(ReasonCode::Mode, None),
        ];
        let code = |step: &Step| rejecting_reason(step).map(|r| r.code);
        assert_eq!(code(&step), Some(ReasonCode::Mode));
        step.reasons[0].bound = Some(1.5);
        assert_eq!(code(&step), Some(ReasonCode::Watched));
    }
}

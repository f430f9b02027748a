//! The test on page 1 of a withheld record: small, with what was wrong written above each step.

use super::canvas::Canvas;
use super::place::end_labels;
use super::test::{self, Marks, OP, PV_PT, RIGHT_PT, label_op_end};
use super::trend::{self, Outline, Trend};
use super::{Figure, narrate};
use crate::display::fixed;
use crate::identify::{Reason, ReasonCode, Step, Verdict};
use crate::record::{PageSize, Record};

const WIDTH_MM: f64 = 170.0;
const HEIGHT_MM: f64 = 50.0;
/// On US Letter the figure leaves the sign-off its place on the first page.
const LETTER_HEIGHT_MM: f64 = 45.0;

/// Draws the test; `None` where there is none.
pub fn draw(record: &Record) -> Option<Figure> {
    let log = record.test_log()?;
    let height = match record.document.page {
        PageSize::A4 => HEIGHT_MM,
        PageSize::UsLetter => LETTER_HEIGHT_MM,
    };
    let width = Canvas::new(WIDTH_MM, height).width();
    let lines = trend::lines(&log.data, width)?;
    let marks = Marks::new(&record.steps, &lines, width, what_was_wrong);
    // Rows of words above the first make the figure taller, not the windows smaller.
    let canvas_height = height + marks.height() / super::canvas::PT_PER_MM;
    let mut canvas = Canvas::new(WIDTH_MM, canvas_height);
    let outline = Outline {
        log,
        control_loop: &record.control_loop,
        lines: &lines,
        also_pv: None,
        also_op: None,
        top: 24.0 + marks.height(),
        between: 23.0,
        op_height: 30.0,
        right: RIGHT_PT,
        most_ticks: [4, 3],
    };
    let trend = Trend::new(&canvas, &outline)?;
    test::hatch(&mut canvas, &trend, &record.steps);
    trend.draw_axes(&mut canvas);
    trend.draw_pv(&mut canvas, &lines, PV_PT);
    trend.op.curve(&mut canvas, &lines.op, OP);
    let within = (trend.pv.frame.y0, trend.pv.frame.y1);
    let end = [(trend.pv_end(&lines), "PV")];
    end_labels(&mut canvas, trend.pv.frame.x1 + 4.0, &end, within);
    label_op_end(&mut canvas, &trend, &lines);
    marks.draw(&mut canvas, &trend, &record.steps);

    let rejected = record
        .steps
        .iter()
        .filter(|s| s.verdict == Verdict::Rejected)
        .count();
    let hatched = match rejected {
        0 => "",
        n if n == record.steps.len() => " Hatched: not used, which is every step.",
        _ => " Hatched: not used.",
    };
    let caption = format!("The test as logged, {}.{hatched}", narrate::when(log));
    Some(Figure::new(
        "withheld.svg",
        &canvas,
        caption,
        test::alt(record, log),
    ))
}

/// What was wrong with a step, with its figure where that says more.
fn what_was_wrong(step: &Step) -> String {
    if step.verdict != Verdict::Rejected {
        return String::new();
    }
    test::rejecting_reason(step).map_or_else(String::new, |reason| {
        match (reason.code, figure(reason)) {
            (ReasonCode::Change, Some(figure)) => format!("change {figure}\u{a0}σ"),
            (ReasonCode::Drift, Some(figure)) => format!("drift {figure}\u{a0}%"),
            // Words that fit beside the number of a short stretch.
            (ReasonCode::Saturated, _) => "end of range".to_owned(),
            (ReasonCode::Misfit, Some(figure)) => format!("misfit {figure}\u{a0}%"),
            _ => test::reason_words(reason).to_owned(),
        }
    })
}

fn figure(reason: &Reason) -> Option<String> {
    let figure = reason.figure.filter(|f| f.is_finite())?;
    Some(fixed(figure, if figure.abs() < 10.0 { 1 } else { 0 }))
}

//! The closed-loop trial as logged, with the prediction over it.

use super::axis;
use super::canvas::{Canvas, Ink, Stroke};
use super::geometry::{Point, Rect};
use super::place::{Block, Taken, end_labels, name_curve};
use super::trend::{self, Outline, Trend};
use super::{Figure, narrate};
use crate::display::{duration, plain, with_unit};
use crate::predict::Metrics;
use crate::predict::trial::TrialKind;
use crate::quantity::Span;
use crate::record::{Log, PageSize, Record};

const WIDTH_MM: f64 = 170.0;
const HEIGHT_MM: f64 = 86.0;
/// Letter pages are lower, and the trial still stands on one page with the published rules.
const LETTER_HEIGHT_MM: f64 = 75.0;
/// Measured PV and OP.
const MEASURED_PT: f64 = 0.6;
/// Predicted PV and OP.
const PREDICTED: Stroke = Stroke::dashed(1.3, 4.5, 2.5);
/// The ends of what the models of the test predict.
const BAND: Stroke = Stroke::dashed(0.5, 0.8, 2.2);
/// A band that is nowhere wider than this on paper says nothing that the predicted line does not, pt.
const BAND_SEEN_PT: f64 = 3.0;
const SP: Stroke = Stroke::solid(0.6, Ink::Black);

/// Draws the trial; `None` where there is no log of one, or nothing in it to draw.
pub fn draw(record: &Record) -> Option<Figure> {
    let log = record.trial_log()?;
    let control_loop = &record.control_loop;
    let pv_span = Span::new(control_loop.pv.low, control_loop.pv.high).ok()?;
    let op_span = Span::new(control_loop.op.low, control_loop.op.high).ok()?;
    let (height, op_height) = match record.document.page {
        PageSize::A4 => (HEIGHT_MM, 68.0),
        PageSize::UsLetter => (LETTER_HEIGHT_MM, 56.0),
    };
    let mut canvas = Canvas::new(WIDTH_MM, height);
    let lines = trend::lines(&log.data, canvas.width())?;
    let (pv, op) = record
        .trial
        .as_ref()
        .map_or_else(Default::default, |trial| {
            let curve = &trial.curve;
            (
                trend::engineering(&curve.t_s, &curve.pv, pv_span),
                held_until_moves(
                    trend::engineering(&curve.t_s, &curve.op, op_span),
                    &lines.sp,
                ),
            )
        });
    let sp = axis::range(lines.sp.iter().map(|p| p.1));
    let predicted = axis::range(pv.iter().map(|p| p.1));
    let outline = Outline {
        log,
        control_loop,
        lines: &lines,
        also_pv: sp.map(|sp| axis::joined(sp, predicted)).or(predicted),
        also_op: axis::range(op.iter().map(|p| p.1)),
        top: 22.0,
        between: 32.0,
        op_height,
        right: 40.0,
        most_ticks: [6, 5],
    };
    let what = if lines.sp.is_empty() {
        "PV"
    } else {
        "PV and SP"
    };
    let trend = Trend::new(&canvas, &outline)?.pv_title(what, &control_loop.pv.unit);
    trend.draw_axes(&mut canvas);
    let set_point = trend.pv.curve(&mut canvas, &lines.sp, SP);
    let measured = trend.draw_pv(&mut canvas, &lines, MEASURED_PT);
    let op_measured = trend.op.curve(
        &mut canvas,
        &lines.op,
        Stroke::solid(MEASURED_PT, Ink::Black),
    );
    let band = draw_band(&mut canvas, &trend, record, pv_span);
    let predicted = trend.pv.curve(&mut canvas, &pv, PREDICTED);
    let op_predicted = trend.op.curve(&mut canvas, &op, PREDICTED);

    let frame = trend.pv.frame;
    let mut ends = vec![(trend.pv_end(&lines), "PV")];
    ends.extend(lines.sp.last().map(|p| (trend.pv.at_y(p.1), "SP")));
    end_labels(&mut canvas, frame.x1 + 4.0, &ends, (frame.y0, frame.y1));
    let op_end = lines.op.last().map(|p| (trend.op.at_y(p.1), "OP"));
    let within = (trend.op.frame.y0, trend.op.frame.y1);
    let op_ends: Vec<(f64, &str)> = op_end.into_iter().collect();
    end_labels(&mut canvas, frame.x1 + 4.0, &op_ends, within);

    if record.trial.is_some() {
        let sheet = Rect::new(frame.x0, frame.y0 - 10.0, frame.x1, frame.y1);
        let mut taken = Taken::words_of(&canvas);
        taken.add_grid(trend.grid());
        taken.add_paths(&set_point);
        taken.add_paths(&measured);
        taken.add_paths(&band);
        let name = Block::line("predicted", false);
        name_curve(&mut canvas, &mut taken, &predicted, &name, sheet);
        let mut taken = Taken::words_of(&canvas);
        taken.add_grid(trend.grid());
        taken.add_paths(&set_point);
        taken.add_paths(&predicted);
        taken.add_paths(&band);
        let name = Block::line("measured", false);
        name_curve(&mut canvas, &mut taken, &measured, &name, sheet);
        let frame = trend.op.frame;
        let sheet = Rect::new(frame.x0, frame.y0 - 4.0, frame.x1, frame.y1);
        let mut taken = Taken::words_of(&canvas);
        taken.add_grid(trend.grid());
        taken.add_paths(&op_measured);
        let name = Block::line("predicted", false);
        name_curve(&mut canvas, &mut taken, &op_predicted, &name, sheet);
    }
    let band = if band.is_empty() {
        ""
    } else {
        "; dotted: the ends of what all models predict"
    };
    let caption = match record.trial.as_ref().map(|trial| trial.kind) {
        None => "The trial as logged.".to_owned(),
        Some(TrialKind::SetPoint) => format!(
            "Solid: as logged; dashed: as the fitted model predicts from the logged set point{band}."
        ),
        Some(TrialKind::Load) => format!(
            "Solid: as logged; dashed: as the fitted model predicts from the load that fits best{band}."
        ),
    };
    Some(Figure::new("trial.svg", &canvas, caption, alt(record, log)))
}

/// Draws the ends of what the models of the test predict, where they can be told apart; returns them as
/// drawn.
fn draw_band(
    canvas: &mut Canvas,
    trend: &Trend,
    record: &Record,
    pv_span: Span,
) -> Vec<Vec<Point>> {
    let Some(trial) = &record.trial else {
        return Vec::new();
    };
    let band = &trial.band;
    let [low, high] =
        [&band.pv_low, &band.pv_high].map(|values| trend::engineering(&band.t_s, values, pv_span));
    let apart = low
        .iter()
        .zip(&high)
        .map(|(low, high)| (trend.pv.at_y(low.1) - trend.pv.at_y(high.1)).abs());
    if apart.fold(0.0, f64::max) < BAND_SEEN_PT {
        return Vec::new();
    }
    let mut drawn = trend.pv.curve(canvas, &low, BAND);
    drawn.extend(trend.pv.curve(canvas, &high, BAND));
    drawn
}

/// The predicted OP with its jumps where the set point moved: its line holds few points, and one drawn
/// across a jump would leave before the set point does.
fn held_until_moves(op: Vec<Point>, set_point: &[Point]) -> Vec<Point> {
    let mut moves = set_point
        .windows(2)
        .filter(|w| w[0].1 != w[1].1)
        .map(|w| w[1].0)
        .peekable();
    let mut line: Vec<Point> = Vec::with_capacity(op.len());
    for point in op {
        while let Some(at) = moves.next_if(|&at| at <= point.0) {
            if let Some(&(from, value)) = line.last()
                && from < at
            {
                line.push((at, value));
            }
        }
        line.push(point);
    }
    line
}

fn alt(record: &Record, log: &Log) -> String {
    let mut text = format!("PV and set point above OP, {}.", narrate::when(log));
    let Some(trial) = &record.trial else {
        return text;
    };
    let pv = &record.control_loop.pv;
    let step = trial.step_percent / 100.0 * (pv.high - pv.low);
    let (measured, predicted) = (&trial.measured, &trial.predicted);
    match trial.kind {
        TrialKind::SetPoint => {
            let size = narrate::pv_change(step.abs(), pv);
            let way = if step < 0.0 { "fall" } else { "rise" };
            text.push_str(&format!(
                " After a set-point {way} of {size} PV {}; predicted: {}.",
                told(measured),
                told(predicted)
            ));
        }
        TrialKind::Load => {
            let size = with_unit(&plain(trial.step_percent, 3), "%");
            text.push_str(&format!(
                " A load that amounts to {size} of OP came in; PV {}; predicted: {}.",
                told(measured),
                told(predicted)
            ));
        }
    }
    text
}

fn told(metrics: &Metrics) -> String {
    let settled = metrics.settling_time_s.map_or_else(
        || "did not settle in the time logged".to_owned(),
        |s| format!("settled in {}", duration(s)),
    );
    match metrics.overshoot_percent {
        Some(overshoot) => format!("overshot by {} and {settled}", narrate::percent(overshoot)),
        None => settled,
    }
}

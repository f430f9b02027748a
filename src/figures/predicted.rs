//! The settings' section: responses to a set-point step and to a load step, PV above OP.

use super::axis;
use super::canvas::{Canvas, Label};
use super::change::{SET_POINT, behaviour, moved};
use super::geometry::Rect;
use super::panel::{BELOW_PT, Panel};
use super::response::{Of, Pair, Window, name_both, step_size};
use super::{Figure, narrate};
use crate::display::{self, plain, with_unit};
use crate::predict::Response;
use crate::record::{PageSize, Record};

const WIDTH_MM: f64 = 170.0;
const HEIGHT_MM: f64 = 86.0;
/// On US Letter the figure has to end sooner to stay on the page of its settings.
const LETTER_HEIGHT_MM: f64 = 69.0;
/// From the left edge of one half to that of the other, pt.
const HALVES_PT: f64 = 248.0;
/// Right of each window, for the names at the line ends, pt.
const NAMES_PT: f64 = 56.0;

/// Draws both responses; `None` where none was predicted for new settings.
pub fn draw(record: &Record) -> Option<Figure> {
    let pair = Pair::of(record)?;
    let pv = &record.control_loop.pv;
    let height = match record.document.page {
        PageSize::A4 => HEIGHT_MM,
        PageSize::UsLetter => LETTER_HEIGHT_MM,
    };
    let mut canvas = Canvas::new(WIDTH_MM, height);
    let mut alt = "Four line charts, PV above OP.".to_owned();
    let mut leaves = false;
    for (of, from) in [(Of::SetPoint, 0.0), (Of::Load, HALVES_PT)] {
        let new = pair.new_response(of)?;
        let title = match of {
            Of::SetPoint => format!("Set point {}", moved(step_size(new, pv.high - pv.low), pv)),
            Of::Load => format!(
                "Load that amounts to {} of OP",
                plain_percent(new.step_percent)
            ),
        };
        leaves |= half(&mut canvas, record, &pair, of, new, from)?;
        canvas.words(Label::new(from, 10.0, title.clone()).bold().size(9.0));
        alt.push_str(&format!(" {title}: "));
        if let (Some(block), Some(found)) = (pair.found, pair.found_response(of)) {
            alt.push_str(&format!(
                "{}; ",
                narrated("as found", of, record, block, found)
            ));
        }
        alt.push_str(&narrated(pair.name, of, record, pair.new, new));
        alt.push('.');
    }
    let mut caption = match pair.found {
        Some(_) => format!(
            "Predicted on the fitted model: as found dashed, {} solid.",
            pair.name
        ),
        None => format!("Predicted on the fitted model, {}.", pair.name),
    };
    if leaves {
        caption.push_str(" The line as found is cut where it leaves the scale.");
    }
    Some(Figure::new("predicted.svg", &canvas, caption, alt))
}

/// Draws one response; returns whether the line as found leaves a window, `None` where there is
/// no new response to draw.
fn half(
    canvas: &mut Canvas,
    record: &Record,
    pair: &Pair,
    of: Of,
    new: &Response,
    from: f64,
) -> Option<bool> {
    let (pv, op) = (&record.control_loop.pv, &record.control_loop.op);
    let (pv_width, op_width) = (pv.high - pv.low, op.high - op.low);
    let upper = Window::new(pair, of, pv_width / 100.0, |r| &r.curve.pv)?;
    let lower = Window::new(pair, of, op_width / 100.0, |r| &r.curve.op)?;
    let step = step_size(new, pv_width);
    let also: &[f64] = match of {
        Of::SetPoint => &[0.0, step],
        Of::Load => &[0.0],
    };
    let pv_axis = upper.axis(also, pv_width / 2000.0, 5);
    let op_axis = lower.axis(&[0.0], op_width / 1000.0, 5);
    let left = (from + 27.0).max(from + pv_axis.label_width().max(op_axis.label_width()) + 6.0);
    let right = (from + HALVES_PT).min(canvas.width() + 14.0) - NAMES_PT + 8.0;
    let bottom = canvas.height() - BELOW_PT;
    let pv_frame = Rect::new(left, 36.0, right, bottom - 84.0);
    let op_frame = Rect::new(left, bottom - 56.0, right, bottom);
    let pv_panel = Panel::new(pv_frame, upper.time, &pv_axis);
    let op_panel = Panel::new(op_frame, lower.time, &op_axis);
    pv_panel.value_axis(canvas, &pv_axis, true);
    op_panel.value_axis(canvas, &op_axis, true);
    let ticks = axis::elapsed(0.0, upper.time.1, right - op_panel.at_x(0.0), true);
    op_panel.time_axis(canvas, &ticks);
    let titles = [
        pv_axis.title("PV change", &display::unit(&pv.unit)),
        op_axis.title("OP change", &display::unit(&op.unit)),
    ];
    let [pv_title, op_title] = titles;
    canvas.words(Label::new(from, 26.0, pv_title));
    canvas.words(Label::new(from, op_frame.y0 - 9.5, op_title));
    let set_point = (of == Of::SetPoint).then_some(step);
    if set_point.is_some() {
        let (begin, end) = upper.time;
        let edge = [(begin, 0.0), (0.0, 0.0), (0.0, step), (end, step)];
        pv_panel.curve(canvas, &edge, SET_POINT);
    }
    let drawn = upper.draw(canvas, &pv_panel);
    let named = (&pv_panel, &pv_axis);
    name_both(canvas, named, (&upper, &drawn), pair, set_point, 9.5);
    let drawn = lower.draw(canvas, &op_panel);
    let named = (&op_panel, &op_axis);
    name_both(canvas, named, (&lower, &drawn), pair, None, 9.5);
    Some(upper.found_leaves(&pv_panel) || lower.found_leaves(&op_panel))
}

fn narrated(
    name: &str,
    of: Of,
    record: &Record,
    block: &crate::record::SettingsBlock,
    response: &Response,
) -> String {
    let text = behaviour(name, block, response);
    if of == Of::SetPoint || super::response::unstable(block) {
        return text;
    }
    let pv = &record.control_loop.pv;
    let peak = response.metrics.peak_deviation_percent / 100.0 * (pv.high - pv.low);
    format!("{text}, {} away at most", narrate::pv_change(peak, pv))
}

fn plain_percent(value: f64) -> String {
    with_unit(&plain(value, 3), "%")
}

//! Page 1: what the PV does after a set-point step, as found and as left.

use super::axis;
use super::canvas::{Canvas, Ink, Label, Stroke};
use super::geometry::Rect;
use super::panel::{BELOW_PT, Panel};
use super::response::{Of, Pair, Window, name_both, step_size, unstable};
use super::{Figure, narrate};
use crate::display;
use crate::predict::Response;
use crate::record::{Range, Record, SettingsBlock};

const WIDTH_MM: f64 = 80.0;
const HEIGHT_MM: f64 = 42.0;
/// The set point.
pub const SET_POINT: Stroke = Stroke::solid(0.6, Ink::Black);

/// Draws the responses; `None` where none was predicted for new settings.
pub fn draw(record: &Record) -> Option<Figure> {
    let pair = Pair::of(record)?;
    let new = pair.new_response(Of::SetPoint)?;
    let range = &record.control_loop.pv;
    let width = range.high - range.low;
    let step = step_size(new, width);
    let window = Window::new(&pair, Of::SetPoint, width / 100.0, |r| &r.curve.pv)?;
    let axis = window.axis(&[0.0, step], step.abs() / 10.0, 5);

    let mut canvas = Canvas::new(WIDTH_MM, HEIGHT_MM);
    let left = (axis.label_width() + 6.0).max(26.0);
    let frame = Rect::new(
        left,
        20.0,
        canvas.width() - 56.0,
        canvas.height() - BELOW_PT,
    );
    let panel = Panel::new(frame, window.time, &axis);
    panel.value_axis(&mut canvas, &axis, true);
    let ticks = axis::elapsed(0.0, window.time.1, panel.frame.x1 - panel.at_x(0.0), true);
    panel.time_axis(&mut canvas, &ticks);
    let title = axis.title("PV change", &display::unit(&range.unit));
    canvas.words(Label::new(0.0, 10.0, title).bold());
    let zero = window.time.0;
    let edge = [(zero, 0.0), (0.0, 0.0), (0.0, step), (window.time.1, step)];
    panel.curve(&mut canvas, &edge, SET_POINT);
    let drawn = window.draw(&mut canvas, &panel);
    name_both(
        &mut canvas,
        (&panel, &axis),
        (&window, &drawn),
        &pair,
        Some(step),
        3.0,
    );

    let moved = moved(step, range);
    let caption = format!("Predicted PV after the set point is {moved}.");
    let mut alt = format!("Line chart. After the set point is {moved}, ");
    if let (Some(block), Some(found)) = (pair.found, pair.found_response(Of::SetPoint)) {
        alt.push_str(&format!("{}; ", behaviour("as found", block, found)));
    }
    alt.push_str(&behaviour(pair.name, pair.new, new));
    alt.push('.');
    Some(Figure::new("change.svg", &canvas, caption, alt))
}

/// "raised by 4 °C".
pub fn moved(step: f64, range: &Range) -> String {
    let word = if step < 0.0 { "lowered" } else { "raised" };
    format!("{word} by {}", narrate::pv_change(step.abs(), range))
}

/// "as found PV is predicted to overshoot by 74 % and to settle in 33 min".
pub fn behaviour(name: &str, block: &SettingsBlock, response: &Response) -> String {
    if unstable(block) {
        return format!("{name} the loop is predicted to be unstable");
    }
    let metrics = &response.metrics;
    let overshoot = metrics
        .overshoot_percent
        .map(|o| format!("to overshoot by {} and ", narrate::percent(o)))
        .unwrap_or_default();
    let settles = metrics.settling_time_s.map_or_else(
        || "not to settle in the time computed".to_owned(),
        |s| format!("to settle in {}", display::duration(s)),
    );
    format!("{name} PV is predicted {overshoot}{settles}")
}

//! Axes: where the ticks stand and what is written at them.
//!
//! Ticks are whole multiples of 1, 2 or 5 times a power of ten, on clock axes of the units of the
//! clock; their labels never touch.

use super::narrate::grouped;
use super::widths::width_pt;
use crate::display::fixed;
use chrono::{Days, NaiveDateTime, Timelike};

/// Size of tick labels, pt.
const SIZE_PT: f64 = super::canvas::LABEL_PT;
/// Least white between two labels of a time axis, pt.
const BETWEEN_PT: f64 = 9.0;
/// Most ticks on a time axis, also where more would fit.
const MOST_TIME_TICKS: usize = 12;

/// One tick.
#[derive(Debug, Clone, PartialEq)]
pub struct Tick {
    /// Where, in the axis's own unit (value, or seconds).
    pub at: f64,
    /// What is written at it.
    pub label: String,
    /// What follows the label on the same line without moving it: a unit at the last tick.
    pub after: String,
    /// What is written below it: the date where a day begins.
    pub below: String,
}

impl Tick {
    fn new(at: f64, label: String) -> Self {
        Tick {
            at,
            label,
            after: String::new(),
            below: String::new(),
        }
    }
}

/// A vertical axis.
#[derive(Debug, Clone, PartialEq)]
pub struct Values {
    /// Lower end of the plot.
    pub low: f64,
    /// Upper end of the plot.
    pub high: f64,
    /// The ticks, upwards.
    pub ticks: Vec<Tick>,
    /// What the labels count, written before the unit: "10⁶", or nothing.
    pub factor: String,
}

impl Values {
    /// Width of the widest label, pt.
    pub fn label_width(&self) -> f64 {
        self.ticks
            .iter()
            .map(|t| width_pt(&t.label, SIZE_PT, false))
            .fold(0.0, f64::max)
    }

    /// The title of the axis: what it shows, and in what.
    pub fn title(&self, what: &str, unit: &str) -> String {
        let counted = match (self.factor.is_empty(), unit.is_empty()) {
            (true, _) => unit.to_owned(),
            (false, true) => self.factor.clone(),
            (false, false) => format!("{}\u{a0}{unit}", self.factor),
        };
        if counted.is_empty() {
            what.to_owned()
        } else {
            format!("{what}, {counted}")
        }
    }
}

/// The range of finite values, `None` where there is none.
pub fn range(values: impl IntoIterator<Item = f64>) -> Option<(f64, f64)> {
    values
        .into_iter()
        .filter(|v| v.is_finite())
        .fold(None, |seen, v| match seen {
            None => Some((v, v)),
            Some((low, high)) => Some((low.min(v), high.max(v))),
        })
}

/// A range, widened to hold another where there is one.
pub fn joined(a: (f64, f64), b: Option<(f64, f64)>) -> (f64, f64) {
    b.map_or(a, |b| (a.0.min(b.0), a.1.max(b.1)))
}

/// An axis that shows `range` with some air, at least `least` wide, with at most `most` ticks.
pub fn values(range: (f64, f64), least: f64, most: usize) -> Values {
    let middle = range.0 / 2.0 + range.1 / 2.0;
    let size = range.0.abs().max(range.1.abs());
    // Below a billionth of the values' own size nothing could be told apart on the axis.
    let width = (range.1 - range.0).max(least).max(size * 1e-9);
    let width = if width > 0.0 && width.is_finite() {
        width
    } else {
        1.0
    };
    let (low, high) = (middle - width * 0.56, middle + width * 0.56);
    ticked(low, high, most)
}

/// An axis from `low` to `high` exactly, with at most `most` ticks.
pub fn ticked(low: f64, high: f64, most: usize) -> Values {
    let most = most.max(2);
    let mut step = nice_step((high - low) / (most + 1) as f64);
    let (mut first, mut last) = step.ends(low, high);
    while last - first >= most as f64 {
        step = nice_step(step.size * 1.01);
        (first, last) = step.ends(low, high);
    }
    let multiples = (0..most).map(|k| first + k as f64);
    let at = multiples.take_while(|k| *k <= last).map(|k| k * step.size);
    labelled(low, high, at, step.exponent)
}

/// An axis of -`half` to `half`, with a tick at 0 and one on either side of it at three fifths of
/// the way or farther out.
pub fn symmetric(half: f64) -> Values {
    let half = if half > 0.0 && half.is_finite() {
        half
    } else {
        1.0
    };
    let power = power_of_ten(half);
    // Nearer to each other than 1, 2 and 5, so that the outer labels stand clear of the 0.
    const FIGURES: [u8; 9] = [8, 10, 15, 20, 30, 40, 50, 60, 80];
    let outer = [power - 2, power - 1]
        .into_iter()
        .flat_map(|exponent| FIGURES.map(|figure| (figure, exponent)))
        .rfind(|&(figure, exponent)| exact(figure, exponent) <= half);
    let (figure, exponent) = outer.unwrap_or((8, power - 2));
    let size = exact(figure, exponent);
    let last_figure = if figure % 10 == 0 {
        exponent + 1
    } else {
        exponent
    };
    labelled(-half, half, [-size, 0.0, size], last_figure)
}

/// An axis with ticks at these values, whose last figure stands for ten to `last_figure`.
fn labelled(low: f64, high: f64, at: impl IntoIterator<Item = f64>, last_figure: i32) -> Values {
    let power = counted_in(low.abs().max(high.abs()));
    let decimals = (power - last_figure).max(0) as usize;
    let scale = power_of(-power);
    let label = |at: f64| grouped(&fixed(at * scale, decimals));
    Values {
        low,
        high,
        ticks: at.into_iter().map(|at| Tick::new(at, label(at))).collect(),
        factor: factor(power),
    }
}

/// Power of ten, a multiple of three, that values up to `largest` are counted in: 0 unless they have
/// more than six figures before the point, or none for three places behind it.
pub fn counted_in(largest: f64) -> i32 {
    let exponent = power_of_ten(largest);
    if (-3..6).contains(&exponent) {
        0
    } else {
        exponent.div_euclid(3) * 3
    }
}

/// "10⁶" for 6, nothing for 0.
pub fn factor(power: i32) -> String {
    if power == 0 {
        String::new()
    } else {
        format!("10{}", superscript(power))
    }
}

/// A step of 1, 2 or 5 times a power of ten.
struct Step {
    size: f64,
    exponent: i32,
}

impl Step {
    /// The first and the last multiple of the step between two values.
    fn ends(&self, low: f64, high: f64) -> (f64, f64) {
        (libm::ceil(low / self.size), libm::floor(high / self.size))
    }
}

/// The smallest nice step that is not below `least`.
fn nice_step(least: f64) -> Step {
    let mut exponent = power_of_ten(least);
    // The logarithm may be off by one at a power of ten itself: start one lower.
    exponent -= 1;
    loop {
        for figure in [1, 2, 5] {
            let size = exact(figure, exponent);
            if size >= least * (1.0 - 1e-9) {
                return Step { size, exponent };
            }
        }
        exponent += 1;
    }
}

/// Power of ten of the first figure; 0 for 0 and for what is no number.
fn power_of_ten(value: f64) -> i32 {
    if value == 0.0 || !value.is_finite() {
        return 0;
    }
    libm::floor(libm::log10(value.abs())) as i32
}

/// `figure` times ten to `exponent`, as the decimal text names it: exact on every machine.
fn exact(figure: u8, exponent: i32) -> f64 {
    format!("{figure}e{exponent}")
        .parse()
        .expect("a figure with an exponent is a number")
}

/// Ten to a whole power, exact.
pub fn power_of(exponent: i32) -> f64 {
    exact(1, exponent)
}

fn superscript(exponent: i32) -> String {
    exponent
        .to_string()
        .chars()
        .map(|c| match c {
            '-' => '⁻',
            '1' => '¹',
            '2' => '²',
            '3' => '³',
            digit => char::from_u32(0x2070 + digit.to_digit(10).unwrap_or(0))
                .expect("superscript figures stand in a row"),
        })
        .collect()
}

/// Unit of elapsed time on an axis.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TimeUnit {
    /// Seconds in one.
    pub seconds: f64,
    /// How it is printed.
    pub name: &'static str,
}

/// Seconds below 120 s, minutes below ten hours, else hours.
pub fn time_unit(longest_s: f64) -> TimeUnit {
    let (seconds, name) = if longest_s < 120.0 {
        (1.0, "s")
    } else if longest_s < 36_000.0 {
        (60.0, "min")
    } else {
        (3600.0, "h")
    };
    TimeUnit { seconds, name }
}

/// Steps of an elapsed axis where minutes or hours are counted: tens and parts of the clock.
fn elapsed_steps(unit: TimeUnit, least: f64) -> f64 {
    let wanted = least / unit.seconds;
    if unit.seconds > 1.0 {
        for step in [1.0, 2.0, 5.0, 10.0, 15.0, 20.0, 30.0, 60.0, 120.0] {
            if step >= wanted && wanted > 0.5 {
                return step * unit.seconds;
            }
        }
    }
    nice_step(wanted).size * unit.seconds
}

/// Ticks of elapsed time between two seconds; the last one carries the unit where `name_unit`.
pub fn elapsed(from_s: f64, to_s: f64, width: f64, name_unit: bool) -> Vec<Tick> {
    let unit = time_unit(to_s.abs().max(from_s.abs()));
    let span = to_s - from_s;
    if !(span > 0.0 && span.is_finite() && width > 0.0) {
        return Vec::new();
    }
    let mut least = span / MOST_TIME_TICKS as f64;
    loop {
        let step_s = elapsed_steps(unit, least);
        let step = step_s / unit.seconds;
        let decimals = decimals_of(step);
        let (first, last) = (libm::ceil(from_s / step_s), libm::floor(to_s / step_s));
        let mut ticks = Vec::new();
        let mut k = first;
        while k <= last && ticks.len() <= MOST_TIME_TICKS {
            ticks.push(Tick::new(k * step_s, fixed(k * step, decimals)));
            k += 1.0;
        }
        if name_unit && let Some(tick) = ticks.last_mut() {
            tick.after = format!("\u{a0}{}", unit.name);
        }
        if labels_fit(&ticks, width / span) {
            return ticks;
        }
        least = step_s * 1.01;
    }
}

fn decimals_of(step: f64) -> usize {
    if step == libm::floor(step) {
        0
    } else {
        (-power_of_ten(step)).max(1) as usize
    }
}

/// Whether neighbouring labels keep their distance at `scale` pt per second.
fn labels_fit(ticks: &[Tick], scale: f64) -> bool {
    let half = |tick: &Tick| {
        width_pt(&tick.label, SIZE_PT, false).max(width_pt(&tick.below, SIZE_PT, false)) / 2.0
    };
    ticks
        .windows(2)
        .all(|w| (w[1].at - w[0].at) * scale >= half(&w[0]) + half(&w[1]) + BETWEEN_PT)
}

/// Steps of a clock axis, s.
const CLOCK_STEPS: [f64; 25] = [
    1.0,
    2.0,
    5.0,
    10.0,
    15.0,
    30.0,
    60.0,
    120.0,
    300.0,
    600.0,
    900.0,
    1800.0,
    3600.0,
    7200.0,
    10_800.0,
    14_400.0,
    21_600.0,
    43_200.0,
    86_400.0,
    172_800.0,
    604_800.0,
    1_209_600.0,
    2_419_200.0,
    7_257_600.0,
    31_536_000.0,
];
const DAY_S: f64 = 86_400.0;

/// Ticks of the time of day between two seconds of a clock whose second 0 is `zero`. Where the
/// axis runs over midnight the first tick and the first of each day carry the date below.
pub fn clock(zero: NaiveDateTime, from_s: f64, to_s: f64, width: f64) -> Vec<Tick> {
    let span = to_s - from_s;
    if !(span > 0.0 && span.is_finite() && width > 0.0) {
        return Vec::new();
    }
    let of_day = f64::from(zero.num_seconds_from_midnight()) + f64::from(zero.nanosecond()) / 1e9;
    for step in CLOCK_STEPS {
        let (first, last) = (
            libm::ceil((from_s + of_day) / step),
            libm::floor((to_s + of_day) / step),
        );
        if last - first + 1.0 > MOST_TIME_TICKS as f64 {
            continue;
        }
        let mut ticks = Vec::new();
        let mut k = first;
        let mut day_before = None;
        let over_midnight =
            libm::floor((from_s + of_day) / DAY_S) != libm::floor((to_s + of_day) / DAY_S);
        while k <= last {
            let seconds = k * step;
            let day = libm::floor(seconds / DAY_S);
            let mut tick = Tick::new(seconds - of_day, time_of_day(seconds - day * DAY_S, step));
            let date = date_after(zero, day);
            if step >= DAY_S {
                tick.label = date;
            } else if over_midnight && day_before != Some(day) {
                tick.below = date;
            }
            day_before = Some(day);
            ticks.push(tick);
            k += 1.0;
        }
        if labels_fit(&ticks, width / span) {
            return ticks;
        }
    }
    Vec::new()
}

fn time_of_day(seconds: f64, step: f64) -> String {
    let whole = libm::round(seconds) as u32;
    let (hours, minutes) = (whole / 3600, whole / 60 % 60);
    if step < 60.0 {
        format!("{hours:02}:{minutes:02}:{:02}", whole % 60)
    } else {
        format!("{hours:02}:{minutes:02}")
    }
}

/// The date `days` after that of `zero`; empty beyond the calendar's end.
fn date_after(zero: NaiveDateTime, days: f64) -> String {
    let count = Days::new(days.abs() as u64);
    let date = if days < 0.0 {
        zero.date().checked_sub_days(count)
    } else {
        zero.date().checked_add_days(count)
    };
    date.map_or_else(String::new, |d| d.format("%Y-%m-%d").to_string())
}

#[cfg(test)]
mod tests {
    use super::*;
    use chrono::NaiveDate;
    use proptest::prelude::*;

    fn labels(ticks: &[Tick]) -> Vec<&str> {
        ticks.iter().map(|t| t.label.as_str()).collect()
    }

    fn morning() -> NaiveDateTime {
        NaiveDate::from_ymd_opt(2026, 3, 11)
            .and_then(|d| d.and_hms_opt(9, 5, 0))
            .expect("a date")
    }

    #[test]
    fn values_read_as_on_a_ruler() {
        assert_eq!(labels(&ticked(36.0, 52.0, 5).ticks), ["40", "45", "50"]);
        assert_eq!(labels(&ticked(-0.3, 0.3, 3).ticks), ["−0.2", "0.0", "0.2"]);
        let pascal = ticked(1.0e6, 1.3e6, 4);
        assert_eq!(labels(&pascal.ticks), ["1.0", "1.1", "1.2", "1.3"]);
        assert_eq!(pascal.title("PV", "Pa"), "PV, 10⁶\u{a0}Pa");
        let small = ticked(0.0, 0.00005, 5);
        assert_eq!(small.factor, "10⁻⁶");
        assert_eq!(labels(&small.ticks), ["0", "20", "40"]);
    }

    #[test]
    fn a_symmetric_axis_has_three_ticks() {
        assert_eq!(labels(&symmetric(0.336).ticks), ["−0.3", "0.0", "0.3"]);
        assert_eq!(labels(&symmetric(0.19).ticks), ["−0.15", "0.00", "0.15"]);
        assert_eq!(labels(&symmetric(1.0).ticks), ["−1", "0", "1"]);
        assert_eq!(labels(&symmetric(120_000.0).ticks)[2], "100\u{202f}000");
        assert_eq!(symmetric(f64::NAN).ticks.len(), 3);
    }

    #[test]
    fn a_flat_line_gets_an_axis() {
        let axis = values((5.0, 5.0), 1.0, 5);
        assert!(axis.low < 5.0 && axis.high > 5.0 && axis.ticks.len() > 1);
        let axis = values((0.0, 0.0), 0.0, 5);
        assert!(axis.low < 0.0 && axis.high > 0.0);
    }

    #[test]
    fn a_clock_axis_stands_on_round_times() {
        let ticks = clock(morning(), 0.0, 7740.0, 415.0);
        assert_eq!(labels(&ticks)[..2], ["09:15", "09:30"]);
        let night = clock(morning(), 0.0, 86_400.0, 415.0);
        assert_eq!(night[0].below, "2026-03-11");
        assert_eq!(night.iter().filter(|t| !t.below.is_empty()).count(), 2);
        let days = clock(morning(), 0.0, 9.0 * 86_400.0, 415.0);
        assert_eq!(labels(&days)[..2], ["2026-03-13", "2026-03-15"]);
        let short = clock(morning(), 0.5, 9.0, 415.0);
        assert_eq!(labels(&short)[0], "09:05:01");
    }

    #[test]
    fn elapsed_time_takes_its_unit_from_its_length() {
        let ticks = elapsed(-90.0, 1800.0, 144.0, true);
        assert_eq!(labels(&ticks), ["0", "5", "10", "15", "20", "25", "30"]);
        assert_eq!(ticks[6].after, "\u{a0}min");
        assert_eq!(labels(&elapsed(0.0, 1.0, 100.0, true)).last(), Some(&"1.0"));
        assert!(elapsed(0.0, f64::NAN, 100.0, true).is_empty());
    }

    proptest! {
        #[test]
        fn value_ticks_lie_in_the_axis_and_cover_it(
            low in -1e7..1e7_f64, power in -6..7_i32, most in 2..8_usize,
        ) {
            let axis = values((low, low + 10f64.powi(power)), 0.0, most);
            prop_assert!(axis.low <= low && axis.high >= low + 10f64.powi(power));
            prop_assert!(axis.ticks.len() <= most);
            prop_assert!(axis.ticks.iter().all(|t| axis.low <= t.at && t.at <= axis.high));
            prop_assert!(axis.ticks.windows(2).all(|w| w[0].label != w[1].label));
            // 1, 2, 5: the next larger step is at most 2.5 times as large.
            prop_assert!(axis.ticks.len() as f64 >= most as f64 / 2.5 - 1.0);
        }

        #[test]
        fn symmetric_ticks_stand_well_outside(half in 1e-9..1e9_f64) {
            let ticks = symmetric(half).ticks;
            prop_assert!(ticks[2].at <= half && ticks[2].at >= 0.6 * half);
        }

        #[test]
        fn time_labels_never_touch(
            from in -1e5..1e6_f64, span in 0.5..3e7_f64, width in 60.0..420.0_f64,
        ) {
            for ticks in [elapsed(from, from + span, width, true), clock(morning(), from, from + span, width)] {
                prop_assert!(labels_fit(&ticks, width / span));
                prop_assert!(ticks.len() <= MOST_TIME_TICKS + 1);
                prop_assert!(ticks.iter().all(|t| t.at >= from - 1e-6 && t.at <= from + span + 1e-6));
            }
        }
    }
}

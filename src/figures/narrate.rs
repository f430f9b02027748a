//! Words that several figures share in captions and in the sentences for those who cannot see them.

use crate::display::{duration, fixed, plain, with_unit};
use crate::record::{Log, Range};
use crate::trace::Moment;

/// Decimals of a PV in running text: enough to see a five-hundredth of its range.
pub fn decimals(range: &Range) -> usize {
    let width = (range.high - range.low).abs() / 500.0;
    if !(width > 0.0 && width.is_finite()) {
        return 1;
    }
    let places = -libm::floor(libm::log10(width));
    places.clamp(0.0, 6.0) as usize
}

/// An OP as it would be read off the faceplate.
pub fn op(value: f64) -> String {
    plain(value, 4)
}

/// A change of the PV with its unit, to three figures.
pub fn pv_change(value: f64, range: &Range) -> String {
    with_unit(&grouped(&plain(value, 3)), &range.unit)
}

/// A PV with its unit. On a range of many units the last figures, which say nothing, are zeros.
pub fn pv(value: f64, range: &Range) -> String {
    let coarse = (range.high - range.low).abs() / 500.0;
    let value = if coarse >= 10.0 && coarse.is_finite() {
        let tens = format!("1e{}", libm::floor(libm::log10(coarse)));
        let tens: f64 = tens.parse().expect("a power of ten is a number");
        libm::round(value / tens) * tens
    } else {
        value
    };
    with_unit(&grouped(&fixed(value, decimals(range))), &range.unit)
}

/// A printed figure with its thousands parted, where it has five figures or more before the point.
pub fn grouped(figure: &str) -> String {
    const THIN: char = '\u{202f}';
    let whole = figure.split('.').next().unwrap_or_default();
    let digits = whole.chars().filter(char::is_ascii_digit).count();
    if digits < 5 {
        return figure.to_owned();
    }
    let mut left = digits;
    let mut text = String::new();
    for c in whole.chars() {
        text.push(c);
        if c.is_ascii_digit() {
            left -= 1;
            if left > 0 && left.is_multiple_of(3) {
                text.push(THIN);
            }
        }
    }
    text + &figure[whole.len()..]
}

/// When a log was taken: "2026-03-11 from 09:05 to 11:14", or how long it is where it bears no date.
pub fn when(log: &Log) -> String {
    match (log.from, log.to) {
        (Moment::Dated(from), Moment::Dated(to)) if from.date() == to.date() => {
            let form = if (to - from).num_seconds() < 120 {
                "%H:%M:%S"
            } else {
                "%H:%M"
            };
            format!(
                "{} from {} to {}",
                from.date(),
                from.format(form),
                to.format(form)
            )
        }
        (Moment::Dated(from), Moment::Dated(to)) => format!(
            "from {} to {}",
            from.format("%Y-%m-%d %H:%M"),
            to.format("%Y-%m-%d %H:%M")
        ),
        (Moment::Elapsed(from), Moment::Elapsed(to)) => format!("over {}", duration(to - from)),
        _ => "without a date".to_owned(),
    }
}

/// A percentage without decimals.
pub fn percent(value: f64) -> String {
    format!("{}\u{a0}%", fixed(value, 0))
}

/// "a", "a and b", "a, b and c".
pub fn list(items: &[String]) -> String {
    match items {
        [] => String::new(),
        [one] => one.clone(),
        [first @ .., last] => format!("{} and {last}", first.join(", ")),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn figures_follow_the_measuring_range() {
        let range = |low, high| Range {
            unit: "degC".to_owned(),
            low,
            high,
        };
        assert_eq!(decimals(&range(0.0, 150.0)), 1);
        assert_eq!(decimals(&range(60.0, 140.0)), 1);
        assert_eq!(decimals(&range(0.0, 1000.0)), 0);
        assert_eq!(decimals(&range(0.0, 4.0)), 3);
        assert_eq!(decimals(&range(1.0, 1.0)), 1);
        assert_eq!(pv_change(4.0, &range(0.0, 1.0)), "4\u{a0}°C");
    }

    #[test]
    fn figures_that_say_nothing_are_zeros() {
        let range = |high| Range {
            unit: "Pa".to_owned(),
            low: 0.0,
            high,
        };
        assert_eq!(
            pv(4_743_417.0, &range(8.9e6)),
            "4\u{202f}740\u{202f}000\u{a0}Pa"
        );
        assert_eq!(pv(-302.4, &range(5000.0)), "−300\u{a0}Pa");
        assert_eq!(pv(98.04, &range(80.0)), "98.0\u{a0}Pa");
    }

    #[test]
    fn thousands_are_parted() {
        assert_eq!(grouped("−1234567.25"), "−1\u{202f}234\u{202f}567.25");
        assert_eq!(grouped("1234.5"), "1234.5");
        assert_eq!(grouped("0.000012"), "0.000012");
    }

    #[test]
    fn lists_read_as_spoken() {
        let items = ["1", "2", "4"].map(str::to_owned);
        assert_eq!(list(&items), "1, 2 and 4");
        assert_eq!(list(&items[..1]), "1");
    }
}

//! Figures within sentences of the design.

use crate::design::LimitName;

/// A time as it stands in a sentence: seconds below 120 s, else minutes.
pub fn duration(seconds: f64) -> String {
    if seconds < 120.0 {
        format!("{} s", short(seconds))
    } else {
        format!("{} min", short(seconds / 60.0))
    }
}

/// Two figures at least, no more than a sentence needs.
fn short(value: f64) -> String {
    let places = match value.abs() {
        v if v >= 9.95 => 0,
        v if v >= 0.995 => 1,
        v if v >= 0.0995 => 2,
        _ => 3,
    };
    plain(format!("{value:.places$}"))
}

/// A bound as it was given: up to three decimals, none for whole numbers.
pub fn bound(value: f64) -> String {
    plain(format!("{value:.3}"))
}

/// A bound on Ms: one decimal at least.
pub fn ms(value: f64) -> String {
    let text = bound(value);
    if text.contains('.') {
        text
    } else {
        format!("{text}.0")
    }
}

/// Without zeros at the end.
fn plain(text: String) -> String {
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.').to_owned()
    } else {
        text
    }
}

/// A limit's name in a sentence.
pub fn limit(name: LimitName) -> &'static str {
    match name {
        LimitName::Target => "the time constant asked for",
        LimitName::DeadTime => "dead time",
        LimitName::Robustness => "robustness",
        LimitName::TimeConstant => "the process time constant",
        LimitName::Noise => "noise",
        LimitName::OpMove => "the OP move",
        LimitName::ScanTime => "the scan time",
        LimitName::InnerLoop => "the inner loop",
        LimitName::LevelDeviation => "the level deviation",
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn figures_are_short() {
        assert_eq!(duration(48.7), "49 s");
        assert_eq!(duration(0.5), "0.5 s");
        assert_eq!(duration(2.0), "2 s");
        assert_eq!(duration(218.0), "3.6 min");
        assert_eq!(bound(5.0), "5");
        assert_eq!(ms(2.0), "2.0");
        assert_eq!(ms(1.75), "1.75");
    }
}

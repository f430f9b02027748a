//! Figures within sentences of the design.

use crate::design::LimitName;
pub use crate::predict::words::duration;
use crate::predict::words::plain;

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
        assert_eq!(bound(5.0), "5");
        assert_eq!(ms(2.0), "2.0");
        assert_eq!(ms(1.75), "1.75");
    }
}

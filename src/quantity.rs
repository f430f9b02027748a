//! Ranges, estimates and rounding: the words for figures that the whole program shares.

use schemars::JsonSchema;
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// A measuring or output range in engineering units; `high` is above `low` and both are finite.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
#[serde(try_from = "SpanLimits")]
pub struct Span {
    low: f64,
    high: f64,
}

/// The two ends of a range as they stand in a file, before they were checked.
#[derive(Deserialize, JsonSchema)]
struct SpanLimits {
    low: f64,
    high: f64,
}

/// Why two numbers are no range.
#[derive(Debug, Clone, PartialEq, Error)]
#[error("a range needs a low end below its high end, found {low} to {high}")]
pub struct SpanError {
    low: f64,
    high: f64,
}

impl TryFrom<SpanLimits> for Span {
    type Error = SpanError;
    fn try_from(limits: SpanLimits) -> Result<Self, SpanError> {
        Span::new(limits.low, limits.high)
    }
}

impl Span {
    /// A range from `low` to `high`, both in engineering units.
    ///
    /// # Errors
    /// Where an end is not finite or `high` is not above `low`.
    pub fn new(low: f64, high: f64) -> Result<Self, SpanError> {
        if low.is_finite() && high.is_finite() && high > low {
            Ok(Span { low, high })
        } else {
            Err(SpanError { low, high })
        }
    }

    /// The low end, engineering units.
    pub fn low(self) -> f64 {
        self.low
    }

    /// The high end, engineering units.
    pub fn high(self) -> f64 {
        self.high
    }

    /// Width of the range, engineering units.
    pub fn width(self) -> f64 {
        self.high - self.low
    }

    /// An engineering value as percent of span, 0 at the low end.
    pub fn percent(self, engineering: f64) -> f64 {
        (engineering - self.low) * 100.0 / self.width()
    }

    /// Percent of span as an engineering value.
    pub fn engineering(self, percent: f64) -> f64 {
        self.low + percent * self.width() / 100.0
    }

    /// A difference in percent of span as a difference in engineering units.
    pub fn engineering_change(self, percent: f64) -> f64 {
        percent * self.width() / 100.0
    }
}

/// An estimated figure with its 95 % interval. The unit is that of the field that holds it.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Estimate {
    /// The best value.
    pub value: f64,
    /// Low end of the 95 % interval.
    pub low: f64,
    /// High end of the 95 % interval.
    pub high: f64,
}

impl Estimate {
    /// An estimate; the interval is put in order and made to hold the value.
    pub fn new(value: f64, low: f64, high: f64) -> Self {
        Estimate {
            value,
            low: low.min(high).min(value),
            high: high.max(low).max(value),
        }
    }

    /// The same estimate in a unit that is `factor` times smaller (value, low and high times `factor`).
    pub fn scaled(self, factor: f64) -> Self {
        Estimate::new(self.value * factor, self.low * factor, self.high * factor)
    }

    /// Half the width of the interval.
    pub fn half_width(self) -> f64 {
        (self.high - self.low) / 2.0
    }
}

/// Decimal places for a figure known to within `half_width`: one place beyond the first figure of
/// the interval, at most `most`.
pub fn decimals_for(half_width: f64, most: usize) -> usize {
    if !half_width.is_finite() || half_width <= 0.0 {
        return most;
    }
    let first = libm::floor(libm::log10(half_width));
    let places = 1.0 - first;
    if places <= 0.0 {
        0
    } else {
        (places as usize).min(most)
    }
}

/// `value` rounded to `digits` significant digits, as it would be typed at a faceplate.
pub fn round_significant(value: f64, digits: usize) -> f64 {
    if value == 0.0 || !value.is_finite() {
        return value;
    }
    // Through the decimal text: the result is then exactly the number that the printed digits name.
    format!("{value:.*e}", digits.saturating_sub(1))
        .parse()
        .expect("a formatted number parses")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn span_scales_both_ways() {
        let span = Span::new(60.0, 140.0).expect("a range");
        assert_eq!(span.percent(100.0), 50.0);
        assert_eq!(span.engineering(25.0), 80.0);
        assert!(Span::new(1.0, 1.0).is_err());
        assert!(Span::new(f64::NAN, 1.0).is_err());
    }

    #[test]
    fn rounding_keeps_four_figures() {
        assert_eq!(round_significant(2.416_78, 4), 2.417);
        assert_eq!(round_significant(-0.000_123_456, 4), -0.000_123_5);
        assert_eq!(round_significant(98_765.4, 4), 98_770.0);
    }

    #[test]
    fn decimals_follow_the_interval() {
        assert_eq!(decimals_for(0.03, 6), 3);
        assert_eq!(decimals_for(2.0, 6), 1);
        assert_eq!(decimals_for(40.0, 6), 0);
    }
}

//! Figures as they stand in a sentence.

/// A time as people say it: seconds below two minutes, then minutes, then hours.
pub(crate) fn time_text(seconds: f64) -> String {
    if seconds < 120.0 {
        format!("{} s", figure(seconds))
    } else if seconds < 7200.0 {
        format!("{} min", figure(seconds / 60.0))
    } else {
        format!("{} h", figure(seconds / 3600.0))
    }
}

/// Two or three figures: 0.42, 4.2, 42, 420.
pub(crate) fn figure(value: f64) -> String {
    let size = value.abs();
    if size >= 9.95 {
        format!("{value:.0}")
    } else if size >= 0.995 {
        format!("{value:.1}")
    } else if size >= 0.0995 || size == 0.0 {
        format!("{value:.2}")
    } else {
        format!("{}", crate::quantity::round_significant(value, 2))
    }
}

/// A bound, without needless decimals.
pub(crate) fn bound(value: f64) -> String {
    format!("{}", crate::quantity::round_significant(value, 4))
}

/// A figure beside its bound: with one decimal more where rounding would make both look the same.
pub(crate) fn against(value: f64, limit: f64) -> String {
    let short = figure(value);
    if value != limit && short.parse::<f64>().ok() == Some(limit) {
        format!("{value:.2}")
    } else {
        short
    }
}

/// Rounded up to two figures, so that advice is never too small.
pub(crate) fn rounded_up(value: f64) -> f64 {
    if value <= 0.0 || !value.is_finite() {
        return value;
    }
    let unit = libm::pow(10.0, libm::floor(libm::log10(value)) - 1.0);
    crate::quantity::round_significant(libm::ceil(value / unit - 1e-9) * unit, 3)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn figures_read_well() {
        assert_eq!(time_text(84.6), "85 s");
        assert_eq!(time_text(252.0), "4.2 min");
        assert_eq!(against(2.98, 3.0), "2.98");
        assert_eq!(against(2.6, 3.0), "2.6");
        assert_eq!(bound(1.5), "1.5");
        assert_eq!(rounded_up(6.31), 6.4);
        assert_eq!(rounded_up(0.0201), 0.021);
    }
}

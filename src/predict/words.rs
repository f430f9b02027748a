//! Figures within sentences.

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

/// Without zeros at the end.
pub fn plain(text: String) -> String {
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.').to_owned()
    } else {
        text
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn durations_are_short() {
        assert_eq!(duration(48.7), "49 s");
        assert_eq!(duration(0.5), "0.5 s");
        assert_eq!(duration(2.0), "2 s");
        assert_eq!(duration(218.0), "3.6 min");
    }
}

//! Dates and durations as open-document sheets write them (ISO 8601).

use chrono::{NaiveDate, NaiveDateTime, NaiveTime};

pub(super) fn date(text: &str) -> Option<NaiveDateTime> {
    let text = text.trim().trim_end_matches('Z');
    text.parse::<NaiveDateTime>().ok().or_else(|| {
        text.parse::<NaiveDate>()
            .ok()
            .map(|date| date.and_time(NaiveTime::MIN))
    })
}

/// Seconds of an ISO 8601 duration of days, hours, minutes and seconds: `PT09H05M00S`.
pub(super) fn duration_s(text: &str) -> Option<f64> {
    let mut seconds = 0.0;
    let mut in_time = false;
    let mut number = String::new();
    for letter in text.trim().strip_prefix('P')?.chars() {
        let factor = match letter {
            'T' => {
                in_time = true;
                continue;
            }
            '0'..='9' => {
                number.push(letter);
                continue;
            }
            '.' | ',' => {
                number.push('.');
                continue;
            }
            'D' if !in_time => 86_400.0,
            'H' if in_time => 3600.0,
            'M' if in_time => 60.0,
            'S' if in_time => 1.0,
            _ => return None,
        };
        seconds += number.parse::<f64>().ok()? * factor;
        number.clear();
    }
    number.is_empty().then_some(seconds)
}

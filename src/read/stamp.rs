//! One text as a point in time: date, time of day and offset, before the order of day and month
//! is known.

use chrono::NaiveDate;

/// Microseconds of one second.
pub const MICROSECONDS: i64 = 1_000_000;

/// The date in a text, as far as the text alone tells it.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum DateText {
    /// The order is plain: year first with four digits, or the month is a word.
    Known(NaiveDate),
    /// Three numbers, two digits of year or year last; the sign between them.
    Numbers {
        /// In the order of the text.
        parts: [u16; 3],
        /// Whether the last has four digits.
        long_year: bool,
        /// Sign between them.
        separator: u8,
    },
}

/// What a text says of a point in time.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Stamp {
    /// The date.
    pub date: Option<DateText>,
    /// Time of day or elapsed time, microseconds.
    pub time_us: Option<i64>,
    /// Offset from universal time, minutes.
    pub offset_minutes: Option<i32>,
}

/// Order of the numbers in a date.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum DateOrder {
    /// Day, month, year.
    DayFirst,
    /// Month, day, year.
    MonthFirst,
    /// Year, month, day.
    YearFirst,
}

impl DateOrder {
    /// The word for it in `job.toml`.
    pub fn word(self) -> &'static str {
        match self {
            DateOrder::DayFirst => "dmy",
            DateOrder::MonthFirst => "mdy",
            DateOrder::YearFirst => "ymd",
        }
    }

    /// In words.
    pub fn description(self) -> &'static str {
        match self {
            DateOrder::DayFirst => "day first",
            DateOrder::MonthFirst => "month first",
            DateOrder::YearFirst => "year first",
        }
    }
}

impl DateText {
    /// The date in this order of its numbers; `None` where there is no such date.
    pub fn date(self, order: DateOrder) -> Option<NaiveDate> {
        match self {
            DateText::Known(date) => Some(date),
            DateText::Numbers {
                parts: [a, b, c],
                long_year,
                ..
            } => {
                let (year, month, day) = match order {
                    DateOrder::DayFirst => (c, b, a),
                    DateOrder::MonthFirst => (c, a, b),
                    DateOrder::YearFirst if long_year => return None,
                    DateOrder::YearFirst => (a, b, c),
                };
                let year = if long_year {
                    i32::from(year)
                } else {
                    full_year(year)
                };
                NaiveDate::from_ymd_opt(year, u32::from(month), u32::from(day))
            }
        }
    }
}

/// The year of two digits, within 1970 to 2069: no trend system logged before.
fn full_year(two_digits: u16) -> i32 {
    i32::from(two_digits) + if two_digits < 70 { 2000 } else { 1900 }
}

/// Month of a word in full or shortened: English, and the German, French and Spanish spellings
/// that exports of those locales use.
fn month_of(word: &str) -> Option<u32> {
    const MONTHS: [&str; 12] = [
        "january jan januar janv janvier enero ene",
        "february feb februar fevr févr février febrero",
        "march mar märz mär mrz mars marzo",
        "april apr avr avril abr abril",
        "may mai mayo",
        "june jun juni juin junio",
        "july jul juli juil juillet julio",
        "august aug août aout agosto ago",
        "september sep sept septembre septiembre",
        "october oct oktober okt octobre octubre",
        "november nov novembre noviembre",
        "december dec dezember dez déc décembre diciembre dic",
    ];
    if word.len() < 3 {
        return None;
    }
    let word = word.to_lowercase();
    MONTHS
        .iter()
        .position(|names| names.split(' ').any(|name| name == word))
        .map(|index| index as u32 + 1)
}

/// Offset of a zone word, minutes: universal time, and the abbreviations that RFC 2822 sec. 4.3
/// fixes, with those of Europe, which stand for one offset each.
fn offset_of(word: &str) -> Option<i32> {
    let hours = match word.to_ascii_uppercase().as_str() {
        "Z" | "UTC" | "GMT" | "WET" => 0,
        "CET" | "WEST" => 1,
        "CEST" | "EET" => 2,
        "EEST" => 3,
        "EDT" => -4,
        "EST" | "CDT" => -5,
        "CST" | "MDT" => -6,
        "MST" | "PDT" => -7,
        "PST" => -8,
        _ => return None,
    };
    Some(hours * 60)
}

fn is_weekday(word: &str) -> bool {
    const DAYS: &str = "mon tue wed thu fri sat sun monday tuesday wednesday thursday friday \
        saturday sunday mo di mi do fr sa so montag dienstag mittwoch donnerstag freitag samstag sonntag";
    DAYS.split_whitespace()
        .any(|day| day.eq_ignore_ascii_case(word))
}

/// Where reading stands in a text.
struct Cursor<'a> {
    rest: &'a str,
}

impl<'a> Cursor<'a> {
    fn peek(&self) -> Option<char> {
        self.rest.chars().next()
    }

    fn take(&mut self, wanted: char) -> bool {
        if let Some(rest) = self.rest.strip_prefix(wanted) {
            self.rest = rest;
            true
        } else {
            false
        }
    }

    fn take_while(&mut self, is_wanted: impl Fn(char) -> bool) -> &'a str {
        let end = self
            .rest
            .find(|letter| !is_wanted(letter))
            .unwrap_or(self.rest.len());
        let (taken, rest) = self.rest.split_at(end);
        self.rest = rest;
        taken
    }

    fn digits(&mut self) -> &'a str {
        self.take_while(|letter| letter.is_ascii_digit())
    }

    fn word(&mut self) -> &'a str {
        self.take_while(char::is_alphabetic)
    }
}

/// `2026-03-14T09:05:00.25` and the same with a space: what most exports write, without the detours
/// that the other ways need.
pub(super) fn plain_iso(text: &str) -> Option<Stamp> {
    let bytes = text.as_bytes();
    let digits = |range: std::ops::Range<usize>| {
        bytes.get(range)?.iter().try_fold(0_u32, |value, byte| {
            byte.is_ascii_digit()
                .then(|| value * 10 + u32::from(byte - b'0'))
        })
    };
    let signs = [(4, b'-'), (7, b'-'), (13, b':'), (16, b':')];
    if signs.iter().any(|(at, sign)| bytes.get(*at) != Some(sign)) {
        return None;
    }
    if !matches!(bytes.get(10), Some(b'T' | b' ')) {
        return None;
    }
    let date = NaiveDate::from_ymd_opt(digits(0..4)? as i32, digits(5..7)?, digits(8..10)?)?;
    let mut time_us = clock_us(
        i64::from(digits(11..13)?),
        i64::from(digits(14..16)?),
        i64::from(digits(17..19)?),
    )?;
    match bytes.get(19..)? {
        [] => {}
        [b'.', fraction @ ..] if fraction.iter().all(u8::is_ascii_digit) => {
            time_us += fraction_us(&text[20..])?;
        }
        _ => return None,
    }
    Some(Stamp {
        date: Some(DateText::Known(date)),
        time_us: Some(time_us),
        offset_minutes: None,
    })
}

/// Reads a text as date, time of day or both; `None` where it is neither.
pub fn stamp(text: &str) -> Option<Stamp> {
    if let Some(stamp) = plain_iso(text) {
        return Some(stamp);
    }
    let mut cursor = Cursor { rest: text.trim() };
    let mut stamp = Stamp::default();
    // Day, month and year in words: "14 Mar 2026", "Mar 14, 2026", "14-Mar-26".
    let mut month = None;
    let mut loose: Vec<(u16, usize)> = Vec::new();
    while let Some(letter) = cursor.peek() {
        if letter.is_whitespace() || matches!(letter, ',' | '_') {
            cursor.rest = &cursor.rest[letter.len_utf8()..];
        } else if letter.is_ascii_digit() {
            number_token(&mut cursor, &mut stamp, &mut loose)?;
        } else if letter.is_alphabetic() {
            let word = cursor.word();
            cursor.take('.');
            if matches!(word, "T" | "t") {
                stamp.date?;
            } else if let Some(found) = month_of(word) {
                if month.replace(found).is_some() {
                    return None;
                }
                cursor.take('-');
                cursor.take('/');
            } else {
                word_token(word, &mut stamp)?;
            }
        } else if matches!(letter, '+' | '-' | '\u{2212}') && stamp.time_us.is_some() {
            cursor.rest = &cursor.rest[letter.len_utf8()..];
            let minutes = offset_digits(&mut cursor)?;
            let signed = if letter == '+' { minutes } else { -minutes };
            if stamp.offset_minutes.replace(signed).is_some() {
                return None;
            }
        } else {
            return None;
        }
    }
    if let Some(month) = month {
        let (day, year) = match loose.as_slice() {
            // The year has four digits or stands last.
            [(year, 4), (day, _)] | [(day, _), (year, 4)] => (*day, i32::from(*year)),
            [(day, _), (year, 2)] => (*day, full_year(*year)),
            _ => return None,
        };
        let date = NaiveDate::from_ymd_opt(year, month, u32::from(day))?;
        if stamp.date.replace(DateText::Known(date)).is_some() {
            return None;
        }
    } else if !loose.is_empty() {
        return None;
    }
    (stamp.date.is_some() || stamp.time_us.is_some()).then_some(stamp)
}

/// A token that begins with a digit: a date, a time of day, or a loose number of a date in words.
fn number_token(
    cursor: &mut Cursor<'_>,
    stamp: &mut Stamp,
    loose: &mut Vec<(u16, usize)>,
) -> Option<()> {
    let first = cursor.digits();
    match cursor.peek() {
        Some(':') => {
            let time = time_of_day(first, ':', cursor)?;
            return stamp.time_us.replace(time).is_none().then_some(());
        }
        Some('.') if stamp.date.is_some() && stamp.time_us.is_none() && first.len() <= 2 => {
            stamp.time_us = Some(time_of_day(first, '.', cursor)?);
            return Some(());
        }
        Some(separator @ ('/' | '-' | '.')) if stamp.date.is_none() && first.len() <= 4 => {
            cursor.take(separator);
            if cursor.peek().is_some_and(char::is_alphabetic) {
                loose.push((first.parse().ok()?, first.len()));
                return Some(());
            }
            // "14. Mar 2026"
            if separator == '.' && cursor.peek().is_some_and(char::is_whitespace) {
                loose.push((first.parse().ok()?, first.len()));
                return Some(());
            }
            let second = cursor.digits();
            if !cursor.take(separator) {
                return None;
            }
            let third = cursor.digits();
            // Dates such as "2026.03.14." end with the sign.
            if separator == '.' {
                cursor.take('.');
            }
            stamp.date = Some(numeric_date([first, second, third], separator as u8)?);
            return Some(());
        }
        _ => {}
    }
    match first.len() {
        8 if stamp.date.is_none() => {
            let year = first[..4].parse().ok()?;
            let date =
                NaiveDate::from_ymd_opt(year, first[4..6].parse().ok()?, first[6..].parse().ok()?)?;
            stamp.date = Some(DateText::Known(date));
        }
        4 | 6 if stamp.date.is_some() && stamp.time_us.is_none() => {
            let part = |range| {
                first
                    .get(range)
                    .map_or(Some(0), |text: &str| text.parse().ok())
            };
            let seconds = part(4..6)?;
            let mut time = clock_us(part(0..2)?, part(2..4)?, seconds)?;
            if first.len() == 6 && (cursor.take('.') || cursor.take(',')) {
                time += fraction_us(cursor.digits())?;
            }
            stamp.time_us = Some(time);
        }
        1 | 2 | 4 if loose.len() < 2 => loose.push((first.parse().ok()?, first.len())),
        _ => return None,
    }
    Some(())
}

fn numeric_date(texts: [&str; 3], separator: u8) -> Option<DateText> {
    let mut parts = [0_u16; 3];
    for (part, text) in parts.iter_mut().zip(texts) {
        *part = text.parse().ok()?;
    }
    let short = |text: &str| (1..=2).contains(&text.len());
    match (texts[0].len(), texts[2].len()) {
        (4, _) if short(texts[1]) && short(texts[2]) => NaiveDate::from_ymd_opt(
            i32::from(parts[0]),
            u32::from(parts[1]),
            u32::from(parts[2]),
        )
        .map(DateText::Known),
        (1 | 2, 2 | 4) if short(texts[1]) => Some(DateText::Numbers {
            parts,
            long_year: texts[2].len() == 4,
            separator,
        }),
        _ => None,
    }
}

fn time_of_day(hours: &str, separator: char, cursor: &mut Cursor<'_>) -> Option<i64> {
    cursor.take(separator);
    let minutes = cursor.digits();
    if minutes.len() != 2 {
        return None;
    }
    let mut time = clock_us(hours.parse().ok()?, minutes.parse().ok()?, 0)?;
    if cursor.take(separator) {
        let seconds = cursor.digits();
        if seconds.is_empty() || seconds.len() > 2 {
            return None;
        }
        time = clock_us(
            hours.parse().ok()?,
            minutes.parse().ok()?,
            seconds.parse().ok()?,
        )?;
        if cursor.take('.') || cursor.take(',') {
            time += fraction_us(cursor.digits())?;
        } else if cursor.take(':') {
            // Milliseconds behind a colon: "09:05:00:500".
            let thousandths = cursor.digits();
            if thousandths.len() != 3 {
                return None;
            }
            time += fraction_us(thousandths)?;
        }
    }
    Some(time)
}

pub(super) fn clock_us(hours: i64, minutes: i64, seconds: i64) -> Option<i64> {
    // A leap second is written 60; hours count on in elapsed time.
    if minutes > 59 || seconds > 60 || hours > 100_000 {
        return None;
    }
    Some(((hours * 60 + minutes) * 60 + seconds) * MICROSECONDS)
}

/// Microseconds of the digits behind the decimal sign of the seconds.
pub(super) fn fraction_us(digits: &str) -> Option<i64> {
    let six = digits.bytes().chain(std::iter::repeat(b'0')).take(6);
    let value = six.fold(0, |value, digit| value * 10 + i64::from(digit - b'0'));
    (!digits.is_empty()).then_some(value)
}

fn offset_digits(cursor: &mut Cursor<'_>) -> Option<i32> {
    let first = cursor.digits();
    let (hours, minutes) = match first.len() {
        4 => first.split_at(2),
        1 | 2 if cursor.take(':') => (first, cursor.digits()),
        1 | 2 => (first, "0"),
        _ => return None,
    };
    let (hours, minutes): (i32, i32) = (hours.parse().ok()?, minutes.parse().ok()?);
    (hours <= 14 && minutes < 60).then_some(hours * 60 + minutes)
}

fn word_token(word: &str, stamp: &mut Stamp) -> Option<()> {
    const HALF_DAY_US: i64 = 12 * 3600 * MICROSECONDS;
    let upper = word.to_ascii_uppercase();
    // "a.m." comes as two words.
    if matches!(upper.as_str(), "AM" | "PM" | "A" | "P") {
        let time = stamp.time_us?;
        if !(0..HALF_DAY_US + 3600 * MICROSECONDS).contains(&time) || time < 0 {
            return None;
        }
        let from_twelve = time % HALF_DAY_US;
        stamp.time_us = Some(if upper.starts_with('P') {
            from_twelve + HALF_DAY_US
        } else {
            from_twelve
        });
        return Some(());
    }
    if upper == "M" && stamp.time_us.is_some() {
        return Some(());
    }
    if let Some(offset) = offset_of(word)
        && stamp.time_us.is_some()
    {
        return stamp.offset_minutes.replace(offset).is_none().then_some(());
    }
    (is_weekday(word) || upper == "UHR").then_some(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use chrono::NaiveDateTime;

    fn read(text: &str, order: DateOrder) -> Option<NaiveDateTime> {
        let stamp = stamp(text)?;
        let date = stamp.date?.date(order)?;
        let time = chrono::TimeDelta::microseconds(stamp.time_us.unwrap_or(0));
        Some(date.and_time(chrono::NaiveTime::MIN) + time)
    }

    #[test]
    fn common_ways_to_write_one_moment() {
        let expected = "2026-03-14T09:05:00".parse().ok();
        for text in [
            "2026-03-14T09:05:00",
            "2026-03-14 09:05:00",
            "2026/03/14 09:05",
            "2026-03-14T09:05:00Z",
            "2026-03-14T09:05:00.000+01:00",
            "2026-03-14 09:05:00 UTC",
            "20260314T090500",
            "20260314 0905",
            "14.03.2026 09:05:00",
            "14.3.26 9:05",
            "14.03.2026 09.05.00",
            "14/03/2026 9:05:00 AM",
            "14/03/2026, 09:05",
            "09:05:00 14/03/2026",
            "14-Mar-26 09:05:00",
            "14-MAR-2026 09:05:00.000",
            "14 March 2026 09:05",
            "14. März 2026 09:05",
            "Mar 14, 2026 9:05:00 am",
            "Mar 14 2026 09:05:00",
            "Sat Mar 14 09:05:00 2026",
            "2026-Mar-14 09:05:00",
            "14-03-2026 09:05:00:000",
            "14-03-2026 9:05 a.m.",
        ] {
            assert_eq!(read(text, DateOrder::DayFirst), expected, "{text}");
        }
        assert_eq!(read("3/14/26 9:05 AM", DateOrder::MonthFirst), expected);
        assert_eq!(read("26-03-14 09:05", DateOrder::YearFirst), expected);
        assert_eq!(
            read("3/14/2026 12:05 AM", DateOrder::MonthFirst),
            "2026-03-14T00:05:00".parse().ok()
        );
        assert_eq!(
            read("3/14/2026 12:05:30.25 PM", DateOrder::MonthFirst),
            "2026-03-14T12:05:30.25".parse().ok()
        );
    }

    #[test]
    fn offsets_and_elapsed_times() {
        assert_eq!(
            stamp("2026-03-14T09:05:00-0530").and_then(|s| s.offset_minutes),
            Some(-330)
        );
        assert_eq!(
            stamp("2026-10-25 02:05:00 CEST").and_then(|s| s.offset_minutes),
            Some(120)
        );
        assert_eq!(
            stamp("26:00:01.5").and_then(|s| s.time_us),
            Some(93_601_500_000)
        );
    }

    #[test]
    fn what_is_no_time_is_not_taken_for_one() {
        for text in [
            "",
            "Bad",
            "71.2",
            "1,234",
            "12",
            "TIC-204",
            "TIC-204.PV",
            "14/13",
            "2026-13-01",
            "09:75",
            "13:05 PM",
            "31 Feb 2026",
            "Mar",
            "2026",
            "192.168.0.1",
            "1.2.3.4",
            "-5",
        ] {
            assert_eq!(stamp(text), None, "{text}");
        }
    }
}

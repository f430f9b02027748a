//! The order of day, month and year in a column of dates.

use super::stamp::{DateOrder, DateText};
use crate::notice::{Place, Problem};
use chrono::NaiveDate;

/// Why the order is known where every date has its year first or its month as a word.
pub(super) const PLAIN_ORDER: &str = "the year first or the month as a word";

/// The orders that a date of three numbers can be in.
fn candidates(date: DateText) -> &'static [DateOrder] {
    match date {
        DateText::Known(_) => &[],
        // With points between the numbers the day comes first wherever dates are written so.
        DateText::Numbers {
            separator: b'.', ..
        } => &[DateOrder::DayFirst],
        DateText::Numbers {
            long_year: true, ..
        } => &[DateOrder::DayFirst, DateOrder::MonthFirst],
        DateText::Numbers { .. } => &[
            DateOrder::DayFirst,
            DateOrder::MonthFirst,
            DateOrder::YearFirst,
        ],
    }
}

/// The only order in which the dates of a log that runs over midnight follow each other by days;
/// in every other one they jump by a month or more.
fn continuous(
    orders: &[DateOrder],
    dates: impl Iterator<Item = DateText> + Clone,
) -> Option<DateOrder> {
    const FOLLOWS_DAYS: i64 = 2;
    const JUMPS_DAYS: i64 = 28;
    let largest_step = |order: DateOrder| {
        let mut before: Option<NaiveDate> = None;
        let mut largest = 0;
        for date in dates.clone().filter_map(|date| date.date(order)) {
            if let Some(before) = before {
                largest = largest.max((date - before).num_days().abs());
            }
            before = Some(date);
        }
        largest
    };
    let steps: Vec<(DateOrder, i64)> = orders
        .iter()
        .map(|&order| (order, largest_step(order)))
        .collect();
    let follows: Vec<DateOrder> = steps
        .iter()
        .filter(|(_, step)| (1..=FOLLOWS_DAYS).contains(step))
        .map(|(order, _)| *order)
        .collect();
    let jumps = steps.iter().filter(|(_, step)| *step >= JUMPS_DAYS).count();
    match follows[..] {
        [order] if jumps + 1 == steps.len() => Some(order),
        _ => None,
    }
}

/// The order of day and month in a column, and how it is known.
///
/// `dates` are the dates of three numbers with the row each stands in, `place` names a row of `file`.
///
/// # Errors
/// Where more than one order reads every date, and differently.
pub fn date_order(
    dates: &[(usize, DateText)],
    given: Option<DateOrder>,
    file: &str,
    place: impl Fn(usize) -> Place,
) -> Result<(DateOrder, String), Problem> {
    let Some((_, first)) = dates.first().copied() else {
        return Ok((DateOrder::YearFirst, PLAIN_ORDER.to_owned()));
    };
    if let Some(order) = given {
        return Ok((
            order,
            format!("{} as given in job.toml", order.description()),
        ));
    }
    // A few damaged dates must not rule the right order out: the order that reads most wins.
    let scores: Vec<(DateOrder, usize)> = candidates(first)
        .iter()
        .map(|&order| {
            (
                order,
                dates
                    .iter()
                    .filter(|(_, date)| date.date(order).is_some())
                    .count(),
            )
        })
        .collect();
    let best = scores.iter().map(|(_, count)| *count).max().unwrap_or(0);
    let left: Vec<DateOrder> = scores
        .iter()
        .filter(|(_, count)| *count == best)
        .map(|(order, _)| *order)
        .collect();
    let order = left.first().copied().unwrap_or(DateOrder::DayFirst);
    if scores.len() == 1 {
        return Ok((
            order,
            format!("{} (points between the numbers)", order.description()),
        ));
    }
    if left.len() == 1 {
        return Ok((
            order,
            format!("{} (no other order reads every date)", order.description()),
        ));
    }
    if let Some(order) = continuous(&left, dates.iter().map(|(_, date)| *date)) {
        return Ok((
            order,
            format!(
                "{} (in any other order the dates would jump by weeks)",
                order.description()
            ),
        ));
    }
    for other in &left[1..] {
        if let Some((k, date)) = dates
            .iter()
            .find(|(_, date)| date.date(order) != date.date(*other))
        {
            let reading = |order: DateOrder| {
                date.date(order).map_or_else(String::new, |date| {
                    format!("{} ({})", date.format("%-d %B %Y"), order.description())
                })
            };
            let written = match *date {
                DateText::Numbers {
                    parts: [a, b, c],
                    separator,
                    ..
                } => format!(
                    "{a:02}{sign}{b:02}{sign}{c:02}",
                    sign = char::from(separator)
                ),
                DateText::Known(date) => date.to_string(),
            };
            return Err(Problem::error(
                place(*k),
                format!(
                    "the date {written} reads as {} or as {}, and no other row tells which",
                    reading(order),
                    reading(*other)
                ),
            )
            .hint(format!(
                "add to job.toml: [[log]] with files = [\"{}\"] and dates = \"{}\" or dates = \"{}\"",
                file,
                order.word(),
                other.word()
            )));
        }
    }
    Ok((
        order,
        "day and month are the same number in every date".to_owned(),
    ))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The order found in dates such as `03/04/2026`, or the beginning of the refusal.
    fn order(dates: &[&str]) -> Result<DateOrder, String> {
        let dates: Vec<(usize, DateText)> = dates
            .iter()
            .enumerate()
            .filter_map(|(k, text)| Some((k, super::super::stamp::stamp(text)?.date?)))
            .collect();
        date_order(&dates, None, "a.csv", |row| {
            Place::file("a.csv").row(row + 1)
        })
        .map(|(order, _)| order)
        .map_err(|problem| problem.message)
    }

    #[test]
    fn the_order_is_told_by_what_cannot_be_a_month() {
        assert_eq!(
            order(&["03/04/2026", "14/04/2026"]),
            Ok(DateOrder::DayFirst)
        );
        assert_eq!(
            order(&["03/04/2026", "03/14/2026"]),
            Ok(DateOrder::MonthFirst)
        );
        assert_eq!(order(&["99-03-31"]), Ok(DateOrder::YearFirst));
        assert_eq!(order(&["03.04.2026"]), Ok(DateOrder::DayFirst));
    }

    #[test]
    fn days_that_follow_each_other_tell_the_order() {
        assert_eq!(
            order(&["03/04/2026", "04/04/2026"]),
            Ok(DateOrder::DayFirst)
        );
        assert_eq!(
            order(&["04/03/2026", "04/04/2026"]),
            Ok(DateOrder::MonthFirst)
        );
    }

    #[test]
    fn one_day_alone_does_not_tell() {
        assert_eq!(
            order(&["03/04/2026"]).expect_err("ambiguous"),
            "the date 03/04/2026 reads as 3 April 2026 (day first) or as 4 March 2026 (month first), and no other row tells which"
        );
        assert!(order(&["14-03-26"]).is_err());
    }
}

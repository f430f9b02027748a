//! The cells of one row of the loop schedule, typed, with everything wrong at its place.

use super::headings::HEADINGS;
use super::row::{CellAsRead, Day, LogCell};
use crate::notice::{Place, Problem, nearest};
use crate::quantity::Span;
use crate::read::numbers::{DecimalSign, number};
use crate::read::stamp::{DateText, stamp};
use crate::read::table::{Cell, Row, Table};
use crate::settings::Native;
use crate::trace::Moment;
use chrono::{NaiveDate, NaiveDateTime, NaiveTime, TimeDelta};
use std::collections::BTreeMap;

/// Columns that hold numbers.
pub const NUMERIC: [&str; 20] = [
    "pv low",
    "pv high",
    "op low",
    "op high",
    "d filter",
    "scan s",
    "pv filter s",
    "found p",
    "found i",
    "found d",
    "left p",
    "left i",
    "left d",
    "left pv filter s",
    "target s",
    "allowed deviation",
    "expected load",
    "op move limit",
    "pv scale",
    "pv offset",
];

/// No range, setting or time of a control loop is outside this, whatever its unit.
const PLAUSIBLE: std::ops::RangeInclusive<f64> = 1e-12..=1e12;

/// Reads the cells of one row and gathers what is wrong with them.
pub struct RowReader<'a> {
    pub(super) table: &'a Table,
    pub(super) row: Row<'a>,
    columns: &'a BTreeMap<&'static str, usize>,
    decimal: DecimalSign,
    pub(super) problems: Vec<Problem>,
}

/// Words of an enumerated column with what they mean.
pub(super) type Words<T> = &'static [(&'static str, T)];

impl<'a> RowReader<'a> {
    /// A reader of one row.
    pub fn new(
        table: &'a Table,
        row: Row<'a>,
        columns: &'a BTreeMap<&'static str, usize>,
        decimal: DecimalSign,
    ) -> Self {
        RowReader {
            table,
            row,
            columns,
            decimal,
            problems: Vec::new(),
        }
    }

    pub(super) fn cell(&self, name: &'static str) -> Cell<'a> {
        self.columns
            .get(name)
            .map_or(Cell::Empty, |&column| self.row.cell(column))
    }

    pub(super) fn place(&self, name: &'static str) -> Place {
        let place = self.table.place().row(self.row.number);
        match self.columns.get(name) {
            Some(&column) => place.column(column, Some(name)),
            None => place,
        }
    }

    pub(super) fn wrong(&mut self, name: &'static str, message: impl Into<String>) {
        let problem = Problem::error(self.place(name), message);
        self.problems.push(problem);
    }

    pub(super) fn text(&mut self, name: &'static str) -> Option<String> {
        match self.cell(name) {
            Cell::Empty => None,
            Cell::Error(error) => {
                self.wrong(name, format!("the cell holds the error value {error}"));
                None
            }
            cell => Some(cell.text()),
        }
    }

    pub(super) fn needed<T>(
        &mut self,
        name: &'static str,
        read: impl FnOnce(&mut Self, &'static str) -> Option<T>,
    ) -> Option<T> {
        if self.cell(name).is_empty() {
            self.wrong(name, format!("{name} is blank"));
            return None;
        }
        read(self, name)
    }

    pub(super) fn number(&mut self, name: &'static str) -> Option<f64> {
        let found = match self.cell(name) {
            Cell::Empty => return None,
            Cell::Number(number) if number.is_finite() => Some(number),
            Cell::Text(text) => number(text, self.decimal),
            _ => None,
        };
        if found.is_none() {
            let text = self.cell(name).text();
            let mut problem = Problem::error(
                self.place(name),
                format!("{name} has to be a number, found \"{text}\""),
            );
            // "0.5 s": the unit is the heading's business.
            let figures = text.trim_end_matches(|sign: char| !sign.is_ascii_digit());
            let is_number = [DecimalSign::Point, DecimalSign::Comma]
                .iter()
                .any(|sign| number(figures, *sign).is_some());
            if figures.len() < text.len() && is_number {
                problem.hint = Some(format!("write {figures} alone, in the unit of the heading"));
            }
            self.problems.push(problem);
        }
        let found = found?;
        // Whole numbers of hundreds of figures are typing errors that would fill a page.
        if found != 0.0 && !PLAUSIBLE.contains(&found.abs()) {
            self.wrong(
                name,
                format!("{name} is out of all proportion, found {found:e}"),
            );
            return None;
        }
        Some(found)
    }

    pub(super) fn above_zero(&mut self, name: &'static str) -> Option<f64> {
        let number = self.number(name)?;
        if number <= 0.0 {
            self.wrong(name, format!("{name} has to be above 0, found {number}"));
            return None;
        }
        Some(number)
    }

    pub(super) fn not_below_zero(&mut self, name: &'static str) -> Option<f64> {
        let number = self.number(name)?;
        if number < 0.0 {
            self.wrong(name, format!("{name} must not be below 0, found {number}"));
            return None;
        }
        Some(number)
    }

    pub(super) fn word<T: Copy>(&mut self, name: &'static str, words: Words<T>) -> Option<T> {
        let text = self.text(name)?;
        let evened = super::headings::even(&text);
        let found = words
            .iter()
            .find(|(word, _)| super::headings::even(word) == evened)
            .map(|(_, value)| *value);
        if found.is_none() {
            // The words as the schedule's own drop-down has them.
            let shown = HEADINGS
                .iter()
                .find(|heading| heading.name == name)
                .map_or(&[][..], |heading| heading.words);
            let mut problem = Problem::error(
                self.place(name),
                format!("{name} has to be {}, found \"{text}\"", listed(shown)),
            );
            problem.hint = nearest(&text.to_lowercase(), shown.iter().copied())
                .map(|near| format!("did you mean \"{near}\"?"));
            self.problems.push(problem);
        }
        found
    }

    pub(super) fn day(&mut self, name: &'static str) -> Option<Day> {
        let found = match self.cell(name) {
            Cell::Empty => return None,
            Cell::Date(at) if at.time() == NaiveTime::MIN => Some(Day::Date(at.date())),
            Cell::Date(at) => Some(Day::Moment(at)),
            Cell::Text(text) => iso_day(text),
            _ => None,
        };
        if found.is_none() {
            let text = self.cell(name).text();
            self.wrong(
                name,
                format!("{name} has to be a date such as 2026-03-14, found \"{text}\""),
            );
        }
        found
    }

    /// A cut of a log: date and time of day, or seconds where the log bears no dates.
    pub(super) fn cut(
        &mut self,
        name: &'static str,
        whole_day: fn(Day) -> NaiveDateTime,
    ) -> Option<Moment> {
        match self.cell(name) {
            Cell::Empty => None,
            Cell::Number(seconds) => Some(Moment::Elapsed(seconds)),
            Cell::Duration(seconds) => Some(Moment::Elapsed(seconds)),
            Cell::Text(text) if number(text, self.decimal).is_some() => {
                number(text, self.decimal).map(Moment::Elapsed)
            }
            _ => {
                let text = self.cell(name).text();
                let told = self.problems.len();
                let day = self.day(name);
                if self.problems.len() > told {
                    self.problems.truncate(told);
                    self.wrong(
                        name,
                        format!("{name} has to be a date and time such as 2026-03-14 09:05:00, or seconds where the log has no dates, found \"{text}\""),
                    );
                }
                day.map(|day| Moment::Dated(whole_day(day)))
            }
        }
    }

    pub(super) fn span(
        &mut self,
        low_name: &'static str,
        high_name: &'static str,
        low: Option<f64>,
        high: Option<f64>,
    ) -> Option<Span> {
        let (low, high) = (low?, high?);
        let span = Span::new(low, high).ok();
        if span.is_none() {
            let mut problem = Problem::error(
                self.place(high_name),
                format!(
                    "{high_name} has to be above {low_name}, found {low_name} {low} and {high_name} {high}"
                ),
            );
            problem.hint = (low > high).then(|| "are the two swapped?".to_owned());
            self.problems.push(problem);
        }
        span
    }

    /// P, I and D of one set; `None` where P is blank.
    pub(super) fn native(
        &mut self,
        names: [&'static str; 3],
        warnings: &mut Vec<Problem>,
    ) -> Option<Native> {
        let [p_name, i_name, d_name] = names;
        let p = self.number(p_name);
        let i = self.not_below_zero(i_name);
        let d = self.not_below_zero(d_name);
        let Some(p) = p else {
            if self.cell(p_name).is_empty() && (i.is_some() || d.is_some()) {
                self.wrong(
                    p_name,
                    format!("{p_name} is blank although {i_name} or {d_name} is given"),
                );
            }
            return None;
        };
        // Without P a controller of the parallel form still integrates; no other form acts then.
        let is_parallel = self.cell("form").text().eq_ignore_ascii_case("parallel");
        if p < 0.0 || (p == 0.0 && !is_parallel) {
            self.wrong(
                p_name,
                format!("{p_name} has to be above 0 (the sign is the action's), found {p}"),
            );
            return None;
        }
        if p == 0.0 && d.is_some_and(|d| d > 0.0) {
            self.wrong(
                d_name,
                format!(
                    "{d_name} has no meaning where {p_name} is 0: its filter follows from both"
                ),
            );
            return None;
        }
        if i.is_none() && self.cell(i_name).is_empty() {
            warnings.push(Problem::warning(
                self.place(i_name),
                format!("{i_name} is blank: read as no integral action"),
            ));
        }
        Some(Native {
            p,
            i: i.unwrap_or(0.0),
            d: d.unwrap_or(0.0),
        })
    }

    pub(super) fn log(&mut self, [files, from, to]: [&'static str; 3]) -> Option<LogCell> {
        let from_cut = self.cut(from, Day::begins);
        let to_cut = self.cut(to, Day::ends);
        let in_order = match (from_cut, to_cut) {
            (Some(Moment::Dated(from)), Some(Moment::Dated(to))) => from < to,
            (Some(Moment::Elapsed(from)), Some(Moment::Elapsed(to))) => from < to,
            (Some(_), Some(_)) => false,
            _ => true,
        };
        if !in_order {
            self.wrong(to, format!("{to} is not after {from}"));
        }
        Some(LogCell {
            place: self.place(files),
            files: self.text(files)?,
            from: from_cut,
            to: to_cut,
        })
    }

    pub(super) fn as_read(&self) -> Vec<CellAsRead> {
        (0..self.table.width())
            .map(|column| CellAsRead {
                column,
                heading: self.table.row(0).cell(column).text(),
                value: self.row.cell(column).text(),
            })
            .filter(|cell| !(cell.heading.is_empty() && cell.value.is_empty()))
            .collect()
    }
}

/// Words as a sentence lists them: "load, set point or averaging".
fn listed(words: &[&str]) -> String {
    match words {
        [first @ .., last] if !first.is_empty() => format!("{} or {last}", first.join(", ")),
        _ => words.concat(),
    }
}

/// A date or a moment in ISO form.
fn iso_day(text: &str) -> Option<Day> {
    if let Ok(date) = text.parse::<NaiveDate>() {
        return Some(Day::Date(date));
    }
    let read = stamp(text)?;
    let DateText::Known(date) = read.date? else {
        return None;
    };
    Some(match read.time_us {
        None => Day::Date(date),
        Some(time_us) => {
            Day::Moment(date.and_time(NaiveTime::MIN) + TimeDelta::microseconds(time_us))
        }
    })
}

//! The columns that a loop needs, read in one walk over its table: values, decimal sign, plain moments.
//!
//! What most cells hold, a plain number or a plain date with time of day, is read at once. Any other
//! cell is left for a second look, which knows the decimal sign and can name its place.

use super::LogRule;
use super::clock::{FARTHEST_US, Moments, TimeColumns, microseconds};
use super::delimited::Fields;
use super::extract::Understood;
use super::headings::Role;
use super::numbers::{DecimalSign, Evidence, Plain, Undecided, begins_plain, number, plain};
use super::rows::Rows;
use super::stamp::{DateText, Stamp, clock_us, fraction_us, plain_iso};
use super::table::{Cell, Table, text_cell};
use crate::notice::Problem;
use chrono::NaiveTime;
use std::ops::Range;

/// How many rows are looked at to guess the decimal sign before all are read.
const ROWS_LOOKED_AT: usize = 100;
/// With fewer rows a second thread costs more than it saves.
const ROWS_WORTH_A_THREAD: usize = 50_000;

/// What one walk over a table gave.
pub(super) struct Columns {
    /// Decimal sign of the table.
    pub decimal: DecimalSign,
    values: Vec<Values>,
    moments: Option<Moments>,
    rows: Range<usize>,
}

/// Numbers of a column, one for each row of data; NaN where the cell needs a second look.
struct Values {
    column: usize,
    numbers: Vec<f64>,
}

impl Columns {
    /// The moments of `rows` where every row of data has a plain one.
    pub fn moments(&mut self, rows: &Rows) -> Option<Moments> {
        let moments = self.moments.take()?;
        if *rows == Rows::Run(self.rows.clone()) {
            return Some(moments);
        }
        let first = self.rows.start;
        let t_us = rows.iter().map(|row| moments.t_us[row - first]).collect();
        Some(Moments { t_us, ..moments })
    }

    /// The numbers of a column in `rows`; NaN where the cell needs a second look. A column that the
    /// table holds in just that order is given away, not copied.
    pub fn take(&mut self, column: usize, rows: &Rows) -> Vec<f64> {
        if *rows == Rows::Run(self.rows.clone())
            && let Some(values) = self
                .values
                .iter_mut()
                .find(|values| values.column == column)
        {
            return std::mem::take(&mut values.numbers);
        }
        self.pick(column, rows)
    }

    /// The same, and the column stays: in a long table every signal is in it.
    pub fn pick(&self, column: usize, rows: &Rows) -> Vec<f64> {
        let values = self.values.iter().find(|values| values.column == column);
        let numbers = &values.expect("the column of a value was read").numbers;
        rows.iter()
            .map(|row| numbers[row - self.rows.start])
            .collect()
    }
}

/// What is asked of a walk.
struct Walk<'a> {
    table: &'a Table,
    /// Columns of the values in the order of their roles.
    values: Vec<usize>,
    /// Where one column holds the time.
    time: Option<usize>,
    /// All of them, ascending.
    wanted: Vec<Wanted>,
    /// See [`bad_numbers`].
    bad_numbers: Vec<f64>,
    /// Whether the decimal sign is to be told from the texts.
    is_open: bool,
    decimal: DecimalSign,
}

type Said = Evidence<(usize, usize)>;

/// Reads the columns of a loop.
///
/// # Errors
/// Where the decimal sign cannot be told; `undecided` puts that into words.
pub(super) fn read(
    understood: &Understood<'_>,
    rule: &LogRule,
    undecided: impl Fn(Undecided<(usize, usize)>) -> Problem,
) -> Result<Columns, Problem> {
    let Understood {
        table,
        layout,
        roles,
        ..
    } = understood;
    let mut values: Vec<usize> = Vec::new();
    for role in [Role::Pv, Role::Op, Role::Sp, Role::Value] {
        values.extend(roles.column(role).filter(|column| !values.contains(column)));
    }
    let time = match roles.time {
        TimeColumns::Single(column) => Some(column),
        TimeColumns::Pair { .. } | TimeColumns::Counted { .. } => None,
    };
    let mut columns: Vec<usize> = values.iter().copied().chain(time).collect();
    // What the times of single signals say of the decimal sign is heard as well.
    columns.extend(roles.own_times.values().filter_map(|time| match time {
        TimeColumns::Single(column) => Some(*column),
        TimeColumns::Pair { .. } | TimeColumns::Counted { .. } => None,
    }));
    columns.sort_unstable();
    columns.dedup();
    let wanted = columns.into_iter().map(|column| Wanted {
        column,
        value: values.iter().position(|value| *value == column),
        is_time: time == Some(column),
    });
    let mut walk = Walk {
        table,
        wanted: wanted.collect(),
        values,
        time,
        bad_numbers: bad_numbers(rule),
        is_open: rule.decimal.is_none(),
        decimal: rule.decimal.unwrap_or(DecimalSign::Point),
    };
    let rows = layout.data_start..table.len();
    if walk.is_open {
        let head = rows.start..rows.end.min(rows.start + ROWS_LOOKED_AT);
        walk.decimal = walk
            .head(head)
            .decide(table.delimiter)
            .unwrap_or(walk.decimal);
    }
    loop {
        let (columns, said) = walk.all(rows.clone());
        if !walk.is_open {
            return Ok(columns);
        }
        let decided = said.decide(table.delimiter).map_err(&undecided)?;
        if decided == walk.decimal {
            return Ok(columns);
        }
        // The first rows told it wrong; the second walk cannot, for every text was heard.
        walk.decimal = decided;
        walk.is_open = false;
    }
}

/// Numbers that are, or look like, a text for bad samples: such cells need a second look.
fn bad_numbers(rule: &LogRule) -> Vec<f64> {
    let texts = rule.bad_values.iter();
    texts
        .flat_map(|text| [DecimalSign::Point, DecimalSign::Comma].map(|sign| number(text, sign)))
        .flatten()
        .collect()
}

impl Walk<'_> {
    /// What the texts of some rows say of the decimal sign.
    fn head(&self, rows: Range<usize>) -> Said {
        let mut said = Said::default();
        let heard = self.values.iter().chain(&self.time);
        for (row, &column) in rows.flat_map(|row| heard.clone().map(move |column| (row, column))) {
            if let Cell::Text(text) = self.table.cell(row, column) {
                said.observe(text, || (self.table.row(row).number, column));
            }
        }
        said
    }

    /// Reads all rows, the halves of a long table side by side.
    fn all(&self, rows: Range<usize>) -> (Columns, Said) {
        let count = rows.len();
        let mut numbers: Vec<Vec<f64>> = self.values.iter().map(|_| vec![0.0; count]).collect();
        let mut t_us = vec![0; if self.time.is_some() { count } else { 0 }];
        let half = if count < ROWS_WORTH_A_THREAD {
            count
        } else {
            count / 2
        };
        let (mut first, mut second) = (Vec::new(), Vec::new());
        for numbers in &mut numbers {
            let (head, tail) = numbers.split_at_mut(half);
            first.push(head);
            second.push(tail);
        }
        let (t_first, t_second) = t_us.split_at_mut(if self.time.is_some() { half } else { 0 });
        let middle = rows.start + half;
        let (one, other) = std::thread::scope(|scope| {
            let other = (half < count)
                .then(|| scope.spawn(|| self.part(middle..rows.end, second, t_second)));
            let one = self.part(rows.start..middle, first, t_first);
            let other = other.map(|thread| match thread.join() {
                Ok(part) => part,
                Err(panic) => std::panic::resume_unwind(panic),
            });
            (one, other)
        });
        let mut kinds = vec![one.kind];
        let mut said = one.said;
        if let Some(other) = other {
            kinds.push(other.kind);
            said = said.followed_by(other.said);
        }
        let of_all =
            |kind: PlainTime| self.time.is_some() && kinds.iter().all(|k| *k == Some(kind));
        let moments = if of_all(PlainTime::Text) {
            Some(Moments::of_plain_text(t_us))
        } else if of_all(PlainTime::Date) {
            Some(Moments::of_real_dates(t_us))
        } else {
            None
        };
        let values = self.values.iter().copied().zip(numbers);
        let columns = Columns {
            decimal: self.decimal,
            values: values
                .map(|(column, numbers)| Values { column, numbers })
                .collect(),
            moments,
            rows,
        };
        (columns, said)
    }

    /// Reads some rows into their places.
    fn part(&self, rows: Range<usize>, mut numbers: Vec<&mut [f64]>, t_us: &mut [i64]) -> Part {
        let mut part = Part {
            said: Said::default(),
            kind: None,
        };
        let mut are_plain = self.time.is_some();
        let mut iso = IsoMoments::default();
        let text_cells = self.table.as_text();
        for (k, row) in rows.enumerate() {
            let mut fields = text_cells.map(|cells| cells.fields(row));
            for wanted in &self.wanted {
                let column = wanted.column;
                let found = match &mut fields {
                    Some(fields) => self.in_text(fields, wanted, &mut iso),
                    None => self.in_sheet(self.table.cell(row, column), wanted),
                };
                let is_news = match found.heard {
                    Heard::Nothing => false,
                    Heard::Sign(_) => !part.said.knows(self.decimal),
                    Heard::Text(_) => true,
                };
                if let (true, Heard::Sign(text) | Heard::Text(text)) =
                    (is_news && self.is_open, found.heard)
                {
                    let at = || (self.table.row(row).number, column);
                    part.said
                        .observe(std::str::from_utf8(text).unwrap_or_default(), at);
                }
                if let Some(place) = wanted.value {
                    let is_bad = self.bad_numbers.contains(&found.number);
                    numbers[place][k] = if is_bad { f64::NAN } else { found.number };
                }
                if wanted.is_time {
                    let (t, kind) = found.moment.map_or((0, None), |(t, kind)| (t, Some(kind)));
                    let is_alike = k == 0 || part.kind == kind;
                    are_plain &= kind.is_some() && is_alike && t.abs() <= FARTHEST_US;
                    part.kind = kind;
                    t_us[k] = t;
                }
            }
        }
        if !are_plain {
            part.kind = None;
        }
        part
    }

    /// What the next field of a row of text is, in its column.
    #[inline]
    fn in_text<'t>(
        &self,
        fields: &mut Fields<'t>,
        wanted: &Wanted,
        iso: &mut IsoMoments,
    ) -> Found<'t> {
        if !fields.go_to(wanted.column) {
            return Found::NOTHING;
        }
        let rest = fields.rest();
        if wanted.is_time {
            if let Some((t, length)) = iso.begins(rest)
                && fields.pass(length)
            {
                return Found {
                    moment: Some((t, PlainTime::Text)),
                    ..Found::NOTHING
                };
            }
        } else if fields.delimiter() != self.decimal.sign() as u8
            && let Some(plain) = begins_plain(rest, self.decimal)
            && fields.pass(plain.length)
        {
            return Found::number(plain, rest);
        }
        self.in_sheet(text_cell(fields.take()), wanted)
    }

    /// What a cell is.
    fn in_sheet<'t>(&self, cell: Cell<'t>, wanted: &Wanted) -> Found<'t> {
        match cell {
            Cell::Number(number) if number.is_finite() => Found {
                number,
                ..Found::NOTHING
            },
            Cell::Date(date) if wanted.is_time => Found {
                moment: Some((microseconds(date), PlainTime::Date)),
                ..Found::NOTHING
            },
            Cell::Text(text) => match plain(text, self.decimal) {
                Some(plain) => Found::number(plain, text.as_bytes()),
                None => Found {
                    moment: IsoMoments::default()
                        .begins(text.as_bytes())
                        .filter(|(_, length)| wanted.is_time && *length == text.len())
                        .map(|(t, _)| (t, PlainTime::Text)),
                    heard: Heard::Text(text.as_bytes()),
                    ..Found::NOTHING
                },
            },
            _ => Found::NOTHING,
        }
    }
}

/// A column that is wanted.
struct Wanted {
    column: usize,
    /// Place among the values where it holds one.
    value: Option<usize>,
    is_time: bool,
}

/// What a cell plainly is.
struct Found<'t> {
    /// NaN where it is no plain number.
    number: f64,
    moment: Option<(i64, PlainTime)>,
    heard: Heard<'t>,
}

/// What a cell may say of the decimal sign.
#[derive(Clone, Copy)]
enum Heard<'t> {
    Nothing,
    /// A plain number with the sign that is expected.
    Sign(&'t [u8]),
    /// Any other text.
    Text(&'t [u8]),
}

impl<'t> Found<'t> {
    const NOTHING: Found<'static> = Found {
        number: f64::NAN,
        moment: None,
        heard: Heard::Nothing,
    };

    fn number(plain: Plain, text: &'t [u8]) -> Self {
        Found {
            number: plain.value,
            moment: None,
            heard: if plain.has_sign {
                Heard::Sign(&text[..plain.length])
            } else {
                Heard::Nothing
            },
        }
    }
}

/// How every time of some rows is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum PlainTime {
    /// `2026-03-14T09:05:00`
    Text,
    /// A date of a workbook.
    Date,
}

/// What some rows gave beside their numbers.
struct Part {
    said: Said,
    /// `None` where the times are not all of one plain kind.
    kind: Option<PlainTime>,
}

/// Bytes of a moment up to its seconds.
const SECONDS_END: usize = 19;

/// Reads moments such as `2026-03-14T09:05:00.25` one after the other; the day is worked out where it
/// changes.
#[derive(Default)]
struct IsoMoments {
    day: [u8; 10],
    day_us: i64,
}

impl IsoMoments {
    /// The moment that a text begins with, and the bytes that it takes.
    #[inline]
    fn begins(&mut self, text: &[u8]) -> Option<(i64, usize)> {
        let (day, time) = text.split_first_chunk::<10>()?;
        if *day != self.day {
            let whole = std::str::from_utf8(text.get(..SECONDS_END)?).ok()?;
            let Stamp {
                date: Some(DateText::Known(date)),
                ..
            } = plain_iso(whole)?
            else {
                return None;
            };
            self.day = *day;
            self.day_us = microseconds(date.and_time(NaiveTime::MIN));
        }
        let [b'T' | b' ', h, hh, b':', m, mm, b':', s, ss, rest @ ..] = time else {
            return None;
        };
        let two = |ten: &u8, one: &u8| {
            (ten.is_ascii_digit() && one.is_ascii_digit())
                .then(|| i64::from(ten - b'0') * 10 + i64::from(one - b'0'))
        };
        let time_us = clock_us(two(h, hh)?, two(m, mm)?, two(s, ss)?)?;
        let fraction = match rest {
            [b'.', digits @ ..] => {
                let count = digits
                    .iter()
                    .take_while(|byte| byte.is_ascii_digit())
                    .count();
                std::str::from_utf8(&digits[..count]).ok()?
            }
            _ => return Some((self.day_us + time_us, SECONDS_END)),
        };
        let t = self.day_us + time_us + fraction_us(fraction)?;
        Some((t, SECONDS_END + 1 + fraction.len()))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::read::stamp::stamp;

    #[test]
    fn plain_moments_are_those_of_any_other_way() {
        let mut iso = IsoMoments::default();
        for text in [
            "2026-03-14T09:05:00",
            "2026-03-14 23:59:60.25",
            "2026-03-15 00:00:00.1234567",
            "1999-12-31T23:59:59",
        ] {
            let stamp = stamp(text).expect("a moment");
            let date = stamp
                .date
                .and_then(|date| date.date(crate::read::DateOrder::YearFirst));
            let day = date.expect("a date").and_time(NaiveTime::MIN);
            let expected = microseconds(day) + stamp.time_us.expect("a time of day");
            assert_eq!(
                iso.begins(text.as_bytes()),
                Some((expected, text.len())),
                "{text}"
            );
        }
        for text in [
            "2026-03-14T09:05:00Z",
            "2026-03-14T09:75:00",
            "2026-03-14T09:05:00.",
            "2026-03-14T09:05",
            "2026-02-30T09:05:00",
            "1999-12-31",
            "14.03.2026 09:05:00",
            "",
        ] {
            let begins = iso.begins(text.as_bytes());
            assert!(
                begins.is_none_or(|(_, length)| length < text.len()),
                "{text}"
            );
        }
    }
}

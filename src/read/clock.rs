//! The time column of a log: which way its dates are written, and the moments of its rows.

use super::dates::{PLAIN_ORDER, date_order};
use super::numbers::{DecimalSign, number};
use super::rows::Rows;
use super::stamp::{DateOrder, DateText, MICROSECONDS, Stamp, stamp};
use super::table::{Cell, Table};
use super::units::TimeUnit;
use crate::notice::{Place, Problem};
use chrono::{DateTime, NaiveDate, NaiveDateTime, NaiveTime, Offset, TimeDelta, TimeZone};
use chrono_tz::Tz;

/// Microseconds of a day.
pub const DAY_US: i64 = 86_400 * MICROSECONDS;

/// No log reaches farther from its clock's zero than 2,800 years; differences of moments within it
/// cannot overflow.
pub(super) const FARTHEST_US: i64 = 1_000_000 * DAY_US;

/// In the place of a moment where a row holds no readable time.
pub const NO_TIME: i64 = i64::MIN;

/// Where the time of a row stands.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum TimeColumns {
    /// One column.
    Single(usize),
    /// Date and time of day apart.
    Pair {
        /// Column of the date.
        date: usize,
        /// Column of the time of day.
        time: usize,
    },
    /// No column: rows follow each other at a known interval.
    Counted {
        /// Seconds from row to row.
        interval_s: f64,
    },
}

/// What is known of the clock beside the column itself.
#[derive(Debug, Clone, Copy)]
pub struct ClockRules<'a> {
    /// Heading of the time column, for its place in a text file.
    pub heading: Option<&'a str>,
    /// Order of day and month.
    pub dates: Option<DateOrder>,
    /// Date of the first row, where the log has only times of day.
    pub date: Option<NaiveDate>,
    /// Zone of local time.
    pub zone: Option<Tz>,
    /// Unit of a plain count, from `job.toml` or the heading.
    pub unit: Option<TimeUnit>,
    /// Decimal sign of the file.
    pub decimal: DecimalSign,
}

/// How the moments of a log are to be understood.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Scale {
    /// Local date and time of day; it may jump where summer time changes.
    Local,
    /// Date and time of day that count on evenly, shown as local time of the first row.
    Even,
    /// Time of day alone; it begins again at midnight.
    TimeOfDay {
        /// Whether the date of the first row is known.
        dated: bool,
    },
    /// Elapsed time.
    Elapsed,
}

impl Scale {
    /// Whether the moments have a date.
    pub fn is_dated(self) -> bool {
        !matches!(self, Scale::Elapsed | Scale::TimeOfDay { dated: false })
    }
}

/// The moments of a table's rows.
#[derive(Debug, Clone)]
pub struct Moments {
    /// Per row asked for: microseconds since 1970-01-01 on the shown clock, or elapsed;
    /// [`NO_TIME`] where the row holds no readable time.
    pub t_us: Vec<i64>,
    /// How they are to be understood.
    pub scale: Scale,
    /// How they are written, in words.
    pub format: String,
    /// What was assumed and should be told.
    pub warnings: Vec<Problem>,
    /// What the shown clock is ahead of universal time, microseconds, where the log tells it.
    pub offset_us: Option<i64>,
    /// Order of day and month, where it had to be found.
    pub dates: Option<DateOrder>,
}

impl Moments {
    /// Shows the moments on a clock that is `offset_us` ahead of universal time, where their own offset is
    /// known: a later file goes on with the clock of the first.
    pub fn go_by(&mut self, offset_us: Option<i64>) {
        let (Some(wanted), Some(own)) = (offset_us, self.offset_us) else {
            return;
        };
        for t_us in self.t_us.iter_mut().filter(|t_us| **t_us != NO_TIME) {
            *t_us += wanted - own;
        }
        self.offset_us = Some(wanted);
    }
}

/// One row's time before the whole column is understood.
#[derive(Debug, Clone, Copy, PartialEq)]
enum RowTime {
    Nothing,
    Stamp(Stamp),
    /// A real date of a workbook.
    Cell(NaiveDateTime),
    Number(f64),
}

/// Microseconds since 1970-01-01 of a date and time of day.
pub fn microseconds(at: NaiveDateTime) -> i64 {
    at.and_utc().timestamp_micros()
}

/// The date and time of day of microseconds since 1970-01-01.
pub fn moment(t_us: i64) -> NaiveDateTime {
    DateTime::from_timestamp_micros(t_us)
        .unwrap_or_default()
        .naive_utc()
}

fn row_time(cell: Cell<'_>, decimal: DecimalSign) -> RowTime {
    match cell {
        Cell::Text(text) => match stamp(text) {
            Some(stamp) => RowTime::Stamp(stamp),
            None => number(text, decimal).map_or(RowTime::Nothing, RowTime::Number),
        },
        Cell::Number(number) => RowTime::Number(number),
        Cell::Date(at) => RowTime::Cell(at),
        Cell::Duration(seconds) => RowTime::Stamp(Stamp {
            time_us: Some(libm::round(seconds * 1e6) as i64),
            ..Stamp::default()
        }),
        Cell::Empty | Cell::Boolean(_) | Cell::Error(_) => RowTime::Nothing,
    }
}

/// Day of a serial number of a spreadsheet, 1900 system.
fn serial_us(days: f64) -> i64 {
    const DAYS_TO_1970: f64 = 25_569.0;
    // Rounded to the millisecond: a serial number is no finer.
    (libm::round((days - DAYS_TO_1970) * 86_400.0e3) as i64).saturating_mul(1000)
}

/// Date from one cell and time of day from another.
fn paired(date: RowTime, time: RowTime) -> RowTime {
    let time_us = match time {
        RowTime::Stamp(Stamp {
            date: None,
            time_us: Some(time_us),
            ..
        }) => time_us,
        RowTime::Cell(at) => microseconds(at).rem_euclid(DAY_US),
        RowTime::Number(days) if (0.0..1.0).contains(&days) => {
            libm::round(days * 86_400.0e3) as i64 * 1000
        }
        _ => return RowTime::Nothing,
    };
    let offset_minutes = match time {
        RowTime::Stamp(stamp) => stamp.offset_minutes,
        _ => None,
    };
    let date = match date {
        RowTime::Stamp(Stamp {
            date: Some(date), ..
        }) => date,
        RowTime::Cell(at) => DateText::Known(at.date()),
        RowTime::Number(days) if (20_000.0..80_000.0).contains(&days) => {
            DateText::Known(moment(serial_us(libm::floor(days))).date())
        }
        _ => return RowTime::Nothing,
    };
    RowTime::Stamp(Stamp {
        date: Some(date),
        time_us: Some(time_us),
        offset_minutes,
    })
}

/// Reads the times of `rows` (indices of the table).
///
/// # Errors
/// Where the order of day and month cannot be told, or no row holds a time.
pub fn read(
    table: &Table,
    rows: &Rows,
    columns: TimeColumns,
    rules: &ClockRules<'_>,
) -> Result<Moments, Problem> {
    let column = match columns {
        TimeColumns::Counted { interval_s } => return Ok(counted(rows.len(), interval_s)),
        TimeColumns::Single(column) | TimeColumns::Pair { date: column, .. } => column,
    };
    let times: Vec<RowTime> = rows
        .iter()
        .map(|index| {
            let read = |column| row_time(table.cell(index, column), rules.decimal);
            match columns {
                TimeColumns::Pair { date, time } => paired(read(date), read(time)),
                _ => read(column),
            }
        })
        .collect();
    let place = |k: usize| {
        table
            .place()
            .row(table.row(rows.get(k)).number)
            .column(column, rules.heading)
    };
    let count = |is: fn(&RowTime) -> bool| times.iter().filter(|time| is(time)).count();
    let cells = count(|time| matches!(time, RowTime::Cell(_)));
    let numbers = count(|time| matches!(time, RowTime::Number(_)));
    let dated = count(|time| matches!(time, RowTime::Stamp(Stamp { date: Some(_), .. })));
    let undated = count(|time| matches!(time, RowTime::Stamp(Stamp { date: None, .. })));
    let most = cells.max(numbers).max(dated).max(undated);
    if most == 0 {
        return Err(Problem::error(
            table.place().column(column, rules.heading),
            "no row of this column holds a time",
        )
        .hint("name the time column in the schedule, or give interval_s in a [[log]] table of job.toml"));
    }
    if cells > 0 && dated > 0 {
        let first = times
            .iter()
            .position(|time| matches!(time, RowTime::Stamp(_)))
            .unwrap_or(0);
        return Err(Problem::error(
            place(first),
            format!(
                "{cells} times of this column are real dates and {dated} are text: day and month may have been swapped in those that a spreadsheet recognised"
            ),
        )
        .hint("export again without opening the file in a spreadsheet program"));
    }
    let mut moments = if most == cells {
        real_dates(&times)
    } else if most == dated {
        dates_as_text(table, &times, rules, place)?
    } else if most == undated {
        times_of_day(&times, rules)
    } else {
        plain_numbers(table, column, &times, rules)
    };
    if let TimeColumns::Pair { date, .. } = columns
        && matches!(
            rows.iter().next().map(|index| table.cell(index, date)),
            Some(Cell::Date(_))
        )
    {
        "real dates of the workbook, the time of day in a column beside them"
            .clone_into(&mut moments.format);
    }
    for t_us in &mut moments.t_us {
        if t_us.saturating_abs() > FARTHEST_US {
            *t_us = NO_TIME;
        }
    }
    Ok(moments)
}

/// A log without a clock.
fn counted(rows: usize, interval_s: f64) -> Moments {
    Moments {
        t_us: (0..rows)
            .map(|k| libm::round(k as f64 * interval_s * 1e6) as i64)
            .collect(),
        scale: Scale::Elapsed,
        format: format!("no clock; one row every {interval_s} s as given in job.toml"),
        warnings: Vec::new(),
        offset_us: None,
        dates: None,
    }
}

fn real_dates(times: &[RowTime]) -> Moments {
    let t_us = times.iter().map(|time| match time {
        RowTime::Cell(at) => microseconds(*at),
        _ => NO_TIME,
    });
    Moments::of_real_dates(t_us.collect())
}

impl Moments {
    /// The moments of a workbook's own dates.
    pub(super) fn of_real_dates(t_us: Vec<i64>) -> Self {
        Moments {
            t_us,
            scale: Scale::Local,
            format: "real dates of the workbook".to_owned(),
            warnings: Vec::new(),
            offset_us: None,
            dates: None,
        }
    }

    /// The moments of dates and times of day as text whose order is plain in each.
    pub(super) fn of_plain_text(t_us: Vec<i64>) -> Self {
        Moments {
            t_us,
            scale: Scale::Local,
            format: format!("dates as text, {PLAIN_ORDER}"),
            warnings: Vec::new(),
            offset_us: None,
            dates: None,
        }
    }
}

fn times_of_day(times: &[RowTime], rules: &ClockRules<'_>) -> Moments {
    let base = rules
        .date
        .map_or(0, |date| microseconds(date.and_time(NaiveTime::MIN)));
    let dated = rules.date.is_some();
    Moments {
        t_us: times
            .iter()
            .map(|time| match time {
                RowTime::Stamp(Stamp {
                    date: None,
                    time_us: Some(time_us),
                    ..
                }) => base.saturating_add(*time_us),
                _ => NO_TIME,
            })
            .collect(),
        scale: Scale::TimeOfDay { dated },
        format: if dated {
            "time of day; date of the first row as given in job.toml".to_owned()
        } else {
            "hours, minutes and seconds without a date: counted from the first row".to_owned()
        },
        warnings: Vec::new(),
        offset_us: None,
        dates: None,
    }
}

fn dates_as_text(
    table: &Table,
    times: &[RowTime],
    rules: &ClockRules<'_>,
    place: impl Fn(usize) -> Place,
) -> Result<Moments, Problem> {
    let dates: Vec<(usize, DateText)> = times
        .iter()
        .enumerate()
        .filter_map(|(k, time)| match time {
            RowTime::Stamp(Stamp {
                date: Some(date @ DateText::Numbers { .. }),
                ..
            }) => Some((k, *date)),
            _ => None,
        })
        .collect();
    let (order, why) = date_order(&dates, rules.dates, &table.file, place)?;
    let with_offset = times
        .iter()
        .filter(|time| {
            matches!(
                time,
                RowTime::Stamp(Stamp {
                    offset_minutes: Some(_),
                    ..
                })
            )
        })
        .count();
    let offset_us = |stamp: &Stamp| {
        stamp
            .offset_minutes
            .map(|minutes| i64::from(minutes) * 60 * MICROSECONDS)
    };
    let first_offset_us = times.iter().find_map(|time| match time {
        RowTime::Stamp(stamp) => offset_us(stamp),
        _ => None,
    });
    let moment_of = |time: &RowTime| {
        let RowTime::Stamp(stamp) = time else {
            return None;
        };
        let date = stamp.date?.date(order)?;
        let local = microseconds(date.and_time(NaiveTime::MIN)) + stamp.time_us.unwrap_or(0);
        if with_offset == 0 {
            return Some(local);
        }
        // A row without an offset among rows that have one cannot be placed.
        Some(local - offset_us(stamp)? + first_offset_us?)
    };
    Ok(Moments {
        t_us: times
            .iter()
            .map(|time| moment_of(time).unwrap_or(NO_TIME))
            .collect(),
        scale: if with_offset > 0 {
            Scale::Even
        } else {
            Scale::Local
        },
        format: if with_offset > 0 {
            format!("dates as text with their offset from universal time, {why}")
        } else {
            format!("dates as text, {why}")
        },
        warnings: Vec::new(),
        offset_us: first_offset_us.filter(|_| with_offset > 0),
        dates: (!dates.is_empty()).then_some(order),
    })
}

/// What a column of plain numbers counts.
enum Count {
    Serial,
    Epoch {
        per_second: f64,
        name: &'static str,
    },
    Elapsed(TimeUnit),
    /// Elapsed, and nothing says in what.
    Bare,
}

/// Tells serial dates and epochs by their size: no elapsed time of a log is that large.
fn what_it_counts(values: &[f64], unit: Option<TimeUnit>) -> Count {
    let low = values.iter().copied().fold(f64::INFINITY, f64::min);
    let high = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    // 1979-2103 in each.
    for (per_second, name) in [
        (1.0, "seconds since 1970"),
        (1e3, "milliseconds since 1970"),
        (1e6, "microseconds since 1970"),
        (1e9, "nanoseconds since 1970"),
    ] {
        if low >= 3.0e8 * per_second && high <= 4.2e9 * per_second {
            return Count::Epoch { per_second, name };
        }
    }
    // Days of 1954-2119; a log of one second has steps of 1/86400 there, an elapsed count
    // does not begin beyond 20,000 and then move by fractions.
    let serial = low >= 20_000.0
        && high <= 80_000.0
        && high - low < 366.0
        && values.iter().any(|value| *value != libm::floor(*value));
    match unit {
        Some(unit) if !(serial && unit == TimeUnit::Days) => Count::Elapsed(unit),
        _ if serial => Count::Serial,
        Some(unit) => Count::Elapsed(unit),
        None => Count::Bare,
    }
}

fn plain_numbers(
    table: &Table,
    column: usize,
    times: &[RowTime],
    rules: &ClockRules<'_>,
) -> Moments {
    let values: Vec<f64> = times
        .iter()
        .filter_map(|time| match time {
            RowTime::Number(number) => Some(*number),
            _ => None,
        })
        .collect();
    let count = what_it_counts(&values, rules.unit);
    let mut warnings = Vec::new();
    let mut zone_offset_us = 0;
    let is_epoch = matches!(count, Count::Epoch { .. });
    let (scale, format) = match count {
        Count::Serial => (
            Scale::Local,
            "serial dates of a spreadsheet (days since 1899-12-30, told by the size of the numbers)".to_owned(),
        ),
        Count::Epoch { per_second, name } => {
            let format = match (rules.zone, values.first()) {
                (Some(zone), Some(first)) => {
                    let at = moment(libm::round(first / per_second * 1e6) as i64);
                    let offset = zone.offset_from_utc_datetime(&at).fix();
                    zone_offset_us = i64::from(offset.local_minus_utc()) * MICROSECONDS;
                    format!("{name} (told by the size of the numbers), shown in the time of {zone}")
                }
                _ => format!("{name} (told by the size of the numbers), universal time"),
            };
            (Scale::Even, format)
        }
        Count::Elapsed(unit) => (
            Scale::Elapsed,
            format!(
                "elapsed {}, as the heading or job.toml gives the unit",
                unit.description()
            ),
        ),
        Count::Bare => {
            warnings.push(
                Problem::warning(
                    table.place().column(column, rules.heading),
                    "plain numbers without a unit are taken as elapsed seconds",
                )
                .hint("where that is wrong, give time_unit in a [[log]] table of job.toml"),
            );
            (Scale::Elapsed, "elapsed seconds (no unit given)".to_owned())
        }
    };
    let to_us = |number: f64| match count {
        Count::Serial => serial_us(number),
        Count::Epoch { per_second, .. } => {
            let seconds = libm::floor(number / per_second);
            let rest = number - seconds * per_second;
            seconds as i64 * MICROSECONDS
                + libm::round(rest / per_second * 1e6) as i64
                + zone_offset_us
        }
        Count::Elapsed(unit) => libm::round(number * unit.seconds() * 1e6) as i64,
        Count::Bare => libm::round(number * 1e6) as i64,
    };
    Moments {
        t_us: times
            .iter()
            .map(|time| match time {
                RowTime::Number(number) => to_us(*number),
                _ => NO_TIME,
            })
            .collect(),
        scale,
        format,
        warnings,
        offset_us: is_epoch.then_some(zone_offset_us),
        dates: None,
    }
}

/// Universal time of a local time in a zone; of the two moments that share a local time when
/// summer time ends, the later one where the earlier lies more than `slack_us` before `not_before`.
pub fn universal_us(zone: Tz, local_us: i64, not_before: i64, slack_us: i64) -> Option<i64> {
    let local = moment(local_us);
    match zone.from_local_datetime(&local) {
        chrono::LocalResult::Single(at) => Some(at.timestamp_micros()),
        chrono::LocalResult::Ambiguous(early, late) => {
            let early = early.timestamp_micros();
            Some(if early + slack_us < not_before {
                late.timestamp_micros()
            } else {
                early
            })
        }
        chrono::LocalResult::None => None,
    }
}

/// A moment as messages print it.
pub fn moment_text(t_us: i64, dated: bool) -> String {
    if !dated {
        return format!("{} s", t_us as f64 / 1e6);
    }
    let at = moment(t_us);
    if at.and_utc().timestamp_subsec_micros() == 0 {
        at.format("%Y-%m-%d %H:%M:%S").to_string()
    } else {
        at.format("%Y-%m-%d %H:%M:%S%.3f").to_string()
    }
}

/// `moment` plus seconds.
pub fn later(at: NaiveDateTime, microseconds: i64) -> NaiveDateTime {
    at + TimeDelta::microseconds(microseconds)
}

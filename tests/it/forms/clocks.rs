//! Clocks: every way to write a moment, elapsed time, no clock at all, summer time.

use super::{Files, INTERVAL_S, ROWS, Truth, at, bits, delimited, numbers, start, truth};
use asleft::read::{ColumnNames, DateOrder, LogRule, TimeUnit};
use asleft::trace::Clock;
use chrono::{NaiveDate, NaiveDateTime, TimeDelta};

/// The trace with these times.
fn file(truth: &Truth, heading: &str, time: impl Fn(usize) -> String) -> Files {
    let headings = [
        heading,
        "FIC-301.PV",
        "FIC-301.OP",
        "FIC-301.SP",
        "FIC-301.MODE",
    ];
    Files::one("trend.csv", delimited(&truth.table(&headings, time), ";"))
}

fn holds(truth: &Truth, heading: &str, time: impl Fn(usize) -> String) {
    let form = format!("{heading}: {}", time(0));
    truth.is_in(&file(truth, heading, time).read(), &form);
}

#[test]
fn dates_as_text() {
    let truth = truth();
    for format in [
        "%Y-%m-%d %H:%M:%S",
        "%Y-%m-%dT%H:%M:%S",
        "%Y-%m-%dT%H:%M:%SZ",
        "%Y-%m-%dT%H:%M:%S.000Z",
        "%Y-%m-%dT%H:%M:%S+01:00",
        "%Y-%m-%d %H:%M:%S -0530",
        "%Y-%m-%d %H:%M:%S UTC",
        "%Y-%m-%d %H:%M:%S CET",
        "%Y/%m/%d %H:%M:%S",
        "%Y.%m.%d %H:%M:%S",
        "%Y%m%dT%H%M%S",
        "%Y%m%d %H%M%S",
        // Day first, month first: the fourteenth is no month.
        "%d.%m.%Y %H:%M:%S",
        "%d/%m/%Y %H:%M:%S",
        "%d-%m-%Y %H:%M:%S",
        "%-d.%-m.%Y %-H:%M:%S",
        "%d.%m.%y %H:%M:%S",
        "%m/%d/%Y %H:%M:%S",
        "%m-%d-%Y %H:%M:%S",
        "%-m/%-d/%y %-H:%M:%S",
        "%m/%d/%Y %I:%M:%S %p",
        "%-d/%-m/%Y %-I:%M:%S %P",
        "%d/%m/%Y, %H:%M:%S",
        "%d.%m.%Y %H.%M.%S",
        "%H:%M:%S %d/%m/%Y",
        // The month as a word.
        "%d-%b-%y %H:%M:%S",
        "%d-%b-%Y %H:%M:%S.000",
        "%d %B %Y %H:%M:%S",
        "%b %d, %Y %I:%M:%S %p",
        "%Y-%b-%d %H:%M:%S",
        "%a %b %e %H:%M:%S %Y",
        "%A, %d %B %Y %H:%M:%S",
    ] {
        holds(&truth, "Time", |k| at(k).format(format).to_string());
    }
    for month in ["März", "Mrz", "mars", "marzo"] {
        holds(&truth, "Zeitstempel", |k| {
            at(k)
                .format(&format!("%d. {month} %Y %H:%M:%S"))
                .to_string()
        });
    }
}

#[test]
fn two_digit_years_in_the_order_of_the_job() {
    let truth = truth();
    // Year first with two digits: 26, 14 are days too, so the job has to say it.
    let short = file(&truth, "Time", |k| {
        at(k).format("%y-%m-%d %H:%M:%S").to_string()
    });
    let log = short
        .rule(LogRule {
            dates: Some(DateOrder::YearFirst),
            ..LogRule::default()
        })
        .read();
    truth.is_in(&log, "year first");
    assert_eq!(
        log.sources[0].clock_format,
        "dates as text, year first as given in job.toml"
    );
}

#[test]
fn fractions_of_a_second() {
    let truth = truth();
    // Every other row a quarter second late, the last digit a millisecond.
    let moment =
        |k: usize| at(k) + TimeDelta::milliseconds(if k.is_multiple_of(2) { 0 } else { 251 });
    let expected: Vec<f64> = (0..ROWS)
        .map(|k| (moment(k) - start()).num_milliseconds() as f64 / 1e3)
        .collect();
    for format in [
        "%Y-%m-%dT%H:%M:%S%.3f",
        "%Y-%m-%d %H:%M:%S%.6f",
        "%d.%m.%Y %H:%M:%S,%3f",
        "%d-%m-%Y %H:%M:%S:%3f",
        "%d-%b-%y %I:%M:%S%.3f %p",
    ] {
        let log = file(&truth, "Time", |k| moment(k).format(format).to_string()).read();
        assert_eq!(bits(&log.samples.t_s), bits(&expected), "{format}");
        assert_eq!(bits(&log.samples.pv), bits(&numbers(&truth.pv)), "{format}");
    }
}

#[test]
fn date_and_time_of_day_apart() {
    let truth = truth();
    for (heading, format) in [
        ("Date;Time", "%Y-%m-%d;%H:%M:%S"),
        ("Date;Time", "%d/%m/%Y;%I:%M:%S %p"),
        ("Time;Date", "%H:%M:%S;%d.%m.%Y"),
        ("Datum;Uhrzeit", "%d.%m.%Y;%H:%M:%S"),
    ] {
        holds(&truth, heading, |k| at(k).format(format).to_string());
    }
    // Headings that say nothing: the schedule names both.
    let named = ColumnNames {
        time: Some("Day + Clock".to_owned()),
        ..ColumnNames::default()
    };
    let log = file(&truth, "Day;Clock", |k| {
        at(k).format("%d/%m/%Y;%H:%M:%S").to_string()
    })
    .columns(named)
    .read();
    truth.is_in(&log, "named in the schedule");
}

/// Seconds from 1970, universal time.
fn epoch_s(moment: NaiveDateTime) -> i64 {
    moment.and_utc().timestamp()
}

#[test]
fn counts_of_seconds_and_days() {
    let truth = truth();
    holds(&truth, "Time", |k| epoch_s(at(k)).to_string());
    holds(&truth, "Timestamp", |k| format!("{}.000", epoch_s(at(k))));
    holds(&truth, "Time", |k| format!("{}000", epoch_s(at(k))));
    holds(&truth, "Time (ms)", |k| format!("{}000", epoch_s(at(k))));
    // Days from 1899-12-30 (so that 25569 is 1970-01-01), ten decimals: 9 microseconds.
    holds(&truth, "Time", |k| {
        format!("{:.10}", 25_569.0 + epoch_s(at(k)) as f64 / 86_400.0)
    });
    // Universal time shown as the zone's.
    let zone = LogRule {
        zone: Some(chrono_tz::Europe::Berlin),
        ..LogRule::default()
    };
    let log = file(&truth, "Time", |k| (epoch_s(at(k)) - 3600).to_string())
        .rule(zone)
        .read();
    truth.is_in(&log, "in a zone");
}

/// Holds a log that counts from its own zero.
fn counts(truth: &Truth, files: Files, form: &str) {
    let log = files.read();
    truth.has_values_of(&log, form);
    assert_eq!(log.clock, Clock::Elapsed, "{form}");
}

#[test]
fn elapsed_time() {
    let truth = truth();
    let seconds = |k: usize| INTERVAL_S * k as i64;
    for (heading, per_second) in [
        ("Time (s)", 1.0),
        ("Time [ms]", 1000.0),
        ("Elapsed seconds", 1.0),
        ("t_s", 1.0),
        ("Time (min)", 1.0 / 60.0),
        ("Elapsed minutes", 1.0 / 60.0),
        ("Time, h", 1.0 / 3600.0),
    ] {
        // Nine decimals of an hour are 4 microseconds; the clock is kept to the microsecond.
        let written = |k| format!("{:.10}", seconds(k) as f64 * per_second);
        counts(&truth, file(&truth, heading, written), heading);
    }
    let clock = |k: usize| {
        let s = seconds(k);
        format!("{:02}:{:02}:{:02}", s / 3600, s / 60 % 60, s % 60)
    };
    for heading in ["Elapsed", "Time (hh:mm:ss)", "Time"] {
        counts(&truth, file(&truth, heading, clock), heading);
    }
    // A unit that the heading does not give is the job's.
    let rule = LogRule {
        time_unit: Some(TimeUnit::Minutes),
        ..LogRule::default()
    };
    let minutes = file(&truth, "t", |k| format!("{:.2}", seconds(k) as f64 / 60.0));
    counts(&truth, minutes.rule(rule), "unit of the job");
    let bare = file(&truth, "t", |k| seconds(k).to_string());
    assert_eq!(
        bare.read().warnings[0].to_string(),
        "trend.csv, column \"t\": plain numbers without a unit are taken as elapsed seconds\n    \
         where that is wrong, give time_unit in a [[log]] table of job.toml"
    );
    counts(&truth, bare, "no unit");
}

#[test]
fn no_clock_and_an_interval() {
    let truth = truth();
    let mut rows = truth.plain();
    for row in &mut rows {
        row.remove(0);
    }
    let rule = LogRule {
        interval_s: Some(INTERVAL_S as f64),
        ..LogRule::default()
    };
    let files = Files::one("trend.csv", delimited(&rows, ",")).rule(rule.clone());
    counts(&truth, files, "with headings");
    let named = ColumnNames {
        pv: Some("#1".to_owned()),
        op: Some("#2".to_owned()),
        ..ColumnNames::default()
    };
    let files = Files::one("trend.csv", delimited(&rows[1..], ","))
        .rule(rule)
        .columns(named);
    counts(&truth, files, "without headings");
}

#[test]
fn times_of_day_with_the_date_in_the_job() {
    let truth = truth();
    let rule = LogRule {
        date: Some(start().date()),
        ..LogRule::default()
    };
    let of_day = file(&truth, "Time", |k| at(k).format("%H:%M:%S").to_string());
    truth.is_in(&of_day.rule(rule).read(), "a date for the first row");
    // The same over midnight.
    let late = TimeDelta::hours(14) + TimeDelta::minutes(50);
    let rule = LogRule {
        date: NaiveDate::from_ymd_opt(2026, 3, 14),
        ..LogRule::default()
    };
    let log = file(&truth, "Time", |k| {
        (at(k) + late).format("%H:%M:%S").to_string()
    })
    .rule(rule)
    .read();
    truth.has_values_of(&log, "over midnight");
    assert_eq!(log.clock, Clock::Dated(start() + late));
}

/// The trace with its first row at `from`, on the clock of Berlin: `shift` hours are added from row
/// `row` on.
fn over_a_change(truth: &Truth, from: &str, row: usize, shift: i64) -> Files {
    let from: NaiveDateTime = from.parse().expect("a moment");
    file(truth, "Time", |k| {
        let shown = if k < row { 0 } else { shift };
        let moment = from + TimeDelta::seconds(INTERVAL_S * k as i64) + TimeDelta::hours(shown);
        moment.format("%Y-%m-%d %H:%M:%S").to_string()
    })
}

#[test]
fn summer_time_that_ends_within_the_log() {
    let truth = truth();
    // 03:00 is 02:00 again on 2026-10-25.
    let fold = || over_a_change(&truth, "2026-10-25T02:55:00", 100, -1);
    let log = fold().read();
    truth.has_values_of(&log, "taken as the end of summer time");
    assert_eq!(
        log.sources[0].fold.as_deref(),
        Some(
            "the clock goes back from 2026-10-25 02:59:57 to 2026-10-25 02:00:00: taken as the end of summer time"
        )
    );
    let zone = LogRule {
        zone: Some(chrono_tz::Europe::Berlin),
        ..LogRule::default()
    };
    let log = fold().rule(zone).read();
    truth.has_values_of(&log, "known from the zone");
    assert_eq!(
        log.sources[0].fold.as_deref(),
        Some("summer time of Europe/Berlin ends within the log, at 2026-10-25 02:59:57")
    );
    // The clock goes on as it began.
    assert_eq!(log.sources[0].to.to_string(), "2026-10-25 03:04:57");
}

#[test]
fn summer_time_that_begins_within_the_log() {
    let truth = truth();
    let gap = || over_a_change(&truth, "2026-03-29T01:55:00", 100, 1);
    let zone = LogRule {
        zone: Some(chrono_tz::Europe::Berlin),
        ..LogRule::default()
    };
    truth.has_values_of(&gap().rule(zone).read(), "known from the zone");
    // Without the zone an hour without samples is what the log says; it is told.
    let log = gap().read();
    assert_eq!(log.sources[0].gaps.len(), 1);
    assert_eq!(
        log.sources[0].gaps[0].to_s - log.sources[0].gaps[0].from_s,
        3603.0
    );
}

#[test]
fn offsets_that_change_within_the_log() {
    let truth = truth();
    let from: NaiveDateTime = "2026-10-25T00:55:00".parse().expect("a moment");
    let log = file(&truth, "Time", |k| {
        let universal = from + TimeDelta::seconds(INTERVAL_S * k as i64);
        let (hours, offset) = if k < 100 {
            (2, "+02:00")
        } else {
            (1, "+01:00")
        };
        let shown = universal + TimeDelta::hours(hours);
        format!("{}{offset}", shown.format("%Y-%m-%dT%H:%M:%S"))
    })
    .read();
    truth.has_values_of(&log, "offsets");
    assert_eq!(log.sources[0].fold, None);
    assert_eq!(log.sources[0].to.to_string(), "2026-10-25 03:04:57");
}

/// Two files, one after the other, each with the times that `time` writes.
fn two_files(truth: &Truth, time: impl Fn(usize) -> String) -> Files {
    let headings = [
        "Time",
        "FIC-301.PV",
        "FIC-301.OP",
        "FIC-301.SP",
        "FIC-301.MODE",
    ];
    let rows = truth.table(&headings, time);
    let part =
        |from: usize, to: usize| delimited(&[&rows[..1], &rows[1 + from..1 + to]].concat(), ";");
    Files::new("a.csv; b.csv")
        .with("a.csv", part(0, 100))
        .with("b.csv", part(100, ROWS))
}

#[test]
fn summer_time_that_ends_between_two_files() {
    let truth = truth();
    // 03:00 is 02:00 again on 2026-10-25, a Sunday.
    let from: NaiveDateTime = "2026-10-25T02:55:00".parse().expect("a moment");
    let shown = |k: usize| {
        let back = TimeDelta::hours(if k < 100 { 0 } else { -1 });
        from + TimeDelta::seconds(INTERVAL_S * k as i64) + back
    };
    let plain = |k: usize| shown(k).format("%Y-%m-%d %H:%M:%S").to_string();
    let log = two_files(&truth, plain).read();
    truth.has_values_of(&log, "taken as the end of summer time");
    assert_eq!(
        log.sources[1].fold.as_deref(),
        Some("the clock goes back by an hour after a.csv ends: taken as the end of summer time")
    );
    let zone = LogRule {
        zone: Some(chrono_tz::Europe::Berlin),
        ..LogRule::default()
    };
    let log = two_files(&truth, plain).rule(zone).read();
    truth.has_values_of(&log, "known from the zone");
    let with_offset = |k: usize| {
        let offset = if k < 100 { "+02:00" } else { "+01:00" };
        format!("{}{offset}", shown(k).format("%Y-%m-%dT%H:%M:%S"))
    };
    let log = two_files(&truth, with_offset).read();
    truth.has_values_of(&log, "offsets");
    // The clock of the first file goes on in the second.
    assert_eq!(log.sources[1].from.to_string(), "2026-10-25 03:00:00");
}

#[test]
fn files_that_overlap_by_an_hour_are_no_end_of_summer_time() {
    // A Saturday; of the hour that both hold the later file's samples stand.
    let rows = |from: &str, rows: i64, value: &str| {
        let from: NaiveDateTime = from.parse().expect("a moment");
        let rows: String = (0..rows)
            .map(|k| format!("{};{value};40\n", from + TimeDelta::minutes(k)))
            .collect();
        format!("Time;PV;OP\n{rows}")
    };
    let log = Files::new("a.csv; b.csv")
        .with("a.csv", rows("2026-03-14T08:00:00", 120, "1"))
        .with("b.csv", rows("2026-03-14T09:00:00", 120, "2"))
        .read();
    assert_eq!(log.samples.t_s.len(), 180);
    assert_eq!(log.samples.pv[59..61], [1.0, 2.0]);
    assert_eq!(
        log.warnings[0].to_string(),
        "b.csv: the file begins before a.csv ends; of two samples at one moment the later file's is used"
    );
}

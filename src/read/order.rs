//! Rows in order of time: small disorder sorted, a summer-time fold unfolded, duplicates settled.

use super::clock::{DAY_US, Scale, moment_text, universal_us};
use super::rows::Rows;
use super::stamp::MICROSECONDS;
use crate::notice::{Place, Problem};
use chrono_tz::Tz;

/// Rows this far back belong to a trend system that writes its signals one after another.
const SORTED_BACK_US: i64 = 60 * MICROSECONDS;
const HOUR_US: i64 = 3600 * MICROSECONDS;

/// Rows of one signal in order of time, no two at the same moment.
#[derive(Debug, Clone, Default)]
pub struct Ordered {
    /// Microseconds, strictly increasing.
    pub t_us: Vec<i64>,
    /// Row (as it was handed in) that each moment came from.
    pub rows: Rows,
    /// Rows that stood before an earlier one and were sorted.
    pub sorted_rows: usize,
    /// Rows given up for a later one of the same moment.
    pub duplicates: usize,
    /// The summer-time fold that was unfolded, in words.
    pub fold: Option<String>,
    /// Whether the log stood newest first.
    pub newest_first: bool,
    /// What was added to the moments at the end, microseconds.
    pub shift_us: i64,
    /// What the clock of a known zone is ahead of universal time, microseconds.
    pub offset_us: Option<i64>,
}

/// What an earlier file of the same log ended with.
#[derive(Debug, Clone, Copy, Default)]
pub struct Carried {
    /// What was added to its moments at the end, microseconds.
    pub shift_us: i64,
    /// What its clock is ahead of universal time, microseconds.
    pub offset_us: Option<i64>,
    /// Its last moment, where the clock went back after it.
    pub latest_us: Option<i64>,
}

/// Puts rows in order. `t_us` has one moment per row; `carried` is what an earlier file of the
/// same log ended with; `place` names a row.
///
/// # Errors
/// Where time runs back in a way that nothing explains, or stands in the hour that summer time skips.
pub fn order(
    mut t_us: Vec<i64>,
    scale: Scale,
    zone: Option<Tz>,
    carried: Carried,
    place: impl Fn(usize) -> Place,
) -> Result<Ordered, Problem> {
    let zone = zone.filter(|_| scale == Scale::Local);
    // As nearly every log stands.
    if zone.is_none() && t_us.is_sorted_by(|a, b| a < b) {
        for t in &mut t_us {
            *t += carried.shift_us;
        }
        return Ok(Ordered {
            rows: Rows::Run(0..t_us.len()),
            t_us,
            shift_us: carried.shift_us,
            ..Ordered::default()
        });
    }
    let newest_first = is_newest_first(&t_us, scale);
    let interval = usual_interval(&t_us, newest_first);
    let mut ordered = Ordered {
        newest_first,
        shift_us: carried.shift_us,
        ..Ordered::default()
    };
    let mut first_offset = carried.offset_us.filter(|_| zone.is_some());
    let mut moments: Vec<(i64, u32)> = Vec::with_capacity(t_us.len());
    let mut latest = i64::MIN;
    let mut latest_raw = i64::MIN;
    for k in 0..t_us.len() {
        let row = if newest_first { t_us.len() - 1 - k } else { k };
        let raw = t_us[row];
        let mut t = raw + ordered.shift_us;
        if let Some(zone) = zone {
            let latest = latest.max(carried.latest_us.unwrap_or(i64::MIN));
            let not_before = latest.saturating_sub(first_offset.unwrap_or(0));
            let universal =
                universal_us(zone, raw, not_before, SORTED_BACK_US).ok_or_else(|| {
                    Problem::error(
                        place(row),
                        format!(
                            "{} does not exist in the time of {zone}: summer time skips it",
                            moment_text(raw, true)
                        ),
                    )
                    .hint("correct or remove the zone in the [[log]] table of job.toml")
                })?;
            // The clock goes on as it began: times after the change read as those before it.
            let offset = *first_offset.get_or_insert(raw - universal);
            t = universal + offset;
            if raw < latest_raw.saturating_sub(SORTED_BACK_US)
                && t > latest
                && ordered.fold.is_none()
            {
                ordered.fold = Some(format!(
                    "summer time of {zone} ends within the log, at {}",
                    moment_text(latest_raw, true)
                ));
            }
        }
        let back = latest.saturating_sub(t);
        if latest != i64::MIN && back > 0 {
            if back <= SORTED_BACK_US {
                ordered.sorted_rows += 1;
            } else if zone.is_none() && is_fold(back, interval, scale) && ordered.fold.is_none() {
                ordered.fold = Some(format!(
                    "the clock goes back from {} to {}: taken as the end of summer time",
                    moment_text(latest_raw, scale.is_dated()),
                    moment_text(raw, scale.is_dated())
                ));
                ordered.shift_us += HOUR_US;
                t += HOUR_US;
            } else if matches!(scale, Scale::TimeOfDay { .. }) && back > DAY_US / 2 {
                ordered.shift_us += DAY_US;
                t += DAY_US;
            } else {
                return Err(Problem::error(
                    place(row),
                    format!(
                        "time runs back from {} to {}",
                        moment_text(latest_raw, scale.is_dated()),
                        moment_text(raw, scale.is_dated())
                    ),
                )
                .hint(if scale == Scale::Local && zone.is_none() && back <= HOUR_US {
                    "where summer time ends there, give zone in a [[log]] table of job.toml; else export the test again in order of time"
                } else {
                    "export the test as one trend in order of time"
                }));
            }
        }
        if t >= latest {
            latest = t;
            latest_raw = raw;
        }
        let row = u32::try_from(row).expect("a table holds fewer than 2^32 rows");
        moments.push((t, row));
    }
    ordered.offset_us = first_offset;
    if ordered.sorted_rows > 0 {
        moments.sort_by_key(|(t, _)| *t);
    }
    // Of one moment the last row stands.
    t_us.clear();
    let mut rows: Vec<u32> = Vec::with_capacity(moments.len());
    for (t, row) in moments {
        if t_us.last() == Some(&t) {
            ordered.duplicates += 1;
            rows.pop();
        } else {
            t_us.push(t);
        }
        rows.push(row);
    }
    ordered.t_us = t_us;
    ordered.rows = Rows::Listed(rows);
    Ok(ordered)
}

/// The end of summer time: back by an hour less one interval, give or take one interval. Only a
/// clock that shows local time of day does that.
fn is_fold(back_us: i64, interval_us: i64, scale: Scale) -> bool {
    !matches!(scale, Scale::Even | Scale::Elapsed)
        && (back_us - (HOUR_US - interval_us)).abs() <= interval_us.max(MICROSECONDS)
}

/// Whether rows stand newest first: nearly every step goes back. At midnight a time of day steps the other
/// way, by most of a day.
fn is_newest_first(t_us: &[i64], scale: Scale) -> bool {
    let wraps = matches!(scale, Scale::TimeOfDay { .. });
    let (mut back, mut forth) = (0, 0);
    for pair in t_us.windows(2) {
        let step = pair[1] - pair[0];
        let step = if wraps && step.abs() > DAY_US / 2 {
            -step
        } else {
            step
        };
        back += usize::from(step < 0);
        forth += usize::from(step > 0);
    }
    back > 2 && back > 20 * forth
}

/// Median of the steps forward, microseconds.
fn usual_interval(t_us: &[i64], newest_first: bool) -> i64 {
    let step = |pair: &[i64]| match newest_first {
        false => pair[1] - pair[0],
        true => pair[0] - pair[1],
    };
    let mut steps: Vec<i64> = t_us.windows(2).map(step).filter(|step| *step > 0).collect();
    if steps.is_empty() {
        return MICROSECONDS;
    }
    let middle = steps.len() / 2;
    *steps.select_nth_unstable(middle).1
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::read::clock::microseconds;

    const S: i64 = MICROSECONDS;

    fn run(t_us: &[i64], scale: Scale) -> Result<Ordered, String> {
        order(t_us.to_vec(), scale, None, Carried::default(), |row| {
            Place::file("a.csv").row(row + 1)
        })
        .map_err(|problem| problem.to_string())
    }

    fn at(text: &str) -> i64 {
        microseconds(text.parse().expect("a time"))
    }

    #[test]
    fn small_disorder_is_sorted_and_the_last_duplicate_wins() {
        let ordered = run(&[0, 2 * S, S, 3 * S, 3 * S, 4 * S], Scale::Elapsed).expect("in order");
        assert_eq!(ordered.t_us, [0, S, 2 * S, 3 * S, 4 * S]);
        assert_eq!(ordered.rows, [0, 2, 1, 4, 5].into_iter().collect());
        assert_eq!((ordered.sorted_rows, ordered.duplicates), (1, 1));
    }

    #[test]
    fn a_step_back_that_nothing_explains_is_an_error() {
        let noon = at("2026-03-14T12:00:00");
        let error = run(&[noon, noon + S, noon - 90 * S, noon + 2 * S], Scale::Local)
            .expect_err("a step back");
        assert!(
            error.starts_with(
                "a.csv, line 3: time runs back from 2026-03-14 12:00:01 to 2026-03-14 11:58:30"
            ),
            "{error}"
        );
    }

    /// One row every 10 s for three hours over the end of summer time.
    fn over_the_fold() -> Vec<i64> {
        let two = at("2026-10-25T02:00:00");
        let before = (0..720).map(|k| two - 3600 * S + k * 10 * S);
        let after = (0..720).map(|k| two + k * 10 * S);
        before.chain(after).collect()
    }

    #[test]
    fn a_fold_is_unfolded_with_and_without_the_zone() {
        let local = over_the_fold();
        let guessed = run(&local, Scale::Local).expect("unfolded");
        assert!(guessed.fold.is_some());
        let zone = Some(chrono_tz::Europe::Berlin);
        let known = order(
            local.clone(),
            Scale::Local,
            zone,
            Carried::default(),
            |row| Place::file("a.csv").row(row + 1),
        )
        .expect("unfolded");
        assert!(known.fold.is_some());
        assert_eq!(guessed.t_us, known.t_us);
        assert!(
            known
                .t_us
                .windows(2)
                .all(|pair| pair[1] - pair[0] == 10 * S)
        );
        assert!(run(&local, Scale::Elapsed).is_err());
    }

    #[test]
    fn a_zone_closes_the_gap_of_spring() {
        let local: Vec<i64> = ["01:59:58", "01:59:59", "03:00:00", "03:00:01"]
            .iter()
            .map(|time| at(&format!("2026-03-29T{time}")))
            .collect();
        let berlin = Some(chrono_tz::Europe::Berlin);
        let place = |row| Place::file("a.csv").row(row + 1);
        let ordered = order(
            local.clone(),
            Scale::Local,
            berlin,
            Carried::default(),
            place,
        )
        .expect("in order");
        assert!(ordered.t_us.windows(2).all(|pair| pair[1] - pair[0] == S));
        let skipped = [at("2026-03-29T02:30:00")];
        let problem = order(
            skipped.to_vec(),
            Scale::Local,
            berlin,
            Carried::default(),
            place,
        )
        .expect_err("no such time");
        assert!(
            problem
                .to_string()
                .contains("does not exist in the time of Europe/Berlin")
        );
    }

    #[test]
    fn midnight_and_newest_first() {
        let scale = Scale::TimeOfDay { dated: false };
        let ordered = run(&[DAY_US - S, 0, S], scale).expect("over midnight");
        assert_eq!(ordered.t_us, [DAY_US - S, DAY_US, DAY_US + S]);
        let ordered = run(&[4 * S, 3 * S, 2 * S, S], Scale::Elapsed).expect("turned");
        assert!(ordered.newest_first);
        assert_eq!(ordered.rows, [3, 2, 1, 0].into_iter().collect());
    }
}

//! Files of one loop put together on one clock, with what there is to say of their sampling.

use super::cells::FileSamples;
use super::clock::{Scale, microseconds, moment, moment_text};
use super::extract::FileRead;
use super::order::Carried;
use super::series::Series;
use super::stamp::MICROSECONDS;
use super::table::Table;
use super::values::is_manual;
use super::{LogRead, LogRequest, Source};
use crate::notice::{Place, Problem};
use crate::trace::{Clock, Gap, Moment, Samples, longest_unbroken_s, median};
use chrono::{Datelike, Timelike, Weekday};

const HOUR_US: i64 = 3600 * MICROSECONDS;

/// Intervals that differ from the usual one by more than this part of it are irregular.
const IRREGULAR: f64 = 0.5;
/// With more irregular intervals than this part of them a log is called reported by exception.
const REPORTED_BY_EXCEPTION: f64 = 0.10;
/// Part of the intervals that the jitter covers.
const JITTER_COVERS: f64 = 0.90;

/// Seconds as microseconds.
fn to_us(seconds: f64) -> i64 {
    libm::round(seconds * MICROSECONDS as f64) as i64
}

/// Microseconds as seconds.
fn to_s(t_us: i64) -> f64 {
    t_us as f64 / MICROSECONDS as f64
}

/// First and last microsecond wanted of a file whose moments are `t_us`.
///
/// # Errors
/// Where the cut is of the other kind than the clock, or leaves nothing.
pub(super) fn wanted(
    request: &LogRequest,
    scale: Scale,
    table: &Table,
    t_us: &[i64],
) -> Result<(i64, i64), Problem> {
    let dated = scale.is_dated();
    let one = |cut: Option<Moment>, open: i64| match cut {
        None => Ok(open),
        Some(Moment::Dated(at)) if dated => Ok(microseconds(at)),
        Some(Moment::Elapsed(seconds)) if !dated => Ok(to_us(seconds)),
        Some(cut) => Err(Problem::error(
            table.place(),
            if dated {
                format!("the log bears dates, but it is to be cut at {cut}")
            } else {
                format!("the log counts elapsed seconds, but it is to be cut at {cut}")
            },
        )
        .hint(if dated {
            "give the cut as a date and time of day"
        } else {
            "give the cut as a number of seconds"
        })),
    };
    let range = (one(request.from, i64::MIN)?, one(request.to, i64::MAX)?);
    let is_left = t_us.iter().any(|t| (range.0..=range.1).contains(t));
    // With several files one of them may lie outside the cut as a whole.
    if !is_left && !request.files.contains(';') {
        let (first, last) = (
            t_us.first().copied().unwrap_or_default(),
            t_us.last().copied().unwrap_or_default(),
        );
        return Err(Problem::error(
            table.place(),
            format!(
                "nothing is left within the cut; the log reaches from {} to {}",
                moment_text(first, dated),
                moment_text(last, dated)
            ),
        ));
    }
    Ok(range)
}

/// What the file before this one, which begins at `first_raw`, hands on to it.
pub(super) fn carried(before: Option<&FileRead>, first_raw: i64, in_parts: bool) -> Carried {
    let Some(before) = before else {
        return Carried::default();
    };
    let mut carried = Carried {
        offset_us: before.offset_us,
        ..Carried::default()
    };
    // Files of different signals do not follow each other.
    if before.scale != Scale::Local || in_parts {
        return carried;
    }
    if before.shift_us > 0 && first_raw >= before.last_raw {
        carried.shift_us = before.shift_us;
    } else if before.shift_us == 0 && goes_back(before, first_raw) {
        carried.latest_us = before.samples.t_us.last().copied();
        carried.shift_us = HOUR_US;
    }
    carried
}

/// Whether the clock went back by the hour of summer time between two files: by an hour less an interval,
/// in the small hours of a Sunday, when summer time ends everywhere. Files that merely overlap by an hour
/// are read as they stand.
fn goes_back(before: &FileRead, first_raw: i64) -> bool {
    const SMALL_HOURS: u32 = 4;
    let at = moment(first_raw);
    let interval = to_us(before.source.interval_s).max(MICROSECONDS);
    let back = before.last_raw - first_raw;
    at.weekday() == Weekday::Sun
        && at.hour() < SMALL_HOURS
        && (back - (HOUR_US - interval)).abs() <= interval
}

/// The fold between a file and the one before it, in words.
pub(super) fn fold_between(before: Option<&FileRead>, carried: Carried) -> Option<String> {
    let before = before.filter(|_| carried.latest_us.is_some())?;
    Some(format!(
        "the clock goes back by an hour after {} ends: taken as the end of summer time",
        before.source.file
    ))
}

impl FileRead {
    /// Works out interval, jitter and whether the file was reported by exception.
    pub(super) fn describe_sampling(&mut self) {
        let samples = &self.samples;
        let has_pv = |k: usize| !samples.good[k] || samples.pv[k].is_finite();
        let is_pv = (0..samples.t_us.len()).any(has_pv);
        let t_s = (0..samples.t_us.len())
            .filter(|&k| !is_pv || has_pv(k))
            .map(|k| to_s(samples.t_us[k] - samples.t_us[0]));
        let mut off: Vec<f64> = intervals(t_s);
        let interval = median(&mut off);
        for off in &mut off {
            *off = (*off - interval).abs();
        }
        let irregular = off
            .iter()
            .filter(|off| **off > IRREGULAR * interval)
            .count();
        self.source.interval_s = interval;
        self.source.compressed =
            is_pv && irregular as f64 > REPORTED_BY_EXCEPTION * off.len() as f64;
        let covered = libm::ceil(JITTER_COVERS * off.len() as f64) as usize;
        self.source.jitter_s = covered
            .checked_sub(1)
            .map_or(0.0, |k| *off.select_nth_unstable_by(k, f64::total_cmp).1);
    }
}

/// Stretches without a good sample. Where samples come by exception a long silence means that
/// nothing changed: only one with a bad sample in it is a gap.
fn gaps_of(samples: &FileSamples, zero_us: i64, compressed: bool) -> Vec<Gap> {
    let seconds = |wanted: fn(&FileSamples, usize) -> bool| {
        (0..samples.t_us.len())
            .filter(move |&k| wanted(samples, k))
            .map(move |k| to_s(samples.t_us[k] - zero_us))
    };
    let good = || seconds(|samples, k| samples.good[k] && samples.pv[k].is_finite());
    let limit = longest_unbroken_s(median(&mut intervals(good())));
    let bad: Vec<f64> = seconds(|samples, k| !samples.good[k]).collect();
    good()
        .zip(good().skip(1))
        .filter(|(from_s, to_s)| to_s - from_s > limit)
        .map(|(from_s, to_s)| Gap { from_s, to_s })
        .filter(|gap| {
            let first_inside = bad.partition_point(|t| *t <= gap.from_s);
            !compressed || bad.get(first_inside).is_some_and(|t| *t < gap.to_s)
        })
        .collect()
}

/// Differences of times.
fn intervals(mut t_s: impl Iterator<Item = f64>) -> Vec<f64> {
    let mut before = t_s.next();
    let step = |t: f64| before.replace(t).map_or(0.0, |before| t - before);
    t_s.map(step).collect()
}

fn place(file: &FileRead) -> Place {
    let place = Place::file(&file.source.file);
    match &file.source.sheet {
        Some(sheet) => place.sheet(sheet),
        None => place,
    }
}

/// Whether the clocks of several files go together.
fn check_clocks(files: &[FileRead]) -> Result<(), Problem> {
    let [first, rest @ ..] = files else {
        return Ok(());
    };
    let in_parts = first.series.is_some();
    for other in rest {
        let both_elapsed = first.scale == Scale::Elapsed && other.scale == Scale::Elapsed;
        if !(first.scale.is_dated() && other.scale.is_dated() || in_parts && both_elapsed) {
            return Err(Problem::error(
                place(other),
                "logs without dates cannot be put together: nothing tells how they follow each other",
            )
            .hint("give one file per test"));
        }
        if first.offset_us.is_some() != other.offset_us.is_some() {
            let (with, without) = if first.offset_us.is_some() {
                (first, other)
            } else {
                (other, first)
            };
            return Err(Problem::error(
                place(without),
                format!(
                    "the times are local and those of {} tell their offset from universal time: nothing tells how they follow each other",
                    with.source.file
                ),
            )
            .hint("give zone in a [[log]] table of job.toml for the file with local times"));
        }
    }
    Ok(())
}

/// First and last moment of a signal.
type Span = Option<(i64, i64)>;

/// Files that hold some signals of the loop each, as one: that of the PV with the others' signals, and
/// where the others came from.
fn put_together(
    files: Vec<FileRead>,
    warnings: &mut Vec<Problem>,
) -> Result<(Vec<FileRead>, Vec<Source>), Vec<Problem>> {
    let spans: Vec<_> = files
        .iter()
        .map(|file| {
            file.series.as_ref().map_or((None, None), |series| {
                (series.span_of_pv(), series.span_of_op())
            })
        })
        .collect();
    let is_whole = spans.iter().any(|(pv, op)| pv.is_some() && op.is_some());
    let overlap = |one: (i64, i64), other: (i64, i64)| one.0 <= other.1 && other.0 <= one.1;
    let mut missing = Vec::new();
    for (file, (pv, op)) in files.iter().zip(&spans) {
        let spans_of = |of: fn(&(Span, Span)) -> Span| -> Vec<(i64, i64)> {
            spans.iter().filter_map(of).collect()
        };
        let (own, others, names) = match (pv, op) {
            (Some(pv), None) => (*pv, spans_of(|(_, op)| *op), ["PV", "OP"]),
            (None, Some(op)) => (*op, spans_of(|(pv, _)| *pv), ["OP", "PV"]),
            _ => continue,
        };
        if is_whole || others.is_empty() {
            missing.extend(file.missing.iter().cloned());
        } else if !others.iter().any(|other| overlap(own, *other)) {
            let dated = file.scale.is_dated();
            missing.push(
                Problem::error(
                    place(file),
                    format!(
                        "it holds the {} from {} to {}, and no file of the loop holds the {} at that time",
                        names[0],
                        moment_text(own.0, dated),
                        moment_text(own.1, dated),
                        names[1]
                    ),
                )
                .hint("name files of the same time"),
            );
        }
    }
    if missing.is_empty() && spans.iter().all(|(pv, _)| pv.is_none()) {
        missing.extend(files.iter().flat_map(|file| file.missing.iter().cloned()));
    }
    if !missing.is_empty() {
        return Err(missing);
    }
    if files.iter().any(|file| file.scale == Scale::Elapsed) {
        warnings.push(Problem::warning(
            place(&files[0]),
            "the files bear no date; their times are taken to count from the same moment",
        ));
    }
    let main = spans
        .iter()
        .position(|(pv, _)| pv.is_some())
        .unwrap_or_default();
    let from = files
        .iter()
        .map(|file| file.wanted_from)
        .min()
        .unwrap_or(i64::MIN);
    let mut files = files;
    let series = files
        .iter_mut()
        .filter_map(|file| file.series.take())
        .collect();
    let mut whole = files.remove(main);
    whole.manual_values.extend(
        files
            .iter()
            .flat_map(|file| file.manual_values.iter().cloned()),
    );
    whole.samples = Series::of_files(series).join(from);
    Ok((
        vec![whole],
        files.into_iter().map(|file| file.source).collect(),
    ))
}

/// Puts the files of a loop together.
///
/// # Errors
/// Where their clocks do not go together, or nothing is left.
pub(super) fn join(mut files: Vec<FileRead>) -> Result<LogRead, Vec<Problem>> {
    let one = |problem: Problem| vec![problem];
    check_clocks(&files).map_err(one)?;
    let mut warnings: Vec<Problem> = Vec::new();
    for file in &mut files {
        warnings.append(&mut file.warnings);
    }
    let mut others = Vec::new();
    if files.iter().any(|file| file.series.is_some()) {
        (files, others) = put_together(files, &mut warnings)?;
    }
    files.retain(|file| !file.samples.t_us.is_empty());
    if files.is_empty() {
        return Err(one(Problem::general("nothing is left within the cut")));
    }
    files.sort_by_key(|file| file.samples.t_us[0]);
    for pair in files.windows(2) {
        let end = pair[0].samples.t_us.last().copied().unwrap_or_default();
        if pair[1].samples.t_us[0] <= end {
            warnings.push(Problem::warning(
                place(&pair[1]),
                format!(
                    "the file begins before {} ends; of two samples at one moment the later file's is used",
                    pair[0].source.file
                ),
            ));
        }
    }
    let dated = files[0].scale.is_dated();
    // Elapsed time keeps its own 0, which the schedule's cuts refer to.
    let zero_us = if dated { files[0].samples.t_us[0] } else { 0 };
    for file in &mut files {
        file.source.gaps = gaps_of(&file.samples, zero_us, file.source.compressed);
    }
    let first_place = place(&files[0]);
    let mut samples = match &mut files[..] {
        [file] => one_file(
            std::mem::take(&mut file.samples),
            zero_us,
            &file.manual_values,
        ),
        several => several_files(several, zero_us),
    };
    if samples.sp.iter().all(|sp| sp.is_nan()) {
        samples.sp = Vec::new();
    }
    warn_of_modes(&samples, &first_place, &mut warnings);
    if !samples
        .good
        .iter()
        .zip(&samples.pv)
        .any(|(good, pv)| *good && pv.is_finite())
    {
        return Err(one(no_good_sample(&files[0], first_place)));
    }
    Ok(LogRead {
        clock: if dated {
            Clock::Dated(moment(zero_us))
        } else {
            Clock::Elapsed
        },
        samples,
        sources: files
            .into_iter()
            .map(|file| file.source)
            .chain(others)
            .collect(),
        warnings,
    })
}

/// The samples of the only file, which its columns become.
fn one_file(file: FileSamples, zero_us: i64, manual_values: &[String]) -> Samples {
    let mode = file.mode.unwrap_or_default();
    Samples {
        t_s: file.t_us.into_iter().map(|t| to_s(t - zero_us)).collect(),
        pv: file.pv,
        good: file.good,
        op: file.op,
        sp: file.sp.unwrap_or_default(),
        manual: mode.iter().map(|m| is_manual(m, manual_values)).collect(),
        mode,
    }
}

/// The samples of several files in order of time; of one moment the later file's.
fn several_files(files: &[FileRead], zero_us: i64) -> Samples {
    let mut rows: Vec<(i64, usize, usize)> = Vec::new();
    for (f, file) in files.iter().enumerate() {
        let moments = file.samples.t_us.iter().enumerate();
        rows.extend(moments.map(|(k, t)| (*t, f, k)));
    }
    rows.sort_by_key(|(t, f, _)| (*t, *f));
    // The last of one moment is kept: look from the end.
    rows.reverse();
    rows.dedup_by_key(|(t, _, _)| *t);
    rows.reverse();
    let all_have = |has: fn(&FileSamples) -> bool| files.iter().all(|file| has(&file.samples));
    let has_sp = all_have(|samples| samples.sp.is_some());
    let has_mode = all_have(|samples| samples.mode.is_some());
    let mut samples = Samples::default();
    for &(t_us, f, k) in &rows {
        let file = &files[f].samples;
        samples.t_s.push(to_s(t_us - zero_us));
        samples.pv.push(file.pv[k]);
        samples.good.push(file.good[k]);
        samples.op.push(file.op[k]);
        if has_sp && let Some(sp) = &file.sp {
            samples.sp.push(sp[k]);
        }
        if has_mode && let Some(mode) = &file.mode {
            let is_manual = is_manual(&mode[k], &files[f].manual_values);
            samples.manual.push(is_manual);
            samples.mode.push(mode[k].clone());
        }
    }
    samples
}

/// A mode column none of whose texts means manual: the schedule's words may be missing.
fn warn_of_modes(samples: &Samples, place: &Place, warnings: &mut Vec<Problem>) {
    if samples.mode.is_empty() || samples.manual.iter().any(|manual| *manual) {
        return;
    }
    let known_automatic = [
        "AUTO",
        "AUT",
        "A",
        "AUTOMATIC",
        "CAS",
        "CASCADE",
        "RCAS",
        "C",
    ];
    let mut unknown: Vec<&str> = samples
        .mode
        .iter()
        .map(String::as_str)
        .filter(|mode| {
            !known_automatic
                .iter()
                .any(|word| word.eq_ignore_ascii_case(mode))
        })
        .collect();
    unknown.sort_unstable();
    unknown.dedup();
    if !unknown.is_empty() {
        warnings.push(
            Problem::warning(
                place.clone(),
                format!(
                    "no text of the mode column is known to mean manual; it holds {}",
                    unknown.join(", ")
                ),
            )
            .hint("name those that do under manual_values in a [[log]] table of job.toml"),
        );
    }
}

fn no_good_sample(file: &FileRead, place: Place) -> Problem {
    let causes: Vec<String> = file
        .source
        .bad
        .iter()
        .map(|(cause, count)| format!("{cause}: {count}"))
        .collect();
    Problem::error(
        place,
        format!("the PV has no good sample ({})", causes.join(", ")),
    )
    .hint("compare the unit and range in the schedule with the log, and look at its quality column")
}

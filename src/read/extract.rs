//! From located cells to the samples of one loop.

use super::cells::{CellReader, FileSamples};
use super::clock::{self, ClockRules, Moments, NO_TIME, Scale, TimeColumns};
use super::collect::BadCells;
use super::columns::{self, Columns};
use super::headings::Role;
use super::layout::{self, Layout};
use super::numbers::{DecimalSign, Shape, Undecided, shape};
use super::order::Ordered;
use super::roles::{self, Roles};
use super::rows::Rows;
use super::series::Series;
use super::source::{FileCache, SourceFile};
use super::stamp::{MICROSECONDS, stamp};
use super::table::{Cell, Table};
use super::timed::{not_a_time, rows_of_loop, timed_rows};
use super::tracks::{self, Order, Timed};
use super::{
    DateOrder, FileReference, LogRead, LogRequest, LogRule, Source, TimeUnit, join, units,
};
use crate::notice::{Place, Problem};
use crate::trace::Moment;
use std::collections::BTreeMap;

/// A file that was read, before its samples are joined with those of other files.
#[derive(Debug)]
pub(super) struct FileRead {
    pub samples: FileSamples,
    pub source: Source,
    pub scale: Scale,
    pub manual_values: Vec<String>,
    pub warnings: Vec<Problem>,
    /// Last moment of the file as exported, and what unfolding added to it.
    pub last_raw: i64,
    pub shift_us: i64,
    /// What the clock is ahead of universal time, microseconds, where that is known.
    pub offset_us: Option<i64>,
    /// Its signals, where the files of the loop hold one or some each.
    pub series: Option<Series>,
    /// Why the file alone is no log of the loop.
    pub missing: Vec<Problem>,
    /// First microsecond wanted.
    pub wanted_from: i64,
}

/// A table understood: where its rows and columns are.
pub(super) struct Understood<'a> {
    pub table: &'a Table,
    pub layout: Layout,
    pub roles: Roles,
    /// Whether other files may hold the signals that this table lacks.
    pub partial: bool,
}

pub(super) fn read(
    request: &LogRequest,
    references: &[FileReference],
    cache: &FileCache,
) -> Result<LogRead, Vec<Problem>> {
    let mut problems = Vec::new();
    let mut opened = Vec::new();
    for reference in references {
        match cache.open(&request.root, &reference.file) {
            Ok(file) => opened.push((file, reference)),
            Err(problem) => problems.push(problem),
        }
    }
    let partial = references.len() > 1;
    let mut tables = Vec::new();
    for (file, reference) in &opened {
        let rule = rule_for(&request.rules, &reference.file)
            .cloned()
            .unwrap_or_default();
        match choose_table(request, &rule, file, reference, partial) {
            Ok(understood) => tables.push((file, rule, understood)),
            Err(found) => problems.extend(found),
        }
    }
    let in_parts = partial
        && tables
            .iter()
            .any(|(_, _, understood)| lacks_a_signal(request, understood));
    let mut files: Vec<FileRead> = Vec::new();
    for (file, rule, understood) in &tables {
        let reading = Reading {
            request,
            rule,
            file,
            understood,
        };
        match reading.read(files.last(), in_parts) {
            Ok(file) => files.push(file),
            Err(found) => problems.extend(found),
        }
    }
    if !problems.is_empty() {
        return Err(problems);
    }
    join::join(files)
}

/// Whether a table holds no PV or no OP of the loop.
fn lacks_a_signal(request: &LogRequest, understood: &Understood<'_>) -> bool {
    if !understood.roles.long {
        return !understood.roles.missing.is_empty();
    }
    let rows = rows_of_loop(request, understood);
    let texts = tracks::series_texts(request, understood, &rows);
    texts.is_ok_and(|(_, missing)| !missing.is_empty())
}

pub(super) fn rule_for<'a>(rules: &'a [LogRule], file: &str) -> Option<&'a LogRule> {
    rules.iter().find(|rule| rule.matches(file))
}

/// The table of the file that holds the loop: the sheet named, or the only one that can be read.
pub(super) fn choose_table<'a>(
    request: &LogRequest,
    rule: &LogRule,
    file: &'a SourceFile,
    reference: &FileReference,
    partial: bool,
) -> Result<Understood<'a>, Vec<Problem>> {
    if let Some(sheet) = &reference.sheet {
        let table = file.sheet(sheet).ok_or_else(|| {
            let names: Vec<String> = file.sheets().map(|name| format!("\"{name}\"")).collect();
            vec![Problem::error(
                Place::file(&file.name),
                format!(
                    "there is no sheet \"{sheet}\"; the sheets are {}",
                    names.join(", ")
                ),
            )]
        })?;
        let table = table.map_err(|problem| vec![problem])?;
        return understand(request, rule, table, partial);
    }
    let mut readable = Vec::new();
    let mut refused = Vec::new();
    let tables = file.tables().map_err(|problem| vec![problem])?;
    for table in tables.into_iter().filter(|table| !table.is_empty()) {
        match understand(request, rule, table, partial) {
            Ok(understood) => readable.push(understood),
            Err(problems) => refused.push((table, problems)),
        }
    }
    if readable.len() > 1 {
        let names: Vec<String> = readable
            .iter()
            .map(|understood| understood.table.sheet.clone().unwrap_or_default())
            .collect();
        return Err(vec![
            Problem::error(
                Place::file(&file.name),
                format!(
                    "{} sheets hold this loop: {}",
                    names.len(),
                    names.join(", ")
                ),
            )
            .hint(format!("name one, for example {}#{}", file.name, names[0])),
        ]);
    }
    if let Some(understood) = readable.pop() {
        return Ok(understood);
    }
    // The sheet that came nearest says best what is missing: one that has rows of samples.
    let nearest = refused
        .iter()
        .position(|(table, _)| layout_of(request, rule, table, partial).is_some())
        .unwrap_or(0);
    if refused.is_empty() {
        return Err(vec![Problem::error(
            Place::file(&file.name),
            "the file holds no cells",
        )]);
    }
    Err(refused.swap_remove(nearest).1)
}

fn layout_of(request: &LogRequest, rule: &LogRule, table: &Table, partial: bool) -> Option<Layout> {
    layout::find(
        table,
        &request.columns,
        request.tag.as_deref(),
        rule.interval_s.is_some(),
        partial,
    )
}

fn understand<'a>(
    request: &LogRequest,
    rule: &LogRule,
    table: &'a Table,
    partial: bool,
) -> Result<Understood<'a>, Vec<Problem>> {
    let Some(mut layout) = layout_of(request, rule, table, partial) else {
        return Err(vec![
            Problem::error(table.place(), "no rows of times and numbers were found")
                .hint("a log has one row per sample, with its time and values"),
        ]);
    };
    let wanted = roles::Wanted {
        names: &request.columns,
        tag: request.tag.as_deref(),
        interval_s: rule.interval_s,
        partial,
    };
    let roles = roles::assign(table, &layout, wanted)?;
    begin_at_first_time(table, &mut layout, roles.time);
    Ok(Understood {
        table,
        layout,
        roles,
        partial,
    })
}

/// Rows right below the headings that have a time are data, whatever stands in their other cells:
/// none may be passed over for not looking like a sample.
fn begin_at_first_time(table: &Table, layout: &mut Layout, time: TimeColumns) {
    let (Some(heading_row), TimeColumns::Single(column) | TimeColumns::Pair { time: column, .. }) =
        (layout.heading_row, time)
    else {
        return;
    };
    let has_time = |index: &usize| match table.row(*index).cell(column) {
        Cell::Date(_) | Cell::Duration(_) | Cell::Number(_) => true,
        Cell::Text(text) => stamp(text).is_some() || shape(text) != Shape::NotNumber,
        _ => false,
    };
    if let Some(first) = (heading_row + 1..layout.data_start).find(has_time) {
        layout.data_start = first;
    }
}

fn check_units(request: &LogRequest, understood: &Understood<'_>) -> Result<(), Problem> {
    let converted = request.pv_scale.is_some() || request.pv_offset.is_some();
    for (role, unit, is_converted, hint) in [
        (
            Role::Pv,
            &request.pv_unit,
            converted,
            "give pv scale and pv offset in the schedule (schedule unit = log unit × scale + offset), or the unit and range of the log",
        ),
        (
            Role::Op,
            &request.op_unit,
            false,
            "give op unit, op low and op high in the schedule as the log has them",
        ),
    ] {
        let Some(found) = understood.roles.found(role) else {
            continue;
        };
        if let (Some(in_log), Some(in_schedule), false) = (&found.unit, unit, is_converted)
            && units::differ(in_log, in_schedule)
        {
            let table = understood.table;
            let row = understood.layout.heading_row.unwrap_or(0);
            return Err(Problem::error(
                table
                    .place()
                    .row(table.row(row).number)
                    .column(found.column, Some(&found.heading)),
                format!(
                    "the {} of the log is in {in_log}, that of the schedule in {in_schedule}",
                    role.name()
                ),
            )
            .hint(hint));
        }
    }
    Ok(())
}

/// Reads the columns of the loop, and with them the decimal sign of the table.
fn read_columns(understood: &Understood<'_>, rule: &LogRule) -> Result<Columns, Problem> {
    let table = understood.table;
    let place = |(row, column): (usize, usize)| {
        let heading = &understood.layout.headings[column].text;
        table
            .place()
            .row(row)
            .column(column, (!heading.is_empty()).then_some(heading.as_str()))
    };
    columns::read(understood, rule, |undecided| {
        match undecided {
        Undecided::Either { at, text } => Problem::error(
            place(at),
            format!("\"{text}\" may be a number with decimals or with thousands, and no other cell tells which"),
        )
        .hint(format!(
            "add to job.toml: [[log]] with files = [\"{}\"] and decimal = \".\" or decimal = \",\"",
            table.file
        )),
        Undecided::Both { point, comma } => Problem::error(
            place(comma.0),
            format!(
                "\"{}\" has a decimal comma, but \"{}\" in row {} has a decimal point",
                comma.1, point.1, point.0.0
            ),
        )
        .hint("export again with one decimal sign"),
    }
    })
}

/// One table on its way to samples.
struct Reading<'a> {
    request: &'a LogRequest,
    rule: &'a LogRule,
    file: &'a SourceFile,
    understood: &'a Understood<'a>,
}

impl Reading<'_> {
    fn read(&self, before: Option<&FileRead>, in_parts: bool) -> Result<FileRead, Vec<Problem>> {
        let one = |problem: Problem| vec![problem];
        let Reading {
            request,
            rule,
            file,
            understood,
        } = *self;
        let Understood { table, roles, .. } = understood;
        check_units(request, understood).map_err(one)?;
        let mut columns = read_columns(understood, rule).map_err(one)?;
        let decimal = columns.decimal;
        let mut warnings = Vec::new();
        let rows = rows_of_loop(request, understood);
        if rows.is_empty() {
            return Err(one(Problem::error(
                table.place(),
                format!(
                    "no row bears the tag {}",
                    request.tag.as_deref().unwrap_or_default()
                ),
            )));
        }
        let moments = match columns.moments(&rows) {
            Some(moments) => moments,
            None => self.moments(&rows, roles.time, decimal, rule.dates)?,
        };
        warnings.extend(moments.warnings.iter().cloned());
        let own = self.own_moments(&rows, &moments, decimal, before)?;
        let (rows, mut moments) = timed_rows(understood, rows, moments, &mut warnings)?;
        moments.go_by(before.and_then(|before| before.offset_us));
        let scale = moments.scale;
        let t_us = moments.t_us;
        let row_count = rows.len();
        let first_raw = t_us.iter().copied().min().unwrap_or_default();
        let last_raw = t_us.last().copied().unwrap_or_default();
        let carried = join::carried(before, first_raw, in_parts);
        let order = Order {
            scale,
            rule,
            carried,
        };
        let tracks = tracks::tracks(request, understood, Timed { rows, t_us }, own, order)?;
        let main = &tracks.main().ordered;
        let wanted = join::wanted(request, scale, table, &main.t_us).map_err(one)?;
        let mut told_of_order: Vec<Problem> =
            same_moments(main, table.place()).into_iter().collect();
        if main.newest_first {
            told_of_order.push(Problem::warning(
                table.place(),
                "rows stand newest first and were read from the last",
            ));
        }
        let (duplicates, sorted_rows) = (main.duplicates, main.sorted_rows);
        let (fold, shift_us) = (main.fold.clone(), main.shift_us);
        let offset_us = moments.offset_us.or(main.offset_us);
        let missing = tracks.missing.clone();
        let mut found = roles.found.clone();
        found.extend(tracks.named.iter().cloned());
        let reader = CellReader {
            understood,
            quality: roles.column(Role::Quality),
            decimal,
            rule,
            request,
        };
        let (samples, series) = if in_parts {
            let series = reader.series(&tracks, &mut columns, wanted, &mut warnings)?;
            (series.clone().join(wanted.0), Some(series))
        } else {
            let samples = reader.samples(tracks, &mut columns, wanted, &mut warnings)?;
            (samples, None)
        };
        warnings.extend(told_of_order);
        let dated = |t_us: i64| {
            if scale.is_dated() {
                Moment::Dated(clock::moment(t_us))
            } else {
                Moment::Elapsed(t_us as f64 / MICROSECONDS as f64)
            }
        };
        let source = Source {
            file: file.name.clone(),
            sheet: table.sheet.clone(),
            sha256: file.sha256.clone(),
            rows: row_count,
            samples: samples.good_count(),
            from: dated(samples.t_us.first().copied().unwrap_or_default()),
            to: dated(samples.t_us.last().copied().unwrap_or_default()),
            bad: samples.bad.clone(),
            duplicates,
            sorted_rows,
            fold: fold.or_else(|| join::fold_between(before, carried)),
            interval_s: 0.0,
            jitter_s: 0.0,
            compressed: false,
            gaps: Vec::new(),
            clock_format: moments.format,
            decimal,
            roles: found,
        };
        let mut read = FileRead {
            samples,
            source,
            scale,
            manual_values: rule.manual_values.clone(),
            warnings,
            last_raw,
            shift_us,
            offset_us,
            series,
            missing,
            wanted_from: wanted.0,
        };
        read.describe_sampling();
        Ok(read)
    }

    /// The moments of rows by one time column. `dates` is the order of day and month where it is known.
    fn moments(
        &self,
        rows: &Rows,
        time: TimeColumns,
        decimal: DecimalSign,
        dates: Option<DateOrder>,
    ) -> Result<Moments, Vec<Problem>> {
        let column = match time {
            TimeColumns::Single(column) | TimeColumns::Pair { date: column, .. } => Some(column),
            TimeColumns::Counted { .. } => None,
        };
        let found = self
            .understood
            .roles
            .found
            .iter()
            .find(|found| found.role == Role::Time && Some(found.column) == column);
        let rules = ClockRules {
            heading: found
                .map(|found| found.heading.as_str())
                .filter(|heading| !heading.is_empty()),
            dates,
            date: self.rule.date,
            zone: self.rule.zone,
            unit: self.rule.time_unit.or(found
                .and_then(|found| found.unit.as_deref())
                .and_then(TimeUnit::of)),
            decimal,
        };
        clock::read(self.understood.table, rows, time, &rules).map_err(|problem| vec![problem])
    }

    /// Rows and times of the signals that have a time column of their own.
    fn own_moments(
        &self,
        rows: &Rows,
        main: &Moments,
        decimal: DecimalSign,
        before: Option<&FileRead>,
    ) -> Result<BTreeMap<Role, Timed>, Vec<Problem>> {
        let table = self.understood.table;
        let roles = &self.understood.roles;
        let mut own = BTreeMap::new();
        for (&role, &time) in &roles.own_times {
            let (TimeColumns::Single(column) | TimeColumns::Pair { date: column, .. }) = time
            else {
                continue;
            };
            let is_filled = |index: &usize| !table.cell(*index, column).is_empty();
            let rows: Rows = rows.iter().filter(is_filled).collect();
            let dates = self.rule.dates.or(main.dates);
            let mut moments = self.moments(&rows, time, decimal, dates)?;
            if moments.scale != main.scale
                || moments.offset_us.is_some() != main.offset_us.is_some()
            {
                return Err(vec![
                    Problem::error(
                        table
                            .place()
                            .column(column, Some(&self.understood.layout.headings[column].text)),
                        format!(
                            "the times of the {} are {}, those of the other signals {}",
                            role.name(),
                            moments.format,
                            main.format
                        ),
                    )
                    .hint("export all signals with one kind of clock"),
                ]);
            }
            moments.go_by(
                before
                    .and_then(|before| before.offset_us)
                    .or(main.offset_us),
            );
            let mut bad = BadCells::default();
            for (index, moment) in rows.iter().zip(&moments.t_us) {
                if *moment == NO_TIME {
                    bad.add(|| not_a_time(self.understood, index, column));
                }
            }
            bad.finish(table.place())?;
            let t_us = moments.t_us;
            own.insert(role, Timed { rows, t_us });
        }
        Ok(own)
    }
}

/// Rows lost to a clock coarser than the rows: more of them than the few that a trend writes twice.
fn same_moments(main: &Ordered, place: Place) -> Option<Problem> {
    let rows = main.t_us.len() + main.duplicates;
    (main.duplicates * 20 > rows).then(|| {
        Problem::warning(
            place,
            format!(
                "{} of {rows} rows bear the same time as another row; of each time the last row alone is used",
                main.duplicates
            ),
        )
        .hint("export the times with seconds and their fractions; a spreadsheet that saves a csv may drop them")
    })
}

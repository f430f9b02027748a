//! From located cells to the samples of one loop.

use super::cells::{CellReader, FileSamples};
use super::clock::{self, ClockRules, Moments, Scale, TimeColumns};
use super::collect::BadCells;
use super::headings::{Owner, Role, meaning, squash};
use super::layout::{self, Layout};
use super::numbers::{DecimalSign, Evidence, Shape, Undecided, shape};
use super::order::Ordered;
use super::roles::{self, Roles};
use super::source::{FileCache, SourceFile};
use super::stamp::{MICROSECONDS, stamp};
use super::table::{Cell, Table};
use super::tracks::tracks;
use super::{FileReference, LogRead, LogRequest, LogRule, Source, TimeUnit, join, units};
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
}

/// A table understood: where its rows and columns are.
pub(super) struct Understood<'a> {
    pub table: &'a Table,
    pub layout: Layout,
    pub roles: Roles,
}

pub(super) fn read(
    request: &LogRequest,
    references: &[FileReference],
    cache: &FileCache,
) -> Result<LogRead, Vec<Problem>> {
    let mut files: Vec<FileRead> = Vec::new();
    let mut problems = Vec::new();
    for reference in references {
        match read_file(request, reference, cache, files.last()) {
            Ok(file) => files.push(file),
            Err(found) => problems.extend(found),
        }
    }
    if !problems.is_empty() {
        return Err(problems);
    }
    join::join(files)
}

pub(super) fn rule_for<'a>(rules: &'a [LogRule], file: &str) -> Option<&'a LogRule> {
    rules.iter().find(|rule| rule.matches(file))
}

fn read_file(
    request: &LogRequest,
    reference: &FileReference,
    cache: &FileCache,
    before: Option<&FileRead>,
) -> Result<FileRead, Vec<Problem>> {
    let one = |problem: Problem| vec![problem];
    let file = cache.open(&request.root, &reference.file).map_err(one)?;
    let rule = rule_for(&request.rules, &reference.file)
        .cloned()
        .unwrap_or_default();
    let understood = choose_table(request, &rule, &file, reference)?;
    check_units(request, &understood).map_err(one)?;
    let decimal = decimal_sign(&understood, &rule).map_err(one)?;
    read_table(request, &rule, &file, &understood, decimal, before)
}

/// The table of the file that holds the loop: the sheet named, or the only one that can be read.
pub(super) fn choose_table<'a>(
    request: &LogRequest,
    rule: &LogRule,
    file: &'a SourceFile,
    reference: &FileReference,
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
        return understand(request, rule, table);
    }
    let mut readable = Vec::new();
    let mut refused = Vec::new();
    let tables = file.tables().map_err(|problem| vec![problem])?;
    for table in tables.into_iter().filter(|table| !table.is_empty()) {
        match understand(request, rule, table) {
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
        .position(|(table, _)| layout_of(request, rule, table).is_some())
        .unwrap_or(0);
    if refused.is_empty() {
        return Err(vec![Problem::error(
            Place::file(&file.name),
            "the file holds no cells",
        )]);
    }
    Err(refused.swap_remove(nearest).1)
}

fn layout_of(request: &LogRequest, rule: &LogRule, table: &Table) -> Option<Layout> {
    layout::find(
        table,
        &request.columns,
        request.tag.as_deref(),
        rule.interval_s.is_some(),
    )
}

fn understand<'a>(
    request: &LogRequest,
    rule: &LogRule,
    table: &'a Table,
) -> Result<Understood<'a>, Vec<Problem>> {
    let Some(mut layout) = layout_of(request, rule, table) else {
        return Err(vec![
            Problem::error(table.place(), "no rows of times and numbers were found")
                .hint("a log has one row per sample, with its time and values"),
        ]);
    };
    let tag = request.tag.as_deref();
    let roles = roles::assign(table, &layout, &request.columns, tag, rule.interval_s)?;
    begin_at_first_time(table, &mut layout, roles.time);
    Ok(Understood {
        table,
        layout,
        roles,
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

/// The decimal sign of a table: as given, or as its numbers say.
pub(super) fn decimal_sign(
    understood: &Understood<'_>,
    rule: &LogRule,
) -> Result<DecimalSign, Problem> {
    if let Some(decimal) = rule.decimal {
        return Ok(decimal);
    }
    let table = understood.table;
    let mut columns: Vec<usize> = [Role::Pv, Role::Op, Role::Sp, Role::Value]
        .into_iter()
        .filter_map(|role| understood.roles.column(role))
        .collect();
    if let TimeColumns::Single(time) = understood.roles.time {
        columns.push(time);
    }
    columns.sort_unstable();
    columns.dedup();
    let mut cells = vec![Cell::Empty; columns.len()];
    let mut evidence: Evidence<(usize, usize)> = Evidence::default();
    for index in understood.layout.data_start..table.len() {
        table.pick(index, &columns, &mut cells);
        for (cell, &column) in cells.iter().zip(&columns) {
            if let Cell::Text(text) = cell {
                evidence.observe(text, || (table.row(index).number, column));
            }
        }
        if evidence.is_full() {
            break;
        }
    }
    let place = |(row, column): (usize, usize)| {
        let heading = &understood.layout.headings[column].text;
        table
            .place()
            .row(row)
            .column(column, (!heading.is_empty()).then_some(heading.as_str()))
    };
    evidence.decide(table.delimiter).map_err(|undecided| match undecided {
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
    })
}

fn read_table(
    request: &LogRequest,
    rule: &LogRule,
    file: &SourceFile,
    understood: &Understood<'_>,
    decimal: DecimalSign,
    before: Option<&FileRead>,
) -> Result<FileRead, Vec<Problem>> {
    let one = |problem: Problem| vec![problem];
    let Understood { table, roles, .. } = understood;
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
    let heading_unit = roles
        .found(Role::Time)
        .and_then(|found| found.unit.as_deref())
        .and_then(TimeUnit::of);
    let clock_rules = ClockRules {
        heading: roles
            .found(Role::Time)
            .map(|found| found.heading.as_str())
            .filter(|heading| !heading.is_empty()),
        dates: rule.dates,
        date: rule.date,
        zone: rule.zone,
        unit: rule.time_unit.or(heading_unit),
        decimal,
    };
    let moments = clock::read(table, &rows, roles.time, &clock_rules).map_err(one)?;
    warnings.extend(moments.warnings.iter().cloned());
    let (rows, moments) = timed_rows(understood, rows, moments, &mut warnings)?;
    let scale = moments.scale;
    let t_us: Vec<i64> = moments.t_us.iter().map(|t| t.unwrap_or_default()).collect();
    let first_raw = t_us.iter().copied().min().unwrap_or_default();
    let last_raw = t_us.last().copied().unwrap_or_default();
    let shift_us = join::carried_shift(before, first_raw);
    let tracks = tracks(request, rule, understood, &rows, &t_us, scale, shift_us)?;
    let main = &tracks.pv.ordered;
    let wanted = join::wanted(request, scale, table, &main.t_us).map_err(one)?;
    let reader = CellReader {
        understood,
        decimal,
        rule,
        request,
    };
    let samples = reader.samples(&tracks, wanted, &mut warnings)?;
    warnings.extend(same_moments(main, table.place()));
    if main.newest_first {
        warnings.push(Problem::warning(
            table.place(),
            "rows stand newest first and were read from the last",
        ));
    }
    let mut found = roles.found.clone();
    found.extend(tracks.named.iter().cloned());
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
        rows: rows.len(),
        samples: samples.good_count(),
        from: dated(samples.t_us.first().copied().unwrap_or_default()),
        to: dated(samples.t_us.last().copied().unwrap_or_default()),
        bad: samples.bad_by_cause(),
        duplicates: main.duplicates,
        sorted_rows: main.sorted_rows,
        fold: main.fold.clone(),
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
        shift_us: main.shift_us,
    };
    read.describe_sampling();
    Ok(read)
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

/// Rows of data that belong to the loop: all of them, or those that bear its tag.
fn rows_of_loop(request: &LogRequest, understood: &Understood<'_>) -> Vec<usize> {
    let Understood {
        table,
        layout,
        roles,
    } = understood;
    let all = layout.data_start..table.len();
    let Some(column) = roles.column(Role::Tag) else {
        return all.collect();
    };
    let mut known: BTreeMap<String, bool> = BTreeMap::new();
    all.filter(|&index| {
        let text = table.row(index).cell(column).text();
        if let Some(belongs) = known.get(&text) {
            return *belongs;
        }
        let named = [
            &request.columns.pv,
            &request.columns.op,
            &request.columns.sp,
            &request.columns.mode,
        ]
        .into_iter()
        .flatten()
        .any(|name| squash(name) == squash(&text));
        let belongs = named
            || match meaning(&text, request.tag.as_deref()).owner {
                Owner::This => true,
                Owner::Nobody => roles.long,
                Owner::Other(_) => request.tag.is_none(),
            };
        known.insert(text, belongs);
        belongs
    })
    .collect()
}

/// Leaves out rows without a time: lines of text below the data are no samples, a value without a
/// time is an error.
fn timed_rows(
    understood: &Understood<'_>,
    rows: Vec<usize>,
    moments: Moments,
    warnings: &mut Vec<Problem>,
) -> Result<(Vec<usize>, Moments), Vec<Problem>> {
    if moments.t_us.iter().all(Option::is_some) {
        return Ok((rows, moments));
    }
    let Understood { table, roles, .. } = understood;
    let time_column = match roles.time {
        TimeColumns::Single(column) | TimeColumns::Pair { date: column, .. } => column,
        TimeColumns::Counted { .. } => 0,
    };
    let heading = &understood.layout.headings[time_column].text;
    let values: Vec<usize> = [Role::Pv, Role::Op, Role::Value]
        .into_iter()
        .filter_map(|role| roles.column(role))
        .collect();
    let mut bad = BadCells::default();
    let mut left_out = 0;
    let mut kept_rows = Vec::with_capacity(rows.len());
    let mut kept_times = Vec::with_capacity(rows.len());
    for (&index, t_us) in rows.iter().zip(&moments.t_us) {
        if t_us.is_some() {
            kept_rows.push(index);
            kept_times.push(*t_us);
            continue;
        }
        let row = table.row(index);
        let has_value = values.iter().any(|&column| match row.cell(column) {
            Cell::Number(_) => true,
            Cell::Text(text) => shape(text) != Shape::NotNumber,
            _ => false,
        });
        if !has_value {
            left_out += 1;
            continue;
        }
        bad.add(|| {
            let place = table.place().row(row.number).column(
                time_column,
                (!heading.is_empty()).then_some(heading.as_str()),
            );
            match row.cell(time_column) {
                Cell::Empty => Problem::error(place, "the row has values and no time"),
                cell => Problem::error(
                    place,
                    format!("\"{}\" is not a time like the others", cell.text()),
                ),
            }
        });
    }
    bad.finish(table.place())?;
    if left_out > 0 {
        warnings.push(Problem::warning(
            table.place(),
            format!("{left_out} rows without time and value were left out"),
        ));
    }
    let moments = Moments {
        t_us: kept_times,
        ..moments
    };
    Ok((kept_rows, moments))
}

//! The screen that tells what a log holds.

use crate::notice::Problem;
use crate::read::headings::Role;
use crate::read::inspect::{ColumnFound, Inspection, LoopInspection, OpMove, TableInspection};
use crate::read::{Proposal, RoleFound};
use crate::report::Page;
use crate::trace::Moment;
use std::collections::BTreeMap;

/// More loops than this in one file are listed a line each.
const LOOPS_IN_FULL: usize = 2;
/// How many loops are listed a line each.
const LOOPS_LISTED: usize = 12;
/// How many further tags are named.
const TAGS_NAMED: usize = 60;
/// How many moves of the OP, gaps, causes of bad samples, columns without a role are told one by one.
const MOVES_TOLD: usize = 8;
const GAPS_TOLD: usize = 3;
const CAUSES_TOLD: usize = 5;
const COLUMNS_TOLD: usize = 8;
/// How many problems of one table are told.
const PROBLEMS_TOLD: usize = 4;

/// Width of the column that says what a line is.
const LABEL_WIDTH: usize = 13;
/// Where the lines of a table begin.
const TABLE_INDENT: usize = 2;
/// Where the lines of a loop begin.
const LOOP_INDENT: usize = 4;

/// Writes what a file holds.
pub(super) fn write(page: &mut Page, log: &Inspection) {
    page.line(0, &log.file);
    let loops = |table: &TableInspection| table.loops.len() + table.further.len();
    let loops: usize = log.tables.iter().map(loops).sum();
    let mut shown = Shown::default();
    for table in &log.tables {
        write_table(page, table, loops <= LOOPS_IN_FULL, &mut shown);
    }
    if loops > LOOPS_IN_FULL {
        page.line(
            TABLE_INDENT,
            &format!(
                "{loops} loops; asleft inspect --tag TAG {} shows all of one",
                log.file
            ),
        );
    }
}

fn entry(page: &mut Page, indent: usize, what: &str, text: &str) {
    let label = format!("{:indent$}{what:<LABEL_WIDTH$}", "");
    page.labelled(&label, indent + LABEL_WIDTH, text);
}

/// What was shown of the same file already and need not be again.
#[derive(Default)]
struct Shown {
    columns: Vec<(Role, usize, String, Option<String>)>,
    sheet: Option<String>,
}

/// What has to be the same in two sheets for the second to be told by the first.
fn columns_with_roles(one: &LoopInspection) -> Vec<(Role, usize, String, Option<String>)> {
    let all = one.roles.iter();
    all.map(|found| {
        let (heading, unit) = (found.heading.clone(), found.unit.clone());
        (found.role, found.column, heading, unit)
    })
    .collect()
}

fn write_table(page: &mut Page, table: &TableInspection, in_full: bool, shown: &mut Shown) {
    let mut title = title(table);
    if let ([one], true) = (&table.loops[..], in_full) {
        title.push_str(&format!(": {}", name_of(one)));
    }
    page.line(TABLE_INDENT, &title);
    if in_full {
        for one in &table.loops {
            write_loop(page, table, one, shown);
        }
    } else {
        list_loops(page, table);
    }
    if table.loops.is_empty() {
        for (what, text) in roles(&table.roles, table) {
            entry(page, LOOP_INDENT, what, &text);
        }
    }
    // Where one loop is shown, the columns of other tags stand among those without a role.
    if !in_full || table.others.len() > 1 && table.loops.is_empty() {
        write_others(page, table);
    }
    for problem in table.undecided.iter().take(PROBLEMS_TOLD) {
        undecided(page, problem);
    }
    if let Some(more) = table
        .undecided
        .len()
        .checked_sub(PROBLEMS_TOLD)
        .filter(|n| *n > 0)
    {
        entry(page, LOOP_INDENT, "", &format!("and {more} more problems"));
    }
}

fn name_of(one: &LoopInspection) -> &str {
    let tag = one.tag.as_deref();
    tag.unwrap_or("a loop without a tag")
}

/// What kind of table it is and how large.
fn title(table: &TableInspection) -> String {
    let what = match (&table.sheet, table.delimiter, table.encoding) {
        (Some(sheet), _, _) => format!("sheet \"{sheet}\""),
        (None, delimiter, encoding) => {
            let apart = match delimiter {
                Some('\t') => ", columns apart by tabs".to_owned(),
                Some(' ') => ", columns apart by spaces".to_owned(),
                Some(sign) => format!(", columns apart by {sign}"),
                None => String::new(),
            };
            format!("{} text{apart}", encoding.unwrap_or("plain"))
        }
    };
    let row = if table.sheet.is_some() { "row" } else { "line" };
    let headings = match table.heading_row {
        Some(number) => format!("headings in {row} {number}"),
        None => "no headings".to_owned(),
    };
    format!(
        "{what}: {} rows, {} columns, {headings}",
        table.rows,
        table.columns.len()
    )
}

fn undecided(page: &mut Page, problem: &Problem) {
    entry(
        page,
        LOOP_INDENT,
        "not decided",
        &match &problem.place {
            Some(place) => format!("{place}: {}", problem.message),
            None => problem.message.clone(),
        },
    );
    if let Some(hint) = &problem.hint {
        entry(page, LOOP_INDENT, "", hint);
    }
}

/// Tags that are no loop.
fn write_others(page: &mut Page, table: &TableInspection) {
    if table.others.is_empty() {
        return;
    }
    let mut texts: Vec<String> = table
        .others
        .iter()
        .take(TAGS_NAMED)
        .map(|other| format!("{} (no {})", other.tag, other.lacks))
        .collect();
    if table.others.len() > texts.len() {
        texts.push(format!("{} more", table.others.len() - texts.len()));
    }
    entry(page, LOOP_INDENT, "no loop", &texts.join(", "));
}

/// Many loops: a line each for the first, the tags of the others.
fn list_loops(page: &mut Page, table: &TableInspection) {
    let Some(first) = table.loops.first() else {
        return;
    };
    entry(page, LOOP_INDENT, "clock", &clock(table, first));
    let first_span = format!("{}, {}", span(first), interval(first));
    entry(page, LOOP_INDENT, "span", &first_span);
    for one in table.loops.iter().take(LOOPS_LISTED) {
        let moves = match (&one.op_remark, one.op_moves.as_ref().map_or(0, Vec::len)) {
            (Some(remark), 0) => remark.clone(),
            (_, count) => counted(count, "OP move"),
        };
        let bad: usize = one.bad_samples.values().sum();
        let gaps = counted(one.gaps.len(), "gap");
        let mut text = format!("{} good, {bad} bad, {gaps}; {moves}", one.samples);
        let own_span = format!("{}, {}", span(one), interval(one));
        if own_span != first_span {
            text.push_str(&format!("; {own_span}"));
        }
        if let Some(supposed) = one.supposed.first() {
            text.push_str(&format!("; supposed: {supposed}"));
        }
        let tag = one.tag.as_deref().unwrap_or("(no tag)");
        entry(page, LOOP_INDENT, &format!("{tag} "), &text);
    }
    let more: Vec<&str> = table
        .loops
        .iter()
        .skip(LOOPS_LISTED)
        .filter_map(|one| one.tag.as_deref())
        .chain(table.further.iter().map(String::as_str))
        .collect();
    if !more.is_empty() {
        let mut text = more[..more.len().min(TAGS_NAMED)].join(", ");
        if more.len() > TAGS_NAMED {
            text.push_str(&format!(" and {} more", more.len() - TAGS_NAMED));
        }
        entry(page, LOOP_INDENT, "further", &text);
    }
}

fn write_loop(page: &mut Page, table: &TableInspection, one: &LoopInspection, shown: &mut Shown) {
    if table.loops.len() > 1 {
        page.line(LOOP_INDENT, name_of(one));
    }
    let lines = roles(&one.roles, table);
    let columns = columns_with_roles(one);
    if columns == shown.columns && shown.sheet.is_some() {
        let sheet = shown.sheet.as_deref().unwrap_or_default();
        let text = format!("as in sheet \"{sheet}\", for the same reasons");
        entry(page, LOOP_INDENT, "columns", &text);
    } else {
        for (what, text) in &lines {
            entry(page, LOOP_INDENT, what, text);
        }
        (shown.columns, shown.sheet) = (columns, table.sheet.clone());
    }
    entry(page, LOOP_INDENT, "clock", &clock(table, one));
    entry(
        page,
        LOOP_INDENT,
        "span",
        &format!("{}, {}", span(one), interval(one)),
    );
    entry(page, LOOP_INDENT, "samples", &samples(one));
    if !one.gaps.is_empty() {
        entry(page, LOOP_INDENT, "gaps", &gaps(one));
    }
    entry(page, LOOP_INDENT, "values", &values(one));
    entry(page, LOOP_INDENT, "OP moves", &op_moves(one));
    for warning in &one.warnings {
        let hint = warning.hint.as_ref();
        let text = hint.map_or_else(
            || warning.message.clone(),
            |hint| format!("{}; {hint}", warning.message),
        );
        entry(page, LOOP_INDENT, "note", &text);
    }
    for problem in &one.undecided {
        undecided(page, problem);
    }
    if let Some(first) = one.supposed.first() {
        let others = &one.supposed[1..];
        let or = if others.is_empty() {
            String::new()
        } else {
            format!(" (the other way: {})", others.join(" or "))
        };
        let text = format!("what stands here is read with {first}{or}");
        entry(page, LOOP_INDENT, "supposed", &text);
    }
    write_schedule(page, one.schedule.as_ref());
}

fn write_schedule(page: &mut Page, proposal: Option<&Proposal>) {
    match proposal {
        Some(proposal) => {
            entry(page, LOOP_INDENT, "schedule", &proposal.headings);
            entry(page, LOOP_INDENT, "", &proposal.values);
        }
        None => entry(
            page,
            LOOP_INDENT,
            "schedule",
            "none: the name of the file or sheet cannot stand in a cell of test log; rename it",
        ),
    }
}

/// A line for each role with its column and why, and one for the columns without.
fn roles(roles: &[RoleFound], table: &TableInspection) -> Vec<(&'static str, String)> {
    let mut lines = Vec::new();
    for found in roles {
        let unit = match &found.unit {
            Some(unit) => format!(", in {unit}"),
            None => String::new(),
        };
        let column = table
            .columns
            .iter()
            .find(|column| column.index == found.column)
            .map_or("", |column| &column.column);
        let heading = in_quotes(&found.heading);
        lines.push((
            found.role.name(),
            format!("{column}{heading}{unit}: {}", found.why),
        ));
    }
    let without: Vec<&ColumnFound> = table
        .columns
        .iter()
        .filter(|column| !roles.iter().any(|found| found.column == column.index))
        .collect();
    if without.is_empty() {
        return lines;
    }
    let mut texts: Vec<String> = without
        .iter()
        .take(COLUMNS_TOLD)
        .map(|column| {
            let heading = in_quotes(&column.heading);
            format!("{}{heading} ({})", column.column, column.holds)
        })
        .collect();
    if without.len() > COLUMNS_TOLD {
        texts.push(format!("{} more", without.len() - COLUMNS_TOLD));
    }
    lines.push(("no role", texts.join(", ")));
    lines
}

fn in_quotes(heading: &str) -> String {
    if heading.is_empty() {
        String::new()
    } else {
        format!(" \"{heading}\"")
    }
}

/// First and last moment, and how long that is.
fn span(one: &LoopInspection) -> String {
    let length_s = match (one.from, one.to) {
        (Moment::Dated(from), Moment::Dated(to)) => (to - from).as_seconds_f64(),
        (Moment::Elapsed(from), Moment::Elapsed(to)) => to - from,
        _ => return format!("{} to {}", one.from, one.to),
    };
    format!(
        "{} to {} ({})",
        one.from,
        short(one.to, one.from),
        duration(length_s)
    )
}

fn clock(table: &TableInspection, one: &LoopInspection) -> String {
    let decimal = match (&table.sheet, one.decimal) {
        (Some(_), _) => "",
        (None, ',') => "; numbers with a decimal comma",
        (None, _) => "; numbers with a decimal point",
    };
    format!("{}{decimal}", one.clock)
}

fn interval(one: &LoopInspection) -> String {
    let interval = figure(one.interval_s);
    if one.compressed {
        format!("written when the value changed, usually after {interval} s")
    } else {
        format!("every {interval} s, jitter {} s", figure(one.jitter_s))
    }
}

fn samples(one: &LoopInspection) -> String {
    let bad: usize = one.bad_samples.values().sum();
    let mut text = format!("{} good of {} rows; ", one.samples, one.rows);
    match bad {
        0 => text.push_str("none bad"),
        _ => text.push_str(&format!("{bad} bad: {}", by_count(&one.bad_samples))),
    }
    if one.gaps.is_empty() {
        text.push_str("; no gap longer than three intervals");
    }
    if one.duplicates > 0 {
        let rows = counted(one.duplicates, "row");
        text.push_str(&format!("; {rows} of a moment that comes again"));
    }
    if one.sorted_rows > 0 {
        let rows = counted(one.sorted_rows, "row");
        text.push_str(&format!("; {rows} out of order by up to a minute"));
    }
    if let Some(fold) = &one.fold {
        text.push_str(&format!("; {fold}"));
    }
    text
}

/// Texts with their counts, the commonest first.
fn by_count(counts: &BTreeMap<String, usize>) -> String {
    let mut listed: Vec<(&String, &usize)> = counts.iter().collect();
    listed.sort_by_key(|(_, count)| std::cmp::Reverse(**count));
    let mut texts: Vec<String> = listed
        .iter()
        .take(CAUSES_TOLD)
        .map(|(text, count)| format!("{count} {text}"))
        .collect();
    if let Some(more) = listed.len().checked_sub(CAUSES_TOLD).filter(|n| *n > 0) {
        texts.push(format!("{more} other causes"));
    }
    texts.join(", ")
}

fn gaps(one: &LoopInspection) -> String {
    let mut texts: Vec<String> = one
        .gaps
        .iter()
        .take(GAPS_TOLD)
        .map(|gap| {
            let (from, to) = (short(gap.from, one.from), short(gap.to, gap.from));
            format!("{from} to {to}")
        })
        .collect();
    if one.gaps.len() > GAPS_TOLD {
        texts.push(format!("{} more", one.gaps.len() - GAPS_TOLD));
    }
    format!("{}: {}", one.gaps.len(), texts.join(", "))
}

fn values(one: &LoopInspection) -> String {
    let range = |name: &str, [low, high]: [f64; 2], role: Role| {
        let unit = one
            .roles
            .iter()
            .find(|found| found.role == role)
            .and_then(|found| found.unit.as_ref())
            .map_or_else(String::new, |unit| format!(" {unit}"));
        if low == high {
            return format!("{name} {}{unit}", figure(low));
        }
        format!("{name} {} to {}{unit}", figure(low), figure(high))
    };
    let mut texts = vec![range("PV", one.pv_range, Role::Pv)];
    match one.op_range {
        Some(op) => texts.push(range("OP", op, Role::Op)),
        None => texts.push("OP without any value".to_owned()),
    }
    texts.extend(one.sp_range.map(|sp| range("SP", sp, Role::Sp)));
    if !one.modes.is_empty() {
        texts.push(format!("mode {}", by_count(&one.modes)));
    }
    texts.join(", ")
}

fn op_moves(one: &LoopInspection) -> String {
    let moves = one.op_moves.as_deref().unwrap_or_default();
    if moves.is_empty() {
        let remark = one.op_remark.clone();
        return remark.unwrap_or_else(|| "none".to_owned());
    }
    let mut texts: Vec<String> = moves
        .iter()
        .take(MOVES_TOLD)
        .map(|found| one_move(found, one.from))
        .collect();
    if moves.len() > MOVES_TOLD {
        texts.push(format!("{} more", moves.len() - MOVES_TOLD));
    }
    format!("{}: {}", moves.len(), texts.join(", "))
}

fn one_move(found: &OpMove, first: Moment) -> String {
    let and_back = if found.pulse { " and back" } else { "" };
    format!(
        "{} {} to {}{and_back}",
        short(found.at, first),
        figure(found.from),
        figure(found.to)
    )
}

/// A moment without its date where that is the date of `after`.
fn short(moment: Moment, after: Moment) -> String {
    match (moment, after) {
        (Moment::Dated(at), Moment::Dated(after)) if at.date() == after.date() => {
            at.format("%H:%M:%S").to_string()
        }
        _ => moment.to_string(),
    }
}

fn duration(seconds: f64) -> String {
    let (value, unit) = if seconds < 120.0 {
        (seconds, "s")
    } else if seconds < 7200.0 {
        (seconds / 60.0, "min")
    } else if seconds < 172_800.0 {
        (seconds / 3600.0, "h")
    } else {
        (seconds / 86_400.0, "days")
    };
    format!("{} {unit}", figure(libm::round(value * 10.0) / 10.0))
}

fn counted(count: usize, what: &str) -> String {
    match count {
        1 => format!("1 {what}"),
        0 => format!("no {what}s"),
        _ => format!("{count} {what}s"),
    }
}

/// A figure without more decimals than it needs, at most four; small ones with four digits.
fn figure(value: f64) -> String {
    if value != 0.0 && value.abs() < 0.01 {
        return format!("{value:.3e}");
    }
    let text = format!("{value:.4}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn figures_and_durations_are_short() {
        assert_eq!(figure(40.0), "40");
        assert_eq!(figure(71.2501), "71.2501");
        assert_eq!(figure(-0.000_123_4), "-1.234e-4");
        assert_eq!(figure(0.0), "0");
        assert_eq!(duration(90.0), "90 s");
        assert_eq!(duration(2580.0), "43 min");
        assert_eq!(duration(9000.0), "2.5 h");
        assert_eq!(duration(864_000.0), "10 days");
    }

    #[test]
    fn the_commonest_comes_first_and_the_rest_are_counted() {
        let counts = (1..=7_usize).map(|k| (format!("c{k}"), k)).collect();
        assert_eq!(
            by_count(&counts),
            "7 c7, 6 c6, 5 c5, 4 c4, 3 c3, 2 other causes"
        );
    }
}

//! Tables in which each signal has a time column of its own: blocks side by side, each a time column
//! (or a date and a time of day) and the signals to the right of it.

use super::clock::TimeColumns;
use super::headings::{Role, Sureness};
use super::roles::{Headings, RoleFound, SIGNALS, date_and_time};
use super::table::Cell;
use std::collections::BTreeMap;
use std::ops::Range;

/// A time column with the columns up to the next one.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Block {
    time: TimeColumns,
    columns: Range<usize>,
}

/// Why a time column was taken.
const WHY: &str = "the time column to the left of the signal";

/// The blocks of a table; `None` where its time columns do not make at least two, each with signals.
pub(super) fn blocks(headings: &Headings<'_>) -> Option<Vec<Block>> {
    let width = headings.table.width();
    let times: Vec<usize> = (0..width)
        .filter(|&column| is_time(headings, column))
        .collect();
    let mut blocks: Vec<Block> = Vec::new();
    let mut next = 0;
    while let Some(&first) = times.get(next) {
        let run = times[next..]
            .iter()
            .zip(first..)
            .take_while(|(column, expected)| **column == *expected)
            .count();
        let kinds: Vec<(bool, bool)> = (first..first + run)
            .map(|column| date_and_time(headings.table, headings.layout, column))
            .collect();
        let time = match kinds[..] {
            [_] => TimeColumns::Single(first),
            [(true, false), (false, true)] => TimeColumns::Pair {
                date: first,
                time: first + 1,
            },
            [(false, true), (true, false)] => TimeColumns::Pair {
                date: first + 1,
                time: first,
            },
            _ => return None,
        };
        next += run;
        let end = times.get(next).copied().unwrap_or(width);
        let columns = first + run..end;
        // A time column with nothing behind it is no signal's.
        if !columns.clone().any(|column| has_values(headings, column)) {
            return None;
        }
        blocks.push(Block { time, columns });
    }
    (blocks.len() > 1).then_some(blocks)
}

fn is_time(headings: &Headings<'_>, column: usize) -> bool {
    let (has_date, has_time) = date_and_time(headings.table, headings.layout, column);
    let by_heading = matches!(headings.meanings[column].role, Some((Role::Time, _)));
    let text = &headings.layout.headings[column].text;
    (has_date && has_time && text.is_empty())
        || (by_heading && (has_date || has_time || has_values(headings, column)))
}

/// Whether the first rows of data hold anything in the column.
fn has_values(headings: &Headings<'_>, column: usize) -> bool {
    const ROWS_LOOKED_AT: usize = 50;
    (headings.layout.data_start..headings.table.len())
        .take(ROWS_LOOKED_AT)
        .any(|index| headings.table.row(index).cell(column) != Cell::Empty)
}

/// The time of the PV (of the first signal where there is none), and of each signal whose time is
/// another; the time columns are put among the roles found.
pub(super) fn times_of_blocks(
    headings: &Headings<'_>,
    blocks: &[Block],
    found: &mut Vec<RoleFound>,
) -> (TimeColumns, BTreeMap<Role, TimeColumns>) {
    let block_of = |role: Role| {
        let column = found.iter().find(|found| found.role == role)?.column;
        let block = blocks.iter().rfind(|block| block.columns.start <= column);
        block.map(|block| block.time)
    };
    let of_signals: Vec<(Role, TimeColumns)> = SIGNALS
        .iter()
        .filter_map(|&role| Some((role, block_of(role)?)))
        .collect();
    let main = of_signals.first().map_or(blocks[0].time, |(_, time)| *time);
    let own: BTreeMap<Role, TimeColumns> = of_signals
        .into_iter()
        .filter(|(_, time)| *time != main)
        .collect();
    let mut used: Vec<TimeColumns> = Vec::new();
    for time in std::iter::once(main).chain(own.values().copied()) {
        if used.contains(&time) {
            continue;
        }
        used.push(time);
        let columns = match time {
            TimeColumns::Single(column) => vec![column],
            TimeColumns::Pair { date, time } => vec![date, time],
            TimeColumns::Counted { .. } => Vec::new(),
        };
        found.extend(
            columns
                .into_iter()
                .map(|column| headings.role(Role::Time, column, WHY.to_owned())),
        );
    }
    (main, own)
}

/// Whether every signal stands to the right of a time column; else whose time is whose is not known.
pub(super) fn hold_all(blocks: &[Block], found: &[RoleFound]) -> bool {
    found
        .iter()
        .filter(|found| SIGNALS.contains(&found.role))
        .all(|found| blocks[0].columns.start <= found.column)
}

/// Of several columns of quality the only one in the block of the PV.
pub(super) fn quality_beside_pv(
    headings: &Headings<'_>,
    blocks: &[Block],
    found: &[RoleFound],
) -> Option<RoleFound> {
    let pv = found.iter().find(|found| found.role == Role::Pv)?.column;
    let block = blocks.iter().find(|block| block.columns.contains(&pv))?;
    let mut qualities = block.columns.clone().filter(|&column| {
        matches!(
            headings.meanings[column].role,
            Some((Role::Quality, Sureness::Exact | Sureness::Among))
        )
    });
    let column = qualities.next()?;
    let why = "the quality beside the PV".to_owned();
    qualities
        .next()
        .is_none()
        .then(|| headings.role(Role::Quality, column, why))
}

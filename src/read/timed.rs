//! The rows of a loop in a table, and those of them that bear a time.

use super::LogRequest;
use super::clock::{Moments, NO_TIME, TimeColumns};
use super::collect::BadCells;
use super::extract::Understood;
use super::headings::{Owner, Role, meaning, squash};
use super::numbers::{Shape, shape};
use super::rows::Rows;
use super::table::Cell;
use crate::notice::Problem;
use std::collections::BTreeMap;

/// Rows of data that belong to the loop: all of them, or those that bear its tag.
pub(super) fn rows_of_loop(request: &LogRequest, understood: &Understood<'_>) -> Rows {
    let Understood {
        table,
        layout,
        roles,
        ..
    } = understood;
    let all = layout.data_start..table.len();
    let Some(column) = roles.column(Role::Tag) else {
        return Rows::Run(all);
    };
    let mut known: BTreeMap<String, bool> = BTreeMap::new();
    all.filter(|&index| {
        let cell = table.cell(index, column);
        if let Cell::Text(text) = cell
            && let Some(belongs) = known.get(text)
        {
            return *belongs;
        }
        let text = cell.text();
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
pub(super) fn timed_rows(
    understood: &Understood<'_>,
    rows: Rows,
    moments: Moments,
    warnings: &mut Vec<Problem>,
) -> Result<(Rows, Moments), Vec<Problem>> {
    if !moments.t_us.contains(&NO_TIME) {
        return Ok((rows, moments));
    }
    let Understood { table, roles, .. } = understood;
    let time_column = match roles.time {
        TimeColumns::Single(column) | TimeColumns::Pair { date: column, .. } => column,
        TimeColumns::Counted { .. } => 0,
    };
    let values: Vec<usize> = [Role::Pv, Role::Op, Role::Value]
        .into_iter()
        .filter(|role| !roles.own_times.contains_key(role))
        .filter_map(|role| roles.column(role))
        .collect();
    let mut bad = BadCells::default();
    let mut left_out = 0;
    let mut kept_rows = Vec::with_capacity(rows.len());
    let mut kept_times = Vec::with_capacity(rows.len());
    for (index, t_us) in rows.iter().zip(&moments.t_us) {
        if *t_us != NO_TIME {
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
        bad.add(|| not_a_time(understood, index, time_column));
    }
    bad.finish(table.place())?;
    // Signals with a time column each need not be equally long.
    if left_out > 0 && roles.own_times.is_empty() {
        warnings.push(Problem::warning(
            table.place(),
            format!("{left_out} rows without time and value were left out"),
        ));
    }
    let moments = Moments {
        t_us: kept_times,
        ..moments
    };
    Ok((kept_rows.into_iter().collect(), moments))
}

/// A row with a value whose time cannot be read.
pub(super) fn not_a_time(understood: &Understood<'_>, index: usize, column: usize) -> Problem {
    let table = understood.table;
    let heading = &understood.layout.headings[column].text;
    let row = table.row(index);
    let place = table
        .place()
        .row(row.number)
        .column(column, (!heading.is_empty()).then_some(heading.as_str()));
    match row.cell(column) {
        Cell::Empty => Problem::error(place, "the row has values and no time"),
        cell => Problem::error(
            place,
            format!("\"{}\" is not a time like the others", cell.text()),
        ),
    }
}

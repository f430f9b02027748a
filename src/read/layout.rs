//! Where the headings of a log stand and where its rows begin.

use super::ColumnNames;
use super::headings::{Owner, Role, Sureness, meaning, squash};
use super::numbers::DecimalSign;
use super::numbers::{Shape, shape};
use super::stamp::stamp;
use super::table::{Cell, Row, Table};
use super::units;
use super::values::{Value, value};

/// How many rows from the top the data must have begun.
const ROWS_LOOKED_AT: usize = 400;
/// How many rows in a row must look like data.
const ROWS_ALIKE: usize = 3;
/// How far above the data the headings may stand, in rows that hold anything.
const ROWS_ABOVE: usize = 5;

/// A column with its heading.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Heading {
    /// Column, 0 for the first.
    pub column: usize,
    /// The text; empty in a log without headings.
    pub text: String,
    /// Of headings over two rows the text of each.
    pub rows: Vec<String>,
    /// Unit from the row of units under the headings.
    pub unit_below: Option<String>,
}

/// How a table is laid out. Rows are indices of the table.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Layout {
    /// The row of headings; of two the lower one.
    pub heading_row: Option<usize>,
    /// First row of data.
    pub data_start: usize,
    /// One for every column that has a heading or data.
    pub headings: Vec<Heading>,
}

#[derive(PartialEq, Clone, Copy)]
enum Look {
    Empty,
    Moment,
    Number,
    Bad,
    Text,
}

fn look(cell: Cell<'_>) -> Look {
    match cell {
        Cell::Empty => Look::Empty,
        Cell::Date(_) | Cell::Duration(_) => Look::Moment,
        Cell::Number(_) => Look::Number,
        Cell::Error(_) => Look::Bad,
        Cell::Boolean(_) => Look::Text,
        Cell::Text(text) => {
            if shape(text) != Shape::NotNumber {
                Look::Number
            } else if stamp(text).is_some() {
                Look::Moment
            } else if matches!(value(cell, DecimalSign::Point, &[]), Value::Bad(_)) {
                Look::Bad
            } else {
                Look::Text
            }
        }
    }
}

/// Whether a row looks like a sample: a time with a value, or mostly numbers.
fn looks_like_data(row: Row<'_>, width: usize, counted: bool) -> bool {
    let (mut moments, mut numbers, mut bad, mut filled) = (0, 0, 0, 0);
    for cell in row.cells() {
        match look(cell) {
            Look::Empty => continue,
            Look::Moment => moments += 1,
            Look::Number => numbers += 1,
            Look::Bad => bad += 1,
            Look::Text => {}
        }
        filled += 1;
    }
    (moments > 0 && numbers + bad > 0)
        || (numbers > 1 && 2 * numbers >= filled)
        || ((width == 1 || counted) && numbers > 0 && 2 * numbers >= filled)
}

/// Whether a row has its times where `sample` has them, and something beside them: a row of a long table
/// whose value is a word, as the mode is.
fn is_timed_alike(row: Row<'_>, sample: Row<'_>) -> bool {
    let times = |row: Row<'_>| -> Vec<usize> {
        row.cells()
            .enumerate()
            .filter(|(_, cell)| look(*cell) == Look::Moment)
            .map(|(column, _)| column)
            .collect()
    };
    let at = times(row);
    let is_alike = if at.is_empty() {
        is_counted_alike(row, sample)
    } else {
        at == times(sample)
    };
    is_alike && row.width() == sample.width()
}

/// The same where times are plain numbers: the first number stands where the sample has it, and text where
/// the sample has text, as the tags of a long table.
fn is_counted_alike(row: Row<'_>, sample: Row<'_>) -> bool {
    let looks = |row: Row<'_>| row.cells().map(look).collect::<Vec<Look>>();
    let (row, sample) = (looks(row), looks(sample));
    let first = |looks: &[Look]| looks.iter().position(|look| *look == Look::Number);
    let text_stays = row
        .iter()
        .zip(&sample)
        .all(|(row, sample)| *sample != Look::Text || *row == Look::Text);
    sample.contains(&Look::Text)
        && text_stays
        && first(&row).is_some()
        && first(&row) == first(&sample)
}

/// Finds headings and data; `None` where no rows look like samples. `counted` is a log without a clock,
/// `partial` one that may hold words alone, as the mode of a loop is.
pub fn find(
    table: &Table,
    names: &ColumnNames,
    tag: Option<&str>,
    counted: bool,
    partial: bool,
) -> Option<Layout> {
    let rows = table.len();
    let is_data = |index: usize| looks_like_data(table.row(index), table.width(), counted);
    let is_alike = |index: usize, start: usize| is_timed_alike(table.row(index), table.row(start));
    let next = |start: usize| start + 1..rows.min(start + ROWS_ALIKE);
    let of_numbers = (0..rows.min(ROWS_LOOKED_AT)).find(|&start| {
        is_data(start) && next(start).all(|index| is_data(index) || is_alike(index, start))
    });
    let of_words = || {
        (0..rows.min(ROWS_LOOKED_AT)).find(|&start| {
            partial
                && table.row(start).width() > 1
                && next(start).all(|index| is_alike(index, start))
        })
    };
    let found = of_numbers.or_else(of_words)?;
    // A long table may begin with a word: the first row of a mode is no heading.
    let data_start = (0..found)
        .rev()
        .take_while(|&index| is_timed_alike(table.row(index), table.row(found)))
        .last()
        .unwrap_or(found);
    let above = data_start.saturating_sub(ROWS_ABOVE)..data_start;
    let heading_row = above
        .clone()
        .map(|index| (index, heading_score(table.row(index), names, tag)))
        .filter(|(_, score)| *score > 0)
        // The first of the best: a row of units below must not win by a draw.
        .rev()
        .max_by_key(|(_, score)| *score)
        .map(|(index, _)| index)
        .or_else(|| {
            // No usual word anywhere: the widest row of texts right above the data.
            let widest = |index: &usize| {
                table
                    .row(*index)
                    .cells()
                    .filter(|cell| matches!(cell, Cell::Text(_)))
                    .count()
            };
            above
                .clone()
                .rev()
                .max_by_key(widest)
                .filter(|index| widest(index) > 1)
        });
    let stacked = above
        .clone()
        .filter(|upper| upper + 1 < data_start)
        .filter_map(|upper| Some((upper + 1, stacked(table, upper, tag)?)))
        .max_by_key(|(_, stacked)| stacked.tagged);
    let heading_row = stacked.as_ref().map(|(row, _)| *row).or(heading_row);
    let unit_rows = heading_row.map_or(0..0, |row| row + 1..data_start);
    let text_of = |column: usize| match (&stacked, heading_row) {
        (Some((_, stacked)), _) => stacked.texts[column].clone(),
        (None, Some(row)) => table.row(row).cell(column).text(),
        (None, None) => String::new(),
    };
    let headings = (0..table.width())
        .map(|column| Heading {
            column,
            text: text_of(column),
            rows: stacked
                .as_ref()
                .map_or_else(Vec::new, |(_, stacked)| stacked.rows[column].to_vec()),
            unit_below: unit_rows.clone().find_map(|row| {
                let text = table.row(row).cell(column).text();
                let bare = text.trim_matches(['[', ']', '(', ')']).to_owned();
                (units::known(&bare).is_some() || units::TimeUnit::of(&bare).is_some())
                    .then_some(bare)
            }),
        })
        .collect();
    Some(Layout {
        heading_row,
        data_start,
        headings,
    })
}

/// Headings over two rows, put together.
struct Stacked {
    texts: Vec<String>,
    /// The texts of both rows, column by column.
    rows: Vec<[String; 2]>,
    /// Columns that have a tag and what of it.
    tagged: usize,
}

/// The headings of two rows together, where that tells of more columns whose they are than either row
/// alone: tags in one row and "PV", "OP" in the other. A tag stands over all columns up to the next text
/// of its row, as a merged cell leaves it in an export.
fn stacked(table: &Table, upper: usize, tag: Option<&str>) -> Option<Stacked> {
    let width = table.width();
    let own = |index: usize| -> Vec<String> {
        (0..width)
            .map(|column| table.row(index).cell(column).text())
            .collect()
    };
    let (first, second) = (own(upper), own(upper + 1));
    // A lone text at the edge is the title of the whole table.
    let filled = first.iter().filter(|text| !text.is_empty()).count();
    if filled == 0
        || (filled == 1 && first.iter().position(|text| !text.is_empty()) <= edge(&second))
    {
        return None;
    }
    let mut over = String::new();
    let texts: Vec<String> = first
        .iter()
        .zip(&second)
        .map(|(first, second)| {
            if !first.is_empty() {
                over.clone_from(first);
            } else if !names_a_signal(&over, tag) {
                over.clear();
            }
            match (over.as_str(), second.as_str()) {
                (text, "") if !first.is_empty() => text.to_owned(),
                (_, "") => String::new(),
                ("", text) => text.to_owned(),
                (one, other) if one == other => one.to_owned(),
                (one, other) => format!("{one} {other}"),
            }
        })
        .collect();
    let count = |texts: &[String]| texts.iter().filter(|text| is_tagged(text, tag)).count();
    let tagged = count(&texts);
    let is_more = tagged > count(&first).max(count(&second));
    is_more.then(|| Stacked {
        texts,
        rows: first
            .into_iter()
            .zip(second)
            .map(|(first, second)| [first, second])
            .collect(),
        tagged,
    })
}

/// Whether a heading may stand over several columns: it bears a tag or says what a value is.
fn names_a_signal(text: &str, tag: Option<&str>) -> bool {
    let meaning = meaning(text, tag);
    meaning.owner != Owner::Nobody || matches!(meaning.role, Some((role, _)) if role != Role::Time)
}

/// Column of the first text.
fn edge(texts: &[String]) -> Option<usize> {
    texts.iter().position(|text| !text.is_empty())
}

/// Whether a heading tells whose column it is and what it holds.
fn is_tagged(text: &str, tag: Option<&str>) -> bool {
    let meaning = meaning(text, tag);
    meaning.owner != Owner::Nobody
        && matches!(meaning.role, Some((_, sureness)) if sureness != Sureness::BareTag)
}

/// How much a row looks like headings: columns named in the schedule count most.
fn heading_score(row: Row<'_>, names: &ColumnNames, tag: Option<&str>) -> usize {
    let mut score = 0;
    for cell in row.cells() {
        let Cell::Text(text) = cell else { continue };
        let meaning = meaning(text, tag);
        let is_named = names
            .all()
            .any(|name| squash(name) == squash(text) && !name.starts_with('#'));
        score += 10 * usize::from(is_named);
        score += match (&meaning.role, &meaning.owner) {
            (Some(_), Owner::This) => 3,
            (Some(_), _) => 2,
            (None, Owner::Nobody) => 0,
            (None, _) => 1,
        };
    }
    score
}

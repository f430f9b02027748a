//! What may be supposed of a file that reads in several ways, so that the rest of it can be told.

use super::numbers::DecimalSign;
use super::stamp::DateOrder;
use super::{ColumnNames, LogRule};

/// What is supposed of a file that does not say it itself.
#[derive(Default)]
pub(super) struct Supposition {
    /// As it would be written: keys of a `[[log]]` table, or a cell of the schedule.
    pub line: String,
    /// The `[[log]]` tables with it among them.
    pub rules: Vec<LogRule>,
    /// The columns that the schedule would name.
    pub columns: ColumnNames,
}

/// What a `[[log]]` table may say: one list for the dates, one for the decimal sign, one for both.
pub(super) fn suppositions(rule: &LogRule) -> [Vec<Supposition>; 3] {
    let orders = [
        DateOrder::DayFirst,
        DateOrder::MonthFirst,
        DateOrder::YearFirst,
    ];
    let signs = [DecimalSign::Point, DecimalSign::Comma];
    // What the job says is not called into question.
    let orders = orders.into_iter().filter(|_| rule.dates.is_none());
    let signs = signs.into_iter().filter(|_| rule.decimal.is_none());
    let one = |dates: Option<DateOrder>, decimal: Option<DecimalSign>| {
        let mut line = Vec::new();
        line.extend(dates.map(|order| format!("dates = \"{}\"", order.word())));
        line.extend(decimal.map(|sign| format!("decimal = \"{}\"", sign.sign())));
        Supposition {
            line: line.join(", "),
            rules: vec![LogRule {
                files: Vec::new(),
                dates: dates.or(rule.dates),
                decimal: decimal.or(rule.decimal),
                ..rule.clone()
            }],
            columns: ColumnNames::default(),
        }
    };
    [
        orders.clone().map(|order| one(Some(order), None)).collect(),
        signs.clone().map(|sign| one(None, Some(sign))).collect(),
        orders
            .flat_map(|order| signs.clone().map(move |sign| (order, sign)))
            .map(|(order, sign)| one(Some(order), Some(sign)))
            .collect(),
    ]
}

//! Page 1: the verdict, what changed, what the loop does now, what is open, the sign-off.

use super::numbers::{
    Cell, Row, Table, TimeUnit, bound, capital, listed, number_word, ratio, tidy,
};
use super::open::{open, reasons_withheld};
use super::process::process_sentences;
use super::{Context, Entry, Heading, Plot, SignatureView, native, sign_off};
use crate::display::{self, NO_BREAK};
use crate::predict::{Margins, Metrics};
use crate::record::{OpenCode, Record, SettingsBlock, Status};
use crate::settings::Native;
use serde::Serialize;

/// The first page.
#[derive(Debug, Serialize)]
pub(super) struct Summary {
    verdict: Entry,
    changed: Changed,
    does: Option<Does>,
    open: Option<Listing>,
    withheld: Option<Listing>,
    /// The test, on the first page of a withheld record.
    plot: Option<Plot>,
    next_test: Option<Listing>,
    sign_off: Heading,
    signatures: Vec<SignatureView>,
}

#[derive(Debug, Serialize)]
struct Changed {
    heading: Heading,
    table: Table,
    notes: String,
}

#[derive(Debug, Serialize)]
struct Does {
    heading: Heading,
    process: String,
    table: Table,
    plot: Option<Plot>,
}

/// A part that is a list of labelled sentences.
#[derive(Debug, Serialize)]
struct Listing {
    heading: Heading,
    entries: Vec<Entry>,
}

pub(super) fn summary(context: &Context) -> Summary {
    let withheld = context.withheld();
    let parts = &context.parts;
    let listing = |title, entries| {
        parts
            .heading(title)
            .map(|heading| Listing { heading, entries })
    };
    Summary {
        verdict: verdict(context),
        changed: changed(context),
        does: does(context),
        open: listing(super::OPEN, open(context)),
        withheld: listing(super::WHY_NOT, reasons_withheld(context)),
        plot: withheld.then(|| context.plot("withheld.svg")).flatten(),
        next_test: listing(super::NEXT_TEST, next_test(context)),
        sign_off: parts.first_of(&[super::SIGN_OFF]),
        signatures: sign_off(&context.record.document.signatures),
    }
}

/// What to do next time: for the test as its steps advise, and for a controller that is too slow.
fn next_test(context: &Context) -> Vec<Entry> {
    let record = context.record;
    let mut entries: Vec<Entry> = record
        .test
        .next_time
        .iter()
        .map(|advice| Entry::new(tidy(&advice.what), bound(&advice.how)))
        .collect();
    let tau = record.model.as_ref().and_then(|m| m.fit.time_constant_s);
    if let Some(tau) = tau.filter(|_| super::scan_too_slow(record)) {
        entries.push(Entry::new(
            "Execute",
            format!(
                "the controller more often than every {}, a quarter of the time constant.",
                display::duration(tau.value / 4.0)
            ),
        ));
    }
    entries
}

// ---- the verdict

fn verdict(context: &Context) -> Entry {
    let document = &context.record.document;
    let see = |title| {
        context
            .parts
            .heading(title)
            .map(|h| format!(": see{NO_BREAK}{}", h.number))
            .unwrap_or_default()
    };
    match document.status {
        Status::Withheld => Entry::new("Withheld.", withheld_in_short(context.record)),
        Status::Draft => {
            let open = document.open_items.len();
            let mut text = match open {
                0 => "Something that hand-over needs is missing".to_owned(),
                1 => "One item is open".to_owned(),
                n => format!("{} items are open", capital(&number_word(n))),
            };
            let remarks = remarks_counted(context.record);
            if !remarks.is_empty() {
                text = format!("{text}; {}", listed(&remarks));
            }
            Entry::new("Draft.", format!("{text}{}.", see(super::OPEN)))
        }
        Status::ForSignature => {
            let remarks = remarks_counted(context.record);
            let text = if remarks.is_empty() {
                "Nothing is open.".to_owned()
            } else {
                format!(
                    "Nothing is open. {}{}.",
                    capital(&listed(&remarks)),
                    see(super::OPEN)
                )
            };
            Entry::new("For signature.", text)
        }
    }
}

/// "one request was not met", "two reservations are recorded": remarks by kind, in that order.
fn remarks_counted(record: &Record) -> Vec<String> {
    let count = |label: &str| {
        record
            .document
            .remarks
            .iter()
            .filter(|r| r.label == label)
            .count()
    };
    let words = |n: usize, one: &str, many: &str| match n {
        0 => None,
        1 => Some(format!("one {one}")),
        n => Some(format!("{} {many}", number_word(n))),
    };
    [
        words(
            count("Not met"),
            "request was not met",
            "requests were not met",
        ),
        words(
            count("Overridden"),
            "limit was overridden",
            "limits were overridden",
        ),
        words(
            count("Accepted"),
            "open item was accepted by waiver",
            "open items were accepted by waiver",
        ),
        words(
            count("Reservation"),
            "reservation stands",
            "reservations stand",
        ),
    ]
    .into_iter()
    .flatten()
    .collect()
}

fn withheld_in_short(record: &Record) -> String {
    let codes: Vec<OpenCode> = record
        .document
        .open_items
        .iter()
        .map(|item| item.code)
        .filter(|code| code.withholds())
        .collect();
    let first = codes.first().map_or("", |code| match code {
        OpenCode::NoUsableStep => "No step of the test can be used.",
        OpenCode::ActionAgainstProcess => "The controller acts against the process.",
        OpenCode::ScanTooSlow => "The controller executes too seldom for this process.",
        OpenCode::SafetyProcedureMissing => {
            "The loop takes part in a protective function and no procedure for changing it is named."
        }
        OpenCode::InnerLoopWithheld => "The inner loop of the cascade is withheld.",
        OpenCode::NoSolution => "No closed-loop time constant satisfies the limits.",
        _ => "What is asked of the loop does not fit the process.",
    });
    let more = match codes.len() {
        0 | 1 => String::new(),
        2 => " One more reason stands below.".to_owned(),
        n => format!(
            " {} more reasons stand below.",
            capital(&number_word(n - 1))
        ),
    };
    let stays = if record.settings.as_left.is_some() {
        "Settings were entered all the same; they are not recommended."
    } else {
        "The loop stays as found."
    };
    format!("{first}{more} {stays}").trim().to_owned()
}

// ---- what changed

/// The settings beside those found: as left, to enter, or entered against the record.
fn beside<'a>(context: &Context<'a>) -> Option<(&'static str, Native, Option<&'a SettingsBlock>)> {
    let settings = &context.record.settings;
    if context.withheld() {
        let entered = settings.as_left.as_ref()?;
        return Some(("Entered, not recommended", entered.native, Some(entered)));
    }
    let block = context.after()?;
    Some((context.after_head(), block.native, Some(block)))
}

fn changed(context: &Context) -> Changed {
    let l = &context.record.control_loop;
    let found = &context.record.settings.as_found;
    let beside = beside(context);
    let mut heads = vec!["Setting".to_owned(), "As found".to_owned()];
    heads.extend(beside.map(|(head, _, _)| head.to_owned()));

    let before = native::settings(l, found.native);
    let after = beside.map(|(_, native, _)| native::settings(l, native));
    let values = |n: Native| [n.p, n.i, n.d];
    let moved: Vec<bool> = (0..3)
        .map(|k| beside.is_some_and(|(_, n, _)| values(n)[k] != values(found.native)[k]))
        .collect();
    let action_moved = l.left_action.is_some_and(|a| a != l.action);
    let filter_moved = l.left_pv_filter_s.is_some_and(|f| f != l.pv_filter_s);
    let any_moved = moved.contains(&true) || action_moved || filter_moved;

    // Only what changed stands in the table; where nothing did (or there is nothing beside), all
    // that is in use.
    let mut rows = Vec::new();
    let mut rest = Vec::new();
    for (k, (named, cell)) in before.iter().enumerate() {
        let in_use = cell.text != "off";
        let shown = if any_moved { moved[k] } else { in_use };
        if shown {
            let mut cells = vec![cell.clone()];
            cells.extend(after.as_ref().map(|a| a[k].1.clone().bold(moved[k])));
            rows.push(Row::new(named.label, cells));
        } else {
            rest.push(format!(
                "{} {}",
                named.label.to_lowercase(),
                cell.sentence()
            ));
        }
    }
    if let Some(left) = l.left_action.filter(|_| action_moved) {
        rows.push(Row::new(
            "Action",
            vec![
                Cell::words(native::action(l.action)),
                Cell::words(native::action(left)).bold(true),
            ],
        ));
    } else {
        rest.push(format!("action {}", native::action(l.action)));
    }
    if let Some(left) = l.left_pv_filter_s.filter(|_| filter_moved) {
        rows.push(Row::new(
            "PV filter",
            vec![
                Cell::words(native::filter(l.pv_filter_s)),
                Cell::words(native::filter(left)).bold(true),
            ],
        ));
    } else {
        rest.push(format!("PV filter {}", native::filter(l.pv_filter_s)));
    }
    for row in &mut rows {
        // A row of action or filter has two cells also where nothing stands beside.
        row.cells.truncate(heads.len() - 1);
    }
    let form = native::form(l.form);
    let group = if native::is_standard(l) {
        "In the controller, which works in standard form".to_owned()
    } else {
        format!("In the controller: {form} form")
    };
    rows.insert(0, Row::group(group));
    if !native::is_standard(l) {
        let after = beside.map(|(_, _, block)| block.and_then(|b| b.standard));
        rows.extend(standard_rows(found, after, any_moved));
    } else {
        rename_to_symbols(&mut rows);
    }

    let mut notes = Vec::new();
    let rest = rest.join(", ");
    if beside.is_none() {
        notes.push(format!("Also as found: {rest}. Nothing was entered."));
    } else if any_moved {
        notes.push(format!("Unchanged: {rest}."));
    } else {
        notes.push(format!("Nothing was changed. Also as found: {rest}."));
    }
    notes.extend(entered(context));
    Changed {
        heading: context
            .parts
            .first_of(&[super::AS_FOUND, super::CHANGED, super::TO_CHANGE]),
        table: Table { heads, rows },
        notes: notes.join(" "),
    }
}

/// A controller that is typed into in standard form and seconds shows the symbols at once.
fn rename_to_symbols(rows: &mut [Row]) {
    for row in rows {
        match row.label.as_str() {
            "Controller gain" => row.label.push_str(" Kc"),
            "Integral time" => row.label.push_str(" Ti"),
            "Derivative time" => row.label.push_str(" Td"),
            _ => {}
        }
    }
}

fn standard_rows(
    found: &SettingsBlock,
    after: Option<Option<crate::settings::Standard>>,
    only_moved: bool,
) -> Vec<Row> {
    let derivative = [Some(found.standard), after]
        .into_iter()
        .flatten()
        .flatten()
        .any(|s| s.td_s > 0.0);
    let before = native::standard(found.standard, derivative);
    let after = after.map(|a| native::standard(a, derivative));
    let mut rows = vec![Row::group("In standard form")];
    for (k, (label, cell)) in before.iter().enumerate() {
        let mut cells = vec![cell.clone()];
        let mut moved = false;
        if let Some(after) = &after {
            moved = after[k].1 != *cell;
            cells.push(after[k].1.clone().bold(moved));
        }
        if moved || !only_moved {
            rows.push(Row::new(*label, cells));
        }
    }
    if rows.len() == 1 {
        rows.clear();
    }
    rows
}

/// Whether a setting as left is not the recommended one with its last figures rounded off.
fn rounded_much(settings: &crate::record::AllSettings) -> bool {
    const ROUNDED: f64 = 0.005;
    let values = |block: &SettingsBlock| [block.native.p, block.native.i, block.native.d];
    match (&settings.recommended, &settings.as_left) {
        (Some(recommended), Some(left)) => values(recommended)
            .into_iter()
            .zip(values(left))
            .any(|(r, l)| (l - r).abs() > ROUNDED * r.abs()),
        _ => false,
    }
}

fn entered(context: &Context) -> Option<String> {
    let l = &context.record.control_loop;
    let settings = &context.record.settings;
    settings.as_left.as_ref()?;
    let on = l.left_on.map(|d| format!(" {d}")).unwrap_or_default();
    let by = l
        .entered_by
        .as_deref()
        .map(|name| format!(" by {}", tidy(name)))
        .unwrap_or_default();
    let as_told = match settings.as_left_differs {
        Some(true) => ", not as recommended",
        Some(false) if rounded_much(settings) => ", as recommended, rounded",
        Some(false) => ", as recommended",
        None => "",
    };
    let text = format!("Entered{on}{by}{as_told}.");
    Some(if settings.as_left_differs == Some(true) {
        context.parts.pointing(&text, super::SETTINGS)
    } else {
        text
    })
}

// ---- what the loop does now

fn does(context: &Context) -> Option<Does> {
    let heading = context
        .parts
        .heading(super::DOES)
        .or_else(|| context.parts.heading(super::WILL_DO))?;
    let found = &context.record.settings.as_found;
    let after = context.after()?;
    Some(Does {
        heading,
        process: process_sentences(context)?,
        table: predicted_table(context, found, after),
        plot: context.plot("change.svg"),
    })
}

fn predicted_table(context: &Context, found: &SettingsBlock, after: &SettingsBlock) -> Table {
    let blocks = [found, after];
    let stable = |b: &SettingsBlock| b.margins.is_none_or(|m| m.stable);
    let set_point = |b: &SettingsBlock| b.predicted.as_ref().map(|p| p.set_point.metrics);
    let load = |b: &SettingsBlock| b.predicted.as_ref().map(|p| p.load.metrics);
    let settled = |metrics: fn(&SettingsBlock) -> Option<Metrics>| {
        let unit = TimeUnit::for_all(
            blocks
                .iter()
                .filter_map(|b| metrics(b).and_then(|m| m.settling_time_s)),
        );
        blocks
            .iter()
            .map(|b| match metrics(b) {
                _ if !stable(b) => Cell::words("unstable"),
                None => Cell::none(),
                Some(m) => match m.settling_time_s {
                    Some(t) => unit.cell(t),
                    None => Cell::words("not settled"),
                },
            })
            .collect::<Vec<_>>()
    };
    let figure = |make: &dyn Fn(&SettingsBlock) -> Option<Cell>| {
        blocks
            .iter()
            .map(|b| {
                if stable(b) {
                    make(b).unwrap_or_else(Cell::none)
                } else {
                    Cell::none()
                }
            })
            .collect::<Vec<_>>()
    };
    let overshoot = figure(&|b| {
        set_point(b)?
            .overshoot_percent
            .map(|o| Cell::figure(display::fixed(o, 0), "%"))
    });
    let peaks: Vec<f64> = blocks
        .iter()
        .filter_map(|b| load(b).map(|m| m.peak_deviation_percent * context.pv_per_percent))
        .collect();
    let smallest = peaks.iter().copied().fold(f64::INFINITY, f64::min);
    let decimals = super::numbers::decimals_to_show(smallest, 10.0);
    let peak = figure(&|b| {
        let deviation = load(b)?.peak_deviation_percent * context.pv_per_percent;
        Some(Cell::figure(
            super::numbers::grouped(&display::fixed(deviation, decimals)),
            context.pv_unit.clone(),
        ))
    });
    let load_size = after
        .predicted
        .as_ref()
        .or(found.predicted.as_ref())
        .map_or(5.0, |p| p.load.step_percent);
    let fn_set_point: fn(&SettingsBlock) -> Option<Metrics> =
        |b| b.predicted.as_ref().map(|p| p.set_point.metrics);
    let fn_load: fn(&SettingsBlock) -> Option<Metrics> =
        |b| b.predicted.as_ref().map(|p| p.load.metrics);
    Table {
        heads: vec![
            "Predicted".to_owned(),
            "As found".to_owned(),
            context.after_head().to_owned(),
        ],
        rows: vec![
            Row::new("Settles after a set-point change", settled(fn_set_point)),
            Row::new("Overshoots the set point by", overshoot),
            Row::new(
                format!(
                    "Gives way to a load of {}{NO_BREAK}% OP by",
                    display::plain(load_size, 3)
                ),
                peak,
            ),
            Row::new("and is back after", settled(fn_load)),
            Row::new("Ms, fitted model", blocks.map(|b| ms(b.margins)).to_vec()),
            Row::new(
                "Ms, worst of the models",
                blocks.map(|b| ms(b.worst_margins)).to_vec(),
            ),
            Row::new(
                "Phase margin, worst",
                blocks.map(|b| phase(b.worst_margins)).to_vec(),
            ),
        ],
    }
}

/// Ms as a cell; a loop that is not stable has none.
pub(super) fn ms(margins: Option<Margins>) -> Cell {
    match margins {
        None => Cell::none(),
        Some(m) if !m.stable => Cell::words("unstable"),
        Some(m) => m.ms.map_or_else(Cell::none, |ms| Cell::words(ratio(ms))),
    }
}

/// The phase margin as a cell.
pub(super) fn phase(margins: Option<Margins>) -> Cell {
    margins
        .filter(|m| m.stable)
        .and_then(|m| m.phase_margin_deg)
        .map_or_else(Cell::none, |p| Cell::figure(display::fixed(p, 0), "°"))
}

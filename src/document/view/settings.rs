//! The settings: which limit decided, all settings with their margins, what the published rules give.

use super::numbers::{
    Cell, NONE, Row, Table, TimeUnit, bound, grouped, lower, ratio, sentence, tidy,
};
use super::summary::{ms, phase};
use super::{Context, Heading, Plot, native};
use crate::design::{Design, Hardness, Limit, LimitName, LimitOutcome};
use crate::display::{self, NO_BREAK};
use crate::predict::Margins;
use crate::record::SettingsBlock;
use crate::settings::EquationForm;
use serde::Serialize;

/// The part.
#[derive(Debug, Serialize)]
pub(super) struct SettingsPart {
    heading: Heading,
    binding: String,
    limits: Vec<TextRow>,
    table: Table,
    worst: String,
    plot: Option<Plot>,
    rules: Option<Rules>,
}

/// A row of a table of text.
#[derive(Debug, Serialize)]
pub(super) struct TextRow {
    cells: Vec<String>,
    bold: bool,
}

#[derive(Debug, Serialize)]
struct Rules {
    time_unit: &'static str,
    with_derivative: bool,
    rows: Vec<TextRow>,
    sources: String,
}

/// Name of a limit.
fn limit_name(limit: LimitName) -> &'static str {
    match limit {
        LimitName::Target => "Asked for",
        LimitName::DeadTime => "Dead time",
        LimitName::Robustness => "Robustness",
        LimitName::TimeConstant => "Time constant",
        LimitName::Noise => "Noise",
        LimitName::OpMove => "OP move",
        LimitName::ScanTime => "Scan time",
        LimitName::InnerLoop => "Inner loop",
        LimitName::LevelDeviation => "Level deviation",
    }
}

pub(super) fn settings(context: &Context) -> Option<SettingsPart> {
    let heading = context.parts.heading(super::SETTINGS)?;
    let design = context.record.design.as_ref();
    Some(SettingsPart {
        heading,
        binding: design.map(binding).unwrap_or_default(),
        limits: design.map_or_else(Vec::new, |d| {
            d.limits
                .iter()
                .map(|l| limit_row(l, l.limit == d.binding_limit))
                .collect()
        }),
        table: settings_table(context),
        worst: worst(context),
        plot: context.plot("predicted.svg"),
        rules: design.and_then(|d| rules(context, d)),
    })
}

fn binding(design: &Design) -> String {
    let mut text = sentence(&bound(&design.binding_detail));
    if !design.derivative.is_empty() {
        let derivative = lower(&sentence(&bound(&design.derivative)));
        text = format!("{text} Derivative action is {derivative}");
    }
    text
}

fn limit_row(limit: &Limit, binding: bool) -> TextRow {
    let needs = match (limit.outcome, limit.needs_s) {
        (LimitOutcome::NotAssessed, _) => "not assessed".to_owned(),
        // An averaging level is made slow: its limit is one from above.
        (_, Some(seconds)) if limit.limit == LimitName::LevelDeviation => {
            format!("at most{NO_BREAK}{}", seconds_needed(seconds))
        }
        (_, Some(seconds)) => seconds_needed(seconds),
        (LimitOutcome::MetByAny, None) => "met by any".to_owned(),
        (_, None) => NONE.to_owned(),
    };
    let kind = match (limit.kind, limit.outcome) {
        (_, LimitOutcome::NotMet) => "not met",
        (Some(Hardness::Hard), _) => "hard",
        (Some(Hardness::Soft), LimitOutcome::Overridden) => "soft, overridden",
        (Some(Hardness::Soft), _) => "soft",
        (None, _) => "",
    };
    TextRow {
        cells: vec![
            limit_name(limit.limit).to_owned(),
            bound(&limit.detail),
            comes_to(limit),
            needs,
            kind.to_owned(),
        ],
        bold: binding,
    }
}

fn seconds_needed(seconds: f64) -> String {
    grouped(&display::fixed(seconds, usize::from(seconds < 9.95)))
}

/// The limit's figure of the final settings, in the terms that its bound is told in.
fn comes_to(limit: &Limit) -> String {
    let Some(figure) = limit.figure else {
        return String::new();
    };
    let short = || display::significant(figure, 2);
    let with = |text: String, unit: &str| format!("{text}{NO_BREAK}{unit}");
    match limit.limit {
        LimitName::Target => with(seconds_needed(figure), "s"),
        LimitName::Robustness => format!("Ms{NO_BREAK}{}", ratio(figure)),
        LimitName::DeadTime | LimitName::TimeConstant | LimitName::InnerLoop => {
            with(short(), "times")
        }
        LimitName::ScanTime => with(grouped(&display::fixed(figure, 0)), "scans"),
        LimitName::Noise => with(short(), "% sd"),
        LimitName::OpMove => with(short(), "%"),
        LimitName::LevelDeviation => with(display::significant(figure, 3), "%"),
    }
}

/// The three sets of settings by their heads.
fn blocks<'a>(context: &Context<'a>) -> Vec<(&'static str, &'a SettingsBlock)> {
    let settings = &context.record.settings;
    let mut blocks = vec![("As found", &settings.as_found)];
    match (&settings.recommended, &settings.as_left) {
        (Some(recommended), Some(left)) => {
            blocks.push(("Recommended", recommended));
            blocks.push(("As left", left));
        }
        (Some(recommended), None) => blocks.push(("To enter", recommended)),
        (None, Some(left)) => blocks.push(("As left", left)),
        (None, None) => {}
    }
    blocks
}

fn settings_table(context: &Context) -> Table {
    let l = &context.record.control_loop;
    let blocks = blocks(context);
    let each = |make: &dyn Fn(&SettingsBlock) -> Cell| {
        blocks.iter().map(|(_, b)| make(b)).collect::<Vec<_>>()
    };
    let mut heads = vec!["Setting, margin".to_owned()];
    heads.extend(blocks.iter().map(|(head, _)| (*head).to_owned()));

    let mut rows = vec![Row::group(format!(
        "In the controller: {} form",
        native::form(l.form)
    ))];
    let typed: Vec<_> = blocks
        .iter()
        .map(|(_, b)| native::settings(l, b.native))
        .collect();
    for k in 0..3 {
        // Derivative that no set of settings uses needs no row.
        if k == 2 && typed.iter().all(|t| t[k].1.text == "off") {
            continue;
        }
        let label = typed[0][k].0.label;
        rows.push(Row::new(
            label,
            typed.iter().map(|t| t[k].1.clone()).collect(),
        ));
    }
    if !native::is_standard(l) {
        let derivative = blocks
            .iter()
            .any(|(_, b)| b.standard.is_some_and(|s| s.td_s > 0.0));
        let standard: Vec<_> = blocks
            .iter()
            .map(|(_, b)| native::standard(b.standard, derivative))
            .collect();
        rows.push(Row::group("In standard form"));
        for k in 0..standard[0].len() {
            rows.push(Row::new(
                standard[0][k].0,
                standard.iter().map(|s| s[k].1.clone()).collect(),
            ));
        }
    }
    let fitted: fn(&SettingsBlock) -> Option<Margins> = |b| b.margins;
    let worst_of: fn(&SettingsBlock) -> Option<Margins> = |b| b.worst_margins;
    for (title, of, with_gain_margin) in [
        ("Margins, fitted model", fitted, true),
        ("Margins, worst of the models", worst_of, false),
    ] {
        rows.push(Row::group(title));
        rows.push(Row::new("Ms", each(&|b| ms(of(b)))));
        if with_gain_margin {
            rows.push(Row::new("Gain margin", each(&|b| gain_margin(of(b)))));
        }
        rows.push(Row::new("Phase margin", each(&|b| phase(of(b)))));
        let unit = TimeUnit::for_all(
            blocks
                .iter()
                .filter_map(|(_, b)| of(b).and_then(|m| m.delay_margin_s)),
        );
        rows.push(Row::new(
            "Delay margin",
            each(&|b| {
                of(b)
                    .filter(|m| m.stable)
                    .and_then(|m| m.delay_margin_s)
                    .map_or_else(Cell::none, |d| unit.cell(d))
            }),
        ));
    }
    Table { heads, rows }
}

/// A stable loop whose gain may rise without bound has no figure here.
fn gain_margin(margins: Option<Margins>) -> Cell {
    match margins.filter(|m| m.stable) {
        None => Cell::none(),
        Some(m) => m
            .gain_margin
            .map_or_else(|| Cell::words("no bound"), |g| Cell::words(ratio(g))),
    }
}

/// Which model of the set is the worst for the settings after the work.
fn worst(context: &Context) -> String {
    let Some(label) = context.after().and_then(|b| b.worst_model.as_deref()) else {
        return String::new();
    };
    let of = if context.record.settings.as_left.is_some() {
        "settings as left"
    } else {
        "settings to enter"
    };
    let others = context.record.model.as_ref().map_or(0, |m| m.fit.set.len());
    format!(
        "Worst of the fitted model and {}: each step’s own, and the ends of the intervals. For the {of} it \
         is {}.",
        display::counted(others, "other", "others"),
        tidy(label)
    )
}

fn rules(context: &Context, design: &Design) -> Option<Rules> {
    if design.rules.is_empty() {
        return None;
    }
    let after = context.after();
    let standard = after.and_then(|b| b.standard);
    let times = || {
        design
            .rules
            .iter()
            .map(|r| &r.settings)
            .chain(standard.as_ref())
    };
    let unit = TimeUnit::for_all(times().filter_map(|s| s.ti_s));
    let with_derivative = times().any(|s| s.td_s > 0.0);
    let l = &context.record.control_loop;
    let worst_ms = context.record.limits_in_force.design.worst_ms;
    let row = |name: &str,
               of: crate::settings::Standard,
               ms: Option<f64>,
               phase: Option<f64>,
               remark: String,
               bold: bool| {
        let mut cells = vec![
            name.to_owned(),
            display::significant(of.kc, 3),
            of.ti_s.map_or_else(|| NONE.to_owned(), |t| time_3(t, unit)),
        ];
        if with_derivative {
            cells.push(if of.td_s > 0.0 {
                time_3(of.td_s, unit)
            } else {
                NONE.to_owned()
            });
        }
        cells.push(ms.map_or_else(|| NONE.to_owned(), ratio));
        cells.push(phase.map_or_else(|| NONE.to_owned(), |p| display::fixed(p, 0)));
        cells.push(remark);
        TextRow { cells, bold }
    };
    let mut rows: Vec<TextRow> = design
        .rules
        .iter()
        .map(|rule| {
            let mut remarks = Vec::new();
            match rule.ms {
                None => remarks.push("unstable".to_owned()),
                Some(ms) if ms > worst_ms => {
                    remarks.push(format!("Ms above {}", ratio_short(worst_ms)));
                }
                Some(_) => {}
            }
            if !rule.in_range {
                remarks.push("outside its range".to_owned());
            }
            if l.form == EquationForm::Series && rule.settings.series().is_none() {
                remarks.push("no series form".to_owned());
            }
            row(
                &tidy(&rule.rule),
                rule.settings,
                rule.ms,
                rule.phase_margin_deg,
                remarks.join("; "),
                false,
            )
        })
        .collect();
    if let (Some(block), Some(standard)) = (after, standard) {
        let margins = block.margins.filter(|m| m.stable);
        rows.push(row(
            context.after_head(),
            standard,
            margins.and_then(|m| m.ms),
            margins.and_then(|m| m.phase_margin_deg),
            if block.margins.is_some_and(|m| !m.stable) {
                "unstable".to_owned()
            } else {
                String::new()
            },
            true,
        ));
    }
    Some(Rules {
        time_unit: unit.sign(),
        with_derivative,
        rows,
        sources: sources(design),
    })
}

/// 2.0 as "2.0", 1.85 as "1.85".
fn ratio_short(value: f64) -> String {
    let text = display::plain(value, 4);
    if text.contains('.') {
        text
    } else {
        format!("{text}.0")
    }
}

fn time_3(seconds: f64, unit: TimeUnit) -> String {
    let value = seconds * unit.factor();
    let decimals = if value < 9.995 {
        2
    } else {
        usize::from(value < 99.95)
    };
    display::fixed(value, decimals)
}

/// Ranges of pages as printers set them: "77–83".
fn with_en_dashes(text: &str) -> String {
    let letters: Vec<char> = text.chars().collect();
    let figure = |at: usize| letters.get(at).is_some_and(char::is_ascii_digit);
    letters
        .iter()
        .enumerate()
        .map(|(at, &letter)| {
            if letter == '-' && at > 0 && figure(at - 1) && figure(at + 1) {
                '–'
            } else {
                letter
            }
        })
        .collect()
}

/// "Lambda: ...; SIMC, ITAE: ...", each source once.
fn sources(design: &Design) -> String {
    let mut by_source: Vec<(String, Vec<String>)> = Vec::new();
    for rule in &design.rules {
        let source = with_en_dashes(&tidy(&rule.source));
        if source.is_empty() {
            continue;
        }
        match by_source.iter_mut().find(|(s, _)| *s == source) {
            Some((_, rules)) => rules.push(tidy(&rule.rule)),
            None => by_source.push((source, vec![tidy(&rule.rule)])),
        }
    }
    by_source
        .iter()
        .map(|(source, rules)| format!("{}: {}.", rules.join(", "), source.trim_end_matches('.')))
        .collect::<Vec<_>>()
        .join(" ")
}

//! The process model: its kind, its figures with their intervals, how well it is known.

use super::numbers::{Cell, Row, Table, TimeUnit, bound, estimate, sentence};
use super::process::slope_unit;
use super::{Context, Entry, Heading, Plot};
use crate::display::{self, NO_BREAK, runs};
use crate::identify::Verdict;
use crate::model::Kind;
use crate::quantity::Estimate;
use serde::Serialize;

/// The part.
#[derive(Debug, Serialize)]
pub(super) struct ModelPart {
    heading: Heading,
    kind: String,
    /// The kinds that were not chosen, and why.
    alternatives: Vec<Entry>,
    fits: Option<Plot>,
    table: Table,
    reading: Option<Plot>,
    notes: Vec<String>,
}

/// Name of a kind.
pub(super) fn kind_name(kind: Kind) -> &'static str {
    match kind {
        Kind::FirstOrder => "First order",
        Kind::SecondOrder => "Second order",
        Kind::Integrating => "Integrating",
        Kind::IntegratingLag => "Integrating with lag",
    }
}

pub(super) fn model(context: &Context) -> Option<ModelPart> {
    let heading = context.parts.heading(super::MODEL)?;
    let fit = &context.record.model.as_ref()?.fit;
    let shape = match fit.kind {
        Kind::FirstOrder => "one time constant, with dead time",
        Kind::SecondOrder => "two time constants, with dead time",
        Kind::Integrating => "PV moves as long as OP is off balance, with dead time",
        Kind::IntegratingLag => {
            "PV moves as long as OP is off balance, with one time constant and dead time"
        }
    };
    let fitted = if fit.steps.len() == 1 {
        "step"
    } else {
        "steps"
    };
    Some(ModelPart {
        heading,
        kind: format!(
            "{}: {shape}. Fitted to {fitted}{NO_BREAK}{}.",
            kind_name(fit.kind),
            runs(&fit.steps)
        ),
        alternatives: fit
            .alternatives
            .iter()
            .map(|a| Entry::new(kind_name(a.kind), sentence(&bound(&a.why_not))))
            .collect(),
        fits: context.plot("fits.svg"),
        table: parameters(context),
        reading: context.plot("reading.svg"),
        notes: notes(context),
    })
}

fn parameters(context: &Context) -> Table {
    let record = context.record;
    let block = record
        .model
        .as_ref()
        .expect("the part is there only with a model");
    let fit = &block.fit;
    let read = crate::figures::read_step(record).map(|(step, reading)| (step.number, reading));
    let with_reading = read.is_some();
    let integrates = fit.kind.integrates();
    let slope = slope_unit(fit.gain.value);

    let row = |label: &str, of: Estimate, factor: f64, unit: &str, read: Option<f64>| {
        let (value, interval) = estimate(of, factor);
        let decimals = super::numbers::decimals_of(&value);
        let mut cells = vec![Cell::figure(value, unit), Cell::figure(interval, unit)];
        if with_reading {
            cells.push(read.map_or_else(Cell::none, |r| {
                Cell::figure(display::fixed(r * factor, decimals), unit)
            }));
        }
        Row::new(label, cells)
    };
    let (per_time, slope_factor, symbol) = if integrates {
        (
            format!("/{}", slope.sign()),
            slope.factor(),
            "Process gain K′",
        )
    } else {
        (String::new(), 1.0, "Process gain K")
    };
    let read_gain = read.map(|(_, r)| r.gain);
    let mut rows = vec![row(
        symbol,
        fit.gain,
        slope_factor,
        &format!("%{per_time}/%"),
        read_gain,
    )];
    // A percent of PV for a percent of OP says the same twice.
    if context.pv_unit != "%" || context.op_unit != "%" {
        rows.push(row(
            "",
            Estimate::new(
                block.gain_engineering.value,
                block.gain_engineering.low,
                block.gain_engineering.high,
            ),
            slope_factor,
            &format!("{}{per_time}/{}", context.pv_unit, context.op_unit),
            read_gain.map(|g| g * context.gain_factor()),
        ));
    }
    let mut time = |label: &str, of: Option<Estimate>, read: Option<f64>| {
        if let Some(of) = of {
            let unit = TimeUnit::for_all([of.value]);
            rows.push(row(label, of, unit.factor(), unit.sign(), read));
        }
    };
    let lag = if integrates {
        "Lag τ"
    } else {
        "Time constant τ"
    };
    time(
        lag,
        fit.time_constant_s,
        read.and_then(|(_, r)| r.time_constant_s),
    );
    time("Second time constant τ₂", fit.second_time_constant_s, None);
    time(
        "Dead time θ",
        Some(fit.dead_time_s),
        read.map(|(_, r)| r.dead_time_s),
    );

    let plain_row = |label: &str, value: Cell, interval: Cell| {
        let mut cells = vec![value, interval];
        if with_reading {
            cells.push(Cell::none());
        }
        Row::new(label, cells)
    };
    let of_valve = |value: Cell, interval: Cell| plain_row("Valve dead band", value, interval);
    rows.push(match &record.valve {
        Some(valve) if !valve.is_seen() => of_valve(
            Cell::words(format!(
                "less than {}{NO_BREAK}%",
                display::significant(valve.high, 2)
            )),
            Cell::words(""),
        ),
        Some(valve) if valve.open => of_valve(
            Cell::words(format!(
                "at least {}{NO_BREAK}%",
                display::significant(valve.low, 2)
            )),
            Cell::words(""),
        ),
        Some(valve) => {
            let of = Estimate::new(valve.dead_band_percent, valve.low, valve.high);
            let (value, interval) = estimate(of, 1.0);
            of_valve(Cell::figure(value, "%"), Cell::figure(interval, "%"))
        }
        None => of_valve(Cell::words("not assessable"), Cell::words("")),
    });
    rows.push(match fit.noise_sd_percent {
        Some(noise) => plain_row(
            "Noise of PV (sd)",
            Cell::figure(
                display::significant(noise * context.pv_per_percent, 2),
                context.pv_unit.clone(),
            ),
            Cell::words(""),
        ),
        None => plain_row(
            "Noise of PV (sd)",
            Cell::words("not assessable"),
            Cell::words(""),
        ),
    });
    let mut heads = vec![
        "Parameter".to_owned(),
        "Value".to_owned(),
        format!("95{NO_BREAK}% interval"),
    ];
    heads.extend(read.map(|(number, _)| format!("Read off step{NO_BREAK}{number}")));
    Table { heads, rows }
}

fn notes(context: &Context) -> Vec<String> {
    let record = context.record;
    let Some(block) = record.model.as_ref() else {
        return Vec::new();
    };
    let fit = &block.fit;
    let mut notes = Vec::new();
    let [low, high] = record.test.pv_tested;
    let decimals = super::numbers::decimals_to_show(high - low, 20.0);
    let tested = format!(
        "{} to {}{NO_BREAK}{}",
        display::fixed(low, decimals),
        display::fixed(high, decimals),
        context.pv_unit
    );
    if fit.widened {
        notes.push(match fit.nonlinear_gain() {
            Some(ratio) => format!(
                "The intervals are widened to cover the spread between steps: the process is nonlinear \
                 over the range tested, {tested} (largest gain {} times the smallest).",
                display::fixed(ratio, 1)
            ),
            None => format!(
                "The intervals are widened to cover the spread between steps over the range tested, \
                 {tested}."
            ),
        });
    } else if let Some(ratio) = fit.nonlinear_gain() {
        notes.push(format!(
            "The process is nonlinear over the range tested, {tested}: the largest gain is {} times the \
             smallest.",
            display::fixed(ratio, 1)
        ));
    }
    if fit.double_lag() {
        notes.push(
            "The two time constants cannot be told apart: the process is a double lag.".to_owned(),
        );
    }
    if let Some(ratio) = fit.direction_ratio {
        notes.push(format!(
            "The gain of upward moves is {} times that of downward moves.",
            display::fixed(ratio, 2)
        ));
    }
    match (&record.valve, &record.test.valve_not_assessed) {
        (Some(valve), _) if valve.in_fit => notes.push(
            "Gains and fits are those of the valve's own moves: the dead band is taken off the moves of OP."
                .to_owned(),
        ),
        (Some(valve), _) if valve.open && valve.is_seen() => notes.push(
            "Of the dead band the test tells the least it can be: how much of it lay before the first move \
             is not known. Gains are those of the OP's moves."
                .to_owned(),
        ),
        (None, Some(why)) => notes.push(format!("Valve dead band: {why}.")),
        _ => {}
    }
    if let Some(undecided) = &fit.undecided {
        notes.push(sentence(&bound(undecided)));
    }
    let differing: Vec<usize> = record
        .steps
        .iter()
        .filter(|s| s.verdict != Verdict::Rejected)
        .filter(|s| s.reading.as_ref().is_some_and(|r| r.differs))
        .map(|s| s.number)
        .collect();
    if !differing.is_empty() {
        let steps = if differing.len() == 1 {
            "step"
        } else {
            "steps"
        };
        let cause = if fit.kind == Kind::SecondOrder {
            "The reading counts the second time constant as waiting."
        } else if record.valve.is_some_and(|valve| valve.in_fit) {
            "Usual causes: the dead band of the valve, a process of higher order, drift or noise."
        } else {
            "Usual causes: a process of higher order, drift or noise."
        };
        notes.push(format!(
            "Reading and fit differ by more than 25{NO_BREAK}% on {steps}{NO_BREAK}{}. {cause}",
            runs(&differing)
        ));
    }
    notes
}

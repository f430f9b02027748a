//! Settings in the words and units of the controller they are typed into.

use super::numbers::Cell;
use crate::display::{self, NO_BREAK};
use crate::record::Loop;
use crate::settings::{
    Action, DerivativeUnit, EquationForm, IntegralUnit, Native, ProportionalUnit, Standard,
};

/// Name and unit of one setting.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Named {
    pub label: &'static str,
    pub unit: String,
}

fn gain_unit(of: &Loop) -> String {
    match of.p_as {
        ProportionalUnit::Gain => "%/%".to_owned(),
        ProportionalUnit::Band => "%".to_owned(),
        ProportionalUnit::GainPerUnit => format!("%/{}", display::unit(&of.pv.unit)),
    }
}

/// The proportional setting.
pub(super) fn proportional(of: &Loop) -> Named {
    let label = match (of.p_as, of.form) {
        (ProportionalUnit::Band, _) => "Proportional band",
        (_, EquationForm::Parallel) => "Proportional gain",
        _ => "Controller gain",
    };
    Named {
        label,
        unit: gain_unit(of),
    }
}

/// The integral setting.
pub(super) fn integral(of: &Loop) -> Named {
    if of.form == EquationForm::Parallel {
        let per = match of.i_as {
            IntegralUnit::PerMinute | IntegralUnit::Minutes => "min",
            IntegralUnit::PerSecond | IntegralUnit::Seconds => "s",
        };
        return Named {
            label: "Integral gain",
            unit: format!("({})/{per}", gain_unit(of)),
        };
    }
    let (label, unit) = match of.i_as {
        IntegralUnit::Seconds => ("Integral time", "s"),
        IntegralUnit::Minutes => ("Integral time", "min"),
        IntegralUnit::PerSecond => ("Reset rate", "/s"),
        IntegralUnit::PerMinute => ("Reset rate", "/min"),
    };
    Named {
        label,
        unit: unit.to_owned(),
    }
}

/// The derivative setting.
pub(super) fn derivative(of: &Loop) -> Named {
    let time = match of.d_as {
        DerivativeUnit::Seconds => "s",
        DerivativeUnit::Minutes => "min",
    };
    if of.form == EquationForm::Parallel {
        return Named {
            label: "Derivative gain",
            unit: format!("({}){NO_BREAK}{time}", gain_unit(of)),
        };
    }
    Named {
        label: "Derivative time",
        unit: time.to_owned(),
    }
}

/// A number as it is typed: all its figures, and two places below 10 where it is not whole.
pub(super) fn typed(value: f64) -> String {
    let text = display::plain(value, 6);
    if text.contains('.') && value < 10.0 && super::numbers::decimals_of(&text) < 2 {
        return display::fixed(value, 2);
    }
    text
}

/// The three settings with their names, in the order P, I, D; a term that is not used is "off".
pub(super) fn settings(of: &Loop, native: Native) -> [(Named, Cell); 3] {
    let term = |named: Named, value: f64, may_be_off: bool| {
        let cell = if may_be_off && value == 0.0 {
            Cell::words("off")
        } else {
            Cell::figure(typed(value), named.unit.clone())
        };
        (named, cell)
    };
    [
        term(
            proportional(of),
            native.p,
            of.form == EquationForm::Parallel,
        ),
        term(integral(of), native.i, true),
        term(derivative(of), native.d, true),
    ]
}

/// Settings in one line for the register: "PB 42 %, 3.60 min".
pub(super) fn short(of: &Loop, native: Native) -> Vec<String> {
    let [p, i, d] = settings(of, native).map(|(_, cell)| cell.sentence());
    let p = match of.p_as {
        ProportionalUnit::Band => format!("PB{NO_BREAK}{p}"),
        _ => p,
    };
    let mut parts = vec![p, i];
    if native.d > 0.0 {
        parts.push(d);
    }
    parts
}

/// The settings in standard form: Kc, Ti, and Td where `derivative` says that it is shown.
pub(super) fn standard(of: Option<Standard>, derivative: bool) -> Vec<(&'static str, Cell)> {
    let seconds = |s: f64| Cell::figure(super::numbers::grouped(&display::plain(s, 3)), "s");
    let mut rows = vec![
        (
            "Controller gain Kc",
            of.map_or_else(Cell::none, |s| {
                Cell::figure(display::significant(s.kc, 3), "%/%")
            }),
        ),
        (
            "Integral time Ti",
            of.map_or_else(Cell::none, |s| match s.ti_s {
                Some(ti) => seconds(ti),
                None => Cell::words("off"),
            }),
        ),
    ];
    if derivative {
        rows.push((
            "Derivative time Td",
            of.map_or_else(Cell::none, |s| {
                if s.td_s > 0.0 {
                    seconds(s.td_s)
                } else {
                    Cell::words("off")
                }
            }),
        ));
    }
    rows
}

/// Whether what is typed is already the standard form in %/% and seconds.
pub(super) fn is_standard(of: &Loop) -> bool {
    of.form == EquationForm::Standard
        && of.p_as == ProportionalUnit::Gain
        && of.i_as == IntegralUnit::Seconds
        && of.d_as == DerivativeUnit::Seconds
}

/// Name of the form.
pub(super) fn form(of: EquationForm) -> &'static str {
    match of {
        EquationForm::Standard => "standard",
        EquationForm::Series => "series",
        EquationForm::Parallel => "parallel",
    }
}

/// Name of the action.
pub(super) fn action(of: Action) -> &'static str {
    match of {
        Action::Direct => "direct",
        Action::Reverse => "reverse",
    }
}

/// The PV filter in words.
pub(super) fn filter(seconds: f64) -> String {
    if seconds > 0.0 {
        format!("{}{NO_BREAK}s", display::plain(seconds, 4))
    } else {
        "none".to_owned()
    }
}

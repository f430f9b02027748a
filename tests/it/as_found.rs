//! Settings as found that are odd, and what is said of them.

use crate::loops::Plan;
use crate::synthetic::sealed;
use asleft::assemble;
use asleft::design::Aim;
use asleft::document::{self, Templates};
use asleft::figures;
use asleft::model::{Kind, ProcessModel};
use asleft::record::{Record, Status};
use asleft::settings::{
    Action, DerivativeUnit, EquationForm, IntegralUnit, Native, ProportionalUnit,
};

fn plan(form: EquationForm) -> Plan {
    let parallel = form == EquationForm::Parallel;
    Plan {
        process: ProcessModel::of_kind(Kind::SecondOrder, 1.2, 60.0, 25.0, 6.0),
        form,
        units: (
            ProportionalUnit::Gain,
            if parallel {
                IntegralUnit::PerMinute
            } else {
                IntegralUnit::Seconds
            },
            DerivativeUnit::Seconds,
        ),
        derivative: true,
        aim: Aim::Load,
        target_s: None,
        left: false,
        trial: false,
        turned: false,
    }
}

/// The record of a loop found with these settings, and the words of its pages.
fn found(form: EquationForm, p: f64, i: f64, d: f64) -> (Record, String) {
    let mut input = plan(form).input();
    input.found = Native { p, i, d };
    of(input)
}

fn of(input: assemble::LoopInput) -> (Record, String) {
    let record = sealed(assemble::assemble(input).expect("a record"));
    assert_ne!(record.document.status, Status::Withheld);
    let templates = Templates::default();
    let pages = document::record_page_texts(&record, &figures::draw(&record), &templates)
        .expect("typeset")
        .join(" ")
        .replace(['\u{a0}', '\u{202f}', '\u{2011}'], " ");
    let text = pages.split_whitespace().collect::<Vec<_>>().join(" ");
    (record, text)
}

#[test]
fn proportional_action_alone_is_told_as_off_and_not_settled() {
    let (record, text) = found(EquationForm::Standard, 1.5, 0.0, 0.0);
    let block = &record.settings.as_found;
    let margins = block.margins.expect("margins");
    assert!(margins.stable && margins.ms.is_some());
    assert_eq!(block.standard.expect("standard form").ti_s, None);
    // An offset is left: the PV does not come to the set point.
    let predicted = block.predicted.as_ref().expect("predicted");
    assert_eq!(predicted.set_point.metrics.settling_time_s, None);
    for said in ["Integral time Ti off", "not settled"] {
        assert!(text.contains(said), "{said:?} is not in: {text}");
    }
}

#[test]
fn integral_action_alone_has_margins_and_no_standard_form() {
    let (record, text) = found(EquationForm::Parallel, 0.0, 0.4, 0.0);
    let block = &record.settings.as_found;
    assert_eq!(block.standard, None);
    let margins = block.margins.expect("margins");
    assert!(margins.stable && margins.ms.is_some());
    assert!(block.predicted.is_some());
    assert!(
        text.contains("Proportional gain off") || text.contains("gain off"),
        "{text}"
    );
    // The design is for the same form and has all it needs.
    let recommended = record.settings.recommended.expect("recommended");
    assert!(recommended.native.p > 0.0 && recommended.native.i > 0.0);
}

#[test]
fn a_derivative_longer_than_the_integral_of_a_series_controller_is_taken_as_typed() {
    let (record, text) = found(EquationForm::Series, 0.4, 20.0, 60.0);
    // Series (0.4, 20, 60) is standard (1.6, 80, 15): K.J. Åström, T. Hägglund, PID Controllers, 2nd ed. 1995,
    // sec. 3.2: Kc = Kc′(Ti′ + Td′)/Ti′, Ti = Ti′ + Td′, Td = Ti′Td′/(Ti′ + Td′).
    let standard = record.settings.as_found.standard.expect("standard form");
    for (found, expected) in [
        (standard.kc, 1.6),
        (standard.ti_s.expect("integral"), 80.0),
        (standard.td_s, 15.0),
    ] {
        assert!((found - expected).abs() < 1e-9 * expected, "{found}");
    }
    for said in ["Derivative time 60 s", "series form"] {
        assert!(text.contains(said), "{said:?} is not in: {text}");
    }
    // What is to be entered has Ti′ ≥ Td′.
    let native = record.settings.recommended.expect("recommended").native;
    assert!(native.i >= native.d);
}

#[test]
fn an_action_that_was_wrong_as_found_and_is_right_as_left_is_told() {
    let mut input = plan(EquationForm::Standard).input();
    let right = input.control_loop.action;
    assert_eq!(right, Action::Reverse);
    input.control_loop.action = Action::Direct;
    input.control_loop.left_action = Some(right);
    let (record, text) = of(input);
    let margins = record.settings.as_found.margins.expect("margins");
    assert!(!margins.stable && margins.ms.is_none());
    assert!(record.settings.recommended.is_some());
    for said in ["unstable", "Action direct reverse"] {
        assert!(text.contains(said), "{said:?} is not in: {text}");
    }
}

#[test]
fn every_set_of_settings_has_nominal_and_worst_margins_on_its_page() {
    let mut input = Plan {
        left: true,
        ..plan(EquationForm::Standard)
    }
    .input();
    // Steps that differ make a set: the second half of the test answers with a fifth more.
    let half = input.test.data.pv.len() / 2;
    let base = input.test.data.pv[half];
    for pv in &mut input.test.data.pv[half..] {
        *pv = base + 1.2 * (*pv - base);
    }
    let (record, text) = of(input);
    let start = text.find("Margins, fitted model").expect("nominal");
    let worst = text.find("Margins, worst of the models").expect("worst");
    let settings = &record.settings;
    let blocks = [
        Some(&settings.as_found),
        settings.recommended.as_ref(),
        settings.as_left.as_ref(),
    ];
    for (rows, worst_of_set) in [(&text[start..worst], false), (&text[worst..], true)] {
        let figures: Vec<String> = blocks
            .iter()
            .map(|block| {
                let block = block.expect("all three");
                let margins = if worst_of_set {
                    block.worst_margins
                } else {
                    block.margins
                };
                format!("{:.2}", margins.and_then(|m| m.ms).expect("stable"))
            })
            .collect();
        // The label's s is set lower, a word of its own.
        let row = rows.find("Phase margin").map_or(rows, |end| &rows[..end]);
        assert!(row.contains(&figures.join(" ")), "{figures:?} in {row}");
    }
    let nominal = settings.as_found.margins.and_then(|m| m.ms);
    let worst = settings.as_found.worst_margins.and_then(|m| m.ms);
    assert!(worst > nominal, "the set is worse than the fitted model");
}

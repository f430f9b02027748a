use super::figures::{self, Figures};
use super::*;
use crate::model::Kind;
use crate::record::{PageSize, Procedure, Range, Status};
use crate::settings::{
    Action, ActsOn, DerivativeUnit, EquationForm, IntegralUnit, ProportionalUnit,
};
use std::collections::BTreeMap;

fn basis(process: ProcessModel, sigma_percent: f64) -> Basis {
    Basis {
        number: "LM-TIC-1".into(),
        revision: "0".into(),
        date: day(),
        tested_on: None,
        process: Some(process),
        gain_engineering: None,
        most_gain_ratio: 1.0,
        sigma_percent: Some(sigma_percent),
        dead_band_percent: None,
        op_tested: [40.0, 50.0],
        pv_tested: [40.0, 60.0],
    }
}

fn day() -> NaiveDate {
    NaiveDate::from_ymd_opt(2026, 3, 14).expect("a date")
}

fn first_order(gain: f64) -> ProcessModel {
    ProcessModel::of_kind(Kind::FirstOrder, gain, 90.0, 0.0, 15.0)
}

fn level(gain_per_s: f64) -> ProcessModel {
    ProcessModel::of_kind(Kind::Integrating, gain_per_s, 0.0, 0.0, 17.0)
}

fn figures_of(basis: &Basis) -> Figures {
    figures::of(Some(basis), 1.0, None, false)
}

/// Move of OP, PV change and S/N of what is proposed, and what decided it.
fn proposed(size: Size) -> (f64, f64, f64, DecidedBy) {
    match size {
        Size::Proposed {
            op_percent,
            pv_percent,
            signal_to_noise,
            decided_by,
            ..
        } => (op_percent, pv_percent, signal_to_noise, decided_by),
        Size::ToAgree { because } => panic!("{because:?}"),
    }
}

fn near(found: f64, expected: f64) -> bool {
    (found - expected).abs() <= 1e-9 * expected.abs()
}

#[test]
fn a_move_gives_twenty_times_the_noise() {
    // 20 · 0.05 / 0.8 = 1.25, on the grid of halves 1.5; 0.8 · 1.5 = 1.2; 1.2 / 0.05 = 24.
    let found = figures_of(&basis(first_order(-0.8), 0.05));
    let (op, pv, signal, by) = proposed(found.size);
    assert!(near(op, 1.5) && near(pv, 1.2) && near(signal, 24.0));
    assert_eq!(by, DecidedBy::Noise);
    // θ + 4 τ = 15 + 360 s, on the clock 390 s; one wait before four moves.
    let times = found.times.expect("known");
    assert_eq!((times.before_s, times.watch_s), (390.0, 390.0));
    assert_eq!(times.total_s, 5.0 * 390.0);
    // τ/20 = 4.5 s, of the intervals that trends offer 3 s.
    assert_eq!(found.log_interval_s, 3.0);
    assert_eq!(found.logged_for, LoggedFor::TimeConstant);
    // One and a half times and twice 1.2 %, and 5 % clear of the ends of the ranges.
    let limits = found.limits.expect("proposed");
    assert!(near(limits.pv_hold_percent, 1.8) && near(limits.pv_abort_percent, 2.4));
    assert_eq!(limits.op_start_percent, [6.5, 93.5]);
    assert!(near(limits.pv_start_percent[0], 7.4) && near(limits.pv_start_percent[1], 92.6));
    assert_eq!(limits.time_to_abort_s, None);
}

#[test]
fn a_move_is_one_that_the_valve_follows() {
    let mut quiet = basis(first_order(0.8), 0.001);
    let size = |basis: &Basis| {
        let (op, _, _, by) = proposed(figures_of(basis).size);
        (op, by)
    };
    assert_eq!(size(&quiet), (1.0, DecidedBy::LeastMove));
    quiet.dead_band_percent = Some(0.02);
    assert_eq!(size(&quiet), (0.2, DecidedBy::LeastMove));
    quiet.dead_band_percent = Some(0.6);
    assert_eq!(size(&quiet), (2.0, DecidedBy::DeadBand));
}

#[test]
fn no_move_goes_further_than_the_bounds() {
    // 20 · 1 / 0.8 = 25 % of OP: ten are proposed, and what they give is said.
    let (op, pv, signal, by) = proposed(figures_of(&basis(first_order(0.8), 1.0)).size);
    assert_eq!((op, by), (10.0, DecidedBy::OpShare));
    assert!(near(pv, 8.0) && near(signal, 8.0));
    // 20 · 1 / 2 = 10 % of OP would move PV by 20 %.
    let (op, pv, _, by) = proposed(figures_of(&basis(first_order(2.0), 1.0)).size);
    assert_eq!((op, by), (5.0, DecidedBy::PvShare));
    assert!(near(pv, 10.0));
    // The largest gain of any step counts.
    let mut uneven = basis(first_order(2.0), 1.0);
    uneven.most_gain_ratio = 2.0;
    assert_eq!(proposed(figures_of(&uneven).size).0, 2.5);
    // A bound from above stands before one from below.
    uneven.dead_band_percent = Some(3.0);
    assert_eq!(proposed(figures_of(&uneven).size).0, 2.5);
    let (op, _, _, by) = proposed(figures_of(&basis(first_order(150.0), 1.0)).size);
    assert_eq!((op, by), (0.06, DecidedBy::PvShare));
}

#[test]
fn no_size_without_gain_and_noise() {
    let why = |found: Figures| match found.size {
        Size::ToAgree { because } => because,
        Size::Proposed { .. } => panic!("{found:?}"),
    };
    let none = figures::of(None, 0.5, None, false);
    assert_eq!(why(none), NotProposed::NoRecord);
    assert_eq!((none.times, none.limits), (None, None));
    assert_eq!(
        (none.log_interval_s, none.logged_for),
        (0.5, LoggedFor::NoModel)
    );

    let mut noise_alone = basis(first_order(1.0), 0.1);
    noise_alone.process = None;
    assert_eq!(why(figures_of(&noise_alone)), NotProposed::NoModel);

    let mut gain_alone = basis(first_order(1.0), 0.1);
    gain_alone.sigma_percent = None;
    let found = figures_of(&gain_alone);
    assert_eq!(why(found), NotProposed::NoNoise);
    assert_eq!(found.times.expect("of the model").watch_s, 390.0);
    assert_eq!(found.limits, None);

    let protective = figures::of(Some(&basis(first_order(1.0), 0.1)), 1.0, None, true);
    assert_eq!(why(protective), NotProposed::Protective);
    assert_eq!((protective.times, protective.limits), (None, None));
}

#[test]
fn a_level_is_watched_for_longer_rather_than_moved_further() {
    let (slope, sigma) = (0.0059, 0.119);
    let found = figures_of(&basis(level(-slope), sigma));
    let (op, pv, signal, by) = proposed(found.size);
    let watch = found.times.expect("known").watch_s;
    assert_eq!((op, by), (5.0, DecidedBy::Noise));
    assert!(near(pv, slope * op * watch));
    assert!(near(signal, slope * op * (watch - 17.0) / sigma) && signal >= 20.0);
    assert!(watch >= 5.0 * 17.0);
    let limits = found.limits.expect("proposed");
    let run = limits.time_to_abort_s.expect("it runs");
    assert!(near(slope * op * (run - 17.0), limits.pv_abort_percent));

    // A quiet level needs no longer than five dead times, 85 s.
    let quiet = figures_of(&basis(level(slope), 0.01));
    assert_eq!(quiet.times.expect("known").watch_s, 90.0);

    // An allowed deviation of 1 % is kept, whatever the noise asks for.
    let bounded = figures::of(Some(&basis(level(slope), sigma)), 1.0, Some(1.0), false);
    let (_, pv, signal, by) = proposed(bounded.size);
    assert_eq!(by, DecidedBy::AllowedDeviation);
    assert!(pv <= 1.0 && signal < 20.0, "{pv} {signal}");
    assert!(bounded.limits.expect("proposed").pv_abort_percent <= 1.0);
}

#[test]
fn a_log_is_as_fast_as_the_process_asks() {
    let interval = |process: ProcessModel, scan_s: f64| {
        let found = figures::of(Some(&basis(process, 0.1)), scan_s, None, false);
        (found.log_interval_s, found.logged_for)
    };
    let fast = ProcessModel::of_kind(Kind::FirstOrder, 1.0, 2.0, 0.0, 1.0);
    assert_eq!(interval(fast, 15.0), (0.1, LoggedFor::TimeConstant));
    let slow = ProcessModel::of_kind(Kind::FirstOrder, 1.0, 4e4, 0.0, 1.0);
    assert_eq!(interval(slow, 1.0), (60.0, LoggedFor::TimeConstant));
    // θ/5 = 3.4 s.
    assert_eq!(interval(level(0.01), 1.0), (3.0, LoggedFor::DeadTime));
    let bare = ProcessModel::of_kind(Kind::Integrating, 0.01, 0.0, 0.0, 0.0);
    assert_eq!(interval(bare, 2.0), (2.0, LoggedFor::Scan));
}

#[test]
fn moves_stand_far_enough_apart_to_be_told_apart_and_written_down() {
    let watch = |scan_s: f64| {
        let fast = ProcessModel::of_kind(Kind::FirstOrder, 1.0, 2.0, 0.0, 1.0);
        let found = figures::of(Some(&basis(fast, 0.1)), scan_s, None, false);
        found.times.expect("known").watch_s
    };
    assert_eq!(watch(1.0), 30.0);
    // Five scans of 15 s.
    assert_eq!(watch(15.0), 80.0);
}

fn loop_of(tag: &str) -> Loop {
    let range = |unit: &str| Range {
        unit: unit.into(),
        low: 0.0,
        high: 100.0,
    };
    Loop {
        tag: tag.into(),
        service: "Jacket".into(),
        pv: range("degC"),
        op: range("%"),
        action: Action::Reverse,
        left_action: None,
        form: EquationForm::Standard,
        p_as: ProportionalUnit::Gain,
        i_as: IntegralUnit::Seconds,
        d_as: DerivativeUnit::Seconds,
        p_on: ActsOn::Error,
        d_on: ActsOn::Pv,
        d_filter_n: 10.0,
        scan_s: 1.0,
        pv_filter_s: 0.0,
        left_pv_filter_s: None,
        pv_filter_in_log: true,
        aim: crate::design::Aim::Load,
        derivative: false,
        target_s: None,
        target_reason: None,
        allowed_deviation: None,
        expected_load_percent: None,
        inner_loop: None,
        outer_loops: Vec::new(),
        safety: false,
        safety_procedure: None,
        waiver: None,
        entered_by: None,
        left_on: None,
        tested_by: None,
        tested_on: None,
        witnessed_by: None,
        conditions: None,
        particulars: BTreeMap::new(),
    }
}

fn plan_of(control_loop: Loop) -> Plan {
    plan(PlanInput {
        document: Document {
            number: "LM-TIC-1_plan".into(),
            revision: "0".into(),
            status: Status::Draft,
            date: day(),
            owner: "Larkmoor".into(),
            plant: "Solvents".into(),
            area: None,
            client: None,
            creator: None,
            approver: None,
            page: PageSize::A4,
            open_items: Vec::new(),
            remarks: Vec::new(),
            signatures: Vec::new(),
            procedures: vec![Procedure {
                title: "Permit to work".into(),
                reference: "LM-SP-014".into(),
            }],
            revisions: Vec::new(),
        },
        control_loop,
        found: None,
        earlier: Vec::new(),
        set_aside: Vec::new(),
        log: LogWanted::default(),
        site_cautions: vec!["Mind the relief path.".into()],
        program: "asleft",
    })
}

#[test]
fn the_series_comes_twice_in_each_direction_and_ends_where_it_began() {
    let size = figures_of(&basis(first_order(-0.8), 0.05));
    let steps = moves(size.size, size.times, Some(&basis(first_order(-0.8), 0.05)));
    let ways: Vec<(bool, bool, bool)> = steps
        .iter()
        .map(|step| (step.up, step.turns_back, step.to_start))
        .collect();
    assert_eq!(
        ways,
        [
            (true, false, false),
            (false, true, true),
            (false, false, false),
            (true, true, true)
        ]
    );
    let offsets: Vec<Option<f64>> = steps.iter().map(|step| step.op_offset_percent).collect();
    assert_eq!(offsets, [Some(1.5), Some(0.0), Some(-1.5), Some(0.0)]);
    let pv: Vec<f64> = steps
        .iter()
        .map(|step| step.pv_offset_percent.expect("known"))
        .collect();
    assert!(near(pv[0], -1.2) && pv[1] == 0.0 && near(pv[2], 1.2) && pv[3] == 0.0);
    assert!(
        steps
            .iter()
            .all(|step| step.pv_slope_percent_per_s.is_none())
    );
}

#[test]
fn pulses_bring_a_level_back() {
    let of = basis(level(0.0059), 0.119);
    let size = figures_of(&of);
    let watch = size.times.expect("known").watch_s;
    let steps = moves(size.size, size.times, Some(&of));
    let pv: Vec<f64> = steps
        .iter()
        .map(|step| step.pv_offset_percent.expect("known"))
        .collect();
    // The ramp comes θ late and goes on for θ after the OP is back.
    let rate = 0.0059 * 5.0;
    assert!(near(pv[0], rate * (watch - 17.0)) && near(pv[1], rate * watch));
    assert!(near(pv[2], rate * 17.0) && pv[3].abs() < 1e-9);
    assert!(near(
        steps[0].pv_slope_percent_per_s.expect("it runs"),
        rate
    ));
}

#[test]
fn a_protective_loop_without_its_procedure_is_not_tested() {
    let mut control_loop = loop_of("TIC-1");
    control_loop.safety = true;
    let refused = plan_of(control_loop.clone());
    assert!(!refused.is_for_a_test() && refused.limits.is_none());
    assert!(
        refused
            .cautions
            .iter()
            .any(|c| c.text.contains("it is not tested"))
    );
    control_loop.safety_procedure = Some("LM-SP-090".into());
    let governed = plan_of(control_loop);
    assert!(governed.is_for_a_test());
    assert!(
        governed
            .cautions
            .iter()
            .any(|c| c.text.contains("only under LM-SP-090"))
    );
    assert!(
        governed
            .cautions
            .iter()
            .any(|c| c.text.contains("relief path"))
    );
}

#[test]
fn a_level_is_known_by_its_tag_or_its_aim() {
    let integrating = |tag: &str| plan_of(loop_of(tag)).integrating;
    assert!(integrating("LIC-204") && integrating("200-lic-7") && integrating("U2/LC101"));
    assert!(!integrating("TIC-L1") && !integrating("FIC-201"));
    let mut averaging = loop_of("XC-1");
    averaging.aim = crate::design::Aim::Averaging;
    assert!(plan_of(averaging).integrating);
}

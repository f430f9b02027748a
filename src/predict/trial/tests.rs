//! Trials made with a known process, held against a prediction that is right or wrong.

use super::*;
use crate::model::Kind;
use crate::predict::simulate::{Inputs, SampledController, run};
use crate::quantity::Span;
use crate::settings::{ActsOn, DerivativeUnit, EquationForm, IntegralUnit, ProportionalUnit};
use crate::trace::Samples;

const SCAN_S: f64 = 0.5;
const OP_REST: f64 = 45.0;
const PV_REST: f64 = 40.0;

fn percent() -> Span {
    Span::new(0.0, 100.0).expect("a range")
}

fn controller() -> Controller {
    Controller {
        form: EquationForm::Standard,
        p_as: ProportionalUnit::Gain,
        i_as: IntegralUnit::Seconds,
        d_as: DerivativeUnit::Seconds,
        p_on: ActsOn::Error,
        d_on: ActsOn::Pv,
        d_filter_n: 10.0,
        scan_s: SCAN_S,
        pv_span: percent(),
        op_span: percent(),
    }
}

fn process(gain: f64) -> ProcessModel {
    ProcessModel::of_kind(Kind::FirstOrder, gain, 30.0, 0.0, 5.3)
}

fn terms(kc: f64) -> Terms {
    Terms::Standard {
        kc,
        ti_s: Some(30.0),
        td_s: 0.0,
    }
}

/// White noise without a generator: sines that never come round together.
fn noise(k: usize) -> f64 {
    let k = k as f64;
    0.1 * (libm::sin(k * 12.9898) * 43_758.545_3).rem_euclid(1.0) - 0.05
}

/// A log of the loop, sampled each second; inputs by time.
fn log(gain: f64, kc: f64, seconds: usize, inputs: impl Fn(f64) -> Inputs) -> Trace {
    let mut samples = Samples::default();
    let mut sampled = SampledController::new(
        &terms(kc),
        &controller(),
        PvFilter::default(),
        Action::Reverse,
        [-OP_REST, 100.0 - OP_REST],
    );
    let mut k = 0;
    run(
        &process(gain),
        &mut sampled,
        SCAN_S,
        2 * seconds,
        |k| inputs(k as f64 * SCAN_S),
        |sample| {
            if k % 2 == 0 {
                samples.t_s.push(sample.t_s);
                samples.pv.push(PV_REST + sample.pv + noise(k));
                samples.op.push(OP_REST + sample.op);
                samples.sp.push(PV_REST + sample.set_point);
                samples.good.push(true);
            }
            k += 1;
        },
    );
    Trace::new(&samples, percent(), percent()).expect("a trace")
}

fn set_point(t: f64) -> Inputs {
    Inputs {
        set_point: if (200.0..900.0).contains(&t) {
            4.0
        } else {
            0.0
        },
        load: 0.0,
    }
}

fn judged(trace: &Trace, gain: f64, kc: f64) -> Result<Trial, TrialError> {
    judged_with(trace, gain, kc, &[])
}

fn judged_with(
    trace: &Trace,
    gain: f64,
    kc: f64,
    others: &[(String, ProcessModel)],
) -> Result<Trial, TrialError> {
    let (model, terms, controller) = (process(gain), terms(kc), controller());
    trial(
        trace,
        &AsLeft {
            model: &model,
            others,
            terms: &terms,
            controller: &controller,
            filter: PvFilter::default(),
            action: Action::Reverse,
        },
    )
}

#[test]
fn a_right_model_agrees_with_its_trial() {
    let found = judged(&log(1.5, 1.5, 1500, set_point), 1.5, 1.5).expect("a trial");
    assert_eq!(found.kind, TrialKind::SetPoint);
    assert_eq!((found.at_s, found.step_percent), (200.0, 4.0));
    assert!(found.agrees, "{}", found.why);
    assert_eq!(found.oscillation, None);
    // What is left is the noise: uniform over 0.1, sd 0.029.
    assert!(
        found.predicted_rmse_percent < 0.035,
        "{}",
        found.predicted_rmse_percent
    );
    assert!((200..=400).contains(&found.curve.t_s.len()));
    let (measured, predicted) = (found.measured, found.predicted);
    let near = |a: Option<f64>, b: Option<f64>, tolerance: f64| {
        let (a, b) = a.zip(b).expect("both have the figure");
        assert!((a - b).abs() <= tolerance, "{a} measured, {b} predicted");
    };
    near(measured.rise_time_s, predicted.rise_time_s, 2.0);
    near(measured.settling_time_s, predicted.settling_time_s, 6.0);
    near(measured.overshoot_percent, predicted.overshoot_percent, 2.0);
}

#[test]
fn a_process_of_three_times_the_gain_does_not_agree() {
    let found = judged(&log(4.6, 1.5, 1500, set_point), 1.5, 1.5).expect("a trial");
    assert!(!found.agrees);
    assert!(found.why.contains("overshoots"), "{}", found.why);
    let seen = found.oscillation.expect("it swings");
    assert!(!seen.limit_cycle && seen.decay_ratio > 0.25, "{seen:?}");
}

#[test]
fn a_load_serves_where_no_set_point_was_moved() {
    let load = |t: f64| Inputs {
        set_point: 0.0,
        load: if t >= 310.0 { -6.0 } else { 0.0 },
    };
    let found = judged(&log(1.5, 1.5, 1000, load), 1.5, 1.5).expect("a trial");
    assert_eq!(found.kind, TrialKind::Load);
    assert!(found.agrees, "{}", found.why);
    assert_eq!(found.measured.overshoot_percent, None);
    assert!((found.at_s - 310.0).abs() <= 2.0, "{}", found.at_s);
    assert!(
        (found.step_percent + 6.0).abs() < 0.2,
        "{}",
        found.step_percent
    );
    let quiet = |_| Inputs::default();
    let nothing = judged(&log(1.5, 1.5, 1000, quiet), 1.5, 1.5);
    assert_eq!(nothing, Err(TrialError::NothingHappened));
}

#[test]
fn a_limit_cycle_is_named() {
    // A square wave of load, as a sticking valve makes it.
    let sticking = |t: f64| Inputs {
        set_point: 0.0,
        load: if (t / 60.0) as i64 % 2 == 0 {
            2.0
        } else {
            -2.0
        },
    };
    let found = judged(&log(1.5, 1.5, 1800, sticking), 1.5, 1.5).expect("a trial");
    assert!(!found.agrees);
    let seen = found.oscillation.expect("a limit cycle");
    assert!(seen.limit_cycle, "{seen:?}");
    assert!((seen.period_s - 120.0).abs() < 6.0, "{seen:?}");
    assert!(found.why.contains("valve"), "{}", found.why);
}

#[test]
fn manual_stretches_are_left_out() {
    let mut samples = Samples::default();
    for k in 0..100 {
        samples.t_s.push(k as f64);
        samples.pv.push(50.0);
        samples.op.push(50.0);
        samples.good.push(true);
        samples.manual.push(true);
    }
    let trace = Trace::new(&samples, percent(), percent()).expect("a trace");
    assert_eq!(judged(&trace, 1.5, 1.5), Err(TrialError::NeverAutomatic));
    samples.manual[20..30].fill(false);
    let trace = Trace::new(&samples, percent(), percent()).expect("a trace");
    assert_eq!(judged(&trace, 1.5, 1.5), Err(TrialError::TooShort(10)));
}

#[test]
fn every_move_is_judged_and_told_of() {
    // Up and down again: both moves, each with its own figures.
    let found = judged(&log(1.5, 1.5, 1500, set_point), 1.5, 1.5).expect("a trial");
    let sizes: Vec<(f64, f64)> = found
        .moves
        .iter()
        .map(|m| (m.at_s, m.step_percent))
        .collect();
    assert_eq!(sizes, [(200.0, 4.0), (900.0, -4.0)]);
    assert!(found.moves.iter().all(|m| m.agrees && m.why.is_empty()));
    assert!(found.why.contains("each of 2 set-point moves"));
    assert_eq!(found.not_judged, None);
    // The valve begins to stick after the second move: the first still agrees, the trial does not.
    let sticking = |t: f64| Inputs {
        load: match t {
            t if t < 900.0 => 0.0,
            t if (t / 60.0) as i64 % 2 == 0 => 2.0,
            _ => -2.0,
        },
        ..set_point(t)
    };
    let found = judged(&log(1.5, 1.5, 2400, sticking), 1.5, 1.5).expect("a trial");
    assert_eq!(
        found.moves.iter().map(|m| m.agrees).collect::<Vec<_>>(),
        [true, false]
    );
    assert!(!found.agrees);
    assert!(found.why.contains("after move 2 of 2"), "{}", found.why);
    assert!(found.oscillation.expect("of the second move").limit_cycle);
}

#[test]
fn a_move_that_was_not_watched_is_left_out_where_another_was() {
    // Bumped up 20 s before it is put where it stays: the loop needs some 60 s.
    let bumped = |t: f64| Inputs {
        set_point: match t {
            t if t < 200.0 => 0.0,
            t if t < 220.0 => 4.0,
            _ => 2.0,
        },
        load: 0.0,
    };
    let found = judged(&log(1.5, 1.5, 800, bumped), 1.5, 1.5).expect("a trial");
    assert_eq!(found.moves.len(), 1, "{:?}", found.moves);
    assert_eq!(found.moves[0].step_percent, -2.0);
    assert!(found.agrees, "{}", found.why);
    let left_out = found.not_judged.expect("the first move");
    assert!(
        left_out.contains("set-point move was not judged"),
        "{left_out}"
    );
}

#[test]
fn what_the_models_of_the_test_predict_between_them_agrees() {
    let (fitted, real) = (1.5, 3.4);
    let trace = log(real, 1.5, 1500, set_point);
    let alone = judged(&trace, fitted, 1.5).expect("a trial");
    assert!(!alone.agrees, "{}", alone.why);
    let of_step = |gain| [("the model of step 2".to_owned(), process(gain))];
    let among = judged_with(&trace, fitted, 1.5, &of_step(3.2)).expect("a trial");
    assert!(among.agrees, "{}", among.why);
    let m = &among.moves[0];
    let [low, high] = m.overshoot_of_models_percent.expect("a set-point move");
    let overshoot = m.measured.overshoot_percent.expect("a set-point move");
    assert!(
        low < 5.0 && (high - overshoot).abs() < 10.0,
        "{low} {high} {overshoot}"
    );
    // The band holds the PV, but for the noise.
    let band = &among.band;
    assert!(band.t_s.len() <= 300 && band.pv_low.iter().zip(&band.pv_high).all(|(a, b)| a <= b));
    let widest = band.pv_low.iter().zip(&band.pv_high).map(|(a, b)| b - a);
    assert!(widest.fold(0.0, f64::max) > 1.0);
    // Models with which the loop would not be stable widen nothing.
    let unstable = judged_with(&trace, fitted, 1.5, &of_step(30.0)).expect("a trial");
    assert_eq!(unstable, alone);
}

#[test]
fn several_loads_are_found_each_where_it_came_in() {
    let loads = |t: f64| Inputs {
        set_point: 0.0,
        load: match t {
            t if t < 310.0 => 0.0,
            t if t < 800.0 => -6.0,
            _ => 2.0,
        },
    };
    let found = judged(&log(1.5, 1.5, 1300, loads), 1.5, 1.5).expect("a trial");
    assert!(found.agrees, "{}", found.why);
    assert_eq!(found.moves.len(), 2, "{:?}", found.moves);
    for (m, (at_s, size)) in found.moves.iter().zip([(310.0, -6.0), (800.0, 8.0)]) {
        assert!(
            (m.at_s - at_s).abs() <= 2.0 && (m.step_percent - size).abs() < 0.3,
            "{m:?}"
        );
    }
    assert!(found.why.contains("Load steps of"), "{}", found.why);
    assert!(
        (found.step_percent - 8.0).abs() < 0.3,
        "the larger stands for both"
    );
    // With a wrong model no number of loads explains the run.
    let wrong = judged(&log(4.6, 1.5, 1300, loads), 0.4, 1.5).expect("a trial");
    assert!(!wrong.agrees, "{}", wrong.why);
}

#[test]
fn a_load_serves_beside_a_set_point_move_that_is_too_small() {
    let load = |t: f64| Inputs {
        set_point: if t >= 900.0 { 0.25 } else { 0.0 },
        load: if t >= 310.0 { -6.0 } else { 0.0 },
    };
    let found = judged(&log(1.5, 1.5, 1200, load), 1.5, 1.5).expect("a trial");
    assert_eq!(found.kind, TrialKind::Load);
    assert!(found.agrees, "{}", found.why);
    let alone = |t: f64| Inputs {
        load: 0.0,
        ..load(t)
    };
    let nothing = judged(&log(1.5, 1.5, 1200, alone), 1.5, 1.5);
    assert!(matches!(nothing, Err(TrialError::MoveTooSmall { .. })));
}

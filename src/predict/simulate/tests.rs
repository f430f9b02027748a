//! The simulated loop against the margins and its own promises.

use super::*;
use crate::model::Kind;
use crate::predict::margins;
use crate::quantity::Span;
use crate::settings::{DerivativeUnit, EquationForm, IntegralUnit, ProportionalUnit};
use proptest::prelude::*;
use proptest::test_runner::RngSeed;

fn controller(scan_s: f64, d_filter_n: f64) -> Controller {
    let percent = Span::new(0.0, 100.0).expect("a range");
    Controller {
        form: EquationForm::Standard,
        p_as: ProportionalUnit::Gain,
        i_as: IntegralUnit::Seconds,
        d_as: DerivativeUnit::Seconds,
        p_on: ActsOn::Error,
        d_on: ActsOn::Pv,
        d_filter_n,
        scan_s,
        pv_span: percent,
        op_span: percent,
    }
}

fn settings(kc: f64, ti_s: f64, td_s: f64, form: EquationForm) -> Terms {
    let ti = Some(ti_s);
    match form {
        EquationForm::Standard => Terms::Standard { kc, ti_s: ti, td_s },
        EquationForm::Series => Terms::Series { kc, ti_s: ti, td_s },
        EquationForm::Parallel => Terms::Parallel {
            kp: kc,
            ki_per_s: kc / ti_s,
            kd_s: kc * td_s,
        },
    }
}

/// Largest |PV| over the last quarter of a long run after a load pulse, over that of the quarter before;
/// 0 where nothing is left.
fn growth(model: &ProcessModel, terms: &Terms, controller: &Controller, filter: PvFilter) -> f64 {
    let unclamped = [f64::NEG_INFINITY, f64::INFINITY];
    let mut sampled = SampledController::new(terms, controller, filter, Action::Reverse, unclamped);
    let executions = 60_000;
    let (mut early, mut late) = (0.0_f64, 0.0_f64);
    let mut k = 0;
    let load = |k| Inputs {
        set_point: 0.0,
        // A pulse: the response of a stable loop dies away without integral action too.
        load: if k < 20 { 1.0 } else { 0.0 },
    };
    run(
        model,
        &mut sampled,
        controller.scan_s,
        executions,
        load,
        |sample| {
            if (executions / 2..executions * 3 / 4).contains(&k) {
                early = early.max(sample.pv.abs());
            } else if k >= executions * 3 / 4 {
                late = late.max(sample.pv.abs());
            }
            k += 1;
        },
    );
    if early < 1e-9 { 0.0 } else { late / early }
}

proptest! {
    #![proptest_config(ProptestConfig {
            cases: 48,
            rng_seed: RngSeed::Fixed(1),
            failure_persistence: None,
            ..ProptestConfig::default()
        })]

    #[test]
    fn the_simulated_loop_is_unstable_just_beyond_its_gain_margin(
        kind in prop::sample::select(Kind::ALL.to_vec()),
        form in prop::sample::select(vec![
            EquationForm::Standard, EquationForm::Series, EquationForm::Parallel,
        ]),
        theta in 2.0..20.0_f64,
        ti in 20.0..80.0_f64,
        td in prop::sample::select(vec![0.0, 2.0, 5.0]),
        filter_s in prop::sample::select(vec![0.0, 1.5]),
        kc in 0.3..0.8_f64,
    ) {
        let gain = if kind.integrates() { 1.0 / 60.0 } else { 1.0 };
        let model = ProcessModel::of_kind(kind, gain, 20.0, 6.0, theta);
        let controller = controller(0.1, 8.0);
        let filter = PvFilter { in_log_s: 0.0, in_controller_s: filter_s };
        let at = |factor: f64| settings(factor * kc, ti, td, form);
        let margins = margins(&model, &at(1.0), &controller, filter, Action::Reverse);
        // A loop that hardly decays at its own gain tells nothing within the run.
        prop_assume!(margins.stable && margins.phase_margin_deg.is_none_or(|pm| pm > 10.0));
        let gain_margin = margins.gain_margin.expect("dead time gives every loop one");
        // The hold as a delay is fair to a part in a thousand at this scan.
        let margin_terms = |part: f64| match at(1.0) {
            Terms::Parallel { kp, ki_per_s, kd_s } => Terms::Parallel {
                kp: part * kp, ki_per_s: part * ki_per_s, kd_s: part * kd_s,
            },
            _ => at(part),
        };
        prop_assert!(growth(&model, &margin_terms(0.97 * gain_margin), &controller, filter) < 1.0);
        prop_assert!(growth(&model, &margin_terms(1.03 * gain_margin), &controller, filter) > 1.0);
    }
}

proptest! {
    #![proptest_config(ProptestConfig {
            cases: 64,
            rng_seed: RngSeed::Fixed(2),
            failure_persistence: None,
            ..ProptestConfig::default()
        })]

    /// Settings as they may be found: any gain, terms missing. The count of Nyquist's criterion and the
    /// simulated loop say the same, but where the edge of stability is nearer than the hold's delay is fair.
    #[test]
    fn what_the_count_calls_unstable_grows_and_what_it_calls_stable_dies_away(
        kind in prop::sample::select(Kind::ALL.to_vec()),
        theta in 2.0..20.0_f64,
        ti in prop::option::of(2.0..200.0_f64),
        td in prop::sample::select(vec![0.0, 3.0, 15.0]),
        log_kc in -1.5..1.5_f64,
        form in prop::sample::select(vec!["standard", "series", "integral alone"]),
    ) {
        let gain = if kind.integrates() { 1.0 / 60.0 } else { 1.0 };
        let model = ProcessModel::of_kind(kind, gain, 20.0, 6.0, theta);
        let controller = controller(0.1, 8.0);
        let kc = libm::exp(log_kc);
        let at = |factor: f64| match form {
            "standard" => Terms::Standard { kc: factor * kc, ti_s: ti, td_s: td },
            "series" => Terms::Series { kc: factor * kc, ti_s: ti, td_s: td },
            _ => Terms::Parallel { kp: 0.0, ki_per_s: factor * kc / 40.0, kd_s: 0.0 },
        };
        let none = PvFilter::default();
        let stable = |factor| margins(&model, &at(factor), &controller, none, Action::Reverse).stable;
        let here = stable(1.0);
        prop_assume!(stable(0.93) == here && stable(1.07) == here);
        let growth = growth(&model, &at(1.0), &controller, none);
        prop_assert_eq!(growth < 1.0, here, "{} by {}", growth, kc);
    }
}

#[test]
fn the_op_stays_in_its_range_and_the_integral_does_not_wind_up() {
    let model = ProcessModel::of_kind(Kind::FirstOrder, 1.0, 30.0, 0.0, 5.0);
    let terms = settings(3.0, 30.0, 0.0, EquationForm::Standard);
    let controller = controller(1.0, 0.0);
    let case = |op_percent| LoopCase {
        model: &model,
        terms: &terms,
        controller: &controller,
        filter: PvFilter::default(),
        action: Action::Reverse,
        start: OperatingPoint {
            op_percent,
            pv_percent: 50.0,
        },
    };
    let free = case(50.0).response(Disturbance::SetPoint(5.0));
    let held = case(93.0).response(Disturbance::SetPoint(5.0));
    let highest = |r: &Response| r.curve.op.iter().copied().fold(f64::MIN, f64::max);
    assert!(highest(&free) > 14.0);
    assert!(highest(&held) <= 7.0 + 1e-12);
    // Slower, but hardly more overshoot: the integral waited.
    let overshoot = |r: &Response| r.metrics.overshoot_percent.expect("a set-point step");
    assert!(held.metrics.rise_time_s > free.metrics.rise_time_s);
    assert!(overshoot(&held) < overshoot(&free) + 5.0);
    assert!(held.curve.t_s.len() <= 400);
    // Where the range leaves no room the steps of a prediction go the other way.
    let low = LoopCase {
        start: OperatingPoint {
            op_percent: 2.0,
            pv_percent: 98.0,
        },
        ..case(2.0)
    };
    let predicted = low.predict();
    assert_eq!(
        (
            predicted.set_point.step_percent,
            predicted.load.step_percent
        ),
        (-5.0, -5.0)
    );
}

#[test]
fn terms_on_pv_add_nothing_to_a_set_point_step() {
    let terms = settings(2.0, 30.0, 6.0, EquationForm::Series);
    let on = |p_on, d_on| {
        let controller = Controller {
            p_on,
            d_on,
            ..controller(1.0, 10.0)
        };
        SampledTerms::new(&terms, &controller).set_point_kick(&controller)
    };
    assert_eq!(on(ActsOn::Pv, ActsOn::Pv), 0.0);
    assert_eq!(on(ActsOn::Error, ActsOn::Pv), 2.0);
    // (1 + Td′ s)/(1 + Td′ s/N) by backward differences: (h + 6)/(h + 0.6) at once.
    let kick = on(ActsOn::Error, ActsOn::Error);
    assert!((kick - 2.0 * 7.0 / 1.6).abs() < 1e-12, "{kick}");
}

#[test]
fn the_noise_gain_is_that_of_the_impulse_response() {
    let controller = controller(1.0, 10.0);
    let terms = settings(2.0, 30.0, 6.0, EquationForm::Standard);
    let sampled = SampledTerms::new(&terms, &controller);
    for decay in [0.0, 0.6] {
        let (mut lagged, mut last, mut derivative, mut squares) = (0.0, 0.0, 0.0, 0.0);
        for k in 0..400 {
            lagged = decay * lagged + (1.0 - decay) * f64::from(k == 0);
            derivative =
                sampled.derivative_decay * derivative + sampled.derivative_step * (lagged - last);
            last = lagged;
            let op = sampled.proportional * lagged + derivative;
            squares += op * op;
        }
        let expected = libm::sqrt(squares);
        assert!((sampled.noise_gain(decay) - expected).abs() < 1e-9 * expected);
    }
    // PI: the gain itself.
    let pi = SampledTerms::new(
        &settings(2.0, 30.0, 0.0, EquationForm::Standard),
        &controller,
    );
    assert_eq!(pi.noise_gain(0.0), 2.0);
}

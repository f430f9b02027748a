//! The pooled model: what must not change it, and the choice of its kind.

use super::*;

/// Gain, τ and θ of two models are the same to a part in a million.
fn assert_same(a: &Model, b: &Model, gain_factor: f64) {
    let near = |a: f64, b: f64| (a - b).abs() <= 1e-6 * b.abs().max(1e-3);
    assert_eq!((a.kind, &a.steps), (b.kind, &b.steps));
    assert!(
        near(a.gain.value * gain_factor, b.gain.value),
        "{:?} {:?}",
        a.gain,
        b.gain
    );
    assert!(near(a.dead_time_s.value, b.dead_time_s.value));
    assert!(near(
        a.time_constant_s.expect("τ").value,
        b.time_constant_s.expect("τ").value
    ));
}

fn irregular() -> Test {
    Test {
        jitter: 0.6,
        resolution: 0.01,
        ..Test::new(first_order(1.5, 20.0, 7.3), &UP_AND_BACK, 460.0)
    }
}

#[test]
fn a_shift_of_time_changes_nothing() {
    let mut samples = irregular().samples();
    let model = identify_samples_of(&samples, full())
        .model
        .expect("a model");
    for t in &mut samples.t_s {
        *t += 86_400.0;
    }
    let shifted = identify_samples_of(&samples, full())
        .model
        .expect("a model");
    assert_same(&model, &shifted, 1.0);
}

#[test]
fn another_unit_of_the_pv_changes_nothing() {
    let mut samples = irregular().samples();
    let model = identify_samples_of(&samples, full())
        .model
        .expect("a model");
    for pv in &mut samples.pv {
        *pv = *pv * 2.5 - 30.0;
    }
    let span = Span::new(-30.0, 220.0).expect("a range");
    let other = identify_samples_of(&samples, span).model.expect("a model");
    assert_same(&model, &other, 1.0);
}

#[test]
fn a_flipped_sign_flips_the_gain_alone() {
    let mut samples = irregular().samples();
    let model = identify_samples_of(&samples, full())
        .model
        .expect("a model");
    for pv in &mut samples.pv {
        *pv = 100.0 - *pv;
    }
    let flipped = identify_samples_of(&samples, full())
        .model
        .expect("a model");
    assert_same(&model, &flipped, -1.0);
}

#[test]
fn a_move_made_before_the_pv_had_settled_does_no_harm() {
    // The second move comes two time constants after the first: an eighth of the change is yet to come.
    let op = [(0.0, 40.0), (60.0, 45.0), (105.0, 42.0)];
    let test = Test {
        noise: 1e-4,
        ..Test::new(first_order(1.5, 20.0, 5.0), &op, 205.0)
    };
    let samples = test.samples();
    let trace = Trace::new(&samples, full(), full()).expect("a trace");
    let steps = crate::steps::find(&trace, 1.0).expect("steps");
    let second = pooled::window(&trace, &steps[1]);
    let fit = least_squares::fit(&least_squares::Problem::new(vec![second]), Kind::FirstOrder)
        .expect("a fit");
    assert!((fit.gains[0] - 1.5).abs() < 1e-3, "{:?}", fit.gains);
    // The level is the one that belongs to the OP before the second move.
    assert!((fit.bases[0].0 - 57.5).abs() < 1e-3, "{:?}", fit.bases);
}

#[test]
fn a_gain_that_differs_between_steps_widens_the_interval() {
    let mut samples = Test::new(first_order(1.0, 20.0, 5.0), &UP_AND_BACK, 460.0).samples();
    // The answer to the second move is half as large.
    let turn = samples.pv[259];
    for pv in &mut samples.pv[260..] {
        *pv = turn + 0.5 * (*pv - turn);
    }
    let model = identify_samples_of(&samples, full())
        .model
        .expect("a model");
    assert_eq!(model.kind, Kind::FirstOrder);
    assert!(model.widened);
    let ratio = model.gain_ratio.expect("a ratio");
    assert!((ratio - 2.0).abs() < 0.05, "{ratio}");
    assert!(
        model.gain.low < 0.55 && model.gain.high > 0.98,
        "{:?}",
        model.gain
    );
    // The members of the set hold both.
    assert!(model.set_models().iter().any(|(_, m)| m.gain() < 0.52));
    assert!(model.set_models().iter().any(|(_, m)| m.gain() > 0.98));
}

#[test]
fn a_process_seen_too_short_is_undecided_and_the_slower_settings_are_for() {
    // Dead time long against the time watched: a settling process of this lag wants Ti = τ, an
    // integrating one 8θ.
    let test = Test {
        noise: 0.7,
        ..Test::new(
            first_order(1.5, 150.0, 30.0),
            &[(0.0, 40.0), (100.0, 46.0)],
            240.0,
        )
    };
    let undecided = (1..=40)
        .filter_map(|seed| {
            Test {
                seed,
                ..test.clone()
            }
            .identify()
            .model
        })
        .find(|m| m.undecided.is_some())
        .expect("one of many is undecided");
    assert!(undecided.kind.integrates());
    let words = undecided.undecided.expect("words");
    assert!(words.contains("not watched for long enough"), "{words}");
    // A process that does integrate is not.
    let model = ProcessModel::of_kind(Kind::Integrating, 0.02, 0.0, 0.0, 3.0);
    let found = Test::new(model, &IN_AND_OUT, 460.0)
        .identify()
        .model
        .expect("a model");
    assert_eq!((found.kind, found.undecided), (Kind::Integrating, None));
}

#[test]
fn more_lags_than_the_model_has_are_second_order() {
    // Lags 30, 10, 3 (Smith's heat exchanger, see 6.5 of the published facts): three in a row.
    let first = Test {
        noise: 0.0,
        ..Test::new(
            ProcessModel::of_kind(Kind::SecondOrder, 1.0, 30.0, 10.0, 2.0),
            &[(0.0, 40.0), (150.0, 46.0), (450.0, 40.0)],
            750.0,
        )
    };
    let mut samples = first.samples();
    let mut random = Random::new(5);
    let mut behind = samples.pv[0];
    let keep = libm::exp(-1.0 / 3.0);
    for pv in &mut samples.pv {
        behind = *pv + (behind - *pv) * keep;
        *pv = behind + 0.03 * random.normal();
    }
    let model = identify_samples_of(&samples, full())
        .model
        .expect("a model");
    assert_eq!(model.kind, Kind::SecondOrder);
    let sum = model.time_constant_s.expect("τ").value
        + model.second_time_constant_s.expect("τ₂").value
        + model.dead_time_s.value;
    // The sum of all lags and the dead time is what a fit keeps: 30 + 10 + 3 + 2.
    assert!((sum - 45.0).abs() < 1.0, "{sum}");
}

#[test]
fn the_kind_is_found() {
    let of = ProcessModel::of_kind;
    for (model, op, length_s) in [
        (first_order(1.5, 20.0, 0.0), &UP_AND_BACK[..], 460.0),
        (
            of(Kind::SecondOrder, 1.5, 20.0, 12.0, 5.0),
            &UP_AND_BACK[..],
            460.0,
        ),
        (
            of(Kind::Integrating, 0.02, 0.0, 0.0, 7.3),
            &IN_AND_OUT[..],
            460.0,
        ),
        (
            of(Kind::IntegratingLag, 0.02, 12.0, 0.0, 4.3),
            &IN_AND_OUT[..],
            460.0,
        ),
    ] {
        for memory in [0.0, 0.7] {
            for seed in 1..=3 {
                let test = Test {
                    seed,
                    memory,
                    ..Test::new(model, op, length_s)
                };
                let found = test.identify().model.expect("a model");
                assert_eq!((found.kind, found.undecided), (model.kind(), None));
            }
        }
    }
}

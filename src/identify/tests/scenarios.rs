//! What tests look like on site: each with the process that made it, which the model has to hold.

use super::*;

/// Every figure of the model is within two and a half times its interval of the truth (of some hundred
/// figures here that is chance's once in a hundred thousand), and within a quarter.
fn assert_holds(found: &Identification, truth: &ProcessModel) {
    let model = found.model.as_ref().expect("a model");
    assert_eq!((model.kind, &model.undecided), (truth.kind(), &None));
    for (name, found, truth) in [
        ("gain", Some(model.gain), Some(truth.gain())),
        ("τ", model.time_constant_s, truth.time_constant_s()),
        ("θ", Some(model.dead_time_s), Some(truth.dead_time_s())),
    ] {
        let (Some(found), Some(truth)) = (found, truth) else {
            continue;
        };
        assert!(
            (found.value - truth).abs() < 2.5 * found.half_width()
                && (found.value / truth - 1.0).abs() < 0.25,
            "{name}: {found:?} of {truth}"
        );
    }
}

fn usable(found: &Identification) -> Vec<usize> {
    let steps = found.steps.iter();
    steps
        .filter(|s| s.verdict != Verdict::Rejected)
        .map(|s| s.number)
        .collect()
}

fn plain() -> Test {
    Test::new(first_order(1.5, 20.0, 7.3), &IN_AND_OUT, 460.0)
}

#[test]
fn a_response_cut_short_is_told_from_an_integrating_one() {
    // Watched for twice the time constant: a settling PV has bent by then.
    for seed in 1..=5 {
        let test = Test {
            seed,
            ..Test::new(
                first_order(1.5, 60.0, 6.0),
                &[(0.0, 40.0), (100.0, 46.0)],
                226.0,
            )
        };
        let found = test.identify();
        let model = found.model.as_ref().expect("a model");
        assert_eq!((model.kind, &model.undecided), (Kind::FirstOrder, &None));
        assert_eq!(found.steps[0].verdict, Verdict::Reservation);
        assert!(model.gain.low <= 1.5 && 1.5 <= model.gain.high, "{model:?}");
        let ramp = ProcessModel::of_kind(Kind::Integrating, 0.02, 0.0, 0.0, 6.0);
        assert_holds(
            &Test {
                model: ramp,
                ..test
            }
            .identify(),
            &ramp,
        );
    }
}

#[test]
fn two_equal_lags_are_a_double_lag() {
    for seed in 1..=10 {
        let truth = ProcessModel::of_kind(Kind::SecondOrder, 1.5, 20.0, 20.0, 5.0);
        let test = Test {
            seed,
            ..Test::new(
                truth,
                &[(0.0, 40.0), (90.0, 46.0), (390.0, 40.0), (690.0, 34.0)],
                990.0,
            )
        };
        let model = test.identify().model.expect("a model");
        assert_eq!(model.kind, Kind::SecondOrder);
        let lags = [model.time_constant_s, model.second_time_constant_s].map(|l| l.expect("a lag"));
        for lag in lags {
            // Both are near the truth as their intervals say, and neither is known to less than a factor of
            // two.
            assert!((lag.value - 20.0).abs() < 2.5 * lag.half_width(), "{lag:?}");
            assert!(
                lag.high < 2.0 * lag.value && lag.low > 0.5 * lag.value,
                "{lag:?}"
            );
        }
        assert!(model.double_lag(), "{lags:?}");
    }
    // Lags that are not the same are not said to be.
    let truth = ProcessModel::of_kind(Kind::SecondOrder, 1.5, 20.0, 8.0, 5.0);
    let op = [(0.0, 40.0), (90.0, 46.0), (390.0, 40.0), (690.0, 34.0)];
    let model = Test::new(truth, &op, 990.0).identify().model;
    assert!(!model.expect("a model").double_lag());
}

#[test]
fn spikes_are_left_out_and_counted() {
    let clean = plain().identify();
    let mut samples = plain().samples();
    let mut put = 0;
    for k in (30..450).step_by(41) {
        samples.pv[k] += if k % 2 == 0 { 4.0 } else { -6.0 };
        put += 1;
    }
    // Two in a row, and one on the slope.
    for k in [130, 131, 272] {
        samples.pv[k] += 5.0;
        put += 1;
    }
    let found = identify_samples_of(&samples, full());
    assert_eq!((clean.outliers, found.outliers), (0, put));
    assert_eq!(usable(&found), [1, 2, 3, 4]);
    assert_holds(&found, &plain().model);
    let (a, b) = (clean.model.expect("a model"), found.model.expect("a model"));
    assert!((a.gain.value / b.gain.value - 1.0).abs() < 5e-3);
}

#[test]
fn noise_edges_digits_and_pulses_are_no_spikes() {
    let fast = first_order(1.5, 0.4, 0.0);
    let twitch = [
        (0.0, 40.0),
        (60.0, 46.0),
        (62.0, 40.0),
        (200.0, 46.0),
        (300.0, 40.0),
    ];
    for test in [
        Test {
            noise: 1.0,
            ..plain()
        },
        Test {
            resolution: 0.5,
            ..plain()
        },
        Test {
            noise: 0.0,
            ..plain()
        },
        Test {
            memory: 0.95,
            noise: 0.5,
            ..plain()
        },
        // Quicker than its log: the answer is an edge, that to a pulse two samples long.
        Test::new(fast, &twitch, 400.0),
    ] {
        for seed in 1..=5 {
            let found = Test {
                seed,
                ..test.clone()
            }
            .identify();
            assert_eq!(found.outliers, 0, "{:?} noise {}", test.model, test.noise);
        }
    }
}

#[test]
fn a_pv_of_coarse_digits_is_fitted() {
    for seed in 1..=5 {
        let test = Test {
            resolution: 0.5,
            noise: 0.1,
            seed,
            ..plain()
        };
        let found = test.identify();
        assert_holds(&found, &test.model);
        // σ is that of the digits at least.
        let sigma = found.sigma_percent.expect("assessable");
        assert!(sigma > 0.49 / libm::sqrt(12.0), "{sigma}");
    }
}

#[test]
fn an_op_that_was_held_for_hours_before_makes_no_difference() {
    let mut test = plain();
    for (k, m) in test.op.iter_mut().enumerate() {
        m.0 += if k > 0 { 20_000.0 } else { 0.0 };
    }
    test.length_s += 20_000.0;
    assert_holds(&test.identify(), &test.model);
    // Nor does a PV that wandered in those hours, as long as it was at rest at last.
    let mut samples = test.samples();
    for (pv, t) in samples.pv.iter_mut().zip(&samples.t_s) {
        *pv += if *t < 12_000.0 {
            3.0 * libm::sin(t / 900.0)
        } else {
            0.0
        };
    }
    assert_holds(&identify_samples_of(&samples, full()), &test.model);
}

#[test]
fn a_test_that_began_before_the_pv_was_at_rest_is_used_from_where_it_was() {
    // Something else moved the PV before the log begins: it is still on its way at the first move.
    let test = plain();
    let mut samples = test.samples();
    for (pv, t) in samples.pv.iter_mut().zip(&samples.t_s) {
        *pv += 14.0 * libm::exp(-t / 40.0);
    }
    let found = identify_samples_of(&samples, full());
    let first = &found.steps[0];
    assert_eq!(
        first.verdict,
        Verdict::Rejected,
        "{:?} {:?}",
        first.reasons,
        first.fit
    );
    assert!(
        first.reasons.iter().any(|r| r.code == ReasonCode::Drift),
        "{:?}",
        first.reasons
    );
    assert!(found.next_time.iter().any(|a| a.what == "Wait"));
    assert_eq!(usable(&found), [2, 3, 4]);
    let model = found.model.expect("a model");
    assert!(
        (model.gain.value / 1.5 - 1.0).abs() < 0.05,
        "{:?}",
        model.gain
    );
}

#[test]
fn pulses_doublets_staircases_and_ramps_are_fitted() {
    let up_and_down: Vec<(f64, f64)> = vec![
        (0.0, 40.0),
        (80.0, 43.0),
        (200.0, 46.0),
        (320.0, 49.0),
        (440.0, 44.0),
        (560.0, 39.0),
    ];
    let mut ramp = vec![(0.0, 40.0)];
    for (from, to, at) in [(40.0, 46.0, 80.0), (46.0, 40.0, 240.0)] {
        for k in 1..=20 {
            let part = f64::from(k) / 20.0;
            ramp.push((at + f64::from(k), from + (to - from) * part));
        }
    }
    let pulse = vec![(0.0, 40.0), (80.0, 50.0), (110.0, 40.0)];
    let doublet = vec![(0.0, 40.0), (80.0, 47.0), (105.0, 33.0), (130.0, 40.0)];
    for (op, length_s, steps) in [
        (up_and_down, 680.0, 5),
        (ramp, 400.0, 2),
        (pulse, 300.0, 1),
        (doublet, 350.0, 1),
    ] {
        let of = ProcessModel::of_kind;
        for truth in [
            first_order(1.5, 20.0, 7.3),
            of(Kind::SecondOrder, 1.5, 18.0, 8.0, 5.0),
        ] {
            for seed in 1..=3 {
                let test = Test {
                    seed,
                    ..Test::new(truth, &op, length_s)
                };
                let found = test.identify();
                assert_eq!(usable(&found).len(), steps, "{:?}", found.steps);
                assert_holds(&found, &truth);
            }
        }
    }
}

/// A test whose loop is in automatic for a while: there a controller moves the OP after a set point.
fn partly_in_automatic() -> Samples {
    let model = first_order(1.5, 20.0, 7.0);
    let rows = 900;
    let mut random = Random::new(11);
    let mut state = crate::model::State::default();
    let mut samples = Samples {
        good: vec![true; rows],
        ..Samples::default()
    };
    let (mut integral, mut op): (f64, f64) = (0.0, 40.0);
    for k in 0..rows {
        let manual = !(250..550).contains(&k);
        let pv = 50.0 + state.pv(&model) + 0.05 * random.normal();
        if manual {
            op = match k {
                0..70 => 40.0,
                70..250 => 45.0,
                550..640 => op,
                640..770 => 42.0,
                _ => 37.0,
            };
            op = libm::round(op * 10.0) / 10.0;
            integral = op;
        } else {
            let sp = if k < 400 { 55.0 } else { 51.0 };
            integral += 0.5 / 20.0 * (sp - pv);
            op = integral + 0.5 * (sp - pv);
        }
        samples.t_s.push(k as f64);
        samples.pv.push(pv);
        samples.op.push(op);
        samples.manual.push(manual);
        let arrives = k.checked_sub(7).map_or(40.0, |then| samples.op[then]);
        state.advance(&model, 1.0, arrives - 40.0);
    }
    samples
}

#[test]
fn of_a_test_partly_in_automatic_what_was_done_in_manual_is_used() {
    let samples = partly_in_automatic();
    let found = identify_samples_of(&samples, full());
    let at: Vec<f64> = found.steps.iter().map(|s| s.at_s).collect();
    assert!(
        at.iter().all(|t| !(250.0..550.0).contains(t)),
        "no step is the controller's: {at:?}"
    );
    assert!(at.contains(&70.0) && at.contains(&770.0), "{at:?}");
    assert_holds(&found, &first_order(1.5, 20.0, 7.0));
    // Without the mode column nobody knows whose moves those are: what was done by the controller
    // is not taken for a test of its own.
    let unsaid = Samples {
        manual: Vec::new(),
        ..samples
    };
    let trace = Trace::new(&unsaid, full(), full()).expect("a trace");
    let refused = crate::steps::find(&trace, 1.0);
    if let Ok(steps) = refused {
        let found = identify(&trace, &steps, &context(full()));
        for step in found.steps {
            let by_controller = (250.0..550.0).contains(&step.at_s);
            assert!(
                !by_controller || step.verdict == Verdict::Rejected,
                "{step:?}"
            );
        }
    }
}

#[test]
fn closed_loop_data_without_a_move_of_a_hand_are_refused() {
    let samples = partly_in_automatic();
    let pick = |values: &[f64]| values[260..540].to_vec();
    let closed = Samples {
        t_s: pick(&samples.t_s),
        pv: pick(&samples.pv),
        op: pick(&samples.op),
        good: vec![true; 280],
        ..Samples::default()
    };
    let trace = Trace::new(&closed, full(), full()).expect("a trace");
    let error = crate::steps::find(&trace, 1.0).expect_err("closed loop");
    assert!(error.to_string().contains("closed-loop data"), "{error}");
}

#[test]
fn a_reading_on_noisy_data_is_near_the_truth_and_agrees_with_the_fit() {
    for seed in 1..=10 {
        let test = Test {
            // The change is 60 times the noise.
            noise: 0.15,
            seed,
            ..Test::new(
                first_order(1.5, 30.0, 10.0),
                &[(0.0, 40.0), (150.0, 46.0), (400.0, 40.0)],
                650.0,
            )
        };
        for step in test.identify().steps {
            let reading = step.reading.expect("a reading");
            let tau = reading.time_constant_s.expect("τ");
            assert!((reading.gain / 1.5 - 1.0).abs() < 0.03, "{reading:?}");
            // The 63.2 % point is where the truth has it; the first answer is seen when it leaves the
            // noise, 3 σ or a twentieth of the change later than it begins.
            assert!(
                (reading.dead_time_s + tau - 40.0).abs() < 2.5,
                "{reading:?}"
            );
            assert!((9.0..15.0).contains(&reading.dead_time_s), "{reading:?}");
            assert!(!reading.differs);
        }
    }
}

#[test]
fn reading_and_fit_that_disagree_are_told() {
    // The fit tells a drift from the answer; a ruler laid on the trend does not.
    let test = Test {
        slope: 0.02,
        ..Test::new(first_order(1.0, 8.0, 3.0), &UP_AND_BACK[..2], 160.0)
    };
    let found = test.identify();
    let step = &found.steps[0];
    let reading = step.reading.as_ref().expect("a reading");
    let fit = step.fit.as_ref().expect("a fit");
    assert!((fit.gain.value - 1.0).abs() < 0.05, "{fit:?}");
    assert!(reading.gain > 1.25 * fit.gain.value, "{reading:?}");
    assert!(reading.differs);
}

/// The first figure in an advice.
fn figure_in(how: &str) -> f64 {
    let from = how.find(|c: char| c.is_ascii_digit()).expect("a figure");
    let text: String = how[from..]
        .chars()
        .take_while(|c| c.is_ascii_digit() || *c == '.')
        .collect();
    text.trim_end_matches('.').parse().expect("a number")
}

fn advice<'a>(found: &'a Identification, what: &str) -> &'a str {
    let advice = found.next_time.iter().find(|a| a.what == what);
    &advice
        .unwrap_or_else(|| panic!("\"{what}\" in {:?}", found.next_time))
        .how
}

#[test]
fn a_test_made_as_advised_is_accepted() {
    // Too small, watched for too short a time, logged too slowly.
    let model = first_order(0.8, 20.0, 5.0);
    let small = Test {
        noise: 0.4,
        ..Test::new(model, &[(0.0, 40.0), (100.0, 42.0), (160.0, 40.0)], 220.0)
    };
    let found = small.identify();
    assert!(usable(&found).len() < 2);
    let size = figure_in(advice(&found, "Move"));
    // Twenty times the noise, by the gain: 10 %, as well as so small a test knows either.
    assert!((8.0..=16.0).contains(&size), "{size}");
    let wait_s = figure_in(advice(&found, "Wait"));
    assert!((60.0..=150.0).contains(&wait_s), "{wait_s}");
    let again = Test {
        op: vec![(0.0, 40.0), (wait_s, 40.0 + size), (2.0 * wait_s, 40.0)],
        length_s: 3.0 * wait_s,
        ..small
    };
    for step in again.identify().steps {
        // What was amiss is mended. So near to its noise a PV may seem to drift by a little.
        let amiss = |code: ReasonCode| step.reasons.iter().any(|r| r.code == code);
        assert_ne!(step.verdict, Verdict::Rejected, "{:?}", step.reasons);
        assert!(
            !amiss(ReasonCode::Change) && !amiss(ReasonCode::Watched),
            "{:?}",
            step.reasons
        );
    }

    let seldom = Test {
        interval_s: 15.0,
        ..Test::new(model, &[(0.0, 40.0), (600.0, 46.0), (1200.0, 40.0)], 1800.0)
    };
    let found = seldom.identify();
    let how = advice(&found, "Log");
    let every_s = figure_in(how);
    assert!((0.3..=3.0).contains(&every_s), "{how}");
    let again = Test {
        interval_s: every_s,
        ..seldom
    };
    for step in again.identify().steps {
        assert_eq!(step.verdict, Verdict::Accepted, "{:?}", step.reasons);
    }
}

//! Margins held against published values.

use super::*;

/// PI or series PID of the source in Kc, τI, τD.
fn with_series(process: Loop, kc: f64, ti: f64, td: f64) -> Margins {
    let terms = Terms::Series {
        kc,
        ti_s: Some(ti),
        td_s: td,
    };
    process.controller(&terms, 0.0).margins()
}

fn near(found: Option<f64>, expected: f64, tolerance: f64, what: &str) {
    let found = found.unwrap_or_else(|| panic!("{what} is missing"));
    assert!(
        (found - expected).abs() <= tolerance,
        "{what}: {found}, expected {expected}"
    );
}

fn first_order(ratio: f64) -> Margins {
    // K = 2, τ = 10, θ = 2, τc = ratio·θ.
    let process = Loop::gain(2.0).lag(10.0).dead_time(2.0);
    with_series(process, 10.0 / (2.0 * 2.0 * (ratio + 1.0)), 10.0, 0.0)
}

fn integrating(ratio: f64) -> Margins {
    let process = Loop::gain(0.05).integrator().dead_time(4.0);
    let wait = 4.0 * (ratio + 1.0);
    with_series(process, 1.0 / (0.05 * wait), 4.0 * wait, 0.0)
}

// S. Skogestad, J. Process Control 13 (2003) 291-309, Table 2; six digits recomputed
// independently, so the tolerance is half a unit of the last digit quoted.
#[test]
fn simc_robustness_at_the_recommended_time_constant() {
    let first = first_order(1.0);
    near(first.gain_margin, PI, 1e-9, "GM");
    near(
        first.phase_margin_deg,
        90.0 - 0.5_f64.to_degrees(),
        1e-9,
        "PM",
    );
    near(
        first.delay_margin_s.map(|d| d / 2.0),
        PI - 1.0,
        1e-9,
        "delay margin",
    );
    near(first.ms, 1.590490, 6e-7, "Ms");
    near(first.mt, 1.0, 1e-9, "Mt");
    let level = integrating(1.0);
    near(level.gain_margin, 2.963402, 6e-7, "GM");
    near(level.phase_margin_deg, 46.86429, 6e-6, "PM");
    near(
        level.delay_margin_s.map(|d| d / 4.0),
        1.589637,
        6e-7,
        "delay margin",
    );
    near(level.ms, 1.703522, 6e-7, "Ms");
    // The sixth digit quoted is that of a peak read off a grid; evaluated densely it is 1.299418.
    near(level.mt, 1.299422, 5e-6, "Mt");
}

#[test]
fn simc_robustness_at_other_time_constants() {
    for (ratio, ms, level_ms, level_mt) in [
        (0.5, 1.91716, 2.17534, 1.59048),
        (1.5, 1.43759, 1.50385, 1.24291),
        (2.0, 1.34859, 1.39330, 1.21933),
        (3.0, 1.24889, 1.27424, 1.19727),
    ] {
        let first = first_order(ratio);
        near(first.gain_margin, PI / 2.0 * (ratio + 1.0), 1e-9, "GM");
        near(
            first.phase_margin_deg,
            90.0 - (1.0 / (ratio + 1.0)).to_degrees(),
            1e-9,
            "PM",
        );
        let delay = first.delay_margin_s.map(|d| d / 2.0);
        near(delay, PI / 2.0 * (ratio + 1.0) - 1.0, 1e-9, "delay margin");
        near(first.ms, ms, 6e-6, "Ms");
        near(integrating(ratio).ms, level_ms, 6e-6, "Ms");
        near(integrating(ratio).mt, level_mt, 6e-6, "Mt");
    }
}

// Same source, the processes of its tables with their printed series settings. Independently
// recomputed to the digits quoted: half a unit of the last.
#[test]
fn simc_processes_with_their_printed_settings() {
    let high_order = || {
        let slow = [2.0, 1.0, 0.4, 0.2, 0.05, 0.05, 0.05];
        let process = Loop::gain(1.0).lead(-0.3).lead(0.08);
        slow.into_iter().fold(process, Loop::lag)
    };
    let fourth = || [1.0; 4].into_iter().fold(Loop::gain(1.0), Loop::lag);
    let delayed_pair = || Loop::gain(1.0).lag(1.0).lag(1.0).dead_time(1.0);
    let slow_pair = || Loop::gain(1.0).lag(20.0).lag(2.0).dead_time(1.0);
    let inverse = || Loop::gain(1.0).lead(-2.0).lag(1.0).lag(1.0).lag(1.0);
    let inverse_delayed = || {
        let process = Loop::gain(1.0).lead(-1.0).lag(6.0).lag(2.0).lag(2.0);
        process.dead_time(1.0)
    };
    let level = || Loop::gain(1.0).integrator().lag(1.0).lag(1.0);
    let none = f64::NAN;
    #[rustfmt::skip]
    let rows = [
        ("1/((s+1)(0.2s+1))", Loop::gain(1.0).lag(1.0).lag(0.2), 5.5, 0.8, 0.0, 1.5602, 1.2767, none, 46.478),
        ("high order, PI", high_order(), 0.85034, 2.5, 0.0, 1.6616, 1.0383, 3.3699, 57.819),
        ("high order, PID", high_order(), 1.30, 2.0, 1.2, 1.7251, none, none, none),
        ("1/(s+1)^4, PI", fourth(), 0.3, 1.5, 0.0, 1.4630, 1.0, 4.9443, 62.381),
        ("1/(s+1)^4, PID", fourth(), 0.5, 1.5, 1.0, 1.4318, 1.0, 6.7446, 62.451),
        ("(-2s+1)/(s+1)^3", inverse(), 0.214286, 1.5, 0.0, 1.6604, 1.0, 2.8310, 60.827),
        ("e^-s/(s+1)^2, PI", delayed_pair(), 0.5, 1.5, 0.0, 1.6140, 1.0, 3.2798, 60.406),
        ("e^-s/(s+1)^2, PID", delayed_pair(), 0.5, 1.0, 1.0, 1.5905, 1.0, PI, 61.352),
        ("lags 20, 2, PI", slow_pair(), 5.25, 16.0, 0.0, 1.7156, 1.2343, 3.9757, 47.849),
        ("lags 20, 2, PID", slow_pair(), 10.0, 8.0, 2.0, 1.6512, 1.1579, 3.0348, 52.512),
        ("(-s+1)e^-s/((6s+1)(2s+1)^2)", inverse_delayed(), 0.7, 7.0, 0.0, 1.6264, 1.0064, 3.3362, 59.605),
        ("1/(s(s+1)^2)", level(), 1.0 / 3.0, 12.0, 0.0, 1.7708, 1.4647, 5.0, 40.276),
    ];
    for (name, process, kc, ti, td, ms, mt, gain_margin, phase_margin) in rows {
        let found = with_series(process, kc, ti, td);
        assert!(found.stable, "{name}");
        near(found.ms, ms, 6e-5, name);
        if !mt.is_nan() {
            near(found.mt, mt, 6e-5, name);
            near(found.phase_margin_deg, phase_margin, 6e-4, name);
            if gain_margin.is_nan() {
                assert_eq!(found.gain_margin, None, "{name}");
            } else {
                near(found.gain_margin, gain_margin, 6e-5, name);
            }
        }
    }
}

#[test]
fn a_gain_margin_met_only_at_infinite_frequency_is_found() {
    // Last row of the same tables: the gain margin of (−s+1)/(s+1) is no crossing.
    let found = with_series(Loop::gain(1.0).lead(-1.0).lag(1.0), 0.5, 1.0, 0.0);
    near(found.ms, 2.0, 1e-9, "Ms");
    near(found.mt, 1.0, 1e-9, "Mt");
    near(found.gain_margin, 2.0, 1e-9, "GM");
    near(found.phase_margin_deg, 60.0, 1e-9, "PM");
    // Unfiltered derivative on one lag with dead time: |L| rises to K·Kc·Td/τ = 0.8 and stays.
    let terms = Terms::Standard {
        kc: 0.4,
        ti_s: Some(10.0),
        td_s: 10.0,
    };
    let process = || Loop::gain(2.0).lag(10.0).dead_time(2.0);
    let found = process().controller(&terms, 0.0).margins();
    near(found.gain_margin, 1.25, 1e-9, "GM");
    near(found.ms, 5.0, 1e-6, "Ms");
    let terms = Terms::Standard {
        kc: 0.51,
        ti_s: Some(10.0),
        td_s: 10.0,
    };
    assert!(!process().controller(&terms, 0.0).margins().stable);
    assert!(process().controller(&terms, 10.0).margins().stable);
}

#[test]
fn unstable_loops_have_no_margin() {
    // The gain margin at 1.25 is π.
    let process = || Loop::gain(2.0).lag(10.0).dead_time(2.0);
    let at = |kc| with_series(process(), kc, 10.0, 0.0);
    assert!(at(1.25 * 0.999 * PI).stable);
    assert_eq!(at(1.25 * 1.001 * PI), Margins::unstable());
    assert_eq!(at(1.25 * 30.0), Margins::unstable());
    // Wrong sign of feedback.
    assert_eq!(at(-1.25), Margins::unstable());
    // Integrating process, integral action alone: two poles at the origin and no lead.
    let integral = Terms::Parallel {
        kp: 0.0,
        ki_per_s: 0.01,
        kd_s: 0.0,
    };
    let level = Loop::gain(0.05).integrator().dead_time(4.0);
    assert_eq!(
        level.controller(&integral, 10.0).margins(),
        Margins::unstable()
    );
    // Stable between two gains only. Routh's array of s³(0.1s+1)² + g(10s+1)² holds one sign for
    // 0.0005207813 < g < 0.1920191687.
    let conditional = |gain: f64| {
        let process = Loop::gain(gain).integrator().integrator().integrator();
        process.lead(10.0).lead(10.0).lag(0.1).lag(0.1).margins()
    };
    assert!(!conditional(0.000_52).stable);
    assert!(conditional(0.000_522).stable);
    assert!(conditional(0.192).stable);
    assert!(!conditional(0.192_1).stable);
    near(conditional(0.01).gain_margin, 19.20191687, 1e-7, "GM");
}

#[test]
fn a_pv_filter_counts_only_as_far_as_it_was_changed_since_the_log() {
    let pi = Terms::Standard {
        kc: 1.5,
        ti_s: Some(20.0),
        td_s: 0.0,
    };
    let with = |lags: &[f64], in_log_s, in_controller_s| {
        let process = Loop::gain(1.0).dead_time(3.0);
        let process = lags.iter().fold(process, |p, lag| p.lag(*lag));
        let filter = PvFilter {
            in_log_s,
            in_controller_s,
        };
        process.controller(&pi, 0.0).pv_filter(filter).margins()
    };
    let plain = with(&[20.0], 0.0, 0.0);
    assert_eq!(with(&[20.0], 4.0, 4.0), plain);
    // A filter whose lag the model holds, taken out; and one added that the model does not hold.
    near(
        with(&[20.0, 4.0], 4.0, 0.0).ms,
        plain.ms.expect("stable"),
        1e-6,
        "Ms",
    );
    let slower = with(&[20.0, 4.0], 0.0, 0.0);
    near(
        with(&[20.0], 0.0, 4.0).ms,
        slower.ms.expect("stable"),
        1e-6,
        "Ms",
    );
    assert!(slower.ms > plain.ms);
}

use super::*;

/// NIST StRD, nonlinear regression, Misra1a: (y, x).
const MISRA1A: [(f64, f64); 14] = [
    (10.07, 77.6),
    (14.73, 114.9),
    (17.94, 141.1),
    (23.93, 190.8),
    (29.61, 239.9),
    (35.18, 289.0),
    (40.02, 332.8),
    (44.82, 378.4),
    (50.76, 434.8),
    (55.05, 477.3),
    (61.01, 536.8),
    (66.40, 593.1),
    (75.47, 689.1),
    (81.78, 760.0),
];

/// NIST StRD, nonlinear regression, BoxBOD: (y, x).
const BOX_BOD: [(f64, f64); 6] = [
    (109.0, 1.0),
    (149.0, 2.0),
    (149.0, 3.0),
    (191.0, 5.0),
    (213.0, 7.0),
    (224.0, 10.0),
];

fn step_response(data: &[(f64, f64)]) -> Problem {
    Problem {
        fixed_dead_time_s: Some(0.0),
        ..Problem::new(vec![Window {
            t_s: data.iter().map(|d| d.1).collect(),
            pv: data.iter().map(|d| d.0).collect(),
            moves: vec![(0.0, 1.0)],
            base: Base::Nothing,
        }])
    }
}

fn assert_relative(found: f64, expected: f64, tolerance: f64) {
    assert!(
        (found / expected - 1.0).abs() < tolerance,
        "{found:e} instead of {expected:e}"
    );
}

/// y = b1 (1 − e^(−b2 x)) with certified b1, its sd, b2, its sd and residual sum of squares.
fn assert_certified(data: &[(f64, f64)], certified: [f64; 5]) {
    let fit = fit(&step_response(data), Kind::FirstOrder).expect("a fit");
    let (tau, _) = fit.point.lags(Kind::FirstOrder);
    assert_relative(fit.gains[0], certified[0], 1e-8);
    assert_relative(1.0 / tau, certified[2], 1e-8);
    assert_relative(fit.rss, certified[4], 1e-8);
    let covariance = super::super::covariance::ordinary(&fit);
    // sd of ln b is the relative sd of b; both to four figures.
    assert_relative(
        libm::sqrt(covariance[0][0]),
        certified[1] / certified[0],
        1e-4,
    );
    assert_relative(
        libm::sqrt(covariance[1][1]),
        certified[3] / certified[2],
        1e-4,
    );
}

/// Values: NIST Statistical Reference Datasets, nonlinear regression, Misra1a (certified values).
#[test]
fn misra1a_is_fitted_to_its_certified_values() {
    assert_certified(
        &MISRA1A,
        [
            2.3894212918E+02,
            2.7070075241E+00,
            5.5015643181E-04,
            7.2668688436E-06,
            1.2455138894E-01,
        ],
    );
}

/// Values: NIST Statistical Reference Datasets, nonlinear regression, BoxBOD (certified values).
#[test]
fn box_bod_is_fitted_to_its_certified_values() {
    assert_certified(
        &BOX_BOD,
        [
            2.1380940889E+02,
            1.2354515176E+01,
            5.4723748542E-01,
            1.0455993237E-01,
            1.1680088766E+03,
        ],
    );
}

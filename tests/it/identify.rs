//! The fitter against fits of the same data by an independent optimiser (scipy), see
//! `tests/reference/fits.py`.

use asleft::identify::covariance;
use asleft::identify::least_squares::{self, Base, Problem, Window};
use asleft::model::Kind;
use std::path::{Path, PathBuf};

fn reference() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference")
}

/// The columns of a CSV file by heading; empty cells are `None`.
fn table(path: &Path) -> Vec<std::collections::BTreeMap<String, String>> {
    csv::Reader::from_path(path)
        .expect("the file opens")
        .deserialize()
        .map(|row| row.expect("a row of text"))
        .collect()
}

fn window(file: &str) -> Window {
    let rows = table(&reference().join("fits").join(file));
    let column = |name: &str| -> Vec<f64> {
        rows.iter()
            .map(|row| row[name].parse().expect("a number"))
            .collect()
    };
    let (t_s, op) = (column("t_s"), column("op"));
    let mut moves = Vec::new();
    for k in 1..op.len() {
        if op[k] != op[k - 1] {
            moves.push((t_s[k], op[k] - op[0]));
        }
    }
    Window {
        pv: column("pv"),
        t_s,
        moves,
        base: Base::Level,
    }
}

#[test]
fn fits_are_those_of_an_independent_optimiser() {
    let cases = table(&reference().join("fits.csv"));
    assert!(cases.len() >= 24);
    for case in cases {
        let file = case["file"].as_str();
        let number = |name: &str| case[name].parse::<f64>().ok();
        let kind: Kind = serde_json::from_value(case["kind"].clone().into()).expect("a kind");
        let fit = least_squares::fit(&Problem::new(vec![window(file)]), kind).expect("a fit");
        let (tau, tau2) = fit.point.lags(kind);
        // The best of the other optimiser's 20 starts; a tenth of a percent is far inside the noise
        // of any of these, and a fit that is better still is no error.
        let rss = number("rss").expect("a sum of squares");
        assert!(fit.rss <= rss * 1.001, "{file}: {} against {rss}", fit.rss);
        if fit.rss < rss * (1.0 - 1e-6) {
            continue;
        }
        let mut figures = vec![("gain", fit.gains[0]), ("theta_s", fit.point.dead_time_s)];
        figures.push(("bias", fit.bases[0].0));
        if kind != Kind::Integrating {
            figures.push(("tau_s", tau));
        }
        if kind == Kind::SecondOrder {
            figures.push(("tau2_s", tau2));
        }
        for (name, found) in figures {
            let expected = number(name).expect("a parameter");
            assert!(
                (found - expected).abs() <= 1e-3 * expected.abs(),
                "{file}, {name}: {found} against {expected}"
            );
        }
        // Standard errors without memory of the residual, where the dead time is not at its bound.
        if fit.point.dead_time_s > 0.0 {
            let covariance = covariance::ordinary(&fit);
            let expected = number("se_gain").expect("a standard error") / fit.gains[0].abs();
            let found = covariance[0][0].sqrt();
            assert!(
                (found / expected - 1.0).abs() < 1e-2,
                "{file}: {found} {expected}"
            );
            let expected = number("se_theta_s").expect("a standard error");
            let found = covariance[1][1].sqrt();
            assert!(
                (found / expected - 1.0).abs() < 1e-2,
                "{file}: {found} {expected}"
            );
        }
    }
}

/// MGH17 of the NIST data sets: a settled response of two lags that is already moving at its start.
#[test]
fn two_lags_are_fitted_to_their_certified_values() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/published/nist_strd.toml");
    let text = std::fs::read_to_string(path).expect("the file is there");
    let sets: toml::Table = text.parse().expect("TOML");
    let case = sets["case"]
        .as_array()
        .expect("cases")
        .iter()
        .find(|case| case["name"].as_str() == Some("MGH17"))
        .expect("MGH17");
    let numbers = |key: &str| -> Vec<f64> {
        let values = case[key].as_array().expect("numbers");
        values.iter().filter_map(toml::Value::as_float).collect()
    };
    let problem = Problem {
        moving_at_start: true,
        fixed_dead_time_s: Some(0.0),
        ..Problem::new(vec![Window {
            t_s: numbers("x"),
            pv: numbers("y"),
            moves: vec![(0.0, 1.0)],
            base: Base::Level,
        }])
    };
    let fit = least_squares::fit(&problem, Kind::SecondOrder).expect("a fit");
    let (tau, tau2) = fit.point.lags(Kind::SecondOrder);
    let (gain, rate) = (fit.gains[0], fit.rates[0]);
    // The step response is 1 − (τ e^(−t/τ) − τ₂ e^(−t/τ₂))/(τ − τ₂), its rate (e^(−t/τ) − e^(−t/τ₂))/(τ − τ₂).
    let found = [
        ("b1", fit.bases[0].0 + gain),
        ("b2", (rate - gain * tau) / (tau - tau2)),
        ("b3", (gain * tau2 - rate) / (tau - tau2)),
        ("b4", 1.0 / tau),
        ("b5", 1.0 / tau2),
        ("residual_sum_of_squares", fit.rss),
    ];
    for expected in case["expected"].as_array().expect("expected values") {
        let name = expected["quantity"].as_str().expect("a name");
        let Some((_, value)) = found.iter().find(|(known, _)| *known == name) else {
            continue;
        };
        let certified = expected["value"].as_float().expect("a value");
        let tolerance = expected["tolerance"].as_float().expect("a tolerance");
        assert!(
            (value - certified).abs() <= tolerance,
            "{name}: {value:e} against {certified:e}"
        );
    }
}

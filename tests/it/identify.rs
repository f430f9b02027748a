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
    assert_eq!(cases.len(), 32);
    for case in cases {
        let file = case["file"].as_str();
        let number = |name: &str| case[name].parse::<f64>().ok();
        let kind: Kind = serde_json::from_value(case["kind"].clone().into()).expect("a kind");
        let fit = least_squares::fit(&Problem::new(vec![window(file)]), kind).expect("a fit");
        let (tau, tau2) = fit.point.lags(kind);
        // Both searches must end in the same minimum, and neither may have found a better one. What is left
        // is where each stops, a millionth at most, here and in the parameters.
        let rss = number("rss").expect("a sum of squares");
        assert!(
            (fit.rss / rss - 1.0).abs() < 1e-6,
            "{file}: {} against {rss}",
            fit.rss
        );
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
                (found - expected).abs() <= 1e-6 * expected.abs(),
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

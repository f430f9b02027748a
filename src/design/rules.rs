//! One function for each published rule.
//!
//! All give the standard form. `k` is the magnitude of the process gain, `tau_s` the time constant,
//! `theta_s` the dead time, above 0, r = θ/τ, a = Kθ/τ; for integrating processes `k` is K′ per second.

use crate::design::RuleSettings;
use crate::model::ProcessModel;
use crate::predict::{PvFilter, margins};
use crate::settings::{Action, Controller, EquationForm, Standard, Terms};

fn pi(kc: f64, ti_s: f64) -> Standard {
    Standard {
        kc,
        ti_s: Some(ti_s),
        td_s: 0.0,
    }
}

fn pid(kc: f64, ti_s: f64, td_s: f64) -> Standard {
    Standard {
        kc,
        ti_s: Some(ti_s),
        td_s,
    }
}

/// SIMC PI: Kc = τ/(K(τc + θ)), Ti = min(τ, 4(τc + θ)).
///
/// S. Skogestad, J. Process Control 13 (2003) 291-309, eqs. 23 and 24.
pub fn simc_pi(k: f64, tau_s: f64, theta_s: f64, tau_c_s: f64) -> Standard {
    let wait = tau_c_s + theta_s;
    pi(tau_s / (k * wait), tau_s.min(4.0 * wait))
}

/// SIMC PI, integrating: Kc = 1/(K′(τc + θ)), Ti = 4(τc + θ). Source as [`simc_pi`].
pub fn simc_pi_integrating(k: f64, theta_s: f64, tau_c_s: f64) -> Standard {
    let wait = tau_c_s + theta_s;
    pi(1.0 / (k * wait), 4.0 * wait)
}

/// SIMC PID for two lags: the series controller of [`simc_pi`] with Td′ = τ₂, in standard form.
///
/// Same source, eq. 25.
pub fn simc_pid(k: f64, tau_s: f64, tau2_s: f64, theta_s: f64, tau_c_s: f64) -> Standard {
    let series = simc_pi(k, tau_s, theta_s, tau_c_s);
    Standard::from_series(series.kc, series.ti_s, tau2_s)
}

/// Improved SIMC PI, for θ > τ: τ + θ/3 in the place of τ.
///
/// C. Grimholt, S. Skogestad, IFAC Conf. Advances in PID Control (PID'12), Brescia 2012.
pub fn improved_simc_pi(k: f64, tau_s: f64, theta_s: f64, tau_c_s: f64) -> Standard {
    simc_pi(k, tau_s + theta_s / 3.0, theta_s, tau_c_s)
}

/// Lambda PI: Kc = τ/(K(λ + θ)), Ti = τ.
///
/// E.B. Dahlin, Instruments & Control Systems 41(6) (1968) 77-83.
pub fn lambda_pi(k: f64, tau_s: f64, theta_s: f64, lambda_s: f64) -> Standard {
    pi(tau_s / (k * (lambda_s + theta_s)), tau_s)
}

/// Lambda PI, integrating: Kc = (2λ + θ)/(K′(λ + θ)²), Ti = 2λ + θ.
///
/// I-L. Chien, P.S. Fruehauf, Chem. Eng. Progress 86(10) (1990) 33-41.
pub fn lambda_pi_integrating(k: f64, theta_s: f64, lambda_s: f64) -> Standard {
    let (sum, wait) = (2.0 * lambda_s + theta_s, lambda_s + theta_s);
    pi(sum / (k * wait * wait), sum)
}

/// IMC PID: Kc = (2τ + θ)/(K(2λ + θ)), Ti = τ + θ/2, Td = τθ/(2τ + θ).
///
/// D.E. Rivera, M. Morari, S. Skogestad, Ind. Eng. Chem. Process Des. Dev. 25 (1986) 252-265, for
/// λ at least 0.8 θ and at least 0.1 τ.
pub fn imc_pid(k: f64, tau_s: f64, theta_s: f64, lambda_s: f64) -> Standard {
    let sum = 2.0 * tau_s + theta_s;
    pid(
        sum / (k * (2.0 * lambda_s + theta_s)),
        tau_s + theta_s / 2.0,
        tau_s * theta_s / sum,
    )
}

/// The smallest λ that [`imc_pid`]'s source recommends: max(0.8 θ, 0.1 τ).
pub fn imc_lambda_s(tau_s: f64, theta_s: f64) -> f64 {
    (0.8 * theta_s).max(0.1 * tau_s)
}

/// Ziegler-Nichols reaction curve, PI: 0.9/a, 3.333θ. `a` = Kθ/τ, or K′θ for integrating processes.
///
/// J.G. Ziegler, N.B. Nichols, Trans. ASME 64 (1942) 759-768.
pub fn ziegler_nichols_pi(a: f64, theta_s: f64) -> Standard {
    pi(0.9 / a, theta_s / 0.3)
}

/// Ziegler-Nichols reaction curve, PID: 1.2/a, 2θ, 0.5θ. Source as [`ziegler_nichols_pi`].
pub fn ziegler_nichols_pid(a: f64, theta_s: f64) -> Standard {
    pid(1.2 / a, 2.0 * theta_s, 0.5 * theta_s)
}

/// Cohen-Coon PI: (1/a)(0.9 + r/12), θ(30 + 3r)/(9 + 20r).
///
/// G.H. Cohen, G.A. Coon, Trans. ASME 75 (1953) 827-834.
pub fn cohen_coon_pi(k: f64, tau_s: f64, theta_s: f64) -> Standard {
    let (r, a) = (theta_s / tau_s, k * theta_s / tau_s);
    pi(
        (0.9 + r / 12.0) / a,
        theta_s * (30.0 + 3.0 * r) / (9.0 + 20.0 * r),
    )
}

/// Cohen-Coon PID: (1/a)(4/3 + r/4), θ(32 + 6r)/(13 + 8r), 4θ/(11 + 2r). Source as [`cohen_coon_pi`].
pub fn cohen_coon_pid(k: f64, tau_s: f64, theta_s: f64) -> Standard {
    let (r, a) = (theta_s / tau_s, k * theta_s / tau_s);
    pid(
        (4.0 / 3.0 + r / 4.0) / a,
        theta_s * (32.0 + 6.0 * r) / (13.0 + 8.0 * r),
        4.0 * theta_s / (11.0 + 2.0 * r),
    )
}

/// Chien-Hrones-Reswick, load, 0 % overshoot, PI: 0.6/a, 4θ.
///
/// K.L. Chien, J.A. Hrones, J.B. Reswick, Trans. ASME 74 (1952) 175-185, as tabulated in K.J. Åström,
/// T. Hägglund, PID Controllers, 2nd ed. 1995.
pub fn chien_hrones_reswick_pi(a: f64, theta_s: f64) -> Standard {
    pi(0.6 / a, 4.0 * theta_s)
}

/// Chien-Hrones-Reswick, load, 0 % overshoot, PID: 0.95/a, 2.4θ, 0.42θ. Source as
/// [`chien_hrones_reswick_pi`].
pub fn chien_hrones_reswick_pid(a: f64, theta_s: f64) -> Standard {
    pid(0.95 / a, 2.4 * theta_s, 0.42 * theta_s)
}

/// AMIGO PI: Kc = 0.15/K + (0.35 − θτ/(θ + τ)²)τ/(Kθ), Ti = 0.35θ + 13θτ²/(τ² + 12θτ + 7θ²).
///
/// K.J. Åström, T. Hägglund, J. Process Control 14 (2004) 635-650.
pub fn amigo_pi(k: f64, tau_s: f64, theta_s: f64) -> Standard {
    let sum = theta_s + tau_s;
    pi(
        0.15 / k + (0.35 - theta_s * tau_s / (sum * sum)) * tau_s / (k * theta_s),
        0.35 * theta_s
            + 13.0 * theta_s * tau_s * tau_s
                / (tau_s * tau_s + 12.0 * theta_s * tau_s + 7.0 * theta_s * theta_s),
    )
}

/// AMIGO PID: Kc = (0.2 + 0.45τ/θ)/K, Ti = θ(0.4θ + 0.8τ)/(θ + 0.1τ), Td = 0.5θτ/(0.3θ + τ). Source
/// as [`amigo_pi`].
pub fn amigo_pid(k: f64, tau_s: f64, theta_s: f64) -> Standard {
    pid(
        (0.2 + 0.45 * tau_s / theta_s) / k,
        theta_s * (0.4 * theta_s + 0.8 * tau_s) / (theta_s + 0.1 * tau_s),
        0.5 * theta_s * tau_s / (0.3 * theta_s + tau_s),
    )
}

/// AMIGO PI, integrating: 0.35/(K′θ), 13.4θ. Source as [`amigo_pi`].
pub fn amigo_pi_integrating(k: f64, theta_s: f64) -> Standard {
    pi(0.35 / (k * theta_s), 13.4 * theta_s)
}

/// AMIGO PID, integrating: 0.45/(K′θ), 8θ, 0.5θ. Source as [`amigo_pi`].
pub fn amigo_pid_integrating(k: f64, theta_s: f64) -> Standard {
    pid(0.45 / (k * theta_s), 8.0 * theta_s, 0.5 * theta_s)
}

/// ITAE, set point, PI: Kc = 0.586 r^−0.916/K, Ti = τ/(1.03 − 0.165 r); for 0.1 ≤ r ≤ 1.
///
/// A.A. Rovira, P.W. Murrill, C.L. Smith, Instruments & Control Systems 42(12) (1969) 67-69. `None`
/// where the formula gives no integral time above 0 (r above 6.2).
pub fn itae_set_point_pi(k: f64, tau_s: f64, theta_s: f64) -> Option<Standard> {
    let r = theta_s / tau_s;
    let divisor = 1.03 - 0.165 * r;
    (divisor > 0.0).then(|| pi(0.586 * libm::pow(r, -0.916) / k, tau_s / divisor))
}

/// ITAE, load, PI: Kc = 0.859 r^−0.977/K, Ti = τ/(0.674 r^−0.680); for 0.1 ≤ r ≤ 1.
///
/// A.M. Lopez, J.A. Miller, C.L. Smith, P.W. Murrill, Instrumentation Technology 14(11) (1967) 57-62.
pub fn itae_load_pi(k: f64, tau_s: f64, theta_s: f64) -> Standard {
    let r = theta_s / tau_s;
    pi(
        0.859 * libm::pow(r, -0.977) / k,
        tau_s / (0.674 * libm::pow(r, -0.680)),
    )
}

/// ITAE, load, PID: Kc = 1.357 r^−0.947/K, Ti = τ/(0.842 r^−0.738), Td = 0.381 τ r^0.995; for
/// 0.1 ≤ r ≤ 1. Source as [`itae_load_pi`].
pub fn itae_load_pid(k: f64, tau_s: f64, theta_s: f64) -> Standard {
    let r = theta_s / tau_s;
    pid(
        1.357 * libm::pow(r, -0.947) / k,
        tau_s / (0.842 * libm::pow(r, -0.738)),
        0.381 * tau_s * libm::pow(r, 0.995),
    )
}

/// Averaging level, critical damping: Kc = 2/(K′λ), Ti = 2λ, both poles at −1/λ. A load step of D % OP
/// lifts the level by K′·D·λ/e at t = λ. Exact for θ = 0.
pub fn averaging_level_pi(k: f64, arrest_time_s: f64) -> Standard {
    pi(2.0 / (k * arrest_time_s), 2.0 * arrest_time_s)
}

/// One rule as it stands in the table.
struct Row {
    rule: &'static str,
    source: &'static str,
    settings: Option<Standard>,
    in_range: bool,
}

fn row(rule: &'static str, source: &'static str, settings: Standard, in_range: bool) -> Row {
    Row {
        rule,
        source,
        settings: Some(settings),
        in_range,
    }
}

const DAHLIN: &str = "E.B. Dahlin, Instruments & Control Systems 41(6) (1968) 77-83";
const CHIEN_FRUEHAUF: &str = "I-L. Chien, P.S. Fruehauf, Chem. Eng. Progress 86(10) (1990) 33-41";
const RIVERA: &str =
    "D.E. Rivera, M. Morari, S. Skogestad, Ind. Eng. Chem. Process Des. Dev. 25 (1986) 252-265";
const SKOGESTAD: &str = "S. Skogestad, J. Process Control 13 (2003) 291-309";
const AMIGO: &str = "K.J. Åström, T. Hägglund, J. Process Control 14 (2004) 635-650";
const COHEN_COON: &str = "G.H. Cohen, G.A. Coon, Trans. ASME 75 (1953) 827-834";
const ZIEGLER_NICHOLS: &str = "J.G. Ziegler, N.B. Nichols, Trans. ASME 64 (1942) 759-768";
const CHIEN_HRONES_RESWICK: &str =
    "K.L. Chien, J.A. Hrones, J.B. Reswick, Trans. ASME 74 (1952) 175-185";
const ROVIRA: &str =
    "A.A. Rovira, P.W. Murrill, C.L. Smith, Instruments & Control Systems 42(12) (1969) 67-69";
const LOPEZ: &str = "A.M. Lopez, J.A. Miller, C.L. Smith, P.W. Murrill, Instrumentation Technology 14(11) (1967) 57-62";

fn self_regulating(k: f64, tau: f64, theta: f64, derivative: bool) -> Vec<Row> {
    let r = theta / tau;
    let a = k * r;
    // The ITAE rules were fitted over 0.1 ≤ r ≤ 1; common practice takes the same range for the other
    // rules that were worked out on reaction curves.
    let moderate = (0.1..=1.0).contains(&r);
    let lambda = imc_lambda_s(tau, theta);
    let mut rows = vec![
        row(
            "Lambda (λ = τ)",
            DAHLIN,
            lambda_pi(k, tau, theta, tau),
            true,
        ),
        row("IMC PID", RIVERA, imc_pid(k, tau, theta, lambda), true),
        row(
            "SIMC (τc = θ)",
            SKOGESTAD,
            simc_pi(k, tau, theta, theta),
            true,
        ),
    ];
    let either = |with: Standard, without: Standard| if derivative { with } else { without };
    rows.push(row(
        "AMIGO",
        AMIGO,
        either(amigo_pid(k, tau, theta), amigo_pi(k, tau, theta)),
        true,
    ));
    rows.push(row(
        "Cohen-Coon",
        COHEN_COON,
        either(cohen_coon_pid(k, tau, theta), cohen_coon_pi(k, tau, theta)),
        moderate,
    ));
    rows.push(row(
        "Ziegler-Nichols, reaction curve",
        ZIEGLER_NICHOLS,
        either(ziegler_nichols_pid(a, theta), ziegler_nichols_pi(a, theta)),
        moderate,
    ));
    rows.push(row(
        "Chien-Hrones-Reswick, load 0 %",
        CHIEN_HRONES_RESWICK,
        either(
            chien_hrones_reswick_pid(a, theta),
            chien_hrones_reswick_pi(a, theta),
        ),
        moderate,
    ));
    rows.push(Row {
        rule: "ITAE, set point",
        source: ROVIRA,
        settings: itae_set_point_pi(k, tau, theta),
        in_range: moderate,
    });
    rows.push(row(
        "ITAE, load",
        LOPEZ,
        either(itae_load_pid(k, tau, theta), itae_load_pi(k, tau, theta)),
        moderate,
    ));
    rows
}

fn integrating(k: f64, theta: f64, derivative: bool) -> Vec<Row> {
    let a = k * theta;
    let either = |with: Standard, without: Standard| if derivative { with } else { without };
    vec![
        row(
            "Lambda (λ = 3θ)",
            CHIEN_FRUEHAUF,
            lambda_pi_integrating(k, theta, 3.0 * theta),
            true,
        ),
        row(
            "SIMC (τc = θ)",
            SKOGESTAD,
            simc_pi_integrating(k, theta, theta),
            true,
        ),
        row(
            "AMIGO",
            AMIGO,
            either(
                amigo_pid_integrating(k, theta),
                amigo_pi_integrating(k, theta),
            ),
            true,
        ),
        row(
            "Ziegler-Nichols, reaction curve",
            ZIEGLER_NICHOLS,
            either(ziegler_nichols_pid(a, theta), ziegler_nichols_pi(a, theta)),
            true,
        ),
    ]
}

/// What the published rules give on this model, each with Ms and phase margin computed on it.
///
/// Rules are for one lag (or an integrator) with dead time: a second lag goes half to the lag and half
/// to the dead time (the half rule). They are for continuous controllers, so half a scan is added to
/// the dead time. With `derivative` the PID rules are given where a source has one; IMC has no other. Margins are computed
/// with the controller's filter and scan; a set that a series controller cannot hold is computed in
/// the standard form.
pub fn published_rules(
    model: &ProcessModel,
    controller: &Controller,
    filter: PvFilter,
    derivative: bool,
) -> Vec<RuleSettings> {
    let k = model.gain().abs();
    let lag = model.time_constant_s().unwrap_or(0.0);
    let second = model.second_time_constant_s().unwrap_or(0.0);
    let theta = model.dead_time_s() + controller.scan_s / 2.0;
    let rows = if model.kind().integrates() {
        integrating(k, theta + lag / 2.0, derivative)
    } else {
        self_regulating(k, lag + second / 2.0, theta + second / 2.0, derivative)
    };
    let action = Action::for_gain(model.gain());
    rows.into_iter()
        .filter_map(|row| {
            let settings = row.settings?;
            let terms = own_form(settings, controller.form);
            let margins = margins(model, &terms, controller, filter, action);
            Some(RuleSettings {
                rule: row.rule.to_owned(),
                source: row.source.to_owned(),
                settings,
                ms: margins.ms,
                phase_margin_deg: margins.phase_margin_deg,
                in_range: row.in_range,
            })
        })
        .collect()
}

/// Settings in the form of the controller; standard where the form cannot hold them.
pub fn own_form(settings: Standard, form: EquationForm) -> Terms {
    let standard = Terms::Standard {
        kc: settings.kc,
        ti_s: settings.ti_s,
        td_s: settings.td_s,
    };
    match form {
        EquationForm::Standard => standard,
        EquationForm::Series => {
            settings
                .series()
                .map_or(standard, |(kc, ti_s, td_s)| Terms::Series {
                    kc,
                    ti_s,
                    td_s,
                })
        }
        EquationForm::Parallel => {
            let (kp, ki_per_s, kd_s) = settings.parallel();
            Terms::Parallel { kp, ki_per_s, kd_s }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // K = 2, τ = 10, θ = 2 (r = 0.2, a = 0.4); integrating K′ = 0.05, θ = 4. Each vector was recomputed
    // independently from the formula at the function; eight figures are quoted.
    #[test]
    fn every_rule_gives_its_vector() {
        let (k, tau, theta) = (2.0, 10.0, 2.0);
        let (level, wait) = (0.05, 4.0);
        let a = 0.4;
        let lambda = imc_pid(k, tau, theta, 1.6);
        let itae = itae_set_point_pi(k, tau, theta).expect("r is small");
        #[rustfmt::skip]
        let vectors = [
            ("SIMC", simc_pi(k, tau, theta, theta), 1.25, 10.0, 0.0),
            ("SIMC, integrating", simc_pi_integrating(level, wait, wait), 2.5, 32.0, 0.0),
            ("improved SIMC", improved_simc_pi(k, tau, theta, theta), 1.3333333, 10.666667, 0.0),
            ("improved SIMC, long dead time", improved_simc_pi(1.0, 5.0, 120.0, 120.0), 0.1875, 45.0, 0.0),
            ("SIMC PID", simc_pid(1.0, 20.0, 2.0, 1.0, 1.0), 12.5, 10.0, 1.6),
            ("lambda", lambda_pi(k, tau, theta, tau), 0.4166667, 10.0, 0.0),
            ("lambda, integrating", lambda_pi_integrating(level, wait, 12.0), 2.1875, 28.0, 0.0),
            ("IMC PID", lambda, 2.1153846, 11.0, 0.90909091),
            ("Ziegler-Nichols PI", ziegler_nichols_pi(a, theta), 2.25, 6.6666667, 0.0),
            ("Ziegler-Nichols PID", ziegler_nichols_pid(a, theta), 3.0, 4.0, 1.0),
            ("Ziegler-Nichols PI, integrating", ziegler_nichols_pi(level * wait, wait), 4.5, 13.333333, 0.0),
            ("Ziegler-Nichols PID, integrating", ziegler_nichols_pid(level * wait, wait), 6.0, 8.0, 2.0),
            ("Cohen-Coon PI", cohen_coon_pi(k, tau, theta), 2.2916667, 4.7076923, 0.0),
            ("Cohen-Coon PID", cohen_coon_pid(k, tau, theta), 3.4583333, 4.5479452, 0.70175439),
            // From memory: the tabulation of Åström and Hägglund; prints differ in the third digit.
            ("Chien-Hrones-Reswick PI", chien_hrones_reswick_pi(a, theta), 1.5, 8.0, 0.0),
            ("Chien-Hrones-Reswick PID", chien_hrones_reswick_pid(a, theta), 2.375, 4.8, 0.84),
            ("AMIGO PI", amigo_pi(k, tau, theta), 0.60277778, 7.7652174, 0.0),
            ("AMIGO PID", amigo_pid(k, tau, theta), 1.225, 5.8666667, 0.94339623),
            ("AMIGO PI, integrating", amigo_pi_integrating(level, wait), 1.75, 53.6, 0.0),
            ("AMIGO PID, integrating", amigo_pid_integrating(level, wait), 2.25, 32.0, 2.0),
            ("ITAE set point", itae, 1.2797471, 10.03009, 0.0),
            ("ITAE load PI", itae_load_pi(k, tau, theta), 2.0694592, 4.9663863, 0.0),
            ("ITAE load PID", itae_load_pid(k, tau, theta), 3.1151176, 3.6211628, 0.7681567),
            ("averaging", averaging_level_pi(level, 12.0), 3.3333333, 24.0, 0.0),
        ];
        for (rule, found, kc, ti, td) in vectors {
            let ti_found = found.ti_s.expect("every rule has integral action");
            for (found, expected) in [(found.kc, kc), (ti_found, ti), (found.td_s, td)] {
                assert!(
                    (found - expected).abs() <= 1e-7 * expected,
                    "{rule}: {found}, expected {expected}"
                );
            }
        }
        assert_eq!(itae_set_point_pi(1.0, 1.0, 7.0), None);
    }

    // Validation points of the Modelica Buildings library for AMIGO, printed to three digits.
    #[test]
    fn amigo_meets_the_validation_points_of_a_published_library() {
        let third_digit = |found: f64, expected: f64| assert!((found - expected).abs() < 6e-4);
        for (k, tau, theta, kc, ti) in [
            (1.0, 0.5, 0.3, 0.343, 0.469),
            (1.5, 0.75, 0.45, 0.228, 0.703),
            (2.0, 1.0, 0.6, 0.171, 0.938),
        ] {
            let found = amigo_pi(k, tau, theta);
            third_digit(found.kc, kc);
            third_digit(found.ti_s.expect("integral action"), ti);
        }
        for (k, tau, theta, kc, ti, td) in [
            (1.0, 0.5, 0.3, 0.950, 0.446, 0.127),
            (1.5, 0.75, 0.45, 0.633, 0.669, 0.191),
        ] {
            let found = amigo_pid(k, tau, theta);
            third_digit(found.kc, kc);
            third_digit(found.ti_s.expect("integral action"), ti);
            third_digit(found.td_s, td);
        }
    }
}

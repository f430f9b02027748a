//! Rules, margins, forms and facts of a first-order response.

use super::{Case, cases};
use asleft::design::rules;
use asleft::model::{Kind, ProcessModel};
use asleft::predict::Margins;
use asleft::predict::open_loop::Loop;
use asleft::quantity::Span;
use asleft::settings::{
    ActsOn, Controller, DerivativeUnit, EquationForm, IntegralUnit, ProportionalUnit, Standard,
    Terms,
};

fn margin(margins: &Margins, quantity: &str) -> f64 {
    let value = match quantity {
        "ms" => margins.ms,
        "mt" => margins.mt,
        "gain_margin" => margins.gain_margin,
        "phase_margin_deg" => margins.phase_margin_deg,
        other => panic!("no margin {other}"),
    };
    value.unwrap_or(f64::INFINITY)
}

fn series(kc: f64, ti_s: f64, td_s: f64) -> Terms {
    Terms::Series {
        kc,
        ti_s: Some(ti_s),
        td_s,
    }
}

#[test]
fn simc_robustness_on_its_own_model() {
    for case in cases("simc_robustness.toml") {
        let process = Loop::gain(case.number("gain"));
        let process = match case.maybe("tau_s") {
            Some(tau) => process.lag(tau),
            None => process.integrator(),
        };
        let theta = case.number("theta_s");
        let terms = series(case.number("kc"), case.number("ti_s"), 0.0);
        let margins = process.dead_time(theta).controller(&terms, 0.0).margins();
        assert!(margins.stable, "{}", case.name);
        case.check(|quantity| match quantity {
            "delay_margin_over_theta" => {
                margins.delay_margin_s.map_or(f64::INFINITY, |d| d / theta)
            }
            other => margin(&margins, other),
        });
    }
}

#[test]
fn simc_processes_with_their_printed_settings() {
    for case in cases("simc_processes.toml") {
        let mut process = Loop::gain(case.number("gain")).dead_time(case.number("dead_time_s"));
        for lead in case.numbers("leads_s") {
            process = process.lead(lead);
        }
        for lag in case.numbers("lags_s") {
            process = process.lag(lag);
        }
        for _ in 0..case.whole("integrators") {
            process = process.integrator();
        }
        let terms = series(case.number("kc"), case.number("ti_s"), case.number("td_s"));
        let margins = process.controller(&terms, 0.0).margins();
        assert!(margins.stable, "{}", case.name);
        // The rule on the reduced model, τc = θ; its derivative in series form is τ₂.
        let (k, theta) = (
            case.number("reduced_gain"),
            case.number("reduced_dead_time_s"),
        );
        let rule = match case.maybe("reduced_tau_s") {
            Some(tau) => rules::simc_pi(k, tau, theta, theta),
            None => rules::simc_pi_integrating(k, theta, theta),
        };
        case.check(|quantity| match quantity {
            "td_s" => case.number("reduced_tau2_s"),
            "kc" | "ti_s" => setting(&rule, quantity),
            other => margin(&margins, other),
        });
    }
}

fn setting(settings: &Standard, quantity: &str) -> f64 {
    match quantity {
        "kc" => settings.kc,
        "ti_s" => settings.ti_s.unwrap_or(f64::INFINITY),
        "td_s" => settings.td_s,
        other => panic!("no setting {other}"),
    }
}

/// What the rule of a case gives, its gain and times multiplied.
fn rule(case: &Case, gain_factor: f64, time_factor: f64) -> Option<Standard> {
    let k = gain_factor * case.number("k");
    let theta = time_factor * case.number("theta_s");
    let tau_c = case.maybe("tau_c_s").map(|t| time_factor * t);
    let chosen = || tau_c.unwrap_or_else(|| panic!("{}: no tau_c_s", case.name));
    let key = (case.text("rule"), case.text("controller"));
    let Some(tau) = case.maybe("tau_s").map(|t| time_factor * t) else {
        return Some(match key {
            ("simc", "PI") => rules::simc_pi_integrating(k, theta, chosen()),
            ("lambda", "PI") => rules::lambda_pi_integrating(k, theta, chosen()),
            ("ziegler-nichols", "PI") => rules::ziegler_nichols_pi(k * theta, theta),
            ("ziegler-nichols", "PID") => rules::ziegler_nichols_pid(k * theta, theta),
            ("amigo", "PI") => rules::amigo_pi_integrating(k, theta),
            ("amigo", "PID") => rules::amigo_pid_integrating(k, theta),
            other => panic!("{}: no rule {other:?}", case.name),
        });
    };
    let a = k * theta / tau;
    Some(match key {
        ("simc", "PI") => rules::simc_pi(k, tau, theta, chosen()),
        ("simc", "PID") => {
            let tau2 = time_factor * case.number("tau2_s");
            let standard = rules::simc_pid(k, tau, tau2, theta, chosen());
            match case.text("form") {
                "series" => {
                    let (kc, ti_s, td_s) = standard.series().expect("it came from a series form");
                    Standard { kc, ti_s, td_s }
                }
                _ => standard,
            }
        }
        ("improved-simc", "PI") => rules::improved_simc_pi(k, tau, theta, chosen()),
        ("lambda", "PI") => rules::lambda_pi(k, tau, theta, chosen()),
        ("imc", "PID") => rules::imc_pid(
            k,
            tau,
            theta,
            tau_c.unwrap_or_else(|| rules::imc_lambda_s(tau, theta)),
        ),
        ("ziegler-nichols", "PI") => rules::ziegler_nichols_pi(a, theta),
        ("ziegler-nichols", "PID") => rules::ziegler_nichols_pid(a, theta),
        ("cohen-coon", "PI") => rules::cohen_coon_pi(k, tau, theta),
        ("cohen-coon", "PID") => rules::cohen_coon_pid(k, tau, theta),
        ("chien-hrones-reswick", "PI") => rules::chien_hrones_reswick_pi(a, theta),
        ("chien-hrones-reswick", "PID") => rules::chien_hrones_reswick_pid(a, theta),
        ("amigo", "PI") => rules::amigo_pi(k, tau, theta),
        ("amigo", "PID") => rules::amigo_pid(k, tau, theta),
        ("itae-set-point", "PI") => return rules::itae_set_point_pi(k, tau, theta),
        ("itae-load", "PI") => rules::itae_load_pi(k, tau, theta),
        ("itae-load", "PID") => rules::itae_load_pid(k, tau, theta),
        other => panic!("{}: no rule {other:?}", case.name),
    })
}

#[test]
fn every_published_rule_gives_its_settings() {
    for case in cases("tuning_rules.toml") {
        let settings = rule(&case, 1.0, 1.0).expect("within the rule's range");
        case.check(|quantity| match quantity {
            "lambda_s" => rules::imc_lambda_s(case.number("tau_s"), case.number("theta_s")),
            other => setting(&settings, other),
        });
    }
}

#[test]
fn every_published_rule_scales_as_it_must() {
    let rules = cases("tuning_rules.toml");
    for fact in cases("scale_facts.toml") {
        let factor = fact.number("factor");
        let (gain, time) = match fact.text("scaled") {
            "gain" => (factor, 1.0),
            "time" => (1.0, factor),
            other => panic!("{}: {other} is scaled", fact.name),
        };
        for case in rules.iter().filter(|c| c.text("kind") == fact.text("kind")) {
            let plain = rule(case, 1.0, 1.0).expect("within the rule's range");
            let scaled = rule(case, gain, time).expect("r is the same");
            for expected in &fact.expected {
                let quantity = &expected.quantity;
                let (from, to) = (setting(&plain, quantity), setting(&scaled, quantity));
                assert!(
                    (to - expected.value * from).abs() <= expected.tolerance * from.abs(),
                    "{}, {}: {quantity} {from} becomes {to}",
                    case.name,
                    fact.name
                );
            }
        }
    }
}

#[test]
fn an_averaging_level_peaks_at_the_arrest_time() {
    for case in cases("averaging_level.toml") {
        let (k, lambda) = (case.number("k"), case.number("arrest_time_s"));
        let settings = rules::averaging_level_pi(k, lambda);
        // The settings put both closed-loop poles at −1/λ: s² + K′Kc s + K′Kc/Ti.
        let ti = settings.ti_s.expect("integral action");
        let sum = k * settings.kc;
        assert!(
            (sum - 2.0 / lambda).abs() < 1e-12
                && (sum / ti - 1.0 / (lambda * lambda)).abs() < 1e-12
        );
        // Level after a load step with that double pole: K′D t e^(−t/λ); its peak by search.
        let level = |t: f64| k * case.number("load_percent") * t * (-t / lambda).exp();
        let (mut low, mut high) = (0.0, 10.0 * lambda);
        for _ in 0..200 {
            let (left, right) = (low + (high - low) / 3.0, high - (high - low) / 3.0);
            if level(left) < level(right) {
                low = left;
            } else {
                high = right;
            }
        }
        case.check(|quantity| match quantity {
            "peak_percent" => level(0.5 * (low + high)),
            // A flat top is found to the root of the precision; the slope is 0 at exactly one time.
            "peak_time_s" => {
                assert!((0.5 * (low + high) - lambda).abs() < 1e-6 * lambda);
                lambda
            }
            other => setting(&settings, other),
        });
    }
}

/// A controller that takes a proportional band and repeats per minute.
fn faceplate() -> Controller {
    let percent = Span::new(0.0, 100.0).expect("a range");
    Controller {
        form: EquationForm::Standard,
        p_as: ProportionalUnit::Band,
        i_as: IntegralUnit::PerMinute,
        d_as: DerivativeUnit::Minutes,
        p_on: ActsOn::Error,
        d_on: ActsOn::Pv,
        d_filter_n: 10.0,
        scan_s: 1.0,
        pv_span: percent,
        op_span: percent,
    }
}

#[test]
fn controller_forms_convert() {
    for case in cases("controller_forms.toml") {
        let (p, i, d) = (case.number("p"), case.number("i"), case.number("d"));
        let given = match case.text("from_form") {
            "standard" => Some(Standard {
                kc: p,
                ti_s: Some(i),
                td_s: d,
            }),
            "series" => Some(Standard::from_series(p, Some(i), d)),
            "parallel" => Standard::from_parallel(p, i, d),
            other => panic!("{}: no form {other}", case.name),
        };
        let given = given.expect("proportional gain is above 0");
        let found = match case.text("to_form") {
            "standard" => Some((given.kc, given.ti_s.expect("integral action"), given.td_s)),
            "parallel" => Some(given.parallel()),
            "series" => given
                .series()
                .map(|(kc, ti, td)| (kc, ti.expect("integral action"), td)),
            "faceplate" => faceplate()
                .native(given)
                .map(|native| (native.p, native.i, native.d)),
            other => panic!("{}: no form {other}", case.name),
        };
        let exists = case.inputs.get("exists").and_then(toml::Value::as_bool);
        assert_eq!(Some(found.is_some()), exists, "{}", case.name);
        let Some((p, i, d)) = found else { continue };
        case.check(|quantity| match quantity {
            "p" | "proportional_band_percent" => p,
            "i" | "repeats_per_min" => i,
            "d" => d,
            other => panic!("no setting {other}"),
        });
    }
}

/// Time when a rising response reaches a fraction, by halving.
pub(super) fn time_to(model: &ProcessModel, fraction: f64) -> f64 {
    let (mut low, mut high) = (0.0, 1000.0);
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if model.step_response(middle) < fraction {
            low = middle;
        } else {
            high = middle;
        }
    }
    high
}

#[test]
fn a_first_order_response_is_the_exact_one() {
    let model = ProcessModel::of_kind(Kind::FirstOrder, 1.0, 1.0, 0.0, 0.0);
    for case in cases("first_order_facts.toml") {
        let at = case.number("at");
        let found = match case.text("question") {
            "fraction-after" => model.step_response(at),
            "time-to" => time_to(&model, at),
            "rise" => time_to(&model, 1.0 - at) - time_to(&model, at),
            "settling" => time_to(&model, 1.0 - at),
            other => panic!("{}: {other} is asked", case.name),
        };
        case.check(|_| found);
    }
}

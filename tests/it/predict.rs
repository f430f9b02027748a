//! Margins and closed-loop responses against independent values; the scripts beside them in
//! tests/reference tell how those were made.

use asleft::model::{Kind, ProcessModel};
use asleft::predict::measure::{Disturbance, Meter};
use asleft::predict::simulate::{Inputs, SampledController, run};
use asleft::predict::{Margins, PvFilter, margins};
use asleft::quantity::Span;
use asleft::settings::{
    Action, ActsOn, Controller, DerivativeUnit, EquationForm, IntegralUnit, ProportionalUnit, Terms,
};
use std::collections::BTreeMap;
use std::path::PathBuf;

type Row = BTreeMap<String, String>;

fn reference(name: &str) -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
        .join("tests/reference")
        .join(name)
}

fn rows(name: &str) -> Vec<Row> {
    let mut reader =
        csv::Reader::from_path(reference(name)).expect("the reference values are there");
    reader
        .deserialize()
        .collect::<Result<_, _>>()
        .expect("every row has all columns")
}

/// A number of a row; `None` where the cell is empty.
fn number(row: &Row, column: &str) -> Option<f64> {
    let cell = &row[column];
    (!cell.is_empty()).then(|| cell.parse().expect("a number"))
}

fn given(row: &Row, column: &str) -> f64 {
    number(row, column).unwrap_or(0.0)
}

fn process(row: &Row) -> ProcessModel {
    let kind = match row["kind"].as_str() {
        "first-order" => Kind::FirstOrder,
        "second-order" => Kind::SecondOrder,
        "integrating" => Kind::Integrating,
        "integrating-lag" => Kind::IntegratingLag,
        other => panic!("no kind {other}"),
    };
    ProcessModel::of_kind(
        kind,
        given(row, "k"),
        given(row, "tau_s"),
        given(row, "tau2_s"),
        given(row, "theta_s"),
    )
}

fn terms(row: &Row) -> Terms {
    let (p, i, d) = (
        given(row, "p"),
        number(row, "i").filter(|i| *i > 0.0),
        given(row, "d"),
    );
    match row["form"].as_str() {
        "standard" => Terms::Standard {
            kc: p,
            ti_s: i,
            td_s: d,
        },
        "series" => Terms::Series {
            kc: p,
            ti_s: i,
            td_s: d,
        },
        "parallel" => Terms::Parallel {
            kp: p,
            ki_per_s: i.unwrap_or(0.0),
            kd_s: d,
        },
        other => panic!("no form {other}"),
    }
}

fn controller(row: &Row) -> Controller {
    let percent = Span::new(0.0, 100.0).expect("a range");
    Controller {
        // The terms carry the form that is computed with.
        form: EquationForm::Standard,
        p_as: ProportionalUnit::Gain,
        i_as: IntegralUnit::Seconds,
        d_as: DerivativeUnit::Seconds,
        p_on: ActsOn::Error,
        d_on: ActsOn::Pv,
        d_filter_n: given(row, "n"),
        scan_s: given(row, "scan_s"),
        pv_span: percent,
        op_span: percent,
    }
}

#[test]
fn margins_agree_with_the_independent_ones() {
    // Both sides refine crossings and peaks; the reference's peaks are good to some 1e-10 and its
    // far end to its grid. Six figures are more than a page prints.
    let tolerance = 1e-6;
    let rows = rows("margins.csv");
    assert_eq!(rows.len(), 407);
    let mut wrong = Vec::new();
    for (k, row) in rows.iter().enumerate() {
        let filter = PvFilter {
            in_log_s: 0.0,
            in_controller_s: given(row, "pv_filter_s"),
        };
        let model = process(row);
        let found = margins(
            &model,
            &terms(row),
            &controller(row),
            filter,
            Action::for_gain(model.gain()),
        );
        let stable = row["stable"].eq_ignore_ascii_case("true") || row["stable"] == "1";
        let expected = Margins {
            stable,
            ms: number(row, "ms"),
            mt: number(row, "mt"),
            gain_margin: number(row, "gain_margin"),
            phase_margin_deg: number(row, "phase_margin_deg"),
            delay_margin_s: number(row, "delay_margin_s"),
        };
        let near = |a: Option<f64>, b: Option<f64>| match (a, b) {
            (None, None) => true,
            (Some(a), Some(b)) => (a - b).abs() <= tolerance * b.abs(),
            _ => false,
        };
        let agrees = found.stable == expected.stable
            && near(found.ms, expected.ms)
            && near(found.mt, expected.mt)
            && near(found.gain_margin, expected.gain_margin)
            && near(found.phase_margin_deg, expected.phase_margin_deg)
            && near(found.delay_margin_s, expected.delay_margin_s);
        if !agrees {
            wrong.push(format!("line {}: {row:?}\n  {found:?}", k + 2));
        }
    }
    assert!(
        wrong.is_empty(),
        "{} of {}:\n{}",
        wrong.len(),
        rows.len(),
        wrong.join("\n")
    );
}

#[test]
fn closed_loops_answer_as_the_independent_ones() {
    // Both sides compute the same difference equations exactly; what is left is rounding, which a loop near the
    // edge of stability lets grow.
    let tolerance = 1e-9;
    let cases = rows("closed_loop.csv");
    assert_eq!(cases.len(), 18);
    for case in &cases {
        let name = &case["file"];
        let acts_on = |column: &str| match case[column].as_str() {
            "error" => ActsOn::Error,
            "pv" => ActsOn::Pv,
            other => panic!("{name}: acts on {other}"),
        };
        let controller = Controller {
            p_on: acts_on("p_on"),
            d_on: acts_on("d_on"),
            ..controller(case)
        };
        let model = process(case);
        let terms = Terms::Standard {
            kc: given(case, "kc").abs(),
            ti_s: number(case, "ti_s"),
            td_s: given(case, "td_s"),
        };
        let mut sampled = SampledController::new(
            &terms,
            &controller,
            PvFilter::default(),
            Action::for_gain(model.gain()),
            [given(case, "op_low"), given(case, "op_high")],
        );
        let inputs = Inputs {
            set_point: given(case, "set_point_percent"),
            load: given(case, "load_percent"),
        };
        let set_point = inputs.set_point != 0.0;
        let mut meter = Meter::new(if set_point {
            Disturbance::SetPoint(inputs.set_point)
        } else {
            Disturbance::Load(inputs.load)
        });
        let expected = rows(&format!("closed_loop/{name}"));
        let mut samples = Vec::new();
        run(
            &model,
            &mut sampled,
            controller.scan_s,
            expected.len(),
            |_| inputs,
            |sample| {
                meter.take(sample);
                samples.push(sample);
            },
        );
        for (sample, row) in samples.iter().zip(&expected) {
            for (found, column) in [(sample.t_s, "t_s"), (sample.pv, "pv"), (sample.op, "op")] {
                let expected = given(row, column);
                assert!(
                    (found - expected).abs() <= tolerance * (1.0 + expected.abs()),
                    "{name} at {} s: {column} {found}, expected {expected}",
                    sample.t_s
                );
            }
        }
        let metrics = meter.metrics();
        let mut figures = vec![
            (metrics.overshoot_percent, "overshoot_percent"),
            (metrics.rise_time_s, "rise_time_s"),
            (metrics.settling_time_s, "settling_time_s"),
            (Some(metrics.iae_percent_s), "iae"),
            (Some(metrics.op_travel_percent), "op_travel_percent"),
        ];
        if !set_point {
            figures.push((
                Some(metrics.peak_deviation_percent),
                "peak_deviation_percent",
            ));
        }
        for (found, column) in figures {
            match (found, number(case, column)) {
                (None, None) => {}
                (Some(found), Some(expected)) => assert!(
                    (found - expected).abs() <= 1e-8 * (1.0 + expected.abs()),
                    "{name}: {column} {found}, expected {expected}"
                ),
                (found, expected) => panic!("{name}: {column} {found:?}, expected {expected:?}"),
            }
        }
    }
}

#[test]
fn every_form_with_its_filters_answers_as_the_continuous_loop() {
    // The scan is as short as the reference's step; both are within 0.1 % of the step of what no step at all would give.
    let cases = rows("continuous.csv");
    assert_eq!(cases.len(), 12);
    for case in &cases {
        let name = &case["file"];
        let controller = Controller {
            d_on: ActsOn::Error,
            ..controller(case)
        };
        let model = process(case);
        let filter = PvFilter {
            in_log_s: 0.0,
            in_controller_s: given(case, "pv_filter_s"),
        };
        let mut sampled = SampledController::new(
            &terms(case),
            &controller,
            filter,
            Action::for_gain(model.gain()),
            [-1000.0, 1000.0],
        );
        let inputs = Inputs {
            set_point: given(case, "set_point_percent"),
            load: given(case, "load_percent"),
        };
        let within = 0.005 * (inputs.set_point + inputs.load);
        let expected = rows(&format!("continuous/{name}"));
        let each = libm::round(1.0 / controller.scan_s) as usize;
        let mut samples = Vec::new();
        run(
            &model,
            &mut sampled,
            controller.scan_s,
            (expected.len() - 1) * each + 1,
            |_| inputs,
            |sample| samples.push(sample),
        );
        for (sample, row) in samples.iter().step_by(each).zip(&expected) {
            assert!((sample.t_s - given(row, "t_s")).abs() < 1e-6);
            let expected = given(row, "pv");
            assert!(
                (sample.pv - expected).abs() <= within,
                "{name} at {} s: {}, expected {expected}",
                sample.t_s,
                sample.pv
            );
        }
    }
}

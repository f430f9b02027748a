//! What identification costs: `cargo bench --bench identify`. `identify_scipy.py` beside it does the same
//! on the same data with numpy and scipy.

use asleft::identify::least_squares::{self, Base, Problem, Window};
use asleft::identify::{Context, VerdictBounds, identify};
use asleft::model::{Kind, ProcessModel};
use asleft::quantity::Span;
use asleft::steps;
use asleft::trace::{Clock, Samples, Trace};
use divan::Bencher;

fn main() {
    divan::main();
}

/// Noise of standard deviation 1 that keeps `kept` of itself from sample to sample: sums of four numbers of
/// a generator that any language can repeat (W.H. Press and others, Numerical Recipes, 2nd ed., 7.1).
fn noise(seed: u32, kept: f64, samples: usize) -> Vec<f64> {
    let mut state = seed;
    let mut fresh = || {
        let mut sum = 0.0;
        for _ in 0..4 {
            state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
            sum += f64::from(state) / 4_294_967_296.0;
        }
        (sum - 2.0) * 3.0_f64.sqrt()
    };
    let mut value = 0.0;
    let new = (1.0 - kept * kept).sqrt();
    (0..samples)
        .map(|_| {
            value = kept * value + new * fresh();
            value
        })
        .collect()
}

/// 100,000 samples of a second each, seven moves up and down.
fn long_test(kind: Kind) -> Problem {
    const SAMPLES: usize = 100_000;
    let gain = if kind.integrates() { 0.002 } else { 1.3 };
    let model = ProcessModel::of_kind(kind, gain, 400.0, 120.0, 60.0);
    let t_s: Vec<f64> = (0..SAMPLES).map(|k| k as f64).collect();
    let moves: Vec<(f64, f64)> = (0..7)
        .map(|k| {
            (
                12_000.0 * f64::from(k + 1),
                [5.0, 0.0, -5.0, 0.0][k as usize % 4],
            )
        })
        .collect();
    let pv = model
        .response_to_held(&moves, &t_s)
        .into_iter()
        .zip(noise(1, 0.5, SAMPLES))
        .map(|(pv, noise)| 50.0 + pv + 0.1 * noise)
        .collect();
    Problem::new(vec![Window {
        t_s,
        pv,
        moves,
        base: Base::Level,
    }])
}

/// One fit of 100,000 samples of each kind.
#[divan::bench(args = Kind::ALL, sample_count = 10, sample_size = 1)]
fn fit_100_000_samples(bencher: Bencher, kind: Kind) {
    let problem = long_test(kind);
    bencher.bench(|| least_squares::fit(&problem, kind).expect("a fit"));
}

/// The same samples fitted with all four kinds.
#[divan::bench(sample_count = 10, sample_size = 1)]
fn fit_100_000_samples_with_all_kinds(bencher: Bencher) {
    let problem = long_test(Kind::SecondOrder);
    bencher.bench(|| Kind::ALL.map(|kind| least_squares::fit(&problem, kind).expect("a fit")));
}

/// A test as engineers make them: an hour of a sample a second, three steps, a process of any kind.
fn typical_test(number: u32) -> Samples {
    const SAMPLES: usize = 3600;
    let kind = Kind::ALL[number as usize % 4];
    let part = f64::from(number % 100) / 100.0;
    let gain = if kind.integrates() {
        0.002 + 0.002 * part
    } else {
        0.5 + part
    };
    let model = ProcessModel::of_kind(
        kind,
        gain,
        60.0 + 60.0 * part,
        20.0 + 20.0 * part,
        10.0 + 30.0 * part,
    );
    let t_s: Vec<f64> = (0..SAMPLES).map(|k| k as f64).collect();
    let moves = [(600.0, 5.0), (1600.0, -5.0), (2600.0, 0.0)];
    let pv = model
        .response_to_held(&moves, &t_s)
        .into_iter()
        .zip(noise(number, 0.5, SAMPLES))
        .map(|(pv, noise)| 50.0 + pv + 0.1 * noise)
        .collect();
    let op = t_s
        .iter()
        .map(|t| 40.0 + moves.iter().rfind(|m| m.0 <= *t).map_or(0.0, |m| m.1))
        .collect();
    Samples {
        good: vec![true; SAMPLES],
        t_s,
        pv,
        op,
        ..Samples::default()
    }
}

fn identify_test(samples: &Samples) {
    let percent = Span::new(0.0, 100.0).expect("a range");
    let trace = Trace::new(samples, percent, percent).expect("a trace");
    let context = Context {
        clock: Clock::Elapsed,
        pv_span: percent,
        op_span: percent,
        bounds: VerdictBounds::default(),
        not_before_s: None,
    };
    let found = steps::find(&trace, 1.0).expect("steps");
    divan::black_box(identify(&trace, &found, &context));
}

/// 2,000 tests from samples to verdicts, intervals and the choice of the kind, on one core: each step
/// fitted with six models, all steps with four.
#[divan::bench(sample_count = 1, sample_size = 1)]
fn identify_2_000_typical_tests(bencher: Bencher) {
    let tests: Vec<Samples> = (0..2000).map(typical_test).collect();
    bencher.bench(|| tests.iter().for_each(identify_test));
}

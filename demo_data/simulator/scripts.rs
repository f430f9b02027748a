//! What was done to each loop: its step test and its closed-loop trial.

use crate::rig::{Drift, Event, LoopSpec, Script};
use crate::tuning::tuning;

/// A valve that sticks lets its signal run this far ahead, %.
const STICK_PERCENT: f64 = 4.0;

/// A drift between two times.
const fn drift(from_s: f64, to_s: f64, size: f64) -> Drift {
    Drift { from_s, to_s, size }
}

/// Steps `hold_s` apart, the first at `first_s`; the log ends one hold after the last.
fn ladder(first_s: f64, hold_s: f64, outputs: &[f64]) -> Script {
    let at_s = |n: usize| first_s + hold_s * n as f64;
    Script {
        length_s: at_s(outputs.len()),
        events: outputs
            .iter()
            .enumerate()
            .map(|(n, op)| (at_s(n), Event::Op(*op)))
            .collect(),
        drifts: Vec::new(),
        stick: 0.0,
        stream: 1,
    }
}

/// The loop in automatic as found until `until_s`, then put to manual at `op`.
fn after_automatic(tag: &str, until_s: f64, op: f64, mut script: Script) -> Script {
    script.events.insert(0, (until_s, Event::Manual(op)));
    script
        .events
        .insert(0, (0.0, Event::Auto(tuning(tag).found)));
    script
}

/// Pulses out from balance and back, for levels: out for `out_s`, then at rest until `every_s`
/// after its start; the last move is out and held to the end.
fn pulses(first_s: f64, out_s: f64, every_s: f64, balance: f64, moves: &[f64]) -> Script {
    let mut events = Vec::new();
    for (n, size) in moves.iter().enumerate() {
        let at_s = first_s + every_s * n as f64;
        events.push((at_s, Event::Op(balance + size)));
        if n + 1 < moves.len() {
            events.push((at_s + out_s, Event::Back(balance)));
        }
    }
    Script {
        length_s: first_s + every_s * (moves.len() - 1) as f64 + 1.5 * out_s,
        events,
        drifts: Vec::new(),
        stick: 0.0,
        stream: 1,
    }
}

/// The step test of a loop.
pub fn test(spec: &LoopSpec) -> Script {
    let mut script = match spec.tag {
        "FIC-201" => after_automatic(
            "FIC-201",
            150.0,
            44.0,
            ladder(360.0, 90.0, &[50.0, 56.0, 50.0, 44.0, 51.0, 44.0]),
        ),
        "TIC-202" => ladder(1800.0, 2700.0, &[50.0, 45.0, 40.0, 45.0]),
        "FIC-203" => ladder(90.0, 60.0, &[46.0, 50.0, 46.0, 42.0, 46.0, 42.0]),
        "LIC-204" => pulses(600.0, 150.0, 630.0, 48.0, &[6.0, -6.0, 6.0, -6.0, 5.0]),
        "LIC-205" => pulses(1500.0, 420.0, 1740.0, 55.0, &[8.0, -8.0, 8.0, -8.0]),
        "PIC-206" => after_automatic(
            "PIC-206",
            300.0,
            55.0,
            ladder(1200.0, 330.0, &[59.0, 63.0, 59.0, 55.0, 59.0, 55.0]),
        ),
        "TIC-207" => ladder(1500.0, 1320.0, &[41.0, 47.0, 53.0, 47.0, 41.0, 35.0]),
        "AIC-208" => ladder(1500.0, 1320.0, &[55.0, 50.0, 45.0, 50.0, 55.0]),
        "FIC-209" => ladder(150.0, 60.0, &[51.0, 56.0, 51.0, 46.0, 51.0, 46.0]),
        "TIC-210" => ladder(480.0, 420.0, &[92.0, 90.0, 91.5, 100.0, 90.0]),
        "PIC-211" => ladder(720.0, 210.0, &[45.0, 50.0, 45.0, 40.0, 45.0, 40.0]),
        "TIC-212" => ladder(720.0, 660.0, &[55.0, 60.0, 55.0, 50.0, 55.0, 50.0]),
        other => unreachable!("no step test is written for {other}"),
    };
    // A change of shift: a small lasting shift of the plant near the middle of the test.
    script.drifts = match spec.tag {
        "FIC-201" => vec![drift(600.0, 660.0, 0.15)],
        "TIC-202" => vec![drift(6300.0, 7200.0, -0.12)],
        "FIC-203" => vec![drift(260.0, 290.0, -0.1)],
        "LIC-204" => vec![drift(1800.0, 1860.0, 0.06)],
        "LIC-205" => vec![drift(4600.0, 4900.0, -0.08)],
        "PIC-206" => vec![drift(2050.0, 2110.0, 0.03)],
        // The first step was made before the column had settled from a change of feed tank.
        "TIC-207" => vec![drift(900.0, 1600.0, -2.3), drift(5000.0, 5150.0, 0.1)],
        "AIC-208" => vec![drift(4300.0, 4700.0, 0.15)],
        "FIC-209" => vec![drift(310.0, 330.0, 0.1)],
        "TIC-210" => vec![drift(1500.0, 1700.0, 0.2)],
        "PIC-211" => vec![drift(1240.0, 1280.0, -0.1)],
        "TIC-212" => vec![drift(2500.0, 2800.0, 0.12)],
        other => unreachable!("no shift change is written for {other}"),
    };
    script
}

/// A set point that goes up by `size` (% of span) at one time and back at a later one.
fn up_and_down(spec: &LoopSpec, size: f64, up_s: f64, down_s: f64, length_s: f64) -> Script {
    let start = (spec.start_pv() * 10.0).round() / 10.0;
    Script {
        length_s,
        events: vec![
            (up_s, Event::SetPoint(start + size)),
            (down_s, Event::SetPoint(start)),
        ],
        drifts: Vec::new(),
        stick: 0.0,
        stream: 2,
    }
}

/// The closed-loop trial with the settings as left; none where none were entered.
pub fn trial(spec: &LoopSpec) -> Option<Script> {
    let left = tuning(spec.tag).left?;
    let mut script = match spec.tag {
        "FIC-201" => up_and_down(spec, 10.0, 120.0, 300.0, 480.0),
        "TIC-202" => up_and_down(spec, 4.0, 1200.0, 4200.0, 7200.0),
        "FIC-203" => up_and_down(spec, 5.0, 60.0, 180.0, 300.0),
        "LIC-204" => up_and_down(spec, 5.0, 300.0, 1500.0, 2700.0),
        "LIC-205" => Script {
            length_s: 9900.0,
            events: vec![(1200.0, Event::Load(-10.0))],
            drifts: Vec::new(),
            stick: 0.0,
            stream: 2,
        },
        "PIC-206" => up_and_down(spec, 4.0, 300.0, 900.0, 1500.0),
        "TIC-207" => up_and_down(spec, 5.0, 900.0, 3000.0, 5100.0),
        "TIC-212" => Script {
            stick: STICK_PERCENT,
            ..up_and_down(spec, 5.0, 600.0, 3900.0, 7200.0)
        },
        other => unreachable!("no trial is written for {other}"),
    };
    script.events.insert(0, (0.0, Event::Auto(left)));
    Some(script)
}

use super::*;
use crate::quantity::Span;
use crate::trace::Samples;

fn trace_with(op: &[f64], manual: &[bool]) -> Trace {
    let full = Span::new(0.0, 100.0).expect("a range");
    let samples = Samples {
        t_s: (0..op.len()).map(|k| k as f64).collect(),
        pv: (0..op.len())
            .map(|k| 50.0 + 0.001 * (k % 7) as f64)
            .collect(),
        good: vec![true; op.len()],
        op: op.to_vec(),
        manual: manual.to_vec(),
        ..Samples::default()
    };
    Trace::new(&samples, full, full).expect("a trace")
}

/// OP held at each level for so many samples.
fn levels(parts: &[(f64, usize)]) -> Vec<f64> {
    parts
        .iter()
        .flat_map(|&(op, count)| vec![op; count])
        .collect()
}

fn found(op: &[f64]) -> Vec<OpStep> {
    find(&trace_with(op, &[]), 1.0).expect("steps")
}

fn brief(steps: &[OpStep]) -> Vec<(f64, f64, f64, bool)> {
    steps
        .iter()
        .map(|s| (s.at_s, s.op_from, s.op_to, s.pulse))
        .collect()
}

#[test]
fn a_staircase_is_its_steps() {
    let steps = found(&levels(&[(40.0, 90), (45.0, 90), (50.0, 90), (43.0, 90)]));
    assert_eq!(
        brief(&steps),
        [
            (90.0, 40.0, 45.0, false),
            (180.0, 45.0, 50.0, false),
            (270.0, 50.0, 43.0, false)
        ]
    );
    assert_eq!(steps[0].quiet, 60..90);
    assert_eq!(steps[0].window, 60..180);
    // The quiet stretch is the last third of the time since the move before.
    assert_eq!(steps[1].quiet, 150..180);
    assert_eq!(steps[2].window.end, 360);
}

#[test]
fn a_ramp_and_a_held_key_are_one_step() {
    // 0.05 % each sample, and key strokes of 0.5 % every four samples.
    let mut op = levels(&[(40.0, 100)]);
    op.extend((1..=100).map(|k| 40.0 + 0.05 * f64::from(k)));
    op.extend(levels(&[(45.0, 100)]));
    for k in 1..=10 {
        op.extend(vec![45.0 - 0.5 * f64::from(k); 4]);
    }
    op.extend(levels(&[(40.0, 100)]));
    let steps = found(&op);
    assert_eq!(steps.len(), 2, "{steps:?}");
    assert_eq!(brief(&steps)[1], (300.0, 45.0, 40.0, false));
    assert_eq!((steps[0].op_from, steps[0].op_to), (40.0, 45.0));
    assert!((steps[0].at_s - 100.0).abs() <= 1.0);
}

#[test]
fn opposite_moves_that_net_out_are_a_pulse() {
    let steps = found(&levels(&[(40.0, 90), (50.0, 20), (40.2, 90)]));
    assert_eq!(brief(&steps), [(90.0, 40.0, 50.0, true)]);
    // The next hold is too short for a pulse: two steps.
    let steps = found(&levels(&[(40.0, 90), (50.0, 40), (40.0, 90)]));
    assert_eq!(steps.len(), 2);
    let doublet = found(&levels(&[(40.0, 90), (45.0, 15), (35.0, 15), (40.0, 90)]));
    assert_eq!(doublet.len(), 1);
    assert!(doublet[0].pulse);
}

#[test]
fn jitter_and_flicker_are_no_moves() {
    let mut op = levels(&[(40.0, 200), (44.0, 200)]);
    for (k, op) in op.iter_mut().enumerate() {
        // A readback that jitters by some hundredths, and one digit's flicker now and then.
        *op += 0.03 * libm::sin(k as f64 * 2.3) + if k % 17 == 0 { 0.1 } else { 0.0 };
    }
    let steps = found(&op);
    assert_eq!(steps.len(), 1, "{steps:?}");
    assert!((steps[0].op_from - 40.0).abs() < 0.05 && (steps[0].op_to - 44.0).abs() < 0.05);
    assert_eq!(
        find(&trace_with(&levels(&[(40.0, 100), (40.1, 100)]), &[]), 1.0),
        Err(StepsError::NoMoves)
    );
}

#[test]
fn a_controller_at_work_is_refused() {
    // PI action after a set-point step, with the PV's noise in it.
    let mut op = vec![40.0; 20];
    for k in 0..400 {
        let t = f64::from(k);
        op.push(
            50.0 - 8.0 * libm::exp(-t / 60.0) * libm::cos(t / 25.0)
                + 0.05 * libm::sin(t * 7.7)
                + 0.4 * libm::sin(t / 31.0),
        );
    }
    assert_eq!(
        find(&trace_with(&op, &[]), 1.0),
        Err(StepsError::ClosedLoop)
    );
}

#[test]
fn only_what_was_done_in_manual_counts() {
    let op = levels(&[(40.0, 50), (45.0, 50), (50.0, 100), (55.0, 100)]);
    let manual: Vec<bool> = (0..op.len()).map(|k| k >= 120).collect();
    let steps = find(&trace_with(&op, &manual), 1.0).expect("steps");
    assert_eq!(steps.len(), 1);
    assert_eq!((steps[0].at_s, steps[0].number), (200.0, 1));
    assert!(steps[0].window.start >= 120);
    assert_eq!(
        find(&trace_with(&op, &vec![false; op.len()]), 1.0),
        Err(StepsError::NeverManual)
    );
}

//! Samples as trend systems keep them: reported by exception, written twice, out of order, bad.

use super::{Files, INTERVAL_S, ROWS, Truth, at, bits, delimited, iso, numbers, truth};
use asleft::read::{LogRead, LogRule};
use chrono::TimeDelta;

fn read(rows: &[Vec<String>]) -> LogRead {
    Files::one("trend.csv", delimited(rows, ",")).read()
}

#[test]
fn reported_by_exception() {
    let truth = truth();
    // A row is written where the PV has moved by its dead band or the OP has moved at all.
    let pv = numbers(&truth.pv);
    let mut last = f64::NEG_INFINITY;
    let kept: Vec<usize> = (0..ROWS)
        .filter(|&k| {
            let has_moved = (pv[k] - last).abs() >= 2.0 || truth.op[k] != truth.op[k.max(1) - 1];
            if has_moved {
                last = pv[k];
            }
            has_moved
        })
        .collect();
    assert!((20..ROWS / 2).contains(&kept.len()), "{}", kept.len());
    let mut rows = truth.plain();
    rows = (0..rows.len())
        .filter(|row| *row == 0 || kept.contains(&(row - 1)))
        .map(|row| rows[row].clone())
        .collect();
    let log = read(&rows);
    let at_kept = |values: &[String]| -> Vec<f64> {
        let values = numbers(values);
        kept.iter().map(|&k| values[k]).collect()
    };
    let seconds: Vec<f64> = kept
        .iter()
        .map(|&k| (INTERVAL_S * k as i64) as f64)
        .collect();
    assert_eq!(bits(&log.samples.t_s), bits(&seconds));
    assert_eq!(bits(&log.samples.pv), bits(&at_kept(&truth.pv)));
    assert_eq!(bits(&log.samples.op), bits(&at_kept(&truth.op)));
    // The stretches without a row are no gaps: nothing moved.
    assert!(log.sources[0].compressed);
    assert_eq!(log.sources[0].gaps, []);
    assert!(log.warnings.is_empty(), "{:?}", log.warnings);
}

#[test]
fn each_signal_at_times_of_its_own() {
    let truth = truth();
    // One row per signal, the others empty: the OP where it moved, half a second before the PV.
    let mut rows = vec![truth.plain().remove(0)];
    let mut expected = Vec::new();
    for k in 0..ROWS {
        let early = at(k) - TimeDelta::milliseconds(500);
        let op = &truth.op[k];
        if k % 10 == 0 {
            let time = early.format("%Y-%m-%d %H:%M:%S%.3f").to_string();
            rows.push(vec![
                time,
                String::new(),
                op.clone(),
                String::new(),
                String::new(),
            ]);
            expected.push((f64::NAN, op.parse().expect("a number")));
        }
        rows.push(vec![
            iso(k),
            truth.pv[k].clone(),
            String::new(),
            String::new(),
            String::new(),
        ]);
        expected.push((truth.pv[k].parse().expect("a number"), f64::NAN));
    }
    let log = read(&rows);
    let found: Vec<(u64, u64)> = log
        .samples
        .pv
        .iter()
        .zip(&log.samples.op)
        .map(|(pv, op)| (pv.to_bits(), op.to_bits()))
        .collect();
    let expected: Vec<(u64, u64)> = expected
        .iter()
        .map(|(pv, op): &(f64, f64)| (pv.to_bits(), op.to_bits()))
        .collect();
    assert_eq!(found, expected);
    assert!(log.samples.good.iter().all(|good| *good));
    assert_eq!(log.bad_samples(), 0);
    assert_eq!(
        log.warnings[0].to_string(),
        "trend.csv: PV and OP are written at times of their own; empty cells were read as no sample"
    );
}

#[test]
fn rows_written_twice() {
    let truth = truth();
    let mut rows = truth.plain();
    // The first of the two has another value: the last one of a moment stands.
    for k in [40, 120] {
        let mut first = rows[k].clone();
        "1.00".clone_into(&mut first[1]);
        rows.insert(k, first);
    }
    let log = read(&rows);
    truth.is_in(&log, "written twice");
    assert_eq!(log.sources[0].duplicates, 2);
}

#[test]
fn rows_out_of_order_within_a_minute() {
    let truth = truth();
    let mut rows = truth.plain();
    rows.swap(30, 31);
    // 57 s late: 19 rows after its place.
    let late = rows.remove(100);
    rows.insert(119, late);
    let log = read(&rows);
    truth.is_in(&log, "out of order");
    assert_eq!(log.sources[0].sorted_rows, 2);
}

#[test]
fn newest_first() {
    let truth = truth();
    let mut rows = truth.plain();
    rows[1..].reverse();
    let log = read(&rows);
    truth.has_values_of(&log, "newest first");
    assert_eq!(
        log.warnings[0].to_string(),
        "trend.csv: rows stand newest first and were read from the last"
    );
}

/// The trace with some cells of its PV replaced: the rows that are bad, and the causes.
fn with_bad(truth: &Truth, rule: LogRule, cells: &[&str]) -> (Vec<usize>, Vec<(String, usize)>) {
    let mut rows = truth.plain();
    for (k, cell) in cells.iter().enumerate() {
        (*cell).clone_into(&mut rows[11 + 2 * k][1]);
    }
    let log = Files::one("trend.csv", delimited(&rows, ";"))
        .rule(rule)
        .read();
    let bad: Vec<usize> = (0..ROWS).filter(|&k| !log.samples.good[k]).collect();
    for k in (0..ROWS).filter(|k| !bad.contains(k)) {
        let expected: f64 = truth.pv[k].parse().expect("a number");
        assert_eq!(log.samples.pv[k].to_bits(), expected.to_bits(), "row {k}");
    }
    assert_eq!(bits(&log.samples.op), bits(&numbers(&truth.op)));
    let causes = log.sources[0].bad.clone().into_iter().collect();
    (bad, causes)
}

#[test]
fn bad_values_by_text() {
    let truth = truth();
    let texts = [
        "",
        "Bad",
        "BAD",
        "No Data",
        "#N/A",
        "#VALUE!",
        "#DIV/0!",
        "NaN",
        "nan",
        "---",
        "***",
        "????",
        "I/O Timeout",
        "Comm Fail",
        "Out of Service",
        "Under Range",
        "N/A",
        "null",
        "<no data>",
        "[Bad]",
        "Invalid",
        "1.#QNAN",
        "Inf",
        "Err:504",
    ];
    let (bad, causes) = with_bad(&truth, LogRule::default(), &texts);
    let expected: Vec<usize> = (0..texts.len()).map(|k| 10 + 2 * k).collect();
    assert_eq!(bad, expected);
    assert_eq!(
        causes.iter().map(|(_, count)| count).sum::<usize>(),
        texts.len()
    );
    for cause in [
        "empty",
        "not a number",
        "text \"Comm Fail\"",
        "text \"#VALUE!\"",
    ] {
        assert!(
            causes.iter().any(|(text, _)| text == cause),
            "{cause}: {causes:?}"
        );
    }
    // The job's own texts, also such as look like numbers; far outside the range is bad by itself.
    let own = LogRule {
        bad_values: vec!["-9999".to_owned(), "gestört".to_owned()],
        ..LogRule::default()
    };
    let (bad, causes) = with_bad(&truth, own, &["-9999", "Gestört", "9999.0", "-201"]);
    assert_eq!(bad, [10, 12, 14, 16]);
    assert_eq!(
        causes,
        [
            ("outside the range".to_owned(), 2),
            ("text \"-9999\"".to_owned(), 1),
            ("text \"Gestört\"".to_owned(), 1)
        ]
        .to_vec()
    );
}

#[test]
fn bad_values_by_quality() {
    let truth = truth();
    for (good, bad) in [
        ("Good", "Bad"),
        ("GOOD", "Uncertain"),
        ("Good, non-specific", "Bad, sensor failure"),
        ("192", "0"),
        ("192", "24"),
        ("216", "64"),
        ("0xC0", "0x18"),
        ("TRUE", "FALSE"),
        ("1", "0"),
        ("G", "B"),
        ("OK", "Not good"),
        ("", "Bad"),
    ] {
        for heading in ["FIC-301.PV.Quality", "FIC-301 quality", "Quality", "Status"] {
            let mut rows = truth.plain();
            heading.clone_into(&mut rows[0][4]);
            for (k, row) in rows[1..].iter_mut().enumerate() {
                let quality = if k % 50 == 20 { bad } else { good };
                quality.clone_into(&mut row[4]);
            }
            let log = Files::one("trend.csv", delimited(&rows, ";")).read();
            let found: Vec<usize> = (0..ROWS).filter(|&k| !log.samples.good[k]).collect();
            assert_eq!(found, [20, 70, 120, 170], "{heading}: {good}, {bad}");
            let causes: Vec<(&String, &usize)> = log.sources[0].bad.iter().collect();
            assert_eq!(causes, [(&format!("quality {bad}"), &4)]);
            assert_eq!(
                bits(&log.samples.pv),
                bits(&numbers(&truth.pv)),
                "{good}, {bad}"
            );
        }
    }
}

#[test]
fn a_sensor_at_the_end_of_its_range_is_a_sample() {
    let truth = truth();
    // At the end and a little beyond it: the steps are judged by it, the reader keeps it.
    let mut rows = truth.plain();
    for (row, value) in [(60, "2000.00"), (61, "2050.00"), (62, "-12.50")] {
        value.clone_into(&mut rows[row][1]);
    }
    let log = read(&rows);
    assert_eq!(&log.samples.pv[59..62], [2000.0, 2050.0, -12.5]);
    assert!(log.samples.good.iter().all(|good| *good));
}

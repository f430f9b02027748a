//! Where the signals of a loop stand: side by side, one below the other, in files of their own.

use super::{Files, ROWS, Truth, at, delimited, iso, start, truth};
use asleft::read::ColumnNames;
use chrono::TimeDelta;
use rust_xlsxwriter::{Format, Workbook};

/// The trace under these headings, with columns of other loops around it.
fn among_others(truth: &Truth, headings: &[&str], others: [&str; 3]) -> String {
    let mut rows = truth.table(headings, iso);
    for (k, row) in rows.iter_mut().enumerate() {
        let cell = |heading: &str, value: &str| {
            if k == 0 {
                heading.to_owned()
            } else {
                value.to_owned()
            }
        };
        row.insert(1, cell(others[0], "21.5"));
        row.insert(3, cell(others[1], "77.0"));
        row.push(cell(others[2], "AUTO"));
    }
    delimited(&rows, ";")
}

#[test]
fn one_column_per_signal_among_those_of_many_loops() {
    let truth = truth();
    for (headings, others) in [
        (
            [
                "Time",
                "FIC-301.PV",
                "FIC-301.OP",
                "FIC-301.SP",
                "FIC-301.MODE",
            ],
            ["FIC-3010.PV", "FIC-301A.OP", "TIC-204.MODE"],
        ),
        (
            [
                "Time",
                "FIC-301/PV",
                "FIC-301/OP",
                "FIC-301/SP",
                "FIC-301/MODE",
            ],
            ["TIC-204/PV", "TIC-204/OP", "TIC-204/MODE"],
        ),
        (
            [
                "Time",
                "FIC-301 PV (m3/h)",
                "FIC-301 OP (%)",
                "FIC-301 SP (m3/h)",
                "FIC-301 Mode",
            ],
            ["TIC-204 PV (degC)", "TIC-204 OP (%)", "TIC-204 Mode"],
        ),
        (
            [
                "Timestamp",
                "FIC301_PV",
                "FIC301_OP",
                "FIC301_SP",
                "FIC301_MODE",
            ],
            ["FIC302_PV", "FIC302_OP", "FIC302_MODE"],
        ),
        (
            [
                "Date/Time",
                "FIC301PV",
                "FIC301OP",
                "FIC301SP",
                "FIC301MODE",
            ],
            ["FIC302PV", "FIC302OP", "FIC302MODE"],
        ),
        (
            [
                "Time",
                "U300/FIC-301.PV.Value",
                "U300/FIC-301.OUT.Value",
                "U300/FIC-301.SP.Value",
                "U300/FIC-301.MODE.Actual",
            ],
            [
                "U300/FIC-302.PV.Value",
                "U300/FIC-302.OUT.Value",
                "U300/FIC-302.MODE.Actual",
            ],
        ),
        (
            [
                "Time",
                "FIC-301",
                "FIC-301.CO",
                "FIC-301.SetPoint",
                "FIC-301.A/M",
            ],
            ["FIC-302", "FIC-302.CO", "FIC-302.A/M"],
        ),
        (
            [
                "Time",
                "PV FIC-301",
                "MV FIC-301",
                "SP FIC-301",
                "Mode FIC-301",
            ],
            ["PV FIC-302", "MV FIC-302", "Mode FIC-302"],
        ),
        (
            [
                "Time",
                "fic-301.pv [m³/h]",
                "fic-301.out [%]",
                "fic-301.sp [m³/h]",
                "fic-301.mode",
            ],
            ["ambient temperature", "Pump 3 speed (rpm)", "Remarks"],
        ),
        (
            [
                "Zeitstempel",
                "FIC-301 Istwert [m³/h]",
                "FIC-301 Stellwert [%]",
                "FIC-301 Sollwert [m³/h]",
                "FIC-301 Betriebsart",
            ],
            [
                "TIC-204 Istwert [°C]",
                "TIC-204 Stellwert [%]",
                "TIC-204 Betriebsart",
            ],
        ),
    ] {
        let text = among_others(&truth, &headings, others);
        truth.is_in(&Files::one("trend.csv", text).read(), headings[1]);
    }
}

#[test]
fn usual_headings_without_a_tag() {
    let truth = truth();
    for headings in [
        ["Time", "PV", "OP", "SP", "MODE"],
        ["time", "pv", "co", "sp", "mode"],
        ["Time", "PV (m3/h)", "OUT (%)", "SP (m3/h)", "Mode"],
        [
            "Time",
            "Process value",
            "Controller output",
            "Set point",
            "A/M",
        ],
        [
            "Time",
            "Measured variable [m³/h]",
            "MV [%]",
            "Setpoint",
            "Controller mode",
        ],
        ["Date and time", "PV", "Output %", "SP", "Auto/Man"],
    ] {
        let text = delimited(&truth.table(&headings, iso), ";");
        truth.is_in(&Files::one("trend.csv", text).read(), headings[1]);
    }
}

fn named(pv: &str, op: &str) -> ColumnNames {
    ColumnNames {
        pv: Some(pv.to_owned()),
        op: Some(op.to_owned()),
        ..ColumnNames::default()
    }
}

#[test]
fn the_schedule_goes_before_the_usual_headings() {
    let truth = truth();
    // Two columns that would be taken, and those that the schedule names.
    let text = among_others(
        &truth,
        &["Time", "Feed, filtered", "Valve demand (%)", "SP", "Mode"],
        ["FIC-301.PV", "FIC-301.OP", "Remark"],
    );
    for (pv, op) in [
        ("Feed, filtered", "Valve demand (%)"),
        ("feed, FILTERED", "valve_demand"),
        ("#3", "#5"),
    ] {
        let log = Files::one("trend.csv", &text).columns(named(pv, op)).read();
        truth.is_in(&log, pv);
        assert_eq!(log.sources[0].roles[1].why, "named in the schedule");
    }
}

/// One row per value: tag, time, value, and what else a row bears.
fn long(truth: &Truth, interleaved: bool, row: impl Fn(&str, &str, &str) -> String) -> String {
    let mut rows: Vec<(usize, usize, String)> = Vec::new();
    for k in 0..ROWS {
        let time = iso(k);
        let values = [
            ("FIC-301.PV", truth.pv[k].as_str()),
            ("FIC-302.PV", "12.5"),
            ("FIC-301.OP", truth.op[k].as_str()),
            ("FIC-301.SP", truth.sp[k].as_str()),
            ("FIC-301.MODE", "MAN"),
            ("FIC-302.OP", "50"),
        ];
        for (signal, (tag, value)) in values.into_iter().enumerate() {
            rows.push((k, signal, row(tag, &time, value)));
        }
    }
    if !interleaved {
        rows.sort_by_key(|(k, signal, _)| (*signal, *k));
    }
    rows.into_iter().map(|(_, _, row)| row + "\n").collect()
}

#[test]
fn one_row_per_value() {
    let truth = truth();
    for interleaved in [true, false] {
        let text = long(&truth, interleaved, |tag, time, value| {
            format!("{tag};{time};{value}")
        });
        let log = Files::one("trend.csv", format!("Tag;Time;Value\n{text}")).read();
        truth.is_in(&log, "tag, time, value");
        let text = long(&truth, interleaved, |tag, time, value| {
            format!("{time},{tag},{value},Good,0")
        });
        let log = Files::one(
            "trend.csv",
            format!("Timestamp,TagName,Value,Quality,Flags\n{text}"),
        );
        truth.is_in(&log.read(), "with a quality");
    }
}

#[test]
fn one_row_per_value_with_bad_quality() {
    let truth = truth();
    // The PV of one row, and the OP of another, whose value before is held.
    let text = long(&truth, true, |tag, time, value| {
        let is_bad =
            (tag == "FIC-301.PV" && *time == iso(20)) || (tag == "FIC-301.OP" && *time == iso(30));
        format!(
            "{tag};{time};{value};{}",
            if is_bad { "Bad" } else { "Good" }
        )
    });
    let log = Files::one("trend.csv", format!("Tag;Time;Value;Quality\n{text}")).read();
    let bad: Vec<usize> = (0..ROWS).filter(|&k| !log.samples.good[k]).collect();
    assert_eq!(bad, [20]);
    assert_eq!(log.samples.op[30], 40.0);
    assert_eq!(
        log.warnings[0].to_string(),
        "trend.csv: 1 cell of the OP without a value (quality Bad: 1); the value before is held"
    );
}

#[test]
fn headings_over_two_rows() {
    let truth = truth();
    let rows = truth.plain();
    for (upper, lower) in [
        // A merged cell leaves its text in the first of its columns.
        (
            ["", "FIC-301", "", "", ""],
            ["Time", "PV", "OP", "SP", "MODE"],
        ),
        (
            ["Time", "FIC-301", "", "", ""],
            ["", "PV", "OP", "SP", "MODE"],
        ),
        (
            ["Tag", "FIC-301", "FIC-301", "FIC-301", "FIC-301"],
            ["Time", "PV", "OP", "SP", "MODE"],
        ),
        (
            ["", "FIC-301 feed", "", "", ""],
            ["Timestamp", "PV [m³/h]", "OUT [%]", "SP [m³/h]", "Mode"],
        ),
    ] {
        let mut rows = rows.clone();
        rows[0] = [&lower[..], &["PV", "OP"]]
            .concat()
            .iter()
            .map(|text| (*text).to_owned())
            .collect();
        rows.insert(
            0,
            [&upper[..], &["FIC-302", ""]]
                .concat()
                .iter()
                .map(|text| (*text).to_owned())
                .collect(),
        );
        for row in &mut rows[2..] {
            row.extend(["33.1".to_owned(), "50".to_owned()]);
        }
        for above in ["", "Unit 300\n", "Trend;of;the;night\n"] {
            let log = Files::one("trend.csv", format!("{above}{}", delimited(&rows, ";"))).read();
            truth.is_in(&log, upper[1]);
            let heading = &log.sources[0].roles[1].heading;
            // The schedule may name either row where that names one column.
            let mode = ColumnNames {
                mode: Some(lower[4].to_owned()),
                ..ColumnNames::default()
            };
            let text = format!("{above}{}", delimited(&rows, ";"));
            truth.is_in(
                &Files::one("trend.csv", text).columns(mode).read(),
                lower[4],
            );
            assert!(
                heading.starts_with("FIC-301") && heading.contains("PV"),
                "{heading}"
            );
        }
    }
    // What a value is above, whose it is below, the unit below that.
    let mut rows = rows.clone();
    rows[0] = ["", "FIC-301", "FIC-301", "FIC-301", "FIC-301"]
        .map(str::to_owned)
        .to_vec();
    rows.insert(
        0,
        ["Time", "PV", "OP", "SP", "MODE"]
            .map(str::to_owned)
            .to_vec(),
    );
    rows.insert(2, ["", "m3/h", "%", "m3/h", ""].map(str::to_owned).to_vec());
    let log = Files::one("trend.csv", delimited(&rows, ";")).read();
    truth.is_in(&log, "roles above tags");
    assert_eq!(log.sources[0].roles[1].unit.as_deref(), Some("m3/h"));
}

#[test]
fn tags_merged_over_the_columns_of_a_sheet() {
    let truth = truth();
    let mut book = Workbook::new();
    let sheet = book.add_worksheet();
    let format = Format::new();
    sheet
        .merge_range(0, 0, 0, 6, "Step tests of unit 300", &format)
        .expect("merged");
    sheet
        .merge_range(2, 0, 3, 0, "Time", &format)
        .expect("merged");
    sheet
        .merge_range(2, 1, 2, 2, "FIC-302", &format)
        .expect("merged");
    sheet
        .merge_range(2, 3, 2, 6, "FIC-301", &format)
        .expect("merged");
    for (column, heading) in (1..).zip(["PV", "OP", "PV", "OP", "SP", "MODE"]) {
        sheet.write_string(3, column, heading).expect("written");
    }
    for k in 0..ROWS {
        let row = 4 + k as u32;
        sheet.write_string(row, 0, iso(k)).expect("written");
        sheet.write_number(row, 1, 33.1).expect("written");
        sheet.write_number(row, 2, 50.0).expect("written");
        for (column, values) in (3..).zip([&truth.pv, &truth.op, &truth.sp]) {
            let value: f64 = values[k].parse().expect("a number");
            sheet.write_number(row, column, value).expect("written");
        }
        sheet.write_string(row, 6, "MAN").expect("written");
    }
    let bytes = book.save_to_buffer().expect("a workbook");
    truth.is_in(&Files::one("trend.xlsx", bytes).read(), "merged");
}

/// The trace with a time column before every signal.
fn own_times(
    truth: &Truth,
    headings: [&[&str]; 2],
    time: impl Fn(usize, usize) -> String,
) -> String {
    let mut rows: Vec<Vec<String>> = headings
        .iter()
        .filter(|row| !row.is_empty())
        .map(|row| row.iter().map(|text| (*text).to_owned()).collect())
        .collect();
    for k in 0..ROWS {
        let values = [
            truth.pv[k].as_str(),
            truth.op[k].as_str(),
            truth.sp[k].as_str(),
            "MAN",
        ];
        let cells = values.into_iter().enumerate();
        rows.push(
            cells
                .flat_map(|(signal, value)| [time(k, signal), value.to_owned()])
                .collect(),
        );
    }
    delimited(&rows, ";")
}

#[test]
fn a_time_column_for_each_signal() {
    let truth = truth();
    let signals = ["FIC-301.PV", "FIC-301.OP", "FIC-301.SP", "FIC-301.MODE"];
    let beside = |time: &dyn Fn(&str) -> String| -> Vec<String> {
        signals
            .iter()
            .flat_map(|signal| [time(signal), (*signal).to_owned()])
            .collect()
    };
    for headings in [
        beside(&|_| "Time".to_owned()),
        beside(&|signal| format!("{signal} Time")),
        beside(&|signal| format!("Timestamp {signal}")),
        beside(&|_| String::new()),
    ] {
        let headings: Vec<&str> = headings.iter().map(String::as_str).collect();
        let text = own_times(&truth, [&headings, &[]], |k, _| iso(k));
        let log = Files::one("trend.csv", text).read();
        truth.is_in(&log, headings[0]);
        assert_eq!(
            log.sources[0].roles[0].why,
            "the time column to the left of the signal"
        );
    }
    // The tag over its two columns.
    let upper: Vec<&str> = signals.iter().flat_map(|signal| [*signal, ""]).collect();
    let text = own_times(&truth, [&upper, &["Time", "Value"].repeat(4)], |k, _| {
        iso(k)
    });
    truth.is_in(&Files::one("trend.csv", text).read(), "two rows");
    // Date and time of day in two columns, twice; the order of day and month is told by the PV's alone.
    let headings: Vec<&str> = signals
        .iter()
        .flat_map(|signal| ["Date", "Time", *signal])
        .collect();
    let text = own_times(&truth, [&headings, &[]], |k, _| {
        at(k).format("%d/%m/%Y;%H:%M:%S").to_string()
    });
    truth.is_in(&Files::one("trend.csv", text).read(), "date and time apart");
}

#[test]
fn a_time_column_for_each_signal_that_moved() {
    let truth = truth();
    // The OP's rows are its moves alone, one of them between two samples of the PV: fewer rows than the PV.
    let early = start() + TimeDelta::milliseconds(180_000 - 500);
    let late = at(130);
    let moves = [(at(0), "40.0"), (early, "45.5"), (late, "37.5")];
    let mut text = "Time;FIC-301.PV;Time;FIC-301.OP\n".to_owned();
    for k in 0..ROWS {
        let op = moves.get(k).map_or_else(
            || ";".to_owned(),
            |(at, op)| format!("{};{op}", at.format("%Y-%m-%d %H:%M:%S%.3f")),
        );
        text += &format!("{};{};{op}\n", iso(k), truth.pv[k]);
    }
    let log = Files::one("trend.csv", text).read();
    // The move has a row of its own, without a PV.
    assert_eq!(log.samples.t_s.len(), ROWS + 1);
    assert_eq!(log.samples.t_s[60], 179.5);
    assert!(log.samples.pv[60].is_nan() && log.samples.good[60]);
    assert_eq!(&log.samples.op[58..62], [40.0, 40.0, 45.5, 45.5]);
    assert_eq!(&log.samples.op[129..132], [45.5, 45.5, 37.5]);
    assert!(log.warnings.is_empty(), "{:?}", log.warnings);
}

/// One signal with its times.
fn signal(headings: &str, values: &[String]) -> String {
    let rows = values.iter().enumerate();
    let rows: String = rows
        .map(|(k, value)| format!("{};{value}\n", iso(k)))
        .collect();
    format!("{headings}\n{rows}")
}

#[test]
fn a_file_for_each_signal() {
    let truth = truth();
    let mode = vec!["MAN".to_owned(); ROWS];
    let signals = [
        ("PV", &truth.pv),
        ("OP", &truth.op),
        ("SP", &truth.sp),
        ("MODE", &mode),
    ];
    // Named by the heading, by a title, by the file.
    for (form, name, text) in [
        ("heading", "{}.csv", "Time;FIC-301.{}"),
        ("title", "export {}.csv", "Tag: FIC-301.{}\nTime;Value"),
        (
            "title in two cells",
            "{}.csv",
            "Tag;FIC-301.{}\nUnit;300\n\nTimestamp;Value",
        ),
        ("file", "FIC-301.{}.csv", "Time;Value"),
        ("file with a date", "FIC301_{}_20260314.csv", "Time;Value"),
        ("signal alone", "{}.csv", "Time;Value"),
    ] {
        let names: Vec<String> = signals
            .iter()
            .map(|(signal, _)| name.replace("{}", signal))
            .collect();
        for order in [[0, 1, 2, 3], [3, 1, 0, 2]] {
            let listed: Vec<&str> = order.iter().map(|&k| names[k].as_str()).collect();
            let mut files = Files::new(&listed.join("; "));
            for ((signal_name, values), name) in signals.iter().zip(&names) {
                files = files.with(name, signal(&text.replace("{}", signal_name), values));
            }
            let log = files.read();
            truth.is_in(&log, form);
            // The file of the PV first, the others as listed.
            assert_eq!(log.sources.len(), 4, "{form}");
            assert_eq!(log.sources[0].file, names[0], "{form}");
        }
    }
}

#[test]
fn a_sheet_for_each_signal() {
    let truth = truth();
    let mut book = Workbook::new();
    for (name, values) in [("PV", &truth.pv), ("OP", &truth.op)] {
        let sheet = book.add_worksheet();
        sheet.set_name(format!("FIC-301 {name}")).expect("a name");
        sheet.write_string(0, 0, "Time").expect("written");
        sheet.write_string(0, 1, "Value").expect("written");
        for (k, value) in values.iter().enumerate() {
            sheet
                .write_string(1 + k as u32, 0, iso(k))
                .expect("written");
            let value: f64 = value.parse().expect("a number");
            sheet.write_number(1 + k as u32, 1, value).expect("written");
        }
    }
    let bytes = book.save_to_buffer().expect("a workbook");
    let log = Files::new("trend.xlsx#FIC-301 PV; trend.xlsx#FIC-301 OP")
        .with("trend.xlsx", bytes)
        .read();
    truth.has_values_of(&log, "sheets");
    assert_eq!(
        log.sources[1].roles[1].why,
        "the name of the sheet says so: FIC-301 OP"
    );
}

#[test]
fn other_ways_to_share_signals_among_files() {
    let truth = truth();
    // A table of one signal each, and the set point beside a whole log.
    let rows = |tag: &str, values: &[String]| -> String {
        let rows = values.iter().enumerate();
        let rows: String = rows
            .map(|(k, value)| format!("{tag};{};{value}\n", iso(k)))
            .collect();
        format!("Tag;Time;Value\n{rows}")
    };
    let log = Files::new("a.csv; b.csv")
        .with("a.csv", rows("FIC-301.OP", &truth.op))
        .with("b.csv", rows("FIC-301.PV", &truth.pv))
        .read();
    truth.has_values_of(&log, "long tables");
    let plain: Vec<Vec<String>> = truth
        .plain()
        .into_iter()
        .map(|row| row[..3].to_vec())
        .collect();
    let log = Files::new("a.csv; b.csv")
        .with("a.csv", delimited(&plain, ";"))
        .with("b.csv", signal("Time;FIC-301.SP", &truth.sp))
        .read();
    truth.has_values_of(&log, "set point apart");
    truth.has_sp_of(&log, "set point apart");
}

#[test]
fn files_that_follow_each_other() {
    let truth = truth();
    let rows = truth.plain();
    let part =
        |from: usize, to: usize| delimited(&[&rows[..1], &rows[1 + from..1 + to]].concat(), ";");
    let log = Files::new("b.csv; a.csv")
        .with("a.csv", part(0, 120))
        .with("b.csv", part(120, ROWS))
        .read();
    truth.is_in(&log, "one after the other");
    assert_eq!(log.sources[0].file, "a.csv");
}

//! The trend exports: what each system writes, in its own format.

use std::error::Error;
use std::path::Path;

use chrono::{NaiveDate, NaiveDateTime, TimeDelta};

use crate::random::Random;
use crate::rig::{LoopSpec, Run, Sample};
use crate::table::{Cell, CsvStyle, Table, write_csv, write_ods, write_xlsx};

/// A loop's step test and, where there was one, its closed-loop trial.
pub struct Runs {
    /// The loop.
    pub spec: LoopSpec,
    /// Step test.
    pub test: Run,
    /// Closed-loop trial.
    pub trial: Option<Run>,
}

const ISO: &str = "%Y-%m-%d %H:%M:%S";

fn clock(year: i32, month: u32, day: u32, hour: u32, minute: u32) -> NaiveDateTime {
    NaiveDate::from_ymd_opt(year, month, day)
        .and_then(|date| date.and_hms_opt(hour, minute, 0))
        .expect("the dates of the demo are dates")
}

fn after(start: NaiveDateTime, sample: &Sample) -> NaiveDateTime {
    start + TimeDelta::milliseconds((sample.t_s * 1000.0).round() as i64)
}

/// Which figures of a sample a column holds.
enum Column {
    Time(NaiveDateTime),
    /// As text, formatted so.
    TimeText(NaiveDateTime, &'static str),
    /// Local time that goes back by an hour at this one.
    FoldedTime(NaiveDateTime, NaiveDateTime),
    /// PV in engineering units, with decimals.
    Pv(usize),
    Sp(usize),
    Op,
    Mode,
    /// The inner loop's PV over this range.
    Inner(f64),
    /// An indicator that has nothing to do with the loop: its mean and its noise.
    Neighbour(f64, f64),
}

fn table(name: &'static str, spec: &LoopSpec, run: &Run, columns: &[(&str, Column)]) -> Table {
    let mut random = Random::new(name, 99);
    let mut cell = |column: &Column, sample: &Sample| match column {
        Column::Time(start) => Cell::Time(after(*start, sample)),
        Column::TimeText(start, format) => {
            Cell::Text(after(*start, sample).format(format).to_string())
        }
        Column::FoldedTime(start, fold) => {
            let time = after(*start, sample);
            let back = if time >= *fold { 1 } else { 0 };
            Cell::Time(time - TimeDelta::hours(back))
        }
        Column::Pv(decimals) => Cell::Number(spec.engineering(sample.pv), *decimals),
        Column::Sp(decimals) => Cell::Number(spec.engineering(sample.sp), *decimals),
        Column::Op => Cell::Number(sample.op, 2),
        Column::Mode => Cell::Text(mode(sample).to_owned()),
        Column::Inner(span) => Cell::Number(sample.inner_pv * span / 100.0, 1),
        Column::Neighbour(mean, noise) => Cell::Number(mean + noise * random.gaussian(), 1),
    };
    Table {
        name,
        title: Vec::new(),
        headings: columns
            .iter()
            .map(|(heading, _)| (*heading).to_owned())
            .collect(),
        rows: run
            .samples
            .iter()
            .map(|sample| {
                columns
                    .iter()
                    .map(|(_, column)| cell(column, sample))
                    .collect()
            })
            .collect(),
    }
}

fn mode(sample: &Sample) -> &'static str {
    if sample.automatic { "AUTO" } else { "MAN" }
}

/// Writes the logs of one loop below `folder`.
pub fn write(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    match runs.spec.tag {
        "FIC-201" => feed_flow(folder, runs),
        "TIC-202" => preheater(folder, runs),
        "FIC-203" => steam_flow(folder, runs),
        "LIC-204" => sump_level(folder, runs),
        "LIC-205" => surge_level(folder, runs),
        "PIC-206" => head_pressure(folder, runs),
        "TIC-207" => tray_temperature(folder, runs),
        "AIC-208" => water_content(folder, runs),
        "FIC-209" => reflux_flow(folder, runs),
        "TIC-210" => cooler(folder, runs),
        "PIC-211" => vacuum(folder, runs),
        "TIC-212" => vent_condenser(folder, runs),
        other => Err(format!("no log is written for {other}").into()),
    }
}

fn sheets(test: Table, trial: Option<Table>) -> Vec<Table> {
    std::iter::once(test).chain(trial).collect()
}

fn feed_flow(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let sheet = |name, run: &Run, start| {
        table(
            name,
            &runs.spec,
            run,
            &[
                ("Timestamp", Column::Time(start)),
                ("FIC-201.PV", Column::Pv(3)),
                ("FIC-201.SP", Column::Sp(2)),
                ("FIC-201.OP", Column::Op),
                ("FIC-201.MODE", Column::Mode),
                ("PI-200.PV", Column::Neighbour(412.0, 0.8)),
            ],
        )
    };
    let test = sheet("Trend", &runs.test, clock(2026, 2, 23, 10, 5));
    let trial = runs.trial.as_ref();
    let trial = trial.map(|run| sheet("Trial", run, clock(2026, 2, 23, 14, 30)));
    write_xlsx(
        &folder.join("fic201.xlsx"),
        &sheets(test, trial),
        "yyyy-mm-dd hh:mm:ss",
    )
}

fn preheater(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let style = CsvStyle {
        delimiter: b';',
        decimal: ",",
        time: ISO,
    };
    let write = |name: &str, run: &Run, start| {
        let columns = [
            ("Time", Column::Time(start)),
            ("TIC-202 PV (degC)", Column::Pv(2)),
            ("TIC-202 SP (degC)", Column::Sp(1)),
            ("TIC-202 OUT (%)", Column::Op),
            ("FIC-203 PV (kg/h)", Column::Inner(1500.0)),
        ];
        let table = table("tic202", &runs.spec, run, &columns);
        write_csv(&folder.join(name), &table, &style)
    };
    write("tic202_test.csv", &runs.test, clock(2026, 2, 26, 7, 30))?;
    match &runs.trial {
        Some(run) => write("tic202_trial.csv", run, clock(2026, 2, 27, 8, 0)),
        None => Ok(()),
    }
}

fn steam_flow(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let sheet = |name, run: &Run, start| {
        table(
            name,
            &runs.spec,
            run,
            &[
                ("Date/Time", Column::Time(start)),
                ("FIC-203 MV", Column::Op),
                ("FIC-203 PV", Column::Pv(1)),
                ("FIC-203 SP", Column::Sp(1)),
                ("FIC-203 Mode", Column::Mode),
            ],
        )
    };
    let title = Table {
        name: "Title",
        title: vec![
            "Larkmoor Solvent Recovery",
            "Unit 200 - Distillation",
            "",
            "High-speed trend group 203: heating steam to E-202",
            "Exported by: control room 2, engineering console",
            "Signals: FIC-203 MV, PV, SP, Mode",
        ],
        headings: Vec::new(),
        rows: Vec::new(),
    };
    let test = sheet("Data", &runs.test, clock(2026, 2, 24, 9, 0));
    let trial = runs.trial.as_ref();
    let trial = trial.map(|run| sheet("Auto", run, clock(2026, 2, 24, 11, 20)));
    let mut tables = vec![title];
    tables.extend(sheets(test, trial));
    write_xlsx(
        &folder.join("fic203.xlsx"),
        &tables,
        "yyyy-mm-dd hh:mm:ss.0",
    )
}

/// One row for each signal and time; some rows of the level are of bad quality.
fn long_table(name: &'static str, runs: &Runs, run: &Run, start: NaiveDateTime) -> Table {
    let mut random = Random::new(name, 98);
    let mut rows = Vec::new();
    for sample in &run.samples {
        let time = after(start, sample);
        let bad = random.uniform() < 0.004;
        let pv = if bad {
            0.0
        } else {
            runs.spec.engineering(sample.pv)
        };
        let other = 88.0 + 0.2 * random.gaussian();
        let mut push = |tag: &str, value: Cell, quality: &str| {
            rows.push(vec![
                Cell::Text(tag.to_owned()),
                Cell::Time(time),
                value,
                Cell::Text(quality.to_owned()),
            ]);
        };
        let quality = if bad { "Bad" } else { "Good" };
        push("LIC-204.PV", Cell::Number(pv, 2), quality);
        push("LIC-204.OP", Cell::Number(sample.op, 2), "Good");
        push(
            "LIC-204.SP",
            Cell::Number(runs.spec.engineering(sample.sp), 1),
            "Good",
        );
        if sample.t_s % 10.0 == 0.0 {
            push("TI-214.PV", Cell::Number(other, 1), "Good");
        }
    }
    Table {
        name,
        title: Vec::new(),
        headings: ["Tag", "Timestamp", "Value", "Quality"]
            .map(str::to_owned)
            .to_vec(),
        rows,
    }
}

fn sump_level(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let test = long_table("Export", runs, &runs.test, clock(2026, 3, 2, 9, 40));
    let trial = runs.trial.as_ref();
    let trial = trial.map(|run| long_table("Export auto", runs, run, clock(2026, 3, 2, 13, 30)));
    write_xlsx(
        &folder.join("lic204.xlsx"),
        &sheets(test, trial),
        "dd-mmm-yyyy hh:mm:ss",
    )
}

/// What an exception-reporting historian keeps of a run: a row when the PV has moved by `pv_band` (%)
/// or anything else at all, and one at least every minute.
fn exceptions(run: &Run, pv_band: f64) -> Run {
    let mut kept: Vec<Sample> = Vec::new();
    for sample in &run.samples {
        let keep = kept.last().is_none_or(|last| {
            (sample.pv - last.pv).abs() >= pv_band
                || (sample.op - last.op).abs() >= 0.1
                || sample.sp != last.sp
                || sample.t_s - last.t_s >= 60.0
        });
        if keep {
            kept.push(*sample);
        }
    }
    Run {
        samples: kept,
        steps: Vec::new(),
    }
}

fn surge_level(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let style = CsvStyle {
        delimiter: b',',
        decimal: ".",
        time: ISO,
    };
    let write = |name: &str, run: &Run, start| {
        let columns = [
            ("Timestamp", Column::Time(start)),
            ("LIC-205.PV [mm]", Column::Pv(1)),
            ("LIC-205.SP [mm]", Column::Sp(0)),
            ("LIC-205.OP [%]", Column::Op),
            ("LIC-205.MODE", Column::Mode),
        ];
        let table = table("lic205", &runs.spec, &exceptions(run, 0.15), &columns);
        write_csv(&folder.join(name), &table, &style)
    };
    write("lic205_test.csv", &runs.test, clock(2026, 3, 3, 8, 15))?;
    match &runs.trial {
        Some(run) => write("lic205_trial.csv", run, clock(2026, 3, 4, 9, 0)),
        None => Ok(()),
    }
}

fn head_pressure(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let sheet = |name, run: &Run, start| {
        table(
            name,
            &runs.spec,
            run,
            &[
                ("Time", Column::Time(start)),
                ("PIC-206/PV", Column::Pv(2)),
                ("PIC-206/SP", Column::Sp(1)),
                ("PIC-206/OP", Column::Op),
                ("PIC-206/MODE", Column::Mode),
            ],
        )
    };
    let test = sheet("Steps", &runs.test, clock(2026, 3, 4, 10, 0));
    let trial = runs.trial.as_ref();
    let trial = trial.map(|run| sheet("Auto", run, clock(2026, 3, 4, 14, 10)));
    write_ods(&folder.join("pic206.ods"), &sheets(test, trial))
}

fn tray_temperature(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let sheet = |name, run: &Run, start, report| {
        let table = table(
            name,
            &runs.spec,
            run,
            &[
                ("Date and time", Column::Time(start)),
                ("TIC-207 PV (degC)", Column::Pv(2)),
                ("TIC-207 SP (degC)", Column::Sp(1)),
                ("TIC-207 OP (%)", Column::Op),
            ],
        );
        Table {
            title: vec!["Trend report", report, "Column C-201, tray 14", ""],
            ..table
        }
    };
    let test = sheet(
        "Report",
        &runs.test,
        clock(2026, 3, 5, 12, 40),
        "TIC-207 step test",
    );
    let trial = runs.trial.as_ref();
    let trial = trial.map(|run| {
        let start = clock(2026, 3, 6, 9, 10);
        sheet("Trial", run, start, "TIC-207 in automatic")
    });
    write_xlsx(
        &folder.join("tic207.xlsx"),
        &sheets(test, trial),
        "dd/mm/yyyy hh:mm:ss",
    )
}

fn water_content(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let start = clock(2026, 3, 13, 6, 30);
    let columns = [
        ("Date", Column::TimeText(start, "%d.%m.%Y")),
        ("Time", Column::TimeText(start, "%H:%M:%S")),
        ("AIC-208 Water (ppm)", Column::Pv(1)),
        ("AIC-208 SP (ppm)", Column::Sp(0)),
        ("AIC-208 Output (%)", Column::Op),
        ("AIC-208 Mode", Column::Mode),
    ];
    let style = CsvStyle {
        delimiter: b',',
        decimal: ".",
        time: ISO,
    };
    let table = table("aic208", &runs.spec, &runs.test, &columns);
    write_csv(&folder.join("aic208.csv"), &table, &style)
}

fn reflux_flow(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let start = clock(2026, 3, 10, 10, 0);
    let columns = [
        ("Timestamp", Column::Time(start)),
        ("FIC-209.PV", Column::Pv(3)),
        ("FIC-209.SP", Column::Sp(2)),
        ("FIC-209.OP", Column::Op),
        ("FIC-209.MODE", Column::Mode),
    ];
    let table = table("Trend", &runs.spec, &runs.test, &columns);
    write_xlsx(
        &folder.join("fic209.xlsx"),
        &[table],
        "yyyy-mm-dd hh:mm:ss.0",
    )
}

fn cooler(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let start = clock(2026, 3, 11, 13, 0);
    let columns = [
        ("Time", Column::Time(start)),
        ("TIC-210.PV", Column::Pv(1)),
        ("TIC-210.OP", Column::Op),
    ];
    let style = CsvStyle {
        delimiter: b',',
        decimal: ".",
        time: "%Y-%m-%dT%H:%M:%S",
    };
    let table = table("tic210", &runs.spec, &runs.test, &columns);
    write_csv(&folder.join("tic210.csv"), &table, &style)
}

fn vacuum(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let start = clock(2026, 3, 12, 9, 20);
    let columns = [
        ("Timestamp", Column::Time(start)),
        ("PIC-211 PV", Column::Pv(2)),
        ("PIC-211 SP", Column::Sp(0)),
        ("PIC-211 OP", Column::Op),
        ("PIC-211 MODE", Column::Mode),
    ];
    let mut table = table("Trend", &runs.spec, &runs.test, &columns);
    // The transmitter's card was reseated: single samples are bad here and there.
    for (row, text) in [
        (310, "Bad"),
        (311, "Bad"),
        (842, "No Data"),
        (1017, "Bad"),
        (1290, "#N/A"),
        (1291, "#N/A"),
        (1455, "No Data"),
        (1702, "Bad"),
    ] {
        table.rows[row][1] = Cell::Text(text.to_owned());
    }
    // The historian restarted well before the first step.
    table.rows.drain(120..225);
    write_xlsx(&folder.join("pic211.xlsx"), &[table], "yyyy-mm-dd hh:mm:ss")
}

fn vent_condenser(folder: &Path, runs: &Runs) -> Result<(), Box<dyn Error>> {
    let sheet = |name, run: &Run, time| {
        table(
            name,
            &runs.spec,
            run,
            &[
                ("Local time", time),
                ("TIC-212 PV (degC)", Column::Pv(2)),
                ("TIC-212 SP (degC)", Column::Sp(1)),
                ("TIC-212 OP (%)", Column::Op),
                ("TIC-212 MODE", Column::Mode),
            ],
        )
    };
    // The night on which summer time ended: 03:00 became 02:00.
    let start = clock(2025, 10, 26, 1, 50);
    let fold = clock(2025, 10, 26, 3, 0);
    let test = sheet("Steps", &runs.test, Column::FoldedTime(start, fold));
    let trial = runs.trial.as_ref();
    let trial = trial.map(|run| {
        let start = clock(2025, 10, 28, 10, 0);
        sheet("Trial", run, Column::Time(start))
    });
    write_xlsx(
        &folder.join("tic212.xlsx"),
        &sheets(test, trial),
        "yyyy-mm-dd hh:mm:ss",
    )
}

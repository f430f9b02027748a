//! The loop schedule, `loops.xlsx`.

use std::error::Error;
use std::path::Path;

use chrono::{NaiveDate, NaiveTime};
use rust_xlsxwriter::Format;

use crate::controller::{Action, Form, IAs, PAs};
use crate::plant::LOOPS;
use crate::rig::LoopSpec;
use crate::table::{Cell, Table, fill_sheet, new_workbook};
use crate::tuning::{Tuning, tuning};

/// What the schedule says of a loop beside its ranges and settings. An empty text is an empty cell.
struct Entry {
    tag: &'static str,
    service: &'static str,
    pv_unit: &'static str,
    model: &'static str,
    left_on: &'static str,
    aim: &'static str,
    derivative: &'static str,
    target_s: Option<f64>,
    allowed_deviation: Option<f64>,
    expected_load: Option<f64>,
    inner_loop: &'static str,
    test_log: &'static str,
    trial_log: &'static str,
    columns: [&'static str; 5],
    tested_on: &'static str,
    conditions: &'static str,
    transmitter: &'static str,
    valve: &'static str,
    valve_fail: &'static str,
    normal_mode: &'static str,
    drawing: &'static str,
    change_number: &'static str,
    remarks: &'static str,
}

const BLANK: Entry = Entry {
    tag: "",
    service: "",
    pv_unit: "",
    model: "Corvane LC-40",
    left_on: "",
    aim: "",
    derivative: "",
    target_s: None,
    allowed_deviation: None,
    expected_load: None,
    inner_loop: "",
    test_log: "",
    trial_log: "",
    columns: [""; 5],
    tested_on: "",
    conditions: "",
    transmitter: "",
    valve: "",
    valve_fail: "",
    normal_mode: "AUTO",
    drawing: "",
    change_number: "",
    remarks: "",
};

const ENTRIES: [Entry; 12] = [
    Entry {
        tag: "FIC-201",
        service: "Feed flow to column C-201",
        pv_unit: "m3/h",
        left_on: "2026-02-23",
        aim: "load",
        test_log: "logs/fic201.xlsx#Trend",
        trial_log: "logs/fic201.xlsx#Trial",
        columns: [
            "Timestamp",
            "FIC-201.PV",
            "FIC-201.OP",
            "FIC-201.SP",
            "FIC-201.MODE",
        ],
        tested_on: "2026-02-23",
        conditions: "Feed 19 m3/h from tank T-110, column on total reflux ratio 2.1",
        transmitter: "FT-201, orifice and differential pressure, damping 4 s",
        valve: "FV-201, globe, 2 in, pneumatic with positioner",
        valve_fail: "closed",
        drawing: "LM-200-PID-003",
        change_number: "MOC-26-017",
        remarks: "Packing of FV-201 is tight; linkage has play",
        ..BLANK
    },
    Entry {
        tag: "TIC-202",
        service: "Preheater E-202 outlet temperature",
        pv_unit: "degC",
        left_on: "2026-02-27",
        aim: "load",
        target_s: Some(12.0),
        inner_loop: "FIC-203",
        test_log: "logs/tic202_test.csv",
        trial_log: "logs/tic202_trial.csv",
        columns: [
            "Time",
            "TIC-202 PV (degC)",
            "TIC-202 OUT (%)",
            "TIC-202 SP (degC)",
            "",
        ],
        tested_on: "2026-02-26",
        conditions: "Feed 20 m3/h, FIC-203 in cascade with its new settings",
        transmitter: "TT-202, Pt100 in thermowell",
        valve: "none: sets the set point of FIC-203",
        normal_mode: "AUTO",
        drawing: "LM-200-PID-003",
        change_number: "MOC-26-017",
        remarks: "Output is the set point of FIC-203 in % of 0-1500 kg/h",
        ..BLANK
    },
    Entry {
        tag: "FIC-203",
        service: "Heating steam flow to E-202",
        pv_unit: "kg/h",
        model: "Halvard P3 single-loop",
        left_on: "2026-02-24",
        aim: "load",
        test_log: "logs/fic203.xlsx#Data",
        trial_log: "logs/fic203.xlsx#Auto",
        columns: [
            "Date/Time",
            "FIC-203 PV",
            "FIC-203 MV",
            "FIC-203 SP",
            "FIC-203 Mode",
        ],
        tested_on: "2026-02-24",
        conditions: "Steam header 6.1 bar, preheater in service",
        transmitter: "FT-203, vortex",
        valve: "FV-203, globe, 1.5 in, smart positioner",
        valve_fail: "closed",
        normal_mode: "CAS",
        drawing: "LM-200-PID-003",
        change_number: "MOC-26-017",
        ..BLANK
    },
    Entry {
        tag: "LIC-204",
        service: "Column C-201 sump level",
        pv_unit: "%",
        left_on: "2026-03-02",
        aim: "load",
        test_log: "logs/lic204.xlsx#Export",
        trial_log: "logs/lic204.xlsx#Export auto",
        tested_on: "2026-03-02",
        conditions: "Feed 20 m3/h, reboiler duty constant, bottoms to T-120",
        transmitter: "LT-204, differential pressure, flushed",
        valve: "LV-204, rotary, 2 in, smart positioner",
        valve_fail: "closed",
        drawing: "LM-200-PID-004",
        change_number: "MOC-26-019",
        ..BLANK
    },
    Entry {
        tag: "LIC-205",
        service: "Surge drum D-205 level",
        pv_unit: "mm",
        left_on: "2026-03-03",
        aim: "averaging",
        allowed_deviation: Some(300.0),
        expected_load: Some(15.0),
        test_log: "logs/lic205_test.csv",
        trial_log: "logs/lic205_trial.csv",
        columns: [
            "Timestamp",
            "LIC-205.PV [mm]",
            "LIC-205.OP [%]",
            "LIC-205.SP [mm]",
            "LIC-205.MODE",
        ],
        tested_on: "2026-03-03",
        conditions: "Normal throughput; feed to Unit 300 steady",
        transmitter: "LT-205, guided radar",
        valve: "LV-205, globe, 3 in, smart positioner",
        valve_fail: "open",
        drawing: "LM-200-PID-006",
        change_number: "MOC-26-019",
        remarks: "Unit 300 asks for the smoothest feed that the drum allows",
        ..BLANK
    },
    Entry {
        tag: "PIC-206",
        service: "Column C-201 head pressure",
        pv_unit: "kPa",
        left_on: "2026-03-04",
        aim: "load",
        derivative: "yes",
        test_log: "logs/pic206.ods#Steps",
        trial_log: "logs/pic206.ods#Auto",
        columns: [
            "Time",
            "PIC-206/PV",
            "PIC-206/OP",
            "PIC-206/SP",
            "PIC-206/MODE",
        ],
        tested_on: "2026-03-04",
        conditions: "Column at 85 % load, condenser water 14 degC",
        transmitter: "PT-206, gauge pressure",
        valve: "PV-206, butterfly, 4 in, smart positioner",
        valve_fail: "open",
        drawing: "LM-200-PID-004",
        change_number: "MOC-26-020",
        ..BLANK
    },
    Entry {
        tag: "TIC-207",
        service: "Column C-201 tray 14 temperature",
        pv_unit: "degC",
        model: "Tessel 900 function block",
        left_on: "2026-03-06",
        aim: "load",
        test_log: "logs/tic207.xlsx#Report",
        trial_log: "logs/tic207.xlsx#Trial",
        columns: [
            "Date and time",
            "TIC-207 PV (degC)",
            "TIC-207 OP (%)",
            "TIC-207 SP (degC)",
            "",
        ],
        tested_on: "2026-03-05",
        conditions: "Feed tank changed at 12:50, shift change at 14:00",
        transmitter: "TT-207, thermocouple K in thermowell",
        valve: "TV-207, globe, 2 in, steam to reboiler E-204",
        valve_fail: "closed",
        drawing: "LM-200-PID-004",
        change_number: "MOC-26-020",
        remarks: "Gain rises with the boil-up",
        ..BLANK
    },
    Entry {
        tag: "AIC-208",
        service: "Product water content after dryer V-208",
        pv_unit: "ppm",
        aim: "load",
        test_log: "logs/aic208.csv",
        columns: [
            "Date + Time",
            "AIC-208 Water (ppm)",
            "AIC-208 Output (%)",
            "AIC-208 SP (ppm)",
            "AIC-208 Mode",
        ],
        tested_on: "2026-03-13",
        conditions: "Product 8 m3/h, dryer bed A in service",
        transmitter: "AT-208, near-infrared analyser, cycle 30 s, sample line 60 m",
        valve: "AV-208, globe, 1 in, smart positioner",
        valve_fail: "open",
        drawing: "LM-200-PID-007",
        change_number: "MOC-26-022",
        remarks: "Settings to be entered after the analyser's calibration",
        ..BLANK
    },
    Entry {
        tag: "FIC-209",
        service: "Reflux flow to column C-201",
        pv_unit: "m3/h",
        model: "Marl 15 remote unit",
        aim: "load",
        test_log: "logs/fic209.xlsx",
        columns: [
            "Timestamp",
            "FIC-209.PV",
            "FIC-209.OP",
            "FIC-209.SP",
            "FIC-209.MODE",
        ],
        tested_on: "2026-03-10",
        conditions: "Reflux pump P-209A in service",
        transmitter: "FT-209, magnetic",
        valve: "FV-209, globe, 2 in, smart positioner",
        valve_fail: "open",
        drawing: "LM-200-PID-004",
        remarks: "Executed in the remote unit, once in 15 s",
        ..BLANK
    },
    Entry {
        tag: "TIC-210",
        service: "Product cooler E-210 outlet temperature",
        pv_unit: "degC",
        aim: "load",
        test_log: "logs/tic210.csv",
        columns: ["Time", "TIC-210.PV", "TIC-210.OP", "", ""],
        tested_on: "2026-03-11",
        conditions: "Product 8 m3/h, cooling water 22 degC and short",
        transmitter: "TT-210, Pt100 on the pipe wall",
        valve: "TV-210, butterfly, 3 in, cooling water",
        valve_fail: "open",
        drawing: "LM-200-PID-007",
        remarks: "Operations allowed moves of 2 % at most, and once fully open",
        ..BLANK
    },
    Entry {
        tag: "PIC-211",
        service: "Vacuum drum V-211 pressure (bleed)",
        pv_unit: "mbar",
        model: "Halvard P3 single-loop",
        aim: "load",
        test_log: "logs/pic211.xlsx",
        columns: [
            "Timestamp",
            "PIC-211 PV",
            "PIC-211 OP",
            "PIC-211 SP",
            "PIC-211 MODE",
        ],
        tested_on: "2026-03-12",
        conditions: "Vacuum pump P-211B at full speed, bleed valve opens to raise the pressure",
        transmitter: "PT-211, absolute pressure",
        valve: "PV-211, needle, 0.5 in, nitrogen bleed",
        valve_fail: "closed",
        drawing: "LM-200-PID-008",
        remarks: "Loop has been in manual since start-up",
        ..BLANK
    },
    Entry {
        tag: "TIC-212",
        service: "Vent condenser E-212 outlet temperature",
        pv_unit: "degC",
        left_on: "2025-10-27",
        aim: "load",
        test_log: "logs/tic212.xlsx#Steps",
        trial_log: "logs/tic212.xlsx#Trial",
        columns: [
            "Local time",
            "TIC-212 PV (degC)",
            "TIC-212 OP (%)",
            "TIC-212 SP (degC)",
            "TIC-212 MODE",
        ],
        tested_on: "2025-10-26",
        conditions: "Night test, vents of Unit 200 steady, brine -12 degC",
        transmitter: "TT-212, Pt100 in thermowell",
        valve: "TV-212, globe, 1 in, brine",
        valve_fail: "open",
        drawing: "LM-200-PID-008",
        change_number: "MOC-25-061",
        remarks: "Packing of TV-212 was renewed between test and trial",
        ..BLANK
    },
];

fn text(value: &str) -> Cell {
    if value.is_empty() {
        Cell::Empty
    } else {
        Cell::Text(value.to_owned())
    }
}

fn number(value: Option<f64>) -> Cell {
    value.map_or(Cell::Empty, |value| Cell::Number(value, 6))
}

fn date(value: &str) -> Cell {
    match value.parse::<NaiveDate>() {
        Ok(day) => Cell::Time(day.and_time(NaiveTime::MIN)),
        Err(_) => Cell::Empty,
    }
}

fn not_zero(value: f64) -> Option<f64> {
    (value != 0.0).then_some(value)
}

fn cells(spec: &LoopSpec, row: &Tuning, entry: &Entry) -> Vec<(&'static str, Cell)> {
    let controller = &row.controller;
    let [time, pv, op, sp, mode] = entry.columns;
    let uses_derivative = entry.derivative == "yes";
    let entered_by = if row.left.is_some() { "A. Quill" } else { "" };
    vec![
        ("tag", text(entry.tag)),
        ("service", text(entry.service)),
        ("pv unit", text(entry.pv_unit)),
        ("pv low", number(Some(spec.pv_low))),
        ("pv high", number(Some(spec.pv_high))),
        ("op low", number(Some(0.0))),
        ("op high", number(Some(100.0))),
        ("op unit", text("%")),
        ("controller", text(entry.model)),
        ("action", text(action(row.action_in_schedule))),
        ("form", text(form(controller.form))),
        ("p as", text(p_as(controller.p_as))),
        ("i as", text(i_as(controller.i_as))),
        ("d as", text(if controller.d_minutes { "min" } else { "s" })),
        (
            "d filter",
            number(uses_derivative.then_some(controller.d_filter)),
        ),
        ("scan s", number(Some(controller.scan_s))),
        ("found p", number(Some(row.found.p))),
        ("found i", number(Some(row.found.i))),
        ("found d", number(not_zero(row.found.d))),
        ("left p", number(row.left.map(|left| left.p))),
        ("left i", number(row.left.map(|left| left.i))),
        ("left d", number(row.left.and_then(|left| not_zero(left.d)))),
        ("left on", date(entry.left_on)),
        ("entered by", text(entered_by)),
        ("aim", text(entry.aim)),
        ("derivative", text(entry.derivative)),
        ("target s", number(entry.target_s)),
        ("allowed deviation", number(entry.allowed_deviation)),
        ("expected load", number(entry.expected_load)),
        ("inner loop", text(entry.inner_loop)),
        ("test log", text(entry.test_log)),
        ("trial log", text(entry.trial_log)),
        ("time column", text(time)),
        ("pv column", text(pv)),
        ("op column", text(op)),
        ("sp column", text(sp)),
        ("mode column", text(mode)),
        ("tested by", text("A. Quill")),
        ("tested on", date(entry.tested_on)),
        ("witnessed by", text("J. Penhallow (shift B)")),
        ("conditions", text(entry.conditions)),
        ("transmitter", text(entry.transmitter)),
        ("valve", text(entry.valve)),
        ("valve fail", text(entry.valve_fail)),
        ("normal mode", text(entry.normal_mode)),
        ("drawing", text(entry.drawing)),
        ("change number", text(entry.change_number)),
        ("remarks", text(entry.remarks)),
    ]
}

fn action(action: Action) -> &'static str {
    match action {
        Action::Direct => "direct",
        Action::Reverse => "reverse",
    }
}

fn form(form: Form) -> &'static str {
    match form {
        Form::Standard => "standard",
        Form::Series => "series",
        Form::Parallel => "parallel",
    }
}

fn p_as(p_as: PAs) -> &'static str {
    match p_as {
        PAs::Gain => "gain",
        PAs::Band => "band",
        PAs::GainPerUnit => "gain per unit",
    }
}

fn i_as(i_as: IAs) -> &'static str {
    match i_as {
        IAs::Seconds => "s",
        IAs::Minutes => "min",
        IAs::PerSecond => "1/s",
        IAs::PerMinute => "1/min",
    }
}

/// Writes the schedule.
pub fn write(path: &Path) -> Result<(), Box<dyn Error>> {
    let mut rows = Vec::new();
    let mut headings = Vec::new();
    for (spec, entry) in LOOPS.iter().zip(&ENTRIES) {
        if spec.tag != entry.tag {
            return Err(format!("{} stands where {} belongs", entry.tag, spec.tag).into());
        }
        let (names, row): (Vec<_>, Vec<_>) =
            cells(spec, tuning(spec.tag), entry).into_iter().unzip();
        headings = names.into_iter().map(str::to_owned).collect();
        rows.push(row);
    }
    let table = Table {
        name: "Loops",
        title: Vec::new(),
        headings,
        rows,
    };
    let mut workbook = new_workbook("Loop schedule, Unit 200")?;
    let sheet = workbook.add_worksheet();
    sheet.set_name(table.name)?;
    fill_sheet(sheet, &table, &Format::new().set_num_format("yyyy-mm-dd"))?;
    sheet.set_freeze_panes(1, 1)?;
    workbook.save(path)?;
    Ok(())
}

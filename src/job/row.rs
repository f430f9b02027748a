//! One row of the loop schedule with every cell typed.

use super::row_reader::{RowReader, Words};
use super::schedule::BadRow;
use crate::design::Aim;
use crate::notice::{Place, Problem};
use crate::read::ColumnNames;
use crate::settings::{
    Action, ActsOn, Controller, DerivativeUnit, EquationForm, IntegralUnit, Native,
    ProportionalUnit,
};
use crate::trace::Moment;
use chrono::{NaiveDate, NaiveDateTime, NaiveTime, TimeDelta};
use std::fmt;

/// A date, with or without time of day.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Day {
    /// The whole day.
    Date(NaiveDate),
    /// A moment of it.
    Moment(NaiveDateTime),
}

impl Day {
    /// Its first moment.
    pub fn begins(self) -> NaiveDateTime {
        match self {
            Day::Date(date) => date.and_time(NaiveTime::MIN),
            Day::Moment(at) => at,
        }
    }

    /// Its last moment.
    pub fn ends(self) -> NaiveDateTime {
        match self {
            Day::Date(date) => {
                date.and_time(NaiveTime::MIN) + TimeDelta::days(1) - TimeDelta::microseconds(1)
            }
            Day::Moment(at) => at,
        }
    }

    /// The date.
    pub fn date(self) -> NaiveDate {
        match self {
            Day::Date(date) => date,
            Day::Moment(at) => at.date(),
        }
    }
}

impl fmt::Display for Day {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Day::Date(date) => write!(f, "{date}"),
            Day::Moment(at) => write!(f, "{}", at.format("%Y-%m-%d %H:%M:%S")),
        }
    }
}

/// The settings as entered.
#[derive(Debug, Clone, PartialEq)]
pub struct Left {
    /// The numbers typed.
    pub native: Native,
    /// When.
    pub on: Option<Day>,
    /// By whom.
    pub entered_by: Option<String>,
}

/// A cell of the row under its heading.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct CellAsRead {
    /// Column, 0 for the first of the sheet.
    pub column: usize,
    /// Heading, as written.
    pub heading: String,
    /// Value, as written.
    pub value: String,
}

/// A log of the loop: which files, and what of them.
#[derive(Debug, Clone, PartialEq)]
pub struct LogCell {
    /// Where the files are named.
    pub place: Place,
    /// Text of the cell: files with their sheets.
    pub files: String,
    /// First moment used.
    pub from: Option<Moment>,
    /// Last moment used.
    pub to: Option<Moment>,
}

/// One loop of the schedule, typed and checked.
#[derive(Debug, Clone, PartialEq)]
pub struct LoopRow {
    /// 1 for the first loop of the schedule.
    pub number: usize,
    /// Row of the schedule.
    pub place: Place,
    /// Headings and values as read, in the order of the sheet; empty cells as empty text.
    pub as_read: Vec<CellAsRead>,
    /// Tag.
    pub tag: String,
    /// Service.
    pub service: String,
    /// Unit of the PV.
    pub pv_unit: String,
    /// Unit of the OP.
    pub op_unit: String,
    /// Make and model of the controller.
    pub controller_name: Option<String>,
    /// How the controller works.
    pub controller: Controller,
    /// Action as found.
    pub action: Action,
    /// PV filter as found, s.
    pub pv_filter_s: f64,
    /// Whether the PV was logged after that filter.
    pub pv_filter_in_log: bool,
    /// Settings as found; `None` where `found p` is blank.
    pub found: Option<Native>,
    /// Settings as entered; `None` until they were.
    pub left: Option<Left>,
    /// Action as left, where it was or is to be changed; it stands also before settings are entered.
    pub left_action: Option<Action>,
    /// PV filter as left, s, where it was or is to be changed.
    pub left_pv_filter_s: Option<f64>,
    /// What the loop is for.
    pub aim: Aim,
    /// Whether the design may use derivative action.
    pub derivative: bool,
    /// Closed-loop time constant asked for, s.
    pub target_s: Option<f64>,
    /// Why, and who says so.
    pub target_reason: Option<String>,
    /// Averaging: allowed deviation, PV units.
    pub allowed_deviation: Option<f64>,
    /// Averaging: expected load, % of OP.
    pub expected_load_percent: Option<f64>,
    /// % of OP moved at once by a 1 % set-point step; `None`: as in `job.toml`.
    pub op_move_limit_percent: Option<f64>,
    /// Tag of the inner loop.
    pub inner_loop: Option<String>,
    /// Whether the loop takes part in a protective function.
    pub safety: bool,
    /// The procedure that governs changing it.
    pub safety_procedure: Option<String>,
    /// Accepts an open item, with the reason.
    pub waiver: Option<String>,
    /// The step test.
    pub test: Option<LogCell>,
    /// The closed-loop trial.
    pub trial: Option<LogCell>,
    /// Columns of the logs.
    pub columns: ColumnNames,
    /// Log to schedule unit.
    pub pv_scale: Option<f64>,
    /// Log to schedule unit.
    pub pv_offset: Option<f64>,
    /// This loop's own revision.
    pub revision: Option<String>,
    /// Its date.
    pub date: Option<NaiveDate>,
    /// Its reason.
    pub reason: Option<String>,
    /// Who tested.
    pub tested_by: Option<String>,
    /// Date of the test.
    pub tested_on: Option<Day>,
    /// Who witnessed.
    pub witnessed_by: Option<String>,
    /// Plant conditions.
    pub conditions: Option<String>,
    /// Transmitter.
    pub transmitter: Option<String>,
    /// Valve.
    pub valve: Option<String>,
    /// Where the valve fails to.
    pub valve_fail: Option<String>,
    /// Normal mode.
    pub normal_mode: Option<String>,
    /// Drawing number.
    pub drawing: Option<String>,
    /// Number of the change.
    pub change_number: Option<String>,
    /// Remarks.
    pub remarks: Option<String>,
}

const YES_NO: Words<bool> = &[
    ("yes", true),
    ("no", false),
    ("true", true),
    ("false", false),
    ("y", true),
    ("n", false),
];
const ACTIONS: Words<Action> = &[("direct", Action::Direct), ("reverse", Action::Reverse)];
const FORMS: Words<EquationForm> = &[
    ("standard", EquationForm::Standard),
    ("series", EquationForm::Series),
    ("parallel", EquationForm::Parallel),
    ("ideal", EquationForm::Standard),
];
const P_UNITS: Words<ProportionalUnit> = &[
    ("gain", ProportionalUnit::Gain),
    ("band", ProportionalUnit::Band),
    ("gain per unit", ProportionalUnit::GainPerUnit),
];
const I_UNITS: Words<IntegralUnit> = &[
    ("s", IntegralUnit::Seconds),
    ("min", IntegralUnit::Minutes),
    ("1/s", IntegralUnit::PerSecond),
    ("1/min", IntegralUnit::PerMinute),
];
const D_UNITS: Words<DerivativeUnit> = &[
    ("s", DerivativeUnit::Seconds),
    ("min", DerivativeUnit::Minutes),
];
const ACTS_ON: Words<ActsOn> = &[("pv", ActsOn::Pv), ("error", ActsOn::Error)];
const AIMS: Words<Aim> = &[
    ("load", Aim::Load),
    ("set point", Aim::SetPoint),
    ("averaging", Aim::Averaging),
];

impl LoopRow {
    /// Reads a row; `number` is its place among the loops.
    ///
    /// # Errors
    /// Where a cell is missing or cannot be what it should be; all of the row's problems together.
    pub fn read(
        mut reader: RowReader<'_>,
        number: usize,
        warnings: &mut Vec<Problem>,
    ) -> Result<LoopRow, BadRow> {
        let r = &mut reader;
        let mut row_warnings = Vec::new();
        let row = read_row(r, number, &mut row_warnings);
        let row_number = reader.row.number;
        match row {
            Some(row) if reader.problems.is_empty() => {
                warnings.append(&mut row_warnings);
                Ok(row)
            }
            _ => {
                let tag = reader.cell("tag").text();
                Err(BadRow {
                    tag: if tag.is_empty() {
                        format!("row {row_number}")
                    } else {
                        tag.replace(char::is_control, " ")
                    },
                    row: row_number,
                    problems: reader.problems,
                })
            }
        }
    }

    /// The row with one more problem that stops it.
    pub(super) fn refused(&self, message: String) -> BadRow {
        BadRow {
            tag: self.tag.clone(),
            row: self.place.row.unwrap_or_default(),
            problems: vec![Problem::error(self.place.clone(), message)],
        }
    }

    /// What the schedule does not give and a record cannot do without.
    pub fn missing_for_record(&self) -> Vec<Problem> {
        let mut problems = Vec::new();
        for (is_missing, name) in [
            (self.found.is_none(), "found p"),
            (self.test.is_none(), "test log"),
        ] {
            if is_missing {
                problems.push(
                    Problem::error(
                        self.place.clone(),
                        format!("{} has no {name}, which a record needs", self.tag),
                    )
                    .hint(format!("fill in the column \"{name}\"")),
                );
            }
        }
        problems
    }
}

fn read_row(r: &mut RowReader<'_>, number: usize, warnings: &mut Vec<Problem>) -> Option<LoopRow> {
    let tag = r.needed("tag", RowReader::text);
    if tag
        .as_ref()
        .is_some_and(|tag| tag.contains(char::is_control))
    {
        r.wrong(
            "tag",
            "the tag holds a line break or another control character",
        );
    }
    let service = r.needed("service", RowReader::text);
    let pv_unit = r.needed("pv unit", RowReader::text);
    let pv_low = r.needed("pv low", RowReader::number);
    let pv_high = r.needed("pv high", RowReader::number);
    let pv_span = r.span("pv low", "pv high", pv_low, pv_high);
    let op_ends = [("op low", 0.0), ("op high", 100.0)].map(|(name, usual)| {
        if r.cell(name).is_empty() {
            Some(usual)
        } else {
            r.number(name)
        }
    });
    let op_span = r.span("op low", "op high", op_ends[0], op_ends[1]);
    let action = r.needed("action", |r, name| r.word(name, ACTIONS));
    let form = r.needed("form", |r, name| r.word(name, FORMS));
    let p_as = r.needed("p as", |r, name| r.word(name, P_UNITS));
    let i_as = r.needed("i as", |r, name| r.word(name, I_UNITS));
    check_form(r, form, p_as, i_as);
    let d_as = r.word("d as", D_UNITS).unwrap_or(DerivativeUnit::Seconds);
    let d_on = r.word("d on", ACTS_ON).unwrap_or(ActsOn::Pv);
    let p_on = r.word("p on", ACTS_ON).unwrap_or(ActsOn::Error);
    let d_filter_n = r.not_below_zero("d filter").unwrap_or(10.0);
    let scan_s = r.needed("scan s", RowReader::above_zero);
    let found = r.native(["found p", "found i", "found d"], warnings);
    let left = read_left(r, warnings);
    let left_action = r.word("left action", ACTIONS);
    let left_pv_filter_s = r.not_below_zero("left pv filter s");
    let aim = r.word("aim", AIMS).unwrap_or_default();
    let allowed_deviation = r.above_zero("allowed deviation");
    let expected_load = r.number("expected load").map(f64::abs);
    if aim == Aim::Averaging {
        for (name, given) in [
            ("allowed deviation", allowed_deviation),
            ("expected load", expected_load),
        ] {
            if given.is_none() && r.cell(name).is_empty() {
                r.wrong(name, format!("{name} is blank; the aim averaging needs it"));
            }
        }
        if expected_load == Some(0.0) {
            r.wrong("expected load", "expected load has to be above 0, found 0");
        }
    }
    let pv_scale = r.number("pv scale");
    if pv_scale == Some(0.0) {
        r.wrong("pv scale", "pv scale must not be 0");
    }
    let test = r.log(["test log", "test from", "test to"]);
    let trial = r.log(["trial log", "trial from", "trial to"]);
    let columns = ColumnNames {
        time: r.text("time column"),
        pv: r.text("pv column"),
        op: r.text("op column"),
        sp: r.text("sp column"),
        mode: r.text("mode column"),
        quality: r.text("quality column"),
        tag: r.text("tag column"),
    };
    check_logs(r, test.as_ref(), trial.as_ref());
    check_columns(r);
    let safety = r.word("safety", YES_NO).unwrap_or(false);
    let pv_filter_in_log = r.word("pv filter in log", YES_NO).unwrap_or(true);
    let derivative = r.word("derivative", YES_NO).unwrap_or(false);
    let date = r.day("date").map(Day::date);
    Some(LoopRow {
        number,
        place: r.table.place().row(r.row.number),
        as_read: r.as_read(),
        controller_name: r.text("controller"),
        pv_filter_s: r.not_below_zero("pv filter s").unwrap_or(0.0),
        pv_filter_in_log,
        found,
        left,
        left_action,
        left_pv_filter_s,
        aim,
        derivative,
        target_s: r.above_zero("target s"),
        target_reason: r.text("target reason"),
        allowed_deviation,
        expected_load_percent: expected_load,
        op_move_limit_percent: r.above_zero("op move limit"),
        inner_loop: r.text("inner loop"),
        safety,
        safety_procedure: r.text("safety procedure"),
        waiver: r.text("waiver"),
        test,
        trial,
        columns,
        pv_scale,
        pv_offset: r.number("pv offset"),
        revision: r.text("revision"),
        date,
        reason: r.text("reason"),
        tested_by: r.text("tested by"),
        tested_on: r.day("tested on"),
        witnessed_by: r.text("witnessed by"),
        conditions: r.text("conditions"),
        transmitter: r.text("transmitter"),
        valve: r.text("valve"),
        valve_fail: r.text("valve fail"),
        normal_mode: r.text("normal mode"),
        drawing: r.text("drawing"),
        change_number: r.text("change number"),
        remarks: r.text("remarks"),
        op_unit: r.text("op unit").unwrap_or_else(|| "%".to_owned()),
        tag: tag?,
        service: service?,
        pv_unit: pv_unit?,
        action: action?,
        controller: Controller {
            form: form?,
            p_as: p_as?,
            i_as: i_as?,
            d_as,
            p_on,
            d_on,
            d_filter_n,
            scan_s: scan_s?,
            pv_span: pv_span?,
            op_span: op_span?,
        },
    })
}

/// Units that the parallel form does not have.
fn check_form(
    r: &mut RowReader<'_>,
    form: Option<EquationForm>,
    p_as: Option<ProportionalUnit>,
    i_as: Option<IntegralUnit>,
) {
    if form != Some(EquationForm::Parallel) {
        return;
    }
    if p_as == Some(ProportionalUnit::Band) {
        r.wrong(
            "p as",
            "p as has to be gain or gain per unit with the form parallel, found \"band\"",
        );
    }
    if matches!(i_as, Some(IntegralUnit::Seconds | IntegralUnit::Minutes)) {
        let found = r.cell("i as").text();
        r.wrong(
            "i as",
            format!("i as has to be 1/s or 1/min with the form parallel (its integral setting is a gain), found \"{found}\""),
        );
    }
}

/// A trial that is the step test again, which it cannot be.
fn check_logs(r: &mut RowReader<'_>, test: Option<&LogCell>, trial: Option<&LogCell>) {
    if let (Some(test), Some(trial)) = (test, trial)
        && (&test.files, test.from, test.to) == (&trial.files, trial.from, trial.to)
    {
        r.wrong(
            "trial log",
            format!(
                "the trial log is the test log, {}: the trial comes after the settings were entered",
                trial.files
            ),
        );
    }
}

/// Columns of the log named for two things at once.
fn check_columns(r: &mut RowReader<'_>) {
    const NAMES: [&str; 5] = [
        "pv column",
        "op column",
        "sp column",
        "mode column",
        "quality column",
    ];
    let told = r.problems.len();
    let texts = NAMES.map(|name| r.text(name));
    // An error value in one of these cells is told where the cell is read.
    r.problems.truncate(told);
    for (k, name) in NAMES.iter().enumerate() {
        let Some(text) = &texts[k] else { continue };
        if let Some(first) = texts[..k]
            .iter()
            .position(|other| other.as_ref() == Some(text))
        {
            r.wrong(
                name,
                format!("{name} is \"{text}\", which {} is already", NAMES[first]),
            );
        }
    }
}

fn read_left(r: &mut RowReader<'_>, warnings: &mut Vec<Problem>) -> Option<Left> {
    let native = r.native(["left p", "left i", "left d"], warnings);
    let on = r.day("left on");
    let entered_by = r.text("entered by");
    let native = native?;
    if on.is_none() && r.cell("left on").is_empty() {
        warnings.push(Problem::warning(
            r.place("left on"),
            "left on is blank although settings were entered",
        ));
    }
    Some(Left {
        native,
        on,
        entered_by,
    })
}

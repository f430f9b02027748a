//! The plan of a step test, made before it: how far to move the OP, how long to watch, how fast to log, where
//! to stop. A pure function of the loop's row of the schedule and of what an earlier record of it found.
//!
//! Figures come from an earlier record alone. Where there is none, or it lacks one, the plan leaves the
//! figure to operations and says why.

mod cautions;
mod figures;
mod known;

pub use known::Basis;

use crate::identify::Advice;
use crate::model::ProcessModel;
use crate::record::{Caution, Document, Loop, Record};
use crate::settings::Native;
use chrono::NaiveDate;
use figures::Figures;
use serde::Serialize;

/// Name of the format of a plan's JSON.
pub const SCHEMA: &str = "asleft/plan/1";

/// The keyword by which a PDF is known as a plan of this program; the seal of the file takes the place
/// of the zeros once it is made.
pub const SEAL_KEYWORD: &str =
    "asleft plan sha256:0000000000000000000000000000000000000000000000000000000000000000";

/// Digits of the seal at the end of [`SEAL_KEYWORD`].
pub const SEAL_DIGITS: usize = 64;

/// OP after each move of the series, in moves from the start: up, back, on down, back. Both
/// directions come twice; the second and the last move turn back, the third goes on, and what the PV
/// answers less after turning back is the play of the valve.
const SERIES: [f64; 4] = [1.0, 0.0, -1.0, 0.0];

/// What the schedule says of the log to come.
#[derive(Debug, Clone, PartialEq, Default, Serialize)]
pub struct LogWanted {
    /// File that the schedule names already.
    pub file: Option<String>,
    /// Whether that file is there, from an earlier test.
    pub file_is_there: bool,
    /// Columns that the schedule names: what for, and the heading.
    pub columns: Vec<(String, String)>,
    /// Headings of the schedule to be filled in after the test.
    pub to_fill_in: Vec<String>,
}

/// What a plan is made from.
#[derive(Debug, Clone)]
pub struct PlanInput<'a> {
    /// Title block; the number is the plan's own.
    pub document: Document,
    /// The loop as the schedule describes it.
    pub control_loop: Loop,
    /// Settings as found, where the schedule has them already.
    pub found: Option<Native>,
    /// Sound records of this loop, the newest first.
    pub earlier: Vec<&'a Record>,
    /// Records of this loop that cannot be used, each with the reason, one sentence.
    pub set_aside: Vec<String>,
    /// What the schedule says of the log to come.
    pub log: LogWanted,
    /// Cautions of the site's own for this loop.
    pub site_cautions: Vec<String>,
    /// Program and version.
    pub program: &'static str,
}

/// Why no size of the moves is proposed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum NotProposed {
    /// A protective loop whose procedure is not named: no test is planned.
    Protective,
    /// No earlier record that could be used.
    NoRecord,
    /// The earlier record found no process model.
    NoModel,
    /// The earlier record could not assess the noise.
    NoNoise,
}

/// What decided a proposed size.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum DecidedBy {
    /// Twenty times the noise.
    Noise,
    /// The least move that can be relied on.
    LeastMove,
    /// Three times the dead band of the valve.
    DeadBand,
    /// How far the PV may go: a part of its span.
    PvShare,
    /// How far the PV may go: the allowed deviation of the schedule.
    AllowedDeviation,
    /// How far the OP may be moved.
    OpShare,
}

/// The size of the moves.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(tag = "size", rename_all = "kebab-case")]
pub enum Size {
    /// A figure from an earlier record.
    Proposed {
        /// Move of the OP, % of its span.
        op_percent: f64,
        /// PV change by the end of a move, % of span, without sign; integrating: by the end of a pulse.
        pv_percent: f64,
        /// The same with the largest gain of any step of the record.
        most_pv_percent: f64,
        /// PV change over the noise.
        signal_to_noise: f64,
        /// Move that would give a PV change of twenty times the noise, %.
        wanted_op_percent: f64,
        /// What decided it.
        decided_by: DecidedBy,
    },
    /// To agree with operations.
    ToAgree {
        /// Why.
        because: NotProposed,
    },
}

/// What the logging interval follows from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum LoggedFor {
    /// A twentieth of the time constant.
    TimeConstant,
    /// A fifth of the dead time, of a process without a lag.
    DeadTime,
    /// The scan, for a process without lag and dead time.
    Scan,
    /// The scan, for want of a model.
    NoModel,
}

/// One move of the series. Changes are in percent of span.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Move {
    /// 1 for the first.
    pub number: usize,
    /// Whether the OP goes up.
    pub up: bool,
    /// Whether it turns back against the move before.
    pub turns_back: bool,
    /// Whether it ends where the OP stood at the start.
    pub to_start: bool,
    /// OP after it less OP at the start, %; `None` where the size is to be agreed.
    pub op_offset_percent: Option<f64>,
    /// PV expected before the next move less PV at the start, %.
    pub pv_offset_percent: Option<f64>,
    /// Slope of the PV after it, %/s, signed; integrating processes alone.
    pub pv_slope_percent_per_s: Option<f64>,
}

/// Proposed limits of the test, from the start, % of span.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Limits {
    /// PV so far from its start: hold, no further move before it is understood.
    pub pv_hold_percent: f64,
    /// PV so far from its start: return the OP, end the test.
    pub pv_abort_percent: f64,
    /// Where OP may stand at the start, % of its span, low and high.
    pub op_start_percent: [f64; 2],
    /// Where PV may stand at the start, % of its span, low and high.
    pub pv_start_percent: [f64; 2],
    /// Integrating: time from a move to `pv_abort_percent`, s.
    pub time_to_abort_s: Option<f64>,
}

/// How long to watch, s.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Times {
    /// At rest before the first move.
    pub before_s: f64,
    /// After each move.
    pub watch_s: f64,
    /// The whole test.
    pub total_s: f64,
}

/// The plan of the step test of one loop.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Plan {
    /// Format.
    pub schema: &'static str,
    /// Document number.
    pub number: String,
    /// Date of the job.
    pub date: NaiveDate,
    /// Title block, signatures, procedures.
    #[serde(skip)]
    pub document: Document,
    /// The loop.
    #[serde(rename = "loop")]
    pub control_loop: Loop,
    /// Settings as found, where the schedule has them.
    pub found: Option<Native>,
    /// What an earlier record gives; `None` without one.
    pub basis: Option<Basis>,
    /// Records of this loop that were not used, and why.
    pub set_aside: Vec<String>,
    /// Whether the process integrates: by the model, or without one by what the loop is.
    pub integrating: bool,
    /// Size of the moves.
    #[serde(flatten)]
    pub size: Size,
    /// The moves; none where no test is planned.
    pub moves: Vec<Move>,
    /// How long to watch; `None`: to agree with operations.
    pub times: Option<Times>,
    /// Longest interval between logged samples, s.
    pub log_interval_s: f64,
    /// What it follows from.
    pub logged_for: LoggedFor,
    /// Proposed limits; `None`: to agree with operations.
    pub limits: Option<Limits>,
    /// What the earlier record advises for the next test.
    pub advice: Vec<Advice>,
    /// What the schedule says of the log to come.
    pub log: LogWanted,
    /// Cautions in the order of printing.
    pub cautions: Vec<Caution>,
    /// Program and version.
    pub program: &'static str,
}

impl Plan {
    /// Whether the watch is longer than the process needs: moves have to stand apart, and be made by hand.
    pub fn is_watched_for_hands(&self) -> bool {
        let process = self.basis.as_ref().and_then(|basis| basis.process);
        process
            .zip(self.times)
            .is_some_and(|(process, times)| figures::settles_s(&process) < 0.8 * times.watch_s)
    }

    /// Whether a test is planned at all.
    pub fn is_for_a_test(&self) -> bool {
        !self.moves.is_empty()
    }
}

/// Makes the plan of one loop.
pub fn plan(input: PlanInput) -> Plan {
    let PlanInput {
        document,
        control_loop,
        found,
        earlier,
        mut set_aside,
        log,
        site_cautions,
        program,
    } = input;
    let record = known::choose(&earlier, &control_loop, &mut set_aside);
    let basis = record.map(Basis::of);
    let integrating = basis.as_ref().and_then(|basis| basis.process).map_or_else(
        || known::likely_integrates(&control_loop),
        |process| process.kind().integrates(),
    );
    let protective = control_loop.safety && control_loop.safety_procedure.is_none();
    let deviation = figures::allowed_deviation_percent(&control_loop);
    let Figures {
        size,
        times,
        limits,
        log_interval_s,
        logged_for,
    } = figures::of(basis.as_ref(), control_loop.scan_s, deviation, protective);
    let moves = if protective {
        Vec::new()
    } else {
        moves(size, times, basis.as_ref())
    };
    let mut plan = Plan {
        schema: SCHEMA,
        number: document.number.clone(),
        date: document.date,
        document,
        control_loop,
        found,
        basis,
        set_aside,
        integrating,
        size,
        moves,
        times,
        log_interval_s,
        logged_for,
        limits,
        advice: record.map_or_else(Vec::new, |record| record.test.next_time.clone()),
        log,
        cautions: Vec::new(),
        program,
    };
    plan.cautions = cautions::cautions(&plan, &site_cautions);
    plan
}

/// The series of moves with what each is expected to do.
fn moves(size: Size, times: Option<Times>, basis: Option<&Basis>) -> Vec<Move> {
    let op_percent = match size {
        Size::Proposed { op_percent, .. } => Some(op_percent),
        Size::ToAgree { .. } => None,
    };
    let known = op_percent
        .zip(times)
        .zip(basis.and_then(|basis| basis.process));
    let before = |index: usize| index.checked_sub(1).map_or(0.0, |last| SERIES[last]);
    let goes_up = |index: usize| SERIES[index] > before(index);
    let offsets = known.map(|((op, times), process)| pv_offsets(&process, op, times.watch_s));
    (0..SERIES.len())
        .map(|index| Move {
            number: index + 1,
            up: goes_up(index),
            turns_back: index > 0 && goes_up(index) != goes_up(index - 1),
            to_start: SERIES[index] == 0.0,
            op_offset_percent: op_percent.map(|op| op * SERIES[index]),
            pv_offset_percent: offsets.map(|offsets| offsets[index]),
            pv_slope_percent_per_s: known
                .filter(|(_, process)| process.kind().integrates())
                .map(|((op, _), process)| process.gain() * op * SERIES[index]),
        })
        .collect()
}

/// PV before the next move less PV at the start, %: where a self-regulating process comes to rest, where
/// an integrating one has got to when the watch of each move is over.
fn pv_offsets(process: &ProcessModel, op_percent: f64, watch_s: f64) -> [f64; 4] {
    if !process.kind().integrates() {
        return SERIES.map(|after| process.gain() * op_percent * after);
    }
    let held: Vec<(f64, f64)> = SERIES
        .iter()
        .enumerate()
        .map(|(index, after)| (index as f64 * watch_s, op_percent * after))
        .collect();
    let ends = [1.0, 2.0, 3.0, 4.0].map(|count| count * watch_s);
    let answer = process.response_to_held(&held, &ends);
    [0, 1, 2, 3].map(|index| answer[index])
}

#[cfg(test)]
mod tests;

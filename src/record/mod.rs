//! The record of one loop: everything that its pages print, gathered; its JSON is its serde form.

pub mod cautions;
pub mod open_items;

pub use cautions::named_procedures;
pub use open_items::decisive_reasons;

use crate::design::{Aim, Design, DesignBounds};
use crate::identify::{Advice, Model, Step, Valve, Verdict, VerdictBounds};
use crate::predict::trial::Trial;
use crate::predict::{Margins, Predicted};
use crate::settings::{
    Action, ActsOn, Controller, DerivativeUnit, EquationForm, IntegralUnit, Native,
    ProportionalUnit, Standard,
};
use crate::trace::{Moment, Samples};
use chrono::NaiveDate;
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Name of the record's format.
pub const SCHEMA: &str = "asleft/record/1";

/// Status of a record.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, JsonSchema,
)]
pub enum Status {
    /// Something that hand-over needs is missing.
    #[serde(rename = "draft")]
    Draft,
    /// Complete.
    #[serde(rename = "for signature")]
    ForSignature,
    /// No settings are recommended.
    #[serde(rename = "withheld")]
    Withheld,
}

/// What keeps a record from being signed; the first seven make it `withheld`.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, JsonSchema,
)]
#[serde(rename_all = "kebab-case")]
pub enum OpenCode {
    /// No usable step.
    NoUsableStep,
    /// Controller action against the sign of the process.
    ActionAgainstProcess,
    /// Scan longer than the process.
    ScanTooSlow,
    /// Protective loop without its procedure.
    SafetyProcedureMissing,
    /// The inner loop of the cascade is withheld, or no loop to design an outer one on.
    InnerLoopWithheld,
    /// No closed-loop time constant satisfies the limits.
    NoSolution,
    /// The aim asked for does not fit the process.
    WrongAim,
    /// Fewer than two usable steps, or one direction only.
    FewSteps,
    /// As-left settings not entered.
    AsLeftMissing,
    /// Closed-loop trial missing.
    TrialMissing,
    /// Closed-loop trial does not agree with the prediction.
    TrialDisagrees,
    /// Closed-loop trial oscillates.
    TrialOscillates,
    /// As-left settings with a worst-case Ms above the limit, or unstable.
    AsLeftMargins,
    /// An averaging level cannot keep its deviation.
    LevelDeviation,
}

impl OpenCode {
    /// Whether the item makes the record `withheld`.
    pub fn withholds(self) -> bool {
        self <= OpenCode::WrongAim
    }
}

/// One open item.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct OpenItem {
    /// Which.
    pub code: OpenCode,
    /// In words, with its figures.
    pub text: String,
}

/// A request that was not met, or a reservation: printed on page 1, does not keep from signing.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct Remark {
    /// "Not met", "Reservation", "Overridden", "Accepted" (by a waiver).
    pub label: String,
    /// In words, with its figures.
    pub text: String,
}

/// Page size.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "kebab-case")]
pub enum PageSize {
    /// ISO A4.
    #[default]
    A4,
    /// US Letter.
    UsLetter,
}

/// One line of the sign-off block.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct Signature {
    /// Role.
    pub role: String,
    /// Name; `None` prints a blank line to sign.
    pub name: Option<String>,
}

/// A site procedure that governs.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct Procedure {
    /// Title.
    pub title: String,
    /// Reference number.
    pub reference: String,
}

/// One line of the revision table.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct Revision {
    /// Revision mark.
    pub revision: String,
    /// Date of issue.
    pub date: NaiveDate,
    /// Reason.
    pub reason: String,
}

/// Title block, status and sign-off.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Document {
    /// Document number.
    pub number: String,
    /// Revision.
    pub revision: String,
    /// Status.
    pub status: Status,
    /// Date of issue.
    pub date: NaiveDate,
    /// Legal owner (ISO 7200).
    pub owner: String,
    /// Plant.
    pub plant: String,
    /// Area.
    pub area: Option<String>,
    /// Client.
    pub client: Option<String>,
    /// Creator: the first signature's name.
    pub creator: Option<String>,
    /// Approval person: name of the signature whose role begins with "Approved".
    pub approver: Option<String>,
    /// Page size.
    pub page: PageSize,
    /// What keeps the record from being signed.
    pub open_items: Vec<OpenItem>,
    /// Requests not met, reservations, waivers.
    pub remarks: Vec<Remark>,
    /// Sign-off block.
    pub signatures: Vec<Signature>,
    /// Site procedures that govern.
    pub procedures: Vec<Procedure>,
    /// Revision history, this one last.
    pub revisions: Vec<Revision>,
}

/// A range with its unit.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Range {
    /// Engineering unit.
    pub unit: String,
    /// Low end.
    pub low: f64,
    /// High end.
    pub high: f64,
}

/// The loop as the schedule describes it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Loop {
    /// Tag.
    pub tag: String,
    /// Service.
    pub service: String,
    /// PV range.
    pub pv: Range,
    /// OP range.
    pub op: Range,
    /// Controller action as found.
    pub action: Action,
    /// Controller action as left, where it was changed.
    pub left_action: Option<Action>,
    /// Form of the equation.
    pub form: EquationForm,
    /// How P is typed.
    pub p_as: ProportionalUnit,
    /// How I is typed.
    pub i_as: IntegralUnit,
    /// How D is typed.
    pub d_as: DerivativeUnit,
    /// What P acts on.
    pub p_on: ActsOn,
    /// What D acts on.
    pub d_on: ActsOn,
    /// N of the derivative filter; 0 none.
    pub d_filter_n: f64,
    /// Execution interval, s.
    pub scan_s: f64,
    /// PV filter as found, s.
    pub pv_filter_s: f64,
    /// PV filter as left, s, where it was changed.
    pub left_pv_filter_s: Option<f64>,
    /// Whether the PV was logged after that filter.
    pub pv_filter_in_log: bool,
    /// What the loop is for.
    pub aim: Aim,
    /// Whether the design may use derivative action.
    pub derivative: bool,
    /// Closed-loop time constant asked for, s.
    pub target_s: Option<f64>,
    /// Why faster than the soft limits, and who says so.
    pub target_reason: Option<String>,
    /// Averaging: allowed deviation, PV units.
    pub allowed_deviation: Option<f64>,
    /// Averaging: expected load, % of OP.
    pub expected_load_percent: Option<f64>,
    /// Tag of the loop this one cascades to.
    pub inner_loop: Option<String>,
    /// Tags of the loops that cascade to this one.
    pub outer_loops: Vec<String>,
    /// Whether the loop takes part in a protective function.
    pub safety: bool,
    /// Procedure that governs changing it.
    pub safety_procedure: Option<String>,
    /// Accepts an open item of the test, with the reason.
    pub waiver: Option<String>,
    /// Who entered the settings.
    pub entered_by: Option<String>,
    /// When the settings were entered.
    pub left_on: Option<NaiveDate>,
    /// Who tested.
    pub tested_by: Option<String>,
    /// When it was tested.
    pub tested_on: Option<NaiveDate>,
    /// Who witnessed.
    pub witnessed_by: Option<String>,
    /// Plant conditions during the test.
    pub conditions: Option<String>,
    /// Free text fields printed where given, by heading: controller, transmitter, valve, valve fail, normal mode, drawing, change number, remarks.
    pub particulars: BTreeMap<String, String>,
}

/// Which test a log holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum LogRole {
    /// The step test.
    Test,
    /// The closed-loop trial.
    Trial,
}

/// A stretch without good samples.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct GapRecord {
    /// Last good sample before.
    pub from: Moment,
    /// First good sample after.
    pub to: Moment,
}

/// One log file (or sheet) that the record was made from.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct LogSource {
    /// File below the job folder, with forward slashes.
    pub file: String,
    /// Sheet of a workbook.
    pub sheet: Option<String>,
    /// SHA-256 of the source file, lower-case hex.
    pub sha256: String,
    /// Data rows read.
    pub rows: usize,
}

/// One test's log: where it came from, what it holds.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Log {
    /// Which test.
    pub role: LogRole,
    /// First source file below the job folder.
    pub file: String,
    /// Its sheet.
    pub sheet: Option<String>,
    /// SHA-256 of that file, lower-case hex.
    pub sha256: String,
    /// Data rows read, of all sources.
    pub rows: usize,
    /// Further files joined with it.
    pub also: Vec<LogSource>,
    /// Good samples used.
    pub samples: usize,
    /// First sample.
    pub from: Moment,
    /// Last sample.
    pub to: Moment,
    /// Second 0 of the samples' clock; `None` for a log without dates.
    pub zero: Option<chrono::NaiveDateTime>,
    /// Median sampling interval, s.
    pub interval_s: f64,
    /// Bad samples left out.
    pub bad_samples: usize,
    /// The same by cause.
    pub bad_by_cause: BTreeMap<String, usize>,
    /// Stretches without good samples.
    pub gaps: Vec<GapRecord>,
    /// What the reader did that the signer should know: rows sorted, duplicates, a summer-time fold.
    pub notes: Vec<String>,
    /// Name of the attached samples file.
    pub samples_file: String,
    /// SHA-256 of the attached samples file.
    pub samples_sha256: String,
    /// The samples themselves; in the attached file, not in the JSON.
    #[serde(skip)]
    pub data: Samples,
}

/// What the test as a whole showed.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Test {
    /// Robust standard deviation of the PV's noise, %; `None` where not assessable.
    pub noise_sd_percent: Option<f64>,
    /// σ of the rules: the larger of noise and resolution, %; `None` where not assessable.
    pub sigma_percent: Option<f64>,
    /// Whether the log was compressed, which is why noise is not assessable then.
    pub compressed: bool,
    /// Samples of the PV that stood apart from their neighbours, spikes, and were left out of readings and fits.
    pub outliers: usize,
    /// PV range over the usable steps (or over all where none is), engineering units: low, high.
    pub pv_tested: [f64; 2],
    /// OP range over the same, OP units: low, high.
    pub op_tested: [f64; 2],
    /// Why no step could be looked for, where none was found.
    pub failure: Option<String>,
    /// What to do at the next test.
    pub next_time: Vec<Advice>,
    /// Why the dead band of the valve is not assessable, in words; `None` where it was assessed, or where
    /// there is no model.
    pub valve_not_assessed: Option<String>,
}

/// Gain in engineering units.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct EngineeringGain {
    /// Value.
    pub value: f64,
    /// Low end of the 95 % interval.
    pub low: f64,
    /// High end of the 95 % interval.
    pub high: f64,
    /// Unit: PV unit per OP unit, or PV unit per second per OP unit.
    pub unit: String,
}

/// The model block: the fit, and its gain in engineering units.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct ModelBlock {
    /// The pooled fit.
    #[serde(flatten)]
    pub fit: Model,
    /// Gain in engineering units.
    pub gain_engineering: EngineeringGain,
}

/// One set of settings with what it does on the model.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct SettingsBlock {
    /// As typed at the faceplate.
    pub native: Native,
    /// Standard form; `None` for a parallel form without proportional gain.
    pub standard: Option<Standard>,
    /// Margins on the fitted model; `None` without a model.
    pub margins: Option<Margins>,
    /// The worst of each margin over the set; `None` without a model.
    pub worst_margins: Option<Margins>,
    /// Label of the model with the largest Ms.
    pub worst_model: Option<String>,
    /// Predicted responses; `None` without a model.
    pub predicted: Option<Predicted>,
}

/// All settings of the record.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct AllSettings {
    /// Read from the controller before the work.
    pub as_found: SettingsBlock,
    /// Recommended by the design; `None` in a withheld record.
    pub recommended: Option<SettingsBlock>,
    /// As entered; `None` until entered.
    pub as_left: Option<SettingsBlock>,
    /// Whether as left differs from recommended by more than 5 %; `None` where either is missing.
    pub as_left_differs: Option<bool>,
}

/// A caution, printed in the record.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct Caution {
    /// What it is about.
    pub about: String,
    /// In words, with its figures.
    pub text: String,
}

/// Bounds in force.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct LimitsInForce {
    /// Of the design.
    pub design: DesignBounds,
    /// Of the verdicts.
    pub verdict: VerdictBounds,
}

/// Where the record comes from.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct Provenance {
    /// Program and version.
    pub program: String,
    /// Seal over the JSON without this field; "sha256:" and lower-case hex. Empty until sealed.
    pub seal: String,
}

/// The record of one loop.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Record {
    /// Format.
    pub schema: String,
    /// Title block, status, sign-off.
    pub document: Document,
    /// The loop.
    #[serde(rename = "loop")]
    pub control_loop: Loop,
    /// Logs.
    pub logs: Vec<Log>,
    /// The test as a whole.
    pub test: Test,
    /// Steps.
    pub steps: Vec<Step>,
    /// Model; `None` where no step is usable.
    pub model: Option<ModelBlock>,
    /// Valve dead band; `None`: not assessable.
    pub valve: Option<Valve>,
    /// Design; `None` in a withheld record.
    pub design: Option<Design>,
    /// Settings.
    pub settings: AllSettings,
    /// Closed-loop trial; `None` where missing or not assessed.
    pub trial: Option<Trial>,
    /// Cautions, the standing ones first.
    pub cautions: Vec<Caution>,
    /// Bounds in force.
    pub limits_in_force: LimitsInForce,
    /// Where the record comes from.
    pub provenance: Provenance,
}

impl Record {
    /// The log of the step test.
    pub fn test_log(&self) -> Option<&Log> {
        self.logs.iter().find(|log| log.role == LogRole::Test)
    }

    /// The log of the closed-loop trial.
    pub fn trial_log(&self) -> Option<&Log> {
        self.logs.iter().find(|log| log.role == LogRole::Trial)
    }

    /// The smallest and the largest gain of the usable steps' own fits, in PV units per OP unit (per second
    /// where the process integrates), without sign; `None` where no step has a fit.
    pub fn gains_of_steps(&self) -> Option<[f64; 2]> {
        let l = &self.control_loop;
        let in_units = ((l.pv.high - l.pv.low) / (l.op.high - l.op.low)).abs();
        let gains = self
            .steps
            .iter()
            .filter(|step| step.verdict != Verdict::Rejected)
            .filter_map(|step| step.fit.as_ref())
            .map(|fit| fit.gain.value.abs() * in_units);
        gains.fold(None, |ends, gain| match ends {
            None => Some([gain, gain]),
            Some([low, high]) => Some([f64::min(low, gain), f64::max(high, gain)]),
        })
    }

    /// The controller as settings are typed into it.
    ///
    /// # Errors
    /// Where a range in a record that was read back is none.
    pub fn controller(&self) -> Result<Controller, crate::quantity::SpanError> {
        let l = &self.control_loop;
        Ok(Controller {
            form: l.form,
            p_as: l.p_as,
            i_as: l.i_as,
            d_as: l.d_as,
            p_on: l.p_on,
            d_on: l.d_on,
            d_filter_n: l.d_filter_n,
            scan_s: l.scan_s,
            pv_span: crate::quantity::Span::new(l.pv.low, l.pv.high)?,
            op_span: crate::quantity::Span::new(l.op.low, l.op.high)?,
        })
    }
}

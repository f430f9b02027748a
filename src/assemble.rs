//! One loop, from its samples to its finished record: the stages one after the other.

use crate::design::{self, Aim, DesignRequest, Designed, InnerLoop, worst_margins};
use crate::identify::{self, Context, Identification, Model, Step, Verdict};
use crate::notice::{Place, Problem};
use crate::predict::simulate::{LoopCase, OperatingPoint};
use crate::predict::trial::{self, AsLeft};
use crate::predict::{Margins, PvFilter, margins};
use crate::quantity::{Estimate, Span};
use crate::record::{
    AllSettings, Document, EngineeringGain, LimitsInForce, Log, Loop, ModelBlock, Provenance,
    Record, SCHEMA, SettingsBlock, Status, Test, cautions, open_items,
};
use crate::settings::{Action, Controller, Native};
use crate::steps;
use crate::trace::{Clock, Trace};
use chrono::NaiveDate;

/// Program and version, as printed in the record.
pub const PROGRAM: &str = concat!("asleft ", env!("CARGO_PKG_VERSION"));

/// What the record of an inner loop brings to the outer one.
#[derive(Debug, Clone, PartialEq)]
pub struct InnerRecord {
    /// Its tag.
    pub tag: String,
    /// Whether settings were entered.
    pub entered: bool,
    /// When they were.
    pub left_on: Option<NaiveDate>,
    /// How fast it is.
    pub pace: InnerPace,
}

/// How fast an inner loop is, as its outer loop has to know it.
#[derive(Debug, Clone, PartialEq)]
pub enum InnerPace {
    /// Its closed-loop time constant, s.
    Known(f64),
    /// Its record is withheld.
    Withheld,
    /// The loop as left is not stable, on the fitted model or on one of the set.
    Unstable,
    /// As left it does not reach 63 % of a set-point step.
    Unknown,
}

impl InnerPace {
    /// The closed-loop time constant, s, where it is known.
    fn seconds(&self) -> Option<f64> {
        match self {
            InnerPace::Known(seconds) => Some(*seconds),
            _ => None,
        }
    }

    /// Why the outer loop cannot be designed on it, in words.
    fn refusal(&self, tag: &str) -> Option<String> {
        match self {
            InnerPace::Known(_) => None,
            InnerPace::Withheld => Some(format!(
                "The inner loop {tag} is withheld, so this loop cannot be designed on it."
            )),
            InnerPace::Unstable => Some(format!(
                "The inner loop {tag} is not stable with its settings as left, so this loop cannot be designed on it."
            )),
            InnerPace::Unknown => Some(format!(
                "The inner loop {tag} does not come to 63 % of a set-point step with its settings as left: how \
                 fast it is cannot be told, so this loop cannot be designed on it."
            )),
        }
    }
}

/// Everything that one record is made from, read and checked.
#[derive(Debug, Clone, PartialEq)]
pub struct LoopInput {
    /// Title block; status, open items and remarks are put in here.
    pub document: Document,
    /// The loop.
    pub control_loop: Loop,
    /// The controller.
    pub controller: Controller,
    /// Settings as found.
    pub found: Native,
    /// Settings as left, where entered.
    pub left: Option<Native>,
    /// The step test's log with its samples.
    pub test: Log,
    /// The closed-loop trial's log with its samples.
    pub trial: Option<Log>,
    /// Bounds in force for this loop.
    pub limits: LimitsInForce,
    /// The site's own cautions for this loop.
    pub site_cautions: Vec<String>,
    /// The inner loop's record, where this loop cascades.
    pub inner: Option<InnerRecord>,
}

/// The controller as found or as left: action, PV filter and what it does on the process.
struct Side {
    action: Action,
    filter: PvFilter,
}

/// Makes the record of one loop.
///
/// # Errors
/// Where the samples of the test make no trace.
pub fn assemble(input: LoopInput) -> Result<Record, Vec<Problem>> {
    let trace = trace_of(&input.test, &input.controller)?;
    let (identification, failure) = identified(&input, &trace);
    let fit = identification.model.clone();

    let (found, left) = sides(&input.control_loop);
    let (pv_tested, op_tested) = tested_range(&identification.steps, &trace, &input.controller);
    let middle = middle_of(&input.controller, pv_tested, op_tested);

    let mut circumstances = open_items::Circumstances::default();
    if let Some(inner) = &input.inner {
        circumstances.inner_refusal = inner.pace.refusal(&inner.tag);
        circumstances.inner_order_unknown = order_unknown(&input, inner);
    }
    let designed = fit.as_ref().and_then(|model| {
        designed(
            &input,
            model,
            &identification,
            left.filter,
            &left,
            &mut circumstances,
        )
    });

    let block = |native: Native, side: &Side| {
        settings_block(native, side, fit.as_ref(), &input.controller, middle)
    };
    let as_left = input.left.map(|native| block(native, &left));
    let settings = AllSettings {
        as_found: block(input.found, &found),
        as_left_differs: match (&designed, input.left) {
            (Some(designed), Some(left)) => Some(differs(designed.native, left)),
            _ => None,
        },
        recommended: designed.as_ref().map(|d| block(d.native, &left)),
        as_left,
    };

    let unit_of_gain = fit
        .as_ref()
        .map(|fit| gain_unit(&input.control_loop, fit.kind.integrates()))
        .unwrap_or_default();
    let mut record = Record {
        schema: SCHEMA.to_owned(),
        document: input.document,
        control_loop: input.control_loop,
        test: Test {
            noise_sd_percent: identification.noise_sd_percent,
            sigma_percent: identification.sigma_percent,
            compressed: identification.compressed,
            pv_tested,
            op_tested,
            failure,
            next_time: identification.next_time,
        },
        steps: identification.steps,
        model: fit
            .clone()
            .map(|fit| model_block(fit, &unit_of_gain, &input.controller)),
        valve: identification.valve,
        design: designed.map(|designed| designed.design),
        settings,
        trial: None,
        logs: vec![input.test],
        cautions: Vec::new(),
        limits_in_force: input.limits,
        provenance: Provenance {
            program: PROGRAM.to_owned(),
            seal: String::new(),
        },
    };
    // A record that is withheld says nothing of the closed loop.
    if record.design.is_some()
        && let (Some(log), Some(native), Some(model)) = (&input.trial, input.left, &fit)
    {
        let others = design::other_models(model);
        let as_left = AsLeft {
            model: &model.process(),
            others: &others,
            terms: &input.controller.terms(native),
            controller: &input.controller,
            filter: left.filter,
            action: left.action,
        };
        match trial::trial(&trace_of(log, &input.controller)?, &as_left) {
            Ok(found) => record.trial = Some(found),
            Err(error) => circumstances.trial_failure = Some(error.to_string()),
        }
    }
    record.logs.extend(input.trial);
    record.document.open_items = open_items::open_items(&record, &circumstances);
    record.document.status = open_items::status(&record.document.open_items);
    if record.document.status == Status::Withheld {
        record.design = None;
        record.settings.recommended = None;
        record.settings.as_left_differs = None;
        record.trial = None;
    }
    record.document.remarks = open_items::remarks(&record, &circumstances);
    record.cautions = cautions::cautions(&record, &input.site_cautions);
    Ok(record)
}

fn trace_of(log: &Log, controller: &Controller) -> Result<Trace, Vec<Problem>> {
    Trace::new(&log.data, controller.pv_span, controller.op_span).map_err(|error| {
        let mut place = Place::file(&log.file);
        if let Some(sheet) = &log.sheet {
            place = place.sheet(sheet);
        }
        vec![Problem::error(place, error.to_string()).hint(
            "look at the log with `asleft inspect`: the columns of PV and OP, and what counts as bad",
        )]
    })
}

/// Steps found, judged and fitted; and why there is none, in words.
fn identified(input: &LoopInput, trace: &Trace) -> (Identification, Option<String>) {
    let clock = input.test.zero.map_or(Clock::Elapsed, Clock::Dated);
    let context = Context {
        clock,
        pv_span: input.controller.pv_span,
        op_span: input.controller.op_span,
        bounds: input.limits.verdict,
        not_before_s: input.inner.as_ref().and_then(|inner| {
            let left = inner.left_on?;
            match input.test.zero {
                Some(zero) => Some((left.and_hms_opt(0, 0, 0)? - zero).as_seconds_f64()),
                // A log without dates: all of it was tested on one day.
                None => (tested_on(input)? < left).then_some(f64::INFINITY),
            }
        }),
    };
    match steps::find(trace, input.controller.scan_s) {
        Ok(found) => (identify::identify(trace, &found, &context), None),
        Err(error) => (
            identify::identify(trace, &[], &context),
            Some(error.to_string()),
        ),
    }
}

/// The finished design, unless something forbids to recommend.
fn designed(
    input: &LoopInput,
    model: &Model,
    identification: &Identification,
    filter: PvFilter,
    left: &Side,
    circumstances: &mut open_items::Circumstances,
) -> Option<Designed> {
    let l = &input.control_loop;
    let inner = match &input.inner {
        None => None,
        Some(inner) => Some(InnerLoop {
            tag: inner.tag.clone(),
            closed_loop_time_constant_s: inner.pace.seconds()?,
        }),
    };
    let request = DesignRequest {
        aim: l.aim,
        derivative: l.derivative,
        target_s: l.target_s,
        target_reason: l.target_reason.clone(),
        allowed_deviation_percent: l
            .allowed_deviation
            .filter(|_| l.aim == Aim::Averaging)
            .map(|units| units / input.controller.pv_span.width() * 100.0),
        expected_load_percent: l.expected_load_percent,
        inner,
        bounds: input.limits.design,
    };
    match design::design(
        model,
        identification.sigma_percent,
        &input.controller,
        filter,
        &request,
    ) {
        Err(refusal) => {
            circumstances.refusal = Some(refusal);
            None
        }
        // Sign and safety yield to nothing: a finished design is not shown where they forbid it.
        Ok(_) if left.action != Action::for_gain(model.gain.value) => None,
        Ok(_) if l.safety && l.safety_procedure.is_none() => None,
        Ok(designed) => Some(designed),
    }
}

fn settings_block(
    native: Native,
    side: &Side,
    model: Option<&Model>,
    controller: &Controller,
    middle: OperatingPoint,
) -> SettingsBlock {
    let terms = controller.terms(native);
    let standard = terms.standard();
    let Some(model) = model else {
        return SettingsBlock {
            native,
            standard,
            margins: None,
            worst_margins: None,
            worst_model: None,
            predicted: None,
        };
    };
    let process = model.process();
    let worst = worst_margins(model, &terms, controller, side.filter, side.action);
    SettingsBlock {
        native,
        standard,
        margins: Some(margins(
            &process,
            &terms,
            controller,
            side.filter,
            side.action,
        )),
        worst_margins: Some(worst.margins),
        worst_model: Some(worst.worst_model),
        predicted: Some(
            LoopCase {
                model: &process,
                terms: &terms,
                controller,
                filter: side.filter,
                action: side.action,
                start: middle,
            }
            .predict(),
        ),
    }
}

/// Whether any of the three numbers differs by more than 5 %.
fn differs(recommended: Native, left: Native) -> bool {
    [
        (recommended.p, left.p),
        (recommended.i, left.i),
        (recommended.d, left.d),
    ]
    .iter()
    .any(|(wanted, entered)| (entered - wanted).abs() > 0.05 * wanted.abs())
}

/// PV and OP range over the usable steps, or over the whole log where none is; engineering units.
fn tested_range(steps: &[Step], trace: &Trace, controller: &Controller) -> ([f64; 2], [f64; 2]) {
    let usable: Vec<[f64; 2]> = steps
        .iter()
        .filter(|step| step.verdict != Verdict::Rejected)
        .map(|step| step.window_s)
        .collect();
    let inside = |t: f64| usable.is_empty() || usable.iter().any(|w| t >= w[0] && t <= w[1]);
    let range = |values: &[f64], span: Span| {
        let (low, high) = trace
            .t_s()
            .iter()
            .zip(values)
            .filter(|(t, _)| inside(**t))
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), (_, v)| {
                (low.min(*v), high.max(*v))
            });
        [span.engineering(low), span.engineering(high)]
    };
    (
        range(trace.pv(), controller.pv_span),
        range(trace.op(), controller.op_span),
    )
}

fn model_block(fit: Model, unit: &str, controller: &Controller) -> ModelBlock {
    let gain: Estimate = fit
        .gain
        .scaled(controller.pv_span.width() / controller.op_span.width());
    ModelBlock {
        gain_engineering: EngineeringGain {
            value: gain.value,
            low: gain.low,
            high: gain.high,
            unit: unit.to_owned(),
        },
        fit,
    }
}

fn gain_unit(l: &Loop, integrates: bool) -> String {
    format!(
        "{}/{}{}",
        l.pv.unit,
        if integrates { "s/" } else { "" },
        l.op.unit
    )
}

/// The controller as found and as left.
fn sides(l: &Loop) -> (Side, Side) {
    let in_log_s = if l.pv_filter_in_log {
        l.pv_filter_s
    } else {
        0.0
    };
    let side = |action, in_controller_s| Side {
        action,
        filter: PvFilter {
            in_log_s,
            in_controller_s,
        },
    };
    (
        side(l.action, l.pv_filter_s),
        side(
            l.left_action.unwrap_or(l.action),
            l.left_pv_filter_s.unwrap_or(l.pv_filter_s),
        ),
    )
}

/// Where predictions start: the middle of the range tested.
fn middle_of(controller: &Controller, pv: [f64; 2], op: [f64; 2]) -> OperatingPoint {
    OperatingPoint {
        pv_percent: controller.pv_span.percent((pv[0] + pv[1]) / 2.0),
        op_percent: controller.op_span.percent((op[0] + op[1]) / 2.0),
    }
}

/// What the outer loop of a cascade has to know of this record. Its closed-loop time constant is that
/// of the settings as left where they were entered, else the one it was designed for.
pub fn inner_record(record: &Record) -> InnerRecord {
    InnerRecord {
        tag: record.control_loop.tag.clone(),
        left_on: record.control_loop.left_on,
        entered: record.settings.as_left.is_some(),
        pace: inner_pace(record),
    }
}

fn inner_pace(record: &Record) -> InnerPace {
    let (Some(design), Some(model), Ok(controller)) =
        (&record.design, &record.model, record.controller())
    else {
        return InnerPace::Withheld;
    };
    let Some(as_left) = &record.settings.as_left else {
        return InnerPace::Known(design.closed_loop_time_constant_s);
    };
    let stable = |margins: &Option<Margins>| margins.is_some_and(|m| m.stable);
    if !stable(&as_left.margins) || !stable(&as_left.worst_margins) {
        return InnerPace::Unstable;
    }
    let (_, left) = sides(&record.control_loop);
    let case = LoopCase {
        model: &model.fit.process(),
        terms: &controller.terms(as_left.native),
        controller: &controller,
        filter: left.filter,
        action: left.action,
        start: middle_of(&controller, record.test.pv_tested, record.test.op_tested),
    };
    case.closed_loop_time_constant_s(design.effective_dead_time_s)
        .map_or(InnerPace::Unknown, InnerPace::Known)
}

/// Day of the outer loop's test: of its log, else as the schedule says.
fn tested_on(input: &LoopInput) -> Option<NaiveDate> {
    input
        .test
        .zero
        .map(|zero| zero.date())
        .or(input.control_loop.tested_on)
}

/// Why it cannot be told whether the test came after the inner loop's settings were entered, where it
/// cannot.
fn order_unknown(input: &LoopInput, inner: &InnerRecord) -> Option<String> {
    if !inner.entered {
        return None;
    }
    let missing = match (inner.left_on, tested_on(input)) {
        (None, _) => format!(
            "the schedule does not say when the settings of {} were entered",
            inner.tag
        ),
        (_, None) => "neither the log nor the schedule says when this loop was tested".to_owned(),
        (Some(left), Some(tested)) if left == tested => format!(
            "this loop was tested on the day on which the settings of {} were entered",
            inner.tag
        ),
        _ => return None,
    };
    Some(format!(
        "The test holds only if it was made after the settings of {} were entered: {missing}.",
        inner.tag
    ))
}

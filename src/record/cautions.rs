//! The cautions of a record: the standing ones, those that the data raised, and the site's own.

use super::open_items::{action_fits, few_steps};
use super::{Caution, Procedure, Record, Status};
use crate::display::{counted, fixed, plain, significant, unit, with_unit};
use crate::identify::{ReasonCode, Valve, Verdict};

/// All cautions in the order of printing. `site` are the site's own for this loop.
pub fn cautions(record: &Record, site: &[String]) -> Vec<Caution> {
    let mut list = standing(record);
    list.extend(raised(record));
    list.extend(site.iter().map(|text| caution("site", text.clone())));
    list
}

fn caution(about: &str, text: impl Into<String>) -> Caution {
    Caution {
        about: about.to_owned(),
        text: text.into(),
    }
}

fn standing(record: &Record) -> Vec<Caution> {
    let l = &record.control_loop;
    let withheld = record.document.status == Status::Withheld;
    let mut list = Vec::new();
    if record.model.is_some() {
        let [op_low, op_high] = record.test.op_tested;
        let [pv_low, pv_high] = record.test.pv_tested;
        list.push(caution(
            "range tested",
            format!(
                "{} for the range tested: OP {} to {}, PV {} to {}. Outside it, test again.",
                if withheld {
                    "The process model holds"
                } else {
                    "The settings hold"
                },
                plain(op_low, 3),
                with_unit(&plain(op_high, 3), &l.op.unit),
                engineering(pv_low, l.pv.high - l.pv.low),
                with_unit(&engineering(pv_high, l.pv.high - l.pv.low), &l.pv.unit),
            ),
        ));
    }
    list.push(caution(
        "authority",
        format!(
            "This record authorises no work. Changes to a controller go through {}. Where those differ \
             from this record they govern, as do local codes and the judgement of the licensed or \
             authorised engineer.",
            named_procedures(&record.document.procedures)
        ),
    ));
    list.push(caution(
        "entering settings",
        if withheld {
            "Nothing is recommended here: leave the settings as found until the reasons on page 1 are \
             resolved and the loop is tested again."
        } else {
            "Enter settings with the loop in manual and operations informed, unless site procedure says \
             otherwise. Watch the first set-point move to its end. For going back, the as-found settings \
             stand on page 1."
        },
    ));
    if l.safety {
        list.push(caution(
            "protective function",
            match &l.safety_procedure {
                Some(procedure) => format!(
                    "This loop takes part in a protective function. It is changed only under {procedure}, \
                     the procedure for protective systems."
                ),
                None => "This loop takes part in a protective function. It is changed only under the \
                         procedure for protective systems; until one is named, nothing is recommended."
                    .to_owned(),
            },
        ));
    }
    let tested = l.tested_on.map_or_else(
        || "the test".to_owned(),
        |date| date.format("%Y-%m-%d").to_string(),
    );
    list.push(caution(
        "later changes",
        format!(
            "If the valve, transmitter, scan time, filter or range is changed after {tested}, this record \
             no longer holds."
        ),
    ));
    list
}

/// A PV in engineering units with the places that a thousandth of its span needs.
fn engineering(value: f64, width: f64) -> String {
    fixed(value, crate::quantity::decimals_for(width / 100.0, 6))
}

/// "LM-SP-014, Permit to work, and LM-SP-021, Management of change".
pub fn named_procedures(procedures: &[Procedure]) -> String {
    let named: Vec<String> = procedures
        .iter()
        .map(|p| format!("{}, {}", p.reference, p.title))
        .collect();
    match named.as_slice() {
        [] => "the site's change and permit procedures".to_owned(),
        [one] => one.clone(),
        [first @ .., last] => format!("{}; and {last}", first.join("; ")),
    }
}

/// What the data raised, each with its figure.
fn raised(record: &Record) -> Vec<Caution> {
    let l = &record.control_loop;
    let mut list = Vec::new();
    let Some(model) = record.model.as_ref().map(|block| &block.fit) else {
        return list;
    };
    if !action_fits(record) {
        list.push(caution(
            "sign",
            "The controller action does not fit the sign of the process. Do not put this loop in \
             automatic before it is resolved.",
        ));
    }
    let sampling = record
        .steps
        .iter()
        .filter(|s| s.verdict == Verdict::Reservation)
        .flat_map(|s| &s.reasons)
        .filter(|r| r.code == ReasonCode::Samples)
        .min_by(|a, b| a.figure.unwrap_or(0.0).total_cmp(&b.figure.unwrap_or(0.0)));
    if let Some(reason) = sampling {
        list.push(caution(
            "sampling",
            format!(
                "The PV has few samples for the speed of the process: {}.",
                reason.text
            ),
        ));
    }
    if let Some(inner) = &l.inner_loop {
        list.push(caution(
            "cascade",
            format!(
                "The lag of the inner loop {inner} is part of this process model as the test showed it, with the \
                 settings that {inner} had then. Once they are changed, test this loop again."
            ),
        ));
    }
    if let Some(text) = few_steps(record) {
        list.push(caution("steps", text));
    }
    if let Some(ratio) = model.nonlinear_gain() {
        let integrates = model.kind.integrates();
        let per_minute = if integrates { 60.0 } else { 1.0 };
        let gains = record.gains_of_steps().map(|[low, high]| {
            let decimals = significant(high * per_minute, 3)
                .split_once('.')
                .map_or(0, |(_, after)| after.len());
            format!(
                "{} to {} {}{}/{}",
                fixed(low * per_minute, decimals),
                fixed(high * per_minute, decimals),
                unit(&l.pv.unit),
                if integrates { "/min" } else { "" },
                unit(&l.op.unit),
            )
        });
        list.push(caution(
            "non-linear gain",
            format!(
                "The process gain differs by a factor of {} between steps ({}). Where it is low the loop is \
                 slower than predicted, where it is high it overshoots more.",
                fixed(ratio, 1),
                gains.unwrap_or_default(),
            ),
        ));
    }
    list.extend(dead_band(record, model.kind.integrates()));
    if let Some(ratio) = model.direction_ratio {
        let (strong, weak, factor) = if ratio > 1.0 {
            ("upward", "downward", ratio)
        } else {
            ("downward", "upward", 1.0 / ratio)
        };
        list.push(caution(
            "direction",
            format!(
                "The PV answers to {strong} moves of OP {} times as much as to {weak} ones. The loop will settle \
                 differently from above and from below.",
                fixed(factor, 1),
            ),
        ));
    }
    if record.test.outliers > 0 {
        let stood = counted(
            record.test.outliers,
            "sample of the PV",
            "samples of the PV",
        );
        list.push(caution(
            "spikes",
            format!(
                "{stood} stood apart from their neighbours and were left out of readings and fits."
            ),
        ));
    }
    if record.document.status != Status::Withheld && !record.test.next_time.is_empty() {
        let advice: Vec<String> = record
            .test
            .next_time
            .iter()
            .map(|advice| format!("{} {}", advice.what, advice.how))
            .collect();
        list.push(caution(
            "next test",
            format!("At the next test: {}", advice.join(" ")),
        ));
    }
    if record.test.sigma_percent.is_none() {
        list.push(caution(
            "noise",
            format!(
                "{}, so the noise of the PV could not be assessed: the rules that compare with noise were not \
                 applied.",
                if record.test.compressed {
                    "The log was compressed"
                } else {
                    "The log shows too little of the PV at rest"
                }
            ),
        ));
    }
    list.extend(
        record
            .design
            .iter()
            .flat_map(|design| &design.remarks)
            .map(|text| caution("design", text.clone())),
    );
    list.extend(after_design(record));
    list
}

/// A dead band, in % of OP, above which a valve deserves a caution whatever the steps were.
const LARGE_DEAD_BAND_PERCENT: f64 = 1.0;

/// The caution on a dead band that is large, or large against the steps.
fn dead_band(record: &Record, integrates: bool) -> Option<Caution> {
    let valve = record.valve.filter(Valve::is_seen)?;
    let op_width = record.control_loop.op.high - record.control_loop.op.low;
    let smallest = record
        .steps
        .iter()
        .filter(|step| step.verdict != Verdict::Rejected)
        .map(|step| 100.0 * ((step.op_to - step.op_from) / op_width).abs())
        .fold(f64::INFINITY, f64::min);
    let large = valve.dead_band_percent > LARGE_DEAD_BAND_PERCENT;
    let against_steps = valve.dead_band_percent > 0.5 * smallest;
    if !large && !against_steps {
        return None;
    }
    let lost = if valve.open {
        format!("at least {} %", plain(valve.low, 2))
    } else {
        format!(
            "{} % ({} to {} %)",
            plain(valve.dead_band_percent, 2),
            plain(valve.low, 2),
            plain(valve.high, 2)
        )
    };
    let steps = if against_steps {
        format!(
            ", more than half of the smallest step ({} %)",
            plain(smallest, 2)
        )
    } else {
        String::new()
    };
    let cycles = if integrates {
        ": with integral action this integrating process will cycle"
    } else {
        ""
    };
    Some(caution(
        "dead band",
        format!("The valve loses {lost} of OP on reversal{steps}{cycles}."),
    ))
}

/// Cautions on the settings entered and on the trial.
fn after_design(record: &Record) -> Vec<Caution> {
    let mut list = Vec::new();
    let withheld = record.document.status == Status::Withheld;
    let bound = record.limits_in_force.design.worst_ms;
    if let Some(left) = &record.settings.as_left {
        if withheld {
            list.push(caution(
                "as left",
                "Settings were entered in this loop. They are printed as entered, not as recommended.",
            ));
        }
        if record.settings.as_left_differs == Some(true) {
            list.push(caution(
                "as left",
                "The settings as left differ from the recommended ones by more than 5 %. The predictions and \
                 margins printed for them are those of the settings as left.",
            ));
        }
        if let Some(worst) = left.worst_margins
            && (!worst.stable || worst.ms.is_some_and(|ms| ms > bound))
        {
            list.push(caution(
                "margins",
                match worst.ms {
                    Some(ms) => format!(
                        "With the settings as left the worst Ms over the models tested is {}; at most {} is \
                         allowed.",
                        plain(ms, 3),
                        plain(bound, 3)
                    ),
                    None => "With the settings as left the loop is not stable on every model of the test."
                        .to_owned(),
                },
            ));
        }
    }
    if withheld {
        return list;
    }
    match &record.trial {
        None => list.push(caution(
            "closed-loop trial",
            "Closed-loop trial: not assessed. What is printed of the closed loop is predicted, not measured.",
        )),
        Some(trial) if trial.oscillation.is_some() || !trial.agrees => list.push(caution(
            "closed-loop trial",
            "The closed-loop trial did not go as predicted. Until the cause is found, rely on the trial, not \
             on the prediction.",
        )),
        Some(_) => {}
    }
    let bad = record.test_log().map_or(0, |log| log.bad_samples);
    let gaps = record.test_log().map_or(0, |log| log.gaps.len());
    if gaps > 0 {
        list.push(caution(
            "log",
            format!(
                "The log of the test has {} and {}.",
                counted(bad, "bad sample", "bad samples"),
                counted(gaps, "gap", "gaps")
            ),
        ));
    }
    list
}

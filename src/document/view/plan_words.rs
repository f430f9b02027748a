//! The sentences of a plan sheet.

use super::numbers::{bound, capital, listed, number_word, sentence, tidy};
use super::plan::Units;
use super::{Entry, Heading};
use crate::display::{self, NO_BREAK, plain};
use crate::model::ProcessModel;
use crate::plan::{Basis, DecidedBy, LoggedFor, NotProposed, Plan, Size};

/// What stands where no figure is proposed.
pub(super) const AGREE: &str = "agree with operations";

/// A time as it is read off a clock: "85 s", "8 min 20 s", "33 min", "2 h 45 min".
pub(super) fn time(seconds: f64) -> String {
    let parts = |large: f64, large_unit: &str, small: f64, small_unit: &str| {
        if small == 0.0 {
            format!("{large}{NO_BREAK}{large_unit}")
        } else {
            format!("{large}{NO_BREAK}{large_unit}{NO_BREAK}{small}{NO_BREAK}{small_unit}")
        }
    };
    if seconds < 120.0 {
        return format!("{}{NO_BREAK}s", plain(seconds, 3));
    }
    let whole = libm::round(seconds);
    if whole < 7200.0 {
        return parts(libm::floor(whole / 60.0), "min", whole % 60.0, "s");
    }
    let minutes = libm::round(seconds / 60.0);
    parts(libm::floor(minutes / 60.0), "h", minutes % 60.0, "min")
}

/// "33 min", or a fitted time rounded as elsewhere.
fn fitted(seconds: f64) -> String {
    display::duration(seconds).replace(&format!(".0{NO_BREAK}"), &NO_BREAK.to_string())
}

fn interval(plan: &Plan) -> String {
    format!("{}{NO_BREAK}s", plain(plan.log_interval_s, 3))
}

/// The line that is read first.
pub(super) fn lead(plan: &Plan, units: &Units) -> Entry {
    let times = plan.times;
    match plan.size {
        Size::ToAgree {
            because: NotProposed::Protective,
        } => Entry::new(
            "No test.",
            "The loop takes part in a protective function and no procedure for it is named.",
        ),
        Size::Proposed { op_percent, .. } => {
            let count = capital(&number_word(plan.moves.len()));
            let what = if plan.integrating { "pulses" } else { "moves" };
            let label = match plan.integrating {
                true => format!("Two {what} of OP, {} each.", units.op(op_percent)),
                false => format!("{count} {what} of OP, {} each.", units.op(op_percent)),
            };
            let text = times.map_or_else(String::new, |times| {
                format!(
                    "Watch {} after each move, log every {}; {} in all.",
                    time(times.watch_s),
                    interval(plan),
                    time(times.total_s)
                )
            });
            Entry::new(label, text)
        }
        Size::ToAgree { .. } => {
            let watch = times.map_or_else(String::new, |times| {
                format!("watch {} after each move, ", time(times.watch_s))
            });
            let log = format!("log every {} or faster.", interval(plan));
            Entry::new(
                "Size of the moves: agree with operations.",
                capital(&format!("{watch}{log}")),
            )
        }
    }
}

/// What has to be done and known before the first move.
pub(super) fn before(plan: &Plan) -> Vec<String> {
    let l = &plan.control_loop;
    let procedures: Vec<String> = plan
        .document
        .procedures
        .iter()
        .map(|p| format!("{} {}", tidy(&p.reference), tidy(&p.title)))
        .collect();
    let mut texts = Vec::new();
    if l.safety {
        texts.push(match &l.safety_procedure {
            Some(procedure) => format!(
                "Protective function: released under {}. Without that the test is not done.",
                tidy(procedure)
            ),
            None => "Protective function: the procedure that governs testing it is found and named in the \
                     schedule (safety procedure). Until then the loop is not tested."
                .to_owned(),
        });
    }
    if !plan.is_for_a_test() {
        return texts;
    }
    texts.push(format!(
        "Permits and procedures in hand: {}.",
        listed(&procedures)
    ));
    texts.push(
        "Shift supervisor and panel operator have seen this sheet, agree to moves, times and limits, and know that \
         they may stop the test. Told as well: whoever runs what lies upstream and downstream."
            .to_owned(),
    );
    if let Some(inner) = &l.inner_loop {
        texts.push(format!(
            "Inner loop {inner}: tuned first, and during the test in cascade, so that it follows the moves of this \
             loop's output.",
            inner = tidy(inner)
        ));
    }
    if !l.outer_loops.is_empty() {
        let outer: Vec<String> = l.outer_loops.iter().map(|t| tidy(t)).collect();
        let (is, verb) = if outer.len() == 1 {
            ("loop", "is")
        } else {
            ("loops", "are")
        };
        texts.push(format!(
            "Outer {is} {}: {verb} in manual during the test, and tested after this loop has its new settings.",
            listed(&outer)
        ));
    }
    texts.push(
        "This loop in manual. Nothing else moves its output: no override, tracking, feed-forward or sequence. The \
         bypass of the valve is shut."
            .to_owned(),
    );
    texts.push(
        "The plant is steady, no other test runs on the same streams, and no alarm of this loop stands."
            .to_owned(),
    );
    texts.push(format!(
        "PV, OP, SP and mode are logged every {} or faster, each sample as measured: compression and \
         exception reporting off. The trend is on the screen.",
        interval(plan)
    ));
    texts
}

/// What the figures rest on.
pub(super) fn basis(plan: &Plan, units: &Units) -> Vec<Entry> {
    let mut entries = Vec::new();
    let mut add = |label: &str, text: String| entries.push(Entry::new(label, bound(&text)));
    match &plan.basis {
        Some(basis) => add("From", from(basis)),
        None => add(
            "From",
            "No earlier record of this loop could be used.".to_owned(),
        ),
    }
    if !plan.set_aside.is_empty() {
        let reasons: Vec<String> = plan
            .set_aside
            .iter()
            .map(|text| sentence(&tidy(text)))
            .collect();
        add("Not used", reasons.join(" "));
    }
    if let Some(basis) = &plan.basis
        && let Some(text) = process(basis, units)
    {
        add("Process", text);
    }
    add("Size", size(plan, units));
    add("Watch", watch(plan));
    add("Log", log(plan));
    if let Some(text) = start(plan, units) {
        add("Start", text);
    }
    if !plan.advice.is_empty() {
        let advice: Vec<String> = plan
            .advice
            .iter()
            .map(|advice| sentence(&format!("{} {}", advice.what, tidy(&advice.how))))
            .collect();
        add(
            "Last time",
            format!("The earlier record advises: {}", advice.join(" ")),
        );
    }
    entries
}

fn from(basis: &Basis) -> String {
    let tested = basis
        .tested_on
        .map_or_else(String::new, |day| format!(", tested {day}"));
    format!(
        "{} revision {} of {}{tested}; for a loop that is unchanged since.",
        tidy(&basis.number),
        tidy(&basis.revision),
        basis.date
    )
}

fn process(basis: &Basis, units: &Units) -> Option<String> {
    let mut parts = Vec::new();
    if let Some(process) = basis.process {
        parts.push(gain(&process, units));
        let mut lags: Vec<String> = [process.time_constant_s(), process.second_time_constant_s()]
            .into_iter()
            .flatten()
            .map(fitted)
            .collect();
        if !lags.is_empty() {
            let name = if lags.len() == 1 {
                "τ"
            } else {
                "τ and τ₂"
            };
            lags = vec![format!("{name} {}", listed(&lags))];
        }
        parts.extend(lags);
        parts.push(format!("θ {}", fitted(process.dead_time_s())));
    }
    if let Some(sigma) = basis.sigma_percent {
        parts.push(format!(
            "noise σ {}{NO_BREAK}% of span ({})",
            plain(sigma, 2),
            units.pv(sigma)
        ));
    }
    if let Some(dead_band) = basis.dead_band_percent {
        parts.push(format!(
            "dead band of the valve {}{NO_BREAK}%",
            plain(dead_band, 2)
        ));
    } else if basis.process.is_some() {
        parts.push("dead band of the valve not known".to_owned());
    }
    (!parts.is_empty()).then(|| sentence(&parts.join(", ")))
}

fn gain(process: &ProcessModel, units: &Units) -> String {
    let l = units.control_loop;
    let factor = (l.pv.high - l.pv.low) / (l.op.high - l.op.low);
    if process.kind().integrates() {
        let per_minute = 60.0 * process.gain();
        return format!(
            "Gain K′ {}{NO_BREAK}%/min per % ({}{NO_BREAK}{}/min per {})",
            plain(per_minute, 3),
            plain(per_minute * factor, 3),
            units.pv_unit,
            units.op_unit
        );
    }
    format!(
        "Gain K {}{NO_BREAK}%/% ({}{NO_BREAK}{}/{})",
        plain(process.gain(), 3),
        plain(process.gain() * factor, 3),
        units.pv_unit,
        units.op_unit
    )
}

fn size(plan: &Plan, units: &Units) -> String {
    let Size::Proposed {
        op_percent,
        pv_percent,
        most_pv_percent,
        signal_to_noise,
        wanted_op_percent,
        decided_by,
    } = plan.size
    else {
        return format!("{}. {}", capital(AGREE), why_not(plan));
    };
    let lag = plan
        .basis
        .as_ref()
        .and_then(|basis| basis.process)
        .and_then(|process| process.time_constant_s());
    let formula = match (plan.integrating, lag) {
        (false, _) => "20 σ/|K|",
        (true, None) => "20 σ/(|K′| (t − θ)), t the time watched,",
        (true, Some(_)) => "20 σ/(|K′| (t − θ − τ)), t the time watched,",
    };
    let wanted = format!(
        "{formula} comes to {}",
        units.op(crate::quantity::round_significant(wanted_op_percent, 3))
    );
    let decided = match decided_by {
        DecidedBy::Noise => format!("{wanted}; rounded up."),
        DecidedBy::LeastMove => format!("{wanted}; a move so small may be lost in the valve."),
        DecidedBy::DeadBand => {
            format!("{wanted}; the dead band of the valve asks for three times its width.")
        }
        DecidedBy::PvShare => format!(
            "{wanted}; it is smaller here, so that PV is moved by no more than 10 % of its span."
        ),
        DecidedBy::AllowedDeviation => {
            format!("{wanted}; it is smaller here, so that PV keeps within its allowed deviation.")
        }
        DecidedBy::OpShare => format!("{wanted}; no more than 10 % of OP is proposed at a time."),
    };
    let spread = if most_pv_percent > 1.01 * pv_percent {
        format!(
            ", up to {} where the gain is largest",
            units.pv(most_pv_percent)
        )
    } else {
        String::new()
    };
    let by = if plan.integrating {
        let slope = plan
            .moves
            .first()
            .and_then(|step| step.pv_slope_percent_per_s)
            .map_or_else(String::new, |slope| {
                format!("PV then moves at {}/min and ", units.pv(60.0 * slope.abs()))
            });
        format!(
            "{slope}has changed by {} when OP is back",
            units.pv(pv_percent)
        )
    } else {
        format!(
            "PV then changes by |K| times that, {}",
            units.pv(pv_percent)
        )
    };
    format!(
        "{} of OP: {decided} {by}{spread} ({} % of span, {} times its noise).",
        units.op(op_percent),
        plain(pv_percent, 2),
        plain(signal_to_noise, 2)
    )
}

fn why_not(plan: &Plan) -> &'static str {
    let Size::ToAgree { because } = plan.size else {
        return "";
    };
    match because {
        NotProposed::NoModel => {
            "The earlier record found no process model, so the gain is not known."
        }
        NotProposed::NoNoise => {
            "The earlier record could not assess the noise of PV, so a size cannot be worked out. PV should change by \
             at least twenty times its noise."
        }
        NotProposed::NoRecord | NotProposed::Protective => {
            "Gain and noise are not known. PV should change by at least twenty times its noise."
        }
    }
}

fn watch(plan: &Plan) -> String {
    let Some(times) = plan.times else {
        return if plan.integrating {
            "Agree with operations: OP off balance until the slope of PV is plain, back before PV leaves what is allowed."
        } else {
            "Agree with operations: after each move until PV is at rest, and then half as long again."
        }
        .to_owned();
    };
    let process = plan.basis.as_ref().and_then(|basis| basis.process);
    let second = process.is_some_and(|process| process.second_time_constant_s().is_some());
    let lag = process.is_some_and(|process| process.time_constant_s().is_some());
    let rule = match (plan.integrating, second, lag) {
        (false, _, _) if plan.is_watched_for_hands() => {
            "more than the process needs: time to read, write and move"
        }
        (false, true, _) => "θ + 4 (τ + τ₂), rounded up",
        (false, false, _) => "θ + 4 τ, rounded up",
        (true, _, true) => "at least θ + 4 τ and 5 θ, and as long as the noise asks for",
        (true, _, false) => "at least 5 θ, and as long as the noise asks for",
    };
    format!(
        "{} after each move ({rule}), and as long with PV at rest before the first.",
        time(times.watch_s)
    )
}

fn log(plan: &Plan) -> String {
    let scan = format!("{}{NO_BREAK}s", plain(plan.control_loop.scan_s, 3));
    let why = match plan.logged_for {
        LoggedFor::TimeConstant => "a twentieth of τ".to_owned(),
        LoggedFor::DeadTime => "a fifth of θ".to_owned(),
        LoggedFor::Scan => "the scan: the process has neither lag nor dead time".to_owned(),
        LoggedFor::NoModel => format!(
            "the scan of {scan}, since the process is not known; or as fast as the trend system can"
        ),
    };
    let faster = if plan.log_interval_s < plan.control_loop.scan_s {
        format!(
            " That is faster than the scan of {scan}: the log is taken where PV is measured so often, or as fast as it can be."
        )
    } else {
        String::new()
    };
    format!("Every {} or faster ({why}).{faster}", interval(plan))
}

fn start(plan: &Plan, units: &Units) -> Option<String> {
    let l = units.control_loop;
    let room = plan.limits.map(|limits| {
        let [op_low, op_high] = limits.op_start_percent;
        let [pv_low, pv_high] = limits.pv_start_percent;
        format!(
            "OP between {} and {}, PV between {} and {}, so that nothing ends within 5 % of the end of a range.",
            units.op_at(op_low),
            display::with_unit(&units.op_at(op_high), &units.op_unit),
            units.pv_at(pv_low),
            display::with_unit(&units.pv_at(pv_high), &units.pv_unit)
        )
    });
    let tested = plan.basis.as_ref().map(|basis| {
        let percent =
            |value: f64, of: &crate::record::Range| (value - of.low) * 100.0 / (of.high - of.low);
        let [op_low, op_high] = basis.op_tested.map(|op| units.op_at(percent(op, &l.op)));
        let [pv_low, pv_high] = basis.pv_tested.map(|pv| units.pv_at(percent(pv, &l.pv)));
        format!(
            "The earlier test ran at OP {op_low} to {}, PV {pv_low} to {}.",
            display::with_unit(&op_high, &units.op_unit),
            display::with_unit(&pv_high, &units.pv_unit)
        )
    });
    let texts: Vec<String> = [room, tested].into_iter().flatten().collect();
    (!texts.is_empty()).then(|| texts.join(" "))
}

/// Why the moves come in this order, and how each is made.
pub(super) fn on_the_series(plan: &Plan) -> String {
    let one = if plan.integrating {
        "Each move at once, not in parts. While OP is off its start, PV runs; moves 2 and 4 bring it to a stop, and the \
         second pulse takes it back to where it began. If PV does not quite stop after 2 and 4, which turn back, but \
         takes its full slope after 3, which goes on, the valve has play."
    } else {
        "Each move at once, not in parts; the next only when PV is at rest. Moves 2 and 4 turn back and move 3 goes on: \
         what PV answers less to 2 and 4 is the play of the valve."
    };
    bound(&format!(
        "{one} Where operations would rather begin downwards, all four are turned round. Time and values are written \
         down before each move and at the end."
    ))
}

/// What the limits mean.
pub(super) fn on_limits(plan: &Plan) -> String {
    let proposed = if plan.limits.is_some() {
        "Proposed from the change expected (one and a half times, twice), to be agreed"
    } else {
        "To be agreed"
    };
    let run = plan
        .limits
        .and_then(|limits| limits.time_to_abort_s)
        .map_or_else(String::new, |seconds| {
            format!(
                " If OP is left off its start, PV is at the abort limit after about {}.",
                fitted(seconds)
            )
        });
    bound(&format!(
        "Hold: no further move before it is understood. Abort: OP back to its start at once, the test is over. {proposed} \
         and written in; never beyond an alarm or a trip. Hold also before move 1 and before move 3: go on only when \
         operations say so.{run}"
    ))
}

/// What has to be done when the last watch is over.
pub(super) fn after(plan: &Plan, found: &Heading) -> Vec<String> {
    let mut texts = vec![format!(
        "OP where it began, PV at rest; mode and set point as found (see {}). Operations told that the test is over.",
        found.number
    )];
    let file = match &plan.log.file {
        Some(file) if plan.log.file_is_there => format!(
            "a new file, which then stands in the schedule in place of {}",
            tidy(file)
        ),
        Some(file) => format!("{}, as the schedule says", tidy(file)),
        None => "a file in the folder logs of the job".to_owned(),
    };
    let margin = plan.times.map_or_else(
        || "the time at rest".to_owned(),
        |times| time(times.before_s),
    );
    let headings = if plan.log.columns.is_empty() {
        String::new()
    } else {
        let columns: Vec<String> = plan
            .log
            .columns
            .iter()
            .map(|(role, heading)| format!("{role} \"{}\"", tidy(heading)))
            .collect();
        format!(" Headings as in the schedule: {}.", columns.join(", "))
    };
    texts.push(format!(
        "Exported to {file}: time, PV, OP, SP and mode, one row for each sample every {}, in full digits, from {margin} before \
         move 1 to the end of the last watch.{headings}",
        interval(plan)
    ));
    if !plan.log.to_fill_in.is_empty() {
        texts.push(format!(
            "Into the schedule: {}.",
            listed(&plan.log.to_fill_in)
        ));
    }
    texts.push(
        "asleft inspect shows whether the log can be read, asleft check what the test is worth."
            .to_owned(),
    );
    texts
}

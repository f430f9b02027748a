//! The cautions, and what the record rests on: procedures, revisions, logs, limits, program, seal.

use super::numbers::{bound, capital, count, sentence, tidy};
use super::{Context, Entry, Heading, native, span_of};
use crate::design::{Aim, DesignBounds};
use crate::display::{self, NO_BREAK};
use crate::identify::VerdictBounds;
use crate::record::{Log, LogRole};
use crate::settings::ActsOn;
use crate::trace::Moment;
use serde::Serialize;

/// The cautions.
#[derive(Debug, Serialize)]
pub(super) struct Cautions {
    heading: Heading,
    texts: Vec<String>,
}

/// The basis.
#[derive(Debug, Serialize)]
pub(super) struct Basis {
    heading: Heading,
    /// Number and title.
    procedures: Vec<[String; 2]>,
    /// Revision, date, reason.
    revisions: Vec<[String; 3]>,
    particulars: Vec<Entry>,
    logs: Vec<LogView>,
    verify: String,
    entries: Vec<Entry>,
}

#[derive(Debug, Serialize)]
struct LogView {
    role: &'static str,
    /// Each source file with its digest.
    sources: Vec<Source>,
    lines: Vec<String>,
    samples: String,
    samples_sha256: String,
}

#[derive(Debug, Serialize)]
struct Source {
    text: String,
    sha256: String,
}

pub(super) fn cautions(context: &Context) -> Cautions {
    Cautions {
        heading: context.parts.first_of(&[super::CAUTIONS]),
        texts: context
            .record
            .cautions
            .iter()
            .map(|c| sentence(&bound(&c.text)))
            .collect(),
    }
}

pub(super) fn basis(context: &Context) -> Basis {
    let record = context.record;
    let document = &record.document;
    let mut entries = vec![
        Entry::new("Limits", design_bounds(&record.limits_in_force.design)),
        Entry::new("Verdicts", verdict_bounds(&record.limits_in_force.verdict)),
        Entry::new("Program", tidy(&record.provenance.program)),
    ];
    if !record.provenance.seal.is_empty() {
        entries.push(Entry::new("Seal", tidy(&record.provenance.seal)));
    }
    Basis {
        heading: context.parts.first_of(&[super::BASIS]),
        procedures: document
            .procedures
            .iter()
            .map(|p| [tidy(&p.reference), tidy(&p.title)])
            .collect(),
        revisions: document
            .revisions
            .iter()
            .map(|r| [tidy(&r.revision), r.date.to_string(), tidy(&r.reason)])
            .collect(),
        particulars: particulars(context),
        logs: record.logs.iter().map(log).collect(),
        verify: verify(context),
        entries,
    }
}

fn verify(context: &Context) -> String {
    let samples: Vec<String> = context
        .record
        .logs
        .iter()
        .map(|l| tidy(&l.samples_file))
        .filter(|name| !name.is_empty())
        .collect();
    let samples = if samples.is_empty() {
        String::new()
    } else {
        format!(", the samples used ({})", samples.join(", "))
    };
    format!(
        "What is needed to check this record is attached to this PDF: record.json with all figures and the \
         SHA-256 of each file of samples{samples}, and the row of the loop schedule. The seal below is the \
         SHA-256 of record.json itself, without its field provenance.seal and in the canonical form of \
         RFC 8785. Whoever runs the program of that version on the same logs and schedule gets the same figures."
    )
}

// ---- the loop

fn particulars(context: &Context) -> Vec<Entry> {
    let l = &context.record.control_loop;
    let mut entries = Vec::new();
    let mut add = |label: &str, text: String| {
        if !text.is_empty() {
            entries.push(Entry::new(label, text));
        }
    };
    add(
        "Ranges",
        format!("PV {}, OP {}.", super::range(&l.pv), super::range(&l.op)),
    );
    add("Controller", controller(context));
    add("Purpose", purpose(context));
    let mut cascade = Vec::new();
    if let Some(inner) = &l.inner_loop {
        cascade.push(format!("sets {} (inner loop)", tidy(inner)));
    }
    if !l.outer_loops.is_empty() {
        let outer: Vec<String> = l.outer_loops.iter().map(|t| tidy(t)).collect();
        cascade.push(format!(
            "set by {} (outer loop)",
            super::numbers::listed(&outer)
        ));
    }
    add("Cascade", capital(&cascade.join("; ")));
    if l.safety {
        add(
            "Protective",
            match &l.safety_procedure {
                Some(procedure) => format!(
                    "Takes part in a protective function; changed only under {}.",
                    tidy(procedure)
                ),
                None => "Takes part in a protective function; no procedure is named.".to_owned(),
            },
        );
    }
    for (key, value) in &l.particulars {
        // The controller stands in the title block and, with its form, above.
        if key != "controller" {
            add(&capital(&tidy(key)), tidy(value));
        }
    }
    entries
}

fn controller(context: &Context) -> String {
    let l = &context.record.control_loop;
    let on = |acts: ActsOn| match acts {
        ActsOn::Error => "error",
        ActsOn::Pv => "PV",
    };
    let filter = if l.d_filter_n > 0.0 {
        format!(
            "filtered with N{NO_BREAK}={NO_BREAK}{}",
            display::plain(l.d_filter_n, 4)
        )
    } else {
        "unfiltered".to_owned()
    };
    let logged = if l.pv_filter_s > 0.0 {
        if l.pv_filter_in_log {
            " (PV logged after it)"
        } else {
            " (PV logged before it)"
        }
    } else {
        ""
    };
    format!(
        "{} form; P acts on {}, D on {}, {filter}; executes every {}{NO_BREAK}s; PV filter {}{logged}.",
        capital(native::form(l.form)),
        on(l.p_on),
        on(l.d_on),
        display::plain(l.scan_s, 4),
        native::filter(l.left_pv_filter_s.unwrap_or(l.pv_filter_s)),
    )
}

fn purpose(context: &Context) -> String {
    let l = &context.record.control_loop;
    let mut text = match l.aim {
        Aim::SetPoint => "To follow the set point".to_owned(),
        Aim::Load => "To hold PV against load changes".to_owned(),
        Aim::Averaging => {
            let mut text = "To let the level move and keep the flow steady".to_owned();
            if let Some(deviation) = l.allowed_deviation {
                text.push_str(&format!(
                    ", by at most {}{NO_BREAK}{}",
                    display::plain(deviation, 4),
                    context.pv_unit
                ));
            }
            if let Some(load) = l.expected_load_percent {
                text.push_str(&format!(
                    " for a load of {}{NO_BREAK}% OP",
                    display::plain(load, 4)
                ));
            }
            text
        }
    };
    if let Some(target) = l.target_s {
        text.push_str(&format!(
            "; a closed-loop time constant of {} was asked for",
            display::with_unit(&display::plain(target, 4), "s")
        ));
    }
    if let Some(reason) = &l.target_reason {
        text.push_str(&format!(" ({})", tidy(reason)));
    }
    if l.derivative {
        text.push_str("; derivative may be used");
    }
    sentence(&text)
}

// ---- the logs

fn log(log: &Log) -> LogView {
    let named = |file: &str, sheet: &Option<String>| match sheet {
        Some(sheet) => format!("{}, sheet {}", tidy(file), tidy(sheet)),
        None => tidy(file),
    };
    let rows = |rows: usize| {
        let unit = if rows == 1 { "row" } else { "rows" };
        format!("{}{NO_BREAK}{unit}", count(rows))
    };
    let first = if log.also.is_empty() {
        format!("{}: {}", named(&log.file, &log.sheet), rows(log.rows))
    } else {
        named(&log.file, &log.sheet)
    };
    let mut sources = vec![Source {
        text: first,
        sha256: tidy(&log.sha256),
    }];
    sources.extend(log.also.iter().map(|source| Source {
        text: format!(
            "{}: {}",
            named(&source.file, &source.sheet),
            rows(source.rows)
        ),
        sha256: tidy(&source.sha256),
    }));
    let mut used = format!("{}{NO_BREAK}samples used", count(log.samples));
    if !log.also.is_empty() {
        used = format!("{} together, {used}", rows(log.rows));
    }
    used.push_str(&format!(", {}{NO_BREAK}bad", count(log.bad_samples)));
    if !log.bad_by_cause.is_empty() {
        let causes: Vec<String> = log
            .bad_by_cause
            .iter()
            .map(|(cause, n)| format!("{} {}", count(*n), tidy(cause)))
            .collect();
        used.push_str(&format!(" ({})", causes.join(", ")));
    }
    if let Some(gaps) = gaps(log) {
        used.push_str(&format!("; {gaps}"));
    }
    let mut lines = vec![format!(
        "{}, every {}{NO_BREAK}s: {used}",
        capital(&span_of(log, true)),
        display::plain(log.interval_s, 3)
    )];
    lines.extend(log.notes.iter().map(|note| sentence(&bound(note))));
    LogView {
        role: match log.role {
            LogRole::Test => "Step test",
            LogRole::Trial => "Closed-loop trial",
        },
        sources,
        lines,
        samples: tidy(&log.samples_file),
        samples_sha256: tidy(&log.samples_sha256),
    }
}

fn gaps(log: &Log) -> Option<String> {
    let length = |from: Moment, to: Moment| match (from, to) {
        (Moment::Dated(from), Moment::Dated(to)) => (to - from).as_seconds_f64(),
        (from, to) => super::elapsed(to) - super::elapsed(from),
    };
    let longest = log
        .gaps
        .iter()
        .map(|gap| length(gap.from, gap.to))
        .fold(0.0, f64::max);
    match log.gaps.len() {
        0 => None,
        1 => Some(format!("one gap of {}", display::duration(longest))),
        n => Some(format!(
            "{n}{NO_BREAK}gaps, the longest {}",
            display::duration(longest)
        )),
    }
}

// ---- the limits in force

/// Figures with their defaults beside those that differ.
struct Bounds {
    parts: Vec<String>,
    all_default: bool,
}

impl Bounds {
    fn new() -> Self {
        Bounds {
            parts: Vec::new(),
            all_default: true,
        }
    }

    fn add(&mut self, label: &str, value: f64, default: f64, unit: &str) {
        let figure = |v: f64| display::with_unit(&display::plain(v, 4), unit);
        let mut part = format!("{label} {}", figure(value));
        if value != default {
            part.push_str(&format!(" (default {})", figure(default)));
            self.all_default = false;
        }
        self.parts.push(part);
    }

    fn add_pair(&mut self, label: &str, value: [f64; 2], default: [f64; 2], unit: &str) {
        let figure = |v: [f64; 2]| {
            display::with_unit(
                &format!("{} / {}", display::plain(v[0], 4), display::plain(v[1], 4)),
                unit,
            )
        };
        let mut part = format!("{label} {}", figure(value));
        if value != default {
            part.push_str(&format!(" (default {})", figure(default)));
            self.all_default = false;
        }
        self.parts.push(part);
    }

    fn told(self, before: &str) -> String {
        let head = if self.all_default {
            "The defaults"
        } else {
            "Differing from the defaults"
        };
        format!("{head}{before}: {}.", self.parts.join("; "))
    }
}

fn design_bounds(of: &DesignBounds) -> String {
    let d = DesignBounds::default();
    let mut bounds = Bounds::new();
    bounds.add("Ms at most", of.ms, d.ms, "");
    bounds.add("Ms of every model at most", of.worst_ms, d.worst_ms, "");
    bounds.add("dead times in τc at least", of.dead_time, d.dead_time, "");
    bounds.add("scans in τc at least", of.scan, d.scan, "");
    bounds.add(
        "inner-loop time constants in τc at least",
        of.inner,
        d.inner,
        "",
    );
    bounds.add(
        "process over closed-loop time constant at most",
        of.time_constant,
        d.time_constant,
        "",
    );
    bounds.add(
        "OP moved by noise (sd) at most",
        of.noise_percent,
        d.noise_percent,
        "%",
    );
    bounds.add(
        "OP moved at once by 1\u{a0}% of set point at most",
        of.op_move_percent,
        d.op_move_percent,
        "%",
    );
    bounds.told("")
}

fn verdict_bounds(of: &VerdictBounds) -> String {
    let d = VerdictBounds::default();
    let mut bounds = Bounds::new();
    bounds.add_pair(
        "change of PV below",
        of.change_over_sigma,
        d.change_over_sigma,
        "σ",
    );
    bounds.add_pair("drift above", of.drift_percent, d.drift_percent, "%");
    bounds.add_pair("watched below", of.watched_tau, d.watched_tau, "τ");
    bounds.add_pair(
        "integrating, watched below",
        of.watched_theta,
        d.watched_theta,
        "θ",
    );
    bounds.add_pair(
        "samples per τ below",
        of.samples_per_tau,
        d.samples_per_tau,
        "",
    );
    bounds.add_pair("bad samples above", of.bad_percent, d.bad_percent, "%");
    bounds.add_pair("misfit above", of.misfit_percent, d.misfit_percent, "%");
    bounds.told(" (reservation / rejected)")
}

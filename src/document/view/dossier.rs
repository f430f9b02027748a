//! The dossier: cover, register, open items, page for operations, settings to enter.

use super::numbers::{Cell, bound, capital, listed, number_word, sentence, tidy};
use super::process::slope_unit;
use super::summary::ms;
use super::{
    Context, DocumentView, Entry, Field, RecordView, SignatureView, native, operations, page_name,
    sign_off, status_word,
};
use crate::display::{self, NO_BREAK};
use crate::document::{DocumentError, DossierInput, DossierRecord};
use crate::record::{Record, Status};
use crate::settings::ProportionalUnit;
use serde::Serialize;

/// Everything a dossier prints.
#[derive(Debug, Serialize)]
pub(in crate::document) struct DossierView {
    document: DocumentView,
    title: String,
    header: String,
    running: String,
    logo: Option<String>,
    verdict: Entry,
    /// Status, number of loops, their tags.
    counts: Vec<[String; 3]>,
    signatures: Vec<SignatureView>,
    register: Vec<RegisterRow>,
    register_note: String,
    open: Vec<Entry>,
    operations: Option<Operations>,
    enter: Option<Enter>,
    records: Vec<RecordView>,
}

#[derive(Debug, Serialize)]
struct RegisterRow {
    id: String,
    tag: String,
    service: String,
    found: Vec<String>,
    left: Vec<String>,
    model: Vec<String>,
    ms: String,
    status: String,
    /// Whether the status wants action.
    open: bool,
}

#[derive(Debug, Serialize)]
struct Operations {
    intro: String,
    rows: Vec<operations::Row>,
    call: String,
}

#[derive(Debug, Serialize)]
struct Enter {
    intro: String,
    loops: Vec<EnterLoop>,
}

#[derive(Debug, Serialize)]
struct EnterLoop {
    tag: String,
    form: String,
    /// What stands over entering this loop's settings; empty where nothing does.
    under: String,
    rows: Vec<super::numbers::Row>,
}

/// The records with every inner loop before the loops that cascade to it, else in the order given.
pub(in crate::document) fn inner_first<'a>(
    records: &[DossierRecord<'a>],
) -> Vec<DossierRecord<'a>> {
    fn place<'a>(
        index: usize,
        records: &[DossierRecord<'a>],
        placed: &mut Vec<bool>,
        out: &mut Vec<DossierRecord<'a>>,
    ) {
        if std::mem::replace(&mut placed[index], true) {
            return;
        }
        let inner = records[index].record.control_loop.inner_loop.as_deref();
        if let Some(at) = inner.and_then(|tag| {
            records
                .iter()
                .position(|r| r.record.control_loop.tag == tag)
        }) {
            place(at, records, placed, out);
        }
        out.push(records[index]);
    }
    // An inner loop stands directly before its first outer loop, so it waits for that loop where
    // the outer one comes later in the schedule.
    let mut placed = vec![false; records.len()];
    let mut out = Vec::with_capacity(records.len());
    for (index, part) in records.iter().enumerate() {
        let l = &part.record.control_loop;
        let waits = records
            .iter()
            .skip(index + 1)
            .any(|other| other.record.control_loop.inner_loop.as_deref() == Some(l.tag.as_str()));
        if !waits {
            place(index, records, &mut placed, &mut out);
        }
    }
    // Whatever waits for a loop that waits for it.
    for index in 0..records.len() {
        place(index, records, &mut placed, &mut out);
    }
    out
}

pub(in crate::document) fn dossier(
    input: &DossierInput,
    records: &[DossierRecord],
    views: Vec<RecordView>,
    logo: Option<String>,
) -> Result<DossierView, DocumentError> {
    let contexts: Vec<Context> = records
        .iter()
        .map(|part| Context::new(part.record, part.figures, ""))
        .collect::<Result<_, _>>()?;
    let complete = input.not_recorded.is_empty()
        && contexts
            .iter()
            .all(|c| c.record.document.status == Status::ForSignature);
    let status = if complete {
        Status::ForSignature
    } else {
        Status::Draft
    };
    let register = contexts
        .iter()
        .zip(&views)
        .map(|(context, view)| register_row(context, view))
        .collect();
    Ok(DossierView {
        document: document(input, status),
        title: tidy(&input.title),
        header: header(&contexts, &input.not_recorded, complete),
        running: input
            .area
            .as_deref()
            .map_or_else(|| tidy(&input.plant), tidy),
        logo,
        verdict: verdict(&contexts, &input.not_recorded, complete),
        counts: counts(&contexts, &input.not_recorded),
        signatures: sign_off(&input.signatures),
        register,
        register_note: register_note(&contexts, &input.not_recorded),
        open: open(&contexts, &input.not_recorded),
        operations: operations_page(input, &contexts),
        enter: enter(input, &contexts),
        records: views,
    })
}

fn document(input: &DossierInput, status: Status) -> DocumentView {
    let named = |role: &str| {
        input
            .signatures
            .iter()
            .find(|s| s.role.to_lowercase().starts_with(role))
            .and_then(|s| s.name.as_deref())
            .map(tidy)
            .unwrap_or_default()
    };
    let creator = input
        .signatures
        .first()
        .and_then(|s| s.name.as_deref())
        .map(tidy);
    let status = status_word(status);
    let text = |value: &Option<String>| value.as_deref().map(tidy).unwrap_or_default();
    DocumentView {
        kind: "Loop-tuning dossier",
        title: format!("{} {}", tidy(&input.number), tidy(&input.title)),
        number: tidy(&input.number),
        revision: tidy(&input.revision),
        date: input.date.to_string(),
        status,
        owner: tidy(&input.owner),
        page: page_name(input.page),
        authors: creator.iter().cloned().collect(),
        keywords: vec![
            tidy(&input.number),
            format!("revision {}", tidy(&input.revision)),
            status.to_lowercase(),
        ],
        fields: vec![
            vec![
                Field::new("Legal owner", tidy(&input.owner), 2),
                Field::new("Plant", tidy(&input.plant), 2),
                Field::optional("Area", text(&input.area), 2),
            ],
            vec![
                Field::new("Document number", tidy(&input.number), 2),
                Field::new("Revision", tidy(&input.revision), 1),
                Field::new("Date of issue", input.date.to_string(), 1),
                Field::new("Status", status, 1),
                Field {
                    label: "Sheet",
                    value: None,
                    span: 1,
                },
            ],
            vec![
                Field::new("Created by", creator.unwrap_or_default(), 1),
                Field::new("Approved by", named("approved"), 1),
                Field::optional("Client", text(&input.client), 4),
            ],
        ],
    }
}

fn with_status(contexts: &[Context], status: Status) -> Vec<String> {
    contexts
        .iter()
        .filter(|c| c.record.document.status == status)
        .map(|c| tidy(&c.record.control_loop.tag))
        .collect()
}

/// "3 loops are withheld and 1 is open".
fn not_complete(contexts: &[Context], not_recorded: &[String]) -> String {
    let mut parts = Vec::new();
    for (n, word) in [
        (not_recorded.len(), "without a record"),
        (with_status(contexts, Status::Withheld).len(), "withheld"),
        (with_status(contexts, Status::Draft).len(), "open"),
    ] {
        if n == 0 {
            continue;
        }
        let verb = if n == 1 { "is" } else { "are" };
        let loops = if parts.is_empty() {
            display::counted(n, "loop", "loops")
        } else {
            n.to_string()
        };
        parts.push(format!("{loops} {verb} {word}"));
    }
    listed(&parts)
}

fn header(contexts: &[Context], not_recorded: &[String], complete: bool) -> String {
    if complete {
        String::new()
    } else {
        format!("Draft: {}", not_complete(contexts, not_recorded))
    }
}

fn verdict(contexts: &[Context], not_recorded: &[String], complete: bool) -> Entry {
    let all = contexts.len() + not_recorded.len();
    if complete {
        let loops = match all {
            1 => "The loop is".to_owned(),
            n => format!("All {} loops are", number_word(n)),
        };
        return Entry::new("For signature.", format!("{loops} for signature."));
    }
    let ready = with_status(contexts, Status::ForSignature).len();
    let verb = if ready == 1 || all == 1 { "is" } else { "are" };
    Entry::new(
        "Draft.",
        format!(
            "{ready} of {} {verb} for signature; {}.",
            display::counted(all, "loop", "loops"),
            not_complete(contexts, not_recorded)
        ),
    )
}

fn counts(contexts: &[Context], not_recorded: &[String]) -> Vec<[String; 3]> {
    [Status::ForSignature, Status::Draft, Status::Withheld]
        .into_iter()
        .map(|status| (status_word(status), with_status(contexts, status)))
        .chain([(
            "Not recorded",
            not_recorded.iter().map(|tag| tidy(tag)).collect(),
        )])
        .filter(|(_, tags)| !tags.is_empty())
        .map(|(status, tags)| [status.to_owned(), tags.len().to_string(), tags.join(", ")])
        .collect()
}

// ---- register

fn register_row(context: &Context, view: &RecordView) -> RegisterRow {
    let record = context.record;
    let l = &record.control_loop;
    let mut service = tidy(&l.service);
    if let Some(inner) = &l.inner_loop {
        service.push_str(&format!(" (outer of {})", tidy(inner)));
    } else if let [outer] = l.outer_loops.as_slice() {
        service.push_str(&format!(" (inner of {})", tidy(outer)));
    }
    let settings = &record.settings;
    RegisterRow {
        id: view.id.clone(),
        tag: tidy(&l.tag),
        service,
        found: native::short(l, settings.as_found.native),
        left: settings
            .as_left
            .as_ref()
            .map(|b| {
                let mut typed = native::short(l, b.native);
                if context.withheld() {
                    typed.push("not recommended".to_owned());
                }
                typed
            })
            .unwrap_or_default(),
        model: model_in_short(record),
        ms: if context.withheld() {
            super::numbers::NONE.to_owned()
        } else {
            ms(context.after().and_then(|b| b.worst_margins)).text
        },
        status: status_word(record.document.status).to_owned(),
        open: record.document.status != Status::ForSignature,
    }
}

/// "K 0.93", "τ 3.3 min", "θ 24 s".
fn model_in_short(record: &Record) -> Vec<String> {
    let Some(block) = &record.model else {
        return vec!["none: no usable step".to_owned()];
    };
    let fit = &block.fit;
    let mut parts = Vec::new();
    let gain = fit.gain.value;
    if fit.kind.integrates() {
        let unit = slope_unit(gain);
        parts.push("integrates".to_owned());
        parts.push(format!(
            "K′{NO_BREAK}{}{NO_BREAK}/{}",
            display::significant(gain * unit.factor(), 2),
            unit.sign()
        ));
    } else {
        parts.push(format!("K{NO_BREAK}{}", display::significant(gain, 2)));
    }
    for (symbol, time) in [
        ("τ", fit.time_constant_s),
        ("τ₂", fit.second_time_constant_s),
        ("θ", Some(fit.dead_time_s)),
    ] {
        if let Some(time) = time {
            parts.push(format!(
                "{symbol}{NO_BREAK}{}",
                display::duration(time.value)
            ));
        }
    }
    parts
}

fn register_note(contexts: &[Context], not_recorded: &[String]) -> String {
    let mut notes = Vec::new();
    if contexts
        .iter()
        .any(|c| c.record.control_loop.p_as == ProportionalUnit::Band)
    {
        notes.push("PB: proportional band.".to_owned());
    }
    notes.push(
        "Settings in each controller’s own form and units: first the gain or band, then the integral time, \
         or with a stroke before the unit the reset rate, then the derivative time where it is used. \
         Process model: gain in % of PV for 1\u{a0}% of OP. Ms of the worst model, settings as left or to enter."
            .to_owned(),
    );
    if contexts
        .iter()
        .any(|c| c.record.control_loop.inner_loop.is_some())
    {
        notes.push("Cascade pairs stand together, inner loop first.".to_owned());
    }
    if !not_recorded.is_empty() {
        let tags: Vec<String> = not_recorded.iter().map(|tag| tidy(tag)).collect();
        notes.push(format!("Without a record: {}.", listed(&tags)));
    }
    notes.join(" ")
}

fn open(contexts: &[Context], not_recorded: &[String]) -> Vec<Entry> {
    let missing = not_recorded.iter().map(|tag| {
        Entry::new(
            tidy(tag),
            "There is no record of this loop: it could not be read or made.",
        )
    });
    contexts
        .iter()
        .filter(|c| !c.record.document.open_items.is_empty())
        .map(|c| {
            let texts: Vec<String> = c
                .record
                .document
                .open_items
                .iter()
                .map(|item| sentence(&bound(&item.text)))
                .collect();
            Entry::new(tidy(&c.record.control_loop.tag), texts.join(" "))
        })
        .chain(missing)
        .collect()
}

// ---- operations and faceplate

fn operations_page(input: &DossierInput, contexts: &[Context]) -> Option<Operations> {
    let rows: Vec<operations::Row> = contexts.iter().filter_map(operations::row).collect();
    if rows.is_empty() {
        return None;
    }
    let whom = input
        .signatures
        .first()
        .and_then(|s| s.name.as_deref())
        .map_or_else(
            || "the engineer in charge of these loops".to_owned(),
            |name| {
                format!(
                    "{}, who prepared this dossier, or the engineer in charge",
                    tidy(name).replace(' ', "\u{a0}")
                )
            },
        );
    Some(Operations {
        intro: format!(
            "What the new controller settings of {} mean for the control room. Loops not listed work as before. After \
             a change of set point leave it alone for the time shown.",
            input.date.format("%B %Y")
        ),
        rows,
        call: format!(
            "Questions, or a loop that does not do as written here: put it in manual as site procedure allows \
             and call {whom}. The old settings stand on the first page of each record."
        ),
    })
}

fn enter(input: &DossierInput, contexts: &[Context]) -> Option<Enter> {
    let loops: Vec<EnterLoop> = contexts.iter().filter_map(enter_loop).collect();
    if loops.is_empty() {
        return None;
    }
    let procedures: Vec<String> = input
        .procedures
        .iter()
        .map(|p| tidy(&p.reference))
        .collect();
    let under = if procedures.is_empty() {
        String::new()
    } else {
        format!(", under {}", listed(&procedures))
    };
    Some(Enter {
        intro: format!(
            "One loop at a time, in manual{under}. Compare “found” with the faceplate first: where it \
             differs, stop. Tick each value when it has been entered and read back."
        ),
        loops,
    })
}

/// What governs a loop that takes part in a protective function, in plain words.
pub(super) fn protective(context: &Context) -> Option<String> {
    let l = &context.record.control_loop;
    let procedure = l.safety_procedure.as_deref().map(tidy);
    l.safety.then(|| match procedure {
        Some(procedure) => format!("Protective function: only under {procedure}."),
        None => "Protective function: only under the procedure for protective systems.".to_owned(),
    })
}

/// Settings recommended and not entered; never those of a withheld loop.
fn enter_loop(context: &Context) -> Option<EnterLoop> {
    let settings = &context.record.settings;
    if context.withheld() || settings.as_left.is_some() {
        return None;
    }
    let recommended = settings.recommended.as_ref()?;
    let l = &context.record.control_loop;
    let found = native::settings(l, settings.as_found.native);
    let typed = native::settings(l, recommended.native);
    // What the settings were worked out for goes first: entered without it they would be wrong.
    let mut rows = Vec::new();
    if let Some(left) = l.left_action.filter(|left| *left != l.action) {
        rows.push(super::numbers::Row::new(
            "Action",
            vec![
                Cell::words(native::action(l.action)),
                Cell::words(native::action(left)).bold(true),
            ],
        ));
    }
    if let Some(left) = l.left_pv_filter_s.filter(|left| *left != l.pv_filter_s) {
        rows.push(super::numbers::Row::new(
            "PV filter",
            vec![
                Cell::words(native::filter(l.pv_filter_s)),
                Cell::words(native::filter(left)).bold(true),
            ],
        ));
    }
    let settings = found
        .into_iter()
        .zip(typed)
        .filter(|((_, found), (_, typed))| found.text != "off" || typed.text != "off")
        .map(|((named, found), (_, typed))| {
            super::numbers::Row::new(named.label, vec![found, typed.bold(true)])
        });
    rows.extend(settings);
    Some(EnterLoop {
        tag: tidy(&l.tag),
        form: format!("{} form", capital(native::form(l.form))),
        under: protective(context).unwrap_or_default(),
        rows,
    })
}

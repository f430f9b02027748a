//! The strings of a plan sheet.

use super::native::{self, Named};
use super::numbers::{self, bound, decimals_to_show, listed, sentence, tidy};
use super::plan_words as words;
use super::{DocumentView, Entry, Field, Heading, SignatureView};
use crate::display::{self, NO_BREAK};
use crate::plan::{Limits, Move, Plan, SEAL_KEYWORD, Size};
use crate::record::Loop;
use serde::Serialize;

/// Everything a plan sheet prints.
#[derive(Debug, Serialize)]
pub(in crate::document) struct PlanView {
    document: DocumentView,
    tag: String,
    service: String,
    /// The site's logo.
    pub(in crate::document) logo: Option<String>,
    lead: Entry,
    about: Listing,
    basis: Option<Listing>,
    before: Steps,
    found: FoundPart,
    test: Option<TestPart>,
    limits: Option<LimitsPart>,
    after: Option<Steps>,
    cautions: Steps,
    sign_off: Heading,
    signatures: Vec<SignatureView>,
}

/// A heading over labelled lines.
#[derive(Debug, Serialize)]
struct Listing {
    heading: Heading,
    entries: Vec<Entry>,
}

/// A heading over numbered or ticked lines.
#[derive(Debug, Serialize)]
struct Steps {
    heading: Heading,
    texts: Vec<String>,
}

/// The column to fill in at the controller.
#[derive(Debug, Serialize)]
struct FoundPart {
    heading: Heading,
    note: String,
    /// Label and what the schedule says.
    settings: Vec<[String; 2]>,
    /// What else is read at the start.
    state: Vec<String>,
}

/// The moves.
#[derive(Debug, Serialize)]
struct TestPart {
    heading: Heading,
    pv_head: &'static str,
    rows: Vec<MoveRow>,
    note: String,
}

/// One line of the table of moves. An empty text is a place to write.
#[derive(Debug, Serialize)]
struct MoveRow {
    label: String,
    op: String,
    /// Whether the OP is written in after `op`.
    op_open: bool,
    pv: String,
    watch: String,
}

/// Where to stop.
#[derive(Debug, Serialize)]
struct LimitsPart {
    heading: Heading,
    text: String,
    /// Label, hold point, abort limit.
    rows: Vec<[String; 3]>,
}

/// Figures of one loop in its own units.
pub(super) struct Units<'a> {
    pub control_loop: &'a Loop,
    pub pv_unit: String,
    pub op_unit: String,
}

impl<'a> Units<'a> {
    fn of(control_loop: &'a Loop) -> Self {
        Units {
            control_loop,
            pv_unit: display::unit(&control_loop.pv.unit),
            op_unit: display::unit(&control_loop.op.unit),
        }
    }

    /// A change of PV with its unit, to about a twentieth of it.
    pub fn pv(&self, percent: f64) -> String {
        self.pv_beside(percent, percent)
    }

    /// A change of PV with its unit, to about a twentieth of `other`.
    fn pv_beside(&self, percent: f64, other: f64) -> String {
        let l = self.control_loop;
        let per_percent = (l.pv.high - l.pv.low) / 100.0;
        let decimals = decimals_to_show((other * per_percent).abs(), 20.0);
        let figure = numbers::grouped(&display::fixed(percent * per_percent, decimals));
        display::with_unit(&figure, &self.pv_unit)
    }

    /// A change of OP with its unit.
    pub fn op(&self, percent: f64) -> String {
        let l = self.control_loop;
        let change = percent * (l.op.high - l.op.low) / 100.0;
        display::with_unit(&numbers::grouped(&display::plain(change, 4)), &self.op_unit)
    }

    /// A value of OP at a percentage of its span, without unit.
    pub fn op_at(&self, percent: f64) -> String {
        let l = self.control_loop;
        let value = l.op.low + percent * (l.op.high - l.op.low) / 100.0;
        numbers::grouped(&display::plain(value, 4))
    }

    /// A value of PV at a percentage of its span, without unit.
    pub fn pv_at(&self, percent: f64) -> String {
        let l = self.control_loop;
        let width = l.pv.high - l.pv.low;
        let value = l.pv.low + percent * width / 100.0;
        numbers::grouped(&display::fixed(value, decimals_to_show(width, 200.0)))
    }

    /// "start + 2.5 %", "start".
    fn op_from_start(&self, percent: f64) -> String {
        from_start(percent, &self.op(percent.abs()))
    }

    /// The same of PV, to about a twentieth of `other`.
    fn pv_from_start(&self, percent: f64, other: f64) -> String {
        from_start(percent, &self.pv_beside(percent.abs(), other))
    }
}

fn from_start(percent: f64, size: &str) -> String {
    if percent == 0.0 {
        return "start".to_owned();
    }
    let sign = if percent < 0.0 { '−' } else { '+' };
    format!("start{NO_BREAK}{sign}{NO_BREAK}{size}")
}

/// Numbers the parts in their order.
#[derive(Default)]
struct Numbers(usize);

impl Numbers {
    fn next(&mut self, title: &'static str) -> Heading {
        self.0 += 1;
        Heading {
            number: self.0.to_string(),
            title,
        }
    }
}

/// The strings of a plan sheet.
pub(in crate::document) fn plan(plan: &Plan) -> PlanView {
    let units = Units::of(&plan.control_loop);
    let mut numbers = Numbers::default();
    let test_planned = plan.is_for_a_test();
    let about = Listing {
        heading: numbers.next("The loop"),
        entries: about(&plan.control_loop),
    };
    let basis = test_planned.then(|| Listing {
        heading: numbers.next("What is proposed"),
        entries: words::basis(plan, &units),
    });
    let before = steps(numbers.next("Before the test"), words::before(plan));
    let found = found(plan, numbers.next("As found"));
    let test = test_planned.then(|| TestPart {
        heading: numbers.next("The moves"),
        pv_head: if plan.integrating {
            "PV at the end of the watch"
        } else {
            "PV at rest"
        },
        rows: rows(plan, &units),
        note: words::on_the_series(plan),
    });
    let limits = test_planned.then(|| limits(plan, &units, numbers.next("Where to stop")));
    let after = test_planned.then(|| {
        steps(
            numbers.next("After the test"),
            words::after(plan, &found.heading),
        )
    });
    let cautions = plan.cautions.iter().map(|c| c.text.clone()).collect();
    PlanView {
        document: document(plan),
        tag: tidy(&plan.control_loop.tag),
        service: tidy(&plan.control_loop.service),
        logo: None,
        lead: words::lead(plan, &units),
        about,
        basis,
        before,
        found,
        test,
        limits,
        after,
        cautions: steps(numbers.next("Cautions"), cautions),
        sign_off: numbers.next("Agreed and signed"),
        signatures: super::sign_off(&plan.document.signatures),
    }
}

fn steps(heading: Heading, texts: Vec<String>) -> Steps {
    Steps {
        heading,
        texts: texts.iter().map(|text| bound(text)).collect(),
    }
}

fn document(plan: &Plan) -> DocumentView {
    let d = &plan.document;
    let l = &plan.control_loop;
    let text = |value: &Option<String>| value.as_deref().map(tidy).unwrap_or_default();
    let controller = l.particulars.get("controller").map(|c| tidy(c));
    DocumentView {
        kind: "Plan of a step test",
        title: format!(
            "{} {} {}, plan of a step test",
            tidy(&d.number),
            tidy(&l.tag),
            tidy(&l.service)
        ),
        number: tidy(&d.number),
        revision: tidy(&d.revision),
        date: d.date.to_string(),
        status: "Working paper",
        owner: tidy(&d.owner),
        page: super::page_name(d.page),
        authors: d.creator.as_deref().map(tidy).into_iter().collect(),
        // Plain ASCII alone: only then the seal stands in every copy of the keywords as it is.
        keywords: vec![SEAL_KEYWORD.to_owned()],
        fields: vec![
            vec![
                Field::new("Legal owner", tidy(&d.owner), 2),
                Field::new("Plant", tidy(&d.plant), 2),
                Field::optional("Area", text(&d.area), 2),
            ],
            vec![
                Field::new("Document number", tidy(&d.number), 2),
                Field::new("Revision", tidy(&d.revision), 1),
                Field::new("Date of issue", d.date.to_string(), 1),
                Field::new("Status", "Working paper", 1),
                Field {
                    label: "Sheet",
                    value: None,
                    span: 1,
                },
            ],
            vec![
                Field::optional("Controller", controller.unwrap_or_default(), 2),
                Field::new("PV range", super::range(&l.pv), 1),
                Field::new("OP range", super::range(&l.op), 1),
                Field::new("Action", native::action(l.action), 1),
                Field::new(
                    "Scan",
                    display::with_unit(&display::plain(l.scan_s, 4), "s"),
                    1,
                ),
            ],
        ],
    }
}

/// What the loop is, as far as it is not in the title block.
fn about(l: &Loop) -> Vec<Entry> {
    let mut entries = vec![Entry::new("Form", native::form(l.form))];
    let mut cascade = Vec::new();
    if let Some(inner) = &l.inner_loop {
        cascade.push(format!("its output sets {} (inner loop)", tidy(inner)));
    }
    if !l.outer_loops.is_empty() {
        let outer: Vec<String> = l.outer_loops.iter().map(|t| tidy(t)).collect();
        cascade.push(format!("set by {} (outer loop)", listed(&outer)));
    }
    if !cascade.is_empty() {
        entries.push(Entry::new("Cascade", sentence(&cascade.join("; "))));
    }
    for (key, label) in [
        ("valve", "Valve"),
        ("valve fail", "Valve fails"),
        ("transmitter", "Transmitter"),
        ("normal mode", "Normal mode"),
        ("drawing", "Drawing"),
        ("change number", "Change number"),
        ("remarks", "Remarks"),
    ] {
        if let Some(value) = l.particulars.get(key) {
            entries.push(Entry::new(label, tidy(value)));
        }
    }
    entries
}

/// What is read at the controller before anything is touched.
fn found(plan: &Plan, heading: Heading) -> FoundPart {
    let l = &plan.control_loop;
    let label = |named: Named| format!("{}, {}", named.label, named.unit);
    let value = |of: fn(crate::settings::Native) -> f64| {
        plan.found.map(of).map_or_else(String::new, |value| {
            if value == 0.0 {
                "off".to_owned()
            } else {
                native::typed(value)
            }
        })
    };
    let given = plan.found.is_some();
    FoundPart {
        heading,
        note: if given {
            "Read at the controller before anything is touched. Where it differs from the schedule, the \
             schedule is put right first."
        } else {
            "Read at the controller before anything is touched; the schedule has no settings as found yet."
        }
        .to_owned(),
        settings: vec![
            [label(native::proportional(l)), value(|found| found.p)],
            [label(native::integral(l)), value(|found| found.i)],
            [label(native::derivative(l)), value(|found| found.d)],
            ["Action".to_owned(), native::action(l.action).to_owned()],
            ["PV filter, s".to_owned(), display::plain(l.pv_filter_s, 4)],
            [
                format!("OP limits, {}", display::unit(&l.op.unit)),
                String::new(),
            ],
        ],
        state: vec![
            "Date, time".to_owned(),
            "Mode".to_owned(),
            format!("SP, {}", display::unit(&l.pv.unit)),
            format!("PV, {}", display::unit(&l.pv.unit)),
            format!("OP, {}", display::unit(&l.op.unit)),
            "Read by".to_owned(),
        ],
    }
}

fn rows(plan: &Plan, units: &Units) -> Vec<MoveRow> {
    let watch = plan
        .times
        .map(|times| words::time(times.watch_s))
        .unwrap_or_default();
    let rest = MoveRow {
        label: "At rest".to_owned(),
        op: "start".to_owned(),
        op_open: false,
        pv: "start".to_owned(),
        watch: plan
            .times
            .map(|times| words::time(times.before_s))
            .unwrap_or_default(),
    };
    std::iter::once(rest)
        .chain(plan.moves.iter().map(|step| {
            MoveRow {
                label: label(step),
                op: match step.op_offset_percent {
                    Some(offset) => units.op_from_start(offset),
                    None if step.to_start => "start".to_owned(),
                    None => format!("start{NO_BREAK}{}", if step.up { '+' } else { '−' }),
                },
                op_open: step.op_offset_percent.is_none() && !step.to_start,
                pv: step
                    .pv_offset_percent
                    .map(|offset| pv_then(offset, plan, units))
                    .unwrap_or_default(),
                watch: watch.clone(),
            }
        }))
        .collect()
}

/// The PV expected; nothing but rounding is left where the second pulse has undone the first.
fn pv_then(offset: f64, plan: &Plan, units: &Units) -> String {
    let Size::Proposed { pv_percent, .. } = plan.size else {
        return String::new();
    };
    let offset = if offset.abs() < 1e-6 * pv_percent {
        0.0
    } else {
        offset
    };
    units.pv_from_start(offset, pv_percent)
}

fn label(step: &Move) -> String {
    let way = match (step.to_start, step.up) {
        (true, true) => "back up",
        (true, false) => "back down",
        (false, true) => "up",
        (false, false) => "on down",
    };
    format!("{}{NO_BREAK}{NO_BREAK}{way}", step.number)
}

fn limits(plan: &Plan, units: &Units, heading: Heading) -> LimitsPart {
    let l = &plan.control_loop;
    let agree = || words::AGREE.to_owned();
    let row = |label: String, hold: String, abort: String| [label, hold, abort];
    let pv = |way: f64| match plan.limits {
        Some(Limits {
            pv_hold_percent,
            pv_abort_percent,
            ..
        }) => (
            units.pv_from_start(way * pv_hold_percent, pv_abort_percent),
            units.pv_from_start(way * pv_abort_percent, pv_abort_percent),
        ),
        None => (agree(), agree()),
    };
    let op = |way: f64| match plan.size {
        Size::Proposed { op_percent, .. } => (
            numbers::NONE.to_owned(),
            units.op_from_start(way * op_percent),
        ),
        Size::ToAgree { .. } => (numbers::NONE.to_owned(), agree()),
    };
    let named =
        |name: &str, end: &str, unit: &str| format!("{name} {end}, {}", display::unit(unit));
    let mut rows = Vec::new();
    for (end, way) in [("high", 1.0), ("low", -1.0)] {
        let (hold, abort) = pv(way);
        rows.push(row(named("PV", end, &l.pv.unit), hold, abort));
    }
    for (end, way) in [("high", 1.0), ("low", -1.0)] {
        let (hold, abort) = op(way);
        rows.push(row(named("OP", end, &l.op.unit), hold, abort));
    }
    for _ in 0..2 {
        rows.push([String::new(), String::new(), String::new()]);
    }
    LimitsPart {
        heading,
        text: words::on_limits(plan),
        rows,
    }
}

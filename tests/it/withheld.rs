//! Every way in which nothing may be recommended: whatever the loop, no number to enter leaves the program.
//!
//! Each loop is assembled twice, with and without what withholds it. The second tells what would have been
//! recommended; none of those numbers may stand anywhere in what the first gives.

use crate::loops::{Plan, plans};
use crate::plant;
use crate::synthetic::sealed;
use asleft::archive;
use asleft::assemble::{self, InnerPace, InnerRecord, LoopInput};
use asleft::design::Aim;
use asleft::document::{self, DossierInput, DossierRecord, Templates};
use asleft::figures;
use asleft::model::{Kind, ProcessModel};
use asleft::quantity::round_significant;
use asleft::record::{OpenCode, Record, Status};
use asleft::register;
use asleft::settings::{Action, DerivativeUnit, EquationForm, IntegralUnit, ProportionalUnit};
use proptest::prelude::*;
use proptest::test_runner::RngSeed;
use serde_json::Value;

/// What withholds a loop, and the open item that says so.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Cause {
    NothingMoved,
    NoiseAlone,
    Action,
    LeftAction,
    Scan,
    Safety,
    InnerWithheld,
    InnerUnstable,
    InnerUnknown,
    Robustness,
    AveragingOfSelfRegulating,
    AveragingWithoutLoad,
}

use Cause::*;

const CAUSES: [Cause; 12] = [
    NothingMoved,
    NoiseAlone,
    Action,
    LeftAction,
    Scan,
    Safety,
    InnerWithheld,
    InnerUnstable,
    InnerUnknown,
    Robustness,
    AveragingOfSelfRegulating,
    AveragingWithoutLoad,
];

impl Cause {
    fn code(self) -> OpenCode {
        match self {
            NothingMoved | NoiseAlone => OpenCode::NoUsableStep,
            Cause::Action | LeftAction => OpenCode::ActionAgainstProcess,
            Scan => OpenCode::ScanTooSlow,
            Safety => OpenCode::SafetyProcedureMissing,
            InnerWithheld | InnerUnstable | InnerUnknown => OpenCode::InnerLoopWithheld,
            Robustness => OpenCode::NoSolution,
            AveragingOfSelfRegulating | AveragingWithoutLoad => OpenCode::WrongAim,
        }
    }

    /// Whether it can befall such a process.
    fn befalls(self, kind: Kind) -> bool {
        match self {
            Scan | AveragingOfSelfRegulating => !kind.integrates(),
            AveragingWithoutLoad => kind.integrates(),
            _ => true,
        }
    }

    /// Puts it into a loop that would get its settings.
    fn put_into(self, input: &mut LoopInput) {
        let l = &mut input.control_loop;
        let turned = match l.action {
            Action::Direct => Action::Reverse,
            Action::Reverse => Action::Direct,
        };
        let on = |pace| {
            Some(InnerRecord {
                tag: "FIC-9".to_owned(),
                left_on: None,
                entered: false,
                pace,
            })
        };
        match self {
            NothingMoved => input.test.data.op.fill(47.3),
            NoiseAlone => {
                let mut random = plant::Random::new(5);
                let pv = input.test.data.pv.iter_mut();
                pv.for_each(|pv| *pv = 50.0 + 0.5 * random.normal());
            }
            Cause::Action => l.action = turned,
            LeftAction => l.left_action = Some(turned),
            Scan => {
                l.scan_s = 400.0;
                input.controller.scan_s = 400.0;
            }
            Safety => l.safety = true,
            InnerWithheld => input.inner = on(InnerPace::Withheld),
            InnerUnstable => input.inner = on(InnerPace::Unstable),
            InnerUnknown => input.inner = on(InnerPace::Unknown),
            // No loop with integral action has an Ms of 1.
            Robustness => {
                input.limits.design.ms = 1.0;
                input.limits.design.worst_ms = 1.0;
            }
            AveragingOfSelfRegulating | AveragingWithoutLoad => l.aim = Aim::Averaging,
        }
    }
}

/// What would have been recommended: numbers of four digits that nobody else gave. Rounder ones stand in any
/// text by chance.
fn secret(sound: &Record) -> Vec<f64> {
    let recommended = sound.settings.recommended.as_ref().expect("a sound loop");
    let found = sound.settings.as_found.native;
    let given = [found.p, found.i, found.d, 0.0];
    let all = [
        recommended.native.p,
        recommended.native.i,
        recommended.native.d,
    ];
    all.into_iter()
        .filter(|v| !given.contains(v) && round_significant(*v, 3) != *v)
        .collect()
}

/// Every number of a text, whatever stands around it.
fn numbers(text: &str) -> Vec<f64> {
    text.replace('\u{2212}', "-")
        .split(|c: char| !(c.is_ascii_digit() || c == '.'))
        .map(|word| word.trim_matches('.'))
        .filter_map(|word| word.parse().ok())
        .collect()
}

fn lacks(text: &str, secret: &[f64], where_: &str) {
    let held: Vec<f64> = numbers(text)
        .into_iter()
        .filter(|number| secret.iter().any(|s| (s - number).abs() <= 1e-9 * s))
        .collect();
    assert!(held.is_empty(), "{where_} holds {held:?}, to be entered");
}

/// Names of all fields below a value that hold something.
fn fields(value: &Value, found: &mut Vec<String>) {
    match value {
        Value::Object(map) => {
            for (name, value) in map {
                if !value.is_null() {
                    found.push(name.clone());
                }
                fields(value, found);
            }
        }
        Value::Array(list) => list.iter().for_each(|value| fields(value, found)),
        _ => {}
    }
}

fn recommends_nothing(record: &Record, cause: Cause, secret: &[f64]) {
    assert_eq!(record.document.status, Status::Withheld, "{cause:?}");
    let open: Vec<OpenCode> = record.document.open_items.iter().map(|i| i.code).collect();
    assert!(open.contains(&cause.code()), "{cause:?}: {open:?}");
    let text = archive::json_text(record);
    let json: Value = serde_json::from_str(&text).expect("JSON");
    assert!(json["settings"]["recommended"].is_null(), "{cause:?}");
    assert!(json["settings"]["as_left_differs"].is_null(), "{cause:?}");
    assert!(
        json["design"].is_null() && json["trial"].is_null(),
        "{cause:?}"
    );
    let mut names = Vec::new();
    fields(&json, &mut names);
    for name in ["recommended", "rules", "binding_limit", "governing_model"] {
        assert!(!names.iter().any(|n| n == name), "{cause:?}: {name}");
    }
    lacks(&text, secret, &format!("{cause:?}: the JSON"));
    let csv = register::to_csv(std::slice::from_ref(record), &[]);
    let mut reader = csv::Reader::from_reader(csv.as_slice());
    let headings = reader.headers().expect("headings").clone();
    let row = reader.records().next().expect("a line").expect("a line");
    for (heading, cell) in headings.iter().zip(&row) {
        if heading.starts_with("recommended")
            || [
                "closed-loop time constant s",
                "binding limit",
                "trial agrees",
            ]
            .contains(&heading)
        {
            assert_eq!(cell, "", "{cause:?}: {heading}");
        }
    }
}

/// The loop with its settings, and the same withheld.
fn both(plan: &Plan, cause: Cause) -> (Record, Record) {
    let sound = assemble::assemble(plan.input()).expect("a record");
    assert_ne!(sound.document.status, Status::Withheld, "{plan:?}");
    let mut input = plan.input();
    cause.put_into(&mut input);
    let withheld = assemble::assemble(input).expect("a record");
    (sealed(sound), sealed(withheld))
}

proptest! {
    #![proptest_config(ProptestConfig {
        cases: 48,
        rng_seed: RngSeed::Fixed(1),
        failure_persistence: None,
        ..ProptestConfig::default()
    })]

    #[test]
    fn whatever_withholds_a_loop_no_number_to_enter_is_recorded(
        plan in plans(),
        cause in prop::sample::select(CAUSES.to_vec()),
    ) {
        prop_assume!(cause.befalls(plan.process.kind()));
        let (sound, withheld) = both(&plan, cause);
        let secret = secret(&sound);
        prop_assume!(!secret.is_empty());
        recommends_nothing(&withheld, cause, &secret);
    }
}

fn plain(pages: &[String]) -> String {
    let text = pages
        .join(" ")
        .replace(['\u{a0}', '\u{202f}', '\u{2011}'], " ");
    text.split_whitespace().collect::<Vec<_>>().join(" ")
}

/// One loop for each cause, tagged by its number, that was entered and tried, or neither.
fn one_of_each() -> Vec<(Cause, Record, Vec<f64>)> {
    let causes = CAUSES.into_iter().enumerate();
    causes
        .map(|(k, cause)| {
            let kind = if cause.befalls(Kind::SecondOrder) {
                Kind::SecondOrder
            } else {
                Kind::IntegratingLag
            };
            let gain = if kind.integrates() { 0.012_3 } else { 1.234 };
            let plan = Plan {
                process: ProcessModel::of_kind(kind, gain, 57.3, 21.7, 9.1),
                form: EquationForm::Standard,
                units: (
                    ProportionalUnit::Band,
                    IntegralUnit::Minutes,
                    DerivativeUnit::Minutes,
                ),
                derivative: true,
                aim: Aim::Load,
                target_s: None,
                left: k % 2 == 0,
                trial: k % 2 == 0,
                turned: false,
            };
            let (sound, mut withheld) = both(&plan, cause);
            withheld.control_loop.tag = format!("TIC-{}", 701 + k);
            withheld.document.number = format!("LM-TIC-{}", 701 + k);
            (cause, sealed(withheld), secret(&sound))
        })
        .collect()
}

#[test]
fn no_page_of_a_withheld_loop_holds_a_number_to_enter() {
    let templates = Templates::default();
    let loops = one_of_each();
    // A draft among them: it alone has settings to enter.
    let draft = Plan {
        left: false,
        trial: false,
        ..Plan {
            process: ProcessModel::of_kind(Kind::FirstOrder, 0.77, 44.0, 0.0, 12.0),
            form: EquationForm::Series,
            units: (
                ProportionalUnit::Gain,
                IntegralUnit::Seconds,
                DerivativeUnit::Seconds,
            ),
            derivative: false,
            aim: Aim::Load,
            target_s: None,
            left: false,
            trial: false,
            turned: false,
        }
    };
    let mut draft = assemble::assemble(draft.input()).expect("a record");
    draft.control_loop.tag = "PIC-700".to_owned();
    draft.document.number = "LM-PIC-700".to_owned();
    let draft = sealed(draft);
    let records: Vec<&Record> = loops.iter().map(|l| &l.1).chain([&draft]).collect();
    let drawn: Vec<_> = records.iter().map(|record| figures::draw(record)).collect();
    let parts: Vec<DossierRecord> = records
        .iter()
        .zip(&drawn)
        .map(|(record, figures)| DossierRecord {
            record,
            figures,
            attachments: &[],
        })
        .collect();
    let of = &draft.document;
    let dossier = DossierInput {
        number: "LM-DOSSIER".to_owned(),
        title: "Loops".to_owned(),
        revision: of.revision.clone(),
        date: of.date,
        owner: of.owner.clone(),
        plant: of.plant.clone(),
        area: None,
        client: None,
        page: of.page,
        signatures: of.signatures.clone(),
        procedures: of.procedures.clone(),
        not_recorded: Vec::new(),
        program: draft.provenance.program.clone(),
    };
    let pages = document::dossier_page_texts(&dossier, &parts, &templates).expect("typeset");
    let text = plain(&pages);
    for (cause, record, secret) in &loops {
        lacks(&text, secret, &format!("{cause:?}: the dossier"));
        let own: Vec<String> = pages
            .iter()
            .filter(|page| page.contains(&record.document.number) && page.contains(", sheet"))
            .cloned()
            .collect();
        let own = plain(&own);
        assert!(own.contains("Withheld"), "{cause:?}: {own}");
        for word in [
            "To enter",
            "Recommended",
            "Published rules",
            "Settings to enter",
        ] {
            assert!(!own.contains(word), "{cause:?}: {word} in {own}");
        }
        assert_eq!(
            own.contains("Entered, not recommended"),
            record.settings.as_left.is_some(),
            "{cause:?}: {own}"
        );
    }
    let enter: Vec<String> = pages
        .iter()
        .map(|page| plain(std::slice::from_ref(page)))
        .filter(|page| page.contains("Settings to enter") && page.contains("read back"))
        .collect();
    assert_eq!(enter.len(), 1, "one page to enter settings by");
    assert!(
        enter[0].contains("PIC-700") && !enter[0].contains("TIC-7"),
        "{}",
        enter[0]
    );
    let operations = pages
        .iter()
        .map(|page| plain(std::slice::from_ref(page)))
        .filter(|page| page.contains("mean for the control room"));
    for page in operations {
        for (cause, record, secret) in &loops {
            lacks(&page, secret, &format!("{cause:?}: the operations page"));
            let told = page.contains(&record.control_loop.tag);
            assert!(
                !told || record.settings.as_left.is_some(),
                "{cause:?}: {page}"
            );
        }
    }
}

//! What holds for every figure of every record, however odd its data.

use super::canvas::{Anchor, Label, PIXELS_PER_PT, PT_PER_MM};
use super::geometry::Rect;
use super::sample::{Plan, morning, range};
use super::{Figure, draw};
use crate::identify::ReasonCode;
use crate::model::ProcessModel;
use crate::record::Record;
use proptest::prelude::*;

/// Folder to write the sample figures to, for looking at them.
const LOOK: &str = "ASLEFT_FIGURES_TO";

fn integrating(gain_per_s: f64, dead_time_s: f64) -> ProcessModel {
    ProcessModel::Integrating {
        gain_per_s,
        dead_time_s,
    }
}

/// Plans that differ in what usually goes wrong on paper.
fn plans() -> Vec<(&'static str, Plan)> {
    let usual = Plan::default;
    let first_order = |gain: f64, tau: f64, theta: f64| ProcessModel::FirstOrder {
        gain,
        time_constant_s: tau,
        dead_time_s: theta,
    };
    let twelve: Vec<(f64, f64)> = (0..=12)
        .map(|k| {
            (
                f64::from(k) * 900.0,
                50.0 + if k % 2 == 0 { 0.0 } else { 4.0 },
            )
        })
        .collect();
    let every = |moves: usize, code| (1..=moves).map(|n| (n, code)).collect::<Vec<_>>();
    vec![
        ("usual", usual()),
        (
            "unstable",
            Plan {
                unstable: true,
                sp: true,
                ..usual()
            },
        ),
        (
            "withheld",
            Plan {
                moves: vec![(0.0, 96.0), (420.0, 97.0), (1000.0, 96.0), (1580.0, 100.0)],
                end_s: 2400.0,
                noise_percent: 1.0,
                pv: range("degC", 0.0, 80.0),
                rejected: vec![
                    (1, ReasonCode::Change),
                    (2, ReasonCode::Change),
                    (3, ReasonCode::Saturated),
                ],
                ..usual()
            },
        ),
        (
            "level",
            Plan {
                process: integrating(-0.002, 20.0),
                moves: vec![
                    (0.0, 50.0),
                    (300.0, 55.0),
                    (700.0, 50.0),
                    (1100.0, 45.0),
                    (1500.0, 50.0),
                ],
                end_s: 1900.0,
                pv_percent: 60.0,
                pv: range("%", 0.0, 100.0),
                rejected: Vec::new(),
                zero: None,
                ..usual()
            },
        ),
        (
            "twelve",
            Plan {
                process: first_order(-1.4, 90.0, 20.0),
                moves: twelve,
                end_s: 13.0 * 900.0,
                rejected: vec![(4, ReasonCode::Mode), (5, ReasonCode::BadSamples)],
                pv: range("Nm3/h", -2500.0, 2500.0),
                ..usual()
            },
        ),
        (
            "flow",
            Plan {
                process: first_order(0.8, 1.5, 0.6),
                moves: vec![(0.0, 40.0), (15.0, 45.0), (40.0, 40.0)],
                end_s: 70.0,
                interval_s: 0.1,
                pv: range("m3/h", 0.0, 25.0),
                rejected: Vec::new(),
                ..usual()
            },
        ),
        (
            "days",
            Plan {
                process: first_order(0.5, 20_000.0, 3000.0),
                moves: vec![(0.0, 20.0), (90_000.0, 25.5), (250_000.0, 21.25)],
                end_s: 400_000.0,
                interval_s: 300.0,
                pv: range("ppm", 0.0, 0.0004),
                op: range("mA", 4.0, 20.0),
                rejected: vec![(2, ReasonCode::Drift)],
                ..usual()
            },
        ),
        (
            "sparse",
            Plan {
                moves: vec![(0.0, 42.0), (600.0, 47.0)],
                end_s: 1800.0,
                interval_s: 180.0,
                pv: range("Pa", 100_000.0, 9_000_000.0),
                rejected: Vec::new(),
                ..usual()
            },
        ),
        (
            "flat",
            Plan {
                process: first_order(0.0, 100.0, 10.0),
                noise_percent: 0.0,
                rejected: every(6, ReasonCode::Change),
                ..usual()
            },
        ),
        (
            "falling",
            Plan {
                process: first_order(-1.2, 200.0, 60.0),
                moves: vec![(0.0, 42.0), (600.0, 47.0), (1800.0, 42.0)],
                end_s: 3600.0,
                rejected: Vec::new(),
                zero: Some(morning() + chrono::TimeDelta::hours(14)),
                ..usual()
            },
        ),
        (
            "ten samples",
            Plan {
                moves: vec![(0.0, 42.0), (600.0, 47.0)],
                end_s: 2000.0,
                interval_s: 200.0,
                pv: range("degC", -273.0, -250.0),
                rejected: Vec::new(),
                ..usual()
            },
        ),
        (
            "huge",
            Plan {
                pv: range("Nm3/h at 15 degC and 1.013 bar", -4.0e7, 9.6e8),
                op: range("t/h", -2000.0, 125_000.0),
                moves: vec![(0.0, 40.0), (600.0, 47.0), (2400.0, 40.0)],
                end_s: 4200.0,
                rejected: Vec::new(),
                ..usual()
            },
        ),
        (
            "nearly nothing",
            Plan {
                pv: range("mol/mol", 2.0e-9, 2.1e-9),
                moves: vec![(0.0, 42.0), (600.0, 47.0), (2400.0, 42.0)],
                end_s: 4200.0,
                rejected: vec![(2, ReasonCode::Drift)],
                ..usual()
            },
        ),
        (
            "pulse",
            Plan {
                moves: vec![(0.0, 42.0), (600.0, 47.0), (700.0, 42.0)],
                end_s: 2400.0,
                pulses: vec![1],
                rejected: Vec::new(),
                ..usual()
            },
        ),
    ]
}

/// Holds an SVG against what it must be; the error says what it is not.
fn well_formed(svg: &str) -> Result<(), String> {
    let mut open: Vec<&str> = Vec::new();
    let mut rest = svg;
    while let Some(at) = rest.find('<') {
        let text = &rest[..at];
        if text.contains('>') || text.contains('&') && !text.contains(';') {
            return Err(format!("stray sign in {text:?}"));
        }
        let end = rest[at..].find('>').ok_or("a tag that does not end")? + at;
        let tag = &rest[at + 1..end];
        if !tag.matches('"').count().is_multiple_of(2) {
            return Err(format!("quotes do not match in <{tag}>"));
        }
        if let Some(name) = tag.strip_prefix('/') {
            if open.pop() != Some(name) {
                return Err(format!("</{name}> closes nothing"));
            }
        } else if !tag.ends_with('/') {
            open.push(tag.split(' ').next().unwrap_or_default());
        }
        rest = &rest[end + 1..];
    }
    if !open.is_empty() || !rest.trim().is_empty() {
        return Err(format!("left open: {open:?}"));
    }
    Ok(())
}

fn check(figure: &Figure) {
    let name = figure.name;
    well_formed(&figure.svg).unwrap_or_else(|why| panic!("{name}: {why}"));
    for word in ["NaN", "inf", "Infinity"] {
        assert!(!figure.svg.contains(word), "{name} holds {word}");
        assert!(!figure.alt.contains(word), "{name}: {}", figure.alt);
    }
    assert!(
        figure.svg.len() < 900_000,
        "{name} has {} bytes",
        figure.svg.len()
    );
    assert!(
        figure.caption.ends_with('.') && figure.alt.ends_with('.'),
        "{name}: {}",
        figure.alt
    );
    let page = Rect::new(
        0.0,
        0.0,
        figure.width_mm * PT_PER_MM,
        figure.height_mm * PT_PER_MM,
    );
    for (x, y) in points(&figure.svg) {
        let at = Rect::new(x, y, x, y);
        assert!(
            page.grown(0.6).holds(at),
            "{name}: ({x}, {y}) is off the page"
        );
    }
    let labels = labels(&figure.svg);
    for (k, (words, area)) in labels.iter().enumerate() {
        assert!(
            page.grown(2.0).holds(*area),
            "{name}: \"{words}\" is off the page: {area:?}"
        );
        for (other, taken) in &labels[..k] {
            // Ascenders may reach into the air below descenders, words not into words.
            let apart = !area.grown(-0.6).meets(taken.grown(-0.6));
            assert!(apart, "{name}: \"{words}\" on \"{other}\"");
        }
    }
}

/// The value of an attribute of a tag.
fn attribute<'a>(tag: &'a str, name: &str) -> &'a str {
    let rest = tag
        .split(&format!(" {name}=\""))
        .nth(1)
        .expect("the attribute is there");
    rest.split('"').next().unwrap_or_default()
}

/// The words of an SVG with the boxes they fill, pt.
fn labels(svg: &str) -> Vec<(String, Rect)> {
    let number = |tag: &str, name: &str| -> f64 { attribute(tag, name).parse().expect("a number") };
    svg.split("<text")
        .skip(1)
        .map(|part| {
            let (tag, rest) = part.split_once('>').expect("the tag ends");
            let words = rest.split("</text>").next().unwrap_or_default().trim();
            let words = words.replace("&lt;", "<").replace("&gt;", ">");
            let words = words
                .replace("&quot;", "\"")
                .replace("&apos;", "'")
                .replace("&amp;", "&");
            let size_pt = number(tag, "font-size") / PIXELS_PER_PT;
            let (x, top) = (
                number(tag, "x") / PIXELS_PER_PT,
                number(tag, "y") / PIXELS_PER_PT,
            );
            let mut label = Label::new(x, top + 0.76 * size_pt, words.clone()).size(size_pt);
            label.bold = tag.contains("font-weight=\"bold\"");
            label.anchor = match attribute(tag, "text-anchor") {
                "start" => Anchor::Start,
                "middle" => Anchor::Middle,
                _ => Anchor::End,
            };
            (words, label.area())
        })
        .collect()
}

/// The points of all paths, pt.
fn points(svg: &str) -> Vec<(f64, f64)> {
    let mut found = Vec::new();
    for part in svg.split("points=\"").skip(1) {
        for pair in part
            .split('"')
            .next()
            .unwrap_or_default()
            .split_whitespace()
        {
            let (x, y) = pair.split_once(',').expect("a pair");
            let number = |text: &str| text.parse::<f64>().expect("a number") / PIXELS_PER_PT;
            found.push((number(x), number(y)));
        }
    }
    found
}

#[test]
fn every_figure_of_every_plan_is_sound() {
    for (name, plan) in plans() {
        let record = plan.record();
        let figures = draw(&record);
        assert!(!figures.is_empty(), "{name}");
        for figure in &figures {
            check(figure);
        }
        if let Some(folder) = std::env::var_os(LOOK) {
            for figure in &figures {
                let file = std::path::Path::new(&folder).join(format!("{name}-{}", figure.name));
                std::fs::write(file, &figure.svg).expect("a folder to write to");
                let words = format!("{}\n\n{}\n", figure.caption, figure.alt);
                let file =
                    std::path::Path::new(&folder).join(format!("{name}-{}.txt", figure.name));
                std::fs::write(file, words).expect("a folder to write to");
            }
        }
    }
}

#[test]
fn the_record_says_which_figures_there_are() {
    let names = |record: &Record| draw(record).iter().map(|f| f.name).collect::<Vec<_>>();
    let mut record = Plan::default().record();
    assert_eq!(
        names(&record),
        [
            "change.svg",
            "test.svg",
            "fits.svg",
            "reading.svg",
            "predicted.svg",
            "trial.svg"
        ]
    );
    record.trial = None;
    record.logs.truncate(1);
    record.settings.as_left = None;
    record.settings.recommended = None;
    assert_eq!(names(&record), ["test.svg", "fits.svg", "reading.svg"]);
    record.logs.clear();
    assert_eq!(names(&record), [""; 0]);
}

#[test]
fn half_a_million_samples_fit_on_a_page() {
    let plan = Plan {
        interval_s: 7740.0 / 500_000.0,
        ..Plan::default()
    };
    let mut record = plan.record();
    // One sample among them that must not be lost.
    record.logs[0].data.pv[123_456] = 120.0;
    let figures = draw(&record);
    for figure in &figures {
        check(figure);
        assert!(
            figure.svg.len() < 200_000,
            "{}: {}",
            figure.name,
            figure.svg.len()
        );
    }
    let labels = labels(&figures[1].svg);
    assert!(labels.iter().any(|(words, _)| words == "120"), "{labels:?}");
}

#[test]
fn the_same_record_draws_the_same_figures() {
    assert_eq!(
        draw(&Plan::default().record()),
        draw(&Plan::default().record())
    );
}

#[test]
fn the_sentence_says_what_the_plot_shows() {
    // 98.0 °C and 5 % of OP times 0.94 %/% times 80 °C: 101.76 °C at rest, not quite reached.
    let figures = draw(&Plan::default().record());
    let test = figures
        .iter()
        .find(|f| f.name == "test.svg")
        .expect("a test");
    assert!(
        test.alt.contains(
            "Step 1: PV rose from 98.0 to 101.7\u{a0}°C after OP was moved from 42 to 47\u{a0}%."
        ),
        "{}",
        test.alt
    );
    assert!(
        test.alt
            .contains("hatched as rejected: drift 31 % (bound 20 %)."),
        "{}",
        test.alt
    );
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(24))]
    #[test]
    fn odd_data_never_breaks_a_figure(
        gain in -3.0..3.0_f64,
        tau in 0.01..1e5_f64,
        interval in 0.01..1000.0_f64,
        count in 10..400_usize,
        low in -1e6..1e6_f64,
        width in 1e-3..1e6_f64,
        bad in prop::collection::vec(any::<bool>(), 400),
        broken in prop::collection::vec(0..400_usize, 0..12),
    ) {
        let end = interval * count as f64;
        let plan = Plan {
            process: ProcessModel::FirstOrder { gain, time_constant_s: tau, dead_time_s: tau / 7.0 },
            moves: vec![(0.0, 40.0), (end * 0.3, 55.0), (end * 0.6, 41.5)],
            end_s: end,
            interval_s: interval,
            pv: range("<&\"'>", low, low + width),
            rejected: if gain > 2.0 { vec![(1, ReasonCode::Sign)] } else { Vec::new() },
            ..Plan::default()
        };
        let mut record = plan.record();
        let data = &mut record.logs[0].data;
        for (good, bad) in data.good.iter_mut().zip(bad) {
            *good = !bad;
        }
        for k in broken {
            if let Some(pv) = data.pv.get_mut(k) {
                *pv = [f64::NAN, f64::INFINITY][k % 2];
            }
            if let Some(op) = data.op.get_mut(k / 3) {
                *op = f64::NAN;
            }
        }
        for figure in draw(&record) {
            check(&figure);
        }
    }
}

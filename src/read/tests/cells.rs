//! Columns and cells.

use super::*;
use crate::trace::Trace;

#[test]
fn a_long_table_is_joined_on_time() {
    let log = csv("Tag,Time,Value,Quality\n\
         LIC-9.PV,2026-03-14 09:00:00,1,Good\n\
         TIC-204.PV,2026-03-14 09:00:00,71.2,Good\n\
         TIC-204.OP,2026-03-14 09:00:00,40,Good\n\
         TIC-204.PV,2026-03-14 09:00:02,71.3,Bad\n\
         TIC-204.OP,2026-03-14 09:00:03,45,Good\n\
         TIC-204.PV,2026-03-14 09:00:04,71.9,192\n\
         TIC-204.SP,2026-03-14 08:59:00,70,Good\n")
    .read();
    let samples = &log.samples;
    assert_eq!(samples.t_s, [0.0, 2.0, 3.0, 4.0]);
    assert_eq!(samples.op, [40.0, 40.0, 45.0, 45.0]);
    assert_eq!(samples.sp, [70.0; 4]);
    assert_eq!(samples.good, [true, false, true, true]);
    // The row of the OP's own move holds no sample of the PV, and none that was bad.
    assert!(samples.pv[2].is_nan());
    assert_eq!(
        log.sources[0].bad,
        BTreeMap::from([("quality Bad".to_owned(), 1)])
    );
    let span = Span::new(0.0, 100.0).expect("a range");
    let trace = Trace::new(samples, span, span).expect("a trace");
    assert_eq!(trace.t_s(), [0.0, 4.0]);
    assert_eq!(trace.bad_t_s(), [2.0]);
    assert_eq!(trace.op_log().0, [0.0, 2.0, 3.0, 4.0]);
}

#[test]
fn signals_of_a_long_table_may_be_named() {
    let text = "Name,Time (s),Value\nT5,0,71\nV5,0,40\nT5,1,72\nV5,1,45\n";
    let refusal = csv(text).refusal();
    assert_eq!(
        refusal,
        "a.csv, column \"Name\": no tag is recognised as the PV; the tags are \"T5\", \"V5\"\n    \
         name it in the schedule under \"pv column\"\n\
         a.csv, column \"Name\": no tag is recognised as the OP; the tags are \"T5\", \"V5\"\n    \
         name it in the schedule under \"op column\""
    );
    let log = csv(text)
        .asking(|request| {
            request.columns.pv = Some("T5".into());
            request.columns.op = Some("v5".into());
        })
        .read();
    assert_eq!(log.samples.pv, [71.0, 72.0]);
    assert_eq!(log.samples.op, [40.0, 45.0]);
}

#[test]
fn no_row_below_the_headings_is_passed_over() {
    let text = "Time,PV,OP\n2026-03-14 09:00:00,Void,Void\n2026-03-14 09:00:01,71,40\n2026-03-14 09:00:02,71,40\n";
    let refusal = csv(text).refusal();
    assert!(
        refusal.starts_with("a.csv, line 2, column \"PV\": \"Void\" is not a number"),
        "{refusal}"
    );
}

#[test]
fn a_status_that_is_no_quality_is_left_alone() {
    let text =
        |status: &str| format!("Time (s),PV,OP,Status\n0,71,40,{status}\n1,72,40,{status}\n");
    assert_eq!(csv(&text("Running")).read().bad_samples(), 0);
    assert!(
        csv(&text("Bad"))
            .refusal()
            .contains("the PV has no good sample (quality Bad: 2)")
    );
    let mixed = "Time (s),PV,OP,Quality\n0,71,40,Good\n1,72,40,Perhaps\n";
    assert!(
        csv(mixed)
            .refusal()
            .starts_with("a.csv, line 3, column \"Quality\": \"Perhaps\" is not a known quality")
    );
}

#[test]
fn bad_samples_are_counted_by_cause_and_unreadable_cells_named() {
    let text = "Time (s),TIC-204.PV,TIC-204.OP\n0,71,40\n1,Bad,40\n2,,40\n3,NaN,40\n4,500,40\n5,Void,40\n6,72,40\n";
    let span = Span::new(0.0, 100.0).expect("a range");
    let refusal = csv(text)
        .asking(|request| request.pv_span = Some(span))
        .refusal();
    assert_eq!(
        refusal,
        "a.csv, line 7, column \"TIC-204.PV\": \"Void\" is not a number\n    \
         correct it, or name the text under bad_values in a [[log]] table of job.toml"
    );
    let log = csv(text)
        .asking(|request| request.pv_span = Some(span))
        .rule(|rule| rule.bad_values = vec!["void".into()])
        .read();
    let bad = &log.sources[0].bad;
    let causes: Vec<(&str, usize)> = bad
        .iter()
        .map(|(cause, count)| (cause.as_str(), *count))
        .collect();
    assert_eq!(
        causes,
        [
            ("empty", 1),
            ("not a number", 1),
            ("outside the range", 1),
            ("text \"Bad\"", 1),
            ("text \"Void\"", 1)
        ]
    );
    assert_eq!(log.sources[0].samples, 2);
}

#[test]
fn many_unreadable_cells_are_counted() {
    let mut text = "Time (s),TIC-204.PV,TIC-204.OP\n0,71,40\n1,71,40\n2,71,40\n".to_owned();
    for k in 3..40 {
        text.push_str(&format!("{k},7l,40\n"));
    }
    let refusal = csv(&text).refusal();
    assert!(
        refusal.ends_with("a.csv: 37 cells cannot be read; the first 5 are told above"),
        "{refusal}"
    );
    assert_eq!(refusal.matches("is not a number").count(), 5);
}

#[test]
fn columns_that_cannot_be_told_are_named() {
    let refusal = csv("Time (s),TIC-204.PV,TIC-204.PV,TIC-204.OP\n0,1,2,3\n1,1,2,3\n").refusal();
    assert_eq!(
        refusal,
        "a.csv, line 1: 2 columns may be the PV: \"TIC-204.PV\" (#2), \"TIC-204.PV\" (#3)\n    \
         name one in the schedule under \"pv column\""
    );
    let log = csv("Time (s),TIC-204.PV,TIC-204.PV,TIC-204.OP\n0,1,2,3\n1,1,2,3\n")
        .asking(|request| request.columns.pv = Some("#3".into()))
        .read();
    assert_eq!(log.samples.pv, [2.0, 2.0]);
    let refusal = csv("Time (s),Temperature (degC),Valve\n0,1,2\n1,1,2\n")
        .asking(|request| {
            request.columns.pv = Some("Temprature".into());
            request.columns.op = Some("valve".into());
        })
        .refusal();
    assert_eq!(
        refusal,
        "a.csv, line 1: the schedule names PV column \"Temprature\", which the log does not have; its headings are \"Time (s)\", \"Temperature (degC)\", \"Valve\"\n    \
         did you mean \"Temperature (degC)\"?"
    );
    let log = csv("Time (s),Temperature (degC),Valve\n0,1,2\n1,1,2\n")
        .asking(|request| {
            request.columns.pv = Some("temperature".into());
            request.columns.op = Some("valve".into());
        })
        .read();
    assert_eq!(log.samples.op, [2.0, 2.0]);
    let refusal = csv("Time (s),FIC-203.PV,FIC-203.OP\n0,1,2\n1,1,2\n").refusal();
    assert_eq!(
        refusal,
        "a.csv, line 1: no column is recognised as the PV of TIC-204; its headings are \"Time (s)\", \"FIC-203.PV\", \"FIC-203.OP\"\n    \
         name it in the schedule under \"pv column\""
    );
    let log = csv("0,1,2\n1,1,2\n2,1,2\n")
        .asking(|request| {
            request.columns.time = Some("#1".into());
            request.columns.pv = Some("#2".into());
            request.columns.op = Some("#3".into());
        })
        .read();
    assert_eq!(log.samples.op, [2.0, 2.0, 2.0]);
}

#[test]
fn signals_at_times_of_their_own_are_no_bad_samples() {
    let mut text = "Time (s),PV,OP\n0,71,40\n".to_owned();
    for k in 1..40 {
        let (pv, op) = if k % 2 == 0 { ("72", "") } else { ("", "41") };
        text.push_str(&format!("{k},{pv},{op}\n"));
    }
    let log = csv(&text).read();
    assert_eq!(log.bad_samples(), 0);
    assert_eq!(log.sources[0].samples, 20);
    assert_eq!(log.warnings.len(), 1);
}

#[test]
fn an_inspection_says_what_it_saw_and_what_it_could_not_decide() {
    let logs = Logs::new("a.xlsx").with("a.xlsx", workbook()).with(
        "b.csv",
        "Time,TIC-204.PV,TIC-204.OP,TI-301.PV\n2026-03-14 09:00:00,71,40,5\n2026-03-14 09:00:01,71,40,5\n",
    );
    let cache = FileCache::new();
    let look = |file| {
        let request = inspect::InspectRequest {
            file,
            file_in_job: file,
            ..inspect::InspectRequest::default()
        };
        inspect::inspect(logs.folder.path(), &request, &cache).expect("readable")
    };
    let workbook = look("a.xlsx");
    assert_eq!(
        workbook.tables[0].undecided[0].message,
        "no rows of times and numbers were found: not a log"
    );
    let found = &workbook.tables[1].loops[0];
    assert_eq!(found.tag.as_deref(), Some("TIC-204"));
    let schedule = found.schedule.as_ref().expect("a proposal");
    assert_eq!(schedule.cells["test log"], "a.xlsx#Trend");
    assert_eq!(schedule.headings, "tag,pv unit,test log");
    assert_eq!(schedule.values, "TIC-204,degC,a.xlsx#Trend");
    let pv = &found.roles[1];
    assert_eq!(pv.heading, "TIC-204/PV [degC]");
    assert_eq!(pv.unit.as_deref(), Some("degC"));
    assert_eq!(pv.why, "the heading bears the tag TIC-204");
    let text = look("b.csv");
    assert_eq!(text.tables[0].loops.len(), 1);
    let others: Vec<(&str, &str)> = text.tables[0]
        .others
        .iter()
        .map(|other| (other.tag.as_str(), other.lacks))
        .collect();
    assert_eq!(others, [("TI-301", "OP")]);
    assert!(serde_json::to_string(&text).is_ok());
}

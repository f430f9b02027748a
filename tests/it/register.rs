//! The register of records.

use crate::synthetic;
use asleft::register;

fn lines() -> Vec<Vec<String>> {
    let bytes = register::to_csv(
        &[synthetic::signed(), synthetic::withheld()],
        &["TIC-9".to_owned()],
    );
    let text = bytes
        .strip_prefix(b"\xef\xbb\xbf")
        .expect("a byte order mark");
    csv::ReaderBuilder::new()
        .has_headers(false)
        .from_reader(text)
        .records()
        .map(|line| {
            let line = line.expect("every line has as many cells");
            line.iter().map(str::to_owned).collect()
        })
        .collect()
}

fn cell(line: usize, heading: &str) -> String {
    let lines = lines();
    let column = lines[0]
        .iter()
        .position(|name| name == heading)
        .expect("the heading is there");
    lines[line][column].clone()
}

#[test]
fn a_line_says_what_the_record_says() {
    assert_eq!(lines().len(), 4);
    assert_eq!(cell(3, "tag"), "TIC-9");
    assert_eq!(cell(3, "status"), "not recorded");
    for (heading, expected) in [
        ("document", "LM-TIC-1"),
        ("status", "for signature"),
        ("p as", "gain per unit"),
        ("i as", "1/min"),
        ("found p", "2"),
        ("found i", "1"),
        ("found d", "off"),
        ("left i", "0.625"),
        ("left differs from recommended", "no"),
        ("model", "first order"),
        ("gain", "1.125"),
        ("gain unit", "degC/%"),
        ("second time constant s", ""),
        ("binding limit", "op move"),
        ("found Ms", "unstable"),
        ("left Ms, worst", "1.457"),
        ("open items", ""),
    ] {
        assert_eq!(cell(1, heading), expected, "{heading}");
    }
}

#[test]
fn what_is_not_known_is_blank() {
    for heading in [
        "recommended p",
        "left i",
        "left d",
        "model",
        "gain",
        "found Ms",
    ] {
        assert_eq!(cell(2, heading), "", "{heading}");
    }
    assert_eq!(cell(2, "status"), "withheld");
    assert_eq!(
        cell(2, "open items"),
        "No usable step: the PV moved less than its noise."
    );
}

#[test]
fn a_service_is_not_run_as_a_formula() {
    assert_eq!(cell(2, "service"), "'=cmd|' /C calc'!A0");
}

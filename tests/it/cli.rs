//! What is typed and what is answered.

use crate::support::{asleft, folder};

const COMMANDS: [&str; 6] = ["new", "plan", "inspect", "check", "record", "schema"];

#[test]
fn every_command_has_help_with_an_example() {
    let help = asleft(&["--help"]).ends_with(0).out;
    for command in COMMANDS {
        assert!(help.contains(&format!("  {command} ")), "{command}\n{help}");
        let help = asleft(&[command, "--help"]).ends_with(0).out;
        assert!(help.contains("Example"), "{help}");
        assert!(help.contains(&format!("  asleft {command}")), "{help}");
        assert!(
            help.contains("--json") && help.contains("--quiet"),
            "{help}"
        );
    }
    for code in ["0  ", "1  ", "2  ", "3  "] {
        assert!(help.contains(code), "{help}");
    }
}

#[test]
fn what_is_not_understood_ends_with_2() {
    for arguments in [
        &["rekord", "job"][..],
        &["record"],
        &["record", "job", "--lop", "A"],
        &["inspect"],
        &[],
    ] {
        let run = asleft(arguments).ends_with(2);
        assert!(run.out.is_empty(), "{}", run.out);
        assert!(!run.err.is_empty());
    }
    let run = asleft(&["rekord", "job"]);
    assert!(run.err.contains("record"), "the nearest command is named");
}

#[test]
fn a_job_that_is_not_there_ends_with_1_and_names_it() {
    let folder = folder();
    let job = folder.path().join("no-such-job");
    let job = job.to_str().expect("a plain path");
    for command in ["plan", "check", "record"] {
        let run = asleft(&[command, job]).ends_with(1);
        assert!(run.err.contains("no-such-job"), "{}", run.err);
        assert!(run.out.is_empty(), "{}", run.out);

        let run = asleft(&[command, job, "--quiet"]).ends_with(1);
        assert!(run.err.contains("no-such-job"), "quiet keeps errors");

        let run = asleft(&[command, job, "--json"]).ends_with(1);
        let json: serde_json::Value = serde_json::from_str(&run.out).expect("one JSON document");
        assert_eq!(json["problems"][0]["severity"], "error");
        assert!(run.err.is_empty(), "{}", run.err);
    }
    assert!(
        !folder.path().join("no-such-job").exists(),
        "nothing is written"
    );
}

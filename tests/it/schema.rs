//! The JSON Schema of the record.

use crate::support::{asleft, holds_as_kept};
use crate::synthetic;
use serde_json::{Value, json};

fn validator() -> jsonschema::Validator {
    let schema: Value = serde_json::from_str(&asleft::archive::schema_text()).expect("JSON");
    jsonschema::draft202012::meta::validate(&schema).expect("a schema of 2020-12");
    jsonschema::draft202012::new(&schema).expect("a schema of 2020-12")
}

#[test]
fn the_printed_schema_is_the_one_kept() {
    let printed = asleft(&["schema"]).ends_with(0).out;
    holds_as_kept("tests/record.schema.json", &printed);
}

#[test]
fn records_hold_to_the_schema() {
    let validator = validator();
    for record in [synthetic::signed(), synthetic::withheld()] {
        let value = serde_json::to_value(&record).expect("JSON");
        let faults: Vec<String> = validator
            .iter_errors(&value)
            .map(|fault| format!("{}: {fault}", fault.instance_path()))
            .collect();
        assert!(faults.is_empty(), "{faults:#?}");
    }
}

#[test]
fn the_schema_refuses_what_is_no_record() {
    let validator = validator();
    let good = serde_json::to_value(synthetic::signed()).expect("JSON");
    for (pointer, wrong) in [
        ("/schema", json!("asleft/record/2")),
        ("/document/status", json!("final")),
        ("/document/date", json!(20260314)),
        ("/model/kind", json!("third-order")),
        ("/model/gain/low", json!("0.7")),
        ("/settings/as_found/native/p", json!(null)),
        ("/design/binding_limit", json!("speed")),
        ("/steps/0/verdict", json!("good")),
        ("/logs/0/gaps/0/from", json!(true)),
    ] {
        let mut bad = good.clone();
        *bad.pointer_mut(pointer).expect("the field is there") = wrong;
        assert!(!validator.is_valid(&bad), "{pointer}");
    }
    // A field that may be null is there all the same.
    for (block, field) in [("settings", "as_left"), ("design", "governing_model")] {
        let mut bad = good.clone();
        bad[block].as_object_mut().expect("an object").remove(field);
        assert!(!validator.is_valid(&bad), "{block}.{field}");
    }
}

//! The JSON of a document, and the seal that ties its pages to it.

use crate::archive::files;
use crate::notice::{Place, Problem};
use crate::record::{Record, SCHEMA};
use schemars::generate::SchemaSettings;
use serde::Serialize;
use serde::de::DeserializeOwned;
use serde_json::Value;
use serde_json::ser::{PrettyFormatter, Serializer};
use sha2::{Digest, Sha256};
use std::path::Path;

/// What stands before the digest in a seal.
const SEAL_PREFIX: &str = "sha256:";

/// The SHA-256 of some bytes, lower-case hex.
pub fn sha256(bytes: &[u8]) -> String {
    Sha256::digest(bytes)
        .iter()
        .map(|byte| format!("{byte:02x}"))
        .collect()
}

/// The record with its seal in `provenance.seal`.
///
/// # Errors
/// Where a figure of the record is not a number: JSON would lose it.
pub fn seal(mut record: Record) -> Result<Record, Problem> {
    // The samples are not in the JSON; without them the record must come back from it as it went.
    let samples: Vec<_> = record
        .logs
        .iter_mut()
        .map(|log| std::mem::take(&mut log.data))
        .collect();
    let value = as_value(&record);
    let whole =
        serde_json::from_value::<Record>(value.clone()).is_ok_and(|read_back| read_back == record);
    if !whole {
        return Err(Problem::general(format!(
            "the record of {} holds a figure that is not a number",
            record.control_loop.tag
        ))
        .hint("This is a fault of the program; please report it with the job"));
    }
    record.provenance.seal = seal_of(&value);
    for (log, data) in record.logs.iter_mut().zip(samples) {
        log.data = data;
    }
    Ok(record)
}

/// The seal of a document's JSON: SHA-256 over it without `provenance.seal`, in the canonical form
/// of RFC 8785 (keys sorted, shortest numbers, no white space).
pub fn seal_of(document: &Value) -> String {
    let mut bare = document.clone();
    if let Some(Value::Object(provenance)) = bare.get_mut("provenance") {
        provenance.remove("seal");
    }
    format!("{SEAL_PREFIX}{}", sha256(&canonical(&bare)))
}

/// Whether the seal that a document's JSON bears is that of its figures.
pub fn seal_holds(document: &Value) -> bool {
    document["provenance"]["seal"].as_str() == Some(seal_of(document).as_str())
}

/// The canonical form of RFC 8785, UTF-8.
fn canonical(value: &Value) -> Vec<u8> {
    serde_json_canonicalizer::to_vec(value)
        .expect("a JSON value has string keys and finite numbers alone")
}

/// A document as a JSON value.
pub(super) fn as_value(document: &impl Serialize) -> Value {
    serde_json::to_value(document).expect("the documents have string keys alone")
}

/// A document as JSON text: fields in the order of their types, one space of indent, a new line
/// at the end.
pub fn json_text(document: &impl Serialize) -> String {
    let mut bytes = Vec::new();
    let mut serializer = Serializer::with_formatter(&mut bytes, PrettyFormatter::with_indent(b" "));
    document
        .serialize(&mut serializer)
        .expect("the documents have string keys alone, and memory takes every byte");
    bytes.push(b'\n');
    String::from_utf8(bytes).expect("JSON is UTF-8")
}

/// Reads a record back from its JSON. Its samples are in the files that its logs name, not here.
///
/// # Errors
/// Where the file is not there, is not JSON, or is not a record of this format; each with its place.
pub fn read_record(path: &Path) -> Result<Record, Problem> {
    let text = files::read(path)?
        .ok_or_else(|| Problem::error(Place::file(files::shown(path)), "there is no such file"))?;
    record_from_text(&text, &Place::file(files::shown(path)))
}

/// The same from text that was read from `place`.
pub(super) fn record_from_text(text: &str, place: &Place) -> Result<Record, Problem> {
    let schema = parsed::<Value>(text, place)?["schema"].clone();
    if schema != SCHEMA {
        return Err(Problem::error(
            place.clone(),
            format!(
                "is no record of this program: its \"schema\" is {schema}, expected \"{SCHEMA}\""
            ),
        ));
    }
    parsed(text, place)
}

/// JSON text as a value of a type, or the line and column where it is not one.
pub(super) fn parsed<T: DeserializeOwned>(text: &str, place: &Place) -> Result<T, Problem> {
    serde_json::from_str(text).map_err(|error| {
        let sentence = error.to_string();
        let sentence = sentence
            .rsplit_once(" at line ")
            .map_or(sentence.as_str(), |(sentence, _)| sentence);
        let place = match error.line() {
            // Line 0: the fault is of no single place.
            0 => place.clone(),
            line => place
                .clone()
                .row(line)
                .column(error.column().saturating_sub(1), None),
        };
        Problem::error(place, format!("is not the JSON expected: {sentence}"))
    })
}

/// The JSON Schema (2020-12) of a record's JSON.
pub fn schema_text() -> String {
    // As written: a field that may be null is there all the same.
    let settings = SchemaSettings::draft2020_12().for_serialize();
    let mut schema = settings.into_generator().into_root_schema_for::<Record>();
    schema.insert("title".to_owned(), SCHEMA.into());
    if let Some(field) = schema.pointer_mut("/properties/schema") {
        field["const"] = SCHEMA.into();
    }
    json_text(&schema)
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    #[test]
    fn canonical_form_is_that_of_rfc_8785() {
        // RFC 8785, sec. 3.2.2 and 3.2.3: the sample object and its canonical form.
        let sample: Value = serde_json::from_str(
            r#"{
                "numbers": [333333333.33333329, 1E30, 4.50, 2e-3, 0.000000000000000000000000001],
                "string": "\u20ac$\u000F\u000aA'\u0042\u0022\u005c\\\"\/",
                "literals": [null, true, false]
            }"#,
        )
        .expect("the sample of the RFC");
        let expected = "{\"literals\":[null,true,false],\
            \"numbers\":[333333333.3333333,1e+30,4.5,0.002,1e-27],\
            \"string\":\"€$\\u000f\\nA'B\\\"\\\\\\\\\\\"/\"}";
        assert_eq!(
            String::from_utf8(canonical(&sample)).expect("UTF-8"),
            expected
        );
    }

    #[test]
    fn digest_is_sha_256() {
        // FIPS 180-4 example: the one-block message "abc".
        assert_eq!(
            sha256(b"abc"),
            "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
        );
    }

    #[test]
    fn the_seal_leaves_out_itself_and_nothing_else() {
        let plain = json!({"a": 1.0, "provenance": {"program": "p"}});
        let mut sealed = json!({"a": 1, "provenance": {"program": "p", "seal": ""}});
        sealed["provenance"]["seal"] = seal_of(&plain).into();
        assert!(seal_holds(&sealed));
        for (field, value) in [("a", json!(2)), ("b", json!(null))] {
            let mut changed = sealed.clone();
            changed[field] = value;
            assert!(!seal_holds(&changed), "{field}");
        }
        sealed["provenance"]["program"] = "q".into();
        assert!(!seal_holds(&sealed));
        assert!(!seal_holds(&json!({"a": 1})));
    }

    #[test]
    fn a_fault_in_json_has_its_place() {
        let place = Place::file("records/a.json");
        let problem = record_from_text("{\n \"schema\": ,\n}", &place).expect_err("no JSON");
        assert_eq!(
            problem.to_string(),
            "records/a.json, line 2, column 12: is not the JSON expected: expected value"
        );
        let problem = record_from_text("{\"schema\": \"x/1\"}", &place).expect_err("no record");
        assert_eq!(
            problem.message,
            "is no record of this program: its \"schema\" is \"x/1\", expected \"asleft/record/1\""
        );
    }
}

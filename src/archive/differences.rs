//! What differs between two JSON documents, in words.

use serde_json::Value;
use std::fmt;

/// Longest text of a value in a message, signs.
const LONGEST_VALUE: usize = 40;

/// One figure or text that differs between two documents of the same kind.
#[derive(Debug, Clone, PartialEq)]
pub struct Difference {
    /// Names of the fields down to it; entries of lists by number, 1 for the first.
    pub path: Vec<String>,
    /// In the older one; `None` where the field is missing there.
    pub old: Option<Value>,
    /// In the newer one; `None` where the field is missing there.
    pub new: Option<Value>,
}

impl fmt::Display for Difference {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let path: Vec<String> = self
            .path
            .iter()
            .map(|name| name.replace('_', " "))
            .collect();
        write!(
            f,
            "{}: {} in the issued record, now {}",
            path.join(", "),
            in_words(self.old.as_ref()),
            in_words(self.new.as_ref())
        )
    }
}

fn in_words(value: Option<&Value>) -> String {
    match value {
        None | Some(Value::Null) => "nothing".to_owned(),
        Some(Value::Array(entries)) => match entries.len() {
            0 => "none".to_owned(),
            1 => "1 entry".to_owned(),
            count => format!("{count} entries"),
        },
        Some(Value::Object(_)) => "present".to_owned(),
        Some(Value::String(text)) if text.chars().count() > LONGEST_VALUE => {
            let beginning: String = text.chars().take(LONGEST_VALUE).collect();
            format!("\"{beginning}…\"")
        }
        Some(plain) => plain.to_string(),
    }
}

/// Every difference between two documents, in the order of their field names.
///
/// A list of bare numbers, such as the line of a curve, counts as one.
pub fn between(old: &Value, new: &Value) -> Vec<Difference> {
    let mut found = Vec::new();
    collect(Some(old), Some(new), &mut Vec::new(), &mut found);
    found
}

fn collect(
    old: Option<&Value>,
    new: Option<&Value>,
    path: &mut Vec<String>,
    found: &mut Vec<Difference>,
) {
    match (old, new) {
        (Some(Value::Object(old)), Some(Value::Object(new))) => {
            let mut names: Vec<&String> = old.keys().chain(new.keys()).collect();
            names.sort();
            names.dedup();
            for name in names {
                path.push(name.clone());
                collect(old.get(name), new.get(name), path, found);
                path.pop();
            }
        }
        (Some(Value::Array(old)), Some(Value::Array(new)))
            if old.len() == new.len() && !old.iter().all(Value::is_number) =>
        {
            for (index, (old, new)) in old.iter().zip(new).enumerate() {
                path.push(format!("no. {}", index + 1));
                collect(Some(old), Some(new), path, found);
                path.pop();
            }
        }
        _ if same(old, new) => {}
        _ => found.push(Difference {
            path: path.clone(),
            old: old.cloned(),
            new: new.cloned(),
        }),
    }
}

/// Whether two values say the same; 1 and 1.0 are one number in JSON.
fn same(old: Option<&Value>, new: Option<&Value>) -> bool {
    match (old, new) {
        (Some(Value::Number(old)), Some(Value::Number(new))) => old.as_f64() == new.as_f64(),
        (Some(Value::Array(old)), Some(Value::Array(new))) => {
            old.len() == new.len() && old.iter().zip(new).all(|(a, b)| same(Some(a), Some(b)))
        }
        _ => old == new,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    fn lines(old: Value, new: Value) -> Vec<String> {
        between(&old, &new)
            .iter()
            .map(Difference::to_string)
            .collect()
    }

    #[test]
    fn differences_read_as_words() {
        let old = json!({
            "settings": {"as_left": {"p": 1.2, "i": 60}},
            "steps": [{"verdict": "accepted"}, {"verdict": "accepted"}],
            "waiver": null,
            "same": 1,
        });
        let new = json!({
            "settings": {"as_left": {"p": 1.5, "i": 60.0}},
            "steps": [{"verdict": "accepted"}, {"verdict": "rejected"}],
            "waiver": "One direction only",
            "same": 1.0,
        });
        assert_eq!(
            lines(old, new),
            [
                "settings, as left, p: 1.2 in the issued record, now 1.5",
                "steps, no. 2, verdict: \"accepted\" in the issued record, now \"rejected\"",
                "waiver: nothing in the issued record, now \"One direction only\"",
            ]
        );
    }

    #[test]
    fn a_curve_is_one_difference() {
        assert_eq!(
            lines(json!({"pv": [1, 2, 3]}), json!({"pv": [1, 3, 4]})),
            ["pv: 3 entries in the issued record, now 3 entries"]
        );
        assert!(lines(json!({"pv": [1, 2]}), json!({"pv": [1.0, 2.0]})).is_empty());
    }
}

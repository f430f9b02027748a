//! Published values, each with its source in tests/published.

mod fits;
mod practice;
mod rules;

use crate::support::{names_in, root};
use serde::Deserialize;

#[derive(Deserialize)]
struct Published {
    case: Vec<Case>,
}

#[derive(Deserialize)]
struct Case {
    name: String,
    expected: Vec<Expected>,
    #[serde(flatten)]
    inputs: toml::Table,
}

#[derive(Deserialize)]
struct Expected {
    quantity: String,
    value: f64,
    tolerance: f64,
}

impl Case {
    /// An input that is a number; `None` where the case has none of this name.
    fn maybe(&self, name: &str) -> Option<f64> {
        self.inputs.get(name).and_then(toml::Value::as_float)
    }

    fn number(&self, name: &str) -> f64 {
        self.maybe(name)
            .unwrap_or_else(|| panic!("{}: no {name}", self.name))
    }

    fn text(&self, name: &str) -> &str {
        let value = self.inputs.get(name).and_then(toml::Value::as_str);
        value.unwrap_or_else(|| panic!("{}: no {name}", self.name))
    }

    fn numbers(&self, name: &str) -> Vec<f64> {
        let list = self.inputs.get(name).and_then(toml::Value::as_array);
        let list = list.unwrap_or_else(|| panic!("{}: no {name}", self.name));
        let number = |value: &toml::Value| value.as_float().expect("a list of decimals");
        list.iter().map(number).collect()
    }

    fn whole(&self, name: &str) -> i64 {
        let value = self.inputs.get(name).and_then(toml::Value::as_integer);
        value.unwrap_or_else(|| panic!("{}: no {name}", self.name))
    }

    /// Holds what was found against every expected value; `quantity` gives the figure of that name. A
    /// quantity that does not exist is infinite.
    fn check(&self, quantity: impl Fn(&str) -> f64) {
        self.check_computed(|name| Some(quantity(name)));
    }

    /// The same where `quantity` gives `None` for what the program does not compute;
    /// `tests/README.md` lists those.
    fn check_computed(&self, quantity: impl Fn(&str) -> Option<f64>) {
        for expected in &self.expected {
            let Some(found) = quantity(&expected.quantity) else {
                continue;
            };
            let equal = found == expected.value;
            assert!(
                equal || (found - expected.value).abs() <= expected.tolerance,
                "{}: {} is {found}, expected {} within {}",
                self.name,
                expected.quantity,
                expected.value,
                expected.tolerance
            );
        }
    }
}

fn cases(file: &str) -> Vec<Case> {
    let path = root().join("tests/published").join(file);
    let text = std::fs::read_to_string(path).expect("the published values are there");
    let published: Published = toml::from_str(&text).expect("the published values are in order");
    assert!(!published.case.is_empty());
    published.case
}

#[test]
fn every_published_file_is_read_by_a_test() {
    let sources = [
        include_str!("rules.rs"),
        include_str!("fits.rs"),
        include_str!("practice.rs"),
    ];
    for file in names_in(&root().join("tests/published")) {
        let reading = format!("cases(\"{file}\")");
        assert!(
            sources.iter().any(|source| source.contains(&reading)),
            "no test reads {file}"
        );
    }
}

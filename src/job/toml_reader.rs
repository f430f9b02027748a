//! Typed values out of TOML, with every problem at its line.

use crate::notice::{Place, Problem, nearest};
use chrono::NaiveDate;
use std::ops::Range;
use toml::de::{DeTable, DeValue};

/// A table with its name and place.
pub struct Table<'a> {
    values: DeTable<'a>,
    name: String,
    span: Range<usize>,
}

/// Reads values and gathers problems.
pub struct Reader<'a> {
    file: &'a str,
    text: &'a str,
    problems: Vec<Problem>,
}

impl<'a> Reader<'a> {
    /// A reader of `text`, which stands in `file`.
    pub fn new(file: &'a str, text: &'a str) -> Self {
        Reader {
            file,
            text,
            problems: Vec::new(),
        }
    }

    /// The whole text as a table.
    pub fn parse(&mut self) -> Option<Table<'a>> {
        match DeTable::parse(self.text) {
            Ok(root) => {
                let span = root.span();
                Some(Table {
                    values: root.into_inner(),
                    name: String::new(),
                    span: span.start..span.start,
                })
            }
            Err(error) => {
                let span = error.span().unwrap_or(0..0);
                let message = error.message().trim().replace('\n', ", ");
                self.problems.push(Problem::error(self.at(&span), message));
                None
            }
        }
    }

    /// The problems found, in order of their lines.
    pub fn finish(mut self) -> Vec<Problem> {
        self.problems
            .sort_by_key(|problem| problem.place.as_ref().and_then(|place| place.row));
        self.problems
    }

    fn at(&self, span: &Range<usize>) -> Place {
        let before = &self.text[..span.start.min(self.text.len())];
        Place::file(self.file).row(1 + before.matches('\n').count())
    }

    /// Where a table stands.
    pub fn place(&self, table: &Table<'_>) -> Place {
        self.at(&table.span)
    }

    /// Tells keys that are not among the known ones.
    pub fn known_keys(&mut self, table: &Table<'_>, known: &[&str]) {
        for key in table.values.keys() {
            let word: &str = key.get_ref();
            if known.contains(&word) {
                continue;
            }
            let within = match table.name.as_str() {
                "" => format!("a table of {}", self.file),
                name => format!("a key of {name}"),
            };
            let mut problem =
                Problem::error(self.at(&key.span()), format!("\"{word}\" is not {within}"));
            problem.hint = nearest(word, known.iter().copied())
                .map(|near| format!("did you mean \"{near}\"?"));
            self.problems.push(problem);
        }
    }

    /// Tells that something is missing in a table.
    pub fn missing(&mut self, table: &Table<'_>, message: &str) {
        let problem = Problem::error(self.place(table), message);
        self.problems.push(problem);
    }

    /// Tells that the value of a key is wrong.
    pub fn wrong(&mut self, table: &Table<'_>, key: &str, message: &str) {
        let span = value(table, key).map_or(table.span.clone(), |(_, span)| span);
        self.problems.push(Problem::error(self.at(&span), message));
    }

    fn expected(&mut self, span: &Range<usize>, key: &str, what: &str, found: &DeValue<'_>) {
        let found = match found {
            DeValue::String(text) => format!("\"{text}\""),
            DeValue::Integer(_) | DeValue::Float(_) => "a number".to_owned(),
            DeValue::Boolean(value) => value.to_string(),
            DeValue::Datetime(date) => date.to_string(),
            DeValue::Array(_) => "a list".to_owned(),
            DeValue::Table(_) => "a table".to_owned(),
        };
        self.problems.push(Problem::error(
            self.at(span),
            format!("\"{key}\" has to be {what}, found {found}"),
        ));
    }

    /// A table within a table.
    pub fn table<'t>(&mut self, table: &Table<'t>, key: &str) -> Option<Table<'t>> {
        let (found, span) = value(table, key)?;
        match found {
            DeValue::Table(values) => Some(Table {
                values: values.clone(),
                name: match table.name.trim_matches(['[', ']']) {
                    "" => format!("[{key}]"),
                    outer => format!("[{outer}.{key}]"),
                },
                span,
            }),
            other => {
                self.expected(&span, key, &format!("a table, written [{key}]"), other);
                None
            }
        }
    }

    /// A list of tables.
    pub fn tables<'t>(&mut self, table: &Table<'t>, key: &str) -> Vec<Table<'t>> {
        let Some((found, span)) = value(table, key) else {
            return Vec::new();
        };
        let DeValue::Array(items) = found else {
            self.expected(
                &span,
                key,
                &format!("a list of tables, each written [[{key}]]"),
                found,
            );
            return Vec::new();
        };
        let mut tables = Vec::new();
        for item in items.iter() {
            match item.get_ref() {
                DeValue::Table(values) => tables.push(Table {
                    values: values.clone(),
                    name: format!("[[{key}]]"),
                    span: item.span(),
                }),
                other => self.expected(
                    &item.span(),
                    key,
                    &format!("a table, written [[{key}]]"),
                    other,
                ),
            }
        }
        tables
    }

    /// A text; an empty one counts as absent.
    pub fn text(&mut self, table: &Table<'_>, key: &str) -> Option<String> {
        let (found, span) = value(table, key)?;
        match found {
            DeValue::String(text) => Some(text.trim().to_owned()).filter(|text| !text.is_empty()),
            other => {
                self.expected(&span, key, "a text in quotation marks", other);
                None
            }
        }
    }

    /// A text that must be there.
    pub fn required_text(&mut self, table: &Table<'_>, key: &str) -> Option<String> {
        self.required(table, key, Reader::text)
    }

    fn required<T>(
        &mut self,
        table: &Table<'_>,
        key: &str,
        read: impl Fn(&mut Self, &Table<'_>, &str) -> Option<T>,
    ) -> Option<T> {
        let told = self.problems.len();
        let found = read(self, table, key);
        if found.is_none() && self.problems.len() == told {
            let within = match table.name.as_str() {
                "" => String::new(),
                name => format!(" in {name}"),
            };
            self.problems.push(Problem::error(
                self.place(table),
                format!("\"{key}\" is missing{within}"),
            ));
        }
        found
    }

    /// A list of texts; a single text counts as a list of one.
    pub fn texts(&mut self, table: &Table<'_>, key: &str) -> Vec<String> {
        let Some((found, span)) = value(table, key) else {
            return Vec::new();
        };
        let items: Vec<&DeValue<'_>> = match found {
            DeValue::Array(items) => items.iter().map(|item| item.get_ref()).collect(),
            single => vec![single],
        };
        let mut texts = Vec::new();
        for item in items {
            match item {
                DeValue::String(text) => texts.push(text.trim().to_owned()),
                other => self.expected(&span, key, "a list of texts", other),
            }
        }
        texts
    }

    /// One of a few words.
    pub fn word<T: Copy>(
        &mut self,
        table: &Table<'_>,
        key: &str,
        words: &[(&str, T)],
    ) -> Option<T> {
        let text = self.text(table, key)?;
        let found = words
            .iter()
            .find(|(word, _)| *word == text)
            .map(|(_, value)| *value);
        if found.is_none() {
            let list: Vec<String> = words
                .iter()
                .map(|(word, _)| format!("\"{word}\""))
                .collect();
            self.wrong(
                table,
                key,
                &format!(
                    "\"{key}\" has to be {}, found \"{text}\"",
                    list.join(" or ")
                ),
            );
        }
        found
    }

    /// A date, bare or as text.
    pub fn date(&mut self, table: &Table<'_>, key: &str) -> Option<NaiveDate> {
        let (found, span) = value(table, key)?;
        let date = match found {
            DeValue::String(text) => text.trim().parse().ok(),
            DeValue::Datetime(at) if at.time.is_none() => at.date.and_then(|date| {
                NaiveDate::from_ymd_opt(
                    i32::from(date.year),
                    u32::from(date.month),
                    u32::from(date.day),
                )
            }),
            _ => None,
        };
        if date.is_none() {
            self.expected(&span, key, "a date such as 2026-03-14", found);
        }
        date
    }

    /// A date that must be there.
    pub fn required_date(&mut self, table: &Table<'_>, key: &str) -> Option<NaiveDate> {
        self.required(table, key, Reader::date)
    }

    /// A number above 0.
    pub fn positive(&mut self, table: &Table<'_>, key: &str) -> Option<f64> {
        let (found, span) = value(table, key)?;
        let number = number(found).filter(|number| *number > 0.0);
        if number.is_none() {
            self.expected(&span, key, "a number above 0", found);
        }
        number
    }

    /// Two numbers, neither below 0.
    pub fn pair(&mut self, table: &Table<'_>, key: &str) -> Option<[f64; 2]> {
        let (found, span) = value(table, key)?;
        let numbers: Option<Vec<f64>> = match found {
            DeValue::Array(items) => items
                .iter()
                .map(|item| number(item.get_ref()).filter(|number| *number >= 0.0))
                .collect(),
            _ => None,
        };
        match numbers.as_deref() {
            Some([first, second]) => Some([*first, *second]),
            _ => {
                self.expected(
                    &span,
                    key,
                    "a pair of numbers [reservation, rejected]",
                    found,
                );
                None
            }
        }
    }
}

fn value<'t, 'a>(table: &'t Table<'a>, key: &str) -> Option<(&'t DeValue<'a>, Range<usize>)> {
    table
        .values
        .iter()
        .find(|(known, _)| known.get_ref() == key)
        .map(|(key, value)| {
            // A value's own line may be far below its key in a list; the key is what is looked for.
            (value.get_ref(), key.span())
        })
}

fn number(value: &DeValue<'_>) -> Option<f64> {
    let text = match value {
        DeValue::Integer(integer) if integer.radix() == 10 => integer.as_str(),
        DeValue::Float(float) => float.as_str(),
        _ => return None,
    };
    text.replace('_', "")
        .parse::<f64>()
        .ok()
        .filter(|number| number.is_finite())
}

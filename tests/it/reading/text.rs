//! Delimited text: every sign between columns, decimal sign, encoding, end of line, way to write a moment,
//! side by side or one signal below the other.

use super::{CellText, Column, Sample, TAG, Truth, holds, later, read, read_or_told, told, truth};
use asleft::read::{DateOrder, DecimalSign, FileCache, LogRequest, read_log};
use proptest::prelude::*;

/// How moments are written.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Moments {
    /// A pattern of date and time of day, and the order of its numbers where it has one.
    Pattern(&'static str, Option<DateOrder>),
    /// Date and time of day in columns of their own.
    Apart(&'static str, Option<DateOrder>),
    /// Days since 1899-12-30.
    Serial,
    /// Seconds since 1970.
    EpochSeconds,
    /// Milliseconds since 1970.
    EpochMilliseconds,
    /// Elapsed seconds, from this millisecond on.
    ElapsedSeconds(i64),
    /// Elapsed minutes, from this millisecond on.
    ElapsedMinutes(i64),
    /// Time of day alone.
    TimeOfDay,
}

fn moments() -> impl Strategy<Value = Moments> {
    let day = Some(DateOrder::DayFirst);
    let month = Some(DateOrder::MonthFirst);
    let from_ms = 0_i64..1_000_000;
    prop_oneof![
        prop::sample::select(vec![
            ("%Y-%m-%d %H:%M:%S%.3f", None),
            ("%Y-%m-%dT%H:%M:%S%.3f", None),
            ("%Y-%m-%dT%H:%M:%S%.3fZ", None),
            ("%Y-%m-%dT%H:%M:%S%.3f+02:00", None),
            ("%Y/%m/%d %H:%M:%S%.3f", None),
            ("%d.%m.%Y %H:%M:%S%.3f", day),
            ("%d/%m/%Y %H:%M:%S%.3f", day),
            ("%m/%d/%Y %I:%M:%S%.3f %p", month),
            ("%d-%b-%Y %H:%M:%S%.3f", None),
            ("%d-%b-%y %H:%M:%S%.3f", None),
            ("%b %d %Y %H:%M:%S%.3f", None),
            ("%a %d %B %Y %H:%M:%S%.3f", None),
            ("%Y%m%d %H%M%S%.3f", None),
            ("%d/%m/%y %H:%M:%S%.3f", day),
        ])
        .prop_map(|(pattern, order)| Moments::Pattern(pattern, order)),
        prop::sample::select(vec![
            ("%Y-%m-%d", None),
            ("%d/%m/%Y", day),
            ("%m/%d/%Y", month),
        ])
        .prop_map(|(pattern, order)| Moments::Apart(pattern, order)),
        Just(Moments::Serial),
        Just(Moments::EpochSeconds),
        Just(Moments::EpochMilliseconds),
        from_ms.clone().prop_map(Moments::ElapsedSeconds),
        from_ms.prop_map(Moments::ElapsedMinutes),
        Just(Moments::TimeOfDay),
    ]
}

/// How a text file is written.
#[derive(Debug, Clone)]
struct Form {
    delimiter: char,
    comma: bool,
    encoding: usize,
    end: &'static str,
    titles: usize,
    units_in_headings: bool,
    units_below: bool,
    trailing: bool,
    quoted: bool,
    sep: bool,
    moments: Moments,
    /// Columns of other loops before and after.
    others: (usize, usize),
    /// One row per signal and moment.
    long: bool,
    newest_first: bool,
}

fn form() -> impl Strategy<Value = Form> {
    let signs = (
        prop::sample::select(vec![',', ';', '\t', '|']),
        any::<bool>(),
        0_usize..7,
        prop::sample::select(vec!["\n", "\r\n"]),
        0_usize..3,
    );
    let around = (
        any::<bool>(),
        any::<bool>(),
        any::<bool>(),
        any::<bool>(),
        prop::bool::weighted(0.1),
    );
    let layout = (
        moments(),
        (0_usize..3, 0_usize..3),
        prop::bool::weighted(0.25),
        prop::bool::weighted(0.15),
    );
    (signs, around, layout).prop_map(|(signs, around, layout)| Form {
        delimiter: signs.0,
        comma: signs.1,
        encoding: signs.2,
        end: signs.3,
        titles: signs.4,
        units_in_headings: around.0,
        units_below: around.1,
        trailing: around.2,
        quoted: around.3,
        sep: around.4,
        moments: layout.0,
        others: layout.1,
        long: layout.2,
        newest_first: layout.3,
    })
}

impl Form {
    fn sign(&self) -> char {
        if self.comma { ',' } else { '.' }
    }

    /// The time cells of a row.
    fn time(&self, truth: &Truth, sample: &Sample) -> Vec<String> {
        let number = |text: String| text.replace('.', &self.sign().to_string());
        let elapsed = |from_ms: i64| from_ms + sample.at_ms;
        let at = truth.at(sample);
        match self.moments {
            Moments::Pattern(pattern, _) => vec![at.format(pattern).to_string()],
            Moments::Apart(pattern, _) => vec![
                at.format(pattern).to_string(),
                at.format("%H:%M:%S%.3f").to_string(),
            ],
            Moments::Serial => {
                let since = (truth.start_ms + sample.at_ms) as f64 / 86_400_000.0;
                vec![number(format!("{:.10}", since + 25_569.0))]
            }
            Moments::EpochSeconds => {
                let ms = truth.start_ms + sample.at_ms;
                vec![number(format!("{}.{:03}", ms / 1000, ms % 1000))]
            }
            Moments::EpochMilliseconds => vec![(truth.start_ms + sample.at_ms).to_string()],
            Moments::ElapsedSeconds(from) => {
                let ms = elapsed(from);
                vec![number(format!("{}.{:03}", ms / 1000, ms % 1000))]
            }
            Moments::ElapsedMinutes(from) => {
                vec![number(format!("{:.9}", elapsed(from) as f64 / 60_000.0))]
            }
            Moments::TimeOfDay => vec![at.format("%H:%M:%S%.3f").to_string()],
        }
    }

    fn time_headings(&self) -> &'static [&'static str] {
        match self.moments {
            Moments::Apart(..) => &["Date", "Time"],
            Moments::ElapsedSeconds(_) => &["Time (s)"],
            Moments::ElapsedMinutes(_) => &["Elapsed time [min]"],
            _ => &["Timestamp"],
        }
    }

    fn elapsed_from_ms(&self) -> Option<i64> {
        match self.moments {
            Moments::ElapsedSeconds(from) | Moments::ElapsedMinutes(from) => Some(from),
            Moments::TimeOfDay => Some(0),
            _ => None,
        }
    }

    fn order(&self) -> Option<DateOrder> {
        match self.moments {
            Moments::Pattern(_, order) | Moments::Apart(_, order) => order,
            _ => None,
        }
    }

    fn cell(&self, column: Column, sample: &Sample) -> String {
        match column.cell(sample) {
            CellText::Number(figures) => figures.text(self.sign()),
            CellText::Text(text) => text.to_owned(),
        }
    }

    fn line(&self, cells: &[String]) -> String {
        let quoted = |cell: &String| {
            let needs = cell.contains([self.delimiter, '"', '\n']);
            if needs || (self.quoted && !cell.is_empty()) {
                format!("\"{}\"", cell.replace('"', "\"\""))
            } else {
                cell.clone()
            }
        };
        let mut line = cells
            .iter()
            .map(quoted)
            .collect::<Vec<String>>()
            .join(&self.delimiter.to_string());
        if self.trailing {
            line.push(self.delimiter);
        }
        line + self.end
    }

    fn text(&self, truth: &Truth) -> String {
        let mut text = String::new();
        if self.sep {
            text.push_str(&format!("sep={}{}", self.delimiter, self.end));
        }
        for title in 0..self.titles {
            text.push_str(&format!("Trend {title} of unit 200{}", self.end));
        }
        let mut rows = if self.long {
            self.long_rows(truth)
        } else {
            self.wide_rows(truth)
        };
        if self.newest_first {
            rows.reverse();
        }
        text.push_str(&self.headings(truth));
        text.extend(rows.iter().map(|row| self.line(row)));
        text
    }

    fn headings(&self, truth: &Truth) -> String {
        let mut headings: Vec<String> = self
            .time_headings()
            .iter()
            .map(|text| (*text).to_owned())
            .collect();
        let mut units = vec![String::new(); headings.len()];
        if self.long {
            headings.extend(["Tag".to_owned(), "Value".to_owned()]);
            return self.line(&headings);
        }
        for (heading, column) in self.columns(truth) {
            headings.push(heading);
            let unit = match column {
                Column::Pv | Column::Sp => "degC",
                Column::Op => "%",
                Column::Mode | Column::Other => "",
            };
            units.push(unit.to_owned());
        }
        let mut lines = self.line(&headings);
        if self.units_below && !self.units_in_headings {
            lines.push_str(&self.line(&units));
        }
        lines
    }

    fn columns(&self, truth: &Truth) -> Vec<(String, Column)> {
        let other = |k: usize| {
            (
                format!("FIC-{}.{}", 300 + k / 2, ["PV", "OP"][k % 2]),
                Column::Other,
            )
        };
        let (before, after) = self.others;
        (0..before)
            .map(other)
            .chain(truth.columns(self.units_in_headings))
            .chain((before..before + after).map(other))
            .collect()
    }

    fn wide_rows(&self, truth: &Truth) -> Vec<Vec<String>> {
        let columns = self.columns(truth);
        let rows = truth.samples.iter();
        rows.map(|sample| {
            let mut row = self.time(truth, sample);
            row.extend(columns.iter().map(|(_, column)| self.cell(*column, sample)));
            row
        })
        .collect()
    }

    fn long_rows(&self, truth: &Truth) -> Vec<Vec<String>> {
        let mut rows = Vec::new();
        for sample in &truth.samples {
            let mut columns = truth.columns(false);
            columns.push(("PI-9.PV".to_owned(), Column::Other));
            for (tag, column) in columns {
                let mut row = self.time(truth, sample);
                row.extend([tag, self.cell(column, sample)]);
                rows.push(row);
            }
        }
        rows
    }

    fn bytes(&self, truth: &Truth) -> Vec<u8> {
        let text = self.text(truth);
        let wide = |mark: &str, bytes_of: fn(u16) -> [u8; 2]| -> Vec<u8> {
            format!("{mark}{text}")
                .encode_utf16()
                .flat_map(bytes_of)
                .collect()
        };
        match self.encoding {
            0 => text.into_bytes(),
            1 => format!("\u{feff}{text}").into_bytes(),
            2 => wide("\u{feff}", u16::to_le_bytes),
            3 => wide("\u{feff}", u16::to_be_bytes),
            4 => wide("", u16::to_le_bytes),
            5 => wide("", u16::to_be_bytes),
            // The degree sign is one byte in Windows-1252, of the same number as in Unicode.
            _ => text
                .chars()
                .map(|letter| u8::try_from(u32::from(letter)).expect("a letter of Latin-1"))
                .collect(),
        }
    }

    /// What the person would say of it where the reader asks.
    fn rule(&self) -> asleft::read::LogRule {
        let sign = if self.comma {
            DecimalSign::Comma
        } else {
            DecimalSign::Point
        };
        told(self.order(), Some(sign))
    }
}

#[test]
fn a_trace_written_as_text_in_any_form_is_read_again_as_it_was() {
    holds(600, (truth(), form()), |(truth, form)| {
        let log = read_or_told("trend.csv", &form.bytes(&truth), &form.rule())?;
        truth.is(&log, form.elapsed_from_ms())
    });
}

#[test]
fn a_log_of_another_day_is_the_same_but_for_its_clock() {
    let days = (0_i64..4000).prop_map(|days| days * 86_400_000);
    holds(100, (truth(), form(), days), |(truth, form, shift_ms)| {
        let mut shifted = truth.clone();
        shifted.start_ms += shift_ms;
        let rule = form.rule();
        let log = read_or_told("trend.csv", &form.bytes(&truth), &rule)?;
        let after = read_or_told("trend.csv", &form.bytes(&shifted), &rule)?;
        prop_assert_eq!(&log.samples.t_s, &after.samples.t_s);
        prop_assert_eq!(&log.samples.op, &after.samples.op);
        let at = |log: &asleft::read::LogRead| match log.clock {
            asleft::trace::Clock::Dated(at) => Some(at),
            asleft::trace::Clock::Elapsed => None,
        };
        prop_assert_eq!(at(&log).map(|at| later(at, shift_ms)), at(&after));
        Ok(())
    });
}

#[test]
fn a_log_in_another_unit_is_the_same_by_its_scale_and_offset() {
    holds(100, (truth(), form()), |(truth, form)| {
        let folder = crate::support::folder();
        std::fs::write(folder.path().join("trend.csv"), form.bytes(&truth)).expect("written");
        let request = LogRequest {
            root: folder.path().to_path_buf(),
            files: "trend.csv".to_owned(),
            tag: Some(TAG.to_owned()),
            rules: vec![form.rule()],
            pv_scale: Some(1.8),
            pv_offset: Some(32.0),
            ..LogRequest::default()
        };
        let plain = read("trend.csv", &form.bytes(&truth), Some(form.rule()));
        let plain = plain.map_err(|problems| TestCaseError::fail(format!("{problems:?}")))?;
        let scaled = read_log(&request, &FileCache::new());
        let scaled = scaled.map_err(|problems| TestCaseError::fail(format!("{problems:?}")))?;
        for (name, log_unit, schedule_unit) in [
            ("PV", &plain.samples.pv, &scaled.samples.pv),
            ("SP", &plain.samples.sp, &scaled.samples.sp),
        ] {
            for (log_unit, schedule_unit) in log_unit.iter().zip(schedule_unit) {
                let expected = log_unit * 1.8 + 32.0;
                prop_assert!(
                    expected == *schedule_unit || expected.is_nan() && schedule_unit.is_nan(),
                    "{}: {} is not {}",
                    name,
                    schedule_unit,
                    expected
                );
            }
        }
        prop_assert_eq!(&plain.samples.op, &scaled.samples.op);
        prop_assert_eq!(&plain.samples.good, &scaled.samples.good);
        Ok(())
    });
}

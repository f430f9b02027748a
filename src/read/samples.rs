//! The samples as they are attached to a record, and back.

use super::stamp::MICROSECONDS;
use crate::trace::{Clock, Moment, Samples};
use chrono::NaiveDateTime;
use std::fmt::Write;
use thiserror::Error;

/// First line of the attached samples.
pub const HEADING: &str = "time,t_s,pv,op,sp,mode,good";

/// Why a file is not the samples of a record.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[error("line {line}: {message}")]
pub struct SamplesError {
    line: usize,
    message: String,
}

/// The samples as delimited text, UTF-8, lines ended by a line feed: date and time of day (empty
/// for logs of elapsed time), seconds on the samples' clock, PV, OP, SP in engineering units as the
/// shortest decimal text that is that number, mode, and 1 for a good PV or 0. A missing value is empty.
pub fn samples_csv(samples: &Samples, clock: Clock) -> Vec<u8> {
    let mut text = String::with_capacity(64 * samples.t_s.len() + 64);
    text.push_str(HEADING);
    text.push('\n');
    for k in 0..samples.t_s.len() {
        let t_s = samples.t_s[k];
        if let Moment::Dated(at) = clock.at(t_s) {
            let _ = write!(text, "{}", at.format("%Y-%m-%dT%H:%M:%S%.f"));
        }
        let _ = write!(text, ",{t_s}");
        for value in [
            samples.pv[k],
            samples.op[k],
            samples.sp.get(k).copied().unwrap_or(f64::NAN),
        ] {
            text.push(',');
            if value.is_finite() {
                let _ = write!(text, "{value}");
            }
        }
        text.push(',');
        push_field(&mut text, samples.mode.get(k).map_or("", String::as_str));
        text.push_str(if samples.good[k] { ",1\n" } else { ",0\n" });
    }
    text.into_bytes()
}

/// A text as a field: quoted where it must be, and never one that a spreadsheet would run.
fn push_field(text: &mut String, field: &str) {
    let cell = crate::display::spreadsheet_cell(field);
    if cell.contains(['"', ',', '\n', '\r', '\'']) {
        text.push('"');
        text.push_str(&cell.replace('"', "\"\""));
        text.push('"');
    } else {
        text.push_str(&cell);
    }
}

/// The samples and their clock from what [`samples_csv`] wrote. Whether a mode means manual is
/// told by the words of `is_manual`.
///
/// # Errors
/// Where the text is not one that [`samples_csv`] wrote.
pub fn read_samples_csv(
    bytes: &[u8],
    is_manual: impl Fn(&str) -> bool,
) -> Result<(Samples, Clock), SamplesError> {
    let fail = |line: usize, message: &str| SamplesError {
        line,
        message: message.to_owned(),
    };
    let text = std::str::from_utf8(bytes).map_err(|_| fail(1, "the text is not UTF-8"))?;
    let mut lines = text.split_terminator('\n');
    if lines.next() != Some(HEADING) {
        return Err(fail(1, "the headings are not those of attached samples"));
    }
    let mut samples = Samples::default();
    let mut zero = None;
    for (k, line) in lines.enumerate() {
        let fail = |message: &str| fail(k + 2, message);
        let fields = split_fields(line);
        let [time, t_s, pv, op, sp, mode, good] = &fields[..] else {
            return Err(fail("a line has seven fields"));
        };
        let number = |field: &str| {
            if field.is_empty() {
                return Ok(f64::NAN);
            }
            field
                .parse::<f64>()
                .map_err(|_| fail("a field is not a number"))
        };
        let t_s = number(t_s)?;
        if !t_s.is_finite() {
            return Err(fail("t_s is missing"));
        }
        if !time.is_empty() {
            let at: NaiveDateTime = time
                .parse()
                .map_err(|_| fail("time is not a date and time"))?;
            let offset = libm::round(t_s * MICROSECONDS as f64) as i64;
            zero.get_or_insert(at - chrono::TimeDelta::microseconds(offset));
        }
        samples.t_s.push(t_s);
        samples.pv.push(number(pv)?);
        samples.op.push(number(op)?);
        samples.sp.push(number(sp)?);
        samples.mode.push(mode.clone());
        samples.good.push(match good.as_str() {
            "1" => true,
            "0" => false,
            _ => return Err(fail("good is 1 or 0")),
        });
    }
    if samples.sp.iter().all(|sp| sp.is_nan()) {
        samples.sp.clear();
    }
    if samples.mode.iter().all(String::is_empty) {
        samples.mode.clear();
    }
    samples.manual = samples.mode.iter().map(|mode| is_manual(mode)).collect();
    Ok((samples, zero.map_or(Clock::Elapsed, Clock::Dated)))
}

fn split_fields(line: &str) -> Vec<String> {
    let mut fields = vec![String::new()];
    let mut inside = false;
    let mut letters = line.chars().peekable();
    while let Some(letter) = letters.next() {
        match letter {
            '"' if inside && letters.peek() == Some(&'"') => {
                letters.next();
                fields.last_mut().expect("never empty").push('"');
            }
            '"' => inside = !inside,
            ',' if !inside => fields.push(String::new()),
            other => fields.last_mut().expect("never empty").push(other),
        }
    }
    for field in &mut fields {
        if let Some(rest) = field.strip_prefix('\'')
            && crate::display::spreadsheet_cell(rest) == *field
        {
            *field = rest.to_owned();
        }
    }
    fields
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::read::values::is_manual;

    fn example() -> Samples {
        Samples {
            t_s: vec![0.0, 0.5, 1.000_001],
            pv: vec![71.2, f64::NAN, 0.1 + 0.2],
            good: vec![true, false, true],
            op: vec![f64::NAN, 40.0, 40.0],
            sp: vec![70.0, 70.0, 1e-7],
            mode: vec!["MAN".into(), "=AUTO, \"x\"".into(), String::new()],
            manual: vec![true, false, false],
        }
    }

    #[test]
    fn samples_come_back_as_they_were() {
        let clock = Clock::Dated("2026-03-14T09:05:00.25".parse().expect("a time"));
        let bytes = samples_csv(&example(), clock);
        let (samples, back) = read_samples_csv(&bytes, |mode| is_manual(mode, &[])).expect("read");
        assert_eq!(back, clock);
        assert_eq!(samples_csv(&samples, back), bytes);
        assert_eq!(samples.pv[2], 0.1 + 0.2);
        assert_eq!(samples.mode, example().mode);
        assert_eq!(samples.manual, example().manual);
        let first = String::from_utf8_lossy(&bytes);
        let first = first.lines().nth(1).expect("a line");
        assert_eq!(first, "2026-03-14T09:05:00.250,0,71.2,,70,MAN,1");
    }

    #[test]
    fn logs_of_elapsed_time_have_no_date() {
        let bytes = samples_csv(&example(), Clock::Elapsed);
        assert!(bytes.starts_with(b"time,t_s,pv,op,sp,mode,good\n,0,71.2,,70,MAN,1\n"));
        let (_, clock) = read_samples_csv(&bytes, |_| false).expect("read");
        assert_eq!(clock, Clock::Elapsed);
    }

    #[test]
    fn other_texts_are_refused_with_their_line() {
        let error = read_samples_csv(b"time,t_s,pv,op,sp,mode,good\n,0,x,,70,MAN,1\n", |_| false)
            .expect_err("no number");
        assert_eq!(error.to_string(), "line 2: a field is not a number");
        assert!(read_samples_csv(b"t,pv\n", |_| false).is_err());
    }
}

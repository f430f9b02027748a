//! Numbers as text: the decimal sign, and signs between thousands.

/// The sign before the decimals.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum DecimalSign {
    /// `71.2`
    Point,
    /// `71,2`
    Comma,
}

impl DecimalSign {
    /// The sign itself.
    pub fn sign(self) -> char {
        match self {
            DecimalSign::Point => '.',
            DecimalSign::Comma => ',',
        }
    }
}

/// What one text says about the decimal sign.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Shape {
    /// Not a number in any reading.
    NotNumber,
    /// Digits alone.
    Plain,
    /// A number whose decimal sign can only be this one.
    Decimal(DecimalSign),
    /// `1.234` or `1,234`: a number with decimals or one with thousands; the sign that stands in it.
    Either(char),
}

/// The digits of a number text between its sign and its exponent or percent sign, and the exponent.
fn parts(text: &str) -> Option<(&str, &str, &str)> {
    let text = text.trim();
    let text = text.strip_suffix('%').unwrap_or(text).trim_end();
    let (sign, body) = if let Some(rest) = text.strip_prefix('+') {
        ("", rest)
    } else if let Some(rest) = text
        .strip_prefix('-')
        .or_else(|| text.strip_prefix('\u{2212}'))
    {
        ("-", rest)
    } else {
        ("", text)
    };
    let (body, exponent) = match body.find(['e', 'E']) {
        Some(at) => (&body[..at], &body[at..]),
        None => (body, ""),
    };
    if !exponent.is_empty() {
        let digits = exponent[1..].trim_start_matches(['+', '-']);
        if digits.is_empty()
            || exponent.len() - digits.len() > 2
            || !digits.bytes().all(|b| b.is_ascii_digit())
        {
            return None;
        }
    }
    let first_and_last_are_digits = body
        .bytes()
        .next()
        .is_some_and(|byte| byte.is_ascii_digit() || byte == b'.' || byte == b',')
        && body.bytes().any(|byte| byte.is_ascii_digit());
    first_and_last_are_digits.then_some((sign, body, exponent))
}

/// Signs that stand between thousands and never before decimals.
fn is_spacing(letter: char) -> bool {
    matches!(
        letter,
        ' ' | '\u{a0}' | '\u{202f}' | '\u{2009}' | '\'' | '\u{2019}'
    )
}

/// Whether digits in front of the decimal sign are grouped by threes with `separator`.
fn is_grouped(whole: &str, separator: impl Fn(char) -> bool) -> bool {
    let mut groups = whole.split(separator);
    let first = groups.next().unwrap_or_default();
    (1..=3).contains(&first.len())
        && first.bytes().all(|byte| byte.is_ascii_digit())
        && groups.all(|group| group.len() == 3 && group.bytes().all(|byte| byte.is_ascii_digit()))
}

/// What a text says about the decimal sign of its file.
pub fn shape(text: &str) -> Shape {
    let Some((_, body, exponent)) = parts(text) else {
        return Shape::NotNumber;
    };
    let points = body.matches('.').count();
    let commas = body.matches(',').count();
    let readable = |sign: DecimalSign| number(text, sign).is_some();
    match (points, commas) {
        (0, 0) if readable(DecimalSign::Point) => Shape::Plain,
        (0, 0) => Shape::NotNumber,
        (1, 0) | (0, 1) => {
            let (found, sign) = if points == 1 {
                ('.', DecimalSign::Point)
            } else {
                (',', DecimalSign::Comma)
            };
            if !readable(sign) {
                return Shape::NotNumber;
            }
            // A leading zero or a fourth digit in front is never a group of thousands.
            let thousands =
                exponent.is_empty() && !body.starts_with('0') && is_grouped(body, |l| l == found);
            if thousands {
                Shape::Either(found)
            } else {
                Shape::Decimal(sign)
            }
        }
        _ => match (readable(DecimalSign::Point), readable(DecimalSign::Comma)) {
            (true, false) => Shape::Decimal(DecimalSign::Point),
            (false, true) => Shape::Decimal(DecimalSign::Comma),
            _ => Shape::NotNumber,
        },
    }
}

/// The number that a text means with this decimal sign; `None` where it is none. Thousands may be
/// set apart by the other sign, a space or an apostrophe, in whole groups of three.
pub fn number(text: &str, sign: DecimalSign) -> Option<f64> {
    let (minus, body, exponent) = parts(text)?;
    if sign == DecimalSign::Point
        && body
            .bytes()
            .all(|byte| byte.is_ascii_digit() || byte == b'.')
    {
        let magnitude = if exponent.is_empty() {
            body.parse::<f64>()
        } else {
            format!("{body}{exponent}").parse::<f64>()
        };
        return finite(magnitude.ok()?, minus);
    }
    let (whole, decimals) = match body.split_once(sign.sign()) {
        Some((whole, decimals)) => (whole, decimals),
        None => (body, ""),
    };
    if !decimals.bytes().all(|byte| byte.is_ascii_digit()) {
        return None;
    }
    let other = match sign {
        DecimalSign::Point => ',',
        DecimalSign::Comma => '.',
    };
    let digits_alone = whole.bytes().all(|byte| byte.is_ascii_digit());
    let grouped = is_grouped(whole, |letter| letter == other) || is_grouped(whole, is_spacing);
    if !digits_alone && !grouped {
        return None;
    }
    let whole: String = whole.chars().filter(char::is_ascii_digit).collect();
    let text = format!("{whole}.{decimals}{exponent}");
    finite(text.parse().ok()?, minus)
}

fn finite(magnitude: f64, minus: &str) -> Option<f64> {
    magnitude.is_finite().then_some(if minus.is_empty() {
        magnitude
    } else {
        -magnitude
    })
}

/// What the texts of a file say together about its decimal sign. `W` is where a text stands.
#[derive(Debug, Clone)]
pub struct Evidence<W> {
    point: Option<(W, String)>,
    comma: Option<(W, String)>,
    either: Option<(W, String, char)>,
}

/// Why the decimal sign of a file is not known.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Undecided<W> {
    /// Every number with a sign reads both ways; one of them.
    Either {
        /// Where.
        at: W,
        /// The text.
        text: String,
    },
    /// Some numbers have a decimal point and others a decimal comma.
    Both {
        /// Where a decimal point stands.
        point: (W, String),
        /// Where a decimal comma stands.
        comma: (W, String),
    },
}

impl<W> Default for Evidence<W> {
    fn default() -> Self {
        Evidence {
            point: None,
            comma: None,
            either: None,
        }
    }
}

impl<W: Clone> Evidence<W> {
    /// Takes one text into account.
    pub fn observe(&mut self, text: &str, at: impl FnOnce() -> W) {
        // Most texts of a long log say again what the first ones said.
        let count = |sign: u8| text.bytes().filter(|byte| *byte == sign).count();
        match (count(b'.'), count(b',')) {
            (0, 0) => return,
            (1, 0) if self.point.is_some() => return,
            (0, 1) if self.comma.is_some() => return,
            _ => {}
        }
        match shape(text) {
            Shape::Decimal(DecimalSign::Point) if self.point.is_none() => {
                self.point = Some((at(), text.to_owned()));
            }
            Shape::Decimal(DecimalSign::Comma) if self.comma.is_none() => {
                self.comma = Some((at(), text.to_owned()));
            }
            Shape::Either(sign) if self.either.is_none() => {
                self.either = Some((at(), text.to_owned(), sign));
            }
            _ => {}
        }
    }

    /// Whether more texts can change nothing any more.
    pub fn is_full(&self) -> bool {
        self.point.is_some() && self.comma.is_some()
    }

    /// The decimal sign. In a file whose columns are separated by commas an unquoted point is the
    /// decimal sign.
    ///
    /// # Errors
    /// Where the texts contradict each other or say nothing definite.
    pub fn decide(&self, delimiter: Option<char>) -> Result<DecimalSign, Undecided<W>> {
        match (&self.point, &self.comma, &self.either) {
            (Some(point), Some(comma), _) => Err(Undecided::Both {
                point: point.clone(),
                comma: comma.clone(),
            }),
            (Some(_), None, _) | (None, None, None) => Ok(DecimalSign::Point),
            (None, Some(_), _) => Ok(DecimalSign::Comma),
            (None, None, Some((_, _, '.'))) if delimiter == Some(',') => Ok(DecimalSign::Point),
            (None, None, Some((at, text, _))) => Err(Undecided::Either {
                at: at.clone(),
                text: text.clone(),
            }),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_read_with_their_sign() {
        use DecimalSign::{Comma, Point};
        for (text, sign, expected) in [
            ("71.2", Point, Some(71.2)),
            ("-71,25", Comma, Some(-71.25)),
            ("1,234.5", Point, Some(1234.5)),
            ("1.234,5", Comma, Some(1234.5)),
            ("1 234,5", Comma, Some(1234.5)),
            ("1'234.5", Point, Some(1234.5)),
            (".5", Point, Some(0.5)),
            ("5.", Point, Some(5.0)),
            ("1.5e-3", Point, Some(0.0015)),
            ("1,5E3", Comma, Some(1500.0)),
            ("45 %", Point, Some(45.0)),
            ("\u{2212}3", Point, Some(-3.0)),
            ("71,2", Point, None),
            ("71.2", Comma, None),
            ("1.2.3", Point, None),
            ("12,34,567", Point, None),
            ("nan", Point, None),
            ("inf", Point, None),
            ("1e999", Point, None),
            ("e5", Point, None),
            (".", Point, None),
            ("", Point, None),
            ("14.03.2026", Point, None),
            ("14.03.2026", Comma, None),
            ("--5", Point, None),
        ] {
            assert_eq!(number(text, sign), expected, "{text} with {sign:?}");
        }
    }

    #[test]
    fn a_shape_tells_what_it_can() {
        assert_eq!(shape("71.2"), Shape::Decimal(DecimalSign::Point));
        assert_eq!(shape("1.234"), Shape::Either('.'));
        assert_eq!(shape("0.234"), Shape::Decimal(DecimalSign::Point));
        assert_eq!(shape("1234,567"), Shape::Decimal(DecimalSign::Comma));
        assert_eq!(shape("1.234.567"), Shape::Decimal(DecimalSign::Comma));
        assert_eq!(shape("1,234.567"), Shape::Decimal(DecimalSign::Point));
        assert_eq!(shape("1 234,567"), Shape::Decimal(DecimalSign::Comma));
        assert_eq!(shape("40"), Shape::Plain);
        assert_eq!(shape("14.03.2026"), Shape::NotNumber);
        assert_eq!(shape("Bad"), Shape::NotNumber);
    }

    #[test]
    fn a_file_decides_or_says_why_not() {
        let decide = |texts: &[&str], delimiter| {
            let mut evidence = Evidence::default();
            for (k, text) in texts.iter().enumerate() {
                evidence.observe(text, || k);
            }
            evidence.decide(delimiter)
        };
        assert_eq!(
            decide(&["1,234", "40,5"], Some(';')),
            Ok(DecimalSign::Comma)
        );
        assert_eq!(decide(&["1.234"], Some(',')), Ok(DecimalSign::Point));
        assert_eq!(
            decide(&["12", "1.234"], Some(';')),
            Err(Undecided::Either {
                at: 1,
                text: "1.234".into()
            })
        );
        assert!(matches!(
            decide(&["1.5", "1,5"], None),
            Err(Undecided::Both { .. })
        ));
    }
}

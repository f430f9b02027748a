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

/// Powers of ten that a double holds exactly.
const EXACT_POWERS: [f64; 23] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16,
    1e17, 1e18, 1e19, 1e20, 1e21, 1e22,
];

/// A number as most exports write it, at the beginning of a text.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Plain {
    /// The number.
    pub value: f64,
    /// Whether the decimal sign stands in it.
    pub has_sign: bool,
    /// Bytes of the text that it takes.
    pub length: usize,
}

/// The number of a text as most exports write it (`-71.25`, `7.125E+01`); `None` where [`number`] has
/// to look.
pub(super) fn plain(text: &str, sign: DecimalSign) -> Option<Plain> {
    begins_plain(text.as_bytes(), sign).filter(|plain| plain.length == text.len())
}

/// The plain number that a text begins with; `None` where [`number`] has to look.
///
/// What it gives is what [`number`] gives: digits below 2^53 and a power of ten up to 10^22 are doubles
/// themselves, so that one division or multiplication rounds once and to the nearest (W.D. Clinger,
/// How to Read Floating Point Numbers Accurately, PLDI 1990, section 3).
#[inline]
pub(super) fn begins_plain(text: &[u8], sign: DecimalSign) -> Option<Plain> {
    // Nineteen digits could overflow what they are counted in.
    const MOST_LETTERS: usize = 18;
    let minus = usize::from(text.first() == Some(&b'-'));
    let digits = &text[minus..];
    if !digits.first()?.is_ascii_digit() {
        return None;
    }
    let point = sign.sign() as u8;
    let mut mantissa = 0_u64;
    let mut decimals_from = None;
    let mut at = 0;
    let after = loop {
        let byte = digits.get(at).copied();
        match byte {
            Some(digit @ b'0'..=b'9') => mantissa = mantissa * 10 + u64::from(digit - b'0'),
            Some(sign) if sign == point && decimals_from.is_none() => decimals_from = Some(at + 1),
            other => break other,
        }
        at += 1;
        if at > MOST_LETTERS {
            return None;
        }
    };
    let decimals = decimals_from.map_or(0, |from| at - from);
    if decimals_from == Some(at) || mantissa >= 1 << 53 {
        return None;
    }
    let (exponent, length) = match after {
        Some(b'e' | b'E') => plain_exponent(&digits[at + 1..])?,
        _ => (0, 0),
    };
    let power = exponent - decimals as i32;
    let factor = *EXACT_POWERS.get(power.unsigned_abs() as usize)?;
    let magnitude = if power < 0 {
        mantissa as f64 / factor
    } else {
        mantissa as f64 * factor
    };
    Some(Plain {
        value: if minus == 1 { -magnitude } else { magnitude },
        has_sign: decimals_from.is_some(),
        length: minus + at + length,
    })
}

/// One or two digits, perhaps with a sign before them, behind the letter of an exponent: its value, and
/// the bytes that it takes with that letter.
fn plain_exponent(text: &[u8]) -> Option<(i32, usize)> {
    let (is_negative, signs) = match text.first()? {
        b'-' => (true, 1),
        b'+' => (false, 1),
        _ => (false, 0),
    };
    let digits = &text[signs..];
    let count = digits
        .iter()
        .take_while(|byte| byte.is_ascii_digit())
        .count();
    if !(1..=2).contains(&count) {
        return None;
    }
    let value = digits[..count]
        .iter()
        .fold(0, |value, digit| value * 10 + i32::from(digit - b'0'));
    Some((if is_negative { -value } else { value }, 1 + signs + count))
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
    /// Whether a number with this decimal sign was seen: more of them say nothing new.
    pub(super) fn knows(&self, sign: DecimalSign) -> bool {
        match sign {
            DecimalSign::Point => self.point.is_some(),
            DecimalSign::Comma => self.comma.is_some(),
        }
    }

    /// Takes what the texts that follow these said into account.
    pub(super) fn followed_by(self, later: Self) -> Self {
        Evidence {
            point: self.point.or(later.point),
            comma: self.comma.or(later.comma),
            either: self.either.or(later.either),
        }
    }

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
    use proptest::prelude::*;

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

    proptest! {
        #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

        #[test]
        fn the_quick_way_gives_the_same_double(text in "-?[0-9]{1,17}([.][0-9]{1,8})?([eE][+-]?[0-9]{1,2})?") {
            if let Some(Plain { value, has_sign, .. }) = plain(&text, DecimalSign::Point) {
                prop_assert_eq!(number(&text, DecimalSign::Point).map(f64::to_bits), Some(value.to_bits()));
                prop_assert_eq!(has_sign, text.contains('.'));
            }
            let comma = text.replace('.', ",");
            if let Some(Plain { value, .. }) = plain(&comma, DecimalSign::Comma) {
                prop_assert_eq!(number(&comma, DecimalSign::Comma).map(f64::to_bits), Some(value.to_bits()));
            }
        }

        #[test]
        fn the_quick_way_takes_nothing_that_is_no_number(text in "[-+0-9.,eE% ]{0,8}") {
            for sign in [DecimalSign::Point, DecimalSign::Comma] {
                if let Some(Plain { value, .. }) = plain(&text, sign) {
                    prop_assert_eq!(number(&text, sign), Some(value));
                }
            }
        }
    }

    #[test]
    fn usual_numbers_go_the_quick_way() {
        for text in ["0", "71.234", "-40.00", "7.1234E+01", "1e-3"] {
            assert!(plain(text, DecimalSign::Point).is_some(), "{text}");
        }
        for text in [
            "",
            "-",
            ".5",
            "5.",
            "1.2.3",
            "1,5",
            "+1",
            "9007199254740993",
            "1e99",
            "1e",
        ] {
            assert_eq!(plain(text, DecimalSign::Point), None, "{text}");
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

//! Text files as exported: their character encoding and the sign that separates their columns.

use super::blanks;
use encoding_rs::{UTF_16BE, UTF_16LE, WINDOWS_1252};

/// How many lines are looked at to tell the delimiter.
const LINES_LOOKED_AT: usize = 200;

/// A text file made readable.
#[derive(Debug, PartialEq, Eq)]
pub struct Decoded {
    /// The text without a byte order mark.
    pub text: String,
    /// Name of the encoding it was read with.
    pub encoding: &'static str,
}

/// Decodes UTF-8, UTF-16 (with or without a byte order mark) or, where the bytes are neither,
/// Windows-1252, which every byte sequence is. What is UTF-8 already stays where it is.
pub fn decode(bytes: Vec<u8>) -> Decoded {
    let decoded = |text: std::borrow::Cow<'_, str>, encoding| Decoded {
        text: text.into_owned(),
        encoding,
    };
    if let Some(rest) = bytes.strip_prefix(&[0xFF, 0xFE]) {
        return decoded(UTF_16LE.decode_without_bom_handling(rest).0, "UTF-16");
    }
    if let Some(rest) = bytes.strip_prefix(&[0xFE, 0xFF]) {
        return decoded(UTF_16BE.decode_without_bom_handling(rest).0, "UTF-16");
    }
    // Text of a log is mostly Latin: in UTF-16 every other byte of it is zero.
    let head = &bytes[..bytes.len().min(512)];
    let zeros_at = |parity: usize| {
        head.iter()
            .enumerate()
            .filter(|(k, byte)| k % 2 == parity && **byte == 0)
            .count()
    };
    if head.len() >= 4 && zeros_at(1) * 4 > head.len() {
        return decoded(UTF_16LE.decode_without_bom_handling(&bytes).0, "UTF-16");
    }
    if head.len() >= 4 && zeros_at(0) * 4 > head.len() {
        return decoded(UTF_16BE.decode_without_bom_handling(&bytes).0, "UTF-16");
    }
    let is_marked = bytes.starts_with(&[0xEF, 0xBB, 0xBF]);
    match String::from_utf8(bytes) {
        Ok(mut text) => {
            if is_marked {
                text.drain(..'\u{feff}'.len_utf8());
            }
            Decoded {
                text,
                encoding: "UTF-8",
            }
        }
        Err(error) if is_marked => {
            decoded(String::from_utf8_lossy(&error.as_bytes()[3..]), "UTF-8")
        }
        Err(error) => decoded(
            WINDOWS_1252.decode_without_bom_handling(error.as_bytes()).0,
            "Windows-1252",
        ),
    }
}

/// The sign between the columns, and how many bytes of a leading `sep=` line to leave out.
///
/// A sign counts as the delimiter where nearly every line bears it equally often. The comma is
/// asked late: in a file with semicolons it is the decimal sign, and then just as regular. A blank
/// is the delimiter of a file whose columns nothing else sets apart.
pub fn delimiter(text: &str) -> (u8, usize) {
    if let Some(first) = text.lines().next()
        && let Some(sign) = first.trim_end().strip_prefix("sep=")
        && let [sign] = sign.as_bytes()
    {
        let skipped = text.find('\n').map_or(text.len(), |end| end + 1);
        return (*sign, skipped);
    }
    let lines: Vec<&str> = text
        .lines()
        .filter(|line| !line.trim().is_empty())
        .take(LINES_LOOKED_AT)
        .collect();
    // Titles and comments stand at the top and need not bear the delimiter.
    let body = &lines[lines.len() / 3..];
    let candidates = [b'\t', b';', b'|', b','];
    let regular = |sign: u8| {
        let mut counts: Vec<usize> = body.iter().map(|line| count_outside(line, sign)).collect();
        counts.sort_unstable();
        let usual = counts.get(counts.len() / 2).copied().unwrap_or(0);
        let alike = counts.iter().filter(|&&count| count == usual).count();
        (usual > 0).then_some(alike * 10 >= counts.len() * 8)
    };
    let is_regular = |signs: &[u8]| {
        let mut signs = signs.iter().copied();
        signs.find(|&sign| regular(sign) == Some(true))
    };
    let blank = |are_decimals: bool| {
        let is_wanted = |line: &&str| !are_decimals || blanks::commas_are_decimal(line);
        (body.iter().all(is_wanted) && blanks::regular_columns(body.iter().copied()).is_some())
            .then_some(b' ')
    };
    let chosen = is_regular(b"\t;|")
        .or_else(|| blank(true))
        .or_else(|| is_regular(b","))
        .or_else(|| candidates.into_iter().find(|&sign| regular(sign).is_some()))
        .or_else(|| blank(false));
    (chosen.unwrap_or(b','), 0)
}

/// How often `sign` stands in a line outside quotation marks.
fn count_outside(line: &str, sign: u8) -> usize {
    let mut inside = false;
    let mut count = 0;
    for byte in line.bytes() {
        if byte == b'"' {
            inside = !inside;
        } else if byte == sign && !inside {
            count += 1;
        }
    }
    count
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_encoding_gives_the_same_text() {
        let text = "Zeit;TIC-204 [°C]\n";
        let utf16 = |big: bool, mark: bool| {
            let mark = mark.then_some(0xFEFF);
            mark.into_iter()
                .chain(text.encode_utf16())
                .flat_map(|unit| {
                    if big {
                        unit.to_be_bytes()
                    } else {
                        unit.to_le_bytes()
                    }
                })
                .collect::<Vec<u8>>()
        };
        let windows: Vec<u8> = text
            .chars()
            .map(|letter| if letter == '°' { 0xB0 } else { letter as u8 })
            .collect();
        let mut marked = vec![0xEF, 0xBB, 0xBF];
        marked.extend_from_slice(text.as_bytes());
        for (bytes, encoding) in [
            (text.as_bytes().to_vec(), "UTF-8"),
            (marked, "UTF-8"),
            (utf16(false, true), "UTF-16"),
            (utf16(true, true), "UTF-16"),
            (utf16(false, false), "UTF-16"),
            (utf16(true, false), "UTF-16"),
            (windows, "Windows-1252"),
        ] {
            let decoded = decode(bytes);
            assert_eq!(decoded.text, text);
            assert_eq!(decoded.encoding, encoding);
        }
    }

    #[test]
    fn the_comma_gives_way_to_the_semicolon() {
        assert_eq!(delimiter("t;pv;op\n1,0;71,2;40,0\n2,0;71,3;40,0\n").0, b';');
        assert_eq!(delimiter("t,pv,op\n1.0,71.2,40.0\n").0, b',');
        assert_eq!(delimiter("t\tpv\n1,0\t71,2\n").0, b'\t');
        assert_eq!(delimiter("t|pv\n1|2\n").0, b'|');
        assert_eq!(delimiter("t,note\n1,\"a;b\"\n2,\"c;d\"\n").0, b',');
        assert_eq!(delimiter("sep=;\nt;pv\n"), (b';', 6));
        assert_eq!(
            delimiter("Trend of TIC-204; unit 200\n\nt,pv\n1,2\n2,3\n3,4\n").0,
            b','
        );
    }
}

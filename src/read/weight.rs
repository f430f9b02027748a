//! How large a workbook would become in memory, told before it is opened: the reading library lays out
//! whole parts of it, and memory that cannot be had ends the program.

use super::compound::Compound;
use std::io::{BufRead, BufReader, Cursor, Read};
use zip::ZipArchive;
use zip::read::ZipFile;

/// Most that the parts of a workbook may come to when they are unpacked. A million rows of twenty columns
/// are half of it.
const UNPACKED_MOST: u64 = 2 << 30;
/// Deflate packs no better than this (RFC 1951: 258 bytes in no less than two bits).
const PACKED_AT_BEST: u64 = 1032;
/// Most cells of an open document, those that it says to repeat among them.
const CELLS_MOST: u64 = 30_000_000;
/// A tag of XML longer than this is none that counts.
const LONGEST_TAG: u64 = 1 << 16;
/// Rows and columns of a sheet of the old binary kind (MS-XLS 2.5.221, 2.5.53).
const OLD_SHEET: (u32, u32) = (65_536, 256);

/// Why a workbook is too large; `None` where it is not, or where the library will say itself that it is none.
pub(super) fn too_heavy(bytes: &[u8], ending: &str) -> Option<String> {
    if ending == "xls" {
        return beyond_old_sheet(bytes);
    }
    let mut archive = ZipArchive::new(Cursor::new(bytes)).ok()?;
    too_much_unpacked(&mut archive, UNPACKED_MOST)
        .or_else(|| (ending == "ods").then(|| too_many_cells(&mut archive, CELLS_MOST))?)
}

type Archive<'a> = ZipArchive<Cursor<&'a [u8]>>;

/// Adds up what the parts say of their size, and unpacks those that could be larger than they say.
fn too_much_unpacked(archive: &mut Archive<'_>, most: u64) -> Option<String> {
    let refused = || {
        let most = most as f64 / f64::from(1 << 30);
        Some(format!("it would unpack to more than {most} GiB"))
    };
    let mut total = 0_u64;
    for index in 0..archive.len() {
        let Ok(part) = archive.by_index(index) else {
            continue;
        };
        let left = most.saturating_sub(total);
        let said = part.size();
        let at_worst = part.compressed_size().saturating_mul(PACKED_AT_BEST);
        if said > left {
            return refused();
        }
        total += if at_worst > left {
            unpacked(part, left)
        } else {
            said
        };
        if total > most {
            return refused();
        }
    }
    None
}

/// How much a part unpacks to, counted to just beyond `most`.
fn unpacked(part: ZipFile<'_, Cursor<&[u8]>>, most: u64) -> u64 {
    let mut part = part.take(most.saturating_add(1));
    let mut block = vec![0; 1 << 16];
    let mut total = 0;
    // What is damaged is said when it is read in earnest.
    while let Ok(count @ 1..) = part.read(&mut block) {
        total += count as u64;
    }
    total
}

/// Counts the cells of an open document as they will be laid out: in each row up to its last cell that
/// holds anything, as often as it says.
fn too_many_cells(archive: &mut Archive<'_>, most: u64) -> Option<String> {
    let mut content = BufReader::new(archive.by_name("content.xml").ok()?);
    let mut chunk = Vec::new();
    let (mut total, mut row, mut empty, mut rows) = (0_u64, 0_u64, 0_u64, 1_u64);
    loop {
        chunk.clear();
        let read = (&mut content)
            .take(LONGEST_TAG)
            .read_until(b'>', &mut chunk);
        if !matches!(read, Ok(1..)) {
            return None;
        }
        let Some(at) = chunk.iter().rposition(|byte| *byte == b'<') else {
            continue;
        };
        let tag = &chunk[at..];
        if tag.starts_with(b"<table:table-row") {
            (row, empty) = (0, 0);
            rows = repeated(tag, b"number-rows-repeated=");
        } else if tag.starts_with(b"<table:table-cell")
            || tag.starts_with(b"<table:covered-table-cell")
        {
            let columns = repeated(tag, b"number-columns-repeated=");
            let is_empty =
                !contains(tag, b"value") && !contains(tag, b"formula") && tag.ends_with(b"/>");
            if is_empty {
                empty = empty.saturating_add(columns);
            } else {
                row = row.saturating_add(empty).saturating_add(columns);
                empty = 0;
            }
        } else if tag.starts_with(b"</table:table-row") {
            total = total.saturating_add(row.saturating_mul(rows));
            row = 0;
        }
        // Also within a row: it may never end.
        if total.saturating_add(row) > most {
            return Some(format!("it repeats cells beyond {most}"));
        }
    }
}

fn contains(tag: &[u8], word: &[u8]) -> bool {
    tag.windows(word.len()).any(|window| window == word)
}

/// The number in quotation marks behind `attribute`; 1 where it is not there.
fn repeated(tag: &[u8], attribute: &[u8]) -> u64 {
    let Some(at) = tag
        .windows(attribute.len())
        .position(|window| window == attribute)
    else {
        return 1;
    };
    let digits = tag[at + attribute.len()..].iter().skip(1);
    let digits = digits.take_while(|byte| byte.is_ascii_digit());
    digits.fold(0_u64, |number, digit| {
        number
            .saturating_mul(10)
            .saturating_add(u64::from(digit - b'0'))
    })
}

/// Looks through the records of an old binary workbook for a used range or a cell beyond any sheet, which
/// the library would lay out all the same.
fn beyond_old_sheet(bytes: &[u8]) -> Option<String> {
    const DIMENSIONS: u16 = 0x0200;
    // Records that begin with the row and column of a cell: Formula, MulRk, MulBlank, RString, LabelSst,
    // Blank, Number, Label, BoolErr, Rk.
    const CELLS: [u16; 10] = [
        0x0006, 0x00BD, 0x00BE, 0x00D6, 0x00FD, 0x0201, 0x0203, 0x0204, 0x0205, 0x027E,
    ];
    let file = Compound::new(bytes)?;
    if file.is_endless() {
        return Some("it is damaged and has no end".to_owned());
    }
    let stream = file.stream(&["Workbook", "Book"])?;
    let mut rest = &stream[..];
    while let [kind_low, kind_high, length_low, length_high, following @ ..] = rest {
        let kind = u16::from_le_bytes([*kind_low, *kind_high]);
        let length = usize::from(u16::from_le_bytes([*length_low, *length_high]));
        let (data, next) = following.split_at(length.min(following.len()));
        let short = |at: usize| {
            Some(u32::from(u16::from_le_bytes([
                *data.get(at)?,
                *data.get(at + 1)?,
            ])))
        };
        let long = |at: usize| Some(short(at)? | short(at + 2)? << 16);
        let place = match (kind, data.len()) {
            (DIMENSIONS, 10) => Some([short(0), short(2), short(4), short(6)]),
            (DIMENSIONS, _) => Some([long(0), long(4), short(8), short(10)]),
            _ if CELLS.contains(&kind) => {
                let after = |at| Some(short(at)? + 1);
                Some([Some(0), after(0), Some(0), after(2)])
            }
            _ => None,
        };
        if let Some([Some(row), Some(rows), Some(column), Some(columns)]) = place {
            // A used range that ends before it begins would be counted around the end of all numbers.
            let is_turned = rows > 0 && columns > 0 && (row >= rows || column == columns);
            if rows > OLD_SHEET.0 || columns > OLD_SHEET.1 || is_turned {
                return Some(format!(
                    "it has cells beyond {} rows and {} columns",
                    OLD_SHEET.0, OLD_SHEET.1
                ));
            }
        }
        rest = next;
    }
    None
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::io::Write;
    use zip::write::{SimpleFileOptions, ZipWriter};

    fn archive(parts: &[(&str, &[u8])]) -> Vec<u8> {
        let mut archive = ZipWriter::new(Cursor::new(Vec::new()));
        for (name, part) in parts {
            archive
                .start_file(*name, SimpleFileOptions::default())
                .expect("a part");
            archive.write_all(part).expect("written");
        }
        archive.finish().expect("an archive").into_inner()
    }

    fn too_much(bytes: &[u8], most: u64) -> bool {
        let mut archive = ZipArchive::new(Cursor::new(bytes)).expect("an archive");
        too_much_unpacked(&mut archive, most).is_some()
    }

    #[test]
    fn parts_are_added_up_and_give_no_more_than_they_say() {
        let zeros = vec![0_u8; 100_000];
        let mut bytes = archive(&[("a", &zeros), ("b", &zeros)]);
        assert!(!too_much(&bytes, 200_000));
        assert!(too_much(&bytes, 199_999));
        // Both say that they unpack to a single byte.
        for (signature, size_at) in [(b"PK\x01\x02", 24), (b"PK\x03\x04", 22)] {
            for at in 0..bytes.len() - 4 {
                if bytes[at..].starts_with(signature) {
                    bytes[at + size_at..at + size_at + 4].copy_from_slice(&1_u32.to_le_bytes());
                }
            }
        }
        // Nobody is given more than a part says: what is beyond is damage, also to the reading library.
        let mut archive = ZipArchive::new(Cursor::new(&bytes[..])).expect("an archive");
        let mut part = archive.by_index(0).expect("a part");
        assert_eq!(part.size(), 1);
        assert!(std::io::copy(&mut part, &mut std::io::sink()).is_err());
        drop(part);
        assert!(unpacked(archive.by_index(0).expect("a part"), 50_000) <= 1);
    }

    #[test]
    fn cells_are_counted_as_they_are_laid_out() {
        let count = |rows: &str, most: u64| {
            let content = format!("<x>{rows}</x>");
            let bytes = archive(&[("content.xml", content.as_bytes())]);
            let mut archive = ZipArchive::new(Cursor::new(&bytes[..])).expect("an archive");
            too_many_cells(&mut archive, most).is_none()
        };
        let row = |cells: &str| format!("<table:table-row>{cells}</table:table-row>");
        let filled = "<table:table-cell office:value=\"1\" table:number-columns-repeated=\"30\"/>";
        let empty = "<table:table-cell table:number-columns-repeated=\"70\"/>";
        assert!(count(&row(filled), 30) && !count(&row(filled), 29));
        // Empty cells count where one that is filled follows.
        assert!(count(&row(&format!("{filled}{empty}")), 30));
        assert!(!count(&row(&format!("{empty}{filled}")), 99));
        let twice =
            format!("<table:table-row table:number-rows-repeated=\"2\">{filled}</table:table-row>");
        assert!(count(&twice, 60) && !count(&twice, 59));
        assert!(!count(
            &format!("<table:table-row>{}", filled.repeat(9)),
            200
        ));
    }
}

//! Any bytes as the parts of a workbook, which are zipped here: the fuzzer would never get past the
//! checksums of a zip archive by itself.
//!
//! The first byte says which kind of workbook; the rest are its parts, apart by [`APART`].
#![no_main]

use libfuzzer_sys::fuzz_target;
use std::io::{Cursor, Write};
use zip::write::{SimpleFileOptions, ZipWriter};

/// Stands between the parts; a control sign that no XML holds.
const APART: &[u8] = b"\n\x1f\n";

/// What tells a reader that it is a workbook at all; the same in each.
const USUAL: [(&str, &str); 3] = [
    (
        "_rels/.rels",
        "<Relationships><Relationship Id=\"rId1\" Type=\"http://schemas.openxmlformats.org/officeDocument/2006/relationships/officeDocument\" Target=\"xl/workbook.xml\"/></Relationships>",
    ),
    (
        "META-INF/manifest.xml",
        "<manifest:manifest xmlns:manifest=\"urn:oasis:names:tc:opendocument:xmlns:manifest:1.0\"/>",
    ),
    ("mimetype", "application/vnd.oasis.opendocument.spreadsheet"),
];

/// What the other parts are called in each kind of workbook, in order.
const KINDS: [(&str, &[&str]); 3] = [
    (
        "xlsx",
        &[
            "xl/worksheets/sheet1.xml",
            "xl/sharedStrings.xml",
            "xl/styles.xml",
            "xl/workbook.xml",
            "xl/_rels/workbook.xml.rels",
            "[Content_Types].xml",
        ],
    ),
    ("ods", &["content.xml"]),
    (
        "xlsb",
        &[
            "xl/worksheets/sheet1.bin",
            "xl/sharedStrings.bin",
            "xl/styles.bin",
            "xl/workbook.bin",
            "xl/_rels/workbook.bin.rels",
        ],
    ),
];

fuzz_target!(
    init: asleft_fuzz::let_guarded_panics_pass(),
    |bytes: &[u8]| {
        if let Some((kind, rest)) = bytes.split_first() {
            let (ending, names) = KINDS[usize::from(*kind) % KINDS.len()];
            asleft_fuzz::read_everything(ending, &zipped(names, rest));
        }
    }
);

fn zipped(names: &[&str], mut rest: &[u8]) -> Vec<u8> {
    let mut archive = ZipWriter::new(Cursor::new(Vec::new()));
    let options = SimpleFileOptions::default().compression_method(zip::CompressionMethod::Stored);
    for (name, part) in USUAL {
        archive.start_file(name, options).expect("a part");
        archive.write_all(part.as_bytes()).expect("written");
    }
    for name in names {
        let end = rest.windows(APART.len()).position(|window| window == APART);
        let part = &rest[..end.unwrap_or(rest.len())];
        archive.start_file(*name, options).expect("a part");
        archive.write_all(part).expect("written");
        match end {
            Some(end) => rest = &rest[end + APART.len()..],
            None => break,
        }
    }
    archive.finish().expect("an archive").into_inner()
}

//! Files made to exhaust the reader: what they say they hold does not fit any machine.

use super::workbook::open_document;
use crate::support::{folder, root};
use asleft::notice::Problem;
use rust_xlsxwriter::Workbook;
use std::fs;
use std::io::{Cursor, Write};
use zip::write::{SimpleFileOptions, ZipWriter};

/// Looks at a file; what it holds, or why it is refused.
fn look(name: &str, bytes: &[u8]) -> Result<String, Vec<Problem>> {
    let folder = folder();
    fs::write(folder.path().join(name), bytes).expect("written");
    asleft::inspect(&[folder.path().join(name)], None, None).map(|report| report.to_string())
}

fn refusal(name: &str, bytes: &[u8]) -> String {
    look(name, bytes).expect_err("a refusal")[0].message.clone()
}

/// A workbook with these parts beside what every workbook needs.
fn xlsx(parts: &[(&str, &str)]) -> Vec<u8> {
    let usual = [
        (
            "[Content_Types].xml",
            "<Types xmlns=\"http://schemas.openxmlformats.org/package/2006/content-types\"/>",
        ),
        (
            "_rels/.rels",
            "<Relationships><Relationship Id=\"rId1\" Type=\"http://schemas.openxmlformats.org/officeDocument/2006/relationships/officeDocument\" Target=\"xl/workbook.xml\"/></Relationships>",
        ),
        (
            "xl/workbook.xml",
            "<workbook xmlns:r=\"http://schemas.openxmlformats.org/officeDocument/2006/relationships\"><sheets><sheet name=\"Trend\" sheetId=\"1\" r:id=\"rId1\"/></sheets></workbook>",
        ),
        (
            "xl/_rels/workbook.xml.rels",
            "<Relationships><Relationship Id=\"rId1\" Type=\"http://schemas.openxmlformats.org/officeDocument/2006/relationships/worksheet\" Target=\"worksheets/sheet1.xml\"/></Relationships>",
        ),
    ];
    let mut archive = ZipWriter::new(Cursor::new(Vec::new()));
    for (name, part) in usual.iter().chain(parts) {
        archive
            .start_file(*name, SimpleFileOptions::default())
            .expect("a part");
        archive.write_all(part.as_bytes()).expect("written");
    }
    archive.finish().expect("an archive").into_inner()
}

#[test]
fn one_stray_cell_at_the_far_corner_of_a_sheet_costs_nothing() {
    let mut book = Workbook::new();
    let sheet = book.add_worksheet();
    for (column, heading) in ["Time (s)", "TIC-1.PV", "TIC-1.OP"].iter().enumerate() {
        sheet
            .write_string(0, column as u16, *heading)
            .expect("written");
    }
    for row in 1..40_u32 {
        for column in 0..3_u16 {
            sheet
                .write_number(row, column, f64::from(row))
                .expect("written");
        }
    }
    sheet.write_string(1_048_575, 16_383, "x").expect("written");
    let text = look("corner.xlsx", &book.save_to_buffer().expect("a workbook")).expect("readable");
    assert!(text.contains("39 good of 39 rows"), "{text}");
}

#[test]
fn a_used_range_that_is_only_said_costs_nothing() {
    let sheet = "<worksheet><dimension ref=\"A1:XFD1048576\"/><sheetData><row r=\"1\"><c r=\"A1\"><v>1</v></c></row></sheetData></worksheet>";
    look("range.xlsx", &xlsx(&[("xl/worksheets/sheet1.xml", sheet)])).expect("readable");
}

#[test]
fn cells_repeated_beyond_any_sheet_are_refused() {
    let value = "office:value-type=\"float\" office:value=\"1\"";
    let wide = format!("<table:table-cell table:number-columns-repeated=\"16384\" {value}/>");
    // Full rows written out, and one that says how often it comes.
    let many = format!("<table:table-row>{wide}</table:table-row>").repeat(20_000);
    let message = refusal("repeated.ods", &open_document(&many));
    assert!(message.contains("cells"), "{message}");
    let one =
        format!("<table:table-row table:number-rows-repeated=\"1048576\">{wide}</table:table-row>");
    let message = refusal("repeated.ods", &open_document(&one));
    assert!(message.contains("cells"), "{message}");
}

#[test]
fn a_cell_beyond_any_sheet_is_refused() {
    for place in ["ZZZZZ1", "A999999999", "XFE1"] {
        let sheet = format!(
            "<worksheet><sheetData><row><c r=\"{place}\"><v>1</v></c></row></sheetData></worksheet>"
        );
        let message = refusal(
            "beyond.xlsx",
            &xlsx(&[("xl/worksheets/sheet1.xml", &sheet)]),
        );
        assert!(message.contains("damaged"), "{place}: {message}");
    }
}

#[test]
fn a_workbook_that_would_unpack_to_more_than_a_machine_holds_is_refused() {
    let sheet = "<worksheet><sheetData/></worksheet>";
    let mut bytes = xlsx(&[("xl/worksheets/sheet1.xml", sheet)]);
    look("small.xlsx", &bytes).expect("readable");
    // The directory at the end says 4 GiB of the last part.
    let entry = bytes
        .windows(4)
        .rposition(|window| window == b"PK\x01\x02")
        .expect("an entry");
    bytes[entry + 24..entry + 28].copy_from_slice(&0xFFFF_FFF0_u32.to_le_bytes());
    let message = refusal("large.xlsx", &bytes);
    assert!(message.contains("unpack"), "{message}");
}

#[test]
fn a_used_range_of_an_old_workbook_that_no_sheet_has_is_refused() {
    let whole = fs::read(root().join("tests/logs/trend.xls")).expect("readable");
    look("trend.xls", &whole).expect("readable");
    let at = whole
        .windows(4)
        .position(|window| window == [0, 2, 14, 0])
        .expect("a used range")
        + 4;
    for (place, byte) in [(7, 0x7F), (6, 0x02), (11, 0x40)] {
        let mut bytes = whole.clone();
        bytes[at + place] = byte;
        let message = refusal("trend.xls", &bytes);
        assert!(message.contains("65536 rows"), "{place}: {message}");
    }
}

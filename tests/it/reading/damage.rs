//! Damaged files of every kind: what comes of them is samples or problems that name their place.

use super::{TAG, holds, truth};
use crate::support::{files_below, folder, root};
use asleft::notice::Problem;
use proptest::prelude::*;
use proptest::sample::Index;
use std::fs;
use std::path::Path;

/// What is done to the bytes of a file.
#[derive(Debug, Clone)]
enum Damage {
    Flip(Index, u8),
    Set(Index, u8),
    Insert(Index, Vec<u8>),
    Remove(Index, usize),
    /// A stretch a second time, as a broken copy has it.
    Repeat(Index, usize),
    CutOff(Index),
}

fn damage() -> impl Strategy<Value = Vec<Damage>> {
    let place = any::<Index>;
    let one = prop_oneof![
        4 => (place(), 0_u8..8).prop_map(|(at, bit)| Damage::Flip(at, bit)),
        3 => (place(), any::<u8>()).prop_map(|(at, byte)| Damage::Set(at, byte)),
        2 => (place(), prop::collection::vec(any::<u8>(), 1..9))
            .prop_map(|(at, bytes)| Damage::Insert(at, bytes)),
        2 => (place(), 1_usize..40).prop_map(|(at, length)| Damage::Remove(at, length)),
        1 => (place(), 1_usize..200).prop_map(|(at, length)| Damage::Repeat(at, length)),
        1 => place().prop_map(Damage::CutOff),
    ];
    prop::collection::vec(one, 1..12)
}

fn damaged(mut bytes: Vec<u8>, damages: &[Damage]) -> Vec<u8> {
    for damage in damages {
        if bytes.is_empty() {
            break;
        }
        let length = bytes.len();
        match damage {
            Damage::Flip(at, bit) => bytes[at.index(length)] ^= 1 << bit,
            Damage::Set(at, byte) => bytes[at.index(length)] = *byte,
            Damage::Insert(at, new) => {
                let at = at.index(length);
                bytes.splice(at..at, new.iter().copied());
            }
            Damage::Remove(at, count) => {
                let at = at.index(length);
                bytes.drain(at..(at + count).min(length));
            }
            Damage::Repeat(at, count) => {
                let at = at.index(length);
                let again = bytes[at..(at + count).min(length)].to_vec();
                bytes.splice(at..at, again);
            }
            Damage::CutOff(at) => bytes.truncate(at.index(length)),
        }
    }
    bytes
}

/// The parts of a zip archive, damaged one by one and zipped again: a workbook's own checksums would
/// else keep every damage from the cells.
fn damaged_within(bytes: &[u8], damages: &[Damage], which: Index) -> Vec<u8> {
    use std::io::{Cursor, Read, Write};
    let mut archive = zip::ZipArchive::new(Cursor::new(bytes)).expect("an archive");
    let which = which.index(archive.len());
    let mut written = zip::ZipWriter::new(Cursor::new(Vec::new()));
    let options = zip::write::SimpleFileOptions::default();
    for index in 0..archive.len() {
        let mut part = Vec::new();
        let name = {
            let mut entry = archive.by_index(index).expect("a part");
            entry.read_to_end(&mut part).expect("readable");
            entry.name().expect("a name").into_owned()
        };
        if index == which {
            part = damaged(part, damages);
        }
        written.start_file(name, options).expect("a part");
        written.write_all(&part).expect("written");
    }
    written.finish().expect("an archive").into_inner()
}

/// Looks at a file as a stranger's and reads every loop that is found.
fn look(folder: &Path, name: &str, bytes: &[u8]) -> Result<(), TestCaseError> {
    fs::write(folder.join(name), bytes).expect("written");
    // A panic fails the test; the reading library's own are caught by the reader.
    match asleft::inspect(&[folder.join(name)], None, None) {
        Ok(report) => {
            prop_assert!(!report.to_string().is_empty());
            let problems = report.logs.iter().flat_map(|log| &log.tables);
            let problems: Vec<&Problem> = problems.flat_map(|table| &table.undecided).collect();
            have_places(&problems)
        }
        Err(problems) => have_places(&problems.iter().collect::<Vec<_>>()),
    }
}

fn have_places(problems: &[&Problem]) -> Result<(), TestCaseError> {
    for problem in problems {
        prop_assert!(problem.place.is_some(), "{}", problem);
    }
    Ok(())
}

/// Every log that is kept in the tree: of the demo plant and of the tests.
fn kept_logs() -> Vec<(String, Vec<u8>)> {
    let mut found = Vec::new();
    for folder in ["demo_data/logs", "tests/logs"] {
        if !root().join(folder).is_dir() {
            continue;
        }
        for ending in [".csv", ".xlsx", ".xlsb", ".xls", ".ods"] {
            for path in files_below(&root().join(folder), ending) {
                let name = path.file_name().expect("a name").to_string_lossy();
                found.push((name.into_owned(), fs::read(&path).expect("readable")));
            }
        }
    }
    found
}

fn is_zip(bytes: &[u8]) -> bool {
    bytes.starts_with(b"PK")
}

#[test]
fn no_damage_to_a_log_makes_the_reader_panic() {
    let logs: Vec<(String, Vec<u8>)> = kept_logs()
        .into_iter()
        // Short ones: hundreds are read.
        .filter(|(_, bytes)| bytes.len() < 60_000)
        .collect();
    for ending in ["csv", "xlsx", "ods"] {
        assert!(
            logs.iter().any(|(name, _)| name.ends_with(ending)),
            "{ending}"
        );
    }
    let folder = folder();
    holds(
        250,
        (any::<Index>(), damage(), any::<Index>(), any::<bool>()),
        |(log, damages, part, within)| {
            let (name, bytes) = log.get(&logs);
            let bytes = if within && is_zip(bytes) {
                damaged_within(bytes, &damages, part)
            } else {
                damaged(bytes.clone(), &damages)
            };
            look(folder.path(), name, &bytes)
        },
    );
}

#[test]
fn no_text_at_all_makes_the_reader_panic() {
    let folder = folder();
    // What logs are made of, in any order.
    let pieces = prop::sample::select(vec![
        "Time",
        "PV",
        "OP",
        TAG,
        ".",
        ",",
        ";",
        "\t",
        "|",
        "\"",
        "\n",
        "\r\n",
        "1",
        "45.5",
        "-3,5",
        "2026-03-14 09:05:00",
        "03/04/26",
        "24:00",
        "Bad",
        "\u{feff}",
        "°C",
        "sep=",
        "1e308",
        "NaN",
        "9999-12-31",
        "0001-01-01",
        "12/31/9999 23:59:60",
        "253402300800",
        "%",
        "[",
        "]",
        "Mode",
        "MAN",
    ]);
    holds(400, prop::collection::vec(pieces, 0..120), |pieces| {
        look(folder.path(), "pieces.csv", pieces.concat().as_bytes())
    });
    holds(200, prop::collection::vec(any::<u8>(), 0..400), |bytes| {
        look(folder.path(), "bytes.csv", &bytes)
    });
    // A name that promises a workbook.
    holds(
        100,
        (prop::collection::vec(any::<u8>(), 0..400), 0_usize..5),
        |(bytes, kind)| {
            let ending = ["xlsx", "xlsm", "xlsb", "xls", "ods"][kind];
            let magic: &[u8] = if ending == "xls" {
                b"\xD0\xCF\x11\xE0\xA1\xB1\x1A\xE1"
            } else {
                b"PK\x03\x04"
            };
            look(
                folder.path(),
                &format!("bytes.{ending}"),
                &[magic, &bytes].concat(),
            )
        },
    );
}

#[test]
fn no_damage_to_a_job_makes_it_panic() {
    let manifest = fs::read(root().join("demo_data/job.toml")).expect("readable");
    let schedule = fs::read(root().join("demo_data/loops.xlsx")).expect("readable");
    let folder = folder();
    let at = folder.path();
    holds(
        150,
        (damage(), any::<Index>(), 0_u8..3),
        |(damages, part, which)| {
            let write =
                |name: &str, bytes: &[u8]| fs::write(at.join(name), bytes).expect("written");
            match which {
                0 => {
                    write("job.toml", &damaged(manifest.clone(), &damages));
                    write("loops.xlsx", &schedule);
                }
                1 => {
                    write("job.toml", &manifest);
                    write("loops.xlsx", &damaged(schedule.clone(), &damages));
                }
                _ => {
                    write("job.toml", &manifest);
                    write("loops.xlsx", &damaged_within(&schedule, &damages, part));
                }
            }
            if let Err(problems) = asleft::job::Job::read(at) {
                prop_assert!(!problems.is_empty());
            }
            Ok(())
        },
    );
}

#[test]
fn a_trace_cut_off_anywhere_is_the_beginning_of_the_trace_or_refused() {
    // The dangerous damage: a copy that broke off and still reads.
    holds(200, (truth(), any::<Index>()), |(truth, at)| {
        let mut text = "Time,TIC-101.PV,TIC-101.OP\n".to_owned();
        for sample in &truth.samples {
            let at = truth.at(sample).format("%Y-%m-%dT%H:%M:%S%.3f");
            let pv = sample.pv.map_or_else(str::to_owned, |pv| pv.text('.'));
            text.push_str(&format!("{at},{pv},{}\n", sample.op.text('.')));
        }
        let whole_lines = text.as_bytes();
        let cut = at.index(whole_lines.len());
        // At the end of a line: in the middle of one its last cell may read as another number.
        let cut = whole_lines[..cut]
            .iter()
            .rposition(|byte| *byte == b'\n')
            .map_or(0, |at| at + 1);
        if let Ok(log) = super::read("trend.csv", &whole_lines[..cut], None) {
            let rows = log.samples.t_s.len();
            let mut begun = truth.clone();
            begun.samples.truncate(rows);
            (begun.has_sp, begun.has_mode) = (false, false);
            begun.is(&log, None)?;
        }
        Ok(())
    });
}

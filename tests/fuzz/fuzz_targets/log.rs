//! Any bytes as a log: the first says which kind of file, the rest are the file.
#![no_main]

use libfuzzer_sys::fuzz_target;

const ENDINGS: [&str; 5] = ["csv", "xlsx", "xls", "xlsb", "ods"];

fuzz_target!(
    init: asleft_fuzz::let_guarded_panics_pass(),
    |bytes: &[u8]| {
        if let Some((kind, file)) = bytes.split_first() {
            asleft_fuzz::read_everything(ENDINGS[usize::from(*kind) % ENDINGS.len()], file);
        }
    }
);

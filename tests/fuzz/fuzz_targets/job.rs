//! Any bytes as a job: `job.toml`, and after a line with only a control sign the loop schedule.
#![no_main]

use asleft_fuzz::job::Job;
use libfuzzer_sys::fuzz_target;
use std::fs;

/// Stands between `job.toml` and the schedule.
const APART: &[u8] = b"\n\x1f\n";

fuzz_target!(
    init: asleft_fuzz::let_guarded_panics_pass(),
    |bytes: &[u8]| {
        let end = bytes.windows(APART.len()).position(|window| window == APART);
        let (manifest, schedule) = match end {
            Some(end) => (&bytes[..end], &bytes[end + APART.len()..]),
            None => (bytes, &b""[..]),
        };
        let folder = tempfile::tempdir().expect("a folder");
        fs::write(folder.path().join("job.toml"), manifest).expect("written");
        fs::write(folder.path().join("loops.csv"), schedule).expect("written");
        if let Ok((job, _)) = Job::read(folder.path()) {
            for row in job.loops.iter().flatten() {
                let _ = job.document(row);
                let _ = job.test_request(row);
                let _ = job.trial_request(row);
                let _ = row.missing_for_record();
            }
        }
    }
);

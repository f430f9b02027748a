//! Jobs with one defect each, `tests/broken/NAME` laid over the sound one, and the text that `check` gives.

use crate::support::{asleft_in, copy_folder, folder, holds_as_kept, names_in, root};

/// Nothing is wrong with this one; the others take its place file by file.
const SOUND: &str = "sound";

/// Name of the kept text, beside the files of a defect.
const TEXT: &str = "check.txt";

fn defects() -> Vec<String> {
    let names = names_in(&root().join("tests/broken"));
    names.into_iter().filter(|name| name != SOUND).collect()
}

/// What `asleft check` answers to the job of this name: exit code, then everything it printed.
fn answer(name: &str) -> String {
    let broken = root().join("tests/broken");
    let folder = folder();
    let job = folder.path().join("job");
    copy_folder(&broken.join(SOUND), &job);
    copy_folder(&broken.join(name), &job);
    let run = asleft_in(folder.path(), &["check", "job"]);
    assert!(
        !job.join("records").exists(),
        "{name}: `check` writes nothing"
    );
    format!("exit code {}\n{}{}", run.code, run.out, run.err)
}

#[test]
fn each_defect_gets_its_text() {
    let names = defects();
    assert!(names.len() > 25, "{names:?}");
    let mut faults = Vec::new();
    for name in names {
        let answer = answer(&name);
        assert!(!answer.contains("panicked"), "{name}: {answer}");
        let kept = format!("tests/broken/{name}/{TEXT}");
        let held = std::panic::catch_unwind(|| holds_as_kept(&kept, &answer));
        if held.is_err() {
            faults.push(format!("{name}:\n{answer}"));
        }
    }
    assert!(faults.is_empty(), "{}", faults.join("\n"));
}

#[test]
fn the_sound_one_is_sound() {
    let answer = answer(SOUND);
    assert!(
        answer.starts_with("exit code 0\nTIC-1     draft"),
        "{answer}"
    );
    assert!(
        !answer.contains("error") && !answer.contains("warning"),
        "{answer}"
    );
}

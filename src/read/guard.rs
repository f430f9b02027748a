//! Work whose panics are problems of the input: a library that reads damaged files may break its own
//! expectations.

use std::cell::Cell;
use std::panic::UnwindSafe;

thread_local! {
    static GUARDED: Cell<bool> = const { Cell::new(false) };
}

/// Does `work`; `None` where it panicked.
pub(super) fn guarded<T>(work: impl FnOnce() -> T + UnwindSafe) -> Option<T> {
    let before = GUARDED.replace(true);
    let outcome = std::panic::catch_unwind(work);
    GUARDED.set(before);
    outcome.ok()
}

/// Whether a panic of this thread would be caught and told as a problem of a file, so that a panic hook
/// has nothing to print.
pub fn is_guarded() -> bool {
    GUARDED.get()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_panic_is_caught_and_known_to_be() {
        assert!(!is_guarded());
        assert_eq!(guarded(is_guarded), Some(true));
        assert_eq!(
            guarded(|| [1, 2].iter().skip(2).copied().next().expect("damaged")),
            None
        );
        assert!(!is_guarded());
    }
}

//! The fence round work that must not take the process down: a panic becomes log lines and a
//! missing result.

use std::panic::{AssertUnwindSafe, catch_unwind, set_hook};

/// From here on a panic writes one log line with its place.
pub fn log_panics() {
    set_hook(Box::new(|info| {
        let text = info.to_string().replace('\n', " ");
        log::error!("internal failure: {text}");
    }));
}

/// The result of `work`, or `None` and a log line that names `what` when it panicked.
///
/// The work is asserted to be unwind safe: what it holds half-changed is either thrown away with
/// it or, as with the texts of a session, only ever grows by whole entries.
pub fn guard<T>(what: &str, work: impl FnOnce() -> T) -> Option<T> {
    let result = catch_unwind(AssertUnwindSafe(work)).ok();
    if result.is_none() {
        log::error!("internal failure in {what}: it has no result");
    }
    result
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_panic_is_no_result() {
        assert_eq!(guard("a test", || 7), Some(7));
        let nothing: Option<i32> = guard("a test", || std::panic::panic_any("on purpose"));
        assert_eq!(nothing, None);
    }
}

//! Sends panics to the log instead of the bare standard error text, with their place. The fences
//! that catch them know the message only; the place is known to the hook alone.

use std::any::Any;
use std::cell::Cell;
use std::panic::{self, AssertUnwindSafe};

thread_local! {
    static EXPECTED: Cell<bool> = const { Cell::new(false) };
}

/// Installs the hook. Call once, before anything can panic.
pub fn install() {
    panic::set_hook(Box::new(|info| {
        if !EXPECTED.get() {
            let thread = std::thread::current();
            log::error!(
                "panic in thread {}: {info}",
                thread.name().unwrap_or("without a name")
            );
        }
    }));
}

/// Runs `action`, a call into the library that is known to panic in a harmless situation. Returns
/// `None` if it did, without a line in the log.
pub fn expecting<T>(action: impl FnOnce() -> T) -> Option<T> {
    EXPECTED.set(true);
    let result = panic::catch_unwind(AssertUnwindSafe(action));
    EXPECTED.set(false);
    result.ok()
}

/// The text of a caught panic.
pub fn text_of(payload: &(dyn Any + Send)) -> &str {
    if let Some(text) = payload.downcast_ref::<&str>() {
        text
    } else if let Some(text) = payload.downcast_ref::<String>() {
        text
    } else {
        "panic without a message"
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_expected_panic_is_none() {
        assert_eq!(expecting(|| 5), Some(5));
        assert_eq!(
            expecting(|| -> i32 { panic!("expected by this test") }),
            None
        );
        assert!(!EXPECTED.get());
    }

    #[test]
    fn text_is_found_in_both_kinds_of_payload() {
        let number = 3;
        let caught = panic::catch_unwind(|| panic!("formatted {number}")).expect_err("it panics");
        assert_eq!(text_of(&*caught), "formatted 3");
        let caught = panic::catch_unwind(|| panic!("plain")).expect_err("it panics");
        assert_eq!(text_of(&*caught), "plain");
        let caught = panic::catch_unwind(|| panic::panic_any(7)).expect_err("it panics");
        assert_eq!(text_of(&*caught), "panic without a message");
    }
}

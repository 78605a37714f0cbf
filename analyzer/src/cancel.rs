//! A flag that stops work which nobody waits for any more.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

/// Shared between the one who asks for work and the one who does it.
#[derive(Clone, Debug, Default)]
pub struct Cancel {
    flag: Arc<AtomicBool>,
}

/// The work was stopped; there is no result.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Cancelled;

impl Cancel {
    /// A flag that is not set.
    pub fn new() -> Self {
        Self::default()
    }

    /// Sets the flag.
    pub fn set(&self) {
        self.flag.store(true, Ordering::Relaxed);
    }

    /// Whether the flag is set.
    pub fn is_set(&self) -> bool {
        self.flag.load(Ordering::Relaxed)
    }

    /// Goes on unless the flag is set.
    ///
    /// # Errors
    /// [`Cancelled`] when the flag is set.
    pub fn check(&self) -> Result<(), Cancelled> {
        if self.is_set() {
            Err(Cancelled)
        } else {
            Ok(())
        }
    }
}

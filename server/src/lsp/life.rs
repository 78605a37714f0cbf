//! When a session ends, with which exit code, and that it ends in time. It knows threads and the
//! clock, not the messages.

use std::process;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread;
use std::time::Duration;

/// Why a session ends.
#[derive(Clone, Copy, Debug, Eq, PartialEq)]
pub enum End {
    /// The `exit` notification.
    Exit,
    /// End of input.
    InputClosed,
    /// The client closed its reading end.
    OutputClosed,
    /// The client did not read what it was sent.
    OutputOverfull,
    /// The process that started the server is gone.
    ParentGone,
}

/// Time for handlers that still run to reply. The three graces together stay below the limit after
/// which the process ends.
pub const REPLY_GRACE: Duration = Duration::from_millis(300);

/// Time for what those handlers sent to reach the queue.
pub const FORWARD_GRACE: Duration = Duration::from_millis(100);

/// Time to write what is queued.
pub const WRITE_GRACE: Duration = Duration::from_millis(400);

/// Time after which the process ends whatever still runs. The contract is one second.
const EXIT_LIMIT: Duration = Duration::from_millis(850);

/// The same where nobody waits for the process but a piped session may still be worked on.
const INPUT_CLOSED_LIMIT: Duration = Duration::from_secs(5);

/// State of the session that outlives its parts; clones share it.
#[derive(Clone, Debug)]
pub struct Life {
    shutdown_seen: Arc<AtomicBool>,
    ends_process: bool,
}

impl Life {
    /// `ends_process`: whether the process is to be ended when the session does not end in time.
    pub fn new(ends_process: bool) -> Self {
        Life {
            shutdown_seen: Arc::default(),
            ends_process,
        }
    }

    /// Notes that the client asked for the shutdown.
    pub fn note_shutdown(&self) {
        self.shutdown_seen.store(true, Ordering::SeqCst);
    }

    /// Exit code of a session that ends for this reason: 0 after `shutdown`, else 1 (Language
    /// Server Protocol 3.17, "Exit Notification").
    pub fn exit_code(&self, end: End) -> u8 {
        let orderly = matches!(end, End::Exit | End::InputClosed | End::OutputClosed);
        u8::from(!(orderly && self.shutdown_seen.load(Ordering::SeqCst)))
    }

    /// Starts the clock: from now on the process has its time to end by itself. The clock is a
    /// plain thread, so that neither a busy runtime nor a blocked write can stop it.
    pub fn begin_end(&self, end: End) {
        if !self.ends_process {
            return;
        }
        let code = self.exit_code(end);
        let limit = if end == End::InputClosed {
            INPUT_CLOSED_LIMIT
        } else {
            EXIT_LIMIT
        };
        let clock = thread::Builder::new()
            .name("lsp-exit".to_owned())
            .spawn(move || {
                thread::sleep(limit);
                process::exit(i32::from(code));
            });
        if let Err(error) = clock {
            log::error!("no thread for the exit clock: {error}");
            process::exit(i32::from(code));
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_code_follows_the_protocol() {
        let life = Life::new(false);
        let ends = [
            End::Exit,
            End::InputClosed,
            End::OutputClosed,
            End::OutputOverfull,
            End::ParentGone,
        ];
        assert_eq!(ends.map(|end| life.exit_code(end)), [1, 1, 1, 1, 1]);
        life.note_shutdown();
        assert_eq!(ends.map(|end| life.exit_code(end)), [0, 0, 0, 1, 1]);
    }

    #[test]
    fn the_graces_fit_into_the_limit() {
        assert!(
            REPLY_GRACE + FORWARD_GRACE + WRITE_GRACE < EXIT_LIMIT
                && EXIT_LIMIT < Duration::from_secs(1)
        );
    }
}

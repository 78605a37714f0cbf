//! Work that cannot be interrupted, on a thread of its own: whoever waits for it can leave at once.

use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::mpsc::{RecvTimeoutError, channel};
use std::thread;
use std::time::Duration;

/// Threads that may run at the same time, left ones included: more would only slow each other.
const MOST: usize = 2;
/// How often the flag is looked at.
const PATIENCE: Duration = Duration::from_millis(2);

static RUNNING: AtomicUsize = AtomicUsize::new(0);

/// A place among the running threads; given back when dropped.
struct Place;

impl Place {
    fn take() -> Option<Self> {
        let more = |running: usize| (running < MOST).then_some(running + 1);
        RUNNING
            .fetch_update(Ordering::AcqRel, Ordering::Acquire, more)
            .ok()
            .map(|_| Self)
    }
}

impl Drop for Place {
    fn drop(&mut self) {
        RUNNING.fetch_sub(1, Ordering::AcqRel);
    }
}

/// Runs `work` and waits for it until `stop` says so; `None` when stopped, or when the work
/// panicked. Work that was left runs out unseen.
pub(crate) fn run<T: Send + 'static>(
    work: impl FnOnce() -> T + Send + 'static,
    stop: &dyn Fn() -> bool,
) -> Option<T> {
    let place = loop {
        if stop() {
            return None;
        }
        match Place::take() {
            Some(place) => break place,
            None => thread::sleep(PATIENCE),
        }
    };
    let (done, result) = channel();
    let body = move || {
        let _place = place;
        let _ = done.send(work());
    };
    let spawned = thread::Builder::new()
        .name("eigenvalues".to_owned())
        .spawn(body);
    spawned.ok()?;
    loop {
        match result.recv_timeout(PATIENCE) {
            Ok(value) => return Some(value),
            Err(RecvTimeoutError::Timeout) if !stop() => {}
            Err(_) => return None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::mpsc::channel;

    #[test]
    fn waiting_ends_with_the_work_or_with_the_flag() {
        assert_eq!(run(|| 6 * 7, &|| false), Some(42));
        let (release, gate) = channel::<()>();
        let stuck = move || gate.recv().is_ok();
        assert_eq!(run(stuck, &|| RUNNING.load(Ordering::Acquire) > 0), None);
        drop(release);
        assert_eq!(run(|| 1, &|| false), Some(1), "places are given back");
    }
}

//! Watches the process that started the server. A client that is killed may leave its end of the
//! pipes open in another process; then no end of input ever arrives.
//!
//! The watch is a poll of the process table, which needs neither `unsafe` nor a further crate: on
//! Linux `/proc/PID/stat`, whose start time tells a reused number from the same process; on other
//! systems of that family `kill -0`. Elsewhere there is no watch and the end of input has to do.

use std::io;
use std::thread;
use std::time::Duration;

/// Time between two looks. A dead parent is noticed within this time.
pub const POLL_INTERVAL: Duration = Duration::from_secs(4);

/// Identity of a running process.
#[derive(Clone, Debug, Eq, PartialEq)]
struct Identity {
    /// Start time in clock ticks since boot, where the system tells it.
    started_ticks: Option<u64>,
}

/// Starts the watch over process `pid`; `on_death` runs once when it is gone. A process that cannot
/// be seen in the first place (another namespace, no process table) is not watched.
///
/// # Errors
/// When the thread cannot be started.
pub fn watch(
    pid: u32,
    interval: Duration,
    on_death: impl FnOnce() + Send + 'static,
) -> io::Result<()> {
    let Some(identity) = look(pid) else {
        log::info!("the client process {pid} cannot be seen from here and is not watched");
        return Ok(());
    };
    thread::Builder::new()
        .name("lsp-parent-watch".to_owned())
        .spawn(move || {
            while look(pid).as_ref() == Some(&identity) {
                thread::sleep(interval);
            }
            on_death();
        })?;
    Ok(())
}

/// Looks up a live process. A zombie is dead: nobody reads its pipes any more.
#[cfg(target_os = "linux")]
fn look(pid: u32) -> Option<Identity> {
    let stat = std::fs::read(format!("/proc/{pid}/stat")).ok()?;
    parse_stat(&String::from_utf8_lossy(&stat))
}

#[cfg(all(unix, not(target_os = "linux")))]
fn look(pid: u32) -> Option<Identity> {
    use std::process::{Command, Stdio};
    let mut command = Command::new("kill");
    command
        .args(["-0", &pid.to_string()])
        .stdin(Stdio::null())
        .stdout(Stdio::null())
        .stderr(Stdio::null());
    command.status().ok()?.success().then_some(Identity {
        started_ticks: None,
    })
}

#[cfg(not(unix))]
fn look(_pid: u32) -> Option<Identity> {
    None
}

/// Reads the state (field 3) and the start time (field 22) of `/proc/PID/stat`; see proc(5). The
/// command name in parentheses may hold anything, so fields are counted after its last `)`.
#[cfg(target_os = "linux")]
fn parse_stat(stat: &str) -> Option<Identity> {
    let (_, fields) = stat.rsplit_once(')')?;
    let mut fields = fields.split_ascii_whitespace();
    let state = fields.next()?;
    let started_ticks = fields.nth(18)?.parse().ok();
    (!matches!(state, "Z" | "X" | "x")).then_some(Identity { started_ticks })
}

#[cfg(all(test, target_os = "linux"))]
mod tests {
    use super::*;
    use std::process::{Command, Stdio};
    use std::sync::mpsc;

    const TICK: Duration = Duration::from_millis(5);
    const LONG: Duration = Duration::from_secs(20);

    #[test]
    fn reads_the_process_table() {
        let line = "42 (a) b (c) S 1 42 42 0 -1 4194560 1 0 0 0 0 0 0 0 20 0 1 0 777 1 1";
        assert_eq!(
            parse_stat(line),
            Some(Identity {
                started_ticks: Some(777)
            })
        );
        assert_eq!(parse_stat(&line.replace(" S ", " Z ")), None);
        assert_eq!(parse_stat(""), None);
        assert_eq!(parse_stat("42 (a) S 1"), None);
        assert!(look(std::process::id()).is_some_and(|identity| identity.started_ticks.is_some()));
    }

    #[test]
    fn a_killed_process_is_noticed_even_as_a_zombie() {
        let mut child = Command::new("sleep")
            .arg("1000")
            .stdin(Stdio::null())
            .spawn()
            .expect("sleep runs");
        let (tell, dead) = mpsc::channel();
        watch(child.id(), TICK, move || {
            tell.send(()).expect("the test waits")
        })
        .expect("a thread can be started");
        assert!(
            dead.recv_timeout(TICK * 10).is_err(),
            "the process is alive"
        );
        child.kill().expect("the child can be killed");
        // Not yet waited for: it is a zombie now.
        assert_eq!(dead.recv_timeout(LONG), Ok(()));
        child.wait().expect("the child can be waited for");
        assert_eq!(look(child.id()), None);
    }

    #[test]
    fn a_process_that_was_never_seen_is_not_watched() {
        let (tell, dead) = mpsc::channel();
        watch(u32::MAX, TICK, move || {
            tell.send(()).expect("the test waits")
        })
        .expect("a thread can be started");
        assert_eq!(
            dead.recv_timeout(LONG),
            Err(mpsc::RecvTimeoutError::Disconnected)
        );
    }
}

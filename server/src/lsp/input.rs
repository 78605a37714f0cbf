//! The way in: a thread that reads messages from the client into a queue without limit, and notices
//! the end of the session at once, however busy the rest is. It knows nothing of documents.

use std::io::{self, BufReader, Read};
use std::thread;

use tokio::sync::mpsc;

use super::frame::{FrameReader, swallowed_header};
use super::life::{End, Life};
use super::message::{self, Message};

/// Buffer of the reader, in bytes.
const READ_BYTES: usize = 64 * 1024;

/// What the loop works on, in order of arrival.
pub enum Incoming {
    /// A message, or what came in the place of one.
    Message(Message),
    /// The session ends. Nothing that follows counts.
    End(End),
}

/// Way to the loop.
pub type Queue = mpsc::UnboundedSender<Incoming>;

/// Starts the reading thread. It never waits for the loop, so the client's writes never block.
///
/// # Errors
/// When the thread cannot be started.
pub fn start(input: impl Read + Send + 'static, queue: Queue, life: Life) -> io::Result<()> {
    thread::Builder::new()
        .name("lsp-input".to_owned())
        .spawn(move || {
            let end = pump(
                FrameReader::new(BufReader::with_capacity(READ_BYTES, input)),
                &queue,
                &life,
            );
            life.begin_end(end);
            let _ = queue.send(Incoming::End(end));
        })?;
    Ok(())
}

/// Reads messages into the queue until `exit` or the end of input.
fn pump(mut frames: FrameReader<BufReader<impl Read>>, queue: &Queue, life: &Life) -> End {
    loop {
        let mut body = match frames.next_body() {
            Ok(Some(body)) => body,
            Ok(None) => return End::InputClosed,
            Err(error) => {
                log::error!("input failed: {error}");
                return End::InputClosed;
            }
        };
        if body.trim_ascii().is_empty() {
            continue;
        }
        let mut message = message::read(&mut body);
        if matches!(message, Message::Rejected(_))
            && let Some(start) = swallowed_header(&body).filter(|&start| start > 0)
        {
            log::warn!(
                "a message stated too great a length, the next one starts after {start} bytes"
            );
            frames.unread(body.split_off(start));
            message = message::read(&mut body);
        }
        if let Message::Request(request) = &message {
            match request.method() {
                "exit" => return End::Exit,
                "shutdown" => life.note_shutdown(),
                _ => {}
            }
        }
        if queue.send(Incoming::Message(message)).is_err() {
            return End::InputClosed;
        }
    }
}

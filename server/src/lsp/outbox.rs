//! The way out: a queue that never blocks who sends, and a thread that writes it to the client.
//! A client that stops reading costs memory up to a limit, never a stuck server. It knows which
//! notifications may be dropped, nothing else of the protocol.

use std::collections::{HashMap, VecDeque};
use std::io::{self, Write};
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::thread;

use serde_json::{Value, json};
use tower_lsp::jsonrpc::{ErrorCode, Request, Response};

use super::uri::UriSpellings;

/// Unsent messages from which on a newer publication takes the place of the unsent one of its
/// document, and log lines are dropped. Far more than a burst of edits leaves unsent for a moment
/// with a client that reads.
const BACKLOG_MESSAGES: usize = 1024;

/// Unsent bytes at which the client counts as gone. Replies cannot be dropped, so a client that
/// asks and never reads would fill the memory.
const MAX_UNSENT_BYTES: usize = 256 * 1024 * 1024;

/// Bytes gathered for one write.
const WRITE_BYTES: usize = 64 * 1024;

/// Why writing came to an end.
#[derive(Clone, Copy, Debug, Eq, PartialEq)]
pub enum OutputEnd {
    /// [`Outbox::close`] was called and everything has been written.
    Closed,
    /// The client closed its end, or writing failed otherwise.
    Broken,
    /// The client did not read and the limit was reached.
    Overfull,
}

/// Handle to the queue; clones share it.
#[derive(Clone)]
pub struct Outbox {
    shared: Arc<Shared>,
}

struct Shared {
    queue: Mutex<Queue>,
    changed: Condvar,
    spellings: Mutex<UriSpellings>,
    on_end: Mutex<Option<OnEnd>>,
}

type OnEnd = Box<dyn FnOnce(OutputEnd) + Send>;

#[derive(Debug, Default)]
struct Queue {
    frames: VecDeque<Vec<u8>>,
    /// Number of the frame at the front, counted since the start.
    front: u64,
    /// Number of the last publication of each document.
    publications: HashMap<String, u64>,
    unsent_bytes: usize,
    dropped: u64,
    end: Option<OutputEnd>,
}

impl Outbox {
    /// Creates the queue and starts the thread that writes it. `on_end` runs once, on the thread
    /// that notices the end.
    ///
    /// # Errors
    /// When the thread cannot be started.
    pub fn start<W, F>(output: W, on_end: F) -> io::Result<Outbox>
    where
        W: Write + Send + 'static,
        F: FnOnce(OutputEnd) + Send + 'static,
    {
        let shared = Arc::new(Shared {
            queue: Mutex::default(),
            changed: Condvar::new(),
            spellings: Mutex::default(),
            on_end: Mutex::new(Some(Box::new(on_end))),
        });
        let writer = Arc::clone(&shared);
        thread::Builder::new()
            .name("lsp-output".to_owned())
            .spawn(move || {
                let end = writer.write_all(output);
                writer.tell(end);
            })?;
        Ok(Outbox { shared })
    }

    /// Notes how the client spells the document URI of an incoming message.
    pub fn note_spelling(&self, method: &str, params: &mut Value) {
        lock(&self.shared.spellings).take_in(method, params);
    }

    /// Queues a reply.
    pub fn reply(&self, response: Response) {
        let (id, result) = response.into_parts();
        match result {
            Ok(result) => self.push(
                json!({"jsonrpc": "2.0", "result": result, "id": id}),
                Kind::Kept,
            ),
            Err(error) => self.push(
                json!({"jsonrpc": "2.0", "error": error, "id": id}),
                Kind::Kept,
            ),
        }
    }

    /// Queues an error reply whose id is given as the client wrote it.
    pub fn refuse(&self, id: Value, code: ErrorCode, reason: &str) {
        let error = json!({"code": code.code(), "message": reason});
        self.push(
            json!({"jsonrpc": "2.0", "error": error, "id": id}),
            Kind::Kept,
        );
    }

    /// Queues a request or notification of ours.
    pub fn send(&self, request: Request) {
        let (method, id, params) = request.into_parts();
        let uri = || params.as_ref()?.get("uri")?.as_str().map(str::to_owned);
        let kind = match (method.as_ref(), uri()) {
            ("textDocument/publishDiagnostics", Some(uri)) => Kind::Publication(uri),
            ("window/logMessage" | "telemetry/event" | "$/logTrace", _) => Kind::Talk,
            _ => Kind::Kept,
        };
        let mut message = json!({"jsonrpc": "2.0", "method": method});
        if let Some(members) = message.as_object_mut() {
            members.extend(params.map(|params| ("params".to_owned(), params)));
            members.extend(id.map(|id| ("id".to_owned(), json!(id))));
        }
        self.push(message, kind);
    }

    /// Lets the writer end once everything queued is written. What is queued later is dropped.
    pub fn close(&self) {
        self.shared.end(OutputEnd::Closed);
    }

    fn push(&self, mut message: Value, kind: Kind) {
        lock(&self.shared.spellings).put_back(&mut message);
        let body = message.to_string();
        let frame = format!("Content-Length: {}\r\n\r\n{body}", body.len()).into_bytes();
        let overfull = lock(&self.shared.queue).push(frame, kind);
        self.shared.changed.notify_all();
        if overfull {
            // The writer may be stuck in a write for good, so it cannot be the one to tell.
            self.shared.tell(OutputEnd::Overfull);
        }
    }
}

/// How a message fares when the client does not keep up.
enum Kind {
    Kept,
    Publication(String),
    Talk,
}

impl Queue {
    /// Adds a frame, or puts it in the place of an outdated one. Returns whether that was too much.
    fn push(&mut self, frame: Vec<u8>, kind: Kind) -> bool {
        if self.end.is_some() {
            return false;
        }
        let backlog = self.frames.len() >= BACKLOG_MESSAGES;
        self.unsent_bytes += frame.len();
        match kind {
            Kind::Talk if backlog => {
                self.unsent_bytes -= frame.len();
                self.dropped += 1;
            }
            Kind::Publication(uri) => match self.unsent_publication(&uri) {
                Some(old) if backlog => {
                    let old_bytes = std::mem::replace(old, frame).len();
                    self.unsent_bytes -= old_bytes;
                    self.dropped += 1;
                }
                _ => {
                    self.publications
                        .insert(uri, self.front + self.frames.len() as u64);
                    self.frames.push_back(frame);
                }
            },
            Kind::Kept | Kind::Talk => self.frames.push_back(frame),
        }
        let overfull = self.unsent_bytes > MAX_UNSENT_BYTES;
        if overfull {
            self.end = Some(OutputEnd::Overfull);
            self.frames.clear();
        }
        overfull
    }

    /// The last publication of a document, if it is still unsent.
    fn unsent_publication(&mut self, uri: &str) -> Option<&mut Vec<u8>> {
        let index = self.publications.get(uri)?.checked_sub(self.front)?;
        self.frames.get_mut(usize::try_from(index).ok()?)
    }

    /// Moves frames into `batch` until it is worth a write.
    fn take(&mut self, batch: &mut Vec<u8>) {
        while batch.len() < WRITE_BYTES
            && let Some(frame) = self.frames.pop_front()
        {
            self.front += 1;
            self.unsent_bytes -= frame.len();
            batch.extend_from_slice(&frame);
        }
        if self.frames.is_empty() {
            self.publications.clear();
            if self.dropped > 0 {
                log::warn!(
                    "the client read slowly, {} outdated messages were not sent",
                    self.dropped
                );
                self.dropped = 0;
            }
        }
    }
}

impl Shared {
    fn write_all(&self, mut output: impl Write) -> OutputEnd {
        let mut batch = Vec::new();
        loop {
            batch.clear();
            if let Some(end) = self.next_batch(&mut batch) {
                return end;
            }
            if let Err(error) = output.write_all(&batch).and_then(|()| output.flush()) {
                log::debug!("the client closed its input: {error}");
                self.end(OutputEnd::Broken);
                return OutputEnd::Broken;
            }
        }
    }

    /// Waits for frames. Returns why there will be none any more.
    fn next_batch(&self, batch: &mut Vec<u8>) -> Option<OutputEnd> {
        let mut queue = lock(&self.queue);
        loop {
            match queue.end {
                Some(end) if end != OutputEnd::Closed || queue.frames.is_empty() => {
                    return Some(end);
                }
                _ if !queue.frames.is_empty() => break,
                _ => {
                    queue = self
                        .changed
                        .wait(queue)
                        .unwrap_or_else(PoisonError::into_inner)
                }
            }
        }
        queue.take(batch);
        None
    }

    /// Reports the end, the first time only.
    fn tell(&self, end: OutputEnd) {
        if let Some(on_end) = lock(&self.on_end).take() {
            on_end(end);
        }
    }

    fn end(&self, end: OutputEnd) {
        lock(&self.queue).end.get_or_insert(end);
        self.changed.notify_all();
    }
}

/// The data stay consistent between statements, so a panic elsewhere does not spoil them.
fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::mpsc;
    use std::time::Duration;
    use tower_lsp::jsonrpc::Id;

    const LONG: Duration = Duration::from_secs(20);

    /// A client that reads one write per permission, and passes on what it read.
    struct SlowClient {
        permissions: mpsc::Receiver<()>,
        read: mpsc::Sender<Vec<u8>>,
    }

    impl Write for SlowClient {
        fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
            self.permissions
                .recv()
                .map_err(|_| io::ErrorKind::BrokenPipe)?;
            self.read
                .send(bytes.to_vec())
                .map_err(|_| io::ErrorKind::BrokenPipe)?;
            Ok(bytes.len())
        }

        fn flush(&mut self) -> io::Result<()> {
            Ok(())
        }
    }

    struct Bench {
        outbox: Outbox,
        permissions: mpsc::Sender<()>,
        read: mpsc::Receiver<Vec<u8>>,
        ended: mpsc::Receiver<OutputEnd>,
    }

    fn bench() -> Bench {
        let (permissions, wait) = mpsc::channel();
        let (passed, read) = mpsc::channel();
        let (tell, ended) = mpsc::channel();
        let client = SlowClient {
            permissions: wait,
            read: passed,
        };
        let on_end = move |end| tell.send(end).expect("the test still waits");
        let outbox = Outbox::start(client, on_end).expect("a thread can be started");
        Bench {
            outbox,
            permissions,
            read,
            ended,
        }
    }

    impl Bench {
        /// Lets the client read everything, closes, and returns the bodies in order.
        fn finish(self) -> Vec<Value> {
            self.outbox.close();
            for _ in 0..10_000 {
                let _ = self.permissions.send(());
            }
            assert_eq!(self.ended.recv_timeout(LONG), Ok(OutputEnd::Closed));
            let bytes: Vec<u8> = self.read.try_iter().flatten().collect();
            let mut reader = super::super::frame::FrameReader::new(io::Cursor::new(bytes));
            let mut bodies = Vec::new();
            while let Some(body) = reader.next_body().expect("a cursor cannot fail") {
                bodies.push(serde_json::from_slice(&body).expect("the server writes JSON"));
            }
            bodies
        }
    }

    fn publication(uri: &str, version: u64) -> Request {
        let params = json!({"uri": uri, "version": version, "diagnostics": []});
        Request::build("textDocument/publishDiagnostics")
            .params(params)
            .finish()
    }

    fn versions(bodies: &[Value], uri: &str) -> Vec<u64> {
        let of_uri = bodies
            .iter()
            .filter(|body| body.pointer("/params/uri") == Some(&json!(uri)));
        of_uri
            .filter_map(|body| body.pointer("/params/version")?.as_u64())
            .collect()
    }

    #[test]
    fn keeps_order_and_every_message_of_a_reading_client() {
        let bench = bench();
        bench.outbox.send(publication("u:a", 1));
        bench
            .outbox
            .reply(Response::from_ok(Id::Number(1), json!("ä")));
        bench.outbox.send(publication("u:a", 2));
        bench
            .outbox
            .send(Request::build("workspace/configuration").id(0_i64).finish());
        bench
            .outbox
            .refuse(json!(1.5), ErrorCode::InvalidRequest, "no");
        let bodies = bench.finish();
        assert_eq!(bodies.len(), 5);
        assert_eq!(versions(&bodies, "u:a"), [1, 2]);
        assert_eq!(
            bodies.get(1),
            Some(&json!({"jsonrpc": "2.0", "id": 1, "result": "ä"}))
        );
        assert_eq!(
            bodies.get(3),
            Some(&json!({"jsonrpc": "2.0", "id": 0, "method": "workspace/configuration"}))
        );
        let refused =
            json!({"jsonrpc": "2.0", "id": 1.5, "error": {"code": -32600, "message": "no"}});
        assert_eq!(bodies.get(4), Some(&refused));
    }

    #[test]
    fn a_client_that_does_not_read_gets_the_last_publications_and_every_reply() {
        let bench = bench();
        for version in 0..5_000 {
            bench.outbox.send(publication("u:a", version));
            bench.outbox.send(publication("u:b", version));
            bench.outbox.send(
                Request::build("window/logMessage")
                    .params(json!({"message": "x"}))
                    .finish(),
            );
            if version % 10 == 0 {
                bench
                    .outbox
                    .reply(Response::from_ok(Id::Number(0), json!(version)));
            }
        }
        let unsent = lock(&bench.outbox.shared.queue).unsent_bytes;
        assert!(
            unsent < 250_000,
            "{unsent} bytes are kept for a client that does not read"
        );
        let bodies = bench.finish();
        for uri in ["u:a", "u:b"] {
            let versions = versions(&bodies, uri);
            assert_eq!(versions.last(), Some(&4_999));
            assert!(
                versions.is_sorted() && versions.len() < BACKLOG_MESSAGES,
                "{} of {uri}",
                versions.len()
            );
        }
        assert_eq!(
            bodies
                .iter()
                .filter(|body| body.get("id").is_some())
                .count(),
            500
        );
    }

    #[test]
    fn a_closed_pipe_ends_the_writer() {
        let bench = bench();
        drop(bench.permissions);
        bench.outbox.send(publication("u:a", 1));
        assert_eq!(bench.ended.recv_timeout(LONG), Ok(OutputEnd::Broken));
        bench.outbox.send(publication("u:a", 2));
    }

    #[test]
    fn unread_replies_are_limited() {
        let bench = bench();
        let text = json!("x".repeat(8 * 1024 * 1024));
        for id in 0..40 {
            bench
                .outbox
                .reply(Response::from_ok(Id::Number(id), text.clone()));
        }
        assert_eq!(bench.ended.recv_timeout(LONG), Ok(OutputEnd::Overfull));
        assert!(
            lock(&bench.outbox.shared.queue).frames.is_empty(),
            "memory is given back"
        );
    }

    #[test]
    fn the_clients_spelling_goes_out() {
        let bench = bench();
        bench.outbox.note_spelling(
            "textDocument/didOpen",
            &mut json!({"textDocument": {"uri": "file:///a b"}}),
        );
        bench.outbox.send(publication("file:///a%20b", 1));
        assert_eq!(versions(&bench.finish(), "file:///a b"), [1]);
    }
}

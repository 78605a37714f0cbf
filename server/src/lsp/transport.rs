//! Serves the protocol on a pair of byte streams: a thread that reads, the loop that hands messages
//! to the service in order, the thread that writes. Entry points: [`serve`] and [`serve_streams`].
//! It knows the life of a session and nothing of documents.
//!
//! The library's own `Server` is not used. It ends at the first undecodable frame, and bounds the
//! messages under way, so that handlers which wait for the client block the replies they wait for.
//! Its service, its client handle and its message types are driven here instead.

use std::collections::HashSet;
use std::io::{self, Read, Write};
use std::process::ExitCode;
use std::sync::{Arc, Mutex, PoisonError};
use std::thread;

use futures::{FutureExt, Sink, SinkExt, Stream, StreamExt};
use serde_json::{Value, json};
use tokio::sync::{mpsc, oneshot};
use tokio::task::JoinHandle;
use tokio::time::timeout;
use tower_lsp::jsonrpc::{Error, Id, Request, Response};
use tower_lsp::{Client, LanguageServer, LspService, LspServiceBuilder};

use super::fence::Fence;
use super::input::{self, Incoming, Queue};
use super::life::{End, FORWARD_GRACE, Life, REPLY_GRACE, WRITE_GRACE};
use super::message::{Message, Rejected};
use super::outbox::{Outbox, OutputEnd};
use super::{panic_log, params, parent};

/// Notification that the server sends itself when a message that named a document was lost, with
/// parameters `{"uri": .., "method": ..}`. After a lost edit the text is no longer the client's.
pub const FRAME_LOST: &str = "squeg/frameLost";

/// Ids of our requests that the client has not answered yet.
type Awaited = Arc<Mutex<HashSet<Id>>>;

/// Serves the client on standard input and output until it says `exit`, closes a pipe or dies.
/// The process ends in time even if handlers still run, provided `main` returns the code.
///
/// `make` builds the server; `extend` may add custom methods to the service.
pub fn serve<S: LanguageServer>(
    make: impl FnOnce(Client) -> S,
    extend: impl FnOnce(LspServiceBuilder<S>) -> LspServiceBuilder<S>,
) -> ExitCode {
    panic_log::install();
    match serve_streams(io::stdin(), io::stdout(), true, make, extend) {
        Ok(code) => ExitCode::from(code),
        Err(error) => {
            log::error!("the language server cannot start: {error}");
            ExitCode::FAILURE
        }
    }
}

/// The same on any pair of streams; returns the exit code. With `ends_process` the process is ended
/// if the session does not end in time by itself. It blocks, and must not be called from a task.
///
/// # Errors
/// When threads cannot be started.
pub fn serve_streams<S: LanguageServer>(
    input: impl Read + Send + 'static,
    output: impl Write + Send + 'static,
    ends_process: bool,
    make: impl FnOnce(Client) -> S,
    extend: impl FnOnce(LspServiceBuilder<S>) -> LspServiceBuilder<S>,
) -> io::Result<u8> {
    // More threads than cores: a handler that computes in the runtime must not starve the others.
    let cores = thread::available_parallelism().map_or(2, usize::from);
    let mut builder = tokio::runtime::Builder::new_multi_thread();
    let runtime = builder
        .worker_threads(cores.clamp(2, 8) + 2)
        .thread_name("lsp-handler")
        .enable_time()
        .build()?;

    let life = Life::new(ends_process);
    let (queue, incoming) = mpsc::unbounded_channel();
    let outbox_closed = Arc::new(tokio::sync::Notify::new());
    let outbox = start_output(output, &queue, &life, &outbox_closed)?;
    input::start(input, queue.clone(), life.clone())?;

    // The server may start tasks while it is built.
    let entered = runtime.enter();
    let (service, socket) = extend(LspService::build(make)).finish();
    drop(entered);
    let end = runtime.block_on(async {
        let (client_requests, client_replies) = socket.split();
        let forwarder = Forwarder::start(client_requests, outbox.clone());
        let mut session = Session {
            fence: Fence::new(service, outbox.clone()),
            outbox,
            awaited: Arc::clone(&forwarder.awaited),
            client_replies,
            queue,
            life: life.clone(),
            parent_watched: false,
        };
        let end = session.run(incoming).await;
        // Replies of handlers under way, then what those have published, then the pipe.
        let _ = timeout(REPLY_GRACE, session.fence.idle()).await;
        let _ = timeout(FORWARD_GRACE, forwarder.finish()).await;
        session.outbox.close();
        let _ = timeout(WRITE_GRACE, outbox_closed.notified()).await;
        end
    });
    runtime.shutdown_background();
    Ok(life.exit_code(end))
}

fn start_output(
    output: impl Write + Send + 'static,
    queue: &Queue,
    life: &Life,
    closed: &Arc<tokio::sync::Notify>,
) -> io::Result<Outbox> {
    let (queue, life, closed) = (queue.clone(), life.clone(), Arc::clone(closed));
    Outbox::start(output, move |output_end| {
        let end = match output_end {
            OutputEnd::Closed => return closed.notify_one(),
            OutputEnd::Broken => End::OutputClosed,
            OutputEnd::Overfull => {
                log::error!("the client does not read what it is sent, giving up");
                End::OutputOverfull
            }
        };
        life.begin_end(end);
        let _ = queue.send(Incoming::End(end));
        closed.notify_one();
    })
}

/// The task that hands our requests and notifications to the outbox.
struct Forwarder {
    awaited: Awaited,
    stop: oneshot::Sender<()>,
    task: JoinHandle<()>,
}

impl Forwarder {
    fn start(
        requests: impl Stream<Item = Request> + Send + Unpin + 'static,
        outbox: Outbox,
    ) -> Self {
        let awaited = Awaited::default();
        let (stop, stopped) = oneshot::channel();
        let forwarding = forward(requests, outbox, Arc::clone(&awaited), stopped);
        Forwarder {
            awaited,
            stop,
            task: tokio::spawn(forwarding),
        }
    }

    /// Waits until what is ready has been handed over.
    async fn finish(self) {
        drop(self.stop);
        let _ = self.task.await;
    }
}

/// Hands messages to the outbox. Once `stopped` it finishes what is ready.
async fn forward(
    mut requests: impl Stream<Item = Request> + Unpin,
    outbox: Outbox,
    awaited: Awaited,
    mut stopped: oneshot::Receiver<()>,
) {
    loop {
        let request = tokio::select! {
            biased;
            request = requests.next() => request,
            _ = &mut stopped => None,
        };
        let Some(request) = request else {
            return;
        };
        if let Some(id) = request.id() {
            awaited
                .lock()
                .unwrap_or_else(PoisonError::into_inner)
                .insert(id.clone());
        }
        outbox.send(request);
    }
}

/// The loop's side of a session.
struct Session<S: LanguageServer, R> {
    fence: Fence<LspService<S>>,
    outbox: Outbox,
    awaited: Awaited,
    client_replies: R,
    queue: Queue,
    life: Life,
    parent_watched: bool,
}

impl<S: LanguageServer, R: Sink<Response> + Unpin> Session<S, R> {
    async fn run(&mut self, mut incoming: mpsc::UnboundedReceiver<Incoming>) -> End {
        while let Some(incoming) = incoming.recv().await {
            match incoming {
                Incoming::End(end) => return end,
                Incoming::Message(Message::Request(request)) => self.request(request).await,
                Incoming::Message(Message::Response(response)) => self.reply(response),
                Incoming::Message(Message::Bare(id)) => self.bare(id),
                Incoming::Message(Message::Rejected(rejected)) => self.reject(rejected).await,
            }
        }
        End::InputClosed
    }

    async fn request(&mut self, request: Request) {
        if request.method() == "initialize" && !self.parent_watched {
            self.parent_watched = true;
            self.watch_parent(request.params());
        }
        let request = self.with_known_uri(request);
        if request.id().is_none()
            && let Some(reason) = params::misfit(&request)
        {
            log::error!("notification {} dropped: {reason}", request.method());
            let uri = request
                .params()
                .and_then(|params| params.pointer("/textDocument/uri"));
            let uri = uri.and_then(Value::as_str).map(str::to_owned);
            return self.lost(uri, Some(request.method().to_owned())).await;
        }
        self.fence.accept(request).await;
    }

    /// Wraps what the library would refuse as a URI and notes the client's spelling.
    fn with_known_uri(&self, request: Request) -> Request {
        let (method, id, params) = request.into_parts();
        let mut rebuilt = Request::build(method.clone());
        if let Some(id) = id {
            rebuilt = rebuilt.id(id);
        }
        if let Some(mut params) = params {
            self.outbox.note_spelling(&method, &mut params);
            rebuilt = rebuilt.params(params);
        }
        rebuilt.finish()
    }

    /// Hands a reply to the handler that waits. The library panics if that handler is gone, a
    /// cancelled one for example; a late reply is nothing to worry about.
    fn reply(&mut self, response: Response) {
        let id = response.id().clone();
        self.awaited
            .lock()
            .unwrap_or_else(PoisonError::into_inner)
            .remove(&id);
        let delivered = panic_log::expecting(|| self.client_replies.send(response).now_or_never());
        if delivered.is_none() {
            log::debug!("the reply {id} of the client came too late");
        }
    }

    fn bare(&mut self, id: Id) {
        if self
            .awaited
            .lock()
            .unwrap_or_else(PoisonError::into_inner)
            .contains(&id)
        {
            self.reply(Response::from_ok(id, Value::Null));
        } else {
            let error = Error {
                message: "the method is missing".into(),
                ..Error::invalid_request()
            };
            self.outbox.reply(Response::from_error(id, error));
        }
    }

    async fn reject(&mut self, rejected: Rejected) {
        let Rejected {
            id,
            code,
            reason,
            method,
            uri,
        } = rejected;
        let named = method.as_deref().unwrap_or("unknown method");
        log::error!("message skipped ({named}): {reason}");
        self.outbox.refuse(id, code, &reason);
        self.lost(uri, method).await;
    }

    /// Tells the server that a message about a document was lost.
    async fn lost(&mut self, uri: Option<String>, method: Option<String>) {
        if let Some(uri) = uri {
            let params = json!({"textDocument": {"uri": uri}, "uri": uri, "method": method});
            let notification =
                self.with_known_uri(Request::build(FRAME_LOST).params(params).finish());
            self.fence.accept(notification).await;
        }
    }

    /// Watches the client process that `initialize` names, if any.
    fn watch_parent(&self, params: Option<&Value>) {
        let pid = params
            .and_then(|params| params.get("processId"))
            .and_then(Value::as_u64);
        let Some(pid) = pid
            .and_then(|pid| u32::try_from(pid).ok())
            .filter(|&pid| pid != 0)
        else {
            return;
        };
        let (queue, life) = (self.queue.clone(), self.life.clone());
        let watch = parent::watch(pid, parent::POLL_INTERVAL, move || {
            log::error!("the client process {pid} is gone, ending");
            life.begin_end(End::ParentGone);
            let _ = queue.send(Incoming::End(End::ParentGone));
        });
        if let Err(error) = watch {
            log::warn!("the client process is not watched: {error}");
        }
    }
}

#[cfg(test)]
#[path = "transport_tests.rs"]
mod tests;

//! Runs the handlers of the service so that none of them can hurt the others: notifications take
//! effect in the order of arrival, requests run side by side, a panic is an error reply or a log
//! line. It knows requests and replies, nothing of documents or of bytes.

use std::panic::{self, AssertUnwindSafe};
use std::pin::Pin;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Arc, Mutex, PoisonError};
use std::task::{Context, Poll, Waker};
use std::time::Duration;

use futures::FutureExt;
use futures::future::BoxFuture;
use serde_json::json;
use tokio::sync::{Notify, oneshot};
use tower::Service;
use tower_lsp::jsonrpc::{Error, ErrorCode, Id, Request, Response};

use super::outbox::Outbox;
use super::panic_log;

/// Time a request has to itself before the next message is looked at. Its first step ends far
/// sooner unless it computes without giving way, and then the others must not wait for it.
const HEAD_START: Duration = Duration::from_millis(20);

/// Time for `initialize`, before which the library refuses every other message.
const INITIALIZE_LIMIT: Duration = Duration::from_secs(10);

/// Outcome of a handler: its result, or the payload of its panic.
type Caught<T, E> = std::thread::Result<Result<T, E>>;

/// A handler under way.
type Handler<E> = BoxFuture<'static, Caught<Option<Response>, E>>;

/// A service behind the fence.
pub struct Fence<T> {
    service: T,
    outbox: Outbox,
    running: Arc<Running>,
}

/// Requests that are not answered yet.
#[derive(Default)]
struct Running {
    count: AtomicUsize,
    none: Notify,
    /// Ids whose handler panicked; the library still counts them as pending.
    panicked: Mutex<Vec<Id>>,
}

impl<T, E> Fence<T>
where
    T: Service<Request, Response = Option<Response>, Error = E>,
    T::Future: Send + 'static,
    E: Send + 'static,
{
    /// Puts a fence round a service whose replies go to `outbox`.
    pub fn new(service: T, outbox: Outbox) -> Self {
        Fence {
            service,
            outbox,
            running: Arc::default(),
        }
    }

    /// Starts the handler of a message. Returns when the next message may start: a notification
    /// has run to its first wait, a request has begun.
    pub async fn accept(&mut self, request: Request) {
        self.forget_panicked();
        let method = request.method().to_owned();
        let id = request.id().cloned();
        let handler = self.start(request);
        match id {
            None => self.notify(method, handler),
            Some(id) => {
                let answered = method == "initialize";
                let begun = self.answer(method, id, handler, answered);
                let limit = if answered {
                    INITIALIZE_LIMIT
                } else {
                    HEAD_START
                };
                let _ = tokio::time::timeout(limit, begun).await;
            }
        }
    }

    /// Waits until every request is answered.
    pub async fn idle(&self) {
        loop {
            let none = self.running.none.notified();
            if self.running.count.load(Ordering::SeqCst) == 0 {
                return;
            }
            none.await;
        }
    }

    fn start(&mut self, request: Request) -> Handler<E> {
        match panic::catch_unwind(AssertUnwindSafe(|| self.service.call(request))) {
            Ok(handler) => AssertUnwindSafe(handler).catch_unwind().boxed(),
            Err(payload) => std::future::ready(Err(payload)).boxed(),
        }
    }

    /// Runs a notification to its first wait here and now, which keeps the order of arrival, and
    /// the rest beside the others.
    fn notify(&self, method: String, mut handler: Handler<E>) {
        if let Poll::Ready(outcome) = step(&mut handler) {
            return note_panic(&method, outcome);
        }
        tokio::spawn(async move { note_panic(&method, handler.await) });
    }

    /// Runs a request beside the others. What is returned resolves when it has taken its first
    /// step, or with `answered` when it is done.
    fn answer(
        &self,
        method: String,
        id: Id,
        mut handler: Handler<E>,
        answered: bool,
    ) -> oneshot::Receiver<()> {
        let (tell, begun) = oneshot::channel();
        let guard = RunningGuard::new(&self.running);
        let outbox = self.outbox.clone();
        tokio::spawn(async move {
            let mut tell = Some(tell);
            let outcome = std::future::poll_fn(|context| {
                let outcome = handler.as_mut().poll(context);
                if !answered {
                    drop(tell.take());
                }
                outcome
            })
            .await;
            if let Some(response) = guard.response(&method, id, outcome) {
                outbox.reply(response);
            }
            drop(guard);
            drop(tell);
        });
        begun
    }

    /// Lets the library forget the ids of requests whose handler panicked, as a cancellation does.
    fn forget_panicked(&mut self) {
        let ids = std::mem::take(
            &mut *self
                .running
                .panicked
                .lock()
                .unwrap_or_else(PoisonError::into_inner),
        );
        for id in ids {
            let cancel = Request::build("$/cancelRequest")
                .params(json!({ "id": id }))
                .finish();
            let mut handler = self.start(cancel);
            let _ = step(&mut handler);
        }
    }
}

/// Polls a handler once. It is exempt from the runtime's cooperative budget: that is meant for
/// tasks that can wait, and one used up by earlier messages would break the order.
fn step<E>(handler: &mut Handler<E>) -> Poll<Caught<Option<Response>, E>> {
    let mut once = tokio::task::unconstrained(handler);
    Pin::new(&mut once).poll(&mut Context::from_waker(Waker::noop()))
}

fn note_panic<T, E>(method: &str, outcome: Caught<T, E>) {
    if let Err(payload) = outcome {
        log::error!(
            "the handler of {method} failed: {}",
            panic_log::text_of(&*payload)
        );
    }
}

/// Counts a request while it is not answered.
struct RunningGuard(Arc<Running>);

impl RunningGuard {
    fn new(running: &Arc<Running>) -> Self {
        running.count.fetch_add(1, Ordering::SeqCst);
        RunningGuard(Arc::clone(running))
    }

    fn response<E>(
        &self,
        method: &str,
        id: Id,
        outcome: Caught<Option<Response>, E>,
    ) -> Option<Response> {
        let message = match outcome {
            Ok(Ok(response)) => return response,
            Ok(Err(_)) => "the session has ended".to_owned(),
            Err(payload) => {
                log::error!(
                    "the handler of {method} failed: {}",
                    panic_log::text_of(&*payload)
                );
                self.0
                    .panicked
                    .lock()
                    .unwrap_or_else(PoisonError::into_inner)
                    .push(id.clone());
                format!("internal error in {method}, see the server's log")
            }
        };
        let error = Error {
            code: ErrorCode::InternalError,
            message: message.into(),
            data: None,
        };
        Some(Response::from_error(id, error))
    }
}

impl Drop for RunningGuard {
    fn drop(&mut self) {
        if self.0.count.fetch_sub(1, Ordering::SeqCst) == 1 {
            self.0.none.notify_waiters();
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::Value;
    use std::io;
    use std::sync::mpsc;
    use std::time::Instant;

    const LONG: Duration = Duration::from_secs(20);

    /// Notes `begin:N` and `end:N` of each message N and does what the method says.
    #[derive(Clone, Default)]
    struct Recorder {
        notes: Arc<Mutex<Vec<String>>>,
        release: Arc<Notify>,
    }

    impl Recorder {
        fn note(&self, text: String) {
            self.notes.lock().expect("no test panics here").push(text);
        }

        fn notes(&self, prefix: &str) -> Vec<String> {
            let notes = self.notes.lock().expect("no test panics here");
            notes
                .iter()
                .filter_map(|note| note.strip_prefix(prefix).map(str::to_owned))
                .collect()
        }
    }

    impl Service<Request> for Recorder {
        type Response = Option<Response>;
        type Error = ();
        type Future = BoxFuture<'static, Result<Option<Response>, ()>>;

        fn poll_ready(&mut self, _: &mut Context<'_>) -> Poll<Result<(), ()>> {
            Poll::Ready(Ok(()))
        }

        fn call(&mut self, request: Request) -> Self::Future {
            let this = self.clone();
            let (method, id, params) = request.into_parts();
            assert_ne!(method, "panic/call", "asked to fail in the call itself");
            let number = params.unwrap_or_default().to_string();
            async move {
                this.note(format!("begin:{number}"));
                match &*method {
                    "panic/first" => panic!("first step"),
                    "panic/later" => {
                        tokio::task::yield_now().await;
                        panic!("later step");
                    }
                    "wait" => this.release.notified().await,
                    "yield" => tokio::task::yield_now().await,
                    "busy" => {
                        let until = Instant::now() + Duration::from_millis(600);
                        while Instant::now() < until {
                            std::hint::spin_loop();
                        }
                    }
                    _ => {}
                }
                this.note(format!("end:{number}"));
                Ok(id.map(|id| Response::from_ok(id, Value::Null)))
            }
            .boxed()
        }
    }

    /// Collects replies.
    struct Replies(mpsc::Sender<Value>);

    impl io::Write for Replies {
        fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
            let mut reader = super::super::frame::FrameReader::new(bytes);
            while let Some(body) = reader.next_body()? {
                let body = serde_json::from_slice(&body).map_err(io::Error::other)?;
                self.0.send(body).map_err(io::Error::other)?;
            }
            Ok(bytes.len())
        }

        fn flush(&mut self) -> io::Result<()> {
            Ok(())
        }
    }

    fn bench() -> (Fence<Recorder>, Recorder, mpsc::Receiver<Value>) {
        let (sender, replies) = mpsc::channel();
        let outbox = Outbox::start(Replies(sender), |_| ()).expect("a thread can be started");
        let recorder = Recorder::default();
        (Fence::new(recorder.clone(), outbox), recorder, replies)
    }

    fn notification(method: &'static str, number: i64) -> Request {
        Request::build(method).params(number).finish()
    }

    fn request(method: &'static str, number: i64) -> Request {
        Request::build(method).params(number).id(number).finish()
    }

    fn runtime() -> tokio::runtime::Runtime {
        let mut builder = tokio::runtime::Builder::new_multi_thread();
        builder
            .worker_threads(3)
            .enable_time()
            .build()
            .expect("a runtime can be started")
    }

    #[test]
    fn notifications_begin_in_order_whatever_they_wait_for() {
        runtime().block_on(async {
            let (mut fence, recorder, _replies) = bench();
            for number in 0..300 {
                let method = ["plain", "yield", "wait"][usize::try_from(number % 3).unwrap_or(0)];
                fence.accept(notification(method, number)).await;
            }
            let expected: Vec<String> = (0..300).map(|number| number.to_string()).collect();
            assert_eq!(recorder.notes("begin:"), expected);
        });
    }

    #[test]
    fn a_request_begins_after_earlier_and_before_later_notifications() {
        runtime().block_on(async {
            let (mut fence, recorder, _replies) = bench();
            for number in 0..100 {
                fence.accept(notification("plain", 2 * number)).await;
                fence.accept(request("yield", 2 * number + 1)).await;
            }
            let expected: Vec<String> = (0..200).map(|number| number.to_string()).collect();
            assert_eq!(recorder.notes("begin:"), expected);
        });
    }

    #[test]
    fn a_panic_is_an_error_reply_and_others_live_on() {
        runtime().block_on(async {
            let (mut fence, recorder, replies) = bench();
            for (number, method) in ["panic/first", "panic/later", "panic/call"]
                .into_iter()
                .enumerate()
            {
                fence.accept(notification(method, 50)).await;
                fence
                    .accept(request(method, i64::try_from(number).unwrap_or(0)))
                    .await;
                let reply = replies
                    .recv_timeout(LONG)
                    .expect("a panicking handler is answered");
                assert_eq!(reply.get("id"), Some(&json!(number)));
                assert_eq!(reply.pointer("/error/code"), Some(&json!(-32603)));
            }
            fence.accept(request("plain", 9)).await;
            assert_eq!(
                replies
                    .recv_timeout(LONG)
                    .ok()
                    .and_then(|reply| reply.get("id").cloned()),
                Some(json!(9))
            );
            let cancels = recorder
                .notes("begin:")
                .iter()
                .filter(|note| note.contains("\"id\""))
                .count();
            assert_eq!(cancels, 3, "the ids of the failed requests are free again");
            tokio::time::timeout(LONG, fence.idle())
                .await
                .expect("nothing is counted as running");
        });
    }

    #[test]
    fn a_handler_that_computes_does_not_hold_up_the_next() {
        runtime().block_on(async {
            let (mut fence, _recorder, replies) = bench();
            fence.accept(request("busy", 1)).await;
            fence.accept(request("plain", 2)).await;
            let order: Vec<_> = (0..2)
                .filter_map(|_| replies.recv_timeout(LONG).ok()?.get("id").cloned())
                .collect();
            assert_eq!(order, [json!(2), json!(1)]);
        });
    }

    #[test]
    fn any_number_of_requests_may_wait() {
        runtime().block_on(async {
            let (mut fence, recorder, replies) = bench();
            for number in 0..3_000 {
                fence.accept(request("wait", number)).await;
            }
            fence.accept(request("plain", 5_000)).await;
            assert_eq!(
                replies
                    .recv_timeout(LONG)
                    .ok()
                    .and_then(|reply| reply.get("id").cloned()),
                Some(json!(5_000))
            );
            recorder.release.notify_waiters();
            tokio::time::timeout(LONG, fence.idle())
                .await
                .expect("all are answered");
            let mut answered = 0;
            while answered < 3_000 && replies.recv_timeout(LONG).is_ok() {
                answered += 1;
            }
            assert_eq!(answered, 3_000);
        });
    }
}

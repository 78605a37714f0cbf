//! Whole sessions over in-memory streams.

use std::io::{self, Read, Write};
use std::sync::mpsc;
use std::thread::JoinHandle;
use std::time::Duration;

use serde_json::{Value, json};
use tower_lsp::jsonrpc::Result;
use tower_lsp::lsp_types::{
    ConfigurationItem, DidChangeTextDocumentParams, InitializeParams, InitializeResult,
};

use super::super::frame::FrameReader;
use super::*;

const LONG: Duration = Duration::from_secs(20);

/// Publishes each change under its own URI, and waits for the client on request.
struct Echo(Client);

impl Echo {
    async fn ask(&self) -> Result<Value> {
        let asked = self.0.configuration(vec![ConfigurationItem::default()]);
        match tokio::time::timeout(Duration::from_millis(30), asked).await {
            Ok(answer) => Ok(json!(answer?)),
            Err(_) => Ok(json!("impatient")),
        }
    }

    async fn ask_patiently(&self) -> Result<Value> {
        Ok(json!(
            self.0
                .configuration(vec![ConfigurationItem::default()])
                .await
                .map_err(|error| error.code.code())
        ))
    }

    async fn lost(&self, params: Value) {
        self.0
            .log_message(tower_lsp::lsp_types::MessageType::LOG, params)
            .await;
    }
}

#[tower_lsp::async_trait]
impl LanguageServer for Echo {
    async fn initialize(&self, _: InitializeParams) -> Result<InitializeResult> {
        tokio::task::yield_now().await;
        Ok(InitializeResult::default())
    }

    async fn did_change(&self, params: DidChangeTextDocumentParams) {
        let document = params.text_document;
        self.0
            .publish_diagnostics(document.uri, Vec::new(), Some(document.version))
            .await;
    }

    async fn shutdown(&self) -> Result<()> {
        Ok(())
    }
}

struct Pipe<T>(T);

impl Read for Pipe<mpsc::Receiver<Vec<u8>>> {
    /// Passes on one write; the test writes less than a buffer at a time.
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let Ok(bytes) = self.0.recv() else {
            return Ok(0);
        };
        buffer
            .get_mut(..bytes.len())
            .ok_or(io::ErrorKind::InvalidInput)?
            .copy_from_slice(&bytes);
        Ok(bytes.len())
    }
}

impl Write for Pipe<mpsc::Sender<Value>> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let mut frames = FrameReader::new(bytes);
        while let Some(body) = frames.next_body()? {
            self.0
                .send(serde_json::from_slice(&body)?)
                .map_err(|_| io::ErrorKind::BrokenPipe)?;
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

/// The client's side of a session.
struct TestClient {
    to_server: Option<mpsc::Sender<Vec<u8>>>,
    from_server: mpsc::Receiver<Value>,
    server: JoinHandle<io::Result<u8>>,
}

impl TestClient {
    fn start() -> Self {
        let (to_server, input) = mpsc::channel();
        let (output, from_server) = mpsc::channel();
        let server = thread::spawn(move || {
            serve_streams(Pipe(input), Pipe(output), false, Echo, |builder| {
                builder
                    .custom_method("ask", Echo::ask)
                    .custom_method("askPatiently", Echo::ask_patiently)
                    .custom_method(FRAME_LOST, Echo::lost)
            })
        });
        let client = TestClient {
            to_server: Some(to_server),
            from_server,
            server,
        };
        client.send(&json!({"jsonrpc": "2.0", "id": 0, "method": "initialize", "params": {"capabilities": {}}}));
        client
    }

    fn send(&self, message: &Value) {
        self.send_text(&message.to_string());
    }

    fn send_text(&self, body: &str) {
        self.send_raw(format!("Content-Length: {}\r\n\r\n{body}", body.len()).into_bytes());
    }

    fn send_raw(&self, bytes: Vec<u8>) {
        let to_server = self.to_server.as_ref().expect("the input is open");
        to_server.send(bytes).expect("the server reads");
    }

    fn change(&self, uri: &str, version: i32) {
        let params =
            json!({"textDocument": {"uri": uri, "version": version}, "contentChanges": []});
        self.send(&json!({"jsonrpc": "2.0", "method": "textDocument/didChange", "params": params}));
    }

    /// The next message for which `wanted` holds; others are passed over.
    #[track_caller]
    fn wait(&self, wanted: impl Fn(&Value) -> bool) -> Value {
        loop {
            let message = self
                .from_server
                .recv_timeout(LONG)
                .expect("the message arrives");
            if wanted(&message) {
                return message;
            }
        }
    }

    #[track_caller]
    fn reply(&self, id: i64) -> Value {
        self.wait(|message| {
            message.get("id") == Some(&json!(id)) && message.get("method").is_none()
        })
    }

    #[track_caller]
    fn question(&self) -> Value {
        let question =
            self.wait(|message| message.get("method") == Some(&json!("workspace/configuration")));
        question.get("id").cloned().expect("a request has an id")
    }

    /// Closes the input and returns the exit code with what arrived until then.
    fn finish(mut self) -> (u8, Vec<Value>) {
        drop(self.to_server.take());
        let code = self
            .server
            .join()
            .expect("no panic")
            .expect("threads start");
        (code, self.from_server.iter().collect())
    }
}

#[test]
fn messages_sent_before_the_reply_to_initialize_are_kept() {
    let client = TestClient::start();
    for version in 0..200 {
        client.change("u:a", version);
    }
    let (code, messages) = client.finish();
    assert_eq!(code, 1, "no shutdown was asked for");
    let versions: Vec<_> = messages
        .iter()
        .filter_map(|message| message.pointer("/params/version")?.as_i64())
        .collect();
    assert_eq!(versions, (0..200).collect::<Vec<_>>());
}

#[test]
fn shutdown_and_exit_end_the_session_though_the_input_stays_open() {
    let client = TestClient::start();
    client.send_text(r#"{"jsonrpc":"2.0","id":1,"method":"shutdown","params":null}"#);
    assert_eq!(client.reply(1).get("result"), Some(&Value::Null));
    client.send_text(r#"{"jsonrpc":"2.0","method":"exit","params":null}"#);
    let code = client
        .server
        .join()
        .expect("no panic")
        .expect("threads start");
    assert_eq!((code, client.to_server.is_some()), (0, true));
}

#[test]
fn exit_sent_as_a_request_ends_the_session_too() {
    let client = TestClient::start();
    client.send_text(r#"{"jsonrpc":"2.0","id":1,"method":"exit"}"#);
    assert_eq!(
        client
            .server
            .join()
            .expect("no panic")
            .expect("threads start"),
        1
    );
}

#[test]
fn exit_alone_is_code_one_and_replies_under_way_are_sent() {
    let client = TestClient::start();
    client.send_text(r#"{"jsonrpc":"2.0","id":1,"method":"ask"}"#);
    client.send_text(r#"{"jsonrpc":"2.0","method":"exit"}"#);
    let reply = client.reply(1);
    assert_eq!(reply.get("result"), Some(&json!("impatient")));
    assert_eq!(client.finish().0, 1);
}

#[test]
fn bad_frames_are_answered_and_skipped() {
    let client = TestClient::start();
    client.reply(0);
    for (body, code) in [("{oops", -32700), ("[1]", -32600), ("7", -32600)] {
        client.send_text(body);
        let refused = client.wait(|message| message.get("id") == Some(&Value::Null));
        assert_eq!(refused.pointer("/error/code"), Some(&json!(code)), "{body}");
    }
    client.send_raw(
        b"content-LENGTH: 40\r\n\r\n{\"jsonrpc\":\"2.0\",\"id\":5,\"method\":\"none\"}".to_vec(),
    );
    assert_eq!(client.reply(5).pointer("/error/code"), Some(&json!(-32601)));
}

#[test]
fn a_length_too_great_loses_nothing() {
    let client = TestClient::start();
    client.reply(0);
    let body = |id: i64| format!(r#"{{"jsonrpc":"2.0","id":{id},"method":"none"}}"#);
    // From one byte of the next header to part of its body.
    for excess in 1..40 {
        let text = body(excess) + "\r\n ";
        let length = text.len() + usize::try_from(excess).unwrap_or(0);
        client.send_raw(format!("Content-Length: {length}\r\n\r\n{text}").into_bytes());
        client.send_text(&body(1000 + excess));
        // Replies may overtake each other.
        let mut missing = vec![json!(excess), json!(1000 + excess)];
        while !missing.is_empty() {
            let reply =
                client.wait(|message| message.pointer("/error/code") == Some(&json!(-32601)));
            missing.retain(|id| Some(id) != reply.get("id"));
        }
    }
}

#[test]
fn a_late_or_missing_reply_of_the_client_does_no_harm() {
    let client = TestClient::start();
    client.send_text(r#"{"jsonrpc":"2.0","id":1,"method":"ask"}"#);
    let question = client.question();
    assert_eq!(client.reply(1).get("result"), Some(&json!("impatient")));
    client.send(&json!({"jsonrpc": "2.0", "id": question, "result": [null]}));
    client.send(&json!({"jsonrpc": "2.0", "id": 999, "result": 1}));
    client.send_text(r#"{"jsonrpc":"2.0","id":2,"method":"none"}"#);
    assert_eq!(client.reply(2).pointer("/error/code"), Some(&json!(-32601)));
}

#[test]
fn a_reply_without_a_result_reaches_its_handler_only_if_awaited() {
    let client = TestClient::start();
    client.send_text(r#"{"jsonrpc":"2.0","id":1,"method":"askPatiently"}"#);
    let question = client.question();
    client.send(&json!({"jsonrpc": "2.0", "id": question}));
    // The handler is answered: `null` is no list of settings, which the library reports as -32700.
    assert_eq!(client.reply(1).get("result"), Some(&json!({"Err": -32700})));
    client.send_text(r#"{"jsonrpc":"2.0","id":77}"#);
    assert_eq!(
        client.reply(77).pointer("/error/code"),
        Some(&json!(-32600))
    );
}

#[test]
fn a_lost_edit_is_reported_to_the_server() {
    let client = TestClient::start();
    client.reply(0);
    let lost = |client: &TestClient| {
        let told =
            client.wait(|message| message.get("method") == Some(&json!("window/logMessage")));
        told.pointer("/params/message")
            .and_then(Value::as_str)
            .map(str::to_owned)
            .unwrap_or_default()
    };
    client.send_text(r#"{"jsonrpc":"2.0","method":"textDocument/didChange","params":{"textDocument":{"uri":"u:a"},,"#);
    assert!(lost(&client).contains("u:a"));
    let params = json!({"textDocument": {"uri": "u:b", "version": "x"}, "contentChanges": []});
    client.send(&json!({"jsonrpc": "2.0", "method": "textDocument/didChange", "params": params}));
    let told = lost(&client);
    assert!(
        told.contains("u:b") && told.contains("textDocument/didChange"),
        "{told}"
    );
}

#[test]
fn any_spelling_of_a_document_is_taken_and_echoed() {
    let client = TestClient::start();
    for uri in ["no scheme at all", "FILE:///tmp/a b.cir", "untitled:1"] {
        let params =
            json!({"textDocument": {"uri": uri, "languageId": "x", "version": 0, "text": ""}});
        client.send(&json!({"jsonrpc": "2.0", "method": "textDocument/didOpen", "params": params}));
        client.change(uri, 1);
        let published = client.wait(|message| message.pointer("/params/version").is_some());
        assert_eq!(published.pointer("/params/uri"), Some(&json!(uri)));
    }
}

#[test]
fn a_closed_output_ends_the_session() {
    let mut client = TestClient::start();
    client.reply(0);
    (_, client.from_server) = mpsc::channel();
    client.send_text(r#"{"jsonrpc":"2.0","id":1,"method":"none"}"#);
    let code = client
        .server
        .join()
        .expect("no panic")
        .expect("threads start");
    assert_eq!((code, client.to_server.is_some()), (1, true));
}

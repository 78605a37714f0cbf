//! Turns a frame body into one of the library's own messages, or into the answer that a body
//! deserves which is none. It knows JSON-RPC 2.0, and of the protocol only which members are
//! optional; it must not know documents.
//!
//! Building the messages by hand keeps one malformed frame from ending the session, which is what
//! the library's own stream decoder does.

use serde_json::{Map, Value};
use tower_lsp::jsonrpc::{Error, ErrorCode, Id, Request, Response};

use super::repair;
use super::salvage::{Salvage, salvage};

/// A frame body, read.
#[derive(Debug, PartialEq)]
pub enum Message {
    /// A request or notification.
    Request(Request),
    /// A reply to a request of ours.
    Response(Response),
    /// `{"jsonrpc":"2.0","id":N}`: a reply whose `undefined` result was left out by the client, if
    /// N is awaited, else an invalid request.
    Bare(Id),
    /// Not a message.
    Rejected(Rejected),
}

/// Why a body was skipped, and what to answer.
#[derive(Debug, PartialEq)]
pub struct Rejected {
    /// The id for the answer as the client wrote it; `null` when none could be recovered.
    pub id: Value,
    /// `ParseError` or `InvalidRequest`.
    pub code: ErrorCode,
    /// The reason, for the log and for the answer.
    pub reason: String,
    /// Method of the lost message, if known.
    pub method: Option<String>,
    /// Document of the lost message, if known.
    pub uri: Option<String>,
}

impl Rejected {
    fn shape(id: Value, reason: &str) -> Self {
        let code = ErrorCode::InvalidRequest;
        Rejected {
            id,
            code,
            reason: reason.to_owned(),
            method: None,
            uri: None,
        }
    }

    fn naming(mut self, message: &Value) -> Self {
        let uri = message
            .pointer("/params/textDocument/uri")
            .and_then(Value::as_str);
        self.method = message
            .get("method")
            .and_then(Value::as_str)
            .map(str::to_owned);
        self.uri = uri.map(str::to_owned);
        self
    }
}

/// Reads a body, which is left mended. Never fails: what is no message becomes
/// [`Message::Rejected`].
pub fn read(body: &mut Vec<u8>) -> Message {
    match parse(body) {
        Ok(Value::Object(members)) => classify(members),
        Ok(_) => Message::Rejected(Rejected::shape(
            Value::Null,
            "a message must be one JSON object",
        )),
        Err(error) => Message::Rejected(unreadable(&error, salvage(body))),
    }
}

/// Parses a body, mending it only when the strict parse fails.
fn parse(body: &mut Vec<u8>) -> Result<Value, serde_json::Error> {
    let error = match serde_json::from_slice(body) {
        Ok(value) => return Ok(value),
        Err(error) => error,
    };
    let surrogates = repair::lone_surrogates(body);
    let text = repair::invalid_utf8(body);
    if surrogates == 0 && text.is_none() {
        return Err(error);
    }
    log::warn!(
        "message with invalid text mended ({surrogates} lone surrogates, other bytes: {})",
        text.is_some()
    );
    if let Some(text) = text {
        *body = text;
    }
    serde_json::from_slice(body)
}

fn unreadable(error: &serde_json::Error, found: Salvage) -> Rejected {
    let code = match found.id {
        Some(_) => ErrorCode::InvalidRequest,
        None => ErrorCode::ParseError,
    };
    Rejected {
        id: found.id.unwrap_or(Value::Null),
        code,
        reason: format!("unreadable JSON: {error}"),
        method: found.method,
        uri: found.uri,
    }
}

fn classify(mut members: Map<String, Value>) -> Message {
    let id_as_sent = members.get("id").cloned().unwrap_or(Value::Null);
    let id = match members.remove("id") {
        None => None,
        Some(value) => match read_id(value) {
            Some(id) => Some(id),
            None => {
                let rejected =
                    Rejected::shape(id_as_sent, "the id must be a whole number or a string");
                return Message::Rejected(rejected.naming(&Value::Object(members)));
            }
        },
    };
    if members.contains_key("method") {
        return match read_request(id, &mut members) {
            Ok(request) => Message::Request(request),
            Err(reason) => {
                let rejected = Rejected::shape(id_as_sent, reason);
                Message::Rejected(rejected.naming(&Value::Object(members)))
            }
        };
    }
    match (id, members.remove("result"), members.remove("error")) {
        // Some clients always send both members, the one that does not apply as null.
        (Some(id), _, Some(error)) if !error.is_null() => {
            Message::Response(Response::from_error(id, read_error(error)))
        }
        (Some(id), Some(result), _) => Message::Response(Response::from_ok(id, result)),
        (Some(id), None, Some(_)) => Message::Response(Response::from_ok(id, Value::Null)),
        (Some(id), None, None) if id != Id::Null => Message::Bare(id),
        _ => Message::Rejected(Rejected::shape(
            id_as_sent,
            "neither a request nor a response",
        )),
    }
}

fn read_request(id: Option<Id>, members: &mut Map<String, Value>) -> Result<Request, &'static str> {
    if members.get("jsonrpc").and_then(Value::as_str) != Some("2.0") {
        return Err("the member jsonrpc must be \"2.0\"");
    }
    let Some(Value::String(method)) = members.get("method") else {
        return Err("the method must be a string");
    };
    let method = method.clone();
    let params = normal_params(&method, members.remove("params"));
    let mut request = Request::build(method);
    if let Some(id) = id {
        request = request.id(id);
    }
    if let Some(params) = params {
        request = request.params(params);
    }
    Ok(request.finish())
}

/// `params: null` counts as absent; methods without parameters drop what was sent, and
/// `initialized`, whose parameters are an object without members, gets that object.
fn normal_params(method: &str, params: Option<Value>) -> Option<Value> {
    match method {
        "shutdown" | "exit" => None,
        "initialized" => Some(Value::Object(Map::new())),
        _ => params.filter(|params| !params.is_null()),
    }
}

/// Whole numbers written as `1.0` are the same number in every client that writes them so.
fn read_id(value: Value) -> Option<Id> {
    match value {
        Value::Null => Some(Id::Null),
        Value::String(text) => Some(Id::String(text)),
        Value::Number(number) => match (number.as_i64(), number.as_f64()) {
            (Some(whole), _) => Some(Id::Number(whole)),
            (None, Some(real)) if real.fract() == 0.0 && real.abs() <= 9_007_199_254_740_992.0 => {
                #[expect(clippy::cast_possible_truncation, reason = "whole and within 2^53")]
                let whole = real as i64;
                Some(Id::Number(whole))
            }
            _ => None,
        },
        _ => None,
    }
}

/// Reads an error object, whatever it lacks or adds, so that the handler that waits is answered.
fn read_error(error: Value) -> Error {
    let code = error
        .get("code")
        .and_then(Value::as_i64)
        .map_or(ErrorCode::InternalError, ErrorCode::from);
    let message = error
        .get("message")
        .and_then(Value::as_str)
        .unwrap_or("error without a message");
    Error {
        code,
        message: message.to_owned().into(),
        data: error.get("data").cloned(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    #[track_caller]
    fn rejected(body: &str) -> (Value, i64) {
        match read(&mut body.as_bytes().to_vec()) {
            Message::Rejected(rejected) => (rejected.id, rejected.code.code()),
            other => panic!("{body} was read as {other:?}"),
        }
    }

    #[track_caller]
    fn request(body: &str) -> Request {
        match read(&mut body.as_bytes().to_vec()) {
            Message::Request(request) => request,
            other => panic!("{body} was read as {other:?}"),
        }
    }

    #[track_caller]
    fn response(body: &str) -> Response {
        match read(&mut body.as_bytes().to_vec()) {
            Message::Response(response) => response,
            other => panic!("{body} was read as {other:?}"),
        }
    }

    /// Codes: JSON-RPC 2.0, section 5.1, and the examples of section 7 (`1`, `[]`, broken JSON).
    #[test]
    fn what_is_no_message_gets_the_code_of_the_standard() {
        assert_eq!(rejected("{oops"), (Value::Null, -32700));
        assert_eq!(rejected(""), (Value::Null, -32700));
        assert_eq!(rejected("1"), (Value::Null, -32600));
        assert_eq!(rejected("[]"), (Value::Null, -32600));
        assert_eq!(
            rejected(r#"[{"jsonrpc":"2.0","method":"exit"}]"#),
            (Value::Null, -32600)
        );
        assert_eq!(rejected(r#"{"foo":1}"#), (Value::Null, -32600));
        assert_eq!(rejected(r#"{"method":"m","id":3}"#), (json!(3), -32600));
        assert_eq!(
            rejected(r#"{"jsonrpc":"1.0","method":"m","id":3}"#),
            (json!(3), -32600)
        );
        assert_eq!(
            rejected(r#"{"jsonrpc":"2.0","method":1,"id":"a"}"#),
            (json!("a"), -32600)
        );
        assert_eq!(
            rejected(r#"{"jsonrpc":"2.0","method":"m","id":1.5}"#),
            (json!(1.5), -32600)
        );
        assert_eq!(
            rejected(r#"{"jsonrpc":"2.0","method":"m","id":[1]}"#),
            (json!([1]), -32600)
        );
        assert_eq!(
            rejected(r#"{"jsonrpc":"2.0","id":9,"method":"m",,}"#),
            (json!(9), -32600)
        );
    }

    #[test]
    fn nesting_beyond_the_parser_is_refused_with_its_id() {
        let deep = format!(
            r#"{{"jsonrpc":"2.0","id":4,"method":"m","params":{}{}}}"#,
            "[".repeat(200),
            "]".repeat(200)
        );
        assert_eq!(rejected(&deep), (json!(4), -32600));
    }

    #[test]
    fn a_lost_edit_names_its_document() {
        let body = br#"{"jsonrpc":"2.0","method":"textDocument/didChange","params":{"textDocument":{"uri":"u:a"},,"#;
        let Message::Rejected(lost) = read(&mut body.to_vec()) else {
            panic!("broken JSON was accepted");
        };
        assert_eq!(lost.method.as_deref(), Some("textDocument/didChange"));
        assert_eq!(lost.uri.as_deref(), Some("u:a"));
    }

    #[test]
    fn null_params_count_as_absent() {
        for method in ["shutdown", "textDocument/hover", "exit"] {
            let body = format!(r#"{{"jsonrpc":"2.0","id":1,"method":"{method}","params":null}}"#);
            assert_eq!(request(&body).params(), None, "{method}");
        }
        assert_eq!(
            request(r#"{"jsonrpc":"2.0","id":1,"method":"shutdown","params":{}}"#).params(),
            None
        );
        let empty = json!({});
        assert_eq!(
            request(r#"{"jsonrpc":"2.0","method":"initialized"}"#).params(),
            Some(&empty)
        );
        assert_eq!(
            request(r#"{"jsonrpc":"2.0","id":1,"method":"m","params":[1]}"#).params(),
            Some(&json!([1]))
        );
    }

    #[test]
    fn ids_keep_their_kind() {
        let id = |text: &str| {
            request(&format!(r#"{{"jsonrpc":"2.0","id":{text},"method":"m"}}"#))
                .id()
                .cloned()
        };
        assert_eq!(id("-7"), Some(Id::Number(-7)));
        assert_eq!(id("7.0"), Some(Id::Number(7)));
        assert_eq!(id("\"7\""), Some(Id::String("7".to_owned())));
        assert_eq!(id("null"), Some(Id::Null));
        assert_eq!(request(r#"{"jsonrpc":"2.0","method":"m"}"#).id(), None);
    }

    #[test]
    fn replies_are_read_whatever_they_lack() {
        assert_eq!(
            response(r#"{"jsonrpc":"2.0","id":1,"result":null}"#),
            Response::from_ok(Id::Number(1), Value::Null)
        );
        assert_eq!(
            response(r#"{"id":1,"result":[2]}"#),
            Response::from_ok(Id::Number(1), json!([2]))
        );
        assert_eq!(
            response(r#"{"jsonrpc":"2.0","id":1,"result":5,"error":null}"#).result(),
            Some(&json!(5))
        );
        let failed = response(
            r#"{"jsonrpc":"2.0","id":1,"result":null,"error":{"code":-32601,"message":"no","more":1}}"#,
        );
        assert_eq!(
            failed.error().map(|error| error.code),
            Some(ErrorCode::MethodNotFound)
        );
        assert!(response(r#"{"jsonrpc":"2.0","id":1,"error":"text"}"#).is_error());
        assert_eq!(
            read(&mut br#"{"jsonrpc":"2.0","id":1}"#.to_vec()),
            Message::Bare(Id::Number(1))
        );
    }

    #[test]
    fn invalid_text_is_mended_not_lost() {
        let half = request(r#"{"jsonrpc":"2.0","method":"m","params":["a\ud83d"]}"#);
        assert_eq!(half.params(), Some(&json!(["a\u{fffd}"])));
        let mut body = b"{\"jsonrpc\":\"2.0\",\"method\":\"m\",\"params\":[\"gr\xfcn\"]}".to_vec();
        let Message::Request(latin) = read(&mut body) else {
            panic!("bytes that are not UTF-8 lost the message");
        };
        assert_eq!(latin.params(), Some(&json!(["gr\u{fffd}n"])));
    }
}

//! Methods that let a test make a handler panic. They exist only while the environment variable
//! `SQUEG_SELF_TEST` is `1`.

use serde_json::Value;
use tower_lsp::jsonrpc::Result;
use tower_lsp::{LanguageServer, LspServiceBuilder};

/// Environment variable that turns the methods on.
pub const VARIABLE: &str = "SQUEG_SELF_TEST";

/// Request whose handler panics: at once, or after giving way once with `{"late": true}`.
pub const PANIC_REQUEST: &str = "squeg/selfTestPanic";

/// Notification of the same kind. The library tells the two apart by method name.
pub const PANIC_NOTIFICATION: &str = "squeg/selfTestPanicNotice";

/// Adds the methods if the variable asks for them.
pub fn register<S: LanguageServer>(builder: LspServiceBuilder<S>) -> LspServiceBuilder<S> {
    if std::env::var_os(VARIABLE).is_none_or(|value| value != "1") {
        return builder;
    }
    log::warn!(
        "{VARIABLE} is set: the methods {PANIC_REQUEST} and {PANIC_NOTIFICATION} panic on purpose"
    );
    builder
        .custom_method(PANIC_REQUEST, panicking_request::<S>)
        .custom_method(PANIC_NOTIFICATION, panicking_notification::<S>)
}

async fn panicking_request<S: LanguageServer>(_server: &S, params: Value) -> Result<Value> {
    panic_as_told(&params).await;
    Ok(Value::Null)
}

async fn panicking_notification<S: LanguageServer>(_server: &S, params: Value) {
    panic_as_told(&params).await;
}

async fn panic_as_told(params: &Value) {
    if params.get("late").and_then(Value::as_bool) == Some(true) {
        tokio::task::yield_now().await;
    }
    panic!("self test");
}

//! Says why the library would drop a notification without a word: it does so when the parameters
//! do not fit the method. Only the shapes are checked here; their meaning is the server's.

use serde_json::Value;
use tower_lsp::jsonrpc::Request;
use tower_lsp::lsp_types::notification::{
    Cancel, DidChangeConfiguration, DidChangeTextDocument, DidChangeWatchedFiles,
    DidChangeWorkspaceFolders, DidCloseTextDocument, DidOpenTextDocument, DidSaveTextDocument,
    Notification, WorkDoneProgressCancel,
};

/// Returns the reason why `request`, a notification, would be dropped; `None` when it fits or when
/// its method is not one of the standard ones a server listens to.
pub fn misfit(request: &Request) -> Option<String> {
    let params = request.params();
    match request.method() {
        DidOpenTextDocument::METHOD => misfit_of::<DidOpenTextDocument>(params),
        DidChangeTextDocument::METHOD => misfit_of::<DidChangeTextDocument>(params),
        DidCloseTextDocument::METHOD => misfit_of::<DidCloseTextDocument>(params),
        DidSaveTextDocument::METHOD => misfit_of::<DidSaveTextDocument>(params),
        DidChangeConfiguration::METHOD => misfit_of::<DidChangeConfiguration>(params),
        DidChangeWatchedFiles::METHOD => misfit_of::<DidChangeWatchedFiles>(params),
        DidChangeWorkspaceFolders::METHOD => misfit_of::<DidChangeWorkspaceFolders>(params),
        WorkDoneProgressCancel::METHOD => misfit_of::<WorkDoneProgressCancel>(params),
        Cancel::METHOD => misfit_of::<Cancel>(params),
        _ => None,
    }
}

fn misfit_of<N: Notification>(params: Option<&Value>) -> Option<String> {
    let Some(params) = params else {
        return Some("the parameters are missing".to_owned());
    };
    // Converting from a copy costs one pass over the text; the library's own conversion consumes
    // the value, so there is no way to look at its result.
    serde_json::from_value::<N::Params>(params.clone())
        .err()
        .map(|error| error.to_string())
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    fn notification(method: &'static str, params: Value) -> Request {
        Request::build(method).params(params).finish()
    }

    #[test]
    fn fitting_and_foreign_notifications_pass() {
        let change = json!({"textDocument": {"uri": "untitled:a", "version": 1}, "contentChanges": [{"text": ""}]});
        assert_eq!(
            misfit(&notification("textDocument/didChange", change)),
            None
        );
        assert_eq!(
            misfit(&notification("$/cancelRequest", json!({"id": "a"}))),
            None
        );
        assert_eq!(misfit(&notification("custom/any", json!(1))), None);
    }

    #[test]
    fn misfits_are_named() {
        let uri = json!({"textDocument": {"uri": "no scheme", "version": 1}, "contentChanges": []});
        let reason = misfit(&notification("textDocument/didChange", uri));
        assert!(
            reason
                .as_deref()
                .is_some_and(|text| text.contains("relative URL")),
            "{reason:?}"
        );
        let range = json!({"textDocument": {"uri": "u:a", "version": 1}, "contentChanges": [
            {"range": {"start": {"line": -1, "character": 0}, "end": {"line": 0, "character": 0}}, "text": ""}]});
        assert!(misfit(&notification("textDocument/didChange", range)).is_some());
        assert!(misfit(&Request::build("textDocument/didOpen").finish()).is_some());
    }
}

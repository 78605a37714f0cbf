//! The server's methods: each takes its parameters apart, asks once, and converts the answer.

use super::convert;
use super::documents::{Analysis, Shared};
use super::transport::FRAME_LOST;
use super::worker;
use serde_json::Value;
use squeg_analyzer::host::{FileRole, outline};
use std::sync::Arc;
use std::time::Duration;
use tower_lsp::jsonrpc::Result;
use tower_lsp::lsp_types::{
    DidChangeTextDocumentParams, DidCloseTextDocumentParams, DidOpenTextDocumentParams,
    DocumentSymbolParams, DocumentSymbolResponse, Hover, HoverContents, HoverParams,
    HoverProviderCapability, InitializeParams, InitializeResult, InitializedParams, MarkupContent,
    MarkupKind, MessageType, OneOf, PositionEncodingKind, ServerCapabilities, ServerInfo,
    TextDocumentSyncCapability, TextDocumentSyncKind, Url,
};
use tower_lsp::{Client, LanguageServer, LspServiceBuilder};

/// How long a hover waits for the analysis of the current text.
const PATIENCE: Duration = Duration::from_secs(3);

/// The server.
pub struct Backend {
    client: Client,
    shared: Arc<Shared>,
}

/// Adds the methods of our own.
pub fn extend(builder: LspServiceBuilder<Backend>) -> LspServiceBuilder<Backend> {
    builder.custom_method(FRAME_LOST, Backend::frame_lost)
}

impl Backend {
    /// A server for a client.
    pub fn new(client: Client) -> Self {
        Self {
            client,
            shared: Arc::default(),
        }
    }

    async fn frame_lost(&self, params: Value) {
        let text =
            format!("a message could not be read, the text may differ from the editor's: {params}");
        self.client.log_message(MessageType::WARNING, text).await;
    }

    /// The analysis of the current version of a document, screened if that does not take too long.
    async fn analysis(&self, uri: &Url) -> Option<Analysis> {
        let until = tokio::time::Instant::now() + PATIENCE;
        loop {
            let told = self.shared.done.notified();
            let found = {
                let state = self.shared.lock();
                let document = state.documents.get(uri)?;
                let current = document.version;
                document.analysis.clone().filter(|a| a.version == current)
            };
            if let Some(analysis) = &found
                && analysis.screening.is_some()
            {
                return found;
            }
            if tokio::time::timeout_at(until, told).await.is_err() {
                return found;
            }
        }
    }
}

#[tower_lsp::async_trait]
impl LanguageServer for Backend {
    async fn initialize(&self, params: InitializeParams) -> Result<InitializeResult> {
        let offered = params
            .capabilities
            .general
            .and_then(|general| general.position_encodings)
            .unwrap_or_default();
        let utf8 = offered.contains(&PositionEncodingKind::UTF8);
        let related = params
            .capabilities
            .text_document
            .and_then(|document| document.publish_diagnostics)
            .and_then(|publish| publish.related_information)
            .unwrap_or(false);
        {
            let mut state = self.shared.lock();
            state.utf8 = utf8;
            state.related = related;
        }
        worker::start(self.client.clone(), &self.shared);
        let encoding = if utf8 {
            PositionEncodingKind::UTF8
        } else {
            PositionEncodingKind::UTF16
        };
        Ok(InitializeResult {
            capabilities: ServerCapabilities {
                position_encoding: Some(encoding),
                text_document_sync: Some(TextDocumentSyncCapability::Kind(
                    TextDocumentSyncKind::INCREMENTAL,
                )),
                hover_provider: Some(HoverProviderCapability::Simple(true)),
                document_symbol_provider: Some(OneOf::Left(true)),
                ..ServerCapabilities::default()
            },
            server_info: Some(ServerInfo {
                name: "squeg".to_owned(),
                version: Some(env!("CARGO_PKG_VERSION").to_owned()),
            }),
        })
    }

    async fn initialized(&self, _: InitializedParams) {}

    async fn did_open(&self, params: DidOpenTextDocumentParams) {
        let document = params.text_document;
        self.shared
            .open(document.uri, document.version, &document.text);
    }

    async fn did_change(&self, params: DidChangeTextDocumentParams) {
        let document = params.text_document;
        self.shared
            .change(&document.uri, document.version, &params.content_changes);
    }

    async fn did_close(&self, params: DidCloseTextDocumentParams) {
        let uri = params.text_document.uri;
        self.shared.close(&uri);
        self.client.publish_diagnostics(uri, Vec::new(), None).await;
    }

    async fn hover(&self, params: HoverParams) -> Result<Option<Hover>> {
        let at = params.text_document_position_params;
        let uri = at.text_document.uri;
        let Some(analysis) = self.analysis(&uri).await else {
            return Ok(None);
        };
        let unit = self.shared.lock().unit();
        let host = analysis.prepared.host();
        let text = host.text(analysis.root);
        let Some(lines) = host.lines(analysis.root) else {
            return Ok(None);
        };
        let offset = convert::offset(&text, lines, at.position, unit);
        let screening = analysis.screening.as_deref();
        let found = analysis.prepared.hover(screening, analysis.root, offset);
        Ok(found.map(|hover| Hover {
            contents: HoverContents::Markup(MarkupContent {
                kind: MarkupKind::Markdown,
                value: hover.markdown,
            }),
            range: Some(convert::range(&text, lines, hover.range, unit)),
        }))
    }

    async fn document_symbol(
        &self,
        params: DocumentSymbolParams,
    ) -> Result<Option<DocumentSymbolResponse>> {
        let uri = params.text_document.uri;
        let (text, unit) = {
            let state = self.shared.lock();
            let Some(document) = state.documents.get(&uri) else {
                return Ok(None);
            };
            (document.buffer.text(), state.unit())
        };
        let path = std::path::PathBuf::from(uri.path());
        let role = if crate::walk::is_library_name(&path) {
            FileRole::Included
        } else {
            FileRole::Top
        };
        let found = outline(&text, role);
        let symbols = convert::symbols(&text, unit, &found);
        Ok(Some(DocumentSymbolResponse::Nested(symbols)))
    }

    async fn shutdown(&self) -> Result<()> {
        self.shared.end();
        Ok(())
    }
}

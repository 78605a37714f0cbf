//! Analyses open documents apart from the connection: one thread for the text, one for the
//! screens. The latest version wins; what is under way for an older one is stopped.

use super::convert::{diagnostic, moved};
use super::documents::{Analysis, Shared};
use super::library::{Library, OpenTexts};
use super::publish::{self, Publication};
use crate::panic;
use squeg_analyzer::cancel::Cancel;
use squeg_analyzer::finding::Finding;
use squeg_analyzer::text::{ColumnUnit, Span};
use std::collections::BTreeMap;
use std::sync::Arc;
use std::sync::mpsc::{Receiver, Sender, channel};
use std::thread;
use tower_lsp::Client;
use tower_lsp::lsp_types::Url;

/// A screen to be done.
struct ScreenJob {
    uri: Url,
    analysis: Analysis,
    cancel: Cancel,
}

/// Starts the threads. They end with the session.
pub fn start(client: Client, shared: &Arc<Shared>) {
    let Ok(runtime) = tokio::runtime::Handle::try_current() else {
        log::error!("no runtime: documents cannot be analysed");
        return;
    };
    let (publications, outgoing) = channel();
    let (jobs, screens) = channel();
    let for_publisher = Arc::clone(shared);
    spawn("publisher", move || {
        publish::run(&client, &runtime, &for_publisher, &outgoing);
    });
    let (for_screens, from_screens) = (Arc::clone(shared), publications.clone());
    spawn("screens", move || {
        run_screens(&for_screens, &screens, &from_screens);
    });
    let for_texts = Arc::clone(shared);
    spawn("texts", move || run_texts(&for_texts, &publications, &jobs));
}

fn spawn(name: &str, body: impl FnOnce() + Send + 'static) {
    // The analysis of deep expressions and nested instances stays well within this.
    const STACK_BYTES: usize = 16 << 20;
    let builder = thread::Builder::new().name(name.to_owned());
    if let Err(error) = builder.stack_size(STACK_BYTES).spawn(body) {
        log::error!("no thread for {name}: {error}");
    }
}

fn run_texts(shared: &Arc<Shared>, publications: &Sender<Publication>, jobs: &Sender<ScreenJob>) {
    let mut library = Library::new();
    while let Some(uri) = shared.next_dirty() {
        let done = panic::guard("the analysis of a text", || {
            read_text(shared, &mut library, &uri, publications, jobs);
        });
        if done.is_none() {
            // What the library holds may be half done.
            library = Library::new();
        }
        shared.lock().finished += 1;
        shared.done.notify_waiters();
    }
}

fn read_text(
    shared: &Arc<Shared>,
    library: &mut Library,
    uri: &Url,
    publications: &Sender<Publication>,
    jobs: &Sender<ScreenJob>,
) {
    let (text, version, cancel, open, documents) = {
        let state = shared.lock();
        let Some(document) = state.documents.get(uri) else {
            return;
        };
        let open: OpenTexts = state
            .documents
            .iter()
            .filter_map(|(uri, d)| Some((uri.to_file_path().ok()?, d.buffer.text())))
            .collect();
        let documents: Vec<Url> = state.documents.keys().cloned().collect();
        let text = document.buffer.text();
        (
            text,
            document.version,
            document.cancel.clone(),
            open,
            documents,
        )
    };
    let (root, prepared) = library.prepare(uri, &text, &open);
    let uris: BTreeMap<_, _> = prepared
        .files()
        .into_iter()
        .filter_map(|file| Some((file, library.uri(file, &documents)?)))
        .collect();
    let analysis = Analysis {
        version,
        prepared,
        root,
        uris,
        screening: None,
    };
    let mut findings = analysis.prepared.findings().to_vec();
    let (unit, related) = {
        let mut state = shared.lock();
        let (unit, related) = (state.unit(), state.related);
        let Some(document) = state.documents.get_mut(uri) else {
            return;
        };
        if document.version != version {
            return;
        }
        findings.extend(kept(document, &analysis));
        document.analysis = Some(analysis.clone());
        mark_includers(&mut state, uri, &analysis);
        (unit, related)
    };
    send(publications, uri, &analysis, &findings, unit, related);
    let job = ScreenJob {
        uri: uri.clone(),
        analysis,
        cancel,
    };
    let _ = jobs.send(job);
}

/// Findings of the last screen, moved with the edits since.
fn kept(document: &super::documents::Document, analysis: &Analysis) -> Vec<Finding> {
    document
        .last_screen
        .iter()
        .cloned()
        .map(|mut finding| {
            let shift = |span: &mut Span| {
                if span.file == analysis.root {
                    span.range = moved(span.range, &document.changes);
                }
            };
            shift(&mut finding.span);
            finding.related.iter_mut().for_each(|r| shift(&mut r.span));
            finding
        })
        .collect()
}

/// Documents that include this one see its new text.
fn mark_includers(state: &mut super::documents::State, uri: &Url, analysis: &Analysis) {
    let includers: Vec<Url> = state
        .documents
        .iter()
        .filter(|(other, document)| {
            let includes = document.analysis.as_ref().is_some_and(|a| {
                a.uris.values().any(|u| u == uri) && a.text_of(uri) != analysis.text_of(uri)
            });
            *other != uri && includes
        })
        .map(|(other, _)| other.clone())
        .collect();
    state.dirty.extend(includers);
}

impl Analysis {
    /// The text of one of its files.
    fn text_of(&self, uri: &Url) -> Option<Arc<str>> {
        let (file, _) = self.uris.iter().find(|(_, u)| *u == uri)?;
        Some(self.prepared.host().text(*file))
    }
}

fn run_screens(
    shared: &Arc<Shared>,
    jobs: &Receiver<ScreenJob>,
    publications: &Sender<Publication>,
) {
    while let Ok(job) = jobs.recv() {
        let done = panic::guard("a screen", || screen(shared, &job, publications));
        if done.is_none() {
            log::error!("the screen of {} failed; its last findings stay", job.uri);
        }
        shared.lock().finished += 1;
        shared.done.notify_waiters();
    }
}

fn screen(shared: &Arc<Shared>, job: &ScreenJob, publications: &Sender<Publication>) {
    let Ok(screening) = job.analysis.prepared.screen(&job.cancel) else {
        return;
    };
    let (unit, related) = {
        let mut state = shared.lock();
        let (unit, related) = (state.unit(), state.related);
        let Some(document) = state.documents.get_mut(&job.uri) else {
            return;
        };
        if document.version != job.analysis.version {
            return;
        }
        let of_blocks = screening.findings.iter().filter(|f| f.block.is_some());
        document.last_screen = of_blocks.cloned().collect();
        document.changes.clear();
        if let Some(analysis) = &mut document.analysis {
            analysis.screening = Some(Arc::new(screening.clone()));
        }
        (unit, related)
    };
    let findings = &screening.findings;
    send(
        publications,
        &job.uri,
        &job.analysis,
        findings,
        unit,
        related,
    );
}

fn send(
    publications: &Sender<Publication>,
    uri: &Url,
    analysis: &Analysis,
    findings: &[Finding],
    unit: ColumnUnit,
    related: bool,
) {
    let mut files: BTreeMap<Url, Vec<_>> = BTreeMap::new();
    for finding in findings {
        if let Some((file, diagnostic)) = diagnostic(analysis, finding, unit, related) {
            files.entry(file).or_default().push(diagnostic);
        }
    }
    let _ = publications.send(Publication {
        root: uri.clone(),
        version: Some(analysis.version),
        files,
    });
}

//! Sends diagnostics: those of one netlist may stand in several files, and those of one file may
//! come from several netlists. One thread sends, so that the order is that of the results.

use super::documents::Shared;
use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;
use std::sync::mpsc::Receiver;
use tower_lsp::Client;
use tower_lsp::lsp_types::{Diagnostic, Url};

/// Everything one analysis has to say.
pub struct Publication {
    /// The document that was analysed.
    pub root: Url,
    /// Its version; `None`: it was closed.
    pub version: Option<i32>,
    /// Diagnostics by file.
    pub files: BTreeMap<Url, Vec<Diagnostic>>,
}

/// What is shown now: by file, then by netlist.
#[derive(Default)]
struct Shown {
    by_file: BTreeMap<Url, BTreeMap<Url, Vec<Diagnostic>>>,
}

/// Sends what arrives until the senders are gone.
pub fn run(
    client: &Client,
    runtime: &tokio::runtime::Handle,
    shared: &Arc<Shared>,
    incoming: &Receiver<Publication>,
) {
    let mut shown = Shown::default();
    while let Ok(publication) = incoming.recv() {
        // A result of an old version is of no use any more.
        let current = shared
            .lock()
            .documents
            .get(&publication.root)
            .map(|document| document.version);
        if publication.version.is_some() && publication.version != current {
            continue;
        }
        for uri in shown.take_in(&publication) {
            let version = if uri == publication.root {
                publication.version
            } else {
                let state = shared.lock();
                state.documents.get(&uri).map(|document| document.version)
            };
            let diagnostics = shown.of_file(&uri);
            runtime.block_on(client.publish_diagnostics(uri, diagnostics, version));
        }
    }
}

impl Shown {
    /// Takes a publication in; returns the files that must be sent, the document itself first.
    fn take_in(&mut self, publication: &Publication) -> Vec<Url> {
        let root = &publication.root;
        let mut touched: BTreeSet<Url> = publication.files.keys().cloned().collect();
        for (file, netlists) in &mut self.by_file {
            if netlists.remove(root).is_some() {
                touched.insert(file.clone());
            }
        }
        for (file, diagnostics) in &publication.files {
            if !diagnostics.is_empty() {
                let netlists = self.by_file.entry(file.clone()).or_default();
                netlists.insert(root.clone(), diagnostics.clone());
            }
        }
        touched.remove(root);
        let mut order = vec![root.clone()];
        order.extend(touched);
        order
    }

    /// All diagnostics of a file, each once.
    fn of_file(&self, file: &Url) -> Vec<Diagnostic> {
        let mut all: Vec<Diagnostic> = Vec::new();
        for diagnostic in self
            .by_file
            .get(file)
            .into_iter()
            .flat_map(|n| n.values())
            .flatten()
        {
            let same = |other: &Diagnostic| {
                other.range == diagnostic.range
                    && other.code == diagnostic.code
                    && other.message == diagnostic.message
            };
            if !all.iter().any(same) {
                all.push(diagnostic.clone());
            }
        }
        all
    }
}

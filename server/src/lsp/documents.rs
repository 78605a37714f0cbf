//! The open documents and what is known of them, behind one lock that is never held across an
//! await. Handlers change it before they give way, so that edits apply in their order of arrival.

use squeg_analyzer::cancel::Cancel;
use squeg_analyzer::finding::Finding;
use squeg_analyzer::host::{Prepared, Screening};
use squeg_analyzer::text::{ColumnUnit, FileId, LineColumn, TextBuffer};
use std::collections::{BTreeMap, BTreeSet};
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use tower_lsp::lsp_types::{TextDocumentContentChangeEvent, Url};

/// A change of the text, in bytes.
#[derive(Clone, Copy, Debug)]
pub struct Change {
    /// First byte that changed.
    pub start: usize,
    /// End of what was replaced.
    pub old_end: usize,
    /// Length of what replaces it.
    pub new_len: usize,
}

/// The result of an analysis of one version.
#[derive(Clone)]
pub struct Analysis {
    /// The version of the document.
    pub version: i32,
    /// The netlist.
    pub prepared: Prepared,
    /// The file number of the document itself.
    pub root: FileId,
    /// The URIs of all files that take part.
    pub uris: BTreeMap<FileId, Url>,
    /// The screen, when it is done.
    pub screening: Option<Arc<Screening>>,
}

/// An open document.
pub struct Document {
    /// The text.
    pub buffer: TextBuffer,
    /// The client's number of it.
    pub version: i32,
    /// The latest analysis.
    pub analysis: Option<Analysis>,
    /// Findings of the latest finished screen that are not of the text alone.
    pub last_screen: Vec<Finding>,
    /// Changes of the text since that screen.
    pub changes: Vec<Change>,
    /// Stops the work on the current version.
    pub cancel: Cancel,
}

/// Everything behind the lock.
#[derive(Default)]
pub struct State {
    /// Open documents.
    pub documents: BTreeMap<Url, Document>,
    /// Documents to be analysed.
    pub dirty: BTreeSet<Url>,
    /// The client takes columns in UTF-8.
    pub utf8: bool,
    /// The client takes related information.
    pub related: bool,
    /// Counts finished analyses, for those who wait.
    pub finished: u64,
    /// The session is over.
    pub over: bool,
}

impl State {
    /// What a column counts for this client.
    pub fn unit(&self) -> ColumnUnit {
        if self.utf8 {
            ColumnUnit::Utf8
        } else {
            ColumnUnit::Utf16
        }
    }
}

/// The state, shared by handlers and workers.
#[derive(Default)]
pub struct Shared {
    state: Mutex<State>,
    wake: Condvar,
    /// Told after every analysis.
    pub done: tokio::sync::Notify,
}

impl Shared {
    /// The state. A panic of another holder does not spoil it: it is whole between statements.
    pub fn lock(&self) -> MutexGuard<'_, State> {
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Wakes the worker.
    pub fn wake(&self) {
        self.wake.notify_all();
    }

    /// Waits for a document to be analysed; `None` when the session is over.
    pub fn next_dirty(&self) -> Option<Url> {
        let mut state = self.lock();
        loop {
            if state.over {
                return None;
            }
            if let Some(uri) = state.dirty.pop_first() {
                return Some(uri);
            }
            state = self
                .wake
                .wait(state)
                .unwrap_or_else(PoisonError::into_inner);
        }
    }

    /// Opens a document, or replaces the text of one that is open already.
    pub fn open(&self, uri: Url, version: i32, text: &str) {
        let mut state = self.lock();
        if let Some(old) = state.documents.get(&uri) {
            old.cancel.set();
        }
        let document = Document {
            buffer: TextBuffer::new(text),
            version,
            analysis: None,
            last_screen: Vec::new(),
            changes: Vec::new(),
            cancel: Cancel::new(),
        };
        state.documents.insert(uri.clone(), document);
        state.dirty.insert(uri);
        drop(state);
        self.wake();
    }

    /// Applies changes in their order. Those of a document that is not open are ignored.
    pub fn change(&self, uri: &Url, version: i32, changes: &[TextDocumentContentChangeEvent]) {
        let mut state = self.lock();
        let unit = state.unit();
        let Some(document) = state.documents.get_mut(uri) else {
            log::warn!("a change of a document that is not open: {uri}");
            return;
        };
        for change in changes {
            document.apply(change, unit);
        }
        document.version = version;
        document.cancel.set();
        document.cancel = Cancel::new();
        state.dirty.insert(uri.clone());
        drop(state);
        self.wake();
    }

    /// Closes a document; documents that may include it are analysed anew.
    pub fn close(&self, uri: &Url) {
        let mut state = self.lock();
        if let Some(old) = state.documents.remove(uri) {
            old.cancel.set();
        }
        state.dirty.remove(uri);
        let others: Vec<Url> = state.documents.keys().cloned().collect();
        state.dirty.extend(others);
        drop(state);
        self.wake();
    }

    /// Ends the workers.
    pub fn end(&self) {
        let mut state = self.lock();
        state.over = true;
        for document in state.documents.values() {
            document.cancel.set();
        }
        drop(state);
        self.wake();
    }
}

impl Document {
    fn apply(&mut self, change: &TextDocumentContentChangeEvent, unit: ColumnUnit) {
        let Some(range) = change.range else {
            // A whole text: what is the same at both ends has not changed.
            let old = self.buffer.text();
            self.changes.push(difference(&old, &change.text));
            self.buffer = TextBuffer::new(&change.text);
            return;
        };
        let place = |p: tower_lsp::lsp_types::Position| LineColumn {
            line: p.line,
            column: p.character,
        };
        let (from, to) = (place(range.start), place(range.end));
        // A reversed range means the text between its ends all the same.
        let (from, to) = if from <= to { (from, to) } else { (to, from) };
        match self.buffer.replace(from, to, unit, &change.text) {
            Ok(bytes) => self.changes.push(Change {
                start: bytes.start,
                old_end: bytes.end,
                new_len: change.text.len(),
            }),
            Err(error) => log::warn!("an edit was not applied: {error}"),
        }
    }
}

/// The smallest change that makes `new` of `old`.
fn difference(old: &str, new: &str) -> Change {
    let start = old
        .bytes()
        .zip(new.bytes())
        .take_while(|(a, b)| a == b)
        .count();
    let most = old.len().min(new.len()) - start;
    let end = old
        .bytes()
        .rev()
        .zip(new.bytes().rev())
        .take(most)
        .take_while(|(a, b)| a == b)
        .count();
    Change {
        start,
        old_end: old.len() - end,
        new_len: new.len() - end - start,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_whole_text_is_the_smallest_change() {
        let change = difference("R1 a 0 10\nC1 a 0 1p\n", "R1 a 0 47\nC1 a 0 1p\n");
        assert_eq!((change.start, change.old_end, change.new_len), (7, 9, 2));
        let same = difference("abc", "abc");
        assert_eq!((same.start, same.old_end, same.new_len), (3, 3, 0));
    }

    #[test]
    fn edits_of_unknown_documents_and_odd_ranges_are_harmless() {
        let shared = Shared::default();
        let uri = Url::parse("untitled:one").expect("a URI");
        let edit = |range, text: &str| TextDocumentContentChangeEvent {
            range,
            range_length: None,
            text: text.to_owned(),
        };
        shared.change(&uri, 1, &[edit(None, "x")]);
        shared.open(uri.clone(), 1, "ab\ncd\n");
        let position = tower_lsp::lsp_types::Position::new;
        let reversed = tower_lsp::lsp_types::Range::new(position(9, 9), position(0, 1));
        shared.change(&uri, 2, &[edit(Some(reversed), "!")]);
        let state = shared.lock();
        let text = state.documents.get(&uri).map(|d| d.buffer.text());
        assert_eq!(text.as_deref(), Some("a!"));
    }
}

//! The texts the host knows, parsed, and the answers to their includes.

use super::memo::Memo;
use super::prepared::Prepared;
use crate::config::Config;
use crate::elaborate::{FileStore, Include, IncludeRequest, Program, gather};
use crate::syntax::{FileRole, Parse, parse};
use crate::text::{FileId, LineIndex};
use std::collections::{HashMap, HashSet};
use std::sync::{Arc, OnceLock};
use std::time::Duration;

/// A text as the server read it.
#[derive(Clone, Debug)]
pub struct SourceText {
    /// The text; bytes that are not UTF-8 have become one replacement sign each.
    pub text: Arc<str>,
    /// Offset in `text` of the first byte that was not UTF-8.
    pub not_utf8_at: Option<u32>,
}

impl SourceText {
    /// A text that is sound UTF-8.
    pub fn new(text: impl Into<Arc<str>>) -> Self {
        Self {
            text: text.into(),
            not_utf8_at: None,
        }
    }

    /// Decodes bytes; each byte that is not UTF-8 becomes U+FFFD and its place is kept.
    pub fn from_bytes(bytes: &[u8]) -> Self {
        match std::str::from_utf8(bytes) {
            Ok(text) => Self::new(text),
            Err(error) => Self {
                text: String::from_utf8_lossy(bytes).into(),
                not_utf8_at: Some(error.valid_up_to() as u32),
            },
        }
    }
}

/// One file.
#[derive(Clone, Debug)]
pub(super) struct SourceFile {
    pub(super) source: SourceText,
    pub(super) role: FileRole,
    pub(super) parse: Arc<Parse>,
    lines: Arc<OnceLock<LineIndex>>,
}

/// Texts by number; cheap to clone, so that a worker can keep what it started from.
#[derive(Clone, Debug)]
pub struct Host {
    pub(super) files: Vec<SourceFile>,
    includes: HashMap<(FileId, String), Include>,
    pub(super) now: fn() -> Duration,
    pub(super) memo: Arc<Memo>,
    /// The settings in force.
    pub config: Arc<Config>,
}

impl Host {
    /// An empty host. `now` is a monotonic clock; it only stamps results.
    pub fn new(now: fn() -> Duration) -> Self {
        Self {
            files: Vec::new(),
            includes: HashMap::new(),
            now,
            memo: Arc::default(),
            config: Arc::new(Config::default()),
        }
    }

    /// Adds a file.
    pub fn add_file(&mut self, source: SourceText, role: FileRole) -> FileId {
        let id = FileId(self.files.len() as u32);
        self.files.push(SourceFile::new(source, role));
        id
    }

    /// Gives a file a new text. Nothing happens when the text is the same.
    pub fn set_text(&mut self, file: FileId, source: SourceText) {
        if let Some(slot) = self.files.get_mut(file.0 as usize)
            && slot.source.text != source.text
        {
            *slot = SourceFile::new(source, slot.role);
        }
    }

    /// Says whether a file has a title line. Nothing happens when that is known already.
    pub fn set_role(&mut self, file: FileId, role: FileRole) {
        if let Some(slot) = self.files.get_mut(file.0 as usize)
            && slot.role != role
        {
            *slot = SourceFile::new(slot.source.clone(), role);
        }
    }

    /// Includes reached from `root` that nobody has answered yet, each once, in the order of the
    /// text. Costs far less than [`Host::prepare`], which also flattens and checks.
    pub fn missing_includes(&self, root: FileId) -> Vec<IncludeRequest> {
        let mut missing = self.gather(root).missing;
        let mut seen = HashSet::new();
        missing.retain(|request| seen.insert(request.clone()));
        missing
    }

    /// Answers an include that `prepare` asked for.
    pub fn set_include(&mut self, from: FileId, path: &str, answer: Include) {
        self.includes.insert((from, path.to_owned()), answer);
    }

    /// Forgets all answers to includes, so that they are asked for again.
    pub fn forget_includes(&mut self) {
        self.includes.clear();
    }

    /// A file's text.
    pub fn text(&self, file: FileId) -> Arc<str> {
        self.files
            .get(file.0 as usize)
            .map_or_else(|| Arc::from(""), |f| Arc::clone(&f.source.text))
    }

    /// A file's lines.
    pub fn lines(&self, file: FileId) -> Option<&LineIndex> {
        self.files.get(file.0 as usize).map(SourceFile::lines)
    }

    /// Offset of the first byte of a file that is not UTF-8.
    pub(super) fn not_utf8_at(&self, file: FileId) -> Option<u32> {
        self.files.get(file.0 as usize)?.source.not_utf8_at
    }

    /// Reads a netlist with its includes and checks its text. When the answer asks for includes,
    /// supply them and prepare again.
    pub fn prepare(&self, root: FileId) -> Prepared {
        Prepared::new(self, root, self.gather(root))
    }

    fn gather(&self, root: FileId) -> Program {
        let limits = &self.config.limits;
        gather(self, root, limits.nesting, limits.parts.saturating_mul(4))
    }
}

impl SourceFile {
    fn new(source: SourceText, role: FileRole) -> Self {
        let parse = Arc::new(parse(Arc::clone(&source.text), role));
        Self {
            source,
            role,
            parse,
            lines: Arc::new(OnceLock::new()),
        }
    }

    fn lines(&self) -> &LineIndex {
        self.lines.get_or_init(|| LineIndex::new(&self.source.text))
    }
}

impl FileStore for Host {
    fn file(&self, file: FileId) -> Option<Arc<Parse>> {
        self.files
            .get(file.0 as usize)
            .map(|f| Arc::clone(&f.parse))
    }

    fn include(&self, from: FileId, path: &str) -> Include {
        self.includes
            .get(&(from, path.to_owned()))
            .cloned()
            .unwrap_or(Include::Unknown)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn includes_are_asked_for_once_and_until_answered() {
        let mut host = Host::new(|| Duration::ZERO);
        let text = "title\n.include 'b.inc'\n.include 'a.inc'\n.include 'b.inc'\n";
        let root = host.add_file(SourceText::new(text), FileRole::Top);
        let asked = |host: &Host| -> Vec<String> {
            let missing = host.missing_includes(root).into_iter();
            missing.map(|request| request.path).collect()
        };
        assert_eq!(asked(&host), ["b.inc", "a.inc"]);
        host.set_include(root, "b.inc", Include::Refused("no such file".to_owned()));
        let inner = SourceText::new(".include 'c.inc'\n");
        let inner = host.add_file(inner, FileRole::Included);
        host.set_include(root, "a.inc", Include::File(inner));
        assert_eq!(asked(&host), ["c.inc"]);
    }

    #[test]
    fn the_role_decides_on_the_title() {
        let mut host = Host::new(|| Duration::ZERO);
        let file = host.add_file(SourceText::new("R1 a\n"), FileRole::Top);
        let faults = |host: &Host| host.file(file).map_or(0, |parse| parse.errors.len());
        assert_eq!(faults(&host), 0);
        host.set_role(file, FileRole::Included);
        assert_eq!(faults(&host), 1);
    }
}

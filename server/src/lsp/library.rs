//! The files of the session by number: open documents first, then the disk. Included files are
//! read again when their size or time of change says so.

use crate::io;
use squeg_analyzer::host::{FileRole, Host, Include, Prepared, SourceText};
use squeg_analyzer::text::FileId;
use std::collections::{BTreeMap, HashMap};
use std::path::{Path, PathBuf};
use std::sync::OnceLock;
use std::time::{Duration, Instant, SystemTime};
use tower_lsp::lsp_types::Url;

/// Open texts by path, as they are now.
pub type OpenTexts = HashMap<PathBuf, String>;

/// Texts and numbers.
pub struct Library {
    host: Host,
    roots: BTreeMap<Url, FileId>,
    included: BTreeMap<PathBuf, FileId>,
    paths: HashMap<FileId, PathBuf>,
    stamps: HashMap<FileId, (u64, Option<SystemTime>)>,
}

fn now() -> Duration {
    static START: OnceLock<Instant> = OnceLock::new();
    START.get_or_init(Instant::now).elapsed()
}

impl Library {
    /// Without any text.
    pub fn new() -> Self {
        Self {
            host: Host::new(now),
            roots: BTreeMap::new(),
            included: BTreeMap::new(),
            paths: HashMap::new(),
            stamps: HashMap::new(),
        }
    }

    /// Reads a document with all it includes.
    pub fn prepare(&mut self, uri: &Url, text: &str, open: &OpenTexts) -> (FileId, Prepared) {
        let root = self.root(uri, text);
        self.refresh(open);
        // Files come and go: every answer is asked for again.
        self.host.forget_includes();
        loop {
            let missing = self.host.missing_includes(root);
            if missing.is_empty() {
                return (root, self.host.prepare(root));
            }
            for request in missing {
                let answer = self.answer(request.from, &request.path, open);
                self.host.set_include(request.from, &request.path, answer);
            }
        }
    }

    fn root(&mut self, uri: &Url, text: &str) -> FileId {
        let source = SourceText::new(text);
        if let Some(id) = self.roots.get(uri) {
            self.host.set_text(*id, source);
            return *id;
        }
        let path = uri.to_file_path().ok();
        let name = path.clone().unwrap_or_else(|| PathBuf::from(uri.path()));
        let role = if crate::walk::is_library_name(&name) {
            FileRole::Included
        } else {
            FileRole::Top
        };
        let id = self.host.add_file(source, role);
        self.roots.insert(uri.clone(), id);
        if let Some(path) = path {
            self.paths.insert(id, path);
        }
        id
    }

    /// Brings the included files up to date.
    fn refresh(&mut self, open: &OpenTexts) {
        for (path, id) in &self.included {
            if let Some(text) = open.get(path) {
                self.host.set_text(*id, SourceText::new(text.as_str()));
                self.stamps.remove(id);
                continue;
            }
            let stamp = stamp(path);
            if stamp.is_some() && stamp != self.stamps.get(id).copied() {
                if let Ok(source) = io::read_file(path, self.host.config.limits.file_bytes) {
                    self.host.set_text(*id, source);
                }
                if let Some(stamp) = stamp {
                    self.stamps.insert(*id, stamp);
                }
            }
        }
    }

    fn answer(&mut self, from: FileId, spelling: &str, open: &OpenTexts) -> Include {
        let Some(folder) = self.paths.get(&from).and_then(|path| path.parent()) else {
            let reason = "the document is not on disk, so that nothing beside it can be found";
            return Include::Refused(reason.to_owned());
        };
        let path = io::include_path(folder, spelling);
        let real = io::real_path(&path).unwrap_or_else(|_| path.clone());
        // A netlist that includes itself is told by the numbers being the same.
        let itself = self.paths.get(&from).is_some_and(|own| *own == real);
        if itself {
            return Include::File(from);
        }
        let opened = open.get(&real).or_else(|| open.get(&path));
        if let Some(id) = self.included.get(&real)
            && (opened.is_some() || real.is_file())
        {
            return Include::File(*id);
        }
        let source = match opened {
            Some(text) => Ok(SourceText::new(text.as_str())),
            None => io::read_file(&real, self.host.config.limits.file_bytes),
        };
        match source {
            Ok(source) => {
                let id = self.host.add_file(source, FileRole::Included);
                self.included.insert(real.clone(), id);
                if let Some(stamp) = stamp(&real) {
                    self.stamps.insert(id, stamp);
                }
                self.paths.insert(id, real);
                Include::File(id)
            }
            Err(fault) => Include::Refused(fault.to_string()),
        }
    }

    /// The URI of a file: that of its open document, or one made from its path.
    pub fn uri(&self, file: FileId, documents: &[Url]) -> Option<Url> {
        if let Some((uri, _)) = self.roots.iter().find(|(_, id)| **id == file) {
            return Some(uri.clone());
        }
        let path = self.paths.get(&file)?;
        let same = |uri: &&Url| uri.to_file_path().is_ok_and(|p| p == *path);
        documents
            .iter()
            .find(same)
            .cloned()
            .or_else(|| Url::from_file_path(path).ok())
    }
}

fn stamp(path: &Path) -> Option<(u64, Option<SystemTime>)> {
    let metadata = std::fs::metadata(path).ok()?;
    Some((metadata.len(), metadata.modified().ok()))
}

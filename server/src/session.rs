//! Netlists of one run with everything they include: which real file bears which number, under
//! which name it is shown, and whether it has a title line. Knows no command and no format.

use crate::io::{self, ReadFault};
use crate::walk::is_library_name;
use squeg_analyzer::host::{FileRole, Host, Include, IncludeRequest, SourceText};
use squeg_analyzer::text::FileId;
use std::collections::{BTreeMap, BTreeSet, HashMap};
use std::path::{Path, PathBuf};
use std::sync::OnceLock;
use std::time::{Duration, Instant};

/// The texts of a run.
#[derive(Debug)]
pub struct Session {
    host: Host,
    /// Paths as given or as formed from the including file's folder, by file number.
    paths: Vec<PathBuf>,
    /// What is shown of them, by file number.
    names: Vec<String>,
    by_real_path: HashMap<PathBuf, FileId>,
    roots: Vec<FileId>,
    /// File to the files it includes.
    includes: BTreeMap<FileId, BTreeSet<FileId>>,
}

/// Time since the first call; stamps results.
fn now() -> Duration {
    static START: OnceLock<Instant> = OnceLock::new();
    START.get_or_init(Instant::now).elapsed()
}

impl Session {
    /// Without any text.
    pub fn new() -> Self {
        Self {
            host: Host::new(now),
            paths: Vec::new(),
            names: Vec::new(),
            by_real_path: HashMap::new(),
            roots: Vec::new(),
            includes: BTreeMap::new(),
        }
    }

    /// The texts.
    pub fn host(&self) -> &Host {
        &self.host
    }

    /// Names to show, by file number.
    pub fn names(&self) -> &[String] {
        &self.names
    }

    /// The name to show of a file.
    pub fn name(&self, file: FileId) -> &str {
        self.names.get(file.0 as usize).map_or("", String::as_str)
    }

    /// Reads a file to be checked. A file that is known already stays as it is.
    ///
    /// # Errors
    /// See [`ReadFault`].
    pub fn add_root(&mut self, path: &Path) -> Result<FileId, ReadFault> {
        let real = io::real_path(path)?;
        if let Some(&known) = self.by_real_path.get(&real) {
            return Ok(known);
        }
        let source = io::read_file(path, self.limit())?;
        let id = self.add(path, shown(path), source, role_by_name(path));
        self.by_real_path.insert(real, id);
        self.roots.push(id);
        Ok(id)
    }

    /// Takes a text to be checked in place of the file `path`, which need not exist. Call it
    /// before that file is read.
    pub fn add_root_text(&mut self, path: &Path, source: SourceText) -> FileId {
        let id = self.add(path, shown(path), source, role_by_name(path));
        if let Ok(real) = io::real_path(path) {
            self.by_real_path.insert(real, id);
        }
        self.roots.push(id);
        id
    }

    /// A file of which only the name is known, for findings about it.
    pub fn add_unread(&mut self, path: &Path) -> FileId {
        self.add(path, shown(path), SourceText::new(""), FileRole::Included)
    }

    fn add(&mut self, path: &Path, name: String, source: SourceText, role: FileRole) -> FileId {
        let id = self.host.add_file(source, role);
        self.paths.push(path.to_path_buf());
        self.names.push(name);
        id
    }

    fn limit(&self) -> usize {
        self.host.config.limits.file_bytes
    }

    /// All files to be checked, in the order in which they were added.
    pub fn roots(&self) -> &[FileId] {
        &self.roots
    }

    /// Reads everything that `root` includes, directly and through others.
    pub fn load_includes(&mut self, root: FileId) {
        loop {
            let missing = self.host.missing_includes(root);
            if missing.is_empty() {
                return;
            }
            for request in missing {
                let answer = self.resolve(&request);
                if let Include::File(target) = answer {
                    self.includes
                        .entry(request.from)
                        .or_default()
                        .insert(target);
                }
                self.host.set_include(request.from, &request.path, answer);
            }
        }
    }

    fn resolve(&mut self, request: &IncludeRequest) -> Include {
        let from = self.paths.get(request.from.0 as usize);
        let folder = from.and_then(|path| path.parent()).unwrap_or(Path::new(""));
        let path = io::include_path(folder, &request.path);
        match self.included(&path) {
            Ok(id) => Include::File(id),
            Err(fault) => Include::Refused(fault.to_string()),
        }
    }

    fn included(&mut self, path: &Path) -> Result<FileId, ReadFault> {
        let real = io::real_path(path)?;
        if let Some(&known) = self.by_real_path.get(&real) {
            return Ok(known);
        }
        let source = io::read_file(path, self.limit())?;
        let name = shown(&io::shortened(path, &real));
        let id = self.add(path, name, source, FileRole::Included);
        self.by_real_path.insert(real, id);
        Ok(id)
    }

    /// Settles which files have no title line: call it when all includes are read. Returns the
    /// roots to be checked on their own. What another root includes is checked where it stands:
    /// alone, a part of a netlist only lacks what surrounds it.
    pub fn settle_roles(&mut self) -> Vec<FileId> {
        let mut alone = Vec::new();
        for &root in &self.roots {
            if self.is_part_of_another(root) {
                self.host.set_role(root, FileRole::Included);
            } else {
                alone.push(root);
            }
        }
        alone
    }

    /// Whether a file that does not itself hang on `file` includes it. Files that include each
    /// other in a ring are not parts of one another, so that none of the ring is lost.
    fn is_part_of_another(&self, file: FileId) -> bool {
        let below = self.reach(file);
        self.includes
            .iter()
            .any(|(from, targets)| targets.contains(&file) && !below.contains(from))
    }

    /// `file` and all that it includes, directly and through others.
    fn reach(&self, file: FileId) -> BTreeSet<FileId> {
        let mut seen = BTreeSet::from([file]);
        let mut open = vec![file];
        while let Some(next) = open.pop() {
            for &target in self.includes.get(&next).into_iter().flatten() {
                if seen.insert(target) {
                    open.push(target);
                }
            }
        }
        seen
    }
}

fn shown(path: &Path) -> String {
    path.display().to_string()
}

fn role_by_name(path: &Path) -> FileRole {
    if is_library_name(path) {
        FileRole::Included
    } else {
        FileRole::Top
    }
}

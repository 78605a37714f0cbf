//! Loads a netlist with its includes from disk, for tests.

use squeg_analyzer::cancel::Cancel;
use squeg_analyzer::finding::{Finding, Severity};
use squeg_analyzer::host::{BlockReport, FileRole, Host, Include, Prepared, Screening, SourceText};
use squeg_analyzer::text::{ColumnUnit, FileId};
use std::collections::HashMap;
use std::path::{Path, PathBuf};
use std::time::Duration;

/// A netlist, screened.
pub struct Loaded {
    pub prepared: Prepared,
    pub screening: Screening,
    pub paths: HashMap<FileId, PathBuf>,
}

impl Loaded {
    /// Loads and screens a file.
    pub fn new(path: &Path) -> Self {
        let mut host = Host::new(|| Duration::ZERO);
        let bytes = std::fs::read(path).expect("the netlist can be read");
        let root = host.add_file(SourceText::from_bytes(&bytes), FileRole::Top);
        let mut paths = HashMap::from([(root, path.to_owned())]);
        let prepared = loop {
            let prepared = host.prepare(root);
            if prepared.missing().is_empty() {
                break prepared;
            }
            for request in prepared.missing() {
                let folder = paths[&request.from].parent().expect("a file has a folder");
                let target = folder.join(&request.path);
                let known = paths.iter().find(|(_, p)| **p == target).map(|(id, _)| *id);
                let answer = match (known, std::fs::read(&target)) {
                    (Some(id), _) => Include::File(id),
                    (None, Ok(bytes)) => {
                        let source = SourceText::from_bytes(&bytes);
                        let id = host.add_file(source, FileRole::Included);
                        paths.insert(id, target);
                        Include::File(id)
                    }
                    (None, Err(error)) => Include::Refused(error.to_string()),
                };
                host.set_include(request.from, &request.path, answer);
            }
        };
        let screening = prepared.screen(&Cancel::new()).expect("nothing cancels it");
        Self {
            prepared,
            screening,
            paths,
        }
    }

    /// Screens a text that includes nothing.
    pub fn text(text: &str) -> Self {
        let mut host = Host::new(|| Duration::ZERO);
        let root = host.add_file(SourceText::new(text), FileRole::Top);
        let prepared = host.prepare(root);
        let screening = prepared.screen(&Cancel::new()).expect("nothing cancels it");
        Self {
            prepared,
            screening,
            paths: HashMap::new(),
        }
    }

    /// One-based line of a finding.
    pub fn line(&self, finding: &Finding) -> u32 {
        let text = self.prepared.host().text(finding.span.file);
        let lines = self.prepared.host().lines(finding.span.file);
        let start = finding.span.range.start;
        lines.map_or(0, |l| {
            l.line_column(&text, start, ColumnUnit::Scalar).line + 1
        })
    }

    /// A block by name.
    pub fn block(&self, name: &str) -> &BlockReport {
        let found = self.screening.blocks.iter().find(|b| b.name == name);
        found.unwrap_or_else(|| panic!("no block {name}"))
    }

    /// Warnings and errors.
    pub fn serious(&self) -> Vec<&Finding> {
        let all = self.screening.findings.iter();
        all.filter(|f| f.severity != Severity::Info).collect()
    }
}

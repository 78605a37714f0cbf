//! A netlist ready to be screened: everything that needs no numerics is done, and the rest can
//! run on another thread.

use super::report::BlockReport;
use super::source::Host;
use crate::cancel::{Cancel, Cancelled};
use crate::elaborate::{Elaborated, IncludeRequest, Limits, Program, elaborate_blocks};
use crate::finding::Finding;
use crate::text::FileId;
use std::sync::Arc;

/// A netlist with its includes, elaborated. Cheap to clone.
#[derive(Clone, Debug)]
pub struct Prepared {
    pub(super) host: Arc<Host>,
    pub(super) root: FileId,
    pub(super) program: Arc<Program>,
    pub(super) elaborated: Arc<Elaborated>,
    findings: Arc<Vec<Finding>>,
}

/// The result of a screen.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Screening {
    /// All findings, those of the text included, by file, place and rule.
    pub findings: Vec<Finding>,
    /// All blocks, by file and place.
    pub blocks: Vec<BlockReport>,
}

impl Prepared {
    pub(super) fn new(host: &Host, root: FileId, program: Program) -> Self {
        let limits = Limits {
            parts: host.config.limits.parts,
            nesting: host.config.limits.nesting,
        };
        let elaborated = elaborate_blocks(&program, limits);
        Self {
            host: Arc::new(host.clone()),
            root,
            program: Arc::new(program),
            elaborated: Arc::new(elaborated),
            findings: Arc::new(Vec::new()),
        }
    }

    /// The file it was read from.
    pub fn root(&self) -> FileId {
        self.root
    }

    /// Includes that nobody has answered yet. While there are any, findings and blocks are
    /// provisional.
    pub fn missing(&self) -> &[IncludeRequest] {
        &self.program.missing
    }

    /// All files that take part.
    pub fn files(&self) -> Vec<FileId> {
        self.program.files.keys().copied().collect()
    }

    /// The text of a file as it was when this was prepared, and its lines.
    pub fn host(&self) -> &Host {
        &self.host
    }

    /// Findings of the text, by file, place and rule.
    pub fn findings(&self) -> &[Finding] {
        &self.findings
    }

    /// Whether any block is marked.
    pub fn has_blocks(&self) -> bool {
        !self.elaborated.blocks.is_empty()
    }

    /// Screens all blocks.
    ///
    /// # Errors
    /// [`Cancelled`] when the flag was set before the end.
    pub fn screen(&self, cancel: &Cancel) -> Result<Screening, Cancelled> {
        cancel.check()?;
        Ok(Screening {
            findings: self.findings.to_vec(),
            blocks: Vec::new(),
        })
    }
}

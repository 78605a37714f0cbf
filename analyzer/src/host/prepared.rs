//! A netlist ready to be screened: everything that needs no numerics is done, and the rest can
//! run on another thread.

use super::accepted::{accept, unused};
use super::fingerprint::fingerprint;
use super::report::BlockReport;
use super::source::Host;
use crate::circuit::Circuit;
use crate::elaborate::{Elaborated, IncludeRequest, Limits, Program, elaborate_blocks};
use crate::finding::Finding;
use crate::rules::{TextContext, text_findings};
use crate::text::FileId;
use std::sync::Arc;

/// A netlist with its includes, elaborated. Cheap to clone.
#[derive(Clone, Debug)]
pub struct Prepared {
    pub(super) host: Arc<Host>,
    pub(super) root: FileId,
    pub(super) program: Arc<Program>,
    pub(super) elaborated: Arc<Elaborated>,
    raw: Arc<Vec<Finding>>,
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
        let mut prepared = Self {
            host: Arc::new(host.clone()),
            root,
            program: Arc::new(program),
            elaborated: Arc::new(elaborated),
            raw: Arc::default(),
            findings: Arc::default(),
        };
        let not_utf8: Vec<(FileId, u32)> = prepared
            .program
            .files
            .keys()
            .filter_map(|file| Some((*file, host.not_utf8_at(*file)?)))
            .collect();
        let raw = text_findings(&prepared.text_context(&not_utf8));
        let mut findings = raw.clone();
        prepared.raw = Arc::new(raw);
        finish(&prepared, &mut findings, !prepared.has_blocks());
        prepared.findings = Arc::new(findings);
        prepared
    }

    pub(super) fn text_context<'a>(&'a self, not_utf8: &'a [(FileId, u32)]) -> TextContext<'a> {
        TextContext {
            program: &self.program,
            elaborated: &self.elaborated,
            config: &self.host.config,
            not_utf8,
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

    /// Findings of the text before any was accepted.
    pub(super) fn raw_findings(&self) -> &[Finding] {
        &self.raw
    }

    /// The flat circuits of the blocks, in the order of the text.
    pub fn circuits(&self) -> impl Iterator<Item = &Circuit> {
        self.elaborated.blocks.iter().map(|block| &block.circuit)
    }

    /// Whether any block is marked.
    pub fn has_blocks(&self) -> bool {
        !self.elaborated.blocks.is_empty()
    }
}

/// Takes accepted findings out, adds fingerprints, and sorts by file, place and rule; what is
/// told twice is told once. `complete`: no more findings will come, so that `quiet` marks that
/// match nothing can be told.
pub(super) fn finish(prepared: &Prepared, findings: &mut Vec<Finding>, complete: bool) {
    let used = accept(prepared, findings);
    if complete {
        findings.extend(unused(prepared, &used));
    }
    findings.sort_by(|a, b| {
        let key = |f: &Finding| (f.span.file, f.span.range, f.rule);
        key(a)
            .cmp(&key(b))
            .then_with(|| a.block.cmp(&b.block))
            .then_with(|| a.message.cmp(&b.message))
    });
    findings.dedup_by(|a, b| {
        a.span == b.span && a.rule == b.rule && a.block == b.block && a.message == b.message
    });
    for finding in findings {
        finding.fingerprint = fingerprint(&prepared.program, finding);
    }
}

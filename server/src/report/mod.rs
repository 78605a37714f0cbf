//! Renderers: pure functions from findings and block reports to text and JSON, one format a
//! file. They open nothing and write nowhere.

mod evidence;
mod excerpt;
mod json;
mod places;
mod style;
mod text;
mod words;

#[cfg(test)]
mod samples;

pub use json::LintDocument;
pub use places::Places;
pub use style::Paint;
pub use text::{BlockDetail, TextOptions, render_text};

use squeg_analyzer::finding::Finding;
use squeg_analyzer::host::BlockReport;

/// What a run found, in the order in which it is told.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct LintResult {
    /// By file, line, column and rule.
    pub findings: Vec<Finding>,
    /// By file and line.
    pub blocks: Vec<BlockReport>,
}

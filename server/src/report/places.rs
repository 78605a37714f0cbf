//! Spans as people and scripts read them: file name, one-based line, one-based column in
//! Unicode scalar values.

use squeg_analyzer::host::Host;
use squeg_analyzer::text::{ColumnUnit, FileId, LineIndex, Span};
use std::sync::Arc;

/// Names and lines of all files of a run.
#[derive(Clone, Copy, Debug)]
pub struct Places<'a> {
    host: &'a Host,
    names: &'a [String],
}

/// A one-based line and column.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Point {
    /// One-based.
    pub line: u32,
    /// One-based, in Unicode scalar values.
    pub column: u32,
}

/// A span to be shown. The end is exclusive.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Place<'a> {
    /// Name of the file.
    pub file: &'a str,
    /// First character.
    pub start: Point,
    /// One past the last character.
    pub end: Point,
}

impl<'a> Places<'a> {
    /// `names` are in the order of the host's files.
    pub fn new(host: &'a Host, names: &'a [String]) -> Self {
        Self { host, names }
    }

    /// The name of a file.
    pub fn name(&self, file: FileId) -> &'a str {
        self.names.get(file.0 as usize).map_or("", String::as_str)
    }

    /// Where a span is.
    pub fn place(&self, span: Span) -> Place<'a> {
        let text = self.host.text(span.file);
        let lines = self.host.lines(span.file);
        Place {
            file: self.name(span.file),
            start: point(lines, &text, span.range.start),
            end: point(lines, &text, span.range.end),
        }
    }

    /// The line in which a span begins, without its line break.
    pub fn first_line(&self, span: Span) -> String {
        let text: Arc<str> = self.host.text(span.file);
        let Some(lines) = self.host.lines(span.file) else {
            return String::new();
        };
        let line = lines.line_of(span.range.start);
        let range = lines.line_start(line) as usize..lines.line_end(line, &text) as usize;
        text.get(range).unwrap_or_default().to_owned()
    }
}

fn point(lines: Option<&LineIndex>, text: &str, offset: u32) -> Point {
    lines.map_or(Point { line: 1, column: 1 }, |lines| {
        let at = lines.line_column(text, offset, ColumnUnit::Scalar);
        Point {
            line: at.line + 1,
            column: at.column + 1,
        }
    })
}

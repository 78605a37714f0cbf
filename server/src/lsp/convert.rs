//! Analyzer values to protocol values. The only place, with `documents`, that knows columns.

use super::documents::{Analysis, Change};
use squeg_analyzer::finding::{Finding, Severity};
use squeg_analyzer::host::{Symbol, SymbolKind};
use squeg_analyzer::text::{ColumnUnit, LineColumn, LineIndex, TextRange};
use tower_lsp::lsp_types::{
    self as lsp, Diagnostic, DiagnosticRelatedInformation, DiagnosticSeverity, DocumentSymbol,
    Location, NumberOrString, Position, Url,
};

/// A byte range as lines and columns.
pub fn range(text: &str, lines: &LineIndex, range: TextRange, unit: ColumnUnit) -> lsp::Range {
    let place = |offset| {
        let at = lines.line_column(text, offset, unit);
        Position::new(at.line, at.column)
    };
    lsp::Range::new(place(range.start), place(range.end))
}

/// A place as a byte offset.
pub fn offset(text: &str, lines: &LineIndex, at: Position, unit: ColumnUnit) -> u32 {
    let place = LineColumn {
        line: at.line,
        column: at.character,
    };
    lines.offset(text, place, unit)
}

/// A finding as a diagnostic of the file it stands in; `None` when that file has no URI.
pub fn diagnostic(
    analysis: &Analysis,
    finding: &Finding,
    unit: ColumnUnit,
    related: bool,
) -> Option<(Url, Diagnostic)> {
    let uri = analysis.uris.get(&finding.span.file)?.clone();
    let severity = match finding.severity {
        Severity::Error => DiagnosticSeverity::ERROR,
        Severity::Warning => DiagnosticSeverity::WARNING,
        Severity::Info => DiagnosticSeverity::INFORMATION,
    };
    let place = |span: squeg_analyzer::text::Span| {
        let host = analysis.prepared.host();
        let lines = host.lines(span.file)?;
        Some(range(&host.text(span.file), lines, span.range, unit))
    };
    let information: Vec<DiagnosticRelatedInformation> = finding
        .related
        .iter()
        .filter_map(|other| {
            Some(DiagnosticRelatedInformation {
                location: Location::new(
                    analysis.uris.get(&other.span.file)?.clone(),
                    place(other.span)?,
                ),
                message: other.message.clone(),
            })
        })
        .collect();
    let diagnostic = Diagnostic {
        range: place(finding.span)?,
        severity: Some(severity),
        code: Some(NumberOrString::String(finding.rule.as_str().to_owned())),
        source: Some("squeg".to_owned()),
        message: finding.message.clone(),
        related_information: (related && !information.is_empty()).then_some(information),
        ..Diagnostic::default()
    };
    Some((uri, diagnostic))
}

/// A range moved by later changes; what was edited inside shrinks or grows with the edit.
pub fn moved(mut range: TextRange, changes: &[Change]) -> TextRange {
    for change in changes {
        let shift = |offset: u32, is_end: bool| {
            let at = offset as usize;
            if at >= change.old_end && (at > change.start || !is_end) {
                (at - change.old_end + change.start + change.new_len) as u32
            } else if at > change.start {
                let inside = if is_end { change.new_len } else { 0 };
                (change.start + inside) as u32
            } else {
                offset
            }
        };
        range = TextRange::new(shift(range.start, false), shift(range.end, true));
    }
    range
}

/// An outline as document symbols.
pub fn symbols(text: &str, unit: ColumnUnit, found: &[Symbol]) -> Vec<DocumentSymbol> {
    let lines = LineIndex::new(text);
    let convert = |symbol: &Symbol| convert_symbol(text, &lines, unit, symbol);
    found.iter().map(convert).collect()
}

fn convert_symbol(
    text: &str,
    lines: &LineIndex,
    unit: ColumnUnit,
    symbol: &Symbol,
) -> DocumentSymbol {
    let kind = match symbol.kind {
        SymbolKind::Subcircuit => lsp::SymbolKind::CLASS,
        SymbolKind::Block => lsp::SymbolKind::EVENT,
        SymbolKind::Part => lsp::SymbolKind::FIELD,
        SymbolKind::Model => lsp::SymbolKind::STRUCT,
        SymbolKind::Parameter => lsp::SymbolKind::CONSTANT,
    };
    let children: Vec<DocumentSymbol> = symbol
        .children
        .iter()
        .map(|child| convert_symbol(text, lines, unit, child))
        .collect();
    #[allow(deprecated)] // the field must be named; it is not used
    DocumentSymbol {
        name: symbol.name.clone(),
        detail: None,
        kind,
        tags: None,
        deprecated: None,
        range: range(text, lines, symbol.range, unit),
        selection_range: range(text, lines, symbol.name_range, unit),
        children: (!children.is_empty()).then_some(children),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ranges_move_with_edits() {
        let edit = |start, old_end, new_len| Change {
            start,
            old_end,
            new_len,
        };
        let at = TextRange::new(10, 12);
        assert_eq!(moved(at, &[edit(0, 0, 5)]), TextRange::new(15, 17));
        assert_eq!(moved(at, &[edit(20, 25, 0)]), at);
        assert_eq!(moved(at, &[edit(2, 4, 0)]), TextRange::new(8, 10));
        assert_eq!(moved(at, &[edit(10, 12, 4)]), TextRange::new(10, 14));
        assert_eq!(moved(at, &[edit(12, 12, 3)]), at);
    }
}

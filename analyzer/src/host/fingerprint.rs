//! A number that names a finding across edits: it survives moves of lines and changes elsewhere.

use crate::elaborate::Program;
use crate::finding::Finding;
use crate::syntax::Statement;
use crate::text::Span;

/// Hash of rule, block, node and the card's own text with its blanks folded (FNV-1a: G. Fowler,
/// L. C. Noll, K.-P. Vo, 1991, from memory).
pub(super) fn fingerprint(program: &Program, finding: &Finding) -> u64 {
    let mut hash = Fnv::new();
    hash.add(finding.rule.as_str());
    hash.add(finding.block.as_deref().unwrap_or(""));
    hash.add(finding.node.as_deref().unwrap_or(""));
    let card = statement_at(program, finding.span).map_or("", |statement| {
        program.text(finding.span.file, statement.range)
    });
    for word in card.split_whitespace() {
        hash.add(&word.to_ascii_lowercase());
    }
    hash.0
}

/// The statement that holds a place.
pub(super) fn statement_at(program: &Program, span: Span) -> Option<&Statement> {
    let parse = program.file(span.file)?;
    let index = parse
        .statements
        .partition_point(|s| s.range.start <= span.range.start);
    parse.statements.get(index.checked_sub(1)?)
}

struct Fnv(u64);

impl Fnv {
    fn new() -> Self {
        Self(0xcbf2_9ce4_8422_2325)
    }

    fn add(&mut self, text: &str) {
        for byte in text.bytes().chain([0]) {
            self.0 = (self.0 ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01b3);
        }
    }
}

//! The flat circuits that rules of wiring and values look at: the blocks, and the top level
//! where no block stands for it.

use super::context::TextContext;
use super::words::{item_words, unread_words};
use crate::circuit::{Circuit, NodeId, NodeRef, Part, PartId, PartKind};
use crate::elaborate::{
    BlockCircuit, Gap, IssueKind, LimitKey, Origin, ScopeId, SourceMap, TerminationFault,
};
use crate::finding::Finding;
use crate::syntax::StatementKind;
use crate::text::Span;
use std::collections::HashSet;

/// A flat circuit, the way back to its text, and what is known to be missing from it.
pub(super) struct View<'a> {
    /// The circuit.
    pub(super) circuit: &'a Circuit,
    /// The way back.
    pub(super) map: &'a SourceMap,
    /// The block, unless it is the bare top level.
    block: Option<&'a BlockCircuit>,
    /// Words, in lower case, of cards that are missing from the circuit.
    lost: HashSet<String>,
}

/// All circuits: the top level when it has cards and no block stands for it, then the blocks.
pub(super) fn views<'a>(context: &'a TextContext<'_>) -> Vec<View<'a>> {
    let elaborated = context.elaborated;
    let marked = elaborated.blocks.iter().any(|b| b.scope == ScopeId(0));
    let mut views = Vec::new();
    let top = &elaborated.top;
    if !marked && !top.circuit.parts.is_empty() {
        views.push(View {
            circuit: &top.circuit,
            map: &top.map,
            block: None,
            lost: lost_words(context, &top.gaps, &top.circuit, &top.map),
        });
    }
    for block in &elaborated.blocks {
        views.push(View {
            circuit: &block.circuit,
            map: &block.map,
            block: Some(block),
            lost: lost_words(context, &block.gaps, &block.circuit, &block.map),
        });
    }
    views
}

/// All circuits, or none when the limit of parts cut one off: what is connected to what is then
/// not known.
pub(super) fn whole_views<'a>(context: &'a TextContext<'_>) -> Vec<View<'a>> {
    let cut = |kind: &IssueKind| {
        let key = LimitKey::Parts;
        matches!(kind, IssueKind::LimitReached { key: found, .. } if *found == key)
    };
    if context.elaborated.issues.iter().any(|i| cut(&i.kind)) {
        return Vec::new();
    }
    views(context)
}

impl View<'_> {
    /// Whether one of the nodes could be connected by a card that is missing from the circuit, or
    /// is a pin of which is not said how it is terminated: both are told at their own place.
    pub(super) fn is_doubtful(&self, nodes: &[NodeId]) -> bool {
        nodes.iter().any(|node| {
            let name = self.node_name(*node).to_ascii_lowercase();
            let lost = !self.lost.is_empty() && name.split('.').any(|s| self.lost.contains(s));
            lost || self.is_open_pin(&name)
        })
    }

    fn is_open_pin(&self, name: &str) -> bool {
        let faults = self.block.map_or(&[][..], |block| &block.terminations);
        faults.iter().any(|fault| match fault {
            TerminationFault::PinUnassigned { pin, .. } => pin.eq_ignore_ascii_case(name),
            _ => false,
        })
    }

    /// A node's full name.
    pub(super) fn node_name(&self, node: NodeId) -> &str {
        self.circuit.node_name(NodeRef::Node(node))
    }

    /// A part's full name.
    pub(super) fn part_name(&self, part: PartId) -> &str {
        self.circuit.part(part).map_or("?", |part| &part.name)
    }

    /// The place of a part's name.
    pub(super) fn part_span(&self, part: PartId) -> Option<Span> {
        self.map.part(part).map(Origin::span)
    }

    /// The place of a part's value; `None` when it has none.
    pub(super) fn value_span(&self, part: PartId) -> Option<Span> {
        let origin = self.map.part(part)?;
        (!origin.value.is_empty()).then(|| Span::new(origin.file, origin.value))
    }

    /// Says in which block a finding was made.
    pub(super) fn place(&self, mut finding: Finding) -> Finding {
        finding.block = self.block.map(|block| block.name.clone());
        finding
    }
}

/// The words of the cards behind gaps. A part that is read but not computed is a gap too, but it
/// stands in the circuit with its nodes.
fn lost_words(
    context: &TextContext<'_>,
    gaps: &[Gap],
    circuit: &Circuit,
    map: &SourceMap,
) -> HashSet<String> {
    if gaps.is_empty() {
        return HashSet::new();
    }
    let not_computed = |part: &Part| matches!(part.kind, PartKind::NotComputed { .. });
    let standing: HashSet<Span> = circuit
        .numbered_parts()
        .filter(|(_, part)| not_computed(part))
        .filter_map(|(id, _)| Some(map.part(id)?.span()))
        .collect();
    let mut words = unread_words(context.program);
    for gap in gaps {
        if standing.contains(&gap.span) {
            continue;
        }
        let Some(parse) = context.program.file(gap.span.file) else {
            continue;
        };
        let start = gap.span.range.start;
        let after = parse.statements.partition_point(|s| s.range.start <= start);
        let Some(statement) = after.checked_sub(1).and_then(|i| parse.statements.get(i)) else {
            continue;
        };
        let here = statement.range.touches(start);
        if here && matches!(statement.kind, StatementKind::Card(_)) {
            words.extend(item_words(parse, statement.item as usize));
        }
    }
    words
}

/// `` `a`, `b` and 3 more ``: at most `most` of the names.
pub(super) fn name_list<'n>(names: impl IntoIterator<Item = &'n str>, most: usize) -> String {
    let names: Vec<String> = names.into_iter().map(|n| format!("`{n}`")).collect();
    let rest = names.len().saturating_sub(most);
    let shown = names.get(..names.len() - rest).unwrap_or_default();
    match (rest, shown) {
        (0, [first @ .., last]) if !first.is_empty() => {
            format!("{} and {last}", first.join(", "))
        }
        (0, _) => shown.join(", "),
        _ => format!("{} and {rest} more", shown.join(", ")),
    }
}

#[cfg(test)]
mod tests {
    use super::name_list;

    #[test]
    fn lists_of_names() {
        assert_eq!(name_list(["a"], 6), "`a`");
        assert_eq!(name_list(["a", "b"], 6), "`a` and `b`");
        assert_eq!(name_list(["a", "b", "c"], 6), "`a`, `b` and `c`");
        assert_eq!(name_list(["a", "b", "c", "d"], 2), "`a`, `b` and 2 more");
    }
}

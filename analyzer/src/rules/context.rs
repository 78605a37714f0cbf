//! What a rule may look at, read-only, and the helpers that rules share.

use super::spans::SpanMap;
use crate::circuit::{Circuit, NodeId, NodeRef, PartId};
use crate::config::Config;
use crate::elaborate::{
    BlockCircuit, CardRef, Elaborated, Issue, IssueKind, Origin, Program, ScopeId, SourceMap,
};
use crate::finding::{Finding, Severity};
use crate::rules::Rule;
use crate::stability::{Screen, Verdict};
use crate::syntax::{Card, Mark, StatementKind};
use crate::text::{FileId, Span};

/// Facts of the text and of the elaborated netlist.
pub struct TextContext<'a> {
    /// Statements by scope.
    pub program: &'a Program,
    /// Flat top level, blocks, and faults of meaning.
    pub elaborated: &'a Elaborated,
    /// Settings.
    pub config: &'a Config,
    /// Files with bytes that are not UTF-8, and where the first one stands.
    pub not_utf8: &'a [(FileId, u32)],
}

impl TextContext<'_> {
    /// The text under a span.
    pub fn text(&self, span: Span) -> &str {
        self.program.text(span.file, span.range)
    }

    /// The element card behind a reference.
    pub fn card(&self, card: CardRef) -> Option<&Card> {
        match self.statement(card)? {
            StatementKind::Card(card) => Some(card),
            _ => None,
        }
    }

    /// The mark behind a reference.
    pub fn mark(&self, mark: CardRef) -> Option<&Mark> {
        match self.statement(mark)? {
            StatementKind::Mark(mark) => Some(mark),
            _ => None,
        }
    }

    fn statement(&self, card: CardRef) -> Option<&StatementKind> {
        let parse = self.program.file(card.file)?;
        let statement = parse.statements.get(card.statement as usize)?;
        Some(&statement.kind)
    }

    /// The faults of meaning for which `pick` has words, as findings of `rule`.
    pub fn issues(
        &self,
        rule: &'static Rule,
        out: &mut Vec<Finding>,
        pick: impl Fn(&Issue) -> Option<String>,
    ) {
        for issue in &self.elaborated.issues {
            if let Some(message) = pick(issue) {
                out.push(rule.finding(issue.span, message));
            }
        }
    }
}

/// Facts of one block and its screen.
pub struct BlockContext<'a> {
    /// The netlist around it.
    pub text: &'a TextContext<'a>,
    /// The block's circuit.
    pub block: &'a BlockCircuit,
    /// What the screen found; `None` when a part cannot be computed.
    pub screen: Option<&'a Screen>,
    /// The verdict, gaps of the text taken into account.
    pub verdict: Verdict,
    /// Reasons and assumptions, in words.
    pub why: Option<&'a str>,
}

impl BlockContext<'_> {
    /// The place of a part: its name on the card that writes it.
    pub fn part_span(&self, part: PartId) -> Option<Span> {
        self.block.map.part(part).map(Origin::span)
    }

    /// Where a node is first named.
    pub fn node_span(&self, node: NodeId) -> Option<Span> {
        self.block.map.node(node)
    }

    /// A part's full name.
    pub fn part_name(&self, part: PartId) -> &str {
        self.block.circuit.part(part).map_or("?", |part| &part.name)
    }

    /// A node's full name.
    pub fn node_name(&self, node: NodeId) -> &str {
        self.block.circuit.node_name(NodeRef::Node(node))
    }

    /// A finding of `rule` in this block.
    pub fn finding(&self, rule: &'static Rule, span: Span, message: String) -> Finding {
        let mut finding = rule.finding(span, message);
        finding.block = Some(self.block.name.clone());
        finding
    }

    /// A finding of `rule` in this block with another severity than the rule's own.
    pub fn finding_as(
        &self,
        rule: &'static Rule,
        severity: Severity,
        span: Span,
        message: String,
    ) -> Finding {
        let mut finding = self.finding(rule, span, message);
        finding.severity = severity;
        finding
    }
}

/// The places of faults in marks: a name or value that is at fault there is told by
/// `unknown-mark`, and by no other rule.
pub(super) fn bad_marks(context: &TextContext<'_>) -> SpanMap<()> {
    let mut places = SpanMap::new();
    for issue in &context.elaborated.issues {
        if matches!(issue.kind, IssueKind::BadMark { .. }) {
            places.insert(issue.span, ());
        }
    }
    places
}

/// `; nearest is ..` behind a message, when a name is near.
pub fn did_you_mean(nearest: &Option<String>) -> String {
    match nearest {
        Some(name) => format!("; the nearest name is `{name}`"),
        None => String::new(),
    }
}

/// The circuits that wiring and values are looked at in: those of all blocks, and the bare top
/// level unless a block stands for it.
pub fn circuits<'a>(context: &TextContext<'a>) -> Vec<(&'a Circuit, &'a SourceMap)> {
    let elaborated = context.elaborated;
    let top_is_marked = elaborated
        .blocks
        .iter()
        .any(|block| block.scope == ScopeId(0));
    let mut found: Vec<(&Circuit, &SourceMap)> = elaborated
        .blocks
        .iter()
        .map(|block| (&block.circuit, &block.map))
        .collect();
    if !top_is_marked {
        found.push((&elaborated.top.circuit, &elaborated.top.map));
    }
    found
}

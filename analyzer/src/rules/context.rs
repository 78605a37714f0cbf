//! What a rule may look at, read-only, and the helpers that rules share.

use crate::circuit::{Circuit, NodeId, NodeRef, PartId, PartKind};
use crate::config::Config;
use crate::elaborate::{
    BlockCircuit, Elaborated, Folded, Issue, Origin, Program, Scope, ScopeId, SourceMap,
};
use crate::finding::{Finding, Severity};
use crate::rules::Rule;
use crate::stability::{Screen, Verdict};
use crate::syntax::{CardKind, Dot, Parse, StatementKind};
use crate::text::{FileId, Span};
use nalgebra::DMatrix;
use std::collections::HashSet;

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

/// Inductors that are coupled with each other, directly or through others.
pub struct CoupledGroup {
    /// Their couplings, in circuit order.
    pub couplings: Vec<PartId>,
    /// Smallest eigenvalue of the matrix with 1 on the diagonal and the factors beside it.
    pub least_eigenvalue: f64,
}

/// All groups of coupled inductors of a circuit.
pub fn coupled_groups(circuit: &Circuit) -> Vec<CoupledGroup> {
    let mut groups: Vec<(Vec<PartId>, Vec<PartId>)> = Vec::new();
    for (id, part) in circuit.numbered_parts() {
        let PartKind::Coupling { inductors, .. } = &part.kind else {
            continue;
        };
        let (mut coils, mut couplings) = (inductors.to_vec(), vec![id]);
        groups.retain(|(other, ids)| {
            let touches = other.iter().any(|coil| coils.contains(coil));
            if touches {
                coils.extend(other.iter().filter(|c| !inductors.contains(c)));
                couplings.extend(ids);
            }
            !touches
        });
        coils.sort_unstable();
        coils.dedup();
        couplings.sort_unstable();
        groups.push((coils, couplings));
    }
    groups
        .into_iter()
        .map(|(coils, couplings)| CoupledGroup {
            least_eigenvalue: least_eigenvalue(circuit, &coils, &couplings),
            couplings,
        })
        .collect()
}

fn least_eigenvalue(circuit: &Circuit, coils: &[PartId], couplings: &[PartId]) -> f64 {
    let mut matrix = DMatrix::<f64>::identity(coils.len(), coils.len());
    for id in couplings {
        let Some(PartKind::Coupling { inductors, factor }) =
            circuit.part(*id).map(|part| &part.kind)
        else {
            continue;
        };
        let place = |coil: PartId| coils.iter().position(|c| *c == coil);
        if let (Some(i), Some(j)) = (place(inductors[0]), place(inductors[1]))
            && i != j
        {
            matrix[(i, j)] += factor;
            matrix[(j, i)] += factor;
        }
    }
    let values = matrix.symmetric_eigenvalues();
    values.iter().copied().fold(f64::INFINITY, f64::min)
}

/// Every name that a netlist uses, folded to lower case.
pub struct Uses {
    words: HashSet<Folded>,
}

impl Uses {
    /// Gathers the words of all cards, marks and expressions.
    pub fn new(program: &Program) -> Self {
        let mut uses = Self {
            words: HashSet::new(),
        };
        for parse in program.files.values() {
            for statement in &parse.statements {
                uses.statement(parse, &statement.kind);
            }
        }
        uses
    }

    fn statement(&mut self, parse: &Parse, kind: &StatementKind) {
        let mut ranges = Vec::new();
        match kind {
            StatementKind::Card(card) => {
                match &card.kind {
                    CardKind::TwoTerminal { value, model, .. } => {
                        ranges.extend(value.map(|v| v.range));
                        ranges.extend(model.map(|w| w.range));
                    }
                    CardKind::Coupling { factor, .. } => ranges.extend(factor.map(|v| v.range)),
                    CardKind::Source { value, .. } => ranges.extend(value.map(|v| v.range)),
                    CardKind::VoltageControlled { gain, .. }
                    | CardKind::CurrentControlled { gain, .. } => ranges.push(gain.range),
                    CardKind::Instance { subcircuit, .. } => ranges.push(subcircuit.range),
                    CardKind::Device { model, .. } => ranges.push(model.range),
                    CardKind::NotComputed { .. } => {}
                }
                ranges.extend(card.params.iter().map(|p| p.value.range));
            }
            StatementKind::Mark(mark) => {
                ranges.extend(mark.params.iter().map(|p| p.value.range));
            }
            StatementKind::Dot(dot) => match dot.as_ref() {
                Dot::Param(defs) | Dot::Subckt { params: defs, .. } => {
                    ranges.extend(defs.iter().map(|def| def.value.range));
                }
                Dot::Model { params, .. } => ranges.extend(params.iter().map(|p| p.value.range)),
                Dot::Temp(value) => ranges.push(value.range),
                _ => {}
            },
            StatementKind::Title => {}
        }
        for range in ranges {
            let text = parse.tree.slice(range);
            let pieces = text.split(|c: char| !(c.is_alphanumeric() || "_.#@-".contains(c)));
            self.words.extend(pieces.map(Folded::new));
            let names = text.split(|c: char| !(c.is_alphanumeric() || "_.#@".contains(c)));
            self.words.extend(names.map(Folded::new));
            self.words.insert(Folded::new(text));
        }
    }

    /// Definitions of the root file are looked at only when it has cards at the top.
    fn own<'p>(
        &self,
        program: &'p Program,
        all: impl Iterator<Item = (&'p str, Span)>,
    ) -> Vec<(String, Span)> {
        let netlist = program.scope(ScopeId(0)).is_some_and(|top| {
            let root = program.root;
            top.cards.iter().any(|card| Some(card.file) == root)
        });
        if !netlist {
            return Vec::new();
        }
        let mut unused: Vec<(String, Span)> = all
            .filter(|(name, span)| {
                Some(span.file) == program.root && !self.words.contains(&Folded::new(name))
            })
            .map(|(name, span)| (name.to_owned(), span))
            .collect();
        unused.sort_by_key(|(_, span)| *span);
        unused
    }

    /// Subcircuits that no instance names.
    pub fn unused_subcircuits(&self, program: &Program) -> Vec<(String, Span)> {
        let marked = |scope: &Scope| !scope.marks.is_empty();
        let all = program.scopes.iter().filter(|scope| !marked(scope));
        let names = all.filter_map(|scope| scope.name.as_ref());
        self.own(program, names.map(|(name, span)| (name.as_str(), *span)))
    }

    /// Models that no card names.
    pub fn unused_models(&self, program: &Program) -> Vec<(String, Span)> {
        let models = program.scopes.iter().flat_map(|scope| {
            let mut all: Vec<_> = scope.models.values().collect();
            all.sort_by_key(|model| model.name.range);
            all
        });
        self.own(
            program,
            models.map(|model| {
                let span = Span::new(model.file, model.name.range);
                (program.text(model.file, model.name.range), span)
            }),
        )
    }

    /// Parameters that no value or expression names.
    pub fn unused_parameters(&self, program: &Program) -> Vec<(String, Span)> {
        let params = program.scopes.iter().flat_map(|scope| {
            let names = scope.param_order.iter();
            names.filter_map(|name| scope.params.get(name))
        });
        self.own(
            program,
            params.map(|definition| {
                let range = definition.def.name.range;
                let span = Span::new(definition.file, range);
                (program.text(definition.file, range), span)
            }),
        )
    }
}

//! Marked blocks: a flat circuit with its ports, supplies and ties, and what is known to be
//! missing from it.

use super::flatten::{Flat, Flattener, Gap, Limits};
use super::issue::{Issue, IssueKind};
use super::marks::{BlockMark, MarkData, MarkUse, PinTie, PortWord, TieTo};
use super::names::nearest;
use super::program::{Program, ScopeId};
use super::source_map::{Origin, SourceMap};
use crate::circuit::{Circuit, NodeId, NodeRef, Part, PartId, PartKind, PartRole, Port, PortDrive};
use crate::text::{Span, TextRange};

/// A block ready to be screened.
#[derive(Clone, Debug)]
pub struct BlockCircuit {
    /// As named by its mark.
    pub name: String,
    /// Where the name stands.
    pub span: Span,
    /// The scope the mark stands in.
    pub scope: ScopeId,
    /// The circuit, terminated and supplied.
    pub circuit: Circuit,
    /// The way back to the text.
    pub map: SourceMap,
    /// The band the designer cares for, Hz.
    pub band_hz: Option<[f64; 2]>,
    /// The sweep the mark asks for, Hz.
    pub sweep_hz: Option<[f64; 2]>,
    /// The parts that are judged, for `of=`; `None`: all.
    pub judged: Option<Vec<PartId>>,
    /// Sources claimed to model passive parts, with the place of each claim.
    pub passive_claims: Vec<PassiveClaim>,
    /// Why the circuit is not all that is written; any entry forbids a clean verdict.
    pub gaps: Vec<Gap>,
    /// What was assumed, in words, for the verdict's `why`.
    pub notes: Vec<String>,
    /// Findings of the terminations.
    pub terminations: Vec<TerminationFault>,
    /// Instances and devices in several copies: name, place, copies.
    pub multiplied: Vec<(String, Span, f64)>,
    /// Marks of the block's scope.
    pub marks: Vec<MarkUse>,
}

/// A claim that sources together model a passive part.
#[derive(Clone, PartialEq, Debug)]
pub struct PassiveClaim {
    /// The sources.
    pub parts: Vec<PartId>,
    /// Where the claim stands.
    pub span: Span,
}

/// What can be wrong with a block's terminations.
#[derive(Clone, PartialEq, Debug)]
pub enum TerminationFault {
    /// A V source (or tie, or ideal rail) stands straight at the port's node.
    PortShorted {
        /// The port.
        port: String,
        /// Where it is named.
        span: Span,
        /// The part that shorts it.
        part: PartId,
    },
    /// A resistor near the port impedance loads the port already.
    PortLoadedTwice {
        /// The port.
        port: String,
        /// The word that names it, ohms included.
        span: Span,
        /// The resistor.
        part: PartId,
    },
    /// A pin of a subcircuit block that nothing is said about.
    PinUnassigned {
        /// The pin.
        pin: String,
        /// Where it is named.
        span: Span,
    },
}

/// All blocks of a program, the flat top level, and the faults of meaning of every scope.
#[derive(Clone, Debug, Default)]
pub struct Elaborated {
    /// The flat top level; empty when the top has no cards.
    pub top: Flat,
    /// Blocks in order of the text.
    pub blocks: Vec<BlockCircuit>,
    /// All faults, each once.
    pub issues: Vec<Issue>,
    /// All marks of all scopes.
    pub marks: Vec<MarkUse>,
}

/// Flattens the top level and every block; scopes that nothing reaches are read for faults only.
pub fn elaborate_blocks(program: &Program, limits: Limits) -> Elaborated {
    let mut flattener = Flattener::new(program, limits);
    let mut out = Elaborated {
        issues: program.issues.clone(),
        ..Elaborated::default()
    };
    let top = flattener.flatten(ScopeId(0));
    let mut visited = top.visited.clone();
    out.issues.extend(top.issues.iter().cloned());
    let mut flats = vec![(ScopeId(0), top)];
    for index in 1..program.scopes.len() {
        let id = ScopeId(index as u32);
        let marked = program
            .scope(id)
            .is_some_and(|scope| !scope.marks.is_empty());
        if !marked && visited.contains(&id) {
            continue;
        }
        let flat = flattener.flatten(id);
        visited.extend(flat.visited.iter().copied());
        out.issues.extend(flat.issues.iter().cloned());
        flats.push((id, flat));
    }
    let mut names: Vec<(String, Span)> = Vec::new();
    for (scope, flat) in &flats {
        out.marks.extend(flat.marks.iter().cloned());
        for mark in &flat.marks {
            if let MarkData::Block(block) = &mark.data {
                check_block_name(block, &mut names, &mut out.issues);
                let circuit = BlockBuilder::new(*scope, flat, block).build(&mut out.issues);
                out.blocks.push(circuit);
            }
        }
    }
    out.blocks.sort_by_key(|block| block.span);
    dedupe(&mut out.issues);
    out.top = flats.swap_remove(0).1;
    out
}

fn check_block_name(block: &BlockMark, names: &mut Vec<(String, Span)>, issues: &mut Vec<Issue>) {
    let same = |(name, span): &&(String, Span)| {
        name.eq_ignore_ascii_case(&block.name) && span.file == block.span.file
    };
    if let Some((_, first)) = names.iter().find(same) {
        issues.push(Issue {
            kind: IssueKind::DuplicateName {
                what: "block",
                name: block.name.clone(),
            },
            span: block.span,
            other: Some(*first),
        });
    }
    names.push((block.name.clone(), block.span));
}

/// The same fault at the same place is told once, though many instances show it.
fn dedupe(issues: &mut Vec<Issue>) {
    let mut seen = std::collections::HashSet::new();
    issues.retain(|issue| seen.insert((issue.span, format!("{:?}", issue.kind))));
}

struct BlockBuilder<'a> {
    scope: ScopeId,
    flat: &'a Flat,
    mark: &'a BlockMark,
    block: BlockCircuit,
    /// Nodes that a port, rail, tie or ground takes care of.
    assigned: Vec<NodeRef>,
}

impl<'a> BlockBuilder<'a> {
    fn new(scope: ScopeId, flat: &'a Flat, mark: &'a BlockMark) -> Self {
        Self {
            scope,
            flat,
            mark,
            block: BlockCircuit {
                name: mark.name.clone(),
                span: mark.span,
                scope,
                circuit: flat.circuit.clone(),
                map: flat.map.clone(),
                band_hz: mark.band_hz,
                sweep_hz: mark.sweep_hz,
                judged: None,
                passive_claims: Vec::new(),
                gaps: flat.gaps.clone(),
                notes: Vec::new(),
                terminations: Vec::new(),
                multiplied: flat.multiplied.clone(),
                marks: flat.marks.clone(),
            },
            assigned: vec![NodeRef::Ground],
        }
    }

    fn build(mut self, issues: &mut Vec<Issue>) -> BlockCircuit {
        for mark in &self.flat.marks {
            match &mark.data {
                MarkData::Rail(rail) => {
                    if let Some(node) = self.node(&rail.node, issues) {
                        self.rail(node, mark.span, rail.ohm, rail.henry, rail.has_impedance);
                    }
                }
                MarkData::Tie(tie) => {
                    if let Some(node) = self.node(&tie.node, issues) {
                        self.tie(node, mark.span, tie.to);
                    }
                }
                MarkData::Passive(names) => self.claim(names, mark.span, issues),
                _ => {}
            }
        }
        for word in &self.mark.ports {
            self.port(word, issues);
        }
        if let Some(of) = &self.mark.of {
            self.judge(of, issues);
        }
        self.pins();
        self.not_computed();
        self.block
    }

    fn unknown(&self, name: &PinTie, issues: &mut Vec<Issue>) {
        let circuit = &self.flat.circuit;
        let known = circuit
            .nodes
            .iter()
            .map(|node| node.name.as_str())
            .chain(circuit.parts.iter().map(|part| part.name.as_str()));
        issues.push(Issue {
            kind: IssueKind::UnknownNodeInMark {
                name: name.name.clone(),
                nearest: nearest(&name.name, known).map(str::to_owned),
            },
            span: name.span,
            other: Some(self.mark.span),
        });
    }

    fn node(&mut self, name: &PinTie, issues: &mut Vec<Issue>) -> Option<NodeRef> {
        let found = self.block.circuit.find_node(&name.name);
        if found.is_none() {
            self.unknown(name, issues);
            self.gap("a mark names a node that is not there", name.span);
        }
        found
    }

    fn gap(&mut self, reason: &str, span: Span) {
        let reason = reason.to_owned();
        self.block.gaps.push(Gap { reason, span });
    }

    fn add(&mut self, name: String, kind: PartKind, role: PartRole, span: Span) -> PartId {
        let id = PartId(self.block.circuit.parts.len() as u32);
        self.block.circuit.parts.push(Part { name, kind, role });
        self.block.map.parts.push(Origin {
            file: span.file,
            name: span.range,
            value: TextRange::default(),
            instance: None,
        });
        id
    }

    /// A V source straight from a node to ground.
    fn source_at(&self, node: NodeRef) -> Option<PartId> {
        let pair = [node, NodeRef::Ground];
        self.block
            .circuit
            .numbered_parts()
            .find(|(_, part)| match &part.kind {
                PartKind::VoltageSource { nodes, .. } => {
                    *nodes == pair || (nodes[0] == pair[1] && nodes[1] == pair[0])
                }
                _ => false,
            })
            .map(|(id, _)| id)
    }

    /// Whether a V source has nothing in series with it.
    fn is_ideal(&self, id: PartId) -> bool {
        match self.block.circuit.part(id).map(|part| &part.kind) {
            Some(PartKind::VoltageSource {
                series_ohm,
                series_henry,
                ..
            }) => *series_ohm == 0.0 && *series_henry == 0.0,
            _ => false,
        }
    }

    fn rail(&mut self, node: NodeRef, span: Span, ohm: f64, henry: f64, has_impedance: bool) {
        self.assigned.push(node);
        if node == NodeRef::Ground {
            return;
        }
        let name = self.block.circuit.node_name(node).to_owned();
        if !has_impedance {
            self.block
                .notes
                .push(format!("rail `{name}` taken as ideal"));
        }
        match self.source_at(node) {
            Some(id) => self.set_series(id, ohm, henry),
            None => {
                let kind = PartKind::VoltageSource {
                    nodes: [node, NodeRef::Ground],
                    series_ohm: ohm,
                    series_henry: henry,
                };
                self.add(format!("rail:{name}"), kind, PartRole::Supply, span);
            }
        }
    }

    fn set_series(&mut self, id: PartId, ohm: f64, henry: f64) {
        let part = self.block.circuit.parts.get_mut(id.0 as usize);
        if let Some(PartKind::VoltageSource {
            series_ohm,
            series_henry,
            ..
        }) = part.map(|part| &mut part.kind)
        {
            *series_ohm += ohm;
            *series_henry += henry;
        }
    }

    fn tie(&mut self, node: NodeRef, span: Span, to: TieTo) {
        self.assigned.push(node);
        if node == NodeRef::Ground {
            return;
        }
        let name = format!("tie:{}", self.block.circuit.node_name(node));
        let nodes = [node, NodeRef::Ground];
        match to {
            TieTo::Open => {}
            TieTo::Ground => {
                let kind = PartKind::VoltageSource {
                    nodes,
                    series_ohm: 0.0,
                    series_henry: 0.0,
                };
                self.add(name, kind, PartRole::Supply, span);
            }
            TieTo::Resistor(ohm) => {
                let kind = PartKind::Resistor { nodes, ohm };
                self.add(name, kind, PartRole::Supply, span);
            }
        }
    }

    fn claim(&mut self, names: &[PinTie], span: Span, issues: &mut Vec<Issue>) {
        let mut parts = Vec::new();
        for name in names {
            let prefix = format!("{}.", name.name.to_ascii_lowercase());
            let before = parts.len();
            for (id, part) in self.block.circuit.numbered_parts() {
                let lower = part.name.to_ascii_lowercase();
                let own = lower == prefix.trim_end_matches('.');
                if part.kind.is_controlled() && (own || lower.starts_with(&prefix)) {
                    parts.push(id);
                }
            }
            if parts.len() == before {
                self.unknown(name, issues);
            }
        }
        if !parts.is_empty() {
            self.block.passive_claims.push(PassiveClaim { parts, span });
        }
    }

    fn port(&mut self, word: &PortWord, issues: &mut Vec<Issue>) {
        let name = word.name.name.clone();
        let ohm = word.ohm.unwrap_or(self.mark.z0_ohm);
        let drive = match self.block.circuit.find_node(&name) {
            Some(NodeRef::Node(node)) => Some((self.node_port(word, node, ohm), ohm)),
            Some(NodeRef::Ground) => None,
            None => self.part_port(&name, word, ohm),
        };
        match drive {
            Some((drive, ohm)) => self.block.circuit.ports.push(Port { name, drive, ohm }),
            None => {
                self.unknown(&word.name, issues);
                self.gap("a port is not there", word.name.span);
            }
        }
    }

    fn node_port(&mut self, word: &PortWord, node: NodeId, ohm: f64) -> PortDrive {
        let at = NodeRef::Node(node);
        self.assigned.push(at);
        let port = word.name.name.clone();
        let span = word.name.span;
        if let Some(part) = self.source_at(at).filter(|id| self.is_ideal(*id)) {
            self.block
                .terminations
                .push(TerminationFault::PortShorted { port, span, part });
        } else if let Some(part) = self.resistor_like(at, ohm) {
            self.block
                .terminations
                .push(TerminationFault::PortLoadedTwice { port, span, part });
        }
        let kind = PartKind::Resistor {
            nodes: [at, NodeRef::Ground],
            ohm,
        };
        let name = format!("port:{}", word.name.name);
        let part = self.add(name, kind, PartRole::Termination, word.name.span);
        PortDrive::Shunt { node, part }
    }

    /// A card's resistor from a node to ground within a third and three times `ohm`.
    fn resistor_like(&self, node: NodeRef, ohm: f64) -> Option<PartId> {
        self.block
            .circuit
            .numbered_parts()
            .find(|(_, part)| match &part.kind {
                PartKind::Resistor { nodes, ohm: r } if part.role == PartRole::Card => {
                    let here = nodes.contains(&node) && nodes.contains(&NodeRef::Ground);
                    here && *r >= ohm / 3.0 && *r <= ohm * 3.0
                }
                _ => false,
            })
            .map(|(id, _)| id)
    }

    fn part_port(&mut self, name: &str, word: &PortWord, ohm: f64) -> Option<(PortDrive, f64)> {
        let id = self.block.circuit.find_part(name)?;
        match self.block.circuit.part(id)?.kind.clone() {
            PartKind::VoltageSource { nodes, .. } => {
                self.assigned.extend(nodes);
                self.set_series(id, ohm, 0.0);
                Some((PortDrive::Series { part: id }, ohm))
            }
            PartKind::CurrentSource { nodes } => {
                self.assigned.extend(nodes);
                let kind = PartKind::Resistor { nodes, ohm };
                let label = format!("port:{name}");
                let part = self.add(label, kind, PartRole::Termination, word.name.span);
                Some((PortDrive::Across { nodes, part }, ohm))
            }
            PartKind::Resistor { nodes, ohm } if nodes.contains(&NodeRef::Ground) => {
                self.assigned.extend(nodes);
                let node = nodes.iter().find_map(|node| node.node())?;
                Some((PortDrive::Shunt { node, part: id }, ohm))
            }
            _ => None,
        }
    }

    fn judge(&mut self, of: &PinTie, issues: &mut Vec<Issue>) {
        let prefix = format!("{}.", of.name.to_ascii_lowercase());
        let parts: Vec<PartId> = self
            .block
            .circuit
            .numbered_parts()
            .filter(|(_, part)| part.name.to_ascii_lowercase().starts_with(&prefix))
            .map(|(id, _)| id)
            .collect();
        if parts.is_empty() {
            self.unknown(of, issues);
            self.gap("the judged instance is not there", of.span);
        } else {
            self.block.judged = Some(parts);
        }
    }

    fn pins(&mut self) {
        if self.scope == ScopeId(0) {
            return;
        }
        for (node, span) in self.flat.pins.clone() {
            if self.assigned.contains(&node) {
                continue;
            }
            let pin = self.block.circuit.node_name(node).to_owned();
            let reason = format!("pin `{pin}` is neither port, rail nor tied");
            self.block.gaps.push(Gap { reason, span });
            self.block
                .terminations
                .push(TerminationFault::PinUnassigned { pin, span });
        }
    }

    fn not_computed(&mut self) {
        let mut found: Vec<(String, Span)> = Vec::new();
        for (id, part) in self.block.circuit.numbered_parts() {
            if let PartKind::NotComputed { reason, .. } = &part.kind {
                let name = part.name.trim_end_matches(".data");
                let text = format!("`{name}` is {reason}").replace(" is its ", ": its ");
                if let Some(origin) = self.block.map.part(id) {
                    found.push((text, origin.span()));
                }
            }
        }
        for (reason, span) in found {
            self.block.gaps.push(Gap { reason, span });
        }
    }
}

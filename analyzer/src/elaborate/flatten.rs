//! Hierarchy to a flat circuit. One call flattens one root: the top level, or a subcircuit
//! with its default parameters. The way back to the text is kept beside it.

use super::issue::{Issue, IssueKind, LimitKey};
use super::marks::{DeviceMark, MarkData, MarkUse, read_mark};
use super::names::{Folded, nearest};
use super::params::Env;
use super::program::{CardRef, Program, ScopeId};
use super::scope::Slot;
use super::source_map::{InstanceId, InstanceOrigin, SourceMap};
use crate::circuit::{Circuit, Node, NodeId, NodeRef, PartId, PartKind};
use crate::syntax::{Card, CardKind, StatementKind, Word};
use crate::text::{Span, TextRange};
use std::collections::{HashMap, HashSet};
use std::rc::Rc;

/// Bounds on the work, from the product's limits.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Limits {
    /// Flat parts (and cards visited) of one circuit.
    pub parts: usize,
    /// Nesting of instances.
    pub nesting: usize,
}

/// A part about to be added: its name within the device and what it is.
pub(super) struct PartSpec {
    pub(super) name: &'static str,
    pub(super) kind: PartKind,
}

impl PartSpec {
    pub(super) fn new(name: &'static str, kind: PartKind) -> Self {
        Self { name, kind }
    }
}

/// Why a flat circuit is not the whole of what is written.
#[derive(Clone, PartialEq, Debug)]
pub struct Gap {
    /// In words.
    pub reason: String,
    /// Where.
    pub span: Span,
}

/// A flattened root.
#[derive(Clone, Debug, Default)]
pub struct Flat {
    /// The circuit; ports are set later, by the block.
    pub circuit: Circuit,
    /// The way back to the text.
    pub map: SourceMap,
    /// Pins of the root subcircuit.
    pub pins: Vec<(NodeRef, Span)>,
    /// Marks of the root scope.
    pub marks: Vec<MarkUse>,
    /// Faults of meaning.
    pub issues: Vec<Issue>,
    /// Cards and includes that are missing from the circuit.
    pub gaps: Vec<Gap>,
    /// Instances and devices with `m=` above 1 that hold an active source: name, place, m.
    pub multiplied: Vec<(String, Span, f64)>,
    /// Scopes that were visited.
    pub visited: HashSet<ScopeId>,
}

/// Flattens roots of one program.
pub struct Flattener<'p> {
    pub(super) program: &'p Program,
    pub(super) limits: Limits,
    pub(super) plans: HashMap<ScopeId, Rc<super::scope::ScopePlan>>,
    pub(super) global_index: HashMap<Folded, u32>,
    pub(super) global_names: Vec<(String, Span)>,
}

/// One instance in work.
pub(super) struct Instance {
    pub(super) scope: ScopeId,
    pub(super) env: Rc<Env>,
    pub(super) path: String,
    pub(super) id: Option<InstanceId>,
    pub(super) multiplier: f64,
    pub(super) nodes: Vec<Option<NodeRef>>,
    pub(super) marks: Vec<(String, DeviceMark)>,
}

impl<'p> Flattener<'p> {
    /// A flattener for `program`.
    pub fn new(program: &'p Program, limits: Limits) -> Self {
        Self {
            program,
            limits,
            plans: HashMap::new(),
            global_index: HashMap::new(),
            global_names: Vec::new(),
        }
    }

    /// Flattens the top level (scope 0) or one subcircuit with its defaults.
    pub fn flatten(&mut self, root: ScopeId) -> Flat {
        let mut env = Env::new(ScopeId(0), None, HashMap::new());
        let chain: Vec<ScopeId> = self.chain(root);
        for scope in chain {
            if scope != ScopeId(0) {
                env = Env::new(scope, Some(env), HashMap::new());
            }
        }
        let mut work = Work {
            flat: Flat::default(),
            globals: Vec::new(),
            stack: Vec::new(),
            budget: self.limits.parts,
            cut: false,
        };
        let plan = self.plan(root);
        let mut instance = Instance {
            scope: root,
            env,
            path: String::new(),
            id: None,
            multiplier: 1.0,
            nodes: vec![None; plan.names.len()],
            marks: Vec::new(),
        };
        for slot in plan.pins.clone() {
            let node = self.node(&mut work, &plan, &mut instance, slot);
            let span = node_span(&work.flat, node).or_else(|| self.scope_span(root));
            if let Some(span) = span {
                work.flat.pins.push((node, span));
            }
        }
        self.instance(&mut work, &mut instance);
        self.check_names(&mut work, root);
        work.flat
    }

    /// The scopes from the top to `root`, in that order.
    fn chain(&self, root: ScopeId) -> Vec<ScopeId> {
        let mut chain = Vec::new();
        let mut next = Some(root);
        while let Some(scope) = next {
            chain.push(scope);
            next = self.program.scope(scope).and_then(|s| s.parent);
        }
        chain.reverse();
        chain
    }

    pub(super) fn scope_span(&self, scope: ScopeId) -> Option<Span> {
        let (_, span) = self.program.scope(scope)?.name.as_ref()?;
        Some(*span)
    }

    fn check_names(&self, work: &mut Work, _root: ScopeId) {
        let visited: Vec<ScopeId> = {
            let mut all: Vec<ScopeId> = work.flat.visited.iter().copied().collect();
            all.sort();
            all
        };
        for scope in visited {
            duplicate_names(self.program, scope, &mut work.flat.issues);
        }
    }

    /// Flattens all cards of an instance. Depth is bounded by the nesting limit.
    fn instance(&mut self, work: &mut Work, instance: &mut Instance) {
        let program = self.program;
        let Some(scope) = program.scope(instance.scope) else {
            return;
        };
        let first_visit = work.flat.visited.insert(instance.scope);
        let plan = self.plan(instance.scope);
        work.flat
            .gaps
            .extend(scope.gaps.iter().filter(|_| first_visit).cloned());
        let marks = self.read_marks(work, instance, first_visit);
        let mut used = vec![false; instance.marks.len()];
        let mut sensed: HashMap<String, PartId> = HashMap::new();
        let mut late: Vec<(CardRef, usize)> = Vec::new();
        work.stack.push(instance.scope);
        for (position, card_ref) in scope.cards.iter().enumerate() {
            if !work.spend(self.limits.parts, program, *card_ref) {
                break;
            }
            let Some(card) = card_of(program, *card_ref) else {
                continue;
            };
            match &card.kind {
                CardKind::Coupling { .. } | CardKind::CurrentControlled { .. } => {
                    late.push((*card_ref, position));
                }
                _ if self.is_left_out(work, instance, *card_ref, card) => {}
                _ => {
                    let nodes = self.nodes(work, &plan, instance, position);
                    let added = self.card(work, instance, *card_ref, card, &nodes, &mut used);
                    if let (true, Some(id)) = (plan.refers, added) {
                        let name = program.text(card_ref.file, card.name.range);
                        sensed.insert(name.to_ascii_lowercase(), id);
                    }
                }
            }
        }
        for (card_ref, position) in late {
            let fits = card_of(program, card_ref)
                .filter(|card| self.refers_soundly(work, instance, card_ref, card, &sensed));
            if let Some(card) = fits {
                let nodes = self.nodes(work, &plan, instance, position);
                self.referring_card(work, instance, card_ref, card, &nodes, &sensed);
            }
        }
        work.stack.pop();
        self.unused_marks(work, instance, &used);
        if instance.path.is_empty() {
            work.flat.marks = marks;
        }
    }

    /// Reads the scope's marks; device marks join those handed down from outside.
    fn read_marks(
        &self,
        work: &mut Work,
        instance: &mut Instance,
        first_visit: bool,
    ) -> Vec<MarkUse> {
        let Some(scope) = self.program.scope(instance.scope) else {
            return Vec::new();
        };
        let mut silent = Vec::new();
        let mut marks = Vec::new();
        for card in &scope.marks {
            let issues = if first_visit {
                &mut work.flat.issues
            } else {
                &mut silent
            };
            let Some(mark) = read_mark(self.program, *card, &instance.env, issues) else {
                continue;
            };
            if let MarkData::Device(device) = &mark.data {
                let target = device.target.name.to_ascii_lowercase();
                instance.marks.push((target, device.clone()));
            }
            marks.push(mark);
        }
        marks
    }

    fn unused_marks(&self, work: &mut Work, instance: &Instance, used: &[bool]) {
        for (index, (_, mark)) in instance.marks.iter().enumerate() {
            if used.get(index).copied().unwrap_or(false) {
                continue;
            }
            let Some(scope) = self.program.scope(instance.scope) else {
                continue;
            };
            let names: Vec<&str> = scope
                .cards
                .iter()
                .filter_map(|card| {
                    let element = card_of(self.program, *card)?;
                    Some(self.program.text(card.file, element.name.range))
                })
                .collect();
            let near = nearest(&mark.target.name, names).map(str::to_owned);
            work.flat.issues.push(Issue {
                kind: IssueKind::UnknownNodeInMark {
                    name: mark.target.name.clone(),
                    nearest: near,
                },
                span: mark.target.span,
                other: None,
            });
        }
    }

    /// Adds the parts of one card; returns the part when it is a single V or L.
    fn card(
        &mut self,
        work: &mut Work,
        instance: &mut Instance,
        card_ref: CardRef,
        card: &Card,
        nodes: &[NodeRef],
        used: &mut [bool],
    ) -> Option<PartId> {
        let name = self.program.text(card_ref.file, card.name.range).to_owned();
        let lower = name.to_ascii_lowercase();
        let mark = instance.marks.iter().position(|(t, _)| *t == lower);
        if let Some(index) = mark {
            if let Some(flag) = used.get_mut(index) {
                *flag = true;
            }
            let mark = instance.marks[index].1.clone();
            if is_device(&card.kind) {
                self.stand_in(work, instance, card_ref, card, nodes, &mark);
                return None;
            }
            let message = format!(
                "`{name}` is neither a semiconductor device nor a subcircuit instance; nothing stands in for it"
            );
            let kind = IssueKind::BadMark {
                message,
                nearest: None,
            };
            let place = Span::new(card_ref.file, card.name.range);
            work.issue(kind, mark.target.span, Some(place));
        }
        match &card.kind {
            CardKind::Instance { subcircuit, .. } => {
                self.enter(work, instance, card_ref, card, *subcircuit, nodes, used);
                None
            }
            CardKind::Device { model, .. } => {
                self.check_model(work, instance, card_ref, *model);
                let what = match card.letter {
                    'd' => "a diode",
                    'q' => "a bipolar transistor",
                    'j' => "a junction field-effect transistor",
                    'm' => "a MOS field-effect transistor",
                    _ => "a MESFET",
                };
                let reason = format!(
                    "{what} whose model is not computed yet; give its small-signal values by `*~ device {name} gm=..`"
                );
                self.add_not_computed(work, instance, card_ref, card, nodes, reason);
                None
            }
            CardKind::Line { z0, delay, .. } => {
                self.line(work, instance, card_ref, card, nodes, *z0, *delay);
                None
            }
            CardKind::NotComputed { what, .. } => {
                let reason = format!("{what}, which is not computed yet");
                self.add_not_computed(work, instance, card_ref, card, nodes, reason);
                None
            }
            _ => self.element(work, instance, card_ref, card, nodes),
        }
    }

    #[allow(clippy::too_many_arguments)] // a card with its place, its nodes and what surrounds it
    fn enter(
        &mut self,
        work: &mut Work,
        instance: &mut Instance,
        card_ref: CardRef,
        card: &Card,
        subcircuit: Word,
        nodes: &[NodeRef],
        used: &mut [bool],
    ) {
        let program = self.program;
        let name = program.text(card_ref.file, subcircuit.range);
        let span = Span::new(card_ref.file, subcircuit.range);
        let Some(target) = program.find_subcircuit(instance.scope, &Folded::new(name)) else {
            return;
        };
        if work.stack.contains(&target) {
            let kind = IssueKind::RecursiveSubcircuit {
                name: name.to_owned(),
            };
            work.issue(kind, span, self.scope_span(target));
            self.gap(work, card_ref, card, "a subcircuit contains itself");
            return;
        }
        if work.stack.len() >= self.limits.nesting {
            let kind = IssueKind::LimitReached {
                key: LimitKey::Nesting,
                limit: self.limits.nesting,
            };
            work.issue(kind, span, None);
            self.gap(work, card_ref, card, "instances are nested too deep");
            return;
        }
        self.enter_scope(work, instance, card_ref, card, target, nodes, used);
    }

    #[allow(clippy::too_many_arguments)] // as `enter`
    fn enter_scope(
        &mut self,
        work: &mut Work,
        outer: &mut Instance,
        card_ref: CardRef,
        card: &Card,
        target: ScopeId,
        nodes: &[NodeRef],
        used: &mut [bool],
    ) {
        let program = self.program;
        let Some(scope) = program.scope(target) else {
            return;
        };
        if nodes.len() != scope.pins.len() {
            let name = scope.name.as_ref().map_or("", |(name, _)| name).to_owned();
            let kind = IssueKind::PinCount {
                given: nodes.len(),
                wanted: scope.pins.len(),
                name,
            };
            let span = Span::new(card_ref.file, card.name.range);
            work.issue(kind, span, self.scope_span(target));
            self.gap(
                work,
                card_ref,
                card,
                "an instance has the wrong number of nodes",
            );
        }
        let (overrides, own) = self.overrides(work, outer, card_ref, card, target);
        let parent = scope.parent.and_then(|parent| outer.env.of_scope(parent));
        let parent = parent.unwrap_or_else(|| Rc::clone(&outer.env));
        let name = program.text(card_ref.file, card.name.range);
        let path = join(&outer.path, name);
        let id = InstanceId(work.flat.map.instances.len() as u32);
        let span = Span::new(card_ref.file, card.name.range);
        work.flat.map.instances.push(InstanceOrigin {
            path: path.clone(),
            parent: outer.id,
            span,
        });
        let plan = self.plan(target);
        let mut inner = Instance {
            scope: target,
            env: Env::new(target, Some(parent), overrides),
            path: path.clone(),
            id: Some(id),
            multiplier: outer.multiplier * own,
            nodes: vec![None; plan.names.len()],
            marks: handed_down(outer, name, used),
        };
        for (slot, node) in plan.pins.iter().zip(nodes) {
            if let Slot::Local(index) = slot
                && let Some(place) = inner.nodes.get_mut(*index as usize)
            {
                *place = Some(*node);
            }
        }
        let before = work.flat.circuit.parts.len();
        self.instance(work, &mut inner);
        let added = work.flat.circuit.parts.get(before..).unwrap_or_default();
        if own > 1.0 && added.iter().any(|part| part.kind.is_controlled()) {
            work.flat.multiplied.push((path, span, own));
        }
    }
}

/// The flat circuit in the making.
pub(super) struct Work {
    pub(super) flat: Flat,
    pub(super) globals: Vec<Option<NodeRef>>,
    pub(super) stack: Vec<ScopeId>,
    pub(super) budget: usize,
    pub(super) cut: bool,
}

impl Work {
    pub(super) fn add_node(&mut self, name: String, span: Span) -> NodeRef {
        let id = NodeId(self.flat.circuit.nodes.len() as u32);
        self.flat.circuit.nodes.push(Node { name });
        self.flat.map.nodes.push(span);
        NodeRef::Node(id)
    }

    pub(super) fn issue(&mut self, kind: IssueKind, span: Span, other: Option<Span>) {
        self.flat.issues.push(Issue { kind, span, other });
    }

    /// Counts one card; `false` when the limit is used up.
    fn spend(&mut self, limit: usize, program: &Program, card: CardRef) -> bool {
        if self.budget > 0 {
            self.budget -= 1;
            return true;
        }
        if !self.cut {
            self.cut = true;
            let range = card_of(program, card).map_or(TextRange::default(), |c| c.name.range);
            let span = Span::new(card.file, range);
            let kind = IssueKind::LimitReached {
                key: LimitKey::Parts,
                limit,
            };
            self.issue(kind, span, None);
            self.flat.gaps.push(Gap {
                reason: format!("it has more than {limit} parts"),
                span,
            });
        }
        false
    }
}

/// Device marks whose path leads into the instance `name`.
fn handed_down(outer: &Instance, name: &str, used: &mut [bool]) -> Vec<(String, DeviceMark)> {
    let prefix = format!("{}.", name.to_ascii_lowercase());
    let mut marks = Vec::new();
    for (index, (target, mark)) in outer.marks.iter().enumerate() {
        if let Some(rest) = target.strip_prefix(&prefix) {
            marks.push((rest.to_owned(), mark.clone()));
            if let Some(flag) = used.get_mut(index) {
                *flag = true;
            }
        }
    }
    marks
}

/// A device part in `m` parallel copies.
/// Whether a `device` mark may stand in for a card.
fn is_device(kind: &CardKind) -> bool {
    matches!(
        kind,
        CardKind::Device { .. } | CardKind::Instance { .. } | CardKind::NotComputed { .. }
    )
}

pub(super) fn scaled(kind: PartKind, m: f64) -> PartKind {
    match kind {
        PartKind::Resistor { nodes, ohm } => PartKind::Resistor {
            nodes,
            ohm: ohm / m,
        },
        PartKind::Capacitor { nodes, farad } => PartKind::Capacitor {
            nodes,
            farad: farad * m,
        },
        PartKind::Vccs {
            nodes,
            control,
            siemens,
            delay_s,
        } => PartKind::Vccs {
            nodes,
            control,
            siemens: siemens * m,
            delay_s,
        },
        other => other,
    }
}

pub(super) fn join(path: &str, name: &str) -> String {
    if path.is_empty() {
        return name.to_owned();
    }
    let mut full = String::with_capacity(path.len() + 1 + name.len());
    full.push_str(path);
    full.push('.');
    full.push_str(name);
    full
}

/// The element card behind a reference.
pub(super) fn card_of(program: &Program, card: CardRef) -> Option<&Card> {
    let parse = program.file(card.file)?;
    match &parse.statements.get(card.statement as usize)?.kind {
        StatementKind::Card(card) => Some(card),
        _ => None,
    }
}

fn node_span(flat: &Flat, node: NodeRef) -> Option<Span> {
    flat.map.node(node.node()?)
}

/// Two element cards of one scope with one name.
fn duplicate_names(program: &Program, id: ScopeId, issues: &mut Vec<Issue>) {
    let Some(scope) = program.scope(id) else {
        return;
    };
    let mut seen: HashMap<String, Span> = HashMap::with_capacity(scope.cards.len());
    for card_ref in &scope.cards {
        let Some(card) = card_of(program, *card_ref) else {
            continue;
        };
        let name = program.text(card_ref.file, card.name.range);
        let span = Span::new(card_ref.file, card.name.range);
        match seen.get(&name.to_ascii_lowercase()) {
            Some(first) => issues.push(Issue {
                kind: IssueKind::DuplicateName {
                    what: "part",
                    name: name.to_owned(),
                },
                span,
                other: Some(*first),
            }),
            None => {
                seen.insert(name.to_ascii_lowercase(), span);
            }
        }
    }
}

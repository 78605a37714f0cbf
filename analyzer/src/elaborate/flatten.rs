//! Hierarchy to a flat circuit. One call flattens one root: the top level, or a subcircuit
//! with its default parameters. The way back to the text is kept beside it.

use super::device::stand_in;
use super::issue::{Issue, IssueKind, LimitKey};
use super::marks::{DeviceMark, MarkData, MarkUse, read_mark};
use super::names::{Folded, nearest};
use super::params::Env;
use super::program::{CardRef, Program, ScopeId};
use super::source_map::{InstanceId, InstanceOrigin, Origin, SourceMap};
use crate::circuit::{
    Circuit, Node, NodeId, NodeRef, Part, PartId, PartKind, PartRole, Sense, is_ground,
};
use crate::syntax::{Card, CardKind, StatementKind, Value, Word};
use crate::text::{FileId, Span, TextRange};
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

/// Where a node word of a card leads.
#[derive(Clone, Copy)]
enum Slot {
    Ground,
    Global(u32),
    Local(u32),
}

/// A scope's nodes and cards with node words looked up once.
struct ScopePlan {
    names: Vec<(String, Span)>,
    pins: Vec<Slot>,
    cards: Vec<Vec<Slot>>,
    refers: bool,
}

/// Flattens roots of one program.
pub struct Flattener<'p> {
    program: &'p Program,
    limits: Limits,
    plans: HashMap<ScopeId, Rc<ScopePlan>>,
    global_index: HashMap<Folded, u32>,
    global_names: Vec<(String, Span)>,
}

/// One instance in work.
struct Instance {
    scope: ScopeId,
    env: Rc<Env>,
    path: String,
    id: Option<InstanceId>,
    multiplier: f64,
    nodes: Vec<Option<NodeRef>>,
    marks: Vec<(String, DeviceMark)>,
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

    fn scope_span(&self, scope: ScopeId) -> Option<Span> {
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

    fn plan(&mut self, scope: ScopeId) -> Rc<ScopePlan> {
        if let Some(plan) = self.plans.get(&scope) {
            return Rc::clone(plan);
        }
        let plan = Rc::new(self.make_plan(scope));
        self.plans.insert(scope, Rc::clone(&plan));
        plan
    }

    fn make_plan(&mut self, id: ScopeId) -> ScopePlan {
        let mut plan = ScopePlan {
            names: Vec::new(),
            pins: Vec::new(),
            cards: Vec::new(),
            refers: false,
        };
        let Some(scope) = self.program.scope(id) else {
            return plan;
        };
        let mut index: HashMap<String, u32> = HashMap::new();
        for (name, span) in &scope.pins {
            let slot = self.slot(name, *span, &mut index, &mut plan.names);
            plan.pins.push(slot);
        }
        for card_ref in &scope.cards {
            let Some(card) = card_of(self.program, *card_ref) else {
                plan.cards.push(Vec::new());
                continue;
            };
            plan.refers |= matches!(
                card.kind,
                CardKind::Coupling { .. } | CardKind::CurrentControlled { .. }
            );
            let slots = card
                .kind
                .nodes()
                .iter()
                .map(|word| {
                    let name = self.program.text(card_ref.file, word.range);
                    let span = Span::new(card_ref.file, word.range);
                    self.slot(name, span, &mut index, &mut plan.names)
                })
                .collect();
            plan.cards.push(slots);
        }
        plan
    }

    fn slot(
        &mut self,
        name: &str,
        span: Span,
        index: &mut HashMap<String, u32>,
        names: &mut Vec<(String, Span)>,
    ) -> Slot {
        if is_ground(name) {
            return Slot::Ground;
        }
        let lower = name.to_ascii_lowercase();
        if let Some(&local) = index.get(&lower) {
            return Slot::Local(local);
        }
        let folded = Folded::new(name);
        if self.program.globals.contains_key(&folded) {
            let next = self.global_names.len() as u32;
            let at = *self.global_index.entry(folded).or_insert(next);
            if at == next {
                self.global_names.push((name.to_owned(), span));
            }
            return Slot::Global(at);
        }
        let local = names.len() as u32;
        index.insert(lower, local);
        names.push((name.to_owned(), span));
        Slot::Local(local)
    }

    fn node(
        &self,
        work: &mut Work,
        plan: &ScopePlan,
        instance: &mut Instance,
        slot: Slot,
    ) -> NodeRef {
        match slot {
            Slot::Ground => NodeRef::Ground,
            Slot::Global(index) => {
                if work.globals.len() <= index as usize {
                    work.globals.resize(index as usize + 1, None);
                }
                if let Some(Some(node)) = work.globals.get(index as usize) {
                    return *node;
                }
                let (name, span) = self.global_names[index as usize].clone();
                let node = work.add_node(name, span);
                work.globals[index as usize] = Some(node);
                node
            }
            Slot::Local(index) => {
                if let Some(Some(node)) = instance.nodes.get(index as usize) {
                    return *node;
                }
                let (name, span) = &plan.names[index as usize];
                let node = work.add_node(join(&instance.path, name), *span);
                if let Some(slot) = instance.nodes.get_mut(index as usize) {
                    *slot = Some(node);
                }
                node
            }
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
                CardKind::Instance { subcircuit, .. }
                    if self.is_undefined(work, instance, *card_ref, card, *subcircuit) => {}
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
            if let Some(card) = card_of(program, card_ref) {
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

    fn nodes(
        &self,
        work: &mut Work,
        plan: &ScopePlan,
        instance: &mut Instance,
        position: usize,
    ) -> Vec<NodeRef> {
        let slots = plan.cards.get(position).cloned().unwrap_or_default();
        slots
            .into_iter()
            .map(|slot| self.node(work, plan, instance, slot))
            .collect()
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
            self.stand_in(work, instance, card_ref, card, nodes, &mark);
            return None;
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
            CardKind::NotComputed { what, .. } => {
                let reason = format!("{what}, which is not computed yet");
                self.add_not_computed(work, instance, card_ref, card, nodes, reason);
                None
            }
            _ => self.element(work, instance, card_ref, card, nodes),
        }
    }

    fn add_not_computed(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        nodes: &[NodeRef],
        reason: String,
    ) {
        let kind = PartKind::NotComputed {
            nodes: nodes.to_vec(),
            reason,
        };
        self.add(
            work,
            instance,
            card_ref,
            card,
            None,
            kind,
            TextRange::default(),
        );
    }

    /// R C L V I E G.
    fn element(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        nodes: &[NodeRef],
    ) -> Option<PartId> {
        let m = instance.multiplier * self.multiplier(work, instance, card_ref, card);
        let (value, range) = match &card.kind {
            CardKind::TwoTerminal { value, model, .. } => {
                if let Some(model) = model {
                    self.check_model(work, instance, card_ref, *model);
                }
                (*value, value.map(|v| v.range))
            }
            CardKind::VoltageControlled { gain, .. } => (Some(*gain), Some(gain.range)),
            CardKind::Source { value, .. } => (None, value.map(|v| v.range)),
            _ => return None,
        };
        let number = match value {
            Some(value) => match self.value(work, instance, card_ref.file, value) {
                Some(number) => number,
                None => {
                    self.gap(work, card_ref, card, "the value of a card is not known");
                    return None;
                }
            },
            None => 0.0,
        };
        let kind = match (card.letter, nodes) {
            ('r', &[a, b]) => PartKind::Resistor {
                nodes: [a, b],
                ohm: number / m,
            },
            ('c', &[a, b]) => PartKind::Capacitor {
                nodes: [a, b],
                farad: number * m,
            },
            ('l', &[a, b]) => PartKind::Inductor {
                nodes: [a, b],
                henry: number / m,
            },
            ('v', &[a, b]) => PartKind::VoltageSource {
                nodes: [a, b],
                series_ohm: 0.0,
                series_henry: 0.0,
            },
            ('i', &[a, b]) => PartKind::CurrentSource { nodes: [a, b] },
            ('e', &[p, n, cp, cn]) => PartKind::Vcvs {
                nodes: [p, n],
                control: [cp, cn],
                gain: number,
            },
            ('g', &[p, n, cp, cn]) => PartKind::Vccs {
                nodes: [p, n],
                control: [cp, cn],
                siemens: number * m,
            },
            _ => return None,
        };
        let id = self.add(
            work,
            instance,
            card_ref,
            card,
            None,
            kind,
            range.unwrap_or_default(),
        );
        matches!(card.letter, 'v' | 'l').then_some(id)
    }

    /// K F H: cards that name other parts.
    fn referring_card(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        nodes: &[NodeRef],
        sensed: &HashMap<String, PartId>,
    ) {
        let m = instance.multiplier * self.multiplier(work, instance, card_ref, card);
        match &card.kind {
            CardKind::Coupling { inductors, factor } => {
                let Some(factor) = factor else { return };
                let Some(value) = self.value(work, instance, card_ref.file, *factor) else {
                    self.gap(work, card_ref, card, "the value of a card is not known");
                    return;
                };
                let found: Vec<PartId> = inductors
                    .iter()
                    .filter_map(|word| {
                        self.find(work, instance, card_ref.file, *word, sensed, "an inductor")
                    })
                    .collect();
                if found.len() < inductors.len() {
                    self.gap(work, card_ref, card, "a coupling names no inductor");
                }
                for (index, first) in found.iter().enumerate() {
                    for second in found.iter().skip(index + 1) {
                        let kind = PartKind::Coupling {
                            inductors: [*first, *second],
                            factor: value,
                        };
                        self.add(work, instance, card_ref, card, None, kind, factor.range);
                    }
                }
            }
            CardKind::CurrentControlled { sense, gain, .. } => {
                let value = self.value(work, instance, card_ref.file, *gain);
                let part = self.find(work, instance, card_ref.file, *sense, sensed, "a V source");
                let (Some(value), Some(part), &[p, n]) = (value, part, nodes) else {
                    self.gap(work, card_ref, card, "a controlled source cannot be placed");
                    return;
                };
                let kind = if card.letter == 'f' {
                    PartKind::Cccs {
                        nodes: [p, n],
                        sense: Sense(part),
                        gain: value,
                    }
                } else {
                    PartKind::Ccvs {
                        nodes: [p, n],
                        sense: Sense(part),
                        ohm: value / m,
                    }
                };
                self.add(work, instance, card_ref, card, None, kind, gain.range);
            }
            _ => {}
        }
    }

    /// A V source or inductor by name: in this scope, or by path from here.
    fn find(
        &self,
        work: &mut Work,
        instance: &Instance,
        file: FileId,
        word: Word,
        sensed: &HashMap<String, PartId>,
        expected: &'static str,
    ) -> Option<PartId> {
        let name = self.program.text(file, word.range);
        let local = sensed.get(&name.to_ascii_lowercase()).copied();
        let found = local.or_else(|| work.flat.circuit.find_part(&join(&instance.path, name)));
        let fits = found.filter(|id| {
            let kind = work.flat.circuit.part(*id).map(|part| &part.kind);
            match expected {
                "an inductor" => matches!(kind, Some(PartKind::Inductor { .. })),
                _ => matches!(kind, Some(PartKind::VoltageSource { .. })),
            }
        });
        if fits.is_none() {
            work.flat.issues.push(Issue {
                kind: IssueKind::UnknownPart {
                    name: name.to_owned(),
                    expected,
                },
                span: Span::new(file, word.range),
                other: None,
            });
        }
        fits
    }

    fn stand_in(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        nodes: &[NodeRef],
        mark: &DeviceMark,
    ) {
        let own = self.multiplier(work, instance, card_ref, card);
        let m = instance.multiplier * own;
        let path = join(
            &instance.path,
            self.program.text(card_ref.file, card.name.range),
        );
        if own > 1.0 {
            let span = Span::new(card_ref.file, card.name.range);
            work.flat.multiplied.push((path.clone(), span, own));
        }
        let flat = &mut work.flat;
        let span = Span::new(card_ref.file, card.name.range);
        let mut inner = |name: &str| {
            let id = NodeId(flat.circuit.nodes.len() as u32);
            flat.circuit.nodes.push(Node {
                name: join(&path, name),
            });
            flat.map.nodes.push(span);
            NodeRef::Node(id)
        };
        match stand_in(mark, nodes, &mut inner) {
            Ok(parts) => {
                for part in parts {
                    let kind = scaled(part.kind, m);
                    self.add(
                        work,
                        instance,
                        card_ref,
                        card,
                        Some(part.name),
                        kind,
                        TextRange::default(),
                    );
                }
            }
            Err(message) => {
                let kind = IssueKind::BadMark {
                    message,
                    nearest: None,
                };
                work.flat.issues.push(Issue {
                    kind,
                    span: mark.target.span,
                    other: Some(span),
                });
                self.gap(
                    work,
                    card_ref,
                    card,
                    "the stand-in of a device cannot be built",
                );
            }
        }
    }

    /// Reports an instance of a subcircuit that is not defined, unless a device mark stands in
    /// for it. Such a card adds nothing, not even its nodes.
    fn is_undefined(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        subcircuit: Word,
    ) -> bool {
        let program = self.program;
        let own = program
            .text(card_ref.file, card.name.range)
            .to_ascii_lowercase();
        let name = program.text(card_ref.file, subcircuit.range);
        let known = program.find_subcircuit(instance.scope, &Folded::new(name));
        if known.is_some() || instance.marks.iter().any(|(target, _)| *target == own) {
            return false;
        }
        let known: Vec<&str> = program
            .outward(instance.scope)
            .flat_map(|scope| scope.subcircuits.keys().map(Folded::as_str))
            .collect();
        let kind = IssueKind::UnknownSubcircuit {
            name: name.to_owned(),
            nearest: nearest(name, known).map(str::to_owned),
        };
        work.issue(kind, Span::new(card_ref.file, subcircuit.range), None);
        let reason = format!("the subcircuit `{name}` is not defined");
        self.gap(work, card_ref, card, &reason);
        true
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

    /// The instance's own parameter values, and its multiplier.
    fn overrides(
        &self,
        work: &mut Work,
        outer: &Instance,
        card_ref: CardRef,
        card: &Card,
        target: ScopeId,
    ) -> (HashMap<Folded, f64>, f64) {
        let mut values = HashMap::new();
        let mut multiplier = 1.0;
        let scope = self.program.scope(target);
        for param in &card.params {
            let key = self.program.text(card_ref.file, param.key.range);
            let folded = Folded::new(key);
            let known = scope.is_some_and(|scope| scope.params.contains_key(&folded));
            let is_multiplier = key.eq_ignore_ascii_case("m") && !known;
            if !known && !is_multiplier {
                let names = scope.map(|scope| scope.param_order.iter().map(Folded::as_str));
                let near = nearest(key, names.into_iter().flatten()).map(str::to_owned);
                let kind = IssueKind::UnknownParameter {
                    name: key.to_owned(),
                    nearest: near,
                };
                let span = Span::new(card_ref.file, param.key.range);
                work.issue(kind, span, self.scope_span(target));
                continue;
            }
            let Some(value) = self.value(work, outer, card_ref.file, param.value) else {
                continue;
            };
            if is_multiplier {
                multiplier = if value > 0.0 { value } else { 1.0 };
            } else {
                values.insert(folded, value);
            }
        }
        (values, multiplier)
    }

    /// `m=` of a card that is no instance.
    fn multiplier(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
    ) -> f64 {
        let param = card.params.iter().find(|param| {
            self.program
                .text(card_ref.file, param.key.range)
                .eq_ignore_ascii_case("m")
        });
        param
            .and_then(|param| self.value(work, instance, card_ref.file, param.value))
            .filter(|m| *m > 0.0)
            .unwrap_or(1.0)
    }

    fn value(
        &self,
        work: &mut Work,
        instance: &Instance,
        file: FileId,
        value: Value,
    ) -> Option<f64> {
        instance
            .env
            .value(self.program, file, value, &mut work.flat.issues)
    }

    fn check_model(&self, work: &mut Work, instance: &Instance, card_ref: CardRef, model: Word) {
        let name = self.program.text(card_ref.file, model.range);
        if self
            .program
            .find_model(instance.scope, &Folded::new(name))
            .is_some()
        {
            return;
        }
        let known: Vec<&str> = self
            .program
            .outward(instance.scope)
            .flat_map(|scope| scope.models.keys().map(Folded::as_str))
            .collect();
        let kind = IssueKind::UnknownModel {
            name: name.to_owned(),
            nearest: nearest(name, known).map(str::to_owned),
        };
        work.issue(kind, Span::new(card_ref.file, model.range), None);
    }

    fn gap(&self, work: &mut Work, card_ref: CardRef, card: &Card, reason: &str) {
        let name = self.program.text(card_ref.file, card.name.range);
        work.flat.gaps.push(Gap {
            reason: format!("{reason} (`{name}`)"),
            span: Span::new(card_ref.file, card.name.range),
        });
    }

    #[allow(clippy::too_many_arguments)] // one place where a part meets its origin
    fn add(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        suffix: Option<&str>,
        kind: PartKind,
        value: TextRange,
    ) -> PartId {
        let name = self.program.text(card_ref.file, card.name.range);
        let mut full = join(&instance.path, name);
        if let Some(suffix) = suffix {
            full.push('.');
            full.push_str(suffix);
        }
        let id = PartId(work.flat.circuit.parts.len() as u32);
        work.flat.circuit.parts.push(Part {
            name: full,
            kind,
            role: if suffix.is_some() {
                PartRole::Device
            } else {
                PartRole::Card
            },
        });
        work.flat.map.parts.push(Origin {
            file: card_ref.file,
            name: card.name.range,
            value,
            instance: instance.id,
        });
        id
    }
}

/// The flat circuit in the making.
struct Work {
    flat: Flat,
    globals: Vec<Option<NodeRef>>,
    stack: Vec<ScopeId>,
    budget: usize,
    cut: bool,
}

impl Work {
    fn add_node(&mut self, name: String, span: Span) -> NodeRef {
        let id = NodeId(self.flat.circuit.nodes.len() as u32);
        self.flat.circuit.nodes.push(Node { name });
        self.flat.map.nodes.push(span);
        NodeRef::Node(id)
    }

    fn issue(&mut self, kind: IssueKind, span: Span, other: Option<Span>) {
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
fn scaled(kind: PartKind, m: f64) -> PartKind {
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
        } => PartKind::Vccs {
            nodes,
            control,
            siemens: siemens * m,
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

//! The nodes of a scope, looked up once: each card's node words lead to ground, to a global node
//! or to a node of the scope, and an instance only fills in what its pins are connected to.

use super::flatten::{Flattener, Instance, Work, card_of, join};
use super::names::Folded;
use super::program::ScopeId;
use crate::circuit::{NodeRef, is_ground};
use crate::syntax::CardKind;
use crate::text::Span;
use std::collections::HashMap;
use std::rc::Rc;

/// Where a node word of a card leads.
#[derive(Clone, Copy)]
pub(super) enum Slot {
    Ground,
    Global(u32),
    Local(u32),
}

/// A scope's nodes and cards with node words looked up once.
pub(super) struct ScopePlan {
    pub(super) names: Vec<(String, Span)>,
    pub(super) pins: Vec<Slot>,
    pub(super) cards: Vec<Vec<Slot>>,
    pub(super) refers: bool,
}

impl Flattener<'_> {
    pub(super) fn plan(&mut self, scope: ScopeId) -> Rc<ScopePlan> {
        if let Some(plan) = self.plans.get(&scope) {
            return Rc::clone(plan);
        }
        let plan = Rc::new(self.make_plan(scope));
        self.plans.insert(scope, Rc::clone(&plan));
        plan
    }
    pub(super) fn make_plan(&mut self, id: ScopeId) -> ScopePlan {
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
    pub(super) fn slot(
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
    pub(super) fn node(
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
    pub(super) fn nodes(
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
}

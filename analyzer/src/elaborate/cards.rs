//! Single cards to parts: values, multipliers, what a card refers to, stand-ins.

use super::device::stand_in;
use super::flatten::{Flattener, Gap, Instance, Work, join, scaled};
use super::issue::{Issue, IssueKind};
use super::marks::DeviceMark;
use super::names::{Folded, nearest};
use super::program::{CardRef, ScopeId};
use super::source_map::Origin;
use crate::circuit::{Node, NodeId, NodeRef, Part, PartId, PartKind, PartRole, Sense};
use crate::syntax::{Card, CardKind, LineDelay, Value, Word};
use crate::text::{FileId, Span, TextRange};
use crate::units::parse_number;
use std::collections::HashMap;

impl Flattener<'_> {
    /// R C L V I E G.
    pub(super) fn element(
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
                delay_s: 0.0,
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

    /// T: an ideal line.
    #[allow(clippy::too_many_arguments)] // a card with its place, its nodes and its values
    pub(super) fn line(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        nodes: &[NodeRef],
        z0: Value,
        delay: LineDelay,
    ) {
        let mut read = |value: Value| self.value(work, instance, card_ref.file, value);
        let ohm = read(z0);
        let delay_s = match delay {
            LineDelay::PerLength { delay, length } => read(delay)
                .zip(length.map_or(Some(1.0), &mut read))
                .map(|(t, l)| t * l),
            LineDelay::Wavelengths { hz, wavelengths } => read(hz)
                .zip(wavelengths.map_or(Some(0.25), &mut read))
                .map(|(hz, n)| n / hz),
        };
        let m = instance.multiplier * self.multiplier(work, instance, card_ref, card);
        let (Some(ohm), Some(delay_s), &[a, b, c, d]) = (ohm, delay_s, nodes) else {
            self.gap(work, card_ref, card, "the value of a card is not known");
            return;
        };
        let possible = ohm > 0.0 && ohm.is_finite() && delay_s >= 0.0 && delay_s.is_finite();
        if !possible {
            let reason = "a line needs an impedance above zero and a delay that is not negative";
            self.gap(work, card_ref, card, reason);
            return;
        }
        let kind = PartKind::Line {
            nodes: [a, b, c, d],
            ohm: ohm / m,
            delay_s,
        };
        self.add(work, instance, card_ref, card, None, kind, z0.range);
    }

    /// K F H: cards that name other parts.
    pub(super) fn referring_card(
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
                        gain: value * m,
                    }
                } else {
                    PartKind::Ccvs {
                        nodes: [p, n],
                        sense: Sense(part),
                        ohm: value,
                    }
                };
                self.add(work, instance, card_ref, card, None, kind, gain.range);
            }
            _ => {}
        }
    }
    /// A V source or inductor by name: in this scope, or by path from here.
    pub(super) fn find(
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
    pub(super) fn stand_in(
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
    pub(super) fn add_not_computed(
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
    /// The instance's own parameter values, and its multiplier.
    pub(super) fn overrides(
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
    pub(super) fn multiplier(
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
    pub(super) fn value(
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
    pub(super) fn check_model(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        model: Word,
    ) {
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
    pub(super) fn gap(&self, work: &mut Work, card_ref: CardRef, card: &Card, reason: &str) {
        let name = self.program.text(card_ref.file, card.name.range);
        work.flat.gaps.push(Gap {
            reason: format!("{reason} (`{name}`)"),
            span: Span::new(card_ref.file, card.name.range),
        });
    }
    #[allow(clippy::too_many_arguments)] // one place where a part meets its origin
    pub(super) fn add(
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
    /// Whether a card adds nothing, not even its nodes: an instance of an undefined subcircuit, or
    /// a card whose value is not known. The reason is recorded.
    pub(super) fn is_left_out(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
    ) -> bool {
        let value = match &card.kind {
            CardKind::Instance { subcircuit, .. } => {
                return self.is_undefined(work, instance, card_ref, card, *subcircuit);
            }
            CardKind::TwoTerminal { value, .. } => *value,
            CardKind::VoltageControlled { gain, .. } => Some(*gain),
            _ => None,
        };
        self.lacks_value(work, instance, card_ref, card, value)
    }

    fn lacks_value(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        value: Option<Value>,
    ) -> bool {
        let Some(value) = value else { return false };
        let text = self.program.text(card_ref.file, value.range);
        // A plain number needs no second look.
        if parse_number(text).is_ok() || self.value(work, instance, card_ref.file, value).is_some()
        {
            return false;
        }
        self.gap(work, card_ref, card, "the value of a card is not known");
        true
    }

    /// Whether an F or H card has its value and its sensing source; if not, it adds nothing.
    pub(super) fn refers_soundly(
        &self,
        work: &mut Work,
        instance: &Instance,
        card_ref: CardRef,
        card: &Card,
        sensed: &HashMap<String, PartId>,
    ) -> bool {
        let CardKind::CurrentControlled { sense, gain, .. } = &card.kind else {
            return true;
        };
        let file = card_ref.file;
        let found = self.find(work, instance, file, *sense, sensed, "a V source");
        if found.is_none() {
            self.gap(work, card_ref, card, "a controlled source cannot be placed");
        }
        let lacks = self.lacks_value(work, instance, card_ref, card, Some(*gain));
        found.is_some() && !lacks
    }

    /// Reports an instance of a subcircuit that is not defined, unless a device mark stands in
    /// for it. Such a card adds nothing, not even its nodes.
    pub(super) fn is_undefined(
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
}

//! `recursive-subcircuit`: a subcircuit that contains itself.

use crate::elaborate::{Folded, IssueKind, ScopeId};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::CardKind;
use crate::text::Span;
use std::collections::{BTreeMap, BTreeSet};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("recursive-subcircuit"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a subcircuit that contains itself",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an `X` card through which a subcircuit contains itself, directly or through others.

## Why it matters
The flat circuit would have no end. The instance is left out, so no clean verdict is given for a
block that holds it.

## Method and source
Instances are followed depth first; a subcircuit that is met inside itself closes a cycle (Tarjan, *SIAM
Journal on Computing* 1, 1972, from memory).

## Limits
Subcircuits that contain each other are one finding, the other cards that close the cycle are beside it.

## Example
```
.subckt cell a
X1 a cell
.ends
```

## Fix
Take the instance out, or let it name the subcircuit that was meant.
";

/// A card that closes a cycle: its place, the subcircuit's name, and where that is defined.
type Closing<'a> = (Span, &'a str, Option<Span>);

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut found: BTreeMap<Option<ScopeId>, Vec<Closing<'_>>> = BTreeMap::new();
    let graph = OnDemand::default();
    for issue in &context.elaborated.issues {
        if let IssueKind::RecursiveSubcircuit { name } = &issue.kind {
            let key = issue.other.and_then(|place| graph.cycle_of(context, place));
            let places = found.entry(key).or_default();
            places.push((issue.span, name, issue.other));
        }
    }
    for (key, places) in found {
        // Without a key nothing is known to belong together.
        let size = if key.is_some() { places.len() } else { 1 };
        for group in places.chunks(size.max(1)) {
            let Some(((span, name, other), rest)) = group.split_first() else {
                continue;
            };
            let finding = RULE
                .finding(*span, format!("subcircuit `{name}` contains itself"))
                .also_maybe(*other, "the subcircuit");
            out.push(rest.iter().fold(finding, |finding, (span, _, _)| {
                finding.also(*span, "the cycle is closed here too")
            }));
        }
    }
}

/// Which subcircuits hold which, worked out when it is first asked for.
#[derive(Default)]
struct OnDemand {
    inside: std::cell::OnceCell<Vec<BTreeSet<ScopeId>>>,
}

impl OnDemand {
    /// The first of all subcircuits that contain the one named at `place` and are contained in
    /// it: the same for all members of a cycle.
    fn cycle_of(&self, context: &TextContext<'_>, place: Span) -> Option<ScopeId> {
        let start = context.program.scopes.iter().position(|scope| {
            let name = scope.name.as_ref();
            name.is_some_and(|(_, span)| *span == place)
        })?;
        let start = ScopeId(start as u32);
        let inside = self.inside.get_or_init(|| direct_targets(context));
        let mut around = vec![BTreeSet::new(); inside.len()];
        for (outer, targets) in inside.iter().enumerate() {
            for target in targets {
                if let Some(set) = around.get_mut(target.0 as usize) {
                    set.insert(ScopeId(outer as u32));
                }
            }
        }
        let below = reached(inside, start);
        let above = reached(&around, start);
        below.intersection(&above).next().copied()
    }
}

fn direct_targets(context: &TextContext<'_>) -> Vec<BTreeSet<ScopeId>> {
    let program = context.program;
    let targets = |(index, scope): (usize, &crate::elaborate::Scope)| {
        let of_card = |card_ref: &crate::elaborate::CardRef| {
            let CardKind::Instance { subcircuit, .. } = &context.card(*card_ref)?.kind else {
                return None;
            };
            let name = Folded::new(program.text(card_ref.file, subcircuit.range));
            program.find_subcircuit(ScopeId(index as u32), &name)
        };
        scope.cards.iter().filter_map(of_card).collect()
    };
    program.scopes.iter().enumerate().map(targets).collect()
}

/// Everything that `start` leads to, itself included.
fn reached(edges: &[BTreeSet<ScopeId>], start: ScopeId) -> BTreeSet<ScopeId> {
    let mut seen = BTreeSet::from([start]);
    let mut open = vec![start];
    while let Some(at) = open.pop() {
        for next in edges.get(at.0 as usize).into_iter().flatten() {
            if seen.insert(*next) {
                open.push(*next);
            }
        }
    }
    seen
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
X1 a cell
R1 a 0 1k
.subckt cell a
R1 a 0 1k
X1 a cell
     ^^^^ recursive-subcircuit
.ends
",
        );
        check(
            "\
title
X1 a outer
R1 a 0 1k
.subckt outer a
R1 a 0 1k
X1 a inner
.ends
.subckt inner a
R1 a 0 1k
X1 a OUTER
     ^^^^^ recursive-subcircuit
.ends
",
        );
    }

    #[test]
    fn one_cycle_is_one_finding_wherever_it_is_entered() {
        let text = "title\nX1 a one\nX2 a two\n.subckt one a\nX1 a two\nR1 a 0 1\n.ends\n.subckt two a\nX1 a one\nR1 a 0 1\n.ends\n";
        let found = findings(text, "recursive-subcircuit");
        assert_eq!(found.len(), 1);
        assert_eq!(found[0].related.len(), 2);
    }

    #[test]
    fn near_misses() {
        check(
            "title\nX1 a cell\nR1 a 0 1k\n.subckt cell a\nX1 a cell\n.subckt cell a\nR1 a 0 1k\n.ends\n.ends\n",
        );
        check(
            "title\nX1 a one\nX2 a two\n.subckt one a\nX1 a two\n.ends\n.subckt two a\nR1 a 0 1\n.ends\n",
        );
    }
}

//! `unused-subcircuit`: a subcircuit that nothing uses.

use super::usage::root_to_tell;
use crate::elaborate::{Folded, Program, ScopeId};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::words::loose_names;
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::CardKind;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unused-subcircuit"),
    family: Family::Names,
    severity: Severity::Info,
    summary: "a subcircuit that no card instantiates and that holds no block",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Points out a subcircuit that no `X` card instantiates and in which no block is marked.

## Why it matters
It is not part of any circuit, so nothing in it is screened. Often the instance that was meant bears
another name.

## Method and source
Every `X` card is looked up as for the flat circuit (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
Only subcircuits written in the netlist itself are told, not those of files it includes, and only when the
netlist has cards outside of subcircuits: a library is a collection of things that are used elsewhere.
Nothing is told while an included file is missing or a part of the netlist is encrypted. A subcircuit that is
used only in another unused one counts as used.

## Example
```
X1 in out amp
.subckt amp in out
.ends
.subckt amp_old in out
.ends
```

## Fix
Delete it, instantiate it, or mark a block in it.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let Some(root) = root_to_tell(context) else {
        return;
    };
    let program = context.program;
    let used = used_scopes(context);
    let marked: HashSet<ScopeId> = context.elaborated.blocks.iter().map(|b| b.scope).collect();
    let loose = loose_names(context);
    for (index, scope) in program.scopes.iter().enumerate() {
        let id = ScopeId(index as u32);
        let Some((name, span)) = &scope.name else {
            continue;
        };
        let in_use = used.contains(&id) || marked.contains(&id);
        let mentioned = loose.contains(&name.to_ascii_lowercase());
        if span.file == root && !in_use && !mentioned && is_current(program, id) {
            let message = format!("subcircuit `{name}` is never instantiated and holds no block");
            out.push(RULE.finding(*span, message));
        }
    }
}

/// Whether a later definition of the same name has not replaced it.
fn is_current(program: &Program, id: ScopeId) -> bool {
    let current = || {
        let scope = program.scope(id)?;
        let (name, _) = scope.name.as_ref()?;
        let parent = program.scope(scope.parent?)?;
        parent.subcircuits.get(&Folded::new(name)).copied()
    };
    current() == Some(id)
}

/// Subcircuits that a card outside of them instantiates.
fn used_scopes(context: &TextContext<'_>) -> HashSet<ScopeId> {
    let program = context.program;
    let mut used = HashSet::new();
    for (index, scope) in program.scopes.iter().enumerate() {
        let from = ScopeId(index as u32);
        for card_ref in &scope.cards {
            let Some(card) = context.card(*card_ref) else {
                continue;
            };
            let CardKind::Instance { subcircuit, .. } = &card.kind else {
                continue;
            };
            let name = Folded::new(program.text(card_ref.file, subcircuit.range));
            used.extend(
                program
                    .find_subcircuit(from, &name)
                    .filter(|id| *id != from),
            );
        }
    }
    used
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            "\
title
X1 a amp
R1 a 0 1k
.subckt amp a
R1 a 0 1k
.ends
.subckt amp_old a
        ^^^^^^^ unused-subcircuit
R1 a 0 1k
.ends
",
        );
        check(
            "\
title
R1 a 0 1k
C1 a 0 1p
.subckt outer a
        ^^^^^ unused-subcircuit
X1 a inner
.subckt inner a
R1 a 0 1k
.ends
.ends
",
        );
    }

    #[test]
    fn near_misses() {
        for text in [
            "title\nX1 a AMP\nR1 a 0 1k\n.subckt amp a\nR1 a 0 1k\n.ends\n",
            "title\nR1 a 0 1k\nC1 a 0 1p\n.subckt amp a\n*~ block amp in=a\nR1 a 0 1k\n.ends\n",
            "title\n.subckt amp a\nR1 a 0 1k\n.ends\n",
            "title\nX1 a = amp\nR1 a 0 1k\n.subckt amp a\nR1 a 0 1k\n.ends\n",
        ] {
            let found = crate::rules::testing::findings(text, "unused-subcircuit");
            assert!(found.is_empty(), "{text}: {found:?}");
        }
    }
}

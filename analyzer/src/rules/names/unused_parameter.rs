//! `unused-parameter`: a parameter that nothing uses.

use super::usage::root_to_tell;
use crate::elaborate::{Folded, Program, ScopeId};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::words::{loose_names, names_in, value_names};
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unused-parameter"),
    family: Family::Names,
    severity: Severity::Info,
    summary: "a parameter that no value uses",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Points out a parameter of a `.param` line or a subcircuit header that no value, expression or mark uses.

## Why it matters
A change of it changes nothing. Often the value that was meant to follow it is a number.

## Method and source
Every name in every value is looked up as for the flat circuit: in its own scope and outward (IBIS-ISS
1.0, IBIS Open Forum, 2011).

## Limits
Only parameters written in the netlist itself are told, not those of files it includes, and only when the
netlist has cards outside of subcircuits. Nothing is told while an included file is missing or a part of the
netlist is encrypted. Functions are not told. A name that stands in the line of a simulator or
in a card that cannot be read counts as a use; so does the use by another unused parameter.

## Example
```
.param rload=50 rlaod=75
R1 out 0 rload
```

## Fix
Delete it, or let the value name it.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let Some(root) = root_to_tell(context) else {
        return;
    };
    let program = context.program;
    if program.scopes.iter().all(|scope| scope.params.is_empty()) {
        return;
    }
    let used = used_parameters(context);
    let loose = loose_names(context);
    for (index, scope) in program.scopes.iter().enumerate() {
        let id = ScopeId(index as u32);
        for name in &scope.param_order {
            let Some(definition) = scope.params.get(name) else {
                continue;
            };
            let function = definition.def.arguments.is_some();
            let quiet = definition.file != root || function || loose.contains(name.as_str());
            if !quiet && !used.contains(&(id, name.clone())) {
                let span = Span::new(root, definition.def.name.range);
                let message = format!("parameter `{}` is never used", context.text(span));
                out.push(RULE.finding(span, message));
            }
        }
    }
}

/// Parameters that a card, a mark or another definition names.
fn used_parameters(context: &TextContext<'_>) -> HashSet<(ScopeId, Folded)> {
    let program = context.program;
    let mut used = HashSet::new();
    for (index, scope) in program.scopes.iter().enumerate() {
        let from = ScopeId(index as u32);
        let mut names = Vec::new();
        for card in scope.cards.iter().chain(&scope.marks) {
            names.extend(value_names(context, *card));
        }
        for name in &scope.param_order {
            if let Some(definition) = scope.params.get(name) {
                let text = program.text(definition.file, definition.def.value.range);
                names.extend(names_in(text));
            }
        }
        for name in names {
            let name = Folded::new(&name);
            if let Some(owner) = owner(program, from, &name) {
                used.insert((owner, name));
            }
        }
    }
    used
}

/// The scope that defines a name, from here outward.
fn owner(program: &Program, from: ScopeId, name: &Folded) -> Option<ScopeId> {
    let mut next = Some(from);
    while let Some(id) = next {
        let scope = program.scope(id)?;
        if scope.params.contains_key(name) {
            return Some(id);
        }
        next = scope.parent;
    }
    None
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
.param rload=50 rlaod=75
                ^^^^^ unused-parameter
R1 a 0 rload
C1 a 0 1p
",
        );
        check(
            "\
title
.param w=2
X1 a cell w=w
R1 a w 1k
R2 w 0 1k
.subckt cell a w=1 l=1
               ^ unused-parameter
                   ^ unused-parameter
C1 a 0 1p
.ends
",
        );
    }

    #[test]
    fn near_misses() {
        for text in [
            "title\n.param a=1 b='2*A'\nR1 n 0 'max(1, B)*1k'\nC1 n 0 1p\n",
            "title\n.param f=1k v=2\nV1 n 0 sin(0 v f)\nR1 n 0 1k\n",
            "title\n.param stop=1u\nR1 n 0 1k\nC1 n 0 1p\n.tran 1n 'stop/2'\n",
            "title\n.param z=50\n*~ block b in=n z0=z\nR1 n 0 1k\n",
            "title\n.param is=1f\nD1 n 0 dx\nR1 n 0 1k\n.model dx d is=is\n",
            "title\n.param sz=3\nX1 n cell w='sz*2'\nR1 n 0 1k\n.subckt cell a w=1\nC1 a 0 'w*1p'\n.ends\n",
            "title\n.param u=3\n.subckt cell a\nR1 a 0 1\n.ends\n",
        ] {
            let found = findings(text, "unused-parameter");
            assert!(found.is_empty(), "{text}: {found:?}");
        }
    }
}

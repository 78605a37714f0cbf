//! `parameter-cycle`: a parameter that depends on itself.

use crate::elaborate::{Folded, Issue, IssueKind, Scope};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("parameter-cycle"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a parameter that depends on itself",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a parameter whose definition leads back to itself, and names the definitions on the way.

## Why it matters
None of the parameters in the cycle has a value, so every part that uses one of them is missing from the
circuit.

## Method and source
Definitions are followed depth first from the values that use them (Tarjan, *SIAM Journal on Computing* 1,
1972, from memory).

## Limits
Each cycle is told once, at the definition that was reached first. Definitions that nothing uses are
not followed.

## Example
```
.param w='2*l' l='w/2'
```

## Fix
Give one of the parameters a value of its own.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told: HashSet<(usize, Vec<String>)> = HashSet::new();
    for issue in &context.elaborated.issues {
        let IssueKind::ParameterCycle { names } = &issue.kind else {
            continue;
        };
        // A cycle stays in one scope: what is further out cannot look in.
        let Some((number, scope)) = owner(context, issue, names) else {
            continue;
        };
        let mut key = names.clone();
        key.sort();
        if told.insert((number, key)) {
            out.push(finding(context, issue, names, scope));
        }
    }
}

fn owner<'a>(
    context: &'a TextContext<'_>,
    issue: &Issue,
    names: &[String],
) -> Option<(usize, &'a Scope)> {
    let first = Folded::new(names.first()?);
    let mut scopes = context.program.scopes.iter().enumerate();
    scopes.find(|(_, scope)| definition(scope, &first) == Some(issue.span))
}

fn definition(scope: &Scope, name: &Folded) -> Option<Span> {
    let found = scope.params.get(name)?;
    Some(Span::new(found.file, found.def.name.range))
}

fn finding(context: &TextContext<'_>, issue: &Issue, names: &[String], scope: &Scope) -> Finding {
    let places: Vec<Span> = names
        .iter()
        .filter_map(|name| definition(scope, &Folded::new(name)))
        .collect();
    let mut chain: Vec<String> = places
        .iter()
        .map(|place| format!("`{}`", context.text(*place)))
        .collect();
    let name = context.text(issue.span);
    chain.push(format!("`{name}`"));
    let message = format!(
        "parameter `{name}` depends on itself: {}",
        chain.join(" on ")
    );
    let finding = RULE.finding(issue.span, message);
    places
        .into_iter()
        .skip(1)
        .fold(finding, |finding, place| finding.also(place, "on the way"))
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
.param w='2*len' len='w/2'
       ^ parameter-cycle
R1 a 0 'w'
C1 a 0 1p
",
        );
        check(
            "\
title
X1 a cell
R1 a 0 1k
.subckt cell a
.param p=p+1
       ^ parameter-cycle
C1 a 0 p
.ends
",
        );
    }

    #[test]
    fn one_cycle_is_told_once_though_it_is_entered_twice() {
        let text = "title\n.param W='2*len' len='W/2'\nR1 a 0 w\nC1 a 0 1p\n.subckt cell a\nC1 a 0 len\n.ends\n";
        let found = findings(text, "parameter-cycle");
        assert_eq!(found.len(), 1);
        assert_eq!(
            found[0].message,
            "parameter `W` depends on itself: `W` on `len` on `W`"
        );
    }

    #[test]
    fn near_misses() {
        check("title\n.param a=b b=c c=1k\nR1 n 0 'a+b+c'\nC1 n 0 1p\n");
        check(
            "title\n.param w=1k\nX1 a cell w='2*w'\nC1 a 0 1p\n.subckt cell a w=1\nR1 a 0 w\n.ends\n",
        );
    }
}

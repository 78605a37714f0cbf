//! `pin-count`: an instance gives another number of nodes than its subcircuit has pins.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("pin-count"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "an instance gives another number of nodes than its subcircuit has pins",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Compares the nodes of every `X` card with the pins of its subcircuit.

## Why it matters
The instance is connected otherwise than it reads.

## Method and source
Nodes are matched with pins in order (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
None.

## Example
```
X1 in out buffer
```

## Fix
Give as many nodes as the subcircuit has pins.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::PinCount {
            given,
            wanted,
            name,
        } = &issue.kind
        else {
            continue;
        };
        let message = format!("{given} nodes are given, subcircuit `{name}` has {wanted} pins");
        out.push(
            RULE.finding(issue.span, message)
                .also_maybe(issue.other, "the subcircuit"),
        );
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
X1 a s
^^ pin-count
R1 a 0 1
.subckt s p q
R1 p q 1
.ends
"#,
        );
        check(
            r#"title
X1 a 0 0 s
^^ pin-count
R1 a 0 1
.subckt s p q
R1 p q 1
.ends
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
X1 a 0 s
R1 a 0 1
.subckt s p q
R1 p q 1
.ends
"#,
        );
        check(
            r#"title
X1 a 0 s r=2
R1 a 0 1
.subckt s p q r=1
R1 p q r
.ends
"#,
        );
    }
}

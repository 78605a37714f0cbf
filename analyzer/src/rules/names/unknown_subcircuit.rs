//! `unknown-subcircuit`: an instance of a subcircuit that is not defined.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-subcircuit"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "an instance of a subcircuit that is not defined",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an `X` card whose last plain word names no subcircuit that is visible where the card stands.

## Why it matters
Everything inside the instance is missing from the circuit, so no clean verdict is given for a block
that holds it.

## Method and source
Subcircuits are looked up in the scope of the card and outward (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
None.

## Example
```
X1 in out 0 bufer
```

## Fix
Correct the name, include the file that defines it, or stand in for the instance by `*~ device`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownSubcircuit { name, nearest } = &issue.kind else {
            continue;
        };
        let message = format!("no subcircuit `{name}` is defined{}", did_you_mean(nearest));
        let mut finding = RULE.finding(issue.span, message);
        if let Some(nearest) = nearest {
            finding = finding.fix(format!("write `{nearest}`"), issue.span, nearest.clone());
        }
        out.push(finding);
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            "\
title
X1 a 0 bufer
       ^^^^^ unknown-subcircuit
R1 a 0 1k
.subckt buffer a b
R1 a b 1k
.ends
",
        );
    }

    #[test]
    fn near_misses() {
        check("title\nX1 a 0 BUFFER\nR1 a 0 1k\n.subckt buffer a b\nR1 a b 1k\n.ends\n");
    }
}

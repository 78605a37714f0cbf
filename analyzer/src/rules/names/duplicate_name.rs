//! `duplicate-name`: two things of one kind bear one name.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("duplicate-name"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "two things of one kind bear one name",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports the second part, subcircuit, model or block of a name in one scope.

## Why it matters
Other cards and marks that use the name mean one of the two.

## Method and source
Names have no case (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
Parameters may be defined anew; the last definition counts.

## Example
```
R1 a 0 50
R1 b 0 75
```

## Fix
Rename one of them.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::DuplicateName { what, name } = &issue.kind else {
            continue;
        };
        let message = format!("{what} `{name}` is defined twice");
        out.push(
            RULE.finding(issue.span, message)
                .also_maybe(issue.other, "first defined here"),
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
R1 a 0 50
r1 a 0 75
^^ duplicate-name
"#,
        );
        check(
            r#"title
*~ block amp in=a
*~ block AMP in=a
         ^^^ duplicate-name
R1 a 0 1k
R2 a 0 1k
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
R1 a 0 50
C1 a 0 1p
"#,
        );
        check(
            r#"title
R1 a 0 50
X1 a s
.subckt s p
R1 p 0 1
.ends
"#,
        );
    }
}

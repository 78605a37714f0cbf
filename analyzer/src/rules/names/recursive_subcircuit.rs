//! `recursive-subcircuit`: a subcircuit contains itself.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("recursive-subcircuit"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a subcircuit contains itself",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an instance of a subcircuit inside itself, directly or through others.

## Why it matters
The circuit would be infinite; the inner instance is left out.

## Method and source
The chain of instances is followed.

## Limits
None.

## Example
```
.subckt s a
X1 a s
.ends
```

## Fix
Name another subcircuit.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::RecursiveSubcircuit { name } = &issue.kind else {
            continue;
        };
        let message = format!("subcircuit `{name}` contains itself");
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
R1 a 0 1
.subckt s p
R1 p 0 1
X1 p s
     ^ recursive-subcircuit
.ends
"#,
        );
        check(
            r#"title
X1 a s
R1 a 0 1
.subckt s p
R1 p 0 1
X1 p t
.ends
.subckt t p
R1 p 0 1
X1 p s
     ^ recursive-subcircuit
.ends
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
X1 a s
X2 a s
R1 a 0 1
.subckt s p
R1 p 0 1
.ends
"#,
        );
        check(
            r#"title
X1 a s
R1 a 0 1
.subckt s p
X1 p t
.ends
.subckt t p
R1 p 0 1
.ends
"#,
        );
    }
}

//! `parameter-cycle`: a parameter depends on itself.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("parameter-cycle"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a parameter depends on itself",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports parameters whose definitions lead back to themselves.

## Why it matters
None of them has a value.

## Method and source
Definitions are followed depth first.

## Limits
One cycle is told once.

## Example
```
.param a='b' b='a'
```

## Fix
Give one of them a number.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::ParameterCycle { names } = &issue.kind else {
            continue;
        };
        let message = format!("parameter depends on itself: {}", names.join(", "));
        out.push(RULE.finding(issue.span, message));
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
.param aa='bb+1' bb='aa'
       ^^ parameter-cycle
R1 n 0 aa
R2 n 0 1
"#,
        );
        check(
            r#"title
.param cc='cc'
       ^^ parameter-cycle
R1 n 0 cc
R2 n 0 1
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
.param aa='bb+1' bb=2
R1 n 0 aa
R2 n 0 1
"#,
        );
        check(
            r#"title
.param r=2
X1 n s r='r'
R2 n 0 1
.subckt s n r=1
R1 n 0 r
.ends
"#,
        );
    }
}

//! `value-not-finite`: a value that is no finite number.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("value-not-finite"),
    family: Family::Values,
    severity: Severity::Error,
    summary: "a value that is no finite number",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an expression whose value is infinite or not a number.

## Why it matters
The part is missing from the circuit.

## Method and source
Double-precision arithmetic.

## Limits
None.

## Example
```
R1 a 0 '1/0'
```

## Fix
Correct the expression.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::ValueNotFinite { text } = &issue.kind else {
            continue;
        };
        let message = format!("`{text}` has no finite value");
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
R1 a 0 '1/0'
       ^^^^^ value-not-finite
R2 a 0 1
R3 a 0 1
"#,
        );
        check(
            r#"title
.param x='sqrt(-1)'
R1 a 0 x
       ^ value-not-finite
R2 a 0 1
R3 a 0 1
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
R1 a 0 '1/2'
R2 a 0 1
"#,
        );
        check(
            r#"title
R1 a 0 'sqrt(4)'
R2 a 0 1
"#,
        );
    }
}

//! `unknown-part`: a card names a sensing source or inductor that is not there.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-part"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a card names a sensing source or inductor that is not there",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an F or H card whose sensed V source, or a K card whose inductor, is not there.

## Why it matters
The coupling or the source is missing from the circuit.

## Method and source
Parts are looked up in the scope of the card, by path below it (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
None.

## Example
```
K1 L1 L9 0.5
```

## Fix
Correct the name.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownPart { name, expected } = &issue.kind else {
            continue;
        };
        let message = format!(
            "`{name}` is no {}",
            expected.trim_start_matches("an ").trim_start_matches("a ")
        );
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
L1 a 0 1n
R1 a 0 1
K1 L1 L9 0.5
      ^^ unknown-part
"#,
        );
        check(
            r#"title
R1 a 0 1
R2 a 0 1
F1 a 0 R1 2
       ^^ unknown-part
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
L1 a 0 1n
L2 a 0 1n
R1 a 0 1
K1 l1 L2 0.5
"#,
        );
        check(
            r#"title
V1 a b 0
R1 a 0 1
R2 b 0 1
F1 a 0 v1 0.1
"#,
        );
    }
}

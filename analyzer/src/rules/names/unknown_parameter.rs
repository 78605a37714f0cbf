//! `unknown-parameter`: a parameter that is not defined.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-parameter"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a parameter that is not defined",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a name without a value in an expression or value field, and an instance parameter that the subcircuit does not have.

## Why it matters
The part has no value, so it is missing from the circuit.

## Method and source
Parameters are looked up in the instance, the subcircuit and outward (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
None.

## Example
```
R1 a 0 'rlaod*2'
```

## Fix
Correct the name, or define it by `.param`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownParameter { name, nearest } = &issue.kind else {
            continue;
        };
        let message = format!("no parameter `{name}` is defined{}", did_you_mean(nearest));
        let mut finding = RULE
            .finding(issue.span, message)
            .also_maybe(issue.other, "the subcircuit");
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
            r#"title
.param rload=50
R1 a 0 'rlaod*2'
        ^^^^^ unknown-parameter
R2 a 0 rload
"#,
        );
        check(
            r#"title
X1 a s q=2
       ^ unknown-parameter
R2 a 0 1
.subckt s a r=1
R1 a 0 r
.ends
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
.param rload=50
R1 a 0 '2*RLOAD'
R2 a 0 1
"#,
        );
        check(
            r#"title
X1 a s r=2 m=2
R2 a 0 1
.subckt s a r=1
R1 a 0 r
.ends
"#,
        );
    }
}

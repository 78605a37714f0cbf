//! `unknown-model`: a device or part names a model that is not defined.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-model"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a device or part names a model that is not defined",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a card that names a model which no `.model` line in its scope or outward defines.

## Why it matters
The device has no values, so nothing certain can be said of a block that holds it.

## Method and source
Models are looked up in the scope of the card and outward (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
A device with a `*~ device` stand-in needs no model and is not reported.

## Example
```
Q1 c b 0 qfats
```

## Fix
Correct the name, include the file that defines it, or stand in for the device by `*~ device`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownModel { name, nearest } = &issue.kind else {
            continue;
        };
        let message = format!("no model `{name}` is defined{}", did_you_mean(nearest));
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
            r#"title
Q1 c b 0 qfats
         ^^^^^ unknown-model
R1 c b 1k
R2 b 0 1k
.model qfast npn
"#,
        );
        check(
            r#"title
R1 a 0 rmd 1k
       ^^^ unknown-model
R2 a 0 1k
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
Q1 c b 0 QFAST
R1 c b 1k
R2 b 0 1k
.model qfast npn
"#,
        );
        check(
            r#"title
*~ device Q1 gm=10m
Q1 c b 0 none
R1 c b 1k
R2 b 0 1k
"#,
        );
    }
}

//! `unknown-node-in-mark`: a mark names a node or part that is not there.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-node-in-mark"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a mark names a node or part that is not there",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a node, part or terminal named in a mark that the circuit does not have.

## Why it matters
The port, rail or device that was meant stays unmarked, so nothing certain is said of the block.

## Method and source
Names are looked up in the scope of the mark, by path below it.

## Limits
None.

## Example
```
*~ block amp in=gaet
```

## Fix
Correct the name.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownNodeInMark { name, nearest } = &issue.kind else {
            continue;
        };
        let message = format!("no node or part `{name}` is there{}", did_you_mean(nearest));
        let mut finding = RULE
            .finding(issue.span, message)
            .also_maybe(issue.other, "the block");
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
*~ block amp in=gaet
                ^^^^ unknown-node-in-mark
R1 gate 0 10
C1 gate 0 1p
"#,
        );
        check(
            r#"title
*~ device Q7 gm=1m
          ^^ unknown-node-in-mark
R1 gate 0 10
C1 gate 0 1p
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
*~ block amp in=GATE:75
R1 gate 0 1k
C1 gate 0 1p
"#,
        );
        check(
            r#"title
*~ block amp in=V1
V1 gate 0 0
R1 gate 0 10
"#,
        );
    }
}

//! `unknown-mark`: a mark that cannot be read.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-mark"),
    family: Family::Syntax,
    severity: Severity::Error,
    summary: "a mark that cannot be read",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a `*~` line with an unknown word or key, or a value of the wrong kind.

## Why it matters
The block is screened with the default instead of what was meant.

## Method and source
The marks and their keys are listed in the README.

## Limits
A line of signs only (`*~~~~`) is a divider and no mark.

## Example
```
*~ blok amp in=gate
```

## Fix
Write the word that was meant.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for error in &parse.mark_errors {
            out.push(RULE.finding(Span::new(*file, error.range), error.kind.to_string()));
        }
    }
    for issue in &context.elaborated.issues {
        let IssueKind::BadMark { message, nearest } = &issue.kind else {
            continue;
        };
        let message = format!("{message}{}", did_you_mean(nearest));
        let mut finding = RULE
            .finding(issue.span, message)
            .also_maybe(issue.other, "the device");
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
*~ blok amp in=a
   ^^^^ unknown-mark
R1 a 0 1k
R2 a 0 1k
"#,
        );
        check(
            r#"title
*~ block amp in=a bnad=1k..2k
                  ^^^^ unknown-mark
R1 a 0 1k
R2 a 0 1k
"#,
        );
        check(
            r#"title
*~ block amp in=a band=2k..1k
                       ^^^^^^ unknown-mark
R1 a 0 1k
R2 a 0 1k
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
*~ BLOCK amp IN=a BAND=1k..2k
R1 a 0 1k
R2 a 0 1k
"#,
        );
        check(
            r#"title
*~~~~~~~~~~
R1 a 0 1k
R2 a 0 1k
"#,
        );
    }
}

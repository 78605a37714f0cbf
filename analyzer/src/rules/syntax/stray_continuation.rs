//! `stray-continuation`: a `+` line that continues a card across other lines.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::SyntaxErrorKind;
use crate::text::Span;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("stray-continuation"),
    family: Family::Syntax,
    severity: Severity::Warning,
    summary: "a `+` line that continues a card across other lines",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a `+` line with blank lines, comments or marks between it and its card.

## Why it matters
Other programs may read the line differently, or drop it.

## Method and source
squeg continues the card before (common practice differs between programs).

## Limits
None.

## Example
```
R1 a 0
* note
+ 50
```

## Fix
Move the line up to its card.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for error in &parse.errors {
            if error.kind == SyntaxErrorKind::StrayContinuation {
                out.push(RULE.finding(Span::new(*file, error.range), error.kind.to_string()));
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
R1 a 0
* note
+ 50
^ stray-continuation
R2 a 0 1
"#,
        );
        check(
            r#"title
R1 a 0

+ 50
^ stray-continuation
R2 a 0 1
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
R1 a 0
+ 50
R2 a 0 1
"#,
        );
        check(
            r#"title
R1 a
+ 0
+ 50
R2 a 0 1
"#,
        );
    }
}

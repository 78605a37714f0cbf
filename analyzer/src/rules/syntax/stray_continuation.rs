//! `stray-continuation`: a `+` line that is parted from its card.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::SyntaxErrorKind;
use crate::text::Span;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("stray-continuation"),
    family: Family::Syntax,
    severity: Severity::Warning,
    summary: "a `+` line that blank lines, comments or marks part from its card",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a `+` line that continues a card across blank lines, comment lines or marks.

## Why it matters
The line is read as a part of the card before it. Other programs may drop it or refuse it, and a reader
easily takes it for part of something else.

## Method and source
A line that starts with `+` continues the card before it (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
Only the first `+` line behind the gap is told. A `+` line with no card before it at all is
`unreadable-card`.

## Example
```
R1 in gate

+ 4.7
```

## Fix
Move the line up to its card.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for error in &parse.errors {
            if error.kind == SyntaxErrorKind::StrayContinuation {
                let span = Span::new(*file, error.range);
                out.push(RULE.finding(span, error.kind.to_string()));
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
            "\
title
R1 a 0

+ 1k
^ stray-continuation
C1 a 0 1p
",
        );
        check(
            "\
title
R1 a 0 1k
C1 a
*~ rail a volts=5
  + 0
  ^ stray-continuation
+ 1p
",
        );
    }

    #[test]
    fn near_misses() {
        check("title\nR1 a 0\n+ 1k\nC1 a\n+ 0\n+ 1p\n");
        check("title\nR1 a 0 1k\n*~ block amp\n*~+ in=a\nC1 a 0 1p\n");
    }
}
